"""Why nothing fits: sets that cannot hold together, what must give, what can be reached, what to buy.

Checked against brute force, which asks the recipe for every subset of demands or reads every blend of a dense grid,
and against the wording of the trade. Nothing here has an outside source: the reference is our own exact recipe.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from itertools import combinations, product

import numpy as np
import pytest

from solver.demands import Demand, Demands
from solver.errors import TargetError
from solver.giving import Giving, giving
from solver.linear import Stopwatch
from solver.properties import lookup
from solver.recipe import design, evaluate, least_cost
from solver.requirements import COST
from solver.rows import build
from solver.stocks import Stock, StockTable
from solver.target import LAWS, Limit, ShareRule, Target
from solver.viscosity_index import indices
from solver.why import Conflict, Reasons, conflicts, only_whole_numbers, whole_numbers
from tests.benchmarks.plants import random_plant


def stock(code: str, kv40: float, kv100: float, price: float = 800.0, on_hand: float | None = 1e6, **more) -> Stock:  # type: ignore[no-untyped-def]
    return Stock(code, kv40=kv40, kv100=kv100, density15=870.0, price_per_t=price, on_hand_kg=on_hand, **more)


LIGHT = stock("LIGHT", 30.6, 5.23, 800.0, api_group="I", values={"flash": 215.0, "sulfur": 0.4})
HEAVY = stock("HEAVY", 95.5, 10.75, 840.0, api_group="I", values={"flash": 255.0, "sulfur": 0.5})
BRIGHT = stock("BRIGHT", 480.0, 31.5, 1050.0, api_group="I", values={"flash": 300.0, "sulfur": 0.7})
CLEAN = stock("CLEAN", 36.1, 6.48, 1230.0, api_group="III", values={"flash": 240.0, "sulfur": 0.0})
MODIFIER = stock("MODIFIER", 7150.0, 705.0, 2100.0, kind="vi_improver", values={"flash": 198.0, "sulfur": 0.0})
PLANT = (LIGHT, HEAVY, BRIGHT, CLEAN, MODIFIER)
VI_130 = Target("thin", (Limit("vi", 125.0), Limit("kv100", None, 6.6)), (ShareRule("group III", high=0.0),))


def wanted(target: Target, stocks: Iterable[Stock], kept: Iterable[Demand]) -> Target:
    """A target made anew of some demands only: what a person would type who lets all the others go."""
    kept, stocks = set(kept), list(stocks)
    by = {(d.kind, d.name, d.side): d for d in kept}
    codes = {x.property for x in target.limits}
    limits = [Limit("density15", 600.0)]
    for code in codes:
        low, high = by.get(("limit", code, "low")), by.get(("limit", code, "high"))
        if low or high:
            limits.append(Limit(code, low and low.limit, high and high.limit))
    rules = [ShareRule(r.of, r.low if ("share", r.of, "low") in by else 0.0,
                       r.high if ("share", r.of, "high") in by else 1.0) for r in target.rules]
    shut = {code for d in kept if d.kind == "list" for code in d.stocks}
    rules += [ShareRule(s.code) for s in stocks if s.kind not in ("additive", "pour_depressant") and s.code not in shut]
    kinds = {d.kind for d in kept}
    return Target(target.product, tuple(limits), tuple(rules), law=target.law, only_listed=target.only_listed,
                  batch_kg=target.batch_kg if "on hand" in kinds else None,
                  max_cost_per_t=target.max_cost_per_t if "cost" in kinds else None,
                  max_stocks=target.max_stocks if "most stocks" in kinds else None,
                  min_share=target.min_share if "least share" in kinds else None,
                  left_out=frozenset(d.name for d in kept if d.kind == "left out"),
                  held={code: x for code, x in target.held.items() if ("held", code, "low high") in by})


def possible(stocks: Iterable[Stock], target: Target) -> bool:
    try:
        return least_cost(build(list(stocks), target), Stopwatch(20.0)).x is not None
    except TargetError:
        return False


def check(stocks: Iterable[Stock], target: Target, found: Iterable[Conflict]) -> None:
    """Each set is impossible by itself, and possible as soon as any one of its demands is let go."""
    stocks = list(stocks)
    for conflict in found:
        assert not possible(stocks, wanted(target, stocks, conflict.demands)), conflict
        for demand in conflict.demands:
            rest = [d for d in conflict.demands if d is not demand]
            assert possible(stocks, wanted(target, stocks, rest)), (demand, conflict)


def names(conflict: Conflict) -> set[tuple[str, str]]:
    return {(d.name, d.side) for d in conflict.demands}


# Sets that cannot hold together

def test_the_sentence_of_the_trade() -> None:
    found = conflicts(PLANT, VI_130)
    check(PLANT, VI_130, found)
    assert names(found[0]) == {("vi", "low"), ("kv100", "high"), ("group III", "high")}
    best = max(float(indices(s.kv40, s.kv100)) for s in (LIGHT, HEAVY, BRIGHT))
    assert found[0].of.name == "vi"
    assert best - 1.0 < found[0].best < 125.0


def test_a_blend_that_exists_has_no_reasons() -> None:
    assert conflicts(PLANT, Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 90.0)))) == []


def random_case(k: int) -> tuple[StockTable, Target]:
    """Five stocks and a target hard enough that most are impossible, every kind of demand in turn."""
    rng = np.random.default_rng([31, k])
    table = random_plant(rng, 5)
    stocks = [replace(s, api_group=("I", "II", "III")[i % 3]) for i, s in enumerate(table.stocks)]
    kv40 = float(rng.uniform(30.0, 150.0))
    flash, sulfur = (np.sort(table.column(code)) for code in ("flash", "sulfur"))
    limits = [Limit("kv40", 0.95 * kv40, 1.05 * kv40), Limit("vi", float(rng.uniform(95.0, 150.0)))]
    limits.append(Limit("flash", float(rng.uniform(flash[1], flash[-1]))) if k % 2
                  else Limit("sulfur", None, float(rng.uniform(sulfur[0], sulfur[2]))))
    return StockTable(stocks), Target(
        "random", tuple(limits), (ShareRule(f"group {('I', 'II', 'III')[k % 3]}", high=0.0 if k % 5 else 0.2),),
        law=LAWS[k % 5], max_cost_per_t=float(np.quantile(table.price, 0.35)) if k % 4 else None,
        batch_kg=float(table.available.sum()) * 0.6 if k % 3 == 0 else None)


def every_set(table: StockTable, target: Target, demands: tuple[Demand, ...]) -> list[frozenset[Demand]]:
    """All irreducible sets, by asking the recipe for every subset of the demands, the small ones first."""
    found: list[frozenset[Demand]] = []
    for size in range(len(demands) + 1):
        for some in combinations(demands, size):
            if not any(each <= frozenset(some) for each in found) and not possible(
                    table.stocks, wanted(target, table.stocks, some)):
                found.append(frozenset(some))
    return found


def test_sets_agree_with_every_subset() -> None:
    seen = 0
    for k in range(12):
        table, target = random_case(k)
        found = conflicts(table, target)
        all_sets = every_set(table, target, Demands(table, target).all)
        assert len(found) == min(3, len(all_sets)), k
        assert {frozenset(c.demands) for c in found} <= set(all_sets), k
        seen += len(found)
    assert seen >= 15


def test_sets_of_larger_plants_are_irreducible() -> None:
    rng = np.random.default_rng(8)
    for k, law in enumerate(LAWS):
        table = random_plant(rng, 25)
        target = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 128.0), Limit("flash", 240.0),
                              Limit("sulfur", None, 0.12), Limit("kv100", 7.0, None)), law=law,
                        max_cost_per_t=850.0, max_stocks=2 if k % 2 else None)
        found = conflicts(table, target)
        assert found
        check(table.stocks, target, found)
        assert all(c.proven for c in found)


def test_limits_that_contradict_each_other() -> None:
    target = Target("x", (Limit("kv40", 50.0), Limit("kv40", None, 40.0), Limit("vi", 90.0)))
    found = conflicts(PLANT, target)
    assert names(found[0]) == {("kv40", "low"), ("kv40", "high")}
    assert found[0].best is None


def test_shares_that_cannot_reach_100_percent() -> None:
    target = Target("x", (Limit("kv40", 20.0, 500.0),), (
        ShareRule("LIGHT", high=0.3), ShareRule("HEAVY", high=0.3), ShareRule("BRIGHT", high=0.2)), only_listed=True)
    found = conflicts(PLANT, target)
    check(PLANT, target, found)
    assert {("LIGHT", "high"), ("HEAVY", "high"), ("BRIGHT", "high")} <= names(found[0])


def test_no_stock_may_serve() -> None:
    unpriced = [replace(s, price_per_t=None) for s in PLANT]
    found = conflicts(unpriced, Target("x", (Limit("kv40", 20.0, 500.0),)))
    assert found == [Conflict(())]
    shut = Target("x", (Limit("kv40", 20.0),), only_listed=True)
    check(PLANT, shut, conflicts(PLANT, shut))
    assert names(conflicts(PLANT, shut)[0]) == {("group I", "high"), ("group III", "high"), ("vi_improver", "high")}


def test_a_cost_ceiling_too_low() -> None:
    target = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 90.0)), max_cost_per_t=780.0)
    found = conflicts(PLANT, target)
    assert names(found[0]) == {(COST, "high")}
    assert found[0].best == pytest.approx(800.0)  # the cheapest stock neat
    together = conflicts(PLANT, replace(target, max_cost_per_t=806.0))
    assert names(together[0]) == {(COST, "high"), ("kv40", "low")}
    check(PLANT, replace(target, max_cost_per_t=806.0), together)


def test_a_batch_larger_than_the_tanks() -> None:
    small = [replace(s, on_hand_kg=5000.0) for s in PLANT]
    target = Target("x", (Limit("kv40", 41.4, 50.6),), batch_kg=30000.0)
    found = conflicts(small, target)
    check(small, target, found)
    assert names(found[0]) == {("batch", "high")}
    assert found[0].best == pytest.approx(25000.0, rel=1e-4)


def test_held_shares_that_break_limits() -> None:
    target = Target("x", (Limit("kv40", 41.4, 50.6),), held={"BRIGHT": 0.5})
    found = conflicts(PLANT[:3], target)
    check(PLANT[:3], target, found)
    assert names(found[0]) == {("BRIGHT", "low high"), ("kv40", "high")}


def test_a_stock_that_the_operator_leaves_out() -> None:
    target = Target("x", (Limit("kv40", 120.0, 150.0),), left_out=frozenset({"BRIGHT"}))
    found = conflicts(PLANT[:3], target)
    check(PLANT[:3], target, found)
    assert names(found[0]) == {("kv40", "low"), ("BRIGHT", "high")}
    assert found[0].best == pytest.approx(95.5, rel=1e-6)


def test_the_best_is_told_with_treat_rates_as_asked() -> None:
    depressant = stock("DROP", 310.0, 33.5, kind="pour_depressant")
    target = Target("x", (Limit("vi", 200.0),), (ShareRule("DROP", 0.002, 0.002),))
    (found,) = conflicts([LIGHT, HEAVY, depressant], target)
    assert names(found) == {("vi", "low")}
    assert found.treated
    neat = float(indices(310.0, 33.5))
    assert found.best < 105.0 < neat < 200.0


def test_a_vi_maximum() -> None:
    target = Target("x", (Limit("vi", None, 85.0), Limit("kv40", 41.4, 50.6)))
    found = conflicts(PLANT[:3], target)
    check(PLANT[:3], target, found)
    assert found[0].of.side == "high"
    assert found[0].best == pytest.approx(min(float(indices(s.kv40, s.kv100)) for s in PLANT[:3]), abs=2.0)


def test_a_limit_at_another_temperature() -> None:
    target = Target("x", (Limit("kv40", 95.0, 105.0), Limit("kv0", None, 500.0)))
    found = conflicts(PLANT[:3], target)
    check(PLANT[:3], target, found)
    assert names(found[0]) == {("kv40", "low"), ("kv0", "high")}


def test_the_limit_whose_value_shuts_a_stock_out_is_named() -> None:
    plant = [LIGHT, replace(CLEAN, values={"sulfur": 0.0})]  # the flash point of CLEAN is unknown
    target = Target("x", (Limit("vi", 120.0), Limit("flash", 200.0)))
    found = conflicts(plant, target)
    check(plant, target, found)
    assert names(found[0]) == {("vi", "low"), ("flash", "low")}


def test_under_several_laws_a_limit_is_one_demand() -> None:
    target = Target("x", (Limit("kv40", 52.2, 60.0), Limit("sulfur", 0.45)), also_laws=("wright-mass",))
    half = Target("x", (Limit("kv40", None, 52.4), Limit("sulfur", 0.45)))
    assert possible([LIGHT, HEAVY], half)  # half and half: 52.07 by Refutas, 52.79 by Wright, by mass
    both = replace(half, also_laws=("wright-mass",))
    (found,) = conflicts([LIGHT, HEAVY], both)
    assert names(found) == {("kv40", "high"), ("sulfur", "low")}
    assert found.best == pytest.approx(52.7935, rel=1e-4)  # half and half by Wright, the worse of the two
    for demand in found.demands:
        rest = [d for d in found.demands if d is not demand]
        assert possible([LIGHT, HEAVY], replace(wanted(both, [LIGHT, HEAVY], rest), also_laws=both.also_laws))
    assert possible([LIGHT, HEAVY], target)


# Whole-number rules

def test_the_fewest_stocks_that_would_do() -> None:
    made = evaluate(THREE, {"LIGHT": 0.6, "HEAVY": 0.25, "BRIGHT": 0.15})
    exact = (Limit("kv40", made.predicted["kv40"], made.predicted["kv40"]),
             Limit("sulfur", made.predicted["sulfur"], made.predicted["sulfur"]))
    target = Target("x", exact, max_stocks=2)
    reasons = Reasons(THREE, target, Stopwatch(20.0))
    assert only_whole_numbers(reasons)
    found = whole_numbers(reasons)
    assert (found.fewest_stocks, found.largest_least_share) == (3, None)
    check(THREE, target, conflicts(THREE, target))
    assert ("max_stocks", "high") in names(conflicts(THREE, target)[0])


def test_the_largest_least_share_that_would_do() -> None:
    target = Target("x", (Limit("kv40", 35.0, 36.0),), min_share=0.2)
    found = whole_numbers(Reasons(THREE, target, Stopwatch(20.0)))
    assert found.fewest_stocks is None
    assert 0.05 < found.largest_least_share < 0.2
    assert possible(THREE, replace(target, min_share=found.largest_least_share))
    assert not possible(THREE, replace(target, min_share=found.largest_least_share + 1e-4))


def test_whole_numbers_are_not_blamed_for_what_others_forbid() -> None:
    target = Target("x", (Limit("vi", 400.0),), max_stocks=1)
    assert whole_numbers(Reasons(PLANT, target, Stopwatch(20.0))) is None


# What must give

def missed_units(target: Target, x: np.ndarray, table: StockTable) -> float:
    """Summed misses of a blend in units of reproducibility, from its exact values."""
    model = build(table, target)
    return sum(need.units_missed(model.read(need.code, x)) for need in model.requirements)


def test_the_changes_make_a_blend_and_no_grid_blend_misses_less() -> None:
    for k, law in enumerate(LAWS):
        table = random_plant(np.random.default_rng([5, k]), 4)
        target = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 170.0), Limit("flash", 265.0)), law=law)
        found = giving(table, target)
        assert found.changes
        assert design(table, replace(target, moved=found.moved)).status == "optimal"
        ours = sum(c.units for c in found.changes)
        grid = [np.array(x) / 24.0 for x in product(range(25), repeat=4) if sum(x) == 24]
        assert ours <= min(missed_units(target, x, table) for x in grid) + 1e-6
        assert all(abs(c.needed - c.asked) / lookup(c.property).reproducibility(c.asked) == pytest.approx(c.units)
                   for c in found.changes)


def test_a_hair_is_all_that_the_moved_limits_give_away() -> None:
    target = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 150.0)))
    found = giving(PLANT[:3], target)
    (change,) = found.changes
    assert (change.property, change.side, change.asked) == ("vi", "low", 150.0)
    assert change.needed - found.moved["vi", "low"] == pytest.approx(2e-4, rel=1e-6)
    tighter = replace(target, moved={("vi", "low"): change.needed + 0.05})
    assert design(PLANT[:3], tighter).status == "infeasible"


ORDERED = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 96.5), Limit("flash", 245.0)))
THREE = (LIGHT, HEAVY, BRIGHT)


def grid_of(target: Target, stocks: tuple[Stock, ...], parts: int) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    model = build(stocks, replace(target, limits=tuple(Limit(x.property, lookup(x.property).lowest)
                                                       for x in target.limits if x.property != "vi")))
    x = np.array([c for c in product(range(parts + 1), repeat=len(stocks)) if sum(c) == parts]) / parts
    read = {code: g.value(g.index_of(x)) for code, g in model.gauges.items()}
    return x, {**read, "vi": indices(read["kv40"], read["kv100"])}


def test_only_what_is_named_gives_and_the_first_gives_first() -> None:
    alone = giving(THREE, ORDERED, ["flash"])
    assert [c.property for c in alone.changes] == ["flash"]
    _, read = grid_of(ORDERED, THREE, 200)
    firm = (read["kv40"] >= 41.4) & (read["kv40"] <= 50.6) & (read["vi"] >= 96.5)
    assert alone.changes[0].needed >= read["flash"][firm].max() - 1e-6
    assert alone.changes[0].needed == pytest.approx(read["flash"][firm].max(), abs=0.3)
    assert design(THREE, replace(ORDERED, moved=alone.moved)).status == "optimal"


def test_what_is_named_last_gives_least() -> None:
    firm = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 120.0), Limit("flash", 280.0)))
    found = giving(THREE, firm, ["flash", "vi"])
    assert [c.property for c in found.changes] == ["flash", "vi"]
    _, read = grid_of(firm, THREE, 200)
    inside = (read["kv40"] >= 41.4) & (read["kv40"] <= 50.6)
    best_vi = read["vi"][inside].max()
    vi, flash = found.changes[1].needed, found.changes[0].needed
    assert best_vi - 1e-6 <= vi <= best_vi + 0.2
    # A grid blend a little short of that VI bounds the flash point from above.
    assert flash <= read["flash"][inside & (read["vi"] >= vi - 0.2)].max() + 0.1
    assert flash >= read["flash"][inside & (read["vi"] >= best_vi)].max() - 0.1
    turned = giving(THREE, firm, ["vi", "flash"])
    assert turned.changes[1].needed > flash + 1.0
    for each in (found, turned):
        assert design(THREE, replace(firm, moved=each.moved)).status == "optimal"


def test_a_window_that_whole_numbers_leap_over_gives_on_its_nearer_side() -> None:
    target = Target("x", (Limit("kv40", 31.0, 32.5), Limit("flash", 210.0)), min_share=0.2)
    found = giving([LIGHT, HEAVY], target, ["flash", "kv40"])
    (change,) = found.changes
    assert (change.property, change.side, change.needed) == ("kv40", "low", pytest.approx(30.6))  # LIGHT neat
    assert design([LIGHT, HEAVY], replace(target, moved=found.moved)).status == "optimal"


def test_an_order_that_is_not_enough_says_so() -> None:
    firm = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 120.0), Limit("flash", 280.0)))
    found = giving(THREE, firm, ["flash"])
    assert found.recipe.shares is None
    assert found.reasons == ("even with no limit on flash point there is no blend: what stays firm cannot hold "
                             "together",)


def test_an_order_names_what_is_limited() -> None:
    with pytest.raises(TargetError, match=r"^sulfur cannot give: x sets no limit on it; it limits kv40, vi, flash$"):
        giving(THREE, ORDERED, ["sulfur"])


def test_the_cost_may_give() -> None:
    target = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 90.0)), max_cost_per_t=700.0)
    found = giving(THREE, target, [COST])
    best = design(THREE, replace(target, max_cost_per_t=None)).cost_per_t
    assert found.changes[0].needed == pytest.approx(best, rel=1e-5)
    assert design(THREE, replace(target, moved=found.moved)).status == "optimal"
    by_sum = giving(THREE, target)
    assert design(THREE, replace(target, moved=by_sum.moved)).status == "optimal"


@pytest.mark.parametrize("order", [(), ("kv40",), ("vi",), ("vi", "kv40")])
def test_what_gives_under_several_laws_holds_under_each(order: tuple[str, ...]) -> None:
    target = Target("x", (Limit("kv40", 60.0, 70.0), Limit("vi", 104.0)), also_laws=("wright-volume", "walther-mass"))
    found = giving(THREE, target, order)
    if order == ("kv40",):
        assert found.recipe.shares is None
        return
    made = design(THREE, replace(target, moved=found.moved))
    assert made.status == "optimal"
    assert made.meets_all


def test_nothing_gives_where_a_blend_exists_or_shares_are_short() -> None:
    fits = Target("x", (Limit("kv40", 41.4, 50.6),))
    assert giving(THREE, fits) == Giving(giving(THREE, fits).recipe)
    short = giving([replace(s, on_hand_kg=100.0) for s in THREE], replace(fits, batch_kg=1000.0))
    assert short.recipe.shares is None
    assert "700 kg short" in short.reasons[0]


def test_a_vi_that_an_oil_is_too_thin_to_have_is_let_go() -> None:
    thin = [stock("THIN", 5.0, 1.7), stock("THINNER", 4.0, 1.5)]
    target = Target("x", (Limit("kv40", 4.0, 5.0), Limit("vi", 50.0)))
    found = giving(thin, target)
    assert [(c.property, c.needed) for c in found.changes] == [("vi", None)]
    assert design(thin, replace(target, moved=found.moved)).status == "optimal"


# What can be reached
