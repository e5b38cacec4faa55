"""Target + stocks → the linear rows, each carrying the name of the limit it speaks for.

The only limit that is no row is the viscosity index: it becomes rows on pieces of the KV100 window
(windows.py). Everything that a recipe, a range, a reason or a batch size needs is read off `Model`.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, replace

import numpy as np

from .allowed import LeftOut, candidates, check_rules, serving
from .errors import TargetError
from .gauge import Gauge, property_gauge
from .laws import check_law, viscosity_gauge
from .linear import HOLD, Polytope, Whole, scale
from .properties import Array
from .requirements import COST, Requirement, ceiling, required
from .stocks import Stock, StockTable
from .target import ShareRule, Target
from .viscosity_index import LOWEST_KV100


@dataclass(frozen=True)
class Row:
    """Σ x_i coef_i ≤ 0, and the limit or rule that it speaks for."""

    name: str  # property code, COST, or the `of` of a share rule
    side: str  # "low" or "high"
    coef: Array  # (n,), scaled to a largest coefficient of 1
    hold: float = 0.0  # how far inside it is held
    of_shares: bool = False  # a share rule, which no nearest blend may break


@dataclass(frozen=True)
class View:
    """How a model is read under one law: its gauges by property code, viscosities and all others."""

    law: str
    gauges: dict[str, Gauge]

    def read(self, code: str, x: Array) -> float | None:
        """Exact value of a property of a blend; None where it cannot be known."""
        if code == "vi":
            from .viscosity_index import indices

            value = float(indices(self.gauges["kv40"].read(x), self.gauges["kv100"].read(x)))
        else:
            value = self.gauges[code].read(x)
        return value if np.isfinite(value) else None

    @property
    def bent(self) -> bool:
        """Has the laboratory taught anything that bends one of these gauges?"""
        return any(gauge.excess is not None for gauge in self.gauges.values())

    def tangent(self, x: Array) -> View:
        """The view whose gauges agree with these at the blend x to first order, and have rows."""
        return View(self.law, {code: gauge.tangent(x) for code, gauge in self.gauges.items()})


@dataclass(frozen=True)
class Model:
    """One target over the stocks that may serve it, ready to be solved.

    `exact` reads blends, a view a law, the target's own law first; `views` are the same with rows: where
    the laboratory has taught an excess they are tangents at one blend (tangent.py), elsewhere the same.
    """

    target: Target
    table: StockTable  # only the stocks that may serve
    requirements: tuple[Requirement, ...]
    exact: tuple[View, ...]
    views: tuple[View, ...]
    rows: tuple[Row, ...]
    lo: Array  # (n,) least mass fraction by rules and holds
    hi: Array  # (n,) most, by rules, holds and quantity on hand
    vi: Requirement | None
    to_be_tested: tuple[str, ...] = ()
    left_out: tuple[LeftOut, ...] = ()
    short: tuple[str, ...] = field(default=())  # bounds that contradict each other, in words

    @property
    def gauges(self) -> dict[str, Gauge]:
        """The gauges of the target's own law, as far as they have rows."""
        return self.views[0].gauges

    @property
    def bent(self) -> bool:
        """Does an excess that the laboratory has taught bend any row?"""
        return any(view.bent for view in self.exact)

    @property
    def whole(self) -> Whole | None:
        """The target's whole-number rules, if any can bind."""
        target = self.target
        if target.max_stocks is None and not target.min_share:
            return None
        least = np.where(self.table.counted, target.min_share or 0.0, 0.0)
        for i, code in enumerate(self.table.codes):
            if code in target.held:  # the operator's own word on a share stands before the rule
                least[i] = 0.0
        return Whole(self.table.counted, target.max_stocks, least)

    def polytope(self, whole: bool = True) -> Polytope:
        """The linear part of the problem, with the whole-number rules or without."""
        n = len(self.table)
        rows = np.array([r.coef for r in self.rows]) if self.rows else np.zeros((0, n))
        return Polytope(rows, np.array([r.hold for r in self.rows]), self.lo, self.hi,
                        whole=self.whole if whole else None)

    def full(self, x: Array) -> dict[str, float]:
        """Shares by stock code, only those used."""
        return {code: float(v) for code, v in zip(self.table.codes, x, strict=True) if v > 0.0}

    def missed(self, x: Array) -> list[Requirement]:
        """The property requirements, VI included, that a blend does not meet on exact recomputation."""
        return [need for need in self.requirements
                if any((value := view.read(need.code, x)) is not None and need.miss(value) > need.tolerance()
                       for view in self.exact)]

    def read(self, code: str, x: Array) -> float | None:
        """Exact value, under the target's own law, of a required property; None where it cannot be known."""
        return self.exact[0].read(code, x)


def as_table(stocks: StockTable | Iterable[Stock]) -> StockTable:
    """A StockTable of whatever was given."""
    return stocks if isinstance(stocks, StockTable) else StockTable(stocks)


def build(stocks: StockTable | Iterable[Stock], target: Target) -> Model:
    """Model of a target over a plant's stocks.

    Raises TargetError for a target that contradicts itself or names what is not there, or where a rule
    demands a stock of which something needed is unknown; StockError for a held stock that is not there.
    """
    model = unfollowed(stocks, target)
    if not model.bent or len(model.table) == 0:
        return model
    from .tangent import settled

    return settled(model)


def laws_of(target: Target) -> tuple[str, ...]:
    """Every law under which a target's limits hold, its own first. TargetError for an unknown one."""
    return tuple(dict.fromkeys(check_law(law) for law in (target.law, *target.also_laws)))


def unfollowed(stocks: StockTable | Iterable[Stock], target: Target) -> Model:
    """The model as `build` gives it, with rows along the tangent at an even mixture where they bend."""
    table = as_table(stocks)
    laws = laws_of(target)
    check_rules(target, table)
    permitted = candidates(table, target)
    needs, tests = required(target, table.where(permitted))
    keep, left_out = serving(table, permitted, target, needs)
    kept = table.where(keep)
    lo, hi, short = _bounds(kept, target, table)
    views = tuple(View(law, _gauges(kept, law, target, needs)) for law in laws)
    model = Model(target, kept, needs, views, (), (), lo, hi, next((x for x in needs if x.code == "vi"), None),
                  tests, left_out, short)
    return with_rows(replace(model, rows=tuple(_share_rows(kept, target, table))),
                     np.full(len(kept), 1.0 / max(1, len(kept))))


def with_rows(model: Model, x: Array) -> Model:
    """The model with the rows of its limits; those that bend follow their tangents at the blend x, shape (n,)."""
    views = tuple(view.tangent(x) if view.bent else view for view in model.exact)
    rows = [row for row in model.rows if row.of_shares]
    for number, view in enumerate(views):
        rows += _property_rows(model.requirements, view.gauges, viscosities_only=number > 0)
    most = ceiling(model.target)
    if most is not None:
        rows.append(_row(COST, "high", model.table.price - most, HOLD))
    if model.vi is not None:
        rows += [_row("vi", "low", view.gauges["kv100"].row(LOWEST_KV100, "low"), HOLD) for view in views]
    return replace(model, views=views, rows=tuple(rows))


def without_guards(target: Target) -> Target:
    """The same target with every guard at 0."""
    return replace(target, limits=tuple(
        replace(x, guard=0.0, guard_pct=0.0) for x in target.limits
        if x.low is not None or x.high is not None))


def _gauges(table: StockTable, law: str, target: Target, needs: Iterable[Requirement]) -> dict[str, Gauge]:
    gauges = {code: viscosity_gauge(law, table, t, target.lessons) for code, t in (("kv40", 40.0), ("kv100", 100.0))}
    for need in needs:
        entry = need.entry
        if entry.basis == "law" and entry.temperature is not None:
            gauges[need.code] = viscosity_gauge(law, table, entry.temperature, target.lessons)
        elif entry.basis in ("mass", "volume"):
            gauges[need.code] = property_gauge(table, entry)
    return gauges


def _row(name: str, side: str, coef: Array, hold: float) -> Row:
    return Row(name, side, scale(coef), hold)


def _property_rows(needs: Iterable[Requirement], gauges: dict[str, Gauge], viscosities_only: bool) -> list[Row]:
    rows = []
    for need in needs:
        if need.code == "vi" or (viscosities_only and need.entry.basis != "law"):
            continue
        gauge = gauges[need.code]
        rows += [_row(need.code, side, gauge.row(value, side), HOLD) for side, value in need.row_sides]
    return rows


def _share_rows(kept: StockTable, target: Target, table: StockTable) -> list[Row]:
    """Rules on oils, kinds and groups as rows; rules on one stock are bounds."""
    rows = []
    for rule in target.rules:
        if _of_one_stock(rule, table):
            continue
        inside = np.array([s.part_of(rule.of) for s in kept.stocks])
        if rule.high < 1.0:
            rows.append(Row(rule.of, "high", scale(inside - rule.high), of_shares=True))
        if rule.low > 0.0:
            rows.append(Row(rule.of, "low", scale(rule.low - inside), of_shares=True))
    return rows


def _of_one_stock(rule: ShareRule, table: StockTable) -> bool:
    """Does the rule speak of one stock only, of no oil that bears its code and of nothing made of it?"""
    return rule.of in table.codes and not any(s.part_of(rule.of) > 0.0 for s in table.stocks if s.code != rule.of)


def _bounds(kept: StockTable, target: Target, table: StockTable) -> tuple[Array, Array, tuple[str, ...]]:
    n = len(kept)
    lo, hi = np.zeros(n), np.ones(n)
    short = [f"{rule.of}: at least {100 * rule.low:g} % is asked, and none of it can serve"
             for rule in target.rules if rule.low > 0.0 and not any(s.part_of(rule.of) > 0.0 for s in kept.stocks)]
    short += [f"{code}: held at {100 * share:g} %, and it cannot serve"
              for code, share in target.held.items() if share > 0.0 and code not in kept.codes]
    for i, stock in enumerate(kept.stocks):
        if stock.in_vessel_kg is not None:
            lo[i] = hi[i] = _part_in_vessel(stock, stock.in_vessel_kg, target)
            continue
        for rule in target.rules:
            if rule.of == stock.code and _of_one_stock(rule, table):
                lo[i], hi[i] = max(lo[i], rule.low), min(hi[i], rule.high)
        if stock.code in target.held:
            held = target.held[stock.code]
            if not lo[i] - 1e-9 <= held <= hi[i] + 1e-9:
                raise TargetError(f"{stock.code} is held at {100 * held:g} %, and {target.product} asks at least "
                                  f"{100 * lo[i]:g} % and at most {100 * hi[i]:g} %; let it go or change the rule",
                                  where=stock.code)
            lo[i] = hi[i] = held
        if target.batch_kg is not None:
            most = float(kept.available[i]) / target.batch_kg
            if most < lo[i] - 1e-12:
                short.append(f"{stock.code}: {100 * lo[i]:g} % of {target.batch_kg:g} kg is "
                             f"{lo[i] * target.batch_kg:,.0f} kg, and the tank can give "
                             f"{float(kept.available[i]):,.0f} kg")
            hi[i] = min(hi[i], most)
        if lo[i] > hi[i] + 1e-12 and not short:
            short.append(f"{stock.code}: the rules ask at least {100 * lo[i]:g} % and at most "
                         f"{100 * hi[i]:g} %")
    return lo, hi, tuple(short)


def _part_in_vessel(stock: Stock, kg: float, target: Target) -> float:
    if target.batch_kg is None:
        raise TargetError(f"{stock.code} is in the vessel: it takes part in one batch; give its kg", where=stock.code)
    if not 0.0 <= kg <= target.batch_kg:
        raise TargetError(f"{stock.code}: {kg:,.0f} kg in the vessel are more than the batch of "
                          f"{target.batch_kg:,.0f} kg; make more, or draw some off first", where=stock.code)
    return kg / target.batch_kg
