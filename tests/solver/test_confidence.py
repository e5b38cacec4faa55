"""How sure a first batch is: the closed form and the drawn blends, each against the outside and each other."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import multivariate_normal

from solver.closed import POINTS, closed_chances, together
from solver.confidence import Chances, Subject, chances, draw, first, subject, what_to_test
from solver.drawn import _shifts, results
from solver.errors import StockError, TargetError
from solver.recipe import design
from solver.sigmas import sigma_of, sigma_of_test
from solver.stocks import Stock, StockTable
from solver.target import LAWS, Limit, Target
from tests.benchmarks.plants import case

SOURCES = ("own", "certificate", "typical", "")
N150 = Stock("N150", kv40=30.6, kv100=5.23, density15=868.0, price_per_t=800.0, on_hand_kg=5e4, source="own")
N500 = Stock("N500", kv40=95.5, kv100=10.75, density15=879.0, price_per_t=840.0, on_hand_kg=5e4, source="own")
BS = Stock("BS", kv40=480.0, kv100=31.5, density15=897.0, price_per_t=1050.0, on_hand_kg=5e4, source="certificate")
P46 = Target("P46", (Limit("kv40", 41.4, 50.6),))


def sourced(table: StockTable, seed: int) -> StockTable:
    """The stocks with sources and, for some, scale divisions, at random."""
    rng = np.random.default_rng(seed)
    return StockTable(replace(s, source=SOURCES[rng.integers(4)], division_kg=10.0 if rng.random() < 0.4 else None)
                      for s in table.stocks)


def some_subject(k: int) -> Subject | None:
    """The least-cost blend of seeded case k: it lies on its limits, where chances tell most."""
    table, target = case(91, k, hardest=125.0)
    table = sourced(table, k)
    recipe = design(table, target)
    return subject(table, recipe.shares or {}, target) if recipe.status == "optimal" else None


# From the outside

# Common practice: ISO VG is ±10 % on KV40; (σ in % of the middle, aim off it in %) → % that miss.
@pytest.mark.parametrize(("sigma", "aim", "misses"), [(2, 0, 0.0), (4, 0, 1.2), (2, 6, 2.3), (3, 6, 9), (4, 6, 16)])
def test_what_decides_whether_the_first_batch_is_right(sigma: float, aim: float, misses: float) -> None:
    value = 46.0 * (1.0 + aim / 100.0)
    # The figures are of the total error: what the laboratory adds is taken out of the stock's.
    own = float(np.sqrt((0.46 * sigma) ** 2 - sigma_of_test("kv40", value) ** 2))
    oil = replace(N150, kv40=value, kv100=6.9, sigmas={"kv40": own})
    found = chances([oil], {"N150": 1.0}, P46, seed=3)
    (limit,) = found.limits
    digits = 0 if misses >= 9 else 1
    assert round(100.0 * (1.0 - limit.closed), digits) == misses
    assert 100.0 * (1.0 - limit.chance) == pytest.approx(100.0 * (1.0 - limit.closed), abs=400.0 * limit.error)
    assert limit.sigma == pytest.approx(0.46 * sigma, rel=1e-3)


def test_the_integral_of_all_limits_is_that_of_a_multivariate_normal() -> None:
    # scipy's own integral over a box, where nothing but first order stands between: no VI, a fitted law.
    table, target = case(91, 5, hardest=110.0)
    target = replace(target, limits=(*target.limits[:2], Limit("sulfur", None, 0.4), Limit("flash", 200.0)))
    table = sourced(table, 5)
    recipe = design(table, target)
    of = subject(table, recipe.shares or {}, target, law_sigma={"kv40": 0.01, "kv100": 0.012})
    codes = of.carried.errors.codes
    low = [next(-np.inf if n.low is None else n.low for n in of.needs if n.code == c) for c in codes]
    high = [next(np.inf if n.high is None else n.high for n in of.needs if n.code == c) for c in codes]
    plain = replace(of.carried, skew=np.zeros(len(codes)))
    expected = multivariate_normal(plain.shifted, plain.covariance(), seed=1, abseps=1e-6, maxpts=10**6).cdf(
        high, lower_limit=low)
    assert together(plain, of.needs) == pytest.approx(expected, abs=1e-4)


@pytest.mark.parametrize("k", range(0, 60, 7))
def test_the_lattice_has_points_enough(k: int) -> None:
    of = some_subject(k)
    assert of is not None
    assert together(of.carried, of.needs) == pytest.approx(together(of.carried, of.needs, 64 * POINTS), abs=2e-4)
    vi = [need for need in of.needs if need.code == "vi"]
    assert closed_chances(of.carried, vi)["vi"] == pytest.approx(together(of.carried, vi, 64 * POINTS), abs=2e-4)


@pytest.mark.parametrize("part", range(6))
def test_the_closed_form_agrees_with_drawn_blends(part: int) -> None:
    """60 least-cost blends under the five laws, on the edge of their limits, where a chance tells most: to 0.35
    points of each limit and of all together, besides three standard errors of the drawing."""
    for k in range(part, 60, 6):
        of = some_subject(k)
        if of is None:
            continue
        found = draw(of, first(of), 200_000)
        for limit in found.limits:
            assert abs(limit.chance - limit.closed) <= 0.0035 + 3.0 * limit.error, f"case {k}, {of.target.law}, {limit}"
        assert abs(found.chance - found.closed) <= 0.0035 + 3.0 * found.error, f"case {k}, {of.target.law}"


def test_drawn_results_scatter_as_the_budget_says() -> None:
    of = some_subject(1)
    assert of is not None
    drawn = list(results(of.carried, 200_000, 7))
    for limit in first(of).limits:
        values = np.concatenate([found[limit.property] for found in drawn])
        assert values.std() == pytest.approx(limit.sigma, rel=0.02)
        if limit.property != "vi":  # its mean is not worked out; its chance is
            expected = of.carried.shifted[of.carried.errors.index(limit.property)]
            assert values.mean() == pytest.approx(expected, abs=0.01 * limit.sigma)


# Standard deviations

def test_a_value_scatters_by_its_source() -> None:
    r = sigma_of_test("kv40", 100.0)
    assert r == pytest.approx(100.0 * 0.0122 / 2.77)  # R 1.22 %: ASTM D445, formulated oils at 40 °C (M)
    # Common practice: own test 0.25 to 0.44 %, certificate 1.5 %, typical values 5 to 10 % at the most.
    totals = {source: np.hypot(*sigma_of(replace(N150, source=source), "kv40", 100.0)) for source in SOURCES}
    assert totals["own"] == pytest.approx(r)
    assert totals["certificate"] == pytest.approx(1.5, abs=0.1)
    assert 2.5 <= totals["typical"] <= 5.0
    assert totals[""] == totals["typical"]


def test_a_typed_deviation_is_the_whole_of_it() -> None:
    wide = replace(N150, sigmas={"kv40": 1.0, "flash": 0.1})
    tested, lot = sigma_of(wide, "kv40", 30.6)
    assert tested == pytest.approx(sigma_of_test("kv40", 30.6))
    assert np.hypot(tested, lot) == pytest.approx(1.0)
    assert sigma_of(wide, "flash", 214.0) == (0.1, 0.0)
    assert sigma_of(replace(N150, sigmas={"kv40": 0.0}), "kv40", 30.6) == (0.0, 0.0)


def test_a_blending_pair_is_no_test_of_the_oil() -> None:
    improver = replace(N150, blend_kv40=900.0, blend_kv100=90.0, source="own")
    assert np.hypot(*sigma_of(improver, "kv40", 900.0)) == pytest.approx(9.0 * sigma_of_test("kv40", 900.0))
    assert sigma_of(improver, "flash", 200.0)[1] == 0.0


@pytest.mark.parametrize("typed", [-0.1, float("nan"), float("inf")])
def test_a_deviation_that_cannot_be_is_refused(typed: float) -> None:
    with pytest.raises(StockError, match=r"N150: the standard deviation of kv40 is .* must be 0 or more"):
        chances([replace(N150, sigmas={"kv40": typed})], {"N150": 1.0}, P46)


# What the doubt is made of

def half_and_half(*stocks: Stock, limits: tuple[Limit, ...] = P46.limits, **more: object) -> Subject:
    """Equal shares of some stocks."""
    law_sigma = more.pop("law_sigma", None)
    target = Target("P", limits, **more)  # type: ignore[arg-type]
    return subject(stocks, {s.code: 1.0 / len(stocks) for s in stocks}, target, law_sigma=law_sigma)  # type: ignore[arg-type]


def test_the_budget_is_the_variance_split_by_part() -> None:
    found = first(half_and_half(N150, replace(BS, source="typical"), limits=(Limit("kv40", 80.0), Limit("vi", 90.0))))
    for limit in found.limits:
        parts = found.budget[limit.property]
        assert {p.part for p in parts} == {"N150", "BS", "weighing", "law", "laboratory"}
        assert sum(p.share for p in parts) == pytest.approx(1.0)
        assert sum(p.sigma ** 2 for p in parts) == pytest.approx(limit.sigma ** 2)
        assert [p.share for p in parts] == sorted((p.share for p in parts), reverse=True)
    assert {p.part: p for p in found.budget["kv40"]}["law"].share > 0.5  # half bright stock: the laws differ by 9 %


def test_the_law_fitted_to_measured_blends_takes_the_place_of_the_spread() -> None:
    of = half_and_half(N150, BS, law_sigma={"kv40": 0.02})
    law = {p.part: p for p in first(of).budget["kv40"]}["law"]
    assert law.sigma == pytest.approx(0.02 * of.carried.values[0])
    none = {p.part: p for p in first(half_and_half(N150, BS, law_sigma={})).budget["kv40"]}["law"]
    assert none.sigma == 0.0
    with pytest.raises(TargetError, match="the law's standard deviation of kv40 is -1"):
        half_and_half(N150, BS, law_sigma={"kv40": -1.0})


def test_the_spread_of_the_laws_is_even_over_itself() -> None:
    of = half_and_half(N150, BS)
    spread = design([N150, BS], Target("P", (Limit("kv40", 1.0),), held={"N150": 0.5})).spread_pct["kv40"]
    law = {p.part: p for p in first(of).budget["kv40"]}["law"]
    assert law.sigma == pytest.approx(spread / 100.0 * of.carried.values[0] / np.sqrt(12.0), rel=1e-9)


def test_weighing_follows_the_scale_division_where_there_is_a_batch() -> None:
    divided = [replace(s, division_kg=100.0) for s in (N150, N500)]
    by_scale = half_and_half(*divided, batch_kg=5000.0)
    # Uniform over one division: σ = 100/√12 kg of 5000 kg, on either charge, and only their difference tells.
    sigma = 100.0 / np.sqrt(12.0) / 5000.0
    step = (half_and_half(N150, N500).carried.gradient[0] * [1.0, -1.0]).sum() / 2.0
    assert {p.part: p for p in first(by_scale).budget["kv40"]}["weighing"].sigma == pytest.approx(
        abs(step) * sigma * np.sqrt(2.0), rel=1e-6)
    without = half_and_half(*divided)
    assert {p.part: p for p in first(without).budget["kv40"]}["weighing"].sigma == pytest.approx(
        abs(step) * 0.005 * 0.5 * np.sqrt(2.0), rel=1e-6)
    assert any("no batch size" in note for note in first(without).notes)
    drawn = np.concatenate([r["kv40"] for r in results(by_scale.carried, 100_000, 1)])
    assert drawn.std() == pytest.approx(first(by_scale).limits[0].sigma, rel=0.02)


def test_a_charge_below_one_scale_division_is_told_of_and_counts_for_the_batch_at_most() -> None:
    divided = [replace(s, division_kg=100.0) for s in (N150, N500)]
    assert not any("scale division" in note for note in first(half_and_half(*divided, batch_kg=5000.0)).notes)
    small = half_and_half(*divided, batch_kg=150.0)
    assert any(note.startswith("N150, N500: less than one scale division is charged") for note in first(small).notes)
    tiny = draw(half_and_half(*divided, batch_kg=1e-300), first(small), 2000)
    assert all(x.sigma is not None and np.isfinite(x.sigma) for x in tiny.limits)


def test_drawn_stock_values_have_the_covariance_of_their_sources() -> None:
    stocks = [replace(N150, source="typical"), replace(N500, source="certificate", sigmas={"kv40": 0.0}), BS]
    errors = subject(stocks, dict.fromkeys(("N150", "N500", "BS"), 1.0 / 3.0), P46).carried.errors
    plain = {name: np.zeros((3, 2, 2)) for name in ("sources", "drawn")}
    for name, several in (("sources", [source.shifts for source in errors.sources]), ("drawn", _shifts(errors))):
        for shifts in several:
            pair = np.array([shifts.get(code, np.zeros(3)) for code in ("kv40", "kv100")])
            plain[name] += np.einsum("ai,bi->iab", pair, pair)
    assert plain["drawn"] == pytest.approx(plain["sources"], rel=1e-12, abs=1e-18)
    assert plain["drawn"][1, 0] == pytest.approx([0.0, 0.0])
    assert len(_shifts(errors)) == 2  # the density does not matter where shares mix by mass


# What to test

def test_what_to_test_is_the_measurement_that_helps_most() -> None:
    stocks = [N150, replace(N500, source="typical"), BS]
    target = Target("P", (Limit("kv40", 63.0, 70.0), Limit("kv100", 8.2, 9.1)))
    shares = {"N150": 0.5, "N500": 0.3, "BS": 0.2}
    of = subject(stocks, shares, target, law_sigma={})
    best, law = what_to_test(of)
    assert law is None
    assert best is not None
    # Each candidate typed as its own test's scatter, all worked out afresh.
    joint = {}
    for i, stock in enumerate(stocks):
        for code, value in (("kv40", stock.kv40), ("kv100", stock.kv100)):
            known = replace(stock, sigmas={code: sigma_of_test(code, float(value or 0.0))})
            joint[stock.code, code] = together(subject([*stocks[:i], known, *stocks[i + 1:]], shares, target,
                                                       law_sigma={}).carried, of.needs)
    assert (best.stock, best.property) == max(joint, key=lambda k: joint[k])
    assert best.then == pytest.approx(max(joint.values()), abs=1e-9)
    assert best.how == "own test"
    assert best.then > best.now == together(of.carried, of.needs)


def test_where_the_law_is_most_of_the_doubt_a_laboratory_blend_is_named() -> None:
    of = half_and_half(replace(N150, sigmas={}), replace(BS, source="own"), limits=(Limit("kv40", 99.0, 107.0),))
    test, law = what_to_test(of)
    assert test is None  # every value is an own test
    assert law is not None
    assert law.how == "laboratory blend"
    assert law.then > law.now + 0.02


def test_nothing_to_test_is_said_as_nothing() -> None:
    assert what_to_test(half_and_half(N150, N500, limits=(Limit("kv40", 10.0, 900.0),))) == (None, None)


# Edges

def test_on_its_limit_a_result_is_met_half_the_time() -> None:
    of = half_and_half(N150, N500, law_sigma={})
    on_it = replace(of.target, limits=(Limit("kv40", None, float(of.carried.values[0])),))
    found = chances(of.table, first(of).shares, on_it, law_sigma={})
    assert found.limits[0].closed == pytest.approx(0.5, abs=0.005)
    assert found.limits[0].chance == pytest.approx(0.5, abs=0.005)
    assert found.closed == pytest.approx(found.limits[0].closed, abs=1e-4)


def test_without_any_error_a_limit_is_met_or_not() -> None:
    oil = replace(N150, sigmas={"sulfur": 0.0}, values={"sulfur": 0.4})
    for high, chance in ((0.4, 1.0), (0.39, 0.0)):
        of = subject([oil], {"N150": 1.0}, Target("P", (Limit("sulfur", None, high),)))
        exact = replace(of, carried=replace(of.carried, laboratory=np.zeros(1)))
        found = draw(exact, first(exact), 1000)
        assert (found.limits[0].closed, found.limits[0].chance, found.closed, found.chance) == (chance,) * 4


def test_the_same_seed_gives_the_same_answer_and_another_another() -> None:
    of = half_and_half(N150, BS, limits=(Limit("kv40", 95.0, 108.0),))
    once, again, other = (draw(of, first(of), 20_000, seed) for seed in (5, 5, 6))
    assert once == again
    assert once.chance != other.chance
    assert (once.seed, once.blends) == (5, 20_000)


@pytest.mark.parametrize("blends", [0, -1, 10**8])
def test_a_number_of_blends_that_cannot_be_drawn_is_refused(blends: int) -> None:
    of = half_and_half(N150, BS)
    with pytest.raises(TargetError, match="blends cannot be drawn; give 1 to 5000000"):
        draw(of, first(of), blends)


def test_an_unknown_value_has_no_chance_and_says_so() -> None:
    found = chances([N150, N500], {"N150": 0.5, "N500": 0.5},
                    Target("P", (Limit("kv40", 40.0, 60.0), Limit("noack", None, 15.0))), blends=1000)
    noack = next(x for x in found.limits if x.property == "noack")
    assert (noack.value, noack.sigma, noack.chance, noack.closed) == (None, None, None, None)
    assert any("no chance can be given for Noack loss" in note for note in found.notes)
    assert found.closed is not None
    known = chances([replace(N150, values={"noack": 17.0}), N500], {"N150": 0.5, "N500": 0.5},
                    Target("P", (Limit("noack", None, 18.0, unknown_ok=True),)), blends=1000)
    assert known.limits[0].value == 17.0
    assert any("speaks of the stocks whose value is known" in note for note in known.notes)


@pytest.mark.parametrize("law", LAWS)
def test_every_law_and_every_kind_of_limit(law: str) -> None:
    values = {"flash": 220.0, "pour": -12.0, "sulfur": 0.4}
    stocks = [replace(s, values=values) for s in (N150, N500, BS)]
    limits = (Limit("kv40", 50.0, 65.0), Limit("kv-10", None, 6000.0), Limit("vi", 90.0, 110.0), Limit("flash", 205.0),
              Limit("pour", None, -6.0), Limit("sulfur", None, 0.45), Limit("density15", None, 885.0))
    found = chances(stocks, {"N150": 0.6, "N500": 0.25, "BS": 0.15}, Target("P", limits, law=law, batch_kg=9000.0))
    assert len(found.limits) == len(limits)
    for limit in found.limits:
        assert limit.chance == pytest.approx(limit.closed, abs=0.008), limit
    assert found.chance == pytest.approx(found.closed, abs=0.01)


def test_a_volume_law_doubts_the_density_too() -> None:
    vague = [replace(s, sigmas={"density15": 8.0}) for s in (N150, BS)]
    doubt = {law: {p.part: p for p in first(half_and_half(*vague, law=law)).budget["kv40"]}["BS"].sigma
             for law in ("walther-mass", "walther-volume")}
    assert doubt["walther-volume"] > doubt["walther-mass"]


def test_bad_shares_are_refused() -> None:
    with pytest.raises(TargetError, match="the shares sum to 90 %"):
        chances([N150], {"N150": 0.9}, P46)
    with pytest.raises(StockError, match="no stock 'X'"):
        chances([N150], {"X": 1.0}, P46)
    with pytest.raises(TargetError, match="a share of -10 % cannot be"):
        chances([N150, N500], {"N150": 1.1, "N500": -0.1}, P46)
    with pytest.raises(StockError, match="needs KV40, KV100 and density"):
        chances([replace(N150, density15=None)], {"N150": 1.0}, replace(P46, law="wright-volume"))


def test_chances_are_of_the_limits_as_asked_whatever_the_guard() -> None:
    def of(guard: float) -> Chances:
        return chances([N150, N500], {"N150": 0.6, "N500": 0.4}, Target("P", (Limit("kv40", 46.0, 60.0, guard=guard),)),
                       blends=5000)

    assert of(0.0).limits == of(3.0).limits
