"""One consistent file of a plant while others work in it, checked before it gets its name."""

from __future__ import annotations

import os
import sqlite3
from dataclasses import dataclass
from pathlib import Path

from . import audit, connect, journal
from .database import Database
from .errors import PlantError, PlantFull
from .opening import beside, kind_of, put, refuse_leftovers, unwritable
from .places import home, refuse_network
from .schema import APPLICATION_ID

MAGIC = b"SQLite format 3\0"


@dataclass(frozen=True)
class Backup:
    """A backup that was made."""

    path: Path
    entries: int  # of its journal
    last_hash: str


def write(database: Database, file: Path | str, *, replace: bool = False) -> Backup:
    """Copy an open plant into a file, all of it or nothing.

    An existing file is replaced only when told, and only where it is a plant file that nobody has open. PlantError
    when the plant is damaged, the place is taken or refuses to be written, or lies on a network mount.
    """
    target = home(file)
    taken = kind_of(target) != "nothing"
    if taken:
        target = target.resolve()
        _refuse_taken(database, target, replace)
    refuse_network(target.parent)
    if not taken:
        refuse_leftovers(target)
    with beside(target) as temporary:
        copy_into(database, temporary, target)
        made = _checked(database, temporary, target)
        keep(temporary, target, replace=taken)
    return made


def _refuse_taken(database: Database, target: Path, replace: bool) -> None:
    if database.path is not None and target.exists() and os.path.samefile(target, database.path):
        raise PlantError(f"{target} is the plant itself; name another file for its backup")
    if not replace:
        raise PlantError(f"{target} is there already; name another file, or replace it with --replace")
    if not target.is_file() or not is_plant(target):
        raise PlantError(f"{target} is not a plant file, so it is not replaced; name another file")
    if any(target.with_name(target.name + ending).exists() for ending in ("-wal", "-shm", "-journal")):
        raise PlantError(f"{target} is open in a session, or was left in the midst of one, so it is not replaced; "
                         "name another file")


def is_plant(path: Path) -> bool:
    """Does a file say of itself that it is a plant? Never asked of a file that this process has open."""
    try:
        with path.open("rb") as file:
            head = file.read(100)
    except OSError:
        return False
    return head.startswith(MAGIC) and int.from_bytes(head[68:72], "big") == APPLICATION_ID


def copy_into(database: Database, temporary: Path, shown: Path) -> None:
    """Copy a plant as it is at one moment into a new file."""
    with database.reading() as con:
        try:
            pages(con, temporary)
        except sqlite3.Error as error:
            code = getattr(error, "sqlite_errorcode", 0) & 0xFF
            if code == sqlite3.SQLITE_FULL:
                raise PlantFull(f"the disk that holds {shown} is full; no backup was made: free some space and try "
                                "again") from error
            if code in (sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_READONLY, sqlite3.SQLITE_IOERR):
                raise PlantError(f"{shown} cannot be written; choose another place") from error
            raise


def pages(con: sqlite3.Connection, temporary: Path) -> None:
    """Copy every page that a connection sees into a new file."""
    copy = connect.connect(temporary, "mode=rwc", 5.0)
    try:
        con.backup(copy)
    finally:
        copy.close()


def _checked(database: Database, temporary: Path, target: Path) -> Backup:
    copy = Database(temporary, shown=target)
    try:
        with copy.reading() as con:
            fault = audit.wrong(con)
            made = Backup(target, journal.revision(con), journal.last_hash(con))
    finally:
        copy.close()
    if fault:
        raise PlantError(f"no backup was made, for {database.shown} is not sound: {fault}")
    return made


def keep(temporary: Path, target: Path, *, replace: bool = False) -> None:
    """Give a finished file its name for good; it survives a loss of power from here on."""
    try:
        _flush(temporary)
        if replace:
            os.replace(temporary, target)
        elif not put(temporary, target):
            raise PlantError(f"{target} has come up meanwhile; name another file")
        _flush(target.parent)
    except OSError as error:
        raise unwritable(target, error) from None


def _flush(path: Path) -> None:
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
