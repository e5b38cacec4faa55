"""The batches: what is ordered, where each stands, and new orders."""

from __future__ import annotations

from collections.abc import Iterable
from contextlib import suppress
from dataclasses import dataclass, field, replace

from textual.widget import Widget

from blendtui import commands
from blendtui.desk import batches as desk
from blendtui.store.batch_records import OPEN, Batch
from blendtui.store.errors import NoSuchRow
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.widgets.edit_line import Ended
from blendtui.widgets.grid import Cell, Column, Grid
from blendtui.widgets.lines import OneLine
from blendtui.widgets.page_text import PageText
from blendtui.widgets.paint import BAD, BOLD, PLAIN, Line, fit, with_tail, wrap

from . import floor_view, ordering, reading, tracing
from .floor_view import Seen
from .vessel_list import KEYS as VESSEL_KEYS
from .vessel_list import VesselCommands

LIST = (Column("batch", "batch", "", 8, "left"), Column("product", "product", "", 9, "left"),
        Column("asked", "ordered", "", 10), Column("vessel", "vessel", "", 7, "left"),
        Column("stage", "stage", "", 22, "left"), Column("customer", "customer", "", 11, "left"),
        Column("order_no", "order", "", 7, "left"), Column("ordered_at", "at", "", 16, "left"),
        Column("ordered_by", "by", "", 10, "left"), Column("note", "note", "", 20, "left"))


@dataclass(frozen=True)
class BatchesState:
    """The batches as they were read last, and which of them are shown."""

    words: str = ""  # the filter
    revision: int | None = None  # of the reading
    batches: tuple[Batch, ...] = ()
    stages: dict[str, str] = field(default_factory=dict)  # of those that came into sight
    seen: dict[str, Seen] = field(default_factory=dict)  # of those that the cursor was on


def ordered(batches: Iterable[Batch]) -> tuple[Batch, ...]:
    """Open ones first, each kind newest first, as the plant hands them out."""
    return tuple(sorted(batches, key=lambda b: b.state != OPEN))


def matches(batch: Batch, words: str) -> bool:
    """Is every typed word found in the batch's name, product, vessel, customer, order number or state?"""
    text = " ".join((batch.batch, batch.product, batch.vessel, batch.customer, batch.order_no, batch.state,
                     batch.ordered_by, batch.note)).lower()
    return all(word in text for word in words.lower().split())


def stages(plant: Plant, names: Iterable[str]) -> dict[str, str]:
    """Where each of these stands, in a few words; one whose order was taken back meanwhile is left out."""
    found = {}
    for name in names:
        with suppress(NoSuchRow):
            found[name] = floor_view.stage_words(plant.batch(name))
    return found


def _look(plant: Plant, name: str) -> Seen | None:
    """All of a batch; None where its order was taken back meanwhile."""
    with suppress(NoSuchRow):
        return floor_view.look(plant, name)
    return None


class BatchesScreen(VesselCommands):
    """Table of batches; on a wide terminal with a summary of the one under the cursor."""

    NAME = commands.BATCHES

    def __init__(self) -> None:
        super().__init__()
        self.state = BatchesState()
        self.grid = Grid(id="batches")
        self.grid.picked = self._moved
        self.grid.foot = lambda column: ""
        self.summary = PageText(id="summary")
        self.ordering = OneLine(id="caution")
        self.rows: tuple[Batch, ...] = ()
        self.wanted = ""  # the batch that the cursor goes to once the list has been read
        self.typed_orders: dict[str, dict[str, str]] = {}  # product → what was typed of an order not taken
        self.asked: set[str] = set()  # names whose stage or summary is being read

    def body(self) -> Iterable[Widget]:
        """The table and the summary, or the vessels; then what a new order is of, and who records."""
        return self.grid, self.summary, self.vessels, self.ordering

    @property
    def batch(self) -> Batch | None:
        """The batch under the cursor."""
        return self.rows[self.grid.row] if self.grid.row < len(self.rows) else None

    # Reading and showing

    def refresh_page(self) -> None:
        """Show what is there, and read it again where the plant has changed."""
        plant, revision = self.program.plant, self.snapshot.revision
        if self.state.revision != revision:
            self.state = replace(self.state, revision=revision)
            self.asked.clear()
            self.program.task(lambda: ordered(plant.batches()), lambda found: self._read(revision, found))
        self._show()
        if self.at_vessels:
            self.refresh_vessels()
        super().refresh_page()

    def show_keys(self) -> None:
        """The keys of the table that has them."""
        if self.at_vessels and not self.edit.active:
            self.keys.show(VESSEL_KEYS)
        else:
            super().show_keys()

    def _read(self, revision: int, found: tuple[Batch, ...]) -> None:
        if revision == self.state.revision:
            # What was read of a batch before stays in sight until it has been read again.
            self.state = replace(self.state, batches=found)
            self._show(self.wanted)
            self.wanted = ""

    def _show(self, here: str = "") -> None:
        here = here or (self.batch.batch if self.batch else "")
        self.rows = tuple(b for b in self.state.batches if matches(b, self.state.words))
        row = next((n for n, b in enumerate(self.rows) if b.batch == here), None)
        self.grid.empty = (f"no batch has the words {self.state.words!r}; Esc takes the filter off" if self.state.words
                           else "no batch yet; a takes an order for the product that all screens speak of")
        self.grid.show(LIST, len(self.rows), lambda r, c: self._cell(self.rows[r], LIST[c].code), row=row)
        self._show_row()
        self._read_in_sight()

    def _cell(self, batch: Batch, code: str) -> Cell:
        if code == "asked":
            return f"{batch.asked:.10g} {batch.unit}"
        if code == "stage":
            return self.state.stages.get(batch.batch, OPEN) if batch.state == OPEN else batch.state.upper()
        if code == "ordered_at":
            return desk.when(batch.ordered_at)
        return harmless(str(getattr(batch, code)))

    def _read_in_sight(self) -> None:
        """Ask for the stages of what is in sight, and for all of what is under the cursor."""
        revision, plant, here = self.state.revision, self.program.plant, self.batch
        last = self.grid.top + max(1, self.grid.room)
        names = [b.batch for b in self.rows[self.grid.top:last] if b.state == OPEN and b.batch not in self.asked]
        self.asked.update(names)
        if names:
            self.program.task(lambda: stages(plant, names), lambda found: self._staged(revision, found))
        if here is not None and (key := f"all of {here.batch}") not in self.asked:
            self.asked.add(key)
            self.program.task(lambda: _look(plant, here.batch), lambda seen: self._summed(revision, seen))

    def _staged(self, revision: int | None, found: dict[str, str]) -> None:
        if revision == self.state.revision:
            self.state = replace(self.state, stages={**self.state.stages, **found})
            self.grid.paint()

    def _summed(self, revision: int | None, seen: Seen | None) -> None:
        if revision == self.state.revision and seen is not None:
            self.state = replace(self.state, seen={**self.state.seen, seen.made.name: seen})
            self._show_row()

    def _show_row(self) -> None:
        batch, count = self.batch, len(self.rows)
        if self.at_vessels:
            self.ordering.show(("the margin to the flash point is the site's own, typed and dated; there is no default",
                                PLAIN))
            self.show_vessel()
            return
        self._show_ordering()
        place = f"{self.grid.row + 1} of {count}" if count else "none"
        self.title_line.show(f"filter {place}" if self.state.words else place)
        seen = self.state.seen.get(batch.batch) if batch else None
        self.summary.show(summary(seen, max(20, self.size.width - 1)) if seen else [], keep=False)
        if batch is None:
            self.edit.show("", "")
        else:
            self.edit.show(harmless(batch.batch), floor_view.next_words(seen) if seen else "")

    def _show_ordering(self) -> None:
        """What a new order would be of, and under which name steps are recorded."""
        product = self.snapshot.product(self.session.product)
        what = f"new order of {harmless(product.product, 20)}" if product else "no product yet"
        name = f", {harmless(product.name, 40)}; [ ] another product" if product else ""
        self.ordering.show(*with_tail([("a: ", BOLD), (what, BOLD), (name, PLAIN)], f"as {self.who}", self.size.width))

    def spare(self) -> int:
        """Blank lines under the table."""
        shown = self.vessels if self.at_vessels else self.grid
        return shown.size.height - shown.needs()

    def on_resize(self) -> None:
        """Lay everything for the new size."""
        self._show()

    def move(self, key: str) -> None:
        """Move the cursor."""
        if self.at_vessels:
            if self.vessels.move(key):
                self.show_vessel()
        elif self.grid.move(key):
            self._moved()

    def _moved(self) -> None:
        self._show_row()
        self._read_in_sight()

    # Commands

    def do_open(self) -> None:
        """Open the batch under the cursor on the floor; among the vessels, type the cell."""
        if self.at_vessels:
            self.edit_vessel()
        elif self._here():
            self.session.batch = self.batch.batch  # type: ignore[union-attr]
            self.program.go(commands.FLOOR)

    def _here(self) -> bool:
        if self.at_vessels:
            self.say("v goes back to the batches first")
        elif self.batch is None:
            self.say("there is no batch here; a takes an order")
        return self.batch is not None and not self.at_vessels

    def do_filter(self) -> None:
        """Type the words of the filter."""
        if self.at_vessels:
            self.say("v goes back to the batches first")
            return
        self.type_text("show batches with the words", self.state.words, self._filter)

    def _filter(self, ended: Ended) -> None:
        self.state = replace(self.state, words=" ".join(ended.text.split()))
        self._show()
        self.say(f"{len(self.rows)} of {len(self.state.batches)} batches"
                 + ("; Esc shows all again" if self.state.words else ""))

    def do_back(self) -> None:
        """Go back to the batches, or take the filter off."""
        if self.at_vessels:
            self.do_vessels()
        elif self.state.words:
            self._filter(Ended(""))
        else:
            self.program.do_back()

    def do_add(self) -> None:
        """Ask for an order, show its charges, and take it when told so; among the vessels, add one."""
        if self.at_vessels:
            self.add_vessel()
        else:
            ordering.ask(self)

    def do_redesign(self) -> None:
        """Show the charges of the batch under the cursor worked out anew, and take them when told so."""
        if self._here():
            ordering.anew(self, self.batch.batch)  # type: ignore[union-attr]

    def do_cancel(self) -> None:
        """Cancel the batch under the cursor; among the vessels, retire one."""
        if self.at_vessels:
            self.retire_vessel()
            return
        if not self._here():
            return
        name, plant, by = self.batch.batch, self.program.plant, self.session.by  # type: ignore[union-attr]

        def make(why: str, sure: bool) -> object:
            from blendtui.desk import orders

            return orders.cancel(plant, name, by=by, why=why, sure=sure)

        self.type_why(f"{harmless(name)} is cancelled", make, lambda made: self.program.say(
            f"{name} cancelled; what was promised to it is free; u takes it back", "done"), yes="cancel it")

    def do_trace(self) -> None:
        """Follow a name both ways."""
        tracing.ask(self, self.batch.batch if self.batch else "")

    def do_write(self) -> None:
        """Write the card of the batch under the cursor."""
        if self._here():
            reading.write_card(self, self.batch.batch)  # type: ignore[union-attr]


def summary(seen: Seen, width: int) -> list[Line]:
    """A batch in the lines under the list: heading, what is next, charges, what is missing for the release."""
    lines: list[Line] = [[(f"{seen.name}: ", BOLD), (floor_view.headline(seen), PLAIN)],
                         [(floor_view.ordered_words(seen.made.head), PLAIN)]]
    lines += [[(part, PLAIN)] for part in wrap("next: " + floor_view.next_words(seen), width, "  ")]
    for line in floor_view.card_lines(seen, {}):
        cells = line.cells
        done = (f"{cells['actual']} kg by {cells['by']}" if line.charge.actual_kg is not None else
                cells["actual"] or "to charge")
        lines.append([(f"  {cells['mark'] or ' '} {cells['line']:>5}  {fit(cells['stock'], 12)} {cells['plan']:>10} kg"
                       f"  {fit(cells['lot'], 18)}  {done}", PLAIN)])
    if seen.missing and not seen.made.to_charge:
        lines += [[(part, BAD)] for part in wrap("! before the release: " + "; ".join(seen.missing), width, "  ")]
    return lines
