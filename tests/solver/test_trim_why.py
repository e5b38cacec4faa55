"""Where nothing can be added that would do: the nearest, and what stands in the way alone."""

from __future__ import annotations

from dataclasses import replace

import pytest

from solver.stocks import Stock
from solver.target import Limit, ShareRule, Target
from solver.trim import additions
from tests.solver.test_trim import ADDITIVE, AT_LEAST_100, BATCH, BRIGHT, HEAVY, LIGHT, made, refutas

TREATED = replace(BATCH, contents=((ADDITIVE, 0.01), (HEAVY, 0.99)))
RATE = replace(AT_LEAST_100, rules=(ShareRule("ADD", 0.01, 0.01),))


@pytest.mark.parametrize(("additive", "reason"), [
    (replace(ADDITIVE, on_hand_kg=0.0), "nothing pumpable is left in the tank"),
    (replace(ADDITIVE, price_per_t=None), "its price is unknown")])
def test_an_additive_that_cannot_be_topped_up_is_named_with_its_reason(additive: Stock, reason: str) -> None:
    trim = additions([TREATED], [BRIGHT, additive], RATE)
    assert trim.status == "infeasible"
    assert trim.notes[0] == f"ADD is to be 1 %, and none of it can be added (ADD: {reason})"
    assert "without the rule on ADD 1,226 kg of BRIGHT would do" in trim.notes
    pardoned = additions([TREATED], [BRIGHT, additive], RATE, forgiven=["ADD"])
    assert made(pardoned) == {"BRIGHT": pytest.approx(1226.29, abs=0.01)}
    assert pardoned.broken == ("ADD is 0.942 % of it, and the product asks at least 1 %: the formulator has to agree",)


def test_a_cost_ceiling_that_stands_in_the_way_is_named() -> None:
    """By hand: with the batch at 1000 per t, 1226 kg of 1200 make 1011.6 of the whole."""
    paid = replace(BATCH, price_per_t=1000.0)
    trim = additions([paid], [BRIGHT], replace(AT_LEAST_100, max_cost_per_t=1005.0))
    assert trim.status == "infeasible"
    assert "without the cost ceiling 1,226 kg of BRIGHT would do" in trim.notes
    assert made(additions([paid], [BRIGHT], replace(AT_LEAST_100, max_cost_per_t=1012.0))).keys() == {"BRIGHT"}
    unknown = additions([BATCH], [BRIGHT], replace(AT_LEAST_100, max_cost_per_t=1005.0))  # nobody knows its cost
    assert made(unknown).keys() == {"BRIGHT"}
    assert unknown.recipe is not None
    assert unknown.recipe.cost_per_t is None


def test_room_and_total_are_named() -> None:
    small = additions([BATCH], [BRIGHT], AT_LEAST_100, room_kg=500.0, may_draw=False)
    assert "without the room of 500 kg 1,226 kg of BRIGHT would do" in small.notes
    full = additions([BATCH], [BRIGHT], AT_LEAST_100, fill=(24e3, 60.0), may_draw=False)
    assert "without the room of 24,000 L at 60 °C 1,226 kg of BRIGHT would do" in full.notes
    short = additions([BATCH], [BRIGHT], AT_LEAST_100, total_kg=19e3, may_draw=False)
    assert short.notes[0] == "20,000 kg are in the vessel, more than the total of 19,000 kg"
    assert "without the total of 19,000 kg 1,226 kg of BRIGHT would do" in short.notes


def test_whole_drums_that_stand_in_the_way_are_named() -> None:
    """One drum of 180 kg is too little and two are too much for a narrow window."""
    narrow = Target("narrow", (Limit("kv40", 93.6, 93.8),))
    trim = additions([BATCH], [replace(BRIGHT, package_kg=180.0)], narrow, may_draw=False)
    assert trim.status == "infeasible"
    by_hand = 20e3 * (refutas(93.6) - refutas(92.0)) / (refutas(490.0) - refutas(93.6))
    assert trim.notes[-1] == (f"in any quantities {by_hand:.0f} kg of BRIGHT would do: whole steps, drums and least "
                              "charges stand in the way")
    drawn = additions([BATCH], [replace(BRIGHT, package_kg=180.0)], narrow)
    assert made(drawn) == {"BRIGHT": 180.0}
    assert drawn.drawn_kg > 0.0


def test_two_limits_that_contradict_are_each_named() -> None:
    trim = additions([BATCH], [BRIGHT], Target("x", (Limit("kv40", 100.0, 110.0), Limit("kv100", 15.0, 16.0))))
    assert "without KV at 40 °C of at most 110 mm²/s 10,114 kg of BRIGHT would do" in trim.notes
    assert "without KV at 100 °C of at least 15 mm²/s 1,226 kg of BRIGHT would do" in trim.notes
    assert trim.recipe is not None
    assert trim.recipe.status == "infeasible"
    assert [x.met for x in trim.recipe.limits] == [False, False]


def test_to_draw_off_more_than_a_quarter_is_absurd() -> None:
    """By hand: 500 kg of bright stock are right for 500/1226.29 of the batch."""
    trim = additions([BATCH], [replace(BRIGHT, on_hand_kg=500.0)], AT_LEAST_100)
    assert trim.drawn_kg == pytest.approx(20e3 * (1.0 - 500.0 / 1226.29), abs=1.0)
    assert trim.absurd
    assert "to draw off more than a quarter is absurd (common practice): rework it, or get room or oil first" in (
        trim.notes[0])
    most = additions([BATCH], [replace(BRIGHT, on_hand_kg=100.0)], AT_LEAST_100)  # more than 90 % would have to go
    assert most.status == "infeasible"


def test_the_nearest_is_no_worse_than_what_is_there() -> None:
    trim = additions([BATCH], [LIGHT], AT_LEAST_100, room_kg=5e3)
    assert trim.recipe is not None
    assert (trim.recipe.charges_kg or {}).keys() == {"BATCH"}
    assert trim.recipe.predicted["kv40"] == pytest.approx(92.0)


def test_without_time_nothing_is_claimed() -> None:
    stocks = [replace(s, division_kg=1.0) for s in (BRIGHT, HEAVY, LIGHT)]
    trim = additions([BATCH], stocks, Target("x", (Limit("kv40", 100.0, 110.0), Limit("vi", 140.0))), time_limit=0.0)
    assert trim.status == "stopped"
    assert trim.additions_kg is None
    assert trim.notes == ("time ran out before additions were found; give it more time, or allow fewer stocks",)
