"""Head: a few lines that say what kind of answer the recipe is."""

from __future__ import annotations

from .canvas import Canvas
from .paint import Line


class Head(Canvas):
    """Lines set whole by the recipe screen."""

    def __init__(self) -> None:
        super().__init__(id="head")
        self.lines: list[Line] = []

    def show(self, lines: list[Line]) -> None:
        """Show these lines."""
        self.lines = lines
        self.paint()

    def draw(self, width: int, height: int) -> list[Line]:
        """The lines."""
        return self.lines
