"""Grid: a table with a cell cursor that asks for its cells only as they come into sight."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from .canvas import Canvas
from .paint import BOLD, CURSOR, DIM, PLAIN, WEAK_CURSOR, Line, Run, fit


@dataclass(frozen=True)
class Column:
    """One column: its heading over its unit."""

    code: str
    heading: str
    unit: str = ""
    width: int = 8
    align: str = "right"


class Wide(str):
    """A cell that takes the rest of its row."""


Cell = str | Run
CellOf = Callable[[int, int], Cell]


def more_only(column: int) -> str:
    """A foot without texts: its line says only how many rows are out of sight."""
    return ""


class Grid(Canvas):
    """A table. The first `fixed` columns stay when it moves sideways; a column is shown whole or not at all."""

    def __init__(self, *, id: str, fixed: int = 1) -> None:
        super().__init__(id=id)
        self.columns: tuple[Column, ...] = ()
        self.count = 0
        self.cell: CellOf = lambda row, column: ""
        self.fixed = fixed
        self.row = self.column = 0
        self.top = self.left = 0
        self.active = True  # has the keys: a grid beside another shows its cursor more faintly
        self.empty = ""  # what to say where there is no row
        self.foot: Callable[[int], str] | None = None  # text of a column in a last line that always stands
        self.picked: Callable[[], None] | None = None

    def show(self, columns: Sequence[Column], count: int, cell: CellOf, *, row: int | None = None,
             column: int | None = None) -> None:
        """Show these cells, the cursor where it was or where told."""
        self.columns, self.count, self.cell = tuple(columns), count, cell
        self.row = min(max(0, self.row if row is None else row), max(0, count - 1))
        self.column = min(max(0, self.column if column is None else column), max(0, len(self.columns) - 1))
        self._reveal()
        self.paint()

    @property
    def units(self) -> bool:
        """Has any column a unit, so that there is a second line of heading?"""
        return any(c.unit for c in self.columns)

    @property
    def head(self) -> int:
        """Lines of heading."""
        return 2 if self.units else 1

    def needs(self) -> int:
        """Lines that show all of it."""
        return self.head + max(1, self.count) + self._below

    @property
    def _below(self) -> int:
        return 1 if self.foot else 0

    @property
    def room(self) -> int:
        """Rows that can be in sight."""
        return max(1, self.size.height - self.head - self._below)

    def move(self, key: str) -> bool:
        """Move the cursor by a key; False where it cannot go further."""
        before = self.row, self.column
        page = max(1, self.room - 1)
        down = {"up": -1, "down": 1, "pageup": -page, "pagedown": page, "ctrl+home": -self.count,
                "ctrl+end": self.count}.get(key, 0)
        across = {"left": -1, "right": 1, "home": -len(self.columns), "end": len(self.columns)}.get(key, 0)
        self.row = min(max(0, self.row + down), max(0, self.count - 1))
        self.column = min(max(0, self.column + across), max(0, len(self.columns) - 1))
        if before == (self.row, self.column):
            return False
        self._reveal()
        self.paint()
        return True

    def activate(self, active: bool) -> None:
        """Take or give up the keys."""
        self.active = active
        self.paint()

    def on_resize(self) -> None:
        """Keep the cursor in sight."""
        self._reveal()
        self.paint()

    def on_click(self, event: object) -> None:
        """Put the cursor where the mouse points."""
        row = self.top + event.y - self.head  # type: ignore[attr-defined]
        x = 0
        for n in self._visible(self.size.width):
            x += self._width(n, self.size.width) + 1
            if event.x < x:  # type: ignore[attr-defined]
                break
        if 0 <= row < self.count and 0 <= event.y - self.head < self.room:  # type: ignore[attr-defined]
            self.row, self.column = row, n
            self.paint()
            if self.picked:
                self.picked()

    def on_mouse_scroll_down(self) -> None:
        """The wheel moves the cursor, so that it is never out of sight."""
        if self.move("down") and self.picked:
            self.picked()

    def on_mouse_scroll_up(self) -> None:
        """The wheel moves the cursor."""
        if self.move("up") and self.picked:
            self.picked()

    def _reveal(self) -> None:
        """Move the view by half pages, never by a line: a move of the view sends the whole table."""
        if not self.size or not self.columns:
            return
        rows = self.room
        if not self.top <= self.row < self.top + rows:
            step = max(1, rows // 2)
            self.top = self.row - step if self.row >= self.top + rows else self.row - rows + step + 1
        self.top = max(0, min(self.top, self.count - rows))
        if self.column < self.fixed:
            self.left = self.fixed
        self.left = max(self.fixed, min(self.left, len(self.columns) - 1))
        if self.fixed <= self.column < self.left:
            self.left = self._left_for(self.column)
        while self.column not in self._visible(self.size.width) and self.left < self.column:
            self.left += 1

    def _left_for(self, column: int) -> int:
        """A first column so that `column` is seen with some of those before it."""
        return max(self.fixed, column - 2)

    def _width(self, n: int, room: int) -> int:
        return min(self.columns[n].width, max(1, room - 1))

    def _visible(self, width: int) -> list[int]:
        """Columns in sight: the fixed ones, then from `left` as many as fit."""
        seen, room = [], width + 1
        for n in [*range(min(self.fixed, len(self.columns))), *range(max(self.left, self.fixed), len(self.columns))]:
            if self.columns[n].width + 1 > room:
                break
            seen.append(n)
            room -= self.columns[n].width + 1
        return seen

    def draw(self, width: int, height: int) -> list[Line]:
        """Headings, then the rows in sight."""
        visible = self._visible(width)
        lines: list[Line] = [self._heading(visible, width)]
        if self.units:
            lines.append([(fit(self.columns[n].unit, self.columns[n].width, self.columns[n].align) + " ", DIM)
                          for n in visible])
        if self.count == 0:
            return [*lines, [(self.empty, PLAIN)]]
        last = min(self.count, self.top + max(1, height - len(lines) - self._below))
        lines += [self._row(row, visible) for row in range(self.top, last)]
        if self.foot:
            lines.append(self._foot(visible, self.top, self.count - last))
        return lines

    def _foot(self, visible: list[int], above: int, below: int) -> Line:
        """The last line, with how many rows are out of sight in the room behind its texts."""
        assert self.foot is not None
        texts = [(fit(text, self.columns[n].width, self.columns[n].align) + " ", text)
                 for n in visible if (text := self.foot(n)) is not None]
        while texts and not texts[-1][1]:
            texts.pop()
        marks = [f"{sign} {count} more" for sign, count in (("↑", above), ("↓", below)) if count > 0]
        return [("".join(text for text, _ in texts), BOLD), ("  ".join(marks), DIM)]

    def _heading(self, visible: list[int], width: int) -> Line:
        line: Line = []
        for n in visible:
            column = self.columns[n]
            line.append((fit(column.heading, column.width, column.align) + " ", BOLD))
        if self.left > self.fixed and self.fixed < len(visible):
            n = visible[self.fixed]
            line[self.fixed] = ("◂" + fit(self.columns[n].heading, self.columns[n].width - 1,
                                          self.columns[n].align) + " ", BOLD)
        if visible and visible[-1] < len(self.columns) - 1:
            used = sum(self.columns[n].width + 1 for n in visible)
            line.append((" " * (width - used - 1) + "▸", BOLD) if used < width else ("", None))
            if used >= width:
                line[len(visible) - 1] = (line[len(visible) - 1][0][:-1] + "▸", BOLD)
        return line

    def _row(self, row: int, visible: list[int]) -> Line:
        line: Line = []
        for n in visible:
            column, cell = self.columns[n], self.cell(row, n)
            text, style = cell if isinstance(cell, tuple) else (cell, PLAIN)
            if row == self.row and n == self.column:
                style = CURSOR if self.active else WEAK_CURSOR
            if isinstance(text, Wide):
                rest = sum(self.columns[m].width + 1 for m in visible if m >= n) - 1
                return [*line, (fit(text, rest), style)]
            line += [(fit(text, column.width, column.align), style), (" ", PLAIN)]
        return line
