"""Orders: a product and a quantity for a vessel become charges that are promised to one batch.

A proposal is worked out outside the write transaction, so that others need not wait for a search; when it is taken
what it rests on is read again inside, and where that has changed it is worked out anew.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from blendtui.store import batch_edits
from blendtui.store.batch_records import CANCELLED, FLUSH, OPEN, Batch, Charge, Made
from blendtui.store.database import now
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Step
from blendtui.store.state import change_of
from solver.stocks import Stock

from . import batches, formulas, heels, numbers
from .errors import DeskError
from .order_design import MOST_FILL_PCT
from .proposals import Order, Proposal, new_name, propose, proposed, rests_on
from .vessels import vessel

__all__ = ["NoBlend", "Order", "Proposal", "cancel", "propose", "propose_again", "redesign", "redesigned", "reorder",
           "take", "taken"]
SAID = 6  # reasons in one line
TRIES = 8  # times that an order is worked out anew because others changed what it rests on


class NoBlend(DeskError):
    """No charges meet the order; nothing was recorded."""


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
            batches.question(sure, "; ".join(proposal.questions) + ".")
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
        why = "; ".join(proposal.reasons[:SAID]) or "no charges meet it"
        raise NoBlend(f"{harmless(proposal.order.product, 40)}: {why}; nothing was recorded")


def _entered(plant: Plant, proposal: Proposal, who: str, why: str) -> Step:
    order = proposal.order
    _recheck(plant, proposal)
    name, at = new_name(plant, order.name), now()
    head = Batch(name, order.product, harmless(order.order_no.strip(), 60), harmless(order.customer.strip(), 80),
                 order.amount, order.unit, proposal.batch_kg, proposal.vessel.vessel,
                 order.mixed_at, proposal.formula, plant.revision(),
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
    if own is None:
        flush = {c.stock for c in proposal.contents if c.what == FLUSH}
        heels.deducted([s for s in plant.stocks() if s.code in flush], proposal.contents)  # it promises nothing itself
    there = heels.deducted(there, proposal.contents) if own is None else _given_back(there, own)
    if rests_on(plant, proposal.order, vessel_now, there) != proposal.rests_on:
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
    """As `redesigned`: the batch."""
    return redesigned(plant, batch, by=by, why=why, sure=sure)[0]


def redesigned(plant: Plant, batch: str, *, by: str = "", why: str = "", sure: bool = False) -> tuple[Made, Proposal]:
    """Work the charges of an open batch out anew, before the first of them: on today's tanks, by the product as it is
    today (with the customer's limits of the order); contents stay as they were recorded."""
    who = batches.person(plant, by)
    for _ in range(TRIES):
        before = plant.batch(batch)
        proposal = propose_again(plant, batch)
        _refuse_no_blend(proposal)
        if proposal.questions:
            batches.question(sure, "; ".join(proposal.questions) + ".")
        try:
            made = plant.step(lambda: _entered_again(plant, before, proposal, who, why)).result  # noqa: B023
        except _Changed:
            continue
        assert isinstance(made, Made)
        return made, proposal
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
    return proposed(plant, order, vessel(plant, head.vessel), target, made.contents, stocks, (), own=head.batch)


def _uncharged(plant: Plant, batch: str) -> Made:
    made = batches.opened(plant, batch)
    if made.charged:
        raise DeskError(f"{harmless(batch, 40)}: {len(made.charged)} of its charges are in the vessel already, so it "
                        f"is not designed anew; blendtui batch replan {harmless(batch, 40)} works out those to come")
    return made


def _by(plant: Plant, who: str) -> str:
    """Who did it, where that is another than the login name that every entry has."""
    return "" if who == plant.who else f" by {who}"


def _given_back(stocks: Sequence[Stock], made: Made) -> list[Stock]:
    own = _planned(made.to_charge)
    return [replace(s, reserved_kg=max(0.0, s.reserved_kg - own.get(s.code, 0.0))) for s in stocks]


def _entered_again(plant: Plant, before: Made, proposal: Proposal, who: str, why: str) -> Step:
    made = _uncharged(plant, before.name)
    if made != before:
        raise _Changed
    _recheck(plant, proposal, made)
    # Nothing was charged, so the old lines are no more than a plan: the journal keeps them.
    changes: list[Change] = [change_of("charge", (old.batch, old.line), plant.row("charge", old.batch, old.line), None)
                             for old in made.charges]
    charges = tuple(replace(c, batch=made.name) for c in proposal.charges)
    changes += [x for charge in charges for x in batch_edits.added(charge)]
    new = {"batch_kg": proposal.batch_kg, "formula": proposal.formula, "formula_entry": plant.revision()}
    changes.append(batch_edits.changed(made.head, **new))
    head = replace(made.head, **new)  # type: ignore[arg-type]
    said = f"{made.name} designed anew{_by(plant, who)}"
    return Step(tuple(changes), said, why, replace(made, head=head, charges=charges))


def reorder(plant: Plant, batch: str, lines: Sequence[int], *, by: str = "", why: str = "") -> Made:
    """Give the lines still to come another order, as the card is to have them; DeskError unless each is named once."""
    who = batches.person(plant, by)

    def make() -> Step:
        made = batches.opened(plant, batch)
        todo = {c.line: c for c in made.to_charge}
        if sorted(lines) != sorted(todo):
            raise DeskError(f"{harmless(batch, 40)}: name every line still to come once, in the order wished; they are "
                            + (", ".join(f"{c.line} {harmless(c.stock, 20)}" for c in todo.values()) or "none"))
        places = sorted(c.position for c in todo.values())
        changes = [batch_edits.changed(todo[line], position=place) for line, place in zip(lines, places, strict=True)]
        moved = {line: replace(todo[line], position=place) for line, place in zip(lines, places, strict=True)}
        after = tuple(sorted((moved.get(c.line, c) for c in made.charges), key=lambda c: (c.position, c.line)))
        said = f"{made.name}: order of charging {' '.join(str(n) for n in lines)}{_by(plant, who)}"
        return Step(tuple(changes), said, why, replace(made, charges=after))

    made = plant.step(make).result
    assert isinstance(made, Made)
    return made


def cancel(plant: Plant, batch: str, *, by: str = "", why: str = "", sure: bool = False) -> Made:
    """Cancel an open batch, with its reason: what it still had to charge is free again, its record stands.

    Questioned once something was charged, or flush oil drawn with the order.
    """
    who, reason = batches.person(plant, by), harmless(why.strip(), 200)
    if not reason:
        raise DeskError("a batch is cancelled only with a reason; type why (--why TEXT)")

    def make() -> Step:
        made = batches.opened(plant, batch)
        inside = sum(c.actual_kg or 0.0 for c in made.charged)
        flush = sum(c.kg for c in made.contents if c.what == FLUSH)
        asked = [f"{numbers.batch(inside)} kg are charged into {harmless(batch, 40)} already; record what becomes of "
                 "it (rework, slops) as well."] if inside > 0.0 else []
        if flush > 0.0:
            asked.append(f"{numbers.batch(flush)} kg of flush oil were drawn from their tank with the order of "
                         f"{harmless(batch, 40)}; where they were not, dip the tank and set its book.")
        if asked:
            batches.question(sure, " ".join(asked))
        new = {"state": CANCELLED, "closed_at": now(), "closed_by": who, "why": reason}
        return Step((batch_edits.changed(made.head, **new),), f"{made.name} cancelled", reason,
                    replace(made, head=replace(made.head, **new)))  # type: ignore[arg-type]

    made = plant.step(make).result
    assert isinstance(made, Made)
    return made
