"""How far the measured result of a first batch may lie from the prediction: every error, carried to the blend.

A result is off by the sum of independent parts, each carried to the blend's value v by its first derivative:

    each stock's values   ∂v/∂p_i · σ(p_i)              σ from sigmas.py
    weighing              ∂v/∂x_i · σ(charge_i)/batch   a scale is off by up to half a division, evenly
    law                   half the laws' spread, evenly; or a relative σ fitted to the laboratory's own blends
    laboratory            R/2.77 of the method at the value

Common to every temperature: a lot's deviation (a heavier cut is thicker cold and hot) and the law's (a rule that
predicts too thin does so cold and hot). Independent: each test of a stock and each result of the laboratory, for
they are separate runs. VI is no part of its own: its laboratory works it out from the two viscosities.

A stock's values enter a blend through its index, J_B = Σ x num / Σ x den, so their derivatives are read off the
gauge of the same stocks with every value moved by one σ: nothing here knows a law. What bends there moves the mean
and skews the normal part, which is therefore read as v = y + c (((y − mean)/σ)² − 1) of a y that is not skewed.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from .errors import TargetError
from .gauge import Gauge, property_gauge
from .laws import basis_of, knows_viscosity, viscosity_gauge
from .properties import Array, lookup
from .requirements import Requirement
from .sigmas import WEIGHING, sigma_of_test, sigmas
from .stocks import StockTable
from .target import LAWS, Target
from .walther import LOWEST_KV

BoolArray = np.ndarray[Any, np.dtype[np.bool_]]
KVS = ("kv40", "kv100")
EVEN = 1.0 / np.sqrt(12.0)  # σ of what is spread evenly over a width of 1


class Values(StockTable):
    """Stocks known by their values only, NaN where unknown: what a gauge needs of a StockTable."""

    def __init__(self, kv: Array, density: Array, columns: Mapping[str, Array]) -> None:
        super().__init__(())
        self.kv, self.density = np.maximum(kv, 1.001 * LOWEST_KV), density
        self._columns = columns

    def __len__(self) -> int:
        return len(self.density)

    def column(self, code: str) -> Array:
        """Values of one property, shape (n,)."""
        return self.density if code == "density15" else self._columns[code]


@dataclass(frozen=True)
class Source:
    """One way in which stocks' values are off, each stock for itself: the shift of each value by one σ."""

    name: str  # "lot" (of both viscosities), or the property whose value it is
    shifts: Mapping[str, Array]  # property → (n,), in its unit


@dataclass(frozen=True)
class Effect:
    """What one source does to one reading's numerators and denominators, each (n,)."""

    source: int
    num: Array  # by one σ
    den: Array
    bend_num: Array  # half the second difference
    bend_den: Array


@dataclass(frozen=True)
class Errors:
    """Every error of blends of these n stocks, ready to be carried to a blend."""

    table: StockTable
    target: Target
    codes: tuple[str, ...]  # what is read: the limited properties, and both KVs where the VI is limited
    gauges: Mapping[str, Gauge]
    sources: tuple[Source, ...]
    effects: Mapping[str, tuple[Effect, ...]]
    law_sigma: Mapping[str, float] | None  # relative σ of the law by property; None: from the laws' spread
    rivals: Mapping[str, Mapping[str, Gauge]]  # law → viscosity → gauge, for the spread

    def index(self, code: str) -> int:
        """Position of a reading."""
        return self.codes.index(code)

    def at(self, x: Array) -> Carried:
        """The errors carried to one blend x, mass fractions of shape (n,)."""
        return _carry(self, np.asarray(x, dtype=np.float64))


@dataclass(frozen=True)
class Carried:
    """The errors of one blend, in the unit of each of its m readings; each column is independent of the others."""

    errors: Errors
    x: Array
    values: Array  # (m,) as predicted
    shifted: Array  # (m,) the mean of what is expected: the values with the curve of their index
    skew: Array  # (m,) c: the third cumulant over 6 σ², of the normal part
    gradient: Array  # (m, n) d(value)/dx
    unit: Array  # (m, sources, n) by one σ, of a whole part of each stock
    stocks: Array  # (m, sources, n) by one σ: unit·x
    weighing: Array  # (m, n) by one σ
    law: Array  # (m, kinds) by one σ; normal: column 0 common to all viscosities, then one for each other property
    even: Array  # (m,) half-width of the law's even error, common to all; signed as the others
    even_gradient: Array  # (m, n) d(even)/dx
    laboratory: Array  # (m,) σ of one result, independent of each other
    divided: BoolArray  # (n,) stocks weighed on a scale of a known division: their error does not grow with the charge
    _cones: dict[bytes, tuple[Array, float]] = field(init=False, default_factory=dict, compare=False,
                                                         repr=False)

    def covariance(self) -> Array:
        """Covariance of the readings, shape (m, m), without the law's even part."""
        m = len(self.values)
        columns = np.hstack([self.stocks.reshape(m, -1), self.weighing, self.law, np.diag(self.laboratory)])
        return np.asarray(columns @ columns.T)

    def normal(self, along: Array) -> float:
        """σ of Σ along_r·reading_r without the law's even part; along of shape (m,)."""
        q, still = self.cone(along)
        return float(np.sqrt(float(q @ self.x ** 2) + still))

    def cone(self, along: Array) -> tuple[Array, float]:
        """(q, s), q of shape (n,), with σ(y)² = Σ q_i y_i² + s for blends y that errors are carried to as to this.

        Each stock's own part grows with its share; the law's, the laboratory's and a scale's stand still.
        """
        key = along.tobytes()
        if key not in self._cones:
            m, s, n = self.unit.shape
            own = ((along @ self.unit.reshape(m, s * n)) ** 2).reshape(s, n).sum(axis=0)
            by_charge = (WEIGHING * (along @ self.gradient)) ** 2
            still = float(((along @ self.law) ** 2).sum()) + float(((along * self.laboratory) ** 2).sum())
            by_scale = np.where(self.divided, along @ self.weighing, 0.0)
            self._cones[key] = (own + np.where(self.divided, 0.0, by_charge), still + float((by_scale ** 2).sum()))
        return self._cones[key]

    def sigma(self, code: str) -> float:
        """σ of one reading, all parts."""
        along = np.zeros(len(self.values))
        along[self.errors.index(code)] = 1.0
        return float(np.hypot(self.normal(along), 2.0 * EVEN * abs(float(along @ self.even))))

    def skewed(self, code: str, y: Array, middle: Array) -> Array:
        """What results are, of any shape, where without the skew they would be y about a middle."""
        return np.asarray(y + self._bend(code, y - middle))

    def straight(self, code: str, values: Array | float, middle: Array) -> Array:
        """The y of results about a middle: the inverse of `skewed`, to first order in the skew."""
        return np.asarray(values - self._bend(code, values - middle))

    def _bend(self, code: str, off: Array) -> Array | float:
        r = self.errors.index(code)
        along = np.zeros(len(self.values))
        along[r] = 1.0
        sigma = self.normal(along)
        # Beyond four σ the square would outgrow what it corrects.
        return self.skew[r] * (np.minimum((off / sigma) ** 2, 16.0) - 1.0) if sigma > 0.0 else 0.0


def errors_of(table: StockTable, target: Target, needs: Iterable[Requirement],
              law_sigma: Mapping[str, float] | None = None, own: Iterable[tuple[str, str]] = ()) -> Errors:
    """The errors of blends of a table's stocks, as far as the limits `needs` of a target speak of them.

    law_sigma: relative standard deviation of the law's prediction by property (a viscosity that is missing takes
    that of the nearer of kv40 and kv100); None: from the spread of the laws. own: (stock, property) whose value
    is taken as if it had just been tested. A property that no stock has is left out.
    """
    _check(law_sigma)
    codes = list(dict.fromkeys(code for need in needs for code in (KVS if need.code == "vi" else (need.code,))))
    gauges = {}
    for code in codes:
        entry = lookup(code)
        gauges[code] = (property_gauge(table, entry) if entry.temperature is None or entry.basis != "law" else
                        viscosity_gauge(target.law, table, entry.temperature, target.lessons))
    codes = [code for code in codes if np.any(gauges[code].den != 0.0)]
    sources = _sources(table, codes, tuple(own))
    effects = {code: tuple(_effects(table, target.law, code, sources)) for code in codes}
    rivals = {} if law_sigma is not None else _rivals(table, codes)
    return Errors(table, target, tuple(codes), gauges, sources, effects, law_sigma, rivals)


def _check(law_sigma: Mapping[str, float] | None) -> None:
    for code, value in (law_sigma or {}).items():
        lookup(code)
        if not (np.isfinite(value) and value >= 0.0):
            raise TargetError(f"the law's standard deviation of {code} is {value:g}; give 0 or more, as a part of the "
                              "value", where="law")


def base_values(table: StockTable, codes: Iterable[str]) -> dict[str, Array]:
    """The stocks' own values that readings depend on, by property code, each (n,)."""
    found = {"kv40": table.kv[:, 0], "kv100": table.kv[:, 1], "density15": table.density}
    return found | {code: table.column(code) for code in codes if lookup(code).basis != "law" and code not in found}


def shifted_table(base: Mapping[str, Array], shifts: Mapping[str, Array], sign: float) -> Values:
    """The stocks with some of their values shifted."""
    moved = {code: values + sign * shifts[code] if code in shifts else values for code, values in base.items()}
    return Values(np.column_stack([moved["kv40"], moved["kv100"]]), moved["density15"], moved)


def read_gauge(table: StockTable, law: str, code: str) -> Gauge:
    """The gauge of a property under a law, without what the laboratory taught."""
    entry = lookup(code)
    if entry.basis == "law" and entry.temperature is not None:
        return viscosity_gauge(law, table, entry.temperature)
    return property_gauge(table, entry)


def _sources(table: StockTable, codes: Sequence[str], own: Sequence[tuple[str, str]]) -> tuple[Source, ...]:
    base = base_values(table, codes)
    viscous = any(lookup(code).basis == "law" for code in codes)
    found, lots = [], {}
    for code, values in base.items():
        if code in KVS and not viscous:
            continue
        tested, lot = sigmas(table, code, values, [stock for stock, of in own if of == code])
        if code in KVS:
            lots[code] = lot
            found.append(Source(code, {code: tested}))
        else:
            found.append(Source(code, {code: np.hypot(tested, lot)}))
    if lots:
        found.append(Source("lot", lots))
    return tuple(found)


def _effects(table: StockTable, law: str, code: str, sources: Sequence[Source]) -> Iterable[Effect]:
    entry = lookup(code)
    viscous = entry.basis == "law"
    by_volume = entry.basis == "volume" or (viscous and basis_of(law) == "volume")
    matters = ({*KVS, "lot"} if viscous else {code}) | ({"density15"} if by_volume else set())
    base = base_values(table, () if viscous else (code,))
    middle = read_gauge(table, law, code)
    for k, source in enumerate(sources):
        if source.name not in matters:
            continue
        up, down = (read_gauge(shifted_table(base, source.shifts, sign), law, code) for sign in (1.0, -1.0))
        known = (middle.den != 0.0) & (up.den != 0.0) & (down.den != 0.0)
        yield Effect(k, *(np.where(known, v, 0.0) for v in (
            0.5 * (up.num - down.num), 0.5 * (up.den - down.den),
            0.5 * (up.num + down.num) - middle.num, 0.5 * (up.den + down.den) - middle.den)))


def _rivals(table: StockTable, codes: Sequence[str]) -> dict[str, dict[str, Gauge]]:
    viscous = [code for code in codes if lookup(code).basis == "law"]
    return {law: {code: read_gauge(table, law, code) for code in viscous} for law in LAWS} if viscous else {}


def divisions(table: StockTable, target: Target) -> Array:
    """Scale divisions as parts of the batch, at most all of it, shape (n,); 0 where there is none or no batch."""
    batch = target.batch_kg
    return np.array([0.0 if batch is None or not s.division_kg else min(1.0, s.division_kg / batch)
                     for s in table.stocks])


def unweighable(table: StockTable, target: Target, x: Array) -> str:
    """In words, which charges of a blend x, shape (n,), are less than one scale division; empty: none.

    Such an error is no small one, and told of by its σ alone.
    """
    coarse = divisions(table, target) > x
    codes = [code for code, share, less in zip(table.codes, x, coarse, strict=True) if share > 0.0 and less]
    return (f"{', '.join(codes)}: less than one scale division is charged, no scale of the plant weighs that, and "
            "chances in closed form can be some points off" if codes else "")


def weighing(table: StockTable, target: Target, x: Array) -> Array:
    """σ of each charge as a part of the batch, shape (n,): a division spread evenly, else a part of the charge."""
    steps = divisions(table, target)
    return np.where(x > 0.0, np.where(steps > 0.0, EVEN * steps, WEIGHING * x), 0.0)


def _slopes(gauge: Gauge, j: float) -> tuple[float, float]:
    """value′(J) and value″(J), differenced."""
    h = 1e-4 * max(1.0, abs(j))
    low, middle, high = (float(gauge.value(j + d)) for d in (-h, 0.0, h))
    return (high - low) / (2.0 * h), (high - 2.0 * middle + low) / (h * h)


def _carry(errors: Errors, x: Array) -> Carried:
    m, n = len(errors.codes), len(x)
    values, shifted, third, gradient = np.zeros(m), np.zeros(m), np.zeros(m), np.zeros((m, n))
    unit = np.zeros((m, len(errors.sources), n))
    for r, code in enumerate(errors.codes):
        gauge = errors.gauges[code]
        den = float(x @ gauge.den)
        if den == 0.0:
            values[r] = shifted[r] = np.nan
            continue
        j, plain = float(gauge.index_of(x)), float(x @ gauge.num) / den
        slope, bend = _slopes(gauge, j)
        values[r], gradient[r] = float(gauge.value(j)), gauge.gradient(x)
        mean = cubed = leaning = 0.0
        for effect in errors.effects[code]:
            unit[r, effect.source] = slope * (effect.num - plain * effect.den) / den
            own = unit[r, effect.source] * x
            curve = slope * x * (effect.bend_num - plain * effect.bend_den) / den
            mean += float(curve.sum())
            cubed += float(own ** 2 @ curve)
            leaning += float(own @ (x * effect.den)) / den  # a ratio bends where its denominator moves with it
        variance = float(((unit[r] * x) ** 2).sum())
        shifted[r] = values[r] + mean - leaning + 0.5 * bend * variance / slope ** 2
        third[r] = 6.0 * (cubed - leaning * variance) + 3.0 * bend * (variance / slope) ** 2
    law, even, even_gradient = _law(errors, x, values)
    results = np.array([0.0 if np.isnan(v) else sigma_of_test(code, float(v))
                        for code, v in zip(errors.codes, values, strict=True)])
    scales = gradient * weighing(errors.table, errors.target, x)
    normal = ((unit * x) ** 2).sum(axis=(1, 2)) + (scales ** 2).sum(axis=1) + (
        law ** 2).sum(axis=1) + results ** 2
    skew = np.divide(third, 6.0 * normal, out=np.zeros(m), where=normal > 0.0)
    return Carried(errors, x, values, shifted, skew, gradient, unit, unit * x, scales, law, even, even_gradient,
                   results, divisions(errors.table, errors.target) > 0.0)


def _law(errors: Errors, x: Array, values: Array) -> tuple[Array, Array, Array]:
    """The law's normal part (m, kinds), its even half-width (m,) and that width's gradient (m, n)."""
    m, n = len(errors.codes), len(x)
    normal, even, gradient = np.zeros((m, 1 + m)), np.zeros(m), np.zeros((m, n))
    given = errors.law_sigma
    for r, code in enumerate(errors.codes):
        celsius = lookup(code).temperature if lookup(code).basis == "law" else None
        if given is not None:
            near = None if celsius is None else "kv40" if celsius < 70.0 else "kv100"
            part = given.get(code, given.get(near, 0.0) if near else 0.0)
            normal[r, 0 if celsius is not None else 1 + r] = 0.0 if np.isnan(values[r]) else part * values[r]
        elif celsius is not None:
            even[r], gradient[r] = _half_spread(errors, code, x)
    return normal, even, gradient


def _half_spread(errors: Errors, code: str, x: Array) -> tuple[float, Array]:
    """Half of largest less smallest over the laws that can be computed for a blend, and its gradient (n,)."""
    used = x > 0.0
    gauges = [by_code[code] for law, by_code in errors.rivals.items()
              if knows_viscosity(law, errors.table)[used].all()]
    read = [gauge.read(x) for gauge in gauges]
    high, low = int(np.argmax(read)), int(np.argmin(read))
    slope = gauges[high].gradient(x) - gauges[low].gradient(x)
    return 0.5 * (read[high] - read[low]), 0.5 * slope
