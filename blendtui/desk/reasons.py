"""Why no blend meets a product's target, and what it would take: worked out part by part (words: reason_words.py)."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from blendtui.store.harmless import harmless
from solver.stocks import Stock, StockTable
from solver.target import Target

from .errors import DeskError

if TYPE_CHECKING:
    from solver.giving import Giving
    from solver.purchase import Allowed, Neutral, Point, Together
    from solver.recipe import Recipe
    from solver.why import Conflict, WholeNumbers

TIME_LIMIT = 20.0  # s, of one part …
PAIRS_LIMIT = 5.0  # … and of trying every two stocks
BENT_COLUMNS = 5  # of the grid of stocks to buy, where lessons bend the limits and every point takes many steps
Interval = tuple[float, float]
Reach = Mapping[str, tuple[Interval | None, Interval | None]]  # property → alone, with all other limits held
PARTS = ("conflicts", "giving", "reach", "stocks", "region")


@dataclass(frozen=True)
class Report:
    """What has been worked out of one target so far. What is not yet in `done` is still empty."""

    product: str
    target: Target
    status: str = ""  # "optimal": a blend exists; "infeasible"; "stopped": time ran out; "": not known yet
    left_out: tuple[str, ...] = ()  # why stocks that the product allows do not serve, a sentence each
    bent: bool = False  # has the laboratory taught what bends the limits, so that nothing here is proven
    conflicts: tuple[Conflict, ...] = ()
    whole: WholeNumbers | None = None  # where only whole-number rules stand in the way
    giving: Giving | None = None
    reach: Reach | None = None
    assumed: Neutral | None = None
    region: tuple[Point, ...] = ()  # the whole grid, points at which no share would do too
    allowed: tuple[Allowed, ...] = ()  # every stock that was tried
    pairs: tuple[Together, ...] = ()
    done: frozenset[str] = frozenset()


def reasons(stocks: Sequence[Stock], target: Target, give: Sequence[str] = (),
            stale: Callable[[], bool] = lambda: False) -> Iterator[Report]:
    """Ever fuller reports: what cannot hold together, what must give, what can be reached, what to buy.

    `give`: the operator's order of what may give, property codes; empty: all by the least sum of misses. Ends early
    when `stale` says so. Raises SolverError in one line on bad input.
    """
    from solver.linear import Stopwatch
    from solver.why import Reasons

    found = Reasons(StockTable(stocks), target, Stopwatch(TIME_LIMIT))
    report = _answered(found, Report(target.product, target), give)
    steps = {"giving": _giving, "reach": _reach, "stocks": _stocks, "region": _region}
    if report.status != "optimal":
        for report in _conflicts(found, report):  # noqa: B020
            yield report
            if stale():
                return
    else:
        steps = {"reach": _reach}
        report = replace(report, done=frozenset(PARTS) - {"reach"})
        yield report
    for name, step in steps.items():
        for report in step(found, report, tuple(give)):  # noqa: B020
            if stale():
                return
            yield report
        report = replace(report, done=report.done | {name})
        yield report


def _answered(found, report: Report, give: Sequence[str]) -> Report:  # type: ignore[no-untyped-def]
    """Does a blend exist? And are the names in the order such as can give?"""
    from solver.giving import check_order

    check_order(found.demands.model, give)
    possible = found.possible(frozenset(found.demands.all))
    left_out = tuple(f"{x.stock}: {x.reason}" for x in found.demands.model.left_out)
    return replace(report, left_out=left_out, bent=found.demands.model.bent,
                   status="stopped" if found.unsure else "optimal" if possible else "infeasible")


def _conflicts(found, report: Report) -> Iterator[Report]:  # type: ignore[no-untyped-def]
    from solver.why import conflict, whole_numbers

    for held in found.sets():
        report = replace(report, conflicts=(*report.conflicts, conflict(found, held)))
        yield report
    yield replace(report, whole=whole_numbers(found), done=report.done | {"conflicts"})


def _giving(found, report: Report, give: tuple[str, ...]) -> Iterator[Report]:  # type: ignore[no-untyped-def]
    from solver.giving import giving

    yield replace(report, giving=giving(found.demands.table, report.target, give, time_limit=TIME_LIMIT))


def _reach(found, report: Report, give: tuple[str, ...]) -> Iterator[Report]:  # type: ignore[no-untyped-def]
    from solver.linear import Stopwatch
    from solver.reach import reach

    for code, alone, others in reach(found.demands, Stopwatch(TIME_LIMIT)):
        report = replace(report, reach={**(report.reach or {}), code: (alone, others)})
        if report.bent:
            yield report  # a property at a time, for each takes long
    yield report


def _stocks(found, report: Report, give: tuple[str, ...]) -> Iterator[Report]:  # type: ignore[no-untyped-def]
    from solver.linear import Stopwatch
    from solver.purchase import catalogue, pairs

    report = replace(report, allowed=tuple(catalogue(found.demands, Stopwatch(TIME_LIMIT))))
    if not any(each.share is not None for each in report.allowed):
        report = replace(report, pairs=tuple(pairs(found.demands, Stopwatch(PAIRS_LIMIT))))
    yield report


def _region(found, report: Report, give: tuple[str, ...]) -> Iterator[Report]:  # type: ignore[no-untyped-def]
    from solver.linear import Stopwatch
    from solver.purchase import KV40S, neutral, region

    report = replace(report, assumed=neutral(found.demands.model))
    row: list[Point] = []
    columns = BENT_COLUMNS if report.bent else KV40S
    for point in region(found.demands, Stopwatch(TIME_LIMIT), columns):
        if row and point.vi != row[-1].vi:
            report = replace(report, region=(*report.region, *row))
            yield report
            row = []
        row.append(point)
    yield replace(report, region=(*report.region, *row))


def limited(recipe: Recipe) -> tuple[str, ...]:
    """Codes of what a recipe's product limits and could give, the cost last."""
    return tuple(dict.fromkeys(x.property for x in recipe.limits))


def order_of(typed: str, able: Sequence[str] | None = None) -> tuple[str, ...]:
    """The order of what may give, as typed: codes or names parted by commas.

    DeskError for a name unknown, or for one that is none of `able`, where that is given.
    """
    from solver.errors import TargetError
    from solver.properties import lookup, stock_codes

    names = {lookup(code).name.lower(): code for code in ("vi", "density15", *stock_codes())}
    names |= {"cost": "cost_per_t", "density": "density15"}
    order = []
    for each in (part.strip() for part in typed.split(",")):
        if not each:
            continue
        code = names.get(each.lower(), each.lower())
        try:
            order.append(code if code == "cost_per_t" else lookup(harmless(code, 40)).code)
        except TargetError as error:
            raise DeskError(str(error)) from None
    for code in order:
        if able is not None and code not in able:
            raise DeskError(f"{code} cannot give: the product sets no limit on it; it limits {', '.join(able)}")
    return tuple(dict.fromkeys(order))
