"""Draw the pictures of the README: `python -m tests.pictures` writes an SVG of each main screen here.

The example plant, a fixed day and a fixed size, so that a picture changes only when the screen does.
"""

from __future__ import annotations

import asyncio
import tempfile
from datetime import date
from pathlib import Path

from blendtui.app import Console
from blendtui.desk.plant import import_folder, open_plant

HERE = Path(__file__).parent
EXAMPLE = HERE.parent.parent / "stock_catalog_example"
SIZE = (100, 30)
TODAY = date(2026, 6, 1)
# Name of the picture → keys that lead there from the start.
SHOTS = {"stocks": [], "targets": ["2", "down"], "recipe": ["3", "right_square_bracket"],
         "why": ["5", *["right_square_bracket"] * 3], "choices": ["6", "right_square_bracket"],
         "chance": ["7", "right_square_bracket"], "lab": ["8"], "help": ["question_mark"]}


async def draw(name: str, keys: list[str], plant_file: Path) -> None:
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
            (HERE / f"{name}.svg").write_text(drawn, encoding="utf-8")


def main() -> None:
    """Draw every picture."""
    with tempfile.TemporaryDirectory() as folder:
        for name, keys in SHOTS.items():
            plant_file = Path(folder) / f"{name}.plant"
            import_folder(EXAMPLE, plant_file, who="operator")
            asyncio.run(draw(name, keys, plant_file))
            print(HERE / f"{name}.svg")


if __name__ == "__main__":
    main()
