"""What would put a batch right: the charges still to come, solved anew with what is in the vessel."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from blendtui.store.batch_records import DROPPED, PLANNED, Charge, Made, Vessel
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.errors import SolverError
from solver.stocks import Stock

from . import batches, charge_lines, formulas, numbers
from .batch_outlook import Outlook, apart_kg, contents, outlook, own_stocks, to_come, vessel_of
from .errors import DeskError
from .sheet import charge_order
from .trimming import MOST_FILL

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
    larger total, as far as the vessel has room; then with oil drawn off first. Where nothing keeps every share rule,
    the first of them that meets every limit (Trim.broken names the rule).
    """
    from solver.trim import additions

    target, vessel = batches.target_of(plant, made), vessel_of(plant, made)
    inside = contents(plant, made, target)
    live = {s.code for s in plant.stocks()}
    every = as_weighed([s for s in own_stocks(plant, made) if s.code in live], vessel)
    # The rules of a product name stocks that may not be left out of the table; so the others are left out by name.
    others = frozenset(live - set(to_come(made)))
    fill = _fill(made, ahead, inside)
    total = max(made.head.batch_kg - apart_kg(made, inside), sum(s.in_vessel_kg or 0.0 for s in inside))
    planned = replace(target, batch_kg=total)
    narrow = replace(planned, left_out=planned.left_out | others)
    best: Trim | None = None  # additions that break a rule, else what says why there are none
    fault: SolverError | None = None
    for goal, larger, draw in ((narrow, False, False), (planned, False, False), (narrow, True, False),
                               (planned, True, False), (planned, True, True)):
        if draw and not inside:
            continue
        try:
            found = additions(inside, every, goal, fill=fill, total_kg=None if larger else total,
                              least_kg=total if larger else 0.0, may_draw=draw, time_limit=TIME)
        except SolverError as error:
            fault = fault or error
            continue
        if found.additions_kg is not None and not found.broken:
            return found
        if best is None or best.additions_kg is None:
            best = found
    if best is None:
        raise fault or DeskError("nothing is in the vessel and nothing is to come")
    return best


def as_weighed(stocks: Sequence[Stock], vessel: Vessel | None) -> list[Stock]:
    """The stocks with the divisions by which they are weighed into the vessel."""
    return list(stocks) if vessel is None else charge_lines.in_steps(stocks, vessel)


def _fill(made: Made, ahead: Outlook, inside: Sequence[Stock]) -> tuple[float, float] | None:
    """Most litres at mixing temperature of what the sums are about: as the order fills the vessel, or as it was
    planned where that is more."""
    if ahead.capacity_l is None or any(s.density15 is None for s in inside):
        return None
    most = float(formulas.how_of(made).get("most_fill_pct", 100.0 * MOST_FILL)) / 100.0
    planned = (ahead.fill_l or 0.0) if ahead.total_kg <= made.head.batch_kg * (1.0 + 1e-9) else 0.0
    litres = min(ahead.capacity_l, max(most * ahead.capacity_l, planned))
    # A heel that is ignored takes its room; its density is near that of the rest.
    return litres * (1.0 - apart_kg(made, inside) / max(ahead.total_kg, made.in_vessel_kg)), made.head.mix_c


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
    yield from trim.broken


# The charges to come, planned anew

def planned_anew(made: Made, trim: Trim, stocks: Sequence[Stock], why: str) -> tuple[list[Charge], list[Charge]]:
    """(lines as they are to be in place of those to come, new lines): the remedy as lines of the card.

    A stock that stands on several lines keeps their proportions; what a step leaves over goes to the last of them. A
    new stock comes before the first line that is charged after it in the usual order. `stocks`: as they are weighed.
    """
    new, by_code = dict(trim.additions_kg or {}), {s.code: s for s in stocks}
    kept: dict[int, Charge] = {}
    for code in dict.fromkeys(c.stock for c in made.to_charge):
        rows = [c for c in made.to_charge if c.stock == code]
        for row, kg in zip(rows, _split(new.pop(code, 0.0), rows, by_code[code]), strict=True):
            if kg <= LEAST:
                kept[row.line] = replace(row, state=DROPPED, why=why)
            elif abs(kg - row.plan_kg) > LEAST:
                kept[row.line] = replace(row, plan_kg=kg, tolerance_kg=charge_lines.tolerance(by_code[code], kg))
            else:
                kept[row.line] = row
    line = max(c.line for c in made.charges)
    extra = [Charge(made.name, line + n, made.rounds, x.stock.code, "", x.kg, x.tolerance_kg, why=why) for n, x
             in enumerate((x for x in charge_lines.lines(new, stocks) if x.role != charge_lines.RINSES), 1)]
    extra = [replace(c, plan_kg=new[c.stock]) for c in extra]  # of a new stock nothing is kept back to rinse
    return _placed(made, list(kept.values()), extra, by_code)


def _placed(made: Made, kept: list[Charge], extra: list[Charge], stocks: Mapping[str, Stock]
            ) -> tuple[list[Charge], list[Charge]]:
    """The lines with their places on the card: those to come follow those that are done."""
    if not extra:
        return kept, extra
    rank = {s.code: n for n, s in enumerate(charge_order([stocks[c.stock] for c in (*kept, *extra)]))}
    order = sorted(kept, key=lambda c: (c.position, c.line))
    for row in extra:
        after = next((n for n, c in enumerate(order) if rank[c.stock] > rank[row.stock]), len(order))
        order.insert(after, row)
    first = 1 + max((c.position for c in made.charges if c.state != PLANNED), default=0)
    placed = [replace(c, position=first + n) for n, c in enumerate(order)]
    own = {c.line for c in kept}
    return [c for c in placed if c.line in own], [c for c in placed if c.line not in own]


def _split(kg: float, lines: Sequence[Charge], stock: Stock) -> list[float]:
    """A mass over the lines of one stock in the proportion of their plans, in whole steps."""
    step, total = stock.package_kg or stock.division_kg or 0.0, sum(c.plan_kg for c in lines)
    found: list[float] = []
    for row in lines[:-1]:
        part = kg * row.plan_kg / total if total > 0.0 else 0.0
        found.append(min(round(part / step) * step if step > 0.0 else part, kg - sum(found)))
    return [*found, round(kg - sum(found), 6)]
