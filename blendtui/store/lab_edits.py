"""The changes that an edit of the laboratory's record is made of: measured blends and lessons."""

from __future__ import annotations

from solver.measured import Measured

from .database import now
from .edits import drop_lines, next_position
from .plant import Plant
from .records import SEPARATOR, Change, Lesson
from .state import change_of


def new_measured(plant: Plant, blend: Measured) -> list[Change]:
    """Record a measured blend; ChangedSince later on when one of that name is there already."""
    changes = [change_of("measured", (blend.name,), None, {
        "product": blend.product, "measured_on": blend.measured_on, "method": blend.method, "note": blend.note,
        "confirmed": int(blend.confirmed), "position": next_position(plant, "measured")})]
    for place, part in enumerate(blend.parts):
        changes.append(change_of("measured_part", (blend.name, part.stock), None, {
            "share_pct": round(100.0 * part.share, 10), "kv40": part.kv40, "kv100": part.kv100,
            "density15": part.density15, "lot": part.lot, "oil": part.oil, "position": place}))
        changes += [change_of("measured_part_value", (blend.name, part.stock, prop), None, {"value": value})
                    for prop, value in part.values.items()]
    return changes + [change_of("measured_value", (blend.name, prop), None, {"value": value})
                      for prop, value in blend.values.items()]


def confirmed_measured(name: str) -> Change:
    """Somebody has looked at what is doubtful about a blend and says that it is so."""
    return change_of("measured", (name,), {"confirmed": 0}, {"confirmed": 1})


def dropped_measured(plant: Plant, name: str) -> list[Change]:
    """Take a measured blend out, with the cells of unknown columns that belong to it."""
    changes = []
    for table in ("measured_part_value", "measured_part", "measured_value"):
        changes += drop_lines(plant, table, [(k, r) for k, r in plant.table(table).items() if k[0] == name])
    whole = plant.row("measured", name)
    return [] if whole is None else [*changes, change_of("measured", (name,), whole, None)]


def new_lesson(plant: Plant, lesson: Lesson) -> list[Change]:
    """Take a lesson into use."""
    changes = [change_of("lesson", (lesson.version,), None, {
        "kind": lesson.kind, "law": lesson.law, "first": lesson.first, "second": lesson.second,
        "low_pct": None if lesson.low is None else 100.0 * lesson.low,
        "high_pct": None if lesson.high is None else 100.0 * lesson.high,
        "evidence": SEPARATOR.join(lesson.evidence), "leave_one_out": lesson.leave_one_out,
        "provisional": int(lesson.provisional), "taken_at": lesson.taken_at or now(),
        "taken_by": lesson.taken_by or plant.who, "withdrawn_at": lesson.withdrawn_at,
        "withdrawn_by": lesson.withdrawn_by, "reason": lesson.reason, "position": next_position(plant, "lesson")})]
    for celsius, terms in lesson.terms.items():
        changes.append(change_of("lesson_term", (lesson.version, celsius), None, {
            "first_term": terms[0], "second_term": terms[1] if len(terms) > 1 else None}))
    return changes


def withdrawn_lesson(plant: Plant, version: str, reason: str) -> Change:
    """Take a lesson out of use; it stays in the record."""
    return change_of("lesson", (version,), {"withdrawn_at": "", "withdrawn_by": "", "reason": ""},
                     {"withdrawn_at": now(), "withdrawn_by": plant.who, "reason": reason})
