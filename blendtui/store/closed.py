"""A batch that is released, cancelled or reworked stands: what it was ordered as, held, was charged and measured.

What may still come after it is closed: outcomes (packing), decisions, lots that name it, and the note of its heading.
The entry that closes it may change all of it; no later one does, and none opens it again.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Sequence

from .batch_records import OPEN
from .errors import Closed
from .harmless import harmless
from .journal import touched
from .records import Change

STANDS = ("batch", "content", "charge", "charge_lot", "sample", "result")
FREE = {"note"}  # cells of the heading


def refuse_closed(con: sqlite3.Connection, changes: Sequence[Change]) -> None:
    """Closed where a change, not applied yet, touches what stands of a batch that an earlier entry closed."""
    known: dict[object, str] = {}
    for change in changes:
        if change.table not in STANDS or (change.table == "batch" and touched(change) <= FREE):
            continue
        name = change.key["batch"]
        if name not in known:
            found = con.execute("SELECT state FROM batch WHERE batch = ?", (name,)).fetchone()
            known[name] = str(found[0]) if found else OPEN
        if known[name] != OPEN:
            raise Closed(f"{harmless(str(name), 40)} is {harmless(known[name], 20)}: its record stands; "
                         "a correction is a new entry")
