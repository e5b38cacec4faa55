"""One SQLite connection: opened with its settings, checked to be a plant, its errors put into words."""

from __future__ import annotations

import json
import os
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

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

MAGIC = b"SQLite format 3\x00"


def now() -> str:
    """This moment, UTC, ISO 8601."""
    return datetime.now(UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")


class Database:
    """A connection to a plant file, or to memory when there is no path."""

    def __init__(self, path: Path | None, *, timeout: float = 5.0, new: bool = False,
                 shown: Path | None = None) -> None:
        self.path = path
        self.shown = shown or path or "the plant"  # what messages call it
        self.timeout = timeout
        self.read_only = path is not None and not new and not writable(path)
        if path is not None and not new:
            _check_header(path)
        with self.words():
            self.con = sqlite3.connect(_address(path, self.read_only, new), uri=True, isolation_level=None,
                                       timeout=timeout, check_same_thread=False)
            try:
                self._settle(new or path is None)
            except BaseException:
                self.con.close()
                raise

    def _settle(self, new: bool) -> None:
        con = self.con
        con.execute("PRAGMA foreign_keys = ON")
        con.execute("PRAGMA synchronous = FULL")
        if new:
            con.execute("PRAGMA journal_mode = WAL")
            con.execute(f"PRAGMA application_id = {APPLICATION_ID}")
        elif con.execute("PRAGMA application_id").fetchone()[0] != APPLICATION_ID:
            raise NotAPlant(f"{self.path} is a database of another program, not a plant file; "
                            "open a plant file or a catalogue folder")
        self._migrate()

    def _migrate(self) -> None:
        version = self.con.execute("PRAGMA user_version").fetchone()[0]
        if version > len(MIGRATIONS):
            raise NewerPlant(f"{self.path} was written by a newer version of this program (schema {version}, "
                             f"this one knows {len(MIGRATIONS)}); install the newer version to open it")
        if version == len(MIGRATIONS):
            return
        if self.read_only:
            raise ReadOnlyPlant(f"{self.path} needs to be brought up to date but may not be written; "
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
        """A consistent view: every query inside sees the same moment."""
        with self.words():
            self.con.execute("BEGIN")
            try:
                yield self.con
            finally:
                self._rollback()

    @contextmanager
    def writing(self, who: str) -> Iterator[sqlite3.Connection]:
        """One transaction: all of it is kept, or nothing."""
        if self.read_only:
            raise ReadOnlyPlant(f"{self.path} may not be written (it or its folder is read-only for you); "
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
        return None if self.path is None else self.path.with_name(self.path.name + "-writer")

    def _sign(self, who: str) -> None:
        sign = self._sign_path()
        if sign is not None:
            try:
                sign.write_text(_signature(who), encoding="utf-8")
            except OSError:
                pass  # only a courtesy to the others

    def _unsign(self, who: str) -> None:
        sign = self._sign_path()
        if sign is not None:
            try:
                # The next writer may have signed already.
                if sign.read_text(encoding="utf-8") == _signature(who):
                    sign.unlink()
            except (OSError, ValueError):
                pass

    def writer(self) -> str:
        """Who is writing the plant at this moment, or "" when that is not known."""
        sign = self._sign_path()
        try:
            signed = json.loads(sign.read_text(encoding="utf-8")) if sign else {}
            os.kill(int(signed["pid"]), 0)
            return harmless(str(signed["who"]), 60)
        except PermissionError:
            return harmless(str(signed["who"]), 60)  # alive, but another user's
        except (OSError, ValueError, KeyError, TypeError):
            return ""

    @contextmanager
    def words(self) -> Iterator[None]:
        """Turn SQLite's errors into one line of words."""
        try:
            yield
        except sqlite3.Error as error:
            raise self._explain(error) from error

    def _explain(self, error: sqlite3.Error) -> PlantError:
        text, place = str(error), self.shown
        if "locked" in text or "busy" in text:
            who = self.writer()
            return PlantBusy(f"{who or 'another program'} has been writing {place} for more than "
                             f"{self.timeout:g} s; nothing was saved: wait a moment and try again", who=who)
        if "full" in text:
            return PlantFull(f"the disk that holds {place} is full; nothing was saved: free some space "
                             "and try again")
        if "readonly" in text or "read-only" in text:
            return ReadOnlyPlant(f"{place} may not be written; copy it to a folder of your own, "
                                 "or ask for the right to write")
        if "malformed" in text or "not a database" in text:
            return NotAPlant(f"{place} is damaged ({text}); open a backup of it")
        if isinstance(error, sqlite3.IntegrityError):
            return ChangedSince("the plant has changed since it was read, and this no longer fits "
                                f"({text}); look again and repeat the change")
        return PlantError(f"{place} cannot be read or written: {text}; check the disk and the rights")


def _signature(who: str) -> str:
    return json.dumps({"who": who, "pid": os.getpid()})


def _address(path: Path | None, read_only: bool, new: bool) -> str:
    if path is None:
        return ":memory:"
    address = path.resolve().as_uri()
    if not read_only:
        return address + ("?mode=rwc" if new else "?mode=rw")
    # Beside a read-only file SQLite can make no shared memory; without a log there is none to share.
    log = path.with_name(path.name + "-wal")
    alone = not (log.exists() and log.stat().st_size)
    return address + "?mode=ro" + ("&immutable=1" if alone else "")


def _check_header(path: Path) -> None:
    try:
        with path.open("rb") as file:
            head = file.read(len(MAGIC))
    except OSError as error:
        raise NotAPlant(f"{path} cannot be read: {(error.strerror or str(error)).lower()}; "
                        "check the path and the rights") from None
    if not head:
        raise NotAPlant(f"{path} is empty, not a plant file; make one: blendtui import FOLDER --plant {path}")
    if head != MAGIC:
        raise NotAPlant(f"{path} is not a plant file; open a plant file or a catalogue folder, "
                        f"or make one: blendtui import FOLDER --plant FILE")
