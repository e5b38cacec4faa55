"""The blends that meet a VI limit, enclosed by rows: spans of KV100, and lines on the curve's outer side there.

Where many programmes are asked over one set of blends it pays to enclose the set once. Lines narrow the spans,
and a narrower span has nearer lines: mostly its ends come to where the curve meets a limit on KV40, and there the
lines are exact. Every blend that meets the VI lies inside; what lies inside may still miss it.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from .gauge import Gauge
from .linear import Polytope, Stopwatch, solve
from .properties import Array
from .rows import Model, View
from .vi_curve import curve

ROUNDS = 5  # times the spans are narrowed
Spans = tuple[tuple[float, float], ...]  # least and most I100 under each law


@dataclass(frozen=True, eq=False)
class Piece:
    """A part of the blends that meet the VI: spans of I100, and the polytope that encloses it."""

    spans: Spans
    outer: Polytope


@dataclass(frozen=True)
class Enclosure:
    """How the blends of one model and one polytope of it are enclosed; only where `possible`."""

    model: Model
    problem: Polytope

    @property
    def possible(self) -> bool:
        """Is there a VI limit, and rows that do not bend?"""
        return self.model.vi is not None and not self.model.bent

    def whole(self, start: Array, watch: Stopwatch) -> Piece | None:
        """One piece that encloses every blend, from any blend `start` of the polytope; None where none is found."""
        found: Piece | None = None
        enclosed, before = self.problem, np.inf
        for _ in range(ROUNDS if self.possible else 0):
            spans = tuple(_span(view.gauges["kv100"], enclosed, start, watch) for view in self.model.views)
            if not all(np.isfinite(end) for span in spans for end in span) or any(lo >= hi for lo, hi in spans):
                break
            found = self._piece(spans)
            enclosed, width = found.outer, sum(hi - lo for lo, hi in spans)
            if width > 0.9 * before:
                break
            before = width
        return found

    def parted(self, piece: Piece, x: Array) -> list[Piece]:
        """Both parts of a piece, parted at a blend's KV100 under the law where it misses the VI most."""
        need = self.model.vi
        assert need is not None
        k = int(np.argmax([self.short(x, view) for view in self.model.views]))
        view, (lo, hi) = self.model.views[k], piece.spans[k]
        limit = need.held_low if need.held_low is not None else need.held_high
        assert limit is not None
        at = curve(limit, view.law).snap(float(view.gauges["kv100"].index_of(x)))
        edge = 1e-3 * (hi - lo)
        at = at if lo + edge < at < hi - edge else 0.5 * (lo + hi)
        return [self._piece((*piece.spans[:k], part, *piece.spans[k + 1:])) for part in ((lo, at), (at, hi))]

    def short(self, x: Array, view: View) -> float:
        """VI points by which a blend misses its limits under a law."""
        need = self.model.vi
        assert need is not None
        value = view.read("vi", x)
        return np.inf if value is None else need.miss(value)

    def deepest(self, piece: Piece, watch: Stopwatch) -> Array | None:
        """A blend far on the inner side of the first line of a piece."""
        return solve(piece.outer, self._lines(self.model.views[0], piece.spans[0])[0], watch).x

    def _piece(self, spans: Spans) -> Piece:
        rows: list[Array] = []
        for view, (lo, hi) in zip(self.model.views, spans, strict=True):
            g = view.gauges["kv100"]
            rows += [g.sign * (g.num - hi * g.den), -g.sign * (g.num - lo * g.den), *self._lines(view, (lo, hi))]
        return Piece(spans, self.problem.with_rows(rows, hold=0.0))

    def _lines(self, view: View, span: tuple[float, float]) -> list[Array]:
        """Rows of lines on the outer side of the curves of equal VI over a span, under one law."""
        need, g40, g100 = self.model.vi, view.gauges["kv40"], view.gauges["kv100"]
        assert need is not None
        rows = []
        for limit, least in ((need.held_low, True), (need.held_high, False)):
            if limit is not None:
                side = g40.sign * (1.0 if least else -1.0)
                rows += [side * (g40.num - a * g100.num - b * g40.den)
                         for a, b in curve(limit, view.law).lines(*span, least)]
        return rows


def enclosed(model: Model, problem: Polytope, start: Array, watch: Stopwatch) -> Polytope:
    """The polytope with the rows that enclose the blends which meet the VI; as it is where there are none.

    Whole-number rules stay in it, and are left out while the spans are sought: every blend lies inside all the same.
    """
    plain = replace(problem, whole=None)
    piece = Enclosure(model, plain).whole(start, watch)
    return problem if piece is None else replace(piece.outer, whole=problem.whole)


def _span(gauge: Gauge, problem: Polytope, start: Array, watch: Stopwatch) -> tuple[float, float]:
    lo = _least_index(gauge, problem, 1.0, start, watch)
    hi = -_least_index(gauge, problem, -1.0, start, watch)
    hair = 1e-9 * max(1.0, abs(hi))
    return lo - hair, hi + hair


def _least_index(gauge: Gauge, problem: Polytope, sign: float, x: Array, watch: Stopwatch) -> float:
    """A bound below sign·J of every blend of a polytope, J the gauge's index; −inf where none is found.

    J = num·x / den·x is followed to its least by Dinkelbach's steps: with r the ratio at the last blend, the least
    of (num − r den)·x bounds how far below r any other lies.
    """
    num, den = sign * gauge.sign * gauge.num, gauge.sign * gauge.den
    bound = -np.inf
    for _ in range(4):
        ratio = float(num @ x) / float(den @ x)
        solved = solve(problem, num - ratio * den, watch)
        if solved.x is None or solved.status != "optimal":
            break
        smallest = float(den[problem.hi > 0.0].min())
        if smallest <= 0.0:
            break
        bound = max(bound, ratio + min(0.0, solved.bound) / smallest)
        if solved.bound >= -1e-6 * max(1.0, abs(ratio)) * smallest:
            break
        x = solved.x
    return bound
