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
from blendtui.desk.errors import DeskError
from blendtui.store.harmless import harmless
from blendtui.widgets.edit_line import EditLine, Ended, cut
from blendtui.widgets.lines import KeyBar, StatusLine, TitleLine
from solver.errors import SolverError

if TYPE_CHECKING:
    from blendtui.app import Console
    from blendtui.desk.stocks import Edit

    from .session import Session
    from .state import Snapshot

TITLES = tuple((commands.KEYS[code], name) for code, name in commands.SCREENS)
WIDE = 110  # columns from which a screen is laid wide
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
        self._later: deque[events.Key | events.Paste] = deque()
        self._hint = ""  # the last one said in the status line
        self._swallowing = False  # something is being typed at a cell that takes nothing
        self._swallowed = False  # … and a digit of it has come already

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
        self.say(message, kind)
        self.refresh_page()
        self.program.arrived(self)

    def refresh_page(self) -> None:
        """Show the present state: a screen adds what it shows, then calls this."""
        self.show_keys()

    def say(self, message: str, kind: str = "note") -> None:
        """Show a message in the status line; a long one takes blank lines of the body."""
        asking = self.edit.typing is not None and self.edit.typing.asking
        if asking and kind in ("note", "wait"):
            return  # what another person changed is in the list of messages; the question stays in sight
        typing = self.edit.active and not asking
        self.status.show(message, kind, "Esc, then ! shows all" if typing else "! shows all")
        self._grow()

    def spare(self) -> int:
        """Blank lines that the body has now; each screen counts its own."""
        return 0

    def _grow(self) -> None:
        width, styles = self.size.width, self.status.styles
        if not width or not self.status.size:
            return
        usual = 1 if width >= WIDE else 2
        height = min(self.status.needs(width), usual + max(0, self.spare() + self.status.size.height - usual))
        if height > usual:
            styles.height = height
        elif self.status.size.height > usual:
            styles.clear_rule("height")
            self.status.refresh(layout=True)

    def refuse(self, message: str) -> None:
        """Nothing can be typed here: say why, and let no key of a number that is typed nevertheless do anything."""
        self.say(message)
        self._swallowing, self._swallowed = True, False

    def _swallow(self, event: events.Key) -> bool:
        """Does this key belong to a number that is typed where none can be? `8.95 t` and its Enter do."""
        digit = event.character is not None and event.character in "0123456789.,"
        goes_on = self._swallowed and (event.is_printable or event.key in ("backspace", "enter"))
        if self._swallowing and (digit or goes_on):
            self._swallowed, self._swallowing = True, event.key != "enter"
            self.say("nothing can be typed at this cell, and nothing was; an arrow goes on")
            return True
        self._swallowing = self._swallowed = False
        return False

    def show_keys(self) -> None:
        """The keys that mean something now."""
        typing = self.edit.typing
        if typing is None:
            self.keys.show(commands.key_line(self.NAME))
        elif typing.asking:
            take = [("s", f"take {typing.suggestion}")] if typing.suggestion else []
            keep = [("y", typing.yes)] if typing.keepable else []
            self.keys.show([*keep, *take, ("Esc", "drop it")])
        else:
            self.keys.show(TYPING_KEYS)

    # Keys

    def on_key(self, event: events.Key) -> None:
        """Feed the edit line, or carry out the command of the key."""
        event.stop()
        event.prevent_default()
        self.take_event(event)

    def on_paste(self, event: events.Paste) -> None:
        """Pasted text goes where typed text goes, and nowhere else."""
        event.stop()
        self.take_event(event)

    def take_event(self, event: events.Key | events.Paste) -> None:
        """Take a key or a paste, after those that wait."""
        if self.program.going:
            self.program.ahead.append(event)
        elif self._later:
            self._later.append(event)
        elif isinstance(event, events.Paste):
            self._paste(event)
        else:
            self._key(event)

    def _paste(self, event: events.Paste) -> None:
        if self.edit.active:
            self.edit.paste(event.text)
        else:
            self.say("nothing is being typed here: Enter first, then paste")

    def _key(self, event: events.Key) -> None:
        if self._swallow(event):
            return
        if self.edit.typing and self.edit.typing.asking and event.character == "!":
            self.program.do_messages()
            return
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
            event = self._later.popleft()
            if isinstance(event, events.Paste):
                self._paste(event)
            else:
                self._key(event)

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
        """Begin to type on the edit line; a hint in brackets that finds no room there is said above it."""
        name, _, hint = label.partition(" (")
        if hint and cut(label, self.size.width) != label:
            self._hint, label = f"{name}: {hint.removesuffix(')')}", name
            self.say(self._hint)
        elif self._hint and self.status.message == self._hint:
            self.say("")  # the hint of the step before
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

    def type_checked(self, label: str, text: str, read: Callable[[str], Any], then: Callable[[Any], None]) -> None:
        """Type something that `read` makes sense of; what cannot be read comes back to the line."""
        def took(ended: Ended) -> None:
            try:
                found = read(ended.text.strip())
            except (SolverError, DeskError) as error:
                self.type_text(label, ended.text, took, whole=False)
                self.program.say(str(error), "refused")
                return
            then(found)

        self.type_text(label, text, took)

    def type_through(self, steps: list[tuple[str, str]], then: Callable[[list[str]], None],
                     before: int = 0) -> None:
        """Ask for several things one after another: (label, text to begin with) each; then take them all.

        `before`: steps that were asked already and count with these.
        """
        count = len(steps) + before
        typed: list[str] = []

        def ask() -> None:
            label, text = steps[len(typed)]
            self.type_text(step(len(typed) + before + 1, count, label) if count > 1 else label, text, took)

        def took(ended: Ended) -> None:
            typed.append(ended.text.strip())
            if len(typed) < len(steps):
                ask()
            else:
                then(typed)

        ask()


def step(number: int, count: int, label: str) -> str:
    """The label of one step of several: `2 of 3: low (empty: open)`."""
    return f"{number} of {count}: {label}"
