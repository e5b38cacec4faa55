"""Is the plant what its journal says? The first thing that is wrong is told in words, whatever the file holds."""

from __future__ import annotations

import sqlite3
from functools import cache

from . import journal, state
from .harmless import harmless
from .records import Change, Entry, Value
from .schema import MIGRATIONS

Movement = tuple[Value, Value, Value, str]  # stock, mg, journal entry, reason
Thing = tuple[str, str]  # of the schema: what it is and its name
OTHERS = "someone changed the file past this program"


def wrong(con: sqlite3.Connection) -> str | None:
    """What is wrong with the file, its journal, its movements, its rows, its guards: the first of it, or None."""
    return (_pages(con) or _schema(con, ("table",)) or journal.broken(con) or _content(con)
            or _schema(con, ("trigger", "index", "view")))


def _pages(con: sqlite3.Connection) -> str | None:
    if con.execute("PRAGMA quick_check(1)").fetchone()[0] == "ok":
        return None
    return "the file is damaged: its pages do not fit together; open a backup of it"


# The schema

def _schema(con: sqlite3.Connection, kinds: tuple[str, ...]) -> str | None:
    made, found = _things(MIGRATIONS), _read_things(con)
    for kind, name in sorted({**made, **found}, key=lambda thing: (thing not in made, thing)):
        if kind not in kinds or made.get((kind, name)) == found.get((kind, name)):
            continue
        said = harmless(f"the {kind} {name}", 80)
        if (kind, name) not in found:
            return f"{said} is missing: {OTHERS}"
        if (kind, name) not in made:
            return f"{said} is not one of a plant's: {OTHERS}"
        return f"{said} is not as it was made: {OTHERS}"
    return None


@cache
def _things(migrations: tuple[tuple[str, ...], ...]) -> dict[Thing, str | None]:
    """The schema of a new file."""
    con = sqlite3.connect(":memory:", isolation_level=None)
    try:
        for step in migrations:
            for statement in step:
                con.execute(statement)
        return _read_things(con)
    finally:
        con.close()


def _read_things(con: sqlite3.Connection) -> dict[Thing, str | None]:
    rows = con.execute("SELECT type, name, sql FROM sqlite_master WHERE name NOT LIKE 'sqlite^_%' ESCAPE '^'")
    return {(kind, name): sql for kind, name, sql in rows}


# The content

def _content(con: sqlite3.Connection) -> str | None:
    """The first entry, movement or cell that cannot be, or is not what the journal says it is."""
    told, moved, number = state.empty(), [], 1
    try:
        for entry in journal.oldest_first(con):
            number = entry.id
            moved += _movements(entry)
            state.replay(entry, told)
            number += 1
    except (KeyError, TypeError, ValueError, AttributeError):
        return f"journal entry {number} says what no plant can hold: {OTHERS}"
    return _differs(con, told) or _moved_otherwise(con, moved)


def _movements(entry: Entry) -> list[Movement]:
    """The movements that an entry makes: the step from one quantity to the next, or null for an unknown one."""
    rows: list[Movement] = []
    for change in entry.changes:
        if change.table == "quantity":
            before, after = ((cells or {}).get("mg") for cells in (change.before, change.after))
            rows.append((change.key["stock"], None if after is None else after - (before or 0), entry.id, entry.what))
    return rows


def _moved_otherwise(con: sqlite3.Connection, told: list[Movement]) -> str | None:
    found = con.execute("SELECT id, stock, mg, journal, reason FROM movement ORDER BY id").fetchall()
    for place, (number, *said) in enumerate(found):
        words = harmless(f"movement {number} of {said[0]}", 120)
        if place >= len(told):
            return f"{words} stands in no journal entry: {OTHERS}"
        said[3] = harmless(str(said[3]))
        if tuple(said) != (*told[place][:3], harmless(told[place][3])):
            return f"{words} is not what journal entry {told[place][2]} says: {OTHERS}"
    if len(found) < len(told):
        missing = told[len(found)]
        return harmless(f"a movement of {missing[0]} by journal entry {missing[2]} is missing: {OTHERS}", 200)
    return None


def _differs(con: sqlite3.Connection, told: state.State) -> str | None:
    # A quantity unknown is no row at all in the file and a null in the journal.
    told["quantity"] = {k: row for k, row in told["quantity"].items() if row["mg"] is not None}
    try:
        changes: list[Change] = state.difference(told, state.read(con))
    except (KeyError, TypeError):
        return f"the journal leaves cells of a row open: {OTHERS}"
    if not changes:
        return None
    return f"the plant was changed past its journal: {harmless(changes[0].words(), 300)}"
