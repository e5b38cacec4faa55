"""What else would do, and what each limit costs."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import Any

from blendtui import commands, curve
from blendtui.desk import choice_words
from blendtui.desk.answers import Answer
from blendtui.desk.choices import Asked, Choices, Swept, choices, newest_trial, sweep_of, swept
from blendtui.desk.errors import DeskError
from blendtui.store.harmless import harmless
from blendtui.store.records import Trial
from blendtui.widgets.edit_line import Ended
from blendtui.widgets.paint import BOLD, CURSOR, DIM, PLAIN, WARN, Line
from solver.errors import SolverError

from . import messages
from .asker import fault
from .report import ReportPage

STYLES = {"head": BOLD, "mark": BOLD, "warn": WARN, "dim": DIM, "": PLAIN}
CAPS: tuple[float | None, ...] = (None, 1.0, 2.0, 5.0)  # % above the least cost that an aim may cost
ROWS = 8, 16  # of a curve: on the smallest screen, and at most


@dataclass(frozen=True)
class Drawn:
    """A sweep that has come so far, or why there is none."""

    number: int
    swept: Swept | None = None
    refusal: str = ""


class ChoicesScreen(ReportPage):
    """The aims first, one of them marked; then what limits and prices are worth. A sweep stands above all."""

    NAME = commands.CHOICES

    def __init__(self) -> None:
        super().__init__()
        self.within: float | None = None
        self.stock = ""
        self.trial = ""  # name; empty: the newest
        self.chosen = 0  # the marked aim
        self.kept: Choices | None = None  # the fullest report yet
        self.drawn: Drawn | None = None
        self.sweeps = 0
        self.typed_sweep = "vi low"
        self._halt = threading.Event()

    # The report

    def subject(self, answer: Answer) -> Any:
        """The target and its stocks, and what the aims are asked."""
        return answer.target, answer.stocks, self._asked()

    def _asked(self) -> Asked:
        return Asked(within=self.within, stock=self.stock, trial=self._trial())

    def _trials(self) -> list[Trial]:
        return [t for t in self.snapshot.trials if t.product == self.session.product]

    def _trial(self) -> Trial | None:
        own = self._trials()
        return next((t for t in own if t.name == self.trial), newest_trial(own, self.session.product))

    def refresh_page(self) -> None:
        """Show what is there; a sweep of another target goes."""
        answer = self.session.state.answer
        if self.kept is not None and answer is not None and (answer.target, answer.stocks) != (
                self.kept.target, self.kept.stocks):
            self._drop_sweep()
            if answer.target.product != self.kept.target.product:
                self.stock = self.trial = ""
                self.chosen = 0
            self.kept = None
        super().refresh_page()

    def work(self, answer: Answer, stale: Callable[[], bool]) -> Iterator[Any]:
        """In a thread: the aims, the limits' costs, the prices, the ranges, how far things can move."""
        yield from choices(answer.stocks, answer.target, self.asked[2], before=self.kept, stale=stale)

    def take_report(self, message: messages.Reported) -> None:
        """A part of the report, or of the sweep."""
        if not isinstance(message.report, Drawn):
            if message.request == self.request and message.report is not None:
                self.kept = message.report
            super().take_report(message)
        elif message.report.number == self.sweeps:
            self.drawn = message.report
            self.show_report()
            if message.last:
                self._say_end(message.report)

    def _say_end(self, drawn: Drawn) -> None:
        if drawn.refusal:
            if self.is_current and not self.edit.active:
                self._ask_sweep(self.typed_sweep, whole=False)  # what cannot be read comes back to the line
            self.program.say(drawn.refusal, "refused")
        elif drawn.swept is not None:
            self.say(f"sweep {'stopped' if drawn.swept.stopped else 'done'}: its numbers stand below the curve")

    def lines(self, report: Any, width: int) -> list[Line]:
        """The sweep above, the report below with the marked aim reversed."""
        drawn = self.drawn.swept if self.drawn is not None else None
        above: list[Line] = [] if drawn is None else [*self._curve(drawn), [("", PLAIN)]]
        return above + [[(text, CURSOR if kind == "mark" and "▸" in text else STYLES[kind])]
                        for kind, text in choice_words.lines(report, width, self.chosen)]

    def _curve(self, found: Swept) -> list[Line]:
        width = max(40, self.size.width - 1)
        rows = min(ROWS[1], max(ROWS[0], self.text.size.height - 5))
        drawn = curve.draw(found, width, rows)
        made: list[Line] = [[(drawn[0], BOLD)], *([(line, PLAIN)] for line in drawn[1:])]
        if not found.done:
            made.append([(f"drawing … {len(found.points)} of {found.count}; s or Esc stops it", BOLD)])
        heads, *numbers = [line for each in curve.table(found) for line in curve.wrapped(each, width)]
        return [*made, [(heads, DIM)], *([(line, PLAIN)] for line in numbers)]

    # Aims

    def _aims(self) -> tuple[Any, ...]:
        return self.report.aims or () if isinstance(self.report, Choices) else ()

    def _mark(self, by: int) -> None:
        aims = self._aims()
        if not aims:
            self.say("there is no aim to mark yet" if not self.done else "no blend meets the target")
            return
        self.chosen = (self.chosen + by) % len(aims)
        self.show_report()
        self._into_sight()
        self.say(f"{choice_words.name_of(aims[self.chosen])}: t takes it")

    def _into_sight(self) -> None:
        at = next((n for n, line in enumerate(self.text.lines) if any("▸" in text for text, _ in line)), None)
        height = max(1, self.text.size.height)
        if at is not None and not self.text.top < at < self.text.top + height - 2:
            self.text.top = max(0, min(at - 2, len(self.text.lines) - height))
            self.text.paint()

    def do_next_aim(self) -> None:
        """Mark the next aim."""
        self._mark(1)

    def do_previous_aim(self) -> None:
        """Mark the aim before."""
        self._mark(-1)

    def do_take_aim(self) -> None:
        """Take the shares of the marked aim, and go to the recipe."""
        aims = self._aims()
        aim = aims[self.chosen] if self.chosen < len(aims) else None
        if aim is None:
            self.say("there is no blend to take yet")
        elif aim.recipe is None:
            self.say(f"{choice_words.name_of(aim)}: {aim.note}", "refused")
        else:
            name = choice_words.name_of(aim)
            wishes = replace(self.session.state.wishes, typed=dict(aim.recipe.shares))
            self.session.wish(wishes, f"{name} taken")
            self.program.go(commands.RECIPE)
            self.program.say(f"{name} taken; type over its shares with Enter, u takes it back", "done")

    def do_within(self) -> None:
        """The next cap on what an aim may cost."""
        self.within = CAPS[(CAPS.index(self.within) + 1) % len(CAPS)]
        self.say("aims at any cost the product allows" if self.within is None
                 else f"aims within {self.within:g} % of the least cost")
        self.refresh_page()

    def do_other_stock(self) -> None:
        """The next stock for most-of and least-of."""
        found = self.report
        codes = list(found.shares or {}) if isinstance(found, Choices) else []
        answer = self.session.state.answer
        codes += [c for c in (answer.allowed if answer else ()) if c not in codes]
        if not codes:
            self.say("there is no stock to speak of yet")
            return
        now = self.stock or next((a.of for a in self._aims() if a.name == "most-of"), codes[0])
        self.stock = codes[(codes.index(now) + 1) % len(codes)] if now in codes else codes[0]
        self.say(f"most of and least of {harmless(self.stock)}")
        self.refresh_page()

    def do_other_trial(self) -> None:
        """The next trial for closest."""
        names = [t.name for t in self._trials()]
        if not names:
            self.say("no trial of this product is kept: on the screen Recipe, k keeps what is shown", "refused")
            return
        now = self._trial()
        self.trial = names[(names.index(now.name) + 1) % len(names)] if now else names[0]
        self.say(f"closest to the trial {harmless(self.trial)}")
        self.refresh_page()

    # Sweeps

    @property
    def sweeping(self) -> bool:
        """Is a sweep being drawn?"""
        return self.drawn is not None and not self.drawn.refusal and (
            self.drawn.swept is None or not self.drawn.swept.done)

    def do_sweep(self) -> None:
        """Stop the sweep that is being drawn, or ask for one."""
        answer = self.session.state.answer
        if self.sweeping:
            self._halt.set()
        elif answer is None:
            self.say("there is no recipe to sweep from yet")
        else:
            self._ask_sweep(self.typed_sweep)

    def _ask_sweep(self, text: str, *, whole: bool = True) -> None:
        def then(ended: Ended) -> None:
            answer = self.session.state.answer
            if answer is not None:
                self._start_sweep(answer, ended.text.strip())

        self.type_text("sweep (property and low or high, or price and a stock; a span may follow: vi low 90 110; "
                       "empty: none)", text, then, whole=whole)

    def do_back(self) -> None:
        """Esc stops a sweep."""
        if self.sweeping:
            self._halt.set()
        else:
            self.program.do_back()

    def _drop_sweep(self) -> None:
        self._halt.set()
        self.sweeps += 1
        self.drawn = None

    def _start_sweep(self, answer: Answer, text: str) -> None:
        self._drop_sweep()
        if not text:
            self.show_report()
            self.say("no sweep")
            return
        self.typed_sweep = text
        self._halt = halt = threading.Event()
        number = self.sweeps
        self.drawn = Drawn(number)
        self.text.top = 0
        self.say(f"sweeping {harmless(text, 40)} …", "wait")
        self.program.run_worker(lambda: self._sweep(number, answer, text, halt), thread=True, group="sweep",
                                exclusive=True, exit_on_error=False)

    def _sweep(self, number: int, answer: Answer, text: str, halt: threading.Event) -> None:
        """In a thread: point by point."""
        def tell(drawn: Drawn, last: bool = False) -> None:
            self.program.post_message(messages.Reported(self.NAME, 0, drawn, last=last))

        self.program.asker.at_work += 1
        last: Swept | None = None
        try:
            for last in swept(answer.stocks, answer.target, sweep_of(answer.stocks, answer.target, text),
                              stale=halt.is_set):
                tell(Drawn(number, last))
            tell(Drawn(number, last), last=True)
        except (DeskError, SolverError) as error:
            tell(Drawn(number, refusal=str(error)), last=True)
        except Exception as error:  # an operator is told in a line, and may go on
            tell(Drawn(number, refusal=fault(error)), last=True)
        finally:
            self.program.asker.at_work -= 1
