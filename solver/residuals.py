"""Residuals: what the laboratory found against what the law had said, by law, product and stock; and their drift.

A residual is 100·(measured/predicted − 1) % of a KV, a density or a mass balance, and measured − predicted in the
property's own unit where a ratio means nothing (VI, flash, pour).

**Drift.** The residuals of one property in the order of their dates go on an EWMA chart (S. W. Roberts, 1959; from
memory), z_i = λ r_i + (1 − λ) z_{i−1} from z_0 = 0: what is known beforehand is that the prediction is right. The
limits stand at 2 σ of z_i, σ √(λ/(2 − λ)·(1 − (1 − λ)^{2i})), with σ of one residual from the median step between
neighbours /0.954, which neither a step nor a trend disturbs, and never below the laboratory's own R/2.77. At 2 σ
about one look in twenty is a false alarm (usual charts take 2.7 to 3): an alarm is a reason to look, not a proof.

**A step against a slow change.** Four stories are laid against the residuals by least squares: no bias, one steady
bias, a straight trend, a step (at least two blends on each side). Told is the one with the least Σ(r − story)²/σ²
+ price. A bias must pay for itself at the same 2 σ (price 4); each constant more costs ln n (Schwarz's criterion):
a trend one, a step three, for its place is the best of many and counts twice.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np

from .errors import RangeError
from .gauge import property_gauge
from .lab_blends import shares_of
from .laws import knows_viscosity, viscosity_gauge
from .measured import Measured
from .measured_doubts import fit_for_use
from .properties import Array, lookup
from .sigmas import sigma_of_test
from .stocks import StockTable
from .target import LAWS, Lesson
from .viscosity_index import indices

BY_DIFFERENCE = ("vi", "flash", "pour")  # a ratio of these means nothing
WEIGHT = 0.3  # λ of the EWMA chart
LIMIT = 2.0  # σ of the chart at which it alarms
DRIFT_FROM = 4  # blends from which on a chart says anything
STORY_FROM = 6  # blends from which on a step is told from a trend
SIGMA_FROM = 4  # blends from which on a law's σ is taken from its residuals
OWN_PART = 1.0 / 3.0  # of the residuals' σ that stays the law's, however well the laboratory's scatter explains them

CAUSES = {
    "step": "a new lot or certificate, a tank topped up, an instrument recalibrated, a stock swapped",
    "trend": "a scale that drifts, a stock that oxidises or evaporates, a heel or line that builds up",
    "bias": "the law itself on these stocks, a heel or line ignored, a certificate or typical value in place of a test",
}


@dataclass(frozen=True)
class Residual:
    """One result against its prediction."""

    blend: str
    product: str
    measured_on: str  # ISO date or empty
    code: str
    law: str
    measured: float  # in the property's unit
    predicted: float
    shares: dict[str, float]  # stock → mass fraction

    @property
    def off(self) -> float:
        """Measured less predicted: % of the prediction, or in the property's own unit (BY_DIFFERENCE)."""
        if self.code in BY_DIFFERENCE:
            return self.measured - self.predicted
        return 100.0 * (self.measured / self.predicted - 1.0)

    @property
    def own_sigma(self) -> float:
        """σ of one result by the laboratory's own precision, R/2.77, on the scale of `off`."""
        sigma = sigma_of_test(self.code, self.measured)
        return sigma if self.code in BY_DIFFERENCE else 100.0 * sigma / self.predicted


@dataclass(frozen=True)
class Summary:
    """Residuals of one kind, on the scale of `Residual.off`."""

    count: int
    mean: float
    sigma: float | None  # about their mean; None of one
    rms: float  # about zero
    worst: float  # the largest, with its sign


@dataclass(frozen=True)
class StockResidual:
    """What the residuals of the blends that hold a stock say of it."""

    stock: str
    count: int  # blends that hold it
    mean: float  # of their residuals, weighted by its share
    error: float | None  # standard error of that mean; None of one blend
    without: float | None  # mean of the blends that do not hold it; None where all do
    always_with: tuple[str, ...]  # stocks that stand in just the same blends: they cannot be told apart

    @property
    def tells(self) -> bool:
        """Do its blends differ from the others by more than 2 standard errors, and from no other stock's?"""
        if self.error is None or self.without is None or self.always_with:
            return False
        return abs(self.mean - self.without) > 2.0 * self.error


def residuals(measured: Iterable[Measured], law: str, taught: Sequence[Lesson] = (),
              codes: Sequence[str] | None = None) -> list[Residual]:
    """Every result that can be predicted from the blend's stocks as they were, in the order of blends given.

    A property is predicted only where every stock in the blend has it; the rest is passed over. `taught`: lessons
    that are in use. codes: only these properties.
    """
    found = []
    for blend in measured:
        table = blend.table()
        x = shares_of(blend)
        for code, value in blend.values.items():
            if codes is not None and code not in codes:
                continue
            predicted = _predicted(table, x, law, code, taught)
            if predicted is not None:
                found.append(Residual(blend.name, blend.product, blend.measured_on, code, law, float(value), predicted,
                                      {p.stock: float(s) for p, s in zip(blend.parts, x, strict=True)}))
    return found


def _predicted(table: StockTable, x: Array, law: str, code: str, taught: Sequence[Lesson]) -> float | None:
    entry = lookup(code)
    if entry.basis in ("law", "curve"):
        if not knows_viscosity(law, table).all():
            return None
        try:
            celsius = (40.0, 100.0) if entry.basis == "curve" else (float(entry.temperature or 0.0),)
            kv = [viscosity_gauge(law, table, t, taught).read(x) for t in celsius]
        except RangeError:
            return None
        value = float(indices(*kv)) if entry.basis == "curve" else kv[0]
    else:
        gauge = property_gauge(table, entry)
        if not np.all(gauge.den != 0.0):
            return None
        value = gauge.read(x)
    return value if np.isfinite(value) and (value != 0.0 or code in BY_DIFFERENCE) else None


def summary(found: Sequence[Residual]) -> Summary | None:
    """Mean, scatter and worst of residuals of one property; None of none."""
    if not found:
        return None
    off = np.array([r.off for r in found])
    return Summary(len(off), float(off.mean()), float(off.std(ddof=1)) if len(off) > 1 else None,
                   float(np.sqrt((off**2).mean())), float(off[np.argmax(np.abs(off))]))


def by_law(measured: Sequence[Measured], code: str, laws: Sequence[str] = LAWS) -> dict[str, Summary]:
    """Each law's residuals of one property; a law that can predict none is left out."""
    each = {law: summary(residuals(measured, law, codes=(code,))) for law in laws}
    return {law: one for law, one in each.items() if one is not None}


def by_product(found: Iterable[Residual]) -> dict[tuple[str, str], Summary]:
    """(product, property) → its residuals."""
    groups: dict[tuple[str, str], list[Residual]] = {}
    for one in found:
        groups.setdefault((one.product, one.code), []).append(one)
    return {key: each for key, own in groups.items() if (each := summary(own)) is not None}


def by_stock(found: Sequence[Residual]) -> dict[str, StockResidual]:
    """What residuals of one property say of each stock: those of the blends that hold it, weighted by its share.

    It can tell that blends with a stock come out heavy or light, and no more: a stock that is always mixed with
    the same others shares their blame, and the mean of a stock is not by how much that stock is off.
    """
    stocks = sorted({stock for one in found for stock in one.shares})
    holds = {stock: frozenset(i for i, one in enumerate(found) if one.shares.get(stock, 0.0) > 0.0) for stock in stocks}
    answer = {}
    for stock in stocks:
        inside = sorted(holds[stock])
        share = np.array([found[i].shares[stock] for i in inside])
        off = np.array([found[i].off for i in inside])
        mean = float(share @ off / share.sum())
        error = None
        if len(inside) > 1:
            scatter = max(float(off.std(ddof=1)), min(found[i].own_sigma for i in inside))
            error = float(scatter * np.sqrt((share**2).sum()) / share.sum())
        others = [one.off for i, one in enumerate(found) if i not in holds[stock]]
        alike = tuple(s for s in stocks if s != stock and holds[s] == holds[stock])
        without = float(np.mean(others)) if others else None
        answer[stock] = StockResidual(stock, len(inside), mean, error, without, alike)
    return answer


def residual_sigma(measured: Sequence[Measured], law: str, taught: Sequence[Lesson] = ()) -> dict[str, float]:
    """Relative σ of the law's prediction by property, as the plant's own blends show it.

    √(Σ r²/(n − 1)) about zero, so a steady bias counts, less the laboratory's own R/2.77 (which counts for itself
    elsewhere), but never less than a third of it. Doubtful blends are left out. A property with fewer than four
    blends, and VI, flash and pour, which have no relative error, are left out; empty: nothing is known.
    """
    kept, _ = fit_for_use(measured, law, taught=taught)
    groups: dict[str, list[Residual]] = {}
    for one in residuals(kept, law, taught):
        if one.code not in BY_DIFFERENCE:
            groups.setdefault(one.code, []).append(one)
    sigmas = {}
    for code, own in groups.items():
        if len(own) >= SIGMA_FROM:
            square = sum(r.off**2 for r in own) / (len(own) - 1)
            laboratory = float(np.mean([r.own_sigma**2 for r in own]))
            sigmas[code] = 0.01 * float(np.sqrt(max(square - laboratory, OWN_PART**2 * square)))
    return sigmas


@dataclass(frozen=True)
class Drift:
    """Residuals of one property in the order of their dates: does the chart alarm, and which story fits."""

    count: int
    sigma: float  # of one residual
    latest: float  # the chart's last value: the weighted mean of the latest residuals
    limit: float  # 2 σ of that value
    alarm: bool
    since: str  # the blend from which on the chart has been outside; empty without an alarm
    story: str  # "none", "bias", "trend", "step"; "few" where the blends are too few to say
    size: float  # step or steady bias; of a trend, what it has moved from the first blend to the last
    at: str  # the blend with which a step begins, else empty
    chart: tuple[float, ...]  # the chart's values, in order
    order: tuple[str, ...]  # the blends, in order
    unit: str  # "%" or the property's own

    @property
    def says(self) -> str:
        """The story with what usually causes it, in one sentence."""
        amount = f"{self.size:+.2g} {self.unit}".rstrip()
        if self.story == "few":
            return f"{self.count} blends are too few to tell a step from a slow bias; {STORY_FROM} are needed"
        if self.story == "none":
            return "no drift: the residuals scatter about zero"
        words = {"step": f"a sudden step of {amount} from {self.at} on", "bias": f"steadily off by {amount}",
                 "trend": f"slowly moving, {amount} from the first blend to the last"}[self.story]
        return f"{words}; usual causes (common practice): {CAUSES[self.story]}"


def drift(found: Sequence[Residual]) -> Drift | None:
    """The chart and the story of the residuals of one property (of one law; of all products, or of one).

    None with fewer than four. Blends without a date keep their place in the order given, before the dated.
    """
    if len(found) < DRIFT_FROM:
        return None
    ordered = sorted(found, key=lambda one: one.measured_on)
    off = np.array([one.off for one in ordered])
    names = tuple(one.blend for one in ordered)
    sigma = max(float(np.median(np.abs(np.diff(off)))) / 0.954, float(np.mean([one.own_sigma for one in ordered])))
    chart = _ewma(off)
    places = np.arange(1, len(off) + 1)
    limits = LIMIT * sigma * np.sqrt(WEIGHT / (2.0 - WEIGHT) * (1.0 - (1.0 - WEIGHT) ** (2 * places)))
    outside = np.abs(chart) > limits
    alarm = bool(outside[-1])
    inside = np.flatnonzero(~outside)
    since = names[int(inside[-1]) + 1 if len(inside) else 0] if alarm else ""
    story, size, place = _story(off, _times(ordered), sigma) if len(off) >= STORY_FROM else ("few", 0.0, 0)
    unit = lookup(ordered[0].code).unit if ordered[0].code in BY_DIFFERENCE else "%"
    return Drift(len(off), sigma, float(chart[-1]), float(limits[-1]), alarm, since, story, size,
                 names[place] if story == "step" else "", tuple(float(v) for v in chart), names, unit)


def _ewma(off: Array) -> Array:
    chart, value = np.zeros(len(off)), 0.0
    for i, one in enumerate(off):
        value = WEIGHT * float(one) + (1.0 - WEIGHT) * value
        chart[i] = value
    return chart


def _times(ordered: Sequence[Residual]) -> Array:
    """Days, where every blend has a date and they differ; else the order."""
    try:
        days = np.array([date.fromisoformat(one.measured_on).toordinal() for one in ordered], dtype=np.float64)
    except ValueError:
        return np.arange(len(ordered), dtype=np.float64)
    return days if np.ptp(days) > 0.0 else np.arange(len(ordered), dtype=np.float64)


def _story(off: Array, times: Array, sigma: float) -> tuple[str, float, int]:
    """(story, its size, where a step begins) that costs least (see the module's docstring)."""
    n = len(off)

    def cost(rest: Array, more: int) -> float:
        return float((rest**2).sum()) / sigma**2 + LIMIT**2 + more * float(np.log(n))

    slope, level = np.polyfit(times - times.mean(), off, 1)
    stories = [(float((off**2).sum()) / sigma**2, "none", 0.0, 0),
               (cost(off - off.mean(), 0), "bias", float(off.mean()), 0),
               (cost(off - level - slope * (times - times.mean()), 1), "trend", float(slope * np.ptp(times)), 0)]
    for place in range(2, n - 1):
        before, after = off[:place], off[place:]
        rest = np.concatenate([before - before.mean(), after - after.mean()])
        stories.append((cost(rest, 3), "step", float(after.mean() - before.mean()), place))
    _, story, size, place = min(stories)
    return story, size, place
