"""A backup is one checked file or none; a restore loses nothing in silence and leaves the plant whole or as it was."""

from __future__ import annotations

import re
import shutil
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest

from blendtui.store import connect, database, edits, places, restoring
from blendtui.store.backup import is_plant
from blendtui.store.edits import stock_cell
from blendtui.store.errors import NetworkPlace, NewerPlant, NoPlant, NotAPlant, PlantBusy, PlantError, ReadOnlyPlant
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.plant import Plant
from blendtui.store.restoring import restore
from blendtui.store.schema import MIGRATIONS
from solver.stocks import Stock
from tests.store.batch_steps import charge, order


def price(plant: Plant, value: float) -> int:
    return plant.change([stock_cell(plant.stock("A"), "price_per_t", value)], f"A price {value:g}")


def names(folder: Path) -> list[str]:
    return sorted(p.name for p in folder.iterdir())


@pytest.fixture
def saved(path, tmp_path):
    """A backup made after one price."""
    with open_plant(path, who="anna") as plant:
        price(plant, 800.0)
        plant.backup(tmp_path / "saved.plant")
    return tmp_path / "saved.plant"


# Backup

def test_it_is_the_plant_in_one_file(plant, tmp_path):
    order(plant, "B-0001", ("A", 500.0))
    charge(plant, "B-0001", 1, 500.0)
    (tmp_path / "safe").mkdir()
    made = plant.backup(tmp_path / "safe" / "b.plant")
    assert (made.entries, made.last_hash) == (3, plant.last_hash())
    assert names(tmp_path / "safe") == ["b.plant"]
    with open_plant(made.path) as copy:
        assert (copy.state(), copy.verify()) == (plant.state(), None)
        assert copy._database.con.execute("PRAGMA journal_mode").fetchone()[0] == "wal"
    assert plant.revision() == 3  # a backup is no entry


def test_it_is_of_one_moment_while_others_work(plant, path, tmp_path):
    script = ("import sys; from blendtui.store.opening import open_plant; from tests.store.batch_steps import order\n"
              "plant = open_plant(sys.argv[1], who='bertil')\n"
              "for n in range(100000): order(plant, f'B-{n:05}', ('A', 0.001)); print(n, flush=True)")
    with subprocess.Popen([sys.executable, "-c", script, str(path)], stdout=subprocess.PIPE, text=True,
                          cwd=Path(__file__).parents[2]) as worker:
        assert worker.stdout is not None
        try:
            worker.stdout.readline()
            sizes = []
            for n in range(5):
                made = plant.backup(tmp_path / f"b{n}.plant")
                with open_plant(made.path) as copy:
                    assert copy.verify() is None
                    assert (copy.revision(), copy.last_hash()) == (made.entries, made.last_hash)
                    sizes.append(made.entries)
        finally:
            worker.kill()
    assert sizes == sorted(sizes)
    assert sizes[-1] > sizes[0]


def test_an_existing_file_is_replaced_only_when_told_and_only_a_plant(plant, path, saved, tmp_path):
    before = saved.read_bytes()
    with pytest.raises(PlantError) as caught:
        plant.backup(saved)
    assert str(caught.value) == f"{saved} is there already; name another file, or replace it with --replace"
    assert saved.read_bytes() == before
    price(plant, 700.0)
    assert plant.backup(saved, replace=True).entries == 3
    with open_plant(saved) as copy:
        assert copy.stock("A").price_per_t == 700.0
        with pytest.raises(PlantError, match=r"saved\.plant is open in a session, or was left in the midst of one"):
            plant.backup(saved, replace=True)
    (tmp_path / "letter.txt").write_text("dear sirs")
    with pytest.raises(PlantError, match=r"letter\.txt is not a plant file, so it is not replaced; name another file"):
        plant.backup(tmp_path / "letter.txt", replace=True)
    with pytest.raises(PlantError, match=r"small\.plant is the plant itself; name another file for its backup"):
        plant.backup(path, replace=True)
    (tmp_path / "link.plant").symlink_to(path)
    with pytest.raises(PlantError, match="is the plant itself"):
        plant.backup(tmp_path / "link.plant", replace=True)


def test_places_that_cannot_take_it(plant, tmp_path, monkeypatch):
    with pytest.raises(NoPlant, match=r"there is no folder .*/none; make it first"):
        plant.backup(tmp_path / "none" / "b.plant")
    (tmp_path / "b.plant-wal").write_bytes(b"left")
    with pytest.raises(PlantError, match=r"b\.plant-wal was left by a plant b\.plant that is gone"):
        plant.backup(tmp_path / "b.plant")
    monkeypatch.setattr(places, "network_type", lambda place: "nfs4")
    with pytest.raises(NetworkPlace, match="lies on a network mount"):
        plant.backup(tmp_path / "c.plant")
    assert not (tmp_path / "c.plant").exists()


def test_one_who_may_only_read_can_make_it(path, tmp_path, monkeypatch):
    (tmp_path / "mine").mkdir()
    own = database.writable
    monkeypatch.setattr(database, "writable", lambda place: place.name != "small.plant" and own(place))
    with open_plant(path, who="gast") as plant:
        assert plant.read_only
        assert plant.backup(tmp_path / "mine" / "b.plant").entries == 1
    with open_plant(tmp_path / "mine" / "b.plant") as copy:
        assert copy.verify() is None


def test_a_catalogue_folder_has_none(folder, tmp_path):
    with pytest.raises(ReadOnlyPlant, match="is a catalogue folder, which has no record to keep; copy the folder"):
        open_plant(folder()).backup(tmp_path / "b.plant")


def test_a_plant_that_is_not_sound_has_none(path, tmp_path):
    with sqlite3.connect(path) as con:
        con.execute("UPDATE stock SET price_per_t = 1 WHERE stock = 'A'")
    con.close()
    with open_plant(path) as plant, pytest.raises(PlantError) as caught:
        plant.backup(tmp_path / "b.plant")
    assert str(caught.value) == (f"no backup was made, for {path} is not sound: the plant was changed past its "
                                 "journal: A price_per_t 820 → 1")
    assert names(tmp_path) == ["catalogue", "small.plant"]


def test_a_disk_that_fills_up_leaves_nothing(plant, tmp_path, monkeypatch):
    from blendtui.store import backup

    def small(con, temporary):
        copy = sqlite3.connect(temporary)
        copy.execute("PRAGMA max_page_count = 1")
        copy.executescript("CREATE TABLE t (x); CREATE TABLE u (x);")

    monkeypatch.setattr(backup, "pages", small)
    with pytest.raises(PlantError, match=r"^the disk that holds .*b\.plant is full; no backup was made"):
        plant.backup(tmp_path / "b.plant")
    assert "b.plant" not in names(tmp_path)
    assert not [n for n in names(tmp_path) if n.startswith(".")]


def test_one_who_reads_a_copy_in_memory_can_make_it(path, tmp_path, monkeypatch):
    monkeypatch.setattr(database, "writable", lambda place: place.name != "small.plant")
    monkeypatch.setattr(connect, "to_read", lambda place, shown, timeout: (
        connect._copy(place, timeout), connect.fingerprint(place)))
    with open_plant(path, who="gast") as plant:
        state = plant.state()
        plant.backup(tmp_path / "b.plant")
    with open_plant(tmp_path / "b.plant", who="gast") as copy:
        assert (copy.state(), copy.verify(), copy.read_only) == (state, None, False)
        price(copy, 700.0)


# Restore

def test_it_comes_back_where_there_is_no_plant(saved, tmp_path):
    before = saved.read_bytes()
    done = restore(saved, tmp_path / "new.plant", who="anna")
    assert (done.entries, done.lost, done.kept) == (2, 0, None)
    with open_plant(tmp_path / "new.plant", who="anna") as plant:
        assert plant.stock("A").price_per_t == 800.0
        entry = plant.journal(1)[0]
        assert re.fullmatch(r"restored from saved\.plant, 2 entries as of \S+Z", entry.what)
        assert (entry.who, entry.why, entry.changes, plant.verify()) == ("anna", "", (), None)
        # There is nothing of a restore to undo: the price before it is the latest change.
        assert plant.undo() == "undone: A price 800"
    assert saved.read_bytes() == before
    assert names(tmp_path) == ["catalogue", "new.plant", "saved.plant", "small.plant"]


def test_a_plant_with_nothing_newer_goes_back(saved, path, tmp_path):
    mode = path.stat()
    done = restore(saved, path, who="anna")
    assert (done.lost, done.plant) == (0, path)
    with open_plant(path) as plant, open_plant(done.kept) as kept:
        assert plant.verify() is kept.verify() is None
        assert (kept.revision(), plant.revision()) == (2, 3)
        assert plant.journal(1)[0].why == f"what was there is kept in {done.kept.name}"
        assert plant._database.con.execute("PRAGMA journal_mode").fetchone()[0] == "wal"
    assert (path.stat().st_ino, path.stat().st_mode) == (mode.st_ino, mode.st_mode)
    assert re.fullmatch(r"small\.before-\d{8}-\d{6}Z\.plant", done.kept.name)


def test_later_entries_are_counted_by_person_and_kept_beside(saved, path):
    for who, value in (("anna", 1.0), ("bertil", 2.0), ("anna", 3.0)):
        with open_plant(path, who=who) as plant:
            price(plant, value)
            last = plant.last_hash()
    with open_plant(path) as plant:
        at = [e.at for e in plant.journal(3)]
    with pytest.raises(PlantError) as caught:
        restore(saved, path, who="carl")
    assert str(caught.value) == (
        f"{path} holds 3 entries that the backup lacks, {at[2]} to {at[0]} (anna 2, bertil 1); --replace-newer "
        "restores all the same and keeps the present file beside it")
    with open_plant(path) as plant:
        assert (plant.last_hash(), plant.verify()) == (last, None)
        assert plant._database.con.execute("PRAGMA journal_mode").fetchone()[0] == "wal"
    done = restore(saved, path, who="carl", replace_newer=True)
    assert done.lost == 3
    with open_plant(path) as plant, open_plant(done.kept) as kept:
        assert (plant.stock("A").price_per_t, kept.stock("A").price_per_t) == (800.0, 3.0)
        assert plant.journal(1)[0].why == f"what was there, 3 later entries among it, is kept in {done.kept.name}"
        assert (kept.last_hash(), kept.verify(), plant.verify()) == (last, None, None)


def test_a_backup_that_is_newer_than_the_plant_is_taken(path, saved, tmp_path):
    shutil.copy(saved, tmp_path / "old.plant")
    with open_plant(path, who="anna") as plant:
        price(plant, 700.0)
        plant.backup(tmp_path / "later.plant")
    assert restore(tmp_path / "later.plant", tmp_path / "old.plant", who="anna").lost == 0
    with open_plant(tmp_path / "old.plant") as plant:
        assert (plant.stock("A").price_per_t, plant.verify()) == (700.0, None)


def test_another_plant_and_another_past_are_told_apart(path, saved, folder, tmp_path):
    import_folder(folder(), tmp_path / "other.plant", who="anna")
    for told in (False, True):
        with pytest.raises(PlantError) as caught:
            restore(saved, tmp_path / "other.plant", who="anna", replace_newer=told)
        assert str(caught.value) == (f"{saved} is the backup of another plant: no entry of the two is the same; "
                                     "restore it to a path of its own")
    with open_plant(saved, who="anna") as copy:
        price(copy, 555.0)
        copy.undo()
    with open_plant(path, who="bertil") as plant:
        price(plant, 666.0)
    with pytest.raises(PlantError, match=r"holds 1 entry that the backup lacks, .* \(bertil 1\); the two have "
                                         r"different pasts from entry 3 on, and the backup has 2 of its own; --rep"):
        restore(saved, path, who="anna")
    assert restore(saved, path, who="anna", replace_newer=True).lost == 1


def test_it_is_refused_while_anybody_has_the_plant_open(saved, path, plant):
    plant.stock("A")
    with pytest.raises(PlantBusy) as caught:
        restore(saved, path, who="carl", timeout=0.1)
    assert str(caught.value) == (f"{path} is open elsewhere; nothing was restored: ask everybody to leave it, and "
                                 "restore again")
    price(plant, 900.0)
    assert (plant.revision(), plant.verify()) == (3, None)


def test_it_says_who_is_writing(saved, path, plant):
    with plant._database.writing("anna"), pytest.raises(PlantBusy, match=r"is open elsewhere: anna is writing it; "):
        restore(saved, path, who="carl", timeout=0.1)


def test_no_backup_no_plant(saved, path, tmp_path, folder):
    with pytest.raises(NoPlant, match=r"there is no backup at .*none; check the path"):
        restore(tmp_path / "none", path)
    with pytest.raises(NoPlant):
        restore(folder(), path)
    with pytest.raises(NotAPlant, match=r"catalogue is not a plant file; name the plant file that is to be restored"):
        restore(saved, folder())
    with pytest.raises(PlantError, match=r"small\.plant is the plant itself; name a backup of it"):
        restore(path, path)
    (tmp_path / "text").write_text("no plant at all" * 100)
    with pytest.raises(NotAPlant, match=r"text is not a plant file, or is damaged; name another backup"):
        restore(tmp_path / "text", path)
    with sqlite3.connect(tmp_path / "db") as con:
        con.execute("CREATE TABLE t (x)")
    with pytest.raises(NotAPlant, match="is a database of another program"):
        restore(tmp_path / "db", path)
    with pytest.raises(NotAPlant, match="is a database of another program"):
        restore(saved, tmp_path / "db")


@pytest.mark.parametrize(("statement", "said"), [
    ("UPDATE stock SET price_per_t = 1 WHERE stock = 'A'",
     "is not sound, so nothing was restored: the plant was changed past its journal: A price_per_t 800 → 1"),
    (f"PRAGMA user_version = {len(MIGRATIONS) + 1}", "was written by a newer version of this program"),
    ("DROP TRIGGER journal_no_update", "the trigger journal_no_update is missing"),
])
def test_a_backup_is_checked_before_anything_is_replaced(saved, path, statement, said):
    with sqlite3.connect(saved) as con:
        con.execute(statement)
    con.close()
    before = path.read_bytes()
    with pytest.raises((NotAPlant, NewerPlant), match=re.escape(said)):
        restore(saved, path, who="anna", replace_newer=True)
    assert path.read_bytes() == before


@pytest.mark.parametrize("spoil", [lambda raw: b"", lambda raw: b"\0" * len(raw), lambda raw: b"x" + raw[1:]])
def test_a_plant_that_cannot_be_read_is_set_aside_when_told(saved, path, spoil):
    raw = spoil(path.read_bytes())
    path.write_bytes(raw)
    log = path.with_name(path.name + "-wal")
    log.write_bytes(b"its last changes")
    with pytest.raises(NotAPlant, match=r"cannot be read, so what it holds beyond the backup is not known; "
                                        r"--replace-newer sets it aside"):
        restore(saved, path, who="anna")
    assert path.read_bytes() == raw
    done = restore(saved, path, who="anna", replace_newer=True)
    assert done.kept.read_bytes() == raw
    with open_plant(path) as plant:
        assert (plant.stock("A").price_per_t, plant.verify()) == (800.0, None)


def test_a_plant_with_damaged_pages_is_restored(saved, path):
    with open_plant(path) as plant:
        con = plant._database.con
        page = con.execute("SELECT rootpage FROM sqlite_master WHERE name = 'stock'").fetchone()[0]
        size = con.execute("PRAGMA page_size").fetchone()[0]
    raw = bytearray(path.read_bytes())
    raw[(page - 1) * size:page * size] = b"\xff" * size
    path.write_bytes(raw)
    with open_plant(path) as plant:
        assert plant.verify() is not None
    done = restore(saved, path, who="anna")
    assert done.kept.read_bytes()[(page - 1) * size:page * size] == b"\xff" * size
    with open_plant(path) as plant:
        assert (plant.stock("A").price_per_t, plant.verify()) == (800.0, None)


def test_changes_that_a_killed_session_left_in_its_log_count(saved, path):
    script = ("import os, sys; from blendtui.store.opening import open_plant; from blendtui.store import edits\n"
              "plant = open_plant(sys.argv[1], who='bertil')\n"
              "plant.change([edits.stock_cell(plant.stock('A'), 'price_per_t', 5.0)], 'late'); os._exit(9)")
    subprocess.run([sys.executable, "-c", script, str(path)], cwd=Path(__file__).parents[2], check=False)
    assert path.with_name(path.name + "-wal").stat().st_size > 0
    with pytest.raises(PlantError, match=r"holds 1 entry that the backup lacks, .* \(bertil 1\)"):
        restore(saved, path, who="anna")
    done = restore(saved, path, who="anna", replace_newer=True)
    with open_plant(done.kept) as kept, open_plant(path) as plant:
        assert (kept.stock("A").price_per_t, plant.stock("A").price_per_t) == (5.0, 800.0)
        assert kept.verify() is plant.verify() is None


def test_a_restore_that_is_stopped_halfway_leaves_the_plant_as_it_was(saved, path, monkeypatch):
    with open_plant(path, who="anna") as plant:
        price(plant, 700.0)
        last = plant.last_hash()

    def full(con, temporary):
        con.execute("BEGIN IMMEDIATE")
        con.execute("DROP TRIGGER journal_no_delete")
        con.execute("DELETE FROM journal WHERE id = 3")
        error = sqlite3.OperationalError("disk I/O error")
        error.sqlite_errorcode = sqlite3.SQLITE_FULL
        con.execute("ROLLBACK")
        raise error

    monkeypatch.setattr(restoring, "_overwrite", full)
    with pytest.raises(PlantError, match="cannot be written: the disk refuses it; it is as it was"):
        restore(saved, path, who="anna", replace_newer=True)
    with open_plant(path) as plant:
        assert (plant.last_hash(), plant.verify()) == (last, None)


def test_a_restore_that_is_killed_halfway_leaves_the_plant_as_it_was(saved, path):
    with open_plant(path, who="anna") as plant:
        plant.change([c for n in range(300) for c in edits.new_stock(plant, Stock(f"Q{n}", name="x" * 200))], "many")
        state, last = plant.state(), plant.last_hash()
    script = ("import os, sys; from blendtui.store import connect, restoring\n"
              "def halfway(con, temporary):\n"
              "    con.execute('PRAGMA cache_size = 1')\n"
              "    copy = connect.connect(temporary, 'mode=rw', 5.0)\n"
              "    copy.backup(con, pages=1, progress=lambda s, left, of: os._exit(9) if left < of // 2 else None)\n"
              "restoring._overwrite = halfway\n"
              "restoring.restore(sys.argv[1], sys.argv[2], who='anna', replace_newer=True)")
    done = subprocess.run([sys.executable, "-c", script, str(saved), str(path)], check=False,
                          cwd=Path(__file__).parents[2])
    assert done.returncode == 9
    assert path.with_name(path.name + "-journal").exists()
    with open_plant(path) as plant:
        assert (plant.state(), plant.last_hash(), plant.verify()) == (state, last, None)
        assert plant._database.con.execute("PRAGMA journal_mode").fetchone()[0] == "wal"


def test_who_opens_the_plant_meanwhile_waits_and_finds_it_restored(saved, path, monkeypatch):
    with open_plant(path, who="anna") as plant:
        price(plant, 700.0)
    script = ("import sys; print(flush=True); from blendtui.store.opening import open_plant\n"
              "plant = open_plant(sys.argv[1], who='bertil', timeout=30.0); print(plant.stock('A').price_per_t)\n"
              "from tests.store.test_backup import price; price(plant, 650.0); print(plant.verify())")
    over, waiting = restoring._overwrite, []

    def slow(con, temporary):
        waiting.append(subprocess.Popen([sys.executable, "-c", script, str(path)], stdout=subprocess.PIPE, text=True,
                                        cwd=Path(__file__).parents[2]))
        waiting[0].stdout.readline()
        with pytest.raises(subprocess.TimeoutExpired):
            waiting[0].wait(2.0)
        over(con, temporary)

    monkeypatch.setattr(restoring, "_overwrite", slow)
    restore(saved, path, who="carl", replace_newer=True)
    said, _ = waiting[0].communicate(timeout=30.0)
    assert said.split() == ["800.0", "None"]
    with open_plant(path) as plant:
        assert (plant.stock("A").price_per_t, plant.verify()) == (650.0, None)


def test_what_is_a_plant(saved, tmp_path):
    assert is_plant(saved)
    (tmp_path / "short").write_bytes(b"SQLite")
    assert not is_plant(tmp_path / "short")
    assert not is_plant(tmp_path)
