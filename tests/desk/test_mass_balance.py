"""Mass balance over random histories of batches, against a tally that knows nothing of the plant.

The tally is of containers: each holds kg of each origin (a lot that was bought, or oil that was there before), and
what is taken from one is taken from all its origins alike. Common practice: nothing else happens in a stirred tank.
"""

from __future__ import annotations

import random
from collections import defaultdict
from collections.abc import Callable, Iterator
from itertools import count
from pathlib import Path

import pytest

from blendtui.desk import ledger, rework, trace
from blendtui.store.batch_edits import added, changed, moved
from blendtui.store.batch_records import DONE, HEEL, RELEASED, Batch, Charge, Content
from blendtui.store.database import Database
from blendtui.store.edits import new_stock
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from blendtui.store.state import change_of
from solver.stocks import Stock

PLANTS, GROUPS, BATCHES = 100, 10, 10  # 1,000 batches
TANKS = ("A", "B", "C")
REWORK = "RW-HYDRAULIC"
CLOSE = 1e-9
Origin = tuple[str, str]
Oil = defaultdict[Origin, float]


def oil(**kg: float) -> Oil:
    return defaultdict(float, {(stock, "before"): mass for stock, mass in kg.items()})


def take(box: Oil, kg: float) -> Oil:
    """Take so many kg of what is mixed in a container."""
    there = sum(box.values())
    taken: Oil = defaultdict(float)
    for origin, mass in box.items():
        taken[origin] = mass * (kg / there)
        box[origin] = mass - taken[origin]
    return taken


def pour(box: Oil, what: Oil) -> None:
    for origin, mass in what.items():
        box[origin] += mass


class History:
    """One plant with random steps, and the tally of the same steps."""

    def __init__(self, seed: int, clock: Callable[[], str]) -> None:
        self.random, self.clock = random.Random(seed), clock
        self.plant = Plant(Database(None), Path("memory"), who="anna")
        self.opening = {code: self.kg(5_000, 60_000) for code in TANKS}
        self.tanks = {code: oil(**{code: mass}) for code, mass in self.opening.items()} | {REWORK: oil()}
        self.received: dict[Origin, float] = {(code, "before"): mass for code, mass in self.opening.items()}
        self.vessel, self.gone = oil(), oil()  # gone: packed, samples, slops, losses and corrections
        self.packed: dict[str, Oil] = {}
        self.lost: dict[str, float] = {}
        # Of lots as the plant names them, rework lots too: received, and taken out of tanks by charges and dips.
        self.lot_kg: defaultdict[Origin, float] = defaultdict(float, self.received)
        self.corrected: defaultdict[Origin, float] = defaultdict(float)
        self.numbers = count(1)
        changes = [change_of("vessel", ("K1",), None, {
            "capacity_l": 30000.0, "least_fill_l": None, "division_kg": None, "heel_kg": None, "heel_stock": "",
            "flash_margin_c": None, "flash_margin_on": "", "position": 1, "retired": 0})]
        for n, code in enumerate(TANKS):
            stock = Stock(code, kv40=30.0 + 30.0 * n, kv100=5.2 + 2.0 * n, density15=870.0 + 5.0 * n, price_per_t=800.0)
            changes += [*new_stock(self.plant, stock),
                        change_of("quantity", (code,), {"mg": None}, {"mg": round(self.opening[code] * 1e6)})]
        self.plant.change(changes, "stocks")

    def kg(self, least: float, most: float) -> float:
        """A mass to the milligram, as a scale or a division of one gives it."""
        return round(self.random.uniform(least, most), self.random.choice((0, 1, 3, 6)))

    # Steps

    def receive(self) -> None:
        code, lot, kg = self.random.choice(TANKS), f"L{next(self.numbers)}", self.kg(50, 30_000)
        n = TANKS.index(code)
        ledger.receive(self.plant, code, kg, lot, cells={"kv40": 30.5 + 30.0 * n, "kv100": 5.25 + 2.0 * n,
                                                         "density15": 871.0 + 5.0 * n}, sure=True)
        self.tanks[code][code, lot] += kg
        self.received[code, lot] = self.lot_kg[code, lot] = kg

    def dip(self) -> None:
        code = self.random.choice(TANKS)
        book = self.plant.stock(code).on_hand_kg or 0.0
        parts = self.plant.tank_lots(code) or {"before": 1.0}
        kg = round(book * self.random.uniform(0.97, 1.0), 3)
        ledger.dip(self.plant, code, kg, correct=True, why="a leak", sure=True)
        pour(self.gone, take(self.tanks[code], book - kg))
        for lot, part in parts.items():
            self.corrected[code, lot] += part * (book - kg)

    def charge(self, name: str, line: int, batch_round: int = 0) -> None:
        plant = self.plant
        able = [c for c, box in self.tanks.items() if sum(box.values()) > 1_000.0]
        code = self.random.choice(able)
        stock = plant.stock(code)
        most = min(6_000.0, (stock.on_hand_kg or 0.0) - 1.0)
        kg = self.kg(200.0, most)
        row = Charge(name, line, batch_round, code, "", kg, 0.0, None, DONE, kg, "", self.clock(), "anna",
                     cells={"kv40": stock.kv40, "kv100": stock.kv100, "density15": stock.density15}, position=line,
                     lots=plant.tank_lots(code) or {"before": 1.0})
        plant.step(lambda: Step((*added(row), moved(stock, -kg)), "charged"))
        if self.random.random() < 0.3:  # the first entry was wrong, and what went in was this
            right = self.kg(100.0, most)
            was = plant.stock(code)
            plant.step(lambda: Step((changed(row, actual_kg=right), moved(was, kg - right)), "corrected", "misread"))
            kg = right
        pour(self.vessel, take(self.tanks[code], kg))

    def leave(self, name: str, kg: float, what: str, **said: str) -> None:
        done = rework.leave(self.plant, name, kg, what, sure=True, **said)
        if what == "left":
            return
        taken = take(self.vessel, kg)
        if done.stock:
            pour(self.tanks[REWORK], taken)
            self.lot_kg[done.stock, done.lot] = kg
            return
        pour(self.gone, taken)
        if what == "packed":
            self.packed[name] = taken

    def batch(self, number: int) -> None:
        name, vessel = f"B-{number:04d}", self.plant.vessels()[0]
        records: list[object] = [Batch(name, "P", f"O-{number}", "Nordlub", 10_000.0, vessel="K1",
                                       ordered_at=self.clock(), ordered_by="anna")]
        if vessel.heel_kg:
            values = {"kv40": 46.0, "kv100": 6.8}
            records.append(Content(name, 1, HEEL, vessel.heel_stock, vessel.heel_kg, cells=values))
        self.plant.step(lambda: Step(tuple(c for r in records for c in added(r)), "ordered"))
        lines = self.random.randint(2, 4)
        for line in range(1, lines + 1):
            self.charge(name, line)
        self.leave(name, self.kg(0.5, 2.0), "sample")
        if self.random.random() < 0.4:
            drawn = self.kg(100.0, 0.3 * sum(self.vessel.values()))
            self.leave(name, drawn, "rework", why="no room", family="hydraulic")
            self.charge(name, lines + 1, 1)
        if self.random.random() < 0.1:
            made = self.plant.batch(name)
            self.leave(name, round(made.in_vessel_kg, 6), "rework", why="off grade", family="hydraulic")
            assert self.plant.batch(name).head.state == "reworked"
            self.vessel = oil()
        else:
            self.finish(name)
        self.check_batch(name)

    def finish(self, name: str) -> None:
        head = self.plant.batch(name).head
        self.plant.step(lambda: Step((changed(head, state=RELEASED, closed_at=self.clock(), closed_by="bob"),), "out"))
        there = sum(self.vessel.values())
        self.leave(name, round(0.96 * there, 3), "packed")
        if self.random.random() < 0.5:
            self.leave(name, self.kg(1.0, 0.01 * there), "slops")
        if self.random.random() < 0.3:
            self.leave(name, self.kg(1.0, 0.005 * there), "flush", family="hydraulic")
        there = sum(self.vessel.values())
        left = self.kg(0.3 * there, 0.9 * there)
        self.leave(name, left, "left")
        pour(self.gone, take(self.vessel, there - left))
        self.lost[name] = there - left

    # Checks

    def check_batch(self, name: str) -> None:
        made = self.plant.batch(name)
        found = rework.balance(made)
        came = sum(c.kg for c in made.contents) + sum(c.actual_kg for c in made.charges)
        assert found.loss_kg == pytest.approx(self.lost.get(name, 0.0), abs=CLOSE * came)
        assert found.packed_kg == pytest.approx(sum(self.packed.get(name, oil()).values()), rel=CLOSE)
        assert found.out_kg + found.loss_kg == pytest.approx(came, rel=CLOSE)
        assert found.left_kg == pytest.approx(sum(self.vessel.values()), rel=CLOSE, abs=1e-6)

    def check(self) -> None:
        plant = self.plant
        whole = sum(self.received.values())
        stocks = {s.code: s for s in plant.stocks()}
        kept = {code: stocks[code].on_hand_kg or 0.0 if code in stocks else 0.0 for code in self.tanks}
        for code, box in self.tanks.items():
            assert kept[code] == pytest.approx(sum(box.values()), rel=CLOSE, abs=1e-4)
        heel = plant.vessels()[0].heel_kg or 0.0
        assert sum(kept.values()) + heel + sum(self.gone.values()) == pytest.approx(whole, rel=CLOSE)
        self.check_lots(kept)

    def check_lots(self, kept: dict[str, float]) -> None:
        """Of each lot: what tanks hold, what was charged and what dips took away is what was received."""
        found: defaultdict[Origin, float] = defaultdict(float, self.corrected)
        for code, kg in kept.items():
            for lot, part in (self.plant.tank_lots(code) or {"before": 1.0}).items():
                found[code, lot] += part * kg
        for charge in self.plant.charges_of():
            for lot, part in charge.lots.items():
                found[charge.stock, lot] += part * (charge.actual_kg or 0.0)
        for origin, kg in self.lot_kg.items():
            assert found[origin] == pytest.approx(kg, rel=CLOSE, abs=1e-5), origin

    def check_trace(self) -> None:
        """Proportions of a trace, both ways, against the tally; what is too faint to be followed is named by it."""
        name = self.random.choice(sorted(self.packed))
        back, packed = trace.trace(self.plant, name), self.packed[name]
        whole = sum(packed.values())
        assert sum(o.part for o in back.origins) + back.faint == pytest.approx(1.0, rel=CLOSE)
        parts = {(o.stock, o.lot): o.part for o in back.origins}
        for origin, kg in packed.items():
            assert parts.get(origin, 0.0) == pytest.approx(kg / whole, rel=CLOSE, abs=back.faint + 1e-12), origin
        (stock, lot), received = self.random.choice([x for x in self.received.items() if x[0][1] != "before"])
        forward = trace.trace(self.plant, lot)
        assert (forward.kg, forward.what) == (received, "lot")
        uses = {u.batch: u for u in forward.uses}
        for batch, of in self.packed.items():
            found = uses[batch].packed_kg if batch in uses else 0.0
            # Each of the few heels and rework lots in a batch is left unfollowed below a gram in a tonne.
            faint = 5e-6 * sum(of.values()) if forward.faint_uses else 1e-6
            assert found == pytest.approx(of[stock, lot], rel=CLOSE, abs=faint), (lot, batch)
        here = {p.name: p.kg for p in forward.places if p.lot == lot}
        assert here.get(stock, 0.0) == pytest.approx(self.tanks[stock][stock, lot], rel=CLOSE, abs=1e-5)


@pytest.fixture
def clock(monkeypatch: pytest.MonkeyPatch) -> Iterator[Callable[[], str]]:
    """A clock that goes on by a second with every look: a millisecond is too long for these steps."""
    seconds = count(1)

    def tick() -> str:
        n = next(seconds)
        return f"2026-03-{1 + n // 86400:02d}T{n // 3600 % 24:02d}:{n // 60 % 60:02d}:{n % 60:02d}.000Z"

    for module in ("batch_doubts", "receiving", "ledger"):
        monkeypatch.setattr(f"blendtui.desk.{module}.now", tick)
    return tick


@pytest.mark.parametrize("group", range(GROUPS))
def test_a_thousand_batches_balance(group: int, clock: Callable[[], str]) -> None:
    for seed in range(group, PLANTS, GROUPS):
        history = History(seed, clock)
        for number in range(1, BATCHES + 1):
            for _ in range(history.random.randint(0, 2)):
                history.receive()
            if history.random.random() < 0.2:
                history.dip()
            if max(sum(history.tanks[c].values()) for c in TANKS) < 5_000.0:
                history.receive()
            history.batch(number)
        history.check()
        if history.packed and len(history.received) > len(TANKS):
            history.check_trace()
        assert history.plant.verify() is None
        history.plant.close()
