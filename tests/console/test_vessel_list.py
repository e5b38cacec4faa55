"""The vessels, reached from the batches: their cells are typed over, one is added, one retired; orders follow them."""

from __future__ import annotations

from pathlib import Path

import pytest

from blendtui.desk import charging, stocks, vessels
from blendtui.desk.plant import open_plant

from .conftest import started
from .floor_case import LIGHT, planned, with_vessel
from .test_batches_screen import ORDER, answer, order

Size = tuple[int, int]


@pytest.fixture
def path(path: Path) -> Path:
    """The small plant with a kettle."""
    with_vessel(path)
    return path


async def test_a_cell_of_a_vessel_is_typed_over_and_taken_back(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        await driver.press("v")
        assert driver.page.vessels.display is True
        assert driver.page.grid.display is False
        row = driver.page.vessels.text().splitlines()[2]
        assert row.split()[:6] == ["K1", "24000", "4000", "5", "150", "HEAVY"]
        await driver.press("enter")
        assert "the name of a vessel stays" in driver.page.status.message
        await driver.press("right", "enter")
        assert "K1 capacity (L" in driver.page.edit.text()
        await driver.type("24000 kg")
        assert "is a mass; a vessel's capacity is in litres" in driver.status
        driver.send("ctrl+u")
        await driver.type("22 m3")
        assert vessels.vessel(driver.plant, "K1").capacity_l == 22000.0
        assert "22000" in driver.page.vessels.text()
        await driver.press("u")
        assert "24000" in driver.page.vessels.text()
        for line in driver.text().splitlines():
            assert len(line) <= size[0]


async def test_a_vessel_is_added_and_another_taken_out_of_use(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        await driver.press("v", "a")
        await driver.type("K2")
        assert driver.page.vessel_row.vessel.vessel == "K2"
        await driver.press("enter")
        await driver.type("12000")
        assert vessels.vessel(driver.plant, "K2").capacity_l == 12000.0
        await driver.press("d")
        await driver.type("inspection")
        assert [v.vessel for v in driver.plant.vessels()] == ["K1"]
        assert [row.vessel.vessel for row in driver.page.vessel_rows] == ["K1"]
        await driver.press("escape")
        assert driver.page.grid.display is True
        assert driver.page.vessels.display is False


async def test_no_key_acts_on_a_batch_that_is_out_of_sight(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        planned(plant)
    async with started(path, screen="9") as driver:
        await driver.press("v")
        before = driver.plant.revision()
        for key in ("n", "w", "/"):
            await driver.press(key)
            assert driver.status or driver.page.status.message == "v goes back to the batches first"
            assert not driver.page.edit.active
        assert driver.plant.revision() == before
        await driver.press("v", "enter")
        assert driver.app.current_mode == "floor"


async def test_the_heel_of_another_vessel_is_not_carried_into_an_order(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        vessels.add_vessel(plant, "K2")
        vessels.set_cells(plant, "K2", {"capacity_l": "24000", "heel_kg": "40", "heel_stock": "LIGHT"})
    async with started(path, screen="9") as driver:
        await order(driver, *ORDER)
        await driver.press("escape", "a", "enter")
        await answer(driver, "K2")
        for text in ("", "", "", "55", "45"):
            await answer(driver, text)
        assert driver.page.edit.text().rstrip().endswith("40")
        await driver.press("enter")
        assert driver.page.edit.text().rstrip().endswith("LIGHT")
        await driver.press("escape", "a", "enter", "enter")  # the same vessel again: what was typed stands there
        for _ in range(5):
            await driver.press("enter")
        assert driver.page.edit.text().rstrip().endswith("40")


async def test_another_heel_than_the_book_has_is_said_before_all_else(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        await order(driver, "15 t", "K1", "", "", "", "60", "45", "0", "", "")
        shown = driver.app.screen.page_text.text()
        assert shown.startswith("! by the book K1 holds 150 kg of HEAVY; this order says 0 kg")
        await driver.press("escape")
        await order(driver, *ORDER)
        assert "by the book" not in driver.app.screen.page_text.text()


async def test_the_product_that_an_order_is_of_is_in_sight_and_follows_its_keys(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        assert "new order of H46" in driver.page.ordering.text()
        await driver.press("]")
        assert "new order of G220" in driver.page.ordering.text()


async def test_a_batch_is_worked_out_anew_before_its_first_charge(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        await order(driver, *ORDER)
        await driver.press("y")
        first = driver.plant.batch("B-0001").charges
        stocks.edit_cell(driver.plant, "HEAVY", "kv40", "104", confirmed=True)
        await driver.press("n")
        assert "its charges on today's tanks" in driver.app.screen.head.text()
        assert driver.plant.batch("B-0001").charges == first
        await driver.press("y")
        assert "why B-0001 is designed anew" in driver.page.edit.text()
        await driver.type("HEAVY was tested")
        anew = driver.plant.batch("B-0001").charges
        assert "planned anew" in driver.status
        assert [c.plan_kg for c in anew] != [c.plan_kg for c in first]
        charging.charge(driver.plant, "B-0001", anew[0].line, anew[0].plan_kg, sure=True)
        driver.app._poll()
        await driver.settle()
        await driver.press("n")
        assert "R on the screen Floor, then y works out those to come" in driver.status
        assert "blendtui" not in driver.status


async def test_undo_of_an_order_says_so_and_no_missing_batch_is_refused(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        await order(driver, *ORDER)
        await driver.press("y", "u")
        assert driver.status.startswith("undone: B-0001 ordered")
        assert driver.plant.batches() == []
        await driver.press("0")
        assert "no batch yet" in driver.page.charges.text()
        assert driver.app.said[-1][0] != "refused"


async def test_a_dip_says_how_far_it_is_off_before_the_book_is_set(path: Path) -> None:
    async with started(path) as driver:
        await driver.cursor_on("LIGHT")
        await driver.press("p")
        await answer(driver, "5.9 t")
        assert "-54100 kg against the book" in driver.page.edit.text()
        await answer(driver, "yes")
        await driver.type("gauge read")
        assert "0.098 times the book's 60000 kg; has the point slipped?" in driver.status
        await driver.press("escape")
        assert driver.plant.stock("LIGHT").on_hand_kg == 60000.0
        await driver.press("p")
        await answer(driver, f"{LIGHT:g}")
        await answer(driver, "no")
        assert driver.plant.stock("LIGHT").on_hand_kg == 60000.0
