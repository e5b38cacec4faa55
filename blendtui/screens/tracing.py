"""A trace at the console: a name is asked for, and shown both ways."""

from __future__ import annotations

from blendtui.store.harmless import harmless

from .base import Page
from .reading import ReadingScreen


def ask(page: Page, begun: str) -> None:
    """Ask for a name and show what it leads to."""
    plant = page.program.plant

    def then(name: str) -> None:
        def work() -> list[str]:
            from blendtui.desk.trace import trace
            from blendtui.headless.trace import trace_text

            return trace_text(trace(plant, name)).split("\n")

        head = f"Trace of {harmless(name, 40)}"
        page.program.task(work, lambda text: page.app.push_screen(ReadingScreen(head, text)))

    page.type_checked("trace which lot, batch, order, customer or stock", begun, str.strip, then)
