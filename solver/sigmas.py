"""How far a stock's value may be off: one standard deviation, and the one table it comes from.

A value is off for two reasons, which add as squares:

    σ² = σ_test² + σ_lot²,   σ_test = R/2.77

σ_test is the test's own scatter between laboratories (R: the method's reproducibility, properties.py). σ_lot is
how far what lies in the tank differs from what was tested: nothing for the lot's own test, more for a
certificate, most for typical values or where nobody knows the source. A σ that is typed is σ; what of it exceeds
the test's own scatter is taken as the lot's.

FACTORS gives σ/σ_test by source, and is common practice, not a standard. KV and density are tested far more
closely than lots agree (a certificate in place of the lot's own test is worth 1.5 % of KV, typical values
4 %, against 0.44 % of the test); of every other property the test itself scatters about as much as lots do.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from .errors import StockError
from .properties import Array, lookup
from .stocks import Stock, StockTable

TO_SIGMA = 1.0 / 2.77  # R is the 95 % limit between two results: 1.96·√2·σ
FACTORS = {  # source of the value → (σ/σ_test of KV and density, σ/σ_test of every other property)
    "own": (1.0, 1.0),
    "certificate": (3.5, 1.5),
    "computed": (3.5, 1.5),  # a tank topped up: by the laws from values of different days
    "typical": (9.0, 2.5),
    "": (9.0, 2.5)}  # unknown: no better than typical
WEIGHING = 0.005  # σ of a charge as a part of it, where no scale division is known (common practice)


def sigma_of_test(code: str, value: float) -> float:
    """σ of one test of a property at a value, in the property's unit: R/2.77."""
    return TO_SIGMA * lookup(code).reproducibility(value)


def source_of(stock: Stock, code: str) -> str:
    """The source that counts for a value of a stock.

    A pair of blending KVs is no test of the oil, whoever tested it: it counts as typical.
    """
    blends_as_another = stock.blend_kv40 is not None and stock.blend_kv100 is not None
    return "typical" if blends_as_another and code in ("kv40", "kv100") else stock.source


def sigma_of(stock: Stock, code: str, value: float) -> tuple[float, float]:
    """(σ_test, σ_lot) of a stock's value of a property, both in the property's unit.

    StockError where a σ was typed that is negative or no number.
    """
    typed = stock.sigmas.get(code)
    tested = sigma_of_test(code, value)
    if typed is None:
        close, other = FACTORS.get(source_of(stock, code), FACTORS[""])
        factor = close if lookup(code).basis == "law" or code == "density15" else other
        return tested, tested * float(np.sqrt(factor ** 2 - 1.0))
    if not (np.isfinite(typed) and typed >= 0.0):
        raise StockError(f"{stock.code}: the standard deviation of {code} is {typed:g}; it must be 0 or more; mend it "
                         "or leave it empty", stock=stock.code, cell=code)
    tested = min(typed, tested)
    return tested, float(np.sqrt(max(0.0, typed ** 2 - tested ** 2)))


def sigmas(table: StockTable, code: str, values: Array, own: Sequence[str] = ()) -> tuple[Array, Array]:
    """σ_test and σ_lot of all stocks, each of shape (n,); 0 where the value, shape (n,), is unknown.

    own: codes of stocks whose value is taken as if it had just been tested.
    """
    pairs = np.zeros((len(table), 2))
    for i, stock in enumerate(table.stocks):
        if np.isfinite(values[i]):
            known = sigma_of_test(code, float(values[i])), 0.0
            pairs[i] = known if stock.code in own else sigma_of(stock, code, float(values[i]))
    return pairs[:, 0], pairs[:, 1]
