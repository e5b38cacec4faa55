"""The targets: what each product asks for, edited in place."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace

from textual.containers import Horizontal
from textual.widget import Widget

from blendtui import commands
from blendtui.desk import targets as desk
from blendtui.desk.stocks import Edit
from blendtui.store.harmless import harmless
from blendtui.store.records import Product
from blendtui.widgets.edit_line import Ended
from blendtui.widgets.grid import Cell, Column, Grid, Wide, more_only
from blendtui.widgets.lines import OneLine
from blendtui.widgets.paint import BOLD, DIM
from solver.errors import SolverError
from solver.grades import grade
from solver.properties import lookup
from solver.target import LAWS, Limit, ShareRule

from . import words
from .base import Page, step
from .state import TargetsState

CELLS = (Column("what", "asks for", "", 25, "left"), Column("low", "low / value", "", 11),
         Column("high", "high", "", 9), Column("guard", "guard", "", 7))
HINTS = {"law": f" ({' '.join(LAWS)})", "only_listed": " (yes no)", "grade": " (ISO VG 46, SAE 30, SAE 80W-90)"}


@dataclass(frozen=True)
class Row:
    """One row of the cells: what it is of, and its texts."""

    kind: str  # "cell", "limit", "grade", "rule" or "head"
    key: str = ""  # the product cell, the property, or what the rule is of
    texts: tuple[str, ...] = ("", "", "", "")


def rows_of(product: Product) -> list[Row]:
    """The cells of a product, its limits with those its grade brings, and its share rules."""
    found = [Row("cell", c.code, (c.heading + (f", {c.unit}" if c.unit else ""),
                                  _shown(product, c.code), "", "")) for c in desk.PRODUCT_CELLS]
    found.append(Row("head", "", ("LIMITS  (l adds one)", "low", "high", "guard")))
    found += [Row("grade", x.property, (lookup(x.property).label, *_bare(x)[:2], "grade"))
              for x in _grade_limits(product)]
    found += [Row("limit", x.property, (lookup(x.property).label + (" ?ok" if x.unknown_ok else ""), *_bare(x)))
              for x in product.limits]
    found.append(Row("head", "", ("SHARES, %  (s adds one)", "low", "high", "")))
    return found + [Row("rule", r.of, (harmless(r.of), *rule_texts(r), "")) for r in product.rules]


def _shown(product: Product, cell: str) -> str:
    return desk.text_of(product, cell) or ("– (refutas)" if cell == "law" else "–")


def _bare(limit: Limit) -> tuple[str, ...]:
    return tuple(text or "–" for text in desk.limit_texts(limit))


def rule_texts(rule: ShareRule) -> tuple[str, str]:
    """Low and high of a rule in mass %, as they may be typed back."""
    return f"{100.0 * rule.low:.12g}", f"{100.0 * rule.high:.12g}"


def _grade_limits(product: Product) -> tuple[Limit, ...]:
    if not product.grade:
        return ()
    try:
        found = grade(product.grade)
    except SolverError:
        return ()
    return found.limits + found.if_known


class TargetsScreen(Page):
    """List of products, and the cells of the chosen one."""

    NAME = commands.TARGETS

    def __init__(self) -> None:
        super().__init__()
        self.state = TargetsState()
        self.products = Grid(id="products")
        self.cells = Grid(id="cells")
        self.cells.foot = more_only
        self.cells.active = False
        self.products.picked = lambda: self._picked(True)
        self.cells.picked = lambda: self._picked(False)
        self.answer = OneLine(id="answer")
        self.rows: list[Row] = []

    def body(self) -> Iterable[Widget]:
        """Two tables side by side, and the recipe that follows every edit."""
        return Horizontal(self.products, self.cells, id="sides"), self.answer

    @property
    def product(self) -> Product | None:
        """The chosen product."""
        return self.snapshot.product(self.session.product)

    @property
    def row(self) -> Row:
        """The row of cells under the cursor."""
        return self.rows[self.cells.row] if self.rows else Row("head")

    def refresh_page(self) -> None:
        """Show the products, and the chosen one's cells."""
        products = self.snapshot.products
        wide = self.size.width >= 110
        listed = (Column("product", "product", "", 9, "left"), Column("grade", "grade", "", 11, "left"),
                  *((Column("name", "name", "", 17, "left"),) if wide else ()))
        at = next((n for n, p in enumerate(products) if p.product == self.session.product), 0)
        self.products.empty = "none yet"
        self.cells.empty = "no product yet; a adds one"
        self.products.show(listed, len(products), lambda r, c: harmless(getattr(products[r], listed[c].code)), row=at)
        product = self.product
        self.rows = rows_of(product) if product else []
        self.cells.show(CELLS, len(self.rows), self._cell)
        self.answer.show(*words.summary(self.session))
        self._show_cell()
        super().refresh_page()

    def _cell(self, row: int, column: int) -> Cell:
        line = self.rows[row]
        text = line.texts[column]
        if line.kind == "head":
            return text, BOLD
        if line.kind == "grade":
            return text, DIM
        return Wide(text) if line.kind == "cell" and column == 1 else text

    def _show_cell(self) -> None:
        product, row = self.product, self.row
        count = len(self.snapshot.products)
        self.title_line.show(f"product {self.products.row + 1} of {count}" if count else "no products")
        if product is None:
            self.edit.show("", "")
        elif self.state.listing:
            self.edit.show(harmless(product.product), harmless(product.name) or product.grade)
        elif row.kind == "head":
            self.edit.show(harmless(product.product), "")
        else:
            of = f"{harmless(product.product)} · {row.texts[0]}"
            column = self.cells.column
            if row.kind == "cell":
                self.edit.show(of, row.texts[1])
            elif row.kind == "grade":
                self.edit.show(of, f"{row.texts[1]} to {row.texts[2]}, from the grade {product.grade}")
            else:
                self.edit.show(f"{of} {CELLS[column].code}" if column else of, row.texts[column] if column else "")

    def spare(self) -> int:
        """Blank lines under both tables."""
        return min(grid.size.height - grid.needs() for grid in (self.products, self.cells))

    def move(self, key: str) -> None:
        """Move in the list or in the cells; past the edge into the other."""
        if self.state.listing:
            if key == "right":
                self.do_pane()
            elif self.products.move(key):
                self.session.choose(self.snapshot.products[self.products.row].product)
                self.cells.row = 0
                self.refresh_page()
        elif not self.cells.move(key) and key == "left":
            self.do_pane()
        self._show_cell()

    def _picked(self, listing: bool) -> None:
        if listing:
            self.session.choose(self.snapshot.products[self.products.row].product)
        if self.state.listing != listing:
            self.do_pane()
        self.refresh_page()

    def do_pane(self) -> None:
        """From the list to the cells, and back."""
        self.state = replace(self.state, listing=not self.state.listing)
        self.products.activate(self.state.listing)
        self.cells.activate(not self.state.listing)
        if not self.state.listing and self.cells.column == 0:
            self.cells.move("right")
        self._show_cell()

    # Cells

    def do_edit(self) -> None:
        """Edit the cell under the cursor; in the list, go to the cells."""
        product, row = self.product, self.row
        if product is None:
            self.say("there is no product yet; a adds one")
        elif self.state.listing:
            self.do_pane()
        elif row.kind == "cell":
            self._edit_cell(product, row)
        elif row.kind in ("limit", "grade"):
            self._edit_limit(product, row)
        elif row.kind == "rule":
            self._edit_rule(product, row)
        else:
            self.refuse("this is a heading; l adds a limit, s adds a share rule")

    def _edit_cell(self, product: Product, row: Row) -> None:
        plant, code = self.program.plant, product.product
        self.type_cell(f"{harmless(code)} {row.texts[0]}{HINTS.get(row.key, '')}", desk.text_of(product, row.key),
                       lambda text, sure: desk.edit_product(plant, code, row.key, text, seen=product))

    def _edit_limit(self, product: Product, row: Row) -> None:
        side = CELLS[max(1, self.cells.column)].code
        own = next((x for x in product.limits if x.property == row.key), None)
        texts = dict(zip(("low", "high", "guard"), desk.limit_texts(own) if own else ("", "", ""), strict=True))
        plant, code = self.program.plant, product.product

        def save(text: str, sure: bool) -> Edit:
            return desk.set_limit(plant, code, row.key, **{**texts, side: text}, seen=product)

        hint = " (or % of the limit)" if side == "guard" else " (empty: open)"
        self.type_cell(f"{harmless(code)} {lookup(row.key).label} {side}{hint}", texts[side], save)

    def _edit_rule(self, product: Product, row: Row) -> None:
        side = "high" if self.cells.column == 2 else "low"
        texts = {"low": row.texts[1], "high": row.texts[2]}
        plant, code = self.program.plant, product.product
        self.type_cell(f"{harmless(code)} share of {row.texts[0]}, {side}, %", texts[side],
                       lambda text, sure: desk.set_rule(plant, code, row.key, **{**texts, side: text},
                                                        seen=product))

    # Lines

    def do_limit(self) -> None:
        """Add a limit, asked for part by part."""
        product = self._chosen()
        if product is None:
            return
        code, plant = product.product, self.program.plant

        def then(prop: str) -> None:
            own = next((x for x in product.limits if x.property == prop), None)
            texts = desk.limit_texts(own) if own else ("", "", "")
            label = f"{harmless(code)} {words.heading(prop)}"
            hints = ("low (empty: open)", "high (empty: open)", "guard (1.5 or 2%, empty: none)")
            self.type_through([(f"{label} {hint}", text) for hint, text in zip(hints, texts, strict=True)],
                              lambda t: self._line(lambda: desk.set_limit(plant, code, prop, *t, seen=product)), 1)
            if own:
                self.say(f"{harmless(code)} has a limit on {prop} already: its present values stand on the line")

        self.type_checked(step(1, 4, f"{harmless(code)} new limit on which property (kv40 kv100 vi flash pour "
                                     "density15 …)"), "", words.property_code, then)

    def do_rule(self) -> None:
        """Add a share rule, asked for part by part."""
        product = self._chosen()
        if product is None:
            return
        code, plant = product.product, self.program.plant

        def then(ended: Ended) -> None:
            of = ended.text.strip()
            own = next((r for r in product.rules if r.of.casefold() == of.casefold()), None)
            low, high = rule_texts(own) if own else ("0", "100")
            of = own.of if own else of
            self.type_through([(f"{harmless(of)} least share, %", low), (f"{harmless(of)} most share, %", high)],
                              lambda t: self._line(lambda: desk.set_rule(plant, code, of, *t, seen=product)), 1)
            if own:
                self.say(f"{harmless(code)} has a rule on {harmless(of)} already: its present values stand on the line")

        self.type_text(step(1, 3, f"{harmless(code)} share of which stock (or oil, kind, group: group II)"), "", then)

    def _line(self, make: Callable[[], Edit]) -> None:
        self.program.change(make, lambda edit: self.program.say(edit.message, "done"))

    def do_unknown(self) -> None:
        """Let stocks serve whose value is unknown, or no longer."""
        product, row = self.product, self.row
        own = next((x for x in product.limits if x.property == row.key), None) if product else None
        if product is None or self.state.listing or row.kind != "limit" or own is None:
            self.say("put the cursor on one of the product's own limits first")
            return
        plant, code = self.program.plant, product.product
        self._line(lambda: desk.set_limit(plant, code, row.key, *desk.limit_texts(own),
                                          unknown_ok=not own.unknown_ok, seen=product))

    def do_drop(self) -> None:
        """Drop the line under the cursor; in the list, the product."""
        product, row = self.product, self.row
        if product is None:
            self.say("there is no product here")
            return
        plant, code = self.program.plant, product.product
        if self.state.listing:
            self._told(lambda: desk.retire_product(plant, code))
        elif row.kind == "limit":
            self._told(lambda: desk.drop_limit(plant, code, row.key))
        elif row.kind == "rule":
            self._told(lambda: desk.drop_rule(plant, code, row.key))
        elif row.kind == "grade":
            self.say("this limit comes with the grade: change the grade to lose it")
        else:
            self.say("put the cursor on a limit or a share rule; Enter and an empty text clear a cell")

    def _told(self, make: Callable[[], str]) -> None:
        self.program.change(make, lambda told: self.program.say(f"{told}; u brings it back", "done"))

    def _chosen(self) -> Product | None:
        if self.product is None:
            self.say("there is no product yet; a adds one")
        return self.product

    # Products

    def do_add(self) -> None:
        """Add a product."""
        self.type_through([("code of the new product", ""), ("its grade (ISO VG 46, SAE 30; empty: none)", "")],
                          lambda t: self._made(lambda: desk.add_product(self.program.plant, *t), "added"))

    def do_copy(self) -> None:
        """Copy the chosen product."""
        product = self._chosen()
        if product is not None:
            self.type_through([(f"code of the copy of {harmless(product.product)}", "")],
                              lambda t: self._made(lambda: desk.copy_product(self.program.plant, product.product, t[0]),
                                                   f"added as a copy of {harmless(product.product)}"))

    def _made(self, make: Callable[[], Product], what: str) -> None:
        def done(product: Product) -> None:
            self.session.choose(product.product)
            self.refresh_page()
            self.program.say(f"{product.product} {what}; u takes it back", "done")

        self.program.change(make, done)
