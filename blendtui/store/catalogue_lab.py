"""measured.csv and lessons.csv of a catalogue folder: measured blends, and what was learnt from them.

measured.csv has a row for each stock of a blend, lessons.csv one for each temperature of a lesson. What is said of
the blend or the lesson as a whole stands in its first row; in its other rows those cells are empty, or the same.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator

from solver.errors import TargetError
from solver.properties import is_stock_code, lookup
from solver.stocks import Stock
from solver.target import LAWS

from . import cells as c
from .cells import CellError, Cells
from .csv_read import Sheet
from .errors import Fault
from .records import Row
from .schema import LESSON_CELLS, MEASURED_CELLS
from .state import Key, State

RESULT = "result_"  # before the code of the property that was measured
PART = ("kv40", "kv100", "density15")  # values of a stock at the time of the blend
MEASURED = ("name", *MEASURED_CELLS, "confirmed", "stock", "share_pct", *PART, "lot", "oil")
FARTHEST = 1000.0  # no index of a stock lies beyond it: oils reach 52 (Refutas) and 0.87 (W)
TERM = ("celsius", "first_term", "second_term")
LESSONS = ("version", *LESSON_CELLS[:4], *TERM, *LESSON_CELLS[4:])
KINDS = ("excess", "value")
_VERSION = re.compile(r"L[1-9][0-9]{0,8}")
Keep = Callable[[Key, Cells], None]  # keeps the cells of unknown columns of a row


def result_of(column: str) -> str:
    """The property whose result a column of measured.csv holds (`result_kv40` → `kv40`), or ""."""
    prop = column.removeprefix(RESULT)
    try:
        return lookup(prop).code if prop != column else ""
    except TargetError:
        return ""


def is_value_column(column: str) -> bool:
    """Is this a column of measured.csv for a result, or for a further property of a stock at the time?"""
    return bool(result_of(column)) or (column not in MEASURED and is_stock_code(column))


def blend_name(text: str) -> str:
    """The name of a measured blend; CellError for one that a list of names could not hold."""
    c.code(text)
    if ";" in text:
        raise CellError(f"the name {c.shown(text)} holds a semicolon, which parts the names of blends in a list",
                        "write it without")
    return text


class _Wholes:
    """Which rows belong together, and what the first of them said of the whole."""

    def __init__(self, columns: tuple[str, ...], name: str) -> None:
        self.columns, self.name = columns, name
        self.first: dict[str, tuple[int, dict[str, str]]] = {}

    def begins(self, key: str, cells: Cells) -> bool:
        """Is this the first row of the whole? A cell of a further row that says otherwise is a fault."""
        if key not in self.first:
            self.first[key] = (cells.row, cells.cells)
            return True
        row, first = self.first[key]
        for column in self.columns:
            text, before = cells.cells.get(column, ""), first.get(column, "")
            if text not in ("", before):
                cells.fault(column, f"{self.name} {c.shown(key)} has {c.shown(before)} here in row {row}",
                            "make them the same, or leave this cell empty")
        return False


def _rows(sheet: Sheet, faults: list[Fault]) -> Iterator[Cells]:
    return (Cells(sheet.file, row, text, faults) for row, text in sheet.rows)


# Measured blends

def read_measured(sheet: Sheet, faults: list[Fault], state: State, keep: Keep) -> None:
    """Read measured.csv into a state."""
    results = [x for x in sheet.columns if result_of(x)]
    properties = [x for x in sheet.columns if is_value_column(x) and not result_of(x)]
    wholes = _Wholes((*MEASURED_CELLS, "confirmed", *results), "measured blend")
    places: dict[str, int] = {}
    for cells in _rows(sheet, faults):
        name = cells.get("name", blend_name, default="")
        if name and wholes.begins(name, cells):
            _measured(name, cells, results, state, len(wholes.first))
        stock = cells.get("stock", c.code, default="")
        part, known = _part(cells, stock), {x: cells.get(x, c.limit_value, x) for x in properties}
        if not name or cells.bad:
            continue
        if (name, stock) in state["measured_part"]:
            cells.fault("stock", f"measured blend {c.shown(name)} has {c.shown(stock)} twice", "join the two rows")
            continue
        places[name] = places.get(name, -1) + 1
        state["measured_part"][name, stock] = {**part, "position": places[name]}
        state["measured_part_value"].update({(name, stock, lookup(prop).code): {"value": value}
                                             for prop, value in known.items() if value is not None})
        keep((name, stock), cells)


def _measured(name: str, cells: Cells, results: list[str], state: State, place: int) -> None:
    row: Row = {"product": cells.get("product", c.plain, default=""),
                "measured_on": cells.get("measured_on", c.iso_date, default=""),
                "method": cells.get("method", c.plain, default=""), "note": cells.get("note", c.plain, default=""),
                "confirmed": cells.get("confirmed", c.yes, default=0), "position": place}
    state["measured"][name,] = row
    found = {result_of(x): cells.get(x, c.limit_value, result_of(x)) for x in results}
    if not any(x in cells.bad for x in results) and all(value is None for value in found.values()):
        cells.fault("name", f"measured blend {c.shown(name)} has no result",
                    f"write one in its first row, such as {RESULT}kv40")
    for prop, value in found.items():
        if value is not None:
            state["measured_value"][name, prop] = {"value": value}


def _part(cells: Cells, stock: str) -> Row:
    """One stock of a blend, with its values at the time."""
    from solver.doubts import faults

    share = cells.get("share_pct", c.number, least=0.0)
    if share is None and "share_pct" not in cells.bad:
        cells.fault("share_pct", "the share is empty", "write the mass %")
    values = {x: cells.get(x, c.number) for x in PART}
    for doubt in faults(Stock(stock, kind="additive", **values)):
        if doubt.cell not in cells.bad:
            what, _, fix = doubt.says.partition("; ")
            cells.fault(doubt.cell, what.removeprefix(f"{doubt.cell} "), fix or "check the figure")
    return {"share_pct": share, **values, "lot": cells.get("lot", c.plain, default=""),
            "oil": cells.get("oil", c.plain, default="")}


# Lessons

def read_lessons(sheet: Sheet, faults: list[Fault], state: State, keep: Keep) -> None:
    """Read lessons.csv into a state."""
    wholes = _Wholes(LESSON_CELLS, "lesson")
    for cells in _rows(sheet, faults):
        version = cells.get("version", _version, default="")
        if version and wholes.begins(version, cells):
            state["lesson"][version,] = {**_lesson(cells), "position": len(wholes.first)}
        kind = str(state["lesson"].get((version,), {}).get("kind") or "")
        celsius, term = _term(cells, kind)
        if not version or cells.bad:
            continue
        if (version, celsius) in state["lesson_term"]:
            cells.fault("celsius", f"lesson {version} has {celsius:g} °C twice", "take one of the rows out")
            continue
        state["lesson_term"][version, celsius] = term
        keep((version, celsius), cells)


def _version(text: str) -> str:
    if not _VERSION.fullmatch(text):
        raise CellError(f"{c.shown(text)} is not the version of a lesson", "write one such as L1")
    return text


def _demanded(text: str, words: tuple[str, ...], name: str) -> str:
    if not text:
        raise CellError(f"the {name} is empty", f"usable are {', '.join(words)}")
    return c.word(text, words, name)


def _lesson(cells: Cells) -> Row:
    row: Row = {"kind": cells.get("kind", _demanded, KINDS, "kind", default=""),
                "law": cells.get("law", _demanded, LAWS, "law", default=""),
                "first": cells.get("first", c.code, default=""), "second": cells.get("second", c.plain, default="")}
    if row["kind"] == "excess" and row["second"] in ("", row["first"]):
        cells.fault("second", "an excess is of two different stocks or oils", "name the second")
    if row["kind"] == "value" and row["second"]:
        cells.fault("second", "a blending value is of one stock", "leave the cell empty")
    for side in ("low_pct", "high_pct"):
        row[side] = cells.get(side, c.number, least=0.0, most=100.0)
    if None not in (row["low_pct"], row["high_pct"]) and float(row["low_pct"]) > float(row["high_pct"]):  # type: ignore[arg-type]
        cells.fault("low_pct", f"low {row['low_pct']:g} is above high {row['high_pct']:g}", "swap or mend them")
    row |= {x: cells.get(x, c.plain, default="") for x in LESSON_CELLS if x not in row}
    return row | {"provisional": cells.get("provisional", c.yes, default=0)}


def _term(cells: Cells, kind: str) -> tuple[float, Row]:
    celsius = cells.get("celsius", c.number, least=-60.0, most=200.0)
    within = {"least": -FARTHEST, "most": FARTHEST} if kind == "value" else {}
    first = cells.get("first_term", c.number, **within)
    for column, value in (("celsius", celsius), ("first_term", first)):
        if value is None and column not in cells.bad:
            cells.fault(column, "the cell is empty", "write a number")
    second = cells.get("second_term", c.number)
    if kind == "value" and second is not None:
        cells.fault("second_term", "a blending value has one figure a temperature", "leave the cell empty")
    return celsius or 0.0, {"first_term": first, "second_term": second}
