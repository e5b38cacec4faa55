"""The trials: blends kept under a name, reopened, and set side by side on today's stocks."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from typing import TYPE_CHECKING

from textual.widget import Widget

from blendtui import commands
from blendtui.desk import answers, blends, numbers
from blendtui.desk.errors import DeskError
from blendtui.store.errors import PlantError
from blendtui.store.harmless import harmless
from blendtui.store.records import Trial
from blendtui.widgets.grid import Cell, Column, Grid, Wide, more_only
from blendtui.widgets.paint import BOLD
from solver.errors import SolverError

from . import words
from .base import Page
from .state import TrialsState

if TYPE_CHECKING:
    from solver.recipe import Recipe

MOST = 4
LIST = (Column("mark", "", "", 2, "left"), Column("product", "product", "", 10, "left"),
        Column("name", "trial", "", 16, "left"), Column("law", "law", "", 14, "left"),
        Column("kept_at", "kept, UTC", "", 16, "left"), Column("kept_by", "by", "", 10, "left"),
        Column("note", "note", "", 24, "left"))
Key = tuple[str, str]


class TrialsScreen(Page):
    """List of trials over the comparison of those that are marked."""

    NAME = commands.TRIALS

    def __init__(self) -> None:
        super().__init__()
        self.state = TrialsState()
        self.trials = Grid(id="trials", fixed=3)
        self.comparison = Grid(id="comparison")
        self.comparison.foot = more_only
        self.comparison.active = False
        self.trials.picked = self._show_row
        self.compared: tuple[tuple[Key, ...], int, int] | None = None  # what `read` is of
        self.read: dict[Key, Recipe | str] = {}  # each marked trial on today's stocks, or why it cannot be read
        self.lines: list[tuple[str, ...]] = []

    def body(self) -> Iterable[Widget]:
        """Two tables, one above the other."""
        return self.trials, self.comparison

    @property
    def trial(self) -> Trial | None:
        """The trial under the cursor."""
        rows = self.snapshot.trials
        return rows[self.trials.row] if self.trials.row < len(rows) else None

    def refresh_page(self) -> None:
        """Show the list, and read the marked ones on today's stocks."""
        rows = self.snapshot.trials
        there = {(t.product, t.name) for t in rows}
        self.state = replace(self.state, marked=tuple(m for m in self.state.marked if m in there))
        self.trials.empty = "no trial yet: on the screen Recipe, k keeps the blend that is shown"
        self.trials.show(LIST, len(rows), self._cell)
        self._compare()
        self._show_row()
        super().refresh_page()

    def _cell(self, row: int, column: int) -> str:
        trial, code = self.snapshot.trials[row], LIST[column].code
        if code == "mark":
            key = (trial.product, trial.name)
            return "ABCD"[self.state.marked.index(key)] if key in self.state.marked else ""
        text = harmless(str(getattr(trial, code)))
        return text[:16].replace("T", " ") if code == "kept_at" else text

    def _show_row(self) -> None:
        trial, count = self.trial, len(self.snapshot.trials)
        self.title_line.show(f"trial {self.trials.row + 1} of {count}" if count else "no trials")
        if trial is None:
            self.edit.show("", "")
        else:
            self.edit.show(f"{harmless(trial.product)} {harmless(trial.name)}",
                           ", ".join(f"{harmless(c)} {numbers.pct(x)} %" for c, x in trial.shares.items()))

    # The comparison

    def _compare(self) -> None:
        asked = (self.state.marked, self.snapshot.revision, self.size.width)
        if asked == self.compared:
            return
        self.compared = asked
        wanted = [t for key in self.state.marked for t in self.snapshot.trials if (t.product, t.name) == key]
        if not wanted:
            self.lines = []
            self._show_lines([])
            return
        plant, stocks = self.program.plant, self.snapshot.stocks

        def work() -> dict[Key, Recipe | str]:
            return {(t.product, t.name): _read_today(plant, stocks, t) for t in wanted}

        def done(read: dict[Key, Recipe | str]) -> None:
            self.read = read
            self.lines = comparison(wanted, read)
            self._show_lines(wanted)

        self.program.task(work, done)

    def _show_lines(self, wanted: list[Trial]) -> None:
        width = max(12, min(24, (self.size.width - 26) // max(1, len(wanted)) - 1))
        shown = (Column("what", "compared", "", 24, "left"),
                 *(Column(t.name, f"{'ABCD'[n]} {harmless(t.name)}", "", width) for n, t in enumerate(wanted)))
        self.comparison.empty = "Space marks a trial; up to four stand here side by side, read on today's stocks"
        self.comparison.show(shown, len(self.lines), self._line)

    def _line(self, row: int, column: int) -> Cell:
        text = self.lines[row][column]
        if column == 0 and not any(self.lines[row][1:]):
            text = Wide(text)
        return (text, BOLD) if text.startswith("!") or text.isupper() else text

    # Commands

    def move(self, key: str) -> None:
        """Move in the list or in the comparison."""
        if self.state.comparing:
            self.comparison.move(key)
        elif self.trials.move(key):
            self._show_row()

    def spare(self) -> int:
        """Blank lines under the comparison."""
        return self.comparison.size.height - self.comparison.needs()

    def do_pane(self) -> None:
        """From the list to the comparison, and back."""
        self.state = replace(self.state, comparing=not self.state.comparing)
        self.trials.activate(not self.state.comparing)
        self.comparison.activate(self.state.comparing)

    def do_mark(self) -> None:
        """Mark the trial under the cursor, or take the mark off."""
        trial = self.trial
        if trial is None:
            self.say("there is no trial here")
            return
        key = (trial.product, trial.name)
        if key in self.state.marked:
            self.state = replace(self.state, marked=tuple(m for m in self.state.marked if m != key))
        elif len(self.state.marked) == MOST:
            self.say(f"{MOST} trials stand side by side already; Space on one of them takes it off", "refused")
            return
        else:
            self.state = replace(self.state, marked=(*self.state.marked, key))
        self.refresh_page()

    def do_open(self) -> None:
        """Open the trial under the cursor on the recipe screen."""
        trial = self.trial
        if trial is None:
            self.say("there is no trial here")
            return
        if self.snapshot.product(trial.product) is None:
            self.say(f"the product {harmless(trial.product)} is out of use: bring it back first", "refused")
            return
        wishes = answers.Wishes(trial.product, law=trial.law, typed=dict(trial.shares))
        self.session.wish(wishes, f"trial {harmless(trial.name)} opened")
        self.program.go(commands.RECIPE)
        self.program.say(f"trial {harmless(trial.name)} on today's stocks and prices; b shows the best", "done")

    def do_drop(self) -> None:
        """Drop the trial under the cursor."""
        trial, plant = self.trial, self.program.plant
        if trial is None:
            self.say("there is no trial here")
            return
        self.program.change(lambda: blends.drop_trial(plant, trial.product, trial.name),
                            lambda told: self.program.say(f"{told}; u brings it back", "done"))


def _read_today(plant, stocks, trial: Trial) -> Recipe | str:  # type: ignore[no-untyped-def]
    try:
        target = answers.target(plant, answers.Wishes(trial.product, law=trial.law))
        return blends.compare(stocks, target, [trial])[0]
    except (DeskError, PlantError, SolverError) as error:
        return str(error)


def comparison(trials: list[Trial], read: dict[Key, Recipe | str]) -> list[tuple[str, ...]]:
    """Rows of the comparison: cost, verdict, shares, properties; the first column says what, with its unit."""
    found = [read[t.product, t.name] for t in trials]
    made = [r for r in found if not isinstance(r, str)]

    def row(what: str, each) -> tuple[str, ...]:  # type: ignore[no-untyped-def]
        return (what, *("!" if isinstance(r, str) else each(r) for r in found))

    rows = [("! " + harmless(f"{t.name}: {r}"), *("" for _ in trials)) for t, r in zip(trials, found, strict=True)
            if isinstance(r, str)]
    rows += [("! " + harmless(f"{'ABCD'[n]} {t.name}: {b}", 200), *("" for _ in trials))
             for n, (t, r) in enumerate(zip(trials, found, strict=True)) if not isinstance(r, str)
             for b in r.breaches]
    rows += [("product", *(harmless(t.product) for t in trials)), ("law", *(t.law for t in trials)),
            row("cost, /t", lambda r: numbers.cost(r.cost_per_t)),
            row("laws differ, %", lambda r: blends.marked_spread(r.spread_pct)),
            row("limits", lambda r: f"! {len(words.misses(r))} missed" if words.misses(r) else "all met"),
            row("rules", lambda r: f"! {len(r.breaches)} broken" if r.breaches else "kept"),
            ("SHARES, mass %", *("" for _ in trials))]
    codes = dict.fromkeys(c for t in trials for c in t.shares)
    rows += [(harmless(c), *(numbers.pct(t.shares[c]) if c in t.shares else "" for t in trials)) for c in codes]
    rows.append(("PROPERTIES", *("" for _ in trials)))
    properties = dict.fromkeys(c for r in made for c, v in r.predicted.items() if v is not None)
    for code in properties:
        unit = words.unit(code)
        rows.append(row(f"{words.heading(code)}{', ' + unit if unit else ''}",
                        lambda r, code=code: numbers.value(code, r.predicted.get(code))))
    return rows
