"""Trace a lot, batch, order, customer or stock both ways: headless."""

from __future__ import annotations

import argparse
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from .common import DONE, Add, opened, show, told
from .stock import lines_of, lot_json

if TYPE_CHECKING:
    from blendtui.desk.trace import Node, Trace, Use

NAME = 42  # columns of a step's name
MARK, DEEPEST = 19, 8
MOST_STEPS = 80  # lines of steps back on paper; JSON has all of them


def register(add: Add) -> None:
    """Add `trace`."""
    command = add("trace", _trace, "where oil comes from and where it went, through tanks, rework and heels")
    command.add_argument("name", metavar="NAME", help="a lot, a batch, an order number, a customer or a stock")
    command.add_argument("--kind", metavar="KIND", default="",
                         help="batch, lot, stock, order or customer, where one name is several of them")


def _trace(options: argparse.Namespace) -> int:
    from blendtui.desk.trace import trace

    with opened(options) as plant:
        found = trace(plant, options.name, kind=options.kind)
    show(options, trace_json(found), trace_text(found))
    return DONE


def trace_json(found: Trace) -> dict[str, Any]:
    """Answer of `trace`; parts are mass fractions."""
    return {"name": found.name, "kind": found.what, "also": list(found.also), "said": list(found.words), "kg": found.kg,
            "back": [_node_json(n) for n in found.back],
            "origins": [{"stock": o.stock or None, "lot": o.lot or None, "kg": o.kg, "part": o.part,
                         "receipt": None if o.receipt is None else lot_json(o.receipt)} for o in found.origins],
            "batches_back": dict(found.batches), "not_followed_back": found.faint,
            "batches": [told(u, via=list(u.via)) for u in found.uses],
            "now_in": [told(p) for p in found.places], "not_followed_on": found.faint_uses}


def _node_json(node: Node) -> dict[str, Any]:
    return {"what": node.what, "name": node.name, "kg": node.kg, "part": node.part, "said": node.words or None,
            "of": [_node_json(n) for n in node.below]}


def trace_text(found: Trace) -> str:
    """Text of `trace`: 80 columns."""
    also = [f"{found.name} is a {' and a '.join(found.also)} too: --kind says which is meant"] if found.also else []
    parts = [lines_of([*found.words, *also]), _steps(found), _origins(found), _uses(found), _places(found)]
    faint = []
    if found.faint > 0.0:
        faint.append(f"{100.0 * found.faint:.2g} % was not followed back further: steps of less than a gram in a tonne")
    if found.faint_uses:
        faint.append(f"of {found.faint_uses} batches less than a gram in a tonne went on; that was not followed")
    return "\n\n".join(x for x in [*parts, lines_of(faint)] if x)


def _steps(found: Trace) -> str:
    from blendtui.desk import numbers
    from blendtui.store.harmless import harmless

    lines = [f"{'made of':<{NAME}} {'kg':>9} {'mass %':>7}", f"{'-' * NAME} {'-' * 9} {'-' * 7}"]
    steps = [step for node in found.back for step in _walk(node, 0)]
    if not any(node.below for node in found.back):
        return ""
    for depth, node in steps[:MOST_STEPS]:
        name = "  " * min(depth, DEEPEST) + ("" if node.what == "charge" else f"{node.what} ") + harmless(node.name, 60)
        lines.append(f"{name[:NAME]:<{NAME}} {numbers.kg(node.kg):>9} {numbers.pct(node.part):>7} "
                     f"{harmless(node.mark, MARK)}".rstrip())
    if len(steps) > MOST_STEPS:
        lines.append(f"and {len(steps) - MOST_STEPS} steps more: --json has all of them")
    return "\n".join(lines)


def _walk(node: Node, depth: int) -> Iterator[tuple[int, Node]]:
    yield depth, node
    for below in node.below:
        yield from _walk(below, depth + 1)


def _origins(found: Trace) -> str:
    from blendtui.as_text import table
    from blendtui.desk import batches, numbers
    from blendtui.store.harmless import harmless

    rows = [[harmless(o.stock, 22) or "unknown", harmless(o.lot, 16) or "not recorded",
             batches.when(o.receipt.received_at)[:10] if o.receipt else "",
             harmless(o.receipt.certificate, 10) if o.receipt else "", numbers.kg(o.kg), numbers.pct(o.part)]
            for o in found.origins]
    return table(["comes from", "lot", "received", "cert.", "kg", "mass %"], rows, left=4, gap=" ") if rows else ""


def _uses(found: Trace) -> str:
    from blendtui.as_text import table

    if not found.uses:
        return "it went into no batch"
    text = table(["in batch", "order", "customer", "state", "kg", "mass %", "packed"], [_use(u) for u in found.uses],
                 left=4, gap=" ")
    lines = text.split("\n")
    for i, use in enumerate(found.uses, 2):
        lines[i] = "\n".join([lines[i], *([lines_of([f"  by {', '.join(use.via)}"])] if use.via else [])])
    return "\n".join(lines) + "\nkg and packed are of what is traced; mass % is of the batch"


def _use(use: Use) -> list[str]:
    from blendtui.desk import numbers
    from blendtui.store.harmless import harmless

    return [harmless(use.batch, 14), harmless(use.order_no, 14), harmless(use.customer, 16), use.state,
            numbers.kg(use.kg), numbers.pct(use.part), numbers.kg(use.packed_kg)]


def _places(found: Trace) -> str:
    from blendtui.as_text import table
    from blendtui.desk import numbers
    from blendtui.store.harmless import harmless

    rows = [[f"{p.what} {harmless(p.name, 30)}", harmless(p.lot, 24), numbers.kg(p.kg), numbers.pct(p.part)]
            for p in found.places]
    return table(["now in", "as", "kg", "mass % of it"], rows, left=2) if rows else ""
