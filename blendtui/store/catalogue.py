"""A catalogue folder read into rows: every cell of every file is checked before anything is taken."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass, field
from pathlib import Path

from solver.stocks import GROUPS, KINDS, SOURCES, Stock
from solver.target import LAWS

from . import catalogue_lab, catalogue_vessels, charging, state
from . import cells as c
from .cells import Cells
from .charging import is_value_code, property_spelt, sigma_of
from .csv_read import Sheet, read_sheet
from .edits import row_key
from .errors import CatalogueError, Fault, NoPlant
from .harmless import harmless
from .reads import joined, milligrams, parted
from .records import Row
from .rules import Rule, contradictions
from .schema import PRODUCT_CELLS, STOCK_CELLS, STOCK_CHARGES, STOCK_NUMBERS, STOCK_TEST, STOCK_TEXT
from .state import Key

STOCKS = ("stock", *STOCK_TEXT, "on_hand_kg", *STOCK_NUMBERS, *STOCK_CHARGES, *STOCK_TEST)
PRODUCTS = ("product", *PRODUCT_CELLS)
LIMITS = ("product", "property", "low", "high", "guard", "unknown")
SHARES = ("product", "of", "low_pct", "high_pct")
TRIALS = ("product", "name", "law", "stock", "share_pct", "note", "kept_at", "kept_by")
REQUIRED = {"stocks.csv": ("stock", "kv40", "kv100"), "products.csv": ("product",),
            "limits.csv": ("product", "property"), "shares.csv": ("product", "of"),
            "trials.csv": ("product", "name", "stock", "share_pct"),
            "measured.csv": ("name", "stock", "share_pct"),
            "lessons.csv": ("version", "kind", "law", "first", "celsius", "first_term"), "vessels.csv": ("vessel",)}
# Columns of any number besides the known ones.
FAMILIES = {"stocks.csv": is_value_code, "measured.csv": catalogue_lab.is_value_column}


@dataclass
class Catalogue:
    """A folder that has no fault, as the state of a plant."""

    folder: Path
    state: state.State = field(default_factory=state.empty)
    notes: tuple[str, ...] = ()  # unknown columns that are kept, files that are not read
    given: frozenset[str] = frozenset()  # files that are there; of those that are not it says nothing


def read_catalogue(folder: Path) -> Catalogue:
    """Read and check a folder. CatalogueError carries every fault; NoPlant when there is no such folder."""
    try:
        if not folder.is_dir():
            raise NoPlant(f"{folder} is not a folder; name the folder that holds stocks.csv and products.csv")
        return _Reading(folder, sorted(x.name for x in folder.iterdir())).run()
    except OSError as error:
        raise NoPlant(f"{folder} cannot be read: {(error.strerror or str(error)).lower()}; "
                      "check the path and the rights") from None


class _Reading:
    """One pass over the files, faults gathered on the way."""

    def __init__(self, folder: Path, held: list[str]) -> None:
        self.folder = folder
        self.held = held  # names of everything in it
        self.faults: list[Fault] = []
        self.notes: list[str] = []
        self.state = state.empty()
        self.stocks: dict[str, Stock] = {}
        self.limited: set[str] = set()  # products that have a limit line
        self.guards: list[tuple[Cells, str, str]] = []  # lines that only guard another limit

    def run(self) -> Catalogue:
        stocks = self._sheet("stocks.csv", STOCKS, needed=True)
        products = self._sheet("products.csv", PRODUCTS, needed=True)
        limits = self._sheet("limits.csv", LIMITS)
        shares = self._sheet("shares.csv", SHARES)
        trials = self._sheet("trials.csv", TRIALS)
        self._read_stocks(stocks)
        self._read_products(products)
        self._read_limits(limits)
        self._read_shares(shares, stocks)
        self._read_trials(trials)
        measured, lessons = self._read_lab()
        vessels = self._read_vessels(whole=stocks is not None and not stocks.faults)
        self._products_ask_something(products, limits)
        self.notes += [f"{harmless(file, 60)} is not read" for file in self.held
                       if file.lower().endswith(".csv") and file not in REQUIRED]
        if self.faults:
            order = tuple(REQUIRED)
            raise CatalogueError(sorted(self.faults, key=lambda f: (order.index(f.file), f.row)))
        return Catalogue(self.folder, self.state, tuple(self.notes),
                         frozenset(x.file for x in (trials, measured, lessons, vessels) if x is not None))

    def _sheet(self, name: str, known: tuple[str, ...], *, needed: bool = False) -> Sheet | None:
        if name not in self.held:
            if needed:
                self.faults.append(Fault(name, 0, "", f"there is no such file in {self.folder}",
                                         f"add it with the columns {', '.join(REQUIRED[name])}"))
            return None
        sheet = read_sheet(self.folder / name, known, REQUIRED[name],
                           property_spelt if name == "stocks.csv" else None)
        self.faults += sheet.faults
        unknown = [x for x in sheet.columns
                   if x not in known and not FAMILIES.get(name, _none)(x) and x != catalogue_vessels.USED.get(name)]
        if unknown:
            self.notes.append(f"{name}: unknown column{'s' * (len(unknown) > 1)} "
                              f"{harmless(', '.join(unknown), 200)}: kept, not used")
        return sheet

    def _extras(self, sheet: Sheet, table: str, key: Key, cells: Cells, known: tuple[str, ...]) -> None:
        for column in sheet.columns:
            if column in known or FAMILIES.get(sheet.file, _none)(column):
                continue
            text = cells.get(column, c.plain, default="")
            if text:
                self.state["extra"][table, row_key(key), column] = {"text": text}

    # Stocks

    def _read_stocks(self, sheet: Sheet | None) -> None:
        if sheet is None:
            return
        properties = [x for x in sheet.columns if x not in STOCKS and is_value_code(x)]
        first: dict[str, int] = {}
        for place, (row, text) in enumerate(sheet.rows, 1):
            cells = Cells(sheet.file, row, text, self.faults)
            stock = _stock(cells, properties)
            _stock_faults(cells, stock)
            if stock.code in first:
                cells.fault("stock", f"the code '{stock.code}' stands in row {first[stock.code]} already",
                            "give each stock its own code")
            elif stock.code:
                first[stock.code] = row
                self.stocks[stock.code] = stock
                self._keep_stock(stock, place)
                self._extras(sheet, "stock", (stock.code,), cells, STOCKS)
        if not sheet.rows and not sheet.faults:
            self.faults.append(Fault(sheet.file, 0, "", "there is no stock in the file",
                                     "add a row for each stock"))

    def _keep_stock(self, stock: Stock, place: int) -> None:
        self.state["stock"][stock.code,] = {**{x: getattr(stock, x) for x in STOCK_CELLS}, "position": place,
                                            "retired": 0}
        for prop, value in joined(stock).items():
            self.state["stock_value"][stock.code, prop] = {"value": value}
        if stock.on_hand_kg is not None:
            self.state["quantity"][stock.code,] = {"mg": milligrams(stock.on_hand_kg)}

    # Products and their lines

    def _read_products(self, sheet: Sheet | None) -> None:
        first: dict[str, int] = {}
        for place, (row, text) in enumerate(sheet.rows if sheet else (), 1):
            assert sheet is not None
            cells = Cells(sheet.file, row, text, self.faults)
            code, cells_read = _product(cells)
            if code in first:
                cells.fault("product", f"the code '{code}' stands in row {first[code]} already",
                            "give each product its own code")
            elif code:
                first[code] = row
                self.state["product"][code,] = {**cells_read, "position": place, "retired": 0}
                self._extras(sheet, "product", (code,), cells, PRODUCTS)
        if sheet is not None and not sheet.rows and not sheet.faults:
            self.faults.append(Fault(sheet.file, 0, "", "there is no product in the file",
                                     "add a row for each product"))

    def _product_of(self, cells: Cells) -> str:
        code = cells.get("product", c.code, default="")
        if code and (code,) not in self.state["product"]:
            cells.fault("product", f"{c.shown(code)} is not in products.csv", "add it there or mend the code")
            return ""
        return str(code)

    def _read_limits(self, sheet: Sheet | None) -> None:
        places: defaultdict[str, int] = defaultdict(int)
        for row, text in sheet.rows if sheet else ():
            assert sheet is not None
            cells = Cells(sheet.file, row, text, self.faults)
            product = self._product_of(cells)
            prop = cells.get("property", c.property_code, default="")
            line = _limit(cells, prop)
            if text.get("product"):
                self.limited.add(text["product"])
            if not product or not prop or cells.bad:
                continue
            places[product] += 1
            if line["low"] is None and line["high"] is None:
                self.guards.append((cells, product, prop))
            key = _free(self.state["product_limit"], product, prop)
            self.state["product_limit"][key] = {**line, "position": places[product]}
            self._extras(sheet, "product_limit", key, cells, LIMITS)

    def _products_ask_something(self, products: Sheet | None, limits: Sheet | None) -> None:
        if limits is not None and limits.faults:
            return  # lines that could not be read may be the missing ones
        for row, text in products.rows if products else ():
            code = text["product"]
            if code and not text.get("grade") and code not in self.limited:
                self.faults.append(Fault("products.csv", row, "product",
                                         f"{c.shown(code)} has neither a grade nor a line in limits.csv",
                                         "give it a grade or a limit"))
        for cells, product, prop in self.guards:
            if not self._is_limited(product, prop):
                cells.fault("guard", f"a guard without a limit: neither the grade of {product} nor another "
                                     f"line limits {prop}", "give the line a low or a high")

    def _is_limited(self, product: str, prop: str) -> bool:
        from solver.grades import grade

        for (code, of, _), line in self.state["product_limit"].items():
            if (code, of) == (product, prop) and (line["low"] is not None or line["high"] is not None):
                return True
        name = str(self.state["product"][product,]["grade"] or "")
        found = grade(name) if name else None
        return found is not None and any(x.property == prop for x in found.limits)

    def _read_shares(self, sheet: Sheet | None, stocks: Sheet | None) -> None:
        by_product: defaultdict[str, list[tuple[Cells, Rule]]] = defaultdict(list)
        names = {*self.stocks, *KINDS, *(f"group {g}" for g in GROUPS),
                 *(s.oil for s in self.stocks.values() if s.oil)}
        for row, text in sheet.rows if sheet else ():
            assert sheet is not None
            cells = Cells(sheet.file, row, text, self.faults)
            product = self._product_of(cells)
            of = cells.get("of", c.rule_name, default="")
            low = cells.get("low_pct", c.number, least=0.0, most=100.0)
            high = cells.get("high_pct", c.number, least=0.0, most=100.0)
            if of and of not in names and stocks is not None and not stocks.faults:
                cells.fault("of", f"{c.shown(of)} is no stock, oil, kind or group of stocks.csv",
                            "mend the name or add the stock")
            if not product or cells.bad:
                continue
            rule = Rule(of, 0.0 if low is None else low, 100.0 if high is None else high)
            by_product[product].append((cells, rule))
            key = _free(self.state["share_rule"], product, of)
            self.state["share_rule"][key] = {"low_pct": rule.low, "high_pct": rule.high,
                                             "position": len(by_product[product])}
            self._extras(sheet, "share_rule", key, cells, SHARES)
        for lines in by_product.values():
            for place, what, fix in contradictions([rule for _, rule in lines], self.stocks.values()):
                cells, rule = lines[place]
                cells.fault("low_pct" if rule.low > rule.high else "of", what, fix)

    # Trials

    def _read_trials(self, sheet: Sheet | None) -> None:
        strangers: set[str] = set()
        places: defaultdict[Key, int] = defaultdict(int)
        for row, text in sheet.rows if sheet else ():
            assert sheet is not None
            cells = Cells(sheet.file, row, text, self.faults)
            product = self._product_of(cells)
            name = cells.get("name", c.code, default="")
            stock = cells.get("stock", c.code, default="")
            share = cells.get("share_pct", c.number, least=0.0, most=100.0)
            said = {"law": cells.get("law", c.word, LAWS, "law", default="") or "refutas",
                    **{x: cells.get(x, c.plain, default="") for x in ("note", "kept_at", "kept_by")}}
            if share is None and "share_pct" not in cells.bad:
                cells.fault("share_pct", "the share is empty", "write the mass %")
            key = (product, name)
            if self.state["trial"].setdefault(key, said) != said:
                cells.fault("name", f"the rows of trial {c.shown(name)} differ in law, note, date or person",
                            "make them the same")
            if (*key, stock) in self.state["trial_share"]:
                cells.fault("stock", f"trial {c.shown(name)} has {c.shown(stock)} twice", "join the two rows")
            self.state["trial_share"][*key, stock] = {"share_pct": share, "position": places[key]}
            self._extras(sheet, "trial_share", (*key, stock), cells, TRIALS)
            places[key] += 1
            if stock and stock not in self.stocks:
                strangers.add(stock)
        self._note("trials.csv", "stocks", strangers)

    def _note(self, file: str, what: str, strangers: set[str]) -> None:
        if strangers:
            self.notes.append(f"{file} names {what} that are not in {what}.csv: "
                              f"{harmless(', '.join(sorted(strangers)), 200)}")

    # The laboratory

    def _read_lab(self) -> tuple[Sheet | None, Sheet | None]:
        measured = self._sheet("measured.csv", catalogue_lab.MEASURED)
        if measured is not None:
            catalogue_lab.read_measured(measured, self.faults, self.state, lambda key, cells: self._extras(
                measured, "measured_part", key, cells, catalogue_lab.MEASURED))
            self._note("measured.csv", "stocks", {str(k[1]) for k in self.state["measured_part"]} - set(self.stocks))
            products = {str(row["product"]) for row in self.state["measured"].values()} - {""}
            self._note("measured.csv", "products", products - {str(k[0]) for k in self.state["product"]})
        lessons = self._sheet("lessons.csv", catalogue_lab.LESSONS)
        if lessons is not None:
            catalogue_lab.read_lessons(lessons, self.faults, self.state, lambda key, cells: self._extras(
                lessons, "lesson_term", key, cells, catalogue_lab.LESSONS))
            named = {str(row[x]) for row in self.state["lesson"].values() for x in ("first", "second")} - {""}
            self._note("lessons.csv", "stocks", named - set(self.stocks) - {s.oil for s in self.stocks.values()})
        return measured, lessons

    def _read_vessels(self, *, whole: bool) -> Sheet | None:
        sheet = self._sheet("vessels.csv", catalogue_vessels.VESSELS)
        if sheet is not None:
            catalogue_vessels.read_vessels(sheet, self.faults, self.state, lambda key, cells: self._extras(
                sheet, "vessel", key, cells, catalogue_vessels.VESSELS), whole=whole)
        return sheet


def _none(column: str) -> bool:
    return False


def _free(rows: dict[Key, Row], product: str, of: str) -> Key:
    """Key of a further line of a product on the same property or name."""
    line = 1
    while (product, of, line) in rows:
        line += 1
    return product, of, line


def _stock(cells: Cells, properties: list[str]) -> Stock:
    """One row of stocks.csv; None in place of a cell with a fault."""
    values = {p: cells.get(p, c.number) for p in properties}
    return Stock(
        code=cells.get("stock", c.stock_code, default=""), name=cells.get("name", c.plain, default=""),
        oil=cells.get("oil", c.plain, default=""),
        kind=cells.get("kind", c.word, KINDS, "kind", default="") or "base",
        api_group=cells.get("api_group", c.word, GROUPS, "group", default=""),
        on_hand_kg=cells.get("on_hand_kg", c.number, most=c.LARGEST_KG),
        **{x: cells.get(x, c.number) for x in (*STOCK_NUMBERS, *STOCK_CHARGES)},
        **parted({p: v for p, v in values.items() if v is not None}),
        tested_on=cells.get("tested_on", c.iso_date, default=""),
        source=cells.get("source", c.word, SOURCES, "source", default=""))


def _stock_faults(cells: Cells, stock: Stock) -> None:
    """What the solver says cannot be true, where the cell itself could be read."""
    from solver.doubts import faults

    kv = {"kv40", "kv100", "blend_kv40", "blend_kv100"} & cells.bad
    for doubt in (*faults(stock), *charging.faults(stock)):
        # A KV that could not be read is missing in the check too, and one fault a cell is enough.
        if doubt.cell in cells.bad or (kv and doubt.cell.endswith(("kv40", "kv100"))):
            continue
        what, _, fix = doubt.says.partition("; ")
        if doubt.cell in ("kv40", "kv100") and not cells.cells.get(doubt.cell):
            fix = "enter it"
        if "kv" in doubt.cell and not sigma_of(doubt.cell):
            what = what.removeprefix(f"{doubt.cell} ")  # the fault names its column itself
        cells.fault(doubt.cell, what, fix or "check the figure")


def _product(cells: Cells) -> tuple[str, Row]:
    code = cells.get("product", c.code, default="")
    return code, {
        "name": cells.get("name", c.plain, default=""), "grade": cells.get("grade", grade_name, default=""),
        "batch_kg": cells.get("batch_kg", c.positive, c.LARGEST_KG),
        "law": cells.get("law", c.word, LAWS, "law", default=""),
        "max_cost_per_t": cells.get("max_cost_per_t", c.positive),
        "max_stocks": cells.get("max_stocks", c.whole),
        "min_share_pct": cells.get("min_share_pct", c.number, least=0.0, most=100.0),
        "only_listed": cells.get("only_listed", c.yes, default=0),
        "note": cells.get("note", c.plain, default="")}


def grade_name(text: str) -> str:
    """A grade's full name, or empty."""
    from solver.errors import TargetError
    from solver.grades import grade

    if not text:
        return ""
    try:
        return grade(c.plain(text)).name
    except TargetError as error:
        what, _, fix = str(error).partition("; ")
        raise c.CellError(what, fix) from None


def _limit(cells: Cells, prop: str) -> Row:
    low = cells.get("low", c.limit_value, prop) if prop else None
    high = cells.get("high", c.limit_value, prop) if prop else None
    guard, guard_pct = cells.get("guard", c.guard, default=(0.0, 0.0))
    if low is not None and high is not None and low > high:
        cells.fault("low", f"low {low:g} is above high {high:g}", "swap or mend them")
    if prop and low is None and high is None and not guard and not guard_pct and not cells.bad:
        cells.fault("low", "the line has neither a low nor a high nor a guard", "give it one, or take it out")
    allowed = cells.cells.get("unknown", "").lower()
    if allowed not in ("", "allow"):
        cells.fault("unknown", f"{c.shown(allowed)} is not known", "write allow, or leave the cell empty")
    return {"low": low, "high": high, "guard": guard, "guard_pct": guard_pct,
            "unknown_ok": int(allowed == "allow")}
