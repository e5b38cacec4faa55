"""The recipe: the best blend or the operator's own, and everything that is known of it."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

from textual.widget import Widget

from blendtui import commands
from blendtui.desk import blends, numbers, sheet
from blendtui.desk.answers import Answer, Wishes
from blendtui.desk.errors import DeskError
from blendtui.desk.stocks import Edit, amount
from blendtui.store.harmless import harmless
from blendtui.widgets.grid import Cell, Grid
from blendtui.widgets.head import Head
from blendtui.widgets.lines import OneLine
from blendtui.widgets.page_text import PageText
from solver.target import LAWS

from . import recipe_view as view
from . import words
from .base import Page

if TYPE_CHECKING:
    from solver.recipe import Recipe

FRAME = 10  # lines of an 80-column screen that are neither shares nor remarks
SHARE = 2  # column of the shares table where typing is meant


class RecipeScreen(Page):
    """Shares above, limits and remarks below."""

    NAME = commands.RECIPE

    def __init__(self) -> None:
        super().__init__()
        self.head = Head()
        self.shares = Grid(id="shares")
        self.shares.column = SHARE
        self.shares.picked = self._show_cell
        self.notes = PageText(id="notes")
        self.caution = OneLine(id="caution")
        self.rows: list[view.ShareRow] = []
        self.noted: tuple[object, ...] = ()  # what the remarks are of: on another they begin at the top
        self.back = True  # come from another screen: another blend is shown from its largest share
        self.seen: Mapping[str, float] = {}  # the shares that were shown last

    def body(self) -> Iterable[Widget]:
        """Head, shares, remarks, and the caution that always stands."""
        return self.head, self.shares, self.notes, self.caution

    def refresh_page(self) -> None:
        """Show the newest answer."""
        state, recipe, width = self.session.state, self.session.shown, self.size.width
        lines, rest = view.head(state, recipe, width, 2)
        self.head.show(lines)
        here = self.row.stock.code if self.row else ""
        if state.answer is None or recipe is None:
            self.rows = []
            self.shares.empty = ""
            self.shares.foot = None
            self.shares.show(view.share_columns(1.0, width), 0, lambda r, c: "")
            self.notes.show([])
        else:
            self._show(state.answer, recipe, here, rest)
        self.caution.show((words.CAUTION, None))
        self._show_cell()
        super().refresh_page()

    def _show(self, answer: Answer, recipe: Recipe, here: str, rest: list[str]) -> None:
        width, today = self.size.width, self.program.today
        self.rows = view.share_rows(answer, recipe)
        scale = view.scale_of(self.rows)
        columns = view.share_columns(scale, width)
        bar_width = next(c.width for c in columns if c.code == "bar")

        def cell(row: int, column: int) -> Cell:
            return view.share_cell(self.rows[row], columns[column].code, recipe, scale, today, bar_width)

        at = next((n for n, r in enumerate(self.rows) if r.stock.code == here), None)
        other = bool(self.noted) and self.noted[0] != self.session.product
        if (self.back or other) and not self.session.state.waiting:
            at = at if dict(recipe.shares or {}) == self.seen else 0
            self.back = False
        self.seen = dict(recipe.shares or {})
        self.shares.empty = "no stock may serve this product: its rules allow none, see Targets"
        notes = view.notes(answer, recipe, today, width, rest)
        self.shares.foot = lambda column: view.total_cell(recipe, answer.stocks, columns[column].code)
        self._share_out(len(notes), len(self.rows) + 3)
        self.shares.show(columns, len(self.rows), cell, row=at)
        of = (self.session.product, self.session.state.blend, self.wishes.typed is None)
        self.notes.show(notes, keep=of == self.noted)
        self.noted = of

    def _share_out(self, notes: int, shares: int) -> None:
        """Give the shares the lines they need, the remarks at least a third."""
        room = max(8, self.size.height - FRAME)
        height = max(5, min(shares, max(room - notes, room * 3 // 5)))
        if self.shares.styles.height is None or self.shares.styles.height.value != height:
            self.shares.styles.height = height

    def on_screen_suspend(self) -> None:
        """Another screen is opened."""
        self.back = True

    def on_resize(self) -> None:
        """Lay everything for the new size."""
        self.refresh_page()

    @property
    def row(self) -> view.ShareRow | None:
        """The stock under the cursor."""
        return self.rows[self.shares.row] if self.shares.row < len(self.rows) else None

    def _show_cell(self) -> None:
        product, state = self.snapshot.product(self.session.product), self.session.state
        grade = f" · {product.grade}" if product and product.grade else ""
        batch = f" · {numbers.kg(state.answer.target.batch_kg)} kg" if state.answer else ""
        self.title_line.show(harmless(self.session.product), batch, grade)
        row = self.row
        if row is None:
            self.edit.show("", "")
            return
        name = f" {harmless(row.stock.name)}" if row.stock.name else ""
        why = f", cannot serve: {row.reason}" if row.reason else ""
        have = row.stock.available_kg
        self.edit.show(f"{harmless(row.stock.code)}{name}",
                       f"{numbers.pct(row.share)} % · {numbers.kg(have)} kg pumpable{why}")

    def spare(self) -> int:
        """Blank lines under the remarks."""
        return self.notes.size.height - len(self.notes.lines)

    def move(self, key: str) -> None:
        """Move in the shares or in the remarks."""
        if self.notes.active:
            self.notes.move(key)
        elif self.shares.move(key):
            self._show_cell()

    def do_pane(self) -> None:
        """From the shares to the remarks, and back."""
        self.shares.activate(self.notes.active)
        self.notes.activate(not self.notes.active)

    # Wishes

    @property
    def wishes(self) -> Wishes:
        """What is wished now."""
        return self.session.state.wishes

    def _wish(self, wishes: Wishes, what: str) -> None:
        self.session.wish(wishes, what)
        self.program.say(f"{what}; u takes it back", "done")
        self.refresh_page()

    def _type_wish(self, label: str, text: str, make: Callable[[str], tuple[Wishes, str]]) -> None:
        """Type something that becomes a wish; what cannot be read comes back to the line."""
        self.type_checked(label, text, make, lambda made: self._wish(*made))

    def _here(self) -> tuple[view.ShareRow, Recipe] | None:
        row, recipe = self.row, self.session.shown
        if row is None or recipe is None:
            self.say("there is no stock here yet")
            return None
        return row, recipe

    def _fraction(self, typed: str) -> float:
        """A share typed in %, as a fraction, or as a mass of the batch."""
        from solver.scales import parse, split

        if not typed:
            return 0.0
        unit = split(typed)[1]
        batch = self.session.shown.batch_kg if self.session.shown else None
        if batch and unit in ("kg", "t", "lb", "lbs", "g"):
            share = parse(typed, "mass") / batch
        else:
            share = parse(typed, "share")
        if not 0.0 <= share <= 1.0:
            raise DeskError(f"{numbers.pct(share)} % cannot be: a share lies within 0 to 100 %")
        return share

    def do_edit(self) -> None:
        """Type the share of the stock under the cursor."""
        here = self._here()
        if here is None:
            return
        row, recipe = here
        code = row.stock.code

        def make(typed: str) -> tuple[Wishes, str]:
            share = self._fraction(typed)
            shares = {**(recipe.shares or {}), code: share}
            return (replace(self.wishes, typed={c: x for c, x in shares.items() if x > 0.0}),
                    f"{code} {numbers.pct(row.share)} → {numbers.pct(share)} % by hand")

        self._type_wish(f"{harmless(code)} share, % (or kg)", numbers.pct(row.share) if row.share else "", make)

    def do_fill(self) -> None:
        """Give the stock under the cursor what the shares lack of 100 %."""
        here = self._here()
        if here is None:
            return
        row, recipe = here
        shares = dict(recipe.shares or {})
        rest = 1.0 - sum(x for c, x in shares.items() if c != row.stock.code)
        if rest < -1e-9:
            self.say(f"the other shares are more than 100 % already ({numbers.pct(1.0 - rest)} %)", "refused")
            return
        shares[row.stock.code] = max(0.0, rest)
        self._wish(replace(self.wishes, typed={c: x for c, x in shares.items() if x > 0.0}),
                   f"{row.stock.code} filled up to {numbers.pct(rest)} %")

    def do_best(self) -> None:
        """Back to the least cost."""
        self.noted = ()
        if self.session.state.blend is not None:
            self.session.step(None)
        if self.wishes.typed is not None:
            self._wish(replace(self.wishes, typed=None), "back to the best")
        else:
            self.program.say("this is the best" + (" under your holds; c clears them" if self.wishes.held
                                                   or self.wishes.left_out else ""))
            self.refresh_page()

    def do_hold(self) -> None:
        """Hold the stock under the cursor at a share, or let it go."""
        here = self._here()
        if here is None:
            return
        row, _ = here
        code = row.stock.code
        if code in self.wishes.held:
            rest = {c: x for c, x in self.wishes.held.items() if c != code}
            self._wish(replace(self.wishes, held=rest, typed=None), f"{code} let go")
            return

        def make(typed: str) -> tuple[Wishes, str]:
            if not typed:
                raise DeskError("type the share at which it is held, in %; Esc drops it")
            share = self._fraction(typed)
            held: Mapping[str, float] = {**self.wishes.held, code: share}
            wishes = replace(self.wishes, held=held, typed=None, left_out=self.wishes.left_out - {code})
            return wishes, f"{code} held at {numbers.pct(share)} %"

        self._type_wish(f"hold {harmless(code)} at, % (or kg)", numbers.pct(row.share), make)

    def do_leave(self) -> None:
        """Leave the stock under the cursor out, or let it in again."""
        here = self._here()
        if here is None:
            return
        code = here[0].stock.code
        if code in self.wishes.left_out:
            self._wish(replace(self.wishes, left_out=self.wishes.left_out - {code}, typed=None), f"{code} let in")
        else:
            held = {c: x for c, x in self.wishes.held.items() if c != code}
            self._wish(replace(self.wishes, left_out=self.wishes.left_out | {code}, held=held, typed=None),
                       f"{code} left out")

    def do_free(self) -> None:
        """No holds, nothing left out."""
        wishes = self.wishes
        if wishes.held or wishes.left_out or wishes.moved:
            self._wish(replace(wishes, held={}, left_out=frozenset(), moved={}, typed=None),
                       "holds and what-ifs cleared, nothing left out")
        else:
            self.say("nothing is held, left out or moved as a what-if")

    def do_all_laws(self) -> None:
        """Type the laws under which every limit must hold at once."""
        def make(typed: str) -> tuple[Wishes, str]:
            under = blends.laws_named(typed)
            told = "all five laws" if under == LAWS else ", ".join(under)
            return replace(self.wishes, also_laws=under), f"held under {told}" if under else "held under one law"

        now = self.wishes.also_laws
        self._type_wish("hold under these laws too (all, or names such as wright; empty: one law)",
                        "all" if not now or now == LAWS else " ".join(now), make)

    def do_whole(self) -> None:
        """Charges in whole steps, or in any mass."""
        whole, dropped = not self.wishes.whole, "" if self.wishes.confidence is None else ", no chance asked any more"
        self._wish(replace(self.wishes, whole=whole, confidence=None, typed=None),
                   ("charges in whole steps" if whole else "charges of any mass") + dropped)

    def do_sure(self) -> None:
        """Type the chance at which each limit is to be met."""
        def make(typed: str) -> tuple[Wishes, str]:
            from blendtui.desk import chance

            if not typed:
                return replace(self.wishes, confidence=None, typed=None), "no chance asked"
            asked = chance.confidence(typed)
            return replace(self.wishes, confidence=asked, whole=False, typed=None), words.chance(self.wishes, asked)

        now = self.wishes.confidence
        self._type_wish("chance of each limit, % (empty: none)", "" if now is None else f"{100.0 * now:.4g}", make)

    def do_batch(self) -> None:
        """Type the size of the batch."""
        answer = self.session.state.answer
        size = answer.target.batch_kg if answer else None

        def make(typed: str) -> tuple[Wishes, str]:
            if not typed:
                return replace(self.wishes, batch_kg=None), "batch as the product says"
            shown = self.session.shown
            mass = amount(typed, "batch_kg", shown.predicted.get("density15") if shown else None)
            if mass <= 0.0:
                raise DeskError(f"a batch of {mass:g} kg cannot be; type kg, t or L")
            return replace(self.wishes, batch_kg=mass), f"batch {numbers.kg(mass)} kg"

        self._type_wish("batch, kg (12 t, 5000 L; empty: the product's)", "" if size is None else f"{size:.12g}", make)

    def do_law(self) -> None:
        """Go to the next law."""
        answer = self.session.state.answer
        now = self.wishes.law or (answer.target.law if answer else LAWS[0])
        law = LAWS[(LAWS.index(now) + 1) % len(LAWS)]
        self._wish(replace(self.wishes, law=law), f"law {law}")

    # Blends and trials

    def do_next(self) -> None:
        """The next feasible blend."""
        self._step(1)

    def do_previous(self) -> None:
        """The feasible blend before."""
        self._step(-1)

    def _step(self, by: int) -> None:
        state = self.session.state
        if state.error:
            self.say(f"there is no blend to step to: {state.error}", "refused")
        elif state.answer is None or "blends" not in state.answer.done:
            self.say("the feasible blends are being worked out; a moment", "wait")
        elif not state.answer.blends:
            self.say("there is no feasible blend to step to", "refused")
        else:
            at = (0 if by > 0 else -1) if state.blend is None else state.blend + by
            self.session.step(at % len(state.answer.blends))
            self.refresh_page()
            self.say(f"feasible blend {self.session.state.blend + 1} of {len(state.answer.blends)}, cheapest first; "  # type: ignore[operator]
                     "t takes it, b shows the best")

    def do_take(self) -> None:
        """Make the shown shares one's own."""
        recipe, state = self.session.shown, self.session.state
        if recipe is None or not recipe.shares:
            self.say("there are no shares to take yet")
        elif state.blend is None and self.wishes.typed is not None:
            self.say("these shares are yours already")
        else:
            self._wish(replace(self.wishes, typed=dict(recipe.shares)), "blend taken: type over its shares with Enter")

    def do_keep(self) -> None:
        """Keep the shown blend as a trial."""
        recipe, product, plant = self.session.shown, self.session.product, self.program.plant
        if recipe is None or not recipe.shares:
            self.say("there are no shares to keep yet")
            return
        total = sum(recipe.shares.values())
        if abs(total - 1.0) > 1e-4:
            self.program.say(f"the shares sum to {numbers.pct(total)} %, not to 100 %: put the cursor on a stock and "
                             "press f to fill up", "refused")
            return
        taken = {t.name for t in self.snapshot.trials if t.product == product}
        name = next(n for k in range(1, 10_000) if (n := f"{product}-{k}") not in taken)
        self.type_cell("name of the trial", name,
                       lambda typed, sure: Edit("saved", blends.keep_trial(plant, typed, product, recipe)))

    def do_write(self) -> None:
        """Write the sheet for the floor."""
        recipe, product, program = self.session.shown, self.session.product, self.program
        answer = self.session.state.answer
        asked = self.snapshot.product(product)
        if recipe is None or answer is None or asked is None or not recipe.shares:
            self.say("there is no recipe to write yet")
            return
        text = sheet.floor_sheet(program.plant.path.name, asked, recipe, answer.stocks,
                                 datetime.now(UTC).astimezone(), program.plant.who)

        def save(typed: str, sure: bool) -> Edit:
            if not typed.strip():
                raise DeskError("no file name: type where the sheet is to be written")
            return Edit("saved", sheet.write_sheet(program.sheets / Path(typed.strip()).expanduser(), text))

        self.type_cell("write the sheet to", str(program.sheets / f"{product}-{program.today.isoformat()}.txt"), save)
