"""Measured blends of a pair, made ready for the fit: of two stocks in a table of results, or out of the record.

The index in which the excess is measured is the one in which the law's blend is read: the Refutas number, or W of
the D341 line at the temperature. Wright mixes temperatures and not W, but its blend too has a W at each temperature,
and the excess is what that W is out by: so it needs the stocks' lines, and two_stocks, with one temperature, has none.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence

import numpy as np

from .errors import SolverError
from .lab import Blends, Fit, fit
from .laws import basis_of, check_law, index_of_law, knows_viscosity, viscosity_gauge
from .measured import Measured
from .measured_doubts import fit_for_use
from .properties import Array
from .stocks import StockTable
from .target import Excess, Lesson

PAIR_SHARE = 0.8  # of a blend that the pair must be: in the rest other pairs' excess would be read as this one's
LEAST_PART = 0.02  # of the blend for either of the two: below it an excess is smaller than any result can show
TEMPERATURES = (40.0, 100.0)


def two_stocks(law: str, mass: Array, kv: Array, ends: tuple[float, float],
               densities: tuple[float, float] | None = None) -> Blends:
    """Blends of two stocks at one temperature, by mass fraction of the second, shape (n,).

    kv: measured [mm²/s], shape (n,); ends: KV [mm²/s] of the stocks at mass fraction 0 and 1; densities:
    theirs at 15 °C [kg/m³], which a volume law needs. f is the part of the stock at fraction 1.

    Raises SolverError for a Wright law, which needs each stock at two temperatures, and for a volume law
    without densities.

    >>> round(float(two_stocks("refutas", np.array([0.5]), np.array([52.5]), (30.6, 95.5)).predicted(())[0]), 4)
    52.0664
    """
    if check_law(law).startswith("wright"):
        raise SolverError(f"the law {law} needs each stock's KV at two temperatures, and here there is one; "
                          "use refutas, walther-mass or, with densities, walther-volume")
    mass = np.asarray(mass, dtype=np.float64)
    f = mass
    if basis_of(law) == "volume":
        if densities is None:
            raise SolverError(f"the law {law} needs the density of both stocks at 15 °C; give them, or use "
                              "refutas or walther-mass")
        volume = mass / densities[1], (1.0 - mass) / densities[0]
        f = volume[0] / (volume[0] + volume[1])
    index, value = index_of_law(law)
    low, high = float(index(ends[0])), float(index(ends[1]))
    return Blends(law, f, 1.0 - f, np.asarray(kv, dtype=np.float64), f * high + (1.0 - f) * low,
                  float(value(0.5 * (low + high))))


def of_record(measured: Iterable[Measured], law: str, first: str, second: str, celsius: float,
              taught: Sequence[Lesson] = ()) -> Blends:
    """The blends of a record that speak of a pair of stocks or oils at a temperature [°C] under a law.

    Those that were measured there, hold at least 2 % of each, and consist of the pair to 80 %; what the others
    in them do is left to the law and to the other lessons in `taught`. Keep doubtful blends out before
    (`measured_doubts.fit_for_use`), as `lesson` does.
    """
    if first == second:
        raise SolverError(f"{first} with itself is no pair; name two stocks or oils")
    code = f"kv{celsius:g}"
    others = tuple(e for e in taught if not (isinstance(e, Excess) and {e.first, e.second} == {first, second}))
    found = []
    for blend in measured:
        kv, table = blend.values.get(code), blend.table()
        if kv is None or not knows_viscosity(law, table).all():
            continue
        parts, ideal = _parts(table, blend, law, (first, second), celsius, others)
        if min(parts) >= LEAST_PART and sum(parts) >= PAIR_SHARE:
            found.append((*parts, float(kv), ideal, _middle(table, law, (first, second), celsius), blend.name))
    columns = list(zip(*found, strict=True)) or [()] * 6
    f, g, kvs, ideals, middles = (np.array(c, dtype=np.float64) for c in columns[:5])
    middle = float(np.exp(np.log(middles).mean())) if found else 1.0
    return Blends(law, f, g, kvs, ideals, middle, tuple(columns[5]))


def members(table: StockTable, name: str) -> Array:
    """1 where a stock of the table is, or holds, what is named; shape (n,)."""
    return np.array([1.0 if name in (s.code, s.oil) else 0.0 for s in table.stocks])


def shares_of(blend: Measured) -> Array:
    """Mass fractions of a blend's parts, summing to 1, shape (n,)."""
    x = np.array([part.share for part in blend.parts], dtype=np.float64)
    return np.asarray(x / x.sum())


def _parts(table: StockTable, blend: Measured, law: str, pair: tuple[str, str], celsius: float,
           others: tuple[Lesson, ...]) -> tuple[tuple[float, float], float]:
    x = shares_of(blend)
    weights = x / table.density if basis_of(law) == "volume" else x
    weights = weights / weights.sum()
    gauge = viscosity_gauge(law, table, celsius, others)
    f, g = (float(weights @ members(table, name)) for name in pair)
    return (f, g), float(gauge.index_of(x))


def _middle(table: StockTable, law: str, pair: tuple[str, str], celsius: float) -> float:
    """KV [mm²/s] of half and half of the pair alone by the law, the stocks of one oil taken evenly."""
    both = [members(table, name) for name in pair]
    x = sum(0.5 * m / max(1.0, float(m.sum())) for m in both)
    if not all(m.any() for m in both):
        return 1.0  # no blend of the pair: it falls out by its parts
    return viscosity_gauge(law, table, celsius).read(np.asarray(x))


def lesson(measured: Sequence[Measured], law: str, first: str, second: str, version: str = "",
           taught: Sequence[Lesson] = (), known: Collection[str] | None = None) -> tuple[Excess, dict[float, Fit]]:
    """What the record teaches of a pair at 40 and 100 °C: the excess, and what it rests on at each temperature.

    Doubtful blends that nobody has confirmed and blends with faults teach nothing (known: see `fit_for_use`).
    A temperature at which nothing was measured is left out; it is provisional where one of the two is.
    Raises SolverError with the reason when neither can be fitted.
    """
    fits: dict[float, Fit] = {}
    why = ""
    measured, _ = fit_for_use(measured, law, known, taught)
    for celsius in TEMPERATURES:
        blends = of_record(measured, law, first, second, celsius, taught)
        if not len(blends.kv):
            why = why or (f"{first} and {second}: no measured blend holds at least {100 * LEAST_PART:g} % of each "
                          f"and {100 * PAIR_SHARE:g} % of both together, with every stock's KVs; measure one, best "
                          "near half and half")
            continue
        try:
            fits[celsius] = fit(blends)
        except SolverError as error:
            why = f"{first} and {second} at {celsius:g} °C: {error}"
    if not fits:
        raise SolverError(why)
    terms = {celsius: found.terms for celsius, found in fits.items()}
    return Excess(first, second, law, terms, version, any(found.provisional for found in fits.values())), fits

