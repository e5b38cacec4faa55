"""A small invented plant and a driver that presses keys and waits for what they set going."""

from __future__ import annotations

import asyncio
import shutil
from collections.abc import AsyncIterator, Callable, Iterator
from contextlib import asynccontextmanager
from dataclasses import dataclass
from datetime import date
from pathlib import Path

import pytest
from textual import events
from textual.keys import _character_to_key
from textual.pilot import Pilot
from textual.worker import WorkerError

from blendtui.app import Console
from blendtui.desk.plant import Plant, import_folder, open_plant
from blendtui.screens import asker
from blendtui.widgets import paint
from blendtui.widgets.canvas import Canvas

SIZES = ((80, 24), (120, 40))
TODAY = date(2026, 6, 1)
FILES = {
    "stocks.csv": "stock,name,kind,api_group,on_hand_kg,unpumpable_kg,price_per_t,density15,kv40,kv100,flash,pour,"
                  """tested_on,source
LIGHT,Light neutral,base,I,60000,1000,800,870,30.2,5.23,214,-12,2026-05-01,own
HEAVY,Heavy neutral,base,I,80000,0,870,882,98.6,10.92,252,-9,2024-01-10,certificate
BRIGHT,Bright stock,base,I,50000,0,1100,899,480,31.7,302,-9,2026-05-01,own
CLEAN,Clean cut,base,II,40000,0,960,865,43.2,6.62,228,-12,2026-05-01,own
PACK,Hydraulic package,additive,,4000,0,3400,1010,92,9.2,150,-20,2026-05-01,typical
NOPRICE,Unpriced cut,base,II,9000,0,,866,44,6.7,229,-12,2026-05-01,own
""",
    "products.csv": """product,name,grade,batch_kg,law,max_cost_per_t,max_stocks,min_share_pct,only_listed,note
H46,Hydraulic oil 46,ISO VG 46,15000,,,,,no,
G220,Gear oil 220,ISO VG 220,8000,,,,,no,
NEVER,Cannot be made,ISO VG 46,8000,,,,,no,
""",
    "limits.csv": """product,property,low,high,guard
H46,kv40,,,2%
H46,vi,92,,1
H46,flash,200,,5
NEVER,vi,150,,
""",
    "shares.csv": """product,of,low_pct,high_pct
H46,PACK,0.8,0.8
""",
}


@pytest.fixture(scope="session")
def made_once(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The plant file, made once."""
    folder = tmp_path_factory.mktemp("catalogue")
    for name, text in FILES.items():
        (folder / name).write_text(text, encoding="utf-8")
    path = folder / "small.plant"
    import_folder(folder, path, who="anna")
    return path


@pytest.fixture
def path(made_once: Path, tmp_path: Path) -> Path:
    """A copy of the plant file that the test may change."""
    return Path(shutil.copy(made_once, tmp_path / "small.plant"))


@pytest.fixture(autouse=True)
def terminal(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> Iterator[None]:
    """A fixed terminal, and no file of the person who runs the tests."""
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path / "data"))
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setattr(asker, "REST", 0.0)
    paint.adopt({"TERM": "xterm-256color", "LANG": "C.UTF-8"})
    yield
    paint.adopt({"TERM": "xterm-256color", "LANG": "C.UTF-8"})


@dataclass
class Driver:
    """The console under test."""

    app: Console
    pilot: Pilot
    plant: Plant  # the same file, opened once more: what is saved, not what is shown

    async def settle(self) -> None:
        """Wait for every thread and for what it sends."""
        for _ in range(50):
            try:
                await self.app.workers.wait_for_complete()
            except WorkerError:
                pass  # an older request that a newer one called off
            await self.pilot.pause()
            if not self.app.busy and not self.app.session.state.waiting and not self.app.asker.at_work:
                return
            await asyncio.sleep(0)
        raise AssertionError("the console does not come to rest")

    async def press(self, *keys: str) -> None:
        """Press keys one by one, waiting for what each sets going."""
        for key in keys:
            self.send(key)
            await self.settle()

    def send(self, *keys: str) -> None:
        """Send keys as a terminal does, all at once."""
        for key in keys:
            named = _character_to_key(key) if len(key) == 1 and not key.isalnum() else key
            character = key if len(key) == 1 else None
            event = events.Key(named, " " if key == "space" else character)
            event.set_sender(self.app)
            self.app._driver.send_message(event)  # type: ignore[union-attr]

    async def type(self, text: str, *, end: str = "enter") -> None:
        """Type a text over what stands on the edit line, and end it."""
        self.send(*text, end)
        await self.settle()

    def text(self) -> str:
        """Everything on the screen."""
        return "\n".join(w.text() for w in self.app.screen.query(Canvas))

    @property
    def status(self) -> str:
        """What was said last."""
        return self.app.said[-1][1]

    @property
    def page(self):  # type: ignore[no-untyped-def]
        """The screen, whatever lies over it."""
        return self.app.page

    async def cursor_on(self, code: str, column: str = "") -> None:
        """Put the cursor of the stocks screen on a cell."""
        grid = self.page.grid
        row = next(n for n, s in enumerate(self.page.rows) if s.code == code)
        at = next((n for n, c in enumerate(grid.columns) if c.code == column), grid.column)
        self.send(*["down" if row > grid.row else "up"] * abs(row - grid.row))
        self.send(*["right" if at > grid.column else "left"] * abs(at - grid.column))
        await self.settle()

    async def share_on(self, code: str) -> None:
        """Put the cursor of the recipe screen on a stock."""
        grid = self.page.shares
        row = next(n for n, r in enumerate(self.page.rows) if r.stock.code == code)
        self.send(*["down" if row > grid.row else "up"] * abs(row - grid.row))
        await self.settle()


Start = Callable[..., "AsyncIterator[Driver]"]


@asynccontextmanager
async def started(path: Path, size: tuple[int, int] = SIZES[0], *, screen: str = "") -> AsyncIterator[Driver]:
    """The console on a plant file, at rest on a screen."""
    with open_plant(path, who="anna", timeout=0.2) as plant, open_plant(path, who="ben", timeout=0.2) as other:
        app = Console(plant, today=TODAY, sheets=path.parent)
        async with app.run_test(size=size) as pilot:
            driver = Driver(app, pilot, other)
            await driver.settle()
            if screen:
                await driver.press(screen)
            yield driver


@pytest.fixture(params=SIZES, ids=lambda s: f"{s[0]}x{s[1]}")
def size(request: pytest.FixtureRequest) -> tuple[int, int]:
    """The smallest terminal and a roomy one."""
    return request.param
