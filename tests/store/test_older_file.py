"""A plant file of an older schema: it opens, is brought up to date, and its past still stands and can be undone."""

from __future__ import annotations

import sqlite3
from pathlib import Path

import pytest

from blendtui.store import edits
from blendtui.store.errors import ChangedSince
from blendtui.store.opening import open_plant
from blendtui.store.plant import Plant
from blendtui.store.schema import APPLICATION_ID, MIGRATIONS, STOCK_CHARGES
from tests.store.batch_steps import charge, order, receive

# Written by the program as it was before the second step: an import, a price, and a stock added, by anna.
OLDER = Path(__file__).parent / "older_plant.sql"


@pytest.fixture(params=range(1, len(MIGRATIONS)))
def older(tmp_path: Path, request: pytest.FixtureRequest) -> Path:
    """That plant after the first, the second … step."""
    place, steps = tmp_path / "older.plant", request.param
    con = sqlite3.connect(place)
    con.executescript(OLDER.read_text(encoding="utf-8"))
    for statement in (statement for step in MIGRATIONS[1:steps] for statement in step):
        con.execute(statement)
    con.executescript(f"PRAGMA application_id = {APPLICATION_ID}; PRAGMA user_version = {steps}; "
                      "PRAGMA journal_mode = WAL")
    con.close()
    return place


def test_it_opens_and_is_brought_up_to_date(older: Path) -> None:
    with open_plant(older, who="anna") as plant:
        assert plant._database.con.execute("PRAGMA user_version").fetchone()[0] == len(MIGRATIONS) > 1
        assert [(s.code, s.price_per_t, s.on_hand_kg) for s in plant.stocks()] == [
            ("A", 800.0, 40000.0), ("B", 870.0, 35000.0), ("C", None, None)]
        assert {getattr(s, c) for s in plant.stocks() for c in STOCK_CHARGES} == {None}
        assert (plant.measured(), plant.lessons()) == ([], [])
        assert plant.verify() is None


def test_what_was_done_before_can_still_be_undone_and_done_again(older: Path) -> None:
    with open_plant(older, who="anna") as plant:
        before = plant.state()
        assert [plant.undo(), plant.undo()] == ["undone: C added", "undone: A price 820 → 800"]
        assert [(s.code, s.price_per_t) for s in plant.stocks()] == [("A", 820.0), ("B", 870.0)]
        assert [plant.redo(), plant.redo()] == ["done again: A price 820 → 800", "done again: C added"]
        assert plant.state() == before
        assert plant.verify() is None


def test_new_cells_are_written_into_it(older: Path, tmp_path: Path) -> None:
    def set_step(plant: Plant, code: str, value: float) -> int:
        return plant.change([edits.stock_cell(plant.stock(code), "division_kg", value)], f"scale step of {code}")

    with open_plant(older, who="anna") as plant:
        set_step(plant, "A", 10.0)
        with open_plant(older, who="bert") as other:
            set_step(other, "C", 0.5)
        assert [s.division_kg for s in plant.stocks()] == [10.0, None, 0.5]
        assert plant.verify() is None
        assert plant.undo() == "undone: scale step of A"
        # Anna's next is the stock she added, which has a cell of bert's by now.
        with pytest.raises(ChangedSince, match=r"^C division_kg: bert changed it at"):
            plant.undo()


def test_batches_are_made_in_it(older: Path) -> None:
    with open_plant(older, who="anna") as plant:
        assert (plant.batches(), plant.vessels(), plant.lots()) == ([], [], [])
        order(plant, "B-0001", ("A", 500.0))
        receive(plant, "A", "L1", 1000.0)
        charge(plant, "B-0001", 1, 490.0)
        assert plant.stock("A").on_hand_kg == 40_510.0
        assert plant.verify() is None
        plant.undo()
        assert (plant.stock("A").on_hand_kg, plant.stock("A").reserved_kg) == (41_000.0, 500.0)
        assert plant.verify() is None
