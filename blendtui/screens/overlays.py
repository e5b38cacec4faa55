"""What lies over a screen for a moment: help, all commands, all messages. All made from one table."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from textual import events
from textual.app import ComposeResult
from textual.screen import Screen

from blendtui import commands
from blendtui.widgets.edit_line import EditLine, Typing, typed
from blendtui.widgets.grid import Column, Grid
from blendtui.widgets.lines import KeyBar, OneLine, StatusLine
from blendtui.widgets.page_text import PageText
from blendtui.widgets.paint import BOLD, PLAIN, WARN, Line, wrap


class TextScreen(Screen[None]):
    """A page of text; any key but the moving ones leaves it."""

    AUTO_FOCUS = None
    HEAD = ""

    def __init__(self) -> None:
        super().__init__()
        self.head = OneLine(id="title")
        self.page_text = PageText(id="text")
        self.page_text.active = True
        self.keys = KeyBar()

    def compose(self) -> ComposeResult:
        """Heading, text, keys."""
        yield self.head
        yield self.page_text
        yield self.keys

    def on_mount(self) -> None:
        """Show the text once the width is known."""
        self.head.show((self.HEAD, BOLD))
        self.keys.show([("↑ ↓ PgUp PgDn", "move"), ("Esc", "back")])

    def on_resize(self) -> None:
        """Lay the lines for this width."""
        self.page_text.show(list(self.lines(self.size.width)))

    def lines(self, width: int) -> Iterable[Line]:
        """The text for a width; each overlay has its own."""
        return ()

    def on_key(self, event: events.Key) -> None:
        """Move, or leave."""
        event.stop()
        event.prevent_default()
        if event.key in commands.MOVES:
            self.page_text.move(event.key)
        else:
            self.dismiss(None)


class HelpScreen(TextScreen):
    """Every command, those of the screen that asked first."""

    HEAD = "Keys and commands"

    def __init__(self, screen: str) -> None:
        super().__init__()
        self.of = screen

    def lines(self, width: int) -> Iterable[Line]:
        """A command a paragraph: key, label, sentence."""
        names = {**dict(commands.SCREENS), commands.ALL: "Everywhere"}
        order = [self.of, commands.ALL, *(code for code, _ in commands.SCREENS if code != self.of)]
        for screen in order:
            yield [(names[screen], BOLD)]
            for command in (c for c in commands.COMMANDS if c.screen == screen):
                yield from _entry(command, width)
            yield []


def _entry(command: commands.Command, width: int) -> Iterable[Line]:
    key, text = command.key, f"{command.label}: {command.help}"
    indent = " " * 10
    if len(key) > 7:
        yield [(f"  {key}", BOLD)]
        key = ""
    first, *more = wrap(text, width - 11)
    yield [(f"  {key:<8}", BOLD), (first, PLAIN)]
    for line in more:
        yield [(indent + line, PLAIN)]


class MessagesScreen(TextScreen):
    """What was said, in full, newest first."""

    HEAD = "Messages of this session, newest first"

    def __init__(self, said: list[tuple[str, str]]) -> None:
        super().__init__()
        self.said = said

    def lines(self, width: int) -> Iterable[Line]:
        """A message a paragraph."""
        marks = {"refused": "! ", "question": "? "}
        for kind, message in reversed(self.said):
            for n, line in enumerate(wrap(marks.get(kind, "  ") + message, width - 1, "    ")):
                yield [(line, WARN if kind in marks and n == 0 else PLAIN)]


class PaletteScreen(Screen[Any]):
    """Every command, found by typing, carried out with Enter."""

    AUTO_FOCUS = None

    def __init__(self, screen: str) -> None:
        super().__init__()
        self.of = screen
        self.edit = EditLine()
        self.edit.typing = Typing("command")
        self.grid = Grid(id="text")
        self.help_line = StatusLine()
        self.keys = KeyBar()
        self.found: list[commands.Command] = []

    def compose(self) -> ComposeResult:
        """What is typed, what is found, keys."""
        yield self.edit
        yield self.grid
        yield self.help_line
        yield self.keys

    def on_mount(self) -> None:
        """Show all commands."""
        self.keys.show([("type", "to find"), ("↑ ↓", "choose"), ("Enter", "carry out"), ("Esc", "back")])
        self._find()

    def on_resize(self) -> None:
        """Lay the rows for this width."""
        self._find()

    def _find(self) -> None:
        assert self.edit.typing is not None
        names = {**dict(commands.SCREENS), commands.ALL: "everywhere"}
        self.found = [c for c in commands.matching(self.edit.typing.text, self.of) if c.action != "move"]
        shown = (Column("key", "key", "", 6, "left"), Column("label", "command", "", 15, "left"),
                 Column("screen", "screen", "", 10, "left"),
                 Column("help", "what it does", "", max(10, self.size.width - 35), "left"))
        self.grid.empty = "no command has these words"
        self.grid.show(shown, len(self.found), lambda r, c: (
            names[self.found[r].screen] if shown[c].code == "screen" else getattr(self.found[r], shown[c].code)),
            column=1)
        self._explain()

    def _explain(self) -> None:
        self.help_line.show(self.found[self.grid.row].help if self.found else "")

    def on_key(self, event: events.Key) -> None:
        """Type, choose, carry out or leave."""
        event.stop()
        event.prevent_default()
        assert self.edit.typing is not None
        if event.key == "escape":
            self.dismiss(None)
        elif event.key == "enter":
            self.dismiss(self.found[self.grid.row] if self.found else None)
        elif event.key in ("up", "down", "pageup", "pagedown"):
            self.grid.move(event.key)
            self._explain()
        else:
            self.edit.typing = typed(self.edit.typing, event.key, event.character)
            self.edit.paint()
            self.grid.row = 0
            self._find()
