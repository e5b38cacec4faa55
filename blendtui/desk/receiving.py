"""A delivery into a tank: its lot, its quantity, what the tank then holds and which values it has."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta

from blendtui.store import batch_edits, edits
from blendtui.store.batch_records import Lot
from blendtui.store.database import now
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Step
from solver.properties import lookup
from solver.stocks import Stock

from . import batches, numbers, typed
from .errors import DeskError
from .topping_up import EARLIER, PAIR, cells_changed, delivered, parts_after, topped_up, value_of

TIMES_HELD = 10.0  # of the most that a tank ever held: a delivery beyond is questioned
ABSURD_KG = 1e6  # and a delivery beyond this always is
USUAL = 0.08  # of the KV: lots of one oil differ by 3–8 % (common practice)
ALIKE = 0.03  # of the KV: near enough to be taken for another stock
LONGEST_LOT = 60  # characters
SOURCES = ("own", "certificate", "typical")


@dataclass(frozen=True)
class Received:
    """What a receipt did."""

    lot: Lot
    stock: Stock  # the tank after it
    parts: Mapping[str, float]  # lot → part of the tank
    lost: tuple[str, ...]  # properties that are not known any more
    words: tuple[str, ...]


def receive(plant: Plant, stock: str, kg: float | str, lot: str, *, cells: Mapping[str, str | float] | None = None,
            certificate: str = "", source: str = "certificate", from_batch: str = "", on: str = "", note: str = "",
            keep: bool = False, by: str = "", why: str = "", sure: bool = False, law: str = "refutas") -> Received:
    """Receive `kg` (a number, or typed with its unit) into a tank, and give the tank the values it then has.

    `cells`: values as typed, by property code (kv40, kv100, blend_kv40, density15, flash …). The tank's values are
    those of a blend of its book quantity, bottoms included, with the delivery under `law` (topping_up.py); what
    only one of the two has is unknown from then on, and is named. With `keep` the tank's own values stand for what
    the delivery's papers do not say. An empty tank takes the delivery's values. A tank with values mixed so is
    "computed" until it is tested. Returned oil goes into a rework stock with `from_batch`, or a typed lot.

    Refused (DeskError): no quantity above 0, no lot or one that is there already, a book quantity that is unknown
    or below 0, a stock that is not there, no viscosity, values that cannot be. Questioned unless `sure`: a
    quantity beyond ten times what the tank ever held, a viscosity further from the tank's than lots differ, values
    that products limit and that would be lost, a date before the last receipt or after now.
    """
    from solver import recipe  # noqa: F401  (slow to import: not while others wait for this transaction)

    def make() -> Step:
        tank, given = live(plant, stock), typed.values(cells or {})
        amount = typed.mass(kg, given.get("density15") or tank.density15)
        came = delivered(tank, given, keep)
        receipt = _named(plant, tank, Lot(stock, typed.name(lot, "lot"), batches.moment(on) if on else now(), amount,
                                          typed.name(certificate, "certificate"), source, given, from_batch,
                                          batches.person(plant, by), typed.name(note, "note")))
        refuse(tank, came, receipt)
        done, changes = taken_in(plant, tank, came, receipt, law)
        questions = questionable(plant, tank, came, done)
        if questions:
            batches.question(sure, f"{harmless(stock, 40)}: {asked(questions)}")
        what = f"{stock} received {numbers.kg(amount)} kg, lot {receipt.lot}{signed(plant, by)}"
        return Step(tuple(changes), what, why, replace(done, words=_words(tank, done, keep)))

    done = plant.step(make).result
    assert isinstance(done, Received)
    return done


def live(plant: Plant, code: str) -> Stock:
    """A stock in use; a retired one is refused as such."""
    if any(s.code == code for s in plant.stocks()):
        return plant.stock(code)
    if any(s.code == code for s in plant.stocks(include_retired=True)):
        raise DeskError(f"{harmless(code, 40)} is retired; take it into use again, or name another stock")
    return plant.stock(code)


def asked(questions: list[str]) -> str:
    """Several questions in one line."""
    return "; ".join(questions).replace("?; ", "? ")


def signed(plant: Plant, by: str) -> str:
    """Who did it, where that is not who is logged in: for the words of an entry."""
    who = batches.person(plant, by)
    return "" if who == plant.who else f" (by {who})"


def _named(plant: Plant, tank: Stock, receipt: Lot) -> Lot:
    """The receipt with the batch that it comes from, where that is known, and a lot named after it."""
    if receipt.source not in SOURCES:
        raise DeskError(f"source {harmless(receipt.source, 40)!r} is not known; usable are {', '.join(SOURCES)}")
    batch = receipt.from_batch
    if batch:
        plant.batch(batch)
    elif tank.kind == "rework" and any(b.batch == receipt.lot for b in plant.batches()):
        batch = receipt.lot
    return replace(receipt, from_batch=batch, lot=receipt.lot or (next_lot(plant, tank.code, batch) if batch else ""))


def next_lot(plant: Plant, stock: str, batch: str) -> str:
    """The lot under which oil of a batch goes into a stock: the batch's name, from the second time with a number."""
    taken = {x.lot for x in plant.lots(stock)}
    return next(name for n in range(1, len(taken) + 2) if (name := batch if n == 1 else f"{batch} ({n})") not in taken)


def refuse(tank: Stock, came: Stock, receipt: Lot) -> None:
    """DeskError for what cannot be of a delivery."""
    from solver.doubts import faults

    code, lot = harmless(tank.code, 40), receipt.lot
    if not receipt.kg > 0.0:
        raise DeskError(f"{code}: a delivery of {receipt.kg:g} kg is not above 0; type what came")
    if not lot:
        raise DeskError(f"{code}: of unknown origin: rework needs the batch it comes from, or a lot" if
                        tank.kind == "rework" else f"{code}: a delivery needs its lot; type the one on its papers")
    if lot == EARLIER or len(lot) > LONGEST_LOT:
        raise DeskError(f"{code}: {harmless(lot, 40)!r} cannot be a lot's name; it has up to {LONGEST_LOT} characters "
                        f"and is not {EARLIER!r}, which stands for oil of unknown lots")
    if tank.on_hand_kg is None:
        raise DeskError(f"{code}: its book quantity is unknown, so what it holds after a delivery is too; dip the tank "
                        "first and set the book to the dip")
    if tank.on_hand_kg < 0.0:
        raise DeskError(f"{code}: its book says {tank.on_hand_kg:.1f} kg, which cannot be; dip the tank first and set "
                        "the book to the dip")
    wrong = faults(came)
    if wrong:
        lacking = all(value_of(came, d.cell) is None for d in wrong)
        raise DeskError(f"{code}, lot {harmless(lot, 40)}: {wrong[0].says}" + (
            "; type it off the certificate, or have the tank's own values kept for it" if lacking else ""))


def taken_in(plant: Plant, tank: Stock, came: Stock, receipt: Lot, law: str) -> tuple[Received, list[Change]]:
    """A receipt as changes: the lot, the tank's quantity, its parts and its values. Words are not said yet."""
    _refuse_known_lot(plant, receipt)
    mixed = topped_up(tank, came, receipt.kg, source=receipt.source, tested_on=typed.local_day(receipt.received_at),
                      law=law)
    before, book = plant.tank_lots(tank.code), tank.on_hand_kg or 0.0
    parts = parts_after(before, book, receipt.lot, receipt.kg)
    changes = [*batch_edits.added(receipt), edits.stock_cell(tank, "on_hand_kg", book + receipt.kg),
               *batch_edits.tank_parts(tank.code, before, parts),
               *(edits.stock_cell(tank, c, v) for c, v in cells_changed(tank, mixed.stock).items())]
    return Received(receipt, replace(mixed.stock, on_hand_kg=book + receipt.kg), parts, mixed.lost, ()), changes


def _refuse_known_lot(plant: Plant, receipt: Lot) -> None:
    there = next((x for x in plant.lots(receipt.stock) if x.lot == receipt.lot), None)
    if there is not None:
        raise DeskError(f"{harmless(receipt.stock, 40)}: lot {harmless(receipt.lot, 40)} was received already, "
                        f"{numbers.kg(there.kg)} kg on {batches.when(there.received_at)}; a second delivery of it "
                        "needs a name of its own, such as with the number of the truck")


# What is odd

def questionable(plant: Plant, tank: Stock, came: Stock, done: Received) -> list[str]:
    """What is unlikely of a receipt, in words."""
    from solver.doubts import doubts

    found = too_much(plant, tank, done.lot.kg)
    found += [d.says for d in doubts(came)]
    found += _another_oil(plant, tank, came)
    if tank.blending_kv is not None and done.stock.blending_kv is None:
        found.append("its viscosity would be unknown, and no recipe could use it: type what the certificate says, or "
                     "have the tank's own value kept")
    found += _needed(plant, tank, done.lost)
    return found + _odd_time(plant, done.lot) + _more_than_left(plant, done.lot)


def too_much(plant: Plant, tank: Stock, kg: float) -> list[str]:
    """Is a quantity beyond what this tank can be thought to take?"""
    most, book = 0.0, 0.0
    for move in plant.movements(tank.code):
        book = 0.0 if move.kg is None else book + move.kg
        most = max(most, book)
    if most > 0.0 and kg > TIMES_HELD * most:
        return [f"{numbers.kg(kg)} kg is more than ten times the {numbers.kg(most)} kg that it ever held; is the unit "
                "right?"]
    return [f"{numbers.kg(kg)} kg at once; is the unit right?"] if kg > ABSURD_KG else []


def _another_oil(plant: Plant, tank: Stock, came: Stock) -> list[str]:
    for code in PAIR:
        here, new = value_of(tank, code), value_of(came, code)
        if here is None or new is None or abs(new - here) <= USUAL * here:
            continue
        alike = [s.code for s in plant.stocks() if s.code != tank.code and _near(s, came)]
        hint = f" {' and '.join(harmless(c, 40) for c in alike[:3])} would fit" if alike else ""
        return [f"{code.upper()} {numbers.kv(new)} of the delivery is {abs(new / here - 1.0):.0%} "
                f"{'above' if new > here else 'below'} the tank's {numbers.kv(here)}, and lots of one oil differ by up "
                f"to {USUAL:.0%}: is it this oil?{hint}"]
    return []


def _near(stock: Stock, came: Stock) -> bool:
    pairs = [(value_of(stock, c), value_of(came, c)) for c in PAIR]
    known = [(a, b) for a, b in pairs if a is not None and b is not None]
    return bool(known) and all(abs(a - b) <= ALIKE * b for a, b in known)


def _needed(plant: Plant, tank: Stock, lost: tuple[str, ...]) -> list[str]:
    """Values that would be lost and that a product limits: without them the tank falls out of its recipes."""
    limited = {x.property: p.product for p in reversed(plant.products()) for x in p.limits
               if not p.only_listed or any(tank.matches(rule.of) for rule in p.rules)}
    missing = [c for c in lost if c in limited]
    if not missing:
        return []
    products = list(dict.fromkeys(harmless(limited[c], 40) for c in missing))
    return [f"{_names(missing)} would be unknown, and {' and '.join(products[:3])} {'have' if products[1:] else 'has'} "
            "a limit on it: type what the certificate says, or have the tank's own value kept"]


def _odd_time(plant: Plant, receipt: Lot) -> list[str]:
    last = max((x.received_at for x in plant.lots(receipt.stock)), default="")
    if receipt.received_at < last:
        return [f"{batches.when(receipt.received_at)} is before the last receipt, {batches.when(last)}; is the date or "
                "the clock right?"]
    late = datetime.fromisoformat(receipt.received_at.replace("Z", "+00:00")) > datetime.now(UTC) + timedelta(hours=1)
    return [f"{batches.when(receipt.received_at)} is still to come; is the date right?"] if late else []


def _more_than_left(plant: Plant, receipt: Lot) -> list[str]:
    if not receipt.from_batch:
        return []
    gone = sum(o.kg for o in plant.batch(receipt.from_batch).outcomes)
    if receipt.kg <= gone:
        return []
    return [f"{numbers.kg(receipt.kg)} kg is more than the {numbers.kg(gone)} kg that left {receipt.from_batch}"]


# What is said

def _lot_words(lot: str) -> str:
    return "what was there before" if lot == EARLIER else f"lot {harmless(lot, 40)}"


def _words(tank: Stock, done: Received, kept: bool) -> tuple[str, ...]:
    new, lot = done.stock, done.lot
    said = [f"{numbers.kg(lot.kg)} kg of lot {harmless(lot.lot, 40)} received; the book of {tank.code} says "
            f"{numbers.kg(new.on_hand_kg)} kg"]
    if len(done.parts) > 1:
        said.append("it holds " + ", ".join(f"{_lot_words(name)} {numbers.pct(part)} %" for name, part in
                                            sorted(done.parts.items(), key=lambda each: -each[1])[:6]))
    moved = [f"{c.upper()} {numbers.kv(value_of(tank, c))} → {numbers.kv(value_of(new, c))} mm²/s" for c in PAIR
             if value_of(new, c) is not None]
    if new.source == "computed":
        said.append(", ".join([*moved, "computed until the tank is tested"]))
    elif moved:
        said.append(", ".join([*moved, f"as the papers say ({new.source})" if new.source else ""]).rstrip(", "))
    if kept:
        said.append("for what the papers do not say the tank's own values were taken")
    if done.lost:
        said.append(f"no longer known, for tank or delivery has no value: {_names(done.lost)}")
    return tuple(said)


def _names(codes: tuple[str, ...] | list[str]) -> str:
    return ", ".join(lookup(c).name if not c.startswith("blend_") else c for c in codes)
