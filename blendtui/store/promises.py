"""Oil that is planned into open batches is promised: it is not free for another batch."""

from __future__ import annotations

import sqlite3
from collections.abc import Mapping, Sequence

from .errors import PlantError
from .harmless import harmless
from .records import Change, Value
from .schema import QUANTITY_OF

PLANNED = "planned"
LEAST = 1e-3  # kg: what a sum of decimals may be off
OF_OPEN = f"FROM charge c JOIN batch b ON b.batch = c.batch AND b.state = 'open' WHERE c.state = '{PLANNED}'"


def reserved(con: sqlite3.Connection, stock: str | None = None) -> dict[str, float]:
    """Stock → kg that open batches still have to charge of it."""
    only, given = (" AND c.stock = ?", (stock,)) if stock is not None else ("", ())
    return dict(con.execute(f"SELECT c.stock, SUM(c.plan_kg) {OF_OPEN}{only} GROUP BY c.stock", given))


def refuse_double(con: sqlite3.Connection, changes: Sequence[Change]) -> None:
    """PlantError where a change, applied already, promises more of a stock than its tank can give.

    A charge that is taken back gives its tank what it promises anew: that goes through even where a dip or another
    charge has left too little for all.
    """
    back: dict[object, float] = {}
    for change in changes:
        mg = [(cells or {}).get("mg") for cells in (change.before, change.after)]
        if change.table == "quantity" and None not in mg:
            back[change.key["stock"]] = (float(mg[1] or 0) - float(mg[0] or 0)) / 1e6
    for change in changes:
        if change.table == "charge" and change.after is not None and _promises_more(change.before, change.after):
            _refuse(con, change, back)


def _promises_more(before: Mapping[str, Value] | None, after: Mapping[str, Value]) -> bool:
    """May a charge promise more oil with these cells than it did?"""
    if before is None:
        return after["state"] == PLANNED
    if after.get("state", PLANNED) != PLANNED:
        return False
    again = before.get("state", PLANNED) != PLANNED  # a charge or a drop that is taken back
    return again or "stock" in after or float(after.get("plan_kg") or 0.0) > float(before.get("plan_kg") or 0.0)


def _refuse(con: sqlite3.Connection, change: Change, back: Mapping[object, float]) -> None:
    batch, line = change.key["batch"], change.key["line"]
    stock, state, plan, tolerance = con.execute(
        "SELECT stock, state, plan_kg, tolerance_kg FROM charge WHERE batch = ? AND line = ?", (batch, line)).fetchone()
    found = con.execute("SELECT unpumpable_kg FROM stock WHERE stock = ?", (stock,)).fetchone()
    mg = con.execute(QUANTITY_OF, (stock,)).fetchone()[0]
    if state != PLANNED or found is None or mg is None:
        return
    there = mg / 1e6 - (found[0] or 0.0)
    promised = reserved(con, stock).get(stock, 0.0)
    if promised <= there + LEAST or (change.before is not None and back.get(stock, 0.0) >= plan - tolerance > 0.0):
        return
    others = con.execute(f"SELECT DISTINCT c.batch, b.ordered_by {OF_OPEN} AND c.stock = ? AND c.batch <> ? "
                         "ORDER BY c.batch", (stock, batch)).fetchall()
    whose = ", ".join(f"{harmless(b, 40)} ({harmless(who, 40)})" for b, who in others[:4])
    free = max(0.0, there - promised + plan)
    raise PlantError(f"{harmless(stock, 40)}: {plan:,.1f} kg are planned and {free:,.1f} kg are free"
                     + (f"; the rest is promised to {whose}" if others else "; the tank holds no more")
                     + "; design the batch again")
