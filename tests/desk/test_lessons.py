"""Lessons of the laboratory: offered with their figures, taken, followed by recipes, withdrawn."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date
from pathlib import Path

import pytest

from blendtui.desk import lab, lessons, targets
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import open_plant
from blendtui.desk.stocks import edit_cell
from blendtui.store.errors import ReadOnlyPlant
from blendtui.store.plant import Plant
from solver import laws
from solver.recipe import evaluate
from solver.stocks import StockTable
from solver.target import Effective
from tests.desk.lab_plant import laboratory, law_says, put, study


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with laboratory(tmp_path) as opened:
        yield opened


# Lessons

def test_a_pair_is_offered_with_all_its_figures(plant):
    study(plant)
    (offer,) = lessons.offers(lab.read(plant))
    assert (offer.kind, offer.first, offer.second, offer.provisional, offer.teaches) == (
        "excess", "LIGHT", "B", False, True)
    assert offer.evidence == ("S1", "S2", "S3", "S4", "S5")
    assert (offer.low, offer.high) == (pytest.approx(0.2), pytest.approx(0.8))
    for celsius in (40.0, 100.0):
        fit = offer.fits[celsius]
        assert set(fit.by_form) == {"none", "one", "two"}
        assert fit.leave_one_out_pct < 0.1 * fit.by_form["none"]
    # Off by 1.92, 2.73, 3, 2.73 and 1.92 %: the mean of 1 − 1/(1 + e) is 2.40 %.
    assert lessons.error_words(offer).startswith("2.40 → 0.")
    words = lessons.offer_words(offer)
    assert words[0] == "LIGHT with B under refutas"
    assert words[-1] == "from S1, S2, S3, S4, S5; spans 20.00 to 80.00 %"


def test_a_lesson_taken_is_in_every_recipe_and_names_its_version(plant):
    study(plant)
    assert lessons.take(plant, "refutas", "LIGHT", "B") == "L1 taken: LIGHT with B under refutas"
    (lesson,) = plant.lessons()
    assert (lesson.version, lesson.provisional, lesson.taken_by) == ("L1", False, "anna")
    assert lesson.leave_one_out.startswith("40 °C: left one out: none 2.")
    target = targets.target_of(plant, "P100")
    assert [(e.first, e.second, e.version) for e in target.lessons] == [("LIGHT", "B", "L1")]
    recipe = evaluate(plant.stocks(), {"A": 0.5, "B": 0.5}, target)
    assert recipe.predicted["kv40"] == pytest.approx(1.03 * law_says({"A": 0.5, "B": 0.5})[0], rel=0.003)
    after = lab.report(lab.read(plant))
    assert after.lessons == ("L1",)
    assert max(abs(r.off) for r in after.rows) < 0.4
    assert after.alone["S3", "kv40"] == pytest.approx(law_says({"A": 0.5, "B": 0.5})[0])
    assert plant.undo() == "undone: L1 taken: LIGHT with B under refutas"
    assert (plant.lessons(), targets.target_of(plant, "P100").lessons) == ([], ())


def test_fewer_than_four_blends_are_provisional(plant):
    put(plant, "S1", {"A": 0.5, "B": 0.5}, 3.0)
    (offer,) = lessons.offers(lab.read(plant))
    assert (offer.provisional, lessons.standing(offer)) == (True, "provisional")
    few = "1 blend, too few to check by leaving one out"
    assert lessons.proof_words(offer) == f"40 °C: {few}; 100 °C: {few}"
    assert lessons.take(plant, "refutas", "LIGHT", "B").endswith(", provisional: measure more blends")
    assert targets.target_of(plant, "P100").lessons[0].provisional


def test_a_new_fit_takes_the_place_of_the_old_one(plant):
    put(plant, "S1", {"A": 0.5, "B": 0.5}, 3.0)
    lessons.take(plant, "refutas", "LIGHT", "B")
    put(plant, "S2", {"A": 0.3, "B": 0.7}, 2.6)
    assert lessons.standing(lessons.offers(lab.read(plant))[0]) == "replaces L1"
    assert lessons.take(plant, "refutas", "LIGHT", "B").startswith("L2 taken: LIGHT with B under refutas; L1 withdrawn")
    assert [x.version for x in plant.lessons()] == ["L2"]
    assert plant.lessons(include_withdrawn=True)[0].reason == "replaced by L2"
    plant.undo()
    assert [x.version for x in plant.lessons()] == ["L1"]
    assert lessons.take(plant, "wright-mass", "LIGHT", "B").startswith("L3 taken: ")  # L2 is never used again
    assert [x.version for x in plant.lessons()] == ["L1", "L3"]


def test_one_composition_repeated_is_refused_with_the_reason(plant):
    for n in (1, 2):
        put(plant, f"S{n}", {"A": 0.5, "B": 0.5}, 2.0 + n)
    (offer,) = lessons.offers(lab.read(plant))
    assert (offer.teaches, lessons.standing(offer)) == (False, "cannot tell")
    assert "the 2 blends are one composition repeated" in offer.refusal
    with pytest.raises(DeskError, match="the 2 blends are one composition repeated"):
        lessons.take(plant, "refutas", "LIGHT", "B")
    assert plant.lessons() == []


def test_where_the_law_suffices_there_is_nothing_to_take(plant):
    study(plant, 0.0)
    (offer,) = lessons.offers(lab.read(plant))
    assert lessons.standing(offer) == "law suffices"
    with pytest.raises(DeskError, match=r"^LIGHT with B under refutas: the law alone predicts best \(40 °C: left"):
        lessons.take(plant, "refutas", "LIGHT", "B")


def hotter(plant: Plant, name: str, share: float, law: str = "refutas", off: float = 0.0) -> None:
    """A blend with an improver whose index under a law no viscosity has: it does more hot than cold."""
    shares = {"A": 0.6, "B": 0.4 - share, "V": share}
    table = StockTable(plant.stock(code) for code in shares)
    taught = (Effective("V", law, {40.0: 55.0, 100.0: 61.0} if law == "refutas" else {40.0: 0.95, 100.0: 1.05}),)
    kv = (laws.viscosity_gauge(law, table, t, taught).read(list(shares.values())) for t in (40.0, 100.0))
    results = dict(zip(("kv40", "kv100"), (repr(v * (1.0 + off / 100.0)) for v in kv), strict=True))
    lab.record(plant, name, "P100", shares, results, today=date(2026, 6, 1))


def test_a_blending_value_is_an_index_under_one_law_and_changes_no_cell(plant):
    for n, share in enumerate((0.05, 0.08, 0.11, 0.14), 1):
        hotter(plant, f"V{n}", share)
    stocks = plant.stocks()
    (offer,) = [o for o in lessons.offers(lab.read(plant)) if o.kind == "value"]
    assert (offer.first, offer.provisional, offer.evidence) == ("V", False, ("V1", "V2", "V3", "V4"))
    assert {t: terms[0] for t, terms in offer.terms.items()} == pytest.approx({40.0: 55.0, 100.0: 61.0}, rel=1e-6)
    words = lessons.offer_words(offer)
    assert words[:3] == [
        "V blending value under refutas",
        "blends with number 55.0 at 40 °C and 61.0 at 100 °C (by its viscosity on record: 43.1, 38.6)",
        "beyond any viscosity at 40 °C and 100 °C"]
    assert words[3].startswith("40 °C: standard error 0.1")
    assert "mean error 0.00 % (by its viscosity on record 30.41 %)" in words[3]
    assert words[3].endswith("left one out 0.00 %")
    assert words[4] == "from V1, V2, V3, V4; holds from 4.50 to 15.40 % of the blend"
    assert lessons.take(plant, "refutas", "V") == "L1 taken: V blending value under refutas"
    assert plant.stocks() == stocks
    assert max(abs(r.off) for r in lab.report(lab.read(plant)).rows) < 1e-6
    assert lab.report(lab.read(plant)).lessons == ("L1",)
    assert lab.report(lab.read(plant), "walther-mass").lessons == ()  # of one law, and of no other
    assert lessons.lesson_words(plant.lessons()[0])[1] == "blends with number 55.0 at 40 °C and 61.0 at 100 °C"
    plant.undo()
    assert (plant.lessons(), plant.stocks()) == ([], stocks)
    plant.redo()
    assert lessons.withdraw(plant, "L1", "another lot") == "L1 withdrawn: V blending value under refutas"
    assert (plant.lessons(), plant.stocks(), plant.journal(1)[0].why) == ([], stocks, "another lot")
    assert plant.verify() is None


def test_recipes_use_the_value_name_it_and_say_where_it_ends(plant):
    for n, share in enumerate((0.05, 0.08), 1):
        hotter(plant, f"V{n}", share)
    lessons.take(plant, "refutas", "V")
    (taught,) = targets.target_of(plant, "P100").lessons
    assert (taught.stock, taught.law, taught.version, taught.provisional) == ("V", "refutas", "L1", True)
    assert taught.shares == pytest.approx((0.045, 0.088))
    inside = evaluate(plant.stocks(), {"A": 0.6, "B": 0.33, "V": 0.07}, targets.target_of(plant, "P100"))
    assert (inside.lessons, inside.provisional, inside.warnings) == (("L1",), ("L1",), ())
    outside = evaluate(plant.stocks(), {"A": 0.6, "B": 0.2, "V": 0.2}, targets.target_of(plant, "P100"))
    assert outside.warnings == ("V 20.00 %: its lesson L1 holds from 4.50 to 8.80 %, measure a blend before this is "
                                "trusted",)
    other = evaluate(plant.stocks(), {"A": 0.6, "B": 0.33, "V": 0.07}, targets.target_of(plant, "P100", "wright-mass"))
    assert other.lessons == ()


def test_each_law_has_its_own_value_and_a_new_one_takes_its_place(plant):
    for n, share in enumerate((0.05, 0.08), 1):
        hotter(plant, f"V{n}", share)
    lessons.take(plant, "refutas", "V")
    assert "withdrawn" not in lessons.take(plant, "walther-mass", "V")
    assert [(x.version, x.law) for x in plant.lessons()] == [("L1", "refutas"), ("L2", "walther-mass")]
    assert lessons.lesson_words(plant.lessons()[1])[1].startswith("blends with W 0.")
    hotter(plant, "V3", 0.1, off=0.5)
    (offer,) = [o for o in lessons.offers(lab.read(plant), "walther-mass") if o.kind == "value"]
    assert lessons.standing(offer) == "replaces L2"
    assert "; L2 withdrawn" in lessons.take(plant, "walther-mass", "V")
    assert [x.version for x in plant.lessons()] == ["L1", "L3"]


def test_only_the_temperature_that_was_measured_is_taught(plant):
    put(plant, "V1", {"A": 0.5, "B": 0.4, "V": 0.1}, V=(3000.0, 300.0))
    lab.drop(plant, "V1")
    kv40, _ = law_says({"A": 0.5, "B": 0.4, "V": 0.1}, V=(3000.0, 300.0))
    lab.record(plant, "V2", "P100", {"A": 0.5, "B": 0.4, "V": 0.1}, {"kv40": repr(kv40)})
    lessons.take(plant, "refutas", "V")
    (lesson,) = plant.lessons()
    assert list(lesson.terms) == [40.0]
    assert lesson.terms[40.0][0] == pytest.approx(float(laws.vbn(3000.0)))
    assert lessons.lesson_words(lesson)[1] == f"blends with number {float(laws.vbn(3000.0)):.1f} at 40 °C"
    assert lessons.figures("value", "wright-mass", lesson.terms[40.0]).startswith("W ")


def test_a_temperature_with_too_small_a_share_is_too_open_to_use(plant):
    for name, share, code, kv in (("V1", 0.1, "kv40", 110.0), ("V2", 0.003, "kv100", 9.0)):
        lab.record(plant, name, "P100", {"A": 0.6, "B": 0.4 - share, "V": share}, {code: repr(kv)})
    (offer,) = [o for o in lessons.offers(lab.read(plant)) if o.kind == "value"]
    assert (list(offer.terms), offer.evidence) == ([40.0], ("V1",))
    (words,) = [w for w in lessons.offer_words(offer) if "too open to use" in w]
    assert words.startswith("100 °C: too open to use: V: at most 0.3 % of it in the blends is too little to tell")
    lessons.take(plant, "refutas", "V")
    assert list(plant.lessons()[0].terms) == [40.0]


def test_a_value_within_its_error_is_called_unsure(plant):
    put(plant, "V1", {"A": 0.5, "B": 0.4, "V": 0.1})
    (offer,) = [o for o in lessons.offers(lab.read(plant)) if o.kind == "value"]
    assert lessons.standing(offer) == "unsure"
    assert "within 2 standard errors of its viscosity on record, which does as well" in lessons.offer_words(offer)
    assert "the same as 9000 mm²/s at 40 °C and 800.0 mm²/s at 100 °C" in lessons.offer_words(offer)
    assert lessons.error_words(offer) == "0.00 → 0.00"


def test_a_value_of_a_small_share_names_the_pair_that_may_explain_it(plant):
    edit_cell(plant, "V", "kind", "additive")
    for n, share in enumerate((0.2, 0.35, 0.5, 0.65, 0.8), 1):
        put(plant, f"S{n}", {"A": 0.982 - share, "B": share, "V": 0.018}, 12.0 * share * (1.0 - share), product="")
    (_, value) = lessons.offers(lab.read(plant))
    assert value.beside == "LIGHT with B"
    assert ("these blends are also of LIGHT with B, whose excess may explain the same: take that first, and look again"
            in lessons.offer_words(value))
    lessons.take(plant, "refutas", "LIGHT", "B")
    (_, value) = lessons.offers(lab.read(plant))
    assert (value.beside, lessons.standing(value)) == ("", "unsure")


def test_a_slip_beside_sound_blends_is_left_out_by_name(plant):
    for n, share in enumerate((0.08, 0.11), 1):
        hotter(plant, f"V{n}", share)
    # SUS at 100 °F typed as mm²/s: about 4.63 times (Hydraulic Institute table, R).
    hotter(plant, "V3", 0.05, off=363.0)
    (offer,) = [o for o in lessons.offers(lab.read(plant)) if o.kind == "value"]
    assert offer.evidence == ("V1", "V2")
    assert lessons.offer_words(offer)[-1] == "left out, for they are in question: V3"


def test_a_pair_that_stands_beside_much_of_a_modifier_says_so(plant):
    for n, share in enumerate((0.30, 0.35, 0.40), 1):
        put(plant, f"V{n}", {"A": 0.9 - share, "B": share, "V": 0.1}, V=(3000.0, 300.0))
    (pair, value) = lessons.offers(lab.read(plant))
    assert pair.beside == "10.00 % V"
    assert any("take that first, and look again" in words for words in lessons.offer_words(pair))
    assert abs(pair.terms[40.0][0]) > 0.1
    lessons.take(plant, "refutas", "V")
    (pair, _) = lessons.offers(lab.read(plant))
    assert (pair.beside, abs(pair.terms[40.0][0]) < 0.01) == ("", True)
    assert value.kind == "value"


def test_too_little_of_a_stock_tells_nothing(plant):
    put(plant, "V1", {"A": 0.6, "B": 0.3995, "V": 0.0005})
    with pytest.raises(DeskError, match=r"V: at most 0\.05 % of it in the blends is too little to tell"):
        lessons.take(plant, "refutas", "V")
    with pytest.raises(DeskError) as caught:
        lessons.take(plant, "refutas", "A")
    assert str(caught.value) == ("A is of kind base, which blends by its measured viscosities; a blending value is of "
                                 "vi_improver or additive. For a pair name both stocks")


@pytest.mark.parametrize(("version", "reason", "message"), [
    ("L9", "x", "no lesson 'L9'; taken so far: L1"), ("L1", " ", "say why L1 is withdrawn, in a few words")])
def test_what_cannot_be_withdrawn(plant, version, reason, message):
    study(plant)
    lessons.take(plant, "refutas", "LIGHT", "B")
    with pytest.raises(DeskError) as caught:
        lessons.withdraw(plant, version, reason)
    assert str(caught.value) == message
    lessons.withdraw(plant, "L1", "tank cleaned")
    with pytest.raises(DeskError, match=r"^L1 was withdrawn at .* by anna$"):
        lessons.withdraw(plant, "L1", "again")


def test_evidence_is_not_dropped_under_a_lesson(plant):
    study(plant)
    lessons.take(plant, "refutas", "LIGHT", "B")
    with pytest.raises(DeskError) as caught:
        lab.drop(plant, "S3")
    assert str(caught.value) == "S3 is evidence of L1, which is in use; withdraw that first"
    lessons.withdraw(plant, "L1", "tank cleaned")
    assert lab.drop(plant, "S3") == "measured blend S3 dropped"


def test_a_catalogue_folder_is_never_changed(plant, tmp_path):
    with open_plant(tmp_path / "catalogue") as folder, pytest.raises(ReadOnlyPlant, match="is read but never changed"):
        put(folder, "b1", {"A": 0.5, "B": 0.5})
