"""Answers come from threads: a late one is dropped, the screen goes on, and leaving loses nothing."""

from __future__ import annotations

import threading
from pathlib import Path

import pytest

from blendtui import app as console_app
from blendtui.app import Console
from blendtui.desk import answers
from blendtui.desk import stocks as desk
from blendtui.store.errors import PlantBusy
from solver.errors import TargetError

from .conftest import Driver, started


class Slow:
    """answers.answer that can be told to hold the answers to a product back until they are let go."""

    def __init__(self, held_back: str) -> None:
        self.held_back = held_back
        self.began, self.go, self.ended = threading.Event(), threading.Event(), threading.Event()

    def __call__(self, plant, stocks, wishes, before=None):  # type: ignore[no-untyped-def]
        found = answers.answer(plant, stocks, wishes, before)
        if wishes.product == self.held_back and not self.ended.is_set():
            self.began.set()
            assert self.go.wait(20)
            self.ended.set()
        return found


async def until(driver: Driver, event: threading.Event) -> None:
    """Let the console run until a thread has got somewhere."""
    for _ in range(500):
        if event.is_set():
            return
        await driver.pilot.pause()
    raise AssertionError("the thread did not get there")


async def test_a_late_answer_never_overwrites_a_newer_one(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    async with started(path, screen="3") as driver:
        slow = Slow("G220")
        monkeypatch.setattr(Console, "answer_of", staticmethod(slow))
        driver.send("]")
        await until(driver, slow.began)
        driver.send("]")
        await until(driver, slow.began)
        while driver.app.session.state.waiting:
            await driver.pilot.pause()
        newer = driver.app.session.shown
        assert driver.app.session.state.answer.wishes.product == "NEVER"
        slow.go.set()
        await driver.settle()
        assert slow.ended.is_set()
        assert driver.app.session.shown is newer
        assert "NEVER" in driver.page.title_line.text()
        assert "! no blend meets it" in driver.page.head.text()


async def test_the_screen_goes_on_while_an_answer_is_worked_out(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    async with started(path) as driver:
        slow = Slow("G220")
        monkeypatch.setattr(Console, "answer_of", staticmethod(slow))
        driver.send("]")
        await until(driver, slow.began)
        driver.send("down", "down", "right")
        await driver.pilot.pause()
        assert (driver.page.grid.row, driver.page.grid.column) == (2, 1)
        assert "working out the recipe" in driver.page.answer.text()
        slow.go.set()
        await driver.settle()
        assert "G220: least cost" in driver.page.answer.text()


async def test_no_answer_is_told_with_its_reason(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*args: object) -> None:
        raise TargetError("the rules contradict each other; mend one")

    async with started(path, screen="3") as driver:
        monkeypatch.setattr(Console, "answer_of", staticmethod(refuse))
        await driver.press("L")
        assert "! the rules contradict each other; mend one" in driver.page.head.text()
        monkeypatch.undo()
        await driver.press("u")
        assert "least cost, proven" in driver.page.head.text()


async def test_a_fault_of_the_program_is_a_line_and_not_the_end(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def break_down(*args: object) -> None:
        raise ZeroDivisionError("division by zero")

    async with started(path, screen="3") as driver:
        monkeypatch.setattr(Console, "answer_of", staticmethod(break_down))
        await driver.press("L")
        assert "a fault of this program (ZeroDivisionError" in driver.page.head.text()
        assert driver.app.is_running


class Held:
    """desk.edit_cell that waits, as for another writer."""

    def __init__(self, fails: bool = False) -> None:
        self.began, self.go = threading.Event(), threading.Event()
        self.real, self.fails = desk.edit_cell, fails

    def __call__(self, *args, **kwargs):  # type: ignore[no-untyped-def]
        self.began.set()
        assert self.go.wait(20)
        if self.fails:
            raise PlantBusy("carla has been writing the plant for more than 5 s; try again", who="carla")
        return self.real(*args, **kwargs)


async def test_keys_that_change_wait_for_the_edit_before_and_moves_do_not(path: Path,
                                                                         monkeypatch: pytest.MonkeyPatch) -> None:
    async with started(path) as driver:
        held = Held()
        monkeypatch.setattr(desk, "edit_cell", held)
        await driver.cursor_on("LIGHT", "price_per_t")
        driver.send("enter", *"810", "enter")
        await until(driver, held.began)
        driver.send("down")
        await driver.pilot.pause()
        assert driver.page.grid.row == 1
        driver.send("enter", *"880", "enter")
        await driver.pilot.pause()
        assert not driver.page.edit.active
        held.go.set()
        await driver.settle()
        assert driver.plant.stock("LIGHT").price_per_t == 810.0
        assert driver.plant.stock("HEAVY").price_per_t == 880.0


async def test_an_edit_that_could_not_be_saved_comes_back_to_the_line(path: Path,
                                                                      monkeypatch: pytest.MonkeyPatch) -> None:
    async with started(path) as driver:
        held = Held(fails=True)
        monkeypatch.setattr(desk, "edit_cell", held)
        held.go.set()
        await driver.cursor_on("LIGHT", "price_per_t")
        await driver.press("enter")
        await driver.type("810")
        assert driver.status.startswith("carla has been writing")
        assert driver.page.edit.typing.text == "810"


async def test_leaving_waits_for_the_last_change(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    async with started(path) as driver:
        held = Held()
        monkeypatch.setattr(desk, "edit_cell", held)
        await driver.cursor_on("LIGHT", "price_per_t")
        driver.send("enter", *"810", "enter")
        await until(driver, held.began)
        driver.send("q")
        await driver.pilot.pause()
        assert driver.app.is_running
        assert "leaving as soon as the last change is saved" in driver.page.status.message
        held.go.set()
        for _ in range(200):
            if not driver.app.is_running:
                break
            await driver.pilot.pause()
        assert not driver.app.is_running
        assert driver.plant.stock("LIGHT").price_per_t == 810.0


async def test_leaving_while_typing_asks_first(path: Path) -> None:
    async with started(path) as driver:
        await driver.cursor_on("LIGHT", "price_per_t")
        await driver.press("enter")
        driver.send(*"81")
        await driver.press("ctrl+q")
        assert driver.app.is_running
        assert "Enter keeps it, Esc drops it" in driver.status
        assert driver.page.edit.typing.text == "81"


async def test_a_closed_terminal_keeps_typed_shares_as_a_trial(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    ended: list[int] = []
    async with started(path, screen="3") as driver:
        await driver.press("enter")
        await driver.type("41")
        monkeypatch.setattr(console_app.os, "_exit", ended.append)
        driver.app._hung_up()
        assert ended == [129]
        trial = driver.plant.trials("H46")[0]
        assert trial.name.startswith("unfinished ")
        assert trial.shares[driver.page.rows[0].stock.code] == pytest.approx(0.41)
