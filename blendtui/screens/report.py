"""ReportPage: a screen that shows a longer report on the recipe all screens speak of, part by part as it comes.

A screen that is one says what its report is of (`subject`), works it out in a thread (`work`, a generator that
yields ever fuller reports and looks at `stale`), and lays it out (`lines`). A report that comes late is dropped.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterable, Iterator
from typing import Any

from textual.widget import Widget

from blendtui.desk.answers import Answer, Wishes
from blendtui.desk.errors import DeskError
from blendtui.store.errors import PlantError
from blendtui.store.harmless import harmless
from blendtui.widgets.head import Head
from blendtui.widgets.page_text import PageText
from blendtui.widgets.paint import BAD, PLAIN, Line, cut_line, wrap
from solver.errors import SolverError

from . import messages, words
from .asker import fault
from .base import Page


class ReportPage(Page):
    """Head, and a text that grows while its report is worked out."""

    def __init__(self) -> None:
        super().__init__()
        self.head = Head()
        self.text = PageText(id="text")
        self.text.active = True
        self.asked: Any = None  # what the newest report is of
        self.wishes: Wishes | None = None  # of the newest report: with others one reads from the top
        self.request = 0
        self.report: Any = None
        self.refusal = ""
        self.done = False
        self._newer = threading.Event()

    def body(self) -> Iterable[Widget]:
        """The head and the text."""
        return self.head, self.text

    # What a screen fills in

    def subject(self, answer: Answer) -> Any:
        """What the report is of: on another it is worked out anew."""
        return answer.wishes, answer.target, answer.stocks

    def work(self, answer: Answer, stale: Callable[[], bool]) -> Iterator[Any]:
        """In a thread, without the plant: ever fuller reports. Stop when `stale()`."""
        yield from ()

    def lines(self, report: Any, width: int) -> list[Line]:
        """The report as text of this width."""
        return []

    # Asking and showing

    def refresh_page(self) -> None:
        """Show what is there, and ask for what is not."""
        state = self.session.state
        self.title_line.show(harmless(self.session.product))
        if state.error:
            self.text.show([[(line, BAD)] for line in wrap(f"! {state.error}", self.size.width)])
        elif state.answer is not None and not state.waiting:
            wanted = self.subject(state.answer)
            if wanted != self.asked:
                self._ask(state.answer, wanted)
            self.show_report()
        self._show_head()
        super().refresh_page()

    def _show_head(self) -> None:
        """The recipe in a line that is seen to be cut; below it, wherever one reads, that more is to come."""
        more = "working it out …" if self.report is None else "working out more …"
        self.head.show([cut_line(words.summary(self.session), self.size.width),
                        [("" if self.done or self.session.state.error else more, PLAIN)]])

    def _ask(self, answer: Answer, wanted: Any) -> None:
        self._newer.set()
        self._newer = newer = threading.Event()
        if answer.wishes != self.wishes:
            self.text.top = 0
        self.wishes = answer.wishes
        self.asked, self.request, self.report, self.refusal, self.done = wanted, self.request + 1, None, "", False
        number = self.request
        self.program.run_worker(lambda: self._work(number, answer, newer), thread=True, group=self.NAME,
                                exclusive=True, exit_on_error=False)

    def _work(self, number: int, answer: Answer, newer: threading.Event) -> None:
        tell, last = self.program.post_message, None
        self.program.asker.at_work += 1
        try:
            for last in self.work(answer, newer.is_set):
                if newer.is_set():
                    return
                tell(messages.Reported(self.NAME, number, last))
            tell(messages.Reported(self.NAME, number, last, last=True))
        except (PlantError, DeskError, SolverError) as error:
            tell(messages.Reported(self.NAME, number, refusal=str(error), last=True))
        except Exception as error:  # an operator is told in a line, and may go on
            tell(messages.Reported(self.NAME, number, refusal=fault(error), last=True))
        finally:
            self.program.asker.at_work -= 1

    def take_report(self, message: messages.Reported) -> None:
        """A report came; a late one is dropped."""
        if message.request == self.request:
            self.report = message.report if not message.refusal else self.report
            self.refusal, self.done = message.refusal, message.last
            self.show_report()
            self._show_head()
            self.show_keys()

    def show_report(self) -> None:
        """Lay the report for this width."""
        width = max(20, self.size.width - 1)
        shown: list[Line] = [[(line, BAD)] for line in wrap(f"! {self.refusal}", width)] if self.refusal else []
        if self.report is not None:
            shown += self.lines(self.report, width)
        self.text.show(shown)

    def on_resize(self) -> None:
        """Lay everything for the new size."""
        self.refresh_page()

    def spare(self) -> int:
        """Blank lines under the text."""
        return self.text.size.height - len(self.text.lines)

    def move(self, key: str) -> None:
        """Move in the text."""
        self.text.move(key)
