"""Unit scales against the Hydraulic Institute table, definitions, and what a person types."""

from __future__ import annotations

import math

import chemicals.viscosity as reference
import pytest
from hypothesis import given
from hypothesis import strategies as st

from solver.errors import RangeError, ScaleError
from solver.scales import (
    celsius_to_fahrenheit,
    fahrenheit_to_celsius,
    kv_of_sus,
    litres_at_15,
    parse,
    parse_kv_pair,
    sus_of,
)
from solver.walther import line_through

# Hydraulic Institute table, SUS at 100 °F → mm²/s (read in chemicals.viscosity.viscosity_converter).
SUS = {100: 20.515, 150: 31.892, 200: 42.900, 500: 107.894, 1000: 215.861}


@pytest.mark.parametrize("seconds", SUS)
def test_saybolt_against_the_table(seconds: int) -> None:
    # The formula of ASTM D2161 (from memory) stands for the table to its printed digits.
    assert kv_of_sus(seconds) == pytest.approx(SUS[seconds], abs=6e-4)
    other = reference.viscosity_converter(seconds, "saybolt universal", "kinematic viscosity") * 1e6
    assert kv_of_sus(seconds) == pytest.approx(other, rel=2e-4)


def test_saybolt_at_210_fahrenheit() -> None:
    assert sus_of(42.900, 210.0) == pytest.approx(201.3, abs=0.05)  # from memory: 1 + 6.1e-5 (t − 100)


@given(st.floats(2.0, 5000.0), st.sampled_from([100.0, 210.0]))
def test_saybolt_goes_back(kv: float, fahrenheit: float) -> None:
    assert kv_of_sus(sus_of(kv, fahrenheit), fahrenheit) == pytest.approx(kv, rel=1e-9)


def test_a_saybolt_pair_is_carried_on_its_line() -> None:
    pair = parse_kv_pair("215/46 SUS")
    assert pair is not None
    oil = line_through(37.7777777777778, kv_of_sus(215.0, 100.0), 98.8888888888889, kv_of_sus(46.0, 210.0))
    assert pair.kv40 == pytest.approx(float(oil.kv(40.0)), rel=1e-9)
    assert pair.kv100 == pytest.approx(float(oil.kv(100.0)), rel=1e-9)
    assert pair.kv40 < kv_of_sus(215.0)  # 100 °F is cooler than 40 °C
    assert pair.note == ("215 SUS at 100 °F and 46 SUS at 210 °F are KV40 41.48 and KV100 5.889 mm²/s on "
                         "their D341 line")
    assert parse_kv_pair("46") is None


@pytest.mark.parametrize(("typed", "quantity", "value"), [
    ("46", "kv", 46.0), ("46 cSt", "kv", 46.0), ("46 mm2/s", "kv", 46.0), ("0.46 St", "kv", 46.0),
    ("1 P", "dynamic", 100.0), ("0.1 Pa·s", "dynamic", 100.0), ("7000 cP", "dynamic", 7000.0),
    ("110F", "temperature", 43.0 + 1 / 3), ("212 °F", "temperature", 100.0), ("40 °C", "temperature", 40.0),
    ("-12", "temperature", -12.0), ("−12", "temperature", -12.0), ("0.868 kg/L", "density", 868.0),
    ("868", "density", 868.0), ("12 t", "mass", 12000.0), ("100 lb", "mass", 45.359237), ("250", "mass", 250.0),
    ("0.85", "share", 0.0085), ("0.85 %", "share", 0.0085), ("0.0085 fraction", "share", 0.0085),
    ("0.8 /kg", "price", 800.0), ("3", "number", 3.0)])
def test_what_a_person_types(typed: str, quantity: str, value: float) -> None:
    assert parse(typed, quantity) == pytest.approx(value, rel=1e-12)  # type: ignore[arg-type]


@pytest.mark.parametrize(("typed", "value"), [("3500 L", 3080.0), ("3.5 m³", 3080.0),
                                              ("1 US gal", 3.785411784 * 0.88)])
def test_a_volume_with_a_density_is_a_mass(typed: str, value: float) -> None:
    assert parse(typed, "mass", 880.0) == pytest.approx(value, rel=1e-12)
    assert litres_at_15(3080.0, 880.0) == pytest.approx(3500.0)


@pytest.mark.parametrize(("typed", "quantity", "message"), [
    ("215 SUS", "kv", "'215 SUS' alone cannot be placed: SUS is timed at 100 or 210 °F, not at 40 or 100 °C; "
                      "type both, 100 °F first, as 215/46 SUS"),
    ("40 cP", "kv", "'40 cP' is a dynamic viscosity: divide by the density in g/cm³ at that temperature and "
                    "type mm²/s"),
    ("31,5", "kv", "'31,5': a comma is not read as a decimal point or a thousands mark; write 31.5 or leave "
                   "the comma out"),
    ("abc", "number", "'abc' is not a number; type one such as 46 or 46.5, with a unit if it is not the usual one"),
    ("nan", "number", "'nan' is not a number; type one such as 46 or 46.5, with a unit if it is not the usual one"),
    ("3500 L", "mass", "'3500 L' is a volume: enter the density at 15 °C first, or type kg or t"),
    ("12 gal", "mass", "'12 gal': which gallon? type US gal, or litres"),
    ("12 bar", "mass", "'12 bar': the unit 'bar' does not belong here; usable are kg, t, lb, and with a density "
                       "L, m³, US gal"),
    ("1e999", "number", "'1e999' is too large to be a quantity")])
def test_what_cannot_be_placed(typed: str, quantity: str, message: str) -> None:
    with pytest.raises(ScaleError) as caught:
        parse(typed, quantity)  # type: ignore[arg-type]
    assert str(caught.value) == message


def test_a_pair_that_is_no_oil() -> None:
    with pytest.raises(ScaleError, match="is not the pair of one oil at 100 and 210 °F"):
        parse_kv_pair("46/215 SUS")
    with pytest.raises(RangeError, match="where the Saybolt scale begins"):
        kv_of_sus(20.0)


@given(st.floats(-100.0, 400.0))
def test_fahrenheit_goes_back(celsius: float) -> None:
    assert fahrenheit_to_celsius(celsius_to_fahrenheit(celsius)) == pytest.approx(celsius, abs=1e-10)


@given(st.floats(1e-6, 1e9), st.sampled_from(["kg", "t", "lb"]))
def test_masses_scale(amount: float, unit: str) -> None:
    one = parse(f"1 {unit}", "mass")
    assert parse(f"{amount!r} {unit}", "mass") == pytest.approx(amount * one, rel=1e-12)
    assert math.isfinite(one)
