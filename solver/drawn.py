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
from .uncertainty import KVS, Carried, Errors, Values, base_values, divisions, read_gauge
from .viscosity_index import indices

CHUNK, VALUES = 10_000, 20_000  # blends at a time, and values of stocks: what they need stays in the processor's cache
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
    chunk = min(CHUNK, max(1, VALUES // len(carried.errors.table)))
    for start in range(0, blends, chunk):
        yield _chunk(carried, min(chunk, blends - start), rng, taught)


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
    drawn = base_values(errors.table, errors.codes)
    for shifts in _shifts(errors):
        by = rng.standard_normal((k, n))
        for code, sigma in shifts.items():
            drawn[code] = drawn[code] + by * sigma
    flat = {code: np.broadcast_to(values, (k, n)).ravel() for code, values in drawn.items()}
    return Values(np.column_stack([flat["kv40"], flat["kv100"]]), flat["density15"], flat)


def _shifts(errors: Errors) -> list[Mapping[str, Array]]:
    """What one standard normal number a stock does to its values, one entry a number, of the sources that matter.

    Both viscosities are shifted by two tests and the lot, all normal: two numbers of the same covariance do.
    """
    used = {effect.source for effects in errors.effects.values() for effect in effects}
    told = [errors.sources[k].shifts for k in sorted(used)]
    viscous = [shifts for shifts in told if set(shifts) <= set(KVS)]
    others = [shifts for shifts in told if not set(shifts) <= set(KVS)]
    if not viscous:
        return others
    none = np.zeros(len(errors.table))
    at40, at100 = (np.array([shifts.get(code, none) for shifts in viscous]) for code in KVS)
    sigma = np.sqrt((at40 ** 2).sum(axis=0))
    along = np.divide((at40 * at100).sum(axis=0), sigma, out=np.zeros(len(sigma)), where=sigma > 0.0)
    rest = np.sqrt(np.maximum(0.0, (at100 ** 2).sum(axis=0) - along ** 2))
    return [{"kv40": sigma, "kv100": along}, {"kv100": rest}, *others]


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
