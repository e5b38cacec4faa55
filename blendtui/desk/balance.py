"""The mass balance of one batch: what went in, where it went, and what is missing or too much.

    loss = (contents + charges) − (packed + samples + slops + flush + rework + left)
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from blendtui.store.batch_records import FLUSH, LEFT, OPEN, PACKED, REWORK, SAMPLE, SLOPS, Made

from . import numbers

GOOD_PCT, SEARCH_PCT = 0.5, 1.0  # of what went in: a good loss ends, a search begins (common practice)
NOTHING = 1e-6  # kg: masses are kept to the milligram


@dataclass(frozen=True)
class Balance:
    """Masses in kg. The loss is negative for a gain, and None as long as the vessel still holds oil of the batch."""

    in_kg: float
    packed_kg: float
    samples_kg: float
    slops_kg: float
    flush_kg: float
    rework_kg: float
    left_kg: float  # in the vessel, as the heel of the next batch
    in_vessel_kg: float  # by the book, while the batch is not closed out
    loss_kg: float | None
    loss_pct: float | None  # of what went in
    yield_pct: float | None  # packed, of what went in and did not stay as a heel
    words: tuple[str, ...]

    @property
    def out_kg(self) -> float:
        """Everything that left, the heel included."""
        return self.packed_kg + self.samples_kg + self.slops_kg + self.flush_kg + self.rework_kg + self.left_kg


def balance(made: Made) -> Balance:
    """In against out of a batch. It is closed out once it is not open and what stayed in the vessel was recorded
    (0 kg where it is empty), or nothing is left by the book; what is missing then is its loss."""
    came = sum(c.kg for c in made.contents if c.counts) + sum(c.actual_kg or 0.0 for c in made.charged)
    of = {what: sum((o.kg for o in made.outcomes if o.what == what), 0.0)
          for what in (PACKED, SAMPLE, SLOPS, FLUSH, REWORK, LEFT)}
    off = came - sum(of.values())
    out = made.head.state != OPEN and (any(o.what == LEFT for o in made.outcomes) or abs(off) <= NOTHING)
    # Sums of decimals are off by less than a milligram.
    loss = (0.0 if abs(off) <= NOTHING else off) if out else None
    kept = came - of[LEFT]
    found = Balance(came, of[PACKED], of[SAMPLE], of[SLOPS], of[FLUSH], of[REWORK], of[LEFT], 0.0 if out else off, loss,
                    None if loss is None or came <= 0.0 else 100.0 * loss / came,
                    100.0 * of[PACKED] / kept if out and kept > 0.0 else None, ())
    return replace(found, words=_words(made, found))


def _words(made: Made, found: Balance) -> tuple[str, ...]:
    said = []
    if found.loss_kg is None:
        said.append(f"{numbers.kg(found.in_vessel_kg)} kg are in {made.head.vessel or 'the vessel'} by the book; the "
                    "balance closes when what stays there is recorded")
    elif found.loss_pct is not None:
        said.append(_loss_words(found.loss_kg, found.loss_pct))
    if found.yield_pct is not None:
        said.append(f"yield {numbers.fixed(found.yield_pct, 2)} %: packed, of what went in and did not stay as a heel")
    apart = sum(c.kg for c in made.contents if not c.counts)
    if apart > 0.0:
        said.append(f"{numbers.kg(apart)} kg of flush oil were pumped through and count for nothing here")
    return tuple(said)


def _loss_words(kg: float, pct: float) -> str:
    size = f"{numbers.kg(abs(kg))} kg ({numbers.fixed(abs(pct), 2)} %)"
    search = " Past 1 %: search" if abs(pct) > SEARCH_PCT else ""
    if kg < 0.0:
        return (f"gain of {size}: more came out than is recorded to have gone in; a scale, a heel or a charge that was "
                f"not recorded.{search or ' A gain is no better than a loss'}")
    if kg == 0.0:
        return "no loss at all: was every mass weighed, or one worked out from the others?"
    usual = "0.2–0.5 % is good"
    return f"loss {size}: {usual}" + (f".{search}: a scale, a leak, a charge or a drum that was not recorded" if search
                                      else ", this is more" if pct > GOOD_PCT else "")
