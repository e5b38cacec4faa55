"""Asker: works recipes out in threads, each answer carrying the number of its request."""

from __future__ import annotations

import threading
from typing import TYPE_CHECKING

from textual.worker import get_current_worker

from blendtui.desk import answers
from blendtui.desk.errors import DeskError
from blendtui.store.errors import PlantError
from solver.errors import SolverError
from solver.stocks import Stock

from .messages import Answered, Unanswered
from .state import RecipeState

if TYPE_CHECKING:
    from blendtui.app import Console

REST = 0.15  # s between a recipe and the longer work on it: a fast typist's next wish may come first
PATIENCE = 0.4  # s after which the screen says that it is waiting


class Asker:
    """Asks for the recipe of the newest wishes. A thread cannot be called off, so it looks whether it is stale."""

    def __init__(self, app: Console) -> None:
        self.app = app
        self.at_work = 0  # threads
        self._newer = threading.Event()

    def ask(self, state: RecipeState) -> None:
        """Begin to work out the recipe of this state."""
        self._newer.set()
        self._newer = newer = threading.Event()
        before, stocks = state.answer, self.app.session.snapshot.stocks
        self.app.run_worker(lambda: self._work(state, stocks, before, newer), thread=True, group="recipe",
                            exclusive=True, exit_on_error=False)
        self.app.set_timer(PATIENCE, self._say_slow)

    def _say_slow(self) -> None:
        if self.app.session.state.waiting:
            self.app.shows_changed()

    def _work(self, state: RecipeState, stocks: tuple[Stock, ...], before: answers.Answer | None,
              newer: threading.Event) -> None:
        """In a thread: the recipe first, then what else the screens show of it."""
        number, app = state.request, self.app
        self.at_work += 1
        try:
            found = app.answer_of(app.plant, stocks, state.wishes, before)
            app.post_message(Answered(number, found))
            if newer.wait(REST) or get_current_worker().is_cancelled:
                return
            for more in answers.further(found, newer.is_set):
                app.post_message(Answered(number, more))
        except (PlantError, DeskError, SolverError) as error:
            app.post_message(Unanswered(number, str(error)))
        except Exception as error:  # an operator is told in a line, and may go on
            app.post_message(Unanswered(number, fault(error)))
        finally:
            self.at_work -= 1


def fault(error: Exception) -> str:
    """A fault of the program in a line."""
    return f"a fault of this program ({type(error).__name__}: {str(error)[:120]})"
