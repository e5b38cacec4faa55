"""What limits, prices and quantities are worth: from formulas, brute force, and solving once more."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from solver.entering import MONEY, QUANTITY, StockPrices
from solver.laws import vbn
from solver.linear import Stopwatch
from solver.prices import LimitPrice, LimitPrices
from solver.properties import lookup
from solver.recipe import design, exact_search
from solver.rows import build
from solver.stocks import Stock, StockTable
from solver.target import LAWS, Limit, ShareRule, Target
from tests.benchmarks.plants import case
from tests.solver.test_aims import SMALL, WINDOWS, blends_that_meet
from tests.solver.test_recipe import BS, N150, N500, PLANT, WIDE, only


def limits_of(stocks: list[Stock] | tuple[Stock, ...] | StockTable, target: Target) -> list[LimitPrice]:
    return list(LimitPrices(stocks, target).limits())


def at_price(stocks: list[Stock] | StockTable, code: str, price: float) -> StockTable:
    every = stocks.stocks if isinstance(stocks, StockTable) else stocks
    return StockTable(replace(s, price_per_t=price) if s.code == code else s for s in every)


def test_the_price_of_a_kv_limit_from_the_formula() -> None:
    # Two stocks, KV40 at least 41.4 under the Refutas law (Maples 2000): the share of N500 is (V(L) − V1)/(V2 − V1),
    # so 1 mm²/s costs 40·V'(L)/(V2 − V1), with V' = 14.534/((L + 0.8) ln(L + 0.8)). Computed from the formula.
    low = 41.4
    (price,) = limits_of([N150, N500], Target("t", (Limit("kv40", low, 60.0),)))
    slope = 14.534 / ((low + 0.8) * np.log(low + 0.8)) / float(vbn(95.5) - vbn(30.6))
    assert (price.kind, price.of, price.side, price.limit, price.unit) == ("property", "kv40", "low", low, "mm²/s")
    assert price.saved_per_unit == pytest.approx(40.0 * slope, rel=1e-3)
    assert price.added_per_unit == pytest.approx(40.0 * slope, rel=1e-3)
    share = float((vbn(low) - vbn(30.6)) / (vbn(95.5) - vbn(30.6)))
    assert price.cost_per_t == pytest.approx(800.0 + 40.0 * share, rel=1e-9)
    assert price.eased_per_t < price.cost_per_t < price.tightened_per_t


@pytest.mark.parametrize("k", range(6))
def test_every_price_of_a_limit_by_solving_once_more(k: int) -> None:
    table, target = case(71, k, 12, 30, hardest=115.0)
    prices = limits_of(table, target)
    recipe = design(table, target)
    assert {p.of for p in prices if p.kind == "property"} == set(recipe.binding)
    for p in prices:
        if p.kind != "property":
            continue
        assert p.step == pytest.approx(0.1 * lookup(p.of).reproducibility(p.limit))
        inward = p.step if p.side == "low" else -p.step
        for by, cost in ((-inward, p.eased_per_t), (inward, p.tightened_per_t)):
            again = design(table, replace(target, moved={(p.of, p.side): p.limit + by}))
            assert (cost is None) == (again.status == "infeasible")
            assert cost is None or cost == pytest.approx(again.cost_per_t, rel=2e-6)
        assert p.saved_per_unit >= 0.0
        assert p.added_per_unit is None or p.added_per_unit >= p.saved_per_unit - 0.05 * abs(p.saved_per_unit) - 1e-3


def test_an_equality_window_has_two_prices_and_no_tighter() -> None:
    prices = limits_of(only("N150", "N500"), Target("t", (Limit("kv40", 46.0, 46.0),)))
    assert [(p.side, p.tightened_per_t) for p in prices] == [("low", None), ("high", None)]
    low, high = prices
    assert low.saved_per_unit > 0.0
    assert high.saved_per_unit == pytest.approx(0.0, abs=1e-3)


def test_the_price_of_a_share_rule_a_hold_and_a_fixed_share() -> None:
    target = replace(WIDE, rules=(ShareRule("PACK", 0.0085, 0.0085), ShareRule("group IV", 0.10, 1.0),
                                  ShareRule("BS", 0.0, 0.03)), held={"N500": 0.2})
    prices = {(p.kind, p.of, p.side): p for p in limits_of(PLANT, target)}
    for key, change in ((("share", "PACK", "both"), lambda to: {"rules": (
            ShareRule("PACK", to, to), *target.rules[1:])}),
                        (("share", "group IV", "low"), lambda to: {"rules": (
            target.rules[0], ShareRule("group IV", to, 1.0), target.rules[2])}),
                        (("held", "N500", "both"), lambda to: {"held": {"N500": to}})):
        p = prices[key]
        assert (p.unit, p.step) == ("% of the blend", 0.1)
        for by, cost in ((-0.001, p.eased_per_t), (0.001, p.tightened_per_t)):
            again = design(PLANT, replace(target, **change(p.limit / 100.0 + by)))
            assert cost == pytest.approx(again.cost_per_t, rel=3e-6)
    assert prices["share", "PACK", "both"].added_per_unit == pytest.approx(26.0, abs=3.0)  # 1 % at 3500 for about 900


def test_the_price_of_a_tank_and_of_the_numbers() -> None:
    short = [replace(s, on_hand_kg=3e3) if s.code == "N500" else s for s in only("N150", "N500", "BS", "P4")]
    target = Target("t", (Limit("kv40", 41.4, 50.6),), batch_kg=2e4, max_stocks=3, min_share=0.05)
    prices = {p.kind: p for p in limits_of(short, target)}
    tank = prices["tank"]
    assert (tank.of, tank.limit, tank.unit, tank.step) == ("N500", 3.0, "t on hand", 0.02)
    more = [replace(s, on_hand_kg=3020.0) if s.code == "N500" else s for s in short]
    assert tank.eased_per_t == pytest.approx(design(more, target).cost_per_t, rel=2e-6)
    assert tank.saved_per_unit > 0.0
    assert "most stocks" in prices
    assert prices["most stocks"].tightened_per_t == pytest.approx(
        design(short, replace(target, max_stocks=2)).cost_per_t, rel=2e-6)
    free = replace(WIDE, batch_kg=2e4)
    smallest = min(design(short, free).shares.values())
    (least,) = [p for p in limits_of(short, replace(free, min_share=1.2 * smallest)) if p.kind == "least share"]
    assert least.limit == pytest.approx(120.0 * smallest)
    for by, cost in ((-0.001, least.eased_per_t), (0.001, least.tightened_per_t)):
        again = design(short, replace(free, min_share=1.2 * smallest + by))
        assert cost == pytest.approx(again.cost_per_t, rel=3e-6)


@pytest.mark.parametrize("law", LAWS)
def test_entering_and_leaving_against_a_grid(law: str) -> None:
    # p* is the largest (W − rest)/x_i over all blends with the stock: no blend of the grid may give a larger one.
    target = Target("t", WINDOWS, law=law)
    x, _ = blends_that_meet(SMALL, target, 90)
    price = np.array([s.price_per_t for s in SMALL])
    for found in StockPrices(SMALL, target).stocks():
        i = [s.code for s in SMALL].index(found.stock)
        without = design(SMALL, replace(target, left_out=frozenset({found.stock})))
        if without.status == "infeasible":
            assert found.critical_per_t is None
            assert found.note == "no blend without it"
            continue
        with_it = x[x[:, i] > 0.0]
        ratios = (without.cost_per_t - with_it @ price + with_it[:, i] * price[i]) / with_it[:, i]
        assert found.checked
        assert ratios.max() <= (found.critical_per_t or 0.0) + 0.5
        assert (found.share > 0.0) == (found.price_per_t < found.critical_per_t)
        if found.critical_per_t is not None:
            assert found.critical_per_t <= max(ratios.max(), price[i]) + 60.0  # the grid is coarse, and yet near


@pytest.mark.parametrize("k", range(4))
@pytest.mark.parametrize("rules", [{}, {"max_stocks": 3, "min_share": 0.05}])
def test_a_stock_is_used_below_its_price_and_not_above(k: int, rules: dict[str, float]) -> None:
    table, target = case(72, k, 8, 14, hardest=112.0)
    target = replace(target, **rules)
    found = list(StockPrices(table, target).stocks())
    assert [f.stock for f in found if f.share > 0.0] == sorted(
        design(table, target).shares, key=lambda c: -design(table, target).shares[c])
    assert sum(f.critical_per_t is not None for f in found) > 0.7 * len(found)
    for f in found:
        assert f.checked
        if f.critical_per_t is None:
            assert f.note in ("no blend without it", "not even for nothing")
            continue
        # A recipe is proven to 1.5e-6 of its cost only, so this stands a little further off than the 0.01 of the check.
        for by, used in ((-1.0, True), (1.0, False)):
            shares = design(at_price(table, f.stock, f.critical_per_t + by), target).shares
            assert (f.stock in shares) == used
        if rules:
            assert f.share_below >= 0.05 - 1e-8  # a stock that enters enters with its least share


def test_the_price_is_exact_to_a_hundredth_where_it_can_be_worked_out() -> None:
    # One degree of freedom: KV40 = 46 from N150 + N500 costs 815.567, from N150 + BS 846.968 with 800 and p for BS.
    # BS takes the place of N500 where 800 + (p − 800) f = 815.567, f its share (computed from the Refutas formula).
    target = Target("t", (Limit("kv40", 46.0, 46.0),))
    f = float((vbn(46.0) - vbn(30.6)) / (vbn(480.0) - vbn(30.6)))
    w = 800.0 + 40.0 * float((vbn(46.0) - vbn(30.6)) / (vbn(95.5) - vbn(30.6)))
    found = {s.stock: s for s in StockPrices([N150, N500, BS], target).stocks()}
    assert found["BS"].critical_per_t == pytest.approx(800.0 + (w - 800.0) / f, abs=MONEY)
    assert found["BS"].share_below == pytest.approx(f, abs=1e-6)
    assert found["N150"].note == "no blend without it"  # N500 and BS are both thicker than 46
    g = float((vbn(46.0) - vbn(30.6)) / (vbn(95.5) - vbn(30.6)))
    rival = 800.0 + 250.0 * f
    assert found["N500"].critical_per_t == pytest.approx(800.0 + (rival - 800.0) / g, abs=MONEY)


def test_where_the_blend_bends_smoothly_a_stock_still_has_its_price() -> None:
    # The least cost lies inside the curve of equal VI here, so that stocks enter with a share that grows slowly.
    table, target = case(903, 10, 10, 24, hardest=118.0)
    found = list(StockPrices(table, target).stocks())
    assert all(f.checked for f in found)
    assert sum(f.share <= 1e-4 and f.share_below < 0.005 for f in found) > 5
    for f in found[-3:]:
        # Far below its price it is there in earnest, and the recipe costs what the price then saves, not more.
        cheaper = design(at_price(table, f.stock, f.critical_per_t - 20.0), target)
        assert cheaper.shares.get(f.stock, 0.0) > 1e-3
        assert cheaper.cost_per_t <= design(table, target).cost_per_t


def test_demanded_stocks_and_a_cost_ceiling() -> None:
    target = replace(WIDE, rules=(ShareRule("PACK", 0.0085, 0.0085),))
    found = {s.stock: s for s in StockPrices(PLANT, target).stocks()}
    assert found["PACK"].note == "demanded"
    least = design(PLANT, target).cost_per_t
    capped = {s.stock: s for s in StockPrices(PLANT, replace(target, max_cost_per_t=1.2 * least)).stocks()}
    assert capped["BS"].critical_per_t == pytest.approx(found["BS"].critical_per_t, abs=MONEY)


def sets_at(table: StockTable, target: Target) -> frozenset[str] | None:
    """The set of the least cost, to 1e-9 of it: a recipe's 1.5e-6 may hold a trace of another stock."""
    model = build(table, target)
    found, _ = exact_search(model, model.polytope(), model.table.price, Stopwatch(20.0), gap=1e-9)
    return None if found.x is None else frozenset(c for c, x in model.full(found.x).items() if x > 1e-4)


@pytest.mark.parametrize("k", range(3))
@pytest.mark.parametrize("rules", [{}, {"max_stocks": 3}])
def test_the_set_of_stocks_stays_within_a_reach_and_changes_outside(k: int, rules: dict[str, int]) -> None:
    table, target = case(73, 3 * k, 10, 16, hardest=110.0)
    target = replace(target, batch_kg=2e4, **rules)
    here = sets_at(table, target)
    found = list(StockPrices(table, target).reaches())
    assert {r.stock for r in found} == here
    for r in found:
        assert r.checked
        assert r.low is None or r.low <= r.now
        assert r.high is None or r.high >= r.now
        for end, beyond, sign in ((r.low, r.set_below, -1.0), (r.high, r.set_above, 1.0)):
            if end is None:
                continue
            if r.what == "price_per_t":
                inside, outside = (at_price(table, r.stock, end + sign * by) for by in (-0.01, MONEY + 0.002))
            else:
                inside, outside = (StockTable(
                    replace(s, on_hand_kg=max(0.0, end + sign * by), unpumpable_kg=0.0) if s.code == r.stock else s
                    for s in table.stocks) for by in (-1.0, QUANTITY * 2e4 + 1.0))
            assert sets_at(inside, target) == here
            assert sets_at(outside, target) != here
            assert beyond is None or frozenset(beyond) != here
            if r.what == "price_per_t":
                assert sets_at(outside, target) == frozenset(beyond)


def test_a_reach_between_two_stocks_can_be_worked_out() -> None:
    # From N150 and N500 alone the set never changes with a price while KV40 must be 46.
    alone = list(StockPrices([N150, N500], Target("t", (Limit("kv40", 46.0, 46.0),))).reaches())
    assert [(r.low, r.high) for r in alone] == [(None, None), (None, None)]
    # With BS the price of N500 may rise until BS takes its place, and fall to nothing.
    both = {r.stock: r for r in StockPrices([N150, N500, BS], Target("t", (Limit("kv40", 46.0, 46.0),))).reaches()}
    leaves = {s.stock: s for s in StockPrices([N150, N500, BS], Target("t", (Limit("kv40", 46.0, 46.0),))).stocks()}
    assert both["N500"].high == pytest.approx(leaves["N500"].critical_per_t, abs=MONEY)
    assert both["N500"].set_above == ("N150", "BS")
    assert both["N500"].low is None


def test_nothing_meets_it_one_stock_and_no_time() -> None:
    never = Target("t", (Limit("kv40", 46.0, 46.5), Limit("vi", 200.0)))
    assert limits_of(SMALL, never) == []
    assert list(StockPrices(SMALL, never).stocks()) == []
    assert list(StockPrices(SMALL, never).reaches()) == []
    one = list(StockPrices([N150], Target("t", (Limit("kv40", 28.0, 34.0),))).stocks())
    assert [(s.stock, s.critical_per_t, s.note) for s in one] == [("N150", None, "no blend without it")]
    hurried = StockPrices(SMALL, Target("t", WINDOWS))
    assert hurried.least.x is not None
    hurried.watch = type(hurried.watch)(-1.0)
    assert not any(s.checked for s in hurried.stocks() if s.note == "time ran out")
