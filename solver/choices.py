"""What else would do: the range of every stock, and the largest batch. Other sets of stocks: sets.py; blends by
other aims than the least cost: aims.py; what a limit or a price is worth: prices.py.

All over the same rows and the same exact treatment of the VI as the recipe itself.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from itertools import count

import numpy as np

from .charges import Charges
from .enclosure import Enclosure, Piece
from .linear import Polytope, Stopwatch, solve
from .properties import Array
from .recipe import exact_search, least_cost
from .requirements import COST, ceiling
from .rows import Model, as_table, build
from .stocks import Stock, StockTable
from .target import Target
from .windows import VI_TOLERANCE, search

RANGE_GAP = 2e-5  # mass fraction to which a range is found: 0.01 % of the blend is 1e-4
EXTRAS = (0.0, 1.0, 2.0, 5.0)  # % above the least cost
HAIR = 1e-6  # of the cost, by which the least cost itself is allowed: else nothing but rounding decides
MOST_PIECES = 3  # into which the set of blends stays parted while they are
MOST_PARTINGS = 8  # for one end of one range


@dataclass(frozen=True)
class Range:
    """Least and most mass fraction of one stock."""

    low: float
    high: float
    narrowed: bool = True  # False: time ran out, and the true range may be smaller


def ranges(stocks: StockTable | Iterable[Stock], target: Target, *,
           time_limit: float = 30.0) -> dict[str, tuple[float, float]] | None:
    """Least and most mass fraction of every stock that may serve, over all blends that meet the target.

    Within the cost ceiling; whole-number rules (most stocks, least share) left out; to 1e-4. None when no
    blend meets it. When the time [s] runs out a range is left as wide as it was known to be: `marked_ranges`
    says which.
    """
    found = marked_ranges(stocks, target, time_limit=time_limit)
    return None if found is None else {code: (each.low, each.high) for code, each in found.items()}


def marked_ranges(stocks: StockTable | Iterable[Stock], target: Target, *,
                  time_limit: float = 30.0) -> dict[str, Range] | None:
    """As `ranges`, each marked where time ran out before it was narrowed."""
    return _all_ranges(build(stocks, target), Stopwatch(time_limit), [])


def ranges_within(stocks: StockTable | Iterable[Stock], target: Target, extras: Sequence[float] = EXTRAS, *,
                  least: float | None = None,
                  time_limit: float = 30.0) -> Iterator[tuple[float, dict[str, Range]]]:
    """The ranges within each extra cost [%] of the least cost, the smallest extra first.

    `least`: the least cost [currency/t] where it is known already, whole-number rules kept. Extra 0 allows 1e-6
    of the cost. Nothing comes when no blend meets the target, or when no least cost was found in time.
    """
    watch, table = Stopwatch(time_limit), as_table(stocks)
    if least is None:
        best = least_cost(build(table, target), watch)
        if best.x is None:
            return
        least = best.value
    seen: list[Array] = []  # a blend met within one extra cost serves every larger one
    for extra in sorted(extras):
        found = _all_ranges(build(table, within(target, least, extra)), watch, seen)
        if found is not None:
            yield extra, found


def within(target: Target, least: float, extra: float) -> Target:
    """The target with a cost ceiling `extra` % above a least cost [currency/t], or its own where that is lower.

    Extra 0 allows 1e-6 of the cost.
    """
    most = least + abs(least) * max(extra / 100.0, HAIR)
    own = ceiling(target)
    most = most if own is None else min(most, max(own, least + abs(least) * HAIR))
    return replace(target, moved={**target.moved, (COST, "high"): most})


def _all_ranges(model: Model, watch: Stopwatch, seen: list[Array]) -> dict[str, Range] | None:
    plain = replace(model, target=replace(model.target, max_stocks=None, min_share=None))
    if model.short or any(need.empty for need in model.requirements) or len(model.table) == 0:
        return None
    best, problem = exact_search(plain, plain.polytope(whole=False), plain.table.price, watch)
    if best.x is None:
        wide = {code: Range(max(0.0, low), min(1.0, high), narrowed=False)
                for code, low, high in zip(plain.table.codes, plain.lo, plain.hi, strict=True)}
        return wide if best.status == "stopped" else None
    seen.append(best.x)
    run = _Ranges(plain, problem, seen, watch)
    return {code: run.range_of(i) for i, code in enumerate(plain.table.codes)}


@dataclass
class _Ranges:
    """One search for the ranges of every stock; blends met on the way join `seen`.

    A range asks for many programmes over one set of blends, so the set is enclosed once (enclosure.py). An answer
    on that outer set is a bound; drawn towards a blend well inside until it meets the exact VI, it is mostly a
    blend as good. Where it is not, the piece is parted at its answer; the first parts are kept, for other stocks'
    ends lie there too. What that does not settle is left to the search of windows.py.
    """

    model: Model
    problem: Polytope
    seen: list[Array]
    watch: Stopwatch
    pieces: list[Piece] = field(init=False, default_factory=list)
    inside: Array | None = field(init=False, default=None)

    def __post_init__(self) -> None:
        self.enclosure = Enclosure(self.model, self.problem)
        piece = self.enclosure.whole(self.seen[-1], self.watch)
        if piece is not None:
            self.pieces = [piece]
            self.inside = self.enclosure.deepest(piece, self.watch)

    def range_of(self, i: int) -> Range:
        """Least and most share of stock i."""
        low, low_known = self._extreme(i, 1.0)
        high, high_known = self._extreme(i, -1.0)
        return Range(max(0.0, low), min(1.0, high), low_known and high_known)

    def _extreme(self, i: int, sign: float) -> tuple[float, bool]:
        """The least (sign 1) or most (sign −1) share of stock i, and whether it was found in time."""
        known = min(sign * float(x[i]) for x in self.seen)
        limit = float(self.problem.lo[i]) if sign > 0.0 else -float(self.problem.hi[i])
        if known <= limit + RANGE_GAP / 10.0:
            return sign * known, True  # a blend already met reaches the bound: nothing to solve
        c = np.zeros(len(self.model.table))
        c[i] = sign
        met = len(self.seen)
        bound = max(limit, self._bounded(c, known))
        known = min([known, *(sign * float(x[i]) for x in self.seen[met:])])
        if known - bound <= RANGE_GAP:
            return sign * known, True
        outcome = search(self.model, self.problem, c, self.watch, gap=0.0, gap_absolute=RANGE_GAP)
        if outcome.x is None or outcome.status == "stopped":
            return sign * min(known, max(bound, outcome.bound)), False
        self.seen.append(outcome.x)
        return sign * min(known, outcome.value), True

    def _bounded(self, c: Array, known: float) -> float:
        """A bound on c·x from the pieces, parted until it lies near the best blend met, or not much further."""
        order = count()
        heap: list[tuple[float, int, Piece, Array]] = []

        def push(piece: Piece) -> bool:
            nonlocal known
            solved = solve(piece.outer, c, self.watch)
            if solved.x is None:
                return solved.status == "infeasible"
            met = self._drawn_in(solved.x)
            if met is not None:
                self.seen.append(met)
                known = min(known, float(c @ met))
            heapq.heappush(heap, (solved.bound, next(order), piece, solved.x))
            return True

        if not self.pieces or not all(push(piece) for piece in self.pieces):
            return -np.inf
        for _ in range(MOST_PARTINGS):
            if not heap or heap[0][0] >= known - RANGE_GAP:
                break
            *_, piece, x = heapq.heappop(heap)
            parts = self.enclosure.parted(piece, x)
            if len(self.pieces) < MOST_PIECES and piece in self.pieces:
                self.pieces = [p for p in self.pieces if p is not piece] + parts
            if not all(push(part) for part in parts):
                return -np.inf
        return min(known, heap[0][0]) if heap else known

    def _drawn_in(self, x: Array) -> Array | None:
        """The blend on the way from x to the one well inside that first meets the exact VI, to twice the step."""
        part = 0.0
        while part < 1e-2:
            drawn = x if self.inside is None else x + part * (self.inside - x)
            if max(self.enclosure.short(drawn, view) for view in self.model.views) <= VI_TOLERANCE:
                return np.asarray(drawn)
            if self.inside is None:
                return None
            part = 2.0 * part or 1e-7
        return None


def largest_batch(stocks: StockTable | Iterable[Stock], target: Target, *,
                  time_limit: float = 10.0) -> float | None:
    """The largest batch [kg] that today's tanks allow while every limit is met, at any cost below the
    ceiling; None when no blend meets the target.

    The rows are homogeneous, so they hold for masses as for shares: maximise Σ m_i over m_i ≤ what the
    tank can give. Whole-number rules are left out. What is in the vessel takes part with its mass.
    """
    table = as_table(stocks)
    if any(s.in_vessel_kg is not None for s in table.stocks):
        return _largest_on(table, target, Stopwatch(time_limit))
    model = build(table, replace(target, batch_kg=None, max_stocks=None, min_share=None))
    if model.short or any(need.empty for need in model.requirements) or len(model.table) == 0:
        return None
    available = model.table.available
    unit = float(available.max())
    n = len(available)
    bounds = [np.eye(n)[i] - model.hi[i] for i in range(n) if model.hi[i] < 1.0]
    bounds += [model.lo[i] - np.eye(n)[i] for i in range(n) if model.lo[i] > 0.0]
    base = model.polytope(whole=False)
    problem = replace(base, lo=np.zeros(n), hi=available / unit, total=None).with_rows(bounds, hold=0.0)
    outcome, _ = exact_search(model, problem, -np.ones(n), Stopwatch(time_limit), gap=1e-5)
    if outcome.x is None or outcome.x.sum() <= 1e-9:
        return None
    return float(outcome.x.sum()) * unit


def _largest_on(table: StockTable, target: Target, watch: Stopwatch) -> float | None:
    """The largest batch on top of what is in the vessel [kg]; its rules are rows, for they are shares of the total."""
    least = sum(s.in_vessel_kg or 0.0 for s in table.stocks)
    model = build(table, replace(target, batch_kg=least, max_stocks=None, min_share=None))
    if model.short or any(need.empty for need in model.requirements):
        return None
    loose = StockTable(replace(s, division_kg=None, package_kg=None, least_charge_kg=None) for s in model.table.stocks)
    most = float(model.table.available.sum())
    charges = Charges.of(replace(model, table=loose), 0.5 * (least + most))
    problem = replace(charges.problem(0.5 * (most - least)), steps=None)
    limits = replace(model, rows=tuple(row for row in model.rows if not row.of_shares))
    outcome, _ = exact_search(limits, problem, -np.ones(len(loose)), watch, gap=1e-5)
    return None if outcome.x is None else float(outcome.x.sum()) * charges.batch
