"""What is typed at a step of the ledger: masses, values of a delivery or a test, days."""

from __future__ import annotations

import math
from collections.abc import Mapping
from datetime import datetime

from blendtui.store import cells as check
from blendtui.store.charging import is_value_code, sigma_of
from blendtui.store.harmless import harmless

from . import batches
from .amounts import amount
from .errors import DeskError
from .topping_up import OWN_COLUMN

LITRES = ("l", "litre", "litres", "m³", "m3", "us gal", "usgal")  # units of a volume, as solver.scales reads them


def mass(typed: str | float, density15: float | None = None, celsius: float | None = None) -> float:
    """A mass [kg], to the milligram: a number, or typed with its unit (`24 t`, `12000 L`).

    Litres need the density at 15 °C [kg/m³]; they are litres at `celsius`, or at 15 °C without it.
    DeskError for what is no mass at all and for a temperature beyond the tables, ScaleError for a unit that does not
    belong here.
    """
    if isinstance(typed, str):
        if celsius is not None and density15 is not None:
            from solver.volume import HIGHEST, LOWEST, density_at

            if _is_volume(typed) and not LOWEST <= celsius <= HIGHEST:
                raise DeskError(f"{celsius:g} °C is no temperature of a tank or drum ({LOWEST:g} to {HIGHEST:g} °C); "
                                "°F? Mend it, or type kg")
            density15 = float(density_at(density15, celsius))
        kg = amount(typed, "on_hand_kg", density15)
    else:
        kg = float(typed)
    if not math.isfinite(kg):
        raise DeskError(f"{typed} is no mass; type one such as 24000, 24 t or 12000 L")
    if abs(kg) > check.LARGEST_KG:
        raise DeskError(f"{harmless(str(typed), 40)} is more than {check.LARGEST_KG:g} kg; check the unit")
    return round(kg * 1e6) / 1e6


def _is_volume(typed: str) -> bool:
    from solver.scales import split

    return split(typed)[1] in LITRES


def values(typed: Mapping[str, str | float]) -> dict[str, float]:
    """Values as typed, each with its unit if it has one; DeskError for what a stock has no place for.

    A Saybolt pair at kv40 or kv100 (`215/46 SUS`) gives both.
    """
    found: dict[str, float] = {}
    for code, text in typed.items():
        if code not in OWN_COLUMN and (sigma_of(code) or not is_value_code(code)):
            raise DeskError(f"{harmless(code, 40)!r} is no value of an oil; usable are {', '.join(OWN_COLUMN)}, flash, "
                            "pour, sulfur and the other properties of the registry")
        if not isinstance(text, str):
            found[code] = float(text)
        elif text.strip():
            found |= _read(code, text.strip())
    bad = next((code for code, value in found.items() if not math.isfinite(value)), None)
    if bad:
        raise DeskError(f"{bad} is not a number; leave it out where it is unknown")
    return found


def _read(code: str, text: str) -> dict[str, float]:
    """One value as typed, or the two of a Saybolt pair; DeskError names the property."""
    from solver.errors import SolverError

    try:
        return _pair(code, text) or {code: amount(text, code)}
    except SolverError as error:
        raise DeskError(f"{code}: {error}") from None


def _pair(code: str, text: str) -> dict[str, float] | None:
    if code not in OWN_COLUMN or code == "density15":
        return None
    from solver.scales import parse_kv_pair

    pair, prefix = parse_kv_pair(text), code.removesuffix("kv40").removesuffix("kv100")
    if pair is None:
        return None
    # Six figures: what a Saybolt time is worth.
    return {f"{prefix}kv{t}": float(f"{v:.6g}") for t, v in ((40, pair.kv40), (100, pair.kv100))}


def day(typed: str) -> str:
    """A day as ISO date: as typed, else today's; DeskError for another text."""
    try:
        return check.iso_date(typed.strip()) or datetime.now().date().isoformat()
    except check.CellError as error:
        raise DeskError(str(error)) from None


def local_day(iso: str) -> str:
    """The local day of a time of the record."""
    return batches.when(iso)[:10]


def name(typed: str, what: str) -> str:
    """A lot, certificate or other name as it may stand in the record; DeskError for what cannot."""
    try:
        return check.plain(typed.strip())
    except check.CellError as error:
        raise DeskError(f"{what}: {error}") from None
