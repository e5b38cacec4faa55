"""The answers of `lab`: JSON-ready dictionaries and text of at most 80 columns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from blendtui.as_text import table, wrap
from blendtui.desk import numbers
from blendtui.desk.lab import Checked, Report, drift_words
from blendtui.desk.lessons import Offer, lesson_words, offer_words
from blendtui.store.harmless import harmless
from blendtui.store.records import Lesson
from solver.measured import Measured

if TYPE_CHECKING:
    from solver.blending_values import BlendingValue
    from solver.measured_doubts import Question
    from solver.residuals import Residual

Answer = dict[str, Any]
STATES = {"": "", "confirmed": "confirmed", "questioned": "? questioned", "faulty": "! faulty"}


# JSON

def blend_json(blend: Measured, checked: Checked) -> Answer:
    """One measured blend with what is doubtful of it."""
    parts = [{"stock": p.stock, "share_pct": 100.0 * p.share, "kv40": p.kv40, "kv100": p.kv100,
              "density15": p.density15, "lot": p.lot, "oil": p.oil, "values": dict(p.values)}
             for p in blend.parts]
    return {"name": blend.name, "product": blend.product, "measured_on": blend.measured_on, "method": blend.method,
            "note": blend.note, "confirmed": blend.confirmed, "state": checked.state(blend), "parts": parts,
            "values": dict(blend.values), "questions": questions_json(checked.questions.get(blend.name, ()))}


def questions_json(questions: Sequence[Question]) -> list[Answer]:
    """What is wrong or doubtful."""
    return [{"cell": q.cell, "says": q.says, "do": q.do, "fault": q.fault, "suggestion": q.suggestion}
            for q in questions]


def report_json(report: Report) -> Answer:
    """Answer of `lab residuals`."""
    by_stock = {code: {stock: {**asdict(one), "tells": one.tells} for stock, one in stocks.items()}
                for code, stocks in report.by_stock.items()}
    return {"law": report.law, "lessons": list(report.lessons),
            "residuals": [_residual_json(row, report) for row in report.rows],
            "by_law": {code: {law: asdict(one) for law, one in laws.items()} for code, laws in report.by_law.items()},
            "by_product": [{"product": product, "property": code, **asdict(one)}
                           for (product, code), one in report.by_product.items()],
            "by_stock": by_stock,
            "drift": [{"product": product, "property": code, **asdict(one), "says": one.says}
                      for (product, code), one in report.drifts.items()]}


def _residual_json(row: Residual, report: Report) -> Answer:
    return {"blend": row.blend, "product": row.product, "measured_on": row.measured_on, "property": row.code,
            "measured": row.measured, "predicted": row.predicted, "law_alone": report.alone.get((row.blend, row.code)),
            "off": row.off, "unit": unit_of(row), "used": row.blend in report.used}


def unit_of(row: Residual) -> str:
    """Unit of a residual: %, or the property's own."""
    from solver.properties import lookup
    from solver.residuals import BY_DIFFERENCE

    return lookup(row.code).unit if row.code in BY_DIFFERENCE else "%"


def offer_json(offer: Offer) -> Answer:
    """One entry of `lab offer`."""
    return {"kind": offer.kind, "law": offer.law, "first": offer.first, "second": offer.second or None,
            "terms": _by_celsius(offer.terms), "figures": {f"{t:g}": _fit_json(fit) for t, fit in offer.fits.items()},
            "low_pct": _pct(offer.low), "high_pct": _pct(offer.high), "evidence": list(offer.evidence),
            "value": None if offer.value is None else _value_json(offer.value),
            "provisional": offer.provisional, "teaches": offer.teaches, "in_use": offer.in_use or None,
            "refusal": offer.refusal or None}


def _fit_json(fit: Any) -> Answer:
    return {key: list(value) if isinstance(value, tuple) else value for key, value in asdict(fit).items()}


def _value_json(value: BlendingValue) -> Answer:
    return {"at": {f"{t:g}": {**asdict(one), "blends": list(one.blends)} for t, one in value.at.items()},
            "too_open": {f"{t:g}": why for t, why in value.too_open.items()}, "left_out": list(value.left_out),
            "rough": value.rough}


def lesson_json(lesson: Lesson) -> Answer:
    """One entry of `lab lessons`."""
    return {"version": lesson.version, "kind": lesson.kind, "law": lesson.law, "first": lesson.first,
            "second": lesson.second or None, "terms": _by_celsius(lesson.terms),
            "low_pct": _pct(lesson.low), "high_pct": _pct(lesson.high), "evidence": list(lesson.evidence),
            "leave_one_out": lesson.leave_one_out,
            "provisional": lesson.provisional, "in_use": lesson.in_use, "taken_at": lesson.taken_at,
            "taken_by": lesson.taken_by, "withdrawn_at": lesson.withdrawn_at or None,
            "withdrawn_by": lesson.withdrawn_by or None, "reason": lesson.reason or None}


def _by_celsius(terms: Any) -> dict[str, list[float]]:
    return {f"{celsius:g}": list(each) for celsius, each in terms.items()}


def _pct(fraction: float | None) -> float | None:
    return None if fraction is None else 100.0 * fraction


# Text

def blends_text(blends: Sequence[Measured], checked: Checked) -> str:
    """Text of `lab list`."""
    if not blends:
        return "no measured blend on record; blendtui lab record puts one there"
    rows = [[harmless(b.name, 20), harmless(b.product, 12), b.measured_on, numbers.kv(b.values.get("kv40")),
             numbers.kv(b.values.get("kv100")), str(len(b.parts)), STATES[checked.state(b)]] for b in blends]
    heads = ["blend", "product", "measured", "KV40", "KV100", "stocks", ""]
    text = table(heads, rows, left=3) + "\nKV in mm²/s; every cell: --json, or export"
    return "\n".join([text, *questions_text([q for b in blends for q in checked.questions.get(b.name, ())])])


def questions_text(questions: Sequence[Question]) -> list[str]:
    """What is wrong or doubtful, a wrapped line each."""
    return [wrap(f"{'!' if q.fault else '?'} {harmless(str(q))}", "  ") for q in questions]


def report_text(report: Report) -> str:
    """Text of `lab residuals`."""
    from solver.properties import lookup

    if not report.rows:
        return f"no measured blend that {report.law} can predict"
    rows = []
    for row in report.rows:
        places = 2 if unit_of(row) == "%" else lookup(row.code).digits
        rows.append([harmless(row.blend, 20), row.code, numbers.value(row.code, row.measured),
                     numbers.value(row.code, row.predicted), f"{row.off:+.{places}f}", unit_of(row),
                     "" if row.blend in report.used else "? not used"])
    lessons = f" with {', '.join(report.lessons)}" if report.lessons else ""
    parts = [f"measured against predicted by {report.law}{lessons}",
             table(["blend", "property", "measured", "predicted", "off", "unit", ""], rows, left=2)]
    heads = ["law alone", "blends", "mean off, %", "scatter, %", "worst, %"]
    for code, laws in report.by_law.items():
        parts.append(f"{code}, by law\n" + table(heads, [
            [law, str(s.count), f"{s.mean:+.2f}", numbers.fixed(s.sigma, 2), f"{s.worst:+.2f}"]
            for law, s in laws.items()]))
    told = [wrap(f"{'! ' if d.alarm else ''}{drift_words(d, key)}", "  ") for key, d in report.drifts.items()]
    return "\n\n".join([*parts, *(["drift\n" + "\n".join(told)] if told else [])])


def offers_text(law: str, offers: Sequence[Offer], in_question: Sequence[str]) -> str:
    """Text of `lab offer`."""
    out = [f"in question under {law}, so that no pair learns from {'it' if len(in_question) == 1 else 'them'}: "
           f"{', '.join(in_question)}; blendtui lab list --law {law} says why"] if in_question else []
    if not offers:
        lines = [f"the measured blends teach nothing under {law} yet: record blends, best of two stocks alone"]
    else:
        lines = [f"what the measured blends could teach under {law}"]
    lines += [wrap(harmless(each), "  ") for each in out]
    for offer in offers:
        lines += ["", *_wrapped(offer_words(offer))]
    return "\n".join(lines)


def lessons_text(lessons: Sequence[Lesson]) -> str:
    """Text of `lab lessons`."""
    if not lessons:
        return "no lesson is in use; blendtui lab offer shows what could be learnt"
    return "\n\n".join("\n".join(_wrapped(lesson_words(lesson))) for lesson in lessons)


def _wrapped(sentences: Sequence[str]) -> list[str]:
    """The first as a heading, the others below it."""
    head, *others = (harmless(each) for each in sentences)
    return [wrap(head, "  "), *(wrap(f"  {each}", "    ") for each in others)]
