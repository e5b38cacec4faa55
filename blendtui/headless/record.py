"""The record of a plant: headless."""

from __future__ import annotations

import argparse
import textwrap

from .common import DONE, Add, opened, path, show

WIDE = 80


def register(add: Add) -> None:
    """Add `verify`, `backup` and `restore`."""
    command = add("verify", _verify, "check that nobody changed the past of a plant file")
    command.add_argument("--hash", metavar="HASH", default="",
                         help="as printed on a card or a certificate: tell which entry it is")
    command = add("backup", _backup, "write one consistent file of the plant while others work in it")
    command.add_argument("file", type=path, metavar="FILE")
    command.add_argument("--replace", action="store_true", help="an older backup of that name may go")
    command = add("restore", _restore, "check a backup and put it in the place of the plant file of --plant")
    command.add_argument("file", type=path, metavar="FILE")
    command.add_argument("--replace-newer", action="store_true",
                         help="although the plant holds entries that the backup lacks; it is kept beside")
    command.add_argument("--by", metavar="NAME", default="", help="who restores; else the login name")


def _lines(lines: list[str]) -> str:
    return "\n".join(part for line in lines for part in textwrap.wrap(
        line, WIDE, subsequent_indent="  ", break_long_words=False, break_on_hyphens=False) or [""])


def _verify(options: argparse.Namespace) -> int:
    from blendtui.desk import record

    with opened(options) as plant:
        made = record.verify(plant, options.hash)
        show(options, record.as_json(made), _lines(record.words(plant, made)))
    return DONE


def _backup(options: argparse.Namespace) -> int:
    from blendtui.desk import record

    with opened(options) as plant:
        answer, lines = record.backup(plant, options.file, replace=options.replace)
    show(options, answer, _lines(lines))
    return DONE


def _restore(options: argparse.Namespace) -> int:
    from blendtui.desk import record

    answer, lines = record.restore(options.file, options.plant, by=options.by, replace_newer=options.replace_newer)
    show(options, answer, _lines(lines))
    return DONE
