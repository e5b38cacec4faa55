"""A plant written as a catalogue folder that imports back to the same plant."""

from __future__ import annotations

import csv
import os
import tempfile
from collections.abc import Iterable
from pathlib import Path

from solver.properties import is_stock_code, stock_codes

from . import catalogue as names
from .edits import row_key
from .errors import CatalogueError, PlantError
from .harmless import harmless
from .records import Row, Value
from .state import Key, State

FILES = ("stocks.csv", "products.csv", "limits.csv", "shares.csv", "trials.csv")
Table = tuple[list[str], list[list[str]]]


def write_catalogue(state: State, folder: Path) -> tuple[str, ...]:
    """Write what is live in a state; returns notes on what stays behind.

    The files are made in a temporary folder, read back and checked. A new folder then gets its name as a whole; in
    one that is there they are moved in one by one. Only files that are a catalogue's are ever replaced or removed.
    """
    try:
        folder = folder.resolve()
        present = folder.exists() and _refuse_foreign(folder)
        tables = {"stocks.csv": _stocks(state), "products.csv": _products(state), "limits.csv": _limits(state),
                  "shares.csv": _shares(state), "trials.csv": _trials(state)}
        tables = {file: table for file, table in tables.items() if table[1] or file in FILES[:2]}
        place = folder if present else folder.parent
        place.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryDirectory(prefix=f".{folder.name[:40]}.", dir=place) as temporary:
            made = Path(temporary) / "made"  # within, for the temporary folder itself is closed to others
            made.mkdir()
            for file, (header, rows) in tables.items():
                _write(made / file, header, rows)
            _read_back(made, tables)
            if not present:
                os.rename(made, folder)  # fails where a folder with files, or a file, has come up meanwhile
            else:
                _move_in(made, folder)
    except OSError as error:
        raise PlantError(f"cannot write {folder}: {(error.strerror or str(error)).lower()}; choose another "
                         "folder, or free some space") from None
    except RuntimeError:
        raise PlantError(f"{folder} is a link that leads back to itself; choose another folder") from None
    return _left_behind(state)


def _move_in(made: Path, folder: Path) -> None:
    for file in FILES:
        if (made / file).exists():
            os.replace(made / file, folder / file)
        else:
            (folder / file).unlink(missing_ok=True)


def _refuse_foreign(folder: Path) -> bool:
    """True for a folder that an export may write into; PlantError where it could spoil what is another's."""
    if not folder.is_dir():
        raise PlantError(f"{folder} is a file; name a folder for the export")
    held = {x.name for x in folder.iterdir()}
    if held and "stocks.csv" not in held:
        raise PlantError(f"{folder} holds other things than a catalogue; name a new or an empty folder")
    for file in FILES:
        if file in held and not _is_of_a_catalogue(folder / file):
            raise PlantError(f"{folder / file} is not a catalogue's {file}, so it is left alone and nothing was "
                             "written; move it away, or name a new folder")
    return True


def _is_of_a_catalogue(path: Path) -> bool:
    """Is this a regular file with the columns that its name promises?"""
    if not path.is_file():
        return False
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            header = next(csv.reader(file), [])
    except (UnicodeDecodeError, csv.Error):
        return False
    spelt = {cell.strip().lower().replace(" ", "_") for cell in header}
    return spelt.issuperset(names.REQUIRED[path.name])


def _write(path: Path, header: list[str], rows: list[list[str]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        csv.writer(file, lineterminator="\n").writerows([header, *rows])
        file.flush()
        os.fsync(file.fileno())


def _read_back(folder: Path, tables: dict[str, Table]) -> None:
    """PlantError when the written files would not import: a stock or product is not complete yet."""
    try:
        names.read_catalogue(folder)
    except CatalogueError as error:
        fault, more = error.faults[0], len(error.faults) - 1
        # The file and its rows are gone by now, so name the stock, the product or the trial.
        of = fault.file
        if fault.row > 1:
            row = tables[fault.file][1][fault.row - 2]
            of = f"trial {row[1]} of {row[0]}" if fault.file == "trials.csv" else row[0]
        out = "drop that trial" if fault.file == "trials.csv" else f"retire {of}"
        raise PlantError(f"nothing was exported, for it would not import back: {of} {fault.column}: "
                         f"{fault.what}; {fault.fix}, or {out}"
                         f"{f' (and {more} more)' if more else ''}") from None


def _left_behind(state: State) -> tuple[str, ...]:
    return tuple(f"retired, so not exported: {table} {harmless(str(key[0]), 60)}"
                 for table in ("stock", "product") for key, row in state[table].items() if row["retired"])


def text(value: Value) -> str:
    """A value as a cell: the shortest digits that read back as the same double; unknown is empty."""
    if value is None:
        return ""
    if isinstance(value, float):
        return repr(value).removesuffix(".0")
    return str(value)


def _live(state: State, table: str) -> list[tuple[str, Row]]:
    rows = [(str(key[0]), row) for key, row in state[table].items() if not row["retired"]]
    return sorted(rows, key=lambda item: (item[1]["position"], item[0]))


def _of_live_products(state: State, table: str) -> list[tuple[Key, Row]]:
    """Lines of live products: products in their order, lines in theirs."""
    place = {code: n for n, (code, _) in enumerate(_live(state, "product"))}
    rows = [(key, row) for key, row in state[table].items() if key[0] in place]
    return sorted(rows, key=lambda item: (place[str(item[0][0])], item[1]["position"], item[0]))


def _with_extras(state: State, table: str, header: list[str],
                 keyed: Iterable[tuple[Key, list[str]]]) -> Table:
    """Add the cells of unknown columns."""
    rows = list(keyed)
    cells = {(str(k[1]), str(k[2])): str(r["text"]) for k, r in state["extra"].items() if k[0] == table}
    wanted = {row_key(key) for key, _ in rows}
    columns = sorted({column for key, column in cells if key in wanted})
    return header + columns, [row + [cells.get((row_key(key), column), "") for column in columns]
                              for key, row in rows]


def _stocks(state: State) -> Table:
    live = _live(state, "stock")
    codes = {code for code, _ in live}
    used = {str(prop) for code, prop in state["stock_value"] if code in codes and is_stock_code(str(prop))}
    order = {code: n for n, code in enumerate(stock_codes())}
    properties = sorted(used, key=lambda p: (order.get(p, len(order)), p))
    keyed = []
    for code, row in live:
        mg = state["quantity"].get((code,), {}).get("mg")
        cells = {"stock": code, **row, "on_hand_kg": None if mg is None else float(mg) / 1e6}
        cells |= {p: state["stock_value"].get((code, p), {}).get("value") for p in properties}
        head = (*names.STOCKS[:-2], *properties, *names.STOCKS[-2:])
        keyed.append(((code,), [text(cells[x]) for x in head]))
    return _with_extras(state, "stock", [*names.STOCKS[:-2], *properties, *names.STOCKS[-2:]], keyed)


def _products(state: State) -> Table:
    keyed = []
    for code, row in _live(state, "product"):
        cells = {"product": code, **row, "only_listed": "yes" if row["only_listed"] else "no"}
        keyed.append(((code,), [text(cells[x]) for x in names.PRODUCTS]))
    return _with_extras(state, "product", list(names.PRODUCTS), keyed)


def _limits(state: State) -> Table:
    lines = _of_live_products(state, "product_limit")
    header = list(names.LIMITS if any(row["unknown_ok"] for _, row in lines) else names.LIMITS[:-1])
    keyed = []
    for key, row in lines:
        cells = [str(key[0]), str(key[1]), text(row["low"]), text(row["high"]), _guard(row)]
        keyed.append((key, cells + ["allow" if row["unknown_ok"] else ""][:len(header) - 5]))
    return _with_extras(state, "product_limit", header, keyed)


def _guard(row: Row) -> str:
    if row["guard_pct"]:
        return f"{text(row['guard_pct'])}%"
    return text(row["guard"]) if row["guard"] else ""


def _shares(state: State) -> Table:
    keyed = [(key, [str(key[0]), str(key[1]), text(row["low_pct"]), text(row["high_pct"])])
             for key, row in _of_live_products(state, "share_rule")]
    return _with_extras(state, "share_rule", list(names.SHARES), keyed)


def _trials(state: State) -> Table:
    place = {code: n for n, (code, _) in enumerate(_live(state, "product"))}
    rows: list[tuple[tuple[Value, ...], Key, list[str]]] = []
    for key, row in state["trial_share"].items():
        if key[0] not in place:
            continue
        trial = state["trial"][key[0], key[1]]
        cells = {"product": key[0], "name": key[1], "stock": key[2], **row, **trial}
        order = (place[str(key[0])], trial["kept_at"], key[1], row["position"])
        rows.append((order, key, [text(cells[x]) for x in names.TRIALS]))
    rows.sort(key=lambda item: item[0])
    return _with_extras(state, "trial_share", list(names.TRIALS), [item[1:] for item in rows])
