"""Small convex problems over shares: linear rows, and rows that grow with an error whose size is a norm.

    row·x + weight·√(Σ q x² + still) ≤ 0   over   Σ x = 1,  lo ≤ x ≤ hi

A tangent of such a row is linear and cuts nothing off that it lets through, so a linear programme with tangents
chooses the stocks; over the few it chooses the problem is solved as it is, by sequential quadratic programming.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.optimize import Bounds, minimize

from .linear import Polytope, tidy
from .properties import Array

IndexArray = np.ndarray[Any, np.dtype[np.intp]]


@dataclass(frozen=True)
class Cone:
    """One side of one limit, errors carried as to one blend: row·y + weight·√(Σ q y² + still) ≤ 0 over Σ y = 1."""

    row: Array
    weight: float
    q: Array
    still: float
    unit: float  # of the left side: the error there

    def sigma(self, y: Array) -> float:
        """The root."""
        return float(np.sqrt(max(float(self.q @ y ** 2) + self.still, 1e-300)))

    def tangent(self, y: Array) -> Array:
        """The linear row that touches it at y: what it cuts off lies outside."""
        sigma = self.sigma(y)
        return np.asarray(self.row + self.weight * (self.q * y + self.still) / sigma)

    def value(self, y: Array) -> float:
        """The left side."""
        return float(self.row @ y) + self.weight * self.sigma(y)

    def gradient(self, y: Array) -> Array:
        """d(value)/dy."""
        return np.asarray(self.row + self.weight * self.q * y / self.sigma(y))


def cheapest(base: Polytope, cones: list[Cone], price: Array, corner: Array, start: Array) -> Array:
    """The cheapest blend within rows and cones of the stocks of two blends."""
    which = np.flatnonzero(((corner > 0.0) | (start > 0.0)) & (base.hi > 0.0))
    begin = 0.5 * (corner + start) if np.all(base.hi[start > 0.0] > 0.0) else corner
    y = convex(base, cones, which, begin, price / max(abs(float(price @ corner)), 1e-12))
    return corner if y is None else y


def convex(base: Polytope, cones: list[Cone], which: IndexArray, start: Array,
           price: Array | None) -> Array | None:
    """A small convex problem by SLSQP, over the stocks `which`: the least price·x within rows and cones, or, where
    price is None, the x that lies deepest inside all cones, measured in their errors. None where it finds none."""
    n, k = len(start), len(which)
    rows, hold = base.rows[:, which], base.hold
    deep = 1.0 if price is None else 0.0
    aim = np.append(np.zeros(k) if price is None else price[which], -deep)  # the last variable is the depth
    scales = [1.0 / max(cone.unit if price is None else float(np.max(np.abs(cone.row))), 1e-300) for cone in cones]

    def blend(y: Array) -> Array:
        x = np.zeros(n)
        x[which] = y[:k]
        return x

    def inside(y: Array) -> Array:
        x = blend(y)
        return np.concatenate([-(rows @ y[:k]) - hold,
                               [-u * cone.value(x) - y[k] for cone, u in zip(cones, scales, strict=True)]])

    def slopes(y: Array) -> Array:
        x = blend(y)
        own = np.vstack([-rows, *(-u * cone.gradient(x)[which] for cone, u in zip(cones, scales, strict=True))])
        return np.column_stack([own, np.append(np.zeros(len(rows)), -np.ones(len(cones)))])

    bounds = Bounds(np.append(base.lo[which], -50.0 * deep),
                    np.append(np.maximum(base.lo, base.hi)[which], 50.0 * deep))
    found = minimize(lambda y: float(aim @ y), np.append(start[which], 0.0), jac=lambda y: aim, method="SLSQP",
                     bounds=bounds, options={"maxiter": 60, "ftol": 1e-6 if price is None else 1e-10},
                     constraints=[{"type": "ineq", "fun": inside, "jac": slopes},
                                  {"type": "eq", "fun": lambda y: np.array([y[:k].sum() - 1.0]),
                                   "jac": lambda y: np.append(np.ones(k), 0.0)[None, :]}])
    x = blend(found.x)
    outside = max(abs(float(x.sum()) - 1.0), float(np.max(rows @ x[which] + hold, initial=0.0)),
                  float(np.max(base.lo - x)), float(np.max(x - base.hi)))
    return tidy(x, base) if outside <= 1e-7 else None
