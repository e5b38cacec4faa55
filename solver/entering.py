"""The price at which a stock enters the least-cost blend or leaves it, and how far prices and quantities can move.

With W the least cost without stock i, the price below which it is used is

    p* = max (W − Σ_{j≠i} x_j price_j) / x_i   over the blends with x_i > 0

found by Dinkelbach's steps: solve at a price, put the blend's ratio in the price's place, until no blend with the
stock is cheaper than W (W. Dinkelbach, Management Science 13 (1967) 492). Whole-number rules hold in every solve.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from .enclosure import enclosed
from .laws import index_of_law
from .linear import solve
from .prices import Priced
from .properties import Array
from .requirements import ceiling
from .rows import Model, build
from .stocks import Stock, StockTable
from .target import Target
from .viscosity_index import LOWEST_KV100, kv40_at
from .windows import Outcome

TOUCH = 1e-4  # mass fraction from which a stock counts as used here: 0.01 %, the least that a sheet shows
FURTHEST = 100.0  # currency/t from the price worked out: further off it is not looked for
MONEY = 0.01  # currency/t to which a price is found: it is checked this far on either side
QUANTITY = 5e-4  # part of the batch to which a quantity is found
At = Callable[[float], Outcome]  # the least cost at a price, or at a quantity


@dataclass(frozen=True)
class StockPrice:
    """The price at which a stock enters the least-cost blend, or leaves it."""

    stock: str
    price_per_t: float  # as it is
    share: float  # mass fraction as it is, 0: idle
    critical_per_t: float | None  # below it the stock is used, above it not; None: there is no such price
    share_below: float | None  # mass fraction just below that price
    checked: bool  # 0.01 below it is used and 0.01 above not, each solved once more
    note: str = ""  # why there is none


@dataclass(frozen=True)
class Reach:
    """How far a price or a quantity can move, alone, before the set of stocks changes."""

    stock: str
    what: str  # "price_per_t" or "on_hand_kg" (pumpable)
    now: float
    low: float | None  # the last value with the same set; None: it may fall to 0
    high: float | None  # None: however high
    set_below: tuple[str, ...] | None = None  # the stocks just below low; None: none needed, or no blend
    set_above: tuple[str, ...] | None = None
    checked: bool = True  # solved just inside and just outside each end


class StockPrices(Priced):
    """What the prices and quantities of one target's stocks are worth."""

    def __init__(self, stocks: StockTable | Iterable[Stock], target: Target, *, time_limit: float = 30.0) -> None:
        super().__init__(stocks, target, time_limit=time_limit)
        self._known: dict[int, StockPrice] = {}

    @cached_property
    def least(self) -> Outcome:
        """The least-cost blend, on the same enclosure of the VI as every solve beside it: costs are subtracted."""
        found = self.solve(self.model)
        if found.x is None:
            return found
        self.tight = enclosed(self.model, self.model.polytope(), found.x, self.watch)
        again = self.solve(self.model)
        if again.x is None:
            self.tight = None
        return found if again.x is None else again

    def stocks(self) -> Iterator[StockPrice]:
        """Every stock that may serve, those used first: its price of leaving or of entering.

        What is in the vessel already neither leaves nor enters.
        """
        if self.least.x is None:
            return
        x = self.least.x
        guesses = self._guesses(x)
        for i in sorted(range(len(x)), key=lambda i: (x[i] <= TOUCH, -x[i])):
            if self.model.table.stocks[i].in_vessel_kg is None:
                yield self._critical_of(i, guesses[i])

    def _critical_of(self, i: int, guess: float) -> StockPrice:
        assert self.least.x is not None
        if i not in self._known:
            self._known[i] = self._critical(i, float(self.least.x[i]), guess)
        return self._known[i]

    def _critical(self, i: int, share: float, guess: float) -> StockPrice:
        code, price = self.model.table.codes[i], float(self.model.table.price[i])
        if self.model.lo[i] > 0.0:
            return StockPrice(code, price, share, None, None, True, "demanded")
        if self.model.hi[i] <= TOUCH:
            return StockPrice(code, price, share, None, None, True, "capped below 0.01 %")
        without = self.least.value
        if share > TOUCH:
            hi = self.model.hi.copy()
            hi[i] = 0.0
            rest = self.solve(self.model, hi=hi)
            if rest.x is None:
                stopped = rest.status == "stopped"
                return StockPrice(code, price, share, None, None, not stopped,
                                  "time ran out" if stopped else "no blend without it")
            without = rest.value
        critical = self._followed_up(i, without, price if share > TOUCH else guess)
        if critical is None:
            return StockPrice(code, price, share, None, None, not self.watch.over,
                              "time ran out" if self.watch.over else "not even for nothing")
        return self._checked(i, price, share, critical)

    def _checked(self, i: int, price: float, share: float, critical: float) -> StockPrice:
        """Solve 0.01 on either side. Where the blend bends smoothly a stock enters with hardly anything: then close
        in on the price at which it counts as used."""
        low, high = critical - MONEY, critical + MONEY
        below, above = self._share_at(i, low), self._share_at(i, high)
        step = MONEY
        while below <= TOUCH and step < FURTHEST and not self.watch.over:
            step *= 4.0
            low, high, above = low - step, low, below
            below = self._share_at(i, low)
        while above > TOUCH and step < FURTHEST and not self.watch.over:
            step *= 4.0
            low, high, below = high, high + step, above
            above = self._share_at(i, high)
        while high - low > 2.01 * MONEY and below > TOUCH >= above and not self.watch.over:
            middle = 0.5 * (low + high)
            here = self._share_at(i, middle)
            if here > TOUCH:
                low, below = middle, here
            else:
                high, above = middle, here
        checked = below > TOUCH >= above and high - low <= 2.01 * MONEY
        return StockPrice(self.model.table.codes[i], price, share, 0.5 * (low + high), below, checked)

    def _share_at(self, i: int, price: float) -> float:
        found = self.at_price(i, price)
        return 0.0 if found.x is None else float(found.x[i])

    def _followed_up(self, i: int, without: float, start: float) -> float | None:
        """Dinkelbach's steps upward from a price at which the stock is used; None where it is at none."""
        best: float | None = None
        for begin in dict.fromkeys((start, 0.5 * start, 0.0)):
            at = begin
            while not self.watch.over:
                x = self.at_price(i, at).x
                if x is None or float(x[i]) <= TOUCH:
                    break
                ratio = (without - float(self._priced(i, 0.0) @ x)) / float(x[i])
                best = max(ratio, at)
                if ratio <= at + 1e-4 * MONEY:
                    break
                at = ratio
            if best is not None:
                break
        return best

    def _priced(self, i: int, price: float) -> Array:
        prices = self.model.table.price.copy()
        prices[i] = price
        return prices

    def at_price(self, i: int, price: float) -> Outcome:
        """The least-cost blend with another price of stock i, in the model's order."""
        if ceiling(self.target) is None:
            return self.solve(self.model, self._priced(i, price))
        code = self.model.table.codes[i]
        table = StockTable(replace(s, price_per_t=price) if s.code == code else s for s in self.table.stocks)
        return self.solve(build(table, self.target))  # the cost ceiling is a row of the prices

    def _guesses(self, x: Array) -> Array:
        """A price a little below the one at which each idle stock enters, from the rows' own prices at x."""
        problem = self.model.polytope(whole=False).with_rows(_along_the_curve(self.model, x), hold=0.0)
        reduced = solve(problem, self.model.table.price, self.watch).reduced
        price = self.model.table.price
        return 0.9 * price if reduced is None else price - np.maximum(reduced, 0.0) - 2.0 * MONEY

    # How far

    def reaches(self) -> Iterator[Reach]:
        """Of every used stock that nothing demands: how far its price, and with a batch its quantity, can move."""
        if self.least.x is None:
            return
        x = self.least.x
        for i in sorted(np.flatnonzero(x > TOUCH), key=lambda i: -x[i]):
            if self.model.hi[i] - self.model.lo[i] > TOUCH:
                yield self._price_reach(int(i))
                if self.target.batch_kg is not None:
                    yield self._quantity_reach(int(i), float(x[i]))

    def _set(self, outcome: Outcome) -> frozenset[int] | None:
        return None if outcome.x is None else frozenset(int(k) for k in np.flatnonzero(outcome.x > TOUCH))

    def _named(self, members: frozenset[int] | None) -> tuple[str, ...] | None:
        return None if members is None else tuple(self.model.table.codes[k] for k in sorted(members))

    def _price_reach(self, i: int) -> Reach:
        now = float(self.model.table.price[i])
        critical = self._critical_of(i, now).critical_per_t
        top = critical + 2.0 * MONEY if critical is not None else 20.0 * abs(now) + 1e4
        return self._between(i, "price_per_t", now, 0.0, top, lambda p: self.at_price(i, p), MONEY)

    def _quantity_reach(self, i: int, share: float) -> Reach:
        batch = self.target.batch_kg
        assert batch is not None
        free = build(self.table.plentiful(batch), self.target)
        rule = float(free.hi[free.table.index(self.model.table.codes[i])])

        def at(kg: float) -> Outcome:
            hi = self.model.hi.copy()
            hi[i] = min(rule, kg / batch)
            return self.solve(self.model, hi=hi)

        now, tol = float(self.model.table.available[i]), QUANTITY * batch
        return self._between(i, "on_hand_kg", now, 0.0, max(now, rule * batch), at, tol, share * batch)

    def _between(self, i: int, what: str, now: float, bottom: float, top: float, at: At, tol: float,
                 need: float | None = None) -> Reach:
        """The nearest values on either side at which the set is another: bracketed, and so solved on both sides.

        need: down to it nothing can change, for no more than that is used.
        """
        code, members = self.model.table.codes[i], self._set(self.least)
        low, below, low_ok = self._bracket(i, min(now, need) if need is not None else now, bottom, at, tol, members)
        high, above, high_ok = self._bracket(i, now, top, at, tol, members)
        return Reach(code, what, now, low, high, self._named(below), self._named(above), low_ok and high_ok)

    def _bracket(self, i: int, inside: float, outside: float, at: At, tol: float,
                 members: frozenset[int] | None) -> tuple[float | None, frozenset[int] | None, bool]:
        """(last value with the same set or None, the set beyond, was it closed in time)."""
        if abs(outside - inside) <= tol:
            return None, None, True
        a, b, far = inside, outside, at(outside)
        if self._set(far) == members:
            return None, None, not self.watch.over
        near = at(inside)
        beyond, turn = self._set(far), 0
        while abs(b - a) > tol and not self.watch.over:
            turn += 1
            tried = self._crossing(i, a, near, b, far) if turn % 3 else None
            for p in (0.5 * (a + b),) if tried is None else (tried - 0.4 * tol, tried + 0.4 * tol):
                if not min(a, b) < p < max(a, b):
                    continue
                found = at(p)
                if self._set(found) == members:
                    a, near = p, found
                else:
                    b, far, beyond = p, found, self._set(found)
        return a, beyond, abs(b - a) <= tol

    def _crossing(self, i: int, a: float, near: Outcome, b: float, far: Outcome) -> float | None:
        """Where the costs of the two blends, each as it stands, would be equal at some price of stock i."""
        if near.x is None or far.x is None or abs(float(near.x[i] - far.x[i])) <= TOUCH:
            return None
        rest = [float(o.value) - float(o.x[i]) * p for o, p in ((near, a), (far, b))]  # type: ignore[index]
        return (rest[1] - rest[0]) / float(near.x[i] - far.x[i])


def _along_the_curve(model: Model, x: Array) -> list[Array]:
    """Rows along the curve of equal VI at a blend x, shape (n,): a limit on the VI as it looks from there."""
    need, rows = model.vi, []
    if need is None:
        return []
    for view in model.views:
        g40, g100, (index, value) = view.gauges["kv40"], view.gauges["kv100"], index_of_law(view.law)
        for limit, side in ((need.held_low, 1.0), (need.held_high, -1.0)):
            if limit is None:
                continue
            at = float(g100.index_of(x))
            h = 1e-6 * max(1.0, abs(at))
            here, ahead = (float(index(kv40_at(limit, max(LOWEST_KV100, float(value(p)))))) for p in (at, at + h))
            slope = (ahead - here) / h
            rows.append(side * g40.sign * (g40.num - slope * g100.num - (here - slope * at) * g40.den))
    return rows
