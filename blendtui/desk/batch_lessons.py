"""Batches as measured blends: what was charged and what the laboratory found, for the laboratory's lessons.

A batch teaches as a hand blend does, without being typed again: each charge with the values its stock had when it
was charged, a heel or line by what it is, the results of one sample.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace
from datetime import datetime
from statistics import fmean

from blendtui.store import lab_edits
from blendtui.store.batch_records import DONE, PLANNED, Charge, Content, Made, Result, Sample
from blendtui.store.cells import LONGEST_CODE
from blendtui.store.plant import Plant
from blendtui.store.records import Change
from solver.measured import Measured, Part
from solver.properties import is_stock_code
from solver.stocks import Stock

from . import batches

NOTE = "batch {}, sample {}"  # by it a blend that came from a batch is told from one that somebody typed
MINUTE = 16  # characters of an ISO time to the minute: typed times have no seconds …
TYPED = ":00.000Z"  # … and end so


# Results of one sample

def standing(made: Made, sample: int) -> Iterator[Result]:
    """Results of a sample that were not withdrawn."""
    return (r for r in made.results if r.sample == sample and not r.withdrawn)


def means(made: Made, sample: int) -> dict[str, float]:
    """Property code → mean of the results of a sample that stand, in the registry's unit."""
    found: dict[str, list[float]] = {}
    for result in standing(made, sample):
        found.setdefault(result.property, []).append(result.value)
    return {code: fmean(values) for code, values in found.items()}


def of_last_round(made: Made) -> list[Sample]:
    """Samples of the batch as it is now, drawn after its last charge, oldest first."""
    last = max((c.at for c in made.charged), default="")
    return [s for s in made.samples if s.round == made.rounds and not earlier(s.taken_at, last)]


def earlier(taken: str, charged: str) -> bool:
    """Was a sample drawn before a charge? A time that was typed to the minute may be any moment of it."""
    return taken[:MINUTE] < charged[:MINUTE] if taken.endswith(TYPED) else taken < charged


# A batch as a measured blend

def measured_of(made: Made, sample: Sample | int, stocks: Mapping[str, Stock]) -> Measured:
    """A batch when a sample was drawn, as a measured blend. `stocks`: every stock there ever was, by its code.

    Trims that came later are left out; what was drawn off before a trim is drawn from what was there by then.
    """
    found = sample if isinstance(sample, Sample) else next(s for s in made.samples if s.sample == sample)
    there = [(thing, kg) for thing, kg in batches.held(_when_drawn(made, found)) if kg > 0.0]
    results = list(standing(made, found.sample))
    methods = dict.fromkeys(r.method for r in results if r.method)
    return Measured(name_of(made.name, found.sample), made.head.product, _parts(made, there, stocks),
                    means(made, found.sample), _day(max((r.at for r in results), default=found.taken_at)),
                    ", ".join(methods), NOTE.format(made.name, found.sample))


def name_of(batch: str, sample: int) -> str:
    """The name of the measured blend: the batch's, and the sample's number behind it from the second on."""
    tail = "" if sample == 1 else f" S{sample}"
    return batch.replace(";", ",")[:LONGEST_CODE - len(tail)] + tail


def _when_drawn(made: Made, sample: Sample) -> Made:
    """The batch without what came after a sample."""
    charges = tuple(c for c in made.charges if c.round <= sample.round)
    last = max((c.at for c in charges if c.state == DONE), default="")
    # What left after the last charge took its part of everything and changed no share.
    return replace(made, charges=charges, outcomes=tuple(o for o in made.outcomes if o.at < last))


def _parts(made: Made, there: list[tuple[Content | Charge, float]], stocks: Mapping[str, Stock]) -> tuple[Part, ...]:
    """What was in the vessel, largest first: one part for each stock and its values."""
    total = sum(kg for _, kg in there)
    joined: dict[tuple[str, tuple[tuple[str, float], ...]], list[tuple[Content | Charge, float]]] = {}
    for thing, kg in there:
        code = thing.stock or f"{batches.NAMES[thing.what] if isinstance(thing, Content) else ''} of {made.name}"
        joined.setdefault((code, tuple(sorted(thing.cells.items()))), []).append((thing, kg))
    parts: list[Part] = []
    for (code, _), things in sorted(joined.items(), key=lambda each: -sum(kg for _, kg in each[1])):
        first, stock = things[0][0], stocks.get(code)
        taken = any(p.stock == code for p in parts)
        kv40, kv100, density = (first.cells.get(name) for name in batches.DATUM)
        values = {name: value for name, value in first.cells.items() if is_stock_code(name)}
        # Of one stock with other values (another lot) the oil stays the same: lessons of a pair go by the oil.
        parts.append(Part(_own_code(code, first) if taken else code[:LONGEST_CODE], sum(kg for _, kg in things) / total,
                          kv40, kv100, density, _lots(things), (stock.oil if stock else "") or (code if taken else ""),
                          values))
    return tuple(parts)


def _own_code(code: str, thing: Content | Charge) -> str:
    tail = f" (charge {thing.line})" if isinstance(thing, Charge) else f" ({thing.what} {thing.line})"
    return code[:LONGEST_CODE - len(tail)] + tail


def _lots(things: list[tuple[Content | Charge, float]]) -> str:
    """The lots by name, as far as they have one."""
    from .topping_up import EARLIER

    lots = {lot: None for thing, _ in things if isinstance(thing, Charge)
            for lot in (thing.lots or ({thing.actual_lot: 1.0} if thing.actual_lot else {})) if lot != EARLIER}
    return ", ".join(lots)


def _day(iso: str) -> str:
    """The local day of a time of the record."""
    return datetime.fromisoformat(iso.replace("Z", "+00:00")).astimezone().date().isoformat()


def why_not(made: Made, sample: Sample | int, stocks: Mapping[str, Stock]) -> str:
    """Why a sample of a batch cannot teach, in words; empty: it can."""
    found = sample if isinstance(sample, Sample) else next(s for s in made.samples if s.sample == sample)
    rounds = [c for c in made.charges if c.round <= found.round]
    if any(c.state == PLANNED or (c.state == DONE and earlier(found.taken_at, c.at)) for c in rounds):
        return f"sample {found.sample} was drawn before all was charged"
    blend = measured_of(made, found, stocks)
    if not blend.values:
        return f"sample {found.sample} has no result"
    unknown = [p.stock for p in blend.parts if p.stock not in stocks and (p.kv40 is None or p.kv100 is None)]
    if unknown:
        return f"of {', '.join(unknown)} no viscosity is known"
    return ""


def lesson_changes(plant: Plant, made: Made, sample: Sample | int) -> list[Change]:
    """The changes that put a sample of a batch on the laboratory's record; none where it is there or cannot teach.

    Where results have changed since it was put there it is recorded anew, unless a lesson in use rests on it.
    """
    stocks = batches.by_code(plant)
    if why_not(made, sample, stocks):
        return []
    blend = measured_of(made, sample, stocks)
    before = next((b for b in plant.measured() if b.name == blend.name), None)
    if before is None:
        return lab_edits.new_measured(plant, blend)
    rests = any(blend.name in lesson.evidence for lesson in plant.lessons())
    if before.note != blend.note or rests or _same(before, blend):
        return []
    return lab_edits.dropped_measured(plant, blend.name) + lab_edits.new_measured(plant, blend)


def renewed_changes(plant: Plant, made: Made, sample: Sample | int) -> list[Change]:
    """As `lesson_changes`, and what other samples of the batch taught by results that have changed since: recorded
    anew, or dropped where none of their results stands any more."""
    number = sample.sample if isinstance(sample, Sample) else sample
    found, known = lesson_changes(plant, made, sample), {b.name: b for b in plant.measured()}
    evidence = {name for lesson in plant.lessons() for name in lesson.evidence}
    for other in (s for s in made.samples if s.sample != number):
        name = name_of(made.name, other.sample)
        if any(True for _ in standing(made, other.sample)):
            found += lesson_changes(plant, made, other) if name in known else []
        elif name in known and name not in evidence and known[name].note == NOTE.format(made.name, other.sample):
            found += lab_edits.dropped_measured(plant, name)
    return found


def _same(one: Measured, other: Measured) -> bool:
    """Do two blends say the same? Shares are kept to ten decimals of a per cent."""
    shares = [{p.stock: round(100.0 * p.share, 8) for p in each.parts} for each in (one, other)]
    return dict(one.values) == dict(other.values) and shares[0] == shares[1]
