"""An order, asked for part by part; its charges are shown, and nothing is written before they are taken."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

from blendtui.desk.errors import DeskError
from blendtui.store.batch_records import Vessel
from blendtui.store.harmless import harmless

from . import reading
from .base import step
from .words import property_code

if TYPE_CHECKING:
    from .batches import BatchesScreen

def ask(page: BatchesScreen) -> None:
    """Read the vessels, then ask for the order."""
    product = page.snapshot.product(page.session.product)
    if product is None:
        page.say("there is no product yet: add one on the screen Targets", "refused")
        return
    plant = page.program.plant

    def then(vessels: list[Vessel]) -> None:
        if not vessels:
            page.program.say("the plant has no vessel yet: v shows the vessels, and a there adds one", "refused")
            return
        Asking(page, product.product, vessels).begin(product.batch_kg)

    page.program.task(plant.vessels, then)


Step = tuple[str, str, Callable[[str], Any]]  # label, text to begin with, reader


class Asking:
    """The questions of one order; what was typed last for the same product stands on the line again."""

    def __init__(self, page: BatchesScreen, product: str, vessels: list[Vessel]) -> None:
        self.page, self.product, self.vessels = page, product, vessels
        self.typed: dict[str, str] = page.typed_orders.setdefault(product, {})
        self.found: dict[str, Any] = {}
        self.heel_of = self.typed.get("vessel", "").casefold()  # the vessel whose heel was typed last

    def begin(self, batch_kg: float | None) -> None:
        """Ask the first question."""
        self.begun = f"{batch_kg:.10g} kg" if batch_kg else ""
        self._ask(0)

    def _steps(self) -> list[tuple[str, Step]]:
        vessel = next((v for v in self.vessels if v.vessel == self.found.get("vessel")), self.vessels[0])
        heel = f"{vessel.heel_kg:.10g}" if vessel.heel_kg else "0"
        names = " ".join(harmless(v.vessel, 12) for v in self.vessels[:8])
        steps: list[tuple[str, Step]] = [
            ("amount", ("amount (15 t, 15000 kg, 16000 L15, 16000 L20)", self.begun, amount)),
            ("vessel", (f"vessel ({names})", vessel.vessel, self._vessel)),
            ("customer", ("customer (empty: none)", "", str.strip)),
            ("order_no", ("the customer's order number (empty: none)", "", str.strip)),
            ("limits", ("customer's limits, tighter (kv40 44 48, vi 98; empty: none)", "", limits)),
            ("mix_c", ("mixing temperature, °C", "60", celsius)),
            ("tank_c", ("temperature of the tanks, °C (45, or LIGHT 45 HEAVY 55)", "20", tank_celsius)),
            ("heel_kg", ("heel in the vessel, kg", heel, mass)),
            ("heel_stock", ("heel is of which stock or batch (else its values, kv40 46 kv100 6.8 density15 875)",
                            vessel.heel_stock, str.strip)),
            ("line", ("line holds (kg and stock: 40 N150; empty: nothing)", "", line)),
            ("flush", ("flush oil (kg, stock, in or out: 60 N150 in; empty: none)", "", flush)),
            ("heel_ignored", ("leave heel and line out of the sums (why; empty: they count)", "", str.strip))]
        if self.found.get("heel_kg") == 0.0:
            steps = [each for each in steps if each[0] != "heel_stock"]
        if self.found.get("heel_kg") == 0.0 and not self.found.get("line"):
            steps = [each for each in steps if each[0] != "heel_ignored"]
        return steps

    def _vessel(self, typed: str) -> str:
        able = [v.vessel for v in self.vessels if v.vessel.casefold() == typed.casefold()]
        if not able:
            raise DeskError(f"no vessel {harmless(typed, 30)!r}; there are "
                            f"{', '.join(harmless(v.vessel, 20) for v in self.vessels)}")
        return able[0]

    def _ask(self, at: int) -> None:
        steps = self._steps()
        if at == len(steps):
            self._propose()
            return
        name, (label, begun, read) = steps[at]

        def kept(text: str) -> Any:
            found = read(text)
            self.typed[name] = text
            return found

        def then(found: Any) -> None:
            if name == "vessel" and found.casefold() != self.heel_of:
                self.heel_of = found.casefold()
                for each in ("heel_kg", "heel_stock", "heel_ignored"):  # another vessel has a heel of its own
                    self.typed.pop(each, None)
            self.found[name] = found
            self._ask(at + 1)

        self.page.type_checked(step(at + 1, len(steps), f"{harmless(self.product, 16)} {label}"),
                               self.typed.get(name, begun), kept, then)

    def order(self) -> Any:
        """What was typed, as an order."""
        from blendtui.desk.proposals import Order

        found = dict(self.found)
        kg, unit = found.pop("amount")
        heel = found.pop("heel_stock", None)
        cells = heel_values(heel or "")
        return Order(self.product, kg, found.pop("vessel"), unit, heel_stock="" if cells else heel, heel_cells=cells,
                     **found)

    def _propose(self) -> None:
        page, plant, order = self.page, self.page.program.plant, self.order()

        def work() -> tuple[Any, list[str]]:
            from blendtui.desk.order_words import proposal_text
            from blendtui.desk.proposals import propose

            found = propose(plant, order)
            return found, [*self._other_heel(), *proposal_text(found).split("\n")]

        def show(found: tuple[Any, list[str]]) -> None:
            page.say("")
            proposal, text = found
            keys = [("y", "take the order", lambda: self._take(order, proposal))] if proposal.charges else []
            page.app.push_screen(reading.ReadingScreen(f"{harmless(self.product, 20)}: the charges of this order", text,
                                                       keys))

        page.program.task(work, show, saying="working out the charges …")

    def _other_heel(self) -> list[str]:
        """Where another heel was typed than the vessel has by the book: what the book says, at the head of it all."""
        vessel = next(v for v in self.vessels if v.vessel == self.found["vessel"])
        booked, of, typed = vessel.heel_kg or 0.0, vessel.heel_stock, self.found["heel_kg"]
        if abs(booked - typed) < 1e-9 and (not booked or self.found.get("heel_stock", "") == of):
            return []
        book = f"{booked:g} kg of {harmless(of, 20) or 'unknown oil'}" if booked else "no heel"
        return [f"! by the book {harmless(vessel.vessel, 20)} holds {book}; this order says {typed:g} kg"
                + (f" of {harmless(self.found.get('heel_stock', ''), 40)}" if typed else ""), ""]

    def _take(self, order: Any, seen: Any) -> None:
        page, plant, by = self.page, self.page.program.plant, self.page.session.by

        def make(sure: bool) -> Any:
            from blendtui.desk import orders

            return orders.taken(plant, order, by=by, sure=sure, seen=seen)

        def done(found: Any) -> None:
            made, proposal = found
            page.typed_orders.pop(self.product, None)
            page.wanted = page.session.batch = made.name
            anew = "" if proposal is seen else "its charges were worked out anew, for what they rest on changed; "
            page.program.say(f"{made.name} is ordered; {anew}Enter opens it on the floor, w writes its card", "done")

        page.take_step(make, done, yes="take it")


def anew(page: BatchesScreen, name: str) -> None:
    """Show the charges of an open batch worked out anew, before the first is made; y there takes them."""
    plant, by = page.program.plant, page.session.by

    def work() -> tuple[bool, list[str]]:
        from blendtui.desk.order_words import proposal_text
        from blendtui.desk.orders import propose_again

        found = propose_again(plant, name)
        return bool(found.charges), proposal_text(found).split("\n")

    def take() -> None:
        def make(why: str, sure: bool) -> Any:
            from blendtui.desk import orders

            return orders.redesign(plant, name, by=by, why=why, sure=sure)

        page.type_why(f"{harmless(name, 20)} is designed anew", make, lambda made: page.program.say(
            f"the charges of {harmless(name, 40)} are planned anew; w writes the new card", "done"), yes="plan them")

    def show(found: tuple[bool, list[str]]) -> None:
        page.say("")
        takable, text = found
        keys = [("y", "plan these charges", take)] if takable else []
        page.app.push_screen(reading.ReadingScreen(f"{harmless(name, 40)}: its charges on today's tanks", text, keys))

    page.program.task(work, show, saying="working out the charges …")


# Readers of what is typed

def amount(typed: str) -> tuple[float, str]:
    """An amount and its unit as an order has them: kg, L15 or L20."""
    from blendtui.desk.proposals import amount_of

    return amount_of(typed)


def mass(typed: str) -> float:
    """A mass [kg]; nothing typed is none."""
    from solver.scales import parse

    return parse(typed, "mass") if typed.strip() else 0.0


def celsius(typed: str) -> float | None:
    """A temperature [°C]; nothing typed is the desk's own."""
    from solver.scales import parse

    return parse(typed, "temperature") if typed.strip() else None


def tank_celsius(typed: str) -> dict[str, float]:
    """Temperatures of the tanks [°C]: one for all, or stock by stock.

    >>> tank_celsius("45"), tank_celsius("LIGHT 45 HEAVY 55 C")
    ({'': 45.0}, {'LIGHT': 45.0, 'HEAVY': 55.0})
    """
    parts = [part for part in typed.replace(",", " ").split() if part.upper() not in ("C", "°C")]
    if len(parts) == 1:
        return {"": celsius(parts[0]) or 0.0}
    if len(parts) % 2:
        raise DeskError(f"{harmless(typed, 40)!r}: type one temperature for all tanks, or a stock and its temperature "
                        "for each, such as LIGHT 45 HEAVY 55")
    return {stock: celsius(at) or 0.0 for stock, at in zip(parts[::2], parts[1::2], strict=True)}


def limits(typed: str) -> dict[str, tuple[str, str]]:
    """Limits as typed, `kv40 44 48, vi 98`: property → low and high; `-` leaves a side open.

    >>> limits("kv40 44 48, vi 98")
    {'kv40': ('44', '48'), 'vi': ('98', '')}
    """
    found = {}
    for part in (p.split() for p in typed.split(",") if p.strip()):
        if not 2 <= len(part) <= 3:
            raise DeskError(f"{harmless(' '.join(part), 40)!r}: type a property, its low and its high (- for none)")
        name, low, high = (*part, "")[:3]
        found[property_code(name)] = tuple("" if side in ("-", "–") else side for side in (low, high))
    return found  # type: ignore[return-value]


def line(typed: str) -> tuple[float, str] | None:
    """What a line holds: kg and stock."""
    if not typed.strip():
        return None
    parts = typed.split()
    if len(parts) < 2:
        raise DeskError(f"{harmless(typed, 40)!r}: type kg and a stock, such as 40 N150")
    return mass(" ".join(parts[:-1])), parts[-1]


def flush(typed: str) -> tuple[float, str, bool] | None:
    """Flush oil: kg, stock, and whether it goes into the batch."""
    if not typed.strip():
        return None
    *rest, way = typed.split()
    if way.lower() not in ("in", "out") or len(rest) < 2:
        raise DeskError(f"{harmless(typed, 40)!r}: type kg, a stock, and in (it goes into the batch) or out, such as "
                        "60 N150 in")
    return mass(" ".join(rest[:-1])), rest[-1], way.lower() == "in"


def heel_values(typed: str) -> dict[str, str]:
    """Values of a heel whose origin is unknown, `kv40 46 kv100 6.8`; empty where a stock or batch was typed."""
    parts = typed.split()
    if len(parts) < 2 or len(parts) % 2:
        return {}
    return {property_code(name): value for name, value in zip(parts[::2], parts[1::2], strict=True)}
