"""The batch card as plain text: ASCII, 80 columns."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator

from blendtui.store.batch_records import DROPPED
from blendtui.store.harmless import harmless
from solver.properties import lookup, volume_at
from solver.requirements import COST

from . import batches, numbers
from .card import Card, CardLine, content_words, facts
from .sheet import NOT_A_CERTIFICATE

WIDTH = 80
CODE, NAME, KG = 13, 32, 10  # columns of a stock's code and name (longer ones go on below) and of masses
_PLAIN = str.maketrans({"–": "-", "²": "2", "³": "3", "°": "deg ", "·": ".", "−": "-", "≤": "<=", "≥": ">=", "…": "~",
                        "×": "x", "→": "->", "’": "'"})
DECIDE = "CAUTIONS: site procedures, safety data sheets, permits and codes decide"
SCALE = ("Scale shows: heel, line and flush oil that goes in are on it from the start; from 0: it was set to 0 before "
         "the first charge. Both run by the plan: after a charge that differs, go by the kg of the next.")
TOLD = ("kv40", "kv100", "vi", "density15")  # predicted figures that stand on the card although nothing limits them
BOXES = "kg _________  lot ______________  time ______  by ________  check ________"


def plain(text: str) -> str:
    """What any printer can print, made before columns are padded."""
    return harmless(text).translate(_PLAIN).encode("ascii", "replace").decode("ascii")


def _wrap(text: str, first: str = "", rest: str = "") -> list[str]:
    return textwrap.wrap(plain(text), WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)


def exact(kg: float) -> str:
    """A mass [kg] to the gram, without needless zeros: steps are weighed as they stand."""
    return f"{round(kg, 3):.10g}"


def text(made: Card) -> str:
    """The card as text."""
    head = made.made.head
    lines = [plain(f"BATCH CARD  {harmless(head.batch, 60)}"), "=" * WIDTH]
    for name, said in facts(made):
        lines += _wrap(f"{name:<9} {said}", rest=" " * 10)
    lines += [*_warned(made), "", *_contents(made), *_charges(made), "", *_mixing(made), "", *_predicted(made), "",
              *_rests_on(made), "", DECIDE]
    for each in made.cautions:
        lines += _wrap(f"* {each.title}: {each.reason}. {each.advice}", rest="  ")
    lines += [*_wrap(f"* {NOT_A_CERTIFICATE}", rest="  "), "",
              "Released to the floor by ______________________   date ______________",
              "All charges made and checked ______________________   date ______________", "",
              *_wrap(f"Record: entry {made.entry}, {made.hash}", rest="  ")]
    return "\n".join(line.rstrip() for line in lines) + "\n"


def _warned(made: Card) -> Iterator[str]:
    """What has to be seen before anything is charged."""
    head = made.made.head
    if head.state != "open":
        yield from _wrap(f"*** THIS BATCH IS {head.state.upper()}: DO NOT CHARGE ***")
    if made.changed:
        yield from _wrap(f"*** THE PRODUCT HAS CHANGED SINCE THIS ORDER ({', '.join(made.changed)}): the order stands "
                         f"as of journal entry {head.formula_entry}; before the first charge blendtui batch redesign "
                         f"{harmless(head.batch, 60)} takes the new one ***")
    for words in made.missed:
        yield from _wrap(f"*** NOT AS ASKED, by the prediction: {words} ***")
    if made.why_not:
        yield from _wrap(f"*** nothing can be predicted: {made.why_not} ***")


def _contents(made: Card) -> Iterator[str]:
    said = content_words(made)
    if not said:
        yield "IN THE VESSEL: nothing; see that it is empty, clean and dry"
    else:
        yield "IN THE VESSEL before anything is charged (measure it where it can be measured)"
        for words in said:
            yield from _wrap(words, "  ", "    ")
    yield ""


# Charges

def _charges(made: Card) -> Iterator[str]:
    yield f"{'CHARGES in this order':<{5 + CODE + NAME}}{'':>{KG}}{'scale':>{KG}}{'from 0':>{KG}}"
    yield f"{'':5}{'stock':<{CODE}}{'name':<{NAME}}{'kg':>{KG}}{'shows kg':>{KG}}{'kg':>{KG}}"
    yield "-" * WIDTH
    yield f"{'':5}{'start':<{CODE + NAME}}{'':>{KG}}{exact(made.start_kg):>{KG}}{'0':>{KG}}"
    trim = 0
    for line in made.on_card:
        if line.charge.round > trim:
            trim = line.charge.round
            yield f"{'':5}trim {trim}"
        yield from _charge(line)
    yield "-" * WIDTH
    charged = sum(x.kg for x in made.on_card)
    yield f"{'':5}{'total charged':<{CODE + NAME}}{exact(charged):>{KG}}{exact(made.total_kg):>{KG}}"
    yield from _wrap(SCALE)
    for line in made.lines:
        if line.charge.state == DROPPED:
            yield from _wrap(f"line {line.charge.line} {line.stock} dropped: {line.charge.why}", rest="  ")


def _charge(line: CardLine) -> Iterator[str]:
    charge, name = line.charge, f"{line.name} (rinse)" if line.rinse else line.name
    codes, names = (textwrap.wrap(plain(text), width - 1) or [""] for text, width in ((line.stock, CODE), (name, NAME)))
    figures = "".join(f"{'' if kg is None else exact(kg):>{KG}}" for kg in (line.kg, line.reading_kg, line.tared_kg))
    for n in range(max(len(codes), len(names))):
        code, called = (each[n] if n < len(each) else "" for each in (codes, names))
        yield f"{charge.line if n == 0 else '':>3}  {code:<{CODE}}{called:<{NAME}}{figures if n == 0 else ''}"
    yield from _wrap("; ".join(_details(line)), "     ", "     ")
    yield from _wrap(f"lot {lots_of(line)}" + (f" ({line.tested})" if line.tested else ""), "     ", "     ")
    if line.done:
        checked = f"checked by {charge.checked_by}" if charge.checked_by else "SECOND CHECK ______________"
        yield from _wrap(f"CHARGED {exact(line.kg)} kg (planned {exact(charge.plan_kg)}) by {charge.by}, "
                         f"{batches.when(charge.at)}; {checked}", "     ", "     ")
    else:
        yield f"     {BOXES}"


def _details(line: CardLine) -> Iterator[str]:
    charge = line.charge
    yield "within {} to {} kg".format(*map(exact, line.within_kg))
    if line.packages is not None and line.package_kg is not None:
        whole = abs(line.packages * line.package_kg - charge.plan_kg) < 1e-6 * charge.plan_kg
        yield (f"{line.packages} x {exact(line.package_kg)} kg, each one's lot written down, empties weighed" if whole
               else f"{charge.plan_kg / line.package_kg:.2f} x {exact(line.package_kg)} kg: NOT WHOLE")
    elif line.step_kg is not None:
        yield f"by {exact(line.step_kg)} kg" + (" on its own scale" if line.own_scale else "")
    if line.litres is not None:
        yield f"{numbers.litres(line.litres)} L at {charge.celsius:g} °C"
    if line.alike:
        yield f"NOT {', '.join(line.alike)}"


def lots_of(line: CardLine) -> str:
    """The lots of a charge, with their parts where the tank holds several."""
    if not line.lots:
        return "not on record: write down what it says"
    if len(line.lots) == 1:
        return next(iter(line.lots))
    return ", ".join(f"{lot} {numbers.fixed(100.0 * part, 1)} %" for lot, part in line.lots.items())


# Mixing and what is predicted

def _mixing(made: Card) -> Iterator[str]:
    head = made.made.head
    said = f"MIX at {head.mix_c:g} °C"
    if made.mix_kv is not None:
        said += f"; predicted KV there {numbers.kv(made.mix_kv)} mm²/s"
    if made.fill_l is not None:
        said += f"; fill there {numbers.litres(made.fill_l)} L"
        said += f", {numbers.fixed(made.fill_pct, 1)} % of the vessel" if made.fill_pct is not None else ""
    yield from _wrap(said)
    yield "  from ______ to ______ at ____ deg C  KV40 top _____ middle _____ bottom _____"
    yield from _wrap("Sample when top, middle and bottom agree; one sample gives KV40 and KV100.", "  ", "  ")


def _predicted(made: Card) -> Iterator[str]:
    if made.recipe is None:
        return
    customer = {x.property for x in made.customer}
    yield f"{'PREDICTED':<34}{'value':>12}{'at least':>12}{'at most':>12}"
    yield "-" * WIDTH
    for limit in made.limits:
        if limit.property == COST or volume_at(limit.property) is not None:
            continue
        low, high = (("" if v is None else numbers.value(limit.property, v)) for v in (limit.low, limit.high))
        label = plain(lookup(limit.property).label) + (" (customer)" if limit.property in customer else "")
        if len(label) > 33:
            yield label
            label = ""
        yield f"{label:<34}{numbers.value(limit.property, limit.value):>12}{low:>12}{high:>12}".replace("–", "-")
    held = {limit.property for limit in made.limits}
    for code in TOLD:
        if code not in held and (value := made.recipe.predicted.get(code)) is not None:
            yield f"{plain(lookup(code).label):<34}{numbers.value(code, value):>12}"


def _rests_on(made: Card) -> Iterator[str]:
    """Formula, law and lessons."""
    head = made.made.head
    said = f"Formula as of journal entry {head.formula_entry}"
    if made.recipe is not None:
        said += f"; law {made.recipe.law}"
        if made.recipe.lessons:
            said += f" with the laboratory's lessons {', '.join(made.recipe.lessons)}"
        if made.recipe.provisional:
            said += f" (provisional: {', '.join(made.recipe.provisional)})"
    yield from _wrap(said + ".")
    for test in () if made.recipe is None else made.recipe.to_be_tested:
        yield from _wrap(f"To be tested: {test}", rest="  ")
    unchecked = batches.unchecked(made.made)
    if unchecked:
        yield from _wrap("Second check missing: " + ", ".join(f"line {c.line} {c.stock}" for c in unchecked), rest="  ")
