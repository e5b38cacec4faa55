"""The batch card: everything the floor needs on paper to make one batch, as text of 80 columns (HTML: card_html.py)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from blendtui.store.batch_records import DONE, DROPPED, Charge, Content, Made, Vessel
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.stocks import Stock
from solver.target import Limit, Target
from solver.volume import litres

from . import batch_outlook, batches, charge_lines, formulas, heels
from .cautions import Caution, cautions
from .scale import readings

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe

UNITS = {"L15": "L at 15 °C", "L20": "L at 20 °C"}
COLDEST_KV, HOTTEST_KV = -60.0, 200.0  # °C between which a KV may be read


@dataclass(frozen=True)
class CardLine:
    """One charge as the card has it. None: unknown, or not yet."""

    charge: Charge
    name: str  # of the stock; the tank often stands in it
    rinse: bool  # the same stock stands on an earlier line of the recipe, or of the same trim
    lots: Mapping[str, float]  # lot → part of the tank now, or of what was charged; empty: no receipt is known
    step_kg: float | None
    own_scale: bool  # is it weighed finer than the vessel's scale can?
    package_kg: float | None  # one drum or IBC
    reading_kg: float | None  # of the scale after it, with what was in the vessel; None: dropped
    tared_kg: float | None  # the same from a scale that was set to 0 before the first charge
    litres: float | None  # at the tank's temperature
    alike: tuple[str, ...]  # codes of the plant that are read for this one's
    tested: str  # date and source of the stock's values

    @property
    def stock(self) -> str:
        """Its code."""
        return self.charge.stock

    @property
    def packages(self) -> int | None:
        """Whole drums or IBCs."""
        return round(self.charge.plan_kg / self.package_kg) if self.package_kg else None

    @property
    def kg(self) -> float:
        """What was charged, else what is planned."""
        return _kg(self.charge)

    @property
    def done(self) -> bool:
        """Is it in the vessel?"""
        return self.charge.state == DONE

    @property
    def within_kg(self) -> tuple[float, float]:
        """Least and most that may be charged."""
        return self.charge.plan_kg - self.charge.tolerance_kg, self.charge.plan_kg + self.charge.tolerance_kg


def _kg(charge: Charge) -> float:
    return charge.actual_kg if charge.state == DONE and charge.actual_kg is not None else charge.plan_kg


@dataclass(frozen=True)
class Card:
    """What a card says."""

    made: Made
    product_name: str
    vessel: Vessel | None
    contents: tuple[Content, ...]
    start_kg: float  # in the vessel before anything is charged
    lines: tuple[CardLine, ...]
    recipe: Recipe | None  # predicted, of what is in the vessel and what is to come
    why_not: str  # why nothing can be predicted
    limits: tuple[LimitResult, ...]
    missed: tuple[str, ...]
    total_kg: float  # what the vessel holds when all is charged, heel and line included
    fill_l: float | None  # of it at mixing temperature
    fill_pct: float | None
    mix_kv: float | None  # KV at mixing temperature, mm²/s
    cautions: tuple[Caution, ...]
    changed: tuple[str, ...]  # what of the product is another today than in the order
    customer: tuple[Limit, ...]
    entry: int  # number of the last journal entry …
    hash: str  # … and its hash

    @property
    def on_card(self) -> tuple[CardLine, ...]:
        """Lines that are charged or to charge."""
        return tuple(x for x in self.lines if x.charge.state != DROPPED)


def card(plant: Plant, batch: str) -> Card:
    """The card of a batch as it stands; NoSuchRow when there is none of that name."""
    made, stocks = plant.batch(batch), batches.by_code(plant)
    of = next((v for v in plant.vessels() if v.vessel == made.head.vessel), None)
    full = _as_made(made)
    ahead = batch_outlook.outlook(plant, full)
    fill, limits = ahead.fill_l, () if ahead.recipe is None else ahead.recipe.limits
    total = full.in_vessel_kg + sum(c.plan_kg for c in made.to_charge)
    inside = batches.in_vessel(replace(made, head=replace(made.head, heel_ignored=""), charges=(), outcomes=()), stocks)
    going = [stocks[code] for code in dict.fromkeys(c.stock for c in made.charges if c.state != DROPPED)
             if code in stocks]
    start = sum(c.kg for c in made.contents if c.counts)
    entry, last = _pin(plant)
    return Card(made, _product_name(plant, made.head.product), of, made.contents, start,
                tuple(_lines(plant, made, stocks, of, start)), ahead.recipe, ahead.why_not, limits, ahead.missed, total,
                fill, 100.0 * fill / of.capacity_l if fill is not None and of is not None and of.capacity_l else None,
                _mix_kv(plant, full, ahead.recipe), cautions([*inside, *going], of, made.head.mix_c, fill_l=fill),
                formulas.changes_since(plant, made) if made.head.formula else (),
                formulas.customer_limits_of(made) if made.head.formula else (), entry, last)


def _as_made(made: Made) -> Made:
    """The batch as it stood when all was charged: what has left the vessel since, packed or drawn, is in it again.

    What was drawn off to make room for charges that are still to come stays out.
    """
    last = max((c.at for c in made.charged), default="")
    if made.to_charge or not last:
        return made
    return replace(made, outcomes=tuple(o for o in made.outcomes if o.at < last))


def _product_name(plant: Plant, code: str) -> str:
    return next((p.name for p in plant.products(include_retired=True) if p.product == code), "")


def _pin(plant: Plant) -> tuple[int, str]:
    """Number and hash of the last entry of the journal, of one moment."""
    while True:
        entry, last = plant.revision(), plant.last_hash()
        if plant.revision() == entry:
            return entry, last


# What it will be

def _mix_kv(plant: Plant, made: Made, recipe: Recipe | None) -> float | None:
    """KV at mixing temperature [mm²/s], by the batch's law over each stock's own line."""
    celsius = made.head.mix_c
    if recipe is None or not recipe.shares or not COLDEST_KV <= celsius <= HOTTEST_KV:
        return None
    from solver.properties import lookup
    from solver.recipe import evaluate

    target, code = batches.target_of(plant, made), f"kv{celsius:g}"
    stocks = [*batch_outlook.contents(plant, made, target), *batch_outlook.own_stocks(plant, made)]
    # A limit that every oil meets: what is limited is also predicted.
    every = Target("", (Limit(code, low=lookup(code).lowest),), law=target.law, lessons=target.lessons)
    used = [s for s in stocks if s.code in recipe.shares]
    return evaluate(used, recipe.shares, every).predicted.get(code)


# The charges

def _lines(plant: Plant, made: Made, stocks: Mapping[str, Stock], of: Vessel | None, start: float) -> list[CardLine]:
    found: list[CardLine] = []
    live, shows = plant.stocks(), readings(made)
    for charge in made.charges:
        again = any(x.stock == charge.stock and x.charge.state != DROPPED and x.charge.round == charge.round
                    for x in found)
        line = _line(plant, charge, stocks.get(charge.stock, Stock(charge.stock)), of, live)
        kg = shows.get(charge.line)
        found.append(replace(line, rinse=again, reading_kg=kg, tared_kg=None if kg is None else kg - start))
    return found


def _line(plant: Plant, charge: Charge, stock: Stock, of: Vessel | None, live: Sequence[Stock]) -> CardLine:
    """A line without its readings."""
    done = charge.state == DONE
    lots = charge.lots if done else {charge.lot: 1.0} if charge.lot else plant.tank_lots(charge.stock)
    weighed = stock if of is None else charge_lines.in_steps([stock], of)[0]
    density = charge.cells.get("density15") if done else stock.density15
    volume = None if density is None or charge.celsius is None else litres(_kg(charge), density, charge.celsius)
    tested = [f"tested {stock.tested_on}" if stock.tested_on else "", stock.source]
    return CardLine(charge, stock.name, False, lots, weighed.package_kg or weighed.division_kg, _own_scale(weighed, of),
                    stock.package_kg, None, None, volume, tuple(charge_lines.look_alikes(stock, live)),
                    ", ".join(part for part in tested if part))


def _own_scale(weighed: Stock, of: Vessel | None) -> bool:
    if weighed.package_kg is not None or weighed.division_kg is None:
        return False
    return of is not None and of.division_kg is not None and weighed.division_kg < of.division_kg


# JSON

def card_json(made: Card) -> dict[str, Any]:
    """The card, numbers unrounded, unknown null."""
    head = made.made.head
    return {
        "batch": head.batch, "product": head.product, "name": made.product_name or None, "state": head.state,
        "customer": head.customer or None, "order_no": head.order_no or None, "asked": head.asked, "unit": head.unit,
        "batch_kg": head.batch_kg, "vessel": head.vessel, "mix_c": head.mix_c, "mix_kv": made.mix_kv,
        "total_kg": made.total_kg, "start_kg": made.start_kg, "fill_l": made.fill_l, "fill_pct": made.fill_pct,
        "contents": [content_json(c) for c in made.contents],
        "charges": [_line_json(x) for x in made.lines],
        "predicted": None if made.recipe is None else dict(made.recipe.predicted),
        "why_not_predicted": made.why_not or None,
        "limits": [{"property": x.property, "low": x.low, "high": x.high, "value": x.value, "met": x.met,
                    "sources": list(x.sources)} for x in made.limits],
        "missed": list(made.missed), "law": None if made.recipe is None else made.recipe.law,
        "lessons": [] if made.recipe is None else list(made.recipe.lessons),
        "cautions": [{"title": c.title, "reason": c.reason, "advice": c.advice, "warns": c.warns}
                     for c in made.cautions],
        "formula_entry": head.formula_entry, "product_changed": list(made.changed),
        "heel_ignored": head.heel_ignored or None, "record": {"entry": made.entry, "hash": made.hash}}


def content_json(content: Content) -> dict[str, Any]:
    """What was in the vessel before anything was charged."""
    return {"what": content.what, "stock": content.stock or None, "kg": content.kg, "counts": bool(content.counts),
            "values": dict(content.cells), "made_of": dict(content.parts), "source": content.source or None}


def _line_json(x: CardLine) -> dict[str, Any]:
    c = x.charge
    return {"line": c.line, "round": c.round, "stock": c.stock, "name": x.name or None, "lots": dict(x.lots),
            "plan_kg": c.plan_kg, "step_kg": x.step_kg, "packages": x.packages, "package_kg": x.package_kg,
            "tolerance_kg": c.tolerance_kg, "reading_kg": x.reading_kg, "tared_kg": x.tared_kg, "tank_c": c.celsius,
            "litres": x.litres, "state": c.state, "actual_kg": c.actual_kg, "by": c.by or None,
            "checked_by": c.checked_by or None, "why": c.why or None, "rinse": x.rinse, "own_scale": x.own_scale,
            "look_alikes": list(x.alike)}


# Words that text and HTML share

def asked_words(made: Made) -> str:
    """What was ordered, with its unit."""
    return f"{made.head.asked:.10g} {UNITS.get(made.head.unit, made.head.unit)}"


def facts(made: Card) -> list[tuple[str, str]]:
    """The heading, line by line; what is not known is left out."""
    head, of = made.made.head, made.vessel
    room = [] if of is None else [
        *([f"capacity {of.capacity_l:.10g} L"] if of.capacity_l else []),
        *([f"least fill {of.least_fill_l:.10g} L"] if of.least_fill_l else []),
        *([f"division {of.division_kg:g} kg"] if of.division_kg else [])]
    rows = [("Product", f"{head.product}  {made.product_name}".strip()), ("Customer", head.customer),
            ("Order", head.order_no), ("Asked", asked_words(made.made)),
            ("Holds", f"{round(made.total_kg, 3):.10g} kg when all is charged, what was in the vessel included"),
            ("Vessel", ", ".join([head.vessel, *room])),
            ("Ordered", f"{batches.when(head.ordered_at)} by {head.ordered_by}"),
            ("State", batches.stage(made.made) + (f" ({head.why})" if head.why else "")), ("Note", head.note)]
    return [(name, harmless(text)) for name, text in rows if text]


def content_words(made: Card) -> list[str]:
    """What is in the vessel already, and what of it is left out of the sums."""
    said = heels.words(made.contents)
    if made.made.head.heel_ignored:
        said.append(f"heel and line are LEFT OUT of the sums: {harmless(made.made.head.heel_ignored, 200)}")
    return said


def card_text(made: Card) -> str:
    """The card as text of at most 80 columns that any printer prints."""
    from .card_text import text

    return text(made)
