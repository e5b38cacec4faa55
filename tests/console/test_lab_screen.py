"""The lab screen: measured blends against the law, what is doubtful, drift, lessons taken and withdrawn by keys."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from blendtui.desk import lab
from blendtui.desk.plant import open_plant
from blendtui.store import edits, lab_edits
from blendtui.store.plant import Plant
from solver import laws
from solver.stocks import StockTable
from solver.target import Effective

from .conftest import started

Size = tuple[int, int]


def put(plant: Plant, name: str, shares: dict[str, float], off: float, on: str, product: str = "G220") -> None:
    """A blend that measures what the law says, but for `off` %."""
    table = StockTable(plant.stocks())
    x = [shares.get(code, 0.0) for code in table.codes]
    kv40, kv100 = (1.0 + off / 100.0) * laws.predict("refutas", table, x)
    lab.record(plant, name, product, shares, {"kv40": repr(float(kv40)), "kv100": repr(float(kv100))}, on=on)


@pytest.fixture
def recorded(path: Path) -> Path:
    """Six blends of HEAVY and BRIGHT, all about 2 % heavier than the law says, and one typed in SUS."""
    with open_plant(path, who="ben") as plant:
        for n, off in enumerate((1.9, 2.1, 2.0, 2.2, 1.8, 2.0), 1):
            put(plant, f"B{n}", {"HEAVY": 0.2 + n / 10, "BRIGHT": 0.8 - n / 10}, off, f"2026-05-0{n}")
        lab.record(plant, "SUS", "H46", {"LIGHT": 0.5, "HEAVY": 0.5}, {"kv40": "240"}, on="2026-05-09")
    return path


def row_of(driver, name: str) -> list[str]:
    return next(line for line in driver.page.blends.text().splitlines() if f" {name} " in line[:12]).split()


async def test_blends_stand_against_the_law(recorded: Path, size: Size) -> None:
    async with started(recorded, size, screen="8") as driver:
        assert row_of(driver, "B1")[0] == "B1"
        assert row_of(driver, "B1")[3] == "+1.90"
        assert row_of(driver, "B2")[6] == "+2.10"
        sus = row_of(driver, "SUS")
        assert sus[:3] == ["?", "SUS", "240.0"]  # told by sign …
        assert "questioned" in sus  # … and by word
        assert driver.page.alarm.text().startswith("law refutas; ! drift: G220 KV40 +")
        await driver.press("enter")
        assert driver.status.startswith("G220 kv40: outside 2 σ since B1, +")
        assert "steadily off by +2 %" in driver.status
        await driver.press("ctrl+end", "enter")
        assert driver.status.startswith("SUS: KV at 40 °C 240 mm²/s where refutas says 52")
        assert "it looks like SUS at 100 °F typed as mm²/s" in driver.status


async def test_an_empty_record_says_what_to_do(path: Path, size: Size) -> None:
    async with started(path, size, screen="8") as driver:
        assert "no measured blend yet; a puts one on record" in driver.text()
        assert "no lesson is in use; o shows what the blends could teach" in driver.text()
        for key in ("y", "d", "t", "w"):
            await driver.press(key)
            assert "the cursor is on no" in driver.page.status.message
        await driver.press("o", "enter")
        assert "the blends teach nothing under this law yet" in driver.text()


async def test_a_blend_is_confirmed_dropped_and_brought_back(recorded: Path, size: Size) -> None:
    async with started(recorded, size, screen="8") as driver:
        await driver.press("ctrl+end", "y")
        assert driver.status == "measured blend SUS confirmed; u takes it back"
        assert "confirmed" in row_of(driver, "SUS")
        await driver.press("d")
        assert driver.status == "measured blend SUS dropped; u takes it back"
        assert [b.name for b in driver.plant.measured()] == [f"B{n}" for n in range(1, 7)]
        await driver.press("u", "u")
        assert "questioned" in row_of(driver, "SUS")
        assert [b.confirmed for b in driver.plant.measured()][-1] is False


async def test_a_lesson_is_offered_taken_withdrawn_and_undone(recorded: Path, size: Size) -> None:
    async with started(recorded, size, screen="8") as driver:
        await driver.press("o")
        assert "offer HEAVY with BRIGHT" in driver.page.taught.text()
        await driver.press("enter")
        assert "left one out: none 1.9" in driver.status
        await driver.press("t")
        assert driver.status == "L1 taken: HEAVY with BRIGHT under refutas; u takes it back"
        first, second = driver.page.taught.text().splitlines()[1:3]
        assert first.split()[:6] == ["L1", "HEAVY", "with", "BRIGHT", "in", "use"]
        assert "replaces L1" in second
        assert driver.page.alarm.text().startswith("law refutas with L1; no drift alarm")
        assert abs(float(row_of(driver, "B3")[3])) < 0.4
        await driver.press("w")
        await driver.type("bright stock of another source")
        assert driver.status == "L1 withdrawn: HEAVY with BRIGHT under refutas; u takes it back"
        assert driver.plant.lessons(include_withdrawn=True)[0].reason == "bright stock of another source"
        assert "L1" not in driver.page.taught.text()
        await driver.press("u")
        assert [x.version for x in driver.plant.lessons()] == ["L1"]
        await driver.press("u")
        assert driver.plant.lessons(include_withdrawn=True) == []
        assert row_of(driver, "B1")[3] == "+1.90"


async def test_a_provisional_lesson_is_marked(path: Path, size: Size) -> None:
    with open_plant(path, who="ben") as plant:
        put(plant, "B1", {"HEAVY": 0.5, "BRIGHT": 0.5}, 3.0, "2026-05-01")
    async with started(path, size, screen="8") as driver:
        await driver.press("o", "t")
        assert driver.status.startswith("L1 taken: HEAVY with BRIGHT under refutas, provisional: measure more blends")
        assert driver.page.taught.text().splitlines()[1].split()[:6] == ["!", "L1", "HEAVY", "with", "BRIGHT",
                                                                         "provisional"]


async def test_a_blend_is_put_on_record_by_keys(path: Path, size: Size) -> None:
    async with started(path, size, screen="8") as driver:
        shown = driver.app.session.shown.shares
        await driver.press("a")
        assert "1 of 6: name of the blend" in driver.text()
        await driver.type("first")
        await driver.type("NONE")
        assert driver.status == "no product 'NONE'; the plant has G220, H46, NEVER; empty: none"
        await driver.press("ctrl+u")
        await driver.type("H46")
        assert driver.page.edit.typing.text == lab.typed_shares(shown)
        await driver.press("enter")  # the shares of the recipe, as they are offered
        await driver.type("45.2x")
        assert "the unit 'x' does not belong here" in driver.status
        await driver.press("ctrl+u")
        await driver.type("45.2")
        await driver.type("6.7")
        await driver.type("2026-05-20")
        assert driver.status == "first recorded"
        assert driver.page.blend.name == "first"
        (blend,) = driver.plant.measured()
        assert (blend.product, blend.values, blend.measured_on) == ("H46", {"kv40": 45.2, "kv100": 6.7}, "2026-05-20")
        assert sum(p.share for p in blend.parts) == pytest.approx(1.0, abs=1e-9)
        assert {p.stock: p.share for p in blend.parts} == pytest.approx(
            {code: share for code, share in shown.items() if share > 0.0}, abs=2e-4)
        await driver.press("u")
        assert driver.plant.measured() == []


async def test_the_cursor_goes_to_what_was_recorded_and_stays_with_its_blend(recorded: Path) -> None:
    async with started(recorded, screen="8") as driver:
        await driver.press("down", "down", "a")
        for text in ("last", "", "HEAVY 50, BRIGHT 50", "240", "", "2026-05-20"):
            await driver.press("ctrl+u")
            await driver.type(text)
        assert driver.page.blend.name == "last"
        assert driver.plant.measured()[-1].product == ""
        await driver.press("up", "up")
        assert driver.page.blend.name == "B6"
        driver.plant.change(lab_edits.dropped_measured(driver.plant, "B1"), "B1 dropped")
        driver.app._poll()
        await driver.settle()
        assert driver.page.blend.name == "B6"


async def test_a_name_that_is_taken_comes_back_to_the_line(recorded: Path) -> None:
    async with started(recorded, screen="8") as driver:
        await driver.press("a")
        await driver.type("B3")
        assert driver.status == "there is a measured blend 'B3' already; record this one under another name"
        assert driver.page.edit.active
        await driver.press("escape")
        assert len(driver.plant.measured()) == 7


async def test_another_law_is_read_when_the_recipe_has_it(recorded: Path, size: Size) -> None:
    async with started(recorded, size, screen="8") as driver:
        before = row_of(driver, "B1")
        await driver.press("3", "L", "L", "8")
        law = driver.app.session.state.wishes.law
        assert law not in (None, "refutas")
        assert driver.page.alarm.text().startswith(f"law {law}; ")
        assert row_of(driver, "B1")[1] == before[1]
        assert row_of(driver, "B1")[2] != before[2]


async def test_a_blending_value_is_offered_and_taken(path: Path, size: Size) -> None:
    with open_plant(path, who="ben") as plant:
        copied = plant.stock("BRIGHT")
        plant.change(edits.new_stock(plant, replace(copied, code="VM", kind="vi_improver")), "VM added")
        for n, share in enumerate((0.05, 0.08), 1):
            x = {"HEAVY": 1.0 - share, "VM": share}
            table = StockTable(plant.stock(code) for code in x)
            taught = (Effective("VM", "refutas", {40.0: 55.0, 100.0: 61.0}),)
            kv = [repr(laws.viscosity_gauge("refutas", table, t, taught).read(list(x.values()))) for t in (40.0, 100.0)]
            lab.record(plant, f"V{n}", "", x, dict(zip(("kv40", "kv100"), kv, strict=True)), on="2026-05-01")
    async with started(path, size, screen="8") as driver:
        await driver.press("o", "ctrl+end")
        assert "VM blending value" in driver.page.edit.text()
        assert "40 °C number 55.0; 100 °C number 61.0" in driver.page.edit.text()
        await driver.press("enter")
        assert "blends with number 55.0 at 40 °C and 61.0 at 100 °C (by its viscosity on record: " in driver.status
        assert "holds from 4.50 to 8.80 % of the blend" in driver.status
        await driver.press("t")
        assert driver.status.startswith("L1 taken: VM blending value under refutas, provisional")
        assert abs(float(row_of(driver, "V1")[3])) < 0.005
        assert driver.plant.stock("VM").blend_kv40 is None


async def test_what_to_weigh_on_the_bench_is_shown_and_written(path: Path, size: Size) -> None:
    async with started(path, size, screen="8") as driver:
        product = driver.app.session.product
        await driver.press("p")
        shown = driver.app.screen.page_text.text()
        assert shown.splitlines()[0].startswith(f"{product}, ")
        assert "BENCH BLEND, 500 g: measure KV40 and KV100 on one sample" in shown
        assert max(map(len, shown.splitlines())) <= size[0]
        assert "w write to a file" in driver.app.screen.keys.text()
        await driver.press("down", "escape")
        assert driver.app.screen is driver.page
        assert not driver.page.edit.active
        await driver.press("p", "w")
        assert "write the plan to" in driver.text()
        name = Path(driver.page.edit.typing.text)
        assert name.name.startswith(f"{product}-bench-")
        await driver.press("enter")
        assert driver.status == f"plan written to {name}"
        assert "BENCH BLEND" in name.read_text(encoding="ascii")
        await driver.press("p", "w", "enter")
        assert "is there already; choose another name" in driver.page.status.message


async def test_without_a_recipe_there_is_nothing_to_weigh(path: Path) -> None:
    async with started(path, screen="8") as driver:
        await driver.press("2", "ctrl+end", "8")
        driver.app.session.state = replace(driver.app.session.state, answer=None)
        await driver.press("p")
        assert driver.app.screen is driver.page
        assert driver.page.status.message == "there is no recipe to plan a bench blend for yet"
