"""The one table of what can be done at the console: key line, palette and help screen are made from it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

ALL = "everywhere"
STOCKS, TARGETS, RECIPE, TRIALS = "stocks", "targets", "recipe", "trials"
WHY, CHOICES, CHANCE, LAB = "why", "choices", "chance", "lab"
BATCHES, FLOOR = "batches", "floor"
SCREENS: tuple[tuple[str, str], ...] = ((STOCKS, "Stocks"), (TARGETS, "Targets"), (RECIPE, "Recipe"),
                                        (TRIALS, "Trials"), (WHY, "Why"), (CHOICES, "Else"), (CHANCE, "Sure"),
                                        (LAB, "Lab"), (BATCHES, "Batches"), (FLOOR, "Floor"))
KEYS = {code: str(n % 10) for n, (code, _) in enumerate(SCREENS, 1)}  # the key that opens a screen: 1 to 9, then 0
MOVES = ("up", "down", "left", "right", "pageup", "pagedown", "home", "end", "ctrl+home", "ctrl+end")


@dataclass(frozen=True)
class Command:
    """One thing that can be done."""

    keys: tuple[str, ...]  # as Textual names them, or the character itself
    action: str  # the screen, or else the program, carries it out in do_<action>
    label: str  # two words at most, for the key line
    screen: str  # where; ALL: on every screen
    help: str  # one sentence
    shown: str = ""  # the key as a person reads it, where it is not the first of `keys`
    changes: bool = False  # waits until an edit that is under way has been saved
    listed: bool = True  # has a place in the key line
    late: bool = False  # only where the others have left room there

    @property
    def key(self) -> str:
        """The key as a person reads it."""
        return self.shown or self.keys[0]


def _on(screen: str, keys: str, action: str, label: str, help: str, *, shown: str = "", changes: bool = True,
        listed: bool = True, late: bool = False) -> Command:
    return Command(tuple(keys.split()), action, label, screen, help, shown, changes, listed, late)


COMMANDS: tuple[Command, ...] = (
    _on(STOCKS, "enter", "edit", "edit", "Edit the cell under the cursor; units may be typed (12 t, 110 F, "
        "215/46 SUS), an empty text means unknown.", shown="Enter"),
    _on(STOCKS, "/ slash", "filter", "filter", "Show only the stocks in whose code, name, oil, kind or group all "
        "the typed words are found.", changes=False),
    _on(STOCKS, "s", "sort", "sort", "Sort by the column under the cursor; again turns the order, a third time "
        "gives the plant's own.", changes=False),
    _on(STOCKS, "a", "add", "add", "Add a stock under a new code."),
    _on(STOCKS, "c", "copy", "copy", "Copy the stock under the cursor, its quantity aside, under a new code."),
    _on(STOCKS, "d", "retire", "retire", "Take the stock under the cursor out of use; u brings it back."),
    _on(STOCKS, "i", "receive", "receive", "Record a receipt into the tank under the cursor: kg, lot and the values of "
        "its certificate; the tank's values are worked out until they are tested."),
    _on(STOCKS, "p", "dip", "dip", "Record a dip of the tank under the cursor against the book."),
    _on(STOCKS, "o", "test", "test", "Give the tank under the cursor the results of its own test: they stand in "
        "place of what was worked out or certified."),
    _on(STOCKS, "b", "book", "book", "Show every movement of the stock under the cursor, and the book against the dip.",
        changes=False),
    _on(STOCKS, "t", "trace", "trace", "Follow the stock under the cursor, or a lot of it, both ways.", changes=False),
    _on(STOCKS, "v", "add_value", "other", "Give the stock a property that has no column yet, such as "
        "ccs-25."),

    _on(TARGETS, "enter", "edit", "edit", "Edit the cell under the cursor; an empty text means not asked.",
        shown="Enter"),
    _on(TARGETS, "tab", "pane", "list/cells", "Go from the list of products to the cells of the chosen one and "
        "back.", shown="Tab", changes=False),
    _on(TARGETS, "l", "limit", "limit", "Add a limit on a property: low, high and guard are asked for one by "
        "one."),
    _on(TARGETS, "s", "rule", "share rule", "Add a rule on the share of a stock, an oil, a kind or a group."),
    _on(TARGETS, "x", "unknown", "unknown ok", "On a limit: let stocks serve whose value of that property is "
        "unknown, or no longer."),
    _on(TARGETS, "d", "drop", "drop", "Drop the limit or the share rule under the cursor; in the list of products, "
        "take the product out of use."),
    _on(TARGETS, "a", "add", "add", "Add a product under a new code."),
    _on(TARGETS, "c", "copy", "copy", "Copy the product with its limits and rules under a new code."),

    _on(RECIPE, "enter", "edit", "share", "Type the share of the stock under the cursor by hand, in % or kg; "
        "the properties follow.", shown="Enter"),
    _on(RECIPE, "f", "fill", "fill", "Give the stock under the cursor what the typed shares lack of 100 %, "
        "or take off what is too much."),
    _on(RECIPE, "b", "best", "best", "Go back to the least-cost recipe."),
    _on(RECIPE, "h", "hold", "hold", "Hold the stock under the cursor at a share, and find the best of the rest; "
        "on a held stock, let it go."),
    _on(RECIPE, "x", "leave", "out/in", "Leave the stock under the cursor out, or let it in again."),
    _on(RECIPE, "c", "free", "clear", "Let every held stock go and every left-out one in."),
    _on(RECIPE, "n", "next", "blends", "Step to the next feasible blend, cheapest first.", shown="n p"),
    _on(RECIPE, "p", "previous", "blend before", "Step to the feasible blend before.", listed=False),
    _on(RECIPE, "t", "take", "take", "Take the blend that is shown: its shares become yours to type over."),
    _on(RECIPE, "k", "keep", "keep", "Keep the blend that is shown as a trial, under a name."),
    _on(RECIPE, "m", "batch", "batch", "Type the size of the batch for this recipe."),
    _on(RECIPE, "L", "law", "law", "Go to the next blending law for this recipe."),
    _on(RECIPE, "a", "all_laws", "more laws", "Type the laws under which every limit must hold at once, or all.",
        late=True),
    _on(RECIPE, "i", "whole", "whole steps", "Charge in whole scale divisions, drums and IBCs, or in any mass again.",
        late=True),
    _on(RECIPE, "s", "sure", "how sure", "Type the chance, in %, at which each limit is to be met on the first batch; "
        "empty: none.", late=True),
    _on(RECIPE, "w", "write", "write", "Write the recipe as a text sheet for the floor, and say where."),
    _on(RECIPE, "tab", "pane", "limits", "Go from the shares to the limits and remarks and back.",
        shown="Tab", changes=False),

    _on(TRIALS, "enter", "open", "open", "Open the trial under the cursor on the recipe screen.", shown="Enter"),
    _on(TRIALS, "space", "mark", "compare", "Mark the trial under the cursor to stand in the comparison, four at "
        "most.", shown="Space", changes=False),
    _on(TRIALS, "tab", "pane", "list/comparison", "Go from the list to the comparison and back.", shown="Tab",
        changes=False),
    _on(TRIALS, "d", "drop", "drop", "Drop the trial under the cursor; u brings it back."),

    # why
    _on(WHY, "t", "take_changes", "as what-if", "Take the changes of the nearest blend as a what-if, and go to its "
        "recipe; u takes them back, and the product itself stays as it is."),
    _on(WHY, "o", "order", "may give", "Type which properties may give, the first one first and most (VI, KV40); what "
        "is not named stays firm."),

    # choices
    _on(CHOICES, "n", "next_aim", "aims", "Mark the next aim.", shown="n p", changes=False),
    _on(CHOICES, "p", "previous_aim", "aim before", "Mark the aim before.", changes=False, listed=False),
    _on(CHOICES, "t enter", "take_aim", "take", "Take the blend of the marked aim: its shares become yours on the "
        "screen Recipe, and u takes them back."),
    _on(CHOICES, "c", "within", "cost cap", "Let the aims cost at most 1, 2 or 5 % more than the least cost, or "
        "whatever the product allows.", changes=False),
    _on(CHOICES, "o", "other_stock", "other stock", "Let most-of and least-of speak of the next stock.",
        changes=False),
    _on(CHOICES, "k", "other_trial", "other trial", "Let closest-to be of the next trial of this product.",
        changes=False),
    _on(CHOICES, "s", "sweep", "sweep", "Draw the least cost against a limit or a price that is asked for (vi low, "
        "price N150); while it draws, stop it.", changes=False),

    # chance
    _on(CHANCE, "c", "next_chance", "90/95/99 %", "Ask for the recipe whose every limit is met with a chance of 90, "
        "then 95, then 99 %, then for the least-cost one again."),
    _on(CHANCE, "s", "sure", "any chance", "Type the chance, in %, at which each limit is to be met on the first "
        "batch; empty: none."),
    _on(CHANCE, "t", "take", "take", "Take the blend that is shown: its shares become yours on the screen Recipe, and "
        "u takes them back."),

    # lab
    _on(LAB, "enter", "tell", "in full", "Say in full what is known of the row under the cursor: what is doubtful of a "
        "blend and how its product drifts, or the figures of a lesson.", shown="Enter", changes=False),
    _on(LAB, "a", "add", "add", "Put a measured blend on record: name, shares, results and date are asked for in turn; "
        "the stocks' values of today are kept with it."),
    _on(LAB, "y", "confirm", "it is so", "Say that what is doubtful of the blend under the cursor is so: it may teach "
        "from then on."),
    _on(LAB, "d", "drop", "drop", "Take the blend under the cursor off the record; u brings it back."),
    _on(LAB, "o", "offer", "offers", "Show what the measured blends could teach, or hide it again."),
    _on(LAB, "t", "take", "take", "Take the offer under the cursor into use: recipes follow it and name its version."),
    _on(LAB, "w", "withdraw", "withdraw", "Take the lesson under the cursor out of use; the reason is asked for."),
    _on(LAB, "p", "plan", "bench", "Show what to weigh on the bench for the recipe shown, and which pair would teach "
        "the law most; w there writes it to a file.", changes=False),
    _on(LAB, "tab", "pane", "blends/lessons", "Go from the blends to the lessons and back.", shown="Tab",
        changes=False),

    # batches
    _on(BATCHES, "enter", "open", "floor", "Open the batch under the cursor on the screen Floor.", shown="Enter",
        changes=False),
    _on(BATCHES, "/ slash", "filter", "filter", "Show only the batches in whose name, product, vessel, customer, order "
        "number or state all the typed words are found.", changes=False),
    _on(BATCHES, "a", "add", "new order", "Take an order for the product all screens speak of: amount, vessel, "
        "customer, heel and the rest are asked for in turn, then its charges are shown; nothing is written before y."),
    _on(BATCHES, "n", "redesign", "redesign", "Work the charges of the batch under the cursor out anew on today's "
        "tanks, before the first of them is made; y there puts them in place of the old ones."),
    _on(BATCHES, "v", "vessels", "vessels", "Show the vessels in place of the batches, and back: Enter there edits a "
        "cell, a adds a vessel, d takes one out of use.", changes=False),
    _on(BATCHES, "d", "cancel", "cancel", "Cancel the batch under the cursor; the reason is asked for, and what was "
        "promised to it is free again."),
    _on(BATCHES, "t", "trace", "trace", "Follow a lot, a batch, an order, a customer or a stock both ways, with the "
        "parts it had.", changes=False),
    _on(BATCHES, "b", "person", "name", "Type the name under which the steps at this terminal are recorded; empty: "
        "the login name.", changes=False, late=True),
    _on(BATCHES, "w", "write", "write card", "Write the card of the batch under the cursor to a file, and say where; a "
        "name that ends in .html makes a page that prints."),

    # floor
    _on(FLOOR, "enter", "type", "type", "Type the actual of the charge under the cursor (kg, t, 3 drums, 9 t at 48 "
        "°C); in the laboratory, the result of the property under the cursor.", shown="Enter"),
    _on(FLOOR, "l", "lot", "lot", "Type the lot that is charged in the line under the cursor; of a charge that is "
        "made, put its lot right."),
    _on(FLOOR, "o", "other", "other", "Record that another oil than the planned one was charged on the line under "
        "the cursor: which, how much, its lot and why.", late=True),
    _on(FLOOR, "c", "check", "check", "Second check of the charge under the cursor, under the name of another person."),
    _on(FLOOR, "x", "miss", "missed", "The charge under the cursor will not be made; the reason is asked for."),
    _on(FLOOR, "e", "correct", "correct", "Correct the actual of a charge that was made, or withdraw a result; the "
        "reason is asked for, and what stood there stays on record."),
    _on(FLOOR, "R", "remedy", "put right", "Show what the batch will be, and the charges to come worked out anew; y "
        "there puts them in place of the old ones."),
    _on(FLOOR, "tab", "pane", "charges/lab", "Go from the charges to the laboratory and back.", shown="Tab",
        changes=False),
    _on(FLOOR, "s", "sample", "sample", "Record that a sample was taken: place and temperature are asked for."),
    _on(FLOOR, "v", "verdict", "verdict", "Show the decision that the results ask for, limit by limit, with its "
        "arithmetic.", changes=False, late=True),
    _on(FLOOR, "d", "decide", "decide", "Decide on the last sample: release, repeat, fresh sample or trim."),
    _on(FLOOR, "t", "trim", "trim", "Show what to add so that the measured batch meets every limit; y there plans it, "
        "m asks for the least mass, c for a chance."),
    _on(FLOOR, "p", "out", "pack", "Record what leaves the vessel: kg and as what (packed, sample, slops, flush, "
        "rework, left).", late=True),
    _on(FLOOR, "L", "release", "release", "Release the batch under the name of who does; what is missing is named "
        "first."),
    _on(FLOOR, "w", "write", "write", "Write the card, or after the release the certificate, to a file; a name that "
        "ends in .html makes a page that prints.", late=True),
    _on(FLOOR, "k", "cautions", "cautions", "Show the cautions that apply to these stocks, each with its reason; the "
        "site's procedure decides.", changes=False),
    _on(FLOOR, "n", "next", "next", "Go to the next open batch.", changes=False, late=True),
    _on(FLOOR, "b", "person", "name", "Type the name under which the steps at this terminal are recorded; empty: "
        "the login name.", changes=False, late=True),

    _on(ALL, "u", "undo", "undo", "Take back your last change, on this screen or another, and say what it was."),
    _on(ALL, "r", "redo", "redo", "Do again what was undone last."),
    *(_on(ALL, KEYS[code], f"go_{code}", name.lower(), f"Go to the screen {name}.", changes=False, listed=False)
      for code, name in SCREENS),
    Command(MOVES, "move", "move", ALL, "Move by cells, by pages, to the first and last column; with ctrl to the "
            "first and last row.", "arrows, PgUp, PgDn, Home, End", listed=False),
    _on(ALL, "escape", "back", "drop typing", "Drop what is being typed; else take the filter off. It never leaves a "
        "screen.", shown="Esc", changes=False, listed=False),
    _on(ALL, "! exclamation_mark", "messages", "messages", "Show the messages of this session in full, newest "
        "first.", changes=False, listed=False),
    _on(ALL, ": colon ctrl+p", "palette", "all", "List every command, and run the one that is chosen.",
        changes=False),
    _on(ALL, "q ctrl+q", "quit", "quit", "Leave; every change was saved when it was made, and what would be "
        "forgotten is said first.", changes=False),
    _on(ALL, "] right_square_bracket", "next_product", "product", "Go to the next product: every screen speaks of "
        "the same one.", shown="[ ]", changes=False),
    _on(ALL, "[ left_square_bracket", "previous_product", "product before", "Go to the product before.",
        changes=False, listed=False),
    _on(ALL, "? question_mark f1", "help", "help", "Show this list.", changes=False),
)


def of(screen: str) -> Iterator[Command]:
    """The commands of a screen, its own first."""
    yield from (c for c in COMMANDS if c.screen == screen)
    yield from (c for c in COMMANDS if c.screen == ALL)


def find(screen: str, key: str, character: str | None) -> Command | None:
    """The command that a key stands for on a screen, or None."""
    # The other case too: with the caps lock on the keys should mean what they say on the key line.
    for typed in (key, character, (character or "").swapcase()):
        for command in of(screen):
            if typed and typed in command.keys:
                return command
    return None


def key_line(screen: str) -> list[tuple[str, str]]:
    """Keys and labels for the key line, those that may be left out late, the help key last."""
    *listed, helping = sorted((c for c in of(screen) if c.listed), key=lambda c: (c.action == "help", c.late))
    return [(c.key, c.label) for c in (*listed, helping)]


def matching(typed: str, screen: str) -> list[Command]:
    """Commands in which every typed word is found, those of the screen first."""
    words = typed.lower().split()
    order = [screen, ALL, *(code for code, _ in SCREENS if code != screen)]
    found = [c for c in COMMANDS if all(w in f"{c.key} {c.label} {c.screen} {c.help}".lower() for w in words)]
    return sorted(found, key=lambda c: order.index(c.screen))
