"""Wishes on the recipe screen: several laws at once, whole steps, a chance; each taken back with u."""

from __future__ import annotations

from pathlib import Path

import pytest

from solver.target import LAWS

from .conftest import started

Size = tuple[int, int]


async def test_every_law_at_once_costs_more_and_is_taken_back(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        before = driver.app.session.shown.cost_per_t
        await driver.press("a", "enter")
        assert driver.app.session.state.wishes.also_laws == LAWS
        assert driver.app.session.shown.cost_per_t > before
        said = " ".join("".join(t for t, _ in line) for line in driver.page.notes.lines)
        assert "KV40 under" in said
        await driver.press("u")
        assert driver.app.session.shown.cost_per_t == pytest.approx(before)


async def test_some_laws_by_the_beginning_of_their_name(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        await driver.press("a")
        await driver.type("wright")
        assert driver.app.session.state.wishes.also_laws == ("wright-mass", "wright-volume")
        await driver.press("a")
        await driver.type("newton", end="enter")
        assert "is no law" in driver.status


async def test_whole_steps_sum_to_what_is_shown(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        await driver.press("i")
        shown = driver.app.session.shown
        assert shown.status in ("optimal", "stopped")
        assert sum(shown.charges_kg.values()) == pytest.approx(shown.batch_kg)
        assert "whole steps" in driver.page.head.text()
        await driver.press("u")
        assert not driver.app.session.state.wishes.whole


async def test_a_chance_is_typed_and_nonsense_comes_back(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        await driver.press("s")
        await driver.type("lots")
        assert "lots" in driver.status
        driver.send("ctrl+u")
        await driver.type("90")
        assert driver.app.session.state.wishes.confidence == pytest.approx(0.9)
        assert "chance of 90 %" in driver.page.head.text() or driver.app.session.shown.status == "infeasible"
        await driver.press("s")
        driver.send("ctrl+u")
        await driver.type("")
        assert driver.app.session.state.wishes.confidence is None


async def test_a_what_if_is_marked_until_it_is_cleared(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        for _ in range(2):
            await driver.press("right_square_bracket")
        assert driver.app.session.shown.status == "infeasible"
        await driver.press("5", "t")
        assert driver.app.session.state.wishes.moved
        assert driver.app.session.shown.status == "optimal"
        said = " ".join("".join(t for t, _ in line) for line in driver.page.notes.lines)
        assert "what-if, not what the product asks" in " ".join(said.split())
        await driver.press("c")
        assert not driver.app.session.state.wishes.moved
        await driver.press("u")
        assert driver.app.session.state.wishes.moved
