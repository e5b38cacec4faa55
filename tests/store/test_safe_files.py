"""The plant file under rough handling: two connections in one process, readers without rights, killed sessions."""

from __future__ import annotations

import json
import os
import shutil
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest

from blendtui.store import connect, database, opening
from blendtui.store.edits import stock_cell
from blendtui.store.errors import NoPlant, NotAPlant, PlantBusy, PlantError, PlantFull, ReadOnlyPlant
from blendtui.store.opening import export_plant, import_folder, make_plant, open_plant
from blendtui.store.plant import Plant

ENDINGS = ("", "-wal", "-shm")


def price(plant: Plant, value: float) -> int:
    return plant.change([stock_cell(plant.stock("A"), "price_per_t", value)], "price of A")


def killed(path: Path, to: Path, *endings: str) -> None:
    """What a session that was killed at this moment would leave, under another name."""
    for ending in endings:
        shutil.copy(f"{path}{ending}", f"{to}{ending}")


# Locks

def test_opening_a_plant_again_keeps_the_locks_of_the_first(path, plant):
    plant._database.con.execute("BEGIN IMMEDIATE")
    open_plant(path).close()
    script = ("import sqlite3, sys; con = sqlite3.connect(sys.argv[1], timeout=0.1, isolation_level=None)\n"
              "try: con.execute('BEGIN IMMEDIATE'); print('free')\n"
              "except sqlite3.OperationalError: print('held')\n")
    said = subprocess.run([sys.executable, "-c", script, str(path)], capture_output=True, text=True, check=True)
    assert said.stdout.strip() == "held"
    plant._database.con.execute("ROLLBACK")


def test_only_sqlite_opens_the_plant_file(path):
    opened: list[str] = []
    watching = True
    sys.addaudithook(lambda event, given: opened.append(str(given[0])) if watching and event == "open" else None)
    with open_plant(path, who="anna") as plant:
        price(plant, 900.0)
    watching = False
    assert str(path) not in opened


# Readers without rights

@pytest.fixture
def barred(monkeypatch):
    """Nobody may write."""
    monkeypatch.setattr(database, "writable", lambda place: False)


def test_a_reader_follows_the_writers(path, barred, monkeypatch):
    with open_plant(path, who="anna") as reader:
        assert reader.read_only
        monkeypatch.undo()
        for value in (900.0, 901.0):
            with open_plant(path, who="bertil") as writer:
                price(writer, value)
                assert reader.stock("A").price_per_t == value
            assert reader.stock("A").price_per_t == value
        assert (reader.revision(), reader.verify()) == (3, None)


def test_a_reader_on_a_copy_takes_a_new_one_when_the_file_has_changed(path, barred, monkeypatch):
    class Refused(sqlite3.OperationalError):
        sqlite_errorcode = sqlite3.SQLITE_CANTOPEN

    class NoMemory:
        def execute(self, statement):
            raise Refused("unable to open database file")

        def close(self):
            pass

    real = connect.connect
    monkeypatch.setattr(connect, "connect", lambda place, how, timeout:
                        NoMemory() if how == "mode=ro" else real(place, how, timeout))
    reader = open_plant(path, who="anna")
    assert (reader.read_only, reader.stock("A").price_per_t) == (True, 820.0)
    with monkeypatch.context() as rights:
        rights.setattr(database, "writable", lambda place: True)
        with open_plant(path, who="bertil") as writer:
            price(writer, 900.0)
    assert (reader.stock("A").price_per_t, reader.verify()) == (900.0, None)
    with pytest.raises(ReadOnlyPlant):
        price(reader, 1.0)
    left = path.with_name("left.plant")
    with monkeypatch.context() as rights:
        rights.setattr(database, "writable", lambda place: True)
        with open_plant(path, who="bertil") as writer:
            price(writer, 901.0)
            killed(path, left, "", "-wal")
    with pytest.raises(ReadOnlyPlant) as caught:
        open_plant(left)
    assert str(caught.value) == (
        f"{left} was left in the midst of a session (left.plant-wal holds its last changes), and reading those takes "
        "the right to write; open it once from an account that may write it")
    reader.close()


def test_a_link_leads_to_the_file_and_what_lies_beside_it(path, plant):
    price(plant, 900.0)
    (path.parent / "links").mkdir()
    link = path.parent / "links" / "other.plant"
    link.symlink_to(path)
    with open_plant(link, who="bertil") as other:
        assert other.stock("A").price_per_t == 900.0
        price(other, 901.0)
    assert [p.name for p in link.parent.iterdir()] == ["other.plant"]
    assert plant.stock("A").price_per_t == 901.0


# What a killed session leaves

def test_a_new_plant_does_not_take_the_changes_of_one_that_is_gone(path, plant, tmp_path):
    price(plant, 900.0)
    gone = tmp_path / "gone.plant"
    killed(path, gone, "-wal", "-shm")
    for make in (lambda: import_folder(tmp_path / "catalogue", gone), lambda: open_plant(gone, create=True)):
        with pytest.raises(PlantError) as caught:
            make()
        assert str(caught.value) == (
            f"{gone}-wal was left by a plant gone.plant that is gone, with its last changes in it; put that plant back "
            "beside it, or delete gone.plant-wal, and try again")
    assert not gone.exists()
    Path(f"{gone}-wal").unlink()
    import_folder(tmp_path / "catalogue", gone)
    with open_plant(gone) as new:
        assert (new.stock("A").price_per_t, new.revision(), new.verify()) == (820.0, 1, None)


def test_a_killed_session_loses_nothing_it_has_saved(path, plant, tmp_path):
    price(plant, 900.0)
    killed(path, tmp_path / "left.plant", *ENDINGS)
    with open_plant(tmp_path / "left.plant") as left:
        assert (left.stock("A").price_per_t, left.verify()) == (900.0, None)


# Two who make the same plant

@pytest.mark.parametrize("links", [True, False])
def test_an_import_that_comes_second_goes_into_the_plant_of_the_first(folder, tmp_path, monkeypatch, links):
    place, put = tmp_path / "x.plant", opening.put

    def late(temporary, path):
        monkeypatch.setattr(opening, "put", put)
        import_folder(folder("first"), path, who="anna")
        return put(temporary, path)

    if not links:
        monkeypatch.setattr(opening.os, "link", lambda old, new: (_ for _ in ()).throw(PermissionError(1, "no")))
    monkeypatch.setattr(opening, "put", late)
    done = import_folder(folder("second", products="product,grade\nP32,ISO VG 32\n"), place, who="bertil")
    assert done.retired == ("P46",)
    with open_plant(place) as plant:
        assert [e.who for e in plant.journal()] == ["bertil", "anna"]
        assert [p.product for p in plant.products()] == ["P32"]


def test_without_links_a_plant_is_made_all_the_same(folder, tmp_path, monkeypatch):
    monkeypatch.setattr(opening.os, "link", lambda old, new: (_ for _ in ()).throw(PermissionError(1, "no")))
    import_folder(folder(), tmp_path / "x.plant")
    with open_plant(tmp_path / "x.plant") as plant:
        assert plant.verify() is None


def test_a_plant_is_never_made_over_another(path, tmp_path):
    before = path.read_bytes()
    assert make_plant(path, None) is False
    assert path.read_bytes() == before


@pytest.mark.parametrize("act", [open_plant, lambda place: open_plant(place, create=True),
                                 lambda place: import_folder(place.parent / "catalogue", place)])
def test_a_link_to_nothing_is_refused(folder, tmp_path, act):
    folder()
    (tmp_path / "link").symlink_to(tmp_path / "gone")
    with pytest.raises(NoPlant) as caught:
        act(tmp_path / "link")
    assert str(caught.value) == (f"{tmp_path / 'link'} is a link to {tmp_path / 'gone'}, which is not there; "
                                 "mend the link, or name the file itself")
    assert not (tmp_path / "gone").exists()


# Odd paths, rights and versions: one line each

def test_paths_that_cannot_be(folder, path, tmp_path):
    long = tmp_path / ("x" * 300)
    for act, words in ((lambda: open_plant("~nosuchuser/p"), "there is no such user"),
                       (lambda: import_folder("~nosuchuser/c", path), "there is no such user"),
                       (lambda: open_plant(long), "cannot be looked at: file name too long"),
                       (lambda: import_folder(long, path), "cannot be read: file name too long"),
                       (lambda: import_folder(folder(), tmp_path / ("y" * 250)), "has a name of 250 bytes; keep it"),
                       (lambda: export_plant(open_plant(folder()), long), "file name too long")):
        with pytest.raises(PlantError, match=words) as caught:
            act()
        assert "\n" not in str(caught.value)


def test_a_pipe_in_a_catalogue_is_a_fault(folder):
    os.mkfifo(folder() / "limits.csv")
    with pytest.raises(PlantError, match=r"^limits\.csv: is not a file; move it away and put the CSV file there$"):
        open_plant(folder())


def test_a_folder_that_may_not_be_read(folder, monkeypatch):
    def refuse(self):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "iterdir", refuse)
    with pytest.raises(PlantError, match=r"catalogue cannot be read: permission denied; check"):
        open_plant(folder())


def test_a_folder_whose_name_is_no_text(folder, tmp_path):
    place = Path(os.fsdecode(os.fsencode(tmp_path) + b"/caf\xe9"))
    shutil.copytree(folder(), place)
    import_folder(place, place.with_suffix(".plant"))
    with open_plant(place.with_suffix(".plant")) as plant:
        assert plant.opened_note.encode()
        assert plant.verify() is None


@pytest.mark.parametrize("version", [0, -1])
def test_a_version_that_no_plant_has(path, version):
    with sqlite3.connect(path) as con:
        con.execute(f"PRAGMA user_version = {version}")
    con.close()
    with pytest.raises(NotAPlant) as caught:
        open_plant(path)
    assert str(caught.value) == (f"{path} is damaged (it says that its schema is {version}, which no plant has); "
                                 "open a backup of it")


def test_a_disk_too_full_to_open_a_plant(path, monkeypatch):
    usage = shutil.disk_usage(path.parent)
    monkeypatch.setattr(database.shutil, "disk_usage", lambda place: usage._replace(free=4096))
    with open_plant(path) as plant, pytest.raises(PlantFull, match=r"is full; nothing was saved"), \
            plant._database.words():
        plant._database.con.execute(f"ATTACH '{path}/nowhere' AS other")


def test_no_message_holds_the_words_of_the_database(path, plant):
    for statement in ("SELECT * FROM nothing", "INSERT INTO trial_share VALUES ('a','b','c',1,1)"):
        with pytest.raises(PlantError) as caught, plant._database.words():
            plant._database.con.execute(statement)
        assert "nothing " not in str(caught.value)
        assert "constraint" not in str(caught.value).lower()


# The sign of who is writing

def test_the_sign_of_a_writer_follows_no_link(path, plant, tmp_path):
    (tmp_path / "letter").write_text("dear")
    path.with_name(path.name + "-writer").symlink_to(tmp_path / "letter")
    price(plant, 900.0)
    assert (tmp_path / "letter").read_text() == "dear"


def test_a_sign_of_nonsense_is_not_believed(path, plant):
    other = sqlite3.connect(path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    for pid in (10**20, "x", None):
        path.with_name(path.name + "-writer").write_text(json.dumps({"who": "Zed", "pid": pid}))
        with pytest.raises(PlantBusy, match=r"^another program has been writing"):
            price(plant, 900.0)
    other.close()
