"""A gauge reads one property of a blend, and turns a limit on it into a linear row.

Every property and every law here has the shape

    J_B = (Σ x_i num_i) / (Σ x_i den_i),    value = value(J_B)

with `den` of one sign and value(J) monotone, so that "value ≤ L" is Σ x_i c_i ≤ 0 with
c_i = ±(num_i − index(L)·den_i). Nothing else in the solver knows how a property mixes.

What the laboratory has taught about a pair (pairs.py) is added to J and bends it. Such a gauge reads blends
exactly; its rows are those of its tangent (`tangent`), and are followed step by step (tangent.py).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from .pairs import Excesses
from .properties import Array, Property, Transform
from .stocks import StockTable

# Volume weights are 1/ρ; taken against a usual density they stay near 1, as mass weights do.
USUAL_DENSITY = 900.0


@dataclass(frozen=True)
class Gauge:
    """How one property of a blend is read from mass fractions x, shape (n,) or (k, n)."""

    num: Array  # (n,), 0 where the stock takes no part
    den: Array  # (n,), all of one sign, 0 where the stock takes no part
    index: Transform  # value → J
    value: Transform  # J → value
    rising: bool = True  # does J rise with the value
    excess: Excesses | None = None  # what is added to J, learnt from measured blends

    def index_of(self, x: Array) -> Array | np.float64:
        """J of blends; NaN where no stock in the blend has the property."""
        den = np.asarray(x) @ self.den
        with np.errstate(invalid="ignore", divide="ignore"):
            plain = np.where(den != 0.0, (np.asarray(x) @ self.num) / den, np.nan)[()]
        return plain if self.excess is None else plain + self.excess.value(x)

    def tangent(self, x: Array) -> Gauge:
        """The gauge without excess that agrees with this one at the blend x, shape (n,), to first order."""
        if self.excess is None:
            return self
        return replace(self, num=self.num + self.excess.lift(x, self.den), excess=None)

    def read(self, x: Array) -> float:
        """Value of one blend, in the property's unit; NaN where it cannot be known."""
        j = float(self.index_of(x))
        return float(self.value(j)) if np.isfinite(j) else float("nan")

    @property
    def sign(self) -> float:
        """Sign of the denominators (−1 for Wright's law, whose lines fall)."""
        return -1.0 if np.any(self.den < 0.0) else 1.0

    def row(self, limit: float, side: str) -> Array:
        """Coefficients c, shape (n,), with Σ x_i c_i ≤ 0 exactly when the value is on the right side.

        side "high": value ≤ limit; side "low": value ≥ limit.
        """
        assert self.excess is None, "a bent gauge has rows only along its tangent"
        up = self.sign * (1.0 if self.rising else -1.0) * (1.0 if side == "high" else -1.0)
        return up * (self.num - float(self.index(limit)) * self.den)

    def gradient(self, x: Array) -> Array:
        """d(value)/dx, shape (n,), at one blend x: the chain rule, with value(J) differenced."""
        den = float(x @ self.den)
        linear = float(x @ self.num) / den
        j = float(self.index_of(x))
        h = 1e-6 * max(1.0, abs(j))
        slope = (float(self.value(j + h)) - float(self.value(j - h))) / (2.0 * h)
        along = (self.num - linear * self.den) / den
        return np.asarray(slope * (along if self.excess is None else along + self.excess.gradient(x)))


def weights(table: StockTable, basis: str) -> Array:
    """ω_i of a basis: 1 by mass, 1/ρ_i (against a usual density) by volume; NaN where ρ is unknown."""
    return USUAL_DENSITY / table.density if basis == "volume" else np.ones(len(table))


def property_gauge(table: StockTable, entry: Property) -> Gauge:
    """The gauge of a registry property that is no viscosity; a stock without the value takes no part."""
    omega = weights(table, entry.basis)
    column = table.column(entry.code)
    known = np.isfinite(column) & np.isfinite(omega)
    if entry.index is np.log:
        known &= column > 0.0
    safe = np.where(known, column, 1.0)
    return Gauge(np.where(known, omega * entry.index(safe), 0.0), np.where(known, omega, 0.0),
                 entry.index, entry.value, entry.rising)
