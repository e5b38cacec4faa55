"""Charges that a plant can make: whole scale divisions, whole drums and IBCs, least charges.

    minimise Σ p_i m_i / Σ m_i   over   m_i = step_i n_i (n_i whole),  m_i = 0 or m_i ≥ least_i,
    |Σ m_i − batch| ≤ tolerance,  rows(m) ≤ 0,  VI(m) ≥ v

The rows are those of the recipe, for they hold for masses as for shares. They are solved as whole numbers
(linear.Steps) by the same search over the VI (windows.py), not rounded afterwards. The quotient is minimised by
Dinkelbach's steps (Management Science 13, 1967): with a rate r, min Σ (p_i − r) m_i ≥ F says that no quotient
is below r + F / Σ m. The total lies as near to the batch as the steps allow; a share rule too narrow for a step
is rounded to it and said to be.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from .allowed import CLOSE
from .charges import Charges, kg
from .errors import TargetError
from .linear import FIRM_HOLD, HOLD, Polytope, Stopwatch
from .nearest import nearest
from .properties import Array
from .recipe import GAP, Recipe, empty, least_cost, recipe_of
from .requirements import ceiling
from .rows import Model, Row, build, with_rows
from .stocks import Stock, StockTable
from .target import Target
from .whole_nearest import Missed, missed, nearest_charges, reach_words
from .windows import Outcome, search

__all__ = ["Missed", "Rounded", "WholeRecipe", "whole"]

SMALL = 0.02  # part of what is asked by which a rule may be rounded without a word more (common practice)
ROUNDS = 8  # of Dinkelbach's steps, and of tangents: two or three are usual


@dataclass(frozen=True)
class Rounded:
    """A share rule that whole charges can only meet to the nearest step, and how near they come."""

    of: str  # what the rule speaks of: a stock, an oil, a kind or "group II"
    low: float  # mass fraction asked …
    high: float
    share: float  # … and made
    off_kg: float  # how far the charge lies outside what is asked; negative below
    step_kg: float


@dataclass(frozen=True)
class WholeRecipe:
    """Whole charges and everything that is read off them. None: there is no blend, or it is unknown."""

    recipe: Recipe  # every figure recomputed from the exact masses; status optimal, stopped or infeasible
    charges_kg: Mapping[str, float] | None  # stock → mass, only those used
    packages: Mapping[str, int] = field(default_factory=dict)  # stock → whole drums or IBCs, where charged so
    steps_kg: Mapping[str, float | None] = field(default_factory=dict)  # stock used → its step; None: any mass
    batch_kg: float = 0.0  # what was asked …
    total_kg: float | None = None  # … and what the charges sum to
    tolerance_kg: float = 0.0  # how far the total was allowed to lie from the batch
    least_cost_per_t: float | None = None  # without whole quantities
    rounded: tuple[Rounded, ...] = ()
    missed: tuple[Missed, ...] = ()
    notes: tuple[str, ...] = ()  # in words: total, rounded rules, misses, what the whole quantities cost

    @property
    def shares(self) -> Mapping[str, float] | None:
        """Stock → mass fraction of the exact charges."""
        return self.recipe.shares

    @property
    def cost_per_t(self) -> float | None:
        """Cost of the whole charges."""
        return self.recipe.cost_per_t

    @property
    def extra_per_t(self) -> float | None:
        """What the whole quantities cost over the least cost without them; None where either is unknown."""
        if self.cost_per_t is None or self.least_cost_per_t is None or self.missed:
            return None
        return self.cost_per_t - self.least_cost_per_t

    @property
    def gap(self) -> float | None:
        """(cost − bound)/cost over all whole charges of this tolerance."""
        return self.recipe.gap

    @property
    def proven(self) -> bool:
        """Is it the least cost of all whole charges, within the gap?"""
        return self.recipe.status == "optimal"


def whole(stocks: StockTable | Iterable[Stock], target: Target, *, time_limit: float = 10.0) -> WholeRecipe:
    """The least-cost recipe in charges that the plant can make.

    status of .recipe: "optimal" (proven to .gap), "stopped" (time ran out: the best known, or None),
    "infeasible" (the nearest whole charges, with what they miss in .missed and .notes).

    Raises TargetError without a batch, and TargetError, StockError or RangeError on bad input.
    """
    if target.batch_kg is None:
        raise TargetError(f"{target.product}: whole charges are those of one batch; give its kg",
                          where=target.product)
    watch = Stopwatch(time_limit)
    model = build(stocks, target)
    charges = Charges.of(model, target.batch_kg)
    free = least_cost(model, watch)
    least = free.value if free.x is not None else None
    unsettled = free.status == "stopped"
    for tolerance in charges.tolerances() if len(model.table) and not any(x.empty for x in model.requirements) else ():
        last = tolerance == charges.tolerances()[-1]
        found = _cheapest(charges, tolerance, least, Stopwatch(watch.left * (1.0 if last else 0.5)))
        if found.x is not None:
            return _told(found, least, time_limit)
        unsettled |= found.stopped
    return _nearest(charges, free, unsettled, Stopwatch(max(1.0, watch.left)))


@dataclass(frozen=True)
class _Found:
    """Charges that were found, x in batches, and how low the cost can be."""

    charges: Charges
    tolerance: float  # kg
    x: Array | None = None
    cost: float = np.inf  # per t
    bound: float = -np.inf  # no whole charges of this tolerance cost less
    stopped: bool = False  # time ran out
    bent: bool = False  # rows bend: found step by step

    @property
    def masses(self) -> Array:
        """Exact masses of every stock [kg], shape (n,)."""
        assert self.x is not None
        return self.charges.masses(self.x)

    @property
    def shares(self) -> Array:
        """Mass fractions, shape (n,)."""
        return self.masses / float(self.masses.sum())


def _cheapest(charges: Charges, tolerance: float, rate: float | None, watch: Stopwatch) -> _Found:
    """The cheapest charges within a tolerance [kg]; where rows bend, along tangents until they stay."""
    model = charges.model
    found = _quotient(charges, model, tolerance, rate, watch)
    if not model.bent:
        return found
    best = _Found(charges, tolerance, stopped=True, bent=True)
    kept: tuple[Row, ...] = ()  # tangents that cut off what missed a limit, lest it come again
    for _ in range(ROUNDS):
        if found.x is None:
            break
        shares = found.shares
        model = with_rows(model, shares)
        if not _meets(model, shares):
            kept += tuple(row for row in model.rows if not row.of_shares and float(row.coef @ shares) > 0.0)
        elif found.cost < best.cost:
            best = replace(best, x=found.x, cost=found.cost)
        before = found.masses
        found = _quotient(charges, replace(model, rows=(*model.rows, *kept)), tolerance, found.cost, watch)
        if found.x is None or watch.over or np.array_equal(found.masses, before):
            break
    from .tangent import bound

    return best if best.x is None else replace(best, bound=bound(charges.in_shares(tolerance), watch))


def _quotient(charges: Charges, model: Model, tolerance: float, rate: float | None, watch: Stopwatch) -> _Found:
    """Least cost per t along the rows of a model, from a rate near it, by Dinkelbach's steps."""
    problem, price = charges.problem(tolerance, model), model.table.price
    best = _Found(charges, tolerance)
    if np.any(problem.lo > problem.hi + 1e-12):
        return best
    rate = float(price.mean()) if rate is None else rate
    for _ in range(ROUNDS):
        outcome = _exact(model, problem, price - rate, 0.5 * GAP * max(abs(rate), 1e-6), watch)
        best = replace(best, stopped=outcome.status == "stopped")
        if outcome.x is None:
            break
        floor = rate + outcome.bound / (1.0 + np.copysign(tolerance / charges.batch, outcome.bound))
        made = replace(best, x=outcome.x)
        cost = float(price @ made.shares)
        best = replace(made if cost < best.cost else best, cost=min(cost, best.cost), bound=max(best.bound, floor))
        if best.stopped or best.cost - best.bound <= GAP * abs(best.cost) or rate == best.cost:
            break
        rate = best.cost
    return best


def _exact(model: Model, problem: Polytope, c: Array, gap: float, watch: Stopwatch) -> Outcome:
    """A search whose answer misses nothing on exact recomputation."""
    first = search(model, problem.held(HOLD), c, watch, gap=0.0, gap_absolute=gap)
    if first.x is None or model.bent or _meets(model, first.x / first.x.sum()):
        return first
    firm = search(model, problem.held(FIRM_HOLD), c, watch, gap=0.0, gap_absolute=gap)
    if firm.x is not None and _meets(model, firm.x / firm.x.sum()):
        return replace(firm, bound=min(first.bound, firm.bound))
    return Outcome("stopped" if firm.status == "stopped" else "infeasible", None, np.inf, first.bound)


def _meets(model: Model, shares: Array) -> bool:
    """Are all limits met, the cost ceiling too, on exact recomputation?"""
    most = ceiling(model.target)
    return not model.missed(shares) and (most is None or float(model.table.price @ shares) <= most + 1e-6 * abs(most))


def _told(found: _Found, least: float | None, time_limit: float) -> WholeRecipe:
    """The answer for charges that meet everything."""
    proven = not found.bent and found.cost - found.bound <= 1.01 * GAP * abs(found.cost)
    notes = _about(found)
    if least is not None:
        notes.append(_extra_words(found.cost - least, least, bool(rounded_rules(found.charges, found.masses))))
    if not proven and found.bent:
        notes.append("with what the laboratory has taught the limits bend: found step by step, not proven")
    elif not proven:
        when = f"stopped at {time_limit:g} s: " if found.stopped else ""
        notes.append(f"{when}the best whole charges known, at most "
                     f"{100.0 * (found.cost - found.bound) / max(abs(found.cost), 1e-12):.2g} % dearer than the least")
    return _answer(found, "optimal" if proven else "stopped", least, (), tuple(notes))


def _answer(found: _Found, status: str, least: float | None, missed: tuple[Missed, ...],
            notes: tuple[str, ...]) -> WholeRecipe:
    charges, masses = found.charges, found.masses
    stocks, sum_kg = charges.model.table.stocks, float(masses.sum())
    used = list(np.flatnonzero(masses > 0.0))
    made = {stocks[i].code: float(masses[i]) for i in used}
    recipe = recipe_of(charges.model, found.shares, status, bound=found.bound if np.isfinite(found.bound) else None,
                       reasons=notes)
    return WholeRecipe(
        replace(recipe, charges_kg=made, batch_kg=sum_kg), made,
        {stocks[i].code: round(float(masses[i] / charges.step[i])) for i in used if stocks[i].package_kg},
        {stocks[i].code: float(charges.step[i]) or None for i in used}, charges.batch, sum_kg, found.tolerance, least,
        rounded_rules(charges, masses), missed, notes)


def rounded_rules(charges: Charges, masses: Array) -> tuple[Rounded, ...]:
    """The share rules that exact masses [kg], shape (n,), keep only to the nearest step."""
    made, total_kg = [], float(masses.sum())
    for demand in charges.demands:
        share = float(masses @ demand.parts) / total_kg
        if not demand.low - CLOSE <= share <= demand.high + CLOSE:
            off = share - (demand.low if share < demand.low else demand.high)
            made.append(Rounded(demand.of, demand.low, demand.high, share, off * total_kg,
                                float(min((charges.step[i] for i in demand.members), default=0.0))))
    return tuple(made)


def _nearest(charges: Charges, found_free: Outcome, unsettled: bool, watch: Stopwatch) -> WholeRecipe:
    """The whole charges nearest to the limits, and what they miss; share rules, tanks and steps are not given up.

    `found_free`: what was found without whole quantities.
    """
    model, reasons, free = charges.model, [], found_free.x
    least = None if free is None else found_free.value
    if free is None:
        away = nearest(model, watch)
        # Where time ran out nothing is known yet of what no blend can meet.
        reasons = list(away.reasons) if away.shares is None or found_free.status == "infeasible" else []
        free = None if away.shares is None else np.array([away.shares.get(c, 0.0) for c in model.table.codes])
    tolerance, x = charges.tolerances()[-1], None
    if free is not None:
        tolerance, x = nearest_charges(charges, free, watch)
    if x is None:
        late = free is not None and watch.over and not charges.out_of_reach()
        if late:
            reasons.append("time ran out before whole charges were found; give it more time")
        elif free is not None:
            reasons += charges.out_of_reach() or [reach_words(charges, watch)]
        return WholeRecipe(empty(model, "stopped" if late else "infeasible", tuple(reasons)), None,
                           batch_kg=charges.batch, tolerance_kg=tolerance, least_cost_per_t=least, notes=tuple(reasons))
    found = _Found(charges, tolerance, x)
    misses = missed(model, found.shares)
    notes = [*reasons, *_about(found, nearest_only=True)]
    if not misses:
        notes.append("found beside the search, which had no room or no time: not proven to be the least cost")
    elif unsettled:
        notes.append("time ran out before it was settled whether whole charges can meet every limit")
    elif least is not None:
        notes.append(f"only the whole quantities stand in the way: without them a blend at {least:.2f} per t exists")
    if misses:
        notes.append(f"the nearest whole charges miss: {'; '.join(each.words() for each in misses)}")
    return _answer(found, "infeasible" if misses else "stopped", least, misses, tuple(notes))


# Words

def _about(found: _Found, nearest_only: bool = False) -> list[str]:
    """The total, rounded rules, and what is charged in any mass."""
    charges, masses = found.charges, found.masses
    notes = [_total_words(found, nearest_only), *(rounded_words(each, charges.model.table.stocks)
                                               for each in rounded_rules(charges, masses))]
    free = [stock.code for stock, mass, step in zip(charges.model.table.stocks, masses, charges.step, strict=True)
            if mass > 0.0 and step <= 0.0 and stock.in_vessel_kg is None]
    if free:
        notes.append(f"{', '.join(free)}: no division or package is given, any mass is taken for weighable")
    return notes


def _total_words(found: _Found, nearest_only: bool) -> str:
    made, batch = float(found.masses.sum()), found.charges.batch
    off = made - batch
    if abs(off) <= 1e-6 * batch:
        return f"the charges sum to the {kg(batch)} kg of the batch"
    nearer = [t for t in found.charges.tolerances() if t < abs(off) * (1.0 - 1e-9)]
    why = (f"; nothing within {kg(nearer[-1])} kg of it was found" if nearer
           else f", and whole steps leave up to {kg(found.tolerance)} kg")
    return (f"the charges sum to {kg(made)} kg, {kg(abs(off))} kg {'more' if off > 0.0 else 'less'} than the batch of "
            f"{kg(batch)} kg{'' if nearest_only else why}")


def rounded_words(each: Rounded, stocks: Iterable[Stock]) -> str:
    """What rounding a rule to a whole step makes of it."""
    asked = each.low if each.off_kg < 0.0 else each.high
    stock = next((s for s in stocks if s.code == each.of), None)
    unit = "package" if stock is not None and stock.package_kg else "step"
    return (f"{each.of} is rounded to a whole {unit} of {kg(each.step_kg)} kg: {100.0 * each.share:.4g} % in place of "
            f"{100.0 * asked:.4g} %, {abs(each.off_kg):.3g} kg {'more' if each.off_kg > 0.0 else 'less'}"
            + ("" if abs(each.share - asked) <= SMALL * asked else ": the formulator has to agree"))


def _extra_words(extra: float, least: float, rounded: bool) -> str:
    if abs(extra) < 0.005:
        return f"whole quantities cost nothing to speak of over the least cost without them, {least:.2f} per t"
    if extra > 0.0:
        return f"whole quantities cost {extra:.2f} per t more than the least cost without them, {least:.2f}"
    why = "a rule is rounded" if rounded else "the total differs"
    return f"{-extra:.2f} per t less than the least cost without whole quantities, {least:.2f}, because {why}"
