"""Numbers as they are shown: one way of rounding for the console, the text tables and the floor sheet.

A unit stands in the heading or beside the number, never here. None is unknown and shown as a dash.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

UNKNOWN = "–"


def figures(value: float | None, count: int = 4) -> str:
    """A number to so many significant figures, without an exponent.

    >>> figures(31.5), figures(1240.4), figures(0.45678), figures(9.9996)
    ('31.50', '1240', '0.4568', '10.00')
    """
    if value is None or not math.isfinite(value):
        return UNKNOWN
    if value == 0.0:
        return "0"
    # Rounded first, for 9.9996 has one digit more before the point once it is rounded.
    value = float(f"{value:.{count - 1}e}")
    return f"{value:.{max(0, count - 1 - math.floor(math.log10(abs(value))))}f}"


def fixed(value: float | None, digits: int) -> str:
    """A number with so many decimals; what rounds to nothing has no sign.

    >>> fixed(12.345, 1), fixed(-0.001, 2), fixed(None, 2)
    ('12.3', '0.00', '–')
    """
    if value is None or not math.isfinite(value):
        return UNKNOWN
    text = f"{value:.{digits}f}"
    return text[1:] if text.startswith("-") and not text.strip("-0.") else text


def kv(value: float | None) -> str:
    """Kinematic viscosity [mm²/s] to four significant figures."""
    return figures(value)


def vi(value: float | None) -> str:
    """Viscosity index as a whole number, half to even.

    >>> vi(94.5), vi(95.5)
    ('94', '96')
    """
    return fixed(value, 0)


def pct(fraction: float | None) -> str:
    """Mass fraction as mass %, to 0.01.

    >>> pct(0.12345), pct(1.0)
    ('12.35', '100.00')
    """
    return fixed(None if fraction is None else 100.0 * fraction, 2)


def kg(value: float | None) -> str:
    """Mass [kg]: to 1 kg, finer where it is small, for a drum scale shows what a truck scale cannot.

    >>> kg(12345.6), kg(45.67), kg(4.567), kg(0.4567)
    ('12346', '45.7', '4.57', '0.457')
    """
    return _finer(value)


def batch(value: float | None) -> str:
    """A batch as it was asked for or charged [kg]: whole, or with the tenths that its charges sum to.

    >>> batch(15000.0), batch(14997.5)
    ('15000', '14997.5')
    """
    return kg(value) if value is None or abs(value - round(value)) < 5e-4 else fixed(value, 3).rstrip("0")


def charges(masses: Mapping[str, float] | None) -> dict[str, str]:
    """Masses [kg] as shown, adding up as shown: the largest takes what rounding leaves over.

    >>> charges({"A": 8352.4, "B": 1780.4, "C": 1741.4, "D": 125.8})
    {'A': '8353', 'B': '1780', 'C': '1741', 'D': '126'}
    """
    shown = {code: kg(mass) for code, mass in (masses or {}).items()}
    if masses and len(masses) > 1:
        largest = max(masses, key=lambda code: masses[code])
        rest = sum(float(text) for code, text in shown.items() if code != largest)
        shown[largest] = kg(sum(masses.values()) - rest)
    return shown


def litres(value: float | None) -> str:
    """Volume [L], rounded as masses are."""
    return _finer(value)


def cost(value: float | None) -> str:
    """Money, two decimals."""
    return fixed(value, 2)


def value(code: str, number: float | None) -> str:
    """A property by its code: KV at any temperature to four figures, the rest by the registry's decimals.

    >>> value("kv60", 18.2345), value("vi", 101.4), value("cost_per_t", 812.3)
    ('18.23', '101', '812.30')
    """
    if number is None:
        return UNKNOWN
    if code in ("cost_per_t", "price_per_t", "max_cost_per_t"):
        return cost(number)
    if code.endswith("_kg"):
        return kg(number)
    if is_kv(code):
        return kv(number)
    from solver.properties import lookup

    return fixed(number, lookup(code).digits)


def is_kv(code: str) -> bool:
    """Is this the code of a kinematic viscosity (kv40, blend_kv100, kv-20)?"""
    return code.removeprefix("blend_").startswith("kv")


def _finer(amount: float | None) -> str:
    if amount is None or not math.isfinite(amount):
        return UNKNOWN
    size = abs(amount)
    return fixed(amount, 0 if size >= 99.95 or size == 0.0 else 1 if size >= 9.995 else 2 if size >= 0.9995 else 3)
