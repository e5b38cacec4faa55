"""Tails of an error that is the sum of a normal one, a little skewed, and an even one: X ~ N(0, σ) + U(−h, h).

    P(X > d) = σ [ψ((h − d)/σ) − ψ((−h − d)/σ)] / 2h,   ψ(t) = t Φ(t) + φ(t) − γ/6 t φ(t)

(the tail of the skewed normal error averaged over the even one; ψ is the antiderivative of the first two terms of
its Edgeworth series, Φ(t) + γ/6 (t² − 1) φ(t); γ its third cumulant over σ³). d, σ and h share one unit.
"""

from __future__ import annotations

from math import erfc, exp, hypot, pi, sqrt

from scipy.special import ndtri

NEGLIGIBLE = 1e-3  # h/σ below which the even part is told by its variance alone
_ROOT2PI = sqrt(2.0 * pi)


def phi(t: float) -> float:
    """Φ(t), the normal distribution function."""
    return 0.5 * erfc(-t / sqrt(2.0))


def _density(t: float) -> float:
    return exp(-0.5 * t * t) / _ROOT2PI


def _below(t: float, skew: float) -> float:
    """Chance of a normal error above −t."""
    return phi(t) + skew / 6.0 * (t * t - 1.0) * _density(t)


def _psi(t: float, skew: float) -> float:
    if t < -40.0:
        return 0.0
    return t * phi(t) + _density(t) * (1.0 - skew / 6.0 * t)


def tail(d: float, sigma: float, even: float = 0.0, skew: float = 0.0, tolerance: float = 0.0) -> float:
    """P(X > d). Without any error it is 0 where d ≥ −tolerance, else 1.

    >>> round(tail(1.0, 0.5), 5), tail(0.0, 1.0, 2.0), tail(1.0, 0.0, 2.0), tail(0.0, 0.0)
    (0.02275, 0.5, 0.25, 0.0)
    """
    h = abs(even)
    if sigma <= 0.0:
        if h <= 0.0:
            return 0.0 if d >= -tolerance else 1.0
        return min(1.0, max(0.0, 0.5 - 0.5 * d / h))
    if h <= NEGLIGIBLE * sigma:
        chance = _below(-d / hypot(sigma, h / sqrt(3.0)), skew)
    else:
        chance = sigma * (_psi((h - d) / sigma, skew) - _psi((-h - d) / sigma, skew)) / (2.0 * h)
    return min(1.0, max(0.0, chance))


def tail_slopes(d: float, sigma: float, even: float, skew: float = 0.0) -> tuple[float, float, float]:
    """Derivatives of P(X > d) by d, σ and h; σ above 0.

    T depends on the ratios only, so that d T_d + σ T_σ + h T_h = 0.
    """
    h = abs(even)
    if h <= NEGLIGIBLE * sigma:
        s = hypot(sigma, h / sqrt(3.0))
        t = -d / s
        by_d = -_density(t) * (1.0 + skew / 6.0 * (3.0 * t - t ** 3)) / s
        return by_d, -by_d * d * sigma / s ** 2, -by_d * d * h / (3.0 * s ** 2)
    up, down = _below((h - d) / sigma, skew), _below((-h - d) / sigma, skew)
    by_d = -(up - down) / (2.0 * h)
    by_h = ((up + down) - 2.0 * tail(d, sigma, h, skew)) / (2.0 * h)
    return by_d, -(d * by_d + h * by_h) / sigma, by_h


def margin(missed: float, sigma: float, even: float, skew: float = 0.0) -> tuple[float, float, float]:
    """How far inside a limit a value must lie so that a part `missed` (above 0, to 0.5) of results is outside.

    Solves P(X > k) = missed. Returns k with its derivatives by σ and h; k rises with both, is convex in them (to
    the skew), and grows as they do: k = σ k_σ + h k_h. A skew may put it below 0.
    """
    h = abs(even)
    if sigma <= 1e-9 * h or sigma <= 0.0:
        return h * (1.0 - 2.0 * missed), 0.0, 1.0 - 2.0 * missed
    low, high = -2.0 * sigma, 40.0 * sigma + h
    k = -float(ndtri(missed)) * hypot(sigma, h / sqrt(3.0))
    for _ in range(100):
        slope, miss = tail_slopes(k, sigma, h, skew)[0], tail(k, sigma, h, skew) - missed
        low, high = (k, high) if miss > 0.0 else (low, k)
        step = k - miss / slope if slope < 0.0 else high
        new = step if low < step < high else 0.5 * (low + high)
        if abs(new - k) <= 1e-12 * (sigma + h):
            break
        k = new
    by_d, by_sigma, by_h = tail_slopes(k, sigma, h, skew)
    return k, -by_sigma / by_d, -by_h / by_d
