"""`blendtui design` under several laws, at a chance, and in whole steps."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from blendtui.cli import main
from blendtui.desk import blends, numbers
from solver.choices import Range
from solver.target import LAWS

EXAMPLE = str(Path(__file__).parent.parent / "stock_catalog_example")


def answer(capsys: pytest.CaptureFixture[str], *words: str, code: int = 0) -> dict:
    """The JSON of a command."""
    assert main(["design", *words, "--plant", EXAMPLE, "--json"]) == code
    return json.loads(capsys.readouterr().out)


def test_under_every_law_costs_more_and_holds_under_each(capsys: pytest.CaptureFixture[str]) -> None:
    one, every = answer(capsys, "HYD-46"), answer(capsys, "HYD-46", "--under", "all")
    assert one["also_laws"] == []
    assert "by_law" not in one["limits"][0]
    assert every["cost_per_t"] > one["cost_per_t"]
    kv40 = next(x for x in every["limits"] if x["property"] == "kv40")
    assert set(kv40["by_law"]) == set(LAWS)
    assert all(kv40["held_low"] - 1e-5 <= v <= kv40["held_high"] + 1e-5 for v in kv40["by_law"].values())
    assert "by_law" not in next(x for x in every["limits"] if x["property"] == "flash")


def test_the_text_shows_each_law_within_80_columns(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["design", "HYD-46", "--under", "wright", "--plant", EXAMPLE]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert max(map(len, lines)) <= 80
    assert any(line.startswith("wright-volume") for line in lines)


def test_whole_steps(capsys: pytest.CaptureFixture[str]) -> None:
    made = answer(capsys, "HYD-46", "--whole")
    assert made["status"] == "optimal"
    assert all(x["met"] for x in made["limits"])
    assert made["whole"]["total_kg"] == pytest.approx(sum(made["charges_kg"].values()))
    for code, mass in made["charges_kg"].items():
        step = made["whole"]["steps_kg"][code]
        assert step is None or mass / step == pytest.approx(round(mass / step), abs=1e-9)
    assert made["whole"]["extra_per_t"] >= -1e-6


@pytest.mark.parametrize("pct", ["95", "95%", "0.95"])
def test_a_chance_costs_and_is_reached(capsys: pytest.CaptureFixture[str], pct: str) -> None:
    plain, sure = answer(capsys, "GEAR-220"), answer(capsys, "GEAR-220", "--confidence", pct)
    told = sure["confidence"]
    assert told["asked"] == pytest.approx(0.95)
    assert told["highest"] is None
    assert set(told["chance_by_limit"]) == {x["property"] for x in plain["limits"]}
    assert all(chance >= 0.95 - 1e-6 for chance in told["chance_by_limit"].values())
    assert told["cost_of_certainty_per_t"] == pytest.approx(
        sure["cost_per_t"] - told["compared_with"]["unguarded_cost_per_t"])


def test_a_chance_that_cannot_be_reached_is_said_to_be(capsys: pytest.CaptureFixture[str]) -> None:
    # The pour limit and the top of the KV40 window pull apart; the method for pour point scatters by some degrees.
    made = answer(capsys, "HYD-46", "--confidence", "99.9", code=3)
    assert made["status"] == "infeasible"
    assert 0.5 < made["confidence"]["highest"] < 0.999
    assert main(["design", "HYD-46", "--confidence", "99.9", "--plant", EXAMPLE]) == 3
    assert "NO BLEND IS SO SURE" in capsys.readouterr().out


@pytest.mark.parametrize(("words", "said"), [
    (["--under", "arrhenius"], "is no law"), (["--whole", "--confidence", "95"], "one at a time"),
    (["--confidence", "abc"], "abc"), (["--confidence", "100"], "100"), (["--confidence", "10"], "10")])
def test_bad_words_are_refused_in_a_line(capsys: pytest.CaptureFixture[str], words: list[str], said: str) -> None:
    assert main(["design", "HYD-46", *words, "--plant", EXAMPLE]) == 2
    out = capsys.readouterr()
    assert out.out == ""
    assert said in out.err
    assert out.err.count("\n") == 1


def test_a_range_that_time_did_not_narrow_is_marked(capsys: pytest.CaptureFixture[str],
                                                    monkeypatch: pytest.MonkeyPatch) -> None:
    known = answer(capsys, "HYD-46", "--ranges")
    assert known["ranges_not_narrowed"] == []
    code = next(c for c, (_, most) in known["ranges_pct"].items() if most > 1.0)
    found = {c: Range(low / 100.0, high / 100.0, narrowed=c != code) for c, (low, high) in known["ranges_pct"].items()}
    monkeypatch.setattr(blends, "marked_ranges", lambda *_: found)
    assert answer(capsys, "HYD-46", "--ranges")["ranges_not_narrowed"] == [code]
    assert main(["design", "HYD-46", "--ranges", "--plant", EXAMPLE]) == 0
    out = capsys.readouterr().out
    line = next(line for line in out.splitlines() if line.startswith(code))
    assert line.endswith(f"{numbers.pct(found[code].high)}?")
    assert out.count("?") == 3  # least, most, and the line that says what it means
    assert "? time ran out: the true range may be smaller" in out


def test_long_codes_stay_within_80_columns(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    long, short = "TANK-" + "7" * 55, "S1"
    (tmp_path / "stocks.csv").write_text("stock,kv40,kv100,price_per_t,on_hand_kg,density15\n"
                                         f"{long},30.6,5.23,800,90000,868\n{short},95.5,10.75,840,90000,879\n",
                                         encoding="utf-8")
    (tmp_path / "products.csv").write_text("product,grade,batch_kg\nP,ISO VG 46,12000\n", encoding="utf-8")
    assert main(["design", "P", "--ranges", "--plant", str(tmp_path)]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert max(map(len, lines)) <= 80
    assert long in lines
    assert lines[lines.index(long) + 1].split()[0].replace(".", "").isdigit()  # its amounts are on the next line
