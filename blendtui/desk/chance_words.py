"""The chances in words: the same lines for the screen and for the text of the headless command."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

from blendtui.store.harmless import harmless
from solver.properties import lookup

from . import numbers

if TYPE_CHECKING:
    from solver.confidence import Chance, Part, ToTest

    from .chance import Report, Sure

HEAD, MARK, DIM, TEXT = "head", "mark", "dim", ""
Said = tuple[str, str]  # (kind, line)
BAR = 20  # columns of a whole bar
SMALL = 0.01  # of the variance: parts below are told together
SOURCES = {"own": "own test", "certificate": "certificate", "typical": "typical", "": "source unknown"}


def percent(chance: float | None) -> str:
    """A chance in %, never shown as certain when it is not.

    >>> percent(0.98765), percent(0.999999), percent(1e-6), percent(None)
    ('98.77 %', '>99.99 %', '<0.01 %', '–')
    """
    if chance is None:
        return numbers.UNKNOWN
    if chance >= 0.99995:
        return ">99.99 %"
    return "<0.01 %" if chance < 0.00005 else f"{100.0 * chance:.2f} %"


def verdict(chance: float | None) -> str:
    """A chance in a word."""
    if chance is None:
        return "unknown"
    steps = ((0.99, "high"), (0.95, "good"), (0.9, "fair"), (0.5, "! doubtful"))
    return next((word for least, word in steps if chance >= least), "! likely missed")


def name_of(code: str) -> str:
    """Name of a property in a sentence."""
    return lookup(code).name


def wrapped(kind: str, text: str, width: int, indent: str = "  ") -> Iterator[Said]:
    """A sentence in lines of a width."""
    held = text.replace(" %", "\xa0%")  # a number keeps its sign
    for line in textwrap.wrap(held, width, subsequent_indent=indent, break_on_hyphens=False) or [""]:
        yield kind, line.replace("\xa0", " ")


def lines(report: Report, width: int) -> list[Said]:
    """Everything that is known so far."""
    said = [*_chances(report, width), (TEXT, ""), *_budget(report, width)]
    if report.tested:
        said += [(TEXT, ""), *_to_test(report, width)]
    if report.offers is not None:
        said += [(TEXT, ""), *_offers(report.offers, width)]
    return [*said, (TEXT, ""), *_how(report, width)]


def _chances(report: Report, width: int) -> Iterator[Said]:
    found = report.chances
    yield from wrapped(HEAD, "Chance that the first batch is right, as the laboratory will measure it", width)
    heads = ("limit", "value", "low", "high", "± σ", "chance", "")
    rows = [_chance_row(x) for x in found.limits]
    yield from ((DIM if n == 0 else MARK if "!" in line else TEXT, line)
                for n, line in enumerate(_columns([heads, *rows], width)))
    together = found.chance if found.chance is not None else found.closed
    told = f"all limits together: {percent(together)} {verdict(together)}".rstrip()
    if found.chance is not None and found.error is not None:
        told += (f" (± {100.0 * found.error:.2f} points, from {found.blends} drawn blends; {percent(found.closed)} by "
                 "formula)")
    yield from wrapped(MARK if "!" in told else HEAD, told, width)
    for note in found.notes:
        yield from wrapped(MARK, f"! {note}", width)


def _chance_row(x: Chance) -> tuple[str, ...]:
    chance = x.chance if x.chance is not None else x.closed
    return (lookup(x.property).label, numbers.value(x.property, x.value),
            *("" if v is None else numbers.value(x.property, v) for v in (x.low, x.high)),
            numbers.figures(x.sigma, 2), percent(chance), verdict(chance))


def _columns(rows: Sequence[Sequence[str]], width: int) -> Iterator[str]:
    """Rows in columns, the first and the last to the left; the first gives way where there is no room."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    widths[0] = max(8, min(widths[0], width - sum(widths[1:]) - 2 * (len(widths) - 1)))
    for row in rows:
        first = row[0] if len(row[0]) <= widths[0] else row[0][:widths[0] - 1] + "…"
        cells = [first.ljust(widths[0]), *(c.rjust(w) for c, w in zip(row[1:-1], widths[1:-1], strict=True)), row[-1]]
        yield "  ".join(cells).rstrip()


def _budget(report: Report, width: int) -> Iterator[Said]:
    yield HEAD, "What the doubt is made of, in % of the whole (of σ²)"
    for code, parts in report.chances.budget.items():
        whole = sum(p.sigma ** 2 for p in parts) ** 0.5
        unit = lookup(code).unit
        yield DIM, f"{name_of(code)}: σ {numbers.figures(whole, 2)} {unit}".rstrip()
        told = [p for p in parts if p.share >= SMALL]
        names = {p.part: harmless(_part(report, p), max(12, width - 52)) for p in told}
        across = max((len(n) for n in names.values()), default=0)
        for p in told:
            line = (f"  {names[p.part].ljust(across)}  {100.0 * p.share:5.1f} %  "
                    f"{'█' * max(1, round(BAR * p.share)):<{BAR}}  σ {numbers.figures(p.sigma, 2)} {unit}")
            yield TEXT, line.rstrip()
        if len(told) < len(parts):
            yield DIM, f"  {len(parts) - len(told)} smaller parts"


def _part(report: Report, part: Part) -> str:
    if part.kind != "stock":
        names = {"weighing": "weighing", "law": f"the law {report.chances.law}", "laboratory": "the laboratory"}
        return names[part.kind]
    stock = next(s for s in report.stocks if s.code == part.part)
    return f"{harmless(stock.code, 16)}, {SOURCES.get(stock.source, stock.source)}"


def _to_test(report: Report, width: int) -> Iterator[Said]:
    yield HEAD, "What to test next"
    test, law = report.chances.test_next, report.chances.law_next
    if test is None:
        yield from wrapped(TEXT, "no single test of a stock would raise the chance of all limits by 0.01 points", width)
    else:
        yield from wrapped(TEXT, _test_words(test, report), width)
    if law is not None:
        how = ("fitting it better to measured blends (screen Lab)" if report.fitted
               else "a laboratory blend that fits it")
        yield from wrapped(
            TEXT, f"the law is the largest part of the doubt about {name_of(law.property)}: {how} would raise the "
            f"chance of all limits from {percent(law.now)} to {percent(law.then)} at most", width)


def _test_words(test: ToTest, report: Report) -> str:
    source = SOURCES.get(next(s.source for s in report.stocks if s.code == test.stock), "")
    how = ("a test of its own lot" if test.how == "own test"
           else "a laboratory blend from which its blending value is worked back")
    return (f"{name_of(test.property)} of {harmless(test.stock)} (now: {source}): {how} would raise the chance of all "
            f"limits from {percent(test.now)} to {percent(test.then)}")


def _offers(offers: Sequence[Sure], width: int) -> Iterator[Said]:
    yield from wrapped(HEAD, "What more certainty costs, per t, against the least cost without guards", width)
    rows = []
    for sure in offers:
        asked = f"{100.0 * sure.asked:g} %"
        if not sure.reached:
            rows.append((asked, numbers.UNKNOWN, numbers.UNKNOWN, numbers.UNKNOWN, "not reached: highest "
                         f"{percent(sure.highest)}" if sure.highest is not None else "no blend meets the limits"))
        else:
            rows.append((asked, numbers.cost(sure.recipe.cost_per_t), numbers.cost(sure.cost_of_certainty_per_t),
                         percent(sure.chance_all), shares_words(sure)))
    table = list(_columns([("asked", "cost", "more", "all", "mass %"), *rows], width))
    for n, line in enumerate(table):
        yield from wrapped(DIM if n == 0 else TEXT, line, width, " " * 10)


def shares_words(sure: Sure) -> str:
    """The shares of a recipe on one line, the largest first."""
    shares = sorted((sure.recipe.shares or {}).items(), key=lambda x: -x[1])
    return ", ".join(f"{harmless(code)} {numbers.pct(share)}" for code, share in shares)


def _how(report: Report, width: int) -> Iterator[Said]:
    law = ("the scatter of your measured blends about it" if report.fitted
           else "half the spread of the five laws to either side, evenly")
    for text in (
            "Chances are of the limits as asked: guards are not in them.",
            "σ, the standard deviation: about two results in three lie within ± σ of the value.",
            "σ of a stock's value: of an own test the method's R/2.77; 3.5 times that for KV and density on a "
            "certificate, 9 times where typical or unknown (other properties 1.5 and 2.5 times): common practice. A "
            "typed σ stands before these.",
            f"The law: {law}. Law and lot are off alike at every temperature; tests and the laboratory each for "
            "itself."):
        yield from wrapped(DIM, text, width)


def certain_sentences(sure: Sure) -> tuple[str, ...]:
    """What there is to say of a recipe at a chosen chance, a sentence each."""
    each = ", ".join(f"{name_of(code)} {percent(chance)}" for code, chance in sure.chance_by_limit.items())
    told = [f"chance on the first batch: {each}; all together {percent(sure.chance_all)}"] if each else []
    more, guarded = sure.cost_of_certainty_per_t, sure.more_than_guarded_per_t
    if more is not None:
        text = (f"{100.0 * sure.asked:g} % for each limit costs {numbers.cost(more)} per t more than the least cost "
                f"that meets the limits without guards ({numbers.cost(sure.unguarded_per_t)})")
        if guarded is not None and sure.guarded_per_t != sure.unguarded_per_t:
            text += (f", {numbers.cost(abs(guarded))} per t {'more' if guarded >= 0.0 else 'less'} than with the "
                     f"product's guards ({numbers.cost(sure.guarded_per_t)})")
        told.append(text)
    return tuple(told)
