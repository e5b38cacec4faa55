"""The laboratory of a batch: samples, results, what they say and what is decided; headless."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING, Any

from .common import DONE, Add, BadInput, number, opened, show, whole
from .stock import answered, lines_of, person

if TYPE_CHECKING:
    from blendtui.desk.batch_lab import Verdict
    from blendtui.store.batch_records import Made, Result, Sample


def add_to(of_batch: Add) -> None:
    """Add `sample`, `result`, `withdraw-result`, `verdict` and `decide` to `batch`."""
    made = of_batch("sample", _sample, "record that a sample was drawn")
    made.add_argument("batch", metavar="BATCH", help="such as B-0001")
    made.add_argument("--taken", metavar="TIME", default="", help="such as 2026-03-04 14:30, or 14:30 today; else now")
    made.add_argument("--place", metavar="TEXT", default="", help="top, middle and bottom are compared; or line …")
    made.add_argument("--at", metavar="T", default=None, help="°C of the oil")
    made.add_argument("--note", metavar="TEXT", default="")
    person(made)
    made = of_batch("result", _result, "put results of a sample on record, and say what all of them say")
    made.add_argument("batch", metavar="BATCH", help="such as B-0001")
    made.add_argument("values", metavar="PROPERTY=V", nargs="+", help="such as kv40=45.2 kv100=6.81 flash=221")
    made.add_argument("--sample", metavar="N", type=whole, help="else the newest")
    made.add_argument("--method", metavar="TEXT", default="", help="else the registry's, such as ASTM D445")
    made.add_argument("--when", metavar="TIME", default="", help="when it was found; else now")
    person(made)
    made = of_batch("withdraw-result", _withdraw, "withdraw a result with its reason; it stays on record")
    made.add_argument("batch", metavar="BATCH", help="such as B-0001")
    made.add_argument("sample", metavar="SAMPLE", type=whole)
    made.add_argument("line", metavar="RESULT", type=whole, help="its number on the sample")
    person(made)
    of_batch("verdict", _verdict, "what the results say, with the arithmetic").add_argument(
        "batch", metavar="BATCH", help="such as B-0001")
    made = of_batch("decide", _decide, "decide on the newest sample: release, repeat, fresh sample or trim")
    made.add_argument("batch", metavar="BATCH", help="such as B-0001")
    made.add_argument("decision", metavar="DECISION", nargs="*", help="else as the results say; another needs --why")
    person(made)


def _sample(options: argparse.Namespace) -> int:
    from blendtui.desk import batch_lab, batches

    celsius = None if options.at is None else number(options.at, "--at", "temperature")
    with opened(options) as plant:
        drawn = answered(lambda: batch_lab.sample(
            plant, options.batch, taken=options.taken, place=options.place, celsius=celsius, note=options.note,
            by=options.by, sure=options.sure))
    where = f", {drawn.place}" if drawn.place else ""
    show(options, {"batch": drawn.batch, **sample_json(drawn)}, lines_of(
        [f"{drawn.batch} sample {drawn.sample}{where}: drawn {batches.when(drawn.taken_at)} by {drawn.taken_by}"]))
    return DONE


def _result(options: argparse.Namespace) -> int:
    from blendtui.desk import batch_lab

    values: dict[str, str] = {}
    for each in options.values:
        code, equals, typed = each.partition("=")
        if not equals or not code.strip() or not typed.strip():
            raise BadInput(f"{each!r} is no result; write PROPERTY=V, for example kv40=45.2")
        if code.strip() in values:
            raise BadInput(f"{each!r}: {code.strip()} is given twice; a repeat is a second entry of its own")
        values[code.strip()] = typed.strip()
    with opened(options) as plant:
        found = answered(lambda: batch_lab.results(
            plant, options.batch, options.sample, values, method=options.method, at=options.when, by=options.by,
            sure=options.sure))
        made = plant.batch(options.batch)
    return _shown(options, made, found)


def _withdraw(options: argparse.Namespace) -> int:
    from blendtui.desk import batch_lab, batches

    with opened(options) as plant:
        answered(lambda: batch_lab.withdraw(plant, options.batch, options.sample, options.line, why=options.why,
                                            by=options.by))
        made = plant.batch(options.batch)
        found = batch_lab.verdict(made, batches.target_of(plant, made))
    return _shown(options, made, found)


def _verdict(options: argparse.Namespace) -> int:
    from blendtui.desk import batch_lab, batches

    with opened(options) as plant:
        made = plant.batch(options.batch)
        found = batch_lab.verdict(made, batches.target_of(plant, made))
    return _shown(options, made, found)


def _decide(options: argparse.Namespace) -> int:
    from blendtui.as_text import wrap
    from blendtui.desk import batch_lab
    from blendtui.store.harmless import harmless

    with opened(options) as plant:
        found = answered(lambda: batch_lab.decide(plant, options.batch, decision=" ".join(options.decision),
                                                  why=options.why, by=options.by, sure=options.sure))
    because = f" ({found.why})" if found.why else ""
    head = f"{found.batch} sample {found.sample}: {found.decision}, decided by {found.by}{because}"
    show(options, {"batch": found.batch, "sample": found.sample, "decision": found.decision, "words": found.words,
                   "at": found.at, "by": found.by, "why": found.why or None},
         "\n".join(wrap(harmless(words), "  ") for words in (head, found.words)))
    return DONE


# What is shown

def _shown(options: argparse.Namespace, made: Made, found: Verdict) -> int:
    show(options, verdict_json(made, found), verdict_text(made, found))
    return DONE


def sample_json(sample: Sample) -> dict[str, Any]:
    """A sample as it is on record."""
    return {"sample": sample.sample, "round": sample.round, "taken_at": sample.taken_at, "taken_by": sample.taken_by,
            "place": sample.place or None, "celsius": sample.celsius, "note": sample.note or None}


def result_json(result: Result) -> dict[str, Any]:
    """A result as it is on record."""
    return {"sample": result.sample, "line": result.line, "property": result.property, "value": result.value,
            "method": result.method, "at": result.at, "by": result.by, "withdrawn": result.withdrawn or None}


def verdict_json(made: Made, found: Verdict) -> dict[str, Any]:
    """What the results say, numbers unrounded; null: no result."""
    return {"batch": made.name, "decision": found.decision, "samples": list(found.samples),
            "decided": found.decided or None, "missing": list(found.missing), "remarks": list(found.remarks),
            "limits": [{"property": x.property, "low": x.low, "high": x.high, "value": x.value, "results": x.count,
                        "side": x.side or None, "distance": x.distance, "reproducibility": x.reproducibility,
                        "distance_r": x.in_r, "decision": x.decision, "words": x.words} for x in found.limits],
            "on_record": {"samples": [sample_json(s) for s in made.samples],
                          "results": [result_json(r) for r in made.results]}}


def verdict_text(made: Made, found: Verdict) -> str:
    """What the results say, in text of at most 80 columns."""
    from blendtui.store.harmless import harmless

    lines = [f"{harmless(made.name, 40)} {found.headline}", *(f"- {x.words}" for x in found.limits),
             *(f"  {words}" for words in found.remarks)]
    if found.decided:
        lines.append(f"decided: {found.decided}")
    return lines_of(lines)
