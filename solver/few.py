"""The cheapest blend of one or two base stocks: every pair at once.

A blend of two stocks beside fixed shares has one degree of freedom, its part λ. Every row is then a bound on λ,
so that all pairs are judged together without a linear programme. The VI is enclosed by lines on short pieces of
the KV100 span, and what these let through is decided exactly, in order of the least that it can cost.
"""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise
from typing import Any

import numpy as np

from .laws import index_of_law
from .linear import Stopwatch
from .properties import Array
from .recipe import GAP, exact_search
from .rows import Model, View
from .vi_curve import curve
from .viscosity_index import LOWEST_KV100
from .windows import Outcome

Which = np.ndarray[Any, np.dtype[np.signedinteger[Any]]]  # positions of stocks
PIECES = 12
CLOSE = 1e-9  # by which a row may be missed here: the exact search decides


def can_tell(model: Model) -> bool:
    """Is every other stock's share fixed, so that a pair has one degree of freedom?"""
    others = ~model.table.counted
    return not model.bent and bool(np.all(model.hi[others] - model.lo[others] <= CLOSE))


def cheapest_pair(model: Model, watch: Stopwatch, single: bool = False) -> Outcome:
    """The cheapest blend of at most two base stocks or rework (or of one), where `can_tell`.

    status "infeasible": there is none; "stopped": time ran out, with the best known, if any.
    """
    counted = np.flatnonzero(model.table.counted & (model.hi > CLOSE))
    fixed = np.where(model.table.counted, 0.0, model.lo)
    rest = 1.0 - float(fixed.sum())
    if rest <= CLOSE or not len(counted):
        return Outcome("infeasible", None, np.inf, np.inf)
    first, second = (counted, counted) if single else (counted[k] for k in np.triu_indices(len(counted)))
    forced = model.table.counted & (model.lo > 0.0)
    demanded = forced[first].astype(int) + np.where(first == second, 0, forced[second])
    inside = demanded == int(forced.sum())
    first, second = first[inside], second[inside]
    if not len(first):
        return Outcome("infeasible", None, np.inf, np.inf)
    bounds = _least_costs(model, fixed, rest, first, second)
    best = Outcome("infeasible", None, np.inf, np.inf)
    for k in np.argsort(bounds):
        if bounds[k] >= best.value - GAP * abs(best.value) or not np.isfinite(bounds[k]):
            break
        if watch.over:
            return replace(best, status="stopped", bound=-np.inf)
        found = _exactly(model, [int(first[k]), int(second[k])], watch)
        if found.x is not None and found.value < best.value:
            best = found
    return best


def _exactly(model: Model, pair: list[int], watch: Stopwatch) -> Outcome:
    """The cheapest blend of these stocks, all of them used."""
    problem = model.polytope()
    lo, hi = problem.lo.copy(), np.where(model.table.counted, 0.0, problem.hi)
    hi[pair] = problem.hi[pair]
    if problem.whole is not None:
        lo[pair] = np.maximum(lo[pair], problem.whole.least[pair])
    return exact_search(model, replace(problem, lo=lo, hi=hi, whole=None), model.table.price, watch)[0]


def _least_costs(model: Model, fixed: Array, rest: float, first: Which, second: Which) -> Array:
    """A cost that no blend of each pair is below, shape (pairs,): infinite where there is none."""
    problem, price = model.polytope(), model.table.price
    least = np.zeros(len(fixed)) if problem.whole is None else problem.whole.least
    lo, hi = np.maximum(problem.lo, least) / rest, problem.hi / rest
    low = np.maximum(np.maximum(lo[first], 1.0 - hi[second]), 0.0)
    high = np.minimum(np.minimum(hi[first], 1.0 - lo[second]), 1.0)
    alone = first == second
    low, high = np.where(alone, np.where(hi[first] >= 1.0 - CLOSE, 1.0, 2.0), low), np.where(alone, 1.0, high)
    low, high = _parts(problem.rows, fixed, rest, first, second, low, high)
    spans = [(low, high)] if model.vi is None else [
        _parts(np.array(rows), fixed, rest, first, second, low, high)
        for rows in _pieces(model, model.views[0])]
    bounds = np.full(len(first), np.inf)
    for low, high in spans:
        able = low <= high + CLOSE
        ends = [float(price @ fixed) + rest * (part * price[first] + (1.0 - part) * price[second])
                for part in (np.where(able, low, 0.0), np.where(able, high, 0.0))]
        bounds = np.where(able, np.minimum(bounds, np.minimum(*ends)), bounds)
    return bounds


def _parts(rows: Array, fixed: Array, rest: float, first: Which, second: Which, low: Array,
           high: Array) -> tuple[Array, Array]:
    """The least and most λ of each pair for which every row is met: λ p + (1 − λ) q ≤ 0."""
    rows = rows[np.any(rows != 0.0, axis=1)] if len(rows) else rows  # a ceiling on equal prices binds nothing
    if not len(rows):
        return low, high
    scaled = rows / np.abs(rows).max(axis=1, keepdims=True)
    p, q = (rest * scaled[:, which] + (scaled @ fixed)[:, None] for which in (first, second))
    rise, room = p - q, CLOSE - q
    flat = np.abs(rise) < 1e-14
    at = room / np.where(flat, 1.0, rise)
    low = np.maximum(low, np.where(~flat & (rise < 0.0), at, -np.inf).max(axis=0))
    high = np.minimum(high, np.where(~flat & (rise > 0.0), at, np.inf).min(axis=0))
    return np.where((flat & (room < 0.0)).any(axis=0), np.inf, low), high


def _pieces(model: Model, view: View) -> list[list[Array]]:
    """Rows of each short piece of the KV100 span: its ends, and lines on the outer side of the curves there."""
    need, g40, g100 = model.vi, view.gauges["kv40"], view.gauges["kv100"]
    assert need is not None
    index = index_of_law(view.law)[0]
    known = g100.den != 0.0
    own = g100.num[known] / g100.den[known]
    lo, hi = max(float(own.min()), float(index(LOWEST_KV100))), float(own.max())
    for other in model.requirements:
        if other.code == "kv100":
            lo = lo if other.held_low is None else max(lo, float(index(other.held_low)))
            hi = hi if other.held_high is None else min(hi, float(index(other.held_high)))
    hair = 1e-9 * max(1.0, abs(hi))
    ends = np.linspace(lo - hair, hi + hair, PIECES + 1)
    if not lo <= hi:
        return []
    pieces = []
    for left, right in pairwise(ends):
        rows = [g100.sign * (g100.num - right * g100.den), -g100.sign * (g100.num - left * g100.den)]
        for limit, least in ((need.held_low, True), (need.held_high, False)):
            if limit is not None:
                side = g40.sign * (1.0 if least else -1.0)
                rows += [side * (g40.num - a * g100.num - b * g40.den)
                         for a, b in curve(limit, view.law).lines(float(left), float(right), least)]
        pieces.append(rows)
    return pieces
