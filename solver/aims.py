"""Blends by other aims than the least cost, over the same rows and the same exact treatment of the VI.

least-cost      minimise Σ x_i price_i
widest-margin   maximise the least margin over all limits, each in units of its method's reproducibility
fewest-stocks   minimise the number of base stocks and rework that are used
most-of         maximise the share of one stock
least-of        minimise it
least-scarce    minimise the largest part of any tank that is used: max x_i/available_i (of stocks whose share is free)
closest         minimise Σ |x_i − trial_i|: the same as last time, as far as today's tanks allow
most-rework     maximise the share of rework, which is what a plant wants out of its tanks

Of blends that an aim cannot tell apart the cheapest is given. Whole-number rules (most stocks, least share) hold for
every aim, as does the cost ceiling. The aims are homogeneous in the batch: its size matters through the tanks alone.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from .beside import best_beside
from .choices import HAIR, within
from .few import can_tell, cheapest_pair
from .linear import Polytope, Stopwatch
from .margin import CLOSE, margin, moved_in, sides, widest
from .properties import Array, lookup
from .recipe import GAP, Recipe, exact_search, least_cost, recipe_of
from .rows import as_table, build
from .stocks import Stock, StockTable
from .target import Target
from .windows import Outcome

AIMS = ("least-cost", "widest-margin", "fewest-stocks", "most-of", "least-of", "least-scarce", "closest",
        "most-rework")
SHARE_GAP = 1e-6  # mass fraction to which a share or a distance is least or most
USED = 1e-9  # mass fraction from which a stock counts as used


@dataclass(frozen=True)
class Aim:
    """The blend that one aim gives, and the aim's own figure."""

    name: str
    recipe: Recipe | None  # None: there is none, and `note` says why
    figure: float | None  # cost per t; margin in units of R; number of stocks; mass fraction; kg; Σ |x − trial|
    of: str = ""  # the stock, or the trial
    proven: bool = False  # is no blend better by this aim, to the gap stated in the module
    extra_pct: float | None = None  # how much dearer than the least cost
    note: str = ""  # in words


def aims(stocks: StockTable | Iterable[Stock], target: Target, names: Sequence[str] = AIMS, *, stock: str = "",
         trial: Mapping[str, float] | None = None, trial_name: str = "", extra: float | None = None,
         time_limit: float = 10.0) -> Iterator[Aim]:
    """The blend of each aim, in the order of `names`.

    stock: whose share most-of and least-of speak of; empty: the base stock or rework that the least-cost blend
    uses most of. trial: the shares, stock → mass fraction, that closest keeps to. extra: every blend costs at most
    so much more than the least cost [%]; None: whatever the target's ceiling allows. time_limit [s] of each aim.
    Nothing is lost when no blend meets the target: every aim then says so.

    Raises TargetError or StockError on bad input, for an unknown aim too.
    """
    run = _Aims(as_table(stocks), target, stock, trial, trial_name, extra, time_limit)
    for name in names:
        yield run.aim(name)


class _NoAim(Exception):
    """An aim has no blend; the reason in words."""


@dataclass(frozen=True)
class _Found:
    """What an aim found: shares over the model's stocks, its figure, is it proven, and a remark."""

    x: Array
    figure: float
    proven: bool
    of: str = ""
    note: str = ""


class _Aims:
    """Everything that the aims of one target share: its least-cost blend and the model they are sought on."""

    def __init__(self, table: StockTable, target: Target, stock: str, trial: Mapping[str, float] | None,
                 trial_name: str, extra: float | None, time_limit: float) -> None:
        self.table, self.trial, self.trial_name, self.time_limit = table, trial, trial_name, time_limit
        self.asked = build(table, target)
        if stock:
            table.index(stock)
        self.best = least_cost(self.asked, Stopwatch(time_limit))
        self.target, self.model = target, self.asked
        if extra is not None and self.best.x is not None:
            self.target = within(target, self.best.value, extra)
            self.model = build(table, self.target)
        self.stock = stock or self._most_used()
        self.watch = Stopwatch(time_limit)

    def _most_used(self) -> str:
        if self.best.x is None:
            return ""
        counted = np.where(self.asked.table.counted, self.best.x, -1.0)
        return self.asked.table.codes[int(np.argmax(counted))]

    def aim(self, name: str) -> Aim:
        """The blend of one aim."""
        if name not in AIMS:
            from .errors import TargetError

            raise TargetError(f"unknown aim {name!r}; known are {', '.join(AIMS)}", where="aim")
        self.watch = Stopwatch(self.time_limit)
        ways: dict[str, Callable[[], _Found]] = {
            "least-cost": self._least_cost, "widest-margin": self._widest, "fewest-stocks": self._fewest,
            "most-of": lambda: self._share_of(-1.0), "least-of": lambda: self._share_of(1.0),
            "least-scarce": self._scarce, "closest": self._closest, "most-rework": self._rework}
        of = {"most-of": self.stock, "least-of": self.stock, "closest": self.trial_name}.get(name, "")
        try:
            if self.best.x is None:
                raise _NoAim("no blend was found in the time" if self.best.status == "stopped"
                             else "no blend meets the target")
            found = ways[name]()
        except _NoAim as reason:
            return Aim(name, None, None, of, note=str(reason))
        proven = found.proven and not self.model.bent
        recipe = recipe_of(self.asked, found.x, "optimal" if proven else "stopped", bound=self.best.bound)
        cost = recipe.cost_per_t
        above = None if cost is None else 100.0 * (cost - self.best.value) / max(abs(self.best.value), 1e-12)
        return Aim(name, recipe, found.figure, of or found.of, proven, above, found.note)

    # The aims

    def _least_cost(self) -> _Found:
        assert self.best.x is not None
        return _Found(self.best.x, self.best.value, self.best.status == "optimal")

    def _widest(self) -> _Found:
        assert self.best.x is not None
        inside = widest(self.model, self.best.x, self.watch)
        x = self._cheapest_inside(inside.x, inside.margin)
        names = ", ".join(lookup(code).name for code in inside.aside)
        note = f"{names}: a single value is asked, so no margin is counted" if names else ""
        return _Found(x, margin(self.model, x), inside.bound - inside.margin <= 2.0 * CLOSE, note=note)

    def _cheapest_inside(self, x: Array, width: float) -> Array:
        """The cheapest blend that is as far inside, but for a hair."""
        moved = moved_in(sides(self.model)[0], max(0.0, width - 0.5 * CLOSE))  # but never outside a limit
        inner = build(self.table, replace(self.target, moved={**self.target.moved, **moved}))
        found = least_cost(inner, self.watch)
        worse = found.x is None or margin(self.model, found.x) < width - CLOSE or bool(self.model.missed(found.x))
        return x if worse or found.x is None else found.x

    def _fewest(self) -> _Found:
        counted = self.model.table.counted
        assert self.best.x is not None
        capped = self.best if self.model is self.asked else least_cost(self.model, self.watch)
        best = self.best if capped.x is None else capped
        assert best.x is not None
        x, count = best.x, int(np.sum(counted & (best.x > USED)))
        while True:
            found = self._of_fewer(count)
            fewer = count if found.x is None else int(np.sum(counted & (found.x > USED)))
            if found.x is None or fewer >= count:
                return _Found(x, float(count), count == 0 or found.status == "infeasible")
            x, count = found.x, fewer

    def _of_fewer(self, count: int) -> Outcome:
        """The cheapest blend of fewer base stocks and rework than `count`; of pairs and single ones all are judged."""
        if count == 0:
            return Outcome("infeasible", None, np.inf, np.inf)
        if count == 1:
            hi = np.where(self.model.table.counted, 0.0, self.model.hi)
            return self._ask(replace(self.model.polytope(), hi=hi), self.model.table.price, gap=GAP)
        if count <= 3 and can_tell(self.model):
            return cheapest_pair(self.model, self.watch, single=count == 2)
        return least_cost(build(self.table, replace(self.target, max_stocks=count - 1)), self.watch)

    def _share_of(self, sign: float) -> _Found:
        """The most (sign −1) or least (sign 1) of one stock."""
        if self.stock not in self.model.table.codes:
            reason = next((x.reason for x in self.model.left_out if x.stock == self.stock),
                          "the product does not allow it")
            raise _NoAim(f"{self.stock} may not serve: {reason}")
        i = self.model.table.index(self.stock)
        problem = self.model.polytope()
        end = problem.lo[i] if sign > 0.0 else problem.hi[i]
        if 0.0 < end < 1.0 or sign > 0.0:  # a bound that can be reached leaves the choice to the cost
            lo, hi = problem.lo.copy(), problem.hi.copy()
            lo[i] = hi[i] = end
            found = self._ask(replace(problem, lo=lo, hi=hi), self.model.table.price, gap=GAP)
            if found.x is not None:
                return _Found(found.x, float(found.x[i]), found.status == "optimal")
        c = np.zeros(len(self.model.table))
        c[i] = sign
        found = self._least_of(c)
        assert found.x is not None
        return _Found(found.x, float(found.x[i]), found.status == "optimal")

    def _rework(self) -> _Found:
        c = np.array([-1.0 if s.kind == "rework" else 0.0 for s in self.model.table.stocks])
        if not c.any():
            raise _NoAim("no rework may serve")
        found = self._least_of(c)
        assert found.x is not None
        return _Found(found.x, float(-c @ found.x), found.status == "optimal")

    def _scarce(self) -> _Found:
        assert self.best.x is not None
        table, n = self.model.table, len(self.model.table)
        free = self.model.hi - self.model.lo > USED
        parts = np.where(free, self.best.x, 0.0) / table.available
        if not parts.any():
            return _Found(self.best.x, self._stretch(self.best.x), True, note="every share is fixed")
        # In units of the least-cost blend's largest part, so that 1 is enough.
        most = parts.max() * (1.0 + HAIR) * table.available
        rows = [np.concatenate([np.eye(n)[i], [-most[i]]]) for i in np.flatnonzero(free)]
        found = best_beside(self.model, 1, rows, np.ones(1), np.concatenate([np.zeros(n), [1.0]]), self.watch, 1e-6)
        if found.x is None:
            raise _NoAim("no blend was found in the time")
        part = float(np.max(np.where(free, found.x, 0.0) / most))
        problem = self.model.polytope()
        hi = np.where(free, np.minimum(problem.hi, np.maximum(problem.lo, part * (1.0 + HAIR) * most)), problem.hi)
        cheapest = self._ask(replace(problem, hi=hi), table.price, gap=GAP)
        x = found.x if cheapest.x is None else cheapest.x
        ends = table.codes[int(np.argmax(x / table.available))]
        return _Found(x, self._stretch(x), found.status == "optimal", ends,
                      f"{ends} ends first" + ("" if free[table.index(ends)] else "; its share is fixed"))

    def _stretch(self, x: Array) -> float:
        """The batch [kg] for which the tanks would last."""
        return float(1.0 / np.max(x / self.model.table.available))

    def _closest(self) -> _Found:
        if not self.trial or sum(self.trial.values()) <= 0.0:
            raise _NoAim("there is no trial to keep to")
        table, n = self.model.table, len(self.model.table)
        total = sum(self.trial.values())
        wanted = np.array([self.trial.get(code, 0.0) / total for code in table.codes])
        gone = [code for code, share in self.trial.items() if share > USED and code not in table.codes]
        note = f"{', '.join(gone)} cannot serve today" if gone else ""
        if self._keeps(wanted):
            return _Found(wanted, 0.0, True, note=note)
        which = np.flatnonzero(wanted > USED)
        # o_i ≤ x_i, o_i ≤ trial_i: Σ |x − trial| = 2 (1 − Σ o)
        rows = [np.concatenate([-np.eye(n)[i], np.eye(len(which))[k]]) for k, i in enumerate(which)]
        c = np.concatenate([np.zeros(n), -np.ones(len(which))])
        found = best_beside(self.model, len(which), rows, wanted[which], c, self.watch, SHARE_GAP)
        if found.x is None:
            raise _NoAim("no blend was found in the time")
        overlap = float(np.minimum(found.x, wanted).sum())
        rows.append(np.concatenate([np.full(n, overlap - SHARE_GAP), -np.ones(len(which))]))
        price = np.concatenate([table.price, np.zeros(len(which))])
        cheapest = best_beside(self.model, len(which), rows, wanted[which], price, self.watch,
                               GAP * abs(self.best.value))
        x = found.x if cheapest.x is None else cheapest.x
        off = float(np.abs(x - wanted).sum()) + max(0.0, 1.0 - float(wanted.sum()))
        return _Found(x, off, found.status == "optimal", note=note)

    def _keeps(self, x: Array) -> bool:
        """Does a blend meet everything that is asked?"""
        problem = self.model.polytope()
        inside = np.all(problem.lo - USED <= x) and np.all(x <= problem.hi + USED) and abs(x.sum() - 1.0) <= USED
        rows = not len(problem.rows) or bool(np.all(problem.rows @ x <= USED))
        whole = problem.whole is None or problem.whole.kept_by(x)
        return bool(inside) and (rows or self.model.bent) and whole and not self.model.missed(x)

    # Searching

    def _ask(self, problem: Polytope, c: Array, gap: float = 0.0) -> Outcome:
        absolute = SHARE_GAP if gap == 0.0 else 0.0
        return exact_search(self.model, problem, c, self.watch, gap=gap, gap_absolute=absolute)[0]

    def _least_of(self, c: Array) -> Outcome:
        """Minimise c·x, a sum of shares; of the blends that do, the cheapest."""
        problem = self.model.polytope()
        found = self._ask(problem, c)
        if found.x is None:
            raise _NoAim("no blend was found in the time")
        tied = problem.with_rows([c - (found.value + SHARE_GAP)], hold=0.0)
        cheapest = self._ask(tied, self.model.table.price, gap=GAP)
        return found if cheapest.x is None else replace(found, x=cheapest.x)
