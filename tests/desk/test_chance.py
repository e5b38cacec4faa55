"""The desk on chances: what is typed, reports part by part, recipes at a chance and their words."""

from __future__ import annotations

from dataclasses import replace

import pytest

from blendtui.desk import chance, chance_words
from blendtui.desk.errors import DeskError
from solver.stocks import Stock
from solver.target import Limit, Target

STOCKS = (
    Stock("N150", kv40=30.6, kv100=5.23, density15=868.0, price_per_t=800.0, on_hand_kg=5e4, source="own"),
    Stock("N500", kv40=95.5, kv100=10.75, density15=879.0, price_per_t=840.0, on_hand_kg=5e4, source="typical"),
    Stock("BS", kv40=480.0, kv100=31.5, density15=897.0, price_per_t=1050.0, on_hand_kg=5e4, source="certificate"))
P46 = Target("P46", (Limit("kv40", 41.4, 50.6, guard_pct=4.0), Limit("vi", 90.0)))
SHARES = {"N150": 0.62, "N500": 0.38}


@pytest.mark.parametrize(("typed", "chance_asked"), [
    ("95", 0.95), ("95%", 0.95), (" 95 % ", 0.95), ("0.95", 0.95), ("99.9", 0.999), ("50", 0.5), ("0.5", 0.5),
    ("99.9 %", 0.999)])
def test_a_chance_as_typed(typed: str, chance_asked: float) -> None:
    assert chance.confidence(typed) == chance_asked


@pytest.mark.parametrize(("typed", "said"), [
    ("", "nothing is no chance; type for example 95 or 0.95"),
    ("high", "high is no chance; type for example 95 or 0.95"),
    ("49", "a chance of 49 % cannot be asked; choose 50 to 99.9 %"),
    ("100", "a chance of 100 % cannot be asked; choose 50 to 99.9 %"),
    ("1", "a chance of 100 % cannot be asked; choose 50 to 99.9 %"),
    ("0.4 %", "a chance of 0.4 % cannot be asked; choose 50 to 99.9 %"),
    ("nan", "a chance of nan % cannot be asked; choose 50 to 99.9 %")])
def test_a_chance_that_cannot_be_asked(typed: str, said: str) -> None:
    with pytest.raises(DeskError) as refused:
        chance.confidence(typed)
    assert str(refused.value) == said


def test_a_report_comes_part_by_part_and_stops_when_it_is_stale() -> None:
    parts = list(chance.report(STOCKS, P46, SHARES, offers=True))
    assert [p.chances.chance is not None for p in parts] == [False, True, True, True, True, True]
    assert [p.tested for p in parts] == [False, False, True, True, True, True]
    assert [len(p.offers or ()) for p in parts] == [0, 0, 0, 1, 2, 3]
    assert [sure.asked for sure in parts[-1].offers or ()] == [0.9, 0.95, 0.99]
    assert len(list(chance.report(STOCKS, P46, SHARES, offers=True, stale=lambda: True))) == 1


def test_a_chance_not_reached_is_not_tried_again_at_more() -> None:
    narrow = Target("P", (Limit("kv40", 45.9, 46.1),))
    *_, last = chance.report(STOCKS[:2], narrow, SHARES, offers=True)
    offers = last.offers or ()
    assert [sure.reached for sure in offers] == [False] * 3
    assert len({sure.highest for sure in offers}) == 1
    assert any("not reached: highest" in line for _, line in chance_words.lines(last, 79))


def test_certainty_is_compared_with_both_costs() -> None:
    sure = chance.certain(STOCKS, P46, 0.95)
    assert sure.reached
    assert min(sure.chance_by_limit.values()) >= 0.95
    assert sure.unguarded_per_t < sure.guarded_per_t
    assert sure.cost_of_certainty_per_t == pytest.approx(sure.recipe.cost_per_t - sure.unguarded_per_t)
    assert sure.more_than_guarded_per_t == pytest.approx(sure.recipe.cost_per_t - sure.guarded_per_t)
    first, second = chance.certain_words(sure)
    assert first.startswith("chance on the first batch: KV at 40 °C 9")
    assert "95 % for each limit costs" in second
    assert "than with the product's guards" in second
    told = chance.certain_json(sure)
    assert told["asked"] == 0.95
    assert told["compared_with"]["guarded_cost_per_t"] == sure.guarded_per_t
    unguarded = chance.certain(STOCKS, replace(P46, limits=(Limit("kv40", 41.4, 50.6), Limit("vi", 90.0))), 0.95)
    assert unguarded.guarded_per_t == unguarded.unguarded_per_t
    assert "guards (" not in chance.certain_words(unguarded)[1].replace("without guards (", "")


def test_what_is_not_reached_has_no_cost() -> None:
    sure = chance.certain(STOCKS[:2], Target("P", (Limit("kv40", 45.9, 46.1),)), 0.95)
    assert not sure.reached
    assert sure.cost_of_certainty_per_t is None
    assert 0.0 < sure.highest < 0.95
    assert len(chance.certain_words(sure)) == 1


def test_every_line_fits_and_says_what_it_must() -> None:
    long = replace(STOCKS[0], code="A-STOCK-WITH-A-VERY-LONG-CODE-INDEED", source="certificate")
    *_, found = chance.report((long, *STOCKS[1:]), P46, {long.code: 0.62, "N500": 0.38}, {"kv40": 0.01}, blends=2000,
                              offers=True)
    for width in (79, 119):
        said = chance_words.lines(found, width)
        assert all(len(line) <= width for _, line in said), max((line for _, line in said), key=len)
    text = "\n".join(line for _, line in chance_words.lines(found, 79))
    for word in ("all limits together", "N500, typical", "the laboratory", "What to test next", "common practice",
                 "guards are not in them", "scatter of your measured blends", "What more certainty costs"):
        assert word in " ".join(text.split()), word
    # A state is told by a word, and what is doubtful by a sign.
    assert chance_words.verdict(0.995) == "high"
    assert chance_words.verdict(0.3).startswith("!")


def test_chances_are_never_shown_as_certain() -> None:
    assert chance_words.percent(1.0) == ">99.99 %"
    assert chance_words.percent(0.99995) == ">99.99 %"
    assert chance_words.percent(0.99994) == "99.99 %"
    assert chance_words.percent(0.0) == "<0.01 %"


def test_the_answer_in_json_is_complete_and_unrounded() -> None:
    near = replace(P46, limits=(Limit("kv40", 44.4, 50.6, guard_pct=4.0), Limit("vi", 90.0)))
    *_, found = chance.report(STOCKS, near, SHARES, blends=2000, seed=9)
    told = chance.report_json("P46", found)
    assert set(told) == {"product", "law", "shares_pct", "batch_kg", "seed", "blends", "law_error_from", "limits",
                         "all", "budget", "test_next", "law_next", "notes"}
    assert told["shares_pct"] == pytest.approx({"N150": 62.0, "N500": 38.0})
    assert (told["seed"], told["blends"], told["law_error_from"]) == (9, 2000, "spread of the laws")
    assert [set(x) for x in told["limits"]] == [{"property", "low", "high", "value", "sigma", "chance", "chance_error",
                                                 "chance_closed"}] * 2
    assert told["limits"][0]["low"] == 44.4  # as asked, not as guarded
    for parts in told["budget"].values():
        assert sum(p["share_of_variance_pct"] for p in parts) == pytest.approx(100.0)
    assert told["test_next"]["stock"] == "N500"
    assert told["test_next"]["chance_then"] > told["test_next"]["chance_now"]
