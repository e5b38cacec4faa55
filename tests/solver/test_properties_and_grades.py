"""The registry, its mixing rules, and the grades."""

from __future__ import annotations

import numpy as np
import pytest

from solver.errors import TargetError
from solver.gauge import property_gauge
from solver.grades import ISO_VG, api_group, grade, iso_vg
from solver.properties import known, lookup, stock_codes
from solver.recipe import predict_all
from solver.stocks import Stock, StockTable


def pair(density=(868.0, 897.0), **values: tuple[float | None, float | None]) -> StockTable:
    return StockTable(
        Stock(f"S{i}", kv40=(30.6, 480.0)[i], kv100=(5.23, 31.5)[i], density15=density[i],
              values={k: v[i] for k, v in values.items() if v[i] is not None}) for i in range(2))


HALF = np.array([0.5, 0.5])


def test_density_mixes_by_volume() -> None:
    assert round(predict_all(pair(), HALF, "refutas")["density15"], 4) == 882.2618  # 1/ρ = Σ w/ρ, computed


def test_flash_index_table() -> None:
    # log10 BI = −6.1188 + 2414/(T_K − 42.6); the index table read beside the formula.
    for celsius, index in ((20, 3281), (50, 306), (60, 155), (80, 45), (100, 15)):
        assert round(float(lookup("flash").index(celsius))) == index


def test_flash_and_pour_of_a_blend() -> None:
    table = pair(density=(880.0, 880.0), flash=(200.0, 280.0), pour=(-15.0, -39.0))
    # Computed from the formulas, equal densities so that volume and mass are one.
    assert property_gauge(table, lookup("flash")).read(HALF) == pytest.approx(219.85, abs=0.01)
    assert property_gauge(table, lookup("pour")).read(np.array([0.7, 0.3])) == pytest.approx(-19.86, abs=0.01)
    assert lookup("flash").trust == lookup("pour").trust == "screening"


def test_mass_balance_and_unknown() -> None:
    table = pair(sulfur=(0.4, 0.8), zinc=(100.0, 500.0), noack=(15.0, None))
    found = predict_all(table, HALF, "refutas")
    assert found["sulfur"] == pytest.approx(0.6)
    assert found["zinc"] == pytest.approx(300.0)
    assert found["noack"] is None  # unknown is unknown, never zero
    assert found["flash"] is None


def test_cold_cranking_mixes_by_logarithm() -> None:
    table = pair(**{"ccs-25": (2000.0, 8000.0)})
    assert predict_all(table, HALF, "refutas")["ccs-25"] == pytest.approx(4000.0)
    assert lookup("ccs-25").trust == "unvalidated"


def test_every_entry_goes_there_and_back() -> None:
    for code in (*stock_codes(), "density15", "ccs-25"):
        entry = lookup(code)
        for value in (0.02, 40.0, 90.0) if entry.lowest <= 0.02 else (700.0, 900.0):
            assert float(entry.value(entry.index(value))) == pytest.approx(value, abs=1e-9)
        assert entry.reproducibility(50.0) > 0.0
        assert entry.method
        assert entry.name


def test_required_codes_are_there() -> None:
    asked = ["density15", "flash", "pour", "noack", "sulfur", "base_number", "acid_number", "ash", "water", "calcium",
             "magnesium", "zinc", "phosphorus", "boron", "saturates", "vi", "kv40", "kv100", "kv-20", "kv60", "ccs-30"]
    assert [lookup(code).code for code in asked] == asked
    assert "ccs<°C>" in known()
    with pytest.raises(TargetError, match="unknown property 'colour'; known are kv40, kv100, kv<°C>"):
        lookup("colour")
    with pytest.raises(TargetError, match="must lie between −60 to 200 °C"):
        lookup("kv999")


def test_iso_3448() -> None:
    middles = [2.2, 3.2, 4.6, 6.8, 10, 15, 22, 32, 46, 68, 100, 150, 220, 320, 460, 680, 1000, 1500, 2200, 3200]
    assert list(ISO_VG.values()) == middles  # ISO 3448; the last two from memory
    limit = grade("ISO VG 46").limits[0]
    assert (limit.property, limit.low, limit.high) == ("kv40", 41.4, 50.6)
    assert [iso_vg(v) for v in (41.4, 50.6, 41.39, 4.6, 6.8, 2.0)] == [46, 46, None, 5, 7, 2]


# SAE J300 (2015 table): KV100 from, below, least HTHS.
J300 = {"8": (4.0, 6.1, 1.7), "12": (5.0, 7.1, 2.0), "16": (6.1, 8.2, 2.3), "20": (6.9, 9.3, 2.6),
        "30": (9.3, 12.5, 2.9), "40": (12.5, 16.3, 3.7), "50": (16.3, 21.9, 3.7), "60": (21.9, 26.1, 3.7)}


@pytest.mark.parametrize("name", J300)
def test_sae_j300_summer(name: str) -> None:
    low, below, hths = J300[name]
    found = grade(f"SAE {name}")
    assert (found.limits[0].low, found.limits[0].high) == (low, pytest.approx(below - 0.01))
    assert found.to_be_tested == (f"HTHS at 150 °C at least {hths:g} mPa·s",)


def test_sae_j300_winter() -> None:
    found = grade("SAE 10W-40")  # SAE J300: CCS 7000 at −25, MRV at −30, KV100 4.1; HTHS 3.5 with 10W
    assert [(x.property, x.low, x.high) for x in found.limits] == [("kv100", 4.1, None), ("kv100", 12.5, 16.29)]
    assert [(x.property, x.high) for x in found.if_known] == [("ccs-25", 7000)]
    assert found.to_be_tested == ("pumping viscosity (MRV) at -30 °C at most 60000 mPa·s, no yield stress",
                                  "HTHS at 150 °C at least 3.5 mPa·s")
    assert grade("SAE 15W-40").to_be_tested[-1] == "HTHS at 150 °C at least 3.7 mPa·s"


def test_sae_j306() -> None:
    found = grade("SAE 80W-90")  # SAE J306, February 2019
    assert [(x.low, x.high) for x in found.limits] == [(8.5, None), (13.5, 18.49)]
    assert found.to_be_tested[0] == "low-temperature viscosity at -26 °C at most 150000 mPa·s"
    assert grade("SAE 250").limits[0].high is None


def test_unknown_grade() -> None:
    for name in ("ISO VG 47", "SAE 10W-90", "XYZ", "SAE"):
        with pytest.raises(TargetError, match="unknown grade"):
            grade(name)


def test_api_groups() -> None:
    # API base-stock groups by saturates, sulphur and VI.
    assert api_group(75.0, 0.4, 98.0) == "I"
    assert api_group(97.0, 0.002, 103.0) == "II"
    assert api_group(99.0, 0.001, 128.0) == "III"
    assert api_group(97.0, 0.04, 103.0) == "I"
    assert api_group(None, 0.001, 103.0) is None
    assert api_group(99.0, 0.0, 60.0) is None
