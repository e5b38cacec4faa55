"""The whole charges nearest to limits that whole charges cannot meet, and what they miss.

    minimise Σ_j miss_j(m)   over the masses that the plant can charge

by whole-number programmes on the limits' exact gradients, each at the answer before, until the misses no longer
fall. It starts from the least-cost or nearest blend in any quantities and is not called proven. Share rules,
tanks, steps and the tolerance of the total are not given up.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from .charges import Charges, kg
from .elastic import Elastic, elastics, total
from .linear import Polytope, Steps, Stopwatch, Whole, solve
from .properties import Array, lookup
from .requirements import COST
from .rows import Model

STEPS = 8
LITTLE = 0.02  # units of miss, and part of the misses, for which the total is not moved away from the batch
MOST_MISS = 1e4  # units of miss: more than a limit is missed by when a blend is brought near to it


@dataclass(frozen=True)
class Missed:
    """A limit that the nearest whole charges miss, in the property's unit."""

    property: str  # registry code, or "cost_per_t"
    side: str  # "low" or "high"
    limit: float  # what is held
    value: float
    miss: float  # how far outside, above 0

    def words(self) -> str:
        """As a sentence has it."""
        entry = None if self.property == COST else lookup(self.property)
        unit = f" {entry.unit}" if entry is not None and entry.unit else ""
        name = "cost per t" if entry is None else entry.name
        return (f"{name} {self.value:.5g}{unit} is {_figures(self.miss)}{unit} "
                f"{'above' if self.side == 'high' else 'below'} the {self.limit:.5g} that is held")


def _figures(miss: float) -> str:
    return f"{float(f'{miss:.3g}'):,.10g}"


def nearest_charges(charges: Charges, start: Array, watch: Stopwatch) -> tuple[float, Array | None]:
    """Tolerance of the total [kg], and charges x, in batches, with the least misses found from a blend `start`.

    A total nearer to the batch is taken where a wider tolerance gains hardly anything; x None where nothing can
    be charged.
    """
    limits, tolerances = elastics(charges.model), charges.tolerances()
    tried = [_descended(charges, tolerance, limits, start, watch) for tolerance in tolerances]
    enough = min(misses for misses, _ in tried)
    enough = enough * (1.0 + LITTLE) + LITTLE if enough > 0.0 else 0.0
    tolerance, x = next((t, x) for t, (misses, x) in zip(tolerances, tried, strict=True) if misses <= enough)
    return tolerance, x if x is None or enough > 0.0 else _cheaper(charges, tolerance, limits, x, watch)


def _cheaper(charges: Charges, tolerance: float, limits: list[Elastic], x: Array, watch: Stopwatch) -> Array:
    """Where charges were found that miss nothing: cheaper ones beside them, as far as they miss nothing too."""
    price = charges.model.table.price

    def read(y: Array) -> tuple[Array, float, float]:
        shares = charges.masses(y) / float(charges.masses(y).sum())
        return shares, float(total(limits, shares[None, :])[0]), float(price @ shares)

    near, _, cost = read(x)
    for _ in range(STEPS):
        y = _nearer(charges, tolerance, limits, near, watch, price - cost)
        if y is None:
            break
        near, misses, made = read(y)
        if misses > 0.0:
            continue  # once more along the lines there
        if made >= cost - 1e-9 * abs(cost):
            break
        x, cost = y, made
    return x


def _descended(charges: Charges, tolerance: float, limits: list[Elastic], start: Array,
               watch: Stopwatch) -> tuple[float, Array | None]:
    """The misses, in units, and the charges where they no longer fall."""
    best, x, near = np.inf, None, start
    for _ in range(STEPS):
        y = _nearer(charges, tolerance, limits, near, watch)
        if y is None:
            break
        near = charges.masses(y) / float(charges.masses(y).sum())
        misses = float(total(limits, near[None, :])[0])
        if misses >= best - 1e-9:
            break
        best, x = misses, y
        if watch.over:
            break
    return best, x


def _nearer(charges: Charges, tolerance: float, limits: list[Elastic], near: Array, watch: Stopwatch,
            price: Array | None = None) -> Array | None:
    """Least sum of misses linearised at the blend `near`: a whole-number programme; None where nothing can be charged.

    With a price, shape (n,), that is minimised instead and nothing may be missed. The variables are the masses, then
    one miss a limit. A limit's value does not change with the total, so its line is made to pass through 0:
    (slope − slope·near + value − limit)·x ≤ unit·miss where Σ x is about 1.
    """
    plain = charges.shares_only(tolerance)
    n, k = len(near), len(limits)
    rows = [np.concatenate([row, np.zeros(k)]) for row in plain.rows]
    elastic = []
    for j, each in enumerate(limits):
        value, slope = each.value(near), each.gradient(near)
        for sign, limit, unit in each.sides:
            along = sign * (slope - float(slope @ near) + value - limit)
            row = np.concatenate([along, np.zeros(k)])
            row[n + j] = -unit
            elastic.append(row / max(float(np.abs(along).max()), 1e-12))
    ones = np.concatenate([np.ones(n), np.zeros(k)])
    problem = Polytope(
        np.array([*rows, *elastic, ones, -ones]),
        np.concatenate([-plain.limits, np.zeros(len(elastic)), [-1.0 - plain.slack, 1.0 - plain.slack]]),
        np.concatenate([plain.lo, np.zeros(k)]),
        np.concatenate([plain.hi, np.full(k, MOST_MISS if price is None else 0.0)]), total=None,
        whole=None if plain.whole is None else Whole(
            np.concatenate([plain.whole.counted, np.zeros(k, dtype=np.bool_)]), plain.whole.most,
            np.concatenate([plain.whole.least * (1.0 + plain.slack), np.zeros(k)])),
        steps=None if plain.steps is None else Steps(np.concatenate([plain.steps.step, np.zeros(k)]),
                                                     np.concatenate([plain.steps.least, np.zeros(k)])))
    c = np.concatenate([np.zeros(n), np.ones(k)] if price is None else [price, np.zeros(k)])
    solved = solve(problem, c, watch)
    return None if solved.x is None else solved.x[:n]


def missed(model: Model, shares: Array) -> tuple[Missed, ...]:
    """What a blend misses on exact recomputation; of several laws the worst."""
    needs = {need.code: need for need in model.requirements}
    found: dict[tuple[str, str], Missed] = {}
    for each in elastics(model):
        value = each.value(shares)
        need = needs.get(each.code)
        for sign, limit, _ in each.sides:
            miss, side = sign * (value - limit), "high" if sign > 0.0 else "low"
            tolerance = need.tolerance() if need is not None else 1e-6 * abs(limit)
            before = found.get((each.code, side))
            if miss > tolerance and (before is None or miss > before.miss):
                found[each.code, side] = Missed(each.code, side, limit, value, miss)
    return tuple(found.values())


def reach_words(charges: Charges, watch: Stopwatch) -> str:
    """Which batch near to the one asked whole charges can make at all, whatever the limits on properties."""
    half = 0.5
    shares = replace(charges.shares_only(half * charges.batch), slack=half / 2.0)
    ones, found = np.ones(len(charges.step)), []
    for total_of, sign in ((1.0 - half / 2.0, -1.0), (1.0 + half / 2.0, 1.0)):
        solved = solve(replace(shares, total=total_of), sign * ones, watch)
        if solved.x is not None:
            found.append(float(charges.masses(solved.x).sum()))
        elif solved.status == "stopped":
            return "time ran out before it was settled which whole charges can be made"
    if not found:
        return "no set of whole charges keeps the share rules and what is in the tanks, in any batch near this one"
    near = " or ".join(f"{kg(mass)} kg" for mass in sorted(found, key=lambda mass: abs(mass - charges.batch)))
    return (f"no set of whole charges within {kg(charges.tolerances()[-1])} kg of {kg(charges.batch)} kg keeps the "
            f"share rules and what is in the tanks; batches that do: {near}")
