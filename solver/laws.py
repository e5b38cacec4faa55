"""The five blending laws: what a blend's viscosity will be, and the linear row of a limit on it.

refutas         V = 14.534 ln ln(v + 0.8) + 10.975, V_B = Σ x V          (R. E. Maples, 2000), by mass
walther-mass    W = log10 log10 Z(v), W_B = Σ f W                        (ASTM D7152, procedure by the ASTM
walther-volume                                                            equation), f by mass or volume
wright-mass     log T_B(W) = Σ f log T_i(W): at equal viscosity the      (ASTM D7152, Wright's procedure)
wright-volume   log temperatures mix

v in mm²/s, x mass fractions. Under Walther and Wright the blend is again a D341 line; under Refutas the
index is taken at each temperature. D7152 prefers Wright for base stocks and does not cover VI improvers
and additive packages: those blend by the blending KVs that the plant gives them.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np

from .errors import RangeError, StockError, TargetError
from .gauge import Gauge, weights
from .pairs import effective, excesses
from .properties import Array
from .stocks import StockTable
from .target import LAWS, Lesson
from .walther import kv_of, log_t, w_of


def vbn(kv: Any) -> Any:
    """Refutas blending number of a KV [mm²/s], any shape; valid above 0.2 mm²/s.

    >>> round(float(vbn(46.0)), 5)
    30.55235
    """
    return 14.534 * np.log(np.log(np.asarray(kv, dtype=np.float64) + 0.8)) + 10.975


def kv_of_vbn(number: Any) -> Any:
    """KV [mm²/s] of a Refutas blending number, any shape: the exact inverse of `vbn`."""
    # Above 90 the inverse leaves what a double holds; no oil comes near (1e6 mm²/s is 49).
    return np.exp(np.exp((np.minimum(np.asarray(number, dtype=np.float64), 90.0) - 10.975) / 14.534)) - 0.8


def check_law(law: str) -> str:
    """Return the law's name; TargetError when it is none of the five."""
    if law not in LAWS:
        raise TargetError(f"unknown law {law!r}; known are {', '.join(LAWS)}", where="law")
    return law


def basis_of(law: str) -> str:
    """ "volume" for the volume laws, else "mass"."""
    return "volume" if law.endswith("-volume") else "mass"


def index_of_law(law: str) -> tuple[Any, Any]:
    """The law's index and its inverse: (vbn, kv_of_vbn) or (w_of, kv_of)."""
    return (vbn, kv_of_vbn) if check_law(law) == "refutas" else (w_of, kv_of)


def viscosity_gauge(law: str, table: StockTable, celsius: float, lessons: Iterable[Lesson] = ()) -> Gauge:
    """The gauge of KV [mm²/s] at a temperature [°C] under a law, read off each stock's own D341 line.

    A stock without both KVs (or, under a volume law, without a density) takes no part: callers leave
    such stocks out first. `lessons`: what the laboratory has taught about them under this law: pair excess, and
    the index with which a stock blends in place of that of its own viscosity.
    """
    index, value = index_of_law(law)
    known = knows_viscosity(law, table)
    omega = np.where(known, np.where(known, weights(table, basis_of(law)), 1.0), 0.0)
    if law == "refutas":
        at = np.where(known, _kv_at(table, celsius), 1.0)
        if np.any(at[known] < 0.21):
            thin = table.codes[int(np.flatnonzero(known & (at < 0.21))[0])]
            raise RangeError(f"{thin} is thinner than 0.21 mm²/s at {celsius:g} °C, "
                             "where the D341 line ends; choose a lower temperature")
        num, den = np.where(known, vbn(at), 0.0), omega
    elif law.startswith("walther"):
        a, b = table.lines
        num, den = omega * (a - b * log_t(celsius)), omega
    else:
        # Wright: each line as log T = p + q W with p = a/b, q = −1/b; then W_B = Σ ω(log T − p) / Σ ω q.
        a, b = table.lines
        num, den = omega * (log_t(celsius) - a / b), omega * (-1.0 / b)
    lessons = tuple(lessons)
    for i, j in effective(table, lessons, law, celsius).items():
        num[i] = j * den[i]
    return Gauge(num, den, index, value, excess=excesses(table, lessons, law, celsius, omega) if lessons else None)


def _kv_at(table: StockTable, celsius: float) -> Array:
    """KV [mm²/s] of each stock at a temperature [°C], shape (n,): as given, else by its D341 line."""
    if celsius in (40.0, 100.0):
        return table.kv[:, 0 if celsius == 40.0 else 1]
    a, b = table.lines
    return np.asarray(kv_of(a - b * log_t(celsius)))


def knows_viscosity(law: str, table: StockTable) -> np.ndarray[Any, np.dtype[np.bool_]]:
    """Which stocks, shape (n,), have what the law needs: both KVs, and a density under a volume law."""
    known = np.isfinite(table.kv[:, 0]) & np.isfinite(table.kv[:, 1])
    return known & np.isfinite(table.density) if basis_of(law) == "volume" else known


def predict(law: str, table: StockTable, shares: Array, celsius: Sequence[float] = (40.0, 100.0)) -> Array:
    """KV [mm²/s], shape (len(celsius),), of the blend of these mass fractions, shape (n,).

    Raises TargetError for an unknown law, StockError when a stock that is used lacks what the law needs.
    """
    x = np.asarray(shares, dtype=np.float64)
    lacking = (x > 0.0) & ~knows_viscosity(check_law(law), table)
    if lacking.any():
        code = table.codes[int(np.flatnonzero(lacking)[0])]
        need = "KV40, KV100 and density" if basis_of(law) == "volume" else "KV40 and KV100"
        raise StockError(f"{code}: the law {law} needs {need}; enter them or leave the stock out",
                         stock=code, cell="kv40")
    return np.array([viscosity_gauge(law, table, t).read(x) for t in celsius])


def row(law: str, table: StockTable, celsius: float, limit: float, side: str) -> Array:
    """Coefficients c, shape (n,): Σ x_i c_i ≤ 0 exactly when KV(celsius) is ≤ ("high") or ≥ ("low") limit."""
    return viscosity_gauge(law, table, celsius).row(limit, side)
