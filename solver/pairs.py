"""Pair excess: what measured blends taught about two stocks, added to a law's index (Redlich–Kister).

    J_B = Σ x num / Σ x den + E,   E = Σ_pairs f g (A + B (f − g))

f and g are the pair's parts of the blend by the law's own basis, x ω / Σ x ω with ω = 1 or 1/ρ; where several
tanks hold one oil, f is their sum. Redlich and Kister, Ind. Eng. Chem. 40 (1948) 345.

E bends, so a limit is no longer a row. But H(x) = (Σ x den)·E(x) grows in proportion to x, so that by Euler
H(x) = ∇H(x)·x, and at a blend x0 the tangent is again a gauge: num + ∇H(x0) in place of num (`Excesses.lift`).
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np

from .properties import Array
from .stocks import StockTable
from .target import Effective, Excess, Lesson
from .walther import log_t

SAME = 0.5  # °C: a temperature this near to a measured one is that one


def pair_excess(f: Any, g: Any, terms: Iterable[float]) -> Any:
    """E = f g (A + B (f − g)) of one pair, f and g of any one shape; terms (A,) or (A, B), in the law's index.

    >>> float(pair_excess(0.5, 0.5, (2.0,)))
    0.5
    """
    a, b = [*terms, 0.0, 0.0][:2]
    f, g = np.asarray(f, dtype=np.float64), np.asarray(g, dtype=np.float64)
    return f * g * (a + b * (f - g))


def terms_at(excess: Excess, celsius: float) -> tuple[float, float] | None:
    """(A, B) at a temperature [°C]: as measured there, or on the straight line in log T through the two
    measured temperatures that enclose it or lie nearest. None where only another temperature was measured.
    """
    known = sorted(excess.terms)
    near = next((t for t in known if abs(t - celsius) <= SAME), None)
    if near is not None:
        a, b = [*excess.terms[near], 0.0, 0.0][:2]
        return float(a), float(b)
    if len(known) < 2:
        return None
    k = int(np.clip(np.searchsorted(known, celsius), 1, len(known) - 1))
    low, high = known[k - 1], known[k]
    part = float((log_t(celsius) - log_t(low)) / (log_t(high) - log_t(low)))
    both = [[*excess.terms[t], 0.0, 0.0][:2] for t in (low, high)]
    return tuple(float((1.0 - part) * x + part * y) for x, y in zip(*both, strict=True))  # type: ignore[return-value]


@dataclass(frozen=True)
class Excesses:
    """Every pair excess that speaks of a table of n stocks, at one temperature under one law."""

    omega: Array  # (n,) weights of the law's basis
    first: Array  # (k, n) 1 where the stock is the pair's first, else 0
    second: Array  # (k, n)
    terms: Array  # (k, 2)

    def value(self, x: Array) -> Any:
        """E of blends x, shape (n,) or (m, n), in the law's index."""
        w = np.asarray(x) * self.omega
        total = w.sum(axis=-1)
        safe = np.where(total > 0.0, total, 1.0)
        f, g = (w @ self.first.T) / safe[..., None], (w @ self.second.T) / safe[..., None]
        return (f * g * (self.terms[:, 0] + self.terms[:, 1] * (f - g))).sum(axis=-1)

    def gradient(self, x: Array) -> Array:
        """∇E at one blend x, shape (n,)."""
        w = x * self.omega
        total = float(w.sum())
        f, g = self.first @ w / total, self.second @ w / total
        a, b = self.terms[:, 0], self.terms[:, 1]
        by_f, by_g = g * (a + b * (2.0 * f - g)), f * (a + b * (f - 2.0 * g))
        # df/dx_i = ω_i (1{i in first} − f)/total
        slope = by_f @ (self.first - f[:, None]) + by_g @ (self.second - g[:, None])
        return np.asarray(self.omega * slope / total)

    def lift(self, x: Array, den: Array) -> Array:
        """∇H at x, shape (n,), with H(x) = (den·x)·E(x): what the tangent adds to a gauge's numerators."""
        return np.asarray(den * float(self.value(x)) + float(den @ x) * self.gradient(x))

    def span(self, hi: Array) -> tuple[float, float]:
        """Bounds on E over all blends with shares at most hi, shape (n,): a fine grid, and what lies between."""
        low = high = 0.0
        step = 1.0 / 200.0
        f, g = np.meshgrid(np.arange(0.0, 1.0 + step, step), np.arange(0.0, 1.0 + step, step))
        by_mass = float(np.ptp(self.omega)) == 0.0
        for first, second, (a, b) in zip(self.first, self.second, self.terms, strict=True):
            # By volume a part may be more than its share; 1 is always safe.
            most = [min(1.0, float(hi @ s)) if by_mass else 1.0 for s in (first, second)]
            inside = (f <= most[0] + step) & (g <= most[1] + step) & (f + g <= 1.0 + step)
            values = pair_excess(f[inside], g[inside], (a, b))
            between = 0.5 * step * (abs(a) + 2.0 * abs(b))  # the steepest that E can be, times half a step
            low += min(0.0, float(values.min()) - between)
            high += max(0.0, float(values.max()) + between)
        return low, high


def index_at(taught: Effective, celsius: float) -> float | None:
    """The effective index at a temperature [°C], found as the terms of a pair are; None where it is not known."""
    found = terms_at(Excess("", "", taught.law, {t: (j,) for t, j in taught.index.items()}), celsius)
    return None if found is None else found[0]


def effective(table: StockTable, lessons: Iterable[Lesson], law: str, celsius: float) -> dict[int, float]:
    """Position of a stock → the index with which it blends under this law at this temperature [°C]."""
    found: dict[int, float] = {}
    for taught in lessons:
        if isinstance(taught, Effective) and taught.law == law:
            at = index_at(taught, celsius)
            if at is not None:
                found |= {i: at for i, s in enumerate(table.stocks) if taught.stock in (s.code, s.poured.code)}
    return found


def excesses(table: StockTable, lessons: Iterable[Lesson], law: str, celsius: float, omega: Array) -> Excesses | None:
    """What of the lessons on pairs speaks of these stocks under this law at this temperature [°C]; None: nothing."""
    first, second, terms = [], [], []
    for pair in lessons:
        if not isinstance(pair, Excess):
            continue
        at = terms_at(pair, celsius) if pair.law == law else None
        members = [np.array([1.0 if name in s.names else 0.0 for s in table.stocks])
                   for name in (pair.first, pair.second)]
        if at is not None and any(at) and all(m.any() for m in members):
            first.append(members[0])
            second.append(members[1])
            terms.append(at)
    if not terms:
        return None
    return Excesses(omega, np.array(first), np.array(second), np.array(terms))
