"""Viscosity index, ASTM D2270 (ISO 2909), both procedures, and the curve of equal VI.

With U = KV40, Y = KV100 [mm²/s], and L, H from the published table (linear between its lines) to Y = 70,
above it L = 0.8353 Y² + 14.67 Y − 216 and H = 0.1684 Y² + 11.85 Y − 97:

    A (U ≥ H):  VI = 100 (L − U)/(L − H)
    B (U ≤ H):  VI = (10^N − 1)/0.00715 + 100,   N = (log H − log U)/log Y

The two meet at VI = 100. There is no VI below Y = 2.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from . import viscosity_index_table as table
from .errors import RangeError
from .properties import Array

LOWEST_KV100 = 2.0
_Y = np.array(table.KV100)
_L = np.array(table.L)
_H = np.array(table.H)


def l_and_h(kv100: Any) -> tuple[Array, Array]:
    """L and H [mm²/s] at KV100 [mm²/s], any shape; the caller keeps to KV100 ≥ 2."""
    y = np.asarray(kv100, dtype=np.float64)
    above = y > 70.0
    low = np.where(above, (0.8353 * y + 14.67) * y - 216.0, np.interp(y, _Y, _L))
    high = np.where(above, (0.1684 * y + 11.85) * y - 97.0, np.interp(y, _Y, _H))
    return low, high


def indices(kv40: Any, kv100: Any) -> Array:
    """VI, unrounded, of arrays of KV40 and KV100 [mm²/s]; NaN below KV100 = 2."""
    u, y = np.asarray(kv40, dtype=np.float64), np.asarray(kv100, dtype=np.float64)
    safe = np.maximum(y, LOWEST_KV100)
    low, high = l_and_h(safe)
    a = 100.0 * (low - u) / (low - high)
    with np.errstate(over="ignore"):
        b = (10.0 ** (np.log(high / u) / np.log(safe)) - 1.0) / 0.00715 + 100.0
    return np.where(y < LOWEST_KV100, np.nan, np.where(u > high, a, b))


def viscosity_index(kv40: float, kv100: float) -> float:
    """VI, unrounded, of one oil. Source: ASTM D2270. RangeError below KV100 = 2 mm²/s.

    >>> round(viscosity_index(73.30, 8.86), 2)
    92.43
    """
    if kv100 < LOWEST_KV100:
        raise RangeError(f"KV100 {kv100:g} mm²/s: there is no viscosity index below 2 mm²/s at 100 °C")
    return float(indices(kv40, kv100))


def reported(vi: float) -> int:
    """VI as it is reported: a whole number, a half going to the even one."""
    return round(vi)


def kv40_at(vi: float, kv100: Any) -> Any:
    """KV40 [mm²/s] on the curve of a given VI at KV100 [mm²/s], any shape: U = L − VI(L−H)/100 to VI 100,
    U = H·Y^(−N), N = log10(1 + 0.00715 (VI − 100)), above. Rises with KV100. RangeError below KV100 = 2.
    """
    y = np.asarray(kv100, dtype=np.float64)
    if np.any(y < LOWEST_KV100):
        raise RangeError("there is no viscosity index below 2 mm²/s at 100 °C")
    low, high = l_and_h(y)
    if vi <= 100.0:
        return (low - vi * (low - high) / 100.0)[()]
    return (high * y ** -np.log10(1.0 + 0.00715 * (vi - 100.0)))[()]
