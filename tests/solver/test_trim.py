"""Trims: against closed forms and arithmetic by hand, and what is said of them."""

from __future__ import annotations

from dataclasses import replace
from math import log

import numpy as np
import pytest

from solver.errors import StockError, TargetError
from solver.recipe import design
from solver.stocks import Stock
from solver.target import Excess, Limit, ShareRule, Target
from solver.trim import ABSURD, Trim, additions, effect
from tests.solver.trim_cases import line, read, w_of

BRIGHT = Stock("BRIGHT", on_hand_kg=5e4, price_per_t=1200.0, density15=897.0, kv40=490.0, kv100=32.0,
               values={"flash": 300.0})
HEAVY = Stock("HEAVY", on_hand_kg=5e5, price_per_t=900.0, density15=873.0, kv40=110.0, kv100=12.0,
              values={"flash": 265.0})
LIGHT = Stock("LIGHT", on_hand_kg=5e5, price_per_t=800.0, density15=868.0, kv40=30.6, kv100=5.23,
              values={"flash": 215.0})
ADDITIVE = Stock("ADD", kind="additive", on_hand_kg=5e3, price_per_t=3000.0, density15=950.0, kv40=100.0, kv100=11.0,
                 values={"flash": 180.0})
RETURNS = Stock("RETURNS", kind="rework", on_hand_kg=9e3, price_per_t=300.0, density15=875.0, kv40=80.0, kv100=9.0)
BATCH = Stock("BATCH", in_vessel_kg=20e3, kv40=92.0, kv100=10.8, density15=880.0, source="own", values={"flash": 255.0})
AT_LEAST_100 = Target("VG 100 oil", (Limit("kv40", 100.0, 110.0),))


def refutas(kv: float) -> float:
    """R: Maples 2000."""
    return 14.534 * log(log(kv + 0.8)) + 10.975


def made(trim: Trim) -> dict[str, float]:
    """The additions, which there must be."""
    assert trim.additions_kg is not None
    return dict(trim.additions_kg)


def said(trim: Trim) -> str:
    return "\n".join(trim.notes)


# Closed forms

def test_the_batch_of_92_wanting_100_takes_the_bright_stock_of_the_closed_form() -> None:
    """m = M (A_t − A_m)/(A_a − A_t): 1.2263 t by Refutas. Computed from the formula named."""
    trim = additions([BATCH], [BRIGHT], AT_LEAST_100)
    by_hand = 20e3 * (refutas(100.0) - refutas(92.0)) / (refutas(490.0) - refutas(100.0))
    assert made(trim) == {"BRIGHT": pytest.approx(by_hand, rel=1e-6)}
    assert round(by_hand / 1000.0, 4) == 1.2263
    assert trim.status == "optimal"
    assert trim.total_kg == pytest.approx(20e3 + by_hand)
    assert trim.cost == pytest.approx(1.2 * by_hand, rel=1e-6)
    assert not trim.absurd
    assert trim.recipe is not None
    assert trim.recipe.meets_all


@pytest.mark.parametrize(("law", "by_volume"), [("walther-mass", False), ("walther-volume", True)])
def test_by_walthers_index_the_same_closed_form_holds(law: str, by_volume: bool) -> None:
    trim = additions([BATCH], [BRIGHT], replace(AT_LEAST_100, law=law))
    ratio = (897.0 / 880.0) if by_volume else 1.0
    by_hand = ratio * 20e3 * (w_of(100.0) - w_of(92.0)) / (w_of(490.0) - w_of(100.0))
    assert made(trim) == {"BRIGHT": pytest.approx(by_hand, rel=1e-6)}


def test_by_wrights_law_the_temperatures_at_which_both_have_the_viscosity_mix() -> None:
    trim = additions([BATCH], [BRIGHT], replace(AT_LEAST_100, law="wright-mass"))
    at = {s.code: (line(s)[0] - w_of(100.0)) / line(s)[1] for s in (BATCH, BRIGHT)}  # log T where it has 100 mm²/s
    goal = np.log10(40.0 + 273.15)
    by_hand = 20e3 * (goal - at["BATCH"]) / (at["BRIGHT"] - goal)
    assert made(trim) == {"BRIGHT": pytest.approx(by_hand, rel=1e-6)}


def test_a_limit_at_another_temperature_is_read_off_the_batchs_own_line() -> None:
    trim = additions([BATCH], [BRIGHT], Target("pumped", (Limit("kv60", 40.0, 60.0),), law="walther-mass"))
    at_60 = {s.code: line(s)[0] - line(s)[1] * np.log10(60.0 + 273.15) for s in (BATCH, BRIGHT)}
    by_hand = 20e3 * (w_of(40.0) - at_60["BATCH"]) / (at_60["BRIGHT"] - w_of(40.0))
    assert made(trim) == {"BRIGHT": pytest.approx(by_hand, rel=1e-6)}


def test_a_batch_that_is_too_thick_takes_light_oil() -> None:
    trim = additions([BATCH], [LIGHT, BRIGHT], Target("thin", (Limit("kv40", 60.0, 80.0),)))
    by_hand = 20e3 * (refutas(92.0) - refutas(80.0)) / (refutas(80.0) - refutas(30.6))
    assert made(trim) == {"LIGHT": pytest.approx(by_hand, rel=1e-6)}


def test_600n_needs_17_8_t_and_is_called_absurd() -> None:
    """practice.md's own case (common practice): 20 t at 92 wanting 100 by an oil of 110 mm²/s."""
    trim = additions([BATCH], [HEAVY], AT_LEAST_100)
    assert round(made(trim)["HEAVY"] / 1000.0, 1) == 17.8
    assert trim.absurd
    assert "17,823 kg of HEAVY onto 20,000 kg is absurd: more than a quarter of what is there (common practice); of " \
           "the oils allowed none needs less" in said(trim)


def test_where_another_oil_needs_far_less_the_absurd_trim_names_it() -> None:
    trim = additions([BATCH], [replace(HEAVY, price_per_t=50.0), BRIGHT], AT_LEAST_100)
    assert made(trim).keys() == {"HEAVY"}
    assert trim.least_mass_kg == pytest.approx(1226.29, abs=0.01)
    assert trim.least_mass.keys() == {"BRIGHT"}
    assert "more than a quarter of what is there (common practice); 1,226 kg of BRIGHT would do" in said(trim)
    lean = additions([BATCH], [replace(HEAVY, price_per_t=50.0), BRIGHT], AT_LEAST_100, aim="mass")
    assert made(lean).keys() == {"BRIGHT"}
    assert not lean.absurd


def test_a_quarter_is_the_edge_of_absurd() -> None:
    for part, absurd in ((0.99, False), (1.01, True)):
        mass = part * ABSURD * 20e3
        index = (20e3 * refutas(92.0) + mass * refutas(490.0)) / (20e3 + mass)
        wanted = float(np.exp(np.exp((index - 10.975) / 14.534)) - 0.8)
        trim = additions([BATCH], [BRIGHT], Target("edge", (Limit("kv40", wanted, 2.0 * wanted),)))
        assert made(trim)["BRIGHT"] == pytest.approx(mass, rel=1e-6)
        assert trim.absurd is absurd


def test_additives_are_topped_up_to_their_treat_rate() -> None:
    """By hand: a = r (M + m + a) − r M = m r/(1 − r), and the index of the three is that of 100 mm²/s."""
    batch = replace(BATCH, contents=((ADDITIVE, 0.01), (HEAVY, 0.99)))
    trim = additions([batch], [BRIGHT, ADDITIVE], replace(AT_LEAST_100, rules=(ShareRule("ADD", 0.01, 0.01),)))
    goal, rate = refutas(100.0), 0.01 / 0.99
    bright = 20e3 * (goal - refutas(92.0)) / (refutas(490.0) - goal + rate * (refutas(100.0) - goal))
    assert made(trim) == {"BRIGHT": pytest.approx(bright, rel=1e-6), "ADD": pytest.approx(rate * bright, rel=1e-5)}
    assert "keeps ADD at its 1 %" in said(trim)


def test_an_additive_that_was_forgotten_is_the_trim() -> None:
    """By hand: a = r M/(1 − r) of a batch without any, its viscosity inside."""
    batch = replace(BATCH, kv40=100.0, kv100=11.2, contents=((HEAVY, 1.0),))
    target = Target("VG 100 oil", (Limit("kv40", 90.0, 110.0),), (ShareRule("ADD", 0.01, 0.01),))
    trim = additions([batch], [BRIGHT, HEAVY, ADDITIVE], target)
    assert made(trim) == {"ADD": pytest.approx(0.01 * 20e3 / 0.99, rel=1e-6)}


def test_nobody_is_asked_to_add_a_morsel_of_oil() -> None:
    """Common practice: an oil in bulk is added by the kilogram or not at all."""
    trim = additions([replace(BATCH, kv40=99.999)], [BRIGHT], AT_LEAST_100)
    assert made(trim) == {"BRIGHT": 1.0}
    fine = additions([replace(BATCH, kv40=99.999)], [BRIGHT], AT_LEAST_100, whole=False)
    by_hand = 20e3 * (refutas(100.0) - refutas(99.999)) / (refutas(490.0) - refutas(100.0))
    assert made(fine) == {"BRIGHT": pytest.approx(by_hand, rel=2e-3)}
    assert by_hand < 0.2


# Room, and drawing off

def test_what_must_be_drawn_off_is_the_closed_form() -> None:
    """T = M + room is full; the addition's part of it is f = (A_t − A_m)/(A_a − A_m), so M − (1 − f) T is drawn."""
    trim = additions([BATCH], [BRIGHT], AT_LEAST_100, room_kg=500.0, whole=False)
    part = (refutas(100.0) - refutas(92.0)) / (refutas(490.0) - refutas(92.0))
    assert trim.drawn_kg == pytest.approx(20e3 - (1.0 - part) * 20.5e3, abs=0.05)
    assert made(trim)["BRIGHT"] == pytest.approx(part * 20.5e3, abs=0.05)
    assert trim.total_kg is not None
    assert trim.total_kg <= 20.5e3 * (1.0 + 1e-9)
    assert additions([BATCH], [BRIGHT], AT_LEAST_100, room_kg=500.0).drawn_kg == np.ceil(trim.drawn_kg)
    assert said(trim).startswith("draw off 68")


def test_room_in_litres_is_that_of_the_whole_at_its_temperature() -> None:
    """Volume of lubricating oils at 60 °C (M: 1980 table 54D) of both; 25 m³ suffice, 24.5 do not."""
    def litres(kg: float, density: float) -> float:
        alpha = 0.6278 / density
        return 1000.0 * kg / density / float(np.exp(-alpha * 45.0 * (1.0 + 0.8 * alpha * 45.0)))

    trim = additions([BATCH], [BRIGHT], AT_LEAST_100, fill=(25e3, 60.0))
    full = litres(20e3, 880.0) + litres(made(trim)["BRIGHT"], 897.0)
    assert trim.litres == pytest.approx(full)
    assert trim.drawn_kg == 0.0
    assert f"{full:,.0f} L at 60 °C of the 25,000 L that may be in it" in said(trim)
    small = additions([BATCH], [BRIGHT], AT_LEAST_100, fill=(24.5e3, 60.0), whole=False)
    part = (refutas(100.0) - refutas(92.0)) / (refutas(490.0) - refutas(92.0))
    total = 24.5e3 / (litres(1.0 - part, 880.0) + litres(part, 897.0))
    assert small.drawn_kg == pytest.approx(20e3 - (1.0 - part) * total, abs=0.1)
    assert small.recipe is not None
    assert any(x.property == "vol60" and x.binding == "high" and x.met for x in small.recipe.limits)


def test_contents_of_several_charges_are_drawn_off_alike() -> None:
    charges = [replace(HEAVY, code="C1", in_vessel_kg=8e3), replace(LIGHT, code="C2", in_vessel_kg=2e3)]
    trim = additions(charges, [BRIGHT], Target("t", (Limit("kv40", 120.0, 130.0),)), room_kg=1000.0)
    assert trim.drawn_kg > 0.0
    assert trim.recipe is not None
    assert trim.recipe.charges_kg is not None
    masses = trim.recipe.charges_kg
    assert masses["C1"] / masses["C2"] == pytest.approx(4.0)
    assert masses["C1"] + masses["C2"] == pytest.approx(10e3 - trim.drawn_kg)
    more = trim.drawn_kg - 2.0
    less = [replace(s, in_vessel_kg=(s.in_vessel_kg or 0.0) * (1.0 - more / 10e3)) for s in charges]
    assert additions(less, [BRIGHT], Target("t", (Limit("kv40", 120.0, 130.0),)), room_kg=1000.0 + more,
                     may_draw=False).status == "infeasible"


def test_a_vessel_that_is_too_full_is_drawn_off_though_nothing_need_be_added() -> None:
    trim = additions([replace(BATCH, kv40=105.0)], [BRIGHT], AT_LEAST_100, fill=(20e3, 60.0))
    assert made(trim) == {}
    assert trim.litres is not None
    assert 19.99e3 < trim.litres <= 20e3 * (1.0 + 1e-9)
    assert trim.drawn_kg > 2e3


def test_with_no_leave_to_draw_off_there_is_none() -> None:
    trim = additions([BATCH], [BRIGHT], AT_LEAST_100, room_kg=500.0, may_draw=False)
    assert trim.status == "infeasible"
    assert trim.additions_kg is None
    assert trim.recipe is not None
    assert trim.recipe.limits[0].met is False


# Share rules that the contents break

def reworked(share: float) -> Stock:
    return replace(BATCH, contents=((RETURNS, share), (HEAVY, 1.0 - share)))


def capped(most: float) -> Target:
    return replace(AT_LEAST_100, rules=(ShareRule("rework", 0.0, most),))


def test_rework_over_its_cap_is_diluted_and_what_that_costs_is_said() -> None:
    """By hand: 3 % of 20 t under a cap of 2 % asks 30 t."""
    trim = additions([reworked(0.03)], [BRIGHT, HEAVY, RETURNS], capped(0.02))
    assert trim.total_kg == pytest.approx(30e3, rel=1e-6)
    assert trim.absurd
    assert trim.broken == ()
    assert "rework: what is in the vessel is over the product's rule; with that let be 1,226 kg of BRIGHT would do, " \
           "and the formulator decides" in said(trim)


def test_rework_that_the_product_never_takes_is_told_and_the_rest_put_right() -> None:
    trim = additions([reworked(0.03)], [BRIGHT, RETURNS], capped(0.0))
    assert made(trim) == {"BRIGHT": pytest.approx(1226.29, abs=0.01)}
    assert trim.broken == ("rework is 2.83 % of it, and the product asks at most 0 %: the formulator has to agree",)


def test_a_rule_that_the_formulator_forgives_is_held_no_tighter_than_the_contents() -> None:
    trim = additions([reworked(0.03)], [replace(RETURNS, kv40=490.0, kv100=32.0), BRIGHT], capped(0.02),
                     forgiven=["rework"])
    masses = made(trim)
    inside = 600.0 + masses["RETURNS"]
    assert inside / (20e3 + sum(masses.values())) == pytest.approx(0.03)
    assert len(trim.broken) == 1


def test_nobody_dilutes_a_batch_for_a_hundredth_of_a_rule() -> None:
    assert made(additions([replace(reworked(0.0202), kv40=104.0)], [HEAVY], capped(0.02))) == {}
    assert made(additions([replace(reworked(0.0206), kv40=104.0)], [HEAVY], capped(0.02))) != {}


def test_the_most_stocks_counts_what_is_in_the_vessel_and_binds_no_trim() -> None:
    batch = replace(BATCH, contents=((HEAVY, 0.9), (LIGHT, 0.1)))
    trim = additions([batch], [BRIGHT, HEAVY, LIGHT], replace(AT_LEAST_100, max_stocks=2))
    assert made(trim).keys() == {"BRIGHT"}
    assert trim.broken == ("it is then made of 3 base stocks and rework, and the product allows 2: the formulator has "
                           "to agree",)
    still = additions([batch], [BRIGHT, HEAVY, LIGHT], replace(AT_LEAST_100, max_stocks=2), total_kg=60e3)
    assert made(still).keys() == {"HEAVY", "LIGHT"}
    assert still.broken == ()
    cheap = replace(BRIGHT, price_per_t=805.0)
    assert "BRIGHT" in made(additions([batch], [cheap, HEAVY, LIGHT], AT_LEAST_100, total_kg=60e3))
    kept = additions([batch], [cheap, HEAVY, LIGHT], replace(AT_LEAST_100, max_stocks=2), total_kg=60e3)
    assert "BRIGHT" not in made(kept)


# The charges still to come

def test_the_charges_still_to_come_are_those_of_the_recipe_with_the_same_held() -> None:
    table = [BRIGHT, HEAVY, LIGHT]
    target = Target("to come", (Limit("kv40", 61.0, 75.0), Limit("vi", 97.0)), batch_kg=18e3)
    recipe = design(table, replace(target, held={"HEAVY": 0.3}))
    assert recipe.cost_per_t is not None
    poured = replace(HEAVY, code="HEAVY (charge 1)", in_vessel_kg=0.3 * 18e3, contents=((HEAVY, 1.0),))
    trim = additions([poured], [BRIGHT, LIGHT], target, total_kg=18e3)
    assert trim.status == "optimal"
    assert trim.total_kg == pytest.approx(18e3)
    assert trim.cost is not None
    assert trim.cost / 18.0 + 0.3 * 900.0 == pytest.approx(recipe.cost_per_t, rel=3e-6)
    assert not trim.absurd


def test_a_total_in_whole_steps_lies_within_half_of_one() -> None:
    poured = replace(HEAVY, code="C1", in_vessel_kg=5003.7)
    stocks = [replace(BRIGHT, division_kg=10.0), replace(LIGHT, division_kg=10.0)]
    trim = additions([poured], stocks, Target("t", (Limit("kv40", 61.0, 75.0),)), total_kg=18e3)
    assert all(kg % 10.0 == pytest.approx(0.0) for kg in made(trim).values())
    assert trim.total_kg == pytest.approx(18e3, abs=5.0)


def test_a_charge_too_many_makes_a_larger_batch_or_is_drawn_off() -> None:
    """By hand: 220 kg of additive at 1 % is right for 22 t; and at 20 t, 20/22 of it may stay."""
    poured = replace(ADDITIVE, code="C1", in_vessel_kg=220.0, contents=((ADDITIVE, 1.0),))
    target = Target("t", (Limit("kv40", 90.0, 110.0),), (ShareRule("ADD", 0.01, 0.01),))
    grown = additions([poured], [HEAVY, ADDITIVE], target, total_kg=20e3, room_kg=25e3, may_grow=True)
    assert grown.total_kg == pytest.approx(22e3, rel=1e-6)
    assert "a total of 20,000 kg cannot be kept: with 22,000 kg every limit holds" in grown.notes
    drawn = additions([poured], [HEAVY, ADDITIVE], target, total_kg=20e3, room_kg=25e3)
    assert drawn.total_kg == pytest.approx(20e3, rel=1e-6)
    assert drawn.drawn_kg == pytest.approx(20.0, abs=1.0)


def test_a_charge_slightly_too_large_changes_nothing_else() -> None:
    """202 kg of additive in 20 t are 1 % more than its treat rate asks: within what is let be, the total is kept."""
    poured = replace(ADDITIVE, code="C1", in_vessel_kg=202.0, contents=((ADDITIVE, 1.0),))
    target = Target("t", (Limit("kv40", 90.0, 110.0),), (ShareRule("ADD", 0.01, 0.01),))
    trim = additions([poured], [HEAVY, ADDITIVE], target, total_kg=20e3)
    assert made(trim) == {"HEAVY": pytest.approx(20e3 - 202.0)}
    assert (trim.drawn_kg, trim.broken) == (0.0, ())


def test_at_least_so_much_in_the_end() -> None:
    trim = additions([replace(BATCH, kv40=105.0)], [HEAVY, BRIGHT], AT_LEAST_100, least_kg=22e3)
    assert made(trim) == {"HEAVY": pytest.approx(2e3)}


# Nothing to add, nothing that would do, bad input

def test_a_batch_that_is_inside_takes_nothing() -> None:
    trim = additions([replace(BATCH, kv40=105.0)], [BRIGHT], AT_LEAST_100)
    assert trim.status == "optimal"
    assert made(trim) == {}
    assert trim.cost == 0.0
    assert trim.notes[0] == "what is in the vessel meets every limit as it is; nothing need be added"


def test_where_nothing_would_do_the_nearest_is_told() -> None:
    trim = additions([BATCH], [LIGHT], AT_LEAST_100)
    assert trim.status == "infeasible"
    assert trim.additions_kg is None
    assert trim.notes == (
        "no additions of the oils allowed bring every limit inside; with the vessel at 20,000 kg: no blend meets every "
        "limit; the nearest misses: KV at 40 °C 92 is 8 below the 100 that is held",
        "without KV at 40 °C of at least 100 mm²/s what is in it already would do")


def test_vi_and_flash_are_told_before_and_after() -> None:
    trim = additions([BATCH], [BRIGHT], AT_LEAST_100)
    at = read([(BATCH, 20e3), (BRIGHT, made(trim)["BRIGHT"])], "refutas")
    assert trim.before["vi"] == pytest.approx(effect([BATCH])["vi"])
    assert f"viscosity index 101 → {at['vi']:.0f}" in trim.notes
    assert f"flash point 255 → {at['flash']:.0f} °C, a screening figure" in trim.notes


@pytest.mark.parametrize(("batch", "words", "cell"), [
    (replace(BATCH, kv100=None), "BATCH: its KV100 is unknown; measure it on one sample with KV40", "kv100"),
    (replace(BATCH, kv40=None), "BATCH: its KV40 is unknown; measure it on one sample with KV100", "kv40"),
    (replace(BATCH, kv40=None, kv100=None), "BATCH: its KV40 and KV100 are unknown; measure them on one", "kv40"),
    (replace(BATCH, density15=None), "BATCH: its density is unknown, and the room in the vessel is one of litres",
     "density15"),
    (replace(BATCH, in_vessel_kg=None), "BATCH: how much of it is in the vessel is unknown", "in_vessel_kg"),
    (replace(BATCH, in_vessel_kg=-3.0), "BATCH: how much of it is in the vessel is unknown", "in_vessel_kg")])
def test_what_must_be_known_of_a_batch_is_asked_for(batch: Stock, words: str, cell: str) -> None:
    with pytest.raises(StockError) as error:
        additions([batch], [BRIGHT], AT_LEAST_100, fill=(3e4, 60.0))
    assert str(error.value).startswith(words)
    assert (error.value.stock, error.value.cell) == ("BATCH", cell)


@pytest.mark.parametrize("asked", [{"room_kg": -1.0}, {"room_kg": float("nan")}, {"total_kg": 0.0}, {"least_kg": -5.0},
                                   {"fill": (0.0, 60.0)}, {"fill": (1e4, 300.0)}, {"aim": "speed"}, {"chance": 0.4}])
def test_what_cannot_be_is_refused(asked: dict[str, object]) -> None:
    with pytest.raises(TargetError):
        additions([BATCH], [BRIGHT], AT_LEAST_100, **asked)  # type: ignore[arg-type]


def test_an_oil_of_unknown_density_is_left_out_where_litres_count() -> None:
    trim = additions([BATCH], [replace(BRIGHT, density15=None), HEAVY], AT_LEAST_100, fill=(6e4, 60.0))
    assert made(trim).keys() == {"HEAVY"}
    assert trim.recipe is not None
    assert [(x.stock, x.cell) for x in trim.recipe.left_out] == [("BRIGHT", "density15")]


def test_with_what_the_laboratory_taught_it_is_still_inside() -> None:
    """An excess between the batch's own oil as charged and the bright stock bends the rows; the end is recomputed."""
    taught = Excess("HEAVY", "BRIGHT", "refutas", {40.0: (1.2,), 100.0: (0.8,)}, version="pair 1")
    poured = [replace(HEAVY, code="C1", in_vessel_kg=14e3, contents=((HEAVY, 1.0),)),
              replace(LIGHT, code="C2", in_vessel_kg=6e3, contents=((LIGHT, 1.0),))]
    goal = Target("t", (Limit("kv40", 100.0, 110.0),), lessons=(taught,))
    trim, plain = (additions(poured, [BRIGHT], replace(goal, lessons=lessons)) for lessons in ((taught,), ()))
    assert trim.status == "stopped"
    assert made(trim)["BRIGHT"] < 0.97 * made(plain)["BRIGHT"]
    masses = {"C1": 14e3, "C2": 6e3, **made(trim)}
    total = sum(masses.values())
    part = {code: kg / total for code, kg in masses.items()}
    index = sum(part[s.code] * refutas(s.kv40 or 0.0) for s in (*poured, BRIGHT)) + 1.2 * part["C1"] * part["BRIGHT"]
    assert index == pytest.approx(refutas(100.0), abs=1e-5)
    assert "with what the laboratory has taught the limits bend: found step by step, not proven" in trim.notes


def test_with_nothing_in_the_vessel_yet_it_is_the_recipe() -> None:
    target = Target("new", (Limit("kv40", 61.0, 75.0), Limit("vi", 97.0)), batch_kg=18e3)
    trim, recipe = additions([], [BRIGHT, HEAVY, LIGHT], target, total_kg=18e3), design([BRIGHT, HEAVY, LIGHT], target)
    assert trim.cost is not None
    assert trim.cost / 18.0 == pytest.approx(recipe.cost_per_t, rel=3e-6)
    assert (trim.before, trim.absurd) == ({}, False)
    with pytest.raises(TargetError, match="nothing is in the vessel; design a recipe, or give the total that is asked"):
        additions([], [BRIGHT], AT_LEAST_100)
