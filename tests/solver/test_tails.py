"""The tail of a normal and an even error, against quadrature of its definition."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

from solver.tails import margin, tail, tail_slopes


@pytest.mark.parametrize("even", [0.0, 1e-4, 0.02, 0.5, 3.0, 40.0])
@pytest.mark.parametrize("d", [-2.0, 0.0, 0.7, 2.5, 4.0])
def test_tail_is_the_normal_tail_averaged_over_the_even_part(even: float, d: float) -> None:
    sigma = 0.8
    if even == 0.0:
        expected = norm.sf(d / sigma)
    else:
        points = [p for p in (d,) if -even < p < even]
        expected = quad(lambda u: norm.sf((d - u) / sigma) / (2 * even), -even, even, points=points or None,
                        epsabs=1e-12)[0]
    assert tail(d, sigma, even) == pytest.approx(expected, abs=2e-9)
    assert tail(d, sigma, -even) == tail(d, sigma, even)


def test_without_any_error_a_result_is_inside_or_outside() -> None:
    assert tail(0.0, 0.0) == 0.0
    assert tail(-1e-7, 0.0, tolerance=1e-6) == 0.0
    assert tail(-1e-3, 0.0, tolerance=1e-6) == 1.0
    assert tail(0.5, 0.0, 1.0) == pytest.approx(0.25)
    assert tail(1.5, 0.0, 1.0) == 0.0


@pytest.mark.parametrize("missed", [0.5, 0.2, 0.05, 0.01, 0.001])
@pytest.mark.parametrize(("sigma", "even"), [(1.0, 0.0), (1.0, 0.3), (0.4, 2.0), (1e-6, 1.0), (0.0, 1.0)])
def test_margin_undoes_tail_and_is_homogeneous(missed: float, sigma: float, even: float) -> None:
    k, by_sigma, by_even = margin(missed, sigma, even)
    assert k == pytest.approx(sigma * by_sigma + even * by_even, abs=1e-9)
    assert tail(k, sigma, even) == pytest.approx(missed, rel=1e-5)


def test_slopes_are_the_differences() -> None:
    for sigma, even in ((1.0, 0.0), (1.0, 0.5), (0.3, 1.5)):
        got = tail_slopes(1.1, sigma, even)
        h = 1e-5
        expected = ((tail(1.1 + h, sigma, even) - tail(1.1 - h, sigma, even)) / (2 * h),
                    (tail(1.1, sigma + h, even) - tail(1.1, sigma - h, even)) / (2 * h))
        assert np.allclose(got[:2], expected, atol=1e-8)
        if even:
            by_even = (tail(1.1, sigma, even + h) - tail(1.1, sigma, even - h)) / (2 * h)
            assert got[2] == pytest.approx(by_even, abs=1e-8)
