"""The record as a whole: whether it stands, whether a paper copy belongs to it, its backup and its way back."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from blendtui.store.harmless import harmless
from blendtui.store.places import example_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Entry

from .batches import when
from .errors import DeskError

SHORTEST = 8  # digits of a hash that are enough to look for


@dataclass(frozen=True)
class Verified:
    """A record that was checked and stands."""

    entries: int
    last_hash: str
    remarks: tuple[str, ...]  # odd, and no damage
    found: Entry | None  # the entry whose hash was asked for
    after: int = 0  # entries that came after it


def verify(plant: Plant, hash: str = "") -> Verified:
    """Check the file, its journal and the plant against it; DeskError says what is wrong first.

    `hash`: as printed on a card or a certificate, the whole of it or its beginning; DeskError when no entry has it.
    """
    if plant.folder:
        raise DeskError(f"{plant.path} is a catalogue folder, which keeps no record; name a plant file with --plant")
    wanted = _typed(hash)
    fault = plant.verify()
    if fault is not None:
        raise DeskError(f"{plant.path} does not verify: {fault}")
    entries = plant.revision()
    found = _entry(plant, wanted) if wanted else None
    return Verified(entries, plant.last_hash(), plant.remarks(), found, entries - found.id if found else 0)


def _typed(hash: str) -> str:
    """A hash as typed from paper, its blanks and dashes taken out."""
    plain = "".join(hash.split()).replace("-", "").lower()
    if hash and (not SHORTEST <= len(plain) <= 64 or plain.strip("0123456789abcdef")):
        raise DeskError(f"{harmless(hash, 80)!r} is no hash of a journal; type it as it is printed, {SHORTEST} to 64 "
                        "digits of 0-9 and a-f")
    return plain


def _entry(plant: Plant, wanted: str) -> Entry:
    found = plant.found(wanted)
    if len(found) > 1:
        raise DeskError(f"{len(found)} entries have a hash that begins with {wanted}; type more of it")
    if not found:
        raise DeskError(f"no entry of {plant.path} has the hash {wanted}; the paper is of another plant, or was "
                        "printed from another past than this one")
    return found[0]


def as_json(made: Verified) -> dict[str, Any]:
    """The answer of `verify`."""
    found = made.found and {"entry": made.found.id, "at": made.found.at, "who": made.found.who, "what": made.found.what,
                            "hash": made.found.hash, "entries_after": made.after}
    return {"ok": True, "fault": None, "entries": made.entries, "last_hash": made.last_hash,
            "remarks": list(made.remarks), "found": found}


def words(plant: Plant, made: Verified) -> list[str]:
    """The same as lines."""
    lines = [f"the record of {harmless(str(plant.path))} stands:",
             f"{_entries(made.entries)}, each follows the one before it, and the plant is what they say",
             f"last hash {made.last_hash}"]
    if made.found is not None:
        later = "none came after it" if not made.after else f"{made.after} came after it"
        lines += [f"found: entry {made.found.id}, {when(made.found.at)}, {harmless(made.found.who, 60)}; {later}",
                  f"  {harmless(made.found.what, 200)}"]
    return [*lines, *(f"remark: {remark}" for remark in made.remarks)]


def _entries(count: int, which: str = "") -> str:
    return f"{count} {which}{'entry' if count == 1 else 'entries'}"


def backup(plant: Plant, file: Path, *, replace: bool = False) -> tuple[dict[str, Any], list[str]]:
    """Write one consistent, checked file of the plant; the answer as JSON and as lines."""
    made = plant.backup(file, replace=replace)
    return ({"file": str(made.path), "entries": made.entries, "last_hash": made.last_hash},
            [f"backup of {harmless(str(plant.path))}: {harmless(str(made.path))}, {_entries(made.entries)}, checked",
             f"last hash {made.last_hash}"])


def restore(file: Path, plant: Path | None, *, by: str = "",
            replace_newer: bool = False) -> tuple[dict[str, Any], list[str]]:
    """Put a backup in the place of a plant file (None: the example's); the answer as JSON and as lines."""
    from blendtui.store.restoring import restore as put_back

    made = put_back(file, plant or example_plant(), who=by.strip() or None, replace_newer=replace_newer)
    lines = [f"restored {harmless(str(made.plant))} from {harmless(str(file))}, {_entries(made.entries)}"]
    if made.kept is not None:
        lost = f", {_entries(made.lost, 'later ')} among it" if made.lost else ""
        lines.append(f"what was there{lost} is kept in {harmless(str(made.kept))}")
    return ({"plant": str(made.plant), "entries": made.entries, "lost": made.lost,
             "kept": None if made.kept is None else str(made.kept)}, lines)
