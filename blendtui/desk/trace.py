"""Where oil comes from and where it went: a lot, batch, order, customer or stock, both ways, with proportions."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from blendtui.store.batch_records import Batch, Lot
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant

from . import batches, numbers
from .errors import DeskError
from .oil_past import Past, whole
from .topping_up import EARLIER
from .trace_back import Back, Node, Origin, receipt_words
from .trace_forward import Forward, Place, Use

__all__ = ["Node", "Origin", "Place", "Trace", "Use", "trace"]
KINDS = ("batch", "lot", "stock", "order", "customer")  # in this order where one name is several of them


@dataclass(frozen=True)
class Trace:
    """What is traced, where it comes from, and where it is now."""

    name: str
    what: str  # one of KINDS
    also: tuple[str, ...]  # what else has this name
    words: tuple[str, ...]
    kg: float  # of what is traced, where its origin is looked at
    back: tuple[Node, ...]
    origins: tuple[Origin, ...]  # lots at the far end; their parts and `faint` sum to 1
    batches: dict[str, float]  # batches on the way back → their part of what is traced
    faint: float  # part of what is traced that was not followed back: under a gram in a tonne each
    uses: tuple[Use, ...]  # batches that hold it, oldest first
    places: tuple[Place, ...]  # tanks and vessels that hold it now
    faint_uses: int  # batches whose oil was not followed on: under a gram in a tonne of it


def trace(plant: Plant, name: str, *, kind: str = "") -> Trace:
    """Trace a name both ways; `kind` says which is meant where one name is several things.

    Oil is followed through tank mixtures, rework and heels, with proportions multiplied, as long as it is at least
    a gram in a tonne. DeskError for a name that nothing has.
    """
    past, name = Past(plant), name.strip()
    heads = plant.batches()
    found: dict[str, list[Any]] = {"batch": [b for b in heads if b.batch == name], "lot": _lots(plant, name),
             "stock": [name] if name in past.stocks else [],
             "order": [b for b in heads if name and b.order_no == name],
             "customer": [b for b in heads if name and b.customer == name]}
    kinds = [k for k in KINDS if found[k]]
    if not kinds or (kind and kind not in kinds):
        raise DeskError(_nothing(name, kind, kinds, heads))
    what = kind or kinds[0]
    also = tuple(k for k in kinds if k != what)
    if what == "lot":
        return _of_lots(past, name, also, found["lot"])
    if what == "stock":
        return _of_stock(past, name, also)
    return _of_batches(past, name, what, also, [b for b in heads if b in found[what]])


def _lots(plant: Plant, name: str) -> list[Lot]:
    """Receipts of this name, and lots that stand in charges alone: read off a drum, and never received here."""
    if name in ("", EARLIER):
        return []
    received, charged = plant.lots_named(name), plant.charges_of(lot=name)
    alone = dict.fromkeys(c.stock for c in charged if not any(x.stock == c.stock for x in received))
    return [*received, *(Lot(stock, name, "", sum((c.actual_kg or 0.0) * c.lots[name] for c in charged
                                                  if c.stock == stock)) for stock in alone)]


def _nothing(name: str, kind: str, kinds: Sequence[str], heads: Sequence[Batch]) -> str:
    if kind and kind not in KINDS:
        return f"{harmless(kind, 40)!r} is no kind of name; usable are {', '.join(KINDS)}"
    if kinds:
        return f"{harmless(name, 40)} is no {harmless(kind, 20)}; it is a {' and a '.join(kinds)}"
    latest = ", ".join(harmless(b.batch, 40) for b in heads[:4])
    return (f"no lot, batch, order, customer or stock {harmless(name, 40)!r}"
            + (f"; the latest batches are {latest}" if latest else "; the plant has made no batch yet"))


def _of_lots(past: Past, name: str, also: tuple[str, ...], lots: Sequence[Lot]) -> Trace:
    kg, back = sum(x.kg for x in lots), Back(past)
    nodes = tuple(back.lot(x.stock, x.lot, x.kg, x.kg / kg if kg else 0.0) for x in lots)
    words = [f"{x.stock} lot {x.lot}: " + (receipt_words(x, x.lot) if x.received_at else
                                           f"no receipt was recorded; {numbers.kg(x.kg)} kg of it were charged")
             + (f", rework of {x.from_batch}" if x.from_batch else "") for x in lots]
    if len(lots) > 1:
        words.append("several stocks had a lot of this name; all are traced together")
    return _traced(past, name, "lot", also, words, kg, nodes, back,
                   Forward(past, lots={(x.stock, x.lot): 1.0 for x in lots}))


def _of_stock(past: Past, code: str, also: tuple[str, ...]) -> Trace:
    stock, back = past.stocks[code], Back(past)
    kg, parts = stock.on_hand_kg or 0.0, past.plant.tank_lots(code)
    nodes = tuple(back.lot(code, lot, kg * part, part) for lot, part in parts.items())
    if not parts:
        back.ends(code, "", kg, 1.0)
    quantity = "an unknown quantity" if stock.on_hand_kg is None else f"{numbers.kg(kg)} kg"
    words = [f"{code} {stock.name}".strip() + f" holds {quantity}"
             + ("" if parts else "; no receipt was ever recorded")]
    return _traced(past, code, "stock", also, words, kg, nodes, back, Forward(past, stock=code))


def _of_batches(past: Past, name: str, what: str, also: tuple[str, ...], heads: Sequence[Batch]) -> Trace:
    past.load([b.batch for b in heads])
    masses = {b.batch: sum(kg for _, kg in whole(made)) for b in heads if (made := past.made(b.batch)) is not None}
    total, back = sum(masses.values()), Back(past)
    parts = {each: kg / total if total else 0.0 for each, kg in masses.items()}
    nodes = [Node("batch", each, kg, parts[each], "", back.batch(each, "", kg, parts[each]))
             for each, kg in masses.items()]
    words = [" · ".join(x for x in (b.batch, b.product, f"{numbers.kg(masses.get(b.batch, 0.0))} kg in {b.vessel}",
                                    f"order {b.order_no}" if b.order_no else "", b.customer, b.state,
                                    batches.when(b.closed_at or b.ordered_at)) if x) for b in heads]
    return _traced(past, name, what, also, words, total, nodes[0].below if what == "batch" else tuple(nodes), back,
                   Forward(past, roots=frozenset(masses)))


def _traced(past: Past, name: str, what: str, also: tuple[str, ...], words: Sequence[str], kg: float,
            nodes: tuple[Node, ...], back: Back, forward: Forward) -> Trace:
    forward.follow()
    return Trace(name, what, also, tuple(words), kg, nodes, back.origins(), dict(back.followed), back.faint,
                 forward.uses(), forward.places(), forward.faint)
