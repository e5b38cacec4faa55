"""The blend that keeps furthest inside its limits.

    maximise t   over   the blends that meet every limit moved inward by t·R

R is the reproducibility of the limit's method at the limit. For a given t this is the usual problem. A row
depends on t through the index of its limit alone, which is nearly straight; so t joins the programme as one
more column, each row sloped as at the last t, and Newton's steps do the rest. The VI takes part exactly: its
curve is that of the last t, and its slope is a shift of the index of KV40. Every margin is recomputed from the
shares, and the last step's own bound says how near to the widest it is.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from .beside import beside
from .laws import index_of_law
from .linear import HOLD, Stopwatch
from .properties import Array, in_scale
from .recipe import exact_search
from .requirements import COST, Requirement
from .rows import Model, View, with_rows
from .viscosity_index import LOWEST_KV100, kv40_at
from .windows import search

CLOSE = 2e-3  # units of R to which a margin is widest
WIDEST = 20.0  # units of R: further inside is not sought
SHORT = 0.05  # units of R: a step so short is as good as exact
STEPS = 8
POINT = 1e-3  # units of R: a window no wider than this has no inside


@dataclass(frozen=True)
class Inside:
    """A blend and how far inside its limits it lies."""

    x: Array
    margin: float  # units of R, of the limit that is nearest
    bound: float  # no blend has a wider one
    aside: tuple[str, ...]  # properties whose window is a single value: kept, but without an inside


Side = tuple[Requirement, str, float, float]  # requirement, side, held limit, R there


def sides(model: Model) -> tuple[list[Side], tuple[str, ...]]:
    """Every closed side of a limit that has an inside, with its R; and the properties that have none."""
    found: list[Side] = []
    aside = []
    for need in model.requirements:
        closed = [(side, value) for side, value in (("low", need.held_low), ("high", need.held_high))
                  if value is not None]
        units = {side: need.unit_of_miss(side) for side, _ in closed}
        if len(closed) == 2 and closed[1][1] - closed[0][1] <= POINT * sum(units.values()):
            aside.append(need.code)
            continue
        found += [(need, side, value, units[side]) for side, value in closed]
    return found, tuple(aside)


def margin(model: Model, x: Array) -> float:
    """The margin [units of R] of a blend x, shape (n,), to its nearest limit, under the law where it is least."""
    least = WIDEST
    for need, side, value, unit in sides(model)[0]:
        for view in model.exact:
            found = view.read(need.code, x)
            if found is not None:
                least = min(least, (found - value if side == "low" else value - found) / unit)
    return least


def widest(model: Model, start: Array, watch: Stopwatch) -> Inside:
    """The blend with the widest margin, from a blend `start` that meets every limit."""
    found, aside = sides(model)
    x, t = start, margin(model, start)
    bound = min([WIDEST, *(_half(need) for need, *_ in found)])
    need = model.vi
    if need is not None and need.code not in aside and need.held_low is not None and need.held_high is not None:
        return _bisected(model, x, t, bound, watch, aside)  # the curve's two sides would shift KV40 two ways
    near = bound
    for _ in range(STEPS):
        if bound - t <= CLOSE or watch.over or not found:
            break
        along = with_rows(model, x) if model.bent else model
        better, climb = _Step(along, found, x, t, bound - t).best(watch)
        # A bound to second order in the step, and so only of a short one.
        near = t + climb if climb is not None and climb <= SHORT else bound
        now = margin(model, better) if better is not None else -np.inf
        if better is None or now <= t + 1e-9:
            break
        x, t = better, now
        if near - t <= CLOSE:
            break
    return Inside(x, t, max(near, t), aside)


def _half(need: Requirement) -> float:
    """Half of a window, in units of R: no blend can be further inside it."""
    if need.held_low is None or need.held_high is None:
        return WIDEST
    return (need.held_high - need.held_low) / (need.unit_of_miss("low") + need.unit_of_miss("high"))


def moved_in(found: list[Side], t: float) -> dict[tuple[str, str], float]:
    """Every limit moved inward by t units of R, as `Target.moved` takes it."""
    return {(need.code, side): _at(side, value, t * unit) for need, side, value, unit in found}


def _at(side: str, value: float, by: float) -> float:
    return value + by if side == "low" else value - by


def _bisected(model: Model, x: Array, t: float, bound: float, watch: Stopwatch, aside: tuple[str, ...]) -> Inside:
    from .rows import build

    found, _ = sides(model)
    while bound - t > CLOSE and not watch.over:
        middle = 0.5 * (t + bound)
        inner = build(model.table, replace(model.target, moved={**model.target.moved, **moved_in(found, middle)}))
        outcome, _ = exact_search(inner, inner.polytope(), inner.table.price, watch)
        if outcome.x is None:
            bound = middle
        else:
            x, t = outcome.x, max(middle, margin(model, outcome.x))
    return Inside(x, t, bound, aside)


@dataclass(frozen=True)
class _Step:
    """One programme: the largest t near the last one."""

    model: Model
    sides: list[Side]
    x: Array  # the last blend …
    t: float  # … and its margin
    reach: float  # how much further t may go

    def best(self, watch: Stopwatch) -> tuple[Array | None, float | None]:
        """The blend that the programme finds best, and by how much it thinks that t grows."""
        n = len(self.model.table)
        kept = [row for row in self.model.rows if row.of_shares or row.name == COST or row.name == "vi"]
        shares = replace(self.model, rows=tuple(kept), exact=self.model.views)
        padded, problem = beside(shares, 1)
        rows = [np.concatenate([row, [slope * self.reach, 0.0]]) for row, slope in self._rows()]
        views = tuple(replace(view, gauges={**view.gauges, "kv40": self._shifted(view, n)}) for view in padded.views)
        padded = replace(padded, views=views, exact=views, vi=self._vi())
        c = np.concatenate([np.zeros(n), [-1.0, 0.0]])
        outcome = search(padded, problem.with_rows(rows, hold=HOLD), c, watch, gap=0.0,
                         gap_absolute=0.2 * CLOSE / self.reach)
        if outcome.x is None:
            return None, None
        x = outcome.x[:n] / outcome.x[:n].sum()
        return x, -outcome.bound * self.reach if outcome.status == "optimal" else None

    def _rows(self) -> list[tuple[Array, float]]:
        """Every property's row at the last t, and how the row's value at the last blend grows with t."""
        rows = []
        moving = {(need.code, side): unit for need, side, _, unit in self.sides}
        for number, view in enumerate(self.model.views):
            for need in self.model.requirements:
                if need.code == "vi" or (number > 0 and need.entry.basis != "law"):
                    continue
                for side, value in need.row_sides:
                    unit = moving.get((need.code, side), 0.0)
                    now, then = (_at(side, value, (self.t + more) * unit) for more in (0.0, 1e-3))
                    if not (in_scale(need.entry, now) and in_scale(need.entry, then)):
                        now = then = value
                    row = view.gauges[need.code].row(now, side)
                    rows.append((row, float((view.gauges[need.code].row(then, side) - row) @ self.x) / 1e-3))
        return rows

    def _vi(self) -> Requirement | None:
        need = self.model.vi
        moving = {side: unit for other, side, _, unit in self.sides if need is not None and other.code == "vi"}
        if need is None or not moving:
            return need
        side = next(iter(moving))
        held = need.held_low if side == "low" else need.held_high
        assert held is not None
        at = _at(side, held, self.t * moving[side])
        return replace(need, held_low=at) if side == "low" else replace(need, held_high=at)

    def _shifted(self, view: View, n: int):  # type: ignore[no-untyped-def]
        """The gauge of KV40 as the VI reads it: a larger t stands for a KV40 that is further from the curve."""
        gauge = view.gauges["kv40"]
        need, moved = self.model.vi, self._vi()
        moving = {side: unit for other, side, _, unit in self.sides if other.code == "vi"}
        if need is None or moved is None or not moving:
            return gauge
        side, unit = next(iter(moving.items()))
        held = moved.held_low if side == "low" else moved.held_high
        assert held is not None
        index = index_of_law(view.law)[0]
        kv100 = max(LOWEST_KV100, self.model.views[0].gauges["kv100"].read(self.x))
        h = 1e-3 * unit
        ahead = held + h if side == "low" else held - h
        slope = float(index(kv40_at(held, kv100)) - index(kv40_at(ahead, kv100))) / 1e-3
        num = gauge.num.copy()
        num[n] = slope * self.reach * float(gauge.den[:n] @ self.x)
        return replace(gauge, num=num)
