"""The ledger at the screen of stocks: receipts, dips, the book of a tank, and where it went."""

from __future__ import annotations

from typing import Any

from blendtui.desk.errors import DeskError
from blendtui.store.harmless import harmless
from solver.stocks import Stock

from .steps import StepPage


class LedgerCommands(StepPage):
    """The steps of the ledger, on the stock under the cursor."""

    stock: Stock | None  # the one under the cursor; the screen reads it off its table

    def _tank(self) -> Stock | None:
        if self.stock is None:
            self.say("there is no stock here; a adds one")
        return self.stock

    def do_receive(self) -> None:
        """Record a receipt: quantity, lot and what its certificate says."""
        stock = self._tank()
        if stock is None:
            return
        plant, code, by = self.program.plant, stock.code, self.session.by

        def make(found: list[Any], sure: bool) -> Any:
            from blendtui.desk import ledger

            kg, lot, certificate, cells, keep = found
            return ledger.receive(plant, code, kg, lot, cells=cells, certificate=certificate, keep=keep, by=by,
                                  sure=sure)

        named = harmless(code, 20)
        self.ask_step([
            (f"{named} received (kg, t, L)", "", lambda text: _mass(text, stock)), (f"{named} lot", "", _lot),
            (f"{named} number of its certificate (empty: none)", "", str.strip),
            (f"{named} values on it (kv40 31.2, kv100 5.35, density15 871)", "", read_cells),
            (f"{named} what it does not say is as in the tank (yes, no)", "no", _yes)], make, self._say_words,
            yes="it was so")

    def do_test(self) -> None:
        """Give the tank the results of its own test."""
        stock = self._tank()
        if stock is None:
            return
        plant, code, by = self.program.plant, stock.code, self.session.by

        def make(found: list[Any], sure: bool) -> Any:
            from blendtui.desk import ledger

            return ledger.test(plant, code, found[0], by=by, sure=sure)

        self.ask_step([(f"{harmless(code, 20)} tested (kv40 31.2, kv100 5.35, density15 871)", "", read_cells)], make,
                      self._say_words, yes="it was so")

    def do_dip(self) -> None:
        """Record a dip against the book; where they differ the book may be set to it, with the reason."""
        stock = self._tank()
        if stock is None:
            return
        plant, code, by = self.program.plant, stock.code, self.session.by

        named, book = harmless(code, 20), stock.on_hand_kg

        def then(kg: float) -> None:
            off = "the book is empty" if book is None else f"{kg - book:+.10g} kg against the book"
            self.type_checked(f"{named} {off}: set the book to the dip (yes, no)", "no", _yes,
                              lambda correct: dipped(kg, correct))

        def dipped(kg: float, correct: bool) -> None:
            if correct:
                self.type_why(f"the book of {named} is set to its dip",
                              lambda why, sure: _dip(plant, code, kg, True, why, by, sure), self._say_words,
                              yes="set it")
            else:
                self.take_step(lambda sure: _dip(plant, code, kg, False, "", by, sure), self._say_words,
                               yes="it was so")

        self.type_checked(f"{named} dip (kg, t, L at 15 °C)", "", lambda text: _mass(text, stock), then)

    def _say_words(self, done: Any) -> None:
        self.program.say(harmless("; ".join(done.words), 1500), "done")

    def do_book(self) -> None:
        """Show every movement of the stock, and the book against the dip."""
        stock = self._tank()
        if stock is None:
            return
        plant, code = self.program.plant, stock.code

        from .reading import ReadingScreen

        def work() -> list[str]:
            from blendtui.desk import ledger
            from blendtui.headless.stock import book_text

            return book_text(ledger.book(plant, code)).split("\n")

        head = f"Book of {harmless(code, 40)}"
        self.program.task(work, lambda text: self.app.push_screen(ReadingScreen(head, text)))

    def do_trace(self) -> None:
        """Follow the stock, or a lot of it, both ways."""
        from . import tracing  # what the first screen needs not waits until it is asked for

        tracing.ask(self, self.stock.code if self.stock else "")


def _dip(plant: Any, code: str, kg: float, correct: bool, why: str, by: str, sure: bool) -> Any:
    from blendtui.desk import ledger

    return ledger.dip(plant, code, kg, correct=correct, why=why, by=by, sure=sure)


def _mass(typed: str, stock: Stock) -> float:
    from blendtui.desk import typed as desk

    return desk.mass(typed, stock.density15)


def _lot(typed: str) -> str:
    if not typed.strip():
        raise DeskError("a lot is needed: type the supplier's, or a mark of your own")
    return typed.strip()


def _yes(typed: str) -> bool:
    text = typed.strip().lower()
    if text not in ("y", "yes", "n", "no"):
        raise DeskError("type yes or no")
    return text in ("y", "yes")


def read_cells(typed: str) -> dict[str, str]:
    """Values as typed, `kv40 31.2, kv100 5.35, flash 214`: property → its text.

    >>> read_cells("KV40 31.2, flash 110 C")
    {'kv40': '31.2', 'flash': '110 C'}
    """
    from .words import property_code

    found: dict[str, str] = {}
    for part in (p.strip() for p in typed.split(",")):
        if not part:
            continue
        name, _, value = part.partition(" ")
        if not value.strip():
            raise DeskError(f"{harmless(part, 40)!r}: type a property, a blank and its value, parted by commas")
        found[property_code(name)] = value.strip()
    return found
