"""A table of measured mixtures: read with every fault named, and the excess of each pair fitted."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from blendtui.store import cells as c
from blendtui.store.cells import Cells
from blendtui.store.csv_read import read_sheet
from blendtui.store.errors import CatalogueError, Fault
from solver.properties import LEAST_KV
from solver.walther import HIGHEST_KV

if TYPE_CHECKING:
    from solver.lab import Blends, Fit

REQUIRED = ("system", "frac_mass", "kv", "use")
COLUMNS = (*REQUIRED, "density15", "confirmed")
END = 1e-9  # mass fraction: nearer than this to 0 or 1 is the stock, for fractions are worked out of moles
FAR = 3.0  # times above or below what the law says: a result that is asked about before it teaches
SUS_PER_KV = (4.0, 12.0)  # SUS read as mm²/s is this many times too much: 4.6 for most oils, more for thin ones


@dataclass(frozen=True)
class Row:
    """One line of the file."""

    row: int
    system: str
    mass: float  # mass fraction of the heavier
    kv: float  # mm²/s
    use: str  # "fit", "test", or empty for a stock
    density15: float | None = None  # kg/m³
    confirmed: bool = False


@dataclass(frozen=True)
class SystemFit:
    """What one system taught."""

    system: str
    fit: Fit
    rows: tuple[Row, ...]  # as in the file, the stocks included
    predicted: tuple[float, ...]  # mm²/s, in the order of the rows
    unfitted: tuple[float, ...]  # by the law alone
    questions: tuple[str, ...]  # results kept out of the fit until they are confirmed
    kept_out: frozenset[int] = frozenset()  # the rows of these

    def error_pct(self, use: str, predicted: tuple[float, ...]) -> float | None:
        """Mean error of the rows of one use [%]; None where there is none."""
        errors = [abs(p / row.kv - 1.0) for row, p in zip(self.rows, predicted, strict=True)
                  if row.use == use and 0.0 < row.mass < 1.0]
        return 100.0 * sum(errors) / len(errors) if errors else None


@dataclass(frozen=True)
class FileFit:
    """What a file taught, system by system."""

    law: str
    systems: tuple[SystemFit, ...]
    notes: tuple[str, ...]  # columns that nothing uses


def fit_file(path: Path, law: str) -> FileFit:
    """Fit every system of a CSV file: system, frac_mass, kv, use, and if need be density15 and confirmed.

    Raises CatalogueError with every fault of the file, and SolverError for an unknown law.
    """
    from solver.laws import check_law

    check_law(law)
    sheet = read_sheet(path, COLUMNS, REQUIRED)
    rows = [_row(Cells(sheet.file, number, cells, sheet.faults)) for number, cells in sheet.rows]
    if not sheet.faults and not rows:
        sheet.faults.append(Fault(sheet.file, 0, "", "there is no row below the header",
                                  "add the stocks (frac_mass 0 and 1) and the mixtures measured"))
    if not sheet.faults:
        systems: dict[str, list[Row]] = {}
        for row in rows:
            if row is not None:
                systems.setdefault(row.system, []).append(row)
        fitted = [_system(sheet.file, law, own, sheet.faults) for own in systems.values()]
    if sheet.faults:
        raise CatalogueError(sheet.faults)
    notes = tuple(f"the column {c.shown(name)} of {sheet.file} is not used" for name in sheet.columns
                  if name not in COLUMNS)
    return FileFit(law, tuple(one for one in fitted if one is not None), notes)


def _row(cells: Cells) -> Row | None:
    system = cells.get("system", _name, default="")
    mass, kv = cells.get("frac_mass", _fraction), cells.get("kv", _kv)
    use = cells.get("use", _use, mass in (0.0, 1.0), default="")
    density = cells.get("density15", c.number, least=600.0, most=1600.0)
    confirmed = cells.get("confirmed", c.yes, default=0)
    if cells.bad:
        return None
    return Row(cells.row, system, mass, kv, use, density, bool(confirmed))


def _name(text: str) -> str:
    if not text:
        raise c.CellError("the system is empty", "give both stocks and their mixtures one name")
    return c.code(text)


def _fraction(text: str) -> float:
    value = c.number(text)
    if value is None:
        raise c.CellError("the mass fraction is empty", "write the heavier stock's, from 0 to 1")
    value = round(value) if min(abs(value), abs(value - 1.0)) <= END else value
    if not 0.0 <= value <= 1.0:
        hint = f"; if it is in %, write {value / 100.0:g}" if 1.0 < value <= 100.0 else ""
        raise c.CellError(f"{c.shown(text)} lies outside 0 to 1", f"write the heavier stock's mass fraction{hint}")
    return float(value)


def _kv(text: str) -> float:
    value = c.number(text)
    if value is None:
        raise c.CellError("the viscosity is empty", "write what was measured, mm²/s, or take the row out")
    if not LEAST_KV < value <= HIGHEST_KV:
        raise c.CellError(f"{c.shown(text)} lies outside what a law can carry",
                          f"write a viscosity above {LEAST_KV:g} and up to {HIGHEST_KV:g} mm²/s")
    return value


def _use(text: str, stock: bool) -> str:
    word = text.lower()
    if word in ("fit", "test"):
        return word
    if stock and word in ("", "stock"):
        return ""
    if not word:
        raise c.CellError("the use is empty", "write fit or test")
    raise c.CellError(f"{c.shown(text)} is not known", "write fit or test")


def _system(file: str, law: str, rows: list[Row], faults: list[Fault]) -> SystemFit | None:
    """The fit of one system; None after a fault."""
    from solver.errors import SolverError
    from solver.lab import fit

    before = len(faults)
    ends = _ends(file, rows, faults)
    if len(faults) > before:
        return None
    interior = [row for row in rows if row.use == "fit" and 0.0 < row.mass < 1.0]
    asked: dict[int, str] = {}  # row → what is asked about it
    try:
        every = _blends(law, rows, ends)
        asked = _questions(file, interior, dict(zip((row.row for row in rows), every.predicted(()), strict=True)))
        # One composition again and again is refused as that, and not for the questions that it raises too.
        repeated = len(interior) > 1 and len({row.mass for row in interior}) == 1
        kept = interior if repeated else [row for row in interior if row.row not in asked]
        # Where every result is doubtful the law alone still answers, and the questions say why.
        found = _nothing_taught() if interior and not kept else fit(_blends(law, kept, ends))
    except SolverError as error:
        faults.append(_refusal(file, law, (interior or rows)[0], str(error), list(asked.values())))
        return None
    # A stock is what was measured of it, and not what rounding makes of its index.
    predicted, unfitted = (tuple(row.kv if row.mass in (0.0, 1.0) else float(v) for row, v in
                                 zip(rows, every.predicted(terms), strict=True)) for terms in (found.terms, ()))
    return SystemFit(rows[0].system, found, tuple(rows), predicted, unfitted, tuple(asked.values()),
                     frozenset(asked))


def _nothing_taught() -> Fit:
    from solver.lab import Fit

    return Fit(form="none", terms=(), provisional=True, carried=0.0, blends=0, compositions=0, part=(0.0, 1.0),
               unfitted_pct=math.nan, fitted_pct=math.nan)


def _refusal(file: str, law: str, row: Row, why: str, asked: list[str]) -> Fault:
    """Why a system cannot be fitted, as a fault of the file."""
    what, _, fix = why.partition("; ")
    says = f"{c.shown(row.system)}: {what}"
    if law in what:
        return Fault(file, 0, "density15" if "density" in what else "", says, fix)
    return Fault(file, row.row, "use", says, "; ".join([fix, *asked]))


def _ends(file: str, rows: list[Row], faults: list[Fault]) -> tuple[Row, Row]:
    """The rows of the two stocks: at mass fraction 0 and 1."""
    found = []
    for at in (0.0, 1.0):
        here = [row for row in rows if row.mass == at]
        if not here:
            faults.append(Fault(file, rows[0].row, "frac_mass",
                                f"the system {c.shown(rows[0].system)} has no row at {at:g}",
                                f"add the viscosity of the {'heavier' if at else 'lighter'} stock alone"))
        for again in here[1:]:
            faults.append(Fault(file, again.row, "frac_mass", f"a second row at {at:g} of {c.shown(again.system)}; "
                                f"the first is row {here[0].row}", "keep one, with the mean of the results"))
        found.append(here[0] if here else rows[0])
    return found[0], found[1]


def _questions(file: str, rows: list[Row], alone: dict[int, float]) -> dict[int, str]:
    """What is doubtful about the results to fit, by row, of those that nobody has confirmed.

    alone: what the law alone says of each row, mm²/s.
    """
    asked: dict[int, str] = {}
    seen: dict[tuple[float, float], int] = {}
    for row in rows:
        first = seen.setdefault((row.mass, row.kv), row.row)
        times = row.kv / float(alone[row.row])
        if row.confirmed:
            continue
        if first != row.row:
            asked[row.row] = (f"{file} row {row.row}: the same fraction and viscosity as in row {first}; kept out of "
                              "the fit: take it out, or write yes under confirmed")
        elif not 1.0 / FAR <= times <= FAR:
            like = "; it looks like SUS written as mm²/s" if SUS_PER_KV[0] <= times <= SUS_PER_KV[1] else ""
            asked[row.row] = (f"{file} row {row.row}, kv: {row.kv:g} is {times:.2g} times the {alone[row.row]:.4g} of "
                              f"the law{like}; kept out of the fit: mend it, or write yes under confirmed")
    return asked


def _blends(law: str, rows: list[Row], ends: tuple[Row, Row]) -> Blends:
    import numpy as np

    from solver.lab_blends import two_stocks

    a, b = ends[0].density15, ends[1].density15
    return two_stocks(law, np.array([row.mass for row in rows]), np.array([row.kv for row in rows]),
                      (ends[0].kv, ends[1].kv), None if a is None or b is None else (a, b))
