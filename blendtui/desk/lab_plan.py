"""A bench blend to plan: what to weigh in the laboratory where the laws differ too much to trust a prediction."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import TYPE_CHECKING

from blendtui.store.harmless import harmless
from solver.stocks import Stock, StockTable

from . import numbers
from .errors import DeskError

if TYPE_CHECKING:
    from solver.recipe import Recipe

GRAMS = 500.0  # enough for two viscosity tubes, a density and a repeat (common practice)
LEAST_GRAMS, MOST_GRAMS = 20.0, 20_000.0
PARTS = (0.2, 0.4, 0.6, 0.8)  # of the second of a pair: four blends let the form of a lesson be chosen
WEIGHT = 0.01  # g, the step of a bench balance (common practice)


@dataclass(frozen=True)
class PairToTry:
    """Two stocks of the recipe between which the laws differ, and what they add to the spread."""

    first: str
    second: str
    spread_pct: float  # of KV40, of the two alone in the recipe's proportion
    weight: float  # their part of the recipe times that spread: how much they matter here


@dataclass(frozen=True)
class BenchPlan:
    """The recipe as a bench blend, and the pairs worth blending alone, the one that matters most first."""

    grams: float
    blend: Mapping[str, float]  # stock → g
    spread_pct: Mapping[str, float | None]
    pairs: tuple[PairToTry, ...]
    series: tuple[Mapping[str, float], ...]  # the first pair at four compositions, stock → g


def plan(recipe: Recipe, stocks: Sequence[Stock], grams: float = GRAMS) -> BenchPlan:
    """What to weigh for a recipe. DeskError without shares or for a mass no bench can weigh."""
    if not recipe.shares:
        raise DeskError("there are no shares to blend on the bench yet: make a recipe first")
    if not LEAST_GRAMS <= grams <= MOST_GRAMS:
        raise DeskError(f"{grams:g} g: a bench blend lies between {LEAST_GRAMS:g} and {MOST_GRAMS:g} g")
    pairs = _pairs(recipe.shares, StockTable(stocks), recipe.law)
    series: tuple[Mapping[str, float], ...] = ()
    if pairs:
        first, second = pairs[0].first, pairs[0].second
        series = tuple(_weighed({first: 1.0 - part, second: part}, grams) for part in PARTS)
    return BenchPlan(grams, _weighed(recipe.shares, grams), recipe.spread_pct, pairs, series)


def _weighed(shares: Mapping[str, float], grams: float) -> dict[str, float]:
    """Masses to the balance's step that sum to the whole: the largest takes what rounding leaves over."""
    rounded = {code: round(share * grams / WEIGHT) * WEIGHT for code, share in shares.items()}
    largest = max(rounded, key=lambda code: rounded[code])
    rounded[largest] += grams - sum(rounded.values())
    return {code: round(mass, 2) for code, mass in rounded.items()}


def _pairs(shares: Mapping[str, float], table: StockTable, law: str) -> tuple[PairToTry, ...]:
    import numpy as np

    from solver.recipe import spread

    found = []
    for one, other in combinations([c for c in shares if shares[c] > 0.0], 2):
        both = shares[one] + shares[other]
        x = np.zeros(len(table))
        x[table.index(one)], x[table.index(other)] = shares[one] / both, shares[other] / both
        apart = spread(table, x, law)["kv40"]
        if apart is not None and apart > 0.0:
            found.append(PairToTry(one, other, apart, both * apart))
    return tuple(sorted(found, key=lambda pair: -pair.weight))


def words(made: BenchPlan) -> list[str]:
    """The plan as lines of at most 80 columns: a reminder for the bench, no release."""
    lines = [f"BENCH BLEND, {made.grams:g} g: measure KV40 and KV100 on one sample, density, date, method"]
    lines += [f"  {harmless(code, 40):<12} {mass:10.2f} g" for code, mass in made.blend.items()]
    if made.series:
        pair = made.pairs[0]
        lines += ["", f"To teach the law, {harmless(pair.first, 40)} with {harmless(pair.second, 40)} alone, where the "
                      f"laws differ by {numbers.fixed(pair.spread_pct, 1)} % on KV40; four blends:"]
        lines += ["  " + ", ".join(f"{harmless(code, 40)} {mass:.2f} g" for code, mass in each.items())
                  for each in made.series]
    lines += ["", "Safety data sheets and the laboratory's own procedures decide how these are handled."]
    return [part for line in lines for part in textwrap.wrap(line, 80, subsequent_indent="  ") or [""]]


def as_json(made: BenchPlan) -> dict[str, object]:
    """The plan, JSON-ready."""
    return {"grams": made.grams, "blend_g": dict(made.blend), "spread_pct": dict(made.spread_pct),
            "pairs": [{"first": p.first, "second": p.second, "spread_pct": p.spread_pct} for p in made.pairs],
            "series_g": [dict(each) for each in made.series]}
