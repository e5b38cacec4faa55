"""The headless `verify`, `backup` and `restore`: what they print and refuse, with their exit codes."""

from __future__ import annotations

import json
import sqlite3
from pathlib import Path

import pytest

from blendtui import cli
from blendtui.store.edits import stock_cell
from blendtui.store.opening import import_folder, open_plant

ROOT = Path(__file__).parent.parent


@pytest.fixture
def plant(tmp_path: Path) -> Path:
    """The example plant as a file, with one price of anna's."""
    place = tmp_path / "x.plant"
    import_folder(ROOT / "stock_catalog_example", place, who="anna")
    price(place, "anna", 880.0)
    return place


def price(place: Path, who: str, value: float) -> str:
    """Change a price; the hash of the entry."""
    with open_plant(place, who=who) as opened:
        opened.change([stock_cell(opened.stock("MN50"), "price_per_t", value)], f"MN50 price {value:g}")
        return opened.last_hash()


@pytest.fixture
def run(plant: Path, capsys):
    """Runs a command on the plant: exit code, stdout, stderr."""

    def act(*words: str, on: Path = plant) -> tuple[int, str, str]:
        code = cli.main([*words, "--plant", str(on)])
        out, err = capsys.readouterr()
        assert len(err.splitlines()) <= 1
        return code, out, err

    return act


def test_verify(run, plant):
    last = price(plant, "bertil", 890.0)
    code, out, err = run("verify")
    assert (code, err) == (0, "")
    assert out.splitlines()[-2:] == [
        "3 entries, each follows the one before it, and the plant is what they say", f"last hash {last}"]
    assert " ".join(out.splitlines()[:-2]).replace("  ", "") == f"the record of {plant} stands:"
    assert json.loads(run("verify", "--json")[1]) == {
        "ok": True, "fault": None, "entries": 3, "last_hash": last, "remarks": [], "found": None}


def test_verify_of_what_is_printed_on_paper(run, plant):
    printed = price(plant, "bertil", 890.0)
    price(plant, "anna", 891.0)
    spaced = " ".join(printed[n:n + 8] for n in range(0, 64, 8)).upper()
    for typed in (printed, spaced, printed[:12], f"{printed[:8]}-{printed[8:16]}"):
        found = json.loads(run("verify", "--hash", typed, "--json")[1])["found"]
        assert (found["entry"], found["who"], found["what"], found["hash"], found["entries_after"]) == (
            3, "bertil", "MN50 price 890", printed, 1)
        assert found["at"].endswith("Z")
    code, out, _ = run("verify", "--hash", printed)
    assert "found: entry 3, " in out
    assert ", bertil; 1 came after it\n  MN50 price 890" in out
    code, out, err = run("verify", "--hash", "0123456789abcdef", "--json")
    assert (code, out) == (2, "")
    assert err == (f"no entry of {plant} has the hash 0123456789abcdef; the paper is of another plant, or was printed "
                   "from another past than this one\n")
    for typed in ("abc", "printed hash", "g" * 64, "a" * 65):
        code, out, err = run("verify", "--hash", typed)
        assert (code, out) == (2, "")
        assert "is no hash of a journal; type it as it is printed, 8 to 64 digits of 0-9 and a-f" in err


def test_verify_of_a_damaged_plant(run, plant):
    with sqlite3.connect(plant) as con:
        con.execute("UPDATE stock SET price_per_t = 1 WHERE stock = 'MN50'")
    con.close()
    for words in (("verify",), ("verify", "--json"), ("verify", "--hash", "0" * 64)):
        code, out, err = run(*words)
        assert (code, out) == (2, "")
        assert err == (f"{plant} does not verify: the plant was changed past its journal: MN50 price_per_t 880 → 1\n")


def test_verify_tells_where_the_clock_went_back(run, plant, monkeypatch):
    from blendtui.store import journal

    with monkeypatch.context() as earlier:
        earlier.setattr(journal, "now", lambda: "2020-01-01T00:00:00.000Z")
        price(plant, "anna", 870.0)
    code, out, _ = run("verify")
    assert code == 0
    assert "remark: journal entry 3 (2020-01-01T00:00:00.000Z, anna: MN50 price 870) was" in out
    (remark,) = json.loads(run("verify", "--json")[1])["remarks"]
    assert remark.endswith(" before entry 2, by the clock")


def test_a_folder_keeps_no_record(run, tmp_path):
    code, out, err = run("verify", on=ROOT / "stock_catalog_example")
    assert (code, out) == (2, "")
    assert "is a catalogue folder, which keeps no record; name a plant file with --plant" in err
    assert run("backup", str(tmp_path / "b"), on=ROOT / "stock_catalog_example")[0] == 2


def test_backup_and_restore(run, plant, tmp_path):
    saved = tmp_path / "saved.plant"
    code, out, err = run("backup", str(saved))
    assert (code, err) == (0, "")
    assert "2 entries, checked" in out.replace("\n  ", " ")
    last = out.splitlines()[-1].removeprefix("last hash ")
    assert run("backup", str(saved)) == (2, "", f"{saved} is there already; name another file, or replace it with "
                                               "--replace\n")
    assert json.loads(run("backup", str(saved), "--replace", "--json")[1]) == {
        "file": str(saved), "entries": 2, "last_hash": last}
    price(plant, "bertil", 890.0)
    code, out, err = run("restore", str(saved))
    assert (code, out) == (2, "")
    assert "holds 1 entry that the backup lacks, " in err
    assert "(bertil 1); --replace-newer restores all the same" in err
    answer = json.loads(run("restore", str(saved), "--replace-newer", "--by", "carl", "--json")[1])
    assert (answer["plant"], answer["entries"], answer["lost"]) == (str(plant), 2, 1)
    with open_plant(plant) as opened, open_plant(answer["kept"]) as kept:
        assert (opened.stock("MN50").price_per_t, kept.stock("MN50").price_per_t) == (880.0, 890.0)
        assert opened.journal(1)[0].who == "carl"
    assert run("verify")[0] == 0
    code, out, _ = run("restore", str(saved), on=tmp_path / "new.plant")
    assert code == 0
    assert out.replace("\n  ", " ") == f"restored {tmp_path / 'new.plant'} from {saved}, 2 entries\n"


def test_restore_needs_a_backup(run, tmp_path):
    code, out, err = run("restore", str(tmp_path / "none"))
    assert (code, out) == (2, "")
    assert err == f"there is no backup at {tmp_path / 'none'}; check the path\n"
    code, out, err = run("restore")
    assert (code, out) == (2, "")
    assert "FILE" in err


def test_backup_and_restore_in_the_folder_one_stands_in(run, plant, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert run("backup", "saved.plant")[::2] == (0, "")
    assert run("backup", "saved.plant", "--replace", on=Path("x.plant"))[::2] == (0, "")
    price(plant, "bertil", 890.0)
    assert run("restore", "saved.plant", "--replace-newer", on=Path("x.plant"))[::2] == (0, "")
    assert run("restore", "saved.plant", on=Path("new.plant"))[::2] == (0, "")
    with open_plant(plant) as opened, open_plant(tmp_path / "new.plant") as new:
        assert (opened.stock("MN50").price_per_t, new.stock("MN50").price_per_t) == (880.0, 880.0)
    assert not [x for x in tmp_path.iterdir() if x.name.endswith("-journal")]
