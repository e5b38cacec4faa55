"""What else would do: the range of every stock, and the largest batch. Other sets of stocks: sets.py.

All over the same rows and the same exact treatment of the VI as the recipe itself.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

import numpy as np

from .linear import Polytope, Stopwatch
from .properties import Array
from .recipe import exact_search
from .rows import Model, build
from .stocks import Stock, StockTable
from .target import Target
from .windows import search

RANGE_GAP = 2e-5  # mass fraction to which a range is found: 0.01 % of the blend is 1e-4


def ranges(stocks: StockTable | Iterable[Stock], target: Target, *,
           time_limit: float = 30.0) -> dict[str, tuple[float, float]] | None:
    """Least and most mass fraction of every stock that may serve, over all blends that meet the target.

    Within the cost ceiling; whole-number rules (most stocks, least share) left out; to 1e-4. None when no
    blend meets it. When the time [s] runs out a range is left as wide as it was known to be.
    """
    model = build(stocks, target)
    watch = Stopwatch(time_limit)
    plain = replace(model, target=replace(target, max_stocks=None, min_share=None))
    if model.short or any(need.empty for need in model.requirements) or len(model.table) == 0:
        return None
    best, problem = exact_search(plain, plain.polytope(whole=False), plain.table.price, watch)
    if best.x is None:
        return None
    seen = [best.x]
    found = {}
    for i, code in enumerate(plain.table.codes):
        low = _extreme(plain, problem, i, 1.0, seen, watch)
        high = _extreme(plain, problem, i, -1.0, seen, watch)
        found[code] = (max(0.0, low), min(1.0, high))
    return found


def _extreme(model: Model, problem: Polytope, i: int, sign: float, seen: list[Array],
             watch: Stopwatch) -> float:
    """The least (sign 1) or most (sign −1) share of stock i; blends met on the way join `seen`."""
    known = min(sign * float(x[i]) for x in seen)
    limit = float(problem.lo[i]) if sign > 0.0 else -float(problem.hi[i])
    if known <= limit + RANGE_GAP / 10.0:
        return sign * known  # a blend already met reaches the bound: nothing to solve
    c = np.zeros(len(model.table))
    c[i] = sign
    outcome = search(model, problem, c, watch, gap=0.0, gap_absolute=RANGE_GAP)
    if outcome.x is None or outcome.status == "stopped":
        return sign * min(known, max(limit, outcome.bound))
    seen.append(outcome.x)
    return sign * min(known, outcome.value)


def largest_batch(stocks: StockTable | Iterable[Stock], target: Target, *,
                  time_limit: float = 10.0) -> float | None:
    """The largest batch [kg] that today's tanks allow while every limit is met, at any cost below the
    ceiling; None when no blend meets the target.

    The rows are homogeneous, so they hold for masses as for shares: maximise Σ m_i over m_i ≤ what the
    tank can give. Whole-number rules are left out.
    """
    model = build(stocks, replace(target, batch_kg=None, max_stocks=None, min_share=None))
    if model.short or any(need.empty for need in model.requirements) or len(model.table) == 0:
        return None
    available = model.table.available
    unit = float(available.max())
    n = len(available)
    bounds = [np.eye(n)[i] - model.hi[i] for i in range(n) if model.hi[i] < 1.0]
    bounds += [model.lo[i] - np.eye(n)[i] for i in range(n) if model.lo[i] > 0.0]
    base = model.polytope(whole=False)
    problem = replace(base, lo=np.zeros(n), hi=available / unit, total=None).with_rows(bounds, hold=0.0)
    outcome, _ = exact_search(model, problem, -np.ones(n), Stopwatch(time_limit), gap=1e-5)
    if outcome.x is None or outcome.x.sum() <= 1e-9:
        return None
    return float(outcome.x.sum()) * unit
