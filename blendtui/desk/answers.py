"""What the console shows of a product's recipe, worked out step by step so that a newer wish need not wait."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from blendtui.store.plant import Plant
from blendtui.store.records import Trial
from solver.stocks import Stock, StockTable
from solver.target import Target

if TYPE_CHECKING:
    from solver.recipe import Recipe

# The desk's other subjects are loaded inside the functions: the first screen is drawn without them.
TIME_LIMIT = 5.0  # s, of one search


@dataclass(frozen=True)
class Wishes:
    """What the operator wants of one recipe, over what the product asks for."""

    product: str
    law: str | None = None  # None: the product's
    batch_kg: float | None = None  # None: the product's
    held: Mapping[str, float] = field(default_factory=dict)  # stock → mass fraction
    left_out: frozenset[str] = frozenset()
    typed: Mapping[str, float] | None = None  # shares by hand, stock → mass fraction; None: the best is wanted
    also_laws: tuple[str, ...] = ()  # laws under which it must hold besides
    moved: Mapping[tuple[str, str], float] = field(default_factory=dict)  # limits moved as a what-if
    confidence: float | None = None  # chance at which every limit is to be met on the first batch, 0–1
    whole: bool = False  # charges in whole scale divisions, drums and IBCs


@dataclass(frozen=True)
class Answer:
    """A product's recipe. What is not worked out yet, or cannot be, is None."""

    wishes: Wishes
    target: Target
    stocks: tuple[Stock, ...]
    allowed: tuple[str, ...]  # stocks that may serve, those used first, then in the plant's order
    best: Recipe
    by_hand: Recipe | None = None
    plain: Recipe | None = None  # the least cost without the chance or the whole steps that are wished
    more: tuple[str, ...] = ()  # what else there is to say of the best, a sentence each
    ranges: Mapping[str, tuple[float, float]] | None = None
    guard_cost_per_t: float | None = None
    largest_batch_kg: float | None = None
    blends: tuple[Recipe, ...] = ()
    done: frozenset[str] = frozenset()  # which of ranges, guard, largest, blends have been worked out


def target(plant: Plant, wishes: Wishes) -> Target:
    """The target of a product under these wishes."""
    from . import targets

    goal = targets.target_of(plant, wishes.product, wishes.law, wishes.batch_kg, wishes.held, wishes.left_out)
    return replace(goal, also_laws=wishes.also_laws, moved=dict(wishes.moved))


def answer(plant: Plant, stocks: tuple[Stock, ...], wishes: Wishes, before: Answer | None = None) -> Answer:
    """The least-cost recipe, and the reading of the shares typed by hand if there are any.

    `before` is an answer for the same plant: where it already holds the least cost of this target only the typed
    shares are read again. Raises SolverError, PlantError or DeskError in one line.
    """
    from . import blends

    goal = target(plant, wishes)
    if before is not None and before.stocks == stocks and before.target == goal and _as_sure(before.wishes, wishes):
        found = replace(before, wishes=wishes)
    else:
        best = blends.best(stocks, goal, TIME_LIMIT)
        found = _wished(plant, Answer(wishes, goal, stocks, _allowed(stocks, goal, best), best))
    made = None if wishes.typed is None else blends.by_hand(stocks, goal, wishes.typed)
    return replace(found, by_hand=made)


def _as_sure(one: Wishes, other: Wishes) -> bool:
    return (one.confidence, one.whole) == (other.confidence, other.whole)


def _wished(plant: Plant, found: Answer) -> Answer:
    """The answer with its best at the chance that is wished, or in whole steps; both where both are."""
    from . import blends, chance, law_error

    wishes, goal, best = found.wishes, found.target, found.best
    more: tuple[str, ...] = ()
    if wishes.confidence is not None and best.status != "infeasible":
        sure = chance.certain(found.stocks, goal, wishes.confidence, law_error.law_sigma(plant, goal.law, goal.product),
                              time_limit=TIME_LIMIT)
        best, more = sure.recipe, chance.certain_words(sure)
    elif wishes.whole and best.status != "infeasible":
        best = blends.whole(found.stocks, goal, TIME_LIMIT).recipe
    if best is found.best:
        return found
    return replace(found, best=best, plain=found.best, more=more)


def _allowed(stocks: tuple[Stock, ...], goal: Target, best: Recipe) -> tuple[str, ...]:
    from solver.allowed import candidates

    table = StockTable(stocks)
    codes = [table.codes[i] for i in candidates(table, replace(goal, left_out=frozenset()))]
    shares = best.shares or {}
    return tuple(sorted(codes, key=lambda code: (code not in shares, -shares.get(code, 0.0))))


def keep_unfinished(plant: Plant, wishes: Wishes) -> str:
    """Keep shares typed by hand as a trial when the console ends without being asked to."""
    from . import trials

    law = wishes.law or plant.product(wishes.product).law or "refutas"
    name = f"unfinished {datetime.now(UTC):%Y-%m-%d %H:%M:%S}"
    return trials.keep_trial(plant, Trial(name, wishes.product, dict(wishes.typed or {}), law,
                                           note="kept when the terminal was closed"))


def further(found: Answer, stale: Callable[[], bool]) -> Iterator[Answer]:
    """The answer with its ranges, then what the guards cost and the largest batch, then the other blends.

    Ends early when `stale` says that a newer wish has come.
    """
    if found.best.status == "infeasible" or not found.best.shares:
        yield replace(found, done=frozenset(("ranges", "guard", "largest", "blends")))
        return
    for name, step in (("ranges", _ranges), ("guard", _guard), ("largest", _largest), ("blends", _blends)):
        if stale():
            return
        if name not in found.done:
            found = replace(step(found), done=found.done | {name})
            if name != "guard":
                yield found


def _ranges(found: Answer) -> Answer:
    from . import blends

    return replace(found, ranges=blends.all_ranges(found.stocks, found.target, TIME_LIMIT))


def _guard(found: Answer) -> Answer:
    from . import blends

    cost = blends.guard_cost(StockTable(found.stocks), found.target, found.plain or found.best)
    return replace(found, guard_cost_per_t=cost)


def _largest(found: Answer) -> Answer:
    from solver.choices import largest_batch

    return replace(found, largest_batch_kg=largest_batch(StockTable(found.stocks), found.target, time_limit=2.0))


def _blends(found: Answer) -> Answer:
    from . import blends

    return replace(found, blends=tuple(blends.other_sets(found.stocks, found.target, time_limit=TIME_LIMIT)))
