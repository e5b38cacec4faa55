"""What to weigh on the bench for the recipe shown: read over the screen, and written as a text file if asked for."""

from __future__ import annotations

from blendtui.desk import lab_plan
from blendtui.store.harmless import harmless
from blendtui.widgets.paint import plain

from .base import Page
from .reading import ReadingScreen, write


def show(page: Page) -> None:
    """Show what to weigh for the recipe that all screens speak of."""
    session, today = page.session, page.program.today.isoformat()
    recipe, answer = session.shown, session.state.answer
    if recipe is None or answer is None or not recipe.shares:
        page.say("there is no recipe to plan a bench blend for yet")
        return
    head = [f"{harmless(session.product)}, {today}, law {recipe.law}", ""]
    name = f"{session.product}-bench-{today}.txt"

    def shown(text: list[str]) -> None:
        keys = [("w", "write to a file", lambda: write(page, "plan", name, lambda html: plain("\n".join(text))))]
        page.app.push_screen(ReadingScreen("Bench blend", text, keys))

    page.program.task(lambda: [*head, *lab_plan.words(lab_plan.plan(recipe, answer.stocks))], shown)
