"""What to weigh on the bench for the recipe shown: read over the screen, and written as a text file if asked for."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

from textual import events

from blendtui.desk import lab_plan, sheet
from blendtui.desk.errors import DeskError
from blendtui.desk.stocks import Edit
from blendtui.store.harmless import harmless
from blendtui.widgets.paint import PLAIN, Line, wrap

from .base import Page
from .overlays import TextScreen

WRITE = "w"


class BenchScreen(TextScreen):
    """The plan as text; w goes back and asks where it is to be written."""

    HEAD = "Bench blend"

    def __init__(self, text: Sequence[str], write: Any) -> None:
        super().__init__()
        self.plan, self.write = text, write

    def on_mount(self, event: events.Mount) -> None:  # type: ignore[override]
        """Show the keys."""
        event.prevent_default()  # the text's own would come after this one and show its keys again
        super().on_mount()
        self.keys.show([("↑ ↓ PgUp PgDn", "move"), (WRITE, "write to a file"), ("Esc", "back")])

    def lines(self, width: int) -> Iterable[Line]:
        """The plan, as it will be written."""
        return [[(part, PLAIN)] for line in self.plan for part in wrap(line, width - 1, "  ") or [""]]

    def on_key(self, event: events.Key) -> None:
        """Write, move, or leave."""
        super().on_key(event)
        if event.key == WRITE:
            self.app.call_later(self.write)


def show(page: Page) -> None:
    """Show what to weigh for the recipe that all screens speak of."""
    session = page.session
    recipe, answer = session.shown, session.state.answer
    if recipe is None or answer is None or not recipe.shares:
        page.say("there is no recipe to plan a bench blend for yet")
        return
    head = [f"{harmless(session.product)}, {page.program.today.isoformat()}, law {recipe.law}", ""]
    page.program.task(lambda: [*head, *lab_plan.words(lab_plan.plan(recipe, answer.stocks))],
                      lambda text: page.app.push_screen(BenchScreen(text, lambda: _write(page, text))))


def _write(page: Page, text: Sequence[str]) -> None:
    program = page.program
    name = f"{page.session.product}-bench-{program.today.isoformat()}.txt"

    def save(typed: str, sure: bool) -> Edit:
        if not typed.strip():
            raise DeskError("no file name: type where the plan is to be written")
        path = program.sheets / Path(typed.strip()).expanduser()
        plain = "\n".join([*text, ""]).encode("ascii", "replace").decode("ascii")  # what any printer can print
        return Edit("saved", sheet.write_sheet(path, plain))

    page.type_cell("write the plan to", str(program.sheets / name), save)
