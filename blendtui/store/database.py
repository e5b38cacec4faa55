"""One SQLite connection: opened with its settings, checked to be a plant, its errors put into words."""

from __future__ import annotations

import json
import os
import shutil
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from datetime import UTC, datetime
from pathlib import Path

from . import connect
from .errors import (
    ChangedSince,
    NewerPlant,
    NotAPlant,
    PlantBusy,
    PlantError,
    PlantFull,
    ReadOnlyPlant,
)
from .harmless import harmless
from .places import writable
from .schema import APPLICATION_ID, MIGRATIONS

ROOM = 100_000  # bytes: SQLite cannot work beside a plant with less


def now() -> str:
    """This moment, UTC, ISO 8601."""
    return datetime.now(UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")


class Database:
    """A connection to a plant file, or to memory when there is no path."""

    def __init__(self, path: Path | None, *, timeout: float = 5.0, new: bool = False,
                 shown: Path | None = None) -> None:
        self.shown = shown or path or "the plant"  # what messages call it
        # A link may lie elsewhere than its file, but what SQLite keeps beside the file lies beside the file.
        self.path = None if path is None else path.resolve()
        self.timeout = timeout
        self.read_only = self.path is not None and not new and not writable(self.path)
        if self.path is not None and not new:
            connect.look(self.path, self.shown)
        self._open(new or path is None)

    def _open(self, new: bool) -> None:
        self._seen: connect.Fingerprint | None = None  # of the file, where this is a copy of it
        with self.words():
            if self.read_only and self.path is not None:
                self.con, self._seen = connect.to_read(self.path, self.shown, self.timeout)
            else:
                self.con = connect.connect(self.path, "mode=rwc" if new else "mode=rw", self.timeout)
            try:
                self._settle(new)
            except BaseException:
                self.con.close()
                raise

    def _settle(self, new: bool) -> None:
        con = self.con
        con.execute("PRAGMA foreign_keys = ON")
        con.execute("PRAGMA synchronous = FULL")
        # Without it INSERT OR REPLACE would pass by the triggers that keep the past from being deleted.
        con.execute("PRAGMA recursive_triggers = ON")
        if new:
            con.execute("PRAGMA journal_mode = WAL")
            con.execute(f"PRAGMA application_id = {APPLICATION_ID}")
        elif con.execute("PRAGMA application_id").fetchone()[0] != APPLICATION_ID:
            raise NotAPlant(f"{self.shown} is a database of another program, not a plant file; "
                            "open a plant file or a catalogue folder")
        elif not self.read_only:
            # A restore that was killed leaves the plant without its log, so that readers would hold up writers.
            with suppress(sqlite3.OperationalError):
                con.execute("PRAGMA journal_mode = WAL")
        self._migrate(new)

    def _migrate(self, new: bool) -> None:
        version = self.con.execute("PRAGMA user_version").fetchone()[0]
        if version > len(MIGRATIONS):
            raise NewerPlant(f"{self.shown} was written by a newer version of this program (schema {version}, "
                             f"this one knows {len(MIGRATIONS)}); install the newer version to open it")
        if version < 1 and not new:
            raise NotAPlant(f"{self.shown} is damaged (it says that its schema is {version}, which no plant has); "
                            "open a backup of it")
        if version == len(MIGRATIONS):
            return
        if self.read_only:
            raise ReadOnlyPlant(f"{self.shown} needs to be brought up to date but may not be written; "
                                "open it once from an account that may write it")
        self.con.execute("BEGIN IMMEDIATE")
        try:
            # Read again: another program may have brought it up to date while this one waited.
            version = self.con.execute("PRAGMA user_version").fetchone()[0]
            for step in MIGRATIONS[version:]:
                for statement in step:
                    self.con.execute(statement)
            self.con.execute(f"PRAGMA user_version = {len(MIGRATIONS)}")
            self.con.execute("COMMIT")
        except BaseException:
            self._rollback()
            raise

    def close(self) -> None:
        """Close the connection; a second time is harmless."""
        self.con.close()

    @contextmanager
    def reading(self) -> Iterator[sqlite3.Connection]:
        """A consistent view: every query inside sees the same moment, that of the transaction under way if there is."""
        if self.con.in_transaction:
            yield self.con
            return
        self._renew()
        with self.words():
            self.con.execute("BEGIN")
            try:
                yield self.con
            finally:
                self._rollback()

    def _renew(self) -> None:
        """Copy the file again where this is a copy and the file has moved on."""
        if self._seen is None or self.path is None or connect.fingerprint(self.path) == self._seen:
            return
        self.con.close()
        connect.look(self.path, self.shown)
        self._open(False)

    @contextmanager
    def writing(self, who: str) -> Iterator[sqlite3.Connection]:
        """One transaction: all of it is kept, or nothing."""
        if self.read_only:
            raise ReadOnlyPlant(f"{self.shown} may not be written (it or its folder is read-only for you); "
                                "copy it to a folder of your own, or ask for the right to write")
        with self.words():
            self.con.execute("BEGIN IMMEDIATE")
            self._sign(who)
            try:
                yield self.con
                self.con.execute("COMMIT")
            except BaseException:
                self._rollback()
                raise
            finally:
                self._unsign(who)

    def _rollback(self) -> None:
        # SQLite itself rolls back on a full disk, and a second ROLLBACK would hide the reason.
        if self.con.in_transaction:
            self.con.execute("ROLLBACK")

    # Who is writing stands in a small file beside the plant: a row of the plant itself would be seen by the
    # others only once the transaction, and so the wait, is over.

    def _sign_path(self) -> Path | None:
        return None if self.path is None else _sign_of(self.path)

    def _sign(self, who: str) -> None:
        sign = self._sign_path()
        if sign is not None:
            try:
                # Never through a link, and never waiting for the reader of a pipe.
                how = os.O_WRONLY | os.O_CREAT | os.O_TRUNC | os.O_NOFOLLOW | os.O_NONBLOCK
                handle = os.open(sign, how, 0o644)
                try:
                    os.write(handle, _signature(who).encode())
                finally:
                    os.close(handle)
            except OSError:
                pass  # only a courtesy to the others

    def _unsign(self, who: str) -> None:
        sign = self._sign_path()
        if sign is not None:
            try:
                # The next writer may have signed already; on a full disk one's own signature is empty.
                if sign.is_file() and sign.read_text(encoding="utf-8") in (_signature(who), ""):
                    sign.unlink()
            except (OSError, ValueError):
                pass

    def writer(self) -> str:
        """Who is writing the plant at this moment, or "" when that is not known."""
        return "" if self.path is None else writer_of(self.path)

    @contextmanager
    def words(self) -> Iterator[None]:
        """Turn SQLite's errors into one line of words."""
        try:
            yield
        except sqlite3.Error as error:
            raise self._explain(error) from error

    def _explain(self, error: sqlite3.Error) -> PlantError:
        # By SQLite's number, not by its text; errors of Python's own binding have none.
        code, place = getattr(error, "sqlite_errorcode", 0) & 0xFF, self.shown
        if code in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
            who = self.writer()
            return PlantBusy(f"{who or 'another program'} has been writing {place} for more than "
                             f"{self.timeout:g} s; nothing was saved: wait a moment and try again", who=who)
        if code == sqlite3.SQLITE_FULL or (code in (sqlite3.SQLITE_IOERR, sqlite3.SQLITE_CANTOPEN) and self._full()):
            return PlantFull(f"the disk that holds {place} is full; nothing was saved: free some space "
                             "and try again")
        if code == sqlite3.SQLITE_READONLY:
            return ReadOnlyPlant(f"{place} may not be written; copy it to a folder of your own, "
                                 "or ask for the right to write")
        if code == sqlite3.SQLITE_NOTADB:
            return NotAPlant(f"{place} is not a plant file; open a plant file or a catalogue folder, "
                             "or make one: blendtui import FOLDER --plant FILE")
        if code == sqlite3.SQLITE_CONSTRAINT:
            return ChangedSince("the plant has changed since it was read, and this no longer fits; "
                                "look again and repeat the change")
        if code in (sqlite3.SQLITE_IOERR, sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_PERM, sqlite3.SQLITE_AUTH):
            return PlantError(f"{place} cannot be read or written: the disk refuses it; nothing was saved: "
                              "check the disk and the rights of the file and its folder")
        if isinstance(error, sqlite3.ProgrammingError):
            return PlantError(f"{place} is closed; open it again")
        return NotAPlant(f"{place} is damaged; open a backup of it")

    def _full(self) -> bool:
        try:
            return self.path is not None and shutil.disk_usage(self.path.parent).free < ROOM
        except OSError:
            return False


def _sign_of(path: Path) -> Path:
    return path.with_name(path.name + "-writer")


def writer_of(path: Path) -> str:
    """Who is writing a plant file at this moment, or "" when that is not known."""
    sign = _sign_of(path)
    try:
        signed = json.loads(sign.read_text(encoding="utf-8")) if sign.is_file() else {}
        os.kill(int(signed["pid"]), 0)
        return harmless(str(signed["who"]), 60)
    except PermissionError:
        return harmless(str(signed["who"]), 60)  # alive, but another user's
    except (OSError, ValueError, KeyError, TypeError, OverflowError):
        return ""


def _signature(who: str) -> str:
    return json.dumps({"who": who, "pid": os.getpid()})
