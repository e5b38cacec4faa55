"""Charging a batch: what went in, the second check, what is ahead and what would put it right; headless."""

from __future__ import annotations

import argparse
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from .common import DONE, Add, number, opened, show, whole
from .stock import answered, lines_of, person

if TYPE_CHECKING:
    from blendtui.desk.batch_outlook import Outlook
    from blendtui.desk.charging import Charged
    from blendtui.store.batch_records import Charge
    from solver.trim import Trim


def add_to(of_batch: Add) -> None:
    """Add `charge`, `correct`, `check`, `miss`, `outlook` and `replan` to `batch`."""
    made = of_batch("charge", _charge, "enter what was really charged on a line of the card")
    _line(made)
    _amount(made)
    made.add_argument("--stock", metavar="STOCK", default="",
                      help="what was charged, where it was another than planned; needs --why and --sure")
    person(made)
    made = of_batch("correct", _correct, "correct what was entered, with its reason; the second check is due again")
    _line(made)
    _amount(made)
    person(made)
    made = of_batch("check", _check, "second check of one or more lines, by another person; all of them or none")
    made.add_argument("batch", metavar="BATCH", help="such as B-0001")
    made.add_argument("lines", metavar="LINE", type=whole, nargs="+")
    person(made)
    made = of_batch("miss", _miss, "drop a line that is not charged, with its reason")
    _line(made)
    person(made)
    for name, run, words in (
            ("outlook", _outlook, "what the batch will be if the rest goes as planned, and what would put it right"),
            ("replan", _replan, "replace the charges to come by what would put the batch right")):
        made = of_batch(name, run, words)
        made.add_argument("batch", metavar="BATCH", help="such as B-0001")
        if name == "replan":
            person(made)


def _line(command: argparse.ArgumentParser) -> None:
    command.add_argument("batch", metavar="BATCH", help="such as B-0001")
    command.add_argument("line", metavar="LINE", type=whole, help="of the card")


def _amount(command: argparse.ArgumentParser) -> None:
    command.add_argument("amount", metavar="KG", nargs="+",
                         help="kg, or with its unit: 9.01 t, 3 drums, or 9000 L at the tank's temperature")
    command.add_argument("--lot", metavar="LOT", default="", help="as read off the drum or the board")
    command.add_argument("--at", metavar="T", default=None, help="°C of the tank (or 95F)")


def _celsius(options: argparse.Namespace) -> float | None:
    return None if options.at is None else number(options.at, "--at", "temperature")


# Steps

def _charge(options: argparse.Namespace) -> int:
    from blendtui.desk import charging

    with opened(options) as plant:
        done = answered(lambda: charging.charge(
            plant, options.batch, options.line, " ".join(options.amount), lot=options.lot, celsius=_celsius(options),
            stock=options.stock, by=options.by, why=options.why, sure=options.sure))
    return _told(options, done)


def _correct(options: argparse.Namespace) -> int:
    from blendtui.desk import charging

    with opened(options) as plant:
        done = answered(lambda: charging.correct(
            plant, options.batch, options.line, " ".join(options.amount), lot=options.lot, celsius=_celsius(options),
            by=options.by, why=options.why, sure=options.sure))
    return _told(options, done)


def _miss(options: argparse.Namespace) -> int:
    from blendtui.desk import charging

    with opened(options) as plant:
        done = answered(lambda: charging.miss(plant, options.batch, options.line, by=options.by, why=options.why,
                                              sure=options.sure))
    return _told(options, done)


def _told(options: argparse.Namespace, done: Charged) -> int:
    answer = {"batch": done.made.name, "line": charge_json(done.line), "odd": done.odd, "said": list(done.words),
              "effects": {code: {"planned": was, "now": now} for code, (was, now) in done.effects.items()},
              "outlook": outlook_json(done.outlook)}
    show(options, answer, lines_of(done.words))
    return DONE


def _check(options: argparse.Namespace) -> int:
    from blendtui.desk import batches, charging

    with opened(options) as plant:
        rows = answered(lambda: charging.check_all(plant, options.batch, options.lines, by=options.by,
                                                   sure=options.sure))
    show(options, {"batch": options.batch, "lines": [charge_json(row) for row in rows]}, lines_of(
        [f"line {row.line}, {row.stock}: checked by {row.checked_by}, {batches.when(row.checked_at)}" for row in rows]))
    return DONE


def _outlook(options: argparse.Namespace) -> int:
    from blendtui.desk import batch_lab, batches, charging

    with opened(options) as plant:
        # Of a closed batch nothing is ahead any more.
        made = batches.opened(plant, options.batch)
        ahead, says = charging.outlook(plant, made), batch_lab.verdict(made, batches.target_of(plant, made))
    # A prediction is not the last word on what the laboratory has measured.
    measured = [f"the laboratory has measured it: {says.headline}; blendtui batch verdict {options.batch} says why"
                ] if any(limit.value is not None for limit in says.limits) else []
    show(options, outlook_json(ahead, measured), outlook_text(ahead, measured))
    return DONE


def _replan(options: argparse.Namespace) -> int:
    from blendtui.desk import charging, numbers

    with opened(options) as plant:
        made = answered(lambda: charging.replan(plant, options.batch, by=options.by, why=options.why))
        ahead = charging.outlook(plant, made)
    lines = [f"{made.name} planned anew: {numbers.batch(made.head.batch_kg)} kg when all is charged",
             *(f"line {c.line}, {c.stock}: {numbers.batch(c.plan_kg)} kg" for c in made.to_charge), *ahead.words]
    show(options, {"batch": made.name, "batch_kg": made.head.batch_kg,
                   "charges": [charge_json(c) for c in made.charges], "outlook": outlook_json(ahead)}, lines_of(lines))
    return DONE


# What is shown

def charge_json(row: Charge) -> dict[str, Any]:
    """A line of the card, numbers unrounded; null: unknown, or not charged."""
    return {"line": row.line, "round": row.round, "stock": row.stock, "state": row.state, "plan_kg": row.plan_kg,
            "tolerance_kg": row.tolerance_kg, "actual_kg": row.actual_kg, "lot_planned": row.lot or None,
            "lot": row.actual_lot or None, "lots": dict(row.lots), "celsius": row.celsius, "at": row.at or None,
            "by": row.by or None, "checked_at": row.checked_at or None, "checked_by": row.checked_by or None,
            "why": row.why or None}


def outlook_json(ahead: Outlook, more: Sequence[str] = ()) -> dict[str, Any]:
    """What is ahead of a batch, numbers unrounded; null: unknown."""
    from blendtui import as_json

    recipe = ahead.recipe
    return {"batch": ahead.made.name, "total_kg": ahead.total_kg, "good": ahead.good,
            "predicted": None if recipe is None else dict(recipe.predicted),
            "limits": [] if recipe is None else [as_json.limit(x) for x in recipe.limits],
            "missed": list(ahead.missed), "near": list(ahead.near), "fill_l": ahead.fill_l,
            "capacity_l": ahead.capacity_l, "fill_pct": ahead.fill_pct, "mix_c": ahead.made.head.mix_c,
            "remedy": None if ahead.remedy is None else remedy_json(ahead.remedy),
            "said": [*ahead.words, *ahead.remedy_words, *more]}


def remedy_json(trim: Trim) -> dict[str, Any]:
    """The charges to come as they would put the batch right."""
    return {"status": trim.status, "additions_kg": None if trim.additions_kg is None else dict(trim.additions_kg),
            "packages": dict(trim.packages), "total_kg": trim.total_kg, "drawn_first_kg": trim.drawn_kg,
            "cost": trim.cost, "notes": list(trim.notes)}


def outlook_text(ahead: Outlook, more: Sequence[str] = ()) -> str:
    """What is ahead of a batch, in text of at most 80 columns."""
    from blendtui.as_text import table
    from blendtui.desk import numbers
    from blendtui.desk.sheet import NOT_A_CERTIFICATE
    from blendtui.store.harmless import harmless
    from solver.properties import lookup

    head = (f"{harmless(ahead.made.name, 40)}: {numbers.batch(ahead.total_kg)} kg when all is charged as planned"
            + ("" if ahead.fill_l is None else f", {numbers.litres(ahead.fill_l)} L at {ahead.made.head.mix_c:g} °C"))
    parts = [lines_of([head])]
    if ahead.recipe is not None:
        rows = [[lookup(x.property).label[:36], numbers.value(x.property, x.value),
                 *("" if v is None else numbers.value(x.property, v) for v in (x.low, x.high)), _word(x.met, x.value,
                                                                                                     x.low, x.high)]
                for x in ahead.recipe.limits if x.property != "cost_per_t"]
        limited = {x.property for x in ahead.recipe.limits}
        rows += [[lookup(code).label[:36], numbers.value(code, ahead.predicted.get(code)), "", "", ""]
                 for code in ("kv40", "kv100", "vi", "density15") if code not in limited]
        parts.append(table(["predicted", "value", "low", "high", "verdict"], rows))
    parts.append(lines_of([*ahead.words, *ahead.remedy_words, *more]))
    return "\n\n".join([*parts, NOT_A_CERTIFICATE])


def _word(met: bool | None, value: float | None, low: float | None, high: float | None) -> str:
    if met is not False or value is None:
        return "unknown" if met is None else "met"
    inside = (low is None or value >= low) and (high is None or value <= high)
    return "in its guard" if inside else "NOT MET"
