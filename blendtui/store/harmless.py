"""Text that cannot drive a terminal: control characters and escape codes replaced by what can be seen."""

from __future__ import annotations

import unicodedata

_SPOKEN = {"\0": "null", "\a": "bell", "\b": "backspace", "\t": "tab", "\n": "line break",
           "\r": "carriage return", "\x1b": "escape", "\x7f": "delete", "\x9b": "control sequence introducer"}
# Cc controls, Cf invisible formatting and text direction, Cs halves of a pair, Zl and Zp line breaks.
_UNSAFE = {"Cc", "Cf", "Cs", "Zl", "Zp"}


def unsafe(text: str) -> str:
    """The first character of the text that may drive a terminal, or ""."""
    if text.isascii() and text.isprintable():
        return ""
    return next((c for c in text if unicodedata.category(c) in _UNSAFE), "")


def harmless(text: str, longest: int = 0) -> str:
    """The text with unsafe characters replaced by visible stand-ins, cut to `longest` characters if given.

    >>> harmless("a\\x1b[2Jb")
    'a␛[2Jb'
    """
    if unsafe(text):
        text = "".join(_stand_in(c) for c in text)
    if longest and len(text) > longest:
        return text[:longest - 1] + "…"
    return text


def spoken(char: str) -> str:
    """Name of a character, for a message.

    >>> spoken("\\x1b"), spoken("\\u202e")
    ('escape (U+001B)', 'right-to-left override (U+202E)')
    """
    name = _SPOKEN.get(char) or unicodedata.name(char, "control character").lower()
    return f"{name} (U+{ord(char):04X})"


def _stand_in(char: str) -> str:
    if unicodedata.category(char) not in _UNSAFE:
        return char
    if ord(char) < 0x20:
        return chr(0x2400 + ord(char))
    return "␡" if char == "\x7f" else f"\\u{ord(char):04x}"
