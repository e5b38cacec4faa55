"""What would put a batch right: the charges to come worked out anew, and the trim; each shown before it is taken."""

from __future__ import annotations

from typing import Any

from blendtui.desk import numbers
from blendtui.store.batch_records import Made
from blendtui.store.harmless import harmless

from . import words
from .reading import Key, ReadingScreen
from .steps import StepPage


def show_outlook(page: StepPage, made: Made) -> None:
    """Show what the batch will be, and what would put it right; y there plans it."""
    plant, by = page.program.plant, page.session.by

    def replan() -> None:
        def make(sure: bool) -> Any:
            from blendtui.desk import charging

            return charging.replan(plant, made.name, by=by)

        page.take_step(make, lambda done: page.program.say(
            "the charges to come are planned anew; w writes the new card", "done"), yes="plan them")

    def work() -> Any:
        from blendtui.desk import charging

        return charging.outlook(plant, made)

    def show(found: Any) -> None:
        page.say("")
        keys: list[Key] = [("y", "plan these charges", replan)] if found.remedy is not None else []
        head = f"{harmless(made.name, 40)}: what it will be if the rest is charged as planned"
        page.app.push_screen(ReadingScreen(head, outlook_lines(found), keys))

    page.program.task(work, show, saying="working out what the batch will be …")


def outlook_lines(found: Any) -> list[str]:
    """What a batch will be, and what would put it right, in lines."""
    said = [harmless(each, 400) if found.good else f"! {harmless(each, 400)}" for each in found.words]
    if found.fill_l is not None:
        of = f" of {numbers.litres(found.capacity_l)}" if found.capacity_l else ""
        said.append(f"{numbers.batch(found.total_kg)} kg, {numbers.litres(found.fill_l)}{of} L at "
                    f"{found.made.head.mix_c:g} °C")
    limits = [x for x in (found.recipe.limits if found.recipe is not None else ()) if x.property != "cost_per_t"]
    if limits:
        said += ["", f"{'PREDICTED':<18} {'value':>9} {'low':>9} {'high':>9}"]
    for limit in limits:
        figures = " ".join(f"{numbers.value(limit.property, each) if each is not None else '':>9}"
                           for each in (limit.value, limit.low, limit.high))
        sign = {True: "", None: "  unknown", False: "  ! not met, or nearer than its guard"}[limit.met]
        said.append(f"  {words.heading(limit.property):<16} {figures} {words.unit(limit.property):<6}{sign}")
    if found.remedy_words:
        said += ["", "WHAT WOULD PUT IT RIGHT", *(harmless(each, 600) for each in found.remedy_words)]
    return [*said, "", words.CAUTION]


def show_trim(page: StepPage, made: Made) -> None:
    """Show the trim of a measured batch; y there plans it, a third one only with its reason."""
    plant, by = page.program.plant, page.session.by

    def work() -> tuple[Any, bool]:
        from blendtui.desk import release, trimming

        found = trimming.propose(plant, made.name)
        return found, found.round > release.FREE_ROUNDS

    def take(number: int, asks_why: bool) -> None:
        def make(why: str, sure: bool) -> Any:
            from blendtui.desk import trimming

            return trimming.take(plant, made.name, by=by, why=why, sure=sure)

        if asks_why:
            page.type_why(f"a trim {number} is made", make, done, yes="plan it")
        else:
            page.take_step(lambda sure: make("", sure), done, yes="plan it")

    def done(planned: Made) -> None:
        page.program.say(f"trim {planned.rounds} is planned: its charges stand below the others", "done")

    def show(found: tuple[Any, bool]) -> None:
        page.say("")
        proposed, asks_why = found
        takable = proposed.charges and not proposed.trim.drawn_kg
        keys: list[Key] = [("y", "plan this trim", lambda: take(proposed.round, asks_why))] if takable else []
        head = f"{harmless(made.name, 40)}: trim {proposed.round}, nothing is written yet"
        page.app.push_screen(ReadingScreen(head, trim_lines(proposed), keys))

    page.program.task(work, show, saying="working out the trim …")


def trim_lines(proposed: Any) -> list[str]:
    """A trim in lines, what must be done first at the head of it."""
    from blendtui.headless.batch_release import trim_text

    first = [f"! draw off {numbers.kg(proposed.trim.drawn_kg)} kg first (p on the floor), then ask for the trim anew",
             ""] if proposed.trim.drawn_kg else []
    return [*first, *trim_text(proposed, False).split("\n")]
