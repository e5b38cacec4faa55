"""The laboratory's record: measured blends with what their stocks were at the time, and what is doubtful of them."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date
from typing import TYPE_CHECKING

from blendtui.store import cells as check
from blendtui.store import lab_edits
from blendtui.store.catalogue_lab import blend_name
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Lesson
from solver.errors import SolverError
from solver.measured import Measured, Part
from solver.properties import lookup
from solver.stocks import Stock
from solver.target import LAWS
from solver.target import Lesson as Taught

from .amounts import amount
from .errors import DeskError

if TYPE_CHECKING:
    from solver.measured_doubts import Question
    from solver.residuals import Drift, Residual, StockResidual, Summary

LARGEST_SHARE = 10.0  # times the whole: more is no slip of the pen in one share


@dataclass(frozen=True)
class Recorded:
    """What became of a blend that was put on record."""

    blend: Measured
    message: str
    questions: tuple[Question, ...]  # what is wrong with it or doubtful: until that is settled it teaches nothing


@dataclass(frozen=True)
class Record:
    """What the plant knows of the laboratory, read at one moment: everything below works without the plant."""

    blends: tuple[Measured, ...]
    lessons: tuple[Lesson, ...]  # in use
    stocks: tuple[Stock, ...]
    codes: frozenset[str]  # of every stock there ever was
    laws: Mapping[str, str]  # product → its own law, where it has one

    @property
    def taught(self) -> tuple[Taught, ...]:
        """The lessons in use as the solver takes them."""
        return tuple(lesson.taught for lesson in self.lessons)


def read(plant: Plant) -> Record:
    """Read the record."""
    laws = {p.product: p.law for p in plant.products(include_retired=True) if p.law}
    codes = frozenset(s.code for s in plant.stocks(include_retired=True))
    return Record(tuple(plant.measured()), tuple(plant.lessons()), tuple(plant.stocks()), codes, laws)


def known(record: Record) -> frozenset[str]:
    """Stocks that a blend may name: of one that has gone the values at the time are on record, and still teach."""
    return record.codes | {part.stock for each in record.blends for part in each.parts if part.kv40 is not None}


@dataclass(frozen=True)
class Checked:
    """The record as it may be used."""

    usable: tuple[Measured, ...]  # those that may teach
    questions: Mapping[str, tuple[Question, ...]]  # name → what is wrong or doubtful, confirmed or not

    @property
    def in_question(self) -> tuple[str, ...]:
        """Names of the blends from which nothing is learnt until that is settled."""
        kept = {blend.name for blend in self.usable}
        return tuple(name for name in self.questions if name not in kept)

    def state(self, blend: Measured) -> str:
        """In a word or two, how it stands: "", "confirmed", "questioned" or "faulty"."""
        asked = self.questions.get(blend.name, ())
        if any(q.fault for q in asked):
            return "faulty"
        return ("confirmed" if blend.confirmed else "questioned") if asked else ""


def checked(record: Record, law: str = "refutas") -> Checked:
    """The measured blends with everything that is doubtful about them, by a law and the lessons in use."""
    from solver.measured_doubts import fit_for_use

    usable, asked = fit_for_use(record.blends, law, known(record), record.taught)
    by_name: dict[str, tuple[Question, ...]] = {}
    for question in asked:
        by_name[question.blend] = (*by_name.get(question.blend, ()), question)
    return Checked(usable, by_name)


def record(plant: Plant, name: str, product: str, shares: Mapping[str, float], results: Mapping[str, str], *,
           on: str = "", method: str = "", note: str = "", confirmed: bool = False, today: date | None = None
           ) -> Recorded:
    """Put a measured blend on record: shares [mass fraction], results as typed by property code.

    The stocks' blending viscosities and densities of this moment are kept with it. `on`: the date of the results,
    empty for today. What is doubtful is told and kept apart until it is confirmed; what cannot be a record at all
    is refused (DeskError, ScaleError).
    """
    blend = _read(plant, name, product, shares, results, on or (today or date.today()).isoformat(), method, note)
    before = read(plant)
    with_it = replace(before, blends=(*before.blends, blend))
    asked = checked(with_it, before.laws.get(product, "refutas")).questions.get(blend.name, ())
    blend = replace(blend, confirmed=confirmed and bool(asked) and not any(q.fault for q in asked))
    plant.change(lab_edits.new_measured(plant, blend), f"measured blend {blend.name} recorded")
    return Recorded(blend, f"{harmless(blend.name)} recorded{_standing(blend, asked)}", asked)


def _standing(blend: Measured, asked: Sequence[Question]) -> str:
    if any(q.fault for q in asked):
        return "; it teaches nothing as it is: drop it and record it anew"
    if asked and not blend.confirmed:
        return "; it teaches nothing until it is confirmed"
    return ", confirmed" if blend.confirmed else ""


def record_trial(plant: Plant, name: str, product: str, trial: str, results: Mapping[str, str],
                 **said: object) -> Recorded:
    """Put a measured blend on record that was made after a kept trial; see `record`."""
    kept = next((t for t in plant.trials(product) if t.name == trial), None)
    if kept is None:
        raise DeskError(f"{harmless(product, 40)} has no trial {harmless(trial, 40)!r}; type the shares instead")
    return record(plant, name, product, kept.shares, results, **said)  # type: ignore[arg-type]


# What is typed of a blend

def typed_shares(shares: Mapping[str, float]) -> str:
    """Shares as they may be typed: `MN50 48.57, BR32 49.53`, adding up to 100.00 as shown."""
    shown = {code: round(100.0 * share, 2) for code, share in shares.items() if share > 0.0}
    if shown and abs(sum(shares.values()) - 1.0) < 1e-6:
        largest = max(shown, key=lambda code: shown[code])
        shown[largest] = round(shown[largest] + 100.0 - sum(shown.values()), 2)
    return ", ".join(f"{code} {share:.2f}" for code, share in shown.items())


def read_shares(typed: str) -> dict[str, float]:
    """Shares as typed, `A 60, B 40`, in mass % (or `A 0.6 fraction`), as mass fractions."""
    from solver.scales import parse

    if not typed.strip():
        raise DeskError("no shares yet; type for example A 60, B 40")
    shares: dict[str, float] = {}
    for each in typed.split(","):
        code, _, amount_typed = each.strip().replace("=", " ").partition(" ")
        if not code or not amount_typed.strip():
            raise DeskError(f"{harmless(each.strip(), 40)!r} is not a stock and its share; type for example A 60, B 40")
        if code in shares:
            raise DeskError(f"{harmless(code, 40)} is given twice; give each stock one share")
        shares[code] = parse(amount_typed, "share")
    return shares


def read_name(typed: str, taken: Collection[str]) -> str:
    """The name of a new blend; DeskError where it is none or taken."""
    try:
        name = blend_name(typed.strip())
    except check.CellError as error:
        raise DeskError(f"measured blend: {error}") from None
    if name in taken:
        raise DeskError(f"there is a measured blend {name!r} already; record this one under another name")
    return name


def read_product(typed: str, known: Collection[str]) -> str:
    """A product's code, or empty for a blend of no product."""
    if typed and typed not in known:
        raise DeskError(f"no product {harmless(typed, 40)!r}; the plant has {', '.join(sorted(known)[:12])}; empty: "
                        "none")
    return typed


def read_result(prop: str, typed: str) -> float | None:
    """A result as typed, in the property's unit; None for an empty text."""
    if not typed.strip():
        return None
    try:
        entry = lookup(prop)
        value = float(typed) if prop == "vi" else amount(typed.strip(), prop)
    except SolverError as error:
        raise DeskError(f"{harmless(prop, 40)}: {error}") from None
    except ValueError:
        raise DeskError(f"vi: {harmless(typed, 40)!r} is not a number; type one such as 95") from None
    if not entry.lowest <= value <= entry.highest:
        raise DeskError(f"{entry.name} {value:.6g} {entry.unit} lies outside {entry.lowest:g} to {entry.highest:g}; "
                        "check the figure and its unit")
    return value


def read_date(typed: str) -> str:
    """A date as typed."""
    try:
        return check.iso_date(typed.strip())
    except check.CellError as error:
        raise DeskError(str(error)) from None


def _read(plant: Plant, name: str, product: str, shares: Mapping[str, float], results: Mapping[str, str], on: str,
          method: str, note: str) -> Measured:
    name, on = read_name(name, {b.name for b in plant.measured()}), read_date(on)
    try:
        product, method, note = (check.plain(text.strip()) for text in (product, method, note))
        for code in shares:
            check.code(code)
    except check.CellError as error:
        raise DeskError(f"measured blend: {error}") from None
    if product:
        plant.product(product)
    for code, share in shares.items():
        if not 0.0 <= share <= LARGEST_SHARE:  # false for a NaN too
            raise DeskError(f"{name}: the share of {harmless(code, 40)} is {100.0 * share:.6g} %; a share lies between "
                            "0 and 100 %")
    if not any(share > 0.0 for share in shares.values()):
        raise DeskError(f"{name}: no shares; type the mass % of at least one stock")
    stocks = {s.code: s for s in plant.stocks(include_retired=True)}
    parts = tuple(_part(code, share, stocks.get(code)) for code, share in shares.items() if share > 0.0)
    return Measured(name, product, parts, _values(name, results), on, method, note)


def _part(code: str, share: float, stock: Stock | None) -> Part:
    """A stock with its values of today; of one that the plant has not only the name is known."""
    if stock is None:
        return Part(code, share)
    pair = stock.blending_kv or (None, None)
    lot = f"tested {stock.tested_on}" if stock.tested_on else ""
    return Part(code, share, *pair, stock.density15, lot, stock.oil, dict(stock.values))


def _values(name: str, results: Mapping[str, str]) -> dict[str, float]:
    read = {prop: read_result(prop, typed) for prop, typed in results.items()}
    found = {prop: value for prop, value in read.items() if value is not None}
    if not found:
        raise DeskError(f"{name}: no result; type at least one, such as the KV at 40 °C")
    return found


# The record

def blend(plant: Plant, name: str) -> Measured:
    """One measured blend; DeskError when there is none of that name."""
    known = plant.measured()
    found = next((b for b in known if b.name == name), None)
    if found is None:
        names = ", ".join(harmless(b.name, 40) for b in known[-6:]) or "none yet"
        raise DeskError(f"no measured blend {harmless(name, 40)!r}; on record, newest last: {names}")
    return found


def confirm(plant: Plant, name: str) -> str:
    """Say that what is doubtful of a blend is so: it may teach from now on."""
    found = blend(plant, name)
    if found.confirmed:
        raise DeskError(f"{harmless(name)} is confirmed already; nothing was changed")
    record = read(plant)
    # Under one law it may be doubtful and under another not: what any of them asks may be settled.
    asked = [question for law in LAWS for question in checked(record, law).questions.get(name, ())]
    if not asked:
        raise DeskError(f"nothing about {harmless(name)} is doubtful: there is nothing to confirm")
    fault = next((q for q in asked if q.fault), None)
    if fault is not None:
        raise DeskError(f"{fault}; that cannot be confirmed: drop the blend and record it anew")
    plant.change([lab_edits.confirmed_measured(name)], f"measured blend {name} confirmed")
    return f"measured blend {name} confirmed"


def drop(plant: Plant, name: str) -> str:
    """Take a measured blend off the record; undo brings it back. Refused while a lesson in use rests on it."""
    blend(plant, name)
    rests = [x.version for x in plant.lessons() if name in x.evidence]
    if rests:
        raise DeskError(f"{harmless(name, 40)} is evidence of {', '.join(rests)}, which is in use; withdraw that first")
    plant.change(lab_edits.dropped_measured(plant, name), f"measured blend {name} dropped")
    return f"measured blend {name} dropped"


# Residuals

@dataclass(frozen=True)
class Report:
    """What was measured against what is predicted, under one law and the lessons in use."""

    law: str
    lessons: tuple[str, ...]  # versions that the predictions use
    rows: tuple[Residual, ...]  # of every blend that can be read, questioned ones too
    alone: Mapping[tuple[str, str], float]  # (blend, property) → prediction of the law without lessons
    used: tuple[str, ...]  # blends that count in what follows
    by_law: Mapping[str, Mapping[str, Summary]]  # property → law → its residuals, without lessons
    by_product: Mapping[tuple[str, str], Summary]  # (product, property) → residuals
    by_stock: Mapping[str, Mapping[str, StockResidual]]  # property → stock → residuals
    drifts: Mapping[tuple[str, str], Drift]  # (product, property) → how they go over time

    @property
    def alarms(self) -> list[tuple[tuple[str, str], Drift]]:
        """Where the chart is outside its limits."""
        return [(key, drift) for key, drift in self.drifts.items() if drift.alarm]


def report(record: Record, law: str | None = None, product: str | None = None, stock: str | None = None) -> Report:
    """Residuals of the measured blends, of one product or of those that hold a stock if given.

    Without a law it is that of the product, else refutas.
    """
    from solver import residuals
    from solver.laws import check_law

    law = check_law(law or record.laws.get(product or "") or "refutas")
    every = [b for b in record.blends if product in (None, b.product)
             and (stock is None or any(p.stock == stock for p in b.parts))]
    usable = {b.name for b in checked(record, law).usable}
    rows = _residuals(every, law, record.taught)
    alone = {(r.blend, r.code): r.predicted for r in _residuals(every, law, ())}
    counted = [r for r in rows if r.blend in usable]
    used = [b for b in every if b.name in usable]
    kv = [code for code in ("kv40", "kv100") if any(r.code == code for r in counted)]
    grouped: dict[tuple[str, str], list[Residual]] = {}
    for row in counted:
        grouped.setdefault((row.product, row.code), []).append(row)
    # Blends without a product are studies of many compositions: their order in time says nothing.
    drifts = {key: found for key, own in grouped.items() if key[0] and (found := residuals.drift(own)) is not None}
    held = {part.stock for each in every for part in each.parts}
    versions = tuple(x.version for x in record.lessons if x.law == law and (x.kind == "excess" or x.first in held))
    return Report(law, versions, tuple(rows), alone, tuple(b.name for b in used),
                  {code: residuals.by_law(used, code) for code in kv}, residuals.by_product(counted),
                  {code: residuals.by_stock([r for r in counted if r.code == code]) for code in kv}, drifts)


def _residuals(blends: Sequence[Measured], law: str, taught: Sequence[Taught]) -> list[Residual]:
    from solver.residuals import residuals

    found: list[Residual] = []
    for each in blends:
        try:
            found += residuals([each], law, taught)
        except SolverError:
            continue  # what is wrong with it is among the questions
    return found


def drift_words(drift: Drift, of: tuple[str, str]) -> str:
    """An alarm in a sentence: of which product and property, since when, and what it looks like."""
    product, code = of
    name = f"{harmless(product)} {code}"
    if not drift.alarm:
        return f"{name}: {drift.says}"
    return (f"{name}: outside 2 σ since {harmless(drift.since)}, {drift.latest:+.2f} {drift.unit} against a limit of "
            f"{drift.limit:.2f}; {drift.says}")
