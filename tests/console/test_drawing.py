"""What is sent: only what changed, whole characters, and only what the terminal can draw."""

from __future__ import annotations

from pathlib import Path

import pytest

from blendtui.screens.recipe_view import ShareRow, bar
from blendtui.widgets import paint
from blendtui.widgets.canvas import changed, strip_of
from blendtui.widgets.edit_line import Typing, typed
from blendtui.widgets.grid import Column, Grid, more_only
from blendtui.widgets.paint import BOLD, CURSOR, cells, fit, look_of
from solver.stocks import Stock

from .conftest import started


def test_only_what_differs_is_sent_and_near_changes_together() -> None:
    before = cells([("abc" + " " * 30 + "xyz", None)], 40)
    after = cells([("aBc" + " " * 30 + "xyZ", None)], 40)
    assert changed(before, after) == [(1, 2), (35, 36)]
    near = cells([("aBcD", None)], 40)
    assert changed(cells([("abcd", None)], 40), near) == [(1, 4)]


def test_a_style_is_a_change_too() -> None:
    assert changed(cells([("cell", None)], 6), cells([("cell", CURSOR)], 6)) == [(0, 4)]


def test_a_wide_character_is_never_cut() -> None:
    before, after = cells([("a油b", None)], 6), cells([("a水b", None)], 6)
    assert changed(before, after) == [(1, 3)]
    assert cells([("ab油", None)], 3)[2] == (" ", None)
    assert strip_of(after, [1, 3]).text == "a水b  "


def test_text_is_fitted_to_columns() -> None:
    assert fit("heavy neutral", 8) == "heavy n…"
    assert fit("油油油", 5) == "油油…"
    assert fit("油", 4, "right") == "  油"
    assert fit("x", 0) == ""


@pytest.mark.parametrize(("environment", "ascii", "colour"), [
    ({"TERM": "xterm-256color", "LANG": "de_DE.UTF-8"}, False, True),
    ({"TERM": "xterm-256color", "LANG": "C.UTF-8", "NO_COLOR": "1"}, False, False),
    ({"TERM": "vt100", "LC_ALL": "C"}, True, False),
    ({"TERM": "xterm", "LC_ALL": "POSIX", "LANG": "C.UTF-8"}, True, True),
    ({"TERM": "vt220", "LANG": "C.UTF-8"}, True, False)])
def test_the_look_follows_the_terminal(environment: dict[str, str], ascii: bool, colour: bool) -> None:
    look = look_of(environment)
    assert (look.ascii, look.colour) == (ascii, colour)


@pytest.mark.parametrize("keys", ["1234"])
async def test_a_plain_terminal_gets_plain_characters_in_the_same_columns(path: Path, keys: str) -> None:
    async with started(path) as driver:
        for key in keys:
            await driver.press(key)
            fancy = driver.text()
            paint.adopt({"TERM": "vt100", "LC_ALL": "C"})
            plain = driver.text()
            paint.adopt({"TERM": "xterm", "LANG": "C.UTF-8"})
            assert plain.isascii()
            assert [len(line) for line in plain.splitlines()] == [len(line) for line in fancy.splitlines()]


def test_without_colour_bold_remains() -> None:
    paint.adopt({"TERM": "xterm", "LANG": "C.UTF-8", "NO_COLOR": "1"})
    assert paint.coloured(paint.BAD) == BOLD
    assert paint.coloured(CURSOR) == CURSOR


def test_bars_show_the_range_and_the_share() -> None:
    def row(share: float, low: float, high: float) -> ShareRow:
        return ShareRow(Stock("A"), share, "", "", (low, high))

    assert bar(row(0.5, 0.25, 0.75), 1.0, 8) == "··██◆██·"
    assert bar(row(0.0, 0.0, 0.0), 1.0, 8) == "········"
    assert bar(row(0.002, 0.002, 0.002), 1.0, 8) == "◆·······"
    assert bar(row(1.0, 0.0, 1.0), 1.0, 8) == "███████◆"


def test_typing_takes_the_place_of_the_whole_text_first() -> None:
    now = Typing("price", "800", 3, whole=True)
    assert typed(now, "9", "9").text == "9"
    assert typed(now, "backspace", None).text == ""
    assert typed(now, "left", None) == Typing("price", "800", 2)
    kept = typed(now, "end", None)
    assert typed(kept, "5", "5").text == "8005"
    assert typed(typed(kept, "home", None), "delete", None).text == "00"
    assert typed(kept, "ctrl+u", None).text == ""
    assert typed(kept, "escape", None) == kept


async def test_pasted_text_has_no_control_characters(path: Path) -> None:
    async with started(path) as driver:
        await driver.cursor_on("LIGHT", "name")
        await driver.press("enter")
        driver.page.edit.paste("tank\x1b 7\n")
        assert driver.page.edit.typing.text == "tank  7"
        await driver.press("escape")


async def test_a_small_terminal_and_a_resize_do_not_end_it(path: Path) -> None:
    async with started(path, (40, 10), screen="3") as driver:
        await driver.press("1", "2", "3", "4", "?", "escape", ":", "escape")
        await driver.pilot.resize_terminal(132, 50)
        await driver.settle()
        await driver.press("3")
        assert "least cost, proven" in driver.page.head.text()
        await driver.pilot.resize_terminal(80, 24)
        await driver.settle()
        assert driver.page.keys.size.width == 80


def test_a_grid_without_texts_in_its_foot_says_how_much_is_out_of_sight() -> None:
    grid = Grid(id="any")
    grid.columns, grid.count, grid.foot = (Column("what", "what", "", 10, "left"),), 12, more_only
    grid.cell = lambda row, column: f"row {row}"
    lines = ["".join(run[0] for run in line).rstrip() for line in grid.draw(40, 6)]
    assert lines == ["what", "row 0", "row 1", "row 2", "row 3", "↓ 8 more"]
