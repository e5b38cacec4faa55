"""The targets screen: choose a product, edit everything it asks for, add and drop lines and products."""

from __future__ import annotations

from pathlib import Path

import pytest

from .conftest import Driver, started

Size = tuple[int, int]


async def cell(driver: Driver, key: str, column: int = 1, kind: str = "") -> None:
    """Put the cursor on a cell of the chosen product."""
    page = driver.page
    if page.state.listing:
        await driver.press("tab")
    row = next(n for n, r in enumerate(page.rows) if r.key == key and kind in ("", r.kind))
    driver.send(*["down" if row > page.cells.row else "up"] * abs(row - page.cells.row))
    driver.send(*["right" if column > page.cells.column else "left"] * abs(column - page.cells.column))
    await driver.settle()
    assert page.cells.row == row


async def test_the_chosen_product_is_shown_and_the_recipe_follows_it(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        assert driver.app.session.product == "H46"
        await driver.press("down")
        assert driver.app.session.product == "G220"
        assert "G220: least cost, proven" in driver.page.answer.text()
        assert "ISO VG 220" in driver.page.cells.text()
        await driver.press("down")
        assert "NEVER: ! no blend meets it" in driver.page.answer.text()
        assert "VI" in driver.page.answer.text()


EDITS = [("batch_kg", "12 t", 12000.0), ("grade", "iso vg 68", "ISO VG 68"), ("law", "wright-mass", "wright-mass"),
         ("max_cost_per_t", "990", 990.0), ("max_stocks", "4", 4), ("min_share_pct", "3", 3.0),
         ("only_listed", "y", True), ("note", "ask the lab", "ask the lab"), ("name", "Hydraulic 46", "Hydraulic 46")]


@pytest.mark.parametrize(("key", "typed", "value"), EDITS)
async def test_each_cell_can_be_edited(path: Path, key: str, typed: str, value: object) -> None:
    async with started(path, screen="2") as driver:
        await cell(driver, key)
        await driver.press("enter")
        await driver.type(typed)
        assert getattr(driver.plant.product("H46"), key) == value
        assert driver.page.status.kind == "done"
        await driver.press("u")
        assert getattr(driver.plant.product("H46"), key) != value


async def test_a_grade_that_is_not_known_is_refused_with_those_that_are(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        await cell(driver, "grade")
        await driver.press("enter")
        await driver.type("VG 47")
        assert "unknown grade" in driver.status
        assert driver.page.edit.typing.text == "VG 47"
        assert driver.plant.product("H46").grade == "ISO VG 46"


async def test_a_limit_is_added_edited_let_off_and_dropped(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        await driver.press("l")
        for typed in ("pour", "", "-6", "2"):
            await driver.type(typed)
        limit = next(x for x in driver.plant.product("H46").limits if x.property == "pour")
        assert (limit.low, limit.high, limit.guard) == (None, -6.0, 2.0)
        await cell(driver, "pour", 2)
        await driver.press("enter")
        await driver.type("20 F")
        limit = next(x for x in driver.plant.product("H46").limits if x.property == "pour")
        assert limit.high == pytest.approx(-6.67)
        await driver.press("x")
        assert next(x for x in driver.plant.product("H46").limits if x.property == "pour").unknown_ok
        await driver.press("d")
        assert "pour" not in [x.property for x in driver.plant.product("H46").limits]
        assert "u brings it back" in driver.status
        await driver.press("u")
        assert "pour" in [x.property for x in driver.plant.product("H46").limits]


async def test_a_guard_can_be_put_on_the_limit_of_a_grade(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        await driver.press("down")
        await cell(driver, "kv40", 3, "grade")
        await driver.press("enter")
        await driver.type("3%")
        limit = driver.plant.product("G220").limits[0]
        assert (limit.property, limit.low, limit.high, limit.guard_pct) == ("kv40", None, None, 3.0)


async def test_a_new_limit_can_be_dropped_half_way(path: Path) -> None:
    async with started(path, screen="2") as driver:
        before = driver.plant.product("H46").limits
        await driver.press("l")
        await driver.type("noack")
        await driver.press("escape")
        assert "nothing was changed" in driver.page.status.message
        assert driver.plant.product("H46").limits == before


async def test_a_share_rule_is_added_edited_and_dropped(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        await driver.press("s")
        for typed in ("HEAVY", "5", "30"):
            await driver.type(typed)
        rule = next(r for r in driver.plant.product("H46").rules if r.of == "HEAVY")
        assert (rule.low, rule.high) == (0.05, 0.3)
        assert 0.05 - 1e-9 <= driver.app.session.shown.shares["HEAVY"] <= 0.3 + 1e-9
        await cell(driver, "HEAVY", 2)
        await driver.press("enter")
        await driver.type("12.5")
        rule = next(r for r in driver.plant.product("H46").rules if r.of == "HEAVY")
        assert rule.high == 0.125
        await driver.press("d")
        assert [r.of for r in driver.plant.product("H46").rules] == ["PACK"]


async def test_a_rule_on_nothing_is_refused_in_words(path: Path) -> None:
    async with started(path, screen="2") as driver:
        await driver.press("s")
        for typed in ("NOSUCH", "", ""):
            await driver.type(typed)
        assert "no stock, oil, kind or group" in driver.status


async def test_products_are_added_copied_and_retired(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        await driver.press("a")
        await driver.type("C100")
        await driver.type("iso vg 100")
        assert driver.plant.product("C100").grade == "ISO VG 100"
        assert driver.app.session.product == "C100"
        await driver.press("[", "[", "[")
        assert driver.app.session.product == "H46"
        await driver.press("c")
        await driver.type("H46-B")
        assert driver.plant.product("H46-B").rules == driver.plant.product("H46").rules
        assert driver.app.session.product == "H46-B"
        await driver.press("d")
        assert "H46-B" not in [p.product for p in driver.plant.products()]
        await driver.press("u")
        assert "H46-B" in [p.product for p in driver.plant.products()]


async def test_a_plant_without_products_says_what_to_do(path: Path, size: Size) -> None:
    async with started(path, size, screen="2") as driver:
        await driver.press("d", "d", "d")
        assert driver.plant.products() == []
        assert "no product yet; a adds one" in driver.text()
        await driver.press("3")
        assert "add one on the screen Targets" in driver.text()
        await driver.press("u")
        assert [p.product for p in driver.plant.products()] == ["NEVER"]
