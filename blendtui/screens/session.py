"""Session: the recipe that all screens speak of, the wishes behind it, and what can be taken back."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from blendtui.desk.answers import Answer, Wishes

from .state import RecipeState, Snapshot

if TYPE_CHECKING:
    from solver.recipe import Recipe

PLANT = "plant"  # stands in the history for a change that the plant's own journal takes back


@dataclass(frozen=True)
class Wish:
    """A change of wishes that can be taken back."""

    before: Wishes
    after: Wishes
    what: str


class Session:
    """The state of the recipe, and the one order in which wishes and edits are undone."""

    def __init__(self, snapshot: Snapshot, ask: Callable[[RecipeState], None]) -> None:
        self.snapshot = snapshot
        product = snapshot.products[0].product if snapshot.products else ""
        self.state = RecipeState(Wishes(product))
        self._ask = ask
        self.batch = ""  # the one on the screen Floor; empty: the newest open one
        self.by = ""  # the name under which steps of a batch are recorded; empty: the login name
        self.wishes: dict[str, Wishes] = {}  # of every product spoken of, to come back to
        self.history: list[Wish | str] = []
        self.undone: list[Wish | str] = []

    # Asking and answering

    def ask(self) -> None:
        """Ask for the recipe of the present wishes and plant."""
        state = self.state
        if self.snapshot.product(state.wishes.product) is None:
            product = self.snapshot.products[0].product if self.snapshot.products else ""
            state = replace(state, wishes=Wishes(product), answer=None, blend=None)
        if not state.wishes.product:
            self.state = replace(state, waiting=False, answer=None, blend=None,
                                 error="there is no product yet: add one on the screen Targets")
            return
        self.state = replace(state, request=state.request + 1, waiting=True)
        self._ask(self.state)

    def take(self, request: int, answer: Answer) -> bool:
        """Take an answer; False when it is late, and nothing changes then."""
        if request != self.state.request:
            return False
        blend = self.state.blend
        if blend is not None and blend >= len(answer.blends) and "blends" in answer.done:
            blend = None
        self.state = replace(self.state, answer=answer, waiting=False, error="", blend=blend)
        return True

    def fail(self, request: int, error: str) -> bool:
        """Take the reason why there is no answer; False when it is late."""
        if request != self.state.request:
            return False
        self.state = replace(self.state, answer=None, waiting=False, error=error, blend=None)
        return True

    # What is shown

    @property
    def product(self) -> str:
        """The product all screens speak of."""
        return self.state.wishes.product

    @property
    def shown(self) -> Recipe | None:
        """The recipe on the screen: a blend stepped to, else the shares typed by hand, else the best."""
        state = self.state
        if state.answer is None:
            return None
        if state.blend is not None and state.blend < len(state.answer.blends):
            return state.answer.blends[state.blend]
        return state.answer.by_hand or state.answer.best

    # Wishing

    def choose(self, product: str) -> None:
        """Speak of another product, under the wishes it was left with."""
        if product != self.product:
            self.wishes[self.product] = self.state.wishes
            wishes = self.wishes.get(product, Wishes(product))
            self.state = replace(self.state, wishes=wishes, answer=None, blend=None, error="")
            self.ask()

    def all_wishes(self) -> list[tuple[Wishes, bool]]:
        """The wishes of every product spoken of, and whether a trial holds the shares typed by hand."""
        return [(w, w.typed is not None and any(t.product == w.product and _same(t.shares, w.typed)
                                                for t in self.snapshot.trials))
                for w in {**self.wishes, self.product: self.state.wishes}.values()]

    def unkept(self) -> list[Wishes]:
        """Wishes with shares typed by hand that no trial holds."""
        return [w for w, kept in self.all_wishes() if w.typed and not kept]

    def wish(self, wishes: Wishes, what: str) -> None:
        """Change the wishes, in a way that can be taken back."""
        self.history.append(Wish(self.state.wishes, wishes, what))
        self.undone.clear()
        self._adopt(wishes)

    def step(self, blend: int | None) -> None:
        """Show one of the feasible blends, or the best again."""
        self.state = replace(self.state, blend=blend)

    def _adopt(self, wishes: Wishes) -> None:
        same = wishes.product == self.product
        self.wishes[self.product] = self.state.wishes
        self.state = replace(self.state, wishes=wishes, blend=None, answer=self.state.answer if same else None)
        self.ask()

    # Taking back

    def edited(self) -> None:
        """The plant was changed from here: the journal's undo is next in order."""
        self.history.append(PLANT)
        self.undone.clear()

    def undo(self) -> Wish | None:
        """Take back the last wish; None when the plant's own undo is due."""
        if self.history and isinstance(self.history[-1], Wish):
            wish = self.history.pop()
            assert isinstance(wish, Wish)
            self.undone.append(wish)
            self._adopt(wish.before)
            return wish
        return None

    def plant_undone(self) -> None:
        """The plant's own undo was done."""
        if self.history:
            self.history.pop()
        self.undone.append(PLANT)

    def redo(self) -> Wish | None:
        """Do the last undone wish again; None when the plant's own redo is due."""
        if self.undone and isinstance(self.undone[-1], Wish):
            wish = self.undone.pop()
            assert isinstance(wish, Wish)
            self.history.append(wish)
            self._adopt(wish.after)
            return wish
        return None

    def plant_redone(self) -> None:
        """The plant's own redo was done."""
        if self.undone:
            self.undone.pop()
        self.history.append(PLANT)


def _same(one: Mapping[str, float], other: Mapping[str, float]) -> bool:
    # A trial is kept in per cent: the way there and back costs the last digit.
    return one.keys() == other.keys() and all(abs(one[c] - other[c]) < 1e-9 for c in one)
