"""What can go wrong with a plant, each in one line that says what, where and what to do.

PlantError (an Exception)
├── NoPlant          there is nothing at that path, or nothing that may be looked at
├── NotAPlant        what is there is no plant file, or is damaged
├── NewerPlant       a newer version of the program wrote the file
├── NetworkPlace     the file lies on a network mount
├── ReadOnlyPlant    the file, its folder or a catalogue folder may not be written, and what is asked needs it
├── PlantFull        the disk is full
├── PlantBusy        another program has been writing for too long; carries .who
├── ChangedSince     a cell changed after it was read; carries .who, .what and .at
├── Closed           what is to change belongs to a batch that is closed, and stands
├── BuiltOn          what is to be taken back has been built on since
├── NothingToUndo    there is nothing of one's own to undo or redo
├── NoSuchRow        no stock, product or trial of that name
└── CatalogueError   a catalogue folder has faults; carries .faults, all of them
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


class PlantError(Exception):
    """Base of every error that the store raises."""


class NoPlant(PlantError):
    """There is nothing at that path, or nothing that may be looked at."""


class NotAPlant(PlantError):
    """What is there is no plant file, or is damaged."""


class NewerPlant(PlantError):
    """A newer version of the program wrote the file."""


class NetworkPlace(PlantError):
    """The file lies on a network mount, where locks cannot be trusted."""


class ReadOnlyPlant(PlantError):
    """The file, its folder or a catalogue folder may not be written."""


class PlantFull(PlantError):
    """The disk is full."""


class PlantBusy(PlantError):
    """Another program has been writing for too long."""

    def __init__(self, message: str, *, who: str = "") -> None:
        super().__init__(message)
        self.who = who


class ChangedSince(PlantError):
    """A cell changed after it was read."""

    def __init__(self, message: str, *, who: str = "", what: str = "", at: str = "") -> None:
        super().__init__(message)
        self.who = who
        self.what = what
        self.at = at


class Closed(PlantError):
    """What is to change belongs to a batch that is closed, and stands."""


class BuiltOn(PlantError):
    """What is to be taken back has been built on since: a sample, a batch that holds the lot."""


class NothingToUndo(PlantError):
    """There is nothing of one's own to undo or redo."""


class NoSuchRow(PlantError):
    """No stock, product or trial of that name."""


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong in a catalogue folder."""

    file: str  # "stocks.csv"
    row: int  # line of the file as an editor counts, header = 1; 0: the file as a whole
    column: str  # "" : the row or the file as a whole
    what: str  # what is wrong
    fix: str = ""  # what would do

    def __str__(self) -> str:
        where = self.file
        if self.row:
            where += f" row {self.row}"
        if self.column:
            where += f", {self.column}"
        return f"{where}: {self.what}" + (f"; {self.fix}" if self.fix else "")


class CatalogueError(PlantError):
    """A catalogue folder has faults; nothing of it was taken."""

    def __init__(self, faults: Sequence[Fault]) -> None:
        self.faults = tuple(faults)
        more = len(self.faults) - 1
        super().__init__(str(self.faults[0]) + (f" (and {more} more)" if more else ""))
