"""What else would do, and what each limit and price is worth: worked out part by part, the short parts first."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from blendtui.store.harmless import harmless
from blendtui.store.records import Trial
from solver.stocks import Stock, StockTable
from solver.target import Target

from .errors import DeskError

if TYPE_CHECKING:
    from solver.aims import Aim
    from solver.choices import Range
    from solver.entering import Reach, StockPrice
    from solver.prices import LimitPrice
    from solver.sweeps import Point, Sweep

TIME_LIMIT = 40.0  # s, of one part
PARTS = ("aims", "limits", "ranges", "prices", "reaches")
EXTRAS = (0.0, 1.0, 2.0, 5.0)  # % above the least cost


@dataclass(frozen=True)
class Asked:
    """What is to be worked out, over the target itself."""

    parts: tuple[str, ...] = PARTS
    aims: tuple[str, ...] = ()  # empty: all
    extras: tuple[float, ...] = EXTRAS  # of the ranges, %
    within: float | None = None  # of the aims: at most so much dearer, %; None: at any cost the product allows
    stock: str = ""  # whose share most and least speak of; empty: the one used most
    trial: Trial | None = None  # that a blend is to stay close to


@dataclass(frozen=True)
class Choices:
    """What else would do. A part is None until it has been worked out, or where it was not asked for."""

    target: Target
    stocks: tuple[Stock, ...]
    asked: Asked
    status: str = "infeasible"  # of the least cost: "optimal", "stopped", "infeasible"
    least_cost_per_t: float | None = None
    shares: Mapping[str, float] | None = None  # of the least cost, stock → mass fraction
    aims: tuple[Aim, ...] | None = None
    limits: tuple[LimitPrice, ...] | None = None
    prices: tuple[StockPrice, ...] | None = None
    reaches: tuple[Reach, ...] | None = None
    ranges: tuple[tuple[float, Mapping[str, Range]], ...] | None = None
    done: frozenset[str] = frozenset()  # parts that are complete

    @property
    def feasible(self) -> bool:
        """Is there a blend that meets the target?"""
        return self.least_cost_per_t is not None


def choices(stocks: Sequence[Stock], target: Target, asked: Asked | None = None, *, before: Choices | None = None,
            stale: Callable[[], bool] = lambda: False) -> Iterator[Choices]:
    """What else would do, ever fuller. Ends early when `stale` says that it is not wanted any more.

    before: an answer for the same stocks and target, whose parts need not be worked out again. The status tells
    where no blend meets the target: nothing else can be said then. Raises SolverError in one line.
    """
    from solver.recipe import least_cost
    from solver.rows import build

    wanted = asked or Asked()
    same = before is not None and before.target == target and before.stocks == tuple(stocks)
    if same and before is not None:
        found = _still_good(before, wanted)
    else:
        from solver.linear import Stopwatch

        model = build(StockTable(stocks), target)
        best = least_cost(model, Stopwatch(TIME_LIMIT))
        found = Choices(target, tuple(stocks), wanted, best.status)
        if best.x is not None:
            found = replace(found, least_cost_per_t=float(best.value), shares=model.full(best.x))
    if not found.feasible:
        yield found
        return
    for part in wanted.parts:
        if part in found.done:
            continue
        for fuller in _part(part, found):
            if stale():
                return
            found = fuller
            yield found
        found = replace(found, done=found.done | {part})
    yield found


def _still_good(before: Choices, wanted: Asked) -> Choices:
    """An answer for the same target with only those parts that are complete and still asked as they were."""
    moved = {"aims"} if replace(before.asked, parts=(), extras=()) != replace(wanted, parts=(), extras=()) else set()
    moved |= {"ranges"} if before.asked.extras != wanted.extras else set()
    gone = {part: None for part in PARTS if part in moved or part not in before.done}
    return replace(before, asked=wanted, done=before.done - moved, **gone)  # type: ignore[arg-type]


def _part(part: str, found: Choices) -> Iterator[Choices]:
    return {"aims": _aims, "limits": _limits, "prices": _prices, "reaches": _reaches, "ranges": _ranges}[part](found)


def _aims(found: Choices) -> Iterator[Choices]:
    from solver.aims import AIMS, aims

    asked = found.asked
    made: tuple[Aim, ...] = ()
    trial = None if asked.trial is None else asked.trial.shares
    for aim in aims(StockTable(found.stocks), found.target, asked.aims or AIMS, stock=asked.stock, trial=trial,
                    trial_name="" if asked.trial is None else asked.trial.name, extra=asked.within,
                    time_limit=TIME_LIMIT):
        made = (*made, aim)
        yield replace(found, aims=made)


def _limits(found: Choices) -> Iterator[Choices]:
    from solver.prices import LimitPrices

    yield from _growing(found, "limits", LimitPrices(StockTable(found.stocks), found.target,
                                                     time_limit=TIME_LIMIT).limits())


def _prices(found: Choices) -> Iterator[Choices]:
    from solver.entering import StockPrices

    yield from _growing(found, "prices", StockPrices(StockTable(found.stocks), found.target,
                                                     time_limit=TIME_LIMIT).stocks())


def _reaches(found: Choices) -> Iterator[Choices]:
    from solver.entering import StockPrices

    yield from _growing(found, "reaches", StockPrices(StockTable(found.stocks), found.target,
                                                      time_limit=TIME_LIMIT).reaches())


def _ranges(found: Choices) -> Iterator[Choices]:
    from solver.choices import ranges_within

    within = ranges_within(StockTable(found.stocks), found.target, found.asked.extras, least=found.least_cost_per_t,
                           time_limit=TIME_LIMIT)
    yield from _growing(found, "ranges", within)


def _growing(found: Choices, part: str, items: Iterator[object]) -> Iterator[Choices]:
    made: tuple[object, ...] = ()
    for item in items:
        made = (*made, item)
        yield replace(found, **{part: made})  # type: ignore[arg-type]
    if not made:
        yield replace(found, **{part: ()})  # type: ignore[arg-type]


# Sweeps

@dataclass(frozen=True)
class Swept:
    """A sweep as far as it has come."""

    sweep: Sweep
    count: int
    points: tuple[Point, ...] = ()  # by their place
    done: bool = False
    stopped: bool = False


def sweep_of(stocks: Sequence[Stock], target: Target, text: str) -> Sweep:
    """A sweep as it is typed: `vi:low`, `kv40 high`, `price:LN15A`, with a span behind it if wanted: `vi low 90 110`.

    DeskError where it cannot be read, SolverError where there is no such property or stock.
    """
    from solver.scales import parse
    from solver.sweeps import PRICE, plan

    of, _, rest = " ".join(text.replace(":", " ", 1).split()).partition(" ")
    of, codes = of.lower(), {s.code.lower(): s.code for s in stocks}
    words = [rest] if rest.lower() in codes else rest.split()  # a code may hold a blank
    if len(words) not in (1, 3):
        raise DeskError(f"{harmless(text, 40)!r} is no sweep: type a property and low or high (vi low), or price and a "
                        "stock (price N150); a span may follow (vi low 90 110)")
    low, high = (parse(words[1], "number"), parse(words[2], "number")) if len(words) == 3 else (None, None)
    which = codes.get(words[0].lower(), words[0]) if of == PRICE else words[0].lower()
    return plan(StockTable(stocks), target, of, which, low=low, high=high)


def swept(stocks: Sequence[Stock], target: Target, sweep: Sweep, count: int | None = None,
          stale: Callable[[], bool] = lambda: False) -> Iterator[Swept]:
    """The sweep with ever more points; it ends, marked so, when `stale` says that it is not wanted any more."""
    from solver.sweeps import POINTS, points

    count = POINTS if count is None else count
    made = Swept(sweep, count)
    yield made
    for point in points(StockTable(stocks), target, sweep, count):
        made = replace(made, points=tuple(sorted((*made.points, point), key=lambda p: p.number)))
        if stale():
            yield replace(made, stopped=True, done=True)
            return
        yield made
    yield replace(made, done=True)


def trial_named(trials: Sequence[Trial], product: str, name: str) -> Trial:
    """The kept trial of that name. DeskError names those there are."""
    for trial in trials:
        if trial.product == product and trial.name == name:
            return trial
    there = ", ".join(harmless(t.name) for t in trials if t.product == product)
    raise DeskError(f"{harmless(product)} has no trial {harmless(name, 40)!r}; " + (
        f"there are {there}" if there else "none is kept: on the screen Recipe, k keeps one"))


def newest_trial(trials: Sequence[Trial], product: str) -> Trial | None:
    """The trial of a product that was kept last."""
    own = [t for t in trials if t.product == product]
    return max(own, key=lambda t: t.kept_at) if own else None
