"""Short sentences on a recipe that more than one screen shows."""

from __future__ import annotations

from datetime import date
from typing import TYPE_CHECKING

from blendtui.desk import numbers
from blendtui.store.harmless import harmless
from blendtui.widgets.paint import BAD, BOLD, PLAIN, WARN, Line, Run
from solver.stocks import Stock

if TYPE_CHECKING:
    from blendtui.desk.answers import Wishes
    from solver.recipe import LimitResult, Recipe

    from .session import Session
    from .state import Snapshot

CAUTION = "A calculated blend is not a certificate: the laboratory releases."
OLD_DAYS = 365  # a test older than this is marked


def heading(code: str) -> str:
    """Short name of a property: KV40, KV100, VI, flash point."""
    if code.startswith("kv"):
        return "KV" + code[2:]
    if code == "vi":
        return "VI"
    if code == "cost_per_t":
        return "cost"
    from solver.properties import lookup

    return lookup(code).name


def unit(code: str) -> str:
    """Unit of a property, as it stands beside a number."""
    if code == "cost_per_t":
        return "/t"
    from solver.properties import lookup

    return lookup(code).unit


def amount(code: str, value: float | None) -> str:
    """A number with its unit."""
    return f"{numbers.value(code, value)} {unit(code)}".rstrip()


def fine(code: str, value: float | None) -> str:
    """A number with at least one digit that is not 0: a margin of 0.0004 is not shown as nothing."""
    text = numbers.value(code, value)
    return numbers.figures(value, 1) if value and not text.strip("-0.") else text


def in_guard(limit: LimitResult) -> bool:
    """Is a missed limit met but for its guard?"""
    value = limit.value
    return (limit.met is False and value is not None and (limit.low is None or value >= limit.low)
            and (limit.high is None or value <= limit.high))


def missed(limit: LimitResult) -> str:
    """By how much a limit is missed: `VI 109, 54 short of 163`, `VI 103, inside 102 but not its guard (104)`."""
    code, value = limit.property, limit.value
    if value is None or limit.margin is None:
        return f"{heading(code)} unknown"
    low = limit.held_low is not None and value < limit.held_low
    side, held = (limit.low, limit.held_low) if low else (limit.high, limit.held_high)
    start = f"{heading(code)} {numbers.value(code, value)}"
    if in_guard(limit):
        return f"{start}, inside {numbers.value(code, side)} but not its guard ({numbers.value(code, held)})"
    by = f"{fine(code, abs(limit.margin))} {unit(code)}".rstrip()
    guarded = " with its guard" if side != held else ""
    return f"{start}, {by} {'short of' if low else 'above'} {numbers.value(code, held)}{guarded}"


def misses(recipe: Recipe) -> list[str]:
    """Every limit that a recipe misses, and by how much."""
    return [missed(x) for x in recipe.limits if x.met is False]


def laws_apart(recipe: Recipe, code: str) -> str:
    """How far the laws are apart on a viscosity, to stand beside it: `laws 1.5 %`, `! laws 4.3 %`; else nothing."""
    spread = recipe.spread_pct.get(code)
    if spread is None:
        return ""
    from blendtui.desk.blends import SPREAD_MARKED

    sign = "! " if spread > SPREAD_MARKED else ""
    return f"{sign}laws {numbers.fixed(spread, 0 if spread >= 99.95 else 1)} %"


def moved(code: str, side: str, at: float) -> str:
    """A limit as it is moved by a what-if: `VI at least 109`, `KV40 at most open`."""
    return f"{heading(code)} {'at least' if side == 'low' else 'at most'} {'open' if at != at else amount(code, at)}"


def chance(before: Wishes, asked: float) -> str:
    """What is asked of the recipe from now on, and which of the wishes before it that takes the place of."""
    dropped = ", charges of any mass again" if before.whole else ""
    return f"asked: each limit with a chance of {100.0 * asked:.4g} %{dropped}"


def shares(recipe: Recipe) -> str:
    """The shares in a line, largest first."""
    ordered = sorted((recipe.shares or {}).items(), key=lambda item: -item[1])
    return ", ".join(f"{code} {numbers.pct(share)} %" for code, share in ordered)


def verdict(recipe: Recipe, what_if: bool = False) -> Run:
    """What kind of answer this is, in words and with a sign. `what_if`: limits are not those of the product."""
    text, style = _verdict(recipe)
    return (f"! WHAT-IF: {text.removeprefix('! ')}", BAD if style is BAD else WARN) if what_if else (text, style)


def _verdict(recipe: Recipe) -> Run:
    if recipe.status == "optimal":
        return "least cost, proven", BOLD
    if recipe.status == "infeasible" and recipe.meets_all:
        return "! no blend is so sure; the surest found", BAD
    if recipe.status == "infeasible":
        return "! no blend meets it", BAD
    if recipe.status == "stopped":
        return "! best found, not proven the cheapest" if recipe.shares else "! stopped: no blend found yet", WARN
    outside = bool(misses(recipe))
    if recipe.breaches:
        return "! by hand, breaks the product's rules" + (" and misses limits" if outside else ""), BAD
    if outside or not recipe.meets_all:
        guards = all(in_guard(x) for x in recipe.limits if x.met is False)
        return "! by hand, inside the limits but not their guards" if guards else "! by hand, limits missed", BAD
    unknown = any(x.met is None for x in recipe.limits)
    return f"by hand, inside all {'known ' if unknown else ''}limits", BOLD


def summary(session: Session) -> Line:
    """The recipe that all screens speak of, in one line."""
    state, recipe = session.state, session.shown
    if not session.product:
        return [(state.error, PLAIN)]
    start: Line = [(f"{session.product}: ", BOLD)]
    if state.error:
        return [*start, (f"! {state.error}", BAD)]
    if recipe is None:
        return [*start, ("working out the recipe …", PLAIN)]
    nearest = "; the nearest" if recipe.status == "infeasible" and not recipe.meets_all and recipe.shares else ""
    cost = f"{nearest} {numbers.cost(recipe.cost_per_t)} /t" if recipe.cost_per_t is not None else nearest
    told = "; ".join([*recipe.breaches, *misses(recipe)]) or shares(recipe) or "; ".join(recipe.reasons)
    return [*start, verdict(recipe, bool(state.wishes.moved)), (f"{cost} │ {told}", PLAIN)]


def changed_cell(before: Snapshot, after: Snapshot) -> str:
    """The one stock cell in which two readings of a plant differ, and its value now; else nothing."""
    from blendtui.desk import stocks as desk

    told = []
    for new in after.stocks:
        old = before.stock(new.code)
        if old is not None and old != new:
            told += [f"{harmless(new.code)} {c.heading} is {desk.text_of(new, c.code) or 'unknown'} now"
                     for c in desk.cells_for([old, new]) if desk.value_of(old, c.code) != desk.value_of(new, c.code)]
    return told[0] if len(told) == 1 else ""


def forgotten(wishes: Wishes, kept: bool) -> list[str]:
    """What of these wishes is lost when the program is left. `kept`: a trial holds the typed shares."""
    told = ["shares typed by hand, kept in no trial (k on the screen Recipe keeps them)"] if (
        wishes.typed and not kept) else []
    told += [f"{harmless(c)} held at {numbers.pct(x)} %" for c, x in wishes.held.items()]
    told += [f"{harmless(c)} left out" for c in sorted(wishes.left_out)]
    if wishes.batch_kg is not None:
        told.append(f"batch {numbers.kg(wishes.batch_kg)} kg")
    told += [f"what-if {moved(code, side, at)}" for (code, side), at in wishes.moved.items()]
    told += [f"held under {', '.join(wishes.also_laws)}"] if wishes.also_laws else []
    told += ["whole steps"] if wishes.whole else []
    told += [f"chance {100.0 * wishes.confidence:.4g} %"] if wishes.confidence is not None else []
    if wishes.law and not (wishes.typed and kept):
        told.append(f"law {wishes.law}")
    return told


def property_code(typed: str) -> str:
    """The code of a property typed as its code or its name, in any case; TargetError in words for another."""
    from solver.errors import TargetError
    from solver.properties import lookup, stock_codes

    text = " ".join(typed.lower().split())
    names = {lookup(c).name.lower(): c for c in ("vi", "density15", *stock_codes())}
    begun = [c for name, c in names.items() if text and name.startswith(text)]
    for code in (text, names.get(text, ""), text.replace(" ", ""), begun[0] if len(begun) == 1 else ""):
        try:
            lookup(code)
        except TargetError:
            continue
        return code
    lookup(text)
    raise AssertionError


def tested(stock: Stock, today: date) -> str:
    """Source and age of a stock's test: `own 34 d`, `certificate 14 mo !` where it is old."""
    days = test_age(stock, today)
    source = {"certificate": "cert.", "typical": "typ."}.get(stock.source, stock.source) or "?"
    if days is None:
        return f"{source} no date"
    age = f"{days} d" if days < 60 else f"{days // 30} mo" if days < 730 else f"{days // 365} y"
    return f"{source} {age}{' !' if days > OLD_DAYS else ''}"


def test_age(stock: Stock, today: date) -> int | None:
    """Days since a stock was tested; None without a date."""
    try:
        return (today - date.fromisoformat(stock.tested_on)).days
    except ValueError:
        return None
