"""Steps of a batch as small as they can be, for tests of the store."""

from __future__ import annotations

from dataclasses import replace

from blendtui.store.batch_edits import added, changed, moved, tank_parts
from blendtui.store.batch_records import (
    DONE,
    OPEN,
    PACKED,
    RELEASED,
    Batch,
    Charge,
    Dip,
    Lot,
    Outcome,
    Result,
    Sample,
)
from blendtui.store.database import now
from blendtui.store.plant import Plant
from blendtui.store.records import Step


def order(plant: Plant, name: str, *lines: tuple[str, float]) -> None:
    """Take an order with charges of (stock, kg)."""
    def make() -> Step:
        changes = added(Batch(name, "P46", asked=1000.0, batch_kg=1000.0, state=OPEN, ordered_at=now(),
                              ordered_by=plant.who))
        for line, (stock, kg) in enumerate(lines, 1):
            changes += added(Charge(name, line, 0, stock, "", kg, position=line))
        return Step(tuple(changes), f"{name} ordered")

    plant.step(make)


def charge(plant: Plant, name: str, line: int, kg: float) -> None:
    """Charge a line of the card with the lots that its tank holds."""
    def make() -> Step:
        old = next(c for c in plant.batch(name).charges if c.line == line)
        lots = plant.tank_lots(old.stock)
        at = now()
        new = replace(old, lots=lots)
        changes = [changed(old, state=DONE, actual_kg=kg, at=at, by=plant.who), moved(plant.stock(old.stock), -kg)]
        return Step((*changes, *added(new)[1:]), f"{name} charge {line}: {kg:g} kg of {old.stock}")

    plant.step(make)


def check(plant: Plant, name: str, line: int) -> None:
    """The second check."""
    def make() -> Step:
        old = next(c for c in plant.batch(name).charges if c.line == line)
        return Step((changed(old, checked_at=now(), checked_by=plant.who),), f"{name} charge {line} checked")

    plant.step(make)


def sample(plant: Plant, name: str, value: float = 46.0) -> None:
    """A sample with one result."""
    def make() -> Step:
        number = 1 + max((s.sample for s in plant.batch(name).samples), default=0)
        return Step((*added(Sample(name, number, 0, now(), plant.who)),
                     *added(Result(name, number, 1, "kv40", value, "in house", now(), plant.who))),
                    f"{name} sample {number}")

    plant.step(make)


def close(plant: Plant, name: str, state: str = RELEASED) -> None:
    """Release it, or close it otherwise."""
    def make() -> Step:
        head = plant.batch(name).head
        return Step((changed(head, state=state, closed_at=now(), closed_by=plant.who),), f"{name} {state}")

    plant.step(make)


def pack(plant: Plant, name: str, kg: float) -> None:
    """Pack some of it."""
    def make() -> Step:
        line = 1 + max((o.line for o in plant.batch(name).outcomes), default=0)
        return Step(tuple(added(Outcome(name, line, PACKED, kg, at=now(), by=plant.who))), f"{name} packed {kg:g} kg")

    plant.step(make)


def receive(plant: Plant, stock: str, lot: str, kg: float) -> None:
    """A delivery into a tank, mixed with what is in it."""
    def make() -> Step:
        tank = plant.stock(stock)
        there = tank.on_hand_kg or 0.0
        old = plant.tank_lots(stock)
        new = {name: part * there / (there + kg) for name, part in old.items()} | {lot: kg / (there + kg)}
        return Step((*added(Lot(stock, lot, now(), kg, by=plant.who)), *tank_parts(stock, old, new), moved(tank, kg)),
                    f"{stock} lot {lot}: {kg:g} kg")

    plant.step(make)


def dip(plant: Plant, stock: str, kg: float) -> None:
    """A dip that corrects the book."""
    def make() -> Step:
        tank = plant.stock(stock)
        line = 1 + max((d.line for d in plant.dips(stock)), default=0)
        book = tank.on_hand_kg
        return Step((*added(Dip(stock, line, kg, book, 1, now(), plant.who, "level gauge")),
                     moved(tank, kg - (book or 0.0))), f"{stock} dip {kg:g} kg")

    plant.step(make)
