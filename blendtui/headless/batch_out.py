"""What leaves the vessel of a batch, and its mass balance: headless."""

from __future__ import annotations

import argparse
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from .common import DONE, Add, BadInput, opened, show, told
from .stock import answered, lines_of, person

if TYPE_CHECKING:
    from blendtui.desk.balance import Balance

DRAWN = ("rework", "slops", "sample", "flush", "left")


def add_to(of_batch: Add) -> None:
    """Add `pack`, `draw` and `balance` to `batch`."""
    made = of_batch("pack", _pack, "pack a released batch")
    _amount(made)
    person(made)
    made = of_batch("draw", _draw, "record what else left the vessel, or stays in it")
    _amount(made)
    made.add_argument("--as", dest="what", required=True, metavar="|".join(DRAWN),
                      help="rework and flush go into a rework stock; left is what stays in the vessel as its heel")
    made.add_argument("--stock", metavar="STOCK", default="", help="the rework stock; else the one of --family")
    made.add_argument("--family", metavar="NAME", default="", help="of rework, as product rules name it")
    made.add_argument("--lot", metavar="LOT", default="", help="else the batch's own name")
    person(made)
    made = of_batch("balance", _balance, "what went in, where it went, loss and yield")
    made.add_argument("batch", metavar="BATCH", help="such as B-0001")


def _amount(command: argparse.ArgumentParser) -> None:
    command.add_argument("batch", metavar="BATCH", help="such as B-0001")
    command.add_argument("amount", metavar="AMOUNT", nargs="+", help="kg, or with its unit: 14.8 t, 17000 L (at 15 °C)")


def _pack(options: argparse.Namespace) -> int:
    return _leave(options, "packed")


def _draw(options: argparse.Namespace) -> int:
    if options.what not in DRAWN:
        raise BadInput(f"--as {options.what}: usable are {', '.join(DRAWN)}; what is sold is packed: batch pack")
    return _leave(options, options.what, stock=options.stock, family=options.family, lot=options.lot)


def _leave(options: argparse.Namespace, what: str, **more: str) -> int:
    from blendtui.desk import rework

    with opened(options) as plant:
        done = answered(lambda: rework.leave(plant, options.batch, " ".join(options.amount), what, by=options.by,
                                             why=options.why, sure=options.sure, **more))
        made = plant.batch(options.batch)
    closed = rework.balance(made)
    # What is lost is said as soon as the balance closes, and not only to whoever asks for it.
    said = [*done.words, *(closed.words if closed.loss_kg is not None else ())]
    answer = {name: value for name, value in told(done).items() if name != "words"}
    show(options, {**answer, "state": made.head.state, "said": said}, lines_of(said))
    return DONE


def _balance(options: argparse.Namespace) -> int:
    from blendtui.desk import rework

    with opened(options) as plant:
        found = rework.balance(plant.batch(options.batch))
    show(options, balance_json(options.batch, found), balance_text(options.batch, found))
    return DONE


def balance_json(batch: str, found: Balance) -> dict[str, Any]:
    """Answer of `batch balance`."""
    figures = {name: value for name, value in asdict(found).items() if name != "words"}
    return {"batch": batch, **figures, "said": list(found.words)}


def balance_text(batch: str, found: Balance) -> str:
    """Text of `batch balance`."""
    from blendtui.as_text import table
    from blendtui.desk import numbers
    from blendtui.store.harmless import harmless

    came = found.in_kg
    of = {"packed": found.packed_kg, "samples": found.samples_kg, "slops": found.slops_kg, "flush": found.flush_kg,
          "rework": found.rework_kg, "left in the vessel": found.left_kg, "still in the vessel": found.in_vessel_kg,
          "loss" if (found.loss_kg or 0.0) >= 0.0 else "gain (−)": found.loss_kg or 0.0}
    rows = [["went in", numbers.kg(came), "100.00"]]
    rows += [[name, numbers.kg(kg), numbers.pct(kg / came) if came > 0.0 else numbers.UNKNOWN]
             for name, kg in of.items() if kg]
    return "\n\n".join([f"mass balance of {harmless(batch, 60)}", table(["", "kg", "mass %"], rows),
                        lines_of(found.words)])
