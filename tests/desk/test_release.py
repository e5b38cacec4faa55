"""Release: everything that is missing is named, nobody releases what was checked by the one who charged it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from blendtui.cli import LONGEST
from blendtui.desk import batches, lab, release, targets
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import open_plant
from blendtui.desk.topping_up import EARLIER
from blendtui.store.batch_edits import changed, lots_of
from blendtui.store.batch_records import DONE, DROPPED, RELEASED, Charge, Content, Decision
from blendtui.store.errors import PlantError
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from tests.desk.made_batches import all_charged, at, charged, ordered, plant_file, put, sampled

STOCKS = """stock,oil,kind,on_hand_kg,price_per_t,density15,kv40,kv100,flash
A,LIGHT,base,90000,800,868,30.6,5.23,214
B,,base,90000,1100,897,490,32,300
"""
PRODUCTS = "product,name,grade\nP100,Oil 100,ISO VG 100\nM30,Motor oil,SAE 10W-30\n"
LIMITS = "product,property,low,high\nP100,vi,90,\nP100,flash,205,\n"
GOOD = {"kv40": 100.2, "kv100": 11.4, "flash": 240.0}


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    path = plant_file(tmp_path / "c", stocks=STOCKS, products=PRODUCTS, limits=LIMITS)
    with open_plant(path, who="erik") as opened:
        yield opened


@pytest.fixture
def done(plant) -> Plant:
    """A plant whose batch B-0001 lacks nothing."""
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, GOOD, decision="release")
    return plant


def lacks(plant: Plant) -> tuple[str, ...]:
    return release.missing(plant, plant.batch("B-0001"))


def change(plant: Plant, line: int, **cells: object) -> None:
    charge = next(c for c in plant.batch("B-0001").charges if c.line == line)
    plant.step(lambda: Step((changed(charge, **cells),), "changed"))


def test_a_batch_that_lacks_nothing_is_released(done):
    assert lacks(done) == ()
    made = release.release(done, "B-0001", by="Fritz")
    assert (made.head.state, made.head.closed_by) == (RELEASED, "Fritz")
    assert done.batch("B-0001").head == made.head
    assert done.journal(1)[0].what == "B-0001 released"
    assert done.verify() is None


def test_a_release_makes_the_batch_a_measured_blend_in_the_same_step(done):
    before = done.revision()
    release.release(done, "B-0001")
    assert done.revision() == before + 1
    (blend,) = done.measured()
    assert (blend.name, blend.product, blend.values) == ("B-0001", "P100", GOOD)
    assert [row.blend for row in lab.report(lab.read(done)).rows] == ["B-0001"] * 3
    with pytest.raises(PlantError, match="B-0001 is released: its record stands"):
        done.undo()


def test_only_once(done):
    release.release(done, "B-0001")
    with pytest.raises(DeskError, match=r"B-0001 is released \(erik, 20.*\); its record stands"):
        release.release(done, "B-0001")


def test_everything_that_is_missing_is_named_in_one_line(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    charged(plant, 1, 6200.0, lot="", checked_by="")
    with pytest.raises(DeskError) as refused:
        release.release(plant, "B-0001")
    assert str(refused.value) == (
        "B-0001 cannot be released: not charged: line 2 (B, 4000 kg); no second check: line 1 (A); lot not known: "
        "line 1 (A): receive it or type it as a correction of the charge; outside tolerance and no reason: line 1 (A, "
        "6200 for 6000 ± 50.0 kg); no sample was drawn")
    assert plant.batch("B-0001").head.state == "open"


def test_the_second_check_on_oneself(done):
    """Whatever case and blanks the name is typed with, and whoever releases."""
    change(done, 2, checked_by=" ANNA")
    words = ("charged and checked by one person: line 2 (B, anna): nobody releases what was checked by the one who "
             "charged it; let another person check it")
    assert lacks(done) == (words,)
    for who in ("anna", "erik"):
        with pytest.raises(DeskError, match="nobody releases what was checked by the one who charged it"):
            release.release(done, "B-0001", by=who)
    change(done, 2, checked_by="bob")
    release.release(done, "B-0001", by="anna")


def test_a_lot_that_was_typed_will_do(done):
    charge = done.batch("B-0001").charges[0]
    done.step(lambda: Step((changed(charge, actual_lot="typed 12"),), "lot"))
    assert lacks(done) == ()


def test_oil_from_before_the_first_receipt_has_no_lot(done):
    """As a receipt leaves a tank: part of it is of the lot that came, part of what was there before."""
    def now_holds(lots: dict[str, float]) -> None:
        row = done.batch("B-0001").charges[0]
        done.step(lambda: Step((*lots_of(replace(row, lots=lots), row), changed(row, actual_lot="")), "lots"))

    now_holds({EARLIER: 1.0})
    assert lacks(done) == ("lot not known: line 1 (A): receive it or type it as a correction of the charge",)
    now_holds({EARLIER: 0.25, "L7": 0.75})
    assert lacks(done) == ()
    assert release.remarks(done, done.batch("B-0001")) == (
        "line 1 (A): 25 % of it is from before the tank's first receipt, and of no known lot",)


def test_a_reason_settles_a_charge_outside_its_tolerance(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    charged(plant, 1, 6200.0)
    charged(plant, 2)
    sampled(plant, 1, GOOD, decision="release")
    assert len(lacks(plant)) == 1
    change(plant, 1, why="valve leaked, weighed twice")
    assert lacks(plant) == ()


def test_a_dropped_line_has_a_reason(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0, "A2": 1.0} | {}, batch_kg=10000.0)
    charged(plant, 1)
    charged(plant, 2)
    change(plant, 3, state=DROPPED)
    sampled(plant, 1, GOOD, decision="release")
    assert lacks(plant) == ("dropped and no reason: line 3 (A2)",)
    change(plant, 3, why="enough in the tank")
    assert lacks(plant) == ()


def test_a_third_trim_has_a_reason(done):
    put(done, Charge("B-0001", 3, 3, "B", "", 100.0, position=30))
    charged(done, 3, when=at(10))
    sampled(done, 2, GOOD, hour=11, decision="release")
    assert lacks(done) == ("of a third trim or later and no reason: line 3 (B)",)
    change(done, 3, why="the formulator agrees")
    assert lacks(done) == ()


def test_a_sample_comes_after_the_last_charge(done):
    put(done, Charge("B-0001", 3, 1, "B", "", 100.0, position=30))
    charged(done, 3, when=at(10))
    assert lacks(done) == ("no sample was drawn after the last charge",)


def test_every_limit_has_a_result(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {"kv100": 11.4}, decision="release")
    assert lacks(plant) == (
        "no result of KV at 40 °C on sample 1",
        "no result of viscosity index on sample 1 (it takes KV40 and KV100 of one sample)",
        "no result of flash point on sample 1")


def test_both_viscosities_come_from_one_sample(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {"kv40": 100.2, "flash": 240.0}, hour=9, place="top")
    sampled(plant, 2, {"kv100": 11.4}, hour=10, place="bottom", decision="release")
    assert "KV40 and KV100 on sample 2, 1 are not of one sample" in lacks(plant)


def test_a_withdrawn_result_is_missing(done):
    result = next(r for r in done.batch("B-0001").results if r.property == "flash")
    done.step(lambda: Step((changed(result, withdrawn="cup cracked"),), "withdrawn"))
    assert lacks(done) == ("no result of flash point on sample 1: it was withdrawn",)


def test_a_grade_that_asks_for_cold_cranking_asks_it_of_the_batch(plant):
    ordered(plant, "M30", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {"kv40": 100.2, "kv100": 11.4}, decision="release")
    assert lacks(plant) == ("no result of cold cranking at -25 °C on sample 1",)
    assert release.remarks(plant, plant.batch("B-0001")) == (
        "not told by these results: pumping viscosity (MRV) at -30 °C at most 60000 mPa·s, no yield stress",
        "not told by these results: HTHS at 150 °C at least 2.9 mPa·s")


def test_a_decision_is_on_record(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, GOOD)
    assert lacks(plant) == ("nothing is decided on sample 1",)
    put(plant, Decision("B-0001", 1, 1, "fresh sample", "", at(10), "dora"))
    assert lacks(plant) == ("the decision on sample 1 is fresh sample, not release",)
    put(plant, Decision("B-0001", 2, 1, "release", "", at(11), "dora"))
    assert lacks(plant) == ()


def test_a_result_after_the_decision_is_decided_on_anew(done):
    result = done.batch("B-0001").results[0]
    put(done, replace(result, line=9, value=100.4, at=at(11)))
    assert lacks(done) == ("results of sample 1 came after the decision on it: decide again",)


def test_a_release_against_the_results_has_a_reason(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {**GOOD, "kv40": 86.0, "kv100": 10.4}, decision="release")
    assert lacks(plant) == ("sample 1 was decided to be released where its results say trim, and no reason",)
    put(plant, Decision("B-0001", 2, 1, "release", "", at(10), "dora", "the customer takes it as VG 86"))
    assert lacks(plant) == ()
    assert release.remarks(plant, plant.batch("B-0001")) == (
        "released with a reason: the customer takes it as VG 86",)


def test_a_formula_that_has_changed_since_is_remarked(done):
    assert release.remarks(done, done.batch("B-0001")) == ()
    targets.edit_product(done, "M30", "note", "another product")
    assert release.remarks(done, done.batch("B-0001")) == ()
    targets.edit_product(done, "P100", "grade", "ISO VG 150")
    number = done.batch("B-0001").head.formula_entry
    assert release.remarks(done, done.batch("B-0001")) == (
        f"P100 has changed since this batch was ordered (grade): it is judged by the formula as it was (journal entry "
        f"{number})",)
    assert lacks(done) == ()


def test_a_clock_that_was_set_back_is_questioned(done):
    put(done, Decision("B-0001", 2, 1, "release", "", "2199-01-01T00:00:00.000Z", "dora"))
    with pytest.raises(Questioned, match=r"the clock says 20.*, and the record of B-0001 goes to 2199-01-01"):
        release.release(done, "B-0001")
    assert done.batch("B-0001").head.state == "open"
    assert release.release(done, "B-0001", sure=True).head.state == RELEASED


def test_a_batch_without_a_charge_is_never_released(plant):
    heel = Content("B-0001", 1, "heel", "A", 500.0, cells=batches.cells_of(plant.stock("A")))
    ordered(plant, "P100", {}, contents=(heel,))
    sampled(plant, 1, GOOD, decision="release")
    assert lacks(plant) == ("no charge was ever planned",)


def test_a_long_card_is_told_in_one_line_that_a_terminal_shows(plant):
    """Twenty charges that lack everything: each named, and short enough for one message of the command line."""
    ordered(plant, "P100", {"A": 10.0})
    line = plant.batch("B-0001").charges[0]
    done = replace(line, state=DONE, plan_kg=20.0, actual_kg=20.0, at=at(8), by="anna")
    put(plant, *(replace(done, line=n, stock=f"OIL{n:02d}") for n in range(2, 21)))
    words = "; ".join(lacks(plant))
    each = ", ".join(f"{n} (OIL{n:02d})" for n in range(2, 21))
    assert words.count(each) == 2
    assert f"no second check: lines {each}; lot not known: lines {each}: receive it" in words
    assert len(words) < LONGEST
