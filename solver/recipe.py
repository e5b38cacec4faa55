"""The least-cost recipe of a target, and its proof; and the same reading of shares typed by hand.

    minimise Σ x_i price_i   over   Σ x_i = 1,  rows(x) ≤ 0,  lo ≤ x ≤ hi,  VI(x) ≥ v

Rows are exact for every property under every law (rows.py); the VI is handled exactly on pieces of the
KV100 window (windows.py). Every figure of a Recipe is recomputed from its shares.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from .allowed import LeftOut, breaches, candidates
from .errors import StockError, TargetError
from .gauge import property_gauge
from .laws import check_law, knows_viscosity, viscosity_gauge
from .linear import FIRM_HOLD, HOLD, SLACK, Polytope, Stopwatch
from .properties import Array, lookup, stock_codes
from .requirements import COST, Requirement, ceiling, required
from .rows import Model, as_table, build
from .stocks import Stock, StockTable
from .target import LAWS, Effective, Lesson, Target
from .viscosity_index import indices
from .windows import Outcome, search

BINDING = 1e-3  # a limit binds when its margin is below this part of the method's reproducibility
GAP = 1.5e-6  # a search ends when cost and bound agree to this part of the cost


@dataclass(frozen=True)
class LimitResult:
    """One limit, and how a blend stands to it. Figures in the property's unit; None: open or unknown."""

    property: str
    low: float | None
    high: float | None
    guard: float
    held_low: float | None  # the limit moved inward by its guard: what the recipe must meet
    held_high: float | None
    value: float | None
    met: bool | None  # None: the value is unknown
    margin: float | None  # to the nearer held side; negative outside
    binding: str  # "", "low" or "high"
    sources: tuple[str, ...]
    by_law: Mapping[str, float] = field(default_factory=dict)  # value under each law, where several must hold


@dataclass(frozen=True)
class Recipe:
    """Shares with everything that is read off them. None everywhere means unknown."""

    status: str  # "optimal", "infeasible", "stopped", or "by hand"
    law: str
    shares: Mapping[str, float] | None  # stock → mass fraction, only those used; None: no blend at all
    predicted: Mapping[str, float | None] = field(default_factory=dict)
    limits: tuple[LimitResult, ...] = ()
    spread_pct: Mapping[str, float | None] = field(default_factory=dict)
    cost_per_t: float | None = None
    bound_per_t: float | None = None  # no blend that meets the target costs less
    gap: float | None = None  # (cost − bound)/cost
    charges_kg: Mapping[str, float] | None = None
    batch_kg: float | None = None
    left_out: tuple[LeftOut, ...] = ()
    to_be_tested: tuple[str, ...] = ()
    reasons: tuple[str, ...] = ()  # why infeasible or stopped, in words
    lessons: tuple[str, ...] = ()  # versions of the laboratory's lessons that were used
    provisional: tuple[str, ...] = ()  # those of them that rest on fewer than four blends
    also_laws: tuple[str, ...] = ()  # laws under which the limits were held besides `law`
    warnings: tuple[str, ...] = ()  # what its figures should not be trusted for, in words
    breaches: tuple[str, ...] = ()  # rules on shares, list, tanks and numbers that given shares break, in words

    @property
    def binding(self) -> tuple[str, ...]:
        """Codes of the limits that bind."""
        return tuple(x.property for x in self.limits if x.binding)

    @property
    def meets_all(self) -> bool:
        """Is every limit met whose value is known, and every rule kept?"""
        return self.shares is not None and not self.breaches and all(x.met is not False for x in self.limits)


def design(stocks: StockTable | Iterable[Stock], target: Target, *, time_limit: float = 10.0,
           node_limit: int = 400) -> Recipe:
    """The least-cost recipe of a target over a plant's stocks.

    status "optimal" with gap = (cost − bound)/cost; "infeasible" with the nearest blend (least sum of
    misses, each in units of the method's reproducibility) or shares None where the shares cannot reach
    100 %; "stopped" when time_limit [s] or node_limit ran out, with the best blend known, if any.

    Raises TargetError, StockError or RangeError on bad input.
    """
    model = build(stocks, target)
    watch = Stopwatch(time_limit)
    outcome = least_cost(model, watch, node_limit)
    if outcome.x is not None and model.bent:
        return _followed(model, outcome, watch)
    if outcome.x is not None:
        reasons = () if outcome.status == "optimal" else (_why_stopped(outcome, time_limit),)
        return recipe_of(model, outcome.x, outcome.status, bound=outcome.bound, reasons=reasons)
    if outcome.status == "stopped":
        return empty(model, "stopped", ("the time or node limit was reached before a blend was found; "
                                        "give it more time or allow fewer stocks",))
    from .nearest import nearest

    return nearest(model, Stopwatch(max(1.0, watch.left)))


def _followed(model: Model, outcome: Outcome, watch: Stopwatch) -> Recipe:
    """The recipe of a model with rows that bend: followed to where it stays, which proves less."""
    from .tangent import bound

    assert outcome.x is not None
    floor = bound(model, watch)
    made = recipe_of(model, outcome.x, "stopped", bound=floor if np.isfinite(floor) else None)
    if made.gap is not None and made.gap <= GAP:
        return replace(made, status="optimal")
    taught = ", ".join(made.lessons) or "of other pairs"
    words = f"with what the laboratory has taught ({taught}) the limits bend: found step by step, not proven"
    if made.bound_per_t is not None:
        words += f"; no blend that meets the target costs less than {floor:.2f} per t"
    return replace(made, reasons=(words,))


def least_cost(model: Model, watch: Stopwatch, node_limit: int = 400) -> Outcome:
    """The cheapest blend of a model, with its bound; along the tangents where its rows bend."""
    impossible = bool(model.short) or any(need.empty for need in model.requirements)
    if impossible or len(model.table) == 0:
        return Outcome("infeasible", None, np.inf, np.inf)
    return exact_search(model, model.polytope(), model.table.price, watch, gap=GAP, node_limit=node_limit)[0]


def exact_search(model: Model, problem: Polytope, c: Array, watch: Stopwatch, *, gap: float = GAP,
                 gap_absolute: float = 0.0, node_limit: int = 400) -> tuple[Outcome, Polytope]:
    """A search whose answer passes the exact recomputation, and the polytope that gave it.

    Rows are held a hair inside; more where rounding left a limit missed, and a hair outside where limits
    leave a single point that the solver would else miss. An answer counts only if it misses nothing.
    Where what the laboratory has taught bends rows, their tangents are followed to where the answer stays.
    """
    def along(model: Model, problem: Polytope) -> Outcome:
        return search(model, problem, c, watch, gap=gap, gap_absolute=gap_absolute, node_limit=node_limit)

    for hold in (HOLD, FIRM_HOLD, SLACK):
        held = problem.held(hold)
        if model.bent:
            from .tangent import follow

            outcome, held, _ = follow(model, held, c, watch, along)
        else:
            outcome = along(model, held)
        if outcome.status == "stopped" or (outcome.x is not None and not model.missed(outcome.x)):
            return outcome, held
    return Outcome("infeasible", None, np.inf, np.inf), problem


def _why_stopped(outcome: Outcome, time_limit: float) -> str:
    return (f"stopped at the limit of {time_limit:g} s or of nodes; this is the best blend known, at most "
            f"{100.0 * outcome.gap:.2g} % dearer than the least cost")


def empty(model: Model, status: str, reasons: tuple[str, ...]) -> Recipe:
    """A recipe without shares: the limits stand, their values are unknown."""
    limits = [_limit_result(need, {}) for need in model.requirements]
    return Recipe(status, model.target.law, None, {}, tuple(limits), left_out=model.left_out,
                  to_be_tested=model.to_be_tested, batch_kg=model.target.batch_kg, reasons=reasons)


def recipe_of(model: Model, x: Array, status: str, *, bound: float | None = None,
              reasons: tuple[str, ...] = ()) -> Recipe:
    """A Recipe of shares x, shape (n,) over the model's stocks: every figure recomputed from them."""
    made = _read(model.table, x, model.target, model.requirements)
    gap = None
    if bound is not None and made.cost_per_t is not None:
        gap = max(0.0, made.cost_per_t - bound) / max(abs(made.cost_per_t), 1e-12)
    return replace(made, status=status, bound_per_t=bound, gap=gap, left_out=model.left_out,
                   to_be_tested=model.to_be_tested, reasons=reasons)


def evaluate(stocks: StockTable | Iterable[Stock], shares: Mapping[str, float],
             target: Target | None = None, *, law: str | None = None) -> Recipe:
    """The same reading of given shares (mass fractions that sum to 1 within 1e-4), status "by hand".

    With a target its limits and rules are judged; without one only the blend is predicted. A property is None
    where a stock that is used lacks it. Raises StockError for an unknown stock or one without viscosity,
    TargetError for shares that do not sum to 100 %.
    """
    table = as_table(stocks)
    goal = target or Target("")
    goal = replace(goal, law=check_law(law or goal.law))
    x = given(table, shares)
    x /= x.sum()
    used = np.flatnonzero(x > 0.0)
    needs, tests = required(goal, table.where(candidates(table, goal))) if target is not None else ((), ())
    made = _read(table.where(used), x[used], goal, needs)
    return replace(made, to_be_tested=tests, breaches=breaches(table, x, goal) if target is not None else ())


def given(table: StockTable, shares: Mapping[str, float]) -> Array:
    """Given mass fractions as a blend x, shape (n,), as they sum.

    Raises StockError for an unknown stock, TargetError for a share that cannot be or a sum off 1 by over 1e-4.
    """
    x = np.zeros(len(table))
    for code, share in shares.items():
        if not (np.isfinite(share) and share >= 0.0):
            raise TargetError(f"{code}: a share of {100 * share:g} % cannot be; shares lie within 0 to 100 %",
                              where=code)
        x[table.index(code)] += share
    if abs(x.sum() - 1.0) > 1.0001e-4:
        raise TargetError(f"the shares sum to {100 * x.sum():.7g} %, not to 100 %; mend them", where="shares")
    return x


def _read(table: StockTable, x: Array, target: Target, needs: tuple[Requirement, ...]) -> Recipe:
    lacking = (x > 0.0) & ~knows_viscosity(target.law, table)
    if lacking.any():
        stock = table.stocks[int(np.flatnonzero(lacking)[0])]
        cell = "kv40" if stock.blending_kv is None else "density15"
        raise StockError(f"{stock.code}: the law {target.law} needs its {cell}, which is unknown; enter it "
                         "or leave the stock out", stock=stock.code, cell=cell)
    codes = tuple(need.code for need in needs)
    by_law = {law: predict_all(table, x, law, codes, target.lessons)
              for law in dict.fromkeys((target.law, *target.also_laws))}
    predicted = by_law[target.law]
    allowed = {need.code: _with_unknown(table, x, need) for need in needs if need.unknown_ok}
    limits = [_limit_result(need, {law: allowed.get(need.code, found.get(need.code)) for law, found in by_law.items()})
              for need in needs]
    priced = bool(np.isfinite(table.price[x > 0.0]).all())
    cost = float(np.where(x > 0.0, table.price, 0.0) @ x) if priced else None
    most = ceiling(target)
    if most is not None:
        limits.append(_cost_result(most, cost))
    shares = {code: float(v) for code, v in zip(table.codes, x, strict=True) if v > 0.0}
    batch = target.batch_kg
    charges = None if batch is None else {code: v * batch for code, v in shares.items()}
    used = lessons_used(table, x, target)
    return Recipe("by hand", target.law, shares, predicted, tuple(limits), spread(table, x, target.law),
                  cost, charges_kg=charges, batch_kg=batch, lessons=tuple(e.version for e in used),
                  provisional=tuple(e.version for e in used if e.provisional), also_laws=target.also_laws,
                  warnings=tuple(words for e in used for words in _beyond(e, table, x)))


def lessons_used(table: StockTable, x: Array, target: Target) -> tuple[Lesson, ...]:
    """Which of the laboratory's lessons speak of a stock or a pair that the blend x, shape (n,), holds."""
    there = [s for s, share in zip(table.stocks, x, strict=True) if share > 0.0]
    codes, names = {code for s in there for code in (s.code, s.poured.code)}, {name for s in there for name in s.names}
    return tuple(e for e in target.lessons if e.law in (target.law, *target.also_laws)
                 and (e.stock in codes if isinstance(e, Effective) else {e.first, e.second} <= names))


def _beyond(lesson: Lesson, table: StockTable, x: Array) -> list[str]:
    """In words, where a blend holds more or less of a stock than its lesson was measured at."""
    if not isinstance(lesson, Effective):
        return []
    share = float(sum(v for v, s in zip(x, table.stocks, strict=True) if lesson.stock in (s.code, s.poured.code)))
    low, high = lesson.shares
    if low - 1e-9 <= share <= high + 1e-9:
        return []
    return [f"{lesson.stock} {100 * share:.2f} %: its lesson {lesson.version} holds from {100 * low:.2f} to "
            f"{100 * high:.2f} %, measure a blend before this is trusted"]


def predict_all(table: StockTable, x: Array, law: str, also: tuple[str, ...] = (),
                lessons: tuple[Lesson, ...] = ()) -> dict[str, float | None]:
    """Every property of the registry that the blend x, shape (n,), has, by code; None where unknown."""
    used = x > 0.0
    found: dict[str, float | None] = {}
    for code, celsius in (("kv40", 40.0), ("kv100", 100.0)):
        found[code] = viscosity_gauge(law, table, celsius, lessons).read(x)
    found["vi"] = _finite(float(indices(found["kv40"], found["kv100"])))
    temperatures = sorted({key for s in table.stocks for key in s.values if key.startswith("ccs")})
    for code in dict.fromkeys(["density15", *stock_codes(), *temperatures, *also]):
        if code in found:
            continue
        entry = lookup(code)
        if entry.basis == "law" and entry.temperature is not None:
            found[code] = viscosity_gauge(law, table, entry.temperature, lessons).read(x)
            continue
        gauge = property_gauge(table, entry)
        found[code] = None if np.any(used & (gauge.den == 0.0)) else _finite(gauge.read(x))
    return found


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None


def _with_unknown(table: StockTable, x: Array, need: Requirement) -> float | None:
    """Value over the stocks of which it is known, where the operator lets unknown ones serve."""
    if need.entry.basis not in ("mass", "volume"):
        return predict_all(table, x, "refutas").get(need.code)
    return _finite(property_gauge(table, need.entry).read(x))


def spread(table: StockTable, x: Array, law: str) -> dict[str, float | None]:
    """100·(largest − smallest)/(the chosen law's value) over every law computable for the same shares."""
    used = np.flatnonzero(x > 0.0)
    kept, y = table.where(used), x[used]
    able = [each for each in LAWS if knows_viscosity(each, kept).all()]
    found: dict[str, float | None] = {}
    for code, celsius in (("kv40", 40.0), ("kv100", 100.0)):
        values = {each: viscosity_gauge(each, kept, celsius).read(y) for each in able}
        found[code] = (100.0 * (max(values.values()) - min(values.values())) / values[law]
                       if law in values else None)
    return found


def _limit_result(need: Requirement, by_law: Mapping[str, float | None]) -> LimitResult:
    """How a limit stands: the value of the first law; margin and verdict of the law under which it is worst."""
    known = {law: value for law, value in by_law.items() if value is not None}
    margin, binding, met = None, "", None
    if known:
        sides = [(value - need.held_low, "low") for value in known.values() if need.held_low is not None]
        sides += [(need.held_high - value, "high") for value in known.values() if need.held_high is not None]
        margin, side = min(sides)
        met = all(need.miss(value) <= need.tolerance() for value in known.values())
        binding = side if abs(margin) <= max(BINDING * need.unit_of_miss(), need.tolerance()) else ""
    value, of_law = next(iter(by_law.values()), None), need.entry.basis in ("law", "curve")
    return LimitResult(need.code, need.low, need.high, need.guard, need.held_low, need.held_high, value,
                       met, margin, binding, need.sources, known if len(known) > 1 and of_law else {})


def _cost_result(ceiling: float, cost: float | None) -> LimitResult:
    margin = None if cost is None else ceiling - cost
    met = None if margin is None else margin >= -1e-6 * ceiling
    binding = "high" if margin is not None and abs(margin) <= 1e-5 * ceiling else ""
    return LimitResult(COST, None, ceiling, 0.0, None, ceiling, cost, met, margin, binding, ("cost ceiling",))
