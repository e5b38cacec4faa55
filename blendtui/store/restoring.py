"""A backup put in the place of a plant: checked first, compared with what is there, and what was there is kept.

The pages of the backup are written into the plant's own file in one transaction of SQLite. A file that got another's
name instead would leave whoever opened the old one at that moment working in it, beside the log of the new one.
"""

from __future__ import annotations

import os
import sqlite3
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from . import audit, connect, journal
from .backup import keep, pages
from .database import Database, writer_of
from .errors import NoPlant, NotAPlant, PlantBusy, PlantError
from .harmless import harmless
from .opening import beside, kind_of, refuse_leftovers, unwritable
from .places import home, refuse_network
from .plant import login_name
from .schema import APPLICATION_ID

TOLD = "--replace-newer"
ENDINGS = ("-wal", "-shm", "-journal")
DAMAGED = (sqlite3.SQLITE_NOTADB, sqlite3.SQLITE_CORRUPT)


@dataclass(frozen=True)
class Link:
    """One entry of a chain."""

    hash: str
    at: str
    who: str


Chain = list[Link]


@dataclass(frozen=True)
class Restored:
    """A restore that was done."""

    plant: Path
    entries: int  # of the backup's journal; the restore itself is one more
    lost: int  # entries of the plant that the backup lacks
    kept: Path | None  # the plant as it was; None: there was none


def restore(file: Path | str, plant: Path | str, *, who: str | None = None, replace_newer: bool = False,
            timeout: float = 5.0) -> Restored:
    """Put a backup in the place of a plant, or where none is yet.

    PlantError, with nothing changed, when the backup is no sound plant file, the plant is open elsewhere, the two are
    different plants, or the plant holds entries that the backup lacks and `replace_newer` does not let them go.
    """
    source, place = home(file), home(plant)
    kind, whose = kind_of(place), harmless(who or login_name(), 60)
    if kind_of(source) != "file":
        raise NoPlant(f"there is no backup at {source}; check the path")
    if kind not in ("file", "nothing"):
        raise NotAPlant(f"{place} is not a plant file; name the plant file that is to be restored")
    place = place.resolve()  # of a link the file it leads to
    refuse_network(place.parent)
    if kind == "file" and os.path.samefile(source, place):
        raise PlantError(f"{source} is the plant itself; name a backup of it")
    with beside(place) as temporary:
        chain = _take(source, temporary, timeout)
        if kind == "file":
            return _replace(temporary, source, chain, place, whose, replace_newer, timeout)
        refuse_leftovers(place)
        _sign(temporary, source, chain, whose, "")
        keep(temporary, place)
        return Restored(place, len(chain), 0, None)


# The backup

def _take(source: Path, temporary: Path, timeout: float) -> Chain:
    """Copy a backup, which stays as it is, and check the copy; its chain."""
    connect.look(source, source)
    try:
        # Without a log nothing in it is half done, and so read it is not touched.
        how = "mode=ro" if connect.has_log(source) else "mode=ro&immutable=1"
        con = connect.connect(source, how, timeout)
        try:
            pages(con, temporary)
        finally:
            con.close()
    except sqlite3.Error as error:
        raise _unsound(source, error) from error
    copy = Database(temporary, shown=source)
    try:
        with copy.reading() as con:
            fault = audit.wrong(con)
            chain = [] if fault else _chain(con)
    finally:
        copy.close()
    if fault:
        raise NotAPlant(f"{source} is not sound, so nothing was restored: {fault}")
    return chain


def _unsound(source: Path, error: sqlite3.Error) -> PlantError:
    if error.sqlite_errorcode & 0xFF in (sqlite3.SQLITE_FULL, sqlite3.SQLITE_IOERR):
        return PlantError(f"{source} cannot be copied beside the plant: the disk refuses it; free some space and try "
                          "again")
    return NotAPlant(f"{source} is not a plant file, or is damaged; name another backup")


def _chain(con: sqlite3.Connection) -> Chain:
    return [Link(*row) for row in con.execute("SELECT hash, at, who FROM journal ORDER BY id")]


def _sign(temporary: Path, source: Path, chain: Chain, who: str, kept: str) -> None:
    """The restore is an entry of the restored plant: its past says that there was one, and what it set aside."""
    copy = Database(temporary)
    try:
        copy.con.execute("PRAGMA journal_mode = WAL")
        with copy.writing(who) as con:
            at = f" as of {chain[-1].at}" if chain else ""
            journal.append(con, who, harmless(f"restored from {source.name}, {len(chain)} entries{at}"), [], kept)
    finally:
        copy.close()


# The plant that is there

def _replace(temporary: Path, source: Path, chain: Chain, place: Path, who: str, told: bool,
             timeout: float) -> Restored:
    kept = _kept_name(place)
    lost: int | None = None
    try:
        if place.stat().st_size:
            with _held(place, timeout) as con:
                lost = _lost(source, chain, _chain_or_none(con), place, told)
                with beside(kept) as before:
                    pages(con, before)
                    keep(before, kept)
                _sign(temporary, source, chain, who, _set_aside(lost, kept))
                _overwrite(con, temporary)
    except sqlite3.DatabaseError as error:
        if lost is not None or getattr(error, "sqlite_errorcode", 0) & 0xFF not in DAMAGED:
            raise PlantError(f"{place} cannot be written: the disk refuses it; it is as it was: free some space, and "
                             "check the rights") from error
    if lost is None:
        lost = _lost(source, chain, None, place, told)
        _sign(temporary, source, chain, who, _set_aside(lost, kept))
        _change_places(temporary, place, kept)
    return Restored(place, len(chain), lost, kept)


def _set_aside(lost: int, kept: Path) -> str:
    entries = "entry" if lost == 1 else "entries"
    return harmless(f"what was there, {lost} later {entries} among it, is kept in {kept.name}" if lost else
                    f"what was there is kept in {kept.name}")


def _kept_name(place: Path) -> Path:
    at = datetime.now(UTC).strftime("%Y%m%d-%H%M%SZ")
    names = (f"{place.stem}.before-{at}{count}{place.suffix}" for count in ("", *(f"-{n}" for n in range(2, 100))))
    return next(place.with_name(name) for name in names if not os.path.lexists(place.with_name(name)))


@contextmanager
def _held(place: Path, timeout: float) -> Iterator[sqlite3.Connection]:
    """A connection that has the plant to itself; PlantBusy while anybody else has it open."""
    con = connect.connect(place, "mode=rw", timeout)
    try:
        if con.execute("PRAGMA application_id").fetchone()[0] != APPLICATION_ID:
            raise NotAPlant(f"{place} is a database of another program, not a plant file; name the plant file that is "
                            "to be restored")
        try:
            _alone(con, place)
            yield con
            # Whoever comes in between finds the restored plant, and its journal may stay.
            with suppress(sqlite3.OperationalError):
                _let_go(con)
        finally:
            con.execute("PRAGMA locking_mode = NORMAL")
            con.execute("PRAGMA journal_mode = WAL")
    finally:
        con.close()


def _alone(con: sqlite3.Connection, place: Path) -> None:
    try:
        # The log can only be given up, and the lock kept, by whoever is alone.
        con.execute("PRAGMA journal_mode = DELETE").fetchone()
        con.execute("PRAGMA locking_mode = EXCLUSIVE").fetchone()
        con.execute("BEGIN EXCLUSIVE")
        con.execute("COMMIT")
    except sqlite3.OperationalError as error:
        if error.sqlite_errorcode & 0xFF not in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
            raise
        name = writer_of(place)
        raise PlantBusy(f"{place} is open elsewhere{f': {name} is writing it' if name else ''}; nothing was restored: "
                        "ask everybody to leave it, and restore again", who=name) from error


def _let_go(con: sqlite3.Connection) -> None:
    """Give up the exclusive lock, and the spent journal that it leaves beside the file."""
    con.execute("PRAGMA locking_mode = NORMAL")
    con.execute("SELECT COUNT(*) FROM sqlite_master").fetchone()  # only now is the lock gone
    for mode in ("PERSIST", "DELETE"):  # on this way SQLite takes the journal away
        con.execute(f"PRAGMA journal_mode = {mode}").fetchone()


def _overwrite(con: sqlite3.Connection, temporary: Path) -> None:
    copy = connect.connect(temporary, "mode=rw", 5.0)
    try:
        copy.backup(con)
    finally:
        copy.close()


def _change_places(temporary: Path, place: Path, kept: Path) -> None:
    """Set a file aside that SQLite cannot read at all, with what lies beside it, and put the other in its place."""
    try:
        os.rename(place, kept)
        for ending in ENDINGS:
            beside_it = place.with_name(place.name + ending)
            if beside_it.exists():
                os.rename(beside_it, kept.with_name(kept.name + ending))
    except OSError as error:
        raise unwritable(place, error) from None
    keep(temporary, place)


# What would be lost

def _chain_or_none(con: sqlite3.Connection) -> Chain | None:
    try:
        return _chain(con)
    except sqlite3.DatabaseError:
        return None


def _lost(source: Path, backup: Chain, present: Chain | None, place: Path, told: bool) -> int:
    """How many entries of the plant the backup lacks; PlantError where they may not go."""
    if present is None:
        if not told:
            raise NotAPlant(f"{place} cannot be read, so what it holds beyond the backup is not known; {TOLD} sets it "
                            "aside all the same")
        return 0
    common = sum(1 for _ in _common(backup, present))
    later = present[common:]
    if present and backup and not common:
        raise PlantError(f"{source} is the backup of another plant: no entry of the two is the same; restore it to a "
                         "path of its own")
    if later and not told:
        counts = Counter(x.who for x in later).most_common(6)
        people = ", ".join(f"{harmless(who, 40)} {count}" for who, count in counts)
        plural = "entries that the backup lacks" if len(later) > 1 else "entry that the backup lacks"
        parted = "" if common == len(backup) else (
            f"; the two have different pasts from entry {common + 1} on, and the backup has {len(backup) - common} of "
            "its own")
        raise PlantError(f"{place} holds {len(later)} {plural}, {later[0].at} to {later[-1].at} ({people}){parted}; "
                         f"{TOLD} restores all the same and keeps the present file beside it")
    return len(later)


def _common(one: Chain, other: Chain) -> Iterator[Link]:
    for first, second in zip(one, other, strict=False):
        if first.hash != second.hash:
            return
        yield first
