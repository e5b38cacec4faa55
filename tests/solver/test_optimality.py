"""The proof, held against a general optimiser that knows nothing of rows, windows or bounds."""

from __future__ import annotations

import numpy as np
import pytest

from solver.laws import predict
from solver.recipe import design
from solver.stocks import StockTable
from solver.target import Target
from solver.viscosity_index import viscosity_index
from tests.benchmarks.plants import case
from tests.benchmarks.slsqp import Search

CASES, BATCHES = 200, 10


def check_exactly(table: StockTable, target: Target, shares: dict[str, float]) -> None:
    """Every limit of a recipe, recomputed from its shares alone: KV to 1e-6 relative, VI to 0.01."""
    x = np.array([shares.get(code, 0.0) for code in table.codes])
    assert x.sum() == pytest.approx(1.0, abs=1e-9)
    kv40, kv100 = predict(target.law, table, x)
    for limit in target.limits:
        value = {"kv40": kv40, "kv100": kv100, "vi": viscosity_index(kv40, kv100)}[limit.property]
        room = 0.01 if limit.property == "vi" else 1e-6 * value
        assert limit.low is None or value >= limit.low - room
        assert limit.high is None or value <= limit.high + room
    if target.batch_kg is not None:
        assert np.all(x * target.batch_kg <= table.available + 1e-6 * target.batch_kg)


@pytest.mark.parametrize("part", range(BATCHES))
def test_never_dearer_than_the_best_of_twelve_starts(part: int) -> None:
    for k in range(part, CASES, BATCHES):
        table, target = case(20, k, hardest=150.0)
        recipe = design(table, target)
        other = Search(table, target).best(np.random.default_rng(k))
        if recipe.status == "infeasible":
            assert other is None, f"case {k}: a blend exists at {other}"
            continue
        assert recipe.status == "optimal"
        assert recipe.shares is not None
        assert recipe.cost_per_t is not None
        assert recipe.gap is not None
        assert recipe.gap <= 1e-5
        check_exactly(table, target, dict(recipe.shares))
        if other is not None:
            assert recipe.cost_per_t <= other[0] * (1.0 + 2e-6), f"case {k}, law {target.law}"


def test_the_bound_is_below_every_blend_that_meets_the_target() -> None:
    # A bound above any feasible blend would be no bound: many random blends, none may undercut it.
    table, target = case(20, 4)
    recipe = design(table, target)
    search = Search(table, target)
    rng = np.random.default_rng(5)
    assert recipe.bound_per_t is not None
    met = [x for x in rng.dirichlet(np.full(len(table), 0.15), size=6000) if search.worst(x) <= 0.0]
    assert met
    assert min(float(table.price @ x) for x in met) >= recipe.bound_per_t
