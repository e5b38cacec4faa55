"""Text cells of a catalogue as values: one reader a kind of cell, faults in words."""

from __future__ import annotations

import math
import re
from datetime import date

from solver.errors import TargetError
from solver.properties import lookup
from solver.stocks import GROUPS, KINDS

from .errors import Fault
from .harmless import harmless, spoken, unsafe

LONGEST_CODE = 60
LONGEST_TEXT = 1000
LARGEST_KG = 1e9
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_COMMA = re.compile(r"[+-]?[0-9]+,[0-9]+")
_EITHER = re.compile(r"[+-]?[1-9][0-9]{0,2},[0-9]{3}")  # a comma of decimals or of thousands
_THOUSANDS = re.compile(r"[+-]?[0-9]{1,3}(?:[, '][0-9]{3})+(?:\.[0-9]*)?")
_DATE = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")


class CellError(ValueError):
    """What is wrong with one cell, and what would do."""

    def __init__(self, what: str, fix: str) -> None:
        super().__init__(f"{what}; {fix}")
        self.what = what
        self.fix = fix


def shown(text: str) -> str:
    """A cell as it may stand in a message."""
    return f"'{harmless(text, 40)}'"


def number(text: str, *, least: float = -math.inf, most: float = math.inf) -> float | None:
    """A plain number; None for an empty cell."""
    if not text:
        return None
    if not _NUMBER.fullmatch(text):
        raise _no_number(text)
    value = float(text)
    if math.isinf(value):
        raise CellError(f"{shown(text)} is too large for a number", "check the digits")
    if value < least:
        raise CellError(f"{text} is below {least:g}", "check the figure, or leave the cell empty")
    if value > most:
        raise CellError(f"{text} is above {most:g}", "check the figure, or leave the cell empty")
    return value


def _no_number(text: str) -> CellError:
    if text.lower().lstrip("+-") in ("nan", "inf", "infinity"):
        return CellError(f"{shown(text)} is not a quantity",
                         "leave the cell empty where the value is unknown")
    plain = text.replace("−", "-")
    if _NUMBER.fullmatch(plain):
        return CellError(f"{shown(text)} has a typographic minus", f"write {plain}")
    if _EITHER.fullmatch(text):
        return CellError(f"{shown(text)} can be read in two ways",
                         f"write {text.replace(',', '')} or {text.replace(',', '.')}")
    if _COMMA.fullmatch(text):
        return CellError(f"{shown(text)} has a decimal comma", f"write {text.replace(',', '.')}")
    if _THOUSANDS.fullmatch(text):
        return CellError(f"{shown(text)} has marks between thousands",
                         f"write {re.sub(r'''[, ']''', '', text)}")
    return CellError(f"{shown(text)} is not a number", "write a number such as 31.5, or leave the cell empty")


def whole(text: str) -> int | None:
    """A whole number from 1; None for an empty cell."""
    value = number(text, least=1, most=1000)
    if value is None:
        return None
    if value != int(value):
        raise CellError(f"{text} is not a whole number", "write one such as 4")
    return int(value)


def positive(text: str, most: float = math.inf) -> float | None:
    """A number above 0; None for an empty cell."""
    value = number(text, most=most)
    if value is not None and value <= 0.0:
        raise CellError(f"{text} is not above 0", "check the figure, or leave the cell empty")
    return value


def yes(text: str) -> int:
    """1 for yes, 0 for no or an empty cell."""
    if text.lower() not in ("yes", "no", ""):
        raise CellError(f"{shown(text)} is neither yes nor no", "write yes or no")
    return int(text.lower() == "yes")


def iso_date(text: str) -> str:
    """An ISO date, or empty."""
    if text:
        try:
            if not _DATE.fullmatch(text):
                raise ValueError
            date.fromisoformat(text)
        except ValueError:
            raise CellError(f"{shown(text)} is not a date",
                            "write year-month-day, such as 2026-03-01") from None
    return text


def plain(text: str) -> str:
    """Text without anything that could drive a terminal."""
    bad = unsafe(text)
    if bad:
        raise CellError(f"{shown(text)} holds a control character: {spoken(bad)}", "type the text again")
    if len(text) > LONGEST_TEXT:
        raise CellError(f"the text has {len(text)} characters", f"keep it to {LONGEST_TEXT}")
    return text


def code(text: str) -> str:
    """A code of a stock or product: short, not empty, nothing that could drive a terminal."""
    if not text:
        raise CellError("the code is empty", "give one")
    plain(text)
    if len(text) > LONGEST_CODE:
        raise CellError(f"the code {shown(text)} has {len(text)} characters", f"keep it to {LONGEST_CODE}")
    return text


def stock_code(text: str) -> str:
    """A stock's code: besides, it must not read as a kind, a group or a `STOCK=PCT` pair."""
    code(text)
    if text in KINDS or text.lower().startswith("group "):
        raise CellError(f"the code {shown(text)} is what share rules call a kind or group",
                        "give the stock another code")
    if "=" in text:
        raise CellError(f"the code {shown(text)} holds =, which parts a stock from its share",
                        "give the stock another code")
    return text


def word(text: str, words: tuple[str, ...], name: str) -> str:
    """One of a few words, or empty."""
    if text and text not in words:
        raise CellError(f"{name} {shown(text)} is not known", f"usable are {', '.join(words)}")
    return text


def property_code(text: str) -> str:
    """A property of the registry that can be limited."""
    if not text:
        raise CellError("the property is empty", "name one, such as kv40 or flash")
    try:
        lookup(plain(text))
    except TargetError as error:
        what, _, fix = str(error).partition("; ")
        raise CellError(harmless(what, 120), fix or "see the list of properties in the help") from None
    return text


def limit_value(text: str, prop: str) -> float | None:
    """A low or high of a limit, within what the property can be at all."""
    value, entry = number(text), lookup(prop)
    if value is None or entry.lowest <= value <= entry.highest:
        return value
    if prop == "density15" and 0.6 <= value <= 1.6:
        raise CellError(f"{text} looks like kg/L", f"in kg/m³ it is {1000 * value:.12g}")
    raise CellError(f"{text} lies outside {entry.lowest:g} to {entry.highest:g} {entry.unit}".rstrip(),
                    "check the figure and its unit")


def guard(text: str) -> tuple[float, float]:
    """A guard as (in the property's unit, in % of the limit's value); an empty cell is 0."""
    if text.endswith("%"):
        return 0.0, number(text[:-1].strip(), least=0.0, most=50.0) or 0.0
    return number(text, least=0.0) or 0.0, 0.0


def rule_name(text: str) -> str:
    """What a share rule speaks of, a group spelt in one way."""
    if not text:
        raise CellError("the rule names nothing", "name a stock, an oil, a kind or a group such as group II")
    plain(text)
    if text.lower().startswith("group "):
        group = text[6:].strip().upper()
        if group not in GROUPS:
            raise CellError(f"group {shown(text[6:].strip())} is not known",
                            f"usable are {', '.join(GROUPS)}")
        return f"group {group}"
    return text


class Cells:
    """Reads the cells of one row and gathers their faults."""

    def __init__(self, file: str, row: int, cells: dict[str, str], faults: list[Fault]) -> None:
        self.file, self.row, self.cells, self.faults = file, row, cells, faults
        self.bad: set[str] = set()  # columns with a fault

    def fault(self, column: str, what: str, fix: str = "") -> None:
        """Add a fault of this row."""
        self.bad.add(column)
        self.faults.append(Fault(self.file, self.row, column, what, fix))

    def get(self, column: str, reader, *more, default=None, **options):
        """The cell as a value, the default where it has a fault; a missing column reads as empty."""
        try:
            return reader(self.cells.get(column, ""), *more, **options)
        except CellError as error:
            self.fault(column, error.what, error.fix)
            return default
