"""What a trim does, in words that an operator reads."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from .charges import kg
from .properties import lookup
from .trim_vessel import ABSURD, Ask, Vessel
from .whole import rounded_words

if TYPE_CHECKING:
    from .trim import Trim

TOLD = ("vi", "flash")  # what a trim for the viscosity changes besides, and nobody asked for
NOTABLE = 1e-9  # kg: less is nothing
FAR_LESS = 0.8  # of an addition's mass: what another one must come to for it to be named


def words(vessel: Vessel, ask: Ask, trim: Trim, over: tuple[str, ...], spared: Mapping[str, float],
          asked_kg: float | None) -> tuple[str, ...]:
    """Everything worth saying of additions that were found.

    `ask`: before anything was drawn off. `over`: share rules that the contents are over, where it takes much to come
    back to them; `spared`: what would do if they were let be. `asked_kg`: the total that was asked, if any.
    """
    found = []
    if not trim.additions_kg and trim.drawn_kg <= 0.0:
        found.append("what is in the vessel meets every limit as it is; nothing need be added")
    if asked_kg is not None and ask.total_kg is None and trim.total_kg is not None:
        found.append(f"a total of {asked_kg:,.0f} kg cannot be kept: with {trim.total_kg:,.0f} kg every limit holds")
    found += _drawn(ask, trim)
    found += _absurd(vessel, trim)
    if over:
        would = f"{amounts(spared)} would do" if spared else "nothing would do either"
        found.append(f"{', '.join(over)}: what is in the vessel is over the product's rule; with that let be {would}, "
                     "and the formulator decides")
    found += _changes(trim)
    found += _topped_up(vessel, trim)
    found += _room(vessel, trim)
    if trim.rounded and trim.recipe is not None:
        found += [rounded_words(each, vessel.model.table.stocks) for each in trim.rounded]
    found += trim.broken
    if vessel.model.bent:
        found.append("with what the laboratory has taught the limits bend: found step by step, not proven")
    elif trim.status == "stopped":
        found.append(f"not proven to be the least: the best additions known, at most {100.0 * (trim.gap or 0.0):.2g} % "
                     "more")
    return tuple(found)


def _drawn(ask: Ask, trim: Trim) -> list[str]:
    if trim.drawn_kg <= 0.0:
        return []
    part = trim.drawn_kg / ask.content_kg
    absurd = ("; to draw off more than a quarter is absurd (common practice): rework it, or get room or oil first"
              if part > ABSURD else "")
    return [f"draw off {kg(trim.drawn_kg)} kg first, {100.0 * part:.3g} % of what is there: nothing can be added that "
            f"would bring the whole of it inside{absurd}"]


def _absurd(vessel: Vessel, trim: Trim) -> list[str]:
    there = vessel.ask.content_kg
    if not trim.absurd or trim.added_kg is None or trim.added_kg <= ABSURD * there:
        return []
    said = (f"{amounts(trim.additions_kg or {})} onto {there:,.0f} kg is absurd: more than a quarter of what is "
            "there (common practice)")
    less = trim.least_mass_kg
    if less is not None and less < FAR_LESS * trim.added_kg:
        return [f"{said}; {amounts(trim.least_mass)} would do"]
    return [f"{said}; of the oils allowed none needs less"]


def amounts(masses: Mapping[str, float]) -> str:
    """Masses in words: `1,226 kg of BRIGHT and 12 kg of ADD`."""
    return " and ".join(f"{mass:,.0f} kg of {code}" for code, mass in masses.items() if mass > NOTABLE)


def _changes(trim: Trim) -> list[str]:
    """What becomes of the viscosity index and the flash point."""
    if not trim.additions_kg or trim.recipe is None:
        return []
    found = []
    for code in TOLD:
        was, now = trim.before.get(code), trim.recipe.predicted.get(code)
        if was is not None and now is not None:
            entry = lookup(code)
            unit = f" {entry.unit}" if entry.unit else ""
            figure = ", a screening figure" if entry.trust == "screening" else ""
            found.append(f"{entry.name} {was:.{entry.digits}f} → {now:.{entry.digits}f}{unit}{figure}")
    return found


def _topped_up(vessel: Vessel, trim: Trim) -> list[str]:
    """Which additives are added only to keep their treat rates."""
    found = []
    for stock in vessel.model.table.stocks:
        mass = (trim.additions_kg or {}).get(stock.code)
        rule = next((r for r in vessel.ask.target.rules if r.low > 0.0 and stock.matches(r.of)), None)
        if mass and rule is not None and stock.kind != "base" and stock.in_vessel_kg is None:
            found.append(f"{stock.code} {kg(mass)} kg keeps {rule.of} at its {100.0 * rule.low:g} %")
    return found


def _room(vessel: Vessel, trim: Trim) -> list[str]:
    if trim.total_kg is None:
        return []
    said = f"the vessel then holds {trim.total_kg:,.0f} kg"
    if trim.litres is not None and vessel.ask.fill is not None:
        most, celsius = vessel.ask.fill
        said += f", {trim.litres:,.0f} L at {celsius:g} °C of the {most:,.0f} L that may be in it"
    return [said]
