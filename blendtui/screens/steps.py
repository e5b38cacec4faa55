"""A step of a batch as a screen takes it: done in the plant's thread, and what is unlikely is asked first."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from typing import Any

from blendtui.desk.errors import DeskError
from blendtui.store.harmless import harmless
from blendtui.widgets.edit_line import Ended

from .base import Page, step

Make = Callable[[bool], Any]  # does the step; with True although it was questioned
Done = Callable[[Any], None]


class StepPage(Page):
    """A screen that takes steps of a batch."""

    def charges_planned(self) -> None:
        """Charges to come were planned: a screen that shows them goes there."""

    @property
    def who(self) -> str:
        """The name under which steps at this terminal are recorded, fit to be shown."""
        return harmless(self.session.by or self.program.plant.who, 16)

    def do_person(self) -> None:
        """Type the name under which steps are recorded here."""
        def then(name: str) -> None:
            self.session.by = name
            self.refresh_page()
            self.say(f"steps are recorded under {name or self.program.plant.who}")

        self.type_checked("your name, for the record (empty: the login name)", self.session.by,
                          lambda text: harmless(text, 60), then)

    def take_step(self, make: Make, done: Done, *, yes: str = "do it", again: Callable[[], None] | None = None,
                  saying: str = "putting it on record …") -> None:
        """Do `make(False)`; a question of the desk is put to the operator, and y does `make(True)`.

        `again`: begins to type once more where the step was refused or its question dropped with a key that is
        no answer.
        """
        from blendtui.desk.batches import Questioned

        def work(sure: bool) -> tuple[Any, str]:
            try:
                return make(sure), ""
            except Questioned as asked:
                return None, str(asked)

        def took(found: tuple[Any, str]) -> None:
            result, asked = found
            if asked:
                self.question(asked, yes, lambda: self.program.change(lambda: work(True), took, failed, saying=saying))
            else:
                done(result)

        def failed(refusal: str) -> None:
            if again:
                again()

        self.program.change(lambda: work(False), took, failed, saying=saying)

    def question(self, words: str, yes: str, then: Callable[[], None]) -> None:
        """Ask: y does it, Esc drops it, and Enter alone does nothing."""
        self.edit.start("y or Esc", "", lambda ended: then(), lambda: self.say("dropped; nothing was changed"))
        self.edit.ask(None, step=yes)
        self.program.say(f"{words} – y: {yes} · Esc: drop it", "question")
        self.show_keys()

    def type_step(self, label: str, text: str, make: Callable[[str, bool], Any], done: Done, *, yes: str = "do it",
                  whole: bool = True) -> None:
        """Type something and do `make(typed, sure)` with it; what is refused comes back to the line."""
        def then(ended: Ended) -> None:
            self.take_step(lambda sure: make(ended.text.strip(), sure), done, yes=yes,
                           again=lambda: self.type_step(label, ended.text, make, done, yes=yes, whole=False))

        self.type_text(label, text, then, whole=whole)

    def type_why(self, of: str, make: Callable[[str, bool], Any], done: Done, *, yes: str = "do it") -> None:
        """Ask for a reason, which may not be empty, and do `make(why, sure)`."""
        self.ask_step([(f"why {of}", "", reason)], lambda found, sure: make(found[0], sure), done, yes=yes)

    def ask_step(self, steps: Sequence[tuple[str, str, Callable[[str], Any]]], make: Callable[[list[Any], bool], Any],
                 done: Done, *, yes: str = "do it", before: int = 0) -> None:
        """Ask for several things in turn (label, text to begin with, reader), then do `make(found, sure)`.

        What is refused comes back to the lines, each with what was typed on it. `before`: steps asked already.
        """
        typed = [begun for _, begun, _ in steps]

        def kept(at: int, read: Callable[[str], Any]) -> Callable[[str], Any]:
            def keep(text: str) -> Any:
                typed[at] = text
                return read(text)

            return keep

        def ask() -> None:
            self.ask_through([(label, partial(typed.__getitem__, n), kept(n, read))
                              for n, (label, _, read) in enumerate(steps)], then, before)

        def then(found: list[Any]) -> None:
            self.take_step(lambda sure: make(found, sure), done, yes=yes, again=ask)

        ask()

    def ask_through(self, steps: list[tuple[str, Callable[[], str], Callable[[str], Any]]],
                    then: Callable[[list[Any]], None], before: int = 0) -> None:
        """Ask for several things in turn, each read as soon as it is typed: (label, text to begin with, reader)."""
        found: list[Any] = []
        count = len(steps) + before

        def ask() -> None:
            label, text, read = steps[len(found)]
            told = step(len(found) + before + 1, count, label) if count > 1 else label
            self.type_checked(told, text(), read, took)

        def took(value: Any) -> None:
            found.append(value)
            if len(found) < len(steps):
                ask()
            else:
                then(found)

        ask()


def reason(typed: str) -> str:
    """A reason as it was typed; DeskError for none."""
    if not typed.strip():
        raise DeskError("a reason is needed here: a few words that another person will understand")
    return typed.strip()
