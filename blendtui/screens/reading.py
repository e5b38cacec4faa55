"""A text to read over a screen: a proposal, a card, a trace. A key of it may go back and do something."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from pathlib import Path

from textual import events

from blendtui.desk.errors import DeskError
from blendtui.desk.stocks import Edit
from blendtui.widgets.paint import BAD, BOLD, PLAIN, WARN, Line, wrap

from .at_console import at_console
from .base import Page
from .overlays import TextScreen

Key = tuple[str, str, Callable[[], None]]  # the key, what it does in a word or two, and the doing
STYLES = {"! ": BAD, "? ": WARN}  # of a line that begins so


class ReadingScreen(TextScreen):
    """A text; each of its keys leaves it and then does what it is for."""

    def __init__(self, head: str, text: Sequence[str], keys: Sequence[Key] = ()) -> None:
        super().__init__()
        self.HEAD = head
        self.said, self.own_keys = tuple(at_console(line) for line in text), tuple(keys)

    def on_mount(self, event: events.Mount) -> None:  # type: ignore[override]
        """Show the keys."""
        event.prevent_default()  # the text's own would come after this one and show its keys again
        super().on_mount()
        self.keys.show([("↑ ↓ PgUp PgDn", "move"), *((key, label) for key, label, _ in self.own_keys), ("Esc", "back")])

    def lines(self, width: int) -> Iterable[Line]:
        """The text; a line that is too long goes on below, indented."""
        for line in self.said:
            heading = line.isupper() and not any(c.isdigit() for c in line)  # a row of codes and figures is none
            style = STYLES.get(line[:2], BOLD if heading else PLAIN)
            indent = " " * (len(line) - len(line.lstrip()) + 2)
            for part in [line] if len(line) <= width else wrap(line, width, indent):
                yield [(part, style)]

    def on_key(self, event: events.Key) -> None:
        """Do what a key is for, move, or leave."""
        super().on_key(event)
        for key, _, work in self.own_keys:
            if event.character == key:
                self.app.call_later(work)


def is_page(name: str) -> bool:
    """Does a file name ask for HTML?"""
    return name.strip().lower().endswith((".html", ".htm"))


def write(page: Page, what: str, name: str, make: Callable[[bool], str]) -> None:
    """Ask where a text is to be written, and write it; `make(True)` makes it as HTML, for a name that ends so."""
    program = page.program

    def save(typed: str, sure: bool) -> Edit:
        from blendtui.desk.certificate import write_new

        if not typed.strip():
            raise DeskError(f"no file name: type where the {what} is to be written")
        path = program.sheets / Path(typed.strip()).expanduser()
        return Edit("saved", write_new(path, make(is_page(typed)).rstrip("\n") + "\n", what))

    page.type_cell(f"write the {what} to", str(program.sheets / name), save)


# The papers of a batch

def write_card(page: Page, name: str) -> None:
    """Ask where the card of a batch is to be written, and write it."""
    plant = page.program.plant

    def make(html: bool) -> str:
        from blendtui.desk import card

        made = card.card(plant, name)
        if html:
            from blendtui.desk import card_html

            return card_html.card_html(made)
        return card.card_text(made)

    write(page, "card", f"{name}-card.txt", make)


def write_certificate(page: Page, name: str) -> None:
    """Ask where the certificate of a batch is to be written, and write it."""
    plant = page.program.plant

    def make(html: bool) -> str:
        from blendtui.desk import certificate

        made = certificate.certificate(plant, name)
        if html:
            from blendtui.desk import certificate_html

            return certificate_html.certificate_html(made)
        return certificate.certificate_text(made)

    write(page, "certificate", f"{name}-certificate.txt", make)
