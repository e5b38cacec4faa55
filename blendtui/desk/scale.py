"""What the vessel's scale shows: the same on the card and on the screen of the floor."""

from __future__ import annotations

from blendtui.store.batch_records import DONE, PLANNED, Made


def readings(made: Made) -> dict[int, float]:
    """Line → reading once that charge is in [kg], with what was in the vessel; dropped lines have none.

        reading = contents + charges that are in + charges to come up to this line − what has left

    A charge that was made counts at its time, whatever its place on the card: a later line that went in first is on
    the scale already, and what was drawn off before a charge no longer is. Charges to come follow in the order of the
    card, as planned.
    """
    kg = sum(c.kg for c in made.contents if c.counts)
    found: dict[int, float] = {}
    came = [(c.at, 0, c.line, c.actual_kg or 0.0) for c in made.charges if c.state == DONE]
    went = [(o.at, 1, 0, -o.kg) for o in made.outcomes]
    for _, left, line, mass in sorted(came + went):
        kg += mass
        if not left:
            found[line] = kg
    for charge in (c for c in made.charges if c.state == PLANNED):
        kg += charge.plan_kg
        found[charge.line] = kg
    return found
