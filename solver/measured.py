"""Measured blends: what was mixed, from what, and what the laboratory found."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from .stocks import Stock, StockTable


@dataclass(frozen=True)
class Part:
    """One stock of a measured blend, with its values at the time: they are the lot's, not today's."""

    stock: str
    share: float  # mass fraction
    kv40: float | None = None  # mm²/s, the pair with which it blends
    kv100: float | None = None
    density15: float | None = None  # kg/m³
    lot: str = ""
    oil: str = ""  # what the tank held; empty: its own
    values: Mapping[str, float] = field(default_factory=dict)  # its other properties: code → registry's unit


@dataclass(frozen=True)
class Measured:
    """One blend, trial or batch, and the laboratory's results on it."""

    name: str
    product: str = ""
    parts: tuple[Part, ...] = ()
    values: Mapping[str, float] = field(default_factory=dict)  # property code → result in the registry's unit
    measured_on: str = ""  # ISO date
    method: str = ""
    note: str = ""
    confirmed: bool = False  # somebody has looked at what is doubtful about it and says that it is so

    def table(self) -> StockTable:
        """The parts as stocks with the values they had."""
        return StockTable(Stock(p.stock, oil=p.oil, kv40=p.kv40, kv100=p.kv100, density15=p.density15,
                                values=p.values) for p in self.parts)
