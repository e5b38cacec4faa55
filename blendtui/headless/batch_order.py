"""Orders, lists of batches and cards: headless."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING, Any

from .common import DONE, NO_BLEND, Add, BadInput, number, opened, path, say, show, told, whole
from .stock import answered, lines_of, person

if TYPE_CHECKING:
    from blendtui.desk.orders import Order
    from blendtui.store.batch_records import Batch, Made

STATES = ("open", "released", "cancelled", "reworked")


def add_to(of_batch: Add) -> None:
    """Add `order`, `list`, `show`, `card`, `redesign`, `reorder` and `cancel` to `batch`."""
    _add_order(of_batch)
    made = of_batch("list", _list, "the batches, newest first, with where each stands")
    made.add_argument("--state", metavar="STATE", help=", ".join(STATES))
    _named(of_batch("show", _show, "one batch with everything that was recorded of it"))
    made = of_batch("card", _card, "the card of a batch: text of 80 columns, or a page of HTML")
    _named(made)
    made.add_argument("--write", metavar="FILE", type=path, help="as text, to a new file")
    made.add_argument("--html", metavar="FILE", type=path, help="as a page for A4 paper, to a new file")
    made = of_batch("redesign", _redesign, "work the charges out anew before the first: today's tanks, today's product")
    _named(made)
    made.add_argument("--try", dest="only_try", action="store_true", help="propose only; nothing is written")
    person(made)
    made = of_batch("reorder", _reorder, "give the lines still to come another order")
    _named(made)
    made.add_argument("lines", metavar="LINE", type=whole, nargs="+",
                      help="every line still to come, in the order wished")
    person(made)
    made = of_batch("cancel", _cancel, "cancel an open batch, with its reason; what it had promised is free again")
    _named(made)
    person(made)


def _named(command: argparse.ArgumentParser) -> None:
    command.add_argument("batch", metavar="BATCH", help="such as B-0001")


def _add_order(of_batch: Add) -> None:
    made = of_batch("order", _order, "take an order: charges from today's tanks, promised to one batch")
    made.add_argument("product", metavar="PRODUCT")
    made.add_argument("amount", metavar="AMOUNT", nargs="+", help="what the customer gets: 15000, 15 t, 16000 L")
    made.add_argument("--vessel", required=True, metavar="VESSEL")
    made.add_argument("--at", metavar="T", help="of litres: 15 (the default) or 20 °C")
    for option, words in (("--customer", "who ordered it"), ("--order", "the customer's order number"),
                          ("--name", "of the batch; else the plant's next, B-0001 …"), ("--note", ""),
                          ("--ignore-heel", "why heel and line are left out of the sums")):
        made.add_argument(option, metavar="WHY" if option == "--ignore-heel" else "TEXT", default="", help=words)
    made.add_argument("--limit", action="append", default=[], metavar="PROPERTY=LOW:HIGH",
                      help="a customer's limit, tighter than the product's: kv40=44:48, vi=98:; may be repeated")
    made.add_argument("--mix", metavar="T", help="mixing temperature, °C (or 140F); else 60")
    made.add_argument("--heel", metavar="KG", help="in the vessel; else what the vessel usually has, 0 for none")
    made.add_argument("--heel-stock", metavar="NAME", help="the stock or batch it is of; else the vessel's")
    made.add_argument("--heel-value", action="append", default=[], metavar="PROPERTY=V",
                      help="measured of it: kv40=46.1; may be repeated")
    made.add_argument("--line", metavar="KG=STOCK", help="what the line holds")
    made.add_argument("--flush", metavar="KG=STOCK[,out]", help="flush oil: into the batch, or pumped out again")
    made.add_argument("--most-fill", metavar="PCT", help="of the vessel at mixing temperature; else 90")
    made.add_argument("--tank-c", action="append", default=[], metavar="[STOCK=]T",
                      help="°C of a tank, or of all; else 20; may be repeated")
    made.add_argument("--charges-in", metavar="NAMES", default="",
                      help="order of charging by stocks, oils, kinds, light, heavy, antifoam, rinse")
    made.add_argument("--any-mass", action="store_true", help="not in whole scale divisions, drums and IBCs")
    made.add_argument("--try", dest="only_try", action="store_true", help="propose only; nothing is written")
    person(made)


# What is typed

def order_of(options: argparse.Namespace) -> Order:
    """The order that was typed; BadInput names the option."""
    from blendtui.desk.order_design import MOST_FILL_PCT
    from blendtui.desk.orders import Order
    from blendtui.desk.proposals import amount_of

    kg, unit = amount_of(" ".join(options.amount),
                         None if options.at is None else number(options.at, "--at", "temperature"))
    most = MOST_FILL_PCT if options.most_fill is None else number(options.most_fill, "--most-fill", "share") * 100.0
    return Order(options.product, kg, options.vessel, unit, options.customer, options.order, _limits(options.limit),
                 None if options.mix is None else number(options.mix, "--mix", "temperature"),
                 None if options.heel is None else number(options.heel, "--heel", "mass"), options.heel_stock,
                 _values(options.heel_value), _part(options.line, "--line"), _flush(options.flush),
                 options.ignore_heel, options.name, options.note, most, not options.any_mass, _tanks(options.tank_c))


def _limits(typed: list[str]) -> dict[str, tuple[str, str]]:
    found: dict[str, tuple[str, str]] = {}
    for each in typed:
        name, equals, sides = each.partition("=")
        low, colon, high = sides.partition(":")
        if not equals or not colon or not name.strip():
            raise BadInput(f"--limit {each}: write PROPERTY=LOW:HIGH, for example kv40=44:48, vi=98: or pour=:-12")
        if name.strip() in found:
            raise BadInput(f"--limit {each}: {name.strip()} is given twice")
        found[name.strip()] = (low, high)
    return found


def _values(typed: list[str]) -> dict[str, str]:
    found: dict[str, str] = {}
    for each in typed:
        name, equals, value = each.partition("=")
        if not equals or not name.strip() or not value.strip():
            raise BadInput(f"--heel-value {each}: write PROPERTY=V, for example kv40=46.1")
        if name.strip() in found:
            raise BadInput(f"--heel-value {each}: {name.strip()} is given twice")
        found[name.strip()] = value
    return found


def _part(typed: str | None, option: str) -> tuple[float, str] | None:
    if typed is None:
        return None
    kg, equals, stock = typed.partition("=")
    if not equals or not stock.strip():
        raise BadInput(f"{option} {typed}: write KG=STOCK, for example 40=N150")
    return number(kg, option, "mass"), stock.strip()


def _flush(typed: str | None) -> tuple[float, str, bool] | None:
    if typed is None:
        return None
    rest, comma, way = typed.rpartition(",")
    if comma and way.strip().lower() not in ("in", "out"):
        raise BadInput(f"--flush {typed}: it goes in or out, for example 60=N150,out")
    kg, stock = _part(rest if comma else typed, "--flush") or (0.0, "")
    return kg, stock, way.strip().lower() != "out" if comma else True


def _tanks(typed: list[str]) -> dict[str, float]:
    found: dict[str, float] = {}
    for each in typed:
        stock, equals, celsius = each.rpartition("=")
        if stock.strip() in found:
            raise BadInput(f"--tank-c {each}: given twice")
        found[stock.strip()] = number(celsius if equals else each, "--tank-c", "temperature")
    return found


# Commands

def _order(options: argparse.Namespace) -> int:
    from dataclasses import replace

    from blendtui.desk import orders
    from blendtui.desk.charge_lines import names_of
    from blendtui.desk.order_words import proposal_json, proposal_text
    from blendtui.quiet import quiet

    order = order_of(options)
    with opened(options) as plant:
        order = replace(order, charges_in=names_of(options.charges_in, plant.stocks()))
        say(f"working out {order.product} …")
        with quiet():
            proposal, name = orders.propose(plant, order), ""
            if proposal.charges and not options.only_try:
                made, proposal = answered(lambda: orders.taken(plant, order, by=options.by, why=options.why,
                                                               sure=options.sure, seen=proposal))
                name = made.name
    show(options, proposal_json(proposal, name), proposal_text(proposal, name))
    return DONE if proposal.charges else NO_BLEND


def _redesign(options: argparse.Namespace) -> int:
    from blendtui.desk import orders
    from blendtui.desk.order_words import proposal_json, proposal_text
    from blendtui.quiet import quiet

    with opened(options) as plant, quiet():
        proposal, name = orders.propose_again(plant, options.batch), ""
        if proposal.charges and not options.only_try:
            made, proposal = answered(lambda: orders.redesigned(plant, options.batch, by=options.by, why=options.why,
                                                                sure=options.sure))
            name = made.name
    show(options, proposal_json(proposal, name), proposal_text(proposal, name))
    return DONE if proposal.charges else NO_BLEND


def _list(options: argparse.Namespace) -> int:
    from blendtui import as_text
    from blendtui.desk import batches, numbers
    from blendtui.store.harmless import harmless

    if options.state is not None and options.state not in STATES:
        raise BadInput(f"--state {options.state}: usable are {', '.join(STATES)}")
    with opened(options) as plant:
        found = plant.batches(options.state)
        stages = {b.batch: batches.stage(plant.batch(b.batch)) if b.state == "open" else b.state for b in found}
    rows = [[harmless(b.batch, 14), harmless(b.product, 12), numbers.batch(b.batch_kg), harmless(b.vessel, 8),
             harmless(stages[b.batch], 26), batches.when(b.ordered_at)[:10]] for b in found]
    text = as_text.table(["batch", "product", "kg", "vessel", "stands", "ordered"], rows, left=2) if rows else (
        "no batch" + (f" is {options.state}" if options.state else " yet"))
    show(options, {"batches": [{**_head(b), "stage": stages[b.batch]} for b in found]}, text)
    return DONE


def _head(head: Batch) -> dict[str, Any]:
    return {name: value for name, value in told(head).items() if name != "formula"}


def _show(options: argparse.Namespace) -> int:
    import json

    from blendtui.desk import batches, card

    with opened(options) as plant:
        made, seen = plant.batch(options.batch), card.card(plant, options.batch)
    answer = {**_head(made.head), "stage": batches.stage(made), "formula": json.loads(made.head.formula or "null"),
              **{name: [told(x) for x in getattr(made, name)]
                 for name in ("contents", "charges", "samples", "results", "decisions", "outcomes")}}
    show(options, answer, lines_of(_story(made, seen)))
    return DONE


def _story(made: Made, seen: Any) -> list[str]:
    """A batch told line by line."""
    from blendtui.desk import card, numbers
    from blendtui.desk.batches import when
    from blendtui.desk.card_text import exact

    told = [f"{name:<9} {said}" for name, said in [("Batch", made.name), *card.facts(seen)]]
    told += ["", *card.content_words(seen)]
    for c in made.charges:
        said = f"line {c.line}: {c.stock}, {exact(c.plan_kg)} kg planned"
        if c.state == "done":
            said += f", {exact(c.actual_kg or 0.0)} kg charged {when(c.at)} by {c.by}"
            said += f", checked by {c.checked_by}" if c.checked_by else ", no second check"
        elif c.state == "dropped":
            said += ", dropped"
        told.append(said + (f" ({c.why})" if c.why else ""))
    told += [f"sample {s.sample} drawn {when(s.taken_at)} by {s.taken_by}" + (f", {s.place}" if s.place else "")
             for s in made.samples]
    told += [f"result {r.sample}.{r.line}: {r.property} {numbers.value(r.property, r.value)}, {when(r.at)} by {r.by}"
             + (f" (withdrawn: {r.withdrawn})" if r.withdrawn else "") for r in made.results]
    told += [f"decision on sample {d.sample}: {d.decision}, {when(d.at)} by {d.by}" + (f" ({d.why})" if d.why else "")
             for d in made.decisions]
    told += [f"{o.what}: {exact(o.kg)} kg, {when(o.at)} by {o.by}" + (f" ({o.why})" if o.why else "")
             for o in made.outcomes]
    return [*told, f"in the vessel by the book: {exact(made.in_vessel_kg)} kg"]


def _card(options: argparse.Namespace) -> int:
    from blendtui.desk import card
    from blendtui.desk.card_html import card_html
    from blendtui.desk.certificate import write_all

    with opened(options) as plant:
        made = card.card(plant, options.batch)
    text = card.card_text(made)
    asked = [(file, content) for file, content in ((options.write, text), (options.html, card_html(made)))
             if file is not None]
    said = write_all(asked, "card") if asked else []
    show(options, {**card.card_json(made), "written": [str(f) for f in (options.write, options.html) if f is not None]},
         "\n".join(said) if said else text.rstrip("\n"))
    return DONE


def _reorder(options: argparse.Namespace) -> int:
    from blendtui.desk import orders

    with opened(options) as plant:
        made = answered(lambda: orders.reorder(plant, options.batch, options.lines, by=options.by, why=options.why))
    lines = [f"{c.line} {c.stock}" for c in made.to_charge]
    show(options, {"batch": made.name, "lines": [c.line for c in made.to_charge]},
         lines_of([f"{made.name} is charged in this order: {', '.join(lines)}; print the card again"]))
    return DONE


def _cancel(options: argparse.Namespace) -> int:
    from blendtui.desk import orders

    with opened(options) as plant:
        made = answered(lambda: orders.cancel(plant, options.batch, by=options.by, why=options.why, sure=options.sure))
    words = f"{made.name} is cancelled ({made.head.why}); what it had promised is free again"
    show(options, _head(made.head), lines_of([words]))
    return DONE
