"""A bench blend to plan where the laws differ."""

from __future__ import annotations

import pytest

from blendtui.desk import lab_plan
from blendtui.desk.errors import DeskError
from solver.recipe import evaluate
from solver.stocks import Stock

STOCKS = (Stock("THIN", kv40=17.5, kv100=4.0, density15=820.0), Stock("THICK", kv40=395.0, kv100=39.0, density15=850.0),
          Stock("LIKE", kv40=19.0, kv100=4.2, density15=822.0))


def test_masses_sum_to_the_bench_blend_and_the_pair_that_matters_comes_first() -> None:
    made = lab_plan.plan(evaluate(STOCKS, {"THIN": 1 / 3, "THICK": 1 / 3, "LIKE": 1 / 3}), STOCKS, 400.0)
    assert sum(made.blend.values()) == pytest.approx(400.0, abs=1e-9)
    assert set(made.blend) == {"THIN", "THICK", "LIKE"}
    # A thin with a thick synthetic: about 25 % between the laws; two thin ones hardly differ.
    assert {made.pairs[0].first, made.pairs[0].second} == {"THIN", "THICK"}
    assert made.pairs[0].spread_pct > 20.0 > made.pairs[-1].spread_pct
    assert {made.pairs[-1].first, made.pairs[-1].second} == {"THIN", "LIKE"}
    assert len(made.series) == 4
    assert all(sum(each.values()) == pytest.approx(400.0, abs=1e-9) for each in made.series)


def test_the_plan_fits_80_columns_and_defers_to_the_laboratory() -> None:
    lines = lab_plan.words(lab_plan.plan(evaluate(STOCKS, {"THIN": 0.5, "THICK": 0.5}), STOCKS))
    assert max(map(len, lines)) <= 80
    assert "procedures decide" in " ".join(lines[-2:])


@pytest.mark.parametrize("grams", [0.0, 19.0, 1e6])
def test_a_mass_no_bench_can_weigh_is_refused(grams: float) -> None:
    with pytest.raises(DeskError, match="bench blend lies between"):
        lab_plan.plan(evaluate(STOCKS, {"THIN": 1.0}), STOCKS, grams)


def test_one_stock_alone_has_no_pair() -> None:
    made = lab_plan.plan(evaluate(STOCKS, {"THIN": 1.0}), STOCKS)
    assert made.pairs == ()
    assert made.series == ()
