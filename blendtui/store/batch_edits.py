"""The changes that a step of a batch is made of: a record that is added, or cells of one that change."""

from __future__ import annotations

from typing import Any

from solver.stocks import Stock

from .batch_reads import MAPPINGS, as_row, spelt
from .batch_records import Charge
from .reads import milligrams
from .records import Change
from .schema import TABLES
from .state import change_of


def table_of(record: object) -> str:
    """The table that a record is a row of."""
    return type(record).__name__.lower()


def added(record: Any) -> list[Change]:
    """Add a record of batch_records; of a charge its lots too. A vessel still lacks its position and `retired`."""
    table = table_of(record)
    row = as_row(record, table)
    key = tuple(row[k] for k in TABLES[table].keys)
    changes = [change_of(table, key, None, {c: row[c] for c in TABLES[table].columns if c in row})]
    return changes + (lots_of(record) if isinstance(record, Charge) else [])


def lots_of(charge: Charge, before: Charge | None = None) -> list[Change]:
    """The lots that a charge holds, in place of those it held before."""
    old = {} if before is None else before.lots
    changes = [change_of("charge_lot", (charge.batch, charge.line, lot), {"part": part}, None)
               for lot, part in old.items() if lot not in charge.lots]
    for lot, part in charge.lots.items():
        was = {"part": old[lot]} if lot in old else None
        changes.append(change_of("charge_lot", (charge.batch, charge.line, lot), was, {"part": part}))
    return changes


def changed(record: Any, **cells: Any) -> Change:
    """Give cells of a record that was read new values; ChangedSince later on where another was quicker."""
    table = table_of(record)
    row = as_row(record, table)
    after = {name: spelt(value) if name in MAPPINGS else value for name, value in cells.items()}
    return change_of(table, tuple(row[k] for k in TABLES[table].keys), {name: row[name] for name in cells}, after)


def moved(stock: Stock, kg: float) -> Change:
    """Change a stock's quantity by kg, from what it is as `stock` was read; an unknown quantity stays unknown."""
    before = milligrams(stock.on_hand_kg)
    after = None if before is None else before + (milligrams(kg) or 0)
    return change_of("quantity", (stock.code,), {"mg": before}, {"mg": after})


def tank_parts(stock: str, before: dict[str, float], after: dict[str, float]) -> list[Change]:
    """Give a tank other parts of lots."""
    changes = [change_of("tank_lot", (stock, lot), {"part": part}, None) for lot, part in before.items()
               if lot not in after]
    for lot, part in after.items():
        was = {"part": before[lot]} if lot in before else None
        changes.append(change_of("tank_lot", (stock, lot), was, {"part": part}))
    return changes
