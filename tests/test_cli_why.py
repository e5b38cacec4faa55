"""`blendtui why`: its JSON, its text, its exit codes and its refusals."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from blendtui.cli import main

ROOT = Path(__file__).parent.parent
EXAMPLE = ROOT / "stock_catalog_example"
FILES = {
    "stocks.csv": """stock,name,kind,api_group,on_hand_kg,price_per_t,density15,kv40,kv100
N150,Light,,I,100000,800,868,30.6,5.23
N500,Medium,,I,100000,840,879,95.5,10.75
BS,Heavy,,I,100000,1050,897,480,31.5
C6,Clean,,III,100000,1230,842,36.1,6.48
""",
    "products.csv": """product,grade,batch_kg,max_stocks,max_cost_per_t
P46,ISO VG 46,20000,,
THIN,,20000,,
FEW,,20000,1,
""",
    "limits.csv": """product,property,low,high
THIN,vi,125,
THIN,kv100,,6.6
FEW,kv40,45,47
""",
    "shares.csv": """product,of,low_pct,high_pct
P46,group III,,0
THIN,group III,,0
""",
}


@pytest.fixture
def folder(tmp_path: Path) -> str:
    """A small catalogue folder."""
    place = tmp_path / "catalogue"
    place.mkdir()
    for name, text in FILES.items():
        (place / name).write_text(text, encoding="utf-8")
    return str(place)


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, str, str]:
    code = main(argv)
    out, err = capsys.readouterr()
    return code, out, err


def asked(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, dict[str, Any]]:
    code, out, err = run(capsys, "why", *argv, "--json")
    assert err == ""
    return code, json.loads(out)


def test_the_sentence_and_every_key(capsys: pytest.CaptureFixture[str], folder: str) -> None:
    code, answer = asked(capsys, "THIN", "--plant", folder)
    assert code == 3
    assert set(answer) == {"product", "status", "law", "conflicts", "nearest", "reach", "to_buy", "whole_numbers_only",
                           "whole_numbers"}
    assert (answer["product"], answer["status"], answer["law"]) == ("THIN", "infeasible", "refutas")
    conflict = answer["conflicts"][0]
    assert set(conflict) == {"demands", "words", "best", "proven"}
    assert {(d["property"], d["side"], d["limit"]) for d in conflict["demands"]} == {
        ("vi", "low", 125.0), ("group III", "high", 0.0)}
    best = conflict["best"]["value"]
    assert 90.0 < best < 125.0
    assert conflict["words"] == (
        f"VI at least 125 and no group III: the best VI reachable is {best:.0f}")
    assert set(answer["to_buy"]) == {"assumed", "region", "tried", "stocks", "of_no_help", "pairs"}
    assert {"vi", "kv40", "kv100", "density15", "cost_per_t"} == set(answer["reach"])
    alone, others = (answer["reach"]["vi"][key][1] for key in ("alone", "with_others"))
    assert alone == pytest.approx(best, abs=0.2)
    assert others < alone - 0.2  # KV100 at most 6.6 costs VI
    assert answer["whole_numbers_only"] is False


def test_the_changes_taken_up_make_a_blend(capsys: pytest.CaptureFixture[str], folder: str, tmp_path: Path) -> None:
    _, answer = asked(capsys, "THIN", "--plant", folder)
    nearest = answer["nearest"]
    assert set(nearest) == {"shares_pct", "predicted", "cost_per_t", "changes", "moved", "order", "reasons"}
    assert sum(nearest["shares_pct"].values()) == pytest.approx(100.0)
    for change in nearest["changes"]:
        assert abs(change["needed"] - change["asked"]) == pytest.approx(
            change["units"] * (2.0 if change["property"] == "vi" else 0.0138 * change["asked"]), rel=1e-6)
    limits = {("vi", "low"): 125.0, ("kv100", "high"): 6.6}
    limits |= {(m["property"], m["side"]): m["limit"] for m in nearest["moved"]}
    (Path(folder) / "limits.csv").write_text(
        f"product,property,low,high\nTHIN,vi,{limits['vi', 'low']},\nTHIN,kv100,,{limits['kv100', 'high']}\n"
        "FEW,kv40,45,47\n", encoding="utf-8")
    assert asked(capsys, "THIN", "--plant", folder)[1]["status"] == "optimal"


def test_what_to_buy_and_what_is_not_allowed(capsys: pytest.CaptureFixture[str], folder: str) -> None:
    to_buy = asked(capsys, "THIN", "--plant", folder)[1]["to_buy"]
    (stock,) = to_buy["stocks"]
    assert (stock["stock"], stock["why_not"]) == ("C6", "the product caps group III at 0 %")
    assert 0.0 < stock["share_pct"] < 100.0
    assert stock["cost_per_t"] > 800.0
    assert to_buy["region"]
    assert all(set(p) == {"kv40", "kv100", "vi", "share_pct"} for p in to_buy["region"])
    # C6 (KV40 36.1, VI 131) lies between points of the grid, and its least share between theirs.
    near = [p["share_pct"] for p in to_buy["region"] if p["vi"] in (120.0, 140.0) and 15.0 < p["kv40"] < 80.0]
    assert min(near) <= stock["share_pct"]
    assert to_buy["assumed"]["values"]["density15"] == pytest.approx((868.0 + 879.0 + 897.0) / 3.0)


def test_the_operators_order(capsys: pytest.CaptureFixture[str], folder: str) -> None:
    by_vi = asked(capsys, "THIN", "--plant", folder, "--give", "vi")[1]["nearest"]
    assert [c["property"] for c in by_vi["changes"]] == ["vi"]
    assert by_vi["order"] == ["vi"]
    by_kv = asked(capsys, "THIN", "--plant", folder, "--give", "kv100")[1]["nearest"]
    assert by_kv["shares_pct"] is None
    assert by_kv["reasons"] == ["even with no limit on KV at 100 °C there is no blend: what stays firm cannot hold "
                                "together"]


def test_a_blend_that_exists_is_exit_0(capsys: pytest.CaptureFixture[str], folder: str) -> None:
    code, answer = asked(capsys, "P46", "--plant", folder)
    assert (code, answer["status"], answer["conflicts"], answer["nearest"], answer["to_buy"]) == (
        0, "optimal", [], None, None)
    low, high = answer["reach"]["kv40"]["with_others"]
    assert low == pytest.approx(30.6)
    assert high == pytest.approx(480.0)
    code, out, _ = run(capsys, "why", "P46", "--plant", folder)
    assert code == 0
    assert out.startswith("P46: a blend exists; nothing stands in the way.")


def test_only_whole_numbers(capsys: pytest.CaptureFixture[str], folder: str) -> None:
    code, answer = asked(capsys, "FEW", "--plant", folder)
    assert (code, answer["whole_numbers_only"]) == (3, True)
    assert answer["whole_numbers"] == {"fewest_stocks": 2, "largest_least_share_pct": None}
    out = run(capsys, "why", "FEW", "--plant", folder)[1]
    assert "2 base stocks and rework would do, 1 are allowed" in " ".join(out.split())


def test_a_batch_larger_than_the_tanks(capsys: pytest.CaptureFixture[str], folder: str) -> None:
    code, answer = asked(capsys, "P46", "--plant", folder, "--batch", "900 t")
    assert code == 3
    assert answer["conflicts"][0]["words"] == "900000 kg from what the tanks hold: the largest batch is 400000 kg"
    assert answer["nearest"]["shares_pct"] is None


def test_the_example_that_cannot_be_made(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, "why", "HYD-46X", "--plant", str(EXAMPLE))
    assert (code, err) == (3, "")
    assert "VI at least 163 (160 and its guard) and no VI improver" in " ".join(out.split())
    assert max(map(len, out.splitlines())) <= 80
    assert out.rstrip().endswith("A calculated blend is not a certificate: the laboratory releases.")


@pytest.mark.parametrize(("argv", "said"), [
    (("THIN", "--give", "flash"), "flash cannot give: THIN sets no limit on it; it limits vi, kv100"),
    (("THIN", "--give", "colour"), "unknown property 'colour'"),
    (("THIN", "--give", "x" * 5000), f"unknown property '{'x' * 39}…'; known are kv40"),
    (("THIN", "--batch", "0"), "--batch 0: a batch is more than 0 kg"),
    (("THIN", "--law", "mean"), "unknown law"),
    (("NONE",), "NONE"),
])
def test_bad_input_is_one_line(capsys: pytest.CaptureFixture[str], folder: str, argv: tuple[str, ...],
                               said: str) -> None:
    code, out, err = run(capsys, "why", *argv, "--plant", folder)
    assert (code, out) == (2, "")
    assert said in err
    assert err.count("\n") == 1
