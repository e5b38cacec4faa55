"""Stock: the content of one tank with its measured properties; StockTable: one array per property."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from .errors import StockError
from .properties import Array, volume_at
from .volume import litres
from .walther import lines

KINDS = ("base", "vi_improver", "additive", "pour_depressant", "rework")
GROUPS = ("I", "II", "III", "IV", "V")
SOURCES = ("own", "certificate", "typical", "computed")  # computed: mixed by the laws, until tested


@dataclass(frozen=True)
class Stock:
    """One material in one tank. None everywhere means unknown, never zero."""

    code: str
    name: str = ""
    oil: str = ""  # what the tank holds; empty: its own
    kind: str = "base"  # one of KINDS
    api_group: str = ""  # one of GROUPS or empty
    on_hand_kg: float | None = None
    unpumpable_kg: float | None = None  # bottoms that no pump reaches; None counts as 0
    reserved_kg: float = 0.0  # promised to open batches
    price_per_t: float | None = None
    density15: float | None = None  # kg/m³ at 15 °C
    kv40: float | None = None  # mm²/s, neat
    kv100: float | None = None  # mm²/s, neat
    blend_kv40: float | None = None  # mm²/s, used in place of the neat KV in a blend
    blend_kv100: float | None = None
    values: Mapping[str, float] = field(default_factory=dict)  # property code → value in the registry's unit
    division_kg: float | None = None  # step of the scale or meter it is charged by; None: any mass
    package_kg: float | None = None  # net mass of one drum or IBC, charged whole; None: bulk
    least_charge_kg: float | None = None  # least mass that can be charged at all
    sigmas: Mapping[str, float] = field(default_factory=dict)  # property code → standard deviation of its value
    tested_on: str = ""  # ISO date
    source: str = ""  # one of SOURCES or empty
    # What is in the vessel already (a heel, flush oil, a charge, a measured batch): exactly this mass takes part in
    # the batch, whatever the product's list says, and no whole-number rule counts it.
    in_vessel_kg: float | None = None
    contents: tuple[tuple[Stock, float], ...] = ()  # what it was made of, mass fractions: share rules count these

    @property
    def available_kg(self) -> float | None:
        """On hand less unpumpable bottoms and what is promised, never below 0 [kg]; None: the quantity is unknown."""
        if self.in_vessel_kg is not None:
            return self.in_vessel_kg
        if self.on_hand_kg is None:
            return None
        return max(0.0, self.on_hand_kg - (self.unpumpable_kg or 0.0) - self.reserved_kg)

    @property
    def blending_kv(self) -> tuple[float, float] | None:
        """KV40 and KV100 with which it blends [mm²/s]: the blending pair if both are given, else the neat."""
        if self.blend_kv40 is not None and self.blend_kv100 is not None:
            return self.blend_kv40, self.blend_kv100
        if self.kv40 is not None and self.kv100 is not None:
            return self.kv40, self.kv100
        return None

    @property
    def counted(self) -> bool:
        """Is it one of the stocks that most-stocks and least-share rules speak of (base and rework)?"""
        return self.kind in ("base", "rework") and self.in_vessel_kg is None

    def matches(self, of: str) -> bool:
        """Does a share rule on `of` (a stock code, an oil, a kind, or "group II") speak of this stock?"""
        if of.lower().startswith("group "):
            return self.api_group != "" and self.api_group == of[6:].strip().upper()
        return of in (self.code, self.kind) or (self.oil != "" and of == self.oil)

    @property
    def poured(self) -> Stock:
        """The stock that it is: itself, or the one stock of which what is in the vessel (a charge) is all made."""
        whole = self.in_vessel_kg is not None and len(self.contents) == 1 and self.contents[0][1] >= 1.0 - 1e-9
        return self.contents[0][0].poured if whole else self

    @property
    def names(self) -> frozenset[str]:
        """The codes and oils under which what the laboratory has taught knows it."""
        return frozenset({self.code, self.oil, self.poured.code, self.poured.oil} - {""})

    def part_of(self, of: str) -> float:
        """How much of this stock a share rule on `of` counts, 0–1: all of it, or what it is made of.

        What is in the vessel has a kind or a group only as far as nobody knows what it was made of; a tank has its
        own (rework is rework, whatever went into it).
        """
        inside = sum(part * stock.part_of(of) for stock, part in self.contents)
        if not self.matches(of):
            return inside
        if self.in_vessel_kg is None or of == self.code or of == self.oil:
            return 1.0
        return inside + max(0.0, 1.0 - sum(part for _, part in self.contents))

    def value_of(self, code: str) -> float | None:
        """Value of a property that a stock carries or that follows from its density, in the registry's unit."""
        if code == "density15":
            return self.density15
        at = volume_at(code)
        if at is None:
            return self.values.get(code)
        return None if self.density15 is None else litres(1000.0, self.density15, at)


class StockTable:
    """The same stocks as arrays of shape (n,), NaN where unknown, in the order given."""

    def __init__(self, stocks: Iterable[Stock]) -> None:
        self.stocks: tuple[Stock, ...] = tuple(stocks)
        self.codes: tuple[str, ...] = tuple(s.code for s in self.stocks)
        if len(set(self.codes)) != len(self.codes):
            twice = next(c for c in self.codes if self.codes.count(c) > 1)
            raise StockError(f"two stocks have the code {twice!r}; give each its own", stock=twice,
                             cell="stock")

    def __len__(self) -> int:
        return len(self.stocks)

    def where(self, keep: Iterable[int]) -> StockTable:
        """The stocks at these positions, in this order."""
        return StockTable(self.stocks[i] for i in keep)

    def index(self, code: str) -> int:
        """Position of a stock; StockError when it is not there."""
        try:
            return self.codes.index(code)
        except ValueError:
            raise StockError(f"no stock {code!r}; the plant has {', '.join(self.codes[:12])}"
                             f"{' …' if len(self) > 12 else ''}", stock=code) from None

    def column(self, code: str) -> Array:
        """Values of one registry property [its unit], shape (n,), NaN where unknown."""
        return _array(s.value_of(code) for s in self.stocks)

    def plentiful(self, kg: float) -> StockTable:
        """The same stocks with so much on hand of each that is known and not empty, or what there is."""
        return StockTable(s if s.in_vessel_kg is not None or not s.available_kg else
                          replace(s, on_hand_kg=max(s.available_kg, kg), unpumpable_kg=None, reserved_kg=0.0)
                          for s in self.stocks)

    @cached_property
    def density(self) -> Array:
        """Density at 15 °C [kg/m³]."""
        return _array(s.density15 for s in self.stocks)

    @cached_property
    def price(self) -> Array:
        """Price [currency/t]; 0 for what is in the vessel already and has none."""
        return _array(0.0 if s.price_per_t is None and s.in_vessel_kg is not None else s.price_per_t
                      for s in self.stocks)

    @cached_property
    def available(self) -> Array:
        """On hand less unpumpable bottoms [kg]."""
        return _array(s.available_kg for s in self.stocks)

    @cached_property
    def kv(self) -> Array:
        """Blending KV at 40 and 100 °C [mm²/s], shape (n, 2)."""
        pairs = [s.blending_kv or (np.nan, np.nan) for s in self.stocks]
        return np.array(pairs, dtype=np.float64).reshape(len(pairs), 2)

    @cached_property
    def lines(self) -> tuple[Array, Array]:
        """a and b, each of shape (n,), of each stock's D341 line; of a stand-in where a KV is unknown."""
        finite = np.isfinite(self.kv)
        known = finite[:, :1] & finite[:, 1:]
        return lines(np.where(known, self.kv, [2.0, 1.0]))

    @cached_property
    def counted(self) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
        """Base stocks and rework: those that whole-number rules speak of."""
        return np.array([s.counted for s in self.stocks], dtype=np.bool_)


def _array(values: Iterable[float | None]) -> Array:
    return np.array([np.nan if v is None else v for v in values], dtype=np.float64)
