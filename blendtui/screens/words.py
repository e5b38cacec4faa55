"""Short sentences on a recipe that more than one screen shows."""

from __future__ import annotations

from datetime import date
from typing import TYPE_CHECKING

from blendtui.desk import numbers
from blendtui.widgets.paint import BAD, BOLD, PLAIN, WARN, Line, Run
from solver.stocks import Stock

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe

    from .session import Session

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


def missed(limit: LimitResult) -> str:
    """By how much a limit is missed: `KV100 0.310 mm²/s too low`."""
    if limit.value is None or limit.margin is None:
        return f"{heading(limit.property)} unknown"
    low = limit.held_low is not None and limit.value < limit.held_low
    return f"{heading(limit.property)} {amount(limit.property, abs(limit.margin))} too {'low' if low else 'high'}"


def misses(recipe: Recipe) -> list[str]:
    """Every limit that a recipe misses, and by how much."""
    return [missed(x) for x in recipe.limits if x.met is False]


def shares(recipe: Recipe) -> str:
    """The shares in a line, largest first."""
    ordered = sorted((recipe.shares or {}).items(), key=lambda item: -item[1])
    return ", ".join(f"{code} {numbers.pct(share)} %" for code, share in ordered)


def verdict(recipe: Recipe) -> Run:
    """What kind of answer this is, in words and with a sign."""
    if recipe.status == "optimal":
        return "least cost, proven", BOLD
    if recipe.status == "infeasible":
        return "! no blend meets it", BAD
    if recipe.status == "stopped":
        return "! stopped before the proof" if recipe.shares else "! stopped: no blend found yet", WARN
    if recipe.meets_all:
        return "by hand, inside all limits", BOLD
    return "! by hand, limits missed", BAD


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
    cost = f" {numbers.cost(recipe.cost_per_t)} /t" if recipe.cost_per_t is not None else ""
    told = "; ".join(misses(recipe)) or shares(recipe) or "; ".join(recipe.reasons)
    return [*start, verdict(recipe), (f"{cost} │ {told}", PLAIN)]


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
