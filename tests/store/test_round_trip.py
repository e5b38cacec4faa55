"""An export imports back to the same plant, whatever was edited; an import is one entry that can be undone."""

from __future__ import annotations

import tempfile
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from blendtui.store import edits
from blendtui.store.batch_records import Vessel
from blendtui.store.catalogue_vessels import cells_of
from blendtui.store.database import Database
from blendtui.store.errors import PlantError
from blendtui.store.export import text
from blendtui.store.opening import export_plant, import_folder, open_plant
from blendtui.store.plant import Plant
from blendtui.store.records import Trial
from blendtui.store.state import State, change_of
from solver.properties import lookup, stock_codes
from solver.stocks import GROUPS, KINDS, SOURCES, Stock
from solver.target import LAWS


def content(state: State) -> State:
    """A state without the numbers that only keep an order, which is checked by itself."""
    return {table: {key: {c: v for c, v in row.items() if c != "position"} for key, row in rows.items()}
            for table, rows in state.items()}


def again(plant: Plant) -> Plant:
    """The plant exported and read back."""
    with tempfile.TemporaryDirectory() as folder:
        export_plant(plant, Path(folder) / "out")
        return open_plant(Path(folder) / "out")


def same(one: Plant, two: Plant) -> None:
    assert content(one.state()) == content(two.state())
    assert one.stocks() == two.stocks()
    assert one.products() == two.products()
    assert one.trials() == two.trials()
    assert (one.measured(), one.lessons(True)) == (two.measured(), two.lessons(True))
    assert one.vessels() == two.vessels()


def test_the_example(example):
    plant = open_plant(example)
    same(plant, again(plant))
    assert plant.notes == ()


def test_the_example_is_as_it_is_written(example, tmp_path):
    """An export of the example gives the example: the files are in the program's own form."""
    export_plant(open_plant(example), tmp_path / "out")
    for file in ("products.csv", "limits.csv", "shares.csv"):
        assert len((tmp_path / "out" / file).read_text().splitlines()) == len(
            (example / file).read_text().splitlines())
    for file in ("stocks.csv", "measured.csv", "vessels.csv"):
        assert (tmp_path / "out" / file).read_text() == (example / file).read_text()


# Plants at random

LETTERS = st.characters(exclude_categories=["Cc", "Cf", "Cs", "Zl", "Zp", "Cn"])
WORDS = st.text(LETTERS, max_size=12).map(str.strip)
CODES = (st.text(LETTERS, min_size=1, max_size=8).map(str.strip)
         .filter(lambda s: s and "=" not in s and s not in KINDS and not s.lower().startswith("group ")))


def number(low: float, high: float):
    return st.floats(low, high, allow_nan=False)


@st.composite
def stocks(draw, code: str) -> Stock:
    kv100 = draw(number(1.0, 1000.0))
    pair = draw(st.none() | st.tuples(number(100.0, 1e5), number(1.0, 99.0)))
    values = draw(st.dictionaries(st.sampled_from((*stock_codes(), "ccs-25",
     "ccs-30.5")), st.floats(0.0, 1.0),
                                  max_size=4))
    package = draw(st.none() | number(1.0, 1000.0))
    sure = draw(st.dictionaries(st.sampled_from(("kv40", "kv100", "density15", "flash", "ccs-30.5")), number(0.0, 9.0),
                                max_size=3))
    return Stock(
        code, name=draw(WORDS), oil=draw(WORDS), kind=draw(st.sampled_from(KINDS)),
        api_group=draw(st.sampled_from(("", *GROUPS))), unpumpable_kg=draw(st.none() | number(0.0, 1e6)),
        price_per_t=draw(st.none() | number(0.0, 1e6)), density15=draw(st.none() | number(600.0, 1600.0)),
        kv40=kv100 * draw(number(1.5, 30.0)), kv100=kv100, blend_kv40=pair and pair[0], blend_kv100=pair and pair[1],
        values={p: lookup(p).lowest + f * (lookup(p).highest - lookup(p).lowest) for p, f in values.items()},
        on_hand_kg=draw(st.none() | number(0.0, 1e9)), package_kg=package, sigmas=sure,
        division_kg=draw(st.none() | number(0.001, package or 100.0)),
        least_charge_kg=draw(st.none() | number(0.0, 9.0)),
        tested_on=draw(st.just("") | st.dates().map(lambda d: d.isoformat())),
        source=draw(st.sampled_from(("", *SOURCES))))


@st.composite
def product_changes(draw, code: str, names: list[str], place: int) -> list:
    cells = {"name": draw(WORDS), "grade": draw(st.sampled_from(("ISO VG 46", "SAE 10W-40", "SAE 80W-90"))),
             "batch_kg": draw(st.none() | number(1.0, 1e9)), "law": draw(st.sampled_from(("", *LAWS))),
             "max_cost_per_t": draw(st.none() | number(1.0, 1e6)), "max_stocks": draw(st.none() | st.integers(1, 9)),
             "min_share_pct": draw(st.none() | number(0.0, 100.0)), "only_listed": draw(st.integers(0, 1)),
             "note": draw(WORDS), "position": place, "retired": 0}
    changes = [change_of("product", (code,), None, cells)]
    for n, prop in enumerate(draw(st.lists(st.sampled_from(("kv40", "kv-20",
     "vi", "flash", "sulfur")), max_size=4,
                                           unique=True)), 1):
        low = draw(number(1.0, 20.0))
        guard = draw(st.sampled_from([(0.0, 0.0), (0.25, 0.0), (0.0, 2.5)]))
        line = {"low": low, "high": draw(st.none() | number(20.0, 40.0)),
         "guard": guard[0], "guard_pct": guard[1],
                "unknown_ok": draw(st.integers(0, 1)), "position": n}
        changes.append(change_of("product_limit", (code, prop, 1), None, line))
    for n, of in enumerate(draw(st.lists(st.sampled_from([*names, "base",
     "group II"]), max_size=4, unique=True)), 1):
        line = {"low_pct": draw(number(0.0, 20.0)), "high_pct": draw(number(90.0, 100.0)), "position": n}
        changes.append(change_of("share_rule", (code, of, 1), None, line))
    if draw(st.booleans()):
        changes.append(change_of("extra", ("product", edits.row_key((code,)),
         "shelf"), None, {"text": "7, left"}))
    if draw(st.booleans()):
        trial = {"law": "refutas", "note": draw(WORDS), "kept_at":
         "2026-01-01T00:00:00.000Z", "kept_by": "anna"}
        changes.append(change_of("trial", (code, "first"), None, trial))
        for n, name in enumerate(names):
            changes.append(change_of("trial_share", (code, "first", name), None,
                                     {"share_pct": draw(number(0.0, 100.0)), "position": n}))
    return changes


@st.composite
def vessel_changes(draw, code: str, names: list[str], place: int) -> list:
    capacity = draw(st.none() | number(1.0, 1e6))
    share = draw(number(0.0, 1.0))
    margin = draw(st.none() | st.tuples(number(0.0, 200.0), st.dates().map(lambda d: d.isoformat())))
    vessel = Vessel(code, capacity, capacity and share * capacity, draw(st.none() | number(0.001, 100.0)),
                    capacity and 0.8 * share * capacity, draw(st.sampled_from(("", *names))), *(margin or (None, "")))
    changes = [change_of("vessel", (code,), None, {**cells_of(vessel), "position": place, "retired": 0})]
    if draw(st.booleans()):
        changes.append(change_of("extra", ("vessel", edits.row_key((code,)), "hall"), None, {"text": "north"}))
    return changes


@settings(max_examples=40, deadline=None)
@given(st.data())
def test_any_plant_comes_back_as_it_was(data):
    names = data.draw(st.lists(CODES, min_size=1, max_size=4, unique=True))
    with Plant(Database(None), Path("memory"), who="anna") as plant:
        plant.fill([], "made")
        for name in names:
            stock = data.draw(stocks(name))
            plant.change(edits.new_stock(plant, stock), "added")
            plant.change([edits.stock_cell(plant.stock(name), "on_hand_kg", stock.on_hand_kg)], "quantity")
        for place, code in enumerate(data.draw(st.lists(CODES, min_size=1, max_size=3, unique=True)), 1):
            plant.change(data.draw(product_changes(code, names, place)), "added")
        for place, code in enumerate(data.draw(st.lists(CODES, max_size=3, unique=True)), 1):
            plant.change(data.draw(vessel_changes(code, names, place)), "added")
        assert plant.verify() is None
        same(plant, again(plant))


@given(number(-1e300, 1e300))
def test_a_number_is_written_so_that_it_reads_back(value):
    assert float(text(value)) == value


# Import into a plant that is there

def test_an_import_makes_the_plant_equal_the_folder_and_can_be_undone(plant, path, folder):
    before = plant.state()
    other = folder("other", stocks="stock,kv40,kv100,price_per_t,on_hand_kg,flash,shelf\n"
                                   "C,46,6.8,900,100,220,top\nA,30.2,5.23,,50,,\n",
                   products="product,grade\nP32,ISO VG 32\nP46,ISO VG 46\n",
                   limits="product,property,low,high\nP46,vi,95,\n", shares="product,of\nP32,C\n")
    done = import_folder(other, path, who="anna")
    assert done.retired == ("B",)
    assert done.notes == ("stocks.csv: unknown column shelf: kept, not used",)
    assert [s.code for s in plant.stocks()] == ["C", "A"]
    assert [s.code for s in plant.stocks(include_retired=True)] == ["C", "A", "B"]
    same(open_plant(other), again(plant))
    assert plant.journal(1)[0].what == f"imported {other}"
    assert plant.undo() == f"undone: imported {other}"
    assert plant.state() == before
    plant.redo()
    assert [s.code for s in plant.stocks()] == ["C", "A"]
    assert plant.verify() is None


def test_the_same_folder_again_changes_nothing(plant, path, tmp_path):
    done = import_folder(tmp_path / "catalogue", path)
    assert (done.changes, done.retired, plant.revision()) == (0, (), 1)


def test_a_retired_stock_comes_back_by_an_import(plant, path, tmp_path):
    before = plant.stocks()
    plant.change([edits.retired("stock", "B")], "B retired")
    assert [s.code for s in plant.stocks()] == ["A"]
    import_folder(tmp_path / "catalogue", path)
    assert plant.stocks() == before


def test_retired_rows_stay_behind_with_a_note(plant, tmp_path):
    plant.change([edits.retired("stock", "B")], "B retired")
    assert export_plant(plant, tmp_path / "out") == ("retired, so not exported: stock B",)
    assert [s.code for s in open_plant(tmp_path / "out").stocks()] == ["A"]


def test_trials_travel_and_an_import_without_them_leaves_them(plant, path, tmp_path):
    trial = Trial("lean", "P46", {"B": 0.6, "A": 0.4}, "wright-mass", note="with less of A")
    plant.change(edits.new_trial(plant, trial), "trial kept")
    (kept,) = plant.trials("P46")
    assert (kept.name, dict(kept.shares), kept.law, kept.kept_by) == ("lean", {"B": 0.6, "A": 0.4}, "wright-mass",
                                                                     "anna")
    assert list(kept.shares) == ["B", "A"]
    same(plant, again(plant))
    import_folder(tmp_path / "catalogue", path)
    assert plant.trials() == [kept]


def test_a_trial_may_name_a_stock_that_is_gone(plant, tmp_path):
    plant.change(edits.new_trial(plant, Trial("old", "P46", {"B": 1.0})), "trial kept")
    plant.change([edits.retired("stock", "B")], "B retired")
    export_plant(plant, tmp_path / "out")
    back = open_plant(tmp_path / "out")
    assert back.notes == ("trials.csv names stocks that are not in stocks.csv: B",)
    assert back.trials() == plant.trials()


# The folder written

def test_an_export_replaces_an_older_export(plant, tmp_path):
    export_plant(plant, tmp_path / "out")
    plant.change([edits.stock_cell(plant.stock("A"), "price_per_t", 1.0)], "price")
    plant.change(edits.drop_lines(plant, "share_rule", edits.lines(plant, "share_rule", "P46")), "rules")
    export_plant(plant, tmp_path / "out")
    assert not (tmp_path / "out" / "shares.csv").exists()
    same(plant, open_plant(tmp_path / "out"))


def test_columns_that_nobody_uses_are_not_written(plant, tmp_path):
    used = {"division_kg", "package_kg", "sigma_kv40"}

    def columns() -> set[str]:
        export_plant(plant, tmp_path / "out")
        return set((tmp_path / "out" / "stocks.csv").read_text().splitlines()[0].split(","))

    assert not columns() & used
    plant.change([edits.stock_cell(plant.stock("A"), "sigma_kv40", 0.3),
                  edits.stock_cell(plant.stock("B"), "package_kg", 180.0)], "drums")
    assert columns() & used == {"package_kg", "sigma_kv40"}
    assert plant.stock("A").sigmas == {"kv40": 0.3}
    same(plant, open_plant(tmp_path / "out"))


def test_an_export_spares_a_folder_of_other_things(plant, tmp_path):
    (tmp_path / "home").mkdir()
    (tmp_path / "home" / "letter.txt").write_text("dear")
    with pytest.raises(PlantError) as caught:
        export_plant(plant, tmp_path / "home")
    assert str(caught.value) == (f"{tmp_path / 'home'} holds other things than a catalogue; "
                                 "name a new or an empty folder")
    with pytest.raises(PlantError, match=r"is a file; name a folder for the export$"):
        export_plant(plant, tmp_path / "home" / "letter.txt")


def test_an_incomplete_stock_stops_the_export_with_its_name(plant, tmp_path):
    plant.change(edits.new_stock(plant, Stock("NEW")), "NEW added")
    with pytest.raises(PlantError) as caught:
        export_plant(plant, tmp_path / "out")
    assert str(caught.value) == (
        "nothing was exported, for it would not import back: NEW kv40: a base stock needs both KV40 and KV100; "
        "enter it, or retire NEW (and 1 more)")
    assert not (tmp_path / "out").exists()


def test_a_full_disk_while_exporting_leaves_the_old_files(plant, tmp_path, monkeypatch):
    export_plant(plant, tmp_path / "out")
    before = {p.name: p.read_bytes() for p in (tmp_path / "out").iterdir()}
    plant.change([edits.stock_cell(plant.stock("A"), "price_per_t", 1.0)], "price")

    def full(handle):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("blendtui.store.export.os.fsync", full)
    with pytest.raises(PlantError) as caught:
        export_plant(plant, tmp_path / "out")
    assert str(caught.value) == (f"cannot write {tmp_path / 'out'}: no space left on device; choose another folder, "
                                 "or free some space")
    assert {p.name: p.read_bytes() for p in (tmp_path / "out").iterdir()} == before
    assert not [p for p in tmp_path.iterdir() if p.name.startswith(".out")]


def test_cells_of_unknown_columns_are_written_again(folder, tmp_path):
    place = folder(stocks="stock,kv40,kv100,shelf\nA,30,5,\"top, left\"\nB,31,5,\n",
                   products="product,grade,customer\nP,ISO VG 46,north\n",
                   limits="product,property,low,asked_by\nP,vi,95,lab\nP,vi,96,\n",
                   shares="product,of,why\nP,A,cheap\n")
    plant = open_plant(place)
    back = again(plant)
    same(plant, back)
    assert back.notes == ("stocks.csv: unknown column shelf: kept, not used",
                          "products.csv: unknown column customer: kept, not used",
                          "limits.csv: unknown column asked_by: kept, not used",
                          "shares.csv: unknown column why: kept, not used")
