"""Plant: what every task reads and changes, one transaction and one journal entry a change."""

from __future__ import annotations

import getpass
import sqlite3
import threading
from collections.abc import Callable, Sequence
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING

from solver.measured import Measured
from solver.stocks import Stock

from . import audit, batch_reads, clock, closed, journal, promises, reads, state, taking_back
from .batch_records import Batch, Charge, Content, Dip, Lot, Made, Movement, Vessel
from .database import Database
from .errors import ChangedSince, NotAPlant, NothingToUndo, ReadOnlyPlant
from .harmless import harmless
from .records import Change, Entry, Lesson, Product, Row, Step, Trial
from .state import Key

if TYPE_CHECKING:
    from .backup import Backup


def login_name() -> str:
    """Who is at the keyboard, as the system knows them."""
    try:
        return getpass.getuser()
    except (OSError, KeyError, ImportError):
        return "unknown"


class Plant:
    """An open plant: a file, or a catalogue folder held in memory. Safe to use from several threads."""

    def __init__(self, database: Database, path: Path, *, folder: bool = False, who: str | None = None,
                 opened_note: str = "", notes: tuple[str, ...] = ()) -> None:
        self.path = path
        self.folder = folder
        self.who = harmless(who or login_name(), 60)
        self.opened_note = opened_note
        self.notes = notes  # what the catalogue folder had that was not read, or kept without use
        self._database = database
        self._lock = threading.RLock()

    def __enter__(self) -> Plant:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; everything saved is in it already."""
        with self._lock:
            self._database.close()

    @property
    def read_only(self) -> bool:
        """May nothing be changed here (a catalogue folder, or a file that may not be written)?"""
        return self.folder or self._database.read_only

    # Reading

    def revision(self) -> int:
        """Number of the last journal entry: it grows with every change, anyone's."""
        with self._lock, self._database.reading() as con:
            return journal.revision(con)

    def stocks(self, include_retired: bool = False) -> list[Stock]:
        """The stocks in the plant's order."""
        with self._lock, self._database.reading() as con:
            return reads.stocks(con, include_retired)

    def stock(self, code: str) -> Stock:
        """One live stock; NoSuchRow when there is none of that code."""
        with self._lock, self._database.reading() as con:
            return reads.stock(con, code)

    def products(self, include_retired: bool = False) -> list[Product]:
        """The products in the plant's order, with their limits and share rules."""
        with self._lock, self._database.reading() as con:
            return reads.products(con, include_retired)

    def product(self, code: str) -> Product:
        """One live product; NoSuchRow when there is none of that code."""
        with self._lock, self._database.reading() as con:
            return reads.product(con, code)

    def trials(self, product: str | None = None) -> list[Trial]:
        """Trials that were kept, of one product or of all, oldest first."""
        with self._lock, self._database.reading() as con:
            return reads.trials(con, product)

    def measured(self, product: str | None = None) -> list[Measured]:
        """Measured blends, of one product or of all, in the order in which they were recorded."""
        with self._lock, self._database.reading() as con:
            return reads.measured(con, product)

    def lessons(self, include_withdrawn: bool = False) -> list[Lesson]:
        """Lessons of the laboratory that are in use, or all that were ever taken."""
        with self._lock, self._database.reading() as con:
            return reads.lessons(con, include_withdrawn)

    def vessels(self) -> list[Vessel]:
        """The vessels in use, in the plant's order."""
        with self._lock, self._database.reading() as con:
            return batch_reads.vessels(con)

    def batches(self, state: str | None = None) -> list[Batch]:
        """The headings of batches, newest first; only those in one state if given."""
        with self._lock, self._database.reading() as con:
            return batch_reads.batches(con, state)

    def batch_names(self) -> set[str]:
        """Names that batches have or had, an undone order included."""
        with self._lock, self._database.reading() as con:
            return batch_reads.names_used(con)

    def batch(self, name: str) -> Made:
        """One batch with everything that was recorded of it; NoSuchRow when there is none of that name."""
        with self._lock, self._database.reading() as con:
            return batch_reads.batch(con, name)

    def lots(self, stock: str | None = None) -> list[Lot]:
        """Receipts of one stock, or of all, oldest first."""
        with self._lock, self._database.reading() as con:
            return batch_reads.lots(con, stock)

    def tank_lots(self, stock: str) -> dict[str, float]:
        """Lot → its part of what is in the tank now, largest first; empty: no receipt was ever recorded."""
        with self._lock, self._database.reading() as con:
            return batch_reads.tank_lots(con, stock)

    def dips(self, stock: str) -> list[Dip]:
        """Dips of one tank, oldest first."""
        with self._lock, self._database.reading() as con:
            return batch_reads.dips(con, stock)

    def movements(self, stock: str) -> list[Movement]:
        """Every movement of one stock, oldest first, with its journal entry."""
        with self._lock, self._database.reading() as con:
            return batch_reads.movements(con, stock)

    def charges_of(self, *, stock: str | None = None, lot: str | None = None) -> list[Charge]:
        """Charges of a stock, or that hold a lot (charged as such or mixed in the tank), of all batches."""
        with self._lock, self._database.reading() as con:
            return batch_reads.charges_of(con, stock, lot)

    def oil_of(self, batches: Sequence[str]) -> dict[str, Made]:
        """Batches by name with what went in and came out, without the laboratory's part; unknown names left out."""
        with self._lock, self._database.reading() as con:
            return batch_reads.oil_of(con, batches)

    def onward(self, batches: Sequence[str]) -> tuple[list[Lot], list[Content]]:
        """Where the oil of these batches went: receipts of rework, and what stood in a vessel before later batches."""
        with self._lock, self._database.reading() as con:
            return batch_reads.onward(con, batches)

    def lots_named(self, lot: str) -> list[Lot]:
        """Receipts under one lot, of any stock."""
        with self._lock, self._database.reading() as con:
            return batch_reads.lots_named(con, lot)

    def last_hash(self) -> str:
        """Hash of the last journal entry: on a card or a certificate it pins everything before it."""
        with self._lock, self._database.reading() as con:
            return journal.last_hash(con)

    def next_version(self) -> str:
        """The version that the next lesson gets; none is ever used twice, not even one that was undone."""
        with self._lock, self._database.reading() as con:
            return reads.next_version(con)

    def state(self) -> state.State:
        """Everything the plant holds, as plain rows."""
        with self._lock, self._database.reading() as con:
            return state.read(con)

    def table(self, name: str) -> dict[Key, Row]:
        """Every row of one table."""
        with self._lock, self._database.reading() as con:
            return state.read_table(con, name)

    def row(self, table: str, *key: str | int) -> Row | None:
        """One row of one table as it is now, or None."""
        with self._lock, self._database.reading() as con:
            return state.present(con, state.change_of(table, key, None, None))

    # Changing

    def change(self, entry: Sequence[Change], what: str, why: str = "") -> int:
        """Make changes in one transaction with one journal entry, and return its number.

        ChangedSince when a cell is not as its change says it was; nothing is saved then. Changes that change
        nothing are left out; if none is left, the number of the last entry is returned.
        """
        self._refuse_folder()
        return self._write([c for c in entry if not c.empty], what, why)

    def fill(self, changes: Sequence[Change], what: str, why: str = "") -> int:
        """The first entry of a new plant, which is never undone."""
        return self._write(changes, what, why)

    def change_whole(self, make: Callable[[state.State], Sequence[Change]], what: str) -> int:
        """Change the plant by what `make` says of its whole state, which stays still meanwhile; how many changes."""
        self._refuse_folder()
        with self._lock, self._database.writing(self.who) as con:
            changes = make(state.read(con))
            self._record(con, changes, what, "")
            return len(changes)

    def step(self, make: Callable[[], Step]) -> Step:
        """Do what `make` says, which reads the plant while nobody else can change it.

        So a change that rests on what it read (a quantity, an open charge, a promise) never meets another's. An
        error that `make` raises leaves everything as it was.
        """
        self._refuse_folder()
        with self._lock, self._database.writing(self.who) as con:
            made = make()
            self._record(con, [c for c in made.changes if not c.empty], made.what, made.why)
            return made

    def _write(self, changes: Sequence[Change], what: str, why: str) -> int:
        with self._lock, self._database.writing(self.who) as con:
            return self._record(con, changes, what, why)

    def _record(self, con: sqlite3.Connection, changes: Sequence[Change], what: str, why: str) -> int:
        last, what = journal.revision(con), harmless(what)
        if not changes and last:
            return last
        closed.refuse_closed(con, changes)
        number = journal.append(con, self.who, what, changes, harmless(why))
        state.apply(con, changes, number, what)
        promises.refuse_double(con, changes)
        return number

    def changed_since(self, change: Change, said: str) -> ChangedSince:
        """The error that tells a screen which shows an old value of a cell whose the new one is."""
        with self._lock, self._database.reading() as con:
            return state.since(con, change, journal.revision(con) + 1, said)

    def undo(self) -> str:
        """Take back one's own latest entry that still stands, and say what it was.

        ChangedSince when another has changed it since, BuiltOn when a later step rests on it, Closed when it belongs
        to a batch that is closed: that stands, and a correction is a new entry.
        """
        return self._take_back(0, "nothing of yours is left to undo", "undone")

    def redo(self) -> str:
        """Bring back what one's own last undo took away, and say what it was."""
        return self._take_back(1, "nothing was undone that could be brought back", "done again")

    def _take_back(self, which: int, nothing: str, verb: str) -> str:
        self._refuse_folder()
        with self._lock, self._database.writing(self.who) as con:
            number = journal.undoable(con, self.who)[which]
            if number is None:
                raise NothingToUndo(nothing)
            old = journal.read(con, number)
            changes = taking_back.reversal(con, old)
            closed.refuse_closed(con, changes)
            # The words of the entry first made, however often it was undone and done again.
            what = old.what.split(": ", 1)[1] if old.undoes is not None else old.what
            new = journal.append(con, self.who, f"{verb}: {what}", changes, "", number)
            state.apply(con, changes, new, f"{verb}: {what}")
            promises.refuse_double(con, changes)
            return f"{verb}: {what}"

    def _refuse_folder(self) -> None:
        if self.folder:
            raise ReadOnlyPlant(f"{self.path} is a catalogue folder, which is read but never changed; make a "
                                f"plant file of it to edit: blendtui import {self.path} --plant FILE")

    # The record

    def journal(self, limit: int = 50) -> list[Entry]:
        """The latest entries, newest first."""
        with self._lock, self._database.reading() as con:
            return journal.newest(con, limit)

    def verify(self) -> str | None:
        """Recheck the file, the journal's chain, and the plant against it: the first thing that is wrong, or None.

        Damage is what it looks for, so that is told and never raised.
        """
        with self._lock:
            try:
                with self._database.reading() as con:
                    return audit.wrong(con)
            except NotAPlant as error:
                return str(error)

    def backup(self, file: Path | str, *, replace: bool = False) -> Backup:
        """Write the plant as it is at this moment into one file, checked, while others work in it.

        PlantError when the file is there and `replace` does not say that it may go, or the plant is not sound.
        """
        from .backup import write

        if self.folder:
            raise ReadOnlyPlant(f"{self.path} is a catalogue folder, which has no record to keep; copy the folder, or "
                                f"make a plant file of it: blendtui import {self.path} --plant FILE")
        with self._lock:
            return write(self._database, file, replace=replace)

    def found(self, hash: str) -> list[Entry]:
        """Entries whose hash begins so."""
        with self._lock, self._database.reading() as con:
            return journal.hashed(con, hash)

    def remarks(self) -> tuple[str, ...]:
        """What is odd in the record and no damage: where the clock went back."""
        with self._lock, self._database.reading() as con:
            return clock.remarks(con)

    def clock_back(self) -> float | None:
        """Seconds by which the clock now stands before the last entry, or None when it does not.

        An entry is written all the same, with the time that the clock shows; a step may question it first.
        """
        with self._lock, self._database.reading() as con:
            return clock.back(con)
