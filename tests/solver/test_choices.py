"""Ranges, other sets of stocks, and the largest batch."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations, pairwise

import numpy as np
import pytest

from solver.choices import EXTRAS, largest_batch, marked_ranges, ranges, ranges_within, within
from solver.recipe import design, evaluate
from solver.sets import blends
from solver.target import Limit, ShareRule, Target
from tests.benchmarks.plants import case
from tests.benchmarks.slsqp import Search
from tests.solver.test_recipe import N150, N500, PACK, PLANT, WIDE, only


def test_a_range_can_be_read_off_two_stocks() -> None:
    # KV40 41.4–50.6 from N150 and N500: the ends of the window are the ends of the range.
    found = ranges([N150, N500], Target("t", (Limit("kv40", 41.4, 50.6),)))
    low, high = (design([N150, N500], Target("t", (Limit("kv40", v, v),))).shares["N500"] for v in (41.4, 50.6))
    assert found["N500"] == pytest.approx((low, high), abs=1e-4)
    assert found["N150"] == pytest.approx((1 - high, 1 - low), abs=1e-4)


@pytest.mark.parametrize("k", range(5))
def test_no_blend_that_meets_the_target_lies_outside(k: int) -> None:
    table, target = case(31, k, 12, 20)
    found = ranges(table, target)
    search = Search(table, target)
    rng = np.random.default_rng(k)
    met = [x for x in rng.dirichlet(np.full(len(table), 0.2), size=4000) if search.worst(x) <= 0.0]
    for x in met:
        for code, share in zip(table.codes, x, strict=True):
            low, high = found[code]
            assert low - 1e-4 <= share <= high + 1e-4


@pytest.mark.parametrize("k", range(5))
def test_the_ends_of_a_range_are_reached(k: int) -> None:
    # Holding a stock just inside its range leaves a blend, just outside leaves none.
    table, target = case(31, k, 12, 20)
    found = ranges(table, target)
    code = max(found, key=lambda c: found[c][1] - found[c][0])
    low, high = found[code]
    assert design(table, replace(target, held={code: high - 2e-4})).status == "optimal"
    if high < 0.999:
        assert design(table, replace(target, held={code: high + 2e-4})).status == "infeasible"
    if low > 1e-3:
        assert design(table, replace(target, held={code: low - 2e-4})).status == "infeasible"


def test_the_ceiling_narrows_and_whole_numbers_are_left_out() -> None:
    free = ranges(PLANT, WIDE)
    cheapest = design(PLANT, WIDE).cost_per_t
    tight = ranges(PLANT, replace(WIDE, max_cost_per_t=1.02 * cheapest))
    assert all(free[c][0] <= tight[c][0] + 1e-4 and tight[c][1] <= free[c][1] + 1e-4 for c in free)
    assert any(tight[c][1] < free[c][1] - 0.05 for c in free)
    ruled = ranges(PLANT, replace(WIDE, max_stocks=2))
    assert all(ruled[code] == pytest.approx(free[code], abs=2e-5) for code in free)
    assert ranges(PLANT, replace(WIDE, max_cost_per_t=700.0)) is None


def every_set(plant, target, least):  # type: ignore[no-untyped-def]
    """The cheapest blend of every set of stocks, each stock of it held to its least share, by brute force."""
    found = []
    for size in range(1, len(plant) + 1):
        for members in combinations(plant, size):
            rules = tuple(ShareRule(s.code, low=least) for s in members)
            recipe = design(members, replace(target, rules=rules))
            if recipe.status == "optimal":
                found.append((recipe.cost_per_t, frozenset(s.code for s in members)))
    return sorted(found, key=lambda pair: pair[0])


@pytest.mark.parametrize("least", [None, 0.05])
def test_blends_against_every_set(least: float | None) -> None:
    plant = only("N150", "N500", "BS", "P4", "P40")
    expected: list[tuple[float, frozenset[str]]] = []
    for cost, members in every_set(plant, WIDE, least or 0.01):
        if not any(members <= other or members >= other for _, other in expected):
            expected.append((cost, members))
    found = blends(plant, replace(WIDE, min_share=least), 8)
    assert [frozenset(b.shares) for b in found] == [members for _, members in expected][:8]
    assert [b.cost_per_t for b in found] == pytest.approx([cost for cost, _ in expected][:8], rel=3e-6)


@pytest.mark.parametrize("k", range(4))
def test_blends_differ_and_come_cheapest_first(k: int) -> None:
    table, target = case(32, k, 20, 40)
    found = blends(table, target)
    costs = [b.cost_per_t for b in found]
    assert costs == sorted(costs)
    assert all(b.meets_all for b in found)
    assert costs[0] >= design(table, target).cost_per_t * (1 - 2e-6)
    sets = [frozenset(b.shares) for b in found]
    assert not any(a <= b for a in sets for b in sets if a is not b)
    assert all(share >= 0.01 - 1e-8 for b in found for share in b.shares.values())


def test_blends_keep_what_is_demanded_and_the_most_stocks() -> None:
    target = replace(WIDE, rules=(ShareRule("PACK", 0.0085, 0.0085),), max_stocks=2)
    found = blends(PLANT, target)
    assert found
    for blend in found:
        assert blend.shares["PACK"] == pytest.approx(0.0085, abs=1e-7)
        assert len(set(blend.shares) - {"PACK"}) <= 2
    assert PACK.kind == "additive"


def test_largest_batch() -> None:
    plant = [replace(N150, on_hand_kg=9000.0), replace(N500, on_hand_kg=5000.0, unpumpable_kg=1000.0)]
    target = Target("t", (Limit("kv40", 41.4, 50.6),))
    found = largest_batch(plant, target)
    # 4000 kg of N500 goes furthest at its least share, which is the low end of its range.
    low = ranges(plant, target)["N500"][0]
    assert found == pytest.approx(min(4000.0 / low, 13000.0), rel=1e-4)
    shares = {"N500": 4000.0 / found, "N150": 1.0 - 4000.0 / found}
    assert evaluate(plant, shares, target).meets_all
    assert largest_batch(only("N150"), target) is None
    assert largest_batch(PLANT, WIDE) > 1e6


@pytest.mark.parametrize("k", range(10))
def test_ranges_within_an_extra_cost_hold_every_blend_as_cheap(k: int) -> None:
    table, target = case(33, k, 12, 20, hardest=115.0)
    best = design(table, target)
    found = dict(ranges_within(table, target))
    assert list(found) == list(EXTRAS)
    for small, large in pairwise(EXTRAS):
        for code, each in found[small].items():
            assert found[large][code].low - 2e-5 <= each.low <= each.high <= found[large][code].high + 2e-5
            assert each.narrowed
    for code, each in found[0.0].items():
        assert each.low - 2e-4 <= best.shares.get(code, 0.0) <= each.high + 2e-4
    # An end is reached at that cost, and a little further out it is not.
    code = max(found[2.0], key=lambda c: found[2.0][c].high - found[2.0][c].low)
    capped = replace(target, max_cost_per_t=1.02 * best.cost_per_t)
    low, high = found[2.0][code].low, found[2.0][code].high
    assert design(table, replace(capped, held={code: high - 2e-4})).status == "optimal"
    assert high > 0.999 or design(table, replace(capped, held={code: high + 2e-4})).status == "infeasible"
    assert low < 1e-3 or design(table, replace(capped, held={code: low - 2e-4})).status == "infeasible"


@pytest.mark.parametrize("target", [
    Target("window on the VI", (Limit("kv40", 41.4, 50.6), Limit("vi", 98.0, 104.0))),
    Target("three laws", (Limit("kv40", 41.4, 50.6), Limit("vi", 100.0)), also_laws=("wright-mass", "walther-volume")),
    Target("no window", (Limit("vi", 100.0),)),
    Target("by volume", (Limit("kv40", 41.4, 50.6), Limit("vi", 100.0)), law="wright-volume"),
])
def test_ranges_against_the_search_alone(target: Target) -> None:
    # The enclosure only shortens the way: holding each stock just inside and just outside says the same.
    plant = only("N150", "N500", "BS", "P4", "P40")
    for code, each in marked_ranges(plant, target).items():
        for end, sign in ((each.low, -1.0), (each.high, 1.0)):
            assert design(plant, replace(target, held={code: end - sign * 2e-4})).status == "optimal"
            outside = end + sign * 2e-4
            if 0.0 < outside < 1.0:
                assert design(plant, replace(target, held={code: outside})).status == "infeasible"


def test_a_range_that_was_not_narrowed_says_so() -> None:
    table, target = case(33, 1, 18, 20, hardest=115.0)
    hurried, known = marked_ranges(table, target, time_limit=-1.0), marked_ranges(table, target)
    assert all(each.narrowed for each in known.values())
    assert any(not each.narrowed for each in hurried.values())
    for code, each in hurried.items():
        assert each.low <= known[code].low + 2e-5
        assert each.high >= known[code].high - 2e-5


def test_within_keeps_the_lower_ceiling_and_nothing_comes_of_nothing() -> None:
    ceiling = ("cost_per_t", "high")
    assert within(WIDE, 900.0, 2.0).moved[ceiling] == pytest.approx(918.0)
    assert within(replace(WIDE, max_cost_per_t=910.0), 900.0, 2.0).moved[ceiling] == 910.0
    assert within(WIDE, 900.0, 0.0).moved[ceiling] == pytest.approx(900.0009)
    never = Target("t", (Limit("kv40", 46.0, 46.5), Limit("vi", 200.0)))
    assert list(ranges_within(PLANT[:4], never)) == []
    one = dict(ranges_within([N150], Target("t", (Limit("kv40", 28.0, 34.0),)), (0.0, 5.0)))
    assert all((r["N150"].low, r["N150"].high) == (1.0, 1.0) for r in one.values())
