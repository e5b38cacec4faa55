"""The stocks screen: find, read, edit, question, add, copy, retire, take back."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from blendtui.desk import stocks as desk
from blendtui.desk.plant import open_plant

from .conftest import started

Size = tuple[int, int]


async def test_every_cell_can_be_reached_and_has_its_unit(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        seen = driver.text()
        assert "KV40" in seen
        assert "mm²/s" in seen
        for _ in driver.page.grid.columns:
            await driver.press("right")
            column = driver.page.column
            assert driver.page.grid.column in driver.page.grid._visible(size[0])
            assert f"{column.heading}{', ' + column.unit if column.unit else ''}" in driver.page.edit.text()
        codes = {c.code for c in driver.page.grid.columns}
        assert {c.code for c in desk.CELLS} | {"code", "vi", "slope"} <= codes


async def test_numbers_are_shown_as_a_plant_reads_them(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        row = next(line for line in driver.text().splitlines() if line.startswith("LIGHT"))
        assert row.split()[3:8] == ["30.20", "5.230", "103", "870.0", "60000"]


async def test_filter_and_back(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.press("/")
        await driver.type("neutral base")
        assert [s.code for s in driver.page.rows] == ["LIGHT", "HEAVY"]
        assert "2 of 6 stocks" in driver.page.status.message
        await driver.press("escape")
        assert len(driver.page.rows) == 6


async def test_a_filter_that_finds_nothing_says_so(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.press("/")
        await driver.type("zzz")
        assert "no stock has the words 'zzz'; Esc takes the filter off" in driver.text()


async def test_sort_up_down_and_off_with_unknown_last(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.cursor_on("LIGHT", "price_per_t")
        await driver.press("s")
        assert [s.code for s in driver.page.rows] == ["LIGHT", "HEAVY", "CLEAN", "BRIGHT", "PACK", "NOPRICE"]
        await driver.press("s")
        assert [s.code for s in driver.page.rows] == ["PACK", "BRIGHT", "CLEAN", "HEAVY", "LIGHT", "NOPRICE"]
        await driver.press("s")
        assert [s.code for s in driver.page.rows][-1] == "NOPRICE"
        assert driver.page.state.sort == ""


async def test_an_edit_is_saved_with_its_unit_and_the_recipe_follows(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        before = driver.app.session.shown.cost_per_t
        await driver.cursor_on("LIGHT", "on_hand_kg")
        await driver.press("enter")
        await driver.type("12 t")
        assert driver.plant.stock("LIGHT").on_hand_kg == 12000.0
        await driver.cursor_on("LIGHT", "price_per_t")
        await driver.press("enter")
        await driver.type("900")
        assert driver.app.session.shown.cost_per_t > before
        assert f"{driver.app.session.shown.cost_per_t:.2f} /t" in driver.page.answer.text()
        assert "done: LIGHT price 800 → 900" in driver.page.status.text()


async def test_escape_drops_what_was_typed(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.cursor_on("LIGHT", "kv40")
        await driver.press("enter")
        await driver.type("99", end="escape")
        assert driver.plant.stock("LIGHT").kv40 == 30.2
        assert "dropped" in driver.page.status.message


async def test_undo_and_redo_in_words(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.cursor_on("HEAVY", "density15")
        await driver.press("enter")
        await driver.type("880.5")
        assert driver.plant.stock("HEAVY").density15 == 880.5
        await driver.press("u")
        assert driver.plant.stock("HEAVY").density15 == 882.0
        assert driver.status == "undone: HEAVY density 882 → 880.5; HEAVY density is 882.0 now"
        await driver.press("r")
        assert driver.plant.stock("HEAVY").density15 == 880.5
        assert driver.status == "done again: HEAVY density 882 → 880.5"


async def test_vi_and_slope_appear_once_both_viscosities_stand(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.press("a")
        await driver.type("NEW")
        assert driver.page.stock.code == "NEW"
        assert driver.page._text(driver.page.stock, "vi") == "–"
        await driver.cursor_on("NEW", "kv40")
        await driver.press("enter")
        await driver.type("46")
        await driver.cursor_on("NEW", "kv100")
        await driver.press("enter")
        await driver.type("6.8")
        assert "VI 102" in driver.status
        assert "slope" in driver.status
        row = next(line for line in driver.page.grid.text().splitlines() if line.startswith("NEW"))
        assert row.split()[1:4] == ["46.00", "6.800", "102"]


async def test_a_saybolt_pair_sets_both_viscosities(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.cursor_on("CLEAN", "kv40")
        await driver.press("enter")
        await driver.type("215/46 SUS")
        stock = driver.plant.stock("CLEAN")
        assert stock.kv40 == pytest.approx(41.0, abs=1.0)
        assert stock.kv100 == pytest.approx(5.9, abs=0.5)


QUESTIONS = [("kv100", "25", "viscosity index"), ("flash", "430", "was it °F"), ("price_per_t", "0.9", "per kg")]


@pytest.mark.parametrize(("cell", "typed", "says"), QUESTIONS)
async def test_an_unlikely_entry_is_questioned_and_kept_only_when_told(path: Path, size: Size, cell: str, typed: str,
                                                                      says: str) -> None:
    async with started(path, size) as driver:
        before = desk.value_of(driver.plant.stock("LIGHT"), cell)
        await driver.cursor_on("LIGHT", cell)
        await driver.press("enter")
        await driver.type(typed)
        assert says in driver.status
        assert driver.page.edit.typing.asking
        assert desk.value_of(driver.plant.stock("LIGHT"), cell) == before
        await driver.press("y")
        assert desk.value_of(driver.plant.stock("LIGHT"), cell) == float(typed)


async def test_a_question_can_be_dropped_or_its_suggestion_taken(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.cursor_on("LIGHT", "flash")
        await driver.press("enter")
        await driver.type("430")
        await driver.press("escape")
        assert driver.plant.stock("LIGHT").values["flash"] == 214.0
        await driver.press("enter")
        await driver.type("430")
        assert "take 221.1" in driver.page.keys.text()
        await driver.press("s")
        assert driver.plant.stock("LIGHT").values["flash"] == pytest.approx(221.1)


REFUSED = [("kv100", "86", "are the two swapped?"), ("density15", "0.868", "looks like kg/L"),
           ("kv40", "215 SUS", "type both"), ("kv40", "3,5", "comma"), ("price_per_t", "-5", "below 0")]


@pytest.mark.parametrize(("cell", "typed", "says"), REFUSED)
async def test_what_cannot_be_is_refused_and_stays_on_the_line(path: Path, cell: str, typed: str, says: str) -> None:
    async with started(path) as driver:
        before = driver.plant.stock("LIGHT")
        await driver.cursor_on("LIGHT", cell)
        await driver.press("enter")
        await driver.type(typed)
        assert says in driver.status
        assert driver.page.edit.typing.text == typed
        assert driver.plant.stock("LIGHT") == before


async def test_add_copy_and_retire(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.cursor_on("CLEAN")
        await driver.press("c")
        await driver.type("CLEAN-2")
        copy = driver.plant.stock("CLEAN-2")
        assert (copy.kv40, copy.on_hand_kg) == (43.2, None)
        assert driver.page.stock.code == "CLEAN-2"
        await driver.press("d")
        assert "CLEAN-2 retired" in driver.status
        assert "u brings it back" in driver.status
        assert "CLEAN-2" not in [s.code for s in driver.plant.stocks()]
        await driver.press("u")
        assert "CLEAN-2" in [s.code for s in driver.page.rows]


async def test_a_property_without_a_column_can_be_given(path: Path) -> None:
    async with started(path) as driver:
        await driver.cursor_on("LIGHT")
        await driver.press("v")
        await driver.type("ccs-25")
        await driver.type("6500 cP")
        assert driver.plant.stock("LIGHT").values["ccs-25"] == 6500.0
        assert "ccs-25" in [c.code for c in driver.page.grid.columns]


async def test_a_name_with_escape_codes_is_shown_harmless(path: Path) -> None:
    async with started(path) as driver:
        shown = driver.app.session.snapshot
        evil = replace(shown.stocks[0], name="evil\x1b[2J\x07name")
        driver.app.session.snapshot = replace(shown, stocks=(evil, *shown.stocks[1:]))
        driver.page.refresh_page()
        assert "\x1b" not in driver.text()
        assert "evil␛[2J" in driver.text()


async def test_a_cell_that_another_changed_meanwhile_is_not_overwritten(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.cursor_on("LIGHT", "kv40")
        await driver.press("enter")
        desk.edit_cell(driver.plant, "LIGHT", "kv40", "31")
        await driver.type("32")
        assert "is now 31" in driver.status
        assert "ben" in driver.status
        assert driver.plant.stock("LIGHT").kv40 == 31.0
        assert driver.page.edit.typing.text == "32"


async def test_another_persons_change_is_shown_and_told(path: Path) -> None:
    async with started(path) as driver:
        desk.edit_cell(driver.plant, "LIGHT", "price_per_t", "850")
        driver.app._poll()
        await driver.settle()
        assert driver.status == "ben changed the plant: LIGHT price 800 → 850"
        assert driver.page.rows[0].price_per_t == 850.0


async def test_a_folder_is_read_and_never_changed(tmp_path: Path, made_once: Path) -> None:
    folder = made_once.parent
    from blendtui.app import Console

    from .conftest import TODAY, Driver
    with open_plant(folder) as plant:
        app = Console(plant, today=TODAY)
        async with app.run_test(size=(80, 24)) as pilot:
            driver = Driver(app, pilot, plant)
            await driver.settle()
            await driver.cursor_on("LIGHT", "kv40")
            await driver.press("enter")
            await driver.type("31")
            assert "blendtui import" in driver.status
            assert plant.stock("LIGHT").kv40 == 30.2
