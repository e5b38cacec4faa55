"""The screen Why: what cannot hold together, the changes taken as a what-if and back, the operator's own order."""

from __future__ import annotations

from pathlib import Path

from .conftest import Driver, started

Size = tuple[int, int]


async def on_never(driver: Driver) -> None:
    """Speak of the product that cannot be made, on the screen Why."""
    await driver.press("]", "]", "5")
    assert driver.app.session.product == "NEVER"


async def test_reasons_changes_reach_and_what_to_buy(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await on_never(driver)
        report = driver.page.report
        assert report.status == "infeasible"
        assert {d.name for d in report.conflicts[0].demands} >= {"vi"}
        assert report.done == {"conflicts", "giving", "reach", "stocks", "region"}
        assert "! NEVER: NO BLEND meets every limit and rule" in driver.text()
        assert "What cannot hold together" in driver.text()
        seen = driver.text()
        for _ in range(6):
            await driver.press("pagedown")
            seen += driver.text()
        for part in ("must give", "Within reach", "may not serve today", "One more base stock to buy"):
            assert part in seen


async def test_the_changes_are_taken_as_a_what_if_and_taken_back(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await on_never(driver)
        moved = dict(driver.page.report.giving.moved)
        await driver.press("t")
        assert driver.app.current_mode == "recipe"
        assert dict(driver.app.session.state.wishes.moved) == moved
        assert driver.app.session.shown.status == "optimal"
        assert driver.status.startswith("what-if on NEVER: VI at least 150 →")
        await driver.press("5")
        assert driver.page.report.status == "optimal"
        assert "NEVER with your what-if: a blend exists" in driver.text()
        await driver.press("t")
        assert driver.status.startswith("what-if")
        assert driver.page.status.message == "a blend exists: nothing has to give"
        await driver.press("u")
        assert not driver.app.session.state.wishes.moved
        assert driver.page.report.status == "infeasible"
        assert driver.plant.product("NEVER").limits[0].low == 150.0  # the product itself is as it was


async def test_the_operators_order_is_kept_for_the_product(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await on_never(driver)
        await driver.press("o")
        for wrong in ("flash", "banana"):
            await driver.press("ctrl+u")
            await driver.type(wrong)
            assert f"'{wrong}' is not limited here; what may give is KV40, VI" in driver.page.status.message
            assert driver.page.edit.active
        await driver.press("ctrl+u")
        await driver.type("kv40, VI")
        assert driver.status == "may give, in this order: KV40, VI; all else stays firm"
        assert driver.page.report.giving.order == ("kv40", "vi")
        assert "in your order (KV40, VI)" in driver.text() or size[1] < 30
        await driver.press("[", "]")
        assert driver.page.report.giving.order == ("kv40", "vi")
        await driver.press("o", "ctrl+u", "enter")
        assert driver.page.report.giving.order == ()


async def test_a_product_that_can_be_made_shows_its_reach(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await driver.press("5")
        assert driver.page.report.status == "optimal"
        assert "H46: a blend exists; nothing stands in the way." in driver.text()
        assert "KV40, mm²/s" in driver.text()
        await driver.press("t")
        assert driver.page.status.message == "a blend exists: nothing has to give"


async def test_an_edit_of_the_plant_is_answered_anew(path: Path, size: Size) -> None:
    async with started(path, size) as driver:
        await on_never(driver)
        assert driver.page.report.status == "infeasible"
        await driver.press("1")
        await driver.cursor_on("CLEAN", "kv100")
        await driver.press("enter")
        await driver.type("9.4")
        if driver.page.edit.active:
            await driver.press("y")
        assert driver.plant.stocks()[3].kv100 == 9.4
        await driver.press("5")
        assert driver.page.report.status == "optimal"
