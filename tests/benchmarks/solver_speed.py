"""Speed of the solver as ratios, in one run, against what a user would do instead.

    python -m tests.benchmarks.solver_speed

Prints medians and worst of seeded cases. A ratio compares two timings of the same case in the same process,
so it says the same on a slow machine. Nothing here is asserted: a timing is no test.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np
from scipy.optimize import linprog

from solver.choices import ranges
from solver.linear import Stopwatch
from solver.recipe import design, least_cost
from solver.rows import build
from solver.sets import blends
from solver.stocks import StockTable
from solver.target import LAWS, Target
from tests.benchmarks.plants import random_plant, random_target
from tests.benchmarks.slsqp import Search

CASES = 20


def seconds(task: Callable[[], object], times: int = 1) -> float:
    """Least time of one call [s]: the least is the machine's, the rest is noise."""
    best = np.inf
    for _ in range(times):
        start = time.perf_counter()
        task()
        best = min(best, time.perf_counter() - start)
    return float(best)


def bare(table: StockTable, target: Target) -> Callable[[], object]:
    """One plain `linprog` of the same linear rows, ready to run."""
    model = build(table, target)
    problem = model.polytope(whole=False)
    bounds = np.column_stack([problem.lo, problem.hi])
    ones = np.ones((1, len(model.table)))
    return lambda: linprog(model.table.price, A_ub=problem.rows, b_ub=-problem.hold, A_eq=ones, b_eq=[1.0],
                           bounds=bounds, method="highs")


def a_case(k: int, size: int) -> tuple[StockTable, Target]:
    """Seeded case k: a plant of `size` stocks, windows on both KVs and a VI minimum, laws in turn."""
    rng = np.random.default_rng([77, size, k])
    return random_plant(rng, size), random_target(rng, LAWS[k % len(LAWS)])


def show(what: str, ratios: list[float], aim: str) -> None:
    """One line: median, worst, aim."""
    print(f"{what:<62} median {np.median(ratios):8.1f}   worst {max(ratios):8.1f}   aim {aim}")
    sys.stdout.flush()


def main() -> None:
    """Run every comparison and print it."""
    design(*a_case(0, 40))  # the first call pays for imports
    one, many, lp, all_ranges, sets, whole = [], [], [], [], [], []
    for k in range(CASES):
        table, target = a_case(k, 40)
        ours = seconds(lambda: design(table, target), 3)  # noqa: B023
        base = seconds(bare(table, target), 5)
        lp.append(ours / base)
        search = Search(table, target)
        starts = search.starts(np.random.default_rng(k), 12)
        one.append(seconds(lambda: [search.run(x) for x in starts]) / ours)  # noqa: B023
        if k < 6:
            many.append(seconds(lambda: [search.run(x, analytic=False) for x in starts]) / ours)  # noqa: B023
            all_ranges.append(seconds(lambda: ranges(table, target)) / base)  # noqa: B023
            sets.append(seconds(lambda: blends(table, target)) / base)  # noqa: B023
    for k in range(10):
        table, target = a_case(k, 200)
        ruled = replace(target, max_stocks=4, min_share=0.03)
        whole.append(seconds(lambda: design(table, ruled)) / seconds(bare(table, target), 5))  # noqa: B023
    print(f"{CASES} cases of 40 stocks with windows on both KVs and a VI minimum; ratios of times in this run")
    show("12-start SLSQP, analytic gradients / our recipe", one, "10 or more (median)")
    show("12-start SLSQP, numeric gradients / our recipe", many, "30 or more (median)")
    show("our recipe / one bare linprog of the same rows", lp, "12 or less, worst 40")
    show("all 40 ranges, VI included / one bare linprog", all_ranges, "250 or less")
    show("eight other blends / one bare linprog", sets, "(none set)")
    show("200 stocks, most 4, least share 3 % / one bare linprog", whole, "60 or less")
    solves = [least_cost(build(*a_case(k, 40)), Stopwatch(10.0)).solves for k in range(CASES)]
    print(f"linear programmes in a recipe: median {int(np.median(solves))}, most {max(solves)}")


if __name__ == "__main__":
    main()
