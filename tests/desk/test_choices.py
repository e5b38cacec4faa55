"""What else would do, at the desk: parts as they come, what is kept of them, sweeps as typed, and the words."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import pytest

from blendtui import curve
from blendtui.desk import choice_words as words
from blendtui.desk.choices import (
    PARTS,
    Asked,
    Choices,
    choices,
    newest_trial,
    sweep_of,
    swept,
    trial_named,
)
from blendtui.desk.errors import DeskError
from blendtui.store.records import Trial
from blendtui.widgets import paint
from solver.aims import AIMS
from solver.errors import SolverError
from solver.recipe import design
from solver.target import Limit, ShareRule, Target
from tests.solver.test_recipe import PLANT

STOCKS = tuple(replace(s, on_hand_kg=6e4) for s in PLANT)
TARGET = Target("H46", (Limit("kv40", 41.4, 50.6), Limit("vi", 107.0)), batch_kg=1.5e4,
                rules=(ShareRule("PACK", 0.0085, 0.0085),))


def full(**asked: object) -> Choices:
    *_, found = choices(STOCKS, TARGET, Asked(**asked))  # type: ignore[arg-type]
    return found


def text_of(found: Choices, width: int = 80) -> str:
    return "\n".join(line for _, line in words.lines(found, width))


def test_parts_come_one_after_another_and_none_is_lost() -> None:
    seen = list(choices(STOCKS, TARGET))
    best = design(STOCKS, TARGET)
    assert all(c.least_cost_per_t == pytest.approx(best.cost_per_t, rel=2e-6) for c in seen)
    assert [len(c.aims) for c in seen[:len(AIMS)]] == list(range(1, len(AIMS) + 1))
    assert seen[-1].done == frozenset(PARTS)
    for before, after in pairwise(seen):
        for part in PARTS:
            assert len(getattr(before, part) or ()) <= len(getattr(after, part) or ())
    assert [a.name for a in seen[-1].aims] == list(AIMS)
    assert [extra for extra, _ in seen[-1].ranges] == [0.0, 1.0, 2.0, 5.0]


def test_it_ends_when_it_is_no_longer_wanted() -> None:
    assert list(choices(STOCKS, TARGET, stale=lambda: True)) == []


def test_what_is_complete_and_still_asked_is_not_worked_out_again() -> None:
    before = full()
    again = list(choices(STOCKS, TARGET, Asked(within=1.0), before=before))
    assert all(c.prices is before.prices and c.ranges is before.ranges for c in again)
    assert again[-1].aims != before.aims
    assert all(a.extra_pct <= 1.0 + 1e-3 for a in again[-1].aims if a.recipe)
    half = next(c for c in choices(STOCKS, TARGET) if c.prices)
    assert len(half.prices) < len(before.prices)
    *_, whole = choices(STOCKS, TARGET, before=half)
    assert [p.stock for p in whole.prices] == [p.stock for p in before.prices]
    dearer = tuple(replace(s, price_per_t=2.0 * s.price_per_t) for s in STOCKS)
    *_, other = choices(dearer, TARGET, Asked(parts=("limits",)), before=before)
    assert other.least_cost_per_t == pytest.approx(2.0 * before.least_cost_per_t, rel=1e-6)
    assert other.aims is None


def test_only_what_is_asked_for() -> None:
    found = full(parts=("aims",), aims=("fewest-stocks", "most-of"), stock="BS")
    assert [(a.name, a.of) for a in found.aims] == [("fewest-stocks", ""), ("most-of", "BS")]
    assert (found.limits, found.prices, found.ranges, found.reaches) == (None, None, None, None)


@pytest.mark.parametrize("width", [79, 119])
def test_the_words_keep_to_the_width_and_name_every_unit(width: int) -> None:
    text = text_of(full(trial=Trial("last week", "H46", {"N150": 0.6, "N500": 0.4})), width)
    assert max(map(len, text.splitlines())) <= width
    for told in ("OTHER AIMS, at any cost the product allows", "closest to last week", "least cost", "R inside",
                 "VI, least", "PACK fixed, %", "leaves above", "enters below",
                 "demanded", "RANGES, mass %", "same stocks from", "kg on hand"):
        assert told in text, told


def test_a_limit_with_a_long_name_keeps_to_the_width() -> None:
    found = full(parts=("limits",))
    long = replace(found.limits[0], of="ccs-25", side="high", limit=7000.0, step=49.0)
    text = text_of(replace(found, limits=(long, *found.limits)))
    assert "\ncold cranking at -25 °C, mPa·s, most\n" in text
    assert max(map(len, text.splitlines())) <= 80


def test_the_words_when_nothing_fits() -> None:
    *_, found = choices(STOCKS, replace(TARGET, limits=(Limit("kv40", 46.0, 46.5), Limit("vi", 220.0))))
    assert text_of(found) == ("! no blend meets every limit, so nothing else would do either; why: the command\n"
                              "  why, or the screen Why")


def test_a_range_that_was_not_narrowed_is_marked_in_words() -> None:
    found = full(parts=("ranges",))
    (extra, ranges), *rest = found.ranges
    code = next(c for c, r in ranges.items() if r.high > 0.1)
    wide = {**ranges, code: replace(ranges[code], narrowed=False)}
    text = text_of(replace(found, ranges=((extra, wide), *rest)))
    assert f"{100 * ranges[code].high:.2f}?" in text
    assert "? time ran out: the true range may be smaller" in text


# Sweeps

@pytest.mark.parametrize(("typed", "of", "which"), [
    ("vi low", "vi", "low"), ("VI:low", "vi", "low"), (" kv40:high ", "kv40", "high"), ("price:n150", "price", "N150"),
    ("price N500", "price", "N500")])
def test_a_sweep_as_it_is_typed(typed: str, of: str, which: str) -> None:
    sweep = sweep_of(STOCKS, TARGET, typed)
    assert (sweep.of, sweep.which) == (of, which)


def test_a_sweep_with_a_span_and_a_code_with_a_blank() -> None:
    sweep = sweep_of(STOCKS, TARGET, "vi low 90 110")
    assert (sweep.low, sweep.high) == (90.0, 110.0)
    odd = (*STOCKS, replace(STOCKS[0], code="TANK 7"))
    assert sweep_of(odd, TARGET, "price:tank 7").which == "TANK 7"


@pytest.mark.parametrize(("typed", "told"), [
    ("vi", "'vi' is no sweep: type a property and low or high"), ("vi low 90", "is no sweep"),
    ("vi least", "a side is low or high, not 'least'"), ("price X", "no stock 'X'"), ("vi low a b", "a")])
def test_what_is_no_sweep_is_refused(typed: str, told: str) -> None:
    with pytest.raises((DeskError, SolverError), match=told):
        sweep_of(STOCKS, TARGET, typed)


def test_a_sweep_fills_up_and_can_be_stopped() -> None:
    sweep = sweep_of(STOCKS, TARGET, "vi low")
    seen = list(swept(STOCKS, TARGET, sweep, 9))
    assert [len(s.points) for s in seen] == [*range(10), 9]
    assert [p.number for p in seen[-1].points] == list(range(9))
    assert (seen[-1].done, seen[-1].stopped) == (True, False)
    halted = list(swept(STOCKS, TARGET, sweep, 9, stale=lambda: True))
    assert (len(halted[-1].points), halted[-1].stopped, halted[-1].done) == (1, True, True)


@pytest.mark.parametrize("typed", ["vi low 95 175", "price N150"])
@pytest.mark.parametrize(("width", "height"), [(79, 8), (119, 16)])
def test_the_curve_has_its_axes_and_is_plain_ascii_where_it_must_be(typed: str, width: int, height: int) -> None:
    for found in swept(STOCKS, TARGET, sweep_of(STOCKS, TARGET, typed), 12):
        lines = curve.draw(found, width, height)
        assert lines[0].startswith("least cost, per t, against ")
        assert all(len(line) <= width for line in lines)
        assert sum("│" in line for line in lines) == height + 1
        paint.adopt({"TERM": "vt100", "LANG": "C"})
        assert "?" not in "".join(paint.shown(line) for line in lines)
        paint.adopt({"TERM": "xterm-256color", "LANG": "C.UTF-8"})
    costs = [p.cost_per_t for p in found.points if p.cost_per_t is not None]
    assert f"{max(costs):.2f}" in lines[1]
    assert f"{min(costs):.2f}" in lines[height]
    drawn = "".join(lines)
    assert drawn.count("•") <= len(costs)
    assert "now" in lines[height + 2]
    if typed.startswith("vi"):
        assert "× no blend" in lines[-1]
        assert lines[height + 1].count("×") == 12 - len(costs)
    numbers = curve.table(found)
    assert len(numbers) == 13
    assert all(f"{p.cost_per_t:.2f}" in line for p, line in zip(found.points, numbers[1:], strict=True)
               if p.cost_per_t is not None)


# Trials

def test_trials_by_name_and_the_newest() -> None:
    trials = [Trial("a", "H46", kept_at="2026-01-02"), Trial("b", "H46", kept_at="2026-03-01"),
              Trial("c", "H32", kept_at="2026-04-01")]
    assert newest_trial(trials, "H46").name == "b"
    assert newest_trial([], "H46") is None
    assert trial_named(trials, "H46", "a") is trials[0]
    with pytest.raises(DeskError, match="H46 has no trial 'x'; there are a, b"):
        trial_named(trials, "H46", "x")
    with pytest.raises(DeskError, match="none is kept"):
        trial_named(trials, "H99", "x")
