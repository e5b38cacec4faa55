"""How a recipe is laid out: shares with their ranges, limits with their margins, remarks."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

from rich.cells import cell_len

from blendtui.desk import blends, numbers, sheet
from blendtui.desk.answers import Answer
from blendtui.store.harmless import harmless
from blendtui.widgets.grid import Cell, Column
from blendtui.widgets.paint import BAD, BOLD, PLAIN, WARN, Line, Run, fit, wrap
from solver.requirements import MOVED
from solver.scales import litres_at_15
from solver.stocks import Stock

from . import words

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe
    from solver.target import Target

    from .state import RecipeState

BAR = 12
LIMIT_WIDTHS = (8, 8, 8, 6, 8)
WORDS = {"held": "held", "out": "out", "cannot": "no", "broken": "!"}


@dataclass(frozen=True)
class ShareRow:
    """One stock of the recipe screen."""

    stock: Stock
    share: float  # mass fraction shown; 0: not used
    mark: str  # "", "held", "out" (by the operator), "cannot", or "broken": its share breaks a rule
    reason: str  # why it cannot serve
    range: tuple[float, float] | None  # mass fractions over all blends that meet the target


def share_rows(answer: Answer, recipe: Recipe) -> list[ShareRow]:
    """Every stock that the product allows or the shown recipe uses: those it uses first, largest first."""
    by_code = {s.code: s for s in answer.stocks}
    left_out = {x.stock: x.reason for x in answer.best.left_out}
    shares = recipe.shares or {}
    codes = [*answer.allowed, *(c for c in shares if c not in answer.allowed and c in by_code)]
    codes.sort(key=lambda code: -shares.get(code, 0.0))
    broken = {c for c in codes if any(b.startswith(f"{c} ") for b in recipe.breaches)}
    rows = []
    for code in codes:
        mark = ("broken" if code in broken else "held" if code in answer.wishes.held
                else "out" if code in answer.wishes.left_out else "cannot" if code in left_out else "")
        rows.append(ShareRow(by_code[code], shares.get(code, 0.0), mark, left_out.get(code, ""),
                             (answer.ranges or {}).get(code)))
    return rows


def scale_of(rows: list[ShareRow]) -> float:
    """Mass fraction at the right end of the bars: the next tenth above every range and share."""
    most = max([r.range[1] for r in rows if r.range] + [r.share for r in rows] + [0.1])
    return min(1.0, -(-most // 0.1) * 0.1) if most < 1.0 else 1.0


def bar(row: ShareRow, scale: float, width: int = BAR) -> str:
    """The range as a bar with the share in it: `··███◆██······`.

    A range or share that is not nothing has at least one column, whatever the scale.
    """
    def place(fraction: float) -> int:
        return min(width - 1, max(0, int(fraction / scale * width)))

    marks = ["·"] * width
    if row.range:
        for x in range(place(row.range[0]), place(row.range[1]) + 1):
            marks[x] = "█"
        if row.range[1] <= 0.0:
            marks[0] = "·"
    if row.share > 0.0:
        marks[place(row.share)] = "◆"
    return "".join(marks)


def share_columns(scale: float, width: int) -> tuple[Column, ...]:
    """Columns of the shares; a wide screen has room for the name and a longer bar."""
    long = width >= 110
    return (Column("stock", "stock", "", 9, "left"), Column("mark", "", "", 4, "left"),
            Column("share", "share", "%", 6), Column("kg", "mass", "kg", 7), Column("litres", "volume", "L 15 °C", 7),
            Column("bar", "range", f"0–{100 * scale:.0f} %", 26 if long else BAR, "left"),
            Column("range", "could be", "%, low–high", 12), Column("tested", "test", "source, age", 13, "left"),
            *((Column("name", "name", "", width - 94, "left"),) if long else ()))


def share_cell(row: ShareRow, code: str, recipe: Recipe, scale: float, today: date, bar_width: int) -> Cell:
    """One cell of the shares."""
    if code == "stock":
        return harmless(row.stock.code)
    if code == "mark":
        sign = WORDS.get(row.mark, "")
        return (sign, BAD) if row.mark == "broken" else sign
    if code == "share":
        return numbers.pct(row.share) if row.share else "–"
    if code in ("kg", "litres"):
        mass = (recipe.charges_kg or {}).get(row.stock.code)
        if code == "kg":
            return numbers.UNKNOWN if mass is None else sheet.mass_shown(row.stock, mass)
        if mass is None or row.stock.density15 is None:
            return numbers.UNKNOWN
        return numbers.litres(litres_at_15(mass, row.stock.density15))
    if code == "bar":
        return bar(row, scale, bar_width)
    if code == "range":
        return f"{numbers.pct(row.range[0])}–{numbers.pct(row.range[1])}" if row.range else "–"
    if code == "tested":
        return words.tested(row.stock, today)
    return harmless(row.stock.name)


def total_cell(recipe: Recipe, stocks: tuple[Stock, ...], code: str) -> str:
    """One cell of the row under the shares: their sum in %, kg and litres."""
    if code == "stock":
        return "total"
    if code == "share":
        return numbers.pct(sum((recipe.shares or {}).values()))
    charges = recipe.charges_kg
    if charges is None or code not in ("kg", "litres"):
        return ""
    if code == "kg":
        return numbers.batch(sum(charges.values()))
    dense = {s.code: s.density15 for s in stocks}
    volumes = [litres_at_15(mass, d) for c, mass in charges.items() if (d := dense.get(c)) is not None]
    return numbers.litres(sum(volumes)) if len(volumes) == len(charges) else ""


# Head

def head(state: RecipeState, recipe: Recipe | None, width: int, height: int) -> tuple[list[Line], list[str]]:
    """What kind of answer this is, what it costs, under which law; and what of it found no room."""
    if state.error:
        return [[(line, BAD)] for line in wrap(f"! {state.error}", width)], []
    if recipe is None or state.answer is None:
        return [[("working out the recipe …", PLAIN)]], []
    facts = _facts(state, state.answer, recipe)
    parts = [_kind(state, recipe), *((text, WARN if text.startswith("!") else PLAIN) for text in facts)]
    lines: list[Line] = [[]]
    used, long = 0, list[str]()  # what is cut here is told again, whole
    for n, (text, style) in enumerate(parts):
        size = cell_len(text) + (3 if used else 0)
        if used and used + size > width:
            if len(lines) == height:
                return lines, [*long, *(rest for rest, _ in parts[n:])]
            lines.append([])
            used, size = 0, cell_len(text)
        lines[-1] += [(" · ", PLAIN), (text, style)] if used else [(text if size <= width else fit(text, width), style)]
        long += [text] if size > width else []
        used += size
    return lines, long


def _kind(state: RecipeState, recipe: Recipe) -> Run:
    assert state.answer is not None
    if state.blend is not None:
        what_if = "! WHAT-IF: " if state.wishes.moved else ""
        return f"{what_if}feasible blend {state.blend + 1} of {len(state.answer.blends)}", BOLD
    if recipe.status == "by hand" and recipe.shares:
        total = sum(recipe.shares.values())
        if abs(total - 1.0) > 1e-4:
            rules = ", rules broken" if recipe.breaches else ""
            what_if = "WHAT-IF, " if state.wishes.moved else ""
            return f"! {what_if}by hand, shares sum to {numbers.pct(total)} %{rules}", BAD
    return words.verdict(recipe, bool(state.wishes.moved))


def _facts(state: RecipeState, answer: Answer, recipe: Recipe) -> list[str]:
    """Cost, misses, law and the slower figures, the most wanted first."""
    told = ["working out the new recipe …"] if state.waiting else []
    told += _laws_differ(recipe)
    if recipe.status == "infeasible":
        missed = words.misses(recipe) if recipe.shares else []
        # Why it is not surer is a long sentence among the remarks; the last of it says how sure it can be.
        told.append("the nearest blend misses " + "; ".join(missed) if missed else
                    "; ".join(recipe.reasons).rpartition("; ")[2] if recipe.meets_all else "; ".join(recipe.reasons))
    if recipe.cost_per_t is not None:
        told += [f"cost {numbers.cost(recipe.cost_per_t)} /t", *_dearer(answer, recipe)]
        if recipe.batch_kg is not None:
            whole = numbers.cost(recipe.cost_per_t * recipe.batch_kg / 1000.0)
            told.append(f"{whole} for {numbers.batch(recipe.batch_kg)} kg")
    elif recipe.shares:
        told.append("cost unknown: the price of a stock is missing")
    under = len({recipe.law, *recipe.also_laws})
    told.append(f"law {recipe.law}" + (f", held under {under} laws" if under > 1 else ""))
    if recipe.gap is not None and state.blend is None and recipe.status in ("optimal", "stopped"):
        told.append(f"proven to {numbers.figures(max(1e-4, 100.0 * recipe.gap), 1)} %")
    if answer.guard_cost_per_t is not None:
        told.append(f"guards cost {numbers.cost(answer.guard_cost_per_t)} /t")
    if answer.largest_batch_kg is not None:
        told.append(f"largest batch today {numbers.kg(answer.largest_batch_kg)} kg")
    elif answer.best.shares and "largest" not in answer.done:
        told.append("ranges are being worked out …")
    return told


def _laws_differ(recipe: Recipe) -> list[str]:
    """That the laws differ by more than may pass without a mark; where a blend is needed, which keys plan it."""
    widest = max((x for x in recipe.spread_pct.values() if x is not None), default=0.0)
    if widest <= blends.SPREAD_MARKED or set(recipe.lessons) - set(recipe.provisional):
        return []
    if widest <= blends.SPREAD_DOUBTED:
        return [f"! laws differ {numbers.fixed(widest, 1)} %"]
    return [f"! laws differ {numbers.fixed(widest, 0)} %: laboratory blend needed (8, p plans)"]


def _dearer(answer: Answer, recipe: Recipe) -> list[str]:
    best, plain = answer.best, answer.plain
    if recipe is best and plain is not None and plain.cost_per_t is not None and recipe.cost_per_t is not None:
        chance = f"a chance of {100.0 * (answer.wishes.confidence or 0.0):.4g} %"
        asked = "whole steps" if answer.wishes.whole else chance
        return [f"{asked}: {numbers.cost(recipe.cost_per_t - plain.cost_per_t)} /t over the least cost"]
    if recipe is best or recipe.cost_per_t is None or best.cost_per_t is None or best.status == "infeasible":
        return []
    more = recipe.cost_per_t - best.cost_per_t
    if abs(more) < 0.005:
        return ["as cheap as the best"]
    return [f"{numbers.cost(abs(more))} /t {'dearer' if more >= 0 else 'cheaper'} than the best"]


# Limits and remarks

def notes(answer: Answer, recipe: Recipe, today: date, width: int, rest: list[str]) -> list[Line]:
    """The limits as a table, what the head had no room for, and every remark, laid for a width."""
    lines: list[Line] = [[(line, BAD)] for b in recipe.breaches for line in wrap(f"! {b}", width - 1, "  ")]
    lines += limit_table(recipe, answer.target, width)
    rest = [said for said in rest if said not in recipe.reasons]  # those are remarks
    for said in [*([" · ".join(rest)] if rest else []), *remarks(answer, recipe, today)]:
        marked = said.startswith("!")
        lines += [[(line, WARN if marked else PLAIN)] for line in wrap(said, width - 1, "  ")]
    return lines


def limit_table(recipe: Recipe, target: Target, width: int) -> list[Line]:
    """Each limit: value, window, guard, margin to the guarded limit, and a word on how it stands."""
    name = min(36, width - sum(LIMIT_WIDTHS) - len(LIMIT_WIDTHS) - 11)
    titles = ("value", "low", "high", "guard", "margin")
    lines: list[Line] = [[(fit("limit, unit", name), BOLD),
                          *((" " + fit(t, w, "right"), BOLD) for t, w in zip(titles, LIMIT_WIDTHS, strict=True))]]
    for limit in recipe.limits:
        typed = next((x.guard_pct for x in target.limits if x.property == limit.property and x.guard_pct), None)
        lines.append(_limit_line(limit, _limit_name(recipe, limit, name), guard_text(limit, typed)))
    return lines


def _limit_name(recipe: Recipe, limit: LimitResult, width: int) -> str:
    """What is limited, with its unit; beside a viscosity the spread of the laws, where it is a what-if that it is."""
    code, unit = limit.property, words.unit(limit.property)
    label = words.heading(code) + (f", {unit}" if unit else "")
    if MOVED in limit.sources:
        return fit(f"what-if {label}", width)
    apart = words.laws_apart(recipe, code)
    return fit(f"{label} {apart}" if apart and cell_len(label) + cell_len(apart) < width else label, width)


def guard_text(limit: LimitResult, typed_pct: float | None) -> str:
    """The guard as it moves the limit: a figure where it is the same on both sides, else its per cent."""
    sides = [abs(held - plain) for plain, held in ((limit.low, limit.held_low), (limit.high, limit.held_high))
             if plain is not None and held is not None]
    if not sides or max(sides) <= 0.0:
        return ""
    if max(sides) - min(sides) > 1e-9 * max(sides):
        if typed_pct:
            return f"{typed_pct:g}%"
        return "uneven"
    guard = sides[0]
    text = numbers.fixed(guard, 0) if guard >= 99.95 else numbers.figures(guard, 3)
    return text.rstrip("0").rstrip(".") if "." in text else text


def _limit_line(limit: LimitResult, name: str, guard: str) -> Line:
    code = limit.property
    lead = next((x for x in (limit.value, limit.low, limit.high) if x is not None), None)
    decimals = len(numbers.kv(lead).partition(".")[2]) if numbers.is_kv(code) and lead is not None else None
    line: Line = [(name, WARN if "! laws" in name or name.startswith("what-if") else PLAIN)]
    margin = _figure(code, limit.margin, decimals)
    if limit.met is False and not margin.strip("-0."):
        margin = words.fine(code, limit.margin)
    texts = (*(_figure(code, x, decimals) for x in (limit.value, limit.low, limit.high)), guard, margin)
    line += [(" " + fit(text, size, "right"), PLAIN) for text, size in zip(texts, LIMIT_WIDTHS, strict=True)]
    if limit.met is False:
        return [*line, (" ! IN GUARD" if words.in_guard(limit) else " ! MISSED", BAD)]
    if limit.met is None:
        return [*line, (" ? unknown", WARN)]
    return [*line, (f" binds {limit.binding}" if limit.binding else " inside", BOLD if limit.binding else PLAIN)]


def _figure(code: str, value: float | None, decimals: int | None) -> str:
    if value is None:
        return ""
    # A margin to the decimals of the value they belong to, not to figures of their own.
    return numbers.value(code, value) if decimals is None else numbers.fixed(value, decimals)


def remarks(answer: Answer, recipe: Recipe, today: date) -> list[str]:
    """Everything else there is to say of a recipe, a sentence each; what must not be missed begins with !."""
    said = [reason if recipe.status == "optimal" else f"! {reason}" for reason in recipe.reasons]
    said += list(answer.more) if recipe is answer.best else []
    if recipe.status == "infeasible" and not recipe.meets_all:
        nearest = "! this is the nearest blend, not a recipe; " if recipe.shares else ""
        said.append(nearest + "5 tells why nothing fits, and what it would take")
    binding = [f"{words.heading(x.property)} ({x.binding})" for x in recipe.limits if x.binding]
    said.append("binds: " + (", ".join(binding) or "no limit; only shares or quantities"))
    said += _under(recipe) + _taught(recipe)
    said += _others(recipe)
    said += _spread(recipe)
    said += _wished(answer)
    if answer.target.only_listed:
        unlisted = sum(s.kind == "base" and s.code not in answer.allowed for s in answer.stocks)
        if unlisted:
            said.append(f"not on this product's list: {unlisted} stock{'s' if unlisted > 1 else ''}")
    said += [f"left out: {harmless(x.stock)}, {x.reason}" for x in answer.best.left_out]
    said += [f"to be tested, not predicted: {test}" for test in answer.best.to_be_tested]
    said += _old(answer, recipe, today)
    if answer.ranges is not None:
        said.append("ranges: each stock alone, over all blends inside the limits and the cost ceiling; they leave the "
                    "whole-number rules out (most stocks, least share)")
    if "blends" in answer.done and answer.blends:
        count = len(answer.blends)
        said.append("1 feasible blend" if count == 1 else
                    f"{count} feasible blends with different stocks: n and p step through them")
    return said


def _under(recipe: Recipe) -> list[str]:
    """The viscosities under every law that was asked for."""
    limits = [x for x in recipe.limits if x.by_law]
    return [f"{words.heading(x.property)} under " + ", ".join(
        f"{law} {numbers.value(x.property, value)}" for law, value in x.by_law.items()) for x in limits]


def _taught(recipe: Recipe) -> list[str]:
    """Which of the laboratory's lessons are in these figures."""
    told = [f"with the laboratory's lessons {', '.join(recipe.lessons)}"] if recipe.lessons else []
    told += [f"! {harmless(said, 200)}" for said in recipe.warnings]
    if recipe.provisional:
        told.append(f"! provisional, from fewer than four blends: {', '.join(recipe.provisional)}")
    return told


def _others(recipe: Recipe) -> list[str]:
    limited = {x.property for x in recipe.limits}
    apart = {code: f" ({told})" for code in recipe.predicted if (told := words.laws_apart(recipe, code))}
    shown = [f"{words.heading(code)} {words.amount(code, value)}{apart.get(code, '')}"
             for code, value in recipe.predicted.items()
             if value is not None and code not in limited and _figure(code, value, None).strip("0.-")]
    return ["also predicted: " + ", ".join(shown)] if shown else []


def _spread(recipe: Recipe) -> list[str]:
    told = [f"{words.heading(code)} {numbers.fixed(value, 1)} %" for code, value in recipe.spread_pct.items()
            if value is not None]
    if not told:
        return []
    warning = blends.spread_words(recipe)
    return [f"{'! ' if warning else ''}spread of the laws on these shares: {', '.join(told)}"
            + (f": {warning}" if warning else "")]


def _wished(answer: Answer) -> list[str]:
    wishes: list[str] = [f"{harmless(c)} {numbers.pct(x)} %" for c, x in answer.wishes.held.items()]
    said = ["held by you: " + ", ".join(wishes)] if wishes else []
    if answer.wishes.moved:
        moved = ", ".join(words.moved(code, side, at) for (code, side), at in answer.wishes.moved.items())
        said.append(f"! what-if, not what the product asks: {moved}; c on this screen clears it")
    if answer.wishes.confidence is not None:
        asked = f"asked by you: each limit with a chance of {100.0 * answer.wishes.confidence:.4g} % on the first batch"
        said.append(asked if answer.plain else f"{asked}; no blend meets the limits even without it")
    if answer.wishes.left_out:
        said.append("left out by you: " + ", ".join(harmless(c) for c in sorted(answer.wishes.left_out)))
    return said


def _old(answer: Answer, recipe: Recipe, today: date) -> list[str]:
    used: Mapping[str, float] = recipe.shares or {}
    old = [s.code for s in answer.stocks if s.code in used
           and (s.source == "typical" or (words.test_age(s, today) or 0) > words.OLD_DAYS
                or words.test_age(s, today) is None)]
    if not old:
        return []
    return [f"! no test of its own within a year: {', '.join(harmless(c) for c in old)}; lots of one oil differ by "
            "3 to 8 % in KV"]
