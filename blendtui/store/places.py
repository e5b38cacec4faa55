"""Where plant files lie: which mounts are refused, and where a first start keeps the example."""

from __future__ import annotations

import os
import re
from importlib import resources
from pathlib import Path

from .errors import NetworkPlace, NoPlant, PlantError

# SQLite's locks are not reliable over these, and two writers at once would spoil the file.
NETWORK = frozenset({
    "nfs", "nfs4", "cifs", "smb", "smb2", "smb3", "smbfs", "9p", "afs", "ncpfs", "ceph", "glusterfs",
    "lustre", "davfs", "sshfs", "fuse.sshfs", "fuse.rclone", "fuse.s3fs", "fuse.glusterfs", "fuse.cephfs",
    "fuse.davfs", "fuse.davfs2", "fuse.gcsfuse", "fuse.vmhgfs-fuse", "virtiofs", "vboxsf", "drvfs", "beegfs", "gfs2",
})
MOUNTS = Path("/proc/mounts")


def network_type(path: Path) -> str:
    """Type of the network mount that the path lies on ("nfs4"), or "" on a local disk or where unknown."""
    try:
        lines = MOUNTS.read_text(encoding="utf-8", errors="replace").splitlines()
    except OSError:
        return ""
    place, found, depth = path.resolve(), "", -1
    for line in lines:
        parts = line.split(" ")
        if len(parts) < 3:
            continue
        mount = Path(re.sub(r"\\([0-7]{3})", lambda m: chr(int(m[1], 8)), parts[1]))
        # A later mount on the same point hides the earlier one.
        if place.is_relative_to(mount) and len(mount.parts) >= depth:
            found, depth = parts[2], len(mount.parts)
    return found if found in NETWORK else ""


def refuse_network(path: Path) -> None:
    """Raise NetworkPlace when the path lies on a network mount."""
    kind = network_type(path)
    if kind:
        raise NetworkPlace(f"{path} lies on a network mount ({kind}), where two writers could spoil the "
                           "file; keep the plant file on a local disk of the machine that serves it, and "
                           "log in there")


def user_folder() -> Path:
    """The user's data folder of this program (honours XDG_DATA_HOME)."""
    import platformdirs

    return Path(platformdirs.user_data_dir("blendtui", appauthor=False))


def example_plant() -> Path:
    """The plant file that a start without a path opens."""
    return user_folder() / "example.plant"


def example_folder() -> Path:
    """The catalogue folder of the example: inside the installed package, or beside it in a checkout."""
    # Beside the CSV files there is no module, so they are found from the package that is one.
    package = Path(str(resources.files("blendtui")))
    for folder in (package / "stock_catalog_example", package.parent / "stock_catalog_example"):
        if (folder / "stocks.csv").is_file():
            return folder
    raise PlantError("the example plant is not where it was installed; install the program again, "
                     "or open a plant of your own with --plant PATH")


def home(path: Path | str) -> Path:
    """The path with a leading ~ spelt out; NoPlant when there is no such user."""
    try:
        return Path(path).expanduser()
    except RuntimeError:
        raise NoPlant(f"{path}: there is no such user; spell the path out, or write ./{path}") from None


def make_folder(folder: Path) -> None:
    """Make a folder and its parents; PlantError when that is not allowed."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise PlantError(f"cannot make the folder {folder}: {(error.strerror or str(error)).lower()}; "
                         "choose another place with --plant PATH or XDG_DATA_HOME") from None


def writable(path: Path) -> bool:
    """May this file be written, and its neighbours that SQLite needs be made beside it?"""
    return os.access(path, os.W_OK) and os.access(path.parent, os.W_OK)
