"""A trace at the console: a name is asked for, and shown both ways."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from blendtui.desk import batches, numbers
from blendtui.store.harmless import harmless

from .base import Page
from .reading import ReadingScreen

if TYPE_CHECKING:
    from blendtui.desk.trace import Node, Trace


def ask(page: Page, begun: str) -> None:
    """Ask for a name and show what it leads to."""
    plant = page.program.plant

    def then(name: str) -> None:
        def work() -> list[str]:
            from blendtui.desk import trace as desk

            return list(lines(desk.trace(plant, name)))

        head = f"Trace of {harmless(name, 40)}"
        page.program.task(work, lambda text: page.app.push_screen(ReadingScreen(head, text)))

    page.type_checked("trace which lot, batch, order, customer or stock", begun, str.strip, then)


def lines(found: Trace) -> Iterator[str]:
    """A trace in lines of 80 columns: what it is, where it comes from, where it went and is now."""
    yield f"{found.what} {harmless(found.name, 40)}" + (f" (there is a {' and a '.join(found.also)} of this name too)"
                                                        if found.also else "")
    yield from (f"  {harmless(each, 400)}" for each in found.words)
    yield from ("", "COMES FROM", f"  {'mass %':>7} {'kg':>11}")
    for node in found.back:
        yield from _back(node, 0)
    if not found.back:
        yield "  nothing is on record"
    if found.origins:
        yield from ("", "LOTS AT THE FAR END", f"  {'mass %':>7} {'kg':>11}  stock, lot")
    for origin in found.origins:
        name = ", lot ".join(part for part in (harmless(origin.stock, 30), harmless(origin.lot, 30)) if part)
        yield f"  {_pct(origin.part)} {_kg(origin.kg)}  {name or 'of unknown origin'}"
    if found.faint:
        yield f"  {_pct(found.faint)}              not followed: less than a gram in a tonne each"
    yield from ("", "WENT INTO", f"  {'mass %':>7} {'kg':>11}  batch")
    for use in found.uses:
        whose = ", ".join(part for part in (harmless(use.customer, 30), f"order {harmless(use.order_no, 20)}" if
                                            use.order_no else "", use.state) if part)
        yield (f"  {_pct(use.part)} {_kg(use.kg)}  {harmless(use.batch, 20)} {harmless(use.product, 16)}, {whose}, "
               f"{batches.when(use.at)}; packed {numbers.kg(use.packed_kg)} kg of it")
    if not found.uses:
        yield "  no batch"
    yield from ("", "IS NOW IN")
    for place in found.places:
        yield (f"  {_pct(place.part)} {_kg(place.kg)}  {place.what} {harmless(place.name, 30)}"
               + (f", {harmless(place.lot, 30)}" if place.lot else ""))
    if not found.places:
        yield "  no tank and no vessel"


def _back(node: Node, depth: int) -> Iterator[str]:
    indent = "  " * depth
    yield (f"  {_pct(node.part)} {_kg(node.kg)}  {indent}{node.what} {harmless(node.name, 30)}"
           + (f": {harmless(node.words, 200)}" if node.words else ""))
    for below in node.below:
        yield from _back(below, depth + 1)


def _pct(part: float) -> str:
    return f"{numbers.pct(part):>7}"


def _kg(mass: float) -> str:
    return f"{numbers.kg(mass):>11}"
