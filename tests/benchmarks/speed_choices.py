"""Speed of what else would do, as ratios to one bare `linprog` of the same rows, in one run.

    python -m tests.benchmarks.speed_choices

Times are of the processor, not of the clock: a task of a second is held up by whatever else the machine does, and
one of a millisecond is not. Nothing here is asserted: a timing is no test.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import replace

from solver.aims import AIMS, aims
from solver.choices import ranges_within
from solver.recipe import design
from solver.stocks import StockTable
from solver.target import ShareRule, Target
from tests.benchmarks.solver_speed import a_case, bare, show

CASES = 20
EXTRA = 2.0  # % above the least cost


def seconds(task: Callable[[], object], times: int = 1) -> float:
    """Least processor time of one call [s]."""
    best = float("inf")
    for _ in range(times):
        start = time.process_time()
        task()
        best = min(best, time.process_time() - start)
    return best


def with_rework(table: StockTable, target: Target) -> tuple[StockTable, Target]:
    """The same case with every tenth stock a rework that the product allows up to 5 %."""
    stocks = [replace(s, kind="rework") if i % 10 == 3 else s for i, s in enumerate(table.stocks)]
    return StockTable(stocks), replace(target, rules=(ShareRule("rework", 0.0, 0.05),))


def a_trial(table: StockTable, target: Target) -> dict[str, float]:
    """Shares kept of a thicker oil than is asked today, so that something must change."""
    high = next(limit.high for limit in target.limits if limit.property == "kv40") or 0.0
    free = float("nan")
    moved = {("kv40", "low"): 1.02 * high, ("kv40", "high"): 1.2 * high, ("kv100", "low"): free,
             ("kv100", "high"): free}
    return dict(design(table, replace(target, moved=moved)).shares or {})


def main() -> None:
    """Run and print. The least of a few runs counts on both sides."""
    design(*a_case(0, 40))  # the first call pays for imports
    one, four, eight = [], [], []
    each: dict[str, list[float]] = {name: [] for name in AIMS}
    for k in range(CASES):
        table, target = with_rework(*a_case(k, 40))
        trial, least = a_trial(table, target), design(table, target).cost_per_t
        base = seconds(bare(table, target), 15)
        one.append(seconds(lambda: list(ranges_within(table, target, (EXTRA,), least=least)), 2) / base)  # noqa: B023
        eight.append(seconds(lambda: list(aims(table, target, trial=trial, trial_name="T")), 2) / base)  # noqa: B023
        if k < 6:
            four.append(seconds(lambda: list(ranges_within(table, target, least=least)), 2) / base)  # noqa: B023
        for name in AIMS:
            own = seconds(lambda: list(aims(table, target, (name,), trial=trial, trial_name="T")), 2) / base  # noqa: B023
            each[name].append(own)
    print(f"{CASES} cases of 40 stocks, windows on both KVs and a VI minimum; ratios to one bare linprog in this run")
    show(f"all 40 ranges within {EXTRA:g} % of the least cost", one, "250 or less")
    show("all 40 ranges within 0, 1, 2 and 5 % (6 cases)", four, "(none set)")
    show("eight aims", eight, "100 or less")
    for name in AIMS:
        show(f"  {name} alone, its least cost included", each[name], "(part of the above)")


if __name__ == "__main__":
    main()
