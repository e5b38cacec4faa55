"""Sessions that are killed at random moments while they charge and import: what was saved stands, and all of it fits.

A child tells the number of each entry through a pipe as soon as it is saved. After SIGKILL the file must open, its
chain and its sums verify, and hold every entry that was told; at most the one under way may be there besides.
"""

from __future__ import annotations

import multiprocessing
import os
import random
import signal
import time
from multiprocessing.connection import Connection
from pathlib import Path

from blendtui.store.opening import import_folder, open_plant
from tests.store import conftest
from tests.store.batch_steps import charge, order, receive

KILLS = 200
LONGEST = 0.09  # s until the kill, from the moment at which the child goes to work
SETS = ("tens", "twos")  # catalogue folders that an import turns the plant from one to the other


def work(path: Path, turn: int, told: Connection) -> None:
    """Open the plant and charge and import until the end."""
    told.send(0)
    plant = open_plant(path, who="anna", timeout=30.0)
    for count in range(1000):
        batch = f"B-{turn:04}-{count}"
        order(plant, batch, ("A", 1.0), ("B", 2.0), ("A", 3.0))
        told.send(plant.revision())
        for line in (1, 2, 3):
            charge(plant, batch, line, 1.5)
            told.send(plant.revision())
        import_folder(path.parent / SETS[count % 2], path, who="anna", timeout=30.0)
        told.send(plant.revision())
        receive(plant, f"S{turn % 40:02}", f"{turn}-{count}", 30.0)
        told.send(plant.revision())


def catalogues(folder: Path) -> None:
    """Two folders of forty stocks that differ in every price and every quantity."""
    for name, factor in zip(SETS, (10, 2), strict=True):
        (folder / name).mkdir()
        rows = [f"S{n:02},{30 + n},5.2,{factor * (80 + n)},{1000 * n + factor}" for n in range(40)]
        rows += [f"A,30.2,5.23,820,{40_000 + factor}", f"B,98.5,10.9,870,{35_000 + factor}"]
        (folder / name / "stocks.csv").write_text("stock,kv40,kv100,price_per_t,on_hand_kg\n" + "\n".join(rows) + "\n")
        (folder / name / "products.csv").write_text(conftest.PRODUCTS)


def test_two_hundred_kills(tmp_path):
    catalogues(tmp_path)
    path = tmp_path / "x.plant"
    import_folder(tmp_path / SETS[0], path, who="anna")
    rng, context = random.Random(4), multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(["tests.store.test_killed", "blendtui.store.catalogue", "blendtui.store.merging",
                                    "solver.doubts", "solver.grades", "pandas"])
    unfinished, last = 0, 1
    for turn in range(KILLS):
        ours, theirs = context.Pipe(duplex=False)
        child = context.Process(target=work, args=(path, turn, theirs))
        child.start()
        theirs.close()
        assert ours.recv() == 0
        time.sleep(rng.uniform(0.0, LONGEST))
        os.kill(child.pid, signal.SIGKILL)
        child.join()
        assert child.exitcode == -signal.SIGKILL
        told = last
        try:
            while True:
                told = ours.recv()
        except EOFError:
            ours.close()
        with open_plant(path, who="bertil") as plant:
            assert plant.verify() is None, turn
            last = plant.revision()
            assert told <= last <= told + 1, turn
            unfinished += last - told
    # The kills fell into the work and not beside it.
    assert last > 2 * KILLS
    assert unfinished > 0
    with open_plant(path) as plant:
        charged = sum(c.actual_kg for b in plant.batches() for c in plant.batch(b.batch).charged)
        assert charged > 100.0
