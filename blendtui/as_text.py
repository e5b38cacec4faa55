"""The headless answers as text: tables fit for a printer and for a pipe."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from blendtui.desk import numbers
from blendtui.desk.blends import marked_spread, spread_words
from blendtui.desk.sheet import NOT_A_CERTIFICATE, masses_shown
from blendtui.desk.stocks import derived
from blendtui.store.harmless import harmless
from blendtui.store.records import Product
from solver.properties import lookup
from solver.stocks import Stock

if TYPE_CHECKING:
    from solver.choices import Range
    from solver.recipe import LimitResult, Recipe
    from solver.walther import Line

STATUS = {"optimal": "least cost", "stopped": "stopped before the proof: best blend known",
          "infeasible": "NO BLEND meets every limit; this is the nearest", "by hand": "as given"}

WIDTH = 80  # columns of a printer
CODE = 34  # columns of a stock's code beside its amounts; a longer one has a line of its own
KINDS = {"vi_improver": "VI impr.", "pour_depressant": "pour dep."}


def wrap(text: str, indent: str = "") -> str:
    """Text in lines of at most 80 columns."""
    return "\n".join(textwrap.wrap(text, WIDTH, subsequent_indent=indent, break_on_hyphens=False))


def table(heads: Sequence[str], rows: Sequence[Sequence[str]], left: int = 1, gap: str = "  ") -> str:
    """Columns padded to their widest cell; the first `left` to the left, the others to the right."""
    widths = [max(len(head), *(len(row[i]) for row in rows)) if rows else len(head)
              for i, head in enumerate(heads)]

    def line(cells: Sequence[str]) -> str:
        return gap.join(cell.ljust(w) if i < left else cell.rjust(w)
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


def design(product: str, recipe: Recipe, stocks: Sequence[Stock], ranges: Mapping[str, Range] | None,
           others: Sequence[Recipe], more: Sequence[str] = ()) -> str:
    """Text of `design`; `more`: what else there is to say of it, a sentence each."""
    parts = [wrap(_headline(product, recipe), "  ")]
    parts += ["\n".join(wrap(f"  {harmless(said, 400)}", "    ") for said in more)] if more else []
    parts += [wrap(f"! {harmless(said)}", "  ") for said in (*recipe.reasons, *recipe.warnings)]
    if recipe.shares is not None:
        parts.append(_shares(recipe, stocks, ranges))
    if recipe.limits:
        parts.append(_limits(recipe.limits))
    if recipe.also_laws:
        parts.append(_under(recipe))
    if recipe.to_be_tested:
        parts.append("to be tested:\n" + "\n".join(wrap(f"  {x}", "    ") for x in recipe.to_be_tested))
    if recipe.left_out:
        parts.append("left out:\n" + "\n".join(wrap(f"  {x.stock}: {x.reason}", "    ") for x in recipe.left_out))
    if others:
        parts.append(_blends(others))
    if recipe.shares is not None:
        parts.append(_law(recipe))
    return "\n\n".join([*parts, NOT_A_CERTIFICATE])


def _headline(product: str, recipe: Recipe) -> str:
    if recipe.shares is None:
        return f"{harmless(product)}: NO BLEND"
    unsure = recipe.status == "infeasible" and recipe.meets_all  # it meets all, and not with the chance asked
    kind = "NO BLEND IS SO SURE; this is the surest found" if unsure else STATUS[recipe.status]
    text = f"{harmless(product)}: {kind}"
    if recipe.gap is not None and recipe.status == "optimal":
        text += f", proven to {max(1e-4, 100.0 * recipe.gap):.1g} %"
    if recipe.cost_per_t is not None:
        text += f"; {numbers.cost(recipe.cost_per_t)} per t"
        if recipe.batch_kg is not None:
            text += (f", {numbers.cost(recipe.cost_per_t * recipe.batch_kg / 1000.0)} for "
                     f"{numbers.batch(recipe.batch_kg)} kg")
    return text


def _shares(recipe: Recipe, stocks: Sequence[Stock], ranges: Mapping[str, Range] | None = None) -> str:
    density = {s.code: s.density15 for s in stocks}
    charges, shown = recipe.charges_kg, masses_shown(recipe, [s for s in stocks if s.code in (recipe.shares or {})])
    heads = ["stock", "mass %", *(["kg", "L at 15 °C"] if charges is not None else [])]
    codes = list(recipe.shares or {})
    if ranges is not None:
        heads += ["least %", "most %"]
        codes += [code for code in ranges if code not in codes]
    rows = []
    for code in codes:
        row = [code if len(code) <= CODE else "", numbers.pct((recipe.shares or {}).get(code, 0.0))]
        if charges is not None:
            mass, rho = charges.get(code), density.get(code)
            volume = None if mass is None or rho is None else 1000.0 * mass / rho
            row += [shown.get(code, numbers.UNKNOWN), numbers.litres(volume)]
        if ranges is not None:
            row += _range(ranges.get(code))
        rows.append(row)
    head, rule, *lines = table(heads, rows).split("\n")
    text = "\n".join([head, rule, *(line if len(code) <= CODE else f"{code}\n{line}"
                                   for code, line in zip(codes, lines, strict=True))])
    if ranges is not None:
        text += "\nleast, most: over all blends that meet the target; whole-number rules left out"
        if not all(each.narrowed for each in ranges.values()):
            text += "\n? time ran out: the true range may be smaller"
    return text


def _range(found: Range | None) -> list[str]:
    """Least and most, marked where time ran out before the range was narrowed."""
    if found is None:
        return [numbers.pct(None), numbers.pct(None)]
    mark = "" if found.narrowed else "?"
    return [numbers.pct(found.low) + mark, numbers.pct(found.high) + mark]


def _predicted(recipe: Recipe) -> str:
    rows = [[lookup(code).name, numbers.value(code, value), lookup(code).unit]
            for code, value in recipe.predicted.items() if value is not None]
    return table(["predicted", "value", "unit"], rows)


def _limits(limits: Sequence[LimitResult]) -> str:
    rows = []
    for x in limits:
        label = "cost, per t" if x.property == "cost_per_t" else lookup(x.property).label
        word = {True: "binds" if x.binding else "met", False: "NOT MET", None: "unknown"}[x.met]
        rows.append([label, numbers.value(x.property, x.value), *(
            "" if v is None else numbers.value(x.property, v) for v in (x.low, x.high)),
            f"{x.guard:.3g}" if x.guard else "", _margin(x), word])
    return table(["limit", "value", "low", "high", "guard", "margin", "verdict"], rows)


def _under(recipe: Recipe) -> str:
    """The limits under every law that was asked for: the margin above is that of the worst."""
    limits = [x for x in recipe.limits if x.by_law]
    laws = list(dict.fromkeys(law for x in limits for law in x.by_law))
    rows = [[law, *(numbers.value(x.property, x.by_law.get(law)) for x in limits)] for law in laws]
    return table(["held under", *(lookup(x.property).label.removeprefix("KV at ") for x in limits)], rows)


def _margin(limit: LimitResult) -> str:
    """The margin with as many decimals as its value has: what is below them is rounding."""
    shown = numbers.value(limit.property, limit.value)
    return numbers.fixed(limit.margin, len(shown.partition(".")[2]))


def _law(recipe: Recipe) -> str:
    spread = recipe.spread_pct
    taught = f" with the laboratory's {', '.join(recipe.lessons)}" if recipe.lessons else ""
    unsure = f" (provisional: {', '.join(recipe.provisional)})" if recipe.provisional else ""
    text = (f"law {recipe.law}{taught}{unsure}; spread of the laws: KV40 {numbers.fixed(spread.get('kv40'), 1)} %, "
            f"KV100 {numbers.fixed(spread.get('kv100'), 1)} %")
    words = spread_words(recipe)
    return wrap(text, "  ") + ("\n" + wrap(f"! {words}", "  ") if words else "")


def _blends(blends: Sequence[Recipe]) -> str:
    rows = [[str(i), numbers.cost(b.cost_per_t), numbers.kv(b.predicted.get("kv40")),
             numbers.kv(b.predicted.get("kv100")), numbers.vi(b.predicted.get("vi")), marked_spread(b.spread_pct)]
            for i, b in enumerate(blends, 1)]
    lines = table(["blend", "cost per t", "KV40, mm²/s", "KV100, mm²/s", "VI", "laws differ, %"], rows,
                  left=0).split("\n")
    for line, blend in zip(lines[2:], blends, strict=True):
        shares = ", ".join(f"{code} {numbers.pct(share)}" for code, share in (blend.shares or {}).items())
        lines[lines.index(line)] = line + "\n" + wrap(f"       mass %: {shares}", "               ")
    return "\n".join(lines)


def stocks(all_stocks: Sequence[Stock]) -> str:
    """Text of `stocks`."""
    rows = [[harmless(s.code, 12), harmless(s.name, 17), KINDS.get(s.kind, s.kind), s.api_group,
             numbers.kg(s.on_hand_kg), numbers.cost(s.price_per_t), numbers.fixed(s.density15, 0), numbers.kv(s.kv40),
             numbers.kv(s.kv100), numbers.vi(derived(s)[0])] for s in all_stocks]
    return table(["stock", "name", "kind", "API", "kg", "price/t", "kg/m³", "KV40", "KV100", "VI"], rows, left=4,
                 gap=" ") + "\nKV in mm²/s; density at 15 °C; every cell: --json, or export"


def products(all_products: Sequence[Product]) -> str:
    """Text of `products`."""
    rows = [[harmless(p.product, 12), harmless(p.name, 24), p.grade, p.law or "refutas",
             numbers.kg(p.batch_kg), str(len(p.limits)), str(len(p.rules))] for p in all_products]
    text = table(["product", "name", "grade", "law", "batch, kg", "limits", "rules"], rows, left=4, gap=" ")
    notes = [wrap(f"  {harmless(p.product)}: {harmless(p.note)}", "    ") for p in all_products if p.note]
    return text + ("\n\nnotes:\n" + "\n".join(notes) if notes else "")
