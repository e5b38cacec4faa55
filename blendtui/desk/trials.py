"""Trials: shares that someone kept under a name."""

from __future__ import annotations

from blendtui.store import cells as check
from blendtui.store import edits
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Trial
from solver.target import LAWS

from .errors import DeskError

NOISE = 1e-6  # of a share: what a search or a sum leaves behind


def keep_trial(plant: Plant, trial: Trial) -> str:
    """Keep shares under a name; DeskError when the name is taken or cannot be a name."""
    if not trial.name.strip():
        raise DeskError("the trial needs a name; type one such as lean")
    try:
        name = check.code(trial.name.strip())
        check.plain(trial.note)
        check.word(trial.law, LAWS, "law")
        for code in trial.shares:
            check.code(code)
    except check.CellError as error:
        raise DeskError(f"trial: {error}") from None
    plant.product(trial.product)
    if any(t.name == name for t in plant.trials(trial.product)):
        raise DeskError(f"{trial.product} has a trial {name!r} already; keep this one under another name")
    if not trial.shares:
        raise DeskError("a trial without shares; make a recipe first")
    for code, share in trial.shares.items():
        if not -NOISE <= share <= 1.0 + NOISE:  # false for a NaN too
            raise DeskError(f"{trial.product} trial {name}: the share of {harmless(code, 40)} is {100 * share:.6g} %; "
                            "a share lies between 0 and 100 %")
    plant.change(edits.new_trial(plant, Trial(name, trial.product, trial.shares, trial.law, trial.kept_at,
                                              trial.kept_by, trial.note.strip())),
                 f"{trial.product} trial {name} kept")
    return f"{trial.product} trial {name} kept"


def drop_trial(plant: Plant, product: str, name: str) -> str:
    """Take a kept trial away; undo brings it back."""
    changes = edits.dropped_trial(plant, product, name)
    if not changes:
        raise DeskError(f"{product} has no trial {harmless(name, 40)!r}")
    plant.change(changes, f"{product} trial {name} dropped")
    return f"{product} trial {name} dropped"
