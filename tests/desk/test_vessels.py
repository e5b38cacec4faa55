"""Vessels: their cells as typed, what cannot be true of one, and going out of use."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import datetime
from pathlib import Path

import pytest

from blendtui.desk import orders, vessels
from blendtui.desk.errors import DeskError
from blendtui.desk.orders import Order
from blendtui.desk.plant import export_plant, open_plant
from blendtui.store.plant import Plant
from solver.errors import SolverError
from tests.desk.order_plant import order_plant


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with open_plant(order_plant(tmp_path / "c"), who="anna") as opened:
        yield opened


@pytest.mark.parametrize(("cell", "typed", "value"), [
    ("capacity_l", "24000", 24000.0), ("capacity_l", "24 m3", 24000.0), ("capacity_l", "2000 US gal", 7570.823568),
    ("least_fill_l", "5000 L", 5000.0), ("division_kg", "10 kg", 10.0), ("heel_kg", "0.2 t", 200.0),
    ("heel_stock", "G320", "G320"), ("flash_margin_c", "35", 35.0), ("flash_margin_c", "54 F", 30.0),
    ("flash_margin_on", "2026-02-01", "2026-02-01"), ("least_fill_l", "", None), ("heel_stock", "", "")])
def test_a_cell_is_typed_with_its_unit(plant: Plant, cell: str, typed: str, value: object) -> None:
    vessels.set_cell(plant, "k1", cell, typed)
    found = getattr(vessels.vessel(plant, "K1"), cell)
    assert found == (pytest.approx(value) if isinstance(value, float) else value)


def test_a_margin_gets_the_day_on_which_it_was_typed(plant: Plant) -> None:
    said = vessels.set_cell(plant, "K2", "flash_margin_c", "40")
    today = datetime.now().date().isoformat()
    assert vessels.vessel(plant, "K2").flash_margin_on == today
    assert said.message == f"K2 margin to flash empty → 40 °C, margin typed on empty → {today}"
    vessels.set_cell(plant, "K2", "flash_margin_c", "")
    assert vessels.vessel(plant, "K2").flash_margin_on == ""
    plant.undo()
    assert vessels.vessel(plant, "K2").flash_margin_c == 40.0


@pytest.mark.parametrize(("cell", "typed", "words"), [
    ("capacity_l", "24 t", "is a mass; a vessel's capacity is in litres"),
    ("capacity_l", "-5", "is not above 0"), ("capacity_l", "50", "least fill of 4,000 L is above the capacity"),
    ("heel_kg", "20 t", "'K1' is smaller than its heel"), ("heel_kg", "-1", "below 0"),
    ("division_kg", "0", "is not above 0"), ("division_kg", "ten", "is not a number"),
    ("heel_stock", "NOSUCH", "no stock and no batch"), ("flash_margin_on", "soon", "is not a date"),
    ("flash_margin_on", "", "the margin to the flash point has no date"), ("flash_margin_c", "5000", "is above 300"),
    ("colour", "red", "a vessel has no 'colour'"),
    ("charge_order", "light, colour", "'colour' is no stock, oil or kind")])
def test_what_cannot_be_is_refused_and_nothing_is_saved(plant: Plant, cell: str, typed: str, words: str) -> None:
    before, entry = vessels.vessel(plant, "K1"), plant.revision()
    with pytest.raises((DeskError, SolverError)) as error:
        vessels.set_cell(plant, "K1", cell, typed)
    assert words in str(error.value)
    assert "\n" not in str(error.value)
    assert (vessels.vessel(plant, "K1"), plant.revision()) == (before, entry)


def test_several_cells_are_one_step_all_or_none(plant: Plant) -> None:
    entry = plant.revision()
    vessels.set_cells(plant, "K3", {"least_fill_l": "3000", "capacity_l": "9000", "charge_order": "heavy, light"})
    assert plant.revision() == entry + 1
    assert vessels.charge_order(plant, "K3") == ("heavy", "light")
    with pytest.raises(DeskError, match="is above the capacity"):
        vessels.set_cells(plant, "K3", {"division_kg": "5", "least_fill_l": "9500"})
    assert vessels.vessel(plant, "K3").division_kg is None
    assert vessels.set_cells(plant, "K3", {"capacity_l": "9000"}).status == "unchanged"


def test_the_order_of_charging_goes_out_and_in_with_the_catalogue(plant: Plant, tmp_path: Path) -> None:
    vessels.set_cell(plant, "K1", "charge_order", "heavy light")
    export_plant(plant, tmp_path / "out")
    with open_plant(tmp_path / "out") as folder:
        assert vessels.charge_order(folder, "K1") == ("heavy", "light")
    vessels.set_cell(plant, "K1", "charge_order", "")
    assert vessels.charge_order(plant, "K1") == ()
    plant.undo()
    assert vessels.charge_order(plant, "K1") == ("heavy", "light")


def test_vessels_come_and_go(plant: Plant) -> None:
    assert vessels.add_vessel(plant, "K9").capacity_l is None
    assert [v.vessel for v in plant.vessels()] == ["K1", "K2", "K3", "TINY", "K9"]
    for code, words in (("k9", "there is a vessel k9 already"), ("", "empty")):
        with pytest.raises(DeskError, match=words):
            vessels.add_vessel(plant, code)
    vessels.set_cell(plant, "K9", "capacity_l", "5000")
    vessels.retire_vessel(plant, "K9")
    with pytest.raises(DeskError, match="no vessel 'K9'; the plant has K1, K2, K3, TINY"):
        vessels.vessel(plant, "K9")
    assert vessels.add_vessel(plant, "K9").capacity_l == 5000.0
    orders.take(plant, Order("ONE", 2500, "K2"))
    with pytest.raises(DeskError, match="K2 holds B-0001, which is open; release or cancel first"):
        vessels.retire_vessel(plant, "K2")
    assert plant.verify() is None
