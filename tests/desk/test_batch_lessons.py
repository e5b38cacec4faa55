"""Batches as measured blends: what they are made of when a sample is drawn, and that the lessons use them."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from blendtui.desk import batch_lessons, batches, lab, lessons
from blendtui.desk.plant import export_plant, open_plant
from blendtui.desk.stocks import edit_cell
from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import HEEL, LINE, REWORK, Charge, Content
from blendtui.store.opening import import_folder
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver import laws
from solver.stocks import Stock, StockTable
from tests.desk.made_batches import all_charged, charged, drawn, ordered, plant_file, put, sampled

STOCKS = """stock,oil,kind,on_hand_kg,price_per_t,density15,kv40,kv100,flash
A,LIGHT,base,90000,800,868,30.6,5.23,214
B,,base,90000,1100,897,490,32,300
"""


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    products = "product,grade\nP100,ISO VG 100\n"
    with open_plant(plant_file(tmp_path / "c", stocks=STOCKS, products=products), who="anna") as opened:
        yield opened


def blend(plant: Plant, sample: int, name: str = "B-0001"):
    return batch_lessons.measured_of(plant.batch(name), sample, batches.by_code(plant))


def record(plant: Plant, sample: int, name: str = "B-0001") -> int:
    """Put a sample on the laboratory's record; how many changes it took."""
    changes = batch_lessons.lesson_changes(plant, plant.batch(name), sample)
    plant.change(changes, "sample decided")
    return len(changes)


def law_says(share: float, density: float = 868.0) -> tuple[float, float]:
    table = StockTable([Stock("A", kv40=30.6, kv100=5.23, density15=density),
                        Stock("B", kv40=490.0, kv100=32.0, density15=897.0)])
    kv40, kv100 = laws.predict("refutas", table, [1.0 - share, share])
    return float(kv40), float(kv100)


def test_a_batch_is_a_measured_blend(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {"kv40": 97.0, "kv100": 11.4, "flash": 228.0})
    put(plant, plant.batch("B-0001").results[0].__class__("B-0001", 1, 9, "kv40", 99.0, "ASTM D7042",
                                                          "2026-05-05T08:00:00.000Z", "dora"))
    made = blend(plant, 1)
    assert (made.name, made.product, made.measured_on) == ("B-0001", "P100", "2026-05-05")
    assert made.values == {"kv40": 98.0, "kv100": 11.4, "flash": 228.0}  # mean of both
    assert made.method == "ASTM D445, ASTM D7042"
    assert [(p.stock, p.share, p.kv40, p.kv100, p.density15, p.lot, p.oil, dict(p.values)) for p in made.parts] == [
        ("A", 0.6, 30.6, 5.23, 868.0, "A-7", "LIGHT", {"flash": 214.0}),
        ("B", 0.4, 490.0, 32.0, 897.0, "B-7", "", {"flash": 300.0})]


def test_values_are_those_at_charging(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    edit_cell(plant, "A", "kv40", "29.9")
    sampled(plant, 1, {"kv40": 97.0})
    assert blend(plant, 1).parts[0].kv40 == 30.6


def test_a_withdrawn_result_teaches_nothing(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {"kv40": 97.0, "kv100": 9.9})
    bad = plant.batch("B-0001").results[1]
    plant.step(lambda: Step((changed(bad, withdrawn="wrong bath"),), "withdrawn"))
    assert blend(plant, 1).values == {"kv40": 97.0}


def test_a_heel_counts_by_what_it_is(plant):
    """A heel of the same oil and values joins its charge; another lot of it has a code of its own and the same oil."""
    stock = plant.stock("A")
    same = Content("B-0001", 1, HEEL, "A", 500.0, cells=batches.cells_of(stock))
    other = Content("B-0001", 2, LINE, "A", 300.0, cells={"kv40": 33.0, "kv100": 5.4, "density15": 870.0})
    ordered(plant, "P100", {"A": 5200.0, "B": 4000.0}, contents=(same, other))
    all_charged(plant)
    sampled(plant, 1, {"kv40": 97.0})
    parts = blend(plant, 1).parts
    assert [(p.stock, pytest.approx(p.share), p.kv40, p.oil) for p in parts] == [
        ("A", 0.57, 30.6, "LIGHT"), ("B", 0.4, 490.0, ""), ("A (line 2)", 0.03, 33.0, "LIGHT")]
    assert record(plant, 1) > 0
    assert lab.checked(lab.read(plant)).questions == {}
    row = next(r for r in lab.report(lab.read(plant)).rows if r.code == "kv40")
    own = [(30.6, 5.23), (490.0, 32.0), (33.0, 5.4)]
    table = StockTable(Stock(str(n), kv40=a, kv100=b, density15=880.0) for n, (a, b) in enumerate(own))
    assert row.predicted == pytest.approx(laws.predict("refutas", table, [0.57, 0.4, 0.03])[0], rel=1e-12)


def test_a_heel_that_only_the_laboratory_knows(plant):
    heel = Content("B-0001", 1, HEEL, "", 500.0, cells={"kv40": 68.0, "kv100": 8.6})
    ordered(plant, "P100", {"A": 5500.0, "B": 4000.0}, contents=(heel,))
    all_charged(plant)
    sampled(plant, 1, {"kv40": 97.0})
    assert [(p.stock, p.share) for p in blend(plant, 1).parts] == [("A", 0.55), ("B", 0.4), ("HEEL of B-0001", 0.05)]
    record(plant, 1)
    assert lab.checked(lab.read(plant)).usable[0].name == "B-0001"


def test_a_heel_of_which_nothing_is_known_teaches_nothing(plant):
    ordered(plant, "P100", {"A": 5500.0, "B": 4000.0}, contents=(Content("B-0001", 1, HEEL, "", 500.0),))
    all_charged(plant)
    sampled(plant, 1, {"kv40": 97.0})
    made = plant.batch("B-0001")
    assert batch_lessons.why_not(made, 1, batches.by_code(plant)) == "of HEEL of B-0001 no viscosity is known"
    assert record(plant, 1) == 0


def test_a_sample_before_all_was_charged_teaches_nothing(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    charged(plant, 1)
    sampled(plant, 1, {"kv40": 97.0}, hour=7)
    words = "sample 1 was drawn before all was charged"
    assert batch_lessons.why_not(plant.batch("B-0001"), 1, batches.by_code(plant)) == words
    charged(plant, 2, when="2026-05-04T08:00:00.000Z")
    assert batch_lessons.why_not(plant.batch("B-0001"), 1, batches.by_code(plant)) == words
    sampled(plant, 2, {}, hour=9)
    assert batch_lessons.why_not(plant.batch("B-0001"), 2, batches.by_code(plant)) == "sample 2 has no result"


def trimmed(plant: Plant) -> None:
    """10 t, a sample, 2 t drawn off, 500 kg of bright stock as a trim, another sample, then all packed."""
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {"kv40": 92.0, "kv100": 11.0}, hour=9)
    drawn(plant, REWORK, 2000.0, hour=10)
    put(plant, Charge("B-0001", 3, 1, "B", "", 500.0, position=30))
    charged(plant, 3, when="2026-05-04T11:00:00.000Z")
    sampled(plant, 2, {"kv40": 110.0, "kv100": 12.4}, hour=12)
    drawn(plant, "packed", 8500.0, hour=13)


def test_a_trim_stands_in_the_samples_after_it(plant):
    trimmed(plant)
    first, second = blend(plant, 1), blend(plant, 2)
    assert [(p.stock, p.share) for p in first.parts] == [("A", 0.6), ("B", 0.4)]
    # 80 % of each charge was left when 500 kg came: 4,800 kg of A and 3,200 + 500 kg of B in 8,500 kg.
    assert [(p.stock, pytest.approx(p.share, rel=1e-12)) for p in second.parts] == [
        ("A", 4800.0 / 8500.0), ("B", 3700.0 / 8500.0)]
    assert (first.name, second.name) == ("B-0001", "B-0001 S2")
    assert (first.values["kv40"], second.values["kv40"]) == (92.0, 110.0)


def test_nothing_is_recorded_twice(plant):
    trimmed(plant)
    assert record(plant, 1) > 0
    assert record(plant, 1) == 0
    record(plant, 2)
    assert [b.name for b in plant.measured()] == ["B-0001", "B-0001 S2"]


def test_results_that_change_later_are_recorded_anew(plant):
    trimmed(plant)
    record(plant, 1)
    result = plant.batch("B-0001").results[0]
    plant.step(lambda: Step((changed(result, withdrawn="bath at 38"),), "withdrawn"))
    assert record(plant, 1) > 0
    assert [(b.name, dict(b.values)) for b in plant.measured()] == [("B-0001", {"kv100": 11.0})]


def test_what_somebody_typed_under_that_name_stays(plant):
    trimmed(plant)
    lab.record(plant, "B-0001", "P100", {"A": 0.5, "B": 0.5}, {"kv40": "120"}, on="2026-05-01")
    assert record(plant, 1) == 0
    assert plant.measured()[0].values == {"kv40": 120.0}


def test_batches_teach_without_retyping(plant, tmp_path):
    """Five batches that measure 4 % below the law: residuals, an offer, a lesson; an export keeps them."""
    for n, share in enumerate((0.25, 0.35, 0.45, 0.55, 0.65), 1):
        name = f"B-000{n}"
        ordered(plant, "P100", {"A": 10000.0 * (1.0 - share), "B": 10000.0 * share}, name=name)
        all_charged(plant, name)
        kv40, kv100 = law_says(share)
        sampled(plant, 1, {"kv40": 0.96 * kv40, "kv100": 0.97 * kv100}, name=name)
        record(plant, 1, name)
    kept = lab.read(plant)
    report = lab.report(kept)
    off = [row.off for row in report.rows if row.code == "kv40"]
    assert off == pytest.approx([-4.0] * 5)
    assert report.used == tuple(f"B-000{n}" for n in range(1, 6))
    pair = next(o for o in lessons.offers(kept) if o.kind == "excess")
    assert ({pair.first, pair.second}, len(pair.evidence), pair.refusal) == ({"LIGHT", "B"}, 5, "")
    lessons.take(plant, "refutas", pair.first, pair.second)
    # A lesson rests on it now: it stays as it was learnt from.
    result = plant.batch("B-0001").results[0]
    plant.step(lambda: Step((changed(result, withdrawn="late"),), "withdrawn"))
    assert record(plant, 1) == 0
    export_plant(plant, tmp_path / "out")
    import_folder(tmp_path / "out", tmp_path / "y.plant", who="anna")
    with open_plant(tmp_path / "y.plant") as other:
        assert other.measured() == plant.measured()
    assert plant.verify() is None
