"""The floor sheet: what it says, what it refuses, that it fits a printer; and shares typed by hand."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from datetime import datetime
from pathlib import Path

import pytest

from blendtui.desk import blends, numbers, sheet
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import Plant, open_plant
from blendtui.desk.targets import target_of
from blendtui.store.records import Product
from solver.recipe import design
from solver.stocks import Stock
from solver.target import Excess, Limit, Target

EXAMPLE = Path(__file__).parent.parent.parent / "stock_catalog_example"
NOON = datetime(2026, 6, 1, 12, 0)


@pytest.fixture(scope="module")
def plant() -> Iterator[Plant]:
    with open_plant(EXAMPLE) as opened:
        yield opened


def made(plant: Plant, product: str, **shares: float):  # type: ignore[no-untyped-def]
    stocks, target = plant.stocks(), target_of(plant, product)
    recipe = blends.by_hand(stocks, target, shares) if shares else blends.best(stocks, target)
    return sheet.floor_sheet("north works", plant.product(product), recipe, stocks, NOON, "anna"), recipe


def test_every_product_has_a_sheet_that_prints(plant: Plant) -> None:
    for product in plant.products():
        text, recipe = made(plant, product.product)
        assert text.isascii()
        assert max(map(len, text.split("\n"))) <= 80
        assert ("DO NOT BLEND" in text) == (recipe.status == "infeasible")
        for code in recipe.shares:
            assert f"[ ]  {code}" in text
            stock = plant.stock(code)
            assert all(word in text for word in stock.name.split())  # the tank's number is never cut off


def test_the_kilograms_add_up_as_printed(plant: Plant) -> None:
    text, recipe = made(plant, "HYD-32")
    lines = [line.split() for line in text.split("\n") if line.startswith("[ ]")]
    printed = sum(float(line[-2]) for line in lines)
    assert printed == pytest.approx(recipe.batch_kg, abs=0.06)
    assert sum(float(t) for t in numbers.charges(recipe.charges_kg).values()) == pytest.approx(12000.0, abs=0.06)


def test_whole_steps_stand_on_the_sheet_as_they_are_weighed(plant: Plant) -> None:
    stocks, target = plant.stocks(), target_of(plant, "GEAR-220")
    recipe = blends.whole(stocks, target).recipe
    text = sheet.floor_sheet("north works", plant.product("GEAR-220"), recipe, stocks, NOON, "anna")
    lines = text.split("\n")
    printed = {line.split()[2]: float(line.split()[-2]) for line in lines if line.startswith("[ ]")}
    assert printed == recipe.charges_kg
    drums = next(i for i, line in enumerate(lines) if line.startswith("[ ]  GP18"))
    assert lines[drums + 1].strip() == "= 1 x 180 kg"
    assert f"{'total':<40}" in text
    assert "in whole steps: 0.1 kg PD20; 10 kg MN50, BR32; 180 kg GP18" in lines
    assert "DO NOT BLEND" not in text
    assert text.isascii()
    assert max(map(len, lines)) <= 80


def test_the_total_of_whole_steps_is_not_rounded(plant: Plant) -> None:
    stocks, target = plant.stocks(), target_of(plant, "HYD-46")
    recipe = blends.whole(stocks, target).recipe
    text = sheet.floor_sheet("north works", plant.product("HYD-46"), recipe, stocks, NOON, "anna")
    lines = text.split("\n")
    total = next(line for line in lines if line.strip().startswith("total"))
    printed = sum(float(line.split()[-2]) for line in lines if line.startswith("[ ]"))
    assert float(total.split()[-1]) == printed == pytest.approx(recipe.batch_kg, abs=1e-9)
    assert float(total.split()[-1]) % 1.0 == 0.5  # 127.5 kg of the package and tens of the oils


def test_what_is_not_in_whole_steps_is_said_to_be(plant: Plant) -> None:
    text, _ = made(plant, "GEAR-220", MN50=0.48, BR32=0.501, GP18=0.018, PD20=0.001)
    assert "= 1 x 180 kg" in text
    assert "not in whole steps" not in text  # 4800, 5010, 180 and 10 kg
    text, _ = made(plant, "GEAR-220", MN50=0.48035, BR32=0.49965, GP18=0.019, PD20=0.001)
    assert "= 1.06 x 180 kg: NOT WHOLE" in text
    words = "not in whole steps: 10 kg MN50, BR32; 180 kg GP18; whole quantities can be asked for"
    assert words in " ".join(text.split())
    assert max(map(len, text.split("\n"))) <= 80


def test_shares_off_a_hundred_are_refused(plant: Plant) -> None:
    with pytest.raises(DeskError, match=r"the shares sum to 90\.00 %, not to 100 %; mend them before writing"):
        made(plant, "HYD-32", LN15A=0.9)


def test_a_forgotten_package_and_an_empty_tank_head_the_sheet(plant: Plant) -> None:
    stocks = plant.stocks()
    target = replace(target_of(plant, "HYD-32"), batch_kg=200000.0)
    recipe = blends.by_hand(stocks, target, {"LN15A": 0.7, "HT04": 0.15, "MN50": 0.15})
    assert not recipe.meets_all
    text = sheet.floor_sheet("north works", plant.product("HYD-32"), recipe, stocks, NOON, "anna")
    assert "*** DO NOT BLEND" in text
    assert "! HP85 0.00 %, the product asks 0.85 %" in text
    assert "! LN15A needs 140,000 kg, 60,500 kg can be pumped" in text


def test_a_sheet_is_never_written_over(tmp_path: Path) -> None:
    where = tmp_path / "a.txt"
    assert sheet.write_sheet(where, "one") == f"sheet written to {where}"
    with pytest.raises(DeskError, match="is there already; choose another name"):
        sheet.write_sheet(where, "two")
    assert where.read_text() == "one"
    with pytest.raises(DeskError, match=r"cannot write .*; choose another place"):
        sheet.write_sheet(tmp_path / "no" / "b.txt", "x")


def test_a_what_if_is_headed_do_not_blend_and_lessons_are_named() -> None:
    stocks = [Stock("A", kv40=30.0, kv100=5.2, price_per_t=800.0, on_hand_kg=1e5),
              Stock("B", kv40=400.0, kv100=30.0, price_per_t=1000.0, on_hand_kg=1e5)]
    lesson = Excess("A", "B", "refutas", {40.0: (1.0,)}, version="L7", provisional=True)
    target = Target("P", (Limit("kv40", 95.0, 105.0),), lessons=(lesson,), batch_kg=1000.0)
    own, moved = (design(stocks, t) for t in (target, replace(target, moved={("kv40", "high"): 120.0})))
    sheets = [sheet.floor_sheet("plant", Product("P"), each, stocks, NOON, "anna") for each in (own, moved)]
    assert "WHAT-IF" not in sheets[0]
    assert "WHAT-IF, DO NOT BLEND" in sheets[1]
    assert "lessons L7; provisional: L7" in sheets[0]
