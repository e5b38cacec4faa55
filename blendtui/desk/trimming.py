"""The trim of a measured batch: what to add, found from the laboratory's results and never from the prediction.

What the vessel holds is one stock (measured_batch.py). Additions are sought by solver/trim.py over what is free in the
tanks today, in the room that the vessel has at mixing temperature.
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
from solver.stocks import Stock
from solver.target import Target

from . import batches, numbers, release
from .batch_verdict import FRESH, NO_RESULT, RELEASE, REPEAT, SEVERITY, TRIM, drawn_together, values_of, verdict
from .errors import DeskError
from .measured_batch import measured_batch

if TYPE_CHECKING:
    from solver.trim import Trim

__all__ = ["MOST_FILL", "Effect", "Proposed", "measured_batch", "propose", "proposed_json", "take", "take_proposed",
           "tolerance"]
MOST_FILL = 0.90  # of the capacity at mixing temperature: common practice, trim and foam included
SECONDS = 5.0
AIMS = ("cost", "mass")
SHOWN = ("kv40", "kv100", "vi", "flash", "density15")  # told before and after even where they are not limited
NOISE = {FRESH: "the batch is outside by less than R: a trim on that is trimming noise; draw a fresh sample first",
         REPEAT: "the batch is inside, nearer than 0.59 R: repeat the test before oil is added",
         RELEASE: "the results say release: oil that is added can only take the batch away from where it is"}
UNGUARDED = ("no trim keeps the product's guards: this one meets the limits themselves, and its next result may fall "
             "outside one that it comes near to")


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


# The proposal

def propose(plant: Plant, batch: str, *, aim: str = "cost", chance: float | None = None, stocks: Sequence[str] = ()
            ) -> Proposed:
    """The additions that bring a measured batch inside, by least cost or least mass; writes nothing.

    chance (0.5 to 0.999): each limit is to be met by the next result with it, in place of guards. stocks: the only
    base stocks and rework that may be added; additives are topped up all the same. DeskError while charges are to
    come, without KV40 and KV100 of one sample, or for what cannot be asked; where nothing will do, .trim says why.
    """
    if aim not in AIMS:
        raise DeskError(f"{harmless(aim, 40)!r} is no aim; a trim is sought by cost or by mass")
    made = batches.opened(plant, batch)
    if made.to_charge:
        lines = ", ".join(f"{c.line} ({harmless(c.stock, 40)})" for c in made.to_charge)
        raise DeskError(f"{harmless(batch, 40)} is still being charged: line {lines}; charge what is to come or drop "
                        "it with its reason, then sample, then trim")
    if made.in_vessel_kg < release.LEAST_KG:
        raise DeskError(f"{harmless(batch, 40)}: by the book nothing is in the vessel any more, so nothing can be "
                        "trimmed")
    target = batches.target_of(plant, made)
    whole, samples, guessed = measured_batch(plant, made, target)
    vessel = next((v for v in plant.vessels() if v.vessel == made.head.vessel), None)
    # The formula may name a stock that is out of use by now: it stands in the table, and is left out by name.
    there = _in_steps(plant.stocks(include_retired=True), vessel)
    measured = _with_result(made)
    found = _found(plant, made, whole, there, target, _Wish(aim, chance, tuple(stocks), _room(made, vessel)))
    trim = found.trim
    number = made.rounds + 1
    questions = (*_questions(made, target, trim, samples), *found.questions)
    charges, ordered = _charges(plant, made, trim, number, there)
    words = (*questions, *_round_words(number), *guessed, *_room_words(made, vessel, trim), *found.beside, *trim.notes,
             *ordered)
    return Proposed(made, trim, charges, tuple(dict.fromkeys(words)), number, whole,
                    samples, aim, tuple(_effects(target, trim, whole, measured)), questions,
                    tuple(s for s in plant.stocks() if s.code in (trim.additions_kg or {})))


@dataclass(frozen=True)
class _Wish:
    """What is asked of a trim."""

    aim: str
    chance: float | None
    only: tuple[str, ...]
    room: tuple[float, float] | None  # most litres, at °C


@dataclass(frozen=True)
class _Answer:
    """A trim, and what there is to say of how it was found."""

    trim: Trim
    beside: tuple[str, ...] = ()
    questions: tuple[str, ...] = ()


def _found(plant: Plant, made: Made, whole: Stock, there: Sequence[Stock], target: Target, wish: _Wish) -> _Answer:
    """The trim, with what another one would be.

    Where no trim keeps the product's guards (they are for predictions) the limits themselves are held. A trim that
    brings in more stocks than the product allows gives way to one of the oils that are in the batch, where such a one
    is no absurd one and needs no more drawn off.
    """
    from solver.rows import without_guards
    from solver.trim import additions

    from .law_error import law_sigma

    sigma = law_sigma(plant, target.law, target.product) if wish.chance is not None else None
    live = [s.code for s in plant.stocks()]

    def solve(goal: Target, only: Sequence[str]) -> Trim:
        return additions([whole], there, replace(goal, left_out=_left_out(there, live, only)), fill=wish.room,
                         aim=wish.aim, chance=wish.chance, law_sigma=sigma,
                         whole=bool(_how(made).get("whole", True)), time_limit=SECONDS)

    questions: tuple[str, ...] = ()
    trim = solve(target, wish.only)
    if trim.additions_kg is None and wish.chance is None and without_guards(target) != target:
        bare = solve(without_guards(target), wish.only)
        if bare.additions_kg is not None:
            trim, target, questions = bare, without_guards(target), (UNGUARDED,)
    inside = {s.code for s, _ in whole.contents if s.counted} & set(live)
    if not trim.broken or target.max_stocks is None or wish.only or not inside:
        return _Answer(trim, (), questions)
    within = solve(target, sorted(inside))
    if not within.additions_kg or within.absurd or within.drawn_kg > trim.drawn_kg or len(within.broken) >= len(
            trim.broken):
        return _Answer(trim, (), questions)
    other = ", ".join(f"{code} {numbers.kg(kg)} kg" for code, kg in (trim.additions_kg or {}).items())
    return _Answer(within, (f"only oils that are in it are added, for the product allows {target.max_stocks}; of its "
                            f"whole list it would be {other} for {numbers.cost(trim.cost)}",), questions)


def _with_result(made: Made) -> frozenset[str]:
    """Codes of the properties that the batch as it is has a result of; a VI follows from both KVs."""
    draw = drawn_together(made)
    return frozenset(code for code in {"vi", *(r.property for r in made.results)} if values_of(made, draw, code))


def _how(made: Made) -> dict[str, Any]:
    """How the charges of the order were worked out: most fill, whole steps, temperatures of the tanks."""
    from .formulas import how_of  # which is built on the laboratory's steps, and these on the measured batch above

    return how_of(made)


def _left_out(stocks: Sequence[Stock], live: Sequence[str], only: Sequence[str]) -> frozenset[str]:
    """Stocks out of use, and base stocks and rework that are not among those that alone may be added.

    DeskError for one of those that is not there.
    """
    strangers = [harmless(code, 40) for code in only if code not in live]
    if strangers:
        raise DeskError(f"no stock {', '.join(strangers)}; the plant has {', '.join(live[:12])}")
    return frozenset(s.code for s in stocks if s.code not in live or (only and s.counted and s.code not in only))


def _room(made: Made, vessel: Vessel | None) -> tuple[float, float] | None:
    """Most litres, and the temperature at which they are counted; None: the vessel's capacity is not known."""
    if vessel is None or vessel.capacity_l is None:
        return None
    asked = _how(made).get("most_fill_pct")
    return vessel.capacity_l * (MOST_FILL if asked is None else float(asked) / 100.0), made.head.mix_c


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


def _draw_command(made: Made, trim: Trim) -> str:
    return f"blendtui batch draw {harmless(made.name, 40)} {trim.drawn_kg:g} --as rework --family NAME --why TEXT"


def _room_words(made: Made, vessel: Vessel | None, trim: Trim) -> Iterator[str]:
    if trim.drawn_kg > 0.0:
        yield (f"what is drawn off goes to rework ({_draw_command(made, trim)}); then ask for the trim anew, for its "
               "charges are planned onto what is left")
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

def _charges(plant: Plant, made: Made, trim: Trim, number: int, stocks: Sequence[Stock]
             ) -> tuple[tuple[Charge, ...], tuple[str, ...]]:
    """The additions as lines of the card, after the others, and by which order they stand, in words."""
    from .charge_lines import lines, order_words
    from .vessels import charge_order

    own = charge_order(plant, made.head.vessel)
    rows = lines(trim.additions_kg or {}, stocks, own)
    line = 1 + max((c.line for c in made.charges), default=0)
    place = 1 + max((c.position for c in made.charges), default=0)
    charges = tuple(Charge(made.name, line + n, number, row.stock.code, "", row.kg, row.tolerance_kg,
                           _celsius(made, row.stock.code), position=place + n) for n, row in enumerate(rows))
    return charges, (order_words(rows, own),) if len(rows) > 1 else ()


def tolerance(stock: Stock, kg: float, vessel: Vessel | None) -> float:
    """How far an actual may lie from its plan [kg]."""
    from . import charge_lines

    return charge_lines.tolerance(_in_steps([stock], vessel)[0], kg)


def _in_steps(stocks: Sequence[Stock], vessel: Vessel | None) -> list[Stock]:
    """The stocks with the divisions by which they are weighed into a vessel."""
    from .charge_lines import in_steps

    return list(stocks) if vessel is None else in_steps(stocks, vessel)


def _celsius(made: Made, stock: str) -> float | None:
    """Temperature of a tank as this batch last knew it, or as its order says; None: nobody said."""
    last = (c.celsius for c in reversed(made.charges) if c.stock == stock and c.celsius is not None)
    tanks = _how(made).get("tank_c") or {}
    return next(last, tanks.get(stock, tanks.get("")))


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
                        f"rework ({_draw_command(proposed.made, trim)}), then ask for the trim anew")
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
