"""What is wrong with a measured blend (faults) and what is doubtful about it (questions), in words.

A blend with a fault teaches nothing. A doubtful one is kept out of every fit until somebody has looked at it and
says that it is so (`Measured.confirmed`). Shares that do not sum and stocks that are not known are faults: no
confirmation makes them true.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from .errors import RangeError, TargetError
from .laws import knows_viscosity, viscosity_gauge
from .measured import Measured
from .properties import Array, lookup
from .scales import kv_of_sus
from .stocks import StockTable
from .target import LAWS, Lesson
from .walther import density_at

SUM = 1e-4  # shares sum to 1 within 0.01 %
FACTOR = 1.5  # times above or below the prediction: no law is so wrong of oils, but a slip of units is
NEAR_SLIP = 0.2  # a slip explains a result when what it would have been meets the prediction so nearly
NEAR_DENSITY = 0.02  # mPa·s for mm²/s is only 10 to 20 % off: divided by the density it must lie among the laws …
BELOW_LAWS = 0.05  # … and by itself so far below all of them
_SLIPS = ((10.0, "the decimal point one place too far right"), (0.1, "the decimal point one place too far left"),
          (100.0, "St typed as mm²/s, or the decimal point two places too far right"),
          (0.01, "mm²/s typed as St, or the decimal point two places too far left"))


@dataclass(frozen=True)
class Question:
    """One remark on one measured blend."""

    blend: str  # its name
    cell: str  # "shares", "stock", "name" or a property code
    says: str  # what it looks like
    do: str  # what to do
    fault: bool = False  # cannot be confirmed
    suggestion: float | None = None  # what the cell would be, in its own unit, if there is an obvious value

    def __str__(self) -> str:
        return f"{self.blend}: {self.says}; {self.do}"


def fit_for_use(measured: Sequence[Measured], law: str = "refutas", known: Collection[str] | None = None,
                taught: Sequence[Lesson] = ()) -> tuple[tuple[Measured, ...], tuple[Question, ...]]:
    """The blends that may teach, and every question on all of them, in order.

    known: the codes (and oils) of the plant's stocks; None: every stock named is taken to be one. taught: lessons in
    use, with which a result is compared.
    """
    asked: list[Question] = []
    kept = []
    for place, blend in enumerate(measured):
        own = (*questions(blend, law, known, taught), *_repeats(blend, measured[:place]))
        asked += own
        if not any(q.fault for q in own) and (blend.confirmed or not own):
            kept.append(blend)
    return tuple(kept), tuple(asked)


def questions(blend: Measured, law: str = "refutas", known: Collection[str] | None = None,
              taught: Sequence[Lesson] = ()) -> tuple[Question, ...]:
    """Faults and doubts of one blend by itself; doubts only where there is no fault."""
    faults = (*_share_faults(blend, known), *_value_faults(blend))
    return faults or (*_swapped(blend), *_far_off(blend, law, taught))


def _share_faults(blend: Measured, known: Collection[str] | None) -> list[Question]:
    def fault(cell: str, says: str, do: str) -> Question:
        return Question(blend.name, cell, says, do, fault=True)

    found = []
    codes = [part.stock for part in blend.parts]
    if not codes:
        return [fault("shares", "there is no stock in it", "enter what was mixed, or take the blend out")]
    wrong = [p for p in blend.parts if not 0.0 < p.share <= 1.0 + SUM]
    found += [fault("shares", f"the share of {p.stock} is {100.0 * p.share:g} %", "enter more than 0 and up to 100 %, "
                    "or take the stock out") for p in wrong]
    total = sum(part.share for part in blend.parts)
    if not wrong and abs(total - 1.0) > SUM + 1e-9:
        found.append(fault("shares", f"the shares sum to {100.0 * total:.2f} %, not 100 %",
                           "find the share that is wrong or missing; a heel counts too"))
    for code in dict.fromkeys(codes):
        if codes.count(code) > 1:
            found.append(fault("stock", f"{code} stands in it {codes.count(code)} times",
                               "add the shares, or give each lot a code of its own"))
        if known is not None and code not in known:
            found.append(fault("stock", f"the stock {code!r} is not known here",
                               "enter the stock with its values at the time, or mend the code"))
    return found


def _value_faults(blend: Measured) -> list[Question]:
    if not blend.values:
        return [Question(blend.name, "", "nothing was measured on it", "enter at least one result", fault=True)]
    found = []
    for code, value in blend.values.items():
        try:
            entry = lookup(code)
        except TargetError as error:
            found.append(Question(blend.name, code, str(error).partition(";")[0], "mend the code", fault=True))
            continue
        if not entry.lowest <= value <= entry.highest:
            says = f"{entry.name} {value:g} {entry.unit}".rstrip()
            found.append(Question(blend.name, code, f"{says} lies outside {entry.lowest:g} to {entry.highest:g}",
                                  "check the figure and its unit", fault=True))
    return found


def _swapped(blend: Measured) -> list[Question]:
    cold, hot = blend.values.get("kv40"), blend.values.get("kv100")
    if cold is None or hot is None or hot < cold:
        return []
    return [Question(blend.name, "kv100", f"KV100 {hot:g} is not below KV40 {cold:g}: oil thins as it warms",
                     "if the two are swapped, swap them", suggestion=cold)]


def _far_off(blend: Measured, law: str, taught: Sequence[Lesson]) -> list[Question]:
    """What is off by a factor, or lies where no blend of its stocks can."""
    if _swapped(blend):
        return []
    found = []
    for code, value in blend.values.items():
        if lookup(code).basis != "law":
            continue
        table = blend.table()
        celsius = float(lookup(code).temperature or 0.0)
        seen = _seen(table, blend, celsius, law, taught)
        if seen is None:
            continue
        every, own = seen
        predicted, low, high = every[law], min(own), max(own)
        spread = (max(every.values()) - min(every.values())) / predicted
        allowed = spread + lookup(code).reproducibility(value) / value
        remark = _slip(blend, code, value, predicted, law, taught) or _dynamic(table, blend, celsius, value, every)
        if remark is None and not low * (1.0 - allowed) <= value <= high * (1.0 + allowed):
            remark = (f"it lies outside the {low:.4g} to {high:.4g} of its stocks",
                      "check the sample and what was charged; confirm it if it was measured twice", None)
        if remark is not None:
            says, do, suggestion = remark
            found.append(Question(blend.name, code, f"{lookup(code).name} {value:.4g} mm²/s where {law} says "
                                  f"{predicted:.4g}: {says}", do, suggestion=suggestion))
    return found


def _seen(table: StockTable, blend: Measured, celsius: float, law: str, taught: Sequence[Lesson]
          ) -> tuple[dict[str, float], list[float]] | None:
    """KV [mm²/s] by every law that can be computed, and of each stock by itself; None: this law cannot be."""
    shares = np.array([part.share for part in blend.parts])
    kv = table.kv
    if not (np.isfinite(kv).all() and np.all(kv[:, 1] < kv[:, 0])):
        return None
    usable = [name for name in LAWS if knows_viscosity(name, table).all()]
    if law not in usable:
        return None
    try:
        every = {name: _predicted(name, table, shares, celsius, taught) for name in usable}
        own = [_predicted(law, table, alone, celsius, taught) for alone in np.eye(len(table))]
    except RangeError:
        return None  # thinner than the lines reach: nothing to compare with
    return every, own


def _predicted(law: str, table: StockTable, shares: Array, celsius: float, taught: Sequence[Lesson]) -> float:
    """KV [mm²/s] by a law with the lessons in use."""
    return viscosity_gauge(law, table, celsius, taught).read(shares)


Remark = tuple[str, str, float | None]  # what it looks like, what to do, what it would be


def _slip(blend: Measured, code: str, value: float, predicted: float, law: str, taught: Sequence[Lesson]
          ) -> Remark | None:
    """A result off by a factor, and the slip of the pen that would explain it."""
    times = value / predicted
    if 1.0 / FACTOR <= times <= FACTOR:
        return None
    near = sorted((abs(float(np.log(meant / predicted))), meant, says, do)
                  for meant, says, do in _meanings(blend, code, value, law, taught))
    likely = [one for one in near if one[0] <= NEAR_SLIP][:2]
    if likely:
        # Two slips can lead to one figure: then both are named, and which it was is for a person to say.
        return f"it looks like {' or '.join(one[2] for one in likely)}", likely[0][3], likely[0][1]
    return f"{times:.2g} times too much" if times > 1.0 else f"only {times:.2g} of it", (
        "check the unit, the temperature and what was charged; confirm it if it was measured twice"), None


def _meanings(blend: Measured, code: str, value: float, law: str, taught: Sequence[Lesson]
              ) -> Iterable[tuple[float, str, str]]:
    """What a result would be [mm²/s] if a usual slip had been made, with the words for it."""
    hot = code == "kv100"
    if code in ("kv40", "kv100"):
        try:
            fahrenheit = 210 if hot else 100
            yield (kv_of_sus(value, fahrenheit), f"SUS at {fahrenheit} °F typed as mm²/s",
                   "convert it (both temperatures, as 215/46 SUS) and enter mm²/s")
        except RangeError:
            pass
    for factor, says in _SLIPS:
        yield value / factor, says, "mend the figure"
    if code in ("kv40", "kv100"):
        table = blend.table()
        shares = np.array([part.share for part in blend.parts])
        there, here = (_predicted(law, table, shares, celsius, taught)
                       for celsius in ((40.0, 100.0) if hot else (100.0, 40.0)))
        # At the other temperature it would be right: then here it would be what is predicted here.
        yield (value / there * here, f"the KV at {'40' if hot else '100'} °C", "enter it under its own temperature")


def _dynamic(table: StockTable, blend: Measured, celsius: float, value: float, every: dict[str, float]
             ) -> Remark | None:
    """mPa·s typed as mm²/s: too small by just the density, and below what any law says."""
    if not np.isfinite(table.density).all():
        return None
    shares = np.array([part.share for part in blend.parts])
    kg_per_l = density_at(float(1.0 / (shares / table.density).sum()), celsius) / 1000.0
    least, most = min(every.values()), max(every.values())
    among = least * (1.0 - NEAR_DENSITY) <= value / kg_per_l <= most * (1.0 + NEAR_DENSITY)
    if not among or value > least * (1.0 - BELOW_LAWS):
        return None
    return ("it looks like mPa·s typed as mm²/s", f"divide by the density there, {kg_per_l:.3f} kg/L, and enter mm²/s",
            value / kg_per_l)


def _repeats(blend: Measured, before: Sequence[Measured]) -> list[Question]:
    """A blend that is already there, under its name or as it stands."""
    for other in before:
        if other.name == blend.name:
            return [Question(blend.name, "name", "a blend of this name is already there",
                             "give each blend a name of its own, or take one out")]
        same = {p.stock: p.share for p in other.parts} == {p.stock: p.share for p in blend.parts}
        if same and other.values and dict(other.values) == dict(blend.values):
            return [Question(blend.name, "name", f"it has the shares and the results of {other.name}",
                             "if it was entered twice, take one out; if it is another batch, confirm it")]
    return []

