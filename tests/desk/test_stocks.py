"""Editing stocks: units, what is refused, what is questioned, several people; adding, copying, retiring."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from blendtui.desk import stocks
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import open_plant
from blendtui.desk.stocks import Edit, edit_cell
from blendtui.store.errors import ChangedSince, NoSuchRow, ReadOnlyPlant
from blendtui.store.opening import import_folder
from blendtui.store.plant import Plant
from solver.errors import ScaleError
from solver.stocks import Stock


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    folder = tmp_path / "catalogue"
    folder.mkdir()
    (folder / "stocks.csv").write_text(
        "stock,name,oil,kind,api_group,on_hand_kg,price_per_t,density15,kv40,kv100,flash,sulfur,tested_on,source,shelf\n"
        "A,north,LN,base,I,40000,820,870,30.2,5.23,214,0.41,2026-03-01,own,7\n"
        "B,,LN,base,I,20000,815,871,31.5,5.34,,,,,\nM,,,base,II,35000,870,,98.5,10.9,,,,,\n"
        "P,,,additive,,900,3400,,,,,,,,\nD,,,pour_depressant,,90,3400,,,,,,,,\n")
    (folder / "products.csv").write_text("product,grade\nH46,ISO VG 46\nH32,ISO VG 32\n")
    (folder / "shares.csv").write_text("product,of,low_pct,high_pct\nH46,P,0.85,0.85\nH46,LN,,\nH46,M,,\nH32,A,,\n"
                                       "H32,pour_depressant,0.1,\n")
    import_folder(folder, tmp_path / "x.plant", who="anna")
    with open_plant(tmp_path / "x.plant", who="anna") as opened:
        yield opened


@pytest.mark.parametrize(("cell", "typed", "value", "message"), [
    ("kv40", "31.0", 31.0, "A KV40 30.2 → 31"),
    ("kv40", "31 cSt", 31.0, "A KV40 30.2 → 31"),
    ("price_per_t", "0.9 /kg", 900.0, "A price 820 → 900"),
    ("price_per_t", "", None, "A price 820 → unknown"),
    ("density15", "0.868 kg/L", 868.0, "A density 870 → 868"),
    ("flash", "410F", 210.0, "A flash point 214 → 210"),
    ("flash", "", None, "A flash point 214 → unknown"),
    ("pour", "-12", -12.0, "A pour point unknown → -12"),
    ("ccs-25", "35 P", 3500.0, "A cold cranking at -25 °C unknown → 3500"),
    ("sulfur", "4000 ppm", 0.4, "A sulphur 0.41 → 0.4"),
    ("sulfur", "0.4 %", 0.4, "A sulphur 0.41 → 0.4"),
    ("zinc", "0.05 %", 500.0, "A zinc unknown → 500"),
    ("base_number", "5 mgKOH/g", 5.0, "A base number unknown → 5"),
    ("on_hand_kg", "12 t", 12000.0, "A on hand 40000 → 12000"),
    ("on_hand_kg", "3500 L", 3045.0, "A on hand 40000 → 3045"),
    ("on_hand_kg", "", None, "A on hand 40000 → unknown"),
    ("unpumpable_kg", "1000 lb", 453.59237, "A bottoms unknown → 453.59237"),
    ("division_kg", "10 kg", 10.0, "A scale step unknown → 10"),
    ("package_kg", "0.18 t", 180.0, "A package unknown → 180"),
    ("least_charge_kg", "0", 0.0, "A least charge unknown → 0"),
    ("sigma_kv40", "1 %", 0.302, "A σ KV at 40 °C unknown → 0.302"),
    ("sigma_kv100", "0.05 cSt", 0.05, "A σ KV at 100 °C unknown → 0.05"),
    ("sigma_flash", "9 F", 5.0, "A σ flash point unknown → 5"),
    ("sigma_sulfur", "0.02 %", 0.02, "A σ sulphur unknown → 0.02"),
    ("name", " tank 3 ", "tank 3", "A name north → tank 3"),
    ("name", "", "", "A name north → empty"),
    ("tested_on", "2026-04-05", "2026-04-05", "A tested on 2026-03-01 → 2026-04-05"),
    ("source", "Certificate", "certificate", "A source own → certificate"),
    ("api_group", "", "", "A group I → empty"),
])
def test_a_cell_takes_what_is_typed(plant, cell, typed, value, message):
    before = plant.state()
    assert edit_cell(plant, "A", cell, typed) == Edit("saved", message)
    found = stocks.value_of(plant.stock("A"), cell)
    assert found == (pytest.approx(value, rel=1e-12) if isinstance(value, float) else value)
    assert plant.journal(1)[0].what == message
    assert plant.undo() == f"undone: {message}"
    assert plant.state() == before


@pytest.mark.parametrize(("cell", "typed"), [("kv40", "30.2"), ("kv40", "30.20"), ("kv40", "="), ("name", "north"),
                                             ("pour", ""), ("on_hand_kg", "40 t"), ("source", "OWN")])
def test_what_is_there_already_is_no_change(plant, cell, typed):
    assert edit_cell(plant, "A", cell, typed).status == "unchanged"
    assert plant.revision() == 1


@pytest.mark.parametrize(("cell", "typed", "message"), [
    ("kv40", "4", "A: kv100 5.23 is not below kv40 4: oil thins as it warms; are the two swapped?"),
    ("kv40", "-30", "A: kv40 -30 mm²/s is negative"),
    ("kv100", "0.2", "A: kv100 0.2 mm²/s is below 0.3, thinner than any oil; is the unit right?"),
    ("density15", "0.868", "A: density 0.868 looks like kg/L; in kg/m³ it is 868"),
    ("flash", "700", "A: flash point 700 °C lies outside -50 to 450"),
    ("on_hand_kg", "-1", "A: quantity on hand -1 is below 0"),
    ("on_hand_kg", "2e9", "2e9 is more than 1e+09 kg; check the unit"),
    ("kind", "oil", "kind 'oil' is not known; usable are base, vi_improver, additive, pour_depressant, rework"),
    ("api_group", "VI", "group 'VI' is not known; usable are I, II, III, IV, V"),
    ("tested_on", "1/4/2026", "'1/4/2026' is not a date; write year-month-day, such as 2026-03-01"),
    ("name", "x\x1b[2J", "'x␛[2J' holds a control character: escape (U+001B); type the text again"),
    ("colour", "1", "a stock has no 'colour'; it has name, oil, kind, api_group, on_hand_kg, unpumpable_kg, "
                    "price_per_t, density15, kv40, kv100, blend_kv40, blend_kv100, division_kg, package_kg, "
                    "least_charge_kg, flash, pour, noack, sulfur, base_number, acid_number, ash, water, calcium, "
                    "magnesium, zinc, phosphorus, boron, saturates, tested_on, source, ccs<°C> and sigma_<property>"),
    ("division_kg", "-1", "A: scale division -1 kg is not above 0; leave it empty where there is none"),
    ("package_kg", "0", "A: package 0 kg is not above 0; leave it empty where there is none"),
    ("least_charge_kg", "-5", "A: least charge -5 kg is below 0"),
    ("sigma_kv40", "-0.1", "A: standard deviation -0.1 of kv40 is below 0"),
    ("sigma_pour", "5 %", "A: pour is unknown, so 5 % of it is too; type it in °C"),
])
def test_what_cannot_be_true_is_refused(plant, cell, typed, message):
    with pytest.raises(DeskError) as caught:
        edit_cell(plant, "A", cell, typed, confirmed=True)
    assert str(caught.value) == message
    assert plant.revision() == 1


@pytest.mark.parametrize(("code", "cell", "typed"), [
    ("A", "kv40", "thick"), ("A", "kv40", "31,5"), ("A", "kv40", "215 SUS"), ("A", "kv40", "30 cP"),
    ("A", "kv40", "nan"), ("M", "on_hand_kg", "3500 L"), ("A", "flash", "210 mm"), ("A", "sulfur", "3 kg")])
def test_what_cannot_be_placed_is_refused_by_the_scales(plant, code, cell, typed):
    with pytest.raises(ScaleError):
        edit_cell(plant, code, cell, typed)
    assert plant.revision() == 1


@pytest.mark.parametrize(("cell", "typed", "message", "suggestion"), [
    ("flash", "430", "A: flash point 430 °C is unusual (120 to 310); was it °F? that is 221.1 °C", "221.1"),
    ("pour", "16", "A: pour point 16 °C is high; was it °F (-8.9 °C), or a minus forgotten?", "-8.9"),
    ("price_per_t", "0.82", "A: price 0.82 per tonne is low; was it meant per kg?", "820"),
    ("kv100", "12", "A: KV40 30.2 and KV100 12 mean a viscosity index of 416; base stocks lie between 0 and 180. "
                    "Is one of them in SUS, or from another oil?", None),
])
def test_what_is_unlikely_is_a_question(plant, cell, typed, message, suggestion):
    assert edit_cell(plant, "A", cell, typed) == Edit("question", message, suggestion)
    assert plant.revision() == 1
    assert edit_cell(plant, "A", cell, typed, confirmed=True).status == "saved"
    assert stocks.value_of(plant.stock("A"), cell) == float(typed)


def test_a_deviation_as_large_as_a_part_of_its_value_is_a_question(plant):
    assert edit_cell(plant, "A", "sigma_kv40", "20") == Edit(
        "question", "A: standard deviation 20 of kv40 30.2 is more than 25 % of it; was it meant in %?", "6.04")
    assert edit_cell(plant, "A", "sigma_kv40", "20", confirmed=True).status == "saved"
    assert plant.stock("A").sigmas == {"kv40": 20.0}


def test_a_scale_step_larger_than_the_package_is_refused(plant):
    edit_cell(plant, "P", "package_kg", "180")
    with pytest.raises(DeskError) as caught:
        edit_cell(plant, "P", "division_kg", "200")
    assert str(caught.value) == ("P: scale division 200 kg is larger than the package of 180 kg; are the two "
                                 "swapped?")
    assert edit_cell(plant, "P", "division_kg", "0.5").status == "saved"
    assert stocks.text_of(plant.stock("P"), "division_kg") == "0.5"


def test_how_sure_a_value_is_has_a_column_where_some_stock_says_it(plant):
    assert "sigma_flash" not in [c.code for c in stocks.cells_for(plant.stocks())]
    edit_cell(plant, "A", "sigma_flash", "4.5")
    (column,) = [c for c in stocks.cells_for(plant.stocks()) if c.code == "sigma_flash"]
    assert (column.heading, column.unit) == ("σ flash point", "°C")
    assert stocks.text_of(plant.stock("A"), column) == "4.50"
    assert edit_cell(plant, "A", "sigma_flash", "").message == "A σ flash point 4.5 → unknown"


def test_an_old_doubt_is_not_asked_again(plant):
    edit_cell(plant, "A", "flash", "430", confirmed=True)
    assert edit_cell(plant, "A", "price_per_t", "830").status == "saved"


def test_a_saybolt_pair_gives_both_viscosities_in_one_entry(plant):
    edit = edit_cell(plant, "A", "kv100", "215/46 SUS", confirmed=True)
    stock = plant.stock("A")
    assert (stock.kv40, stock.kv100) == (pytest.approx(41.4, abs=0.2), pytest.approx(5.9, abs=0.1))
    assert edit.message.startswith(f"A KV40 30.2 → {stock.kv40:.12g}, KV100 5.23 → {stock.kv100:.12g}; "
                                   "215 SUS at 100 °F and 46 SUS at 210 °F are KV40 ")
    plant.undo()
    assert (plant.stock("A").kv40, plant.stock("A").kv100) == (30.2, 5.23)


def test_a_pair_may_be_typed_for_the_blending_viscosities(plant):
    edit_cell(plant, "P", "blend_kv40", "215/46 SUS")
    stock = plant.stock("P")
    assert stock.blend_kv40 > stock.blend_kv100 > 5.0
    assert stock.kv40 is None


def test_a_stock_is_typed_in_cell_by_cell(plant):
    stocks.add_stock(plant, "NEW")
    assert edit_cell(plant, "NEW", "kv40", "31").message == (
        "NEW KV40 unknown → 31; a base stock needs both KV40 and KV100; kv100 is empty")
    assert edit_cell(plant, "NEW", "kv100", "5.3").message == "NEW KV100 unknown → 5.3"
    assert edit_cell(plant, "P", "blend_kv40", "70").message == (
        "P blending KV40 unknown → 70; one blending KV without the other; give both or neither")


def test_a_cell_that_another_changed_meanwhile(plant, tmp_path):
    seen = plant.stock("A").price_per_t
    with open_plant(tmp_path / "x.plant", who="bertil") as other:
        edit_cell(other, "A", "price_per_t", "900")
        at = other.journal(1)[0].at
    with pytest.raises(ChangedSince) as caught:
        edit_cell(plant, "A", "price_per_t", "850", seen=seen)
    assert str(caught.value) == (f"A price is now 900: bertil changed it at {at} (A price 820 → 900); "
                                 "look again and repeat the change")
    assert edit_cell(plant, "A", "price_per_t", "850", seen=900.0).status == "saved"


@pytest.mark.parametrize(("cell", "seen"), [("on_hand_kg", 1.0), ("flash", None), ("name", "south")])
def test_every_kind_of_cell_is_compared_with_what_was_seen(plant, cell, seen):
    with pytest.raises(ChangedSince):
        edit_cell(plant, "A", cell, "5", seen=seen)


def test_an_unknown_stock(plant):
    with pytest.raises(NoSuchRow, match=r"^no stock 'Z'; the plant has A, B, M, P, D$"):
        edit_cell(plant, "Z", "kv40", "31")


def test_a_catalogue_folder_says_how_to_edit(tmp_path, plant):
    folder = open_plant(tmp_path / "catalogue")
    with pytest.raises(ReadOnlyPlant, match="blendtui import"):
        edit_cell(folder, "A", "kv40", "31")


# How cells are shown

@pytest.mark.parametrize(("cell", "shown", "line"), [
    ("kv40", "30.20", "30.2"), ("on_hand_kg", "40000", "40000"), ("price_per_t", "820.00", "820"),
    ("density15", "870.0", "870"), ("flash", "214", "214"), ("sulfur", "0.410", "0.41"), ("pour", "", ""),
    ("kind", "base", "base"), ("tested_on", "2026-03-01", "2026-03-01")])
def test_cells_as_shown_and_as_edited(plant, cell, shown, line):
    stock = plant.stock("A")
    assert stocks.text_of(stock, stocks.cell(cell)) == shown
    assert stocks.edit_text(stock, cell) == line


def test_a_shown_name_cannot_drive_the_terminal():
    stock = Stock("A", name="x\x1b[2J")
    assert stocks.text_of(stock, "name") == "x␛[2J"
    assert stocks.edit_text(stock, "name") == "x␛[2J"


@pytest.mark.parametrize(("value", "shown"), [(12345.6, "12346"), (1234.56, "1235"), (123.456, "123.5"),
                                              (9.99996, "10.00"), (0.45678, "0.4568"), (0.0, "0")])
def test_four_figures(value, shown):
    assert stocks.figures(value) == shown


def test_columns_follow_the_stocks():
    codes = [c.code for c in stocks.cells_for([Stock("A", values={"ccs-25": 1.0, "flash": 2.0})])]
    assert codes[-3:] == ["ccs-25", "tested_on", "source"]
    assert codes.count("flash") == 1


def test_derived_figures():
    vi, slope = stocks.derived(Stock("A", kv40=30.2, kv100=5.23))
    assert vi == pytest.approx(103.4, abs=0.1)
    assert slope == pytest.approx(3.743, abs=0.001)
    assert stocks.derived(Stock("A", kv40=5.0, kv100=1.7))[0] is None
    assert stocks.derived(Stock("A", kv40=5.0)) == (None, None)
    assert stocks.derived(Stock("A", kv40=5.0, kv100=6.0)) == (None, None)


# Stocks as a whole

def test_a_stock_is_added_at_the_end(plant):
    stock = stocks.add_stock(plant, " N7 ")
    assert stock == Stock("N7")
    assert [s.code for s in plant.stocks()][-1] == "N7"
    plant.undo()
    assert [s.code for s in plant.stocks()][-1] == "D"
    plant.redo()
    assert plant.stock("N7") == stock


@pytest.mark.parametrize(("code", "message"), [
    ("A", "there is a stock A already; give the new one another code"),
    ("", "the code is empty; give one"),
    ("base", "the code 'base' is what share rules call a kind or group; give the stock another code"),
    ("a\tb", "'a␉b' holds a control character: tab (U+0009); type the text again"),
])
def test_a_code_that_cannot_be(plant, code, message):
    for act in (lambda: stocks.add_stock(plant, code), lambda: stocks.copy_stock(plant, "M", code)):
        with pytest.raises(DeskError) as caught:
            act()
        assert str(caught.value) == message


def test_a_copy_has_every_cell_but_the_quantity(plant):
    copy = stocks.copy_stock(plant, "A", "A2")
    original = plant.stock("A")
    assert (copy.code, copy.on_hand_kg) == ("A2", None)
    assert (copy.division_kg, dict(copy.sigmas)) == (original.division_kg, dict(original.sigmas))
    assert (copy.name, copy.oil, copy.kv40, dict(copy.values)) == ("north", "LN", 30.2, dict(original.values))
    assert ("stock", '["A2"]', "shelf") in plant.state()["extra"]
    plant.undo()
    assert ("stock", '["A2"]', "shelf") not in plant.state()["extra"]


def test_retiring_takes_the_rules_that_only_allowed_it(plant):
    before = plant.state()
    assert stocks.retire_stock(plant, "A") == "A retired; the rules of H32 that allowed it are gone"
    assert [s.code for s in plant.stocks()] == ["B", "M", "P", "D"]
    assert [r.of for r in plant.product("H46").rules] == ["P", "LN", "M"]
    assert [r.of for r in plant.product("H32").rules] == ["pour_depressant"]
    plant.undo()
    assert plant.state() == before


def test_the_last_tank_of_an_oil_takes_the_rules_on_the_oil(plant):
    assert stocks.retire_stock(plant, "B") == "B retired"
    assert stocks.retire_stock(plant, "A") == "A retired; the rules of H46, H32 that allowed it are gone"


@pytest.mark.parametrize(("code", "message"), [
    ("P", "H46 demands 0.85 % of P, and P is the last of it; change that rule first"),
    ("D", "H32 demands 0.1 % of pour_depressant, and D is the last of it; change that rule first")])
def test_a_stock_that_a_product_demands_stays(plant, code, message):
    with pytest.raises(DeskError) as caught:
        stocks.retire_stock(plant, code)
    assert str(caught.value) == message


def test_an_oil_that_a_rule_names_keeps_its_last_tank(plant):
    edit_cell(plant, "A", "oil", "")
    with pytest.raises(DeskError) as caught:
        edit_cell(plant, "B", "oil", "OTHER")
    assert str(caught.value) == "H46 has a rule on the oil LN, and B is its last tank; change that rule first"


def test_a_retired_code_is_taken_up_again_with_nothing_of_the_old(plant):
    before = plant.state()
    stocks.retire_stock(plant, "A")
    assert stocks.add_stock(plant, "A", kv40=46.0) == Stock("A", kv40=46.0)
    plant.undo()
    plant.undo()
    assert plant.state() == before
    assert plant.verify() is None


@pytest.mark.parametrize(("cell", "typed", "suggestion", "then"), [
    ("density15", "0.868", "868", {"density15": 868.0}),
    ("kv100", "86", "86/30.2", {"kv40": 86.0, "kv100": 30.2})])
def test_what_cannot_be_true_names_what_would_do(plant: Plant, cell: str, typed: str, suggestion: str,
                                                 then: dict[str, float]) -> None:
    asked = edit_cell(plant, "A", cell, typed)
    assert (asked.status, asked.refused, asked.suggestion) == ("question", True, suggestion)
    with pytest.raises(DeskError):
        edit_cell(plant, "A", cell, typed, confirmed=True)
    assert edit_cell(plant, "A", cell, suggestion, confirmed=True).status == "saved"
    assert {c: getattr(plant.stock("A"), c) for c in then} == then


def test_a_pair_is_read_as_both_viscosities(plant: Plant) -> None:
    edit = edit_cell(plant, "A", "kv100", "480/31.5 cSt")
    assert edit.message == "A KV40 30.2 → 480, KV100 5.23 → 31.5; read as KV40/KV100"
