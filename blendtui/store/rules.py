"""Share rules that contradict each other: one check for catalogues and for edits."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from solver.stocks import GROUPS, KINDS, Stock

CLOSE = 1e-9


@dataclass(frozen=True)
class Rule:
    """A share rule with what names it in a message."""

    of: str
    low: float  # mass %
    high: float


def contradictions(rules: Sequence[Rule], stocks: Iterable[Stock]) -> list[tuple[int, str, str]]:
    """(position of a rule, what is wrong, what would do) for every contradiction that can be proved."""
    found = [(i, f"low {r.low:g} is above high {r.high:g}", "swap or mend them")
             for i, r in enumerate(rules) if r.low > r.high]
    if found:
        return found
    lows, highs = _tightest(rules)
    for i, rule in enumerate(rules):
        if rule.low == lows[rule.of] and rule.low > highs[rule.of]:
            found.append((i, f"its low {rule.low:g} is above the high {highs[rule.of]:g} of another line on "
                             f"{rule.of}", "mend one of the two"))
    known = {s.code: s for s in stocks}
    demanded = {of: low for of, low in lows.items() if of in known and low > 0.0}
    last = max((i for i, r in enumerate(rules) if r.of in demanded), default=0)
    if sum(demanded.values()) > 100.0 + CLOSE:
        found.append((last, f"the lows of {_names(demanded)} sum to {sum(demanded.values()):g} %, more than "
                            "100 %", "lower one of them"))
    for family in (KINDS, tuple(f"group {g}" for g in GROUPS), {s.oil for s in known.values() if s.oil} - set(known)):
        apart = {of: low for of, low in lows.items() if of in family and low > 0.0}
        if sum(apart.values()) > 100.0 + CLOSE:
            last = max(i for i, r in enumerate(rules) if r.of in apart)
            found.append((last, f"the lows of {_names(apart)} sum to {sum(apart.values()):g} %, more than "
                                "100 %", "lower one of them"))
    for i, cap in enumerate(rules):
        inside = {of: low for of, low in demanded.items() if of != cap.of and known[of].matches(cap.of)}
        if sum(inside.values()) > cap.high + CLOSE:
            found.append((i, f"its high {cap.high:g} is below what {_names(inside)} must have, "
                             f"{sum(inside.values()):g} %", "raise the high or lower the other rules"))
    return found


def _tightest(rules: Sequence[Rule]) -> tuple[dict[str, float], dict[str, float]]:
    lows: dict[str, float] = {}
    highs: dict[str, float] = {}
    for rule in rules:
        lows[rule.of] = max(rule.low, lows.get(rule.of, 0.0))
        highs[rule.of] = min(rule.high, highs.get(rule.of, 100.0))
    return lows, highs


def _names(shares: Iterable[str]) -> str:
    names = list(shares)
    return ", ".join(names[:4]) + (f" and {len(names) - 4} more" if len(names) > 4 else "")
