"""How sure the first batch is, what the doubt is made of, and recipes at a chosen chance."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from typing import Any

from blendtui import commands
from blendtui.desk import blends, chance, numbers
from blendtui.desk.answers import Answer
from blendtui.widgets.paint import BOLD, DIM, PLAIN, WARN, Line, wrap

from . import words
from .report import ReportPage

Key = tuple[int, str, str]  # revision of the plant, law, product
NO_BLEND = "there is no blend to speak of: the screen Recipe says why"


class ChanceScreen(ReportPage):
    """The chance of each limit and of all, the budget, what to test, what more certainty costs."""

    NAME = commands.CHANCE

    def __init__(self) -> None:
        super().__init__()
        # What the plant's own measured blends say of the law, read in the plant's thread; None: nothing yet.
        self.law_sigmas: dict[Key, Mapping[str, float] | None] = {}
        self._learning: Key | None = None

    # The report

    def refresh_page(self) -> None:
        """Show what is there; ask first how far the law is known to be out."""
        answer = self.session.state.answer
        if answer is not None and self._law_of(answer) not in self.law_sigmas:
            self._learn(self._law_of(answer))
        super().refresh_page()

    def _law_of(self, answer: Answer) -> Key:
        return self.snapshot.revision, answer.target.law, answer.target.product

    def _learn(self, key: Key) -> None:
        if self._learning == key:
            return
        self._learning = key
        plant, (_, law, product) = self.program.plant, key

        def read() -> Mapping[str, float] | None:
            from blendtui.desk.law_error import law_sigma

            return law_sigma(plant, law, product)

        def done(found: Mapping[str, float] | None) -> None:
            self.law_sigmas = {key: found}  # of this revision only: an older one is asked no more
            self._learning = None
            self.refresh_page()

        self.program.task(read, done)

    def subject(self, answer: Answer) -> Any:
        """The blend that is shown, its target, the stocks and the law's error; while that is read, what was asked."""
        key, shown = self._law_of(answer), self.session.shown
        if key not in self.law_sigmas:
            return self.asked
        return dict(shown.shares or {}) if shown else {}, answer.target, answer.stocks, self.law_sigmas[key]

    def work(self, answer: Answer, stale: Callable[[], bool]) -> Iterator[Any]:
        """In a thread: closed form and budget, drawn chances, what to test, the price of certainty."""
        shares, target, stocks, sigma = self.asked
        total = sum(shares.values())
        if total > 0.0:
            # Shares being typed need not sum to 100 % yet: the blend is that of the same proportions.
            even = {code: share / total for code, share in shares.items() if share > 0.0}
            yield from chance.report(stocks, target, even, sigma, offers=True, stale=stale)

    def lines(self, report: chance.Report, width: int) -> list[Line]:
        """The report in lines; what is doubtful has a sign."""
        from blendtui.desk import chance_words

        styles = {chance_words.HEAD: BOLD, chance_words.MARK: WARN, chance_words.DIM: DIM}
        made: list[Line] = [[(line, styles.get(kind, PLAIN))] for kind, line in chance_words.lines(report, width)]
        after = next((n for n, line in enumerate(made) if not line[0][0]), len(made))  # the table of chances
        return [*made[:after], *self._laws(width), *made[after:]]

    def _laws(self, width: int) -> list[Line]:
        """How far the laws are apart on the blend that is shown, for viscosities stand above."""
        shown = self.session.shown
        told = shown and [f"{words.heading(code)} {numbers.fixed(spread, 1)} %"
                          for code, spread in shown.spread_pct.items() if spread is not None]
        if not shown or not told:
            return []
        warning = blends.spread_words(shown)
        line = f"{'! ' if warning else ''}spread of the laws: {', '.join(told)}" + (f": {warning}" if warning else "")
        return [[(part, WARN if warning else PLAIN)] for part in wrap(line, width, "  ")]

    def show_report(self) -> None:
        """The report, or that there is nothing to report on."""
        super().show_report()
        if self.done and self.report is None and not self.refusal:
            self.text.show([[(NO_BLEND, PLAIN)]])

    # Commands

    def do_next_chance(self) -> None:
        """Ask for the recipe at the next of 90, 95 and 99 %, or for none."""
        now = self.session.state.wishes.confidence
        later = [c for c in chance.OFFERED if now is None or c > now + 1e-9]
        self._wish(later[0] if later else None)

    def do_sure(self) -> None:
        """Type the chance at which each limit is to be met."""
        now = self.session.state.wishes.confidence
        self.type_checked("chance of each limit, % (50 to 99.9; empty: none)",
                          "" if now is None else f"{100.0 * now:.4g}",
                          lambda text: chance.confidence(text) if text else None, self._wish)

    def _wish(self, asked: float | None) -> None:
        if asked is None and self.session.state.wishes.confidence is None:
            self.say("no chance is asked: the recipe is the least-cost one")
            return
        what = "no chance asked" if asked is None else words.chance(self.session.state.wishes, asked)
        self.session.wish(replace(self.session.state.wishes, confidence=asked, whole=False, typed=None), what)
        self.program.say(f"{what}; u takes it back")
        self.refresh_page()

    def do_take(self) -> None:
        """Take the shares of the blend that is shown, and go to the recipe."""
        shown = self.session.shown
        if shown is None or not shown.shares:
            self.say("there is no blend to take yet")
            return
        self.session.wish(replace(self.session.state.wishes, typed=dict(shown.shares)), "shares taken")
        self.program.go(commands.RECIPE)
        self.program.say("shares taken; type over them with Enter, u takes it back", "done")
