"""Rows of the file as vessels, batches, lots and dips."""

from __future__ import annotations

import json
import sqlite3
from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from .batch_records import Batch, Charge, Content, Decision, Dip, Lot, Made, Movement, Outcome, Result, Sample, Vessel
from .errors import NoSuchRow
from .harmless import harmless
from .schema import QUANTITY_OF, TABLES, VESSEL_CELLS

MAPPINGS = ("cells", "parts", "lots")  # columns that hold a JSON object


def _read(con: sqlite3.Connection, kind: type, table: str, rest: str = "", given: tuple[Any, ...] = ()) -> list[Any]:
    """Rows of a table as records whose fields are its columns."""
    names = [*TABLES[table].keys, *TABLES[table].columns]
    return [kind(**_cells(names, row)) for row in con.execute(f"SELECT {', '.join(names)} FROM {table} {rest}", given)]


def _cells(names: list[str], row: tuple[Any, ...]) -> dict[str, Any]:
    return {name: json.loads(value) if name in MAPPINGS else value for name, value in zip(names, row, strict=True)}


def vessels(con: sqlite3.Connection) -> list[Vessel]:
    """The vessels in use, in the plant's order."""
    rows = con.execute(f"SELECT vessel, {', '.join(VESSEL_CELLS)} FROM vessel WHERE retired = 0 "
                       "ORDER BY position, vessel")
    return [Vessel(*row) for row in rows]


def batches(con: sqlite3.Connection, state: str | None = None) -> list[Batch]:
    """Headings, newest first."""
    where, given = ("WHERE state = ?", (state,)) if state is not None else ("", ())
    return _read(con, Batch, "batch", f"{where} ORDER BY ordered_at DESC, batch DESC", given)


def names_used(con: sqlite3.Connection) -> set[str]:
    """Names of all batches, of those too whose order was undone: a card of it may be on paper."""
    told = con.execute("SELECT changes FROM journal WHERE undoes IS NOT NULL "
                       "AND instr(changes, '\"table\":\"batch\"') > 0")
    undone = {str(change["key"]["batch"]) for (changes,) in told for change in json.loads(changes)
              if change["table"] == "batch"}
    return undone | {name for (name,) in con.execute("SELECT batch FROM batch")}


def batch(con: sqlite3.Connection, name: str) -> Made:
    """One batch with all its rows."""
    heads = _read(con, Batch, "batch", "WHERE batch = ?", (name,))
    if not heads:
        last = [row[0] for row in con.execute("SELECT batch FROM batch ORDER BY ordered_at DESC, batch DESC LIMIT 6")]
        raise NoSuchRow(f"no batch {harmless(name, 40)!r}; " + (f"the latest are {', '.join(last)}" if last
                                                                 else "the plant has none yet"))

    def rows(kind: type, order: str) -> tuple[Any, ...]:
        return tuple(_read(con, kind, kind.__name__.lower(), f"WHERE batch = ? ORDER BY {order}", (name,)))

    lots: defaultdict[int, dict[str, float]] = defaultdict(dict)
    for line, lot, part in con.execute("SELECT line, lot, part FROM charge_lot WHERE batch = ? ORDER BY lot", (name,)):
        lots[line][lot] = part
    charges = tuple(replace(c, lots=lots.get(c.line, {})) for c in rows(Charge, "position, line"))
    return Made(heads[0], rows(Content, "line"), charges, rows(Sample, "sample"), rows(Result, "sample, line"),
                rows(Decision, "line"), rows(Outcome, "line"))


def lots(con: sqlite3.Connection, stock: str | None = None) -> list[Lot]:
    """Receipts, oldest first."""
    where, given = ("WHERE stock = ?", (stock,)) if stock is not None else ("", ())
    return _read(con, Lot, "lot", f"{where} ORDER BY received_at, stock, lot", given)


def tank_lots(con: sqlite3.Connection, stock: str) -> dict[str, float]:
    """Lot → part of the tank."""
    return dict(con.execute("SELECT lot, part FROM tank_lot WHERE stock = ? ORDER BY part DESC, lot", (stock,)))


def dips(con: sqlite3.Connection, stock: str) -> list[Dip]:
    """Dips, oldest first."""
    return _read(con, Dip, "dip", "WHERE stock = ? ORDER BY line", (stock,))


def movements(con: sqlite3.Connection, stock: str) -> list[Movement]:
    """Movements, oldest first."""
    rows = con.execute("SELECT m.stock, m.mg, m.reason, m.journal, j.at, j.who FROM movement m "
                       "JOIN journal j ON j.id = m.journal WHERE m.stock = ? ORDER BY m.id", (stock,))
    return [Movement(row[0], None if row[1] is None else row[1] / 1e6, *row[2:]) for row in rows]


def charges_of(con: sqlite3.Connection, stock: str | None, lot: str | None) -> list[Charge]:
    """Charges of all batches that are of a stock, that hold a lot, or both."""
    names = [*TABLES["charge"].keys, *TABLES["charge"].columns]
    tests = [(column, value) for column, value in (("c.stock", stock), ("l.lot", lot)) if value is not None]
    where = " AND ".join(f"{column} = ?" for column, _ in tests) or "1 = 1"
    # By a lot it is found from that lot's own rows, which are few beside the charges that were made.
    tables = ("charge c LEFT JOIN charge_lot l ON l.batch = c.batch AND l.line = c.line" if lot is None else
              "charge_lot l JOIN charge c ON c.batch = l.batch AND c.line = l.line")
    rows = con.execute(f"SELECT {', '.join(f'c.{n}' for n in names)}, l.lot, l.part FROM {tables} WHERE {where} "
                       "ORDER BY c.at, c.batch, c.line", [value for _, value in tests])
    state = names.index("state")
    found: dict[tuple[str, int], Charge] = {}
    parts: defaultdict[tuple[str, int], dict[str, float]] = defaultdict(dict)
    for *row, name, part in rows:
        if row[state] != "done":
            continue
        charge = Charge(**_cells(names, tuple(row)))
        found.setdefault((charge.batch, charge.line), charge)
        if name is not None:
            parts[charge.batch, charge.line][name] = part
    return [replace(charge, lots=parts.get(key, {})) for key, charge in found.items()]


def quantity(con: sqlite3.Connection, stock: str) -> int | None:
    """What the book says of a stock, mg."""
    found = con.execute(QUANTITY_OF, (stock,)).fetchone()[0]
    return None if found is None else int(found)


def as_row(record: object, table: str) -> Mapping[str, Any]:
    """A record as the cells of its row, keys included: objects as JSON in one spelling."""
    names = (*TABLES[table].keys, *TABLES[table].columns)
    cells = {name: getattr(record, name) for name in names if hasattr(record, name)}
    return {name: spelt(value) if name in MAPPINGS else value for name, value in cells.items()}


def spelt(value: Mapping[str, float]) -> str:
    """A mapping as the file holds it."""
    return json.dumps(dict(value), ensure_ascii=False, sort_keys=True, separators=(",", ":"), allow_nan=False)


# What a trace follows: several batches at once, and where their oil went

TOGETHER = 400  # names in one query


def oil_of(con: sqlite3.Connection, names: Sequence[str]) -> dict[str, Made]:
    """Batches with what went in and came out, and not what the laboratory found; names that are not there left out."""
    heads = {b.batch: b for b in _of(con, Batch, "batch", names)}
    rows: defaultdict[tuple[str, str], list[Any]] = defaultdict(list)
    for kind in (Content, Charge, Outcome):
        for row in _of(con, kind, "batch", names, "ORDER BY batch, line"):
            rows[kind.__name__, row.batch].append(row)
    parts: defaultdict[tuple[str, int], dict[str, float]] = defaultdict(dict)
    for few in _few(names):
        for batch, line, lot, part in con.execute("SELECT batch, line, lot, part FROM charge_lot WHERE batch IN "
                                                  f"({_marks(few)}) ORDER BY lot", few):
            parts[batch, line][lot] = part
    return {name: Made(head, tuple(rows["Content", name]),
                       tuple(replace(c, lots=parts.get((name, c.line), {})) for c in rows["Charge", name]),
                       outcomes=tuple(rows["Outcome", name])) for name, head in heads.items()}


def onward(con: sqlite3.Connection, names: Sequence[str]) -> tuple[list[Lot], list[Content]]:
    """Receipts that came from these batches, and contents of vessels that are of these batches (or stocks)."""
    return _of(con, Lot, "from_batch", names), _of(con, Content, "stock", names)


def lots_named(con: sqlite3.Connection, lot: str) -> list[Lot]:
    """Receipts under one lot, of any stock."""
    return _of(con, Lot, "lot", [lot])


def _of(con: sqlite3.Connection, kind: type, column: str, names: Sequence[str], order: str = "") -> list[Any]:
    return [row for few in _few(names)
            for row in _read(con, kind, kind.__name__.lower(), f"WHERE {column} IN ({_marks(few)}) {order}", few)]


def _few(names: Sequence[str]) -> list[tuple[str, ...]]:
    return [tuple(names[i:i + TOGETHER]) for i in range(0, len(names), TOGETHER)]


def _marks(few: Sequence[str]) -> str:
    return ", ".join("?" * len(few))
