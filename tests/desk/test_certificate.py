"""The certificate of analysis: laboratory results only, with limits, method and the record's last hash."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import pytest

from blendtui.desk import certificate, release, targets
from blendtui.desk.certificate_html import certificate_html
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import open_plant
from blendtui.desk.stocks import edit_cell
from blendtui.store.batch_records import PACKED, Decision, Result
from blendtui.store.plant import Plant
from solver.target import Limit
from solver.viscosity_index import viscosity_index
from tests.desk.made_batches import DAY, all_charged, at, drawn, ordered, plant_file, put, sampled

STOCKS = """stock,oil,kind,on_hand_kg,price_per_t,density15,kv40,kv100,flash
A,LIGHT,base,90000,800,868,30.6,5.23,214
B,,base,90000,1100,897,490,32,300
"""
PRODUCTS = "product,name,grade\nP100,Circulating oil <100> & more,ISO VG 100\n"
LIMITS = "product,property,low,high,guard\nP100,kv40,,,2%\nP100,vi,95,,2\nP100,flash,205,,\n"
RESULTS = {"kv40": 101.234, "kv100": 11.456, "flash": 238.4, "density15": 880.12}


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    path = plant_file(tmp_path / "c", stocks=STOCKS, products=PRODUCTS, limits=LIMITS)
    with open_plant(path, who="erik") as opened:
        yield opened


def released(plant: Plant, results: dict[str, float] = RESULTS, **order: object) -> certificate.Certificate:
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0}, **order)
    all_charged(plant)
    sampled(plant, 1, results, place="middle", decision="release")
    release.release(plant, "B-0001", by="Fritz")
    return certificate.certificate(plant, "B-0001")


def test_refused_before_release(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, RESULTS, decision="release")
    with pytest.raises(DeskError, match="B-0001 is open, not released: a certificate speaks of a released batch only"):
        certificate.certificate(plant, "B-0001")


def test_results_limits_and_methods(plant):
    made = released(plant)
    assert [(x.property, x.shown, x.unit, x.method, *x.bounds) for x in made.lines] == [
        ("kv40", "101.2", "mm²/s", "ASTM D445", "90", "110"),
        ("kv100", "11.46", "mm²/s", "ASTM D445", "", ""),
        ("vi", "100", "", "ASTM D2270, calculated from KV40 and KV100", "95", ""),
        ("flash", "238", "°C", "ASTM D92", "205", ""),
        ("density15", "880.1", "kg/m³", "ASTM D4052", "", "")]
    vi = made.lines[2]
    assert (vi.calculated, vi.value) == (True, viscosity_index(101.234, 11.456))
    assert {x.on for x in made.lines} == {DAY}


def test_never_the_prediction(plant):
    """The laws say another KV40, and the stocks have a flash point: without a result there is no line."""
    made = released(plant, {"kv40": 101.234, "kv100": 11.456, "flash": 238.4})
    assert [x.property for x in made.lines] == ["kv40", "kv100", "vi", "flash"]
    edit_cell(plant, "A", "kv40", "29")
    assert certificate.certificate(plant, "B-0001").lines == made.lines


def test_a_viscosity_index_that_was_typed_gives_way_to_the_viscosities(plant):
    made = released(plant, {**RESULTS, "vi": 108.0})
    assert [x.value for x in made.lines if x.property == "vi"] == [viscosity_index(101.234, 11.456)]


def test_withdrawn_results_are_not_on_it_and_repeats_by_their_mean(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, RESULTS)
    put(plant, Result("B-0001", 1, 8, "kv40", 70.0, "ASTM D445", at(9, 35), "dora", "wrong bath"),
        Result("B-0001", 1, 9, "kv40", 101.634, "ASTM D7042", at(9, 36), "dora"),
        Decision("B-0001", 1, 1, "release", "", at(9, 40), "dora"))
    release.release(plant, "B-0001")
    made = certificate.certificate(plant, "B-0001")
    kv40 = made.lines[0]
    assert (kv40.value, kv40.count, kv40.method) == (pytest.approx(101.434), 2, "ASTM D445, ASTM D7042")
    assert "Mean of repeated results: KV at 40 °C (2)." in certificate.notes(made)


def test_the_heading(plant):
    made = released(plant, order_no="4711", customer="Möller & Söhne")
    drawn(plant, PACKED, 9950.0)
    made = certificate.certificate(plant, "B-0001")
    facts = dict(certificate.facts(made))
    assert facts["Product"] == "P100  Circulating oil <100> & more"
    assert (facts["Grade"], facts["Customer"], facts["Order"]) == ("ISO VG 100", "Möller & Söhne", "4711")
    assert (facts["Ordered"], facts["Packed"]) == ("10000 kg", "9950 kg")
    assert facts["Sample"].startswith(f"1, drawn {DAY} ")
    assert facts["Sample"].endswith(", middle")
    assert facts["Released"].endswith(" by Fritz")
    assert (made.entry, made.hash) == (plant.revision(), plant.last_hash())


def test_who_asks_for_a_limit(plant):
    goal = targets.target_of(plant, "P100")
    goal = replace(goal, limits=(*goal.limits, Limit("kv40", 96.0, 104.0, source="customer Möller")))
    made = released(plant, target=goal)
    assert made.lines[0].bounds == ("96", "104")
    assert [x for x in certificate.notes(made) if x.startswith("Limits of")] == [
        "Limits of grade ISO VG 100: KV at 40 °C.", "Limits of customer Möller: KV at 40 °C.",  # no word of the guard
        "Limits of the product: viscosity index, flash point."]


def test_a_release_against_the_results_says_why(plant):
    ordered(plant, "P100", {"A": 6000.0, "B": 4000.0})
    all_charged(plant)
    sampled(plant, 1, {**RESULTS, "kv40": 111.0, "kv100": 12.2}, decision="release", why="the customer agrees")
    release.release(plant, "B-0001")
    made = certificate.certificate(plant, "B-0001")
    assert "Released with a reason: the customer agrees." in certificate.notes(made)


def test_what_the_results_do_not_tell(plant):
    goal = replace(targets.target_of(plant, "P100"), grade="SAE 30", limits=())
    made = released(plant, {"kv40": 101.0, "kv100": 11.4}, target=goal)
    assert "Not told by these results: HTHS at 150 °C at least 2.9 mPa·s." in certificate.notes(made)


def test_the_text(plant):
    made = released(plant, customer="A customer with a very long name, its street, its town and its country " * 2)
    text = certificate.certificate_text(made)
    lines = text.splitlines()
    assert max(map(len, lines)) <= 80
    assert lines[0] == "CERTIFICATE OF ANALYSIS"
    head = next(n for n, line in enumerate(lines) if line.startswith("property"))
    assert lines[head + 2] == "KV at 40 °C, mm²/s       ASTM D445       2026-05-04     101.2       90      110"
    assert certificate.CAUTION in " ".join(line.strip() for line in lines)
    assert certificate.FROM_RESULTS in " ".join(line.strip() for line in lines)
    assert plant.last_hash() in text
    assert "predict" not in text


class _Page(HTMLParser):
    """What a page refers to, and whether every tag is closed."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.outside: list[str] = []
        self.text = ""

    def handle_starttag(self, tag, attrs):
        self.outside += [value or "" for name, value in attrs if name in ("src", "href")]
        if tag != "meta":
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.text += data


def test_the_page_stands_alone_and_shows_names_as_they_are(plant):
    made = released(plant, customer='<script>alert("x")</script>', order_no="A\x1b[2J")
    page = _Page()
    source = certificate_html(made)
    page.feed(source)
    assert (page.open, page.outside) == ([], [])
    assert "<script" not in source
    assert "\x1b" not in source
    assert "@import" not in source
    assert "url(" not in source
    assert "size: A4" in source
    for words in ('<script>alert("x")</script>', "Circulating oil <100> & more", "101.2", "ASTM D2270"):
        assert words in page.text
    assert plant.last_hash() in page.text
    assert certificate.CAUTION in page.text


def test_a_file_is_never_written_over(tmp_path):
    file = tmp_path / "coa.txt"
    assert certificate.write_new(file, "one") == f"certificate written to {file}"
    with pytest.raises(DeskError, match="is there already; choose another name or move the old certificate away"):
        certificate.write_new(file, "two")
    assert file.read_text() == "one"
    with pytest.raises(DeskError, match=r"cannot write .*; choose another place"):
        certificate.write_new(tmp_path / "none" / "coa.txt", "x")


def test_json(plant):
    found = certificate.certificate_json(released(plant))
    assert found["results"][0]["value"] == 101.234
    assert found["packed_kg"] is None
    assert found["record"] == {"entry": plant.revision(), "hash": plant.last_hash()}
