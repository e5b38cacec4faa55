"""What happened is no catalogue: an export says what it leaves behind, and an import leaves it alone."""

from __future__ import annotations

from blendtui.store.opening import export_plant, import_folder
from blendtui.store.schema import RECORD
from tests.store.batch_steps import charge, close, dip, order, receive, sample


def test_an_export_says_what_stays_in_the_file(plant, tmp_path):
    order(plant, "B-0001", ("A", 500.0))
    assert export_plant(plant, tmp_path / "one") == (
        "in the plant file only: 1 batch; blendtui backup FILE keeps them",)
    order(plant, "B-0002", ("A", 500.0))
    receive(plant, "A", "L1", 100.0)
    dip(plant, "A", 40_000.0)
    assert export_plant(plant, tmp_path / "more") == (
        "in the plant file only: 2 batches, 1 lot and 1 dip; blendtui backup FILE keeps them",)


def test_an_import_leaves_it_alone(plant, path, tmp_path, folder):
    receive(plant, "A", "L1", 100.0)
    order(plant, "B-0001", ("A", 500.0), ("B", 10.0))
    charge(plant, "B-0001", 1, 500.0)
    sample(plant, "B-0001")
    order(plant, "B-0002", ("A", 500.0))
    close(plant, "B-0001")
    export_plant(plant, tmp_path / "out")
    before = plant.state()
    assert import_folder(tmp_path / "out", path, who="anna").changes == 0
    assert plant.state() == before
    # Nor does one that no longer has the stock of a batch.
    import_folder(folder("less", stocks="stock,kv40,kv100\nB,98.5,10.9\n"), path, who="anna")
    after = plant.state()
    assert {table: after[table] for table in RECORD} == {table: before[table] for table in RECORD}
    assert plant.batch("B-0001").charged[0].lots["L1"] > 0.0
    assert plant.verify() is None
