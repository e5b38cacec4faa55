"""Why nothing fits: headless."""

from __future__ import annotations

import argparse
import math
from typing import TYPE_CHECKING, Any

from blendtui.quiet import quiet

from .common import DONE, NO_BLEND, Add, BadInput, number, opened, say, show

if TYPE_CHECKING:
    from blendtui.desk.reasons import Interval, Report
    from solver.demands import Demand
    from solver.giving import Giving
    from solver.purchase import Allowed

WIDTH = 80  # columns of a printer


def register(add: Add) -> None:
    """Add the command `why`."""
    command = add("why", _why, "why no blend meets a product, what must give, what can be reached, what to buy")
    command.add_argument("product", metavar="PRODUCT")
    command.add_argument("--batch", metavar="KG", help="batch size, kg (or 12 t)")
    command.add_argument("--law", help="the blending law, over the product's own")
    command.add_argument("--give", metavar="PROPERTY,…", default="",
                         help="only these may give, the first one first and most (vi,kv40; cost)")


def _why(options: argparse.Namespace) -> int:
    from blendtui.desk import reason_words
    from blendtui.desk.reasons import order_of, reasons
    from blendtui.desk.sheet import NOT_A_CERTIFICATE
    from blendtui.desk.targets import target_of

    batch = None if options.batch is None else number(options.batch, "--batch", "mass")
    if batch is not None and batch <= 0.0:
        raise BadInput(f"--batch {options.batch}: a batch is more than 0 kg")
    order = order_of(options.give)
    with opened(options) as plant:
        stocks = plant.stocks()
        target = target_of(plant, options.product, options.law, batch)
    say(f"asking why of {options.product} …")
    with quiet():
        *_, report = reasons(stocks, target, order)
    lines = reason_words.lines(report, WIDTH)
    show(options, answer(report), "\n".join([*(line for _, line in lines), "", NOT_A_CERTIFICATE]))
    return DONE if report.status == "optimal" else NO_BLEND


def answer(report: Report) -> dict[str, Any]:
    """The report as JSON: see the README for every key."""
    from blendtui.desk.reason_words import conflict_words

    whole = report.whole
    return {
        "product": report.product, "status": report.status, "law": report.target.law,
        "conflicts": [{"demands": [_demand(d) for d in c.demands], "words": conflict_words(c, report.left_out),
                       "best": None if c.of is None or c.best is None else
                       {"property": c.of.name, "side": c.of.side, "value": c.best,
                        "treat_rates_held": c.treated}, "proven": c.proven}
                      for c in report.conflicts],
        "nearest": None if report.giving is None else _nearest(report.giving),
        "reach": {code: {"alone": _pair(alone), "with_others": _pair(others)}
                  for code, (alone, others) in (report.reach or {}).items()},
        "to_buy": None if report.assumed is None else _to_buy(report),
        "whole_numbers_only": whole is not None,
        "whole_numbers": None if whole is None else {
            "fewest_stocks": whole.fewest_stocks,
            "largest_least_share_pct": _pct(whole.largest_least_share)},
    }


def _pair(span: Interval | None) -> list[float] | None:
    return None if span is None else list(span)


def _pct(share: float | None) -> float | None:
    return None if share is None else 100.0 * share


def _demand(demand: Demand) -> dict[str, Any]:
    from blendtui.desk.reason_words import demand_words

    of_shares = demand.kind in ("share", "held", "left out", "list", "least share")
    limit, asked = (v if v is None or not of_shares else 100.0 * v for v in (demand.limit, demand.asked))
    return {"kind": demand.kind, "property": demand.name, "side": demand.side, "limit": limit, "asked": asked,
            "stocks": list(demand.stocks), "words": demand_words(demand)}


def _nearest(giving: Giving) -> dict[str, Any]:
    recipe, none = giving.recipe, giving.recipe.shares is None
    return {"shares_pct": None if none else {code: 100.0 * x for code, x in (recipe.shares or {}).items()},
            "predicted": None if none else dict(recipe.predicted), "cost_per_t": recipe.cost_per_t,
            "changes": [{"property": c.property, "side": c.side, "asked": c.asked, "needed": c.needed,
                         "units": c.units} for c in giving.changes],
            # A side that is let go altogether is null.
            "moved": [{"property": code, "side": side, "limit": None if math.isnan(at) else at}
                      for (code, side), at in giving.moved.items()],
            "order": list(giving.order), "reasons": list(giving.reasons)}


def _to_buy(report: Report) -> dict[str, Any]:
    from blendtui.desk.reason_words import assumed_words, capped

    assumed = report.assumed
    assert assumed is not None
    return {"assumed": {"values": {**assumed.values, "density15": assumed.density15},
                        "price_per_t": assumed.price_per_t, "words": assumed_words(assumed, capped(report))},
            "region": [{"kv40": p.kv40, "kv100": p.kv100, "vi": p.vi, "share_pct": _pct(p.share)}
                       for p in report.region if p.share is not None],
            "tried": [{"kv40": p.kv40, "kv100": p.kv100, "vi": p.vi} for p in report.region if p.share is None],
            "stocks": [_stock(x) for x in report.allowed if x.share is not None],
            "of_no_help": [{"stock": x.stock, "why_not": "; ".join(x.why_not)} for x in report.allowed
                           if x.share is None],
            "pairs": [{"stocks": list(x.stocks), "shares_pct": {code: 100.0 * s for code, s in x.shares.items()},
                       "cost_per_t": x.cost_per_t} for x in report.pairs]}


def _stock(each: Allowed) -> dict[str, Any]:
    return {"stock": each.stock, "why_not": "; ".join(each.why_not), "share_pct": _pct(each.share),
            "cost_per_t": each.cost_per_t, "assumed": list(each.assumed)}
