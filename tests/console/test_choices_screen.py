"""The screen of what else would do: aims marked and taken, parts as they come, sweeps drawn and stopped."""

from __future__ import annotations

import asyncio
import re
from pathlib import Path

import pytest

from blendtui.desk import choices as desk
from blendtui.desk.plant import open_plant
from blendtui.desk.trials import keep_trial
from blendtui.screens import choices as screen
from blendtui.store.records import Trial
from blendtui.widgets import paint

from .conftest import Driver, started

Size = tuple[int, int]


def lines_of(driver: Driver) -> list[str]:
    return ["".join(text for text, _ in line) for line in driver.page.text.lines]


def report_of(driver: Driver) -> str:
    return "\n".join(lines_of(driver))


def marked(driver: Driver) -> str:
    (line,) = [line for line in lines_of(driver) if "▸" in line]
    return line


async def test_everything_is_worked_out_and_fits_the_width(path: Path, size: Size) -> None:
    async with started(path, size, screen="6") as driver:
        text = report_of(driver)
        heads = [line[0][0].split(",")[0].split()[0] for line in driver.page.text.lines if line[0][1] is paint.BOLD]
        assert heads == ["OTHER", "WHAT", "RANGES", "AT", "HOW"]
        assert driver.page.done
        assert "working out" not in text
        assert max(map(len, lines_of(driver))) < size[0]
        assert driver.text().splitlines()[0].startswith(" 1 Stocks")
        assert "widest margin" in driver.text()
        differ = [a for a in driver.page.report.aims if a.recipe and max(a.recipe.spread_pct.values()) > 10.0]
        assert len(differ) == text.count("the laws differ widely: a laboratory blend is needed")
        assert bool(differ) == ("p on the screen Lab, plans a laboratory blend" in text)


async def test_an_aim_is_marked_taken_and_taken_back(path: Path, size: Size) -> None:
    async with started(path, size, screen="6") as driver:
        assert "least cost" in marked(driver)
        await driver.press("n", "n")
        assert "fewest stocks" in marked(driver)
        await driver.press("p")
        assert "widest margin" in marked(driver)
        assert driver.page.status.message == "widest margin: t takes it"
        aim = driver.page.report.aims[1]
        before = driver.app.session.state.wishes
        await driver.press("t")
        assert driver.app.current_mode == "recipe"
        assert driver.app.session.shown.status == "by hand"
        assert driver.app.session.shown.shares == pytest.approx(dict(aim.recipe.shares))
        assert driver.app.session.shown.meets_all
        assert "widest margin taken" in driver.status
        await driver.press("u")
        assert driver.app.session.state.wishes == before
        await driver.press("6", "p")
        assert "least cost" in marked(driver)


async def test_marks_go_round_and_stay_in_sight(path: Path, size: Size) -> None:
    async with started(path, size, screen="6") as driver:
        for _ in range(8):
            await driver.press("n")
            at = lines_of(driver).index(marked(driver))
            assert driver.page.text.top <= at < driver.page.text.top + driver.page.text.size.height
            assert marked(driver) in driver.text()
        assert "least cost" in marked(driver)


async def test_an_aim_without_a_blend_says_why(path: Path) -> None:
    async with started(path, screen="6") as driver:
        await driver.press("p", "t")
        assert driver.app.current_mode == "choices"
        assert driver.page.status.message == "most rework: no rework may serve"


async def test_a_cost_cap_the_stock_and_the_trial(path: Path, size: Size) -> None:
    with open_plant(path, who="ben") as plant:
        for name, share in (("may", 0.5), ("june", 0.3)):
            keep_trial(plant, Trial(name, "H46", {"CLEAN": share, "HEAVY": 0.992 - share, "PACK": 0.008}))
    async with started(path, size, screen="6") as driver:
        await driver.press("c")
        assert "OTHER AIMS, within 1 % of the least cost" in report_of(driver)
        assert all(a.extra_pct <= 1.0 + 1e-3 for a in driver.page.report.aims if a.recipe)
        assert driver.page.report.ranges is not None  # the rest need not be worked out again
        await driver.press("c", "c", "c")
        assert "at any cost the product allows" in report_of(driver)
        stock = next(a.of for a in driver.page.report.aims if a.name == "most-of")
        await driver.press("o")
        other = next(a.of for a in driver.page.report.aims if a.name == "most-of")
        assert other != stock
        assert f"most of {other}" in report_of(driver)
        trial = next(a.of for a in driver.page.report.aims if a.name == "closest")
        await driver.press("k")
        assert next(a.of for a in driver.page.report.aims if a.name == "closest") != trial
        assert {trial, next(a.of for a in driver.page.report.aims if a.name == "closest")} == {"may", "june"}


async def test_shares_typed_by_hand_do_not_set_it_going_again(path: Path) -> None:
    async with started(path, screen="6") as driver:
        number = driver.page.request
        await driver.press("n", "t", "6")
        assert driver.page.request == number
        await driver.press("]")
        assert driver.page.request == number + 1


async def test_nothing_fits(path: Path, size: Size) -> None:
    async with started(path, size, screen="6") as driver:
        await driver.press("]", "]")
        assert driver.app.session.product == "NEVER"
        assert "no blend meets every limit" in report_of(driver)
        await driver.press("n", "t", "o", "k", "c")
        assert driver.app.current_mode == "choices"


async def test_a_sweep_stands_above_with_its_numbers(path: Path, size: Size) -> None:
    async with started(path, size, screen="6") as driver:
        await driver.press("s")
        await driver.type("vi low 85 125")
        assert lines_of(driver)[0] == "least cost, per t, against viscosity index, at least, its guard in it"
        seen = driver.text()
        assert "•" in seen
        assert "↑ now 93 " in seen
        (ends,) = [line.split() for line in seen.splitlines() if "↑ now" in line]
        assert (ends[0], ends[-1]) == ("85", "125")
        numbers = [line for line in lines_of(driver) if re.match(r" +\d+(\.\d)? +(\d+\.\d\d|–)", line)]
        assert len(numbers) == 60
        assert "no blend" in report_of(driver)
        assert "OTHER AIMS" in report_of(driver)
        assert "sweep done" in driver.page.status.message
        await driver.press("s", "ctrl+u", "enter")
        assert "against viscosity index" not in report_of(driver)


async def test_a_sweep_of_a_price_in_plain_ascii(path: Path) -> None:
    paint.adopt({"TERM": "vt100", "LANG": "C"})
    async with started(path, screen="6") as driver:
        await driver.press("s")
        await driver.type("price light")
        seen = driver.text()
        assert "against the price of LIGHT, per t" in seen
        assert "*" in seen
        assert "^ now 800.00" in seen
        assert seen.isascii()
        assert "?" not in "\n".join(seen.splitlines()[:-3])


@pytest.mark.parametrize("key", ["s", "escape"])
async def test_a_sweep_starts_at_once_and_is_stopped(path: Path, monkeypatch: pytest.MonkeyPatch, key: str) -> None:
    drawn = asyncio.Event()
    loop = asyncio.get_running_loop()

    def waiting(*args, stale, **more):  # type: ignore[no-untyped-def]
        for n, found in enumerate(desk.swept(*args, stale=stale, **more)):
            yield found
            if n == 3:
                loop.call_soon_threadsafe(drawn.set)
                while not stale():
                    pass

    monkeypatch.setattr(screen, "swept", waiting)
    async with started(path, screen="6") as driver:
        await driver.press("s")
        driver.send("enter")
        await drawn.wait()
        await driver.pilot.pause()
        assert driver.page.sweeping
        assert any("s or Esc stops it" in line for line in lines_of(driver))
        assert "•" in driver.text()
        await driver.press(key)
        assert not driver.page.sweeping
        assert "sweep stopped" in driver.page.status.message
        assert not any("s or Esc stops it" in line for line in lines_of(driver))


async def test_what_cannot_be_swept_is_said_in_a_line(path: Path, size: Size) -> None:
    async with started(path, size, screen="6") as driver:
        for typed, told in (("vj low", "unknown property 'vj'"), ("price", "is no sweep"),
                            ("price GONE", "no stock 'GONE'"), ("vi low a b", "a")):
            if not driver.page.edit.active:
                await driver.press("s")
            await driver.press("ctrl+u")
            await driver.type(typed)
            assert told in driver.status
            assert not driver.page.sweeping
            assert driver.page.edit.typing.text == typed  # it comes back to the line
        await driver.press("escape")
        assert not driver.page.edit.active


async def test_a_sweep_goes_with_its_target(path: Path) -> None:
    async with started(path, screen="6") as driver:
        await driver.press("s")
        await driver.type("vi low")
        await driver.press("]")
        assert "against" not in report_of(driver)
        assert "OTHER AIMS" in report_of(driver)
