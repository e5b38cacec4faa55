"""The lines that frame every screen: where one is, what happened, and which keys do what."""

from __future__ import annotations

from collections.abc import Sequence

from rich.cells import cell_len

from .canvas import Canvas
from .paint import BAD, BOLD, CURSOR, PLAIN, WARN, Line, Run, fit, wrap

SIGNS = {"note": ("", PLAIN), "done": ("done: ", PLAIN), "question": ("? ", WARN), "refused": ("! ", BAD),
         "wait": ("… ", PLAIN)}
REMARK = 13  # columns of the title line that are the remark's, whatever the screens are called


class TitleLine(Canvas):
    """The screens by their numbers, the one that is open marked, and a remark at the right.

    Where not all names find room, those whose numbers lie farthest from the open one's go first; the numbers stay,
    and so does the name of the first screen, the way home.
    """

    def __init__(self, names: Sequence[tuple[str, str]], current: str) -> None:
        super().__init__(id="title")
        self.names = tuple(names)
        self.current = current
        self.remark = ""
        self.more: tuple[str, ...] = ()

    def show(self, remark: str, *more: str) -> None:
        """Show a remark, and of what more there is to say as much as finds room whole."""
        self.remark, self.more = remark, more
        self.paint()

    def draw(self, width: int, height: int) -> list[Line]:
        """One line."""
        line: Line = []
        for key, name in self._fitted(width):
            # Brackets as well as reverse video: some terminals have only one of them.
            after = line and line[-1][1] is CURSOR
            gap = "" if after else " "
            line += [(f"[{key} {name}]", CURSOR) if name == self.current else (f"{gap}{key} {name}".rstrip(), PLAIN)]
        used = sum(len(text) for text, _ in line)
        room, remark = max(0, width - used - 1), self.remark
        for part in self.more:
            # Half a number reads as another one, so a part that is cut is left out.
            if cell_len(remark + part) > room:
                break
            remark += part
        return [[*line, (" " + fit(remark, room, "right"), PLAIN)]]

    def _fitted(self, width: int) -> list[tuple[str, str]]:
        """Numbers and names, as many names as leave the remark its room."""
        count = len(self.names)
        here = next(n for n, (_, name) in enumerate(self.names) if name == self.current)
        # The keys stand in a row whose ends are equally near to the hand, so the way round counts too.
        far = sorted((n for n in range(1, count) if n != here),
                     key=lambda n: (-min((n - here) % count, (here - n) % count), n))
        shown = list(self.names)
        while far and sum(len(key) + len(name) + 2 - (not name) for key, name in shown) + 1 > width - REMARK:
            shown[far[0]] = (shown[far[0]][0], "")
            del far[0]
        return shown


class StatusLine(Canvas):
    """What happened last, in words; a question is asked here."""

    def __init__(self) -> None:
        super().__init__(id="status")
        self.kind = "note"
        self.message = ""
        self.more = "! shows all"  # what to do about a message that is cut

    def show(self, message: str, kind: str = "note", more: str = "! shows all") -> None:
        """Show a message of a kind (a key of SIGNS); `more` says how to read what finds no room."""
        self.message, self.kind, self.more = message, kind, more
        self.paint()

    def needs(self, width: int) -> int:
        """Lines that show all of it."""
        return len(wrap(SIGNS[self.kind][0] + self.message, width))

    def draw(self, width: int, height: int) -> list[Line]:
        """As many lines as there are; what does not fit is said to be in the list of messages."""
        sign, style = SIGNS[self.kind]
        lines = wrap(sign + self.message, width)
        if len(lines) > height:
            more = f" … ({self.more})"
            lines = [*lines[:height - 1], fit(lines[height - 1], width - len(more)).rstrip("… ") + more]
        return [[(text, style)] for text in lines]


class OneLine(Canvas):
    """A line of runs that its screen sets whole; where the last finds no room, it is seen to be cut."""

    def __init__(self, *, id: str) -> None:
        super().__init__(id=id)
        self.runs: Line = []

    def show(self, *runs: Run) -> None:
        """Show these runs."""
        self.runs = list(runs)
        self.paint()

    def draw(self, width: int, height: int) -> list[Line]:
        """One line."""
        if not self.runs:
            return []
        *others, (text, style) = self.runs
        room = width - sum(cell_len(run) for run, _ in others)
        return [[*others, (fit(text, room) if cell_len(text) > room else text, style)]]


class KeyBar(Canvas):
    """Keys and what they do, as many as fit."""

    def __init__(self) -> None:
        super().__init__(id="keys")
        self.keys: tuple[tuple[str, str], ...] = ()

    def show(self, keys: Sequence[tuple[str, str]]) -> None:
        """Show these pairs of key and label; the last one always finds room."""
        self.keys = tuple(keys)
        self.paint()

    def draw(self, width: int, height: int) -> list[Line]:
        """The keys in reading order, whole ones only."""
        if not self.keys:
            return []
        *others, last = self.keys
        lines: list[Line] = [[]]
        room = width
        for n, (key, label) in enumerate([*others, last]):
            size = len(key) + len(label) + 3
            spare = len(last[0]) + len(last[1]) + 1 if len(lines) == height and n < len(others) else 0
            if (size + spare if spare else size - 2) > room:
                if len(lines) == height:
                    if n < len(others):
                        continue
                    break
                lines.append([])
                room = width
            lines[-1] += [(key, BOLD), (f" {label}  ", PLAIN)]
            room -= size
        return lines
