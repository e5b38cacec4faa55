"""Batches made step by step for tests, without the desk's own orders and charging."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from blendtui.desk import batches, targets
from blendtui.store.batch_edits import added, changed, lots_of, moved
from blendtui.store.batch_records import DONE, Batch, Charge, Content, Decision, Outcome, Result, Sample
from blendtui.store.opening import import_folder
from blendtui.store.plant import Plant
from blendtui.store.records import Step

DAY = "2026-05-04"


def at(hour: int, minute: int = 0) -> str:
    """A time of the batch's day, as the record keeps it."""
    return f"{DAY}T{hour:02d}:{minute:02d}:00.000Z"


def plant_file(folder: Path, **tables: str) -> Path:
    """A plant file of the CSV texts given by table."""
    folder.mkdir(parents=True, exist_ok=True)
    for table, text in tables.items():
        (folder / f"{table}.csv").write_text(text, encoding="utf-8")
    import_folder(folder, folder / "x.plant", who="anna")
    return folder / "x.plant"


def put(plant: Plant, *records: object, what: str = "put") -> None:
    """Add records as they are."""
    plant.step(lambda: Step(tuple(c for r in records for c in added(r)), what))


def ordered(plant: Plant, product: str, charges: dict[str, float], *, name: str = "B-0001", vessel: str = "K1",
            contents: tuple[Content, ...] = (), tolerance: float = 50.0, batch_kg: float | None = None,
            target: object = None, **head: object) -> None:
    """An order with its charges in this order; positions 10, 20 …"""
    target = target or targets.target_of(plant, product)
    total = sum(charges.values()) + sum(c.kg for c in contents if c.counts)
    asked = batch_kg or total
    first = Batch(name, product, asked=asked, batch_kg=asked, vessel=vessel, formula=batches.freeze(target),
                  formula_entry=plant.revision(), ordered_at=at(6), ordered_by="anna", **head)
    lines = [Charge(name, n, 0, stock, "", kg, tolerance, 40.0, position=10 * n)
             for n, (stock, kg) in enumerate(charges.items(), 1)]
    put(plant, first, *contents, *lines, what=f"{name} ordered")


def charged(plant: Plant, line: int, kg: float | None = None, *, name: str = "B-0001", lot: str | None = None,
            when: str = "", by: str = "anna", checked_by: str = "bob", **cells: object) -> None:
    """Charge a line as planned, or so many kg."""
    def make() -> Step:
        charge = next(c for c in plant.batch(name).charges if c.line == line)
        stock = plant.stock(charge.stock)
        mass = charge.plan_kg if kg is None else kg
        own = f"{stock.code}-7" if lot is None else lot
        done = replace(charge, lots={own: 1.0} if own else {})
        given = {"state": DONE, "actual_kg": mass, "actual_lot": own, "at": when or at(7, line), "by": by,
                 "checked_at": at(7, line) if checked_by else "", "checked_by": checked_by,
                 "cells": batches.cells_of(stock), **cells}
        return Step((changed(charge, **given), *lots_of(done), moved(stock, -mass)), f"{name} line {line} charged")

    plant.step(make)


def all_charged(plant: Plant, name: str = "B-0001", **said: object) -> None:
    """Charge everything that is planned, as planned."""
    for charge in plant.batch(name).to_charge:
        charged(plant, charge.line, name=name, **said)


def sampled(plant: Plant, number: int, results: dict[str, float], *, name: str = "B-0001", hour: int = 9,
            place: str = "", decision: str = "", why: str = "") -> None:
    """A sample with its results a half hour later, and what was decided on it."""
    made = plant.batch(name)
    line = max((r.line for r in made.results), default=0)
    records: list[object] = [Sample(name, number, made.rounds, at(hour), "carl", place)]
    records += [Result(name, number, line + n, prop, value, "ASTM D445" if prop.startswith("kv") else "", at(hour, 30),
                       "dora") for n, (prop, value) in enumerate(results.items(), 1)]
    if decision:
        records.append(Decision(name, len(made.decisions) + 1, number, decision, "", at(hour, 40), "dora", why))
    put(plant, *records, what=f"{name} sample {number}")


def drawn(plant: Plant, what: str, kg: float, *, name: str = "B-0001", hour: int = 10) -> None:
    """Something leaves the vessel."""
    line = len(plant.batch(name).outcomes) + 1
    put(plant, Outcome(name, line, what, kg, at=at(hour), by="anna"))
