"""What every step of a batch begins with: the batch as it stands, and what is in its vessel as the solver takes it."""

from __future__ import annotations

import json
import unicodedata
from collections.abc import Mapping
from dataclasses import asdict, replace
from datetime import UTC, datetime
from typing import Any

from blendtui.store.batch_records import DROPPED, FLUSH, HEEL, LINE, OPEN, Charge, Content, Made
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from solver.stocks import Stock
from solver.target import Limit, ShareRule, Target

from .errors import DeskError

DATUM = ("kv40", "kv100", "density15")  # values that a stock has fields for
NAMES = {HEEL: "HEEL", LINE: "LINE", FLUSH: "FLUSH"}  # codes under which contents stand among the stocks
CODE = "BATCH"  # and under which a measured batch does


class Questioned(DeskError):
    """What is unlikely: nothing was done, and the same step with sure=True is."""


def question(sure: bool, words: str) -> None:
    """Ask, unless the answer was given: what is odd, and what to do if it is so."""
    if not sure:
        raise Questioned(words)


def opened(plant: Plant, name: str) -> Made:
    """A batch that is still open; DeskError says who closed another one, and when."""
    made = plant.batch(name)
    if made.head.state != OPEN:
        head = made.head
        raise DeskError(f"{harmless(name, 40)} is {head.state} ({harmless(head.closed_by, 40)}, "
                        f"{when(head.closed_at)}); its record stands")
    return made


def next_name(plant: Plant) -> str:
    """The plant's own name for the next batch: B-0001, B-0002 …; none is ever used twice, however it was undone."""
    numbers = [int(name[2:]) for name in plant.batch_names() if name.startswith("B-") and name[2:].isdigit()]
    return f"B-{1 + max(numbers, default=0):04d}"


def person(plant: Plant, by: str) -> str:
    """Who did it: the name typed, else the login name."""
    return harmless(by.strip(), 60) or plant.who


def same_person(one: str, other: str) -> bool:
    """Are two typed names the same, whatever their case, blanks and points, and however an accent is spelt?"""
    first, second = ("".join(sign for sign in unicodedata.normalize("NFKC", name).casefold() if sign.isalnum())
                     for name in (one, other))
    return first == second


def when(iso: str) -> str:
    """A time of the record as a person of the plant reads it: local, to the minute."""
    if not iso:
        return ""
    try:
        return f"{datetime.fromisoformat(iso.replace('Z', '+00:00')).astimezone():%Y-%m-%d %H:%M}"
    except ValueError:
        return harmless(iso, 30)


def moment(typed: str) -> str:
    """A time as typed (2026-03-04 14:30, local; 14:30 is today's) as the record keeps it; DeskError for another."""
    text = typed.strip()
    try:
        if len(text) <= 5 and ":" in text:
            text = f"{datetime.now():%Y-%m-%d} {text.zfill(5)}"
        read = datetime.fromisoformat(text.replace("Z", "+00:00")).astimezone(UTC)
    except (ValueError, OverflowError):
        raise DeskError(f"{harmless(typed, 40)!r} is no time; type one such as 2026-03-04 14:30, or 14:30 for today"
                        ) from None
    return read.isoformat(timespec="milliseconds").replace("+00:00", "Z")


# The formula, kept as it was when the order was taken

def freeze(target: Target) -> str:
    """A target as one JSON text: limits, rules, law and whole-number rules; what is of the day is left out."""
    kept: dict[str, Any] = {
        "grade": target.grade, "law": target.law, "limits": [asdict(x) for x in target.limits],
        "rules": [asdict(x) for x in target.rules], "max_cost_per_t": target.max_cost_per_t,
        "max_stocks": target.max_stocks, "min_share": target.min_share, "only_listed": target.only_listed}
    return json.dumps(kept, ensure_ascii=False, sort_keys=True, separators=(",", ":"))


def target_of(plant: Plant, made: Made) -> Target:
    """The frozen target of a batch for the whole of its vessel, with the laboratory's lessons of today."""
    kept = json.loads(made.head.formula)
    return Target(made.head.product, tuple(Limit(**x) for x in kept["limits"]),
                  tuple(ShareRule(**x) for x in kept["rules"]), kept["grade"], kept["law"], made.head.batch_kg,
                  kept["max_cost_per_t"], kept["max_stocks"], kept["min_share"], kept["only_listed"],
                  lessons=tuple(x.taught for x in plant.lessons()))


# What is in the vessel

def cells_of(stock: Stock) -> dict[str, float]:
    """The values of a stock at this moment, as a charge or a content keeps them: KVs as it blends."""
    pair = stock.blending_kv or (None, None)
    found = dict(zip(DATUM, (*pair, stock.density15), strict=True))
    return {code: value for code, value in found.items() if value is not None} | dict(stock.values)


def as_stock(code: str, cells: Mapping[str, float], like: Stock | None = None, **more: Any) -> Stock:
    """Values that were kept, as a stock again; what has no value of its own (kind, group, oil) is that of `like`."""
    given = {name: cells.get(name) for name in DATUM}
    values = {c: v for c, v in cells.items() if c not in DATUM}
    base = like or Stock(code)
    return replace(base, code=code, blend_kv40=None, blend_kv100=None, values=values, division_kg=None,
                   package_kg=None, least_charge_kg=None, **given, **more)


def by_code(plant: Plant) -> dict[str, Stock]:
    """Every stock there ever was, by its code."""
    return {s.code: s for s in plant.stocks(include_retired=True)}


def made_of(parts: Mapping[str, float], stocks: Mapping[str, Stock]) -> tuple[tuple[Stock, float], ...]:
    """What something was made of, as share rules count it; stocks that the plant never had count for nothing."""
    return tuple((stocks[code], part) for code, part in parts.items() if code in stocks)


def held(made: Made) -> list[tuple[Content | Charge, float]]:
    """What is in the vessel now and its kg [kg]: what left it was drawn from everything that was there by then."""
    masses: list[tuple[Content | Charge, float]] = [(c, c.kg) for c in made.contents if c.counts and c.kg > 0.0]
    came = [(c.at, 0, c) for c in made.charged]
    went = [(o.at, 1, o) for o in made.outcomes]
    gone = 0.0  # kg since the last charge: what is taken back of them is of the same oil
    for _, leaves, event in sorted([*came, *went], key=lambda each: each[:2]):
        if leaves:
            gone += event.kg  # type: ignore[union-attr]
            continue
        there = sum(kg for _, kg in masses)
        # More than was there left before a charge that was corrected away and entered anew: it left of that charge.
        now = min(gone, there) if there > 0.0 else 0.0
        masses = [*_without(masses, now), (event, event.actual_kg or 0.0)]  # type: ignore[list-item, union-attr]
        gone -= now
    return _without(masses, gone)


def _without(masses: list[tuple[Content | Charge, float]], kg: float) -> list[tuple[Content | Charge, float]]:
    """Masses after so many kg left them all in proportion."""
    there = sum(mass for _, mass in masses)
    left = max(0.0, there - kg) / there if there > 0.0 else 0.0
    return [(thing, mass * left) for thing, mass in masses]


def in_vessel(made: Made, stocks: Mapping[str, Stock]) -> list[Stock]:
    """Everything that is in the vessel, each as a stock: contents, but no heel that is ignored, then charges."""
    found: list[Stock] = []
    for thing, kg in held(made):
        if isinstance(thing, Charge):
            found.append(charge_stock(thing, stocks, kg))
        elif thing.what == FLUSH or not made.head.heel_ignored:
            name = NAMES.get(thing.what, thing.what.upper())
            taken = any(s.code == name for s in found)
            found.append(content_stock(thing, f"{name} {thing.line}" if taken else name, stocks, kg))
    return [stock for stock in found if stock.in_vessel_kg]


def content_stock(content: Content, code: str, stocks: Mapping[str, Stock], kg: float) -> Stock:
    """A heel, line or flush as a stock of which so many kg are in the vessel."""
    like = stocks.get(content.stock)
    parts = content.parts or ({content.stock: 1.0} if like is not None else {})
    # Nobody chose them for this recipe: the most stocks of a product counts none of them.
    inside = tuple((replace(s, in_vessel_kg=part * kg), part) for s, part in made_of(parts, stocks))
    return as_stock(code, content.cells, like, name=content.what, kind="base", oil="", in_vessel_kg=kg,
                    on_hand_kg=None, contents=inside, price_per_t=None, sigmas={},
                    source="own" if content.source == "measured" else like.source if like is not None else "typical")


def charge_stock(charge: Charge, stocks: Mapping[str, Stock], kg: float) -> Stock:
    """A charge that was made as a stock of which so many kg are in the vessel, with the values it had then."""
    return as_stock(f"{charge.stock} (charge {charge.line})", charge.cells, stocks.get(charge.stock), in_vessel_kg=kg,
                    contents=made_of({charge.stock: 1.0}, stocks), on_hand_kg=None, oil="")


def composition(made: Made) -> dict[str, float]:
    """Stock → mass fraction of what is in the vessel, a heel by what it was made of; unknown origin left out."""
    masses: dict[str, float] = {}
    for thing, kg in held(made):
        known = thing.parts if isinstance(thing, Content) else {}
        for code, part in (known or ({thing.stock: 1.0} if thing.stock else {})).items():
            masses[code] = masses.get(code, 0.0) + part * kg
    total = sum(kg for _, kg in held(made))
    return {code: kg / total for code, kg in masses.items()} if total > 0.0 else {}


# How it stands

def stage(made: Made) -> str:
    """Where a batch stands, in a few words."""
    head = made.head
    if head.state != OPEN:
        return head.state
    if made.to_charge:
        todo, all_of = len(made.to_charge), sum(c.state != DROPPED for c in made.charges)
        return f"to charge, {todo} of {all_of} left" if made.charged else "planned"
    if not any(s.round == made.rounds for s in made.samples):
        return "to be sampled"
    last = max(s.sample for s in made.samples)
    if not any(r.sample == last and not r.withdrawn for r in made.results):
        return "in the laboratory"
    decided = [d for d in made.decisions if d.sample == last]
    return decided[-1].decision if decided else "to be decided"


def unchecked(made: Made) -> tuple[Charge, ...]:
    """Charges that were made and that no second person has checked."""
    return tuple(c for c in made.charged if not c.checked_by)
