"""The trials screen: reopen, set side by side, drop."""

from __future__ import annotations

from pathlib import Path

import pytest

from blendtui.desk import stocks as desk
from blendtui.desk.plant import open_plant
from blendtui.desk.trials import keep_trial
from blendtui.store.records import Trial

from .conftest import started

Size = tuple[int, int]


def kept(path: Path) -> None:
    """Five trials of one product."""
    with open_plant(path, who="ben") as plant:
        for n in range(5):
            shares = {"LIGHT": 0.6 - 0.02 * n, "HEAVY": 0.3 + 0.02 * n, "BRIGHT": 0.092, "PACK": 0.008}
            keep_trial(plant, Trial(f"T{n}", "H46", shares, "refutas", note="from the bench"))


async def test_up_to_four_trials_stand_side_by_side(path: Path, size: Size) -> None:
    kept(path)
    async with started(path, size, screen="4") as driver:
        assert "T0" in driver.page.trials.text()
        for _ in range(5):
            await driver.press("space", "down")
        assert "4 trials stand side by side already" in driver.status or "4 trials" in driver.page.status.message
        text = driver.page.comparison.text()
        head = text.splitlines()[0].split()
        assert head == ["compared", "A", "T0", "B", "T1", "C", "T2", "D", "T3"]
        row = next(line for line in text.splitlines() if line.startswith("LIGHT")).split()
        assert row[1:] == ["60.00", "58.00", "56.00", "54.00"]
        rows = {line[0]: line[1:] for line in driver.page.lines}
        assert len(set(rows["KV40, mm²/s"])) == 4
        assert "cost, /t" in rows


async def test_the_comparison_reads_todays_stocks(path: Path, size: Size) -> None:
    kept(path)
    async with started(path, size, screen="4") as driver:
        await driver.press("space")
        cost = {line[0]: line[1] for line in driver.page.lines}["cost, /t"]
        desk.edit_cell(driver.plant, "LIGHT", "price_per_t", "1000")
        driver.app._poll()
        await driver.settle()
        assert {line[0]: line[1] for line in driver.page.lines}["cost, /t"] == f"{float(cost) + 120:.2f}"


async def test_a_trial_is_reopened_by_hand(path: Path, size: Size) -> None:
    kept(path)
    async with started(path, size, screen="4") as driver:
        await driver.press("down", "enter")
        assert driver.app.current_mode == "recipe"
        assert driver.app.session.shown.shares["LIGHT"] == pytest.approx(0.58)
        assert driver.app.session.shown.status == "by hand"
        assert "trial T1 on today's stocks" in driver.status
        await driver.press("escape")
        assert driver.app.current_mode == "recipe"


async def test_a_trial_is_dropped_and_brought_back(path: Path, size: Size) -> None:
    kept(path)
    async with started(path, size, screen="4") as driver:
        await driver.press("d")
        assert [t.name for t in driver.plant.trials("H46")] == ["T1", "T2", "T3", "T4"]
        await driver.press("u")
        assert len(driver.plant.trials("H46")) == 5


async def test_a_trial_of_a_stock_that_is_gone_says_so(path: Path) -> None:
    kept(path)
    async with started(path) as driver:
        await driver.cursor_on("BRIGHT")
        await driver.press("d", "4", "space")
        assert "no stock BRIGHT any more" in driver.page.comparison.text()


async def test_without_trials_the_screen_says_how_to_keep_one(path: Path, size: Size) -> None:
    async with started(path, size, screen="4") as driver:
        assert "on the screen Recipe, k keeps the blend that is shown" in driver.text()
        await driver.press("enter", "space", "d", "tab", "down")
        assert driver.app.current_mode == "trials"
