"""Charges on the floor that are not as planned: a temperature, another oil, a lot put right, a wrong key, a race."""

from __future__ import annotations

from pathlib import Path

import pytest

from blendtui.desk import charging
from blendtui.desk.plant import open_plant
from blendtui.store.batch_records import DONE, OPEN, PLANNED, RELEASED
from solver.volume import litres

from .conftest import started
from .floor_case import HEAVY, LIGHT, with_batch
from .test_floor_screen import charged, on_property, sampled, sampled_more, sure

Size = tuple[int, int]


@pytest.fixture
def path(path: Path) -> Path:
    """The small plant with a kettle and a planned batch."""
    with_batch(path)
    return path


async def trimmed(driver) -> None:  # type: ignore[no-untyped-def]
    """Charge, measure a batch that is too thin, decide on a trim and show it."""
    await charged(driver)
    await sampled(driver, kv40="40.0")
    await sure(driver)
    await sampled_more(driver, kv100="6.25", flash="222")
    await driver.press("d")
    await driver.type("trim")
    await driver.press("t")


async def test_the_tanks_temperature_is_typed_with_the_charge(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        volume = litres(LIGHT, 870.0, 48.0)
        await driver.press("enter")
        await driver.type(f"{volume:.3f} L at 48 °C")
        done = driver.plant.batch("B-0001").charges[0]
        assert done.actual_kg == pytest.approx(LIGHT, abs=0.01)
        assert done.celsius == 48.0
        await driver.press("enter")
        await driver.type("5.78 t at warm")
        assert "'warm' is not a number" in driver.status
        assert driver.plant.batch("B-0001").charges[1].state == PLANNED
        assert "5.78 t at warm" in driver.page.edit.text()


async def test_another_oil_is_charged_with_its_reason_and_asked_about(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("o")
        await driver.type("nothing")
        assert "no stock 'nothing'" in driver.status
        driver.send("ctrl+u")
        await driver.type("clean")
        for text in ("8950 kg at 40", "", "pump of tank 1 is out"):
            await driver.type(text)
        assert "CLEAN in place of LIGHT" in driver.status
        assert "y: it was so" in driver.status
        assert driver.plant.batch("B-0001").charges[0].state == PLANNED
        await driver.press("y")
        done = driver.plant.batch("B-0001").charges[0]
        assert (done.stock, done.actual_kg, done.celsius, done.state) == ("CLEAN", LIGHT, 40.0, DONE)
        assert "pump of tank 1 is out" in done.why
        assert driver.plant.stock("CLEAN").on_hand_kg == 40000.0 - LIGHT
        assert driver.plant.stock("LIGHT").on_hand_kg == 60000.0


async def test_what_was_typed_of_another_oil_comes_back_where_it_is_refused(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await driver.press("o")
        for text in ("CLEAN", "-5", "", "pump is out"):
            await driver.type(text)
        assert driver.page.edit.active
        assert "CLEAN" in driver.page.edit.text()
        assert driver.plant.batch("B-0001").charges[0].state == PLANNED
        await driver.type("", end="enter")
        assert "-5" in driver.page.edit.text()


async def test_the_lot_of_a_charge_that_is_made_can_be_put_right(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await charged(driver)
        await driver.press("ctrl+home", "l")
        assert "1 LIGHT lot" in driver.page.edit.text()
        await driver.type("L-99")
        await driver.type("read off the wrong board")
        await sure(driver)
        done = driver.plant.batch("B-0001").charges[0]
        assert (done.actual_lot, done.actual_kg) == ("L-99", LIGHT)
        assert done.checked_by == ""
        assert "read off the wrong board" in done.why


async def test_what_is_due_before_a_release_names_its_key(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        from blendtui.store.batch_edits import tank_parts

        plant.change([*tank_parts("LIGHT", {"L-17": 1.0}, {})], "no lot of LIGHT is known")
    async with started(path, screen="0") as driver:
        await driver.press("enter")
        await driver.type("9200")
        assert "its reason is due before a release; on its line e with the same kg asks for it" in driver.status
        await driver.press("up", "e", "enter")
        await driver.type("valve stuck")
        assert "its reason is recorded" in driver.status
        await driver.press("L")
        lines = ["".join(text for text, _ in line) for line in driver.app.screen.page_text.lines]
        text = " ".join(" ".join(lines).split())
        assert "line 1 (LIGHT): on its line l on the screen Floor types it" in text
        assert "blendtui" not in text


async def test_a_number_typed_at_a_charge_that_is_made_does_nothing_at_all(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await charged(driver)
        await driver.press("ctrl+home")
        before = driver.plant.revision()
        await driver.press("enter")
        assert "charged by anna already; e corrects it" in driver.page.status.message
        driver.send(*"8.95 tu", "enter")
        await driver.settle()
        assert driver.app.current_mode == "floor"
        assert driver.app.screen is driver.page
        assert not driver.page.edit.active
        assert "nothing was" in driver.page.status.message
        assert driver.plant.revision() == before
        await driver.press("enter", "e")  # a key that the refusal names is carried out at once
        assert "truly charged" in driver.page.edit.text()


async def test_the_name_that_records_stands_in_the_heading(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        assert driver.page.head.text().splitlines()[0].rstrip().endswith("as anna")
        await driver.press("b")
        await driver.type("olga")
        assert driver.page.head.text().splitlines()[0].rstrip().endswith("as olga")
        await driver.press("9")
        assert driver.page.ordering.text().rstrip().endswith("as olga")
        if size[0] >= 110:
            await driver.press("1")
            assert driver.page.title_line.text().rstrip().endswith("as olga")
        for line in driver.text().splitlines():
            assert len(line) <= size[0]


async def test_who_checked_last_stands_on_the_line_again(path: Path) -> None:
    async with started(path, screen="0") as driver:
        for kg in (LIGHT, HEAVY):
            await driver.press("enter")
            await driver.type(f"{kg:g}")
        await driver.press("ctrl+home", "c")
        await driver.type("ben")
        await driver.press("down", "c", "enter")
        assert [c.checked_by for c in driver.plant.batch("B-0001").charges[:2]] == ["ben", "ben"]


async def test_a_trim_by_least_mass_and_at_a_chance_are_a_key_away_and_taken_as_shown(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await trimmed(driver)
        await driver.press("m")
        shown = " ".join(driver.app.screen.page_text.text().split())
        assert "trim 1 (least mass), from sample 1" in shown
        assert "m least cost" in driver.app.screen.keys.text()
        await driver.press("c")
        await driver.type("20")
        assert "choose 50 to 99.9 %" in driver.status
        driver.send("ctrl+u")
        await driver.type("97.5")
        text = driver.app.screen.page_text.text()
        assert "least mass, each limit with 97.5 %" in " ".join(text.split())
        await driver.press("y")
        await sure(driver)
        added = [c for c in driver.plant.batch("B-0001").charges if c.round == 1]
        assert added
        for charge in added:
            row = next(x for x in text.splitlines() if x.split()[:2] == [str(charge.line), charge.stock])
            assert float(row.split()[2]) == pytest.approx(charge.plan_kg)
        # The cursor goes to what is to be charged next.
        assert not driver.page.state.testing
        assert driver.page.charge.line == added[0].line


async def test_what_must_be_drawn_off_is_said_with_the_key_and_not_the_command(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        from blendtui.desk import vessels

        vessels.set_cell(plant, "K1", "capacity_l", "19700")
    async with started(path, screen="0") as driver:
        await trimmed(driver)
        lines = ["".join(text for text, _ in line) for line in driver.app.screen.page_text.lines]
        text = " ".join(" ".join(lines).split())
        assert "p on the screen Floor" in text
        assert "blendtui" not in text


async def test_packing_that_is_refused_comes_back_to_the_line(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await charged(driver)
        await driver.press("p")
        await driver.type("packed")
        driver.send("ctrl+u")
        await driver.type("211.13 t")
        assert driver.status.startswith("B-0001 is open")
        assert "211.13 t" in driver.page.edit.text()
        assert not driver.plant.batch("B-0001").outcomes


async def test_a_release_does_not_pass_over_a_correction_of_another_person(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="46.6", kv100="6.88", flash="222")
        await driver.press("d", "enter", "L")
        await driver.type("carla")
        assert "release B-0001 under the name of carla" in driver.status
        charging.correct(driver.plant, "B-0001", 2, HEAVY + 5.0, why="misread", by="ben")
        await driver.press("y")
        assert driver.plant.batch("B-0001").head.state == OPEN != RELEASED
        assert driver.app.said[-1][0] == "refused"
        assert "line 2" in driver.status


async def test_a_question_stays_in_sight_while_another_changes_the_plant(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("enter")
        await driver.type("89500")
        charging.charge(driver.plant, "B-0001", 2, HEAVY, by="ben")
        driver.app._poll()
        await driver.settle()
        assert "10 times the planned 8950 kg" in driver.page.status.message
        assert any("line 2: 5780 kg of HEAVY charged" in message for _, message in driver.app.said)
        await driver.press("escape")
        assert driver.page.status.message == "dropped; nothing was changed"
        assert driver.plant.batch("B-0001").charges[0].state == PLANNED


async def test_an_order_that_is_taken_back_leaves_the_floor_in_words(path: Path, size: Size) -> None:
    from blendtui.desk import orders

    with open_plant(path, who="anna") as plant:
        orders.take(plant, orders.Order("H46", 8000.0, "K1", name="B-7"), sure=True)
    async with started(path, size, screen="0") as driver:
        assert driver.page.head.text().startswith("B-7: ")
        driver.app.plant.undo()
        driver.app._poll()
        await driver.settle()
        assert driver.page.head.text().startswith("B-0001: ")
        assert driver.app.said[-1][0] != "refused"
        assert driver.app.session.batch == "B-0001"


async def test_a_scale_is_not_asked_for_what_it_cannot_show(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        from blendtui.desk import vessels

        vessels.set_cell(plant, "K1", "division_kg", "20")
        charging.charge(plant, "B-0001", 1, LIGHT + 0.3, sure=True)
    async with started(path, screen="0") as driver:
        assert "until the scale shows 14880 kg" in driver.page.head.text()


async def test_a_property_is_named_once_in_the_line_below(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="46.6")
        await on_property(driver, "kv40")
        assert driver.page.edit.text().startswith("KV40: 46.60 mm²/s, ")
        assert "next: Enter in the laboratory: still without a result" in driver.page.head.text()
