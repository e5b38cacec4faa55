"""The headless answers as text: tables fit for a printer and for a pipe."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from blendtui.desk import numbers
from blendtui.desk.blends import Extras, spread_words
from blendtui.desk.sheet import NOT_A_CERTIFICATE
from blendtui.desk.stocks import derived
from blendtui.store.harmless import harmless
from blendtui.store.records import Product
from solver.properties import lookup
from solver.stocks import Stock

if TYPE_CHECKING:
    from solver.recipe import LimitResult, Recipe
    from solver.walther import Line

STATUS = {"optimal": "least cost", "stopped": "stopped before the proof: best blend known",
          "infeasible": "NO BLEND meets every limit; this is the nearest", "by hand": "as given"}


def table(heads: Sequence[str], rows: Sequence[Sequence[str]], left: int = 1) -> str:
    """Columns padded to their widest cell; the first `left` to the left, the others to the right."""
    widths = [max(len(head), *(len(row[i]) for row in rows)) if rows else len(head)
              for i, head in enumerate(heads)]

    def line(cells: Sequence[str]) -> str:
        return "  ".join(cell.ljust(w) if i < left else cell.rjust(w)
                         for i, (cell, w) in enumerate(zip(cells, widths, strict=True))).rstrip()

    return "\n".join([line(heads), line(["-" * w for w in widths]), *(line(row) for row in rows)])


def viscosity(line: Line, vi: float | None, iso_vg: int | None, temperatures: Sequence[float]) -> str:
    """Text of `viscosity`."""
    grade = "between the ISO VG grades" if iso_vg is None else f"ISO VG {iso_vg}"
    head = (f"viscosity index {numbers.vi(vi)}" if vi is not None
            else "no viscosity index: KV100 is below 2 mm²/s")
    lines = [f"{head}; {grade}", f"D341 line: W = {line.a:.6f} − {line.b:.6f}·log10 T"]
    if temperatures:
        lines.append(table(["°C", "KV, mm²/s"], [[f"{t:g}", numbers.kv(float(line.kv(t)))]
                                                 for t in temperatures], left=0))
    return "\n".join(lines)


def prediction(recipe: Recipe) -> str:
    """Text of `predict`."""
    return "\n\n".join([_shares(recipe, ()), _predicted(recipe), _law(recipe), NOT_A_CERTIFICATE])


def design(product: str, recipe: Recipe, stocks: Sequence[Stock], extras: Extras | None) -> str:
    """Text of `design`."""
    parts = [_headline(product, recipe)]
    parts += [f"! {harmless(reason)}" for reason in recipe.reasons]
    if recipe.shares is not None:
        parts.append(_shares(recipe, stocks, extras))
    if recipe.limits:
        parts.append(_limits(recipe.limits))
    if recipe.to_be_tested:
        parts.append("to be tested:\n" + "\n".join(f"  {x}" for x in recipe.to_be_tested))
    if recipe.left_out:
        parts.append("left out:\n" + "\n".join(f"  {x.stock}: {x.reason}" for x in recipe.left_out))
    if extras is not None and extras.blends:
        parts.append(_blends(extras.blends))
    if recipe.shares is not None:
        parts.append(_law(recipe))
    return "\n\n".join([*parts, NOT_A_CERTIFICATE])


def _headline(product: str, recipe: Recipe) -> str:
    text = f"{harmless(product)}: {STATUS[recipe.status]}"
    if recipe.shares is None:
        return f"{harmless(product)}: NO BLEND, the shares allowed do not reach 100 %"
    if recipe.cost_per_t is not None:
        text += f"; {numbers.cost(recipe.cost_per_t)} per t"
        if recipe.batch_kg is not None:
            text += (f", {numbers.cost(recipe.cost_per_t * recipe.batch_kg / 1000.0)} for "
                     f"{numbers.kg(recipe.batch_kg)} kg")
    if recipe.gap is not None and recipe.status != "infeasible":
        text += f"; nothing is cheaper by {max(1e-5, 100.0 * recipe.gap):.1g} %"
    return text


def _shares(recipe: Recipe, stocks: Sequence[Stock], extras: Extras | None = None) -> str:
    density = {s.code: s.density15 for s in stocks}
    heads, rows = ["stock", "mass %", "kg", "L at 15 °C"], []
    ranges = extras.ranges if extras is not None else None
    codes = list(recipe.shares or {})
    if ranges is not None:
        heads += ["least %", "most %"]
        codes += [code for code in ranges if code not in codes]
    for code in codes:
        mass = (recipe.charges_kg or {}).get(code)
        rho = density.get(code)
        row = [code, numbers.pct((recipe.shares or {}).get(code, 0.0)), numbers.kg(mass),
               numbers.litres(None if mass is None or rho is None else 1000.0 * mass / rho)]
        if ranges is not None:
            row += [numbers.pct(v) for v in ranges.get(code, (None, None))]
        rows.append(row)
    text = table(heads, rows)
    if ranges is not None:
        text += "\nleast and most: over all blends that meet the target; whole-number rules left out"
    return text


def _predicted(recipe: Recipe) -> str:
    rows = [[lookup(code).name, numbers.value(code, value), lookup(code).unit]
            for code, value in recipe.predicted.items() if value is not None]
    return table(["predicted", "value", "unit"], rows)


def _limits(limits: Sequence[LimitResult]) -> str:
    rows = []
    for x in limits:
        name, unit = ("cost per t", "") if x.property == "cost_per_t" else (
            lookup(x.property).name, lookup(x.property).unit)
        word = {True: "met", False: "NOT MET", None: "unknown"}[x.met] + (", binds" if x.binding else "")
        rows.append([name, unit, numbers.value(x.property, x.value), *(
            "" if v is None else numbers.value(x.property, v) for v in (x.low, x.high)),
            f"{x.guard:.4g}" if x.guard else "", numbers.value(x.property, x.margin), word])
    return table(["limit", "unit", "value", "at least", "at most", "guard", "margin", "verdict"], rows, left=2)


def _law(recipe: Recipe) -> str:
    spread = recipe.spread_pct
    text = (f"law {recipe.law}; spread of the laws: KV40 {numbers.fixed(spread.get('kv40'), 1)} %, "
            f"KV100 {numbers.fixed(spread.get('kv100'), 1)} %")
    widest = max((v for v in spread.values() if v is not None), default=None)
    words = spread_words(widest)
    return text + (f"\n! {words}" if words else "")


def _blends(blends: Sequence[Recipe]) -> str:
    rows = [[str(i), numbers.cost(b.cost_per_t), numbers.kv(b.predicted.get("kv40")),
             numbers.kv(b.predicted.get("kv100")), numbers.vi(b.predicted.get("vi")),
             ", ".join(f"{code} {numbers.pct(share)}" for code, share in (b.shares or {}).items())]
            for i, b in enumerate(blends, 1)]
    heads = ["blend", "cost per t", "KV40", "KV100", "VI", "shares, mass %"]
    padded = table(heads[:-1], [row[:-1] for row in rows], left=0).split("\n")
    tails = [heads[-1], "-" * len(heads[-1]), *(row[-1] for row in rows)]
    return "\n".join(f"{a}  {b}" for a, b in zip(padded, tails, strict=True))


def stocks(all_stocks: Sequence[Stock]) -> str:
    """Text of `stocks`."""
    rows = [[harmless(s.code, 16), harmless(s.name, 32), s.kind, s.api_group, numbers.kg(s.on_hand_kg),
             numbers.cost(s.price_per_t), numbers.fixed(s.density15, 1), numbers.kv(s.kv40),
             numbers.kv(s.kv100), numbers.vi(derived(s)[0]), s.tested_on, s.source] for s in all_stocks]
    return table(["stock", "name", "kind", "group", "on hand, kg", "price, /t", "kg/m³", "KV40, mm²/s",
                  "KV100", "VI", "tested on", "source"], rows, left=4)


def products(all_products: Sequence[Product]) -> str:
    """Text of `products`."""
    rows = [[harmless(p.product, 16), harmless(p.name, 36), p.grade, p.law or "refutas",
             numbers.kg(p.batch_kg), str(len(p.limits)), str(len(p.rules)), harmless(p.note, 60)]
            for p in all_products]
    text = table(["product", "name", "grade", "law", "batch, kg", "limits", "share rules"],
                 [row[:-1] for row in rows], left=4)
    notes = [f"  {row[0]}: {row[-1]}" for row in rows if row[-1]]
    return text + ("\n\nnotes:\n" + "\n".join(notes) if notes else "")
