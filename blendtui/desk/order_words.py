"""A proposal in words and as JSON: what would be charged, what it rests on, what is unlikely of it."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from blendtui.store.harmless import harmless
from solver.properties import lookup, volume_at
from solver.requirements import COST

from . import numbers
from .card import UNITS, content_json
from .card_text import exact
from .proposals import Proposal
from .sheet import NOT_A_CERTIFICATE

if TYPE_CHECKING:
    from solver.recipe import LimitResult

WIDTH = 80
STATUS = {"optimal": "least cost", "stopped": "best known, not proven to be the least cost"}


def proposal_text(made: Proposal, name: str = "") -> str:
    """A proposal as text of at most 80 columns; `name`: the batch that it became."""
    return "\n".join(line.rstrip() for line in _lines(made, name))


def _wrap(text: str, first: str = "", rest: str = "  ") -> list[str]:
    return textwrap.wrap(harmless(text), WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)


def _lines(made: Proposal, name: str) -> Iterator[str]:
    order = made.order
    asked = f"{order.amount:.10g} {UNITS.get(order.unit, order.unit)}"
    head = f"{harmless(order.product, 40)}, {asked} in {harmless(made.vessel.vessel, 40)}"
    told = f"{harmless(name, 60)}: {head}" if name else f"{head}: nothing is written"
    yield from _wrap(f"{told} ({STATUS.get(made.status, 'NO BLEND')})")
    yield ""
    if made.charges:
        yield from _charges(made)
    else:
        yield from (line for words in made.reasons for line in _wrap(f"! {words}"))
    yield ""
    yield from _fill(made)
    yield from _limits(made)
    yield from _effects(made)
    yield from (line for words in made.questions for line in _wrap(f"? {words}"))
    yield from (line for words in made.remarks for line in _wrap(f"- {words}"))
    yield ""
    yield NOT_A_CERTIFICATE


def _charges(made: Proposal) -> Iterator[str]:
    code = min(38, max(12, *(len(harmless(c.stock, 38)) for c in made.charges)))
    yield f"{'':>3}  {'stock':<{code}}{'kg':>12}{'± kg':>10}{'by kg':>10}"
    yield "-" * (37 + code)
    for charge in made.charges:
        step = made.steps_kg.get(charge.stock)
        yield (f"{charge.line:>3}  {harmless(charge.stock, 38):<{code}}{exact(charge.plan_kg):>12}"
               f"{exact(charge.tolerance_kg):>10}{'any' if step is None else exact(step):>10}")
    yield "-" * (37 + code)
    yield f"{'':>3}  {'charges':<{code}}{exact(sum(c.plan_kg for c in made.charges)):>12}"
    held = sum(c.kg for c in made.contents if c.counts)
    if held > 0.0:
        yield f"{'':>3}  {'in the vessel':<{code}}{exact(held):>12}"
    if made.recipe.cost_per_t is not None:
        yield from _wrap(f"cost {numbers.cost(made.recipe.cost_per_t)} per t, what is in the vessel at nothing")


def _fill(made: Proposal) -> Iterator[str]:
    if made.fill_l is not None:
        of = made.vessel
        least = f", at least {numbers.litres(of.least_fill_l)} L" if of.least_fill_l else ""
        pct = numbers.fixed(made.fill_pct, 1)
        yield from _wrap(f"fill at {made.order.mixed_at:g} °C: {numbers.litres(made.fill_l)} L, {pct} % of "
                         f"{numbers.litres(of.capacity_l)} L (at most {made.order.most_fill_pct:g} %{least})")


def _limits(made: Proposal) -> Iterator[str]:
    """Every limit, as it will be judged, with who asks."""
    rows = [x for x in made.recipe.limits if x.property != COST and volume_at(x.property) is None]
    if not rows or made.recipe.shares is None:
        return
    yield ""
    yield f"{'predicted':<30}{'value':>11}{'at least':>11}{'at most':>11}"
    yield "-" * 63
    for x in rows:
        low, high = ("" if v is None else numbers.value(x.property, v) for v in (x.low, x.high))
        label = lookup(x.property).label
        if len(label) > 29:
            yield label
            label = ""
        yield f"{label:<30}{numbers.value(x.property, x.value):>11}{low:>11}{high:>11}{_word(x)}"
    asked = [harmless(lookup(x.property).name, 40) for x in rows if any(s.startswith("customer") for s in x.sources)]
    if asked:
        yield from _wrap(f"asked by the customer: {', '.join(asked)}")
    yield ""


def _word(limit: LimitResult) -> str:
    """What stands behind a limit: nothing where it is met with its guard."""
    if limit.met is not False or limit.value is None:
        return " unknown" if limit.met is None else ""
    inside = (limit.low is None or limit.value >= limit.low) and (limit.high is None or limit.value <= limit.high)
    return " in its guard" if inside else " NOT MET"


def _effects(made: Proposal) -> Iterator[str]:
    shown = [(code, pair) for code, pair in made.effects.items() if None not in pair and volume_at(code) is None]
    if not shown:
        return
    word = "left out of the sums" if made.order.heel_ignored else "part of the sums"
    yield f"{f'heel and line ({word})':<40}{'with':>12}{'without':>12}"
    yield "-" * 64
    for code, (whole, without) in shown:
        yield f"{lookup(code).label[:39]:<40}{numbers.value(code, whole):>12}{numbers.value(code, without):>12}"
    yield ""


def proposal_json(made: Proposal, name: str = "") -> dict[str, Any]:
    """A proposal, numbers unrounded, unknown null."""
    order, recipe = made.order, made.recipe
    none = recipe.shares is None
    return {
        "batch": name or None, "product": order.product, "vessel": made.vessel.vessel, "status": made.status,
        "asked": order.amount, "unit": order.unit, "asked_kg": made.asked_kg, "batch_kg": made.batch_kg,
        "mix_c": order.mixed_at, "fill_l": made.fill_l, "fill_pct": made.fill_pct, "most_fill_pct": order.most_fill_pct,
        "contents": [content_json(c) for c in made.contents],
        "charges": [{"line": c.line, "stock": c.stock, "kg": c.plan_kg, "tolerance_kg": c.tolerance_kg,
                     "step_kg": made.steps_kg.get(c.stock), "lot": c.lot or None, "tank_c": c.celsius}
                    for c in made.charges],
        "predicted": None if none else dict(recipe.predicted), "cost_per_t": recipe.cost_per_t, "law": recipe.law,
        "limits": [{"property": x.property, "low": x.low, "high": x.high, "held_low": x.held_low,
                    "held_high": x.held_high, "value": x.value, "met": x.met, "sources": list(x.sources)}
                   for x in recipe.limits],
        "heel_ignored": order.heel_ignored or None,
        "effects": {code: {"with": whole, "without": without} for code, (whole, without) in made.effects.items()},
        "questions": list(made.questions), "remarks": list(made.remarks), "reasons": list(made.reasons)}
