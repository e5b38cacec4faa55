"""Chances in closed form: of each limit, and of all together.

    P(limit) = 1 − P(X > v − low) − P(X > high − v),   X ~ N(0, σ) + U(−h, h)   (tails.py)

with σ, its skew and h from uncertainty.py at the expected result v. A VI of at least V is KV40 ≤ U_V(KV100): the
distance U_V(KV100) − KV40 is nearly linear in both, and has its own σ. Two sides of one limit are never missed at
once, so their tails add. All limits together: the normal distribution of all readings, each conditioned on those
before (Genz, J. Comput. Graph. Stat. 1 (1992) 141), the VI as a bound on KV40 that follows KV100, averaged over the
law's even error on a fixed lattice of points. The VI alone is found in the same way, for its curve has kinks.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr, ndtri

from .properties import Array
from .requirements import Requirement
from .tails import tail
from .uncertainty import Carried
from .viscosity_index import LOWEST_KV100, indices, kv40_at

POINTS = 4096  # of the lattice, a power of 2: about 3e-5 of a chance
POINTS_OF_ONE = 1024  # for the VI alone: about 1e-5
GENERATORS = (1, 182667, 469891, 498753, 110745, 446247, 250185, 118627, 245333, 283199, 408519, 391023, 246327, 126539,
              399185, 461527, 300343, 69681, 516695, 436179)


@dataclass(frozen=True)
class Side:
    """One side of one limit at a blend: how far inside it the expected result lies, and along which readings."""

    need: Requirement
    side: str
    limit: float
    distance: float  # in the unit of the reading; of the VI mm²/s of KV40
    along: Array  # (m,) d(distance)/d(reading)
    skew: float = 0.0  # of what takes the result outside: the third cumulant of the normal part over its σ³


def known(carried: Carried, need: Requirement) -> bool:
    """Is the blend's value of a limited property known: in every stock used, or as far as the operator allows?"""
    errors = carried.errors
    codes = ("kv40", "kv100") if need.code == "vi" else (need.code,)
    for code in codes:
        if code not in errors.codes or np.isnan(carried.values[errors.index(code)]):
            return False
        lacking = (carried.x > 0.0) & (errors.gauges[code].den == 0.0)
        if lacking.any() and not need.unknown_ok:
            return False
    return need.code != "vi" or bool(carried.values[errors.index("kv100")] >= LOWEST_KV100)


def sides(carried: Carried, needs: Iterable[Requirement]) -> list[Side]:
    """The closed sides of the limits whose values are known, at the expected (mean) results of a blend."""
    found = []
    errors, mean = carried.errors, carried.shifted
    for need in needs:
        if not known(carried, need):
            continue
        for side, limit, sign in (("low", need.low, 1.0), ("high", need.high, -1.0)):
            if limit is None:
                continue
            along = np.zeros(len(mean))
            if need.code != "vi":
                along[errors.index(need.code)] = sign
                r = errors.index(need.code)
                sigma = carried.normal(along)
                skew = -sign * 6.0 * float(carried.skew[r]) / sigma if sigma > 0.0 else 0.0
                found.append(Side(need, side, limit, sign * (float(mean[r]) - limit), along, skew))
                continue
            u, y = float(mean[errors.index("kv40")]), float(mean[errors.index("kv100")])
            rise = slope_of_curve(limit, y, carried.sigma("kv100"))
            along[errors.index("kv40")], along[errors.index("kv100")] = -sign, sign * rise
            found.append(Side(need, side, limit, sign * (float(kv40_at(limit, max(LOWEST_KV100, y))) - u), along))
    return found


def slope_of_curve(vi: float, kv100: float, sigma: float) -> float:
    """dKV40/dKV100 along the curve of one VI about a KV100 whose result scatters by σ [mm²/s].

    Taken over one σ to either side: the published table has kinks, and the results lie on both sides of one.
    """
    h = max(sigma, 1e-5 * kv100)
    low, high = max(LOWEST_KV100, kv100 - h), max(LOWEST_KV100, kv100) + h
    return float(kv40_at(vi, high) - kv40_at(vi, low)) / (high - low)


def missed_by(carried: Carried, side: Side) -> float:
    """Chance that the result lies outside one side of a limit."""
    tolerance = side.need.tolerance()
    if side.need.code == "vi":
        tolerance *= 0.05 * float(carried.values[carried.errors.index("kv40")])  # VI points to mm²/s, roomily
    return tail(side.distance, carried.normal(side.along), float(side.along @ carried.even), side.skew, tolerance)


def closed_chances(carried: Carried, needs: Iterable[Requirement]) -> dict[str, float]:
    """The chance of each limit whose value is known, in closed form, by property code."""
    found: dict[str, float] = {}
    for need in needs:
        if not known(carried, need):
            continue
        if need.code == "vi":  # the published table has kinks, so the distance to its curve is not quite linear
            found["vi"] = together(carried, [need], POINTS_OF_ONE) or 0.0
        else:
            found[need.code] = max(0.0, 1.0 - sum(missed_by(carried, side) for side in sides(carried, [need])))
    return found


# All limits together

def together(carried: Carried, needs: Iterable[Requirement], points: int = POINTS) -> float | None:
    """The chance that every limit whose value is known is met at once; None where none is known."""
    errors = carried.errors
    by_code = {need.code: need for need in needs if known(carried, need)}
    if not by_code:
        return None
    vi = by_code.get("vi")
    order = [errors.index(code) for code in ("kv100", "kv40") if code in by_code or vi is not None]
    order += [errors.index(code) for code in by_code if code not in ("kv40", "kv100", "vi")]
    factor = _cholesky(carried.covariance()[np.ix_(order, order)])
    at = _lattice(points, len(order) + 1)
    even = 2.0 * at[0] - 1.0
    y = np.zeros((len(order), points))
    values: dict[str, Array] = {}
    weight = np.ones(points)
    for i, r in enumerate(order):
        code = errors.codes[r]
        expected = carried.shifted[r] + carried.even[r] * even
        middle = expected + factor[i, :i] @ y[:i]
        low, high = (carried.straight(code, bound, expected) for bound in _bounds(
            by_code.get(code), vi if code == "kv40" else None, values.get("kv100")))
        spread = float(factor[i, i])
        if spread <= 0.0:
            weight = weight * ((middle >= low) & (middle <= high))
            values[code] = carried.skewed(code, middle, expected)
            continue
        below, under = ndtr((low - middle) / spread), ndtr((high - middle) / spread)
        weight = weight * np.maximum(0.0, under - below)
        y[i] = ndtri(np.clip(below + at[i + 1] * (under - below), 1e-15, 1.0 - 1e-15))
        values[code] = carried.skewed(code, middle + spread * y[i], expected)
    return float(weight.mean())


def _bounds(need: Requirement | None, vi: Requirement | None,
            kv100: Array | None) -> tuple[Array | float, Array | float]:
    """Bounds of one reading; of KV40 those of the VI too, which follow KV100."""
    low: Array | float = -np.inf
    high: Array | float = np.inf
    if need is not None:
        hair = need.tolerance()
        low = low if need.low is None else need.low - hair
        high = high if need.high is None else need.high + hair
    if vi is not None and kv100 is not None:
        at = np.maximum(kv100, LOWEST_KV100)
        if vi.low is not None:
            high = np.minimum(high, np.where(kv100 < LOWEST_KV100, -np.inf, kv40_at(vi.low - vi.tolerance(), at)))
        if vi.high is not None:
            low = np.maximum(low, kv40_at(vi.high + vi.tolerance(), at))
    return low, high


def _cholesky(covariance: Array) -> Array:
    """Lower factor of a covariance that may be singular: what is left of a reading that follows is exactly 0."""
    d = len(covariance)
    factor = np.zeros((d, d))
    for i in range(d):
        for j in range(i + 1):
            rest = float(covariance[i, j] - factor[i, :j] @ factor[j, :j])
            if i == j:
                factor[i, i] = np.sqrt(rest) if rest > 1e-12 * covariance[i, i] else 0.0
            elif factor[j, j] > 0.0:
                factor[i, j] = rest / factor[j, j]
    return factor


def _lattice(points: int, dimensions: int) -> Array:
    """Points that fill a cube evenly, shape (dimensions, points): a rank-1 lattice, folded so that the cube's faces
    meet. Its generators are those of Cools, Kuo and Nuyens, SIAM J. Sci. Comput. 28 (2006) 2162 (from memory; a
    test holds it against many more points)."""
    steps = np.array([GENERATORS[i % len(GENERATORS)] + 2 * (i // len(GENERATORS)) for i in range(dimensions)])
    at = (0.5 / points + np.outer(steps, np.arange(points)) / points) % 1.0
    return np.asarray(1.0 - np.abs(2.0 * at - 1.0))


def along_of(carried: Carried, code: str) -> Array:
    """d(property)/d(reading), shape (m,): of the VI by both viscosities."""
    errors = carried.errors
    along = np.zeros(len(errors.codes))
    if code != "vi":
        along[errors.index(code)] = 1.0
        return along
    pair = {c: float(carried.values[errors.index(c)]) for c in ("kv40", "kv100")}
    for each, value in pair.items():
        h = 1e-5 * value
        up, down = (dict(pair) | {each: value + d} for d in (h, -h))
        rise = indices(up["kv40"], up["kv100"]) - indices(down["kv40"], down["kv100"])
        along[errors.index(each)] = float(rise) / (2.0 * h)
    return along


def value_of(carried: Carried, code: str) -> float:
    """The predicted value of a limited property."""
    if code != "vi":
        return float(carried.values[carried.errors.index(code)])
    return float(indices(*(carried.values[carried.errors.index(c)] for c in ("kv40", "kv100"))))
