"""The card: readings, litres, lots, cautions that clear nothing; 80 columns and plain ASCII; HTML that stands alone."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from html.parser import HTMLParser
from pathlib import Path

import pytest

from blendtui.desk import charging, numbers, orders, targets, vessels
from blendtui.desk.card import Card, card, card_json, card_text
from blendtui.desk.card_html import card_html
from blendtui.desk.cautions import DECIDES, cautions
from blendtui.desk.orders import Order, take
from blendtui.desk.plant import open_plant
from blendtui.desk.sheet import NOT_A_CERTIFICATE
from blendtui.store.batch_edits import changed, tank_parts
from blendtui.store.batch_records import DROPPED, Charge, Lot, Vessel
from blendtui.store.errors import PlantError
from blendtui.store.plant import Plant
from blendtui.store.records import Step
from solver.stocks import Stock
from solver.walther import line as d341
from tests.desk.made_batches import charged, drawn, plant_file, put
from tests.desk.order_plant import order_plant

CLEARED = re.compile(r"\b(ok|okay|safe|safely|cleared|clearance|permitted|allowed|acceptable|fine|sufficient|enough)\b")


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    with open_plant(order_plant(tmp_path / "c"), who="anna") as opened:
        yield opened


@pytest.fixture
def made(plant: Plant) -> Card:
    take(plant, Order("P46", 10000, "K1", customer="Orlin Mills", order_no="4711", limits={"vi": ("95", "")},
                      line=(40, "N32"), tank_c={"N100": 45.0}), by="Berta")
    return card(plant, "B-0001")


def text(plant: Plant, name: str = "B-0001") -> str:
    return card_text(card(plant, name))


# What it says

def test_the_scale_runs_from_the_heel_and_from_nothing(made: Card) -> None:
    assert made.start_kg == 140  # heel and line
    reading, tared = 140.0, 0.0
    for line in made.lines:
        reading, tared = reading + line.kg, tared + line.kg
        assert (line.reading_kg, line.tared_kg) == (pytest.approx(reading), pytest.approx(tared))
    assert made.total_kg == pytest.approx(reading)


def test_litres_are_those_at_the_tanks_temperature(made: Card) -> None:
    by_stock = {x.stock: x for x in made.lines}
    # ASTM D1250: about 0.07 % a degree (practice: 10 °C ignored is 0.7 % of the volume).
    warm, cool = by_stock["N100"], by_stock["N32"]
    assert (warm.charge.celsius, cool.charge.celsius) == (45.0, 20.0)
    assert warm.litres == pytest.approx(1000 * warm.kg / 880 * (1 + 30 * 0.000715), rel=1e-3)
    assert cool.litres == pytest.approx(1000 * cool.kg / 868 * (1 + 5 * 0.000715), rel=1e-3)


def test_the_viscosity_at_mixing_temperature_is_that_of_the_blend(plant: Plant) -> None:
    take(plant, Order("ONE", 2500, "K2", mix_c=55))
    made = card(plant, "B-0001")
    assert made.mix_kv == pytest.approx(float(d341(32.0, 5.4).kv(55.0)), rel=1e-9)  # one oil: its own D341 line
    assert f"MIX at 55 deg C; predicted KV there {made.mix_kv:.2f} mm2/s" in card_text(made)
    assert made.fill_pct == pytest.approx(100 * (made.fill_l or 0) / 4000)


def test_every_charge_has_its_tank_lot_limits_and_boxes(plant: Plant, made: Card) -> None:
    said = card_text(made)
    for line in made.lines:
        assert re.search(rf"^ +{line.charge.line}  {line.stock} ", said, re.MULTILINE)
    assert said.count("kg _________  lot ______________  time ______  by ________  check ________") == len(made.lines)
    assert "Medium neutral (tank 2)" in said
    assert "by 0.5 kg on its own scale" in said
    assert "Light neutral (tank 1) (rinse)" in said
    assert "lot not on record: write down what it says (tested 2026-03-01, own)" in said
    put(plant, *(Lot("N100", lot, "2026-05-01T00:00:00.000Z", 9000.0) for lot in ("M-7", "M-6")))
    plant.step(lambda: Step(tuple(tank_parts("N100", {}, {"M-7": 0.75, "M-6": 0.25})), "lots"))
    assert "lot M-7 75.0 %, M-6 25.0 % (tested 2026-03-01, own)" in text(plant)


def test_drums_and_codes_that_look_alike_are_told_apart(plant: Plant) -> None:
    from blendtui.desk.stocks import add_stock

    add_stock(plant, "MV")
    add_stock(plant, "KP")
    add_stock(plant, "N33")
    targets.set_rule(plant, "P46", "VM", "3", "6")
    take(plant, Order("P46", 8000, "K1"))
    flat = " ".join(text(plant).split())
    assert "2 x 180 kg, each one's lot written down, empties weighed" in flat
    alike = {x.stock: x.alike for x in card(plant, "B-0001").lines}
    assert alike == {"N32": (), "VM": ("MV",), "PK": ("PD", "KP"), "PD": ("PK",), "AF": ()} | {
        c: a for c, a in alike.items() if c == "N100"}
    assert "NOT MV" in flat
    assert "NOT PD, KP" in flat
    assert "NOT N33" not in flat  # bulk oil is told apart by its tank


def test_it_pins_the_record_and_the_formula(plant: Plant, made: Card) -> None:
    said = card_text(made)
    assert (made.entry, made.hash) == (plant.revision(), plant.last_hash())
    assert f"Record: entry {made.entry},\n  {made.hash}" in said
    assert f"Formula as of journal entry {made.made.head.formula_entry}; law refutas." in said
    assert NOT_A_CERTIFICATE in said
    assert "THE PRODUCT HAS CHANGED" not in said
    targets.set_limit(plant, "P46", "flash", "200", "")
    flat = " ".join(text(plant).split())
    assert "*** THE PRODUCT HAS CHANGED SINCE THIS ORDER (limit on flash point): the order stands as of journal" in flat
    assert "blendtui batch redesign B-0001 takes the new one" in flat


def test_it_shows_what_was_done_dropped_or_closed(plant: Plant, made: Card) -> None:
    first = made.lines[0]
    charged(plant, 1, first.kg + 15, by="anna", checked_by="")
    charge = plant.batch("B-0001").charges[3]
    plant.step(lambda: Step((changed(charge, state=DROPPED, why="none left"),), "missed"))
    after = card(plant, "B-0001")
    said = " ".join(card_text(after).split())
    assert f"CHARGED {first.kg + 15:g} kg (planned {first.kg:g}) by anna" in said
    assert "SECOND CHECK ____" in said
    assert f"line {charge.line} {charge.stock} dropped: none left" in said
    assert f"Second check missing: line 1 {first.stock}" in said
    assert after.lines[0].lots == {"N32-7": 1.0}
    assert after.lines[1].reading_kg == pytest.approx((made.lines[1].reading_kg or 0) + 15)
    assert after.lines[3].reading_kg is None
    assert "trim 1" not in said
    drawn(plant, "sample", 2.0)
    put(plant, Charge("B-0001", 7, 1, "G320", "", 100.0, 5.0, 20.0, position=70))
    trimmed = card(plant, "B-0001")
    assert trimmed.lines[-1].reading_kg == pytest.approx(trimmed.total_kg)
    assert re.search(r"^ +trim 1$", card_text(trimmed), re.MULTILINE)
    assert "trim 1" in card_html(trimmed)
    assert card(plant, "B-0001").lines[1].reading_kg == pytest.approx((made.lines[1].reading_kg or 0) + 13)
    orders.cancel(plant, "B-0001", why="leak", sure=True)
    assert "*** THIS BATCH IS CANCELLED: DO NOT CHARGE ***" in text(plant)


def test_an_ignored_heel_is_said_and_what_it_breaks_is_marked(plant: Plant) -> None:
    take(plant, Order("P46", 8000, "K1", heel_kg=400, heel_stock="G320", heel_ignored="drained by hand"))
    flat = " ".join(text(plant).split())
    assert "heel and line are LEFT OUT of the sums: drained by hand" in flat
    assert card(plant, "B-0001").start_kg == 400
    vessels.set_cell(plant, "K1", "heel_kg", "0")
    take(plant, Order("P46", 8000, "K1"), sure=True)
    assert "IN THE VESSEL: nothing; see that it is empty, clean and dry" in text(plant, "B-0002")


def test_there_is_no_card_of_what_is_no_batch(plant: Plant) -> None:
    with pytest.raises(PlantError, match="no batch 'B-0099'; the plant has none yet"):
        card(plant, "B-0099")


# Cautions

def of(made: Card, title: str) -> str:
    return next(f"{c.reason}. {c.advice}" for c in made.cautions if c.title == title)


def test_flash_sets_the_figures_side_by_side_and_clears_nothing(plant: Plant, made: Card) -> None:
    assert of(made, "Flash").startswith(
        "lowest flash that goes in: 150 °C (PK); mixing temperature: 60 °C; the site's margin: 30 °C, typed on "
        "2026-01-12. The lowest flash in the vessel and the heater skin count, not the blend's mean.")
    kettle = Vessel("K", flash_margin_c=30.0, flash_margin_on="2026-01-12")
    warned = cautions([Stock("A", values={"flash": 80.0})], kettle, 60.0)
    assert warned[0].warns
    assert "THE MIXING TEMPERATURE IS INSIDE THE SITE'S MARGIN TO THE LOWEST FLASH" in warned[0].advice
    bare = cautions([Stock("A", values={"flash": 58.0}), Stock("B")], Vessel("K"), 60.0)[0]
    assert "the site's margin is not typed for this vessel" in bare.reason
    assert "flash unknown: B" in bare.reason
    assert "THE MIXING TEMPERATURE IS AT OR ABOVE THE LOWEST FLASH" in bare.advice
    assert "30" not in bare.reason  # a margin has no default


def test_the_heel_counts_for_the_flash(plant: Plant) -> None:
    cells = {"kv40": "40", "kv100": "6.4", "density15": "870", "flash": "95"}
    take(plant, Order("P46", 8000, "K1", heel_kg=20, heel_stock="", heel_cells=cells, mix_c=70))
    flash = of(card(plant, "B-0001"), "Flash")
    assert "lowest flash that goes in: 95 °C (HEEL)" in flash
    assert "INSIDE THE SITE'S MARGIN" in flash


def test_each_caution_has_its_reason_in_these_stocks(made: Card) -> None:
    assert [c.title for c in made.cautions] == [
        "Flash", "Water", "Room", "Static", "Sulphur and phosphorus additives", "Concentrates", "Vessel and nitrogen"]
    assert "heated to 60 °C; water in PK 240 mg/kg" in of(made, "Water")
    assert re.match(r"\d+ L at 60 °C, \d\d\.\d % of 15000 L, least fill 4000 L", of(made, "Room"))
    assert of(made, "Static").startswith("pumped oil: N32, N100.")
    assert of(made, "Sulphur and phosphorus additives").startswith("PK (S 6.5 %, P 30000 mg/kg).")
    assert "PK, PD, AF" in of(made, "Concentrates")
    cold = cautions([Stock("A", values={"flash": 200.0, "water": 20.0})], None, 25.0)
    assert [c.title for c in cold] == ["Flash", "Static", "Vessel and nitrogen"]
    over = cautions([], Vessel("K", capacity_l=100.0), 60.0, fill_l=120.0)
    assert any(c.warns and "IT DOES NOT FIT" in c.advice for c in over)


def test_the_fill_is_of_what_was_made_and_not_of_what_is_left(plant: Plant, made: Card) -> None:
    for line in made.lines:
        charged(plant, line.charge.line)
    whole = card(plant, "B-0001")
    assert whole.fill_l == pytest.approx(made.fill_l)
    drawn(plant, "packed", 10000.0, hour=20)
    drawn(plant, "left", 140.0, hour=21)
    packed = card(plant, "B-0001")
    assert packed.made.in_vessel_kg == pytest.approx(made.total_kg - 10140.0)
    assert (packed.fill_l, packed.total_kg) == (whole.fill_l, whole.total_kg)
    assert packed.mix_kv == whole.mix_kv
    assert of(packed, "Room") == of(whole, "Room")
    assert [x.reading_kg for x in packed.lines] == [x.reading_kg for x in whole.lines]


def test_an_oil_of_the_recipe_is_a_rinse_only_after_itself_and_not_in_a_trim(plant: Plant, made: Card) -> None:
    put(plant, Charge("B-0001", 20, 1, "N32", "", 200.0, 10.0, 20.0, position=20),
        Charge("B-0001", 21, 1, "N32", "", 50.0, 10.0, 20.0, position=21))
    trim = [x for x in card(plant, "B-0001").lines if x.charge.round == 1]
    assert [x.rinse for x in trim] == [False, True]
    assert [x.rinse for x in made.lines if x.stock == "N32"] == [False, True]


def test_no_caution_ever_clears_anything(plant: Plant, made: Card) -> None:
    far = Vessel("K", 1e4, 10.0, flash_margin_c=1.0, flash_margin_on="2026-01-01")
    for each in (*made.cautions, *cautions([Stock("A", values={"flash": 300.0})], far, 20.0)):
        words = f"{each.title} {each.reason} {each.advice}"
        assert each.advice.endswith(DECIDES)
        assert not CLEARED.search(words.lower().replace("safety data sheet", "")), words
    for said in (card_text(made), card_html(made)):
        assert not CLEARED.search(re.sub(r"(?s)<style>.*?</style>", "", said).lower()), CLEARED.search(said.lower())
        assert "✓" not in said


# Paper

WORST = "Wörst; näme, of <b>all</b> & more — " * 3


@pytest.fixture
def worst(tmp_path: Path) -> Iterator[Plant]:
    """A plant whose names are as long and as odd as a catalogue may have them."""
    oil = "OIL-" + "W" * 56
    kettle = "KETTLE-" + "V" * 53
    product = "PRODUCT-" + "P" * 52
    path = plant_file(
        tmp_path / "w",
        stocks="stock,name,kind,on_hand_kg,price_per_t,density15,kv40,kv100,flash,division_kg,package_kg\n"
               f'{oil},"{WORST}",base,900000,800,868,32,5.4,212,0.125,\n'
               f'PK,"{WORST}",additive,90000,3000,1010,90,9.1,150,,180\n',
        products=f'product,name,grade\n{product},"{WORST}",\n',
        limits=f"product,property,low,high\n{product},kv40,25,50\n",
        shares=f"product,of,low_pct,high_pct\n{product},PK,1,3\n",
        vessels=f"vessel,capacity_l,heel_kg,heel_stock\n{kettle},9000000,1234.567891,{oil}\n")
    with open_plant(path, who="w" * 60) as opened:
        yield opened


def test_no_line_is_wider_than_the_paper_whatever_the_names(worst: Plant) -> None:
    stock, kettle, product = worst.stocks()[0].code, worst.vessels()[0].vessel, worst.products()[0].product
    name = "BATCH-" + "B" * 54
    order = Order(product, 123456.789123, kettle, customer=WORST, order_no=WORST, name=name, note=WORST * 2,
                  limits={"density15": ("", "1000")}, line=(77.123456, stock), flush=(5.5, stock, True))
    take(worst, order, by="x" * 60)
    lots = {f"LOT-{'L' * 50}-{n}": 0.1 for n in range(10)}
    put(worst, *(Lot(stock, lot, "2026-05-01T00:00:00.000Z", 1.0) for lot in lots))
    worst.step(lambda: Step(tuple(tank_parts(stock, {}, lots)), "lots"))
    said = text(worst, name)
    assert max(map(len, said.splitlines())) <= 80
    assert said.isascii()
    assert "\x1b" not in said
    for part in ("OIL-WWWW", "KETTLE-VVV", "PRODUCT-PPP", "BATCH-BBB", "LOT-LLL"):
        assert part in said
    json.dumps(card_json(card(worst, name)), allow_nan=False)


def test_every_line_of_an_ordinary_card_fits_too(plant: Plant, made: Card) -> None:
    for said in (card_text(made), text(plant)):
        assert max(map(len, said.splitlines())) <= 80
        assert said.isascii()


class Reader(HTMLParser):
    """Checks that tags close in the order in which they opened, and gathers text and attributes."""

    VOID = ("meta", "br", "col")

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.tags: set[str] = set()
        self.attributes: list[tuple[str, str | None]] = []
        self.words = ""

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        self.attributes += attrs
        if tag not in self.VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.words += data


def test_the_page_stands_alone_and_reads_no_name_as_html(worst: Plant) -> None:
    kettle, product = worst.vessels()[0].vessel, worst.products()[0].product
    evil = "<script>alert(1)</script><img src=http://x/y onerror=z> & \"quoted\""
    take(worst, Order(product, 12000, kettle, customer=evil, note=evil))
    page = card_html(card(worst, "B-0001"))
    reader = Reader()
    reader.feed(page)
    assert reader.open == []
    assert "<script>alert(1)</script>" in reader.words  # as text
    assert not reader.tags & {"script", "img", "link", "iframe", "object", "form"}
    assert {name for name, _ in reader.attributes} <= {"lang", "charset", "class", "style"}
    assert "http" not in page.replace("http://x/y", "")  # but in the name of the customer
    assert "@page { size: A4" in page
    assert "url(" not in page
    for words in ("Charges, in this order", "second check", "Record: entry", NOT_A_CERTIFICATE, "start"):
        assert words in reader.words


def test_the_page_has_what_the_text_has(plant: Plant, made: Card) -> None:
    reader = Reader()
    reader.feed(card_html(made))
    page = " ".join(reader.words.split())
    for line in made.lines:
        assert line.stock in page
        assert f"{round(line.reading_kg or 0, 3):.10g}" in page
    for caution in made.cautions:
        assert " ".join(caution.advice.split()) in page
    assert made.hash in page
    for code in ("kv100", "density15"):  # predicted, though nothing limits them
        assert made.recipe is not None
        assert numbers.value(code, made.recipe.predicted[code]) in page
    assert "after a charge that differs, go by the kg of the next" in page
    charging.charge(plant, "B-0001", 1, made.lines[0].kg, lot="L", by="anna", sure=True)
    charging.miss(plant, "B-0001", 5, why="none on the yard", by="anna")
    page = card_html(card(plant, "B-0001"))
    assert f"Line 5 {made.lines[4].stock} dropped: none on the yard (anna)" in page
    assert f"Second check missing: line 1 {made.lines[0].stock}" in page
    targets.set_limit(plant, "P46", "flash", "200", "")
    assert "The product has changed since this order" in card_html(card(plant, "B-0001"))


def test_json_has_every_number_unrounded(plant: Plant, made: Card) -> None:
    answer = json.loads(json.dumps(card_json(made), allow_nan=False))
    assert answer["charges"][0]["litres"] == made.lines[0].litres
    assert answer["mix_kv"] == made.mix_kv
    assert answer["predicted"]["kv40"] == (made.recipe.predicted["kv40"] if made.recipe else None)
    assert answer["record"] == {"entry": made.entry, "hash": made.hash}
    assert [c["what"] for c in answer["contents"]] == ["heel", "line"]
    assert answer["batch"] == "B-0001"
