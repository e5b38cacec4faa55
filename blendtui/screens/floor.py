"""The floor: one batch from its first charge to its release, by keyboard alone."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from typing import Any

from textual.widget import Widget

from blendtui import commands
from blendtui.store.batch_records import DROPPED, PLANNED, Charge
from blendtui.store.harmless import harmless
from blendtui.widgets.grid import Cell, Column, Grid, more_only
from blendtui.widgets.head import Head
from blendtui.widgets.lines import OneLine
from blendtui.widgets.paint import BAD, BOLD, DIM, PLAIN, cut_line, with_tail

from . import floor_lab, floor_view, reading, remedy
from .floor_charge import ChargeCommands
from .floor_lab import LabCommands
from .floor_out import OutCommands
from .floor_view import CardLine, Seen

CHARGES = (Column("mark", "", "", 1, "left"), Column("line", "no", "", 4, "left"),
           Column("stock", "stock", "", 10, "left"), Column("plan", "plan", "kg", 8),
           Column("tolerance", "±", "kg", 4), Column("lot", "lot", "", 11, "left"),
           Column("scale", "scale", "kg", 8), Column("actual", "actual", "kg", 8), Column("by", "who", "", 8, "left"),
           Column("check", "check", "", 8, "left"), Column("at", "when", "", 16, "left"),
           Column("packages", "packages", "kg", 10, "left"), Column("why", "why", "", 40, "left"))
LAB_KEYS = ("enter", "tab", "s", "v", "d", "t", "p", "L", "e", "w", "k", "n")  # first on the laboratory's key line


@dataclass(frozen=True)
class FloorState:
    """The batch as it was read last, and where the keys go."""

    testing: bool = False  # to the laboratory, else to the charges
    seen: Seen | None = None
    lots: dict[int, str] = field(default_factory=dict)  # line → lot typed for a charge to come
    refusal: str = ""  # why the batch could not be read


class FloorScreen(LabCommands, ChargeCommands, OutCommands):
    """The charges over the laboratory; on a small terminal one of the two."""

    NAME = commands.FLOOR

    def __init__(self) -> None:
        super().__init__()
        self.state = FloorState()
        self.head = Head()
        self.charges = Grid(id="charges", fixed=3)
        self.charges.foot = more_only
        self.charges.picked = self._show_row
        self.tests = Grid(id="tests", fixed=2)
        self.tests.foot = more_only
        self.tests.active = False
        self.tests.picked = self._show_row
        self.caution = OneLine(id="caution")
        self.lines: list[CardLine] = []
        self.lab_lines: list[floor_lab.LabLine] = []
        self.read_for: tuple[int, str] | None = None
        self.looked = False  # has the plant been read yet
        self.shown_name = ""  # of the batch on the screen
        self.wants_next = False  # charges were planned from here: the cursor goes to the first of them

    def body(self) -> Iterable[Widget]:
        """Heading and next step, charges, laboratory, cautions."""
        return self.head, self.charges, self.tests, self.caution

    @property
    def seen(self) -> Seen | None:
        """The batch as it was read last."""
        return self.state.seen

    @property
    def charge(self) -> Charge | None:
        """The charge under the cursor."""
        return self.lines[self.charges.row].charge if self.charges.row < len(self.lines) else None

    # Reading and showing

    def refresh_page(self) -> None:
        """Show what is there, and read it again where the plant has changed."""
        wanted = (self.snapshot.revision, self.session.batch)
        if wanted != self.read_for:
            self.read_for, plant = wanted, self.program.plant
            self.program.task(lambda: floor_view.look_or_newest(plant, wanted[1]),
                              lambda seen: self._looked(wanted, seen),
                              lambda refusal: self._looked(wanted, None, refusal))
        self._show()
        super().refresh_page()

    def _looked(self, wanted: tuple[int, str], seen: Seen | None, refusal: str = "") -> None:
        if wanted != self.read_for:
            return
        self.looked, name = True, seen.made.name if seen else ""
        other, self.shown_name = name != self.shown_name, name
        if not refusal and self.session.batch != name:
            # One that is ordered later does not take its place; one whose order was taken back is there no more.
            self.session.batch = name
            self.read_for = (wanted[0], name)
        to_come = {c.line for c in seen.made.to_charge} if seen else set()
        lots = {} if other else {line: lot for line, lot in self.state.lots.items() if line in to_come}
        moved_on = other or self.wants_next or self._was_next(seen)
        self.wants_next = False
        self.state = replace(self.state, seen=seen, lots=lots, refusal=refusal)
        self._show(to_next=moved_on)

    def _was_next(self, seen: Seen | None) -> bool:
        """Did the cursor stand on the next charge, and is that another one now?"""
        before = self.seen
        if before is None or seen is None or not before.made.to_charge or self.charge is None:
            return False
        now = seen.made.to_charge[0].line if seen.made.to_charge else None
        return self.charge.line == before.made.to_charge[0].line != now

    def _show(self, *, to_next: bool = False) -> None:
        seen, here = self.seen, self.charge
        self.lines = list(floor_view.card_lines(seen, self.state.lots)) if seen else []
        self.lab_lines = floor_lab.lab_lines(seen) if seen else []
        row = next((n for n, x in enumerate(self.lines) if here and x.charge.line == here.line), None)
        if to_next:
            row = next((n for n, x in enumerate(self.lines) if x.charge.state == PLANNED), row or 0)
        self.charges.empty = self.state.refusal or (
            "no charges" if seen else "no batch yet: on the screen Batches, a takes an order" if self.looked else
            "reading the batch …")
        self.charges.show(CHARGES, len(self.lines), self._cell, row=row)
        self.tests.empty = "no sample yet; s records one once everything is charged" if seen else ""
        self.tests.show(floor_lab.COLUMNS, len(self.lab_lines), self._lab_cell)
        self._show_head()
        self._show_row()

    def _show_head(self) -> None:
        seen = self.seen
        if seen is None:
            self.head.show([])
            self.caution.show()
            return
        width, missed = self.size.width, floor_view.missed_words(seen)
        self.head.show([with_tail([(f"{seen.name}: ", BOLD), (floor_view.headline(seen), PLAIN)], f"as {self.who}",
                                  width),
                        cut_line([("next: ", BOLD), (floor_view.next_words(seen), PLAIN)], width)])
        if missed:
            self.caution.show((missed, BAD))
            return
        titles = ", ".join(f"! {c.title}" if c.warns else c.title for c in seen.cautions)
        warns = any(c.warns for c in seen.cautions)
        self.caution.show((f"k: {len(seen.cautions)} cautions, site procedure decides: ", BOLD),
                          (titles, BAD if warns else PLAIN))

    def _cell(self, row: int, column: int) -> Cell:
        line, code = self.lines[row], CHARGES[column].code
        text = line.cells[code]
        if code in ("mark", "actual") and line.cells["mark"] == "!":
            return text, BAD
        return (text, DIM) if line.charge.state == DROPPED else text

    def _lab_cell(self, row: int, column: int) -> Cell:
        return floor_lab.cell(self.lab_lines[row], column)

    def _show_row(self) -> None:
        seen = self.seen
        count = len(self.lab_lines if self.state.testing else self.lines)
        grid = self.tests if self.state.testing else self.charges
        self.title_line.show(harmless(self.shown_name, 12) or "no batch",
                             f" {grid.row + 1} of {count}" if count else "")
        if seen is None:
            self.edit.show("", "")
        elif self.state.testing:
            self.edit.show(*floor_lab.told(self.lab_lines, self.tests.row))
        else:
            self.edit.show(*self._told())

    def _told(self) -> tuple[str, str]:
        """The charge under the cursor and what is known of it that has no room in the table."""
        charge, seen = self.charge, self.seen
        if charge is None or seen is None:
            return "", ""
        cells = self.lines[self.charges.row].cells
        stock = seen.stocks.get(charge.stock)
        told = [harmless(stock.name) if stock else "", f"{charge.celsius:g} °C" if charge.celsius is not None else "",
                f"{cells['packages']} kg" if cells["packages"] else "", f"lot {cells['lot']}" if cells["lot"] else "",
                f"checked by {cells['check']}" if charge.checked_by else "", cells["why"]]
        return f"{charge.line} {harmless(charge.stock)}", ", ".join(part for part in told if part)

    def spare(self) -> int:
        """Blank lines under the tables in sight."""
        shown = [grid for grid in (self.charges, self.tests) if grid.display]
        return min(grid.size.height - grid.needs() for grid in shown)

    def on_resize(self) -> None:
        """Lay everything for the new size."""
        self._show()

    def show_keys(self) -> None:
        """Keys of the pane that has them first."""
        if self.state.testing and not self.edit.active:
            found = {c.keys[0]: (c.key, c.label) for c in commands.of(self.NAME) if c.screen == self.NAME}
            listed = [found[key] for key in LAB_KEYS]
            self.keys.show([*listed, *(pair for pair in commands.key_line(self.NAME) if pair not in found.values())])
        else:
            super().show_keys()

    def charges_planned(self) -> None:
        """Charges to come were planned from here: go to the first of them."""
        self.wants_next = True
        self.go_pane(False)

    # Commands

    def move(self, key: str) -> None:
        """Move in the charges or in the laboratory."""
        if (self.tests if self.state.testing else self.charges).move(key):
            self._show_row()

    def do_pane(self) -> None:
        """From the charges to the laboratory, and back."""
        self.go_pane(not self.state.testing)

    def go_pane(self, testing: bool) -> None:
        """Let the laboratory or the charges have the keys."""
        self.state = replace(self.state, testing=testing)
        self.set_class(testing, "-testing")
        self.charges.activate(not testing)
        self.tests.activate(testing)
        self._show_row()
        self.show_keys()

    def do_next(self) -> None:
        """Go to the next open batch."""
        from blendtui.store.batch_records import OPEN

        plant, here = self.program.plant, self.shown_name

        def then(found: list[Any]) -> None:
            names = [b.batch for b in found]
            if not names or names == [here]:
                self.say("no other batch is open")
                return
            self.session.batch = names[(names.index(here) + 1) % len(names)] if here in names else names[0]
            self.refresh_page()

        self.program.task(lambda: plant.batches(OPEN), then)

    def do_cautions(self) -> None:
        """Show the cautions in full."""
        if self.seen is None:
            self.say("there is no batch here")
            return
        text = ["Reminders, each with its reason; none is a permission. The site's procedures, safety data sheets, "
                "permits and local codes decide."]
        for each in self.seen.cautions:
            text += ["", each.title.upper(), f"  {each.reason}", f"{'! ' if each.warns else '  '}{each.advice}"]
        self.app.push_screen(reading.ReadingScreen(f"Cautions for {self.seen.name}", text))

    def do_type(self) -> None:
        """Type the actual of a charge, or a result."""
        if self.state.testing:
            self.type_result()
        else:
            self.type_actual()

    def do_remedy(self) -> None:
        """Show what the batch will be, and the charges to come worked out anew."""
        if self.seen is None:
            self.say("there is no batch here")
            return
        remedy.show_outlook(self, self.seen.made)
