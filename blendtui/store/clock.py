"""The clock of the machine against the journal: entries keep the time that the clock showed, right or wrong."""

from __future__ import annotations

import sqlite3
from datetime import datetime

from .database import now
from .harmless import harmless


def _seconds(iso: str) -> float | None:
    """A time of the journal as seconds, or None where it is none."""
    try:
        return datetime.fromisoformat(iso.replace("Z", "+00:00")).timestamp()
    except (ValueError, AttributeError, OverflowError):
        return None


def back(con: sqlite3.Connection) -> float | None:
    """Seconds by which the clock now stands before the last entry; None when it does not."""
    found = con.execute("SELECT at FROM journal ORDER BY id DESC LIMIT 1").fetchone()
    return _before(now(), found[0]) if found else None


def _before(one: str, other: str) -> float | None:
    """Seconds by which one time lies before another; None when it does not, or either is no time."""
    first, second = _seconds(one), _seconds(other)
    return second - first if first is not None and second is not None and first < second else None


def remarks(con: sqlite3.Connection) -> tuple[str, ...]:
    """Where in the journal the clock went back, and whether it stands before the last entry now."""
    found: list[str] = []
    last: tuple[int, str] | None = None
    for number, at, who, what in con.execute("SELECT id, at, who, what FROM journal ORDER BY id"):
        seconds = _before(at, last[1]) if last else None
        if last and seconds is not None:
            said = f"journal entry {number} ({at}, {who}: {what})"
            found.append(harmless(f"{said} was written {words(seconds)} before entry {last[0]}, by the clock", 300))
        last = number, at
    seconds = _before(now(), last[1]) if last else None
    if last and seconds is not None:
        found.append(f"the clock now stands {words(seconds)} before the last entry")
    return tuple(found)


def words(seconds: float) -> str:
    """A span as a person says it.

    >>> words(0.25), words(95.0), words(7500.0), words(200000.0)
    ('0.25 s', '95 s', '2 h 5 min', '2 d 7 h')
    """
    if seconds < 120.0:
        return f"{seconds:.3g} s"
    minutes = round(seconds / 60.0)
    if minutes < 120:
        return f"{minutes} min"
    hours, minutes = divmod(minutes, 60)
    return f"{hours} h {minutes} min" if hours < 48 else f"{hours // 24} d {hours % 24} h"
