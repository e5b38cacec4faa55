"""The trim of a measured batch: what to add, found from the laboratory's results and never from the prediction.

What the vessel holds is one stock with the values that the laboratory found (the mean of what stands on the samples
that count), the mass that the book says, and the composition that was charged. What was not measured is taken from the
prediction and said to be. Additions are sought by solver/trim.py over what is free in the tanks today.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from blendtui.store.batch_edits import added, changed
from blendtui.store.batch_records import Charge, Made, Vessel
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.errors import SolverError
from solver.properties import lookup
from solver.stocks import Stock
from solver.target import Target

from . import batches, numbers, release
from .batch_verdict import (
    FRESH,
    NO_RESULT,
    PAIR,
    RELEASE,
    REPEAT,
    SEVERITY,
    TRIM,
    drawn_together,
    mean_of,
    verdict,
)
from .errors import DeskError
from .reason_words import heading

if TYPE_CHECKING:
    from solver.trim import Trim

MOST_FILL = 0.90  # of the capacity at mixing temperature: common practice, trim and foam included
SECONDS = 5.0
AIMS = ("cost", "mass")
SHOWN = ("kv40", "kv100", "vi", "flash", "density15")  # told before and after even where they are not limited
NOISE = {FRESH: "the batch is outside by less than R: a trim on that is trimming noise; draw a fresh sample first",
         REPEAT: "the batch is inside, nearer than 0.59 R: repeat the test before oil is added",
         RELEASE: "the results say release: oil that is added can only take the batch away from where it is"}


@dataclass(frozen=True)
class Effect:
    """One property before and after a trim; None: unknown, or not limited on that side."""

    property: str
    before: float | None
    after: float | None
    low: float | None
    high: float | None
    met: bool | None  # after, guards included
    measured: bool  # is what stands before a result of the laboratory


@dataclass(frozen=True)
class Proposed:
    """A trim, and the charges that it would be."""

    made: Made
    trim: Trim
    charges: tuple[Charge, ...]  # of the next round, in the order of the card
    words: tuple[str, ...]  # what is to be known before it is taken, warnings first
    round: int
    batch: Stock  # the measured batch
    samples: tuple[int, ...]  # whose results it rests on
    aim: str
    effects: tuple[Effect, ...] = ()
    questions: tuple[str, ...] = ()  # of the words: those that taking it asks about
    used: tuple[Stock, ...] = ()  # the stocks of the additions as they were when it was worked out

    @property
    def found(self) -> bool:
        """Is there anything to add?"""
        return bool(self.trim.additions_kg)


# The measured batch

def measured_batch(plant: Plant, made: Made, target: Target) -> tuple[Stock, tuple[int, ...], tuple[str, ...]]:
    """The batch as one stock of its measured values, the samples they are of, and what was not measured.

    DeskError without KV40 and KV100 of one sample drawn after the last charge.
    """
    draw = drawn_together(made)
    if not draw:
        raise DeskError(f"{harmless(made.name, 40)} has no sample of what is in the vessel now: a trim starts from the "
                        "measured batch, not from the predicted one; draw a sample and measure KV40 and KV100")
    if not any(all(mean_of(made, s, code) for code in PAIR) for s in draw):
        have = ", ".join(heading(code) for code in PAIR if any(mean_of(made, s, code) for s in draw)) or "neither"
        raise DeskError(f"sample {', '.join(str(s.sample) for s in draw)} of {harmless(made.name, 40)} has {have}: a "
                        "trim moves both viscosities, so measure KV40 and KV100 on one sample first")
    measured: dict[str, float] = {}
    for code in dict.fromkeys(r.property for r in made.results if r.property != "vi"):
        found = [m[0] for m in (mean_of(made, s, code) for s in draw) if m is not None]
        if found:
            measured[code] = sum(found) / len(found)
    stocks = batches.by_code(plant)
    expected = _predicted(made, target, stocks)
    asked = [need.code for need in release.asked_of(target)[0] if need.code != "vi"]
    guessed = tuple(code for code in dict.fromkeys([*asked, "density15"]) if code not in measured)
    cells = {**{c: v for c, v in expected.items() if v is not None and c != "vi"}, **measured}
    name = batches.CODE if batches.CODE not in stocks else f"{batches.CODE} of {made.name}"
    batch = batches.as_stock(name, cells, name="measured batch", in_vessel_kg=made.in_vessel_kg, source="own",
                             contents=batches.made_of(batches.composition(made), stocks))
    return batch, tuple(s.sample for s in draw), tuple(_guess_words(code, cells.get(code)) for code in guessed)


def _predicted(made: Made, target: Target, stocks: dict[str, Stock]) -> dict[str, float | None]:
    """What is predicted of what was charged; nothing where part of it has no known viscosity."""
    from solver.trim import effect

    try:
        return effect(batches.in_vessel(made, stocks), target=target)
    except SolverError:
        return {}


def _guess_words(code: str, value: float | None) -> str:
    entry = lookup(code)
    if value is None:
        return f"{entry.name} was not measured, and cannot be predicted"
    told = f"{numbers.value(code, value)} {entry.unit}".rstrip()
    return f"{entry.name} was not measured: {told} is the prediction, not a result"


# The proposal

def propose(plant: Plant, batch: str, *, aim: str = "cost", chance: float | None = None, stocks: Sequence[str] = ()
            ) -> Proposed:
    """The additions that bring a measured batch inside, by least cost or least mass; writes nothing.

    chance (0.5 to 0.999): each limit is to be met by the next result with it, in place of guards. stocks: the only
    base stocks and rework that may be added; additives are topped up all the same. DeskError while charges are to
    come, without KV40 and KV100 of one sample, or for what cannot be asked; where nothing will do, .trim says why.
    """
    from solver.trim import additions

    from .law_error import law_sigma

    if aim not in AIMS:
        raise DeskError(f"{harmless(aim, 40)!r} is no aim; a trim is sought by cost or by mass")
    made = batches.opened(plant, batch)
    if made.to_charge:
        lines = ", ".join(f"{c.line} ({harmless(c.stock, 40)})" for c in made.to_charge)
        raise DeskError(f"{harmless(batch, 40)} is still being charged: line {lines}; charge what is to come or drop "
                        "it with its reason, then sample, then trim")
    target = batches.target_of(plant, made)
    whole, samples, guessed = measured_batch(plant, made, target)
    vessel = next((v for v in plant.vessels() if v.vessel == made.head.vessel), None)
    sigma = law_sigma(plant, target.law, target.product) if chance is not None else None
    measured = _with_result(made, samples)
    there = _in_steps(plant.stocks(), vessel)
    allowed = replace(target, left_out=_left_out(there, stocks))
    trim = additions([whole], there, allowed, fill=_room(made, vessel), aim=aim, chance=chance,
                     law_sigma=sigma, time_limit=SECONDS)
    number = made.rounds + 1
    questions = tuple(_questions(made, target, trim, samples))
    words = (*questions, *_round_words(number), *guessed, *_room_words(made, vessel), *trim.notes)
    return Proposed(made, trim, _charges(plant, made, trim, number, there), tuple(dict.fromkeys(words)), number, whole,
                    samples, aim, tuple(_effects(target, trim, whole, measured)), questions,
                    tuple(s for s in plant.stocks() if s.code in (trim.additions_kg or {})))


def _with_result(made: Made, samples: Sequence[int]) -> frozenset[str]:
    """Codes of the properties that the samples have a result of; a VI follows from both KVs."""
    found = {r.property for r in made.results if r.sample in samples and not r.withdrawn}
    return frozenset(found | ({"vi"} if set(PAIR) <= found else set()))


def _left_out(stocks: Sequence[Stock], only: Sequence[str]) -> frozenset[str]:
    """Base stocks and rework that are not among those that alone may be added; DeskError for one that is not there."""
    strangers = [code for code in only if all(s.code != code for s in stocks)]
    if strangers:
        raise DeskError(f"no stock {', '.join(harmless(code, 40) for code in strangers)}; the plant has "
                        f"{', '.join(s.code for s in stocks[:12])}")
    return frozenset(s.code for s in stocks if only and s.counted and s.code not in only)


def _room(made: Made, vessel: Vessel | None) -> tuple[float, float] | None:
    """Most litres, and the temperature at which they are counted; None: the vessel's capacity is not known."""
    if vessel is None or vessel.capacity_l is None:
        return None
    return MOST_FILL * vessel.capacity_l, made.head.mix_c


def _questions(made: Made, target: Target, trim: Trim, samples: Sequence[int]) -> Iterator[str]:
    """What is unlikely or unwise of a trim: told, and asked about when it is taken."""
    says = verdict(made, target)
    judged = [x.decision for x in says.limits if x.decision != NO_RESULT]
    worst = says.decision if says.decision != NO_RESULT else max(judged, key=SEVERITY.index, default=RELEASE)
    if worst != TRIM:
        # Heights or repeats that do not agree say so in the remarks, and no limit does.
        yield NOISE[worst] if worst in judged else f"the results say {worst}: {'; '.join(says.remarks[:2])}"
    decided = next((d for d in reversed(made.decisions) if d.sample == samples[0]), None)
    if decided is None:
        yield f"nothing is decided on sample {samples[0]} yet: decide first, so that the record says why oil was added"
    elif decided.decision != TRIM:
        yield f"the decision on sample {samples[0]} is {decided.decision}, not trim"
    if trim.absurd:
        yield next((x for x in trim.notes if "absurd" in x), "the trim is absurd: more than a quarter of the content")
    yield from trim.broken
    if trim.chance is not None and trim.reached is False:
        yield f"not every limit reaches the chance of {100.0 * trim.chance:g} % that was asked"


def _round_words(number: int) -> Iterator[str]:
    if number > release.FREE_ROUNDS:
        yield f"this is trim {number}: at most two, then the formulator; it is taken only with a reason"


def _room_words(made: Made, vessel: Vessel | None) -> Iterator[str]:
    yield f"{numbers.batch(made.in_vessel_kg)} kg are in the vessel by the book"
    if vessel is None or vessel.capacity_l is None:
        name = harmless(made.head.vessel, 40) or "the vessel"
        yield f"the capacity of {name} is not known, so whether there is room for this is not known either"


def _effects(target: Target, trim: Trim, batch: Stock, measured: frozenset[str]) -> Iterator[Effect]:
    """Every property that is limited or shown, before and after."""
    own = {"kv40": batch.kv40, "kv100": batch.kv100, "density15": batch.density15, **batch.values}
    after = trim.recipe.predicted if trim.recipe is not None else {}
    judged = {x.property: x for x in trim.recipe.limits} if trim.recipe is not None else {}
    limits = {need.code: need for need in release.asked_of(target)[0]}
    for code in dict.fromkeys([*SHOWN[:3], *limits, *SHOWN[3:]]):
        before, then = own.get(code, trim.before.get(code)), after.get(code)
        if before is None and then is None:
            continue
        need, found = limits.get(code), judged.get(code)
        yield Effect(code, before, then, need.low if need else None, need.high if need else None,
                     found.met if found is not None else None, code in measured)


# The charges

def _charges(plant: Plant, made: Made, trim: Trim, number: int, stocks: Sequence[Stock]) -> tuple[Charge, ...]:
    """The additions as lines of the card, after the others, in the order of charging."""
    from .charge_lines import lines
    from .vessels import charge_order

    line = 1 + max((c.line for c in made.charges), default=0)
    place = 1 + max((c.position for c in made.charges), default=0)
    rows = lines(trim.additions_kg or {}, stocks, charge_order(plant, made.head.vessel))
    return tuple(Charge(made.name, line + n, number, row.stock.code, "", row.kg, row.tolerance_kg,
                        _celsius(made, row.stock.code), position=place + n) for n, row in enumerate(rows))


def tolerance(stock: Stock, kg: float, vessel: Vessel | None) -> float:
    """How far an actual may lie from its plan [kg]."""
    from . import charge_lines

    return charge_lines.tolerance(_in_steps([stock], vessel)[0], kg)


def _in_steps(stocks: Sequence[Stock], vessel: Vessel | None) -> list[Stock]:
    """The stocks with the divisions by which they are weighed into a vessel."""
    from .charge_lines import in_steps

    return list(stocks) if vessel is None else in_steps(stocks, vessel)


def _celsius(made: Made, stock: str) -> float | None:
    """Temperature of a tank as this batch knows it; None: nobody said."""
    return next((c.celsius for c in reversed(made.charges) if c.stock == stock and c.celsius is not None), None)


# The step

def take(plant: Plant, batch: str, *, aim: str = "cost", chance: float | None = None, stocks: Sequence[str] = (),
         by: str = "", why: str = "", sure: bool = False) -> Made:
    """Plan a trim: its charges join the card as the next round and reserve their oil.

    DeskError where there is none, where oil must be drawn off first, and for a third one without a reason;
    Questioned where it is unwise (see `propose`).
    """
    proposed = propose(plant, batch, aim=aim, chance=chance, stocks=stocks)
    return take_proposed(plant, proposed, by=by, why=why, sure=sure)


def take_proposed(plant: Plant, proposed: Proposed, *, by: str = "", why: str = "", sure: bool = False) -> Made:
    """Plan a trim as it was proposed and shown; DeskError where the batch or its stocks have changed since."""
    batch = proposed.made.name
    reason = harmless(why.strip(), 400)
    _refuse(proposed, reason)
    if proposed.questions:
        batches.question(sure, "; ".join(proposed.questions))

    def make() -> Step:
        made = batches.opened(plant, batch)
        release.clock(plant, made, sure)
        if made != proposed.made or any(_values(plant.stock(s.code)) != _values(s) for s in proposed.used):
            raise DeskError(f"{harmless(batch, 40)} or a stock of its trim has changed since it was worked out; look "
                            "again and ask for the trim anew")
        total = made.in_vessel_kg + sum(c.plan_kg for c in proposed.charges)
        noted = reason if proposed.round > release.FREE_ROUNDS else ""
        rows = [replace(c, why=noted) for c in proposed.charges]
        changes = [changed(made.head, batch_kg=total), *(x for row in rows for x in added(row))]
        told = ", ".join(f"{c.stock} {numbers.kg(c.plan_kg)} kg" for c in rows)
        done = replace(made, head=replace(made.head, batch_kg=total), charges=(*made.charges, *rows))
        what = f"{batch} trim {proposed.round} by {batches.person(plant, by)}: {told}"
        return Step(tuple(changes), what, reason, done)

    done = plant.step(make).result
    assert isinstance(done, Made)
    return done


def _values(stock: Stock) -> Stock:
    """A stock without its quantities: those are watched over by the promise itself."""
    return replace(stock, on_hand_kg=None, reserved_kg=0.0)


def _refuse(proposed: Proposed, reason: str) -> None:
    trim, name = proposed.trim, harmless(proposed.made.name, 40)
    if trim.additions_kg is None:
        raise DeskError(f"{name}: no trim: {'; '.join(trim.notes)}")
    if trim.drawn_kg > 0.0:
        raise DeskError(f"{name}: the room is too small: draw off {numbers.kg(trim.drawn_kg)} kg first, which goes to "
                        "rework (blendtui batch draw), then ask for the trim anew")
    if not trim.additions_kg:
        raise DeskError(f"{name} meets every limit as it was measured; there is nothing to add")
    if proposed.round > release.FREE_ROUNDS and not reason:
        raise DeskError(f"{name} has had {proposed.round - 1} trims: at most two, then the formulator; a further one "
                        "needs a reason (--why TEXT)")


# JSON

def proposed_json(proposed: Proposed) -> dict[str, Any]:
    """A trim, numbers unrounded."""
    trim = proposed.trim
    return {
        "batch": proposed.made.name, "round": proposed.round, "samples": list(proposed.samples), "aim": proposed.aim,
        "status": trim.status, "in_vessel_kg": proposed.batch.in_vessel_kg,
        "additions_kg": None if trim.additions_kg is None else dict(trim.additions_kg), "added_kg": trim.added_kg,
        "packages": dict(trim.packages), "total_kg": trim.total_kg, "litres": trim.litres,
        "mix_c": proposed.made.head.mix_c, "drawn_first_kg": trim.drawn_kg, "cost": trim.cost, "gap": trim.gap,
        "absurd": trim.absurd, "least_mass_kg": trim.least_mass_kg,
        "chance": trim.chance, "reached": trim.reached, "chances": dict(trim.chances), "chance_all": trim.together,
        "effects": [{"property": e.property, "before": e.before, "measured": e.measured, "after": e.after,
                     "low": e.low, "high": e.high, "met": e.met} for e in proposed.effects],
        "charges": [{"line": c.line, "stock": c.stock, "plan_kg": c.plan_kg, "tolerance_kg": c.tolerance_kg,
                     "celsius": c.celsius} for c in proposed.charges],
        "words": list(proposed.words)}
