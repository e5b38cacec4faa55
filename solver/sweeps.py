"""The least cost against one limit or one price, point by point: a what-if at every point, solved outright.

The points come in an order that draws quickly: the ends, the middle, then always between what is there.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from .errors import StockError, TargetError
from .linear import Stopwatch
from .properties import in_scale, lookup
from .recipe import least_cost, predict_all
from .rows import as_table, build
from .stocks import Stock, StockTable
from .target import Target

POINTS = 60
MOST_POINTS = 500
PRICE = "price"  # instead of a property's code: the price of a stock
KV_SPAN = 0.15  # of a KV limit, either way
VI_SPAN = 15.0  # points, either way
SPAN_R = 6.0  # units of R, either way, of every other property
PRICE_SPAN = 0.4  # of a price, either way


@dataclass(frozen=True)
class Sweep:
    """What is swept: a side of a limit as it is held (its guard taken), or the price of a stock."""

    of: str  # property code, or PRICE
    which: str  # "low" or "high", or the stock
    low: float  # first value, in the property's unit or currency/t
    high: float  # last value
    now: float | None  # the present value; None: that side is open now

    def values(self, count: int) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
        """So many values from first to last."""
        return np.linspace(self.low, self.high, count)


@dataclass(frozen=True)
class Point:
    """One point of a sweep."""

    number: int  # its place from the low end
    at: float
    status: str  # "optimal", "infeasible" or "stopped"
    cost_per_t: float | None  # None: no blend
    shares: Mapping[str, float] | None  # stock → mass fraction


def plan(stocks: StockTable | Iterable[Stock], target: Target, of: str, which: str, *, low: float | None = None,
         high: float | None = None) -> Sweep:
    """A sweep of the side `which` of the limit on property `of`, or of the price (`of` = "price") of stock `which`.

    low, high: its span; where they are None, 15 % of a KV either way, 15 points of the VI, 40 % of a price and
    6 times the reproducibility of any other property, about the present value, or about the least-cost blend's own
    where that side is open. Raises TargetError or StockError for what is not there.
    """
    table = as_table(stocks)
    if of == PRICE:
        now = table.stocks[table.index(which)].price_per_t
        if now is None:
            raise StockError(f"{which}: its price is unknown; enter one first", stock=which, cell="price_per_t")
        start, width = now, PRICE_SPAN * abs(now)
    else:
        now, start = _present(table, target, of, which)
        width = _width(of, start)
    sweep = Sweep(of, which, start - width if low is None else low, start + width if high is None else high, now)
    if not (np.isfinite(sweep.low) and np.isfinite(sweep.high) and sweep.low < sweep.high):
        raise TargetError(f"a sweep from {sweep.low:g} to {sweep.high:g} has no span; give a lower start or a "
                          "higher end", where=of)
    if of != PRICE and not (in_scale(lookup(of), sweep.low) and in_scale(lookup(of), sweep.high)):
        raise TargetError(f"{of}: {sweep.low:g} to {sweep.high:g} leaves the scale of that property; give a narrower "
                          "span", where=of)
    return sweep


def _present(table: StockTable, target: Target, of: str, which: str) -> tuple[float | None, float]:
    """The limit as it is held now (None: open), and the value about which to sweep."""
    lookup(of)
    if which not in ("low", "high"):
        raise TargetError(f"{of}: a side is low or high, not {which!r}", where=of)
    model = build(table, target)
    need = next((need for need in model.requirements if need.code == of), None)
    held = None if need is None else need.held_low if which == "low" else need.held_high
    if held is not None:
        return held, held
    best = least_cost(model, Stopwatch(10.0)).x
    if best is None:
        raise TargetError(f"{of}: that side is open, and no blend shows where to begin; give the span", where=of)
    value = predict_all(model.table, best, target.law, (of,), target.lessons).get(of)
    if value is None:
        raise TargetError(f"{of}: a stock of the least-cost blend has no value of it; enter it first", where=of)
    return None, value


def _width(of: str, start: float) -> float:
    entry = lookup(of)
    if of == "vi":
        return VI_SPAN
    if entry.basis == "law":
        return KV_SPAN * start
    return SPAN_R * entry.reproducibility(start)


def order(count: int) -> list[int]:
    """Places 0 to count − 1: the ends, then halves, quarters and so on.

    >>> order(9)
    [0, 8, 4, 2, 6, 1, 3, 5, 7]
    """
    found = dict.fromkeys((0, count - 1)) if count > 1 else dict.fromkeys(range(count))
    parts = 2
    while len(found) < count:
        found.update(dict.fromkeys(round(k * (count - 1) / parts) for k in range(1, parts, 2)))
        parts *= 2
    return list(found)


def points(stocks: StockTable | Iterable[Stock], target: Target, sweep: Sweep, count: int = POINTS, *,
           time_limit: float = 5.0) -> Iterator[Point]:
    """The least cost at each of `count` values, each as soon as it is found; close the iterator to stop.

    time_limit [s] of each point. Whole-number rules and the cost ceiling hold. Raises TargetError for a count
    below 2 or above 500.
    """
    if not 2 <= count <= MOST_POINTS:
        raise TargetError(f"{count} points: a sweep takes 2 to {MOST_POINTS}", where="points")
    table, values = as_table(stocks), sweep.values(count)
    for number in order(count):
        at = float(values[number])
        if sweep.of == PRICE:
            here = StockTable(replace(s, price_per_t=at) if s.code == sweep.which else s for s in table.stocks)
            model = build(here, target)
        else:
            model = build(table, replace(target, moved={**target.moved, (sweep.of, sweep.which): at}))
        found = least_cost(model, Stopwatch(time_limit))
        shares = None if found.x is None else model.full(found.x)
        yield Point(number, at, found.status, None if found.x is None else float(found.value), shares)

