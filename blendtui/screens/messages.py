"""What comes back from the threads: dataclass messages, each with the number of what it answers."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from textual.message import Message

from blendtui.desk.answers import Answer


@dataclass
class Finished(Message):
    """A task on the plant ended: its result, or in one line why not."""

    done: Callable[[Any], None]
    failed: Callable[[str], None] | None
    result: Any = None
    refusal: str = ""


@dataclass
class Answered(Message):
    """A recipe, or a further part of it, is there."""

    request: int
    answer: Answer


@dataclass
class Reported(Message):
    """A report of one screen, or a further part of it, is there; or in one line why there is none."""

    screen: str
    request: int
    report: Any = None
    refusal: str = ""
    last: bool = False


@dataclass
class Unanswered(Message):
    """There is no recipe, and why."""

    request: int
    error: str
