"""What is in a vessel and its line before anything is charged: heel, line, flush oil, with their values.

A heel is of a stock (its values as they are today), of a batch (what the laboratory found of it, the rest as it was
predicted, and what it was made of) or of nothing known but the values that are typed. Typed values are measured ones
and hold over any other.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from statistics import fmean

from blendtui.store import cells as check
from blendtui.store.batch_records import DONE, FLUSH, HEEL, LINE, Content, Made, Vessel
from blendtui.store.errors import NoSuchRow
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.properties import lookup
from solver.stocks import Stock

from . import batches, numbers, typed
from .errors import DeskError

Part = tuple[float, str]  # kg, stock
FAR = 0.25  # of a KV from which a measured heel is questioned
BATCH_LAW = "refutas"  # of what no laboratory measured of a batch whose law is not known


def contents_of(plant: Plant, vessel: Vessel, *, heel_kg: float | None = None, heel_stock: str | None = None,
                heel_cells: Mapping[str, str] | None = None, line: Part | None = None,
                flush: tuple[float, str, bool] | None = None) -> list[Content]:
    """Contents for a new batch; None: as the vessel has it. DeskError for what cannot be in a vessel."""
    stocks = batches.by_code(plant)
    kg = vessel.heel_kg or 0.0 if heel_kg is None else heel_kg
    found = []
    if _mass(kg, "heel") > 0.0:
        of = vessel.heel_stock if heel_stock is None else heel_stock.strip()
        found.append(_content(plant, HEEL, kg, of, typed.values(heel_cells or {}), stocks))
    elif heel_cells:
        raise DeskError("values of a heel are typed, and no heel; type its kg too")
    if line is not None and _mass(line[0], "content of the line") > 0.0:
        found.append(_content(plant, LINE, line[0], line[1].strip(), {}, stocks))
    if flush is not None and _mass(flush[0], "flush oil") > 0.0:
        content = _content(plant, FLUSH, flush[0], flush[1].strip(), {}, stocks)
        found.append(replace(content, counts=int(flush[2])))
    return [replace(content, line=n) for n, content in enumerate(found, 1)]


def _mass(kg: float, what: str) -> float:
    if not math.isfinite(kg) or kg < 0.0:
        raise DeskError(f"the {what}: {kg:g} kg cannot be; type a mass, 0 for none")
    if kg > check.LARGEST_KG:
        raise DeskError(f"the {what}: {kg:g} kg is more than {check.LARGEST_KG:g} kg; check the unit")
    return kg


def _refuse_values(measured: Mapping[str, float], called: str) -> None:
    """DeskError for a measured value that no oil has."""
    for code, value in measured.items():
        entry = lookup(code.removeprefix("blend_"))
        if not entry.lowest <= value <= entry.highest:
            raise DeskError(f"{called}: {entry.name} {value:.6g} {entry.unit} lies outside {entry.lowest:g} to "
                            f"{entry.highest:g}; check the figure and its unit")


def _content(plant: Plant, what: str, kg: float, of: str, measured: Mapping[str, float], stocks: Mapping[str, Stock]
             ) -> Content:
    called = {HEEL: "the heel", LINE: "the line", FLUSH: "the flush oil"}[what]
    _refuse_values(measured, called)
    cells, parts, source = _known(plant, of, called, stocks)
    cells = {**cells, **measured}
    if "kv40" in cells and "kv100" in cells and cells["kv100"] >= cells["kv40"]:
        raise DeskError(f"{called}: KV40 {numbers.kv(cells['kv40'])} and KV100 {numbers.kv(cells['kv100'])} mm²/s: an "
                        "oil is thinner hot than cold; swapped?")
    lacks = [name for name in batches.DATUM if name not in cells]
    if lacks:
        raise DeskError(f"{called} of {numbers.batch(kg)} kg{f' ({harmless(of, 40)})' if of else ''}: its "
                        f"{', '.join(lacks)} {'is' if len(lacks) == 1 else 'are'} unknown; name the stock or batch it "
                        "is of, or type what was measured (--heel-value kv40=46.1)" if what == HEEL else
                        f"{called} of {numbers.batch(kg)} kg ({harmless(of, 40)}): its {', '.join(lacks)} "
                        "is unknown; enter it with the stock")
    lots = plant.tank_lots(of) if what == FLUSH else {}
    return Content("", 0, what, of, round(kg, 6), 1, cells, parts, "measured" if measured else source, lots)


def _known(plant: Plant, of: str, called: str, stocks: Mapping[str, Stock]
           ) -> tuple[dict[str, float], dict[str, float], str]:
    """Values, what it was made of, and where both are from."""
    if not of:
        return {}, {}, "typed"
    if of in stocks:
        return batches.cells_of(stocks[of]), {of: 1.0}, "stock"
    try:
        made = plant.batch(of)
    except NoSuchRow:
        raise DeskError(f"{called} is said to be of {harmless(of, 40)!r}, which is no stock and no batch of this "
                        "plant; mend the name, or type its values") from None
    cells, parts = of_batch(made, stocks)
    return cells, parts, "batch"


def of_batch(made: Made, stocks: Mapping[str, Stock]) -> tuple[dict[str, float], dict[str, float]]:
    """Values and composition of the oil of a batch: measured where the laboratory did, else as predicted.

    DeskError for a batch into which nothing was charged.
    """
    from solver.recipe import evaluate

    from .batch_verdict import drawn_together, values_of

    last = max((c.at for c in made.charges if c.state == DONE), default="")
    # What left after the last charge took its part of everything and changed nothing of what stays.
    head = replace(made.head, heel_ignored="")  # its own heel is in it, whether its sums were about that or not
    made = replace(made, head=head, outcomes=tuple(o for o in made.outcomes if o.at < last))
    inside = batches.in_vessel(made, stocks)
    total = sum(s.in_vessel_kg or 0.0 for s in inside)
    if total <= 0.0:
        raise DeskError(f"{harmless(made.name, 40)}: nothing was charged into it, so nothing of it can be a heel")
    found = evaluate(inside, {s.code: (s.in_vessel_kg or 0.0) / total for s in inside}, law=_law(made)).predicted
    cells = {code: value for code, value in found.items() if value is not None and code != "vi"}
    draw = drawn_together(made)
    for code in dict.fromkeys(r.property for r in made.results if r.property != "vi"):
        means = [mean for mean, _, _ in values_of(made, draw, code)]
        if means:
            cells[code] = fmean(means)
    return cells, batches.composition(made)


def _law(made: Made) -> str:
    import json

    return str(json.loads(made.head.formula).get("law") or BATCH_LAW) if made.head.formula else BATCH_LAW


def doubts(contents: Sequence[Content], stocks: Mapping[str, Stock]) -> list[str]:
    """Where what was measured of a heel is far from what it is said to be of."""
    said = []
    for content in (c for c in contents if c.source == "measured" and c.stock in stocks):
        own = batches.cells_of(stocks[content.stock])
        for code in ("kv40", "kv100"):
            if code in own and abs(content.cells[code] / own[code] - 1.0) > FAR:
                said.append(f"the {content.what} is said to be of {harmless(content.stock, 40)} ({code.upper()} "
                            f"{numbers.kv(own[code])} mm²/s), and {numbers.kv(content.cells[code])} was measured: is "
                            "it of something else, or mixed?")
    return said


def refuse_fuller(vessel: Vessel, contents: Sequence[Content]) -> None:
    """DeskError where a vessel is smaller than what is said to be in it already."""
    from solver.volume import litres

    held = sum(litres(c.kg, c.cells["density15"], 15.0) for c in contents if c.counts)
    if vessel.capacity_l is not None and held > vessel.capacity_l:
        what = " and ".join(dict.fromkeys(c.what for c in contents if c.counts))
        raise DeskError(f"{harmless(vessel.vessel, 40)} is smaller than its {what}: {numbers.litres(held)} L at 15 °C, "
                        f"and it holds {numbers.litres(vessel.capacity_l)} L; mend the kg or choose the right vessel")


def deducted(stocks: Sequence[Stock], contents: Sequence[Content]) -> list[Stock]:
    """The stocks after the flush oil was drawn; DeskError where a tank cannot give it."""
    taken = {c.stock: c.kg for c in contents if c.what == FLUSH}
    for stock in stocks:
        if stock.code in taken and stock.available_kg is not None and taken[stock.code] > stock.available_kg:
            raise DeskError(f"{harmless(stock.code, 40)}: {numbers.batch(taken[stock.code])} kg of flush oil, and "
                            f"{numbers.batch(stock.available_kg)} kg are free; take another oil or less")
    return [replace(s, on_hand_kg=s.on_hand_kg - taken[s.code])
            if s.code in taken and s.on_hand_kg is not None else s for s in stocks]


def words(contents: Sequence[Content]) -> list[str]:
    """What is in the vessel already, a sentence each."""
    said = []
    for c in contents:
        kv = ", ".join(f"{code.upper()} {numbers.kv(c.cells.get(code))}" for code in ("kv40", "kv100"))
        of = f" of {harmless(c.stock, 40)}" if c.stock else ""
        where = {"measured": "measured", "typed": "typed", "stock": "as the stock is today",
                 "batch": "as its batch was measured, the rest predicted"}.get(c.source, c.source)
        way = "" if c.what != FLUSH else " goes into the batch;" if c.counts else " is pumped out again;"
        said.append(f"{c.what}: {numbers.batch(c.kg)} kg{of};{way} {kv} mm²/s, {where}")
    return said
