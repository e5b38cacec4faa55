"""One table of commands: key line, help and palette are made from it, and every command does something."""

from __future__ import annotations

from pathlib import Path

import pytest

from blendtui import commands
from blendtui.app import Console, page_of

from .conftest import started

Size = tuple[int, int]
SCREENS = [code for code, _ in commands.SCREENS]


@pytest.mark.parametrize("screen", SCREENS)
def test_a_key_means_one_thing_on_a_screen(screen: str) -> None:
    keys = [key for command in commands.of(screen) for key in command.keys]
    assert len(keys) == len(set(keys))


def test_every_command_is_carried_out_by_its_screen_or_the_program() -> None:
    for command in commands.COMMANDS:
        if command.action == "move" or command.action.startswith("go_"):
            continue
        owners = [Console] if command.screen == commands.ALL else [type(page_of(command.screen))]
        assert any(hasattr(owner, f"do_{command.action}") for owner in owners), command


def test_labels_are_short_and_help_is_a_sentence() -> None:
    for command in commands.COMMANDS:
        assert len(command.label) <= 15, command
        assert command.help.endswith("."), command
        assert command.help[0].isupper(), command


@pytest.mark.parametrize("screen", SCREENS)
async def test_the_key_line_shows_the_screens_own_keys_and_help(path: Path, size: Size, screen: str) -> None:
    async with started(path, size, screen=commands.KEYS[screen]) as driver:
        line = driver.page.keys.text()
        assert "? help" in line
        assert "u undo" in line
        for command in commands.of(screen):
            if command.screen == screen and command.listed and (not command.late or size[0] >= 110):
                assert f"{command.key} {command.label}" in line, command


async def test_help_lists_every_command(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.press("?")
        said = " ".join("".join(t for t, _ in line) for line in driver.app.screen.page_text.lines)
        said = " ".join(said.split())
        for command in commands.COMMANDS:
            assert " ".join(f"{command.label}: {command.help}".split()) in said, command
        assert "Stocks" in driver.app.screen.page_text.text().splitlines()[0]
        await driver.press("pagedown", "up", "escape")
        assert driver.app.screen is driver.page


async def test_the_palette_lists_all_finds_and_carries_out(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.press(":")
        palette = driver.app.screen
        assert len(palette.found) == len([c for c in commands.COMMANDS if c.action != "move"])
        await driver.type("share rule", end="enter")
        assert driver.app.current_mode == "targets"
        assert "share of which stock" in driver.page.edit.text()
        await driver.press("escape", ":", "escape")
        assert driver.app.screen is driver.page


async def test_the_palette_can_be_walked_and_explains(path: Path) -> None:
    async with started(path) as driver:
        await driver.press("ctrl+p")
        await driver.type("sort", end="down")
        driver.send("up")
        await driver.settle()
        assert "a third time gives the plant's own" in " ".join(driver.app.screen.help_line.text().split())
        await driver.press("enter")
        assert driver.page.state.sort == "code"


async def test_keys_typed_ahead_of_a_screen_reach_it(path: Path) -> None:
    async with started(path) as driver:
        driver.send("3", "enter", *"40", "enter", "2", "tab", "enter", *"new name", "enter")
        await driver.settle()
        await driver.settle()
        assert 0.4 in driver.app.session.state.wishes.typed.values()
        assert driver.plant.product("H46").name == "new name"


async def test_a_key_without_a_meaning_says_so(path: Path) -> None:
    async with started(path) as driver:
        await driver.press("z")
        assert driver.page.status.message == "the key z does nothing here; ? lists those that do"


def test_the_caps_lock_does_not_matter() -> None:
    assert commands.find("stocks", "S", "S").action == "sort"
    assert commands.find("recipe", "l", "l").action == "law"
    assert commands.find("targets", "l", "l").action == "limit"
    assert commands.find("stocks", "J", "J") is None


async def test_messages_can_be_read_in_full(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        long = "a very long message that says what, where and what to do " * (16 if size == (80, 24) else 36)
        driver.app.say(long.strip(), "refused")
        assert "(! shows all)" in driver.page.status.text()
        await driver.press("!")
        shown = " ".join(driver.app.screen.page_text.text().split())
        assert long.strip() in shown
        await driver.press("escape")


async def test_escape_never_leaves_a_screen(path: Path) -> None:
    async with started(path) as driver:
        for key, screen in (("2", "targets"), ("4", "trials"), ("3", "recipe"), ("1", "stocks")):
            await driver.press(key, "escape")
            assert driver.app.current_mode == screen
            assert driver.page.status.message == "nothing to drop here; 1 to 9 and 0 open the screens, q leaves"


async def test_quit_leaves_at_once_when_all_is_saved(path: Path) -> None:
    async with started(path) as driver:
        driver.send("q")
        await driver.pilot.pause()
        assert not driver.app.is_running
        assert driver.app.return_code == 0
