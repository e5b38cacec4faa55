"""The end of a batch: trim, release and certificate, headless."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING

from .common import DONE, NO_BLEND, Add, opened, path, say, show
from .stock import answered, person

if TYPE_CHECKING:
    from blendtui.desk.certificate import Certificate
    from blendtui.desk.trimming import Effect, Proposed


def add_to(of_batch: Add) -> None:
    """Add `trim`, `release` and `certificate` to `batch`."""
    made = of_batch("trim", _trim, "what to add so that a measured batch meets every limit")
    _batch(made)
    made.add_argument("--aim", metavar="cost|mass", default="cost", help="least cost (the default) or least mass")
    made.add_argument("--chance", metavar="PCT", help="chance at which each limit is to be met, 50 to 99.9 %%")
    made.add_argument("--only", action="append", default=[], metavar="STOCK",
                      help="the only oil that may be added; may be repeated; additives are topped up all the same")
    made.add_argument("--take", action="store_true", help="plan it: its charges join the card and reserve their oil")
    person(made)
    made = of_batch("release", _release, "release a batch that lacks nothing")
    _batch(made)
    person(made)
    made = of_batch("certificate", _certificate, "certificate of analysis of a released batch")
    _batch(made)
    made.add_argument("--write", metavar="FILE", type=path, help="as text, to a new file")
    made.add_argument("--html", metavar="FILE", type=path, help="as a page of A4, to a new file")


def _batch(command: argparse.ArgumentParser) -> None:
    command.add_argument("batch", metavar="BATCH", help="such as B-0001")


# Trim

def _trim(options: argparse.Namespace) -> int:
    from blendtui.desk import chance, trimming
    from blendtui.quiet import quiet

    wanted = None if options.chance is None else chance.confidence(options.chance)
    taken = None
    with opened(options) as plant:
        say(f"trimming {options.batch} …")
        with quiet():
            found = trimming.propose(plant, options.batch, aim=options.aim, chance=wanted, stocks=options.only)
        if options.take and found.trim.additions_kg is not None:
            taken = answered(lambda: trimming.take_proposed(plant, found, by=options.by, why=options.why,
                                                            sure=options.sure))
    answer = {**trimming.proposed_json(found), "taken": taken is not None}
    show(options, answer, trim_text(found, taken is not None))
    return DONE if found.trim.additions_kg is not None else NO_BLEND


def trim_text(found: Proposed, taken: bool) -> str:
    """A trim in text of at most 80 columns."""
    from blendtui.as_text import table, wrap
    from blendtui.desk import numbers
    from blendtui.desk.sheet import NOT_A_CERTIFICATE, mass_shown
    from blendtui.store.harmless import harmless

    trim = found.trim
    parts = [wrap(_headline(found), "  ")]
    if found.charges:
        stocks = {s.code: s for s in found.used}
        rows = [[f"{c.line}", harmless(c.stock, 34), mass_shown(stocks[c.stock], c.plan_kg), numbers.kg(c.tolerance_kg),
                 f"{trim.packages[c.stock]} packages" if c.stock in trim.packages else ""] for c in found.charges]
        parts.append(table(["line", "add", "kg", "± kg", ""], rows, left=2))
    parts.append(table(["property", "now", "", "then", "least", "most", ""], [_effect(e) for e in found.effects]))
    parts.append("\n".join(wrap(f"{'!' if words in found.questions else '-'} {harmless(words, 600)}", "  ")
                           for words in found.words))
    if taken:
        lines = ", ".join(str(c.line) for c in found.charges)
        parts.append(wrap(f"Planned as trim {found.round}: line {lines} of the card; their oil is reserved.", "  "))
    return "\n\n".join([*parts, NOT_A_CERTIFICATE])


def _headline(found: Proposed) -> str:
    from blendtui.desk import numbers
    from blendtui.store.harmless import harmless

    trim, name = found.trim, harmless(found.made.name, 40)
    samples = ", ".join(map(str, found.samples))
    if trim.additions_kg is None:
        return f"{name}: NO TRIM from sample {samples}"
    if not trim.additions_kg:
        return f"{name}: nothing to add, by sample {samples}"
    aim = {"cost": "least cost", "mass": "least mass"}[found.aim]
    sure = "" if trim.chance is None else f", each limit with {100.0 * trim.chance:g} %"
    first = f"draw off {numbers.kg(trim.drawn_kg)} kg first, then " if trim.drawn_kg > 0.0 else ""
    return (f"{name} trim {found.round} ({aim}{sure}), from sample {samples}: {first}add "
            f"{numbers.kg(trim.added_kg)} kg for {numbers.cost(trim.cost)}")


def _effect(each: Effect) -> list[str]:
    from blendtui.desk import numbers
    from solver.properties import lookup

    least, most = (("" if v is None else numbers.value(each.property, v)) for v in (each.low, each.high))
    met = {True: "met", False: "NOT MET", None: ""}[each.met if (least or most) else None]
    # What stands before is a result unless it says that it is predicted.
    mark = "" if each.measured else "predicted"
    return [lookup(each.property).label[:28], numbers.value(each.property, each.before), mark,
            numbers.value(each.property, each.after), least, most, met]


# Release and certificate

def _release(options: argparse.Namespace) -> int:
    from blendtui.as_text import wrap
    from blendtui.desk import batches, release

    with opened(options) as plant:
        made = answered(lambda: release.release(plant, options.batch, by=options.by, why=options.why,
                                                sure=options.sure))
        remarks = release.remarks(plant, made)
        entry, last = plant.revision(), plant.last_hash()
    head = made.head
    answer = {"batch": head.batch, "state": head.state, "released_by": head.closed_by, "released_at": head.closed_at,
              "remarks": list(remarks), "record": {"entry": entry, "hash": last}}
    lines = [f"{head.batch} released by {head.closed_by}, {batches.when(head.closed_at)}",
             *(f"- {x}" for x in remarks), f"certificate: blendtui batch certificate {head.batch}",
             f"record: entry {entry}, {last}"]
    show(options, answer, "\n".join(wrap(line, "  ") for line in lines))
    return DONE


def _certificate(options: argparse.Namespace) -> int:
    from blendtui.desk import certificate

    with opened(options) as plant:
        made = certificate.certificate(plant, options.batch)
    written = _written(options, made)
    answer = {**certificate.certificate_json(made), "written": [str(x) for x in (options.write, options.html) if x]}
    show(options, answer, "\n".join(written) if written else certificate.certificate_text(made).rstrip("\n"))
    return DONE


def _written(options: argparse.Namespace, made: Certificate) -> list[str]:
    """Write what is asked for, both files or none."""
    from blendtui.desk import certificate
    from blendtui.desk.certificate_html import certificate_html

    asked: list[tuple[Path, str]] = []
    if options.write is not None:
        asked.append((options.write, certificate.certificate_text(made)))
    if options.html is not None:
        asked.append((options.html, certificate_html(made)))
    return certificate.write_all(asked)
