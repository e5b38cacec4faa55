"""What takes an entry back as the plant stands now, and when it can no longer be taken back.

A charge, a receipt or a dip moved a quantity by so much, and it is taken back by so much, whatever others have moved
of that stock since. A quantity that was typed is taken back to what it was, and only while nobody has changed it.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator

from . import journal
from .batch_records import DONE, LEFT
from .errors import BuiltOn
from .harmless import harmless
from .records import Change, Entry
from .schema import QUANTITY_OF, RECORD
from .state import change_of, changed_by, present

HELD_IN = """
SELECT l.batch, l.line FROM charge_lot l JOIN charge c ON c.batch = l.batch AND c.line = l.line
WHERE l.lot = ? AND c.stock = ? AND c.state = 'done' ORDER BY l.batch, l.line LIMIT 1
"""


def reversal(con: sqlite3.Connection, entry: Entry) -> list[Change]:
    """The changes that take an entry back; ChangedSince or BuiltOn where something rests on it by now."""
    _refuse_touched(con, entry)
    _refuse_sampled(con, entry)
    _refuse_held(con, entry)
    return list(_reversed(con, entry))


def _reversed(con: sqlite3.Connection, entry: Entry) -> Iterator[Change]:
    by_steps = any(c.table in RECORD for c in entry.changes)
    came = any(c.table == "lot" and c.before is None for c in entry.changes)
    now: dict[object, int | None] = {}
    for change in reversed(entry.changes):
        back = change.reversed()
        mg = [None if cells is None else cells["mg"] for cells in (back.before, back.after) if back.table == "quantity"]
        if not by_steps or not mg or None in mg:
            yield back
            continue
        stock = back.key["stock"]
        if stock not in now:
            now[stock] = con.execute(QUANTITY_OF, (stock,)).fetchone()[0]
        before, step = now[stock], int(mg[1] or 0) - int(mg[0] or 0)
        if before is None:
            continue  # nobody knows the quantity any more, and it stays unknown
        if came and before + step < 0:
            raise BuiltOn(f"{harmless(str(stock), 40)}: {-step / 1e6:,.1f} kg cannot be taken back from "
                          f"{before / 1e6:,.1f} kg; some of it has gone out since: correct the quantity instead")
        now[stock] = before + step
        yield Change(back.table, back.key, {"mg": before}, {"mg": before + step})


def _refuse_touched(con: sqlite3.Connection, entry: Entry) -> None:
    """ChangedSince when a row of the record is not as the entry left it: a second check, a correction."""
    for change in entry.changes:
        if change.table not in RECORD or change.before is None or change.after is None:
            continue
        last = _changed_since(con, change, entry.id)
        if last is not None:
            raise changed_by(last, harmless(change.named, 100))


def _changed_since(con: sqlite3.Connection, change: Change, number: int) -> Entry | None:
    """The last entry after `number` that touched a row, where the row is not as it was after that number.

    What was done and taken back again meanwhile leaves the row as it was.
    """
    now = present(con, change)
    row, last = None if now is None else dict(now), None
    for entry in journal.on_row(con, change):
        if entry.id <= number:
            break
        last = last or entry
        for other in reversed(entry.changes):
            if (other.table, dict(other.key)) == (change.table, dict(change.key)):
                row = None if other.before is None else {**(row or {}), **other.before}
    return last if row != now else None


def _refuse_sampled(con: sqlite3.Connection, entry: Entry) -> None:
    """BuiltOn when the vessel was sampled after a charge or a content that is to be taken back."""
    for batch in dict.fromkeys(c.key["batch"] for c in entry.changes if _moves_oil(c)):
        for (sample,) in con.execute("SELECT sample FROM sample WHERE batch = ? ORDER BY sample", (batch,)):
            drawn = change_of("sample", (batch, sample), None, None)
            last = next(journal.on_row(con, drawn), None)
            if last is not None and last.id > entry.id:
                raise BuiltOn(f"{harmless(drawn.named, 100)}: {harmless(last.who, 60)} put it on record at {last.at}, "
                              "and its results rest on this step; correct the step instead of taking it back")


def _moves_oil(change: Change) -> bool:
    """Does a change alter what is in a vessel? A plan, a drop or a second check does not."""
    if change.table != "charge":
        return change.table == "content"
    before, after = change.before or {}, change.after or {}
    return DONE in (before.get("state"), after.get("state")) or "actual_kg" in before.keys() & after.keys()


def _refuse_held(con: sqlite3.Connection, entry: Entry) -> None:
    """BuiltOn when a receipt is to be taken back whose oil is in a batch, or a heel that another batch began with."""
    for change in entry.changes:
        if change.before is not None or change.table not in ("lot", "outcome"):
            continue
        if change.table == "outcome":
            _refuse_begun(con, change)
            continue
        found = con.execute(HELD_IN, (change.key["lot"], change.key["stock"])).fetchone()
        if found:
            held = change_of("charge", tuple(found), None, None).named
            raise BuiltOn(f"{harmless(change.named, 100)} is in {harmless(held, 60)} already; correct the receipt "
                          "instead of taking it back")


def _refuse_begun(con: sqlite3.Connection, change: Change) -> None:
    if (change.after or {}).get("what") != LEFT:
        return
    found = con.execute("SELECT batch FROM content WHERE stock = ? ORDER BY batch LIMIT 1",
                        (change.key["batch"],)).fetchone()
    if found:
        raise BuiltOn(f"{harmless(change.named, 100)} is the heel of {harmless(found[0], 40)} already; correct it "
                      "instead of taking it back")
