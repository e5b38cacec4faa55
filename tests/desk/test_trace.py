"""Lot → batch → order and back: proportions through tank mixtures, heels and rework."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from blendtui.desk import batches, charging, ledger, orders, rework
from blendtui.desk.errors import DeskError
from blendtui.desk.trace import trace
from blendtui.store.batch_edits import added, lots_of
from blendtui.store.batch_records import HEEL, Batch, Content
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.places import example_folder
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from tests.benchmarks import batch_plant
from tests.desk.tank_farm import charge, farm, order, release

QUERIES = 100  # of one trace: 40 to 77 today
FULL = {"kv40": "31", "kv100": "5.3", "density15": "871", "flash": "210", "pour": "-12", "sulfur": "0.42"}


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with open_plant(farm(tmp_path), who="anna") as opened:
        yield opened


@pytest.fixture
def past(plant: Plant) -> Plant:
    """LN is 3/4 older oil and 1/4 lot L1. B-1: 6 t LN, 4 t HN, 1 t of it to rework, 9 t trimmed with 1 t LN.
    B-2 on 100 kg heel of B-1 with 500 kg of the rework."""
    ledger.receive(plant, "LN", 10000.0, "L1", cells=FULL, certificate="C-7")
    order(plant, "B-1", {"LN": 6000.0, "HN": 4000.0}, customer="Nordlub")
    rework.leave(plant, "B-1", 1000.0, "rework", family="hydraulic", why="no room")
    charge(plant, "B-1", 3, "LN", 1000.0, trim=1)
    release(plant, "B-1")
    rework.leave(plant, "B-1", 9850.0, "packed")
    rework.leave(plant, "B-1", 100.0, "left")
    order(plant, "B-2", {"LN": 5000.0, "RW-HYDRAULIC": 500.0, "HN": 4400.0}, customer="Sudlub")
    release(plant, "B-2")
    rework.leave(plant, "B-2", 9900.0, "packed")
    return plant


# Parts of lot L1 by hand: of the rework, of B-1 when it was packed, of B-2.
IN_REWORK = 0.6 * 0.25
IN_B1 = (9000.0 * IN_REWORK + 1000.0 * 0.25) / 10000.0
IN_B2 = (100.0 * IN_B1 + 5000.0 * 0.25 + 500.0 * IN_REWORK) / 10000.0


def test_a_lot_forward(past: Plant) -> None:
    found = trace(past, "L1")
    assert (found.what, found.kg, found.words) == ("lot", 10000.0, (found.words[0],))
    assert found.words[0].startswith("LN lot L1: 10000 kg received 20")
    assert found.words[0].endswith(", certificate C-7")
    assert [(u.batch, u.order_no, u.customer, u.state) for u in found.uses] == [
        ("B-1", "O-B-1", "Nordlub", "released"), ("B-2", "O-B-2", "Sudlub", "released")]
    one, two = found.uses
    assert (one.part, two.part) == pytest.approx((IN_B1, IN_B2), rel=1e-12)
    assert (one.packed_kg, two.packed_kg) == pytest.approx((9850.0 * IN_B1, 9900.0 * IN_B2), rel=1e-12)
    assert one.rework_kg == pytest.approx(1000.0 * IN_REWORK, rel=1e-12)
    assert (one.via, two.via) == (("LN L1",), ("heel of B-1", "LN L1", "RW-HYDRAULIC B-1"))
    places = {(p.what, p.name): p for p in found.places}
    assert places["tank", "LN"].kg == pytest.approx(0.25 * 28000.0)
    assert places["tank", "RW-HYDRAULIC"].kg == pytest.approx(500.0 * IN_REWORK)
    assert places["heel", "K1"].kg == pytest.approx(100.0 * IN_B1)


def test_a_batch_back_to_its_lots(past: Plant) -> None:
    found = trace(past, "B-2")
    parts = {(o.stock, o.lot): o.part for o in found.origins}
    assert parts["LN", "L1"] == pytest.approx(IN_B2, rel=1e-12)
    assert parts["LN", "before"] == pytest.approx(3.0 * IN_B2, rel=1e-12)
    assert sum(parts.values()) == pytest.approx(1.0, rel=1e-12)
    assert sum(o.kg for o in found.origins) == pytest.approx(10000.0)
    assert next(o for o in found.origins if o.lot == "L1").receipt.certificate == "C-7"
    heel, light, returned, heavy = found.back
    assert [(n.what, n.name, n.kg) for n in found.back] == [
        ("heel", "B-1", 100.0), ("charge", "LN", 5000.0), ("charge", "RW-HYDRAULIC", 500.0), ("charge", "HN", 4400.0)]
    assert [(n.name, n.kg) for n in light.below] == [("before", 3750.0), ("L1", 1250.0)]
    (lot,) = returned.below
    assert (lot.name, lot.words) == ("B-1", "rework of B-1")
    # The rework was drawn off before the trim: 6 parts LN to 4 parts HN, and not what was packed.
    assert [(n.name, n.part) for n in lot.below] == [("LN", pytest.approx(0.03)), ("HN", pytest.approx(0.02))]
    assert [n.name for n in heel.below] == ["LN", "HN", "LN"]
    assert heavy.mark == "no lot"
    assert found.batches == {"B-2": 1.0, "B-1": pytest.approx(0.06)}
    assert found.uses[0].packed_kg == 9900.0


def test_both_ways_agree(past: Plant) -> None:
    forward = {u.batch: u.part for u in trace(past, "L1").uses}
    for name, part in forward.items():
        back = {(o.stock, o.lot): o.part for o in trace(past, name).origins}
        assert back["LN", "L1"] == pytest.approx(part, rel=1e-12)


def test_an_order_a_customer_and_a_stock(past: Plant) -> None:
    by_order, by_customer = trace(past, "O-B-2"), trace(past, "Sudlub")
    assert (by_order.what, by_customer.what) == ("order", "customer")
    assert by_order.origins == by_customer.origins == trace(past, "B-2").origins
    assert by_order.back[0].below == trace(past, "B-2").back
    stock = trace(past, "RW-HYDRAULIC")
    assert (stock.what, stock.kg) == ("stock", 500.0)
    assert {(o.stock, o.lot): o.part for o in stock.origins} == pytest.approx(
        {("LN", "L1"): 0.15, ("LN", "before"): 0.45, ("HN", ""): 0.4})
    assert [(u.batch, u.kg) for u in stock.uses] == [("B-2", 500.0)]
    heavy = trace(past, "HN")
    assert [(o.stock, o.lot, o.part) for o in heavy.origins] == [("HN", "", 1.0)]
    assert [u.kg for u in heavy.uses] == pytest.approx([3600.0, 4400.0 + 500.0 * 0.4 + 100.0 * 0.36])


def test_a_batch_forward_through_its_heel_and_its_rework(past: Plant) -> None:
    found = trace(past, "B-1")
    assert [(u.batch, u.part) for u in found.uses] == [("B-1", 1.0), ("B-2", pytest.approx(0.06))]
    assert found.uses[1].via == ("heel of B-1", "RW-HYDRAULIC B-1")
    assert {(p.name, p.lot): p.kg for p in found.places} == {("RW-HYDRAULIC", "B-1"): 500.0, ("K1", "B-1"): 100.0}


def test_one_name_may_be_several_things(past: Plant) -> None:
    assert (trace(past, "B-1").what, trace(past, "B-1").also) == ("batch", ("lot",))
    lot = trace(past, "B-1", kind="lot")
    assert (lot.what, lot.kg, lot.also) == ("lot", 1000.0, ("batch",))
    assert [u.batch for u in lot.uses] == ["B-2"]
    with pytest.raises(DeskError, match="B-1 is no stock; it is a batch and a lot"):
        trace(past, "B-1", kind="stock")
    ledger.receive(past, "HN", 1000.0, "L1", cells={**FULL, "kv40": 96, "kv100": 10.7, "density15": 882, "flash": 250})
    both = trace(past, "L1")
    assert both.kg == 11000.0
    assert both.words[-1] == "several stocks had a lot of this name; all are traced together"
    assert {p.name for p in both.places} == {"LN", "HN", "RW-HYDRAULIC", "K1"}


def test_a_lot_that_was_charged_and_never_received(plant: Plant) -> None:
    order(plant, "B-1", {"LN": 6000.0}, customer="Nordlub")
    made = plant.batch("B-1").charges[0]
    plant.step(lambda: Step(tuple(lots_of(replace(made, lots={"drum 7": 1.0}))), "lot read off the drum"))
    found = trace(plant, "drum 7")
    assert found.words == ("LN lot drum 7: no receipt was recorded; 6000 kg of it were charged",)
    assert [(u.batch, u.kg) for u in found.uses] == [("B-1", 6000.0)]
    assert [(o.stock, o.lot, o.receipt) for o in trace(plant, "B-1").origins] == [("LN", "drum 7", None)]


def test_names_that_nothing_has(plant: Plant, past: Plant) -> None:
    with pytest.raises(DeskError) as refused:
        trace(plant, "L9")
    assert str(refused.value) == "no lot, batch, order, customer or stock 'L9'; the latest batches are B-2, B-1"
    for name in ("", "before"):
        with pytest.raises(DeskError, match="no lot, batch"):
            trace(plant, name)


def test_a_record_that_goes_round_ends(plant: Plant) -> None:
    """Heels that name each other cannot be, but a wrong record must not hang the search."""
    for one, other in (("B-1", "B-2"), ("B-2", "B-1")):
        records = (Batch(one, "P46", vessel="K1"), Content(one, 1, HEEL, other, 900.0))
        plant.step(lambda records=records: Step(tuple(c for r in records for c in added(r)), "put"))
        charge(plant, one, 1, "LN", 100.0)
    found = trace(plant, "B-1")
    assert found.faint == pytest.approx(0.81)
    assert sum(o.part for o in found.origins) + found.faint == pytest.approx(1.0)
    assert {u.batch for u in found.uses} == {"B-1", "B-2"}
    assert {u.batch for u in trace(plant, "LN").uses} == {"B-1", "B-2"}


def test_a_trace_asks_few_questions_of_a_plant_with_a_long_past(tmp_path: Path) -> None:
    """2,000 batches and 20,000 movements: what it costs is the number of queries, which grows with no batch."""
    batch_plant.make(tmp_path / "long.plant")
    with open_plant(tmp_path / "long.plant") as plant:
        for name in ("L00100", "B-1999", "O-01000", "S010"):
            asked: list[str] = []
            plant._database.con.set_trace_callback(asked.append)
            found = trace(plant, name)
            plant._database.con.set_trace_callback(None)
            assert found.uses
            assert len([q for q in asked if q.startswith("SELECT")]) < QUERIES, name
        back = trace(plant, "B-1999")
        assert sum(o.part for o in back.origins) + back.faint == pytest.approx(1.0)


def test_flush_oil_is_traced_by_the_lots_of_its_tank(tmp_path: Path) -> None:
    """By hand: 60 kg of a tank that holds 30 t of a lot in 91.4 t, in 15.12 t of batch, once all is charged."""
    import_folder(example_folder(), tmp_path / "p.plant")
    with open_plant(tmp_path / "p.plant", who="anna") as plant:
        own = {c: f"{v:.12g}" for c, v in batches.cells_of(plant.stock("LN15A")).items()}
        ledger.receive(plant, "LN15A", 30000.0, "L9", cells=own, sure=True)
        made = orders.take(plant, orders.Order("HYD-46", 15000.0, "K1", flush=(60.0, "LN15A", True)))
        for each in made.charges:
            charging.charge(plant, made.name, each.line, each.plan_kg, lot="" if each.stock == "LN15A" else "X")
        (use,), part = trace(plant, "L9").uses, 30000.0 / 91400.0
        light = 60.0 + sum(c.plan_kg for c in made.charges if c.stock == "LN15A")
        assert use.kg == pytest.approx(part * light, rel=1e-9)
        assert "flush of LN15A" in use.via
        back = {(o.stock, o.lot): o.kg for o in trace(plant, made.name).origins}
        assert back["LN15A", "L9"] == pytest.approx(part * light, rel=1e-9)
