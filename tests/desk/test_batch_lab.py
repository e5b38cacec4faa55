"""The laboratory of a batch: samples, results, the verdict with its arithmetic, decisions, and what is questioned."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from datetime import datetime, timedelta
from pathlib import Path

import pytest

from blendtui.desk import batch_lab, batches
from blendtui.desk.batch_verdict import FRESH, NO_RESULT, RELEASE, REPEAT, TRIM, decide
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.store.batch_records import Batch, Charge, Decision, Made, Result, Sample
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from solver.errors import SolverError
from solver.properties import lookup
from solver.target import Limit, Target
from tests.desk.made_batches import all_charged, at, ordered, plant_file, put

STOCKS = """stock,kind,on_hand_kg,price_per_t,density15,kv40,kv100,flash
A,base,60000,800,868,30.6,5.23,210
B,base,60000,1100,897,480,31.5,280
"""
TARGET = Target("P", (Limit("vi", low=95.0, guard=2.0), Limit("flash", low=200.0)), grade="ISO VG 46")
LIMITED = {"kv40": 46.0, "kv100": 6.9, "flash": 230.0}  # VI 105, far inside everything


def made(*results: tuple[int, str, float], samples: tuple[Sample, ...] = (), decisions: tuple[Decision, ...] = (),
         withdrawn: dict[int, str] | None = None) -> Made:
    """A batch that is charged, with results (sample, property, value)."""
    samples = samples or tuple(Sample("B-1", n, 0, at(9, n), "carl") for n in sorted({r[0] for r in results}))
    rows = tuple(Result("B-1", sample, n, code, value, lookup(code).method, at(10, n), "dora",
                        (withdrawn or {}).get(n, "")) for n, (sample, code, value) in enumerate(results, 1))
    charge = Charge("B-1", 1, 0, "A", "", 1000.0, state="done", actual_kg=1000.0, at=at(8), by="anna")
    return Made(Batch("B-1", "P", batch_kg=1000.0, ordered_at=at(7)), (), (charge,), samples, rows, decisions)


def with_kv40(value: float, more: tuple[tuple[int, str, float], ...] = (), **said: object) -> Made:
    """Sample 1 with this KV40, a KV100 that keeps the VI well inside, and a flash point."""
    results = {**LIMITED, "kv40": value, "kv100": max(6.9, 0.15 * value)}
    return made(*((1, code, v) for code, v in results.items()), *more, **said)


# The rule

@pytest.mark.parametrize(("distance", "says"), [
    (6.9, RELEASE), (0.59, RELEASE), (0.5899, REPEAT), (0.0, REPEAT), (-0.0001, FRESH), (-0.999, FRESH), (-1.0, TRIM),
    (-4.0, TRIM)])
def test_the_distance_in_r_decides(distance, says):
    # Common practice (the idea of ISO 4259): inside by 0.59 R or more release; nearer repeat; outside by less than R
    # fresh sample; further trim. 0.59 = 1.645/2.77, the one-sided 95 % of one result.
    assert decide(distance) == says
    assert pytest.approx(1.645 / 2.77, abs=0.005) == 0.59


@pytest.mark.parametrize(("kv40", "says"), [
    (46.0, RELEASE), (41.6, REPEAT), (41.1, FRESH), (40.5, TRIM), (50.4, REPEAT), (51.0, FRESH), (55.0, TRIM)])
def test_the_worst_limit_decides_the_batch(kv40, says):
    # ISO VG 46 is 41.4 to 50.6; R of KV40 is 1.22 % (ASTM D445): 0.505 at 41.4, 0.617 at 50.6.
    found = batch_lab.verdict(with_kv40(kv40), TARGET)
    assert found.decision == says
    assert found.headline == f"sample 1: {says}"


def test_the_arithmetic_is_in_words():
    found = batch_lab.verdict(with_kv40(45.2), TARGET)
    kv40 = next(x for x in found.limits if x.property == "kv40")
    # 45.2 − 41.4 = 3.8 and 50.6 − 45.2 = 5.4; R = 0.0122·41.4 = 0.50508 and 0.0122·50.6 = 0.61732.
    assert (kv40.side, kv40.low, kv40.high, kv40.count) == ("low", 41.4, 50.6, 1)
    assert kv40.distance == pytest.approx(3.8)
    assert kv40.reproducibility == pytest.approx(0.50508)
    assert kv40.in_r == pytest.approx(7.5236, abs=1e-4)
    assert kv40.words == ("KV40 45.20 mm²/s, low 41.40: inside by 3.80 = 7.52 R (R 0.505, ASTM D445): release")
    assert [x.property for x in found.limits] == ["kv40", "vi", "flash"]


def test_the_guard_of_the_recipe_is_no_limit_of_the_laboratory():
    vi = next(x for x in batch_lab.verdict(with_kv40(46.0), TARGET).limits if x.property == "vi")
    assert (vi.low, vi.high) == (95.0, None)


def test_a_limit_without_a_result_blocks_release_and_is_named():
    found = batch_lab.verdict(made((1, "kv40", 46.0), (1, "flash", 230.0)), TARGET)
    assert (found.decision, found.missing) == (NO_RESULT, (
        "VI (KV40 and KV100 from one sample; sample 1 has only KV40)",))
    assert "VI: no result (low 95)" in found.words
    # A limit that is missed is worse than one that is unknown.
    found = batch_lab.verdict(made((1, "kv40", 30.0)), TARGET)
    assert (found.decision, len(found.missing)) == (TRIM, 2)
    assert found.headline == ("sample 1: trim; still without a result: VI (KV40 and KV100 from one sample; sample 1 "
                              "has only KV40) and flash point")


def test_an_oil_without_a_viscosity_index_is_said_to_have_none():
    found = batch_lab.verdict(made((1, "kv40", 5.0), (1, "kv100", 1.6), (1, "flash", 230.0)), TARGET)
    assert found.missing == ("VI (these KV40 and KV100 have none: KV100 is below 2 mm²/s, or not below KV40)",)


def test_both_viscosities_come_from_one_sample():
    apart = made((1, "kv40", 46.0), (2, "kv100", 6.9), (2, "flash", 230.0))
    found = batch_lab.verdict(apart, TARGET)
    assert found.missing == ("KV40", "VI (KV40 and KV100 from one sample; sample 2 has only KV100)")
    assert found.sample == 2


def test_what_only_an_older_sample_of_the_same_oil_was_tested_for_counts_from_there():
    found = batch_lab.verdict(made((1, "flash", 230.0), (2, "kv40", 46.0), (2, "kv100", 6.9)), TARGET)
    assert found.decision == RELEASE
    assert any(words.startswith("flash point 230 °C (sample 1), low 200") for words in found.words)


def test_repeats_count_by_their_mean_and_a_third_is_plain_to_see():
    twice = batch_lab.verdict(with_kv40(41.6, ((1, "kv40", 42.0),)), TARGET)
    kv40 = twice.limits[0]
    assert (kv40.value, kv40.count, kv40.decision) == (pytest.approx(41.8), 2, RELEASE)
    assert kv40.words.startswith("KV40 41.80 mm²/s (mean of 2), low 41.40")
    assert "KV40 of sample 1: 41.60, 42.00: all 2 count, they differ by 0.78 R" in twice.remarks
    thrice = batch_lab.verdict(with_kv40(41.6, ((1, "kv40", 41.5), (1, "kv40", 41.6))), TARGET)
    assert thrice.remarks[0] == ("KV40 of sample 1: 41.60, 41.50, 41.60: third result; all 3 count, they differ by "
                                 "0.20 R")
    assert thrice.limits[0].words.endswith("repeat, and it was repeated already: release it with a reason, or trim it "
                                           "inwards")


def test_repeats_that_differ_by_more_than_r_do_not_agree():
    found = batch_lab.verdict(with_kv40(45.0, ((1, "kv40", 47.0),)), TARGET)
    assert found.decision == REPEAT
    assert found.remarks[0].endswith("they differ by 3.56 R, more than R: they do not agree, repeat")


def test_a_withdrawn_result_does_not_count_and_stays_visible():
    found = batch_lab.verdict(with_kv40(39.0, ((1, "kv40", 46.0),), withdrawn={1: "dora: bubble in the tube"}), TARGET)
    assert found.decision == RELEASE
    assert "withdrawn: KV40 39.00 of sample 1 (dora: bubble in the tube)" in found.remarks


def test_a_fresh_sample_counts_and_the_older_stays_visible():
    found = batch_lab.verdict(with_kv40(41.0, ((2, "kv40", 45.0), (2, "kv100", 6.8))), TARGET)
    assert (found.sample, found.decision) == (2, RELEASE)
    assert "sample 1 does not count: a newer one counts (KV40 41.00, KV100 6.900)" in found.remarks
    again = batch_lab.verdict(with_kv40(41.0, ((2, "kv40", 41.1), (2, "kv100", 6.5))), TARGET)
    assert again.decision == TRIM
    assert again.limits[0].words.endswith("outside by 0.300 = 0.59 R (R 0.505, ASTM D445), by less than R: trim, for "
                                          "sample 1 was outside too")


def test_a_newer_sample_without_a_result_is_told_as_such():
    samples = tuple(Sample("B-1", n, 0, at(9, n), "carl") for n in (1, 2))
    found = batch_lab.verdict(made(*((1, code, v) for code, v in LIMITED.items()), samples=samples), TARGET)
    assert (found.samples, found.decision) == ((1,), RELEASE)
    assert found.remarks == ("sample 2 does not count: it has no result that stands",)


def test_a_sample_before_the_last_charge_does_not_count():
    early = made((1, "kv40", 46.0), samples=(Sample("B-1", 1, 0, at(7, 30), "carl"),))
    found = batch_lab.verdict(early, TARGET)
    assert (found.sample, found.decision, found.limits) == (None, NO_RESULT, ())
    assert found.headline == "no sample that counts yet"
    assert "sample 1 does not count: it was drawn before the last charge (KV40 46.00)" in found.remarks


def heights(*values: float) -> Made:
    places = ("top", "middle", "Bottom")
    samples = tuple(Sample("B-1", n, 0, at(9, n), "carl", place) for n, place in enumerate(places, 1))
    rows = [(n, code, {"kv40": kv, "kv100": kv * 0.15, "flash": 230.0}[code])
            for n, kv in enumerate(values, 1) for code in LIMITED]
    return made(*rows, samples=samples)


def test_top_middle_and_bottom_are_compared():
    found = batch_lab.verdict(heights(45.9, 46.0, 46.2), TARGET)
    assert (found.decision, found.samples) == (RELEASE, (3, 2, 1))
    assert found.limits[0].value == pytest.approx((45.9 + 46.0 + 46.2) / 3)
    assert found.headline == "samples 1, 2 and 3: release"
    # 0.3 against R = 0.0122·46.03.
    assert "top, middle and bottom: KV40 differs by 0.300 = 0.53 R, they agree" in found.remarks


def test_heights_that_differ_by_more_than_r_are_not_mixed():
    found = batch_lab.verdict(heights(44.9, 46.0, 46.2), TARGET)
    assert found.decision == FRESH
    assert "top, middle and bottom: KV40 differs by 1.30 = 2.33 R: NOT MIXED; mix on and draw fresh samples" in (
        found.remarks)


def test_another_method_than_that_of_r_is_named():
    other = made(*((1, code, v) for code, v in LIMITED.items()))
    other = replace(other, results=tuple(replace(r, method="ASTM D7042") for r in other.results))
    assert "R 0.617, ASTM D445), measured by ASTM D7042: release" in batch_lab.verdict(other, TARGET).limits[0].words


def test_a_grade_asks_for_cold_cranking_and_for_what_no_figure_tells():
    engine = Target("E", (), grade="SAE 10W-30")
    found = batch_lab.verdict(made((1, "kv40", 70.0), (1, "kv100", 10.5)), engine)
    assert found.missing == ("cold cranking at -25 °C",)
    assert any("HTHS at 150 °C" in words for words in found.remarks)
    assert batch_lab.verdict(made((1, "kv100", 10.5), (1, "ccs-25", 6000.0)), engine).decision == RELEASE


# The steps

@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    """A batch of a VG 46 that is charged: 89 % A, 11 % B, predicted near KV40 41 … see the law."""
    path = plant_file(tmp_path, stocks=STOCKS, products="product,grade\nP,ISO VG 46\n",
                      limits="product,property,low,high,guard\nP,vi,95,,2\nP,flash,200,,\n")
    with open_plant(path, who="dora") as opened:
        ordered(opened, "P", {"A": 8400.0, "B": 1600.0})
        all_charged(opened)
        yield opened


def expected(plant: Plant) -> dict[str, str]:
    """Results near what is predicted."""
    from blendtui.desk.batch_outlook import predicted

    found = predicted(plant, plant.batch("B-0001"))
    return {code: f"{found[code]:.6g}" for code in ("kv40", "kv100", "flash")}


def test_a_sample_with_results_is_decided(plant):
    drawn = batch_lab.sample(plant, "B-0001", place="middle", celsius=58.0, by="carl")
    assert (drawn.sample, drawn.round, drawn.taken_by, drawn.place, drawn.celsius) == (1, 0, "carl", "middle", 58.0)
    values = expected(plant)
    found = batch_lab.results(plant, "B-0001", 1, values)
    assert found.decision == RELEASE
    rows = plant.batch("B-0001").results
    assert [(r.property, r.method, r.by) for r in rows] == [
        ("kv40", "ASTM D445", "dora"), ("kv100", "ASTM D445", "dora"), ("flash", "ASTM D92", "dora")]
    assert [r.value for r in rows] == pytest.approx([float(v) for v in values.values()], rel=1e-4)
    decision = batch_lab.decide(plant, "B-0001")
    assert (decision.decision, decision.sample, decision.by, decision.why) == (RELEASE, 1, "dora", "")
    assert decision.words == "; ".join(found.words)
    assert "R (R" in decision.words
    assert plant.batch("B-0001").decisions == (decision,)
    assert plant.verify() is None


def test_a_decision_makes_the_batch_a_measured_blend_in_the_same_step(plant):
    batch_lab.sample(plant, "B-0001")
    batch_lab.results(plant, "B-0001", None, expected(plant))
    before = plant.revision()
    batch_lab.decide(plant, "B-0001")
    (blend,) = [b for b in plant.measured() if b.name == "B-0001"]
    assert {p.stock: round(p.share, 6) for p in blend.parts} == {"A": 0.84, "B": 0.16}
    assert plant.revision() == before + 1


def test_the_same_results_are_decided_on_once_or_with_a_reason(plant):
    batch_lab.sample(plant, "B-0001")
    values = expected(plant)
    batch_lab.results(plant, "B-0001", 1, values)
    batch_lab.decide(plant, "B-0001", decision="fresh", why="label unreadable", by="Carl")
    with pytest.raises(DeskError, match=r"^sample 1 was decided already: fresh sample, Carl, .*; nothing has changed"):
        batch_lab.decide(plant, "B-0001", decision="fresh", why="again")
    with pytest.raises(DeskError, match="to decide otherwise on the same results type why"):
        batch_lab.decide(plant, "B-0001")
    assert batch_lab.decide(plant, "B-0001", why="label found").decision == RELEASE
    batch_lab.results(plant, "B-0001", 1, {"kv40": values["kv40"]})
    assert batch_lab.decide(plant, "B-0001").decision == RELEASE
    assert [d.line for d in plant.batch("B-0001").decisions] == [1, 2, 3]


def test_another_decision_than_the_results_needs_a_reason(plant):
    batch_lab.sample(plant, "B-0001")
    batch_lab.results(plant, "B-0001", 1, expected(plant))
    with pytest.raises(DeskError, match=r"^the results say release, not trim: KV40 .* R .*; to decide otherwise"):
        batch_lab.decide(plant, "B-0001", decision="trim")
    assert batch_lab.decide(plant, "B-0001", decision="Fresh", why="label unreadable").decision == FRESH
    with pytest.raises(DeskError, match="'maybe' is no decision; it is one of release, repeat, fresh sample, trim"):
        batch_lab.decide(plant, "B-0001", decision="maybe")


def test_nothing_is_released_while_a_result_is_missing(plant):
    with pytest.raises(DeskError, match="has no sample of what is in the vessel now"):
        batch_lab.decide(plant, "B-0001", decision="release", why="urgent")
    batch_lab.sample(plant, "B-0001")
    values = expected(plant)
    del values["flash"]
    assert batch_lab.results(plant, "B-0001", 1, values).missing == ("flash point",)
    with pytest.raises(DeskError, match="flash point has no result on sample 1: nothing can be decided yet"):
        batch_lab.decide(plant, "B-0001")
    with pytest.raises(DeskError, match=r"^no release: flash point has no result; enter it first$"):
        batch_lab.decide(plant, "B-0001", decision="release", why="urgent")
    assert plant.batch("B-0001").decisions == ()


@pytest.mark.parametrize(("values", "words"), [
    ({"kv40": "6.9", "kv100": "46"}, "^KV40 6.900 and KV100 46.00 mm²/s: an oil is thinner hot than cold; swapped\\?$"),
    ({"glitter": "3"}, "^no property 'glitter'; a result is one of kv40"),
    ({"kv40": "-3"}, "lies outside 0.3 to 2e\\+07"), ({"kv40": "nan"}, "is not a number"),
    ({"kv40": ""}, "^no result; type at least one"), ({"vol60": "1200"}, "no property 'vol60'"),
    ({"kv40": "46", "KV40": "47"}, "KV40 is given twice"), ({"kv40": "215 SUS"}, "SUS"),
    ({"flash": "9000"}, "lies outside")])
def test_results_that_cannot_be_are_refused(plant, values, words):
    batch_lab.sample(plant, "B-0001")
    with pytest.raises((DeskError, SolverError), match=words):
        batch_lab.results(plant, "B-0001", 1, values, sure=True)
    assert plant.batch("B-0001").results == ()


def test_kv100_swapped_with_a_kv40_that_is_on_record_is_refused(plant):
    batch_lab.sample(plant, "B-0001")
    batch_lab.results(plant, "B-0001", 1, {"kv40": expected(plant)["kv40"]})
    with pytest.raises(DeskError, match="swapped"):
        batch_lab.results(plant, "B-0001", 1, {"kv100": "55"}, sure=True)


def test_a_result_dated_before_its_sample_or_in_the_future_is_refused(plant):
    batch_lab.sample(plant, "B-0001")
    with pytest.raises(DeskError, match="is dated before its sample 1, which was drawn at"):
        batch_lab.results(plant, "B-0001", 1, {"kv40": "46"}, at="2026-05-04 06:00", sure=True)
    later = f"{datetime.now() + timedelta(days=1):%Y-%m-%d %H:%M}"
    with pytest.raises(DeskError, match=r"^a result at .* lies in the future"):
        batch_lab.results(plant, "B-0001", 1, {"kv40": "46"}, at=later, sure=True)
    with pytest.raises(DeskError, match=r"^a sample at .* lies in the future"):
        batch_lab.sample(plant, "B-0001", taken=later, sure=True)
    with pytest.raises(DeskError, match="is no time"):
        batch_lab.sample(plant, "B-0001", taken="noonish")


@pytest.mark.parametrize(("factor", "words"), [
    (10.0, "has the point slipped by one place"), (1.4, "is it the right figure"), (0.7, "is it the right figure")])
def test_a_result_far_from_what_was_charged_is_questioned(plant, factor, words):
    batch_lab.sample(plant, "B-0001")
    kv40 = float(expected(plant)["kv40"])
    with pytest.raises(Questioned, match=f"is predicted from what was charged: {words}"):
        batch_lab.results(plant, "B-0001", 1, {"kv40": repr(factor * kv40)})
    assert plant.batch("B-0001").results == ()
    batch_lab.results(plant, "B-0001", 1, {"kv40": repr(factor * kv40)}, sure=True)
    assert plant.batch("B-0001").results[0].value == pytest.approx(factor * kv40)


@pytest.mark.parametrize(("code", "off", "odd"), [
    ("density15", 5.0, False), ("density15", 12.0, True), ("flash", 40.0, False), ("flash", -60.0, True)])
def test_other_results_are_questioned_by_their_own_measure(plant, code, off, odd):
    from blendtui.desk.batch_outlook import predicted

    batch_lab.sample(plant, "B-0001")
    value = repr(predicted(plant, plant.batch("B-0001"))[code] + off)
    if odd:
        with pytest.raises(Questioned, match="is it the right figure, sample and property"):
            batch_lab.results(plant, "B-0001", 1, {code: value})
    else:
        batch_lab.results(plant, "B-0001", 1, {code: value})
    assert len(plant.batch("B-0001").results) == (0 if odd else 1)


def test_a_result_a_little_off_is_taken(plant):
    batch_lab.sample(plant, "B-0001")
    kv40 = float(expected(plant)["kv40"])
    found = batch_lab.results(plant, "B-0001", 1, {"kv40": repr(1.2 * kv40)})
    assert found.limits[0].value == pytest.approx(1.2 * kv40)


def test_a_repeat_that_differs_by_more_than_r_is_questioned(plant):
    batch_lab.sample(plant, "B-0001")
    kv40 = float(expected(plant)["kv40"])
    batch_lab.results(plant, "B-0001", 1, {"kv40": repr(kv40)})
    with pytest.raises(Questioned, match=r"of the same sample differ by 4\.1 R: one of them is wrong"):
        batch_lab.results(plant, "B-0001", 1, {"kv40": repr(1.05 * kv40)})
    batch_lab.results(plant, "B-0001", 1, {"kv40": repr(1.05 * kv40)}, sure=True)
    assert len(plant.batch("B-0001").results) == 2


def test_a_typed_vi_is_compared_with_that_of_the_viscosities(plant):
    batch_lab.sample(plant, "B-0001")
    values = expected(plant)
    with pytest.raises(Questioned, match=r"^VI 140 is typed, and KV40 .* with KV100 .* give \d+: one of the three"):
        batch_lab.results(plant, "B-0001", 1, {**values, "vi": "140"})
    found = batch_lab.results(plant, "B-0001", 1, {**values, "vi": "140"}, sure=True)
    assert next(x for x in found.limits if x.property == "vi").value < 120.0


def test_results_keep_what_was_typed_of_method_unit_and_time(plant):
    batch_lab.sample(plant, "B-0001", taken="2026-05-04 14:00", by="carl")
    batch_lab.results(plant, "B-0001", 1, {"Flash point": "446F", "KV40": expected(plant)["kv40"]}, method="D7042",
                      at="2026-05-04 15:30", by="emil")
    flash, kv40 = plant.batch("B-0001").results
    assert (flash.property, flash.value, flash.method, flash.by) == ("flash", 230.0, "D7042", "emil")
    assert (kv40.line, batches.when(kv40.at)) == (2, "2026-05-04 15:30")


@pytest.mark.parametrize(("said", "words"), [
    ({"taken": ""}, "before the last charge"), ({"celsius": 31.0}, "is it mixed through"),
    ({"celsius": 95.0}, "is it not overheated")])
def test_an_odd_sample_is_questioned(plant, said, words):
    if "taken" in said:
        early = datetime.fromisoformat(at(7, 1)).astimezone()
        assert at(7, 1) < plant.batch("B-0001").charges[-1].at
        said = {"taken": f"{early:%Y-%m-%d %H:%M}"}
    with pytest.raises(Questioned, match=words):
        batch_lab.sample(plant, "B-0001", **said)
    assert plant.batch("B-0001").samples == ()
    assert batch_lab.sample(plant, "B-0001", **said, sure=True).sample == 1


def test_a_sample_of_nothing_or_of_a_batch_to_come_is_refused_or_questioned(plant):
    ordered(plant, "P", {"A": 5000.0, "B": 500.0}, name="B-0002")
    with pytest.raises(DeskError, match="nothing is in the vessel yet"):
        batch_lab.sample(plant, "B-0002", sure=True)
    from tests.desk.made_batches import charged

    charged(plant, 1, name="B-0002")
    with pytest.raises(Questioned, match=r"1 charge is still to come: line 2 \(B\)"):
        batch_lab.sample(plant, "B-0002")


def test_a_result_is_withdrawn_with_its_reason_only(plant):
    batch_lab.sample(plant, "B-0001")
    batch_lab.results(plant, "B-0001", 1, expected(plant))
    with pytest.raises(DeskError, match="withdrawn only with a reason"):
        batch_lab.withdraw(plant, "B-0001", 1, 1, why="  ")
    with pytest.raises(DeskError, match=r"has no result 9 of sample 1; on record: 1\.1 KV40, 1\.2 KV100, 1\.3 flash"):
        batch_lab.withdraw(plant, "B-0001", 1, 9, why="x")
    assert batch_lab.withdraw(plant, "B-0001", 1, 1, why="bubble", by="emil").withdrawn == "emil: bubble"
    with pytest.raises(DeskError, match="is withdrawn already"):
        batch_lab.withdraw(plant, "B-0001", 1, 1, why="again")
    assert len(plant.batch("B-0001").results) == 3
    assert plant.journal(1)[0].why == "bubble"


def test_a_clock_that_was_set_back_is_questioned(plant):
    ahead = f"{datetime.now().astimezone() + timedelta(days=3):%Y-%m-%dT%H:%M}:00.000Z"
    put(plant, Sample("B-0001", 1, 0, ahead, "carl"))
    with pytest.raises(Questioned, match="was the clock set back"):
        batch_lab.sample(plant, "B-0001")
    assert batch_lab.sample(plant, "B-0001", sure=True).sample == 2


def test_a_sample_that_is_not_there_and_a_batch_that_is_closed(plant):
    with pytest.raises(DeskError, match=r"^B-0001 has no sample 4; draw one: blendtui batch sample B-0001$"):
        batch_lab.results(plant, "B-0001", 4, {"kv40": "46"}, sure=True)
    head = plant.batch("B-0001").head
    from blendtui.store.batch_edits import changed
    from blendtui.store.records import Step

    plant.step(lambda: Step((changed(head, state="released", closed_by="bob", closed_at=at(18)),), "closed"))
    with pytest.raises(DeskError, match="B-0001 is released"):
        batch_lab.sample(plant, "B-0001")
