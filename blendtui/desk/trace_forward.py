"""Forward from a lot, a stock or a batch: the batches its oil went into, through rework and heels, and their orders.

    φ(batch) = Σ m_i φ_i / Σ m_i,   φ of a charge = Σ part of each lot · φ(lot)

φ is the part of some oil that is traced oil; that of rework or of a heel is its batch's at the time it was drawn.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any

from blendtui.store.batch_records import PACKED, REWORK, SLOPS, Charge, Content, Lot, Made

from .oil_past import LEAST_PART, Past, Thing, drawn_at, left_at, lots_of, when_drawn, whole

MOST_VISITS = 30  # of one batch: what goes round in the record has faded by then


@dataclass(frozen=True)
class Use:
    """Traced oil in one batch. Masses in kg, of the traced oil."""

    batch: str
    product: str
    order_no: str
    customer: str
    state: str
    at: str  # of the first charge, or of the order
    kg: float
    part: float  # of the batch, 0–1
    packed_kg: float
    batch_packed_kg: float  # everything that was packed of this batch
    rework_kg: float
    slops_kg: float
    via: tuple[str, ...]  # how it came in


@dataclass(frozen=True)
class Place:
    """Traced oil that is in a tank or a vessel now."""

    what: str  # "tank" or "heel"
    name: str
    lot: str  # in a tank: the lot; a heel: the batch
    kg: float
    part: float  # of what is there, 0–1


@dataclass
class Forward:
    """Follows oil forward. The roots: lots, one stock, or batches, all of whose oil is traced."""

    past: Past
    lots: dict[tuple[str, str], float] = field(default_factory=dict)  # (stock, lot) → φ
    stock: str = ""
    roots: frozenset[str] = frozenset()
    heels: dict[str, float] = field(default_factory=dict)  # batch → φ of what it left
    seen: dict[str, int] = field(default_factory=dict)
    faint: int = 0  # batches whose oil was not followed further

    def follow(self) -> None:
        """Walk until nothing changes any more."""
        todo = self._first()
        while todo:
            self.past.load(todo)
            made = [m for name in todo if (m := self.past.made(name)) is not None and self._again(name)]
            lots, contents = self.past.plant.onward([m.name for m in made])
            todo = list(dict.fromkeys(name for m in made for name in self._out_of(
                m, [x for x in lots if x.from_batch == m.name], [c for c in contents if c.stock == m.name])))

    def _first(self) -> list[str]:
        plant, found = self.past.plant, list(self.roots)
        for stock, lot in self.lots:
            found += self._holding(stock, lot)
        if self.stock:
            found += [c.batch for c in plant.charges_of(stock=self.stock)]
            found += [c.batch for c in plant.onward([self.stock])[1]]
        return list(dict.fromkeys(found))

    def _holding(self, stock: str, lot: str) -> list[str]:
        """Batches into which a lot was charged or flushed."""
        plant = self.past.plant
        flushed = [c.batch for c in plant.onward([stock])[1] if lot in c.lots]
        return [*(c.batch for c in plant.charges_of(stock=stock, lot=lot)), *flushed]

    def _again(self, name: str) -> bool:
        self.seen[name] = self.seen.get(name, 0) + 1
        return self.seen[name] <= MOST_VISITS

    def _out_of(self, made: Made, lots: list[Lot], contents: list[Content]) -> list[str]:
        """Batches that took oil of this one, where more is known of it now than before."""
        after: list[str] = []
        for lot in lots:
            phi = self.part(made, when_drawn(made, drawn_at(made, lot.stock, lot.lot)))
            if self._news(self.lots, (lot.stock, lot.lot), phi):
                after += self._holding(lot.stock, lot.lot)
        if self._news(self.heels, made.name, self.part(made, when_drawn(made, left_at(made)))):
            after += [c.batch for c in contents]
        return after

    def _news(self, known: dict[Any, float], key: object, phi: float) -> bool:
        """Keep a part that has grown: it does as more of the ways to it are known, and never shrinks."""
        if phi < LEAST_PART:
            self.faint += phi > 0.0
            return False
        news = phi > known.get(key, 0.0) + 1e-12
        if news:
            known[key] = phi
        return news

    def part(self, made: Made, things: Iterable[Thing]) -> float:
        """φ of what was in the vessel of a batch."""
        masses = [(mass, self._of(made, thing)) for thing, mass in things]
        total = sum(mass for mass, _ in masses)
        return sum(mass * phi for mass, phi in masses) / total if total > 0.0 else float(made.name in self.roots)

    def _of(self, made: Made, thing: Content | Charge) -> float:
        if made.name in self.roots or (self.stock and thing.stock == self.stock):
            return 1.0
        if isinstance(thing, Content) and not thing.lots:
            return self.heels.get(thing.stock, 0.0)
        lots = thing.lots if isinstance(thing, Content) else lots_of(thing)
        return sum(part * self.lots.get((thing.stock, lot), 0.0) for lot, part in lots.items())

    # What was found

    def uses(self) -> tuple[Use, ...]:
        """Every batch with traced oil, oldest first."""
        made = [m for name in self.seen if (m := self.past.made(name)) is not None]
        found = [self._use(m) for m in made]
        return tuple(sorted((u for u in found if u.kg > 0.0), key=lambda u: (u.at, u.batch)))

    def _use(self, made: Made) -> Use:
        head, things = made.head, whole(made)
        masses = [(thing, mass, self._of(made, thing)) for thing, mass in things]
        kg = sum(mass * phi for _, mass, phi in masses)
        gone = {what: sum(o.kg * self.part(made, when_drawn(made, o.at)) for o in made.outcomes if o.what == what)
                for what in (PACKED, REWORK, SLOPS)}
        via = [] if made.name in self.roots else [self._via(thing) for thing, mass, phi in masses if mass * phi > 0.0]
        return Use(made.name, head.product, head.order_no, head.customer, head.state,
                   min((c.at for c in made.charged), default=head.ordered_at), kg, self.part(made, things),
                   gone[PACKED], sum(o.kg for o in made.outcomes if o.what == PACKED), gone[REWORK], gone[SLOPS],
                   tuple(dict.fromkeys(via)))

    def _via(self, thing: Content | Charge) -> str:
        if isinstance(thing, Content):
            return f"{thing.what} of {thing.stock}"
        held = [lot for lot in lots_of(thing) if self.lots.get((thing.stock, lot), 0.0) > 0.0]
        return f"{thing.stock} {', '.join(held)}".strip()

    def places(self) -> tuple[Place, ...]:
        """Tanks and vessels that hold traced oil now, most first."""
        stocks, found = self.past.stocks, []
        if self.stock and stocks[self.stock].on_hand_kg:
            found.append(Place("tank", self.stock, "", stocks[self.stock].on_hand_kg or 0.0, 1.0))
        tanks = {stock: self.past.plant.tank_lots(stock) for stock in {s for s, _ in self.lots if s != self.stock}}
        for (stock, lot), phi in self.lots.items():
            part = tanks.get(stock, {}).get(lot, 0.0) * phi
            kg = part * (stocks[stock].on_hand_kg or 0.0) if stock in stocks else 0.0
            if kg > 0.0:
                found.append(Place("tank", stock, lot, kg, part))
        for vessel in self.past.plant.vessels():
            phi = self.heels.get(vessel.heel_stock, 1.0 if self.stock and vessel.heel_stock == self.stock else 0.0)
            if phi > 0.0 and vessel.heel_kg:
                found.append(Place("heel", vessel.vessel, vessel.heel_stock, phi * vessel.heel_kg, phi))
        return tuple(sorted(found, key=lambda p: -p.kg))
