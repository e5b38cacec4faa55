"""Charging: what really went into the vessel, entered as it happens, and what that does to the batch.

Each step is one transaction: the line of the card, the lots, the tank's quantity. What cannot be is refused; what is
unlikely is questioned and goes through with sure=True; what is off goes through and is told at once, with what it
does to every property and what would put it right.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from blendtui.store.batch_edits import added, changed, lots_of, moved, tank_parts
from blendtui.store.batch_records import DONE, DROPPED, PLANNED, Charge, Made
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Step
from solver.stocks import Stock

from . import batch_doubts, batches, charging_words, numbers
from .batch_outlook import Outlook, contents, vessel_of
from .batch_outlook import outlook as plain_outlook
from .charging_remedy import as_weighed, planned_anew, with_remedy
from .errors import DeskError
from .release import clock

if TYPE_CHECKING:
    from solver.trim import Trim

PLAN = ("plan_kg", "tolerance_kg", "state", "why", "position")  # cells of a line that planning anew may change
LONGEST = 300  # characters of a typed reason
BLENDS = "blend_"  # how the values begin with which an additive blends
CELLS = ("stock", "state", "actual_kg", "actual_lot", "at", "by", "celsius", "why", "cells", "checked_at", "checked_by")


@dataclass(frozen=True)
class Charged:
    """What became of a step, and what it did to the batch."""

    made: Made  # after it
    line: Charge  # as it stands now
    words: tuple[str, ...]  # what is to be known at once, the most important first
    effects: Mapping[str, tuple[float | None, float | None]]  # property → (as it was to be, as it will be now)
    outlook: Outlook  # if the rest is charged as planned
    remedy: Trim | None  # what would put it right; None: nothing need be, or nothing would
    odd: bool = False  # outside tolerance, another lot or stock, a line that was dropped


def charge(plant: Plant, batch: str, line: int, kg: float | str, *, lot: str = "", celsius: float | None = None,
           stock: str = "", by: str = "", why: str = "", sure: bool = False) -> Charged:
    """Enter what was really charged on a line: kg, or as typed ("9.01 t", "3 drums", litres at the tank's °C).

    `lot`: as read off the drum or the board; `stock`: what was charged, where it was not what was planned (with
    sure and a reason). DeskError for a line that is charged already and for what is no mass; Questioned for ten times
    the plan, more than the tank or the vessel holds, a lot that is not in the tank, a clock that was set back.
    """
    who, reason, given = batches.person(plant, by), harmless(why.strip(), LONGEST), harmless(lot.strip(), 60)
    batch_doubts.refuse_temperature(celsius)
    before = plain_outlook(plant, plant.batch(batch))  # also brings in the slow libraries before the transaction

    def make() -> Step:
        made = batches.opened(plant, batch)
        row = charging_words.line_of(made, line)
        if row.state == DONE:
            raise DeskError(f"{charging_words.who_charged(row)}; to mend it: blendtui batch correct "
                            f"{harmless(batch, 40)} {line} KG --why TEXT")
        stocks = batches.by_code(plant)
        oil = _oil(stocks, stock.strip() or row.stock)
        mass = charging_words.read_kg(kg, row, oil, celsius)
        tank = plant.tank_lots(oil.code)
        at = clock(plant, made, sure)
        batch_doubts.ask(sure, _asked(plant, made, row, oil, mass, given, tank, celsius))
        if oil.code != row.stock and not reason:
            raise DeskError(f"{harmless(oil.code, 40)} in place of {harmless(row.stock, 40)} is recorded only with its "
                            "reason; type why")
        done = replace(row, stock=oil.code, state=DONE, actual_kg=mass, at=at, by=who, checked_at="", checked_by="",
                       actual_lot=given or (next(iter(tank)) if len(tank) == 1 else ""),
                       celsius=row.celsius if celsius is None else celsius, why=_reason(row, oil, reason),
                       cells=_cells(plant, oil, given, tank), lots=_lots(oil, given, tank))
        changes = (changed(row, **{cell: getattr(done, cell) for cell in CELLS}), *lots_of(done, row),
                   moved(oil, -mass), *_tank_after(plant, oil, tank, (done.lots, mass)))
        return Step(changes, f"{batch} line {line}: {numbers.batch(mass)} kg of {oil.code} charged", reason,
                    (made, row, done, oil, tank))

    made, row, done, oil, tank = _result(plant.step(make))
    words = [*charging_words.charged_words(row, done, oil), *charging_words.substituted(
        row, oil, batches.target_of(plant, made)), *charging_words.lot_words(done, oil, tank, row),
        *charging_words.order_words(made, row, oil)]
    odd = (charging_words.outside(row, done.actual_kg or 0.0) or oil.code != row.stock or row.state == DROPPED
           or bool(done.actual_lot and tank and done.actual_lot not in tank)
           or bool(row.lot and done.actual_lot and row.lot != done.actual_lot))
    return _told(plant, batch, line, words, before, odd, oil.code)


def correct(plant: Plant, batch: str, line: int, kg: float | str, *, why: str = "", lot: str = "",
            celsius: float | None = None, by: str = "", sure: bool = False) -> Charged:
    """Correct an actual, with its reason: the tank is moved by the difference, and the second check is due again.

    0 says that nothing was charged: the line is to come again (Questioned). The same kg again only adds a reason that
    was missing.
    """
    who, reason, given = batches.person(plant, by), harmless(why.strip(), LONGEST), harmless(lot.strip(), 60)
    if not reason:
        raise DeskError("a correction needs its reason; type why the first entry was wrong")
    batch_doubts.refuse_temperature(celsius)
    before = plain_outlook(plant, plant.batch(batch))

    def make() -> Step:
        made = batches.opened(plant, batch)
        row = charging_words.line_of(made, line)
        if row.state != DONE:
            raise DeskError(f"line {line} of {harmless(batch, 40)} is not charged yet: there is nothing to correct")
        stocks = batches.by_code(plant)
        oil, tank = _oil(stocks, row.stock), plant.tank_lots(row.stock)
        clock(plant, made, sure)
        if _is_nothing(kg):
            batches.question(sure, f"was nothing charged on line {line}? Then {numbers.batch(row.actual_kg)} kg go "
                                   f"back to {harmless(oil.code, 40)} and the line is to come again.")
            _question_gone(made, -(row.actual_kg or 0.0), sure)
            return _taken_back(plant, made, row, oil, tank, reason)
        mass = charging_words.read_kg(kg, row, oil, celsius)
        off = mass - (row.actual_kg or 0.0)
        if abs(off) <= charging_words.HAIR and given in ("", row.actual_lot) and celsius in (None, row.celsius):
            return _reasoned(made, row, oil, tank, reason)
        # The tank is asked for the difference only, and the vessel holds the first entry already.
        back = replace(oil, on_hand_kg=None if oil.on_hand_kg is None else oil.on_hand_kg + (row.actual_kg or 0.0))
        without = replace(made, charges=tuple(c for c in made.charges if c.line != line))
        batch_doubts.ask(sure, _asked(plant, without, row, back, mass, given, tank, celsius))
        _question_gone(made, off, sure)
        anew = bool(given) and not _same_lot(row, oil, given)  # else the oil stays what it was when it was charged
        done = replace(row, actual_kg=mass, actual_lot=given or row.actual_lot, by=who, checked_at="", checked_by="",
                       celsius=row.celsius if celsius is None else celsius,
                       why=_after(f"corrected from {numbers.batch(row.actual_kg)} kg ({row.by}): {reason}", row.why),
                       cells=_cells(plant, oil, given, tank) if anew else row.cells,
                       lots=_lots(oil, given, tank) if anew else row.lots)
        changes = (changed(row, **{cell: getattr(done, cell) for cell in CELLS}), *lots_of(done, row), moved(oil, -off),
                   *_tank_after(plant, oil, tank, (row.lots, -(row.actual_kg or 0.0)), (done.lots, mass)))
        what = f"{numbers.batch(row.actual_kg)} kg corrected to {numbers.batch(mass)} kg"
        if abs(off) <= charging_words.HAIR:
            what = f"its lot corrected to {harmless(done.actual_lot, 40)}" if anew else "its temperature corrected"
        return Step(changes, f"{batch} line {line}: {what}", reason, (made, row, done, oil, tank))

    made, row, done, oil, tank = _result(plant.step(make))
    if done == replace(row, why=done.why):
        return _told(plant, batch, line, [f"line {line}, {harmless(row.stock, 40)}: its reason is recorded"], before,
                     False, oil.code)
    return _told(plant, batch, line, list(_corrected_words(made, row, done, oil, tank)), before, True, oil.code)


def check(plant: Plant, batch: str, line: int, *, by: str = "", sure: bool = False) -> Charge:
    """The second check of a charge, by another person than the one who made it; returns the line."""
    return check_all(plant, batch, (line,), by=by, sure=sure)[0]


def check_all(plant: Plant, batch: str, lines: Sequence[int], *, by: str = "", sure: bool = False
              ) -> tuple[Charge, ...]:
    """The second check of several charges in one step: all of them or none; returns the lines."""
    who = batches.person(plant, by)

    def make() -> Step:
        made = batches.opened(plant, batch)
        rows = [charging_words.line_of(made, line) for line in dict.fromkeys(lines)]
        for row in rows:
            _refuse_check(row, who)
        at = clock(plant, made, sure)
        numbers_of = ", ".join(str(row.line) for row in rows)
        return Step(tuple(changed(row, checked_by=who, checked_at=at) for row in rows),
                    f"{batch} line{'' if len(rows) == 1 else 's'} {numbers_of} checked", "",
                    tuple(replace(row, checked_by=who, checked_at=at) for row in rows))

    rows = plant.step(make).result
    assert isinstance(rows, tuple)
    return rows


def _refuse_check(row: Charge, who: str) -> None:
    """DeskError for a line that is not charged, is checked already, or was charged by the same person."""
    if row.state != DONE:
        raise DeskError(f"line {row.line} of {harmless(row.batch, 40)} is not charged yet: there is nothing to check")
    if row.checked_by:
        raise DeskError(f"line {row.line} was checked by {harmless(row.checked_by, 40)} at "
                        f"{batches.when(row.checked_at)} already")
    if batches.same_person(who, row.by):
        raise DeskError(f"line {row.line} was entered by {harmless(row.by, 40)}: the second check is by another person")


def miss(plant: Plant, batch: str, line: int, *, why: str = "", by: str = "", sure: bool = False) -> Charged:
    """Drop a line that is not charged, with its reason; what that does to the batch is told as of a charge."""
    who, reason = batches.person(plant, by), harmless(why.strip(), LONGEST)
    if not reason:
        raise DeskError("a line is dropped only with its reason; type why it is not charged")
    before = plain_outlook(plant, plant.batch(batch))

    def make() -> Step:
        made = batches.opened(plant, batch)
        row = charging_words.line_of(made, line)
        if row.state == DONE:
            raise DeskError(f"{charging_words.who_charged(row)}: it cannot be dropped; correct it instead")
        if row.state == DROPPED:
            raise DeskError(f"line {line} was dropped already ({harmless(row.why, 120)})")
        clock(plant, made, sure)
        done = replace(row, state=DROPPED, why=f"{reason} ({who})")
        return Step((changed(row, state=DROPPED, why=done.why),), f"{batch} line {line}, {row.stock}, dropped", reason,
                    done)

    row = plant.step(make).result
    assert isinstance(row, Charge)
    said = f"line {line}, {harmless(row.stock, 40)}: {numbers.batch(row.plan_kg)} kg are not charged"
    return _told(plant, batch, line, [said], before, True, row.stock)


def outlook(plant: Plant, made: Made) -> Outlook:
    """What a batch will be if the rest is charged as planned, and where that is not good what would put it right."""
    return with_remedy(plant, made)


def replan(plant: Plant, batch: str, *, by: str = "", why: str = "") -> Made:
    """Replace the charges to come by what would put the batch right; DeskError where nothing need be, or would."""
    who, reason = batches.person(plant, by), harmless(why.strip(), LONGEST)
    seen = batches.opened(plant, batch)
    ahead = with_remedy(plant, seen)
    if ahead.good:
        raise DeskError(f"{harmless(batch, 40)}: every limit is met with its guard as it is planned; nothing is to be "
                        "planned anew")
    trim = ahead.remedy
    if trim is None:
        raise DeskError("; ".join(ahead.remedy_words) or f"it cannot be predicted: {ahead.why_not}")
    if trim.drawn_kg > 0.0:
        raise DeskError(f"{numbers.kg(trim.drawn_kg)} kg must be drawn off first; record that, then plan anew")

    def make() -> Step:
        # Solved outside, so that the others need not wait for it; what it stood on must be as it was.
        if batches.opened(plant, batch) != seen:
            raise DeskError(f"{harmless(batch, 40)} has changed meanwhile; look at it again and plan anew")
        said = reason or f"planned anew by {who}"
        lines, new = planned_anew(seen, trim, as_weighed(plant.stocks(include_retired=True), vessel_of(plant, seen)),
                                  said)
        old = {c.line: c for c in seen.charges}
        changes: list[Change] = [changed(old[c.line], **{cell: getattr(c, cell) for cell in PLAN}) for c in lines]
        changes += [change for c in new for change in added(c)]
        total = seen.in_vessel_kg + sum(c.plan_kg for c in (*lines, *new) if c.state == PLANNED)
        changes.append(changed(seen.head, batch_kg=total))
        return Step(tuple(changes), f"{batch}: charges to come planned anew", said)

    plant.step(make)
    return plant.batch(batch)


# Pieces of a step

def _oil(stocks: Mapping[str, Stock], code: str) -> Stock:
    if code not in stocks:
        raise DeskError(f"the plant has no stock {harmless(code, 40)!r}; type its code as the card has it")
    return stocks[code]


def _question_gone(made: Made, off: float, sure: bool) -> None:
    """Ask where less went in by a correction than has left the vessel already."""
    short = -(made.in_vessel_kg + off)
    if short > charging_words.HAIR:
        batches.question(sure, f"{harmless(made.name, 40)}: {numbers.kg(short)} kg more are recorded to have left the "
                               "vessel than would have gone in; which of the two is right?")


def _is_nothing(kg: float | str) -> bool:
    """Is an entry 0, as a number or as typed?"""
    if isinstance(kg, str):
        return kg.strip().lower().removesuffix("kg").strip() in ("0", "0.0")
    return kg == 0.0


def _asked(plant: Plant, made: Made, row: Charge, oil: Stock, kg: float, lot: str, tank: Mapping[str, float],
           celsius: float | None) -> Iterator[str]:
    """Everything that is unlikely of an actual."""
    target = batches.target_of(plant, made)
    yield from charging_words.substituted(row, oil, target)
    yield from charging_words.doubts(made, row, oil, kg, vessel_of(plant, made), contents(plant, made, target), celsius)
    elsewhere = [x.stock for x in plant.lots() if x.lot == lot] if lot and lot not in tank else []
    yield from charging_words.foreign_lot(oil, lot, tank, elsewhere)
    if row.state != DONE:  # a correction keeps its lot
        yield from charging_words.lot_of_drums(oil, lot, tank, kg)


def _reason(row: Charge, oil: Stock, reason: str) -> str:
    return f"{oil.code} in place of {row.stock}: {reason}" if oil.code != row.stock else reason or row.why


def _lots(oil: Stock, lot: str, tank: Mapping[str, float]) -> dict[str, float]:
    """The lots of a charge: the drum's own, or what the tank is mixed of."""
    if lot and (oil.package_kg or lot not in tank):
        return {lot: 1.0}
    return dict(tank)


def _same_lot(row: Charge, oil: Stock, lot: str) -> bool:
    """Does a lot that is typed with a correction say what is recorded already? A tank may hold others by now."""
    return bool(row.lots) and (lot == row.actual_lot or (not oil.package_kg and lot in row.lots))


def _cells(plant: Plant, oil: Stock, lot: str, tank: Mapping[str, float]) -> dict[str, float]:
    """The stock's values now; of a drum, or of a lot that is not the tank's, those of the lot where they are known.

    A lot is tested neat, so it says nothing of the viscosity with which an additive blends, unless its papers do.
    """
    cells = batches.cells_of(oil)
    own = next((x for x in plant.lots() if x.lot == lot), None) if lot and (oil.package_kg or lot not in tank) else None
    if own is None or (own.stock != oil.code and not own.cells):
        return cells
    blends = {code.removeprefix(BLENDS): value for code, value in own.cells.items() if code.startswith(BLENDS)}
    neat = ("kv40", "kv100") if oil.blend_kv40 is not None else ()
    given = {code: value for code, value in own.cells.items() if code not in neat and not code.startswith(BLENDS)}
    return {**cells, **given, **blends}


def _tank_after(plant: Plant, oil: Stock, tank: Mapping[str, float], *draws: tuple[Mapping[str, float], float]
                ) -> list[Change]:
    """What a store of drums is made of after lots [kg] were taken from it; a mixed tank keeps its proportions."""
    if not oil.package_kg or oil.on_hand_kg is None or not tank:
        return []
    own = set(tank) | {x.lot for x in plant.lots(oil.code)}
    masses = {lot: part * oil.on_hand_kg for lot, part in tank.items()}
    for lots, kg in draws:
        for lot, part in lots.items():
            if lot in own:
                masses[lot] = max(0.0, masses.get(lot, 0.0) - part * kg)
    total = sum(masses.values())
    if total <= charging_words.HAIR:
        return []
    return tank_parts(oil.code, dict(tank), {lot: kg / total for lot, kg in masses.items() if kg > charging_words.HAIR})


def _after(reason: str, before: str) -> str:
    """A reason, with the one that stood there before."""
    return f"{reason}; before: {before}"[:LONGEST] if before else reason


def _reasoned(made: Made, row: Charge, oil: Stock, tank: Mapping[str, float], reason: str) -> Step:
    """Give a charge the reason that it lacked; DeskError where it has one, for then nothing is corrected."""
    if row.why:
        raise DeskError(f"line {row.line} says {numbers.batch(row.actual_kg)} kg already; nothing was changed")
    return Step((changed(row, why=reason),), f"{made.name} line {row.line}: reason recorded", reason,
                (made, row, replace(row, why=reason), oil, tank))


def _taken_back(plant: Plant, made: Made, row: Charge, oil: Stock, tank: Mapping[str, float], reason: str) -> Step:
    """A line that was not charged after all: it is to come again."""
    was = row.actual_kg or 0.0
    why = f"not charged after all ({row.by} had entered {numbers.batch(was)} kg): {reason}"
    again = replace(row, state=PLANNED, actual_kg=None, actual_lot="", at="", by="", checked_at="", checked_by="",
                    cells={}, lots={}, why=why)
    changes = (changed(row, **{cell: getattr(again, cell) for cell in CELLS}), *lots_of(again, row), moved(oil, was),
               *_tank_after(plant, oil, tank, (row.lots, -was)))
    return Step(changes, f"{made.name} line {row.line}: not charged after all", reason, (made, row, again, oil, tank))


def _result(step: Step) -> tuple[Made, Charge, Charge, Stock, Mapping[str, float]]:
    assert isinstance(step.result, tuple)
    return step.result


def _corrected_words(made: Made, row: Charge, done: Charge, oil: Stock, tank: Mapping[str, float]) -> Iterator[str]:
    name = f"line {row.line}, {harmless(row.stock, 40)}"
    if done.state == PLANNED:
        yield f"{name}: {numbers.batch(row.actual_kg)} kg taken back; the line is to come again"
    else:
        same = row.actual_kg == done.actual_kg
        yield (f"{name}: {numbers.batch(done.actual_kg)} kg as before" if same
               else f"{name}: {numbers.batch(row.actual_kg)} → {numbers.batch(done.actual_kg)} kg")
        yield from charging_words.charged_words(row, done, oil)
        yield from charging_words.lot_words(done, oil, tank, row)
    if row.checked_by:
        yield f"the second check by {harmless(row.checked_by, 40)} no longer holds: it is to be made again"
    if made.decisions:
        yield f"sample {made.decisions[-1].sample} was decided on before this correction; look at it again"


def _told(plant: Plant, batch: str, line: int, words: Sequence[str], before: Outlook, odd: bool, stock: str) -> Charged:
    """What a step did, told: effects and remedy where it was off, or where a limit is missed by it."""
    made = plant.batch(batch)
    after = plain_outlook(plant, made)
    effects = charging_words.effects_of(before, after)
    said = list(words)
    oil = next((s for s in plant.stocks() if s.code == stock), None)
    if oil is not None and charging_words.short_of(oil) > charging_words.HAIR:
        said += charging_words.promised_words(oil, [b for b in _promised(plant, stock) if b != batch])
    # Within tolerance a charge moves a batch about the edge of its guard; that it misses a limit by it is told.
    if odd or (after.missed and not before.missed):
        after = with_remedy(plant, made, after)
        limited = [] if after.recipe is None else [x.property for x in after.recipe.limits]
        said += charging_words.effect_words(effects, limited)
        said += after.words
        said += after.remedy_words
    return Charged(made, charging_words.line_of(made, line), tuple(said), effects, after, after.remedy, odd)


def _promised(plant: Plant, stock: str) -> list[str]:
    """Open batches that still have to charge a stock."""
    return [b.batch for b in plant.batches("open") if any(c.stock == stock for c in plant.batch(b.batch).to_charge)]
