"""Linear programmes over shares, by scipy's HiGHS: one shape of problem, one shape of answer.

    minimise c·x   subject to   A x ≤ −hold,   lo ≤ x ≤ hi,   Σ x = total (unless total is None)

and, where whole-number rules are given, x_k = 0 or x_k ≥ least for the stocks they count, with at most
`most` of those above 0. Rows are scaled to about 1 and held a hair inside, so that the exact
recomputation of a limit passes in spite of rounding; the bound that is returned is that of the rows
themselves, corrected by their prices, so that the hair never makes it too high.
"""

from __future__ import annotations

import time
from dataclasses import dataclass, field, replace
from typing import Any, Literal

import numpy as np
from scipy.optimize import Bounds, LinearConstraint, linprog, milp

from .properties import Array

HOLD = 1e-10  # how far inside rows are held at first: a hair, for a hair costs
FIRM_HOLD = 1e-7  # and where the exact recomputation did not pass: the solver's own tolerance
SLACK = -1e-7  # and where limits leave a single point: as far outside, to be judged exactly
PRESOLVE = False  # it costs more than it saves on so few rows
Status = Literal["optimal", "infeasible", "stopped"]


@dataclass(frozen=True)
class Whole:
    """Whole-number rules: on which stocks, how many at most, and the least share of one that is used."""

    counted: np.ndarray[Any, np.dtype[np.bool_]]  # (n,)
    most: int | None = None
    least: Array = field(default_factory=lambda: np.zeros(0))  # (n,) mass fraction, 0: none

    def kept_by(self, x: Array) -> bool:
        """Does a blend keep the rules already?"""
        used = self.counted & (x > 1e-9)
        few = self.most is None or int(used.sum()) <= self.most
        return few and (not len(self.least) or bool(np.all(x[used] >= self.least[used] - 1e-12)))


@dataclass(frozen=True)
class Polytope:
    """The feasible shares, as far as they are linear."""

    rows: Array  # (m, n), scaled
    hold: Array  # (m,)
    lo: Array  # (n,)
    hi: Array  # (n,)
    total: float | None = 1.0
    whole: Whole | None = None
    inside: float = HOLD  # what further rows are held by

    def with_rows(self, extra: list[Array], hold: float | None = None) -> Polytope:
        """The same with further rows (scaled here)."""
        if not extra:
            return self
        scaled = np.array([scale(row) for row in extra])
        return replace(self, rows=np.vstack([self.rows, scaled]),
                       hold=np.concatenate([self.hold, np.full(len(extra), self.inside if hold is None else hold)]))

    def held(self, hold: float) -> Polytope:
        """The same with those rows that are held inside at all held by another amount."""
        return replace(self, hold=np.where(self.hold != 0.0, hold, 0.0), inside=hold)

    def on_support(self, x: Array) -> Polytope:
        """Only the stocks that x uses, as a plain linear problem that keeps the whole-number rules."""
        if self.whole is None:
            return self
        used = x > 1e-9
        drop = self.whole.counted & ~used
        raise_to = np.where(self.whole.counted & used, np.maximum(self.lo, self.whole.least), self.lo)
        return replace(self, lo=np.where(drop, 0.0, raise_to), hi=np.where(drop, 0.0, self.hi), whole=None)


@dataclass(frozen=True)
class Solved:
    """Answer of one linear programme; x is None unless something feasible was found."""

    status: Status
    x: Array | None
    value: float
    bound: float  # no feasible x has a lower value
    reduced: Array | None = None  # (n,) what one unit more of a stock at its lower bound would add


class Stopwatch:
    """Seconds left of a time limit, so that every solve under it shares one limit."""

    def __init__(self, seconds: float) -> None:
        self._end = time.monotonic() + seconds

    @property
    def left(self) -> float:
        """Seconds left, never below a hundredth, so that HiGHS still answers."""
        return max(0.01, self._end - time.monotonic())

    @property
    def over(self) -> bool:
        """Is the time used up?"""
        return time.monotonic() >= self._end


def scale(row: Array) -> Array:
    """A row divided by its largest coefficient."""
    largest = float(np.max(np.abs(row))) if len(row) else 0.0
    return row / largest if largest > 0.0 else row


def solve(problem: Polytope, c: Array, watch: Stopwatch, known: float = np.inf) -> Solved:
    """Minimise c·x over a polytope. Both infeasible bounds and an empty set answer "infeasible".

    `known`: only answers cheaper than this are wanted, so what cannot be part of one may be passed over.
    """
    if len(c) == 0 or np.any(problem.lo > problem.hi + 1e-12):
        return Solved("infeasible", None, np.inf, np.inf)
    if problem.whole is not None:
        return _solve_whole(problem, c, watch, known)
    return _solve_plain(problem, c, watch)


def _equality(problem: Polytope) -> tuple[Array | None, Array | None]:
    if problem.total is None:
        return None, None
    return np.ones((1, len(problem.lo))), np.array([problem.total])


def _solve_plain(problem: Polytope, c: Array, watch: Stopwatch) -> Solved:
    a_eq, b_eq = _equality(problem)
    for method in ("highs", "highs-ipm"):
        result = linprog(c, A_ub=problem.rows if len(problem.rows) else None,
                         b_ub=-problem.hold if len(problem.rows) else None, A_eq=a_eq, b_eq=b_eq,
                         bounds=np.column_stack([problem.lo, np.maximum(problem.lo, problem.hi)]),
                         method=method, options={"time_limit": watch.left, "presolve": PRESOLVE})
        if result.status != 4:  # numerical trouble: the other method answers instead
            break
    return _translate(result, result.fun, problem, c)


def _translate(result: Any, bound: float | None, problem: Polytope, c: Array) -> Solved:
    if result.status == 1:
        x = None if result.x is None else tidy(result.x[:len(c)], problem)
        value = np.inf if x is None else float(c @ x)
        return Solved("stopped", x, value, -np.inf if bound is None else bound)
    if result.status == 4:  # no verdict is not the verdict "infeasible"
        return Solved("stopped", None, np.inf, -np.inf)
    if result.status != 0 or result.x is None:
        return Solved("infeasible", None, np.inf, np.inf)
    x = tidy(result.x[:len(c)], problem)
    reduced = None
    if "lower" in result:
        reduced = np.asarray(result.lower.marginals)
        # Weak duality: without the hair the same prices bound the value by this much less.
        bound = float(result.fun) + float(np.minimum(result.ineqlin.marginals, 0.0) @ problem.hold)
    return Solved("optimal", x, float(c @ x), float(c @ x) if bound is None else bound, reduced)


def tidy(x: Array, problem: Polytope) -> Array:
    """Shares within their bounds and summing to the total: the solver's rounding removed."""
    x = np.clip(x, problem.lo, np.maximum(problem.lo, problem.hi))
    x[(x < 1e-10) & (problem.lo <= 0.0)] = 0.0
    return x * (problem.total / x.sum()) if problem.total is not None and x.sum() > 0.0 else x


def _solve_whole(problem: Polytope, c: Array, watch: Stopwatch, known: float) -> Solved:
    """With whole-number rules: a 0/1 choice y_k for every stock they count, x_k ≤ hi_k y_k."""
    whole = problem.whole
    assert whole is not None
    relaxed = _solve_plain(problem, c, watch)
    if relaxed.x is None or whole.kept_by(relaxed.x):
        return relaxed  # the rules do not bind (or nothing meets even the rest)
    problem = _without_hopeless(problem, relaxed, c, watch, known)
    least = whole.least if len(whole.least) else np.zeros(len(c))
    counted = whole.counted & ((problem.hi >= least) | (problem.lo > 0.0)) & (problem.hi > 0.0)
    hi = np.where(whole.counted & ~counted, 0.0, problem.hi)
    if np.any(problem.lo > hi + 1e-12):
        return Solved("infeasible", None, np.inf, np.inf)
    which = np.flatnonzero(counted)
    n, k = len(c), len(which)
    choice = np.zeros((k, n))
    choice[np.arange(k), which] = 1.0
    blocks = [np.hstack([problem.rows, np.zeros((len(problem.rows), k))]),
              np.hstack([choice, -np.diag(hi[which])]), np.hstack([-choice, np.diag(least[which])])]
    upper = [-problem.hold, np.zeros(k), np.zeros(k)]
    if whole.most is not None:
        blocks.append(np.concatenate([np.zeros(n), np.ones(k)])[None, :])
        upper.append(np.array([float(whole.most)]))
    constraints = [LinearConstraint(np.vstack(blocks), -np.inf, np.concatenate(upper))]
    if problem.total is not None:
        constraints.append(LinearConstraint(np.concatenate([np.ones(n), np.zeros(k)])[None, :],
                                            problem.total, problem.total))
    forced = (problem.lo[which] > 0.0).astype(float)
    result = milp(np.concatenate([c, np.zeros(k)]), constraints=constraints,
                  integrality=np.concatenate([np.zeros(n), np.ones(k)]),
                  bounds=Bounds(np.concatenate([problem.lo, forced]), np.concatenate([hi, np.ones(k)])),
                  options={"time_limit": watch.left, "mip_rel_gap": 1e-9, "presolve": PRESOLVE})
    solved = _translate(result, result.mip_dual_bound, replace(problem, hi=hi), c)
    return _clean_choice(solved, problem, c, watch)


def _without_hopeless(problem: Polytope, relaxed: Solved, c: Array, watch: Stopwatch, known: float) -> Polytope:
    """Close the stocks that cannot be in the best answer.

    Its least share of a stock outside the relaxed answer adds at least reduced·least to the relaxed value;
    where that is more than a known answer costs, the stock is out. The known answers are the relaxed one's
    stocks, all raised to their least share, or without the smallest of them.
    """
    whole, x = problem.whole, relaxed.x
    if whole is None or x is None or relaxed.reduced is None or not np.any(whole.least > 0.0):
        return problem
    for floor in (0.0, 0.5):
        tried = _solve_plain(problem.on_support(np.where(x >= floor * whole.least, x, 0.0)), c, watch)
        if tried.x is not None and whole.kept_by(tried.x):
            known = min(known, tried.value)
    slack = 1e-9 * max(1.0, abs(known))
    hopeless = whole.counted & (x <= 0.0) & (problem.lo <= 0.0) & (
        relaxed.reduced * whole.least > known - relaxed.bound + slack)
    return replace(problem, hi=np.where(hopeless, 0.0, problem.hi))


def _clean_choice(solved: Solved, problem: Polytope, c: Array, watch: Stopwatch) -> Solved:
    """Solve once more on the stocks chosen: a 0/1 variable is only whole to 1e-6, a share must be exact."""
    if solved.x is None:
        return solved
    exact = _solve_plain(problem.on_support(np.where(solved.x > 1e-6, solved.x, 0.0)), c, watch)
    if exact.x is None:
        return solved
    return replace(solved, x=exact.x, value=exact.value, bound=min(solved.bound, exact.value))
