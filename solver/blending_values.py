"""Blending values: the index with which a stock blends under a law, worked back from measured blends.

A VI improver or an additive package does not blend as its neat viscosity says. Under every law the index of a blend
is linear in the index J of one of its stocks, at each temperature by itself:

    J_B Σ x den = Σ_others x num + x_s J den_s + E Σ x den

so J at a temperature is one unknown, found by least squares over the blends that hold the stock:

    least Σ [ln(measured/predicted)/NOISE]²

num and den are those of the law's gauge (laws.py); Wright takes den_s from the stock's own D341 line. J need be no
index of any viscosity: under Refutas and Walther a strong polymer does more hot than cold, and its index lies beyond
what a KV can say. The standard error is that of the least squares, widened where the blends scatter more than NOISE.

Such an index is no property of the stock: it is right under its law, near the shares at which it was measured, and
not elsewhere. D7152 does not cover these stocks. How good a fitted rule can be: base oil with 5 to 30 % olefin
copolymer, Wright with fitted values, about 2 % mean error and 5 to 6 % at worst (SCOG 34(1), doi
10.29017/SCOG.34.1.642).
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.optimize import least_squares

from .errors import RangeError, SolverError
from .lab import FORM_FROM, NOISE, slope
from .lab_blends import shares_of
from .laws import basis_of, check_law, index_of_law, knows_viscosity, viscosity_gauge
from .measured import Measured
from .measured_doubts import FACTOR, Question, fit_for_use, questions
from .properties import Array, lookup
from .target import Effective, Lesson
from .walther import HIGHEST_KV, LOWEST_KV

WIDER = 0.1  # of its ends, by which the range of shares is used beyond what was measured
ROUGH = 3.0  # % mean error of the blends beyond which one index does not serve the whole range of shares
LITTLE = 0.03  # mass fraction below which a stock cannot be why a result is off by a factor
OPEN_FACTOR, OPEN_AT = 5.0, 1000.0  # open by what such a factor is worth at such a KV [mm²/s]: too little to tell


@dataclass(frozen=True)
class At:
    """The index of a stock at one temperature, and what it rests on."""

    index: float  # the law's index: Refutas number, or W of D341
    own: float  # what its viscosity on record says it is
    error: float  # standard error, in the index
    error_pct: float  # what that is worth in the KV of a blend in the middle of the range of shares
    kv: float | None  # the KV of that index, mm²/s; None outside the scale of viscosities
    blends: tuple[str, ...]
    alone_pct: float  # mean error of these results by its viscosity on record
    fitted_pct: float  # … with the index
    leave_one_out_pct: float | None  # each blend predicted from the others; None below four


@dataclass(frozen=True)
class BlendingValue:
    """The index with which a stock blends under a law at each temperature, and where it may be used."""

    stock: str
    law: str
    at: Mapping[float, At]  # °C → figures
    shares: tuple[float, float]  # mass fractions of the blend between which it may be used
    blends: tuple[str, ...]  # what it rests on
    left_out: tuple[str, ...] = ()  # blends that hold it and are in question, so that they teach nothing
    too_open: Mapping[float, str] = field(default_factory=dict)  # °C at which it was measured and cannot be told → why

    @property
    def rough(self) -> bool:
        """Does one index not serve the whole range: keep to blends near the share that is used?"""
        return any(one.fitted_pct > ROUGH for one in self.at.values())

    @property
    def provisional(self) -> bool:
        """Does it rest on fewer than four blends at some temperature?"""
        return any(len(one.blends) < FORM_FROM for one in self.at.values())

    def effective(self, version: str = "") -> Effective:
        """As the solver takes it."""
        return Effective(self.stock, self.law, {t: one.index for t, one in self.at.items()}, self.shares, version,
                         self.provisional)


@dataclass(frozen=True)
class _Results:
    """The results at one temperature, each array of shape (n,): J_B = (num + own·J)/den + excess."""

    law: str
    names: tuple[str, ...]
    kv: Array  # measured, mm²/s
    share: Array  # mass fraction of the stock
    num: Array  # Σ x num of the others
    own: Array  # x den of the stock
    den: Array  # Σ x den of all
    excess: Array
    entered: float  # the stock's index by its viscosity in the latest of these blends

    def where(self, keep: Array) -> _Results:
        """The results where keep, shape (n,), is true."""
        kv, share, num, own, den, excess = (x[keep] for x in (self.kv, self.share, self.num, self.own, self.den,
                                                              self.excess))
        names = tuple(name for name, kept in zip(self.names, keep, strict=True) if kept)
        return _Results(self.law, names, kv, share, num, own, den, excess, self.entered)

    def off(self, j: float) -> Array:
        """ln(predicted/measured) with this index of the stock, shape (n,)."""
        with np.errstate(over="ignore"):
            kv = index_of_law(self.law)[1]((self.num + self.own * j) / self.den + self.excess)
        return np.asarray(np.log(np.maximum(kv, 1e-6) / self.kv))

    def slopes(self) -> Array:
        """d ln KV/dJ of the stock's index at what was measured, shape (n,)."""
        return np.asarray(self.own / self.den / slope(self.law, self.kv))


def blending_value(measured: Sequence[Measured], stock: str, law: str, taught: Sequence[Lesson] = (),
                   known: Collection[str] | None = None) -> BlendingValue:
    """Work back the index with which a stock blends under a law, at each temperature at which it was measured.

    Doubtful blends that nobody has confirmed are left out, and so are blends with a stock whose KVs (under a volume
    law density) are not known. `taught`: lessons in use; one on the stock's own index is what is worked back anew,
    all others count. known: see `fit_for_use`.

    Raises SolverError with the reason: not in the blends, all in question, no viscosity measured, share too small.
    """
    check_law(law)
    holding = [blend for blend in measured if _share(blend, stock) > 0.0]
    if not holding:
        raise SolverError(f"{stock} is in none of the {len(measured)} measured blends; measure one that holds it")
    sound = _sound(holding, stock, law, taught, known)
    used = [blend for blend in sound if knows_viscosity(law, blend.table()).all()]
    _refuse_unusable(stock, law, holding, sound, used)
    others = tuple(each for each in taught if not (isinstance(each, Effective) and each.stock == stock))
    found: dict[float, At] = {}
    too_open: dict[float, str] = {}
    results = _by_temperature(used, stock, law, others)
    if not results:
        raise SolverError(f"{stock}: no blend that holds it was measured for viscosity, such as KV40; measure that")
    for celsius, own in sorted(results.items()):
        why = _too_open(stock, own)
        if why:
            too_open[celsius] = why
        else:
            found[celsius] = _worked_back(own)
    if not found:
        raise SolverError(next(iter(too_open.values())))
    names = {name for one in found.values() for name in one.blends}
    rests = tuple(blend.name for blend in used if blend.name in names)
    left_out = tuple(blend.name for blend in holding if not any(blend is one for one in sound))
    return BlendingValue(stock, law, found, _range([results[t].share for t in found]), rests, left_out, too_open)


def _share(blend: Measured, stock: str) -> float:
    return sum(part.share for part in blend.parts if part.stock == stock)


def _sound(holding: Sequence[Measured], stock: str, law: str, taught: Sequence[Lesson],
           known: Collection[str] | None) -> list[Measured]:
    """Those that may teach: what its own index is is sought, so a result far from what that says is no reason yet
    to doubt the result, unless a slip of the pen would explain it or the stock is too little of the blend."""
    judged = [replace(blend, parts=tuple(replace(p, kv40=None, kv100=None) if p.stock == stock else p
                                         for p in blend.parts)) for blend in holding]
    kept, _ = fit_for_use(judged, law, known, taught)

    def slips(blend: Measured) -> bool:
        if blend.confirmed:
            return False
        if _share(blend, stock) < LITTLE:
            return bool(questions(blend, law, known, taught))
        # Refutas is the judge: under Wright a thick pair that was entered for another law is out tenfold by itself.
        return any(_is_slip(blend, q) for q in questions(blend, "refutas", known, taught))

    return [blend for blend, as_judged in zip(holding, judged, strict=True)
            if any(as_judged is one for one in kept) and not slips(blend)]


def _is_slip(blend: Measured, asked: Question) -> bool:
    if asked.suggestion is None or asked.cell not in blend.values:
        return False
    times = blend.values[asked.cell] / asked.suggestion
    return not 1.0 / FACTOR <= times <= FACTOR


def _refuse_unusable(stock: str, law: str, holding: Sequence[Measured], sound: Sequence[Measured],
                     used: Sequence[Measured]) -> None:
    if not sound:
        raise SolverError(f"{stock}: each of the {len(holding)} blends that hold it is in question; settle the "
                          "questions, or measure another")
    if not used:
        table = sound[0].table()
        lacking = ", ".join(code for code, has in zip(table.codes, knows_viscosity(law, table), strict=True) if not has)
        need = "KV40, KV100 and density" if basis_of(law) == "volume" else "KV40 and KV100"
        raise SolverError(f"{stock}: the law {law} needs {need} of every stock in a blend, which are "
                          f"not known of {lacking} in {sound[0].name}; enter them, and record the blend anew")


def _by_temperature(blends: Sequence[Measured], stock: str, law: str, taught: Sequence[Lesson]
                    ) -> dict[float, _Results]:
    rows: dict[float, list[tuple[str, tuple[float, ...], float]]] = {}
    for blend in blends:
        table, x = blend.table(), shares_of(blend)
        own = table.index(stock)
        others = np.where(np.arange(len(x)) == own, 0.0, x)
        for code, value in blend.values.items():
            entry = lookup(code)
            if entry.basis != "law" or entry.temperature is None:
                continue
            try:
                gauge = viscosity_gauge(law, table, entry.temperature, taught)
            except RangeError:
                continue  # a stock is too thin there for the law to be read
            excess = 0.0 if gauge.excess is None else float(gauge.excess.value(x))
            row = (float(value), float(x[own]), float(others @ gauge.num), float(x[own] * gauge.den[own]),
                   float(x @ gauge.den), excess)
            entered = float(gauge.num[own] / gauge.den[own])
            rows.setdefault(float(entry.temperature), []).append((blend.name, row, entered))
    found = {}
    for celsius, each in rows.items():
        kv, share, num, part, den, off = np.array([row for _, row, _ in each]).T
        found[celsius] = _Results(law, tuple(name for name, _, _ in each), kv, share, num, part, den, off, each[-1][2])
    return found


def _range(shares: Sequence[Array]) -> tuple[float, float]:
    """Where the stock was measured at every temperature, a tenth wider; at any of them where none is common."""
    lows, highs = [float(s.min()) for s in shares], [float(s.max()) for s in shares]
    low, high = (max(lows), min(highs)) if max(lows) <= min(highs) else (min(lows), max(highs))
    return low * (1.0 - WIDER), min(1.0, high * (1.0 + WIDER))


def _too_open(stock: str, results: _Results) -> str:
    """Why nothing can be told: what NOISE leaves open in the best single blend. More blends of the same stocks
    do not help, for the law and the stocks' own values are out by as much in each of them."""
    openness = float((NOISE / np.abs(results.slopes())).min())
    allowed = float(slope(results.law, np.array([OPEN_AT]))[0]) * float(np.log(OPEN_FACTOR))
    if openness <= allowed:
        return ""
    largest = float(results.share.max())
    return (f"{stock}: at most {100.0 * largest:.3g} % of it in the blends is too little to tell; a result is sure to "
            f"{100.0 * NOISE:g} %, which leaves its {index_word(results.law)} open by {openness:.2g}; measure a blend "
            f"with about {100.0 * min(1.0, 1.2 * largest * openness / allowed):.2g} %")


def index_word(law: str) -> str:
    """What the law's index is called: "number" (Refutas), or "W" (of D341)."""
    return "number" if law == "refutas" else "W"


def _worked_back(results: _Results) -> At:
    j = _fit(results)
    slopes, off = results.slopes(), results.off(j)
    count = len(off)
    scatter = float(np.sqrt(max(1.0, float(((off / NOISE) ** 2).sum()) / (count - 1)))) if count > 1 else 1.0
    error = scatter * NOISE / float(np.sqrt((slopes**2).sum()))
    value = index_of_law(results.law)[1]
    with np.errstate(over="ignore"):
        kv = float(value(j))
    left_out = _leave_one_out(results) if count >= FORM_FROM else None
    return At(j, results.entered, error, 100.0 * error * _slope_in_the_middle(results),
              kv if LOWEST_KV <= kv <= HIGHEST_KV else None, results.names, _mean_pct(results.off(results.entered)),
              _mean_pct(off), left_out)


def _fit(results: _Results) -> float:
    """J with the least squares. Each result alone gives one exactly, and their weighted mean is all but it."""
    index, _ = index_of_law(results.law)
    slopes = results.slopes()
    each = ((np.asarray(index(results.kv)) - results.excess) * results.den - results.num) / results.own
    start = float((slopes**2 @ each) / (slopes**2).sum())
    unit = NOISE / float(np.sqrt((slopes**2).sum()))
    answer = least_squares(lambda u: results.off(start + float(u[0]) * unit) / NOISE, [0.0], xtol=1e-12, ftol=1e-12,
                           gtol=1e-12)
    return start + float(answer.x[0]) * unit


def _slope_in_the_middle(results: _Results) -> float:
    """|d ln KV/dJ| of a blend that holds as much of the stock as the middle of what was measured."""
    middle = 0.5 * float(results.share.min() + results.share.max())
    # The slope goes all but in proportion to the share: the nearest blend tells it.
    near = int(np.argmin(np.abs(results.share - middle)))
    return float(np.abs(results.slopes()[near])) * middle / float(results.share[near])


def _leave_one_out(results: _Results) -> float:
    places = np.arange(len(results.kv))
    off = [results.where(places == k).off(_fit(results.where(places != k))) for k in places]
    return _mean_pct(np.concatenate(off))


def _mean_pct(off: Array) -> float:
    return 100.0 * float(np.abs(np.expm1(off)).mean())
