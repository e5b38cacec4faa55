"""Why nothing fits, and what it would take."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from typing import Any

from blendtui import commands
from blendtui.desk.answers import Answer
from blendtui.desk.errors import DeskError
from blendtui.desk.reasons import Report, limited, order_of, reasons
from blendtui.store.harmless import harmless
from blendtui.widgets.paint import BAD, BOLD, PLAIN, Line

from . import words
from .report import ReportPage


class WhyScreen(ReportPage):
    """Why nothing fits, and what it would take."""

    NAME = commands.WHY

    def __init__(self) -> None:
        super().__init__()
        self.orders: dict[str, tuple[str, ...]] = {}  # product → what may give, by the operator's word

    def subject(self, answer: Answer) -> Any:
        """The target over the stocks, and the order of what may give; shares typed by hand are another matter."""
        return answer.target, answer.stocks, self.orders.get(answer.wishes.product, ())

    def work(self, answer: Answer, stale: Callable[[], bool]) -> Iterator[Report]:
        """Ever fuller reports."""
        yield from reasons(answer.stocks, answer.target, self.orders.get(answer.wishes.product, ()), stale)

    def lines(self, report: Report, width: int) -> list[Line]:
        """The report in lines; what is a heading is bold, what is missed has a sign."""
        from blendtui.desk import reason_words

        styles = {reason_words.HEAD: BOLD, reason_words.BAD: BAD}
        return [[(line, styles.get(kind, PLAIN))] for kind, line in reason_words.lines(report, width)]

    # Commands

    def do_take_changes(self) -> None:
        """Take the changes of the nearest blend as a what-if."""
        from blendtui.desk.reason_words import change_words

        report: Report | None = self.report
        if report is None or (report.status != "optimal" and report.giving is None):
            self.say("the nearest blend is still being worked out" if not self.done else "there is no nearest blend")
        elif report.status == "optimal" or report.giving is None:
            self.say("a blend exists: nothing has to give")
        elif not report.giving.moved:
            self.say(f"no change of limits helps: {'; '.join(report.giving.reasons)}")
        else:
            wishes, giving = self.session.state.wishes, report.giving
            told = "; ".join(change_words(c).partition(":")[0] for c in giving.changes)
            what = f"what-if on {harmless(wishes.product)}: {told}"
            self.session.wish(replace(wishes, moved={**wishes.moved, **giving.moved}, typed=None), what)
            self.program.go(commands.RECIPE)
            self.program.say(f"{what}. u takes it back; the product itself is as it was")

    def do_order(self) -> None:
        """Type what may give, the first one first and most."""
        answer = self.session.state.answer
        if answer is None:
            self.say("there is no recipe yet to speak of")
            return
        product, codes = answer.wishes.product, limited(answer.best)

        def then(order: tuple[str, ...]) -> None:
            self.orders[product] = order
            self.program.say(f"may give, in this order: {_names(order)}; all else stays firm" if order else
                             "every limit may give again, by the least sum of misses")
            self.refresh_page()

        self.type_checked(f"what may give, first one first (of {_names(codes)}; empty: all)",
                          _names(self.orders.get(product, ())), lambda text: order_of(_coded(text, codes), codes), then)


def _names(codes: Sequence[str]) -> str:
    return ", ".join(words.heading(code) for code in codes)


def _coded(typed: str, codes: Sequence[str]) -> str:
    """The order with what is typed as a name, or the beginning of one, as its code; DeskError names those there are."""
    found = []
    for part in (" ".join(each.split()) for each in typed.split(",")):
        able = [c for c in codes if part and part.lower() in (c, words.heading(c).lower())] or [
            c for c in codes if part and words.heading(c).lower().startswith(part.lower())]
        if part and len(able) != 1:
            raise DeskError(f"{harmless(part, 40)!r} is not limited here; what may give is {_names(codes)}, "
                            "parted by commas")
        found += able
    return ",".join(found)
