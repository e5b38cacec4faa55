"""A trim each of whose limits is met, by the next result of the laboratory, with at least a chosen chance.

Every side of a limit is moved inward by k(σ, h), the distance at which the chance is reached (tails.margin), and the
trim is found for the moved limits; the errors belong to the trim, so both are repeated until they agree. What errs
(uncertainty.py): the laboratory's result on the batch, σ = R/2.77 or what the stock's sigmas say; the stocks added;
weighing; the laboratory's next result; and the law, of what is added only. Where the laws' spread stands for the law,
that is so of itself: the measured batch is one stock, and a stock alone is alike under every law. A fitted σ is that
of a mixture; of a part a added to a measured batch it counts 4 a (1 − a), none at both ends as the spread itself, and
all of it for an even mixture. Of charges that nobody has measured it counts in full.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from .certain import HIGHEST, LOWEST
from .closed import Side, along_of, closed_chances, missed_by, sides, together, value_of
from .errors import TargetError
from .linear import Stopwatch
from .properties import Array
from .requirements import Requirement
from .rows import Model, without_guards
from .tails import margin
from .trim import May, Trim, found_for, recipe_for, searched
from .trim_vessel import Ask, vessel_of
from .uncertainty import Carried, errors_of

STEPS = 8  # of moving limits and trimming anew; two or three are usual
FINER = 2e-3  # part of what may be missed that is aimed at besides, so that rounding leaves the chance reached
STEPPED = 4  # of those in whole steps
FURTHER = 1.02  # by which limits are moved further where it does not settle
HALVINGS = 9  # of the way to the highest chance: to 0.1 %
Moves = dict[tuple[str, str], float]


@dataclass(frozen=True)
class _Judge:
    """Tells the chances of trims."""

    ask: Ask  # its target without guards
    law_sigma: Mapping[str, float] | None
    may: May

    def carried(self, trim: Trim) -> tuple[Carried, tuple[Requirement, ...]]:
        """The errors of a trim's whole content, and the limits they speak of."""
        assert trim.recipe is not None
        assert trim.total_kg is not None
        model = vessel_of(self.ask, self.may.forgiven).model
        x = np.array([(trim.recipe.shares or {}).get(code, 0.0) for code in model.table.codes])
        target = replace(model.target, batch_kg=trim.total_kg)
        errors = errors_of(model.table, target, model.requirements, self._law(model, x))
        return errors.at(x), model.requirements

    def worst(self, trim: Trim) -> float:
        """The least chance of any limit."""
        carried, needs = self.carried(trim)
        return min(closed_chances(carried, needs).values(), default=1.0)

    def trimmed(self, moves: Moves, watch: Stopwatch) -> Trim | None:
        """The additions for limits that are moved; None: none."""
        target = self.ask.target
        return searched(replace(self.ask, target=replace(target, moved={**target.moved, **moves})), self.may, watch)[0]

    def _law(self, model: Model, x: Array) -> Mapping[str, float] | None:
        if self.law_sigma is None or len(self.ask.contents) != 1:
            return self.law_sigma
        added = 1.0 - float(x[model.table.index(self.ask.contents[0].code)])
        part = 1.0 if added >= 0.5 else 4.0 * added * (1.0 - added)
        return {code: part * sigma for code, sigma in self.law_sigma.items()}


def at_chance(ask: Ask, chance: float, law_sigma: Mapping[str, float] | None, may: May,
              watch: Stopwatch) -> Trim:
    """The least additions found whose every limit is met with this chance; else those of the highest chance found.

    status: "optimal" where the least additions for the limits alone have the chance, else "stopped": found, and not
    proven; `reached` says whether with the chance. Raises TargetError for a chance outside 0.5 to 0.999.
    """
    if not LOWEST <= chance <= HIGHEST:
        raise TargetError(f"a chance of {100 * chance:g} % cannot be asked; choose 50 to 99.9 %", where="confidence")
    ask = replace(ask, target=without_guards(ask.target))
    judge = _Judge(ask, law_sigma, may)
    plain = found_for(ask, may, watch)
    if plain.additions_kg is None:
        return replace(plain, chance=chance, reached=False)
    if judge.worst(plain) >= chance:
        return _told(judge, plain, plain, chance, True)
    loose = replace(judge, ask=replace(ask, whole=False))
    best = _settled(loose, plain, chance, watch)
    goal = chance
    if best is None:
        best = _highest(loose, plain, chance, watch)
        goal = judge.worst(best)
    if ask.whole:
        best = _in_steps(judge, best, plain, goal, watch)
    return _told(judge, best, plain, chance, judge.worst(best) >= chance)


def _highest(judge: _Judge, plain: Trim, chance: float, watch: Stopwatch) -> Trim:
    """The additions of the highest chance below the asked one for which some are found."""
    low, high, best = min(max(LOWEST, judge.worst(plain)), chance), chance, plain
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        found = _settled(judge, best, middle, watch)
        low, high, best = (low, middle, best) if found is None else (middle, high, found)
        if watch.over:
            break
    return best


def _settled(judge: _Judge, start: Trim, chance: float, watch: Stopwatch) -> Trim | None:
    """Limits moved inward by what the trim before asks, and trimmed anew, until the chance is reached."""
    trim, more = start, 1.0
    before: Moves = {}
    for step in range(STEPS):
        carried, needs = judge.carried(trim)
        if step > 2:
            more *= FURTHER
        moves = _moves(carried, needs, 1.0 - chance, more)
        found = None if watch.over or moves == before else judge.trimmed(moves, watch)
        if found is None:
            return None
        if judge.worst(found) >= chance:
            return found
        trim, before = found, moves
    return None


def _in_steps(judge: _Judge, loose: Trim, plain: Trim, chance: float, watch: Stopwatch) -> Trim:
    """Whole steps near additions in any quantities that have a chance: the first that have it too, else the surest."""
    best, near, more = plain, loose, 1.0
    for _ in range(STEPPED):
        carried, needs = judge.carried(near)
        found = None if watch.over else judge.trimmed(_moves(carried, needs, 1.0 - chance, more), watch)
        if found is None:
            break
        best = max(best, found, key=judge.worst)
        if judge.worst(found) >= chance:
            return found
        near, more = found, more * FURTHER
    return best


def _moves(carried: Carried, needs: tuple[Requirement, ...], missed: float, more: float) -> Moves:
    """Where every closed side of every limit is held so that the chance is reached at this blend."""
    found: Moves = {}
    closed = sides(carried, needs)
    for side in closed:
        rest = missed * (1.0 - FINER)
        # The other side of a window takes its part of what may be missed: none where it is far, half at most.
        others = sum(missed_by(carried, other) for other in closed if other.need is side.need and other is not side)
        inward = more * _distance(carried, side, max(rest - others, 0.5 * rest))
        found[side.need.code, side.side] = side.limit + (inward if side.side == "low" else -inward)
    return found


def _distance(carried: Carried, side: Side, missed: float) -> float:
    """How far inside a limit the predicted value must lie, in the property's unit."""
    sign = 1.0 if side.side == "low" else -1.0
    if side.need.code == "vi":
        return max(0.0, _of_vi(carried, side, missed, sign))
    r = carried.errors.index(side.need.code)
    k = margin(missed, carried.normal(side.along), float(side.along @ carried.even), side.skew)[0]
    return max(0.0, k + sign * float(carried.values[r] - carried.shifted[r]))


def _of_vi(carried: Carried, side: Side, missed: float, sign: float) -> float:
    """The same of the VI, whose curve has kinks: a blend's own distance counts as what its exact chance is worth."""
    along = along_of(carried, "vi")
    sigma, even = carried.normal(along), float(along @ carried.even)
    asked = margin(missed, sigma, even)[0]
    one = replace(side.need, high=None) if side.side == "low" else replace(side.need, low=None)
    outside = 1.0 - closed_chances(carried, [one]).get("vi", 0.0)
    if not 1e-5 < outside < 1.0 - 1e-5:
        return asked
    worth = margin(min(outside, 1.0 - outside), sigma, even)[0] * (1.0 if outside < 0.5 else -1.0)
    return asked + sign * (value_of(carried, "vi") - side.limit) - worth


def _told(judge: _Judge, trim: Trim, plain: Trim, chance: float, reached: bool) -> Trim:
    """The trim judged by the limits as they are, with its chances in figures and words."""
    carried, needs = judge.carried(trim)
    chances = closed_chances(carried, needs)
    at_once, worst = together(carried, needs), min(chances.values(), default=1.0)
    ask = judge.ask.kept(1.0 - trim.drawn_kg / judge.ask.content_kg) if trim.drawn_kg > 0.0 else judge.ask
    vessel = vessel_of(ask, judge.may.forgiven)
    used = trim.recipe.charges_kg if trim.recipe is not None and trim.recipe.charges_kg else {}
    # Limits that follow the errors of what they judge are no rows: only what needed no moving is proven.
    proven = trim.status == "optimal" and trim is plain
    status = "optimal" if proven and reached else "stopped"
    recipe = recipe_for(vessel, np.array([used.get(code, 0.0) for code in vessel.model.table.codes]), status)
    if reached:
        said = f"each limit is met with a chance of at least {100 * chance:g} %"
    else:
        said = (f"no additions were found with a chance of {100 * chance:g} % of each limit; the highest found is "
                f"{100 * worst:.1f} %, with these")
    if at_once is not None:
        said += f"; all at once with {100 * at_once:.1f} %"
    extra = (trim.added_kg or 0.0) - (plain.added_kg or 0.0)
    if abs(extra) >= 0.5:
        said += f"; that takes {abs(extra):,.0f} kg {'more' if extra > 0.0 else 'less'} than to reach the limits only"
    if reached and not proven:
        said += "; found step by step, not proven to be the least"
    return replace(trim, recipe=recipe, status=status, chance=chance, reached=reached,
                   chances=chances, together=at_once, notes=(said, *trim.notes))
