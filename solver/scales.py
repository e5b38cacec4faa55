"""Unit scales: what a person types or reads, carried to and from the solver's own units.

Own units: KV mm²/s, dynamic viscosity mPa·s, temperature °C, density kg/m³, mass kg, share mass
fraction. A volume becomes a mass only with a density. A Saybolt time at 100 or 210 °F is a viscosity
at 37.8 or 98.9 °C, so it needs its partner: the pair is carried to 40 and 100 °C on its D341 line.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Literal

from .errors import RangeError, ScaleError
from .walther import line_through

Quantity = Literal["kv", "dynamic", "temperature", "density", "mass", "share", "price", "number"]

LB_KG = 0.45359237  # exact by definition
US_GAL_L = 3.785411784  # exact by definition

# quantity → unit as typed (lower case) → factor to the solver's unit. The empty unit is the default.
_FACTORS: dict[str, dict[str, float]] = {
    "kv": {"": 1.0, "mm²/s": 1.0, "mm2/s": 1.0, "cst": 1.0, "st": 100.0},
    "dynamic": {"": 1.0, "mpa·s": 1.0, "mpa.s": 1.0, "mpas": 1.0, "mpa s": 1.0, "cp": 1.0, "p": 100.0,
                "pa·s": 1000.0, "pa.s": 1000.0, "pas": 1000.0},
    "density": {"": 1.0, "kg/m³": 1.0, "kg/m3": 1.0, "kg/l": 1000.0, "g/cm³": 1000.0, "g/cm3": 1000.0,
                "g/ml": 1000.0, "g/l": 1.0},
    "mass": {"": 1.0, "kg": 1.0, "t": 1000.0, "lb": LB_KG, "lbs": LB_KG, "g": 0.001},
    "share": {"": 0.01, "%": 0.01, "pct": 0.01, "percent": 0.01, "mass %": 0.01, "fraction": 1.0},
    "price": {"": 1.0, "/t": 1.0, "/kg": 1000.0, "/lb": 1000.0 / LB_KG},
    "number": {"": 1.0},
}
_LITRES: dict[str, float] = {"l": 1.0, "litre": 1.0, "litres": 1.0, "m³": 1000.0, "m3": 1000.0,
                             "us gal": US_GAL_L, "usgal": US_GAL_L}
_SHOWN = {"kv": "mm²/s, cSt, St", "dynamic": "mPa·s, cP, P, Pa·s", "temperature": "°C, °F",
          "density": "kg/m³, kg/L", "mass": "kg, t, lb, and with a density L, m³, US gal",
          "share": "% or fraction", "price": "/t, /kg, /lb", "number": "no unit"}
_TYPED = re.compile(r"\s*([+\-−]?(?:\d+\.?\d*|\.\d+)(?:[eE][+\-]?\d+)?)\s*(.*?)\s*", re.DOTALL)
_PAIR = re.compile(r"\s*([\d.]+)\s*(?:sus|ssu)?\s*[/;]\s*([\d.]+)\s*(?:sus|ssu)\s*", re.IGNORECASE)


def split(text: str) -> tuple[float, str]:
    """The number and the unit (lower case) in what was typed; ScaleError with what to type instead.

    >>> split(" 12.5 T ")
    (12.5, 't')
    """
    shown = "".join(c if c.isprintable() else "?" for c in text.strip())[:40]
    if "," in shown:
        raise ScaleError(f"{shown!r}: a comma is not read as a decimal point or a thousands mark; "
                         f"write {shown.replace(',', '.')} or leave the comma out")
    match = _TYPED.fullmatch(text)
    if not match:
        raise ScaleError(f"{shown!r} is not a number; type one such as 46 or 46.5, with a unit if it is not "
                         "the usual one")
    number = float(match[1].replace("−", "-"))
    if not math.isfinite(number):
        raise ScaleError(f"{shown!r} is too large to be a quantity")
    return number, " ".join(match[2].lower().split())


def parse(text: str, quantity: Quantity, density15: float | None = None) -> float:
    """What a person typed, in the solver's unit of the quantity.

    A volume typed for a mass needs density15 [kg/m³]: m = V·ρ15/1000, litres at 15 °C. A Saybolt time
    alone, a dynamic viscosity typed for a KV and a unit of another quantity are refused with the reason.

    >>> parse("12 t", "mass"), parse("3500 L", "mass", 880.0), parse("110F", "temperature")
    (12000.0, 3080.0, 43.333333333333336)
    """
    number, unit = split(text)
    if quantity == "temperature":
        return _temperature(number, unit, text)
    factors = _FACTORS[quantity]
    if unit in factors:
        # Dividing by 100 keeps 0.85 % the same double as the fraction a person would write.
        return number / 100.0 if factors[unit] == 0.01 else number * factors[unit]
    if quantity == "mass" and unit in _LITRES:
        if density15 is None:
            raise ScaleError(f"{text.strip()!r} is a volume: enter the density at 15 °C first, "
                             "or type kg or t")
        return number * _LITRES[unit] * density15 / 1000.0
    if quantity == "mass" and unit in ("gal", "gallon", "gallons"):
        raise ScaleError(f"{text.strip()!r}: which gallon? type US gal, or litres")
    if quantity == "kv":
        _refuse_kv(text.strip(), unit)
    raise ScaleError(f"{text.strip()!r}: the unit {unit!r} does not belong here; "
                     f"usable are {_SHOWN[quantity]}")


def _refuse_kv(text: str, unit: str) -> None:
    if unit in ("sus", "ssu"):
        raise ScaleError(f"{text!r} alone cannot be placed: SUS is timed at 100 or 210 °F, not at 40 or "
                         "100 °C; type both, 100 °F first, as 215/46 SUS")
    if unit in _FACTORS["dynamic"]:
        raise ScaleError(f"{text!r} is a dynamic viscosity: divide by the density in g/cm³ at that "
                         "temperature and type mm²/s")


def _temperature(number: float, unit: str, text: str) -> float:
    if unit in ("", "c", "°c", "degc", "deg c"):
        return number
    if unit in ("f", "°f", "degf", "deg f"):
        return fahrenheit_to_celsius(number)
    raise ScaleError(f"{text.strip()!r}: the unit {unit!r} does not belong here; "
                     f"usable are {_SHOWN['temperature']}")


def fahrenheit_to_celsius(fahrenheit: float) -> float:
    """°C = (°F − 32)/1.8."""
    return (fahrenheit - 32.0) / 1.8


def celsius_to_fahrenheit(celsius: float) -> float:
    """°F = 1.8·°C + 32."""
    return 1.8 * celsius + 32.0


def sus_of(kv: float, fahrenheit: float = 100.0) -> float:
    """Saybolt Universal seconds of a KV [mm²/s] at a temperature [°F].

    SUS_100 = 4.6324 ν + (1 + 0.03264 ν)/[(3930.2 + 262.7 ν + 23.97 ν² + 1.646 ν³)·10⁻⁵] and
    SUS_t = SUS_100·[1 + 6.1·10⁻⁵ (t − 100)]. Source: ASTM D2161 (from memory; checked against the
    Hydraulic Institute table in tests/solver). RangeError below 1.81 mm²/s, where the scale begins.

    >>> round(sus_of(42.900), 1), round(sus_of(42.900, 210.0), 1)
    (200.0, 201.3)
    """
    if not kv >= 1.81:
        raise RangeError(f"KV {kv:g} mm²/s is below 1.81, where the Saybolt scale begins")
    poly = ((1.646 * kv + 23.97) * kv + 262.7) * kv + 3930.2
    at100 = 4.6324 * kv + (1.0 + 0.03264 * kv) / (poly * 1e-5)
    return at100 * (1.0 + 6.1e-5 * (fahrenheit - 100.0))


def kv_of_sus(sus: float, fahrenheit: float = 100.0) -> float:
    """KV [mm²/s] of Saybolt Universal seconds at a temperature [°F]: the inverse of `sus_of`, by Newton.

    RangeError below the scale's beginning (about 32 s).
    """
    if not (math.isfinite(sus) and sus >= sus_of(1.81, fahrenheit)):
        raise RangeError(f"{sus:g} SUS is below {sus_of(1.81, fahrenheit):.1f}, "
                         "where the Saybolt scale begins")
    kv = max(1.81, sus / 4.64)
    for _ in range(60):
        h = 1e-6 * kv
        step = (sus_of(kv, fahrenheit) - sus) / ((sus_of(kv + h, fahrenheit) - sus_of(kv, fahrenheit)) / h)
        kv = max(1.81, kv - step)
        if abs(step) <= 1e-12 * kv:
            break
    return kv


@dataclass(frozen=True)
class SayboltPair:
    """A Saybolt pair and what it is worth at 40 and 100 °C."""

    sus100f: float
    sus210f: float
    kv40: float  # mm²/s
    kv100: float

    @property
    def note(self) -> str:
        """Both pairs in words, for the screen."""
        return (f"{self.sus100f:g} SUS at 100 °F and {self.sus210f:g} SUS at 210 °F are "
                f"KV40 {self.kv40:.4g} and KV100 {self.kv100:.4g} mm²/s on their D341 line")


def parse_kv_pair(text: str) -> SayboltPair | None:
    """A pair typed as "215/46 SUS" (100 °F, then 210 °F) carried to 40 and 100 °C; None if it is no pair.

    Raises ScaleError when the pair cannot be one oil.
    """
    match = _PAIR.fullmatch(text)
    if not match:
        return None
    try:
        cold, hot = float(match[1]), float(match[2])
        oil = line_through(fahrenheit_to_celsius(100.0), kv_of_sus(cold, 100.0),
                           fahrenheit_to_celsius(210.0), kv_of_sus(hot, 210.0))
    except ValueError as error:
        raise ScaleError(f"{text.strip()!r} is not the pair of one oil at 100 and 210 °F: {error}") from None
    return SayboltPair(cold, hot, float(oil.kv(40.0)), float(oil.kv(100.0)))


def litres_at_15(mass_kg: float, density15: float) -> float:
    """Volume at 15 °C [L] = 1000 m/ρ15, m in kg, ρ15 in kg/m³."""
    return 1000.0 * mass_kg / density15
