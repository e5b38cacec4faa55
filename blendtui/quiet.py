"""Keep what compiled code prints away from the answer and from the screen.

HiGHS now and then writes a line straight to file descriptor 1, past Python. Inside `quiet` that descriptor
leads nowhere, while Python's own stdout still leads where it did.
"""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Iterator


@contextlib.contextmanager
def quiet() -> Iterator[None]:
    """Run with file descriptor 1 leading nowhere; does nothing where there is no such descriptor."""
    sys.stdout.flush()
    try:
        kept = os.dup(1)
    except OSError:
        yield
        return
    nowhere = os.open(os.devnull, os.O_WRONLY)
    before, genuine = sys.stdout, sys.__stdout__
    # The terminal's size is asked of sys.__stdout__, so that too must keep leading to the terminal.
    own = os.fdopen(kept, "w", encoding=getattr(genuine, "encoding", None) or "utf-8", errors="replace", closefd=False)
    try:
        if before is genuine:
            sys.stdout = own
        sys.__stdout__ = own  # type: ignore[misc]
        os.dup2(nowhere, 1)
        yield
    finally:
        own.flush()
        sys.stdout, sys.__stdout__ = before, genuine  # type: ignore[misc]
        os.dup2(kept, 1)
        os.close(kept)
        os.close(nowhere)
