"""Speed of the reasons why nothing fits, as ratios to one bare `linprog` of the same rows in one run.

    python -m tests.benchmarks.speed_why

Seeded targets of 40 stocks that nothing meets; medians and worst. A timing is no test: nothing is asserted.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from solver.demands import Demands
from solver.linear import Stopwatch
from solver.nearest import nearest
from solver.purchase import region
from solver.reach import reach
from solver.recipe import design, least_cost
from solver.rows import build
from solver.stocks import StockTable
from solver.target import Limit, Target
from solver.why import Reasons, conflicts
from tests.benchmarks.solver_speed import a_case, bare, seconds, show

CASES = 20


def impossible(k: int) -> tuple[StockTable, Target]:
    """Seeded case k: 40 stocks and a target that nothing meets, by its VI, its KVs, its flash or its cost in turn."""
    table, target = a_case(k, 40)
    limits = {x.property: x for x in target.limits}
    hardest = (Limit("vi", 168.0), replace(limits["kv100"], low=0.6 * (limits["kv100"].low or 1.0),
                                           high=0.7 * (limits["kv100"].low or 1.0)),
               Limit("flash", 272.0), None)[k % 4]
    if hardest is None:
        found = least_cost(build(table, target), Stopwatch(10.0))
        return table, replace(target, max_cost_per_t=0.97 * found.value)
    kept = tuple(x for x in target.limits if x.property != hardest.property)
    return table, replace(target, limits=(*kept, hardest))


def main() -> None:
    """Run every comparison and print it."""
    design(*a_case(0, 40))  # the first call pays for imports
    sets, near, within, to_buy, questions = [], [], [], [], []
    for k in range(CASES):
        table, target = impossible(k)
        if least_cost(build(table, target), Stopwatch(10.0)).x is not None:
            continue
        base = seconds(bare(table, target), 7)
        sets.append(seconds(lambda: conflicts(table, target), 3) / base)  # noqa: B023
        near.append(seconds(lambda: nearest(build(table, target), Stopwatch(20.0)), 3) / base)  # noqa: B023
        demands = Demands(table, target)
        within.append(seconds(lambda: list(reach(demands, Stopwatch(20.0)))) / base)  # noqa: B023
        to_buy.append(seconds(lambda: list(region(demands, Stopwatch(20.0)))) / base)  # noqa: B023
        reasons = Reasons(table, target, Stopwatch(20.0))
        questions.append((len(list(reasons.sets())), reasons.asked))
    print(f"{len(sets)} targets of 40 stocks that nothing meets; ratios of times in this run")
    show("reasons: up to three sets that cannot hold together", sets, "100 or less")
    show("the nearest blend", near, "(none set)")
    show("reasons and the nearest blend", [a + b for a, b in zip(sets, near, strict=True)], "(none set)")
    show("what can be reached, every property twice", within, "(none set)")
    show("what to buy: a grid of 88 stocks", to_buy, "(none set)")
    print(f"sets found {np.mean([n for n, _ in questions]):.1f} on average; questions asked of the rows: median "
          f"{int(np.median([q for _, q in questions]))}, most {max(q for _, q in questions)}")


if __name__ == "__main__":
    main()
