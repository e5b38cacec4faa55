"""The recipe screen: read it, steer it, type over it, step through others, keep it, write it down."""

from __future__ import annotations

from pathlib import Path

import pytest

from .conftest import started

Size = tuple[int, int]


async def test_everything_there_is_to_know_stands_on_the_screen(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        recipe, answer = driver.app.session.shown, driver.app.session.state.answer
        head = driver.page.head.text()
        assert recipe.status == "optimal"
        for said in ("least cost, proven", f"cost {recipe.cost_per_t:.2f} /t", "for 15000 kg", "law refutas",
                     "proven to"):
            assert said in head
        everything = head + "\n".join("".join(t for t, _ in line) for line in driver.page.notes.lines)
        assert f"guards cost {answer.guard_cost_per_t:.2f} /t" in everything
        assert f"largest batch today {answer.largest_batch_kg:.0f} kg" in everything
        for said in ("KV40, mm²/s", "VI", "flash point, °C", "binds:", "spread of the laws on these shares: KV40",
                     "left out: NOPRICE, its price is unknown", "leave the whole-number rules out",
                     "no test of its own within a year: HEAVY"):
            assert said in everything.replace("\n", " ") or said in " ".join(everything.split()), said
        assert "A calculated blend is not a certificate: the laboratory releases." in driver.text()


async def test_shares_add_up_in_percent_kg_and_litres(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        lines = driver.page.shares.text().splitlines()
        row = next(line for line in lines if line.startswith("LIGHT")).split()
        share = driver.app.session.shown.shares["LIGHT"]
        assert row[1] == f"{100 * share:.2f}"
        assert row[2] == f"{15000 * share:.0f}"
        assert row[3] == f"{15000 * share / 0.87:.0f}"
        assert "own 31 d" in driver.page.shares.text()
        assert "cert. 2 y !" in driver.page.shares.text()


async def test_ranges_stand_as_bars_with_their_numbers(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        low, high = driver.app.session.state.answer.ranges["LIGHT"]
        row = next(line for line in driver.page.shares.text().splitlines() if line.startswith("LIGHT"))
        assert f"{100 * low:.2f}–{100 * high:.2f}" in row
        assert "█" in row or "◆" in row


async def test_hold_leave_out_and_clear(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        best = driver.app.session.shown.cost_per_t
        await driver.share_on("HEAVY")
        await driver.press("h")
        await driver.type("10")
        assert driver.app.session.shown.shares["HEAVY"] == pytest.approx(0.10)
        assert driver.app.session.shown.cost_per_t > best
        assert "held by you: HEAVY 10.00 %" in "".join(t for line in driver.page.notes.lines for t, _ in line)
        assert next(r for r in driver.page.rows if r.stock.code == "HEAVY").mark == "held"
        await driver.share_on("CLEAN")
        await driver.press("x")
        assert "CLEAN" not in driver.app.session.shown.shares
        assert next(r for r in driver.page.rows if r.stock.code == "CLEAN").mark == "out"
        await driver.press("c")
        assert driver.app.session.shown.cost_per_t == pytest.approx(best)
        await driver.press("u")
        assert driver.status.startswith("undone: holds and what-ifs cleared")
        assert driver.app.session.shown.shares["HEAVY"] == pytest.approx(0.10)
        await driver.press("r", "u", "u", "u")
        assert driver.app.session.state.wishes.held == {}


async def test_a_hold_can_be_typed_in_kg_and_let_go(path: Path) -> None:
    async with started(path, screen="3") as driver:
        await driver.share_on("HEAVY")
        await driver.press("h")
        await driver.type("1.5 t")
        assert driver.app.session.shown.charges_kg["HEAVY"] == pytest.approx(1500.0)
        await driver.share_on("HEAVY")
        await driver.press("h")
        assert driver.app.session.state.wishes.held == {}


@pytest.mark.parametrize("typed", ["120", "ten", "3 mm2/s"])
async def test_a_share_that_cannot_be_is_refused_and_stays_on_the_line(path: Path, typed: str) -> None:
    async with started(path, screen="3") as driver:
        await driver.press("enter")
        await driver.type(typed)
        assert driver.page.status.kind == "refused"
        assert driver.page.edit.typing.text == typed
        assert driver.app.session.state.wishes.typed is None


async def test_shares_by_hand_and_back_to_the_best(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        kv40 = driver.app.session.shown.predicted["kv40"]
        await driver.share_on("LIGHT")
        await driver.press("enter")
        await driver.type("20")
        shown = driver.app.session.shown
        assert shown.status == "by hand"
        assert shown.shares["LIGHT"] == 0.2
        assert shown.predicted["kv40"] > kv40
        assert "! by hand, shares sum to" in driver.page.head.text()
        await driver.press("k")
        assert "press f to fill up" in driver.status
        await driver.share_on("BRIGHT")
        await driver.press("f")
        assert sum(driver.app.session.shown.shares.values()) == pytest.approx(1.0)
        assert "by hand, " in driver.page.head.text()
        assert "MISSED" in driver.page.notes.text()
        await driver.press("b")
        assert driver.app.session.shown.status == "optimal"


async def test_step_through_the_blends_take_one_and_keep_it(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        blends = driver.app.session.state.answer.blends
        assert len(blends) >= 2
        await driver.press("n", "n")
        assert f"feasible blend 2 of {len(blends)}" in driver.page.head.text()
        assert driver.app.session.shown is blends[1]
        await driver.press("p", "p")
        assert f"feasible blend {len(blends)} of {len(blends)}" in driver.page.head.text()
        await driver.press("t")
        assert driver.app.session.state.wishes.typed == blends[-1].shares
        await driver.press("k")
        await driver.type("night shift")
        trial = driver.plant.trials("H46")[0]
        assert trial.name == "night shift"
        assert trial.shares == pytest.approx(dict(blends[-1].shares))
        assert driver.app.session.unkept() == []
        await driver.press("u")
        assert driver.plant.trials("H46") == []


async def test_batch_and_law(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        await driver.press("m")
        await driver.type("2 t")
        assert driver.app.session.shown.batch_kg == 2000.0
        assert "2000 kg" in driver.page.title_line.text()
        await driver.press("L")
        assert driver.app.session.shown.law == "walther-mass"
        assert "law walther-mass" in driver.page.head.text()
        await driver.press("u", "u")
        assert (driver.app.session.shown.law, driver.app.session.shown.batch_kg) == ("refutas", 15000.0)


async def test_when_nothing_is_feasible_the_nearest_blend_and_its_misses(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        await driver.press("]", "]")
        assert driver.app.session.product == "NEVER"
        assert "! no blend meets it" in driver.page.head.text()
        assert "the nearest blend misses VI" in driver.page.head.text()
        assert "short of 150" in driver.page.head.text()
        assert "MISSED" in driver.page.notes.text()
        said = " ".join("".join(t for t, _ in line) for line in driver.page.notes.lines)
        assert "this is the nearest blend, not a recipe" in " ".join(said.split())


async def test_the_sheet_is_written_once_and_never_over_another(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        await driver.press("w")
        await driver.type("", end="enter")
        sheet = path.parent / "H46-2026-06-01.txt"
        assert str(sheet) in driver.status
        text = sheet.read_text()
        assert "LIGHT" in text
        assert "the laboratory releases" in text
        sheet.write_text("mine")
        await driver.press("w", "enter")
        assert "is there already" in driver.status
        assert sheet.read_text() == "mine"
        driver.send("ctrl+u")
        await driver.type("other.txt")
        assert (path.parent / "other.txt").read_text() == text


async def test_remarks_are_reached_with_tab(path: Path) -> None:
    async with started(path, screen="3") as driver:
        await driver.press("tab", "end")
        assert driver.page.notes.top > 0
        assert "↓" not in driver.page.notes.text()
        await driver.press("tab", "down")
        assert driver.page.shares.row == 1


async def test_wishes_wait_while_another_product_is_looked_at(path: Path) -> None:
    async with started(path, screen="3") as driver:
        await driver.press("enter")
        await driver.type("33")
        await driver.press("]")
        assert driver.app.session.state.wishes.typed is None
        await driver.press("[")
        assert driver.app.session.shown.status == "by hand"
        await driver.press("q")
        assert "kept in no trial" in driver.status
        assert driver.app.is_running
        await driver.press("escape")


async def test_a_wish_that_contradicts_itself_is_told_and_can_be_undone(path: Path) -> None:
    async with started(path, screen="3") as driver:
        for code in ("LIGHT", "HEAVY"):
            await driver.share_on(code)
            await driver.press("h")
            await driver.type("80")
        assert "! " in driver.page.head.text()
        await driver.press("u")
        assert driver.app.session.state.wishes.held == {"LIGHT": 0.8}
