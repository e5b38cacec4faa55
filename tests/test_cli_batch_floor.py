"""The headless steps of charging and of the laboratory: text of at most 80 columns, JSON, and what is refused."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from blendtui import cli
from blendtui.store.batch_edits import changed
from blendtui.store.opening import open_plant
from blendtui.store.records import Step
from tests.desk.charging_plant import LIMITS, PLAN, SHARES, STOCKS, TOLERANCE
from tests.desk.made_batches import ordered, plant_file


@pytest.fixture
def plant(tmp_path: Path) -> Path:
    """10 t of KV40 49.5 to 52.5 to be charged."""
    path = plant_file(tmp_path, stocks=STOCKS, products="product,grade,only_listed\nP,,yes\n", limits=LIMITS,
                      shares=SHARES, vessels="vessel,capacity_l\nK1,14000\n")
    with open_plant(path, who="anna") as opened:
        ordered(opened, "P", PLAN)
        rows = opened.batch("B-0001").charges
        opened.step(lambda: Step(tuple(changed(c, tolerance_kg=TOLERANCE[c.stock]) for c in rows), "tolerances"))
    return path


@pytest.fixture
def batch(plant: Path, capsys):
    """Runs `blendtui batch …` on the plant: exit code, stdout, stderr."""

    def run(*words: str) -> tuple[int, str, str]:
        code = cli.main(["batch", *words, "--plant", str(plant)])
        out, err = capsys.readouterr()
        assert max(map(len, (out or " ").splitlines())) <= 80 or "--json" in words
        return code, out, err

    return run


def answer(batch, *words: str) -> dict:
    code, out, _ = batch(*words, "--json")
    assert code == 0
    return json.loads(out, parse_constant=lambda text: pytest.fail(f"{text} is no JSON"))


def charge_all(batch, heavy: str = "800") -> None:
    for line, kg, lot in (("1", "6000", "A7"), ("2", heavy, "B7"), ("3", "2840", "C7"), ("4", "2 drums", "D7")):
        assert batch("charge", "B-0001", line, *kg.split(), "--lot", lot, "--by", "Ben")[0] == 0


def test_charge_and_check(batch, plant):
    code, out, err = batch("charge", "B-0001", "1", "6.01", "t", "--lot", "A7", "--at", "95F", "--by", "Ben")
    assert (code, out, err) == (0, "line 1, A: 6010 kg charged, 6000 kg planned\n", "")
    assert batch("check", "B-0001", "1", "--by", "ben")[::2] == (
        2, "line 1 was entered by Ben: the second check is by another person\n")
    code, out, _ = batch("check", "B-0001", "1", "--by", "Eva")
    assert code == 0
    assert out.startswith("line 1, A: checked by Eva, ")
    with open_plant(plant) as opened:
        row = opened.batch("B-0001").charges[0]
    assert (row.actual_kg, row.celsius, row.by, row.checked_by, row.lots) == (6010.0, 35.0, "Ben", "Eva", {"A7": 1.0})


def test_several_lines_are_checked_all_or_none(batch, plant):
    charge_all(batch)
    code, out, err = batch("check", "B-0001", "1", "2", "9", "--by", "Eva")
    assert (code, out, err.count("\n")) == (2, "", 1)
    with open_plant(plant) as opened:
        assert [c.checked_by for c in opened.batch("B-0001").charges] == ["", "", "", ""]
    found = answer(batch, "check", "B-0001", "1", "2", "2", "--by", "Eva")
    assert [(row["line"], row["checked_by"]) for row in found["lines"]] == [(1, "Eva"), (2, "Eva")]


def test_a_charge_outside_tolerance_as_json(batch):
    found = answer(batch, "charge", "B-0001", "2", "1100", "--lot", "B7", "--by", "Ben")
    assert (found["batch"], found["odd"]) == ("B-0001", True)
    row = {"line": 2, "stock": "B", "state": "done", "plan_kg": 800.0, "actual_kg": 1100.0, "lot": "B7", "by": "Ben",
           "checked_by": None}
    assert {name: found["line"][name] for name in row} == row
    effect = found["effects"]["kv40"]
    assert effect["planned"] == pytest.approx(50.77501445814014, rel=1e-12)  # unrounded: the law of Refutas
    assert effect["now"] == pytest.approx(53.52034087631868, rel=1e-12)
    ahead = found["outlook"]
    assert (ahead["good"], ahead["missed"]) == (False, ["KV40 53.52 mm²/s, high 52.50"])
    assert ahead["remedy"]["additions_kg"]["ADD"] == 360.0
    assert ahead["remedy"]["packages"] == {"ADD": 2}
    assert any(x.startswith("would bring every limit back: ") for x in found["said"])


def test_a_question_is_answered_with_sure(batch):
    code, out, err = batch("charge", "B-0001", "2", "8000", "--lot", "B7")
    assert (code, out) == (2, "")
    assert err == ("B: 8000 kg is 10 times the planned 800 kg: has the point slipped by one place? Nothing was done; "
                   "if it is so: --sure\n")
    code, out, _ = batch("charge", "B-0001", "2", "8000", "--lot", "B7", "--sure")
    assert code == 0
    assert out.startswith("OUTSIDE TOLERANCE: line 2, B: 8000 kg charged, 800 kg planned: 7200 kg (900.0 %)")


@pytest.mark.parametrize(("words", "said"), [
    (("charge", "B-0001", "1", "-5"), "-5 kg cannot have been charged"),
    (("charge", "B-0001", "1", "nan"), "not a number"),
    (("charge", "B-0001", "7", "5"), "has no line 7"), (("charge", "B-9", "1", "5"), "no batch 'B-9'"),
    (("charge", "B-0001", "x", "5"), "argument LINE: 'x' is no whole number"),
    (("charge", "B-0001", "1"), "are required: KG"),
    (("charge", "B-0001", "1", "6000", "--at", "hot"), "--at: 'hot' is not a number"),
    (("charge", "B-0001", "1", "6000", "--at", "1e308"), "--at: 1e308 is no temperature of an oil"),
    (("check", "B-0001", "1_0"), "argument LINE: '1_0' is no whole number"),
    (("result", "B-0001", "kv40=46", "--sample", "x" * 5000), "xxx…' is no whole number"),
    (("charge", "B-0001", "1", "6000", "--stock", "ZZ"), "the plant has no stock 'ZZ'"),
    (("correct", "B-0001", "1", "6000"), "a correction needs its reason"),
    (("miss", "B-0001", "1"), "a line is dropped only with its reason"),
    (("check", "B-0001", "1"), "is not charged yet"),
    (("replan", "B-0001"), "nothing is to be planned anew"), (("sample", "B-0001"), "nothing is in the vessel yet"),
    (("result", "B-0001", "kv40=46"), "has no sample; draw one"), (("result", "B-0001", "46"), "write PROPERTY=V"),
    (("result", "B-0001", "kv40=46", "kv40=47"), "is given twice"),
    (("decide", "B-0001"), "has no sample of what is in the vessel now"),
    (("decide", "B-0001", "maybe"), "'maybe' is no decision"),
    (("withdraw-result", "B-0001", "1", "1"), "withdrawn only with a reason")])
def test_bad_input_is_one_line_and_nothing_is_done(batch, plant, words, said):
    with open_plant(plant) as opened:
        before = opened.revision()
    code, out, err = batch(*words)
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert said in err
    with open_plant(plant) as opened:
        assert opened.revision() == before


def test_correct_and_miss(batch, plant):
    batch("charge", "B-0001", "1", "6000", "--lot", "A7", "--by", "Ben")
    code, out, _ = batch("correct", "B-0001", "1", "6040", "--why", "read again", "--by", "Eva")
    assert code == 0
    assert out.splitlines()[0] == "line 1, A: 6000 → 6040 kg"
    code, out, _ = batch("miss", "B-0001", "4", "--why", "no drums")
    assert code == 0
    assert "MISSES ADD 0 %, low 3.6 %" in out
    with open_plant(plant) as opened:
        assert opened.stock("A").on_hand_kg == 53960.0
        assert opened.batch("B-0001").charges[3].state == "dropped"


def test_outlook_and_replan(batch):
    code, out, _ = batch("outlook", "B-0001")
    assert code == 0
    # By hand: Σ m/ρ gives 877.45 kg/m³ at 15 °C, D1250 makes that 848.95 at 60 °C.
    assert out.splitlines()[0] == "B-0001: 10000 kg when all is charged as planned, 11779 L at 60 °C"
    assert "KV at 40 °C, mm²/s       50.78  49.50  52.50      met" in out.splitlines()
    assert out.rstrip().endswith("A calculated blend is not a certificate: the laboratory releases.")
    batch("charge", "B-0001", "2", "1100", "--lot", "B7")
    found = answer(batch, "outlook", "B-0001")
    assert (found["good"], found["total_kg"], found["capacity_l"]) == (False, 10300.0, 14000.0)
    remedy = found["remedy"]["additions_kg"]
    planned = answer(batch, "replan", "B-0001", "--why", "bright stock over", "--by", "Ben")
    assert {c["stock"]: c["plan_kg"] for c in planned["charges"] if c["state"] == "planned"} == remedy
    assert planned["outlook"]["good"] is True
    assert batch("replan", "B-0001")[0] == 2


def test_the_laboratory_from_sample_to_decision(batch, plant):
    charge_all(batch)
    code, out, _ = batch("sample", "B-0001", "--place", "middle", "--at", "59", "--by", "Carl")
    assert code == 0
    assert out.startswith("B-0001 sample 1, middle: drawn ")
    found = answer(batch, "result", "B-0001", "kv40=50.9", "kv100=7.36", "--by", "Dora", "--method", "ASTM D7042")
    assert (found["decision"], found["missing"]) == ("no result", ["flash point"])
    code, out, _ = batch("result", "B-0001", "flash=221", "--sample", "1")
    assert code == 0
    assert out.splitlines()[0] == "B-0001 sample 1: release"
    assert "- KV40 50.90 mm²/s, low 49.50: inside by 1.40 = 2.32 R (R 0.604, ASTM D445)," in out.splitlines()
    found = answer(batch, "verdict", "B-0001")
    kv40 = found["limits"][0]
    # R = 1.22 % of the limit (ASTM D445), 49.5: 0.6039.
    assert (kv40["distance"], kv40["reproducibility"]) == (pytest.approx(1.4), pytest.approx(0.6039))
    assert kv40["distance_r"] == kv40["distance"] / kv40["reproducibility"]
    assert [(r["property"], r["method"]) for r in found["on_record"]["results"]] == [
        ("kv40", "ASTM D7042"), ("kv100", "ASTM D7042"), ("flash", "ASTM D92")]
    done = answer(batch, "decide", "B-0001", "--by", "Dora")
    assert (done["decision"], done["sample"], done["by"], done["why"]) == ("release", 1, "Dora", None)
    assert "KV40 50.90 mm²/s, low 49.50" in done["words"]
    assert answer(batch, "verdict", "B-0001")["decided"] == "release"
    with open_plant(plant) as opened:
        assert opened.verify() is None
        assert [b.name for b in opened.measured()] == ["B-0001"]


def test_an_outlook_tells_of_what_the_laboratory_measured(batch):
    charge_all(batch)
    assert batch("sample", "B-0001", "--by", "Carl")[0] == 0
    assert batch("result", "B-0001", "kv40=48.0", "kv100=7.6", "--by", "Dora")[0] == 0
    said = answer(batch, "outlook", "B-0001")["said"]
    assert said[-1].startswith("the laboratory has measured it: sample 1: trim")
    assert said[-1].endswith("; blendtui batch verdict B-0001 says why")
    assert "the laboratory has measured it" in batch("outlook", "B-0001")[1]


def test_swapped_slipped_and_withdrawn_results(batch):
    charge_all(batch)
    batch("sample", "B-0001")
    assert batch("result", "B-0001", "kv40=7.36", "kv100=50.9")[2] == (
        "KV40 7.360 and KV100 50.90 mm²/s: an oil is thinner hot than cold; swapped?\n")
    code, _, err = batch("result", "B-0001", "kv40=509", "kv100=7.36")
    assert code == 2
    assert err.startswith("KV40 509.0 where 50.78 mm²/s is predicted from what was charged: has the point slipped by")
    assert batch("result", "B-0001", "kv40=51", "--when", "2020-01-01 10:00")[2].startswith(
        "a result at 2020-01-01 10:00 is dated before its sample 1, which was drawn at ")
    assert batch("result", "B-0001", "kv40=48", "kv100=7.1", "flash=221")[0] == 0
    code, out, _ = batch("withdraw-result", "B-0001", "1", "1", "--why", "bubble in the tube", "--by", "Dora")
    assert code == 0
    assert "  withdrawn: KV40 48.00 of sample 1 (Dora: bubble in the tube)" in out.splitlines()
    code, _, err = batch("decide", "B-0001", "release", "--why", "urgent")
    assert (code, err) == (2, "no release: KV40 and VI (KV40 and KV100 from one sample; sample 1 has only KV100) has "
                              "no result; enter it first\n")


def test_a_catalogue_folder_takes_no_step(tmp_path, batch, plant, capsys):
    code = cli.main(["batch", "charge", "B-0001", "1", "5", "--plant", str(plant.parent)])
    out, err = capsys.readouterr()
    assert (code, out) == (2, "")
    assert "no batch 'B-0001'" in err
