"""Several people at one plant: what one takes back must not take away what another has put on it since."""

from __future__ import annotations

import pytest

from blendtui.desk import stocks as desk
from blendtui.desk import targets
from blendtui.store import edits, opening
from blendtui.store.batch_edits import added, changed
from blendtui.store.batch_records import Sample
from blendtui.store.errors import ChangedSince
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.state import change_of
from solver.stocks import Stock
from tests.store.batch_steps import order, sample


@pytest.fixture
def other(path, plant):
    """The same plant opened by bertil."""
    with open_plant(path, who="bertil", timeout=0.2) as opened:
        yield opened


def refused(act, who: str, words: str) -> None:
    with pytest.raises(ChangedSince) as caught:
        act()
    assert caught.value.who == who
    assert words in str(caught.value)


def test_a_stock_that_another_gave_a_quantity_is_not_taken_back(plant, other):
    desk.add_stock(plant, "NEW")
    desk.edit_cell(other, "NEW", "on_hand_kg", "5000", confirmed=True)
    refused(plant.undo, "bertil", "NEW: bertil changed it at ")
    assert other.stock("NEW").on_hand_kg == 5000.0
    other.undo()
    plant.undo()
    assert plant.row("quantity", "NEW") == {"mg": None}
    desk.add_stock(plant, "NEW")
    assert (plant.stock("NEW").on_hand_kg, plant.verify()) == (None, None)


def test_a_quantity_needs_its_stock(plant, other):
    desk.add_stock(plant, "NEW")
    change = edits.stock_cell(other.stock("NEW"), "on_hand_kg", 5.0)
    plant.undo()
    refused(lambda: other.change([change], "late"), "anna", "stock NEW is no longer there: anna changed it at ")
    assert ("NEW",) not in plant.table("quantity")


def test_a_quantity_left_by_an_older_version_goes_when_its_code_is_used_again(plant):
    plant._database.con.execute("INSERT INTO movement (stock, mg, reason, journal) VALUES ('NEW', 7, 'left', 1)")
    desk.add_stock(plant, "NEW")
    assert plant.stock("NEW").on_hand_kg is None


def test_values_lines_and_rules_of_others_hold_their_owner(plant, other):
    desk.add_stock(plant, "NEW")
    desk.edit_cell(other, "NEW", "flash", "200", confirmed=True)
    refused(plant.undo, "bertil", "NEW flash: bertil changed it at ")
    other.undo()
    targets.set_rule(other, "P46", "NEW", "", "5")
    refused(plant.undo, "bertil", "P46 has a share rule on NEW: bertil changed it at ")
    other.undo()
    plant.undo()
    targets.add_product(plant, "PX", "ISO VG 46")
    targets.set_limit(other, "PX", "vi", "95")
    refused(plant.undo, "bertil", "PX vi: bertil changed it at ")
    assert plant.verify() is None


def test_a_stock_is_not_retired_again_once_a_rule_demands_it(plant, other):
    desk.add_stock(plant, "NEW")
    desk.retire_stock(plant, "NEW")
    plant.undo()
    targets.set_rule(other, "P46", "NEW", "2", "5")
    refused(plant.redo, "bertil", "P46 has a share rule on NEW")


def test_a_refusal_names_who_changed_the_cells_that_differ(plant, other):
    desk.add_stock(plant, "NEW")
    desk.edit_cell(other, "NEW", "price_per_t", "5", confirmed=True)
    desk.edit_cell(plant, "NEW", "name", "n", confirmed=True)
    plant.undo()
    refused(plant.undo, "bertil", "NEW price_per_t: bertil changed it at ")


def test_many_rows_added_twice_are_named(plant, other):
    changes = [c for n in range(30) for c in edits.new_stock(plant, Stock(f"Q{n}"))]
    plant.change(changes, "thirty")
    refused(lambda: other.change(changes, "again"), "anna", "Q0: anna changed it at ")


def test_an_import_works_on_the_plant_as_it_is_when_written(plant, other, path, tmp_path, monkeypatch):
    """Another's edit between the reading of the folder and the writing is part of what the import changes."""
    take = opening._take_over

    def late(opened, catalogue):
        desk.edit_cell(other, "A", "price_per_t", "999", confirmed=True)
        return take(opened, catalogue)

    monkeypatch.setattr(opening, "_take_over", late)
    assert import_folder(tmp_path / "catalogue", path, who="anna").changes == 1
    assert plant.journal(1)[0].changes == (
        change_of("stock", ("A",), {"price_per_t": 999.0}, {"price_per_t": 820.0}),)


@pytest.mark.parametrize(("table", "key", "said"), [
    ("batch", ("B-0003",), "B-0003"), ("content", ("B-0003", 1), "B-0003 content 1"),
    ("charge", ("B-0003", 2), "B-0003 charge 2"), ("charge_lot", ("B-0003", 2, "L1"), "B-0003 charge 2 lot L1"),
    ("sample", ("B-0003", 1), "B-0003 sample 1"), ("result", ("B-0003", 1, 2), "B-0003 sample 1 result 2"),
    ("decision", ("B-0003", 1), "B-0003 decision 1"), ("outcome", ("B-0003", 1), "B-0003 outcome 1"),
    ("lot", ("A", "L1"), "A lot L1"), ("tank_lot", ("A", "L1"), "A lot L1 in the tank"), ("dip", ("A", 3), "A dip 3"),
    ("vessel", ("K1",), "K1"), ("product_limit", ("P46", "vi", 1), "P46 vi"),
    ("stock_value", ("A", "flash"), "A flash"),
    ("batch", ("{batch} %s",), "{batch} %s"), ("lot", ("A", "{lot}"), "A lot {lot}")])
def test_rows_are_called_as_people_call_them(table, key, said):
    change = change_of(table, key, None, None)
    assert change.named == said
    assert change.words() == f"{said} added"


def test_rows_of_a_batch_are_named_when_another_was_quicker(plant, other):
    order(plant, "B-0003", ("A", 500.0))
    made = other.batch("B-0003")
    sample(plant, "B-0003")
    refused(lambda: other.change(added(Sample("B-0003", 1, 0, "", "")), "again"), "anna",
            "B-0003 sample 1: anna changed it at ")
    check = changed(plant.batch("B-0003").results[0], withdrawn="bubbles")
    other.change([changed(other.batch("B-0003").results[0], withdrawn="slip")], "B-0003 sample 1 kv40 withdrawn")
    refused(lambda: plant.change([check], "late"), "bertil", "B-0003 sample 1 result 1: bertil changed it at ")
    plant.change([changed(made.head, customer="north yard")], "B-0003 customer")
    refused(lambda: other.change([changed(made.head, customer="south yard")], "late"), "anna",
            "B-0003: anna changed it at ")
