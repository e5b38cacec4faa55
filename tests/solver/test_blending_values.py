"""The index with which a stock blends, worked back from measured blends."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from solver.blending_values import BlendingValue, blending_value
from solver.errors import SolverError
from solver.laws import LAWS, index_of_law, viscosity_gauge
from solver.measured import Measured, Part
from solver.recipe import evaluate
from solver.target import Effective, Excess, Limit, Target

# Invented stocks of the project's check values: KV40, KV100, density; and an invented VI improver's neat pair.
STOCKS = {"N150": (30.6, 5.23, 868.0), "N500": (95.5, 10.75, 879.0), "VM": (7150.0, 705.0, 890.0)}
FOUR = ({"N150": 0.95, "VM": 0.05}, {"N150": 0.5, "N500": 0.43, "VM": 0.07}, {"N150": 0.3, "N500": 0.6, "VM": 0.1},
        {"N150": 0.88, "VM": 0.12})


def blend(name: str, taught: Effective, shares: dict[str, float], off: tuple[float, float] = (0.0, 0.0),
          more: tuple[Excess, ...] = ()) -> Measured:
    """As it would measure if the improver blended as `taught`, off by so much; entered with its neat pair."""
    parts = tuple(Part(code, x, *STOCKS[code]) for code, x in shares.items())
    bare = Measured(name, parts=parts)
    x = np.array(list(shares.values()))
    kv = {t: viscosity_gauge(taught.law, bare.table(), t, (taught, *more)).read(x) for t in (40.0, 100.0)}
    return replace(bare, values={"kv40": kv[40.0] * (1.0 + off[0]), "kv100": kv[100.0] * (1.0 + off[1])})


def refutas(j40: float = 52.0, j100: float = 61.0) -> Effective:
    """An improver that does more hot than cold: no viscosity has these numbers (2e7 mm²/s is 52.0)."""
    return Effective("VM", "refutas", {40.0: j40, 100.0: j100})


def index_of(found: BlendingValue) -> dict[float, float]:
    return {celsius: one.index for celsius, one in found.at.items()}


# Round trips

@given(st.sampled_from(LAWS), st.floats(-0.3, 3.0), st.floats(-0.3, 3.0), st.floats(0.03, 0.3))
@settings(max_examples=60, deadline=None)
def test_a_known_index_is_worked_back_from_one_blend_under_every_law(law: str, cold: float, hot: float,
                                                                     share: float) -> None:
    # From thinner than any other stock to far beyond what a viscosity can have, in parts of the scale of the index.
    low, high = (float(index_of_law(law)[0](kv)) for kv in (3.0, 2e7))
    taught = Effective("VM", law, {40.0: low + cold * (high - low), 100.0: low + hot * (high - low)})
    measured = replace(blend("B1", taught, {"N150": 0.9 - share, "N500": 0.1, "VM": share}), confirmed=True)
    assume(0.5 <= measured.values["kv100"] < measured.values["kv40"] <= 1e6)  # what a laboratory can measure
    found = blending_value([measured], "VM", law)
    assert index_of(found) == pytest.approx(taught.index, rel=1e-6, abs=1e-6)
    assert found.shares == pytest.approx((0.9 * share, 1.1 * share))
    assert (found.blends, found.provisional, found.rough) == (("B1",), True, False)
    for one in found.at.values():
        assert one.fitted_pct < 1e-6
        assert (one.kv is None) == (not low <= one.index <= high) or 0.21 <= (one.kv or 0.0) < 3.0


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("beyond", [0.6, 1.3])
def test_four_blends_tell_it_again_and_predict_one_another(law: str, beyond: float) -> None:
    high = float(index_of_law(law)[0](2e7))
    taught = Effective("VM", law, {40.0: beyond * high, 100.0: (beyond + 0.1) * high})
    measured = [replace(blend(f"B{n}", taught, x), confirmed=True) for n, x in enumerate(FOUR)]
    found = blending_value(measured, "VM", law)
    assert index_of(found) == pytest.approx(taught.index, rel=1e-6)
    assert all((one.kv is None) == (beyond > 1.0) for one in found.at.values())
    assert all(one.leave_one_out_pct == pytest.approx(0.0, abs=1e-6) for one in found.at.values())
    assert found.shares == pytest.approx((0.045, 0.132))
    assert not found.provisional
    assert found.effective("L1") == Effective("VM", law, index_of(found), found.shares, "L1", False)


@pytest.mark.parametrize("law", LAWS)
def test_noise_stays_within_three_standard_errors(law: str) -> None:
    rng = np.random.default_rng(5)
    high = float(index_of_law(law)[0](2e7))
    taught = Effective("VM", law, {40.0: 0.9 * high, 100.0: 1.1 * high})
    for _ in range(20):
        measured = [blend(f"B{n}", taught, x, tuple(rng.normal(0.0, 0.003, 2))) for n, x in enumerate(FOUR)]
        found = blending_value(measured, "VM", law)
        for celsius, one in found.at.items():
            assert abs(one.index - taught.index[celsius]) < 3.0 * one.error
            assert 0.0 < one.leave_one_out_pct < 1.5


def test_the_error_stated_is_what_repeating_shows() -> None:
    rng = np.random.default_rng(8)
    shares = (0.08, 0.1, 0.1, 0.12)
    found = []
    for _ in range(60):
        measured = [blend(f"B{i}", refutas(), {"N150": 1.0 - x, "VM": x}, tuple(rng.normal(0.0, 0.008, 2)))
                    for i, x in enumerate(shares)]
        found.append(blending_value(measured, "VM", "refutas").at[40.0])
    assert np.mean([one.index for one in found]) == pytest.approx(52.0, abs=0.1)
    # The error stated for 0.8 % of noise is what 60 repetitions scatter by.
    assert np.std([one.index for one in found]) == pytest.approx(np.mean([one.error for one in found]), rel=0.3)
    # What it is worth in a blend with 10 %: four results sure to 0.8 %, so 0.4 %, a little more for what they scatter.
    assert np.mean([one.error_pct for one in found]) == pytest.approx(0.4, rel=0.2)
    one = blending_value([blend("B0", refutas(), {"N150": 0.9, "VM": 0.1})], "VM", "refutas")
    assert one.at[40.0].error_pct == pytest.approx(0.8, rel=1e-3)


# What it is good for

def test_the_lesson_predicts_another_blend() -> None:
    for law in LAWS:
        high = float(index_of_law(law)[0](2e7))
        taught = Effective("VM", law, {40.0: high, 100.0: 1.2 * high})
        found = blending_value([blend("B1", taught, {"N150": 0.9, "VM": 0.1})], "VM", law)
        other = blend("B2", taught, {"N500": 0.91, "VM": 0.09})
        target = Target("t", (Limit("kv40", 1.0),), law=law, lessons=(found.effective("L1"),))
        read = evaluate(other.table(), {"N500": 0.91, "VM": 0.09}, target)
        assert read.predicted["kv40"] == pytest.approx(other.values["kv40"], rel=1e-6)
        assert read.predicted["kv100"] == pytest.approx(other.values["kv100"], rel=1e-6)
        assert (read.lessons, read.provisional, read.warnings) == (("L1",), ("L1",), ())
        (warning,) = evaluate(other.table(), {"N500": 0.8, "VM": 0.2}, target).warnings
        assert warning.startswith("VM 20.00 %: its lesson L1 holds from 9.00 to 11.00 %")


def test_what_its_viscosity_on_record_says_stands_beside() -> None:
    (one, hot) = blending_value([blend("B1", refutas(50.0), {"N150": 0.9, "VM": 0.1})], "VM", "refutas").at.values()
    assert (one.own, hot.own) == pytest.approx((14.534 * np.log(np.log(7150.8)) + 10.975,
                                                14.534 * np.log(np.log(705.8)) + 10.975))
    assert one.alone_pct > 15.0 > 1e-6 > one.fitted_pct
    assert (one.kv is not None, hot.kv) == (True, None)


def test_only_what_was_measured_is_taught() -> None:
    cold = replace(blend("B1", refutas(), {"N150": 0.9, "VM": 0.1}), values={"kv40": 60.0})
    found = blending_value([cold], "VM", "refutas")
    assert list(found.at) == [40.0]
    between = replace(cold, values={"kv40": 60.0, "kv60": 30.0, "density15": 870.0})
    assert list(blending_value([between], "VM", "refutas").at) == [40.0, 60.0]


def test_a_temperature_at_which_the_law_cannot_be_read_is_passed_over() -> None:
    light = Measured("B1", parts=(Part("N", 0.9, 1.1, 0.4), Part("VM", 0.1, *STOCKS["VM"])),
                     values={"kv40": 2.0, "kv200": 0.3})  # N is thinner than 0.21 mm²/s at 200 °C
    assert list(blending_value([light], "VM", "refutas").at) == [40.0]


def test_the_range_is_the_one_of_every_temperature() -> None:
    measured = [blend(f"B{n}", refutas(), x) for n, x in enumerate(FOUR)]
    measured[0] = replace(measured[0], values={"kv40": measured[0].values["kv40"]})
    found = blending_value(measured, "VM", "refutas")
    assert found.shares == pytest.approx((0.9 * 0.07, 1.1 * 0.12))
    assert [len(one.blends) for one in found.at.values()] == [4, 3]
    assert found.provisional
    assert found.at[100.0].leave_one_out_pct is None


def test_where_one_index_does_not_serve_the_whole_range_it_says_so() -> None:
    # A thickener that does more per % the more of it there is.
    measured = [blend("B1", refutas(42.0, 40.0), {"N150": 0.95, "VM": 0.05}),
                blend("B2", refutas(47.0, 46.0), {"N150": 0.8, "VM": 0.2})]
    found = blending_value(measured, "VM", "refutas")
    assert found.rough
    assert found.at[40.0].fitted_pct > 3.0
    assert found.at[40.0].error > blending_value(measured[1:], "VM", "refutas").at[40.0].error


def test_other_lessons_count_and_its_own_is_worked_back_anew() -> None:
    excess = Excess("N150", "N500", "refutas", {40.0: (1.0,), 100.0: (1.0,)})
    measured = [blend("B1", refutas(), {"N150": 0.5, "N500": 0.4, "VM": 0.1}, more=(excess,))]
    found = blending_value(measured, "VM", "refutas", (excess, refutas(20.0, 20.0)))
    assert index_of(found) == pytest.approx({40.0: 52.0, 100.0: 61.0}, rel=1e-6)
    assert blending_value(measured, "VM", "refutas").at[40.0].index > 53.0
    package = Effective("N500", "refutas", {40.0: 30.0, 100.0: 20.0})
    other = blending_value(measured, "VM", "refutas", (excess, package))
    assert other.at[40.0].index > 55.0  # N500 is taken to be thinner, so the improver must do more


# Which blends count

def test_a_slip_of_the_pen_teaches_nothing_until_it_is_confirmed() -> None:
    measured = [blend(f"B{n}", refutas(), x) for n, x in enumerate(FOUR)]
    # 4.632 s of SUS at 100 °F a mm²/s (Hydraulic Institute table, R).
    sus = replace(measured[0], values={**measured[0].values, "kv40": 4.632 * measured[0].values["kv40"]})
    found = blending_value([sus, *measured[1:]], "VM", "refutas")
    assert (found.left_out, found.blends) == (("B0",), ("B1", "B2", "B3"))
    assert index_of(found) == pytest.approx(refutas().index, rel=1e-6)
    taken = blending_value([replace(sus, confirmed=True), *measured[1:]], "VM", "refutas")
    assert (taken.left_out, taken.blends, taken.rough) == ((), ("B0", "B1", "B2", "B3"), True)


def test_a_pair_entered_for_another_law_hides_no_blend() -> None:
    # Under Wright 10 % of 60000/26000 mm²/s is out tenfold, which is no slip of the laboratory's.
    taught = Effective("VM", "refutas", {40.0: 45.0, 100.0: 43.7})
    measured = blend("B1", taught, {"N150": 0.9, "VM": 0.1})
    entered = replace(measured, parts=(measured.parts[0], Part("VM", 0.1, 60000.0, 26000.0, 876.0)))
    found = blending_value([entered], "VM", "wright-mass")
    assert (found.left_out, found.at[40.0].fitted_pct) == ((), pytest.approx(0.0, abs=1e-6))
    assert found.at[40.0].alone_pct > 500.0


def test_a_stock_of_which_there_is_little_explains_no_result_that_is_off_by_a_factor() -> None:
    measured = blend("B1", refutas(), {"N150": 0.87, "N500": 0.02, "VM": 0.11})
    wrong = replace(measured, parts=(*measured.parts[:2], Part("VM", 0.11, 3.0, 1.2, 890.0)))
    assert blending_value([wrong], "VM", "refutas").blends == ("B1",)
    with pytest.raises(SolverError, match=r"^N500: each of the 1 blends that hold it is in question"):
        blending_value([wrong], "N500", "refutas")


def test_a_repeat_counts_once_and_a_confirmed_one_twice() -> None:
    good = blend("B1", refutas(), {"N150": 0.9, "VM": 0.1})
    again = replace(good, name="B2")
    assert blending_value([good, again], "VM", "refutas").blends == ("B1",)
    assert blending_value([good, replace(again, confirmed=True)], "VM", "refutas").blends == ("B1", "B2")


def test_refusals_say_why() -> None:
    good = blend("B1", refutas(), {"N150": 0.9, "VM": 0.1})

    def refused(measured: list[Measured], stock: str = "VM", law: str = "refutas") -> str:
        with pytest.raises(SolverError) as caught:
            blending_value(measured, stock, law)
        return str(caught.value)

    assert refused([good], "PPD") == "PPD is in none of the 1 measured blends; measure one that holds it"
    assert refused([]) == "VM is in none of the 0 measured blends; measure one that holds it"
    assert refused([replace(good, values={"density15": 870.0})]) == (
        "VM: no blend that holds it was measured for viscosity, such as KV40; measure that")
    swapped = replace(good, values={"kv40": 9.0, "kv100": 60.0})
    assert refused([swapped]) == ("VM: each of the 1 blends that hold it is in question; settle the questions, or "
                                  "measure another")
    unknown = replace(good, parts=(good.parts[0], replace(good.parts[1], kv40=None)))
    assert refused([unknown]) == ("VM: the law refutas needs KV40 and KV100 of every stock in a blend, which are not "
                                  "known of VM in B1; enter them, and record the blend anew")
    no_density = replace(good, parts=(replace(good.parts[0], density15=None), good.parts[1]))
    assert refused([no_density], law="walther-volume") == (
        "VM: the law walther-volume needs KV40, KV100 and density of every stock in a blend, which are not known of "
        "N150 in B1; enter them, and record the blend anew")
    small = refused([blend("B1", refutas(), {"N150": 0.995, "VM": 0.005})])
    assert small.startswith("VM: at most 0.5 % of it in the blends is too little to tell; a result is sure to 0.8 %, "
                            "which leaves its number open by 6")
    assert small.endswith("; measure a blend with about 1.2 %")
    assert "leaves its W open by" in refused([blend("B1", replace(refutas(), law="walther-mass", index={
        40.0: 0.9, 100.0: 1.0}), {"N150": 0.995, "VM": 0.005})], law="walther-mass")


def test_many_blends_of_a_small_share_tell_no_more_than_one() -> None:
    # The law and the stocks' own values are out by as much in each: their mean is not surer than one of them.
    measured = [replace(blend(f"B{n}", refutas(), {"N150": 0.6 + 0.02 * n, "N500": 0.395 - 0.02 * n, "VM": 0.005}))
                for n in range(12)]
    with pytest.raises(SolverError, match="too little to tell"):
        blending_value(measured, "VM", "refutas")
