"""`blendtui chance` and `design --confidence`: JSON, text, exit codes, refusals."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from blendtui.cli import main

FILES = {
    "stocks": """stock,name,kind,api_group,on_hand_kg,price_per_t,density15,kv40,kv100,source
N150,Light,,I,100000,800,868,30.6,5.23,own
N500,Medium,,I,100000,840,879,95.5,10.75,certificate
BS,Heavy,,I,100000,1050,897,480,31.5,own
""",
    "products": """product,grade,batch_kg,max_stocks,min_share_pct
P46,ISO VG 46,20000,,
TOOHIGH,ISO VG 46,20000,,
SHORT,,20000,,
""",
    "limits": """product,property,low,high,guard
P46,vi,95,,
P46,kv40,,,2%
TOOHIGH,vi,150,,
SHORT,kv40,41,50,
""",
    "shares": """product,of,low_pct,high_pct
SHORT,N150,,20
SHORT,N500,,20
SHORT,BS,,20
"""}


@pytest.fixture
def folder(tmp_path: Path) -> str:
    place = tmp_path / "catalogue"
    place.mkdir()
    for name, text in FILES.items():
        (place / f"{name}.csv").write_text(text, encoding="utf-8")
    return str(place)


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, str, str]:
    code = main(argv)
    out, err = capsys.readouterr()
    return code, out, err


def asked(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, dict[str, Any]]:
    code, out, err = run(capsys, *argv, "--json")
    assert err == ""
    return code, json.loads(out)


def test_the_chance_of_the_recipe(folder: str, capsys: pytest.CaptureFixture[str]) -> None:
    code, told = asked(capsys, "chance", "P46", "--plant", folder)
    assert code == 0
    assert (told["product"], told["law"], told["batch_kg"], told["blends"]) == ("P46", "refutas", 20000.0, 100_000)
    assert sum(told["shares_pct"].values()) == pytest.approx(100.0)
    for limit in told["limits"]:
        assert limit["chance"] == pytest.approx(limit["chance_closed"], abs=0.01)
        assert 0.0 < limit["chance_error"] < 0.002
    assert told["all"]["chance"] <= min(x["chance"] for x in told["limits"])
    assert told["all"]["chance"] == pytest.approx(told["all"]["closed"], abs=0.01)
    kv40 = next(x for x in told["limits"] if x["property"] == "kv40")
    assert (kv40["low"], kv40["high"]) == pytest.approx((41.4, 50.6))  # as the grade asks, without the guard


def test_a_seed_gives_its_answer_again(folder: str, capsys: pytest.CaptureFixture[str]) -> None:
    of = ("chance", "P46", "--plant", folder, "--blends", "5000", "--seed")
    first, again, other = (asked(capsys, *of, seed)[1] for seed in ("4", "4", "5"))
    assert first == again
    assert first["limits"] != other["limits"]
    assert (first["seed"], first["blends"]) == (4, 5000)


def test_given_shares_under_a_given_law_and_batch(folder: str, capsys: pytest.CaptureFixture[str]) -> None:
    code, told = asked(capsys, "chance", "P46", "N150=62", "N500=38", "--plant", folder, "--law", "wright-mass",
                       "--batch", "5t", "--blends", "2000")
    assert code == 0
    assert told["shares_pct"] == pytest.approx({"N150": 62.0, "N500": 38.0})
    assert (told["law"], told["batch_kg"]) == ("wright-mass", 5000.0)


def test_the_text_fits_a_printer_and_ends_with_the_caution(folder: str, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, "chance", "P46", "--plant", folder, "--blends", "2000")
    assert (code, err) == (0, "")
    lines = out.splitlines()
    assert max(map(len, lines)) <= 80
    assert lines[0].startswith("P46, the least-cost recipe: mass % N150")
    assert "What the doubt is made of" in out
    assert "What to test next" in out
    assert lines[-1] == "A calculated blend is not a certificate: the laboratory releases."


def test_without_a_blend_the_nearest_is_spoken_of(folder: str, capsys: pytest.CaptureFixture[str]) -> None:
    code, told = asked(capsys, "chance", "TOOHIGH", "--plant", folder, "--blends", "2000")
    assert code == 3
    assert told["all"]["closed"] < 1e-3
    code, out, _ = run(capsys, "chance", "TOOHIGH", "--plant", folder, "--blends", "2000")
    assert code == 3
    assert "NO BLEND meets every limit" in out
    code, told = asked(capsys, "chance", "SHORT", "--plant", folder)
    assert code == 3
    assert told["shares_pct"] is None
    assert told["all"] == {"chance": None, "error": None, "closed": None}
    assert told["notes"]


@pytest.mark.parametrize(("argv", "said"), [
    (("chance", "P46", "N150=62"), "the shares sum to 62 %, not to 100 %; mend them"),
    (("chance", "P46", "N150=60", "X=40"), "no stock 'X'"),
    (("chance", "P46", "N150"), "'N150' is not STOCK=PCT"),
    (("chance", "NOPE"), "no product 'NOPE'"),
    (("chance", "P46", "--seed", "x"), "--seed x: give a whole number from 0 to"),
    (("chance", "P46", "--blends", "0"), "--blends 0: give a whole number from 1 to 5000000"),
    (("chance", "P46", "--batch", "0"), "--batch 0: a batch is more than 0 kg"),
    (("chance", "P46", "--law", "foo"), "unknown law 'foo'"),
    (("chance", "P46", "N150=1e308", "N500=1e308"), "N150=1e308: a share lies within 0 to 100 %"),
    (("chance", "P46", "--seed", "1\n2"), "--seed 1␊2: give a whole number from 0 to"),
    (("design", "P46", "--confidence", "9\n5"), "9␊5 is no chance"),
    (("design", "P46", "--confidence", "40"), "a chance of 40 % cannot be asked; choose 50 to 99.9 %"),
    (("design", "P46", "--confidence", "sure"), "sure is no chance; type for example 95 or 0.95")])
def test_bad_input_is_one_line(folder: str, capsys: pytest.CaptureFixture[str], argv: tuple[str, ...],
                               said: str) -> None:
    code, out, err = run(capsys, *argv, "--plant", folder)
    assert (code, out) == (2, "")
    assert said in err
    assert err.count("\n") == 1


@pytest.mark.parametrize("typed", ["95", "95%", "0.95"])
def test_a_recipe_at_a_chance(folder: str, capsys: pytest.CaptureFixture[str], typed: str) -> None:
    code, told = asked(capsys, "design", "P46", "--plant", folder, "--confidence", typed)
    assert code == 0
    sure = told["confidence"]
    assert sure["reached"]
    assert sure["asked"] == 0.95
    assert min(sure["chance_by_limit"].values()) >= 0.95
    assert sure["cost_of_certainty_per_t"] == pytest.approx(
        told["cost_per_t"] - sure["compared_with"]["unguarded_cost_per_t"])
    shares = [f"{stock}={pct!r}" for stock, pct in told["shares_pct"].items()]
    _, chances = asked(capsys, "chance", "P46", *shares, "--plant", folder)
    assert min(x["chance"] for x in chances["limits"]) >= 0.945
