"""Text sheets for the floor: where they are written, and never over another without asking."""

from __future__ import annotations

from pathlib import Path

from .errors import DeskError
from .stocks import Edit


def write(typed: str, folder: Path, text: str, confirmed: bool = False) -> Edit:
    """Write a sheet to the path that was typed (relative to `folder`), and say where.

    A question where a file of that name is there already; DeskError where it cannot be written.
    """
    if not typed.strip():
        raise DeskError("no file name: type where the sheet is to be written")
    path = folder / Path(typed.strip()).expanduser()
    if path.is_dir():
        raise DeskError(f"{path} is a folder: type a file name, such as {path / 'sheet.txt'}")
    if path.exists() and not confirmed:
        return Edit("question", f"{path} is there already and would be overwritten")
    try:
        path.write_text(text, encoding="utf-8")
    except (OSError, ValueError) as error:
        reason = (getattr(error, "strerror", None) or str(error)).lower()
        raise DeskError(f"{path} cannot be written: {reason}; type another place") from None
    return Edit("saved", f"the sheet was written to {path.resolve()}")
