"""What can be done with stocks: show a cell, edit it with units, add, copy and retire."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from blendtui.store import cells as check
from blendtui.store import charging, edits
from blendtui.store.charging import is_value_code, sigma_of, value_order
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.reads import joined
from blendtui.store.records import Change, Value
from solver.properties import lookup, stock_codes
from solver.stocks import GROUPS, KINDS, SOURCES, Stock
from solver.target import ShareRule

from .amounts import CHARGES, MASS, amount, deviation
from .errors import DeskError

if TYPE_CHECKING:
    from solver.doubts import Doubt

KV = ("kv40", "kv100", "blend_kv40", "blend_kv100")
WORDS: dict[str, tuple[str, ...]] = {"kind": KINDS, "api_group": GROUPS, "source": SOURCES}
TEXT = ("name", "oil", "kind", "api_group", "tested_on", "source")
_UNSEEN = object()


@dataclass(frozen=True)
class Cell:
    """One column of the stocks table."""

    code: str  # field of Stock, or a property code
    heading: str
    unit: str = ""
    digits: int = -1  # decimals shown; for a KV significant figures; -1: text


@dataclass(frozen=True)
class Edit:
    """What became of an edit."""

    status: str  # "saved", "question" (nothing saved until it is confirmed) or "unchanged"
    message: str
    suggestion: str | None = None  # what to type instead, where there is an obvious value
    refused: bool = False  # a question that cannot be answered with "keep it"


def _property_cell(code: str) -> Cell:
    entry = lookup(sigma_of(code) or code)
    if sigma_of(code):
        return Cell(code, f"σ {entry.name}", entry.unit, 3)
    return Cell(code, entry.name, entry.unit, entry.digits)


_BEFORE = (
    Cell("name", "name"), Cell("oil", "oil"), Cell("kind", "kind"), Cell("api_group", "group"),
    Cell("on_hand_kg", "on hand", "kg", 0), Cell("unpumpable_kg", "bottoms", "kg", 0),
    Cell("price_per_t", "price", "/t", 2), Cell("density15", "density", "kg/m³", 1),
    Cell("kv40", "KV40", "mm²/s", 4), Cell("kv100", "KV100", "mm²/s", 4),
    Cell("blend_kv40", "blending KV40", "mm²/s", 4), Cell("blend_kv100", "blending KV100", "mm²/s", 4),
    Cell("division_kg", "scale step", "kg", 3), Cell("package_kg", "package", "kg", 3),
    Cell("least_charge_kg", "least charge", "kg", 3))
_AFTER = (Cell("tested_on", "tested on"), Cell("source", "source"))
CELLS: tuple[Cell, ...] = (*_BEFORE, *(_property_cell(p) for p in stock_codes()), *_AFTER)
_BY_CODE = {c.code: c for c in CELLS}


def cell(code: str) -> Cell:
    """The column of that code, any `ccs<°C>` and `sigma_<property>` too; DeskError for one that a stock has not."""
    if code in _BY_CODE:
        return _BY_CODE[code]
    if is_value_code(code):
        return _property_cell(code)
    raise DeskError(f"a stock has no {harmless(code, 40)!r}; it has {', '.join(_BY_CODE)}, ccs<°C> and "
                    "sigma_<property>")


def cells_for(stocks: Iterable[Stock]) -> tuple[Cell, ...]:
    """CELLS, and the further properties that these stocks have values of."""
    more = sorted({p for s in stocks for p in joined(s) if p not in _BY_CODE}, key=value_order)
    return (*CELLS[:-len(_AFTER)], *(_property_cell(p) for p in more), *_AFTER)


def value_of(stock: Stock, code: str) -> Value:
    """Value of a cell in the solver's unit, None where unknown."""
    if code in edits.STOCK_CELLS or code == "on_hand_kg":
        return getattr(stock, code)
    return joined(stock).get(code)


def text_of(stock: Stock, cell: Cell | str) -> str:
    """A cell as it is shown: rounded, harmless, empty where unknown."""
    column = cell if isinstance(cell, Cell) else _BY_CODE.get(cell) or _property_cell(cell)
    value = value_of(stock, column.code)
    if value is None or isinstance(value, str):
        return harmless(value or "")
    if column.code in CHARGES:
        return f"{value:.12g}"
    return figures(value, column.digits) if column.code in KV or sigma_of(column.code) else (
        f"{value:.{column.digits}f}")


def edit_text(stock: Stock, code: str) -> str:
    """A cell as it stands in the edit line: every digit of it."""
    value = value_of(stock, code)
    if value is None:
        return ""
    return harmless(value) if isinstance(value, str) else repr(float(value)).removesuffix(".0")


def figures(value: float, count: int = 4) -> str:
    """A number to so many significant figures, without an exponent.

    >>> figures(31.5), figures(1240.4), figures(0.45678)
    ('31.50', '1240', '0.4568')
    """
    if value == 0.0 or not math.isfinite(value):
        return f"{value:g}"
    exponent = int(f"{value:.{count - 1}e}".partition("e")[2])  # after rounding: 9.9999 has the one of 10
    return f"{value:.{max(0, count - 1 - exponent)}f}"


def derived(stock: Stock) -> tuple[float | None, float | None]:
    """VI and slope of the D341 line, None where the stock's KVs do not give them."""
    if stock.kv40 is None or stock.kv100 is None:
        return None, None
    from solver.viscosity_index import viscosity_index
    from solver.walther import line

    vi = slope = None
    try:
        slope = float(line(stock.kv40, stock.kv100).slope)
        vi = float(viscosity_index(stock.kv40, stock.kv100))
    except ValueError:
        pass  # below KV100 = 2 there is no VI
    return vi, slope


# Editing

def edit_cell(plant: Plant, code: str, cell_code: str, typed: str, confirmed: bool = False, *,
              seen: object = _UNSEEN) -> Edit:
    """Give a stock's cell what was typed, units and all; an empty text means unknown.

    What cannot be true is refused (DeskError, ScaleError); what is unlikely comes back as a question and is
    saved when asked again with `confirmed`. `seen` is the value that the screen showed: when the plant has
    another by now, ChangedSince says whose.
    """
    column, stock, typed = cell(cell_code), plant.stock(code), typed.strip()
    _refuse_stale(plant, stock, column.code, seen)
    if typed in ("=", edit_text(stock, column.code)):
        return Edit("unchanged", f"{code} {column.heading}: unchanged")
    new, note = _typed(stock, column, typed)
    stale = {c: v for c, v in new.items() if value_of(stock, c) != v}
    if not stale:
        return Edit("unchanged", "; ".join(x for x in (f"{code} {column.heading}: unchanged", note) if x))
    changed = stock
    for c, v in stale.items():
        changed = edits.with_cell(changed, c, v)
    remark, remedy = _refuse_faults(stock, changed, set(stale), confirmed)
    if remedy:
        return remedy
    refuse_orphans(plant, stock, changed)
    question = None if confirmed else _question(stock, changed)
    if question:
        return question
    said = f"{code} " + ", ".join(f"{cell(c).heading} {_spelt(stock, c)} → {_spelt(changed, c)}"
                                  for c in stale)
    plant.change([edits.stock_cell(stock, c, v) for c, v in stale.items()], said)
    return Edit("saved", "; ".join(x for x in (said, note, remark) if x))


def _spelt(stock: Stock, code: str) -> str:
    text = edit_text(stock, code)
    if not text:
        return "empty" if code in TEXT else "unknown"
    # Twelve digits: a product of a unit scale carries noise in the last ones.
    return text if code in TEXT else f"{float(text):.12g}"


def _refuse_stale(plant: Plant, stock: Stock, code: str, seen: object) -> None:
    if seen is _UNSEEN or value_of(stock, code) == seen:
        return
    change = edits.stock_cell(stock, code, None)
    raise plant.changed_since(change, f"{stock.code} {cell(code).heading} is now {_spelt(stock, code)}")


def _typed(stock: Stock, column: Cell, typed: str) -> tuple[dict[str, Value], str]:
    """The new value of every cell that the text speaks of, and a note on how it was read."""
    code = column.code
    if code in TEXT:
        return {code: _text(code, typed)}, ""
    if not typed:
        return {code: None}, ""
    if code in KV:
        from solver.scales import parse_kv_pair

        prefix = code.removesuffix("kv40").removesuffix("kv100")
        pair = parse_kv_pair(typed)
        if pair is not None:
            # Six figures: what a Saybolt time is worth, and a person can read back.
            return {f"{prefix}kv{t}": float(f"{v:.6g}") for t, v in ((40, pair.kv40), (100, pair.kv100))}, pair.note
        if typed.count("/") == 1 and not typed.endswith("mm²/s") and not typed.endswith("mm2/s"):
            cold, hot = (amount(part, code) for part in typed.split("/"))
            return {f"{prefix}kv40": cold, f"{prefix}kv100": hot}, "read as KV40/KV100"
    if sigma_of(code):
        return {code: deviation(stock.code, sigma_of(code), value_of(stock, sigma_of(code)), typed)}, ""
    value = amount(typed, code, stock.density15)
    if code in MASS and value > check.LARGEST_KG:
        raise DeskError(f"{harmless(typed, 40)} is more than {check.LARGEST_KG:g} kg; check the unit")
    if code == "on_hand_kg":
        return _to_the_milligram(value)
    return {code: value}, ""


def _to_the_milligram(kg: float) -> tuple[dict[str, Value], str]:
    """A quantity as the plant keeps it, in whole milligrams, and a note where that is not what was typed."""
    kept = round(kg * 1e6) / 1e6
    same = math.isclose(kg, kept, rel_tol=1e-9)
    return {"on_hand_kg": kept}, "" if same else f"kept to the milligram: {kept:.12g} kg"


def _text(code: str, typed: str) -> str:
    try:
        if code == "tested_on":
            return check.iso_date(typed)
        if code in WORDS:
            typed = typed.upper() if code == "api_group" else typed.lower().replace(" ", "_")
            heading = "group" if code == "api_group" else code
            return check.word(typed, WORDS[code], heading) or ("base" if code == "kind" else "")
        return check.plain(typed)
    except check.CellError as error:
        raise DeskError(str(error)) from None


def _refuse_faults(old: Stock, new: Stock, edited: set[str], confirmed: bool) -> tuple[str, Edit | None]:
    """A remark on what is still missing, or a refusal that names the value that would do.

    A stock is typed in cell by cell, so that a KV without its partner is no reason to refuse the first.
    Raises DeskError on what cannot be true and has no obvious remedy, or was insisted on.
    """
    from solver.doubts import faults

    before = {(d.cell, d.says) for d in (*faults(old), *charging.faults(old))}
    missing = ""
    for doubt in (*faults(new), *charging.faults(new)):
        if value_of(new, doubt.cell) is None:
            missing = missing or doubt.says
        elif doubt.cell in edited or (doubt.cell, doubt.says) not in before:
            says, remedy = f"{new.code}: {doubt.says}", _remedy(new, doubt)
            if remedy and not confirmed:
                return "", Edit("question", says, remedy, refused=True)
            raise DeskError(says)
    return missing, None


def _remedy(stock: Stock, doubt: Doubt) -> str | None:
    """What to type instead of something that cannot be true, where it is obvious."""
    if doubt.suggestion is None:
        return None
    if doubt.cell in KV:  # the two are swapped: both at once
        prefix = doubt.cell.removesuffix("kv40").removesuffix("kv100")
        cold, hot = value_of(stock, f"{prefix}kv40"), value_of(stock, f"{prefix}kv100")
        if cold == hot:
            return None
        return f"{hot:.12g}/{cold:.12g}"
    return f"{doubt.suggestion:.12g}"


def _question(old: Stock, new: Stock) -> Edit | None:
    """The doubts that this edit raises, as a question."""
    from solver.doubts import doubts

    before = (*doubts(old), *charging.doubts(old))
    raised = [d for d in (*doubts(new), *charging.doubts(new)) if d not in before]
    if not raised:
        return None
    likely = next((d.suggestion for d in raised if d.suggestion is not None), None)
    return Edit("question", f"{new.code}: " + "; ".join(d.says for d in raised),
                None if likely is None else f"{likely:.12g}")


# Stocks as a whole

def add_stock(plant: Plant, code: str, **cells: Value) -> Stock:
    """Add an empty base stock under a code, or one with these cells; a retired code is taken up again."""
    code = _new_code(plant, code)
    return _add(plant, replace(Stock(code), **cells), [], f"{code} added")


def copy_stock(plant: Plant, code: str, new: str) -> Stock:
    """Copy every cell of a stock but its quantity under a new code."""
    stock, new = plant.stock(code), _new_code(plant, new)
    extra = edits.copied_extras(plant, "stock", (code,), (new,))
    return _add(plant, replace(stock, code=new, on_hand_kg=None), extra, f"{new} added as a copy of {code}")


def _new_code(plant: Plant, typed: str) -> str:
    try:
        code = check.stock_code(typed.strip())
    except check.CellError as error:
        raise DeskError(str(error)) from None
    if any(s.code == code for s in plant.stocks()):
        raise DeskError(f"there is a stock {code} already; give the new one another code")
    return code


def _add(plant: Plant, stock: Stock, extra: list[Change], what: str) -> Stock:
    old = next((s for s in plant.stocks(include_retired=True) if s.code == stock.code), None)
    changes = edits.new_stock(plant, stock) if old is None else edits.revived_stock(plant, stock, old)
    plant.change([*changes, *(extra if old is None else ())], what)
    return plant.stock(stock.code)


def retire_stock(plant: Plant, code: str) -> str:
    """Take a stock out of use and say so; undo brings it back.

    Refused while a product demands it. Rules that merely allow it go with it.
    """
    stock = plant.stock(code)
    refuse_orphans(plant, stock, None)
    dropped, names = [], []
    others = [s for s in plant.stocks() if s.code != code]
    for product in plant.products():
        for rule in _left_without(product.rules, stock, others):
            present = edits.lines(plant, "share_rule", product.product, rule.of)
            dropped += edits.drop_lines(plant, "share_rule", present)
            names.append(product.product)
    plant.change([*dropped, edits.retired("stock", code)], f"{code} retired")
    gone = f"; the rules of {', '.join(dict.fromkeys(names))} that allowed it are gone" if names else ""
    return f"{code} retired{gone}"


def refuse_orphans(plant: Plant, old: Stock, new: Stock | None) -> None:
    """DeskError when a change of a stock (None: it goes) leaves a product's rule without any stock."""
    if new is not None and all(value_of(old, c) == value_of(new, c) for c in ("oil", "kind", "api_group")):
        return
    others = [s for s in plant.stocks() if s.code != old.code] + ([] if new is None else [new])
    for product in plant.products():
        for rule in product.rules:
            if not old.matches(rule.of) or any(s.matches(rule.of) for s in others):
                continue
            if rule.low > 0.0:
                raise DeskError(f"{product.product} demands {100 * rule.low:.12g} % of {rule.of}, and "
                                f"{old.code} is the last of it; change that rule first")
            if new is not None and rule.of == old.oil:
                raise DeskError(f"{product.product} has a rule on the oil {rule.of}, and {old.code} is its "
                                "last tank; change that rule first")


def _left_without(rules: Iterable[ShareRule], stock: Stock, others: list[Stock]) -> list[ShareRule]:
    """Rules on the code or oil of a stock that name nothing once it is gone."""
    seen: dict[str, ShareRule] = {}
    for rule in rules:
        if rule.of in (stock.code, stock.oil) and rule.of and not any(s.matches(rule.of) for s in others):
            seen.setdefault(rule.of, rule)
    return list(seen.values())
