"""The error that a task raises when it refuses what was asked."""

from __future__ import annotations


class DeskError(Exception):
    """What was asked cannot be done; one line says what, where and what to do."""
