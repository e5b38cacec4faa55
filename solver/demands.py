"""What a target demands, one demand at a time, so that any of them can be let go.

A demand is one side of a limit, the cost ceiling, one side of a share rule, a hold, a stock that the operator
leaves out, a family of stocks that the product does not list, the quantities on hand for the batch, or a
whole-number rule. Letting one go never makes fewer blends possible. What is no demand always stands: shares
sum to 1, a stock of which something needed is unknown or whose tank is empty does not serve, and additives and
pour depressants serve only where the product names them, for their share is a treat rate.
"""

from __future__ import annotations

from collections.abc import Iterable, Set
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Literal

import numpy as np

from .allowed import CLOSE
from .elastic import COST_UNIT
from .gauge import property_gauge
from .properties import Array
from .requirements import COST, Requirement, ceiling
from .rows import Model, View, build
from .stocks import Stock, StockTable
from .target import ShareRule, Target

Kind = Literal["limit", "cost", "share", "held", "left out", "list", "on hand", "most stocks", "least share"]
TREATED = ("additive", "pour_depressant")  # kinds whose share is a treat rate, never the optimiser's freedom
OPEN = float("nan")


@dataclass(frozen=True)
class Demand:
    """One thing that a target demands and that could be let go."""

    kind: Kind
    name: str  # property code, COST, the `of` of a rule, a stock, a family, "batch", or a whole-number rule
    side: str  # "low", "high", or "low high" of a hold
    limit: float  # as it is held: the property's unit, a mass fraction, kg of batch, a number of stocks
    asked: float | None = None  # before its guard
    stocks: tuple[str, ...] = ()  # those that it speaks of, where it shuts out or holds
    whole_family: bool = True  # of a list: does it shut out every stock of the family

    @property
    def of_property(self) -> bool:
        """Is it a limit on a property or on the cost?"""
        return self.kind in ("limit", "cost")


Held = frozenset[Demand]


class Demands:
    """A target over a plant's stocks, taken apart into its demands."""

    def __init__(self, table: StockTable, target: Target) -> None:
        self.table, self.target = table, target
        self.model = build(table, target)  # as asked
        self.needs = {need.code: need for need in self.model.requirements}
        self.families = _families(table, target)
        self.all: tuple[Demand, ...] = (
            *_of_limits(self.model), *_of_shares(target), *self._of_lists(), *_of_numbers(target))

    @property
    def treat_rates(self) -> tuple[Demand, ...]:
        """The share rules on additives and pour depressants."""
        treated = {x.code for x in self.table.stocks if x.kind in TREATED} | set(TREATED)
        return tuple(d for d in self.all if d.kind == "share" and d.name in treated)

    def _of_lists(self) -> Iterable[Demand]:
        yield from (Demand("left out", code, "high", 0.0, stocks=(code,)) for code in sorted(self.target.left_out))
        for name, codes in self.families.items():
            every = sum(family(s) == name for s in self.table.stocks if s.in_vessel_kg is None)
            yield Demand("list", name, "high", 0.0, stocks=codes, whole_family=len(codes) == every)

    def with_only(self, held: Set[Demand], moved: dict[tuple[str, str], float] | None = None) -> Target:
        """The target with these demands only; `moved` then moves further limits."""
        gone = [d for d in self.all if d not in held]
        # Every limit is given outright: one that a grade asks only where the stocks have a value stays held.
        limits = {(d.name, d.side): d.limit if d in held else OPEN for d in self.all if d.of_property}
        let_in = [code for d in gone if d.kind in ("list", "held") for code in d.stocks]
        loose = {(d.name, d.side) for d in gone if d.kind == "share"}
        rules = [ShareRule(r.of, 0.0 if (r.of, "low") in loose else r.low, 1.0 if (r.of, "high") in loose else r.high,
                           r.source) for r in self.target.rules]
        kinds = {d.kind for d in gone}
        free = {d.name for d in gone if d.kind == "held"}
        return replace(
            self.target, moved={**self.target.moved, **limits, **(moved or {})},
            rules=(*rules, *(ShareRule(code) for code in let_in)),
            left_out=self.target.left_out - {d.name for d in gone if d.kind == "left out"},
            held={code: share for code, share in self.target.held.items() if code not in free},
            batch_kg=None if "on hand" in kinds and not self.in_vessel else self.target.batch_kg,
            max_stocks=None if "most stocks" in kinds else self.target.max_stocks,
            min_share=None if "least share" in kinds else self.target.min_share)

    def only(self, held: Set[Demand], moved: dict[tuple[str, str], float] | None = None) -> Model:
        """The model of the target with these demands only."""
        plenty = self.in_vessel and not any(d.kind == "on hand" for d in held)
        table = self.table.plentiful(self.target.batch_kg or 0.0) if plenty else self.table
        return build(table, self.with_only(held, moved))

    @property
    def in_vessel(self) -> bool:
        """Is something in the vessel, so that the batch stays what it is where quantities on hand are let go?"""
        return any(s.in_vessel_kg is not None for s in self.table.stocks)

    # Which demands a blend breaks

    @cached_property
    def loosest(self) -> Model:
        """The model without any demand, in which every viscosity that is limited can be read."""
        seen = {(code, "low"): need.entry.lowest for code, need in self.needs.items() if need.entry.basis == "law"}
        return self.only(frozenset(), seen)

    def on_loosest(self, model: Model, x: Array) -> Array:
        """Shares over a model's stocks as shares over the loosest model's."""
        table = self.loosest.table
        full = np.zeros(len(table))
        full[[table.index(code) for code in model.table.codes]] = x
        return full

    def broken(self, x: Array) -> dict[Demand, float]:
        """The demands that a blend over the loosest model's stocks breaks, and by how much.

        Limits in units of the method's reproducibility, all others in units of 1 % of the blend.
        """
        found = {d: self._break(d, x) for d in self.all}
        return {d: by for d, by in found.items() if by > 0.0}

    def _break(self, demand: Demand, x: Array) -> float:
        table, limit = self.loosest.table, demand.limit
        if demand.kind == "limit":
            return self._limit_break(demand, x)
        if demand.kind == "cost":
            return max(0.0, float(table.price @ x) / limit - 1.0 - 1e-6) / COST_UNIT
        if demand.kind == "share":
            share = float(x @ [s.part_of(demand.name) for s in table.stocks])
            return _over(share - limit if demand.side == "high" else limit - share)
        if demand.kind == "held":
            share = float(x[table.index(demand.name)]) if demand.name in table.codes else 0.0
            return _over(abs(share - limit))
        if demand.kind in ("left out", "list"):
            return _over(float(x @ [code in demand.stocks for code in table.codes]))
        if demand.kind == "on hand":
            available = self.table.available[[self.table.index(code) for code in table.codes]]
            return _over(float(np.max(x - available / limit, initial=0.0)))
        used = x[table.counted & (x > CLOSE) & np.array([c not in self.target.held for c in table.codes])]
        if demand.kind == "most stocks":
            return max(0.0, float(np.sum(table.counted & (x > CLOSE))) - limit)
        return _over(float(np.max(limit - used, initial=0.0)))

    def _limit_break(self, demand: Demand, x: Array) -> float:
        need = self.needs[demand.name]
        side = _one_side(need, demand.side)
        worst = 0.0
        for view in self._views_of(need, x):
            value = view.read(need.code, x)
            if value is None:
                return 1.0
            miss = side.miss(value)
            worst = max(worst, miss / side.unit_of_miss(demand.side) if miss > need.tolerance() else 0.0)
        return worst

    def _views_of(self, need: Requirement, x: Array) -> tuple[View, ...]:
        """The views in which a requirement is read; of one that mixes by mass or volume, none if it is unknown."""
        exact = self.loosest.exact
        if need.entry.basis in ("law", "curve"):
            return exact
        gauge = property_gauge(self.loosest.table, need.entry)
        known = need.unknown_ok or not np.any((x > CLOSE) & (gauge.den == 0.0))
        unread = View(exact[0].law, {need.code: replace(gauge, den=0.0 * gauge.den)})
        return (View(exact[0].law, {need.code: gauge}),) if known else (unread,)


def _over(by: float) -> float:
    """By how much a share is out, in units of 1 %; 0 within rounding."""
    return 100.0 * by if by > CLOSE else 0.0


def _one_side(need: Requirement, side: str) -> Requirement:
    other = "held_high" if side == "low" else "held_low"
    return replace(need, **{other: None})  # type: ignore[arg-type]


def _of_limits(model: Model) -> Iterable[Demand]:
    for need in model.requirements:
        for side, held, asked in (("low", need.held_low, need.low), ("high", need.held_high, need.high)):
            if held is not None:
                yield Demand("limit", need.code, side, held, asked)
    most = ceiling(model.target)
    if most is not None:
        yield Demand("cost", COST, "high", most, most)


def _of_shares(target: Target) -> Iterable[Demand]:
    for of in dict.fromkeys(r.of for r in target.rules):
        low = max(r.low for r in target.rules if r.of == of)
        high = min(r.high for r in target.rules if r.of == of)
        if low > 0.0:
            yield Demand("share", of, "low", low, low)
        if high < 1.0:
            yield Demand("share", of, "high", high, high)
    yield from (Demand("held", code, "low high", share, share, (code,)) for code, share in target.held.items())


def _of_numbers(target: Target) -> Iterable[Demand]:
    if target.batch_kg is not None:
        yield Demand("on hand", "batch", "high", target.batch_kg, target.batch_kg)
    if target.max_stocks is not None:
        yield Demand("most stocks", "max_stocks", "high", float(target.max_stocks), float(target.max_stocks))
    if target.min_share:
        yield Demand("least share", "min_share", "low", target.min_share, target.min_share)


def _families(table: StockTable, target: Target) -> dict[str, tuple[str, ...]]:
    """The stocks that a product does not name, by API group or kind; those of a treat rate aside."""
    found: dict[str, list[str]] = {}
    for stock in table.stocks:
        chosen = stock.kind not in TREATED and stock.code not in target.held and stock.in_vessel_kg is None
        if chosen and not named(stock, target):
            found.setdefault(family(stock), []).append(stock.code)
    return {name: tuple(codes) for name, codes in found.items()}


def named(stock: Stock, target: Target) -> bool:
    """Does a product name a stock, or need it not be named?"""
    if stock.kind == "base" and not target.only_listed:
        return True
    rules = [r for r in target.rules if r.of == stock.code or stock.matches(r.of)]
    return any(stock.kind == "base" or not r.of.lower().startswith("group ") for r in rules)


def family(stock: Stock) -> str:
    """What a stock is called together with those like it: "group III", "base" (of no known group), or its kind."""
    if stock.kind != "base":
        return stock.kind
    return f"group {stock.api_group}" if stock.api_group else "base"
