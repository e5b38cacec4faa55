"""The changes that an edit is made of: from a record as it is now and the new value of a cell."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import replace

from solver.stocks import Stock

from .database import now
from .plant import Plant
from .reads import joined, milligrams, parted
from .records import Change, Product, Row, Trial, Value
from .schema import STOCK_CELLS
from .state import change_of

Line = tuple[tuple[Value, ...], Row]  # key and cells of a row


def stock_cell(stock: Stock, cell: str, value: Value) -> Change:
    """Give a stock's cell (a column, on_hand_kg or a property code) a new value; None: unknown."""
    if cell == "on_hand_kg":
        before, after = milligrams(stock.on_hand_kg), milligrams(value)
        return change_of("quantity", (stock.code,), {"mg": before}, {"mg": after})
    if cell in STOCK_CELLS:
        return change_of("stock", (stock.code,), {cell: getattr(stock, cell)}, {cell: value})
    old = joined(stock).get(cell)
    return change_of("stock_value", (stock.code, cell), None if old is None else {"value": old},
                     None if value is None else {"value": value})


def with_cell(stock: Stock, cell: str, value: Value) -> Stock:
    """The stock as it would be with this value in this cell."""
    if cell == "on_hand_kg" or cell in STOCK_CELLS:
        return replace(stock, **{cell: value})
    values = {**joined(stock), cell: value}
    return replace(stock, **parted({c: v for c, v in values.items() if v is not None}))


def next_position(plant: Plant, table: str) -> int:
    """The place after the last row of stocks or products."""
    return 1 + max((int(row["position"] or 0) for row in plant.table(table).values()), default=0)


def new_stock(plant: Plant, stock: Stock) -> list[Change]:
    """Add a stock with all its cells, the quantity aside."""
    cells: Row = {c: getattr(stock, c) for c in STOCK_CELLS}
    cells |= {"position": next_position(plant, "stock"), "retired": 0}
    changes = [change_of("stock", (stock.code,), None, cells)]
    # An older version could leave the quantity of a stock that was taken back under its code.
    stray = plant.row("quantity", stock.code) or {}
    if stray.get("mg") is not None:
        changes.append(change_of("quantity", (stock.code,), stray, {"mg": None}))
    return [*changes, *(change_of("stock_value", (stock.code, p), None, {"value": v})
                        for p, v in joined(stock).items())]


def revived_stock(plant: Plant, stock: Stock, old: Stock) -> list[Change]:
    """Bring a retired stock back under its code with new cells; its quantity is unknown again."""
    changes = [change_of("stock", (stock.code,), {"retired": 1}, {"retired": 0})]
    changes += [stock_cell(old, c, getattr(stock, c)) for c in (*STOCK_CELLS, "on_hand_kg")]
    values = joined(stock)
    return changes + [stock_cell(old, p, values.get(p)) for p in {**joined(old), **values}]


def retired(table: str, code: str) -> Change:
    """Take a stock or a product out of use; it stays in the file."""
    return change_of(table, (code,), {"retired": 0}, {"retired": 1})


def product_cell(product: Product, cell: str, value: Value) -> Change:
    """Give a product's cell a new value."""
    old = getattr(product, cell)
    return change_of("product", (product.product,), {cell: int(old) if isinstance(old, bool) else old},
                     {cell: value})


def new_product(plant: Plant, code: str, cells: Mapping[str, Value]) -> list[Change]:
    """Add a product without lines."""
    blank: Row = {"name": "", "grade": "", "batch_kg": None, "law": "", "max_cost_per_t": None,
                  "max_stocks": None, "min_share_pct": None, "only_listed": 0, "note": "", "retired": 0,
                  "position": next_position(plant, "product")}
    return [change_of("product", (code,), None, {**blank, **cells})]


def lines(plant: Plant, table: str, product: str, of: str | None = None) -> list[Line]:
    """A product's lines in product_limit or share_rule, in order; only those on one name if given."""
    rows = [(k, r) for k, r in plant.table(table).items() if k[0] == product and of in (None, k[1])]
    return sorted(rows, key=lambda item: (item[1]["position"], item[0]))


def set_line(plant: Plant, table: str, product: str, of: str, cells: Row) -> list[Change]:
    """Make the product's only line on a property or name say this."""
    present = lines(plant, table, product, of)
    if not present:
        place = 1 + max((int(r["position"] or 0) for _, r in lines(plant, table, product)), default=0)
        return [change_of(table, (product, of, 1), None, {**cells, "position": place})]
    (key, row), *others = present
    first = change_of(table, key, {c: row[c] for c in cells}, dict(cells))
    return [first, *drop_lines(plant, table, others)]


def drop_lines(plant: Plant, table: str, present: Iterable[Line]) -> list[Change]:
    """Take lines out, with the cells of unknown columns that belong to them."""
    changes = []
    for key, row in present:
        changes += [change_of("extra", k, r, None) for k, r in extras(plant, table, key)]
        changes.append(change_of(table, key, row, None))
    return changes


def row_key(key: Iterable[Value]) -> str:
    """The key of a row as the table of extra cells spells it."""
    return json.dumps(list(key), ensure_ascii=False, separators=(",", ":"))


def extras(plant: Plant, table: str, key: Iterable[Value]) -> list[Line]:
    """Cells of unknown columns that belong to one row."""
    name = row_key(key)
    return [(k, r) for k, r in plant.table("extra").items() if k[0] == table and k[1] == name]


def copied_extras(plant: Plant, table: str, key: Iterable[Value], new: Iterable[Value]) -> list[Change]:
    """The cells of unknown columns of one row, for its copy."""
    return [change_of("extra", (table, row_key(new), k[2]), None, r) for k, r in extras(plant, table, key)]


def new_trial(plant: Plant, trial: Trial) -> list[Change]:
    """Keep a trial; ChangedSince later on when one of that name is there already."""
    key = (trial.product, trial.name)
    changes = [change_of("trial", key, None, {"law": trial.law, "note": trial.note,
                                              "kept_at": trial.kept_at or now(),
                                              "kept_by": trial.kept_by or plant.who})]
    for place, (code, share) in enumerate(trial.shares.items()):
        # 100 times a share that is 1 but for rounding may be a hair more than the whole.
        percent = min(max(100.0 * share, 0.0), 100.0)
        changes.append(change_of("trial_share", (*key, code), None, {"share_pct": percent, "position": place}))
    return changes


def dropped_trial(plant: Plant, product: str, name: str) -> list[Change]:
    """Take a kept trial out, with the cells of unknown columns that belong to it."""
    present = [(key, row) for key, row in plant.table("trial_share").items() if key[:2] == (product, name)]
    trial = plant.row("trial", product, name)
    gone = [] if trial is None else [change_of("trial", (product, name), trial, None)]
    return drop_lines(plant, "trial_share", present) + gone
