"""What an operator must never miss, lose or set going by accident."""

from __future__ import annotations

import dataclasses
from datetime import date
from pathlib import Path

import pytest
from textual import events

from blendtui.desk import stocks as desk
from blendtui.desk.plant import open_plant
from blendtui.desk.trials import keep_trial
from blendtui.screens import recipe_view as view
from blendtui.screens import words
from blendtui.store.records import Trial
from blendtui.widgets.edit_line import cut
from blendtui.widgets.page_text import PageText
from blendtui.widgets.pasting import Cleaner, Reader
from solver.errors import TargetError
from solver.recipe import LimitResult

from .conftest import Driver, started

Size = tuple[int, int]


def said(driver: Driver) -> list[str]:
    """Every line of limits and remarks."""
    return ["".join(text for text, _ in line) for line in driver.page.notes.lines]


async def by_hand(driver: Driver, code: str, share: str, filled: str) -> None:
    """Type one share, and fill another up to 100 %."""
    await driver.share_on(code)
    await driver.press("enter")
    await driver.type(share)
    await driver.share_on(filled)
    await driver.press("f")


async def test_shares_that_break_a_rule_are_never_inside(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        await by_hand(driver, "PACK", "0.2", "LIGHT")
        assert driver.app.session.shown.breaches
        assert "! by hand, breaks the product's rules" in driver.page.head.text()
        assert "inside all limits" not in driver.text()
        assert said(driver)[0].startswith("! PACK 0.20 %, the product asks")
        row = next(line for line in driver.page.shares.text().splitlines() if line.startswith("PACK"))
        assert row.split()[1] == "!"
        await driver.press("1")
        assert "breaks the product's rules" in driver.page.answer.text()


async def test_the_comparison_tells_broken_rules(path: Path, size: Size) -> None:
    with open_plant(path, who="ben") as plant:
        keep_trial(plant, Trial("bare", "H46", {"LIGHT": 0.6, "HEAVY": 0.4}))
    async with started(path, size, screen="4") as driver:
        await driver.press("space")
        rows = {line[0]: line[1:] for line in driver.page.lines}
        assert rows["rules"] == ("! 1 broken",)
        assert driver.page.lines[0][0].startswith("! A bare: PACK 0.00 %")


async def test_rows_follow_the_shown_recipe_and_add_up(path: Path, size: Size) -> None:
    async with started(path, size, screen="3") as driver:
        for key in ("n", "n", "t"):
            await driver.press(key)
            shares = [row.share for row in driver.page.rows]
            assert shares == sorted(shares, reverse=True)
            total = next(x for x in driver.page.shares.text().splitlines() if x.startswith("total")).split()
            assert total[1:3] == ["100.00", "15000"]


async def test_rows_below_the_fold_are_counted(path: Path) -> None:
    with open_plant(path, who="ben") as plant:
        for n in range(12):
            desk.copy_stock(plant, "CLEAN", f"C{n}")
    async with started(path, screen="3") as driver:
        grid = driver.page.shares
        assert f"↓ {grid.count - grid.room} more" in grid.text()
        await driver.press("ctrl+end")
        assert f"↑ {grid.top} more" in grid.text()
        assert "↓" not in grid.text()


async def test_remarks_begin_at_the_top_of_another_recipe(path: Path) -> None:
    async with started(path, screen="3") as driver:
        for key in ("n", "t", "b", "]"):
            await driver.press("tab", "end")
            assert driver.page.notes.top > 0
            assert driver.page.notes.text().startswith("↑ ")
            await driver.press("tab", key)
            assert driver.page.notes.top == 0


def test_moved_text_says_what_is_out_of_sight_on_both_sides() -> None:
    page = PageText(id="text")
    page.lines, page.top = [[(str(n), None)] for n in range(20)], 5
    drawn = ["".join(t for t, _ in line).strip() for line in page.draw(40, 6)]
    assert drawn[0] == "↑ 6 more lines"
    assert drawn[1:5] == ["6", "7", "8", "9"]
    assert drawn[5].startswith("↓ 10 more lines")


def test_a_label_leaves_room_for_what_is_typed() -> None:
    assert len(cut("x" * 200, 80)) + len(" ▸ ") + 24 + 1 <= 80
    assert cut("price", 80) == "price"


async def test_a_long_hint_goes_to_the_status_line(path: Path) -> None:
    async with started(path, screen="2") as driver:
        await driver.press("l")
        await driver.type("x" * 24, end="left")
        assert "x" * 24 in driver.page.edit.text()
        assert "kv40 kv100 vi flash" in driver.page.status.message
        driver.send("ctrl+u")
        await driver.type("pour")
        assert driver.page.status.message == ""


@pytest.mark.parametrize(("typed", "code"), [("Flash Point", "flash"), ("sulphur", "sulfur"), ("KV 40", "kv40"),
                                             ("Viscosity index", "vi"), ("KV-20", "kv-20"), ("density", "density15")])
def test_a_property_is_known_by_its_name(typed: str, code: str) -> None:
    assert words.property_code(typed) == code


def test_another_name_is_refused() -> None:
    for typed in ("colour", ""):
        with pytest.raises(TargetError):
            words.property_code(typed)


async def test_a_limit_that_is_there_begins_with_its_values(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        before = driver.plant.product("H46").limits
        await driver.press("l")
        await driver.type("colour")
        assert driver.page.status.kind == "refused"
        assert driver.page.edit.typing.text == "colour"
        driver.send("ctrl+u")
        await driver.type("Flash Point")
        assert driver.page.edit.typing.text == "200"
        assert "already" in driver.page.status.message
        for _ in range(3):
            await driver.type("")
        assert driver.plant.product("H46").limits == before


async def test_a_share_rule_that_is_there_begins_with_its_values(path: Path) -> None:
    async with started(path, screen="2") as driver:
        await driver.press("s")
        await driver.type("PACK")
        assert driver.page.edit.typing.text == "0.8"
        await driver.type("0.7")
        await driver.type("")
        rule = driver.plant.product("H46").rules[0]
        assert (rule.low, rule.high) == (pytest.approx(0.007), pytest.approx(0.008))


async def test_a_number_typed_at_a_cell_that_takes_none_opens_no_screen(path: Path) -> None:
    async with started(path) as driver:
        await driver.cursor_on("LIGHT", "vi")
        await driver.press("enter", "3", ".", "2")
        assert driver.app.current_mode == "stocks"
        await driver.press("down", "3")
        assert driver.app.current_mode == "recipe"


async def test_all_messages_can_be_read_while_a_question_stands(path: Path) -> None:
    async with started(path) as driver:
        await driver.cursor_on("LIGHT", "kv40")
        await driver.press("enter")
        await driver.type("3020")
        assert driver.page.edit.typing.asking
        await driver.press("!")
        assert driver.app.screen is not driver.page
        await driver.press("escape")
        assert driver.page.edit.typing.asking
        assert driver.page.status.kind == "question"
        await driver.press("escape")


async def test_a_long_message_takes_blank_rows_and_gives_them_back(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        usual = driver.page.status.size.height
        driver.app.say("what, where and what to do about it " * 9, "refused")
        await driver.settle()
        assert "shows all" not in driver.page.status.text()
        assert driver.page.status.size.height > usual
        await driver.press("down", "escape")
        await driver.settle()
        assert driver.page.status.size.height == usual


def test_a_paste_is_text_whatever_it_holds() -> None:
    sent = "\x1b[200~12\x1b[B\x1bq\r34\x1b[201~\r"
    for size in range(1, len(sent) + 1):
        cleaner = Cleaner()
        read = "".join(cleaner.clean(sent[n:n + size]) for n in range(0, len(sent), size))
        assert read == "\x1b[200~12 [B q 34\x1b[201~\r"
        reader = Reader()
        found = [e for n in range(0, len(sent), size) for e in reader.feed(sent[n:n + size])]
        assert [e.text if isinstance(e, events.Paste) else e.key for e in found] == ["12 [B q 34", "enter"]


async def test_a_paste_goes_only_into_the_edit_line(path: Path) -> None:
    async with started(path) as driver:
        for paste in ("q3\x1b", "3\r"):
            event = events.Paste(paste)
            event.set_sender(driver.app)
            driver.app._driver.send_message(event)
            await driver.settle()
        assert driver.app.is_running
        assert driver.app.current_mode == "stocks"
        assert "nothing is being typed" in driver.page.status.message


def limit(**given: object) -> LimitResult:
    """A VI limit of at least 100 with a guard of 2."""
    base = LimitResult("vi", 100.0, None, 2.0, 102.0, None, 90.0, False, -12.0, "", ())
    return dataclasses.replace(base, **given)  # type: ignore[arg-type]


def test_a_miss_in_words() -> None:
    assert words.missed(limit()) == "VI 90, 12 short of 102 with its guard"
    assert words.missed(limit(value=101.0, margin=-1.0)) == "VI 101, inside 100 but not its guard (102)"
    bare = limit(low=163.0, held_low=163.0, guard=0.0, value=109.0, margin=-54.0)
    assert words.missed(bare) == "VI 109, 54 short of 163"
    high = limit(low=None, held_low=None, high=163.0, held_high=163.0, value=217.0, margin=-54.0)
    assert words.missed(high) == "VI 217, 54 above 163"
    near = limit(held_low=100.0, value=99.998, margin=-0.002)
    assert words.missed(near) == "VI 100, 0.002 short of 100"


def test_the_guard_stands_as_it_moves_the_limit() -> None:
    kv = LimitResult("kv40", 41.4, 50.6, 0.0, 42.228, 49.588, 46.0, True, 3.588, "", ())
    assert view.guard_text(kv, 2.0) == "2%"
    assert view.guard_text(dataclasses.replace(kv, high=None, held_high=None), 2.0) == "0.828"
    assert view.guard_text(limit(), None) == "2"
    assert view.guard_text(limit(held_low=100.0), None) == ""


async def test_a_wide_spread_of_the_laws_stands_in_the_head(path: Path) -> None:
    async with started(path, screen="3") as driver:
        wide = dataclasses.replace(driver.app.session.shown, spread_pct={"kv40": 12.4, "kv100": None})
        lines, _ = view.head(driver.app.session.state, wide, 80, 2)
        assert ("! laws differ 12 %: laboratory blend needed (8, p plans)", words.WARN) in lines[0]


async def test_quit_says_once_what_is_forgotten(path: Path) -> None:
    async with started(path, screen="3") as driver:
        await driver.press("m")
        await driver.type("2 t")
        await driver.share_on("CLEAN")
        await driver.press("x", "L", "q")
        assert driver.app.is_running
        assert driver.status == "q again leaves and forgets H46: CLEAN left out, batch 2000 kg, law walther-mass"
        driver.send("q")
        await driver.pilot.pause()
        assert not driver.app.is_running


async def test_unfinished_shares_are_told_at_the_start(path: Path) -> None:
    with open_plant(path, who="ben") as plant:
        keep_trial(plant, Trial("unfinished 2026-05-01 06:00:00", "H46", {"LIGHT": 1.0}))
    async with started(path) as driver:
        assert "H46 unfinished 2026-05-01 06:00:00" in driver.page.status.message


async def test_stocks_that_are_not_on_the_list_are_counted(path: Path) -> None:
    async with started(path, screen="3") as driver:
        answer = driver.app.session.state.answer
        listed = dataclasses.replace(answer, target=dataclasses.replace(answer.target, only_listed=True),
                                     allowed=("PACK", "LIGHT"))
        told = view.remarks(listed, answer.best, date(2026, 6, 1))
        assert "not on this product's list: 4 stocks" in told


async def test_n_says_why_there_is_no_blend(path: Path) -> None:
    async with started(path, screen="3") as driver:
        for code in ("LIGHT", "HEAVY"):
            await driver.share_on(code)
            await driver.press("h")
            await driver.type("80")
        await driver.press("n")
        assert "blend" in driver.page.status.message
        assert driver.page.status.kind == "refused"
