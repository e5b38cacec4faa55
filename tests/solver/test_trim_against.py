"""Trims: against linear programmes and brute force written here, and recomputed law by law."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from scipy.optimize import linprog

from blendtui.quiet import quiet
from solver.stocks import Stock
from solver.target import LAWS, Limit, Target
from solver.trim import Trim, additions
from tests.solver.test_trim import BATCH, BRIGHT, HEAVY, made, refutas
from tests.solver.trim_cases import Case, part_of, read, trim_case


def held_by_refutas(case: Case) -> tuple[Target, np.ndarray, np.ndarray]:
    """A case without its VI and flash limits, and rows of it in kg: coefficients of the stocks, shape (m, n), and what
    the whole batch adds to each row, shape (m,); Refutas by hand, mass balance, a treat rate."""
    held = ("kv40", "kv100", "sulfur")
    target = replace(case.target, limits=tuple(x for x in case.target.limits if x.property in held))

    def index(stock: Stock, code: str) -> float:
        kv = stock.kv40 if code == "kv40" else stock.kv100
        return stock.values["sulfur"] if code == "sulfur" else refutas(kv or 0.0)

    rows = []
    everything = (*case.stocks, case.contents[0])
    for limit in target.limits:
        for sign, value in ((1.0, limit.high), (-1.0, limit.low)):
            if value is not None:
                at = value if limit.property == "sulfur" else refutas(value)
                rows.append([sign * (index(s, limit.property) - at) for s in everything])
    for rule in target.rules:
        inside = np.array([part_of(s, rule.of) for s in everything])
        rows += [list(inside - rule.high), list(rule.low - inside)]
    both = np.array(rows)
    return target, both[:, :-1], both[:, -1] * (case.contents[0].in_vessel_kg or 0.0)


@pytest.mark.parametrize("k", range(40))
def test_as_cheap_and_as_light_as_a_linear_programme_written_out(k: int) -> None:
    case = trim_case(k, "refutas")
    target, rows, of_batch = held_by_refutas(case)
    content = case.contents[0].in_vessel_kg or 0.0
    prices = np.array([s.price_per_t or 0.0 for s in case.stocks])
    bounds = [(0.0, s.on_hand_kg) for s in case.stocks]
    best = {}
    for aim, c in (("cost", prices / 1000.0), ("mass", np.ones(len(prices)))):
        plain = linprog(c, np.vstack([rows, np.ones(len(prices))]),
                        np.append(1e-7 * content - of_batch, case.room_kg), bounds=bounds)
        trim = additions(case.contents, case.stocks, target, room_kg=case.room_kg, aim=aim, whole=False)
        assert plain.status == 0
        assert trim.status == "optimal"
        value = trim.cost if aim == "cost" else trim.added_kg
        assert value == pytest.approx(plain.fun, rel=1e-4, abs=2e-5 * content)
        best[aim] = trim
    assert (best["mass"].added_kg or 0.0) <= (best["cost"].added_kg or 0.0) * (1.0 + 3e-6) + 1e-5
    assert (best["cost"].cost or 0.0) <= (best["mass"].cost or 0.0) * (1.0 + 3e-6) + 1e-5


@pytest.mark.parametrize("k", range(20))
def test_no_more_is_drawn_off_than_a_linear_programme_written_out_asks(k: int) -> None:
    """The part y of the batch that stays is one column more: maximise y under these rows and M y + Σ m ≤ M + room."""
    case = trim_case(k, "refutas")
    target, rows, of_batch = held_by_refutas(case)
    content, room = case.contents[0].in_vessel_kg or 0.0, 0.1 * case.room_kg
    n = len(case.stocks)
    plain = linprog(np.append(np.zeros(n), -1.0),
                    np.vstack([np.column_stack([rows, of_batch]), np.append(np.ones(n), content)]),
                    np.append(np.full(len(rows), 1e-7 * content), content + room),
                    bounds=[*((0.0, s.on_hand_kg) for s in case.stocks), (0.0, 1.0)])
    trim = additions(case.contents, case.stocks, target, room_kg=room, whole=False)
    assert plain.status == 0
    assert trim.drawn_kg == pytest.approx((1.0 + plain.fun) * content, rel=1e-3, abs=3e-5 * content)
    assert (trim.total_kg or 0.0) <= (content + room) * (1.0 + 1e-9)


@pytest.mark.parametrize("k", range(12))
def test_as_cheap_as_the_cheapest_of_every_number_of_steps(k: int) -> None:
    """Three oils in drums and coarse steps, VI and KV40 held: every combination tried, by Refutas."""
    rng = np.random.default_rng([11, k])
    stocks = [replace(BRIGHT, package_kg=180.0), replace(HEAVY, division_kg=100.0),
              Stock("FINE", on_hand_kg=4e3, price_per_t=2000.0, density15=846.0, kv40=47.0, kv100=7.7, division_kg=50.0,
                    values={"flash": 255.0})]
    stocks = [replace(s, price_per_t=(s.price_per_t or 0.0) * rng.uniform(0.6, 1.4)) for s in stocks]
    batch = replace(BATCH, kv40=float(rng.uniform(88.0, 97.0)), kv100=10.9)
    target = Target("steps", (Limit("kv40", 99.0, 99.3), Limit("vi", float(rng.uniform(98.0, 104.0)))))
    trim = additions([batch], stocks, target, room_kg=4000.0)
    tried = []
    for numbers in product(range(23), range(41), range(81)):
        masses = [n * step for n, step in zip(numbers, (180.0, 100.0, 50.0), strict=True)]
        if sum(masses) <= 4000.0:
            cost = sum(kg * (s.price_per_t or 0.0) / 1000.0 for kg, s in zip(masses, stocks, strict=True))
            tried.append((cost, masses))
    for cost, masses in sorted(tried):
        at = read([(batch, 20e3), *zip(stocks, masses, strict=True)], "refutas")
        if 99.0 <= at["kv40"] <= 99.3 and at["vi"] >= (target.limits[1].low or 0.0):
            assert trim.status == "optimal"
            assert trim.drawn_kg == 0.0
            assert trim.cost == pytest.approx(cost, rel=1e-5, abs=0.01)
            return
    assert trim.additions_kg is None or trim.drawn_kg > 0.0


def inside(case: Case, trim: Trim) -> None:
    """Every limit, the room, the tanks and the treat rate of a trim, by the laws written out without the solver."""
    masses = made(trim)
    content = case.contents[0].in_vessel_kg or 0.0
    after = case.after(masses, 1.0 - trim.drawn_kg / content)
    at = read(after, case.target.law)
    for limit in case.target.limits:
        value = at[limit.property]
        hair = 1.1e-4 if limit.property == "vi" else 1.1e-6 * abs(value)
        assert limit.low is None or value >= limit.low - hair, limit
        assert limit.high is None or value <= limit.high + hair, limit
    total = sum(kg for _, kg in after)
    assert total <= (content + case.room_kg) * (1.0 + 1e-9)
    for stock, kg in after[1:]:
        step = stock.package_kg or stock.division_kg
        assert 0.0 < kg <= (stock.on_hand_kg or 0.0)
        assert step is None or kg / step == pytest.approx(round(kg / step), abs=1e-6)
    for rule in case.target.rules:
        held = sum(kg * part_of(stock, rule.of) for stock, kg in after)
        step = next(s.division_kg or 0.0 for s in case.stocks if s.code == rule.of)
        assert abs(held - rule.low * total) <= 0.5 * step + 1e-6 * total


@pytest.mark.parametrize("first", range(0, 500, 50))
def test_500_random_trims_land_inside_every_limit(first: int) -> None:
    answers = []
    for k in range(first, first + 50):
        case = trim_case(k)
        with quiet():
            trim = additions(case.contents, case.stocks, case.target, room_kg=case.room_kg)
        assert trim.status == "optimal", k
        inside(case, trim)
        answers.append(trim)
    assert sum(bool(trim.additions_kg) for trim in answers) >= 40


def test_the_random_trims_try_what_they_should() -> None:
    cases = [trim_case(k) for k in range(60)]
    assert {case.target.law for case in cases} == set(LAWS)
    limited = {x.property for case in cases for x in case.target.limits}
    assert limited == {"kv40", "kv100", "vi", "sulfur", "flash"}
    assert any(s.package_kg for case in cases for s in case.stocks)
    outside = 0
    for case in cases:
        before = read([(case.contents[0], 1.0)], case.target.law)
        outside += any((x.low is not None and before[x.property] < x.low) or
                       (x.high is not None and before[x.property] > x.high) for x in case.target.limits)
    assert outside >= 45
