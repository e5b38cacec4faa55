"""Verification finds whatever was done to a file past the program, and says it in words."""

from __future__ import annotations

import json
import shutil
import sqlite3

import pytest

from blendtui.store import journal
from blendtui.store.edits import stock_cell
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant

PAST = "someone changed the file past this program"
GUARDS = [f"DROP TRIGGER {t}_no_{v}" for t in ("journal", "movement") for v in ("update", "delete")]


@pytest.fixture
def tampered(path, tmp_path):
    """What verification says of a plant after these statements of another program."""
    with open_plant(path, who="anna") as plant:
        for kg in (30_000.0, 20_000.0):
            plant.change([stock_cell(plant.stock("A"), "on_hand_kg", kg)], f"A on hand {kg:g}")
        made = plant._database.con.execute("SELECT sql FROM sqlite_master WHERE type = 'trigger'").fetchall()

    def read(*statements: str, guards: bool = True) -> str | None:
        copy = tmp_path / "copy.plant"
        shutil.copy(path, copy)
        con = sqlite3.connect(copy, isolation_level=None)
        con.create_function("fit", 8, lambda *row: journal.digest(row))
        for statement in [*(GUARDS if guards else ()), *statements, *((row[0] for row in made) if guards else ())]:
            con.execute(statement)
        con.close()
        with open_plant(copy) as plant:
            return plant.verify()

    return read


def test_an_untouched_plant_is_sound(tampered):
    assert tampered() is None


@pytest.mark.parametrize(("statement", "words"), [
    ("UPDATE movement SET reason = 'spilt' WHERE journal = 2", "movement 3 of A is not what journal entry 2 says"),
    ("UPDATE movement SET journal = 2 WHERE journal = 3", "movement 4 of A is not what journal entry 3 says"),
    ("INSERT INTO movement (stock, mg, reason, journal) VALUES ('A', 5, 'in', 3), ('A', -5, 'out', 3)",
     "movement 5 of A stands in no journal entry"),
    ("INSERT INTO movement (stock, mg, reason, journal) VALUES ('GHOST', NULL, 'x', 3)",
     "movement 5 of GHOST stands in no journal entry"),
    ("UPDATE movement SET mg = CASE journal WHEN 2 THEN mg - 1 WHEN 3 THEN mg + 1 ELSE mg END",
     "movement 3 of A is not what journal entry 2 says"),
])
def test_a_movement_that_the_journal_does_not_tell_of(tampered, statement, words):
    assert tampered(statement) == f"{words}: {PAST}"


def test_a_movement_replaced_by_a_program_without_our_settings(tampered):
    replaced = "INSERT OR REPLACE INTO movement SELECT id, stock, mg, 'spilt', journal FROM movement WHERE journal = 2"
    assert tampered(replaced, guards=False) == f"movement 3 of A is not what journal entry 2 says: {PAST}"


def test_two_movements_joined_into_one(tampered):
    assert tampered("UPDATE movement SET mg = mg - 10000000000 WHERE journal = 2",
                    "DELETE FROM movement WHERE journal = 3") == (
        f"movement 3 of A is not what journal entry 2 says: {PAST}")


@pytest.mark.parametrize(("statements", "words"), [
    (GUARDS[:1], "the trigger journal_no_update is missing"),
    ((GUARDS[2], "CREATE TRIGGER movement_no_update BEFORE UPDATE ON movement BEGIN SELECT 1; END"),
     "the trigger movement_no_update is not as it was made"),
    (("CREATE TRIGGER sly AFTER INSERT ON stock BEGIN SELECT 1; END",), "the trigger sly is not one of a plant's"),
    (("DROP TABLE trial_share",), "the table trial_share is missing"),
    (("ALTER TABLE stock ADD COLUMN secret TEXT",), "the table stock is not as it was made"),
    (("CREATE TABLE more (x)",), "the table more is not one of a plant's"),
    (("DROP INDEX movement_stock",), "the index movement_stock is missing"),
])
def test_a_schema_that_is_another(tampered, statements, words):
    assert tampered(*statements, guards=False) == f"{words}: {PAST}"


@pytest.mark.parametrize("changes", ["garbage", "[1]", "null", '[{"table":"nope","key":{},"before":null,"after":{}}]',
                                     '[{"table":"stock","key":{},"before":null,"after":{}}]',
                                     '[{"table":"quantity","key":{"stock":"A"},"before":{"mg":"x"},"after":{"mg":1}}]'])
def test_an_entry_that_says_nonsense_under_a_fitting_hash(tampered, changes):
    said = tampered(f"UPDATE journal SET changes = '{changes}' WHERE id = 3",
                    "UPDATE journal SET hash = fit(id, at, who, what, changes, why, undoes, prev_hash) WHERE id = 3")
    assert said == f"journal entry 3 says what no plant can hold: {PAST}"


@pytest.mark.parametrize(("statement", "words"), [
    ("UPDATE journal SET what = X'00ff' WHERE id = 2", "was altered after it was written"),
    ("UPDATE stock SET name = X'4100' WHERE stock = 'A'", "the plant was changed past its journal: A name"),
    ("UPDATE stock SET name = CAST(X'ff' AS TEXT) WHERE stock = 'A'", "is damaged; open a backup of it"),
    ("UPDATE journal SET changes = json_remove(changes, '$[0].after.name') WHERE id = 1", "was altered"),
])
def test_content_of_another_kind_is_told_and_not_raised(tampered, statement, words):
    said = tampered(statement)
    assert words in said
    assert "\n" not in said


def test_a_row_that_the_journal_leaves_open(tampered):
    last = json.dumps([{"table": "stock", "key": {"stock": "N"}, "before": None, "after": {"name": ""}}])
    said = tampered(f"UPDATE journal SET changes = '{last}' WHERE id = 3",
                    "UPDATE journal SET hash = fit(id, at, who, what, changes, why, undoes, prev_hash) WHERE id = 3",
                    "DELETE FROM movement WHERE journal = 3",
                    "INSERT INTO stock SELECT 'N', name, oil, kind, api_group, 1, 1, 1, 1, 1, 1, 1, tested_on, source,"
                    " 9, 0, 1, 1, 1 FROM stock WHERE stock = 'A'")
    assert said == f"the journal leaves cells of a row open: {PAST}"


def test_damaged_pages_are_told(path):
    with open_plant(path, who="anna") as plant:
        page = plant._database.con.execute("SELECT rootpage FROM sqlite_master WHERE name = 'movement'").fetchone()[0]
        size = plant._database.con.execute("PRAGMA page_size").fetchone()[0]
    raw = bytearray(path.read_bytes())
    raw[(page - 1) * size:(page - 1) * size + 64] = b"\xff" * 64
    path.write_bytes(raw)
    with open_plant(path) as plant:
        assert "damaged" in plant.verify()


@pytest.mark.parametrize("table", ["journal", "movement"])
def test_replacing_the_past_is_refused(plant: Plant, table):
    with pytest.raises(sqlite3.IntegrityError, match="is append-only"):
        plant._database.con.execute(f"INSERT OR REPLACE INTO {table} SELECT * FROM {table}")
