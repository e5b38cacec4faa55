"""vessels.csv: what is wrong in it is told by row and column, and a plant's vessels travel out and back."""

from __future__ import annotations

from dataclasses import replace

import pytest

from blendtui.store.batch_edits import changed
from blendtui.store.batch_records import Vessel
from blendtui.store.errors import PlantError
from blendtui.store.opening import export_plant, import_folder, open_plant
from blendtui.store.state import change_of

HEAD = "vessel,capacity_l,least_fill_l,division_kg,heel_kg,heel_stock,flash_margin_c,flash_margin_on\n"
TWO = HEAD + "K1,24000,8000,10,120,A,30,2026-01-12\nK2,,,,,,,\n"


def test_every_cell_is_read(folder):
    plant = open_plant(folder(vessels=TWO))
    assert plant.vessels() == [Vessel("K1", 24000.0, 8000.0, 10.0, 120.0, "A", 30.0, "2026-01-12"), Vessel("K2")]
    assert plant.notes == ()


def test_only_the_code_is_required_and_the_file_itself_is_not(folder):
    assert open_plant(folder(vessels="vessel\nK1\n")).vessels() == [Vessel("K1")]
    assert open_plant(folder("none")).vessels() == []


@pytest.mark.parametrize(("row", "said"), [
    ("K1,0,,,,,,", "capacity_l: 0 is not above 0; check the figure, or leave the cell empty"),
    ("K1,-5,,,,,,", "capacity_l: -5 is not above 0; check the figure, or leave the cell empty"),
    ("K1,5000,6000,,,,,", "least_fill_l: a least fill of 6,000 L is above the capacity of 5,000 L; swap or mend them"),
    ("K1,,-1,,,,,", "least_fill_l: -1 is below 0; check the figure, or leave the cell empty"),
    ("K1,,,0,,,,", "division_kg: 0 is not above 0; check the figure, or leave the cell empty"),
    # 8,700 kg / 0.87 kg/L = 10,000 L
    ("K1,9999,,,8700,,,", "heel_kg: 'K1' is smaller than its heel: 8,700 kg are about 10,000 L, and it holds 9,999 L; "
                          "mend one of the two"),
    ("K1,,,,-1,,,", "heel_kg: -1 is below 0; check the figure, or leave the cell empty"),
    ("K1,,,,,NONE,,", "heel_stock: 'NONE' is not in stocks.csv; mend the code, or leave the cell empty"),
    ("K1,,,,,,30,", "flash_margin_on: the margin to the flash point has no date; write the day on which the site set "
                    "it, such as 2026-03-01"),
    ("K1,,,,,,,2026-01-12", "flash_margin_c: the date stands without a margin; write the site's margin in °C, or take "
                            "the date out"),
    ("K1,,,,,,30,12.1.2026", "flash_margin_on: '12.1.2026' is not a date; write year-month-day, such as 2026-03-01"),
    ("K1,,,,,,warm,2026-01-12", "flash_margin_c: 'warm' is not a number; write a number such as 31.5, or leave the "
                                "cell empty"),
    (",5000,,,,,,", "vessel: the code is empty; give one"),
])
def test_each_fault_names_its_row_and_column(faults, row, said):
    assert faults(vessels=HEAD + row + "\n") == [f"vessels.csv row 2, {said}"]


def test_a_heel_that_just_fits_is_taken(folder):
    assert open_plant(folder(vessels=HEAD + "K1,10000,,,8700,,,\n")).vessels()[0].heel_kg == 8700.0


def test_a_code_twice_and_a_missing_column(faults):
    assert faults(vessels="vessel,capacity_l\nK1,5\nK1,6\n") == [
        "vessels.csv row 3, vessel: the code 'K1' stands in row 2 already; give each vessel its own code"]
    assert faults(vessels="kettle,capacity_l\nK1,5\n") == [
        "vessels.csv row 1, vessel: this column is missing; add it; the file has kettle, capacity_l"]


def test_vessels_travel_with_unknown_columns(path, folder, tmp_path):
    place = folder("kettles", vessels="vessel,capacity_l,hall\nK1,5000.5,north\nK2,,\n")
    done = import_folder(place, path, who="anna")
    assert done.notes == ("vessels.csv: unknown column hall: kept, not used",)
    with open_plant(path, who="anna") as plant:
        assert export_plant(plant, tmp_path / "out") == ()
        before = plant.state()
    assert (tmp_path / "out" / "vessels.csv").read_text() == HEAD.strip() + ",hall\nK1,5000.5,,,,,,,north\nK2,,,,,,,,\n"
    assert import_folder(tmp_path / "out", path, who="anna").changes == 0
    with open_plant(path) as plant:
        assert plant.state() == before


def test_the_plants_own_order_of_charging_travels_and_is_not_called_unknown(path, folder, tmp_path):
    place = folder("kettles", vessels="vessel,charge_order\nK1,B A\n")
    assert import_folder(place, path, who="anna").notes == ()
    with open_plant(path, who="anna") as plant:
        assert plant.row("extra", "vessel", '["K1"]', "charge_order") == {"text": "B A"}
        export_plant(plant, tmp_path / "out")
    assert import_folder(tmp_path / "out", path, who="anna").changes == 0


def test_a_vessel_that_the_folder_lacks_is_retired_and_without_the_file_nothing_is_said(path, folder, tmp_path):
    import_folder(folder("two", vessels=TWO), path, who="anna")
    assert import_folder(folder("silent"), path, who="anna").retired == ()
    with open_plant(path, who="anna") as plant:
        assert [v.vessel for v in plant.vessels()] == ["K1", "K2"]
        assert import_folder(folder("one", vessels="vessel\nK2\n"), path, who="anna").retired == ("K1",)
        assert [v.vessel for v in plant.vessels()] == ["K2"]
        assert "retired, so not exported: vessel K1" in export_plant(plant, tmp_path / "out")
        # It comes back under its code, and the import can be taken back.
        import_folder(folder("again", vessels=TWO), path, who="anna")
        assert [v.vessel for v in plant.vessels()] == ["K1", "K2"]
        plant.undo()
        assert [v.vessel for v in plant.vessels()] == ["K2"]
        assert plant.verify() is None


def test_a_heel_that_no_folder_can_name_survives_the_journey(path, folder, tmp_path):
    """The oil of a batch is no stock: the export says so and leaves the cell empty, the import leaves the plant's."""
    import_folder(folder("two", vessels=TWO), path, who="anna")
    with open_plant(path, who="anna") as plant:
        first = plant.vessels()[0]
        plant.change([changed(first, heel_stock="B-0003", heel_kg=90.0)], "what is left of B-0003 is the heel")
        assert export_plant(plant, tmp_path / "out") == (
            "vessel K1: its heel B-0003 is no stock in use, so the folder does not name it",)
        assert import_folder(tmp_path / "out", path, who="anna").changes == 0
        assert plant.vessels()[0] == replace(first, heel_stock="B-0003", heel_kg=90.0)
        # A stock that the folder does name is taken.
        import_folder(folder("named", vessels=TWO.replace(",A,", ",B,")), path, who="anna")
        assert plant.vessels()[0].heel_stock == "B"


def test_an_export_leaves_a_file_of_vessels_alone_that_the_plant_never_read(path, folder):
    place = folder("kettles", vessels=TWO)
    with open_plant(path) as plant:
        assert export_plant(plant, place) == ("vessels.csv is left as it was: the plant has no vessels",)
    assert (place / "vessels.csv").read_text() == TWO


def test_a_vessel_that_would_not_import_back_is_named(path, folder, tmp_path):
    import_folder(folder("two", vessels=TWO), path, who="anna")
    with open_plant(path, who="anna") as plant:
        plant.change([change_of("vessel", ("K1",), {"capacity_l": 24000.0}, {"capacity_l": 100.0})], "slip")
        with pytest.raises(PlantError, match=r"^nothing was exported, for it would not import back: vessel K1 "
                                             r"least_fill_l: a least fill of 8,000 L is above the capacity of 100 L"):
            export_plant(plant, tmp_path / "out")


def test_the_examples_vessels(example):
    vessels = open_plant(example).vessels()
    assert [v.vessel for v in vessels] == ["K1", "K2", "T9"]
    assert {(v.flash_margin_c, v.flash_margin_on) for v in vessels} == {(30.0, "2026-01-12")}
    assert all(v.heel_kg and v.heel_stock and v.least_fill_l < v.capacity_l for v in vessels)
