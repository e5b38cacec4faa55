"""Blends that differ in their set of stocks, cheapest first.

A best-first search over which stocks are in and which are out. Each node is one exact least-cost problem
(windows.py) on narrower bounds; the cheapest node is taken, and if its blend is not yet one of the answers
wanted, the node is divided so that no blend is lost and none comes twice:

- a stock used below its least share: it is out, or in with at least that share;
- more stocks than the target allows: the smallest is out, or it is in;
- a set that holds one already found: some stock of that set is out (the i-th is out, those before it in);
- a set inside one already found: some stock outside that set must be used, which is a linear row.

So answers come in order of cost and no set contains another.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from itertools import count as counter

import numpy as np

from .linear import FIRM_HOLD, HOLD, SLACK, Polytope, Stopwatch, solve
from .properties import Array
from .recipe import GAP, Recipe, recipe_of
from .rows import Model, build
from .stocks import Stock, StockTable
from .target import Target
from .windows import Outcome, search

LEAST_USED = 0.01  # a base stock or rework counts as used from this share on, unless the target says more
LEAST_TOUCH = 1e-4  # any other stock counts as used from this one on
MOST_BLENDS = 8
NODE_LIMIT = 4000


@dataclass(order=True)
class _Node:
    """A part of the choices: bounds on the shares, rows "something outside this set", its best blend."""

    cost: float
    order: int
    lo: Array = field(compare=False)
    hi: Array = field(compare=False)
    outside: tuple[frozenset[int], ...] = field(compare=False)
    inside: frozenset[int] = field(compare=False)  # stocks that must be used
    exact: Outcome | None = field(compare=False)  # None: cost is only a lower bound so far


def blends(stocks: StockTable | Iterable[Stock], target: Target, count: int = MOST_BLENDS, *,
           time_limit: float = 20.0) -> list[Recipe]:
    """Up to `count` (at most 8) blends that differ in their set of stocks, cheapest first.

    Each is the cheapest of its set with every used base stock or rework at least min_share or 1 % (any
    other stock 0.01 %), and no set contains another. Fewer when no further set exists or the time [s]
    runs out.
    """
    model = build(stocks, target)
    if model.short or any(need.empty for need in model.requirements) or len(model.table) == 0:
        return []
    watch = Stopwatch(time_limit)
    problem = model.polytope(whole=False)
    for hold in (HOLD, FIRM_HOLD, SLACK):
        found = _Sets(model, problem.held(hold), watch).collect(min(count, MOST_BLENDS))
        if model.bent:  # along the tangents at the least cost: what is far from there may miss a limit
            return [recipe for recipe in found if recipe.meets_all]
        if found and all(recipe.meets_all for recipe in found):
            return found
    return []


class _Sets:
    """State of one search for sets."""

    def __init__(self, model: Model, problem: Polytope, watch: Stopwatch) -> None:
        self.model, self.problem, self.watch = model, problem, watch
        self.least = self._least()
        self.found: list[frozenset[int]] = []
        self.heap: list[_Node] = []
        self.order = counter()

    def _least(self) -> Array:
        least = np.where(self.model.table.counted, self.model.target.min_share or LEAST_USED, LEAST_TOUCH)
        for i, code in enumerate(self.model.table.codes):
            if code in self.model.target.held:  # the operator's own word stands before the rule
                least[i] = 0.0
        # A share that the product itself demands counts as used, however small.
        own = self.model.table.counted & bool(self.model.target.min_share)
        return np.where((self.problem.lo > 0.0) & ~own, np.minimum(least, self.problem.lo), least)

    def collect(self, wanted: int) -> list[Recipe]:
        made: list[Recipe] = []
        # A stock whose cap lies below its least share can never count as used.
        hi = np.where((self.problem.hi < self.least) & (self.problem.lo <= 0.0), 0.0, self.problem.hi)
        demanded = frozenset(int(i) for i in np.flatnonzero(self.problem.lo > 0.0))
        self._push(self.problem.lo, hi, (), demanded, -np.inf)
        nodes = 0
        while self.heap and len(made) < wanted and nodes < NODE_LIMIT and not self.watch.over:
            nodes += 1
            node = heapq.heappop(self.heap)
            if node.exact is None:
                self._settle(node)
                continue
            x = node.exact.x
            assert x is not None
            if not self._divide(node, x):
                made.append(recipe_of(self.model, x, node.exact.status, bound=node.exact.bound))
                used = frozenset(int(i) for i in np.flatnonzero(x > 0.0))
                self.found.append(used)
                self._without_one_of(node, used)
        return made

    def _bounded(self, node: _Node) -> Polytope:
        narrowed = replace(self.problem, lo=node.lo, hi=node.hi)
        rows = []
        for members in node.outside:
            rest = np.array([0.0 if i in members or node.hi[i] <= 0.0 else 1.0 for i in range(len(node.lo))])
            floor = float(self.least[rest > 0.0].min()) if rest.any() else 1.0
            rows.append(floor - rest)  # Σ outside ≥ floor, made homogeneous by Σ x = 1
        return narrowed.with_rows(rows, hold=0.0)

    def _push(self, lo: Array, hi: Array, outside: tuple[frozenset[int], ...], inside: frozenset[int],
              at_least: float) -> None:
        """Add a node with a lower bound on its cost: the linear part alone, one programme."""
        node = _Node(at_least, next(self.order), lo, hi, outside, inside, None)
        solved = solve(self._bounded(node), self.model.table.price, self.watch)
        if solved.x is None:
            return
        node.cost = max(at_least, solved.value)
        if self.model.vi is None:
            node.exact = Outcome(solved.status, solved.x, solved.value, solved.bound)
        heapq.heappush(self.heap, node)

    def _settle(self, node: _Node) -> None:
        """Replace a node's lower bound by its exact least cost, the VI limits included."""
        outcome = search(self.model, self._bounded(node), self.model.table.price, self.watch, gap=GAP)
        if outcome.x is not None:
            node.exact, node.cost = outcome, max(node.cost, outcome.value)
            heapq.heappush(self.heap, node)

    def _divide(self, node: _Node, x: Array) -> bool:
        """Divide a node whose blend is no answer; False when it is one."""
        used = np.flatnonzero(x > 0.0)
        low = [int(i) for i in used if x[i] < self.least[i] - 1e-9]
        if low:
            self._out_or_in(node, max(low, key=lambda i: x[i] / self.least[i]))
            return True
        most = self.model.target.max_stocks
        counted = [int(i) for i in used if self.model.table.counted[i]]
        if most is not None and len(counted) > most:
            free = [i for i in counted if i not in node.inside]
            if free:  # else the stocks demanded are already too many: the node holds no answer
                self._out_or_in(node, min(free, key=lambda i: x[i]))
            return True
        members = frozenset(int(i) for i in used)
        for earlier in self.found:
            if members >= earlier:
                self._without_one_of(node, earlier)
                return True
            if members < earlier:
                self._push(node.lo, node.hi, (*node.outside, earlier), node.inside, node.cost)
                return True
        return False

    def _out_or_in(self, node: _Node, i: int) -> None:
        if node.lo[i] <= 0.0:
            self._push(node.lo, _with(node.hi, i, 0.0), node.outside, node.inside, node.cost)
        if self.least[i] <= node.hi[i]:
            self._push(_with(node.lo, i, max(node.lo[i], self.least[i])), node.hi, node.outside,
                       node.inside | {i}, node.cost)

    def _without_one_of(self, node: _Node, members: frozenset[int]) -> None:
        """Divide by which stock of a set is the first to be out."""
        lo, inside = node.lo, node.inside
        for i in sorted(members - node.inside):
            self._push(lo, _with(node.hi, i, 0.0), node.outside, inside, node.cost)
            lo, inside = _with(lo, i, max(lo[i], self.least[i])), inside | {i}


def _with(values: Array, i: int, value: float) -> Array:
    changed = values.copy()
    changed[i] = value
    return changed
