"""Sweeps: every point is an outright solution, and they come coarse first."""

from __future__ import annotations

from dataclasses import replace
from itertools import islice

import numpy as np
import pytest

from solver.errors import StockError, TargetError
from solver.recipe import design
from solver.sweeps import Point, Sweep, order, plan, points
from solver.target import Limit, Target
from tests.benchmarks.plants import case
from tests.solver.test_recipe import N150, N500, PLANT, WIDE, only


@pytest.mark.parametrize("count", [2, 3, 9, 10, 60, 61])
def test_every_place_once_and_the_ends_first(count: int) -> None:
    places = order(count)
    assert sorted(places) == list(range(count))
    assert places[:2] == [0, count - 1]
    # After any number of points no gap is more than three times another but for rounding: a curve, not a corner.
    for drawn in (5, 9, 17, 33):
        if drawn < count:
            gaps = np.diff(sorted(places[:drawn]))
            assert gaps.max() <= 3 * gaps.min() + 2


@pytest.mark.parametrize(("of", "which"), [("kv40", "low"), ("kv100", "high"), ("vi", "low")])
def test_a_sweep_of_a_limit_is_the_recipe_at_every_point(of: str, which: str) -> None:
    table, target = case(81, 1, 15, 20, hardest=110.0)
    sweep = plan(table, target, of, which)
    held = next(getattr(limit, which) for limit in target.limits if limit.property == of)
    assert sweep.now == held
    assert sweep.low < held < sweep.high
    found = sorted(points(table, target, sweep, 13), key=lambda p: p.number)
    assert [p.at for p in found] == pytest.approx(np.linspace(sweep.low, sweep.high, 13))
    for p in found:
        again = design(table, replace(target, moved={(of, which): p.at}))
        assert p.status == again.status
        assert (p.cost_per_t is None) == (again.status == "infeasible")
        if p.cost_per_t is not None:
            assert p.cost_per_t == pytest.approx(again.cost_per_t, rel=2e-6)
            assert sum(p.shares.values()) == pytest.approx(1.0)
    costs = [p.cost_per_t for p in found if p.cost_per_t is not None]
    steps = np.diff(costs) * (1.0 if which == "low" else -1.0)
    assert (steps >= -2e-6 * max(costs)).all()  # a tighter limit never makes a blend cheaper


def test_a_sweep_of_a_price_bends_down_and_ends_level() -> None:
    target = Target("t", (Limit("kv40", 41.4, 50.6),))
    sweep = plan(PLANT, target, "price", "N500")
    found = sorted(points(only("N150", "N500", "BS"), target, sweep), key=lambda p: p.number)
    assert len(found) == 60
    assert found[0].at == pytest.approx(0.6 * 840.0)
    costs = np.array([p.cost_per_t for p in found])
    assert (np.diff(costs) >= -1e-3).all()
    assert (np.diff(costs, 2) <= 5e-3).all()  # the least cost is concave in a price
    assert found[-1].cost_per_t == pytest.approx(design([N150, *only("BS")], target).cost_per_t, rel=3e-6)
    assert "N500" not in found[-1].shares


def test_an_open_side_begins_about_the_blend_that_is_cheapest() -> None:
    target = Target("t", (Limit("kv40", 41.4, 50.6),))
    sweep = plan([N150, N500], target, "vi", "low")
    assert sweep.now is None
    own = design([N150, N500], target).predicted["vi"]
    assert sweep.low == pytest.approx(own - 15.0, abs=1e-3)
    assert sweep.high == pytest.approx(own + 15.0, abs=1e-3)
    found = list(points([N150, N500], target, sweep, 7))
    assert {p.status for p in found} == {"optimal", "infeasible"}
    assert plan(PLANT[:4], target, "flash", "low").now is None


def test_it_can_be_stopped_and_the_first_points_come_at_once() -> None:
    table, target = case(81, 2, 15, 20, hardest=110.0)
    running = points(table, target, plan(table, target, "vi", "low"), 400)
    first: list[Point] = list(islice(running, 3))
    running.close()
    assert [p.number for p in first] == [0, 399, 200]
    assert list(running) == []


def test_nothing_meets_it_anywhere() -> None:
    never = Target("t", (Limit("kv40", 46.0, 46.5), Limit("vi", 200.0)))
    found = list(points([N150, N500], never, plan([N150, N500], never, "vi", "low", low=180.0), 5))
    assert [(p.cost_per_t, p.shares, p.status) for p in found] == [(None, None, "infeasible")] * 5


def test_what_cannot_be_swept_is_refused_in_words() -> None:
    with pytest.raises(TargetError, match="a side is low or high, not 'lowest'"):
        plan(PLANT, WIDE, "vi", "lowest")
    with pytest.raises(TargetError, match="unknown property 'vj'"):
        plan(PLANT, WIDE, "vj", "low")
    with pytest.raises(StockError, match="no stock 'X'"):
        plan(PLANT, WIDE, "price", "X")
    with pytest.raises(StockError, match="its price is unknown"):
        plan([replace(N150, price_per_t=None), N500], WIDE, "price", "N150")
    with pytest.raises(TargetError, match="has no span"):
        plan(PLANT, WIDE, "vi", "low", low=110.0, high=100.0)
    with pytest.raises(TargetError, match="leaves the scale"):
        plan(PLANT, WIDE, "kv40", "low", low=-5.0)
    with pytest.raises(TargetError, match="1 points: a sweep takes 2 to 500"):
        list(points(PLANT, WIDE, Sweep("vi", "low", 90.0, 100.0, None), 1))
    never = Target("t", (Limit("kv40", 46.0, 46.5), Limit("vi", 200.0)))
    with pytest.raises(TargetError, match="that side is open, and no blend shows where to begin"):
        plan([N150, N500], never, "flash", "low")
