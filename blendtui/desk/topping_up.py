"""A tank that is topped up: its values from what was in it and what came, by the laws of a blend.

    x = q/(q + r),   value = law(x · tank, (1 − x) · delivery)

q is the book quantity, bottoms included, and r the delivery [kg]: the two are blended as stocks are. Neat and
blending viscosities mix each for itself. A value that only one of the two has is not known of the mixture.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

from blendtui.store.reads import joined
from solver.stocks import Stock

from .errors import DeskError

COMPUTED = "computed"
PAIR = ("kv40", "kv100")
OWN_COLUMN = (*PAIR, "density15", "blend_kv40", "blend_kv100")
LEAST_PART = 1e-12  # of a tank: a lot with less is gone
EARLIER = "before"  # the lot under which oil stands that was there before the first receipt
STAND_IN = (32.0, 5.4)  # mm²/s at 40 and 100 °C


@dataclass(frozen=True)
class Mixed:
    """What a tank holds after a receipt."""

    stock: Stock  # with its new values; the quantity is as it was
    lost: tuple[str, ...] = ()  # properties known of the tank or of the delivery alone, and so no longer


def value_of(stock: Stock, code: str) -> float | None:
    """A value that a delivery can have, None where unknown."""
    return getattr(stock, code) if code in OWN_COLUMN else stock.values.get(code)


def codes_of(*stocks: Stock) -> tuple[str, ...]:
    """Every value that one of these stocks has."""
    own = [c for c in OWN_COLUMN if any(value_of(s, c) is not None for s in stocks)]
    return (*own, *dict.fromkeys(code for s in stocks for code in s.values))


def delivered(tank: Stock, cells: Mapping[str, float], keep: bool = False) -> Stock:
    """A delivery as a stock: the values typed, and with `keep` the tank's own for every other."""
    of = {c: value_of(tank, c) for c in codes_of(tank)} if keep else {}
    given: dict[str, Any] = {**of, **cells}
    others = {c: v for c, v in given.items() if c not in OWN_COLUMN and v is not None}
    own: dict[str, Any] = {c: given.get(c) for c in OWN_COLUMN}
    return Stock(tank.code, kind=tank.kind, values=others, **own)


def topped_up(tank: Stock, came: Stock, kg: float, *, source: str, tested_on: str, law: str = "refutas") -> Mixed:
    """The tank after `kg` [kg] of `came` were received on a book quantity that is known and not below 0.

    An empty tank takes the delivery's values, its source and its date. Else source is "computed" and no date of a
    test stands beside it, for nobody has tested this oil yet; how sure the old values were is no longer said either.
    Blending viscosities that no certificate gave stay: they are the plant's own of this material.
    """
    there = tank.on_hand_kg or 0.0
    pair: dict[str, Any] = {c: value_of(came, c) if came.blend_kv40 is not None else value_of(tank, c)
                            for c in ("blend_kv40", "blend_kv100")}
    if there <= 0.0:
        lost = tuple(c for c in codes_of(tank) if value_of(came, c) is None and c not in pair)
        return Mixed(replace(tank, kv40=came.kv40, kv100=came.kv100, density15=came.density15, values=dict(came.values),
                             sigmas={}, source=source, tested_on=tested_on, **pair), lost)
    x = there / (there + kg)
    if came.blend_kv40 is not None:
        blending = _blend(_as(tank, tank.blending_kv), _as(came, came.blending_kv), x, law) if tank.blending_kv else {}
        pair = {"blend_kv40": blending.get("kv40"), "blend_kv100": blending.get("kv100")}
    neat = _neat(tank) is not None and _neat(came) is not None
    found = _blend(_as(tank, _neat(tank)), _as(came, _neat(came)), x, law)
    known: dict[str, Any] = {c: found.get(c) for c in codes_of(tank, came) if c not in pair and (neat or c not in PAIR)
                             and found.get(c) is not None and value_of(tank, c) is not None
                             and value_of(came, c) is not None}
    lost = tuple(c for c in codes_of(tank, came) if c not in known and c not in pair)
    own: dict[str, Any] = {c: known.get(c) for c in (*PAIR, "density15")}
    return Mixed(replace(tank, **own, **pair, sigmas={}, source=COMPUTED, tested_on="",
                         values={c: v for c, v in known.items() if c not in OWN_COLUMN}), lost)


def _neat(stock: Stock) -> tuple[float, float] | None:
    return None if stock.kv40 is None or stock.kv100 is None else (stock.kv40, stock.kv100)


def _as(stock: Stock, pair: tuple[float, float] | None) -> Stock:
    """A stock that blends by this pair; by another where its viscosity is unknown and is not asked for."""
    kv40, kv100 = pair or STAND_IN
    return replace(stock, blend_kv40=None, blend_kv100=None, kv40=kv40, kv100=kv100)


def _blend(tank: Stock, came: Stock, x: float, law: str) -> Mapping[str, float | None]:
    import numpy as np

    from solver.laws import check_law, knows_viscosity
    from solver.recipe import predict_all
    from solver.stocks import StockTable

    table = StockTable([tank, replace(came, code=f"{came.code} delivered")])
    if not knows_viscosity(check_law(law), table).all():
        raise DeskError(f"{tank.code}: the law {law} needs the density of the tank and of the delivery; type it, or "
                        "mix by a law in mass")
    return predict_all(table, np.array([x, 1.0 - x]), law)


def parts_after(before: Mapping[str, float], book_kg: float, lot: str, kg: float) -> dict[str, float]:
    """Lot → part of the tank after a receipt: f' = f·q/(q + r), and r/(q + r) of the new lot.

    Oil of which no lot is known stands as "before". Parts sum to 1.

    >>> parts_after({"L1": 1.0}, 3000.0, "L2", 1000.0)
    {'L1': 0.75, 'L2': 0.25}
    >>> parts_after({}, 100.0, "L1", 100.0), parts_after({"L1": 1.0}, 0.0, "L2", 5.0)
    ({'before': 0.5, 'L1': 0.5}, {'L2': 1.0})
    """
    old = dict(before) or {EARLIER: 1.0}
    whole = sum(old.values())
    found = {name: part / whole * book_kg / (book_kg + kg) for name, part in old.items()}
    found[lot] = found.get(lot, 0.0) + kg / (book_kg + kg)
    kept = {name: part for name, part in found.items() if part > LEAST_PART}
    total = sum(kept.values())
    return {name: part / total for name, part in kept.items()}


def cells_changed(old: Stock, new: Stock) -> dict[str, float | str | None]:
    """Cell → its new value, of those that differ between two states of one stock."""
    found: dict[str, float | str | None] = {c: getattr(new, c) for c in (*OWN_COLUMN, "source", "tested_on")
                                            if getattr(new, c) != getattr(old, c)}
    before, after = joined(old), joined(new)
    return found | {c: after.get(c) for c in {**before, **after} if before.get(c) != after.get(c)}
