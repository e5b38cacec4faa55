"""Orders against what stands in vessels and tanks by the book, and against what the record said before."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from blendtui.desk import batches, heels, orders
from blendtui.desk.batches import Questioned
from blendtui.desk.card import card, facts
from blendtui.desk.errors import DeskError
from blendtui.desk.orders import Order
from blendtui.desk.plant import open_plant
from blendtui.store.batch_records import LEFT, REWORK
from blendtui.store.plant import Plant
from tests.desk.made_batches import all_charged, at, charged, drawn, ordered, sampled
from tests.desk.order_plant import order_plant

ORDER = Order("ONE", 8000.0, "K1", heel_kg=0.0, whole=False)


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with open_plant(order_plant(tmp_path), who="anna") as opened:
        yield opened


def test_the_name_of_an_undone_order_is_not_used_again(plant):
    """Its card may be on paper."""
    first = orders.take(plant, ORDER)
    plant.undo()
    assert batches.next_name(plant) == "B-0002"
    assert orders.take(plant, ORDER).name == "B-0002"
    assert first.name == "B-0001"
    assert plant.verify() is None


def test_oil_that_is_still_in_the_vessel_by_the_book_is_asked_about(plant):
    orders.take(plant, ORDER)
    all_charged(plant)
    orders.cancel(plant, "B-0001", why="wrong product", sure=True)
    with pytest.raises(Questioned, match="by the book 8000 kg of B-0001, which is cancelled, are still in K1"):
        orders.take(plant, ORDER)
    drawn(plant, REWORK, 7960.0)
    assert orders.propose(plant, ORDER).questions == ()
    drawn(plant, LEFT, 20.0)
    assert orders.take(plant, ORDER).name == "B-0002"


def test_flush_oil_leaves_what_others_were_promised(plant):
    """The oil of the flush is not among the charges, so no promise of this order watches over it."""
    order = Order("P46", 8000.0, "K1", heel_kg=0.0, whole=False, flush=(300.0, "G320", True))
    seen = orders.propose(plant, order)
    free = plant.stock("G320").available_kg
    ordered(plant, "P46", {"G320": free - 100.0}, name="B-0009", vessel="K2")
    with pytest.raises(DeskError, match="G320: 300 kg of flush oil, and 100 kg are free"):
        orders.taken(plant, order, seen=seen, sure=True)
    assert plant.stock("G320").on_hand_kg == free + 500.0
    assert [b.batch for b in plant.batches()] == ["B-0009"]


def test_cancelling_speaks_of_the_flush_oil_that_was_drawn(plant):
    orders.take(plant, Order("P46", 8000.0, "K1", heel_kg=0.0, whole=False, flush=(300.0, "N100", True)))
    with pytest.raises(Questioned, match="300 kg of flush oil were drawn from their tank with the order of B-0001"):
        orders.cancel(plant, "B-0001", why="not wanted")
    orders.cancel(plant, "B-0001", why="not wanted", sure=True)


def test_a_clock_a_moment_behind_another_machine_is_no_question(plant, monkeypatch):
    monkeypatch.setattr(Plant, "clock_back", lambda _: 0.4)
    assert orders.propose(plant, ORDER).questions == ()
    monkeypatch.setattr(Plant, "clock_back", lambda _: 3600.0)
    assert any("was it set back" in words for words in orders.propose(plant, ORDER).questions)


def test_a_heel_of_a_batch_has_all_that_was_found_of_its_oil(plant):
    ordered(plant, "ONE", {"N32": 8000.0})
    all_charged(plant)
    sampled(plant, 1, {"flash": 219.0, "kv40": 31.0, "kv100": 5.3}, hour=9)
    sampled(plant, 2, {"kv40": 31.8, "kv100": 5.38}, hour=10)
    cells, parts = heels.of_batch(plant.batch("B-0001"), batches.by_code(plant))
    assert (cells["kv40"], cells["kv100"], cells["flash"]) == (31.8, 5.38, 219.0)
    assert parts == {"N32": 1.0}


def test_the_card_reads_the_scale_as_it_stands(plant):
    """The second line went in first, and 200 kg were drawn off since."""
    ordered(plant, "P46", {"N32": 5000.0, "N100": 3000.0, "PK": 70.0})
    charged(plant, 2, 3010.0, when=at(8))
    drawn(plant, REWORK, 200.0, hour=9)
    made = card(plant, "B-0001")
    assert [x.reading_kg for x in made.lines] == [7810.0, 3010.0, 7880.0]
    assert [x.tared_kg for x in made.lines] == [7810.0, 3010.0, 7880.0]


def test_the_heading_of_a_card_says_what_its_lines_add_up_to(plant):
    """Whole steps of the scale rarely come to just what was asked."""
    made = orders.take(plant, Order("P46", 10000.0, "K1"), sure=True)
    paper = card(plant, made.name)
    total = sum(c.plan_kg for c in made.charges) + 100.0
    assert total != made.head.batch_kg
    assert float(dict(facts(paper))["Holds"].partition(" kg")[0].replace(",", "")) == pytest.approx(total)
    assert paper.lines[-1].reading_kg == pytest.approx(total)
