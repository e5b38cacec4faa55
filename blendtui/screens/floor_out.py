"""What leaves the vessel, the release, and the papers, on the floor screen."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from blendtui.store.batch_records import FLUSH, LEFT, PACKED, RELEASED, REWORK, SAMPLE, SLOPS
from blendtui.store.harmless import harmless

from . import reading
from .floor_view import Seen
from .steps import StepPage, reason

WHATS = (PACKED, SAMPLE, SLOPS, FLUSH, REWORK, LEFT)


class OutCommands(StepPage):
    """The steps that end a batch."""

    seen: Seen | None

    def do_out(self) -> None:
        """Record what leaves the vessel: as what, how much, and of rework into which stock."""
        if self.seen is None:
            self.say("there is no batch here")
            return
        plant, name, by = self.program.plant, self.seen.made.name, self.session.by

        def done(left: Any) -> None:
            self.program.task(lambda: _balance(plant, name), lambda balance: self.program.say(
                harmless("; ".join(dict.fromkeys([*left.words, *balance])), 1000), "done"))

        def then(what: str) -> None:
            steps: list[tuple[str, str, Callable[[str], Any]]] = [
                (f"{what} (kg, t, L)", _left(self.seen) if what in (PACKED, LEFT) else "", _quantity)]
            if what == REWORK:
                steps += [("into which rework stock (empty: by its family)", "", str.strip),
                          ("its family, where it is a new stock (the oil that share rules name)", "", str.strip)]
            if what not in (PACKED, SAMPLE, LEFT):
                steps.append(("why (a few words)", "", reason if what == REWORK else str.strip))

            def make(found: list[Any], sure: bool) -> Any:
                from blendtui.desk import rework

                kg, *rest = found
                stock, family = (rest.pop(0), rest.pop(0)) if what == REWORK else ("", "")
                return rework.leave(plant, name, kg, what, stock=stock, family="" if stock else family,
                                    why=rest[0] if rest else "", by=by, sure=sure)

            self.ask_step(steps, make, done, yes="it was so", before=1)

        self.type_checked(f"what leaves the vessel, as what ({', '.join(WHATS)})",
                          PACKED if self.seen.made.head.state == RELEASED else "", _what, then)

    def do_release(self) -> None:
        """Name what is missing, else ask who releases."""
        if self.seen is None:
            self.say("there is no batch here")
            return
        seen, plant, by = self.seen, self.program.plant, self.session.by
        name = seen.made.name
        if seen.made.head.state == RELEASED:
            self.say(f"{seen.name} is released already; w writes its certificate")
            return
        if seen.missing:
            self.app.push_screen(reading.ReadingScreen(f"{seen.name} cannot be released yet", [
                f"! {len(seen.missing)} missing:", *(f"  {harmless(each, 400)}" for each in seen.missing)]))
            return

        def make(who: str, sure: bool) -> Any:
            from blendtui.desk import release

            return release.release(plant, name, by=who, sure=sure)

        def then(who: str) -> None:
            self.question(f"release {seen.name} under the name of {who}: its results are on record and nothing is "
                          "missing", "release it",
                          lambda: self.take_step(lambda sure: make(who, sure), done, yes="release it"))

        def done(made: Any) -> None:
            self.program.say(f"{seen.name} is released; w writes the certificate, p records what is packed", "done")

        self.type_checked(f"{seen.name} released by (name)", by or plant.who, _name, then)

    def do_write(self) -> None:
        """Write the card, or the certificate of a batch that is released."""
        if self.seen is None:
            self.say("there is no batch here")
            return
        made = self.seen.made
        if made.head.state != RELEASED:
            reading.write_card(self, made.name)
            return

        def then(what: str) -> None:
            (reading.write_card if what == "card" else reading.write_certificate)(self, made.name)

        self.type_checked("write the certificate or the card", "certificate", _paper, then)


def _left(seen: Seen | None) -> str:
    return f"{seen.made.in_vessel_kg:.10g}" if seen else ""


def _quantity(typed: str) -> str:
    from blendtui.desk.errors import DeskError

    if not typed.strip():
        raise DeskError("how much? Type kg, t or L")
    return typed.strip()


def _balance(plant: Any, name: str) -> tuple[str, ...]:
    from blendtui.desk import rework

    found: tuple[str, ...] = rework.balance(plant.batch(name)).words
    return found


def _chosen(typed: str, names: tuple[str, ...], what: str) -> str:
    from blendtui.desk.errors import DeskError

    text = typed.strip().lower()
    able = [n for n in names if text and n.startswith(text)]
    if len(able) != 1 and text not in names:
        raise DeskError(f"{harmless(typed, 40)!r} is no {what}; there are {', '.join(names)}")
    return text if text in names else able[0]


def _what(typed: str) -> str:
    return _chosen(typed, WHATS, "way out of the vessel")


def _paper(typed: str) -> str:
    return _chosen(typed, ("certificate", "card"), "paper of a batch")


def _name(typed: str) -> str:
    from blendtui.desk.errors import DeskError

    if not typed.strip():
        raise DeskError("a name is needed here: who releases the batch")
    return harmless(typed.strip(), 60)
