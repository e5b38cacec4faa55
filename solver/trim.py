"""A trim: what to add to what is in a vessel so that every limit holds, and what to draw off first.

    minimise Σ p_i m_i (or Σ m_i)   over   m_i ≥ 0,   Σ_j M_j c_j + Σ_i m_i c_i ≤ 0 for every limit,   VI ≥ v,
    Σ M + Σ m ≤ room,   Σ M v + Σ m v ≤ litres at the mixing temperature

M_j is what is in the vessel: a measured batch as one stock with the laboratory's values, or each charge that was made.
The same function trims a measured batch and solves the charges still to come anew. For one oil a added to a batch m
under a law whose index A mixes by mass the answer is m = M (A_t − A_m)/(A_a − A_t).

Where the room is too small the most of the contents that can stay is found by the same rows, the contents tied to each
other. Every figure that is returned was recomputed from the exact masses.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from .errors import StockError
from .laws import knows_viscosity
from .linear import Stopwatch
from .properties import Array
from .recipe import Recipe, empty, predict_all, recipe_of
from .rows import as_table
from .stocks import Stock, StockTable
from .target import ShareRule, Target
from .trim_vessel import ABSURD, Ask, Found, Vessel, as_it_is, check, counted_inside, filled, off_by, over_by, vessel_of
from .whole import Rounded, rounded_rules

__all__ = ["ABSURD", "Trim", "additions", "effect", "with_and_without"]

DRAWN_STEP = 1.0  # kg to which what is drawn off is rounded up, where whole steps are asked


@dataclass(frozen=True)
class Trim:
    """What to add, and everything that is read off it. None: there is no such addition, or it is unknown."""

    status: str  # "optimal" (proven), "stopped" (the best known, or none by then), "infeasible"
    additions_kg: Mapping[str, float] | None = None  # stock → mass to add, only those used; {}: nothing need be added
    total_kg: float | None = None  # what the vessel then holds
    drawn_kg: float = 0.0  # what must be drawn off first, of everything alike
    recipe: Recipe | None = None  # the whole content then (the nearest one where infeasible): exact recomputation
    before: Mapping[str, float | None] = field(default_factory=dict)  # properties of what is in the vessel now
    cost: float | None = None  # of the additions, in currency
    gap: float | None = None  # (cost or mass − what none is below)/cost or mass
    absurd: bool = False  # more than ABSURD of the contents is added, or drawn off
    least_mass_kg: float | None = None  # where absurd: the least mass of any additions that would do …
    least_mass: Mapping[str, float] = field(default_factory=dict)  # … and of what
    litres: float | None = None  # volume of the total at the temperature of the fill
    packages: Mapping[str, int] = field(default_factory=dict)  # stock → whole drums or IBCs, where charged so
    rounded: tuple[Rounded, ...] = ()  # share rules that whole steps keep to the nearest step only
    broken: tuple[str, ...] = ()  # share rules that the content breaks even then, in words: the formulator decides
    chance: float | None = None  # asked; then …
    reached: bool | None = None  # … is each limit met with it …
    chances: Mapping[str, float] = field(default_factory=dict)  # … the chance of each limit …
    together: float | None = None  # … and of all at once
    notes: tuple[str, ...] = ()  # in words: what it does, what is absurd, the room, what is drawn off, rounding

    @property
    def added_kg(self) -> float | None:
        """Mass of all additions."""
        return None if self.additions_kg is None else float(sum(self.additions_kg.values()))


@dataclass(frozen=True)
class May:
    """What may be done besides adding."""

    draw: bool = True  # oil drawn off first
    grow: bool = False  # a larger total than asked
    forgiven: tuple[str, ...] = ()  # share rules that need not be held tighter than the contents are


def additions(contents: Sequence[Stock], stocks: StockTable | Iterable[Stock], target: Target, *,
              room_kg: float | None = None, least_kg: float = 0.0, fill: tuple[float, float] | None = None,
              total_kg: float | None = None, aim: str = "cost", whole: bool = True, chance: float | None = None,
              law_sigma: Mapping[str, float] | None = None, may_draw: bool = True,
              may_grow: bool = False, forgiven: Iterable[str] = (), time_limit: float = 5.0) -> Trim:
    """The additions of least cost (aim "cost", in currency, not per tonne) or least mass (aim "mass").

    contents: what is in the vessel, each with in_vessel_kg [kg] and `contents`, what it was made of, which share
    rules count (so additives are topped up to their treat rates). stocks: what may be added, by the target's list.
    room_kg: most that can be added; fill: (most litres of the total, at °C); least_kg: least that the vessel must
    hold in the end; total_kg: what it is to hold exactly, to the nearest whole step (the charges still to come). With
    the total free it is at most 20 times the contents. whole: whole steps, drums and least charges.
    chance (0.5 to 0.999): every limit is met with it, in place of guards (trim_chance.py); law_sigma as
    `confidence.subject` takes it, for the law's error of what is added.
    may_grow: where total_kg cannot be kept, the total may be more, as far as the room goes.
    may_draw: where nothing can be added that would do, the least that must be drawn off first is found (at most 90 %).

    Whole-number rules speak of recipes: a least share is left out; the most stocks counts what is in the vessel and is
    held of charges still to come (total_kg, or least_kg above the contents) while it can be; `broken` says where it
    is not. A share rule that the contents break is held as asked, for additions dilute: by a part of 0.02 over it is
    let be. Where nothing mends it, or for rules named in `forgiven` (the formulator's word), it is held no tighter
    than the contents are, and `broken` says so. The low side of a forgiven rule is open: its additive is not topped up.

    Raises StockError where a mass, a KV or a density of what is in the vessel is unknown, TargetError, StockError or
    RangeError on other bad input.
    """
    ask = Ask(tuple(contents), tuple(as_table(stocks).stocks), target, room_kg, least_kg, fill, total_kg, aim, whole)
    check(ask)
    watch, may = Stopwatch(time_limit), May(may_draw, may_grow, tuple(forgiven))
    if chance is not None:
        from .trim_chance import at_chance

        return at_chance(ask, chance, law_sigma, may, watch)
    return found_for(ask, may, watch)


def found_for(ask: Ask, may: May, watch: Stopwatch) -> Trim:
    """The additions for limits as they stand; where there are none, why."""
    found, stopped = searched(ask, may, watch)
    if found is not None:
        return found
    from .trim_why import nearest_to, reasons

    before, vessel = effect(ask.contents, target=ask.target), vessel_of(ask, may.forgiven)
    if stopped or watch.over:
        words = "time ran out before additions were found; give it more time, or allow fewer stocks"
        return Trim("stopped", recipe=empty(vessel.model, "stopped", (words,)), before=before, notes=(words,))
    near = nearest_to(vessel, watch)
    return Trim("infeasible", recipe=near, before=before, notes=reasons(vessel, may.forgiven, near, watch))


def searched(ask: Ask, may: May, watch: Stopwatch) -> tuple[Trim | None, bool]:
    """The additions in the first of the ways that has any, and whether time ran out in one that had none by then."""
    forgiven = may.forgiven
    stopped = False
    for way in _ways(ask, forgiven, may.grow):
        vessel = vessel_of(way.ask, way.forgiven)
        if way.draw:
            drawn = _drawn(vessel, way, ask, watch) if may.draw and ask.contents else None
            if drawn is not None:
                return drawn, stopped
            continue
        found = Found("optimal", vessel.contents) if as_it_is(vessel) else vessel.solve(watch)
        if found.masses is not None:
            return _made(vessel, found, way, ask, watch), stopped
        stopped |= found.status == "stopped"
        if watch.over:
            break
    return None, stopped


@dataclass(frozen=True)
class _Way:
    """One way to ask: which rules are given up, and whether some may be drawn off."""

    ask: Ask  # before anything was drawn off
    forgiven: tuple[str, ...]
    draw: bool = False
    drawn_kg: float = 0.0


def _ways(ask: Ask, forgiven: tuple[str, ...], may_grow: bool) -> Iterable[_Way]:
    """As asked; without the most stocks; to a larger total; with oil drawn off; with those rules forgiven that the
    contents are over.

    The most stocks is a rule on recipes: of the charges still to come it is held while it can be, of a trim never.
    """
    free = replace(ask, target=replace(ask.target, max_stocks=None))
    to_come = ask.total_kg is not None or ask.least_kg > ask.content_kg
    if ask.target.max_stocks is not None and to_come:
        yield _Way(ask, forgiven)
    yield _Way(free, forgiven)
    if may_grow and ask.total_kg is not None:
        yield _Way(replace(free, total_kg=None, least_kg=ask.total_kg), forgiven)
    yield _Way(free, forgiven, draw=True)
    over = _over(ask, forgiven)
    if over:
        yield _Way(free, (*forgiven, *over))
        yield _Way(free, (*forgiven, *over), draw=True)


def _over(ask: Ask, forgiven: tuple[str, ...]) -> tuple[str, ...]:
    """The rules that the contents are over, and that are not forgiven."""
    return tuple(rule.of for rule, _ in over_by(ask) if rule.of not in forgiven)


def _drawn(vessel: Vessel, way: _Way, asked: Ask, watch: Stopwatch) -> Trim | None:
    """The additions after the least was drawn off that leaves room for them; None: no such."""
    part = vessel.most_kept(watch)
    if part is None:
        return None
    content = way.ask.content_kg
    least = max(0.0, 1.0 - part) * content
    step = DRAWN_STEP if way.ask.whole else 0.0
    first = step * np.ceil(least / step - 1e-6) if step > 0.0 else least
    for drawn in (first, first + 1e-6 * content, first + max(step, 1e-4 * content)):
        kept = vessel_of(way.ask.kept(1.0 - drawn / content), way.forgiven)
        found = Found("optimal", kept.contents) if as_it_is(kept) else kept.solve(watch)
        if found.masses is not None:
            return _made(kept, found, replace(way, drawn_kg=float(drawn)), asked, watch)
    return None


def _made(vessel: Vessel, found: Found, way: _Way, asked: Ask, watch: Stopwatch) -> Trim:
    """Everything that is read off the exact masses."""
    from .trim_words import words

    masses = found.masses
    assert masses is not None
    model, total = vessel.model, float(masses.sum())
    table, added = model.table, np.where(vessel.added, masses, 0.0)
    made = {code: float(kg) for code, kg in zip(table.codes, added, strict=True) if kg > 0.0}
    trim = Trim(
        found.status, made, total, way.drawn_kg, recipe_for(vessel, masses, found.status),
        effect(way.ask.contents, target=way.ask.target), float(table.price @ added) / 1000.0, found.gap,
        _absurd(vessel, way, float(added.sum())),
        litres=vessel.litres_of(masses),
        packages={s.code: round(made[s.code] / s.package_kg) for s in table.stocks
                  if way.ask.whole and s.package_kg and s.code in made},
        rounded=rounded_rules(found.charges, masses) if found.charges is not None and way.ask.whole else (),
        broken=_broken(vessel, masses, way, asked.target.max_stocks))
    least: dict[str, float] = {}
    if trim.absurd and way.ask.aim == "cost":
        least = _least(vessel.ask, way.forgiven, watch)
        trim = replace(trim, least_mass_kg=sum(least.values()) if least else None, least_mass=least)
    over = _over(way.ask, way.forgiven) if trim.absurd or way.draw else ()
    spared = _least(way.ask, (*way.forgiven, *over), watch) if over else {}
    return replace(trim, notes=words(vessel, way.ask, trim, over, spared, asked.total_kg))


def _absurd(vessel: Vessel, way: _Way, added: float) -> bool:
    """Is more than a quarter of the contents added to them, or drawn off? Charges still to come are no trim."""
    to_come = vessel.ask.total_kg is not None or vessel.ask.least_kg > way.ask.content_kg
    return way.drawn_kg > ABSURD * way.ask.content_kg or (not to_come and added > ABSURD * vessel.ask.content_kg)


def _least(ask: Ask, forgiven: tuple[str, ...], watch: Stopwatch) -> dict[str, float]:
    """The least mass of additions in any quantities; empty where there are none."""
    vessel = vessel_of(replace(ask, aim="mass", whole=False), forgiven)
    masses = vessel.solve(watch).masses
    if masses is None:
        return {}
    return {code: float(kg) for code, kg, new in zip(vessel.model.table.codes, masses, vessel.added, strict=True)
            if new and kg > 0.0}


def recipe_for(vessel: Vessel, masses: Array, status: str) -> Recipe:
    """The whole content of a vessel read from exact masses [kg]; its cost only where all of it has a price."""
    total, model = float(masses.sum()), vessel.model
    judged = replace(model, requirements=(*model.requirements, *filled(vessel, masses)))
    made = recipe_of(judged, masses / total, status)
    unpriced = any(s.price_per_t is None for s in vessel.ask.contents)
    used = {code: float(kg) for code, kg in zip(model.table.codes, masses, strict=True) if kg > 0.0}
    return replace(made, charges_kg=used, batch_kg=total, cost_per_t=None if unpriced else made.cost_per_t)


def _broken(vessel: Vessel, masses: Array, way: _Way, most_stocks: int | None) -> tuple[str, ...]:
    """The rules that were given up and that the whole content breaks."""
    found, total = [], float(masses.sum())
    stocks = vessel.model.table.stocks
    for rule in way.ask.target.rules:
        share = float(sum(kg * s.part_of(rule.of) for kg, s in zip(masses, stocks, strict=True))) / total
        if rule.of in way.forgiven and off_by(rule, share) != 0.0:
            found.append(_rule_words(rule, share))
    new = {s.code for kg, s in zip(masses, stocks, strict=True) if kg > 0.0 and s.counted}
    number = len(new | counted_inside(way.ask.contents))
    if most_stocks is not None and number > most_stocks:
        found.append(f"it is then made of {number} base stocks and rework, and the product allows {most_stocks}: the "
                     "formulator has to agree")
    return tuple(found)


def _rule_words(rule: ShareRule, share: float) -> str:
    side = f"at most {100 * rule.high:g} %" if share > rule.high else f"at least {100 * rule.low:g} %"
    return f"{rule.of} is {100 * share:.3g} % of it, and the product asks {side}: the formulator has to agree"


def effect(contents: Sequence[Stock], *, law: str | None = None, target: Target | None = None
           ) -> dict[str, float | None]:
    """Every property of what is in a vessel, by code, in the registry's unit; None where a part of it lacks the value.

    contents: stocks with in_vessel_kg [kg]. The law is the target's, Refutas without one; a target's limits and
    lessons are read too. StockError for a content without mass or what the law needs; {} for none at all.
    """
    goal = target or Target("")
    ask = Ask(tuple(contents), (), replace(goal, law=law or goal.law), total_kg=1.0)
    check(ask)
    if not contents:
        return {}
    table = StockTable(contents)
    lacking = np.flatnonzero(~knows_viscosity(ask.target.law, table))
    if len(lacking):
        stock = contents[int(lacking[0])]
        cell = "density15" if stock.blending_kv is not None else "kv40" if stock.kv40 is None else "kv100"
        raise StockError(f"{stock.code}: the law {ask.target.law} needs its {cell}, which is unknown; type it",
                         stock=stock.code, cell=cell)
    masses = np.array([s.in_vessel_kg or 0.0 for s in contents])
    limited = tuple(x.property for x in goal.limits if x.property != "vi")
    return predict_all(table, masses / masses.sum(), ask.target.law, limited, goal.lessons)


def with_and_without(contents: Sequence[Stock], left_out: Iterable[str], *, law: str | None = None,
                     target: Target | None = None) -> tuple[dict[str, float | None], dict[str, float | None]]:
    """What is in a vessel with and without some of it (a heel that is ignored), each as `effect` reads it."""
    out = set(left_out)
    rest = [s for s in contents if s.code not in out]
    return effect(contents, law=law, target=target), effect(rest, law=law, target=target)
