"""The stock ledger: receipts, tests, dips and the book of a stock, headless."""

from __future__ import annotations

import argparse
import textwrap
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any, TypeVar

from .common import DONE, Add, BadInput, Run, group, opened, show, told, whole

if TYPE_CHECKING:
    from blendtui.desk.ledger import Book
    from blendtui.store.batch_records import Dip, Lot

Done = TypeVar("Done")
WORDS = 31  # columns of what a movement was, so that a line of the book fits 80


def register(add: Add) -> None:
    """Add `stock` with its own commands."""
    of_group = group(add, "stock", "one stock: receive a delivery, test it, dip it, read its book",
                     "say what is to be done with the stock: receive, test, dip or book; blendtui stock --help tells "
                     "of each")

    def of_stock(name: str, run: Run, words: str) -> argparse.ArgumentParser:
        made = of_group(name, run, words)
        made.add_argument("stock", metavar="STOCK")
        return made

    made = of_stock("receive", _receive, "receive a delivery: what is in the tank is then a mixture")
    made.add_argument("amount", metavar="AMOUNT", nargs="+", help="kg, or with its unit: 24 t, 12000 L (at 15 °C)")
    made.add_argument("--lot", metavar="LOT", default="", help="as on its papers")
    made.add_argument("--certificate", metavar="NUMBER", default="")
    _values(made, "off the certificate, such as kv40=30.4; may be repeated")
    made.add_argument("--keep", action="store_true",
                      help="for what the papers do not say, the tank's own values are the delivery's")
    made.add_argument("--source", metavar="SOURCE", default="certificate", help="own, certificate or typical")
    made.add_argument("--from-batch", metavar="BATCH", default="", help="of returned oil: the batch it was")
    made.add_argument("--on", metavar="TIME", default="", help="such as 2026-03-04, or 14:30 today; else now")
    made.add_argument("--note", metavar="TEXT", default="")
    made.add_argument("--law", metavar="LAW", default="refutas", help="by which the two mix")
    person(made)
    made = of_stock("test", _test, "the tank's own test: its values are no longer computed")
    _values(made, "a result, such as kv40=30.4; may be repeated")
    made.add_argument("--on", metavar="DATE", default="", help="such as 2026-03-04; else today")
    made.add_argument("--method", metavar="TEXT", default="")
    person(made)
    made = of_stock("dip", _dip, "a tank dip against the book")
    made.add_argument("amount", metavar="AMOUNT", nargs="+", help="kg, or with its unit: 61.2 t, 70000 L")
    made.add_argument("--at", metavar="T", help="°C of the tank, of litres; else they are litres at 15 °C")
    made.add_argument("--correct", action="store_true", help="set the book to the dip; needs --why")
    person(made)
    made = of_stock("book", _book, "every movement with the balance after it, the lots in the tank, the last dip")
    made.add_argument("--last", metavar="N", type=whole, default=0, help="only the last N movements")


def person(command: argparse.ArgumentParser) -> None:
    """Who does a step, why, and whether what is odd has been looked at."""
    command.add_argument("--by", metavar="NAME", default="", help="who does it; else the login name")
    command.add_argument("--why", metavar="TEXT", default="", help="the reason, where one is due")
    command.add_argument("--sure", action="store_true", help="what is questioned has been looked at and is so")


def answered(work: Callable[[], Done]) -> Done:
    """Do a step; where it is questioned, say how that is answered."""
    from blendtui.desk.batches import Questioned

    try:
        return work()
    except Questioned as error:
        asked = str(error) if str(error).endswith(("?", ".")) else f"{error}."
        raise BadInput(f"{asked} Nothing was done; if it is so: --sure") from None


def lines_of(words: Sequence[str]) -> str:
    """What was said, a sentence a line of at most 80 columns."""
    from blendtui.as_text import wrap
    from blendtui.store.harmless import harmless

    return "\n".join(wrap(harmless(each, 1000), "  ") for each in words)


def _values(command: argparse.ArgumentParser, words: str) -> None:
    command.add_argument("--value", action="append", default=[], metavar="PROPERTY=V", help=words)


def values_of(typed: Sequence[str]) -> dict[str, str]:
    """PROPERTY=V options by property; BadInput names the one that cannot be read."""
    found: dict[str, str] = {}
    for each in typed:
        code, equals, value = each.partition("=")
        code = code.strip()
        if not equals or not code or not value.strip():
            raise BadInput(f"--value {each}: write PROPERTY=V, for example kv40=30.4")
        if code in found:
            raise BadInput(f"--value {each}: {code} is given twice")
        found[code] = value.strip()
    return found


def _receive(options: argparse.Namespace) -> int:
    from blendtui import as_json
    from blendtui.desk import ledger

    values = values_of(options.value)
    with opened(options) as plant:
        done = answered(lambda: ledger.receive(
            plant, options.stock, " ".join(options.amount), options.lot, cells=values, certificate=options.certificate,
            source=options.source, from_batch=options.from_batch, on=options.on, note=options.note, keep=options.keep,
            by=options.by, why=options.why, sure=options.sure, law=options.law))
        stock = plant.stock(options.stock)
    show(options, {"lot": lot_json(done.lot), "stock": as_json.stock(stock), "lots_in_tank": dict(done.parts),
                   "no_longer_known": list(done.lost), "said": list(done.words)}, lines_of(done.words))
    return DONE


def _test(options: argparse.Namespace) -> int:
    from blendtui import as_json
    from blendtui.desk import ledger

    values = values_of(options.value)
    with opened(options) as plant:
        done = answered(lambda: ledger.test(plant, options.stock, values, on=options.on, method=options.method,
                                            by=options.by, why=options.why, sure=options.sure))
    show(options, {"stock": as_json.stock(done.stock), "still_computed": list(done.still_computed),
                   "said": list(done.words)}, lines_of(done.words))
    return DONE


def _dip(options: argparse.Namespace) -> int:
    from blendtui.desk import ledger

    from .common import number

    celsius = None if options.at is None else number(options.at, "--at", "temperature")
    with opened(options) as plant:
        done = answered(lambda: ledger.dip(plant, options.stock, " ".join(options.amount), celsius=celsius,
                                           correct=options.correct, by=options.by, why=options.why, sure=options.sure))
    show(options, {"dip": dip_json(done.dip), "differs_pct": done.differs_pct, "said": list(done.words)},
         lines_of(done.words))
    return DONE


def _book(options: argparse.Namespace) -> int:
    from blendtui.desk import ledger

    if options.last < 0:
        raise BadInput(f"--last {options.last} is below 0; leave it out for every movement")
    with opened(options) as plant:
        found = ledger.book(plant, options.stock)
    show(options, book_json(found), book_text(found, options.last))
    return DONE


def lot_json(lot: Lot) -> dict[str, Any]:
    """A receipt."""
    return told(lot, cells=dict(lot.cells))


def dip_json(dip: Dip) -> dict[str, Any]:
    """A dip."""
    return told(dip, corrected=bool(dip.corrected))


def book_json(found: Book) -> dict[str, Any]:
    """Answer of `stock book`."""
    dip = None if found.last_dip is None else dip_json(found.last_dip)
    return {"stock": found.stock.code, "balance_kg": found.balance_kg, "promised_kg": found.promised_kg,
            "free_kg": found.stock.available_kg, "last_dip": dip,
            "lots_in_tank": dict(found.parts), "lots": [lot_json(x) for x in found.lots],
            "movements": [told(x) for x in found.lines], "said": list(found.words)}


def book_text(found: Book, last: int = 0) -> str:
    """Text of `stock book`: 80 columns."""
    from blendtui.as_text import table
    from blendtui.desk import batches, numbers
    from blendtui.store.harmless import harmless

    rows: list[list[str]] = []
    for line in found.lines[-last:] if last else found.lines:
        words = textwrap.wrap(harmless(line.words, 300), WORDS) or [""]
        rows.append([batches.when(line.at), harmless(line.who, 10), words[0], _signed(line.kg),
                     numbers.kg(line.balance_kg)])
        rows += [["", "", more, "", ""] for more in words[1:]]
    parts = [lines_of([f"{found.stock.code} {found.stock.name}".strip(), *found.words]),
             table(["time", "who", "what", "kg", "book"], rows, left=3, gap=" ")]
    if found.parts:
        parts.append(table(["lot in the tank", "mass %", "kg"], [
            [harmless(lot, 40), numbers.pct(part), numbers.kg(part * (found.balance_kg or 0.0))]
            for lot, part in found.parts.items()]))
    if found.lots:
        parts.append(table(["lot received", "on", "certificate", "kg"], [
            [harmless(x.lot, 30), batches.when(x.received_at)[:10], harmless(x.certificate, 24), numbers.kg(x.kg)]
            for x in found.lots], left=3))
    return "\n\n".join(parts)


def _signed(kg: float | None) -> str:
    from blendtui.desk import numbers

    return "unknown" if kg is None else f"+{numbers.kg(kg)}" if kg > 0.0 else numbers.kg(kg)
