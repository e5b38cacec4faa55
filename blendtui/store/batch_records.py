"""What the plant keeps of vessels, batches, lots and dips. Times are UTC, ISO 8601; None and empty mean unknown."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

OPEN, RELEASED, CANCELLED, REWORKED = "open", "released", "cancelled", "reworked"  # states of a batch
PLANNED, DONE, DROPPED = "planned", "done", "dropped"  # states of a charge
HEEL, LINE, FLUSH = "heel", "line", "flush"  # what may be in a vessel before anything is charged
PACKED, SAMPLE, SLOPS, REWORK, LEFT = "packed", "sample", "slops", "rework", "left"  # what leaves it, beside FLUSH


@dataclass(frozen=True)
class Vessel:
    """A kettle or a blending tank."""

    vessel: str
    capacity_l: float | None = None
    least_fill_l: float | None = None  # below it the stirrer or the coil is not covered
    division_kg: float | None = None  # of its scale
    heel_kg: float | None = None  # what usually stays in it …
    heel_stock: str = ""  # … a stock, or a batch
    flash_margin_c: float | None = None  # the site's own margin between mixing temperature and flash …
    flash_margin_on: str = ""  # … and the ISO date on which it was typed


@dataclass(frozen=True)
class Batch:
    """The heading of a batch: what was ordered, where it is made, how it stands."""

    batch: str
    product: str
    order_no: str = ""
    customer: str = ""
    asked: float = 0.0
    unit: str = "kg"  # of `asked`: kg, L15 or L20 (litres at 15 or 20 °C)
    batch_kg: float = 0.0  # what the vessel is to hold when all is charged, heel and flush included
    vessel: str = ""
    mix_c: float = 60.0
    formula: str = ""  # the target as it was when ordered, JSON (desk.batches)
    formula_entry: int = 0  # number of the last journal entry at that time
    heel_ignored: str = ""  # why the heel is left out of the solve; empty: it is not
    state: str = OPEN
    ordered_at: str = ""
    ordered_by: str = ""
    note: str = ""
    closed_at: str = ""
    closed_by: str = ""
    why: str = ""  # why it was cancelled or reworked


@dataclass(frozen=True)
class Content:
    """What is in the vessel before anything is charged."""

    batch: str
    line: int
    what: str  # HEEL, LINE or FLUSH
    stock: str  # a stock, or a batch whose oil it is; empty: only its values are known
    kg: float
    counts: int = 1  # 0: it does not go into the batch (flush oil that is pumped out again)
    cells: Mapping[str, float] = field(default_factory=dict)  # kv40, kv100, density15, flash, …
    parts: Mapping[str, float] = field(default_factory=dict)  # stock → mass fraction of what it was made of
    source: str = ""  # "measured", "typed", "stock"
    lots: Mapping[str, float] = field(default_factory=dict)  # of flush oil: lot → its part, as its tank was then


@dataclass(frozen=True)
class Charge:
    """One line of the card."""

    batch: str
    line: int
    round: int  # 0: the recipe; 1, 2 …: a trim
    stock: str
    lot: str  # as planned; empty: whatever is in the tank
    plan_kg: float
    tolerance_kg: float = 0.0
    celsius: float | None = None  # of the tank
    state: str = PLANNED  # PLANNED, DONE or DROPPED
    actual_kg: float | None = None
    actual_lot: str = ""
    at: str = ""
    by: str = ""
    checked_at: str = ""
    checked_by: str = ""
    why: str = ""  # of a correction, a drop, or an actual that was questioned
    # The stock's values when it was charged: kv40 and kv100 as it blends, density15, and every other property.
    cells: Mapping[str, float] = field(default_factory=dict)
    position: int = 0  # place in the order of the card
    lots: Mapping[str, float] = field(default_factory=dict)  # lot → its part, as the tank was then; table charge_lot


@dataclass(frozen=True)
class Sample:
    """A sample that was drawn from the vessel."""

    batch: str
    sample: int
    round: int  # after how many trims
    taken_at: str
    taken_by: str
    place: str = ""  # top, middle, bottom, line …
    celsius: float | None = None
    note: str = ""


@dataclass(frozen=True)
class Result:
    """One result of one sample."""

    batch: str
    sample: int
    line: int
    property: str
    value: float
    method: str
    at: str
    by: str
    withdrawn: str = ""  # why it does not count


@dataclass(frozen=True)
class Decision:
    """What was decided on a sample."""

    batch: str
    line: int
    sample: int
    decision: str  # release, repeat, fresh sample, trim
    words: str  # the arithmetic
    at: str
    by: str
    why: str = ""


@dataclass(frozen=True)
class Outcome:
    """What left the vessel."""

    batch: str
    line: int
    what: str  # PACKED, SAMPLE, SLOPS, FLUSH, REWORK or LEFT
    kg: float
    stock: str = ""  # of rework: the stock that it went to
    lot: str = ""
    at: str = ""
    by: str = ""
    why: str = ""


@dataclass(frozen=True)
class Lot:
    """A receipt: a delivery, or rework of a batch."""

    stock: str
    lot: str
    received_at: str
    kg: float
    certificate: str = ""
    source: str = ""  # own, certificate or typical
    cells: Mapping[str, float] = field(default_factory=dict)  # values as received
    from_batch: str = ""
    by: str = ""
    note: str = ""


@dataclass(frozen=True)
class Dip:
    """A tank dip against the book."""

    stock: str
    line: int
    dip_kg: float
    book_kg: float | None
    corrected: int  # 1: the book was set to the dip
    at: str
    by: str
    why: str = ""


@dataclass(frozen=True)
class Movement:
    """One step of a stock's quantity."""

    stock: str
    kg: float | None  # None: the quantity was unknown from here
    reason: str
    entry: int  # of the journal
    at: str
    who: str


@dataclass(frozen=True)
class Made:
    """A batch with everything that was recorded of it."""

    head: Batch
    contents: tuple[Content, ...] = ()
    charges: tuple[Charge, ...] = ()  # in the order of the card
    samples: tuple[Sample, ...] = ()
    results: tuple[Result, ...] = ()
    decisions: tuple[Decision, ...] = ()
    outcomes: tuple[Outcome, ...] = ()

    @property
    def name(self) -> str:
        """The batch's own name."""
        return self.head.batch

    @property
    def rounds(self) -> int:
        """How many trims were planned."""
        return max((c.round for c in self.charges if c.state != DROPPED), default=0)

    @property
    def to_charge(self) -> tuple[Charge, ...]:
        """Charges still to come, in order."""
        return tuple(c for c in self.charges if c.state == PLANNED)

    @property
    def charged(self) -> tuple[Charge, ...]:
        """Charges that are in the vessel, in order."""
        return tuple(c for c in self.charges if c.state == DONE)

    @property
    def in_vessel_kg(self) -> float:
        """What the vessel holds by the book: contents that count and charges, less what left it."""
        came = sum(c.kg for c in self.contents if c.counts) + sum(c.actual_kg or 0.0 for c in self.charged)
        return came - sum(o.kg for o in self.outcomes)
