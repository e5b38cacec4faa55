"""What open batches plan is promised: never twice, and no longer than they are open."""

from __future__ import annotations

import pytest

from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import CANCELLED, DROPPED
from blendtui.store.edits import stock_cell
from blendtui.store.errors import ChangedSince, PlantError
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.schema import QUANTITY, QUANTITY_OF
from tests.store.batch_steps import charge, close, order


@pytest.fixture
def other(path, plant):
    """The same plant opened by bertil."""
    with open_plant(path, who="bertil", timeout=0.2) as opened:
        yield opened


def reserved(plant: Plant) -> dict[str, float]:
    """As the list of stocks has it; the single stock must agree."""
    listed = {s.code: s.reserved_kg for s in plant.stocks()}
    assert listed == {code: plant.stock(code).reserved_kg for code in listed}
    return listed


def test_what_is_planned_is_promised_until_it_is_charged_or_dropped(plant):
    order(plant, "B-0001", ("A", 500.0), ("A", 300.0), ("B", 40.0))
    order(plant, "B-0002", ("A", 100.0))
    assert reserved(plant) == {"A": 900.0, "B": 40.0}
    assert plant.stock("A").available_kg == 40_000.0 - 900.0
    charge(plant, "B-0001", 1, 510.0)
    assert reserved(plant) == {"A": 400.0, "B": 40.0}
    second = plant.batch("B-0001").charges[1]
    plant.change([changed(second, state=DROPPED)], "dropped")
    assert reserved(plant) == {"A": 100.0, "B": 40.0}


def test_a_closed_batch_promises_nothing_whatever_it_had_planned(plant):
    order(plant, "B-0001", ("A", 500.0))
    close(plant, "B-0001", CANCELLED)
    assert reserved(plant) == {"A": 0.0, "B": 0.0}
    order(plant, "B-0002", ("A", 40_000.0))
    assert reserved(plant)["A"] == 40_000.0


def test_two_batches_cannot_promise_the_same_oil(plant, other):
    order(plant, "B-0001", ("A", 30_000.0))
    with pytest.raises(PlantError) as caught:
        order(other, "B-0002", ("B", 5.0), ("A", 12_000.0))
    assert str(caught.value) == ("A: 12,000.0 kg are planned and 10,000.0 kg are free; the rest is promised to B-0001 "
                                 "(anna); design the batch again")
    assert [b.batch for b in other.batches()] == ["B-0001"]
    order(other, "B-0002", ("A", 10_000.0))
    with pytest.raises(PlantError, match=r"^A: 10,000\.1 kg are planned and 10,000\.0 kg are free"):
        other.change([changed(other.batch("B-0002").charges[0], plan_kg=10_000.1)], "more")


def test_a_plan_is_lowered_although_the_tank_is_short(plant):
    order(plant, "B-0001", ("A", 30_000.0))
    plant.change([stock_cell(plant.stock("A"), "on_hand_kg", 20_000.0)], "counted")
    (line,) = plant.batch("B-0001").charges
    plant.change([changed(line, plan_kg=25_000.0)], "less")
    assert (plant.stock("A").reserved_kg, plant.stock("A").available_kg) == (25_000.0, 0.0)
    with pytest.raises(PlantError, match=r"^A: 26,000\.0 kg are planned and 20,000\.0 kg are free; the tank holds no"):
        plant.change([changed(plant.batch("B-0001").charges[0], plan_kg=26_000.0)], "more")


def test_a_charge_on_a_stale_line_names_who_was_quicker(plant, other):
    order(plant, "B-0003", ("A", 500.0), ("B", 40.0))
    seen = other.batch("B-0003").charges[1]
    charge(plant, "B-0003", 2, 41.0)
    at = plant.journal(1)[0].at
    with pytest.raises(ChangedSince) as caught:
        other.change([changed(seen, state="done", actual_kg=40.0)], "late")
    assert str(caught.value) == (f"B-0003 charge 2: anna changed it at {at} (B-0003 charge 2: 41 kg of B); look again "
                                 "and repeat the change")
    assert (caught.value.who, caught.value.what) == ("anna", "B-0003 charge 2: 41 kg of B")


def test_the_quantity_of_one_stock_is_that_of_the_list(plant):
    for value in (12.5, None, None, 3.25, 7.0, None, 9.0):
        plant.change([stock_cell(plant.stock("A"), "on_hand_kg", value)], "counted")
        con = plant._database.con
        listed = dict(con.execute(f"{QUANTITY} GROUP BY m.stock").fetchall())
        for code in ("A", "B", "NONE"):
            assert con.execute(QUANTITY_OF, (code,)).fetchone()[0] == listed.get(code)
        assert plant.stock("A").on_hand_kg == value


def test_a_quantity_is_read_from_its_index_alone(plant):
    con = plant._database.con
    plan = " ".join(row[3] for row in con.execute(f"EXPLAIN QUERY PLAN {QUANTITY} GROUP BY m.stock"))
    assert plan.count("COVERING INDEX movement_sum") == 2
    plan = " ".join(row[3] for row in con.execute("EXPLAIN QUERY PLAN SELECT stock, SUM(plan_kg) FROM charge WHERE "
                                                  "state = 'planned' GROUP BY stock"))
    assert "INDEX charge_planned" in plan
