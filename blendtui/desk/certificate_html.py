"""The certificate of analysis as one HTML page of A4 that needs no other file."""

from __future__ import annotations

from html import escape

from blendtui.store.harmless import harmless

from .certificate import TITLE, Certificate, Line, facts, notes, pin

STYLE = """
@page { size: A4; margin: 18mm 16mm; }
body { font: 11pt/1.4 Georgia, "Times New Roman", serif; color: #000; max-width: 178mm; margin: 8mm auto; }
h1 { font-size: 17pt; letter-spacing: .06em; border-bottom: 2pt solid #000; padding-bottom: 2mm; }
dl { display: grid; grid-template-columns: 28mm 1fr; margin: 0 0 6mm; }
dt { font-weight: bold; } dd { margin: 0; overflow-wrap: anywhere; }
table { width: 100%; border-collapse: collapse; }
th, td { text-align: left; vertical-align: top; padding: 1mm 2mm; border-bottom: .5pt solid #888; }
th { border-bottom: 1pt solid #000; } tr { break-inside: avoid; }
.figure { text-align: right; white-space: nowrap; }
ul { padding-left: 5mm; } li { break-inside: avoid; }
.pin { font: 8pt/1.3 monospace; overflow-wrap: anywhere; border-top: .5pt solid #888; padding-top: 2mm; }
""".strip()
HEADS = ("property", "method", "date", "result", "least", "most")
FIGURES = 3  # the last so many columns


def certificate_html(made: Certificate) -> str:
    """The page; whatever a name holds is shown and never read as HTML."""
    heads = "".join(_cell("th", text, n >= len(HEADS) - FIGURES) for n, text in enumerate(HEADS))
    rows = "\n".join(f"<tr>{_row(line)}</tr>" for line in made.lines)
    named = "\n".join(f"<dt>{_safe(head)}</dt><dd>{_safe(text)}</dd>" for head, text in facts(made))
    said = "\n".join(f"<li>{_safe(text)}</li>" for text in notes(made))
    title = _safe(f"{TITLE.capitalize()} {made.batch}")
    return f"""<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<title>{title}</title>
<style>
{STYLE}
</style>
</head>
<body>
<h1>{TITLE.capitalize()}</h1>
<dl>
{named}
</dl>
<table>
<thead><tr>{heads}</tr></thead>
<tbody>
{rows}
</tbody>
</table>
<ul>
{said}
</ul>
<p class="pin">{_safe(pin(made))}</p>
</body>
</html>
"""


def _row(line: Line) -> str:
    label = f"{line.label}, {line.unit}" if line.unit else line.label
    cells = (label, line.method, line.on, line.shown, *line.bounds)
    return "".join(_cell("td", text, n >= len(cells) - FIGURES) for n, text in enumerate(cells))


def _cell(tag: str, text: str, figure: bool) -> str:
    return f'<{tag} class="figure">{_safe(text)}</{tag}>' if figure else f"<{tag}>{_safe(text)}</{tag}>"


def _safe(text: str) -> str:
    return escape(harmless(text))
