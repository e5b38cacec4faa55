"""The curve of one VI in a law's index, I40 = g(I100), and straight lines on one side of it.

The curve is nearly straight in the index, and has kinks where the published table has its lines. Lines that
lie on or above it (or on or below) over a piece are what windows.py makes rows of.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np

from .laws import index_of_law
from .properties import Array
from .viscosity_index import LOWEST_KV100, kv40_at
from .viscosity_index_table import KV100 as TABLE_KV100

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
