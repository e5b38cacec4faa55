"""What the measured blends teach: what could be learnt, with its figures; taking it into use, and out again."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from blendtui.store import lab_edits
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Lesson
from solver.errors import SolverError
from solver.measured import Measured

from . import lab, numbers
from .errors import DeskError

if TYPE_CHECKING:
    from solver.blending_values import At, BlendingValue
    from solver.lab import Fit

KINDS = ("vi_improver", "additive")  # stocks whose neat viscosity may not predict a blend
MUCH = 0.03  # mass fraction of such a stock from which on it may be what a pair's excess seems to be
UNSURE = 2.0  # standard errors within which a blending value is no other than what the stock's viscosity says
FORMS = {"none": "none", "one": "one term", "two": "two terms"}


@dataclass(frozen=True)
class Offer:
    """What could be learnt: the excess of a pair under a law, or the blending value of a stock."""

    kind: str  # "excess" or "value"
    law: str
    first: str
    second: str = ""
    terms: Mapping[float, tuple[float, ...]] = field(default_factory=dict)  # °C → terms, or (index,)
    fits: Mapping[float, Fit] = field(default_factory=dict)  # °C → what an excess rests on
    value: BlendingValue | None = None  # what a blending value rests on
    low: float | None = None  # mass fraction: the range for which it holds, as of store.records.Lesson
    high: float | None = None
    evidence: tuple[str, ...] = ()
    provisional: bool = False
    in_use: str = ""  # version of the lesson that stands in its place now
    beside: str = ""  # what else may explain the same blends, in words
    refusal: str = ""  # why it cannot be learnt; then there is nothing else

    @property
    def teaches(self) -> bool:
        """Is there anything to take?"""
        return not self.refusal and any(any(terms) for terms in self.terms.values())


def offers(record: lab.Record, law: str = "refutas") -> list[Offer]:
    """Everything that the measured blends could teach under a law: pairs first, then blending values of stocks."""
    from solver.laws import check_law

    check_law(law)
    usable, lessons = lab.checked(record, law).usable, record.lessons
    special = [s.code for s in record.stocks if s.kind in KINDS]
    open_yet = set(special) - {x.first for x in lessons if x.kind == "value" and x.law == law}
    found = [pair_offer(usable, lessons, law, *pair) for pair in pairs(usable)]
    found = [replace(offer, beside=_beside(usable, offer, open_yet)) for offer in found]
    used = {part.stock for blend in record.blends for part in blend.parts}
    values = [value_offer(record, law, code) for code in special if code in used]
    values = [replace(offer, beside=_pair_beside(offer, found)) for offer in values]
    return found + sorted(values, key=lambda offer: bool(offer.refusal))


def _beside(blends: Sequence[Measured], offer: Offer, special: Collection[str]) -> str:
    """Which special stocks, and how much of each at most, the evidence of a pair holds beside it."""
    most: dict[str, float] = {}
    for part in (part for blend in blends if blend.name in offer.evidence for part in blend.parts):
        if part.stock in special and part.share >= MUCH:
            most[part.stock] = max(part.share, most.get(part.stock, 0.0))
    return ", ".join(f"{numbers.pct(share)} % {stock}" for stock, share in most.items())


def _pair_beside(offer: Offer, found: Sequence[Offer]) -> str:
    """The pair whose excess, not in use yet, may be what the value of so small a share seems to be."""
    if offer.high is None or offer.high > MUCH:
        return ""
    return next((name_of(pair) for pair in found if pair.teaches and not pair.in_use
                 and set(pair.evidence) & set(offer.evidence)), "")


def pairs(blends: Sequence[Measured]) -> list[tuple[str, str]]:
    """Pairs of oils (or stocks) that make up most of some measured blend, in the order in which they come up."""
    from solver.lab_blends import LEAST_PART, PAIR_SHARE

    found: dict[tuple[str, str], None] = {}
    for blend in blends:
        parts: dict[str, float] = {}
        for part in blend.parts:
            name = part.oil or part.stock
            parts[name] = parts.get(name, 0.0) + part.share
        names = [name for name, share in parts.items() if share >= LEAST_PART]
        for n, one in enumerate(names):
            for other in names[n + 1:]:
                if parts[one] + parts[other] >= PAIR_SHARE and (other, one) not in found:
                    found[one, other] = None
    return list(found)


def pair_offer(blends: Sequence[Measured], lessons: Sequence[Lesson], law: str, first: str, second: str) -> Offer:
    """What the blends teach of a pair, or why they teach nothing."""
    from solver.lab_blends import TEMPERATURES, lesson, of_record

    taught = tuple(x.taught for x in lessons)
    in_use = next((x.version for x in lessons if x.kind == "excess" and x.law == law
                   and {x.first, x.second} == {first, second}), "")
    try:
        excess, fits = lesson(blends, law, first, second, taught=taught)
    except SolverError as error:
        return Offer("excess", law, first, second, in_use=in_use, refusal=str(error))
    names = {name for t in TEMPERATURES for name in of_record(blends, law, first, second, t, taught).names}
    spans = [fit.part for fit in fits.values()]
    return Offer("excess", law, first, second, dict(excess.terms), fits, low=min(p[0] for p in spans),
                 high=max(p[1] for p in spans), evidence=tuple(b.name for b in blends if b.name in names),
                 provisional=excess.provisional, in_use=in_use)


def value_offer(record: lab.Record, law: str, stock: str) -> Offer:
    """The index with which a stock blends, or why the blends do not tell it."""
    from solver.blending_values import blending_value

    in_use = next((x.version for x in record.lessons if x.kind == "value" and (x.first, x.law) == (stock, law)), "")
    try:
        # All of them: a result that is doubtful by the viscosity on record may be just what tells the index.
        value = blending_value(record.blends, stock, law, record.taught, lab.known(record))
    except SolverError as error:
        return Offer("value", law, stock, in_use=in_use, refusal=str(error))
    low, high = value.shares
    return Offer("value", law, stock, terms={t: (one.index,) for t, one in value.at.items()}, value=value, low=low,
                 high=high, evidence=value.blends, provisional=value.provisional, in_use=in_use)


# Figures in words

def name_of(row: Lesson | Offer) -> str:
    """What a lesson or an offer is of: `MN50 with BR32`, `VM70 blending value`."""
    return f"{row.first} with {row.second}" if row.kind == "excess" else f"{row.first} blending value"


def standing(row: Lesson | Offer) -> str:
    """In a word or two: "in use", "provisional", "replaces L1", "unsure", "cannot tell"."""
    if isinstance(row, Offer):
        if row.refusal:
            return "cannot tell"
        if not row.teaches:
            return "law suffices"
        if row.in_use:
            return f"replaces {row.in_use}"
        if row.value is not None and all(_within_error(one) for one in row.value.at.values()):
            return "unsure"
    return "provisional" if row.provisional else "" if isinstance(row, Offer) else "in use"


def _within_error(one: At) -> bool:
    return abs(one.index - one.own) <= UNSURE * one.error


def index(law: str, value: float) -> str:
    """A law's index with the digits that tell: the Refutas number to 0.1, W of D341 to 0.0001."""
    return numbers.fixed(value, 1 if law == "refutas" else 4)


def figures(kind: str, law: str, terms: Sequence[float]) -> str:
    """The terms of an excess, `A 0.2011, B 0.02265`, or a blending value, `number 55.2` or `W 0.5124`."""
    if kind == "value":
        return f"{'number' if law == 'refutas' else 'W'} {index(law, terms[0])}"
    told = (f"{name} {value:.4g}" for name, value in zip("AB", terms, strict=False) if value or len(terms) > 1)
    return ", ".join(told) or "no term"


def error_words(offer: Offer) -> str:
    """Mean error without and with what is offered, % of KV40 (or of the coldest that was measured)."""
    one = next(iter(offer.value.at.values()), None) if offer.value else None
    fit = next(iter(offer.fits.values()), None)
    if one is None and fit is None:
        return ""
    without, with_it = (one.alone_pct, one.fitted_pct) if one else (fit.unfitted_pct, fit.fitted_pct)  # type: ignore[union-attr]
    return f"{numbers.fixed(without, 2)} → {numbers.fixed(with_it, 2)}"


def proof_words(offer: Offer) -> str:
    """What speaks for it: leave-one-out errors by form, or how sure a blending value is."""
    if offer.value is not None:
        rough = "; one index does not serve the whole range of shares: keep to blends near the share that is used"
        return "; ".join(f"{t:g} °C: {_sure(one)}" for t, one in offer.value.at.items()) + rough * offer.value.rough
    told = []
    for celsius, fit in offer.fits.items():
        each = ", ".join(f"{FORMS[form]} {numbers.fixed(error, 2)} %" for form, error in fit.by_form.items())
        told.append(f"{celsius:g} °C: " + (f"left one out: {each}" if each else _too_few(fit.blends)))
    return "; ".join(told)


def _sure(one: At) -> str:
    """How sure the index is at one temperature."""
    checked = (f"left one out {numbers.fixed(one.leave_one_out_pct, 2)} %" if one.leave_one_out_pct is not None
               else _too_few(len(one.blends)))
    return (f"standard error {one.error:.2g}, {numbers.fixed(one.error_pct, 2)} % of the KV of a blend; mean error "
            f"{numbers.fixed(one.fitted_pct, 2)} % (by its viscosity on record {numbers.fixed(one.alone_pct, 2)} %), "
            f"{checked}")


def _too_few(count: int) -> str:
    return f"{count} blend{'s' * (count > 1)}, too few to check by leaving one out"


def _range(row: Lesson | Offer) -> str:
    words = f"{numbers.pct(row.low)} to {numbers.pct(row.high)} %"
    return f"holds from {words} of the blend" if row.kind == "value" else f"spans {words}"


def _value_words(law: str, terms: Mapping[float, tuple[float, ...]]) -> str:
    """`blends with number 55.2 at 40 °C and 61.0 at 100 °C`."""
    each = [f"{index(law, values[0])} at {celsius:g} °C" for celsius, values in sorted(terms.items())]
    return f"blends with {figures('value', law, [0.0]).split()[0]} {_listed(each)}"


def _listed(words: Sequence[str]) -> str:
    *most, last = words
    return f"{', '.join(most)} and {last}" if most else last


def _value_offer_words(offer: Offer, value: BlendingValue) -> list[str]:
    own = ", ".join(index(offer.law, one.own) for one in value.at.values())
    lines = [f"{_value_words(offer.law, offer.terms)} (by its viscosity on record: {own})"]
    kv = [f"{numbers.kv(one.kv)} mm²/s at {t:g} °C" for t, one in value.at.items() if one.kv is not None]
    beyond = [f"{t:g} °C" for t, one in value.at.items() if one.kv is None]
    lines.append("; ".join([*([f"the same as {_listed(kv)}"] if kv else []),
                            *([f"beyond any viscosity at {_listed(beyond)}"] if beyond else [])]))
    lines += [f"{t:g} °C: too open to use: {why}" for t, why in value.too_open.items()]
    if all(_within_error(one) for one in value.at.values()):
        lines.append(f"within {UNSURE:g} standard errors of its viscosity on record, which does as well")
    return lines


def offer_words(offer: Offer) -> list[str]:
    """An offer with all its figures, a sentence each."""
    mark = " PROVISIONAL" if offer.provisional else ""
    head = f"{name_of(offer)} under {offer.law}{mark}" + (f" ({offer.in_use} is in use)" if offer.in_use else "")
    if offer.refusal:
        return [head, offer.refusal]
    if offer.value is not None:
        lines = [head, *_value_offer_words(offer, offer.value)]
    else:
        lines = [head, *_excess_words(offer)]
    if offer.beside and offer.kind == "excess":
        lines.append(f"these blends also hold up to {offer.beside}, whose blending value may explain the same: "
                     "take that first, and look again")
    elif offer.beside:
        lines.append(f"these blends are also of {offer.beside}, whose excess may explain the same: take that first, "
                     "and look again")
    lines += [proof_words(offer), f"from {', '.join(offer.evidence)}; {_range(offer)}"]
    if offer.value is not None and offer.value.left_out:
        lines.append(f"left out, for they are in question: {', '.join(offer.value.left_out)}")
    return lines


def _excess_words(offer: Offer) -> list[str]:
    lines = []
    for celsius, terms in offer.terms.items():
        fit = offer.fits.get(celsius)
        line = f"{celsius:g} °C: {figures(offer.kind, offer.law, terms)}"
        if fit is not None:
            alone, with_it = (numbers.fixed(error, 2) for error in (fit.unfitted_pct, fit.fitted_pct))
            line += (f", mean error {with_it} % (law alone {alone} %), carried by the data "
                     f"{100.0 * fit.carried:.0f} %")
        lines.append(line)
    return lines


def lesson_words(lesson: Lesson) -> list[str]:
    """A lesson with its figures and its record, a sentence each."""
    lines = [f"{lesson.version} {name_of(lesson)} under {lesson.law}" + (" PROVISIONAL" if lesson.provisional else "")]
    lines += ([_value_words(lesson.law, lesson.terms)] if lesson.kind == "value" and lesson.terms else
              [f"{t:g} °C: {figures(lesson.kind, lesson.law, terms)}" for t, terms in lesson.terms.items()])
    lines.append(lesson.leave_one_out or "no figures of its fit")
    lines.append(f"from {', '.join(lesson.evidence) or 'no blend named'}; {_range(lesson)}")
    lines.append(f"taken {_moment(lesson.taken_at)} by {lesson.taken_by}")
    if not lesson.in_use:
        lines.append(f"WITHDRAWN {_moment(lesson.withdrawn_at)} by {lesson.withdrawn_by}: {lesson.reason}")
    return lines


def _moment(at: str) -> str:
    return f"{at[:16].replace('T', ' ')} UTC"


# Taking and withdrawing

def take(plant: Plant, law: str, first: str, second: str = "") -> str:
    """Take a lesson into use as it is offered now, and say so; the one it takes the place of is withdrawn."""
    offer = _offered(plant, law, first, second)
    if offer.refusal:
        raise DeskError(offer.refusal)
    if not offer.teaches:
        raise DeskError(f"{harmless(name_of(offer))} under {law}: the law alone predicts best ({proof_words(offer)}), "
                        "so there is nothing to take")
    version = plant.next_version()
    lesson = Lesson(version, offer.kind, law, offer.first, offer.second,
                    {celsius: terms or (0.0,) for celsius, terms in offer.terms.items()}, offer.low, offer.high,
                    offer.evidence, proof_words(offer), offer.provisional)
    old = next((x for x in plant.lessons() if x.version == offer.in_use), None)
    changes = lab_edits.new_lesson(plant, lesson)
    if old is not None:
        changes.append(lab_edits.withdrawn_lesson(plant, old.version, f"replaced by {version}"))
    what = f"{version} taken: {_title(lesson)}"
    plant.change(changes, what)
    mark = ", provisional: measure more blends" if lesson.provisional else ""
    return what + (f"; {old.version} withdrawn" if old else "") + mark


def _offered(plant: Plant, law: str, first: str, second: str) -> Offer:
    from solver.laws import check_law

    check_law(law)
    record = lab.read(plant)
    if second:
        return pair_offer(lab.checked(record, law).usable, record.lessons, law, first, second)
    stock = plant.stock(first)
    if stock.kind not in KINDS:
        raise DeskError(f"{first} is of kind {stock.kind}, which blends by its measured viscosities; a blending value "
                        f"is of {' or '.join(KINDS)}. For a pair name both stocks")
    return value_offer(record, law, first)


def _title(lesson: Lesson) -> str:
    return f"{harmless(name_of(lesson))} under {lesson.law}"


def withdraw(plant: Plant, version: str, reason: str) -> str:
    """Take a lesson out of use, with the reason."""
    known = plant.lessons(include_withdrawn=True)
    lesson = next((x for x in known if x.version == version), None)
    if lesson is None:
        raise DeskError(f"no lesson {harmless(version, 40)!r}; taken so far: "
                        f"{', '.join(x.version for x in known) or 'none'}")
    if not lesson.in_use:
        raise DeskError(f"{version} was withdrawn at {lesson.withdrawn_at} by {harmless(lesson.withdrawn_by, 40)}")
    if not reason.strip():
        raise DeskError(f"say why {version} is withdrawn, in a few words")
    said = f"{version} withdrawn: {_title(lesson)}"
    plant.change([lab_edits.withdrawn_lesson(plant, version, harmless(reason.strip(), 400))], said, reason.strip())
    return said
