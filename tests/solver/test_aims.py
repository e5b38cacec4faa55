"""Blends by other aims: against brute force on small plants, and by solving once more just beyond."""

from __future__ import annotations

import warnings
from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest

from solver.aims import AIMS, Aim, aims
from solver.errors import StockError, TargetError
from solver.margin import margin
from solver.properties import lookup
from solver.recipe import design, evaluate
from solver.rows import build
from solver.stocks import Stock
from solver.target import LAWS, Excess, Limit, ShareRule, Target
from solver.viscosity_index import indices
from tests.benchmarks.plants import case
from tests.solver.test_recipe import N150, N500, PLANT, WIDE, only

HAVE = {"N150": 4e4, "N500": 9e4, "BS": 2e4, "P4": 3e4}
SMALL = [replace(s, on_hand_kg=HAVE[s.code]) for s in only(*HAVE)]
WINDOWS = (Limit("kv40", 41.4, 50.6), Limit("kv100", 6.0, 8.5), Limit("vi", 98.0))


def the(name: str, stocks: list[Stock] | tuple[Stock, ...], target: Target, **more: object) -> Aim:
    return next(iter(aims(stocks, target, (name,), **more)))  # type: ignore[arg-type]


def grid(parts: int, n: int = 4) -> np.ndarray:
    """Every blend of n stocks in steps of 1/parts."""
    cuts = np.array(list(combinations(range(parts + n - 1), n - 1)))
    ends = np.hstack([np.full((len(cuts), 1), -1), cuts, np.full((len(cuts), 1), parts + n - 1)])
    return (np.diff(ends, axis=1) - 1) / parts


def blends_that_meet(stocks: list[Stock], target: Target, parts: int = 60) -> tuple[np.ndarray, np.ndarray]:
    """Blends of the grid that meet every limit, and their margins in units of R: from the gauges alone."""
    model = build(stocks, target)
    x = grid(parts, len(stocks))
    kv = {code: model.gauges[code].value(x @ model.gauges[code].num / (x @ model.gauges[code].den))
          for code in ("kv40", "kv100")}
    values = {**kv, "vi": indices(kv["kv40"], kv["kv100"])}
    margins = [np.inf * np.ones(len(x))]
    for limit in target.limits:
        value = values[limit.property] if limit.property in values else model.gauges[limit.property].value(
            x @ model.gauges[limit.property].num / (x @ model.gauges[limit.property].den))
        r = lookup(limit.property).reproducibility
        margins += [(value - limit.low) / r(limit.low)] if limit.low is not None else []
        margins += [(limit.high - value) / r(limit.high)] if limit.high is not None else []
    least = np.min(margins, axis=0)
    return x[least >= 0.0], least[least >= 0.0]


@pytest.mark.parametrize("law", LAWS)
def test_no_blend_of_a_grid_lies_further_inside(law: str) -> None:
    target = Target("t", WINDOWS, law=law)
    found = the("widest-margin", SMALL, target)
    x, margins = blends_that_meet(SMALL, target)
    assert len(x) > 50
    assert found.proven
    assert found.figure >= margins.max() - 5e-3
    assert found.figure <= margins.max() + 1.5  # the grid is coarse, and yet near
    assert found.recipe.meets_all


@pytest.mark.parametrize(("seed", "k"), [*((61, k) for k in range(10)), (902, 5), (902, 22), (902, 42)])
def test_the_margin_is_that_of_the_recipe_and_the_widest(seed: int, k: int) -> None:
    table, target = case(seed, k, 10, 30)
    found = the("widest-margin", table, target)
    if found.recipe is None:
        assert design(table, target).status == "infeasible"
        return
    # Read off the recipe: its own margins, each over the R of the nearer limit.
    own = min((limit.value - limit.held_low) / lookup(limit.property).reproducibility(limit.held_low)
              for limit in found.recipe.limits if limit.held_low is not None)
    own = min([own, *((limit.held_high - limit.value) / lookup(limit.property).reproducibility(limit.held_high)
                      for limit in found.recipe.limits if limit.held_high is not None)])
    assert found.figure == pytest.approx(own, abs=1e-9)
    # Solving once more with every limit moved in: as far is possible, a hundredth of R further is not.
    def moved(t: float) -> dict[tuple[str, str], float]:
        sides = [(limit.property, side, getattr(limit, side)) for limit in target.limits for side in ("low", "high")]
        return {(code, side): value + (t if side == "low" else -t) * lookup(code).reproducibility(value)
                for code, side, value in sides if value is not None}
    assert design(table, replace(target, moved=moved(found.figure - 1e-3))).status == "optimal"
    assert design(table, replace(target, moved=moved(found.figure + 1e-2))).status == "infeasible"


def test_of_equal_margins_the_cheapest() -> None:
    found = the("widest-margin", SMALL, Target("t", WINDOWS))
    model = build(SMALL, Target("t", WINDOWS))
    x, margins = blends_that_meet(SMALL, Target("t", WINDOWS), 80)
    as_wide = x[margins >= found.figure - 1e-3]
    assert all(found.recipe.cost_per_t <= float(model.table.price @ y) + 0.5 for y in as_wide)


def test_a_single_value_asked_has_no_margin_and_is_kept() -> None:
    target = Target("t", (Limit("kv40", 46.0, 46.0), Limit("vi", 98.0)))
    found = the("widest-margin", SMALL, target)
    assert found.recipe.predicted["kv40"] == pytest.approx(46.0, rel=1e-6)
    assert "single value" in found.note
    assert found.figure == pytest.approx((found.recipe.predicted["vi"] - 98.0) / 2.0, abs=1e-6)
    assert found.figure > 1.0


def test_a_window_on_the_vi_has_its_margin_in_the_middle() -> None:
    target = Target("t", (Limit("kv40", 41.4, 50.6), Limit("vi", 98.0, 106.0)))
    found = the("widest-margin", SMALL, target)
    assert found.figure == pytest.approx(min(2.0, (50.6 - 46.0) / (0.0122 * 50.6)), abs=5e-3)  # R of the VI is 2
    assert found.recipe.predicted["vi"] == pytest.approx(102.0, abs=0.02)


def few_by_brute_force(stocks: list[Stock], target: Target) -> tuple[int, float]:
    """The least number of counted stocks with a blend, and the least cost of that number: every subset tried."""
    counted = [s for s in stocks if s.counted]
    for size in range(1, len(counted) + 1):
        costs = []
        for members in combinations(counted, size):
            recipe = design(stocks, replace(target, left_out=frozenset(s.code for s in counted if s not in members)))
            costs += [recipe.cost_per_t] if recipe.status == "optimal" else []
        if costs:
            return size, min(costs)
    raise AssertionError


@pytest.mark.parametrize("k", range(12))
def test_the_fewest_stocks_against_every_subset(k: int) -> None:
    table, target = case(62, k, 6, 9)
    if design(table, target).status == "infeasible":
        assert the("fewest-stocks", table, target).recipe is None
        return
    count, cost = few_by_brute_force(list(table.stocks), target)
    found = the("fewest-stocks", table, target)
    assert (found.figure, found.proven) == (count, True)
    assert found.recipe.cost_per_t == pytest.approx(cost, rel=4e-6)
    assert len(found.recipe.shares) == count


def test_the_fewest_stocks_keep_what_is_demanded_and_the_least_share() -> None:
    target = replace(WIDE, rules=(ShareRule("PACK", 0.0085, 0.0085), ShareRule("BS", 0.02, 0.2)), min_share=0.05)
    found = the("fewest-stocks", PLANT, target)
    count, cost = few_by_brute_force(list(PLANT), target)
    assert found.figure == count
    assert found.recipe.cost_per_t == pytest.approx(cost, rel=4e-6)
    assert found.recipe.shares["PACK"] == pytest.approx(0.0085, abs=1e-8)
    assert found.recipe.shares["BS"] >= 0.05 - 1e-8


def test_the_fewest_stocks_beside_an_additive_whose_share_is_free() -> None:
    target = replace(WIDE, rules=(ShareRule("PACK", 0.0, 0.1),))
    found = the("fewest-stocks", PLANT, target)
    count, cost = few_by_brute_force(list(PLANT), target)
    assert (found.figure, found.proven) == (count, True)
    assert found.recipe.cost_per_t == pytest.approx(cost, rel=4e-6)


@pytest.mark.parametrize("law", LAWS)
def test_most_and_least_of_a_stock_against_a_grid(law: str) -> None:
    target = Target("t", WINDOWS, law=law)
    x, _ = blends_that_meet(SMALL, target)
    for i, stock in enumerate(SMALL):
        most, least = (the(name, SMALL, target, stock=stock.code) for name in ("most-of", "least-of"))
        assert most.figure >= x[:, i].max() - 1e-6
        assert least.figure <= x[:, i].min() + 1e-6
        assert most.of == stock.code
        assert most.recipe.meets_all
        assert least.recipe.meets_all
        assert most.recipe.shares.get(stock.code, 0.0) == pytest.approx(most.figure, abs=2e-6)


def test_without_a_stock_the_rest_is_the_cheapest() -> None:
    found = the("least-of", PLANT, WIDE, stock="N500")
    assert found.figure == 0.0
    assert found.recipe.cost_per_t == pytest.approx(
        design(PLANT, replace(WIDE, left_out=frozenset({"N500"}))).cost_per_t, rel=3e-6)
    most = the("most-of", PLANT, replace(WIDE, rules=(ShareRule("P4", 0.0, 0.03),)), stock="P4")
    assert most.figure == pytest.approx(0.03)
    assert most.recipe.cost_per_t == pytest.approx(design(PLANT, replace(WIDE, held={"P4": 0.03})).cost_per_t, rel=3e-6)


@pytest.mark.parametrize("name", AIMS)
def test_whole_number_rules_hold_for_every_aim(name: str) -> None:
    stocks = [*SMALL, replace(N500, code="OLD", kind="rework", price_per_t=500.0, on_hand_kg=5e4)]
    target = Target("t", (*WINDOWS[:1], Limit("vi", 97.0)), max_stocks=3, min_share=0.08,
                    rules=(ShareRule("OLD", 0.0, 0.2),))
    found = the(name, stocks, target, stock="BS", trial={"N150": 0.5, "N500": 0.3, "BS": 0.2})
    assert found.recipe.meets_all
    again = evaluate(stocks, found.recipe.shares, target)
    assert not again.breaches
    assert len(found.recipe.shares) <= 3
    assert all(share >= 0.08 - 1e-8 for share in found.recipe.shares.values())


@pytest.mark.parametrize("law", ["refutas", "wright-volume"])
@pytest.mark.parametrize("rules", [{}, {"max_stocks": 3}])
def test_the_scarcest_tank_is_spared_against_a_grid(law: str, rules: dict[str, int]) -> None:
    target = Target("t", WINDOWS, law=law, batch_kg=5e3, **rules)
    found = the("least-scarce", SMALL, target)
    x, _ = blends_that_meet(SMALL, target)
    if rules:
        x = x[(x > 0.0).sum(axis=1) <= 3]
    available = np.array([s.available_kg for s in SMALL])
    lasts = 1.0 / (x / available).max(axis=1)
    assert found.figure >= lasts.max() * (1.0 - 1e-5)
    assert found.figure <= lasts.max() * 1.1
    assert found.figure == pytest.approx(1.0 / max(
        share / available[[s.code for s in SMALL].index(code)] for code, share in found.recipe.shares.items()))
    assert found.recipe.meets_all


def test_a_batch_as_large_as_the_scarcest_allows_can_be_made_and_no_larger() -> None:
    found = the("least-scarce", SMALL, Target("t", WINDOWS))
    assert design(SMALL, Target("t", WINDOWS, batch_kg=0.9999 * found.figure)).status == "optimal"
    assert design(SMALL, Target("t", WINDOWS, batch_kg=1.001 * found.figure)).status == "infeasible"


@pytest.mark.parametrize("rules", [{}, {"min_share": 0.05}])
def test_closest_to_a_trial_against_a_grid(rules: dict[str, float]) -> None:
    target = Target("t", WINDOWS, **rules)
    trial = {"N150": 0.85, "N500": 0.05, "BS": 0.05, "P4": 0.05}
    found = the("closest", SMALL, target, trial=trial, trial_name="last")
    x, _ = blends_that_meet(SMALL, target, 80)
    if rules:
        x = x[np.all((x == 0.0) | (x >= 0.05), axis=1)]
    off = np.abs(x - np.array(list(trial.values()))).sum(axis=1)
    assert 0.0 < found.figure <= off.min() + 1e-5
    assert found.figure >= off.min() - 0.05
    assert found.of == "last"
    moved = sum(abs(found.recipe.shares.get(c, 0.0) - v) for c, v in trial.items())
    assert found.figure == pytest.approx(moved, abs=1e-9)


def test_a_trial_that_still_meets_everything_is_kept_as_it_is() -> None:
    trial = dict(design(SMALL, Target("t", WINDOWS, max_stocks=2)).shares)
    dearer = [replace(s, price_per_t=2.0 * s.price_per_t if s.code in trial else s.price_per_t) for s in SMALL]
    found = the("closest", dearer, Target("t", WINDOWS), trial=trial)
    assert found.figure == 0.0
    assert found.recipe.shares == pytest.approx(trial, abs=1e-9)


def test_what_cannot_serve_today_counts_as_far() -> None:
    trial = {"N150": 0.5, "P40": 0.5}
    found = the("closest", SMALL, Target("t", WINDOWS), trial=trial, trial_name="old")
    assert "P40 cannot serve today" in found.note
    assert found.figure >= 1.0 - 1e-6  # half of it is gone and another half must stand in


def test_most_rework_uses_it_up_to_its_cap() -> None:
    stocks = [*SMALL, replace(N500, code="OLD", kind="rework", price_per_t=1200.0)]
    target = Target("t", WINDOWS, rules=(ShareRule("rework", 0.0, 0.07),))
    found = the("most-rework", stocks, target)
    assert found.figure == pytest.approx(0.07, abs=2e-6)
    assert found.extra_pct > 0.0
    assert the("most-rework", SMALL, Target("t", WINDOWS)).note == "no rework may serve"


@pytest.mark.parametrize("name", AIMS)
def test_an_extra_cost_is_kept(name: str) -> None:
    target = Target("t", WINDOWS)
    least = design(SMALL, target).cost_per_t
    more = {"stock": "P4", "trial": {"P4": 0.6, "BS": 0.4}}
    free, held = the(name, SMALL, target, **more), the(name, SMALL, target, extra=1.0, **more)
    if held.recipe is None:
        assert name == "most-rework"
        return
    assert held.recipe.cost_per_t <= least * 1.01 * (1.0 + 2e-6)
    assert held.extra_pct == pytest.approx(100.0 * (held.recipe.cost_per_t / least - 1.0), abs=3e-4)
    assert "cost_per_t" not in [limit.property for limit in held.recipe.limits]
    if name in ("widest-margin", "most-of", "least-scarce"):
        assert held.figure <= free.figure + 1e-6
        assert free.recipe.cost_per_t > least * 1.01


def test_nothing_meets_it_one_stock_no_batch_and_bad_input() -> None:
    none = list(aims(SMALL, Target("t", (Limit("kv40", 46.0, 46.5), Limit("vi", 200.0)))))
    assert [a.name for a in none] == list(AIMS)
    assert all(a.recipe is None and a.note == "no blend meets the target" for a in none)
    alone = list(aims([N150], Target("t", (Limit("kv40", 28.0, 34.0),)), trial={"N150": 1.0}))
    assert all(a.recipe.shares == {"N150": pytest.approx(1.0)} for a in alone if a.name != "most-rework")
    with pytest.raises(TargetError, match="unknown aim 'best'; known are least-cost"):
        the("best", SMALL, WIDE)
    with pytest.raises(StockError, match="no stock 'X9'"):
        the("most-of", SMALL, Target("t", WINDOWS), stock="X9")
    assert the("most-of", PLANT, WIDE, stock="PACK").note == "PACK may not serve: the product does not allow it"
    assert the("closest", SMALL, Target("t", WINDOWS)).note == "there is no trial to keep to"


@pytest.mark.parametrize("k", range(6))
def test_each_aim_is_best_at_its_own_figure(k: int) -> None:
    table, target = case(63, k, 15, 30, hardest=115.0)
    best = design(table, target).shares
    assert design(table, target).status == "optimal"
    trial = dict(design(table, replace(target, left_out=frozenset(list(best)[:1]))).shares or best)
    found = {a.name: a for a in aims(table, target, trial=trial)}
    model = build(table, target)
    x = {name: np.array([a.recipe.shares.get(c, 0.0) for c in model.table.codes])
         for name, a in found.items() if a.recipe}
    costs = {name: float(model.table.price @ y) for name, y in x.items()}
    assert min(costs.values()) >= costs["least-cost"] * (1.0 - 2e-6)
    assert max(margin(model, y) for y in x.values()) <= found["widest-margin"].figure + 5e-3
    assert min((y > 1e-9).sum() for y in x.values()) >= found["fewest-stocks"].figure
    i = model.table.codes.index(found["most-of"].of)
    assert max(y[i] for y in x.values()) <= found["most-of"].figure + 2e-6
    assert min(y[i] for y in x.values()) >= found["least-of"].figure - 2e-6
    assert max(1.0 / (y / model.table.available).max() for y in x.values()) <= found["least-scarce"].figure * (1 + 1e-5)
    old = np.array([trial.get(c, 0.0) for c in model.table.codes])
    assert min(np.abs(y - old).sum() for y in x.values()) >= found["closest"].figure - 4e-6


def test_under_two_laws_at_once_against_a_grid() -> None:
    target = Target("t", WINDOWS, also_laws=("wright-mass",))
    x, margins = blends_that_meet(SMALL, Target("t", WINDOWS))
    y, other = blends_that_meet(SMALL, Target("t", WINDOWS, law="wright-mass"))
    both = {tuple(b): m for b, m in zip(x, margins, strict=True)}
    least = [min(both[tuple(b)], m) for b, m in zip(y, other, strict=True) if tuple(b) in both]
    found = the("widest-margin", SMALL, target)
    assert found.recipe.meets_all
    assert found.proven
    assert max(least) - 5e-3 <= found.figure <= max(least) + 1.5
    under_the_other = {tuple(b) for b in y}
    most = max(b[0] for b in both if b in under_the_other)
    assert the("most-of", SMALL, target, stock="N150").figure >= most - 1e-6


def test_with_lessons_in_use_every_blend_meets_the_bent_limits_and_none_is_called_proven() -> None:
    lessons = (Excess("N150", "N500", "refutas", {40.0: (0.5,), 100.0: (0.3,)}, "v1"),
               Excess("N150", "BS", "refutas", {40.0: (-0.4, 0.2), 100.0: (-0.3,)}, "v2"))
    target = Target("t", WINDOWS, lessons=lessons, max_stocks=3)
    for found in aims(SMALL, target, trial={"N150": 0.8, "N500": 0.1, "BS": 0.1}):
        if found.name == "most-rework":
            continue
        assert found.recipe.meets_all
        assert not found.proven
        assert len(found.recipe.shares) <= 3
        assert not evaluate(SMALL, found.recipe.shares, target).breaches


@pytest.mark.parametrize("extra", [0.0, 2.0])
def test_within_an_extra_cost_no_aim_leaves_a_limit_a_rule_or_the_cost(extra: float) -> None:
    for k in (5, 8, 14, 17):
        table, target = case(99, k, 4, 6)
        target = replace(target, max_stocks=3) if k % 2 else target
        best = design(table, target)
        assert best.cost_per_t is not None
        for aim in aims(table, target, extra=extra, trial={table.codes[0]: 0.5, table.codes[1]: 0.5}):
            if aim.recipe is not None:
                made = evaluate(table, aim.recipe.shares or {}, target)
                assert made.meets_all, (k, aim.name)
                assert made.cost_per_t is not None
                assert made.cost_per_t <= best.cost_per_t * (1.0 + extra / 100.0 + 3e-6)


@pytest.mark.parametrize("k", [1, 2])
def test_with_lessons_in_use_the_extra_cost_and_the_most_stocks_still_hold(k: int) -> None:
    """Where following the tangents leads nowhere, the way back to a blend keeps the ceiling and the rules."""
    table, target = case(31, k, 5, 9)
    first, second = list(design(table, target).shares or {})[:2]
    term = {1: 0.00094573, 2: -0.01907103}[k]
    target = replace(target, max_stocks=3 if k == 1 else None,
                     lessons=(Excess(first, second, target.law, {40.0: (term,), 100.0: (0.9 * term,)}, "E1"),))
    best = design(table, target)
    assert best.cost_per_t is not None
    extra = {1: 2.0, 2: 0.0}[k]
    for name in ("fewest-stocks", "least-of", "most-of"):
        aim = the(name, table, target, extra=extra)  # type: ignore[arg-type]
        assert aim.recipe is not None
        assert aim.recipe.cost_per_t is not None
        assert aim.recipe.meets_all
        assert aim.recipe.cost_per_t <= best.cost_per_t * (1.0 + extra / 100.0 + 3e-6)


def test_fewest_stocks_ends_where_lessons_bend_the_limits() -> None:
    table, target = case(31, 3, 5, 9)
    first, second = list(design(table, target).shares or {})[:2]
    target = replace(target, lessons=(Excess(first, second, target.law, {40.0: (-0.03,), 100.0: (-0.027,)}, "E1"),))
    aim = the("fewest-stocks", table, target)  # type: ignore[arg-type]
    assert aim.recipe is not None
    assert aim.recipe.meets_all


def test_equal_prices_and_a_trial_of_nothing() -> None:
    table, target = case(99, 0, 6, 8)
    free = [replace(s, price_per_t=0.0) for s in table.stocks]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        found = the("fewest-stocks", free, target, extra=1.0)
    assert found.recipe is not None
    assert found.recipe.meets_all
    none = the("closest", free, target, trial={s.code: 0.0 for s in free})
    assert (none.recipe, none.note) == (None, "there is no trial to keep to")
