"""Cautions for one batch: each with its reason in these stocks. Reminders only: none is a permission or a clearance.

What the plant knows is set side by side (lowest flash, mixing temperature, the site's own margin); whether it will do
is never said, for the site's procedure decides.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from blendtui.store.batch_records import Vessel
from blendtui.store.harmless import harmless
from solver.stocks import Stock

from . import numbers

WET = 150.0  # mg/kg of water from which a stock is named (common practice: dry base oil has less than 100)
WARM = 30.0  # °C above which oil is heated at all
REACTIVE = {"sulfur": 1.0, "phosphorus": 1000.0}  # mass %, mg/kg: from here on an additive is named
CONCENTRATES = ("additive", "vi_improver", "pour_depressant")
DECIDES = "Site procedure decides."


@dataclass(frozen=True)
class Caution:
    """One reminder: what it is about, why it speaks of this batch, what to think of."""

    title: str
    reason: str
    advice: str
    warns: bool = False  # is a figure of the site's own exceeded? never the opposite of a clearance


def cautions(stocks: Sequence[Stock], vessel: Vessel | None, mix_c: float, *, fill_l: float | None = None
             ) -> tuple[Caution, ...]:
    """Cautions for what goes into a vessel, heel and line included, at a mixing temperature [°C].

    `fill_l`: fill at that temperature [L].
    """
    found = [_flash(stocks, vessel, mix_c), *_water(stocks, mix_c), *_room(vessel, mix_c, fill_l), *_static(stocks),
             *_reactive(stocks), *_neat(stocks), _entry(vessel)]
    return tuple(found)


def _names(stocks: Sequence[Stock]) -> str:
    more = f" and {len(stocks) - 6} more" if len(stocks) > 6 else ""
    return ", ".join(harmless(s.code, 20) for s in stocks[:6]) + more


def _flash(stocks: Sequence[Stock], vessel: Vessel | None, mix_c: float) -> Caution:
    known = [s for s in stocks if "flash" in s.values]
    unknown = [s for s in stocks if "flash" not in s.values]
    lowest = min(known, key=lambda s: s.values["flash"], default=None)
    parts = []
    if lowest is not None:
        parts.append(f"lowest flash that goes in: {lowest.values['flash']:g} °C ({harmless(lowest.code, 20)})")
    if unknown:
        parts.append(f"flash unknown: {_names(unknown)}")
    parts.append(f"mixing temperature: {mix_c:g} °C")
    margin, on = (None, "") if vessel is None else (vessel.flash_margin_c, vessel.flash_margin_on)
    parts.append("the site's margin is not typed for this vessel" if margin is None else
                 f"the site's margin: {margin:g} °C, {f'typed on {harmless(on, 20)}' if on else 'undated'}")
    inside = lowest is not None and mix_c > lowest.values["flash"] - (margin or 0.0)
    warning = ""
    if inside:
        warning = ("THE MIXING TEMPERATURE IS INSIDE THE SITE'S MARGIN TO THE LOWEST FLASH. " if margin else
                   "THE MIXING TEMPERATURE IS AT OR ABOVE THE LOWEST FLASH. ")
    return Caution("Flash", "; ".join(parts), f"{warning}The lowest flash in the vessel and the heater skin count, not "
                   f"the blend's mean. {DECIDES}", inside)


def _water(stocks: Sequence[Stock], mix_c: float) -> Iterator[Caution]:
    wet = [s for s in stocks if s.values.get("water", 0.0) >= WET or s.kind == "rework"]
    if not wet and mix_c <= WARM:
        return
    told = ", ".join(harmless(s.code, 20) + (f" {s.values['water']:g} mg/kg" if "water" in s.values else " (rework)")
                     for s in wet[:4])
    reason = f"heated to {mix_c:g} °C" + (f"; water in {told}" if told else "")
    yield Caution("Water", reason, "Water in hot oil froths over: drain and test first, heat slowly, leave room; no "
                  f"wet drums or hoses into oil near 100 °C. {DECIDES}")


def _room(vessel: Vessel | None, mix_c: float, fill_l: float | None) -> Iterator[Caution]:
    if vessel is None or fill_l is None:
        return
    parts = [f"{numbers.litres(fill_l)} L at {mix_c:g} °C"]
    if vessel.capacity_l:
        pct = numbers.fixed(100.0 * fill_l / vessel.capacity_l, 1)
        parts.append(f"{pct} % of {numbers.litres(vessel.capacity_l)} L")
    if vessel.least_fill_l:
        parts.append(f"least fill {numbers.litres(vessel.least_fill_l)} L")
    over = vessel.capacity_l is not None and fill_l > vessel.capacity_l
    under = vessel.least_fill_l is not None and fill_l < vessel.least_fill_l
    warning = "IT DOES NOT FIT. " if over else "STIRRER OR COIL MAY NOT BE COVERED. " if under else ""
    yield Caution("Room", ", ".join(parts), f"{warning}Leave room for foam and for a trim; keep coils covered while "
                  f"they are hot. {DECIDES}", over or under)


def _static(stocks: Sequence[Stock]) -> Iterator[Caution]:
    pumped = [s for s in stocks if s.kind in ("base", "rework") and s.package_kg is None and s.in_vessel_kg is None]
    if pumped:
        yield Caution("Static", f"pumped oil: {_names(pumped)}", "Bond and earth, fill from below, start slowly, wait "
                      f"before dipping. {DECIDES}")


def _reactive(stocks: Sequence[Stock]) -> Iterator[Caution]:
    additives = [s for s in stocks if s.kind == "additive"]
    rich = [s for s in additives if any(s.values.get(code, 0.0) >= least for code, least in REACTIVE.items())]
    blank = [s for s in additives if not any(code in s.values for code in REACTIVE)]
    told = [_content(s) for s in rich[:4]] + ([f"content unknown: {_names(blank)}"] if blank else [])
    if told:
        yield Caution("Sulphur and phosphorus additives", "; ".join(told), "They can give off hydrogen sulphide when "
                      "overheated, wet or acidified; the ceiling is in each safety data sheet; smell is no warning. "
                      f"{DECIDES}")


def _content(stock: Stock) -> str:
    parts = [f"S {stock.values['sulfur']:g} %"] if "sulfur" in stock.values else []
    parts += [f"P {stock.values['phosphorus']:g} mg/kg"] if stock.values.get("phosphorus") else []
    return f"{harmless(stock.code, 20)} ({', '.join(parts)})"


def _neat(stocks: Sequence[Stock]) -> Iterator[Caution]:
    found = [s for s in stocks if s.kind in CONCENTRATES and s.in_vessel_kg is None]
    if found:
        yield Caution("Concentrates", _names(found), "Never mix concentrates neat, never onto a hot coil; oil goes in "
                      f"first, between them and behind them. {DECIDES}")


def _entry(vessel: Vessel | None) -> Caution:
    name = "the vessel" if vessel is None else harmless(vessel.vessel, 20)
    return Caution("Vessel and nitrogen", f"{name} and its blanket", "Whoever opens or goes into a vessel needs a "
                   f"permit, a gas test and an attendant; this card is none of them. {DECIDES}")
