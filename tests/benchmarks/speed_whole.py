"""Speed of whole quantities as ratios, in one run, to one bare `linprog` of the same rows.

    python -m tests.benchmarks.speed_whole

Seeded plants of 12 to 40 stocks in bulk, drums and IBCs, windows on both KVs, a VI minimum, a treat rate in half of
them: the cases of tests/solver/test_whole.py. Prints what is reached; nothing here is asserted.
"""

from __future__ import annotations

import time

import numpy as np

from blendtui.quiet import quiet
from solver.recipe import design
from solver.stocks import StockTable
from solver.whole import whole
from tests.benchmarks.solver_speed import bare, seconds, show
from tests.solver.test_whole import large_case

CASES = 200


def main() -> None:
    """Run every case and print it."""
    design(*large_case(0))  # the first call pays for imports
    ratios, to_recipe, taken, extra, gaps = [], [], [], [], []
    proven = rounded = none = 0
    for k in range(CASES):
        stocks, target = large_case(k)
        with quiet():
            start = time.perf_counter()
            made = whole(stocks, target)
            own = time.perf_counter() - start
        if made.recipe.status == "infeasible":
            none += 1
            continue
        taken.append(own)
        ratios.append(own / seconds(bare(StockTable(stocks), target), 3))
        to_recipe.append(own / seconds(lambda: design(stocks, target), 2))  # noqa: B023
        proven += made.proven
        rounded += bool(made.rounded)
        gaps.append(made.gap or 0.0)
        if made.extra_per_t is not None and not made.rounded and made.cost_per_t:
            extra.append(100.0 * made.extra_per_t / made.cost_per_t)
    print(f"{CASES} cases of 12–40 stocks; {none} without whole charges (a package too large for its treat rate)")
    show("whole charges / one bare linprog of the same rows", ratios, "(none set)")
    show("whole charges / our recipe in any quantities", to_recipe, "(none set)")
    print(f"seconds: median {np.median(taken):.2f}, 90 % below {np.quantile(taken, 0.9):.2f}, most {max(taken):.2f}")
    print(f"proven {proven} of {len(taken)}, largest gap {max(gaps):.1e}; a rule rounded in {rounded}")
    print(f"what whole quantities cost, no rule rounded: median {np.median(extra):.3f} %, most {max(extra):.2f} %")


if __name__ == "__main__":
    main()
