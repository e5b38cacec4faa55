"""The example plant: what it must hold, and that its products can be made, but for the one on purpose."""

from __future__ import annotations

import pytest

from blendtui.desk import lab
from blendtui.desk.targets import target_of
from blendtui.store.opening import open_plant
from solver.doubts import doubts
from solver.grades import api_group
from solver.recipe import design
from solver.viscosity_index import viscosity_index

IMPOSSIBLE = "HYD-46X"


@pytest.fixture
def plant(example):
    return open_plant(example)


def test_it_spans_groups_and_kinds(plant):
    stocks = plant.stocks()
    assert 14 <= len(stocks) <= 20
    assert {s.api_group for s in stocks} >= {"I", "II", "III", "IV", "V"}
    assert {s.kind for s in stocks} == {"base", "vi_improver", "additive", "pour_depressant", "rework"}
    assert {s.source for s in stocks} == {"own", "certificate", "typical"}
    assert len([s for s in stocks if s.oil == "LN15"]) == 2


def test_nothing_in_it_is_doubtful(plant):
    assert {s.code: doubts(s) for s in plant.stocks() if doubts(s)} == {}


def test_groups_agree_with_saturates_sulphur_and_vi(plant):
    for stock in plant.stocks():
        if stock.kind == "base" and stock.api_group in ("I", "II", "III"):
            found = api_group(stock.values["saturates"], stock.values["sulfur"],
                              viscosity_index(stock.kv40, stock.kv100))
            assert found == stock.api_group, stock.code


def test_additives_carry_blending_viscosities(plant):
    for stock in plant.stocks():
        if stock.kind in ("vi_improver", "additive"):
            assert stock.blend_kv40 is not None, stock.code


def test_products_list_what_they_may_use_and_guard_their_windows(plant):
    products = plant.products()
    assert len(products) >= 8
    assert all(p.only_listed and p.batch_kg for p in products)
    assert all(any(x.guard or x.guard_pct for x in p.limits) for p in products)


def test_packaged_stocks_have_whole_drums_and_bulk_ones_a_step(plant):
    stocks = {s.code: s for s in plant.stocks()}
    assert all(s.division_kg or s.package_kg for s in stocks.values())
    assert {s.division_kg for s in stocks.values() if s.kind in ("base", "rework")} == {10.0}
    assert {s.code for s in stocks.values() if s.package_kg == 180.0} == {"GP18", "VM70"}
    assert {s.code for s in stocks.values() if s.least_charge_kg} == {"BR32", "RW01"}
    assert stocks["RW01"].sigmas == {"kv40": 0.88, "kv100": 0.13}


def test_measured_blends_show_a_bias_a_sound_product_and_a_question(plant):
    record = lab.read(plant)
    checked = lab.checked(record)
    assert len(record.blends) >= 12
    assert [b.name for b in record.blends if checked.state(b)] == ["CIRC-100 2602"]
    assert all(b.measured_on for b in record.blends)
    report = lab.report(record)
    assert {product for (product, _), _ in report.alarms} == {"GEAR-220"}
    assert abs(report.by_product["HYD-46", "kv40"].mean) < 0.3
    assert plant.lessons() == []


def test_each_product_can_be_made_but_for_the_one_that_says_so(plant):
    for product in plant.products():
        recipe = design(plant.stocks(), target_of(plant, product.product))
        assert recipe.status == ("infeasible" if product.product == IMPOSSIBLE else
         "optimal"), product.product
    assert plant.product(IMPOSSIBLE).note.startswith("Cannot be made on purpose")
