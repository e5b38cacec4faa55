"""What is in a vessel and what may be added to it, as one linear problem in masses.

    contents_j fixed,  m_i ≥ 0,   Σ_i m_i c_i ≤ 0 for every limit,   least ≤ Σ m ≤ most,   Σ m_i v_i ≤ litres

Every row of a limit is homogeneous, so it holds for masses as for shares, and the total may be left free; only the
room has a right side. Share rules count what the contents were made of, so additives are topped up by their rules.
To draw off is to multiply all contents by one factor: the contents are then tied to each other and the most of them
that can stay is sought. The viscosity index, whole steps and bent rows are those of every recipe (windows.py,
charges.py, tangent.py).
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from .allowed import CLOSE, LeftOut, candidates
from .charges import HAIR, Charges
from .errors import StockError, TargetError
from .linear import FIRM_HOLD, Polytope, Stopwatch, Whole
from .properties import Array
from .recipe import GAP, exact_search
from .requirements import COST, Requirement
from .rows import Model, build
from .stocks import Stock, StockTable
from .target import ShareRule, Target
from .volume import HIGHEST, LOWEST, litres

ABSURD = 0.25  # part of the contents: to add or draw off more is no trim any more (common practice)
SMALL = 0.02  # part of what a rule asks by which contents may be off without a trim for it (common practice)
TIMES = 20.0  # a total of more than so many times the contents is a new batch, no trim
MOST_DRAWN = 0.9  # part of the contents: to draw off more is to begin anew
LEAN = 1e-7  # of the dearest price: what breaks ties between equally cheap additions towards less of them
WORTH = 1e-7, 1e-6  # of a vessel full of the dearest stock: a smaller difference is none; so in whole steps
MORSEL = 1.0  # kg: nobody adds less of an oil in bulk (common practice); additives have their treat rates
KEEP_GAP = 1e-7  # part of the contents to which the least that must be drawn off is found


@dataclass(frozen=True)
class Ask:
    """What is in the vessel, what may be added, and what is asked of the whole of it."""

    contents: tuple[Stock, ...]  # each with its in_vessel_kg above 0
    stocks: tuple[Stock, ...]
    target: Target
    room_kg: float | None = None  # most that the vessel takes besides; None: not known
    least_kg: float = 0.0  # least that it must hold in the end
    fill: tuple[float, float] | None = None  # most litres of the total, at °C
    total_kg: float | None = None  # what it is to hold in the end; None: free
    aim: str = "cost"  # or "mass"
    whole: bool = True  # in whole steps, drums and least charges

    @property
    def content_kg(self) -> float:
        """What is in the vessel [kg]."""
        return float(sum(s.in_vessel_kg or 0.0 for s in self.contents))

    def kept(self, part: float) -> Ask:
        """The same after all but this part of the contents was drawn off; the room grows by what went."""
        gone = (1.0 - part) * self.content_kg
        return replace(self, contents=tuple(replace(s, in_vessel_kg=part * (s.in_vessel_kg or 0.0))
                                            for s in self.contents),
                       room_kg=None if self.room_kg is None else self.room_kg + gone)


@dataclass(frozen=True)
class Found:
    """What a search found: exact masses of the whole content, shape (n,), or None."""

    status: str  # "optimal", "infeasible", "stopped"
    masses: Array | None = None
    charges: Charges | None = None
    gap: float = 0.0


@dataclass(frozen=True)
class Vessel:
    """One vessel, ready to be solved."""

    ask: Ask
    table: StockTable  # contents, then everything that was offered
    model: Model  # of contents and of every stock that may serve; its rows are those of the limits only
    contents: Array  # (n,) kg in the vessel, 0 for what may be added
    least: float  # kg that the total must be …
    most: float  # … and may be
    volume: Array | None  # (n,) L/kg at the temperature of the fill

    @property
    def added(self) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
        """Which of the stocks are not in the vessel yet, shape (n,)."""
        return np.array([s.in_vessel_kg is None for s in self.model.table.stocks], dtype=np.bool_)

    def litres_of(self, masses: Array) -> float | None:
        """Volume of masses at the temperature of the fill [L]; None where no fill is given."""
        return None if self.volume is None else float(self.volume @ masses)

    def full(self, masses: Array) -> bool:
        """Do masses [kg], shape (n,), go over the most that the vessel takes?"""
        over = self.volume is not None and self.ask.fill is not None and (
            float(self.volume @ masses) > self.ask.fill[0] * (1.0 + HAIR))
        return over or float(masses.sum()) > self.most * (1.0 + HAIR)

    def cost(self) -> Array:
        """What one kg of each stock counts by the aim, shape (n,); what is in the vessel counts nothing."""
        price = self.model.table.price if self.ask.aim == "cost" else np.ones(len(self.model.table))
        dearest = max(float(np.abs(np.where(self.added, price, 0.0)).max(initial=0.0)), 1e-12)
        return np.where(self.added, price / dearest + LEAN, 0.0)

    def solve(self, watch: Stopwatch) -> Found:
        """The additions that are best by the aim, on exact recomputation inside every limit."""
        stopped = False
        for least, most in self._spans():
            if most < least or self.model.short or any(need.empty for need in self.model.requirements):
                continue
            charges, problem = self.problem(least, most)
            outcome = exact_search(self.model, problem, self.cost(), watch, gap=GAP,
                                   gap_absolute=WORTH[self.ask.whole])[0]
            if outcome.x is not None:
                gap = max(0.0, outcome.value - outcome.bound) / max(abs(outcome.value), 1e-12)
                status = outcome.status if not self.model.bent else "stopped"
                return Found(status, self._exact(charges, outcome.x), charges, gap)
            stopped |= outcome.status == "stopped"
        return Found("stopped" if stopped else "infeasible")

    def most_kept(self, watch: Stopwatch) -> float | None:
        """The largest part of the contents that can stay so that additions bring the rest inside; None: none can."""
        if self.model.short or any(need.empty for need in self.model.requirements):
            return None
        here = self.contents > 0.0
        for least, most in self._spans(drawn=True):
            if most < least:
                continue
            charges, problem = self.problem(least, most)
            held = self.contents / charges.batch
            tied = replace(problem, lo=np.where(here, (1.0 - MOST_DRAWN) * held, problem.lo),
                           hi=np.where(here, held, problem.hi)).with_rows(self._ties(), hold=0.0)
            aim = np.where(here, -charges.batch / self.ask.content_kg, 0.0)
            outcome = exact_search(self.model, tied, aim, watch, gap=0.0, gap_absolute=KEEP_GAP)[0]
            if outcome.x is not None:
                return float(outcome.x[here].sum()) * charges.batch / self.ask.content_kg
        return None

    def _ties(self) -> list[Array]:
        """Rows that keep the contents in proportion to each other."""
        if int((self.contents > 0.0).sum()) < 2:
            return []
        part, rows = self.contents / self.contents.sum(), []
        for j in np.flatnonzero(part):
            row = -part[j] * (part > 0.0).astype(np.float64)
            row[j] += 1.0
            rows += [row, -row]
        return rows

    def _spans(self, drawn: bool = False) -> Iterator[tuple[float, float]]:
        """Least and most of the total [kg]: free, or ever further from what it is to be where steps ask for it."""
        total = self.ask.total_kg
        if total is None:
            yield (max(self.ask.least_kg, (1.0 - MOST_DRAWN) * self.ask.content_kg) if drawn else self.least), self.most
            return
        if not self.ask.whole:
            yield total, total
            return
        for tolerance in self._charges(total).tolerances():
            yield max(total - tolerance, 0.0 if drawn else self.ask.content_kg), total + tolerance

    def problem(self, least: float, most: float) -> tuple[Charges, Polytope]:
        """All masses that can be charged to a total within a span [kg], and their unit."""
        most = max(least, most * (1.0 - FIRM_HOLD))  # room has no hair to spare
        batch, slack = 0.5 * (least + most), 0.5 * (most - least)
        charges = self._charges(batch)
        problem = replace(charges.problem(slack), whole=self._numbers())
        if not self.ask.whole:
            problem = replace(problem, steps=None)
        if self.volume is not None and self.ask.fill is not None:
            problem = problem.with_rows([self.volume], hold=0.0, room=[self.ask.fill[0] * (1.0 - FIRM_HOLD) / batch])
        return charges, problem

    def _charges(self, batch: float) -> Charges:
        """How the stocks can be charged: in whole steps and no morsels of oil, or in any mass."""
        stocks = []
        for stock in self.model.table.stocks:
            if not self.ask.whole:
                stock = replace(stock, division_kg=None, package_kg=None, least_charge_kg=None)
            elif stock.counted and not stock.division_kg and not stock.package_kg:
                stock = replace(stock, least_charge_kg=max(MORSEL, stock.least_charge_kg or 0.0))
            stocks.append(stock)
        return Charges.of(replace(self.model, table=StockTable(stocks)), batch)

    def _numbers(self) -> Whole | None:
        """The most stocks of the product less those that are in the vessel already; a least share speaks of none."""
        table, most = self.model.table, self.ask.target.max_stocks
        if most is None:
            return None
        inside = counted_inside(self.ask.contents)
        counted = table.counted & np.array([code not in inside for code in table.codes])
        return Whole(counted, max(0, most - len(inside)), np.zeros(len(table)))

    def _exact(self, charges: Charges, x: Array) -> Array:
        masses = charges.masses(x) if self.ask.whole else np.round(x * charges.batch, 6)
        return np.where(self.added, masses, self.contents)


def counted_inside(contents: Sequence[Stock]) -> set[str]:
    """Codes of the base stocks and the rework that contents were made of."""
    found: set[str] = set()
    for stock in contents:
        inside = [part for part, share in stock.contents if share > 0.0]
        found |= {part.code for part in inside if part.counted} | counted_inside(inside)
    return found


def vessel_of(ask: Ask, forgiven: Collection[str] = ()) -> Vessel:
    """A vessel ready to be solved; `forgiven`: rules that the contents break and that are held no tighter than that.

    Raises StockError where a value that is needed of what is in the vessel is unknown, TargetError for what cannot be
    asked, and what `rows.build` raises.
    """
    _check_known(ask)
    stocks, out = _with_density(ask)
    table = StockTable((*ask.contents, *stocks))
    start = max(ask.content_kg, ask.least_kg, ask.total_kg or 0.0)
    model = build(table, replace(_target_of(ask, table, forgiven), batch_kg=start))
    gone = {x.stock for x in out}
    model = replace(model, rows=tuple(row for row in model.rows if not row.of_shares),
                    left_out=(*(x for x in model.left_out if x.stock not in gone), *out))
    here = np.array([s.in_vessel_kg or 0.0 for s in model.table.stocks])
    volume = None
    if ask.fill is not None:
        celsius = ask.fill[1]
        volume = np.array([litres(1.0, float(density), celsius) for density in model.table.density])
    least = start if ask.total_kg is None else ask.total_kg
    return Vessel(ask, table, model, here, least, _most(ask, model, volume), volume)


def _most(ask: Ask, model: Model, volume: Array | None) -> float:
    """The largest total that room, fill, tanks and good sense leave [kg]."""
    if ask.total_kg is not None:
        return ask.total_kg
    found = [TIMES * max(ask.content_kg, ask.least_kg), float(np.nansum(model.table.available))]
    if ask.room_kg is not None:
        found.append(ask.content_kg + ask.room_kg)
    if volume is not None and ask.fill is not None:
        found.append(ask.fill[0] / float(volume.min()))
    return min(found)


def _check_known(ask: Ask) -> None:
    for stock in ask.contents:
        if stock.blending_kv is None:
            lacking = "kv40" if stock.kv40 is None else "kv100"
            other = "KV100" if lacking == "kv40" else "KV40"
            both = stock.kv40 is None and stock.kv100 is None
            raise StockError(f"{stock.code}: its {'KV40 and KV100 are' if both else lacking.upper() + ' is'} unknown; "
                             f"measure {'them' if both else 'it'} on one sample{'' if both else f' with {other}'}: "
                             "additions move both, and the VI rests on the pair", stock=stock.code, cell=lacking)
        if ask.fill is not None and stock.density15 is None:
            raise StockError(f"{stock.code}: its density is unknown, and the room in the vessel is one of litres; "
                             "measure it", stock=stock.code, cell="density15")


def _with_density(ask: Ask) -> tuple[list[Stock], list[LeftOut]]:
    """The stocks that may be added, where litres count only those of known density, and the others."""
    able = [s for s in ask.stocks if s.in_vessel_kg is None]
    if ask.fill is None:
        return able, []
    listed = {able[i].code for i in candidates(StockTable(able), ask.target)}
    out = [LeftOut(s.code, "its density is unknown and the room in the vessel is one of litres", "density15")
           for s in able if s.density15 is None and s.code in listed]
    gone = {x.stock for x in out}
    return [s if s.code not in gone else replace(s, on_hand_kg=0.0) for s in able], out


def share_inside(ask: Ask, of: str) -> float:
    """What part of the whole a share rule on `of` counts if nothing more of it is added, 0–1: of the contents, or of
    the total that is asked where that is more."""
    total = max(ask.content_kg, ask.least_kg, ask.total_kg or 0.0)
    return sum((s.in_vessel_kg or 0.0) * s.part_of(of) for s in ask.contents) / total if total > 0.0 else 0.0


def off_by(rule: ShareRule, share: float) -> float:
    """How far outside a rule a share lies, as a part of what it asks; 0 inside, negative below."""
    if share > rule.high + CLOSE:
        return (share - rule.high) / max(rule.high, 1e-12)
    if share < rule.low - CLOSE:
        return (share - rule.low) / max(rule.low, 1e-12)
    return 0.0


def _target_of(ask: Ask, table: StockTable, forgiven: Collection[str]) -> Target:
    """The target with rules held no tighter than need be, and for stocks that its list names only.

    A rule's high side that the contents are over by a little (SMALL), or that is forgiven, is held at what the
    contents have: nobody dilutes a batch for that. A low side stays, for an additive can be topped up; forgiven, it
    is open. Without a price of what is in the vessel the cost of the whole is unknown, so no ceiling holds it.
    """
    target, rules = ask.target, []
    for rule in target.rules:
        share = share_inside(ask, rule.of)
        off = off_by(rule, share)
        if off > 0.0 and (off <= SMALL or rule.of in forgiven):
            rule = replace(rule, high=min(1.0, share))
        if rule.of in forgiven:
            rule = replace(rule, low=0.0)
        rules.append(rule)
    permitted = {table.codes[i] for i in candidates(table, target)}
    out = target.left_out | {s.code for s in ask.stocks if s.in_vessel_kg is None and s.code not in permitted}
    made = replace(target, rules=tuple(rules), left_out=frozenset(out), min_share=None)
    if all(s.price_per_t is not None for s in ask.contents):
        return made
    return replace(made, max_cost_per_t=None, moved={at: v for at, v in target.moved.items() if at[0] != COST})


def over_by(ask: Ask) -> tuple[tuple[ShareRule, float], ...]:
    """The share rules that what is in the vessel is over by more than a little, each with the share it has."""
    found = [(rule, share_inside(ask, rule.of)) for rule in ask.target.rules]
    return tuple((rule, share) for rule, share in found if off_by(rule, share) > SMALL)


def as_it_is(vessel: Vessel) -> bool:
    """Does what is in the vessel meet every limit and rule as it is, within what a rule may be off by?"""
    ask, masses = vessel.ask, vessel.contents
    total = float(masses.sum())
    if total < vessel.least * (1.0 - HAIR) or vessel.full(masses):
        return False
    held = [ShareRule(code, share, share) for code, share in ask.target.held.items()]
    rules = (*vessel.model.target.rules, *held)
    return not vessel.model.missed(masses / total) and all(
        abs(off_by(rule, share_inside(ask, rule.of))) <= SMALL for rule in rules)


def check(ask: Ask) -> None:
    """StockError or TargetError for contents, room or a total that cannot be."""
    for stock in ask.contents:
        kg = stock.in_vessel_kg
        if kg is None or not (np.isfinite(kg) and kg > 0.0):
            raise StockError(f"{stock.code}: how much of it is in the vessel is unknown; give its kg, above 0",
                             stock=stock.code, cell="in_vessel_kg")
    if not ask.contents and ask.total_kg is None and ask.least_kg <= 0.0:
        raise TargetError("nothing is in the vessel; design a recipe, or give the total that is asked", where="vessel")
    for name, value, least in (("room", ask.room_kg, 0.0), ("least content", ask.least_kg, 0.0),
                               ("total", ask.total_kg, 1e-9)):
        if value is not None and not (np.isfinite(value) and value >= least):
            raise TargetError(f"the {name} of {value:g} kg cannot be; give a mass of 0 or more", where="vessel")
    if ask.fill is not None:
        most, celsius = ask.fill
        if not (np.isfinite(most) and most > 0.0 and LOWEST <= celsius <= HIGHEST):
            raise TargetError(f"a fill of {most:g} L at {celsius:g} °C cannot be; give litres above 0 and °C "
                              f"between {LOWEST:g} and {HIGHEST:g}", where="vessel")
    if ask.aim not in ("cost", "mass"):
        raise TargetError(f"aim {ask.aim!r}: additions are sought by cost or by mass", where="aim")


def filled(vessel: Vessel, masses: Array) -> tuple[Requirement, ...]:
    """The fill as a limit on the litres of a tonne, for the recipe of these masses; empty where none is given."""
    if vessel.ask.fill is None:
        return ()
    high = 1000.0 * vessel.ask.fill[0] / float(masses.sum())
    return (Requirement(f"vol{vessel.ask.fill[1]:g}", None, high, 0.0, None, high, ("room in the vessel",)),)
