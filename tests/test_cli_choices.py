"""`blendtui choices`: text, JSON with every key, refusals, exit codes."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from blendtui.cli import main
from blendtui.desk.plant import import_folder, open_plant
from blendtui.desk.trials import keep_trial
from blendtui.store.records import Trial
from tests.console.conftest import FILES

AIM_KEYS = {"aim", "of", "unit", "figure", "shares_pct", "charges_kg", "cost_per_t", "extra_pct", "predicted", "proven",
            "note"}
LIMIT_KEYS = {"kind", "of", "side", "limit", "unit", "step", "cost_per_t", "eased_cost_per_t", "tightened_cost_per_t",
              "saved_per_unit", "added_per_unit"}
STOCK_KEYS = {"stock", "share_pct", "price_per_t", "used_below_per_t", "share_below_pct", "checked", "note"}
REACH_KEYS = {"stock", "what", "now", "low", "high", "stocks_below", "stocks_above", "checked"}
KEYS = {"product", "law", "status", "least_cost_per_t", "shares_pct", "aims", "limits", "stocks", "reaches", "ranges",
        "sweep"}


@pytest.fixture(scope="module")
def plant(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The small plant of the console's tests, with a kept trial."""
    folder = tmp_path_factory.mktemp("choices")
    for name, text in FILES.items():
        (folder / name).write_text(text, encoding="utf-8")
    path = folder / "small.plant"
    import_folder(folder, path, who="anna")
    with open_plant(path, who="anna") as opened:
        keep_trial(opened, Trial("march", "H46", {"LIGHT": 0.5, "HEAVY": 0.3, "CLEAN": 0.192, "PACK": 0.008}))
    return path


def run(plant: Path, capsys: pytest.CaptureFixture[str], *options: str) -> tuple[int, str, str]:
    code = main(["choices", "--plant", str(plant), *options])
    out, err = capsys.readouterr()
    return code, out, err


def asked(plant: Path, capsys: pytest.CaptureFixture[str], *options: str, code: int = 0) -> dict:  # type: ignore[type-arg]
    found, out, err = run(plant, capsys, "--json", *options)
    assert (found, err) == (code, "")
    return json.loads(out)


def test_the_summary_as_json(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    answer = asked(plant, capsys, "H46")
    assert set(answer) == KEYS
    assert (answer["product"], answer["law"], answer["status"]) == ("H46", "refutas", "optimal")
    assert sum(answer["shares_pct"].values()) == pytest.approx(100.0)
    assert [a["aim"] for a in answer["aims"]] == ["least-cost", "widest-margin", "fewest-stocks", "most-of", "least-of",
                                                  "least-scarce", "closest", "most-rework"]
    assert all(set(a) == AIM_KEYS for a in answer["aims"])
    assert answer["aims"][0]["cost_per_t"] == pytest.approx(answer["least_cost_per_t"], rel=1e-9)
    assert answer["aims"][6]["of"] == "march"
    assert answer["aims"][7]["shares_pct"] is None
    assert answer["aims"][7]["note"] == "no rework may serve"
    assert all(set(p) == LIMIT_KEYS for p in answer["limits"])
    assert {p["of"] for p in answer["limits"]} >= {"kv40", "PACK"}
    for p in answer["limits"]:
        if p["eased_cost_per_t"] is not None:
            assert p["saved_per_unit"] == pytest.approx((p["cost_per_t"] - p["eased_cost_per_t"]) / p["step"])
    assert all(set(s) == STOCK_KEYS for s in answer["stocks"])
    assert {s["stock"] for s in answer["stocks"]} == {"LIGHT", "HEAVY", "BRIGHT", "CLEAN", "PACK"}
    assert [r["extra_pct"] for r in answer["ranges"]] == [0.0, 1.0, 2.0, 5.0]
    assert all(r["not_narrowed"] == [] for r in answer["ranges"])
    assert (answer["reaches"], answer["sweep"]) == (None, None)


def test_the_summary_as_text(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(plant, capsys, "H46")
    assert (code, err) == (0, "")
    assert max(map(len, out.splitlines())) <= 80
    for told in ("OTHER AIMS", "WHAT THE BINDING LIMITS COST", "RANGES, mass %", "AT WHICH PRICE", "closest to march",
                 "A calculated blend is not a certificate"):
        assert told in out


def test_only_the_parts_asked_for(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    ranges = asked(plant, capsys, "H46", "--extra", "3", "0.5")
    assert [r["extra_pct"] for r in ranges["ranges"]] == [0.5, 3.0]
    assert {k for k in KEYS if ranges[k] is None} == {"aims", "limits", "stocks", "reaches", "sweep"}
    again = asked(plant, capsys, "--extra", "0.5", "--extra=3", "H46")
    assert again == ranges
    small, large = (r["ranges_pct"] for r in ranges["ranges"])
    assert all(large[c][0] <= small[c][0] + 2e-3 and small[c][1] <= large[c][1] + 2e-3 for c in small)
    aims = asked(plant, capsys, "H46", "--aim", "most-of", "closest", "--stock", "CLEAN", "--trial", "march", "--extra",
                 "1", "--batch", "5 t", "--law", "wright-mass")
    assert [(a["aim"], a["of"]) for a in aims["aims"]] == [("most-of", "CLEAN"), ("closest", "march")]
    assert all(a["extra_pct"] <= 1.0 + 1e-3 for a in aims["aims"])
    assert sum(aims["aims"][0]["charges_kg"].values()) == pytest.approx(5000.0)
    assert aims["law"] == "wright-mass"
    assert aims["aims"][0]["figure"] == pytest.approx(aims["aims"][0]["shares_pct"]["CLEAN"], abs=1e-3)
    moves = asked(plant, capsys, "H46", "--moves")
    assert all(set(r) == REACH_KEYS for r in moves["reaches"])
    assert {r["what"] for r in moves["reaches"]} == {"price_per_t", "on_hand_kg"}
    assert moves["aims"] is None


def test_a_sweep(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    answer = asked(plant, capsys, "H46", "--sweep", "vi:low", "--points", "9")
    sweep = answer["sweep"]
    assert (sweep["of"], sweep["side"], sweep["stock"], sweep["now"]) == ("vi", "low", None, 93.0)
    assert [p["at"] for p in sweep["points"]] == sorted(p["at"] for p in sweep["points"])
    assert len(sweep["points"]) == 9
    assert {p["status"] for p in sweep["points"]} == {"optimal", "infeasible"}
    assert all((p["cost_per_t"] is None) == (p["status"] == "infeasible") for p in sweep["points"])
    price = asked(plant, capsys, "H46", "--sweep", "price:light", "--points", "3")["sweep"]
    assert (price["of"], price["side"], price["stock"]) == ("price", None, "LIGHT")
    assert price["low"] == pytest.approx(480.0)
    code, out, _ = run(plant, capsys, "H46", "--sweep", "vi:low", "--points", "9")
    assert code == 0
    assert "least cost, per t, against viscosity index, at least" in out
    assert "OTHER AIMS" not in out
    assert max(map(len, out.splitlines())) <= 80
    assert len(asked(plant, capsys, "H46", "--sweep", "kv40:high")["sweep"]["points"]) == 60


def test_no_blend_is_exit_3_with_the_answer(plant: Path, capsys: pytest.CaptureFixture[str]) -> None:
    answer = asked(plant, capsys, "NEVER", code=3)
    assert set(answer) == KEYS
    assert answer["status"] == "infeasible"
    assert {k for k in KEYS if answer[k] is None} == KEYS - {"product", "law", "status"}
    swept = asked(plant, capsys, "NEVER", "--sweep", "vi:low", "--points", "3", code=3)["sweep"]
    assert len(swept["points"]) == 3
    code, out, _ = run(plant, capsys, "NEVER")
    assert code == 3
    assert "no blend meets every limit" in out


@pytest.mark.parametrize(("options", "told"), [
    (("H99",), "H99"),
    (("H46", "--aim", "best"), "--aim best: known are least-cost, "),
    (("H46", "--aim", "all", "--extra", "1", "2"), "--aim takes one --extra"),
    (("H46", "--extra", "-1"), "--extra -1: give % above the least cost, 0 to 1000"),
    (("H46", "--extra", "x"), "--extra: "),
    (("H46", "--points", "9"), "--points goes with --sweep"),
    (("H46", "--sweep", "vi:low", "--points", "1"), "--points 1: give a whole number from 2 to 500"),
    (("H46", "--sweep", "vi"), "'vi' is no sweep"),
    (("H46", "--sweep", "vj:low"), "unknown property 'vj'"),
    (("H46", "--sweep", "price:NONE"), "no stock 'NONE'"),
    (("H46", "--sweep", "price:NOPRICE"), "NOPRICE: its price is unknown"),
    (("H46", "--trial", "may"), "H46 has no trial 'may'; there are march"),
    (("H46", "--aim", "most-of", "--stock", "NONE"), "no stock 'NONE'"),
    (("H46", "--batch", "0"), "a batch is more than 0 kg"),
    (("H46", "--law", "cube"), "unknown law 'cube'"),
])
def test_bad_input_is_one_line_and_exit_2(plant: Path, capsys: pytest.CaptureFixture[str], options: tuple[str, ...],
                                          told: str) -> None:
    code, out, err = run(plant, capsys, *options)
    assert (code, out) == (2, "")
    assert told in err
    assert err.count("\n") == 1


def test_an_empty_sweep_is_refused_and_an_extra_cost_counts_once(plant: Path,
                                                                 capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(plant, capsys, "H46", "--sweep", "")
    assert (code, out) == (2, "")
    assert "is no sweep" in err
    assert err.count("\n") == 1
    assert [r["extra_pct"] for r in asked(plant, capsys, "H46", "--extra", "5", "1", "5")["ranges"]] == [1.0, 5.0]
