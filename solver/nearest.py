"""The nearest blend, when none meets a target: the least sum of misses.

    minimise Σ_j miss_j(x)/R_j   over the shares allowed

miss_j is how far the exact value lies outside limit j, R_j the reproducibility of its method at the
limit (the cost ceiling counts 1 % of itself as one unit: common practice, it has no method). Shares,
quantities and whole-number rules are not given up. The misses bend, so it is found by a sequence of
linear programmes on the exact gradients inside a step limit that shrinks when a step does not pay,
from several starts; it is a local minimum of a well-behaved sum, and is not called proven.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from .linear import Polytope, Stopwatch, scale, solve
from .properties import Array, lookup
from .recipe import Recipe, empty, least_cost, recipe_of
from .requirements import COST, Requirement
from .rows import Model
from .viscosity_index import LOWEST_KV100, indices

COST_UNIT = 0.01  # of the ceiling


@dataclass(frozen=True)
class _Elastic:
    """One limit that may be missed: its value, gradient, sides and unit of miss."""

    name: str
    value: Callable[[Array], float]
    gradient: Callable[[Array], Array]
    low: float | None
    high: float | None
    unit_low: float  # one unit of miss below the low side …
    unit_high: float  # … and above the high one

    @property
    def sides(self) -> list[tuple[float, float, float]]:
        """(sign, limit, unit) of each side that is closed: sign·(value − limit) is the miss."""
        found = [(1.0, self.high, self.unit_high), (-1.0, self.low, self.unit_low)]
        return [(sign, limit, unit) for sign, limit, unit in found if limit is not None]

    def miss(self, x: Array) -> float:
        """The miss of a blend, in units."""
        value = self.value(x)
        return max([0.0, *(sign * (value - limit) / unit for sign, limit, unit in self.sides)])


def nearest(model: Model, watch: Stopwatch) -> Recipe:
    """The nearest blend of a model that has none, with status "infeasible" and the reasons in words."""
    reasons = [need.why_empty() for need in model.requirements if need.empty]
    shares_only = _shares_only(model)
    if model.short or len(model.table) == 0:
        return empty(model, "infeasible", (*model.short, *_nothing(model), *reasons))
    found = solve(shares_only, model.table.price, watch)
    if found.x is None:
        return empty(model, "infeasible", (*_shortage(model, shares_only, watch), *reasons))
    elastics = _elastics(model)
    best = min((_descend(shares_only.on_support(start), elastics, start, watch)
                for start in _starts(model, shares_only, elastics, found.x, watch)),
               key=lambda x: _total(elastics, x))
    reasons += _words(model, elastics, best, watch)
    return recipe_of(model, best, "infeasible", reasons=tuple(reasons))


def _shares_only(model: Model) -> Polytope:
    """The polytope of shares, without property rows and the cost ceiling."""
    elastic = {need.code for need in model.requirements} | {COST}
    held = model.polytope()
    keep = [i for i, row in enumerate(model.rows) if row.name not in elastic]
    return replace(held, rows=held.rows[keep], hold=held.hold[keep])


def _nothing(model: Model) -> list[str]:
    if len(model.table):
        return []
    out = "; ".join(f"{x.stock}: {x.reason}" for x in model.left_out[:6])
    return ["no stock may serve this product" + (f" ({out})" if out else
                                                 ": name its stocks in the share rules")]


def _shortage(model: Model, shares: Polytope, watch: Stopwatch) -> list[str]:
    """How far the allowed shares reach, and what stops them."""
    most = _reach(model, shares, watch)
    if most is None:
        return ["the share rules contradict each other: no set of shares keeps them all"]
    if most < 1.0 - 1e-9:
        target = model.target
        caps = ", ".join(f"{code} {100 * hi:.4g} %" for code, hi in
                         zip(model.table.codes, model.hi, strict=True) if hi < 1.0)
        batch = f" of {target.batch_kg:g} kg" if target.batch_kg is not None else ""
        missing = (f", {(1.0 - most) * target.batch_kg:,.0f} kg short" if target.batch_kg is not None else "")
        return [f"the shares allowed reach only {100 * most:.4g} %{batch}{missing}; the most of each by "
                f"rule or tank: {caps or 'limited by the group rules'}"]
    return ["the whole-number rules (most stocks, least share) leave no set of shares"]


def _reach(model: Model, shares: Polytope, watch: Stopwatch) -> float | None:
    """The largest sum of shares that the bounds and rules allow; None where they contradict."""
    n = len(model.table)
    rules = [(row, rule) for row, rule in
             ((np.array([1.0 if s.matches(r.of) else 0.0 for s in model.table.stocks]), r)
              for r in model.target.rules if r.of not in model.table.codes)]
    rows = [np.append(inside, -rule.high) for inside, rule in rules if rule.high < 1.0]
    rows += [np.append(-inside, rule.low) for inside, rule in rules if rule.low > 0.0]
    # A last variable fixed at 1 carries the rules' right-hand sides.
    problem = Polytope(np.array(rows) if rows else np.zeros((0, n + 1)), np.zeros(len(rows)),
                       np.append(model.lo, 1.0), np.append(model.hi, 1.0), total=None)
    solved = solve(problem, np.append(-np.ones(n), 0.0), watch)
    return None if solved.x is None else float(solved.x[:n].sum())


def _elastics(model: Model) -> list[_Elastic]:
    found = [_of_requirement(model, need) for need in model.requirements]
    if model.vi is not None:
        g100 = model.gauges["kv100"]
        unit = lookup("kv100").reproducibility(LOWEST_KV100)
        found.append(_Elastic("kv100", g100.read, g100.gradient, LOWEST_KV100, None, unit, unit))
    ceiling = model.target.max_cost_per_t
    if ceiling is not None:
        price = model.table.price
        found.append(_Elastic(COST, lambda x: float(price @ x), lambda x: price, None, ceiling,
                              COST_UNIT * ceiling, COST_UNIT * ceiling))
    return found


def _of_requirement(model: Model, need: Requirement) -> _Elastic:
    units = need.unit_of_miss("low"), need.unit_of_miss("high")
    if need.code == "vi":
        return _Elastic("vi", lambda x: _vi(model, x), lambda x: _vi_gradient(model, x), need.held_low,
                        need.held_high, *units)
    gauge = model.gauges[need.code]

    def value(x: Array) -> float:
        read = gauge.read(x)
        # A blend of stocks that all lack an allowed-unknown value misses nothing that can be told.
        inside = need.held_low if need.held_low is not None else need.held_high
        return read if np.isfinite(read) or inside is None else inside

    def gradient(x: Array) -> Array:
        return gauge.gradient(x) if float(x @ gauge.den) != 0.0 else np.zeros(len(x))

    return _Elastic(need.code, value, gradient, need.held_low, need.held_high, *units)


def _vi(model: Model, x: Array) -> float:
    """VI with KV100 taken as at least 2, so that a thinner blend still has a direction to go."""
    return float(indices(model.gauges["kv40"].read(x), max(LOWEST_KV100, model.gauges["kv100"].read(x))))


def _vi_gradient(model: Model, x: Array) -> Array:
    g40, g100 = model.gauges["kv40"], model.gauges["kv100"]
    u, y = g40.read(x), max(LOWEST_KV100, g100.read(x))
    h = 1e-5
    by40 = float(indices(u * (1 + h), y) - indices(u * (1 - h), y)) / (2 * h * u)
    by100 = float(indices(u, y * (1 + h)) - indices(u, max(LOWEST_KV100, y * (1 - h)))) / (
        y * (1 + h) - max(LOWEST_KV100, y * (1 - h)))
    return by40 * g40.gradient(x) + by100 * g100.gradient(x)


def _total(elastics: list[_Elastic], x: Array) -> float:
    return sum(each.miss(x) for each in elastics)


def _step(shares: Polytope, elastics: list[_Elastic], x: Array, reach: float,
          watch: Stopwatch) -> Array | None:
    """Minimise the linearised sum of misses within `reach` of x: one linear programme with slacks."""
    n, k = len(x), len(elastics)
    rows = [np.concatenate([row, np.zeros(k)]) for row in shares.rows]
    hold = list(shares.hold)
    for j, each in enumerate(elastics):
        value, slope = each.value(x), each.gradient(x)
        for sign, limit, unit in each.sides:
            # sign·(value + slope·(y − x) − limit) ≤ unit·s, made homogeneous by Σ y = 1
            coef = sign * (slope + (value - float(slope @ x)) - limit)
            slack = np.zeros(k)
            slack[j] = -unit
            rows.append(np.concatenate([coef, slack]))
            hold.append(0.0)
    size = [float(np.max(np.abs(row[:n]))) or 1.0 for row in rows]
    problem = _WithSlacks(np.array(rows) / np.array(size)[:, None], np.array(hold),
                          np.concatenate([np.maximum(shares.lo, x - reach), np.zeros(k)]),
                          np.concatenate([np.minimum(shares.hi, x + reach), np.full(k, np.inf)]), n)
    return problem.solve(np.concatenate([np.zeros(n), np.ones(k)]), watch)


@dataclass(frozen=True)
class _WithSlacks:
    """A linear programme whose first n variables are shares that sum to 1; the others are slacks."""

    rows: Array
    hold: Array
    lo: Array
    hi: Array
    n: int

    def solve(self, c: Array, watch: Stopwatch) -> Array | None:
        from scipy.optimize import linprog

        ones = np.concatenate([np.ones(self.n), np.zeros(len(c) - self.n)])[None, :]
        result = linprog(c, A_ub=self.rows, b_ub=-self.hold, A_eq=ones, b_eq=[1.0],
                         bounds=np.column_stack([self.lo, np.maximum(self.lo, self.hi)]), method="highs",
                         options={"time_limit": watch.left})
        if result.x is None or result.status != 0:
            return None
        x: Array = np.clip(result.x[:self.n], 0.0, 1.0)
        x[x < 1e-10] = 0.0
        return x / float(x.sum())


def _descend(shares: Polytope, elastics: list[_Elastic], x: Array, watch: Stopwatch) -> Array:
    best, total, reach = x, _total(elastics, x), 0.5
    for _ in range(80):
        if total <= 1e-9 or reach < 1e-7 or watch.over:
            break
        step = _step(shares, elastics, best, reach, watch)
        if step is None:
            break
        new = _total(elastics, step)
        if new < total - 1e-10 * max(1.0, total):
            best, total, reach = step, new, min(1.0, 2.0 * reach)
        else:
            reach *= 0.25
    return best


def _starts(model: Model, shares: Polytope, elastics: list[_Elastic], cheapest: Array,
            watch: Stopwatch) -> list[Array]:
    """The cheapest shares, and for each limit the blend that goes furthest its way."""
    starts = [cheapest]
    for need in model.requirements:
        gauge = model.gauges.get(need.code)
        sides = [("low", need.held_low), ("high", need.held_high)]
        for side, limit in sides:
            if limit is None:
                continue
            if gauge is None:  # VI: judged at the middle of what has been found so far
                each = next(e for e in elastics if e.name == "vi")
                coef = each.gradient(np.mean(starts, axis=0)) * (-1.0 if side == "low" else 1.0)
            else:
                coef = gauge.row(limit, side)
            solved = solve(shares, scale(coef), watch)
            if solved.x is not None:
                starts.append(solved.x)
    middle = np.mean(starts, axis=0)
    return [middle, *starts[:5]] if shares.whole is None else starts[:6]


def _words(model: Model, elastics: list[_Elastic], x: Array, watch: Stopwatch) -> list[str]:
    """What the nearest blend misses, or that only the whole-number rules stand in the way."""
    if model.whole is not None:
        relaxed = replace(model, target=replace(model.target, max_stocks=None, min_share=None))
        if least_cost(relaxed, watch).x is not None:
            return ["only the whole-number rules (most stocks, least share) stand in the way: "
                    "without them a blend exists"]
    found = []
    for each in elastics:
        value = each.value(x)
        for sign, limit, _ in each.sides:
            miss = sign * (value - limit)
            if miss > 1e-6 * max(1.0, abs(value)):
                name = "cost per t" if each.name == COST else lookup(each.name).name
                found.append(f"{name} {value:.4g} is {miss:.3g} {'above' if sign > 0.0 else 'below'} the "
                             f"{limit:.4g} that is held")
    return [f"no blend meets every limit; the nearest misses: {'; '.join(found)}"]
