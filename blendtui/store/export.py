"""A plant written as a catalogue folder that imports back to the same plant."""

from __future__ import annotations

import csv
import os
import tempfile
from collections.abc import Iterable, Iterator
from pathlib import Path

from . import catalogue as names
from .catalogue_lab import LESSONS, MEASURED, RESULT
from .catalogue_vessels import VESSELS
from .charging import is_value_code, value_order
from .edits import row_key
from .errors import CatalogueError, PlantError
from .harmless import harmless
from .merging import nameable
from .records import Row, Value
from .schema import STOCK_CHARGES, STOCK_TEST
from .state import Key, State

FILES = tuple(names.REQUIRED)
# What happened is no catalogue: table, one of it, several of it.
RECORDS = (("batch", "batch", "batches"), ("lot", "lot", "lots"), ("dip", "dip", "dips"))
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
                  "shares.csv": _shares(state), "trials.csv": _trials(state), "measured.csv": _measured(state),
                  "lessons.csv": _lessons(state), "vessels.csv": _vessels(state)}
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
                _move_in(made, folder, keep=() if state["vessel"] else ("vessels.csv",))
    except OSError as error:
        raise PlantError(f"cannot write {folder}: {(error.strerror or str(error)).lower()}; choose another "
                         "folder, or free some space") from None
    except RuntimeError:
        raise PlantError(f"{folder} is a link that leads back to itself; choose another folder") from None
    kept = not state["vessel"] and present and (folder / "vessels.csv").exists()
    return (*_left_behind(state), *(("vessels.csv is left as it was: the plant has no vessels",) if kept else ()))


def _move_in(made: Path, folder: Path, keep: tuple[str, ...]) -> None:
    for file in FILES:
        if (made / file).exists():
            os.replace(made / file, folder / file)
        elif file not in keep:
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
            of = {"trials.csv": f"trial {row[1]} of {row[0]}", "measured.csv": f"measured blend {row[0]}",
                  "lessons.csv": f"lesson {row[0]}", "vessels.csv": f"vessel {row[0]}"}.get(fault.file, row[0])
        out = {"trials.csv": "drop that trial", "measured.csv": "drop that blend",
               "lessons.csv": "import a lessons.csv without it"}.get(fault.file, f"retire {of}")
        raise PlantError(f"nothing was exported, for it would not import back: {of} {fault.column}: "
                         f"{fault.what}; {fault.fix}, or {out}"
                         f"{f' (and {more} more)' if more else ''}") from None


def _left_behind(state: State) -> tuple[str, ...]:
    notes = [f"retired, so not exported: {table} {harmless(str(key[0]), 60)}"
             for table in ("stock", "product", "vessel") for key, row in state[table].items() if row["retired"]]
    for vessel, row in _live(state, "vessel"):
        if row["heel_stock"] and not nameable(state, row["heel_stock"]):
            heel = harmless(str(row["heel_stock"]), 60)
            notes.append(f"vessel {harmless(vessel, 60)}: its heel {heel} is no stock in use, so the folder does not "
                         "name it")
    counts = [f"{len(state[table])} {name if len(state[table]) == 1 else many}" for table, name, many in RECORDS
              if state[table]]
    if counts:
        listed = " and ".join([", ".join(counts[:-1]), counts[-1]] if counts[1:] else counts)
        notes.append(f"in the plant file only: {listed}; blendtui backup FILE keeps them")
    return tuple(notes)


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
    used = {str(prop) for code, prop in state["stock_value"] if code in codes and is_value_code(str(prop))}
    properties = sorted(used, key=value_order)
    # Columns that nobody uses are left out, so that a plant without drums and scales has a plain table.
    plain = [x for x in names.STOCKS if x not in STOCK_CHARGES or any(row[x] is not None for _, row in live)]
    header = [*plain[:-len(STOCK_TEST)], *properties, *plain[-len(STOCK_TEST):]]
    keyed = []
    for code, row in live:
        mg = state["quantity"].get((code,), {}).get("mg")
        cells = {"stock": code, **row, "on_hand_kg": None if mg is None else float(mg) / 1e6}
        cells |= {p: state["stock_value"].get((code, p), {}).get("value") for p in properties}
        keyed.append(((code,), [text(cells[x]) for x in header]))
    return _with_extras(state, "stock", header, keyed)


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


def _measured(state: State) -> Table:
    results = sorted({str(prop) for _, prop in state["measured_value"]}, key=_result_order)
    known = sorted({str(key[2]) for key in state["measured_part_value"]})
    header = [*MEASURED, *known, *(RESULT + prop for prop in results)]
    values = {(key[0], RESULT + str(key[1])): row["value"] for key, row in state["measured_value"].items()}
    keyed = []
    for key, part, begins in _by_whole(state, "measured", "measured_part"):
        blend = state["measured"][key[0],]
        whole = {**blend, "confirmed": "yes" if blend["confirmed"] else "",
                 **{RESULT + prop: values.get((key[0], RESULT + prop)) for prop in results}} if begins else {}
        own = {prop: state["measured_part_value"].get((*key, prop), {}).get("value") for prop in known}
        cells = {**whole, "name": key[0], "stock": key[1], **part, **own}
        keyed.append((key, [text(cells.get(x)) for x in header]))
    return _with_extras(state, "measured_part", header, keyed)


def _result_order(prop: str) -> tuple[int, str]:
    return {"kv40": 0, "kv100": 1, "vi": 2}.get(prop, 3), prop


def _lessons(state: State) -> Table:
    keyed = []
    for key, term, begins in _by_whole(state, "lesson", "lesson_term"):
        lesson = state["lesson"][key[0],]
        whole = {**lesson, "provisional": "yes" if lesson["provisional"] else ""} if begins else {}
        cells = {**whole, "version": key[0], "celsius": key[1], **term}
        keyed.append((key, [text(cells.get(x)) for x in LESSONS]))
    return _with_extras(state, "lesson_term", list(LESSONS), keyed)


def _vessels(state: State) -> Table:
    keyed = []
    for code, row in _live(state, "vessel"):
        heel = row["heel_stock"] if nameable(state, row["heel_stock"]) else ""
        cells = {"vessel": code, **row, "heel_stock": heel}
        keyed.append(((code,), [text(cells[x]) for x in VESSELS]))
    return _with_extras(state, "vessel", list(VESSELS), keyed)


def _by_whole(state: State, whole: str, table: str) -> Iterator[tuple[Key, Row, bool]]:
    """Rows of a table by what they belong to, and whether each is the first of its own."""
    def place(item: tuple[Key, Row]) -> tuple[Value, ...]:
        key, row = item
        return state[whole][key[0],]["position"], key[0], row.get("position"), key[1]

    before: Value = None
    for key, row in sorted(state[table].items(), key=place):
        yield key, row, key[0] != before
        before = key[0]
