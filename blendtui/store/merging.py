"""The state that a plant has after an import: what the catalogue says, and what it leaves as it was.

Numbers that only keep an order (positions, and the line numbers of limits and rules) are kept where the order is the
same, so that a folder that says what the plant holds changes nothing.
"""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Mapping, Sequence

from . import state
from .edits import row_key
from .records import Row, Value
from .schema import RECORD
from .state import Key, State

OWNED = {"stock": ("stock_value", "quantity"), "product": ("product_limit", "share_rule"), "vessel": ()}
LINES = ("product_limit", "share_rule")
TRIALS = ("trial", "trial_share")
# Optional file → the tables that it holds; a folder without it says nothing of them.
OPTIONAL = {"measured.csv": ("measured", "measured_part", "measured_part_value", "measured_value"),
            "lessons.csv": ("lesson", "lesson_term"), "vessels.csv": ("vessel",)}


def merged(old: State, said: State, given: frozenset[str]) -> tuple[State, tuple[str, ...]]:
    """The state after an import, and what it retires: rows that the catalogue lacks stay, marked retired."""
    new = _with_old_lines(old, {table: dict(rows) for table, rows in said.items()})
    new |= {table: dict(old[table]) for table in RECORD}
    for table in (*OWNED, "measured", "lesson"):
        _keep_places(old[table], new[table])
    for table in LINES:
        for product in {key[0] for key in new[table]}:
            _keep_places(_of(old[table], product), _of(new[table], product))
    _keep_heels(old, new)
    unsaid = {table for file, tables in OPTIONAL.items() if file not in given for table in tables}
    retired: list[str] = []
    for owner, tables in ((owner, tables) for owner, tables in OWNED.items() if owner not in unsaid):
        gone = {key[0] for key in old[owner] if key not in new[owner]}
        for key in gone:
            new[owner][key,] = {**old[owner][key,], "retired": 1}
            if not old[owner][key,]["retired"]:
                retired.append(str(key))
        for table in tables:
            new[table].update({k: row for k, row in old[table].items() if k[0] in gone})
        new["extra"].update({k: row for k, row in old["extra"].items()
                             if k[0] in (owner, *tables) and json.loads(str(k[1]))[0] in gone})
    _keep_trials(old, new, said["product"] if "trials.csv" in given else {})
    new |= {table: dict(old[table]) for table in unsaid}
    new["extra"].update({k: row for k, row in old["extra"].items() if k[0] in unsaid})
    return new, tuple(sorted(retired))


def nameable(state: State, heel: Value) -> bool:
    """Can a folder name what a vessel's heel is: a stock in use? The oil of a batch it cannot."""
    return state["stock"].get((heel,), {"retired": 1})["retired"] == 0


def _keep_heels(old: State, new: State) -> None:
    """An empty heel_stock says nothing of a heel that no folder can name."""
    for key, row in new["vessel"].items():
        before = old["vessel"].get(key, {}).get("heel_stock")
        if before and not row["heel_stock"] and not nameable(old, before):
            new["vessel"][key] = {**row, "heel_stock": before}


def _keep_trials(old: State, new: State, spoken_of: Mapping[Key, Row]) -> None:
    """A folder without trials.csv says nothing of trials; one with it speaks for its own products only."""
    for table in TRIALS:
        new[table].update({k: row for k, row in old[table].items() if (k[0],) not in spoken_of})
    new["extra"].update({k: row for k, row in old["extra"].items()
                         if k[0] in TRIALS and (json.loads(str(k[1]))[0],) not in spoken_of})


def _with_old_lines(old: State, new: State) -> State:
    """Give every line the number that the line in its place has in the plant."""
    for table in LINES:
        renamed: dict[Key, Key] = {}
        of_old, of_new = _by_name(old[table]), _by_name(new[table])
        for name, keys in of_new.items():
            known = of_old.get(name, [])[:len(keys)]
            free = (line for line in range(1, len(keys) + len(known) + 1) if (*name, line) not in known)
            for place, key in enumerate(keys):
                renamed[key] = known[place] if place < len(known) else (*name, next(free))
        new[table] = {renamed[key]: row for key, row in new[table].items()}
        spelt = {row_key(key): row_key(to) for key, to in renamed.items()}
        new["extra"] = {(k[0], spelt[str(k[1])], k[2]) if k[0] == table else k: row
                        for k, row in new["extra"].items()}
    return new


def _by_name(rows: Mapping[Key, Row]) -> dict[Key, list[Key]]:
    """Keys of lines in their order, by product and what they speak of."""
    found: defaultdict[Key, list[Key]] = defaultdict(list)
    for key in _ordered(rows):
        found[key[:2]].append(key)
    return found


def _ordered(rows: Mapping[Key, Row]) -> list[Key]:
    return sorted(rows, key=lambda key: (rows[key]["position"], key))


def _of(rows: Mapping[Key, Row], product: Value) -> dict[Key, Row]:
    return {key: row for key, row in rows.items() if key[0] == product}


def _keep_places(old: Mapping[Key, Row], new: Mapping[Key, Row]) -> None:
    """Keep the positions of the plant where they give the order of the catalogue; new rows come after all."""
    order = _ordered(new)
    known = [key for key in order if key in old]
    if known != order[:len(known)] or not _rises(old, known):
        return
    last = max((int(row["position"] or 0) for row in old.values()), default=0)
    for key in known:
        new[key]["position"] = old[key]["position"]
    for place, key in enumerate(order[len(known):], last + 1):
        new[key]["position"] = place


def _rises(rows: Mapping[Key, Row], keys: Sequence[Key]) -> bool:
    return list(keys) == _ordered({key: rows[key] for key in keys})


def changes(old: State, said: State, given: frozenset[str]) -> tuple[list[state.Change], tuple[str, ...]]:
    """What an import changes, and what it retires."""
    new, retired = merged(old, said, given)
    return state.difference(old, new), retired
