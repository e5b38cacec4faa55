"""A sweep as a curve of text, with its axes named and its numbers below.

It is drawn from whatever points there are, so that it can start with the first two and fill up. Every character has
one of plain ASCII that takes its place (widgets/paint.py).
"""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from blendtui.desk import numbers
from blendtui.desk.choices import Swept
from blendtui.store.harmless import harmless

if TYPE_CHECKING:
    from solver.sweeps import Point, Sweep

DOT, BETWEEN, NO_BLEND, NOW = "•", "·", "×", "↑"
LABEL = 10  # columns of the costs at the left


def title(sweep: Sweep) -> str:
    """What is drawn: `least cost, per t, against viscosity index, at least`."""
    return f"least cost, per t, against {axis(sweep)}"


def axis(sweep: Sweep) -> str:
    """What is swept, with its unit."""
    if sweep.of == "price":
        return f"the price of {harmless(sweep.which, 20)}, per t"
    from solver.properties import lookup

    return f"{lookup(sweep.of).label}, at {'least' if sweep.which == 'low' else 'most'}, its guard in it"


def shown(sweep: Sweep, value: float) -> str:
    """A value of what is swept, as a number."""
    if sweep.of == "price":
        return numbers.cost(value)
    from solver.properties import lookup
    from solver.sweeps import POINTS

    if numbers.is_kv(sweep.of) or sweep.of == "cost_per_t":
        return numbers.value(sweep.of, value)
    # A VI or a flash point is whole; but points of a narrow span would look alike without their tenths.
    digits = lookup(sweep.of).digits
    close = (sweep.high - sweep.low) / POINTS < 10.0 ** -digits
    text = numbers.fixed(value, digits + close)
    return text.removesuffix(".0") if not digits else text


def draw(swept: Swept, width: int, height: int) -> list[str]:
    """The curve in lines of at most `width` columns: title, `height` rows, axis, its labels."""
    points = [p for p in swept.points if p.cost_per_t is not None]
    costs = [float(p.cost_per_t or 0.0) for p in points]
    low, high = (min(costs), max(costs)) if costs else (0.0, 1.0)
    if high - low < 1e-4 * max(1.0, abs(high)):
        low, high = low - 0.5, high + 0.5
    columns = max(10, width - LABEL - 3)
    field = [[" "] * columns for _ in range(height)]

    def column(number: int) -> int:
        return round(number * (columns - 1) / max(1, swept.count - 1))

    def row(cost: float) -> int:
        return round((high - cost) / (high - low) * (height - 1))

    for before, after in zip(swept.points[:-1], swept.points[1:], strict=True):
        _join(field, before, after, column, row)
    for point, cost in zip(points, costs, strict=True):
        field[row(cost)][column(point.number)] = DOT
    marked = (0, (height - 1) // 2, height - 1) if costs else ()
    labels = {n: numbers.cost(high - n * (high - low) / (height - 1)) for n in marked}
    made = [title(swept.sweep)]
    made += [f"{labels.get(n, ''):>{LABEL}} │{''.join(line)}".rstrip() for n, line in enumerate(field)]
    base = ["─"] * columns
    for point in swept.points:
        if point.cost_per_t is None:
            base[column(point.number)] = NO_BLEND
    made.append(" " * LABEL + " │" + "".join(base))
    made.append(_under(swept, columns))
    if any(p.cost_per_t is None for p in swept.points):
        made.append(" " * (LABEL + 2) + f"{NO_BLEND} no blend")
    return made


def _join(field: list[list[str]], before: Point, after: Point, column, row) -> None:  # type: ignore[no-untyped-def]
    if before.cost_per_t is None or after.cost_per_t is None:
        return
    left, right = column(before.number), column(after.number)
    for x in range(left + 1, right):
        part = (x - left) / (right - left)
        field[row(before.cost_per_t + part * (after.cost_per_t - before.cost_per_t))][x] = BETWEEN


def _under(swept: Swept, columns: int) -> str:
    """The values at the ends, and where the limit or price stands now."""
    sweep = swept.sweep
    first, last = shown(sweep, sweep.low), shown(sweep, sweep.high)
    line = list(first.ljust(columns))[:columns]
    line[columns - len(last):] = last
    if sweep.now is not None and sweep.low <= sweep.now <= sweep.high:
        here = f"{NOW} now {shown(sweep, sweep.now)}"
        at = round((sweep.now - sweep.low) / (sweep.high - sweep.low) * (columns - 1))
        at = min(max(at, len(first) + 1), columns - len(last) - len(here) - 1)
        if at > len(first):
            line[at:at + len(here)] = here
    return " " * (LABEL + 2) + "".join(line).rstrip()


def table(swept: Swept) -> list[str]:
    """The numbers: value, least cost, and the shares where the stocks change."""
    made = [f"{_at(swept.sweep):>10} {'cost, /t':>10}  mass %, where the stocks change"]
    before: frozenset[str] | None = None
    for point in swept.points:
        text = f"{shown(swept.sweep, point.at):>10} "
        if point.cost_per_t is None or point.shares is None:
            why = "no blend" if point.status == "infeasible" else "not found in time"
            made.append(f"{text}{numbers.UNKNOWN:>10}  {why}")
            before = None
            continue
        used = frozenset(c for c, share in point.shares.items() if share > 5e-6)
        shares = f"  {_shares(point.shares)}" if used != before else ""
        made.append(f"{text}{numbers.cost(point.cost_per_t):>10}{shares}")
        before = used
    return made


def _at(sweep: Sweep) -> str:
    if sweep.of in ("price", "vi"):
        return "price, /t" if sweep.of == "price" else "VI"
    from solver.properties import lookup

    return f"at, {lookup(sweep.of).unit}".removesuffix(", ")


def _shares(shares: Mapping[str, float]) -> str:
    ordered: Sequence[tuple[str, float]] = sorted(shares.items(), key=lambda item: -item[1])
    return ", ".join(f"{harmless(c, 14)} {numbers.pct(x)}" for c, x in ordered if x > 5e-6)


def wrapped(line: str, width: int) -> list[str]:
    """A line of the table on lines of so many columns, its later ones under the shares."""
    indent = " " * 23
    return textwrap.wrap(line, width, initial_indent="", subsequent_indent=indent, drop_whitespace=True,
                         replace_whitespace=False) if len(line) > width else [line]
