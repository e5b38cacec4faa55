"""The laboratory: measured blends against their predictions, their drift, and what they teach."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from textual.widget import Widget

from blendtui import commands
from blendtui.desk import lab, lessons, numbers
from blendtui.store.harmless import harmless
from blendtui.store.records import Lesson
from blendtui.widgets.edit_line import Ended
from blendtui.widgets.grid import Cell, Column, Grid, more_only
from blendtui.widgets.lines import OneLine
from blendtui.widgets.paint import BAD, BOLD, PLAIN, Line, Run
from solver.errors import SolverError
from solver.measured import Measured

from . import bench, messages
from .asker import fault
from .base import Page, step

if TYPE_CHECKING:
    from solver.residuals import Residual

BLENDS = (Column("mark", "", "", 1, "left"), Column("name", "measured blend", "", 15, "left"),
          Column("kv40", "KV40", "mm²/s", 6), Column("kv40_law", "law", "", 6), Column("kv40_off", "off", "%", 6),
          Column("kv100", "KV100", "mm²/s", 6), Column("kv100_law", "law", "", 6), Column("kv100_off", "off", "%", 6),
          Column("state", "", "", 11, "left"), Column("product", "product", "", 10, "left"),
          Column("measured_on", "measured", "", 10, "left"), Column("stocks", "of", "mass %", 40, "left"),
          Column("method", "method", "", 12, "left"), Column("note", "note", "", 30, "left"))
TAUGHT = (Column("mark", "", "", 1, "left"), Column("version", "", "", 5, "left"),
          Column("of", "what is learnt", "", 21, "left"), Column("state", "", "", 13, "left"),
          Column("error", "mean off, %", "", 13), Column("blends", "blends", "", 6),
          Column("law", "law", "", 14, "left"), Column("40", "at 40 °C", "", 24, "left"),
          Column("100", "at 100 °C", "", 24, "left"))
STATES = {"": "", "confirmed": "confirmed", "questioned": "questioned", "faulty": "FAULTY"}
SIGNS = {"": "", "confirmed": "", "questioned": "?", "faulty": "!"}


@dataclass(frozen=True)
class View:
    """The laboratory's record as it was read last, under one law."""

    blends: tuple[Measured, ...]
    checked: lab.Checked
    report: lab.Report
    lessons: tuple[Lesson, ...]
    offers: tuple[lessons.Offer, ...] | None = None  # None: not asked for

    @property
    def rows(self) -> tuple[Lesson | lessons.Offer, ...]:
        """The lessons in use, then the offers."""
        return (*self.lessons, *(self.offers or ()))


def look(record: lab.Record, law: str, offering: bool) -> View:
    """Read the blends under a law, and what they could teach if that is asked for."""
    return View(record.blends, lab.checked(record, law), lab.report(record, law), record.lessons,
                tuple(lessons.offers(record, law)) if offering else None)


@dataclass(frozen=True)
class LabState:
    """Where the keys go, and what is shown."""

    learning: bool = False  # to the lessons, else to the blends
    offering: bool = False  # the offers are shown
    view: View | None = None
    results: dict[tuple[str, str], Residual] = field(default_factory=dict)  # (blend, property) → against the law


class LabScreen(Page):
    """Table of measured blends over the lessons and offers."""

    NAME = commands.LAB

    def __init__(self) -> None:
        super().__init__()
        self.state = LabState()
        self.blends = Grid(id="blends", fixed=2)
        self.blends.picked = self._show_row
        self.blends.foot = more_only
        self.alarm = OneLine(id="caution")
        self.taught = Grid(id="taught", fixed=3)
        self.taught.active = False
        self.taught.foot = more_only
        self.taught.picked = self._show_row
        self.read_for: tuple[int, str, bool] | None = None  # what the newest request is of
        self.request = 0
        self.wanted = ""  # the blend that the cursor goes to once it has been read

    def body(self) -> Iterable[Widget]:
        """The blends, a line on their drift, the lessons."""
        return self.blends, self.alarm, self.taught

    @property
    def law(self) -> str:
        """The law of the recipe that all screens speak of."""
        answer, wishes = self.session.state.answer, self.session.state.wishes
        product = self.snapshot.product(wishes.product)
        return answer.target.law if answer else wishes.law or (product.law if product else "") or "refutas"

    @property
    def blend(self) -> Measured | None:
        """The blend under the cursor."""
        rows = self.state.view.blends if self.state.view else ()
        return rows[self.blends.row] if self.blends.row < len(rows) else None

    @property
    def lesson(self) -> Lesson | lessons.Offer | None:
        """The lesson or offer under the cursor."""
        rows = self.state.view.rows if self.state.view else ()
        return rows[self.taught.row] if self.taught.row < len(rows) else None

    # Reading and showing

    def refresh_page(self) -> None:
        """Show what is there, and read it again where it has changed."""
        wanted = (self.snapshot.revision, self.law, self.state.offering)
        if wanted != self.read_for:
            self.read_for, self.request, plant = wanted, self.request + 1, self.program.plant
            number = self.request
            self.program.task(lambda: lab.read(plant), lambda record: self._look(number, record))
        self._show()
        super().refresh_page()

    def _look(self, number: int, record: lab.Record) -> None:
        if number == self.request and self.read_for is not None:
            _, law, offering = self.read_for
            self.program.asker.at_work += 1
            self.program.run_worker(lambda: self._work(number, record, law, offering), thread=True, group=self.NAME,
                                    exclusive=True, exit_on_error=False)

    def _work(self, number: int, record: lab.Record, law: str, offering: bool) -> None:
        """In a thread, without the plant."""
        tell = self.program.post_message
        try:
            tell(messages.Reported(self.NAME, number, look(record, law, offering), last=True))
        except SolverError as error:
            tell(messages.Reported(self.NAME, number, refusal=str(error), last=True))
        except Exception as error:  # an operator is told in a line, and may go on
            tell(messages.Reported(self.NAME, number, refusal=fault(error), last=True))
        finally:
            self.program.asker.at_work -= 1

    def take_report(self, message: messages.Reported) -> None:
        """The record has been looked at; what comes late is dropped."""
        if message.request != self.request:
            return
        if message.refusal:
            self.program.say(message.refusal, "refused")
            return
        view, here = message.report, self.wanted or (self.blend.name if self.blend else "")
        self.wanted = ""
        self.state = replace(self.state, view=view, results={(r.blend, r.code): r for r in view.report.rows})
        self._show(next((n for n, blend in enumerate(view.blends) if blend.name == here), None))

    def _show(self, row: int | None = None) -> None:
        view = self.state.view
        blends = view.blends if view else ()
        rows = view.rows if view else ()
        self.blends.empty = "no measured blend yet; a puts one on record" if view else "reading the record …"
        self.blends.show(BLENDS, len(blends), lambda r, c: self._cell(blends[r], BLENDS[c].code), row=row)
        self.taught.empty = ("the blends teach nothing under this law yet: record blends of two stocks alone"
                             if self.state.offering else "no lesson is in use; o shows what the blends could teach")
        self.taught.show(TAUGHT, len(rows), lambda r, c: _taught(rows[r], TAUGHT[c].code))
        self._show_row()

    def _cell(self, blend: Measured, code: str) -> Cell:
        assert self.state.view is not None
        state = self.state.view.checked.state(blend)
        if code in ("mark", "state"):
            return (SIGNS if code == "mark" else STATES)[state], BOLD
        if code == "stocks":
            return ", ".join(f"{harmless(p.stock)} {numbers.pct(p.share)}" for p in blend.parts)
        prop, _, what = code.partition("_")
        if prop in ("kv40", "kv100"):
            found = self.state.results.get((blend.name, prop))
            if not what:
                return numbers.kv(blend.values.get(prop))
            if found is None:
                return numbers.UNKNOWN
            return numbers.kv(found.predicted) if what == "law" else _off(found.off)
        return harmless(str(getattr(blend, code)))

    def _show_row(self) -> None:
        view, blend = self.state.view, self.blend
        count = len(view.blends) if view else 0
        self.title_line.show(f"blend {self.blends.row + 1} of {count}" if count else "no blends")
        self.alarm.show(*self._drift(blend))
        row = self.lesson
        if self.state.learning and row is not None:
            self.edit.show(harmless(lessons.name_of(row)), _short(row))
        elif blend is not None:
            asked = view.checked.questions.get(blend.name, ()) if view else ()
            said = asked[0].says if asked else ", ".join(f"{p.stock} {numbers.pct(p.share)} %" for p in blend.parts)
            self.edit.show(harmless(blend.name), harmless(said))
        else:
            self.edit.show("", "")

    def _drift(self, blend: Measured | None) -> Line:
        """The law that is read, and the alarms, those of the product under the cursor first."""
        if self.state.view is None:
            return []
        report = self.state.view.report
        law: Run = (f"law {report.law}{_with(report.lessons)}; ", PLAIN)
        if not report.alarms:
            return [law, ("no drift alarm", PLAIN)]
        alarms = sorted(report.alarms, key=lambda alarm: blend is None or alarm[0][0] != blend.product)
        told = [f"{harmless(product)} {code.replace('kv', 'KV')} {d.latest:+.2f} {d.unit}"
                for (product, code), d in alarms]
        return [law, ("! drift: ", BAD), (", ".join(told), PLAIN)]

    def spare(self) -> int:
        """Blank lines under the blends."""
        return self.blends.size.height - self.blends.needs()

    def on_resize(self) -> None:
        """Lay everything for the new size."""
        self._show()

    # Commands

    def move(self, key: str) -> None:
        """Move in the blends or in the lessons."""
        if (self.taught if self.state.learning else self.blends).move(key):
            self._show_row()

    def do_pane(self) -> None:
        """From the blends to the lessons, and back."""
        self._go(not self.state.learning)

    def _go(self, learning: bool) -> None:
        self.state = replace(self.state, learning=learning)
        self.blends.activate(not learning)
        self.taught.activate(learning)
        self._show_row()

    def do_tell(self) -> None:
        """Say in full what is known of the row under the cursor."""
        view, blend, row = self.state.view, self.blend, self.lesson
        if self.state.learning and row is not None:
            self.program.say(_in_full(row))
        elif view is not None and blend is not None:
            asked = view.checked.questions.get(blend.name, ())
            told = [*map(str, asked), *(lab.drift_words(drift, key) for key, drift in view.report.drifts.items()
                                        if key[0] == blend.product)]
            said = "; ".join(told) or (f"{blend.name}: nothing is doubtful of it, and its product has too few blends "
                                       "to see a drift")
            self.program.say(harmless(said), "question" if asked else "note")

    def do_confirm(self) -> None:
        """Say that what is doubtful of the blend under the cursor is so."""
        self._of_blend(lab.confirm)

    def do_drop(self) -> None:
        """Take the blend under the cursor off the record."""
        self._of_blend(lab.drop)

    def _of_blend(self, work) -> None:  # type: ignore[no-untyped-def]
        blend, plant = self.blend, self.program.plant
        if self.state.learning or blend is None:
            self.say("the cursor is on no measured blend" + ("; Tab goes there" if self.state.learning else ""))
            return
        self._change(lambda: work(plant, blend.name))

    def _change(self, work: Callable[[], str]) -> None:
        self.program.change(work, lambda told: self.program.say(f"{told}; u takes it back", "done"))

    def do_offer(self) -> None:
        """Show what the blends could teach, or hide it."""
        self.state = replace(self.state, offering=not self.state.offering)
        if self.state.offering != self.state.learning:
            self._go(self.state.offering)
        self.refresh_page()
        self.say(f"what the blends could teach under {self.law}; t takes the one under the cursor, Enter tells its "
                 "figures" if self.state.offering else "offers hidden")

    def do_take(self) -> None:
        """Take the offer under the cursor into use."""
        row, plant = self.lesson, self.program.plant
        if not self.state.learning or not isinstance(row, lessons.Offer):
            self.say("the cursor is on no offer; o shows what the blends could teach")
            return
        self._change(lambda: lessons.take(plant, row.law, row.first, row.second))

    def do_withdraw(self) -> None:
        """Take the lesson under the cursor out of use."""
        row, plant = self.lesson, self.program.plant
        if not self.state.learning or not isinstance(row, Lesson):
            self.say("the cursor is on no lesson in use" + ("" if self.state.learning else "; Tab goes to the lessons"))
            return

        def then(ended: Ended) -> None:
            self._change(lambda: lessons.withdraw(plant, row.version, ended.text))

        self.type_text(f"why {row.version} is withdrawn", "", then)

    def do_plan(self) -> None:
        """Show what to weigh on the bench for the recipe shown."""
        bench.show(self)

    # Putting a blend on record

    def do_add(self) -> None:
        """Ask for a blend's name, shares, results and date, and put it on record."""
        products = {p.product for p in self.snapshot.products}
        taken = {b.name for b in (self.state.view.blends if self.state.view else ())}
        steps: list[tuple[str, Callable[[], str], Callable[[str], object]]] = [
            ("name of the blend", str, lambda text: lab.read_name(text, taken)),
            ("made for which product (empty: none)", lambda: self.session.product,
             lambda text: lab.read_product(text, products)),
            ("shares, mass % (A 60, B 40)", self._shares_shown, lab.read_shares),
            ("KV40, mm²/s (empty: not measured)", str, lambda text: lab.read_result("kv40", text)),
            ("KV100, mm²/s (empty: not measured)", str, lambda text: lab.read_result("kv100", text)),
            ("date of the results", self.program.today.isoformat, lab.read_date)]
        typed: list[tuple[str, object]] = []

        def ask() -> None:
            label, text, reader = steps[len(typed)]
            self.type_checked(step(len(typed) + 1, len(steps), label), text(), lambda t: (t, reader(t)), took)

        def took(found: tuple[str, object]) -> None:
            typed.append(found)
            if len(typed) < len(steps):
                ask()
            else:
                self._record(typed)

        ask()

    def _shares_shown(self) -> str:
        """The shares of the recipe that all screens speak of, to be typed over."""
        shown = self.session.shown
        return lab.typed_shares(shown.shares or {}) if shown else ""

    def _record(self, typed: Sequence[tuple[str, object]]) -> None:
        plant = self.program.plant
        (name, _), (product, _), (_, shares), (kv40, _), (kv100, _), (on, _) = typed

        def done(made: lab.Recorded) -> None:
            told = "; ".join([made.message, *map(str, made.questions)])
            self.program.say(harmless(told), "question" if made.questions else "done")
            self.wanted = made.blend.name
            self._go(False)

        self.program.change(lambda: lab.record(plant, name, product, shares, {"kv40": kv40, "kv100": kv100}, on=on),  # type: ignore[arg-type]
                            done)


def _off(off: float) -> str:
    return f"{off:+.2f}" if abs(off) < 99.95 else f"{off:+.0f}"


def _with(versions: Sequence[str]) -> str:
    return f" with {', '.join(versions)}" if versions else ""


def _taught(row: Lesson | lessons.Offer, code: str) -> Cell:
    offer = row if isinstance(row, lessons.Offer) else None
    if code == "mark":
        return ("!" if row.provisional or (offer and offer.refusal) else ""), BOLD
    if code == "version":
        return "offer" if offer else row.version  # type: ignore[union-attr]
    if code == "of":
        return harmless(lessons.name_of(row))
    if code == "state":
        return lessons.standing(row), BOLD
    if code == "error":
        return lessons.error_words(offer) if offer else ""
    if code == "blends":
        return str(len(row.evidence))
    if code in ("40", "100"):
        terms = row.terms.get(float(code))
        return "" if terms is None else lessons.figures(row.kind, row.law, terms)
    return row.law


def _short(row: Lesson | lessons.Offer) -> str:
    return "; ".join(f"{t:g} °C {lessons.figures(row.kind, row.law, v)}" for t, v in row.terms.items()) or _in_full(row)


def _in_full(row: Lesson | lessons.Offer) -> str:
    """Every figure of a lesson or an offer."""
    if isinstance(row, lessons.Offer):
        return harmless("; ".join(lessons.offer_words(row)))
    return harmless("; ".join(lessons.lesson_words(row)))

