"""What the vessel's scale shows, on the card and on the floor."""

from __future__ import annotations

from blendtui.desk.scale import readings
from blendtui.store.batch_records import DONE, DROPPED, FLUSH, HEEL, SLOPS, Batch, Charge, Content, Made, Outcome


def line(number: int, kg: float, at: str = "", state: str = "planned", actual: float | None = None) -> Charge:
    return Charge("B", number, 0, f"S{number}", "", kg, 5.0, state=state, actual_kg=actual, at=at, position=number)


CONTENTS = (Content("B", 1, HEEL, "H", 100.0), Content("B", 2, FLUSH, "F", 40.0, 0))


def test_charges_to_come_add_up_in_the_order_of_the_card():
    made = Made(Batch("B", "P"), CONTENTS, (line(1, 6000.0), line(2, 300.0), line(3, 1200.0)))
    assert readings(made) == {1: 6100.0, 2: 6400.0, 3: 7600.0}


def test_a_line_that_went_in_before_its_turn_is_on_the_scale_already():
    made = Made(Batch("B", "P"), CONTENTS, (line(1, 6000.0), line(2, 300.0, "08:00", DONE, 310.0),
                                            line(3, 50.0, state=DROPPED), line(4, 1200.0)))
    assert readings(made) == {2: 410.0, 1: 6410.0, 4: 7610.0}


def test_what_was_drawn_off_is_missing_from_then_on():
    made = Made(Batch("B", "P"), CONTENTS, (line(1, 6000.0, "08:00", DONE, 6010.0),
                                            line(2, 300.0, "08:30", DONE, 300.0), line(3, 500.0)),
                outcomes=(Outcome("B", 1, SLOPS, 1000.0, at="08:20"), Outcome("B", 2, SLOPS, 10.0, at="09:00")))
    assert readings(made) == {1: 6110.0, 2: 5410.0, 3: 5900.0}
