"""A small plant for the laboratory's record, and blends that measure what a law says of them."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from datetime import date
from pathlib import Path

from blendtui.desk import lab
from blendtui.desk.plant import open_plant
from blendtui.store.opening import import_folder
from blendtui.store.plant import Plant
from solver import laws
from solver.stocks import Stock, StockTable

STOCKS = """stock,oil,kind,density15,kv40,kv100,blend_kv40,blend_kv100,tested_on
A,LIGHT,base,868,30.6,5.23,,,2026-03-01
B,,base,897,480,31.5,,,
V,,vi_improver,880,,,9000,800,
"""


@contextmanager
def laboratory(tmp_path: Path) -> Iterator[Plant]:
    """Three stocks and two products, and nothing measured yet."""
    folder = tmp_path / "catalogue"
    folder.mkdir()
    (folder / "stocks.csv").write_text(STOCKS)
    (folder / "products.csv").write_text("product,grade,law\nP100,ISO VG 100,\nW100,ISO VG 100,wright-mass\n")
    import_folder(folder, tmp_path / "x.plant", who="anna")
    with open_plant(tmp_path / "x.plant", who="anna") as opened:
        yield opened


def law_says(shares: dict[str, float], law: str = "refutas", **pairs: tuple[float, float]) -> tuple[float, float]:
    """KV40 and KV100 of shares by the law, some stocks blending with other pairs."""
    own = {"A": (30.6, 5.23, 868.0), "B": (480.0, 31.5, 897.0), "V": (9000.0, 800.0, 880.0)}
    table = StockTable(Stock(c, kv40=pairs.get(c, own[c])[0], kv100=pairs.get(c, own[c])[1], density15=own[c][2])
                       for c in shares)
    kv40, kv100 = laws.predict(law, table, list(shares.values()))
    return float(kv40), float(kv100)


def put(plant: Plant, name: str, shares: dict[str, float], off: float = 0.0, product: str = "P100", on: str = "",
        confirmed: bool = False, **pairs: tuple[float, float]) -> lab.Recorded:
    """A blend that measures what the law says of these shares, but for `off` %."""
    kv = (value * (1.0 + off / 100.0) for value in law_says(shares, **pairs))
    results = dict(zip(("kv40", "kv100"), map(repr, kv), strict=True))
    return lab.record(plant, name, product, shares, results, on=on, confirmed=confirmed, today=date(2026, 6, 1))


def study(plant: Plant, most: float = 3.0) -> None:
    """Five blends of A and B, heavier than the law says by at most so many %, the most at half and half."""
    for n, share in enumerate((0.2, 0.35, 0.5, 0.65, 0.8), 1):
        put(plant, f"S{n}", {"A": 1.0 - share, "B": share}, 4.0 * most * share * (1.0 - share), product="")
