"""What the floor screens show of a batch: read once, then only laid out."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from blendtui.desk import batches, scale
from blendtui.store.batch_records import DONE, DROPPED, LEFT, OPEN, PLANNED, RELEASED, Batch, Charge, Made, Vessel
from blendtui.store.errors import NoSuchRow
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.stocks import Stock

DECIDED = ("release", "repeat", "fresh sample", "trim")  # a stage that alone would read as done
MASSES = {"kg": "kg", "L15": "L at 15 °C", "L20": "L at 20 °C"}


@dataclass(frozen=True)
class Seen:
    """A batch as it was read last, with what stands beside it on the floor."""

    made: Made
    vessel: Vessel | None = None  # None: it is out of use
    stocks: Mapping[str, Stock] = field(default_factory=dict)  # every stock there ever was
    lots: Mapping[str, Mapping[str, float]] = field(default_factory=dict)  # of the tanks that it is charged from
    cautions: tuple[Any, ...] = ()
    verdict: Any = None  # on the newest samples; None: none was drawn
    missing: tuple[str, ...] = ()  # for the release
    missed: tuple[str, ...] = ()  # limits and rules that it will miss if the rest is charged as planned

    @property
    def name(self) -> str:
        """The batch's own name, fit to be shown."""
        return harmless(self.made.name, 40)


def newest(plant: Plant) -> str:
    """The batch that a person most likely means: the newest open one, else the newest; empty without any."""
    found = plant.batches(OPEN) or plant.batches()
    return found[0].batch if found else ""


def look(plant: Plant, name: str) -> Seen | None:
    """Read a batch and what stands beside it; None where the plant has no batch yet."""
    from blendtui.desk import batch_lab, batch_outlook, cautions, release

    name = name or newest(plant)
    if not name:
        return None
    made, stocks = plant.batch(name), batches.by_code(plant)
    vessel = next((v for v in plant.vessels() if v.vessel == made.head.vessel), None)
    lots = {code: plant.tank_lots(code) for code in {c.stock for c in made.charges}}
    is_open = made.head.state == OPEN
    verdict = batch_lab.verdict(made, batches.target_of(plant, made)) if made.samples else None
    ahead = batch_outlook.outlook(plant, made) if is_open else None
    going = [stocks[c] for c in dict.fromkeys(c.stock for c in made.charges if c.state != DROPPED) if c in stocks]
    heel = batches.in_vessel(replace(made, head=replace(made.head, heel_ignored=""), charges=()), stocks)
    told = cautions.cautions([*heel, *going], vessel, made.head.mix_c, fill_l=ahead.fill_l if ahead else None)
    return Seen(made, vessel, stocks, lots, told, verdict, tuple(release.missing(plant, made)) if is_open else (),
                ahead.missed if ahead and made.to_charge else ())


def look_or_newest(plant: Plant, name: str) -> Seen | None:
    """The batch of that name; where its order was taken back meanwhile, the newest there is."""
    try:
        return look(plant, name)
    except NoSuchRow:
        return look(plant, "")


def results_of_last(made: Made) -> bool:
    """Has the last sample a result that counts?"""
    last = max((s.sample for s in made.samples), default=None)
    return any(r.sample == last and not r.withdrawn for r in made.results)


# Masses to the division of what weighs them

def decimals(division: float | None) -> int:
    """Decimals that a scale division has: 0 for 10 kg, 1 for 0.5 kg, 2 for 0.05 kg; 1 where none is known.

    >>> [decimals(d) for d in (10.0, 0.5, 0.05, 0.25, None)]
    [0, 1, 2, 2, 1]
    """
    if division is None:
        return 1
    return next((n for n in range(4) if abs(division * 10 ** n - round(division * 10 ** n)) < 1e-9), 3)


def kg(mass: float | None, division: float | None) -> str:
    """A mass [kg] to the decimals of a division, with those that it has beside.

    >>> kg(1234.5, 0.5), kg(1234.0, 10.0), kg(None, 1.0)
    ('1234.5', '1234', '–')
    """
    if mass is None:
        return "–"
    places = decimals(division)
    text = f"{mass:.{places}f}"
    # A recipe that is not to be charged in whole steps has digits that a scale does not show: they are not hidden.
    return text if abs(float(text) - mass) < 5e-4 else f"{mass:.3f}".rstrip("0")


def reading(mass: float, division: float | None) -> str:
    """What a scale shows of a mass [kg]: no finer than its division, whatever a finer scale weighed into it.

    >>> reading(18340.3, 20.0), reading(7765.0, 20.0), reading(152.25, 0.5)
    ('18340', '7765', '152.2')
    """
    return f"{mass:.{decimals(division)}f}"


def tolerance(mass: float, division: float | None) -> str:
    """A tolerance [kg] as a scale can show it, rounded down: what is said to be inside is inside.

    >>> tolerance(41.675, 5.0), tolerance(0.54, 0.1), tolerance(0.3, 1.0)
    ('41', '0.5', '0.3')
    """
    places = decimals(division)
    shown = math.floor(mass * 10 ** places + 1e-9) / 10 ** places
    return f"{shown:.{places}f}" if shown else f"{mass:.2g}"


def division_of(seen: Seen, charge: Charge) -> float | None:
    """What a charge is weighed to: its stock's own division, else the vessel's [kg]."""
    stock = seen.stocks.get(charge.stock)
    if stock is not None and stock.division_kg:
        return stock.division_kg
    return seen.vessel.division_kg if seen.vessel else None


def packages(seen: Seen, charge: Charge) -> str:
    """A planned mass as whole packages, where its stock comes in such: `6 × 180`."""
    stock = seen.stocks.get(charge.stock)
    if stock is None or not stock.package_kg:
        return ""
    count = charge.plan_kg / stock.package_kg
    return f"{round(count)} × {stock.package_kg:g}" if round(count) and abs(count - round(count)) < 1e-6 else ""


# In words

def headline(seen: Seen) -> str:
    """Batch, product, quantity, vessel and stage in one line."""
    head = seen.made.head
    whose = ", ".join(harmless(part, 30) for part in (head.customer, head.order_no) if part)
    mass = kg(head.batch_kg, seen.vessel.division_kg if seen.vessel else None)
    where = f"in {harmless(head.vessel, 20)}" if head.state == OPEN else harmless(head.vessel, 20)
    return (f"{harmless(head.product, 20)}, {mass} kg {where}: {stage_words(seen.made)}"
            + (f"; for {whose}" if whose else ""))


def missed_words(seen: Seen) -> str:
    """What the batch will miss as it is planned, for the line of its next step."""
    return f"! as planned it misses {harmless('; '.join(seen.missed), 200)}; R: put right" if seen.missed else ""


def stage_words(made: Made) -> str:
    """The stage, and when and by whom a batch was closed."""
    head = made.head
    if head.state == OPEN:
        stage = batches.stage(made)
        return f"decided: {stage}" if stage in DECIDED else stage
    why = f", {harmless(head.why, 60)}" if head.why else ""
    return f"{head.state} {batches.when(head.closed_at)} by {harmless(head.closed_by, 30)}{why}"


def next_words(seen: Seen) -> str:
    """What to do next, in one plain sentence, with the key that does it."""
    made, head = seen.made, seen.made.head
    if head.state != OPEN:
        empty = any(o.what == LEFT for o in made.outcomes) or made.in_vessel_kg <= 0.0
        if head.state == RELEASED:
            return ("" if empty else "p packs, and records what stays in the vessel; ") + "w writes the certificate"
        return "nothing; its record stands" if empty else "p draws off what is in the vessel; its record stands"
    if made.to_charge:
        return _charge_words(seen, made.to_charge[0])
    if not any(s.round == made.rounds for s in made.samples):
        return f"mix at {head.mix_c:g} °C, then take a sample: Tab to the laboratory, s"
    last = max(s.sample for s in made.samples)
    if not results_of_last(made):
        return f"type the results of sample {last}: Tab to the laboratory, Enter on a property"
    if seen.verdict is not None and seen.verdict.decision == "no result":
        return f"Enter in the laboratory: still without a result: {harmless(', '.join(seen.verdict.missing), 200)}"
    return {"release": _release_words(seen), "repeat": f"test sample {last} once more and type the new results",
            "fresh sample": "take a fresh sample before anything is added: s in the laboratory",
            "trim": "t in the laboratory shows the trim"}.get(
                batches.stage(made), f"decide on sample {last}: d in the laboratory{_verdict_words(seen)}")


def _verdict_words(seen: Seen) -> str:
    return f" (the results say {seen.verdict.decision})" if seen.verdict is not None else ""


def _release_words(seen: Seen) -> str:
    if not seen.missing:
        return "L releases it, with the name of who does"
    more = f", and {len(seen.missing) - 1} more (L lists them)" if len(seen.missing) > 1 else ""
    return f"before the release: {harmless(seen.missing[0], 120)}{more}"


def _charge_words(seen: Seen, charge: Charge) -> str:
    step = division_of(seen, charge)
    whole = packages(seen, charge)
    lot = charge.lot or lots_words(seen.lots.get(charge.stock, {}))
    shown = scale.readings(seen.made)[charge.line]
    trim = f"trim {charge.round}, " if charge.round else ""
    return (f"{trim}charge {kg(charge.plan_kg, step)} kg of {harmless(charge.stock, 20)}"
            + (f" ({whole} kg)" if whole else "") + (f", lot {harmless(lot, 40)}" if lot else "")
            + f", until the scale shows {reading(shown, seen.vessel.division_kg if seen.vessel else None)} kg")


def lots_words(parts: Mapping[str, float]) -> str:
    """Lots of a tank with their parts: `L-17`, or `L-17 80 %, L-16 20 %`."""
    if len(parts) == 1:
        return harmless(next(iter(parts)), 30)
    return ", ".join(f"{harmless(lot, 20)} {100.0 * part:.0f} %" for lot, part in list(parts.items())[:4])


def person_of(name: str) -> str:
    """A name in the room of a column."""
    return harmless(name, 30)


# The lines of the card

@dataclass(frozen=True)
class CardLine:
    """One charge, as the table shows it."""

    charge: Charge
    cells: Mapping[str, str]


def card_lines(seen: Seen, typed_lots: Mapping[int, str]) -> Iterator[CardLine]:
    """The charges in the order of the card; `typed_lots`: lots typed for charges to come."""
    readings = scale.readings(seen.made)
    to_come = seen.made.to_charge
    for charge in seen.made.charges:
        step = division_of(seen, charge)
        yield CardLine(charge, {
            "mark": mark(charge, to_come), "line": f"{charge.line}" + (f" T{charge.round}" if charge.round else ""),
            "stock": harmless(charge.stock), "plan": kg(charge.plan_kg, step),
            "tolerance": tolerance(charge.tolerance_kg, step), "lot": _lot(seen, charge, typed_lots),
            "scale": reading(readings[charge.line], seen.vessel.division_kg if seen.vessel else None)
            if charge.line in readings else "",
            "actual": "missed" if charge.state == DROPPED else kg(charge.actual_kg, step)
            if charge.state == DONE else "",
            "by": person_of(charge.by), "check": person_of(charge.checked_by) if charge.checked_by else
            "due" if charge.state == DONE else "", "at": batches.when(charge.at), "packages": packages(seen, charge),
            "why": harmless(charge.why)})


def _lot(seen: Seen, charge: Charge, typed_lots: Mapping[int, str]) -> str:
    if charge.state == DONE:
        return harmless(charge.actual_lot) or lots_words(charge.lots)
    if charge.line in typed_lots:
        return f"{harmless(typed_lots[charge.line])} ?"
    return harmless(charge.lot) or lots_words(seen.lots.get(charge.stock, {}))


def mark(charge: Charge, to_come: tuple[Charge, ...]) -> str:
    """A sign: what is charged next, outside its tolerance, or missed."""
    if charge.state == PLANNED:
        return "▸" if to_come and charge.line == to_come[0].line else ""
    if charge.state == DROPPED:
        return "x"
    return "!" if outside(charge) else ""


def outside(charge: Charge) -> bool:
    """Was more or less charged than the tolerance allows?"""
    return (charge.state == DONE and charge.actual_kg is not None
            and abs(charge.actual_kg - charge.plan_kg) > charge.tolerance_kg + 1e-9)


def ordered_words(head: Batch) -> str:
    """What was asked, by whom and when."""
    return (f"{head.asked:g} {MASSES.get(head.unit, head.unit)}, ordered {batches.when(head.ordered_at)} by "
            f"{person_of(head.ordered_by)}")
