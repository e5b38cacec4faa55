"""What a trace walks over: batches and lots as they are needed, and what a vessel held at a moment of a batch."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

from blendtui.store.batch_records import LEFT, Charge, Content, Lot, Made
from blendtui.store.plant import Plant

from . import batches

Thing = tuple[Content | Charge, float]  # with its kg
LEAST_PART = 1e-6  # of what is traced: what is less (a gram in a tonne) is not followed further


class Past:
    """The plant's batches and lots, each read once."""

    def __init__(self, plant: Plant) -> None:
        self.plant = plant
        self.stocks = batches.by_code(plant)
        self._made: dict[str, Made | None] = {}
        self._lots: dict[str, dict[str, Lot]] = {}

    def load(self, names: Iterable[str]) -> None:
        """Read several batches at once."""
        new = [n for n in dict.fromkeys(names) if n not in self._made]
        if new:
            self._made |= {**dict.fromkeys(new), **self.plant.oil_of(new)}

    def made(self, name: str) -> Made | None:
        """One batch, None where there is none of that name."""
        self.load([name])
        return self._made[name]

    def lot(self, stock: str, name: str) -> Lot | None:
        """One receipt, None where none was recorded."""
        if stock not in self._lots:
            self._lots[stock] = {x.lot: x for x in self.plant.lots(stock)}
        return self._lots[stock].get(name)


def whole(made: Made) -> list[Thing]:
    """What a batch was made of: all of it, before it left the vessel.

    What was drawn off before the last charge is no part of it any more, unless that was everything: then a charge was
    entered anew after its oil had left.
    """
    last = max((c.at for c in made.charged), default="")
    found = batches.held(replace(made, outcomes=tuple(o for o in made.outcomes if o.at < last)))
    return found if any(kg > 0.0 for _, kg in found) else batches.held(replace(made, outcomes=()))


def when_drawn(made: Made, at: str) -> list[Thing]:
    """What was in the vessel when something left it at that time; the whole batch for an empty time."""
    if not at:
        return whole(made)
    # What leaves takes its part of everything, so only what left before a charge changes any share.
    return whole(replace(made, charges=tuple(c for c in made.charged if c.at <= at)))


def left_at(made: Made) -> str:
    """When the heel of a batch was left; empty: nobody recorded it."""
    return max((o.at for o in made.outcomes if o.what == LEFT), default="")


def drawn_at(made: Made, stock: str, lot: str) -> str:
    """When a lot of rework was drawn off; empty for oil that came back later, which is of the whole batch."""
    return next((o.at for o in made.outcomes if o.stock == stock and o.lot == lot), "")


def lots_of(charge: Charge) -> dict[str, float]:
    """Lot → part of a charge; empty: nobody recorded one."""
    return dict(charge.lots) or ({charge.actual_lot: 1.0} if charge.actual_lot else {})
