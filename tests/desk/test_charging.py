"""Charging: actuals as they happen, what is refused, questioned or told of them, and what would put the batch right."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import datetime, timedelta
from pathlib import Path

import pytest

from blendtui.desk import batches, charging
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import DONE, HEEL, PLANNED, Content, Lot, Sample
from blendtui.store.errors import NoSuchRow
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.errors import SolverError
from solver.recipe import evaluate
from solver.volume import density_at
from tests.desk.charging_plant import PLAN, line, lots_in, waiting
from tests.desk.made_batches import at, ordered, put


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with waiting(tmp_path) as opened:
        yield opened


# A charge as planned

def test_a_charge_is_one_step_of_line_lots_and_tank(plant):
    lots_in(plant, "A", L7=0.6, L5=0.4)
    before = plant.revision()
    done = charging.charge(plant, "B-0001", 1, 6010.0, by="Ben", celsius=35.0)
    row = line(plant, 1)
    assert (row.state, row.actual_kg, row.by, row.celsius, row.checked_by) == (DONE, 6010.0, "Ben", 35.0, "")
    assert row.lots == {"L7": 0.6, "L5": 0.4}
    assert row.cells == batches.cells_of(plant.stock("A"))
    assert row.at >= at(6)
    assert (plant.stock("A").on_hand_kg, plant.stock("A").reserved_kg) == (53990.0, 0.0)
    assert plant.revision() == before + 1
    assert plant.verify() is None
    assert (done.line, done.odd, done.remedy) == (row, False, None)
    assert done.words == ("line 1, A: 6010 kg charged, 6000 kg planned",
                          "the tank holds lots L7 60.00 %, L5 40.00 %: the charge is recorded so")
    was, now = done.effects["kv40"]
    assert now < was < now + 0.05
    assert [c.line for c in plant.charges_of(lot="L5")] == [1]


def test_the_outlook_is_the_law_over_what_is_in_and_what_is_to_come(plant):
    charging.charge(plant, "B-0001", 1, 6200.0)
    ahead = charging.outlook(plant, plant.batch("B-0001"))
    masses = {**PLAN, "A": 6200.0}
    total = sum(masses.values())
    plain = evaluate(plant.stocks(), {code: kg / total for code, kg in masses.items()}, law="refutas").predicted
    assert ahead.total_kg == total
    for code in ("kv40", "kv100", "vi", "density15", "flash"):
        assert ahead.predicted[code] == pytest.approx(plain[code], rel=1e-12), code
    assert ahead.fill_l == pytest.approx(1000.0 * total / float(density_at(plain["density15"], 60.0)))


def test_what_was_charged_keeps_the_values_it_had(plant):
    charging.charge(plant, "B-0001", 1, 6000.0)
    before = charging.outlook(plant, plant.batch("B-0001")).predicted["kv40"]
    from blendtui.desk.stocks import edit_cell

    assert edit_cell(plant, "A", "kv40", "29.9", True).status == "saved"
    assert charging.outlook(plant, plant.batch("B-0001")).predicted["kv40"] == before


# As typed

@pytest.mark.parametrize(("typed", "celsius", "kg"), [
    ("6010", None, 6010.0), ("6.01 t", None, 6010.0), ("13250 lb", None, 6010.09890),
    ("7000 L", 35.0, 7.0 * float(density_at(868.0, 35.0)))])
def test_an_actual_may_be_typed_with_its_unit(plant, typed, celsius, kg):
    charging.charge(plant, "B-0001", 1, typed, celsius=celsius)
    assert line(plant, 1).actual_kg == pytest.approx(kg, abs=1e-3)


def test_ten_degrees_are_worth_0_7_percent_of_a_volume(plant):
    # Common practice (practice table): 10 °C ignored is 0.7 % of the volume.
    charging.charge(plant, "B-0001", 1, "7000 L", celsius=15.0)
    cold = line(plant, 1).actual_kg
    charging.correct(plant, "B-0001", 1, "7000 L", celsius=25.0, why="the tank was at 25")
    assert 100.0 * (cold - line(plant, 1).actual_kg) / cold == pytest.approx(0.7, abs=0.05)


@pytest.mark.parametrize(("typed", "words"), [
    (-3.0, "-3 kg cannot have been charged; where nothing was, drop the line with its reason"),
    (0.0, "0 kg cannot have been charged"), (float("nan"), "no mass"), (float("inf"), "no mass"), ("", "not a number"),
    ("nan", "not a number"), ("12,5", "comma"), ("5 barrels", "unit"), ("3 drums", "comes in bulk"),
    ("-3 t", "cannot have"), ("1e99", "is more than")])
def test_what_is_no_mass_is_refused(plant, typed, words):
    plant.step(lambda: Step((changed(line(plant, 1), celsius=None),), "no temperature"))
    with pytest.raises((DeskError, SolverError), match=words):
        charging.charge(plant, "B-0001", 1, typed, sure=True)
    assert (line(plant, 1).state, plant.stock("A").on_hand_kg) == (PLANNED, 60000.0)


def test_litres_need_a_temperature(plant):
    plant.step(lambda: Step((changed(line(plant, 1), celsius=None),), "no temperature"))
    with pytest.raises(DeskError, match="7000 L of A at which temperature"):
        charging.charge(plant, "B-0001", 1, "7000 L")


@pytest.mark.parametrize(("typed", "kg", "words"), [
    ("2 drums", 360.0, None), ("1 drum", 180.0, "1 of 2 packages of 180 kg: 1 is missing"),
    ("3 drums", 540.0, "3 of 2 packages of 180 kg: 1 too many; was one charged twice?"),
    ("300", 300.0, "1.67 of 2 packages of 180 kg: part of one; weigh what is left in it")])
def test_a_missed_or_doubled_drum_is_told(plant, typed, kg, words):
    done = charging.charge(plant, "B-0001", 4, typed, lot="D1")
    assert line(plant, 4).actual_kg == kg
    told = [x for x in done.words if "packages" in x]
    assert told == ([] if words is None else [words])
    assert done.odd is (words is not None)
    assert any(x.startswith("MISSES ADD") for x in done.words) is (words is not None)


# Outside tolerance

def test_a_charge_outside_tolerance_goes_through_and_is_told_with_its_remedy(plant):
    done = charging.charge(plant, "B-0001", 1, 6900.0, by="Ben")
    assert line(plant, 1).actual_kg == 6900.0
    assert done.words[0] == ("OUTSIDE TOLERANCE: line 1, A: 6900 kg charged, 6000 kg planned: 900 kg (15.0 %) too "
                             "much, the tolerance is 30.0 kg")
    assert any(x.startswith("planned → now: KV40 50.78 → 48.58 mm²/s, KV100 ") for x in done.words)
    assert "MISSES KV40 48.58 mm²/s, low 49.50" in done.words
    assert done.words[-1].startswith("would bring every limit back: ")
    assert done.remedy is not None
    # The remedy as it is recomputed: every limit with its guard, the treat rate to half a drum.
    assert all(x.met for x in done.remedy.recipe.limits)
    assert {"ADD", "B"} & set(done.remedy.additions_kg)
    for code in ("kv40", "kv100", "vi"):
        was, now = done.effects[code]
        assert now == pytest.approx(done.outlook.predicted[code])
        assert was is not None


def test_the_remedy_planned_anew_is_what_the_batch_then_is(plant):
    done = charging.charge(plant, "B-0001", 2, 1100.0)  # of the heavy oil 300 kg too much
    assert "MISSES KV40 53.52 mm²/s, high 52.50" in done.words
    remedy = dict(done.remedy.additions_kg)
    made = charging.replan(plant, "B-0001", by="Ben", why="bright stock over")
    assert {c.stock: c.plan_kg for c in made.to_charge} == remedy
    assert made.head.batch_kg == pytest.approx(done.remedy.total_kg)
    assert plant.journal(1)[0].why == "bright stock over"
    assert plant.stock("A").reserved_kg == pytest.approx(remedy.get("A", 0.0))
    ahead = charging.outlook(plant, made)
    assert ahead.good, ahead.words
    for code in ("kv40", "vi"):
        assert ahead.predicted[code] == pytest.approx(done.remedy.recipe.predicted[code], rel=1e-9)
    with pytest.raises(DeskError, match="nothing is to be planned anew"):
        charging.replan(plant, "B-0001")
    assert plant.verify() is None


def test_a_charge_within_tolerance_changes_no_plan(plant):
    charging.charge(plant, "B-0001", 1, 6020.0)
    with pytest.raises(DeskError, match="every limit is met with its guard as it is planned"):
        charging.replan(plant, "B-0001")


def test_the_last_charge_leaves_it_to_the_laboratory(plant):
    for number, kg in ((1, 6000.0), (2, 800.0), (3, 2840.0)):
        charging.charge(plant, "B-0001", number, kg)
    done = charging.charge(plant, "B-0001", 4, 180.0)
    assert done.remedy is None
    assert done.words[-1] == "nothing more is to be charged: the laboratory decides, and a trim would put it right"
    with pytest.raises(DeskError, match="nothing more is to be charged"):
        charging.replan(plant, "B-0001")


def test_a_stock_on_two_lines_keeps_their_proportions(plant):
    from blendtui.store.batch_records import Charge

    plant.step(lambda: Step((changed(line(plant, 1), plan_kg=5000.0),), "part"))
    put(plant, Charge("B-0001", 5, 0, "A", "", 1000.0, 10.0, position=99))
    charging.charge(plant, "B-0001", 2, 1100.0)
    made = charging.replan(plant, "B-0001")
    first, last = (next(c for c in made.charges if c.line == n) for n in (1, 5))
    assert (first.plan_kg + last.plan_kg) % 10.0 == pytest.approx(0.0, abs=1e-6)
    assert first.plan_kg / (first.plan_kg + last.plan_kg) == pytest.approx(5.0 / 6.0, abs=0.002)


def test_an_ignored_heel_takes_room_and_no_part_in_the_sums(plant):
    heel = Content("B-0002", 1, HEEL, "B", 200.0, cells=batches.cells_of(plant.stock("B")))
    ordered(plant, "P", PLAN, name="B-0002", contents=(heel,), heel_ignored="same family")
    made = plant.batch("B-0002")
    ahead = charging.outlook(plant, made)
    assert (made.head.batch_kg, ahead.total_kg) == (10200.0, 10200.0)
    assert ahead.predicted["kv40"] == pytest.approx(50.77501445814014, rel=1e-9)  # as without a heel
    done = charging.charge(plant, "B-0002", 2, 1100.0)
    assert done.remedy.total_kg == pytest.approx(10000.0, abs=5.0)  # of what the sums are about
    assert charging.replan(plant, "B-0002").head.batch_kg == pytest.approx(10200.0, abs=5.0)


def test_the_remedy_is_weighed_as_the_vessel_weighs(plant):
    ordered(plant, "P", PLAN, name="B-0002", vessel="K9")
    done = charging.charge(plant, "B-0002", 2, 1100.0)
    steps = {code: kg % 50.0 for code, kg in done.remedy.additions_kg.items() if code != "ADD"}
    assert steps
    assert set(steps.values()) == {0.0}


def test_a_new_oil_comes_before_what_is_charged_after_it(plant):
    """With C gone the remedy needs another oil, and it goes in before the package."""
    charging.charge(plant, "B-0001", 1, 6900.0)
    charging.miss(plant, "B-0001", 2, why="pump down")
    made = charging.replan(plant, "B-0001")
    to_come = [c.stock for c in made.to_charge]
    assert to_come.index("B") < to_come.index("ADD")
    assert [c.position for c in made.to_charge] == sorted({c.position for c in made.to_charge})
    assert min(c.position for c in made.to_charge) > line(plant, 1).position
    fresh = next(c for c in made.to_charge if c.stock == "B")
    assert (fresh.line > 4, fresh.round, fresh.why) == (True, 0, "planned anew by anna")
    assert fresh.tolerance_kg == max(0.005 * fresh.plan_kg, 5.0)
    assert charging.outlook(plant, made).good


def test_others_who_lose_their_promise_are_named(plant):
    ordered(plant, "P", {"D": 1000.0, "C": 16000.0}, name="B-0002")
    done = charging.charge(plant, "B-0001", 3, 4000.0)
    assert any(x.startswith("C: 500 kg that were promised to B-0002 are no longer there") for x in done.words)


# What is questioned

@pytest.mark.parametrize(("number", "kg", "said", "words"), [
    (2, 8000.0, {}, "8000 kg is 10 times the planned 800 kg: has the point slipped by one place"),
    (2, 80.0, {}, "80.0 kg is 0.10 times the planned 800 kg: has the point slipped"),
    (2, 4500.0, {}, r"4500 kg is 5\.6 times the planned 800 kg\.$"),
    (3, 20500.0, {}, "by the book the tank holds 20000 kg, less than the 20500 kg typed; dip it"),
    (1, 13000.0, {}, "the vessel K1 would hold 15486 L at 60 °C, and it takes 14000 L"),
    (1, 6000.0, {"celsius": 185.0}, "A at 185 °C is past the site's margin of 30 °C to it .*: site procedure decides"),
    (1, 6000.0, {"celsius": 185.0}, "no temperature of a tank or drum"),
    (1, 6000.0, {"celsius": -40.0}, "no temperature of a tank or drum"),
    (1, 6000.0, {"stock": "B", "why": "x"}, "B in place of A: it is on the list of P"),
    (1, 6000.0, {"stock": "D", "why": "x"}, "D in place of A: NOT on the list of P; the same viscosity is not perm")])
def test_what_is_unlikely_is_questioned_and_goes_through(plant, number, kg, said, words):
    with pytest.raises(Questioned, match=words):
        charging.charge(plant, "B-0001", number, kg, **said)
    assert (line(plant, number).state, plant.stock("A").on_hand_kg) == (PLANNED, 60000.0)
    charging.charge(plant, "B-0001", number, kg, **said, sure=True)
    assert line(plant, number).actual_kg == kg
    assert plant.verify() is None


def test_a_lot_that_is_not_in_the_tank_is_questioned_and_recorded(plant):
    lots_in(plant, "A", L7=1.0)
    put(plant, Lot("D", "X9", at(5), 5000.0))
    with pytest.raises(Questioned, match=r"lot X9 is not in A, which holds L7 100\.00 %; X9 was received as D"):
        charging.charge(plant, "B-0001", 1, 6000.0, lot="X9")
    done = charging.charge(plant, "B-0001", 1, 6000.0, lot="X9", sure=True)
    assert (line(plant, 1).actual_lot, line(plant, 1).lots) == ("X9", {"X9": 1.0})
    assert "lot X9 is recorded as typed; by the record it is not in A" in done.words
    assert plant.tank_lots("A") == {"L7": 1.0}


def test_a_wrong_lot_shows_what_its_own_values_do(plant):
    lots_in(plant, "ADD", N1=0.5, N2=0.5)
    put(plant, Lot("ADD", "OLD", at(5), 180.0, cells={"kv40": 300.0, "kv100": 25.0}))
    plant.step(lambda: Step((changed(line(plant, 4), lot="N1"),), "planned lot"))
    done = charging.charge(plant, "B-0001", 4, "2 drums", lot="OLD", sure=True)
    assert "WRONG LOT: N1 was planned, OLD was charged" in done.words
    assert line(plant, 4).cells["kv40"] == 300.0
    assert done.odd
    was, now = done.effects["kv40"]
    assert now > was + 0.5


def test_the_only_lot_of_a_tank_needs_no_typing_and_an_unknown_one_is_asked_for(plant):
    lots_in(plant, "A", L7=1.0)
    charging.charge(plant, "B-0001", 1, 6000.0)
    assert (line(plant, 1).actual_lot, line(plant, 1).lots) == ("L7", {"L7": 1.0})
    done = charging.charge(plant, "B-0001", 2, 800.0)
    assert "the lot of B is not known: type it, for a release needs it" in done.words
    charging.charge(plant, "B-0001", 3, 2840.0, lot="K3")
    assert line(plant, 3).lots == {"K3": 1.0}


def test_drums_of_one_lot_leave_the_others(plant):
    lots_in(plant, "ADD", N1=0.1, N2=0.9)  # 360 and 3240 kg
    charging.charge(plant, "B-0001", 4, "2 drums", lot="N1")
    assert line(plant, 4).lots == {"N1": 1.0}
    assert plant.tank_lots("ADD") == {"N2": 1.0}
    charging.correct(plant, "B-0001", 4, "1 drum", why="one stood there still")
    assert plant.tank_lots("ADD") == pytest.approx({"N1": 180.0 / 3420.0, "N2": 3240.0 / 3420.0})
    assert plant.stock("ADD").on_hand_kg == 3420.0


def test_another_stock_is_recorded_only_with_its_reason(plant):
    with pytest.raises(DeskError, match=r"^D in place of A is recorded only with its reason; type why$"):
        charging.charge(plant, "B-0001", 1, 6000.0, stock="D", sure=True)
    with pytest.raises(DeskError, match="the plant has no stock 'ZZ'"):
        charging.charge(plant, "B-0001", 1, 6000.0, stock="ZZ", sure=True)
    done = charging.charge(plant, "B-0001", 1, 6000.0, stock="D", sure=True, why="tank 3 empty", by="Ben")
    row = line(plant, 1)
    assert (row.stock, row.why, row.cells["kv40"]) == ("D", "D in place of A: tank 3 empty", 31.0)
    assert (plant.stock("A").on_hand_kg, plant.stock("D").on_hand_kg) == (60000.0, 14000.0)
    assert plant.stock("A").reserved_kg == 0.0
    assert "MISSES D is not on the product's list: the formulator decides" in done.words
    assert any("the same viscosity is not permission" in x for x in done.words)


def test_a_line_that_is_charged_names_who_did_it(plant):
    charging.charge(plant, "B-0001", 1, 6000.0, by="Ben")
    when = batches.when(line(plant, 1).at)
    with pytest.raises(DeskError, match=f"^Ben charged 6000 kg of A on line 1 at {when}; to mend it: blendtui batch "
                                        "correct B-0001 1 KG --why TEXT$"):
        charging.charge(plant, "B-0001", 1, 6000.0, sure=True)
    assert plant.stock("A").on_hand_kg == 54000.0


def test_two_at_the_same_line_the_second_is_told_who_was_quicker(plant):
    with open_plant(plant.path, who="ben") as other:
        assert other.batch("B-0001").to_charge[0].line == 1
        charging.charge(plant, "B-0001", 1, 6000.0)
        with pytest.raises(DeskError, match="anna charged 6000 kg of A on line 1"):
            charging.charge(other, "B-0001", 1, 6010.0)
        charging.charge(other, "B-0001", 2, 800.0)
    assert (plant.stock("A").on_hand_kg, plant.stock("B").on_hand_kg) == (54000.0, 59200.0)
    assert [c.by for c in plant.batch("B-0001").charged] == ["anna", "ben"]
    assert plant.verify() is None


def test_a_plan_that_was_solved_for_another_state_is_not_taken(plant, monkeypatch):
    charging.charge(plant, "B-0001", 2, 1100.0)
    solve = charging.with_remedy

    def slow(*given: object) -> object:
        found = solve(*given)
        charging.charge(plant, "B-0001", 1, 6000.0)
        return found

    monkeypatch.setattr(charging, "with_remedy", slow)
    with pytest.raises(DeskError, match="B-0001 has changed meanwhile; look at it again and plan anew"):
        charging.replan(plant, "B-0001")
    assert plant.batch("B-0001").head.batch_kg == 10000.0


def test_lines_and_batches_that_are_not_there(plant):
    with pytest.raises(DeskError, match=r"^B-0001 has no line 9; its lines are 1 A, 2 B, 3 C, 4 ADD$"):
        charging.charge(plant, "B-0001", 9, 10.0)
    with pytest.raises(NoSuchRow, match="no batch 'B-7'; the latest are B-0001"):
        charging.charge(plant, "B-7", 1, 10.0)
    head = plant.batch("B-0001").head
    plant.step(lambda: Step((changed(head, state="cancelled", closed_by="bob", closed_at=at(9)),), "cancelled"))
    with pytest.raises(DeskError, match="B-0001 is cancelled"):
        charging.charge(plant, "B-0001", 1, 6000.0)


def test_out_of_order_is_said_and_not_refused(plant):
    done = charging.charge(plant, "B-0001", 4, "2 drums", lot="D1")
    assert "out of order: line 1 (A), line 2 (B), line 3 (C) are planned before it and still to come" in done.words
    assert any(x.startswith("ADD is the first in the vessel: concentrates are never mixed neat") for x in done.words)


def test_a_package_onto_a_heel_is_not_neat(plant):
    put(plant, Content("B-0001", 1, HEEL, "A", 300.0, cells=batches.cells_of(plant.stock("A"))))
    done = charging.charge(plant, "B-0001", 4, "2 drums", lot="D1")
    assert not any("neat" in x for x in done.words)


def test_a_charge_after_the_sample_says_that_the_sample_is_old(plant):
    charging.charge(plant, "B-0001", 1, 6000.0)
    put(plant, Sample("B-0001", 1, 0, at(9), "carl"))
    done = charging.charge(plant, "B-0001", 2, 800.0)
    assert any(x.startswith("sample 1 was drawn before this charge and no longer speaks") for x in done.words)


def test_a_clock_that_was_set_back_is_questioned(plant):
    ahead = f"{datetime.now().astimezone() + timedelta(days=2):%Y-%m-%dT%H:%M}:00.000Z"
    put(plant, Sample("B-0001", 1, 0, ahead, "carl"))
    with pytest.raises(Questioned, match="was the clock set back"):
        charging.charge(plant, "B-0001", 1, 6000.0)
    assert charging.charge(plant, "B-0001", 1, 6000.0, sure=True).line.state == DONE


def test_a_batch_that_cannot_be_predicted_is_charged_all_the_same(plant):
    from blendtui.desk.stocks import edit_cell

    assert edit_cell(plant, "C", "kv100", "", True).status == "saved"
    done = charging.charge(plant, "B-0001", 1, 6900.0)
    assert line(plant, 1).actual_kg == 6900.0
    assert done.words[-1].startswith("it cannot be predicted: C: the law refutas needs its kv40")
    assert (done.effects, done.remedy) == ({}, None)
