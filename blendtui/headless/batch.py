"""Batches: headless. `batch` and its own commands; they stand in batch_order, _floor, _lab, _release and _out."""

from __future__ import annotations

from . import batch_floor, batch_lab, batch_order, batch_out, batch_release
from .common import Add, group


def register(add: Add) -> None:
    """Add `batch` with its own commands."""
    of_batch = group(add, "batch", "a batch from order to release: order, card, charge, sample, decide, release",
                     "say what is to be done: order, list, show, card, redesign, reorder, cancel, charge, sample, "
                     "result, decide, trim, release, pack; blendtui batch --help tells of each")
    for each in (batch_order, batch_floor, batch_lab, batch_release, batch_out):
        each.add_to(of_batch)
