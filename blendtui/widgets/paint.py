"""Runs of styled text, the few styles there are, and what becomes of both on a plain terminal.

Every state is told by a word or a sign; a colour only repeats it. Styles use the terminal's own colours, so
that one costs a few bytes and a person's palette holds.
"""

from __future__ import annotations

import os
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rich.cells import cell_len
from rich.style import Style

Run = tuple[str, Style | None]
Line = list[Run]
Cell = tuple[str, Style | None]  # one column of the screen; the second half of a wide character is ""

PLAIN: Style | None = None
BOLD = Style(bold=True)
DIM = Style(dim=True)
CURSOR = Style(reverse=True)
WEAK_CURSOR = Style(underline=True)
BAD = Style(bold=True, color="red")
WARN = Style(bold=True, color="yellow")
_COLOURLESS = {BAD: BOLD, WARN: BOLD}

# One character for one, so that columns stay where they are.
_ASCII = str.maketrans({
    "–": "-", "—": "-", "−": "-", "·": ".", "•": "*", "…": "~", "²": "2", "³": "3", "°": " ", "│": "|",
    "─": "-", "█": "#", "░": ".", "▌": "#", "◆": "O", "→": ">", "←": "<", "▸": ">", "◂": "<", "↑": "^", "↓": "v",
    "≤": "<", "≥": ">", "×": "x", "±": "~", "ρ": "r", "’": "'", "Σ": "S", "ω": "w", "σ": "s",
})


@dataclass
class Look:
    """How this terminal is drawn on; one a process, for a process has one terminal."""

    ascii: bool = False
    colour: bool = True


LOOK = Look()


def look_of(environment: Mapping[str, str]) -> Look:
    """The look that an environment asks for: TERM, the locale and NO_COLOR."""
    term = environment.get("TERM", "")
    locale = environment.get("LC_ALL") or environment.get("LC_CTYPE") or environment.get("LANG") or ""
    utf8 = "utf-8" in locale.lower() or "utf8" in locale.lower()
    old = term.startswith("vt") or term in ("ansi", "dumb")
    return Look(ascii=old or not utf8, colour=not (environment.get("NO_COLOR") or old))


def adopt(environment: Mapping[str, str] | None = None) -> None:
    """Draw as the environment (by default this process's) asks."""
    found = look_of(os.environ if environment is None else environment)
    LOOK.ascii, LOOK.colour = found.ascii, found.colour


def shown(text: str) -> str:
    """Text as this terminal can draw it."""
    return text if not LOOK.ascii or text.isascii() else plain(text)


def plain(text: str) -> str:
    """Text in the characters that every terminal and printer has, in the same columns."""
    return "".join(c if c.isascii() else "?" * cell_len(c) for c in text.translate(_ASCII))


def coloured(style: Style | None) -> Style | None:
    """A style as this terminal shows it."""
    return style if LOOK.colour or style is None else _COLOURLESS.get(style, style)


def fit(text: str, width: int, align: str = "left") -> str:
    """Text in exactly so many columns; what is too long ends in an ellipsis.

    >>> fit("heavy neutral", 8), fit("31.5", 6, "right")
    ('heavy n…', '  31.5')
    """
    if width <= 0:
        return ""
    if text.isascii():
        if len(text) > width:
            return text[:width - 1] + "…"
        return text.rjust(width) if align == "right" else text.ljust(width)
    return _fit_wide(text, width, align)


def _fit_wide(text: str, width: int, align: str) -> str:
    if cell_len(text) > width:
        while text and cell_len(text) > width - 1:
            text = text[:-1]
        text += "…"
    blank = " " * (width - cell_len(text))
    return blank + text if align == "right" else text + blank


def cut_line(line: Line, width: int) -> Line:
    """A line of at most so many columns; where it is cut it ends in an ellipsis.

    >>> cut_line([("least cost, ", None), ("926.77 /t", None)], 16)
    [('least cost, ', None), ('926…', None)]
    """
    kept: Line = []
    room = width
    for text, style in line:
        if cell_len(text) > room:
            return [*kept, (fit(text, room), style)]
        kept.append((text, style))
        room -= cell_len(text)
    return kept


def with_tail(line: Line, tail: str, width: int) -> Line:
    """A line with a text at its right end, which is never the one that is cut.

    >>> with_tail([("B-0001: planned", None)], "as anna", 18)
    [('B-0001: …', None), ('  ', None), ('as anna', Style(bold=True))]
    """
    room = width - cell_len(tail) - 2
    kept = cut_line(line, room)
    gap = 2 + room - sum(cell_len(text) for text, _ in kept)
    return [*kept, (" " * gap, PLAIN), (tail, BOLD)]


def cells(line: Iterable[Run], width: int) -> list[Cell]:
    """A line as exactly `width` screen columns."""
    found: list[Cell] = []
    for text, style in line:
        text, style = shown(text), coloured(style)
        if text.isascii():
            found.extend((c, style) for c in text)
        else:
            for c in text:
                wide = cell_len(c)
                if wide:
                    found.append((c, style))
                    found.extend([("", style)] * (wide - 1))
                elif found:
                    found[-1] = (found[-1][0] + c, found[-1][1])
        if len(found) >= width:
            break
    if len(found) > width and found[width][0] == "":
        found[width - 1] = (" ", found[width - 1][1])  # half of a wide character would shift the row
    del found[width:]
    found.extend([(" ", None)] * (width - len(found)))
    return found


def wrap(text: str, width: int, indent: str = "") -> list[str]:
    """Words of a text on lines of at most `width` columns, later lines indented."""
    import textwrap

    return textwrap.wrap(text, max(width, 10), subsequent_indent=indent, break_on_hyphens=False) or [""]
