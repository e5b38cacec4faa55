"""How a plant file is reached: SQLite's own locks, never a second hand on the file.

A POSIX lock is gone as soon as the process closes the file, whichever part of the process that was. So nothing here
opens the plant file but SQLite, which knows of all its own connections.
"""

from __future__ import annotations

import os
import sqlite3
import time
from pathlib import Path

from .errors import NotAPlant, PlantBusy, ReadOnlyPlant

Fingerprint = tuple[int, int, int]
TRIES = 20  # of copying a file that somebody is writing


def look(path: Path, shown: Path | str) -> None:
    """NotAPlant when the file is empty or may not be read."""
    try:
        size = path.stat().st_size
    except OSError as error:
        raise NotAPlant(f"{shown} cannot be read: {(error.strerror or str(error)).lower()}; "
                        "check the path and the rights") from None
    if not os.access(path, os.R_OK):
        raise NotAPlant(f"{shown} cannot be read: permission denied; check the path and the rights")
    if not size:
        raise NotAPlant(f"{shown} is empty, not a plant file; make one: blendtui import FOLDER --plant {shown}")


def connect(path: Path | None, how: str, timeout: float) -> sqlite3.Connection:
    """A connection to a file, opened in the way of these URI parameters, or to memory."""
    address = ":memory:" if path is None else f"{path.absolute().as_uri()}?{how}"
    return sqlite3.connect(address, uri=True, isolation_level=None, timeout=timeout, check_same_thread=False)


def to_read(path: Path, shown: Path | str, timeout: float) -> tuple[sqlite3.Connection, Fingerprint | None]:
    """A connection for someone who may not write the file or its folder.

    While others have the plant open, their shared memory lets this reader follow them. Where there is none and it
    may not be made, the connection is to a copy in memory, and the fingerprint tells when the file has moved on.
    """
    for _ in range(TRIES):
        if not has_log(path) and frozen(path.parent):
            return connect(path, "mode=ro&immutable=1", timeout), None
        con = connect(path, "mode=ro", timeout)
        try:
            con.execute("SELECT COUNT(*) FROM sqlite_master").fetchone()
            return con, None
        except sqlite3.OperationalError as error:
            con.close()
            if error.sqlite_errorcode & 0xFF not in (sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_READONLY):
                raise
        except BaseException:
            con.close()
            raise
        if has_log(path) and not _beside(path, "-shm").exists():
            break
        before = fingerprint(path)
        if not has_log(path):
            copied = _copy(path, timeout)
            if not has_log(path) and fingerprint(path) == before:
                return copied, before
            copied.close()
        time.sleep(0.02)
    if has_log(path):
        raise ReadOnlyPlant(f"{shown} was left in the midst of a session ({_beside(path, '-wal').name} holds its last "
                            "changes), and reading those takes the right to write; open it once from an account that "
                            "may write it")
    raise PlantBusy(f"{shown} is being written all the time; wait a moment and try again")


def _copy(path: Path, timeout: float) -> sqlite3.Connection:
    memory = connect(None, "", timeout)
    # Without a log there is nothing in the file that is half done, as long as it does not change meanwhile.
    source = connect(path, "mode=ro&immutable=1", timeout)
    try:
        source.backup(memory)
    except BaseException:
        memory.close()
        raise
    finally:
        source.close()
    return memory


def fingerprint(path: Path) -> Fingerprint:
    """What changes when the file does: its node, its time, and the size of its log. Zeros when it is gone."""
    try:
        seen = path.stat()
    except OSError:
        return 0, 0, 0
    return seen.st_ino, seen.st_mtime_ns, _size(_beside(path, "-wal"))


def has_log(path: Path) -> bool:
    """Are there changes beside the file that are not in it yet?"""
    return _size(_beside(path, "-wal")) > 0


def frozen(folder: Path) -> bool:
    """Does the folder lie on a filesystem that is mounted to be read only?"""
    try:
        return bool(os.statvfs(folder).f_flag & os.ST_RDONLY)
    except OSError:
        return False


def leftovers(path: Path) -> list[Path]:
    """What SQLite keeps beside a file, where it is not empty: a new file of that name would take it for its own."""
    return [x for x in (_beside(path, "-wal"), _beside(path, "-journal")) if _size(x)]


def clear_leftovers(path: Path) -> None:
    """Take away what a session left beside a file that is gone, as far as it holds no changes."""
    for ending in ("-shm", "-wal", "-journal"):
        beside = _beside(path, ending)
        if ending == "-shm" or not _size(beside):
            beside.unlink(missing_ok=True)


def _beside(path: Path, ending: str) -> Path:
    return path.with_name(path.name + ending)


def _size(path: Path) -> int:
    try:
        return path.stat().st_size
    except OSError:
        return 0
