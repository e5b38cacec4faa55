"""Proposals: an order worked out on today's tanks, with what is unlikely of it; nothing is written."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from blendtui.store import cells as check
from blendtui.store.batch_records import FLUSH, OPEN, Charge, Content, Vessel
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.stocks import Stock
from solver.target import Target

from . import batches, charge_lines, formulas, heels, numbers
from .balance import balance
from .errors import DeskError
from .order_design import CELSIUS_OF, MOST_FILL_PCT, Designed, Plan, work_out
from .release import STEP
from .vessels import charge_order, vessel

if TYPE_CHECKING:
    from solver.recipe import Recipe

UNITS = ("kg", *CELSIUS_OF)
MIX_C = 60.0  # °C where none is said: practice mixes at 50–65
COOL, HOT = 30.0, 90.0  # °C from which a mixing temperature is questioned
VOLUMES = ("l", "litre", "litres", "m³", "m3", "us gal", "usgal")
AMBIENT_C = 20.0  # °C of a tank whose temperature is not said
MISSED = 0.01  # of what went in: what may be missing where it was forgotten to say what stayed
OLD_DAYS = 365  # of a test, from which it is remarked


@dataclass(frozen=True)
class Order:
    """What is ordered. None: as the vessel or the desk has it."""

    product: str
    amount: float  # what the customer gets, in `unit`
    vessel: str
    unit: str = "kg"  # kg, or litres at 15 or 20 °C: L15, L20
    customer: str = ""
    order_no: str = ""
    limits: Mapping[str, tuple[str, str]] = field(default_factory=dict)  # property → low and high as typed
    mix_c: float | None = None  # °C
    heel_kg: float | None = None
    heel_stock: str | None = None  # a stock or a batch; empty: of unknown origin
    heel_cells: Mapping[str, str] = field(default_factory=dict)  # measured values, as typed
    line: tuple[float, str] | None = None  # kg and stock
    flush: tuple[float, str, bool] | None = None  # kg, stock, does it go into the batch
    heel_ignored: str = ""  # why heel and line are left out of the sums; empty: they are not
    name: str = ""  # of the batch; empty: the plant's next
    note: str = ""
    most_fill_pct: float = MOST_FILL_PCT  # of the vessel at mixing temperature
    whole: bool = True  # whole scale divisions and packages
    tank_c: Mapping[str, float] = field(default_factory=dict)  # stock → °C of its tank; "" for all others
    charges_in: tuple[str, ...] = ()  # order of charging by names; empty: the vessel's own, else the usual

    @property
    def mixed_at(self) -> float:
        """Mixing temperature [°C]."""
        return MIX_C if self.mix_c is None else self.mix_c


@dataclass(frozen=True)
class Proposal:
    """An order worked out; nothing is written."""

    order: Order
    vessel: Vessel
    target: Target  # product and customer together; the fill is not part of it
    designed: Designed
    charges: tuple[Charge, ...]  # in the order of the card; empty: no blend
    contents: tuple[Content, ...]
    questions: tuple[str, ...]  # what is unlikely of it: asked when it is taken
    remarks: tuple[str, ...]
    formula: str
    rests_on: tuple[object, ...]  # what must still be so when it is taken
    steps_kg: Mapping[str, float | None]  # stock → the step by which it is weighed

    @property
    def status(self) -> str:
        """optimal, stopped or infeasible."""
        return self.designed.status

    @property
    def recipe(self) -> Recipe:
        """Of contents that count and charges together; where there is no blend, the nearest."""
        return self.designed.recipe

    @property
    def asked_kg(self) -> float:
        """What the customer gets [kg]."""
        return self.designed.asked_kg

    @property
    def batch_kg(self) -> float:
        """What the vessel is to hold [kg]: asked, heel and line."""
        return self.designed.batch_kg

    @property
    def fill_l(self) -> float | None:
        """Fill at mixing temperature [L]."""
        return self.designed.fill_l

    @property
    def fill_pct(self) -> float | None:
        """The same in % of the vessel."""
        return self.designed.fill_pct

    @property
    def effects(self) -> Mapping[str, tuple[float | None, float | None]]:
        """Property → (with heel and line, without)."""
        return self.designed.effects

    @property
    def reasons(self) -> tuple[str, ...]:
        """Why there is no blend."""
        return self.designed.reasons


# What is typed

def amount_of(typed: str, celsius: float | None = None) -> tuple[float, str]:
    """An amount as typed, and the unit an order has it in: kg, L15 or L20. Without a unit it is kg.

    `celsius`: at which litres are meant, 15 or 20 °C; None: 15. DeskError where mass and volume contradict each other.

    >>> amount_of("15 t"), amount_of("16000 L", 20.0), amount_of("16000 L20")
    ((15000.0, 'kg'), (16000.0, 'L20'), (16000.0, 'L20'))
    """
    from solver.scales import parse, split

    number, unit = split(typed)
    told = harmless(typed.strip(), 40)
    if unit in ("l15", "l20"):
        own = CELSIUS_OF[unit.upper()]
        if celsius not in (None, own):
            raise DeskError(f"{told} is at {own:g} °C, and {celsius:g} °C is typed with it; which is meant?")
        return number, unit.upper()
    if unit in VOLUMES:
        if celsius not in (None, *CELSIUS_OF.values()):
            raise DeskError(f"litres are ordered at 15 or 20 °C, not at {celsius:g} °C; ask which the customer means")
        litres = parse(typed, "mass", 1000.0)  # of 1 kg/L
        return litres, "L20" if celsius == CELSIUS_OF["L20"] else "L15"
    kg = parse(typed, "mass")
    if celsius is not None:
        raise DeskError(f"{told} is a mass{'' if unit else ' (kg)'}, and a temperature belongs to litres; type "
                        f"{number:.10g} L, or leave the temperature out")
    return kg, "kg"


# Proposing

def propose(plant: Plant, order: Order) -> Proposal:
    """Work an order out on today's tanks; nothing is written. DeskError, PlantError or SolverError in one line."""
    from .targets import target_of

    of = vessel(plant, order.vessel)
    _refuse_order(plant, order, of)
    product = target_of(plant, order.product)
    limits, wider = formulas.customer_limits(product, order.limits, order.customer)
    contents = heels.contents_of(plant, of, heel_kg=order.heel_kg, heel_stock=order.heel_stock,
                                 heel_cells=order.heel_cells, line=order.line, flush=order.flush)
    if order.heel_ignored and not any(c.what != FLUSH for c in contents):
        raise DeskError("there is no heel and no line to leave out of the sums; take the reason away, or type the heel")
    stocks = heels.deducted(plant.stocks(), contents)
    return proposed(plant, order, of, formulas.target_with(product, limits), contents, stocks, wider)


def _shown(unit: str) -> str:
    return unit if unit == "kg" else f"L at {CELSIUS_OF[unit]:g} °C"


def _refuse_order(plant: Plant, order: Order, of: Vessel) -> None:
    """DeskError for what no order can be."""
    if order.unit not in UNITS:
        raise DeskError(f"{harmless(order.unit, 20)!r} is no unit of an order; usable are {', '.join(UNITS)}")
    asked = f"an order of {order.amount:g} {_shown(order.unit)}"
    if not math.isfinite(order.amount) or order.amount <= 0.0:
        raise DeskError(f"{asked} cannot be; type what the customer is to get")
    if order.amount > check.LARGEST_KG:
        raise DeskError(f"{asked} is more than {check.LARGEST_KG:g}; check the unit")
    if of.capacity_l is None:
        raise DeskError(f"{harmless(of.vessel, 40)} has no capacity, so its fill cannot be told; type it: blendtui "
                        f"vessel set {harmless(of.vessel, 40)} capacity_l=24000")
    celsius = order.mixed_at
    if not -20.0 <= celsius <= 150.0:
        raise DeskError(f"a mixing temperature of {celsius:g} °C lies outside −20 to 150 °C; °F?")
    if not 1.0 <= order.most_fill_pct <= 100.0:
        raise DeskError(f"a fill of {order.most_fill_pct:g} % of the vessel cannot be; type one such as 85 or 90")
    codes = {s.code for s in plant.stocks()} if order.tank_c else set()
    for stock, at in order.tank_c.items():
        if stock and stock not in codes:
            raise DeskError(f"a temperature is typed for the tank of {harmless(stock, 40)!r}, which is no stock; mend "
                            "the code")
        if not -20.0 <= at <= 150.0:
            raise DeskError(f"{harmless(stock, 40) or 'the tanks'}: {at:g} °C lies outside −20 to 150 °C; °F?")
    if order.name:
        new_name(plant, order.name)


def new_name(plant: Plant, typed: str) -> str:
    """A batch's name as typed, else the plant's next; DeskError for one that is taken."""
    if not typed.strip():
        return batches.next_name(plant)
    try:
        name = check.code(typed.strip())
    except check.CellError as error:
        raise DeskError(str(error)) from None
    if any(b.batch.casefold() == name.casefold() for b in plant.batches()):
        raise DeskError(f"there is a batch {name} already; give the new one another name, or leave it empty")
    if any(s.code == name for s in plant.stocks(include_retired=True)):
        raise DeskError(f"{name} is a stock of this plant; give the batch another name")
    return name


def proposed(plant: Plant, order: Order, of: Vessel, target: Target, contents: Sequence[Content],
             stocks: Sequence[Stock], questions: Sequence[str], own: str = "") -> Proposal:
    """A proposal for contents and stocks that are settled; `own`: the batch that is designed anew."""
    heels.refuse_fuller(of, contents)
    known, weighed = batches.by_code(plant), charge_lines.in_steps(stocks, of)
    charges_in = charge_lines.known_names(order.charges_in or charge_order(plant, of.vessel), tuple(known.values()))
    designed = work_out(Plan(target, of, tuple(weighed), known, tuple(contents), order.amount, order.unit,
                             order.mixed_at, bool(order.heel_ignored.strip()), order.most_fill_pct, order.whole,
                             charges_in))
    charges = tuple(_charge(plant, order, n, line) for n, line in enumerate(designed.lines, 1))
    used = [s for s in stocks if any(c.stock == s.code for c in charges)]
    asked = (*questions, *heels.doubts(contents, known), *_questions(plant, of, order.mixed_at, own))
    remarks = (*heels.words(contents), *_foreign_words(known, target, contents),
               *_mass_words(designed, contents), *designed.remarks, *_step_words(stocks, weighed, used),
               *_stock_words(used))
    how = {"most_fill_pct": order.most_fill_pct, "whole": order.whole, "tank_c": dict(order.tank_c),
           "charges_in": list(order.charges_in)}
    return Proposal(order, of, target, designed, charges, tuple(contents), asked, remarks, formulas.freeze(target, how),
                    rests_on(plant, order, of, used), {line.stock.code: line.step_kg for line in designed.lines})


def _charge(plant: Plant, order: Order, number: int, line: charge_lines.Line) -> Charge:
    lots = plant.tank_lots(line.stock.code)
    celsius = order.tank_c.get(line.stock.code, order.tank_c.get("", AMBIENT_C))
    return Charge("", number, 0, line.stock.code, next(iter(lots)) if len(lots) == 1 else "", line.kg,
                  line.tolerance_kg, celsius, position=10 * number)


def _questions(plant: Plant, of: Vessel, mix_c: float, own: str) -> list[str]:
    """What is unlikely of an order and may be so."""
    asked = []
    for other in (b for b in plant.batches(OPEN) if b.vessel == of.vessel and b.batch != own):
        asked.append(f"{harmless(of.vessel, 40)} holds {harmless(other.batch, 40)} ({harmless(other.product, 40)}, "
                     f"{batches.stage(plant.batch(other.batch))}, ordered by {harmless(other.ordered_by, 40)}), which "
                     "is open: the heel after it is not known yet")
    asked += _still_in(plant, of, own)
    if not COOL <= mix_c <= HOT:
        asked.append(f"a mixing temperature of {mix_c:g} °C is far from the usual 50–65 °C")
    back = plant.clock_back()
    if back is not None and back > STEP:
        asked.append(f"the clock stands {back:,.0f} s before the last entry of the record: was it set back?")
    return asked


def _still_in(plant: Plant, of: Vessel, own: str) -> list[str]:
    """Is the oil of the batch before still in the vessel by the book, though that batch is closed?"""
    before = (plant.batch(b.batch) for b in plant.batches() if b.vessel == of.vessel and b.batch != own)
    made = next((m for m in before if m.charged or m.head.state == OPEN), None)
    if made is None or made.head.state == OPEN:
        return []
    last, found = made.head, balance(made)
    if found.loss_kg is not None or found.in_vessel_kg <= MISSED * found.in_kg:
        return []
    return [f"by the book {numbers.batch(found.in_vessel_kg)} kg of {harmless(last.batch, 40)}, which is {last.state}, "
            f"are still in {harmless(of.vessel, 40)}: record what became of them (packed, rework, slops, left)"]


def rests_on(plant: Plant, order: Order, of: Vessel, used: Sequence[Stock]) -> tuple[object, ...]:
    """What must be the same when an order is taken; quantities may differ as long as they suffice."""
    from .targets import target_of

    return (batches.freeze(target_of(plant, order.product)), of, plant.lessons(),
            tuple(replace(s, on_hand_kg=None, unpumpable_kg=None, reserved_kg=0.0) for s in used),
            tuple(b.batch for b in plant.batches(OPEN) if b.vessel == of.vessel))


# What is remarked

def _mass_words(designed: Designed, contents: Sequence[Content]) -> list[str]:
    stays = sum(c.kg for c in contents if c.what != FLUSH and c.counts)
    flush = sum(c.kg for c in contents if c.what == FLUSH and c.counts)
    if stays <= 0.0 and flush <= 0.0:
        return []
    said = f"the vessel holds {numbers.batch(designed.batch_kg)} kg: {numbers.batch(designed.asked_kg)} kg asked"
    if stays > 0.0:
        said += f" and {numbers.batch(stays)} kg of heel and line, as much of which stays there after"
    if flush > 0.0:
        said += f"; {numbers.batch(flush)} kg of the asked are flush oil, deducted from the charges"
    return [said]


def _foreign_words(known: Mapping[str, Stock], target: Target, contents: Sequence[Content]) -> list[str]:
    """What is in the vessel and not on the product's list: its mass counts, and somebody has to know."""
    from solver.allowed import candidates
    from solver.stocks import StockTable

    table = StockTable(known.values())
    listed = {table.codes[i] for i in candidates(table, target)}
    foreign: dict[str, float] = {}
    for content in (c for c in contents if c.counts):
        for code, part in content.parts.items():
            if code not in listed:
                foreign[code] = foreign.get(code, 0.0) + part * content.kg
    return [f"{harmless(code, 40)}, {numbers.batch(kg)} kg in vessel or line, is not on the product's list: the "
            "formulator decides" for code, kg in foreign.items()]


def _step_words(stocks: Sequence[Stock], weighed: Sequence[Stock], used: Sequence[Stock]) -> list[str]:
    codes = {s.code for s in used}
    coarser = [w for s, w in zip(stocks, weighed, strict=True) if s.code in codes and s.division_kg != w.division_kg]
    by_step: dict[float, list[str]] = {}
    for stock in coarser:
        by_step.setdefault(stock.division_kg or 0.0, []).append(harmless(stock.code, 40))
    return [f"weighed by the vessel's division of {step:.10g} kg: {', '.join(names)}"
            for step, names in by_step.items()]


def _stock_words(used: Sequence[Stock]) -> list[str]:
    """Whose values are old, typical or of a certificate: lots of one oil differ as much as a law is off."""
    from datetime import datetime

    today, said = datetime.now().date(), []
    for stock in used:
        name = harmless(stock.code, 40)
        if stock.source == "computed":
            said.append(f"{name}: computed after a top-up, not tested since")
        elif not stock.tested_on:
            said.append(f"{name}: no date of its test is known")
        elif (days := (today - datetime.fromisoformat(stock.tested_on).date()).days) > OLD_DAYS:
            said.append(f"{name}: last tested {days} days ago ({stock.tested_on})")
        elif stock.source in ("certificate", "typical"):
            said.append(f"{name}: its values are {'of a certificate' if stock.source == 'certificate' else 'typical'}, "
                        "not its lot's own test")
    return said
