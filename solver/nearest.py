"""The nearest blend, when none meets a target: the least sum of misses (elastic.py).

    minimise Σ_j miss_j(x)   over the shares allowed

Shares, quantities and whole-number rules are not given up. The misses bend, so it is found by a sequence
of linear programmes on the exact gradients, inside a step limit that shrinks when a step does not pay;
with whole-number rules each is a whole-number programme. It starts from the best of many blends: the
corners of the allowed shares and the mixtures of every two. It is a local minimum from several starts and
is not called proven.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from typing import Any

import numpy as np

from .elastic import Elastic, elastics, total
from .linear import Polytope, Stopwatch, Whole, scale, solve
from .properties import Array
from .recipe import GAP, Recipe, empty, least_cost, recipe_of
from .requirements import ceiling
from .rows import Model

MIXTURES = np.linspace(0.0, 1.0, 11)
CORNERS = 60  # at most so many stocks have their corner tried …
RULED_CORNERS = 16  # … and so many where each takes a linear programme
STARTS = 4
TRIED, FINISHED = 3, 2  # steps from every start, and how many of them are then followed to their end
STEPS = 60
APART = 0.02  # mass fraction by which starts differ


def nearest(model: Model, watch: Stopwatch) -> Recipe:
    """The nearest blend of a model that has none, with status "infeasible" and the reasons in words."""
    reasons = [need.why_empty() for need in model.requirements if need.empty]
    shares_only = _shares_only(model)
    if model.short or len(model.table) == 0:
        return empty(model, "infeasible", (*model.short, *_nothing(model), *reasons))
    if solve(shares_only, model.table.price, watch).x is None:
        return empty(model, "infeasible", (*_shortage(model, shares_only, watch), *reasons))
    limits = elastics(model)
    best = _least_missed(shares_only, limits, _starts(model, shares_only, limits, watch), watch)
    if not model.missed(best) and not reasons and _within_ceiling(model, best):
        # Limits so narrow that the search for a proof found no room, and yet this blend meets them.
        words = "a blend was found where the proof found no room: the limits leave hardly any"
        return recipe_of(model, best, "stopped", reasons=(words,))
    reasons += _words(model, limits, best, watch)
    return recipe_of(model, best, "infeasible", reasons=tuple(reasons))


def _least_missed(shares: Polytope, limits: list[Elastic], starts: list[Array], watch: Stopwatch) -> Array:
    """The best end of a descent: a few steps from every start, and the most promising followed to their end."""
    begun: list[tuple[float, Array]] = []
    for start in starts:
        x = descend(shares, limits, start, watch, TRIED)
        if all(float(np.abs(x - other).max()) > 1e-4 for _, other in begun):
            begun.append((float(total(limits, x[None, :])[0]), x))
    begun.sort(key=lambda pair: pair[0])
    ends = [descend(shares, limits, x, watch) for _, x in begun[:FINISHED]]
    return min(ends, key=lambda x: float(total(limits, x[None, :])[0]))


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
    rules = [(np.array([s.part_of(r.of) for s in model.table.stocks]), r)
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
    corners = np.array(_corners(model, shares, watch))
    first, second = (np.append(v, np.arange(len(corners))) for v in np.triu_indices(len(corners), 1))
    parts = np.tile(MIXTURES, len(first))[:, None]
    tried = parts * corners[np.repeat(first, len(MIXTURES))] + (1.0 - parts) * corners[
        np.repeat(second, len(MIXTURES))]
    values, whole = total(limits, tried), shares.whole
    chosen: list[Array] = []
    for x in tried[np.argsort(values, kind="stable")]:
        kept = whole is None or whole.kept_by(x)
        if kept and all(float(np.abs(x - other).max()) > APART for other in chosen):
            chosen.append(x)
        if len(chosen) == STARTS:
            break
    if whole is not None:
        # What would be nearest without the whole-number rules, brought back to them.
        free = descend(replace(shares, whole=None), limits, chosen[0], watch)
        step = _step(shares, limits, free, 1.0, watch)
        chosen += [step[0]] if step is not None else []
    return chosen


def _corners(model: Model, shares: Polytope, watch: Stopwatch) -> list[Array]:
    """For each stock (of many, an even choice) the shares with the most of it; and the cheapest."""
    n, price = len(model.table), model.table.price
    ruled = len(shares.rows) > 0 or shares.whole is not None
    most = RULED_CORNERS if ruled else CORNERS
    which = np.unique(np.linspace(0, n - 1, min(n, most)).astype(int))
    extremes = [int(f(g.num / np.where(g.den == 0.0, 1.0, g.den))) for g in model.gauges.values()
                for f in (np.argmin, np.argmax)]
    found: list[Array] = []
    for i in [None, *dict.fromkeys([*extremes, *(int(k) for k in which)])]:
        if ruled:
            x = solve(shares, scale(price if i is None else 1e-3 * price / price.max() - np.eye(n)[i]), watch).x
        else:
            x = _filled(shares, np.argsort(price if i is None else np.where(np.arange(n) == i, -np.inf, price)))
        if x is not None and not any(np.allclose(x, other, atol=1e-6) for other in found):
            found.append(x)
    return found


def _filled(shares: Polytope, order: Iterable[Any]) -> Array:
    """Shares that only bounds limit, filled up to 1 in an order of stocks."""
    x = shares.lo.copy()
    rest = 1.0 - float(x.sum())
    for i in order:
        more = min(rest, float(shares.hi[i] - shares.lo[i]))
        x[i] += more
        rest -= more
        if rest <= 0.0:
            break
    return x


def descend(shares: Polytope, limits: list[Elastic], x: Array, watch: Stopwatch, steps: int = STEPS) -> Array:
    """The blend of least summed misses that shrinking steps from x lead to, share rules kept."""
    best, least, reach = x, float(total(limits, x[None, :])[0]), 1.0
    for _ in range(steps):
        if least <= 1e-9 or reach < 1e-7 or watch.over:
            break
        step = _step(shares, limits, best, reach, watch)
        # Where not even the straight lines promise anything, no smaller step can do better.
        if step is None or step[1] >= least - 1e-9 * max(1.0, least):
            break
        new = float(total(limits, step[0][None, :])[0])
        if new < least - 1e-10 * max(1.0, least):
            best, least, reach = step[0], new, min(1.0, 2.0 * reach)
        else:
            reach *= 0.25
    return best


def _step(shares: Polytope, limits: list[Elastic], x: Array, reach: float,
          watch: Stopwatch) -> tuple[Array, float] | None:
    """Minimise the linearised sum of misses within `reach` of x: shares and that sum; None: no answer.

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
    return y / float(y.sum()), solved.value


def _words(model: Model, limits: list[Elastic], x: Array, watch: Stopwatch) -> list[str]:
    """What the nearest blend misses, or that only the whole-number rules stand in the way."""
    if model.whole is not None:
        relaxed = replace(model, target=replace(model.target, max_stocks=None, min_share=None))
        if least_cost(relaxed, watch).x is not None:
            return ["only the whole-number rules (most stocks, least share) stand in the way: "
                    "without them a blend exists"]
    found: dict[tuple[str, float], tuple[float, str]] = {}  # of several laws the worst
    for each in limits:
        value = each.value(x)
        for sign, limit, _ in each.sides:
            miss = sign * (value - limit)
            if miss > max(1e-6 * max(1.0, abs(value)), found.get((each.code, sign), (0.0, ""))[0]):
                found[each.code, sign] = (miss, f"{each.name} {value:.4g} is {miss:.3g} "
                                          f"{'above' if sign > 0.0 else 'below'} the {limit:.4g} that is held")
    return [f"no blend meets every limit; the nearest misses: {'; '.join(words for _, words in found.values())}"]
