"""The registry of properties: one entry each, and a new property is one entry.

Every property mixes in one shape: an index J with index(value) monotone, and for a blend

    J_B = Σ x_i ω_i J_i / Σ x_i ω_i,   ω_i = 1 (basis "mass") or 1/ρ_i (basis "volume")

so that a limit on the value is a linear row in the mass fractions x_i. Density is the same shape with
J = 1/ρ by mass.

Reproducibility R is the 95 % limit between two laboratories in the method named; one σ = R/2.77.
Where no source stands beside an R it is from memory of the method's precision statement and is used to
weigh misses against each other, never to release oil.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from .errors import TargetError

Array = NDArray[np.float64]
Transform = Callable[[Any], Any]

KELVIN = 273.15
LEAST_KV = 0.21  # mm²/s: where the D341 line ends, and just above where every law's index does


def _same(value: Any) -> Any:
    return value


@dataclass(frozen=True)
class Property:
    """One property: what it is called, how it is measured, how it mixes and how far that is trusted."""

    code: str
    name: str
    unit: str
    digits: int  # decimals shown
    basis: Literal["mass", "volume", "curve", "law"]  # "law": a viscosity; "curve": the viscosity index
    method: str  # test method
    reproducibility: Callable[[float], float]  # R at a value, in the property's unit
    trust: Literal["exact", "good", "screening", "unvalidated"]
    lowest: float  # a value outside lowest..highest cannot be true
    highest: float
    index: Transform = _same  # value → index that mixes linearly
    value: Transform = _same  # index → value
    rising: bool = True  # does the index rise with the value
    temperature: float | None = None  # °C, of a property stated at a temperature
    note: str = ""

    @property
    def label(self) -> str:
        """Name with its unit, as a screen shows it."""
        return f"{self.name}, {self.unit}" if self.unit else self.name


def _flash_index(celsius: Any) -> Any:
    return 10.0 ** (-6.1188 + 2414.0 / (np.asarray(celsius) + KELVIN - 42.6))


def _flash_value(index: Any) -> Any:
    return 2414.0 / (np.log10(index) + 6.1188) + 42.6 - KELVIN


def _pour_index(celsius: Any) -> Any:
    # Divided by its value at 0 °C: the bare power is about 1e30 and would scale rows badly.
    return ((np.asarray(celsius) + KELVIN) / KELVIN) ** 12.5


def _pour_value(index: Any) -> Any:
    return KELVIN * np.asarray(index) ** 0.08 - KELVIN


def _fixed(r: float) -> Callable[[float], float]:
    return lambda value: r


def _part(fraction: float, floor: float) -> Callable[[float], float]:
    return lambda value: max(fraction * abs(value), floor)


def _by_mass(code: str, name: str, unit: str, digits: int, method: str, r: Callable[[float], float],
             highest: float, *, trust: Literal["exact", "good", "screening", "unvalidated"] = "exact",
             note: str = "mass balance") -> Property:
    return Property(code, name, unit, digits, "mass", method, r, trust, 0.0, highest, note=note)


_FIXED: tuple[Property, ...] = (
    # R 1.22 % and 1.38 %: ASTM D445, formulated oils at 40 and 100 °C (M, see tests/solver).
    Property("vi", "viscosity index", "", 0, "curve", "ASTM D2270", _fixed(2.0), "exact", -500.0, 1000.0,
             note="from KV40 and KV100; R 2 is common practice, VI moves 1–2 per 1 % of KV40"),
    Property("density15", "density at 15 °C", "kg/m³", 1, "mass", "ASTM D4052", _fixed(0.5), "exact",
             600.0, 1600.0, index=lambda v: 1000.0 / np.asarray(v), value=lambda j: 1000.0 / np.asarray(j),
             rising=False, note="1/ρ = Σ x/ρ: ideal mixing"),
    Property("flash", "flash point", "°C", 0, "volume", "ASTM D92", _fixed(18.0), "screening", -50.0, 450.0,
             index=_flash_index, value=_flash_value, rising=False,
             note="blending index by volume; a screening figure, never a safety clearance"),
    Property("pour", "pour point", "°C", 0, "volume", "ASTM D97", _fixed(9.0), "screening", -120.0, 100.0,
             index=_pour_index, value=_pour_value,
             note="T^12.5 by volume; takes no account of a pour depressant's action; screening only"),
    _by_mass("noack", "Noack loss", "mass %", 1, "ASTM D5800", _part(0.10, 0.5), 100.0,
             trust="unvalidated", note="linear by mass: unvalidated"),
    _by_mass("sulfur", "sulphur", "mass %", 3, "ASTM D2622", _part(0.05, 0.001), 40.0),
    _by_mass("base_number", "base number", "mgKOH/g", 2, "ASTM D2896", _part(0.07, 0.1), 600.0),
    _by_mass("acid_number", "acid number", "mgKOH/g", 2, "ASTM D664", _part(0.20, 0.05), 300.0,
             trust="good", note="mass balance; additives may react"),
    _by_mass("ash", "sulphated ash", "mass %", 3, "ASTM D874", _part(0.15, 0.005), 60.0),
    _by_mass("water", "water", "mg/kg", 0, "ASTM D6304", _part(0.25, 20.0), 1e6,
             trust="good", note="mass balance; oil takes up and loses water"),
    _by_mass("calcium", "calcium", "mg/kg", 0, "ASTM D5185", _part(0.12, 3.0), 5e5),
    _by_mass("magnesium", "magnesium", "mg/kg", 0, "ASTM D5185", _part(0.12, 3.0), 5e5),
    _by_mass("zinc", "zinc", "mg/kg", 0, "ASTM D5185", _part(0.12, 3.0), 5e5),
    _by_mass("phosphorus", "phosphorus", "mg/kg", 0, "ASTM D5185", _part(0.12, 5.0), 5e5),
    _by_mass("boron", "boron", "mg/kg", 0, "ASTM D5185", _part(0.15, 3.0), 5e5),
    _by_mass("saturates", "saturates", "mass %", 1, "ASTM D2007", _part(0.03, 1.0), 100.0,
             trust="good", note="linear by mass"),
)

_BY_CODE = {p.code: p for p in _FIXED}
_AT_TEMPERATURE = re.compile(r"(kv|ccs|vol)(-?\d{1,3}(?:\.\d+)?)")


def _kv(code: str, celsius: float) -> Property:
    share = 0.0122 if celsius < 70.0 else 0.0138
    return Property(code, f"KV at {celsius:g} °C", "mm²/s", 4, "law", "ASTM D445", _part(share, 1e-3),
                    "good", 0.3, 2e7, temperature=celsius, note="by the blending law chosen")


def _ccs(code: str, celsius: float) -> Property:
    return Property(code, f"cold cranking at {celsius:g} °C", "mPa·s", 0, "mass", "ASTM D5293",
                    _part(0.07, 50.0), "unvalidated", 1.0, 1e7, index=np.log, value=np.exp,
                    temperature=celsius, note="logarithm linear by mass: unvalidated")


def _volume(code: str, celsius: float) -> Property:
    return Property(code, f"volume at {celsius:g} °C", "L/t", 1, "mass", "ASTM D1250", _part(0.005, 1e-3), "good",
                    500.0, 2000.0, temperature=celsius,
                    note="from the density (volume.py), ideal mixing; R: tank dips agree within 0.5 %, common practice")


def volume_at(code: str) -> float | None:
    """Temperature [°C] of the code of a volume (`vol60`: litres of a tonne at 60 °C), or None for another code."""
    match = _AT_TEMPERATURE.fullmatch(code)
    return float(match[2]) if match and match[1] == "vol" else None


@lru_cache(maxsize=1024)
def lookup(code: str) -> Property:
    """Return the registry entry of a property code.

    `kv40`, `kv100`, `kv-20`, `kv60.5`: KV at that temperature in °C (−60 to 200); `ccs-25`: cold
    cranking at that temperature (−45 to 0); `vol60`: litres of a tonne at that temperature (−20 to 150);
    every other code as it stands in the registry.

    Raises TargetError for a code that is not there, with the codes that are.

    >>> lookup("flash").unit, lookup("kv-20").temperature
    ('°C', -20.0)
    """
    if code in _BY_CODE:
        return _BY_CODE[code]
    match = _AT_TEMPERATURE.fullmatch(code)
    if match:
        celsius = float(match[2])
        if match[2] != f"{celsius:g}":
            raise TargetError(f"{code}: write {match[1]}{celsius:g}", where=code)
        if match[1] == "kv" and -60.0 <= celsius <= 200.0:
            return _kv(code, celsius)
        if match[1] == "ccs" and -45.0 <= celsius <= 0.0:
            return _ccs(code, celsius)
        if match[1] == "vol" and -20.0 <= celsius <= 150.0:
            return _volume(code, celsius)
        span = {"kv": "−60 to 200", "ccs": "−45 to 0", "vol": "−20 to 150"}[match[1]]
        raise TargetError(f"{code}: the temperature must lie between {span} °C", where=code)
    raise TargetError(f"unknown property {code!r}; known are {', '.join(known())}", where=code)


def in_scale(entry: Property, value: float) -> bool:
    """Is a value inside the scale of its index, so that a limit there can be a row?"""
    if entry.basis == "law":
        return value > LEAST_KV
    with np.errstate(all="ignore"):
        return bool(np.isfinite(entry.index(value)))


def known() -> tuple[str, ...]:
    """Codes as a person may type them, with the two families that take a temperature spelt out."""
    return ("kv40", "kv100", "kv<°C>", *(_BY_CODE), "ccs<°C>")


def stock_codes() -> tuple[str, ...]:
    """Codes that a stock carries as plain values (the CCS family takes any temperature besides)."""
    return tuple(p.code for p in _FIXED if p.basis in ("mass", "volume") and p.code != "density15")


def is_stock_code(code: str) -> bool:
    """Can a stock carry a value of this code (so: not a KV, VI or density, which have their own places)?"""
    try:
        found = lookup(code)
    except TargetError:
        return False
    return found.basis in ("mass", "volume") and code != "density15" and volume_at(code) is None
