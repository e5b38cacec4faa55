"""Which stocks may serve a target, and why another one may not."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from .errors import StockError, TargetError
from .laws import basis_of, knows_viscosity
from .properties import Array, volume_at
from .requirements import Requirement
from .stocks import GROUPS, KINDS, Stock, StockTable
from .target import ShareRule, Target

CLOSE = 2e-6  # mass fraction to which shares are held against a rule: what a search leaves is smaller


@dataclass(frozen=True)
class LeftOut:
    """A stock that the product would allow, and why it does not serve."""

    stock: str
    reason: str
    cell: str = ""  # the cell that is unknown, if that is the reason


def check_rules(target: Target, table: StockTable) -> None:
    """TargetError when a share rule, a hold or a whole-number rule contradicts itself or names nothing."""
    names = {*table.codes, *(s.oil for s in table.stocks if s.oil), *KINDS}
    for rule in target.rules:
        group = rule.of.lower().startswith("group ")
        if (group and rule.of[6:].strip().upper() not in GROUPS) or (not group and rule.of not in names):
            raise TargetError(f"share rule on {rule.of!r}: there is no such stock, oil, kind or group; "
                              "mend the rule or add the stock", where=rule.source)
        if not 0.0 <= rule.low <= rule.high <= 1.0:
            raise TargetError(f"share rule on {rule.of}: low {100 * rule.low:g} % and high "
                              f"{100 * rule.high:g} % must be in order and within 0 to 100 %",
                              where=rule.source)
    for code, share in target.held.items():
        table.index(code)
        if not 0.0 <= share <= 1.0:
            raise TargetError(f"{code} is held at {100 * share:g} %; a share lies within 0 to 100 %",
                              where=code)
    for code in target.left_out:
        table.index(code)
    _check_sums(target, table)
    if target.max_stocks is not None and target.max_stocks < 1:
        raise TargetError("the most stocks in a recipe must be 1 or more", where=target.product)
    if target.min_share is not None and not 0.0 <= target.min_share <= 1.0:
        raise TargetError(f"the least share {100 * target.min_share:g} % must lie within 0 to 100 %",
                          where=target.product)
    for name, value in (("batch", target.batch_kg), ("cost ceiling", target.max_cost_per_t)):
        if value is not None and not (np.isfinite(value) and value > 0.0):
            raise TargetError(f"the {name} must be a number above 0, not {value:g}", where=target.product)


def _check_sums(target: Target, table: StockTable) -> None:
    """TargetError when the least shares of stocks, of kinds, of groups or of oils sum to more than 100 %."""
    oils = {s.oil for s in table.stocks if s.oil}
    families = (set(table.codes), set(KINDS), {f"group {g}" for g in GROUPS}, oils - set(table.codes))
    for family in families:
        lows: dict[str, float] = {}
        for rule in target.rules:
            name = f"group {rule.of[6:].strip().upper()}" if rule.of.lower().startswith("group ") else rule.of
            if name in family and rule.low > 0.0:
                lows[name] = max(lows.get(name, 0.0), rule.low)
        if sum(lows.values()) > 1.0 + 1e-9:
            raise TargetError(f"share rules contradict: the least shares of {', '.join(lows)} sum to "
                              f"{100 * sum(lows.values()):g} %, more than 100 %", where=target.product)


def breaches(table: StockTable, x: Array, target: Target) -> tuple[str, ...]:
    """What given shares x, shape (n,), break of a target's rules, in words: shares, list, tanks, numbers.

    Limits on properties are not looked at here: a Recipe judges them one by one.
    """
    found = []
    listed = set(candidates(table, replace(target, held={}, left_out=frozenset())))
    for rule in target.rules:
        share = float(sum(x[i] * s.part_of(rule.of) for i, s in enumerate(table.stocks)))
        if not rule.low - CLOSE <= share <= rule.high + CLOSE:
            found.append(f"{rule.of} {100 * share:.2f} %, the product asks {_span(rule)}")
    capped = {rule.of for rule in target.rules if rule.high <= 0.0}
    for i in np.flatnonzero(x > CLOSE):
        stock = table.stocks[i]
        if i not in listed and not any(stock.matches(of) for of in capped):
            found.append(f"{stock.code} is not on the product's list")
        kg, most = float(x[i]) * (target.batch_kg or 0.0), stock.available_kg
        if most is not None and kg > most * (1.0 + CLOSE) + 1e-3:
            found.append(f"{stock.code} needs {kg:,.0f} kg, {most:,.0f} kg can be pumped")
    counted = [i for i in np.flatnonzero(x > CLOSE) if table.stocks[i].counted]
    if target.max_stocks is not None and len(counted) > target.max_stocks:
        found.append(f"{len(counted)} base stocks and rework, the product allows {target.max_stocks}")
    least = target.min_share or 0.0
    found += [f"{table.codes[i]} {100 * float(x[i]):.2f} %, the least share is {100 * least:g} %"
              for i in counted if x[i] < least - CLOSE and table.codes[i] not in target.held]
    return tuple(found)


def _span(rule: ShareRule) -> str:
    if rule.low == rule.high:
        return f"{100 * rule.low:g} %"
    if rule.low <= 0.0:
        return f"at most {100 * rule.high:g} %"
    return f"at least {100 * rule.low:g} %" + (f" and at most {100 * rule.high:g} %" if rule.high < 1.0 else "")


def candidates(table: StockTable, target: Target) -> list[int]:
    """Positions of the stocks that the product permits, whatever is known of them.

    With only_listed nothing unnamed; otherwise base stocks unless capped at 0, and every other kind only
    where a line names it (by stock, oil or kind). What the operator leaves out stays out.
    """
    return [i for i, stock in enumerate(table.stocks) if stock.in_vessel_kg is not None or (
        stock.code not in target.left_out and (stock.code in target.held or _permitted(stock, target)))]


def _permitted(stock: Stock, target: Target) -> bool:
    rules = [rule for rule in target.rules if rule.of == stock.code or stock.matches(rule.of)]
    if any(rule.high <= 0.0 for rule in rules):
        return False
    # A group names base stocks only: rework of a group must be named for itself.
    named = any(stock.kind == "base" or not rule.of.lower().startswith("group ") for rule in rules)
    return named or (stock.kind == "base" and not target.only_listed)


def serving(table: StockTable, permitted: Sequence[int], target: Target,
            requirements: Sequence[Requirement]) -> tuple[list[int], tuple[LeftOut, ...]]:
    """Positions of the permitted stocks of which all that is needed is known, and the others with reasons.

    Raises TargetError, naming stock and cell, where a share rule or a hold demands a stock that is out.
    """
    viscous = np.all([knows_viscosity(law, table) for law in (target.law, *target.also_laws)], axis=0)
    keep, out = [], []
    for i in permitted:
        reason = _reason(table.stocks[i], bool(viscous[i]), target, requirements)
        if reason is not None and table.stocks[i].in_vessel_kg is not None:
            raise StockError(f"{reason.stock} is in the vessel, and {reason.reason}; type it or measure it",
                             stock=reason.stock, cell=reason.cell)
        if reason is None:
            keep.append(i)
        else:
            out.append(reason)
    _check_demands(table, keep, out, target)
    return keep, tuple(out)


def _reason(stock: Stock, viscous: bool, target: Target,
            requirements: Sequence[Requirement]) -> LeftOut | None:
    if stock.price_per_t is None and stock.in_vessel_kg is None:
        return LeftOut(stock.code, "its price is unknown", "price_per_t")
    if stock.available_kg is None:
        return LeftOut(stock.code, "its quantity is unknown", "on_hand_kg")
    if stock.blending_kv is None:
        return LeftOut(stock.code, "its KV40 and KV100 are unknown", "kv40")
    if not viscous:
        law = next(x for x in (target.law, *target.also_laws) if basis_of(x) == "volume")
        return LeftOut(stock.code, f"the law {law} needs its density, which is unknown", "density15")
    for need in requirements:
        if need.entry.basis not in ("mass", "volume") or need.unknown_ok:
            continue
        if volume_at(need.code) is not None and stock.density15 is None:
            return LeftOut(stock.code, f"its density is unknown and the product limits its {need.entry.name}",
                           "density15")
        if stock.value_of(need.code) is None:
            return LeftOut(stock.code, f"its {need.entry.name} is unknown and the product limits it",
                           need.code)
        if need.entry.basis == "volume" and stock.density15 is None:
            return LeftOut(stock.code, f"its density is unknown and {need.entry.name} mixes by volume",
                           "density15")
    if stock.available_kg <= 0.0 and stock.in_vessel_kg is None:
        return LeftOut(stock.code, "nothing pumpable is left in the tank")
    return None


def _check_demands(table: StockTable, keep: Sequence[int], out: Sequence[LeftOut], target: Target) -> None:
    unknown = {x.stock: x for x in out if x.cell}
    demands = [ShareRule(code, share) for code, share in target.held.items()]
    for rule in [r for r in target.rules if r.low > 0.0] + [d for d in demands if d.low > 0.0]:
        if any(table.stocks[i].part_of(rule.of) > 0.0 for i in keep):
            continue
        missing = next((unknown[s.code] for s in table.stocks
                        if s.matches(rule.of) and s.code in unknown), None)
        if missing:
            raise TargetError(f"stock {missing.stock}, cell {missing.cell}: at least {100 * rule.low:g} % of "
                              f"{rule.of} is demanded but {missing.reason}; enter it or change the rule",
                              where=missing.stock)
