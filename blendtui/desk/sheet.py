"""The floor sheet: a recipe as plain text of 80 columns, for the printer and the clipboard on the floor."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING

from blendtui.store.harmless import harmless
from blendtui.store.records import Product
from solver.properties import lookup
from solver.requirements import MOVED
from solver.stocks import Stock

from . import numbers
from .blends import spread_words
from .errors import DeskError

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe

WIDTH = 80
TRACE = 1e-6  # mass fraction: what a search leaves of a stock that nobody could weigh
NOT_A_CERTIFICATE = "A calculated blend is not a certificate: the laboratory releases."
# Common practice on the floor; each a reminder with its reason, never a permission.
CAUTIONS = (
    "Site procedures, safety data sheets, permits and local codes decide; this sheet only reminds.",
    "Flash: the lowest flash in the vessel and the heater skin count, not the blend's mean.",
    "Water in hot oil froths over: drain and test first, heat slowly, leave room.",
    "Static: bond, earth, fill from below, start slowly, wait before dipping.",
    "Never mix concentrates neat; keep additives within the temperature of their safety data sheet.")
_ORDER = {"base": 0, "rework": 1, "vi_improver": 2, "additive": 3, "pour_depressant": 4}
_PLAIN = str.maketrans({"–": "-", "²": "2", "³": "3", "°": "deg", "·": ".", "−": "-", "≤": "<=", "≥": ">=",
                        "…": "~", "×": "x"})


def _ascii(text: str) -> str:
    """What any printer can print, made before columns are padded."""
    return harmless(text).translate(_PLAIN).encode("ascii", "replace").decode("ascii")


def _cut(text: str, longest: int) -> str:
    return _ascii(harmless(text, longest))


def charge_order(stocks: Sequence[Stock]) -> list[Stock]:
    """The usual order of charging: light stock, heavy stock, rework, VI improver, package, pour depressant."""
    return sorted(stocks, key=lambda s: (_ORDER.get(s.kind, 9), s.kv40 or 0.0, s.code))


def floor_sheet(plant: str, product: Product, recipe: Recipe, stocks: Sequence[Stock], when: datetime,
                who: str) -> str:
    """The sheet as text, ASCII only, no line longer than 80 columns.

    DeskError without shares, or where they do not sum to 100 %. A blend that misses a limit or breaks a rule is
    headed so.
    """
    if not recipe.shares:
        raise DeskError("there are no shares to write down yet")
    total = sum(recipe.shares.values())
    if abs(total - 1.0) > 1e-4:
        raise DeskError(f"the shares sum to {100 * total:.2f} %, not to 100 %; mend them before writing a sheet")
    used = charge_order([s for s in stocks if recipe.shares.get(s.code, 0.0) > TRACE])
    title = _cut(f"{product.product}  {product.name}".strip(), 60)
    lines = ["BLEND SHEET  " + title, "=" * WIDTH,
             f"Plant {_cut(plant, 70)}",
             f"Made {when:%Y-%m-%d %H:%M} by {_cut(who, 40)}",
             f"Batch {numbers.batch(recipe.batch_kg)} kg   law {_laws(recipe)}   {_status(recipe)}", ""]
    moved = [lookup(x.property).name for x in recipe.limits if MOVED in x.sources]
    if moved:
        words = f"*** WHAT-IF, DO NOT BLEND: not the product's own limit on {', '.join(moved)} ***"
        lines += [*textwrap.wrap(_ascii(words), WIDTH), ""]
    if not recipe.meets_all:
        lines += ["*** DO NOT BLEND: this does not meet the product as it stands ***"]
        lines += [line for words in recipe.breaches
                  for line in textwrap.wrap(_ascii(f"! {words}"), WIDTH, subsequent_indent="  ")] + [""]
    lines += [*_charges(recipe, used), "", *_properties(recipe), ""]
    warning = spread_words(recipe)
    said = [*recipe.reasons, *recipe.warnings, *_taught(recipe), *([f"! {warning}"] if warning else [])]
    lines += [line for words in (*said, *(f"To be tested: {t}" for t in recipe.to_be_tested))
              for line in textwrap.wrap(_ascii(words), WIDTH)]
    lines += ["", *(line for c in (*CAUTIONS, NOT_A_CERTIFICATE)
                    for line in textwrap.wrap("* " + c, WIDTH, subsequent_indent="  ")), "",
              "Charged by ____________________   Checked by ____________________", ""]
    return _ascii_lines(lines)


def _ascii_lines(lines: Sequence[str]) -> str:
    return "\n".join(_ascii(line).rstrip() for line in lines)


def _laws(recipe: Recipe) -> str:
    more = len(set(recipe.also_laws) - {recipe.law})
    return recipe.law + (f" (and {more} more, see below)" if more else "")


def _taught(recipe: Recipe) -> list[str]:
    """Which further laws the limits were held under, and which of the laboratory's lessons are in the figures."""
    under = [law for law in recipe.also_laws if law != recipe.law]
    if not recipe.lessons:
        return [f"Held under {', '.join(under)} too."] if under else []
    unsure = f"; provisional: {', '.join(recipe.provisional)}" if recipe.provisional else ""
    return [*([f"Held under {', '.join(under)} too."] if under else []),
            f"With the laboratory's lessons {', '.join(recipe.lessons)}{unsure}."]


def _status(recipe: Recipe) -> str:
    return {"optimal": "least cost", "stopped": "best known, not proven", "by hand": "shares typed by hand",
            "infeasible": "NEAREST BLEND: DOES NOT MEET EVERY LIMIT"}[recipe.status]


def _charges(recipe: Recipe, used: Sequence[Stock]) -> list[str]:
    head = f"{'':5}{'stock':<14}{'name':<26}{'mass %':>8}{'kg':>12}{'L at 15 C':>13}"
    lines = [head, "-" * WIDTH]
    shares, masses = recipe.shares or {}, masses_shown(recipe, used)
    for stock in used:
        mass = (recipe.charges_kg or {}).get(stock.code)
        volume = None if mass is None or stock.density15 is None else 1000.0 * mass / stock.density15
        # The tank often stands at the end of a name, so a long name goes on below and is never cut.
        code, name = (textwrap.wrap(_ascii(text), width) or [""]
                      for text, width in ((stock.code, 13), (stock.name, 25)))
        lines.append(f"[ ]  {code[0]:<14}{name[0]:<26}{numbers.pct(shares[stock.code]):>8}"
                     f"{_ascii(masses.get(stock.code, numbers.UNKNOWN)):>12}{_ascii(numbers.litres(volume)):>13}")
        for n in range(1, max(len(code), len(name))):
            lines.append(f"{'':5}{code[n] if n < len(code) else '':<14}{name[n] if n < len(name) else ''}")
        lines += _packages(stock, mass)
    total = recipe.batch_kg if recipe.charges_kg is None else sum(recipe.charges_kg.values())
    shown = _exact(total) if total is not None and _in_whole_steps(recipe, used) else numbers.kg(total)
    lines += ["-" * WIDTH, f"{'':5}{'total':<40}{numbers.pct(sum(shares.values())):>8}{_ascii(shown):>12}"]
    return lines + _steps(recipe, used)


def _step(stock: Stock) -> float | None:
    return stock.package_kg or stock.division_kg


def _count(stock: Stock, mass: float) -> float | None:
    """How many of its steps a charge is; None where it takes any mass."""
    step = _step(stock)
    return None if not step else mass / step


def _is_whole(count: float | None) -> bool:
    return count is None or abs(count - round(count)) < 1e-6


def _in_whole_steps(recipe: Recipe, used: Sequence[Stock]) -> bool:
    """Are there steps, and is every charge a whole number of its own?"""
    counts = [_count(s, (recipe.charges_kg or {}).get(s.code, 0.0)) for s in used]
    return recipe.charges_kg is not None and any(c is not None for c in counts) and all(map(_is_whole, counts))


def _exact(mass: float) -> str:
    """A mass [kg] to the gram, for a whole number of steps is weighed as it stands."""
    return f"{round(mass, 3):.10g}"


def mass_shown(stock: Stock, mass: float) -> str:
    """One mass [kg]: as it is weighed where it is whole steps of its stock, else rounded."""
    return _exact(mass) if _step(stock) and _is_whole(_count(stock, mass)) else numbers.kg(mass)


def masses_shown(recipe: Recipe, used: Sequence[Stock]) -> dict[str, str]:
    """Masses as shown: whole steps as they are, others rounded so that they add up."""
    if not _in_whole_steps(recipe, used):
        return numbers.charges(recipe.charges_kg)
    return {s.code: _exact(mass) if _step(s) else numbers.kg(mass)
            for s in used if (mass := (recipe.charges_kg or {}).get(s.code)) is not None}


def _packages(stock: Stock, mass: float | None) -> list[str]:
    """The number of drums or IBCs of a packaged stock, on a line of its own."""
    if stock.package_kg is None or mass is None:
        return []
    count = mass / stock.package_kg
    size = f"{_exact(stock.package_kg)} kg"
    words = f"= {round(count)} x {size}" if _is_whole(count) else f"= {count:.2f} x {size}: NOT WHOLE"
    return [f"{'':19}{words}"]


def _steps(recipe: Recipe, used: Sequence[Stock]) -> list[str]:
    """By which steps the stocks are charged, or that the charges are none."""
    if recipe.charges_kg is None or not any(map(_step, used)):
        return []
    off = [s for s in used if not _is_whole(_count(s, recipe.charges_kg.get(s.code, 0.0)))]
    by_step: dict[float, list[str]] = {}
    for stock in off or used:
        if (step := _step(stock)) is not None:
            by_step.setdefault(step, []).append(stock.code)
    each = "; ".join(f"{_exact(step)} kg {', '.join(codes)}" for step, codes in sorted(by_step.items()))
    words = (f"not in whole steps: {each}; whole quantities can be asked for" if off
             else f"in whole steps: {each}")
    return textwrap.wrap(_ascii(words), WIDTH, subsequent_indent="  ")


def _properties(recipe: Recipe) -> list[str]:
    lines = [f"{'predicted':<34}{'value':>12}{'at least':>12}{'at most':>12}  ", "-" * WIDTH]
    for limit in recipe.limits:
        lines.append(_property(limit))
    held = {limit.property for limit in recipe.limits}
    for code in ("kv40", "kv100", "vi", "density15"):
        if code not in held and (value := recipe.predicted.get(code)) is not None:
            lines.append(f"{_ascii(lookup(code).label):<34}{numbers.value(code, value):>12}")
    spread = recipe.spread_pct
    lines.append(f"spread of the laws, %: KV40 {numbers.fixed(spread.get('kv40'), 1)}, "
                 f"KV100 {numbers.fixed(spread.get('kv100'), 1)}")
    return lines


def _property(limit: LimitResult) -> str:
    label = "cost, per t" if limit.property == "cost_per_t" else lookup(limit.property).label
    low, high = (("" if v is None else numbers.value(limit.property, v)) for v in (limit.low, limit.high))
    word = {True: "met", False: "NOT MET", None: "unknown"}[limit.met]
    return f"{_ascii(label):<34}{numbers.value(limit.property, limit.value):>12}{low:>12}{high:>12}  {word}"


def write_sheet(path: Path, text: str) -> str:
    """Write a sheet to a new file and say where; DeskError rather than write over one."""
    try:
        with path.open("x", encoding="ascii") as out:
            out.write(text)
    except FileExistsError:
        raise DeskError(f"{path} is there already; choose another name or move the old sheet away") from None
    except OSError as error:
        raise DeskError(f"cannot write {path}: {(error.strerror or str(error)).lower()}; "
                        "choose another place") from None
    return f"sheet written to {path}"
