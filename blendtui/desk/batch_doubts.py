"""What is wrong or unlikely of a step on the floor or in the laboratory, in words: refused, or questioned."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from datetime import datetime, timedelta
from statistics import fmean

from blendtui.store.batch_records import Made, Sample
from blendtui.store.database import now
from blendtui.store.harmless import harmless
from solver.properties import lookup

from . import batches, numbers
from .batch_lessons import MINUTE, earlier
from .batch_verdict import PAIR, mean_of, standing
from .errors import DeskError
from .reason_words import heading, unit

FAR_KV = 0.25  # of the predicted KV: a result from here on is questioned
FAR_DENSITY = 0.01  # of the predicted density
FAR_R = 3.0  # reproducibilities from which another result is questioned …
FAR_PART = 0.25  # … where it is also so far off, as a part of the prediction (°C: by the R alone)
SLIP = (8.0, 12.5)  # ratio of two figures within which a point may have slipped by one place
VI_APART = 2.0  # points between a typed VI and that of the KVs: its R, by common practice
SKEW = timedelta(seconds=90)  # that a typed time may be ahead of the clock
COLDEST, HOTTEST = -60.0, 300.0  # °C that oil in a plant can have
COOL, HOT = 10.0, 20.0  # °C that a sample may be below or above the mixing temperature


def ask(sure: bool, doubts: Iterable[str]) -> None:
    """Question a step for everything that is unlikely of it, unless the answer was given."""
    found = list(doubts)
    if found:
        words = "; ".join(found)
        batches.question(sure, words if words.endswith((".", "?")) else f"{words}.")


# Clock and times

def clock(made: Made, sure: bool) -> str:
    """This moment; questioned where the batch has an entry of a later one: the clock was set back, or was ahead.

    What goes through all the same has the time of that entry, so that a batch's record keeps its order (which sample
    came after which charge); the journal has the time that the clock showed.
    """
    at, last = now(), last_entry(made)
    if at < last:
        batches.question(sure, f"the clock says {batches.when(at)}, and the record of {harmless(made.name, 40)} goes "
                               f"to {batches.when(last)}: was the clock set back? Set it, or say that it is right.")
    return max(at, last)


def last_entry(made: Made) -> str:
    """The latest time on the record of a batch."""
    return max((made.head.ordered_at, *(c.at for c in made.charged), *(c.checked_at for c in made.charged),
                *(s.taken_at for s in made.samples), *(r.at for r in made.results), *(d.at for d in made.decisions),
                *(o.at for o in made.outcomes)))


def refuse_future(what: str, at: str) -> None:
    """DeskError where a typed time is still to come."""
    ahead = datetime.fromisoformat(at.replace("Z", "+00:00")) - datetime.fromisoformat(now().replace("Z", "+00:00"))
    if ahead > SKEW:
        raise DeskError(f"{what} at {batches.when(at)} lies in the future; it is {batches.when(now())} now")


def refuse_temperature(celsius: float | None) -> None:
    """DeskError for what no oil in a plant can have [°C]."""
    if celsius is not None and not COLDEST <= celsius <= HOTTEST:
        raise DeskError(f"{celsius:g} °C is no temperature of an oil ({COLDEST:g} to {HOTTEST:g} °C); °F?")


# Samples

def of_sample(made: Made, at: str, celsius: float | None) -> Iterator[str]:
    """What is unlikely of a sample; DeskError for one that cannot be."""
    if made.in_vessel_kg <= 0.0:
        raise DeskError(f"{harmless(made.name, 40)}: nothing is in the vessel yet, so there is nothing to sample")
    if at[:MINUTE] < made.head.ordered_at[:MINUTE]:
        raise DeskError(f"a sample at {batches.when(at)} is older than the batch, which was ordered at "
                        f"{batches.when(made.head.ordered_at)}; mend the time")
    last = max(made.charged, key=lambda c: c.at, default=None)
    if last is not None and earlier(at, last.at):
        yield (f"it was drawn at {batches.when(at)}, before the last charge (line {last.line}, "
               f"{harmless(last.stock, 40)}, {batches.when(last.at)}): it says nothing of the batch as it is and "
               "decides nothing")
    if made.to_charge:
        lines = ", ".join(f"{c.line} ({harmless(c.stock, 40)})" for c in made.to_charge[:4])
        yield f"{len(made.to_charge)} charge{'s are' if len(made.to_charge) > 1 else ' is'} still to come: line {lines}"
    if celsius is not None and not made.head.mix_c - COOL <= celsius <= made.head.mix_c + HOT:
        yield (f"the oil was at {celsius:g} °C and is mixed at {made.head.mix_c:g} °C: "
               + ("is it mixed through" if celsius < made.head.mix_c else "is it not overheated") + "?")


# Results

def refuse_swapped(made: Made, sample: Sample, typed: Mapping[str, float]) -> None:
    """DeskError where KV100 is not below KV40, among what is typed or beside what the sample has."""
    have = {code: typed[code] if code in typed else (mean_of(made, sample, code) or (None,))[0] for code in PAIR}
    cold, hot = have["kv40"], have["kv100"]
    if cold is not None and hot is not None and hot >= cold and (set(typed) & set(PAIR)):
        raise DeskError(f"KV40 {numbers.kv(cold)} and KV100 {numbers.kv(hot)} mm²/s: an oil is thinner hot than cold; "
                        "swapped?")


def of_results(made: Made, sample: Sample, typed: Mapping[str, float], predicted: Mapping[str, float | None]
               ) -> Iterator[str]:
    """What is unlikely of results: far from the prediction, from one another, or from the viscosity index."""
    for code, value in typed.items():
        if code == "vi":
            yield from _vi(made, sample, value, typed)
            continue
        yield from _far(code, value, predicted.get(code))
        yield from _repeated(made, sample, code, value)


def _far(code: str, value: float, predicted: float | None) -> Iterator[str]:
    if predicted is None:
        return
    entry = lookup(code)
    off, r = abs(value - predicted), entry.reproducibility(predicted)
    relative = off / abs(predicted) if predicted else float("inf")
    if numbers.is_kv(code) or code == "density15":
        far = relative > (FAR_KV if code != "density15" else FAR_DENSITY)
    else:
        far = off > FAR_R * r and (entry.unit == "°C" or relative > FAR_PART)
    if not far:
        return
    slipped = value > 0.0 and predicted > 0.0 and SLIP[0] <= max(value / predicted, predicted / value) <= SLIP[1]
    yield (f"{heading(code)} {numbers.value(code, value)} where {numbers.value(code, predicted)} {unit(code)}".rstrip()
           + " is predicted from what was charged"
           + (": has the point slipped by one place?" if slipped else ": is it the right figure, sample and property?"))


def _repeated(made: Made, sample: Sample, code: str, value: float) -> Iterator[str]:
    values = [r.value for r in standing(made, sample, code)]
    if not values:
        return
    mean = fmean(values)
    r = lookup(code).reproducibility(mean)
    far = max(values, key=lambda each: abs(each - value))
    if abs(value - far) > r * (1.0 + 1e-9):
        yield (f"{heading(code)} {numbers.value(code, value)} and {numbers.value(code, far)} of the same sample differ "
               f"by {abs(value - far) / r:.1f} R: one of them is wrong; both stay on record and both count until one "
               "is withdrawn with its reason")


def _vi(made: Made, sample: Sample, value: float, typed: Mapping[str, float]) -> Iterator[str]:
    from solver.viscosity_index import LOWEST_KV100, viscosity_index

    cold, hot = (typed[code] if code in typed else (mean_of(made, sample, code) or (None,))[0] for code in PAIR)
    if cold is None or hot is None or not LOWEST_KV100 <= hot < cold:
        return
    own = float(viscosity_index(cold, hot))
    if abs(own - value) > VI_APART:
        yield (f"VI {numbers.vi(value)} is typed, and KV40 {numbers.kv(cold)} with KV100 {numbers.kv(hot)} give "
               f"{numbers.vi(own)}: one of the three is wrong; the batch is decided by that of the KVs")
