"""What the console costs on a slow line, beside a bare Textual table in the same run.

    python -m tests.benchmarks.console_bench

Both programs run in a pseudo-terminal of 80 × 24 with 40 generated stocks. A byte is one that the program
sends to the terminal; a time is from the key (or the start) until the text stands on the terminal's screen.
"""

from __future__ import annotations

import fcntl
import os
import pty
import select
import signal
import statistics
import struct
import sys
import tempfile
import termios
import time
from collections.abc import Callable
from pathlib import Path

import pyte

COLUMNS, LINES, STOCKS = 80, 24, 40
STARTS = 7
FIRST_NAME = "Stock number 00"

BARE = f"""
from textual.app import App
from textual.widgets import DataTable, Footer, Header
class Bare(App):
    BINDINGS = [("q", "quit", "Quit"), ("s", "sort", "Sort"), ("f", "filter", "Filter")]
    def compose(self):
        yield Header()
        yield DataTable()
        yield Footer()
    def on_mount(self):
        table = self.query_one(DataTable)
        table.add_columns("stock", "name", "KV40", "KV100", "VI", "density", "on hand", "price")
        for n in range({STOCKS}):
            table.add_row(f"S{{n:02}}", f"Stock number {{n:02}}", f"{{20 + 5 * n}}", "5.12", "98", "871.2", "40000",
                          f"{{800 + n}}")
Bare().run()
"""
CONSOLE = "import sys; from pathlib import Path; from blendtui.app import run; sys.exit(run(Path(sys.argv[1])))"


class Terminal:
    """A program in a pseudo-terminal, what it sent, and the screen that makes."""

    def __init__(self, argv: list[str], environment: dict[str, str] | None = None) -> None:
        self.screen = pyte.Screen(COLUMNS, LINES)
        self.stream = pyte.ByteStream(self.screen)
        self.sent = 0
        self.began = time.perf_counter()
        self.pid, self.master = pty.fork()
        if self.pid == 0:
            os.environ.update({"TERM": "xterm-256color", "LANG": "C.UTF-8", "COLORTERM": "", **(environment or {})})
            os.execv(argv[0], argv)
        fcntl.ioctl(self.master, termios.TIOCSWINSZ, struct.pack("HHHH", LINES, COLUMNS, 0, 0))

    def read(self, wait: float) -> bool:
        """Take what has come within `wait` s; False when nothing did."""
        if not select.select([self.master], [], [], wait)[0]:
            return False
        try:
            data = os.read(self.master, 65536)
        except OSError:
            return False
        self.sent += len(data)
        self.stream.feed(data)
        return True

    def until(self, seen: Callable[[], bool], limit: float = 20.0) -> float:
        """Seconds until `seen`, from now."""
        start = time.perf_counter()
        while not seen():
            if time.perf_counter() - start > limit:
                raise RuntimeError("waited in vain; the screen shows\n" + "\n".join(self.screen.display))
            self.read(0.01)
        return time.perf_counter() - start

    def rest(self, quiet: float = 0.7) -> int:
        """Read until nothing comes for `quiet` s; how many bytes came."""
        before = self.sent
        while self.read(quiet):
            pass
        return self.sent - before

    def press(self, keys: str) -> None:
        """Send keys."""
        os.write(self.master, keys.encode())

    def text(self) -> str:
        """The screen."""
        return "\n".join(self.screen.display)

    def line(self, starts: str) -> str:
        """The first line of the screen that starts so."""
        return next((line for line in self.screen.display if line.startswith(starts)), "")

    def close(self) -> None:
        """End it."""
        os.kill(self.pid, signal.SIGKILL)
        os.waitpid(self.pid, 0)
        os.close(self.master)


def make_plant(folder: Path) -> Path:
    """A plant file of 40 stocks and one product with windows on both KVs and a least VI."""
    from blendtui.desk.plant import import_folder

    rows = ["stock,name,kind,api_group,on_hand_kg,price_per_t,density15,kv40,kv100,flash,pour,sulfur,tested_on,source"]
    for n in range(STOCKS):
        kv40 = 18.0 * 1.09 ** n
        kv100 = 0.98 * kv40 ** 0.49 * (1.0 + 0.02 * (n % 5))
        rows.append(f"S{n:02},Stock number {n:02},base,{'I' if n % 3 else 'II'},{40000 + 100 * n},"
                    f"{800 + 7 * ((n * 13) % 40)},{855 + n},{kv40:.4g},{kv100:.4g},{200 + n},{-15 + n % 7},"
                    f"{0.01 * (n % 9)},2026-01-15,own")
    (folder / "stocks.csv").write_text("\n".join(rows) + "\n")
    (folder / "products.csv").write_text("product,name,grade,batch_kg\nHYD-68,Hydraulic oil 68,ISO VG 68,20000\n")
    (folder / "limits.csv").write_text("product,property,low,high,guard\nHYD-68,vi,95,,1\nHYD-68,kv100,8.2,9.4,\n"
                                       "HYD-68,flash,205,,2\nHYD-68,pour,,-9,\n")
    (folder / "shares.csv").write_text("product,of,low_pct,high_pct\n")
    plant = folder / "bench.plant"
    import_folder(folder, plant)
    return plant


def start(argv: list[str]) -> tuple[Terminal, float, int]:
    """Start a program; seconds until the first stock's name, bytes until it rests."""
    terminal = Terminal(argv)
    terminal.until(lambda: FIRST_NAME in terminal.text())
    took = time.perf_counter() - terminal.began
    terminal.rest()
    return terminal, took, terminal.sent


def starts(*programs: list[str]) -> list[tuple[list[float], list[int]]]:
    """Times and bytes of several starts of each program, in turn, so that a busy machine is busy for all."""
    found: list[tuple[list[float], list[int]]] = [([], []) for _ in programs]
    for _ in range(STARTS):
        for argv, (times, sizes) in zip(programs, found, strict=True):
            terminal, took, size = start(argv)
            terminal.close()
            times.append(took)
            sizes.append(size)
    return found


def moves(terminal: Terminal) -> list[int]:
    """Bytes of cursor moves, a move at a time."""
    sizes = []
    for key in ["\x1b[B"] * 10 + ["\x1b[C"] * 5 + ["\x1b[A"] * 5 + ["\x1b[D"] * 5:
        before = terminal.sent
        terminal.press(key)
        terminal.rest(0.12)
        sizes.append(terminal.sent - before)
    return sizes


def edits(terminal: Terminal, prices: list[int]) -> tuple[list[float], list[int], list[int]]:
    """Edit the price under the cursor: seconds to the new cost, bytes until then, bytes until all rests."""
    times, until, total = [], [], []
    for price in prices:
        terminal.press("\r")
        terminal.rest(0.2)
        terminal.press(str(price))
        terminal.rest(0.2)
        old, before = terminal.line("HYD-68:"), terminal.sent
        terminal.press("\r")
        times.append(terminal.until(lambda old=old: (new := terminal.line("HYD-68:")) != old and "least cost" in new))
        until.append(terminal.sent - before)
        terminal.rest(1.5)
        total.append(terminal.sent - before)
    return times, until, total


def holds(terminal: Terminal, shares: list[float]) -> tuple[list[float], list[int], list[int]]:
    """Hold a stock at a share on the recipe screen: the same figures, the ranges and the rest in the total."""
    times, until, total = [], [], []
    for share in shares:
        terminal.press("h")
        terminal.until(lambda: any(line.startswith("hold ") for line in terminal.screen.display))
        terminal.press(str(share))
        terminal.rest(0.2)
        old, before = terminal.screen.display[1], terminal.sent
        terminal.press("\r")
        times.append(terminal.until(lambda old=old: terminal.screen.display[1] != old, 5.0))
        until.append(terminal.sent - before)
        terminal.rest(2.5)
        total.append(terminal.sent - before)
        terminal.press("u")
        terminal.rest(2.5)
    return times, until, total


def figures(name: str, values: list[float], unit: str, aim: str, factor: float = 1.0) -> None:
    """Print one figure: median, worst, aim."""
    print(f"{name:<46} {statistics.median(values) * factor:>9.4g} {max(values) * factor:>9.4g} {unit:<6} {aim}")


def main() -> None:
    """Measure and print."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        plant = make_plant(folder)
        os.environ["XDG_DATA_HOME"] = str(folder)
        console = [sys.executable, "-c", CONSOLE, str(plant)]
        (bare_times, bare_bytes), (own_times, own_bytes) = starts([sys.executable, "-c", BARE], console)
        print(f"{'':<46} {'median':>9} {'worst':>9}")
        figures("bare table: start to first name", bare_times, "ms", "", 1e3)
        figures("console: start to first name", own_times, "ms", "", 1e3)
        ratios = [own / bare for own, bare in zip(own_times, bare_times, strict=True)]
        figures("  ratio, start by start", ratios, "", "aim ≤ 2.2")
        figures("bare table: first paint", [float(x) for x in bare_bytes], "B", "")
        allowed = 1.5 * statistics.median(bare_bytes) + 15_000
        figures("console: first paint with recipe line", [float(x) for x in own_bytes], "B", f"aim ≤ {allowed:.0f}")
        terminal, _, _ = start(console)
        terminal.until(lambda: "least cost" in terminal.text())
        terminal.rest(1.0)
        before = terminal.sent
        terminal.rest(6.0)
        figures("console: idle for 6 s", [float(terminal.sent - before)], "B", "aim 0")
        figures("console: cursor move", [float(x) for x in moves(terminal)], "B", "aim ≤ 400")
        terminal.press("\x1b[H" + "\x1b[C" * 7)
        terminal.rest(0.5)
        times, until, total = edits(terminal, [700, 950, 705, 940, 710, 930, 715])
        figures("console: price edit to new recipe", times, "ms", "aim < 150", 1e3)
        figures("console: price edit, bytes until the recipe", [float(x) for x in until], "B", "aim ≤ 6000")
        figures("console: price edit, bytes in all", [float(x) for x in total], "B", "aim ≤ 6000")
        terminal.press("3")
        terminal.rest(3.0)
        times, until, total = holds(terminal, [5, 12, 7, 9, 3])
        figures("recipe screen: hold to new recipe", times, "ms", "aim < 150", 1e3)
        figures("recipe screen: hold, bytes until the recipe", [float(x) for x in until], "B", "aim ≤ 6000")
        figures("recipe screen: hold, with ranges and the rest", [float(x) for x in total], "B", "aim ≤ 6000")
        terminal.close()


if __name__ == "__main__":
    main()
