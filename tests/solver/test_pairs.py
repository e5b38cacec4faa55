"""Pair excess in the law's index: read exactly, followed along its tangents, and proven only where it is."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from solver.choices import ranges
from solver.laws import viscosity_gauge
from solver.pairs import excesses, pair_excess, terms_at
from solver.recipe import design, evaluate
from solver.stocks import Stock, StockTable
from solver.target import LAWS, Effective, Excess, Limit, ShareRule, Target
from tests.benchmarks.plants import case, random_plant

TWO = {40.0: (0.8, 0.3), 100.0: (0.5, -0.2)}


def test_the_excess_of_a_pair_is_redlich_and_kisters() -> None:
    # E = f g (A + B (f − g)): nothing at the ends, A/4 in the middle.
    f = np.array([0.0, 0.25, 0.5, 1.0])
    assert pair_excess(f, 1.0 - f, (2.0, 1.0)) == pytest.approx([0.0, 0.1875 * (2.0 - 0.5), 0.5, 0.0])


def test_terms_between_two_temperatures_lie_on_a_line_in_log_t() -> None:
    pair = Excess("a", "b", "refutas", TWO)
    assert terms_at(pair, 40.0) == (0.8, 0.3)
    middle = 10 ** (0.5 * (np.log10(313.15) + np.log10(373.15))) - 273.15
    assert terms_at(pair, middle) == pytest.approx((0.65, 0.05))
    assert terms_at(Excess("a", "b", "refutas", {40.0: (1.0,)}), 100.0) is None


@pytest.mark.parametrize("law", LAWS)
def test_the_tangent_agrees_to_first_order_and_its_rows_with_the_exact_reading(law: str) -> None:
    table = random_plant(np.random.default_rng(3), 6)
    scale = 1.0 if law == "refutas" else 0.03
    pairs = tuple(Excess(table.codes[i], table.codes[i + 1], law,
                         {t: tuple(scale * v for v in terms) for t, terms in TWO.items()}) for i in range(3))
    gauge = viscosity_gauge(law, table, 40.0, pairs)
    rng = np.random.default_rng(4)
    for _ in range(50):
        x = rng.dirichlet(np.ones(6))
        assert gauge.tangent(x).read(x) == pytest.approx(gauge.read(x), rel=1e-10)
        step = 1e-6 * (rng.dirichlet(np.ones(6)) - x)
        moved = gauge.read(x + step) - gauge.read(x)
        assert gauge.tangent(x).read(x + step) - gauge.read(x) == pytest.approx(moved, abs=1e-9 * gauge.read(x))
        assert float(gauge.gradient(x) @ step) == pytest.approx(moved, abs=1e-9 * gauge.read(x))
        value = gauge.read(x)
        for limit in (0.98 * value, 1.02 * value):
            assert (float(gauge.tangent(x).row(limit, "high") @ x) <= 0.0) == (value <= limit)


def test_parts_of_one_oil_in_two_tanks_are_summed() -> None:
    stocks = [Stock("T1", oil="N", kv40=30.0, kv100=5.2), Stock("T2", oil="N", kv40=30.0, kv100=5.2),
              Stock("B", kv40=400.0, kv100=30.0)]
    pairs = (Excess("N", "B", "refutas", {40.0: (2.0,)}),)
    gauge = viscosity_gauge("refutas", StockTable(stocks), 40.0, pairs)
    assert gauge.read(np.array([0.2, 0.3, 0.5])) == pytest.approx(gauge.read(np.array([0.5, 0.0, 0.5])), rel=1e-12)


def test_the_span_holds_every_blend() -> None:
    table = random_plant(np.random.default_rng(8), 5)
    rng = np.random.default_rng(9)
    for _ in range(20):
        a, b = rng.uniform(-2.0, 2.0, 2)
        for omega in (np.ones(5), rng.uniform(0.9, 1.2, 5)):
            found = excesses(table, (Excess(table.codes[0], table.codes[1], "refutas", {40.0: (a, b)}),), "refutas",
                             40.0, omega)
            hi = rng.uniform(0.3, 1.0, 5)
            low, high = found.span(hi)
            x = rng.dirichlet(np.full(5, 0.4), 4000)
            values = found.value(x[(x <= hi).all(axis=1)])
            assert low <= values.min()
            assert values.max() <= high


def a_bent_case(k: int) -> tuple[StockTable, Target]:
    """Seeded case k with an excess between the two stocks that its plain recipe uses most, and another pair."""
    table, target = case(5, k, 8, 16)
    base = design(table, target)
    used = sorted(base.shares or {}, key=lambda c: -(base.shares or {})[c])[:2]
    rng = np.random.default_rng(k)
    scale = 1.0 if target.law == "refutas" else 0.03
    pairs = [*([tuple(used)] if len(used) == 2 else []), table.codes[:2]]
    taught = tuple(Excess(a, b, target.law, {40.0: tuple(scale * rng.uniform(-1, 1, 2)),
                                             100.0: tuple(scale * rng.uniform(-1, 1, 2))}, version=f"L{i}")
                   for i, (a, b) in enumerate(pairs))
    return table, replace(target, lessons=taught)


@pytest.mark.parametrize("k", range(25))
def test_a_followed_recipe_meets_everything_and_no_blend_undercuts_its_bound(k: int) -> None:
    table, target = a_bent_case(k)
    made = design(table, target)
    if made.status == "infeasible":
        return
    assert made.meets_all
    again = evaluate(table, made.shares, target)
    assert again.predicted["kv40"] == pytest.approx(made.predicted["kv40"], rel=1e-9)
    rng = np.random.default_rng(k)
    x = np.array([made.shares.get(code, 0.0) for code in table.codes])
    g40, g100 = (viscosity_gauge(target.law, table, t, target.lessons) for t in (40.0, 100.0))
    cheapest = np.inf
    for _ in range(2000):
        y = x + rng.choice([0.01, 0.1, 0.5]) * (rng.dirichlet(np.full(len(x), 0.3)) - x)
        shares = {c: v for c, v in zip(table.codes, y, strict=True) if v > 0.0}
        cost = float(y @ table.price)
        if cost >= made.cost_per_t * (1.0 - 1e-6) or not _windows(target, g40.read(y), g100.read(y)):
            continue
        if evaluate(table, shares, target).meets_all:
            cheapest = min(cheapest, cost)
    assert made.bound_per_t is None or cheapest >= made.bound_per_t
    # A followed recipe is where no small change pays; these random ones never found a cheaper blend.
    assert cheapest == np.inf


def _windows(target: Target, kv40: float, kv100: float) -> bool:
    low40, low100 = target.limits[0], target.limits[1]
    return low40.low <= kv40 <= low40.high and low100.low <= kv100 <= low100.high


def test_it_is_called_proven_only_where_it_is() -> None:
    table, target = a_bent_case(1)
    made = design(table, target)
    assert made.lessons
    assert made.status == "stopped"
    assert "not proven" in made.reasons[0]
    assert design(table, replace(target, lessons=())).status == "optimal"
    # A lesson of a law that is not in use, or of stocks that are not there, changes nothing.
    other = tuple(replace(e, law="refutas" if target.law != "refutas" else "wright-mass") for e in target.lessons)
    assert design(table, replace(target, lessons=other)).status == "optimal"


def test_a_recipe_names_its_lessons_and_the_provisional_ones() -> None:
    stocks = [Stock("A", kv40=30.0, kv100=5.2, price_per_t=800.0, on_hand_kg=1e5),
              Stock("B", kv40=400.0, kv100=30.0, price_per_t=1000.0, on_hand_kg=1e5)]
    lesson = Excess("A", "B", "refutas", {40.0: (1.0,)}, version="L7", provisional=True)
    plain = Target("t", (Limit("kv40", 95.0, 105.0),))
    made = design(stocks, replace(plain, lessons=(lesson,)))
    assert made.lessons == ("L7",)
    assert made.provisional == ("L7",)
    assert made.predicted["kv40"] == pytest.approx(95.0, rel=1e-6)
    # The excess thickens the blend, so that less of the dear bright stock is needed.
    assert made.cost_per_t < design(stocks, plain).cost_per_t


def test_ranges_follow_the_tangents_too() -> None:
    stocks = [Stock("A", kv40=30.0, kv100=5.2, price_per_t=800.0, on_hand_kg=1e5),
              Stock("B", kv40=400.0, kv100=30.0, price_per_t=1000.0, on_hand_kg=1e5)]
    lesson = Excess("A", "B", "refutas", {40.0: (1.0,)}, version="L1")
    target = Target("t", (Limit("kv40", 95.0, 105.0),), lessons=(lesson,))
    low, high = ranges(stocks, target)["B"]
    gauge = viscosity_gauge("refutas", StockTable(stocks), 40.0, (lesson,))
    grid = np.linspace(0.0, 1.0, 20001)
    kv = np.array([gauge.read(np.array([1.0 - b, b])) for b in grid])
    true = grid[(kv >= 95.0) & (kv <= 105.0)]
    assert (low, high) == pytest.approx((true.min(), true.max()), abs=1e-3)


@pytest.mark.parametrize("law", LAWS)
def test_a_stock_blends_with_the_index_that_was_worked_back_for_it(law: str) -> None:
    stocks = [Stock("A", kv40=30.0, kv100=5.2, density15=870.0, price_per_t=800.0, on_hand_kg=1e5),
              Stock("V", kv40=900.0, kv100=90.0, density15=880.0, price_per_t=3000.0, on_hand_kg=1e5,
                    kind="vi_improver")]
    table = StockTable(stocks)
    plain = viscosity_gauge(law, table, 100.0)
    own = float(plain.num[1] / plain.den[1])
    more = 0.5 if law == "refutas" else 0.02
    taught = Effective("V", law, {40.0: own + 2.0 * more, 100.0: own + more}, (0.02, 0.10), "L3")
    gauge = viscosity_gauge(law, table, 100.0, (taught,))
    x = np.array([0.95, 0.05])
    assert gauge.index_of(np.array([0.0, 1.0])) == pytest.approx(own + more)
    # Its own part of the blend moves the index by as much as its weight is.
    weight = float(plain.den[1] * x[1] / (plain.den @ x))
    assert gauge.index_of(x) - plain.index_of(x) == pytest.approx(more * weight)
    assert gauge.excess is None  # a straight row still: the recipe stays proven
    target = Target("t", (Limit("kv100", plain.read(x)),), rules=(ShareRule("V", 0.0, 0.2),), law=law,
                    lessons=(taught,))
    made = design(stocks, target)
    assert made.status == "optimal"
    assert made.lessons == ("L3",)
    assert not made.warnings
    assert made.cost_per_t < design(stocks, replace(target, lessons=())).cost_per_t
    outside = evaluate(stocks, {"A": 0.85, "V": 0.15}, target)
    assert "holds from 2.00 to 10.00 %" in outside.warnings[0]
