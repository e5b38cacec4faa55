"""Back from a batch: its charges and their lots, and through rework and heels the batches before, in proportions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from blendtui.store.batch_records import Charge, Content, Lot

from . import batches, numbers
from .oil_past import LEAST_PART, Past, drawn_at, left_at, lots_of, when_drawn
from .topping_up import EARLIER


@dataclass(frozen=True)
class Node:
    """One step back. Masses and parts are of what is traced."""

    what: str  # "batch", "charge", "heel", "line", "flush" or "lot"
    name: str
    kg: float
    part: float  # 0–1
    words: str = ""
    below: tuple[Node, ...] = ()
    mark: str = ""  # what is odd of it, in two or three words


@dataclass(frozen=True)
class Origin:
    """Where oil comes from at last: a lot of a stock, or a stock of which no lot is known."""

    stock: str  # empty: unknown
    lot: str  # empty: not recorded; "before": from before the first receipt
    kg: float
    part: float  # of what is traced, 0–1
    receipt: Lot | None = None


@dataclass
class Back:
    """Follows oil back, and adds up where it comes from."""

    past: Past
    sums: dict[tuple[str, str], list[float]] = field(default_factory=dict)
    followed: dict[str, float] = field(default_factory=dict)  # batch → its part of what is traced
    faint: float = 0.0  # part of what is traced that was not followed further

    def batch(self, name: str, at: str, kg: float, part: float, above: frozenset[str] = frozenset()
              ) -> tuple[Node, ...]:
        """What oil of a batch, drawn at a time, was made of: `kg` of it, `part` of what is traced."""
        made = self.past.made(name)
        if made is None or name in above or part < LEAST_PART:
            self.faint += part
            return ()
        self.followed[name] = self.followed.get(name, 0.0) + part
        things = when_drawn(made, at)
        total = sum(mass for _, mass in things)
        if total <= 0.0:
            self.ends(name, "", kg, part)
            return ()
        found = []
        for thing, mass in things:
            here = mass / total
            step = self._charge if isinstance(thing, Charge) else self._content
            found.append(step(thing, kg * here, part * here, above | {name}))  # type: ignore[arg-type]
        return tuple(found)

    def _charge(self, charge: Charge, kg: float, part: float, above: frozenset[str]) -> Node:
        lots = lots_of(charge)
        below = self._lots(charge.stock, lots, kg, part, above)
        words = f"charged {batches.when(charge.at)}" + (f" by {charge.by}" if charge.by else "")
        return Node("charge", charge.stock, kg, part, words if lots else f"{words}; no lot was recorded", below,
                    "" if lots else "no lot")

    def _lots(self, stock: str, lots: Mapping[str, float], kg: float, part: float, above: frozenset[str]
              ) -> tuple[Node, ...]:
        if not lots:
            self.ends(stock, "", kg, part)
        return tuple(self.lot(stock, lot, kg * of, part * of, above) for lot, of in
                     sorted(lots.items(), key=lambda each: -each[1]))

    def _content(self, content: Content, kg: float, part: float, above: frozenset[str]) -> Node:
        made = self.past.made(content.stock) if content.stock and content.stock not in self.past.stocks else None
        if made is None:
            below = self._lots(content.stock, content.lots, kg, part, above)
            mark = "" if below else "no lot" if content.stock else "unknown origin"
            return Node(content.what, content.stock, kg, part, mark, below, mark)
        below = self.batch(content.stock, left_at(made), kg, part, above)
        mark = "" if below else "not followed"
        return Node(content.what, content.stock, kg, part, mark and f"{mark} further", below, mark)

    def lot(self, stock: str, lot: str, kg: float, part: float, above: frozenset[str] = frozenset()) -> Node:
        """A lot, and the batch it is rework of."""
        receipt = self.past.lot(stock, lot)
        made = self.past.made(receipt.from_batch) if receipt is not None and receipt.from_batch else None
        if receipt is None or made is None:
            self.ends(stock, lot, kg, part)
            return Node("lot", lot, kg, part, receipt_words(receipt, lot), (), "" if receipt else "no receipt")
        below = self.batch(made.name, drawn_at(made, stock, lot), kg, part, above)
        words = f"rework of {made.name}"
        return Node("lot", lot, kg, part, words + ("" if below else ", not followed further"), below, words)

    def ends(self, stock: str, lot: str, kg: float, part: float) -> None:
        """Oil that is followed no further: a lot that was bought, or of which nothing more is known."""
        sums = self.sums.setdefault((stock, lot), [0.0, 0.0])
        sums[0] += kg
        sums[1] += part

    def origins(self) -> tuple[Origin, ...]:
        """Where all of it comes from, largest first."""
        return tuple(Origin(stock, lot, kg, part, self.past.lot(stock, lot)) for (stock, lot), (kg, part) in
                     sorted(self.sums.items(), key=lambda each: (-each[1][1], each[0])))


def receipt_words(receipt: Lot | None, lot: str) -> str:
    """A lot's own papers, in words."""
    if receipt is None:
        return "from before the first receipt" if lot == EARLIER else "no receipt was recorded"
    paper = f", certificate {receipt.certificate}" if receipt.certificate else ""
    return f"{numbers.kg(receipt.kg)} kg received {batches.when(receipt.received_at)[:10]}{paper}"
