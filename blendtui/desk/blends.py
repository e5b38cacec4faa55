"""What can be done with blends: the best one, shares typed by hand, what else would do, and trials."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Trial
from solver.stocks import Stock, StockTable
from solver.target import LAWS, Target

from . import numbers, trials
from .errors import DeskError

if TYPE_CHECKING:
    from solver.choices import Range
    from solver.recipe import Recipe
    from solver.whole import WholeRecipe

SPREAD_MARKED = 3.0  # % between the laws from which a prediction is marked
SPREAD_DOUBTED = 10.0  # % from which a laboratory blend is needed before the number can be trusted


def best(stocks: Sequence[Stock], target: Target, time_limit: float = 5.0) -> Recipe:
    """The least-cost recipe, or the nearest blend where none meets the target."""
    from solver.recipe import design

    return design(StockTable(stocks), target, time_limit=time_limit)


def whole(stocks: Sequence[Stock], target: Target, time_limit: float = 5.0) -> WholeRecipe:
    """The least-cost recipe in whole scale divisions, drums and IBCs. TargetError without a batch."""
    from solver.whole import whole as solve

    return solve(StockTable(stocks), target, time_limit=time_limit)


def whole_json(made: WholeRecipe) -> dict[str, Any]:
    """What whole charges add to a recipe, JSON-ready."""
    return {"total_kg": made.total_kg, "tolerance_kg": made.tolerance_kg, "packages": dict(made.packages),
            "steps_kg": dict(made.steps_kg), "least_cost_per_t": made.least_cost_per_t,
            "extra_per_t": made.extra_per_t, "proven": made.proven,
            "rounded": [{"of": r.of, "low_pct": 100.0 * r.low, "high_pct": 100.0 * r.high,
                         "share_pct": 100.0 * r.share, "off_kg": r.off_kg, "step_kg": r.step_kg} for r in made.rounded],
            "missed": [{"property": m.property, "side": m.side, "limit": m.limit, "value": m.value, "miss": m.miss}
                       for m in made.missed], "notes": list(made.notes)}


def by_hand(stocks: Sequence[Stock], target: Target, shares: Mapping[str, float]) -> Recipe:
    """The reading of shares [mass fraction] typed by hand.

    They need not sum to 1 while they are being typed: the properties are those of the same proportions
    brought to 1, and `reasons` says what is missing or too much. Shares and kg stay as typed.
    """
    from solver.recipe import evaluate

    total = sum(shares.values())
    if total <= 0.0:
        raise DeskError("no shares yet: type the share of at least one stock")
    table = StockTable(stocks)
    made = evaluate(table, {code: share / total for code, share in shares.items() if share > 0.0}, target)
    if abs(total - 1.0) <= 1e-6:
        return made
    batch = target.batch_kg
    return replace(made, shares=dict(shares), reasons=(off_by(total),),
                   charges_kg=None if batch is None else {c: s * batch for c, s in shares.items()})


def off_by(total: float) -> str:
    """In words, how far shares that sum to `total` are from 100 %."""
    off = 100.0 * (total - 1.0)
    return (f"the shares sum to {100.0 * total:.2f} %: {abs(off):.2f} % {'too much' if off > 0 else 'missing'}; "
            "properties are those of the same proportions")


def all_ranges(stocks: Sequence[Stock], target: Target,
               time_limit: float = 60.0) -> dict[str, tuple[float, float]] | None:
    """Least and most mass fraction of every allowed stock, whole-number rules left out."""
    from solver.choices import ranges

    return ranges(StockTable(stocks), target, time_limit=time_limit)


def marked_ranges(stocks: Sequence[Stock], target: Target, time_limit: float = 60.0) -> dict[str, Range] | None:
    """As `all_ranges`, each marked where time ran out before it was narrowed."""
    from solver.choices import marked_ranges as solve

    return solve(StockTable(stocks), target, time_limit=time_limit)


def other_sets(stocks: Sequence[Stock], target: Target, count: int = 8,
               time_limit: float = 60.0) -> list[Recipe]:
    """Blends that differ in their set of stocks, cheapest first."""
    from solver.sets import blends

    return blends(StockTable(stocks), target, count, time_limit=time_limit)


def guard_cost(table: StockTable, target: Target, recipe: Recipe) -> float | None:
    """What the guards cost per tonne: the least cost less that of the same target without guards."""
    from solver.recipe import design
    from solver.rows import without_guards

    if not any(x.guard or x.guard_pct for x in target.limits):
        return 0.0
    free = design(table, without_guards(target), time_limit=3.0)
    if recipe.cost_per_t is None or free.cost_per_t is None or free.status == "infeasible":
        return None
    return max(0.0, recipe.cost_per_t - free.cost_per_t)


def spread_words(recipe: Recipe) -> str:
    """What the spread between the laws means for the reader of a recipe; empty up to 3 %."""
    widest = max((v for v in recipe.spread_pct.values() if v is not None), default=0.0)
    fitted = [version for version in recipe.lessons if version not in recipe.provisional]
    if widest <= SPREAD_MARKED:
        return ""
    if fitted:
        return f"the laws differ; this one was fitted to the laboratory's own blends ({', '.join(fitted)})"
    if widest <= SPREAD_DOUBTED:
        return "the laws differ: confirm in the laboratory"
    return ("the laws differ widely: a laboratory blend is needed before this number can be trusted "
            "(blendtui lab plan, or p on the screen Lab, plans one)")


def laws_named(typed: str) -> tuple[str, ...]:
    """The laws that a typed text names: all, or names or their beginnings; empty: none. DeskError for another."""
    found: dict[str, None] = {}
    for word in typed.lower().replace(",", " ").split():
        named = LAWS if word == "all" else tuple(law for law in LAWS if law.startswith(word))
        if not named:
            raise DeskError(f"{harmless(word, 40)!r} is no law; known are {', '.join(LAWS)}, or all")
        found.update(dict.fromkeys(named))
    return tuple(law for law in LAWS if law in found)


def marked_spread(spread_pct: Mapping[str, float | None]) -> str:
    """The wider spread of KV40 and KV100, %, as it stands beside a prediction: marked ! over 3 %, !! over 10 %."""
    widest = max((v for v in spread_pct.values() if v is not None), default=None)
    sign = "" if widest is None or widest <= SPREAD_MARKED else "! " if widest <= SPREAD_DOUBTED else "!! "
    return sign + numbers.fixed(widest, 1)


# Trials

def keep_trial(plant: Plant, name: str, product: str, recipe: Recipe, note: str = "") -> str:
    """Keep a recipe's shares under a name, and say so in words. DeskError when they cannot be kept."""
    if not recipe.shares:
        raise DeskError("there are no shares to keep yet")
    total = sum(recipe.shares.values())
    if abs(total - 1.0) > 1e-4:
        raise DeskError(f"the shares sum to {100 * total:.2f} %, not to 100 %; mend them before keeping them")
    return trials.keep_trial(plant, Trial(name, product, dict(recipe.shares), recipe.law, note=note))


def drop_trial(plant: Plant, product: str, name: str) -> str:
    """Drop a trial, and say so in words; undo brings it back."""
    return trials.drop_trial(plant, product, name)


def compare(stocks: Sequence[Stock], target: Target, kept: Sequence[Trial]) -> list[Recipe]:
    """Each trial's shares read on today's stocks, under the law it was kept with."""
    from solver.recipe import evaluate

    table = StockTable(stocks)
    missing = {c for t in kept for c in t.shares} - set(table.codes)
    if missing:
        raise DeskError(f"no stock {', '.join(sorted(missing))} any more; the trial cannot be read today")
    return [evaluate(table, t.shares, target, law=t.law) for t in kept]
