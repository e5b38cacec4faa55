"""The headless answers as JSON-ready dictionaries: unrounded numbers, null for what is unknown."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from blendtui.desk.stocks import derived
from blendtui.store.reads import joined
from blendtui.store.records import Product
from solver.stocks import Stock

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe
    from solver.walther import Line

Answer = dict[str, Any]


def percent(shares: Mapping[str, float] | None) -> dict[str, float] | None:
    """Mass fractions as mass %."""
    return None if shares is None else {code: 100.0 * share for code, share in shares.items()}


def viscosity(line: Line, vi: float | None, iso_vg: int | None, temperatures: Sequence[float]) -> Answer:
    """Answer of `viscosity`."""
    return {"vi": vi, "walther": {"a": line.a, "b": line.b},
            "at": [{"temperature_c": t, "kv": float(line.kv(t))} for t in temperatures], "iso_vg": iso_vg}


def prediction(recipe: Recipe) -> Answer:
    """Answer of `predict`, and the first part of that of `design`."""
    none = recipe.shares is None
    return {"law": recipe.law, "shares_pct": percent(recipe.shares),
            "predicted": None if none else dict(recipe.predicted),
            "spread_pct": None if none else dict(recipe.spread_pct), "cost_per_t": recipe.cost_per_t}


def design(recipe: Recipe) -> Answer:
    """Answer of `design`."""
    return {**prediction(recipe), "status": recipe.status,
            "gap": None if recipe.status == "infeasible" else recipe.gap,
            "charges_kg": None if recipe.charges_kg is None else dict(recipe.charges_kg),
            "limits": [limit(x) for x in recipe.limits], "batch_kg": recipe.batch_kg,
            "bound_per_t": recipe.bound_per_t, "to_be_tested": list(recipe.to_be_tested),
            "left_out": {x.stock: x.reason for x in recipe.left_out}, "reasons": list(recipe.reasons),
            "also_laws": list(recipe.also_laws), "lessons": list(recipe.lessons),
            "provisional": list(recipe.provisional), "warnings": list(recipe.warnings)}


def limit(result: LimitResult) -> Answer:
    """One limit of a `design`: as asked, as held with its guard, and as found."""
    return {"property": result.property, "low": result.low, "high": result.high, "guard": result.guard,
            "value": result.value, "met": result.met, "held_low": result.held_low,
            "held_high": result.held_high, "margin": result.margin, "binding": result.binding or None,
            "sources": list(result.sources), **({"by_law": dict(result.by_law)} if result.by_law else {})}


def other_blend(recipe: Recipe) -> Answer:
    """One entry of `blends`."""
    return {"shares_pct": percent(recipe.shares), "cost_per_t": recipe.cost_per_t,
            "predicted": dict(recipe.predicted), "spread_pct": dict(recipe.spread_pct)}


def stock(each: Stock) -> Answer:
    """One entry of `stocks`: the catalogue's columns, then what follows from them."""
    row = {cell: value for cell, value in asdict(each).items() if cell not in ("code", "values", "sigmas")}
    vi, slope = derived(each)
    return {"stock": each.code, **row, **joined(each), "vi": vi, "slope": slope}


def product(each: Product) -> Answer:
    """One entry of `products`: the catalogue's columns, its limits and its share rules."""
    row = asdict(each)
    row["limits"] = [{"property": x.property, "low": x.low, "high": x.high,
                      "guard": f"{x.guard_pct:g}%" if x.guard_pct else x.guard} for x in each.limits]
    row["shares"] = [{"of": x.of, "low_pct": 100.0 * x.low, "high_pct": 100.0 * x.high} for x in each.rules]
    del row["rules"]
    return row
