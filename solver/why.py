"""Why no blend exists: irreducible sets of demands that cannot hold together.

A set of demands is irreducible when no blend keeps them all and letting any one of them go makes one possible.
It is found by a deletion filter: a demand whose loss leaves the rest impossible is not needed and goes, first
whole families of demands at once, then one by one; the limits on properties last, for they say most. Every
question "is there a blend" is answered exactly (recipe.py, the viscosity index included), and an answer serves
all further questions: a blend for every set it keeps, an impossible set for every larger one.

A second set must lack some demand of the first, a third one of each; so every choice of such demands is tried,
and when none leaves the rest impossible there is no further set.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import product

import numpy as np

from .demands import Demand, Demands, Held
from .errors import SolverError
from .linear import Stopwatch, scale
from .properties import Array
from .reach import best_of, outside_first
from .recipe import least_cost
from .requirements import COST
from .rows import Model
from .stocks import Stock, StockTable
from .target import Target
from .vi_curve import curve
from .windows import Outcome

SETS = 3
ANY = 1e12  # a gap that every blend is inside of: the first one found will do
# What is let go first, family by family; limits that say most to an operator are kept longest.
_ORDER = ("most stocks", "least share", "on hand", "share", "held", "left out", "list", "cost", "limit")


@dataclass(frozen=True)
class Conflict:
    """An irreducible set of demands, and the best that one of them can have beside the others."""

    demands: tuple[Demand, ...]
    of: Demand | None = None  # the one of which `best` speaks
    best: float | None = None  # in the unit of its limit; None: nothing can be said
    # False: time ran out before each demand was shown to be needed, or what the laboratory taught bends the limits
    proven: bool = True
    treated: bool = False  # `best` is with treat rates as asked, though they are none of the set


class Reasons:
    """The questions asked of one target, and what has been answered."""

    def __init__(self, stocks: StockTable | Iterable[Stock], target: Target, watch: Stopwatch) -> None:
        table = stocks if isinstance(stocks, StockTable) else StockTable(stocks)
        self.demands, self.watch = Demands(table, target), watch
        self.everything: Held = frozenset(self.demands.all)
        self.blends: list[tuple[Array, Held]] = []  # a blend over the loosest model's stocks, what it breaks
        self.impossible: list[Held] = []
        self.unsure = False  # a question was cut short by the time
        self.asked = 0

    def possible(self, held: Held) -> bool:
        """Is there a blend that keeps these demands? Where time runs out it is taken that there is."""
        if any(not (broken & held) for _, broken in self.blends):
            return True
        if any(bad <= held for bad in self.impossible):
            return False
        found = self._ask(held)
        if found is None:
            self.impossible.append(held)
        return found is not None

    def _ask(self, held: Held) -> Array | None:
        self.asked += 1
        try:
            model = self.demands.only(held)
        except SolverError:
            return None  # a share is demanded of which nothing can serve
        if model.short or len(model.table) == 0 or any(need.empty for need in model.requirements):
            return None
        # On the target itself the recipe has the word, so that the two never differ.
        outcome = least_cost(model, self.watch) if held == self.everything else _any_blend(model, self.watch)
        if outcome.x is None:
            if outcome.status == "stopped":
                self.unsure = True
                return np.zeros(0)
            return None
        x = self.demands.on_loosest(model, outcome.x)
        self.blends.append((x, frozenset(self.demands.broken(x)) - held))
        return x

    def irreducible(self, within: Held) -> Held:
        """An irreducible set of demands inside one that is impossible: the deletion filter."""
        kept = within
        for family in _families(self.demands.all, within):
            if len(family) > 1 and not self.possible(kept - set(family)):
                kept = kept - set(family)
                continue
            for demand in family:
                if not self.possible(kept - {demand}):
                    kept = kept - {demand}
        return kept

    def sets(self, most: int = SETS) -> Iterator[Held]:
        """Different irreducible sets of the target's demands, as they are found; none where a blend exists."""
        if self.possible(self.everything):
            return
        found = [self.irreducible(self.everything)]
        yield found[0]
        while len(found) < most and not self.watch.over:
            without = next((w for w in _choices(found) if not self.possible(self.everything - w)), None)
            if without is None:
                return
            found.append(self.irreducible(self.everything - without))
            yield found[-1]


def conflicts(stocks: StockTable | Iterable[Stock], target: Target, *, most: int = SETS,
              time_limit: float = 20.0) -> list[Conflict]:
    """Up to `most` irreducible sets of demands of a target that no blend keeps; none where a blend exists.

    Each with the best that one of its demands can have beside the others (reach.py). A set without demands: no
    stock may serve at all. Raises TargetError, StockError or RangeError on bad input.
    """
    reasons = Reasons(stocks, target, Stopwatch(time_limit))
    return [conflict(reasons, held) for held in reasons.sets(most)]


def conflict(reasons: Reasons, held: Held) -> Conflict:
    """A set with the demand that its sentence ends on, and the best reachable of that."""
    ordered = tuple(d for d in sorted(reasons.demands.all, key=_telling) if d in held)
    proven = not reasons.unsure and not reasons.demands.model.bent
    if not ordered or _crossed(ordered):
        return Conflict(ordered, proven=proven)
    for of in ordered:
        try:
            best, treated = best_of(reasons.demands, of, held - {of}, reasons.watch)
        except SolverError:
            continue
        if best is not None:
            return Conflict(ordered, of, best, proven, treated)
    return Conflict(ordered, proven=proven)


def _telling(demand: Demand) -> tuple[int, int]:
    """Order in which the demands of a set are told: the viscosity index, other limits, and so on down."""
    codes = ("vi", "kv100", "kv40")
    return (-_ORDER.index(demand.kind), codes.index(demand.name) if demand.name in codes else len(codes))


def _crossed(demands: Sequence[Demand]) -> bool:
    """Do two sides of one property leave nothing between them, or is one limit beyond every oil?"""
    sides = {d.side: d.limit for d in demands if d.kind == "limit"}
    one = len({d.name for d in demands}) == 1
    return one and len(sides) == 2 and sides["low"] > sides["high"]


def _families(every: Sequence[Demand], within: Held) -> list[list[Demand]]:
    """The demands of a set in the order in which they are let go, those of a kind together."""
    groups = [[d for d in every if d in within and d.kind == kind] for kind in _ORDER[:-1]]
    limits = [d for d in every if d in within and d.kind == "limit"]
    viscous = [d for d in limits if d.name.startswith(("kv", "vi"))]
    groups.append([d for d in limits if d not in viscous])
    # The viscosity index is kept longest: on it the best reachable says most.
    groups += [[d] for d in sorted(viscous, key=lambda d: (d.name == "vi", d.name == "kv40"))]
    return [group for group in groups if group]


def _choices(found: Sequence[Held]) -> Iterator[Held]:
    """Every way to leave out one demand of each set found, the smallest ways first."""
    ways = {frozenset(way) for way in product(*(sorted(s, key=_telling) for s in found))}
    minimal = [w for w in ways if not any(other < w for other in ways)]
    yield from sorted(minimal, key=lambda w: (len(w), sorted(_telling(d) for d in w)))


def _any_blend(model: Model, watch: Stopwatch) -> Outcome:
    """Some blend of a model, the first one that is found."""
    return outside_first(model, _towards(model), watch, ANY)


def _towards(model: Model) -> Array:
    """An aim that leads to blends with the viscosity index that is asked: how far they are from its curve."""
    need = model.vi
    if need is None or (need.held_low is None and need.held_high is None):
        return scale(np.where(np.isfinite(model.table.price), model.table.price, 0.0))
    view = model.views[0]
    g40, g100 = view.gauges["kv40"], view.gauges["kv100"]
    vi, sign = (need.held_low, 1.0) if need.held_low is not None else (need.held_high, -1.0)
    assert vi is not None
    line = curve(vi, view.law)
    ends = line.index(np.array([4.0, 25.0]))
    slope = float(np.diff(line(ends))[0] / np.diff(ends)[0])
    return scale(sign * g40.sign * (g40.num - slope * g100.num))


def only_whole_numbers(reasons: Reasons) -> bool:
    """Do only the whole-number rules (most stocks, least share) stand in the way of a blend?"""
    whole = {d for d in reasons.everything if d.kind in ("most stocks", "least share")}
    return bool(whole) and not reasons.possible(reasons.everything) and reasons.possible(reasons.everything - whole)


@dataclass(frozen=True)
class WholeNumbers:
    """Where only whole-number rules stand in the way: what of them would do. None: not asked, or nothing would."""

    fewest_stocks: int | None = None  # base stocks and rework, with the least share as asked
    largest_least_share: float | None = None  # mass fraction, with the most stocks as asked


def whole_numbers(reasons: Reasons) -> WholeNumbers | None:
    """What whole-number rules would do, each with the other as asked; None where not only they are to blame."""
    if not only_whole_numbers(reasons):
        return None
    target = reasons.demands.target
    fewest = largest = None
    if target.max_stocks is not None:
        counted = int(reasons.demands.model.table.counted.sum())
        fewest = next((k for k in range(target.max_stocks + 1, counted + 1)
                       if _does(reasons, replace(target, max_stocks=k))), None)
    if target.min_share:
        largest = _largest_share(reasons, target, target.min_share)
    return WholeNumbers(fewest, largest)


def _largest_share(reasons: Reasons, target: Target, asked: float) -> float | None:
    """The largest least share below what is asked that would do, to 0.01 % of the blend."""
    if not _does(reasons, replace(target, min_share=None)):
        return None
    low, high = 0, int(np.ceil(1e4 * asked - 1e-9))  # in 0.01 %: low does, high does not
    while high - low > 1:
        middle = (low + high) // 2
        if _does(reasons, replace(target, min_share=1e-4 * middle)):
            low = middle
        else:
            high = middle
    return 1e-4 * low


def _does(reasons: Reasons, target: Target) -> bool:
    """Is there a blend for a target that differs from the one in question in its whole-number rules?"""
    asked = Demands(reasons.demands.table, target)
    model = asked.model
    if model.short or len(model.table) == 0:
        return False
    return _any_blend(model, reasons.watch).x is not None


__all__ = ["COST", "Conflict", "Reasons", "WholeNumbers", "conflict", "conflicts", "only_whole_numbers",
           "whole_numbers"]
