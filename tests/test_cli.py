"""The headless commands: their JSON, their text, their exit codes and their refusals."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from blendtui.cli import main
from solver.walther import line

ROOT = Path(__file__).parent.parent
EXAMPLE = ROOT / "stock_catalog_example"

STOCKS = """stock,name,kind,api_group,on_hand_kg,price_per_t,density15,kv40,kv100
N150,Light,,I,100000,800,868,30.6,5.23
N500,Medium,,I,100000,840,879,95.5,10.75
BS,Heavy,,I,100000,1050,897,480,31.5
"""
PRODUCTS = """product,grade,batch_kg,max_stocks,min_share_pct
P46,ISO VG 46,20000,,
TOOHIGH,ISO VG 46,20000,,
SHORT,,20000,,
"""
LIMITS = """product,property,low,high,guard
P46,vi,95,,
P46,kv40,,,2%
TOOHIGH,vi,150,,
SHORT,kv40,41,50,
"""
SHARES = """product,of,low_pct,high_pct
SHORT,N150,,20
SHORT,N500,,20
SHORT,BS,,20
"""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A small catalogue folder."""
    place = tmp_path / "catalogue"
    place.mkdir()
    for name, text in (("stocks", STOCKS), ("products", PRODUCTS), ("limits", LIMITS), ("shares", SHARES)):
        (place / f"{name}.csv").write_text(text, encoding="utf-8")
    return place


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, str, str]:
    code = main(argv)
    out, err = capsys.readouterr()
    return code, out, err


def answer(capsys: pytest.CaptureFixture[str], *argv: str, code: int = 0) -> dict:
    found, out, err = run(capsys, *argv, "--json")
    assert (found, err) == (code, "")
    return json.loads(out)


def test_viscosity(capsys: pytest.CaptureFixture[str]) -> None:
    found = answer(capsys, "viscosity", "--kv40", "46", "--kv100", "6.8", "--at", "0", "--at", "80")
    assert set(found) == {"vi", "walther", "at", "iso_vg"}
    # ASTM D341, computed: 46/6.8 has A 9.417993, B 3.684441, 577.3 at 0 °C and 11.103 at 80 °C.
    assert (round(found["walther"]["a"], 6), round(found["walther"]["b"], 6)) == (9.417993, 3.684441)
    assert [(x["temperature_c"], round(x["kv"], 1)) for x in found["at"]] == [(0.0, 577.3), (80.0, 11.1)]
    assert found["iso_vg"] == 46
    assert found["vi"] == pytest.approx(101.6, abs=0.1)
    thin = answer(capsys, "viscosity", "--kv40", "5", "--kv100", "1.7")
    assert thin["vi"] is None
    assert thin["iso_vg"] == 5
    code, out, _ = run(capsys, "viscosity", "--kv40", "46", "--kv100", "6.8", "--at", "110F")
    assert code == 0
    assert "viscosity index 102; ISO VG 46" in out
    assert f"{float(line(46, 6.8).kv(43 + 1 / 3)):.2f}" in out


def test_predict(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    found = answer(capsys, "predict", "N150=50", "N500=50", "--law", "wright-mass", "--plant", str(folder))
    assert set(found) == {"law", "shares_pct", "predicted", "spread_pct", "cost_per_t"}
    assert found["law"] == "wright-mass"
    assert found["shares_pct"] == {"N150": 50.0, "N500": 50.0}
    # ASTM D7152, Wright by mass, computed: 52.7935/7.3965.
    assert round(found["predicted"]["kv40"], 4) == 52.7935
    assert round(found["predicted"]["kv100"], 4) == 7.3965
    assert found["predicted"]["flash"] is None
    assert found["cost_per_t"] == pytest.approx(820.0)
    assert found["spread_pct"]["kv40"] == pytest.approx(100 * (52.7935 - 51.8602) / 52.7935, abs=1e-3)


def test_design(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    found = answer(capsys, "design", "P46", "--plant", str(folder), "--ranges", "--blends", "3", "--batch", "12 t")
    assert {"law", "shares_pct", "predicted", "spread_pct", "cost_per_t", "status", "gap", "charges_kg", "limits",
            "ranges_pct", "blends"} <= set(found)
    assert found["status"] == "optimal"
    assert sum(found["shares_pct"].values()) == pytest.approx(100.0)
    assert sum(found["charges_kg"].values()) == pytest.approx(12000.0)
    kv40 = next(x for x in found["limits"] if x["property"] == "kv40")
    assert (kv40["low"], kv40["high"], kv40["met"]) == (41.4, 50.6, True)
    assert kv40["guard"] == pytest.approx(0.828)
    assert kv40["value"] >= 41.4 * 1.02 * (1 - 1e-6)
    assert set(found["ranges_pct"]) == {"N150", "N500", "BS"}
    assert all(set(b) == {"shares_pct", "cost_per_t", "predicted", "spread_pct"} for b in found["blends"])
    assert found["blends"][0]["cost_per_t"] == pytest.approx(found["cost_per_t"], rel=1e-5)


def test_no_blend_is_exit_3_with_the_nearest(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    found = answer(capsys, "design", "TOOHIGH", "--plant", str(folder), "--ranges", "--blends", "2", code=3)
    assert found["status"] == "infeasible"
    assert found["gap"] is None
    assert sum(found["shares_pct"].values()) == pytest.approx(100.0)
    assert [x["met"] for x in found["limits"] if x["property"] == "vi"] == [False]
    assert (found["ranges_pct"], found["blends"]) == (None, [])
    code, out, _ = run(capsys, "design", "TOOHIGH", "--plant", str(folder))
    assert code == 3
    assert "NO BLEND meets every limit; this is the nearest" in out


def test_shares_that_do_not_reach_a_hundred(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    found = answer(capsys, "design", "SHORT", "--plant", str(folder), code=3)
    assert found["shares_pct"] is None
    assert found["predicted"] is None
    assert found["charges_kg"] is None
    assert "reach only 60 %" in found["reasons"][0]


def test_every_product_of_the_example_but_one_can_be_made(capsys: pytest.CaptureFixture[str]) -> None:
    names = [p["product"] for p in answer(capsys, "products", "--plant", str(EXAMPLE))["products"]]
    codes = {name: main(["design", name, "--plant", str(EXAMPLE), "--json"]) for name in names}
    capsys.readouterr()
    assert [name for name, code in codes.items() if code == 3] == ["HYD-46X"]
    assert len(names) >= 8


def test_listings(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    stocks = answer(capsys, "stocks", "--plant", str(folder))["stocks"]
    assert [(s["stock"], s["kv40"]) for s in stocks] == [("N150", 30.6), ("N500", 95.5), ("BS", 480.0)]
    products = answer(capsys, "products", "--plant", str(folder))["products"]
    assert products[0]["limits"][1] == {"property": "kv40", "low": None, "high": None, "guard": "2%"}
    assert products[2]["shares"][0] == {"of": "N150", "low_pct": 0.0, "high_pct": 20.0}
    for command in ("stocks", "products"):
        code, out, err = run(capsys, command, "--plant", str(folder))
        assert (code, err) == (0, "")
        assert "\x1b" not in out
        assert ("N500" in out) == (command == "stocks")


def test_import_and_export_give_the_same_plant(capsys: pytest.CaptureFixture[str], folder: Path,
                                               tmp_path: Path) -> None:
    plant = tmp_path / "own.plant"
    done = answer(capsys, "import", str(folder), "--plant", str(plant))
    assert (done["stocks"], done["products"]) == (3, 3)
    assert answer(capsys, "export", str(tmp_path / "out"), "--plant", str(plant))["stocks"] == 3
    for command in ("stocks", "products"):
        first, second, third = (answer(capsys, command, "--plant", str(p)) for p in (folder, plant, tmp_path / "out"))
        assert first == second == third


def test_a_folder_is_opened_without_being_changed(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    before = {p.name: (p.read_bytes(), p.stat().st_mtime_ns) for p in folder.iterdir()}
    answer(capsys, "design", "P46", "--plant", str(folder))
    assert {p.name: (p.read_bytes(), p.stat().st_mtime_ns) for p in folder.iterdir()} == before


def test_options_stand_before_the_command_or_after_it(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    before = run(capsys, "--plant", str(folder), "--json", "stocks")
    assert before == run(capsys, "stocks", "--plant", str(folder), "--json")
    assert len(json.loads(before[1])["stocks"]) == 3
    code, out, err = run(capsys, "--plant", str(folder / "nowhere"), "stocks")
    assert (code, out) == (2, "")
    assert "there is no plant at" in err


def test_text_fits_a_printer(capsys: pytest.CaptureFixture[str]) -> None:
    for argv in (["stocks"], ["products"], ["design", "HYD-46", "--ranges", "--blends", "8"], ["design", "HYD-46X"],
                 ["design", "MULT-1030"], ["design", "BASE-10W"], ["predict", "LN15A=60", "MN50=40"]):
        _, out, _ = run(capsys, *argv, "--plant", str(EXAMPLE))
        long = [line for line in out.split("\n") if len(line) > 80]
        assert not long, long


REFUSED = [
    (["predict", "N150=50", "N500=49"], "the shares sum to 99 %, not to 100 %; mend them"),
    (["predict", "N150=50", "NOPE=50"], "no stock 'NOPE'; the plant has N150, N500, BS"),
    (["predict", "N150=50", "N150=50"], "N150 is given twice; give each stock one share"),
    (["predict", "N150"], "'N150' is not STOCK=PCT; write for example N150=25"),
    (["predict", "N150=abc"], "N150=abc: 'abc' is not a number"),
    (["predict", "N150=nan"], "N150=nan: 'nan' is not a number"),
    (["predict", "N150=-50", "N500=150"], "N150: a share of -50 % cannot be; shares lie within 0 to 100 %"),
    (["predict", "N150=100", "--law", "arrhenius"], "unknown law 'arrhenius'; known are refutas"),
    (["design", "NOPE"], "NOPE"),
    (["design", "P46", "--law", "x"], "unknown law 'x'"),
    (["design", "P46", "--batch", "0"], "--batch 0: a batch is more than 0 kg"),
    (["design", "P46", "--batch", "lots"], "--batch: 'lots' is not a number"),
    (["predict", "N150=50.011", "N500=50"], "the shares sum to 100.011 %, not to 100 %"),
    (["design", "P46", "--blends", "²"], "--blends ²: give a whole number from 1 to 8"),
    (["design", "P46", "--blends", "9"], "--blends 9: give a whole number from 1 to 8"),
    (["viscosity", "--kv40", "5", "--kv100", "7"], "oil thins as it warms; are the two swapped?"),
    (["viscosity", "--kv40", "inf", "--kv100", "7"], "--kv40: 'inf' is not a number"),
    (["viscosity", "--kv40", "46", "--kv100", "6.8", "--at", "900"], "--at 900 °C lies outside −80 to 300 °C"),
    (["viscosity", "--kv40", "46"], "the following arguments are required: --kv100"),
    (["nonsense"], "invalid choice: 'nonsense'"),
    (["design"], "the following arguments are required: PRODUCT")]


@pytest.mark.parametrize(("argv", "message"), REFUSED)
def test_refused_in_one_line(capsys: pytest.CaptureFixture[str], folder: Path, argv: list[str], message: str) -> None:
    plant = [] if argv[0] == "viscosity" else ["--plant", str(folder)]
    code, out, err = run(capsys, *argv, *plant)
    assert (code, out) == (2, "")
    assert message in err
    assert err.count("\n") == 1


def test_import_lists_every_fault(capsys: pytest.CaptureFixture[str], folder: Path, tmp_path: Path) -> None:
    (folder / "stocks.csv").write_text(STOCKS.replace("30.6", "30,6").replace(",868,", ",0.868,").replace(
        "N500,Medium", "N150,Medium").replace("30,6,5.23", '"30,6",5.23'), encoding="utf-8")
    code, out, err = run(capsys, "import", str(folder), "--plant", str(tmp_path / "own.plant"))
    assert (code, out) == (2, "")
    lines = err.strip().split("\n")
    assert any("stocks.csv row 2, kv40" in x and "30.6" in x for x in lines)
    assert any("stocks.csv row 2, density15" in x and "868" in x for x in lines)
    assert any("stocks.csv row 3, stock" in x and "N150" in x for x in lines)
    assert not (tmp_path / "own.plant").exists()
    code, out, err = run(capsys, "design", "P46", "--plant", str(folder))
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert "more)" in err


def test_a_column_that_nothing_uses_is_told(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    lines = STOCKS.strip().split("\n")
    text = "\n".join([lines[0] + ",shelf", *(line + ",7" for line in lines[1:])]) + "\n"
    (folder / "stocks.csv").write_text(text, encoding="utf-8")
    code, out, err = run(capsys, "design", "P46", "--plant", str(folder), "--json")
    assert code == 0
    assert json.loads(out)["status"] == "optimal"
    assert err.startswith("note: stocks.csv: unknown column")
    assert "shelf" in err
    assert err.count("\n") == 1


def test_a_name_cannot_drive_the_terminal(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    code, out, err = run(capsys, "design", "\x1b[2Jevil", "--plant", str(folder))
    assert (code, out) == (2, "")
    assert "\x1b" not in err


def test_five_thousand_stocks(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    rows = [f"S{i:04d},,,II,50000,{700 + i % 400},{860 + i % 30},{20 + i % 90 + i / 5000:.4f},"
            f"{4 + (20 + i % 90) ** 0.6 * 0.55 - 3:.4f}" for i in range(5000)]
    big = tmp_path / "big"
    big.mkdir()
    (big / "stocks.csv").write_text("\n".join([STOCKS.split("\n")[0], *rows]) + "\n", encoding="utf-8")
    (big / "products.csv").write_text("product,grade,batch_kg\nP,ISO VG 46,20000\n", encoding="utf-8")
    (big / "limits.csv").write_text("product,property,low,high,guard\nP,vi,90,,\n", encoding="utf-8")
    found = answer(capsys, "design", "P", "--plant", str(big))
    assert found["status"] == "optimal"


def test_the_installed_command(tmp_path: Path) -> None:
    command = shutil.which("blendtui", path=str(Path(sys.executable).parent) + os.pathsep + os.environ["PATH"])
    assert command, "install the package first: pip install -e '.[test]'"
    env = {**os.environ, "XDG_DATA_HOME": str(tmp_path), "LC_ALL": "C"}
    bare = subprocess.run([command], capture_output=True, text=True, env=env, stdin=subprocess.DEVNULL, check=False)
    assert bare.returncode == 0
    assert "blendtui design HYD-46" in bare.stdout
    made = subprocess.run([command, "design", "HYD-46"], capture_output=True, env=env, check=False)
    assert (made.returncode, made.stderr) == (0, b"")
    piped = subprocess.run(f"{command} stocks | head -1", shell=True, capture_output=True, env=env, check=False)
    assert piped.stderr == b""


def test_the_example_travels_in_the_wheel(tmp_path: Path) -> None:
    subprocess.run([sys.executable, "-m", "pip", "wheel", "--no-deps", "--quiet", "-w", str(tmp_path), str(ROOT)],
                   check=True, capture_output=True)
    wheel = next(tmp_path.glob("blendtui-*.whl"))
    listed = subprocess.run([sys.executable, "-m", "zipfile", "-l", str(wheel)], capture_output=True, text=True,
                            check=True).stdout
    for name in ("stocks", "products", "limits", "shares"):
        assert f"blendtui/stock_catalog_example/{name}.csv" in listed
    assert "solver/py.typed" in listed
