"""The console: opens a plant, shows its screens, and keeps the slow work off them."""

from __future__ import annotations

import asyncio
import os
import signal
import sys
import threading
from collections import deque
from collections.abc import Callable
from datetime import date
from functools import partial
from importlib import import_module
from pathlib import Path
from typing import Any, ClassVar

from textual.app import App
from textual.await_complete import AwaitComplete
from textual.binding import Binding, BindingType

from blendtui import commands
from blendtui.desk import answers
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import Plant, open_plant
from blendtui.quiet import quiet
from blendtui.screens import asker, messages, words
from blendtui.screens.asker import Asker, fault
from blendtui.screens.at_console import at_console
from blendtui.screens.layout import CSS
from blendtui.screens.session import Session
from blendtui.screens.state import Snapshot, read
from blendtui.store.errors import PlantError
from blendtui.store.harmless import harmless
from blendtui.widgets import paint, pasting
from solver.errors import SolverError

POLL = 1.4  # s between two looks for another person's change
KEPT_MESSAGES = 200
WAITING = "waiting for the plant file …"

Task = tuple[Callable[[], Any], Callable[[Any], None], Callable[[str], None] | None]


def page_of(code: str) -> Any:
    """A screen by its code; its module is loaded when it is first opened, which keeps the start short."""
    return getattr(import_module(f"blendtui.screens.{code}"), f"{code.capitalize()}Screen")()


class Console(App[int]):
    """The program. Everything that touches the plant after the start runs in one thread, in order."""

    TITLE = "blendtui"
    CSS = CSS
    ENABLE_COMMAND_PALETTE = False
    HORIZONTAL_BREAKPOINTS: ClassVar[list[tuple[int, str]] | None] = [(0, "-narrow"), (110, "-wide")]
    BINDINGS: ClassVar[list[BindingType]] = [Binding("ctrl+q", "leave", show=False, priority=True),
                                             Binding("ctrl+c", "leave", show=False, priority=True)]
    MODES = {code: partial(page_of, code) for code, _ in commands.SCREENS}  # noqa: RUF012
    DEFAULT_MODE = commands.STOCKS

    def __init__(self, plant: Plant, *, today: date | None = None, sheets: Path | None = None) -> None:
        super().__init__(ansi_color=True)
        self.animation_level = "none"
        self.plant = plant
        self.today = today or date.today()
        self.sheets = sheets or Path.cwd()  # where floor sheets are written
        self.asker = Asker(self)
        self.session = Session(read(plant), self.asker.ask)
        self.said: deque[tuple[str, str]] = deque(maxlen=KEPT_MESSAGES)
        self.said.extend(("note", note) for note in plant.notes)
        self.said.append(("note", f"{plant.opened_note}" if plant.opened_note else str(plant.path)))
        unfinished = [t for t in self.session.snapshot.trials if t.name.startswith("unfinished ")]
        if unfinished:
            names = ", ".join(f"{harmless(t.product)} {harmless(t.name)}" for t in unfinished[:3])
            self.said.append(("note", f"{len(unfinished)} kept when a terminal closed: {names}; 4 opens the trials"))
        self.going = ""  # the screen that is being opened
        self.ahead: list[Any] = []  # keys and pastes that came before it was there
        self._then: Callable[[Any], None] | None = None
        self._tasks: deque[Task] = deque()
        self._asked = self._ended = 0  # tasks; they end in the order in which they were asked for
        self._gate = threading.Lock()
        self._draining = False
        self._leaving = False
        self.warned = False  # of what is forgotten on leaving
        self.fault_said = ""  # the fault that ended the program, in a line

    # Life

    def on_mount(self) -> None:
        """Begin the slow work only once the first screen has been sent."""
        self.call_after_refresh(self._begin)
        self.set_interval(POLL, self._poll)
        if threading.current_thread() is threading.main_thread():
            loop = asyncio.get_running_loop()
            loop.add_signal_handler(signal.SIGHUP, self._hung_up)
            loop.add_signal_handler(signal.SIGTERM, self._told_to_end)

    def _told_to_end(self) -> None:
        self._keep_unfinished()
        self.exit(return_code=128 + signal.SIGTERM)

    def _hung_up(self) -> None:
        """The terminal is gone: there is no screen to give back, only something to keep."""
        self._keep_unfinished()
        self.plant.close()
        os._exit(128 + signal.SIGHUP)

    def _keep_unfinished(self) -> None:
        """Keep the shares typed by hand, for every edit of the plant is saved already."""
        for wishes in self.session.unkept():
            try:
                answers.keep_unfinished(self.plant, wishes)
            except (PlantError, DeskError, SolverError):
                pass  # a folder that is never changed, or no such product any more

    def _begin(self) -> None:
        self.session.ask()
        self.shows_changed()

    def _fatal_error(self) -> None:
        """Instead of Textual's traceback: the fault is told in a line once the screen is given back."""
        error = sys.exc_info()[1]
        self.fault_said = fault(error) if isinstance(error, Exception) else "a fault of this program"
        if os.environ.get("BLENDTUI_DEBUG"):
            super()._fatal_error()
        else:
            self._close_messages_no_wait()

    @property
    def page(self) -> Any:
        """The screen below any overlay."""
        return next(s for s in reversed(self.screen_stack) if hasattr(s, "say"))

    def say(self, message: str, kind: str = "note") -> None:
        """Say what happened, in the status line and in the list of messages; a headless command as its key."""
        message = at_console(message)
        if message and self.said[-1] != (kind, message):
            self.said.append((kind, message))
        self.page.say(message, kind)

    # Tasks on the plant

    @property
    def busy(self) -> bool:
        """Is a change on its way to the plant?"""
        return self._ended < self._asked

    def task(self, work: Callable[[], Any], done: Callable[[Any], None],
             failed: Callable[[str], None] | None = None, *, saying: str = WAITING) -> None:
        """Do `work` in the plant's thread, in turn; then `done` or `failed` here. `saying`: where it takes a while."""
        self._asked += 1
        with self._gate:
            self._tasks.append((work, done, failed))
            start, self._draining = not self._draining, True
        if start:
            self.run_worker(self._drain, thread=True, group="plant", exit_on_error=False)
        number = self._asked
        self.set_timer(asker.PATIENCE, lambda: self._ended < number and self.page.say(saying, "wait"))

    def _drain(self) -> None:
        while True:
            with self._gate:
                if not self._tasks:
                    self._draining = False
                    return
                work, done, failed = self._tasks.popleft()
            try:
                self.post_message(messages.Finished(done, failed, work()))
            except (PlantError, DeskError, SolverError, OSError) as error:
                self.post_message(messages.Finished(done, failed, refusal=str(error)))
            except Exception as error:  # an operator is told in a line, and may go on
                self.post_message(messages.Finished(done, failed, refusal=fault(error)))

    def on_finished(self, message: messages.Finished) -> None:
        """A task ended."""
        self._ended += 1
        if message.refusal:
            if message.failed:
                message.failed(message.refusal)
            self.say(message.refusal, "refused")
        else:
            message.done(message.result)
        if not self.busy:
            if self._leaving:
                self.exit(0)
            self.page.feed_later()

    def change(self, work: Callable[[], Any], done: Callable[[Any], None],
               failed: Callable[[str], None] | None = None, *, saying: str = WAITING) -> None:
        """Do a change to the plant; then read the plant again, ask for the recipe, and `done`."""
        plant = self.plant

        def both() -> tuple[Any, bool, Snapshot]:
            before = plant.revision()
            result = work()
            return result, plant.revision() != before, read(plant)

        def then(found: tuple[Any, bool, Snapshot]) -> None:
            result, changed, snapshot = found
            if changed:
                self.session.edited()
            if snapshot.revision != self.session.snapshot.revision:
                self.adopt(snapshot)
            done(result)

        self.task(both, then, failed, saying=saying)

    def adopt(self, snapshot: Snapshot) -> None:
        """Show the plant as it is now, and ask for the recipe again."""
        self.session.snapshot = snapshot
        self.session.ask()
        self.shows_changed()

    def shows_changed(self) -> None:
        """What the screens show has changed."""
        self.page.refresh_page()

    def _poll(self) -> None:
        if self.busy:
            return
        plant, known = self.plant, self.session.snapshot.revision

        def look() -> tuple[Snapshot, str, str] | None:
            if plant.revision() == known:
                return None
            return read(plant), (last := plant.journal(1)[0]).who, last.what

        def done(found: tuple[Snapshot, str, str] | None) -> None:
            if found is not None and found[0].revision != self.session.snapshot.revision:
                self.adopt(found[0])
                self.say(f"{found[1]} changed the plant: {found[2]}")

        self.task(look, done)

    # The recipe

    answer_of = staticmethod(answers.answer)

    def on_answered(self, message: messages.Answered) -> None:
        """An answer came; a late one is dropped."""
        if self.session.take(message.request, message.answer):
            self.shows_changed()

    def on_unanswered(self, message: messages.Unanswered) -> None:
        """There is no answer."""
        if self.session.fail(message.request, message.error):
            self.shows_changed()

    def on_reported(self, message: messages.Reported) -> None:
        """A report of one screen came: it is that screen's, whether it is in sight or not."""
        for page in self._screen_stacks.get(message.screen, []):
            if hasattr(page, "take_report"):
                page.take_report(message)

    # Commands of every screen

    def do_undo(self) -> None:
        """Take back the last wish or edit."""
        self._take_back("undo", self.session.undo, self.plant.undo, self.session.plant_undone, "undone")

    def do_redo(self) -> None:
        """Do again what was taken back."""
        self._take_back("redo", self.session.redo, self.plant.redo, self.session.plant_redone, "done again")

    def _take_back(self, what: str, wish: Callable, plant: Callable, note: Callable, verb: str) -> None:
        taken = wish()
        if taken is not None:
            self.say(f"{verb}: {taken.what}")
            self.shows_changed()
            return

        def then(pair: tuple[str, Snapshot]) -> None:
            note()
            now = words.changed_cell(self.session.snapshot, pair[1]) if what == "undo" else ""
            self.adopt(pair[1])
            self.say(pair[0] + (f"; {now}" if now else ""))

        self.task(lambda: (plant(), read(self.plant)), then)

    def do_next_product(self) -> None:
        """Speak of the next product."""
        self._other_product(1)

    def do_previous_product(self) -> None:
        """Speak of the product before."""
        self._other_product(-1)

    def _other_product(self, step: int) -> None:
        codes = [p.product for p in self.session.snapshot.products]
        if not codes:
            self.say("there is no product yet: add one on the screen Targets", "refused")
            return
        at = codes.index(self.session.product) if self.session.product in codes else 0
        self.session.choose(codes[(at + step) % len(codes)])
        self.shows_changed()

    def go(self, screen: str, then: Callable[[Any], None] | None = None) -> None:
        """Open a screen, and do `then` with it once it is there."""
        if screen != self.current_mode:
            if self.said[-1][0] in ("refused", "question"):
                self.said.append(("note", ""))  # what was refused there is no word on the screen that comes
            self.going, self._then = screen, then
            self.switch_mode(screen)
        elif then:
            then(self.page)

    def arrived(self, page: Any) -> None:
        """A screen has come up: carry out what it was opened for, then the keys typed on the way."""
        if self.going != page.NAME:
            return
        self.going, then, self._then = "", self._then, None
        ahead, self.ahead = self.ahead, []
        if then:
            then(page)
        for event in ahead:
            page.take_event(event)

    def pop_screen(self) -> AwaitComplete:
        """Leave an overlay; a second key that came before it was gone finds nothing to leave."""
        return super().pop_screen() if len(self.screen_stack) > 1 else AwaitComplete.nothing()

    def do_back(self) -> None:
        """Esc where there is nothing to drop."""
        self.say("nothing to drop here; 1 to 9 and 0 open the screens, q leaves")

    def do_help(self) -> None:
        """Show every command."""
        from blendtui.screens import overlays

        self.push_screen(overlays.HelpScreen(self.page.NAME))

    def do_messages(self) -> None:
        """Show what was said, in full."""
        from blendtui.screens import overlays

        self.push_screen(overlays.MessagesScreen([each for each in self.said if each[1]]))

    def do_palette(self) -> None:
        """List the commands, and carry out the chosen one."""
        from blendtui.screens import overlays

        self.push_screen(overlays.PaletteScreen(self.page.NAME), self._chosen)

    def _chosen(self, command: commands.Command | None) -> None:
        if command is None:
            return
        if command.screen not in (commands.ALL, self.page.NAME):
            self.go(command.screen, lambda page: page.carry_out(command, command.keys[0]))
        else:
            self.page.carry_out(command, command.keys[0])

    def _forgotten(self) -> str:
        """In words, what is wished but saved nowhere."""
        lost = [(w.product, words.forgotten(w, kept)) for w, kept in self.session.all_wishes()]
        return "; ".join(f"{harmless(product)}: {', '.join(told)}" for product, told in lost if told)

    def action_leave(self) -> None:
        """ctrl+q and ctrl+c."""
        self.do_quit()

    def do_quit(self) -> None:
        """Leave, once everything is saved."""
        if self.page.edit.active:
            self.say("something is being typed: Enter keeps it, Esc drops it, then q leaves", "question")
        elif not self.warned and (told := self._forgotten()):
            self.warned = True
            self.say(f"q again leaves and forgets {told}", "question")
        elif self.busy:
            self._leaving = True
            self.say("leaving as soon as the last change is saved …", "wait")
        else:
            self.exit(0)


def run(path: Path | None) -> int:
    """Open a plant and show it until the operator leaves; the exit code.

    Raises PlantError in one line when the plant cannot be opened.
    """
    paint.adopt()
    pasting.guard()
    with open_plant(path) as plant:
        app = Console(plant)
        loop = asyncio.new_event_loop()
        # Mouse reports cost bytes with every movement, which a slow line cannot spare.
        with quiet():
            app.run(mouse=not any(os.environ.get(name) for name in ("SSH_CONNECTION", "SSH_TTY", "SSH_CLIENT")),
                    loop=loop)
    if app.fault_said:
        print(f"blendtui ended by {app.fault_said}; every change made before it is saved", file=sys.stderr)
    code = app.return_code or 0
    if app.asker.at_work:
        # A search cannot be called off, and its thread would hold the operator at a dead screen until it ends.
        sys.stdout.flush()
        sys.stderr.flush()
        os._exit(code)
    loop.close()
    return code
