"""What to buy, or to allow: one more stock that would make a target feasible, and the least share of it.

    minimise x_new   over all blends of the stocks that serve today and the new one that meet the target

solved exactly, the viscosity index included. For a stock that could be bought this is done over a grid of KV40
and VI; of all its other properties it is assumed that they neither help nor hinder (`neutral`). For a stock of
the catalogue that may not serve today it is done with what is known of it. That such a blend would meet the
limits is no permission to use the stock: that is the formulator's to decide.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np

from .demands import TREATED, Demands, named
from .errors import SolverError
from .linear import Stopwatch
from .properties import Array, lookup
from .reach import outside_first
from .recipe import least_cost
from .requirements import Requirement, ceiling
from .rows import Model, build
from .stocks import Stock, StockTable
from .target import ShareRule, Target
from .viscosity_index import indices, kv40_at

NEW = "(new)"  # code of the stock that could be bought
VIS = (60.0, 80.0, 100.0, 120.0, 140.0, 160.0, 180.0, 200.0)  # rows of the grid
KV40S = 11  # columns, log-spaced
SHARE_GAP = 5e-5  # mass fraction to which a least share is found
PLENTY = 1e12  # kg: a tank that is filled
LACKS = 20  # at most so many things may be unknown of a stock


@dataclass(frozen=True)
class Point:
    """One stock that could be bought, and the least mass fraction of it that would do; None: no share would."""

    kv40: float
    kv100: float
    vi: float
    share: float | None


@dataclass(frozen=True)
class Allowed:
    """One stock of the catalogue that may not serve today."""

    stock: str
    why_not: tuple[str, ...]  # why it may not serve today, in words
    share: float | None  # least mass fraction that would do; None: no share would, or it cannot be known
    cost_per_t: float | None  # of the least-cost recipe with it allowed; None where its price is unknown
    assumed: tuple[str, ...] = ()  # what was taken for granted, in words


@dataclass(frozen=True)
class Together:
    """Two stocks of the catalogue that would do together, in the least-cost recipe with both allowed."""

    stocks: tuple[str, str]
    shares: dict[str, float]  # stock → mass fraction, of the whole recipe
    cost_per_t: float


@dataclass(frozen=True)
class Neutral:
    """The properties assumed of a stock that could be bought, so that they neither help nor hinder."""

    values: dict[str, float]  # property code → value, in the registry's unit
    density15: float
    price_per_t: float

    def stock(self, kv40: float, kv100: float) -> Stock:
        """A base stock of no group with these properties, and as much of it as is wanted."""
        return Stock(NEW, kv40=kv40, kv100=kv100, density15=self.density15, values=self.values,
                     price_per_t=self.price_per_t, on_hand_kg=PLENTY)


def neutral(model: Model) -> Neutral:
    """Each limited property at its limit, with both sides in the middle between them; density the serving stocks' mean.

    A property at its limit adds 0 to the limit's row: the rest of the blend must meet it by itself. The price is
    the cost ceiling, where there is one.
    """
    values = {need.code: _at_limit(need) for need in model.requirements if need.entry.basis in ("mass", "volume")}
    known = model.table.density[np.isfinite(model.table.density)]
    density = values.pop("density15", float(known.mean()) if len(known) else 870.0)
    most = ceiling(model.target)
    dearest = float(np.nanmax(model.table.price, initial=0.0))
    return Neutral(values, density, most if most is not None else dearest)


def _at_limit(need: Requirement) -> float:
    sides = [at for at in (need.held_low, need.held_high) if at is not None]
    index = need.entry.index
    return float(need.entry.value(np.mean([float(index(at)) for at in sides])))


def region(demands: Demands, watch: Stopwatch, kv40s: int = KV40S) -> Iterator[Point]:
    """The least share of one more base stock over a grid of its KV40 (log-spaced) and VI, row by row.

    The grid spans KV40 from 0.4 times that of the thinnest stock that serves to twice that of the thickest, and
    leaves out what is thinner than KV100 = 2, for such an oil has no VI.
    """
    model = demands.model
    assumed = neutral(model)
    for vi in VIS:
        for kv40 in _kv40s(model, kv40s):
            kv100 = _kv100(float(kv40), vi)
            if kv100 is None:
                continue
            share = least_share(demands.table, demands.target, assumed.stock(float(kv40), kv100), watch)
            yield Point(float(kv40), kv100, vi, share)
            if watch.over:
                return


def _kv40s(model: Model, count: int) -> Array:
    known = model.table.kv[:, 0][np.isfinite(model.table.kv[:, 0])]
    thinnest, thickest = (float(known.min()), float(known.max())) if len(known) else (20.0, 200.0)
    return np.geomspace(max(5.0, 0.4 * thinnest), min(5e3, 2.0 * thickest), count)


def _kv100(kv40: float, vi: float) -> float | None:
    """KV100 of an oil by its KV40 and VI; None where there is none from 2 mm²/s up."""
    low, high = 2.0, kv40
    if not float(kv40_at(vi, low)) < kv40:
        return None
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if float(kv40_at(vi, middle)) < kv40 else (low, middle)
    return high if abs(float(indices(kv40, high)) - vi) < 0.01 else None


def least_share(table: StockTable, target: Target, new: Stock, watch: Stopwatch) -> float | None:
    """Least mass fraction of one more stock with which a target can be met, to 0.01 %; None where none does."""
    try:
        return _least(with_more(table, target, [new]), new.code, watch)
    except SolverError:
        return None


def with_more(table: StockTable, target: Target, more: Sequence[Stock]) -> Model:
    """The model with these stocks more, or allowed, whatever of the product's rules stood against them.

    A rule that caps at 0 what one of them belongs to caps the others at 0 still; every other rule that speaks of
    it holds. What is unknown of a stock still shuts it out.
    """
    codes = {new.code for new in more}
    rules = [ShareRule(code) for code in sorted(codes)]
    for rule in target.rules:
        capped = rule.high <= 0.0 and any(rule.of == new.code or new.matches(rule.of) for new in more)
        others = [s.code for s in table.stocks if s.code not in codes and s.matches(rule.of)
                  and s.in_vessel_kg is None] if capped else []
        rules += [ShareRule(code, high=0.0) for code in others] if capped else [rule]
    stocks = [s for s in table.stocks if s.code not in codes]
    return build(StockTable([*stocks, *more]), replace(target, rules=tuple(rules), left_out=target.left_out - codes))


def _least(model: Model, code: str, watch: Stopwatch) -> float | None:
    if model.short or code not in model.table.codes or any(need.empty for need in model.requirements):
        return None
    c = np.zeros(len(model.table))
    c[model.table.index(code)] = 1.0
    x = outside_first(model, c, watch, SHARE_GAP).x
    return None if x is None else float(c @ x)


# Stocks of the catalogue

def catalogue(demands: Demands, watch: Stopwatch) -> Iterator[Allowed]:
    """Every stock of the plant that may not serve today, or not enough of it, and the least share of it that would do.

    In the plant's order. What is unknown of it is taken as `neutral` has it, and said; a stock without viscosities
    cannot be judged.
    """
    for stock in demands.table.stocks:
        if watch.over:
            return
        found = _judged(demands, stock)
        if found.why_not and found.stock is None:
            yield Allowed(stock.code, found.why_not, None, None, found.assumed)
        elif found.why_not and found.stock is not None:
            model = with_more(demands.table, demands.target, [found.stock])
            share = _least(model, stock.code, watch)
            known = share is not None and stock.price_per_t is not None
            cost = least_cost(model, watch).value if known else None
            yield Allowed(stock.code, found.why_not, share, cost, found.assumed)


def pairs(demands: Demands, watch: Stopwatch) -> list[Together]:
    """Every two stocks of the catalogue that may not serve today and would do together, the cheapest first.

    For where no single one does. Stocks whose share is a treat rate, and those of unknown price, are left aside.
    """
    able = [(stock, found.stock) for stock in demands.table.stocks
            if stock.kind not in TREATED and stock.price_per_t is not None
            and (found := _judged(demands, stock)).why_not and found.stock is not None]
    made = []
    for (first, one), (second, other) in combinations(able, 2):
        if watch.over:
            break
        model = with_more(demands.table, demands.target, [one, other])
        best = least_cost(model, watch)
        if best.x is not None:
            made.append(Together((first.code, second.code), model.full(best.x), best.value))
    return sorted(made, key=lambda each: each.cost_per_t)


def _against(demands: Demands, stock: Stock) -> Iterator[str]:
    """What of the product's rules and the operator's wishes stands against a stock, in words."""
    target = demands.target
    if stock.code in target.left_out:
        yield "left out by the operator"
    capped = [r.of for r in target.rules if r.high <= 0.0 and (r.of == stock.code or stock.matches(r.of))]
    yield from (f"the product caps {of} at 0 %" for of in dict.fromkeys(capped))
    if capped or stock.code in target.held or named(stock, target):
        return
    if stock.kind == "base":
        yield "not on the product's list"
    else:
        what = stock.kind.replace("_", " ").replace("vi ", "VI ")
        treat = "; its treat rate is the formulator's" if stock.kind in TREATED else ""
        yield f"{'an' if what[0] in 'a' else 'a'} {what} that the product does not name{treat}"


def _scarce(demands: Demands, stock: Stock) -> Iterator[str]:
    batch, at_hand = demands.target.batch_kg, stock.available_kg
    if stock.code in demands.model.table.codes and batch is not None and at_hand is not None and at_hand < batch:
        yield f"only {at_hand:,.0f} kg can be pumped for {batch:,.0f} kg"


@dataclass(frozen=True)
class _Judged:
    """Why a stock may not serve, the stock with what it lacks supplied (None: that cannot be), and what was taken."""

    why_not: tuple[str, ...]
    stock: Stock | None
    assumed: tuple[str, ...]


def _judged(demands: Demands, stock: Stock) -> _Judged:
    if stock.in_vessel_kg is not None:
        return _Judged((), stock, ())
    why_not, assumed = (*_against(demands, stock), *_scarce(demands, stock)), []
    stands_in, tried = neutral(demands.model), stock
    if stock.code in demands.model.table.codes and why_not:
        tried = replace(stock, on_hand_kg=PLENTY)
        assumed.append("as much of it as is wanted")
    for _ in range(LACKS):
        try:
            model = with_more(demands.table, demands.target, [tried])
        except SolverError as error:
            return _Judged((*why_not, str(error)), None, tuple(assumed))
        lack = next((x for x in model.left_out if x.stock == stock.code), None)
        if lack is None:
            return _Judged(why_not, tried, tuple(assumed))
        why_not = (*why_not, lack.reason)
        if lack.cell == "kv40":
            break
        tried, taken = _supplied(tried, lack.cell, stands_in)
        assumed.append(taken)
    return _Judged(why_not, None, tuple(assumed))


def _supplied(stock: Stock, cell: str, stands_in: Neutral) -> tuple[Stock, str]:
    """A stock with one thing that it lacks, and what was taken, in words."""
    if cell == "price_per_t":
        return replace(stock, price_per_t=stands_in.price_per_t), "its price left aside"
    if cell in ("", "on_hand_kg"):
        return replace(stock, on_hand_kg=PLENTY, unpumpable_kg=None), "as much of it as is wanted"
    if cell == "density15":
        return replace(stock, density15=stands_in.density15), f"density at 15 °C {stands_in.density15:.1f} kg/m³"
    entry, value = lookup(cell), stands_in.values[cell]
    words = f"{entry.name} {value:.{entry.digits}f} {entry.unit}".rstrip()
    return replace(stock, values={**stock.values, cell: value}), words


__all__ = ["NEW", "Allowed", "Neutral", "Point", "Together", "catalogue", "least_share", "neutral", "pairs", "region",
           "with_more"]
