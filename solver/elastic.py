"""Limits that may give: how far blends lie outside each, in units that compare.

A miss is measured in units of the reproducibility of the method at the limit that is missed; the cost
ceiling has no method and counts 1 % of itself as one unit (common practice).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from .gauge import Gauge
from .properties import Array, lookup
from .requirements import COST, Requirement, ceiling
from .rows import Model, View
from .viscosity_index import LOWEST_KV100, indices

COST_UNIT = 0.01  # of the ceiling


@dataclass(frozen=True)
class Elastic:
    """One limit that may be missed."""

    code: str  # property, or COST
    values: Callable[[Array], Array]  # blends (k, n) → values (k,)
    gradient: Callable[[Array], Array]  # a blend (n,) → d(value)/dx (n,)
    low: float | None
    high: float | None
    unit_low: float  # one unit of miss below the low side …
    unit_high: float  # … and above the high one

    @property
    def name(self) -> str:
        """Name for a message."""
        return "cost per t" if self.code == COST else lookup(self.code).name

    @property
    def sides(self) -> list[tuple[float, float, float]]:
        """(sign, limit, unit) of each side that is closed: sign·(value − limit) is the miss."""
        found = [(1.0, self.high, self.unit_high), (-1.0, self.low, self.unit_low)]
        return [(sign, limit, unit) for sign, limit, unit in found if limit is not None]

    def value(self, x: Array) -> float:
        """Value of one blend."""
        return float(self.values(x[None, :])[0])

    def misses(self, x: Array) -> Array:
        """Misses of blends (k, n), in units, shape (k,)."""
        values = self.values(x)
        worst: Array = np.zeros(len(values))
        for sign, limit, unit in self.sides:
            worst = np.maximum(worst, sign * (values - limit) / unit)
        return worst


def total(elastics: list[Elastic], x: Array) -> Array:
    """Summed misses of blends (k, n), shape (k,)."""
    summed: Array = np.zeros(len(x))
    for each in elastics:
        summed = summed + each.misses(x)
    return summed


def elastics(model: Model) -> list[Elastic]:
    """Every limit of a model that may give: properties, VI, and the cost ceiling."""
    found = []
    for number, view in enumerate(model.exact):
        found += [_of_requirement(view, need) for need in model.requirements
                  if number == 0 or need.entry.basis in ("law", "curve")]
        if model.vi is not None:
            unit = lookup("kv100").reproducibility(LOWEST_KV100)
            found.append(_of_gauge("kv100", view.gauges["kv100"], LOWEST_KV100, None, unit, unit))
    most = ceiling(model.target)
    if most is not None:
        price = model.table.price
        found.append(Elastic(COST, lambda x: x @ price, lambda x: price, None, most, COST_UNIT * most,
                             COST_UNIT * most))
    return found


def _of_requirement(view: View, need: Requirement) -> Elastic:
    units = need.unit_of_miss("low"), need.unit_of_miss("high")
    if need.code == "vi":
        return Elastic("vi", lambda x: _vi(view, x), lambda x: _vi_gradient(view, x), need.held_low,
                       need.held_high, *units)
    return _of_gauge(need.code, view.gauges[need.code], need.held_low, need.held_high, *units)


def _of_gauge(code: str, gauge: Gauge, low: float | None, high: float | None, unit_low: float,
              unit_high: float) -> Elastic:
    inside = low if low is not None else high if high is not None else 0.0

    def values(x: Array) -> Array:
        read = np.asarray(gauge.value(gauge.index_of(x)), dtype=np.float64)
        # A blend of stocks that all lack an allowed-unknown value misses nothing that can be told.
        return np.where(np.isfinite(read), read, inside)

    def gradient(x: Array) -> Array:
        return gauge.gradient(x) if float(x @ gauge.den) != 0.0 else np.zeros(len(x))

    return Elastic(code, values, gradient, low, high, unit_low, unit_high)


def _kvs(view: View, x: Array) -> tuple[Array, Array]:
    """KV40 and KV100 of blends, the latter taken as at least 2, so that a thinner one still has a way to go."""
    g40, g100 = view.gauges["kv40"], view.gauges["kv100"]
    return g40.value(g40.index_of(x)), np.maximum(LOWEST_KV100, g100.value(g100.index_of(x)))


def _vi(view: View, x: Array) -> Array:
    return indices(*_kvs(view, x))


def _vi_gradient(view: View, x: Array) -> Array:
    u, y = (float(v[0]) for v in _kvs(view, x[None, :]))
    h = 1e-5
    below = max(LOWEST_KV100, y * (1 - h))
    by40 = float(indices(u * (1 + h), y) - indices(u * (1 - h), y)) / (2 * h * u)
    by100 = float(indices(u, y * (1 + h)) - indices(u, below)) / (y * (1 + h) - below)
    return by40 * view.gauges["kv40"].gradient(x) + by100 * view.gauges["kv100"].gradient(x)
