"""Columns beside the shares: what a linear programme needs to speak of a largest part or of a distance.

The shares x sum to 1, and so do the added columns v with one that fills them up, w: held by Σ x = Σ v + w and
Σ x + Σ v + w = 2. No gauge reads the added columns, so the rows, the VI and the whole-number rules stay.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from .linear import Polytope, Stopwatch, Whole
from .properties import Array
from .recipe import exact_search
from .rows import Model, View, with_rows
from .windows import Outcome

FOLLOWED = 12  # steps along the tangents of rows that bend


def beside(model: Model, count: int) -> tuple[Model, Polytope]:
    """A model and its polytope with `count` columns more, each within 0 to 1, and the one that fills them up."""
    n, more = len(model.table), count + 1

    def longer(values: Array) -> Array:
        return np.concatenate([values, np.zeros(more)])

    views = tuple(View(view.law, {code: replace(gauge, num=longer(gauge.num), den=longer(gauge.den))
                                  for code, gauge in view.gauges.items()}) for view in model.views)
    plain = model.polytope()
    balance = np.concatenate([np.ones(n), -np.ones(more)])
    whole = plain.whole
    if whole is not None:
        counted = np.concatenate([whole.counted, np.zeros(more, dtype=np.bool_)])
        whole = Whole(counted, whole.most, longer(whole.least))
    problem = replace(plain, rows=np.hstack([plain.rows, np.zeros((len(plain.rows), more))]), lo=longer(plain.lo),
                      hi=np.concatenate([plain.hi, np.ones(more)]), total=2.0, whole=whole)
    return (replace(model, views=views, exact=views), problem.with_rows([balance, -balance], hold=0.0))


def best_beside(model: Model, count: int, rows: Sequence[Array], hi: Array, c: Array, watch: Stopwatch,
                gap: float) -> Outcome:
    """Minimise c over shares and `count` columns beside them, which are at most hi, shape (count,).

    rows: coefficients, shape (n + count,), of Σ ≤ 0, as is c. To `gap`, absolute. The outcome's x are the shares.
    """
    n = len(model.table)
    longer = [np.concatenate([row, [0.0]]) for row in rows]
    for _ in range(FOLLOWED):
        padded, problem = beside(model, count)
        problem = replace(problem, hi=np.concatenate([problem.hi[:n], hi, [1.0]])).with_rows(longer, hold=0.0)
        found, _ = exact_search(padded, problem, np.concatenate([c, [0.0]]), watch, gap=0.0, gap_absolute=gap)
        if found.x is None:
            return found
        x = found.x[:n] / found.x[:n].sum()
        if not model.bent or not model.missed(x):
            return replace(found, x=x)
        model = with_rows(model, x)
    return Outcome("stopped", None, np.inf, -np.inf)
