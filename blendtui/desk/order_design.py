"""The charges of a batch worked out: today's tanks, what is in the vessel, whole steps, and the fill as a limit.

    m_vessel = m_asked + m_heel + m_line,   Σ charges = m_asked − m_flush

for as much as stood in the vessel and its line before stays there after (the heel of the next batch), and flush oil
that goes into the batch is part of what is asked. Where heel and line are left out of the sums the recipe is that of
the charges alone; the room they take in the vessel is counted all the same.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from blendtui.store.batch_records import FLUSH, Batch, Content, Made, Vessel
from blendtui.store.harmless import harmless
from solver.properties import lookup
from solver.stocks import Stock
from solver.target import Limit, Target
from solver.volume import density_at, litres

from . import batches, blends, charge_lines, numbers
from .errors import DeskError

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe

MOST_FILL_PCT = 90.0  # of a vessel at mixing temperature; practice fills 85–90 % and keeps the rest for foam and a trim
TIME_LIMIT = 10.0  # s
ROUNDS = 20  # of litres becoming kg; each is some thousand times nearer than the last
SLIGHT = 0.03  # part by which no change of the recipe moves a volume: what is further off never fits
CELSIUS_OF = {"L15": 15.0, "L20": 20.0}
GUESS = 0.87  # kg/L, about that of base oils: where the density begins
MISSES = ("only the whole", "the nearest", "no blend")  # how notes begin that say what stands in the way
TOLD = ("kv40", "kv100", "vi", "density15")  # effects of a heel that are told whether they are limited or not


@dataclass(frozen=True)
class Plan:
    """What the charges are worked out from."""

    target: Target  # the product with what the customer asks; its batch_kg is not looked at
    vessel: Vessel
    stocks: tuple[Stock, ...]  # as they may be drawn on, with the divisions by which they are weighed
    known: Mapping[str, Stock]  # every stock there ever was, by its code: what contents were made of
    contents: tuple[Content, ...]
    asked: float
    unit: str = "kg"  # kg, L15 or L20
    mix_c: float = 60.0
    heel_ignored: bool = False
    most_fill_pct: float = MOST_FILL_PCT
    whole: bool = True
    charges_in: tuple[str, ...] = ()  # the plant's own order of charging


@dataclass(frozen=True)
class Designed:
    """The charges of a batch, or why there are none."""

    status: str  # optimal, stopped or infeasible
    recipe: Recipe  # of what the sums are about: contents that count and charges
    lines: tuple[charge_lines.Line, ...]  # in the order of charging; empty: no blend
    asked_kg: float
    batch_kg: float  # what the vessel is to hold, heel and line included
    density15: float | None  # kg/m³, of what the vessel holds; None: unknown
    fill_l: float | None  # of it at mixing temperature
    fill_pct: float | None  # of the vessel
    effects: Mapping[str, tuple[float | None, float | None]] = field(default_factory=dict)  # with heel, without
    remarks: tuple[str, ...] = ()
    reasons: tuple[str, ...] = ()  # why there is no blend


def most_fill(plan: Plan) -> float:
    """Most litres in the vessel at mixing temperature."""
    return (plan.vessel.capacity_l or 0.0) * plan.most_fill_pct / 100.0


def work_out(plan: Plan) -> Designed:
    """The charges of a plan. SolverError or DeskError in one line where it cannot be."""
    inside = _inside(plan)
    free = _first(plan, inside)
    if free.shares is None:  # the shares that are allowed cannot reach 100 %, however much is asked
        asked_kg = plan.asked if plan.unit == "kg" else GUESS * plan.asked
        return _none(plan, free, asked_kg, None, _why(inside, plan, _target(plan, asked_kg), free, free.reasons))
    asked_kg, words = _asked(plan, inside, free)
    density = free.predicted["density15"] or 0.0  # known: the search was told to use no other stock
    room = _room_words(plan, asked_kg, density)
    if room:
        return _none(plan, free, asked_kg, density, room)
    target = replace(_target(plan, asked_kg), limits=(*plan.target.limits, *_fill_limits(plan, asked_kg)))
    recipe, notes = _solved(plan, inside, target)
    status = "infeasible" if recipe.status == "infeasible" or recipe.charges_kg is None else recipe.status
    if status == "infeasible":
        room = _room_words(plan, asked_kg, recipe.predicted.get("density15") or density, slight=0.0)
        why = (*room, *_why(inside, plan, target, free, notes))
        return _none(plan, recipe, asked_kg, recipe.predicted.get("density15"), why)
    own = {s.code for s in inside}
    charges = {code: kg for code, kg in (recipe.charges_kg or {}).items() if code not in own and kg > 1e-6}
    found = charge_lines.lines(charges, plan.stocks, plan.charges_in)
    return _told(plan, recipe, found, asked_kg, [*words, *notes])


# What is in the vessel, and how much is wanted

def _as_made(plan: Plan, ignored: bool) -> Made:
    return Made(Batch("", plan.target.product, heel_ignored="yes" if ignored else ""), plan.contents)


def _inside(plan: Plan) -> list[Stock]:
    """Contents that the sums are about, as stocks of the solver."""
    return batches.in_vessel(_as_made(plan, plan.heel_ignored), plan.known)


def apart_kg(contents: Sequence[Content]) -> float:
    """What stands in vessel and line and stays there [kg]: heel and line."""
    return sum(c.kg for c in contents if c.what != FLUSH and c.counts)


def _target(plan: Plan, asked_kg: float) -> Target:
    """The target for the mass that the sums are about."""
    return replace(plan.target, batch_kg=asked_kg + (0.0 if plan.heel_ignored else apart_kg(plan.contents)))


def _in_any_mass(plan: Plan, inside: Sequence[Stock], asked_kg: float) -> Recipe:
    """The least cost in any mass, without the fill, of stocks whose density is known."""
    lowest = Limit("density15", lookup("density15").lowest, source=f"vessel {plan.vessel.vessel}")
    target = _target(plan, asked_kg)
    found = blends.best([*plan.stocks, *inside], replace(target, limits=(*target.limits, lowest)), TIME_LIMIT)
    return replace(found, limits=tuple(_without(x, lowest) for x in found.limits if x.sources != (lowest.source,)))


def _without(shown: LimitResult, own: Limit) -> LimitResult:
    """A limit of the answer without that of one's own which was put together with it."""
    if own.source not in shown.sources:
        return shown
    low = {} if shown.low != own.low else {"low": None, "held_low": None}
    return replace(shown, sources=tuple(x for x in shown.sources if x != own.source), **low)


def _first(plan: Plan, inside: Sequence[Stock]) -> Recipe:
    """The least cost in any mass, without the fill: enough for a density."""
    asked = plan.asked if plan.unit == "kg" else GUESS * plan.asked
    flush = sum(c.kg for c in plan.contents if c.what == FLUSH and c.counts)
    if asked <= flush:
        raise DeskError(f"{numbers.batch(flush)} kg of flush oil go into a batch of {numbers.batch(asked)} kg: nothing "
                        "is left to charge; order more, or let the flush oil be pumped out (out)")
    return _in_any_mass(plan, inside, asked)


def _asked(plan: Plan, inside: Sequence[Stock], free: Recipe) -> tuple[float, list[str]]:
    """What is asked [kg]; litres by the density that is predicted for just so many kg (a fixed point)."""
    if plan.unit == "kg":
        return plan.asked, []
    celsius, kg, recipe = CELSIUS_OF[plan.unit], GUESS * plan.asked, free
    for _ in range(ROUNDS):
        before, kg = kg, plan.asked * float(density_at(recipe.predicted["density15"], celsius)) / 1000.0
        if abs(kg - before) <= 1e-9 * kg:
            break
        recipe = _in_any_mass(plan, inside, kg)
    kg = round(kg, 6)
    return kg, [f"{plan.asked:.10g} L at {celsius:g} °C are {numbers.batch(kg)} kg by the density that is predicted, "
                f"{numbers.fixed(1000.0 * kg / plan.asked, 1)} kg/m³ at {celsius:g} °C"]


# Room

def _apart_l(plan: Plan) -> float:
    """Litres at mixing temperature that the sums leave out and the vessel holds all the same."""
    if not plan.heel_ignored:
        return 0.0
    return sum(litres(c.kg, c.cells["density15"], plan.mix_c) for c in plan.contents if c.what != FLUSH and c.counts)


def _fill_limits(plan: Plan, asked_kg: float) -> tuple[Limit, ...]:
    """The vessel's fill as a limit on the litres of a tonne at mixing temperature."""
    tonnes, apart = (_target(plan, asked_kg).batch_kg or 0.0) / 1000.0, _apart_l(plan)
    least = plan.vessel.least_fill_l
    low = None if not least or least <= apart else (least - apart) / tonnes
    return (Limit(f"vol{plan.mix_c:g}", low, (most_fill(plan) - apart) / tonnes,
                  source=f"vessel {harmless(plan.vessel.vessel, 40)}, fill at {plan.mix_c:g} °C"),)


def _room_words(plan: Plan, asked_kg: float, density15: float, slight: float = SLIGHT) -> tuple[str, ...]:
    """Why so much does not go into the vessel; empty: it may, or by `slight` of it another recipe may do."""
    total = asked_kg + apart_kg(plan.contents)
    density, name = float(density_at(density15, plan.mix_c)), harmless(plan.vessel.vessel, 40)
    fill, most, least = 1000.0 * total / density, most_fill(plan), plan.vessel.least_fill_l or 0.0
    if (1.0 - slight) * least <= fill <= (1.0 + slight) * most:
        return ()
    stays = apart_kg(plan.contents)
    words = f"{numbers.batch(total)} kg take {numbers.litres(fill)} L at {plan.mix_c:g} °C, and {name}"
    if fill > most:
        return (f"{words} may be filled to {numbers.litres(most)} L ({plan.most_fill_pct:g} % of "
                f"{numbers.litres(plan.vessel.capacity_l)} L): at most about "
                f"{numbers.kg(max(0.0, most * density / 1000.0 - stays))} kg can be ordered in it",)
    return (f"{words} needs at least {numbers.litres(least)} L to cover its stirrer and coil: at least about "
            f"{numbers.kg(least * density / 1000.0 - stays)} kg must be ordered in it",)


# Solving

def _solved(plan: Plan, inside: Sequence[Stock], target: Target) -> tuple[Recipe, list[str]]:
    if not plan.whole:
        recipe = blends.best([*plan.stocks, *inside], target, TIME_LIMIT)
        return recipe, list(recipe.reasons)
    made = blends.whole([*plan.stocks, *inside], target, TIME_LIMIT)
    return replace(made.recipe, charges_kg=made.charges_kg), list(made.notes)


def _why(inside: Sequence[Stock], plan: Plan, target: Target, free: Recipe, notes: Sequence[str]) -> tuple[str, ...]:
    """Why there is no blend: what cannot hold together, then what the search itself has to say.

    `free`: what was found in any mass and without the fill.
    """
    from .reason_words import conflict_words
    from .reasons import reasons

    said: list[str] = []
    # The tanks alone: what they cannot meet, no heel is to blame for.
    for report in reasons(plan.stocks, target):
        if report.status == "optimal":
            said = ["without what is in the vessel a blend exists"] if inside and free.status == "infeasible" else []
            break
        if "conflicts" in report.done:
            said = [conflict_words(c, report.left_out) for c in report.conflicts]
            break
    misses = [note for note in notes if note.startswith(MISSES)]
    return tuple(dict.fromkeys((*said, *misses, *notes)))


def _none(plan: Plan, recipe: Recipe, asked_kg: float, density15: float | None, why: tuple[str, ...]) -> Designed:
    total = asked_kg + apart_kg(plan.contents)
    fill = None if density15 is None else litres(total, density15, plan.mix_c)
    return Designed("infeasible", recipe, (), asked_kg, total, density15, fill, _pct(fill, plan), reasons=why)


def _pct(fill: float | None, plan: Plan) -> float | None:
    return None if fill is None or not plan.vessel.capacity_l else 100.0 * fill / plan.vessel.capacity_l


# What is told of it

def _told(plan: Plan, recipe: Recipe, lines: Sequence[charge_lines.Line], asked_kg: float, words: list[str]
          ) -> Designed:
    charges = _by_stock(lines)
    everything = batches.in_vessel(_as_made(plan, False), plan.known)
    held = {s.code: s.in_vessel_kg or 0.0 for s in everything}
    stays = {s.code for s in everything if not s.code.startswith(batches.NAMES[FLUSH])}
    whole = _read(plan, everything, {**held, **charges})
    without = _read(plan, everything, {**{c: kg for c, kg in held.items() if c not in stays}, **charges})
    total = sum(held.values()) + sum(charges.values())
    density = whole.predicted.get("density15")
    fill = None if density is None else litres(total, density, plan.mix_c)
    effects = _effects(plan, whole, without) if stays else {}
    if plan.unit == "kg" and density is not None:  # so that kg typed for litres is seen
        volume = numbers.litres(litres(asked_kg, density, CELSIUS_OF["L20"]))
        words.insert(0, f"{numbers.batch(asked_kg)} kg are about {volume} L at 20 °C")
    words += _heel_words(plan, whole, without) if stays else []
    words.append(charge_lines.order_words(lines, plan.charges_in))
    return Designed(recipe.status, recipe, tuple(lines), asked_kg, asked_kg + apart_kg(plan.contents), density, fill,
                    _pct(fill, plan), effects, tuple(words))


def _by_stock(lines: Sequence[charge_lines.Line]) -> dict[str, float]:
    found: dict[str, float] = {}
    for line in lines:
        found[line.stock.code] = found.get(line.stock.code, 0.0) + line.kg
    return found


def _read(plan: Plan, inside: Sequence[Stock], masses: Mapping[str, float]) -> Recipe:
    """Masses [kg] as the frozen target judges them."""
    from solver.recipe import evaluate

    total = sum(masses.values())
    target = replace(plan.target, batch_kg=total)
    here = [s for s in inside if masses.get(s.code, 0.0) > 0.0]
    return evaluate([*plan.stocks, *here], {code: kg / total for code, kg in masses.items() if kg > 0.0}, target)


def _effects(plan: Plan, whole: Recipe, without: Recipe) -> dict[str, tuple[float | None, float | None]]:
    codes = dict.fromkeys((*TOLD, *(x.property for x in whole.limits if x.property != "cost_per_t")))
    return {code: (whole.predicted.get(code), without.predicted.get(code)) for code in codes}


def _heel_words(plan: Plan, whole: Recipe, without: Recipe) -> list[str]:
    """What heel and line are worth, and where ignoring them leaves a limit missed."""
    from .batch_outlook import miss_words, outside
    from .reason_words import unit

    moved = ", ".join(f"{code.upper()} {numbers.value(code, whole.predicted.get(code))} {unit(code)}".rstrip()
                      + f" with it and {numbers.value(code, without.predicted.get(code))} without"
                      for code in ("kv40", "kv100", "vi"))
    if not plan.heel_ignored:
        return [f"heel and line are part of the blend: {moved}"]
    missed = [miss_words(x) for x in whole.limits if outside(x)]
    return [f"heel and line are left out of the sums; what is in the vessel all the same makes {moved}",
            *(f"WITH THE HEEL IT MISSES {words}" for words in missed)]
