"""The headless `stock`, and `batch pack`, `draw`, `balance`: text of at most 80 columns, JSON, and what is refused."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from blendtui import cli
from blendtui.store.opening import open_plant
from tests.desk.tank_farm import farm, order, release

FULL = ["--value", "kv40=31", "--value", "kv100=5.3", "--value", "density15=871", "--value", "flash=210",
        "--value", "pour=-12", "--value", "sulfur=0.42"]


@pytest.fixture
def plant(tmp_path: Path) -> Path:
    """The plant of the ledger's tests, with a batch of 10 t in K1."""
    path = farm(tmp_path)
    with open_plant(path, who="anna") as opened:
        order(opened, "B-1", {"LN": 6000.0, "HN": 4000.0}, asked=9900.0)
    return path


@pytest.fixture
def run(plant: Path, capsys):
    """Runs a command on the plant: exit code, stdout, stderr."""

    def command(*words: str) -> tuple[int, str, str]:
        code = cli.main([*words, "--plant", str(plant)])
        out, err = capsys.readouterr()
        assert "--json" in words or max(map(len, (out or " ").splitlines())) <= 80
        assert len(err.splitlines()) == (1 if code == 2 else 0)
        return code, out, err

    return command


def answer(run, *words: str) -> dict:
    code, out, _ = run(*words, "--json")
    assert code == 0
    return json.loads(out, parse_constant=lambda text: pytest.fail(f"{text} is no JSON"))


def test_receive(run, plant):
    code, out, _ = run("stock", "receive", "LN", "8", "t", "--lot", "L1", "--certificate", "C-7", *FULL, "--by", "bert")
    assert code == 0
    assert out.splitlines()[:2] == ["8000 kg of lot L1 received; the book of LN says 32000 kg",
                                    "it holds what was there before 75.00 %, lot L1 25.00 %"]
    found = answer(run, "stock", "receive", "LN", "8000", "--lot", "L2", "--keep", "--value", "kv40=30.4",
                   "--value", "kv100=5.24", "--on", "2031-05-04", "--sure", "--note", "second truck")
    assert found["lot"]["cells"] == {"kv40": 30.4, "kv100": 5.24}
    assert (found["lot"]["lot"], found["lot"]["note"], found["stock"]["source"]) == ("L2", "second truck", "computed")
    assert found["lots_in_tank"] == pytest.approx({"before": 0.6, "L1": 0.2, "L2": 0.2})
    assert found["no_longer_known"] == []
    with open_plant(plant) as opened:
        assert opened.stock("LN").on_hand_kg == 40000.0
        assert opened.lots("LN")[0].by == "bert"


def test_receive_is_questioned_and_refused(run):
    code, out, err = run("stock", "receive", "LN", "8 t", "--lot", "L1", "--value", "kv40=31", "--value", "kv100=5.3")
    assert (code, out) == (2, "")
    assert err == ("LN: flash point would be unknown, and P46 has a limit on it: type what the certificate says, or "
                   "have the tank's own value kept. Nothing was done; if it is so: --sure\n")
    for words, said in ((["8 t", *FULL], "LN: a delivery needs its lot; type the one on its papers"),
                        (["8 t", "--lot", "L1", "--value", "kv40"], "--value kv40: write PROPERTY=V"),
                        (["8 t", "--lot", "L1", *FULL, "--value", "kv40=30"], "kv40 is given twice"),
                        (["8 barrels", "--lot", "L1", *FULL], "'barrels'"),
                        (["8 t", "--lot", "L1", *FULL, "--source", "rumour"], "source 'rumour' is not known"),
                        (["8 t", "--lot", "L1", *FULL, "--on", "4.3.26"], "'4.3.26' is no time"),
                        (["8 t", "--lot", "L1", *FULL, "--law", "guess"], "guess"),
                        (["8 t", "--lot", "L1", "--value", "kv40=nan"], "kv40: 'nan' is not a number")):
        code, out, err = run("stock", "receive", "LN", *words)
        assert (code, out) == (2, "")
        assert said in err
    assert run("stock")[0] == 2
    assert "receive, test, dip or book" in run("stock")[2]


def test_test_dip_and_book(run):
    run("stock", "receive", "LN", "8 t", "--lot", "L1", "--certificate", "C-7", *FULL)
    found = answer(run, "stock", "test", "LN", "--value", "kv40=30.4", "--value", "kv100=5.24", "--method", "D445")
    assert (found["stock"]["source"], found["stock"]["kv40"]) == ("own", 30.4)
    assert found["still_computed"] == ["density15", "flash", "pour", "sulfur"]
    code, out, _ = run("stock", "dip", "LN", "36000", "L", "--at", "35", "--by", "emil")
    assert (code, out.startswith("dip 30")) == (0, True)
    assert "outside 0.5 %" in " ".join(out.split())
    code, _, err = run("stock", "dip", "LN", "31500", "--correct")
    assert (code, err) == (2, "LN: say why the book is set to the dip: it stands in the record\n")
    found = answer(run, "stock", "dip", "LN", "31500", "--correct", "--why", "a gasket leaked")
    assert (found["dip"]["corrected"], found["dip"]["book_kg"]) == (True, 32000.0)
    assert found["differs_pct"] == pytest.approx(-1.5625)
    found = answer(run, "stock", "book", "LN")
    assert [x["balance_kg"] for x in found["movements"]] == [30000.0, 24000.0, 32000.0, 31500.0]
    assert (found["balance_kg"], found["free_kg"], found["promised_kg"]) == (31500.0, 30500.0, 0.0)
    assert found["lots_in_tank"] == {"before": 0.75, "L1": 0.25}
    code, out, _ = run("stock", "book", "LN")
    assert code == 0
    assert out.splitlines()[0] == "LN Light neutral"
    assert "-6000 24000" in out
    assert "+8000 32000" in out
    assert "a gasket leaked" in " ".join(out.split())
    assert out.splitlines()[-1].split() == ["L1", *out.splitlines()[-1].split()[1:2], "C-7", "8000"]
    assert "30000 30000" not in run("stock", "book", "LN", "--last", "1")[1]
    assert run("stock", "book", "LN", "--last", "-1")[0] == 2
    assert answer(run, "stock", "book", "UN")["balance_kg"] is None
    assert "the book quantity is unknown" in run("stock", "book", "UN")[1]


def test_litres_beyond_the_tables_are_refused(run):
    for typed in ("500", "1e308"):
        code, out, err = run("stock", "dip", "LN", "30000 L", "--at", typed)
        assert (code, out, err.count("\n")) == (2, "", 1)
        assert "is no temperature of a" in err
    assert run("stock", "dip", "LN", "26 t", "--at", "500")[0] == 0  # a mass has no temperature
    assert run("stock", "book", "LN", "--last", "x")[2].startswith("argument --last: 'x' is no whole number")


def test_pack_draw_and_balance(run, plant):
    code, _, err = run("batch", "pack", "B-1", "9.8", "t")
    assert (code, err) == (2, "B-1 is open, and only a released batch is packed; release it first\n")
    found = answer(run, "batch", "draw", "B-1", "500", "--as", "rework", "--family", "hydraulic", "--why", "no room")
    assert (found["stock"], found["lot"], found["kg"], found["state"]) == ("RW-HYDRAULIC", "B-1", 500.0, "open")
    with open_plant(plant, who="anna") as opened:
        release(opened, "B-1")
    code, out, _ = run("batch", "pack", "B-1", "9350")
    assert (code, out.splitlines()[0]) == (0, "B-1: 9350 kg packed; 150 kg are in K1 by the book")
    assert answer(run, "batch", "balance", "B-1")["loss_kg"] is None
    code, out, _ = run("batch", "draw", "B-1", "110", "--as", "left")
    assert (code, out.splitlines()) == (0, [
        "B-1: 110 kg left", "the heel of K1 is now 110 kg of B-1", "loss 40.0 kg (0.40 %): 0.2–0.5 % is good",
        "yield 94.54 %: packed, of what went in and did not stay as a heel"])
    assert run("batch", "pack", "B-1", "-10", "--why", "a drum counted twice")[0] == 0
    found = answer(run, "batch", "balance", "B-1")
    assert (found["in_kg"], found["packed_kg"], found["rework_kg"], found["left_kg"], found["loss_kg"]) == (
        10000.0, 9340.0, 500.0, 110.0, pytest.approx(50.0))
    code, out, _ = run("batch", "balance", "B-1")
    assert [line.split() for line in out.splitlines()[2:9]] == [
        ["kg", "mass", "%"], ["------------------", "-----", "------"], ["went", "in", "10000", "100.00"],
        ["packed", "9340", "93.40"], ["rework", "500", "5.00"], ["left", "in", "the", "vessel", "110", "1.10"],
        ["loss", "50.0", "0.50"]]
    code, _, err = run("batch", "draw", "B-1", "5", "--as", "packed")
    assert (code, err) == (
        2, "--as packed: usable are rework, slops, sample, flush, left; what is sold is packed: batch pack\n")


def test_a_catalogue_folder_is_never_changed(run, plant, capsys):
    code = cli.main(["stock", "dip", "LN", "100", "--plant", str(plant.parent / "catalogue")])
    out, err = capsys.readouterr()
    assert (code, out) == (2, "")
    assert "is read but never changed" in err
