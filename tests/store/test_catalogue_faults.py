"""Every kind of bad catalogue, with the line that the operator reads."""

from __future__ import annotations

import pytest

from blendtui.store.errors import CatalogueError, NoPlant
from blendtui.store.opening import import_folder, open_plant

COLUMNS = ("stock", "name", "kind", "api_group", "on_hand_kg", "unpumpable_kg", "price_per_t", "density15", "kv40",
           "kv100", "blend_kv40", "blend_kv100", "division_kg", "package_kg", "least_charge_kg", "flash", "sigma_kv40",
           "sigma_flash", "tested_on", "source")


def stock(**cells: str) -> str:
    """A stocks.csv of one good stock with some cells replaced."""
    good = {"stock": "A", "kv40": "30.2", "kv100": "5.23", **cells}
    quoted = ('"' + good.get(c, "").replace('"', '""') + '"' for c in COLUMNS)
    return f"{','.join(COLUMNS)}\n{','.join(quoted)}\n"


def product(**cells: str) -> str:
    """A products.csv of one good product with some cells replaced."""
    good = {"product": "P", "grade": "ISO VG 46", **cells}
    return ",".join(good) + "\n" + ",".join(good.values()) + "\n"


@pytest.mark.parametrize(("cells", "line"), [
    ({"kv40": "thick"}, "kv40: 'thick' is not a number; write a number such as 31.5, or leave the cell empty"),
    ({"kv40": "31,5"}, "kv40: '31,5' has a decimal comma; write 31.5"),
    ({"price_per_t": "40,000"}, "price_per_t: '40,000' can be read in two ways; write 40000 or 40.000"),
    ({"price_per_t": "0,500"}, "price_per_t: '0,500' has a decimal comma; write 0.500"),
    ({"price_per_t": "1,234.50"}, "price_per_t: '1,234.50' has marks between thousands; write 1234.50"),
    ({"flash": "−5"}, "flash: '−5' has a typographic minus; write -5"),
    ({"kv40": "nan"}, "kv40: 'nan' is not a quantity; leave the cell empty where the value is unknown"),
    ({"density15": "inf"}, "density15: 'inf' is not a quantity; leave the cell empty where the value is unknown"),
    ({"flash": "1e999"}, "flash: '1e999' is too large for a number; check the digits"),
    ({"kv40": "-30"}, "kv40: -30 mm²/s is negative; check the figure"),
    ({"kv100": "0.2"},
     "kv100: 0.2 mm²/s is below 0.3, thinner than any oil; is the unit right?"),
    ({"kv40": "5.23", "kv100": "30.2"},
     "kv100: 30.2 is not below kv40 5.23: oil thins as it warms; are the two swapped?"),
    ({"kv40": ""}, "kv40: a base stock needs both KV40 and KV100; enter it"),
    ({"kv100": "", "kind": "rework"}, "kv100: a rework stock needs both KV40 and KV100; enter it"),
    ({"blend_kv40": "70"}, "blend_kv100: one blending KV without the other; give both or neither"),
    ({"density15": "0.868"}, "density15: density 0.868 looks like kg/L; in kg/m³ it is 868"),
    ({"density15": "86.8"}, "density15: density 86.8 kg/m³ lies outside 600 to 1600; check the figure"),
    ({"flash": "700"}, "flash: flash point 700 °C lies outside -50 to 450; check the figure"),
    ({"price_per_t": "-1"}, "price_per_t: price -1 is below 0; check the figure"),
    ({"on_hand_kg": "-5"}, "on_hand_kg: quantity on hand -5 is below 0; check the figure"),
    ({"on_hand_kg": "1e12"}, "on_hand_kg: 1e12 is above 1e+09; check the figure, or leave the cell empty"),
    ({"division_kg": "-10"}, "division_kg: scale division -10 kg is not above 0; leave it empty where there is none"),
    ({"package_kg": "0"}, "package_kg: package 0 kg is not above 0; leave it empty where there is none"),
    ({"least_charge_kg": "-1"}, "least_charge_kg: least charge -1 kg is below 0; check the figure"),
    ({"division_kg": "200", "package_kg": "180"},
     "division_kg: scale division 200 kg is larger than the package of 180 kg; are the two swapped?"),
    ({"division_kg": "ten"}, "division_kg: 'ten' is not a number; write a number such as 31.5, or leave the cell "
                             "empty"),
    ({"sigma_kv40": "-0.1"}, "sigma_kv40: standard deviation -0.1 of kv40 is below 0; check the figure"),
    ({"sigma_flash": "high"}, "sigma_flash: 'high' is not a number; write a number such as 31.5, or leave the cell "
                              "empty"),
    ({"kind": "oil"}, "kind: kind 'oil' is not known; usable are base, vi_improver, additive, "
                      "pour_depressant, rework"),
    ({"api_group": "VI"}, "api_group: group 'VI' is not known; usable are I, II, III, IV, V"),
    ({"source": "friend"}, "source: source 'friend' is not known; usable are own, certificate, typical, computed"),
    ({"tested_on": "3/4/2026"}, "tested_on: '3/4/2026' is not a date; write year-month-day, such as 2026-03-01"),
    ({"tested_on": "2026-02-30"}, "tested_on: '2026-02-30' is not a date; write year-month-day, such as 2026-03-01"),
    ({"stock": ""}, "stock: the code is empty; give one"),
    ({"stock": "x" * 61}, f"stock: the code '{'x' * 39}…' has 61 characters; keep it to 60"),
    ({"stock": "A\x1b[31m"}, "stock: 'A␛[31m' holds a control character: escape (U+001B); type the text again"),
    ({"stock": "group II"}, "stock: the code 'group II' is what share rules call a kind or group; "
                            "give the stock another code"),
    ({"stock": "A=1"}, "stock: the code 'A=1' holds =, which parts a stock from its share; "
                       "give the stock another code"),
    ({"name": "\x1b]0;gone\x07"}, "name: '␛]0;gone␇' holds a control character: escape (U+001B); type the "
                                  "text again"),
    ({"name": "two\nlines"}, "name: 'two␊lines' holds a control character: line break (U+000A); type the text again"),
    ({"name": "ab\u202ecd"}, "name: 'ab\\u202ecd' holds a control character: right-to-left override (U+202E); "
                             "type the text again"),
])
def test_a_cell_of_stocks(faults, cells, line):
    assert faults(stocks=stock(**cells)) == [f"stocks.csv row 2, {line}"]


@pytest.mark.parametrize(("cells", "line"), [
    ({"grade": "ISO VG 47"}, "grade: unknown grade 'ISO VG 47'; known are ISO VG 2, 3, 5, 7, 10, 15, 22, 32, 46, "
                             "68, 100, 150, 220, 320, 460, 680, 1000, 1500, 2200, 3200; SAE 0W, 5W, 10W, 15W, 20W, "
                             "25W, 8, 12, 16, 20, 30, 40, 50, 60 (engine) and SAE 70W, 75W, 80W, 85W, 65, 70, 75, "
                             "80, 85, 90, 110, 140, 190, 250 (gear), also as SAE 10W-40 or SAE 80W-90"),
    ({"law": "guess"}, "law: law 'guess' is not known; usable are refutas, walther-mass, walther-volume, "
                       "wright-mass, wright-volume"),
    ({"batch_kg": "0"}, "batch_kg: 0 is not above 0; check the figure, or leave the cell empty"),
    ({"max_cost_per_t": "-3"}, "max_cost_per_t: -3 is not above 0; check the figure, or leave the cell empty"),
    ({"max_stocks": "2.5"}, "max_stocks: 2.5 is not a whole number; write one such as 4"),
    ({"max_stocks": "0"}, "max_stocks: 0 is below 1; check the figure, or leave the cell empty"),
    ({"min_share_pct": "101"}, "min_share_pct: 101 is above 100; check the figure, or leave the cell empty"),
    ({"only_listed": "maybe"}, "only_listed: 'maybe' is neither yes nor no; write yes or no"),
    ({"grade": ""}, "product: 'P' has neither a grade nor a line in limits.csv; give it a grade or a limit"),
])
def test_a_cell_of_products(faults, cells, line):
    assert faults(products=product(**cells)) == [f"products.csv row 2, {line}"]


@pytest.mark.parametrize(("row", "line"), [
    ("Q,kv40,40,50,", "product: 'Q' is not in products.csv; add it there or mend the code"),
    ("P46,colour,40,50,", "property: unknown property 'colour'; known are kv40, kv100, kv<°C>, vi, density15, flash, "
                          "pour, noack, sulfur, base_number, acid_number, ash, water, calcium"),
    ("P46,kv400,40,50,", "property: kv400: the temperature must lie between −60 to 200 °C; "
                         "see the list of properties in the help"),
    ("P46,,40,50,", "property: the property is empty; name one, such as kv40 or flash"),
    ("P46,kv40,50,40,", "low: low 50 is above high 40; swap or mend them"),
    ("P46,kv40,,,", "low: the line has neither a low nor a high nor a guard; give it one, or take it out"),
    ("P46,flash,,,5", "guard: a guard without a limit: neither the grade of P46 nor another line limits flash; "
                      "give the line a low or a high"),
    ("P46,kv40,,,-1", "guard: -1 is below 0; check the figure, or leave the cell empty"),
    ("P46,kv40,,,80%", "guard: 80 is above 50; check the figure, or leave the cell empty"),
    ("P46,kv40,-2,,", "low: -2 lies outside 0.3 to 2e+07 mm²/s; check the figure and its unit"),
    ("P46,density15,,0.91,", "high: 0.91 looks like kg/L; in kg/m³ it is 910"),
    ("P46,kv40,x,,", "low: 'x' is not a number; write a number such as 31.5, or leave the cell empty"),
])
def test_a_line_of_limits(faults, row, line):
    found = faults(limits=f"product,property,low,high,guard\n{row}\n")
    assert len(found) == 1
    assert found[0].startswith(f"limits.csv row 2, {line}")


def test_what_a_limit_lets_serve_unknown_is_one_word(faults):
    assert faults(limits="product,property,low,high,guard,unknown\nP46,flash,200,,,perhaps\n") == [
        "limits.csv row 2, unknown: 'perhaps' is not known; write allow, or leave the cell empty"]


@pytest.mark.parametrize(("rows", "lines"), [
    (["C,,50"], ["row 2, of: 'C' is no stock, oil, kind or group of stocks.csv; mend the name or add the stock"]),
    (["group VII,,50"], ["row 2, of: group 'VII' is not known; usable are I, II, III, IV, V"]),
    ([",,50"], ["row 2, of: the rule names nothing; name a stock, an oil, a kind or a group such as group II"]),
    (["A,-1,50"], ["row 2, low_pct: -1 is below 0; check the figure, or leave the cell empty"]),
    (["A,,150"], ["row 2, high_pct: 150 is above 100; check the figure, or leave the cell empty"]),
    (["A,60,50"], ["row 2, low_pct: low 60 is above high 50; swap or mend them"]),
    (["A,60,", "A,,50"], ["row 2, of: its low 60 is above the high 50 of another line on A; mend one of the two"]),
    (["A,60,", "B,50,"], ["row 3, of: the lows of A, B sum to 110 %, more than 100 %; lower one of them"]),
    (["A,40,", "B,30,", "base,,60"], ["row 4, of: its high 60 is below what A, B must have, 70 %; "
                                      "raise the high or lower the other rules"]),
])
def test_share_rules_that_contradict(faults, rows, lines):
    text = "product,of,low_pct,high_pct\n" + "".join(f"P46,{r}\n" for r in rows)
    assert faults(shares=text) == [f"shares.csv {line}" for line in lines]


@pytest.mark.parametrize(("text", "line"), [
    (b"", "stocks.csv: the file is empty; it needs a header row with the columns stock, kv40, kv100"),
    (b"\n\n", "stocks.csv: the file is empty; it needs a header row with the columns stock, kv40, kv100"),
    (b"stock,kv40,kv100\n", "stocks.csv: there is no stock in the file; add a row for each stock"),
    (b"stock,kv40\nA,30\n", "stocks.csv row 1, kv100: this column is missing; add it; the file has stock, kv40"),
    (b"stock,KV40,kv100\nA,30,5\n", "stocks.csv row 1, KV40: the heading is not spelt as it must be; write kv40"),
    (b"stock,kv40,kv100,kv40\nA,30,5,30\n", "stocks.csv row 1, kv40: two columns have this heading; keep "
                                            "one of them"),
    (b"stock,kv40,kv100,\nA,30,5,\n", "stocks.csv row 1: a column has no heading; name it, or take the column out"),
    (b"stock;kv40;kv100\nA;30;5\n", "stocks.csv row 1: the columns are not separated by commas; "
                                    "save it as CSV with commas"),
    (b"stock,kv40,kv100\nA,31,5,5.2\n", "stocks.csv row 2: the row has 4 cells and the header 3; a comma too many? "
                                        "write decimals with a point, and put text that holds a comma in quotes"),
    (b"stock,kv40,kv100\nA,31\n", "stocks.csv row 2: the row has 2 cells and the header 3; "
                                  "add the commas of the empty cells"),
    (b"stock,kv40,kv100\nB,30,5\nA\xe9,31,5\n", "stocks.csv row 3: is not UTF-8 (byte 0xe9); save it as CSV UTF-8"),
    ("stock,kv40,kv100\nA,31,5\n".encode("utf-16"), "stocks.csv: is UTF-16, not UTF-8; save it as CSV UTF-8"),
    (b"stock,kv40,kv100\nA\0,31,5\n", "stocks.csv row 2: holds a null byte, so it is no text file; "
                                      "export it again as CSV UTF-8"),
    (b'stock,kv40,kv100\n"A,31,5\n', "stocks.csv row 2: the quotation marks do not pair (unexpected end of data); "
                                     'close the quote, and write a quote inside a cell as ""'),
])
def test_the_shape_of_a_file(faults, text, line):
    assert faults(stocks=text) == [line]


def test_two_stocks_of_one_code_are_named_with_both_rows(faults):
    assert faults(stocks="stock,kv40,kv100\nA,30,5\nB,31,5\nA,32,5\n") == [
        "stocks.csv row 4, stock: the code 'A' stands in row 2 already; give each stock its own code"]


def test_two_products_of_one_code(faults):
    assert faults(products="product,grade\nP,VG 46\nP,VG 32\n") == [
        "products.csv row 3, product: the code 'P' stands in row 2 already; give each product its own code"]


def test_missing_files_are_named(faults, tmp_path):
    assert faults(stocks=None, products=None) == [
        f"stocks.csv: there is no such file in {tmp_path / 'catalogue'}; add it with the columns stock, kv40, kv100",
        f"products.csv: there is no such file in {tmp_path / 'catalogue'}; add it with the columns product"]


def test_all_faults_of_all_files_come_at_once_in_order(folder):
    place = folder(stocks="stock,kv40,kv100\nA,x,5\nB,30,40\n", products="product,grade\nP,ISO VG 46\nQ,\n",
                   limits="product,property,low,high\nP,kv40,60,50\n", shares="product,of\nP,nobody\n")
    with pytest.raises(CatalogueError) as caught:
        open_plant(place)
    assert [(f.file, f.row, f.column) for f in caught.value.faults] == [
        ("stocks.csv", 2, "kv40"), ("stocks.csv", 3, "kv100"), ("products.csv", 3, "product"),
        ("limits.csv", 2, "low"), ("shares.csv", 2, "of")]
    assert str(caught.value) == ("stocks.csv row 2, kv40: 'x' is not a number; write a number such as 31.5, "
                                 "or leave the cell empty (and 4 more)")


def test_rows_are_counted_as_an_editor_counts_them(faults):
    text = 'stock,kv40,kv100,remark\nA,30,5,"two\nlines"\n\nB,30,y,\n'
    assert faults(stocks=text) == [
        "stocks.csv row 2, remark: 'two␊lines' holds a control character: line break (U+000A); type the text again",
        "stocks.csv row 5, kv100: 'y' is not a number; write a number such as 31.5, or leave the cell empty"]


def test_a_folder_with_faults_makes_no_plant(folder, tmp_path):
    with pytest.raises(CatalogueError):
        import_folder(folder(stocks="stock,kv40,kv100\nA,x,5\n"), tmp_path / "new.plant")
    assert sorted(p.name for p in tmp_path.iterdir()) == ["catalogue"]


def test_a_folder_with_faults_leaves_the_plant_as_it_was(plant, path, folder):
    before = plant.state()
    with pytest.raises(CatalogueError):
        import_folder(folder("other", stocks="stock,kv40,kv100\nC,30,5\nA,x,5\n"), path)
    assert plant.state() == before
    assert plant.revision() == 1


def test_no_such_folder(tmp_path):
    with pytest.raises(NoPlant) as caught:
        import_folder(tmp_path / "none", tmp_path / "x.plant")
    assert str(caught.value) == (f"{tmp_path / 'none'} is not a folder; name the folder that holds stocks.csv and "
                                 "products.csv")


# What is no fault

def test_codes_stay_the_text_they_are(folder):
    plant = open_plant(folder(stocks="stock,name,kv40,kv100\n007,NA,30,5\nNA,null,30.0,5\n1e3,,30,5\n"))
    assert [(s.code, s.name) for s in plant.stocks()] == [("007", "NA"), ("NA", "null"), ("1e3", "")]


def test_a_byte_order_mark_and_windows_lines_are_read(folder):
    plant = open_plant(folder(stocks="\ufeffstock,kv40,kv100\r\nA,30,5\r\n\r\nB,31,5\r\n"))
    assert [s.code for s in plant.stocks()] == ["A", "B"]


def test_an_empty_cell_is_unknown_and_never_zero(folder):
    (stock,) = open_plant(folder(stocks="stock,kv40,kv100,flash,on_hand_kg,price_per_t\nA,30,5,,,\n")).stocks()
    assert (stock.on_hand_kg, stock.price_per_t, dict(stock.values)) == (None, None, {})


def test_unknown_columns_and_files_are_reported(folder):
    place = folder(stocks="stock,kv40,kv100,ccs-25,shelf\nA,30,5,1500,7\n", kettles="vessel\nK1\n")
    plant = open_plant(place)
    assert plant.notes == ("stocks.csv: unknown column shelf: kept, not used", "kettles.csv is not read")
    assert plant.stock("A").values == {"ccs-25": 1500.0}


def test_a_grade_and_a_line_that_leave_nothing_between_them_are_taken(folder):
    plant = open_plant(folder(limits="product,property,low,high\nP46,kv40,60,\n"))
    assert plant.product("P46").limits[0].low == 60.0


def test_lines_are_read_in_their_order_with_guards(folder):
    plant = open_plant(folder(
        limits="product,property,low,high,guard,unknown\nP46,flash,200,,5,allow\nP46,kv40,,,2%,\nP46,kv40,42,,1,\n",
        shares="product,of,low_pct,high_pct\nP46,group i,,50\nP46,A,10,\n"))
    product = plant.product("P46")
    assert [(x.property, x.low, x.high, x.guard, x.guard_pct, x.unknown_ok) for x in product.limits] == [
        ("flash", 200.0, None, 5.0, 0.0, True), ("kv40", None, None, 0.0, 2.0, False),
        ("kv40", 42.0, None, 1.0, 0.0, False)]
    assert [(r.of, r.low, r.high) for r in product.rules] == [("group I", 0.0, 0.5), ("A", 0.1, 1.0)]


@pytest.mark.parametrize(("heading", "right"), [
    ("Flash", "flash"), ("CCS-25", "ccs-25"), ("ccs −25", "ccs-25"), ("Base Number", "base_number"),
    ("Sulphur", "sulfur"), ("Flash point", "flash"), ("Density15", "density15")])
def test_a_property_in_another_spelling(faults, heading, right):
    assert faults(stocks=f"stock,kv40,kv100,{heading}\nA,30,5,1\n") == [
        f"stocks.csv row 1, {heading}: the heading is not spelt as it must be; write {right}"]


@pytest.mark.parametrize(("heading", "right"), [("Sigma KV40", "sigma_kv40"), ("σ flash", "sigma_flash"),
                                                ("Division kg", "division_kg")])
def test_a_heading_that_is_spelt_otherwise_is_not_passed_over(faults, heading, right):
    assert faults(stocks=f"stock,kv40,kv100,{heading}\nA,30.2,5.23,1\n") == [
        f"stocks.csv row 1, {heading}: the heading is not spelt as it must be; write {right}"]
