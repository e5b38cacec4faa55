"""Six processes change one plant file at once: no change is lost, none is doubled, and every sum is right."""

from __future__ import annotations

import multiprocessing
import random
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

import pytest

from blendtui.store.batch_edits import added, moved
from blendtui.store.batch_records import DONE, Dip
from blendtui.store.database import now
from blendtui.store.edits import stock_cell
from blendtui.store.errors import BuiltOn, ChangedSince
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from tests.store import conftest
from tests.store.batch_steps import charge, order, receive

QUOTAS = (334, 334, 333, 333, 333, 333)  # 2,000 entries
STOCKS = ("A", "B")
# A tank holds every lot that it ever got, so receipts are the rarer.
KINDS, WEIGHTS = ("charge", "price", "dip", "undo", "receive"), (4, 2, 2, 2, 1)
LINES = 180  # of each worker's own batch, 1 kg a line


@dataclass
class Log:
    """What a worker did that stands, in order, and every entry it wrote."""

    done: list[tuple[str, str, int]] = field(default_factory=list)  # kind, stock, mg moved
    written: list[str] = field(default_factory=list)
    refused: Counter[str] = field(default_factory=Counter)


def work(path: Path, number: int, quota: int, answers: multiprocessing.Queue) -> None:  # type: ignore[type-arg]
    """Mixed changes under a name of one's own until the quota is written."""
    rng, log = random.Random(number), Log()
    with open_plant(path, who=f"w{number}", timeout=60.0) as plant:
        line = 0
        while len(log.written) < quota:
            kind = rng.choices(KINDS, WEIGHTS)[0]
            stock, kg = rng.choice(STOCKS), rng.randint(1, 10_000_000) / 1e4
            if kind == "charge":
                line += 1
                stock, kg = STOCKS[line % 2], rng.randint(5000, 15_000) / 1e4
                log.done.append((kind, stock, -round(kg * 1e6)))
                log.written.append(said(plant, lambda: charge(plant, f"B-{number}", line, kg)))  # noqa: B023
            elif kind == "receive":
                lot = f"{number}-{len(log.written)}"
                log.done.append((kind, stock, round(kg * 1e6)))
                log.written.append(said(plant, lambda: receive(plant, stock, lot, kg)))  # noqa: B023
            elif kind == "price":
                log.done.append((kind, stock, 0))
                log.written.append(said(plant, lambda: price(plant, stock, kg)))  # noqa: B023
            elif kind == "dip":
                log.done.append((kind, stock, round(kg * 1e6)))
                log.written.append(said(plant, lambda: dip(plant, stock, kg)))  # noqa: B023
            elif log.done:
                try:
                    log.written.append(plant.undo())
                    log.done.pop()
                except (ChangedSince, BuiltOn) as error:
                    log.refused[type(error).__name__] += 1
    answers.put((number, log))


def said(plant: Plant, act: Callable[[], None]) -> str:
    """Do it, and what its own entry says."""
    act()
    return next(e.what for e in plant.journal(25) if e.who == plant.who)


def price(plant: Plant, stock: str, value: float) -> None:
    plant.step(lambda: Step((stock_cell(plant.stock(stock), "price_per_t", value),), f"{stock} price {value:g}"))


def dip(plant: Plant, stock: str, kg: float) -> None:
    """A dip that finds so much more than the book."""
    def make() -> Step:
        tank = plant.stock(stock)
        line = 1 + max((d.line for d in plant.dips(stock)), default=0)
        book = tank.on_hand_kg or 0.0
        return Step((*added(Dip(stock, line, book + kg, book, 1, now(), plant.who)), moved(tank, kg)),
                    f"{stock} dip {line}")

    plant.step(make)


@pytest.fixture(scope="module")
def finished(tmp_path_factory):
    """The plant after six processes, what it held before, and their logs."""
    folder = tmp_path_factory.mktemp("six")
    (folder / "stocks.csv").write_text(conftest.STOCKS)
    (folder / "products.csv").write_text(conftest.PRODUCTS)
    path = folder / "six.plant"
    import_folder(folder, path, who="anna")
    with open_plant(path, who="anna") as plant:
        for number in range(len(QUOTAS)):
            order(plant, f"B-{number}", *((STOCKS[line % 2], 1.0) for line in range(1, LINES + 1)))
        before = {s.code: round((s.on_hand_kg or 0.0) * 1e6) for s in plant.stocks()}
        first = plant.revision()
    context = multiprocessing.get_context("spawn")
    answers = context.Queue()
    workers = [context.Process(target=work, args=(path, n, quota, answers)) for n, quota in enumerate(QUOTAS)]
    for worker in workers:
        worker.start()
    logs = dict(answers.get(timeout=300) for _ in workers)
    for worker in workers:
        worker.join(timeout=30)
        assert worker.exitcode == 0
    with open_plant(path, who="anna") as plant:
        yield plant, before, first, logs


def test_no_entry_is_lost_or_doubled(finished):
    plant, _, first, logs = finished
    entries = [e for e in plant.journal(10_000) if e.id > first]
    assert sorted(e.id for e in entries) == list(range(first + 1, first + 2001))
    for number, log in logs.items():
        own = [e.what for e in reversed(entries) if e.who == f"w{number}"]
        assert own == log.written
    assert Counter(e.who for e in entries) == {f"w{n}": quota for n, quota in enumerate(QUOTAS)}


def test_they_were_at_it_together(finished):
    """The entries of the six lie mixed, and undo met what others had done since."""
    plant, _, first, logs = finished
    who = [e.who for e in reversed(plant.journal(10_000)) if e.id > first]
    assert sum(a != b for a, b in pairwise(who)) > 100
    assert sum((log.refused for log in logs.values()), Counter())["ChangedSince"] > 0
    assert {kind for log in logs.values() for kind, _, _ in log.done} == {"charge", "receive", "price", "dip"}


def test_the_chain_and_the_plant_hold(finished):
    plant, *_ = finished
    assert plant.verify() is None


def test_every_sum_is_right_to_the_milligram(finished):
    plant, before, _, logs = finished
    for stock in STOCKS:
        moves = sum(mg for log in logs.values() for _, of, mg in log.done if of == stock)
        assert round(plant.stock(stock).on_hand_kg * 1e6) == before[stock] + moves
        assert sum(round(m.kg * 1e6) for m in plant.movements(stock)) == before[stock] + moves


def test_what_stands_is_what_was_not_taken_back(finished):
    plant, _, _, logs = finished
    for number, log in logs.items():
        made = plant.batch(f"B-{number}")
        kinds = Counter(kind for kind, _, _ in log.done)
        assert len(made.charged) == kinds["charge"]
        assert sum(round(c.actual_kg * 1e6) for c in made.charged) == -sum(
            mg for kind, _, mg in log.done if kind == "charge")
        assert len([x for x in plant.lots() if x.by == f"w{number}"]) == kinds["receive"]
        assert len([d for s in STOCKS for d in plant.dips(s) if d.by == f"w{number}"]) == kinds["dip"]
    for stock in STOCKS:
        assert sum(plant.tank_lots(stock).values()) <= 1.0 + 1e-9
        planned = sum(c.plan_kg for n in logs for c in plant.batch(f"B-{n}").charges
                      if c.stock == stock and c.state != DONE)
        assert plant.stock(stock).reserved_kg == pytest.approx(planned, abs=1e-9)
