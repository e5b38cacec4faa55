"""What would put a batch right: the charges to come worked out anew, and the trim; each shown before it is taken."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from blendtui.desk import numbers
from blendtui.store.batch_records import Made
from blendtui.store.harmless import harmless

from .at_console import at_console
from .reading import Key, ReadingScreen
from .steps import StepPage


def show_outlook(page: StepPage, made: Made) -> None:
    """Show what the batch will be, and what would put it right; y there plans it."""
    plant, by = page.program.plant, page.session.by

    def replan() -> None:
        def make(sure: bool) -> Any:
            from blendtui.desk import charging

            return charging.replan(plant, made.name, by=by)

        def done(planned: Made) -> None:
            page.charges_planned()
            page.program.say("the charges to come are planned anew; w writes the new card", "done")

        page.take_step(make, done, yes="plan them")

    def work() -> tuple[Any, str]:
        from blendtui.desk import charging
        from blendtui.headless.batch_floor import outlook_text

        ahead = charging.outlook(plant, made)
        return ahead, outlook_text(ahead)

    def show(found: tuple[Any, str]) -> None:
        page.say("")
        ahead, text = found
        keys: list[Key] = [("y", "plan these charges", replan)] if ahead.remedy is not None else []
        head = f"{harmless(made.name, 40)}: what it will be if the rest is charged as planned"
        page.app.push_screen(ReadingScreen(head, text.split("\n"), keys))

    page.program.task(work, show, saying="working out what the batch will be …")


def show_trim(page: StepPage, made: Made, aim: str = "cost", chance: float | None = None) -> None:
    """Show the trim of a measured batch; y there plans it as it is shown, a third one only with its reason.

    m there asks for the other aim, c for a chance at which each limit is met.
    """
    plant, by = page.program.plant, page.session.by

    def work() -> tuple[Any, bool, list[str]]:
        from blendtui.desk import release, trimming

        found = trimming.propose(plant, made.name, aim=aim, chance=chance)
        return found, found.round > release.FREE_ROUNDS, trim_lines(found)

    def take(proposed: Any, asks_why: bool) -> None:
        def make(why: str, sure: bool) -> Any:
            from blendtui.desk import trimming

            return trimming.take_proposed(plant, proposed, by=by, why=why, sure=sure)

        if asks_why:
            page.type_why(f"a trim {proposed.round} is made", make, done, yes="plan it")
        else:
            page.take_step(lambda sure: make("", sure), done, yes="plan it")

    def done(planned: Made) -> None:
        page.charges_planned()
        page.program.say(f"trim {planned.rounds} is planned: its charges stand below the others", "done")

    def show(found: tuple[Any, bool, list[str]]) -> None:
        page.say("")
        proposed, asks_why, text = found
        takable = proposed.charges and not proposed.trim.drawn_kg
        other = "mass" if aim == "cost" else "cost"
        keys: list[Key] = [("y", "plan this trim", lambda: take(proposed, asks_why))] if takable else []
        keys += [("m", f"least {other}", lambda: show_trim(page, made, other, chance)),
                 ("c", "chance", lambda: _ask_chance(page, made, aim, chance))]
        head = f"{harmless(made.name, 40)}: trim {proposed.round}, nothing is written yet"
        page.app.push_screen(ReadingScreen(head, text, keys))

    page.program.task(work, show, saying="working out the trim …")


def _ask_chance(page: StepPage, made: Made, aim: str, chance: float | None) -> None:
    """Ask for the chance of a trim, and show that trim."""
    def read(typed: str) -> float | None:
        from blendtui.desk.chance import confidence

        return confidence(typed) if typed else None

    page.type_checked("each limit is met with a chance of, % (95; empty: none, the product's guards)",
                      "" if chance is None else f"{100.0 * chance:g}", read,
                      lambda found: show_trim(page, made, aim, found))


def trim_lines(proposed: Any) -> list[str]:
    """A trim in lines, what must be done first at the head of it."""
    from blendtui.headless.batch_release import trim_text

    # Before the text is laid: a command that is broken over two lines would not be found.
    proposed = replace(proposed, words=tuple(map(at_console, proposed.words)),
                       questions=tuple(map(at_console, proposed.questions)))
    first = [f"! draw off {numbers.kg(proposed.trim.drawn_kg)} kg first (p on the floor), then ask for the trim anew",
             ""] if proposed.trim.drawn_kg else []
    return [*first, *trim_text(proposed, False).split("\n")]
