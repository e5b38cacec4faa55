"""One CSV file of a catalogue as text cells, every fault of its shape reported."""

from __future__ import annotations

import csv
import io
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

from .errors import Fault
from .harmless import harmless

csv.field_size_limit(1_000_000)


@dataclass
class Sheet:
    """A CSV file: its columns and rows as stripped text, each row with its line in the file."""

    file: str
    columns: tuple[str, ...] = ()
    rows: list[tuple[int, dict[str, str]]] = field(default_factory=list)
    faults: list[Fault] = field(default_factory=list)


def read_sheet(path: Path, known: tuple[str, ...], required: tuple[str, ...],
               respelt: Callable[[str], str | None] | None = None) -> Sheet:
    """Read a file; what is wrong with its shape is in `.faults`, and rows of a wrong shape are left out.

    `respelt` gives the heading that is meant by one which is not known, where there is one.
    """
    sheet = Sheet(path.name)
    text = _text(path, sheet)
    if text is None:
        return sheet
    records = _records(text, sheet)
    if not records:
        sheet.faults.append(Fault(sheet.file, 0, "", "the file is empty",
                                  f"it needs a header row with the columns {', '.join(required)}"))
        return sheet
    header_row, header = records[0]
    sheet.columns = tuple(c.strip() for c in header)
    _check_header(sheet, header_row, known, required, respelt)
    if not sheet.faults:
        good = [(row, cells) for row, cells in records[1:] if _right_length(sheet, row, cells)]
        sheet.rows = list(_through_pandas(sheet.columns, good))
    return sheet


def _text(path: Path, sheet: Sheet) -> str | None:
    if path.exists() and not path.is_file():
        sheet.faults.append(Fault(path.name, 0, "", "is not a file", "move it away and put the CSV file there"))
        return None
    try:
        raw = path.read_bytes()
    except OSError as error:
        why = (error.strerror or str(error)).lower()
        sheet.faults.append(Fault(path.name, 0, "", f"cannot be read: {why}",
                                  "check the path and the rights"))
        return None
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        sheet.faults.append(Fault(path.name, 0, "", "is UTF-16, not UTF-8", "save it as CSV UTF-8"))
        return None
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        row = 1 + raw[:error.start].count(b"\n")
        sheet.faults.append(Fault(path.name, row, "", f"is not UTF-8 (byte {raw[error.start]:#04x})",
                                  "save it as CSV UTF-8"))
        return None
    if "\0" in text:
        row = 1 + text[:text.index("\0")].count("\n")
        sheet.faults.append(Fault(path.name, row, "", "holds a null byte, so it is no text file",
                                  "export it again as CSV UTF-8"))
        return None
    return text


def _records(text: str, sheet: Sheet) -> list[tuple[int, list[str]]]:
    """Records that are not blank, each with the line on which it begins."""
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    records, begins = [], 1
    try:
        for cells in reader:
            if any(c.strip() for c in cells):
                records.append((begins, cells))
            begins = reader.line_num + 1
    except csv.Error as error:
        sheet.faults.append(Fault(sheet.file, begins, "", f"the quotation marks do not pair ({error})",
                                  'close the quote, and write a quote inside a cell as ""'))
    return records


def _check_header(sheet: Sheet, row: int, known: tuple[str, ...], required: tuple[str, ...],
                  respelt: Callable[[str], str | None] | None) -> None:
    columns = sheet.columns

    def fault(column: str, what: str, fix: str) -> None:
        sheet.faults.append(Fault(sheet.file, row, harmless(column, 40), what, fix))

    if len(columns) == 1 and any(mark in columns[0] for mark in ";\t"):
        fault("", "the columns are not separated by commas", "save it as CSV with commas")
        return
    for column in dict.fromkeys(columns):
        if not column:
            fault("", "a column has no heading", "name it, or take the column out")
        elif harmless(column) != column:
            fault(column, "the heading holds a control character", "type the heading again")
        elif columns.count(column) > 1:
            fault(column, "two columns have this heading", "keep one of them")
        elif column not in known:
            plain = column.lower().replace(" ", "_")
            meant = plain if plain in known else respelt(column) if respelt else None
            if meant not in (None, column):
                fault(column, "the heading is not spelt as it must be", f"write {meant}")
    spelt = [c.lower().replace(" ", "_") for c in columns]
    for column in required:
        if column not in columns and column not in spelt:
            fault(column, "this column is missing",
                  f"add it; the file has {harmless(', '.join(columns), 80)}")


def _right_length(sheet: Sheet, row: int, cells: list[str]) -> bool:
    width = len(sheet.columns)
    if len(cells) == width:
        return True
    hint = "a comma too many? write decimals with a point, and put text that holds a comma in quotes"
    few = "add the commas of the empty cells"
    sheet.faults.append(Fault(sheet.file, row, "", f"the row has {len(cells)} cells and the header {width}",
                              hint if len(cells) > width else few))
    return False


def _through_pandas(columns: tuple[str, ...],
                    records: list[tuple[int, list[str]]]) -> Iterator[tuple[int, dict[str, str]]]:
    """Every cell as stripped text: nothing is guessed, so `007` and `NA` stay what they are."""
    if not records:
        return
    import pandas as pd

    buffer = io.StringIO(newline="")
    csv.writer(buffer).writerows([columns, *(cells for _, cells in records)])
    buffer.seek(0)
    frame = pd.read_csv(buffer, dtype=str, keep_default_na=False, na_filter=False, skip_blank_lines=False,
                        index_col=False)
    cells = [[text.strip() for text in frame[column].tolist()] for column in columns]
    for (row, _), values in zip(records, zip(*cells, strict=True), strict=True):
        yield row, dict(zip(columns, values, strict=True))
