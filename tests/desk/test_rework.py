"""What leaves the vessel: packing, rework with its family and lots, heels, and the balance of a batch."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from blendtui.desk import batches, ledger, rework, stocks, targets
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import CANCELLED
from blendtui.store.errors import NoSuchRow
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.laws import predict
from solver.recipe import design, evaluate
from solver.stocks import StockTable
from solver.target import ShareRule
from tests.desk.tank_farm import charge, farm, order, release, sampled

MADE = {"LN": 6000.0, "HN": 4000.0}


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with open_plant(farm(tmp_path), who="anna") as opened:
        yield opened


@pytest.fixture
def made(plant: Plant) -> Plant:
    """With a batch of 10 t in K1."""
    order(plant, "B-1", MADE, asked=9900.0)
    return plant


# Packing

def test_only_a_released_batch_is_packed(made: Plant) -> None:
    with pytest.raises(DeskError) as refused:
        rework.leave(made, "B-1", 9800.0, "packed")
    assert str(refused.value) == "B-1 is open, and only a released batch is packed; release it first"
    release(made, "B-1")
    done = rework.leave(made, "B-1", "9.8 t", "packed", by="emil")
    assert done.words == ("B-1: 9800 kg packed; 200 kg are in K1 by the book",
                          "packed so far 9800 of 9900 kg asked for (98.99 %)")
    assert (done.line, done.kg, done.by) == (1, 9800.0, "emil")
    assert made.batch("B-1").outcomes[0].kg == 9800.0
    assert made.journal(1)[0].what == "B-1: 9800 kg packed (by emil)"
    assert made.verify() is None


def test_an_order_in_litres_is_compared_by_its_density(plant: Plant) -> None:
    order(plant, "B-1", MADE, asked=11000.0, unit="L20")
    release(plant, "B-1")
    done = rework.leave(plant, "B-1", 9600.0, "packed")
    density = 10000.0 / (6000.0 / 870.0 + 4000.0 / 882.0)
    # 5 °C of thermal expansion at 0.00072/K (D1250, M): 0.36 %.
    asked = 11.0 * density * (1.0 - 5.0 * 0.6278 / density)
    assert float(done.words[1].split()[5]) == pytest.approx(asked, abs=1.0)


def test_packing_more_than_the_book(made: Plant) -> None:
    release(made, "B-1")
    with pytest.raises(DeskError) as refused:
        rework.leave(made, "B-1", 10101.0, "packed", sure=True)
    assert str(refused.value) == ("B-1: 10101 kg packed is more than the 10000 kg that K1 holds of it by the book; is "
                                  "the unit right, was a charge not recorded?")
    with pytest.raises(Questioned, match=r"10080 kg is 80\.0 kg more than K1 holds of it by the book; was it weighed"):
        rework.leave(made, "B-1", 10080.0, "packed")
    rework.leave(made, "B-1", 10080.0, "packed", sure=True)
    with pytest.raises(Questioned, match=r"10\.0 kg is 90\.0 kg more than K1 holds of it by the book; was it weighed"):
        rework.leave(made, "B-1", 10.0, "left")
    rework.leave(made, "B-1", 10.0, "left", sure=True)
    found = rework.balance(made.batch("B-1"))
    assert found.loss_kg == pytest.approx(-90.0)
    assert found.words[0] == ("gain of 90.0 kg (0.90 %): more came out than is recorded to have gone in; a scale, a "
                              "heel or a charge that was not recorded. A gain is no better than a loss")


def test_a_clock_that_was_set_back_is_questioned(plant: Plant) -> None:
    order(plant, "B-1", MADE)
    row = plant.batch("B-1").charges[0]
    plant.step(lambda: Step((changed(row, at="2099-01-01T00:00:00.000Z"),), "put"))
    with pytest.raises(Questioned, match="was the clock set back"):
        rework.leave(plant, "B-1", 5.0, "sample")
    assert rework.leave(plant, "B-1", 5.0, "sample", sure=True).kg == 5.0


def test_a_rework_tank_of_unknown_quantity_is_dipped_first(made: Plant) -> None:
    stocks.add_stock(made, "RW9", kind="rework", oil="gear", kv40=100.0, kv100=11.0)
    with pytest.raises(DeskError, match="RW9: its book quantity is unknown, so what it holds after a delivery is too"):
        rework.leave(made, "B-1", 5.0, "rework", family="gear", why="x")


def test_much_more_than_was_asked_for_is_questioned(plant: Plant) -> None:
    order(plant, "B-1", MADE, asked=5000.0)
    release(plant, "B-1")
    with pytest.raises(Questioned, match="B-1: 9800 kg packed, and 5000 kg were asked for; is it all for this order"):
        rework.leave(plant, "B-1", 9800.0, "packed")
    assert rework.leave(plant, "B-1", 9800.0, "packed", sure=True).kg == 9800.0


@pytest.mark.parametrize(("kg", "what", "said", "words"), [
    (10001.0, "slops", {}, "B-1: 10001 kg slops is more than the 10000 kg that K1 holds of it by the book"),
    (0.0, "slops", {}, "B-1: 0 kg slops is not above 0; type what left the vessel"),
    (-5.0, "left", {}, "B-1: -5 kg left is not above 0; type what left the vessel"),
    (5.0, "evaporated", {}, "'evaporated' is no way out of a vessel; usable are packed, sample, slops, flush, rework"),
    (5.0, "rework", {"family": "hydraulic"}, "B-1: say why this oil becomes rework: it stands in the record"),
    (5.0, "rework", {"why": "x"}, "B-1: name the family of the rework, such as hydraulic, or a rework stock that there "
                                  "is: rules of products speak of it by its family"),
    (5.0, "rework", {"why": "x", "stock": "LN"}, "LN is a base stock; rework goes into a rework stock, or rules would"),
    (5.0, "rework", {"why": "x", "family": "hydraulic", "lot": "before"}, "'before' cannot be a lot's name"),
    (5.0, "slops", {"stock": "RW1"}, "B-1: slops goes into no stock; only rework and flush do"),
    (5.0, "rework", {"why": "x", "stock": "a=b", "family": "hydraulic"}, "holds =, which parts a stock from its share"),
])
def test_what_cannot_leave(made: Plant, kg: float, what: str, said: dict[str, str], words: str) -> None:
    before = made.revision()
    with pytest.raises(DeskError) as refused:
        rework.leave(made, "B-1", kg, what, sure=True, **said)
    assert words in str(refused.value)
    assert made.revision() == before
    with pytest.raises(NoSuchRow):
        rework.leave(made, "B-7", 5.0, "slops")


def test_what_was_recorded_is_taken_back_with_a_reason(made: Plant) -> None:
    release(made, "B-1")
    rework.leave(made, "B-1", 9800.0, "packed")
    with pytest.raises(DeskError, match="B-1: say why 180 kg packed are taken back: it stands in the record"):
        rework.leave(made, "B-1", -180.0, "packed")
    with pytest.raises(DeskError, match="or at most −9800 kg to take back what was recorded"):
        rework.leave(made, "B-1", -9801.0, "packed", why="a drum counted twice")
    rework.leave(made, "B-1", -180.0, "packed", why="a drum counted twice")
    assert [o.kg for o in made.batch("B-1").outcomes] == [9800.0, -180.0]
    assert rework.balance(made.batch("B-1")).packed_kg == 9620.0


# Rework

def test_drawn_off_before_a_trim_into_a_new_stock(made: Plant) -> None:
    done = rework.leave(made, "B-1", 800.0, "rework", family="hydraulic", why="no room for the trim", by="emil")
    stock = made.stock("RW-HYDRAULIC")
    kv = predict("refutas", StockTable([made.stock("LN"), made.stock("HN")]), [0.6, 0.4])
    assert (stock.kv40, stock.kv100) == pytest.approx(tuple(kv), rel=1e-12)
    assert (stock.kind, stock.oil, stock.on_hand_kg, stock.source) == ("rework", "hydraulic", 800.0, "computed")
    assert stock.price_per_t == pytest.approx(0.6 * 820.0 + 0.4 * 900.0)
    assert stock.values["sulfur"] == pytest.approx(0.44)
    (lot,) = made.lots("RW-HYDRAULIC")
    assert (lot.lot, lot.from_batch, lot.kg, lot.by, lot.note) == ("B-1", "B-1", 800.0, "emil", "no room for the trim")
    assert made.tank_lots("RW-HYDRAULIC") == {"B-1": 1.0}
    assert (done.stock, done.lot) == ("RW-HYDRAULIC", "B-1")
    assert done.words == (
        "B-1: 800 kg rework into RW-HYDRAULIC; 9200 kg are in K1 by the book",
        "RW-HYDRAULIC is a new rework stock of the family hydraulic, at the 852.00 per t that its oil cost",
        f"received as lot B-1, KV40/KV100 {kv[0]:.2f}/{kv[1]:.3f} mm²/s predicted, for the laboratory has not measured "
        "both")
    assert made.batch("B-1").head.state == "open"
    again = rework.leave(made, "B-1", 200.0, "rework", family="hydraulic", why="still no room")
    assert again.lot == "B-1 (2)"
    assert made.tank_lots("RW-HYDRAULIC") == {"B-1": 0.8, "B-1 (2)": pytest.approx(0.2)}
    assert made.verify() is None


def test_rework_takes_the_laboratorys_results_where_there_are_any(made: Plant) -> None:
    sampled(made, "B-1", {"kv40": 47.9, "kv100": 6.93, "water": 35.0})
    done = rework.leave(made, "B-1", 800.0, "rework", stock="RW2", family="hydraulic", why="off grade")
    stock = made.stock("RW2")
    assert (stock.kv40, stock.kv100, stock.values["water"], stock.source) == (47.9, 6.93, 35.0, "own")
    assert stock.density15 == pytest.approx(10000.0 / (6000.0 / 870.0 + 4000.0 / 882.0))
    assert done.words[-1] == "received as lot B-1, KV40/KV100 47.90/6.930 mm²/s measured"
    charge(made, "B-1", 3, "HN", 1000.0, trim=1)  # of what it is now no sample was drawn
    later = rework.leave(made, "B-1", 100.0, "rework", stock="RW2", why="off grade")
    assert "predicted, for the laboratory has not measured both" in later.words[1]
    assert made.lots("RW2")[-1].cells["kv40"] > 48.0


def test_rework_is_taken_back_and_brought_back_as_one_step(made: Plant) -> None:
    before = made.state()
    rework.leave(made, "B-1", 800.0, "rework", family="hydraulic", why="no room")
    after = made.state()
    made.undo()
    assert made.state() == before
    made.redo()
    assert made.state() == after
    made.undo()
    rework.leave(made, "B-1", 10000.0, "rework", family="hydraulic", why="off grade")
    assert made.stock("RW-HYDRAULIC").on_hand_kg == 10000.0
    assert made.batch("B-1").head.state == "reworked"
    assert made.verify() is None


def test_a_family_is_kept_apart(made: Plant) -> None:
    rework.leave(made, "B-1", 100.0, "rework", stock="RW1", family="hydraulic", why="x")
    with pytest.raises(DeskError, match="RW1 holds hydraulic, not gear; families are kept apart: name another stock"):
        rework.leave(made, "B-1", 100.0, "rework", stock="RW1", family="gear", why="x")
    rework.leave(made, "B-1", 100.0, "rework", stock="RW2", family="hydraulic", why="x")
    with pytest.raises(DeskError, match="RW1, RW2 hold hydraulic; say which one"):
        rework.leave(made, "B-1", 100.0, "rework", family="hydraulic", why="x")
    rework.leave(made, "B-1", 100.0, "flush", family="gear")
    assert made.stock("RW-GEAR").on_hand_kg == 100.0
    assert rework.leave(made, "B-1", 50.0, "flush").stock == ""  # to the slops of the site


@pytest.mark.parametrize(("rule", "most"), [(ShareRule("hydraulic", high=0.0), 0.0),
                                            (ShareRule("hydraulic", high=0.05), 0.05),
                                            (ShareRule("hydraulic", high=1.0), 1.0)])
def test_rules_of_a_product_speak_of_rework_by_its_family(made: Plant, rule: ShareRule, most: float) -> None:
    rework.leave(made, "B-1", 5000.0, "rework", family="hydraulic", why="off grade")
    target = replace(targets.target_of(made, "T46"), batch_kg=2000.0, rules=(rule,))
    cheap = [replace(s, price_per_t=1.0) if s.kind == "rework" else s for s in made.stocks()]
    found = design(cheap, target)
    assert found.status == "optimal"
    assert (found.shares or {}).get("RW-HYDRAULIC", 0.0) == pytest.approx(most, abs=1e-6)
    by_hand = evaluate(cheap, {"RW-HYDRAULIC": 0.2, "LN": 0.48, "HN": 0.32}, target)
    assert bool(by_hand.breaches) == (most < 0.2)


def test_a_heel_that_was_made_of_rework_counts_by_what_it_was_made_of(made: Plant) -> None:
    rework.leave(made, "B-1", 5000.0, "rework", family="hydraulic", why="off grade")
    order(made, "B-2", {"RW-HYDRAULIC": 400.0, "LN": 800.0, "HN": 800.0}, vessel="K2")
    parts = batches.made_of(batches.composition(made.batch("B-2")), batches.by_code(made))
    heel = batches.as_stock("HEEL", {"kv40": 50.0, "kv100": 7.0}, contents=parts, in_vessel_kg=100.0)
    assert heel.part_of("hydraulic") == pytest.approx(0.2)


def test_returned_oil_needs_an_origin(made: Plant) -> None:
    rework.leave(made, "B-1", 100.0, "rework", stock="RW1", family="hydraulic", why="x")
    release(made, "B-1")
    rework.leave(made, "B-1", 9000.0, "packed")
    cells = {"kv40": 47.0, "kv100": 6.9}
    with pytest.raises(DeskError) as refused:
        ledger.receive(made, "RW1", 500.0, "", cells=cells, keep=True, sure=True)
    assert str(refused.value) == "RW1: of unknown origin: rework needs the batch it comes from, or a lot"
    with pytest.raises(NoSuchRow, match="no batch 'B-9'"):
        ledger.receive(made, "RW1", 500.0, "", from_batch="B-9", cells=cells, keep=True)
    done = ledger.receive(made, "RW1", 500.0, "", from_batch="B-1", cells=cells, keep=True)
    assert (done.lot.lot, done.lot.from_batch) == ("B-1 (2)", "B-1")
    ledger.receive(made, "RW1", 50.0, "their lot 7", cells=cells, keep=True)
    with pytest.raises(Questioned, match="20000 kg is more than the 9100 kg that left B-1"):
        ledger.receive(made, "RW1", 20000.0, "", from_batch="B-1", cells=cells, keep=True)


def test_a_batch_that_goes_to_rework_as_a_whole_is_closed(made: Plant) -> None:
    rework.leave(made, "B-1", 1.5, "sample")
    done = rework.leave(made, "B-1", 9998.5, "rework", family="hydraulic", why="wrong oil in tank 3", by="emil")
    head = made.batch("B-1").head
    assert (head.state, head.why, head.closed_by) == ("reworked", "wrong oil in tank 3", "emil")
    assert done.words[-1] == "B-1 is closed: reworked, wrong oil in tank 3"
    assert made.vessels()[0].heel_kg == 0.0
    found = rework.balance(made.batch("B-1"))
    assert (found.loss_kg, found.rework_kg, found.yield_pct) == (0.0, 9998.5, 0.0)
    with pytest.raises(DeskError, match="B-1 is reworked, and only a released batch is packed; its oil may"):
        rework.leave(made, "B-1", 1.0, "packed")


def test_a_batch_that_was_drawn_off_before_a_trim_and_goes_to_slops_is_not_reworked(made: Plant) -> None:
    rework.leave(made, "B-1", 1000.0, "rework", family="hydraulic", why="no room")
    charge(made, "B-1", 3, "HN", 1000.0, trim=1)
    rework.leave(made, "B-1", 10000.0, "slops", why="water in it")
    assert made.batch("B-1").head.state == "open"


def test_a_cancelled_batch_may_go_to_rework(made: Plant) -> None:
    head = made.batch("B-1").head
    made.step(lambda: Step((changed(head, state=CANCELLED, why="order withdrawn"),), "cancelled"))
    rework.leave(made, "B-1", 9900.0, "rework", family="hydraulic", why="order withdrawn")
    assert made.batch("B-1").head.state == "cancelled"
    rework.leave(made, "B-1", 100.0, "left")
    assert made.batch("B-1").head.state == "reworked"
    assert (made.vessels()[0].heel_kg, made.vessels()[0].heel_stock) == (100.0, "B-1")


def test_without_a_viscosity_nothing_becomes_rework(plant: Plant) -> None:
    order(plant, "B-1", {"LN": 1000.0, "PK": 100.0})
    with pytest.raises(DeskError, match="the viscosity of what is drawn off is not known; enter results of a sample"):
        rework.leave(plant, "B-1", 100.0, "rework", family="hydraulic", why="x")
    sampled(plant, "B-1", {"kv40": 33.0, "kv100": 5.6})
    rework.leave(plant, "B-1", 100.0, "rework", family="hydraulic", why="x")
    found = plant.stock("RW-HYDRAULIC")
    assert (found.kv40, found.density15, found.price_per_t) == (33.0, None, None)


# The heel and the balance

def test_what_is_left_is_the_heel_of_the_vessel(made: Plant) -> None:
    release(made, "B-1")
    rework.leave(made, "B-1", 9850.0, "packed")
    done = rework.leave(made, "B-1", 110.0, "left")
    assert done.words == ("B-1: 110 kg left", "the heel of K1 is now 110 kg of B-1")
    assert (made.vessels()[0].heel_kg, made.vessels()[0].heel_stock) == (110.0, "B-1")
    rework.leave(made, "B-1", -10.0, "left", why="dipped again")
    assert made.vessels()[0].heel_kg == 100.0
    order(made, "B-2", MADE)
    with pytest.raises(Questioned, match="B-1: K1 has taken B-2 since; is this still what stands in it"):
        rework.leave(made, "B-1", 5.0, "left")


def test_a_heel_that_leaves_much_of_the_batch_nowhere_is_questioned(made: Plant) -> None:
    release(made, "B-1")
    entries = made.revision()
    with pytest.raises(Questioned, match=r"then 9890 kg of it \(98\.90 %\) went nowhere on record; was it packed"):
        rework.leave(made, "B-1", 110.0, "left")
    assert made.revision() == entries
    rework.leave(made, "B-1", 9390.0, "packed")
    rework.leave(made, "B-1", 110.0, "left")
    assert rework.balance(made.batch("B-1")).loss_kg == 500.0


def test_the_balance_of_a_batch(made: Plant) -> None:
    assert rework.balance(made.batch("B-1")).words == (
        "10000 kg are in K1 by the book; the balance closes when what stays there is recorded",)
    release(made, "B-1")
    rework.leave(made, "B-1", 2.0, "sample")
    rework.leave(made, "B-1", 9838.0, "packed")
    rework.leave(made, "B-1", 20.0, "slops")
    assert rework.balance(made.batch("B-1")).loss_kg is None
    rework.leave(made, "B-1", 100.0, "left")
    found = rework.balance(made.batch("B-1"))
    assert (found.in_kg, found.out_kg, found.in_vessel_kg) == (10000.0, 9960.0, 0.0)
    assert (found.loss_kg, found.loss_pct) == (40.0, pytest.approx(0.4))
    assert found.yield_pct == pytest.approx(100.0 * 9838.0 / 9900.0)
    assert found.words == ("loss 40.0 kg (0.40 %): 0.2–0.5 % is good",
                           "yield 99.37 %: packed, of what went in and did not stay as a heel")


@pytest.mark.parametrize(("packed", "words"), [
    (9830.0, "loss 70.0 kg (0.70 %): 0.2–0.5 % is good, this is more"),
    (9780.0, "loss 120 kg (1.20 %): 0.2–0.5 % is good. Past 1 %: search: a scale, a leak, a charge or a drum that was "
             "not recorded"),
    (9900.0, "no loss at all: was every mass weighed, or one worked out from the others?"),
])
def test_a_loss_in_words(made: Plant, packed: float, words: str) -> None:
    release(made, "B-1")
    rework.leave(made, "B-1", packed, "packed")
    rework.leave(made, "B-1", 100.0, "left")
    assert rework.balance(made.batch("B-1")).words[0] == words
