"""The stock ledger: what a receipt does to quantity, lots and values, tests, dips, and the book they add up to."""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from blendtui.desk import ledger, stocks
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.desk.topping_up import parts_after, topped_up
from blendtui.store import edits
from blendtui.store.errors import NoSuchRow
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from solver.errors import ScaleError
from solver.laws import predict
from solver.recipe import evaluate
from solver.stocks import Stock, StockTable
from tests.desk.tank_farm import farm, order

SOME = {"kv40": "30.5", "kv100": "5.25", "density15": "870.5"}
FULL = {"kv40": "31", "kv100": "5.3", "density15": "871", "flash": "210", "pour": "-12", "sulfur": "0.42"}


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with open_plant(farm(tmp_path), who="anna") as opened:
        yield opened


def refutas(*parts: tuple[float, float]) -> float:
    """KV of mass fractions and KVs by hand (R: design.md): V = 14.534 ln ln(v + 0.8) + 10.975 mixes by mass."""
    mixed = sum(x * math.log(math.log(v + 0.8)) for x, v in parts)
    return math.exp(math.exp(mixed)) - 0.8


# Receipts

def test_a_top_up_mixes_by_the_laws_of_a_blend(plant: Plant) -> None:
    before = plant.stock("LN")
    done = ledger.receive(plant, "LN", "10 t", "L1", cells=FULL, certificate="C-77", by="bert")
    after = plant.stock("LN")
    came = Stock("came", kv40=31.0, kv100=5.3, density15=871.0, values={"flash": 210.0, "pour": -12.0, "sulfur": 0.42})
    mixed = evaluate([before, came], {"LN": 0.75, "came": 0.25}).predicted
    assert after.on_hand_kg == 40000.0
    assert (after.kv40, after.kv100) == pytest.approx((mixed["kv40"], mixed["kv100"]), rel=1e-12)
    assert after.kv40 == pytest.approx(refutas((0.75, 30.0), (0.25, 31.0)), rel=1e-9)
    assert after.density15 == pytest.approx(40000.0 / (30000.0 / 870.0 + 10000.0 / 871.0), rel=1e-12)
    assert after.values["sulfur"] == pytest.approx(0.75 * 0.4 + 0.25 * 0.42)
    assert after.values["flash"] == pytest.approx(mixed["flash"])
    assert 210.0 < after.values["flash"] < 214.0
    assert (after.source, after.tested_on) == ("computed", "")
    assert plant.tank_lots("LN") == {"before": 0.75, "L1": 0.25}
    (lot,) = plant.lots("LN")
    assert (lot.kg, lot.certificate, lot.source, lot.by, lot.cells["kv40"]) == (
        10000.0, "C-77", "certificate", "bert", 31.0)
    assert done.words == ("10000 kg of lot L1 received; the book of LN says 40000 kg",
                          "it holds what was there before 75.00 %, lot L1 25.00 %",
                          "KV40 30.00 → 30.25 mm²/s, KV100 5.200 → 5.225 mm²/s, computed until the tank is tested")
    assert (entry := plant.journal(1)[0]).what == "LN received 10000 kg, lot L1 (by bert)"
    assert len([c for c in entry.changes if c.table == "lot"]) == 1
    assert plant.verify() is None
    plant.undo()
    assert (plant.stock("LN"), plant.tank_lots("LN"), plant.lots("LN")) == (before, {}, [])


@pytest.mark.parametrize("law", ["walther-mass", "walther-volume", "wright-mass"])
def test_a_top_up_by_another_law(plant: Plant, law: str) -> None:
    before = plant.stock("LN")
    ledger.receive(plant, "LN", 30000.0, "L1", cells={**FULL, "kv40": 32.0}, law=law)
    came = Stock("came", kv40=32.0, kv100=5.3, density15=871.0)
    both = predict(law, StockTable([before, came]), [0.5, 0.5])
    after = plant.stock("LN")
    assert (after.kv40, after.kv100) == pytest.approx(tuple(both), rel=1e-12)


def test_what_only_one_of_the_two_has_is_unknown_afterwards_and_said(plant: Plant) -> None:
    with pytest.raises(Questioned) as asked:
        ledger.receive(plant, "LN", 5000.0, "L1", cells=SOME)
    assert str(asked.value) == ("LN: flash point would be unknown, and P46 has a limit on it: type what the "
                                "certificate says, or have the tank's own value kept")
    assert plant.stock("LN").on_hand_kg == 30000.0
    done = ledger.receive(plant, "LN", 5000.0, "L1", cells=SOME, sure=True)
    assert done.lost == ("flash", "pour", "sulfur")
    assert not plant.stock("LN").values
    assert done.words[-1] == "no longer known, for tank or delivery has no value: flash point, pour point, sulphur"


def test_a_value_by_volume_is_lost_with_the_density(plant: Plant) -> None:
    without = {code: value for code, value in FULL.items() if code != "density15"}
    done = ledger.receive(plant, "LN", 5000.0, "L1", cells=without, sure=True)
    assert done.lost == ("density15", "flash", "pour")
    assert plant.stock("LN").values == {"sulfur": pytest.approx((30.0 * 0.4 + 5.0 * 0.42) / 35.0)}


def test_the_tanks_own_values_are_kept_where_that_is_said(plant: Plant) -> None:
    done = ledger.receive(plant, "LN", 10000.0, "L1", cells={"kv40": "31", "kv100": "5.3"}, keep=True)
    after = plant.stock("LN")
    assert (after.values["flash"], after.values["sulfur"], after.density15) == pytest.approx((214.0, 0.4, 870.0))
    assert after.kv40 == pytest.approx(refutas((0.75, 30.0), (0.25, 31.0)), rel=1e-9)
    assert done.lost == ()
    assert done.words[-1] == "for what the papers do not say the tank's own values were taken"
    assert plant.lots("LN")[0].cells == {"kv40": 31.0, "kv100": 5.3}


def test_an_empty_tank_takes_the_deliverys_values(plant: Plant) -> None:
    ledger.receive(plant, "EX", 8000.0, "L1", cells={"kv40": 98, "kv100": 10.9, "flash": "482 F"}, on="2026-03-04")
    found = plant.stock("EX")
    assert (found.kv40, found.kv100, found.on_hand_kg) == (98.0, 10.9, 8000.0)
    assert (found.source, found.tested_on) == ("certificate", "2026-03-04")
    assert found.values["flash"] == pytest.approx(250.0)
    assert plant.tank_lots("EX") == {"L1": 1.0}


def test_neat_and_blending_viscosities_mix_each_for_itself(plant: Plant) -> None:
    given = {"kv40": 950, "kv100": 99, "blend_kv40": 2300, "blend_kv100": 320, "density15": 886, "sulfur": 0.1}
    before = plant.stock("VM")
    done = ledger.receive(plant, "VM", 8000.0, "L1", cells=given)
    after = plant.stock("VM")
    for cold, hot, old, new in (("kv40", "kv100", (900.0, 95.0), (950.0, 99.0)),
                                ("blend_kv40", "blend_kv100", (2200.0, 310.0), (2300.0, 320.0))):
        for cell, one, other in zip((cold, hot), old, new, strict=True):
            assert getattr(after, cell) == pytest.approx(refutas((0.5, one), (0.5, other)), rel=1e-9)
    assert done.lost == ()
    assert before.blend_kv40 < after.blend_kv40 < 2300.0


def test_blending_viscosities_that_no_paper_gives_stay(plant: Plant) -> None:
    ledger.receive(plant, "VM", 8000.0, "L1", cells={"kv40": 950, "kv100": 99, "density15": 886, "sulfur": 0.1})
    after = plant.stock("VM")
    assert (after.blend_kv40, after.blend_kv100) == (2200.0, 310.0)
    assert 900.0 < after.kv40 < 950.0


def test_a_viscosity_of_which_half_is_unknown_is_not_mixed(plant: Plant) -> None:
    tank = Stock("t", kind="additive", kv40=30.0, on_hand_kg=100.0)
    lone = topped_up(tank, Stock("t", kind="additive", kv40=32.0, kv100=5.4), 100.0, source="own", tested_on="")
    assert (lone.stock.kv40, lone.stock.kv100, lone.lost) == (None, None, ("kv40", "kv100"))
    came = Stock("t", kind="additive", blend_kv40=90.0, blend_kv100=10.0)
    assert topped_up(tank, came, 100.0, source="own", tested_on="").stock.blending_kv is None


def test_an_additive_without_viscosity(plant: Plant) -> None:
    done = ledger.receive(plant, "PK", "5 t", "7781", cells={"density15": "0.97 kg/L", "flash": 176, "sulfur": "3.2 %"})
    found = plant.stock("PK")
    assert (found.kv40, found.kv100) == (None, None)
    assert found.values["sulfur"] == pytest.approx(3.1)
    assert found.source == "computed"
    assert done.lost == ()


def test_a_viscosity_that_would_be_lost_is_asked_for(plant: Plant) -> None:
    oil = plant.stock("PK")
    plant.change([edits.stock_cell(oil, "kv40", 120.0), edits.stock_cell(oil, "kv100", 11.0)], "typed")
    with pytest.raises(Questioned, match="PK: its viscosity would be unknown, and no recipe could use it: type what"):
        ledger.receive(plant, "PK", "5 t", "7781", cells={"density15": "0.97 kg/L", "flash": 176, "sulfur": 3.2})


@given(st.lists(st.tuples(st.floats(0.001, 1e5), st.floats(0.0, 1.0)), min_size=1, max_size=30))
def test_parts_of_a_tank_are_those_of_a_stirred_vessel(steps: list[tuple[float, float]]) -> None:
    parts: dict[str, float] = {}
    masses, book = {"before": 500.0}, 500.0
    for n, (kg, drawn) in enumerate(steps):
        masses = {lot: mass * (1.0 - drawn) for lot, mass in masses.items()}  # drawn as it is mixed
        book = sum(masses.values())
        parts = parts_after(parts, book, f"L{n}", kg)
        masses[f"L{n}"] = kg
        book += kg
    assert sum(parts.values()) == pytest.approx(1.0)
    for lot, mass in masses.items():
        assert parts.get(lot, 0.0) == pytest.approx(mass / book, abs=1e-9)


@given(st.floats(1.0, 1e6), st.floats(1.0, 1e6))
def test_a_mixture_lies_between_the_two(there: float, kg: float) -> None:
    tank = Stock("t", kv40=30.0, kv100=5.2, density15=870.0, on_hand_kg=there, values={"flash": 214.0})
    came = Stock("t", kv40=32.0, kv100=5.4, density15=874.0, values={"flash": 206.0})
    new = topped_up(tank, came, kg, source="certificate", tested_on="").stock
    assert 30.0 <= new.kv40 <= 32.0
    assert 870.0 <= new.density15 <= 874.0
    assert 205.999 <= new.values["flash"] <= 214.001


def test_litres_are_weighed_by_the_deliverys_density(plant: Plant) -> None:
    ledger.receive(plant, "LN", "10000 L", "L1", cells=FULL)
    assert plant.lots("LN")[0].kg == 8710.0
    ledger.receive(plant, "LM", "10000 L", "L1", cells={"kv40": 33.5, "kv100": 5.5}, keep=True)
    assert plant.lots("LM")[0].kg == 8720.0


@pytest.mark.parametrize(("stock", "kg", "lot", "said", "words"), [
    ("LN", 0.0, "L1", FULL, "LN: a delivery of 0 kg is not above 0; type what came"),
    ("LN", -5.0, "L1", FULL, "LN: a delivery of -5 kg is not above 0; type what came"),
    ("LN", float("nan"), "L1", FULL, "nan is no mass; type one such as 24000, 24 t or 12000 L"),
    ("LN", 2e9, "L1", FULL, "2000000000.0 is more than 1e+09 kg; check the unit"),
    ("LN", 100.0, " ", FULL, "LN: a delivery needs its lot; type the one on its papers"),
    ("LN", 100.0, "L\x1b[2J", FULL, "lot: 'L␛[2J' holds a control character: escape (U+001B); type the text again"),
    ("LN", 100.0, "before", FULL,
     "LN: 'before' cannot be a lot's name; it has up to 60 characters and is not 'before', which stands for oil of "
     "unknown lots"),
    ("LN", 100.0, "L1", {"kv40": "31"},
     "LN, lot L1: a base stock needs both KV40 and KV100; kv100 is empty; type it off the certificate, or have the "
     "tank's own values kept for it"),
    ("LN", 100.0, "L1", {**FULL, "kv40": "5.3", "kv100": "31"},
     "LN, lot L1: kv100 31 is not below kv40 5.3: oil thins as it warms; are the two swapped?"),
    ("LN", 100.0, "L1", {**FULL, "colour": "2"},
     "'colour' is no value of an oil; usable are kv40, kv100, density15, blend_kv40, blend_kv100, flash, pour, sulfur "
     "and the other properties of the registry"),
    ("UN", 100.0, "L1", FULL,
     "UN: its book quantity is unknown, so what it holds after a delivery is too; dip the tank first and set the book "
     "to the dip"),
])
def test_what_cannot_be_received(plant: Plant, stock: str, kg: float, lot: str, said: dict[str, str],
                                 words: str) -> None:
    before = plant.revision()
    with pytest.raises(DeskError) as refused:
        ledger.receive(plant, stock, kg, lot, cells=said, sure=True)
    assert str(refused.value) == words
    assert plant.revision() == before


def test_a_law_by_volume_needs_both_densities(plant: Plant) -> None:
    without = {code: value for code, value in FULL.items() if code != "density15"}
    with pytest.raises(DeskError, match="LN: the law walther-volume needs the density of the tank and of the delivery"):
        ledger.receive(plant, "LN", 100.0, "L1", cells=without, law="walther-volume", sure=True)


def test_unknown_and_retired_stocks(plant: Plant) -> None:
    with pytest.raises(NoSuchRow, match="no stock 'NO'; the plant has LN, LM"):
        ledger.receive(plant, "NO", 100.0, "L1", cells=FULL)
    stocks.retire_stock(plant, "OLD")
    with pytest.raises(DeskError, match="OLD is retired; take it into use again, or name another stock"):
        ledger.receive(plant, "OLD", 100.0, "L1", cells=FULL)
    with pytest.raises(ScaleError):
        ledger.receive(plant, "LN", "24 barrels", "L1", cells=FULL)


def test_a_lot_comes_once(plant: Plant) -> None:
    ledger.receive(plant, "LN", 100.0, "L1", cells=FULL, on="2026-03-04 08:30")
    with pytest.raises(DeskError, match="LN: lot L1 was received already, 100 kg on 2026-03-04 08:30; a second"):
        ledger.receive(plant, "LN", 100.0, "L1", cells=FULL, sure=True)
    ledger.receive(plant, "LM", 100.0, "L1", cells={**FULL, "kv40": 33})  # another stock may have it


@pytest.mark.parametrize(("stock", "kg", "said", "words"), [
    ("LN", 300001.0, {}, "300001 kg is more than ten times the 30000 kg that it ever held; is the unit right?"),
    ("EX", 2e6, {}, "2000000 kg at once; is the unit right?"),
    ("LN", 9000.0, {"kv40": "32.9", "kv100": "5.5"},
     "KV40 32.90 of the delivery is 10% above the tank's 30.00, and lots of one oil differ by up to 8%: is it this "
     "oil? LM would fit"),
    ("HN", 9000.0, {"kv40": "87", "kv100": "9.9"},
     "KV40 87.00 of the delivery is 9% below the tank's 96.00, and lots of one oil differ by up to 8%: is it this "
     "oil?"),
    ("LN", 9000.0, {"flash": "410"}, "flash point 410 °C is unusual (120 to 310); was it °F? that is 210 °C"),
    ("LN", 9000.0, {"on": "2031-01-01"}, "2031-01-01 00:00 is still to come; is the date right?"),
])
def test_what_is_odd_is_questioned_and_goes_through_when_it_is_so(plant: Plant, stock: str, kg: float,
                                                                  said: dict[str, str], words: str) -> None:
    on = said.get("on", "")
    cells = {**FULL, **({"kv40": "96", "kv100": "10.7"} if stock == "HN" else {}), **said}
    cells.pop("on", None)
    before = plant.stock(stock).on_hand_kg or 0.0
    with pytest.raises(Questioned) as asked:
        ledger.receive(plant, stock, kg, "L1", cells=cells, on=on)
    assert words in str(asked.value)
    assert plant.stock(stock).on_hand_kg == before
    ledger.receive(plant, stock, kg, "L1", cells=cells, on=on, sure=True)
    assert plant.stock(stock).on_hand_kg == before + kg


def test_a_lot_eight_per_cent_off_is_no_question(plant: Plant) -> None:
    ledger.receive(plant, "LN", 9000.0, "L1", cells={**FULL, "kv40": "32.4"})
    assert plant.stock("LN").source == "computed"


def test_a_date_before_the_last_receipt_is_questioned(plant: Plant) -> None:
    ledger.receive(plant, "LN", 100.0, "L1", cells=FULL, on="2026-03-04")
    with pytest.raises(Questioned, match="2026-03-01 00:00 is before the last receipt, 2026-03-04 00:00; is the"):
        ledger.receive(plant, "LN", 100.0, "L2", cells=FULL, on="2026-03-01")
    ledger.receive(plant, "LN", 100.0, "L2", cells=FULL, on="2026-03-01", sure=True)
    assert [x.lot for x in plant.lots("LN")] == ["L2", "L1"]


# The tank's own test

def test_a_test_ends_what_was_computed(plant: Plant) -> None:
    ledger.receive(plant, "LN", 10000.0, "L1", cells=FULL)
    results = {"kv40": "30.4", "kv100": "5.24"}
    done = ledger.test(plant, "LN", results, on="2031-01-01", method="D445", by="dora", sure=True)
    found = plant.stock("LN")
    assert (found.kv40, found.kv100, found.source, found.tested_on) == (30.4, 5.24, "own", "2031-01-01")
    assert done.words == ("LN tested: kv40 30.40, computed 30.25; kv100 5.240, computed 5.225",
                          "not tested, and so still computed: density15, flash, pour, sulfur")
    assert plant.journal(1)[0].what.startswith("LN tested D445: kv40 30.246")
    assert plant.journal(1)[0].what.endswith("(by dora)")


def test_a_test_of_flash_alone_leaves_the_source(plant: Plant) -> None:
    ledger.receive(plant, "LN", 10000.0, "L1", cells=FULL)
    done = ledger.test(plant, "LN", {"flash": "212"})
    assert (plant.stock("LN").source, plant.stock("LN").values["flash"]) == ("computed", 212.0)
    assert done.words[-1] == "its values stay computed until KV40 and KV100 are tested together"


def test_tests_that_are_refused_or_questioned(plant: Plant) -> None:
    ledger.receive(plant, "LN", 10000.0, "L1", cells=FULL)
    for values, words in (({}, "LN: no result was given; type one such as kv40=30.4"),
                          ({"kv40": "5.2", "kv100": "30"}, "LN: kv100 30 is not below kv40 5.2: oil thins as it warms"),
                          ({"density15": "0.87"}, "LN: density 0.87 looks like kg/L; in kg/m³ it is 870")):
        with pytest.raises(DeskError) as refused:
            ledger.test(plant, "LN", values, sure=True)
        assert words in str(refused.value)
    for values, on, words in (({"kv40": "35", "kv100": "5.7"}, "", "KV40 35.00 is 16% off the tank's 30.25; is it the"),
                              ({"flash": "212"}, "2026-01-01", "a test of 2026-01-01 is older than the last receipt"),
                              ({"flash": "212"}, "2031-01-01", "2031-01-01 is still to come; is the date right?")):
        with pytest.raises(Questioned) as asked:
            ledger.test(plant, "LN", values, on=on)
        assert words in str(asked.value)
    with pytest.raises(DeskError, match="is not a date; write year-month-day"):
        ledger.test(plant, "LN", {"flash": "212"}, on="4.3.2026")


# Dips and the book

def test_a_dip_against_the_book(plant: Plant) -> None:
    near = ledger.dip(plant, "LN", 30149.0, by="emil")
    assert near.words == ("dip 30149 kg, book 30000 kg: they agree within 0.5 %",)
    far = ledger.dip(plant, "LN", "29.7 t")
    assert far.words[0] == "dip 29700 kg, book 30000 kg: 300 kg (1.00 %) less than the book, outside 0.5 %"
    assert far.differs_pct == pytest.approx(-1.0)
    assert plant.stock("LN").on_hand_kg == 30000.0
    assert [(d.line, d.dip_kg, d.book_kg, d.corrected, d.by) for d in plant.dips("LN")] == [
        (1, 30149.0, 30000.0, 0, "emil"), (2, 29700.0, 30000.0, 0, "anna")]


def test_litres_of_a_dip_are_litres_at_the_tanks_temperature(plant: Plant) -> None:
    assert ledger.dip(plant, "LN", "34000 L").dip.dip_kg == pytest.approx(29580.0)
    # Table 54D of D1250 (M): α = 0.6278/ρ, VCF = exp(−α Δt (1 + 0.8 α Δt)); 45 °C above 15 °C.
    step = 45.0 * 0.6278 / 870.0
    hot = 870.0 * math.exp(-step * (1.0 + 0.8 * step))
    assert ledger.dip(plant, "LN", "34000 L", celsius=60.0).dip.dip_kg == pytest.approx(34.0 * hot, abs=1e-5)


def test_the_book_is_set_to_a_dip_with_its_reason(plant: Plant) -> None:
    with pytest.raises(DeskError, match="LN: say why the book is set to the dip: it stands in the record"):
        ledger.dip(plant, "LN", 29700.0, correct=True)
    ledger.dip(plant, "LN", 29700.0, correct=True, why="a gasket leaked")
    assert plant.stock("LN").on_hand_kg == 29700.0
    assert plant.movements("LN")[-1].reason == "LN book set to the dip, 29700 kg: a gasket leaked"
    assert plant.journal(1)[0].why == "a gasket leaked"
    done = ledger.dip(plant, "UN", 5000.0, correct=True, why="first dip")
    assert plant.stock("UN").on_hand_kg == 5000.0
    assert done.words == ("dip 5000 kg; the book was unknown", "the book is set to 5000 kg: first dip")


def test_dips_that_cannot_be(plant: Plant) -> None:
    with pytest.raises(DeskError, match="LN: a dip of -1 kg is below 0; type what the tank holds"):
        ledger.dip(plant, "LN", -1.0)
    with pytest.raises(Questioned, match="3000000 kg is more than ten times the 30000 kg that it ever held"):
        ledger.dip(plant, "LN", 3e6)
    assert not plant.dips("LN")


def test_the_book_is_the_sum_of_its_movements(plant: Plant) -> None:
    ledger.receive(plant, "LN", 1000.1, "L1", cells=FULL, by="bert")
    order(plant, "B-1", {"LN": 2500.7, "HN": 100.0})
    ledger.dip(plant, "LN", 28400.0, correct=True, why="a leak")
    ledger.receive(plant, "LN", 5.000001, "L2", cells=FULL)
    plant.undo()
    found = ledger.book(plant, "LN")
    assert [(x.kg, x.balance_kg) for x in found.lines] == [
        (30000.0, 30000.0), (1000.1, 31000.1), (-2500.7, 28499.4), (-99.4, 28400.0), (5.000001, 28405.000001),
        (-5.000001, 28400.0)]
    assert found.balance_kg == plant.stock("LN").on_hand_kg == 28400.0
    assert [x.words for x in found.lines][1:4] == ["LN received 1000 kg, lot L1 (by bert)", "B-1 line 1 charged",
                                                   "LN book set to the dip, 28400 kg: a leak"]
    assert {x.who for x in found.lines} == {"anna"}
    assert found.parts == {"before": pytest.approx(30000.0 / 31000.1), "L1": pytest.approx(1000.1 / 31000.1)}
    assert [x.lot for x in found.lots] == ["L1"]
    assert found.words[0] == "the book says 28400 kg; 1000 kg bottoms, 0 kg promised, 27400 kg free"
    assert "dip 28400 kg, book 28499 kg: they agree within 0.5 %, and the book was set to it" in found.words[1]


def test_the_book_of_a_stock_with_nothing_known(plant: Plant) -> None:
    found = ledger.book(plant, "UN")
    assert (found.lines, found.balance_kg) == ((), None)
    assert found.words == ("the book quantity is unknown; dip the tank and set the book to the dip",
                           "no dip was ever recorded")
    with pytest.raises(NoSuchRow):
        ledger.book(plant, "NO")
