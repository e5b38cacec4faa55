"""Draw the pictures of the README: `python -m tests.pictures` writes an SVG of each main screen here.

`python -m tests.pictures FOLDER NAME …` writes those of these names into another folder.

The example plant, a fixed day and a fixed size, so that a picture changes only when the screen does.
"""

from __future__ import annotations

import asyncio
import sys
import tempfile
from collections.abc import Sequence
from datetime import UTC, date, datetime, tzinfo
from pathlib import Path
from unittest.mock import patch

from blendtui.app import Console
from blendtui.desk.plant import import_folder, open_plant

HERE = Path(__file__).parent
EXAMPLE = HERE.parent.parent / "stock_catalog_example"
SIZE = (100, 30)
TODAY = date(2026, 6, 1)
# Name of the picture → keys that lead there from the start.
SHOTS = {"stocks": [], "targets": ["2", "down"], "recipe": ["3", "right_square_bracket"],
         "why": ["5", *["right_square_bracket"] * 3], "choices": ["6", "right_square_bracket"],
         "chance": ["7", "right_square_bracket"], "lab": ["8"], "batches": ["9"], "floor": ["0"],
         "laboratory": ["0", "tab"], "trim": ["0", "tab", "t"], "help": ["question_mark"]}
WITH_BATCHES = ("batches", "floor")
MEASURED = ("laboratory", "trim")


class Noon(datetime):
    """A clock that stands still."""

    @classmethod
    def now(cls, tz: tzinfo | None = None) -> datetime:
        """Noon of the fixed day."""
        return datetime(TODAY.year, TODAY.month, TODAY.day, 12, tzinfo=UTC).astimezone(tz)


def order(plant_file: Path) -> None:
    """Two batches: one that is planned, one that is being charged."""
    from blendtui.desk import charging, orders

    with open_plant(plant_file, who="operator") as plant, patch("blendtui.store.database.datetime", Noon):
        orders.take(plant, orders.Order("GEAR-220", 20000.0, "T9", customer="Southern Gears", order_no="S-30",
                                        tank_c={"": 45.0}), sure=True)
        made = orders.take(plant, orders.Order("HYD-46", 12000.0, "K1", customer="Northern Presses", order_no="N-881",
                                               tank_c={"": 45.0}), sure=True)
        first, second = made.charges[:2]
        charging.charge(plant, made.name, first.line, first.plan_kg, lot="24-0173", sure=True)
        charging.check(plant, made.name, first.line, by="ines")
        charging.charge(plant, made.name, second.line, second.plan_kg, lot="24-0166", sure=True)


def measure(plant_file: Path) -> None:
    """A batch of gear oil that is charged, and found too thin by the laboratory."""
    from blendtui.desk import batch_lab, charging, orders

    with open_plant(plant_file, who="operator") as plant, patch("blendtui.store.database.datetime", Noon):
        made = orders.take(plant, orders.Order("GEAR-220", 20000.0, "T9", customer="Southern Gears", order_no="S-30",
                                               tank_c={"": 45.0}), sure=True)
        for line in made.charges:
            charging.charge(plant, made.name, line.line, line.plan_kg, lot=f"24-01{line.line}", sure=True)
            charging.check(plant, made.name, line.line, by="ines")
        sample = batch_lab.sample(plant, made.name, place="top", celsius=58.0).sample
        batch_lab.results(plant, made.name, sample, {"kv40": "192.4", "kv100": "17.05", "flash": "238",
                                                     "density15": "891.2"}, sure=True)
        batch_lab.decide(plant, made.name)


async def draw(name: str, keys: list[str], plant_file: Path, folder: Path) -> None:
    """One picture."""
    with open_plant(plant_file, who="operator") as plant:
        app = Console(plant, today=TODAY)
        async with app.run_test(size=SIZE) as pilot:
            for key in ["", *keys]:
                if key:
                    await pilot.press(key)
                await app.workers.wait_for_complete()
                await pilot.pause()
            app.say("", "note")
            # Leading blanks of a text are part of the picture, whichever program shows it.
            drawn = app.export_screenshot(title="blendtui").replace("<svg ", '<svg xml:space="preserve" ', 1)
            (folder / f"{name}.svg").write_text(drawn, encoding="utf-8")


def main(to: Path = HERE, names: Sequence[str] = tuple(SHOTS)) -> None:
    """Draw the pictures."""
    with tempfile.TemporaryDirectory() as folder:
        for name in names:
            plant_file = Path(folder) / f"{name}.plant"
            import_folder(EXAMPLE, plant_file, who="operator")
            if name in WITH_BATCHES:
                order(plant_file)
            if name in MEASURED:
                measure(plant_file)
            asyncio.run(draw(name, SHOTS[name], plant_file, to))
            print(to / f"{name}.svg")


if __name__ == "__main__":
    main(*([Path(sys.argv[1]), sys.argv[2:]] if len(sys.argv) > 2 else []))
