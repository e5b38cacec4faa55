"""How sure a first batch is: the chance of each limit and of all, what the doubt is made of, what to test.

Chances speak of the limits as asked, not of those moved inward by a guard, and of the result as the laboratory
will measure it. They come twice: drawn (drawn.py, nothing to first order) and in closed form (closed.py).

Properties are taken to be off independently of viscosity but for weighing and density; a VI is not rounded; cost
is no chance.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from .allowed import candidates
from .closed import along_of, closed_chances, known, together, value_of
from .drawn import met, results
from .laws import check_law, predict
from .properties import Array
from .recipe import given
from .requirements import Requirement, required
from .rows import as_table
from .sigmas import sigma_of, source_of
from .stocks import Stock, StockTable
from .target import Target
from .uncertainty import Carried, base_values, errors_of, unweighable

BLENDS = 100_000
SEED = 1
USED = 1e-9  # mass fraction


@dataclass(frozen=True)
class Chance:
    """The chance that the limit on one property is met. Figures in its unit; None: unknown."""

    property: str
    low: float | None
    high: float | None
    value: float | None  # as predicted
    sigma: float | None  # of the measured result about it, all parts
    chance: float | None  # drawn, 0–1; None while not drawn
    error: float | None  # standard error of the drawn chance
    closed: float | None  # the same in closed form


@dataclass(frozen=True)
class Part:
    """One part of the doubt about one property."""

    part: str  # a stock's code, or what `kind` says
    kind: str  # "stock", "weighing", "law" or "laboratory"
    sigma: float  # in the property's unit
    share: float  # of the variance, 0–1


@dataclass(frozen=True)
class ToTest:
    """What to find out next, and what it would do to the chance of all limits together."""

    stock: str  # empty: the law
    property: str
    how: str  # "own test", or "laboratory blend"
    now: float
    then: float  # were its σ that of an own test; of the law: were it fitted, at most


@dataclass(frozen=True)
class Chances:
    """How sure one blend is. Chances 0–1."""

    shares: Mapping[str, float]
    law: str
    limits: tuple[Chance, ...]
    closed: float | None  # of all limits together
    budget: Mapping[str, tuple[Part, ...]]  # by property, largest part first
    notes: tuple[str, ...] = ()
    chance: float | None = None  # of all, drawn
    error: float | None = None
    blends: int = 0
    seed: int = SEED
    test_next: ToTest | None = None
    law_next: ToTest | None = None


@dataclass(frozen=True)
class Subject:
    """A blend whose chances are asked: the stocks used, shares, and the errors carried to it."""

    table: StockTable  # the stocks used, no others
    x: Array
    target: Target
    needs: tuple[Requirement, ...]
    carried: Carried
    law_sigma: Mapping[str, float] | None


def subject(stocks: StockTable | Iterable[Stock], shares: Mapping[str, float], target: Target, *,
            law_sigma: Mapping[str, float] | None = None) -> Subject:
    """A blend of these mass fractions (1 within 1e-4) as a subject of the functions below.

    law_sigma: relative standard deviation of the law by property, fitted to measured blends; None: the spread of
    the laws. Raises StockError for an unknown stock or one without viscosity or with an impossible σ, TargetError
    for shares that do not sum to 100 %, an unknown law, or a target without limits.
    """
    table = as_table(stocks)
    check_law(target.law)
    x = given(table, shares)
    needs, _ = required(target, table.where(candidates(table, target)))
    used = np.flatnonzero(x > USED)
    kept, y = table.where(used), x[used] / x[used].sum()
    predict(target.law, kept, y)  # refuses a stock that the law cannot place
    needs = tuple(need for need in needs if need.low is not None or need.high is not None)
    errors = errors_of(kept, target, needs, law_sigma)
    return Subject(kept, y, target, needs, errors.at(y), law_sigma)


# What the doubt is made of

def budget(carried: Carried, needs: Iterable[Requirement]) -> dict[str, tuple[Part, ...]]:
    """The variance of each limited property by part, in its unit, the largest first."""
    errors = carried.errors
    found = {}
    for need in needs:
        if not known(carried, need):
            continue
        along = along_of(carried, need.code)
        stocks = (np.tensordot(along, carried.stocks, 1) ** 2).sum(axis=0)
        parts = [(code, "stock", float(v)) for code, v in zip(errors.table.codes, stocks, strict=True)]
        parts.append(("weighing", "weighing", float(((along @ carried.weighing) ** 2).sum())))
        law = float(((along @ carried.law) ** 2).sum()) + float(along @ carried.even) ** 2 / 3.0
        parts.append(("law", "law", law))
        parts.append(("laboratory", "laboratory", float(((along * carried.laboratory) ** 2).sum())))
        whole = sum(v for _, _, v in parts)
        found[need.code] = tuple(sorted((Part(name, kind, float(np.sqrt(v)), v / whole if whole > 0.0 else 0.0)
                                         for name, kind, v in parts), key=lambda p: -p.share))
    return found


# The whole answer, in steps

def first(of: Subject) -> Chances:
    """What is known at once: chances in closed form and the budget."""
    each = closed_chances(of.carried, of.needs)
    parts = budget(of.carried, of.needs)
    limits = []
    for need in of.needs:
        sure = known(of.carried, need)
        sigma = float(np.sqrt(sum(p.sigma ** 2 for p in parts[need.code]))) if sure else None
        limits.append(Chance(need.code, need.low, need.high, value_of(of.carried, need.code) if sure else None, sigma,
                             None, None, each.get(need.code)))
    shares = {code: float(v) for code, v in zip(of.table.codes, of.x, strict=True)}
    return Chances(shares, of.target.law, tuple(limits), together(of.carried, of.needs), parts, _notes(of))


def draw(of: Subject, so_far: Chances, blends: int = BLENDS, seed: int = SEED) -> Chances:
    """The same with drawn chances and their standard errors. Limits whose value is unknown stay unknown."""
    needs = [need for need in of.needs if known(of.carried, need)]
    counts, together_count = dict.fromkeys((need.code for need in needs), 0), 0
    for found in results(of.carried, blends, seed) if needs else ():
        good = {need.code: met(found, need) for need in needs}
        for code, which in good.items():
            counts[code] += int(which.sum())
        together_count += int(np.logical_and.reduce(list(good.values())).sum())
    limits = tuple(replace(x, chance=counts[x.property] / blends, error=_error(counts[x.property], blends))
                   if x.property in counts else x for x in so_far.limits)
    if not needs:
        return replace(so_far, limits=limits, blends=blends, seed=seed)
    return replace(so_far, limits=limits, chance=together_count / blends, error=_error(together_count, blends),
                   blends=blends, seed=seed)


def _error(count: int, blends: int) -> float:
    """Standard error of a counted part; half a blend is added to either side, so that 0 and all are not certain."""
    p = (count + 0.5) / (blends + 1.0)
    return float(np.sqrt(p * (1.0 - p) / blends))


def chances(stocks: StockTable | Iterable[Stock], shares: Mapping[str, float], target: Target, *,
            law_sigma: Mapping[str, float] | None = None, blends: int = BLENDS, seed: int = SEED) -> Chances:
    """How sure a first batch of given shares is: first(), draw() and what to test. Errors as `subject` raises."""
    of = subject(stocks, shares, target, law_sigma=law_sigma)
    found = draw(of, first(of), blends, seed)
    test_next, law_next = what_to_test(of)
    return replace(found, test_next=test_next, law_next=law_next)


def what_to_test(of: Subject) -> tuple[ToTest | None, ToTest | None]:
    """The one measurement of a stock that raises the chance of all limits most, and what fitting the law would do.

    The first is None where no stock's value is worse than an own test or none would raise the chance by 0.01
    points; the second where the law is not the largest part of any limit's doubt.
    """
    now = together(of.carried, of.needs)
    if now is None:
        return None, None
    best: ToTest | None = None
    for i, stock in enumerate(of.table.stocks):
        for code, values in base_values(of.table, of.carried.errors.codes).items():
            if not np.isfinite(values[i]) or sigma_of(stock, code, float(values[i]))[1] <= 0.0:
                continue
            errors = errors_of(of.table, of.target, of.needs, of.law_sigma, [(stock.code, code)])
            then = together(errors.at(of.x), of.needs) or 0.0
            if then > max(now + 1e-4, best.then if best else 0.0):
                neat = source_of(stock, code) == stock.source or code not in ("kv40", "kv100")
                best = ToTest(stock.code, code, "own test" if neat else "laboratory blend", now, then)
    return best, _law_next(of, now)


def _law_next(of: Subject, now: float) -> ToTest | None:
    """What the chance would be were the law right, where it is the largest part of a limit's doubt."""
    largest = {code: parts[0] for code, parts in budget(of.carried, of.needs).items() if parts[0].kind == "law"}
    if not largest:
        return None
    code = max(largest, key=lambda c: largest[c].share)
    right = replace(of.carried, law=np.zeros_like(of.carried.law), even=np.zeros_like(of.carried.even))
    then = together(right, of.needs) or 0.0
    return ToTest("", code, "laboratory blend", now, then) if then > now + 1e-4 else None


def _notes(of: Subject) -> tuple[str, ...]:
    """What the reader must know of how the chances were come by."""
    notes = []
    unknown = [need.entry.name for need in of.needs if not known(of.carried, need)]
    if unknown:
        notes.append(f"no chance can be given for {', '.join(unknown)}: a value is unknown")
    partly = [need.entry.name for need in of.needs if need.unknown_ok and need.code in of.carried.errors.codes
              and np.any(of.carried.errors.gauges[need.code].den == 0.0)]
    if partly:
        notes.append(f"{', '.join(partly)}: speaks of the stocks whose value is known")
    divided = [s.code for s in of.table.stocks if s.division_kg]
    notes += filter(None, [unweighable(of.table, of.target, of.x)])
    if divided and of.target.batch_kg is None:
        notes.append("no batch size: weighing is taken as 0.5 % of each charge")
    return tuple(notes)

