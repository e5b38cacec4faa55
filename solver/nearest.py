"""The nearest blend, when none meets a target: the least sum of misses (elastic.py).

    minimise Σ_j miss_j(x)   over the shares allowed

Shares, quantities and whole-number rules are not given up. The misses bend, so it is found by a sequence
of linear programmes on the exact gradients, inside a step limit that shrinks when a step does not pay;
with whole-number rules each is a whole-number programme. It starts from the best of many blends: the
corners of the allowed shares and the mixtures of every two. It is a local minimum from several starts and
is not called proven.
"""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations

import numpy as np

from .elastic import Elastic, elastics, total
from .linear import Polytope, Stopwatch, Whole, scale, solve
from .properties import Array
from .recipe import GAP, Recipe, empty, least_cost, recipe_of
from .requirements import ceiling
from .rows import Model

MIXTURES = np.linspace(0.0, 1.0, 21)[:, None]
CORNERS = 60  # at most so many stocks have their corner tried
STARTS = 6
STEPS = 60


def nearest(model: Model, watch: Stopwatch) -> Recipe:
    """The nearest blend of a model that has none, with status "infeasible" and the reasons in words."""
    reasons = [need.why_empty() for need in model.requirements if need.empty]
    shares_only = _shares_only(model)
    if model.short or len(model.table) == 0:
        return empty(model, "infeasible", (*model.short, *_nothing(model), *reasons))
    if solve(shares_only, model.table.price, watch).x is None:
        return empty(model, "infeasible", (*_shortage(model, shares_only, watch), *reasons))
    limits = elastics(model)
    ends = [descend(shares_only, limits, start, watch) for start in _starts(model, shares_only, limits, watch)]
    best = min(ends, key=lambda x: float(total(limits, x[None, :])[0]))
    if not model.missed(best) and not reasons and _within_ceiling(model, best):
        # Limits so narrow that the search for a proof found no room, and yet this blend meets them.
        words = "a blend was found where the proof found no room: the limits leave hardly any"
        return recipe_of(model, best, "stopped", reasons=(words,))
    reasons += _words(model, limits, best, watch)
    return recipe_of(model, best, "infeasible", reasons=tuple(reasons))


def _within_ceiling(model: Model, x: Array) -> bool:
    most = ceiling(model.target)
    return most is None or float(model.table.price @ x) <= most * (1.0 + GAP)


def _shares_only(model: Model) -> Polytope:
    """The polytope of shares, without property rows and the cost ceiling."""
    held = model.polytope()
    keep = [i for i, row in enumerate(model.rows) if row.of_shares]
    return replace(held, rows=held.rows[keep], hold=held.hold[keep])


def _nothing(model: Model) -> list[str]:
    if len(model.table):
        return []
    out = "; ".join(f"{x.stock}: {x.reason}" for x in model.left_out[:6])
    return ["no stock may serve this product" + (f" ({out})" if out else
                                                 ": name its stocks in the share rules")]


def _shortage(model: Model, shares: Polytope, watch: Stopwatch) -> list[str]:
    """How far the allowed shares reach, and what stops them."""
    most, least = (_reach(model, sign, watch) for sign in (-1.0, 1.0))
    target = model.target
    if most is None or least is None:
        return ["the share rules contradict each other: no set of shares keeps them all"]
    if least > 1.0 + 1e-9:
        lows = {r.of: r.low for r in target.rules if r.low > 0.0} | dict(target.held)
        asked = ", ".join(f"{of} {100 * low:.4g} %{' held' if of in target.held else ''}" for of, low in lows.items())
        return [f"the least shares asked add up to {100 * least:.6g} %: {asked}"]
    if most < 1.0 - 1e-9:
        caps = ", ".join(f"{code} {100 * hi:.4g} %" for code, hi in
                         zip(model.table.codes, model.hi, strict=True) if hi < 1.0)
        batch = f" of {target.batch_kg:g} kg" if target.batch_kg is not None else ""
        missing = (f", {(1.0 - most) * target.batch_kg:,.0f} kg short" if target.batch_kg is not None else "")
        return [f"the shares allowed reach only {100 * most:.4g} %{batch}{missing}; the most of each by "
                f"rule or tank: {caps or 'limited by the group rules'}"]
    if shares.whole is None:
        return ["the share rules leave no set of shares that sums to 100 %"]
    return ["the whole-number rules (most stocks, least share) leave no set of shares"]


def _reach(model: Model, sign: float, watch: Stopwatch) -> float | None:
    """The largest (sign −1) or least (sign 1) sum of shares that bounds and rules allow; None: none at all."""
    n = len(model.table)
    of_one = {row.name for row in model.rows if row.of_shares}
    rules = [(np.array([1.0 if s.matches(r.of) else 0.0 for s in model.table.stocks]), r)
             for r in model.target.rules if r.of in of_one]
    rows = [np.append(inside, -rule.high) for inside, rule in rules if rule.high < 1.0]
    rows += [np.append(-inside, rule.low) for inside, rule in rules if rule.low > 0.0]
    # A last variable fixed at 1 carries the rules' right-hand sides.
    problem = Polytope(np.array(rows) if rows else np.zeros((0, n + 1)), np.zeros(len(rows)),
                       np.append(model.lo, 1.0), np.append(model.hi, 1.0), total=None)
    solved = solve(problem, np.append(np.full(n, sign), 0.0), watch)
    return None if solved.x is None else float(solved.x[:n].sum())


def _starts(model: Model, shares: Polytope, limits: list[Elastic], watch: Stopwatch) -> list[Array]:
    """The best few of the corners of the allowed shares and of the mixtures of every two of them."""
    corners = _corners(model, shares, watch)
    tried = np.array(corners)
    scores = [(float(v), i, i, 0.0) for i, v in enumerate(total(limits, tried))]
    whole = shares.whole
    for i, j in combinations(range(len(corners)), 2):
        mixed = MIXTURES * corners[i] + (1.0 - MIXTURES) * corners[j]
        values = total(limits, mixed)
        order = np.argsort(values)
        k = next((int(k) for k in order if whole is None or whole.kept_by(mixed[k])), None)
        if k is not None:
            scores.append((float(values[k]), i, j, float(MIXTURES[k, 0])))
    scores.sort()
    chosen: list[Array] = []
    for _, i, j, t in scores:
        x = t * corners[i] + (1.0 - t) * corners[j] if i != j else corners[i]
        if all(float(np.abs(x - other).max()) > 0.02 for other in chosen):
            chosen.append(x)
        if len(chosen) == STARTS:
            break
    if whole is not None:
        # What would be nearest without the whole-number rules, brought back to them.
        free = descend(replace(shares, whole=None), limits, chosen[0], watch)
        step = _step(shares, limits, free, 1.0, watch)
        chosen += [step] if step is not None else []
    return chosen


def _corners(model: Model, shares: Polytope, watch: Stopwatch) -> list[Array]:
    """For each stock (of many, an even choice) the shares with the most of it; and the cheapest."""
    n = len(model.table)
    which = np.unique(np.linspace(0, n - 1, min(n, CORNERS)).astype(int))
    extremes = [int(f(g.num / np.where(g.den == 0.0, 1.0, g.den))) for g in model.gauges.values()
                for f in (np.argmin, np.argmax)]
    found: list[Array] = []
    for i in [None, *dict.fromkeys([*extremes, *(int(k) for k in which)])]:
        c = model.table.price if i is None else -np.eye(n)[i]
        solved = solve(shares, scale(c), watch)
        if solved.x is not None and not any(np.allclose(solved.x, x, atol=1e-6) for x in found):
            found.append(solved.x)
    return found


def descend(shares: Polytope, limits: list[Elastic], x: Array, watch: Stopwatch) -> Array:
    """The blend of least summed misses that shrinking steps from x lead to, share rules kept."""
    best, least, reach = x, float(total(limits, x[None, :])[0]), 1.0
    for _ in range(STEPS):
        if least <= 1e-9 or reach < 1e-7 or watch.over:
            break
        step = _step(shares, limits, best, reach, watch)
        if step is None:
            break
        new = float(total(limits, step[None, :])[0])
        if new < least - 1e-10 * max(1.0, least):
            best, least, reach = step, new, min(1.0, 2.0 * reach)
        else:
            reach *= 0.25
    return best


def _step(shares: Polytope, limits: list[Elastic], x: Array, reach: float, watch: Stopwatch) -> Array | None:
    """Minimise the linearised sum of misses within `reach` of x; None when the programme has no answer.

    The variables are the shares, then one miss a limit; the misses, bounded by 0 and by their value at x,
    join the shares' problem as further columns that no sum and no whole-number rule counts.
    """
    n, k = len(x), len(limits)
    rows = [np.concatenate([row, np.zeros(k + 1)]) for row in shares.rows]
    for j, each in enumerate(limits):
        value, slope = each.value(x), each.gradient(x)
        for sign, limit, unit in each.sides:
            # sign·(value + slope·(y − x) − limit) ≤ unit·miss; the last variable is fixed at 1
            miss = np.zeros(k + 1)
            miss[j], miss[k] = -unit, sign * (value - float(slope @ x) - limit)
            row = np.concatenate([sign * slope, miss])
            rows.append(row / max(float(np.abs(row[:n]).max()), 1e-12))
    ones = np.concatenate([np.ones(n), np.zeros(k), [-1.0]])
    rows += [ones, -ones]  # Σ y = 1
    most = np.array([float(each.misses(x[None, :])[0]) for each in limits])
    whole = shares.whole
    lo, hi = np.maximum(shares.lo, x - reach), np.minimum(shares.hi, x + reach)
    problem = Polytope(np.array(rows), np.zeros(len(rows)), np.concatenate([lo, np.zeros(k), [1.0]]),
                       np.concatenate([np.maximum(lo, hi), np.full(k, max(1.0, 1e3 * most.sum())), [1.0]]), total=None,
                       whole=None if whole is None else Whole(
                           np.concatenate([whole.counted, np.zeros(k + 1, dtype=np.bool_)]), whole.most,
                           np.concatenate([whole.least, np.zeros(k + 1)])))
    solved = solve(problem, np.concatenate([np.zeros(n), np.ones(k), [0.0]]), watch)
    if solved.x is None:
        return None
    y = np.clip(solved.x[:n], 0.0, 1.0)
    y[y < 1e-10] = 0.0
    return y / float(y.sum())


def _words(model: Model, limits: list[Elastic], x: Array, watch: Stopwatch) -> list[str]:
    """What the nearest blend misses, or that only the whole-number rules stand in the way."""
    if model.whole is not None:
        relaxed = replace(model, target=replace(model.target, max_stocks=None, min_share=None))
        if least_cost(relaxed, watch).x is not None:
            return ["only the whole-number rules (most stocks, least share) stand in the way: "
                    "without them a blend exists"]
    found = []
    for each in limits:
        value = each.value(x)
        for sign, limit, _ in each.sides:
            miss = sign * (value - limit)
            if miss > 1e-6 * max(1.0, abs(value)):
                found.append(f"{each.name} {value:.4g} is {miss:.3g} {'above' if sign > 0.0 else 'below'} the "
                             f"{limit:.4g} that is held")
    return [f"no blend meets every limit; the nearest misses: {'; '.join(found)}"]
