"""Blending laws against worked figures, and what must be true of any of them."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from solver.errors import StockError, TargetError
from solver.laws import kv_of_vbn, predict, row, vbn
from solver.stocks import Stock, StockTable
from solver.target import LAWS

# Invented stocks of the project's check values: KV40, KV100, density.
STOCKS = {"N150": (30.6, 5.23, 868.0), "N500": (95.5, 10.75, 879.0), "BS": (480.0, 31.5, 897.0),
          "P4": (17.5, 4.0, 820.0), "P40": (395.0, 39.0, 850.0)}
TABLE = StockTable(Stock(code, kv40=a, kv100=b, density15=d) for code, (a, b, d) in STOCKS.items())
PAIRS = {"like": ("N150", 0.5, "N500"), "wide": ("N150", 0.7, "BS"), "synthetic": ("P4", 0.5, "P40")}

# Each printed digit computed from the formula of the law (so: agreement with the formula and no more);
# formulas: Refutas after R. E. Maples (2000), Walther and Wright after ASTM D7152.
PRINTED = {
    "walther-volume": {"like": (51.8602, 7.3135), "wide": (58.8403, 8.0156), "synthetic": (62.0178, 9.9798)},
    "walther-mass": {"like": (52.0456, 7.3300), "wide": (59.8245, 8.1027), "synthetic": (63.7327, 10.1793)},
    "wright-volume": {"like": (52.6049, 7.3798), "wide": (63.1466, 8.3929), "synthetic": (75.7118, 11.5361)},
    "wright-mass": {"like": (52.7935, 7.3965), "wide": (64.2775, 8.4904), "synthetic": (77.8705, 11.7744)},
    "refutas": {"like": (52.0664, 7.3391), "wide": (59.8883, 8.1346), "synthetic": (63.8923, 10.2659)}}


def shares_of(first: str, share: float, second: str) -> np.ndarray:
    x = np.zeros(len(TABLE))
    x[TABLE.index(first)], x[TABLE.index(second)] = share, 1.0 - share
    return x


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("pair", PAIRS)
def test_every_printed_digit(law: str, pair: str) -> None:
    found = predict(law, TABLE, shares_of(*PAIRS[pair]))
    assert tuple(round(float(v), 4) for v in found) == PRINTED[law][pair]


def test_refutas_numbers() -> None:
    # Computed from the formula, R. E. Maples (2000).
    printed = {1: 3.25176, 2: 11.39924, 5: 19.17357, 10: 23.57467, 46: 30.55235, 100: 33.19615, 1000: 39.06574}
    for kv, number in printed.items():
        assert round(float(vbn(kv)), 5) == number
        assert float(kv_of_vbn(vbn(kv))) == pytest.approx(kv, rel=1e-12)


def test_share_for_a_given_viscosity() -> None:
    # Share of N500 in N150 + N500 for KV40 = 46: solved from the formulas (check values of the project).
    for law, share in (("refutas", 0.389167), ("walther-volume", 0.389514)):
        c = row(law, TABLE, 40.0, 46.0, "high")
        i, j = TABLE.index("N150"), TABLE.index("N500")
        x = c[i] / (c[i] - c[j])  # where the row is zero
        if law.endswith("volume"):
            volume = x / 879.0 / (x / 879.0 + (1 - x) / 868.0)
            assert round(volume, 6) == share
        else:
            assert round(x, 6) == share


def test_the_laws_differ_as_published() -> None:
    # (max − min)/refutas on KV40: 1.8 % like oils, 9.1 % with bright stock, 25 % PAO 4 + PAO 40 (computed).
    for pair, percent in (("like", 1.8), ("wide", 9.1), ("synthetic", 25.0)):
        values = [predict(law, TABLE, shares_of(*PAIRS[pair]))[0] for law in LAWS]
        refutas = predict("refutas", TABLE, shares_of(*PAIRS[pair]))[0]
        assert 100 * (max(values) - min(values)) / refutas == pytest.approx(percent, abs=0.5)


shares = st.lists(st.floats(0.0, 1.0), min_size=5, max_size=5).filter(lambda v: sum(v) > 0.05).map(
    lambda v: np.array(v) / sum(v))
laws = st.sampled_from(LAWS)


@given(laws, shares, st.sampled_from([-20.0, 0.0, 40.0, 60.0, 100.0, 150.0]))
def test_a_blend_lies_between_its_stocks(law: str, x: np.ndarray, celsius: float) -> None:
    own = np.array([predict(law, TABLE, np.eye(5)[i], [celsius])[0] for i in np.flatnonzero(x > 0.0)])
    blend = predict(law, TABLE, x, [celsius])[0]
    assert own.min() * (1 - 1e-9) <= blend <= own.max() * (1 + 1e-9)


@given(laws, shares, st.permutations(range(5)))
def test_order_does_not_matter(law: str, x: np.ndarray, order: list[int]) -> None:
    again = predict(law, TABLE.where(order), x[np.array(order)])
    assert again == pytest.approx(predict(law, TABLE, x), rel=1e-9)


@given(laws, shares, st.sampled_from([0.0, 40.0, 100.0]), st.floats(0.3, 3.0), st.sampled_from(["low", "high"]))
@settings(max_examples=300)
def test_a_row_says_what_the_law_says(law: str, x: np.ndarray, celsius: float, factor: float, side: str) -> None:
    value = float(predict(law, TABLE, x, [celsius])[0])
    limit = value * factor
    if abs(factor - 1.0) < 1e-9:
        return
    inside = value <= limit if side == "high" else value >= limit
    assert (float(row(law, TABLE, celsius, limit, side) @ x) <= 0.0) == inside


@given(laws, st.integers(0, 4))
def test_a_stock_alone_keeps_its_own_viscosity(law: str, i: int) -> None:
    assert predict(law, TABLE, np.eye(5)[i]) == pytest.approx(TABLE.kv[i], rel=1e-9)


def test_no_mismatch_of_row_and_law_over_many_blends() -> None:
    rng = np.random.default_rng(7)
    x = rng.dirichlet(np.full(5, 0.4), size=4000)
    for law in LAWS:
        for celsius, limit in ((40.0, 61.3), (100.0, 8.8), (-10.0, 2500.0)):
            values = np.array([predict(law, TABLE, each, [celsius])[0] for each in x[:600]])
            said = x[:600] @ row(law, TABLE, celsius, limit, "high") <= 0.0
            clear = np.abs(values / limit - 1.0) > 1e-12
            assert np.array_equal(said[clear], (values <= limit)[clear])


def test_unknown_law_and_missing_data() -> None:
    with pytest.raises(TargetError, match="unknown law 'arrhenius'; known are refutas"):
        predict("arrhenius", TABLE, np.eye(5)[0])
    bare = StockTable([Stock("X", kv40=30.0, kv100=5.0)])
    with pytest.raises(StockError, match="X: the law wright-volume needs KV40, KV100 and density"):
        predict("wright-volume", bare, np.ones(1))
