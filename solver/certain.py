"""The least-cost recipe each of whose limits is met, on the first batch, with at least a chosen chance.

    minimise Σ x_i price_i   over the target's own rows, and for every side of every limit   d(x) ≥ k(σ(x), h(x))

d is the distance of the expected result from the limit, k the distance at which the asked chance is reached
(tails.margin), σ and h the normal and the even part of the error (uncertainty.py). Guards are left out: the chance
is in their place. σ(x) is the norm of the stocks' own parts, so it is convex, and its tangent at a blend x_j is
linear; so is that of h. At x_j a side is therefore one more row,

    row(limit moved inward by k_j) · x + (∂row/∂limit) · ∇k_j · (x − x_j) ≤ 0,

exact in the mean (the moved limit is a row as every limit is) and tangent in the error. A few linear programmes,
each with the rows of those before, settle; what is returned was recomputed, and reaches the asked chance in closed
form. The viscosity index is the same with its curve's tangent. The law's spread bends the other way, so the end is
a blend that no small change makes cheaper, not a proof.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.special import ndtr, ndtri

from .closed import POINTS_OF_ONE, Side, closed_chances, missed_by, sides, slope_of_curve, together
from .cones import Cone, cheapest, convex
from .errors import TargetError
from .gauge import Gauge
from .linear import Polytope, Stopwatch, solve
from .properties import Array
from .recipe import GAP, Recipe, design, least_cost, recipe_of
from .rows import Model, View, build, without_guards
from .stocks import Stock, StockTable
from .tails import margin
from .target import Target
from .uncertainty import Carried, Errors, errors_of, unweighable
from .viscosity_index import LOWEST_KV100, kv40_at

LOWEST, HIGHEST = 0.5, 0.999  # chances that can be asked
FINER = 2e-3  # part of what may be missed that is aimed at besides, so that rounding leaves the chance reached
STEPS = 20  # linear programmes of one settling
ROUND, CHOICES = 8, 3  # under whole-number rules: steps of one round, and how many of them choose the stocks
IDLE = 3  # of those after which nothing cheaper is looked for
HALVINGS = 6  # of the way to the highest chance
FREE = 6  # of them before steps are halved
STILL = 1e-5  # part of the cost to which a settling is still


@dataclass(frozen=True)
class Certain:
    """A recipe at a chosen chance. Chances 0–1, in closed form."""

    recipe: Recipe
    asked: float
    reached: bool
    chances: Mapping[str, float] = field(default_factory=dict)  # by property
    together: float | None = None  # of all limits at once
    highest: float | None = None  # where the asked one is not reached: the highest that was found for every limit
    plain_cost_per_t: float | None = None  # least cost that meets the same limits, without guards and chance


def certain(stocks: StockTable | Iterable[Stock], target: Target, chance: float, *,
            law_sigma: Mapping[str, float] | None = None, time_limit: float = 10.0) -> Certain:
    """The least-cost recipe whose every limit is met with at least this chance (0.5 to 0.999) on the first batch.

    law_sigma: as `confidence.subject` takes it. recipe.status: "optimal" where it is proven (the least cost itself
    is that certain), "stopped" where it was found and is not proven, "infeasible" where the chance was not reached:
    then the blend of the highest chance found, or the nearest one where no blend meets the limits at all.
    Raises TargetError for another chance, and what `design` raises.
    """
    if not LOWEST <= chance <= HIGHEST:
        raise TargetError(f"a chance of {100 * chance:g} % cannot be asked; choose 50 to 99.9 %", where="confidence")
    free = without_guards(target)
    model, watch = build(stocks, free), Stopwatch(time_limit)
    outcome = least_cost(model, watch)
    errors = errors_of(model.table, free, model.requirements, law_sigma)
    if outcome.x is None:
        return _impossible(stocks, free, chance, errors, watch)
    climb = _Climb(model, errors, watch)
    plain = float(model.table.price @ outcome.x)
    point = climb.settle(outcome.x, chance) or climb.highest(outcome.x, chance)
    x, highest = point.x, point.worst
    if highest >= chance:
        return _reached(climb, x, chance, plain, outcome.bound)
    words = (f"no blend was found that meets every limit with a chance of {100 * chance:g} %; the highest found is "
             f"{100 * highest:.2f} %, with this blend")
    return _made(climb, x, chance, plain, recipe_of(model, x, "infeasible", reasons=(words,)), highest)


def _reached(climb: _Climb, x: Array, chance: float, plain: float, bound: float) -> Certain:
    made = recipe_of(climb.model, x, "stopped", bound=bound)
    if made.gap is not None and made.gap <= 10.0 * GAP:
        return _made(climb, x, chance, plain, replace(made, status="optimal"))
    words = (f"every limit as asked is met with a chance of at least {100 * chance:g} %, in place of guards; found by "
             f"successive linear programmes, not proven: no blend that meets the limits costs less than {bound:.2f}")
    return _made(climb, x, chance, plain, replace(made, reasons=(words,)))


def _made(climb: _Climb, x: Array, chance: float, plain: float, recipe: Recipe,
          highest: float | None = None) -> Certain:
    carried = climb.errors.at(x)
    needs = climb.model.requirements
    words = unweighable(climb.model.table, climb.model.target, x)
    recipe = replace(recipe, reasons=(*recipe.reasons, words)) if words else recipe
    return Certain(recipe, chance, highest is None, closed_chances(carried, needs), together(carried, needs), highest,
                   plain)


def _impossible(stocks: StockTable | Iterable[Stock], free: Target, chance: float, errors: Errors,
                watch: Stopwatch) -> Certain:
    """No blend meets the limits at all: the nearest one, and its chances where there is one."""
    recipe = design(stocks, free, time_limit=max(1.0, watch.left))
    if not recipe.shares or not set(recipe.shares) <= set(errors.table.codes):
        return Certain(recipe, chance, False)
    x = np.array([recipe.shares.get(code, 0.0) for code in errors.table.codes])
    carried = errors.at(x)
    needs = [need for need in build(stocks, free).requirements if not need.empty]
    return Certain(recipe, chance, False, closed_chances(carried, needs), together(carried, needs))


@dataclass(frozen=True)
class _Edge:
    """One side of one limit at a blend: how far inside it the result counts as lying, and its error."""

    side: Side
    distance: float  # in the unit of the side's reading
    sigma: float
    even: float
    missed: float  # chance that the result lies outside


@dataclass(frozen=True)
class _Point:
    """A blend that was tried, its errors, and the chance of each limit."""

    x: Array
    carried: Carried
    edges: tuple[_Edge, ...]
    chances: Mapping[str, float]

    @property
    def worst(self) -> float:
        """The least chance of any limit."""
        return min(self.chances.values(), default=1.0)


@dataclass
class _Walk:
    """Where a settling stands."""

    point: _Point  # where the rows are taken
    touched: list[Array]  # blends at which the errors have tangents
    chosen: Array = field(default_factory=lambda: np.zeros(0))  # under whole-number rules, a blend of the chosen stocks
    turn: int = 0  # of a round of choosing stocks and settling their shares


@dataclass
class _Climb:
    """The search for one model."""

    model: Model
    errors: Errors
    watch: Stopwatch

    def point(self, x: Array) -> _Point:
        """A blend with its chances."""
        carried = self.errors.at(x)
        edges = []
        chances: dict[str, float] = {}
        for side in sides(carried, self.model.requirements):
            edge = _edge(carried, side)
            edges.append(edge)
            chances[side.need.code] = chances.get(side.need.code, 1.0) - edge.missed
        return _Point(x, carried, tuple(edges), chances)

    def settle(self, start: Array, chance: float) -> _Point | None:
        """The cheapest blend found of at least this chance, going out from a blend; None where none was."""
        price, whole = self.model.table.price, self.model.whole
        best: _Point | None = None
        least, before, idle = np.inf, np.inf, 0
        walk = _Walk(self.point(start), [start])
        for step in range(STEPS):
            # Where it swings and finds nothing, a little more is asked each time.
            more = FINER if best is not None or step < FREE else min(0.5, FINER * 2.0 ** (step - FREE))
            y = self._next(walk, (1.0 - chance) * (1.0 - more))
            if y is None:
                break
            tried, cost = self.point(y), float(price @ y)
            kept = whole is None or whole.kept_by(np.where(y > 1e-7, y, 0.0))
            good = kept and tried.worst >= chance and not self.model.missed(y)
            if good and cost < least:
                best, least, idle = tried, cost, 0
            idle += best is not None and step >= FREE
            if (good and abs(cost - before) <= STILL * abs(cost)) or idle > IDLE or self.watch.over:
                break
            # Where it swings between two ends of what bends, the next rows are taken half-way.
            walk.point = tried if step < FREE else self.point(0.5 * (walk.point.x + y))
            before = cost
        return best

    def _next(self, walk: _Walk, missed: float) -> Array | None:
        """The next blend: its stocks chosen by a linear programme, its shares settled among them; None: there is none.

        Whole-number rules choose the stocks in some turns and keep them in others; where nothing can be had of those
        that were chosen, others are, for more is known of these.
        """
        price, point = self.model.table.price, walk.point
        cones = [self._cone(point, edge, missed) for edge in point.edges]
        tangents = [cone.tangent(y) for cone in cones for y in walk.touched]
        free = self._around(point)
        if walk.turn == CHOICES:
            walk.chosen = walk.touched[-1]
        held = free if walk.turn < CHOICES else free.on_support(walk.chosen)
        solved = solve(held.with_rows(tangents), price, self.watch)
        if solved.x is None and free.whole is not None and walk.turn >= CHOICES:
            walk.turn, held = 0, free
            solved = solve(free.with_rows(tangents), price, self.watch)
        if solved.x is None:
            return None
        y = cheapest(held.on_support(solved.x), cones, price, solved.x, point.x)
        walk.turn = (walk.turn + 1) % ROUND
        walk.touched += [solved.x, y]
        return y

    def _around(self, point: _Point) -> Polytope:
        """The target's own rows, and the VI under further laws along its tangent at a blend."""
        return self.model.polytope().with_rows([
            self._vi_row(view, point.carried, limit, side, 0.0)
            for view in self.model.exact[1:] for side, limit in self._vi_sides()])

    def highest(self, start: Array, asked: float) -> _Point:
        """The blend of the highest chance found below the asked one, or one of the asked chance if it is found on
        the way: by halving what is between, and then from several blends deeper and deeper inside all limits."""
        best = self._halved(start, asked)
        starts = [best.x]
        for edge in best.edges[:2]:  # the blends of the stocks that are known best
            solved = solve(self._around(best), np.sqrt(best.carried.cone(edge.side.along)[0]), self.watch)
            starts += [solved.x] if solved.x is not None else []
        for x in starts:
            if best.worst >= asked or self.watch.over:
                break
            best = max(best, self._deeper(x, asked), key=lambda p: p.worst)
        return best if best.worst < asked else self.settle(best.x, asked) or best

    def _halved(self, start: Array, asked: float) -> _Point:
        """The cheapest blend of the highest chance below the asked one for which one is found."""
        best = self.point(start)
        low, high = (float(ndtri(p)) for p in (min(max(LOWEST, best.worst), asked), asked))
        for _ in range(HALVINGS):
            middle = 0.5 * (low + high)
            found = self.settle(best.x, float(ndtr(middle)))
            low, high = (low, middle) if found is None else (middle, high)
            best = found if found is not None and found.worst > best.worst else best
            if self.watch.over:
                break
        return best

    def _deeper(self, start: Array, asked: float) -> _Point:
        """A blend from which no small change raises the least chance of any limit, or one of the asked chance."""
        best, reach = self.point(start), 1.0
        for _ in range(STEPS):
            cones = [self._cone(best, edge, 1.0 - max(LOWEST, best.worst)) for edge in best.edges]
            problem = self._around(best).on_support(best.x)
            y = convex(problem, cones, np.flatnonzero(problem.hi > 0.0), best.x, None)
            if y is None:
                break
            tried = self.point(best.x + reach * (y - best.x))
            gain = tried.worst - best.worst
            best = tried if gain > 0.0 and not self.model.missed(tried.x) else best
            reach = min(1.0, 2.0 * reach) if gain > 0.0 else 0.3 * reach
            if best.worst >= asked or abs(gain) < 1e-4 or reach < 1e-2 or self.watch.over:
                break
        return best

    def _cone(self, point: _Point, edge: _Edge, missed: float) -> Cone:
        """One side of a limit near a blend: the limit moved inward by what the chance asks there, and how that grows.

        What may be missed is shared by the two sides of a limit: one has what the other leaves at this blend, and
        half at least.
        """
        carried, side, x = point.carried, edge.side, point.x
        others = sum(e.missed for e in point.edges if e.side.need is side.need and e is not edge)
        at = margin(max(missed - others, 0.5 * missed), edge.sigma, edge.even, side.skew)
        # The row speaks of the predicted value: what its distance differs by from the one that counts is added.
        moved = max(0.0, at[0] + _distance(carried, side) - edge.distance)
        if side.need.code == "vi":
            view = self.model.exact[0]
            row = self._vi_row(view, carried, side.limit, side.side, moved)
            rate = _rate(view.gauges["kv40"], float(carried.values[carried.errors.index("kv40")]), x)
        else:
            limit = side.limit + (moved if side.side == "low" else -moved)
            gauge = self.model.exact[0].gauges[side.need.code].tangent(x)
            limit = _on_scale(gauge, limit, side.limit)
            row, rate = gauge.row(limit, side.side), _rate(gauge, limit, x)
        _, by_sigma, by_even = at
        even = by_even * np.sign(edge.even) * (side.along @ carried.even_gradient)
        q, still = carried.cone(side.along)
        return Cone(row + rate * (even - float(even @ x) - by_sigma * edge.sigma), rate * by_sigma, q, still,
                     rate * (edge.sigma + abs(edge.even)))

    def _vi_sides(self) -> list[tuple[str, float]]:
        vi = self.model.vi
        found = [] if vi is None else [("low", vi.low), ("high", vi.high)]
        return [(side, limit) for side, limit in found if limit is not None]

    def _vi_row(self, view: View, carried: Carried, limit: float, side: str, moved: float) -> Array:
        """KV40 at most U(KV100) − moved ("low"), or at least U(KV100) + moved, along the tangent at a blend."""
        x = carried.x
        g40, g100 = (view.gauges[code].tangent(x) for code in ("kv40", "kv100"))
        kv100 = max(LOWEST_KV100, view.gauges["kv100"].read(x))
        at = float(kv40_at(limit, kv100)) + (-moved if side == "low" else moved)
        at = max(at, 1.0)
        a = slope_of_curve(limit, kv100, carried.sigma("kv100")) * _slope(g40, at) / _slope(g100, kv100)
        b = float(g40.index(at)) - a * float(g100.index(kv100))
        return np.asarray(g40.sign * (1.0 if side == "low" else -1.0) * (g40.num - a * g100.num - b * g40.den))


def _edge(carried: Carried, side: Side) -> _Edge:
    """How a side stands. The VI's distance counts as what its exact chance is worth: its curve has kinks."""
    sigma, even = carried.normal(side.along), float(side.along @ carried.even)
    if side.need.code != "vi":
        return _Edge(side, side.distance, sigma, even, missed_by(carried, side))
    one = replace(side.need, high=None) if side.side == "low" else replace(side.need, low=None)
    missed = 1.0 - (together(carried, [one], POINTS_OF_ONE) or 0.0)
    if sigma <= 0.0 or not 1e-5 < missed < 1.0 - 1e-5:
        return _Edge(side, side.distance, sigma, even, missed)
    near = margin(min(missed, 1.0 - missed), sigma, even)[0]
    return _Edge(side, near if missed < 0.5 else -near, sigma, even, missed)


def _distance(carried: Carried, side: Side) -> float:
    """How far inside a limit the predicted value itself lies, in the unit of the side's reading."""
    at, errors = carried.values, carried.errors
    sign = 1.0 if side.side == "low" else -1.0
    if side.need.code != "vi":
        return sign * (float(at[errors.index(side.need.code)]) - side.limit)
    return sign * (float(kv40_at(side.limit, max(LOWEST_KV100, float(at[errors.index("kv100")])))) -
                   float(at[errors.index("kv40")]))


def _on_scale(gauge: Gauge, at: float, limit: float) -> float:
    """A moved limit, kept where the property's index is defined: a hundredth of the limit where it leaves that."""
    with np.errstate(all="ignore"):
        return at if np.isfinite(gauge.index(at)) else 0.01 * limit


def _slope(gauge: Gauge, value: float) -> float:
    """dJ/d(value) of a gauge's index."""
    h = 1e-5 * max(1e-3, abs(value))
    return (float(gauge.index(value + h)) - float(gauge.index(value - h))) / (2.0 * h)


def _rate(gauge: Gauge, value: float, x: Array) -> float:
    """By how much the left side of a row grows when its limit moves inward by one unit, at a blend x."""
    return abs(_slope(gauge, value)) * abs(float(x @ gauge.den))
