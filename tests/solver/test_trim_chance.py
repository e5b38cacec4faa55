"""Trims at a chosen chance: against errors drawn here, and against the distance that a normal error asks."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import norm

from solver.stocks import Stock
from solver.target import Limit, Target
from solver.trim import Trim, additions
from tests.solver.test_trim import BATCH, BRIGHT, HEAVY, LIGHT, made

TESTED = replace(BRIGHT, source="own")
WIDE = Target("VG 100 oil", (Limit("kv40", 100.0, 115.0),))
NO_LAW = {"kv40": 0.0, "kv100": 0.0}
DRAWS = 200_000


def drawn_chance(trim: Trim, batch: Stock, added: Stock, low: float, seed: int = 5) -> float:
    """The part of drawn next results of KV40 above a limit, by Refutas written out.

    R of KV40 is 1.22 % (M: ASTM D445, formulated oils), one σ = R/2.77; each charge is weighed to 0.5 % (common
    practice: 0.3–0.8 %).
    """
    rng = np.random.default_rng(seed)
    sigma = batch.sigmas.get("kv40", 0.0122 / 2.77 * (batch.kv40 or 0.0))
    own = [(batch, sigma, (batch.in_vessel_kg or 0.0) - trim.drawn_kg),
           (added, 0.0122 / 2.77 * (added.kv40 or 0.0), made(trim)[added.code])]
    total, index = np.zeros(DRAWS), np.zeros(DRAWS)
    for stock, each, kg in own:
        kv = (stock.kv40 or 0.0) + each * rng.standard_normal(DRAWS)
        mass = kg * (1.0 + 0.005 * rng.standard_normal(DRAWS))
        total, index = total + mass, index + mass * (14.534 * np.log(np.log(kv + 0.8)) + 10.975)
    true = np.exp(np.exp((index / total - 10.975) / 14.534)) - 0.8
    result = true * (1.0 + 0.0122 / 2.77 * rng.standard_normal(DRAWS))
    return float((result >= low).mean())


@pytest.mark.parametrize("chance", [0.6, 0.9, 0.99])
def test_so_many_of_drawn_results_lie_inside(chance: float) -> None:
    trim = additions([BATCH], [TESTED], WIDE, chance=chance, law_sigma=NO_LAW)
    assert trim.reached
    assert trim.status == "stopped"  # found, not proven
    assert chance <= trim.chances["kv40"] <= chance + 1e-3
    assert drawn_chance(trim, BATCH, TESTED, 100.0) == pytest.approx(chance, abs=4e-3)


def test_the_laboratorys_own_sigma_of_the_batch_counts() -> None:
    sure = replace(BATCH, sigmas={"kv40": 0.05})
    known, usual = (additions([s], [TESTED], WIDE, chance=0.95, law_sigma=NO_LAW) for s in (sure, BATCH))
    assert made(known)["BRIGHT"] < 0.98 * made(usual)["BRIGHT"]
    assert drawn_chance(known, sure, TESTED, 100.0) == pytest.approx(0.95, abs=4e-3)


def test_half_a_chance_is_the_limit_itself_and_more_takes_more() -> None:
    plain = made(additions([BATCH], [TESTED], WIDE))["BRIGHT"]
    masses = [made(additions([BATCH], [TESTED], WIDE, chance=chance, law_sigma=NO_LAW))["BRIGHT"]
              for chance in (0.5, 0.8, 0.9, 0.95, 0.99)]
    assert masses[0] == pytest.approx(plain, rel=0.02)
    assert masses == sorted(masses)
    above = made(additions([BATCH], [TESTED], WIDE, chance=0.95))["BRIGHT"]
    assert above > masses[3]  # with the laws' spread besides


def test_a_fitted_law_counts_for_what_is_added_only() -> None:
    """4 a (1 − a) of it: by hand the σ of the whole is that of the other parts and this one, added as squares."""
    free = additions([BATCH], [TESTED], WIDE, chance=0.95, law_sigma=NO_LAW)
    with_law = additions([BATCH], [TESTED], WIDE, chance=0.95, law_sigma={"kv40": 0.02, "kv100": 0.02})
    added = made(with_law)["BRIGHT"] / (with_law.total_kg or 1.0)
    inward = {name: float(trim.recipe.predicted["kv40"] or 0.0) - 100.0 if trim.recipe else 0.0
              for name, trim in (("free", free), ("law", with_law))}
    quantile = float(norm.ppf(0.95))
    law = 4.0 * added * (1.0 - added) * 0.02 * (100.0 + inward["law"])
    by_hand = np.hypot(inward["free"], quantile * law)
    assert inward["law"] == pytest.approx(by_hand, rel=0.01)
    charges = [replace(HEAVY, code="C1", in_vessel_kg=15e3), replace(LIGHT, code="C2", in_vessel_kg=2.6e3)]
    of_charges = additions(charges, [TESTED], WIDE, chance=0.95, law_sigma={"kv40": 0.02, "kv100": 0.02})
    sigma = float(of_charges.recipe.predicted["kv40"] or 0.0) * 0.02 if of_charges.recipe else 0.0
    assert of_charges.recipe is not None
    assert float(of_charges.recipe.predicted["kv40"] or 0.0) - 100.0 > quantile * sigma  # nobody measured those


def test_guards_give_way_to_the_chance() -> None:
    guarded = Target("guarded", (Limit("kv40", 100.0, 115.0, guard=6.0),))
    assert made(additions([BATCH], [TESTED], guarded, chance=0.9)) == pytest.approx(
        made(additions([BATCH], [TESTED], WIDE, chance=0.9)))
    assert made(additions([BATCH], [TESTED], guarded))["BRIGHT"] > 2000.0


def test_a_chance_that_no_window_allows_is_told_with_the_highest_found() -> None:
    """A window of ±1 mm²/s and σ about 0.6: by the normal law no more than about 90 % lie within."""
    narrow = Target("narrow", (Limit("kv40", 100.0, 102.0),))
    trim = additions([BATCH], [TESTED], narrow, chance=0.99, law_sigma=NO_LAW)
    assert trim.reached is False
    assert trim.status == "stopped"
    assert "no additions were found with a chance of 99 % of each limit; the highest found is " in trim.notes[0]
    assert trim.recipe is not None
    assert trim.recipe.meets_all
    assert [(x.held_low, x.held_high) for x in trim.recipe.limits] == [(100.0, 102.0)]
    grid = [chance for chance in np.arange(0.5, 0.99, 0.01)
            if additions([BATCH], [TESTED], narrow, chance=float(chance), law_sigma=NO_LAW).reached]
    assert trim.chances["kv40"] >= max(grid) - 2e-3
    assert trim.chances["kv40"] < max(grid) + 0.02


def test_a_batch_that_is_sure_enough_takes_nothing() -> None:
    trim = additions([replace(BATCH, kv40=107.0)], [TESTED], WIDE, chance=0.99, law_sigma=NO_LAW)
    assert made(trim) == {}
    assert trim.reached
    assert trim.status == "optimal"
    assert (trim.together or 0.0) >= 0.99


def test_vi_kv40_and_kv100_each_have_the_chance_in_whole_steps() -> None:
    target = Target("three", (Limit("kv40", 100.0, 112.0), Limit("kv100", 11.0, 12.2), Limit("vi", 96.5)))
    trim = additions([BATCH], [replace(TESTED, division_kg=10.0), replace(HEAVY, package_kg=180.0)], target, chance=0.9)
    assert trim.reached
    assert min(trim.chances.values()) >= 0.9
    assert trim.chances.keys() == {"kv40", "kv100", "vi"}
    assert all(kg % 10.0 == pytest.approx(0.0) for kg in made(trim).values())
    assert trim.notes[0].startswith("each limit is met with a chance of at least 90 %; all at once with ")


def test_oil_is_drawn_off_for_a_chance_too() -> None:
    trim = additions([BATCH], [TESTED], WIDE, room_kg=1000.0, chance=0.95, law_sigma=NO_LAW)
    assert trim.reached
    assert trim.drawn_kg > additions([BATCH], [TESTED], WIDE, room_kg=1000.0).drawn_kg
    assert trim.total_kg is not None
    assert trim.total_kg <= 21e3 * (1.0 + 1e-9)
    assert drawn_chance(trim, BATCH, TESTED, 100.0) == pytest.approx(0.95, abs=4e-3)
