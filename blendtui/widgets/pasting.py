"""A paste is text, whatever it holds: an escape code in it never reaches the program as a key.

Textual's reader of the terminal goes on reading escape codes inside a bracketed paste and hands those it does
not know on as keys. So what stands between the marks of a paste is made plain before it is read.
"""

from __future__ import annotations

from collections.abc import Iterable

from textual._xterm_parser import BRACKETED_PASTE_END as END
from textual._xterm_parser import BRACKETED_PASTE_START as START
from textual._xterm_parser import XTermParser
from textual.message import Message


class Cleaner:
    """Takes what a terminal sends, piece by piece; control characters inside a paste become spaces."""

    def __init__(self) -> None:
        self.open = False
        self._held = ""  # may be the beginning of the mark that ends the paste
        self._tail = ""  # already handed on, may be the beginning of the mark that begins one

    def clean(self, data: str) -> str:
        """The piece as it is to be read."""
        done = ""
        data, self._held = self._held + data, ""
        while data:
            if self.open:
                inside, mark, rest = data.partition(END)
                if not mark:
                    self._held = next((END[:n] for n in range(len(END) - 1, 0, -1) if data.endswith(END[:n])), "")
                    inside = data[:len(data) - len(self._held)]
                done += "".join(c if c.isprintable() else " " for c in inside) + mark
                self.open, data = not mark, rest
            else:
                at = (self._tail + data).find(START)
                end = len(data) if at < 0 else at + len(START) - len(self._tail)
                done += data[:end]
                self.open = at >= 0
                self._tail = "" if self.open else (self._tail + data)[1 - len(START):]
                data = data[end:]
        return done


class Reader(XTermParser):
    """Textual's reader behind a Cleaner."""

    def __init__(self, debug: bool = False) -> None:
        super().__init__(debug)
        self._cleaner = Cleaner()

    def feed(self, data: str) -> Iterable[Message]:
        """Read a piece; an empty one means the end, so one that is held back whole is not fed at all."""
        cleaned = self._cleaner.clean(data)
        return super().feed(cleaned) if cleaned or not data else ()


def guard() -> None:
    """Have the terminal read by a Reader."""
    try:
        from textual.drivers import linux_driver
    except ImportError:  # no such terminal on this system
        return
    linux_driver.XTermParser = Reader  # type: ignore[attr-defined]


__all__ = ["Cleaner", "Reader", "guard"]
