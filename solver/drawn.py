"""Drawn blends: a first batch made many times over, with every error drawn anew, and measured.

Nothing is taken to first order here: drawn stock values go through the laws' own indices, drawn charges through
the mixture, and the VI of a result is worked out from its two viscosities. Draws are seeded: the same seed, the
same answer.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np

from .errors import TargetError
from .properties import Array
from .requirements import Requirement
from .sigmas import WEIGHING
from .uncertainty import Carried, Values, base_values, divisions, read_gauge
from .viscosity_index import indices

CHUNK = 10_000  # blends at a time: what they need stays in the processor's cache
MOST = 5_000_000


def results(carried: Carried, blends: int, seed: int) -> Iterable[dict[str, Array]]:
    """Measured results of drawn blends by property code, chunk by chunk, VI included where both KVs are read.

    carried: the errors at the blend whose first batch is made; its table holds the stocks used and no others.
    Raises TargetError for a number of blends that is not 1 to 5,000,000.
    """
    if not 1 <= blends <= MOST:
        raise TargetError(f"{blends} blends cannot be drawn; give 1 to {MOST}", where="blends")
    rng = np.random.default_rng(seed)
    taught = _taught(carried)
    for start in range(0, blends, CHUNK):
        yield _chunk(carried, min(CHUNK, blends - start), rng, taught)


def _taught(carried: Carried) -> dict[str, tuple[Array, float]]:
    """What the laboratory's lessons add: to each stock's numerator, shape (n,), and to the blend's index.

    Both stand still while values and charges are drawn: an excess depends on shares, which hardly move, and a stock
    whose blending index was worked back moves about that as it does about its own.
    """
    errors, x = carried.errors, carried.x
    return {code: (gauge.num - read_gauge(errors.table, errors.target.law, code).num,
                   0.0 if gauge.excess is None else float(gauge.excess.value(x)))
            for code, gauge in errors.gauges.items() if code in errors.codes}


def _chunk(carried: Carried, k: int, rng: np.random.Generator,
           taught: Mapping[str, tuple[Array, float]]) -> dict[str, Array]:
    errors = carried.errors
    table = errors.table
    stocks = _stocks(carried, k, rng)
    charges = _charges(carried, k, rng)
    common, even = rng.standard_normal(k), rng.uniform(-1.0, 1.0, k)
    found = {}
    for r, code in enumerate(errors.codes):
        gauge = read_gauge(stocks, errors.target.law, code)
        more, excess = taught[code]
        num, den = (np.einsum("ij,ij->i", charges, v.reshape(k, len(table))) for v in (gauge.num, gauge.den))
        with np.errstate(invalid="ignore", divide="ignore"):
            true = np.asarray(gauge.value((num + charges @ more) / den + excess), dtype=np.float64)
            law = carried.law[r, 0] * common + carried.even[r] * even
        if carried.law[r, 1 + r] > 0.0:
            law = law + carried.law[r, 1 + r] * rng.standard_normal(k)
        found[code] = true + law + carried.laboratory[r] * rng.standard_normal(k)
    if "kv40" in found and "kv100" in found:
        found["vi"] = indices(found["kv40"], found["kv100"])
    return found


def _stocks(carried: Carried, k: int, rng: np.random.Generator) -> Values:
    """k drawings of every stock's values, one after another, as one long table of k·n stocks."""
    errors = carried.errors
    n = len(errors.table)
    drawn = {code: np.tile(values, (k, 1)) for code, values in base_values(errors.table, errors.codes).items()}
    for source in errors.sources:
        shift = rng.standard_normal((k, n))
        for code, sigma in source.shifts.items():
            drawn[code] += shift * sigma
    flat = {code: values.ravel() for code, values in drawn.items()}
    return Values(np.column_stack([flat["kv40"], flat["kv100"]]), flat["density15"], flat)


def _charges(carried: Carried, k: int, rng: np.random.Generator) -> Array:
    """k drawings of every charge as a part of the batch, shape (k, n)."""
    x, steps = carried.x, divisions(carried.errors.table, carried.errors.target)
    drawn = np.tile(x, (k, 1))
    divided = steps > 0.0
    if divided.any():
        drawn[:, divided] += steps[divided] * rng.uniform(-0.5, 0.5, (k, int(divided.sum())))
    if not divided.all():
        drawn[:, ~divided] *= 1.0 + WEIGHING * rng.standard_normal((k, int((~divided).sum())))
    return np.maximum(drawn, 0.0)


def met(found: Mapping[str, Array], need: Requirement) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
    """Which results meet the limits of one property as asked; a result that cannot be known meets nothing."""
    values = found[need.code]
    hair = need.tolerance()
    good = np.isfinite(values)
    if need.low is not None:
        good &= values >= need.low - hair
    if need.high is not None:
        good &= values <= need.high + hair
    return good
