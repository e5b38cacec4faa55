"""The batches screen: the list, a new order from question to card, cancelling, tracing and writing."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from blendtui import commands
from blendtui.desk import charging
from blendtui.desk import stocks as desk
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import open_plant
from blendtui.screens import ordering

from .conftest import Driver, started
from .floor_case import LIGHT, planned, with_vessel

Size = tuple[int, int]
ORDER = ("15 t", "K1", "Northern Presses", "4712", "kv40 43 48", "55", "45", "150", "HEAVY", "", "", "")


@pytest.fixture
def path(path: Path) -> Path:
    """The small plant with a kettle."""
    with_vessel(path)
    return path


@pytest.fixture
def ordered(path: Path) -> Path:
    """The same with a planned batch."""
    with open_plant(path, who="carla") as plant:
        planned(plant)
    return path


async def order(driver: Driver, *typed: str) -> None:
    """Answer the questions of an order."""
    await driver.press("a")
    for text in typed:
        await answer(driver, text)


async def answer(driver: Driver, text: str) -> None:
    """Type an answer in place of what stands on the line."""
    driver.send("ctrl+u")
    await driver.type(text)


async def test_the_list_shows_where_each_batch_stands(ordered: Path, size: Size) -> None:
    async with started(ordered, size, screen="9") as driver:
        row = driver.page.grid.text().splitlines()[1]
        assert row.split()[:6] == ["B-0001", "H46", "15000", "kg", "K1", "planned"]
        assert driver.page.edit.text().startswith("B-0001: charge 8950 kg of LIGHT")
        await driver.settle()  # the summary's own lines are laid after the class of a wide terminal is set
        assert driver.page.summary.display is (size[0] >= 110)
        assert ("next:" in driver.page.summary.text()) is (size[0] >= 110)
        charging.charge(driver.plant, "B-0001", 1, LIGHT)
        driver.app._poll()
        await driver.settle()
        assert "to charge, 2 of 3 left" in driver.page.grid.text()


async def test_an_empty_list_says_how_to_begin(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        assert "a takes an order for the product" in driver.text()
        await driver.press("enter", "d", "w", "/", "escape")
        assert driver.app.current_mode == "batches"


async def test_open_batches_come_first_and_the_filter_finds_words(ordered: Path, size: Size) -> None:
    with open_plant(ordered, who="carla") as plant:
        from blendtui.desk import orders

        planned(plant, "B-0002", customer="Southern Gears")
        orders.cancel(plant, "B-0002", why="ordered twice")
    async with started(ordered, size, screen="9") as driver:
        assert [b.batch for b in driver.page.rows] == ["B-0001", "B-0002"]
        assert "CANCELLED" in driver.page.grid.text()
        await driver.press("/")
        await driver.type("southern")
        assert [b.batch for b in driver.page.rows] == ["B-0002"]
        assert "1 of 2 batches; Esc shows all again" in driver.page.status.message
        await driver.press("escape")
        assert len(driver.page.rows) == 2


async def test_enter_opens_the_batch_on_the_floor(ordered: Path, size: Size) -> None:
    async with started(ordered, size, screen="9") as driver:
        await driver.press("enter")
        assert driver.app.current_mode == "floor"
        assert "B-0001: H46" in driver.page.head.text()


async def test_an_order_is_shown_before_anything_is_written(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        before = driver.plant.revision()
        await order(driver, *ORDER)
        lines = ["".join(text for text, _ in line) for line in driver.app.screen.page_text.lines]
        text = "\n".join(lines)
        assert max(map(len, lines)) <= size[0]
        assert "H46, 15000 kg in K1: nothing is written" in text
        for part in ("LIGHT", "fill at 55 °C", "asked by the customer: KV at 40 °C", "heel and line (part of the"):
            assert part in text
        assert driver.plant.revision() == before
        await driver.press("escape")
        assert driver.plant.revision() == before
        assert driver.plant.batches() == []


async def test_an_order_that_is_taken_is_promised_and_chosen(path: Path, size: Size) -> None:
    async with started(path, size, screen="9") as driver:
        await order(driver, *ORDER)
        await driver.press("y")
        head = driver.plant.batches()[0]
        assert (head.batch, head.customer, head.order_no, head.mix_c) == ("B-0001", "Northern Presses", "4712", 55.0)
        assert "B-0001 is ordered" in driver.status
        assert driver.page.batch.batch == "B-0001"
        assert driver.plant.stock("LIGHT").reserved_kg > 0.0
        await driver.press("enter")
        assert "B-0001: H46" in driver.page.head.text()


async def test_what_was_typed_stands_on_the_line_again(path: Path) -> None:
    async with started(path, screen="9") as driver:
        await driver.press("a")
        await answer(driver, "12 t")
        await answer(driver, "K1")
        await driver.press("escape", "a")
        assert driver.page.edit.typing.text == "12 t"


async def test_a_mistyped_answer_comes_back_with_what_to_type(path: Path) -> None:
    async with started(path, screen="9") as driver:
        await driver.press("a")
        await answer(driver, "fifteen")
        assert "is not a number" in driver.status
        await answer(driver, "15 t")
        await answer(driver, "K9")
        assert "no vessel 'K9'; there are K1" in driver.status


async def test_a_vessel_smaller_than_the_order_is_said_and_cannot_be_taken(path: Path) -> None:
    async with started(path, screen="9") as driver:
        await order(driver, "40 t", *ORDER[1:])
        text = driver.app.screen.page_text.text()
        assert "NO BLEND" in text
        assert "y take the order" not in driver.app.screen.keys.text()
        await driver.press("y")
        assert driver.plant.batches() == []


async def test_a_second_batch_in_the_same_vessel_is_asked_about(ordered: Path) -> None:
    async with started(ordered, screen="9") as driver:
        await order(driver, *ORDER)
        await driver.press("y")
        assert "K1 holds B-0001" in driver.status
        assert len(driver.plant.batches()) == 1
        await driver.press("y")
        assert len(driver.plant.batches()) == 2


async def test_cancelling_asks_why_and_frees_what_was_promised(ordered: Path, size: Size) -> None:
    async with started(ordered, size, screen="9") as driver:
        assert driver.plant.stock("LIGHT").reserved_kg == LIGHT
        await driver.press("d")
        await driver.type("")
        assert "a reason is needed here" in driver.status
        await driver.type("customer called")
        head = driver.plant.batch("B-0001").head
        assert (head.state, head.why) == ("cancelled", "customer called")
        assert driver.plant.stock("LIGHT").reserved_kg == 0.0


async def test_a_name_is_traced_both_ways(ordered: Path, size: Size) -> None:
    with open_plant(ordered, who="carla") as plant:
        charging.charge(plant, "B-0001", 1, LIGHT)
    async with started(ordered, size, screen="9") as driver:
        await driver.press("t")
        await answer(driver, "L-17")
        text = driver.app.screen.page_text.text()
        assert "B-0001" in text
        await driver.press("escape", "t")
        await answer(driver, "nothing at all")
        assert "no lot, batch, order, customer or stock" in driver.status


async def test_the_card_is_written_and_it_says_where(ordered: Path, size: Size) -> None:
    async with started(ordered, size, screen="9") as driver:
        await driver.press("w", "enter")
        written = ordered.parent / "B-0001-card.txt"
        assert str(written) in driver.status
        text = written.read_text(encoding="utf-8")
        assert "LIGHT" in text
        assert max(map(len, text.splitlines())) <= 80
        await driver.press("w")
        await answer(driver, "card.html")
        assert (ordered.parent / "card.html").read_text(encoding="utf-8").lstrip().lower().startswith("<!doctype html")
        await driver.press("w", "enter")
        assert "is there already" in driver.status


async def test_receipts_dips_and_the_book_from_the_stocks_screen(ordered: Path, size: Size) -> None:
    async with started(ordered, size) as driver:
        await driver.cursor_on("LIGHT")
        await driver.press("i")
        for text in ("24 t", "L-18", "C-77", "kv40 30.6, kv100 5.27, density15 870", "yes"):
            await answer(driver, text)
        light = driver.plant.stock("LIGHT")
        assert (light.on_hand_kg, light.source) == (84000.0, "computed")
        assert set(driver.plant.tank_lots("LIGHT")) == {"L-17", "L-18"}
        await driver.press("p")
        await answer(driver, "83900")
        await answer(driver, "no")
        assert "they agree within 0.5 %" in driver.status
        assert driver.plant.stock("LIGHT").on_hand_kg == 84000.0
        await driver.press("p")
        await answer(driver, "82000")
        await answer(driver, "yes")
        await driver.type("gauge was read at the wrong plate")
        assert driver.plant.stock("LIGHT").on_hand_kg == 82000.0
        await driver.press("o")
        await answer(driver, "kv40 30.4, kv100 5.25, density15 870")
        assert driver.plant.stock("LIGHT").source == "own"
        await driver.press("b")
        assert "L-18" in "".join(text for line in driver.app.screen.page_text.lines for text, _ in line)
        await driver.press("escape", "t", "enter")
        assert "LIGHT" in driver.app.screen.page_text.text()


async def test_the_first_screen_does_not_read_the_batches(ordered: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from blendtui.store.plant import Plant

    def refuse(*args: object) -> None:
        raise AssertionError("batches are read although their screen is not open")

    monkeypatch.setattr(Plant, "batches", refuse)
    monkeypatch.setattr(Plant, "batch", refuse)
    async with started(ordered) as driver:
        desk.edit_cell(driver.plant, "LIGHT", "price_per_t", "850")
        driver.app._poll()
        await driver.settle()
        await driver.press("3", "1")
        assert driver.app.is_running


@pytest.mark.parametrize(("read", "typed", "found"), [
    (ordering.amount, "15 t", (15000.0, "kg")), (ordering.amount, "16000 L15", (16000.0, "L15")),
    (ordering.amount, "16000 L20", (16000.0, "L20")), (ordering.amount, "16000 L", (16000.0, "L15")),
    (ordering.limits, "kv40 44 48, VI 98", {"kv40": ("44", "48"), "vi": ("98", "")}), (ordering.limits, "", {}),
    (ordering.limits, "flash - 230", {"flash": ("", "230")}), (ordering.line, "40 N150", (40.0, "N150")),
    (ordering.line, "", None), (ordering.flush, "60 kg N150 in", (60.0, "N150", True)),
    (ordering.flush, "60 N150 out", (60.0, "N150", False)), (ordering.tank_celsius, "45", {"": 45.0}),
    (ordering.tank_celsius, "LIGHT 45, HEAVY 55", {"LIGHT": 45.0, "HEAVY": 55.0}),
    (ordering.heel_values, "kv40 46 kv100 6.8", {"kv40": "46", "kv100": "6.8"}), (ordering.heel_values, "HEAVY", {})])
def test_what_is_typed_for_an_order_is_read(read, typed: str, found: object) -> None:  # type: ignore[no-untyped-def]
    assert read(typed) == found


@pytest.mark.parametrize(("read", "typed", "says"), [
    (ordering.limits, "kv40", "its low and its high"), (ordering.line, "40", "such as 40 N150"),
    (ordering.flush, "60 N150", "in (it goes into the batch) or out"),
    (ordering.tank_celsius, "LIGHT 45 HEAVY", "a stock and its temperature")])
def test_what_cannot_be_read_of_an_order_says_what_to_type(read, typed: str, says: str) -> None:  # type: ignore[no-untyped-def]
    with pytest.raises(DeskError) as refused:
        read(typed)
    assert says in str(refused.value)


@pytest.mark.parametrize("code", [code for code, _ in commands.SCREENS])
async def test_ten_screens_fit_the_title_line(ordered: Path, size: Size, code: str) -> None:
    async with started(ordered, size, screen=commands.KEYS[code]) as driver:
        title = driver.page.title_line.text()
        assert len(title) <= size[0]
        assert f"[{commands.KEYS[code]} {dict(commands.SCREENS)[code]}]" in title
        shown = re.findall(r"(?<![\w-])(\d)(?= |\]|$)", title.partition(driver.page.title_line.remark)[0])
        assert [key for key in shown if key in commands.KEYS.values()] == list(commands.KEYS.values())
        assert driver.page.title_line.remark in title
        if size[0] >= 110:
            assert all(f"{commands.KEYS[each]} {name}" in title for each, name in commands.SCREENS)


async def test_the_plant_without_a_vessel_says_how_to_add_one(made_once: Path, tmp_path: Path) -> None:
    import shutil

    async with started(Path(shutil.copy(made_once, tmp_path / "bare.plant")), screen="9") as driver:
        await driver.press("a")
        assert "the plant has no vessel yet" in driver.status
