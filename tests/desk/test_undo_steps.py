"""Every step of a batch as the desk makes it can be taken back and done again, until the batch is closed."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from blendtui.desk import batch_lab, charging, ledger, orders, receiving, rework, vessels
from blendtui.desk.proposals import Order
from blendtui.store.errors import BuiltOn, Closed
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.plant import Plant


@pytest.fixture
def plant(pytestconfig: pytest.Config, tmp_path: Path):
    """The example plant as a file, opened by anna, who did not import it."""
    import_folder(pytestconfig.rootpath / "stock_catalog_example", tmp_path / "x.plant", who="founder")
    with open_plant(tmp_path / "x.plant", who="anna") as opened:
        yield opened


def there_and_back(plant: Plant, act: Callable[[], object]) -> None:
    """Do it, take it back and do it again: each time all of the plant is as it was."""
    before, entries = plant.state(), plant.revision()
    act()
    after, written = plant.state(), plant.revision() - entries
    assert written >= 1
    for _ in range(written):
        plant.undo()
    assert plant.state() == before
    for _ in range(written):
        plant.redo()
    assert plant.state() == after
    assert plant.verify() is None


def test_every_step_until_the_release(plant):
    order = Order("HYD-46", 12_000.0, "K1", name="B-0001", order_no="O-7")
    there_and_back(plant, lambda: receiving.receive(plant, "LN15A", 5000.0, "H-77", keep=True, sure=True,
                                                    cells={"kv40": "30.4", "kv100": "5.25"}))
    there_and_back(plant, lambda: orders.take(plant, order, sure=True))
    lines = [c.line for c in plant.batch("B-0001").charges]
    there_and_back(plant, lambda: orders.reorder(plant, "B-0001", lines[::-1]))
    there_and_back(plant, lambda: orders.redesign(plant, "B-0001", sure=True))
    for charge in plant.batch("B-0001").to_charge:
        there_and_back(plant, lambda c=charge: charging.charge(plant, "B-0001", c.line, c.plan_kg, sure=True))
        there_and_back(plant, lambda c=charge: charging.check(plant, "B-0001", c.line, by="bertil"))
    there_and_back(plant, lambda: ledger.dip(plant, "LN15A", plant.stock("LN15A").on_hand_kg - 30.0, correct=True,
                                             why="level gauge", sure=True))
    there_and_back(plant, lambda: batch_lab.sample(plant, "B-0001", sure=True))
    with pytest.raises(BuiltOn, match=r"^LN15A lot H-77 is in B-0001 charge \d+ already; correct the receipt instead"):
        _take_back_the_receipt(plant)
    there_and_back(plant, lambda: batch_lab.results(plant, "B-0001", None, {
        "kv40": "46.2", "kv100": "6.9", "flash": "222", "pour": "-24", "density15": "868"}, sure=True))
    there_and_back(plant, lambda: batch_lab.decide(plant, "B-0001", decision="release", why="inside", sure=True))


def _take_back_the_receipt(plant: Plant) -> None:
    from blendtui.store import taking_back

    entry = next(e for e in plant.journal(200) if any(c.table == "lot" and c.before is None for c in e.changes)
                 and e.undoes is None)
    with plant._database.reading() as con:
        taking_back.reversal(con, entry)


def test_rework_goes_back_until_it_closes_the_batch(plant):
    order = Order("HYD-46", 12_000.0, "K1", name="B-0001")
    orders.take(plant, order, sure=True)
    for charge in plant.batch("B-0001").to_charge:
        charging.charge(plant, "B-0001", charge.line, charge.plan_kg, lot="seen", why="board", sure=True)
    inside = plant.batch("B-0001").in_vessel_kg
    there_and_back(plant, lambda: rework.leave(plant, "B-0001", 90.0, "left", sure=True))
    there_and_back(plant, lambda: rework.leave(plant, "B-0001", 1000.0, "rework", family="hydraulic", why="wrong oil",
                                               sure=True))
    rework.leave(plant, "B-0001", inside - 1090.0, "slops", why="wrong oil", sure=True)
    assert plant.batch("B-0001").head.state == "reworked"
    with pytest.raises(Closed):
        plant.undo()
    assert plant.verify() is None


def test_vessels_go_back(plant):
    there_and_back(plant, lambda: vessels.add_vessel(plant, "K9"))
    there_and_back(plant, lambda: vessels.set_cell(plant, "K9", "capacity_l", "9000"))
    there_and_back(plant, lambda: vessels.set_cell(plant, "K9", "flash_margin_c", "30"))
    there_and_back(plant, lambda: vessels.retire_vessel(plant, "K9"))


def test_a_cancelled_batch_stays_cancelled(plant):
    orders.take(plant, Order("HYD-46", 12_000.0, "K1", name="B-0001"), sure=True)
    promised = plant.stock("HT06").reserved_kg
    orders.cancel(plant, "B-0001", why="the customer called")
    assert plant.stock("HT06").reserved_kg < promised or promised == 0.0
    with pytest.raises(Closed, match=r"^B-0001 is cancelled: its record stands; a correction is a new entry$"):
        plant.undo()
