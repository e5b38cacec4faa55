"""Canvas: a widget that sends only the columns that changed.

Each drawing is compared with the one on the screen, and what differs is refreshed: moving a cursor costs two
cells, an edit costs its numbers. Plain text goes out without any styling, which keeps a first paint near
the bytes of the text itself.
"""

from __future__ import annotations

from rich.segment import Segment
from textual.geometry import Region
from textual.strip import Strip
from textual.widget import Widget

from .paint import Cell, Line, cells

NEAR = 10  # columns: two changes closer than this go out as one, for moving the cursor costs as much


class Canvas(Widget):
    """A widget drawn line by line by `draw`; call `paint` after anything it shows has changed."""

    def __init__(self, *, id: str | None = None) -> None:
        super().__init__(id=id)
        self._drawn: list[list[Cell]] | None = None
        self._strips: list[Strip] = []

    def draw(self, width: int, height: int) -> list[Line]:
        """The lines to show, at most `height`; what is missing is blank. Each widget draws its own."""
        return []

    def paint(self) -> None:
        """Draw again and send what differs from what is on the screen."""
        if not self.is_attached or not self.size or not self.screen.is_current:
            self._drawn = None
            return
        old, new = self._drawn, self._lay()
        if old is None or len(old) != len(new) or len(old[0]) != len(new[0]):
            self._keep(new)
            self.refresh()
            return
        regions = []
        for y, (before, after) in enumerate(zip(old, new, strict=True)):
            if before != after:
                spans = changed(before, after)
                self._strips[y] = strip_of(after, [x for span in spans for x in span])
                regions += [Region(x0, y, x1 - x0, 1) for x0, x1 in spans]
        self._drawn = new
        if regions:
            self.refresh(*regions)

    def text(self) -> str:
        """What is drawn, as text."""
        return "\n".join("".join(c for c, _ in line).rstrip() for line in self._lay()) if self.size else ""

    def render_lines(self, crop: Region) -> list[Strip]:
        """Lines for the compositor; takes the place of Textual's own styling of the widget."""
        width, height = self.size
        if self._drawn is None or len(self._drawn) != height or (height and len(self._drawn[0]) != width):
            self._keep(self._lay())
        lines = [self._strips[y] if 0 <= y < len(self._strips) else Strip.blank(width) for y in crop.line_range]
        if crop.column_span != (0, width):
            lines = [line.crop(*crop.column_span) for line in lines]
        return lines

    def _lay(self) -> list[list[Cell]]:
        width, height = self.size
        lines = self.draw(width, height)[:height]
        return [cells(line, width) for line in lines + [[]] * (height - len(lines))]

    def _keep(self, drawn: list[list[Cell]]) -> None:
        self._drawn = drawn
        self._strips = [strip_of(line) for line in drawn]


def changed(before: list[Cell], after: list[Cell]) -> list[tuple[int, int]]:
    """Spans of columns [first, last) in which two lines of one width differ, near ones joined."""
    spans: list[tuple[int, int]] = []
    for x, (old, new) in enumerate(zip(before, after, strict=True)):
        if old == new:
            continue
        if spans and x - spans[-1][1] < NEAR:
            spans[-1] = (spans[-1][0], x + 1)
        else:
            spans.append((x, x + 1))
    return [_whole(after, _whole(before, span)) for span in spans]


def _whole(line: list[Cell], span: tuple[int, int]) -> tuple[int, int]:
    """The span widened to whole characters where it would cut a wide one."""
    first, last = span
    while first > 0 and line[first][0] == "":
        first -= 1
    while last < len(line) and line[last][0] == "":
        last += 1
    return first, last


def strip_of(line: list[Cell], cuts: list[int] | None = None) -> Strip:
    """A line as a strip: a segment a style, and a new one at every cut.

    The compositor sends whole segments, so that a change costs its own columns only when it is one.
    """
    segments: list[Segment] = []
    edges = set(cuts or ())
    start = 0
    for x in range(1, len(line) + 1):
        if x == len(line) or line[x][1] != line[start][1] or x in edges:
            segments.append(Segment("".join(c for c, _ in line[start:x]), line[start][1]))
            start = x
    return Strip(segments, len(line))
