"""The vessels, in place of the batches on their screen: a table whose cells are typed over."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from blendtui.store.harmless import harmless
from blendtui.widgets.grid import Column, Grid, more_only

from .steps import StepPage

if TYPE_CHECKING:
    from blendtui.desk.stocks import Edit
    from blendtui.store.batch_records import Vessel

TABLE = (Column("vessel", "vessel", "", 8, "left"), Column("capacity_l", "capacity", "L", 8),
         Column("least_fill_l", "least fill", "L", 10), Column("division_kg", "division", "kg", 8),
         Column("heel_kg", "heel", "kg", 7), Column("heel_stock", "heel of", "", 9, "left"),
         Column("flash_margin_c", "margin", "°C", 6), Column("flash_margin_on", "typed on", "", 10, "left"),
         Column("charge_order", "order of charging", "", 40, "left"))
HELP = {"heel_stock": "a stock, or the batch that was made there last",
        "flash_margin_c": "the site's own margin below the flash point; dated today",
        "flash_margin_on": "the day on which the margin was typed",
        "charge_order": "light heavy vi_improver additive rinse, or stocks; empty: the usual order"}
KEYS = [("Enter", "edit"), ("a", "add"), ("d", "retire"), ("v", "batches"), ("b", "name"), ("u", "undo"),
        ("r", "redo"), (":", "all"), ("q", "quit"), ("?", "help")]


@dataclass(frozen=True)
class VesselRow:
    """A vessel with the texts of its cells."""

    vessel: Vessel
    texts: Mapping[str, str]


def read(plant: Any) -> tuple[VesselRow, ...]:
    """Every vessel in use, each cell as it is shown and may be typed back."""
    from blendtui.desk import vessels

    return tuple(VesselRow(v, {c.code: vessels.text_of(plant, v, c.code) for c in vessels.VESSEL_CELLS})
                 for v in plant.vessels())


class VesselCommands(StepPage):
    """The table of vessels and its steps."""

    def __init__(self) -> None:
        super().__init__()
        self.vessels = Grid(id="vessels")
        self.vessels.picked = self.show_vessel
        self.vessels.foot = more_only
        self.vessel_rows: tuple[VesselRow, ...] = ()
        self.at_vessels = False
        self.vessels_read_for: int | None = None
        self.wanted_vessel = ""  # the one that the cursor goes to once it has been read

    @property
    def vessel_row(self) -> VesselRow | None:
        """The vessel under the cursor."""
        return self.vessel_rows[self.vessels.row] if self.vessels.row < len(self.vessel_rows) else None

    def do_vessels(self) -> None:
        """From the batches to the vessels, and back."""
        self.at_vessels = not self.at_vessels
        self.set_class(self.at_vessels, "-vessels")
        self.refresh_page()
        self.say("Enter edits a cell, a adds a vessel, v goes back to the batches" if self.at_vessels else "")

    def refresh_vessels(self) -> None:
        """Show what is there, and read it again where the plant has changed."""
        revision, plant = self.snapshot.revision, self.program.plant
        if self.vessels_read_for != revision:
            self.vessels_read_for = revision
            self.program.task(lambda: read(plant), lambda rows: self._read_vessels(revision, rows))
        self.vessels.empty = "no vessel yet; a adds one"
        self.vessels.show(TABLE, len(self.vessel_rows), self._vessel_cell)
        self.show_vessel()

    def _read_vessels(self, revision: int, rows: tuple[VesselRow, ...]) -> None:
        if revision == self.vessels_read_for and self.at_vessels:
            self.vessel_rows = rows
            names = [row.vessel.vessel for row in rows]
            if self.wanted_vessel in names:
                self.vessels.row, self.vessels.column = names.index(self.wanted_vessel), 1
                self.wanted_vessel = ""
            self.refresh_vessels()

    def _vessel_cell(self, row: int, column: int) -> str:
        shown, code = self.vessel_rows[row], TABLE[column].code
        if code == "vessel":
            return harmless(shown.vessel.vessel)
        return harmless(shown.texts[code]) or ("" if code == "charge_order" else "–")

    def show_vessel(self) -> None:
        """The cell under the cursor in full."""
        row, column = self.vessel_row, TABLE[self.vessels.column]
        self.title_line.show("vessels", f" {self.vessels.row + 1} of {len(self.vessel_rows)}" if row else "")
        if row is None:
            self.edit.show("", "")
        elif column.code == "vessel":
            self.edit.show(harmless(row.vessel.vessel), "")
        else:
            unit = f", {column.unit}" if column.unit else ""
            value = harmless(row.texts[column.code]) or ("the usual" if column.code == "charge_order" else "unknown")
            self.edit.show(f"{harmless(row.vessel.vessel, 20)} · {column.heading}{unit}", value)

    def edit_vessel(self) -> None:
        """Type the cell under the cursor."""
        row, column = self.vessel_row, TABLE[self.vessels.column]
        if row is None:
            self.refuse("there is no vessel here; a adds one")
            return
        if column.code == "vessel":
            self.refuse("the name of a vessel stays: batches speak of it; → goes to its cells")
            return
        plant, name = self.program.plant, row.vessel.vessel

        def save(typed: str, confirmed: bool) -> Edit:
            from blendtui.desk import vessels

            return vessels.set_cell(plant, name, column.code, typed)

        told = [part for part in (column.unit, HELP.get(column.code, "empty: unknown")) if part]
        self.type_cell(f"{harmless(name, 12)} {column.heading} ({', '.join(told)})", row.texts[column.code], save)

    def add_vessel(self) -> None:
        """Add a vessel under a name of its own."""
        plant = self.program.plant

        def make(typed: str, sure: bool) -> Any:
            from blendtui.desk import vessels

            return vessels.add_vessel(plant, typed)

        def done(made: Vessel) -> None:
            self.wanted_vessel, self.vessels_read_for = made.vessel, None
            self.refresh_page()
            self.program.say(f"vessel {made.vessel} added; type its capacity and the rest of its cells", "done")

        self.type_step("name of the new vessel", "", make, done)

    def retire_vessel(self) -> None:
        """Take the vessel under the cursor out of use."""
        row, plant = self.vessel_row, self.program.plant
        if row is None:
            self.refuse("there is no vessel here; a adds one")
            return
        name = row.vessel.vessel

        def make(why: str, sure: bool) -> Any:
            from blendtui.desk import vessels

            return vessels.retire_vessel(plant, name, why=why)

        self.type_why(f"{harmless(name, 20)} is out of use", make,
                      lambda said: self.program.say(f"{said}; u takes it back", "done"))
