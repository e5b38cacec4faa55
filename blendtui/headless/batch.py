"""Batches: headless. `batch` and its own commands; they stand in batch_order, _floor, _lab, _release and _out."""

from __future__ import annotations

import argparse
from collections.abc import Callable

from . import batch_floor, batch_lab, batch_order, batch_out, batch_release
from .common import Add, BadInput, shared


def register(add: Add) -> None:
    """Add `batch` with its own commands."""
    command = add("batch", _nothing, "a batch from order to release: order, card, charge, sample, decide, release")
    commands = command.add_subparsers(title="commands of batch", metavar="WHAT", parser_class=type(command))

    def of_batch(name: str, run: Callable[[argparse.Namespace], int], words: str) -> argparse.ArgumentParser:
        made = commands.add_parser(name, parents=[shared()], help=words, description=words)
        made.set_defaults(run=run)
        return made

    for each in (batch_order, batch_floor, batch_lab, batch_release, batch_out):
        each.add_to(of_batch)


def _nothing(options: argparse.Namespace) -> int:
    raise BadInput("say what is to be done: order, list, show, card, redesign, reorder, cancel, charge, sample, "
                   "result, decide, trim, release, pack; blendtui batch --help tells of each")
