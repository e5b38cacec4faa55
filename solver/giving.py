"""What must give so that a blend exists: limits moved from what is asked to what is needed.

Either by the least sum of misses (nearest.py), or by the operator's own order: only the properties named may
give, what is named first gives first and most, and what is not named stays firm. Of the order's beginnings the
shortest that makes a blend possible is taken; within it the last named is brought as near to its limits as the
stocks allow, then the one before it beside that, and the first named last. Each of these is exact (reach.py).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

from .demands import OPEN
from .elastic import COST_UNIT
from .errors import TargetError
from .linear import Stopwatch
from .nearest import nearest
from .properties import Array, lookup
from .reach import extreme
from .recipe import Recipe, empty, least_cost, recipe_of
from .requirements import COST, Requirement, ceiling
from .rows import Model, build
from .stocks import Stock, StockTable
from .target import Target
from .viscosity_index import LOWEST_KV100

# Of a method's reproducibility: how far outward a needed limit is moved; the least that makes a blend possible.
HAIRS = (1e-4, 1e-3, 1e-2)
Moved = dict[tuple[str, str], float]


@dataclass(frozen=True)
class Change:
    """One limit that gives."""

    property: str  # code, or COST
    side: str
    asked: float  # as it is held, its guard included
    needed: float | None  # what it must be moved to; None: it must be let go, for it cannot be read there
    units: float | None  # how far that is, in units of the method's reproducibility (the cost: of 1 % of itself)


@dataclass(frozen=True)
class Giving:
    """Changes of limits that make a blend possible, and the least-cost blend with them."""

    recipe: Recipe  # of the target with these limits; shares None where changed limits alone do not help
    changes: tuple[Change, ...] = ()
    moved: Mapping[tuple[str, str], float] = field(default_factory=dict)  # for Target.moved; NaN opens a side
    reasons: tuple[str, ...] = ()  # why there is no such blend, in words
    order: tuple[str, ...] = ()  # the operator's, if one was given


def giving(stocks: StockTable | Iterable[Stock], target: Target, order: Sequence[str] = (), *,
           time_limit: float = 20.0) -> Giving:
    """What must give for a target that no blend meets. Nothing, with the recipe, where one does.

    order: codes of the properties that may give ("cost_per_t" for the cost ceiling), the first one first and
    most; empty: all, by the least sum of misses in units of reproducibility. Raises TargetError where the order
    names what the target does not limit, and what `build` raises.
    """
    table = stocks if isinstance(stocks, StockTable) else StockTable(stocks)
    model, watch = build(table, target), Stopwatch(time_limit)
    check_order(model, order)
    outcome = least_cost(model, watch)
    if outcome.x is not None:
        return Giving(recipe_of(model, outcome.x, outcome.status, bound=outcome.bound), order=tuple(order))
    if order:
        return _by_order(table, model, tuple(dict.fromkeys(order)), watch)
    found = nearest(model, watch)
    if found.shares is None:
        return Giving(found, reasons=found.reasons)
    return moving(table, model, found.shares, watch)


def check_order(model: Model, order: Sequence[str]) -> None:
    """TargetError where an order of what may give names what a model's target does not limit."""
    limited = [need.code for need in model.requirements] + ([COST] if ceiling(model.target) is not None else [])
    for code in order:
        if code not in limited:
            raise TargetError(f"{code} cannot give: {model.target.product} sets no limit on it; it limits "
                              f"{', '.join(limited)}", where=code)


# From a blend that misses limits

def moving(table: StockTable, model: Model, shares: Mapping[str, float], watch: Stopwatch) -> Giving:
    """The limits of a model moved a hair past where a blend stands that misses them, and the recipe then."""
    x = build_shares(model, shares)
    changes = list(_missed(model, x))
    return _settled(table, model, changes, watch)


def build_shares(model: Model, shares: Mapping[str, float]) -> Array:
    """Shares by stock as an array over a model's stocks, shape (n,)."""
    x: Array = model.lo * 0.0
    for code, share in shares.items():
        x[model.table.index(code)] = share
    return x


def _missed(model: Model, x: Array) -> Iterable[Change]:
    for need in model.requirements:
        values = [value for view in model.exact if (value := view.read(need.code, x)) is not None]
        if need.code == "vi" and any((view.read("kv100", x) or 0.0) < LOWEST_KV100 for view in model.exact):
            yield from (Change("vi", side, at, None, None) for side, at in _sides(need))
            continue
        for side, at in _sides(need):
            worst = min(values, default=at) if side == "low" else max(values, default=at)
            if (at - worst if side == "low" else worst - at) > need.tolerance():
                yield Change(need.code, side, at, worst, abs(worst - at) / need.unit_of_miss(side))
    most = ceiling(model.target)
    cost = float(model.table.price @ x)
    if most is not None and cost > most * (1.0 + 1e-6):
        yield Change(COST, "high", most, cost, (cost / most - 1.0) / COST_UNIT)


def _sides(need: Requirement) -> list[tuple[str, float]]:
    return [(side, at) for side, at in (("low", need.held_low), ("high", need.held_high)) if at is not None]


def _settled(table: StockTable, model: Model, changes: Sequence[Change], watch: Stopwatch,
             order: tuple[str, ...] = ()) -> Giving:
    """The changes with the limits they lead to, a hair outward, and the least-cost recipe of the target so moved."""
    target = model.target
    for hair in HAIRS:
        moved = {(c.property, c.side): _outward(model, c, hair) for c in changes}
        asked = build(table, replace(target, moved={**target.moved, **moved}))
        outcome = least_cost(asked, watch)
        if outcome.x is not None:
            recipe = recipe_of(asked, outcome.x, outcome.status, bound=outcome.bound)
            return Giving(recipe, tuple(changes), moved, order=order)
    words = "no changed limits were found that make a blend possible"
    return Giving(empty(model, "infeasible", (words,)), reasons=(words,), order=order)


def _outward(model: Model, change: Change, hair: float) -> float:
    if change.needed is None:
        return OPEN
    cost = change.property == COST
    unit = COST_UNIT * change.asked if cost else lookup(change.property).reproducibility(change.needed)
    return change.needed + (hair if change.side == "high" else -hair) * unit


# By the operator's order

def _by_order(table: StockTable, model: Model, order: tuple[str, ...], watch: Stopwatch) -> Giving:
    target = model.target
    enough = next((k for k in range(1, len(order) + 1) if _possible(table, target, _opened(model, order[:k]), watch)),
                  None)
    if enough is None:
        words = (f"time ran out before it was known whether a blend exists with no limit on {_and(order)}"
                 if watch.over else
                 f"even with no limit on {_and(order)} there is no blend: what stays firm cannot hold together")
        return Giving(empty(model, "infeasible", (words,)), reasons=(words,), order=order)
    changes: list[Change] = []
    for k in range(enough - 1, -1, -1):
        fixed = {(c.property, c.side): _outward(model, c, HAIRS[0]) for c in changes}
        change = _least(table, model, order[k], {**_opened(model, order[:k]), **fixed}, watch)
        changes += [] if change is None else [change]
    return _settled(table, model, changes[::-1], watch, order)


def _and(codes: Sequence[str]) -> str:
    names = ["the cost" if code == COST else lookup(code).name for code in codes]
    return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)


def _opened(model: Model, codes: Sequence[str]) -> Moved:
    opened = {(code, side): OPEN for code in codes if code != COST for side in ("low", "high")}
    return {**opened, (COST, "high"): OPEN} if COST in codes else opened


def _possible(table: StockTable, target: Target, moved: Moved, watch: Stopwatch) -> bool:
    # A property that is opened still shuts out the stocks of which it is unknown.
    return least_cost(build(table, replace(target, moved={**target.moved, **_read(moved)})), watch).x is not None


def _read(moved: Moved) -> Moved:
    """Opened limits on what mixes by mass or volume as limits that every oil meets."""
    return {(code, side): lookup(code).lowest if side == "low" and code != COST and at != at
            and lookup(code).basis in ("mass", "volume") else at for (code, side), at in moved.items()}


def _least(table: StockTable, model: Model, code: str, moved: Moved, watch: Stopwatch) -> Change | None:
    """How far a property must give while those after it stand where they must; None: not at all."""
    entry = {} if code == COST else {(code, "low"): OPEN if code == "vi" else lookup(code).lowest, (code, "high"): OPEN}
    own: Moved = {(COST, "high"): OPEN} if code == COST else entry
    asked = build(table, replace(model.target, moved={**model.target.moved, **_read(moved), **own}))
    if code == COST:
        most, found = ceiling(model.target), extreme(asked, COST, -1.0, watch)
        if most is None or found is None or found[0] <= most * (1.0 + 1e-6):
            return None
        return Change(COST, "high", most, found[0], (found[0] / most - 1.0) / COST_UNIT)
    need = next(n for n in model.requirements if n.code == code)
    for side, at in _sides(need):
        found = extreme(asked, code, 1.0 if side == "low" else -1.0, watch)
        if found is not None and _short(side, at, found[0]) > need.tolerance():
            return Change(code, side, at, found[0], _short(side, at, found[0]) / need.unit_of_miss(side))
    return None if len(_sides(need)) < 2 or code == "vi" else _across(table, asked, need, watch)


def _short(side: str, at: float, value: float) -> float:
    return at - value if side == "low" else value - at


def _across(table: StockTable, asked: Model, need: Requirement, watch: Stopwatch) -> Change | None:
    """The nearer side where blends lie below and above a window and none inside it, as whole-number rules can do.

    `asked`: the model with the property open. None where there is a blend inside.
    """
    lowest, highest = need.entry.lowest, need.entry.highest
    between = {"low": need.held_low, "high": need.held_high}
    windows = {"": between, "low": {"low": lowest, "high": need.held_low},
               "high": {"low": need.held_high, "high": highest}}
    models = {side: build(table, replace(asked.target, moved={
        **asked.target.moved, **{(need.code, end): float(at) for end, at in ends.items() if at is not None}}))
        for side, ends in windows.items()}
    if least_cost(models.pop(""), watch).x is not None:
        return None
    changes = []
    for side, at in _sides(need):
        found = extreme(models[side], need.code, 1.0 if side == "low" else -1.0, watch)
        if found is not None:
            units = _short(side, at, found[0]) / need.unit_of_miss(side)
            changes.append(Change(need.code, side, at, found[0], units))
    return min(changes, key=lambda change: change.units or 0.0, default=None)


__all__ = ["Change", "Giving", "check_order", "giving", "moving"]
