"""Linear programmes over shares, by scipy's HiGHS: one shape of problem, one shape of answer.

    minimise c·x   subject to   A x ≤ −hold,   lo ≤ x ≤ hi,   Σ x = total (unless total is None)

and, where whole-number rules are given, x_k = 0 or x_k ≥ least for the stocks they count, with at most
`most` of those above 0; and, where charges come in steps, x_k = step_k n_k with n_k whole, x_k = 0 or at
least so much, and Σ x = total ± slack, for whole steps seldom meet one figure. Rows are scaled to about 1
and held a hair inside, so that the exact recomputation of a limit passes in spite of rounding; the bound
that is returned is that of the rows themselves, corrected by their prices, so that the hair never makes it
too high.
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
WHOLE = 1e-9  # part of a step to which a number of steps is whole
PRESOLVE = False  # it costs more than it saves on so few rows
# Rows of a programme in steps are multiplied by this: HiGHS meets a row of whole numbers to 1e-6, and an exact
# recomputation asks for more.
FINE = 1e3
TRIAL_NODES = 20  # of a trial: hundreds of thousands would not find what is not there
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
class Steps:
    """How each stock is charged: in whole steps, and not at all or at least so much. In the unit of x."""

    step: Array  # (n,) 0: any amount
    least: Array  # (n,) least amount of one that is used, 0: none

    def floor(self, x: Array) -> Array:
        """The most whole steps within x, as amounts; x itself where any amount will do."""
        return np.where(self.step > 0.0, self.step * np.floor(x / self._divisor + WHOLE), x)

    def ceil(self, x: Array) -> Array:
        """The fewest whole steps that reach x, as amounts."""
        return np.where(self.step > 0.0, self.step * np.ceil(x / self._divisor - WHOLE), x)

    def nearest(self, x: Array) -> Array:
        """The whole steps nearest to x, as amounts."""
        return np.where(self.step > 0.0, self.step * np.round(x / self._divisor), x)

    @property
    def _divisor(self) -> Array:
        return np.where(self.step > 0.0, self.step, 1.0)

    def kept_by(self, x: Array) -> bool:
        """Is every amount whole steps, and none too small?"""
        off = np.abs(x - self.nearest(x)) / self._divisor
        return bool(np.all(off <= WHOLE) and np.all((x <= 0.0) | (x >= self.least * (1.0 - WHOLE))))


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
    steps: Steps | None = None
    slack: float = 0.0  # how far the sum may lie from the total
    room: Array | None = None  # (m,) how far outside 0 a row may lie; None: nowhere
    trial: bool = False  # in steps: wanted only if soon found, so a short search without an answer is "infeasible"

    def with_rows(self, extra: list[Array], hold: float | None = None, room: list[float] | None = None) -> Polytope:
        """The same with further rows (scaled here, with the room that each has)."""
        if not extra:
            return self
        scaled = np.array([scale(row) for row in extra])
        wider = None
        if self.room is not None or room is not None:
            before = np.zeros(len(self.rows)) if self.room is None else self.room
            given = np.zeros(len(extra)) if room is None else np.array(room)
            wider = np.concatenate([before, given / np.maximum(np.abs(np.array(extra)).max(axis=1), 1e-300)])
        return replace(self, rows=np.vstack([self.rows, scaled]), room=wider,
                       hold=np.concatenate([self.hold, np.full(len(extra), self.inside if hold is None else hold)]))

    @property
    def limits(self) -> Array:
        """What the rows may reach, shape (m,)."""
        return -self.hold if self.room is None else self.room - self.hold

    def held(self, hold: float) -> Polytope:
        """The same with those rows that are held inside at all held by another amount."""
        return replace(self, hold=np.where(self.hold != 0.0, hold, 0.0), inside=hold)

    def on_support(self, x: Array) -> Polytope:
        """Only the stocks that x uses, as a problem without choices that keeps the whole-number rules.

        In steps it is a trial, for what is found beside x is welcome and never needed.
        """
        if self.whole is None and self.steps is None:
            return self
        used, chosen, lo, rows = x > 1e-9, np.zeros(len(x), dtype=np.bool_), self.lo, []
        steps = self.steps
        if self.whole is not None:
            chosen = chosen | self.whole.counted
            if self.slack > 0.0:
                rows = [self.whole.least[k] - np.eye(len(x))[k]  # x_k ≥ least Σ x
                        for k in np.flatnonzero(self.whole.counted & used & (self.whole.least > 0.0))]
            else:
                lo = np.where(self.whole.counted & used, np.maximum(lo, self.whole.least), lo)
        if steps is not None:
            chosen = chosen | (steps.least > 0.0)
            lo = np.where(used, np.maximum(lo, steps.least), lo)
            steps = replace(steps, least=np.zeros(len(x)))
        drop = chosen & ~used
        return replace(self, lo=np.where(drop, 0.0, lo), hi=np.where(drop, 0.0, self.hi), whole=None,
                       steps=steps, trial=steps is not None).with_rows(rows, hold=0.0)


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
    if len(c) == 0:
        return Solved("infeasible", None, np.inf, np.inf)
    if problem.whole is not None or problem.steps is not None:
        return _solve_whole(problem, c, watch, known)
    return _solve_plain(problem, c, watch)


def _sum(problem: Polytope) -> tuple[Array | None, Array | None, Array | None, Array | None]:
    """The total as an equation, or where it may lie within a slack as rows below their limits."""
    if problem.total is None:
        return None, None, None, None
    ones = np.ones((1, len(problem.lo)))
    if problem.slack <= 0.0:
        return ones, np.array([problem.total]), None, None
    span = np.array([problem.total + problem.slack, problem.slack - problem.total])
    return None, None, np.vstack([ones, -ones]), span


def _solve_plain(problem: Polytope, c: Array, watch: Stopwatch) -> Solved:
    if np.any(problem.lo > problem.hi + 1e-12):  # a least share raised above what the tank holds
        return Solved("infeasible", None, np.inf, np.inf)
    a_eq, b_eq, more, upper = _sum(problem)
    rows, limits = problem.rows, problem.limits
    if more is not None and upper is not None:
        rows, limits = np.vstack([rows, more]), np.concatenate([limits, upper])
    for method in ("highs", "highs-ipm"):
        result = linprog(c, A_ub=rows if len(rows) else None,
                         b_ub=limits if len(rows) else None, A_eq=a_eq, b_eq=b_eq,
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
        prices = np.minimum(result.ineqlin.marginals[:len(problem.hold)], 0.0)
        bound = float(result.fun) + float(prices @ problem.hold)
    return Solved("optimal", x, float(c @ x), float(c @ x) if bound is None else bound, reduced)


def tidy(x: Array, problem: Polytope) -> Array:
    """Shares within their bounds and summing to the total: the solver's rounding removed."""
    x = np.clip(x, problem.lo, np.maximum(problem.lo, problem.hi))
    x[(x < 1e-10) & (problem.lo <= 0.0)] = 0.0
    if problem.total is None or problem.steps is not None or problem.slack > 0.0 or x.sum() <= 0.0:
        return x  # amounts in whole steps are not stretched
    return np.asarray(x * (problem.total / x.sum()))


def _solve_whole(problem: Polytope, c: Array, watch: Stopwatch, known: float) -> Solved:
    """With whole-number rules or steps; first without them, for often they do not bind."""
    relaxed = _solve_plain(problem, c, watch)
    if relaxed.x is None or _keeps(problem, relaxed.x):
        return relaxed  # the rules do not bind (or nothing meets even the rest)
    if problem.steps is None:
        problem = _without_hopeless(problem, relaxed, c, watch, known)
    share, amount = _least(problem)
    chosen = amount > 0.0
    if problem.whole is not None:
        chosen = chosen | problem.whole.counted
    if problem.total is not None and problem.slack > 0.0:
        share = share * (problem.total - problem.slack)  # of the smallest sum there can be
    possible = ((problem.hi >= np.maximum(share, amount)) | (problem.lo > 0.0)) & (problem.hi > 0.0)
    problem = replace(problem, hi=np.where(chosen & ~possible, 0.0, problem.hi))
    if np.any(problem.lo > problem.hi + 1e-12):
        return Solved("infeasible", None, np.inf, np.inf)
    solved = _mixed(problem, c, watch, np.flatnonzero(chosen & possible))
    return _clean_choice(solved, problem, c, watch)


def _keeps(problem: Polytope, x: Array) -> bool:
    """Does a blend keep the whole-number rules and the steps already?"""
    return ((problem.whole is None or problem.whole.kept_by(x))
            and (problem.steps is None or problem.steps.kept_by(x)))


def _least(problem: Polytope) -> tuple[Array, Array]:
    """Of a stock that is used: its least share of the total, and its least amount. 0: none."""
    none = np.zeros(len(problem.lo))
    share = problem.whole.least if problem.whole is not None and len(problem.whole.least) else none
    return share, none if problem.steps is None else problem.steps.least


def _mixed(problem: Polytope, c: Array, watch: Stopwatch, which: np.ndarray[Any, np.dtype[np.intp]]) -> Solved:
    """A whole-number programme: numbers of steps, and a 0/1 choice y_k for every stock of `which`."""
    n, k, steps = len(c), len(which), problem.steps
    unit = np.ones(n) if steps is None else np.where(steps.step > 0.0, steps.step, 1.0)
    fine = 1.0 if steps is None else FINE
    lo, hi = problem.lo, problem.hi
    if steps is not None:
        lo, hi = steps.ceil(lo), steps.floor(hi)
        if np.any(lo > hi + 1e-12):
            return Solved("infeasible", None, np.inf, np.inf)
    rows, upper = _choice_rows(replace(problem, hi=hi), which)
    blocks = [np.hstack([problem.rows, np.zeros((len(problem.rows), k))]), rows]
    columns = np.concatenate([unit, np.ones(k)])
    constraints = [LinearConstraint(fine * np.vstack(blocks) * columns, -np.inf,
                                    fine * np.concatenate([problem.limits, upper]))]
    if problem.total is not None:
        ones = fine * np.concatenate([unit, np.zeros(k)])[None, :]
        constraints.append(LinearConstraint(ones, fine * (problem.total - problem.slack),
                                            fine * (problem.total + problem.slack)))
    # HiGHS stops 1e-6 from a proof: in steps, of a cost of about 1.
    worth = 1.0 if steps is None else max(0.25 * float(np.abs(c).max()), 1e-12)
    forced = (lo[which] > 0.0).astype(float)
    result = milp(np.concatenate([c * unit / worth, np.zeros(k)]), constraints=constraints,
                  integrality=np.concatenate([np.zeros(n) if steps is None else steps.step > 0.0, np.ones(k)]),
                  bounds=Bounds(np.concatenate([lo / unit, forced]), np.concatenate([hi / unit, np.ones(k)])),
                  options={"time_limit": watch.left, "mip_rel_gap": 1e-9, "presolve": PRESOLVE or steps is not None,
                           **({"node_limit": TRIAL_NODES} if problem.trial else {})})
    if problem.trial and result.status == 1:
        result.status = 0 if result.x is not None else 2
    if result.x is not None:
        result.x[:n] *= unit
    bound = None if result.mip_dual_bound is None else worth * result.mip_dual_bound
    return _translate(result, bound, replace(problem, lo=lo, hi=hi), c)


def _choice_rows(problem: Polytope, which: np.ndarray[Any, np.dtype[np.intp]]) -> tuple[Array, Array]:
    """Rows in (x, y): x_k ≤ hi_k y_k, x_k at least its least share and amount where y_k = 1, few y_k in all."""
    n, k = len(problem.lo), len(which)
    share, amount = _least(problem)
    pick = np.eye(n)[which]
    rows = [np.hstack([pick, -np.diag(problem.hi[which])])]
    upper = [np.zeros(k)]
    if problem.slack > 0.0 and problem.total is not None:
        # The least share is one of a sum that may vary: share Σ x − x_k ≤ share·most (1 − y_k).
        most = share[which] * (problem.total + problem.slack)
        rows.append(np.hstack([share[which][:, None] - pick, np.diag(most)]))
        upper.append(most)
        share = np.zeros(n)
    rows.append(np.hstack([-pick, np.diag(np.maximum(share, amount)[which])]))
    upper.append(np.zeros(k))
    if problem.whole is not None and problem.whole.most is not None:
        rows.append(np.concatenate([np.zeros(n), problem.whole.counted[which].astype(float)])[None, :])
        upper.append(np.array([float(problem.whole.most)]))
    return np.vstack(rows), np.concatenate(upper)


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
    x = np.where(solved.x > 1e-6, solved.x, 0.0)
    if problem.steps is not None:
        x = problem.steps.nearest(x)
        solved = replace(solved, x=x, value=float(c @ x), bound=min(solved.bound, float(c @ x)))
        stepped = problem.steps.step > 0.0
        if np.all(stepped | (x <= 0.0)):
            return solved
        problem = replace(problem, lo=np.where(stepped, x, problem.lo), hi=np.where(stepped, x, problem.hi))
    exact = _solve_plain(problem.on_support(x), c, watch)
    if exact.x is None:
        return solved
    return replace(solved, x=exact.x, value=exact.value, bound=min(solved.bound, exact.value))
