"""A recipe that must hold under several laws at once: more rows, the same proof."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from solver.errors import TargetError
from solver.laws import viscosity_gauge
from solver.recipe import design, evaluate
from solver.stocks import StockTable
from solver.target import LAWS, Limit, Target
from solver.viscosity_index import viscosity_index
from tests.benchmarks.plants import case, random_plant

ALL = tuple(LAWS)


def values(table: StockTable, x: np.ndarray, law: str) -> tuple[float, float, float]:
    """KV40, KV100 and VI of a blend under a law, straight from the law."""
    kv40, kv100 = (viscosity_gauge(law, table, t).read(x) for t in (40.0, 100.0))
    return kv40, kv100, viscosity_index(kv40, kv100)


def inside(target: Target, found: tuple[float, float, float], slack: float = 1e-6) -> bool:
    """Are KV40, KV100 and VI inside a target's own lines?"""
    for limit, value in zip(target.limits, found, strict=True):
        low, high = limit.low, limit.high
        if (low is not None and value < low * (1 - slack)) or (high is not None and value > high * (1 + slack)):
            return False
    return True


@pytest.mark.parametrize("k", range(30))
def test_a_recipe_holds_under_every_law_and_is_the_cheapest_that_does(k: int) -> None:
    table, target = case(31, k, 8, 16, hardest=115.0)
    target = replace(target, batch_kg=None)
    alone = {law: design(table, replace(target, law=law)) for law in ALL}
    both = design(table, replace(target, also_laws=ALL))
    if both.status == "infeasible":
        # Then no single recipe may hold under all of them: none of those found for one law does.
        for made in alone.values():
            x = np.array([(made.shares or {}).get(code, 0.0) for code in table.codes])
            assert made.status == "infeasible" or not all(inside(target, values(table, x, law)) for law in ALL)
        return
    assert both.status == "optimal"
    x = np.array([both.shares.get(code, 0.0) for code in table.codes])
    assert all(inside(target, values(table, x, law)) for law in ALL)
    for made in alone.values():
        assert both.cost_per_t >= made.bound_per_t * (1 - 1e-6)
    # Random blends near it: none that holds under every law is cheaper.
    rng = np.random.default_rng(k)
    used = np.flatnonzero(x > 0.0)
    for _ in range(400):
        y = x.copy()
        i, j = rng.choice(used), rng.integers(len(x))
        move = min(y[i], rng.uniform(0.0, 0.05))
        y[i] -= move
        y[j] += move
        if float(y @ table.price) < both.cost_per_t * (1 - 1e-5):
            assert not all(inside(target, values(table, y, law), 0.0) for law in ALL)


def test_with_one_law_twice_nothing_changes() -> None:
    table, target = case(31, 3, 10, 20)
    once, twice = design(table, target), design(table, replace(target, also_laws=(target.law,)))
    assert twice.cost_per_t == pytest.approx(once.cost_per_t, rel=1e-9)
    assert all(not x.by_law for x in once.limits)


def test_the_value_under_each_law_is_told_and_the_worst_margin_counts() -> None:
    table = random_plant(np.random.default_rng(5), 12)
    target = Target("t", (Limit("kv40", 60.0, 75.0),), also_laws=("wright-mass",))
    made = design(table, target)
    limit = made.limits[0]
    assert set(limit.by_law) == {"refutas", "wright-mass"}
    worst = min(min(v - 60.0, 75.0 - v) for v in limit.by_law.values())
    assert limit.margin == pytest.approx(worst)
    assert made.also_laws == ("wright-mass",)


def test_given_shares_are_judged_under_every_law() -> None:
    # 50/50 of a PAO 4 and a PAO 40: 63.9 by Refutas and 77.9 by Wright (C, see test_laws.py).
    from tests.solver.test_laws import TABLE

    shares = {TABLE.codes[3]: 0.5, TABLE.codes[4]: 0.5}
    target = Target("t", (Limit("kv40", 60.0, 70.0),))
    assert evaluate(TABLE, shares, target).limits[0].met
    assert evaluate(TABLE, shares, replace(target, also_laws=("wright-mass",))).limits[0].met is False


def test_an_unknown_further_law_is_refused() -> None:
    table, target = case(31, 0, 8, 8)
    with pytest.raises(TargetError, match="unknown law"):
        design(table, replace(target, also_laws=("arrhenius",)))


def test_a_stock_without_a_density_is_left_out_when_a_volume_law_must_hold_too() -> None:
    table, target = case(31, 0, 8, 8)
    bare = StockTable([replace(table.stocks[0], density15=None), *table.stocks[1:]])
    target = replace(target, law="refutas")
    assert not design(bare, target).left_out
    out = design(bare, replace(target, also_laws=("walther-volume",))).left_out
    assert [x.stock for x in out] == [table.codes[0]]
    assert "walther-volume" in out[0].reason


def test_the_nearest_blend_names_a_limit_once_that_is_missed_under_several_laws() -> None:
    table, target = case(31, 3, 8, 16)
    high = replace(target, limits=(*target.limits[:2], Limit("vi", 190.0)), also_laws=ALL, batch_kg=None)
    found = design(table, high)
    assert found.status == "infeasible"
    (words,) = found.reasons
    assert words.count("viscosity index") == 1
    # The miss that is told is that of the law under which it is widest.
    x = np.array([found.shares.get(code, 0.0) for code in table.codes])
    least = min(values(table, x, law)[2] for law in ALL)
    assert f"{190.0 - least:.3g} below the 190" in words
