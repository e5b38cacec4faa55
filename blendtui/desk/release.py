"""Release of a batch: what is still missing, each named, and the step itself.

**Lots.** Every charge names a lot, bulk tanks included: of a tank of which no receipt was ever recorded the lot is
not known, and it is received (which gives the tank its lot from then on) or typed on the charge (a correction). Where
a tank held oil before its first receipt the lots received are enough, and the rest is remarked.
**Results.** They are those of the samples that the verdict counts (batch_verdict.py): the newest after the last
charge. KV40 and KV100 come from one sample. What no result of the record can tell (pumping, HTHS) is said on the
certificate.
**Persons.** Nobody checks his own charge.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import DROPPED, RELEASED, Charge, Decision, Made, Sample
from blendtui.store.clock import words
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.properties import lookup, volume_at
from solver.stocks import Stock, StockTable
from solver.target import Target

from . import batch_lessons, batches, numbers
from .errors import DeskError

if TYPE_CHECKING:
    from solver.requirements import Requirement

FREE_ROUNDS = 2  # trims that need no reason: practice says at most two, then the formulator
LEAST_KG = 0.1  # less in a vessel is what sums of masses are off, and no oil
TOLD = 0.001  # part of a charge of which no lot is known from which on it is remarked
STEP = 5.0  # s: what the clocks of two machines, or of one that is being set right, may differ by


# On what a release rests: batch_verdict.py is built on these two, so it is imported inside the functions below

def asked_of(target: Target) -> tuple[tuple[Requirement, ...], tuple[str, ...]]:
    """What a target limits and a result can tell, and what its grade leaves to be tested otherwise.

    Limits that a grade sets only where stocks have the value (cold cranking) are among them: a batch can be measured.
    """
    from solver.grades import grade
    from solver.requirements import required

    known = grade(target.grade).if_known if target.grade.strip() else ()
    measured = Stock("BATCH", values={x.property: x.high for x in known if x.high is not None})
    needs, tests = required(target, StockTable([measured]))
    return tuple(need for need in needs if volume_at(need.code) is None), tests


def newest(made: Made) -> Sample | None:
    """The sample on which a release rests: the newest after the last charge that has a result, else the newest."""
    drawn = batch_lessons.of_last_round(made)
    measured = [s for s in drawn if any(True for _ in batch_lessons.standing(made, s.sample))]
    return (measured or drawn or [None])[-1]


# What is missing

def missing(plant: Plant, made: Made) -> tuple[str, ...]:
    """Everything that a release still lacks, each named; empty: it can be released."""
    target = batches.target_of(plant, made)
    return (*_of_charges(made), *_of_results(made, target))


def _of_charges(made: Made) -> Iterator[str]:
    """What charges lack, those that lack the same together: a card may have many lines."""
    counts = [c for c in made.charges if c.state != DROPPED]
    done = [c for c in counts if c.actual_kg is not None]
    alone = [c for c in done if c.checked_by and batches.same_person(c.by, c.checked_by)]
    if not made.charges:
        yield "no charge was ever planned"
    elif not counts:
        yield "nothing was charged: every line was dropped"
    elif made.charged and made.in_vessel_kg < LEAST_KG:
        yield "nothing of it is in the vessel any more"
    yield from _named("not charged", [c for c in counts if c.actual_kg is None],
                      lambda c: f"{numbers.kg(c.plan_kg)} kg")
    yield from _named("no second check", [c for c in done if not c.checked_by])
    yield from _named("charged and checked by one person", alone, lambda c: harmless(c.by, 40),
                      ": nobody releases what was checked by the one who charged it; let another person check it")
    yield from _named("lot not known", [c for c in done if not known_lots(c)], None,
                      ": receive it or type it as a correction of the charge")
    yield from _named("outside tolerance and no reason", [c for c in done if _off(c) and not c.why], _off_words)
    yield from _named("dropped and no reason", [c for c in made.charges if c.state == DROPPED and not c.why])
    yield from _named("of a third trim or later and no reason",
                      [c for c in counts if c.round > FREE_ROUNDS and not c.why])


def _named(what: str, charges: Sequence[Charge], more: Callable[[Charge], str] | None = None, do: str = ""
           ) -> list[str]:
    """One thing that some charges lack, with each of them: `no second check: lines 1 (A), 2 (B)`."""
    each = [f"{c.line} ({harmless(c.stock, 40)}{', ' + more(c) if more else ''})" for c in charges]
    return [f"{what}: line{'s' if len(each) > 1 else ''} {', '.join(each)}{do}"] if each else []


def known_lots(charge: Charge) -> list[str]:
    """The lots of a charge that have a name; of oil from before a tank's first receipt nobody knows any."""
    from .topping_up import EARLIER

    return [lot for lot in charge.lots or ([charge.actual_lot] if charge.actual_lot else []) if lot != EARLIER]


def _off(charge: Charge) -> bool:
    """Is an actual outside its tolerance?"""
    off = abs((charge.actual_kg or 0.0) - charge.plan_kg)
    return charge.tolerance_kg > 0.0 and off > charge.tolerance_kg * (1.0 + 1e-9)


def _off_words(charge: Charge) -> str:
    return f"{numbers.kg(charge.actual_kg)} for {numbers.kg(charge.plan_kg)} ± {numbers.kg(charge.tolerance_kg)} kg"


def _of_results(made: Made, target: Target) -> Iterator[str]:
    from .batch_verdict import NO_RESULT, PAIR, RELEASE, drawn_together, standing, verdict

    draw = drawn_together(made)
    if not draw:
        yield "no sample was drawn after the last charge" if made.samples else "no sample was drawn"
        return
    says, of = verdict(made, target), f"sample {', '.join(str(s.sample) for s in draw)}"
    for limit in (x for x in says.limits if x.decision == NO_RESULT):
        codes = PAIR if limit.property == "vi" else (limit.property,)
        withdrawn = any(r.withdrawn and r.property in codes and r.sample in says.samples for r in made.results)
        yield (f"no result of {lookup(limit.property).name} on {of}" + (": it was withdrawn" if withdrawn else "")
               + (" (it takes KV40 and KV100 of one sample)" if limit.property == "vi" else ""))
    each = [[bool(standing(made, s, code)) for code in PAIR] for s in draw]
    if all(map(any, zip(*each, strict=True))) and not any(map(all, each)):
        yield f"KV40 and KV100 on {of} are not of one sample"
    decided = decision_on(made, draw[0].sample)
    if decided is None:
        yield f"nothing is decided on sample {draw[0].sample}"
        return
    if any(r.at > decided.at for s in says.samples for r in batch_lessons.standing(made, s)):
        yield f"results of {of} came after the decision on it: decide again"
    elif decided.words and decided.words != "; ".join(says.words):
        yield f"what the results of {of} say has changed since the decision on it: decide again"
    if decided.decision != RELEASE:
        yield f"the decision on sample {decided.sample} is {decided.decision}, not release"
    elif says.decision not in (RELEASE, NO_RESULT) and not decided.why:
        yield f"sample {decided.sample} was decided to be released where its results say {says.decision}, and no reason"


def decision_on(made: Made, sample: int) -> Decision | None:
    """The last decision on a sample."""
    return next((d for d in reversed(made.decisions) if d.sample == sample), None)


# What may be remarked

def remarks(plant: Plant, made: Made) -> tuple[str, ...]:
    """What does not stand in the way of a release and should be known."""
    from .batch_outlook import broken
    from .batch_verdict import RELEASE
    from .formulas import changes_since
    from .topping_up import EARLIER

    said = []
    since = changes_since(plant, made)
    if since:
        said.append(f"{harmless(made.head.product, 40)} has changed since this batch was ordered ({', '.join(since)}): "
                    f"it is judged by the formula as it was (journal entry {made.head.formula_entry})")
    for charge in made.charged:
        part = charge.lots.get(EARLIER, 0.0)
        if part >= TOLD and known_lots(charge):
            said.append(f"line {charge.line} ({harmless(charge.stock, 40)}): {100.0 * part:.3g} % of it is from before "
                        "the tank's first receipt, and of no known lot")
    said += [f"what was charged is not as the product says: {words}" for words in broken(plant, made)]
    on = newest(made)
    decided = decision_on(made, on.sample) if on is not None else None
    if decided is not None and decided.decision == RELEASE and decided.why:
        said.append(f"released with a reason: {harmless(decided.why, 200)}")
    tests = asked_of(batches.target_of(plant, made))[1]
    return (*said, *(f"not told by these results: {test}" for test in tests))


# The step

def release(plant: Plant, batch: str, *, by: str = "", why: str = "", sure: bool = False) -> Made:
    """Release a batch; DeskError names everything that is missing. The batch becomes a measured blend in one step."""
    who = batches.person(plant, by)

    def make() -> Step:
        made = batches.opened(plant, batch)
        lacks = missing(plant, made)
        if lacks:
            raise DeskError(f"{harmless(batch, 40)} cannot be released: {'; '.join(lacks)}")
        at = clock(plant, made, sure)
        closed = replace(made.head, state=RELEASED, closed_at=at, closed_by=who, why=harmless(why, 400))
        changes = [changed(made.head, state=closed.state, closed_at=at, closed_by=who, why=closed.why)]
        on = newest(made)
        assert on is not None  # else it would be missing
        changes += batch_lessons.renewed_changes(plant, made, on)
        return Step(tuple(changes), f"{batch} released", why, replace(made, head=closed))

    done = plant.step(make).result
    assert isinstance(done, Made)
    return done


def clock(plant: Plant, made: Made, sure: bool) -> str:
    """This moment; questioned where the clock stands before the batch's own record or the plant's last entry."""
    from .batch_doubts import clock

    back = plant.clock_back()
    if back is not None and back > STEP:
        batches.question(sure, f"the clock stands {words(back)} before the last entry of the record: was it set back? "
                               "Set it, or say that it is right")
    return clock(made, sure)
