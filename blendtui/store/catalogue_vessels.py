"""vessels.csv of a catalogue folder: kettles and blending tanks, and what can be true of one."""

from __future__ import annotations

from collections.abc import Callable, Iterator

from . import cells as c
from .batch_records import Vessel
from .cells import Cells
from .csv_read import Sheet
from .errors import Fault
from .records import Row
from .schema import VESSEL_CELLS
from .state import Key, State

VESSELS = ("vessel", *VESSEL_CELLS)
# A column that is kept as unknown ones are, though the desk knows it: the plant's own order of charging.
USED = {"vessels.csv": "charge_order"}
HEEL_DENSITY = 0.87  # kg/L: about that of base oils, enough to see that a heel cannot be in its vessel
LARGEST_L = 1e9
HOTTEST_MARGIN = 300.0  # °C
Keep = Callable[[Key, Cells], None]  # keeps the cells of unknown columns of a row


def read_vessels(sheet: Sheet, faults: list[Fault], state: State, keep: Keep, *, whole: bool) -> None:
    """Read vessels.csv into a state; `whole`: every stock is in the state, so that a heel of another is a fault."""
    first: dict[str, int] = {}
    for row, text in sheet.rows:
        cells = Cells(sheet.file, row, text, faults)
        vessel = _vessel(cells)
        for column, what, fix in vessel_faults(vessel):
            if not _unread(column, cells):
                cells.fault(column, what, fix)
        if whole and vessel.heel_stock and (vessel.heel_stock,) not in state["stock"]:
            cells.fault("heel_stock", f"{c.shown(vessel.heel_stock)} is not in stocks.csv",
                        "mend the code, or leave the cell empty")
        if vessel.vessel in first:
            cells.fault("vessel", f"the code '{vessel.vessel}' stands in row {first[vessel.vessel]} already",
                        "give each vessel its own code")
        elif vessel.vessel:
            first[vessel.vessel] = row
            state["vessel"][vessel.vessel,] = {**cells_of(vessel), "position": len(first), "retired": 0}
            keep((vessel.vessel,), cells)


def _vessel(cells: Cells) -> Vessel:
    """One row of vessels.csv; None in place of a cell with a fault."""
    return Vessel(
        cells.get("vessel", c.code, default=""), cells.get("capacity_l", c.positive, LARGEST_L),
        cells.get("least_fill_l", c.number, least=0.0, most=LARGEST_L),
        cells.get("division_kg", c.positive, c.LARGEST_KG),
        cells.get("heel_kg", c.number, least=0.0, most=c.LARGEST_KG),
        cells.get("heel_stock", c.plain, default=""),
        cells.get("flash_margin_c", c.number, least=0.0, most=HOTTEST_MARGIN),
        cells.get("flash_margin_on", c.iso_date, default=""))


def _unread(column: str, cells: Cells) -> bool:
    """Does what is said of this column rest on a cell that could not be read?"""
    return bool(cells.bad & {"flash_margin_c", "flash_margin_on"} if column.startswith("flash") else
                column in cells.bad)


def cells_of(vessel: Vessel) -> Row:
    """A vessel as the cells of its row."""
    return {name: getattr(vessel, name) for name in VESSEL_CELLS}


def vessel_faults(vessel: Vessel) -> Iterator[tuple[str, str, str]]:
    """(column, what is wrong, what would do) for what cannot be true of a vessel, one cell against another."""
    capacity, fill, heel = vessel.capacity_l, vessel.least_fill_l, vessel.heel_kg
    if capacity is not None and fill is not None and fill > capacity:
        yield ("least_fill_l", f"a least fill of {fill:,.12g} L is above the capacity of {capacity:,.12g} L",
               "swap or mend them")
    if capacity is not None and heel is not None and heel / HEEL_DENSITY > capacity:
        yield ("heel_kg", f"{c.shown(vessel.vessel)} is smaller than its heel: {heel:,.12g} kg are about "
                          f"{heel / HEEL_DENSITY:,.0f} L, and it holds {capacity:,.12g} L", "mend one of the two")
    if vessel.flash_margin_c is not None and not vessel.flash_margin_on:
        yield ("flash_margin_on", "the margin to the flash point has no date",
               "write the day on which the site set it, such as 2026-03-01")
    if vessel.flash_margin_on and vessel.flash_margin_c is None:
        yield ("flash_margin_c", "the date stands without a margin",
               "write the site's margin in °C, or take the date out")
