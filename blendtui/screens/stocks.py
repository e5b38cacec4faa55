"""The stocks: every cell of every tank, found, sorted and edited in place."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from functools import lru_cache

from textual.widget import Widget

from blendtui import commands
from blendtui.desk import numbers
from blendtui.desk import stocks as desk
from blendtui.store.harmless import harmless
from blendtui.widgets.edit_line import Ended
from blendtui.widgets.grid import Column, Grid
from blendtui.widgets.lines import OneLine
from solver.stocks import Stock

from . import words
from .ledger_keys import LedgerCommands
from .state import StocksState

FIRST = ("name", "kv40", "kv100", "vi", "density15", "on_hand_kg", "price_per_t", "api_group", "kind", "flash", "pour",
         "unpumpable_kg", "slope")
LAST = ("blend_kv40", "blend_kv100", "oil", "tested_on", "source")
DERIVED = {"vi": Column("vi", "VI", "", 4), "slope": Column("slope", "slope", "of line", 7)}
TEXTS = {"name": 16, "kind": 15, "api_group": 5, "oil": 10, "tested_on": 10, "source": 11}
HEADINGS = {"density15": ("density", "kg/m³"), "kv40": ("KV40", "mm²/s"), "kv100": ("KV100", "mm²/s"),
            "blend_kv40": ("blend KV40", "mm²/s"), "blend_kv100": ("blend KV100", "mm²/s")}


@lru_cache(maxsize=4096)
def _derived(kv40: float | None, kv100: float | None) -> tuple[float | None, float | None]:
    return desk.derived(Stock("", kv40=kv40, kv100=kv100))


def derived(stock: Stock) -> tuple[float | None, float | None]:
    """VI and slope of a stock's line, remembered: a table asks for them again and again."""
    return _derived(stock.kv40, stock.kv100)


def columns(stocks: Iterable[Stock], wide: bool) -> tuple[Column, ...]:
    """Every cell a stock has as a column, those looked at most first."""
    cells = {c.code: c for c in desk.cells_for(stocks)}
    middle = [c for c in cells if c not in FIRST and c not in LAST]
    found = [Column("code", "stock", "", 9, "left")]
    for code in (*FIRST, *middle, *LAST):
        if code in DERIVED:
            found.append(DERIVED[code])
            continue
        cell = cells[code]
        heading, unit = HEADINGS.get(code, (cell.heading, cell.unit))
        if code in TEXTS:
            width = TEXTS[code] + (10 if wide and code == "name" else 0)
            found.append(Column(code, heading, unit, width, "left"))
        else:
            least = 8 if code in ("on_hand_kg", "price_per_t") else 7
            found.append(Column(code, heading, unit, max(least, len(heading) + 1, len(unit))))
    return tuple(found)


def matches(stock: Stock, words_typed: str) -> bool:
    """Is every typed word found in the stock's code, name, oil, kind or group?"""
    text = f"{stock.code} {stock.name} {stock.oil} {stock.kind} group {stock.api_group}".lower()
    return all(word in text for word in words_typed.lower().split())


class StocksScreen(LedgerCommands):
    """Table of stocks."""

    NAME = commands.STOCKS

    def __init__(self) -> None:
        super().__init__()
        self.state = StocksState()
        self.grid = Grid(id="stocks")
        self.grid.picked = self._show_cell
        self.answer = OneLine(id="answer")
        self.rows: tuple[Stock, ...] = ()

    def body(self) -> Iterable[Widget]:
        """The table and the recipe that follows every edit."""
        return self.grid, self.answer

    def refresh_page(self) -> None:
        """Show the plant as it was read last."""
        here = self.stock.code if self.stock else ""
        self.rows = self._ordered()
        row = next((n for n, s in enumerate(self.rows) if s.code == here), None)
        shown = columns(self.snapshot.stocks, self.size.width >= 110)
        self.grid.empty = (f"no stock has the words {self.state.words!r}; Esc takes the filter off"
                           if self.state.words else "no stock yet; a adds one")
        self.grid.show(shown, len(self.rows), lambda r, c: self._text(self.rows[r], shown[c].code), row=row)
        self.answer.show(*words.summary(self.session))
        self._show_cell()
        super().refresh_page()

    def _ordered(self) -> tuple[Stock, ...]:
        rows = [s for s in self.snapshot.stocks if matches(s, self.state.words)]
        if self.state.sort:
            known = [s for s in rows if _value(s, self.state.sort) not in (None, "")]
            known.sort(key=lambda s: _value(s, self.state.sort), reverse=self.state.down)  # type: ignore[arg-type,return-value]
            rows = known + [s for s in rows if _value(s, self.state.sort) in (None, "")]
        return tuple(rows)

    def _text(self, stock: Stock, code: str) -> str:
        if code == "code":
            return harmless(stock.code)
        if code == "vi":
            return numbers.vi(derived(stock)[0])
        if code == "slope":
            return numbers.figures(derived(stock)[1])
        return desk.text_of(stock, code) or ("" if code in desk.TEXT else numbers.UNKNOWN)

    @property
    def stock(self) -> Stock | None:
        """The stock under the cursor."""
        return self.rows[self.grid.row] if self.grid.row < len(self.rows) else None

    @property
    def column(self) -> Column:
        """The column under the cursor."""
        return self.grid.columns[self.grid.column]

    def _show_cell(self) -> None:
        stock, filtered = self.stock, f"filter {self.state.words!r}, " if self.state.words else ""
        place = f"row {self.grid.row + 1} of {len(self.rows)}" if self.rows else "no rows"
        by = next((c.heading for c in self.grid.columns if c.code == self.state.sort), "")
        sort = f"by {by}{' down' if self.state.down else ''}, " if by else ""
        self.title_line.show(f"{filtered}{sort}{place}", f" as {self.who}" if self.session.by else "")
        if stock is None:
            self.edit.show("", "")
            return
        column = self.column
        unit = f", {column.unit}" if column.unit else ""
        value = (desk.edit_text(stock, column.code) or "unknown" if column.code not in ("code", "vi", "slope")
                 else self._text(stock, column.code))
        name = f" {harmless(stock.name)}" if stock.name and column.code != "name" else ""
        self.edit.show(f"{harmless(stock.code)}{name} · {column.heading}{unit}", value)

    def spare(self) -> int:
        """Blank lines under the table."""
        return self.grid.size.height - self.grid.needs()

    def move(self, key: str) -> None:
        """Move the cell cursor."""
        if self.grid.move(key):
            self._show_cell()

    # Commands

    def do_edit(self) -> None:
        """Edit the cell under the cursor."""
        stock, code = self.stock, self.column.code
        if stock is None:
            self.refuse("there is no stock here; a adds one")
        elif code == "code":
            self.refuse("a stock keeps its code; c copies it under a new one, then d takes this one out of use")
        elif code in DERIVED:
            self.refuse(f"{self.column.heading} follows from KV40 and KV100: edit those")
        else:
            self._edit_cell(stock, code)

    def _edit_cell(self, stock: Stock, code: str) -> None:
        column = desk.cell(code)
        unit = f", {column.unit}" if column.unit else ""
        choices = f" ({' '.join(w for w in desk.WORDS[code] if w)})" if code in desk.WORDS else ""
        seen = desk.value_of(stock, code)
        plant = self.program.plant
        self.type_cell(f"{harmless(stock.code)} {column.heading}{unit}{choices}", desk.edit_text(stock, code),
                       lambda text, sure: desk.edit_cell(plant, stock.code, code, text, sure, seen=seen),
                       lambda edit: self._say_line(stock.code, code, edit))

    def _say_line(self, code: str, cell: str, edit: desk.Edit) -> None:
        """After a KV the VI and the slope of the line, as soon as both stand."""
        stock = self.snapshot.stock(code)
        if edit.status == "saved" and cell in ("kv40", "kv100") and stock is not None:
            vi, slope = derived(stock)
            if slope is not None:
                told = f"VI {numbers.vi(vi)}" if vi is not None else "no VI below KV100 = 2 mm²/s"
                self.program.say(f"{edit.message}; {told}, slope {numbers.figures(slope)}", "done")

    def do_add_value(self) -> None:
        """Give the stock a property that has no column yet."""
        stock = self.stock
        if stock is None:
            self.say("there is no stock here; a adds one")
            return

        def then(typed: list[str]) -> None:
            try:
                code = desk.cell(typed[0].strip().lower()).code
            except desk.DeskError as error:
                self.program.say(str(error), "refused")
                return
            self._edit_cell(stock, code)

        self.type_through([(f"{harmless(stock.code)}: which property (ccs-25, zinc, …)", "")], then)

    def do_filter(self) -> None:
        """Type the words of the filter."""
        self.type_text("show stocks with the words", self.state.words, self._filter)

    def _filter(self, ended: Ended) -> None:
        self.state = replace(self.state, words=" ".join(ended.text.split()))
        self.refresh_page()
        self.say(f"{len(self.rows)} of {len(self.snapshot.stocks)} stocks"
                 + ("; Esc shows all again" if self.state.words else ""))

    def do_sort(self) -> None:
        """Sort by the column under the cursor; then the other way; then not at all."""
        code = self.column.code
        if self.state.sort != code:
            self.state = replace(self.state, sort=code, down=False)
            told = f"sorted by {self.column.heading}, smallest first"
        elif not self.state.down:
            self.state = replace(self.state, down=True)
            told = f"sorted by {self.column.heading}, largest first"
        else:
            self.state = replace(self.state, sort="", down=False)
            told = "in the plant's own order"
        self.refresh_page()
        self.say(f"{told}; unknown last" if self.state.sort else told)

    def do_back(self) -> None:
        """Take the filter off."""
        if self.state.words:
            self._filter(Ended(""))
        else:
            self.program.do_back()

    def do_add(self) -> None:
        """Add a stock."""
        self.type_through([("code of the new stock", "")],
                          lambda typed: self._made(lambda: desk.add_stock(self.program.plant, typed[0]), "added"))

    def do_copy(self) -> None:
        """Copy the stock under the cursor."""
        stock = self.stock
        if stock is None:
            self.say("there is no stock to copy")
            return
        self.type_through([(f"code of the copy of {harmless(stock.code)}", "")],
                          lambda typed: self._made(lambda: desk.copy_stock(self.program.plant, stock.code, typed[0]),
                                                   f"added as a copy of {harmless(stock.code)}"))

    def _made(self, make, what: str) -> None:  # type: ignore[no-untyped-def]
        def done(stock: Stock) -> None:
            self.state = StocksState()
            self.refresh_page()
            row = next((n for n, s in enumerate(self.rows) if s.code == stock.code), 0)
            self.grid.show(self.grid.columns, len(self.rows), self.grid.cell, row=row)
            self._show_cell()
            self.program.say(f"{stock.code} {what}: give it its KV40, KV100, density, price and quantity; "
                             "u takes it back", "done")

        self.program.change(make, done)

    def do_retire(self) -> None:
        """Take the stock under the cursor out of use."""
        stock = self.stock
        if stock is None:
            self.say("there is no stock here")
            return
        self.program.change(lambda: desk.retire_stock(self.program.plant, stock.code),
                            lambda told: self.program.say(f"{told}; u brings it back", "done"))


def _value(stock: Stock, code: str) -> float | str | None:
    if code == "code":
        return stock.code
    if code == "vi":
        return derived(stock)[0]
    if code == "slope":
        return derived(stock)[1]
    value = desk.value_of(stock, code)
    return value.lower() if isinstance(value, str) else value
