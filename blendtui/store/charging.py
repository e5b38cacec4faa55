"""What a stock carries for the scale and for the chances: how it can be charged, and how sure its values are.

A standard deviation is kept as a value of the stock under the property's code with `sigma_` before it.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from solver.properties import is_stock_code, lookup, stock_codes
from solver.stocks import Stock

if TYPE_CHECKING:
    from solver.doubts import Doubt

SIGMA = "sigma_"
_MEASURED = ("kv40", "kv100", "density15")  # measured values that have a column of their own
WIDE = 0.25  # of a KV or a density: a standard deviation from here on is questioned


def sigma_of(code: str) -> str:
    """The property whose standard deviation a column holds (`sigma_kv40` → `kv40`), or ""."""
    prop = code.removeprefix(SIGMA)
    return prop if prop != code and (prop in _MEASURED or is_stock_code(prop)) else ""


def value_order(code: str) -> tuple[float, str]:
    """Where a value's column stands among the others: properties in the registry's order, then how sure they are."""
    known = (*stock_codes(), *(SIGMA + prop for prop in (*_MEASURED, *stock_codes())))
    place = known.index(code) if code in known else len(known) if sigma_of(code) else len(stock_codes()) - 0.5
    return place, code


def is_value_code(code: str) -> bool:
    """Is this the code of a value that a stock carries beside its columns: a property, or how sure it is?"""
    return bool(sigma_of(code)) or is_stock_code(code)


def property_spelt(heading: str) -> str | None:
    """Code of the property that a heading means in another spelling: `CCS-25`, `Flash point`, `sulphur`."""
    plain = heading.lower().replace("−", "-")
    for sign in ("sigma_", "sigma ", "σ_", "σ "):
        if plain.startswith(sign):
            of = property_spelt(plain[len(sign):]) or plain[len(sign):].replace(" ", "")
            return SIGMA + of if sigma_of(SIGMA + of) else None
    for code in (plain.replace(" ", "_"), plain.replace(" ", ""), plain.replace(" ", "").replace("_", "")):
        if is_stock_code(code):
            return code
    return next((code for code in stock_codes() if lookup(code).name.lower() == plain.replace("_", " ")), None)


def faults(stock: Stock) -> tuple[Doubt, ...]:
    """What cannot be true of how a stock is charged and of how sure its values are."""
    from solver.doubts import Doubt

    found = []
    for cell, name in (("division_kg", "scale division"), ("package_kg", "package")):
        mass = getattr(stock, cell)
        if mass is not None and not mass > 0.0:
            found.append(Doubt(cell, f"{name} {mass:g} kg is not above 0; leave it empty where there is none"))
    if stock.least_charge_kg is not None and not stock.least_charge_kg >= 0.0:
        found.append(Doubt("least_charge_kg", f"least charge {stock.least_charge_kg:g} kg is below 0"))
    if not found and stock.division_kg and stock.package_kg and stock.division_kg > stock.package_kg:
        found.append(Doubt("division_kg", f"scale division {stock.division_kg:g} kg is larger than the package of "
                                          f"{stock.package_kg:g} kg; are the two swapped?"))
    for prop, sigma in stock.sigmas.items():
        if not sigma >= 0.0:
            found.append(Doubt(SIGMA + prop, f"standard deviation {sigma:g} of {prop} is below 0"))
    return tuple(found)


def doubts(stock: Stock) -> tuple[Doubt, ...]:
    """What is unlikely of them: questioned, and kept if the operator says so."""
    from solver.doubts import Doubt

    found = []
    for prop, sigma in stock.sigmas.items():
        value = getattr(stock, prop) if prop in _MEASURED else None
        if value and sigma > WIDE * value:
            found.append(Doubt(SIGMA + prop, f"standard deviation {sigma:g} of {prop} {value:g} is more than "
                                             f"{100.0 * WIDE:g} % of it; was it meant in %?", sigma * value / 100.0))
    return tuple(found)
