"""What a plant can charge into one batch: steps, tanks and share rules, as one problem in whole numbers.

The unit of x is the batch: x_i = m_i / batch, so that Σ x is near 1 and may differ from it by the tolerance.
Every share rule is then a row, Σ_members x ≤ high Σ x, for a share of a sum that may vary is no bound.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from .errors import StockError
from .linear import Polytope, Steps
from .properties import Array
from .rows import Model
from .stocks import Stock

PARTS = (0.001, 0.005)  # of the batch by which the total may be off, where no nearer total will do
HAIR = 1e-9  # part of a step to which figures agree


@dataclass(frozen=True)
class Demand:
    """A share rule, or a share that the operator holds."""

    of: str
    low: float  # mass fraction
    high: float
    members: tuple[int, ...]  # positions of the stocks it speaks of that can be charged
    parts: Array  # (n,) how much of each stock it counts: what is in the vessel by what that was made of

    @property
    def of_one(self) -> bool:
        """Does it bound the charge of a single stock, and nothing else?"""
        return len(self.members) == 1 and float(self.parts.sum()) == 1.0


@dataclass(frozen=True)
class Charges:
    """The stocks of a model as they can be charged into one batch."""

    model: Model
    batch: float  # kg
    step: Array  # (n,) kg, 0: any mass
    least: Array  # (n,) least charge of a stock that is used, in whole steps [kg]
    most: Array  # (n,) what is there, in whole steps [kg]
    demands: tuple[Demand, ...]

    @classmethod
    def of(cls, model: Model, batch: float) -> Charges:
        """Read from the stocks of a model. StockError for a step or a least charge that cannot be."""
        stocks = model.table.stocks
        for stock in stocks:
            _check(stock)
        # What is in the vessel already is charged in no steps any more.
        bulk = [stock if stock.in_vessel_kg is None else Stock(stock.code) for stock in stocks]
        step = np.array([stock.package_kg or stock.division_kg or 0.0 for stock in bulk])
        there = np.array([s.available_kg or 0.0 for s in stocks])
        whole = Steps(step, np.zeros(len(stocks)))
        least = np.maximum(step, whole.ceil(np.array([s.least_charge_kg or 0.0 for s in bulk])))
        return cls(model, batch, step, least, whole.floor(there), tuple(_demands(model)))

    def tolerances(self) -> tuple[float, ...]:
        """How far from the batch the total may lie [kg], nearest first, the next where nothing is found.

        Exact where some oil takes any mass; half of each step of the oils in bulk (half the smallest package,
        where all come in them); 0.1 and 0.5 % of the batch; one smallest package. Additives do not count: they
        have their treat rates and fill nothing up.
        """
        oils = [s for s in self.model.table.stocks if s.counted] or list(self.model.table.stocks)
        bulk = [s.division_kg or 0.0 for s in oils if s.package_kg is None]
        packages = [s.package_kg for s in oils if s.package_kg is not None]
        halves = [step / 2.0 for step in bulk or [min(packages, default=0.0)]]
        wide = [part * self.batch for part in PARTS] + ([min(packages)] if packages else [])
        most = max(min(halves), *wide)
        found = {t for t in (*halves, *wide) if min(halves) <= t <= most}
        return tuple(sorted(t for t in found if t < self.batch)) or (self.batch / 2.0,)

    def problem(self, tolerance: float, rows: Model | None = None) -> Polytope:
        """All masses that the plant can charge and that meet every row, within a tolerance [kg] of the batch.

        `rows`: the same model with other rows, where they bend.
        """
        model = rows or self.model
        limits = [row for row in model.rows if not row.of_shares]
        n = len(model.table)
        lo, hi = self._bounds(tolerance)
        amounts = np.where(self.least > self.step * (1.0 + HAIR), self.least, 0.0)
        plain = Polytope(np.array([row.coef for row in limits]).reshape(len(limits), n),
                         np.array([row.hold for row in limits]), lo, hi, whole=model.whole,
                         steps=Steps(self.step / self.batch, amounts / self.batch), slack=tolerance / self.batch)
        rules = list(self._share_rows(tolerance))
        return plain.with_rows([row for row, _ in rules], hold=0.0, room=[room for _, room in rules])

    def shares_only(self, tolerance: float) -> Polytope:
        """The same without the limits on properties and cost."""
        return self.problem(tolerance, replace(self.model, rows=()))

    def in_shares(self, tolerance: float) -> Model:
        """A model in shares that no charges within a tolerance [kg] lie outside of: rounded bounds, no group rules."""
        lo, hi = self._bounds(tolerance)
        off = tolerance / self.batch
        rows = tuple(row for row in self.model.rows if not row.of_shares)
        return replace(self.model, rows=rows, lo=lo / (1.0 + off), hi=np.minimum(1.0, hi / (1.0 - off)))

    def _bounds(self, tolerance: float) -> tuple[Array, Array]:
        """Least and most of each stock, in batches: by what is there and by the rules on one stock."""
        under, over = 1.0 - tolerance / self.batch, 1.0 + tolerance / self.batch
        lo, hi = np.zeros(len(self.step)), np.minimum(self.most / self.batch, over)
        for demand in self.demands:
            if demand.of_one:
                (i,), give = demand.members, self.rounding(demand, tolerance) / self.batch
                # Rounded a demand may be, left out never.
                least = self.least[i] / self.batch if demand.low > 0.0 else 0.0
                lo[i] = max(lo[i], demand.low * under - give, least)
                hi[i] = min(hi[i], demand.high * over + give)
        for i, stock in enumerate(self.model.table.stocks):
            if stock.in_vessel_kg is not None:
                lo[i] = hi[i] = stock.in_vessel_kg / self.batch
        return lo, hi

    def _share_rows(self, tolerance: float) -> Iterator[tuple[Array, float]]:
        """A row for each side of each rule, and the room that rounding to a step needs, in batches."""
        for demand in self.demands:
            give = self.rounding(demand, tolerance) / self.batch
            inside = demand.parts
            if demand.high < 1.0:
                yield inside - demand.high, give
            if demand.low > 0.0:
                yield demand.low - inside, give
                if give > 0.0 and demand.members:
                    yield -inside, -min(self.least[i] for i in demand.members) / self.batch

    def rounding(self, demand: Demand, tolerance: float) -> float:
        """How far outside a rule its charge may lie [kg], for want of a step inside; at most half a step.

        0 where a step lies inside whatever the total. A rule asks a share of the total, so the tolerance counts.
        """
        step = min((self.step[i] for i in demand.members), default=0.0)
        low, high = demand.low * self.batch, demand.high * self.batch
        if step <= 0.0 or low <= 0.0 or high - low >= step:
            return 0.0
        if _off(low + demand.low * tolerance, high - demand.high * tolerance, step) <= 0.0:
            return 0.0
        return float(min(step / 2.0, _off(low, high, step) + demand.high * tolerance)) * (1.0 + HAIR)

    def out_of_reach(self) -> list[str]:
        """Rules on one stock that no whole step comes within half a step of, in words."""
        found = []
        for demand in self.demands:
            if not demand.of_one or demand.low <= 0.0:
                continue
            i = demand.members[0]
            high, least = demand.high * self.batch, float(self.least[i])
            allowed = self.rounding(demand, 0.0)
            if least > high + allowed + HAIR * max(least, 1.0):
                near = (least - self.step[i] / 2.0) / demand.high
                found.append(f"{demand.of}: {100.0 * demand.high:.4g} % of {kg(self.batch)} kg is {kg(high)} kg, and "
                             f"the least that can be charged is {kg(least)} kg: right for a batch of "
                             f"{least / demand.high:,.0f} kg, within half a step from {near:,.0f} kg on; make so "
                             "much, or weigh it finer")
        return found

    def masses(self, x: Array) -> Array:
        """Exact masses [kg] of an answer: whole steps; to a milligram where any mass will do."""
        return np.round(Steps(self.step, self.least).nearest(x * self.batch), 6)


def _off(low: float, high: float, step: float) -> float:
    """How far the nearest whole steps lie outside a span [kg]; 0: some lie inside."""
    below = step * float(np.floor(high / step + HAIR))
    if below >= low - HAIR * step:
        return 0.0
    return min(low - below, below + step - high)


def _check(stock: Stock) -> None:
    cells = (("package_kg", stock.package_kg, False), ("division_kg", stock.division_kg, False),
             ("least_charge_kg", stock.least_charge_kg, True))
    for cell, value, may_be_0 in cells:
        if value is not None and not (np.isfinite(value) and (value > 0.0 or (may_be_0 and value == 0.0))):
            raise StockError(f"{stock.code}: {cell} {value:g} must be a mass above 0; mend it or leave it empty",
                             stock=stock.code, cell=cell)


def _demands(model: Model) -> Iterator[Demand]:
    stocks, target = model.table.stocks, model.target
    for rule in target.rules:
        members = tuple(i for i, s in enumerate(stocks) if s.matches(rule.of) and s.in_vessel_kg is None)
        parts = np.array([s.part_of(rule.of) for s in stocks])
        # One that nothing serves and that demands something stays: no charges keep it.
        if rule.low > 0.0 or (parts.any() and rule.high < 1.0):
            yield Demand(rule.of, rule.low, rule.high, members, parts)
    for code, share in target.held.items():
        here = code in model.table.codes
        if here or share > 0.0:
            place = (model.table.codes.index(code),) if here else ()
            yield Demand(code, share, share, place, np.array([float(i in place) for i in range(len(stocks))]))


def kg(mass: float) -> str:
    """A mass [kg] in words: to a gram, without needless zeros."""
    return f"{round(mass, 3):,.10g}"
