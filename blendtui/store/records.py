"""What the store hands out: products, trials, journal entries, and the changes they are made of."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from solver.target import Effective, Excess, Limit, ShareRule
from solver.target import Lesson as Taught

from .schema import Row, Value

SEPARATOR = "; "  # between the names of the blends that stand behind a lesson
__all__ = ["SEPARATOR", "Change", "Entry", "Lesson", "Product", "Row", "Step", "Trial", "Value"]
# How a row of the record is called: by its key, in the plant's words. Every other row is called by its key alone.
_CALLED = {"content": "{batch} content {line}", "charge": "{batch} charge {line}",
           "charge_lot": "{batch} charge {line} lot {lot}", "sample": "{batch} sample {sample}",
           "result": "{batch} sample {sample} result {line}", "decision": "{batch} decision {line}",
           "outcome": "{batch} outcome {line}", "lot": "{stock} lot {lot}", "tank_lot": "{stock} lot {lot} in the tank",
           "dip": "{stock} dip {line}"}


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

    @property
    def named(self) -> str:
        """The row as a person calls it: `T-101`, `B-0003 charge 2`."""
        called = _CALLED.get(self.table)
        return called.format_map(self.key) if called else " ".join(str(v) for k, v in self.key.items() if k != "line")

    def words(self) -> str:
        """The change as a person reads it: `T-101 kv40 31.2 → 31.5`."""
        of = self.named
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
class Step:
    """A change that is worked out inside its own transaction, with the plant standing still (Plant.step)."""

    changes: tuple[Change, ...]
    what: str
    why: str = ""
    result: object = None  # for whoever asked


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


@dataclass(frozen=True)
class Lesson:
    """What measured blends taught and somebody took into use: an excess of a pair, or a blending value of a stock."""

    version: str  # L1, L2 …: never used twice in a plant
    kind: str  # "excess" or "value"
    law: str
    first: str  # a stock or an oil; of a blending value the stock
    second: str = ""  # of a pair
    terms: Mapping[float, tuple[float, ...]] = field(default_factory=dict)  # °C → (A,), (A, B), or (index,)
    # Mass fraction, the range for which it holds: of a pair the first's part of the two, else the stock's of the blend.
    low: float | None = None
    high: float | None = None
    evidence: tuple[str, ...] = ()  # names of measured blends
    leave_one_out: str = ""  # figures of the fit, in words
    provisional: bool = False  # from fewer than four blends
    taken_at: str = ""  # UTC, ISO 8601
    taken_by: str = ""
    withdrawn_at: str = ""  # empty: in use
    withdrawn_by: str = ""
    reason: str = ""  # why it was withdrawn

    @property
    def in_use(self) -> bool:
        """Has nobody withdrawn it?"""
        return not self.withdrawn_at

    @property
    def taught(self) -> Taught:
        """As the solver takes it."""
        if self.kind == "value":
            shares = 0.0 if self.low is None else self.low, 1.0 if self.high is None else self.high
            index = {celsius: terms[0] for celsius, terms in self.terms.items()}
            return Effective(self.first, self.law, index, shares, self.version, self.provisional)
        return Excess(self.first, self.second, self.law, dict(self.terms), self.version, self.provisional)
