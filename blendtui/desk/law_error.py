"""How far a law is known to be out at this plant: the scatter of its own measured blends about the prediction."""

from __future__ import annotations

from blendtui.store.plant import Plant

from . import lab

ENOUGH = 4  # blends from which a scatter says something


def law_sigma(plant: Plant, law: str, product: str = "") -> dict[str, float] | None:
    """Relative standard deviation of the law's prediction by property code, from the measured blends.

    Those of the product if there are four or more of them, else all; with the lessons in use. None where the
    record says nothing yet: the spread of the laws then stands in its place.
    """
    from solver.residuals import residual_sigma

    record = lab.read(plant)
    if len(record.blends) < ENOUGH:
        return None
    usable = lab.checked(record, law).usable
    own = [blend for blend in usable if product and blend.product == product]
    return residual_sigma(own if len(own) >= ENOUGH else usable, law, record.taught) or None
