"""The batch card as one HTML page for A4 paper that needs no other file."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from html import escape

from blendtui.store.batch_records import DROPPED, OPEN
from blendtui.store.harmless import harmless
from solver.properties import lookup, volume_at
from solver.requirements import COST

from . import batches, numbers
from .card import Card, CardLine, content_words, facts
from .card_text import SCALE, TOLD, exact, lots_of
from .sheet import NOT_A_CERTIFICATE

STYLE = """
@page { size: A4 landscape; margin: 12mm; }
body { font: 10pt/1.35 Georgia, "Times New Roman", serif; color: #000; max-width: 273mm; margin: 6mm auto; }
h1 { font-size: 16pt; margin: 0 0 3mm; border-bottom: 2pt solid #000; padding-bottom: 1mm; }
h2 { font-size: 11pt; margin: 4mm 0 1mm; break-after: avoid; }
dl { display: grid; grid-template-columns: 24mm 1fr 24mm 1fr; margin: 0; }
dt { font-weight: bold; } dd { margin: 0 4mm 0 0; overflow-wrap: anywhere; }
table { width: 100%; border-collapse: collapse; } table.charges { table-layout: fixed; }
th, td { text-align: left; vertical-align: top; padding: .8mm 1.5mm; border: .5pt solid #666; overflow-wrap: anywhere; }
th { background: #eee; print-color-adjust: exact; -webkit-print-color-adjust: exact; }
thead { display: table-header-group; } tr { break-inside: avoid; }
.figure { text-align: right; } .box { height: 11mm; }
.small { font-size: 8.5pt; } .warned { border: 1.5pt solid #000; padding: 1mm 2mm; font-weight: bold; margin: 2mm 0; }
ul { margin: 0; padding-left: 5mm; columns: 2; column-gap: 8mm; } li { break-inside: avoid; }
.write { margin: 3mm 0; } .write span { display: inline-block; min-width: 24mm; border-bottom: .5pt solid #000; }
.pin { font: 8pt/1.3 monospace; overflow-wrap: anywhere; border-top: .5pt solid #666; padding-top: 1mm; }
""".strip()
HEADS = ("", "stock", "lot", "kg, and within", "scale shows (from 0)", "litres", "actual kg", "lot used", "time, by",
         "second check")
WIDTHS = (3, 20, 17, 11, 10, 8, 8, 8, 8, 7)  # % of the table
FIGURES = range(3, 6)


def card_html(made: Card) -> str:
    """The page; whatever a name holds is shown and never read as HTML."""
    head = made.made.head
    named = "".join(f"<dt>{_safe(name)}</dt><dd>{_safe(said)}</dd>" for name, said in facts(made))
    warned = "\n".join(f'<p class="warned">{_safe(words)}</p>' for words in _warned(made))
    inside = "<br>".join(map(_safe, content_words(made))) or "nothing; see that it is empty, clean and dry"
    rows = "\n".join(map(_charge, made.on_card))
    heads = "".join(f"<th{_figure(n)}>{_safe(text)}</th>" for n, text in enumerate(HEADS))
    widths = "".join(f'<col style="width:{width}%">' for width in WIDTHS)
    start = _row(["", "start", "", "", f"{exact(made.start_kg)} (0)", "", "", "", "", ""])
    said = "\n".join(f"<li><b>{_safe(c.title)}.</b> {_safe(c.reason)}. {_safe(c.advice)}</li>" for c in made.cautions)
    return f"""<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<title>{_safe(f"Batch card {head.batch}")}</title>
<style>
{STYLE}
</style>
</head>
<body>
<h1>{_safe(f"Batch card {head.batch}")}</h1>
<dl>{named}</dl>
{warned}
<h2>In the vessel before anything is charged</h2>
<p class="small">{inside}</p>
<h2>Charges, in this order</h2>
<table class="charges">
<colgroup>{widths}</colgroup>
<thead><tr>{heads}</tr></thead>
<tbody>
{start}
{rows}
{_total(made)}
</tbody>
</table>
<p class="small">{_safe(SCALE)}</p>
{_dropped(made)}<h2>Mixing</h2>
<p>{_safe(_mixing(made))}</p>
<p class="write">from <span></span> to <span></span> at <span></span> °C &nbsp; KV40 top <span></span>
middle <span></span> bottom <span></span></p>
{_predicted(made)}
<p class="small">{_safe(_rests_on(made))}</p>
<h2>Cautions: site procedures, safety data sheets, permits and codes decide</h2>
<ul class="small">
{said}
<li>{_safe(NOT_A_CERTIFICATE)}</li>
</ul>
<p class="write">To the floor by <span></span> date <span></span> &nbsp; all charges made and checked <span></span>
date <span></span></p>
<p class="pin">{_safe(f"Record: entry {made.entry}, {made.hash}")}</p>
</body>
</html>
"""


def _safe(text: str) -> str:
    return escape(harmless(text))


def _figure(n: int) -> str:
    return ' class="figure"' if n in FIGURES else ""


def _row(cells: Sequence[str]) -> str:
    return "<tr>" + "".join(f"<td{_figure(n)}>{_safe(text)}</td>" for n, text in enumerate(cells)) + "</tr>"


def _warned(made: Card) -> Iterator[str]:
    head = made.made.head
    if head.state != OPEN:
        yield f"This batch is {head.state}: do not charge"
    if made.changed:
        yield (f"The product has changed since this order ({', '.join(made.changed)}): the order stands as of journal "
               f"entry {head.formula_entry}")
    yield from (f"Not as asked, by the prediction: {words}" for words in made.missed)
    if made.why_not:
        yield f"Nothing can be predicted: {made.why_not}"


def _charge(x: CardLine) -> str:
    charge, trim = x.charge, f"trim {x.charge.round}: " if x.charge.round else ""
    stock = f"{trim}<b>{_safe(x.stock)}</b> {_safe(x.name)}" + (" (rinse)" if x.rinse else "")
    if x.packages is not None and x.package_kg is not None:
        stock += f"<br>{x.packages} × {_safe(exact(x.package_kg))} kg, each one's lot written down, empties weighed"
    elif x.step_kg is not None:
        stock += f"<br>by {_safe(exact(x.step_kg))} kg" + (" on its own scale" if x.own_scale else "")
    stock += f"<br>NOT {_safe(', '.join(x.alike))}" if x.alike else ""
    lots = _safe(lots_of(x)) + (f"<br>{_safe(x.tested)}" if x.tested else "")
    volume = "" if x.litres is None else (
        f'{_safe(numbers.litres(x.litres))}<br><span class="small">at {charge.celsius:g} °C</span>')
    at = f"{batches.when(charge.at)}, {charge.by}"
    boxes = (exact(x.kg), ", ".join(x.lots), at, charge.checked_by) if x.done else ("",) * 4
    cells = [f'<td class="small">{charge.line}</td>', f"<td>{stock}</td>", f'<td class="small">{lots}</td>']
    within = "–".join(map(exact, x.within_kg))
    shows = "<br>" if x.reading_kg is None or x.tared_kg is None else (
        f'{_safe(exact(x.reading_kg))}<br><span class="small">({_safe(exact(x.tared_kg))})</span>')
    kg = f'<b>{_safe(exact(charge.plan_kg))}</b><br><span class="small">{_safe(within)}</span>'
    cells += [f'<td class="figure">{text}</td>' for text in (kg, shows, volume)]
    cells += [f'<td class="box">{_safe(text)}</td>' for text in boxes]
    return "<tr>" + "".join(cells) + "</tr>"


def _total(made: Card) -> str:
    charged = exact(sum(x.kg for x in made.on_card))
    return _row(["", "total charged", "", charged, exact(made.total_kg), "", "", "", "", ""])


def _mixing(made: Card) -> str:
    parts = [f"Mix at {made.made.head.mix_c:g} °C"]
    if made.mix_kv is not None:
        parts.append(f"predicted KV there {numbers.kv(made.mix_kv)} mm²/s")
    if made.fill_l is not None:
        share = "" if made.fill_pct is None else f", {numbers.fixed(made.fill_pct, 1)} % of the vessel"
        parts.append(f"fill there {numbers.litres(made.fill_l)} L{share}")
    return "; ".join(parts) + ". Sample when top, middle and bottom agree; one sample gives KV40 and KV100."


def _predicted(made: Card) -> str:
    if made.recipe is None:
        return ""
    customer = {x.property for x in made.customer}
    rows = []
    for limit in made.limits:
        if limit.property != COST and volume_at(limit.property) is None:
            figures = [limit.value, limit.low, limit.high]
            shown = ["" if v is None else numbers.value(limit.property, v) for v in figures]
            label = lookup(limit.property).label + (" (customer)" if limit.property in customer else "")
            rows.append(_figures(label, shown))
    held = {limit.property for limit in made.limits}
    rows += [_figures(lookup(code).label, [numbers.value(code, value), "", ""]) for code in TOLD
             if code not in held and (value := made.recipe.predicted.get(code)) is not None]
    return ("<h2>Predicted</h2>\n<table><thead><tr><th>property</th><th class=\"figure\">predicted</th>"
            "<th class=\"figure\">at least</th><th class=\"figure\">at most</th></tr></thead><tbody>\n"
            + "\n".join(rows) + "\n</tbody></table>")


def _figures(label: str, shown: Sequence[str]) -> str:
    return f"<tr><td>{_safe(label)}</td>" + "".join(f'<td class="figure">{_safe(t)}</td>' for t in shown) + "</tr>"


def _dropped(made: Card) -> str:
    """Lines that are not charged, and the second checks that are due."""
    said = [f"Line {x.charge.line} {x.stock} dropped: {x.charge.why}" for x in made.lines if x.charge.state == DROPPED]
    unchecked = batches.unchecked(made.made)
    if unchecked:
        said.append("Second check missing: " + ", ".join(f"line {c.line} {c.stock}" for c in unchecked))
    return "".join(f'<p class="small">{_safe(words)}</p>\n' for words in said)


def _rests_on(made: Card) -> str:
    said = f"Formula as of journal entry {made.made.head.formula_entry}"
    if made.recipe is not None:
        said += f"; law {made.recipe.law}"
        said += f" with the laboratory's lessons {', '.join(made.recipe.lessons)}" if made.recipe.lessons else ""
        said += f" (provisional: {', '.join(made.recipe.provisional)})" if made.recipe.provisional else ""
        said += "".join(f". To be tested: {test}" for test in made.recipe.to_be_tested)
    return f"{said}."
