"""`blendtui batch order` and its neighbours, and `blendtui vessel`: JSON, text, exit codes, refusals."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from blendtui.cli import main
from blendtui.desk import order_words
from blendtui.desk.plant import open_plant
from solver.recipe import LimitResult
from tests.desk.order_plant import order_plant


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return order_plant(tmp_path / "c")


def run(capsys: pytest.CaptureFixture[str], path: Path, *argv: str) -> tuple[int, str, str]:
    code = main([*argv, "--plant", str(path)])
    out, err = capsys.readouterr()
    return code, out, err


def asked(capsys: pytest.CaptureFixture[str], path: Path, *argv: str) -> tuple[int, dict[str, Any]]:
    code, out, err = run(capsys, path, *argv, "--json")
    assert err == ""
    return code, json.loads(out)


ORDER = ("batch", "order", "P46", "10", "t", "--vessel", "K1")


def test_an_order_from_the_command_line_and_every_key(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    code, answer = asked(capsys, path, *ORDER, "--customer", "Orlin", "--order", "4711", "--limit", "vi=95:", "--mix",
                         "140F", "--tank-c", "35", "--tank-c", "N100=45", "--line", "40=N32", "--by", "Berta")
    assert code == 0
    assert set(answer) == {
        "batch", "product", "vessel", "status", "asked", "unit", "asked_kg", "batch_kg", "mix_c", "fill_l", "fill_pct",
        "most_fill_pct", "contents", "charges", "predicted", "cost_per_t", "law", "limits", "heel_ignored", "effects",
        "questions", "remarks", "reasons"}
    assert (answer["batch"], answer["asked_kg"], answer["batch_kg"]) == ("B-0001", 10000.0, 10140.0)
    assert answer["mix_c"] == pytest.approx(60.0)
    assert {c["stock"]: c["tank_c"] for c in answer["charges"]} == {"N32": 35.0, "N100": 45.0, "PK": 35.0, "PD": 35.0,
                                                                   "AF": 35.0}
    assert set(answer["charges"][0]) == {"line", "stock", "kg", "tolerance_kg", "step_kg", "lot", "tank_c"}
    with open_plant(path) as plant:
        made = plant.batch("B-0001")
    assert [c.plan_kg for c in made.charges] == [c["kg"] for c in answer["charges"]]
    assert (made.head.ordered_by, made.head.customer, made.head.order_no) == ("Berta", "Orlin", "4711")


def test_try_proposes_and_writes_nothing(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    code, out, _ = run(capsys, path, *ORDER, "--try", "--limit", "kv40=41:51")
    assert code == 0
    assert out.startswith("P46, 10000 kg in K1: nothing is written (least cost)")
    assert "? the customer's KV40 41–51 is wider than the product's 41.4–50.6 mm²/s" in out
    assert max(map(len, out.splitlines())) <= 80
    assert asked(capsys, path, "batch", "list")[1] == {"batches": []}
    code, answer = asked(capsys, path, *ORDER, "--try")
    assert answer["batch"] is None


def test_what_is_unlikely_waits_for_sure(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    code, out, err = run(capsys, path, *ORDER, "--limit", "kv40=41:51")
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert "is wider than the product's" in err
    assert err.rstrip().endswith("if it is so: --sure")
    assert run(capsys, path, *ORDER, "--limit", "kv40=41:51", "--sure")[0] == 0


def test_no_blend_is_an_answer_and_nothing_is_recorded(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    code, answer = asked(capsys, path, "batch", "order", "P46", "14 t", "--vessel", "K1")
    assert code == 3
    assert answer["charges"] == []
    assert "K1 may be filled to 13500 L" in answer["reasons"][0]
    code, out, _ = run(capsys, path, *ORDER, "--limit", "vi=150:")
    assert code == 3
    assert "NO BLEND" in out
    assert "VI at least 150" in out
    assert max(map(len, out.splitlines())) <= 80
    assert asked(capsys, path, "batch", "list")[1] == {"batches": []}


def test_heel_flush_and_what_ignoring_does(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    code, answer = asked(capsys, path, "batch", "order", "ONE", "9900", "--vessel", "K1", "--heel", "100",
                         "--heel-stock", "G320", "--heel-value", "kv40=318", "--flush", "60=N32,out",
                         "--ignore-heel", "known", "--any-mass", "--most-fill", "85", "--name", "X-1", "--note", "n")
    assert code == 0
    assert [(c["what"], c["kg"], c["counts"], c["source"]) for c in answer["contents"]] == [
        ("heel", 100.0, True, "measured"), ("flush", 60.0, False, "stock")]
    assert answer["effects"]["kv40"]["without"] == pytest.approx(32.0)
    assert answer["effects"]["kv40"]["with"] == pytest.approx(32.0 * 1.018, rel=1e-3)  # practice: 1 % moves it +1.8 %
    assert (answer["heel_ignored"], answer["most_fill_pct"], answer["batch"]) == ("known", 85.0, "X-1")
    code, out, _ = run(capsys, path, "batch", "show", "X-1")
    assert code == 0
    assert "heel and line are LEFT OUT of the sums: known" in out


@pytest.mark.parametrize(("argv", "words"), [
    (("batch", "order", "P46", "10000", "--vessel", "K9"), "no vessel 'K9'; the plant has K1, K2, K3, TINY"),
    (("batch", "order", "P46", "10000", "--vessel", "K3"), "K3 has no capacity"),
    (("batch", "order", "P46", "10", "--vessel", "TINY", "--heel", "100", "--heel-stock", "N32"),
     "TINY is smaller than its heel"),
    (("batch", "order", "P46", "--vessel", "K1", "--", "-10000"), "an order of -10000 kg cannot be"),
    (("batch", "order", "P46", "10000", "--at", "20", "--vessel", "K1"), "10000 is a mass (kg)"),
    (("batch", "order", "P46", "10000 L", "--at", "60", "--vessel", "K1"), "litres are ordered at 15 or 20 °C"),
    ((*ORDER, "--limit", "colour=1:2"), "no property 'colour'"),
    ((*ORDER, "--limit", "kv40"), "--limit kv40: write PROPERTY=LOW:HIGH"),
    ((*ORDER, "--limit", "kv40=44:48", "--limit", "kv40=44:48"), "kv40 is given twice"),
    ((*ORDER, "--flush", "60=N32,maybe"), "it goes in or out"), ((*ORDER, "--line", "40"), "--line 40: write KG=STOCK"),
    ((*ORDER, "--heel", "lots"), "--heel: 'lots' is not a number"),
    ((*ORDER, "--heel-value", "kv40"), "--heel-value kv40: write PROPERTY=V"),
    ((*ORDER, "--charges-in", "light, blue"), "'blue' is no stock, oil or kind"),
    ((*ORDER, "--mix", "260"), "a mixing temperature of 260 °C"),
    (("batch", "order", "NOSUCH", "10000", "--vessel", "K1"), "NOSUCH"),
    (("batch", "card", "B-0009"), "no batch 'B-0009'; the plant has none yet"),
    (("batch", "show", "B-0009"), "no batch 'B-0009'"), (("batch", "redesign", "B-0009"), "no batch 'B-0009'"),
    (("batch", "list", "--state", "lost"), "--state lost: usable are open, released, cancelled, reworked"),
    (("batch",), "say what is to be done"), (("vessel",), "say what is to be done with vessels"),
    (("vessel", "set", "K1", "capacity_l"), "capacity_l: write CELL=VALUE"),
    (("vessel", "set", "K1", "capacity_l=1", "capacity_l=2"), "capacity_l is given twice"),
    ((*ORDER, "--colour", "red"), "unrecognized arguments: --colour red; blendtui batch order --help shows"),
    (("vessel", "list", "--all"), "unrecognized arguments: --all; blendtui vessel list --help shows what is taken"),
    (("vessel", "set", "K1", "capacity_l=much"), "K1 capacity: 'much' is not a number"),
    ((*ORDER, "--limit", "kv40=44:nan"), "the customer's KV40: 'nan' is not a number"),
    ((*ORDER, "--heel-value", "kv40=nan"), "kv40: 'nan' is not a number"),
    ((*ORDER, "--heel-value", "kv40=1e308"), "the heel: KV at 40 °C 1e+308 mm²/s lies outside 0.3 to 2e+07"),
    ((*ORDER, "--heel", "1e99"), "the heel: 1e+99 kg is more than 1e+09 kg; check the unit"),
    ((*ORDER, "--flush", "1e99=N32"), "the flush oil: 1e+99 kg is more than 1e+09 kg"),
    (("batch", "order", "P46", "1e308 L", "--vessel", "K1"), "an order of inf L at 15 °C cannot be"),
    (("batch", "reorder", "B-0001", "1.5"), "argument LINE: '1.5' is no whole number"),
    (("batch", "order", "P46", "9", "--vessel", "K1", "--mix", "1e308"), "--mix: 1e308 is no temperature of an oil")])
def test_what_cannot_be_is_one_line_on_stderr(capsys: pytest.CaptureFixture[str], path: Path, argv: tuple[str, ...],
                                              words: str) -> None:
    code = main([argv[0], "--plant", str(path), *argv[1:]])
    out, err = capsys.readouterr()
    assert (code, out) == (2, "")
    assert words in err
    assert err.count("\n") == 1
    with open_plant(path) as plant:
        assert not plant.batches()


def test_a_folder_is_asked_but_not_written_to(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    folder = path.parent
    assert run(capsys, folder, *ORDER, "--try")[0] == 0
    code, out, err = run(capsys, folder, *ORDER)
    assert (code, out) == (2, "")
    assert "is read but never changed" in err


def test_card_list_show_redesign_reorder_and_cancel(capsys: pytest.CaptureFixture[str], path: Path,
                                                    tmp_path: Path) -> None:
    run(capsys, path, *ORDER)
    code, out, _ = run(capsys, path, "batch", "list", "--state", "open")
    assert code == 0
    assert [line.split() for line in out.splitlines()][2][:5] == ["B-0001", "P46", "10100", "K1", "planned"]
    code, card = asked(capsys, path, "batch", "card", "B-0001")
    assert code == 0
    assert card["charges"][-1]["rinse"]
    assert card["record"]["entry"] == 2
    text, page = tmp_path / "card.txt", tmp_path / "card.html"
    code, out, _ = run(capsys, path, "batch", "card", "B-0001", "--write", str(text), "--html", str(page))
    assert out.splitlines() == [f"card written to {text}", f"card written to {page}"]
    assert text.read_text().startswith("BATCH CARD  B-0001\n")
    assert page.read_text().startswith("<!DOCTYPE html>")
    code, out, err = run(capsys, path, "batch", "card", "B-0001", "--write", str(text))
    assert code == 2
    assert "is there already" in err
    other = tmp_path / "other.txt"
    for second in (page, other, tmp_path / "none" / "card.html"):
        code, out, err = run(capsys, path, "batch", "card", "B-0001", "--write", str(other), "--html", str(second))
        assert (code, out, err.count("\n")) == (2, "", 1)
        assert not other.exists()  # both or none
    code, out, _ = run(capsys, path, "batch", "card", "B-0001")
    assert out == text.read_text()
    code, shown = asked(capsys, path, "batch", "show", "B-0001")
    assert [c["state"] for c in shown["charges"]] == ["planned"] * 6
    assert shown["formula"]["grade"] == "ISO VG 46"
    assert (shown["charges"][0]["by"], shown["charges"][0]["actual_lot"], shown["charges"][0]["at"]) == (None,) * 3
    code, again = asked(capsys, path, "batch", "redesign", "B-0001", "--try")
    assert again["batch"] is None
    code, again = asked(capsys, path, "batch", "redesign", "B-0001", "--why", "new tank")
    assert (code, again["batch"]) == (0, "B-0001")
    code, moved = asked(capsys, path, "batch", "reorder", "B-0001", "2", "1", "3", "4", "5", "6")
    assert moved["lines"] == [2, 1, 3, 4, 5, 6]
    assert run(capsys, path, "batch", "cancel", "B-0001")[0] == 2
    code, gone = asked(capsys, path, "batch", "cancel", "B-0001", "--why", "the customer left", "--by", "Berta")
    assert (code, gone["state"], gone["why"], gone["closed_by"]) == (0, "cancelled", "the customer left", "Berta")
    assert asked(capsys, path, "batch", "list", "--state", "open")[1] == {"batches": []}
    # Nothing is ahead of it any more, and nothing will make a certificate of it.
    code, out, err = run(capsys, path, "batch", "outlook", "B-0001")
    assert (code, out) == (2, "")
    assert err.startswith("B-0001 is cancelled (Berta, ")
    assert run(capsys, path, "batch", "certificate", "B-0001")[2] == (
        "B-0001 is cancelled, not released: a certificate speaks of a released batch only\n")


def test_vessels_from_the_command_line(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    cells = ("capacity_l=5 m3", "division_kg=1", "charge_order=heavy light")
    code, answer = asked(capsys, path, "vessel", "add", "K9", *cells)
    assert code == 0
    assert (answer["capacity_l"], answer["division_kg"], answer["charge_order"]) == (5000.0, 1.0, ["heavy", "light"])
    code, answer = asked(capsys, path, "vessel", "set", "K9", "flash_margin_c=30", "flash_margin_on=2026-02-01")
    assert (answer["flash_margin_c"], answer["flash_margin_on"]) == (30.0, "2026-02-01")
    code, out, _ = run(capsys, path, "vessel", "list")
    assert max(map(len, out.splitlines())) <= 80
    assert "K9: charged in the order heavy, light" in out
    assert run(capsys, path, "vessel", "retire", "K9")[0] == 0
    assert [v["vessel"] for v in asked(capsys, path, "vessel", "list")[1]["vessels"]] == ["K1", "K2", "K3", "TINY"]


def test_a_vessel_is_added_with_its_cells_or_not_at_all(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    for cell in ("colour=red", "capacity_l=much", "capacity_l=-5", "least_fill_l=-1", "heel_stock=ZZ"):
        code, out, err = run(capsys, path, "vessel", "add", "K9", "division_kg=1", cell)
        assert (code, out, err.count("\n")) == (2, "", 1)
        assert len(asked(capsys, path, "vessel", "list")[1]["vessels"]) == 4
    with open_plant(path) as plant:
        before = plant.revision()
    run(capsys, path, "vessel", "add", "K9", "capacity_l=5000", "division_kg=1")
    run(capsys, path, "vessel", "retire", "K9")
    code, answer = asked(capsys, path, "vessel", "add", "K9", "capacity_l=6000")
    assert (code, answer["capacity_l"], answer["division_kg"]) == (0, 6000.0, 1.0)
    with open_plant(path) as plant:
        assert plant.revision() == before + 3
        assert plant.verify() is None


def test_what_only_its_guard_misses_is_not_called_a_miss() -> None:
    limit = LimitResult("vi", 95.0, None, 2.0, 97.0, None, 96.58, False, -0.42, "low", ("limit on vi",))
    assert order_words._word(limit) == " in its guard"
    assert order_words._word(replace(limit, value=94.9)) == " NOT MET"
    assert order_words._word(replace(limit, value=None, met=None)) == " unknown"
    assert order_words._word(replace(limit, value=97.5, met=True)) == ""


def test_a_limit_of_a_volume_is_not_shown_as_the_products(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    code, answer = asked(capsys, path, "batch", "order", "P46", "20000 L", "--vessel", "K1", "--limit",
                         "density15=:900")
    assert code == 3
    limit = next(x for x in answer["limits"] if x["property"] == "density15")
    assert (limit["low"], limit["held_low"], limit["high"]) == (None, None, 900.0)
    assert limit["sources"] == ["customer"]


def test_bytes_that_are_no_text_are_refused_in_words(capsys: pytest.CaptureFixture[str], path: Path) -> None:
    for argv in (("batch", "show", "B-\udcff"), ("batch", "order", "P\udcff", "10", "t", "--vessel", "K1"),
                 ("trace", "\udcff"), ("vessel", "add", "K\udcff")):
        code, out, err = run(capsys, path, *argv)
        assert (code, out, err.count("\n")) == (2, "", 1)
        assert "an unexpected fault" not in err
    assert asked(capsys, path, "batch", "list")[1] == {"batches": []}
