"""Recipes with a pair excess: rows that bend are followed along their tangents, one linear programme after another.

At a blend x0 every bent gauge has a tangent (gauge.py) whose rows agree with the limits to first order. A search
begins at the blend that is best without the excess and takes tangents anew at each answer until it meets every
limit exactly; where that leads nowhere, the nearest blend is sought on the exact gradients. From a blend that
meets everything only steps to cheaper ones that do so too are taken, ever shorter, until none pays. That is a
blend which no small change makes cheaper; it is no proof that no other blend is. `bound` is: it holds every limit
against the most favourable excess there can be.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from .gauge import Gauge
from .linear import Polytope, Stopwatch
from .properties import Array
from .requirements import COST
from .rows import Model, View, with_rows
from .windows import Outcome, search

STEPS = 40
CORRECTIONS = 4  # tangents taken anew within one step, to come back to a limit that bends
SHORTEST = 1e-7  # mass fraction: a step shorter than this changes nothing
SECONDS = 5.0
KEPT = 1e-8  # mass fraction: a bound or a rule is kept within it
Along = Callable[[Model, Polytope], Outcome]  # solves a model's polytope along the model's tangents
NOTHING = Outcome("infeasible", None, np.inf, np.inf)


def settled(model: Model) -> Model:
    """The model with rows along the tangents at its own least-cost blend; as it was where none is found."""
    watch = Stopwatch(SECONDS)
    outcome, _, last = follow(model, model.polytope(), model.table.price, watch,
                              lambda along, problem: search(along, problem, model.table.price, watch))
    return last if outcome.x is not None else model


def unbent(model: Model) -> Model:
    """The same model without what the laboratory has taught."""
    views = tuple(View(view.law, {code: replace(gauge, excess=None) for code, gauge in view.gauges.items()})
                  for view in model.exact)
    return with_rows(replace(model, exact=views), np.zeros(len(model.table)))


def follow(model: Model, problem: Polytope, c: Array, watch: Stopwatch,
           along: Along) -> tuple[Outcome, Polytope, Model]:
    """The best blend that following finds, with the polytope and the model along the tangents there.

    `problem` is the model's polytope, with further rows behind those of the model and bounds of its own; `along`
    minimises c·x over it.
    """
    return _Following(model, problem, c, watch, along).run()


@dataclass(frozen=True)
class _Following:
    """One search along tangents."""

    model: Model
    problem: Polytope
    c: Array
    watch: Stopwatch
    along: Along

    def run(self) -> tuple[Outcome, Polytope, Model]:
        """The first blend that meets everything, then ever cheaper ones."""
        best, reach = self._first(), 1.0
        for _ in range(STEPS):
            if best.x is None or reach < SHORTEST or self.watch.over:
                break
            step = self._step(best.x, reach)
            if step is not None and step.value < best.value - 1e-9 * max(1.0, abs(best.value)):
                reach, best = min(1.0, 2.0 * reach), step
            else:
                reach *= 0.25
        if best.x is None:
            return best, self.problem, self.model
        turned, near = self._at(best.x)
        return best, near, turned

    def _at(self, x: Array) -> tuple[Model, Polytope]:
        """The model and the polytope along the tangents at x."""
        turned = with_rows(self.model, x)
        return turned, self._instead(turned)

    def _instead(self, model: Model) -> Polytope:
        rows = np.array([row.coef for row in model.rows]).reshape(len(model.rows), len(self.c))
        return replace(self.problem, rows=np.vstack([rows, self.problem.rows[len(self.model.rows):]]))

    def _first(self) -> Outcome:
        """A blend that meets every limit exactly; without one, why the search ended."""
        plain = unbent(self.model)
        start = self.along(plain, self._instead(plain))
        even = np.full(len(self.c), 1.0 / len(self.c))
        for x in ([start.x] if start.x is not None else []) + [even]:
            found = self._settle(x)
            if found is not None:
                return found
        x = self._restored(start.x if start.x is not None else even) if self.problem.total is not None else None
        if x is None:
            return NOTHING
        return self._step(x, 1e-3) or Outcome("optimal", x, float(self.c @ x), -np.inf)

    def _settle(self, x: Array) -> Outcome | None:
        """Tangents anew at each answer until one meets every limit; None where that leads nowhere."""
        reach, before = 1.0, np.inf
        for _ in range(STEPS):
            turned, problem = self._at(x)
            found = self.along(turned, _within(problem, x, reach))
            if found.x is None or self.watch.over:
                return None
            if not self.model.missed(found.x):
                return found
            # An answer that jumps as far as the one before alternates between two corners: shorter steps.
            change = float(np.abs(found.x - x).max())
            reach = 0.5 * min(reach, change) if change >= 0.9 * before else reach
            x, before = found.x, change
        return None

    def _restored(self, x: Array) -> Array | None:
        """The nearest blend on the exact gradients, if it misses nothing and keeps the ceiling and every rule."""
        from .elastic import elastics
        from .nearest import descend

        own = len(self.model.rows)
        kept = [i for i, row in enumerate(self.model.rows) if row.of_shares]
        kept += range(own, len(self.problem.rows))
        shares = replace(self.problem, rows=self.problem.rows[kept], hold=self.problem.hold[kept])
        found = descend(shares, elastics(self.model), x, self.watch)
        kept += [i for i, row in enumerate(self.model.rows) if row.name == COST]
        inside = np.all((self.problem.lo - KEPT <= found) & (found <= self.problem.hi + KEPT))
        inside = inside and np.all(self.problem.rows[kept] @ found <= KEPT)
        whole = self.problem.whole is None or self.problem.whole.kept_by(found)
        return found if inside and whole and not self.model.missed(found) else None

    def _step(self, centre: Array, reach: float) -> Outcome | None:
        """The best blend within `reach` of a centre that meets every limit, by a few tangents; None: none did."""
        x = centre
        for _ in range(CORRECTIONS):
            turned, problem = self._at(x)
            found = self.along(turned, _within(problem, centre, reach))
            if found.x is None:
                return None
            if not self.model.missed(found.x):
                return found
            x = found.x
        return None


def _within(problem: Polytope, centre: Array, reach: float) -> Polytope:
    """The polytope with no share further from the centre than `reach` of the whole."""
    if reach >= 1.0:
        return problem
    most = reach * max(float(centre.sum()), 1e-12)
    return replace(problem, lo=np.maximum(problem.lo, centre - most), hi=np.minimum(problem.hi, centre + most))


def bound(model: Model, watch: Stopwatch) -> float:
    """A cost [currency/t] that no blend of a bent model can be below: −inf where nothing can be said.

    Every row takes the excess at the end of its span that lets most blends through. So does a VI minimum,
    KV40 at the low end and KV100 at the high one; a VI maximum is left out.
    """
    rows = [row for row in model.rows if row.of_shares]
    for side, end in (("high", 0), ("low", 1)):
        views = tuple(View(view.law, {code: _at_end(gauge, end, model.hi) for code, gauge in view.gauges.items()})
                      for view in model.exact)
        along = with_rows(replace(model, exact=views), np.zeros(len(model.table)))
        rows += [row for row in along.rows if row.side == side and not row.of_shares]
    vi = None if model.vi is None or model.vi.held_low is None else replace(model.vi, held_high=None)
    views = tuple(View(view.law, {"kv40": _at_end(view.gauges["kv40"], 0, model.hi),
                                  "kv100": _at_end(view.gauges["kv100"], 1, model.hi)}) for view in model.exact)
    # Without the KV limits, which would narrow the window of a KV100 that is not the true one.
    relaxed = replace(model, rows=tuple(rows), vi=vi, requirements=(), exact=views, views=views)
    found = search(relaxed, relaxed.polytope(), model.table.price, watch)
    return found.bound if found.x is not None else -np.inf


def _at_end(gauge: Gauge, end: int, hi: Array) -> Gauge:
    """A gauge with its excess put at the low (0) or high (1) end of its span."""
    if gauge.excess is None:
        return gauge
    return replace(gauge, num=gauge.num + gauge.excess.span(hi)[end] * gauge.den, excess=None)
