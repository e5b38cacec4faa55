"""A charge as it is typed and as it is told: kg, drums or litres, what is unlikely of it, and what it did."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Mapping, Sequence

from blendtui.store.batch_records import DROPPED, PLANNED, Charge, Made, Vessel
from blendtui.store.harmless import harmless
from solver.stocks import Stock
from solver.target import Target

from . import batches, numbers
from .batch_outlook import Outlook, apart_kg, fill_of
from .errors import DeskError
from .reason_words import and_of, heading, unit
from .typed import LITRES, mass

SLIP = 5.0  # times the plan, or a part of it, from which an actual is questioned
PACKAGES = re.compile(r"(drums?|ibcs?|packages?|pieces?|totes?)", re.IGNORECASE)
HAIR = 1e-6  # kg
WHOLE = 0.01  # of a package: what a residue of 0.5–2 % may take from it is told, less is not
NEAT = ("additive", "vi_improver", "pour_depressant")  # never charged onto nothing
TOLD = ("kv40", "kv100", "vi", "density15", "flash", "pour")  # told even where the product does not limit them
COLDEST, HOTTEST = -20.0, 150.0  # °C that a tank or drum may have


# What is typed

def read_kg(typed: float | str, row: Charge, oil: Stock, celsius: float | None) -> float:
    """An actual [kg] as typed: `9010`, `9.01 t`, `3 drums`, or litres at the tank's temperature.

        m = V ρ(t)/1000,   ρ(t) by solver.volume.density_at

    DeskError or ScaleError for what is no mass, for drums of a stock without a package, for litres without a
    temperature or a density.
    """
    kg = _typed(typed, row, oil, celsius) if isinstance(typed, str) else mass(typed)
    if kg <= 0.0:
        raise DeskError(f"{harmless(oil.code, 40)}: {kg:g} kg cannot have been charged; where nothing was, drop the "
                        f"line with its reason: blendtui batch miss {harmless(row.batch, 40)} {row.line} --why TEXT")
    return kg


def _typed(typed: str, row: Charge, oil: Stock, celsius: float | None) -> float:
    from solver.scales import split

    number, unit_typed = split(typed)
    if PACKAGES.fullmatch(unit_typed):
        if oil.package_kg is None:
            raise DeskError(f"{harmless(oil.code, 40)} comes in bulk: the plant has no package for it; type kg")
        return number * oil.package_kg
    at = celsius if celsius is not None else row.celsius
    if unit_typed in LITRES and at is None:
        raise DeskError(f"{harmless(typed.strip(), 40)} of {harmless(oil.code, 40)} at which temperature? 10 °C "
                        "ignored is 0.7 % of the volume; type the tank's temperature with it, or kg")
    return mass(typed, oil.density15, at)


def line_of(made: Made, line: int) -> Charge:
    """A line of the card; DeskError names those there are."""
    found = next((c for c in made.charges if c.line == line), None)
    if found is None:
        have = ", ".join(f"{c.line} {harmless(c.stock, 20)}" for c in made.charges[:12]) or "none"
        raise DeskError(f"{harmless(made.name, 40)} has no line {line}; its lines are {have}")
    return found


def who_charged(row: Charge) -> str:
    """Who charged a line, when and how much."""
    return (f"{harmless(row.by, 40)} charged {numbers.batch(row.actual_kg)} kg of {harmless(row.stock, 40)} on line "
            f"{row.line} at {batches.when(row.at)}")


# What is unlikely

def doubts(made: Made, row: Charge, oil: Stock, kg: float, vessel: Vessel | None, inside: Sequence[Stock],
           celsius: float | None) -> Iterator[str]:
    """What is unlikely of an actual."""
    name = harmless(oil.code, 40)
    if row.state == DROPPED:
        yield f"line {row.line} was dropped ({harmless(row.why, 120)}); is it charged after all?"
    ratio = kg / row.plan_kg if row.plan_kg > 0.0 else math.inf
    if not 1.0 / SLIP < ratio < SLIP:
        slipped = any(abs(ratio - by) <= 0.05 * by for by in (0.1, 10.0))
        yield (f"{name}: {numbers.batch(kg)} kg is {numbers.figures(ratio, 2)} times the planned "
               f"{numbers.batch(row.plan_kg)} kg" + (": has the point slipped by one place?" if slipped else ""))
    if oil.on_hand_kg is not None and kg > oil.on_hand_kg + HAIR:
        yield (f"{name}: by the book the tank holds {numbers.batch(oil.on_hand_kg)} kg, less than the "
               f"{numbers.batch(kg)} kg typed; dip it")
    if vessel is not None and vessel.capacity_l is not None:
        masses = [(s, s.in_vessel_kg or 0.0) for s in inside] + [(oil, kg + apart_kg(made, inside))]
        fill = fill_of(masses, made.head.mix_c)
        if fill is not None and fill > vessel.capacity_l:
            yield (f"with it the vessel {harmless(vessel.vessel, 40)} would hold {numbers.litres(fill)} L at "
                   f"{made.head.mix_c:g} °C, and it takes {numbers.litres(vessel.capacity_l)} L")
    if celsius is not None:
        yield from _temperature(oil, celsius, vessel)


def _temperature(oil: Stock, celsius: float, vessel: Vessel | None) -> Iterator[str]:
    """A temperature that cannot be a tank's, or that comes near the flash point: told, never cleared."""
    if not COLDEST <= celsius <= HOTTEST:
        yield f"{celsius:g} °C is no temperature of a tank or drum ({COLDEST:g} to {HOTTEST:g} °C); °F?"
    flash = oil.values.get("flash")
    margin = None if vessel is None else vessel.flash_margin_c
    if flash is not None and celsius > flash - (margin or 0.0):
        within = f"the site's margin of {margin:g} °C to it" if margin else "its flash point"
        yield (f"{harmless(oil.code, 40)} at {celsius:g} °C is past {within} (flash {flash:g} °C): site procedure "
               "decides, not this program")


def foreign_lot(oil: Stock, lot: str, tank: Mapping[str, float], elsewhere: Sequence[str]) -> Iterator[str]:
    """A lot that is not in the tank."""
    if not lot or not tank or lot in tank:
        return
    where = f"; {harmless(lot, 40)} was received as {and_of([harmless(c, 40) for c in elsewhere])}" if elsewhere else ""
    holds = ", ".join(f"{harmless(name, 30)} {numbers.pct(part)} %" for name, part in list(tank.items())[:6])
    yield f"lot {harmless(lot, 40)} is not in {harmless(oil.code, 40)}, which holds {holds}{where}"


def lot_of_drums(oil: Stock, lot: str, tank: Mapping[str, float], kg: float) -> Iterator[str]:
    """Drums of several lots: each is of one, so it is to be typed; and no more of a lot than there is by the record."""
    if not oil.package_kg or not oil.on_hand_kg:
        return
    if not lot and len(tank) > 1:
        holds = ", ".join(f"{harmless(name, 30)} {numbers.kg(part * oil.on_hand_kg)} kg" for name, part in
                          list(tank.items())[:6])
        yield (f"{harmless(oil.code, 40)} comes in packages, and there are {holds}: of which lot was it? Unsaid, it is "
               "recorded as of all of them in proportion")
    there = tank.get(lot, 0.0) * oil.on_hand_kg
    if lot in tank and kg > there * (1.0 + WHOLE) + HAIR:
        yield (f"by the record {numbers.kg(there)} kg of lot {harmless(lot, 40)} are in {harmless(oil.code, 40)}, less "
               f"than the {numbers.kg(kg)} kg typed: was part of it of another lot?")


def substituted(row: Charge, oil: Stock, target: Target) -> Iterator[str]:
    """Another stock than the planned one."""
    if oil.code == row.stock:
        return
    from solver.allowed import candidates
    from solver.stocks import StockTable

    allowed = bool(candidates(StockTable([oil]), target))
    name, product = harmless(oil.code, 40), harmless(target.product, 40)
    yield (f"{name} in place of {harmless(row.stock, 40)}: " + (
        f"it is on the list of {product}" if allowed else
        f"NOT on the list of {product}; the same viscosity is not permission: the formulator decides"))


# What is told of a charge

def charged_words(row: Charge, done: Charge, oil: Stock) -> Iterator[str]:
    """The actual against its plan, with its drums."""
    kg, off = done.actual_kg or 0.0, (done.actual_kg or 0.0) - row.plan_kg
    start = f"line {row.line}, {harmless(done.stock, 40)}: {numbers.batch(kg)} kg charged"
    plan = f"{numbers.batch(row.plan_kg)} kg planned"
    if not outside(row, kg):
        yield f"{start}, {plan}"
    else:
        part = f" ({numbers.fixed(100.0 * abs(off) / row.plan_kg, 1)} %)" if row.plan_kg > 0.0 else ""
        yield (f"OUTSIDE TOLERANCE: {start}, {plan}: {numbers.kg(abs(off))} kg{part} too "
               f"{'much' if off > 0.0 else 'little'}, the tolerance is {numbers.kg(row.tolerance_kg)} kg")
        if not done.why:
            yield "its reason is due before a release; type it with the charge, or correct the line with the same kg"
    yield from _packages(row, kg, oil)


def outside(row: Charge, kg: float) -> bool:
    """Is an actual outside the tolerance of its line?"""
    return abs(kg - row.plan_kg) > row.tolerance_kg + HAIR


def _packages(row: Charge, kg: float, oil: Stock) -> Iterator[str]:
    if oil.package_kg is None:
        return
    count, plan = kg / oil.package_kg, row.plan_kg / oil.package_kg
    whole = abs(count - round(count)) <= WHOLE
    shown = f"{round(count)}" if whole else numbers.fixed(count, 2)
    planned = f"{round(plan)}" if abs(plan - round(plan)) <= WHOLE else numbers.fixed(plan, 2)
    one = f"package{'s' if planned != '1' else ''} of {oil.package_kg:g} kg"
    short = round(plan) - round(count)
    if whole and short > 0:
        yield f"{shown} of {planned} {one}: {short} {'is' if short == 1 else 'are'} missing"
    elif whole and short < 0:
        yield f"{shown} of {planned} {one}: {-short} too many; was one charged twice?"
    elif not whole:
        yield f"{shown} of {planned} {one}: part of one; weigh what is left in it"


def order_words(made: Made, row: Charge, oil: Stock) -> Iterator[str]:
    """What a charge comes before, or after, that it should not."""
    earlier = [c for c in made.charges if c.state == PLANNED and (c.position, c.line) < (row.position, row.line)]
    if earlier:
        lines = ", ".join(f"line {c.line} ({harmless(c.stock, 30)})" for c in earlier[:4])
        yield f"out of order: {lines} {'is' if len(earlier) == 1 else 'are'} planned before it and still to come"
    oils = [c for c in made.charged if c.line != row.line]
    if oil.kind in NEAT and not oils and made.in_vessel_kg <= 0.0:
        yield (f"{harmless(oil.code, 40)} is the first in the vessel: concentrates are never mixed neat, nor put onto "
               "a hot coil; site procedure decides")
    drawn = [s for s in made.samples if s.round == made.rounds]
    if drawn:
        yield (f"sample {drawn[-1].sample} was drawn before this charge and no longer speaks of the batch; draw a "
               "fresh one when it is mixed")


def lot_words(done: Charge, oil: Stock, tank: Mapping[str, float], row: Charge) -> Iterator[str]:
    """What is recorded of the lot."""
    if not done.lots:
        yield f"the lot of {harmless(oil.code, 40)} is not known: type it, for a release needs it"
    elif len(done.lots) > 1:
        mixed = ", ".join(f"{harmless(lot, 30)} {numbers.pct(part)} %" for lot, part in done.lots.items())
        yield f"the tank holds lots {mixed}: the charge is recorded so"
    elif tank and not set(done.lots) <= set(tank):
        yield f"lot {harmless(done.actual_lot, 40)} is recorded as typed; by the record it is not in {oil.code}"
    if row.lot and done.actual_lot and row.lot != done.actual_lot:
        yield f"WRONG LOT: {harmless(row.lot, 40)} was planned, {harmless(done.actual_lot, 40)} was charged"


def short_of(oil: Stock) -> float:
    """How much more is promised of a stock than its tank can give [kg]; 0 or less: nothing."""
    return 0.0 if oil.on_hand_kg is None else oil.reserved_kg - (oil.on_hand_kg - (oil.unpumpable_kg or 0.0))


def promised_words(oil: Stock, others: Sequence[str]) -> Iterator[str]:
    """What a charge took from other open batches."""
    if others:
        yield (f"{harmless(oil.code, 40)}: {numbers.kg(short_of(oil))} kg that were promised to "
               f"{and_of([harmless(b, 40) for b in others[:4]])} are no longer there; design that batch again")


def effects_of(before: Outlook, after: Outlook) -> dict[str, tuple[float | None, float | None]]:
    """Property → (as it was to be, as it will be now)."""
    codes = [c for c in dict.fromkeys((*before.predicted, *after.predicted))
             if before.predicted.get(c) is not None or after.predicted.get(c) is not None]
    return {code: (before.predicted.get(code), after.predicted.get(code)) for code in codes}


def effect_words(effects: Mapping[str, tuple[float | None, float | None]], limited: Sequence[str]) -> Iterator[str]:
    """The effects that can be seen in the figures shown."""
    seen = []
    for code, (was, now) in effects.items():
        shown = numbers.value(code, was), numbers.value(code, now)
        if code in (*TOLD, *limited) and shown[0] != shown[1]:
            seen.append(f"{heading(code)} {shown[0]} → {shown[1]} {unit(code)}".rstrip())
    if seen:
        yield f"planned → now: {', '.join(seen)}"
    elif effects:
        yield "no property changes in the figures shown"
