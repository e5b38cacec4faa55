"""The append-only journal: each entry carries the hash of the one before, so a rewritten past shows."""

from __future__ import annotations

import hashlib
import json
import sqlite3
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from .database import now
from .harmless import harmless
from .records import Change, Entry, Row, Value
from .schema import LATER

START = "0" * 64  # what stands for the hash before the first entry
COLUMNS = "id, at, who, what, changes, why, undoes, prev_hash, hash"


def canonical(thing: object) -> str:
    """JSON in one spelling only, so that its hash means the same everywhere."""
    return json.dumps(thing, ensure_ascii=False, sort_keys=True, separators=(",", ":"), allow_nan=False)


def digest(row: Sequence[Value]) -> str:
    """sha256 over every field of a journal row but its hash, the hash of the entry before among them."""
    return hashlib.sha256(canonical(list(row[:8])).encode()).hexdigest()


def append(con: sqlite3.Connection, who: str, what: str, changes: Sequence[Change], why: str,
           undoes: int | None = None) -> int:
    """Write one entry and return its number."""
    last = con.execute("SELECT id, hash FROM journal ORDER BY id DESC LIMIT 1").fetchone() or (0, START)
    told = canonical([{"table": c.table, "key": dict(c.key), "before": _plain(c.before),
                       "after": _plain(c.after)} for c in changes])
    row = [last[0] + 1, now(), who, what, told, why, undoes, last[1]]
    con.execute(f"INSERT INTO journal ({COLUMNS}) VALUES (?,?,?,?,?,?,?,?,?)", (*row, digest(row)))
    return last[0] + 1


def _plain(cells: Mapping[str, Value] | None) -> dict[str, Value] | None:
    return None if cells is None else dict(cells)


def entry(row: Sequence[Any]) -> Entry:
    """A journal row as an Entry."""
    changes = tuple(_change(c["table"], c["key"], c["before"], c["after"]) for c in json.loads(row[4]))
    return Entry(row[0], row[1], row[2], row[3], changes, row[5], row[6], row[8])


def _change(table: str, key: Row, before: Row | None, after: Row | None) -> Change:
    """A change as it was told; a row that comes or goes has the columns of today."""
    later = LATER.get(table, {})
    if before is None and after is not None:
        after = {**later, **after}
    elif after is None and before is not None:
        before = {**later, **before}
    return Change(table, key, before, after)


def read(con: sqlite3.Connection, number: int) -> Entry:
    """One entry by its number."""
    return entry(con.execute(f"SELECT {COLUMNS} FROM journal WHERE id = ?", (number,)).fetchone())


def newest(con: sqlite3.Connection, limit: int) -> list[Entry]:
    """The latest entries, newest first."""
    rows = con.execute(f"SELECT {COLUMNS} FROM journal ORDER BY id DESC LIMIT ?", (limit,))
    return [entry(row) for row in rows]


def oldest_first(con: sqlite3.Connection) -> Iterator[Entry]:
    """Every entry, oldest first."""
    for row in con.execute(f"SELECT {COLUMNS} FROM journal ORDER BY id"):
        yield entry(row)


def revision(con: sqlite3.Connection) -> int:
    """Number of the last entry; 0 before the first."""
    return int(con.execute("SELECT COALESCE(MAX(id), 0) FROM journal").fetchone()[0])


def last_hash(con: sqlite3.Connection) -> str:
    """Hash of the last entry; of a journal without entries, what stands before the first."""
    found = con.execute("SELECT hash FROM journal ORDER BY id DESC LIMIT 1").fetchone()
    return str(found[0]) if found else START


def hashed(con: sqlite3.Connection, start: str) -> list[Entry]:
    """Entries whose hash begins so, oldest first."""
    rows = con.execute(f"SELECT {COLUMNS} FROM journal WHERE substr(hash, 1, ?) = ? ORDER BY id", (len(start), start))
    return [entry(row) for row in rows]


def undoable(con: sqlite3.Connection, who: str) -> tuple[int | None, int | None]:
    """The entry that `who` would undo next, and the one that a redo would bring back.

    The first entry filled the plant and is never undone. An entry that undoes a change takes it off the pile;
    one that undoes an undoing (a redo) puts itself on it; a new change ends the chance to redo.
    """
    done: list[int] = []
    undone: list[int] = []
    # An entry without changes only tells of something, so there is nothing of it to take back.
    rows = con.execute("SELECT id, undoes FROM journal WHERE who = ? AND id > 1 "
                       "AND (undoes IS NOT NULL OR changes <> '[]') ORDER BY id", (who,))
    for number, undoes in rows:
        if undoes is None:
            done.append(number)
            undone.clear()
        elif undoes in undone:
            undone.remove(undoes)
            done.append(number)
        elif undoes in done:
            done.remove(undoes)
            undone.append(number)
    return (done[-1] if done else None), (undone[-1] if undone else None)


def on_row(con: sqlite3.Connection, change: Change, before: int | None = None) -> Iterator[Entry]:
    """Entries that speak of the row of `change`, newest first; only those with a number below `before` if given."""
    spelt = f'"table":{canonical(change.table)}}}'  # the last name of a change: names stand in their order
    below, given = ("id < ? AND ", (before,)) if before is not None else ("", ())
    for row in con.execute(f"SELECT {COLUMNS} FROM journal WHERE {below}instr(changes, ?) > 0 ORDER BY id DESC",
                           (*given, spelt)):
        found = entry(row)
        if any(other.table == change.table and dict(other.key) == dict(change.key) for other in found.changes):
            yield found


def last_change(con: sqlite3.Connection, change: Change, before: int, cells: set[str]) -> Entry | None:
    """The latest entry with a number below `before` that changed one of these cells of the row of `change`."""
    for found in on_row(con, change, before):
        for other in found.changes:
            if other.table == change.table and dict(other.key) == dict(change.key) and cells & touched(other):
                return found
    return None


def touched(change: Change) -> set[str]:
    """The cells that a change gives another value; all of them where the row comes or goes."""
    before, after = change.before or {}, change.after or {}
    return {c for c in {*before, *after} if c not in before or c not in after or before[c] != after[c]}


def broken(con: sqlite3.Connection) -> str | None:
    """The first entry that does not fit the chain, in words, or None when all of it holds."""
    expected, before = 1, START
    for row in con.execute(f"SELECT {COLUMNS} FROM journal ORDER BY id"):
        said = harmless(f"journal entry {row[0]} ({row[1]}, {row[2]}: {row[3]})", 300)
        if row[0] != expected:
            return f"journal entry {expected} is missing: someone took it out of the file"
        if row[7] != before:
            return f"{said} does not follow the entry before it: one of the two was replaced"
        if row[8] != _digest_of(row):
            return f"{said} was altered after it was written"
        expected, before = expected + 1, row[8]
    return None


def _digest_of(row: Sequence[Any]) -> str:
    try:
        return digest(row)
    except (TypeError, ValueError):
        return ""  # bytes, or halves of characters: nothing that this program ever wrote
