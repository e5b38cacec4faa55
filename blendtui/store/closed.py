"""A batch that is released, cancelled or reworked stands: what it was ordered as, held, was charged and measured.

What may still come after it is closed: outcomes (packing), further decisions, lots that name it, and the note of its
heading. A decision that is there stands as well: another one corrects it.
The entry that closes it may change all of it; no later one does, and none opens it again. Only the oil of a cancelled
batch may still become rework, which closes it as reworked.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Sequence

from .batch_records import CANCELLED, OPEN, REWORKED
from .errors import Closed
from .harmless import harmless
from .journal import touched
from .records import Change

STANDS = ("batch", "content", "charge", "charge_lot", "sample", "result")
FREE = {"note"}  # cells of the heading
CLOSING = {"state", "closed_at", "closed_by", "why"}


def refuse_closed(con: sqlite3.Connection, changes: Sequence[Change]) -> None:
    """Closed where a change, not applied yet, touches what stands of a batch that an earlier entry closed."""
    known: dict[object, str] = {}
    for change in changes:
        if _may_follow(change):
            continue
        name = change.key["batch"]
        if name not in known:
            found = con.execute("SELECT state FROM batch WHERE batch = ?", (name,)).fetchone()
            known[name] = str(found[0]) if found else OPEN
        if known[name] != OPEN:
            raise Closed(f"{harmless(str(name), 40)} is {harmless(known[name], 20)}: its record stands; "
                         "a correction is a new entry")


def _may_follow(change: Change) -> bool:
    """May this still come after its batch is closed, or has it no batch?"""
    if change.table == "decision":
        return change.before is None
    if change.table != "batch":
        return change.table not in STANDS
    before, after = ((cells or {}).get("state") for cells in (change.before, change.after))
    return touched(change) <= FREE or ((before, after) == (CANCELLED, REWORKED) and touched(change) <= CLOSING)
