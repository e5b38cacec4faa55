"""Amounts as they are typed into a cell, in the cell's own unit."""

from __future__ import annotations

from blendtui.store.harmless import harmless
from blendtui.store.records import Value
from solver.properties import lookup

from .errors import DeskError

CHARGES = ("division_kg", "package_kg", "least_charge_kg")
MASS = ("on_hand_kg", "unpumpable_kg", *CHARGES)


def amount(typed: str, code: str, density15: float | None = None) -> float:
    """What was typed for a cell or a property, in its own unit; ScaleError when it cannot be placed."""
    from solver.scales import parse

    if code.endswith("kv40") or code.endswith("kv100"):
        return parse(typed, "kv")
    if code in MASS or code == "batch_kg":
        return parse(typed, "mass", density15)
    if code == "density15":
        return parse(typed, "density")
    if code in ("price_per_t", "max_cost_per_t"):
        return parse(typed, "price")
    entry = lookup(code)
    if entry.basis == "law":
        return parse(typed, "kv")
    if entry.unit == "°C":
        return round(parse(typed, "temperature"), 2)
    if entry.unit == "mPa·s":
        return parse(typed, "dynamic")
    return _by_mass(typed, entry.unit)


def _by_mass(typed: str, unit: str) -> float:
    """Mass %, mg/kg or mgKOH/g: each may be typed with its unit, and the first two for one another."""
    from solver.scales import parse, split

    number, told = split(typed)
    told = {"%": "mass %", "ppm": "mg/kg"}.get(told, told)
    if told in ("", unit.lower()):
        return number
    if (unit, told) == ("mass %", "mg/kg"):
        return number / 1e4
    if (unit, told) == ("mg/kg", "mass %"):
        return number * 1e4
    return parse(typed, "number")


def deviation(stock: str, prop: str, value: Value, typed: str) -> float:
    """A standard deviation as typed: in the property's unit, or with % of the stock's `value` of it."""
    from solver.scales import split

    number, unit = split(typed)
    entry = lookup(prop)
    if unit == "%" and entry.unit != "mass %":
        if value is None:
            raise DeskError(f"{stock}: {prop} is unknown, so {harmless(typed, 40)} of it is too; type it in "
                            f"{entry.unit or 'its unit'}")
        return number * abs(float(value)) / 100.0
    if entry.unit == "°C" and unit in ("f", "°f"):
        return number / 1.8  # a difference of temperatures has no offset
    return number if unit in ("", entry.unit.lower()) else amount(typed, prop)
