"""The charges of the floor screen: actuals, lots, another oil than planned, second checks, corrections."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import Any

from blendtui.desk.errors import DeskError
from blendtui.store.batch_records import DONE, DROPPED, PLANNED, Charge
from blendtui.store.harmless import harmless

from . import floor_view
from .floor_view import Seen
from .steps import StepPage, reason

AT = re.compile(r"(.*?)\s*(?:\bat\b|@)\s*(.+)", re.IGNORECASE)  # `8950 L at 48 °C`


class ChargeCommands(StepPage):
    """The steps of the charge under the cursor."""

    seen: Seen | None
    state: Any  # the floor screen's own
    charge: Charge | None  # the one under the cursor; the floor screen reads it off its table
    checker = ""  # who checked last at this terminal

    def of_charge(self, *wanted: str) -> Charge | None:
        """The charge under the cursor if it is in such a state; else say what it is, and None."""
        charge = self.charge
        if self.state.testing:
            self.refuse("Tab goes to the charges first")
        elif charge is None:
            self.refuse("there is no charge here")
        elif charge.state not in wanted:
            told = {DONE: f"charged by {harmless(charge.by, 30)} already; e corrects it, and says why",
                    DROPPED: "given up as missed; R shows what the batch will be without it",
                    PLANNED: "not charged yet; Enter types its actual"}
            why = f" ({harmless(charge.why, 600)})" if charge.why else ""
            self.refuse(f"line {charge.line}, {harmless(charge.stock, 30)}, is {told[charge.state]}{why}")
        else:
            return charge
        return None

    def _label(self, charge: Charge, what: str) -> str:
        return f"{charge.line} {harmless(charge.stock, 20)} {what}"

    def type_actual(self) -> None:
        """Type what was charged in the line under the cursor."""
        charge = self.of_charge(PLANNED, DROPPED)
        if charge is None or self.seen is None:
            return
        plant, name, by = self.program.plant, self.seen.made.name, self.session.by
        lot = self.state.lots.get(charge.line, "")

        def make(typed: str, sure: bool) -> Any:
            from blendtui.desk import charging

            kg, celsius = actual(typed)
            return charging.charge(plant, name, charge.line, kg, lot=lot, celsius=celsius, by=by, sure=sure)

        step = floor_view.division_of(self.seen, charge)
        plan = f"{floor_view.kg(charge.plan_kg, step)} kg ± {floor_view.tolerance(charge.tolerance_kg, step)}"
        self.type_step(self._label(charge, f"charged (kg, t, L, drums, such as 9 t at 48 °C; plan {plan})"), "", make,
                       self.say_charged, yes="it was so")

    def say_charged(self, done: Any) -> None:
        """Say what a charge did to the batch, and where the remedy is."""
        more = ["R shows it, and y there plans it"] if done.remedy is not None else []
        self.program.say(harmless("; ".join([*done.words, *more]), 2000), "refused" if done.odd else "done")

    def do_lot(self) -> None:
        """Type the lot of the charge under the cursor, then its actual; of one that is made, put it right."""
        charge = self.of_charge(PLANNED, DONE)
        if charge is None or self.seen is None:
            return
        parts = floor_view.lots_words(self.seen.lots.get(charge.stock, {}))

        def then(lot: str) -> None:
            lots = {k: v for k, v in self.state.lots.items() if k != charge.line}
            self.state = replace(self.state, lots={**lots, charge.line: lot} if lot else lots)
            self.refresh_page()
            self.type_actual()

        label = self._label(charge, f"lot (in the tank: {parts or 'none on record'})")
        if charge.state == DONE:
            self.type_checked(label, charge.actual_lot, _lot, lambda lot: self._correct_lot(charge, lot))
        else:
            self.type_checked(label, self.state.lots.get(charge.line, charge.lot), str.strip, then)

    def _correct_lot(self, charge: Charge, lot: str) -> None:
        plant, name, by = self.program.plant, charge.batch, self.session.by

        def make(why: str, sure: bool) -> Any:
            from blendtui.desk import charging

            return charging.correct(plant, name, charge.line, charge.actual_kg or 0.0, lot=lot, why=why, by=by,
                                    sure=sure)

        self.type_why(f"the lot of line {charge.line} is {harmless(lot, 20)}", make, self.say_charged, yes="it was so")

    def do_other(self) -> None:
        """Record that another oil than the planned one was charged: which, how much, its lot and why."""
        charge = self.of_charge(PLANNED, DROPPED)
        if charge is None or self.seen is None:
            return
        seen, plant, name, by = self.seen, self.program.plant, self.seen.made.name, self.session.by

        def stock(text: str) -> str:
            able = [code for code in seen.stocks if code.casefold() == text.strip().casefold()]
            if not able:
                raise DeskError(f"the plant has no stock {harmless(text, 40)!r}; type its code as Stocks has it")
            return able[0]

        def make(found: list[Any], sure: bool) -> Any:
            from blendtui.desk import charging

            code, (kg, celsius), lot, why = found
            return charging.charge(plant, name, charge.line, kg, lot=lot, celsius=celsius, stock=code, why=why, by=by,
                                   sure=sure)

        self.ask_step([(self._label(charge, "was not charged, but which stock"), "", stock),
                       (self._label(charge, "so much of it (kg, t, L, drums, such as 9 t at 48 °C)"), "", actual),
                       (self._label(charge, "its lot (empty: as in its tank)"), "", str.strip),
                       (self._label(charge, "why another oil"), "", reason)], make, self.say_charged, yes="it was so")

    def do_check(self) -> None:
        """Second check of a charge, by another person."""
        charge = self.of_charge(DONE)
        if charge is None or self.seen is None:
            return
        plant, name = self.program.plant, self.seen.made.name

        def make(by: str, sure: bool) -> Any:
            from blendtui.desk import charging

            return charging.check(plant, name, charge.line, by=by, sure=sure)

        def done(made: Charge) -> None:
            self.checker = made.checked_by
            self.program.say(f"line {made.line} checked by {harmless(made.checked_by, 40)}", "done")

        self.type_step(self._label(charge, f"checked by (another than {harmless(charge.by, 20)})"),
                       "" if self.checker == charge.by else self.checker, make, done)

    def do_miss(self) -> None:
        """The charge under the cursor will not be made."""
        charge = self.of_charge(PLANNED)
        if charge is None or self.seen is None:
            return
        plant, name, by = self.program.plant, self.seen.made.name, self.session.by

        def make(why: str, sure: bool) -> Any:
            from blendtui.desk import charging

            return charging.miss(plant, name, charge.line, why=why, by=by, sure=sure)

        self.type_why(f"line {charge.line}, {harmless(charge.stock, 20)}, is not charged", make, self.say_charged,
                      yes="give it up")

    def do_correct(self) -> None:
        """Correct a charge that was made, or withdraw a result."""
        if self.state.testing:
            self.withdraw_result()  # type: ignore[attr-defined]
            return
        charge = self.of_charge(DONE)
        if charge is None or self.seen is None:
            return
        plant, name, by = self.program.plant, self.seen.made.name, self.session.by
        step = floor_view.division_of(self.seen, charge)

        def make(found: list[Any], sure: bool) -> Any:
            from blendtui.desk import charging

            (kg, celsius), why = found
            return charging.correct(plant, name, charge.line, kg, celsius=celsius, why=why, by=by, sure=sure)

        self.ask_step([(self._label(charge, "truly charged (kg; the same again only adds its reason)"),
                        floor_view.kg(charge.actual_kg, step), actual),
                       (f"why line {charge.line} is corrected", "", reason)], make, self.say_charged, yes="it was so")


def actual(typed: str) -> tuple[str, float | None]:
    """What was charged as it was typed, and the temperature [°C] where one was typed with it.

    >>> actual("8950 L at 48 °C"), actual("3 drums"), actual("9 t @ 122 F")
    (('8950 L', 48.0), ('3 drums', None), ('9 t', 50.0))
    """
    from solver.scales import parse

    if not typed.strip():
        raise DeskError("nothing is typed: kg, t, L or drums, such as 9 t at 48 °C")
    found = AT.fullmatch(typed.strip())
    if found is None:
        return typed.strip(), None
    if not found[1]:
        raise DeskError(f"{harmless(typed, 40)!r}: the quantity stands first, such as 9 t at 48 °C")
    return found[1], parse(found[2], "temperature")


def _lot(typed: str) -> str:
    if not typed.strip():
        raise DeskError("a lot is needed: as it is read off the drum, the board or the receipt")
    return typed.strip()
