"""Speed of a plant with a long past: 200 stocks, 2,000 batches, 20,000 movements.

    python -m tests.benchmarks.speed_batches

Prints what the batch list, a batch, a trace and the first paint of the console take, the paint beside that of a plant
that has the same stocks and no past. Nothing here is asserted.
"""

from __future__ import annotations

import os
import statistics
import sys
import tempfile
import time
from collections.abc import Callable
from importlib.util import find_spec
from pathlib import Path

from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from tests.benchmarks.batch_plant import BATCHES, make, make_empty
from tests.benchmarks.console_bench import CONSOLE, Terminal

TIMES, STARTS = 7, 9
FIRST_NAME = "Stock number 00"


def took(work: Callable[[], object], times: int = TIMES) -> list[float]:
    """Seconds of some runs, after one that is not counted."""
    work()
    found = []
    for _ in range(times):
        start = time.perf_counter()
        work()
        found.append(time.perf_counter() - start)
    return found


def show(name: str, seconds: list[float], aim: str = "") -> None:
    """Print one figure: median, worst, aim."""
    print(f"{name:<52} {statistics.median(seconds) * 1e3:>9.4g} {max(seconds) * 1e3:>9.4g} ms  {aim}")


def reads(plant: Plant) -> None:
    """What the store answers."""
    show("every stock, with what is promised", took(plant.stocks))
    show("one stock", took(lambda: plant.stock("S005")))
    show("list of all batches", took(plant.batches), "aim < 300")
    show("list of open batches", took(lambda: plant.batches("open")))
    show("one batch with everything", took(lambda: plant.batch(f"B-{BATCHES // 2:04}")))
    show("charges that hold a lot", took(lambda: plant.charges_of(lot="L00005")))
    show("ledger of one stock", took(lambda: plant.movements("S005")))
    show("is there anything new", took(plant.revision))
    show("the whole record verified", took(plant.verify, 3))
    show("an entry by its printed hash", took(lambda: plant.found(plant.last_hash()[:16])))
    with tempfile.TemporaryDirectory() as folder:
        show("a backup, checked", took(lambda: plant.backup(Path(folder) / "b.plant", replace=True), 3))


def traces(plant: Plant) -> None:
    """What the desk answers, where it can."""
    if find_spec("blendtui.desk.trace") is None:
        return
    from blendtui.desk.trace import trace

    for name, what in (("L00005", "an early lot"), ("L01000", "a lot"), (f"B-{BATCHES // 2:04}", "a batch"),
                       ("B-0001", "the first batch"), (f"B-{BATCHES:04}", "the last batch"), ("O-01000", "an order"),
                       ("S005", "a stock")):
        show(f"trace of {what}, {name}", took(lambda name=name: trace(plant, name), 3), "aim < 300")


def steps(plant: Plant) -> None:
    """What a step costs: its transaction, with the promises of every open batch."""
    from tests.store.batch_steps import charge, order

    order(plant, "BENCH", *((f"S{n:03}", 10.0) for n in range(20)))
    lines = iter(range(1, 21))
    show("a charge, saved", took(lambda: charge(plant, "BENCH", next(lines), 10.0)))
    show("a step taken back", took(plant.undo))


def paints(path: Path, empty: Path) -> None:
    """The start of the console until the first stock's name stands, both plants in turn."""
    times: dict[Path, list[float]] = {path: [], empty: []}
    for _ in range(STARTS):
        for plant in (empty, path):
            terminal = Terminal([sys.executable, "-c", CONSOLE, str(plant)])
            terminal.until(lambda terminal=terminal: FIRST_NAME in terminal.text())
            times[plant].append(time.perf_counter() - terminal.began)
            terminal.close()
    show("console: start to first name, no past", times[empty])
    show("console: start to first name, long past", times[path])
    ratio = statistics.median(times[path]) / statistics.median(times[empty])
    print(f"{'  ratio of the medians':<52} {ratio:>9.3f}{'':>13}  aim ≤ 1.2")


def main() -> None:
    """Make both plants, measure and print."""
    with tempfile.TemporaryDirectory() as name:
        path, empty = Path(name) / "long.plant", Path(name) / "empty.plant"
        os.environ["XDG_DATA_HOME"] = name
        start = time.perf_counter()
        make(path)
        make_empty(empty)
        print(f"made in {time.perf_counter() - start:.1f} s: {path.stat().st_size / 1e6:.0f} MB")
        print(f"{'':<52} {'median':>9} {'worst':>9}")
        show("opening the file", took(lambda: open_plant(path, who="bench").close()))
        with open_plant(path, who="bench") as plant:
            reads(plant)
            traces(plant)
            steps(plant)
        paints(path, empty)


if __name__ == "__main__":
    main()
