"""What cannot be true of a stock's data (faults) and what is unlikely (doubts), in words."""

from __future__ import annotations

from dataclasses import dataclass

from .grades import api_group
from .properties import lookup
from .stocks import GROUPS, KINDS, SOURCES, Stock
from .viscosity_index import LOWEST_KV100, viscosity_index
from .walther import HIGHEST_KV, line

LOWEST_STOCK_KV = 0.3  # mm²/s
_WORDS = (("kind", KINDS), ("api_group", ("", *GROUPS)), ("source", ("", *SOURCES)))


@dataclass(frozen=True)
class Doubt:
    """One remark on one cell: what it says, and the value that would do, if there is an obvious one."""

    cell: str
    says: str
    suggestion: float | None = None  # in the cell's own unit


def faults(stock: Stock) -> tuple[Doubt, ...]:
    """What cannot be true, cell by cell: such a stock is not stored."""
    found = [*_word_faults(stock), *_amount_faults(stock), *_density_faults(stock)]
    found += _kv_faults(stock, "kv40", "kv100")
    found += _kv_faults(stock, "blend_kv40", "blend_kv100")
    if (stock.blend_kv40 is None) != (stock.blend_kv100 is None):
        lone = "blend_kv100" if stock.blend_kv100 is None else "blend_kv40"
        found.append(Doubt(lone, "one blending KV without the other; give both or neither"))
    if stock.counted:
        for cell in ("kv40", "kv100"):
            if getattr(stock, cell) is None:
                found.append(Doubt(cell, f"a {stock.kind} stock needs both KV40 and KV100; "
                                         f"{cell} is empty"))
    for code, value in stock.values.items():
        entry = lookup(code)
        if not entry.lowest <= value <= entry.highest:
            found.append(Doubt(code, f"{entry.name} {value:g} {entry.unit} lies outside "
                                     f"{entry.lowest:g} to {entry.highest:g}"))
    return tuple(found)


def _word_faults(stock: Stock) -> list[Doubt]:
    return [Doubt(cell, f"{getattr(stock, cell)!r} is not known; usable are "
                        f"{', '.join(w for w in words if w)}")
            for cell, words in _WORDS if getattr(stock, cell) not in words]


def _amount_faults(stock: Stock) -> list[Doubt]:
    found = []
    for cell, name in (("unpumpable_kg", "unpumpable bottoms"), ("price_per_t", "price"),
                       ("on_hand_kg", "quantity on hand")):
        value = getattr(stock, cell)
        if value is not None and value < 0.0:
            found.append(Doubt(cell, f"{name} {value:g} is below 0"))
    return found


def _density_faults(stock: Stock) -> list[Doubt]:
    density = stock.density15
    if density is None or 600.0 <= density <= 1600.0:
        return []
    if 0.6 <= density <= 1.6:
        return [Doubt("density15", f"density {density:g} looks like kg/L; in kg/m³ it is "
                                   f"{round(1000.0 * density, 6):g}", round(1000.0 * density, 6))]
    return [Doubt("density15", f"density {density:g} kg/m³ lies outside 600 to 1600")]


def _kv_faults(stock: Stock, cold: str, hot: str) -> list[Doubt]:
    found = []
    at40, at100 = getattr(stock, cold), getattr(stock, hot)
    for cell, value in ((cold, at40), (hot, at100)):
        if value is None:
            continue
        if value < 0.0:
            found.append(Doubt(cell, f"{cell} {value:g} mm²/s is negative"))
        elif value < LOWEST_STOCK_KV:
            found.append(Doubt(cell, f"{cell} {value:g} mm²/s is below {LOWEST_STOCK_KV}, thinner than any "
                                     "oil; is the unit right?"))
        elif value > HIGHEST_KV:
            found.append(Doubt(cell, f"{cell} {value:g} mm²/s is above {HIGHEST_KV:g}"))
    if not found and at40 is not None and at100 is not None and at100 >= at40:
        found.append(Doubt(hot, f"{hot} {at100:g} is not below {cold} {at40:g}: "
                                "oil thins as it warms; are the two swapped?", at40))
    return found


def doubts(stock: Stock) -> tuple[Doubt, ...]:
    """What is unlikely, cell by cell: questioned at once, kept if the operator says so."""
    found = [*_kv_doubts(stock), *_temperature_doubts(stock)]
    if stock.density15 is not None and not 740.0 <= stock.density15 <= 1150.0 and not _density_faults(stock):
        found.append(Doubt("density15", f"density {stock.density15:g} kg/m³ is unusual for a lubricant "
                                        "stock (760 to 1100)"))
    if stock.price_per_t is not None and 0.0 < stock.price_per_t < 20.0:
        found.append(Doubt("price_per_t", f"price {stock.price_per_t:g} per tonne is low; was it "
                           "meant per kg?",
                           round(1000.0 * stock.price_per_t, 6)))
    if (stock.on_hand_kg or 0.0) > 0.0 and (stock.unpumpable_kg or 0.0) > (stock.on_hand_kg or 0.0):
        found.append(Doubt("unpumpable_kg", f"the bottoms {stock.unpumpable_kg:g} kg are more than the "
                                            f"{stock.on_hand_kg:g} kg on hand"))
    return tuple(found)


def _kv_doubts(stock: Stock) -> list[Doubt]:
    if stock.kind not in ("base", "rework") or stock.kv40 is None or stock.kv100 is None:
        return []
    if not LOWEST_STOCK_KV <= stock.kv100 < stock.kv40:
        return []
    if stock.kv100 < LOWEST_KV100:
        slope = line(stock.kv40, stock.kv100).slope
        if 2.0 <= slope <= 5.0:
            return []
        return [Doubt("kv100", f"KV40 {stock.kv40:g} and KV100 {stock.kv100:g} mean a slope of {slope:.1f}; thin oils "
                               "lie between 3 and 4.5. Is one of them from another oil?")]
    vi = viscosity_index(stock.kv40, stock.kv100)
    if vi > 200.0 or vi < -50.0:
        return [Doubt("kv100", f"KV40 {stock.kv40:g} and KV100 {stock.kv100:g} mean a viscosity index of "
                               f"{vi:.0f}; base stocks lie between 0 and 180. Is one of them in SUS, or "
                               "from another oil?")]
    group = api_group(stock.values.get("saturates"), stock.values.get("sulfur"), vi)
    if stock.kind == "base" and group and stock.api_group in ("I", "II", "III") and group != stock.api_group:
        return [Doubt("api_group", f"saturates, sulphur and VI {vi:.0f} say group {group}, not "
                                   f"{stock.api_group}")]
    return []


def _temperature_doubts(stock: Stock) -> list[Doubt]:
    found = []
    flash, pour = stock.values.get("flash"), stock.values.get("pour")
    if flash is not None and (flash > 330.0 or flash < 60.0):
        in_c = round((flash - 32.0) / 1.8, 1)
        hint = f"; was it °F? that is {in_c:g} °C" if flash > 330.0 else ""
        found.append(Doubt("flash", f"flash point {flash:g} °C is unusual (120 to 310){hint}",
                           in_c if hint else None))
    if pour is not None and pour > 5.0:
        in_c = round((pour - 32.0) / 1.8, 1)
        found.append(Doubt("pour", f"pour point {pour:g} °C is high; was it °F ({in_c:g} °C), or a minus forgotten?",
                           -pour if pour <= 15.0 else in_c))
    return found
