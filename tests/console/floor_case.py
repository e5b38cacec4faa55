"""A batch of the small plant, planned in a kettle K1, for the tests of the floor."""

from __future__ import annotations

from pathlib import Path

from blendtui.desk import answers, batches
from blendtui.desk.plant import Plant, open_plant
from blendtui.store.batch_edits import added, tank_parts
from blendtui.store.batch_records import HEEL, Batch, Charge, Content, Lot, Vessel
from blendtui.store.database import now

LIGHT, HEAVY, PACK = 8950.0, 5780.0, 120.0  # kg; with 150 kg of heel KV40 is about 46 mm²/s by the laws
HEEL_KG = 150.0
TOTAL = HEEL_KG + LIGHT + HEAVY + PACK
LOTS = {"LIGHT": "L-17", "HEAVY": "H-4", "PACK": "P-9"}


def with_vessel(path: Path) -> None:
    """Put a kettle into the plant, and a lot into each tank."""
    with open_plant(path, who="carla") as plant:
        kettle = Vessel("K1", 24000.0, 4000.0, 5.0, HEEL_KG, "HEAVY", 30.0, "2026-05-01")
        rows = [Lot(stock, lot, now(), 1000.0, "C-1", "certificate", {}) for stock, lot in LOTS.items()]
        plant.change(_vessel(kettle), "K1 added")
        plant.change([c for row in rows for c in added(row)] + [c for stock, lot in LOTS.items()
                                                                for c in tank_parts(stock, {}, {lot: 1.0})], "lots")


def _vessel(vessel: Vessel) -> list:  # type: ignore[type-arg]
    from blendtui.store.schema import TABLES
    from blendtui.store.state import change_of

    cells = {name: getattr(vessel, name, 0) for name in TABLES["vessel"].columns}
    return [change_of("vessel", (vessel.vessel,), None, {**cells, "position": 1, "retired": 0})]


def planned(plant: Plant, name: str = "B-0001", product: str = "H46", customer: str = "Northern Presses") -> None:
    """Write a batch with three charges into the plant, as an order leaves it."""
    target = answers.target(plant, answers.Wishes(product))
    head = Batch(name, product, "4711", customer, 15000.0, "kg", TOTAL, "K1", 60.0, batches.freeze(target),
                 plant.revision(), ordered_at=now(), ordered_by=plant.who)
    heavy = plant.stock("HEAVY")
    rows = [head, Content(name, 1, HEEL, "HEAVY", HEEL_KG, 1, batches.cells_of(heavy), {"HEAVY": 1.0}, "stock"),
            Charge(name, 1, 0, "LIGHT", "", LIGHT, 45.0, 45.0, position=1),
            Charge(name, 2, 0, "HEAVY", "", HEAVY, 30.0, 50.0, position=2),
            Charge(name, 3, 0, "PACK", "", PACK, 0.5, 30.0, position=3)]
    plant.change([c for row in rows for c in added(row)], f"{name} ordered")


def with_batch(path: Path) -> None:
    """The kettle, the lots and one batch that is planned."""
    with_vessel(path)
    with open_plant(path, who="carla") as plant:
        planned(plant)
