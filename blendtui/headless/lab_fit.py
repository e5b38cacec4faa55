"""`lab fit`: the excess of pairs out of a table of measured mixtures, headless."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from .common import DONE, Add, BadInput, show

if TYPE_CHECKING:
    from blendtui.desk.lab_fit import FileFit, SystemFit

LAWS = "refutas, walther-mass, walther-volume (with a column density15)"
WIDTH = 80  # columns of a printer
_CONSTANTS = {"none": "no term", "one": "one term", "two": "two terms"}


def add_fit(add: Add) -> None:
    """Add `fit` to the sub-commands of `lab`."""
    command = add("fit", run, "the excess of pairs, fitted to a CSV file of measured mixtures")
    command.add_argument("file", metavar="FILE.csv", help="columns system, frac_mass (of the heavier), kv, use")
    command.add_argument("--law", default="refutas", help=LAWS)


def run(options: argparse.Namespace) -> int:
    """Fit every system of the file and print what was found."""
    from blendtui.desk.lab_fit import fit_file
    from blendtui.store.harmless import harmless

    if not options.file.strip():
        raise BadInput("the path of the file is empty; name a CSV file")
    found = fit_file(Path(options.file), options.law)
    for note in (*found.notes, *(q for one in found.systems for q in one.questions)):
        print(f"note: {harmless(note)}", file=sys.stderr)
    show(options, as_json(found), as_text(found))
    return DONE


def as_json(found: FileFit) -> dict[str, Any]:
    """{system: what was found}, numbers unrounded."""
    return {one.system: _system_json(one) for one in found.systems}


def _system_json(one: SystemFit) -> dict[str, Any]:
    fit = one.fit
    return {"terms": list(fit.terms), "leave_one_out_pct": fit.leave_one_out_pct, "predicted": list(one.predicted),
            "form": fit.form, "provisional": fit.provisional, "carried": fit.carried,
            "leave_one_out_by_form": {form: fit.by_form.get(form) for form in _CONSTANTS} if fit.by_form else None,
            "unfitted": list(one.unfitted),
            "error_pct": {use: one.error_pct(use, one.predicted) for use in ("fit", "test")},
            "unfitted_error_pct": {use: one.error_pct(use, one.unfitted) for use in ("fit", "test")},
            "questions": list(one.questions)}


def as_text(found: FileFit) -> str:
    """The same for a person, at most 80 columns."""
    from blendtui.desk.numbers import kv
    from blendtui.store.harmless import harmless

    lines = []
    for one in found.systems:
        fit = one.fit
        terms = ", ".join(f"{name} = {value:.5g}" for name, value in zip("AB", fit.terms, strict=False)) or "none"
        blends = f"{fit.blends or 'no'} blend{'s' * (fit.blends != 1)}"
        mark = ", provisional" if fit.provisional else ""
        head = f", {found.law}: {_CONSTANTS[fit.form]} from {blends}{mark}"
        lines += ["", harmless(one.system, WIDTH - len(head)) + head,
                  f"  terms of the index: {terms}; carried by the data: {100 * fit.carried:.0f} %"]
        if fit.by_form:
            each = ", ".join(f"{_CONSTANTS[form]} {_pct(error)}" for form, error in fit.by_form.items())
            lines.append(f"  leave-one-out error: {each}")
        for use in ("fit", "test"):
            with_terms = one.error_pct(use, one.predicted)
            if with_terms is not None:
                alone = one.error_pct(use, one.unfitted)
                lines.append(f"  mean error on rows to {use}: {_pct(with_terms)} (law alone {_pct(alone)})")
        lines.append("  mass fraction     measured  predicted  law alone  mm²/s  off %  use")
        for row, value, alone_kv in zip(one.rows, one.predicted, one.unfitted, strict=True):
            off = _pct(100.0 * (value / row.kv - 1.0)).removesuffix(" %")
            lines.append(f"  {row.mass:<13.4f} {kv(row.kv):>12} {kv(value):>10} {kv(alone_kv):>10} {off:>13}  "
                         f"{'kept out' if row.row in one.kept_out else row.use if 0.0 < row.mass < 1.0 else 'stock'}")
    return "\n".join(lines[1:])


def _pct(error: float | None) -> str:
    """Percent to 0.01; in powers of ten where a form has run away."""
    from blendtui.desk.numbers import fixed

    return f"{error:.2g} %" if error is not None and abs(error) >= 1000.0 else f"{fixed(error, 2)} %"
