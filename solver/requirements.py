"""A target's limits brought together: grade and lines intersected, guards applied, one per property."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np

from .errors import TargetError
from .grades import Grade, grade
from .properties import Property, in_scale, lookup
from .stocks import StockTable
from .target import Limit, Target

GRADE = "grade "  # how the source of a grade's limit begins
MOVED = "what-if"  # source of a limit that the operator has moved
COST = "cost_per_t"  # the code under which the cost ceiling appears among the limits


@dataclass(frozen=True)
class Requirement:
    """What all lines together ask of one property, before (low, high) and after (held_*) the guard."""

    code: str
    low: float | None
    high: float | None
    guard: float  # how far a side is moved, in the property's unit; of two that differ, the smaller
    held_low: float | None
    held_high: float | None
    sources: tuple[str, ...]
    unknown_ok: bool = False

    @property
    def entry(self) -> Property:
        """The registry entry."""
        return lookup(self.code)

    @property
    def empty(self) -> bool:
        """Can no value at all satisfy it?"""
        low, high = self.held_low, self.held_high
        crossed = low is not None and high is not None and low > high + 1e-9 * max(1.0, abs(high))
        return crossed or self.below_scale or self.above_scale

    @property
    def below_scale(self) -> bool:
        """Is the highest value that is allowed lower than any oil's?"""
        return self.held_high is not None and (
            self.held_high < self.entry.lowest or not in_scale(self.entry, self.held_high))

    @property
    def above_scale(self) -> bool:
        """Is the lowest value that is allowed higher than any oil's?"""
        return self.held_low is not None and self.held_low > self.entry.highest

    @property
    def row_sides(self) -> list[tuple[str, float]]:
        """(side, held limit) of each side that is a row; one that every oil meets is none."""
        sides = [("low", self.held_low), ("high", self.held_high)]
        return [(side, value) for side, value in sides
                if value is not None and in_scale(self.entry, value)]

    def unit_of_miss(self, side: str = "high") -> float:
        """The size of one unit of miss: the method's reproducibility at the limit of that side."""
        sides = (self.held_high, self.held_low) if side == "high" else (self.held_low, self.held_high)
        at = sides[0] if sides[0] is not None else sides[1]
        return self.entry.reproducibility(at if at is not None else 0.0)

    def miss(self, value: float) -> float:
        """How far outside the held limits a value lies, in the property's unit; 0 inside."""
        over = value - self.held_high if self.held_high is not None else 0.0
        under = self.held_low - value if self.held_low is not None else 0.0
        return max(0.0, over, under)

    def units_missed(self, value: float) -> float:
        """The miss in units of the method's reproducibility at the limit that is missed."""
        low = self.held_low is not None and value < self.held_low
        return self.miss(value) / self.unit_of_miss("low" if low else "high")

    def tolerance(self) -> float:
        """Rounding allowed when a value is checked against the held limits: 1e-6 of it, VI 1e-4."""
        if self.code == "vi":
            return 1e-4
        largest = max(abs(v) for v in (self.held_low, self.held_high, self.unit_of_miss()) if v is not None)
        return 1e-6 * largest

    def why_empty(self) -> str:
        """In words, why no value satisfies it."""
        unit = f" {self.entry.unit}" if self.entry.unit else ""
        guard = f" with a guard of {self.guard:g}" if self.guard else ""
        asked = f"(asked by {' and '.join(self.sources)})"
        if self.below_scale:
            return f"{self.entry.name}: no oil is at most {self.held_high:g}{unit}{guard} {asked}"
        if self.above_scale:
            return f"{self.entry.name}: no oil is at least {self.held_low:g}{unit}{guard} {asked}"
        return (f"{self.entry.name}: at least {self.low:g}{unit} and at most {self.high:g}{unit} leave nothing "
                f"between them{guard} {asked}")


def check_limit(limit: Limit) -> None:
    """TargetError when one line contradicts itself or is not made of numbers."""
    entry = lookup(limit.property)
    for name in ("low", "high", "guard", "guard_pct"):
        value = getattr(limit, name)
        if value is not None and not np.isfinite(value):
            raise TargetError(f"{limit.property}: {name} is not a finite number", where=limit.source)
    if limit.guard < 0.0 or limit.guard_pct < 0.0:
        raise TargetError(f"{limit.property}: a guard cannot be negative; 0 or empty means none",
                          where=limit.source)
    if limit.low is not None and limit.high is not None and limit.low > limit.high:
        raise TargetError(f"{limit.property}: low {limit.low:g} is above high {limit.high:g}; "
                          "swap them or open one side", where=limit.source)
    for value in (limit.low, limit.high):
        # A density or KV limit of another unit would otherwise pass for an impossible wish.
        if value is not None and entry.basis == "law" and value <= 0.0:
            raise TargetError(f"{limit.property}: a limit of {value:g} mm²/s is not above 0",
                              where=limit.source)
        if value is not None and entry.code == "density15" and value < 10.0:
            raise TargetError(f"density15: {value:g} looks like kg/L; write {1000.0 * value:g} (kg/m³)",
                              where=limit.source)


def merge(limits: Iterable[Limit]) -> tuple[Requirement, ...]:
    """Intersect all limits of each property, each moved inward by its own guard, in order of first mention.

    A line with only a guard puts it on the limits of the others (the grade's).
    """
    by_property: dict[str, list[Limit]] = {}
    for limit in limits:
        check_limit(limit)
        by_property.setdefault(limit.property, []).append(limit)
    return tuple(_intersection(code, lines) for code, lines in by_property.items())


def _intersection(code: str, lines: list[Limit]) -> Requirement:
    closed = [x for x in lines if x.low is not None or x.high is not None]
    bare = [x for x in lines if x.low is None and x.high is None]
    if not closed:
        raise TargetError(f"{code}: neither low nor high is given, and the grade sets none; "
                          "give one or delete the line", where=lines[0].source)
    graded = [x for x in closed if x.source.startswith(GRADE)] or closed
    lows, highs = [], []
    for line in closed:
        own = [line, *(bare if line in graded else [])]
        if line.low is not None:
            lows.append((line.low + max(_guard(x, line.low) for x in own), line.low))
        if line.high is not None:
            highs.append((line.high - max(_guard(x, line.high) for x in own), line.high))
    held_low, held_high = max(lows, default=(None, None))[0], min(highs, default=(None, None))[0]
    low, high = max((v for _, v in lows), default=None), min((v for _, v in highs), default=None)
    moved = [held_low - low] if held_low is not None and low is not None else []
    moved += [high - held_high] if held_high is not None and high is not None else []
    sources = tuple(dict.fromkeys(x.source or "the product" for x in lines))
    return Requirement(code, low, high, min((g for g in moved if g > 0.0), default=0.0), held_low, held_high,
                       sources, any(x.unknown_ok for x in lines))


def _guard(line: Limit, value: float) -> float:
    """How far a line's guard moves a limit of this value, in the property's unit."""
    return max(line.guard, line.guard_pct / 100.0 * abs(value))


def required(target: Target, candidates: StockTable) -> tuple[tuple[Requirement, ...], tuple[str, ...]]:
    """The requirements of a target, and what stays to be tested.

    A grade's limit that needs data the candidates may lack (CCS) is held only where every candidate has
    it; otherwise it joins what is to be tested. Raises TargetError for an unknown grade or property, a
    line that contradicts itself, or a target without any limit.
    """
    by_grade = grade(target.grade) if target.grade.strip() else Grade("", ())
    limits = list(by_grade.limits)
    tests = list(by_grade.to_be_tested)
    for limit in by_grade.if_known:
        lacking = int(np.sum(~np.isfinite(candidates.column(limit.property))))
        if lacking == 0 and len(candidates):
            limits.append(limit)
        else:
            entry = lookup(limit.property)
            tests.insert(0, f"{entry.name} at most {limit.high:g} {entry.unit} "
                            f"({lacking} of {len(candidates)} stocks have no value)")
    fallen = {x.property for x in by_grade.if_known} - {x.property for x in limits}
    # A guard on a grade's limit that is only to be tested has nothing to stand on.
    limits += [replace(x, source=x.source or "the product") for x in target.limits
               if x.low is not None or x.high is not None or x.property not in fallen]
    if not limits:
        raise TargetError(f"{target.product}: a product without limits; give it a grade or a limit",
                          where=target.product)
    return _moved(merge(limits), target), tuple(tests)


def _moved(needs: tuple[Requirement, ...], target: Target) -> tuple[Requirement, ...]:
    """The requirements with those sides moved that the target moves; a limit that was not there is added."""
    by_code = {need.code: need for need in needs}
    for (code, side), value in target.moved.items():
        if np.isinf(value):
            raise TargetError(f"{code}: a limit cannot be moved to {value:g}; to open its side give NaN", where=code)
        if code == COST:
            continue
        if side not in ("low", "high"):
            raise TargetError(f"{code}: a side is low or high, not {side!r}", where=code)
        need = by_code.get(code) or Requirement(code, None, None, 0.0, None, None, ())
        at = None if np.isnan(value) else float(value)
        changed = {side: at, f"held_{side}": at}
        lookup(code)
        by_code[code] = replace(need, **changed, sources=tuple(dict.fromkeys([*need.sources, MOVED])))  # type: ignore[arg-type]
    return tuple(need for need in by_code.values() if need.low is not None or need.high is not None)


def ceiling(target: Target) -> float | None:
    """The cost ceiling [currency/t] that is held: the target's own, or where it is moved to."""
    at = target.moved.get((COST, "high"))
    if at is None:
        return target.max_cost_per_t
    return None if np.isnan(at) else float(at)
