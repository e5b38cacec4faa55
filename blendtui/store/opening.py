"""Opening a plant file, a catalogue folder or, without a path, the example; and making new plant files."""

from __future__ import annotations

import json
import os
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from . import state
from .database import Database
from .errors import NoPlant, NotAPlant, PlantError, ReadOnlyPlant
from .places import example_folder, example_plant, make_folder, refuse_network
from .plant import Plant
from .records import Value

if TYPE_CHECKING:
    from .catalogue import Catalogue


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
    place = Path(path).expanduser()
    kind = _kind(place)
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
    plant.opened_note = f"plant file {place}" + (" (read only)" if plant.read_only else "")
    return plant


def _kind(place: Path) -> str:
    try:
        if place.is_dir():
            return "folder"
        if place.is_file():
            return "file"
        return "other" if place.exists() else "nothing"
    except OSError as error:
        raise NoPlant(f"{place} cannot be looked at: {(error.strerror or str(error)).lower()}; "
                      "check the path and the rights") from None


def _open_example(who: str | None, timeout: float) -> Plant:
    place = example_plant()
    first = not place.exists()
    if first:
        from .catalogue import read_catalogue

        make_folder(place.parent)
        make_plant(place, read_catalogue(example_folder()), who=who)
    plant = open_plant(place, who=who, timeout=timeout)
    plant.opened_note = (f"first start: the example plant was copied to {place}" if first
                         else f"the example plant, {place}")
    return plant


def _open_folder(folder: Path, who: str | None) -> Plant:
    from .catalogue import read_catalogue

    catalogue = read_catalogue(folder)
    plant = Plant(Database(None), folder, folder=True, who=who, notes=catalogue.notes,
                  opened_note=f"catalogue folder {folder} (read only)")
    plant.fill(state.difference(state.empty(), catalogue.state), f"read from {folder}")
    return plant


def make_plant(path: Path, catalogue: Catalogue | None, *, who: str | None = None) -> None:
    """Make a plant file, complete or not at all, from a catalogue or empty."""
    refuse_network(path.parent)
    with beside(path) as temporary:
        plant = Plant(Database(temporary, new=True, shown=path), temporary, who=who)
        with plant:
            if catalogue is None:
                plant.fill([], "an empty plant was made")
            else:
                plant.fill(state.difference(state.empty(), catalogue.state), f"imported {catalogue.folder}")
        try:
            os.link(temporary, path)  # unlike a rename it never replaces what another has made meanwhile
        except FileExistsError:
            pass
        except OSError:
            os.replace(temporary, path)


@contextmanager
def beside(path: Path) -> Iterator[Path]:
    """A temporary path in the folder where `path` will be; it and what SQLite puts beside it are removed."""
    try:
        folder = Path(tempfile.mkdtemp(prefix=f".{path.name}.", dir=path.parent))
    except FileNotFoundError:
        raise NoPlant(f"there is no folder {path.parent}; make it first, or choose another place") from None
    except PermissionError:
        raise ReadOnlyPlant(f"the folder {path.parent} may not be written; choose another place, "
                            "or ask for the right to write") from None
    except OSError as error:
        raise PlantError(f"cannot write in {path.parent}: {(error.strerror or str(error)).lower()}; "
                         "choose another place") from None
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

    catalogue = read_catalogue(Path(folder).expanduser())
    place = example_plant() if path is None else Path(path).expanduser()
    kind = _kind(place)
    if kind == "folder":
        raise PlantError(f"{place} is a folder; an import goes into a plant file: name one, such as "
                         f"{place / 'my.plant'}")
    if kind == "nothing":
        if path is None:
            make_folder(place.parent)
        make_plant(place, catalogue, who=who)
        changes, retired = sum(map(len, catalogue.state.values())), ()
    else:
        with open_plant(place, who=who, timeout=timeout) as plant:
            changes, retired = _take_over(plant, catalogue)
    return Imported(place, len(catalogue.state["stock"]), len(catalogue.state["product"]), changes, retired,
                    catalogue.notes)


def _take_over(plant: Plant, catalogue: Catalogue) -> tuple[int, tuple[str, ...]]:
    old = plant.state()
    new, retired = merged(old, catalogue)
    changes = state.difference(old, new)
    plant.change(changes, f"imported {catalogue.folder}")
    return len(changes), retired


_OWNED = {"stock": ("stock_value", "quantity"), "product": ("product_limit", "share_rule")}


def merged(old: state.State, catalogue: Catalogue) -> tuple[state.State, tuple[str, ...]]:
    """The state after an import, and what it retires: rows that the catalogue lacks stay, marked retired."""
    new = {table: dict(rows) for table, rows in catalogue.state.items()}
    retired: list[str] = []
    for owner, tables in _OWNED.items():
        gone = {key[0] for key in old[owner] if key not in new[owner]}
        for key in gone:
            new[owner][key,] = {**old[owner][key,], "retired": 1}
            if not old[owner][key,]["retired"]:
                retired.append(str(key))
        for table in tables:
            new[table].update({k: row for k, row in old[table].items() if k[0] in gone})
        new["extra"].update({k: row for k, row in old["extra"].items()
                             if _belongs(k, (owner, *tables), gone)})
    for table in ("trial", "trial_share"):
        # A folder without trials.csv says nothing of trials; one with it speaks for its own products only.
        new[table].update({k: row for k, row in old[table].items()
                           if not catalogue.has_trials or (k[0],) not in catalogue.state["product"]})
    return new, tuple(sorted(retired))


def _belongs(key: state.Key, tables: tuple[str, ...], owners: set[Value]) -> bool:
    """Is this the key of an extra cell of one of these tables and owners?"""
    return key[0] in tables and json.loads(str(key[1]))[0] in owners


def export_plant(plant: Plant, folder: Path | str) -> tuple[str, ...]:
    """Write the plant as a catalogue folder that imports back to the same; notes of what stays behind."""
    from .export import write_catalogue

    return write_catalogue(plant.state(), Path(folder).expanduser())
