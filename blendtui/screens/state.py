"""What the screens show: frozen, and replaced whole."""

from __future__ import annotations

from dataclasses import dataclass, field

from blendtui.desk.answers import Answer, Wishes
from blendtui.store.plant import Plant
from blendtui.store.records import Product, Trial
from solver.stocks import Stock


@dataclass(frozen=True)
class Snapshot:
    """The plant as it was read last."""

    revision: int
    stocks: tuple[Stock, ...]
    products: tuple[Product, ...]
    trials: tuple[Trial, ...]

    def stock(self, code: str) -> Stock | None:
        """The stock of that code."""
        return next((s for s in self.stocks if s.code == code), None)

    def product(self, code: str) -> Product | None:
        """The product of that code."""
        return next((p for p in self.products if p.product == code), None)


def read(plant: Plant) -> Snapshot:
    """Read the plant."""
    # The number first: a change that comes while the rest is read is then seen as a change later on.
    revision = plant.revision()
    return Snapshot(revision, tuple(plant.stocks()), tuple(plant.products()), tuple(plant.trials()))


@dataclass(frozen=True)
class RecipeState:
    """The recipe that every screen speaks of."""

    wishes: Wishes
    request: int = 0  # number of the newest request; an answer to an older one is dropped
    answer: Answer | None = None  # the newest answer; of an older request while `waiting`
    waiting: bool = False
    error: str = ""  # why there is no answer
    blend: int | None = None  # position in answer.blends of the one that is shown; None: the best or the typed


@dataclass(frozen=True)
class StocksState:
    """Which stocks are shown, and in which order."""

    words: str = ""  # the filter
    sort: str = ""  # a column; empty: the plant's own order
    down: bool = False


@dataclass(frozen=True)
class TargetsState:
    """Where the keys go on the targets screen."""

    listing: bool = True  # to the list of products, else to the cells


@dataclass(frozen=True)
class TrialsState:
    """Which trials stand side by side."""

    marked: tuple[tuple[str, str], ...] = ()  # (product, name), in the order they were marked
    comparing: bool = field(default=False)  # the keys go to the comparison
