"""The laboratory's steps on a batch: samples, results, what they say (batch_verdict.py) and what is decided.

Every result stays on record. Repeated results all count, by their mean; one that is withdrawn keeps its figure, its
reason and the person. So a retest until it passes is seen by everyone who reads the verdict.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from blendtui.store.batch_edits import added, changed
from blendtui.store.batch_records import Decision, Made, Result, Sample
from blendtui.store.charging import property_spelt
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Step
from solver.errors import TargetError
from solver.properties import lookup, volume_at

from . import batch_doubts, batches
from .batch_lessons import MINUTE, renewed_changes
from .batch_outlook import predicted
from .batch_verdict import DECISIONS, NO_RESULT, RELEASE, LimitVerdict, Verdict, verdict
from .errors import DeskError
from .lab import read_result
from .reason_words import and_of, heading
from .release import clock

__all__ = ["DECISIONS", "LimitVerdict", "Verdict", "decide", "property_of", "results", "sample", "sampled", "verdict",
           "withdraw"]
LONGEST = 200  # characters of a typed reason or note


# Samples

def sample(plant: Plant, batch: str, *, taken: str = "", place: str = "", celsius: float | None = None,
           note: str = "", by: str = "", sure: bool = False) -> Sample:
    """Record that a sample was drawn: when (typed as local time; empty: now), where, at which temperature [°C].

    DeskError for one that cannot be (in the future, of an empty vessel); Questioned for one drawn before the last
    charge, while charges are to come, or at a temperature far from the mixing temperature.
    """
    who, at = batches.person(plant, by), batches.moment(taken) if taken.strip() else ""
    batch_doubts.refuse_temperature(celsius)

    def make() -> Step:
        made = batches.opened(plant, batch)
        if at:
            batch_doubts.refuse_future("a sample", at)
        moment = at or clock(plant, made, sure)
        batch_doubts.ask(sure, batch_doubts.of_sample(made, moment, celsius))
        number = 1 + max((s.sample for s in made.samples), default=0)
        drawn = Sample(made.name, number, made.rounds, moment, who, harmless(place.strip(), 40), celsius,
                       harmless(note.strip(), LONGEST))
        return Step(tuple(added(drawn)), f"{made.name} sample {number} drawn", result=drawn)

    drawn = plant.step(make).result
    assert isinstance(drawn, Sample)
    return drawn


def sampled(made: Made, number: int | None) -> Sample:
    """A sample by its number, None: the newest; DeskError where there is none."""
    found = [s for s in made.samples if number in (None, s.sample)]
    if not found:
        have = and_of([str(s.sample) for s in made.samples])
        raise DeskError(f"{harmless(made.name, 40)} has no sample {'' if number is None else number}".rstrip()
                        + (f"; it has {have}" if have else "; draw one: blendtui batch sample "
                           f"{harmless(made.name, 40)}"))
    return found[-1]


# Results

def results(plant: Plant, batch: str, sample: int | None, values: Mapping[str, str], *, method: str = "", at: str = "",
            by: str = "", sure: bool = False) -> Verdict:
    """Put results of a sample on record (property → as typed, with its unit if it is another) and say what all say.

    `sample`: its number, None for the newest. `method`: empty for the registry's. `at`: when it was found (local
    time), empty for now. DeskError for a result that cannot be (dated before its sample, KVs swapped, no number);
    Questioned for one far from the prediction or from its repeats.
    """
    who, time = batches.person(plant, by), batches.moment(at) if at.strip() else ""
    typed = _typed(values)
    asked = harmless(method.strip(), 60)
    expected = {} if sure else predicted(plant, plant.batch(batch))  # outside the step: the others need not wait for it

    def make() -> Step:
        made = batches.opened(plant, batch)
        of = sampled(made, sample)
        if time:
            batch_doubts.refuse_future("a result", time)
        moment = time or clock(plant, made, sure)
        _refuse_earlier(of, moment)
        batch_doubts.refuse_swapped(made, of, typed)
        batch_doubts.ask(sure, batch_doubts.of_results(made, of, typed, expected))
        first = 1 + max((r.line for r in made.results if r.sample == of.sample), default=0)
        rows = [Result(made.name, of.sample, line, code, value, asked or lookup(code).method, moment, who)
                for line, (code, value) in enumerate(typed.items(), first)]
        changes = [change for row in rows for change in added(row)]
        told = ", ".join(f"{heading(row.property)} {row.value:.6g}" for row in rows)
        return Step(tuple(changes), f"{made.name} sample {of.sample}: {told}")

    plant.step(make)
    made = plant.batch(batch)
    return verdict(made, batches.target_of(plant, made))


def property_of(typed: str) -> str:
    """Code of a property as a person may type it (KV40, Flash point, sulphur); DeskError for none."""
    plain = typed.strip()
    for code in (plain, plain.lower().replace("−", "-").replace(" ", "")):
        try:
            if volume_at(lookup(code).code) is None:
                return code
        except TargetError:
            pass
    names = {"viscosity index": "vi", "density": "density15", "density at 15 °c": "density15"}
    found = names.get(plain.lower()) or property_spelt(plain)
    if found is None:
        raise DeskError(f"no property {harmless(plain, 40)!r}; a result is one of kv40, kv100, kv<°C>, vi, density15, "
                        "flash, pour, noack, sulfur, base_number, acid_number, ash, water, ccs<°C> or an element")
    return found


def _typed(values: Mapping[str, str]) -> dict[str, float]:
    found: dict[str, float] = {}
    for name, text in values.items():
        code = property_of(name)
        value = read_result(code, text)
        if value is None:
            continue
        if code in found:
            raise DeskError(f"{heading(code)} is given twice; a repeat is a second entry of its own")
        found[code] = value
    if not found:
        raise DeskError("no result; type at least one, such as kv40=45.2")
    return found


def _refuse_earlier(sample: Sample, at: str) -> None:
    if at[:MINUTE] < sample.taken_at[:MINUTE]:
        raise DeskError(f"a result at {batches.when(at)} is dated before its sample {sample.sample}, which was drawn "
                        f"at {batches.when(sample.taken_at)}; mend the time, or name the right sample")


def withdraw(plant: Plant, batch: str, sample: int, line: int, *, why: str, by: str = "") -> Result:
    """Withdraw a result, with its reason: it no longer counts, and stays on record."""
    who, reason = batches.person(plant, by), harmless(why.strip(), LONGEST)
    if not reason:
        raise DeskError("a result is withdrawn only with a reason; type why it does not count")

    def make() -> Step:
        made = batches.opened(plant, batch)
        found = next((r for r in made.results if (r.sample, r.line) == (sample, line)), None)
        if found is None:
            have = ", ".join(f"{r.sample}.{r.line} {heading(r.property)}" for r in made.results[-8:]) or "none yet"
            raise DeskError(f"{harmless(batch, 40)} has no result {line} of sample {sample}; on record: {have}")
        if found.withdrawn:
            raise DeskError(f"result {line} of sample {sample} is withdrawn already ({found.withdrawn})")
        said = f"{who}: {reason}"
        return Step((changed(found, withdrawn=said),), f"{made.name} sample {sample}: {heading(found.property)} "
                    f"{found.value:.6g} withdrawn", reason, replace(found, withdrawn=said))

    result = plant.step(make).result
    assert isinstance(result, Result)
    return result


# The decision

def decide(plant: Plant, batch: str, *, decision: str = "", why: str = "", by: str = "", sure: bool = False
           ) -> Decision:
    """Record what is decided on the newest sample that counts, with the arithmetic; empty: as the results say.

    Another decision than the results' needs a reason; a release while a limit has no result, or while charges are to
    come, is refused. The batch as the laboratory found it goes to the laboratory's record in the same step.
    """
    who, reason, chosen = batches.person(plant, by), harmless(why.strip(), LONGEST), _chosen(decision)

    def make() -> Step:
        made = batches.opened(plant, batch)
        at = clock(plant, made, sure)
        says = verdict(made, batches.target_of(plant, made))
        number = says.sample
        if number is None:
            raise DeskError(f"{harmless(batch, 40)} has no sample of what is in the vessel now; draw one and enter its "
                            "results before anything is decided")
        final = _final(made, says, chosen, reason)
        _refuse_twice(made, says, final, reason)
        line = 1 + max((d.line for d in made.decisions), default=0)
        found = Decision(made.name, line, number, final, "; ".join(says.words), at, who, reason)
        changes: list[Change] = [*added(found), *renewed_changes(plant, made, number)]
        return Step(tuple(changes), f"{made.name} sample {number}: {final}", reason, found)

    found = plant.step(make).result
    assert isinstance(found, Decision)
    return found


def _chosen(typed: str) -> str:
    plain = " ".join(typed.lower().replace("-", " ").split())
    if not plain:
        return ""
    found = [each for each in DECISIONS if each == plain or each.split()[0] == plain]
    if not found:
        raise DeskError(f"{harmless(typed, 40)!r} is no decision; it is one of {', '.join(DECISIONS)}")
    return found[0]


def _final(made: Made, says: Verdict, chosen: str, reason: str) -> str:
    """The decision that may stand; DeskError where results are missing or a reason is due."""
    final = chosen or says.decision
    missing = and_of(says.missing) or "every limit"
    if final == NO_RESULT:
        raise DeskError(f"{missing} has no result on {says.headline.partition(':')[0]}: nothing can be decided yet; "
                        "enter it, or decide repeat, fresh sample or trim with a reason")
    if final == RELEASE and (says.missing or not says.limits):
        raise DeskError(f"no release: {missing} has no result; enter it first")
    if final == RELEASE and made.to_charge:
        line = made.to_charge[0]
        raise DeskError(f"no release: line {line.line} ({harmless(line.stock, 40)}) is still to be charged, or to be "
                        "dropped with a reason")
    if final != says.decision and not reason:
        raise DeskError(f"the results say {says.decision}, not {final}: {_worst(says)}; to decide otherwise type why")
    return final


def _refuse_twice(made: Made, says: Verdict, final: str, reason: str) -> None:
    """DeskError where the sample was decided on already and its results are what they were then."""
    last = next((d for d in reversed(made.decisions) if d.sample == says.sample), None)
    if last is None or last.words != "; ".join(says.words):
        return
    told = (f"sample {last.sample} was decided already: {last.decision}, {harmless(last.by, 40)}, "
            f"{batches.when(last.at)}")
    if last.decision == final:
        raise DeskError(f"{told}; nothing has changed since")
    if not reason:
        raise DeskError(f"{told}; to decide otherwise on the same results type why")


def _worst(says: Verdict) -> str:
    """The words that the verdict rests on."""
    return next((x.words for x in says.limits if x.decision == says.decision), "; ".join(says.remarks[:1]))
