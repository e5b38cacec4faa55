"""A clock that was set back: nothing is lost or altered, a step can ask first, and the record says where it was."""

from __future__ import annotations

import sqlite3
from datetime import UTC, datetime, timedelta

import pytest

from blendtui.store import clock, journal
from blendtui.store.edits import stock_cell
from blendtui.store.opening import open_plant


@pytest.fixture
def set_clock(monkeypatch):
    """Makes the store's clock show the true time and so many seconds."""
    def put(seconds: float) -> None:
        def shown() -> str:
            moment = datetime.now(UTC) + timedelta(seconds=seconds)
            return moment.isoformat(timespec="milliseconds").replace("+00:00", "Z")
        monkeypatch.setattr(journal, "now", shown)
        monkeypatch.setattr(clock, "now", shown)
    return put


def price(plant, value: float) -> None:
    plant.change([stock_cell(plant.stock("A"), "price_per_t", value)], f"A price {value:g}")


def test_a_clock_that_runs_says_nothing(plant):
    price(plant, 800.0)
    assert (plant.clock_back(), plant.remarks(), plant.verify()) == (None, (), None)


def test_a_clock_that_was_set_back_is_seen_before_and_after_the_writing(plant, set_clock):
    price(plant, 800.0)
    last = plant.journal(1)[0].at
    set_clock(-3600.0)
    assert plant.clock_back() == pytest.approx(3600.0, abs=5.0)
    assert plant.remarks() == ("the clock now stands 60 min before the last entry",)
    price(plant, 801.0)
    written = plant.journal(1)[0]
    assert written.at < last  # what the clock showed, and nothing made up
    assert plant.clock_back() is None
    (remark,) = plant.remarks()
    assert remark == (f"journal entry 3 ({written.at}, anna: A price 801) was written 60 min before entry 2, by the "
                      "clock")
    assert plant.stock("A").price_per_t == 801.0
    assert plant.verify() is None


def test_every_place_is_told_and_what_is_no_time_is_passed_over(path, set_clock):
    with open_plant(path, who="anna") as plant:
        for shift in (0.0, -86_400.0, 10.0, -200.0):
            set_clock(shift)
            price(plant, 800.0 + shift)
        assert [r.split(" (")[0] for r in plant.remarks()] == ["journal entry 3", "journal entry 5"]
    con = sqlite3.connect(path)
    con.execute("DROP TRIGGER journal_no_update")
    con.execute("UPDATE journal SET at = 'noon' WHERE id = 4")
    con.commit()
    con.close()
    with open_plant(path) as plant:
        assert [r.split(" (")[0] for r in plant.remarks()] == ["journal entry 3"]
        assert plant.verify().endswith("was altered after it was written")
