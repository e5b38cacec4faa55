"""EditLine: the one place where anything is typed, always there, never a dialog."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

from rich.cells import cell_len

from .canvas import Canvas
from .paint import BOLD, CURSOR, PLAIN, WARN, Line, fit

LEAST = 24  # columns of the text that is typed, at the least


@dataclass(frozen=True)
class Typing:
    """What is being typed."""

    label: str  # what it is for, with its unit
    text: str = ""
    at: int = 0  # where the next character goes
    whole: bool = False  # the next character takes the place of all the text
    asking: bool = False  # a question about the text is open in the status line
    suggestion: str | None = None
    keepable: bool = True  # may the text be kept although it was questioned
    yes: str = "keep it as typed"  # what y does
    only_y: bool = False  # Enter does not: what is asked could not be taken back by hand


@dataclass(frozen=True)
class Ended:
    """Enter: the text is to be taken. `confirmed`: although it was questioned."""

    text: str
    confirmed: bool = False


@dataclass(frozen=True)
class Dropped:
    """Esc: nothing of it is to be kept."""


class EditLine(Canvas):
    """One line: at rest it names what the cursor is on; in use it takes the keys that its screen feeds it."""

    def __init__(self) -> None:
        super().__init__(id="edit")
        self.typing: Typing | None = None
        self.rest: tuple[str, str] = ("", "")
        self._then: Callable[[Ended], None] | None = None
        self._drop: Callable[[], None] | None = None

    @property
    def active(self) -> bool:
        """Is something being typed?"""
        return self.typing is not None

    def show(self, what: str, value: str) -> None:
        """Name what the cursor is on, and its value."""
        self.rest = (what, value)
        self.paint()

    def start(self, label: str, text: str, then: Callable[[Ended], None],
              drop: Callable[[], None] | None = None, *, whole: bool = True) -> None:
        """Begin to type; `then` gets what was typed."""
        self.typing = Typing(label, text, len(text), whole and bool(text))
        self._then, self._drop = then, drop
        self.paint()

    def ask(self, suggestion: str | None, *, keepable: bool = True, step: str = "") -> None:
        """The text was questioned: y or Enter keeps it (if it may be), s takes the suggestion, Esc drops it.

        `step`: what y does where that is more than keeping the text; Enter does not do it then.
        """
        if self.typing is not None:
            self.typing = replace(self.typing, asking=True, suggestion=suggestion, keepable=keepable, whole=False,
                                  yes=step or self.typing.yes, only_y=bool(step))
            self.paint()

    def stop(self) -> None:
        """Back to rest."""
        self.typing = self._then = self._drop = None
        self.paint()

    def feed(self, key: str, character: str | None) -> Ended | Dropped | None:
        """Take a key; what is returned has already been handed on."""
        if self.typing is None:
            return None
        if key == "escape":
            drop = self._drop
            self.stop()
            if drop:
                drop()
            return Dropped()
        ended = self._ended(key, character)
        if ended is not None:
            then = self._then
            self.stop()
            if then:
                then(ended)
            return ended
        if self.typing is not None and not self.typing.asking:
            self.typing = typed(self.typing, key, character)
            self.paint()
        return None

    def _ended(self, key: str, character: str | None) -> Ended | None:
        assert self.typing is not None
        now = self.typing
        if not now.asking:
            return Ended(now.text) if key == "enter" else None
        if now.keepable and ((key == "enter" and not now.only_y) or character in ("y", "Y")):
            return Ended(now.text, confirmed=True)
        if character in ("s", "S") and now.suggestion is not None:
            return Ended(now.suggestion)
        return None

    def paste(self, text: str) -> None:
        """Put pasted text in, its line ends and control characters as spaces."""
        if self.typing is not None and not self.typing.asking:
            for character in "".join(c if c.isprintable() else " " for c in text).strip():
                self.typing = typed(self.typing, character, character)
            self.paint()

    def draw(self, width: int, height: int) -> list[Line]:
        """One line; a long text moves so that the place being typed at stays in sight."""
        if self.typing is None:
            what, value = self.rest
            label = what + (": " if what and value else "")
            return [[(label, PLAIN), (fit(value, width - cell_len(label)).rstrip() if value else "", BOLD)]]
        now = self.typing
        label = f"{cut(now.label, width)} ▸ "
        room = max(8, width - cell_len(label) - 1)
        first = max(0, now.at - room)
        text = now.text[first:first + room] + " "
        at = now.at - first
        if now.asking:
            return [[(label, BOLD), (text, WARN)]]
        if now.whole:
            return [[(label, BOLD), (text[:-1], CURSOR), (" ", CURSOR)]]
        return [[(label, BOLD), (text[:at], PLAIN), (text[at], CURSOR), (text[at + 1:], PLAIN)]]


def cut(label: str, width: int) -> str:
    """A label that leaves room for at least LEAST columns of text and the cursor."""
    room = max(4, width - LEAST - 4)
    return fit(label, room) if cell_len(label) > room else label


def typed(now: Typing, key: str, character: str | None) -> Typing:
    """The text after one key."""
    text, at = now.text, now.at
    if key == "backspace":
        if now.whole:
            return replace(now, text="", at=0, whole=False)
        return replace(now, text=text[:max(0, at - 1)] + text[at:], at=max(0, at - 1))
    if key == "delete":
        if now.whole:
            return replace(now, text="", at=0, whole=False)
        return replace(now, text=text[:at] + text[at + 1:])
    if key in ("ctrl+u", "ctrl+k"):
        return replace(now, text="", at=0, whole=False)
    moves = {"left": max(0, at - 1), "right": min(len(text), at + 1), "home": 0, "ctrl+a": 0,
             "end": len(text), "ctrl+e": len(text)}
    if key in moves:
        return replace(now, at=moves[key], whole=False)
    if character and character.isprintable() and len(character) == 1:
        if now.whole:
            return replace(now, text=character, at=1, whole=False)
        return replace(now, text=text[:at] + character + text[at:], at=at + 1)
    return now
