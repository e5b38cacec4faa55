"""Why nothing fits, in words: word for word what an operator reads, and the order in which the parts come."""

from __future__ import annotations

from dataclasses import replace

import pytest

from blendtui.desk import reason_words as words
from blendtui.desk.errors import DeskError
from blendtui.desk.reasons import PARTS, Report, order_of, reasons
from solver.demands import Demand
from solver.errors import TargetError
from solver.giving import Change
from solver.stocks import Stock
from solver.target import Limit, ShareRule, Target
from solver.why import Conflict, WholeNumbers


def stock(code: str, kv40: float, kv100: float, price: float, **more) -> Stock:  # type: ignore[no-untyped-def]
    return Stock(code, kv40=kv40, kv100=kv100, density15=870.0, price_per_t=price, on_hand_kg=50000.0, **more)


PLANT = (stock("LIGHT", 30.6, 5.23, 800.0, api_group="I", values={"flash": 215.0}),
         stock("HEAVY", 95.5, 10.75, 840.0, api_group="I", values={"flash": 255.0}),
         stock("CLEAN", 36.1, 6.48, 1230.0, api_group="III", values={"flash": 240.0}))
HARD = Target("HARD", (Limit("vi", 120.0, guard=2.0), Limit("kv100", None, 6.6)), (ShareRule("group III", high=0.0),))
FITS = Target("FITS", (Limit("kv40", 41.4, 50.6), Limit("vi", 95.0)))


def last(target: Target, *give: str) -> Report:
    *_, report = reasons(PLANT, target, give)
    return report


def text(report: Report, width: int = 80) -> str:
    return "\n".join(line for _, line in words.lines(report, width))


def test_the_model_sentence() -> None:
    demands = (Demand("limit", "vi", "low", 130.0, 130.0), Demand("limit", "kv100", "high", 6.6, 6.6),
               Demand("share", "group III", "high", 0.0, 0.0))
    assert words.conflict_words(Conflict(demands, demands[0], 118.2)) == (
        "VI at least 130, KV100 at most 6.6 mm²/s and no group III: the best VI reachable is 118")


@pytest.mark.parametrize(("demand", "told"), [
    (Demand("limit", "vi", "low", 163.0, 160.0), "VI at least 163 (160 and its guard)"),
    (Demand("limit", "flash", "low", 200.0, 200.0), "flash point at least 200 °C"),
    (Demand("cost", "cost_per_t", "high", 950.0, 950.0), "cost at most 950 /t"),
    (Demand("share", "LIGHT", "low", 0.125, 0.125), "at least 12.5 % LIGHT"),
    (Demand("share", "group II", "high", 0.45, 0.45), "at most 45 % group II"),
    (Demand("held", "LIGHT", "low high", 0.2, 0.2), "LIGHT held at 20 %"),
    (Demand("left out", "LIGHT", "high", 0.0, None), "LIGHT left out"),
    (Demand("list", "group III", "high", 0.0, None), "no group III"),
    (Demand("list", "vi_improver", "high", 0.0, None), "no VI improver"),
    (Demand("list", "group III", "high", 0.0, whole_family=False), "no group III but what is listed"),
    (Demand("on hand", "batch", "high", 15000.0, 15000.0), "15000 kg from what the tanks hold"),
    (Demand("most stocks", "max_stocks", "high", 1.0, 1.0), "at most 1 base stock and rework"),
    (Demand("least share", "min_share", "low", 0.03, 0.03), "at least 3 % of every base stock or rework that is used"),
])
def test_every_demand_in_words(demand: Demand, told: str) -> None:
    assert words.demand_words(demand) == told


@pytest.mark.parametrize(("of", "best", "told"), [
    (Demand("limit", "kv40", "high", 50.6), 52.073, "the lowest KV40 reachable is 52.08 mm²/s"),
    (Demand("limit", "flash", "low", 240.0), 231.4, "the highest flash point reachable is 231 °C"),
    (Demand("cost", "cost_per_t", "high", 780.0), 800.0, "the least cost reachable is 800.00 /t"),
    (Demand("share", "LIGHT", "low", 0.3), 0.21, "the most LIGHT that can be had is 21.00 %"),
    (Demand("share", "LIGHT", "high", 0.3), 0.41, "the least LIGHT that can be had is 41.00 %"),
    (Demand("held", "LIGHT", "low high", 0.3), 0.41, "the nearest share of LIGHT that can be had is 41.00 %"),
    (Demand("on hand", "batch", "high", 30000.0), 25000.0, "the largest batch is 25000 kg"),
])
def test_the_best_reachable_in_words(of: Demand, best: float, told: str) -> None:
    assert words.conflict_words(Conflict((of,), of, best)).endswith(f": {told}")


def test_a_best_never_looks_as_if_it_met_its_limit() -> None:
    of = Demand("limit", "vi", "low", 163.0)
    assert words.conflict_words(Conflict((of,), of, 162.97)).endswith("is 162.97")
    of = Demand("limit", "kv40", "high", 50.6)
    assert words.conflict_words(Conflict((of,), of, 50.6003)).endswith("is 50.6003 mm²/s")


@pytest.mark.parametrize(("of", "best", "told"), [
    (Demand("limit", "vi", "low", 130.0), 117.6, "is 117"),
    (Demand("limit", "vi", "low", 130.0), 117.98, "is 118"),  # an extreme is found to 0.05 VI
    (Demand("limit", "vi", "high", 90.0), 95.4, "is 96"),
    (Demand("limit", "kv100", "high", 13.0), 13.8643, "is 13.87 mm²/s"),
    (Demand("limit", "pour", "high", -30.0), -20.8, "is -20 °C"),
    (Demand("cost", "cost_per_t", "high", 780.0), 800.004, "is 800.01 /t"),
    (Demand("share", "LIGHT", "low", 0.12349), 0.12347, "is 12.3470 %"),
    (Demand("share", "LIGHT", "low", 0.3), 0.12347, "is 12.34 %"),
    (Demand("on hand", "batch", "high", 5000.0), 4999.7, "is 4999.7 kg"),
])
def test_what_is_told_to_be_reachable_can_be_asked(of: Demand, best: float, told: str) -> None:
    assert words.conflict_words(Conflict((of,), of, best)).endswith(told)


def test_a_best_with_treat_rates_says_so() -> None:
    of = Demand("limit", "vi", "low", 163.0)
    assert words.conflict_words(Conflict((of,), of, 143.0, treated=True)) == (
        "VI at least 163: the best VI reachable is 143 with treat rates as asked")


def test_sets_without_a_best() -> None:
    crossed = (Demand("limit", "kv40", "low", 50.0), Demand("limit", "kv40", "high", 40.0))
    assert words.conflict_words(Conflict(crossed)) == (
        "KV40 at least 50 mm²/s and KV40 at most 40 mm²/s: cannot hold together")
    assert words.conflict_words(Conflict(()), ["A: its price is unknown"]) == (
        "no stock may serve this product: A: its price is unknown")


def test_changes_in_words() -> None:
    assert words.change_words(Change("vi", "low", 163.0, 109.0, 27.0)) == "VI at least 163 → 109: 27.0 R"
    assert words.change_words(Change("kv40", "high", 50.6, 51.7, 1.78)) == (
        "KV40 at most 50.6 mm²/s → 51.70 mm²/s: 1.78 R")
    assert words.change_words(Change("vi", "low", 152.0, 150.6, 1.2)) == "VI at least 152 → 150: 1.20 R"
    assert words.change_words(Change("cost_per_t", "high", 700.0, 735.0, 5.0)) == (
        "cost at most 700 /t → 735.00 /t: 5.00 % of itself")
    assert words.change_words(Change("vi", "low", 50.0, None, None)) == (
        "VI at least 50 → not asked: an oil below 2 mm²/s at 100 °C has no VI")


def test_whole_numbers_in_words() -> None:
    target = replace(FITS, max_stocks=2, min_share=0.1)
    assert words.whole_words(WholeNumbers(3, 0.0712), target) == (
        "only the whole-number rules (most stocks, least share) stand in the way, without them a blend exists: "
        "3 base stocks and rework would do, 2 are allowed; or a least share of 7.12 % would do, 10 % is asked")
    assert words.whole_words(WholeNumbers(None, None), target).endswith(
        "no number of stocks would do; or no least share would do")


def test_the_parts_come_one_by_one() -> None:
    seen: list[str] = []
    for report in reasons(PLANT, HARD):
        seen += [name for name in PARTS if name in report.done and name not in seen]
    assert seen == list(PARTS)
    first = next(iter(reasons(PLANT, HARD)))
    assert first.conflicts
    assert first.giving is None


def test_a_newer_wish_ends_the_work() -> None:
    assert len(list(reasons(PLANT, HARD, stale=lambda: True))) == 1


def test_the_whole_report_fits_its_width() -> None:
    laid = text(last(HARD))
    assert max(map(len, laid.splitlines())) <= 80
    told = " ".join(laid.split())
    assert told.startswith("! HARD: NO BLEND meets every limit and rule")
    assert "VI at least 122 (120 and its guard) and no group III: the best VI reachable is 10" in told
    assert "CLEAN: from" in told
    assert "Not today: the product caps group III at 0 %" in told
    assert words.DECIDES in told
    assert "taken of it: a base stock of no group" in told
    order = [told.index(x) for x in ("cannot hold together", "must give", "Within reach", "may not serve", "to buy")]
    assert order == sorted(order)


def test_a_blend_that_exists_is_said_and_its_reach_shown() -> None:
    report = last(FITS)
    assert report.status == "optimal"
    told = text(report)
    assert told.startswith("FITS: a blend exists; nothing stands in the way.")
    assert "KV40, mm²/s             30.60 to 95.50" in told
    assert "to buy" not in told


def test_the_order_is_told_and_what_is_taken_makes_a_blend() -> None:
    report = last(HARD, "vi")
    assert "The nearest blend, in your order (VI):" in text(report)
    assert set(report.giving.moved) == {("vi", "low")}
    taken = last(replace(HARD, moved=report.giving.moved))
    assert taken.status == "optimal"
    assert text(taken).startswith("HARD with your what-if: a blend exists")


def test_an_order_as_typed() -> None:
    assert order_of(" VI, flash point ,cost, kv40,, vi") == ("vi", "flash", "cost_per_t", "kv40")
    assert order_of("") == ()
    with pytest.raises(DeskError, match=r"^unknown property 'colour'"):
        order_of("colour")
    with pytest.raises(DeskError, match=r"^flash cannot give: the product sets no limit on it; it limits vi, kv100$"):
        order_of("flash", ["vi", "kv100"])
    with pytest.raises(TargetError, match=r"^flash cannot give"):
        last(HARD, "flash")
