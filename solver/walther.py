"""The viscosity-temperature line of ASTM D341: W(v) = log10 log10 Z(v) is straight in log10 T.

Z(v) = v + 0.7 + exp(−1.47 − 1.84 v − 0.51 v²), v in mm²/s, T in K; the short form, stated for
0.21 to 2·10⁷ mm²/s. Z is inverted by Newton's method, not by the standard's approximate inverse.
Not to be used below the cloud point or near boiling.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from .errors import RangeError
from .properties import KELVIN, Array

LOWEST_KV = 0.21
HIGHEST_KV = 2e7
LOG_T40 = float(np.log10(40.0 + KELVIN))
LOG_T100 = float(np.log10(100.0 + KELVIN))
# 10 ** 10 ** 2.4 is the last power a double holds; above it every oil is a solid anyway.
_HIGHEST_W = 2.4


def log_t(celsius: Any) -> Any:
    """log10 of the absolute temperature [K] of a temperature in °C."""
    return np.log10(np.asarray(celsius, dtype=np.float64) + KELVIN)


def w_of(kv: Any) -> Any:
    """W = log10 log10 Z of a kinematic viscosity [mm²/s], any shape; valid 0.21 to 2·10⁷.

    Source: ASTM D341, short form.

    >>> round(float(w_of(46.0)), 6)
    0.222539
    """
    v = np.asarray(kv, dtype=np.float64)
    return np.log10(np.log10(v + 0.7 + np.exp(-1.47 - 1.84 * v - 0.51 * v * v)))


def kv_of(w: Any) -> Any:
    """Kinematic viscosity [mm²/s] of an index W, any shape: the exact inverse of `w_of`.

    Newton's method on Z(v), to 1e-12 of v; below Z = 0.93 (v = 0) it returns 0.
    """
    z = 10.0 ** 10.0 ** np.minimum(np.asarray(w, dtype=np.float64), _HIGHEST_W)
    v = np.maximum(z - 0.7, 0.0)
    for _ in range(40):
        tail = np.exp(-1.47 - 1.84 * v - 0.51 * v * v)
        step = (v + 0.7 + tail - z) / (1.0 - (1.84 + 1.02 * v) * tail)
        v = np.maximum(v - step, 0.0)
        if np.all(np.abs(step) <= 1e-13 * (v + 1e-3)):
            break
    return v


@dataclass(frozen=True)
class Line:
    """W = a − b·log10 T of one oil."""

    a: float
    b: float

    def kv(self, celsius: Any) -> Any:
        """KV [mm²/s] at a temperature [°C], any shape."""
        return kv_of(self.a - self.b * log_t(celsius))

    def temperature(self, kv: float) -> float:
        """Temperature [°C] at which the oil has this KV [mm²/s]; RangeError outside 0.21 to 2·10⁷."""
        _check_kv(kv)
        return float(10.0 ** ((self.a - float(w_of(kv))) / self.b)) - KELVIN

    @property
    def slope(self) -> float:
        """Slope −dW/d(log10 T) of the line: about 2.7 (high VI) to 4 (low VI)."""
        return self.b

    def dynamic(self, celsius: float, density15: float) -> float:
        """Dynamic viscosity [mPa·s] at a temperature [°C] of an oil of this density at 15 °C [kg/m³].

        μ = ν·ρ(t)/1000 with the density carried to the temperature by `density_at`.
        """
        return float(self.kv(celsius)) * density_at(density15, celsius) / 1000.0


def _check_kv(kv: float) -> None:
    if not LOWEST_KV <= kv <= HIGHEST_KV:
        raise RangeError(f"KV {kv:g} mm²/s lies outside {LOWEST_KV} to 2e7, where the D341 line is stated")


@lru_cache(maxsize=4096)
def line(kv40: float, kv100: float) -> Line:
    """The line through KV at 40 and 100 °C [mm²/s]. RangeError outside 0.21–2·10⁷ or if KV100 ≥ KV40.

    >>> oil = line(32.0, 5.4)
    >>> round(oil.a, 6), round(oil.b, 6)
    (9.530815, 3.746578)
    """
    return line_through(40.0, kv40, 100.0, kv100)


def line_through(t1: float, kv1: float, t2: float, kv2: float) -> Line:
    """The line through two points, temperature [°C] and KV [mm²/s], the first the colder.

    Raises RangeError for a KV outside 0.21 to 2·10⁷, or one that does not fall as the oil warms.
    """
    _check_kv(kv1)
    _check_kv(kv2)
    if not t1 < t2:
        raise RangeError(f"the first point must be the colder one, not {t1:g} °C before {t2:g} °C")
    if not kv2 < kv1:
        raise RangeError(f"KV {kv2:g} at {t2:g} °C is not below {kv1:g} at {t1:g} °C: "
                         "oil thins as it warms; are the two swapped?")
    w1, w2 = float(w_of(kv1)), float(w_of(kv2))
    l1, l2 = float(log_t(t1)), float(log_t(t2))
    b = (w1 - w2) / (l2 - l1)
    return Line(w1 + b * l1, b)


def lines(kv: Array) -> tuple[Array, Array]:
    """a and b, each of shape (n,), of the lines through KV40 and KV100 [mm²/s], shape (n, 2)."""
    w = w_of(kv)
    b = (w[:, 0] - w[:, 1]) / (LOG_T100 - LOG_T40)
    return w[:, 0] + b * LOG_T40, b


def density_at(density15: float, celsius: float) -> float:
    """Density [kg/m³] at a temperature [°C] of a lubricating oil of density15 [kg/m³].

    ρ(t) = ρ15·exp[−αΔt(1 + 0.8αΔt)], α = 0.6278/ρ15, Δt = t − 15: the 1980 petroleum measurement
    tables, 54D (from memory; checked against the figures in tests/solver). About −20 to 150 °C.

    >>> round(density_at(868.0, 60.0) / 868.0, 6)
    0.967157
    """
    if density15 <= 0.0:
        raise RangeError(f"density {density15:g} kg/m³ must be above 0")
    x = 0.6278 / density15 * (celsius - 15.0)
    return density15 * float(np.exp(-x * (1.0 + 0.8 * x)))
