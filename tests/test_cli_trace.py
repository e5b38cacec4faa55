"""The headless `trace`: text of at most 80 columns, and JSON."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from blendtui import cli
from blendtui.desk import ledger, rework
from blendtui.store.opening import open_plant
from tests.desk.tank_farm import farm, order, release

FULL = {"kv40": "31", "kv100": "5.3", "density15": "871", "flash": "210", "pour": "-12", "sulfur": "0.42"}


@pytest.fixture
def plant(tmp_path: Path) -> Path:
    """Two batches: lot L1 in both, the first as heel and as rework in the second."""
    path = farm(tmp_path)
    with open_plant(path, who="anna") as opened:
        ledger.receive(opened, "LN", 10000.0, "L1", cells=FULL, certificate="C-7")
        order(opened, "B-1", {"LN": 6000.0, "HN": 4000.0}, customer="Nordlub")
        rework.leave(opened, "B-1", 1000.0, "rework", family="hydraulic", why="no room")
        release(opened, "B-1")
        rework.leave(opened, "B-1", 8900.0, "packed")
        rework.leave(opened, "B-1", 100.0, "left")
        order(opened, "B-2", {"LN": 5000.0, "RW-HYDRAULIC": 500.0, "HN": 4400.0}, customer="Sudlub")
    return path


@pytest.fixture
def run(plant: Path, capsys):
    def command(*words: str) -> tuple[int, str, str]:
        code = cli.main(["trace", *words, "--plant", str(plant)])
        out, err = capsys.readouterr()
        assert "--json" in words or max(map(len, (out or " ").splitlines())) <= 80
        assert all(line == line.rstrip() for line in out.splitlines())
        return code, out, err

    return command


def test_a_lot_as_text(run):
    code, out, _ = run("L1")
    lines = [line.split() for line in out.splitlines()]
    assert code == 0
    assert ["B-1", "O-B-1", "Nordlub", "released", "1500", "15.00", "1335"] in lines
    assert ["B-2", "O-B-2", "Sudlub", "open", "1340", "13.40", "0"] in lines
    assert "  by heel of B-1, LN L1, RW-HYDRAULIC B-1" in out.splitlines()
    assert ["tank", "LN", "L1", "7250", "25.00"] in lines
    assert ["heel", "K1", "B-1", "15.0", "15.00"] in lines


def test_a_batch_as_text(run):
    code, out, _ = run("B-2")
    lines = [line.split() for line in out.splitlines()]
    assert code == 0
    assert out.startswith("B-2 · P46 · 10000 kg in K1 · order O-B-2 · Sudlub · open")
    assert ["heel", "B-1", "100", "1.00"] in lines
    assert ["lot", "B-1", "500", "5.00", "rework", "of", "B-1"] in lines
    assert ["LN", "before", "4020", "40.20"] in lines
    row = next(line for line in lines if line[:2] == ["LN", "L1"])
    assert row[3:] == ["C-7", "1340", "13.40"]


def test_json(run):
    code, out, _ = run("B-2", "--json")
    assert code == 0
    found = json.loads(out, parse_constant=lambda text: pytest.fail(f"{text} is no JSON"))
    assert (found["kind"], found["kg"], found["also"]) == ("batch", 10000.0, [])
    assert {(o["stock"], o["lot"]): o["part"] for o in found["origins"]} == pytest.approx(
        {("LN", "L1"): 0.134, ("LN", "before"): 0.402, ("HN", None): 0.464})
    assert found["origins"][-1]["receipt"]["certificate"] == "C-7"
    assert [(n["what"], n["name"]) for n in found["back"]] == [
        ("heel", "B-1"), ("charge", "LN"), ("charge", "RW-HYDRAULIC"), ("charge", "HN")]
    assert found["back"][2]["of"][0]["of"][0]["name"] == "LN"
    assert found["batches_back"] == {"B-2": 1.0, "B-1": pytest.approx(0.06)}
    assert [(b["batch"], b["customer"], b["part"]) for b in found["batches"]] == [("B-2", "Sudlub", 1.0)]
    assert found["now_in"] == []


def test_kinds_and_unknown_names(run):
    assert "B-1 is a lot too: --kind says which is meant" in run("B-1")[1]
    assert run("B-1", "--kind", "lot")[1].startswith("RW-HYDRAULIC lot B-1: 1000 kg received 20")
    code, out, err = run("L9")
    assert (code, out) == (2, "")
    assert err == "no lot, batch, order, customer or stock 'L9'; the latest batches are B-2, B-1\n"
    assert run("B-1", "--kind", "parcel")[2] == (
        "'parcel' is no kind of name; usable are batch, lot, stock, order, customer\n")
    assert run("B-1", "--kind", "customer")[2] == "B-1 is no customer; it is a batch and a lot\n"


def test_a_long_past_is_cut_on_paper_and_whole_in_json(run, plant):
    with open_plant(plant, who="anna") as opened:
        for n in range(3, 12):
            release(opened, f"B-{n - 1}")
            rework.leave(opened, f"B-{n - 1}", 4000.0, "left", sure=True)
            order(opened, f"B-{n}", {"LN": 200.0 + n, "HN": 100.0}, customer="Nordlub")
    out = run("Nordlub")[1]
    assert "steps more: --json has all of them" in out
    assert len(json.loads(run("Nordlub", "--json")[1])["back"]) == 10
