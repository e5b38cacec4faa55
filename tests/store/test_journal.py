"""The journal: undo and redo across restarts, several people, the chain of hashes, quantities as movements."""

from __future__ import annotations

import sqlite3

import pytest

from blendtui.store.edits import stock_cell
from blendtui.store.errors import ChangedSince, NothingToUndo
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.reads import milligrams
from blendtui.store.records import Change


def put(plant: Plant, cell: str, value: object, code: str = "A") -> int:
    return plant.change([stock_cell(plant.stock(code), cell, value)], f"{code} {cell} {value}")


def test_every_change_is_one_entry(plant):
    put(plant, "kv40", 31.0)
    entry, first = plant.journal()
    assert (entry.id, entry.who, entry.what, entry.why, entry.undoes) == (2, "anna", "A kv40 31.0", "", None)
    assert entry.changes == (Change("stock", {"stock": "A"}, {"kv40": 30.2}, {"kv40": 31.0}),)
    assert entry.changes[0].words() == "A kv40 30.2 → 31"
    assert entry.at.endswith("Z")
    assert first.what.startswith("imported ")


def test_a_change_of_nothing_is_no_entry(plant):
    assert put(plant, "kv40", 30.2) == 1


@pytest.mark.parametrize(("cell", "value"), [
    ("kv40", 31.0), ("name", "north"), ("price_per_t", None), ("flash", 210.0), ("ccs-25", 1500.0),
    ("on_hand_kg", 12345.678901), ("on_hand_kg", None), ("on_hand_kg", 0.0)])
def test_undo_and_redo_across_restarts(path, cell, value):
    with open_plant(path, who="anna") as plant:
        old = plant.state()
        put(plant, cell, value)
        new = plant.state()
    with open_plant(path, who="anna") as plant:
        assert plant.undo() == f"undone: A {cell} {value}"
        assert plant.state() == old
    with open_plant(path, who="anna") as plant:
        assert plant.redo() == f"done again: A {cell} {value}"
        assert plant.state() == new
        assert plant.undo() == f"undone: A {cell} {value}"
        assert (plant.state(), plant.verify()) == (old, None)


def test_undo_goes_back_step_by_step_and_redo_forward(plant):
    states = [plant.state()]
    for value in (31.0, 32.0, 33.0):
        put(plant, "kv40", value)
        states.append(plant.state())
    for state in reversed(states[:-1]):
        plant.undo()
        assert plant.state() == state
    with pytest.raises(NothingToUndo, match=r"^nothing of yours is left to undo$"):
        plant.undo()
    for state in states[1:]:
        plant.redo()
        assert plant.state() == state
    with pytest.raises(NothingToUndo, match=r"^nothing was undone that could be brought back$"):
        plant.redo()
    assert (plant.revision(), plant.verify()) == (10, None)


def test_a_new_change_ends_the_chance_to_redo(plant):
    put(plant, "kv40", 31.0)
    plant.undo()
    put(plant, "kv40", 32.0)
    with pytest.raises(NothingToUndo):
        plant.redo()
    plant.undo()
    assert plant.stock("A").kv40 == 30.2


def test_the_entry_that_filled_the_plant_is_never_undone(plant):
    with pytest.raises(NothingToUndo):
        plant.undo()
    assert len(plant.stocks()) == 2


def test_undo_takes_only_ones_own(path, plant):
    put(plant, "kv40", 31.0)
    with open_plant(path, who="bertil") as other:
        put(other, "price_per_t", 900.0)
        assert plant.undo() == "undone: A kv40 31.0"
        with pytest.raises(NothingToUndo):
            plant.undo()
        assert other.undo() == "undone: A price_per_t 900.0"


def test_undo_is_refused_when_another_changed_the_cell_since(path, plant):
    put(plant, "kv40", 31.0)
    with open_plant(path, who="bertil") as other:
        put(other, "kv40", 32.0)
        at = other.journal(1)[0].at
    with pytest.raises(ChangedSince) as caught:
        plant.undo()
    assert str(caught.value) == (f"A kv40: bertil changed it at {at} (A kv40 32.0); look again and repeat the change")
    assert (caught.value.who, caught.value.what, caught.value.at) == ("bertil", "A kv40 32.0", at)
    assert (plant.stock("A").kv40, plant.revision()) == (32.0, 3)


def test_a_change_made_on_an_old_value_is_refused(path, plant):
    seen = plant.stock("A")
    with open_plant(path, who="bertil") as other:
        put(other, "kv40", 32.0)
    with pytest.raises(ChangedSince, match=r"^A kv40: bertil changed it at .* \(A kv40 32\.0\); look again"):
        plant.change([stock_cell(seen, "price_per_t", 1.0), stock_cell(seen, "kv40", 33.0)], "two cells")
    assert plant.stock("A").price_per_t == 820.0


@pytest.mark.parametrize("cell", ["flash", "on_hand_kg"])
def test_that_holds_for_values_and_quantities_too(path, plant, cell):
    seen = plant.stock("A")
    with open_plant(path, who="bertil") as other:
        put(other, cell, 222.0)
    with pytest.raises(ChangedSince) as caught:
        plant.change([stock_cell(seen, cell, 210.0)], "late")
    assert caught.value.who == "bertil"


# Quantities

def test_a_quantity_is_the_sum_of_its_movements(plant):
    for kg in (12_000.1, 11_999.9, 0.3, 40_000.0):
        put(plant, "on_hand_kg", kg)
        assert plant.stock("A").on_hand_kg == kg
    rows = plant._database.con.execute("SELECT mg, journal FROM movement WHERE stock = 'A' ORDER BY id").fetchall()
    assert rows == [(milligrams(40_000.0), 1), (milligrams(-27_999.9), 2), (milligrams(-0.2), 3),
                    (milligrams(-11_999.6), 4), (milligrams(39_999.7), 5)]


def test_an_unknown_quantity_starts_the_sum_anew(plant):
    put(plant, "on_hand_kg", None)
    assert plant.stock("A").on_hand_kg is None
    put(plant, "on_hand_kg", 5.0)
    assert plant.stock("A").on_hand_kg == 5.0
    plant.undo()
    plant.undo()
    assert plant.stock("A").on_hand_kg == 40_000.0
    assert plant.verify() is None


@pytest.mark.parametrize("verb", ["UPDATE journal SET who = 'x'",
 "DELETE FROM journal", "DELETE FROM movement",
                                  "UPDATE movement SET mg = 1"])
def test_the_past_cannot_be_written(plant, verb):
    with pytest.raises(sqlite3.IntegrityError, match="is append-only"):
        plant._database.con.execute(verb)


# Verification

def tamper(path, *statements):
    con = sqlite3.connect(path)
    for table in ("journal", "movement"):
        for verb in ("update", "delete"):
            con.execute(f"DROP TRIGGER {table}_no_{verb}")
    for statement in statements:
        con.execute(statement)
    con.commit()
    con.close()


@pytest.fixture
def used(path):
    with open_plant(path, who="anna") as plant:
        for value in (31.0, 32.0, 33.0):
            put(plant, "kv40", value)
        assert plant.verify() is None
    return path


@pytest.mark.parametrize("column", ["at", "who", "what", "why", "changes"])
def test_an_altered_entry_is_found(used, column):
    tamper(used, f"UPDATE journal SET {column} = '[]' WHERE id = 3")
    with open_plant(used) as plant:
        assert plant.verify().startswith("journal entry 3 (")
        assert plant.verify().endswith(" was altered after it was written")


def test_a_removed_entry_is_found(used):
    tamper(used, "DELETE FROM journal WHERE id = 3")
    with open_plant(used) as plant:
        assert plant.verify() == "journal entry 3 is missing: someone took it out of the file"


def test_an_entry_rewritten_with_a_fitting_hash_is_found_by_the_next(used):
    from blendtui.store.journal import COLUMNS, digest

    con = sqlite3.connect(used)
    row = list(con.execute(f"SELECT {COLUMNS} FROM journal WHERE id = 3").fetchone())
    con.close()
    row[2] = "bertil"
    tamper(used, f"UPDATE journal SET who = 'bertil', hash = '{digest(row)}' WHERE id = 3")
    with open_plant(used) as plant:
        assert plant.verify().startswith("journal entry 4 (")
        assert plant.verify().endswith(" does not follow the entry before it: one of the two was replaced")


@pytest.mark.parametrize(("statement", "words"), [
    ("UPDATE stock SET price_per_t = 1.0 WHERE stock = 'A'", "A price_per_t 820 → 1"),
    ("UPDATE movement SET mg = 1000000 WHERE stock = 'A'", "A on hand 40000 kg → 1 kg"),
    ("INSERT INTO stock_value VALUES ('B', 'flash', 200.0)", "B flash added"),
    ("DELETE FROM share_rule", "P46 A dropped"),
])
def test_a_plant_changed_past_its_journal_is_found(used, statement, words):
    tamper(used, statement)
    with open_plant(used) as plant:
        assert plant.verify() == f"the plant was changed past its journal: {words}"


def test_a_journal_cut_short_is_found(used):
    tamper(used, "DELETE FROM journal WHERE id = 4")
    with open_plant(used) as plant:
        assert plant.verify() == "the plant was changed past its journal: A kv40 32 → 33"
