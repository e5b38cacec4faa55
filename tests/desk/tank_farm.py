"""A small invented plant for tests of the ledger, and batches put on its record without the desk's own orders."""

from __future__ import annotations

from pathlib import Path

from blendtui.desk import batches, targets
from blendtui.store.batch_edits import added, changed, moved
from blendtui.store.batch_records import DONE, HEEL, RELEASED, Batch, Charge, Content, Result, Sample
from blendtui.store.database import now
from blendtui.store.opening import import_folder
from blendtui.store.plant import Plant
from blendtui.store.records import Step

STOCKS = """stock,name,oil,kind,on_hand_kg,unpumpable_kg,price_per_t,density15,kv40,kv100,blend_kv40,blend_kv100,""" \
         """flash,pour,sulfur,tested_on,source
LN,Light neutral,,base,30000,1000,820,870,30,5.2,,,214,-12,0.4,2026-02-01,own
LM,Light medium,,base,25000,,815,872,33.2,5.5,,,216,-12,0.4,2026-02-01,own
HN,Heavy neutral,,base,40000,500,900,882,96,10.7,,,250,-9,0.5,2026-02-01,certificate
VM,Modifier,,vi_improver,8000,,2400,885,900,95,2200,310,,,0.1,2026-02-01,own
PK,Package,,additive,5000,,3100,960,,,,,180,,3,,
EX,Empty tank,,base,0,,700,,100,11,,,,,,,
UN,Unknown quantity,,base,,,700,875,50,7,,,,,,,
OLD,Retired later,,base,100,,700,875,50,7,,,,,,,
"""
PRODUCTS = "product,grade,only_listed\nP46,ISO VG 46,\nT46,ISO VG 46,\nW32,ISO VG 32,yes\n"
LIMITS = "product,property,low,high\nP46,flash,190,\n"
VESSELS = "vessel,capacity_l,least_fill_l,division_kg,heel_kg,heel_stock\nK1,30000,,1,,\nK2,9000,,1,,\n"


def farm(folder: Path) -> Path:
    """The plant as a file, made by anna."""
    place = folder / "catalogue"
    place.mkdir()
    for table, text in (("stocks", STOCKS), ("products", PRODUCTS), ("limits", LIMITS), ("vessels", VESSELS)):
        (place / f"{table}.csv").write_text(text, encoding="utf-8")
    import_folder(place, folder / "farm.plant", who="anna")
    return folder / "farm.plant"


def order(plant: Plant, name: str, charges: dict[str, float], *, product: str = "P46", vessel: str = "K1",
          **head: object) -> None:
    """A batch on what its vessel holds, with everything charged; times by the clock, a charge a step."""
    kept = next(v for v in plant.vessels() if v.vessel == vessel)
    target = targets.target_of(plant, product)
    given = {"asked": sum(charges.values()), "batch_kg": sum(charges.values()), "order_no": f"O-{name}"} | head
    records: list[object] = [Batch(name, product, vessel=vessel, formula=batches.freeze(target), ordered_at=now(),
                                   ordered_by="anna", **given)]
    if kept.heel_kg:
        records.append(Content(name, 1, HEEL, kept.heel_stock, kept.heel_kg, cells={"kv40": 46.0, "kv100": 6.9,
                                                                                    "density15": 875.0}))
    plant.step(lambda: Step(tuple(c for r in records for c in added(r)), f"{name} ordered"))
    for line, (code, kg) in enumerate(charges.items(), 1):
        charge(plant, name, line, code, kg)


def charge(plant: Plant, name: str, line: int, code: str, kg: float, *, trim: int = 0) -> None:
    """One charge, with the lots that its tank holds."""
    def make() -> Step:
        stock = plant.stock(code)
        row = Charge(name, line, trim, code, "", kg, 0.0, None, DONE, kg, "", now(), "anna",
                     cells=batches.cells_of(stock), position=line, lots=plant.tank_lots(code))
        return Step((*added(row), moved(stock, -kg)), f"{name} line {line} charged")

    plant.step(make)


def sampled(plant: Plant, name: str, results: dict[str, float]) -> None:
    """A sample of the batch as it is, with its results."""
    made = plant.batch(name)
    number, at = len(made.samples) + 1, now()
    records: list[object] = [Sample(name, number, made.rounds, at, "carl")]
    records += [Result(name, number, n, code, value, "", at, "dora")
                for n, (code, value) in enumerate(results.items(), 1)]
    plant.step(lambda: Step(tuple(c for r in records for c in added(r)), f"{name} sampled"))


def release(plant: Plant, name: str) -> None:
    """Release it, whatever it is."""
    head = plant.batch(name).head
    plant.step(lambda: Step((changed(head, state=RELEASED, closed_at=now(), closed_by="bob"),), f"{name} released"))
