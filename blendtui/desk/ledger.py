"""The stock ledger: deliveries, the tank's own tests, dips, and the book that all of them add up to."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import datetime

from blendtui.store import batch_edits, edits
from blendtui.store.batch_records import Dip, Lot
from blendtui.store.database import now
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.stocks import Stock

from . import batches, numbers, typed
from .errors import DeskError
from .receiving import USUAL, Received, asked, live, receive, signed, too_much
from .topping_up import COMPUTED, PAIR, cells_changed, codes_of, value_of

__all__ = ["Book", "Dipped", "Line", "Received", "Tested", "book", "dip", "receive", "test"]
AGREES = 0.005  # of the book: dips and book agree within this (common practice)
SLIPPED = 5.0  # times the book, or a part of it: has a point slipped?
LEAST = 1e-3  # kg: what a sum of decimals may be off


@dataclass(frozen=True)
class Tested:
    """What a test of a tank did."""

    stock: Stock  # with its new values
    still_computed: tuple[str, ...]  # values that were not tested
    words: tuple[str, ...]


@dataclass(frozen=True)
class Dipped:
    """What a dip found."""

    dip: Dip
    differs_pct: float | None  # of the book; None: the book was unknown or 0
    words: tuple[str, ...]


@dataclass(frozen=True)
class Line:
    """One movement of a stock."""

    at: str  # UTC, ISO 8601
    who: str
    words: str
    kg: float | None  # None: the quantity became unknown
    balance_kg: float | None  # after it
    entry: int  # of the journal


@dataclass(frozen=True)
class Book:
    """Everything that is known of a stock's quantity."""

    stock: Stock
    lines: tuple[Line, ...]  # oldest first
    balance_kg: float | None  # the sum of the movements
    promised_kg: float  # to open batches
    last_dip: Dip | None
    parts: Mapping[str, float]  # lot → part of what the tank holds
    lots: tuple[Lot, ...]  # receipts, oldest first
    words: tuple[str, ...]


# The tank's own test

# PT028 takes every function of this name for one of pytest's; this one tests a tank.
def test(plant: Plant, stock: str, values: Mapping[str, str | float], *, on: str = "",  # noqa: PT028
         method: str = "", by: str = "", why: str = "", sure: bool = False) -> Tested:  # noqa: PT028
    """Give a tank the results of its own test: they stand in place of what was computed or certified.

    The source becomes "own", with the day `on` (ISO date; today), once both viscosities that the stock has are among
    the results; a test of something else leaves it. Refused: no result, values that cannot be. Questioned unless
    `sure`: a viscosity further from the tank's than lots of one oil differ, a day before the last receipt or to come.
    """
    def make() -> Step:
        tank, results, day = live(plant, stock), typed.values(values), typed.day(on)
        if not results:
            raise DeskError(f"{harmless(stock, 40)}: no result was given; type one such as kv40=30.4")
        tested = _with_results(tank, results, day)
        _refuse_impossible(tested, results)
        questions = _odd_results(plant, tank, tested, results, day)
        if questions:
            batches.question(sure, f"{harmless(stock, 40)}: {asked(questions)}")
        still = tuple(c for c in codes_of(tank) if c not in results) if tank.source == COMPUTED else ()
        said = ", ".join(f"{c} {value_of(tank, c) if value_of(tank, c) is not None else 'unknown'} → {v:.12g}"
                         for c, v in results.items())
        changes = [edits.stock_cell(tank, c, v) for c, v in cells_changed(tank, tested).items()]
        what = f"{stock} tested {typed.name(method, 'method')}".rstrip() + f": {said}{signed(plant, by)}"
        return Step(tuple(changes), what, why, Tested(tested, still, _test_words(tank, tested, results, still)))

    done = plant.step(make).result
    assert isinstance(done, Tested)
    return done


def _with_results(tank: Stock, results: Mapping[str, float], day: str) -> Stock:
    tested = tank
    for code, value in results.items():
        tested = edits.with_cell(tested, code, value)
    asked = [c for c in PAIR if value_of(tank, c) is not None] or list(results)
    if all(c in results for c in asked):
        tested = replace(tested, source="own", tested_on=day)
    # How sure an earlier value was says nothing of the one that stands there now.
    return replace(tested, sigmas={c: s for c, s in tested.sigmas.items() if c not in results})


def _refuse_impossible(tested: Stock, results: Mapping[str, float]) -> None:
    from solver.doubts import faults

    wrong = next((d for d in faults(tested) if d.cell in results or value_of(tested, d.cell) is not None), None)
    if wrong is not None:
        raise DeskError(f"{harmless(tested.code, 40)}: {wrong.says}")


def _odd_results(plant: Plant, tank: Stock, tested: Stock, results: Mapping[str, float], day: str) -> list[str]:
    from solver.doubts import doubts

    before = doubts(tank)
    found = [d.says for d in doubts(tested) if d not in before and d.cell in results]
    for code in PAIR:
        here, new = value_of(tank, code), results.get(code)
        if here and new is not None and abs(new - here) > USUAL * here:
            found.append(f"{code.upper()} {numbers.kv(new)} is {abs(new / here - 1.0):.0%} off the tank's "
                         f"{numbers.kv(here)}; is it the sample of this tank?")
    last = max((x.received_at for x in plant.lots(tank.code)), default="")
    if last and day < typed.local_day(last):
        found.append(f"a test of {day} is older than the last receipt, {batches.when(last)}: the tank holds another "
                     "mixture since")
    if day > datetime.now().date().isoformat():
        found.append(f"{day} is still to come; is the date right?")
    return found


def _test_words(tank: Stock, tested: Stock, results: Mapping[str, float], still: tuple[str, ...]) -> tuple[str, ...]:
    said = []
    for code, new in results.items():
        old = value_of(tank, code)
        how = "computed" if tank.source == COMPUTED else "before"
        was = "" if old is None else f", {how} {numbers.value(code, old)}"
        said.append(f"{code} {numbers.value(code, new)}{was}")
    words = [f"{tank.code} tested: " + "; ".join(said)]
    if tested.source != "own":
        words.append(f"its values stay {tested.source or 'without a source'} until KV40 and KV100 are tested together")
    elif still:
        words.append(f"not tested, and so still computed: {', '.join(still)}")
    return tuple(words)


# Dips

def dip(plant: Plant, stock: str, kg: float | str, *, celsius: float | None = None, correct: bool = False, by: str = "",
        why: str = "", sure: bool = False) -> Dipped:
    """Record a dip of `kg` (a number, or typed with its unit; litres are litres at `celsius`, or at 15 °C).

    With `correct` the book is set to the dip, as one movement with its reason, which is required; so it is where
    the book was unknown. A dip outside 0.5 % of the book is said to be. Refused: below 0, no reason for a
    correction. Questioned unless `sure`: more than ten times what the tank ever held, and a book that is set to less
    than a fifth or more than five times itself.
    """
    def make() -> Step:
        tank = live(plant, stock)
        found = typed.mass(kg, tank.density15, celsius)
        if found < 0.0:
            raise DeskError(f"{harmless(stock, 40)}: a dip of {found:g} kg is below 0; type what the tank holds")
        if correct and not why.strip():
            raise DeskError(f"{harmless(stock, 40)}: say why the book is set to the dip: it stands in the record")
        odd = too_much(plant, tank, found)
        if odd:
            batches.question(sure, f"{harmless(stock, 40)}: {asked(odd)}")
        book = tank.on_hand_kg or 0.0
        if correct and book > 0.0 and not book / SLIPPED < found < book * SLIPPED:
            times = numbers.figures(found / book, 2)
            batches.question(sure, f"{harmless(stock, 40)}: the dip of {numbers.kg(found)} kg is {times} times the "
                                   f"book's {numbers.kg(book)} kg; has the point slipped?")
        line = 1 + max((d.line for d in plant.dips(stock)), default=0)
        made = Dip(stock, line, found, tank.on_hand_kg, int(correct), now(), batches.person(plant, by),
                   typed.name(why, "reason"))
        changes = [*batch_edits.added(made), *([edits.stock_cell(tank, "on_hand_kg", found)] if correct else [])]
        what = f"{stock} book set to the dip, {numbers.kg(found)} kg: {made.why}" if correct else (
            f"{stock} dipped, {numbers.kg(found)} kg")
        off = None if not book else 100.0 * (found - book) / book
        return Step(tuple(changes), what + signed(plant, by), why, Dipped(made, off, _dip_words(tank, made, off)))

    done = plant.step(make).result
    assert isinstance(done, Dipped)
    return done


def _dip_words(tank: Stock, made: Dip, off: float | None) -> tuple[str, ...]:
    said = []
    if made.book_kg is None:
        said.append(f"dip {numbers.kg(made.dip_kg)} kg; the book was unknown")
    else:
        said.append(against_book(made))
    if made.corrected:
        said.append(f"the book is set to {numbers.kg(made.dip_kg)} kg: {harmless(made.why, 200)}")
    elif off is None or abs(off) > 100.0 * AGREES:
        said.append("the book was left as it is; set it to the dip, with the reason, once you know it")
    short = tank.reserved_kg + (tank.unpumpable_kg or 0.0) - made.dip_kg
    if tank.reserved_kg > 0.0 and short > LEAST:
        said.append(f"open batches still take {numbers.kg(tank.reserved_kg)} kg: {numbers.kg(short)} kg more than the "
                    "dip leaves above the bottoms")
    return tuple(said)


def against_book(made: Dip) -> str:
    """A dip against the book, in words."""
    if made.book_kg is None:
        return f"dip {numbers.kg(made.dip_kg)} kg, book unknown"
    off = made.dip_kg - made.book_kg
    both = f"dip {numbers.kg(made.dip_kg)} kg, book {numbers.kg(made.book_kg)} kg"
    if abs(off) <= AGREES * abs(made.book_kg):
        return f"{both}: they agree within {100 * AGREES:g} %"
    part = f" ({numbers.fixed(100.0 * abs(off) / made.book_kg, 2)} %)" if made.book_kg > 0.0 else ""
    return (f"{both}: {numbers.kg(abs(off))} kg{part} {'more' if off > 0.0 else 'less'} than the book, outside "
            f"{100 * AGREES:g} %")


# The book

def book(plant: Plant, stock: str) -> Book:
    """Every movement of a stock with the balance after it; promised oil, the last dip, and the lots in the tank."""
    tank = next((s for s in plant.stocks(include_retired=True) if s.code == stock), None) or plant.stock(stock)
    lines: list[Line] = []
    mg: int | None = None
    for move in plant.movements(stock):
        # Whole milligrams: so the balance is the exact sum, as the plant's own is.
        mg = None if move.kg is None else (mg or 0) + round(move.kg * 1e6)
        lines.append(Line(move.at, move.who, move.reason, move.kg, None if mg is None else mg / 1e6, move.entry))
    dips, lots = plant.dips(stock), plant.lots(stock)
    last = dips[-1] if dips else None
    balance = lines[-1].balance_kg if lines else None
    return Book(tank, tuple(lines), balance, tank.reserved_kg, last, plant.tank_lots(stock), tuple(lots),
                _book_words(tank, balance, last))


def _book_words(tank: Stock, balance: float | None, last: Dip | None) -> tuple[str, ...]:
    said = ["the book quantity is unknown; dip the tank and set the book to the dip" if balance is None else
            f"the book says {numbers.kg(balance)} kg; {numbers.kg(tank.unpumpable_kg or 0.0)} kg bottoms, "
            f"{numbers.kg(tank.reserved_kg)} kg promised, {numbers.kg(tank.available_kg)} kg free"]
    if last is None:
        said.append("no dip was ever recorded")
    else:
        said.append(f"last dip {batches.when(last.at)} by {harmless(last.by, 60)}: {against_book(last)}"
                    + (", and the book was set to it" if last.corrected else ""))
    return tuple(said)
