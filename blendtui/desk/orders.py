"""Orders: a product and a quantity for a vessel become charges that are promised to one batch.

A proposal is worked out outside the write transaction, so that others need not wait for a search; when it is taken
what it rests on is read again inside, and where that has changed it is worked out anew.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from blendtui.store import batch_edits
from blendtui.store import cells as check
from blendtui.store.batch_records import CANCELLED, FLUSH, OPEN, Batch, Charge, Content, Made, Vessel
from blendtui.store.database import now
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Step
from blendtui.store.state import change_of
from solver.properties import volume_at
from solver.stocks import Stock
from solver.target import Target

from . import batches, charge_lines, formulas, heels, numbers
from .errors import DeskError
from .order_design import CELSIUS_OF, MOST_FILL_PCT, Designed, Plan, work_out
from .vessels import charge_order, vessel

if TYPE_CHECKING:
    from solver.recipe import Recipe

UNITS = ("kg", *CELSIUS_OF)
MIX_C = 60.0  # °C where none is said: practice mixes at 50–65
COOL, HOT = 30.0, 90.0  # °C from which a mixing temperature is questioned
AMBIENT_C = 20.0  # °C of a tank whose temperature is not said
TRIES = 4  # times that an order is worked out anew because others changed what it rests on
OLD_DAYS = 365  # of a test, from which it is remarked


class NoBlend(DeskError):
    """No charges meet the order; nothing was recorded."""


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
    return _proposed(plant, order, of, formulas.target_with(product, limits), contents, stocks, wider)


def _refuse_order(plant: Plant, order: Order, of: Vessel) -> None:
    """DeskError for what no order can be."""
    if order.unit not in UNITS:
        raise DeskError(f"{harmless(order.unit, 20)!r} is no unit of an order; usable are {', '.join(UNITS)}")
    if not math.isfinite(order.amount) or order.amount <= 0.0:
        raise DeskError(f"an order of {order.amount:g} {order.unit} cannot be; type what the customer is to get")
    if order.amount > check.LARGEST_KG:
        raise DeskError(f"an order of {order.amount:g} {order.unit} is more than {check.LARGEST_KG:g}; check the unit")
    if of.capacity_l is None:
        raise DeskError(f"{harmless(of.vessel, 40)} has no capacity, so its fill cannot be told; type it: blendtui vessel "
                        f"set {harmless(of.vessel, 40)} capacity_l=24000")
    celsius = MIX_C if order.mix_c is None else order.mix_c
    if not -20.0 <= celsius <= 150.0:
        raise DeskError(f"a mixing temperature of {celsius:g} °C lies outside −20 to 150 °C; °F?")
    if not 1.0 <= order.most_fill_pct <= 100.0:
        raise DeskError(f"a fill of {order.most_fill_pct:g} % of the vessel cannot be; type one such as 85 or 90")
    for stock, at in order.tank_c.items():
        if not -20.0 <= at <= 150.0:
            raise DeskError(f"{harmless(stock, 40) or 'the tanks'}: {at:g} °C lies outside −20 to 150 °C; °F?")
    if order.name:
        _new_name(plant, order.name)


def _new_name(plant: Plant, typed: str) -> str:
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


def _proposed(plant: Plant, order: Order, of: Vessel, target: Target, contents: Sequence[Content],
              stocks: Sequence[Stock], questions: Sequence[str], own: str = "") -> Proposal:
    heels.refuse_fuller(of, contents)
    charges_in = order.charges_in or charge_order(plant, of.vessel)
    weighed = charge_lines.in_steps(stocks, of)
    mix_c = MIX_C if order.mix_c is None else order.mix_c
    designed = work_out(Plan(target, of, tuple(weighed), batches.by_code(plant), tuple(contents), order.amount,
                             order.unit, mix_c, bool(order.heel_ignored.strip()), order.most_fill_pct, order.whole,
                             charges_in))
    charges = tuple(_charge(plant, order, n, line) for n, line in enumerate(designed.lines, 1))
    used = [s for s in stocks if any(c.stock == s.code for c in charges)]
    how = {"most_fill_pct": order.most_fill_pct, "whole": order.whole, "tank_c": dict(order.tank_c),
           "charges_in": list(order.charges_in)}
    return Proposal(order, of, target, designed, charges, tuple(contents),
                    (*questions, *_questions(plant, order, of, mix_c, own)),
                    (*heels.words(contents), *_mass_words(order, designed, contents), *designed.remarks,
                     *_step_words(stocks, weighed, used), *_stock_words(used)),
                    formulas.freeze(target, how), _rests_on(plant, order, of, used),
                    {line.stock.code: line.step_kg for line in designed.lines})


def _charge(plant: Plant, order: Order, number: int, line: charge_lines.Line) -> Charge:
    lots = plant.tank_lots(line.stock.code)
    celsius = order.tank_c.get(line.stock.code, order.tank_c.get("", AMBIENT_C))
    return Charge("", number, 0, line.stock.code, next(iter(lots)) if len(lots) == 1 else "", line.kg,
                  line.tolerance_kg, celsius, position=10 * number)


def _questions(plant: Plant, order: Order, of: Vessel, mix_c: float, own: str) -> list[str]:
    """What is unlikely of an order and may be so."""
    asked = []
    for other in (b for b in plant.batches(OPEN) if b.vessel == of.vessel and b.batch != own):
        asked.append(f"{harmless(of.vessel, 40)} holds {harmless(other.batch, 40)} ({harmless(other.product, 40)}, "
                     f"{batches.stage(plant.batch(other.batch))}, ordered by {harmless(other.ordered_by, 40)}), which is "
                     "open: the heel after it is not known yet")
    if not COOL <= mix_c <= HOT:
        asked.append(f"a mixing temperature of {mix_c:g} °C is far from the usual 50–65 °C")
    return asked


def _rests_on(plant: Plant, order: Order, of: Vessel, used: Sequence[Stock]) -> tuple[object, ...]:
    """What must be the same when an order is taken; quantities may differ as long as they suffice."""
    from .targets import target_of

    return (batches.freeze(target_of(plant, order.product)), of, plant.lessons(),
            tuple(replace(s, on_hand_kg=None, unpumpable_kg=None, reserved_kg=0.0) for s in used),
            tuple(b.batch for b in plant.batches(OPEN) if b.vessel == of.vessel))


# What is remarked

def _mass_words(order: Order, designed: Designed, contents: Sequence[Content]) -> list[str]:
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


def _step_words(stocks: Sequence[Stock], weighed: Sequence[Stock], used: Sequence[Stock]) -> list[str]:
    codes = {s.code for s in used}
    coarser = [w for s, w in zip(stocks, weighed, strict=True) if s.code in codes and s.division_kg != w.division_kg]
    by_step: dict[float, list[str]] = {}
    for stock in coarser:
        by_step.setdefault(stock.division_kg or 0.0, []).append(harmless(stock.code, 40))
    return [f"weighed by the vessel's division of {numbers.batch(step)} kg: {', '.join(names)}"
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


# Taking

class _Changed(Exception):
    """What a proposal rests on is another by now."""


def taken(plant: Plant, order: Order, *, by: str = "", why: str = "", sure: bool = False, seen: Proposal | None = None
          ) -> tuple[Made, Proposal]:
    """Take an order and say by which proposal: the one that was seen, or a new one where what it rests on changed."""
    who, proposal = batches.person(plant, by), seen or propose(plant, order)
    for _ in range(TRIES):
        _refuse_no_blend(proposal)
        if proposal.questions:
            batches.question(sure, "; ".join(proposal.questions))
        try:
            made = plant.step(lambda: _entered(plant, proposal, who, why)).result  # noqa: B023
        except _Changed:
            proposal = propose(plant, order)
            continue
        assert isinstance(made, Made)
        return made, proposal
    raise DeskError("others are changing the tanks or the product at this moment; order once more")


def take(plant: Plant, order: Order, *, by: str = "", why: str = "", sure: bool = False) -> Made:
    """Take an order: batch, contents and charges in one step, its oil promised.

    NoBlend (a DeskError) where no charges meet it; Questioned for what is unlikely.
    """
    return taken(plant, order, by=by, why=why, sure=sure)[0]


def _refuse_no_blend(proposal: Proposal) -> None:
    if not proposal.charges:
        why = "; ".join(proposal.reasons[:3]) or "no charges meet it"
        raise NoBlend(f"{harmless(proposal.order.product, 40)}: {why}; nothing was recorded")


def _entered(plant: Plant, proposal: Proposal, who: str, why: str) -> Step:
    order = proposal.order
    _recheck(plant, proposal)
    name, at = _new_name(plant, order.name), now()
    head = Batch(name, order.product, harmless(order.order_no.strip(), 60), harmless(order.customer.strip(), 80),
                 order.amount, order.unit, proposal.batch_kg, proposal.vessel.vessel,
                 MIX_C if order.mix_c is None else order.mix_c, proposal.formula, plant.revision(),
                 harmless(order.heel_ignored.strip(), 200), OPEN, at, who, harmless(order.note.strip(), 200))
    contents = tuple(replace(c, batch=name) for c in proposal.contents)
    charges = tuple(replace(c, batch=name) for c in proposal.charges)
    changes = [x for record in (head, *contents, *charges) for x in batch_edits.added(record)]
    changes += [batch_edits.moved(plant.stock(c.stock), -c.kg) for c in contents if c.what == FLUSH]
    said = f"{name} ordered: {numbers.batch(order.amount)} {order.unit} of {order.product} in {head.vessel}"
    return Step(tuple(changes), said, why, Made(head, contents, charges))


def _recheck(plant: Plant, proposal: Proposal, own: Made | None = None) -> None:
    """_Changed where values, formula, vessel or lessons are others now, or a tank no longer has enough."""
    planned = _planned(proposal.charges)
    try:
        there = [s for s in plant.stocks() if s.code in planned]
        vessel_now = vessel(plant, proposal.vessel.vessel)
    except DeskError:
        raise _Changed from None
    if own is not None:
        there = _given_back(there, own)
    else:
        there = heels.deducted(there, proposal.contents)
    if _rests_on(plant, proposal.order, vessel_now, there) != proposal.rests_on:
        raise _Changed
    for stock in there:
        if stock.available_kg is not None and planned[stock.code] > stock.available_kg + 1e-6:
            raise _Changed


def _planned(charges: Sequence[Charge]) -> dict[str, float]:
    found: dict[str, float] = {}
    for charge in charges:
        found[charge.stock] = found.get(charge.stock, 0.0) + charge.plan_kg
    return found


# Afterwards

def redesign(plant: Plant, batch: str, *, by: str = "", why: str = "", sure: bool = False) -> Made:
    """Work the charges of an open batch out anew, before the first of them: on today's tanks, by the product as it is
    today (with the customer's limits of the order); contents stay as they were recorded."""
    for _ in range(TRIES):
        before = plant.batch(batch)
        proposal = propose_again(plant, batch)
        _refuse_no_blend(proposal)
        if proposal.questions:
            batches.question(sure, "; ".join(proposal.questions))
        try:
            made = plant.step(lambda: _entered_again(plant, before, proposal, why)).result  # noqa: B023
        except _Changed:
            continue
        assert isinstance(made, Made)
        return made
    raise DeskError("others are changing the tanks or the product at this moment; design once more")


def propose_again(plant: Plant, batch: str) -> Proposal:
    """What a new design of an open batch would be; nothing is written. DeskError once something was charged."""
    from .targets import target_of

    made = _uncharged(plant, batch)
    head, how = made.head, formulas.how_of(made)
    limits = formulas.customer_limits_of(made)
    order = Order(head.product, head.asked, head.vessel, head.unit, head.customer, head.order_no, mix_c=head.mix_c,
                  heel_ignored=head.heel_ignored, most_fill_pct=float(how.get("most_fill_pct", MOST_FILL_PCT)),
                  whole=bool(how.get("whole", True)), tank_c=dict(how.get("tank_c") or {}),
                  charges_in=tuple(how.get("charges_in") or ()))
    target = formulas.target_with(target_of(plant, head.product), limits)
    stocks = _given_back(plant.stocks(), made)
    return _proposed(plant, order, vessel(plant, head.vessel), target, made.contents, stocks, (), own=head.batch)


def _uncharged(plant: Plant, batch: str) -> Made:
    made = batches.opened(plant, batch)
    if made.charged:
        raise DeskError(f"{harmless(batch, 40)}: {len(made.charged)} of its charges are in the vessel already, so it is "
                        f"not designed anew; blendtui batch replan {harmless(batch, 40)} works out those to come")
    return made


def _given_back(stocks: Sequence[Stock], made: Made) -> list[Stock]:
    own = _planned(made.to_charge)
    return [replace(s, reserved_kg=max(0.0, s.reserved_kg - own.get(s.code, 0.0))) for s in stocks]


def _entered_again(plant: Plant, before: Made, proposal: Proposal, why: str) -> Step:
    made = _uncharged(plant, before.name)
    if made != before:
        raise _Changed
    _recheck(plant, proposal, made)
    # Nothing was charged, so the old lines are no more than a plan: the journal keeps them.
    changes: list[Change] = []
    for old in made.charges:
        row = {c: v for c, v in (plant.row("charge", old.batch, old.line) or {}).items()}
        changes.append(change_of("charge", (old.batch, old.line), row, None))
    charges = tuple(replace(c, batch=made.name) for c in proposal.charges)
    kept = {old.line: n for n, old in enumerate(changes)} if False else {}
    changes += [x for charge in charges for x in batch_edits.added(charge)]
    changes.append(batch_edits.changed(made.head, batch_kg=proposal.batch_kg, formula=proposal.formula,
                                       formula_entry=plant.revision()))
    del kept
    head = replace(made.head, batch_kg=proposal.batch_kg, formula=proposal.formula, formula_entry=plant.revision())
    return Step(tuple(changes), f"{made.name} designed anew", why, replace(made, head=head, charges=charges))
