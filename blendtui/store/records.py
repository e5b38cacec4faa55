"""What the store hands out: products, trials, journal entries, and the changes they are made of."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from solver.target import Limit, ShareRule

Value = str | int | float | None
Row = dict[str, Value]


@dataclass(frozen=True)
class Change:
    """One row, or some cells of one row, before and after. None before: it is added; None after: dropped."""

    table: str  # a table of store.schema
    key: Mapping[str, Value]  # the row's key columns
    before: Mapping[str, Value] | None
    after: Mapping[str, Value] | None

    def reversed(self) -> Change:
        """The change that takes this one back."""
        return Change(self.table, self.key, self.after, self.before)

    @property
    def empty(self) -> bool:
        """Does it change nothing?"""
        return self.before == self.after

    def words(self) -> str:
        """The change as a person reads it: `T-101 kv40 31.2 → 31.5`."""
        of = " ".join(str(v) for k, v in self.key.items() if k != "line")
        if self.before is None:
            return f"{of} added"
        if self.after is None:
            return f"{of} dropped"
        return f"{of} " + ", ".join(f"{_heading(c, v)} {_shown(c, v)} → {_shown(c, self.after.get(c))}"
                                    for c, v in self.before.items())


def _heading(column: str, value: Value) -> str:
    return {"mg": "on hand", "value": ""}.get(column, column)


def _shown(column: str, value: Value) -> str:
    if value is None or value == "":
        return "unknown" if value is None else "empty"
    if column == "mg" and isinstance(value, int):
        return f"{value / 1e6:g} kg"
    return f"{value:.12g}" if isinstance(value, float) else str(value)


@dataclass(frozen=True)
class Entry:
    """One entry of the journal."""

    id: int
    at: str  # UTC, ISO 8601
    who: str
    what: str
    changes: tuple[Change, ...]
    why: str
    undoes: int | None  # the entry that this one takes back
    hash: str


@dataclass(frozen=True)
class Product:
    """What a product asks for, as kept in the plant. None or empty: not asked."""

    product: str
    name: str = ""
    grade: str = ""
    batch_kg: float | None = None
    law: str = ""  # empty: refutas
    max_cost_per_t: float | None = None
    max_stocks: int | None = None
    min_share_pct: float | None = None
    only_listed: bool = False
    note: str = ""
    limits: tuple[Limit, ...] = ()
    rules: tuple[ShareRule, ...] = ()


@dataclass(frozen=True)
class Trial:
    """Shares that someone kept under a name."""

    name: str
    product: str
    shares: Mapping[str, float] = field(default_factory=dict)  # stock → mass fraction
    law: str = "refutas"
    kept_at: str = ""  # UTC, ISO 8601; filled in by the plant when empty
    kept_by: str = ""
    note: str = ""
