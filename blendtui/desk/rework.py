"""What leaves the vessel: packed, samples, slops, flush, rework, and what stays in it as the next heel."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from typing import Any

from blendtui.store import batch_edits, edits
from blendtui.store.batch_records import (
    CANCELLED,
    FLUSH,
    LEFT,
    OPEN,
    PACKED,
    RELEASED,
    REWORK,
    REWORKED,
    SAMPLE,
    SLOPS,
    Lot,
    Made,
    Outcome,
)
from blendtui.store.cells import CellError, stock_code
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Step
from solver.properties import is_stock_code
from solver.stocks import Stock

from . import batch_lessons, batches, numbers, typed
from .balance import NOTHING, Balance, balance
from .errors import DeskError
from .receiving import next_lot, refuse, signed, taken_in
from .release import clock
from .topping_up import OWN_COLUMN, PAIR, delivered

__all__ = ["Balance", "Left", "Values", "balance", "leave", "values_of"]
WHAT = (PACKED, SAMPLE, SLOPS, FLUSH, REWORK, LEFT)
KEPT = (REWORK, FLUSH)  # what may go into a stock
WEIGHED = (PACKED, LEFT)  # on other scales than what went in …
GAIN = 0.01  # … and so they may be more than the book by this part of what went in
OVER = 1.05  # of what was asked: more is questioned
MUCH = 0.05  # of what went in: a batch that is closed out with a larger loss is questioned


@dataclass(frozen=True)
class Left(Outcome):
    """One outcome, with what there is to say of it."""

    words: tuple[str, ...] = ()


@dataclass(frozen=True)
class Values:
    """What is known of the oil in a vessel."""

    cells: dict[str, float]  # property code → value
    source: str  # "own" where the laboratory has both viscosities, else "computed"
    measured: tuple[str, ...]  # codes that the laboratory has
    cost_per_t: float | None  # of what it was made of


def leave(plant: Plant, batch: str, kg: float | str, what: str, *, stock: str = "", lot: str = "", family: str = "",
          why: str = "", by: str = "", sure: bool = False) -> Left:
    """Record that `kg` (a number, or typed with its unit) left the vessel of a batch as `what`.

    packed: of a released batch only. sample, slops: of any. rework, and flush where a `stock` or `family` is named:
    into a rework stock as a receipt whose lot is the batch; without `stock` into the one whose oil is `family`, or
    into a new one. left: what stays in the vessel, as its heel from now on (0: it is empty). A mass below 0 takes
    back part of what was recorded as packed, sample, slops or left, with its reason. A batch that was open or
    cancelled and whose vessel is emptied into rework is closed as reworked.

    Refused: more than the vessel holds (what is packed or left may exceed the book by 1 %, questioned), rework
    without a reason or a family, a stock that is no rework or of another family. Questioned unless `sure`: 5 % more
    packed than asked, a heel recorded after the vessel was charged again, or one that leaves a loss past 5 %.
    """
    from solver import recipe  # noqa: F401  (slow to import: not while others wait for this transaction)

    def make() -> Step:
        made = plant.batch(batch)
        # Read only where it is asked for: of litres, and of what goes into a stock.
        values = values_of(plant, made) if isinstance(kg, str) or made.head.unit != "kg" or what in KEPT else None
        amount = typed.mass(kg, None if values is None else values.cells.get("density15"))
        line = 1 + max((o.line for o in made.outcomes), default=0)
        out = Outcome(made.name, line, what, amount, stock, typed.name(lot, "lot"), clock(plant, made, sure),
                      batches.person(plant, by), typed.name(why, "reason"))
        _refuse(made, out, family)
        _question(plant, made, out, values, sure)
        out, changes, words = _into(plant, made, out, family, values)
        after = replace(made, outcomes=(*made.outcomes, out))
        changes += [*batch_edits.added(out), *_heel(plant, after, out, words), *_closed(plant, after, out, words)]
        said = f"{made.name}: {numbers.kg(amount)} kg {what}{f' into {out.stock}' if out.stock else ''}"
        rest = f"; {numbers.kg(max(0.0, after.in_vessel_kg))} kg are in {_vessel(made)} by the book"
        words = [said + (rest if balance(after).loss_kg is None else ""), *_asked(after, out, values), *words]
        return Step(tuple(changes), said + signed(plant, by), why, Left(**_fields(out), words=tuple(words)))

    done = plant.step(make).result
    assert isinstance(done, Left)
    return done


def _fields(out: Outcome) -> dict[str, Any]:
    return {name: getattr(out, name) for name in Outcome.__dataclass_fields__}


# What cannot be, and what is odd

def _refuse(made: Made, out: Outcome, family: str) -> None:
    name, head = harmless(made.name, 40), made.head
    if out.what not in WHAT:
        raise DeskError(f"{harmless(out.what, 40)!r} is no way out of a vessel; usable are {', '.join(WHAT)}")
    if out.what == PACKED and head.state != RELEASED:
        raise DeskError(f"{name} is {head.state}, and only a released batch is packed; "
                        + ("release it first" if head.state == OPEN else "its oil may go to rework or slops"))
    if (out.stock or family) and out.what not in KEPT:
        raise DeskError(f"{name}: {out.what} goes into no stock; only {' and '.join(KEPT)} do")
    if out.what == FLUSH and any(not c.counts for c in made.contents):
        raise DeskError(f"{name}: its flush oil was pumped through and is no part of what {_vessel(made)} holds; "
                        "receive it into a rework stock under a lot of its own, with its values (blendtui stock "
                        "receive); what was flushed out of the batch itself is slops")
    if out.what == REWORK and not out.why:
        raise DeskError(f"{name}: say why this oil becomes rework: it stands in the record")
    if out.kg < 0.0 or (out.kg == 0.0 and out.what != LEFT):
        _refuse_taking_back(made, out)
    there = made.in_vessel_kg
    if out.kg > max(0.0, there) + (GAIN * balance(made).in_kg if out.what in WEIGHED else 0.0) + NOTHING:
        raise DeskError(f"{name}: {numbers.kg(out.kg)} kg {out.what} is more than the {numbers.kg(max(0.0, there))} kg "
                        f"that {_vessel(made)} holds of it by the book; is the unit right, was a charge not recorded?")


def _refuse_taking_back(made: Made, out: Outcome) -> None:
    name = harmless(made.name, 40)
    recorded = sum(o.kg for o in made.outcomes if o.what == out.what)
    if out.what in KEPT or not -recorded <= out.kg < 0.0:
        raise DeskError(f"{name}: {out.kg:g} kg {out.what} is not above 0; type what left the vessel" + (
            f", or at most −{numbers.kg(recorded)} kg to take back what was recorded" if recorded > 0.0 and
            out.what not in KEPT else ""))
    if not out.why:
        raise DeskError(f"{name}: say why {numbers.kg(-out.kg)} kg {out.what} are taken back: it stands in the record")


def _vessel(made: Made) -> str:
    return harmless(made.head.vessel, 40) or "the vessel"


def _question(plant: Plant, made: Made, out: Outcome, values: Values | None, sure: bool) -> None:
    name, there = harmless(made.name, 40), made.in_vessel_kg
    if out.what == LEFT and made.head.state == OPEN and there - out.kg > NOTHING:
        batches.question(sure, f"{name} is open and {numbers.kg(there - out.kg)} kg more are in {_vessel(made)}: what "
                               "stays there is known once the rest is out; is it as typed?")
    if out.what == LEFT:
        later = next((b.batch for b in plant.batches() if b.vessel == made.head.vessel
                      and b.ordered_at > made.head.ordered_at and plant.batch(b.batch).charged), "")
        if later:
            batches.question(sure, f"{name}: {_vessel(made)} has taken {later} since; is this still what stands in it?")
        lost, came = there - out.kg, balance(made).in_kg
        if made.head.state != OPEN and lost > MUCH * came:
            batches.question(sure, f"{name}: then {numbers.kg(lost)} kg of it ({numbers.pct(lost / came)} %) went "
                                   "nowhere on record; was it packed or drawn off? Record that first")
    if out.kg > max(0.0, there) + NOTHING:
        batches.question(sure, f"{name}: {numbers.kg(out.kg)} kg is {numbers.kg(out.kg - there)} kg more than "
                               f"{_vessel(made)} holds of it by the book; was it weighed?")
    if out.what != PACKED or out.kg < 0.0:
        return
    asked, packed = asked_kg(made, values), balance(made).packed_kg + out.kg
    if asked is not None and asked > 0.0 and packed > OVER * asked:
        batches.question(sure, f"{name}: {numbers.kg(packed)} kg packed, and {numbers.kg(asked)} kg were asked for; is "
                               "it all for this order?")


def asked_kg(made: Made, values: Values | None) -> float | None:
    """What the order asked for [kg]; of litres None where the density is unknown."""
    if made.head.unit == "kg":
        return made.head.asked
    density = None if values is None else values.cells.get("density15")
    if density is None:
        return None
    from solver.volume import density_at

    return made.head.asked * float(density_at(density, 20.0 if made.head.unit == "L20" else 15.0)) / 1000.0


def _asked(made: Made, out: Outcome, values: Values | None) -> list[str]:
    if out.what != PACKED:
        return []
    asked, packed = asked_kg(made, values), balance(made).packed_kg
    if not asked:
        return []
    return [f"packed so far {numbers.kg(packed)} of {numbers.kg(asked)} kg asked for ({numbers.pct(packed / asked)} %)"]


# What the oil in the vessel is

def values_of(plant: Plant, made: Made) -> Values | None:
    """The oil in a vessel: results of the last sample since the last charge, and predicted by the batch's law what
    that did not give. None where nothing is in it, or no viscosity is known at all."""
    from solver.errors import SolverError
    from solver.recipe import evaluate

    stocks = batches.by_code(plant)
    there = batches.in_vessel(made, stocks)
    total = sum(s.in_vessel_kg or 0.0 for s in there)
    cells: dict[str, float] = {}
    cost = None
    if total > 0.0:
        try:
            read = evaluate(there, {s.code: (s.in_vessel_kg or 0.0) / total for s in there}, law=_law(plant, made))
            cells = {c: v for c, v in read.predicted.items() if v is not None and _is_value(c)}
            cost = read.cost_per_t
        except SolverError:
            pass  # a charge without viscosity: then only the laboratory knows
    tested: dict[str, float] = {}
    for sample in batch_lessons.of_last_round(made):
        tested |= {c: v for c, v in batch_lessons.means(made, sample.sample).items() if _is_value(c)}
    cells |= tested
    if not all(c in cells for c in PAIR):
        return None
    return Values(cells, "own" if all(c in tested for c in PAIR) else "computed", tuple(tested), cost)


def _is_value(code: str) -> bool:
    return code in OWN_COLUMN or is_stock_code(code)


def _law(plant: Plant, made: Made) -> str:
    return batches.target_of(plant, made).law if made.head.formula else "refutas"


# Into a stock

def _into(plant: Plant, made: Made, out: Outcome, family: str, values: Values | None
          ) -> tuple[Outcome, list[Change], list[str]]:
    """The receipt of rework in its stock, which is made where there is none; the outcome with stock and lot."""
    if out.what not in KEPT or (out.what == FLUSH and not (out.stock or family)):
        return out, [], []
    if values is None:
        raise DeskError(f"{harmless(made.name, 40)}: the viscosity of what is drawn off is not known; enter results of "
                        "a sample first")
    oil, new = _rework_stock(plant, made, out.stock, family)
    out = replace(out, stock=oil.code, lot=out.lot or next_lot(plant, oil.code, made.name))
    came = delivered(oil, values.cells)
    receipt = Lot(oil.code, out.lot, out.at, out.kg, "", values.source, values.cells, made.name, out.by, out.why)
    changes: list[Change] = []
    if new:
        oil = replace(oil, price_per_t=values.cost_per_t)
        changes, oil = edits.new_stock(plant, oil), replace(oil, on_hand_kg=0.0)
    refuse(oil, came, receipt)
    done, taken = taken_in(plant, oil, came, receipt, _law(plant, made))
    if new:
        taken = [_first_quantity(c) for c in taken]
    return out, [*changes, *taken], _rework_words(oil, new, receipt, values, done.lost)


def _first_quantity(change: Change) -> Change:
    """Of a stock that is made in this step no quantity was known before."""
    return replace(change, before={"mg": None}) if change.table == "quantity" else change


def _rework_stock(plant: Plant, made: Made, code: str, family: str) -> tuple[Stock, bool]:
    """The rework stock that the oil goes into, and is it new?"""
    family = typed.name(family, "family")
    every = {s.code: s for s in plant.stocks(include_retired=True)}
    live = {s.code: s for s in plant.stocks()}
    if not code and family:
        of_family = [s.code for s in live.values() if s.kind == "rework" and s.oil == family]
        if len(of_family) > 1:
            names = ", ".join(harmless(c, 40) for c in of_family)
            raise DeskError(f"{names} hold {harmless(family, 40)}; say which one")
        code = of_family[0] if of_family else "RW-" + re.sub(r"[^A-Za-z0-9]+", "-", family).strip("-").upper()[:50]
    if code in live:
        return _checked(live[code], family), False
    if code in every:
        raise DeskError(f"{harmless(code, 40)} is retired; take it into use again, or name another stock")
    if not code or not family:
        raise DeskError(f"{harmless(made.name, 40)}: name the family of the rework, such as hydraulic, or a rework "
                        "stock that there is: rules of products speak of it by its family")
    try:
        return Stock(stock_code(code), name=f"Rework, {family}"[:60], oil=family, kind="rework"), True
    except CellError as error:
        raise DeskError(str(error)) from None


def _checked(oil: Stock, family: str) -> Stock:
    code = harmless(oil.code, 40)
    if oil.kind != "rework":
        raise DeskError(f"{code} is a {oil.kind} stock; rework goes into a rework stock, or rules would miss it")
    if family and family != oil.oil:
        raise DeskError(f"{code} holds {harmless(oil.oil, 40) or 'rework without a family'}, not "
                        f"{harmless(family, 40)}; families are kept apart: name another stock")
    return oil


def _rework_words(oil: Stock, new: bool, receipt: Lot, values: Values, lost: tuple[str, ...]) -> list[str]:
    price = f", at the {numbers.cost(oil.price_per_t)} per t that its oil cost" if oil.price_per_t is not None else (
        ", without a price: it takes part in no recipe until it has one")
    said = [f"{oil.code} is a new rework stock of the family {harmless(oil.oil, 60)}{price}"] if new else []
    kv = "/".join(numbers.kv(values.cells[c]) for c in PAIR)
    how = "measured" if values.source == "own" else "predicted, for the laboratory has not measured both"
    said.append(f"received as lot {harmless(receipt.lot, 60)}, KV40/KV100 {kv} mm²/s {how}")
    if lost:
        said.append(f"no longer known of {oil.code}: {', '.join(lost)}")
    return said


# The vessel, and the end of a batch

def _heel(plant: Plant, after: Made, out: Outcome, words: list[str]) -> list[Change]:
    if out.what != LEFT:
        return []
    kept = sum(o.kg for o in after.outcomes if o.what == LEFT)
    vessel = next((v for v in plant.vessels() if v.vessel == after.head.vessel), None)
    if vessel is None:
        words.append(f"{_vessel(after)} is no vessel of the plant: its heel is kept with the batch alone")
        return []
    heel = after.name if kept > NOTHING else ""
    words.append(f"the heel of {vessel.vessel} is now {numbers.kg(kept)} kg" + (f" of {after.name}" if heel else ""))
    return [batch_edits.changed(vessel, heel_kg=kept, heel_stock=heel)]


def _closed(plant: Plant, after: Made, out: Outcome, words: list[str]) -> list[Change]:
    """A batch that was not released and whose oil is gone, into rework at least in part, is closed as reworked.

    Its vessel is empty then, unless it was recorded that a heel was left.
    """
    head = after.head
    if head.state not in (OPEN, CANCELLED) or out.kg < 0.0 or after.in_vessel_kg > NOTHING:
        return []
    last = max((c.at for c in after.charged), default="")
    why = next((o.why for o in reversed(after.outcomes) if o.what == REWORK and o.at >= last), "")
    if not why:
        return []
    words.append(f"{after.name} is closed: reworked, {harmless(why, 200)}")
    emptied = not any(o.what == LEFT for o in after.outcomes)
    vessel = next((v for v in plant.vessels() if emptied and v.vessel == head.vessel), None)
    return [batch_edits.changed(head, state=REWORKED, closed_at=out.at, closed_by=out.by, why=why),
            *([] if vessel is None else [batch_edits.changed(vessel, heel_kg=0.0, heel_stock="")])]
