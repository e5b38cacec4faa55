"""Speed of the chances, as ratios to one bare `linprog` of the same rows in the same run; and how they agree.

    python -m tests.benchmarks.speed_chance

40-stock plants with windows on both KVs and a VI minimum, sources at random. Nothing here is asserted.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from solver.certain import certain
from solver.confidence import draw, first, subject, what_to_test
from solver.stocks import StockTable
from tests.benchmarks.plants import case
from tests.benchmarks.solver_speed import a_case, bare, seconds, show

CASES = 20
SOURCES = ("own", "certificate", "typical", "")


def sourced(table: StockTable, seed: int) -> StockTable:
    """The stocks with a source each, at random."""
    rng = np.random.default_rng([5, seed])
    return StockTable(replace(s, source=SOURCES[rng.integers(4)]) for s in table.stocks)


def speed() -> None:
    """The ratios."""
    certain(*a_case(0, 40), 0.99)  # the first call pays for imports
    recipe, drawn, closed, test, every = [], [], [], [], []
    missed = 0
    for k in range(CASES):
        table, target = a_case(k, 40)
        table = sourced(table, k)
        base = seconds(bare(table, target), 9)
        found = certain(table, target, 0.99)
        missed += not found.reached
        if not found.reached:
            continue
        recipe.append(seconds(lambda: certain(table, target, 0.99), 3) / base)  # noqa: B023
        of = subject(table, found.recipe.shares or {}, target)
        so_far = first(of)
        closed.append(seconds(lambda: first(subject(table, found.recipe.shares or {}, target)), 3) / base)  # noqa: B023
        drawn.append(seconds(lambda: draw(of, so_far), 3) / base)  # noqa: B023
        test.append(seconds(lambda: what_to_test(of), 2) / base)  # noqa: B023
        if k < 5:
            even = subject(table, dict.fromkeys(table.codes, 1.0 / len(table)), target)
            every.append(seconds(lambda: draw(even, first(even))) / base)  # noqa: B023
    print(f"{CASES} cases of 40 stocks; {missed} where 99 % cannot be reached are left out")
    show("recipe at 99 % / one bare linprog", recipe, "60 or less")
    show("100,000 drawn blends of that recipe / one bare linprog", drawn, "200 or less")
    show("the same of all 40 stocks in equal shares", every, "(none set)")
    show("chances in closed form and the budget / one bare linprog", closed, "(none set)")
    show("what to test / one bare linprog", test, "(none set)")


def agreement() -> None:
    """How far the closed form and the drawn chances of recipes at 90, 95 and 99 % lie from what was asked."""
    short, apart, together = [], [], []
    for k in range(100):
        table, target = case(63, k, 10, 40, hardest=125.0)
        asked = (0.9, 0.95, 0.99)[k % 3]
        found = certain(sourced(table, k), target, asked)
        of = subject(sourced(table, k), found.recipe.shares or {}, target)
        got = draw(of, first(of))
        if found.reached:
            short.append(100.0 * (min(x.chance or 0.0 for x in got.limits) - asked))
        apart += [abs(100.0 * ((x.chance or 0.0) - (x.closed or 0.0))) for x in got.limits]
        together.append(abs(100.0 * ((got.chance or 0.0) - (got.closed or 0.0))))
    print(f"100 cases at 90, 95 and 99 %: {len(short)} reached; least drawn chance of a limit less what was asked: "
          f"worst {min(short):+.2f} points")
    print(f"drawn less closed, points: each limit worst {max(apart):.2f}, all together worst {max(together):.2f}")


def main() -> None:
    """Run both and print them."""
    speed()
    agreement()


if __name__ == "__main__":
    main()
