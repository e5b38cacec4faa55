"""Charges as lines of a card: in which steps, in which order, within which tolerance.

**Steps.** Base oil and rework go over the vessel's scale, so the coarser of their own division and the vessel's holds.
What has a package goes in whole ones; an additive, VI improver or pour depressant with a division of its own is
weighed on that scale before it goes in, whatever the vessel's is.
**Order** (common practice): part of the light stock, heavier stocks, rework, VI improver, package, pour depressant,
antifoam, the rest of the light stock as a rinse. A plant sets its own by names (of a stock, an oil, a kind, or `light`,
`heavy`, `antifoam`, `rinse`); without `rinse` among them nothing is kept back.
**Tolerance** (common practice): half a division or 0.5 % of the charge, whichever is more; of whole packages 2 %, which
is what may stay in them.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from blendtui.store.batch_records import Vessel
from blendtui.store.harmless import harmless
from solver.stocks import KINDS, Stock

from . import numbers
from .errors import DeskError

BULK_PART, RESIDUE = 0.005, 0.02  # of a charge
RINSE = 0.2  # of the light stock, kept back to rinse the line after the concentrates
BULK = ("base", "rework")
CONCENTRATES = ("vi_improver", "additive", "pour_depressant")
LIGHT, HEAVY, ANTIFOAM, RINSES = "light", "heavy", "antifoam", "rinse"
ROLES = (LIGHT, HEAVY, "rework", "vi_improver", "additive", "pour_depressant", ANTIFOAM, RINSES)  # the usual order
HAIR = 1e-9  # part of a step


@dataclass(frozen=True)
class Line:
    """One charge as it is planned."""

    stock: Stock
    role: str  # one of ROLES
    kg: float
    step_kg: float | None  # None: any mass
    tolerance_kg: float


def in_steps(stocks: Sequence[Stock], vessel: Vessel) -> list[Stock]:
    """The stocks with the division by which each is weighed into this vessel."""
    return [replace(s, division_kg=_division(s, vessel)) for s in stocks]


def _division(stock: Stock, vessel: Vessel) -> float | None:
    if stock.package_kg is not None or vessel.division_kg is None or stock.in_vessel_kg is not None:
        return stock.division_kg
    if stock.division_kg is None:
        return vessel.division_kg
    return max(stock.division_kg, vessel.division_kg) if stock.kind in BULK else stock.division_kg


def tolerance(stock: Stock, kg: float) -> float:
    """How far an actual may lie from a charge of so many kg [kg]."""
    if stock.package_kg is not None:
        return RESIDUE * kg
    return max(BULK_PART * kg, (stock.division_kg or 0.0) / 2.0)


# In which order

def names_of(typed: str, stocks: Sequence[Stock]) -> tuple[str, ...]:
    """An order of charging as typed, names parted by commas, or by blanks; DeskError for a name that is none."""
    return known_names(parted(typed), stocks)


def parted(typed: str) -> tuple[str, ...]:
    """Names as they stand in a text: parted by its commas, where it has some, else by its blanks."""
    return tuple(name.strip() for name in (typed.split(",") if "," in typed else typed.split()) if name.strip())


def known_names(names: Sequence[str], stocks: Sequence[Stock]) -> tuple[str, ...]:
    """The same names, each once, as the plant spells them; DeskError for one that is none."""
    known = {*ROLES, *KINDS, *(s.code for s in stocks), *(s.oil for s in stocks if s.oil)}
    found: dict[str, None] = {}
    for word in names:
        name = word if word in known else word.lower()
        if name not in known:
            raise DeskError(f"{harmless(word, 40)!r} is no stock, oil or kind, and none of {', '.join(ROLES)}; an "
                            "order of charging names these, such as: light heavy vi_improver additive rinse")
        found[name] = None
    return tuple(found)


def lines(charges: Mapping[str, float], stocks: Sequence[Stock], own: Sequence[str] = ()) -> list[Line]:
    """Charges [kg by stock] as lines in the order of charging. `stocks`: with their divisions (in_steps)."""
    used = [s for s in stocks if charges.get(s.code, 0.0) > 0.0]
    light = min((s for s in used if s.kind == "base"), key=lambda s: (s.kv40 or 0.0, s.code), default=None)
    rinse = 0.0
    if light is not None and (not own or RINSES in own) and any(s.kind in CONCENTRATES for s in used):
        rinse = _rinse(light, charges[light.code])
    found = []
    for stock in used:
        role, kg = _role(stock, light), charges[stock.code]
        found.append(_line(stock, role, kg - rinse if stock is light else kg))
    if light is not None and rinse > 0.0:
        found.append(_line(light, RINSES, rinse))
    return sorted(found, key=lambda line: (_named(line, own), ROLES.index(line.role), line.stock.kv40 or 0.0,
                                           line.stock.code))


def _line(stock: Stock, role: str, kg: float) -> Line:
    return Line(stock, role, round(kg, 6), stock.package_kg or stock.division_kg, tolerance(stock, kg))


def _rinse(light: Stock, kg: float) -> float:
    """How much of the light stock is kept back [kg], in whole steps; 0 where either part would be too little."""
    step, least = light.package_kg or light.division_kg or 0.0, light.least_charge_kg or 0.0
    part = RINSE * kg if step <= 0.0 else step * int(RINSE * kg / step + HAIR)
    return round(part, 6) if part > 0.0 and min(part, kg - part) >= max(step, least) * (1.0 - HAIR) else 0.0


def _role(stock: Stock, light: Stock | None) -> str:
    if stock.kind == "base":
        return LIGHT if stock is light else HEAVY
    # Nothing else tells an antifoam from another additive than what the plant calls it.
    return ANTIFOAM if "foam" in f"{stock.code} {stock.name}".lower() and stock.kind == "additive" else stock.kind


def _named(line: Line, own: Sequence[str]) -> int:
    """Place of a line in the plant's own order; what is not named comes after, in the usual one."""
    if line.role == RINSES:
        return own.index(RINSES) if RINSES in own else len(own)
    names = (line.stock.code, line.stock.oil, line.role, line.stock.kind)
    return next((n for n, name in enumerate(own) if name in names and name), len(own))


def look_alikes(stock: Stock, stocks: Sequence[Stock]) -> list[str]:
    """Codes that are read for this one's: one character other, or two that changed places. Packages are told apart by
    their codes alone, so only what comes in packages or is a concentrate is looked at."""
    if stock.package_kg is None and stock.kind not in CONCENTRATES:
        return []
    return [s.code for s in stocks if s.code != stock.code and _alike(stock.code.casefold(), s.code.casefold())]


def _alike(one: str, other: str) -> bool:
    if len(one) != len(other):
        return False
    off = [n for n, (a, b) in enumerate(zip(one, other, strict=True)) if a != b]
    swapped = len(off) == 2 and off[1] == off[0] + 1 and one[off[0]] == other[off[1]] and one[off[1]] == other[off[0]]
    return len(off) <= 1 or swapped


def order_words(found: Sequence[Line], own: Sequence[str]) -> str:
    """By which order the lines stand, and what of the light stock is kept back."""
    rinse = next((line for line in found if line.role == RINSES), None)
    kept = (f"; {numbers.batch(rinse.kg)} kg of {harmless(rinse.stock.code, 40)} are kept back to rinse"
            if rinse is not None else "")
    if own:
        return f"charged in the plant's own order ({' '.join(harmless(x, 40) for x in own)}){kept}"
    return ("charged in the usual order (light stock, heavier stock, rework, VI improver, package, pour depressant, "
            f"antifoam; common practice){kept}")
