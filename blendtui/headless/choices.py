"""What else would do: headless."""

from __future__ import annotations

import argparse
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from blendtui.quiet import quiet

from .common import DONE, NO_BLEND, Add, BadInput, number, opened, say, show

if TYPE_CHECKING:
    from blendtui.desk.choices import Asked, Choices, Swept
    from solver.aims import Aim
    from solver.choices import Range
    from solver.entering import Reach, StockPrice
    from solver.prices import LimitPrice

WIDTH = 80  # columns of a printer
HEIGHT = 14  # rows of a curve
UNITS = {"least-cost": "currency/t", "widest-margin": "R", "fewest-stocks": "stocks", "least-scarce": "kg"}


def register(add: Add) -> None:
    """Add the command `choices`."""
    command = add("choices", _choices, "what else would do: blends by other aims, ranges, what limits and prices are "
                  "worth")
    command.add_argument("product", metavar="PRODUCT")
    command.add_argument("--batch", metavar="KG", help="batch size, kg (or 12 t)")
    command.add_argument("--law", help="the blending law, over the product's own")
    command.add_argument("--extra", metavar="PCT", nargs="+", action="extend", default=[],
                         help="ranges within so much above the least cost, %%; with --aim, the most that an aim may "
                              "cost more")
    command.add_argument("--aim", metavar="NAME", nargs="+", action="extend", default=[],
                         help="least-cost, widest-margin, fewest-stocks, most-of, least-of, least-scarce, closest, "
                              "most-rework, or all")
    command.add_argument("--stock", metavar="CODE", help="the stock that most-of and least-of speak of")
    command.add_argument("--trial", metavar="NAME", help="the kept trial that closest keeps to (else the newest)")
    command.add_argument("--sweep", metavar="WHAT",
                         help="least cost against PROPERTY:low, PROPERTY:high or price:STOCK")
    command.add_argument("--moves", action="store_true",
                         help="how far each used stock's price and quantity can move before the stocks change")
    command.add_argument("--points", metavar="N", help="points of the sweep, 60 by default")


def _choices(options: argparse.Namespace) -> int:
    from blendtui import curve
    from blendtui.desk import choice_words
    from blendtui.desk.choices import choices, newest_trial, sweep_of, swept, trial_named
    from blendtui.desk.sheet import NOT_A_CERTIFICATE
    from blendtui.desk.targets import target_of

    batch = None if options.batch is None else number(options.batch, "--batch", "mass")
    if batch is not None and batch <= 0.0:
        raise BadInput(f"--batch {options.batch}: a batch is more than 0 kg")
    asked, points = _asked(options), _points(options)
    with opened(options) as plant:
        stocks, trials = plant.stocks(), plant.trials(options.product)
        target = target_of(plant, options.product, options.law, batch)
    asked = replace(asked, trial=trial_named(trials, options.product, options.trial) if options.trial
                    else newest_trial(trials, options.product))
    say(f"asking what else would do for {options.product} …")
    with quiet():
        *_, found = choices(stocks, target, asked)
        drawn = None
        if options.sweep is not None:
            *_, drawn = swept(stocks, target, sweep_of(stocks, target, options.sweep), points)
    words = [] if asked.parts == () and found.feasible else [line for _, line in choice_words.lines(found, WIDTH)]
    if drawn is not None:
        words += [*([""] if words else []), *curve.draw(drawn, WIDTH, HEIGHT), "",
                  *(line for each in curve.table(drawn) for line in curve.wrapped(each, WIDTH))]
    show(options, answer(options.product, found, drawn), "\n".join([*words, "", NOT_A_CERTIFICATE]))
    return DONE if found.feasible else NO_BLEND


def _asked(options: argparse.Namespace) -> Asked:
    """What the options ask for; without any, everything but moves and a sweep."""
    from blendtui.desk.choices import EXTRAS, PARTS, Asked
    from solver.aims import AIMS

    extras = tuple(dict.fromkeys(_extra(text) for text in options.extra))
    names = tuple(dict.fromkeys(name for each in options.aim for name in (AIMS if each == "all" else (each,))))
    for name in names:
        if name not in AIMS:
            raise BadInput(f"--aim {name}: known are {', '.join(AIMS)}, all")
    if names and len(extras) > 1:
        raise BadInput("--aim takes one --extra: the most that an aim may cost more")
    parts = ("aims",) if names else ("ranges",) if extras else ()
    parts += ("reaches",) if options.moves else ()
    if not parts and options.sweep is None:
        parts = tuple(part for part in PARTS if part != "reaches")
    return Asked(parts, names, extras or EXTRAS, extras[0] if names and extras else None, options.stock or "")


def _extra(text: str) -> float:
    value = number(text.rstrip(" %"), "--extra")
    if not 0.0 <= value <= 1000.0:
        raise BadInput(f"--extra {text}: give % above the least cost, 0 to 1000")
    return value


def _points(options: argparse.Namespace) -> int | None:
    text = options.points
    if text is None:
        return None
    if options.sweep is None:
        raise BadInput("--points goes with --sweep")
    if not (text.isascii() and text.isdigit() and 2 <= int(text) <= 500):
        raise BadInput(f"--points {text}: give a whole number from 2 to 500")
    return int(text)


# JSON: the README has every key

def answer(product: str, found: Choices, drawn: Swept | None) -> dict[str, Any]:
    """The answer; a part that was not asked for is null."""
    def each(items: Any, make: Any) -> list[Any] | None:
        return None if items is None else [make(item) for item in items]

    return {"product": product, "law": found.target.law, "status": found.status,
            "least_cost_per_t": found.least_cost_per_t, "shares_pct": _percent(found.shares),
            "aims": each(found.aims, aim), "limits": each(found.limits, limit), "stocks": each(found.prices, stock),
            "reaches": each(found.reaches, reach), "ranges": each(found.ranges, lambda pair: ranges(*pair)),
            "sweep": None if drawn is None else sweep(drawn)}


def _percent(shares: Any) -> dict[str, float] | None:
    return None if shares is None else {code: 100.0 * share for code, share in shares.items()}


def aim(each: Aim) -> dict[str, Any]:
    """One entry of `aims`."""
    recipe, share = each.recipe, each.name not in UNITS
    return {"aim": each.name, "of": each.of or None, "unit": "mass %" if share else UNITS[each.name],
            "figure": None if each.figure is None else (100.0 if share else 1.0) * each.figure,
            "shares_pct": None if recipe is None else _percent(recipe.shares),
            "charges_kg": None if recipe is None or recipe.charges_kg is None else dict(recipe.charges_kg),
            "cost_per_t": None if recipe is None else recipe.cost_per_t, "extra_pct": each.extra_pct,
            "predicted": None if recipe is None else dict(recipe.predicted), "proven": each.proven,
            "note": each.note or None}


def limit(each: LimitPrice) -> dict[str, Any]:
    """One entry of `limits`."""
    return {"kind": each.kind, "of": each.of or None, "side": each.side, "limit": each.limit, "unit": each.unit,
            "step": each.step, "cost_per_t": each.cost_per_t, "eased_cost_per_t": each.eased_per_t,
            "tightened_cost_per_t": each.tightened_per_t, "saved_per_unit": each.saved_per_unit,
            "added_per_unit": each.added_per_unit}


def stock(each: StockPrice) -> dict[str, Any]:
    """One entry of `stocks`."""
    return {"stock": each.stock, "share_pct": 100.0 * each.share, "price_per_t": each.price_per_t,
            "used_below_per_t": each.critical_per_t,
            "share_below_pct": None if each.share_below is None else 100.0 * each.share_below,
            "checked": each.checked, "note": each.note or None}


def reach(each: Reach) -> dict[str, Any]:
    """One entry of `reaches`."""
    return {"stock": each.stock, "what": each.what, "now": each.now, "low": each.low, "high": each.high,
            "stocks_below": None if each.set_below is None else list(each.set_below),
            "stocks_above": None if each.set_above is None else list(each.set_above), "checked": each.checked}


def ranges(extra: float, found: dict[str, Range]) -> dict[str, Any]:
    """One entry of `ranges`."""
    return {"extra_pct": extra, "ranges_pct": {code: [100.0 * r.low, 100.0 * r.high] for code, r in found.items()},
            "not_narrowed": [code for code, r in found.items() if not r.narrowed]}


def sweep(drawn: Swept) -> dict[str, Any]:
    """The `sweep`: points in the order of their values."""
    of = drawn.sweep
    of_price = of.of == "price"
    return {"of": of.of, "side": None if of_price else of.which, "stock": of.which if of_price else None,
            "low": of.low, "high": of.high, "now": of.now,
            "points": [{"at": p.at, "status": p.status, "cost_per_t": p.cost_per_t, "shares_pct": _percent(p.shares)}
                       for p in drawn.points]}
