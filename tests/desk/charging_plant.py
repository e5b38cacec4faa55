"""A small plant with one batch that waits for its charges."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from blendtui.store.batch_edits import changed, tank_parts
from blendtui.store.batch_records import Lot
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from tests.desk.made_batches import at, ordered, plant_file, put

STOCKS = """stock,kind,api_group,on_hand_kg,unpumpable_kg,price_per_t,density15,kv40,kv100,division_kg,package_kg,flash
A,base,I,60000,1000,800,868,30.6,5.23,10,,210
B,base,I,60000,1000,1100,897,480,31.5,10,,280
C,base,I,20000,500,1000,880,98,10.9,10,,240
D,base,II,20000,500,1000,880,31,5.25,10,,212
ADD,additive,,3600,,3500,986,60,7.5,,180,150
"""
LIMITS = "product,property,low,high,guard\nP,kv40,49.5,52.5,0.5\nP,vi,90,,\nP,flash,200,,\n"
SHARES = "product,of,low_pct,high_pct\nP,ADD,3.6,3.6\nP,A,,\nP,B,,\nP,C,,\n"
PLAN = {"A": 6000.0, "B": 800.0, "C": 2840.0, "ADD": 360.0}  # KV40 50.78 by Refutas
TOLERANCE = {"A": 30.0, "B": 10.0, "C": 15.0, "ADD": 4.0}


@contextmanager
def waiting(tmp_path: Path) -> Iterator[Plant]:
    """10 t of a product of KV40 49.5 to 52.5 in a vessel of 14,000 L, with all its charges to come."""
    path = plant_file(tmp_path, stocks=STOCKS, products="product,grade,only_listed\nP,,yes\n",
                      limits=LIMITS, shares=SHARES,
                      vessels="vessel,capacity_l,least_fill_l,division_kg,heel_kg,heel_stock,flash_margin_c,"
                              "flash_margin_on\nK1,14000,3000,10,,,30,2026-01-12\nK9,20000,,50,,,,\n")
    with open_plant(path, who="anna") as opened:
        ordered(opened, "P", PLAN, mix_c=60.0)
        rows = opened.batch("B-0001").charges
        opened.step(lambda: Step(tuple(changed(c, tolerance_kg=TOLERANCE[c.stock]) for c in rows), "tolerances"))
        yield opened


def line(plant: Plant, number: int, name: str = "B-0001"):
    return next(c for c in plant.batch(name).charges if c.line == number)


def lots_in(plant: Plant, stock: str, **parts: float) -> None:
    """Give a tank its lots, each with a receipt."""
    for lot in parts:
        put(plant, Lot(stock, lot, at(5), 1000.0))
    plant.step(lambda: Step(tuple(tank_parts(stock, {}, parts)), "lots"))
