"""Measured blends and lessons in the plant file and in a catalogue folder: kept, undone, carried, checked."""

from __future__ import annotations

import tempfile
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from blendtui.store import lab_edits, state
from blendtui.store.catalogue import read_catalogue
from blendtui.store.database import Database
from blendtui.store.errors import ChangedSince
from blendtui.store.opening import export_plant, import_folder, open_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Lesson
from solver.measured import Measured, Part
from solver.target import LAWS, Effective, Excess

BLEND = Measured("P46 b1", "P46", (Part("A", 0.6, 30.2, 5.23, 868.0, "lot 7", "LN15", {"flash": 224.0, "sulfur": 0.41}),
                                   Part("B", 0.4, 98.5, 10.9)),
                 {"kv40": 46.9, "kv100": 6.85, "flash": 221.0}, "2026-03-02", "ASTM D445", "from the kettle")
PAIR = Lesson("L1", "excess", "refutas", "A", "B", {40.0: (0.25, -0.1), 100.0: (0.125,)}, 0.25, 0.75,
              ("P46 b1", "P46 b2"), "none 1.90 %, one term 0.80 %", True, "2026-03-05T10:00:00.000Z", "anna")
VALUE = Lesson("L2", "value", "walther-mass", "A", terms={40.0: (0.8125,), 100.0: (-1.25,)}, low=0.0625, high=0.125,
               evidence=("P46 b1",), taken_at="2026-03-06T10:00:00.000Z", taken_by="anna",
               withdrawn_at="2026-03-07T10:00:00.000Z", withdrawn_by="bert", reason="another lot")


def again(plant: Plant) -> Plant:
    with tempfile.TemporaryDirectory() as folder:
        export_plant(plant, Path(folder) / "out")
        return open_plant(Path(folder) / "out")


def record(plant: Plant, *blends: Measured) -> None:
    for blend in blends:
        plant.change(lab_edits.new_measured(plant, blend), f"measured blend {blend.name} recorded")


def test_a_measured_blend_is_kept_as_it_was_and_undone(plant):
    before = plant.state()
    record(plant, BLEND)
    assert plant.measured() == [BLEND]
    assert (plant.measured("P46"), plant.measured("other")) == ([BLEND], [])
    assert plant.verify() is None
    assert plant.undo() == "undone: measured blend P46 b1 recorded"
    assert plant.state() == before
    assert plant.redo() == "done again: measured blend P46 b1 recorded"
    assert plant.measured() == [BLEND]


def test_a_blend_is_confirmed_and_dropped(plant):
    record(plant, BLEND, replace(BLEND, name="P46 b2"))
    plant.change([lab_edits.confirmed_measured("P46 b1")], "confirmed")
    assert [b.confirmed for b in plant.measured()] == [True, False]
    plant.change(lab_edits.dropped_measured(plant, "P46 b1"), "dropped")
    assert [b.name for b in plant.measured()] == ["P46 b2"]
    plant.undo()
    assert [b.name for b in plant.measured()] == ["P46 b1", "P46 b2"]
    assert plant.verify() is None


def test_the_same_name_twice_is_refused(plant):
    record(plant, BLEND)
    with pytest.raises(ChangedSince, match=r"^P46 b1: anna changed it at .* \(measured blend P46 b1 recorded\); "
                                           "look again and repeat the change$"):
        record(plant, BLEND)


def test_lessons_are_handed_out_and_withdrawn(plant):
    for lesson in (PAIR, VALUE):
        plant.change(lab_edits.new_lesson(plant, lesson), f"{lesson.version} taken")
    assert plant.lessons() == [PAIR]
    assert plant.lessons(include_withdrawn=True) == [PAIR, VALUE]
    assert PAIR.taught == Excess("A", "B", "refutas", {40.0: (0.25, -0.1), 100.0: (0.125,)}, "L1", True)
    assert VALUE.taught == Effective("A", "walther-mass", {40.0: 0.8125, 100.0: -1.25}, (0.0625, 0.125), "L2", False)
    assert replace(VALUE, low=None, high=None).taught.shares == (0.0, 1.0)
    plant.change([lab_edits.withdrawn_lesson(plant, "L1", "tank cleaned")], "L1 withdrawn")
    (first, _) = plant.lessons(include_withdrawn=True)
    assert (plant.lessons(), first.withdrawn_by, first.reason) == ([], "anna", "tank cleaned")
    assert first.withdrawn_at > first.taken_at
    plant.undo()
    assert plant.lessons() == [PAIR]
    assert plant.verify() is None


def test_two_people_who_take_one_version_do_not_overwrite_each_other(plant, path):
    plant.change(lab_edits.new_lesson(plant, PAIR), "L1 taken: A with B")
    with open_plant(path, who="bert") as other, pytest.raises(ChangedSince, match=r"^L1: anna changed it at .* "):
        other.change(lab_edits.new_lesson(other, replace(PAIR, law="wright-mass")), "L1 taken")
    assert plant.lessons() == [PAIR]


def test_a_version_is_never_used_again(plant):
    assert plant.next_version() == "L1"
    plant.change(lab_edits.new_lesson(plant, PAIR), "L1 taken")
    plant.undo()
    assert plant.lessons(include_withdrawn=True) == []
    assert plant.next_version() == "L2"
    plant.change(lab_edits.new_lesson(plant, replace(PAIR, version="L9")), "L9 taken")
    assert plant.next_version() == "L10"
    assert again(plant).next_version() == "L10"


# The catalogue folder

def test_they_travel_in_a_folder(plant, tmp_path):
    record(plant, BLEND, replace(BLEND, name="b2", product="", values={"kv40": 47.0}, confirmed=True))
    for lesson in (PAIR, VALUE):
        plant.change(lab_edits.new_lesson(plant, lesson), "taken")
    back = again(plant)
    assert back.measured() == plant.measured()
    assert back.lessons(include_withdrawn=True) == [PAIR, VALUE]
    export_plant(plant, tmp_path / "out")
    lines = (tmp_path / "out" / "measured.csv").read_text().splitlines()
    assert lines[:3] == [
        "name,product,measured_on,method,note,confirmed,stock,share_pct,kv40,kv100,density15,lot,oil,flash,sulfur,"
        "result_kv40,result_kv100,result_flash",
        "P46 b1,P46,2026-03-02,ASTM D445,from the kettle,,A,60,30.2,5.23,868,lot 7,LN15,224,0.41,46.9,6.85,221",
        "P46 b1,,,,,,B,40,98.5,10.9,,,,,,,,"]
    lines = (tmp_path / "out" / "lessons.csv").read_text().splitlines()
    assert lines[0] == ("version,kind,law,first,second,celsius,first_term,second_term,low_pct,high_pct,evidence,"
                        "leave_one_out,provisional,taken_at,taken_by,withdrawn_at,withdrawn_by,reason")
    assert lines[3].startswith("L2,value,walther-mass,A,,40,0.8125,,6.25,12.5,P46 b1,")
    assert import_folder(tmp_path / "out", plant.path, who="anna").changes == 0


def test_a_folder_that_says_nothing_of_them_leaves_them(plant, path, tmp_path):
    record(plant, BLEND)
    plant.change(lab_edits.new_lesson(plant, PAIR), "taken")
    import_folder(tmp_path / "catalogue", path)
    assert (plant.measured(), plant.lessons()) == ([BLEND], [PAIR])


def test_a_folder_that_has_them_makes_the_plant_equal_and_can_be_undone(plant, path, tmp_path, folder):
    record(plant, BLEND)
    plant.change(lab_edits.new_lesson(plant, PAIR), "taken")
    before = plant.state()
    other = folder("other", measured="name,stock,share_pct,result_kv40\nnew,A,50,55\nnew,B,50,\n",
                   lessons="version,kind,law,first,second,celsius,first_term\nL4,excess,refutas,A,B,40,0.5\n")
    import_folder(other, path, who="anna")
    assert [b.name for b in plant.measured()] == ["new"]
    assert [x.version for x in plant.lessons()] == ["L4"]
    assert plant.verify() is None
    plant.undo()
    assert plant.state() == before


def test_what_is_said_of_the_whole_may_stand_in_every_row(folder):
    rows = "b,2026-03-01,yes,A,50,46.5\nb,2026-03-01,yes,B,50,46.5\n"
    plant = open_plant(folder(measured="name,measured_on,confirmed,stock,share_pct,result_kv40\n" + rows))
    (blend,) = plant.measured()
    assert (blend.measured_on, blend.confirmed, blend.values, len(blend.parts)) == (
        "2026-03-01", True, {"kv40": 46.5}, 2)


def test_a_further_property_of_a_stock_at_the_time(folder, faults):
    rows = "name,stock,share_pct,flash,result_kv40\nb,A,50,{},46.5\nb,B,50,,\n"
    (blend,) = open_plant(folder(measured=rows.format(224))).measured()
    assert [dict(part.values) for part in blend.parts] == [{"flash": 224.0}, {}]
    assert faults(measured=rows.format(999)) == [
        "measured.csv row 2, flash: 999 lies outside -50 to 450 °C; check the figure and its unit"]


def test_stocks_and_products_that_are_gone_are_only_noted(folder):
    plant = open_plant(folder(measured="name,product,stock,share_pct,result_kv40,bottle\nb,OLD,GONE,50,46.5,12\n"
                                       "b,,A,50,,13\n"))
    assert plant.notes == ("measured.csv: unknown column bottle: kept, not used",
                           "measured.csv names stocks that are not in stocks.csv: GONE",
                           "measured.csv names products that are not in products.csv: OLD")
    assert open_plant(folder("second", lessons=LESSONS + "L1,excess,refutas,A,GONE,40,1,,,,\n")).notes == (
        "lessons.csv names stocks that are not in stocks.csv: GONE",)
    assert again(plant).notes == plant.notes
    assert again(plant).state()["extra"] == plant.state()["extra"] != {}


HEAD = ("name,product,measured_on,method,note,confirmed,stock,share_pct,kv40,kv100,density15,lot,oil,result_kv40,"
        "result_flash\n")


@pytest.mark.parametrize(("rows", "lines"), [
    (",P46,,,,,A,50,,,,,,46,\n", ["row 2, name: the code is empty; give one"]),
    ("a;b,,,,,,A,50,,,,,,46,\n",
     ["row 2, name: the name 'a;b' holds a semicolon, which parts the names of blends in a list; write it without"]),
    ("b,,2/3/26,,,,A,50,,,,,,46,\n",
     ["row 2, measured_on: '2/3/26' is not a date; write year-month-day, such as 2026-03-01"]),
    ("b,,,,,perhaps,A,50,,,,,,46,\n", ["row 2, confirmed: 'perhaps' is neither yes nor no; write yes or no"]),
    ("b,,,,,,A,,,,,,,46,\n", ["row 2, share_pct: the share is empty; write the mass %"]),
    ("b,,,,,,A,-3,,,,,,46,\n", ["row 2, share_pct: -3 is below 0; check the figure, or leave the cell empty"]),
    ("b,,,,,,A,50,5.2,30,,,,46,\n",
     ["row 2, kv100: 30 is not below kv40 5.2: oil thins as it warms; are the two swapped?"]),
    ("b,,,,,,A,50,,,0.87,,,46,\n", ["row 2, density15: density 0.87 looks like kg/L; in kg/m³ it is 870"]),
    ("b,,,,,,A,50,,,,,,46 cSt,\n",
     ["row 2, result_kv40: '46 cSt' is not a number; write a number such as 31.5, or leave the cell empty"]),
    ("b,,,,,,A,50,,,,,,,999\n",
     ["row 2, result_flash: 999 lies outside -50 to 450 °C; check the figure and its unit"]),
    ("b,,,,,,A,50,,,,,,,\n",
     ["row 2, name: measured blend 'b' has no result; write one in its first row, such as result_kv40"]),
    ("b,,,,,,A,50,,,,,,46,\nb,,,,,,A,50,,,,,,,\n",
     ["row 3, stock: measured blend 'b' has 'A' twice; join the two rows"]),
    ("b,,,,,,A,50,,,,,,46,\nb,,,,,,B,50,,,,,,47,\n",
     ["row 3, result_kv40: measured blend 'b' has '46' here in row 2; make them the same, or leave this cell empty"]),
])
def test_faults_of_measured_csv(faults, rows, lines):
    assert faults(measured=HEAD + rows) == [f"measured.csv {line}" for line in lines]


LESSONS = "version,kind,law,first,second,celsius,first_term,second_term,low_pct,high_pct,provisional\n"


@pytest.mark.parametrize(("rows", "lines"), [
    ("one,excess,refutas,A,B,40,0.5,,,,\n", ["row 2, version: 'one' is not the version of a lesson; write one such "
                                            "as L1"]),
    ("L1,,refutas,A,B,40,0.5,,,,\n", ["row 2, kind: the kind is empty; usable are excess, value"]),
    ("L1,guess,refutas,A,B,40,0.5,,,,\n", ["row 2, kind: kind 'guess' is not known; usable are excess, value"]),
    ("L1,excess,best,A,B,40,0.5,,,,\n", [f"row 2, law: law 'best' is not known; usable are {', '.join(LAWS)}"]),
    ("L1,excess,refutas,A,A,40,0.5,,,,\n", ["row 2, second: an excess is of two different stocks or oils; name the "
                                           "second"]),
    ("L1,excess,refutas,A,B,,0.5,,,,\n", ["row 2, celsius: the cell is empty; write a number"]),
    ("L1,excess,refutas,A,B,40,,,,,\n", ["row 2, first_term: the cell is empty; write a number"]),
    ("L1,excess,refutas,A,B,40,1,,60,20,\n", ["row 2, low_pct: low 60 is above high 20; swap or mend them"]),
    ("L1,excess,refutas,A,B,40,1,,,,\nL1,,,,,40,2,,,,\n", ["row 3, celsius: lesson L1 has 40 °C twice; take one of "
                                                         "the rows out"]),
    ("L1,excess,refutas,A,B,40,1,,,,\nL1,value,,,,100,2,,,,\n", [
        "row 3, kind: lesson 'L1' has 'excess' here in row 2; make them the same, or leave this cell empty"]),
    ("L1,value,refutas,A,,40,52310,,,,\n", ["row 2, first_term: 52310 is above 1000; check the figure, or leave the "
                                           "cell empty"]),
    ("L1,value,refutas,A,,40,55,1,,,\n", ["row 2, second_term: a blending value has one figure a temperature; leave "
                                         "the cell empty"]),
])
def test_faults_of_lessons_csv(faults, rows, lines):
    assert faults(lessons=LESSONS + rows) == [f"lessons.csv {line}" for line in lines]


# At random

LETTERS = st.characters(exclude_categories=["Cc", "Cf", "Cs", "Zl", "Zp", "Cn"])
WORDS = st.text(LETTERS, max_size=10).map(str.strip)
NAMES = st.text(LETTERS, min_size=1, max_size=8).map(str.strip).filter(lambda s: s and ";" not in s)


@st.composite
def blends(draw, name: str) -> Measured:
    def known(low: float, high: float) -> float | None:
        return draw(st.none() | st.floats(low, high))

    parts = tuple(Part(code, draw(st.floats(0.0, 1.0)), known(50.0, 900.0), known(1.0, 40.0), known(600.0, 1600.0),
                       draw(WORDS), draw(WORDS), draw(st.dictionaries(st.sampled_from(("flash", "sulfur", "ccs-25")),
                                                               st.floats(1.0, 30.0))))
                  for code in draw(st.lists(NAMES, min_size=1, max_size=4, unique=True)))
    values = {p: draw(st.floats(1.0, 300.0)) for p in draw(st.sets(st.sampled_from(("kv40", "kv100", "flash", "vi")),
                                                                   min_size=1))}
    return Measured(name, draw(WORDS), parts, values, draw(st.sampled_from(("", "2026-03-01"))), draw(WORDS),
                    draw(WORDS), draw(st.booleans()))


@settings(max_examples=40, deadline=None)
@given(st.data())
def test_any_record_comes_back_as_it_was(data):
    names = data.draw(st.lists(NAMES, min_size=1, max_size=4, unique=True))
    with Plant(Database(None), Path("memory"), who="anna") as plant:
        plant.fill(rows_of_a_small_plant(), "made")
        record(plant, *(data.draw(blends(name)) for name in names))
        plant.change(lab_edits.new_lesson(plant, replace(PAIR, evidence=tuple(names))), "taken")
        assert plant.verify() is None
        back = again(plant)
        assert back.state()["measured_part"] == plant.state()["measured_part"]
        assert (back.measured(), back.lessons()) == (plant.measured(), plant.lessons())


def rows_of_a_small_plant() -> list:
    """A stock and a product, without which a folder is none."""
    with tempfile.TemporaryDirectory() as place:
        (Path(place) / "stocks.csv").write_text("stock,kv40,kv100\nA,30.2,5.23\n")
        (Path(place) / "products.csv").write_text("product,grade\nP46,ISO VG 46\n")
        return state.difference(state.empty(), read_catalogue(Path(place)).state)
