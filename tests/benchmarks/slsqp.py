"""What a user would do instead: a general optimiser (scipy's SLSQP) from many starts in share space.

It shares no row, window or proof with the solver: KV and VI are computed from the blend's shares, and
only the law's own index of each stock is taken from the package.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import minimize

from solver.laws import viscosity_gauge
from solver.stocks import StockTable
from solver.target import Target
from solver.viscosity_index import indices


@dataclass
class Search:
    """A target as plain functions of shares: cost, and slacks that must not be negative."""

    table: StockTable
    target: Target

    def __post_init__(self) -> None:
        self.price = self.table.price
        batch = self.target.batch_kg
        most = np.ones(len(self.table)) if batch is None else np.minimum(1.0, self.table.available / batch)
        self.bounds = list(zip(np.zeros(len(self.table)), most, strict=True))
        self.g40 = viscosity_gauge(self.target.law, self.table, 40.0)
        self.g100 = viscosity_gauge(self.target.law, self.table, 100.0)
        self.limits = {x.property: x for x in self.target.limits}

    def values(self, x: np.ndarray) -> tuple[float, float, float]:
        """KV40, KV100, VI of shares."""
        kv40, kv100 = self.g40.read(x), self.g100.read(x)
        return kv40, kv100, float(indices(kv40, max(kv100, 2.0)))

    def slacks(self, x: np.ndarray) -> np.ndarray:
        """Relative room to each limit: log ratios of KV, VI points by a hundred; all ≥ 0 when met."""
        kv40, kv100, vi = self.values(x)
        a, b, c = self.limits["kv40"], self.limits["kv100"], self.limits["vi"]
        return np.array([np.log(kv40 / a.low), np.log(a.high / kv40), np.log(kv100 / b.low),
                         np.log(b.high / kv100), (vi - c.low) / 100.0])

    def slack_gradients(self, x: np.ndarray) -> np.ndarray:
        """Analytic gradients of `slacks`, shape (5, n)."""
        kv40, kv100, _ = self.values(x)
        d40, d100 = self.g40.gradient(x), self.g100.gradient(x)
        h = 1e-6
        by40 = float(indices(kv40 * (1 + h), kv100) - indices(kv40 * (1 - h), kv100)) / (2 * h * kv40)
        by100 = float(indices(kv40, kv100 * (1 + h)) - indices(kv40, kv100 * (1 - h))) / (2 * h * kv100)
        return np.array([d40 / kv40, -d40 / kv40, d100 / kv100, -d100 / kv100, (by40 * d40 + by100 * d100) / 100.0])

    def run(self, start: np.ndarray, *, analytic: bool = True, inside: float = 0.0) -> np.ndarray:
        """One SLSQP descent from a start; `inside` keeps that much room to every limit."""
        scale = float(np.mean(self.price))
        extra = {"jac": self.slack_gradients} if analytic else {}
        equal = {"jac": lambda x: np.ones(len(x))} if analytic else {}
        gradient = {"jac": lambda x: self.price / scale} if analytic else {}
        result = minimize(lambda x: float(self.price @ x) / scale, start, method="SLSQP", bounds=self.bounds,
                          constraints=[{"type": "eq", "fun": lambda x: float(x.sum()) - 1.0, **equal},
                                       {"type": "ineq", "fun": lambda x: self.slacks(x) - inside, **extra}],
                          options={"maxiter": 200, "ftol": 1e-12}, **gradient)
        x = np.clip(result.x, 0.0, [high for _, high in self.bounds])
        return x / x.sum() if x.sum() > 0.0 else start

    def starts(self, rng: np.random.Generator, count: int) -> list[np.ndarray]:
        """Random shares, some of few stocks and some of many."""
        n = len(self.table)
        return [rng.dirichlet(np.full(n, alpha)) for alpha in np.geomspace(0.05, 1.0, count)]

    def worst(self, x: np.ndarray) -> float:
        """Largest miss of any limit or bound."""
        over = max(0.0, float(np.max(x - [high for _, high in self.bounds])))
        return max(over, -float(np.min(self.slacks(x))))

    def repair(self, x: np.ndarray, room: np.ndarray | None) -> np.ndarray | None:
        """The first shares on the way from x to a blend with room that meet every limit to 1e-9; None if none."""
        if self.worst(x) <= 1e-9:
            return x
        if room is None or self.worst(room) > 0.0 or self.worst(x) > 1e-3:
            return None
        low, high = 0.0, 1.0
        for _ in range(60):
            middle = 0.5 * (low + high)
            ok = self.worst(x + middle * (room - x)) <= 1e-9
            low, high = (low, middle) if ok else (middle, high)
        return x + high * (room - x)

    def best(self, rng: np.random.Generator, count: int = 12) -> tuple[float, np.ndarray] | None:
        """The cheapest of `count` descents after repair; None when none met the limits."""
        ends = [self.run(start) for start in self.starts(rng, count)]
        room = None
        for x in sorted(ends, key=self.worst)[:3]:
            near = self.run(x, inside=1e-6)
            if self.worst(near) <= 0.0:
                room = near
                break
        met = [y for x in ends if (y := self.repair(x, room)) is not None]
        return min(((float(self.price @ y), y) for y in met), key=lambda pair: pair[0], default=None)
