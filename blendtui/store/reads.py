"""Rows of the file as the records that the rest of the program uses."""

from __future__ import annotations

import json
import sqlite3
from collections import defaultdict
from collections.abc import Mapping
from typing import Any

from solver.measured import Measured, Part
from solver.stocks import Stock
from solver.target import Limit, ShareRule

from . import promises
from .charging import SIGMA
from .errors import NoSuchRow
from .harmless import harmless
from .records import SEPARATOR, Lesson, Product, Trial
from .schema import LESSON_CELLS, PRODUCT_CELLS, QUANTITY, QUANTITY_OF, STOCK_CELLS


def _one(where: str, code: str | None) -> tuple[str, tuple[str, ...]]:
    return (f" AND {where} = ?", (code,)) if code is not None else ("", ())


def stocks(con: sqlite3.Connection, include_retired: bool = False, code: str | None = None) -> list[Stock]:
    """Stocks in the plant's order; only the one of that code when a code is given."""
    only, given = _one("stock", code)
    values: defaultdict[str, dict[str, float]] = defaultdict(dict)
    for name, prop, value in con.execute("SELECT stock, property, value FROM stock_value WHERE 1 = 1"
                                         f"{only} ORDER BY property", given):
        values[name][prop] = value
    promised = promises.reserved(con, code)
    mg = (dict(con.execute(f"{QUANTITY} GROUP BY m.stock")) if code is None else
          {code: con.execute(QUANTITY_OF, given).fetchone()[0]})
    rows = con.execute(f"SELECT stock, {', '.join(STOCK_CELLS)} FROM stock WHERE retired <= ?{only} "
                       "ORDER BY position, stock", (int(include_retired), *given))
    return [Stock(code=row[0], **dict(zip(STOCK_CELLS, row[1:], strict=True)), **parted(values.get(row[0], {})),
                  on_hand_kg=kilograms(mg.get(row[0])), reserved_kg=promised.get(row[0], 0.0)) for row in rows]


def parted(values: Mapping[str, float]) -> dict[str, dict[str, float]]:
    """The values of a stock as it holds them: those of properties, and how sure values are."""
    return {"values": {code: value for code, value in values.items() if not code.startswith(SIGMA)},
            "sigmas": {code.removeprefix(SIGMA): value for code, value in values.items() if code.startswith(SIGMA)}}


def joined(stock: Stock) -> dict[str, float]:
    """The same the other way: every value of a stock by the code it is kept under."""
    return {**stock.values, **{SIGMA + prop: sigma for prop, sigma in stock.sigmas.items()}}


def kilograms(mg: int | None) -> float | None:
    """Whole milligrams as kg."""
    return None if mg is None else mg / 1e6


def milligrams(kg: float | None) -> int | None:
    """kg as whole milligrams."""
    return None if kg is None else round(kg * 1e6)


def stock(con: sqlite3.Connection, code: str) -> Stock:
    """One live stock."""
    found = stocks(con, code=code)
    if not found:
        raise NoSuchRow(f"no stock {_shown(code)}; " + _known(con, "stock"))
    return found[0]


def products(con: sqlite3.Connection, include_retired: bool = False,
             code: str | None = None) -> list[Product]:
    """Products in the plant's order with their lines; only the one of that code when a code is given."""
    only, given = _one("product", code)
    limits: defaultdict[str, list[Limit]] = defaultdict(list)
    for row in con.execute("SELECT product, property, low, high, guard, guard_pct, unknown_ok "
                           f"FROM product_limit WHERE 1 = 1{only} "
                           "ORDER BY product, position, property, line", given):
        limits[row[0]].append(Limit(*row[1:6], source=f"limit on {row[1]}", unknown_ok=bool(row[6])))
    rules: defaultdict[str, list[ShareRule]] = defaultdict(list)
    for name, of, low, high in con.execute("SELECT product, of_name, low_pct, high_pct FROM share_rule "
                                           f"WHERE 1 = 1{only} "
                                           "ORDER BY product, position, of_name, line", given):
        rules[name].append(ShareRule(of, low / 100.0, high / 100.0, source=f"share rule on {of}"))
    rows = con.execute(f"SELECT product, {', '.join(PRODUCT_CELLS)} FROM product WHERE retired <= ?{only} "
                       "ORDER BY position, product", (int(include_retired), *given))
    return [_product(row, limits, rules) for row in rows]


def _product(row: tuple[Any, ...], limits: dict[str, list[Limit]],
             rules: dict[str, list[ShareRule]]) -> Product:
    cells = dict(zip(PRODUCT_CELLS, row[1:], strict=True))
    cells["only_listed"] = bool(cells["only_listed"])
    return Product(row[0], **cells, limits=tuple(limits.get(row[0], ())), rules=tuple(rules.get(row[0], ())))


def product(con: sqlite3.Connection, code: str) -> Product:
    """One live product."""
    found = products(con, code=code)
    if not found:
        raise NoSuchRow(f"no product {_shown(code)}; " + _known(con, "product"))
    return found[0]


def trials(con: sqlite3.Connection, product: str | None = None) -> list[Trial]:
    """Kept trials, oldest first."""
    only, given = _one("product", product)
    shares: defaultdict[tuple[str, str], dict[str, float]] = defaultdict(dict)
    for name, trial, code, pct in con.execute("SELECT product, trial, stock, share_pct FROM trial_share "
                                              f"WHERE 1 = 1{only} "
                                              "ORDER BY product, trial, position, stock", given):
        shares[name, trial][code] = pct / 100.0
    rows = con.execute("SELECT trial, product, law, kept_at, kept_by, note FROM trial WHERE 1 = 1"
                       f"{only} ORDER BY kept_at, product, trial", given)
    return [Trial(row[0], row[1], shares[row[1], row[0]], *row[2:]) for row in rows]


def measured(con: sqlite3.Connection, product: str | None = None) -> list[Measured]:
    """Measured blends in the order in which they were recorded."""
    known: defaultdict[tuple[str, str], dict[str, float]] = defaultdict(dict)
    for name, stock, prop, value in con.execute("SELECT measured, stock, property, value FROM measured_part_value "
                                                "ORDER BY property"):
        known[name, stock][prop] = value
    parts: defaultdict[str, list[Part]] = defaultdict(list)
    for name, stock, pct, *values, lot, oil in con.execute(
            "SELECT measured, stock, share_pct, kv40, kv100, density15, lot, oil FROM measured_part "
            "ORDER BY measured, position, stock"):
        parts[name].append(Part(stock, pct / 100.0, *values, lot=lot, oil=oil, values=known.get((name, stock), {})))
    results: defaultdict[str, dict[str, float]] = defaultdict(dict)
    for name, prop, value in con.execute("SELECT measured, property, value FROM measured_value "
                                         "ORDER BY property NOT LIKE 'kv%', length(property), property"):
        results[name][prop] = value
    only, given = _one("product", product)
    rows = con.execute("SELECT measured, product, measured_on, method, note, confirmed FROM measured WHERE 1 = 1"
                       f"{only} ORDER BY position, measured", given)
    return [Measured(row[0], row[1], tuple(parts[row[0]]), results[row[0]], *row[2:5], confirmed=bool(row[5]))
            for row in rows]


def lessons(con: sqlite3.Connection, include_withdrawn: bool = False) -> list[Lesson]:
    """Lessons in the order in which they were taken."""
    terms: defaultdict[str, dict[float, tuple[float, ...]]] = defaultdict(dict)
    for version, celsius, first, second in con.execute(
            "SELECT lesson, celsius, first_term, second_term FROM lesson_term ORDER BY lesson, celsius"):
        terms[version][celsius] = (first,) if second is None else (first, second)
    rows = con.execute(f"SELECT lesson, {', '.join(LESSON_CELLS)} FROM lesson ORDER BY position, lesson")
    found = [_lesson(dict(zip(("version", *LESSON_CELLS), row, strict=True)), terms) for row in rows]
    return [x for x in found if x.in_use or include_withdrawn]


def _lesson(cells: dict[str, Any], terms: dict[str, dict[float, tuple[float, ...]]]) -> Lesson:
    low, high = (None if cells[x] is None else cells[x] / 100.0 for x in ("low_pct", "high_pct"))
    evidence = tuple(x for x in cells["evidence"].split(SEPARATOR) if x)
    rest = {x: cells[x] for x in cells if x not in ("low_pct", "high_pct", "evidence", "provisional")}
    return Lesson(**rest, terms=terms.get(cells["version"], {}), low=low, high=high, evidence=evidence,
                  provisional=bool(cells["provisional"]))


def next_version(con: sqlite3.Connection) -> str:
    """The version of the next lesson: one after the highest that any journal entry ever spoke of."""
    told = con.execute("SELECT changes FROM journal WHERE instr(changes, '\"table\":\"lesson\"') > 0")
    used = [int(change["key"]["lesson"][1:]) for (changes,) in told for change in json.loads(changes)
            if change["table"] == "lesson"]
    return f"L{1 + max(used, default=0)}"


def _shown(code: str) -> str:
    return repr(harmless(code, 60))


def _known(con: sqlite3.Connection, table: str) -> str:
    codes = [row[0] for row in con.execute(f"SELECT {table} FROM {table} WHERE retired = 0 ORDER BY position "
                                           "LIMIT 13")]
    if not codes:
        return f"the plant has no {table} yet"
    return f"the plant has {', '.join(codes[:12])}{' …' if len(codes) > 12 else ''}"
