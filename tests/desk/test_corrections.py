"""Corrections of charges, second checks, lines that are dropped, and charges of a trim."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import datetime
from pathlib import Path

import pytest

from blendtui.desk import batches, charging, targets
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import DROPPED, PLANNED, Sample
from blendtui.store.errors import PlantError
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.recipe import evaluate
from solver.target import Target
from tests.desk.charging_plant import line, lots_in, waiting
from tests.desk.made_batches import ordered, put


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with waiting(tmp_path) as opened:
        yield opened


# Corrections, checks, dropped lines

def test_a_correction_moves_the_tank_by_the_difference_and_clears_the_check(plant):
    charging.charge(plant, "B-0001", 1, 6000.0, by="anna")
    charging.check(plant, "B-0001", 1, by="Ben")
    with pytest.raises(DeskError, match=r"^a correction needs its reason"):
        charging.correct(plant, "B-0001", 1, 6100.0)
    done = charging.correct(plant, "B-0001", 1, 6100.0, why="read again", by="Cara")
    row = line(plant, 1)
    assert (row.actual_kg, row.by, row.checked_by, row.checked_at) == (6100.0, "Cara", "", "")
    assert row.why == "corrected from 6000 kg (anna): read again"
    assert plant.stock("A").on_hand_kg == 53900.0
    assert done.words[0] == "line 1, A: 6000 → 6100 kg"
    assert "the second check by Ben no longer holds: it is to be made again" in done.words
    with pytest.raises(DeskError, match="line 1 says 6100 kg already; nothing was changed"):
        charging.correct(plant, "B-0001", 1, 6100.0, why="again")
    entry = plant.journal(1)[0]
    assert (entry.what, entry.why) == ("B-0001 line 1: 6000 kg corrected to 6100 kg", "read again")


def test_a_reason_that_was_missing_is_recorded_and_the_check_stands(plant):
    due = "its reason is due before a release; type it with the charge, or correct the line with the same kg"
    assert charging.charge(plant, "B-0001", 1, 6100.0).words[1] == due
    assert due not in charging.charge(plant, "B-0001", 2, 900.0, why="valve stuck").words
    charging.check(plant, "B-0001", 1, by="Ben")
    done = charging.correct(plant, "B-0001", 1, 6100.0, why="meter read late")
    assert done.words == ("line 1, A: its reason is recorded",)
    row = line(plant, 1)
    assert (row.why, row.checked_by, row.by) == ("meter read late", "Ben", "anna")
    assert plant.stock("A").on_hand_kg == 53900.0
    charging.correct(plant, "B-0001", 1, 6120.0, why="read again", by="Cara")
    assert line(plant, 1).why == "corrected from 6100 kg (anna): read again; before: meter read late"


def test_a_correction_is_questioned_as_a_charge_is(plant):
    charging.charge(plant, "B-0001", 2, 800.0)
    with pytest.raises(Questioned, match="10 times the planned"):
        charging.correct(plant, "B-0001", 2, 8000.0, why="x")
    with pytest.raises(DeskError, match="cannot have been charged"):
        charging.correct(plant, "B-0001", 2, -1.0, why="x", sure=True)
    with pytest.raises(DeskError, match="is not charged yet: there is nothing to correct"):
        charging.correct(plant, "B-0001", 1, 6000.0, why="x")


def test_a_charge_corrected_to_nothing_is_to_come_again(plant):
    lots_in(plant, "A", L7=1.0)
    charging.charge(plant, "B-0001", 1, 6000.0)
    with pytest.raises(Questioned, match=r"was nothing charged on line 1\? Then 6000 kg go back to A"):
        charging.correct(plant, "B-0001", 1, 0, why="wrong line")
    done = charging.correct(plant, "B-0001", 1, "0 kg", why="wrong line", sure=True)
    row = line(plant, 1)
    assert (row.state, row.actual_kg, row.lots, row.by) == (PLANNED, None, {}, "")
    assert (plant.stock("A").on_hand_kg, plant.stock("A").reserved_kg) == (60000.0, 6000.0)
    assert done.words[0] == "line 1, A: 6000 kg taken back; the line is to come again"
    assert plant.charges_of(lot="L7") == []
    charging.charge(plant, "B-0001", 1, 6000.0)
    assert plant.verify() is None


def test_the_lot_alone_can_be_corrected(plant):
    charging.charge(plant, "B-0001", 2, 800.0)
    charging.correct(plant, "B-0001", 2, 800.0, lot="B7", why="read off the board")
    assert (line(plant, 2).actual_lot, line(plant, 2).lots) == ("B7", {"B7": 1.0})
    assert plant.stock("B").on_hand_kg == 59200.0


@pytest.mark.parametrize("who", ["anna", "Anna ", " A N N A"])
def test_the_second_check_is_by_another_person(plant, who):
    charging.charge(plant, "B-0001", 1, 6000.0, by="anna")
    with pytest.raises(DeskError, match=r"^line 1 was entered by anna: the second check is by another person$"):
        charging.check(plant, "B-0001", 1, by=who)
    assert line(plant, 1).checked_by == ""
    row = charging.check(plant, "B-0001", 1, by="Ben")
    assert row == line(plant, 1)
    assert (row.checked_by, row.checked_at >= row.at) == ("Ben", True)
    with pytest.raises(DeskError, match=r"line 1 was checked by Ben at .* already"):
        charging.check(plant, "B-0001", 1, by="Cara")


def test_the_login_name_counts_where_no_name_is_typed(plant):
    charging.charge(plant, "B-0001", 1, 6000.0)
    assert line(plant, 1).by == "anna"
    with pytest.raises(DeskError, match="another person"):
        charging.check(plant, "B-0001", 1)
    with pytest.raises(DeskError, match="line 2 of B-0001 is not charged yet: there is nothing to check"):
        charging.check(plant, "B-0001", 2, by="Ben")


def test_a_missed_line_is_dropped_with_its_reason_and_its_effects(plant):
    with pytest.raises(DeskError, match=r"^a line is dropped only with its reason"):
        charging.miss(plant, "B-0001", 4)
    done = charging.miss(plant, "B-0001", 4, why="no drums on the yard", by="Ben")
    assert (line(plant, 4).state, line(plant, 4).why) == (DROPPED, "no drums on the yard (Ben)")
    assert plant.stock("ADD").reserved_kg == 0.0
    assert done.words[0] == "line 4, ADD: 360 kg are not charged"
    assert any(x.startswith("MISSES ADD 0 %, low 3.6 %") for x in done.words)
    assert done.remedy.additions_kg["ADD"] == 360.0
    with pytest.raises(DeskError, match="line 4 was dropped already"):
        charging.miss(plant, "B-0001", 4, why="again")
    with pytest.raises(Questioned, match=r"line 4 was dropped \(no drums on the yard \(Ben\)\); is it charged"):
        charging.charge(plant, "B-0001", 4, "2 drums", lot="D1")
    charging.charge(plant, "B-0001", 4, "2 drums", lot="D1", sure=True)
    with pytest.raises(DeskError, match=r"charged 360 kg of ADD on line 4 .*: it cannot be dropped; correct it"):
        charging.miss(plant, "B-0001", 4, why="x")


# Trims under way

def test_in_a_trim_the_batch_is_what_the_laboratory_found(plant):
    from blendtui.store.batch_records import Charge

    for number, kg in ((1, 6000.0), (2, 800.0), (3, 2840.0), (4, 360.0)):
        charging.charge(plant, "B-0001", number, kg, lot="D1" if number == 4 else "")
    made = plant.batch("B-0001")
    later = f"{datetime.now().astimezone():%Y-%m-%d}T23:59:00.000Z"
    put(plant, Sample("B-0001", 1, 0, later, "carl"))
    sampled_values = {"kv40": 45.0, "kv100": 6.8, "flash": 220.0}
    from blendtui.store.batch_records import Result

    put(plant, *(Result("B-0001", 1, n, code, value, "", later, "dora") for n, (code, value)
                 in enumerate(sampled_values.items(), 1)))
    put(plant, Charge("B-0001", 5, 1, "B", "", 300.0, 5.0, position=200))
    ahead = charging.outlook(plant, plant.batch("B-0001"))
    # By hand: the measured batch and 300 kg of B by the mass law of Refutas.
    from solver.stocks import Stock

    pair = [Stock("M", kv40=45.0, kv100=6.8), Stock("B", kv40=480.0, kv100=31.5)]
    total = made.in_vessel_kg + 300.0
    by_hand = evaluate(pair, {"M": made.in_vessel_kg / total, "B": 300.0 / total}, law="refutas").predicted
    for code in ("kv40", "kv100", "vi"):
        assert ahead.predicted[code] == pytest.approx(by_hand[code], rel=1e-12)


def test_random_overcharges_are_put_right_or_said_not_to_be(plant):
    """Whatever is charged, a remedy that is given meets every limit with its guard and keeps the treat rate."""
    import random

    rng = random.Random(4)
    target = targets.target_of(plant, "P")
    assert isinstance(target, Target)
    given = 0
    for n in range(12):
        name = f"R-{n}"
        ordered(plant, "P", {"A": 3000.0, "B": 400.0, "C": 1420.0, "ADD": 180.0}, name=name)
        number = rng.randint(1, 3)
        plan = line(plant, number, name).plan_kg
        done = charging.charge(plant, name, number, round(plan * rng.uniform(0.3, 2.5)), sure=True)
        if done.remedy is None:
            assert done.outlook.good or done.outlook.remedy_words
        else:
            given += 1
            recipe = done.remedy.recipe
            assert all(x.met for x in recipe.limits)
            total = done.remedy.total_kg
            assert abs(done.remedy.additions_kg.get("ADD", 0.0) - 0.036 * total) <= 90.0 + 0.036 * 200.0
        charging.correct(plant, name, number, 0, why="only a test", sure=True)
        head = plant.batch(name)
        plant.step(lambda made=head: Step(tuple(changed(c, state=DROPPED) for c in plant.batch(made.name).to_charge),
                                          "emptied"))
    assert given >= 6


@pytest.mark.parametrize("seed", range(4))
def test_whatever_is_done_the_book_and_the_batch_say_the_same(plant, seed):
    """Random steps, refused ones too: tanks, promises and vessel stay sums of each other, and the record verifies."""
    import random

    rng = random.Random(seed)
    start = {s.code: s.on_hand_kg for s in plant.stocks()}
    refused = done = 0
    for _ in range(25):
        row = rng.choice(plant.batch("B-0001").charges)
        kg, sure = round(row.plan_kg * rng.choice((1.0, 1.001, 1.2, 0.5, 10.0, -1.0)), 3), rng.random() < 0.4
        step = plant.undo if done and rng.random() < 0.15 else rng.choice((
            lambda: charging.charge(plant, "B-0001", row.line, kg, sure=sure),  # noqa: B023
            lambda: charging.correct(plant, "B-0001", row.line, kg, why="x", sure=sure),  # noqa: B023
            lambda: charging.correct(plant, "B-0001", row.line, 0, why="x", sure=sure),  # noqa: B023
            lambda: charging.miss(plant, "B-0001", row.line, why="x"),  # noqa: B023
            lambda: charging.check(plant, "B-0001", row.line, by="Ben"),  # noqa: B023
            lambda: charging.replan(plant, "B-0001")))
        before = plant.revision()
        try:
            step()
            done += -1 if step == plant.undo else 1
        except (DeskError, PlantError):
            refused += 1
            assert plant.revision() == before
        made = plant.batch("B-0001")
        for stock in plant.stocks():
            charged = sum(c.actual_kg or 0.0 for c in made.charged if c.stock == stock.code)
            assert stock.on_hand_kg == pytest.approx(start[stock.code] - charged, abs=1e-6)
            assert stock.reserved_kg == pytest.approx(sum(c.plan_kg for c in made.to_charge if c.stock == stock.code))
        assert made.in_vessel_kg == pytest.approx(sum(c.actual_kg or 0.0 for c in made.charged))
        assert all(c.checked_by == "" or not batches.same_person(c.by, c.checked_by) for c in made.charges)
    assert 0 < refused < 25
    assert plant.verify() is None
