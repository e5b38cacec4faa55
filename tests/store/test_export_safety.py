"""An export spoils nothing of others, imports back without a change, and the desk takes nothing that would not."""

from __future__ import annotations

import os
import random

import pytest

from blendtui.desk import stocks as desk
from blendtui.desk import targets, trials
from blendtui.desk.errors import DeskError
from blendtui.store import edits
from blendtui.store.errors import PlantError
from blendtui.store.opening import export_plant, import_folder, open_plant
from blendtui.store.records import Trial
from solver.errors import SolverError


def held(folder) -> dict[str, bytes]:
    return {p.name: p.read_bytes() for p in folder.iterdir() if p.is_file()}


@pytest.mark.parametrize(("file", "content"), [
    ("stocks.csv", "ticker,price\nXYZ,3\n"), ("products.csv", "shop\n"), ("limits.csv", "speed,road\n"),
    ("shares.csv", "owner,percent\n"), ("trials.csv", "my own notes\n"), ("trials.csv", ""),
    ("products.csv", b"\xff\xfe\x00"), ("shares.csv", b"\x00")])
def test_files_that_are_not_a_catalogues_are_left_alone(plant, folder, file, content):
    place = folder("out")
    (place / file).write_bytes(content if isinstance(content, bytes) else content.encode())
    before = held(place)
    with pytest.raises(PlantError) as caught:
        export_plant(plant, place)
    assert str(caught.value) == (f"{place / file} is not a catalogue's {file}, so it is left alone and nothing was "
                                 "written; move it away, or name a new folder")
    assert held(place) == before


def test_a_folder_in_the_place_of_a_file_is_seen_before_anything_is_written(plant, folder):
    place = folder("out", products=None)
    (place / "products.csv").mkdir()
    before = held(place)
    with pytest.raises(PlantError, match=r"products\.csv is not a catalogue's products\.csv"):
        export_plant(plant, place)
    assert held(place) == before
    assert sorted(p.name for p in place.iterdir()) == ["products.csv", "stocks.csv"]


def test_a_new_folder_comes_whole_or_not_at_all(plant, tmp_path, monkeypatch):
    seen = []
    real = os.rename
    monkeypatch.setattr("blendtui.store.export.os.rename",
                        lambda old, new: (seen.append((sorted(held(old)), new.exists())), real(old, new)))
    export_plant(plant, tmp_path / "deep" / "out")
    assert seen == [(["limits.csv", "products.csv", "shares.csv", "stocks.csv"], False)]
    assert [p.name for p in (tmp_path / "deep").iterdir()] == ["out"]
    mask = os.umask(0)
    os.umask(mask)
    assert (tmp_path / "deep" / "out").stat().st_mode & 0o777 == 0o777 & ~mask


def test_other_files_of_a_catalogue_folder_stay(plant, folder):
    place = folder("out")
    (place / "kettles.csv").write_text("mine")
    export_plant(plant, place)
    assert (place / "kettles.csv").read_text() == "mine"
    assert not [p for p in place.iterdir() if p.name.startswith(".")]


# Back in without a change

def test_ones_own_export_changes_nothing(plant, path, tmp_path):
    """Though rows in the middle are retired and dropped, so that numbers of places have gaps."""
    for code in ("C", "D", "E"):
        desk.add_stock(plant, code)
        desk.edit_cell(plant, code, "kv40", "30/5", confirmed=True)
    desk.retire_stock(plant, "D")
    targets.copy_product(plant, "P46", "P47")
    targets.copy_product(plant, "P46", "P48")
    targets.retire_product(plant, "P47")
    for product in ("P46", "P48"):
        targets.set_limit(plant, product, "flash", "200")
        targets.set_limit(plant, product, "pour", "", "-12")
        targets.drop_limit(plant, product, "flash")
        targets.set_rule(plant, product, "C", "", "50")
        targets.set_rule(plant, product, "E", "", "40")
        targets.drop_rule(plant, product, "C")
    trials.keep_trial(plant, Trial("lean", "P48", {"C": 0.3, "A": 0.7}))
    export_plant(plant, tmp_path / "out")
    before = plant.state()
    assert import_folder(tmp_path / "out", path).changes == 0
    assert plant.state() == before


def test_lines_keep_their_numbers(plant, path, tmp_path, folder):
    place = folder("two", limits="product,property,low,high,asked_by\nP46,vi,90,,\nP46,vi,95,,lab\nP46,kv40,,50,\n")
    import_folder(place, path)
    rows = plant.table("product_limit")
    key = ("P46", "vi", 1)
    plant.change(edits.drop_lines(plant, "product_limit", [(key, rows[key])]), "the first of two dropped")
    export_plant(plant, tmp_path / "out")
    assert import_folder(tmp_path / "out", path).changes == 0
    assert [k for k in plant.table("product_limit") if k[1] == "vi"] == [("P46", "vi", 2)]
    assert [r["text"] for r in plant.table("extra").values()] == ["lab"]


def test_another_order_is_taken_over(plant, path, folder):
    place = folder("turned", stocks="stock,kv40,kv100\nB,98.5,10.9\nN,30,5\nA,30.2,5.23\n")
    import_folder(place, path)
    assert [s.code for s in plant.stocks()] == ["B", "N", "A"]
    assert import_folder(place, path).changes == 0
    import_folder(folder("more", stocks="stock,kv40,kv100\nB,98.5,10.9\nN,30,5\nA,30.2,5.23\nZ,30,5\n"), path)
    assert [s.code for s in plant.stocks()] == ["B", "N", "A", "Z"]


# Trials

def test_unknown_columns_of_trials_travel(plant, path, folder, tmp_path):
    place = folder("tried", trials="product,name,stock,share_pct,bench\nP46,lean,A,40,seven\nP46,lean,B,60,\n")
    assert import_folder(place, path).notes == ("trials.csv: unknown column bench: kept, not used",)
    export_plant(plant, tmp_path / "out")
    assert "P46,lean,refutas,A,40,,,,seven" in (tmp_path / "out" / "trials.csv").read_text()
    import_folder(tmp_path / "catalogue", path)  # says nothing of trials
    assert [r["text"] for r in plant.table("extra").values()] == ["seven"]
    trials.drop_trial(plant, "P46", "lean")
    assert (plant.table("extra"), plant.trials()) == ({}, [])
    plant.undo()
    assert plant.table("extra")


@pytest.mark.parametrize("share", [float("nan"), float("inf"), 1.1, -0.01])
def test_a_trial_of_impossible_shares_is_refused(plant, share):
    with pytest.raises(DeskError, match=r"^P46 trial odd: the share of A is .* %; a share lies between 0 and 100 %$"):
        trials.keep_trial(plant, Trial("odd", "P46", {"A": share}))


def test_noise_in_a_share_is_cut_off(plant, tmp_path):
    trials.keep_trial(plant, Trial("lean", "P46", {"A": 1.0 + 1e-12, "B": -1e-13}))
    assert dict(plant.trials()[0].shares) == {"A": 1.0, "B": 0.0}
    export_plant(plant, tmp_path / "out")
    assert open_plant(tmp_path / "out").trials() == plant.trials()


def test_a_trial_that_would_not_import_is_named(plant, tmp_path):
    plant.change(edits.new_trial(plant, Trial("odd", "P46", {"A": 1.0}, law="guesswork")), "kept past the desk")
    with pytest.raises(PlantError, match=r"^nothing was exported, for it would not import back: trial odd of P46 law: "
                                         r"law 'guesswork' is not known; .*, or drop that trial$"):
        export_plant(plant, tmp_path / "out")
    with pytest.raises(DeskError, match=r"^trial: law 'guesswork' is not known"):
        trials.keep_trial(plant, Trial("x", "P46", {"A": 1.0}, law="guesswork"))


# What the desk takes can be imported

def test_a_batch_is_at_most_what_a_catalogue_may_say(plant):
    with pytest.raises(DeskError, match=r"^2e9 is more than 1e\+09 kg; check the unit$"):
        targets.edit_product(plant, "P46", "batch_kg", "2e9")
    targets.edit_product(plant, "P46", "batch_kg", "1e9")


NUMBERS = ("0", "5e-324", "1e308", "1e9", "1e22", "0.1", "33.3", "150", "-12", "-0", "2%", "12 t", "100", "1e-7")
WORDS = ("007", "NA", 'a"b', "'x", "a,b", " lead", "日本", "e\u0301", "-inf", "x" * 60, "½", "=1+1")
STOCK_CELLS = ("on_hand_kg", "unpumpable_kg", "price_per_t", "flash", "noack", "pour", "ccs-25", "density15")
PRODUCT_CELLS = ("batch_kg", "max_cost_per_t", "max_stocks", "min_share_pct")


def anything(plant, chance: random.Random) -> None:
    """One edit of some kind, with something odd typed."""
    code, number, word = chance.choice("AB"), chance.choice(NUMBERS), chance.choice(WORDS)
    match chance.randrange(7):
        case 0:
            desk.edit_cell(plant, code, chance.choice(STOCK_CELLS), number, True)
        case 1:
            desk.edit_cell(plant, code, chance.choice(("name", "oil")), word, True)
        case 2:
            targets.edit_product(plant, "P46", chance.choice(PRODUCT_CELLS), number)
        case 3:
            targets.edit_product(plant, "P46", chance.choice(("name", "note")), word)
        case 4:
            prop = chance.choice(("kv60", "flash", "pour", "density15", "ccs-25"))
            targets.set_limit(plant, "P46", prop, number, "", chance.choice(("", number)))
        case 5:
            targets.set_rule(plant, "P46", chance.choice(("A", "B", "base")), number, "")
        case 6:
            trials.keep_trial(plant, Trial(word, "P46", {code: chance.random()}, note=word))


def test_what_the_desk_takes_at_random_is_exported_and_imported(plant, tmp_path):
    chance = random.Random(7)
    for step in range(300):
        try:
            anything(plant, chance)
        except (DeskError, SolverError, PlantError):
            continue
        if step % 10 == 0:
            export_plant(plant, tmp_path / f"out{step}")
    export_plant(plant, tmp_path / "last")
    assert open_plant(tmp_path / "last").stocks() == plant.stocks()


def test_a_quantity_finer_than_a_milligram_says_what_is_kept(plant):
    done = desk.edit_cell(plant, "A", "on_hand_kg", "1.00000049", confirmed=True)
    assert (done.status, done.message) == ("saved", "A on hand 40000 → 1; kept to the milligram: 1 kg")
    assert plant.stock("A").on_hand_kg == 1.0
    done = desk.edit_cell(plant, "A", "on_hand_kg", "1.0000004", confirmed=True)
    assert (done.status, done.message) == ("unchanged", "A on hand: unchanged; kept to the milligram: 1 kg")
    assert desk.edit_cell(plant, "A", "on_hand_kg", "12 t", confirmed=True).message == "A on hand 1 → 12000"
