"""Small catalogue folders and plants to test the store on."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from blendtui.store.errors import CatalogueError
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.plant import Plant

STOCKS = """stock,kv40,kv100,price_per_t,on_hand_kg
A,30.2,5.23,820,40000
B,98.5,10.9,870,35000
"""
PRODUCTS = """product,grade
P46,ISO VG 46
"""


@pytest.fixture
def folder(tmp_path: Path) -> Callable[..., Path]:
    """Writes a catalogue folder of two stocks and one product, any file replaced (None: left out)."""

    def write(name: str = "catalogue", **files: str | bytes | None) -> Path:
        place = tmp_path / name
        place.mkdir(exist_ok=True)
        for file, text in {"stocks": STOCKS, "products": PRODUCTS, **files}.items():
            if text is not None:
                (place / f"{file}.csv").write_bytes(text if isinstance(text, bytes) else text.encode())
        return place

    return write


@pytest.fixture
def faults(folder: Callable[..., Path]) -> Callable[..., list[str]]:
    """Every fault of a folder with these files, as lines."""

    def read(**files: str | bytes | None) -> list[str]:
        with pytest.raises(CatalogueError) as caught:
            open_plant(folder(**files))
        return [str(fault) for fault in caught.value.faults]

    return read


@pytest.fixture
def path(folder: Callable[..., Path], tmp_path: Path) -> Path:
    """A plant file made from the small catalogue by anna."""
    limits = "product,property,low,high,guard\nP46,kv40,,,2%\nP46,vi,90,,2\n"
    shares = "product,of,low_pct,high_pct\nP46,A,,80\n"
    import_folder(folder(limits=limits, shares=shares), tmp_path / "small.plant", who="anna")
    return tmp_path / "small.plant"


@pytest.fixture
def plant(path: Path) -> Iterator[Plant]:
    """That file opened by anna; a wait for another writer ends after 0.2 s."""
    with open_plant(path, who="anna", timeout=0.2) as opened:
        yield opened


@pytest.fixture
def example(pytestconfig: pytest.Config) -> Path:
    """The catalogue folder of the example plant."""
    return pytestconfig.rootpath / "stock_catalog_example"
