"""Two people at one plant file: what one does is seen by the other, and nothing is overwritten in silence."""

from __future__ import annotations

from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from pathlib import Path

import pytest

from blendtui import app as console_app
from blendtui.app import Console
from blendtui.desk import charging
from blendtui.desk import stocks as desk
from blendtui.desk.plant import open_plant
from blendtui.store.errors import PlantError
from blendtui.widgets.canvas import Canvas

from .conftest import TODAY, Driver, started
from .floor_case import HEAVY, LIGHT, PACK, TOTAL, planned, with_batch

Size = tuple[int, int]


@pytest.fixture
def path(path: Path) -> Path:
    """The small plant with a kettle and a planned batch."""
    with_batch(path)
    return path


@asynccontextmanager
async def second(path: Path, who: str = "ben") -> AsyncIterator[Driver]:
    """A second console on the same file."""
    with open_plant(path, who=who, timeout=0.2) as plant:
        app = Console(plant, today=TODAY, sheets=path.parent)
        async with app.run_test(size=(80, 24)) as pilot:
            driver = Driver(app, pilot, plant)
            await driver.settle()
            await driver.press("0")
            yield driver


def test_the_others_change_is_looked_for_often_enough() -> None:
    assert console_app.POLL <= 1.5  # the sight of it within 2 s is promised


async def test_two_at_one_floor_see_each_others_charges(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as anna, second(path) as ben:
        await anna.press("enter")
        await anna.type(f"{LIGHT:g}")
        ben.app._poll()
        await ben.settle()
        assert "anna changed the plant: B-0001 line 1" in ben.status
        assert "to charge, 2 of 3 left" in ben.page.head.text()
        assert ben.page.charges.row == 1
        await ben.press("enter")
        await ben.type(f"{HEAVY:g}")
        anna.app._poll()
        await anna.settle()
        assert [c.by for c in anna.page.seen.made.charged] == ["anna", "ben"]


async def test_the_second_to_charge_a_line_is_told_who_did_it(path: Path) -> None:
    async with started(path, screen="0") as anna, second(path) as ben:
        await anna.press("enter")
        await ben.press("enter")
        await ben.type(f"{LIGHT + 5:g}")
        await anna.type(f"{LIGHT:g}")
        assert "ben charged 8955 kg of LIGHT on line 1 at " in anna.status
        assert anna.page.edit.typing.text == "8950"
        assert anna.plant.batch("B-0001").charges[0].actual_kg == LIGHT + 5
        assert anna.plant.stock("LIGHT").on_hand_kg == 60000.0 - LIGHT - 5
        await anna.press("escape")
        assert anna.plant.verify() is None


async def test_what_another_does_while_one_types_leaves_the_line_alone(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as anna:
        await anna.press("enter")
        anna.send(*"89")
        await anna.settle()
        charging.charge(anna.plant, "B-0001", 3, PACK)
        anna.app._poll()
        await anna.settle()
        assert anna.page.edit.typing.text == "89"
        await anna.type("50")
        made = anna.plant.batch("B-0001")
        assert [(c.actual_kg, c.by) for c in made.charges] == [(LIGHT, "anna"), (None, ""), (PACK, "ben")]


async def test_one_does_not_undo_what_another_has_built_upon(path: Path) -> None:
    async with started(path, screen="0") as anna:
        await anna.press("enter")
        await anna.type(f"{LIGHT:g}")
        charging.check(anna.plant, "B-0001", 1, by="ben")
        await anna.press("u")
        assert "ben" in anna.status
        assert anna.plant.batch("B-0001").charges[0].actual_kg == LIGHT


async def test_what_did_not_change_is_not_drawn_again(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    async with started(path, screen="0") as anna:
        drawn: list[str] = []
        whole = Canvas.refresh

        def refresh(canvas: Canvas, *regions, **more):  # type: ignore[no-untyped-def]
            drawn.append(str(canvas.id))
            return whole(canvas, *regions, **more)

        monkeypatch.setattr(Canvas, "refresh", refresh)
        anna.app._poll()
        await anna.settle()
        assert drawn == []
        desk.edit_cell(anna.plant, "BRIGHT", "price_per_t", "1200")
        anna.app._poll()
        await anna.settle()
        assert set(drawn) <= {"status"}


async def test_a_batch_that_another_orders_comes_into_the_list(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as anna:
        assert [b.batch for b in anna.page.rows] == ["B-0001"]
        planned(anna.plant, "B-0002")
        anna.app._poll()
        await anna.settle()
        assert {b.batch for b in anna.page.rows} == {"B-0001", "B-0002"}
        assert anna.page.batch.batch == "B-0001"


async def test_the_same_oil_is_not_promised_twice(path: Path) -> None:
    with open_plant(path, who="ben") as ben:
        desk.edit_cell(ben, "LIGHT", "on_hand_kg", "12000", confirmed=True)
        with pytest.raises(PlantError, match="B-0001"):
            planned(ben, "B-0002")
        assert [b.batch for b in ben.batches()] == ["B-0001"]
        assert ben.batch("B-0001").head.batch_kg == TOTAL
