"""The certificate of analysis of a released batch: from laboratory results only, never from the prediction."""

from __future__ import annotations

import os
import textwrap
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from statistics import fmean
from typing import TYPE_CHECKING, Any

from blendtui.store.batch_records import OPEN, PACKED, RELEASED, Made, Sample
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.properties import lookup
from solver.target import Target

from . import batch_lessons, batches, numbers, release
from .batch_verdict import PAIR, drawn_together, standing, values_of
from .errors import DeskError

if TYPE_CHECKING:
    from solver.requirements import Requirement

WIDTH = 80
TITLE = "CERTIFICATE OF ANALYSIS"
CALCULATED = "ASTM D2270, calculated from KV40 and KV100"
FROM_RESULTS = "Every figure is a laboratory result on this batch, or (viscosity index) follows from two of them."
CAUTION = ("Local rules and licensed practice decide whether this oil may be sold and used as named; a certificate "
           "speaks of the sample that was tested and of nothing else.")
UNITS = {"L15": "L at 15 °C", "L20": "L at 20 °C"}
LABEL, METHOD, DATE, FIGURE = 24, 16, 11, 9  # columns: what, by which method, on which day; three figures


@dataclass(frozen=True)
class Line:
    """One property of the certificate. None: that side is not limited."""

    property: str
    label: str
    unit: str
    method: str
    value: float  # mean of the results that stand, unrounded
    count: int  # of results
    on: str  # local day of the last of them
    low: float | None
    high: float | None
    limited_by: tuple[str, ...]  # who asks
    calculated: bool = False  # from other results

    @property
    def shown(self) -> str:
        """The result as it is given; with more digits where rounding would bring it inside a limit."""
        text = numbers.value(self.property, self.value)
        given = float(text)
        inside = (self.low is not None and self.value < self.low <= given) or (
            self.high is not None and self.value > self.high >= given)
        return f"{self.value:.6g}" if inside else text

    @property
    def bounds(self) -> tuple[str, str]:
        """Least and most as they are given; empty: that side is not limited."""
        least, most = ("" if v is None else _limit(self.property, v) for v in (self.low, self.high))
        return least, most


def _limit(code: str, value: float) -> str:
    """A limit as it is asked, without digits that nobody wrote."""
    return f"{value:.10g}" if code != "vi" else numbers.fixed(value, 0 if value == round(value) else 1)


@dataclass(frozen=True)
class Certificate:
    """What a certificate says. Empty: not known."""

    batch: str
    product: str
    name: str  # of the product
    grade: str
    customer: str
    order_no: str
    ordered: str  # amount with its unit
    packed_kg: float | None  # None: nothing is recorded as packed
    samples: tuple[str, ...]  # number, local time, place
    lines: tuple[Line, ...]
    reason: str  # why it was released where the results said otherwise
    not_told: tuple[str, ...]  # what the grade leaves to be tested otherwise
    released_by: str
    released_on: str  # local time
    entry: int  # number of the last journal entry …
    hash: str  # … and its hash


def certificate(plant: Plant, batch: str) -> Certificate:
    """The certificate of a released batch; DeskError for any other."""
    made = plant.batch(batch)
    head = made.head
    if head.state != RELEASED:
        how = f" (blendtui batch release {harmless(batch, 40)})" if head.state == OPEN else ""
        raise DeskError(f"{harmless(batch, 40)} is {head.state}, not released: a certificate speaks of a released "
                        f"batch only{how}")
    draw = drawn_together(made)
    if not draw:
        raise DeskError(f"{harmless(batch, 40)} has no sample after its last charge; nothing can be certified")
    target = batches.target_of(plant, made)
    needs, tests = release.asked_of(target)
    packed = [o.kg for o in made.outcomes if o.what == PACKED]
    decided = release.decision_on(made, draw[0].sample)
    entry, last = _pin(plant)
    return Certificate(
        head.batch, head.product, _product_name(plant, head.product), target.grade, head.customer, head.order_no,
        f"{numbers.batch(head.asked)} {UNITS.get(head.unit, head.unit)}" if head.asked else "",
        sum(packed) if packed else None,
        tuple(f"{s.sample}, drawn {batches.when(s.taken_at)}" + (f", {s.place}" if s.place else "")
              for s in (*draw, *_older(made, draw, [need.code for need in needs]))),
        _lines(made, draw, [_asked_by(need, target) for need in needs]), decided.why if decided is not None else "",
        tests, head.closed_by, batches.when(head.closed_at), entry, last)


def _product_name(plant: Plant, code: str) -> str:
    return next((p.name for p in plant.products(include_retired=True) if p.product == code), "")


def _older(made: Made, draw: Sequence[Sample], codes: Sequence[str]) -> list[Sample]:
    """Older samples of the same oil that alone were tested for one of these."""
    of = {number for code in codes for _, _, number in values_of(made, draw, code)}
    return [s for s in reversed(made.samples) if s.sample in of and s not in draw]


def _pin(plant: Plant) -> tuple[int, str]:
    """Number and hash of the last entry of the journal, of one moment."""
    while True:
        entry, last = plant.revision(), plant.last_hash()
        if plant.revision() == entry:
            return entry, last


def _lines(made: Made, draw: Sequence[Sample], needs: Sequence[Requirement]) -> tuple[Line, ...]:
    """KV40, KV100 and VI first, then what is limited, then what else was measured; VI is never as it was typed."""
    limits = {need.code: need for need in needs}
    measured = (r.property for s in draw for r in batch_lessons.standing(made, s.sample))
    lines = (_line(code, made, draw, limits.get(code)) for code in dict.fromkeys([*PAIR, "vi", *limits, *measured]))
    return tuple(line for line in lines if line is not None)


def _line(code: str, made: Made, draw: Sequence[Sample], need: Requirement | None) -> Line | None:
    """One property as the verdict reads it: the mean of its samples; None: it was not measured."""
    means = values_of(made, draw, code)
    if not means:
        return None
    entry, codes = lookup(code), PAIR if code == "vi" else (code,)
    of = {number for _, _, number in means}
    results = [r for s in made.samples if s.sample in of for c in codes for r in standing(made, s, c)]
    methods = dict.fromkeys([CALCULATED] if code == "vi" else [r.method or entry.method for r in results])
    return Line(code, entry.name, entry.unit, ", ".join(methods), fmean(m for m, _, _ in means),
                sum(n for _, n, _ in means), batches.when(max(r.at for r in results))[:10],
                need.low if need else None, need.high if need else None, need.sources if need else (),
                calculated=code == "vi")


def _asked_by(need: Requirement, target: Target) -> Requirement:
    """A limit with those who ask for it, as a customer reads it; a line that is only a guard asks nothing of an oil."""
    closed = {x.source for x in target.limits if x.property == need.code and (x.low is not None or x.high is not None)}
    asks = (x for x in need.sources if x.startswith("grade ") or x in closed)
    return replace(need, sources=tuple(dict.fromkeys(
        x if x.startswith(("grade ", "customer ")) else "the product" for x in asks)))


# Text

def facts(made: Certificate) -> list[tuple[str, str]]:
    """The heading, line by line; what is not known is left out."""
    rows = [("Batch", made.batch), ("Product", f"{made.product}  {made.name}".strip()), ("Grade", made.grade),
            ("Customer", made.customer), ("Order", made.order_no), ("Ordered", made.ordered),
            ("Packed", "" if made.packed_kg is None else f"{numbers.batch(made.packed_kg)} kg"),
            ("Sample", "; ".join(made.samples)),
            ("Released", f"{made.released_on} by {made.released_by}")]
    return [(head, harmless(text)) for head, text in rows if text]


def notes(made: Certificate) -> list[str]:
    """What stands below the results, a sentence each."""
    said = [FROM_RESULTS]
    repeated = [x for x in made.lines if x.count > 1 and not x.calculated]
    if repeated:
        said.append("Mean of repeated results: " + ", ".join(f"{x.label} ({x.count})" for x in repeated) + ".")
    asked = {source: [x.label for x in made.lines if source in x.limited_by] for x in made.lines
             for source in x.limited_by}
    said += [f"Limits of {source}: {', '.join(labels)}." for source, labels in asked.items()]
    said += [f"Not told by these results: {test}." for test in made.not_told]
    if made.reason:
        said.append(f"Released with a reason: {made.reason}.")
    return [harmless(x, 600) for x in [*said, CAUTION]]


def pin(made: Certificate) -> str:
    """The last entry of the record when this was made: on paper it pins everything before it."""
    return f"Record: entry {made.entry}, {made.hash}"


def certificate_text(made: Certificate) -> str:
    """The certificate as text of at most 80 columns."""
    lines = [TITLE, "=" * WIDTH]
    for head, text in facts(made):
        lines += _wrapped(f"{head:<10}{text}", 10)
    lines += ["", f"{'property':<{LABEL}} {'method':<{METHOD}}{'date':<{DATE}}{'result':>{FIGURE}}{'least':>{FIGURE}}"
                  f"{'most':>{FIGURE}}", "-" * WIDTH]
    for line in made.lines:
        lines += _row(line)
    lines += ["-" * WIDTH]
    for said in notes(made):
        lines += _wrapped(f"* {said}", 2)
    return "\n".join([*lines, "", *_wrapped(pin(made), 2)]) + "\n"


def _wrapped(text: str, indent: int) -> list[str]:
    return textwrap.wrap(text, WIDTH, subsequent_indent=" " * indent, break_on_hyphens=False)


def _row(line: Line) -> list[str]:
    """One result; a long label or method goes on below."""
    unit = f", {line.unit}" if line.unit else ""
    labels = textwrap.wrap(harmless(f"{line.label}{unit}"), LABEL) or [""]
    methods = textwrap.wrap(harmless(line.method), METHOD - 1) or [""]
    least, most = line.bounds
    figures = f"{line.shown:>{FIGURE}}{least:>{FIGURE}}{most:>{FIGURE}}"
    rows = []
    for n in range(max(len(labels), len(methods))):
        label, method = (each[n] if n < len(each) else "" for each in (labels, methods))
        rest = f"{line.on:<{DATE}}{figures}" if n == 0 else ""
        rows.append(f"{label:<{LABEL}} {method:<{METHOD}}{rest}".rstrip())
    return rows


def write_new(path: Path, text: str, what: str = "certificate") -> str:
    """Write a text to a new file and say where; DeskError rather than write over one."""
    try:
        with path.open("x", encoding="utf-8") as out:
            out.write(text)
    except FileExistsError:
        raise DeskError(_taken(path, what)) from None
    except OSError as error:
        raise DeskError(f"cannot write {path}: {(error.strerror or str(error)).lower()}; choose another place"
                        ) from None
    return f"{what} written to {harmless(str(path))}"


def _taken(path: Path, what: str) -> str:
    return f"{path} is there already; choose another name or move the old {what} away"


def write_all(files: Sequence[tuple[Path, str]], what: str = "certificate") -> list[str]:
    """Write several texts to new files, all of them or none, and say where; DeskError as `write_new`."""
    if len({path.resolve() for path, _ in files}) < len(files):
        raise DeskError(f"{files[0][0]} is named twice; give each {what} a file of its own")
    for path, _ in files:
        if os.path.lexists(path):
            raise DeskError(_taken(path, what))
    said: list[str] = []
    try:
        for path, text in files:
            said.append(write_new(path, text, what))
    except DeskError:
        for path, _ in files[:len(said)]:
            path.unlink(missing_ok=True)
        raise
    return said


# JSON

def certificate_json(made: Certificate) -> dict[str, Any]:
    """The certificate, numbers unrounded."""
    return {
        "batch": made.batch, "product": made.product, "name": made.name, "grade": made.grade or None,
        "customer": made.customer or None, "order_no": made.order_no or None, "ordered": made.ordered or None,
        "packed_kg": made.packed_kg, "samples": list(made.samples),
        "results": [{"property": x.property, "name": x.label, "unit": x.unit or None, "method": x.method,
                     "value": x.value, "shown": x.shown, "results": x.count, "on": x.on,
                     "low": x.low, "high": x.high, "limited_by": list(x.limited_by), "calculated": x.calculated}
                    for x in made.lines],
        "notes": notes(made), "not_told": list(made.not_told), "reason": made.reason or None,
        "released_by": made.released_by, "released_on": made.released_on,
        "record": {"entry": made.entry, "hash": made.hash}}
