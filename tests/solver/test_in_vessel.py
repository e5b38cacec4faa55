"""What is in the vessel takes part with its mass: as a stock held at that share does, in all that the solver tells."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from solver import aims, certain, choices, confidence, demands, entering, prices, purchase, reach, sets, why
from solver.charges import Charges
from solver.errors import StockError, TargetError
from solver.linear import Stopwatch
from solver.recipe import design, evaluate
from solver.rows import build
from solver.stocks import Stock, StockTable
from solver.target import LAWS, Effective, Excess, Limit, ShareRule, Target
from solver.trim import effect, with_and_without
from solver.whole import whole

HEAVY = Stock("HEAVY", on_hand_kg=5e5, price_per_t=900.0, density15=873.0, kv40=110.0, kv100=12.0, api_group="II",
              values={"flash": 265.0})
LIGHT = Stock("LIGHT", on_hand_kg=5e5, price_per_t=800.0, density15=868.0, kv40=30.6, kv100=5.23, api_group="I",
              values={"flash": 215.0})
FINE = Stock("FINE", on_hand_kg=4e3, price_per_t=2000.0, density15=846.0, kv40=47.0, kv100=7.7, api_group="III",
             values={"flash": 255.0})
BRIGHT = Stock("BRIGHT", on_hand_kg=5e4, price_per_t=1200.0, density15=897.0, kv40=490.0, kv100=32.0, api_group="I",
               values={"flash": 300.0})
RETURNS = Stock("RETURNS", kind="rework", on_hand_kg=9e3, price_per_t=300.0, density15=875.0, kv40=80.0, kv100=9.0,
                values={"flash": 230.0})
STOCKS = [HEAVY, LIGHT, FINE, BRIGHT]
HEEL = Stock("HEEL", price_per_t=500.0, density15=890.0, kv40=320.0, kv100=24.0, values={"flash": 250.0})
POURED = replace(HEEL, in_vessel_kg=900.0)
TARGET = Target("VG 68 oil", (Limit("kv40", 61.0, 75.0), Limit("vi", 97.0), Limit("flash", 200.0)), batch_kg=18e3)
HELD = {"HEEL": 0.05}  # 900 kg of 18 t
IMPOSSIBLE = Target("none", (Limit("kv40", 61.0, 75.0), Limit("vi", 140.0)), batch_kg=18e3)


def shares(made: Any) -> Any:
    return None if made is None or made.shares is None else dict(made.shares)


def taken_apart(stocks: list[Stock], target: Target) -> demands.Demands:
    listed = replace(target, limits=IMPOSSIBLE.limits, only_listed=True,
                     rules=tuple(ShareRule(s.code) for s in STOCKS[:3]))
    return demands.Demands(StockTable(stocks), listed)


ANSWERS: dict[str, Callable[[list[Stock], Target], Any]] = {
    "recipe": lambda s, t: shares(design(s, t)),
    "bound": lambda s, t: [design(s, t).cost_per_t, design(s, t).bound_per_t],
    "nearest": lambda s, t: shares(design(s, replace(t, limits=IMPOSSIBLE.limits))),
    "whole charges": lambda s, t: whole([replace(x, division_kg=None if x.code == "HEEL" else 10.0) for x in s],
                                        t).charges_kg,
    "nearest whole charges": lambda s, t: whole(s, replace(t, limits=IMPOSSIBLE.limits)).charges_kg,
    "ranges": choices.ranges,
    "ranges within a cost": lambda s, t: [{code: (x.low, x.high) for code, x in found.items()}
                                          for _, found in choices.ranges_within(s, t)],
    "other sets": lambda s, t: [shares(x) for x in sets.blends(s, t, 4)],
    "aims": lambda s, t: [shares(x.recipe) for x in aims.aims(s, t, stock="BRIGHT")],
    "certain": lambda s, t: shares(certain.certain(s, t, 0.9).recipe),
    "chances": lambda s, t: [(x.property, x.sigma, x.closed) for x in confidence.chances(
        s, design(s, t).shares or {}, t, blends=1000).limits],
    "prices of limits": lambda s, t: [(x.of, x.side, x.eased_per_t, x.tightened_per_t)
                                      for x in prices.LimitPrices(s, t).limits() if x.kind != "held"],
    "prices of stocks": lambda s, t: [(x.stock, x.share, x.critical_per_t)
                                      for x in entering.StockPrices(s, t).stocks() if x.stock != "HEEL"],
    "how far they reach": lambda s, t: [(x.stock, x.what, x.low, x.high) for x in entering.StockPrices(s, t).reaches()],
    "reach": lambda s, t: list(reach.reach(taken_apart(s, t), Stopwatch(20.0))),
    "one more stock": lambda s, t: list(purchase.catalogue(taken_apart(s, t), Stopwatch(20.0))),
    "why": lambda s, t: [[(d.kind, d.name, d.side) for d in x.demands]
                         for x in why.conflicts(s, replace(t, limits=IMPOSSIBLE.limits))],
}


def close(first: Any, second: Any) -> bool:
    """Are two answers alike, figures to 1e-5?"""
    if isinstance(first, float) and isinstance(second, float):
        return first == pytest.approx(second, rel=1e-5, abs=1e-6)
    if isinstance(first, dict) and isinstance(second, dict):
        return first.keys() == second.keys() and all(close(v, second[k]) for k, v in first.items())
    if isinstance(first, list | tuple) and isinstance(second, list | tuple):
        return len(first) == len(second) and all(close(a, b) for a, b in zip(first, second, strict=True))
    return bool(first == second)


@pytest.mark.parametrize("law", ["refutas", "wright-volume"])
@pytest.mark.parametrize("what", ANSWERS)
def test_it_counts_as_a_stock_held_at_its_share(what: str, law: str) -> None:
    answer = ANSWERS[what]
    poured = answer([POURED, *STOCKS], replace(TARGET, law=law))
    held = answer([replace(HEEL, on_hand_kg=1e6), *STOCKS], replace(TARGET, law=law, held=HELD))
    assert poured
    assert close(poured, held), (poured, held)


@pytest.mark.parametrize("law", LAWS)
def test_its_figures_are_those_of_the_whole(law: str) -> None:
    recipe = design([POURED, *STOCKS], replace(TARGET, law=law))
    assert recipe.status == "optimal"
    assert recipe.charges_kg is not None
    assert recipe.charges_kg["HEEL"] == pytest.approx(900.0)
    again = evaluate([HEEL, *STOCKS], recipe.shares or {}, law=law)
    assert recipe.predicted["kv40"] == pytest.approx(again.predicted["kv40"])
    assert recipe.meets_all


def test_without_a_price_it_costs_nothing() -> None:
    recipe, paid = (design([replace(POURED, price_per_t=price), *STOCKS], TARGET) for price in (None, 500.0))
    assert recipe.cost_per_t == pytest.approx((paid.cost_per_t or 0.0) - 0.05 * 500.0)


# Quantities

def test_the_largest_batch_on_top_of_it_is_that_of_the_tanks() -> None:
    """By hand: KV40 held at 60 by Refutas with 100 kg of a heel of 60: 30 % of the rest is HEAVY, 3000 kg of it."""
    index = {s.code: 14.534 * np.log(np.log((s.kv40 or 0.0) + 0.8)) for s in STOCKS}
    goal = 14.534 * np.log(np.log(60.8))
    part = (goal - index["LIGHT"]) / (index["HEAVY"] - index["LIGHT"])
    target = Target("t", (Limit("kv40", 60.0, 60.0),), batch_kg=5e3)
    stocks = [replace(HEEL, kv40=60.0, kv100=8.2, in_vessel_kg=100.0), replace(HEAVY, on_hand_kg=3e3), LIGHT]
    assert choices.largest_batch(stocks, target) == pytest.approx(100.0 + 3e3 / part, rel=1e-4)


def test_a_rule_on_one_stock_holds_in_the_largest_batch_too() -> None:
    """By hand: 900 kg are 10 % of 9 t, so no batch of at least 10 % of it is larger."""
    target = replace(TARGET, rules=(ShareRule("HEEL", 0.1, 1.0),))
    assert choices.largest_batch([POURED, *STOCKS], target) == pytest.approx(9e3, rel=1e-4)


def test_too_little_on_hand_is_the_reason_and_the_batch_stays_what_it_is() -> None:
    stocks = [POURED, *(replace(s, on_hand_kg=3e3) for s in STOCKS)]
    found = why.conflicts(stocks, TARGET)
    assert [[d.kind for d in x.demands] for x in found] == [["on hand"]]
    assert found[0].best == pytest.approx(12.9e3)


def test_what_is_promised_is_not_there() -> None:
    promised = replace(HEAVY, on_hand_kg=9e3, unpumpable_kg=500.0, reserved_kg=2500.0)
    assert promised.available_kg == 6e3
    assert replace(promised, reserved_kg=9e3).available_kg == 0.0
    ranges = choices.ranges([POURED, promised, LIGHT, BRIGHT], TARGET)
    assert ranges is not None
    assert ranges["HEAVY"][1] == pytest.approx(6e3 / 18e3, abs=1e-4)
    charged = whole([POURED, promised, LIGHT, BRIGHT], TARGET).charges_kg
    assert charged is not None
    assert charged["HEAVY"] <= 6e3
    left = design([POURED, replace(promised, reserved_kg=9e3), LIGHT, BRIGHT], TARGET).left_out
    assert [(x.stock, x.reason) for x in left] == [("HEAVY", "nothing pumpable is left in the tank")]


# What it was made of

def test_rules_count_what_it_was_made_of() -> None:
    """By hand: 900 kg with 20 % returns are 180 kg of the 3 % of 18 t, so 360 kg more may be charged."""
    heel = replace(POURED, contents=((RETURNS, 0.2), (HEAVY, 0.8)))
    target = replace(TARGET, rules=(ShareRule("rework", 0.0, 0.03),))
    ranges = choices.ranges([heel, *STOCKS, RETURNS], target)
    assert ranges is not None
    assert ranges["RETURNS"][1] == pytest.approx(360.0 / 18e3, abs=1e-4)
    charged = whole([heel, *STOCKS, replace(RETURNS, division_kg=1.0)], target).charges_kg
    assert charged is not None
    assert charged["RETURNS"] == pytest.approx(360.0)
    most = next(x for x in aims.aims([heel, *STOCKS, RETURNS], target, names=("most-rework",)))
    assert most.recipe is not None
    assert (most.recipe.shares or {})["RETURNS"] == pytest.approx(0.02, abs=1e-4)
    assert evaluate([heel, HEAVY, LIGHT, RETURNS], {"HEEL": 0.05, "HEAVY": 0.5, "LIGHT": 0.42, "RETURNS": 0.03},
                    target).breaches == ("rework 4.00 %, the product asks at most 3 %",)


def test_a_treat_rate_counts_the_additive_that_is_in_it() -> None:
    """By hand: 1 % of 18 t is 180 kg, and 900 kg with 2 % of it have 18 kg."""
    additive = Stock("ADD", kind="additive", on_hand_kg=5e3, price_per_t=3e3, kv40=100.0, kv100=11.0, density15=950.0,
                     values={"flash": 180.0}, division_kg=0.5)
    heel = replace(POURED, contents=((additive, 0.02), (HEAVY, 0.98)))
    target = replace(TARGET, rules=(ShareRule("ADD", 0.01, 0.01),))
    assert (design([heel, *STOCKS, additive], target).charges_kg or {})["ADD"] == pytest.approx(162.0, abs=1e-3)
    assert (whole([heel, *STOCKS, additive], target).charges_kg or {})["ADD"] == pytest.approx(162.0)


def test_what_it_is_called_does_not_hide_what_is_in_it() -> None:
    """A heel is a base oil only as far as nobody knows better; a tank of rework is rework, whatever went into it."""
    parts = ((RETURNS, 0.25), (HEAVY, 0.5))
    heel = replace(POURED, contents=parts, api_group="I")
    assert (heel.part_of("rework"), heel.part_of("base"), heel.part_of("HEAVY")) == (0.25, 0.75, 0.5)
    assert (heel.part_of("group II"), heel.part_of("group I"), heel.part_of("HEEL")) == (0.5, 0.25, 1.0)
    assert POURED.part_of("base") == 1.0
    tank = replace(RETURNS, contents=((HEAVY, 1.0),))
    assert (tank.part_of("rework"), tank.part_of("HEAVY"), tank.part_of("LIGHT")) == (1.0, 1.0, 0.0)
    nested = replace(POURED, contents=((replace(HEAVY, code="B-0001", contents=parts), 0.4),))
    assert nested.part_of("rework") == pytest.approx(0.1)


EXCESS = Excess("heavy oil", "BRIGHT", "refutas", {40.0: (0.9,), 100.0: (0.6,)}, version="pair 1")
INDEX = Effective("BRIGHT", "refutas", {40.0: 36.0, 100.0: 26.0}, version="index 1")


@pytest.mark.parametrize("lesson", [EXCESS, INDEX])
def test_what_the_laboratory_taught_of_a_stock_holds_of_a_charge_of_it(lesson: Excess | Effective) -> None:
    heavy = replace(HEAVY, oil="heavy oil")
    poured = [replace(s, code=f"{s.code} (charge {n})", oil="", in_vessel_kg=kg, contents=((s, 1.0),))
              for n, (s, kg) in enumerate([(heavy, 6e3), (BRIGHT, 3e3)])]
    target = Target("t", (Limit("kv40", 100.0, 200.0),), lessons=(lesson,))
    mixed = evaluate([heavy, BRIGHT, LIGHT], {"HEAVY": 0.6, "BRIGHT": 0.3, "LIGHT": 0.1}, target)
    charged = evaluate([*poured, LIGHT], {poured[0].code: 0.6, poured[1].code: 0.3, "LIGHT": 0.1}, target)
    assert charged.predicted["kv40"] == pytest.approx(mixed.predicted["kv40"])
    assert charged.lessons == (lesson.version,)
    untaught = evaluate([heavy, BRIGHT, LIGHT], mixed.shares or {}, replace(target, lessons=()))
    assert abs((mixed.predicted["kv40"] or 0.0) / (untaught.predicted["kv40"] or 1.0) - 1.0) > 0.005
    measured = replace(poured[0], contents=((heavy, 0.6), (BRIGHT, 0.4)))  # a mixture that was measured is neither
    assert evaluate([measured, LIGHT], {measured.code: 0.9, "LIGHT": 0.1}, target).lessons == ()


def test_no_rule_on_numbers_counts_it_and_no_list_shuts_it_out() -> None:
    only = replace(TARGET, only_listed=True, max_stocks=2, min_share=0.1,
                   rules=(ShareRule("HEAVY"), ShareRule("LIGHT")))
    recipe = design([POURED, *STOCKS], only)
    assert recipe.status == "optimal"
    assert (recipe.shares or {}).keys() == {"HEEL", "HEAVY", "LIGHT"}
    assert recipe.breaches == ()
    assert evaluate([POURED, *STOCKS], recipe.shares or {}, only).breaches == ()


def test_it_is_in_no_steps_any_more() -> None:
    heel = replace(POURED, in_vessel_kg=903.7, division_kg=50.0, least_charge_kg=2e3)
    assert float(Charges.of(build([heel, *STOCKS], TARGET), 18e3).step[0]) == 0.0
    assert (whole([heel, *STOCKS], TARGET).charges_kg or {})["HEEL"] == pytest.approx(903.7)


# What cannot be

def test_what_must_be_known_of_it_is_asked_for() -> None:
    with pytest.raises(StockError, match="HEEL is in the vessel, and its KV40 and KV100 are unknown; type"):
        design([replace(POURED, kv100=None), *STOCKS], TARGET)
    with pytest.raises(StockError, match="HEEL is in the vessel, and its flash point is unknown and the"):
        design([replace(POURED, values={}), *STOCKS], TARGET)


def test_it_takes_part_in_one_batch_that_holds_it() -> None:
    with pytest.raises(TargetError, match="HEEL is in the vessel: it takes part in one batch; give its kg"):
        design([POURED, *STOCKS], replace(TARGET, batch_kg=None))
    with pytest.raises(TargetError, match="HEEL: 900 kg in the vessel are more than the batch of 800 kg"):
        design([POURED, *STOCKS], replace(TARGET, batch_kg=800.0))


# What it does to every property

def test_effect_is_the_blend_of_what_is_there() -> None:
    charges = [replace(HEAVY, in_vessel_kg=6e3), replace(LIGHT, in_vessel_kg=4e3)]
    assert effect(charges, law="wright-mass") == pytest.approx(
        evaluate([HEAVY, LIGHT], {"HEAVY": 0.6, "LIGHT": 0.4}, law="wright-mass").predicted)
    assert effect([]) == {}


@pytest.mark.parametrize(("part", "per_cent"), [(0.01, 1.8), (0.05, 9.5)])
def test_a_heel_of_vg_320_in_vg_32_moves_it_as_practice_has_it(part: float, per_cent: float) -> None:
    """Common practice (a plant's rule of thumb): 1 % left in moves KV40 +1.8 %, 5 % +9.5 %."""
    heel = Stock("HEEL", kv40=320.0, kv100=24.0, density15=895.0, in_vessel_kg=part * 1e4)
    oil = Stock("OIL", kv40=32.0, kv100=5.4, density15=870.0, in_vessel_kg=(1.0 - part) * 1e4)
    with_heel, without = with_and_without([heel, oil], ["HEEL"])
    assert with_heel["kv40"] is not None
    assert without["kv40"] == pytest.approx(32.0)
    assert 100.0 * (with_heel["kv40"] / 32.0 - 1.0) == pytest.approx(per_cent, abs=0.06)


def test_effect_asks_for_what_the_law_needs() -> None:
    for stock, law, cell in ((replace(POURED, kv100=None), "refutas", "kv100"),
                             (replace(POURED, density15=None), "wright-volume", "density15")):
        with pytest.raises(StockError, match=f"HEEL: the law {law} needs its {cell}, which is unknown") as error:
            effect([stock, replace(HEAVY, in_vessel_kg=1e3)], law=law)
        assert error.value.cell == cell
    assert effect([replace(POURED, values={}), replace(HEAVY, in_vessel_kg=1e3)])["flash"] is None
