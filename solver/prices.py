"""What each binding limit costs, found by solving once more and never from duals alone.

The least cost is found with the limit moved by a small step, eased and tightened, and from it the cost per natural
unit. Whole-number rules hold in every solve, so that next to a rule a cost may jump: then the two differ. What the
stocks' own prices are worth: entering.py.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from .errors import TargetError
from .linear import Polytope, Stopwatch
from .properties import Array, lookup
from .recipe import BINDING, exact_search
from .rows import Model, as_table, build
from .stocks import Stock, StockTable
from .target import ShareRule, Target
from .windows import Outcome

GAP = 1e-9  # of the cost: finer than a recipe asks, for here costs are subtracted
STEP = 0.1  # of R: how far a property's limit is moved
SHARE_STEP = 1e-3  # mass fraction: how far a share rule is moved, and a tank in parts of the batch
AT = 1e-6  # mass fraction within which a share lies at its rule
USED = 1e-7  # mass fraction from which a stock counts as used


@dataclass(frozen=True)
class LimitPrice:
    """What one binding limit costs, with the step and the costs that show it."""

    kind: str  # "property", "share", "held", "tank", "most stocks" or "least share"
    of: str  # property code, what a share rule speaks of, or a stock
    side: str  # "low", "high", or "both" where a share is fixed
    limit: float  # as it is held: property's unit, mass %, or t on hand
    unit: str  # one natural unit: "mm²/s", "point" of VI, "°C", "% of the blend", "t on hand", "stock"
    step: float  # how far it was moved, in the same unit
    cost_per_t: float  # least cost as it stands
    eased_per_t: float | None  # least cost with the limit eased by the step; None: no blend, or no such step
    tightened_per_t: float | None  # and tightened by it; of a fixed share: less of it, and more

    @property
    def saved_per_unit(self) -> float | None:
        """What one unit of easing saves [currency per t of blend]."""
        return None if self.eased_per_t is None else (self.cost_per_t - self.eased_per_t) / self.step

    @property
    def added_per_unit(self) -> float | None:
        """What one unit of tightening adds [currency per t of blend]."""
        return None if self.tightened_per_t is None else (self.tightened_per_t - self.cost_per_t) / self.step


class Priced:
    """One target's least-cost blend and what is solved beside it. `least` may be infeasible."""

    def __init__(self, stocks: StockTable | Iterable[Stock], target: Target, *, time_limit: float = 30.0) -> None:
        self.table, self.target = as_table(stocks), target
        self.watch = Stopwatch(time_limit)
        self.model = build(self.table, target)
        self.tight: Polytope | None = None  # the model's polytope with the VI enclosed, where that pays

    @cached_property
    def least(self) -> Outcome:
        """The least-cost blend, closer than a recipe is proven."""
        return self.solve(self.model)

    def solve(self, model: Model, price: Array | None = None, hi: Array | None = None) -> Outcome:
        """The least cost of a model, with other prices or bounds, each of shape (n,), where they are given."""
        if model.short or any(need.empty for need in model.requirements) or len(model.table) == 0:
            return Outcome("infeasible", None, np.inf, np.inf)
        problem = self.tight if self.tight is not None and model is self.model else model.polytope()
        problem = problem if hi is None else replace(problem, hi=hi)
        return exact_search(model, problem, model.table.price if price is None else price, self.watch, gap=GAP)[0]


class LimitPrices(Priced):
    """What the binding limits of one target cost."""

    def _cost(self, target: Target, table: StockTable | None = None) -> float | None:
        """The least cost of a target that was moved; None: no blend, or a rule that contradicts itself then."""
        try:
            found = self.solve(build(table or self.table, target))
        except TargetError:
            return None
        return float(found.value) if found.x is not None else None

    def limits(self) -> Iterator[LimitPrice]:
        """Every binding limit and rule, each as soon as it is worked out; nothing where no blend exists."""
        if self.least.x is None:
            return
        yield from self._properties(self.least.x)
        yield from self._shares(self.least.x)
        yield from self._tanks(self.least.x)
        yield from self._numbers(self.least.x)

    def _properties(self, x: Array) -> Iterator[LimitPrice]:
        for need in self.model.requirements:
            values = [v for view in self.model.exact if (v := view.read(need.code, x)) is not None]
            for side, held in (("low", need.held_low), ("high", need.held_high)):
                if held is None or not values:
                    continue
                r = need.unit_of_miss(side)
                if min(abs(v - held) for v in values) > max(BINDING * r, need.tolerance()):
                    continue
                step = STEP * r
                inward = step if side == "low" else -step
                eased, tightened = (self._cost(self._moved(need.code, side, held + by)) for by in (-inward, inward))
                unit = lookup(need.code).unit or "point"
                yield LimitPrice("property", need.code, side, held, unit, step, self.least.value, eased, tightened)

    def _moved(self, code: str, side: str, to: float) -> Target:
        return replace(self.target, moved={**self.target.moved, (code, side): to})

    def _shares(self, x: Array) -> Iterator[LimitPrice]:
        for k, rule in enumerate(self.target.rules):
            share = float(sum(v * s.part_of(rule.of) for v, s in zip(x, self.model.table.stocks, strict=True)))
            fixed = rule.high - rule.low <= AT
            sides = [("low", rule.low, rule.low > 0.0), ("high", rule.high, rule.high < 1.0)]
            for side, at, asked in [("both", rule.low, rule.high > 0.0)] if fixed else sides:
                if asked and abs(share - at) <= AT:
                    yield self._share_price("share", rule.of, side, at, lambda to, k=k, side=side: replace(
                        self.target, rules=tuple(_with_side(r, side, to) if n == k else r
                                                 for n, r in enumerate(self.target.rules))))
        for code, share in self.target.held.items():
            yield self._share_price("held", code, "both", share, lambda to, code=code: replace(
                self.target, held={**self.target.held, code: to}))

    def _share_price(self, kind, of, side, at, moved) -> LimitPrice:  # type: ignore[no-untyped-def]
        inward = -SHARE_STEP if side == "high" else SHARE_STEP
        costs = [self._cost(moved(at + by)) if 0.0 <= at + by <= 1.0 else None for by in (-inward, inward)]
        return LimitPrice(kind, of, side, 100.0 * at, "% of the blend", 100.0 * SHARE_STEP, self.least.value, *costs)

    def _tanks(self, x: Array) -> Iterator[LimitPrice]:
        batch = self.target.batch_kg
        if batch is None:
            return
        for i, stock in enumerate(self.model.table.stocks):
            if stock.in_vessel_kg is not None:
                continue
            available = float(self.model.table.available[i])
            if available < batch * (1.0 - AT) and abs(float(x[i]) - available / batch) <= AT:
                step = min(SHARE_STEP * batch, 0.5 * available)
                eased, tightened = (self._cost(self.target, self._holding(stock.code, by)) for by in (step, -step))
                yield LimitPrice("tank", stock.code, "high", available / 1000.0, "t on hand", step / 1000.0,
                                 self.least.value, eased, tightened)

    def _holding(self, code: str, more: float) -> StockTable:
        return StockTable(replace(s, on_hand_kg=(s.on_hand_kg or 0.0) + more) if s.code == code else s
                          for s in self.table.stocks)

    def _numbers(self, x: Array) -> Iterator[LimitPrice]:
        used = self.model.table.counted & (x > USED)
        most, least = self.target.max_stocks, self.target.min_share
        if most is not None and int(used.sum()) >= most:
            eased = self._cost(replace(self.target, max_stocks=most + 1))
            tightened = self._cost(replace(self.target, max_stocks=most - 1)) if most > 1 else None
            yield LimitPrice("most stocks", "", "high", float(most), "stock", 1.0, self.least.value, eased, tightened)
        if least and bool(np.any(np.abs(x[used] - least) <= AT)):
            yield self._share_price("least share", "", "low", least,
                                    lambda to: replace(self.target, min_share=to))


def _with_side(rule: ShareRule, side: str, to: float) -> ShareRule:
    return replace(rule, low=rule.low if side == "high" else to, high=rule.high if side == "low" else to)
