"""Opening and making plant files, and everything that can be wrong with one."""

from __future__ import annotations

import os
import sqlite3
import threading
from pathlib import Path

import pytest

from blendtui.store import database, places
from blendtui.store.edits import stock_cell
from blendtui.store.errors import (
    NetworkPlace,
    NewerPlant,
    NoPlant,
    NotAPlant,
    PlantBusy,
    PlantError,
    PlantFull,
    ReadOnlyPlant,
)
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.plant import Plant
from blendtui.store.schema import MIGRATIONS


def price(plant: Plant, value: float) -> int:
    return plant.change([stock_cell(plant.stock("A"), "price_per_t", value)], "price of A")


def one_line(error: BaseException) -> str:
    assert "\n" not in str(error)
    return str(error)


def test_settings_of_a_connection(plant):
    con = plant._database.con
    settings = {name: con.execute(f"PRAGMA {name}").fetchone()[0]
                for name in ("foreign_keys", "journal_mode", "synchronous", "busy_timeout", "user_version")}
    assert settings == {"foreign_keys": 1, "journal_mode": "wal", "synchronous": 2, "busy_timeout": 200,
                        "user_version": len(MIGRATIONS)}


def test_a_writer_waits_five_seconds_unless_told_otherwise(path):
    with open_plant(path) as plant:
        assert plant._database.con.execute("PRAGMA busy_timeout").fetchone()[0] == 5000


def test_no_such_file(tmp_path):
    with pytest.raises(NoPlant) as caught:
        open_plant(tmp_path / "gone.plant")
    assert one_line(caught.value) == (f"there is no plant at {tmp_path / 'gone.plant'}; check the path, or make one: "
                                      f"blendtui import FOLDER --plant {tmp_path / 'gone.plant'}")


def test_no_such_folder_to_make_a_plant_in(tmp_path):
    with pytest.raises(NoPlant, match=r"^there is no folder .*/deep; make it first, or choose another "
                                      r"place$"):
        open_plant(tmp_path / "deep" / "x.plant", create=True)


def test_an_empty_plant_is_made_when_asked(tmp_path):
    with open_plant(tmp_path / "new.plant", create=True, who="anna") as plant:
        assert (plant.stocks(), plant.products(), plant.revision()) == ([], [], 1)
    assert [p.name for p in tmp_path.iterdir()] == ["new.plant"]


@pytest.mark.parametrize(("content", "words"), [
    (b"", "is empty, not a plant file; make one: blendtui import FOLDER --plant {path}"),
    (b"stock,kv40\n", "is not a plant file; open a plant file or a catalogue folder, or make one: "
                      "blendtui import FOLDER --plant FILE"),
])
def test_a_file_that_is_no_plant(tmp_path, content, words):
    place = tmp_path / "odd.plant"
    place.write_bytes(content)
    with pytest.raises(NotAPlant) as caught:
        open_plant(place)
    assert one_line(caught.value) == f"{place} {words.format(path=place)}"
    assert place.read_bytes() == content


def test_a_database_of_another_program(tmp_path):
    place = tmp_path / "other.db"
    with sqlite3.connect(place) as con:
        con.execute("CREATE TABLE t (x)")
    con.close()
    with pytest.raises(NotAPlant) as caught:
        open_plant(place)
    assert one_line(caught.value) == (f"{place} is a database of another program, not a plant file; "
                                      "open a plant file or a catalogue folder")


def test_a_damaged_file(path):
    raw = bytearray(path.read_bytes())
    raw[100:] = b"\xff" * (len(raw) - 100)
    path.write_bytes(raw)
    with pytest.raises(NotAPlant, match=r"is damaged; open a backup of "
                                        r"it$"), open_plant(path) as plant:
        plant.stocks()


def test_a_file_from_a_newer_version(path):
    with sqlite3.connect(path) as con:
        con.execute("PRAGMA user_version = 99")
    con.close()
    with pytest.raises(NewerPlant) as caught:
        open_plant(path)
    assert one_line(caught.value) == (f"{path} was written by a newer version of this program (schema 99, this one "
                                      f"knows {len(MIGRATIONS)}); install the newer version to open it")


def test_an_older_file_is_brought_up_to_date(path, monkeypatch):
    step = ("CREATE TABLE later (x TEXT)", "INSERT INTO later VALUES ('kept')")
    monkeypatch.setattr(database, "MIGRATIONS", (*MIGRATIONS, step))
    with open_plant(path) as plant:
        assert plant._database.con.execute("SELECT x FROM later").fetchone() == ("kept",)
        assert plant._database.con.execute("PRAGMA user_version").fetchone() == (len(MIGRATIONS) + 1,)


def test_a_step_that_fails_leaves_the_file_as_it_was(path, monkeypatch):
    monkeypatch.setattr(database, "MIGRATIONS", (*MIGRATIONS, ("CREATE TABLE later (x TEXT)", "NONSENSE")))
    with pytest.raises(PlantError):
        open_plant(path)
    monkeypatch.undo()
    with open_plant(path) as plant:
        tables = plant._database.con.execute("SELECT name FROM sqlite_master").fetchall()
        assert ("later",) not in tables


def test_a_special_file_is_refused(tmp_path):
    os.mkfifo(tmp_path / "pipe")
    with pytest.raises(NotAPlant, match="is neither a file nor a folder"):
        open_plant(tmp_path / "pipe")


# Another writer

def test_another_writer_is_named(path, plant):
    with (open_plant(path, who="bertil") as other, other._database.writing("bertil"),
          pytest.raises(PlantBusy) as caught):
        price(plant, 900.0)
    assert one_line(caught.value) == (f"bertil has been writing {path} for more than 0.2 s; nothing was saved: "
                                      "wait a moment and try again")
    assert caught.value.who == "bertil"
    assert plant.stock("A").price_per_t == 820.0
    assert price(plant, 900.0) == 2


def test_an_unknown_writer_is_another_program(path, plant):
    other = sqlite3.connect(path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    with pytest.raises(PlantBusy) as caught:
        price(plant, 900.0)
    other.close()
    assert one_line(caught.value).startswith(f"another program has been writing {path} for more than 0.2 s")


def test_a_sign_left_by_a_dead_writer_is_not_believed(path, plant):
    path.with_name(path.name + "-writer").write_text('{"who": "ghost", "pid": 4194303}')
    assert plant._database.writer() == ""


def test_reading_goes_on_while_another_writes(path, plant):
    with open_plant(path, who="bertil") as other, other._database.writing("bertil"):
        assert plant.stock("A").price_per_t == 820.0


def test_nothing_is_left_beside_a_closed_plant(path):
    with open_plant(path, who="anna") as plant:
        price(plant, 900.0)
    assert [p.name for p in path.parent.iterdir() if p.is_file()] == ["small.plant"]


def test_threads_share_a_plant(plant):
    failures: list[BaseException] = []

    def work(code: str) -> None:
        try:
            for value in range(10):
                plant.change([stock_cell(plant.stock(code), "price_per_t", 500.0 + value)], "price")
                plant.stocks()
        except BaseException as error:
            failures.append(error)

    threads = [threading.Thread(target=work, args=(code,)) for code in ("A", "B")]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert failures == []
    assert (plant.revision(), plant.verify()) == (21, None)


# Places that cannot be written

def fill_disk(plant: Plant) -> None:
    pages = plant._database.con.execute("PRAGMA page_count").fetchone()[0]
    plant._database.con.execute(f"PRAGMA max_page_count = {pages}")


def test_a_full_disk_while_saving(plant):
    before = plant.state()
    fill_disk(plant)
    with pytest.raises(PlantFull) as caught:
        plant.change([stock_cell(plant.stock("A"), "name", "x" * 100_000)], "a long name")
    assert one_line(caught.value) == (f"the disk that holds {plant.path} is full; nothing was saved: "
                                      "free some space and try again")
    assert plant.state() == before
    assert (plant.revision(), plant.verify()) == (1, None)


def test_a_full_disk_while_importing_leaves_no_new_plant(folder, tmp_path, monkeypatch):
    settle = database.Database._settle

    def small(self, new):
        settle(self, new)
        pages = self.con.execute("PRAGMA page_count").fetchone()[0]
        self.con.execute(f"PRAGMA max_page_count = {pages}")

    monkeypatch.setattr(database.Database, "_settle", small)
    rows = "".join(f"S{i},30,5\n" for i in range(2000))
    with pytest.raises(PlantFull) as caught:
        import_folder(folder(stocks=f"stock,kv40,kv100\n{rows}"), tmp_path / "new.plant")
    assert f"the disk that holds {tmp_path / 'new.plant'} is full" in one_line(caught.value)
    assert [p.name for p in tmp_path.iterdir()] == ["catalogue"]


def test_a_plant_that_may_not_be_written_is_read(path, monkeypatch):
    monkeypatch.setattr(database, "writable", lambda place: False)
    with open_plant(path, who="anna") as plant:
        assert plant.read_only
        assert plant.stock("A").price_per_t == 820.0
        with pytest.raises(ReadOnlyPlant) as caught:
            price(plant, 900.0)
    assert one_line(caught.value) == (f"{path} may not be written (it or its folder is read-only for you); "
                                      f"copy it to a folder of your own, or ask for the right to write")


def test_a_file_made_read_only_under_our_hands(plant):
    plant._database.con.execute("PRAGMA query_only = 1")
    with pytest.raises(ReadOnlyPlant, match="may not be written"):
        price(plant, 900.0)


def test_a_folder_that_may_not_be_written(folder, tmp_path, monkeypatch):
    def refuse(*args, **options):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("blendtui.store.opening.tempfile.mkdtemp", refuse)
    with pytest.raises(ReadOnlyPlant) as caught:
        import_folder(folder(), tmp_path / "new.plant")
    assert one_line(caught.value) == (f"the folder {tmp_path} may not be written; choose another place, "
                                      "or ask for the right to write")


@pytest.mark.parametrize(("mounts", "kind"), [
    ("server:/x {place} nfs4 rw 0 0", "nfs4"),
    ("//server/x {place} cifs rw 0 0", "cifs"),
    ("user@host: {place} fuse.sshfs rw 0 0", "fuse.sshfs"),
    ("share {place} virtiofs rw 0 0", "virtiofs"),
    ("share {place} vboxsf rw 0 0", "vboxsf"),
    ("bucket {place} fuse.gcsfuse rw 0 0", "fuse.gcsfuse"),
    ("/dev/sda1 {place} ext4 rw 0 0", ""),
    ("server:/x {place} nfs rw 0 0\n/dev/sdb {place} xfs rw 0 0", ""),
    ("server:/x {place}x nfs rw 0 0", ""),
])
def test_network_mounts(tmp_path, monkeypatch, mounts, kind):
    place = tmp_path / "with space"
    place.mkdir()
    table = tmp_path / "mounts"
    table.write_text("rootfs / rootfs rw 0 0\n" + mounts.format(place=str(place).replace(" ", "\\040")) + "\n")
    monkeypatch.setattr(places, "MOUNTS", table)
    assert places.network_type(place / "x.plant") == kind


def test_a_plant_on_a_network_mount_is_refused(path, monkeypatch):
    monkeypatch.setattr(places, "network_type", lambda place: "nfs4")
    with pytest.raises(NetworkPlace) as caught:
        open_plant(path)
    assert one_line(caught.value) == (
        f"{path} lies on a network mount (nfs4), where two writers could spoil the file; keep the plant file on a "
        "local disk of the machine that serves it, and log in there")


# The first start, and folders

def test_the_first_start_copies_the_example(tmp_path, monkeypatch):
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path))
    place = tmp_path / "blendtui" / "example.plant"
    with open_plant() as plant:
        assert plant.opened_note == f"first start: the example plant was copied to {place}"
        assert len(plant.stocks()) >= 14
        price = plant.stocks()[0].price_per_t
        plant.change([stock_cell(plant.stocks()[0], "price_per_t", 1.0)], "price")
    with open_plant() as plant:
        assert plant.opened_note == f"the example plant, {place}"
        assert plant.stocks()[0].price_per_t == 1.0 != price


def test_a_data_folder_that_cannot_be_made(tmp_path, monkeypatch):
    (tmp_path / "file").write_text("")
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path / "file"))
    with pytest.raises(PlantError) as caught:
        open_plant()
    assert one_line(caught.value) == (f"cannot make the folder {tmp_path / 'file' / 'blendtui'}: not a directory; "
                                      "choose another place with --plant PATH or XDG_DATA_HOME")


def test_a_folder_is_opened_without_being_changed(folder):
    place = folder()
    before = {p: (p.read_bytes(), p.stat().st_mtime_ns) for p in place.iterdir()}
    plant = open_plant(place)
    assert (plant.folder, plant.read_only, plant.revision()) == (True, True, 1)
    for act in (lambda: price(plant, 1.0), plant.undo, plant.redo):
        with pytest.raises(ReadOnlyPlant) as caught:
            act()
        assert one_line(caught.value) == (f"{place} is a catalogue folder, which is read but never changed; make a "
                                          f"plant file of it to edit: blendtui import {place} --plant FILE")
    assert {p: (p.read_bytes(), p.stat().st_mtime_ns) for p in place.iterdir()} == before


def test_an_import_goes_into_a_file(folder, tmp_path):
    with pytest.raises(PlantError, match="is a folder; an import goes into a plant file: name one, such as"):
        import_folder(folder(), tmp_path)


def test_five_thousand_stocks(folder, tmp_path):
    rows = "".join(f"S{i:04},{20 + i / 100},{4 + i / 1000},{800 + i},{i * 10},{860 + i / 100}\n" for i in range(5000))
    place = folder(stocks="stock,kv40,kv100,price_per_t,on_hand_kg,density15\n" + rows)
    done = import_folder(place, tmp_path / "big.plant")
    assert done.stocks == 5000
    with open_plant(tmp_path / "big.plant") as plant:
        assert plant.stocks()[4999].on_hand_kg == 49990.0
        assert plant.verify() is None


def test_the_plant_says_what_it_has_not(plant):
    with pytest.raises(PlantError, match=r"^no stock 'Z'; the plant has A, B$"):
        plant.stock("Z")
    with pytest.raises(PlantError, match=r"^no product 'Z␛'; the plant has P46$"):
        plant.product("Z\x1b")


def test_paths_may_hold_odd_characters(folder, tmp_path):
    place = tmp_path / "my plant #1 100%?.plant"
    import_folder(folder(), place)
    with open_plant(Path(place)) as plant:
        price(plant, 1.0)
    with open_plant(str(place)) as plant:
        assert plant.stock("A").price_per_t == 1.0
