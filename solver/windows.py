"""Viscosity index limits, exactly: the KV100 window in pieces, each piece linear, the best piece proven.

VI ≥ v bounds KV40 from above by U_v(KV100), the curve of equal VI. In the law's index I the curve
I40 = g(I100) is nearly straight. On a piece [l, u] of I100 every line that lies on or above g is a valid
outer limit, and a line I40 ≤ a·I100 + b is one linear row under every law:

    sign(den)·(num40 − a·num100 − b·den) · x ≤ 0

Two such lines are taken, through g(l) and through g(u), so the outer limit is exact at both ends. An
outer optimum that meets the exact VI is the optimum of its piece; otherwise it is cut off by a line that
touches the curve there, or, where the curve bends the other way, the piece is split, first at the best
blend known. A best blend is found beside an outer optimum by one more linear programme with lines on the
inner side, and always checked on the exact VI. A VI at most v is the mirror image.

Under several laws at once a piece is a box, one side a law, and each law has its own curve and lines; the law
under which an outer optimum misses the VI most is the one that is cut or split.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from itertools import count
from typing import Any

import numpy as np

from .gauge import Gauge
from .laws import index_of_law
from .linear import Polytope, Solved, Status, Stopwatch, scale, solve
from .properties import Array
from .rows import Model, View
from .vi_curve import Curve, curve
from .viscosity_index import LOWEST_KV100, indices

PIECE = 1e-4  # half the length of a short piece, as a part of the index
VI_TOLERANCE = 1e-5  # VI points that an answer may fall short of its limit on exact recomputation


@dataclass(frozen=True)
class Outcome:
    """The best blend found and how good it is known to be."""

    status: Status
    x: Array | None
    value: float
    bound: float
    solves: int = 0

    @property
    def gap(self) -> float:
        """(value − bound)/|value|, 0 where they meet."""
        if self.x is None:
            return float("inf")
        return max(0.0, self.value - self.bound) / max(abs(self.value), 1e-12)


Span = tuple[float, float]  # least and most I100 of a piece, under one law


@dataclass(order=True)
class _Piece:
    """One piece of the KV100 window (a span a law), its outer optimum, and the cuts found on it."""

    bound: float
    order: int
    spans: tuple[Span, ...] = field(compare=False)
    x: Array = field(compare=False)
    rows: list[Array] = field(compare=False)

    def tiny(self, k: int) -> bool:
        """Is its span under law k too short to split, so that its outer lines are the curve?"""
        left, right = self.spans[k]
        return right - left < 1e-9 * max(1.0, abs(right))

    def parted(self, k: int, at: float) -> tuple[tuple[Span, ...], tuple[Span, ...]]:
        """The spans of its two parts when law k's is split."""
        left, right = self.spans[k]
        before, after = self.spans[:k], self.spans[k + 1:]
        return (*before, (left, at), *after), (*before, (at, right), *after)


@dataclass(frozen=True)
class _Law:
    """The VI limits under one law: its gauges with rows, and a curve for each side."""

    g40: Gauge
    g100: Gauge
    curves: tuple[tuple[Curve, bool], ...]  # (curve, is it a VI minimum)

    def at(self, x: Array) -> float:
        """I100 of a blend."""
        return float(self.g100.index_of(x))

    def short(self, x: Array) -> float:
        """VI points by which a blend misses its limits at worst; below 0 inside."""
        vi = float(indices(self.g40.read(x), self.g100.read(x)))
        return max(curve.vi - vi if least else vi - curve.vi for curve, least in self.curves)

    def line_row(self, a: float, b: float, least: bool) -> Array:
        """I40 ≤ a I100 + b (least) or ≥ as a row."""
        g40, g100 = self.g40, self.g100
        return g40.sign * (1.0 if least else -1.0) * (g40.num - a * g100.num - b * g40.den)

    def span_rows(self, lo: float, hi: float) -> list[Array]:
        """I100 within a span, as two rows."""
        g = self.g100
        return [g.sign * (g.num - hi * g.den), -g.sign * (g.num - lo * g.den)]

    def lines(self, lo: float, hi: float, outer: bool) -> list[Array]:
        """Rows of lines on the outer (or inner) side of the curves over a span."""
        return [self.line_row(a, b, least) for curve, least in self.curves
                for a, b in curve.lines(lo, hi, least if outer else not least)]

    def cuts(self, at: float, lo: float, hi: float, x: Array) -> list[Array]:
        """Rows that cut off an outer optimum at I100 = at and no blend of the span that meets the VI."""
        rows = [self.line_row(a, b, least) for curve, least in self.curves
                for a, b in curve.touching(at, lo, hi, least)]
        return [row for row in rows if float(scale(row) @ x) > 1e-9]

    def snap(self, x: Array) -> float:
        """I100 of a blend, or the kink of the table very near to it."""
        return self.curves[0][0].snap(self.at(x))

    def beside(self, x: Array, lo: float, hi: float) -> Span | None:
        """A short span at a blend, on one side of a kink that is met exactly; None: no room for one."""
        at = self.snap(x)
        width = PIECE * abs(at)
        left, right = max(lo, at - width), min(hi, at + width)
        if at != self.at(x):
            left, right = (left, at) if self.at(x) < at else (at, right)
        return (left, right) if left < right else None


@dataclass
class _Search:
    """State of one search over pieces of the KV100 window."""

    problem: Polytope
    c: Array
    watch: Stopwatch
    tolerance: Callable[[float], float]
    laws: tuple[_Law, ...] = ()
    best_x: Array | None = None
    best: float = np.inf
    solves: int = 0
    cut_short: bool = False

    def short(self, x: Array) -> list[float]:
        """VI points missed under each law."""
        return [law.short(x) for law in self.laws]

    def solve(self, problem: Polytope) -> Solved:
        self.solves += 1
        solved = solve(problem, self.c, self.watch, self.best)
        self.cut_short |= solved.status == "stopped"
        return solved

    def outer(self, spans: Sequence[Span], more: list[Array]) -> Solved:
        """The relaxed problem on one piece: every blend that meets the VI lies inside it."""
        rows: list[Array] = []
        for law, (lo, hi) in zip(self.laws, spans, strict=True):
            rows += law.span_rows(lo, hi)
        rows += more
        for law, (lo, hi) in zip(self.laws, spans, strict=True):
            rows += law.lines(lo, hi, True)
        return self.solve(self.problem.with_rows(rows, hold=0.0))

    def offer(self, x: Array | None, value: float) -> bool:
        """Take a blend as the best known if it is cheaper and meets the exact VI."""
        if x is None or value >= self.best or max(self.short(x)) > VI_TOLERANCE:
            return False
        self.best_x, self.best = x, value
        return True

    def polish(self, x: Array, spans: Sequence[Span]) -> None:
        """The best blend beside an outer optimum that meets the exact VI: one linear programme.

        On a short piece the curve is replaced by lines on its inner side, so what is found is sure to
        meet it. A piece ends at a kink, where the curve is met exactly.
        """
        near = [law.beside(x, lo, hi) for law, (lo, hi) in zip(self.laws, spans, strict=True)]
        rows: list[Array] = []
        for law, span in zip(self.laws, near, strict=True):
            if span is None:
                return
            rows += law.span_rows(*span)
        for law, span in zip(self.laws, near, strict=True):
            assert span is not None
            rows += law.lines(*span, False)
        solved = self.solve(self.problem.on_support(x).with_rows(rows))
        self.offer(solved.x, solved.value)


def search(model: Model, problem: Polytope, c: Array, watch: Stopwatch, *, gap: float = 1e-6,
           gap_absolute: float = 0.0, node_limit: int = 400) -> Outcome:
    """Minimise c·x over a model's polytope and its VI limits, to a gap relative or absolute.

    status "optimal": within the gap; "infeasible": nothing meets it; "stopped": time or nodes ran out
    (x None when nothing was found by then).
    """
    run = _Search(problem, c, watch, lambda best: max(gap_absolute, gap * abs(best)))
    need = model.vi
    if need is None or len(model.table) == 0:
        solved = run.solve(problem)
        return Outcome(solved.status, solved.x, solved.value, solved.bound, 1)
    spans = []
    for view in model.views:
        sides = [(value, least) for value, least in ((need.held_low, True), (need.held_high, False))
                 if value is not None]
        law = _Law(view.gauges["kv40"], view.gauges["kv100"],
                   tuple((curve(value, view.law), least) for value, least in sides))
        lo, hi = _window(model, view, law, problem)
        if lo > hi:
            return Outcome("infeasible", None, np.inf, np.inf)
        hair = 1e-9 * max(1.0, abs(hi))
        run.laws += (law,)
        spans.append((lo - hair, hi + hair))
    return _branch(run, tuple(spans), node_limit)


def _branch(run: _Search, spans: tuple[Span, ...], node_limit: int) -> Outcome:
    order = count()
    heap: list[_Piece] = []

    def push(spans: tuple[Span, ...], parent: float, rows: list[Array]) -> None:
        solved = run.outer(spans, rows)
        if solved.x is not None:
            heapq.heappush(heap, _Piece(max(parent, solved.bound), next(order), spans, solved.x, rows))

    push(spans, -np.inf, [])
    closed = np.inf  # least bound among pieces that are done
    nodes = 0
    while heap:
        if run.watch.over or nodes >= node_limit:
            run.cut_short = True
            break
        piece = heapq.heappop(heap)
        if piece.bound >= run.best - run.tolerance(run.best):
            closed = min(closed, piece.bound)
            break
        nodes += 1
        x = piece.x
        short = run.short(x)
        open_laws = [k for k in range(len(short)) if short[k] > VI_TOLERANCE and not piece.tiny(k)]
        if run.offer(x, float(run.c @ x)) or not open_laws:
            closed = min(closed, piece.bound)
            continue
        run.polish(x, piece.spans)
        if piece.bound >= run.best - run.tolerance(run.best):
            closed = min(closed, piece.bound)
            continue
        k = max(open_laws, key=lambda k: short[k])
        _narrow(run, piece, k, push)
    bound = min([run.best, closed, *(piece.bound for piece in heap)])
    if run.best_x is None:
        return Outcome("stopped" if run.cut_short else "infeasible", None, np.inf, bound, run.solves)
    done = run.best - bound <= 1.001 * run.tolerance(run.best) or not run.cut_short
    return Outcome("optimal" if done else "stopped", run.best_x, run.best, bound, run.solves)


def _narrow(run: _Search, piece: _Piece, k: int, push: Callable[[tuple[Span, ...], float, list[Array]], None]) -> None:
    """Cut a piece's outer optimum off under law k, or split the piece there."""
    law, (left, right) = run.laws[k], piece.spans[k]
    points = _points_inside(run, piece, k)
    cuts = next((rows for at in points if (rows := law.cuts(at, left, right, piece.x))), [])
    if cuts:
        push(piece.spans, piece.bound, piece.rows + cuts)
        return
    for part in piece.parted(k, points[0] if points else 0.5 * (left + right)):
        push(part, piece.bound, piece.rows)


def _points_inside(run: _Search, piece: _Piece, k: int) -> list[float]:
    """Where to cut or split a piece: at the best blend, then at the outer optimum, if inside it."""
    left, right = piece.spans[k]
    edge = 1e-6 * (right - left)
    blends = ([run.best_x] if run.best_x is not None else []) + [piece.x]
    points = [run.laws[k].snap(x) for x in blends]
    return [at for at in points if left + edge < at < right - edge]


def _window(model: Model, view: View, law: _Law, problem: Polytope) -> Span:
    """The I100 that any feasible blend can have under a law: between the stocks' own, inside the KV limits.

    Low above high: no blend is left.
    """
    g40, g100 = law.g40, law.g100
    usable = (g100.den != 0.0) & (problem.hi > 0.0)
    if not usable.any():
        return 1.0, 0.0
    own = g100.num[usable] / g100.den[usable]
    index = index_of_law(view.law)[0]
    lo, hi = max(float(own.min()), float(index(LOWEST_KV100))), float(own.max())
    needs = {need.code: need for need in model.requirements}
    at100, at40 = needs.get("kv100"), needs.get("kv40")
    if at100 is not None:
        lo = max(lo, float(index(at100.held_low))) if at100.held_low is not None else lo
        hi = min(hi, float(index(at100.held_high))) if at100.held_high is not None else hi
    if at40 is not None and at40.held_low is not None:
        # KV40 ≤ U_v(KV100) and KV40 ≥ low: the curve must have reached low.
        lo = max([lo, *(curve.inverse(float(index(at40.held_low))) for curve, least in law.curves if least)])
    if at40 is not None and at40.held_high is not None:
        hi = min(hi, _most_i100(g40, g100, usable, float(index(at40.held_high))))
    return lo, hi


def _most_i100(g40: Gauge, g100: Gauge, usable: np.ndarray[Any, np.dtype[np.bool_]], i40: float) -> float:
    """The highest I100 of any mixture with I40 at most i40.

    A linear programme with two rows has a two-stock optimum, so every pair is tried at once.
    """
    n40, n100, d = g40.num[usable], g100.num[usable], g40.den[usable]
    over = g40.sign * (n40 - i40 * d)
    below, above = np.flatnonzero(over <= 0.0), np.flatnonzero(over > 0.0)
    if not len(below):
        return -np.inf
    best = float((n100[below] / d[below]).max())
    if len(above):
        f = over[above][None, :] / (over[above][None, :] - over[below][:, None])
        mixed = ((f * n100[below][:, None] + (1.0 - f) * n100[above][None, :])
                 / (f * d[below][:, None] + (1.0 - f) * d[above][None, :]))
        best = max(best, float(mixed.max()))
    return best
