"""What a product asks for: limits on properties, rules on shares, and how the recipe may be made."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

LAWS = ("refutas", "walther-mass", "walther-volume", "wright-mass", "wright-volume")


@dataclass(frozen=True)
class Limit:
    """Low and/or high on one property, as one line of a catalogue or a grade gives it."""

    property: str  # registry code
    low: float | None = None  # in the property's unit; None: open
    high: float | None = None
    guard: float = 0.0  # how far inside the limit a recipe must stay, in the property's unit …
    guard_pct: float = 0.0  # … or in % of the limit's value; the larger of the two holds
    source: str = ""  # who asks: "grade ISO VG 46", "limits.csv row 3"
    unknown_ok: bool = False  # the operator lets stocks serve whose value of this property is unknown


@dataclass(frozen=True)
class Excess:
    """What measured blends of a pair taught: Redlich–Kister terms that a law's index is out by, per temperature.

        E = f g (A + B (f − g)),   f, g: the pair's parts of the blend by the law's own basis
    """

    first: str  # a stock, or an oil where several tanks hold the same
    second: str
    law: str
    terms: Mapping[float, tuple[float, ...]]  # °C → (A,) or (A, B), in the law's index
    version: str = ""
    provisional: bool = False  # from fewer than four blends


@dataclass(frozen=True)
class Effective:
    """The index with which a stock blends under one law, worked back from measured blends, per temperature."""

    stock: str
    law: str
    index: Mapping[float, float]  # °C → the law's index in place of that of its own viscosity
    shares: tuple[float, float] = (0.0, 1.0)  # mass fractions of the blend between which it was seen to hold
    version: str = ""
    provisional: bool = False


Lesson = Excess | Effective  # what measured blends have taught, in the form the solver uses


@dataclass(frozen=True)
class ShareRule:
    """Least and most mass fraction of a stock, an oil, a kind or a group ("group II")."""

    of: str
    low: float = 0.0  # mass fraction
    high: float = 1.0
    source: str = ""


@dataclass(frozen=True)
class Target:
    """A product's limits and rules, and the operator's own wishes for this recipe."""

    product: str
    limits: tuple[Limit, ...] = ()  # the lines; a grade's own limits are added by the solver
    rules: tuple[ShareRule, ...] = ()
    grade: str = ""  # "ISO VG 46", "SAE 30", "SAE 10W-40", "SAE 80W-90" or empty
    law: str = "refutas"
    batch_kg: float | None = None  # None: quantities on hand do not bind, empty tanks are left out
    max_cost_per_t: float | None = None
    max_stocks: int | None = None  # of base stocks and rework
    min_share: float | None = None  # least mass fraction of a base stock or rework that is used
    only_listed: bool = False
    held: Mapping[str, float] = field(default_factory=dict)  # stock → mass fraction, by the operator
    left_out: frozenset[str] = frozenset()  # stocks the operator leaves out
    also_laws: tuple[str, ...] = ()  # laws under which every limit must hold besides `law`
    lessons: tuple[Lesson, ...] = ()  # of the laboratory, in use
    # (property or "cost_per_t", "low" or "high") → the limit that is held there instead of what all lines ask:
    # a what-if, a sweep, the price of a limit. NaN opens the side.
    moved: Mapping[tuple[str, str], float] = field(default_factory=dict)
