"""A plant with a long past for benchmarks: invented stocks, lots, batches and movements, through the journal."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, datetime, timedelta
from pathlib import Path

from blendtui.store.batch_edits import added
from blendtui.store.batch_records import (
    DONE,
    LEFT,
    PACKED,
    PLANNED,
    RELEASED,
    Batch,
    Charge,
    Content,
    Decision,
    Lot,
    Outcome,
    Result,
    Sample,
)
from blendtui.store.edits import new_stock
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Change
from blendtui.store.state import change_of
from solver.stocks import Stock

STOCKS, BATCHES, LINES, RECEIPTS, OPEN_ONES = 200, 2000, 9, 2000, 20
TOGETHER = 50  # batches an entry
START = datetime(2025, 1, 6, 6, 0, tzinfo=UTC)
FORMULA = ('{"grade":"ISO VG 46","law":"refutas","limits":[],"max_cost_per_t":null,"max_stocks":null,"min_share":0.0,'
           '"only_listed":false,"rules":[]}')


def code(n: int) -> str:
    """Code of the nth stock."""
    return f"S{n % STOCKS:03}"


def at(hours: float) -> str:
    """A time of the record."""
    return (START + timedelta(hours=hours)).isoformat(timespec="milliseconds").replace("+00:00", "Z")


def make(path: Path) -> None:
    """200 stocks, 2,000 receipts, 2,000 batches of nine charges: 20,000 movements."""
    with open_plant(path, who="bench", create=True) as plant:
        Past(plant).write()


def make_empty(path: Path) -> None:
    """The same stocks and product, and nothing that happened."""
    with open_plant(path, who="bench", create=True) as plant:
        Past(plant).begin()


class Past:
    """The quantities and lots of every tank while the past is written."""

    def __init__(self, plant: Plant) -> None:
        self.plant = plant
        self.mg: dict[str, int | None] = {}
        self.tank: dict[str, list[str]] = {}

    def write(self) -> None:
        """All of it, in entries of some hundred changes."""
        self.begin()
        for first in range(0, BATCHES, TOGETHER):
            every = range(first, first + TOGETHER)
            self.plant.change([x for n in every for x in (*self.receipt(n), *self.batch(n))],
                              f"batches {first + 1} to {first + TOGETHER}")

    def begin(self) -> None:
        """Stocks, and a product."""
        stocks = [Stock(code(n), name=f"Stock number {n:03}", kind="base", api_group="II", price_per_t=800.0 + n,
                        density15=855.0 + 0.2 * n, kv40=20.0 + n, kv100=4.0 + 0.06 * n) for n in range(STOCKS)]
        # Places are read from the file, so one is counted here.
        changes = [replaced for n, stock in enumerate(stocks, 1)
                   for replaced in _placed(new_stock(self.plant, stock), n)]
        self.plant.change(changes, "stocks")
        self.plant.change([change_of("product", ("P46",), None, {
            "name": "", "grade": "ISO VG 46", "batch_kg": None, "law": "", "max_cost_per_t": None, "max_stocks": None,
            "min_share_pct": None, "only_listed": 0, "note": "", "retired": 0, "position": 1})], "P46 added")

    def receipt(self, n: int) -> Iterator[Change]:
        """The nth delivery: a lot of a tank that holds the last two."""
        stock, lot = code(n), f"L{n:05}"
        yield from added(Lot(stock, lot, at(3.0 * n), 400_000.0, "certificate", "certificate",
                             {"kv40": 46.0, "kv100": 6.8}, "", "bench"))
        before = self.tank.get(stock, [])
        after = [*before, lot][-2:]
        yield from (change_of("tank_lot", (stock, old), {"part": 1.0 / len(before)}, None) for old in before
                    if old not in after)
        for held in after:
            was = {"part": 1.0 / len(before)} if held in before else None
            yield change_of("tank_lot", (stock, held), was, {"part": 1.0 / len(after)})
        self.tank[stock] = after
        yield self.moved(stock, 400_000.0)

    def batch(self, n: int) -> Iterator[Change]:
        """The nth batch: released, but for the last twenty, of which half their charges are still to come."""
        name, begun, going = f"B-{n + 1:04}", 3.0 * n + 1.0, n >= BATCHES - OPEN_ONES
        yield from added(Batch(name, "P46", f"O-{n:05}", "", 20_000.0, "kg", 20_000.0, "K1", 60.0, FORMULA, 1,
                               state="open" if going else RELEASED, ordered_at=at(begun), ordered_by="bench",
                               closed_at="" if going else at(begun + 2.0), closed_by="" if going else "bert"))
        yield from added(Content(name, 1, "heel", f"B-{n:04}" if n else "", 120.0, cells={"kv40": 46.0}))
        for line in range(1, LINES + 1):
            # Of a batch's tanks each has had a receipt.
            stock = code(max(0, n - 7 * (line - 1)))
            lots = {lot: 1.0 / len(self.tank[stock]) for lot in self.tank[stock]}
            done = not going or line <= LINES // 2
            charge = Charge(name, line, 0, stock, "", 2_200.0, 10.0, 25.0, DONE if done else PLANNED, position=line)
            if done:
                charge = Charge(name, line, 0, stock, "", 2_200.0, 10.0, 25.0, DONE, 2_205.0, next(iter(lots)),
                                at(begun + 0.1 * line), "anna", at(begun + 0.1 * line), "bert", "",
                                {"kv40": 46.0, "kv100": 6.8, "density15": 870.0}, line, lots)
                yield self.moved(stock, -2_205.0)
            yield from added(charge)
        if not going:
            yield from added(Sample(name, 1, 0, at(begun + 1.0), "anna", "middle", 60.0))
            for line, (prop, value) in enumerate((("kv40", 46.1), ("kv100", 6.83), ("flash", 221.0)), 1):
                yield from added(Result(name, 1, line, prop, value, "in house", at(begun + 1.5), "lab"))
            yield from added(Decision(name, 1, 1, "release", "inside by more than R", at(begun + 1.9), "bert"))
            yield from added(Outcome(name, 1, PACKED, 19_700.0, at=at(begun + 2.0), by="anna"))
            yield from added(Outcome(name, 2, LEFT, 120.0, at=at(begun + 2.0), by="anna"))

    def moved(self, stock: str, kg: float) -> Change:
        """A change of a quantity."""
        before = self.mg.get(stock)
        self.mg[stock] = (before or 0) + round(kg * 1e6)
        return change_of("quantity", (stock,), {"mg": before}, {"mg": self.mg[stock]})


def _placed(changes: list[Change], place: int) -> Iterator[Change]:
    for change in changes:
        if change.table == "stock":
            yield change_of("stock", (change.key["stock"],), None, {**(change.after or {}), "position": place})
        else:
            yield change
