"""Opening, importing and exporting plants: what the headless commands and the console start with."""

from __future__ import annotations

from blendtui.store.opening import Imported, export_plant, import_folder, open_plant
from blendtui.store.plant import Plant

__all__ = ["Imported", "Plant", "export_plant", "import_folder", "open_plant"]
