"""Seeded trims, invented; and the blending laws once more, written out without the solver, to judge them by.

Everything here but the making of cases is closed form and scalar: Refutas (R: Maples 2000), Walther and Wright on
D341 lines in the short form (R), flash index by volume (R, index table), ideal density, mass balance of sulphur.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import exp, log, log10

import numpy as np
from chemicals.viscosity import viscosity_index
from scipy.optimize import brentq

from solver.stocks import Stock
from solver.target import LAWS, Limit, ShareRule, Target
from tests.benchmarks.plants import random_plant

KELVIN = 273.15
Masses = Sequence[tuple[Stock, float]]  # (stock, kg)


def w_of(kv: float) -> float:
    """log10 log10 Z of a KV [mm²/s]."""
    return log10(log10(kv + 0.7 + exp(-1.47 - 1.84 * kv - 0.51 * kv * kv)))


def of_w(w: float) -> float:
    """KV [mm²/s] of log10 log10 Z."""
    return float(brentq(lambda kv: w_of(kv) - w, 0.3, 1e6, xtol=1e-13, rtol=1e-15))


def line(stock: Stock) -> tuple[float, float]:
    """a and b of W = a − b log10 T."""
    assert stock.kv40 is not None
    assert stock.kv100 is not None
    w40, w100 = w_of(stock.kv40), w_of(stock.kv100)
    t40, t100 = log10(40.0 + KELVIN), log10(100.0 + KELVIN)
    b = (w40 - w100) / (t100 - t40)
    return w40 + b * t40, b


def kv(masses: Masses, law: str, celsius: float) -> float:
    """KV [mm²/s] of what these masses make."""
    part = [kg / (stock.density15 or 1.0) if law.endswith("volume") else kg for stock, kg in masses]
    part = [p / sum(part) for p in part]
    if law == "refutas":
        assert celsius in (40.0, 100.0)
        own = [(stock.kv40 if celsius == 40.0 else stock.kv100) or 0.0 for stock, _ in masses]
        index = sum(p * (14.534 * log(log(v + 0.8)) + 10.975) for p, v in zip(part, own, strict=True))
        return exp(exp((index - 10.975) / 14.534)) - 0.8
    lines, t = [line(stock) for stock, _ in masses], log10(celsius + KELVIN)
    if law.startswith("walther"):
        return of_w(sum(p * (a - b * t) for p, (a, b) in zip(part, lines, strict=True)))
    # Wright: at the W sought the weighted mean of log T is that of the temperature.
    return of_w((sum(p * a / b for p, (a, b) in zip(part, lines, strict=True)) - t) /
                sum(p / b for p, (_, b) in zip(part, lines, strict=True)))


def read(masses: Masses, law: str) -> dict[str, float]:
    """Every limited property of what these masses make."""
    total = sum(kg for _, kg in masses)
    volume = [kg / (stock.density15 or 1.0) for stock, kg in masses]
    kv40, kv100 = kv(masses, law, 40.0), kv(masses, law, 100.0)
    index = sum(v * 10.0 ** (-6.1188 + 2414.0 / (stock.values["flash"] + KELVIN - 42.6))
                for v, (stock, _) in zip(volume, masses, strict=True)) / sum(volume)
    return {"kv40": kv40, "kv100": kv100, "vi": float(viscosity_index(kv40 * 1e-6, kv100 * 1e-6)),
            "density15": total / sum(volume),
            "flash": 2414.0 / (log10(index) + 6.1188) + 42.6 - KELVIN,
            "sulfur": sum(kg * stock.values.get("sulfur", 0.0) for stock, kg in masses) / total}


def part_of(stock: Stock, of: str) -> float:
    """What a share rule on a stock's code counts of another: itself, or what was put into it."""
    return 1.0 if stock.code == of else sum(part for inside, part in stock.contents if inside.code == of)


@dataclass(frozen=True)
class Case:
    """One trim that there is, for it was made first and the limits were drawn about it."""

    contents: tuple[Stock, ...]
    stocks: tuple[Stock, ...]
    target: Target
    room_kg: float
    known: Mapping[str, float]  # stock → kg of a trim that lies inside everything

    def after(self, added: Mapping[str, float], kept: float = 1.0) -> list[tuple[Stock, float]]:
        """What the vessel then holds."""
        by_code = {s.code: s for s in self.stocks}
        return [(s, kept * (s.in_vessel_kg or 0.0)) for s in self.contents] + [
            (by_code[code], kg) for code, kg in added.items()]


def trim_case(k: int, law: str = "") -> Case:
    """Seeded case k: 4 to 14 stocks, some in steps and drums, a batch of 8 to 25 t, laws in turn, a treat rate in two
    of three, windows on KV40, mostly KV100, VI, sulphur and flash about one trim of 2 to 20 % of the batch."""
    rng = np.random.default_rng([404, k])
    law = law or LAWS[k % len(LAWS)]
    stocks = [_stepped(stock, rng) for stock in random_plant(rng, int(rng.integers(4, 15))).stocks]
    batch_kg, rules, contents = float(np.round(rng.uniform(8e3, 25e3), 1)), [], ()
    which = rng.choice(len(stocks), 2, replace=False)
    added = {stocks[i].code: float(batch_kg * rng.uniform(0.02, 0.1)) for i in which}
    batch = random_plant(rng, 1).stocks[0]
    if k % 3:
        rate = float(rng.choice([0.005, 0.01, 0.08]))
        additive = Stock("ADD", kind="additive", kv40=120.0, kv100=13.0, density15=950.0, price_per_t=3000.0,
                         on_hand_kg=5000.0, values={"flash": 180.0, "pour": -20.0, "sulfur": 2.0},
                         division_kg=float(rng.choice([0.1, 1.0])))
        contents, rules = ((additive, rate),), [ShareRule("ADD", rate, rate)]
        stocks.append(additive)
        added["ADD"] = sum(added.values()) * rate / (1.0 - rate)
    measured = Stock("BATCH", in_vessel_kg=batch_kg, kv40=batch.kv40, kv100=batch.kv100, density15=batch.density15,
                     values=batch.values, contents=contents, source="own")
    bare = Case((measured,), tuple(stocks), Target("trimmed"), 0.0, added)
    return Case((measured,), tuple(stocks), Target("trimmed", _windows(read(bare.after(added), law), rng), tuple(rules),
                                                   law=law), float(sum(added.values()) * rng.uniform(1.05, 3.0)), added)


def _stepped(stock: Stock, rng: np.random.Generator) -> Stock:
    """A stock in any mass, in scale divisions, or in drums."""
    division, package = [(None, None), (10.0, None), (1.0, None), (None, 180.0)][rng.choice(4, p=[.3, .3, .3, .1])]
    return Stock(stock.code, kv40=stock.kv40, kv100=stock.kv100, density15=stock.density15, on_hand_kg=6e4,
                 price_per_t=stock.price_per_t, values=stock.values, division_kg=division, package_kg=package)


def _windows(at: Mapping[str, float], rng: np.random.Generator) -> tuple[Limit, ...]:
    wide = float(rng.uniform(0.012, 0.05))
    found = [Limit("kv40", at["kv40"] * (1.0 - wide * rng.uniform(0.3, 1.0)), at["kv40"] * (1.0 + wide))]
    if rng.random() < 0.7:
        found.append(Limit("kv100", at["kv100"] * (1.0 - wide), at["kv100"] * (1.0 + wide)))
    if rng.random() < 0.7:
        found.append(Limit("vi", at["vi"] - float(rng.uniform(0.5, 3.0)),
                           at["vi"] + 6.0 if rng.random() < 0.2 else None))
    if rng.random() < 0.5:
        found.append(Limit("sulfur", None, 1.03 * at["sulfur"]))
    if rng.random() < 0.5:
        found.append(Limit("flash", at["flash"] - 3.0))
    return tuple(found)
