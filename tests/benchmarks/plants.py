"""Seeded random plants and targets for benchmarks and for the optimality tests: invented, never real."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from solver.stocks import Stock, StockTable
from solver.target import LAWS, Limit, Target
from solver.viscosity_index import kv40_at


def random_plant(rng: np.random.Generator, size: int) -> StockTable:
    """A plant of `size` stocks over KV100 2.5–40 and VI 80–150; better VI costs more, with noise."""
    stocks = []
    for i in range(size):
        kv100 = float(np.exp(rng.uniform(np.log(2.5), np.log(40.0))))
        vi = float(rng.uniform(80.0, 150.0))
        kv40 = float(kv40_at(vi, kv100))
        density = 905.0 - 0.45 * (vi - 80.0) - 20.0 * rng.random() + 0.5 * kv100
        price = 700.0 + 6.0 * (vi - 80.0) + 4.0 * kv100 + 250.0 * rng.random()
        stocks.append(Stock(f"S{i:03d}", kv40=kv40, kv100=kv100, density15=density, price_per_t=price,
                            on_hand_kg=float(rng.uniform(2e3, 2e5)), unpumpable_kg=500.0,
                            values={"flash": float(rng.uniform(190, 270)), "pour": float(rng.uniform(-40, -6)),
                                    "sulfur": float(rng.uniform(0, 0.6))}))
    return StockTable(stocks)


def random_target(rng: np.random.Generator, law: str, *, batch: bool = False, hardest: float = 130.0) -> Target:
    """Windows on both KVs and a VI minimum: an ISO-like window, a KV100 window around it, VI 88 to hardest."""
    kv40 = float(np.exp(rng.uniform(np.log(20.0), np.log(220.0))))
    vi = float(rng.uniform(88.0, hardest))
    # KV100 of an oil of this KV40 and a VI a little above the least one.
    grid = np.linspace(2.1, 60.0, 4000)
    kv100 = float(np.interp(kv40, kv40_at(vi + 3.0, grid), grid))
    limits = (Limit("kv40", 0.9 * kv40, 1.1 * kv40), Limit("kv100", 0.88 * kv100, 1.15 * kv100),
              Limit("vi", vi))
    return Target("random", limits, law=law, batch_kg=20e3 if batch else None)


def case(seed: int, k: int, smallest: int = 12, largest: int = 60,
         hardest: float = 130.0) -> tuple[StockTable, Target]:
    """Seeded case k: a plant and a target, laws in turn, a batch that can bind in every third."""
    rng = np.random.default_rng([seed, k])
    table = random_plant(rng, int(rng.integers(smallest, largest + 1)))
    return table, random_target(rng, LAWS[k % len(LAWS)], batch=k % 3 == 0, hardest=hardest)


def cases(seed: int, count: int, smallest: int = 12, largest: int = 60,
          hardest: float = 130.0) -> Iterator[tuple[StockTable, Target]]:
    """The first `count` seeded cases."""
    return (case(seed, k, smallest, largest, hardest) for k in range(count))
