"""How far each property can be brought with the stocks at hand.

A property is value(J), J = Σ x num / Σ x den with den of one sign: its extreme over blends is found by
Dinkelbach's steps (Management Science 13 (1967) 492, M), each a linear programme on num − J·den, or a search
with the viscosity index held. The viscosity index itself is best on the hull of what can be reached in the plane
of the two indices, which is drawn by linear programmes as far as it matters.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from .demands import OPEN, Demand, Demands, Held
from .errors import SolverError
from .gauge import Gauge
from .laws import index_of_law
from .linear import SLACK, Polytope, Stopwatch, scale, solve
from .properties import Array, lookup
from .recipe import exact_search, least_cost
from .requirements import COST, Requirement
from .rows import Model, View, build, with_rows
from .target import Target
from .vi_curve import curve
from .viscosity_index import LOWEST_KV100, indices
from .windows import Outcome, search

ALWAYS = ("kv40", "kv100", "vi", "density15")  # told of every target
VI_STEP = 0.05  # VI points to which a reach is found
BENT_BY = 20.0  # VI points by which what the laboratory taught may shift a reach, at most …
BENT_STEP = 0.5  # … and to which it is then found, for every question takes many steps
SAMPLES = 120  # points of a mixture at which the VI is looked at, twice
EDGES = 400  # at most so many lines are asked of
SAME = 1e-7  # in a law's index: two points of the plane are one
RATIO_GAP = 1e-5  # to which one of Dinkelbach's steps is solved, rows scaled to 1: a KV to four figures
STEPS = 30
Interval = tuple[float, float]


def best_of(demands: Demands, of: Demand, others: Held, watch: Stopwatch) -> tuple[float | None, bool]:
    """The best that one demand of an impossible set can have while the others hold, in its limit's unit.

    The highest value where at least so much is asked, the lowest where at most; the largest batch for the
    quantities on hand; None where nothing can be said in a number. Treat rates stand as asked besides, where they
    can (then True): a best that only a vessel full of pour depressant would have is nobody's.
    """
    treated = frozenset(demands.treat_rates) - {of} - others
    if treated:
        best = _best_of(demands, of, others | treated, watch)
        if best is not None:
            return best, True
    return _best_of(demands, of, others, watch), False


def _best_of(demands: Demands, of: Demand, others: Held, watch: Stopwatch) -> float | None:
    if of.kind == "on hand":
        from .choices import largest_batch

        loose = demands.with_only(others)
        return largest_batch(demands.table, loose, time_limit=watch.left)
    if of.kind == "cost":
        model = demands.only(others)
        found = least_cost(model, watch)
        return None if found.x is None else found.value
    if of.kind in ("share", "held"):
        return _share(demands, of, others, watch)
    if of.kind != "limit":
        return None
    side = (of.name, of.side)
    entry = lookup(of.name)
    # A side that every oil meets keeps the property read and the stocks known; the other side stays as it is.
    aside = {side: OPEN if of.name == "vi" else entry.lowest if of.side == "low" else entry.highest}
    found_at = extreme(demands.only(others, aside), of.name, 1.0 if of.side == "low" else -1.0, watch)
    return None if found_at is None else found_at[0]


def _share(demands: Demands, of: Demand, others: Held, watch: Stopwatch) -> float | None:
    """The share nearest to what a rule or a hold asks that the other demands allow."""
    model = demands.only(others)
    inside = np.array([s.part_of(of.name) for s in model.table.stocks])
    if model.short or not inside.any():
        return 0.0 if of.side == "low" else None
    signs = {"low": (-1.0,), "high": (1.0,)}.get(of.side, (-1.0, 1.0))
    found = [exact_search(model, model.polytope(), sign * inside, watch, gap=0.0, gap_absolute=2e-5)[0].x
             for sign in signs]
    shares = [float(inside @ x) for x in found if x is not None]
    return min(shares, key=lambda share: abs(share - of.limit), default=None)


def _neutral(code: str) -> dict[tuple[str, str], float]:
    """What moves the limits on a property out of the way, so that it is still read and its stocks known."""
    if code == "vi":
        return {("vi", "low"): OPEN, ("vi", "high"): OPEN}
    return {(code, "low"): lookup(code).lowest, (code, "high"): OPEN}


def reach(demands: Demands, watch: Stopwatch) -> Iterator[tuple[str, Interval | None, Interval | None]]:
    """(property, lowest and highest reachable by rules and quantities alone, and with all other limits held).

    For every property that is limited, and KV40, KV100, VI, density at 15 °C and the cost always; over the
    stocks that may serve the target today. Whole-number rules are left out. None where no blend exists, or
    where the property cannot be known. In the property's unit, VI to 0.1.
    """
    target, serving = demands.target, set(demands.model.table.codes)
    out = target.left_out | {c for c in demands.table.codes if c not in serving}
    plain = replace(target, left_out=out, max_stocks=None, min_share=None)
    codes = [*dict.fromkeys([*ALWAYS, *demands.needs]), COST]
    shut = {(code, side): OPEN for code in demands.needs for side in ("low", "high")} | {(COST, "high"): OPEN}
    for code in codes:
        yield (code, _span(demands, replace(plain, moved=shut), code, watch),
               _span(demands, plain, code, watch))


def _span(demands: Demands, target: Target, code: str, watch: Stopwatch) -> Interval | None:
    moved = {(COST, "high"): OPEN} if code == COST else _neutral(code)
    try:
        model = build(demands.table, replace(target, moved={**target.moved, **moved}))
    except SolverError:
        return None
    low = extreme(model, code, -1.0, watch)
    high = extreme(model, code, 1.0, watch) if low is not None else None
    return None if low is None or high is None else (low[0], high[0])


def outside_first(model: Model, c: Array, watch: Stopwatch, gap_absolute: float) -> Outcome:
    """As `recipe.exact_search`, with the rows a hair outside first: quicker where there is often no blend at all.

    Where nothing is found a hair outside, there is nothing inside either; where limits bend only a search that
    follows them can say so.
    """
    if model.bent:
        return exact_search(model, model.polytope(), c, watch, gap=0.0, gap_absolute=gap_absolute)[0]
    outcome = search(model, model.polytope().held(SLACK), c, watch, gap=0.0, gap_absolute=gap_absolute)
    if outcome.status == "infeasible" or (outcome.x is not None and not model.missed(outcome.x)):
        return outcome
    return exact_search(model, model.polytope(), c, watch, gap=0.0, gap_absolute=gap_absolute)[0]


def extreme(model: Model, code: str, sign: float, watch: Stopwatch) -> tuple[float, Array] | None:
    """The highest (sign 1) or lowest (sign −1) value of a property over a model's blends, and such a blend.

    The model's own rows, whole-number rules and VI limits hold; None where no blend meets them, or where time ran out
    before one was found. Under several laws a blend has the value of that law which is worst for it: of a VI the best
    there is, of a KV that of the best blends of each law, which others may pass by a little.
    """
    if model.short or len(model.table) == 0 or any(need.empty for need in model.requirements):
        return None
    if code == COST:
        return _linear(model, -sign * model.table.price, watch, model.table.price)
    best: tuple[float, Array] | None = None
    far = np.inf  # no blend is beyond what it can have under any one law
    for number in range(len(model.exact) if code == "vi" or lookup(code).basis == "law" else 1):
        found = (_vi if code == "vi" else _ratio)(_seen_by(model, number), code, sign, watch)
        worst = None if found is None else _worst(model, code, found[1], sign)
        if found is None or worst is None:
            continue
        far = min(far, sign * found[0])
        if best is None or sign * (worst - best[0]) > 0.0:
            best = (worst, found[1])
    if best is None or code != "vi" or len(model.exact) == 1:
        return best
    return _halved(_without_vi(model), best, sign * far, sign, watch)


def _worst(model: Model, code: str, x: Array, sign: float) -> float | None:
    """The value of a property of a blend under the law that is worst for it; None where it cannot be known."""
    values = [sign * value for view in model.exact if (value := view.read(code, x)) is not None]
    return sign * min(values) if values else None


def _seen_by(model: Model, number: int) -> Model:
    """The model with another of its laws as its own."""
    turned = (model.exact[number:] + model.exact[:number], model.views[number:] + model.views[:number])
    return model if number == 0 else replace(model, exact=turned[0], views=turned[1])


def _linear(model: Model, c: Array, watch: Stopwatch, read: Array) -> tuple[float, Array] | None:
    x = exact_search(model, model.polytope(), c, watch)[0].x
    return None if x is None else (float(read @ x), x)


def _ratio(model: Model, code: str, sign: float, watch: Stopwatch) -> tuple[float, Array] | None:
    """The extreme of a property that is a ratio, read exactly at its blend."""
    gauge = model.exact[0].gauges[code]
    x = _ratio_on(model, model.polytope(), gauge, sign * (1.0 if gauge.rising else -1.0), watch)
    value = None if x is None else model.exact[0].read(code, x)
    return None if x is None or value is None else (value, x)


def _ratio_on(model: Model, problem: Polytope, gauge: Gauge, sign: float, watch: Stopwatch) -> Array | None:
    """A blend with the highest (sign 1) or lowest J: Dinkelbach's steps, along the tangent of a gauge that bends."""
    known = gauge.den != 0.0
    if not known.any():
        return None
    straight = gauge.tangent(np.full(len(model.table), 1.0 / len(model.table)))
    j = float(np.mean(straight.num[known] / straight.den[known]))
    best: tuple[float, Array] | None = None
    for _ in range(STEPS):
        c = scale(-sign * gauge.sign * (straight.num - j * straight.den))
        outcome, problem = exact_search(model, problem, c, watch, gap=0.0, gap_absolute=RATIO_GAP)
        at = float("nan") if outcome.x is None else float(gauge.index_of(outcome.x))
        if outcome.x is None or (best is not None and not sign * (at - best[0]) > 1e-7 * max(1.0, abs(at))):
            break
        best, j, straight = (at, outcome.x), at, gauge.tangent(outcome.x)
    return None if best is None else best[1]


def _vi(model: Model, code: str, sign: float, watch: Stopwatch) -> tuple[float, Array] | None:
    """The extreme VI: along the hull of what can be reached in the plane of the two indices, where that is convex."""
    free = _without_vi(model)
    thick = free.polytope().with_rows([view.gauges["kv100"].row(LOWEST_KV100, "low") for view in free.views])
    if thick.whole is not None or model.bent:
        return _by_halves(free, thick, sign, watch)
    return _Hull(free, thick, sign, watch).best()


def _without_vi(model: Model) -> Model:
    return replace(model, vi=None, requirements=tuple(n for n in model.requirements if n.code != "vi"))


class _Hull:
    """The side of the reachable (I100, I40) on which the VI is best: I40 lowest (sign 1), or highest (−1).

    Shares that meet linear rows fill a polytope, and (I100, I40), two ratios with one denominator, map it on a
    convex polygon. Between two points of its edge lies the mixture of their blends. A linear programme says
    whether anything lies beyond the line through two points, and by how much at most: then either the line is
    an edge, or a further point parts it, or no VI beyond it can be better than the best known.
    """

    def __init__(self, model: Model, problem: Polytope, sign: float, watch: Stopwatch) -> None:
        self.model, self.problem, self.sign, self.watch = model, problem, sign, watch
        view = model.views[0]
        self.g40, self.g100 = view.gauges["kv40"], view.gauges["kv100"]
        self.index, self.value = index_of_law(view.law)
        self.found: tuple[float, Array] | None = None

    def best(self) -> tuple[float, Array] | None:
        """The best VI and its blend; None where no blend meets the rows, or none is thick enough to have a VI."""
        ends = [_ratio_on(self.model, self.problem, self.g100, way, self.watch) for way in (-1.0, 1.0)]
        if ends[0] is None or ends[1] is None:
            return None
        parts = [(ends[0], ends[1])]
        self._offer(*parts[0])
        for _ in range(EDGES):
            if not parts:
                break
            first, second = parts.pop()
            x = self._beyond(first, second)
            if x is not None:
                self._offer(first, x)
                self._offer(x, second)
                parts += [(first, x), (x, second)]
        return self.found

    def _at(self, x: Array) -> tuple[float, float]:
        return float(self.g100.index_of(x)), float(self.g40.index_of(x))

    def _beyond(self, first: Array, second: Array) -> Array | None:
        """A blend beyond the line of two others that may lead to a better VI; None where there is none."""
        (t0, u0), (t1, u1) = self._at(first), self._at(second)
        if self.watch.over or self.found is None or t1 - t0 < SAME:
            return None  # of two that stand one above the other the mixtures are known
        slope = (u1 - u0) / (t1 - t0)
        level = u0 - slope * t0
        row = self.sign * self.g40.sign * (self.g40.num - slope * self.g100.num - level * self.g40.den)
        solved = solve(self.problem, row, self.watch)
        if solved.x is None or solved.bound >= -1e-7 * float(np.abs(row).max()):
            return None
        if any(np.allclose(self._at(solved.x), at, rtol=0.0, atol=SAME) for at in ((t0, u0), (t1, u1))):
            return None
        # Nothing lies further beyond the line than this, for no blend has a smaller denominator.
        depth = self.sign * solved.bound / float(np.abs(self.g40.den).min())
        outer = self._values(np.linspace(t0, t1, SAMPLES), slope, level + depth)
        return solved.x if np.max(self.sign * outer) > self.sign * self.found[0] + 0.5 * VI_STEP else None

    def _values(self, i100: Array, slope: float, level: float) -> Array:
        """VI along a line of the plane."""
        kv100 = np.maximum(self.value(i100), LOWEST_KV100)
        return indices(np.maximum(self.value(slope * i100 + level), 1e-3), kv100)

    def _offer(self, first: Array, second: Array) -> None:
        """Take the mixture of two blends with the best VI if it is better than the best known."""
        parts = np.linspace(0.0, 1.0, SAMPLES)
        for _ in range(2):
            mixed = parts[:, None] * second + (1.0 - parts[:, None]) * first
            kv40, kv100 = (g.value(g.index_of(mixed)) for g in (self.g40, self.g100))
            found = self.sign * indices(kv40, kv100)
            if not np.isfinite(found).any():
                return
            k = int(np.nanargmax(found))
            x, value = mixed[k], self.model.exact[0].read("vi", mixed[k])
            if value is not None and (self.found is None or self.sign * (value - self.found[0]) > 0.0):
                self.found = (value, x)
            parts = np.linspace(parts[max(0, k - 1)], parts[min(len(parts) - 1, k + 1)], SAMPLES)


def _by_halves(free: Model, problem: Polytope, sign: float, watch: Stopwatch) -> tuple[float, Array] | None:
    """The extreme VI under whole-number rules or bent limits: the level beyond which no blend is found, halved in."""
    x = exact_search(free, problem, np.zeros(len(free.table)), watch, gap_absolute=1e12)[0].x
    value = None if x is None else _worst(free, "vi", x, sign)
    if x is None or value is None:
        return None
    loosest = _Hull(free, replace(problem, whole=None), sign, watch).best()
    far = loosest[0] + sign * (BENT_BY if free.bent else VI_STEP) if loosest is not None else value
    return _halved(free, (value, x), far, sign, watch)


def _halved(free: Model, found: tuple[float, Array], far: float, sign: float,
            watch: Stopwatch) -> tuple[float, Array]:
    """The extreme VI between what a blend has and what none is beyond, under the law that is worst for a blend."""
    value, x = found
    while sign * (far - value) > (BENT_STEP if free.bent else 2.0 * VI_STEP) and not watch.over:
        level = 0.5 * (far + value)
        better = _beyond(free, level, sign, 8.0, watch)
        if better is None:
            far = level
        else:
            x, value = better, _worst(free, "vi", better, sign) or level
    return value, x


def _line(view: View, level: float, at: float, sign: float) -> Array:
    """How far blends lie outside the curve of a VI, in the law's index along the curve's slope at a KV100."""
    g40, g100 = view.gauges["kv40"], view.gauges["kv100"]
    line = curve(round(level, 6), view.law)
    ends = line.index(np.array([max(LOWEST_KV100, 0.97 * at), 1.03 * at]))
    here = line(ends)
    slope = float((here[1] - here[0]) / (ends[1] - ends[0]))
    return sign * g40.sign * (g40.num - slope * g100.num - float(here[0] - slope * ends[0]) * g40.den)


def _beyond(free: Model, level: float, sign: float, at: float, watch: Stopwatch) -> Array | None:
    """A blend whose VI lies beyond a level, by an exact search; None when there is none."""
    low, high = (level, None) if sign > 0.0 else (None, level)
    need = Requirement("vi", low, high, 0.0, low, high, ())
    n = len(free.table)
    asked = with_rows(replace(free, vi=need, requirements=(*free.requirements, need)), np.full(n, 1.0 / n))
    c = scale(_line(free.views[0], level, at, sign))
    return exact_search(asked, asked.polytope(), c, watch, gap_absolute=1e12)[0].x
