"""A batch as the laboratory found it, as one stock that the solver takes.

It has the values that were measured (the mean of what stands on the samples that count), the mass that the book says
and the composition that was charged. What was not measured is taken from the prediction, and said to be.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from blendtui.store.batch_records import Made
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.errors import SolverError
from solver.properties import lookup
from solver.stocks import Stock
from solver.target import Target

from . import batches, numbers, release
from .batch_verdict import PAIR, drawn_together, mean_of, values_of
from .errors import DeskError
from .reason_words import heading


def measured_batch(plant: Plant, made: Made, target: Target) -> tuple[Stock, tuple[int, ...], tuple[str, ...]]:
    """The batch as one stock of its measured values, the samples they are of, and what was not measured.

    DeskError without KV40 and KV100 of one sample drawn after the last charge.
    """
    draw = drawn_together(made)
    if not draw:
        raise DeskError(f"{harmless(made.name, 40)} has no sample of what is in the vessel now: a trim starts from the "
                        "measured batch, not from the predicted one; draw a sample and measure KV40 and KV100")
    if not any(all(mean_of(made, s, code) for code in PAIR) for s in draw):
        have = [heading(code) for code in PAIR if any(mean_of(made, s, code) for s in draw)]
        samples = ", ".join(str(s.sample) for s in draw)
        raise DeskError(f"sample {samples} of {harmless(made.name, 40)} has {', '.join(have) or 'neither viscosity'} "
                        "on record; a trim moves both: measure KV40 and KV100 on one sample first")
    measured: dict[str, float] = {}
    for code in dict.fromkeys(r.property for r in made.results if r.property != "vi"):
        found = [mean for mean, _, _ in values_of(made, draw, code)]  # of an older sample what only that was tested for
        if found:
            measured[code] = sum(found) / len(found)
    stocks = batches.by_code(plant)
    expected = _predicted(made, target, stocks)
    asked = [need.code for need in release.asked_of(target)[0] if need.code != "vi"]
    guessed = tuple(code for code in dict.fromkeys([*asked, "density15"]) if code not in measured)
    cells = {**{c: v for c, v in expected.items() if v is not None and c != "vi"}, **measured}
    name = batches.CODE if batches.CODE not in stocks else f"{batches.CODE} of {made.name}"
    batch = batches.as_stock(name, cells, name="measured batch", in_vessel_kg=made.in_vessel_kg, source="own",
                             contents=_contents(made, stocks))
    return batch, tuple(s.sample for s in draw), tuple(_guess_words(code, cells.get(code)) for code in guessed)


def _contents(made: Made, stocks: Mapping[str, Stock]) -> tuple[tuple[Stock, float], ...]:
    """What the batch was made of; what only its heel or line held is no stock of the recipe, so none is counted."""
    charged = {c.stock for c in made.charged}
    return tuple((s if s.code in charged else replace(s, in_vessel_kg=part * made.in_vessel_kg), part)
                 for s, part in batches.made_of(batches.composition(made), stocks))


def _predicted(made: Made, target: Target, stocks: Mapping[str, Stock]) -> dict[str, float | None]:
    """What is predicted of what was charged; nothing where part of it has no known viscosity."""
    from solver.trim import effect

    try:
        return effect(batches.in_vessel(made, stocks), target=target)
    except SolverError:
        return {}


def _guess_words(code: str, value: float | None) -> str:
    entry = lookup(code)
    if value is None:
        return f"{entry.name} was not measured, and cannot be predicted"
    told = f"{numbers.value(code, value)} {entry.unit}".rstrip()
    return f"{entry.name} was not measured: {told} is the prediction, not a result"
