"""Speed of a trim as a ratio, in one run, to one bare `linprog` of the same rows.

    python -m tests.benchmarks.speed_trim

The seeded batches of tests/solver/trim_cases.py, and the same with 40 stocks besides, most of them in scale divisions
and drums. Prints what is reached; nothing here is asserted.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
from scipy.optimize import linprog

from blendtui.quiet import quiet
from solver.trim import additions
from solver.trim_vessel import Ask, vessel_of
from tests.benchmarks.plants import random_plant
from tests.benchmarks.solver_speed import seconds, show
from tests.solver.trim_cases import Case, trim_case

CASES = 100
WAYS: tuple[tuple[str, dict[str, Any], int], ...] = (
    ("any quantities", {"whole": False}, CASES),
    ("whole steps", {}, CASES),
    ("least mass, whole steps", {"aim": "mass"}, CASES),
    ("drawn off first (a fifth of the room)", {"whole": False}, CASES // 2),
    ("at a chance of 80 % (stopped: not reached, or not proven)", {"whole": False, "chance": 0.8}, CASES // 2))


def large_case(k: int) -> Case:
    """Seeded case k with 40 stocks more: a plant of about fifty."""
    case, rng = trim_case(k), np.random.default_rng([405, k])
    more = [replace(s, code=f"M{s.code}", division_kg=float(rng.choice([1.0, 10.0])) if rng.random() < 0.7 else None,
                    package_kg=None) for s in random_plant(rng, 40).stocks]
    return replace(case, stocks=(*case.stocks, *more))


def bare(case: Case) -> Callable[[], object]:
    """One plain `linprog` of the same rows in any quantities, ready to run; the VI left out."""
    vessel = vessel_of(Ask(case.contents, case.stocks, case.target, case.room_kg, whole=False))
    _, problem = vessel.problem(vessel.least, vessel.most)
    ones, c = np.ones((1, len(problem.lo))), vessel.cost()
    rows = np.vstack([problem.rows, ones, -ones])
    upper = np.concatenate([problem.limits, [1.0 + problem.slack, problem.slack - 1.0]])
    bounds = np.column_stack([problem.lo, problem.hi])
    return lambda: linprog(c, A_ub=rows, b_ub=upper, bounds=bounds, method="highs")


def main() -> None:
    """Run every case each way and print it."""
    first = trim_case(0)
    additions(first.contents, first.stocks, first.target)  # the first call pays for imports
    for size, make in (("4 to 15 stocks", trim_case), ("44 to 55 stocks", large_case)):
        for name, options, count in WAYS:
            ratios, taken, status = [], [], []
            for k in range(count):
                case = make(k)
                room = 0.2 * case.room_kg if name.startswith("drawn") else case.room_kg
                with quiet():
                    start = time.perf_counter()
                    trim = additions(case.contents, case.stocks, case.target, room_kg=room, **options)
                    taken.append(time.perf_counter() - start)
                    ratios.append(taken[-1] / seconds(bare(case), 3))
                status.append(trim.status)
            show(f"{size}, {name} / one bare linprog", ratios, "(none set)")
            print(f"    ms: median {1e3 * np.median(taken):.0f}, 90 % below {1e3 * np.quantile(taken, 0.9):.0f}, most "
                  f"{1e3 * max(taken):.0f}; proven {status.count('optimal')} of {count}, stopped "
                  f"{status.count('stopped')}, none {status.count('infeasible')}")


if __name__ == "__main__":
    main()
