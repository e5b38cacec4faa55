"""The tables of a plant file, and the steps that bring an older file up to date.

`user_version` counts the steps of MIGRATIONS that a file has had. A released step is never edited: a change
of the schema is a new step at the end.
"""

from __future__ import annotations

from dataclasses import dataclass

Value = str | int | float | None
Row = dict[str, Value]
APPLICATION_ID = 0x424C4E44  # "BLND"


@dataclass(frozen=True)
class Table:
    """One kind of row that the journal can change."""

    keys: tuple[str, ...]
    columns: tuple[str, ...]


STOCK_TEXT = ("name", "oil", "kind", "api_group")
STOCK_NUMBERS = ("unpumpable_kg", "price_per_t", "density15", "kv40", "kv100", "blend_kv40", "blend_kv100")
STOCK_CHARGES = ("division_kg", "package_kg", "least_charge_kg")
STOCK_TEST = ("tested_on", "source")
PRODUCT_CELLS = ("name", "grade", "batch_kg", "law", "max_cost_per_t", "max_stocks", "min_share_pct",
                 "only_listed", "note")
STOCK_CELLS = (*STOCK_TEXT, *STOCK_NUMBERS, *STOCK_CHARGES, *STOCK_TEST)
MEASURED_CELLS = ("product", "measured_on", "method", "note")
LESSON_CELLS = ("kind", "law", "first", "second", "low_pct", "high_pct", "evidence", "leave_one_out", "provisional",
                "taken_at", "taken_by", "withdrawn_at", "withdrawn_by", "reason")

VESSEL_CELLS = ("capacity_l", "least_fill_l", "division_kg", "heel_kg", "heel_stock", "flash_margin_c",
                "flash_margin_on")
BATCH_CELLS = ("product", "order_no", "customer", "asked", "unit", "batch_kg", "vessel", "mix_c", "formula",
               "formula_entry", "heel_ignored", "state", "ordered_at", "ordered_by", "note", "closed_at", "closed_by",
               "why")
CONTENT_CELLS = ("what", "stock", "kg", "counts", "cells", "parts", "source", "lots")
CHARGE_CELLS = ("round", "stock", "lot", "plan_kg", "tolerance_kg", "celsius", "state", "actual_kg", "actual_lot", "at",
                "by", "checked_at", "checked_by", "why", "cells", "position")
SAMPLE_CELLS = ("round", "taken_at", "taken_by", "place", "celsius", "note")
RESULT_CELLS = ("property", "value", "method", "at", "by", "withdrawn")
DECISION_CELLS = ("sample", "decision", "words", "at", "by", "why")
OUTCOME_CELLS = ("what", "kg", "stock", "lot", "at", "by", "why")
LOT_CELLS = ("received_at", "kg", "certificate", "source", "cells", "from_batch", "by", "note")
DIP_CELLS = ("dip_kg", "book_kg", "corrected", "at", "by", "why")

TABLES: dict[str, Table] = {
    "stock": Table(("stock",), (*STOCK_CELLS, "position", "retired")),
    "stock_value": Table(("stock", "property"), ("value",)),
    # Not a table of the file: the sum of a stock's movements, which only grows by further movements.
    "quantity": Table(("stock",), ("mg",)),
    "product": Table(("product",), (*PRODUCT_CELLS, "position", "retired")),
    "product_limit": Table(("product", "property", "line"),
                           ("low", "high", "guard", "guard_pct", "unknown_ok", "position")),
    "share_rule": Table(("product", "of_name", "line"), ("low_pct", "high_pct", "position")),
    "trial": Table(("product", "trial"), ("law", "note", "kept_at", "kept_by")),
    "trial_share": Table(("product", "trial", "stock"), ("share_pct", "position")),
    "measured": Table(("measured",), (*MEASURED_CELLS, "confirmed", "position")),
    "measured_part": Table(("measured", "stock"),
                           ("share_pct", "kv40", "kv100", "density15", "lot", "oil", "position")),
    "measured_part_value": Table(("measured", "stock", "property"), ("value",)),
    "measured_value": Table(("measured", "property"), ("value",)),
    "lesson": Table(("lesson",), (*LESSON_CELLS, "position")),
    "lesson_term": Table(("lesson", "celsius"), ("first_term", "second_term")),
    "vessel": Table(("vessel",), (*VESSEL_CELLS, "position", "retired")),
    "lot": Table(("stock", "lot"), LOT_CELLS),
    "tank_lot": Table(("stock", "lot"), ("part",)),
    "dip": Table(("stock", "line"), DIP_CELLS),
    "batch": Table(("batch",), BATCH_CELLS),
    "content": Table(("batch", "line"), CONTENT_CELLS),
    "charge": Table(("batch", "line"), CHARGE_CELLS),
    "charge_lot": Table(("batch", "line", "lot"), ("part",)),
    "sample": Table(("batch", "sample"), SAMPLE_CELLS),
    "result": Table(("batch", "sample", "line"), RESULT_CELLS),
    "decision": Table(("batch", "line"), DECISION_CELLS),
    "outcome": Table(("batch", "line"), OUTCOME_CELLS),
    # Cells of catalogue columns that mean nothing to this program: kept, so that an export has them again.
    "extra": Table(("table_name", "row_key", "column_name"), ("text",)),
}

# What happened: no catalogue folder speaks of it, and no import changes it.
RECORD = ("lot", "tank_lot", "dip", "batch", "content", "charge", "charge_lot", "sample", "result", "decision",
          "outcome")

# Columns that came with a later step: an entry written before it does not speak of them, and they were empty then.
LATER: dict[str, Row] = {"stock": dict.fromkeys(STOCK_CHARGES), "content": {"lots": "{}"}}

# Sum of movements since the last marker "quantity unknown" (mg null), in whole milligrams: it is exact.
QUANTITY = """
SELECT m.stock, SUM(m.mg) AS mg FROM movement m
LEFT JOIN (SELECT stock, MAX(id) AS id FROM movement WHERE mg IS NULL GROUP BY stock) u ON u.stock = m.stock
WHERE m.id > COALESCE(u.id, 0)
"""
# The same of one stock; null where it is unknown.
QUANTITY_OF = """
SELECT SUM(mg) FROM movement WHERE stock = ?1
AND id > COALESCE((SELECT MAX(id) FROM movement WHERE stock = ?1 AND mg IS NULL), 0)
"""


def _append_only(table: str) -> tuple[str, ...]:
    return tuple(f"CREATE TRIGGER {table}_no_{verb.lower()} BEFORE {verb} ON {table} "
                 f"BEGIN SELECT RAISE(ABORT, 'the {table} is append-only'); END"
                 for verb in ("UPDATE", "DELETE"))


MIGRATIONS: tuple[tuple[str, ...], ...] = ((
    """CREATE TABLE stock (
        stock TEXT NOT NULL PRIMARY KEY, name TEXT NOT NULL, oil TEXT NOT NULL, kind TEXT NOT NULL,
        api_group TEXT NOT NULL, unpumpable_kg REAL, price_per_t REAL, density15 REAL, kv40 REAL, kv100 REAL,
        blend_kv40 REAL, blend_kv100 REAL, tested_on TEXT NOT NULL, source TEXT NOT NULL,
        position INTEGER NOT NULL, retired INTEGER NOT NULL)""",
    """CREATE TABLE stock_value (
        stock TEXT NOT NULL REFERENCES stock (stock), property TEXT NOT NULL, value REAL NOT NULL,
        PRIMARY KEY (stock, property))""",
    """CREATE TABLE product (
        product TEXT NOT NULL PRIMARY KEY, name TEXT NOT NULL, grade TEXT NOT NULL, batch_kg REAL,
        law TEXT NOT NULL, max_cost_per_t REAL, max_stocks INTEGER, min_share_pct REAL,
        only_listed INTEGER NOT NULL, note TEXT NOT NULL, position INTEGER NOT NULL,
        retired INTEGER NOT NULL)""",
    """CREATE TABLE product_limit (
        product TEXT NOT NULL REFERENCES product (product), property TEXT NOT NULL, line INTEGER NOT NULL,
        low REAL, high REAL, guard REAL NOT NULL, guard_pct REAL NOT NULL, unknown_ok INTEGER NOT NULL,
        position INTEGER NOT NULL, PRIMARY KEY (product, property, line))""",
    """CREATE TABLE share_rule (
        product TEXT NOT NULL REFERENCES product (product), of_name TEXT NOT NULL, line INTEGER NOT NULL,
        low_pct REAL NOT NULL, high_pct REAL NOT NULL, position INTEGER NOT NULL,
        PRIMARY KEY (product, of_name, line))""",
    """CREATE TABLE trial (
        product TEXT NOT NULL REFERENCES product (product), trial TEXT NOT NULL, law TEXT NOT NULL,
        note TEXT NOT NULL, kept_at TEXT NOT NULL, kept_by TEXT NOT NULL, PRIMARY KEY (product, trial))""",
    # A trial is a record of what was once tried: its stocks need not be in the plant any more.
    """CREATE TABLE trial_share (
        product TEXT NOT NULL, trial TEXT NOT NULL, stock TEXT NOT NULL, share_pct REAL NOT NULL,
        position INTEGER NOT NULL, PRIMARY KEY (product, trial, stock),
        FOREIGN KEY (product, trial) REFERENCES trial (product, trial))""",
    """CREATE TABLE extra (
        table_name TEXT NOT NULL, row_key TEXT NOT NULL, column_name TEXT NOT NULL, text TEXT NOT NULL,
        PRIMARY KEY (table_name, row_key, column_name))""",
    """CREATE TABLE journal (
        id INTEGER NOT NULL PRIMARY KEY, at TEXT NOT NULL, who TEXT NOT NULL, what TEXT NOT NULL,
        changes TEXT NOT NULL, why TEXT NOT NULL, undoes INTEGER REFERENCES journal (id),
        prev_hash TEXT NOT NULL, hash TEXT NOT NULL)""",
    "CREATE INDEX journal_who ON journal (who, id)",
    # A stock that was added and taken back again leaves its movements behind, so they name it without a key.
    """CREATE TABLE movement (
        id INTEGER NOT NULL PRIMARY KEY, stock TEXT NOT NULL, mg INTEGER, reason TEXT NOT NULL,
        journal INTEGER NOT NULL REFERENCES journal (id))""",
    "CREATE INDEX movement_stock ON movement (stock, id)",
    *_append_only("journal"),
    *_append_only("movement"),
), (
    "ALTER TABLE stock ADD COLUMN division_kg REAL",
    "ALTER TABLE stock ADD COLUMN package_kg REAL",
    "ALTER TABLE stock ADD COLUMN least_charge_kg REAL",
    # A measured blend is a record of the laboratory: its product and stocks need not be in the plant any more.
    """CREATE TABLE measured (
        measured TEXT NOT NULL PRIMARY KEY, product TEXT NOT NULL, measured_on TEXT NOT NULL, method TEXT NOT NULL,
        note TEXT NOT NULL, confirmed INTEGER NOT NULL, position INTEGER NOT NULL)""",
    """CREATE TABLE measured_part (
        measured TEXT NOT NULL REFERENCES measured (measured), stock TEXT NOT NULL, share_pct REAL NOT NULL,
        kv40 REAL, kv100 REAL, density15 REAL, lot TEXT NOT NULL, oil TEXT NOT NULL, position INTEGER NOT NULL,
        PRIMARY KEY (measured, stock))""",
    # What else was known of the stock at the time: flash, sulphur and the like.
    """CREATE TABLE measured_part_value (
        measured TEXT NOT NULL, stock TEXT NOT NULL, property TEXT NOT NULL, value REAL NOT NULL,
        PRIMARY KEY (measured, stock, property),
        FOREIGN KEY (measured, stock) REFERENCES measured_part (measured, stock))""",
    """CREATE TABLE measured_value (
        measured TEXT NOT NULL REFERENCES measured (measured), property TEXT NOT NULL, value REAL NOT NULL,
        PRIMARY KEY (measured, property))""",
    # The excess of a pair, or the blending value of one stock (then `second` is empty). Withdrawn ones stay.
    """CREATE TABLE lesson (
        lesson TEXT NOT NULL PRIMARY KEY, kind TEXT NOT NULL, law TEXT NOT NULL, first TEXT NOT NULL,
        second TEXT NOT NULL, low_pct REAL, high_pct REAL, evidence TEXT NOT NULL, leave_one_out TEXT NOT NULL,
        provisional INTEGER NOT NULL, taken_at TEXT NOT NULL, taken_by TEXT NOT NULL, withdrawn_at TEXT NOT NULL,
        withdrawn_by TEXT NOT NULL, reason TEXT NOT NULL, position INTEGER NOT NULL)""",
    # All in the law's index: of an excess its terms, of a blending value the index of the stock.
    """CREATE TABLE lesson_term (
        lesson TEXT NOT NULL REFERENCES lesson (lesson), celsius REAL NOT NULL, first_term REAL NOT NULL,
        second_term REAL, PRIMARY KEY (lesson, celsius))""",
), (
    """CREATE TABLE vessel (
        vessel TEXT NOT NULL PRIMARY KEY, capacity_l REAL, least_fill_l REAL, division_kg REAL, heel_kg REAL,
        heel_stock TEXT NOT NULL, flash_margin_c REAL, flash_margin_on TEXT NOT NULL, position INTEGER NOT NULL,
        retired INTEGER NOT NULL)""",
    # A delivery, or rework of a batch. Values as received are JSON by property code; stock may have gone since.
    """CREATE TABLE lot (
        stock TEXT NOT NULL, lot TEXT NOT NULL, received_at TEXT NOT NULL, kg REAL NOT NULL,
        certificate TEXT NOT NULL, source TEXT NOT NULL, cells TEXT NOT NULL, from_batch TEXT NOT NULL,
        by TEXT NOT NULL, note TEXT NOT NULL, PRIMARY KEY (stock, lot))""",
    "CREATE INDEX lot_name ON lot (lot)",
    "CREATE INDEX lot_batch ON lot (from_batch)",
    # What a tank holds now, in parts of 1: only a receipt changes them, for what is drawn is drawn mixed.
    """CREATE TABLE tank_lot (
        stock TEXT NOT NULL, lot TEXT NOT NULL, part REAL NOT NULL, PRIMARY KEY (stock, lot))""",
    """CREATE TABLE dip (
        stock TEXT NOT NULL, line INTEGER NOT NULL, dip_kg REAL NOT NULL, book_kg REAL, corrected INTEGER NOT NULL,
        at TEXT NOT NULL, by TEXT NOT NULL, why TEXT NOT NULL, PRIMARY KEY (stock, line))""",
    # The product's limits and rules as they were when the order was taken are JSON in `formula`.
    """CREATE TABLE batch (
        batch TEXT NOT NULL PRIMARY KEY, product TEXT NOT NULL, order_no TEXT NOT NULL, customer TEXT NOT NULL,
        asked REAL NOT NULL, unit TEXT NOT NULL, batch_kg REAL NOT NULL, vessel TEXT NOT NULL, mix_c REAL NOT NULL,
        formula TEXT NOT NULL, formula_entry INTEGER NOT NULL, heel_ignored TEXT NOT NULL, state TEXT NOT NULL,
        ordered_at TEXT NOT NULL, ordered_by TEXT NOT NULL, note TEXT NOT NULL, closed_at TEXT NOT NULL,
        closed_by TEXT NOT NULL, why TEXT NOT NULL)""",
    "CREATE INDEX batch_state ON batch (state)",
    "CREATE INDEX batch_order ON batch (order_no)",
    # In the vessel before anything is charged; cells: its values, parts: what it was made of, both JSON.
    """CREATE TABLE content (
        batch TEXT NOT NULL REFERENCES batch (batch), line INTEGER NOT NULL, what TEXT NOT NULL, stock TEXT NOT NULL,
        kg REAL NOT NULL, counts INTEGER NOT NULL, cells TEXT NOT NULL, parts TEXT NOT NULL, source TEXT NOT NULL,
        PRIMARY KEY (batch, line))""",
    # cells: the values of the stock at the moment of charging, JSON.
    """CREATE TABLE charge (
        batch TEXT NOT NULL REFERENCES batch (batch), line INTEGER NOT NULL, round INTEGER NOT NULL,
        stock TEXT NOT NULL, lot TEXT NOT NULL, plan_kg REAL NOT NULL, tolerance_kg REAL NOT NULL, celsius REAL,
        state TEXT NOT NULL, actual_kg REAL, actual_lot TEXT NOT NULL, at TEXT NOT NULL, by TEXT NOT NULL,
        checked_at TEXT NOT NULL, checked_by TEXT NOT NULL, why TEXT NOT NULL, cells TEXT NOT NULL,
        position INTEGER NOT NULL, PRIMARY KEY (batch, line))""",
    "CREATE INDEX charge_planned ON charge (state, stock)",
    "CREATE INDEX charge_stock ON charge (stock)",
    """CREATE TABLE charge_lot (
        batch TEXT NOT NULL, line INTEGER NOT NULL, lot TEXT NOT NULL, part REAL NOT NULL,
        PRIMARY KEY (batch, line, lot), FOREIGN KEY (batch, line) REFERENCES charge (batch, line))""",
    "CREATE INDEX charge_lot_name ON charge_lot (lot)",
    """CREATE TABLE sample (
        batch TEXT NOT NULL REFERENCES batch (batch), sample INTEGER NOT NULL, round INTEGER NOT NULL,
        taken_at TEXT NOT NULL, taken_by TEXT NOT NULL, place TEXT NOT NULL, celsius REAL, note TEXT NOT NULL,
        PRIMARY KEY (batch, sample))""",
    """CREATE TABLE result (
        batch TEXT NOT NULL, sample INTEGER NOT NULL, line INTEGER NOT NULL, property TEXT NOT NULL,
        value REAL NOT NULL, method TEXT NOT NULL, at TEXT NOT NULL, by TEXT NOT NULL, withdrawn TEXT NOT NULL,
        PRIMARY KEY (batch, sample, line), FOREIGN KEY (batch, sample) REFERENCES sample (batch, sample))""",
    """CREATE TABLE decision (
        batch TEXT NOT NULL REFERENCES batch (batch), line INTEGER NOT NULL, sample INTEGER NOT NULL,
        decision TEXT NOT NULL, words TEXT NOT NULL, at TEXT NOT NULL, by TEXT NOT NULL, why TEXT NOT NULL,
        PRIMARY KEY (batch, line))""",
    # What left the vessel: packed, sample, slops, flush, rework, left (as the next heel).
    """CREATE TABLE outcome (
        batch TEXT NOT NULL REFERENCES batch (batch), line INTEGER NOT NULL, what TEXT NOT NULL, kg REAL NOT NULL,
        stock TEXT NOT NULL, lot TEXT NOT NULL, at TEXT NOT NULL, by TEXT NOT NULL, why TEXT NOT NULL,
        PRIMARY KEY (batch, line))""",
), (
    # The sum of a stock's movements is read with every list of stocks: from the index alone.
    "CREATE INDEX movement_sum ON movement (stock, mg)",
), (
    # Lot → part of flush oil, as its tank was when it was drawn; JSON.
    "ALTER TABLE content ADD COLUMN lots TEXT NOT NULL DEFAULT '{}'",
))
