"""Trims through the desk: from the measured batch, with the room, the list, the treat rates and the tanks of today."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from math import log
from pathlib import Path

import pytest

from blendtui.desk import batches, release, targets, trimming
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import open_plant
from blendtui.desk.stocks import edit_cell, retire_stock
from blendtui.store.batch_records import HEEL, REWORK, Content
from blendtui.store.errors import PlantError
from blendtui.store.plant import Plant
from solver.recipe import evaluate
from solver.target import Limit
from tests.desk.made_batches import all_charged, at, charged, drawn, ordered, plant_file, sampled

STOCKS = """stock,oil,kind,on_hand_kg,price_per_t,density15,kv40,kv100,flash,zinc,package_kg
A,LIGHT,base,90000,800,868,30.6,5.23,214,0,
B,,base,90000,1100,897,490,32,300,0,
N6,,base,90000,820,882,110,11.6,250,0,
D,,base,9000,1000,895,420,29,290,0,180
X,,base,90000,100,880,480,31,300,0,
P,,additive,3000,3500,960,90,9,180,40000,
"""
PRODUCTS = """product,grade,only_listed
P100,,yes
ADD,,yes
"""
LIMITS = """product,property,low,high
P100,kv40,100,120
P100,flash,190,
ADD,kv40,100,120
ADD,flash,190,
"""
SHARES = """product,of,low_pct,high_pct
P100,A,,
P100,B,,
P100,N6,,
P100,D,,
ADD,A,,
ADD,B,,
ADD,P,1,1
"""
VESSELS = "vessel,capacity_l\nK1,40000\nK2,24000\n"
BATCH = {"kv40": 92.0, "kv100": 10.9, "flash": 235.0, "density15": 884.0}


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    path = plant_file(tmp_path / "c", stocks=STOCKS, products=PRODUCTS, limits=LIMITS, shares=SHARES, vessels=VESSELS)
    with open_plant(path, who="anna") as opened:
        yield opened


def measured(plant: Plant, results: dict[str, float], product: str = "P100", decision: str = "trim",
             charges: dict[str, float] | None = None, **order: object) -> None:
    """20 t, all charged, with these results."""
    ordered(plant, product, charges or {"A": 11500.0, "B": 8500.0}, **order)
    all_charged(plant)
    sampled(plant, 1, results, decision=decision)


def index(kv: float) -> float:
    """Refutas: 14.534 ln ln(v + 0.8) + 10.975 (R, Maples 2000)."""
    return 14.534 * log(log(kv + 0.8)) + 10.975


def test_20_t_at_92_wanting_100_takes_1226_kg_of_bright_stock(plant):
    """m = M (A_t − A_m)/(A_a − A_t), the closed form of a law whose index mixes by mass."""
    measured(plant, BATCH)
    closed = 20000.0 * (index(100.0) - index(92.0)) / (index(490.0) - index(100.0))
    assert closed == pytest.approx(1226.3, abs=0.05)
    for aim in ("mass", "cost"):
        found = trimming.propose(plant, "B-0001", aim=aim, stocks=["B"])
        assert found.trim.additions_kg == pytest.approx({"B": closed}, abs=0.1)
        assert found.trim.status == "optimal"
    kv40 = next(e for e in found.effects if e.property == "kv40")
    assert (kv40.before, kv40.low, kv40.met, kv40.measured) == (92.0, 100.0, True, True)
    assert kv40.after == pytest.approx(100.0, rel=1e-5)
    assert kv40.after >= 100.0
    assert found.trim.cost == pytest.approx(1.1 * closed, abs=0.2)
    vi, flash = (next(e for e in found.effects if e.property == code) for code in ("vi", "flash"))
    assert (vi.before, vi.measured) == (pytest.approx(102.0, abs=5.0), True)
    assert vi.after != vi.before
    assert flash.after > flash.before == 235.0


def test_the_same_batch_with_the_heavy_neutral_is_absurd(plant):
    """practice.md: an absurd 17.8 t of the 600 neutral (110)."""
    measured(plant, BATCH)
    found = trimming.propose(plant, "B-0001", aim="mass", stocks=["N6"])
    closed = 20000.0 * (index(100.0) - index(92.0)) / (index(110.0) - index(100.0))
    assert closed == pytest.approx(17800.0, abs=100.0)
    # 36,000 L hold some 31.7 t of it at 60 °C: something has to go first, in the same proportion of what stays.
    assert found.trim.drawn_kg > 0.0
    kept = 20000.0 - found.trim.drawn_kg
    assert found.trim.additions_kg == pytest.approx({"N6": closed * kept / 20000.0}, rel=1e-3)
    assert any("is absurd: more than a quarter of what is there" in x for x in found.words)


def test_it_starts_from_the_measured_batch(plant):
    """The prediction of these charges is near 100 mm²/s: by it nothing would be added."""
    measured(plant, BATCH)
    found = trimming.propose(plant, "B-0001")
    assert found.batch.kv40 == 92.0
    assert found.batch.in_vessel_kg == 20000.0
    assert {s.code: part for s, part in found.batch.contents} == {"A": 0.575, "B": 0.425}
    assert found.samples == (1,)


def test_repeated_results_count_by_their_mean(plant):
    measured(plant, BATCH)
    sampled(plant, 2, {"kv40": 91.0, "kv100": 10.8}, hour=10)
    assert trimming.propose(plant, "B-0001", stocks=["B"]).batch.kv40 == 91.0  # the newest sample


def test_what_was_not_measured_is_the_prediction_and_said(plant):
    measured(plant, {"kv40": 92.0, "kv100": 10.9})
    found = trimming.propose(plant, "B-0001")
    flash = next(e for e in found.effects if e.property == "flash")
    assert flash.measured is False
    assert f"flash point was not measured: {flash.before:.0f} °C is the prediction, not a result" in found.words
    assert any(x.startswith("density at 15 °C was not measured: 88") for x in found.words)


@pytest.mark.parametrize(("results", "words"), [
    ({"kv40": 92.0}, "sample 1 of B-0001 has KV40 on record; a trim moves both: measure KV40 and KV100"),
    ({"flash": 235.0}, "sample 1 of B-0001 has neither")])
def test_both_viscosities_of_one_sample(plant, results, words):
    measured(plant, results)
    with pytest.raises(DeskError, match=words):
        trimming.propose(plant, "B-0001")


def test_not_before_a_sample_and_not_while_charges_are_to_come(plant):
    ordered(plant, "P100", {"A": 11500.0, "B": 8500.0})
    charged(plant, 1)
    with pytest.raises(DeskError, match=r"B-0001 is still being charged: line 2 \(B\); charge what is to come or drop"):
        trimming.propose(plant, "B-0001")
    charged(plant, 2)
    with pytest.raises(DeskError, match="B-0001 has no sample of what is in the vessel now: a trim starts from the"):
        trimming.propose(plant, "B-0001")


def test_only_what_the_product_lists(plant):
    """X is the cheapest by far and not on the list."""
    measured(plant, BATCH)
    assert set(trimming.propose(plant, "B-0001").trim.additions_kg) <= {"A", "B", "N6", "D"}
    with pytest.raises(DeskError, match="no stock Q; the plant has A, B, N6, D, X, P"):
        trimming.propose(plant, "B-0001", stocks=["Q"])
    with pytest.raises(DeskError, match="'price' is no aim; a trim is sought by cost or by mass"):
        trimming.propose(plant, "B-0001", aim="price")


def test_a_stock_that_went_out_of_use_since_is_not_added(plant):
    """The formula of the batch names it still; the product of today does not."""
    measured(plant, BATCH)
    targets.drop_rule(plant, "P100", "D")
    retire_stock(plant, "D")
    found = trimming.propose(plant, "B-0001", aim="mass")
    assert set(found.trim.additions_kg) == {"B"}
    with pytest.raises(DeskError, match="no stock D; the plant has A, B, N6, X, P"):
        trimming.propose(plant, "B-0001", stocks=["D"])


def test_whole_drums(plant):
    measured(plant, BATCH)
    found = trimming.propose(plant, "B-0001", stocks=["D"])
    assert found.trim.packages == {"D": 8}
    assert found.charges[0].plan_kg == 8 * 180.0


def test_additives_are_topped_up_to_their_treat_rate(plant):
    measured(plant, BATCH, "ADD", charges={"A": 11400.0, "B": 8400.0, "P": 200.0})
    found = trimming.propose(plant, "B-0001")
    masses = found.trim.additions_kg
    assert set(masses) == {"B", "P"}
    assert (200.0 + masses["P"]) / (20000.0 + sum(masses.values())) == pytest.approx(0.01, rel=1e-6)
    # In the order of every card: oil, the package after it, and some of the oil kept back as a rinse.
    assert [c.stock for c in found.charges] == ["B", "P", "B"]
    assert sum(c.plan_kg for c in found.charges if c.stock == "B") == pytest.approx(masses["B"])


def test_a_batch_that_lacks_its_additive_is_topped_up(plant):
    measured(plant, {**BATCH, "kv40": 105.0}, "ADD", charges={"A": 11500.0, "B": 8400.0, "P": 100.0})
    masses = trimming.propose(plant, "B-0001").trim.additions_kg
    assert (100.0 + masses["P"]) / (20000.0 + sum(masses.values())) == pytest.approx(0.01, rel=1e-4)


def test_stocks_of_today_less_what_is_promised(plant):
    measured(plant, BATCH)
    ordered(plant, "P100", {"B": 81000.0}, name="B-0002")  # of the 81,500 kg that are left
    found = trimming.propose(plant, "B-0001")
    assert (found.trim.additions_kg or {}).get("B", 0.0) <= 500.0


def test_every_limit_is_met_on_recomputation(plant):
    """KV40, KV100 and VI limits of a customer at once, over a row of measured batches."""
    goal = replace(targets.target_of(plant, "P100"), limits=(
        Limit("kv40", 100.0, 106.0), Limit("kv100", 11.2, 12.2), Limit("vi", 95.0, None), Limit("flash", 215.0, None)))
    ordered(plant, "P100", {"A": 11500.0, "B": 8500.0}, target=goal)
    all_charged(plant)
    tried = 0
    for n, (kv40, kv100) in enumerate([(92.0, 10.9), (96.0, 11.0), (110.0, 12.2), (118.0, 12.8), (88.0, 10.4)], 1):
        sampled(plant, n, {"kv40": kv40, "kv100": kv100, "flash": 231.0}, hour=8 + n)
        found = trimming.propose(plant, "B-0001", aim="mass")
        masses = found.trim.additions_kg
        if not masses:
            continue
        tried += 1
        kept = replace(found.batch, in_vessel_kg=20000.0 - found.trim.drawn_kg)
        total = kept.in_vessel_kg + sum(masses.values())
        shares = {kept.code: kept.in_vessel_kg / total, **{c: kg / total for c, kg in masses.items()}}
        assert all(x.met for x in evaluate([kept, *plant.stocks()], shares, goal).limits)
    assert tried >= 4


def test_oils_that_are_in_it_come_before_others(plant):
    """Where a product allows only so many stocks, and the cheapest trim would bring in one more."""
    goal = replace(targets.target_of(plant, "P100"), max_stocks=2)
    ordered(plant, "P100", {"A": 11500.0, "B": 8500.0}, target=goal)
    all_charged(plant)
    sampled(plant, 1, BATCH, decision="trim")
    found = trimming.propose(plant, "B-0001")
    assert (set(found.trim.additions_kg), found.trim.broken, found.questions) == ({"B"}, (), ())
    (beside,) = (x for x in found.words if x.startswith("only oils that are in it are added, for the product allows 2"))
    assert "of its whole list it would be B 73.7 kg, D 1260 kg for 1341.07" in beside
    # Who names another oil has it, and is asked.
    named = trimming.propose(plant, "B-0001", stocks=["D"])
    assert set(named.trim.additions_kg) == {"D"}
    assert any("the product allows 2: the formulator has to agree" in x for x in named.questions)


def test_a_heel_is_no_stock_of_the_recipe(plant):
    goal = replace(targets.target_of(plant, "P100"), max_stocks=2)
    heel = Content("B-0001", 1, HEEL, "N6", 200.0, cells=batches.cells_of(plant.stock("N6")))
    ordered(plant, "P100", {"A": 11300.0, "B": 8500.0}, target=goal, contents=(heel,))
    all_charged(plant)
    sampled(plant, 1, BATCH, decision="trim")
    found = trimming.propose(plant, "B-0001")
    assert {s.code: part for s, part in found.batch.contents}["N6"] == pytest.approx(0.01)
    assert found.trim.broken == ()


# Unwise

def test_trimming_noise(plant):
    """Outside by less than R (1.22 % of 100): a fresh sample first."""
    measured(plant, {**BATCH, "kv40": 99.2, "kv100": 11.4}, decision="fresh sample")
    found = trimming.propose(plant, "B-0001")
    assert found.questions == (
        "the batch is outside by less than R: a trim on that is trimming noise; draw a fresh sample first",
        "the decision on sample 1 is fresh sample, not trim")
    assert found.words[:2] == found.questions
    with pytest.raises(Questioned, match="trimming noise"):
        trimming.take(plant, "B-0001")
    assert plant.batch("B-0001").to_charge == ()
    assert trimming.take(plant, "B-0001", sure=True).to_charge


def test_a_good_batch_needs_no_trim(plant):
    measured(plant, {**BATCH, "kv40": 108.0, "kv100": 11.9}, decision="release")
    found = trimming.propose(plant, "B-0001")
    assert found.trim.additions_kg == {}
    assert any("the results say release" in x for x in found.words)
    with pytest.raises(DeskError, match="B-0001 meets every limit as it was measured; there is nothing to add"):
        trimming.take(plant, "B-0001", sure=True)


def test_a_trim_that_nobody_decided_is_asked_about(plant):
    measured(plant, BATCH, decision="")
    with pytest.raises(Questioned, match="nothing is decided on sample 1 yet: decide first, so that the record says"):
        trimming.take(plant, "B-0001")


def test_an_absurd_trim_is_asked_about(plant):
    measured(plant, BATCH, charges={"A": 2900.0, "B": 2100.0})
    with pytest.raises(Questioned, match="kg of N6 onto 5,000 kg is absurd"):
        trimming.take(plant, "B-0001", stocks=["N6"])


def test_guards_give_way_where_no_trim_keeps_them(plant):
    """They are for predictions: KV40 between 100 and 101 with a guard of 2 % leaves nothing, the limits do."""
    goal = targets.target_of(plant, "P100")
    goal = replace(goal, limits=(Limit("kv40", 100.0, 101.0, guard_pct=2.0), Limit("flash", 190.0, None)))
    ordered(plant, "P100", {"A": 11500.0, "B": 8500.0}, target=goal)
    all_charged(plant)
    sampled(plant, 1, BATCH, decision="trim")
    found = trimming.propose(plant, "B-0001", aim="mass")
    assert set(found.trim.additions_kg) == {"B"}
    assert found.questions == (trimming.UNGUARDED,)
    assert next(e for e in found.effects if e.property == "kv40").after == pytest.approx(100.0, rel=1e-5)
    with pytest.raises(Questioned, match="no trim keeps the product's guards: this one meets the limits themselves"):
        trimming.take(plant, "B-0001", aim="mass")


# Room

def test_too_little_room_says_how_much_to_draw_off(plant):
    """K2 may hold 21,600 L: 20 t at 60 °C are 23,300 L already."""
    measured(plant, BATCH, vessel="K2")
    found = trimming.propose(plant, "B-0001", stocks=["B"])
    assert found.trim.drawn_kg > 1500.0
    assert found.trim.litres <= 0.9 * 24000.0 * (1.0 + 1e-9)
    assert any(x.startswith("draw off ") for x in found.words)
    assert any(f"blendtui batch draw B-0001 {found.trim.drawn_kg:g} --as rework" in x for x in found.words)
    with pytest.raises(DeskError, match=r"the room is too small: draw off \d+ kg first, which goes to rework"):
        trimming.take(plant, "B-0001", stocks=["B"])
    drawn(plant, REWORK, found.trim.drawn_kg)
    after = trimming.propose(plant, "B-0001", stocks=["B"])
    assert after.trim.drawn_kg == 0.0
    assert after.batch.in_vessel_kg == 20000.0 - found.trim.drawn_kg
    assert after.trim.additions_kg == pytest.approx(found.trim.additions_kg, abs=0.1)
    assert trimming.take(plant, "B-0001", stocks=["B"]).to_charge


def test_a_vessel_of_unknown_capacity_is_said(plant):
    measured(plant, BATCH, vessel="K9")
    words = "the capacity of K9 is not known, so whether there is room for this is not known either"
    assert words in trimming.propose(plant, "B-0001").words


def test_no_trim_says_why(plant):
    measured(plant, {**BATCH, "kv40": 125.0, "kv100": 13.0})
    with pytest.raises(DeskError, match="B-0001: no trim: no additions of the oils allowed bring every limit inside"):
        trimming.take(plant, "B-0001", stocks=["B"])


# Taking it

def test_taking_it_plans_charges_and_reserves_their_oil(plant):
    measured(plant, BATCH)
    before = plant.stock("B").available_kg
    made = trimming.take(plant, "B-0001", stocks=["B"], by="Gerd")
    assert made == plant.batch("B-0001")
    (charge,) = made.to_charge
    assert (charge.line, charge.round, charge.stock, charge.position, charge.celsius) == (3, 1, "B", 21, 40.0)
    assert charge.plan_kg == pytest.approx(1226.3, abs=0.1)
    assert charge.tolerance_kg == pytest.approx(0.005 * charge.plan_kg)
    assert plant.stock("B").available_kg == pytest.approx(before - charge.plan_kg)
    assert made.head.batch_kg == pytest.approx(20000.0 + charge.plan_kg)
    assert plant.journal(1)[0].what == "B-0001 trim 1 by Gerd: B 1226 kg"
    with pytest.raises(DeskError, match=r"still being charged: line 3 \(B\)"):
        trimming.propose(plant, "B-0001")
    assert "not charged: line 3 (B, 1226 kg)" in release.missing(plant, made)
    assert plant.verify() is None


def test_the_sample_after_a_trim_decides(plant):
    measured(plant, BATCH)
    trimming.take(plant, "B-0001", stocks=["B"])
    charged(plant, 3, when=at(10))
    assert release.missing(plant, plant.batch("B-0001")) == ("no sample was drawn after the last charge",)
    sampled(plant, 2, {"kv40": 110.0, "kv100": 12.0, "flash": 238.0}, hour=11, decision="release")
    release.release(plant, "B-0001", by="erik")
    (blend,) = plant.measured()
    assert (blend.name, round(blend.parts[1].share, 4)) == ("B-0001 S2", round(9726.3 / 21226.3, 4))


def test_a_third_trim_takes_a_reason(plant):
    measured(plant, BATCH)
    for n in (1, 2):
        trimming.take(plant, "B-0001", stocks=["B"])
        charged(plant, 2 + n, when=at(9 + 2 * n))
        sampled(plant, 1 + n, BATCH, hour=10 + 2 * n, decision="trim")
    found = trimming.propose(plant, "B-0001", stocks=["B"])
    assert "this is trim 3: at most two, then the formulator; it is taken only with a reason" in found.words
    with pytest.raises(DeskError, match="B-0001 has had 2 trims: at most two, then the formulator; a further one"):
        trimming.take(plant, "B-0001", stocks=["B"], sure=True)
    made = trimming.take(plant, "B-0001", stocks=["B"], why="the formulator agrees")
    assert (made.to_charge[0].round, made.to_charge[0].why) == (3, "the formulator agrees")
    assert plant.journal(1)[0].why == "the formulator agrees"


def test_what_has_changed_meanwhile_is_not_taken(plant, monkeypatch):
    measured(plant, BATCH)
    old = trimming.propose(plant, "B-0001", stocks=["B"])
    monkeypatch.setattr(trimming, "propose", lambda *_, **__: old)
    edit_cell(plant, "B", "kv40", "470")
    with pytest.raises(DeskError, match="B-0001 or a stock of its trim has changed since it was worked out"):
        trimming.take(plant, "B-0001")
    assert plant.batch("B-0001").to_charge == ()


def test_oil_that_another_batch_took_meanwhile_is_not_promised_twice(plant, monkeypatch):
    measured(plant, BATCH)
    old = trimming.propose(plant, "B-0001", stocks=["B"])
    monkeypatch.setattr(trimming, "propose", lambda *_, **__: old)
    ordered(plant, "P100", {"B": 81000.0}, name="B-0002")
    with pytest.raises(PlantError, match=r"the rest is promised to B-0002 \(anna\)"):
        trimming.take(plant, "B-0001")


def test_a_chance_in_place_of_guards(plant):
    """Surer costs more: the result is to lie inside with 95 %, so the aim lies further inside."""
    measured(plant, BATCH)
    plain, sure = (trimming.propose(plant, "B-0001", stocks=["B"], chance=c) for c in (None, 0.95))
    assert sure.trim.additions_kg["B"] > plain.trim.additions_kg["B"]
    assert sure.trim.reached is True
    assert sure.trim.chances["kv40"] >= 0.95


def test_json(plant):
    measured(plant, BATCH)
    found = trimming.proposed_json(trimming.propose(plant, "B-0001", stocks=["B"]))
    assert (found["batch"], found["round"], found["samples"], found["status"]) == ("B-0001", 1, [1], "optimal")
    assert found["additions_kg"]["B"] == found["added_kg"] == found["charges"][0]["plan_kg"]
    assert {e["property"] for e in found["effects"]} == {"kv40", "kv100", "vi", "flash", "density15"}
