"""The least-cost recipe: headless."""

from __future__ import annotations

import argparse
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from solver.target import LAWS

from .common import DONE, NO_BLEND, Add, BadInput, number, opened, say, show

if TYPE_CHECKING:
    from solver.recipe import Recipe
    from solver.stocks import Stock
    from solver.target import Target

SECONDS = 30.0


def register(add: Add) -> None:
    """Add the command."""
    command = add("design", _design, "the least-cost recipe of a product")
    command.add_argument("product", metavar="PRODUCT")
    command.add_argument("--batch", metavar="KG", help="batch size, kg (or 12 t)")
    command.add_argument("--law", help=", ".join(LAWS))
    command.add_argument("--under", action="append", default=[], metavar="LAW",
                         help="a law under which every limit must hold as well; may be repeated; all: every law")
    command.add_argument("--confidence", metavar="PCT", help="chance at which each limit is to be met, 50 to 99.9 %%")
    command.add_argument("--whole", action="store_true",
                         help="charges in whole scale divisions, drums and IBCs")
    command.add_argument("--ranges", action="store_true", help="least and most share of every allowed stock")
    command.add_argument("--blends", metavar="N", help="up to N (at most 8) blends of other stocks")


def _design(options: argparse.Namespace) -> int:
    from dataclasses import replace

    from blendtui import as_json, as_text
    from blendtui.desk import blends
    from blendtui.desk.law_error import law_sigma
    from blendtui.desk.targets import target_of
    from blendtui.quiet import quiet

    wanted = _count(options.blends)
    batch = None if options.batch is None else number(options.batch, "--batch", "mass")
    if batch is not None and batch <= 0.0:
        raise BadInput(f"--batch {options.batch}: a batch is more than 0 kg")
    if options.whole and options.confidence is not None:
        raise BadInput("--whole and --confidence are asked one at a time: take the shares of --confidence, "
                       "guard the limits, then ask for --whole")
    under = blends.laws_named(" ".join(options.under))
    with opened(options) as plant:
        stocks = plant.stocks()
        target = replace(target_of(plant, options.product, options.law, batch), also_laws=under)
        sigma = law_sigma(plant, target.law, target.product) if options.confidence is not None else None
    say(f"designing {options.product} …")
    with quiet():
        recipe, more, words = _recipe(stocks, target, options, sigma)
        feasible = recipe.status != "infeasible"
        ranges = blends.marked_ranges(stocks, target) if options.ranges and feasible else None
        others = blends.other_sets(stocks, target, wanted) if wanted and feasible else []
    answer = {**as_json.design(recipe), **more}
    if options.ranges:
        answer["ranges_pct"] = None if ranges is None else {
            code: [100.0 * each.low, 100.0 * each.high] for code, each in ranges.items()}
        answer["ranges_not_narrowed"] = [code for code, each in (ranges or {}).items() if not each.narrowed]
    if wanted:
        answer["blends"] = [as_json.other_blend(b) for b in others]
    text = as_text.design(options.product, recipe, stocks, ranges, others, words)
    show(options, answer, text)
    return DONE if feasible and recipe.shares is not None else NO_BLEND


def _recipe(stocks: Sequence[Stock], target: Target, options: argparse.Namespace,
            sigma: dict[str, float] | None) -> tuple[Recipe, dict[str, Any], tuple[str, ...]]:
    """The recipe as asked for, what its JSON has besides, and what its text says besides."""
    from blendtui.desk import blends

    if options.confidence is not None:
        from blendtui.desk import chance

        sure = chance.certain(stocks, target, chance.confidence(options.confidence), sigma, time_limit=SECONDS)
        return sure.recipe, {"confidence": chance.certain_json(sure)}, chance.certain_words(sure)
    if options.whole:
        made = blends.whole(stocks, target, SECONDS)
        return made.recipe, {"whole": blends.whole_json(made)}, ()
    return blends.best(stocks, target, time_limit=SECONDS), {}, ()


def _count(text: str | None) -> int:
    if text is None:
        return 0
    if not (text.isascii() and text.isdigit() and 1 <= int(text) <= 8):
        raise BadInput(f"--blends {text}: give a whole number from 1 to 8")
    return int(text)
