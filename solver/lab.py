"""What measured blends of a pair teach: the terms of its excess, how many the data carry, how far they count.

The excess of a pair in the law's index is E = f g (A + B (f − g)) (`pairs`). Blends k were measured at v_k; the
law alone gives the index J_k. In relative viscosity the model is linear, with d = dJ/d ln v at v_k:

    y_k = (J(v_k) − J_k)/d_k = (1/d_k) f_k g_k (A + B (f_k − g_k)) + ε_k,   ε ~ N(0, NOISE²)

**Shrinking.** Before any blend is measured a pair is taken to have little excess: A ~ N(0, τ²), B ~ N(0, (0.7 τ)²),
where τ is the size of the excess at half and half. τ is not known, so every τ from 0.2 to 32 % counts, small ones
more (weight 1/τ; common practice: most pairs of like oils are out by less than the laboratory can see), each as far
as it makes the measured y likely (its evidence). The terms are the mean of the ridge estimates over τ. So one
blend out by less than NOISE teaches almost nothing, one out by five times NOISE nearly all that it says, and a
second that agrees makes both count for more. The sizes are ours and round.

**Form.** From four blends on the form (none, one, two terms) is the one with the least leave-one-out error: every
composition is left out in turn and predicted from the others. With fewer, one term is offered as provisional.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from itertools import accumulate
from typing import Any

import numpy as np

from .errors import SolverError
from .laws import index_of_law
from .pairs import pair_excess
from .properties import Array

NOISE = 0.008  # of a viscosity: a result (R/2.77 is 0.4 to 0.7 %), the stocks' own values, and lack of fit
TAUS = 0.002 * 2.0 ** np.arange(8)  # sizes that the excess of a pair may have at half and half, of the viscosity
SECOND = 0.7  # size of B against A
FORMS = ("none", "one", "two")  # a form's place is its number of terms
FORM_FROM = 4  # blends from which on the form is chosen
WILD = 10.0  # times the law: terms that make the pair so much thicker or thinner somewhere are no lesson
SAME = 0.001  # compositions nearer than this in f and in g are one composition


@dataclass(frozen=True)
class Blends:
    """Measured blends of one pair at one temperature under one law, each array of shape (n,)."""

    law: str
    f: Array  # part of the first stock in the blend, by the law's basis
    g: Array  # part of the second
    kv: Array  # as measured, mm²/s
    ideal: Array  # what the law's index is without this pair's excess
    middle_kv: float  # KV [mm²/s] of half and half by the law: where sizes of an excess are stated
    names: tuple[str, ...] = ()  # of the blends, in the same order; empty: without names

    def where(self, keep: np.ndarray[Any, np.dtype[Any]]) -> Blends:
        """The blends at these positions."""
        return Blends(self.law, self.f[keep], self.g[keep], self.kv[keep], self.ideal[keep], self.middle_kv)

    def predicted(self, terms: Sequence[float]) -> Array:
        """KV [mm²/s] of these blends by the law with these terms, shape (n,)."""
        return _kv(self.law, self.ideal + pair_excess(self.f, self.g, terms))

    def error_pct(self, terms: Sequence[float]) -> Array:
        """100·|predicted/measured − 1|, shape (n,)."""
        return np.asarray(100.0 * np.abs(self.predicted(terms) / self.kv - 1.0))

    def compositions(self) -> list[int]:
        """A number for each blend, the same for blends of one composition."""
        seen: list[tuple[float, float]] = []
        cells: dict[tuple[int, int], list[int]] = {}  # a square of SAME by SAME → the compositions first seen in it
        numbers = []
        for f, g in zip(self.f.tolist(), self.g.tolist(), strict=True):
            at = int(f // SAME), int(g // SAME)
            around = (i for a in (-1, 0, 1) for b in (-1, 0, 1) for i in cells.get((at[0] + a, at[1] + b), ()))
            number = min((i for i in around if abs(seen[i][0] - f) <= SAME and abs(seen[i][1] - g) <= SAME),
                         default=len(seen))
            if number == len(seen):
                seen.append((f, g))
                cells.setdefault(at, []).append(number)
            numbers.append(number)
        return numbers


@dataclass(frozen=True)
class Fit:
    """The excess of a pair at one temperature, and what it rests on."""

    form: str  # one of FORMS
    terms: tuple[float, ...]  # () or (A,) or (A, B), in the law's index
    provisional: bool  # from fewer than four blends: not checked by leaving one out
    carried: float  # 0–1: how far the data and not the shrinking decide the terms; 1 is not shrunk
    blends: int
    compositions: int
    part: tuple[float, float]  # least and largest f/(f + g) measured: outside it the terms are a guess
    unfitted_pct: float  # mean error of the law alone on these blends
    fitted_pct: float  # mean error with the terms on the same blends
    leave_one_out_pct: float | None = None  # of the form chosen; None with fewer than four blends
    by_form: Mapping[str, float] = field(default_factory=dict)  # form → leave-one-out error, %


def fit(blends: Blends, form: str | None = None) -> Fit:
    """Fit the excess of a pair to measured blends, with the form that they carry or the one asked for.

    Raises SolverError with the reason: no blend, fewer compositions than constants, one composition repeated, terms
    that would change the pair tenfold where nothing was measured.

    >>> even = Blends("refutas", np.array([0.5]), np.array([0.5]), np.array([47.0]), np.array([30.55235]), 46.0)
    >>> found = fit(even)
    >>> found.form, found.provisional, round(found.terms[0], 2), round(found.carried, 2)
    ('one', True, 0.15, 0.46)
    """
    groups = blends.compositions()
    different = len(set(groups))
    _refuse(len(groups), different, form)
    errors = _leave_one_out(blends, groups) if len(groups) >= FORM_FROM else {}
    chosen = form or (min(errors, key=lambda name: errors[name]) if errors else "one")
    terms, carried = shrunk(blends, FORMS.index(chosen))
    _refuse_wild(blends, terms)
    part = blends.f / (blends.f + blends.g)
    return Fit(form=chosen, terms=terms, provisional=len(groups) < FORM_FROM, carried=carried, blends=len(groups),
               compositions=different, part=(float(part.min()), float(part.max())),
               unfitted_pct=float(blends.error_pct(()).mean()), fitted_pct=float(blends.error_pct(terms).mean()),
               leave_one_out_pct=errors.get(chosen), by_form=errors)


def _refuse(count: int, different: int, form: str | None) -> None:
    if form is not None and form not in FORMS:
        raise SolverError(f"unknown form {form!r}; known are {', '.join(FORMS)}")
    if count == 0:
        raise SolverError("no measured blend of this pair, and one term needs at least one; measure one, "
                          "best near half and half")
    if count > 1 and different == 1:
        raise SolverError(f"the {count} blends are one composition repeated, which cannot tell an excess from an "
                          "error of that blend; measure another composition, or keep one blend with their mean")
    constants = FORMS.index(form) if form else 1
    if different < constants:
        raise SolverError(f"{different} composition{'s' * (different > 1)} cannot carry {constants} constants; "
                          f"measure {constants - different} more, or ask for fewer terms")


def _refuse_wild(blends: Blends, terms: tuple[float, ...]) -> None:
    index, _ = index_of_law(blends.law)
    f = np.linspace(0.0, 1.0, 21)
    times = _kv(blends.law, index(blends.middle_kv) + pair_excess(f, 1.0 - f, terms)) / blends.middle_kv
    if not 1.0 / WILD <= float(times.min()) <= float(times.max()) <= WILD:
        part = blends.f / (blends.f + blends.g)
        raise SolverError(f"the terms would make the pair more than {WILD:g} times as thick or as thin as the law "
                          f"says, from blends with {100.0 * part.min():.3g} to {100.0 * part.max():.3g} % of the "
                          "first; check these results, or measure one near half and half")


def _kv(law: str, index: Array) -> Array:
    """KV [mm²/s] of the law's index, any shape; what lies beyond every oil overflows without a word."""
    with np.errstate(over="ignore", invalid="ignore"):
        return np.asarray(index_of_law(law)[1](index), dtype=np.float64)


def _leave_one_out(blends: Blends, groups: list[int]) -> dict[str, float]:
    """Mean error [%] of each form when the blends of every composition are predicted from all the others."""
    number = np.array(groups)
    errors = {}
    for count, name in enumerate(FORMS[:len(set(groups))]):
        # Sums over every composition but one, from those before it and those behind it: nothing is subtracted.
        each = [_zero_sums(count)] * (number.max() + 1)
        order = np.argsort(number, kind="stable")
        for one, rows in enumerate(np.split(order, np.flatnonzero(np.diff(number[order])) + 1)):
            each[one] = _sums(blends.where(rows), count)
        before = list(accumulate(each, _added, initial=_zero_sums(count)))
        behind = list(accumulate(each[::-1], _added, initial=_zero_sums(count)))[::-1]
        terms = np.array([_from_sums(_added(before[one], behind[one + 1]), _unit(blends, count))[0]
                          for one in range(len(each))]).reshape(len(each), count)
        excess = pair_excess(blends.f, blends.g, tuple(terms[number].T)) if count else 0.0
        errors[name] = float(np.mean(100.0 * np.abs(_kv(blends.law, blends.ideal + excess) / blends.kv - 1.0)))
    return errors


def shrunk(blends: Blends, count: int) -> tuple[tuple[float, ...], float]:
    """The first `count` terms, shrunk, and how far the data decide them (see the module's docstring)."""
    return _from_sums(_sums(blends, count), _unit(blends, count))


Sums = tuple[Array, Array, float]  # X'X, X'y and y'y of the linear model in relative viscosity


def _zero_sums(count: int) -> Sums:
    return np.zeros((count, count)), np.zeros(count), 0.0


def _added(a: Sums, b: Sums) -> Sums:
    return a[0] + b[0], a[1] + b[1], a[2] + b[2]


def _sums(blends: Blends, count: int) -> Sums:
    index, _ = index_of_law(blends.law)
    slopes = slope(blends.law, blends.kv)
    y = (np.asarray(index(blends.kv)) - blends.ideal) / slopes
    if not count:
        return np.zeros((0, 0)), np.zeros(0), float(y @ y)
    basis = np.column_stack([pair_excess(blends.f, blends.g, term) for term in ((1.0,), (0.0, 1.0))[:count]])
    x = basis / slopes[:, None]
    return x.T @ x, x.T @ y, float(y @ y)


def _unit(blends: Blends, count: int) -> Array:
    """The size of each term for an excess of the whole viscosity at half and half."""
    # E of (A,) at half and half is A/4, so a relative size τ there is A = 4 τ d.
    return 4.0 * float(slope(blends.law, np.array([blends.middle_kv]))[0]) * np.array([1.0, SECOND])[:count]


def _from_sums(sums: Sums, unit: Array) -> tuple[tuple[float, ...], float]:
    (squares, cross, own), count = sums, len(unit)
    if count == 0:
        return (), 0.0
    # y ~ N(0, NOISE²·I + X P X'), worked in the few terms and not in the many blends; one row a τ.
    prior = (TAUS[:, None] * unit) ** 2
    precision = squares + NOISE**2 * np.eye(count) / prior[:, None, :]
    estimates = np.linalg.solve(precision, np.broadcast_to(cross[:, None], (len(TAUS), count, 1)))[..., 0]
    spread = np.linalg.slogdet(np.eye(count) + prior[:, :, None] * squares / NOISE**2)[1]
    evidence = -0.5 * (own - estimates @ cross) / NOISE**2 - 0.5 * spread - np.log(TAUS)
    carried = np.trace(np.linalg.solve(precision, np.broadcast_to(squares, precision.shape)), axis1=1, axis2=2) / count
    weight = np.exp(evidence - evidence.max())
    weight /= weight.sum()
    return tuple(float(t) for t in weight @ estimates), float(weight @ carried)


def slope(law: str, kv: Array) -> Array:
    """dJ/d ln v of the law's index at KV [mm²/s], shape as given: what a relative change of v is worth."""
    index, _ = index_of_law(law)
    h = 1e-5
    return np.asarray((index(kv * np.exp(h)) - index(kv * np.exp(-h))) / (2.0 * h), dtype=np.float64)
