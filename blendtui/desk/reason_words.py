"""A report of why nothing fits, in words: sentences with numbers and units, and the report laid out for a width."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Iterator, Sequence
from decimal import Decimal
from typing import TYPE_CHECKING

from blendtui.store.harmless import harmless
from solver.target import Target

from . import numbers
from .blends import spread_words
from .reasons import Interval, Report

if TYPE_CHECKING:
    from solver.demands import Demand
    from solver.giving import Change, Giving
    from solver.purchase import Allowed, Neutral, Point, Together
    from solver.why import Conflict, WholeNumbers

HEAD, TEXT, BAD = "head", "text", "bad"  # how a line is meant
Told = tuple[str, str]  # (how it is meant, the line)
KINDS = {"vi_improver": "VI improver", "pour_depressant": "pour depressant", "base": "base stock of unknown group"}
BENT = "What the laboratory has taught bends the limits: all this is found step by step, and is not proven."
SLACK, VI_SLACK = 1e-6, 0.05  # to which an extreme is found: a part of it, and of the VI in points
LEAST_TOLD = 5e-5  # mass fraction: what is shown as 0.00 % is not told
DECIDES = "That it would fit is no permission: the formulator decides what a product may hold."

def heading(code: str) -> str:
    """Short name of a property: KV40, VI, flash point, cost."""
    if code == "cost_per_t":
        return "cost"
    if code == "vi" or code.startswith("kv"):
        return code.upper()
    from solver.properties import lookup

    return lookup(code).name


def amount(code: str, value: float, unlike: float | None = None) -> str:
    """A value with its unit; beside a limit that it is unlike, so rounded that what is told can be had."""
    told = numbers.value(code, value)
    if unlike is not None:
        texts = [told, *(numbers.figures(value, count) for count in range(5, 11))]
        told = _reachable(texts, value, unlike, VI_SLACK if code == "vi" else SLACK * abs(value))
    return f"{told} {unit(code)}".rstrip()


def _reachable(texts: Sequence[str], value: float, unlike: float, slack: float) -> str:
    """The first of a value's texts that lies on its side of a limit; by one of its last place further from the limit
    where rounding has brought it nearer than the value is, by more than a slack."""
    away = 1.0 if value > unlike else -1.0
    told = next((t for t in texts if away * (float(t) - unlike) > 0.0), texts[-1])
    if away * (value - float(told)) <= slack:
        return told
    number = Decimal(told)
    return str(number + Decimal(int(away)) * Decimal(1).scaleb(int(number.as_tuple().exponent)))


def unit(code: str) -> str:
    """Unit of a property as it stands beside a number."""
    if code == "cost_per_t":
        return "/t"
    from solver.properties import lookup

    return lookup(code).unit


def limit_words(demand: Demand) -> str:
    """A limit with its number: `VI at least 163 (160 and its guard)`."""
    side = "at least" if demand.side == "low" else "at most"
    text = f"{heading(demand.name)} {side} {demand.limit:.6g} {unit(demand.name)}".rstrip()
    if demand.asked is None or abs(demand.asked - demand.limit) <= 1e-9:
        return text
    return f"{text} ({demand.asked:.6g} and its guard)"


def demand_words(demand: Demand) -> str:
    """One demand in words, with numbers and units."""
    if demand.of_property:
        return limit_words(demand)
    name, share = KINDS.get(demand.name, demand.name), f"{100.0 * demand.limit:.6g} %"
    if demand.kind == "share":
        if demand.limit <= 0.0:
            return f"no {name}"
        return f"{'at least' if demand.side == 'low' else 'at most'} {share} {name}"
    if demand.kind == "held":
        return f"{name} held at {share}"
    if demand.kind == "left out":
        return f"{name} left out"
    if demand.kind == "list":
        return f"no {name}" if demand.whole_family else f"no {name} but what is listed"
    if demand.kind == "on hand":
        return f"{numbers.batch(demand.limit)} kg from what the tanks hold"
    if demand.kind == "most stocks":
        return f"at most {demand.limit:g} base stock{'s' if demand.limit != 1 else ''} and rework"
    return f"at least {share} of every base stock or rework that is used"


def and_of(parts: Sequence[str]) -> str:
    """Parts as a person says them: a, b and c."""
    return " and ".join([", ".join(parts[:-1]), parts[-1]] if len(parts) > 1 else parts)


def conflict_words(conflict: Conflict, left_out: Sequence[str] = ()) -> str:
    """One sentence: what cannot hold together, and the best that is within reach.

    `left_out`: why stocks do not serve, for a set without demands.
    """
    if not conflict.demands:
        return "no stock may serve this product" + (f": {'; '.join(left_out[:6])}" if left_out else
                                                    ": name its stocks in the share rules")
    told = and_of([demand_words(d) for d in conflict.demands])
    told = told[0].upper() + told[1:]
    if conflict.of is None or conflict.best is None:
        return f"{told}: " + ("cannot hold together" if len(conflict.demands) > 1 else "cannot be had")
    treated = " with treat rates as asked" if conflict.treated else ""
    return f"{told}: {_best_words(conflict.of, conflict.best)}{treated}"


def _best_words(of: Demand, best: float) -> str:
    if of.kind == "on hand":
        texts = [numbers.kg(best), *(numbers.fixed(best, places) for places in (1, 3))]
        return f"the largest batch is {_reachable(texts, best, of.limit, SLACK * best)} kg"
    if of.kind == "cost":
        return f"the least cost reachable is {amount(of.name, best, of.limit)}"
    if of.of_property:
        most = "best" if of.name == "vi" and of.side == "low" else "highest" if of.side == "low" else "lowest"
        return f"the {most} {heading(of.name)} reachable is {amount(of.name, best, of.limit)}"
    texts = [numbers.pct(best), *(numbers.fixed(100.0 * best, places) for places in (4, 6))]
    name, share = KINDS.get(of.name, of.name), f"{_reachable(texts, 100.0 * best, 100.0 * of.limit, 100.0 * SLACK)} %"
    if of.kind == "held":
        return f"the nearest share of {name} that can be had is {share}"
    return f"the {'most' if of.side == 'low' else 'least'} {name} that can be had is {share}"


def whole_words(whole: WholeNumbers, target: Target) -> str:
    """What of the whole-number rules would do."""
    told = []
    if target.max_stocks is not None:
        told.append(f"{whole.fewest_stocks} base stocks and rework would do, {target.max_stocks} are allowed"
                    if whole.fewest_stocks is not None else "no number of stocks would do")
    if target.min_share:
        told.append(f"a least share of {numbers.pct(whole.largest_least_share)} % would do, "
                    f"{100.0 * target.min_share:g} % is asked" if whole.largest_least_share is not None
                    else "no least share would do")
    return ("only the whole-number rules (most stocks, least share) stand in the way, without them a blend exists: "
            + "; or ".join(told))


def change_words(change: Change) -> str:
    """One change: `VI at least 163 → 109: 27.0 R`."""
    start = f"{heading(change.property)} {'at least' if change.side == 'low' else 'at most'} "
    start += f"{change.asked:.6g} {unit(change.property)}".rstrip()
    if change.needed is None or change.units is None:
        return f"{start} → not asked: an oil below 2 mm²/s at 100 °C has no VI"
    what = "% of itself" if change.property == "cost_per_t" else "R"
    needed = amount(change.property, change.needed, change.asked)
    return f"{start} → {needed}: {numbers.figures(change.units, 3)} {what}"


# Laid out

def lines(report: Report, width: int) -> list[Told]:
    """The report as lines of at most `width` columns, as far as it is worked out."""
    parts: list[Iterable[Told]] = [_verdict(report)]
    if report.status != "optimal":
        parts += [_conflicts(report), _giving(report)]
    parts.append(_reach(report))
    if report.status != "optimal":
        parts += [_stocks(report), _region(report)]
    found: list[Told] = []
    for part in parts:
        told = [(kind, line) for kind, text in part for line in _wrapped(text, width)]
        found += [(TEXT, ""), *told] if found and told else told
    return found


def _wrapped(text: str, width: int) -> list[str]:
    indent = " " * (len(text) - len(text.lstrip()) + 2)
    return textwrap.wrap(text, max(20, width), subsequent_indent=indent, break_on_hyphens=False) or [""]


def _verdict(report: Report) -> Iterator[Told]:
    name = harmless(report.product) + (" with your what-if" if report.target.moved else "")
    if report.status == "optimal":
        yield HEAD, f"{name}: a blend exists; nothing stands in the way. What can be reached:"
    elif report.status == "stopped":
        yield BAD, f"! {name}: time ran out before it was known whether a blend exists"
    else:
        yield BAD, f"! {name}: NO BLEND meets every limit and rule"
    if report.bent:
        yield TEXT, BENT


def _conflicts(report: Report) -> Iterator[Told]:
    if not report.conflicts:
        return
    yield HEAD, "What cannot hold together; let any one of a set go and the rest of it can:"
    for number, conflict in enumerate(report.conflicts, 1):
        unproven = "" if conflict.proven or report.bent else " (time ran out: perhaps not all of it is needed)"
        yield TEXT, f"  {number}. {conflict_words(conflict, report.left_out)}{unproven}"
    if report.whole is not None:
        yield BAD, f"  ! {whole_words(report.whole, report.target)}"


def _giving(report: Report) -> Iterator[Told]:
    giving = report.giving
    if giving is None:
        return
    order = f", in your order ({', '.join(heading(c) for c in giving.order)})" if giving.order else ""
    yield HEAD, f"The nearest blend{order}: what must give, in units of reproducibility R:"
    for change in giving.changes:
        yield TEXT, f"  {change_words(change)}"
    for reason in giving.reasons:
        yield BAD, f"  ! {reason}"
    if giving.changes and giving.recipe.shares:
        yield TEXT, f"  then: {recipe_words(giving)}"
        if doubt := spread_words(giving.recipe):
            yield BAD, f"  ! {doubt}"


def recipe_words(giving: Giving) -> str:
    """The recipe that changed limits make possible, in a line."""
    recipe = giving.recipe
    shares = sorted((recipe.shares or {}).items(), key=lambda item: -item[1])
    told = ", ".join(f"{harmless(code)} {numbers.pct(share)} %" for code, share in shares if share >= LEAST_TOLD)
    read = ", ".join(f"{heading(code)} {amount(code, value)}" for code in ("kv40", "kv100", "vi")
                     if (value := recipe.predicted.get(code)) is not None)
    cost = "" if recipe.cost_per_t is None else f"; {numbers.cost(recipe.cost_per_t)} /t"
    widest = max((x for x in recipe.spread_pct.values() if x is not None), default=None)
    apart = "" if widest is None else f"; the laws lie within {numbers.fixed(widest, 1)} %"
    return f"{told}; {read}{apart}{cost}"


def _reach(report: Report) -> Iterator[Told]:
    if report.reach is None:
        return
    yield HEAD, "Within reach of the stocks allowed (whole-number rules left aside):"
    yield TEXT, f"  {'':<24}{'by shares and tanks':<23}with all other limits held"
    for code, (alone, others) in report.reach.items():
        name = f"{heading(code)}, {unit(code)}".removesuffix(", ")
        yield TEXT, f"  {name:<24.24}{_span(code, alone):<23}{_span(code, others)}"


def _span(code: str, span: Interval | None) -> str:
    return "none" if span is None else f"{numbers.value(code, span[0])} to {numbers.value(code, span[1])}"


def _stocks(report: Report) -> Iterator[Told]:
    if "stocks" not in report.done:
        return
    useful = [each for each in report.allowed if each.share is not None]
    yield HEAD, "Stocks of the plant that would do it and may not serve today:"
    for each in sorted(useful, key=lambda each: each.share or 0.0):
        yield TEXT, f"  {stock_words(each)}"
    if not useful:
        yield TEXT, f"  no single one ({', '.join(harmless(x.stock) for x in report.allowed) or 'every stock serves'})"
    for pair in report.pairs[:3]:
        yield TEXT, f"  {pair_words(pair)}"
    if useful or report.pairs:
        yield TEXT, f"  {DECIDES}"


def stock_words(each: Allowed) -> str:
    """A stock that would do: its least share, the cost of the recipe, why it may not serve today."""
    cost = "its price is unknown" if each.cost_per_t is None else f"least cost then {numbers.cost(each.cost_per_t)} /t"
    assumed = f"; taken: {', '.join(each.assumed)}" if each.assumed else ""
    return (f"{harmless(each.stock)}: from {numbers.pct(each.share)} %; {cost}. Not today: "
            f"{'; '.join(map(harmless, each.why_not))}{assumed}")


def pair_words(pair: Together) -> str:
    """Two stocks that would do together."""
    told = " with ".join(f"{harmless(code)} {numbers.pct(pair.shares.get(code, 0.0))} %" for code in pair.stocks)
    return f"together: {told}; least cost then {numbers.cost(pair.cost_per_t)} /t"


def assumed_words(assumed: Neutral, capped: bool) -> str:
    """What is taken of a stock that could be bought; `capped`: has the target a cost ceiling?"""
    named = [f"{heading(code)} {amount(code, value)}" for code, value in assumed.values.items()]
    price = [f"price {numbers.cost(assumed.price_per_t)} /t"] if capped else []
    told = ", ".join([*named, f"density {assumed.density15:.1f} kg/m³", *price])
    return (f"taken of it: a base stock of no group, as much as is wanted, {told}; what is limited stands at its "
            "limit, so that it neither helps nor hinders")


def capped(report: Report) -> bool:
    """Has the target a cost ceiling?"""
    from solver.requirements import ceiling

    return ceiling(report.target) is not None


def _region(report: Report) -> Iterator[Told]:
    if report.assumed is None:
        return
    yield HEAD, "One more base stock to buy; the least % of it that would do by KV40 and VI:"
    does = [p for p in report.region if p.share is not None]
    if does:
        yield from _grid(report.region)
        least = min(does, key=lambda p: p.share or 0.0)
        yield TEXT, (f"  least of all: {numbers.pct(least.share)} % of one of KV40 {numbers.kv(least.kv40)} and KV100 "
                     f"{numbers.kv(least.kv100)} mm²/s, VI {numbers.vi(least.vi)}")
    elif "region" in report.done:
        low, high = (numbers.kv(f((p.kv40 for p in report.region), default=None)) for f in (min, max))
        worst, best = (numbers.vi(f((p.vi for p in report.region), default=None)) for f in (min, max))
        yield TEXT, f"  no single one of KV40 {low} to {high} mm²/s and VI {worst} to {best} would do"
    yield TEXT, f"  {assumed_words(report.assumed, capped(report))}"


def _grid(points: Sequence[Point]) -> Iterator[Told]:
    columns = sorted({p.kv40 for p in points})
    shares = {(p.vi, p.kv40): p.share for p in points}
    yield TEXT, "  KV40   " + "".join(f"{numbers.figures(kv, 3):>6}" for kv in columns)
    for vi in sorted({p.vi for p in points}):
        row = [shares.get((vi, kv)) for kv in columns]
        if any(share is not None for share in row):
            cells = "".join(f"{'–' if s is None else numbers.fixed(100.0 * s, 1):>6}" for s in row)
            yield TEXT, f"  VI {numbers.vi(vi):<4}{cells}"
