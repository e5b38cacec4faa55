"""Why nothing can be added that would do: what comes nearest, and each single demand that stands in the way alone.

A demand is let go, all others held, and the additions are sought anew; where there are some, that demand is named
with what would do without it. A trim has few demands, so each is simply tried.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from .errors import SolverError
from .linear import Stopwatch
from .recipe import Recipe, design
from .requirements import COST, ceiling
from .trim_vessel import Ask, Vessel, as_it_is, over_by, vessel_of
from .trim_words import amounts

OPEN = float("nan")


def nearest_to(vessel: Vessel, watch: Stopwatch) -> Recipe:
    """The content that misses least, with the vessel as full as it may be or as it is; status "infeasible"."""
    ask = vessel.ask
    totals = [max(vessel.most, ask.content_kg)]
    if ask.total_kg is None and ask.content_kg >= max(ask.least_kg, 1e-9):
        totals.append(ask.content_kg)
    target = replace(vessel.model.target, max_stocks=None)
    tried = [design(vessel.table, replace(target, batch_kg=kg), time_limit=max(1.0, watch.left)) for kg in totals]
    return replace(min(tried, key=lambda made: _missed(vessel, made)), status="infeasible", cost_per_t=None)


def _missed(vessel: Vessel, made: Recipe) -> float:
    """By how much a blend misses all limits together, in units of their reproducibilities."""
    values = [(need, made.predicted.get(need.code)) for need in vessel.model.requirements]
    return np.inf if made.shares is None else sum(need.units_missed(v) for need, v in values if v is not None)


def reasons(vessel: Vessel, forgiven: tuple[str, ...], near: Recipe, watch: Stopwatch) -> tuple[str, ...]:
    """Why there are no additions, in words."""
    ask, found = vessel.ask, []
    for rule, share in over_by(ask):
        found.append(f"{rule.of} is {100 * share:.3g} % of what is in the vessel, and at most {100 * rule.high:g} % is "
                     "asked")
    if ask.total_kg is not None and ask.total_kg < ask.content_kg:
        found.append(f"{ask.content_kg:,.0f} kg are in the vessel, more than the total of {ask.total_kg:,.0f} kg")
    found += _not_topped_up(vessel)
    at = f"; with the vessel at {near.batch_kg:,.0f} kg" if near.batch_kg else ""
    why = "; ".join(near.reasons)
    found.append(f"no additions of the oils allowed bring every limit inside{at}{': ' if why else ''}{why}")
    return (*found, *_alone(ask, forgiven, watch))


def _not_topped_up(vessel: Vessel) -> Iterator[str]:
    """Rules that ask for a part of something of which nothing can be added."""
    able = [s for s, new in zip(vessel.model.table.stocks, vessel.added, strict=True) if new]
    for rule in vessel.model.target.rules:
        if rule.low > 0.0 and not any(s.part_of(rule.of) > 0.0 for s in able):
            why = [f"{x.stock}: {x.reason}" for x in vessel.model.left_out
                   if any(s.code == x.stock and s.part_of(rule.of) > 0.0 for s in vessel.table.stocks)]
            yield (f"{rule.of} is to be {100 * rule.low:g} %, and none of it can be added"
                   f"{' (' + '; '.join(why) + ')' if why else ''}")


def _alone(ask: Ask, forgiven: tuple[str, ...], watch: Stopwatch) -> Iterator[str]:
    """Each single demand without which additions would do, and which these are."""
    loose = replace(ask, aim="mass", whole=False)
    would = _would_do(loose, forgiven, watch)
    if would is not None:
        yield f"in any quantities {would} would do: whole steps, drums and least charges stand in the way"
        return
    for words, looser, pardoned in _loosened(loose, forgiven):
        if watch.over:
            return
        would = _would_do(looser, pardoned, watch)
        if would is not None:
            yield f"without {words} {would} would do"


def _would_do(ask: Ask, forgiven: tuple[str, ...], watch: Stopwatch) -> str | None:
    """The least additions in words; None: there are none."""
    try:
        vessel = vessel_of(ask, forgiven)
    except SolverError:
        return None
    masses = vessel.contents if as_it_is(vessel) else vessel.solve(watch).masses
    if masses is None:
        return None
    new = np.where(vessel.added, masses, 0.0)
    return amounts({code: float(kg) for code, kg in zip(vessel.model.table.codes, new, strict=True) if kg > 0.0}
                   ) or "what is in it already"


def _loosened(ask: Ask, forgiven: tuple[str, ...]) -> Iterator[tuple[str, Ask, tuple[str, ...]]]:
    """What is asked with one demand let go: its words, the rest, and the rules forgiven."""
    target = ask.target
    if ask.room_kg is not None:
        yield f"the room of {ask.room_kg:,.0f} kg", replace(ask, room_kg=None), forgiven
    if ask.fill is not None:
        yield (f"the room of {ask.fill[0]:,.0f} L at {ask.fill[1]:g} °C", replace(ask, fill=None), forgiven)
    if ask.total_kg is not None:
        yield (f"the total of {ask.total_kg:,.0f} kg",
               replace(ask, total_kg=None, least_kg=min(ask.total_kg, ask.content_kg)), forgiven)
    if ceiling(target) is not None:
        yield ("the cost ceiling", replace(ask, target=replace(target, moved={**target.moved, (COST, "high"): OPEN})),
               forgiven)
    for rule in target.rules:
        if rule.of not in forgiven:
            yield f"the rule on {rule.of}", ask, (*forgiven, rule.of)
    for need in vessel_of(ask, forgiven).model.requirements:
        for side, limit in (("low", need.low), ("high", need.high)):
            if limit is not None:
                entry = need.entry
                at = f"{'at least' if side == 'low' else 'at most'} {limit:g} {entry.unit}".rstrip()
                yield (f"{entry.name} of {at}",
                       replace(ask, target=replace(target, moved={**target.moved, (need.code, side): OPEN})), forgiven)
