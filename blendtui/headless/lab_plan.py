"""`blendtui lab plan`: what to weigh on the bench."""

from __future__ import annotations

import argparse
from collections.abc import Callable

from .common import DONE, NO_BLEND, number, opened, show


def add_plan(add: Callable[..., argparse.ArgumentParser]) -> None:
    """Add the command to those of `lab`; `add(name, run, sentence)` returns its parser."""
    command = add("plan", _plan, "a bench blend of a product's recipe, and the pair that would teach the law most")
    command.add_argument("product", metavar="PRODUCT")
    command.add_argument("--grams", metavar="G", help="mass of one bench blend, g; 500 without")
    command.add_argument("--law", metavar="LAW", help="the law whose prediction is to be tried")


def _plan(options: argparse.Namespace) -> int:
    from blendtui.desk import blends, lab_plan
    from blendtui.desk.targets import target_of
    from blendtui.quiet import quiet

    grams = lab_plan.GRAMS if options.grams is None else number(options.grams, "--grams")
    with opened(options) as plant:
        stocks = plant.stocks()
        target = target_of(plant, options.product, options.law)
    with quiet():
        recipe = blends.best(stocks, target, time_limit=30.0)
    made = lab_plan.plan(recipe, stocks, grams)
    nearest = recipe.status == "infeasible"
    lines = ["NO BLEND meets every limit; this is the nearest"] if nearest else []
    show(options, {"product": options.product, "status": recipe.status, **lab_plan.as_json(made)},
         "\n".join([*lines, *lab_plan.words(made)]))
    return NO_BLEND if nearest else DONE
