"""What would put a batch right: the charges still to come, solved anew with what is in the vessel."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from blendtui.store.batch_records import DROPPED, PLANNED, Charge, Made, Vessel
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.errors import SolverError
from solver.stocks import Stock
from solver.target import Target

from . import batches, numbers
from .batch_outlook import Outlook, contents, outlook, own_stocks, to_come
from .sheet import charge_order
from .trimming import MOST_FILL, tolerance

if TYPE_CHECKING:
    from solver.trim import Trim

TIME = 2.0  # s for each way that is tried
LEAST = 1e-6  # kg


def with_remedy(plant: Plant, made: Made, ahead: Outlook | None = None) -> Outlook:
    """The outlook, and where it is not good what would put it right with the charges to come."""
    ahead = ahead or outlook(plant, made)
    if ahead.good or ahead.recipe is None:
        return ahead
    if not made.to_charge:
        return replace(ahead, remedy_words=("nothing more is to be charged: the laboratory decides, and a trim would "
                                            "put it right",))
    try:
        trim = remedy(plant, made, ahead)
    except SolverError as error:
        return replace(ahead, remedy_words=(f"what would put it right cannot be solved: {error}",))
    return replace(ahead, remedy=trim if trim.additions_kg is not None else None,
                   remedy_words=tuple(remedy_words(made, trim)))


def remedy(plant: Plant, made: Made, ahead: Outlook) -> Trim:
    """The charges to come solved anew, the least change first.

    With the oils still to come to the total as planned; with every oil of the product's list; then the same to a
    larger total, as far as the vessel has room; last, with oil drawn off first.
    """
    from solver.trim import additions

    stocks, target = own_stocks(plant, made), batches.target_of(plant, made)
    inside = contents(plant, made, target)
    live = {s.code for s in plant.stocks()}
    every = [s for s in stocks if s.code in live]
    # The rules of a product name stocks that may not be left out of the table; so the others are left out by name.
    others = frozenset(live - set(to_come(made)))
    fill = _fill(made, ahead, inside)
    total = max(made.head.batch_kg, sum(s.in_vessel_kg or 0.0 for s in inside))
    planned = replace(target, batch_kg=total)
    narrow = replace(planned, left_out=planned.left_out | others)
    ways: tuple[tuple[Target, dict[str, float], bool], ...] = (
        (narrow, {"total_kg": total}, False), (planned, {"total_kg": total}, False),
        (narrow, {"least_kg": total}, False), (planned, {"least_kg": total}, False),
        (planned, {"least_kg": total}, True))
    none: Trim | SolverError | None = None
    for goal, asked, draw in ways:
        if draw and not inside:
            continue
        try:
            found = additions(inside, every, goal, fill=fill, may_draw=draw, time_limit=TIME, **asked)
        except SolverError as error:
            none = none or error
            continue
        if found.additions_kg is not None:
            return found
        none = found
    if isinstance(none, SolverError):
        raise none
    assert none is not None
    return none


def _fill(made: Made, ahead: Outlook, inside: Sequence[Stock]) -> tuple[float, float] | None:
    """Most litres at mixing temperature: what practice fills, or what was planned where that is more."""
    if ahead.capacity_l is None or any(s.density15 is None for s in inside):
        return None
    planned = (ahead.fill_l or 0.0) if ahead.total_kg <= made.head.batch_kg * (1.0 + 1e-9) else 0.0
    return min(ahead.capacity_l, max(MOST_FILL * ahead.capacity_l, planned)), made.head.mix_c


def remedy_words(made: Made, trim: Trim) -> Iterator[str]:
    """What would put it right, charge by charge, against what is planned."""
    if trim.additions_kg is None:
        yield "no charges to come put it right" + (f": {trim.notes[0]}" if trim.notes else "")
        return
    if trim.drawn_kg > 0.0:
        yield f"first draw off {numbers.kg(trim.drawn_kg)} kg of what is in the vessel"
    planned, new = to_come(made), dict(trim.additions_kg)
    steps = []
    for code in dict.fromkeys((*planned, *new)):
        was, kg = planned.get(code), new.get(code)
        drums = f" ({trim.packages[code]} whole)" if code in trim.packages else ""
        if was is None:
            steps.append(f"{harmless(code, 40)} {numbers.batch(kg)} kg anew{drums}")
        elif kg is None:
            steps.append(f"no {harmless(code, 40)} (planned {numbers.batch(was)} kg)")
        elif abs(kg - was) > LEAST:
            steps.append(f"{harmless(code, 40)} {numbers.batch(was)} → {numbers.batch(kg)} kg{drums}")
    total = "" if trim.total_kg is None or abs(trim.total_kg - made.head.batch_kg) < 0.5 else (
        f"; the batch becomes {numbers.batch(trim.total_kg)} kg")
    yield f"would bring every limit back: {', '.join(steps) or 'the charges to come as they are'}{total}"


# The charges to come, planned anew

def planned_anew(made: Made, trim: Trim, stocks: Sequence[Stock], vessel: Vessel | None, why: str
                 ) -> tuple[list[Charge], list[Charge]]:
    """(lines as they are to be in place of those to come, new lines): the remedy as lines of the card.

    A stock that stands on several lines keeps their proportions; what a step leaves over goes to the last of them.
    """
    new, by_code = dict(trim.additions_kg or {}), {s.code: s for s in stocks}
    changed: list[Charge] = []
    for code in dict.fromkeys(c.stock for c in made.to_charge):
        lines = [c for c in made.to_charge if c.stock == code]
        for row, kg in zip(lines, _split(new.pop(code, 0.0), lines, by_code[code]), strict=True):
            state = PLANNED if kg > LEAST else DROPPED
            changed.append(replace(row, plan_kg=kg if state == PLANNED else row.plan_kg, state=state,
                                   why=why if state == DROPPED else row.why))
    line, place = max(c.line for c in made.charges), max(c.position for c in made.charges)
    extra = [s for s in charge_order([by_code[code] for code in new]) if new[s.code] > LEAST]
    added = [Charge(made.name, line + n, made.rounds, s.code, "", new[s.code], tolerance(s, new[s.code], vessel),
                    why=why, position=place + n) for n, s in enumerate(extra, 1)]
    return changed, added


def _split(kg: float, lines: Sequence[Charge], stock: Stock) -> list[float]:
    """A mass over the lines of one stock in the proportion of their plans, in whole steps."""
    step, total = stock.package_kg or stock.division_kg or 0.0, sum(c.plan_kg for c in lines)
    found: list[float] = []
    for row in lines[:-1]:
        part = kg * row.plan_kg / total if total > 0.0 else 0.0
        found.append(min(round(part / step) * step if step > 0.0 else part, kg - sum(found)))
    return [*found, round(kg - sum(found), 6)]
