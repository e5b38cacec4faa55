"""The D341 line and density at temperature against tables and measured oils."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from solver.errors import RangeError
from solver.walther import density_at, kv_of, line, line_through, w_of

# KV40, KV100: A, B, KV at 0, 20, 50, 80, 150 °C. Computed from ASTM D341's short form, Z inverted exactly.
TABLE = [
    (32, 5.4, 9.530815, 3.746578, "336.0 86.278 21.496 8.5332 2.3922"),
    (46, 6.8, 9.417993, 3.684441, "577.3 133.84 29.973 11.103 2.8529"),
    (100, 11.1, 9.203413, 3.566750, "1824.1 341.80 61.043 19.465 4.1360"),
    (460, 30.5, 8.655241, 3.297523, "15127 2045.6 251.16 61.214 9.0050"),
    (395, 39, 7.323133, 2.768143, "6188.4 1311.5 239.69 72.105 12.753"),
    (5.0, 1.7, 9.645900, 3.913629, "18.817 8.8201 3.9599 2.2660 0.98596")]


@pytest.mark.parametrize(("kv40", "kv100", "a", "b", "printed"), TABLE)
def test_line_and_table(kv40: float, kv100: float, a: float, b: float, printed: str) -> None:
    oil = line(kv40, kv100)
    assert round(oil.a, 6) == a
    assert round(oil.b, 6) == b
    assert oil.slope == oil.b
    for celsius, text in zip((0, 20, 50, 80, 150), printed.split(), strict=True):
        digits = len(text.partition(".")[2])
        assert f"{float(oil.kv(celsius)):.{digits}f}" == text


@given(st.floats(0.21, 2e6))
def test_the_inverse_is_exact(kv: float) -> None:
    assert float(kv_of(w_of(kv))) == pytest.approx(kv, rel=1e-11)


@given(st.floats(3.0, 3000.0), st.floats(0.05, 0.6), st.floats(-20.0, 160.0))
def test_temperature_at_a_viscosity_goes_back(kv40: float, ratio: float, celsius: float) -> None:
    oil = line(kv40, max(0.6, kv40 * ratio * 0.6))
    kv = float(oil.kv(celsius))
    if 0.25 < kv < 1e7:
        assert oil.temperature(kv) == pytest.approx(celsius, abs=1e-6)


# Stachowiak and Batchelor, Engineering Tribology, table 2.3: mPa·s at 30, 60, 100 °C, two or three digits.
MEASURED = [(250, 50.5, 12.6), (810, 135, 26.8), (45, 12, 3.9), (107, 23.3, 6.4), (122, 26.3, 7.3), (171, 31, 7.5)]


@pytest.mark.parametrize(("at30", "at60", "at100"), MEASURED)
def test_measured_oils_within_three_percent_at_60(at30: float, at60: float, at100: float) -> None:
    density = 880.0
    kv30, kv100 = (1000.0 * mu / density_at(density, t) for mu, t in ((at30, 30.0), (at100, 100.0)))
    assert line_through(30.0, kv30, 100.0, kv100).dynamic(60.0, density) == pytest.approx(at60, rel=0.03)


def test_volume_correction() -> None:
    # Lubricating oils, the 1980 petroleum measurement tables, 54D (from memory), ρ15 = 868 kg/m³.
    for celsius, factor in ((20, 0.996380), (40, 0.981824), (60, 0.967157), (100, 0.937534)):
        assert round(density_at(868.0, celsius) / 868.0, 6) == factor


def test_what_no_line_can_be() -> None:
    with pytest.raises(RangeError, match=r"KV 7 at 100 °C is not below 5 at 40 °C: oil thins as it warms; "
                                         r"are the two swapped\?"):
        line(5.0, 7.0)
    with pytest.raises(RangeError, match=r"lies outside 0\.21 to 2e7"):
        line(5.0, 0.1)
    with pytest.raises(RangeError, match="must be above 0"):
        density_at(0.0, 20.0)


def test_water_is_about_one_centipoise() -> None:
    # Common knowledge: water at 20 °C has 1 mPa·s and 998 kg/m³, so about 1.002 mm²/s; KV = μ/ρ.
    water = line_through(20.0, 1.0034, 80.0, 0.365)  # handbook KV of water, from memory
    assert water.dynamic(20.0, 998.0) == pytest.approx(1.0, abs=0.02)
