"""What the laboratory's results say of a batch: release, repeat, fresh sample or trim, with the arithmetic.

For each limit L, with the mean x of the results that count and the method's reproducibility R at L,

    d = x − L (low) or L − x (high):   d ≥ 0.59 R release,  0 ≤ d < 0.59 R repeat,  −R < d < 0 fresh sample,
                                       d ≤ −R trim

0.59 R = 1.645 R/2.77: so far inside, the true value is inside with 95 % (the idea of ISO 4259, from practice). The
worst of all limits decides. A limit without a result blocks release. A fresh sample that is outside as the one before
it was is no chance any more: trim.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass
from statistics import fmean
from typing import TYPE_CHECKING

from blendtui.store.batch_records import Made, Result, Sample
from blendtui.store.harmless import harmless
from solver.properties import lookup
from solver.target import Target

from . import numbers
from .batch_lessons import of_last_round
from .reason_words import and_of, heading, unit
from .release import asked_of, newest

if TYPE_CHECKING:
    from solver.requirements import Requirement

RELEASE, REPEAT, FRESH, TRIM = "release", "repeat", "fresh sample", "trim"
NO_RESULT = "no result"  # what stands in place of a release while a limit has no result
DECISIONS = (RELEASE, REPEAT, FRESH, TRIM)
SEVERITY = (RELEASE, NO_RESULT, REPEAT, FRESH, TRIM)
SURE = 0.59  # of R: 1.645/2.77, rounded as practice rounds it
HAIR = 1e-9  # of R: what a difference of decimals may be off
HEIGHTS = ("top", "middle", "bottom")  # places that are compared with one another
PAIR = ("kv40", "kv100")
SCANT = {RELEASE: "", REPEAT: ", nearer than 0.59 R", FRESH: ", by less than R", TRIM: ", by R or more"}
NTH = {3: "third", 4: "fourth", 5: "fifth"}


@dataclass(frozen=True)
class LimitVerdict:
    """How one limit stands to the laboratory's results; figures in the property's unit, None: no result."""

    property: str
    low: float | None  # without its guard
    high: float | None
    value: float | None  # mean of what counts
    count: int  # results behind it
    side: str  # the nearer side, low or high
    distance: float | None  # inside it; negative outside
    reproducibility: float | None  # R at that side
    in_r: float | None  # the distance in units of R
    decision: str
    words: str  # the arithmetic
    sources: tuple[str, ...] = ()


@dataclass(frozen=True)
class Verdict:
    """What the results say."""

    decision: str  # one of DECISIONS, or NO_RESULT
    samples: tuple[int, ...]  # those that count, the newest first
    limits: tuple[LimitVerdict, ...]
    missing: tuple[str, ...]  # what has no result, each named
    remarks: tuple[str, ...]  # repeats, withdrawn results, heights that differ, what no figure here speaks of
    decided: str = ""  # what a person has decided on the newest sample; empty: nobody has

    @property
    def sample(self) -> int | None:
        """The newest sample that counts."""
        return self.samples[0] if self.samples else None

    @property
    def words(self) -> tuple[str, ...]:
        """The arithmetic of every limit, then the remarks."""
        return (*(x.words for x in self.limits), *self.remarks)

    @property
    def headline(self) -> str:
        """The verdict in one line."""
        if not self.samples:
            return "no sample that counts yet"
        which = f"sample{'s' if len(self.samples) > 1 else ''} {and_of([str(s) for s in sorted(self.samples)])}"
        if self.decision == NO_RESULT:
            has = "has" if len(self.missing) == 1 else "have"
            return f"{which}: no release while {and_of(self.missing)} {has} no result"
        more = f"; still without a result: {and_of(self.missing)}" if self.missing else ""
        return f"{which}: {self.decision}{more}"


def verdict(made: Made, target: Target) -> Verdict:
    """What the results that count say of a batch, by the frozen target's limits without their guards."""
    draw = drawn_together(made)
    needs, tests = asked_of(target)
    limits = tuple(_limit(need, made, draw) for need in needs) if draw else ()
    heights = tuple(_heights(made, draw))
    repeats = tuple(_repeats(made, draw))
    missing = tuple(_missing(x, made, draw) for x in limits if x.decision == NO_RESULT)
    said = [x.decision for x in limits] or [NO_RESULT]
    said += [FRESH for _, mixed in heights if not mixed] + [REPEAT for _, agree in repeats if not agree]
    decided = [d for d in made.decisions if draw and d.sample == draw[0].sample]
    remarks = (*(words for words, _ in (*heights, *repeats)), *_withdrawn(made), *_past(made, draw),
               *(f"asked besides, and judged by no figure here: {test}" for test in tests))
    return Verdict(max(said, key=SEVERITY.index), tuple(s.sample for s in draw), limits, missing, remarks,
                   decided[-1].decision if decided else "")


def drawn_together(made: Made) -> tuple[Sample, ...]:
    """The samples that count, newest first: the newest that has a result, and its fellows of other heights."""
    last = newest(made)
    if last is None:
        return ()
    if place(last) not in HEIGHTS:
        return (last,)
    # After a decision for a fresh sample those before it are out of the count.
    since = max((d.sample for d in made.decisions if d.decision == FRESH), default=0)
    found = {place(last): last}
    for sample in reversed([s for s in of_last_round(made) if since < s.sample < last.sample]):
        if place(sample) not in HEIGHTS or place(sample) in found:
            break
        found[place(sample)] = sample
    return tuple(found.values())


def place(sample: Sample) -> str:
    """Where a sample was drawn, as it is compared."""
    return sample.place.strip().casefold()


# Results of a sample

def standing(made: Made, sample: Sample, prop: str) -> list[Result]:
    """The results of one property that count."""
    return [r for r in made.results if r.sample == sample.sample and r.property == prop and not r.withdrawn]


def mean_of(made: Made, sample: Sample, prop: str) -> tuple[float, int] | None:
    """Mean of a property on one sample and how many results it rests on; a VI from the means of both KVs."""
    if prop == "vi":
        return vi_of(made, sample)
    values = [r.value for r in standing(made, sample, prop)]
    return (fmean(values), len(values)) if values else None


def vi_of(made: Made, sample: Sample) -> tuple[float, int] | None:
    """VI of one sample; None where it has not both KVs, or a KV100 below that of the VI's scale."""
    from solver.viscosity_index import LOWEST_KV100, viscosity_index

    cold, hot = (mean_of(made, sample, prop) for prop in PAIR)
    if cold is None or hot is None or not LOWEST_KV100 <= hot[0] < cold[0]:
        return None
    return float(viscosity_index(cold[0], hot[0])), min(cold[1], hot[1])


def values_of(made: Made, draw: Sequence[Sample], prop: str) -> list[tuple[float, int, int]]:
    """(mean, number of results, sample) of the samples that count for a property.

    A viscosity and the VI count from the draw alone; what only an older sample of the same oil was tested for counts
    from there.
    """
    def found(samples: Sequence[Sample]) -> list[tuple[float, int, int]]:
        means = [(mean_of(made, s, prop), s.sample) for s in samples]
        return [(*mean, number) for mean, number in means if mean is not None]

    own = found(draw)
    if own or prop in (*PAIR, "vi"):
        return own
    return found(of_last_round(made))[-1:]


def _limit(need: Requirement, made: Made, draw: Sequence[Sample]) -> LimitVerdict:
    found = values_of(made, draw, need.code)
    sides = [(side, at) for side, at in (("low", need.low), ("high", need.high)) if at is not None]
    if not found:
        asked = and_of([f"{side} {numbers.value(need.code, at)}" for side, at in sides])
        return LimitVerdict(need.code, need.low, need.high, None, 0, "", None, None, None, NO_RESULT,
                            f"{heading(need.code)}: no result ({f'{asked} {unit(need.code)}'.rstrip()})", need.sources)
    value, count = fmean(m for m, _, _ in found), sum(n for _, n, _ in found)
    inside, r, side, at = min(((value - at if side == "low" else at - value, _r(need.code, at), side, at)
                               for side, at in sides), key=lambda each: each[0] / each[1])
    decision = decide(inside / r)
    before = _outside_before(need, side, made, {n for _, _, n in found}) if decision == FRESH else 0
    more = f": {TRIM}, for sample {before} was outside too" if before else f": {decision}"
    if decision == REPEAT and count > len(found):
        more = f": {REPEAT}, and it was repeated already: release it with a reason, or trim it inwards"
    older = "" if found[0][2] in [s.sample for s in draw] else f" (sample {found[0][2]})"
    start = f"{_amount(need.code, value)}{f' (mean of {count})' if count > 1 else ''}{older}"
    words = f"{start}, {_arithmetic(need.code, side, at, inside, r, made, draw)}{SCANT[decision]}{more}"
    return LimitVerdict(need.code, need.low, need.high, value, count, side, inside, r, inside / r,
                        TRIM if before else decision, words, need.sources)


def _arithmetic(code: str, side: str, at: float, inside: float, r: float, made: Made, draw: Sequence[Sample]) -> str:
    """`low 41.40: inside by 3.80 = 7.52 R (R 0.505, ASTM D445)`."""
    methods, part = _other_methods(code, made, draw), abs(inside) / r
    # Two decimals may show it on the wrong side of a threshold, or on it.
    shown = f"{part:.2f}" if all((part < at) == (round(part, 2) < at) for at in (SURE, 1.0)) else f"{part:.4f}"
    return (f"{side} {numbers.value(code, at)}: {'inside' if inside >= 0.0 else 'outside'} by "
            f"{numbers.figures(abs(inside), 3)} = {shown} R (R {numbers.figures(r, 3)}, {lookup(code).method})"
            + (f", measured by {and_of(methods)}" if methods else ""))


def _amount(code: str, value: float) -> str:
    return f"{heading(code)} {numbers.value(code, value)} {unit(code)}".rstrip()


def decide(distance: float) -> str:
    """The decision of a distance inside a limit, in units of R."""
    if distance >= SURE - HAIR:
        return RELEASE
    if distance >= -HAIR:
        return REPEAT
    return FRESH if distance > -1.0 + HAIR else TRIM


def _r(code: str, at: float) -> float:
    return lookup(code).reproducibility(at)


def _outside_before(need: Requirement, side: str, made: Made, counted: Collection[int]) -> int:
    """Number of another sample of the batch as it is that was outside the same side; 0: none was."""
    for sample in of_last_round(made):
        found = mean_of(made, sample, need.code) if sample.sample not in counted else None
        if found is None:
            continue
        if (side == "low" and found[0] < (need.low or 0.0)) or (side == "high" and found[0] > (need.high or 0.0)):
            return sample.sample
    return 0


def _other_methods(code: str, made: Made, draw: Sequence[Sample]) -> list[str]:
    """Methods of the results that are not the one whose R is taken."""
    codes = PAIR if code == "vi" else (code,)
    own = {lookup(c).method for c in codes}
    return list(dict.fromkeys(harmless(r.method, 30) for s in draw for c in codes for r in standing(made, s, c)
                              if r.method and r.method not in own))


def _missing(limit: LimitVerdict, made: Made, draw: Sequence[Sample]) -> str:
    if limit.property != "vi":
        return heading(limit.property)
    if any(all(standing(made, s, c) for c in PAIR) for s in draw):
        return "VI (these KV40 and KV100 have none: KV100 is below 2 mm²/s, or not below KV40)"
    have = [f"sample {s.sample} has only {heading(c)}" for s in draw for c in PAIR if standing(made, s, c)]
    return "VI (KV40 and KV100 from one sample" + (f"; {and_of(have)}" if have else "") + ")"


# Remarks

def _heights(made: Made, draw: Sequence[Sample]) -> Iterator[tuple[str, bool]]:
    """Do the heights agree, property by property: (in words, is it mixed)?"""
    if len(draw) < 2:
        return
    places = and_of([place(s) for s in sorted(draw, key=lambda s: HEIGHTS.index(place(s)))])
    for code in dict.fromkeys(r.property for r in made.results if r.property != "vi"):  # that follows from the KVs
        found = [m[0] for m in (mean_of(made, s, code) for s in draw) if m is not None]
        if len(found) < 2:
            continue
        r, apart = _r(code, fmean(found)), max(found) - min(found)
        mixed = apart <= r * (1.0 + HAIR)
        yield (f"{places}: {heading(code)} differs by {numbers.figures(apart, 3)} = {apart / r:.2f} R"
               + (", they agree" if mixed else ": NOT MIXED; mix on and draw fresh samples")), mixed


def _repeats(made: Made, draw: Sequence[Sample]) -> Iterator[tuple[str, bool]]:
    """Repeated results of one sample: (in words, do they agree)?"""
    for sample in draw:
        for code in dict.fromkeys(r.property for r in made.results if r.sample == sample.sample):
            every = [r for r in made.results if r.sample == sample.sample and r.property == code]
            values = [r.value for r in every if not r.withdrawn]
            if len(values) < 2:
                continue
            r, apart = _r(code, fmean(values)), max(values) - min(values)
            agree = apart <= r * (1.0 + HAIR)
            told = ", ".join(numbers.value(code, v) for v in values)
            again = f"{NTH.get(len(every), f'{len(every)}th')} result; " if len(every) > 2 else ""
            yield (f"{heading(code)} of sample {sample.sample}: {told}: {again}all {len(values)} count, they differ by "
                   f"{apart / r:.2f} R" + ("" if agree else ", more than R: they do not agree, repeat")), agree


def _withdrawn(made: Made) -> Iterator[str]:
    alive = {s.sample for s in of_last_round(made)}
    for result in made.results:
        if result.withdrawn and result.sample in alive:
            yield (f"withdrawn: {heading(result.property)} {numbers.value(result.property, result.value)} of sample "
                   f"{result.sample} ({harmless(result.withdrawn, 120)})")


def _past(made: Made, draw: Sequence[Sample]) -> Iterator[str]:
    """Samples that do not count, and why."""
    alive = {s.sample for s in of_last_round(made)}
    counted = {s.sample for s in draw}
    for sample in made.samples:
        if sample.sample in counted or sample.round != made.rounds:
            continue
        tested = any(r.sample == sample.sample and not r.withdrawn for r in made.results)
        why = ("it was drawn before the last charge" if sample.sample not in alive else
               "a newer one counts" if tested else "it has no result that stands")
        found = {code: mean_of(made, sample, code) for code in PAIR}
        told = ", ".join(f"{heading(c)} {numbers.value(c, m[0])}" for c, m in found.items() if m is not None)
        yield f"sample {sample.sample} does not count: {why}" + (f" ({told})" if told else "")
