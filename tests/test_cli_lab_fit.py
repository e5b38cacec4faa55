"""`blendtui lab fit`: its JSON, its text, its exit codes and its refusals."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from blendtui.cli import main
from solver.laws import kv_of_vbn, vbn

HEADER = "system,frac_mass,kv,use\n"
# An invented pair with an excess of A = 2, B = 1 in the Refutas index, exact to the digits.
FRACTIONS = (0.0, 0.2, 0.4, 0.5, 0.6, 0.8, 1.0)


def kv_at(f: float, terms: tuple[float, float] = (2.0, 1.0)) -> float:
    g = 1.0 - f
    return float(kv_of_vbn(f * vbn(100.0) + g * vbn(10.0) + f * g * (terms[0] + terms[1] * (f - g))))


def table(system: str = "pair", test: tuple[float, ...] = (0.5,), more: str = "") -> str:
    return "".join(f"{system},{f:g},{kv_at(f):.6f},{'test' if f in test else 'fit'}{more}\n" for f in FRACTIONS)


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, str, str]:
    code = main(argv)
    out, err = capsys.readouterr()
    return code, out, err


@pytest.fixture
def file(tmp_path: Path) -> Path:
    """A good file of two systems, their rows mixed and not in order."""
    lines = [*table().splitlines(), *table("other", test=FRACTIONS[1:3]).splitlines()]
    path = tmp_path / "mixtures.csv"
    path.write_text(HEADER + "\n".join(lines[::-2] + lines[::2]) + "\n", encoding="utf-8")
    return path


def test_terms_errors_and_predictions_in_the_order_of_the_rows(capsys: pytest.CaptureFixture[str], file: Path) -> None:
    code, out, err = run(capsys, "lab", "fit", str(file), "--law", "refutas", "--json")
    assert (code, err) == (0, "")
    answer = json.loads(out)
    assert set(answer) == {"pair", "other"}
    cells = [line.split(",") for line in file.read_text(encoding="utf-8").splitlines()[1:]]
    for system, found in answer.items():
        rows = [(float(f), float(v)) for name, f, v, _ in cells if name == system]
        assert len(found["predicted"]) == len(found["unfitted"]) == len(rows)
        a, b = (*found["terms"], 0.0, 0.0)[:2]
        for (f, kv), predicted, alone in zip(rows, found["predicted"], found["unfitted"], strict=True):
            # The terms are those of the law's index, and what is printed follows from them.
            assert predicted == pytest.approx(kv_at(f, (a, b)), rel=1e-6)
            assert alone == pytest.approx(kv_at(f, (0.0, 0.0)), rel=1e-6)
            assert predicted == pytest.approx(kv, rel=0.005 if system == "pair" else 0.03)
        assert [p for (f, _), p in zip(rows, found["predicted"], strict=True) if f in (0.0, 1.0)] == [
            v for f, v in rows if f in (0.0, 1.0)]
    assert answer["pair"]["form"] == "two"
    assert not answer["pair"]["provisional"]
    assert answer["pair"]["leave_one_out_pct"] == min(answer["pair"]["leave_one_out_by_form"].values())
    assert 0.0 < answer["pair"]["error_pct"]["test"] < answer["pair"]["unfitted_error_pct"]["test"]
    assert answer["other"]["provisional"]  # three blends to fit
    assert answer["other"]["leave_one_out_pct"] is None
    assert answer["other"]["leave_one_out_by_form"] is None
    assert len(answer["other"]["terms"]) == 1


def test_the_text_fits_the_screen_and_shows_every_form(capsys: pytest.CaptureFixture[str], file: Path) -> None:
    code, out, _ = run(capsys, "lab", "fit", str(file))
    assert code == 0
    assert max(len(line) for line in out.splitlines()) <= 80
    assert "pair, refutas: two terms from 4 blends\n" in out
    assert "other, refutas: one term from 3 blends, provisional\n" in out
    assert "leave-one-out error: no term" in out


def test_other_laws(capsys: pytest.CaptureFixture[str], tmp_path: Path, file: Path) -> None:
    code, out, _ = run(capsys, "lab", "fit", str(file), "--law", "walther-mass", "--json")
    assert code == 0
    assert 0.0 < json.loads(out)["pair"]["terms"][0] < 0.2  # in W, a much smaller scale
    code, out, err = run(capsys, "lab", "fit", str(file), "--law", "walther-volume")
    assert (code, out) == (2, "")
    assert err == ("mixtures.csv, density15: 'other': the law walther-volume needs the density of both stocks at "
                   "15 °C; give them, or use refutas or walther-mass (and 1 more)\n")
    dense = tmp_path / "dense.csv"
    dense.write_text("system,frac_mass,kv,use,density15\n" + table(more=",").replace("fit,\n", "fit,868\n"),
                     encoding="utf-8")
    code, out, _ = run(capsys, "lab", "fit", str(dense), "--law", "walther-volume", "--json")
    assert code == 0
    equal = json.loads(out)["pair"]
    code, out, _ = run(capsys, "lab", "fit", str(dense), "--law", "walther-mass", "--json")
    assert equal["terms"] == pytest.approx(json.loads(out)["pair"]["terms"])  # equal densities: the same law
    code, out, err = run(capsys, "lab", "fit", str(dense), "--law", "wright-volume")
    assert (code, out) == (2, "")
    assert err == ("dense.csv: 'pair': the law wright-volume needs each stock's KV at two temperatures, and here there "
                   "is one; use refutas, walther-mass or, with densities, walther-volume\n")


FAULTS = [
    (lambda t: t.replace("0.4,", "0.4,", 1).replace(",fit", ",train", 2).replace(",train", ",fit", 1),
     "f.csv row 3, use: 'train' is not known; write fit or test"),
    (lambda t: t.replace("pair,0.5,", "pair,0.5,", 1).replace(",test", ","),
     "f.csv row 5, use: the use is empty; write fit or test"),
    (lambda t: HEADER + "pair,0,10,\npair,0.5,31,fit\npair,0.5,31,fit\npair,1,100,\n",
     "f.csv row 3, use: 'pair': the 2 blends are one composition repeated, which cannot tell an excess from an error "
     "of that blend; measure another composition, or keep one blend with their mean; f.csv row 4: the same fraction "
     "and viscosity as in row 3; kept out of the fit: take it out, or write yes under confirmed"),
    (lambda t: t + "pair,1,100,test\n",
     "f.csv row 9, frac_mass: a second row at 1 of 'pair'; the first is row 8; keep one, with the mean of the results"),
    (lambda t: t.replace("pair,0.5,", "pair,50,"),
     "f.csv row 5, frac_mass: '50' lies outside 0 to 1; write the heavier stock's mass fraction; if it is in %, "
     "write 0.5"),
    (lambda t: t.replace("pair,0.5,", "pair,-0.5,"),
     "f.csv row 5, frac_mass: '-0.5' lies outside 0 to 1; write the heavier stock's mass fraction"),
    (lambda t: t.replace("pair,0,10.000000", "pair,0,0.21"),
     "f.csv row 2, kv: '0.21' lies outside what a law can carry; write a viscosity above 0.21 and up to 2e+07 mm²/s"),
    (lambda t: t.replace("pair,0,10.000000", "pair,0,-10"),
     "f.csv row 2, kv: '-10' lies outside what a law can carry; write a viscosity above 0.21 and up to 2e+07 mm²/s"),
    (lambda t: t.replace("pair,0,10.000000", "pair,0,nan"),
     "f.csv row 2, kv: 'nan' is not a quantity; leave the cell empty where the value is unknown"),
    (lambda t: t.replace("pair,0,10.000000", "pair,0,"),
     "f.csv row 2, kv: the viscosity is empty; write what was measured, mm²/s, or take the row out"),
    (lambda t: t.replace("pair,0,10.000000", 'pair,0,"10,5"'),
     "f.csv row 2, kv: '10,5' has a decimal comma; write 10.5"),
    (lambda t: t.replace("pair,0,10.000000", "pair,0,10,5"),
     "f.csv row 2: the row has 5 cells and the header 4; a comma too many? write decimals with a point, and put text "
     "that holds a comma in quotes"),
    (lambda t: t.replace("pair,0,", ",0,"),
     "f.csv row 2, system: the system is empty; give both stocks and their mixtures one name"),
    (lambda t: t.replace("pair,0,", ",0,").replace(",0.5,", ",0.5.5,"),
     "f.csv row 2, system: the system is empty; give both stocks and their mixtures one name (and 1 more)"),
    (lambda t: "\n".join(line for line in t.splitlines() if not line.startswith("pair,1,")) + "\n",
     "f.csv row 2, frac_mass: the system 'pair' has no row at 1; add the viscosity of the heavier stock alone"),
    (lambda t: t.replace("frac_mass", "share"),
     "f.csv row 1, frac_mass: this column is missing; add it; the file has system, share, kv, use"),
    (lambda t: "", "f.csv: the file is empty; it needs a header row with the columns system, frac_mass, kv, use"),
    (lambda t: t.splitlines()[0] + "\n",
     "f.csv: there is no row below the header; add the stocks (frac_mass 0 and 1) and the mixtures measured"),
    (lambda t: t.replace(",", ";"),
     "f.csv row 1: the columns are not separated by commas; save it as CSV with commas"),
    (lambda t: t.replace(",fit", ",test"),
     "f.csv row 2, use: 'pair': no measured blend of this pair, and one term needs at least one; measure one, best "
     "near half and half"),
    (lambda t: HEADER + "pair,0,10,\npair,0.5,31,fit\npair,0.5,31.1,fit\npair,1,100,\n",
     "f.csv row 3, use: 'pair': the 2 blends are one composition repeated, which cannot tell an excess from an error "
     "of that blend; measure another composition, or keep one blend with their mean"),
]


@pytest.mark.parametrize(("spoil", "says"), FAULTS)
def test_faults_in_one_line(capsys: pytest.CaptureFixture[str], tmp_path: Path, spoil, says: str) -> None:
    path = tmp_path / "f.csv"
    text = spoil(HEADER + table())
    path.write_text(text, encoding="utf-8")
    code, out, err = run(capsys, "lab", "fit", str(path), "--json")
    assert (code, out) == (2, "")
    assert err == says + "\n"


def test_files_and_laws_that_are_not_there(capsys: pytest.CaptureFixture[str], tmp_path: Path, file: Path) -> None:
    code, _, err = run(capsys, "lab", "fit", str(tmp_path / "none.csv"))
    assert (code, err) == (2, "none.csv: cannot be read: no such file or directory; check the path and the rights\n")
    code, _, err = run(capsys, "lab", "fit", str(tmp_path))
    assert (code, err) == (2, f"{tmp_path.name}: is not a file; move it away and put the CSV file there\n")
    code, _, err = run(capsys, "lab", "fit", "")
    assert (code, err) == (2, "the path of the file is empty; name a CSV file\n")
    code, _, err = run(capsys, "lab", "fit", str(file), "--law", "arrhenius")
    assert (code, err) == (2, "unknown law 'arrhenius'; known are refutas, walther-mass, walther-volume, wright-mass, "
                              "wright-volume\n")
    code, _, err = run(capsys, "lab", "fit")
    assert code == 2
    assert err.count("\n") == 1


def test_a_result_in_sus_is_questioned_and_kept_out_until_confirmed(capsys: pytest.CaptureFixture[str],
                                                                   tmp_path: Path) -> None:
    path = tmp_path / "f.csv"
    sus = 4.7 * kv_at(0.8)
    spoilt = table().replace(f"pair,0.8,{kv_at(0.8):.6f}", f"pair,0.8,{sus:.1f}")
    path.write_text(HEADER + spoilt, encoding="utf-8")
    code, out, err = run(capsys, "lab", "fit", str(path), "--json")
    assert code == 0
    alone = kv_at(0.8, (0.0, 0.0))
    assert err == (f"note: f.csv row 7, kv: {sus:.1f} is {sus / alone:.2g} times the {alone:.4g} of the law; it looks "
                   "like SUS written as mm²/s; kept out of the fit: mend it, or write yes under confirmed\n")
    kept_out = json.loads(out)["pair"]
    assert kept_out["questions"] == [err.removeprefix("note: ").strip()]
    assert kept_out["provisional"]
    path.write_text("system,frac_mass,kv,use,confirmed\n" + spoilt.replace("\n", ",yes\n"), encoding="utf-8")
    code, out, err = run(capsys, "lab", "fit", str(path), "--json")
    assert (code, err) == (0, "")
    taken = json.loads(out)["pair"]
    assert not taken["questions"]
    assert taken["terms"] != kept_out["terms"]


def test_a_result_written_twice_is_questioned_and_counts_once(capsys: pytest.CaptureFixture[str],
                                                              tmp_path: Path) -> None:
    path = tmp_path / "f.csv"
    path.write_text(HEADER + table(), encoding="utf-8")
    once = json.loads(run(capsys, "lab", "fit", str(path), "--json")[1])["pair"]
    path.write_text(HEADER + table() + table().splitlines()[2] + "\n", encoding="utf-8")
    code, out, err = run(capsys, "lab", "fit", str(path), "--json")
    twice = json.loads(out)["pair"]
    assert (code, err) == (0, "note: f.csv row 9: the same fraction and viscosity as in row 4; kept out of the fit: "
                              "take it out, or write yes under confirmed\n")
    assert twice["terms"] == once["terms"]
    assert len(twice["predicted"]) == len(once["predicted"]) + 1


def test_where_every_result_is_doubtful_the_law_alone_answers_and_says_so(capsys: pytest.CaptureFixture[str],
                                                                         tmp_path: Path) -> None:
    path = tmp_path / "f.csv"
    path.write_text(HEADER + "pair,0,10,\npair,1,100,\npair,0.5,310,fit\npair,0.25,18,test\n", encoding="utf-8")
    code, out, err = run(capsys, "lab", "fit", str(path), "--json")
    found = json.loads(out)["pair"]
    assert code == 0
    assert (found["terms"], found["form"], found["predicted"]) == ([], "none", found["unfitted"])
    assert "note: " + found["questions"][0] + "\n" == err
    code, out, _ = run(capsys, "lab", "fit", str(path))
    assert "pair, refutas: no term from no blends, provisional\n" in out
    assert [line.split()[-2:] for line in out.splitlines() if line.startswith("  0.5")] == [["kept", "out"]]


def test_a_long_name_stays_within_80_columns(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "f.csv"
    path.write_text(HEADER + table("ö" * 60, test=FRACTIONS[1:3]), encoding="utf-8")
    code, out, _ = run(capsys, "lab", "fit", str(path))
    assert code == 0
    assert max(map(len, out.splitlines())) == 80  # cut to fit


def test_ends_worked_out_of_moles_are_the_stocks(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "f.csv"
    path.write_text(HEADER + "pair,1e-17,10,fit\npair,1.0000000000000002,100,test\npair,0.5,31,fit\n",
                    encoding="utf-8")
    code, out, _ = run(capsys, "lab", "fit", str(path), "--json")
    assert code == 0
    assert json.loads(out)["pair"]["predicted"][:2] == [10.0, 100.0]


def test_a_column_that_nothing_uses_is_told(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "f.csv"
    path.write_text("system,frac_mass,kv,use,lot\n" + table(more=",7"), encoding="utf-8")
    code, _, err = run(capsys, "lab", "fit", str(path))
    assert (code, err) == (0, "note: the column 'lot' of f.csv is not used\n")
