"""What a property can reach, and one more stock: bought, or of the catalogue and not allowed today."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from solver.demands import Demands
from solver.errors import TargetError
from solver.laws import viscosity_gauge
from solver.linear import Stopwatch
from solver.purchase import catalogue, least_share, neutral, pairs, region
from solver.reach import extreme, reach
from solver.recipe import design
from solver.requirements import COST
from solver.rows import build
from solver.stocks import StockTable
from solver.target import LAWS, Limit, ShareRule, Target
from solver.viscosity_index import indices, kv40_at
from tests.benchmarks.plants import case, random_plant
from tests.solver.test_why import (
    CLEAN,
    HEAVY,
    LIGHT,
    MODIFIER,
    ORDERED,
    PLANT,
    THREE,
    grid_of,
    possible,
    stock,
)


@pytest.mark.parametrize("law", LAWS)
def test_reach_agrees_with_a_dense_grid(law: str) -> None:
    table = random_plant(np.random.default_rng([6, LAWS.index(law)]), 4)
    limits = (Limit("kv40", 20.0, 200.0), Limit("flash", float(np.median(table.column("flash")))),
              Limit("vi", 90.0, 130.0))
    told = {code: (alone, others) for code, alone, others in
            reach(Demands(table, Target("x", limits, law=law)), Stopwatch(30.0))}
    assert set(told) == {"kv40", "kv100", "vi", "density15", "flash", COST}
    x, read = grid_of(Target("x", limits, law=law), table.stocks, 40)
    read["density15"], read[COST] = 1.0 / (x @ (1.0 / table.density)), x @ table.price
    kept = {"kv40": (read["kv40"] >= 20.0) & (read["kv40"] <= 200.0), "flash": read["flash"] >= limits[1].low,
            "vi": (read["vi"] >= 90.0) & (read["vi"] <= 130.0)}
    for code, (alone, others) in told.items():
        values, inside = read[code], np.all([ok for of, ok in kept.items() if of != code], axis=0)
        for span, some in ((alone, values), (others, values[inside])):
            assert span is not None
            assert span[0] <= some.min() + 1e-3
            assert span[1] >= some.max() - 1e-3


@pytest.mark.parametrize("law", LAWS)
def test_what_is_in_reach_can_be_asked_and_what_is_not_cannot(law: str) -> None:
    table = random_plant(np.random.default_rng([6, LAWS.index(law)]), 8)
    limits = (Limit("kv40", 30.0, 120.0), Limit("flash", float(np.median(table.column("flash")))),
              Limit("vi", 100.0, 130.0))
    target = Target("x", limits, law=law)
    told = list(reach(Demands(table, target), Stopwatch(30.0)))
    assert next(alone for code, alone, _ in told if code == COST)[1] == pytest.approx(table.price.max())
    for code, alone, others in told:
        rest = tuple(x for x in limits if x.property != code)
        for span, kept in ((alone, ()), (others, rest)):
            assert span is not None
            by = 1e-3 * abs(span[1] - span[0]) + (0.1 if code == "vi" else 0.0)
            # No product can ask for at least so much cost; the highest is the dearest stock neat.
            ends = list(zip(span, (-1.0, 1.0), strict=True))[:1 if code == COST else 2]
            for value, sign in ends:
                assert possible(table.stocks, _asking(target, kept, code, value - 0.5 * sign * by, sign)), (code, value)
                assert not possible(table.stocks, _asking(target, kept, code, value + sign * by, sign)), (code, value)


def _asking(target: Target, kept: tuple[Limit, ...], code: str, value: float, sign: float) -> Target:
    """The kept limits, and the property beyond a value."""
    if code == COST:
        return replace(target, limits=(*kept, Limit("density15", 600.0)), max_cost_per_t=value)
    limit = Limit(code, value, None) if sign > 0.0 else Limit(code, None, value)
    return replace(target, limits=(*kept, limit))


def test_the_vi_in_reach_is_the_vi_that_can_be_asked() -> None:
    for law in LAWS:
        table = random_plant(np.random.default_rng([7, LAWS.index(law)]), 12)
        target = Target("x", (Limit("kv40", 40.0, 60.0), Limit("vi", 80.0)), law=law)
        told = {code: others for code, _, others in reach(Demands(table, target), Stopwatch(30.0))}
        low, high = told["vi"]
        window = Limit("kv40", 40.0, 60.0)
        assert design(table, replace(target, limits=(window, Limit("vi", high - 0.02)))).status == "optimal"
        assert design(table, replace(target, limits=(window, Limit("vi", high + 0.1)))).status == "infeasible"
        assert design(table, replace(target, limits=(window, Limit("vi", None, low + 0.02)))).status == "optimal"
        assert design(table, replace(target, limits=(window, Limit("vi", None, low - 0.1)))).status == "infeasible"


def test_reach_keeps_to_shares_and_tanks_and_says_none_where_nothing_is() -> None:
    target = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 300.0)), (ShareRule("BRIGHT", high=0.1),))
    told = {code: (alone, others) for code, alone, others in reach(Demands(StockTable(THREE), target), Stopwatch(9.0))}
    capped = design(THREE, Target("x", (Limit("kv40", told["kv40"][0][1] - 1e-4),), (ShareRule("BRIGHT", high=0.1),)))
    assert capped.shares["BRIGHT"] == pytest.approx(0.1, abs=1e-5)
    assert told["kv40"][1] is None
    assert told["vi"][1] is not None


# What to buy

TO_BUY = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 115.0), Limit("flash", 210.0)))


def test_a_stock_bought_at_a_point_of_the_region_does_it_and_less_does_not() -> None:
    demands = Demands(StockTable(THREE), TO_BUY)
    taken = neutral(demands.model)
    assert taken.values == {"flash": pytest.approx(210.0)}
    points = list(region(demands, Stopwatch(60.0), kv40s=5))
    does = [p for p in points if p.share is not None and p.share > 0.001]
    assert does
    assert any(p.share is None for p in points)
    for point in does[::3]:
        bought = [*THREE, taken.stock(point.kv40, point.kv100)]
        assert float(indices(point.kv40, point.kv100)) == pytest.approx(point.vi, abs=0.02)
        capped = replace(TO_BUY, rules=(ShareRule("(new)", high=point.share + 1e-4),))
        assert design(bought, capped).status == "optimal"
        capped = replace(TO_BUY, rules=(ShareRule("(new)", high=max(0.0, point.share - 2e-4)),))
        assert design(bought, capped).status == "infeasible"


def test_stocks_of_the_catalogue_and_why_they_may_not_serve() -> None:
    plant = [*THREE, replace(CLEAN, code="CAPPED"), replace(CLEAN, code="EMPTY", on_hand_kg=0.0),
             replace(CLEAN, code="NOPRICE", price_per_t=None), replace(CLEAN, code="OUT"),
             replace(CLEAN, code="NOFLASH", values={}), replace(CLEAN, code="NOKV", kv40=None, kv100=None),
             replace(CLEAN, code="OTHER", kind="rework"), MODIFIER, stock("PACK", 92.0, 9.2, kind="additive")]
    target = replace(TO_BUY, rules=(ShareRule("CAPPED", high=0.0),), left_out=frozenset({"OUT"}))
    told = {x.stock: x for x in catalogue(Demands(StockTable(plant), target), Stopwatch(60.0))}
    why = {code: x.why_not for code, x in told.items()}
    assert why == {
        "CAPPED": ("the product caps CAPPED at 0 %",), "EMPTY": ("nothing pumpable is left in the tank",),
        "NOPRICE": ("its price is unknown",), "OUT": ("left out by the operator",),
        "NOFLASH": ("its flash point is unknown and the product limits it",),
        "NOKV": ("its KV40 and KV100 are unknown",), "OTHER": ("a rework that the product does not name",),
        "MODIFIER": ("a VI improver that the product does not name",),
        "PACK": ("an additive that the product does not name; its treat rate is the formulator's", *(
            ["its flash point is unknown and the product limits it"]))}
    assert told["NOKV"].share is None
    assert told["NOFLASH"].assumed == ("flash point 210 °C",)
    assert told["NOPRICE"].cost_per_t is None
    expected = least_share(StockTable(THREE), TO_BUY, replace(CLEAN, code="CAPPED"), Stopwatch(9.0))
    assert expected is not None
    assert told["CAPPED"].share == told["OUT"].share == pytest.approx(expected)
    assert told["CAPPED"].cost_per_t == pytest.approx(design([*THREE, CLEAN], TO_BUY).cost_per_t, rel=1e-5)


def test_a_cap_on_a_group_falls_for_the_one_stock_only() -> None:
    plant = [*THREE, replace(CLEAN, code="A"), replace(CLEAN, code="B", kv40=30.0, kv100=6.5)]
    target = replace(TO_BUY, rules=(ShareRule("group III", high=0.0),))
    told = {x.stock: x for x in catalogue(Demands(StockTable(plant), target), Stopwatch(60.0))}
    assert told["A"].share == pytest.approx(least_share(StockTable(THREE), TO_BUY, plant[3], Stopwatch(9.0)))
    assert told["B"].share == pytest.approx(least_share(StockTable(THREE), TO_BUY, plant[4], Stopwatch(9.0)))


def test_a_tank_with_too_little_says_so() -> None:
    plant = [LIGHT, replace(HEAVY, on_hand_kg=500.0)]
    target = Target("x", (Limit("kv40", 41.4, 50.6),), batch_kg=10000.0)
    (heavy,) = [x for x in catalogue(Demands(StockTable(plant), target), Stopwatch(9.0)) if x.stock == "HEAVY"]
    assert heavy.why_not == ("only 500 kg can be pumped for 10,000 kg",)
    neat = Target("x", (Limit("kv40", 41.4, 41.4),))
    assert heavy.share == pytest.approx(design([LIGHT, HEAVY], neat).shares["HEAVY"], abs=1e-4)


def test_two_that_do_together_what_neither_does_alone() -> None:
    target = Target("x", (Limit("kv40", 41.4, 50.6), Limit("vi", 140.0), Limit("sulfur", None, 0.2)),
                    (ShareRule("group III", high=0.0),))
    demands = Demands(StockTable(PLANT), target)
    told = {x.stock: x.share for x in catalogue(demands, Stopwatch(30.0))}
    assert told == {"CLEAN": None, "MODIFIER": None}
    (pair,) = pairs(demands, Stopwatch(30.0))
    assert set(pair.stocks) == {"CLEAN", "MODIFIER"}
    allowed = replace(target, rules=(ShareRule("MODIFIER"),))
    assert pair.cost_per_t == pytest.approx(design(PLANT, allowed).cost_per_t, rel=1e-5)


@pytest.mark.parametrize("k", range(8))
def test_the_best_vi_under_several_laws_is_that_of_a_dense_grid(k: int) -> None:
    table = random_plant(np.random.default_rng([8, k]), 3)
    laws = ("wright-volume", "walther-volume", "refutas")
    parts = [(i, j, 200 - i - j) for i in range(201) for j in range(201 - i)]
    grid = np.array(parts) / 200.0
    read = {law: [(g := viscosity_gauge(law, table, t)).value(g.index_of(grid)) for t in (40.0, 100.0)] for law in laws}
    middle = float(np.median(read["refutas"][0]))
    inside = np.all([(kv40 >= 0.93 * middle) & (kv40 <= 1.07 * middle) for kv40, _ in read.values()], axis=0)
    worst = np.min([indices(*pair) for pair in read.values()], axis=0)[inside]
    asked = Target("P", (Limit("kv40", 0.93 * middle, 1.07 * middle),), law=laws[0], also_laws=laws[1:])
    found = extreme(build(table, asked), "vi", 1.0, Stopwatch(10.0))
    assert found is not None
    assert float(worst.max()) - 0.1 <= found[0] <= float(worst.max()) + 0.5  # the grid's step is coarse near a corner
    own = [indices(*(viscosity_gauge(law, table, t).read(found[1]) for t in (40.0, 100.0))) for law in laws]
    assert found[0] == pytest.approx(min(own), abs=1e-6)


@pytest.mark.parametrize("k", [43, 114, 139])
def test_the_best_vi_under_two_laws_may_be_the_best_of_neither(k: int) -> None:
    rng = np.random.default_rng([8, k])
    stocks = []
    for name in ("A", "B", "C"):
        kv100, vi = float(np.exp(rng.uniform(1.0, 3.5))), float(rng.uniform(75.0, 150.0))
        density = float(rng.uniform(780.0, 1000.0))
        stocks.append(replace(stock(name, float(kv40_at(vi, kv100)), kv100), density15=density))
    table, laws = StockTable(stocks), ("wright-volume", "walther-volume")
    grid = np.array([(i, j, 300 - i - j) for i in range(301) for j in range(301 - i)]) / 300.0
    read = [[(g := viscosity_gauge(law, table, t)).value(g.index_of(grid)) for t in (40.0, 100.0)] for law in laws]
    best = float(np.min([indices(*pair) for pair in read], axis=0).max())
    asked = Target("P", (Limit("kv40", 1.0, 1e6),), law=laws[0], also_laws=laws[1:])
    found = extreme(build(table, asked), "vi", 1.0, Stopwatch(10.0))
    assert found is not None
    assert found[0] == pytest.approx(best, abs=0.11)


# A limit moved as a what-if

@pytest.mark.parametrize("k", range(6))
def test_a_moved_limit_is_the_limit(k: int) -> None:
    table, asked = case(15, k, 8, 20, hardest=115.0)
    lines = {x.property: x for x in asked.limits}
    least = lines["vi"].low
    assert least is not None

    def instead(code: str, low: float | None, high: float | None) -> Target:
        return replace(asked, limits=(*(x for c, x in lines.items() if c != code), Limit(code, low, high)))

    for moved, same in (
            ({("vi", "low"): least + 3.0}, instead("vi", least + 3.0, None)),
            ({("vi", "low"): least - 6.0}, instead("vi", least - 6.0, None)),
            ({("vi", "high"): least + 1.0}, instead("vi", least, least + 1.0)),
            ({("vi", "low"): np.nan}, replace(asked, limits=(lines["kv40"], lines["kv100"]))),
            ({("kv40", "high"): np.nan}, instead("kv40", lines["kv40"].low, None)),
            ({("flash", "low"): 220.0}, instead("flash", 220.0, None)),
            ({("kv0", "high"): 3000.0}, instead("kv0", None, 3000.0))):
        made, other = design(table, replace(asked, moved=moved)), design(table, same)
        assert made.status == other.status
        assert made.cost_per_t == pytest.approx(other.cost_per_t, rel=2e-6)


def test_a_limit_cannot_be_moved_to_infinity() -> None:
    for code in ("vi", "cost_per_t"):
        with pytest.raises(TargetError, match=f"{code}: a limit cannot be moved to inf"):
            design(THREE, replace(ORDERED, moved={(code, "high"): np.inf}))
