"""What else would do, in words: the same for the console and for the headless command, at most so many columns wide."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

from blendtui.store.harmless import harmless

from . import numbers
from .blends import spread_words
from .choices import Choices

if TYPE_CHECKING:
    from solver.aims import Aim
    from solver.entering import Reach, StockPrice
    from solver.prices import LimitPrice
    from solver.recipe import Recipe

Line = tuple[str, str]  # (kind, text): "head", "mark", "warn", "dim" or ""
NAMES = {"least-cost": "least cost", "widest-margin": "widest margin", "fewest-stocks": "fewest stocks",
         "most-of": "most of", "least-of": "least of", "least-scarce": "tanks last longest", "closest": "closest to",
         "most-rework": "most rework"}
HARDLY = 5e-5  # mass fraction: a range that ends below it is no range
TOUCH = 1e-4  # mass fraction from which a stock counts as used
TRACE = 5e-5  # mass fraction: less than a sheet can show


def name_of(aim: Aim) -> str:
    """The aim in a few words."""
    of = harmless(aim.of, 14) if aim.name in ("most-of", "least-of", "closest") else ""
    return f"{NAMES[aim.name]} {of}".rstrip() if of or aim.name != "closest" else "closest to a trial"


def figure_of(aim: Aim) -> str:
    """The aim's own figure with its unit."""
    if aim.figure is None:
        return numbers.UNKNOWN
    return {"least-cost": lambda v: f"{numbers.cost(v)} /t",
            "widest-margin": lambda v: f"{numbers.fixed(v, 2)} R inside",
            "fewest-stocks": lambda v: f"{v:.0f} stock{'s' if v != 1 else ''}",
            "least-scarce": lambda v: f"for {numbers.kg(v)} kg",
            "closest": lambda v: f"{numbers.pct(0.5 * v)} % other"}.get(
                aim.name, lambda v: f"{numbers.pct(v)} %")(aim.figure)


def shares_of(recipe: Recipe) -> str:
    """The shares in a line, largest first."""
    shares = sorted((recipe.shares or {}).items(), key=lambda item: -item[1])
    return ", ".join(f"{harmless(code)} {numbers.pct(share)}" for code, share in shares if share > TRACE)


def lines(found: Choices, width: int, chosen: int | None = None) -> list[Line]:
    """Everything that has been worked out; `chosen`: the aim that is marked."""
    if not found.feasible:
        words = ("no blend meets every limit, so nothing else would do either" if found.status == "infeasible"
                 else "no blend was found in the time")
        return [*_wrapped("mark", f"! {words}; why: the command why, or the screen Why", width)]
    made: list[Line] = []
    for part, of in ((found.aims, aims_lines), (found.limits, limits_lines), (found.ranges, ranges_lines),
                     (found.prices, prices_lines), (found.reaches, reaches_lines)):
        if part is not None:
            more = aims_lines(found, width, chosen) if of is aims_lines else of(found, width)
            made += ([("", "")] if made else []) + more
    return made


def _wrapped(kind: str, text: str, width: int, indent: str = "  ") -> list[Line]:
    return [(kind, line) for line in textwrap.wrap(text, width, subsequent_indent=indent, break_on_hyphens=False)]


def _table(heads: Sequence[str], rows: Sequence[Sequence[str]], left: int = 1, widest: int = 40) -> list[Line]:
    """Columns, the first `left` to the left; a first cell wider than `widest` has a line of its own."""
    narrow = [["", *row[1:]] if len(row[0]) > widest else list(row) for row in rows]
    widths = [max(len(head), *(len(row[i]) for row in narrow)) if rows else len(head) for i, head in enumerate(heads)]

    def line(cells: Sequence[str]) -> str:
        return "  ".join(c.ljust(w) if i < left else c.rjust(w)
                         for i, (c, w) in enumerate(zip(cells, widths, strict=True))).rstrip()

    made: list[Line] = [("dim", line(heads))]
    for row, short in zip(rows, narrow, strict=True):
        made += [("", row[0])] if short[0] != row[0] else []
        made.append(("", line(short)))
    return made


# Aims

def aims_lines(found: Choices, width: int, chosen: int | None = None) -> list[Line]:
    """The aims: what each reaches, what it costs, its shares."""
    cap = found.asked.within
    within = "at any cost the product allows" if cap is None else f"within {cap:g} % of the least cost"
    made: list[Line] = [("head", f"OTHER AIMS, {within}")]
    rows = [(n == chosen, aim) for n, aim in enumerate(found.aims or ())]
    head = f"  {'aim':<22} {'reaches':>16} {'cost, /t':>9} {'dearer':>8}"
    made.append(("dim", head))
    for here, aim in rows:
        sign = "▸" if here else " "
        recipe = aim.recipe
        if recipe is None:
            keep = "; on the screen Recipe, k keeps one" if aim.name == "closest" and not aim.of else ""
            made += _wrapped("mark" if here else "", f"{sign} {name_of(aim)}: {aim.note}{keep}", width, "    ")
            continue
        dearer = "" if aim.extra_pct is None else f"{max(0.0, aim.extra_pct):.2f} %"
        doubt = "" if aim.proven else "  not proven"
        made.append(("mark" if here else "", f"{sign} {name_of(aim):<22} {figure_of(aim):>16} "
                                             f"{numbers.cost(recipe.cost_per_t):>9} {dearer:>8}{doubt}"))
        note = f" ({aim.note})" if aim.note else ""
        made += _wrapped("", f"    {shares_of(recipe)}{note}", width, "    ")
        told = spread_words(recipe).partition(" before ")[0]
        made += _wrapped("warn", f"    ! {_widest(recipe)} %: {told}", width, "      ") if told else []
    words = ("R: reproducibility of a limit's method; the nearest limit is so many away; for … kg: the largest batch "
             "that the tanks carry; other: the part of the blend that is not as in the trial")
    made += _wrapped("dim", words, width)
    doubted = any(a.recipe is not None and "needed" in spread_words(a.recipe) for a in found.aims or ())
    return made + (_wrapped("dim", "blendtui lab plan, or p on the screen Lab, plans a laboratory blend", width)
                   if doubted else [])


def _widest(recipe: Recipe) -> str:
    return numbers.fixed(max(x for x in recipe.spread_pct.values() if x is not None), 1)


# Limits

def limit_name(price: LimitPrice) -> str:
    """A binding limit in a few words, its unit with it."""
    from solver.properties import lookup

    if price.kind == "property":
        entry = lookup(price.of)
        name = f"KV{price.of[2:]}" if numbers.is_kv(price.of) else "VI" if price.of == "vi" else entry.name
        return ", ".join([name, *([entry.unit] if entry.unit else []), "least" if price.side == "low" else "most"])
    of = harmless(price.of, 14)
    return {"share": f"{of} {'fixed' if price.side == 'both' else 'least' if price.side == 'low' else 'most'}, %",
            "held": f"{of} held, %", "tank": f"{of} on hand, t", "most stocks": "most stocks",
            "least share": "least share, %"}[price.kind]


def limit_value(price: LimitPrice, value: float) -> str:
    """A figure in the unit of a limit."""
    if price.kind == "property":
        return numbers.value(price.of, value)
    return numbers.fixed(value, {"tank": 3, "most stocks": 0}.get(price.kind, 2))


def limits_lines(found: Choices, width: int) -> list[Line]:
    """What the binding limits cost per natural unit, with the step and the costs that show it."""
    made: list[Line] = [("head", f"WHAT THE BINDING LIMITS COST, per t of blend; least cost "
                                 f"{numbers.cost(found.least_cost_per_t)}")]
    if not found.limits:
        return [*made, ("", "no limit binds")]
    rows = [[limit_name(p), limit_value(p, p.limit), f"{p.step:.3g}", numbers.fixed(p.eased_per_t, 3),
             numbers.fixed(p.tightened_per_t, 3), _per_unit(p.saved_per_unit), _per_unit(p.added_per_unit)]
            for p in found.limits]
    heads = ["limit, its unit", "held at", "step", "eased", "tighter", "saves/unit", "adds/unit"]
    made += _table(heads, rows, widest=24)
    words = ("eased, tighter: the least cost with the limit moved by the step; of a fixed share, with less and with "
             "more of it; –: no blend, or no such step")
    return made + _wrapped("dim", words, width)


def _per_unit(value: float | None) -> str:
    return numbers.UNKNOWN if value is None else numbers.fixed(value, 2 if abs(value) >= 0.1 else 4)


# Stocks

def prices_lines(found: Choices, width: int) -> list[Line]:
    """The price at which each used stock leaves and each idle one enters."""
    made: list[Line] = [("head", "AT WHICH PRICE, per t, a stock leaves or enters")]
    used = [p for p in found.prices or () if p.share > TOUCH]
    idle = sorted((p for p in found.prices or () if p.share <= TOUCH),
                  key=lambda p: 1e99 if p.critical_per_t is None else p.price_per_t - p.critical_per_t)
    rows = [[harmless(p.stock, 12), _turn(p), numbers.pct(p.share), numbers.cost(p.price_per_t), *_turn_figures(p)]
            for p in (*used, *idle)]
    made += _table(["stock", "", "mass %", "price", "at", "change", "then %"], rows, left=2)
    if any(not p.checked for p in found.prices or ()):
        made += _wrapped("mark", "? not found again by solving once more 0.01 on either side", width)
    return made


def _turn(p: StockPrice) -> str:
    if p.critical_per_t is None:
        return p.note
    return ("leaves above" if p.share > TOUCH else "enters below") + ("" if p.checked else " ?")


def _turn_figures(p: StockPrice) -> list[str]:
    if p.critical_per_t is None:
        return ["", "", ""]
    away = p.critical_per_t - p.price_per_t
    return [numbers.cost(p.critical_per_t), f"{away:+.2f}", numbers.pct(p.share_below)]


def reaches_lines(found: Choices, width: int) -> list[Line]:
    """How far prices and quantities can move before the set of stocks changes."""
    made: list[Line] = [("head", "HOW FAR ONE PRICE OR QUANTITY CAN MOVE before the set of stocks changes")]
    if not found.reaches:
        return [*made, ("", "every share is fixed")]
    for r in found.reaches:
        made += _wrapped("", reach_words(r, tuple(found.shares or ())), width, "    ")
    return made


def reach_words(r: Reach, here: tuple[str, ...]) -> str:
    """One reach as a sentence."""
    show = numbers.cost if r.what == "price_per_t" else numbers.kg
    what = "price" if r.what == "price_per_t" else "kg on hand"
    low = "nothing" if r.low is None else show(r.low)
    high = "any" if r.high is None else show(r.high)
    text = f"{harmless(r.stock)} {what} {show(r.now)}: same stocks from {low} to {high}"
    ends = [(r.low, r.set_below, "below"), (r.high, r.set_above, "above")]
    text += "".join(f"; {side} {_change(here, beyond)}" for end, beyond, side in ends if end is not None)
    return text + ("" if r.checked else " (time ran out)")


def _change(here: tuple[str, ...], beyond: tuple[str, ...] | None) -> str:
    if beyond is None:
        return "no blend"
    more, less = [c for c in beyond if c not in here], [c for c in here if c not in beyond]
    return " ".join([*(f"+{harmless(c)}" for c in more), *(f"−{harmless(c)}" for c in less)]) or "the same"


# Ranges

def ranges_lines(found: Choices, width: int) -> list[Line]:
    """The range of every stock within each extra cost."""
    made: list[Line] = [("head", "RANGES, mass %, within an extra cost")]
    ranges = list(found.ranges or ())
    if not ranges:
        return [*made, ("", "none: no blend was found in the time")]
    codes = sorted(ranges[-1][1], key=lambda c: -(found.shares or {}).get(c, 0.0))
    shown = [c for c in codes if ranges[-1][1][c].high > HARDLY]
    rows = [[harmless(c, 14), numbers.pct((found.shares or {}).get(c, 0.0)), *(
        f"{numbers.pct(r[c].low)}–{numbers.pct(r[c].high)}{'' if r[c].narrowed else '?'}" for _, r in ranges)]
        for c in shown]
    made += _table(["stock", "recipe", *(f"{extra:g} % dearer" for extra, _ in ranges)], rows)
    rest = ", ".join(harmless(c) for c in codes if c not in shown)
    if rest:
        made += _wrapped("", f"not used within {ranges[-1][0]:g} %: {rest}", width)
    if any(not each.narrowed for _, r in ranges for each in r.values()):
        made += _wrapped("mark", "? time ran out: the true range may be smaller", width)
    if found.target.max_stocks is not None or found.target.min_share:
        made += _wrapped("dim", "ranges leave the whole-number rules (most stocks, least share) out", width)
    return made
