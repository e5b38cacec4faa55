"""How sure a first batch is: chances, what the doubt is made of, what to test, and recipes at a chosen chance."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from solver.stocks import Stock, StockTable
from solver.target import Target

from .errors import DeskError

if TYPE_CHECKING:
    from solver.confidence import Chances
    from solver.recipe import Recipe

BLENDS, SEED = 100_000, 1
OFFERED = (0.9, 0.95, 0.99)  # chances whose price is shown
TIME_LIMIT = 10.0  # s, of one recipe at a chance


@dataclass(frozen=True)
class Sure:
    """A recipe at a chosen chance, and what its certainty costs. Chances 0–1, in closed form."""

    recipe: Recipe
    asked: float
    reached: bool
    chance_by_limit: Mapping[str, float]
    chance_all: float | None
    highest: float | None  # where the asked one is not reached: the highest found that every limit has
    unguarded_per_t: float | None  # least cost that meets the limits as asked
    guarded_per_t: float | None  # least cost that keeps the product's guards

    @property
    def cost_of_certainty_per_t(self) -> float | None:
        """What it costs more than the least cost that meets the same limits without guards."""
        return self._more_than(self.unguarded_per_t)

    @property
    def more_than_guarded_per_t(self) -> float | None:
        """What it costs more (or, below 0, less) than the product's own recipe with its guards."""
        return self._more_than(self.guarded_per_t)

    def _more_than(self, other: float | None) -> float | None:
        cost = self.recipe.cost_per_t
        return None if cost is None or other is None or not self.reached else cost - other


@dataclass(frozen=True)
class Report:
    """What is known so far of one blend. A part is None until it has been worked out."""

    target: Target
    stocks: tuple[Stock, ...]
    chances: Chances
    fitted: bool  # is the law's error that of measured blends
    tested: bool = False  # has it been worked out what to test
    offers: tuple[Sure, ...] | None = None  # recipes at the chances that are offered


def confidence(typed: str) -> float:
    """A chance as typed (95, 95%, 0.95), as 0–1; DeskError outside 50 to 99.9 %.

    >>> confidence("95"), confidence("95 %"), confidence("0.95"), confidence("99.9")
    (0.95, 0.95, 0.95, 0.999)
    """
    text = typed.strip()
    percent = text.endswith("%")
    try:
        value = float(text.removesuffix("%").strip())
    except ValueError:
        raise DeskError(f"{typed.strip() or 'nothing'} is no chance; type for example 95 or 0.95") from None
    chance = round(value / 100.0 if percent or value > 1.0 else value, 12)
    if not 0.5 <= chance <= 0.999:
        raise DeskError(f"a chance of {100.0 * chance:.6g} % cannot be asked; choose 50 to 99.9 %")
    return chance


def report(stocks: Sequence[Stock], target: Target, shares: Mapping[str, float],
           law_sigma: Mapping[str, float] | None = None, *, blends: int = BLENDS, seed: int = SEED,
           offers: bool = False, stale: Callable[[], bool] = lambda: False) -> Iterator[Report]:
    """How sure a first batch of these shares [mass fraction] is, ever fuller; ends early when `stale`.

    First the closed form and the budget, then the drawn chances, what to test, and (with `offers`) the price of
    90, 95 and 99 %. Raises SolverError in one line.
    """
    from solver.confidence import draw, first, subject, what_to_test

    of = subject(StockTable(stocks), shares, target, law_sigma=law_sigma)
    found = Report(target, tuple(stocks), first(of), law_sigma is not None)
    yield found
    if stale():
        return
    found = replace(found, chances=draw(of, found.chances, blends, seed))
    yield found
    if stale():
        return
    test_next, law_next = what_to_test(of)
    found = replace(found, chances=replace(found.chances, test_next=test_next, law_next=law_next), tested=True)
    yield found
    made: tuple[Sure, ...] = ()
    for asked in OFFERED if offers else ():
        if stale():
            return
        # What is not reached at less is not reached at more.
        made = (*made, certain(stocks, target, asked, law_sigma) if not made or made[-1].reached
                else replace(made[-1], asked=asked))
        yield replace(found, offers=made)


def certain(stocks: Sequence[Stock], target: Target, confidence: float,
            law_sigma: Mapping[str, float] | None = None, time_limit: float = TIME_LIMIT) -> Sure:
    """The least-cost recipe whose every limit as asked is met with this chance (0.5 to 0.999) on the first batch.

    It is compared with the least cost that meets the same limits, without guards and with them.
    """
    from solver.certain import certain as at_chance

    from . import blends

    table = StockTable(stocks)
    found = at_chance(table, target, confidence, law_sigma=law_sigma, time_limit=time_limit)
    guarded = found.plain_cost_per_t
    if any(x.guard or x.guard_pct for x in target.limits):
        own = blends.best(stocks, target, time_limit)
        guarded = None if own.status == "infeasible" else own.cost_per_t
    return Sure(found.recipe, confidence, found.reached, dict(found.chances), found.together, found.highest,
                found.plain_cost_per_t, guarded)


# JSON: the README has every key

def certain_json(sure: Sure) -> dict[str, Any]:
    """The facts of a recipe at a chosen chance."""
    return {"asked": sure.asked, "reached": sure.reached, "chance_by_limit": dict(sure.chance_by_limit),
            "chance_all": sure.chance_all, "highest": sure.highest,
            "cost_of_certainty_per_t": sure.cost_of_certainty_per_t,
            "compared_with": {"unguarded_cost_per_t": sure.unguarded_per_t, "guarded_cost_per_t": sure.guarded_per_t,
                              "more_than_guarded_per_t": sure.more_than_guarded_per_t}}


def report_json(product: str, found: Report) -> dict[str, Any]:
    """The answer of `chance`."""
    got = found.chances
    test, law = got.test_next, got.law_next
    return {
        "product": product, "law": got.law, "shares_pct": {code: 100.0 * x for code, x in got.shares.items()},
        "batch_kg": found.target.batch_kg, "seed": got.seed, "blends": got.blends,
        "law_error_from": "measured blends" if found.fitted else "spread of the laws",
        "limits": [{"property": x.property, "low": x.low, "high": x.high, "value": x.value, "sigma": x.sigma,
                    "chance": x.chance, "chance_error": x.error, "chance_closed": x.closed} for x in got.limits],
        "all": {"chance": got.chance, "error": got.error, "closed": got.closed},
        "budget": {code: [{"part": p.part, "kind": p.kind, "sigma": p.sigma,
                           "share_of_variance_pct": 100.0 * p.share} for p in parts]
                   for code, parts in got.budget.items()},
        "test_next": None if test is None else {"stock": test.stock, "property": test.property, "how": test.how,
                                                "chance_now": test.now, "chance_then": test.then},
        "law_next": None if law is None else {"property": law.property, "how": law.how, "chance_now": law.now,
                                              "chance_then_at_most": law.then},
        "notes": list(got.notes)}


def certain_words(sure: Sure) -> tuple[str, ...]:
    """What there is to say of a recipe at a chosen chance, a sentence each."""
    from .chance_words import certain_sentences

    return certain_sentences(sure)
