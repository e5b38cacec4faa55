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
from .schema import QUANTITY, QUANTITY_OF, RECORD, TABLES

FEW = 100  # rows that are looked up one by one
OWNER = {"stock_value": "stock", "quantity": "stock", "product_limit": "product", "share_rule": "product",
         "trial": "product", "trial_share": "trial", "measured_part": "measured",
         "measured_part_value": "measured_part", "measured_value": "measured", "lesson_term": "lesson",
         "content": "batch", "charge": "batch", "charge_lot": "charge", "sample": "batch", "result": "sample",
         "decision": "batch", "outcome": "batch"}
LONE_RULE = """
SELECT r.product, r.of_name, r.line FROM share_rule r JOIN product p ON p.product = r.product AND p.retired = 0
WHERE r.of_name = ? AND NOT EXISTS (SELECT 1 FROM stock s WHERE s.retired = 0 AND r.of_name IN (s.stock, s.oil))
"""
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


def replay(entry: Entry, state: State) -> None:
    """Make a state what it is after a journal entry."""
    for change in entry.changes:
        rows, key = state[change.table], tuple(change.key[k] for k in TABLES[change.table].keys)
        if change.after is None:
            rows.pop(key, None)
        else:
            rows[key] = {**rows.get(key, {}), **change.after}


def apply(con: sqlite3.Connection, changes: Sequence[Change], number: int, reason: str) -> None:
    """Apply changes inside an open transaction; ChangedSince when a row is not as `before` says.

    So it is when a row goes that others have put something on meanwhile: a quantity, a value, a line, a rule.
    """
    for (table, adds), run in groupby(changes, key=lambda c: (c.table, c.before is None)):
        group = list(run)
        if table == "quantity":
            _move(con, group, number, reason)
        elif adds:
            _insert(con, table, group, number)
        else:
            for change in group:
                _check(con, change, number)
                _refuse_children(con, change, number)
                _update(con, change)
    _refuse_lone_rules(con, changes, number)


def _insert(con: sqlite3.Connection, table: str, group: list[Change], number: int) -> None:
    spec = TABLES[table]
    names = spec.keys + spec.columns
    rows = [tuple({**change.key, **(change.after or {})}[n] for n in names) for change in group]
    there = _there(con, group)
    for change, row in zip(group, rows, strict=True):
        if row[:len(spec.keys)] in there:
            raise since(con, change, number)
    _refuse_orphans(con, group, number)
    con.executemany(f"INSERT INTO {table} ({', '.join(names)}) VALUES ({', '.join('?' * len(names))})", rows)


def _there(con: sqlite3.Connection, group: list[Change]) -> set[Key]:
    """Keys of those rows of a group that are in the file."""
    table = group[0].table
    if len(group) > FEW:
        return set(con.execute(f"SELECT {', '.join(TABLES[table].keys)} FROM {table}"))
    return {_key(c) for c in group if present(con, c) is not None}


def _key(change: Change) -> Key:
    return tuple(change.key[k] for k in TABLES[change.table].keys)


def _refuse_orphans(con: sqlite3.Connection, group: list[Change], number: int) -> None:
    """ChangedSince when the stock, product or trial that these rows belong to is gone."""
    owner = OWNER.get(group[0].table) if group else None
    if owner is None:
        return
    width = len(TABLES[owner].keys)
    owners = {_key(c)[:width]: change_of(owner, _key(c)[:width], None, None) for c in group}
    there = _there(con, list(owners.values()))
    for key, change in owners.items():
        if key not in there:
            raise since(con, change, number, f"{_called(change)} is no longer there")


def _called(owner: Change) -> str:
    """A row that others belong to: `stock T-101`, but `B-0003 charge 2`."""
    return owner.named if owner.table in RECORD else f"{owner.table} {owner.named}"


def _refuse_children(con: sqlite3.Connection, change: Change, number: int) -> None:
    """ChangedSince when a row is to go that others still stand on."""
    if change.after is not None:
        return
    for table, owner in OWNER.items():
        if owner != change.table:
            continue
        keys = TABLES[table].keys
        where = " AND ".join(f"{k} = ?" for k in keys[:len(_key(change))])
        if table == "quantity":
            row = present(con, change_of(table, _key(change), None, None)) or {}
            found = _key(change) if row["mg"] is not None else None
        else:
            found = con.execute(f"SELECT {', '.join(keys)} FROM {table} WHERE {where}", _key(change)).fetchone()
        if found:
            raise since(con, change_of(table, tuple(found), None, None), number)


def _refuse_lone_rules(con: sqlite3.Connection, changes: Sequence[Change], number: int) -> None:
    """ChangedSince when a stock has gone that a product's share rule names, and no other has that name as its oil."""
    for change in changes:
        if change.table != "stock" or not (change.after is None or change.after.get("retired") == 1):
            continue
        found = con.execute(LONE_RULE, (change.key["stock"],)).fetchone()
        if found:
            raise since(con, change_of("share_rule", tuple(found), None, None), number,
                        f"{found[0]} has a share rule on {found[1]}")


def _where(change: Change) -> tuple[str, list[Value]]:
    keys = TABLES[change.table].keys
    return " AND ".join(f"{k} = ?" for k in keys), [change.key[k] for k in keys]


def present(con: sqlite3.Connection, change: Change) -> Row | None:
    """The row that a change speaks of as it is now, or None when it is not there."""
    if change.table == "quantity":
        return {"mg": con.execute(QUANTITY_OF, (change.key["stock"],)).fetchone()[0]}
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
    _refuse_orphans(con, [c for c in group if _mg(c.after) is not None], number)
    now = {stock: mg for (stock,), mg in _quantities(con, group)}
    rows = []
    for change in group:
        stock, before, after = change.key["stock"], _mg(change.before), _mg(change.after)
        if now.get(stock) != before:
            raise since(con, change, number)
        now[stock] = after  # for a further movement of it
        rows.append((stock, None if after is None else after - (before or 0), reason, number))
    con.executemany("INSERT INTO movement (stock, mg, reason, journal) VALUES (?, ?, ?, ?)", rows)


def _quantities(con: sqlite3.Connection, group: list[Change]) -> Iterable[tuple[Key, int | None]]:
    if len(group) > FEW:
        return [(key, row["mg"]) for key, row in read_table(con, "quantity").items()]
    return [((c.key["stock"],), (present(con, c) or {})["mg"]) for c in group]


def _mg(cells: object) -> int | None:
    return None if cells is None else cells["mg"]


def since(con: sqlite3.Connection, change: Change, number: int, said: str = "") -> ChangedSince:
    """The error that says who changed the cells that differ, when and how, before entry `number`."""
    of = change.named
    differ = _differing(con, change)
    cells = ", ".join(c for c in TABLES[change.table].columns if c in differ and c not in ("mg", "value"))
    # A row of the record is one thing to a person, whatever its cells are called.
    whole = change.before is None or change.table in RECORD or len(cells) >= 60
    cell = harmless(said or (of if whole else f"{of} {cells}".strip()))
    last = journal.last_change(con, change, number, differ)
    return changed_by(last, cell) if last is not None else ChangedSince(
        f"{cell} is no longer as it was read; look again and repeat the change")


def changed_by(last: Entry, cell: str) -> ChangedSince:
    """The error that names the entry which changed something meanwhile."""
    return ChangedSince(f"{cell}: {harmless(last.who, 60)} changed it at {last.at} "
                        f"({harmless(last.what, 120)}); look again and repeat the change",
                        who=last.who, what=last.what, at=last.at)


def _differing(con: sqlite3.Connection, change: Change) -> set[str]:
    """Cells that are not as a change says they were; every cell where the row itself is what differs."""
    row, before = present(con, change), change.before
    if row is None or before is None:
        return set(TABLES[change.table].columns)
    return {c for c, v in before.items() if row[c] != v} or set(before)
