"""What of a batch can be taken back, by whom and when; and what stands for good once it is closed."""

from __future__ import annotations

import pytest

from blendtui.store.batch_edits import added, changed
from blendtui.store.batch_records import CANCELLED, HEEL, LEFT, REWORKED, Content, Decision, Outcome
from blendtui.store.edits import stock_cell
from blendtui.store.errors import BuiltOn, ChangedSince, Closed, PlantError
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.state import change_of
from tests.store.batch_steps import charge, check, close, dip, order, pack, receive, sample


@pytest.fixture
def other(path, plant):
    """The same plant opened by bertil."""
    with open_plant(path, who="bertil", timeout=0.2) as opened:
        yield opened


def on_hand(plant: Plant, code: str = "A") -> float | None:
    return plant.stock(code).on_hand_kg


# Steps are taken back, and quantities by what they moved

def test_every_step_of_an_open_batch_goes_back_and_forth(plant):
    receive(plant, "A", "L1", 1000.0)
    states = [plant.state()]
    for step in (lambda: order(plant, "B-0001", ("A", 500.0), ("B", 300.0)), lambda: charge(plant, "B-0001", 1, 510.0),
                 lambda: charge(plant, "B-0001", 2, 300.0), lambda: sample(plant, "B-0001")):
        step()
        states.append(plant.state())
    for state in reversed(states[:-1]):
        plant.undo()
        assert plant.state() == state
    for state in states[1:]:
        plant.redo()
        assert plant.state() == state
    assert plant.verify() is None


def test_a_charge_is_taken_back_by_what_it_moved_though_others_moved_the_stock_since(plant, other):
    order(plant, "B-0001", ("A", 500.0))
    charge(plant, "B-0001", 1, 500.0)
    assert on_hand(plant) == 39_500.0
    receive(other, "A", "L9", 2000.0)
    other.change([stock_cell(other.stock("B"), "on_hand_kg", 7.0)], "B counted")
    assert plant.undo() == "undone: B-0001 charge 1: 500 kg of A"
    assert on_hand(plant) == 42_000.0
    dip(other, "A", 41_000.0)
    assert plant.redo() == "done again: B-0001 charge 1: 500 kg of A"
    assert on_hand(plant) == 40_500.0
    assert [m.kg for m in plant.movements("A")] == [40_000.0, -500.0, 2000.0, 500.0, -1000.0, -500.0]
    assert plant.verify() is None


def test_receipts_and_dips_go_back_by_steps_too(plant, other):
    receive(plant, "A", "L1", 5000.0)
    other.change([stock_cell(other.stock("A"), "on_hand_kg", 20_000.0)], "counted")
    plant.undo()
    assert (on_hand(plant), plant.tank_lots("A"), plant.lots("A")) == (15_000.0, {}, [])
    dip(plant, "A", 14_000.0)
    order(other, "B-0001", ("A", 500.0))
    charge(other, "B-0001", 1, 500.0)
    plant.undo()
    assert on_hand(plant) == 14_500.0
    assert plant.verify() is None


def test_two_charges_of_one_tank_in_one_entry_go_back(plant):
    order(plant, "B-0001", ("A", 500.0), ("A", 200.0))
    first, second = plant.batch("B-0001").charges
    mg = 40_000_000_000
    plant.change([changed(first, state="done", actual_kg=500.0), changed(second, state="done", actual_kg=200.0),
                  change_of("quantity", ("A",), {"mg": mg}, {"mg": mg - 500_000_000}),
                  change_of("quantity", ("A",), {"mg": mg - 500_000_000}, {"mg": mg - 700_000_000})], "both")
    assert on_hand(plant) == 39_300.0
    plant.undo()
    assert on_hand(plant) == 40_000.0
    assert plant.verify() is None


def test_a_quantity_that_nobody_knows_any_more_stays_unknown(plant, other):
    order(plant, "B-0001", ("A", 500.0))
    charge(plant, "B-0001", 1, 500.0)
    other.change([stock_cell(other.stock("A"), "on_hand_kg", None)], "nobody knows")
    plant.undo()
    assert on_hand(plant) is None
    assert plant.batch("B-0001").charges[0].state == "planned"
    assert plant.verify() is None


def test_a_receipt_that_has_gone_out_is_not_taken_back(plant, other):
    receive(plant, "A", "L1", 5000.0)
    other.change([stock_cell(other.stock("A"), "on_hand_kg", 4000.0)], "counted")
    with pytest.raises(BuiltOn, match=r"^A: 5,000\.0 kg cannot be taken back from 4,000\.0 kg; some of it has gone"):
        plant.undo()
    assert on_hand(plant) == 4000.0


def test_a_charge_of_more_than_the_book_says_goes_back_and_forth(plant):
    order(plant, "B-0001", ("A", 500.0))
    plant.change([stock_cell(plant.stock("A"), "on_hand_kg", 500.0)], "counted")
    charge(plant, "B-0001", 1, 520.0)
    plant.undo()
    assert on_hand(plant) == 500.0
    plant.redo()
    assert on_hand(plant) == -20.0


def test_a_quantity_that_was_typed_still_goes_back_only_to_what_it_was(plant, other):
    plant.change([stock_cell(plant.stock("A"), "on_hand_kg", 30_000.0)], "counted")
    order(other, "B-0001", ("A", 500.0))
    charge(other, "B-0001", 1, 500.0)
    with pytest.raises(ChangedSince, match=r"^A: bertil changed it at .* \(B-0001 charge 1: 500 kg of A\)"):
        plant.undo()


# What rests on a step holds it

def test_a_charge_that_another_has_checked_is_not_taken_back(plant, other):
    order(plant, "B-0001", ("A", 500.0))
    charge(plant, "B-0001", 1, 500.0)
    check(other, "B-0001", 1)
    with pytest.raises(ChangedSince) as caught:
        plant.undo()
    assert str(caught.value).startswith("B-0001 charge 1: bertil changed it at ")
    assert (caught.value.who, caught.value.what) == ("bertil", "B-0001 charge 1 checked")
    other.undo()
    plant.undo()
    assert on_hand(plant) == 40_000.0


def test_a_charge_before_a_sample_is_not_taken_back(plant, other):
    order(plant, "B-0001", ("A", 500.0))
    charge(plant, "B-0001", 1, 500.0)
    sample(other, "B-0001")
    with pytest.raises(BuiltOn, match=r"^B-0001 sample 1: bertil put it on record at .*; correct the step instead"):
        plant.undo()
    assert on_hand(plant) == 39_500.0
    other.undo()
    plant.undo()
    assert on_hand(plant) == 40_000.0


def test_a_second_check_or_a_plan_is_taken_back_although_a_sample_was_drawn(plant, other):
    order(plant, "B-0001", ("A", 500.0), ("B", 20.0))
    charge(plant, "B-0001", 1, 500.0)
    check(plant, "B-0001", 1)
    plant.change([changed(plant.batch("B-0001").charges[1], state="dropped")], "B-0001 charge 2 dropped")
    sample(other, "B-0001")
    assert plant.undo() == "undone: B-0001 charge 2 dropped"
    assert plant.undo() == "undone: B-0001 charge 1 checked"
    with pytest.raises(BuiltOn, match=r"^B-0001 sample 1: bertil put it on record"):
        plant.undo()


def test_a_correction_after_the_sample_is_taken_back(plant):
    order(plant, "B-0001", ("A", 500.0))
    charge(plant, "B-0001", 1, 500.0)
    sample(plant, "B-0001")
    plant.change([changed(plant.batch("B-0001").charges[0], actual_kg=510.0)], "B-0001 charge 1 corrected")
    plant.undo()
    assert plant.batch("B-0001").charges[0].actual_kg == 500.0


def test_a_receipt_that_is_in_a_batch_is_not_taken_back(plant, other):
    receive(plant, "A", "L1", 5000.0)
    order(other, "B-0001", ("A", 500.0))
    charge(other, "B-0001", 1, 500.0)
    with pytest.raises(BuiltOn, match=r"^A lot L1 is in B-0001 charge 1 already; correct the receipt instead"):
        plant.undo()
    other.undo()
    plant.undo()
    assert on_hand(plant) == 40_000.0


def test_an_order_on_which_another_has_charged_is_not_taken_back(plant, other):
    order(plant, "B-0001", ("A", 500.0))
    charge(other, "B-0001", 1, 500.0)
    with pytest.raises(ChangedSince, match=r"^B-0001 charge 1: bertil changed it at "):
        plant.undo()


def test_a_dropped_line_does_not_come_back_when_its_oil_was_promised_since(plant, other):
    order(plant, "B-0001", ("A", 30_000.0))
    (line,) = plant.batch("B-0001").charges
    plant.change([changed(line, state="dropped")], "B-0001 charge 1 dropped")
    order(other, "B-0002", ("A", 25_000.0))
    with pytest.raises(PlantError, match=r"^A: 30,000\.0 kg are planned and 15,000\.0 kg are free; the rest is "
                                         r"promised to B-0002 \(bertil\)"):
        plant.undo()
    assert plant.batch("B-0001").charges[0].state == "dropped"
    assert plant.stock("A").reserved_kg == 25_000.0


# A closed batch stands

@pytest.mark.parametrize("state", ["released", CANCELLED, REWORKED])
def test_closing_is_never_undone_and_nothing_under_it(plant, state):
    order(plant, "B-0007", ("A", 500.0))
    charge(plant, "B-0007", 1, 500.0)
    close(plant, "B-0007", state)
    before = plant.state()
    with pytest.raises(Closed) as caught:
        plant.undo()
    assert str(caught.value) == f"B-0007 is {state}: its record stands; a correction is a new entry"
    assert plant.state() == before


def test_what_one_did_before_another_closed_it_is_not_undone(plant, other):
    order(plant, "B-0007", ("A", 500.0))
    charge(plant, "B-0007", 1, 500.0)
    close(other, "B-0007")
    with pytest.raises(Closed, match=r"^B-0007 is released: its record stands"):
        plant.undo()
    plant.change([stock_cell(plant.stock("B"), "price_per_t", 900.0)], "price of B")
    assert plant.undo() == "undone: price of B"


def test_an_undone_charge_is_not_done_again_once_the_batch_is_closed(plant, other):
    order(plant, "B-0007", ("A", 500.0))
    charge(plant, "B-0007", 1, 500.0)
    plant.undo()
    close(other, "B-0007", CANCELLED)
    with pytest.raises(Closed):
        plant.redo()
    assert on_hand(plant) == 40_000.0


def test_no_entry_changes_what_stands(plant):
    order(plant, "B-0007", ("A", 500.0))
    charge(plant, "B-0007", 1, 500.0)
    sample(plant, "B-0007")
    close(plant, "B-0007")
    made = plant.batch("B-0007")
    for change in (changed(made.charges[0], actual_kg=1.0), changed(made.results[0], withdrawn="slip"),
                   changed(made.samples[0], note="x"), changed(made.head, state="open"), changed(made.head, asked=2.0)):
        with pytest.raises(Closed, match=r"^B-0007 is released: its record stands; a correction is a new entry$"):
            plant.change([change], "late")
    with pytest.raises(Closed):
        sample(plant, "B-0007")
    assert plant.batch("B-0007") == made


def test_packing_decisions_notes_and_lots_may_follow(plant):
    order(plant, "B-0007", ("A", 500.0))
    close(plant, "B-0007")
    pack(plant, "B-0007", 400.0)
    pack(plant, "B-0007", 40.0)
    plant.undo()
    plant.change(added(Decision("B-0007", 1, 0, "release", "the customer asked again", "2026-01-01T00:00:00Z", "anna")),
                 "decided")
    plant.change([changed(plant.batch("B-0007").head, note="drum 3 leaks")], "noted")
    with pytest.raises(Closed):  # a decision on a closed batch stands, and another one corrects it
        plant.change([changed(plant.batch("B-0007").decisions[0], words="no")], "other words")
    receive(plant, "B", "RET-7", 50.0)
    made = plant.batch("B-0007")
    assert ([o.kg for o in made.outcomes], len(made.decisions), made.head.note) == ([400.0], 1, "drum 3 leaks")
    assert plant.verify() is None


def test_a_decision_after_the_release_is_final(plant):
    order(plant, "B-0007", ("A", 500.0))
    close(plant, "B-0007")
    plant.change(added(Decision("B-0007", 1, 0, "repeat", "", "2026-01-01T00:00:00Z", "anna")), "decided")
    with pytest.raises(Closed, match=r"^B-0007 is released: its record stands"):
        plant.undo()


def test_the_oil_of_a_cancelled_batch_may_become_rework_and_that_stands(plant):
    order(plant, "B-0007", ("A", 500.0))
    charge(plant, "B-0007", 1, 500.0)
    close(plant, "B-0007", CANCELLED)
    close(plant, "B-0007", REWORKED)
    assert plant.batch("B-0007").head.state == REWORKED
    with pytest.raises(Closed, match=r"^B-0007 is reworked: its record stands"):
        plant.undo()
    with pytest.raises(Closed):
        close(plant, "B-0007", CANCELLED)


def test_a_heel_that_the_next_batch_began_with_is_not_taken_back(plant, other):
    order(plant, "B-0007", ("A", 500.0))
    close(plant, "B-0007")
    plant.change(added(Outcome("B-0007", 1, LEFT, 90.0)), "B-0007 leaves a heel")
    order(other, "B-0008", ("A", 500.0))
    other.change(added(Content("B-0008", 1, HEEL, "B-0007", 90.0)), "B-0008 begins with a heel")
    with pytest.raises(BuiltOn, match=r"^B-0007 outcome 1 is the heel of B-0008 already; correct it instead"):
        plant.undo()
    other.undo()
    plant.undo()
    assert plant.batch("B-0007").outcomes == ()
