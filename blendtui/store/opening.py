"""Opening a plant file, a catalogue folder or, without a path, the example; and making new plant files."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from . import connect, state
from .database import Database
from .errors import NoPlant, NotAPlant, PlantError, ReadOnlyPlant
from .harmless import harmless
from .places import example_folder, example_plant, home, make_folder, refuse_network
from .plant import Plant
from .records import Change

if TYPE_CHECKING:
    from .catalogue import Catalogue

LONGEST_NAME = 240  # bytes: SQLite puts files of longer names beside a plant


@dataclass(frozen=True)
class Imported:
    """What an import did."""

    plant: Path
    stocks: int
    products: int
    changes: int  # rows and cells that changed; 0: the plant was the same already
    retired: tuple[str, ...]  # stocks and products that the catalogue no longer has
    notes: tuple[str, ...]  # unknown columns and files


def open_plant(path: Path | str | None = None, *, who: str | None = None, create: bool = False,
               timeout: float = 5.0) -> Plant:
    """Open a plant.

    None: the example plant in the user's data folder, copied there on the first start. A folder: read as a
    catalogue into memory, never changed. A file: a plant file, made empty with `create` when it is not there.
    `timeout` [s] is how long a writer waits for another. Raises PlantError in one line of words.
    """
    if path is None:
        return _open_example(who, timeout)
    place = home(path)
    kind = kind_of(place)
    if kind == "folder":
        return _open_folder(place, who)
    if kind == "other":
        raise NotAPlant(f"{place} is neither a file nor a folder; open a plant file or a catalogue folder")
    if kind == "nothing":
        if not create:
            raise NoPlant(f"there is no plant at {place}; check the path, or make one: "
                          f"blendtui import FOLDER --plant {place}")
        make_plant(place, None, who=who)
    refuse_network(place)
    plant = Plant(Database(place, timeout=timeout), place, who=who)
    plant.opened_note = f"plant file {_spelt(place)}" + (" (read only)" if plant.read_only else "")
    return plant


def kind_of(place: Path) -> str:
    """What is at a path: "file", "folder", "other" or "nothing"; NoPlant when it may not be looked at."""
    try:
        if place.is_dir():
            return "folder"
        if place.is_file():
            return "file"
        if place.exists():
            return "other"
        if not place.is_symlink():
            return "nothing"
        aim = os.readlink(place)
    except OSError as error:
        raise NoPlant(f"{place} cannot be looked at: {(error.strerror or str(error)).lower()}; "
                      "check the path and the rights") from None
    raise NoPlant(f"{place} is a link to {aim}, which is not there; mend the link, or name the file itself")


def _spelt(place: Path) -> str:
    return harmless(str(place))


def _open_example(who: str | None, timeout: float) -> Plant:
    place = example_plant()
    first = kind_of(place) == "nothing"
    if first:
        from .catalogue import read_catalogue

        make_folder(place.parent)
        # Another start at the same moment may have been quicker, and its copy is as good.
        first = make_plant(place, read_catalogue(example_folder()), who=who)
    plant = open_plant(place, who=who, timeout=timeout)
    plant.opened_note = (f"first start: the example plant was copied to {_spelt(place)}" if first
                         else f"the example plant, {_spelt(place)}")
    return plant


def _open_folder(folder: Path, who: str | None) -> Plant:
    from .catalogue import read_catalogue

    catalogue = read_catalogue(folder)
    plant = Plant(Database(None), folder, folder=True, who=who, notes=catalogue.notes,
                  opened_note=f"catalogue folder {_spelt(folder)} (read only)")
    plant.fill(state.difference(state.empty(), catalogue.state), f"read from {folder}")
    return plant


def make_plant(path: Path, catalogue: Catalogue | None, *, who: str | None = None) -> bool:
    """Make a plant file, complete or not at all, from a catalogue or empty. False: another made it meanwhile.

    Never replaces anything. Refused where a plant that is gone left changes behind: the new file would take them in.
    """
    refuse_network(path.parent)
    if len(os.fsencode(path.name)) > LONGEST_NAME:
        raise PlantError(f"{path} has a name of {len(os.fsencode(path.name))} bytes; keep it to {LONGEST_NAME}")
    refuse_leftovers(path)
    with beside(path) as temporary:
        plant = Plant(Database(temporary, new=True, shown=path), temporary, who=who)
        with plant:
            if catalogue is None:
                plant.fill([], "an empty plant was made")
            else:
                plant.fill(state.difference(state.empty(), catalogue.state), f"imported {catalogue.folder}")
        refuse_leftovers(path)
        return put(temporary, path)


def refuse_leftovers(path: Path) -> None:
    """PlantError when a file that is to be made would take over the changes of one that is gone."""
    left = connect.leftovers(path)
    if os.path.lexists(path):
        return  # another has made it, and what stands beside it is its own
    if left:
        raise PlantError(f"{left[0]} was left by a plant {path.name} that is gone, with its last changes in it; put "
                         f"that plant back beside it, or delete {left[0].name}, and try again")
    try:
        connect.clear_leftovers(path)
    except OSError as error:
        raise unwritable(path, error) from None


def put(temporary: Path, path: Path) -> bool:
    """Give a finished file its name; False when that is taken."""
    try:
        os.link(temporary, path)  # unlike a rename it never replaces what another has made meanwhile
        return True
    except FileExistsError:
        return False
    except OSError:
        pass  # a disk that knows no links
    try:
        # The name is taken with an empty file of our own, so that the rename replaces nothing else.
        os.close(os.open(path, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o600))
    except FileExistsError:
        return False
    except OSError as error:
        raise unwritable(path, error) from None
    try:
        os.replace(temporary, path)
    except OSError as error:
        path.unlink(missing_ok=True)
        raise unwritable(path, error) from None
    return True


def unwritable(path: Path, error: OSError) -> PlantError:
    """The error for a place that refuses to be written."""
    return PlantError(f"cannot write {path}: {(error.strerror or str(error)).lower()}; choose another place")


@contextmanager
def beside(path: Path) -> Iterator[Path]:
    """A temporary path in the folder where `path` will be; it and what SQLite puts beside it are removed."""
    try:
        folder = Path(tempfile.mkdtemp(prefix=f".{path.name[:40]}.", dir=path.parent))
    except FileNotFoundError:
        raise NoPlant(f"there is no folder {path.parent}; make it first, or choose another place") from None
    except PermissionError:
        raise ReadOnlyPlant(f"the folder {path.parent} may not be written; choose another place, "
                            "or ask for the right to write") from None
    except OSError as error:
        raise unwritable(path, error) from None
    try:
        yield folder / path.name
    finally:
        for file in folder.iterdir():
            file.unlink(missing_ok=True)
        folder.rmdir()


def import_folder(folder: Path | str, path: Path | str | None = None, *, who: str | None = None,
                  timeout: float = 5.0) -> Imported:
    """Make the plant file at `path` equal to a catalogue folder: all of it or nothing, in one journal entry.

    A file that is not there is made; None is the example plant of the user's data folder. Stocks and products
    that the catalogue no longer has are retired. CatalogueError carries every fault of the folder.
    """
    from .catalogue import read_catalogue

    catalogue = read_catalogue(home(folder))
    place = example_plant() if path is None else home(path)
    kind = kind_of(place)
    if kind == "folder":
        raise PlantError(f"{place} is a folder; an import goes into a plant file: name one, such as "
                         f"{place / 'my.plant'}")
    changes, retired = sum(map(len, catalogue.state.values())), ()
    if kind == "nothing" and path is None:
        make_folder(place.parent)
    if kind != "nothing" or not make_plant(place, catalogue, who=who):
        with open_plant(place, who=who, timeout=timeout) as plant:
            changes, retired = _take_over(plant, catalogue)
    return Imported(place, len(catalogue.state["stock"]), len(catalogue.state["product"]), changes, retired,
                    catalogue.notes)


def _take_over(plant: Plant, catalogue: Catalogue) -> tuple[int, tuple[str, ...]]:
    from .merging import changes

    retired: tuple[str, ...] = ()

    def made(old: state.State) -> list[Change]:
        nonlocal retired
        found, retired = changes(old, catalogue.state, catalogue.given)
        return found

    return plant.change_whole(made, f"imported {catalogue.folder}"), retired


def export_plant(plant: Plant, folder: Path | str) -> tuple[str, ...]:
    """Write the plant as a catalogue folder that imports back to the same; notes of what stays behind."""
    from .export import write_catalogue

    return write_catalogue(plant.state(), home(folder))
