"""The whole content of a plant as plain rows, and the one way in which changes are applied to it.

A State is a dict per table of store.schema: key tuple → row of cells. Import, export and verification compare
states; edits, undo and redo apply changes. Both speak of the same tables and cells.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterable, Sequence
from itertools import groupby

from . import journal
from .errors import ChangedSince
from .harmless import harmless
from .records import Change, Entry, Row, Value
from .schema import QUANTITY, TABLES

Key = tuple[Value, ...]
State = dict[str, dict[Key, Row]]


def empty() -> State:
    """A plant with nothing in it."""
    return {table: {} for table in TABLES}


def read(con: sqlite3.Connection) -> State:
    """Everything that a plant holds, retired rows included."""
    return {table: read_table(con, table) for table in TABLES}


def read_table(con: sqlite3.Connection, table: str) -> dict[Key, Row]:
    """Every row of one table."""
    spec = TABLES[table]
    if table == "quantity":
        return {(stock,): {"mg": mg} for stock, mg in con.execute(QUANTITY + "GROUP BY m.stock")}
    split = len(spec.keys)
    rows = con.execute(f"SELECT {', '.join(spec.keys + spec.columns)} FROM {table}")
    return {row[:split]: dict(zip(spec.columns, row[split:], strict=True)) for row in rows}


def difference(old: State, new: State) -> list[Change]:
    """The changes that make `old` into `new`, in an order that foreign keys allow."""
    changes: list[Change] = []
    for table in TABLES:
        for key, row in new[table].items():
            changes += _row_change(table, key, old[table].get(key), row)
    for table in reversed(TABLES):
        for key, row in old[table].items():
            if key not in new[table]:
                changes.append(change_of(table, key, row, None))
    return changes


def _row_change(table: str, key: Key, before: Row | None, after: Row) -> list[Change]:
    if before is None:
        return [change_of(table, key, None, after)]
    cells = [c for c in after if before[c] != after[c]]
    if not cells:
        return []
    return [change_of(table, key, {c: before[c] for c in cells}, {c: after[c] for c in cells})]


def change_of(table: str, key: Key, before: Row | None, after: Row | None) -> Change:
    """A change of the row with this key tuple."""
    return Change(table, dict(zip(TABLES[table].keys, key, strict=True)), before, after)


def replay(entries: Iterable[Entry]) -> State:
    """The state that the journal says the plant has."""
    state = empty()
    for entry in entries:
        for change in entry.changes:
            rows, key = state[change.table], tuple(change.key[k] for k in TABLES[change.table].keys)
            if change.after is None:
                rows.pop(key, None)
            else:
                rows[key] = {**rows.get(key, {}), **change.after}
    return state


def apply(con: sqlite3.Connection, changes: Sequence[Change], number: int, reason: str) -> None:
    """Apply changes inside an open transaction; ChangedSince when a row is not as `before` says."""
    for (table, adds), run in groupby(changes, key=lambda c: (c.table, c.before is None)):
        group = list(run)
        if table == "quantity":
            _move(con, group, number, reason)
        elif adds:
            _insert(con, table, group, number)
        else:
            for change in group:
                _check(con, change, number)
                _update(con, change)


def _insert(con: sqlite3.Connection, table: str, group: list[Change], number: int) -> None:
    spec = TABLES[table]
    names = spec.keys + spec.columns
    rows = [tuple({**change.key, **(change.after or {})}[n] for n in names) for change in group]
    if len(rows) < 20:  # one by one the row that is there already can be named
        for change in group:
            if present(con, change) is not None:
                raise since(con, change, number)
    con.executemany(f"INSERT INTO {table} ({', '.join(names)}) VALUES ({', '.join('?' * len(names))})", rows)


def _where(change: Change) -> tuple[str, list[Value]]:
    keys = TABLES[change.table].keys
    return " AND ".join(f"{k} = ?" for k in keys), [change.key[k] for k in keys]


def present(con: sqlite3.Connection, change: Change) -> Row | None:
    """The row that a change speaks of as it is now, or None when it is not there."""
    if change.table == "quantity":
        found = con.execute(QUANTITY + "AND m.stock = ?", (change.key["stock"],)).fetchone()
        return {"mg": found[1] if found else None}
    where, key = _where(change)
    columns = TABLES[change.table].columns
    row = con.execute(f"SELECT {', '.join(columns)} FROM {change.table} WHERE {where}", key).fetchone()
    return None if row is None else dict(zip(columns, row, strict=True))


def _check(con: sqlite3.Connection, change: Change, number: int) -> None:
    row = present(con, change)
    if row is None or any(row[c] != v for c, v in (change.before or {}).items()):
        raise since(con, change, number)


def _update(con: sqlite3.Connection, change: Change) -> None:
    where, key = _where(change)
    if change.after is None:
        con.execute(f"DELETE FROM {change.table} WHERE {where}", key)
        return
    cells = [c for c in TABLES[change.table].columns if c in change.after]
    con.execute(f"UPDATE {change.table} SET {', '.join(f'{c} = ?' for c in cells)} WHERE {where}",
                [*(change.after[c] for c in cells), *key])


def _move(con: sqlite3.Connection, group: list[Change], number: int, reason: str) -> None:
    """Quantities change by movements only; a movement of null says that the quantity is unknown from here."""
    now = {stock: mg for (stock,), mg in _quantities(con, group)}
    rows = []
    for change in group:
        stock, before, after = change.key["stock"], _mg(change.before), _mg(change.after)
        if now.get(stock) != before:
            raise since(con, change, number)
        rows.append((stock, None if after is None else after - (before or 0), reason, number))
    con.executemany("INSERT INTO movement (stock, mg, reason, journal) VALUES (?, ?, ?, ?)", rows)


def _quantities(con: sqlite3.Connection, group: list[Change]) -> Iterable[tuple[Key, int | None]]:
    if len(group) > 20:
        return [(key, row["mg"]) for key, row in read_table(con, "quantity").items()]
    return [((c.key["stock"],), (present(con, c) or {})["mg"]) for c in group]


def _mg(cells: object) -> int | None:
    return None if cells is None else cells["mg"]


def since(con: sqlite3.Connection, change: Change, number: int, said: str = "") -> ChangedSince:
    """The error that says who changed the cells of a change, when and how, before entry `number`."""
    of = " ".join(str(v) for k, v in change.key.items() if k != "line")
    cells = ", ".join(c for c in (change.before or change.after or {}) if c not in ("mg", "value"))
    cell = harmless(said or (f"{of} {cells}".strip() if len(cells) < 60 else of))
    last = journal.last_change(con, change, number)
    if last is None:
        return ChangedSince(f"{cell} is no longer as it was read; look again and repeat the change")
    return ChangedSince(f"{cell}: {harmless(last.who, 60)} changed it at {last.at} "
                        f"({harmless(last.what, 120)}); look again and repeat the change",
                        who=last.who, what=last.what, at=last.at)
