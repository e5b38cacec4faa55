"""Orders: kg and litres, heel, line and flush, room, steps, promises, and what is refused or questioned."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from math import exp, log
from pathlib import Path

import pytest

from blendtui.desk import batches, formulas, orders, targets, vessels
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.desk.orders import NoBlend, Order, propose, take
from blendtui.desk.plant import open_plant
from blendtui.desk.proposals import amount_of
from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import CANCELLED, LEFT, RELEASED, Outcome
from blendtui.store.errors import PlantError
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.errors import SolverError
from tests.desk.made_batches import all_charged, charged, put, sampled
from tests.desk.order_plant import order_plant


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return order_plant(tmp_path / "c")


@pytest.fixture
def plant(path: Path) -> Iterator[Plant]:
    with open_plant(path, who="anna") as opened:
        yield opened


def refutas(parts: dict[float, float]) -> float:
    """KV of a blend of {KV: mass fraction} by the mass index V = 14.534 ln ln(v + 0.8) + 10.975, written out again."""
    index = sum(share * (14.534 * log(log(kv + 0.8)) + 10.975) for kv, share in parts.items())
    return exp(exp((index - 10.975) / 14.534)) - 0.8


def sum_of(proposal: orders.Proposal) -> float:
    return sum(c.plan_kg for c in proposal.charges)


# How much

def test_the_charges_sum_to_what_is_asked_and_the_vessel_holds_the_heel_besides(plant: Plant) -> None:
    made = propose(plant, Order("P46", 10000, "K1", line=(40, "N100")))
    assert made.status == "optimal"
    assert (made.asked_kg, made.batch_kg) == (10000, 10140)
    assert any("10000 kg are about 115" in words for words in made.remarks)  # L at 20 °C: kg typed for litres is seen
    assert sum_of(made) == pytest.approx(10000, abs=10)  # within half a scale division of 20 kg
    assert [(c.what, c.kg, c.stock) for c in made.contents] == [("heel", 100, "N100"), ("line", 40, "N100")]
    # Treat rates are shares of the whole, and heel and line hold none of it.
    masses = {c.stock: c.plan_kg for c in made.charges}
    assert masses["PK"] == pytest.approx(0.0085 * 10140, abs=0.34)  # half a step of 0.5, and of a total 10 off


def test_flush_oil_that_goes_into_the_batch_is_deducted_and_drawn_from_its_tank(plant: Plant) -> None:
    into = propose(plant, Order("P46", 10000, "K2", most_fill_pct=100, flush=(200, "N32", True), unit="kg"))
    assert into.status == "infeasible"  # 10 t are too much for the small kettle
    plain = propose(plant, Order("P46", 10000, "K1"))
    into = propose(plant, Order("P46", 10000, "K1", flush=(200, "N32", True)))
    out = propose(plant, Order("P46", 10000, "K1", flush=(200, "N32", False)))
    assert sum_of(into) == pytest.approx(9800, abs=10)
    assert into.batch_kg == 10100
    assert sum_of(out) == sum_of(plain)
    light = {m: sum(c.plan_kg for c in p.charges if c.stock == "N32") for m, p in (("plain", plain), ("into", into))}
    assert light["plain"] - light["into"] == pytest.approx(200, abs=40)
    made = take(plant, Order("P46", 10000, "K1", flush=(200, "N32", False)))
    assert plant.stock("N32").on_hand_kg == 59800
    assert made.in_vessel_kg == 100  # what is pumped out again is not in the vessel
    orders.redesign(plant, made.name)
    assert plant.stock("N32").on_hand_kg == 59800  # drawn once


@pytest.mark.parametrize(("unit", "celsius"), [("L15", 15.0), ("L20", 20.0)])
def test_litres_become_kg_by_the_density_of_the_very_blend(plant: Plant, unit: str, celsius: float) -> None:
    made = propose(plant, Order("P46", 11000, "K1", unit))
    density = made.recipe.predicted["density15"]
    assert density is not None
    # ASTM D1250, lubricating oils: VCF = exp(-a dt (1 + 0.8 a dt)), a = 0.6278/density (R, solver/volume.py), again.
    step, alpha = celsius - 15.0, 0.6278 / density
    kg = 11.0 * density * exp(-alpha * step * (1.0 + 0.8 * alpha * step))
    # Whole steps move the recipe, and so its density, by a hair from that of the fixed point.
    assert made.asked_kg == pytest.approx(kg, rel=5e-5)
    assert any(f"11000 L at {celsius:g} °C are" in words for words in made.remarks)


@pytest.mark.parametrize(("typed", "celsius", "found"), [
    ("15 t", None, (15000.0, "kg")), ("15000", None, (15000.0, "kg")), ("16000 L", None, (16000.0, "L15")),
    ("16000 L", 20.0, (16000.0, "L20")), ("16000 L20", None, (16000.0, "L20")), ("16 m3", 20.0, (16000.0, "L20")),
    ("1000 US gal", None, (3785.411784, "L15")), ("1000 lb", None, (453.59237, "kg"))])
def test_an_amount_is_read_with_its_unit(typed: str, celsius: float | None, found: tuple[float, str]) -> None:
    assert amount_of(typed, celsius) == (pytest.approx(found[0]), found[1])


@pytest.mark.parametrize(("typed", "celsius", "words"), [
    ("15000", 20.0, "15000 is a mass (kg), and a temperature belongs to litres; type 15000 L"),
    ("15000 kg", 15.0, "15000 kg is a mass, and a temperature belongs to litres"),
    ("16000 L", 60.0, "litres are ordered at 15 or 20 °C, not at 60 °C"),
    ("16000 L20", 15.0, "16000 L20 is at 20 °C, and 15 °C is typed with it"),
    ("500 gal", None, "which gallon?"), ("a lot", None, "is not a number"), ("15,000", None, "a comma")])
def test_mass_and_volume_that_contradict_each_other_are_refused(typed: str, celsius: float | None, words: str) -> None:
    with pytest.raises((DeskError, SolverError)) as error:
        amount_of(typed, celsius)
    assert words in str(error.value)


# Heel

@pytest.mark.parametrize(("part", "rise"), [(0.01, 1.018), (0.05, 1.095)])
def test_a_heel_moves_the_viscosity_as_it_is_known_to(plant: Plant, part: float, rise: float) -> None:
    # 1 % of VG 320 left in VG 32 moves KV40 by +1.8 %, 5 % by +9.5 % (common practice; by Refutas).
    made = propose(plant, Order("ONE", 10000 * (1 - part), "K1", heel_kg=10000 * part, heel_stock="G320",
                                heel_ignored="the formulator looks into it"))
    whole, without = made.effects["kv40"]
    assert whole is not None
    assert without is not None
    assert without == pytest.approx(32.0)
    assert whole / without == pytest.approx(rise, abs=5e-4)
    assert whole == pytest.approx(refutas({32.0: 1 - part, 320.0: part}), rel=1e-9)
    assert made.batch_kg == 10000
    assert sum_of(made) == pytest.approx(10000 * (1 - part))


def test_a_heel_that_is_ignored_says_which_limit_it_breaks_and_one_that_counts_keeps_it(plant: Plant) -> None:
    heel = {"heel_kg": 3500.0, "heel_stock": "G320"}
    left_out = propose(plant, Order("P46", 7000, "K1", heel_ignored="drained by hand", **heel))
    assert left_out.status == "optimal"
    assert any(w.startswith("WITH THE HEEL IT MISSES KV40") for w in left_out.remarks)
    # A third of VG 320 is more than VG 46 can carry: what counts is told, not passed over.
    with_it = propose(plant, Order("P46", 7000, "K1", **heel))
    assert with_it.status == "infeasible"
    assert "without what is in the vessel a blend exists" in with_it.reasons
    small = propose(plant, Order("P46", 8000, "K1", heel_kg=400, heel_stock="G320"))
    assert small.status == "optimal"
    assert small.recipe.meets_all
    assert any("G320, 400 kg in vessel or line, is not on the product's list" in w for w in small.remarks)


def test_a_measured_heel_of_unknown_origin_takes_part_with_its_values(plant: Plant) -> None:
    cells = {"kv40": "46.1", "kv100": "6.8 cSt", "density15": "0.876 kg/L", "flash": "220"}
    made = propose(plant, Order("P46", 8000, "K1", heel_kg=300, heel_stock="", heel_cells=cells))
    (heel,) = made.contents
    assert heel.source == "measured"
    assert heel.cells == {"kv40": 46.1, "kv100": 6.8, "density15": 876.0, "flash": 220.0}
    with pytest.raises(DeskError, match="the heel of 300 kg: its kv100, density15 are unknown"):
        propose(plant, Order("P46", 8000, "K1", heel_kg=300, heel_stock="", heel_cells={"kv40": "46.1"}))
    with pytest.raises(SolverError, match="HEEL is in the vessel, and its flash point is unknown"):
        propose(plant, Order("P46", 8000, "K1", heel_kg=300, heel_stock="",
                             heel_cells={k: v for k, v in cells.items() if k != "flash"}))


def test_the_heel_of_a_batch_is_as_the_laboratory_found_it_the_rest_as_predicted(plant: Plant) -> None:
    first = take(plant, Order("P46", 8000, "K1"))
    all_charged(plant, first.name)
    sampled(plant, 1, {"kv40": 47.3, "kv100": 6.95}, name=first.name)
    put(plant, Outcome(first.name, 1, LEFT, first.head.batch_kg, at="2026-05-04T12:00:00.000Z", by="anna"))
    head = plant.batch(first.name).head
    plant.step(lambda: Step((changed(head, state=RELEASED),), "released"))
    made = propose(plant, Order("P46", 8000, "K1", heel_kg=150, heel_stock=first.name))
    (heel,) = made.contents
    assert (heel.cells["kv40"], heel.cells["kv100"]) == (47.3, 6.95)
    assert 868 < heel.cells["density15"] < 880
    assert 190 < heel.cells["flash"] < 230
    assert sum(heel.parts.values()) == pytest.approx(1.0)
    assert heel.parts["PK"] == pytest.approx(0.0085, abs=1e-4)
    # The treat rate counts what the heel was made of, so nothing is dosed twice.
    charged_pk = sum(c.plan_kg for c in made.charges if c.stock == "PK")
    assert charged_pk == pytest.approx(0.0085 * 8150 - heel.parts["PK"] * 150, abs=0.26)


def test_a_measured_heel_far_from_what_it_is_said_to_be_is_questioned(plant: Plant) -> None:
    order = Order("P46", 8000, "K1", heel_kg=100, heel_stock="N100", heel_cells={"kv40": "46"})
    (words,) = propose(plant, order).questions
    assert words.startswith("the heel is said to be of N100 (KV40 98.00 mm²/s), and 46.00 was measured")
    assert not propose(plant, replace(order, heel_cells={"kv40": "92"})).questions


@pytest.mark.parametrize(("order", "words"), [
    (Order("P46", 8000, "K1", heel_kg=9, heel_stock="N32", heel_cells={"kv40": "5.4", "kv100": "32"}), "swapped"),
    (Order("P46", 10, "TINY", heel_kg=100, heel_stock="N32"), "TINY is smaller than its heel: 115 L at 15 °C"),
    (Order("P46", 8000, "K1", heel_kg=-5), "the heel: -5 kg cannot be"),
    (Order("P46", 8000, "K1", heel_kg=100, heel_stock="NOSUCH"), "no stock and no batch of this plant"),
    (Order("P46", 8000, "K1", heel_kg=0, heel_cells={"kv40": "46"}), "values of a heel are typed, and no heel"),
    (Order("P46", 8000, "K1", heel_kg=0, heel_ignored="why not"), "no heel and no line to leave out"),
    (Order("P46", 8000, "K1", flush=(9000, "N32", True)), "nothing is left to charge"),
    (Order("P46", 8000, "K1", flush=(70000, "N32", False)), "59500 kg are free"),
    (Order("P46", 8000, "K1", line=(40, "")), "the line of 40.0 kg"),
    (Order("P46", 8000, "NONE"), "no vessel 'NONE'; the plant has K1, K2, K3, TINY"),
    (Order("P46", 8000, "K3"), "K3 has no capacity, so its fill cannot be told"),
    (Order("P46", -8000, "K1"), "an order of -8000 kg cannot be"),
    (Order("P46", 0, "K1"), "an order of 0 kg cannot be"),
    (Order("P46", float("nan"), "K1"), "an order of nan kg cannot be"),
    (Order("P46", 8000, "K1", "gal"), "'gal' is no unit of an order; usable are kg, L15, L20"),
    (Order("P46", 8000, "K1", mix_c=260), "a mixing temperature of 260 °C lies outside"),
    (Order("P46", 8000, "K1", tank_c={"": 900}), "the tanks: 900 °C lies outside"),
    (Order("P46", 8000, "K1", tank_c={"N33": 40}), "the tank of 'N33', which is no stock"),
    (Order("P46", 8000, "K1", most_fill_pct=0), "a fill of 0 % of the vessel cannot be"),
    (Order("P46", 8000, "K1", limits={"colour": ("1", "2")}), "no property 'colour'"),
    (Order("P46", 8000, "K1", limits={"kv40": ("48", "44")}), "low 48 is above high 44"),
    (Order("P46", 8000, "K1", limits={"kv40": ("", "")}), "neither a low nor a high"),
    (Order("P46", 8000, "K1", limits={"kv40": ("4x", "")}), "does not belong here"),
    (Order("P46", 8000, "K1", name="N32"), "N32 is a stock of this plant"),
    (Order("NOSUCH", 8000, "K1"), "NOSUCH")])
def test_what_cannot_be_is_refused_in_one_line_and_nothing_is_written(plant: Plant, order: Order, words: str) -> None:
    before = plant.revision()
    with pytest.raises((DeskError, PlantError, SolverError), match=words) as error:
        take(plant, order, sure=True)
    assert "\n" not in str(error.value)
    assert plant.revision() == before
    assert not plant.batches()


def test_a_product_without_limits_is_refused(plant: Plant) -> None:
    targets.add_product(plant, "BLANK")
    with pytest.raises(DeskError, match="BLANK has no limits; give it a grade or a limit before it is ordered"):
        propose(plant, Order("BLANK", 8000, "K1"))


# Customer

def test_a_customers_limit_is_held_with_the_products_guard(plant: Plant) -> None:
    limits = {"kv40": ("44", "48"), "vi": ("95", "")}
    made = propose(plant, Order("P46", 8000, "K1", customer="Orlin Mills", limits=limits))
    limit = next(x for x in made.recipe.limits if x.property == "kv40")
    assert (limit.low, limit.high) == (44.0, 48.0)
    assert limit.held_low == pytest.approx(44.88)
    assert limit.held_high == pytest.approx(47.04)
    assert "customer Orlin Mills" in limit.sources
    assert not made.questions
    assert made.recipe.meets_all
    assert (made.recipe.predicted["vi"] or 0) >= 95.0


def test_a_wider_limit_is_questioned_and_the_products_own_holds(plant: Plant) -> None:
    order = Order("P46", 8000, "K1", limits={"kv40": ("41", "51")})
    with pytest.raises(Questioned, match=r"customer's KV40 41–51 is wider than the product's 41\.4–50\.6 mm²/s"):
        take(plant, order)
    assert not plant.batches()
    take(plant, order, sure=True)
    (head,) = plant.batches()
    target = batches.target_of(plant, plant.batch(head.batch))
    assert [x.source for x in target.limits if x.property == "kv40"] == ["limit on kv40", "customer"]
    limit = next(x for x in propose(plant, replace(order, vessel="K1")).recipe.limits if x.property == "kv40")
    assert (limit.low, limit.high) == (41.4, 50.6)


def test_limits_that_leave_nothing_name_both_who_ask_and_nothing_is_recorded(plant: Plant) -> None:
    order = Order("P46", 8000, "K1", customer="Orlin", limits={"kv40": ("60", "70")})
    made = propose(plant, order)
    assert made.status == "infeasible"
    assert not made.charges
    with pytest.raises(NoBlend, match="nothing was recorded") as error:
        take(plant, order, sure=True)
    assert "customer Orlin" in str(error.value)
    assert "grade ISO VG 46" in str(error.value)
    assert not plant.batches()


# Room

def test_the_fill_at_mixing_temperature_is_a_limit(plant: Plant) -> None:
    made = propose(plant, Order("P46", 10000, "K1", mix_c=60))
    cold = propose(plant, Order("P46", 10000, "K1", mix_c=20, heel_kg=100))
    assert made.fill_l is not None
    assert cold.fill_l is not None
    # 20 to 60 °C adds about 3 % of volume (common practice).
    assert made.fill_l / cold.fill_l == pytest.approx(1.03, abs=0.003)
    limit = next(x for x in made.recipe.limits if x.property == "vol60")
    assert limit.sources == ("vessel K1, fill at 60 °C",)
    assert limit.high == pytest.approx(0.9 * 15000 / 10.1)
    assert limit.low == pytest.approx(4000 / 10.1)
    assert limit.value is not None
    assert 10.1 * limit.value == pytest.approx(made.fill_l, rel=1e-3)
    assert made.fill_pct == pytest.approx(100 * made.fill_l / 15000)


def test_what_does_not_fit_says_how_much_would(plant: Plant) -> None:
    made = propose(plant, Order("P46", 14000, "K1"))
    assert made.status == "infeasible"
    (words,) = made.reasons
    assert "14100 kg take" in words
    assert "K1 may be filled to 13500 L (90 % of 15000 L)" in words
    most = float(words.split("at most about ")[1].split(" kg")[0])
    fits = propose(plant, Order("P46", most - 10, "K1"))
    assert fits.status == "optimal"
    assert fits.fill_pct is not None
    assert 89.5 < fits.fill_pct <= 90.0
    over = propose(plant, Order("P46", most + 60, "K1"))  # so near that the whole sum decides
    assert over.status == "infeasible"
    assert "may be filled to 13500 L" in over.reasons[0]
    assert propose(plant, Order("P46", most + 60, "K1", most_fill_pct=95)).charges
    little = propose(plant, Order("P46", 2000, "K1"))
    assert little.status == "infeasible"
    assert "at least 4000 L to cover its stirrer" in little.reasons[0]


def test_a_heel_that_is_ignored_takes_its_room_all_the_same(plant: Plant) -> None:
    order = Order("ONE", 10000, "K1", heel_kg=1500, heel_stock="N32")
    counted, ignored = (propose(plant, replace(order, heel_ignored=why)) for why in ("", "it is the same oil"))
    assert counted.fill_l == pytest.approx(ignored.fill_l)
    assert propose(plant, replace(order, amount=11000, heel_ignored="the same oil")).status == "infeasible"


# Steps, order, tolerance

def test_bulk_goes_over_the_vessels_scale_and_packages_by_their_own(plant: Plant) -> None:
    made = propose(plant, Order("P46", 10000, "K1"))
    steps = {c.stock: made.steps_kg[c.stock] for c in made.charges}
    assert steps == {"N32": 20.0, "N100": 20.0, "PK": 0.5, "AF": 0.1, "PD": 0.1}
    for charge in made.charges:
        step = steps[charge.stock] or 0.0
        assert charge.plan_kg / step == pytest.approx(round(charge.plan_kg / step), abs=1e-6)
        assert charge.tolerance_kg == pytest.approx(max(step / 2, 0.005 * charge.plan_kg))
    assert any("weighed by the vessel's division of 20 kg: N32, N100" in w for w in made.remarks)


def test_the_usual_order_keeps_light_stock_back_as_a_rinse(plant: Plant) -> None:
    made = propose(plant, Order("P46", 10000, "K1"))
    assert [c.stock for c in made.charges] == ["N32", "N100", "PK", "PD", "AF", "N32"]
    first, last = made.charges[0].plan_kg, made.charges[-1].plan_kg
    assert last == 20 * int(0.2 * (first + last) / 20)
    assert [(c.line, c.position) for c in made.charges] == [(n, 10 * n) for n in range(1, 7)]


def test_the_plant_sets_its_own_order_for_a_vessel_or_one_batch(plant: Plant) -> None:
    vessels.set_cell(plant, "K1", "charge_order", "heavy, light, pour_depressant, PK")
    assert [c.stock for c in propose(plant, Order("P46", 10000, "K1")).charges] == ["N100", "N32", "PD", "PK", "AF"]
    own = Order("P46", 10000, "K1", charges_in=("light", "additive", "rinse"))
    assert [c.stock for c in propose(plant, own).charges] == ["N32", "PK", "AF", "N32", "N100", "PD"]
    made = take(plant, Order("P46", 10000, "K1"))
    again = orders.reorder(plant, made.name, [2, 1, 3, 4, 5], why="the heavy tank is warm")
    assert plant.batch(made.name) == again
    assert [c.stock for c in again.charges][:2] == ["N32", "N100"]
    with pytest.raises(DeskError, match="name every line still to come once"):
        orders.reorder(plant, made.name, [1, 1, 2, 3, 4])


# Promises

def test_an_order_promises_its_oil_and_a_cancelled_one_gives_it_back(plant: Plant) -> None:
    made = take(plant, Order("P46", 10000, "K1", order_no="4711", customer="Orlin"), by="Berta", why="as usual")
    assert (made.name, made.head.ordered_by, made.head.state) == ("B-0001", "Berta", "open")
    assert plant.batch("B-0001") == made
    planned = {code: sum(c.plan_kg for c in made.charges if c.stock == code) for code in ("N32", "N100", "PK")}
    assert {c: plant.stock(c).reserved_kg for c in planned} == pytest.approx(planned)
    entry = plant.journal(1)[0]
    assert entry.what == "B-0001 ordered: 10000 kg of P46 in K1"
    assert entry.why == "as usual"
    with pytest.raises(DeskError, match="only with a reason"):
        orders.cancel(plant, "B-0001")
    gone = orders.cancel(plant, "B-0001", why="the customer left", by="Berta")
    assert (gone.head.state, gone.head.closed_by, gone.head.why) == (CANCELLED, "Berta", "the customer left")
    assert plant.stock("N32").reserved_kg == 0.0
    with pytest.raises(DeskError, match="B-0001 is cancelled"):
        orders.cancel(plant, "B-0001", why="again")
    assert plant.verify() is None


def test_two_orders_cannot_have_the_same_oil(plant: Plant, path: Path) -> None:
    order = Order("ONE", 9000, "K1", heel_kg=0)
    plant.change([_quantity(plant, "N32", 14000)], "little is left")
    seen = propose(plant, order)
    assert sum_of(seen) == 9000
    with open_plant(path, who="berta") as other:
        take(other, replace(order, vessel="K2", amount=3000))
        take(other, replace(order, vessel="K2", amount=3000), sure=True)
    with pytest.raises(NoBlend):  # 14,000 less bottoms of 500 and 6,000 promised leave 7,500
        orders.taken(plant, order, seen=seen)
    made = take(plant, replace(order, amount=7400))
    assert sum(c.plan_kg for c in made.charges) == 7400
    assert plant.stock("N32").reserved_kg == pytest.approx(13400)


def _quantity(plant: Plant, stock: str, kg: float) -> object:
    from blendtui.store.edits import stock_cell

    return stock_cell(plant.stock(stock), "on_hand_kg", kg)


def test_an_order_is_worked_out_anew_where_others_changed_what_it_rests_on(plant: Plant) -> None:
    from blendtui.store.edits import stock_cell

    order = Order("P46", 10000, "K1")
    seen = propose(plant, order)
    plant.change([stock_cell(plant.stock("N100"), "kv40", 104.0)], "tested")
    made, used = orders.taken(plant, order, seen=seen)
    assert used is not seen
    assert batches.in_vessel(made, batches.by_code(plant))[0].kv40 == 104.0  # the heel is of that stock too
    # What does not matter to it does not make it anew.
    orders.cancel(plant, made.name, why="once more")
    seen = propose(plant, order)
    plant.change([stock_cell(plant.stock("RW"), "kv40", 45.0)], "tested")
    assert orders.taken(plant, order, seen=seen)[1] is seen


def test_a_vessel_that_holds_an_open_batch_is_questioned(plant: Plant) -> None:
    take(plant, Order("P46", 10000, "K1"))
    with pytest.raises(Questioned, match=r"K1 holds B-0001 \(P46, planned, ordered by anna\), which is open"):
        take(plant, Order("ONE", 8000, "K1"))
    assert take(plant, Order("ONE", 8000, "K1"), sure=True).name == "B-0002"
    with pytest.raises(Questioned, match="a mixing temperature of 120 °C is far from the usual"):
        take(plant, Order("ONE", 2500, "K2", mix_c=120))
    with pytest.raises(DeskError, match="there is a batch b-0001 already"):
        take(plant, Order("ONE", 3000, "K2", name="b-0001"))


def test_a_clock_set_back_is_questioned(plant: Plant, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(Plant, "clock_back", lambda self: 7200.0)
    with pytest.raises(Questioned, match="the clock stands 7,200 s before the last entry of the record"):
        take(plant, Order("ONE", 2500, "K2"))


def test_undo_takes_the_whole_order_back(plant: Plant) -> None:
    take(plant, Order("P46", 10000, "K1", flush=(200, "N32", True)))
    plant.undo()
    assert not plant.batches()
    assert plant.stock("N32").on_hand_kg == 60000
    assert plant.stock("PK").reserved_kg == 0.0
    plant.redo()
    assert plant.batch("B-0001").contents[1].what == "flush"
    assert plant.stock("N32").on_hand_kg == 59800
    assert plant.verify() is None


# Once more

def test_a_new_design_takes_todays_product_and_tanks_and_keeps_what_was_ordered(plant: Plant) -> None:
    made = take(plant, Order("P46", 10000, "K1", limits={"vi": ("92", "")}, customer="Orlin", most_fill_pct=85))
    assert formulas.changes_since(plant, made) == ()
    targets.set_limit(plant, "P46", "flash", "200", "")
    targets.set_rule(plant, "P46", "RW", "2", "5")
    assert formulas.changes_since(plant, made) == ("limit on flash point", "share of RW")
    again = orders.redesign(plant, made.name, by="Berta", why="returns have to go")
    assert plant.batch(made.name) == again
    assert formulas.changes_since(plant, again) == ()
    assert sum(c.plan_kg for c in again.charges if c.stock == "RW") <= 515  # 5 % of what the vessel holds, to a step
    assert sum(c.plan_kg for c in again.charges if c.stock == "RW") >= 200
    assert again.contents == made.contents
    assert formulas.how_of(again)["most_fill_pct"] == 85
    assert [x.property for x in formulas.customer_limits_of(again)] == ["vi"]
    assert plant.stock("RW").reserved_kg > 0.0
    assert plant.journal(1)[0].what == f"{made.name} designed anew by Berta"
    plant.undo()
    assert plant.batch(made.name) == made
    assert plant.stock("RW").reserved_kg == 0.0
    charged(plant, 1, name=made.name)
    with pytest.raises(DeskError, match="blendtui batch replan B-0001"):
        orders.redesign(plant, made.name)
    with pytest.raises(Questioned, match="kg are charged into B-0001 already"):
        orders.cancel(plant, made.name, why="no more")
    assert orders.cancel(plant, made.name, why="no more", sure=True).head.state == CANCELLED


def test_a_new_design_may_use_what_it_had_promised_itself(plant: Plant) -> None:
    plant.change([_quantity(plant, "N32", 9600)], "little is left")
    made = take(plant, Order("ONE", 9000, "K1", heel_kg=0))
    again = orders.redesign(plant, made.name)
    assert [c.plan_kg for c in again.charges] == [c.plan_kg for c in made.charges]


def test_values_that_are_old_or_not_of_the_lot_are_remarked(plant: Plant) -> None:
    said = " ".join(propose(plant, Order("P46", 10000, "K1")).remarks)
    assert "AF: no date of its test is known" in said
    assert "PK: its values are of a certificate, not its lot's own test" in said
