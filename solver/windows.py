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
"""

from __future__ import annotations

import heapq
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import lru_cache
from itertools import count
from typing import Any

import numpy as np

from .gauge import Gauge
from .laws import index_of_law
from .linear import Polytope, Solved, Status, Stopwatch, scale, solve
from .properties import Array
from .rows import Model
from .viscosity_index import LOWEST_KV100, indices, kv40_at
from .viscosity_index_table import KV100 as TABLE_KV100

PIECE = 1e-4  # half the length of a short piece, as a part of the index
VI_TOLERANCE = 1e-5  # VI points that an answer may fall short of its limit on exact recomputation
# KV100 where the curve is sampled: the table's lines, where it kinks, and four points between two lines.
_NODES = np.concatenate([np.array(TABLE_KV100), np.geomspace(70.0, 1e5, 400)[1:]])
Line = tuple[float, float]  # I40 = a·I100 + b
_SAMPLES = np.unique(np.concatenate([_NODES[:-1] + f * np.diff(_NODES) for f in (0, 0.2, 0.4, 0.6, 0.8)]))


class Curve:
    """I40 = g(I100) on the curve of one VI in one law's index, with samples of it."""

    def __init__(self, vi: float, law: str) -> None:
        self.index, self.value = index_of_law(law)
        self.vi = vi
        self.at = self.index(_SAMPLES)
        self.nodes = self.index(_NODES)
        self.g = self.index(kv40_at(vi, _SAMPLES))
        self.middle = 0.5 * (self.at[:-1] + self.at[1:])
        chord = 0.5 * (self.g[:-1] + self.g[1:])
        self.above, self.below = _controls(chord, self(self.middle))

    def __call__(self, i100: Any) -> Any:
        """Exact I40 at I100, any shape."""
        kv100 = np.maximum(self.value(i100), LOWEST_KV100)
        return self.index(kv40_at(self.vi, kv100))

    def inverse(self, i40: float) -> float:
        """I100 at which the curve reaches I40 (rounded outwards to a sample below)."""
        k = int(np.searchsorted(self.g, i40)) - 1
        return float(self.at[max(0, k)])

    def _points(self, lo: float, hi: float, above: bool) -> tuple[Array, Array]:
        """Points (I100, I40) whose hull holds the curve over [lo, hi] from above (or from below).

        The ends, the curve's samples between them, and a control point in each gap; the ends come first.
        """
        first, last = np.searchsorted(self.at, lo, "right"), np.searchsorted(self.at, hi, "left")
        ends = np.concatenate([[lo], self.at[first:last], [hi]])
        outside = [0.5 * (ends[0] + ends[1]), 0.5 * (ends[-2] + ends[-1])]
        g_lo, g_hi, *g_outside = (float(v) for v in self(np.array([lo, hi, *outside])))
        g_ends = np.concatenate([[g_lo], self.g[first:last], [g_hi]])
        chords = [0.5 * (g_ends[0] + g_ends[1]), 0.5 * (g_ends[-2] + g_ends[-1])]
        edge = _controls(np.array(chords), np.array(g_outside))[0 if above else 1]
        inner = slice(first, max(first, last - 1))
        at = np.concatenate([ends[[0, -1]], ends[1:-1], outside, self.middle[inner]])
        g = np.concatenate([g_ends[[0, -1]], g_ends[1:-1], edge,
                            (self.above if above else self.below)[inner]])
        return at, g

    def lines(self, lo: float, hi: float, above: bool) -> list[Line]:
        """Lines on or above (or: on or below) the curve over [lo, hi]: through each of its ends."""
        at, g = self._points(lo, hi, above)
        best, worst = (np.max, np.min) if above else (np.min, np.max)
        from_lo = float(best((g[1:] - g[0]) / (at[1:] - lo)))
        others = np.arange(len(at)) != 1
        from_hi = float(worst((g[1] - g[others]) / (hi - at[others])))
        return [(from_lo, float(g[0]) - from_lo * lo), (from_hi, float(g[1]) - from_hi * hi)]

    def touching(self, at: float, lo: float, hi: float, above: bool) -> list[Line]:
        """Lines through the curve's point at `at` that lie on or above (below) it over [lo, hi].

        None where the curve bends the other way there; two at a kink, one elsewhere.
        """
        points, g = self._points(lo, hi, above)
        here = float(self(at))
        sign = 1.0 if above else -1.0
        right, left = points > at + 1e-9, points < at - 1e-9
        if not (right.any() and left.any()):
            return []
        most_right = float(np.max(sign * (g[right] - here) / (points[right] - at)))
        least_left = float(np.min(sign * (here - g[left]) / (at - points[left])))
        if most_right > least_left:
            return []
        slopes = {sign * most_right, sign * least_left}
        if least_left - most_right < 1e-6:
            slopes = {0.5 * sign * (most_right + least_left)}
        return [(s, here - s * at) for s in slopes]

    def snap(self, at: float) -> float:
        """The kink (a line of the published table) next to a point, if it is very near, else the point."""
        k = int(np.clip(np.searchsorted(self.nodes, at), 1, len(self.nodes) - 1))
        left, right = float(self.nodes[k - 1]), float(self.nodes[k])
        near = left if at - left < right - at else right
        return near if abs(at - near) < 0.02 * (right - left) else at


def _controls(chord: Array, g: Array) -> tuple[Array, Array]:
    """Points, above and below, whose hull with an arc's ends holds the arc; g is the curve at its middle.

    A short smooth arc is a parabola to within its third order: it lies between its ends and a control
    point twice its rise from the chord. A tenth is added for that third order.
    """
    rise = g - chord
    return chord + 2.2 * np.maximum(rise, 0.0), chord + 2.2 * np.minimum(rise, 0.0)


@lru_cache(maxsize=64)
def curve(vi: float, law: str) -> Curve:
    """The curve of one VI under one law; Walther and Wright share an index."""
    return Curve(vi, law)


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


@dataclass(order=True)
class _Piece:
    """One piece of the KV100 window, its outer optimum, and the cuts found on it."""

    bound: float
    order: int
    left: float = field(compare=False)
    right: float = field(compare=False)
    x: Array = field(compare=False)
    rows: list[Array] = field(compare=False)

    @property
    def tiny(self) -> bool:
        """Too short to split: its outer lines are the curve."""
        return self.right - self.left < 1e-9 * max(1.0, abs(self.right))


@dataclass
class _Search:
    """State of one search over pieces of the KV100 window."""

    model: Model
    problem: Polytope
    c: Array
    watch: Stopwatch
    tolerance: Callable[[float], float]
    curves: list[tuple[Curve, bool]] = field(default_factory=list)  # (curve, is it a VI minimum)
    best_x: Array | None = None
    best: float = np.inf
    solves: int = 0
    cut_short: bool = False

    @property
    def g40(self) -> Gauge:
        return self.model.gauges["kv40"]

    @property
    def g100(self) -> Gauge:
        return self.model.gauges["kv100"]

    def at(self, x: Array) -> float:
        return float(self.g100.index_of(x))

    def meets_vi(self, x: Array) -> bool:
        vi = float(indices(self.g40.read(x), self.g100.read(x)))
        return all(vi >= curve.vi - VI_TOLERANCE if least else vi <= curve.vi + VI_TOLERANCE
                   for curve, least in self.curves)

    def line_row(self, a: float, b: float, least: bool) -> Array:
        """I40 ≤ a I100 + b (least) or ≥ as a row."""
        g40, g100 = self.g40, self.g100
        return g40.sign * (1.0 if least else -1.0) * (g40.num - a * g100.num - b * g40.den)

    def window_rows(self, lo: float, hi: float) -> list[Array]:
        g = self.g100
        return [g.sign * (g.num - hi * g.den), -g.sign * (g.num - lo * g.den)]

    def solve(self, problem: Polytope) -> Solved:
        self.solves += 1
        solved = solve(problem, self.c, self.watch, self.best)
        self.cut_short |= solved.status == "stopped"
        return solved

    def outer(self, lo: float, hi: float, more: list[Array]) -> Solved:
        """The relaxed problem on one piece: every blend that meets the VI lies inside it."""
        rows = self.window_rows(lo, hi) + more
        for curve, least in self.curves:
            rows += [self.line_row(a, b, least) for a, b in curve.lines(lo, hi, least)]
        return self.solve(self.problem.with_rows(rows, hold=0.0))

    def cuts(self, at: float, lo: float, hi: float, x: Array) -> list[Array]:
        """Rows that cut off an outer optimum at I100 = at and no blend of the piece that meets the VI."""
        rows = []
        for curve, least in self.curves:
            rows += [self.line_row(a, b, least) for a, b in curve.touching(at, lo, hi, least)]
        return [row for row in rows if float(scale(row) @ x) > 1e-9]

    def offer(self, x: Array | None, value: float) -> bool:
        """Take a blend as the best known if it is cheaper and meets the exact VI."""
        if x is None or value >= self.best or not self.meets_vi(x):
            return False
        self.best_x, self.best = x, value
        return True

    def polish(self, x: Array, lo: float, hi: float) -> None:
        """The best blend beside an outer optimum that meets the exact VI: one linear programme.

        On a short piece the curve is replaced by lines on its inner side, so what is found is sure to
        meet it. A piece ends at a kink, where the curve is met exactly.
        """
        at = self.curves[0][0].snap(self.at(x))
        width = PIECE * abs(at)
        left, right = max(lo, at - width), min(hi, at + width)
        if at != self.at(x):
            left, right = (left, at) if self.at(x) < at else (at, right)
        if not left < right:
            return
        rows = self.window_rows(left, right)
        for curve, least in self.curves:
            rows += [self.line_row(a, b, least) for a, b in curve.lines(left, right, not least)]
        solved = self.solve(self.problem.on_support(x).with_rows(rows))
        self.offer(solved.x, solved.value)


def search(model: Model, problem: Polytope, c: Array, watch: Stopwatch, *, gap: float = 1e-6,
           gap_absolute: float = 0.0, node_limit: int = 400) -> Outcome:
    """Minimise c·x over a model's polytope and its VI limits, to a gap relative or absolute.

    status "optimal": within the gap; "infeasible": nothing meets it; "stopped": time or nodes ran out
    (x None when nothing was found by then).
    """
    run = _Search(model, problem, c, watch, lambda best: max(gap_absolute, gap * abs(best)))
    need = model.vi
    if need is None or len(model.table) == 0:
        solved = run.solve(problem)
        return Outcome(solved.status, solved.x, solved.value, solved.bound, 1)
    if need.held_low is not None:
        run.curves.append((curve(need.held_low, model.target.law), True))
    if need.held_high is not None:
        run.curves.append((curve(need.held_high, model.target.law), False))
    lo, hi = _window(run)
    if lo > hi:
        return Outcome("infeasible", None, np.inf, np.inf)
    hair = 1e-9 * max(1.0, abs(hi))
    return _branch(run, lo - hair, hi + hair, node_limit)


def _branch(run: _Search, lo: float, hi: float, node_limit: int) -> Outcome:
    order = count()
    heap: list[_Piece] = []

    def push(left: float, right: float, parent: float, rows: list[Array]) -> None:
        solved = run.outer(left, right, rows)
        if solved.x is not None:
            heapq.heappush(heap, _Piece(max(parent, solved.bound), next(order), left, right, solved.x, rows))

    push(lo, hi, -np.inf, [])
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
        if run.offer(x, float(run.c @ x)) or run.meets_vi(x) or piece.tiny:
            closed = min(closed, piece.bound)
            continue
        run.polish(x, piece.left, piece.right)
        if piece.bound >= run.best - run.tolerance(run.best):
            closed = min(closed, piece.bound)
            continue
        points = _points_inside(run, piece)
        cuts = next((rows for at in points if (rows := run.cuts(at, piece.left, piece.right, x))), [])
        if cuts:
            push(piece.left, piece.right, piece.bound, piece.rows + cuts)
        else:
            split = points[0] if points else 0.5 * (piece.left + piece.right)
            push(piece.left, split, piece.bound, piece.rows)
            push(split, piece.right, piece.bound, piece.rows)
    bound = min([run.best, closed, *(piece.bound for piece in heap)])
    if run.best_x is None:
        return Outcome("stopped" if run.cut_short else "infeasible", None, np.inf, bound, run.solves)
    done = run.best - bound <= 1.001 * run.tolerance(run.best) or not run.cut_short
    return Outcome("optimal" if done else "stopped", run.best_x, run.best, bound, run.solves)


def _points_inside(run: _Search, piece: _Piece) -> list[float]:
    """Where to cut or split a piece: at the best blend, then at the outer optimum, if inside it."""
    edge = 1e-6 * (piece.right - piece.left)
    blends = ([run.best_x] if run.best_x is not None else []) + [piece.x]
    points = [run.curves[0][0].snap(run.at(x)) for x in blends]
    return [at for at in points if piece.left + edge < at < piece.right - edge]


def _window(run: _Search) -> tuple[float, float]:
    """The I100 that any feasible blend can have: between the stocks' own, inside the KV limits.

    Low above high: no blend is left.
    """
    model, g40, g100 = run.model, run.g40, run.g100
    usable = (g100.den != 0.0) & (run.problem.hi > 0.0)
    if not usable.any():
        return 1.0, 0.0
    own = g100.num[usable] / g100.den[usable]
    index = index_of_law(model.target.law)[0]
    lo, hi = max(float(own.min()), float(index(LOWEST_KV100))), float(own.max())
    needs = {need.code: need for need in model.requirements}
    at100, at40 = needs.get("kv100"), needs.get("kv40")
    if at100 is not None:
        lo = max(lo, float(index(at100.held_low))) if at100.held_low is not None else lo
        hi = min(hi, float(index(at100.held_high))) if at100.held_high is not None else hi
    if at40 is not None and at40.held_low is not None:
        # KV40 ≤ U_v(KV100) and KV40 ≥ low: the curve must have reached low.
        lo = max([lo, *(curve.inverse(float(index(at40.held_low))) for curve, least in run.curves if least)])
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
