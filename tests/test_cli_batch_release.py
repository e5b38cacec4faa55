"""The headless `batch trim`, `batch release` and `batch certificate`: text of at most 80 columns, JSON, exit codes."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path

import pytest

from blendtui import cli
from blendtui.store.opening import import_folder, open_plant
from blendtui.store.plant import Plant
from tests.desk.made_batches import all_charged, at, charged, drawn, ordered, sampled

ROOT = Path(__file__).parent.parent
CHARGES = {"LN15A": 1500.0, "HT06": 12300.0, "HT12": 1040.0, "HP85": 127.5, "PD20": 30.0}
THIN = {"kv40": 40.3, "kv100": 6.45}
GOOD = {"kv40": 45.9, "kv100": 7.05, "flash": 229.0, "pour": -18.0}


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    """The example plant with a batch of hydraulic oil, all charged."""
    import_folder(ROOT / "stock_catalog_example", tmp_path / "x.plant", who="anna")
    with open_plant(tmp_path / "x.plant", who="anna") as opened:
        ordered(opened, "HYD-46", CHARGES, customer="Hansa Werke", order_no="4711")
        all_charged(opened)
        yield opened


@pytest.fixture
def batch(plant: Plant, capsys):
    """Runs `blendtui batch …` on the plant: exit code, stdout, stderr."""

    def run(*words: str) -> tuple[int, str, str]:
        code = cli.main(["batch", *words, "--plant", str(plant.path)])
        out, err = capsys.readouterr()
        lines = [x for x in out.splitlines() if " written to " not in x]  # a path is never broken
        assert max(map(len, lines or [""])) <= 80 or "--json" in words
        return code, out, err

    return run


def answer(batch, *words: str, code: int = 0) -> dict:
    found, out, _ = batch(*words, "--json")
    assert found == code
    return json.loads(out, parse_constant=lambda text: pytest.fail(f"{text} is no JSON"))


def test_trim(batch, plant):
    sampled(plant, 1, THIN, decision="trim")
    code, out, _ = batch("trim", "B-0001", "--aim", "mass")
    assert code == 0
    assert out.startswith("B-0001 trim 1 (least mass), from sample 1: add ")
    assert "KV at 40 °C, mm²/s       40.30" in out
    assert "viscosity index" in out
    assert "- flash point was not measured: 22" in out
    assert "- 14997.5 kg are in the vessel by the book" in out
    assert out.rstrip().endswith("A calculated blend is not a certificate: the laboratory releases.")
    found = answer(batch, "trim", "B-0001", "--aim", "mass")
    assert (found["status"], found["taken"], found["round"], found["in_vessel_kg"]) == ("optimal", False, 1, 14997.5)
    assert found["total_kg"] == pytest.approx(14997.5 + found["added_kg"])
    met = {e["property"]: e["met"] for e in found["effects"] if e["low"] is not None or e["high"] is not None}
    assert met == {"kv40": True, "vi": True, "flash": True, "pour": True}
    assert plant.batch("B-0001").to_charge == ()


def test_trim_is_taken(batch, plant):
    sampled(plant, 1, THIN, decision="trim")
    asked = answer(batch, "trim", "B-0001", "--aim", "mass", "--only", "HT12")
    code, out, err = batch("trim", "B-0001", "--aim", "mass", "--only", "HT12", "--take", "--by", "Gerd", "--sure")
    assert (code, err) == (0, "")
    assert "Planned as trim 1: line 6, 7, 8, 9 of the card; their oil is reserved." in " ".join(out.split())
    planned = plant.batch("B-0001").to_charge
    assert [c.stock for c in planned] == ["HT12", "HP85", "PD20", "HT12"]  # the additives keep their treat rates
    sums = {code: sum(c.plan_kg for c in planned if c.stock == code) for code in asked["additions_kg"]}
    assert sums == pytest.approx(asked["additions_kg"])
    assert "kg of HT12 are kept back to rinse" in " ".join(out.split())


def test_a_trim_with_a_chance(batch, plant):
    sampled(plant, 1, THIN, decision="trim")
    found = answer(batch, "trim", "B-0001", "--aim", "mass", "--chance", "95")
    assert found["chance"] == 0.95
    assert batch("trim", "B-0001", "--chance", "0")[0] == 2


def test_no_trim_is_exit_3_and_still_printed(batch, plant):
    """Nothing that HYD-46 lists brings a batch of VI 60 to 105 in a vessel of 24,000 L."""
    sampled(plant, 1, {"kv40": 47.0, "kv100": 5.9}, decision="trim")
    code, out, err = batch("trim", "B-0001", "--only", "LN15A", "--take")
    assert (code, err) == (3, "")
    assert out.startswith("B-0001: NO TRIM from sample 1")
    found = answer(batch, "trim", "B-0001", "--only", "LN15A", code=3)
    assert (found["status"], found["additions_kg"], found["charges"]) == ("infeasible", None, [])


def test_a_trim_of_noise_is_questioned(batch, plant):
    sampled(plant, 1, {"kv40": 41.2, "kv100": 6.5, "flash": 229.0, "pour": -18.0}, decision="fresh sample")
    code, out, err = batch("trim", "B-0001", "--aim", "mass", "--take")
    assert (code, out) == (2, "")
    assert "trimming noise; draw a fresh sample first" in err
    assert plant.batch("B-0001").to_charge == ()


def test_a_trim_without_both_viscosities_is_refused(batch, plant):
    sampled(plant, 1, {"kv40": 40.3})
    code, out, err = batch("trim", "B-0001")
    assert (code, out) == (2, "")
    assert err == ("sample 1 of B-0001 has KV40 on record; a trim moves both: measure KV40 and KV100 on one "
                   "sample first\n")


def test_release_and_certificate(batch, plant, tmp_path):
    sampled(plant, 1, GOOD, decision="release")
    assert batch("certificate", "B-0001")[2].startswith("B-0001 is open, not released: a certificate speaks of")
    code, out, _ = batch("release", "B-0001", "--by", "Fritz")
    assert code == 0
    assert out.startswith("B-0001 released by Fritz, 20")
    assert plant.last_hash() in out
    drawn(plant, "packed", 14900.0)
    code, out, _ = batch("certificate", "B-0001")
    assert (code, out.splitlines()[0]) == (0, "CERTIFICATE OF ANALYSIS")
    assert "Customer  Hansa Werke" in out
    assert "Packed    14900 kg" in out
    found = answer(batch, "certificate", "B-0001")
    assert [(x["property"], x["shown"]) for x in found["results"]] == [
        ("kv40", "45.90"), ("kv100", "7.050"), ("vi", "112"), ("flash", "229"), ("pour", "-18")]
    assert found["record"]["hash"] == plant.last_hash()


def test_a_release_names_everything_that_is_missing(batch, plant):
    code, out, err = batch("release", "B-0001")
    assert (code, out, err) == (2, "", "B-0001 cannot be released: no sample was drawn\n")
    sampled(plant, 1, {"kv40": 45.9}, decision="release")
    _, _, err = batch("release", "B-0001")
    assert err == ("B-0001 cannot be released: no result of viscosity index on sample 1 (it takes KV40 and KV100 of "
                   "one sample); no result of flash point on sample 1; no result of pour point on sample 1\n")


def test_nobody_releases_what_was_checked_by_the_one_who_charged_it(batch, plant):
    sampled(plant, 1, THIN, decision="trim")
    batch("trim", "B-0001", "--only", "HT12", "--aim", "mass", "--take", "--sure")
    for n, charge in enumerate(plant.batch("B-0001").to_charge):
        charged(plant, charge.line, when=at(11, n), by="gerd", checked_by="Gerd")
    sampled(plant, 2, GOOD, hour=12, decision="release")
    code, _, err = batch("release", "B-0001", "--by", "gerd")
    assert code == 2
    assert "charged and checked by one person: lines 6 (HT12, gerd), 7 (HP85, gerd), " in err


def test_a_certificate_is_written_once(batch, plant, tmp_path):
    sampled(plant, 1, GOOD, decision="release")
    batch("release", "B-0001")
    text, page = tmp_path / "b1.txt", tmp_path / "b1.html"
    code, out, _ = batch("certificate", "B-0001", "--write", str(text), "--html", str(page))
    assert code == 0
    assert out.split() == f"certificate written to {text} certificate written to {page}".split()
    assert text.read_text(encoding="utf-8").startswith("CERTIFICATE OF ANALYSIS\n")
    assert page.read_text(encoding="utf-8").startswith("<!DOCTYPE html>")
    before = text.read_text(encoding="utf-8")
    code, out, err = batch("certificate", "B-0001", "--write", str(text), "--html", str(tmp_path / "b2.html"))
    assert (code, out) == (2, "")
    assert err == f"{text} is there already; choose another name or move the old certificate away\n"
    assert not (tmp_path / "b2.html").exists()
    assert text.read_text(encoding="utf-8") == before
    assert batch("certificate", "B-0001", "--write", str(page.parent / "c"), "--html", str(page.parent / "c"))[0] == 2
    # Where the second cannot be written the first is not there either.
    code, out, err = batch("certificate", "B-0001", "--write", str(tmp_path / "b3.txt"), "--html",
                           str(tmp_path / "none" / "b3.html"))
    assert (code, out, err.startswith("cannot write ")) == (2, "", True)
    assert not (tmp_path / "b3.txt").exists()
    assert batch("certificate", "B-0001", "--write", "x" * 5000)[2].startswith("cannot write xxx")
    code, out, err = batch("certificate", "B-0001", "--write", str(tmp_path / "\x1b[2J.txt"))
    assert (code, err, "\x1b" in out) == (0, "", False)


def test_a_batch_that_is_not_there(batch):
    for command in ("trim", "release", "certificate"):
        code, out, err = batch(command, "B-0009")
        assert (code, out) == (2, "")
        assert err == "no batch 'B-0009'; the latest are B-0001\n"


def test_a_catalogue_folder_is_never_changed(capsys):
    code = cli.main(["batch", "release", "B-0001", "--plant", str(ROOT / "stock_catalog_example")])
    assert code == 2
    assert capsys.readouterr().out == ""
