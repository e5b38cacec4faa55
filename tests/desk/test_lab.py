"""The laboratory: what is put on record, what is doubtful of it, residuals and drift, lessons taken and withdrawn."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date
from pathlib import Path

import pytest

from blendtui.desk import lab, lessons, trials
from blendtui.desk.errors import DeskError
from blendtui.desk.stocks import edit_cell
from blendtui.store import edits
from blendtui.store.errors import NoSuchRow
from blendtui.store.plant import Plant
from blendtui.store.records import Trial
from solver import laws
from solver.recipe import evaluate
from tests.desk.lab_plant import laboratory, put


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with laboratory(tmp_path) as opened:
        yield opened


# The record

def test_a_blend_is_recorded_with_what_its_stocks_are_today(plant):
    made = lab.record(plant, " first ", "P100", {"A": 0.6, "V": 0.1, "B": 0.3},
                      {"kv40": "105 cSt", "kv100": "12", "flash": "430F", "vi": "98"}, method="D445", note="warm",
                      today=date(2026, 6, 1))
    (blend,) = plant.measured("P100")
    assert (blend, made.message, made.questions) == (made.blend, "first recorded", ())
    assert [(p.stock, p.share, p.kv40, p.kv100, p.density15, p.lot, p.oil) for p in blend.parts] == [
        ("A", 0.6, 30.6, 5.23, 868.0, "tested 2026-03-01", "LIGHT"), ("V", 0.1, 9000.0, 800.0, 880.0, "", ""),
        ("B", 0.3, 480.0, 31.5, 897.0, "", "")]
    assert blend.values == {"kv40": 105.0, "kv100": 12.0, "flash": pytest.approx(221.11), "vi": 98.0}
    assert (blend.measured_on, blend.method, blend.note, blend.confirmed) == ("2026-06-01", "D445", "warm", False)
    assert plant.undo() == "undone: measured blend first recorded"
    assert plant.measured() == []


def test_a_blend_is_recorded_after_a_kept_trial(plant):
    trials.keep_trial(plant, Trial("lean", "P100", {"A": 0.7, "B": 0.3}))
    lab.record_trial(plant, "b1", "P100", "lean", {"kv40": "60"}, on="2026-05-01")
    (blend,) = plant.measured()
    assert ({p.stock: p.share for p in blend.parts}, blend.measured_on) == ({"A": 0.7, "B": 0.3}, "2026-05-01")
    with pytest.raises(DeskError) as caught:
        lab.record_trial(plant, "b2", "P100", "rich", {"kv40": "60"})
    assert str(caught.value) == "P100 has no trial 'rich'; type the shares instead"


@pytest.mark.parametrize(("change", "message"), [
    ({"name": ""}, "measured blend: the code is empty; give one"),
    ({"name": "a; b"}, "measured blend: the name 'a; b' holds a semicolon, which parts the names of blends in a list; "
                       "write it without"),
    ({"name": "there"}, "there is a measured blend 'there' already; record this one under another name"),
    ({"shares": {}}, "x: no shares; type the mass % of at least one stock"),
    ({"shares": {"A": -0.1}}, "x: the share of A is -10 %; a share lies between 0 and 100 %"),
    ({"shares": {"A": 60.0}}, "x: the share of A is 6000 %; a share lies between 0 and 100 %"),
    ({"results": {}}, "x: no result; type at least one, such as the KV at 40 °C"),
    ({"results": {"kv40": " "}}, "x: no result; type at least one, such as the KV at 40 °C"),
    ({"results": {"kv40": "12,5"}}, "kv40: '12,5': a comma is not read as a decimal point or a thousands mark; write "
                                    "12.5 or leave the comma out"),
    ({"results": {"flash": "900"}}, "flash point 900 °C lies outside -50 to 450; check the figure and its unit"),
    ({"results": {"vi": "high"}}, "vi: 'high' is not a number; type one such as 95"),
    ({"on": "1/2/26"}, "'1/2/26' is not a date; write year-month-day, such as 2026-03-01"),
])
def test_what_cannot_be_a_record_is_refused(plant, change, message):
    put(plant, "there", {"A": 0.5, "B": 0.5})
    asked = {"name": "x", "shares": {"A": 0.5, "B": 0.5}, "results": {"kv40": "100"}, **change}
    with pytest.raises(DeskError) as caught:
        lab.record(plant, asked.pop("name"), "P100", asked.pop("shares"), asked.pop("results"), **asked)
    assert str(caught.value) == message
    assert [b.name for b in plant.measured()] == ["there"]


def test_a_product_that_is_not_there_is_refused(plant):
    with pytest.raises(NoSuchRow):
        put(plant, "x", {"A": 1.0}, product="NONE")


def test_shares_as_they_are_typed():
    assert lab.read_shares("A 60, B=39.5 %,C 0.005 fraction") == {"A": 0.6, "B": 0.395, "C": 0.005}
    assert lab.typed_shares({"A": 1 / 3, "B": 1 / 3, "C": 1 / 3, "D": 0.0}) == "A 33.34, B 33.33, C 33.33"
    assert lab.typed_shares({"A": 0.5, "B": 0.4}) == "A 50.00, B 40.00"
    for typed, message in (("", "no shares yet; type for example A 60, B 40"),
                           ("A", "'A' is not a stock and its share; type for example A 60, B 40"),
                           ("A 5, A 6", "A is given twice; give each stock one share")):
        with pytest.raises(DeskError) as caught:
            lab.read_shares(typed)
        assert str(caught.value) == message


# What is doubtful

def test_a_doubtful_blend_teaches_nothing_until_it_is_confirmed(plant):
    # 470 SUS at 100 °F is about 101 mm²/s (4.63 s a mm²/s: Hydraulic Institute table, R).
    made = lab.record(plant, "sus", "P100", {"A": 0.55, "B": 0.45}, {"kv40": "470"})
    assert made.message == "sus recorded; it teaches nothing until it is confirmed"
    (question,) = made.questions
    assert "it looks like SUS at 100 °F typed as mm²/s" in question.says
    found = lab.checked(lab.read(plant))
    assert (found.usable, found.state(made.blend)) == ((), "questioned")
    assert lab.confirm(plant, "sus") == "measured blend sus confirmed"
    found = lab.checked(lab.read(plant))
    assert ([b.name for b in found.usable], found.state(found.usable[0])) == (["sus"], "confirmed")
    with pytest.raises(DeskError, match="sus is confirmed already"):
        lab.confirm(plant, "sus")
    assert plant.undo() == "undone: measured blend sus confirmed"
    assert lab.checked(lab.read(plant)).usable == ()


def test_it_may_be_confirmed_as_it_is_recorded(plant):
    made = put(plant, "high", {"A": 0.5, "B": 0.5}, 80.0, confirmed=True)
    assert (made.message, made.blend.confirmed, len(made.questions)) == ("high recorded, confirmed", True, 2)
    plain = put(plant, "plain", {"A": 0.5, "B": 0.5}, confirmed=True)
    assert (plain.message, plain.blend.confirmed) == ("plain recorded", False)
    with pytest.raises(DeskError, match="nothing about plain is doubtful"):
        lab.confirm(plant, "plain")


def test_what_is_wrong_cannot_be_confirmed(plant):
    made = put(plant, "short", {"A": 0.5, "B": 0.45}, confirmed=True)
    assert made.message == "short recorded; it teaches nothing as it is: drop it and record it anew"
    assert not made.blend.confirmed
    with pytest.raises(DeskError, match=r"^short: the shares sum to 95\.00 %, not 100 %; .*; that cannot be confirmed"):
        lab.confirm(plant, "short")
    assert lab.checked(lab.read(plant)).state(made.blend) == "faulty"
    assert lab.drop(plant, "short") == "measured blend short dropped"


def test_a_stock_that_is_not_there_is_questioned(plant):
    made = lab.record(plant, "odd", "P100", {"A": 0.5, "X9": 0.5}, {"kv40": "60"})
    assert [(q.cell, q.says) for q in made.questions] == [("stock", "the stock 'X9' is not known here")]


def test_doubts_are_judged_by_the_law_that_is_asked(plant):
    # 10 % of a pair that is right under Refutas: under Wright it is out tenfold.
    edit_cell(plant, "V", "blend_kv40", "60000/26000")
    put(plant, "w", {"A": 0.5, "B": 0.4, "V": 0.1}, V=(60000.0, 26000.0))
    record = lab.read(plant)
    assert (lab.checked(record).in_question, lab.checked(record, "wright-mass").in_question) == ((), ("w",))
    assert lab.report(record, "wright-mass").used == ()
    lessons.take(plant, "wright-mass", "V")
    record = lab.read(plant)
    assert lab.checked(record, "wright-mass").in_question == ()  # read with the lesson in use
    assert lab.report(record, "wright-mass").used == ("w",)
    lessons.withdraw(plant, "L1", "to see")
    assert lab.confirm(plant, "w") == "measured blend w confirmed"  # what one law asks may be settled
    assert lab.checked(lab.read(plant), "wright-mass").in_question == ()


def test_a_blend_whose_stock_has_gone_still_teaches(plant):
    put(plant, "b1", {"A": 0.5, "B": 0.5})
    plant.change([edits.retired("stock", "B")], "B retired")
    assert [b.name for b in lab.checked(lab.read(plant)).usable] == ["b1"]


def test_no_such_blend(plant):
    put(plant, "b1", {"A": 1.0})
    for work in (lab.confirm, lab.drop):
        with pytest.raises(DeskError) as caught:
            work(plant, "b9")
        assert str(caught.value) == "no measured blend 'b9'; on record, newest last: b1"


# Residuals

def test_residuals_are_measured_against_the_law(plant):
    put(plant, "b1", {"A": 0.5, "B": 0.5}, 2.0)
    put(plant, "b2", {"A": 0.7, "B": 0.3}, -1.0)
    lab.record(plant, "bad", "P100", {"A": 0.7, "B": 0.3}, {"kv40": "7"})
    report = lab.report(lab.read(plant))
    assert (report.law, report.lessons, report.used) == ("refutas", (), ("b1", "b2"))
    assert {(r.blend, r.code): pytest.approx(r.off) for r in report.rows if r.blend != "bad"} == {
        ("b1", "kv40"): 2.0, ("b1", "kv100"): 2.0, ("b2", "kv40"): -1.0, ("b2", "kv100"): -1.0}
    assert report.by_product["P100", "kv40"].mean == pytest.approx(0.5)
    assert set(report.by_law["kv40"]) == set(laws.LAWS)
    assert report.by_stock["kv40"]["A"].count == 2
    assert report.drifts == {}


def test_other_properties_have_residuals_too(plant):
    for code, flash, sulfur in (("A", "220", "0.4"), ("B", "280", "1.2")):
        edit_cell(plant, code, "flash", flash)
        edit_cell(plant, code, "sulfur", sulfur)
    lab.record(plant, "b1", "P100", {"A": 0.5, "B": 0.5}, {"sulfur": "0.88", "flash": "240", "density15": "885"})
    edit_cell(plant, "A", "sulfur", "0.9")  # today's; the blend keeps what was known at the time
    assert [dict(part.values) for part in plant.measured()[0].parts] == [{"flash": 220.0, "sulfur": 0.4},
                                                                         {"flash": 280.0, "sulfur": 1.2}]
    rows = {r.code: r for r in lab.report(lab.read(plant)).rows}
    assert rows["sulfur"].off == pytest.approx(10.0)  # 0.88 against 0.8
    assert rows["flash"].predicted == pytest.approx(evaluate(plant.stocks(), {"A": 0.5, "B": 0.5}).predicted["flash"])
    assert rows["density15"].predicted == pytest.approx(1.0 / (0.5 / 868.0 + 0.5 / 897.0))


def test_a_product_is_read_by_its_own_law(plant):
    put(plant, "w1", {"A": 0.5, "B": 0.5}, product="W100")
    assert lab.report(lab.read(plant), product="W100").law == "wright-mass"
    assert lab.report(lab.read(plant), "walther-volume", "W100").law == "walther-volume"
    assert lab.report(lab.read(plant), product="P100").rows == ()
    assert [r.blend for r in lab.report(lab.read(plant), stock="A").rows] == ["w1", "w1"]


def test_a_steady_bias_alarms_in_words(plant):
    for n, off in enumerate((2.0, 1.8, 2.1, 1.9, 2.2, 2.0), 1):
        shares, day = {"A": 0.4 + n / 100, "B": 0.6 - n / 100}, f"2026-05-0{n}"
        put(plant, f"b{n}", shares, off, on=day)
        put(plant, f"w{n}", shares, 0.1 * (-1) ** n, product="W100", on=day)
    report = lab.report(lab.read(plant), "refutas")
    assert [key for key, _ in report.alarms] == [("P100", "kv40"), ("P100", "kv100")]
    words = lab.drift_words(report.drifts["P100", "kv40"], ("P100", "kv40"))
    assert words.startswith("P100 kv40: outside 2 σ since b1, +")
    assert "steadily off by +2 %; usual causes (common practice): the law itself on these stocks" in words
    assert lab.drift_words(report.drifts["W100", "kv40"], ("W100", "kv40")) == (
        "W100 kv40: no drift: the residuals scatter about zero")
