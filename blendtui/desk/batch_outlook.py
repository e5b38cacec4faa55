"""What a batch will be if the rest is charged as planned: predicted, and judged by its frozen target.

In the vessel is what was charged, with the values it had then; once a trim is planned it is the batch as the laboratory
found it, and what was charged since.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from blendtui.store.batch_records import DROPPED, Charge, Made, Vessel
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.errors import SolverError
from solver.stocks import Stock
from solver.target import ShareRule, Target
from solver.volume import litres

from . import batches, numbers
from .batch_lessons import means
from .errors import DeskError
from .reason_words import heading, unit
from .trimming import MOST_FILL, measured_batch

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe
    from solver.trim import Trim

OFTEN = 1e-6  # of a figure: what a recomputation may be off


@dataclass(frozen=True)
class Outlook:
    """A batch as it will be; None where it cannot be predicted."""

    made: Made
    total_kg: float  # when all is charged, a heel that is ignored included
    recipe: Recipe | None
    why_not: str  # why it cannot be predicted
    missed: tuple[str, ...]  # limits and share rules that it will miss, in words
    near: tuple[str, ...]  # limits that it will meet, but not with their guard
    fill_l: float | None = None  # at mixing temperature
    capacity_l: float | None = None
    remedy: Trim | None = None  # what would put it right with the charges to come, where that was looked for
    remedy_words: tuple[str, ...] = ()

    @property
    def predicted(self) -> Mapping[str, float | None]:
        """Property code → value, in the registry's unit."""
        return {} if self.recipe is None else self.recipe.predicted

    @property
    def good(self) -> bool:
        """Will every limit be met, guards included, and every share rule be kept?"""
        return self.recipe is not None and not self.missed and not self.near

    @property
    def words(self) -> tuple[str, ...]:
        """What it misses or comes near to, a sentence each."""
        if self.recipe is None:
            return (f"it cannot be predicted: {self.why_not}",)
        told = (*(f"MISSES {x}" for x in self.missed), *self.near) or (
            "by the prediction every limit is met; the laboratory decides",)
        full = self.fill_pct
        if full is None or not 100.0 * MOST_FILL < full <= 100.0:
            return told
        return (*told, f"the vessel will be {full:.0f} % full at {self.made.head.mix_c:g} °C; practice fills to "
                       f"{100.0 * MOST_FILL:.0f} %, foam and a trim included")

    @property
    def fill_pct(self) -> float | None:
        """How full the vessel will be, % of its capacity at mixing temperature."""
        if self.fill_l is None or not self.capacity_l:
            return None
        return 100.0 * self.fill_l / self.capacity_l


def outlook(plant: Plant, made: Made) -> Outlook:
    """What a batch will be if the charges to come are made as planned."""
    stocks = own_stocks(plant, made)
    target = batches.target_of(plant, made)
    inside, rest = contents(plant, made, target), to_come(made)
    vessel = vessel_of(plant, made)
    return _read(made, inside, rest, stocks, target, None if vessel is None else vessel.capacity_l)


def vessel_of(plant: Plant, made: Made) -> Vessel | None:
    """The vessel of a batch, while the plant has it."""
    return next((v for v in plant.vessels() if v.vessel == made.head.vessel), None)


def apart_kg(made: Made, inside: Sequence[Stock]) -> float:
    """What the vessel holds besides what the sums are about [kg]: a heel that is ignored."""
    return max(0.0, made.in_vessel_kg - sum(s.in_vessel_kg or 0.0 for s in inside))


def _read(made: Made, inside: Sequence[Stock], rest: Mapping[str, float], stocks: Sequence[Stock], target: Target,
          capacity_l: float | None) -> Outlook:
    """The outlook of contents and charges to come [kg by stock]."""
    from solver.recipe import evaluate

    masses = {s.code: s.in_vessel_kg or 0.0 for s in inside}
    for code, kg in rest.items():
        masses[code] = masses.get(code, 0.0) + kg
    total = sum(masses.values())
    if total <= 0.0:
        return Outlook(made, made.in_vessel_kg, None, "nothing is in the vessel and nothing is to come", (), (), None,
                       capacity_l)
    wanted, whole = [s for s in stocks if s.code in rest], total + apart_kg(made, inside)
    target = replace(target, batch_kg=total)
    try:
        recipe = evaluate([*inside, *wanted], {code: kg / total for code, kg in masses.items() if kg > 0.0}, target)
    except SolverError as error:
        return Outlook(made, whole, None, str(error), (), (), None, capacity_l)
    density = recipe.predicted.get("density15")
    fill = None if density is None else litres(whole, density, made.head.mix_c)  # a heel that is ignored too
    limits = [x for x in recipe.limits if x.property != "cost_per_t"]
    missed = [miss_words(x) for x in limits if outside(x)] + _rules(target, [*inside, *wanted], masses, made)
    missed += [f"{harmless(code, 40)} is not on the product's list: the formulator decides"
               for code in unlisted(made, stocks, target)]
    if fill is not None and capacity_l is not None and fill > capacity_l:
        missed.append(f"room: {numbers.litres(fill)} L at {made.head.mix_c:g} °C, the vessel holds "
                      f"{numbers.litres(capacity_l)} L")
    near = tuple(near_words(x) for x in limits if x.met is False and not outside(x))
    return Outlook(made, whole, recipe, "", tuple(missed), near, fill, capacity_l)


def predicted(plant: Plant, made: Made) -> Mapping[str, float | None]:
    """Property code → what it is predicted to be when all is charged; empty where that cannot be told."""
    return outlook(plant, made).predicted


# What is in the vessel, and what is to come

def own_stocks(plant: Plant, made: Made) -> list[Stock]:
    """Every stock there ever was, with what this batch has promised to itself given back."""
    own = to_come(made)
    return [replace(s, reserved_kg=max(0.0, s.reserved_kg - own.get(s.code, 0.0)))
            for s in plant.stocks(include_retired=True)]


def to_come(made: Made) -> dict[str, float]:
    """Stock → kg that is planned and not charged yet."""
    found: dict[str, float] = {}
    for charge in made.to_charge:
        found[charge.stock] = found.get(charge.stock, 0.0) + charge.plan_kg
    return found


def contents(plant: Plant, made: Made, target: Target) -> list[Stock]:
    """What is in the vessel as stocks of the solver: as charged, or as measured before a trim and charged since."""
    stocks = batches.by_code(plant)
    base = max((s.round for s in made.samples if s.round < made.rounds and means(made, s.sample)), default=None)
    if base is None:
        return batches.in_vessel(made, stocks)
    since = [batches.charge_stock(c, stocks, kg) for c, kg in batches.held(made)
             if isinstance(c, Charge) and c.round > base and kg > 0.0]
    left = made.in_vessel_kg - sum(s.in_vessel_kg or 0.0 for s in since)
    try:
        measured = measured_batch(plant, replace(made, charges=tuple(c for c in made.charges if c.round <= base)),
                                  target)[0]
    except DeskError:
        return batches.in_vessel(made, stocks)  # not measured well enough to start from
    return [replace(measured, in_vessel_kg=left), *since] if left > 0.0 else since


def fill_of(masses: Sequence[tuple[Stock, float]], celsius: float) -> float | None:
    """Litres of masses [kg] of stocks together at a temperature; None where a density is unknown."""
    if any(stock.density15 is None for stock, kg in masses if kg > 0.0):
        return None
    return sum(litres(kg, stock.density15 or 0.0, celsius) for stock, kg in masses if kg > 0.0)


# Words

def outside(limit: LimitResult) -> bool:
    """Is a limit missed itself, and not only its guard?"""
    value = limit.value
    if value is None:
        return False
    slack = OFTEN * max(1.0, abs(value))
    return (limit.low is not None and value < limit.low - slack) or (
        limit.high is not None and value > limit.high + slack)


def miss_words(limit: LimitResult) -> str:
    """A limit that is missed: `VI 104, low 105`."""
    low = limit.low is not None and limit.value is not None and limit.value < limit.low
    side, at = ("low", limit.low) if low else ("high", limit.high)
    return f"{_amount(limit)}, {side} {numbers.value(limit.property, at)}{_apart(limit, at)}"


def near_words(limit: LimitResult) -> str:
    """A limit that is met but for its guard."""
    low = limit.held_low is not None and limit.value is not None and limit.value < limit.held_low
    side, at, held = ("low", limit.low, limit.held_low) if low else ("high", limit.high, limit.held_high)
    return (f"{_amount(limit)} is inside {side} {numbers.value(limit.property, at)}, nearer than its guard "
            f"({numbers.value(limit.property, held)})")


def _amount(limit: LimitResult) -> str:
    return f"{heading(limit.property)} {numbers.value(limit.property, limit.value)} {unit(limit.property)}".rstrip()


def _apart(limit: LimitResult, at: float | None) -> str:
    """Where rounding would show no difference, the difference itself."""
    if at is None or limit.value is None or numbers.value(limit.property, limit.value) != numbers.value(
            limit.property, at):
        return ""
    return f" (by {numbers.figures(abs(limit.value - at), 2)})"


def _rules(target: Target, stocks: Sequence[Stock], masses: Mapping[str, float], made: Made) -> list[str]:
    """Share rules that the whole batch breaks by more than whole steps and tolerances explain."""
    total = sum(masses.values())
    found = []
    for rule in target.rules:
        kg = sum(masses.get(s.code, 0.0) * s.part_of(rule.of) for s in stocks)
        low, high = rule.low * total, rule.high * total
        off = max(low - kg, kg - high)
        if off > max(_allowed(rule, low, high, stocks, made), OFTEN * total):
            asked = f"low {100.0 * rule.low:g}" if low > kg else f"high {100.0 * rule.high:g}"
            found.append(f"{harmless(rule.of, 40)} {numbers.figures(100.0 * kg / total, 3)} %, {asked} % "
                         f"(by {numbers.kg(off)} kg)")
    return found


def broken(plant: Plant, made: Made) -> tuple[str, ...]:
    """Share rules that what is in the vessel breaks (a treat rate, a cap), and stocks that are not on the list."""
    target, stocks = batches.target_of(plant, made), own_stocks(plant, made)
    inside = contents(plant, made, target)
    masses = {s.code: s.in_vessel_kg or 0.0 for s in inside}
    return (*(_rules(target, inside, masses, made) if sum(masses.values()) > 0.0 else ()),
            *(f"{harmless(code, 40)} is not on the product's list" for code in unlisted(made, stocks, target)))


def unlisted(made: Made, stocks: Sequence[Stock], target: Target) -> list[str]:
    """Stocks that were charged and that the product's list does not permit."""
    from solver.allowed import candidates
    from solver.stocks import StockTable

    charged = {c.stock for c in made.charged}
    table = StockTable(s for s in stocks if s.code in charged)
    permitted = set(candidates(table, target))
    return [s.code for i, s in enumerate(table.stocks) if i not in permitted]


def _allowed(rule: ShareRule, low: float, high: float, stocks: Sequence[Stock], made: Made) -> float:
    """What a rule may be off [kg]: what the nearest whole step is off, and the tolerance of its charges."""
    serving = [s for s in stocks if s.part_of(rule.of) > 0.0]
    plain = [*serving, *(of for s in serving for of, _ in s.contents)]
    step = max((s.package_kg or s.division_kg or 0.0 for s in plain), default=0.0)
    below = step * math.floor(high / step + OFTEN) if step > 0.0 else high
    nearest = max(0.0, min(low - below, below + step - high))
    codes = {s.code for s in plain}
    return nearest + max((c.tolerance_kg for c in made.charges if c.stock in codes and c.state != DROPPED), default=0.0)
