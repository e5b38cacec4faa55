"""PageText: lines of text that can be longer than the place they have."""

from __future__ import annotations

from collections.abc import Sequence

from .canvas import Canvas
from .paint import DIM, Line, fit


class PageText(Canvas):
    """Text that moves; its first and last line say when there is more."""

    def __init__(self, *, id: str) -> None:
        super().__init__(id=id)
        self.lines: list[Line] = []
        self.top = 0
        self.active = False

    def show(self, lines: Sequence[Line], *, keep: bool = True) -> None:
        """Show these lines, from where it was or from the first."""
        self.lines = list(lines)
        self.top = min(self.top, self._last_top()) if keep else 0
        self.paint()

    def _last_top(self) -> int:
        return max(0, len(self.lines) - max(1, self.size.height))

    def move(self, key: str) -> bool:
        """Move by a key; False where it cannot go further."""
        page = max(1, self.size.height - 2)  # less the two lines that say how much is out of sight
        step = {"up": -1, "down": 1, "pageup": -page, "pagedown": page, "home": -len(self.lines),
                "end": len(self.lines), "ctrl+home": -len(self.lines), "ctrl+end": len(self.lines)}.get(key, 0)
        top = min(max(0, self.top + step), self._last_top())
        if top == self.top:
            return False
        self.top = top
        self.paint()
        return True

    def activate(self, active: bool) -> None:
        """Take or give up the keys."""
        self.active = active
        self.paint()

    def draw(self, width: int, height: int) -> list[Line]:
        """The lines in sight."""
        seen = self.lines[self.top:self.top + height]
        below = len(self.lines) - self.top - height
        if below > 0 and seen:
            said = f"↓ {below + 1} more lines: {'PgDn' if self.active else 'Tab, then the arrows'}"
            seen[-1] = [(fit(said, width), DIM)]
        if self.top > 0 and len(seen) > 2:
            seen[0] = [(fit(f"↑ {self.top + 1} more lines", width), DIM)]
        return seen
