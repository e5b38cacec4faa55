"""The screen Sure: chances of the blend that is shown, and recipes at a chance."""

from __future__ import annotations

from pathlib import Path

import pytest

from blendtui.desk.chance import Report

from .conftest import Driver, started

Size = tuple[int, int]


def report(driver: Driver) -> Report:
    found = driver.page.report
    assert isinstance(found, Report)
    return found


def chances(driver: Driver) -> dict[str, float]:
    return {x.property: x.chance for x in report(driver).chances.limits}


async def test_the_whole_report_is_there(path: Path, size: Size) -> None:
    async with started(path, size, screen="7") as driver:
        found = report(driver)
        assert found.tested
        assert found.chances.blends == 100_000
        assert len(found.offers or ()) == 3
        assert "Chance that the first batch is right" in driver.text()
        assert "all limits together" in driver.text()
        lines = ["".join(t for t, _ in line) for line in driver.page.text.lines]
        assert all(len(line) <= size[0] for line in lines)
        for word in ("What the doubt is made of", "What to test next", "What more certainty costs"):
            assert any(word in line for line in lines)
        assert not any("working" in line for line in lines)


async def test_the_report_follows_the_blend_that_is_shown(path: Path) -> None:
    async with started(path, screen="7") as driver:
        least = chances(driver)
        await driver.press("3", "t")
        await driver.share_on("LIGHT")
        await driver.press("enter")
        await driver.type("50")
        await driver.press("7")
        assert report(driver).chances.shares["LIGHT"] == pytest.approx(0.5 / sum(
            driver.app.session.state.wishes.typed.values()))
        assert chances(driver) != least
        await driver.press("3", "b", "7")
        assert chances(driver) == least


async def test_an_edit_of_a_stock_is_followed(path: Path) -> None:
    async with started(path, screen="7") as driver:
        sigma = {x.property: x.sigma for x in report(driver).chances.limits}
        await driver.press("1")
        await driver.cursor_on("LIGHT", "source")
        await driver.press("enter")
        await driver.type("typical")
        await driver.press("7")
        assert {x.property: x.sigma for x in report(driver).chances.limits}["kv40"] > 1.5 * sigma["kv40"]


async def test_c_steps_through_the_chances_and_back(path: Path, size: Size) -> None:
    async with started(path, size, screen="7") as driver:
        for asked in (0.9, 0.95, 0.99):
            await driver.press("c")
            assert driver.app.session.state.wishes.confidence == asked
            assert f"asked: each limit with a chance of {100 * asked:g} %" in driver.status
            if driver.app.session.shown.status != "infeasible":
                assert min(chances(driver).values()) >= asked - 0.005
        await driver.press("c")
        assert driver.app.session.state.wishes.confidence is None
        await driver.press("c", "u")
        assert driver.app.session.state.wishes.confidence is None


async def test_a_chance_is_typed_and_a_bad_one_comes_back(path: Path) -> None:
    async with started(path, screen="7") as driver:
        await driver.press("s")
        await driver.type("80%")
        assert driver.app.session.state.wishes.confidence == pytest.approx(0.8)
        await driver.press("s")
        await driver.type("120")
        assert "a chance of 120 % cannot be asked; choose 50 to 99.9 %" in driver.status
        assert driver.page.edit.active
        await driver.press("escape", "s", "ctrl+u")
        await driver.type("")
        assert driver.app.session.state.wishes.confidence is None


async def test_t_takes_the_shares(path: Path) -> None:
    async with started(path, screen="7") as driver:
        await driver.press("c", "t")
        assert driver.page.NAME == "recipe"
        assert driver.app.session.state.wishes.typed == dict(driver.app.session.shown.shares)
        await driver.press("u")
        assert driver.app.session.state.wishes.typed is None


async def test_what_cannot_be_made_is_spoken_of_as_the_nearest(path: Path) -> None:
    async with started(path, screen="7") as driver:
        await driver.press("]", "]")
        assert driver.app.session.product == "NEVER"
        assert "likely missed" in driver.text()
