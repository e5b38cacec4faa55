"""What cannot be true and what is unlikely: each in words, with the value that would do."""

from __future__ import annotations

from dataclasses import replace

import pytest

from solver.doubts import doubts, faults
from solver.stocks import Stock

GOOD = Stock("S", kv40=30.2, kv100=5.23, density15=870.0, price_per_t=800.0, on_hand_kg=5000.0, unpumpable_kg=500.0,
             api_group="I", values={"flash": 214.0, "pour": -12.0, "saturates": 75.0, "sulfur": 0.4})


def test_a_plain_stock_raises_nothing() -> None:
    assert faults(GOOD) == doubts(GOOD) == ()


@pytest.mark.parametrize(("change", "cell", "words", "suggestion"), [
    ({"density15": 0.868}, "density15", "density 0.868 looks like kg/L; in kg/m³ it is 868", 868.0),
    ({"kv40": 5.23, "kv100": 30.2}, "kv100", "kv100 30.2 is not below kv40 5.23: oil thins as it warms; are the two "
                                             "swapped?", 5.23),
    ({"kv100": 0.1}, "kv100", "kv100 0.1 mm²/s is below 0.3, thinner than any oil; is the unit right?", None),
    ({"kv40": -3.0}, "kv40", "kv40 -3 mm²/s is negative", None),
    ({"kv40": None}, "kv40", "a base stock needs both KV40 and KV100; kv40 is empty", None),
    ({"blend_kv40": 60.0}, "blend_kv100", "one blending KV without the other; give both or neither", None),
    ({"price_per_t": -1.0}, "price_per_t", "price -1 is below 0", None),
    ({"kind": "oil"}, "kind", "'oil' is not known; usable are base, vi_improver, additive, pour_depressant, rework",
     None)])
def test_faults(change: dict[str, object], cell: str, words: str, suggestion: float | None) -> None:
    found = faults(replace(GOOD, **change))  # type: ignore[arg-type]
    assert [(d.cell, d.says, d.suggestion) for d in found] == [(cell, words, suggestion)]


@pytest.mark.parametrize(("change", "cell", "words"), [
    ({"kv40": 30.2, "kv100": 9.0}, "kv100", "mean a viscosity index of 303"),
    ({"kv40": 30.2, "kv100": 1.9}, "kv100", "mean a slope of 7.3; thin oils lie between 3 and 4.5"),
    ({"values": {"flash": 410.0}}, "flash", "flash point 410 °C is unusual (120 to 310); was it °F? that is 210 °C"),
    ({"values": {"pour": 12.0}}, "pour", "pour point 12 °C is high; was it °F (-11.1 °C), or a minus forgotten?"),
    ({"density15": 720.0}, "density15", "density 720 kg/m³ is unusual for a lubricant stock"),
    ({"price_per_t": 0.8}, "price_per_t", "price 0.8 per tonne is low; was it meant per kg?"),
    ({"unpumpable_kg": 9000.0}, "unpumpable_kg", "the bottoms 9000 kg are more than the 5000 kg on hand"),
    ({"api_group": "II"}, "api_group", "saturates, sulphur and VI 103 say group I, not II")])
def test_doubts(change: dict[str, object], cell: str, words: str) -> None:
    stock = replace(GOOD, **change)  # type: ignore[arg-type]
    assert faults(stock) == ()
    found = doubts(stock)
    assert [d.cell for d in found] == [cell]
    assert words in found[0].says
