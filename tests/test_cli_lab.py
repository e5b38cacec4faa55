"""The headless `lab`: what it prints, as text of at most 80 columns and as JSON, and what it refuses."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from blendtui import cli
from blendtui.store.opening import import_folder, open_plant
from solver.target import LAWS

ROOT = Path(__file__).parent.parent


@pytest.fixture
def plant(tmp_path: Path) -> Path:
    """The example plant as a file that may be changed."""
    import_folder(ROOT / "stock_catalog_example", tmp_path / "x.plant", who="anna")
    return tmp_path / "x.plant"


@pytest.fixture
def lab(plant: Path, capsys):
    """Runs `blendtui lab …` on the plant: exit code, stdout, stderr."""

    def run(*words: str, on: Path = plant) -> tuple[int, str, str]:
        code = cli.main(["lab", *words, "--plant", str(on)])
        out, err = capsys.readouterr()
        assert max(map(len, (out or " ").splitlines())) <= 80 or "--json" in words
        return code, out, err

    return run


def answer(lab, *words: str) -> dict:
    code, out, _ = lab(*words, "--json")
    assert code == 0
    return json.loads(out, parse_constant=lambda text: pytest.fail(f"{text} is no JSON"))


def test_record_and_list(lab, plant):
    code, out, _ = lab("record", "GEAR-220 2607", "GEAR-220", "MN50=48", "BR32=50.1", "GP18=1.8", "PD20=0.1", "--kv40",
                       "207.5", "--kv100", "17.98", "--value", "flash=475F", "--on", "2026-05-02", "--method", "D445")
    assert (code, out) == (0, "GEAR-220 2607 recorded\n")
    *_, blend = answer(lab, "list", "--product", "GEAR-220")["blends"]
    assert (blend["name"], blend["product"], blend["measured_on"], blend["method"]) == (
        "GEAR-220 2607", "GEAR-220", "2026-05-02", "D445")
    assert blend["values"] == {"kv40": 207.5, "kv100": 17.98, "flash": pytest.approx(246.11)}
    assert blend["parts"][0].pop("values")["flash"] == 252.0
    assert blend["parts"][0] == {"stock": "MN50", "share_pct": 48.0, "kv40": 98.6, "kv100": 10.92, "density15": 881.4,
                                 "lot": "tested 2026-02-17", "oil": ""}
    assert (blend["state"], blend["confirmed"], blend["questions"]) == ("", False, [])
    code, out, _ = lab("list")
    assert out.splitlines()[0].split() == ["blend", "product", "measured", "KV40", "KV100", "stocks"]
    assert "GEAR-220 2607  GEAR-220  2026-05-02  207.5  17.98       4" in out
    with open_plant(plant) as opened:
        assert opened.journal(1)[0].what == "measured blend GEAR-220 2607 recorded"


def test_a_doubtful_blend_is_questioned_and_confirmed(lab):
    _, out, _ = lab("list")
    assert "CIRC-100 2602  CIRC-100  2026-03-17  468.0  11.18       3  ? questioned" in out
    found = answer(lab, "record", "odd", "-", "MN50=50", "BR32=50", "--kv40", "990")
    assert (found["name"], found["confirmed"]) == ("odd", False)
    assert found["said"] == "odd recorded; it teaches nothing until it is confirmed"
    assert [(q["cell"], q["fault"]) for q in found["questions"]] == [("kv40", False)]
    assert lab("confirm", "odd")[:2] == (0, "measured blend odd confirmed\n")
    assert lab("drop", "odd")[:2] == (0, "measured blend odd dropped\n")
    found = answer(lab, "record", "odd", "-", "MN50=50", "BR32=50", "--kv40", "990", "--confirm")
    assert found["said"] == "odd recorded, confirmed"


def test_record_from_a_trial(lab, plant):
    from blendtui.desk import trials
    from blendtui.store.records import Trial

    with open_plant(plant) as opened:
        trials.keep_trial(opened, Trial("lean", "GEAR-220", {"MN50": 0.5, "BR32": 0.5}))
    assert lab("record", "b1", "GEAR-220", "--trial", "lean", "--kv40", "210")[0] == 0
    assert [p["share_pct"] for p in answer(lab, "list")["blends"][-1]["parts"]] == [50.0, 50.0]


def test_residuals(lab):
    found = answer(lab, "residuals", "--product", "GEAR-220")
    assert (found["law"], found["lessons"]) == ("refutas", [])
    first = found["residuals"][0]
    assert {k: first[k] for k in ("blend", "product", "measured_on", "property", "measured", "unit", "used")} == {
        "blend": "GEAR-220 2601", "product": "GEAR-220", "measured_on": "2026-03-02", "property": "kv40",
        "measured": 207.3, "unit": "%", "used": True}
    assert first["off"] == pytest.approx(100.0 * (207.3 / first["predicted"] - 1.0))
    assert first["law_alone"] == first["predicted"]
    assert found["by_law"]["kv40"]["refutas"]["mean"] == pytest.approx(1.85, abs=0.01)
    assert set(found["by_stock"]["kv40"]) == {"MN50", "BR32", "GP18", "PD20"}
    (drift,) = [d for d in found["drift"] if d["property"] == "kv40"]
    assert (drift["product"], drift["alarm"], drift["since"], drift["story"]) == ("GEAR-220", True, "GEAR-220 2601",
                                                                                "bias")
    _, out, _ = lab("residuals", "--product", "GEAR-220", "--law", "wright-mass")
    assert out.startswith("measured against predicted by wright-mass\n")
    assert "GEAR-220 2601  kv40          207.3      211.4  -1.95     %" in out
    assert "! GEAR-220 kv40: outside 2 σ since GEAR-220 2601" in out


def test_a_questioned_blend_is_shown_and_not_used(lab):
    found = answer(lab, "residuals", "--product", "CIRC-100")
    assert found["law"] == "wright-mass"  # the product's own
    assert {r["blend"]: r["used"] for r in found["residuals"]} == {"CIRC-100 2601": True, "CIRC-100 2602": False}
    assert found["by_product"][0]["count"] == 1
    _, out, _ = lab("residuals", "--stock", "HT12")
    (row,) = [line for line in out.splitlines() if line.startswith("CIRC-100 2602  kv40")]
    assert row.split()[3] == "468.0"
    assert row.endswith("%  ? not used")


def test_offer_take_lessons_withdraw(lab, plant):
    offers = answer(lab, "offer")["offers"]
    pair = next(o for o in offers if (o["first"], o["second"]) == ("MN50", "BR32"))
    assert (pair["kind"], pair["law"], pair["teaches"], pair["provisional"], pair["in_use"], pair["refusal"]) == (
        "excess", "refutas", True, False, None, None)
    for celsius in ("40", "100"):
        figures = pair["figures"][celsius]
        assert set(figures["by_form"]) == {"none", "one", "two"}
        assert figures["leave_one_out_pct"] == min(figures["by_form"].values()) < 0.3 < figures["unfitted_pct"]
        assert pair["terms"][celsius] == figures["terms"]
    value = next(o for o in offers if o["first"] == "VM70")
    assert (value["kind"], value["second"], value["provisional"]) == ("value", None, True)
    assert value["terms"] == {t: [one["index"]] for t, one in value["value"]["at"].items()}
    assert set(value["value"]["at"]) == {"40", "100"}
    cold = value["value"]["at"]["40"]
    assert cold["own"] == pytest.approx(45.8, abs=0.05)  # 60000 mm²/s, entered for it
    assert cold["fitted_pct"] < 0.1 < 1.5 < cold["alone_pct"]
    assert (cold["leave_one_out_pct"], cold["blends"]) == (None, ["HYD-46W 2601", "HYD-46W 2602", "HYD-46W 2603"])
    assert (value["low_pct"], value["high_pct"]) == (pytest.approx(7.65), pytest.approx(11.0))
    refused = {o["first"]: o["refusal"] for o in offers if o["refusal"]}
    assert set(refused) == {"HP85", "CP60"}
    assert all("too little to tell" in why for why in refused.values())
    _, out, _ = lab("offer")
    assert "\nMN50 with BR32 under refutas\n" in out
    assert "\nVM70 blending value under refutas PROVISIONAL\n  blends with number 45.0 at 40 °C and 43.7 at" in out
    assert "in question under refutas, so that no pair learns from it: CIRC-100 2602;" in out
    assert "these blends also hold up to 10.00 % VM70, whose blending value may" in out

    assert answer(lab, "take", "MN50", "BR32")["said"] == "L1 taken: MN50 with BR32 under refutas"
    (lesson,) = answer(lab, "lessons")["lessons"]
    assert (lesson["version"], lesson["in_use"], lesson["terms"], lesson["provisional"]) == ("L1", True, pair["terms"],
                                                                                           False)
    assert set(lesson["evidence"]) >= {"MN50-BR32 1", "GEAR-220 2606"}
    assert max(abs(r["off"]) for r in answer(lab, "residuals", "--product", "GEAR-220")["residuals"]) < 0.5
    design = json.loads(_run(plant, "design", "GEAR-220", "--json"))
    assert "L1" in json.dumps(design)  # every recipe names the version it used
    _, out, _ = lab("lessons")
    assert out.startswith("L1 MN50 with BR32 under refutas\n")

    assert lab("withdraw", "L1", "--reason", "bright stock of another source")[:2] == (
        0, "L1 withdrawn: MN50 with BR32 under refutas\n")
    assert lab("lessons")[1] == "no lesson is in use; blendtui lab offer shows what could be learnt\n"
    (lesson,) = answer(lab, "lessons", "--all")["lessons"]
    assert (lesson["in_use"], lesson["reason"]) == (False, "bright stock of another source")
    assert answer(lab, "take", "MN50", "BR32")["said"].startswith("L2 taken")


@pytest.mark.parametrize("law", ["refutas", "wright-mass"])
def test_the_value_of_an_improver_stands_in_the_recipe_with_its_range(lab, plant, law):
    from blendtui.desk import targets

    before = json.loads(_run(plant, "stocks", "--json"))
    assert answer(lab, "take", "VM70", "--law", law)["said"] == (
        f"L1 taken: VM70 blending value under {law}, provisional: measure more blends")
    assert json.loads(_run(plant, "stocks", "--json")) == before
    (lesson,) = answer(lab, "lessons")["lessons"]
    assert (lesson["kind"], lesson["law"], set(lesson["terms"])) == ("value", law, {"40", "100"})
    off = [r["off"] for r in answer(lab, "residuals", "--law", law, "--product", "HYD-46W")["residuals"]
           if r["property"].startswith("kv")]
    assert max(map(abs, off)) < 1.5
    assert answer(lab, "offer", "--law", law)["in_question"] == ["CIRC-100 2602"]
    text = _run(plant, "design", "HYD-46W", "--law", law)
    assert f"law {law} with the laboratory's L1 (provisional: L1)" in text
    assert "holds from" not in text  # 10 % lies within 7.65 to 11 %
    with open_plant(plant) as opened:
        targets.set_rule(opened, "HYD-46W", "VM70", "4", "6")
    text = _run(plant, "design", "HYD-46W", "--law", law)
    assert "its lesson L1 holds from 7.65 to 11.00 %" in " ".join(text.split())


def test_a_law_questions_what_it_cannot_read_and_says_so(lab):
    found = answer(lab, "offer", "--law", "wright-mass")
    assert found["in_question"] == ["HYD-46W 2601", "HYD-46W 2602", "HYD-46W 2603", "CIRC-100 2602"]
    assert {b["name"] for b in answer(lab, "list", "--law", "wright-mass")["blends"] if b["state"]} == set(
        found["in_question"])
    value = next(o for o in found["offers"] if o["first"] == "VM70")
    assert (value["refusal"], value["value"]["left_out"]) == (None, [])


def test_plan(lab):
    found = answer(lab, "plan", "GEAR-220", "--grams", "400")
    assert sum(found["blend_g"].values()) == pytest.approx(400.0)
    assert lab("plan", "GEAR-220")[1].startswith("BENCH BLEND, 500 g: ")
    assert lab("plan", "GEAR-220", "--grams", "5")[2] == "5 g: a bench blend lies between 20 and 20000 g\n"
    code, out, _ = lab("plan", "HYD-46X")
    assert code == 3
    assert out.startswith("NO BLEND meets every limit; this is the nearest\nBENCH BLEND, 500 g: ")


def _run(plant: Path, *words: str) -> str:
    import contextlib
    import io

    out = io.StringIO()
    with contextlib.redirect_stdout(out):
        cli.main([*words, "--plant", str(plant)])
    return out.getvalue()


@pytest.mark.parametrize(("words", "message"), [
    ((), "say what the laboratory is to do: record, list, confirm, drop, residuals, offer, take, withdraw, lessons, "
         "plan or fit; blendtui lab --help tells of each"),
    (("record", "x", "GEAR-220", "--kv40", "5"),
     "give what was charged either as STOCK=PCT arguments or with --trial, not both and not neither"),
    (("record", "x", "GEAR-220", "MN50=100"), "x: no result; type at least one, such as the KV at 40 °C"),
    (("record", "x", "GEAR-220", "MN50", "--kv40", "98"), "'MN50' is not STOCK=PCT; write for example MN50=25"),
    (("record", "x", "GEAR-220", "MN50=100", "--kv40", "98", "--value", "kv40=98"),
     "--value kv40=98: kv40 is given twice"),
    (("record", "x", "GEAR-220", "MN50=100", "--value", "flash"), "--value flash: write PROPERTY=V, for example "
                                                                  "flash=221"),
    (("record", "x", "GEAR-220", "MN50=100", "--kv40", "215 SUS"),
     "kv40: '215 SUS' alone cannot be placed: SUS is timed at 100 or 210 °F, not at 40 or 100 °C; type both, 100 °F "
     "first, as 215/46 SUS"),
    (("record", "x", "GEAR-220", "MN50=100", "--kv40", "98", "--on", "May"),
     "'May' is not a date; write year-month-day, such as 2026-03-01"),
    (("residuals", "--law", "best"), f"unknown law 'best'; known are {', '.join(LAWS)}"),
    (("residuals", "--stock", "XX"), "no measured blend holds XX; blendtui lab list --json shows what each holds"),
    (("list", "--law", "best"), f"unknown law 'best'; known are {', '.join(LAWS)}"),
    (("offer", "--law", "best"), f"unknown law 'best'; known are {', '.join(LAWS)}"),
    (("withdraw", "L1", "--reason", "x"), "no lesson 'L1'; taken so far: none"),
    (("drop", "none"), "no measured blend 'none'; on record, newest last: HYD-46 2604, HYD-46W 2601, HYD-46W 2602, "
                       "HYD-46W 2603, CIRC-100 2601, CIRC-100 2602"),
])
def test_bad_input_is_one_line(lab, words, message):
    assert lab(*words) == (2, "", message + "\n")


def test_a_folder_is_never_changed(lab, tmp_path):
    folder = ROOT / "stock_catalog_example"
    for words in (("record", "x", "-", "MN50=100", "--kv40", "98"), ("confirm", "CIRC-100 2602"),
                  ("drop", "HYD-46 2601"), ("take", "MN50", "BR32")):
        code, out, err = lab(*words, on=folder)
        assert (code, out) == (2, "")
        assert err == (f"{folder} is a catalogue folder, which is read but never changed; make a plant file of it to "
                       f"edit: blendtui import {folder} --plant FILE\n")
    assert lab("residuals", on=folder)[0] == 0
