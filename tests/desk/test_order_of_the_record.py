"""What came after what: no release, no certificate and no mass by a step that another one has overtaken."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from datetime import datetime, timedelta
from pathlib import Path

import pytest

from blendtui.desk import batch_doubts, batch_lab, batches, certificate, charging, ledger, release, rework, trimming
from blendtui.desk.batch_outlook import contents
from blendtui.desk.batches import Questioned
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import open_plant
from blendtui.desk.stocks import edit_cell
from blendtui.store.batch_records import FLUSH, PLANNED, Content
from blendtui.store.database import now
from blendtui.store.errors import PlantError
from blendtui.store.plant import Plant
from tests.desk.made_batches import all_charged, drawn, ordered, plant_file, sampled

STOCKS = """stock,oil,kind,on_hand_kg,price_per_t,density15,kv40,kv100,flash,package_kg,blend_kv40,blend_kv100
A,LIGHT,base,90000,800,868,30.6,5.23,214,,,
B,,base,90000,1100,897,490,32,300,,,
VM,,vi_improver,0,2100,876,7150,705,198,180,60000,26000
"""
PRODUCTS = "product,name,grade\nP100,Oil 100,ISO VG 100\n"
LIMITS = "product,property,low,high\nP100,vi,90,\nP100,flash,205,\n"
VESSELS = "vessel,capacity_l\nK1,24000\n"
GOOD = {"kv40": "100.2", "kv100": "11.4", "flash": "240"}
B1 = "B-0001"


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    path = plant_file(tmp_path / "c", stocks=STOCKS, products=PRODUCTS, limits=LIMITS, vessels=VESSELS)
    with open_plant(path, who="erik") as opened:
        ordered(opened, "P100", {"A": 6000.0, "B": 4000.0})
        yield opened


def put_in(plant: Plant, *lines: int) -> None:
    """Charge lines as planned, with their second check."""
    for line in lines:
        row = plant.batch(B1).charges[line - 1]
        charging.charge(plant, B1, line, row.plan_kg, lot="L", by="anna", sure=True)
        charging.check(plant, B1, line, by="bob")


def laboratory(plant: Plant, values: dict[str, str], **said: object) -> None:
    batch_lab.results(plant, B1, None, values, sure=True, **said)


def lacks(plant: Plant) -> tuple[str, ...]:
    return release.missing(plant, plant.batch(B1))


AGAIN = "what the results of sample 1 say has changed since the decision on it: decide again"


# What overtakes a decision

def test_a_result_withdrawn_after_a_decision_with_a_reason(plant):
    put_in(plant, 1, 2)
    batch_lab.sample(plant, B1)
    laboratory(plant, GOOD)
    laboratory(plant, {"kv40": "89.0"})
    batch_lab.decide(plant, B1, decision="release", why="the second was another oil")
    assert lacks(plant) == ()
    batch_lab.withdraw(plant, B1, 1, 1, why="the first was another oil")
    assert lacks(plant) == (AGAIN,)
    with pytest.raises(DeskError, match=AGAIN):
        release.release(plant, B1)


def test_a_result_dated_before_a_decision_and_entered_after_it(plant):
    put_in(plant, 1, 2)
    batch_lab.sample(plant, B1)
    laboratory(plant, GOOD)
    batch_lab.decide(plant, B1, why="as it is")
    laboratory(plant, {"kv40": "85.0"}, at=f"{datetime.now():%Y-%m-%d %H:%M}")
    assert AGAIN in lacks(plant)
    batch_lab.decide(plant, B1, decision="release", why="the customer takes it so")
    assert lacks(plant) == ()


def test_a_decision_on_a_result_whose_clock_was_ahead(plant):
    """It is questioned once; the decision then stands after the result and not before it for ever."""
    put_in(plant, 1, 2)
    batch_lab.sample(plant, B1)
    laboratory(plant, GOOD, at=f"{datetime.now() + timedelta(seconds=80):%Y-%m-%d %H:%M:%S}")
    with pytest.raises(Questioned, match="was the clock set back"):
        batch_lab.decide(plant, B1)
    batch_lab.decide(plant, B1, sure=True)
    assert lacks(plant) == ()


# What overtakes a sample

def test_a_charge_in_the_minute_of_a_sample(plant):
    put_in(plant, 1)
    batch_lab.sample(plant, B1, sure=True)
    put_in(plant, 2)
    laboratory(plant, GOOD)
    assert lacks(plant) == ("no sample was drawn after the last charge",)
    batch_lab.sample(plant, B1)
    laboratory(plant, GOOD)
    batch_lab.decide(plant, B1)
    assert lacks(plant) == ()


def test_a_sample_typed_to_the_minute_may_be_of_any_moment_of_it(plant):
    put_in(plant, 1, 2)
    batch_lab.sample(plant, B1, taken=f"{datetime.now():%Y-%m-%d %H:%M}", sure=True)
    laboratory(plant, GOOD)
    batch_lab.decide(plant, B1)
    assert lacks(plant) == ()


def clock_back(monkeypatch: pytest.MonkeyPatch, seconds: float) -> None:
    """The clock that batches read, so much behind."""
    def behind() -> str:
        real = datetime.fromisoformat(now().replace("Z", "+00:00")) - timedelta(seconds=seconds)
        return real.isoformat(timespec="milliseconds").replace("+00:00", "Z")

    monkeypatch.setattr(batch_doubts, "now", behind)


def test_a_charge_after_a_sample_stays_after_it_whatever_the_clock_says(plant, monkeypatch):
    put_in(plant, 1)
    drawn_at = batch_lab.sample(plant, B1, sure=True).taken_at
    clock_back(monkeypatch, 7200.0)
    with pytest.raises(Questioned, match="was the clock set back"):
        charging.charge(plant, B1, 2, 4000.0, lot="L", by="anna")
    charging.charge(plant, B1, 2, 4000.0, lot="L", by="anna", sure=True)
    assert plant.batch(B1).charges[1].at >= drawn_at
    for shift in (7200.0, 0.0):
        clock_back(monkeypatch, shift)
        assert batches.held(plant.batch(B1))[-1][0].stock == "B"
    assert plant.verify() is None


# What only an older sample was tested for

def of_two_samples(plant: Plant) -> None:
    put_in(plant, 1, 2)
    batch_lab.sample(plant, B1)
    laboratory(plant, {"flash": "241"})
    batch_lab.sample(plant, B1)
    laboratory(plant, {"kv40": GOOD["kv40"], "kv100": GOOD["kv100"]})


def test_it_stands_on_the_certificate_with_its_sample(plant):
    of_two_samples(plant)
    batch_lab.decide(plant, B1)
    release.release(plant, B1)
    made = certificate.certificate(plant, B1)
    assert [(x.property, x.shown) for x in made.lines] == [("kv40", "100.2"), ("kv100", "11.40"), ("vi", "100"),
                                                           ("flash", "241")]
    assert [text.partition(",")[0] for text in made.samples] == ["2", "1"]


def test_a_trim_starts_from_it(plant):
    of_two_samples(plant)
    found = trimming.propose(plant, B1)
    assert found.batch.values["flash"] == 241.0
    assert {e.property: e.measured for e in found.effects}["flash"] is True
    assert not any(words.startswith("flash") for words in found.words)


# Masses

def test_what_is_taken_back_of_an_empty_vessel_is_of_the_same_oil(plant):
    all_charged(plant)
    drawn(plant, "packed", 10000.0, hour=10)
    drawn(plant, "packed", -200.0, hour=11)
    there = {thing.stock: kg for thing, kg in batches.held(plant.batch(B1))}
    assert there == pytest.approx({"A": 120.0, "B": 80.0})


def test_what_is_drawn_off_in_a_trim_takes_its_part_of_the_trim(plant):
    all_charged(plant)
    sampled(plant, 1, {"kv40": 88.0, "kv100": 10.4, "flash": 240.0}, hour=9, decision="trim")
    trimming.take(plant, B1, sure=True)
    (line,) = plant.batch(B1).to_charge
    charging.charge(plant, B1, line.line, line.plan_kg, lot="L", sure=True)
    made = plant.batch(B1)
    total = made.in_vessel_kg
    rework.leave(plant, B1, total / 2.0, "slops", sure=True)
    made = plant.batch(B1)
    left = {s.code: s.in_vessel_kg for s in contents(plant, made, batches.target_of(plant, made))}
    assert left == pytest.approx({batches.CODE: 5000.0, f"{line.stock} (charge {line.line})": line.plan_kg / 2.0})


def drums(plant: Plant) -> Callable[[], dict[str, float]]:
    """Two drums of two lots; what the store holds of each."""
    for lot in ("V1", "V2"):
        ledger.receive(plant, "VM", 180.0, lot, keep=True, sure=True)
    return lambda: plant.tank_lots("VM")


def test_a_drum_taken_back_into_an_empty_store_is_of_its_own_lot(plant):
    there = drums(plant)
    ordered(plant, "P100", {"VM": 180.0, "A": 5000.0}, name="B-0002")
    ordered(plant, "P100", {"VM": 180.0, "A": 5000.0}, name="B-0003")
    charging.charge(plant, "B-0002", 1, 180.0, lot="V1", sure=True)
    charging.charge(plant, "B-0003", 1, 180.0, lot="V2", sure=True)
    assert plant.stock("VM").on_hand_kg == 0.0
    charging.correct(plant, "B-0002", 1, 0.0, why="it stayed shut", sure=True)
    assert there() == pytest.approx({"V1": 1.0})


def test_the_papers_of_a_drum_say_how_it_blends(plant):
    ledger.receive(plant, "VM", 180.0, "V1", cells={"kv40": "7100", "kv100": "700", "blend_kv40": "60000",
                                                    "blend_kv100": "26000", "density15": "876"}, sure=True, keep=True)
    ledger.receive(plant, "VM", 180.0, "V2", cells={"kv40": "7300", "kv100": "720", "blend_kv40": "64000",
                                                    "blend_kv100": "27000", "density15": "877"}, sure=True, keep=True)
    ordered(plant, "P100", {"A": 5000.0, "VM": 180.0}, name="B-0002")
    cells = charging.charge(plant, "B-0002", 2, 180.0, lot="V2", sure=True).line.cells
    assert (cells["kv40"], cells["kv100"], cells["density15"]) == (64000.0, 27000.0, 877.0)
    assert not any(code.startswith("blend_") for code in cells)


def test_flush_oil_that_was_pumped_through_is_not_drawn_from_the_batch(plant):
    flush = Content("B-0002", 1, FLUSH, "A", 100.0, 0, batches.cells_of(plant.stock("A")), {"A": 1.0}, "stock")
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0}, name="B-0002", contents=(flush,))
    all_charged(plant, "B-0002")
    with pytest.raises(DeskError, match="its flush oil was pumped through and is no part of what K1 holds"):
        rework.leave(plant, "B-0002", 100.0, "flush", family="hyd", why="flushed", sure=True)
    assert plant.batch("B-0002").in_vessel_kg == 10000.0


def test_what_stays_of_an_open_batch_is_asked_about(plant):
    all_charged(plant)
    with pytest.raises(Questioned, match="is open and 9900 kg more are in K1"):
        rework.leave(plant, B1, 100.0, "left")
    rework.leave(plant, B1, 9900.0, "rework", family="hyd", why="wrong oil", sure=True)
    assert rework.leave(plant, B1, 100.0, "left").kg == 100.0


def test_less_charged_than_has_left_is_asked_about(plant):
    put_in(plant, 1)
    rework.leave(plant, B1, 5000.0, "slops", sure=True)
    with pytest.raises(Questioned, match="500 kg more are recorded to have left the vessel"):
        charging.correct(plant, B1, 1, 4500.0, why="read again", by="anna")
    assert plant.batch(B1).in_vessel_kg == 1000.0


def test_a_charge_is_taken_back_although_the_tank_is_short(plant):
    """A dip has left less than open batches take: a wrong entry can be mended all the same, and undone."""
    ordered(plant, "P100", {"A": 50000.0}, name="B-0002")
    charging.charge(plant, B1, 1, 6000.0, lot="L", sure=True)
    assert edit_cell(plant, "A", "on_hand_kg", "40000", True).status == "saved"
    charging.correct(plant, B1, 1, 0.0, why="the other vessel", sure=True)
    assert plant.batch(B1).charges[0].state == PLANNED
    assert plant.stock("A").on_hand_kg == 46000.0
    plant.undo()
    plant.redo()
    assert plant.verify() is None


def test_a_charge_taken_back_promises_nothing_that_another_has(plant):
    """All but a kilogram of its plan was freed by the false entry, and another batch took it."""
    charging.charge(plant, B1, 1, 1.0, lot="L", sure=True)
    free = plant.stock("A").available_kg
    ordered(plant, "P100", {"A": free}, name="B-0002")
    with pytest.raises(PlantError, match=r"A: 6,000\.0 kg are planned and 1\.0 kg are free; the rest is promised"):
        charging.correct(plant, B1, 1, 0.0, why="nothing went in", sure=True)


def test_a_forgotten_additive_is_remarked_before_a_release(tmp_path):
    """Both viscosities and the flash may be right without it."""
    path = plant_file(tmp_path / "d", stocks="stock,kind,on_hand_kg,price_per_t,density15,kv40,kv100\n"
                      "A,base,90000,800,868,100,11.2\nPK,additive,9000,3000,980,60,7.5\n",
                      products="product,grade,only_listed\nP100,ISO VG 100,yes\n",
                      shares="product,of,low_pct,high_pct\nP100,A,,\nP100,PK,0.85,0.85\n", vessels=VESSELS)
    with open_plant(path, who="erik") as plant:
        ordered(plant, "P100", {"A": 9915.0, "PK": 85.0}, tolerance=1.0)
        assert release.remarks(plant, plant.batch(B1)) == ()
        put_in(plant, 1)
        charging.miss(plant, B1, 2, why="drum not found")
        assert release.remarks(plant, plant.batch(B1)) == (
            "what was charged is not as the product says: PK 0 %, low 0.85 % (by 84.3 kg)",)


def test_a_charge_that_was_entered_anew_after_oil_had_left(plant):
    """What is in the vessel is what its parts add up to."""
    put_in(plant, 1)
    rework.leave(plant, B1, 25.0, "slops", sure=True)
    charging.correct(plant, B1, 1, 0.0, why="the wrong line", sure=True)
    charging.charge(plant, B1, 1, 6000.0, lot="L", sure=True)
    made = plant.batch(B1)
    assert made.in_vessel_kg == 5975.0
    assert [kg for _, kg in batches.held(made)] == pytest.approx([5975.0])


@pytest.mark.parametrize("again", ["jos\u00e9 m", "Jose\u0301 M.", " JOS\u00c9  m ", "J\uff4fs\u00e9 M"])
def test_a_name_spelt_another_way_is_no_second_person(plant, again):
    charging.charge(plant, B1, 1, 6000.0, lot="L", by="Jos\u00e9 M", sure=True)
    with pytest.raises(DeskError, match="the second check is by another person"):
        charging.check(plant, B1, 1, by=again)
    assert charging.check(plant, B1, 1, by="Jos\u00e9 N").checked_by == "Jos\u00e9 N"


def test_a_correction_with_the_lot_of_then_keeps_the_oil_of_then(plant):
    """The tank was topped up since: what was charged was not of the new lot."""
    ledger.receive(plant, "A", 90000.0, "L1", keep=True, sure=True)
    charging.charge(plant, B1, 1, 6000.0, lot="L1", sure=True)
    before = plant.batch(B1).charges[0]
    ledger.receive(plant, "A", 50000.0, "L2", cells={"kv40": "31.5", "kv100": "5.3", "density15": "869"}, keep=True,
                   sure=True)
    after = charging.correct(plant, B1, 1, 6010.0, lot="L1", why="read again", sure=True).line
    assert (after.actual_kg, after.lots, after.cells) == (6010.0, before.lots, before.cells)
    assert set(after.lots) == {"before", "L1"}


def test_a_drum_is_of_one_lot(plant):
    there = drums(plant)
    ordered(plant, "P100", {"A": 5000.0, "VM": 180.0}, name="B-0002")
    with pytest.raises(Questioned, match="there are V1 180 kg, V2 180 kg: of which lot was it"):
        charging.charge(plant, "B-0002", 2, 180.0)
    with pytest.raises(Questioned, match="180 kg of lot V2 are in VM, less than the 360 kg typed"):
        charging.charge(plant, "B-0002", 2, 360.0, lot="V2")
    assert charging.charge(plant, "B-0002", 2, 180.0, lot="V2").line.lots == {"V2": 1.0}
    assert there() == pytest.approx({"V1": 1.0})
    assert charging.correct(plant, "B-0002", 2, 178.0, why="weighed again").line.lots == {"V2": 1.0}


@pytest.mark.parametrize(("code", "value", "low", "high", "shown"), [
    ("kv40", 89.996, 90.0, 110.0, "89.996"), ("kv40", 90.004, 90.0, 110.0, "90.00"),
    ("flash", 204.6, 205.0, None, "204.6"), ("vi", 94.6, 95.0, None, "94.6"), ("vi", 95.4, 95.0, None, "95"),
    ("pour", -8.6, None, -9.0, "-8.6")])
def test_no_rounding_on_a_certificate_brings_a_result_inside(code, value, low, high, shown):
    assert certificate.Line(code, code, "", "", value, 1, "", low, high, ()).shown == shown


def test_a_batch_that_is_gone_is_neither_released_nor_trimmed(plant):
    put_in(plant, 1, 2)
    batch_lab.sample(plant, B1)
    laboratory(plant, GOOD)
    batch_lab.decide(plant, B1)
    rework.leave(plant, B1, 9999.95, "slops", sure=True)
    assert lacks(plant) == ("nothing of it is in the vessel any more",)
    with pytest.raises(DeskError, match="nothing can be trimmed"):
        trimming.propose(plant, B1)


def test_a_batch_of_which_every_line_was_dropped_is_not_released(plant):
    for line in (1, 2):
        charging.miss(plant, B1, line, why="not wanted")
    assert lacks(plant)[0] == "nothing was charged: every line was dropped"


@pytest.mark.parametrize("celsius", [float("nan"), float("inf"), -300.0, 400.0])
def test_no_temperature_that_oil_cannot_have_whatever_is_answered(plant, celsius):
    for step in (lambda: charging.charge(plant, B1, 1, 6000.0, celsius=celsius, sure=True),
                 lambda: charging.correct(plant, B1, 1, 6000.0, celsius=celsius, why="read again", sure=True),
                 lambda: batch_lab.sample(plant, B1, celsius=celsius, sure=True)):
        with pytest.raises(DeskError, match="is no temperature of an oil"):
            step()


def test_a_time_before_every_calendar_is_no_time():
    with pytest.raises(DeskError, match="is no time"):
        batches.moment("0001-01-01 00:00")


def test_a_result_that_was_withdrawn_teaches_no_longer_whatever_sample_decides(plant):
    put_in(plant, 1, 2)
    batch_lab.sample(plant, B1)
    laboratory(plant, {**GOOD, "kv40": "89.0"})
    batch_lab.decide(plant, B1, decision="fresh sample", why="hardly so")
    assert {b.name: b.values["kv40"] for b in plant.measured()} == {B1: 89.0}
    line = next(r.line for r in plant.batch(B1).results if r.property == "kv40")
    batch_lab.withdraw(plant, B1, 1, line, why="another oil")
    batch_lab.sample(plant, B1)
    laboratory(plant, GOOD)
    batch_lab.decide(plant, B1)
    assert {b.name: b.values.get("kv40") for b in plant.measured()} == {B1: None, f"{B1} S2": 100.2}
    for row in [r for r in plant.batch(B1).results if r.sample == 1 and not r.withdrawn]:
        batch_lab.withdraw(plant, B1, 1, row.line, why="another oil")
    batch_lab.decide(plant, B1, why="sample 1 was of another oil")
    release.release(plant, B1)
    assert [b.name for b in plant.measured()] == [f"{B1} S2"]
    assert plant.verify() is None
