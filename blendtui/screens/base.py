"""Page: what every screen has, and how a key becomes a command."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING, Any, ClassVar

from textual import events
from textual.app import ComposeResult
from textual.screen import Screen
from textual.widget import Widget

from blendtui import commands
from blendtui.store.harmless import harmless
from blendtui.widgets.edit_line import EditLine, Ended
from blendtui.widgets.lines import KeyBar, StatusLine, TitleLine

if TYPE_CHECKING:
    from blendtui.app import Console
    from blendtui.desk.stocks import Edit

    from .session import Session
    from .state import Snapshot

TITLES = tuple((str(n), name) for n, (_, name) in enumerate(commands.SCREENS, 1))
TYPING_KEYS = [("Enter", "keep"), ("Ctrl+U", "empty it"), ("← →", "move in it"), ("Esc", "drop it")]


class Page(Screen[Any]):
    """A screen of the program: title, body, status, edit line, keys."""

    NAME: ClassVar[str] = ""
    AUTO_FOCUS = None

    def __init__(self) -> None:
        super().__init__()
        self.title_line = TitleLine(TITLES, dict(commands.SCREENS)[self.NAME])
        self.status = StatusLine()
        self.edit = EditLine()
        self.keys = KeyBar()
        self._later: deque[events.Key] = deque()

    def body(self) -> Iterable[Widget]:
        """The widgets between the title and the status line."""
        return ()

    def compose(self) -> ComposeResult:
        """All the lines of the screen."""
        yield self.title_line
        yield from self.body()
        yield self.status
        yield self.edit
        yield self.keys

    @property
    def program(self) -> Console:
        """The program."""
        return self.app  # type: ignore[return-value]

    @property
    def session(self) -> Session:
        """The recipe that all screens speak of."""
        return self.program.session

    @property
    def snapshot(self) -> Snapshot:
        """The plant as it was read last."""
        return self.program.session.snapshot

    def on_screen_resume(self) -> None:
        """Show what has changed while another screen was open."""
        kind, message = self.program.said[-1]
        self.status.show(message, kind)
        self.refresh_page()
        self.program.arrived(self)

    def refresh_page(self) -> None:
        """Show the present state: a screen adds what it shows, then calls this."""
        self.show_keys()

    def say(self, message: str, kind: str = "note") -> None:
        """Show a message in the status line."""
        self.status.show(message, kind)

    def show_keys(self) -> None:
        """The keys that mean something now."""
        typing = self.edit.typing
        if typing is None:
            self.keys.show(commands.key_line(self.NAME))
        elif typing.asking:
            take = [("s", f"take {typing.suggestion}")] if typing.suggestion else []
            keep = [("y", "keep it as typed")] if typing.keepable else []
            self.keys.show([*keep, *take, ("Esc", "drop it")])
        else:
            self.keys.show(TYPING_KEYS)

    # Keys

    def on_key(self, event: events.Key) -> None:
        """Feed the edit line, or carry out the command of the key."""
        event.stop()
        event.prevent_default()
        if self.program.going:
            self.program.ahead.append(event)
        elif self._later:
            self._later.append(event)
        else:
            self._key(event)

    def _key(self, event: events.Key) -> None:
        if self.edit.active:
            self.edit.feed(event.key, event.character)
            self.show_keys()
            return
        command = commands.find(self.NAME, event.key, event.character)
        if command is None or command.action != "quit":
            self.program.warned = False
        if command is None:
            key = event.character if event.is_printable and event.character else event.key
            self.say(f"the key {harmless(key, 20)} does nothing here; ? lists those that do")
        elif command.changes and self.program.busy:
            self._later.append(event)
        else:
            self.carry_out(command, event.key)

    def feed_later(self) -> None:
        """The plant is free again: carry out the keys that had to wait."""
        while self._later and not self.program.busy:
            self._key(self._later.popleft())

    def on_paste(self, event: events.Paste) -> None:
        """Pasted text goes where typed text goes."""
        event.stop()
        self.edit.paste(event.text)

    def carry_out(self, command: commands.Command, key: str) -> None:
        """Carry out a command: this screen's own way, or the program's."""
        if command.action.startswith("go_"):
            self.program.go(command.action.removeprefix("go_"))
        elif command.action == "move":
            self.move(key)
        else:
            owner = self if hasattr(self, f"do_{command.action}") else self.program
            getattr(owner, f"do_{command.action}")()
        self.show_keys()

    def move(self, key: str) -> None:
        """Move the cursor."""

    # Typing

    def type_text(self, label: str, text: str, then: Callable[[Ended], None],
             drop: Callable[[], None] | None = None, *, whole: bool = True) -> None:
        """Begin to type on the edit line."""
        self.edit.start(label, text, then, drop or (lambda: self.say("dropped; nothing was changed")), whole=whole)
        self.show_keys()

    def type_cell(self, label: str, text: str, save: Callable[[str, bool], Edit],
                  done: Callable[[Edit], None] | None = None) -> None:
        """Type into a cell that `save(text, confirmed)` keeps; questions and refusals come back to the line."""
        def then(ended: Ended) -> None:
            def finished(edit: Edit) -> None:
                if edit.status == "question":
                    again(ended.text)
                    self.edit.ask(edit.suggestion, keepable=not edit.refused)
                    self._question(edit)
                    return
                self.program.say(edit.message, "done" if edit.status == "saved" else "note")
                if done:
                    done(edit)

            self.program.change(lambda: save(ended.text, ended.confirmed), finished,
                                lambda refusal: again(ended.text))

        def again(typed: str) -> None:
            self.type_text(label, typed, then, whole=False)

        self.type_text(label, text, then)

    def _question(self, edit: Edit) -> None:
        take = f" · s takes {edit.suggestion}" if edit.suggestion else ""
        keep = "" if edit.refused else " · y keeps it"
        self.program.say(f"{edit.message} –{(keep + take)[2:]} · Esc drops it", "question")
        self.show_keys()

    def type_through(self, steps: list[tuple[str, str]], then: Callable[[list[str]], None]) -> None:
        """Ask for several things one after another: (label, text to begin with) each; then take them all."""
        typed: list[str] = []

        def ask() -> None:
            label, text = steps[len(typed)]
            self.type_text(f"{label} ({len(typed) + 1} of {len(steps)})" if len(steps) > 1 else label, text, took)

        def took(ended: Ended) -> None:
            typed.append(ended.text.strip())
            if len(typed) < len(steps):
                ask()
            else:
                then(typed)

        ask()
