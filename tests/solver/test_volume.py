"""The volume of oil at a temperature, and the litres of a tonne as a limit."""

from __future__ import annotations

import numpy as np
import pytest

from solver.errors import TargetError
from solver.properties import is_stock_code, lookup, volume_at
from solver.recipe import design, evaluate
from solver.rows import build
from solver.stocks import Stock
from solver.target import LAWS, Limit, Target
from solver.volume import HIGHEST, LOWEST, density_at, litres
from solver.whole import whole

LIGHT = Stock("LIGHT", on_hand_kg=5e4, price_per_t=800.0, density15=868.0, kv40=30.6, kv100=5.23)
BRIGHT = Stock("BRIGHT", on_hand_kg=5e4, price_per_t=1200.0, density15=897.0, kv40=490.0, kv100=32.0)


@pytest.mark.parametrize(("celsius", "factor"), [(15.0, 1.0), (20.0, 0.996380), (40.0, 0.981824), (60.0, 0.967157),
                                                 (100.0, 0.937534)])
def test_the_volume_correction_of_868(celsius: float, factor: float) -> None:
    """Computed from the formula of the 1980 table 54D (M), to its six digits."""
    assert float(density_at(868.0, celsius)) / 868.0 == pytest.approx(factor, abs=6e-7)


@pytest.mark.parametrize("density", [801.0, 868.0, 900.0, 950.0, 1163.0])
@pytest.mark.parametrize("celsius", [-20.0, 0.0, 20.0, 40.0, 60.0, 100.0, 149.0])
def test_it_agrees_with_the_same_group_based_on_60_f(density: float, celsius: float) -> None:
    """API MPMS chapter 11.1 of 2004 (ASTM D1250-04) gives lubricating oils by their density at 60 °F:
    CTL = exp[−α Δt (1 + 0.8 α Δt)], α = 0.34878/ρ60 per °F (R: the standard's constants as quoted on a public page).
    Another base temperature is another curve of the same family: they part by no more than 1e-4."""
    at_60f = float(density_at(density, (60.0 - 32.0) / 1.8))
    alpha, step = 0.34878 / at_60f, celsius * 1.8 + 32.0 - 60.0
    by_60f = at_60f * np.exp(-alpha * step * (1.0 + 0.8 * alpha * step))
    assert float(density_at(density, celsius)) == pytest.approx(by_60f, rel=1e-4)


def test_ten_degrees_ignored_are_0_7_per_cent_and_40_about_3() -> None:
    """Common practice of metering: 10 °C ignored is 0.7 % of the volume, 20 to 60 °C adds about 3 %."""
    at_20, at_30, at_60 = (litres(1000.0, 880.0, celsius) for celsius in (20.0, 30.0, 60.0))
    assert 100.0 * (at_30 / at_20 - 1.0) == pytest.approx(0.7, abs=0.05)
    assert 100.0 * (at_60 / at_20 - 1.0) == pytest.approx(3.0, abs=0.1)


def test_litres_are_mass_over_density_and_any_shape_will_do() -> None:
    assert litres(897.0, 897.0, 15.0) == pytest.approx(1000.0)
    assert litres(2e3, 870.0, 60.0) == pytest.approx(2e6 / float(density_at(870.0, 60.0)))
    found = density_at([[868.0], [897.0]], [20.0, 60.0])
    assert found.shape == (2, 2)
    assert float(found[1, 1]) == pytest.approx(float(density_at(897.0, 60.0)))
    assert np.all(np.diff(density_at(880.0, np.linspace(LOWEST, HIGHEST, 200))) < 0.0)


# As a property

def test_its_code_carries_the_temperature() -> None:
    entry = lookup("vol60")
    assert (entry.unit, entry.temperature, entry.name) == ("L/t", 60.0, "volume at 60 °C")
    assert (volume_at("vol60"), volume_at("vol-20"), volume_at("kv60"), volume_at("flash")) == (60.0, -20.0, None, None)
    assert not is_stock_code("vol60")
    with pytest.raises(TargetError, match="vol151: the temperature must lie between −20 to 150 °C"):
        lookup("vol151")
    with pytest.raises(TargetError, match="vol060: write vol60"):
        lookup("vol060")


def test_a_stock_has_it_from_its_density_only() -> None:
    assert LIGHT.value_of("vol60") == pytest.approx(litres(1000.0, 868.0, 60.0))
    assert Stock("X", values={"vol60": 1200.0}).value_of("vol60") is None


@pytest.mark.parametrize("law", LAWS)
def test_volumes_of_a_blend_add_up(law: str) -> None:
    target = Target("t", (Limit("vol60", None, 1500.0),), law=law)
    made = evaluate([LIGHT, BRIGHT], {"LIGHT": 0.7, "BRIGHT": 0.3}, target)
    assert made.predicted["vol60"] == pytest.approx(litres(700.0, 868.0, 60.0) + litres(300.0, 897.0, 60.0))


def test_a_fill_limit_of_so_many_litres_holds_for_the_batch() -> None:
    """20 t into 23.5 m³ at 60 °C: the heavier oil must be at least the part that the volumes ask, by hand."""
    high = 1000.0 * 23.5e3 / 20e3
    target = Target("t", (Limit("kv40", 30.0, 500.0), Limit("vol60", None, high)), batch_kg=20e3)
    recipe = design([LIGHT, BRIGHT], target)
    light, bright = litres(1000.0, 868.0, 60.0), litres(1000.0, 897.0, 60.0)
    part = (light - high) / (light - bright)
    assert (recipe.shares or {})["BRIGHT"] == pytest.approx(part, rel=1e-6)
    assert [(x.property, x.binding) for x in recipe.limits if x.binding] == [("vol60", "high")]
    charged = whole([LIGHT, BRIGHT], target).charges_kg or {}
    assert sum(litres(kg, s.density15 or 0.0, 60.0) for s, kg in ((s, charged[s.code]) for s in (LIGHT, BRIGHT))) <= (
        23.5e3 * (1.0 + 2e-6))


def test_an_oil_of_unknown_density_cannot_serve_where_it_is_limited() -> None:
    unknown = Stock("U", on_hand_kg=5e4, price_per_t=1.0, kv40=100.0, kv100=11.0)
    model = build([LIGHT, BRIGHT, unknown], Target("t", (Limit("kv40", 90.0, 110.0), Limit("vol60", None, 1200.0)),
                                                   batch_kg=1e3))
    assert [(x.stock, x.cell) for x in model.left_out] == [("U", "density15")]
    assert model.left_out[0].reason == "its density is unknown and the product limits its volume at 60 °C"
