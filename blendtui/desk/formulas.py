"""The formula of a batch: the product as it is when the order is taken, with what the customer asks besides."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import replace
from typing import Any

from blendtui.store.batch_records import Made
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.errors import SolverError
from solver.requirements import Requirement, merge
from solver.target import Limit, Target

from . import batches
from .batch_lab import property_of
from .errors import DeskError
from .reason_words import heading, unit

CUSTOMER = "customer"  # how the source of a customer's limit begins
DESIGN = "design"  # under which the formula keeps how the charges were worked out


# What the customer asks

def customer_limits(target: Target, typed: Mapping[str, tuple[str, str]], customer: str
                    ) -> tuple[tuple[Limit, ...], tuple[str, ...]]:
    """Limits that a customer asks (property → low and high as typed), and what is to be questioned of them.

    Each is held with the product's own guard on that property, for a prediction is no surer for whom it is made.
    One that is wider than the product's on a side is questioned: the product's holds there all the same.
    """
    from solver.grades import grade

    graded = grade(target.grade).limits if target.grade.strip() else ()
    product = {need.code: need for need in merge([*graded, *target.limits])} if (*graded, *target.limits) else {}
    if not product:
        raise DeskError(f"{harmless(target.product, 40)} has no limits; give it a grade or a limit before it is "
                        "ordered")
    source = f"{CUSTOMER} {harmless(customer, 40)}".strip()
    found: dict[str, Limit] = {}
    for name, sides in typed.items():
        code = property_of(name)
        if code in found:
            raise DeskError(f"the customer's {heading(code)} is given twice; give it one low and one high")
        found[code] = _limit(code, sides, source, [x for x in target.limits if x.property == code])
    wider = tuple(words for x in found.values() for words in _wider(x, product.get(x.property)))
    return tuple(found.values()), wider


def _limit(code: str, sides: tuple[str, str], source: str, own: list[Limit]) -> Limit:
    from blendtui.store import cells as check

    from .amounts import amount

    try:
        low, high = (None if not text.strip() else
                     amount(text.strip(), code) if code != "vi" else float(_number(text)) for text in sides)
    except SolverError as error:
        raise DeskError(f"the customer's {heading(code)}: {error}") from None
    if low is None and high is None:
        raise DeskError(f"the customer's {heading(code)} has neither a low nor a high; write kv40=44:48")
    if low is not None and high is not None and low > high:
        raise DeskError(f"the customer's {heading(code)}: low {low:g} is above high {high:g}; swap or mend them")
    for value in (low, high):
        if value is not None:
            try:
                check.limit_value(repr(value), code)
            except check.CellError as error:
                raise DeskError(f"the customer's {heading(code)}: {error}") from None
    guard, guard_pct = (max((getattr(x, name) for x in own), default=0.0) for name in ("guard", "guard_pct"))
    return Limit(code, low, high, guard, guard_pct, source, any(x.unknown_ok for x in own))


def _number(text: str) -> float:
    from solver.scales import parse

    return parse(text, "number")


def _wider(asked: Limit, own: Requirement | None) -> Iterator[str]:
    if own is None:
        return
    low = asked.low is not None and own.low is not None and asked.low < own.low
    high = asked.high is not None and own.high is not None and asked.high > own.high
    if low or high:
        yield (f"the customer's {heading(asked.property)} {_span(asked.low, asked.high)} is wider than the product's "
               f"{_span(own.low, own.high)} {unit(asked.property)}".rstrip()
               + ": the product's own limit holds there all the same")


def _span(low: float | None, high: float | None) -> str:
    if low is None or high is None:
        return f"at least {low:.6g}" if high is None else f"at most {high:.6g}"
    return f"{low:.6g}–{high:.6g}"


# Kept with the order

def freeze(target: Target, how: Mapping[str, Any]) -> str:
    """The formula as the record keeps it, with how its charges were worked out."""
    kept = json.loads(batches.freeze(target)) | {DESIGN: dict(how)}
    return json.dumps(kept, ensure_ascii=False, sort_keys=True, separators=(",", ":"))


def how_of(made: Made) -> dict[str, Any]:
    """How the charges of a batch were worked out."""
    return dict(json.loads(made.head.formula).get(DESIGN) or {})


def customer_limits_of(made: Made) -> tuple[Limit, ...]:
    """The customer's limits of an order."""
    return tuple(Limit(**x) for x in json.loads(made.head.formula)["limits"] if x["source"].startswith(CUSTOMER))


def changes_since(plant: Plant, made: Made) -> tuple[str, ...]:
    """What of the product is another today than in the order, by name; empty: nothing."""
    from .targets import target_of

    product = next((p for p in plant.products() if p.product == made.head.product), None)
    if product is None:
        return ("the product is out of use",)
    then = json.loads(made.head.formula)
    today = target_of(plant, made.head.product)
    now = json.loads(batches.freeze(replace(today, limits=(*today.limits, *customer_limits_of(made)))))
    said = {"grade": "grade", "law": "law", "max_cost_per_t": "most cost", "max_stocks": "most stocks",
            "min_share": "least share", "only_listed": "only listed"}
    found = [words for key, words in said.items() if then.get(key) != now[key]]
    found += [f"limit on {heading(code)}" for code in _differ(then["limits"], now["limits"], "property")]
    return tuple(found + [f"share of {harmless(of, 40)}" for of in _differ(then["rules"], now["rules"], "of")])


def _differ(one: list[dict[str, Any]], other: list[dict[str, Any]], name: str) -> list[str]:
    """Names of lines that are not the same in both."""
    def lines(of: list[dict[str, Any]], key: str) -> list[str]:
        return sorted(repr(sorted((k, v) for k, v in x.items() if k != "source")) for x in of if x[name] == key)

    return [key for key in dict.fromkeys(str(x[name]) for x in (*one, *other)) if lines(one, key) != lines(other, key)]


def target_with(target: Target, limits: tuple[Limit, ...]) -> Target:
    """The product's target with further limits; every line on a property holds."""
    return replace(target, limits=(*target.limits, *limits))
