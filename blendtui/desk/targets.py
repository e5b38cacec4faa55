"""What can be done with products: their cells, limits and share rules, and the target they make."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from blendtui.store import cells as check
from blendtui.store import edits
from blendtui.store.catalogue import grade_name
from blendtui.store.errors import ChangedSince
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Product, Row, Value
from blendtui.store.rules import Rule, contradictions
from blendtui.store.state import change_of
from solver.errors import TargetError
from solver.properties import lookup
from solver.stocks import GROUPS, KINDS
from solver.target import LAWS, Limit, Target

from .errors import DeskError
from .stocks import Edit, amount


@dataclass(frozen=True)
class ProductCell:
    """One cell of a product that can be edited."""

    code: str  # field of Product
    heading: str
    unit: str = ""


PRODUCT_CELLS: tuple[ProductCell, ...] = (
    ProductCell("name", "name"), ProductCell("grade", "grade"), ProductCell("batch_kg", "batch", "kg"),
    ProductCell("law", "law"), ProductCell("max_cost_per_t", "most cost", "/t"),
    ProductCell("max_stocks", "most stocks"), ProductCell("min_share_pct", "least share", "%"),
    ProductCell("only_listed", "only listed"), ProductCell("note", "note"))
_BY_CODE = {c.code: c for c in PRODUCT_CELLS}


def products(plant: Plant) -> list[Product]:
    """The products in the plant's order."""
    return plant.products()


def target_of(plant: Plant, product: str, law: str | None = None, batch_kg: float | None = None,
              held: Mapping[str, float] | None = None, left_out: Iterable[str] = ()) -> Target:
    """What a product asks for as the solver's target; `law` and `batch_kg` override the product's own.

    `held`: stock → mass fraction. Raises NoSuchRow, or TargetError for a law that is not known.
    """
    asked = plant.product(product)
    law = law or asked.law or "refutas"
    if law not in LAWS:
        raise TargetError(f"unknown law {harmless(law, 40)!r}; usable are {', '.join(LAWS)}", where="law")
    share = asked.min_share_pct
    return Target(product=asked.product, limits=asked.limits, rules=asked.rules, grade=asked.grade, law=law,
                  batch_kg=asked.batch_kg if batch_kg is None else batch_kg,
                  max_cost_per_t=asked.max_cost_per_t, max_stocks=asked.max_stocks,
                  min_share=None if share is None else share / 100.0, only_listed=asked.only_listed,
                  held=dict(held or {}), left_out=frozenset(left_out),
                  lessons=tuple(x.taught for x in plant.lessons()))


# Cells

def text_of(product: Product, cell: str) -> str:
    """A cell as it is shown and as it may be typed back."""
    value = getattr(product, cell)
    if isinstance(value, bool):
        return "yes" if value else "no"
    if value is None:
        return ""
    return harmless(value) if isinstance(value, str) else _plain(value)


def edit_product(plant: Plant, product: str, cell: str, typed: str, *, seen: Product | None = None) -> Edit:
    """Give a product's cell what was typed; empty means not asked. DeskError or ScaleError on refusal.

    `seen` is the product as the screen showed it: where the cell is another by now, ChangedSince says whose.
    """
    if cell not in _BY_CODE:
        raise DeskError(f"a product has no {harmless(cell, 40)!r}; it has {', '.join(_BY_CODE)}")
    old, typed, heading = plant.product(product), typed.strip(), _BY_CODE[cell].heading
    before = getattr(old, cell)
    if seen is not None and getattr(seen, cell) != before:
        raise plant.changed_since(edits.product_cell(old, cell, None),
                                  f"{product} {heading} is now {text_of(old, cell) or 'empty'}")
    value = _read(cell, typed)
    if value == (int(before) if isinstance(before, bool) else before):
        return Edit("unchanged", f"{product} {heading}: unchanged")
    if cell == "grade":
        _refuse_grade(old, str(value))
    said = f"{product} {heading} {text_of(old, cell) or 'empty'} → {_spelt(cell, value)}"
    plant.change([edits.product_cell(old, cell, value)], said)
    return Edit("saved", said)


def _refuse_grade(old: Product, grade: str) -> None:
    if not grade and not old.limits:
        raise DeskError(f"{old.product} has no limit of its own; set one before the grade goes")
    limited = _graded(grade) | {x.property for x in old.limits if x.low is not None or x.high is not None}
    lone = next((x.property for x in old.limits if x.property not in limited), None)
    if lone:
        raise DeskError(f"{old.product} has a guard on {lone}, which {grade or 'no grade'} does not limit; "
                        "drop that line or give it a low or a high first")


def _spelt(cell: str, value: Value) -> str:
    if cell == "only_listed":
        return "yes" if value else "no"
    if value in (None, ""):
        return "empty"
    return f"{value:.12g}" if isinstance(value, float) else str(value)


def _read(cell: str, typed: str) -> Value:
    try:
        if cell in ("name", "note"):
            return check.plain(typed)
        if cell == "grade":
            return grade_name(typed)
        if cell == "law":
            return check.word(typed.lower(), LAWS, "law")
        if cell == "only_listed":
            return check.yes({"y": "yes", "n": "no"}.get(typed.lower(), typed))
        if cell == "max_stocks":
            return check.whole(typed)
    except check.CellError as error:
        raise DeskError(str(error)) from None
    if not typed:
        return None
    if cell == "min_share_pct":
        return _percent(typed)
    value = amount(typed, cell)
    if value <= 0.0:
        raise DeskError(f"{_BY_CODE[cell].heading} {value:g} is not above 0; check the figure, "
                        "or leave it empty")
    if cell == "batch_kg" and value > check.LARGEST_KG:
        raise DeskError(f"{harmless(typed, 40)} is more than {check.LARGEST_KG:g} kg; check the unit")
    return value


def _percent(typed: str) -> float:
    from solver.scales import parse, split

    number, unit = split(typed)
    value = number if unit in ("", "%") else 100.0 * parse(typed, "share")
    if not 0.0 <= value <= 100.0:
        raise DeskError(f"{value:g} % lies outside 0 to 100 %; check the figure")
    return value


# Limits

def set_limit(plant: Plant, product: str, prop: str, low: str = "", high: str = "", guard: str = "", *,
              unknown_ok: bool | None = None, seen: Product | None = None) -> Edit:
    """Set a product's own limit on a property, units accepted; it replaces the product's lines on it.

    An empty low or high is open. The guard is in the property's unit, or with % of the limit's value.
    `unknown_ok` lets stocks serve whose value is unknown; None leaves that as it is. `seen`: as for a cell.
    """
    asked = plant.product(product)
    try:
        prop = check.property_code(prop.strip().lower())
        cells: Row = {"low": _limit_value(low, prop), "high": _limit_value(high, prop)}
        cells["guard"], cells["guard_pct"] = _guard(guard.strip(), prop)
    except check.CellError as error:
        raise DeskError(str(error)) from None
    own = [x for x in asked.limits if x.property == prop]
    if seen is not None and [x for x in seen.limits if x.property == prop] != own:
        raise _changed(plant, "product_limit", product, prop)
    cells["unknown_ok"] = int(any(x.unknown_ok for x in own) if unknown_ok is None else unknown_ok)
    _refuse_limit(asked, prop, cells)
    changes = [c for c in edits.set_line(plant, "product_limit", product, prop, cells) if not c.empty]
    if not changes:
        return Edit("unchanged", f"{product} {prop}: unchanged")
    said = f"{product} {prop} {_window(cells)}"
    plant.change(changes, said)
    others = f"; it replaces {len(own)} lines" if len(own) > 1 else ""
    return Edit("saved", said + others)


def _changed(plant: Plant, table: str, product: str, of: str) -> ChangedSince:
    """The error on a line that is no longer what the screen showed."""
    present = edits.lines(plant, table, product, of)
    if not present:
        return ChangedSince(f"{product} {of}: the line was dropped meanwhile; look again and repeat the change")
    key, row = present[0]
    return plant.changed_since(change_of(table, key, row, None), f"{product} {of} is another by now")


def _limit_value(typed: str, prop: str) -> float | None:
    if not typed.strip():
        return None
    value = amount(typed.strip(), prop) if prop != "vi" else _number(typed.strip())
    return check.limit_value(_plain(value), prop)


def _plain(value: float) -> str:
    """Every digit of a number, without a point where there is nothing behind it."""
    return repr(float(value)).removesuffix(".0")


def _number(typed: str) -> float:
    """A number without a unit."""
    from solver.scales import parse

    return parse(typed, "number")


def _guard(typed: str, prop: str) -> tuple[float, float]:
    if not typed or typed.endswith("%"):
        return check.guard(typed)
    from solver.scales import split

    number, unit = split(typed)
    entry = lookup(prop)
    if unit == "" or unit == entry.unit.lower():
        return check.guard(_plain(number))
    if entry.unit == "°C" and unit in ("f", "°f"):
        return check.guard(_plain(number / 1.8))  # a difference of temperatures has no offset
    return check.guard(_plain(amount(typed, prop)))


def _refuse_limit(asked: Product, prop: str, cells: Row) -> None:
    low, high = cells["low"], cells["high"]
    if low is not None and high is not None and low > high:
        raise DeskError(f"{asked.product} {prop}: low {low:g} is above high {high:g}; swap or mend them")
    if low is None and high is None:
        if not cells["guard"] and not cells["guard_pct"]:
            raise DeskError(f"{asked.product} {prop}: neither a low nor a high nor a guard; type one, "
                            "or drop the limit")
        if prop not in _graded(asked.grade):
            raise DeskError(f"{asked.product} {prop}: a guard without a limit, for its grade does not limit "
                            f"{prop}; type a low or a high")


def _graded(name: str) -> set[str]:
    from solver.grades import grade

    found = grade(name) if name else None
    return {x.property for x in found.limits} if found else set()


def _window(cells: Row) -> str:
    parts = [f"{side} {cells[side]:.12g}" for side in ("low", "high") if cells[side] is not None]
    if cells["guard_pct"]:
        parts.append(f"guard {cells['guard_pct']:.12g}%")
    elif cells["guard"]:
        parts.append(f"guard {cells['guard']:.12g}")
    if cells["unknown_ok"]:
        parts.append("unknown allowed")
    return ", ".join(parts)


def limit_texts(limit: Limit) -> tuple[str, str, str]:
    """Low, high and guard of a line as they may be typed back."""
    def text(value: float | None) -> str:
        return "" if value is None else _plain(value)

    guard = f"{text(limit.guard_pct)}%" if limit.guard_pct else text(limit.guard or None)
    return text(limit.low), text(limit.high), guard


def drop_limit(plant: Plant, product: str, prop: str) -> str:
    """Take a product's own lines on a property away; the grade's own limit stays."""
    asked = plant.product(product)
    present = edits.lines(plant, "product_limit", product, prop)
    if not present:
        raise DeskError(f"{product} has no limit of its own on {harmless(prop, 40)}; nothing to drop")
    if not asked.grade and all(x.property == prop for x in asked.limits):
        raise DeskError(f"the limit on {prop} is all that {product} asks for; give it a grade or another "
                        "limit first")
    plant.change(edits.drop_lines(plant, "product_limit", present), f"{product} limit on {prop} dropped")
    return f"{product} limit on {prop} dropped"


# Share rules

def set_rule(plant: Plant, product: str, of: str, low: str = "", high: str = "", *,
             seen: Product | None = None) -> Edit:
    """Set a product's share rule in mass % (or typed as `0.2 fraction`); it replaces its lines on that name.

    An empty low is 0, an empty high 100. A rule that contradicts another is refused.
    """
    asked = plant.product(product)
    try:
        of = check.rule_name(of.strip())
    except check.CellError as error:
        raise DeskError(str(error)) from None
    stocks = plant.stocks()
    names = {*(s.code for s in stocks), *(s.oil for s in stocks if s.oil), *KINDS,
             *(f"group {g}" for g in GROUPS)}
    if of not in names:
        raise DeskError(f"{harmless(of, 40)!r} is no stock, oil, kind or group of this plant; mend the name "
                        "or add the stock")
    cells: Row = {"low_pct": _percent(low) if low.strip() else 0.0,
                  "high_pct": _percent(high) if high.strip() else 100.0}
    if seen is not None and [r for r in seen.rules if r.of == of] != [r for r in asked.rules if r.of == of]:
        raise _changed(plant, "share_rule", product, of)
    _refuse_contradiction(plant, asked, of, cells)
    changes = [c for c in edits.set_line(plant, "share_rule", product, of, cells) if not c.empty]
    if not changes:
        return Edit("unchanged", f"{product} {of}: unchanged")
    said = f"{product} {of} {cells['low_pct']:.12g} to {cells['high_pct']:.12g} %"
    plant.change(changes, said)
    return Edit("saved", said)


def _refuse_contradiction(plant: Plant, asked: Product, of: str, cells: Row) -> None:
    low, high = float(cells["low_pct"] or 0.0), float(cells["high_pct"] or 0.0)
    rules = [Rule(str(k[1]), float(r["low_pct"] or 0.0), float(r["high_pct"] or 0.0))
             for k, r in edits.lines(plant, "share_rule", asked.product) if k[1] != of]
    found = contradictions([*rules, Rule(of, low, high)], plant.stocks())
    if found:
        place, what, fix = found[-1]
        name = of if place == len(rules) else rules[place].of
        raise DeskError(f"{asked.product}, rule on {name}: {what}; {fix}")


def drop_rule(plant: Plant, product: str, of: str) -> str:
    """Take a product's share rules on a name away."""
    plant.product(product)
    present = edits.lines(plant, "share_rule", product, of)
    if not present:
        raise DeskError(f"{product} has no share rule on {harmless(of, 40)}; nothing to drop")
    plant.change(edits.drop_lines(plant, "share_rule", present), f"{product} rule on {of} dropped")
    return f"{product} rule on {of} dropped"


# Products as a whole

def add_product(plant: Plant, code: str, grade: str = "") -> Product:
    """Add a product under a code; it asks for nothing until it has a grade or a limit."""
    code = _new_code(plant, code)
    changes = _blank(plant, code, {"grade": _read("grade", grade.strip())})
    plant.change(changes, f"{code} added")
    return plant.product(code)


def copy_product(plant: Plant, product: str, new: str) -> Product:
    """Copy a product with its limits and rules under a new code."""
    plant.product(product)
    new = _new_code(plant, new)
    row = plant.row("product", product) or {}
    changes = _blank(plant, new, {c: v for c, v in row.items() if c not in ("position", "retired")})
    changes += edits.copied_extras(plant, "product", (product,), (new,))
    for table in ("product_limit", "share_rule"):
        for key, line in edits.lines(plant, table, product):
            copied = (new, *key[1:])
            changes.append(change_of(table, copied, None, line))
            changes += edits.copied_extras(plant, table, key, copied)
    plant.change(changes, f"{new} added as a copy of {product}")
    return plant.product(new)


def _blank(plant: Plant, code: str, cells: Mapping[str, Value]) -> list[Change]:
    """A product row without lines; a retired one of that code is taken up again, its old lines gone."""
    old = plant.row("product", code)
    if old is None:
        return edits.new_product(plant, code, cells)
    changes = [c for table in ("product_limit", "share_rule")
               for c in edits.drop_lines(plant, table, edits.lines(plant, table, code))]
    changes += [change_of("extra", k, r, None) for k, r in edits.extras(plant, "product", (code,))]
    fresh = edits.new_product(plant, code, cells)[0].after or {}
    return [*changes, change_of("product", (code,), old, {**fresh, "position": old["position"]})]


def _new_code(plant: Plant, typed: str) -> str:
    try:
        code = check.code(typed.strip())
    except check.CellError as error:
        raise DeskError(str(error)) from None
    if any(p.product == code for p in plant.products()):
        raise DeskError(f"there is a product {code} already; give the new one another code")
    return code


def retire_product(plant: Plant, product: str) -> str:
    """Take a product out of use; undo brings it back."""
    plant.product(product)
    plant.change([edits.retired("product", product)], f"{product} retired")
    return f"{product} retired"
