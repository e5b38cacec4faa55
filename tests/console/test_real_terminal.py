"""The installed `blendtui` in a real pseudo-terminal: from the start to a saved trial, and on odd terminals."""

from __future__ import annotations

import os
import shutil
import signal
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pexpect
import pyte
import pytest

from blendtui.desk.plant import open_plant

LINES, COLUMNS = 24, 80
COMMAND = shutil.which("blendtui", path=str(Path(sys.executable).parent) + os.pathsep + os.environ.get("PATH", ""))


class Terminal:
    """The program in a pseudo-terminal, and the screen its bytes make."""

    def __init__(self, argv: list[str], **environment: str) -> None:
        kept = {k: v for k, v in os.environ.items() if not k.startswith(("LC_", "SSH_")) and k != "NO_COLOR"}
        assert COMMAND, "blendtui is not installed"
        self.child = pexpect.spawn(COMMAND, argv, dimensions=(LINES, COLUMNS), timeout=20,
                                   env=kept | {"TERM": "xterm-256color", "LANG": "C.UTF-8"} | environment)
        self.screen = pyte.Screen(COLUMNS, LINES)
        self.stream = pyte.ByteStream(self.screen)
        self.sent = b""

    def read(self) -> None:
        try:
            data = self.child.read_nonblocking(65536, timeout=0.05)
        except (pexpect.TIMEOUT, pexpect.EOF):
            return
        self.sent += data
        self.stream.feed(data)

    def text(self) -> str:
        return "\n".join(self.screen.display)

    def until(self, seen: str | Callable[[str], bool]) -> None:
        """Wait until a text stands on the screen."""
        end = time.monotonic() + 20
        while not (seen in self.text() if isinstance(seen, str) else seen(self.text())):
            assert time.monotonic() < end, f"{seen!r} did not come; the screen shows\n{self.text()}"
            self.read()

    def press(self, keys: str) -> None:
        self.child.send(keys)

    def close(self) -> None:
        self.child.close(force=True)


@pytest.fixture
def start(tmp_path: Path) -> Iterator[Callable[..., Terminal]]:
    """Starts the program; ends it after the test."""
    opened: list[Terminal] = []

    def begin(*argv: str, **environment: str) -> Terminal:
        opened.append(Terminal(list(argv), XDG_DATA_HOME=str(tmp_path / "data"), **environment))
        return opened[-1]

    yield begin
    for terminal in opened:
        terminal.close()


def test_from_the_first_start_to_a_saved_trial(start: Callable[..., Terminal], tmp_path: Path) -> None:
    terminal = start()
    terminal.until("first start: the example plant was copied to")
    terminal.until("least cost, proven")
    terminal.press("3")
    terminal.until("[3 Recipe]")
    terminal.until("A calculated blend is not a certificate")
    terminal.until("proven to")
    terminal.press("k")
    terminal.until("name of the trial")
    terminal.press("\x15night shift\r")
    terminal.until("trial night shift kept")
    terminal.press("4")
    terminal.until(lambda text: "[4 Trials]" in text and "night shift" in text)
    terminal.press("q")
    terminal.child.expect(pexpect.EOF)
    terminal.child.close()
    assert terminal.child.exitstatus == 0
    with open_plant(tmp_path / "data" / "blendtui" / "example.plant") as plant:
        trial = plant.trials()[0]
        assert trial.name == "night shift"
        assert sum(trial.shares.values()) == pytest.approx(1.0)
        assert plant.verify() is None


ODD = [{"TERM": "vt100", "LC_ALL": "C"}, {"NO_COLOR": "1"}, {"SSH_CONNECTION": "10.0.0.1 1 10.0.0.2 22"}]


@pytest.mark.parametrize("environment", ODD, ids=lambda e: next(iter(e)))
def test_odd_terminals_work(start: Callable[..., Terminal], path: Path, environment: dict[str, str]) -> None:
    terminal = start("--plant", str(path), **environment)
    terminal.until("least cost, proven")
    terminal.press("3")
    terminal.until("proven to")
    if "LC_ALL" in environment:
        assert all(c < 128 for c in terminal.sent)
    if "NO_COLOR" in environment or "LC_ALL" in environment:
        assert b"\x1b[1;31m" not in terminal.sent
    if "SSH_CONNECTION" in environment:
        assert b"\x1b[?1003h" not in terminal.sent
    else:
        assert b"\x1b[?1003h" in terminal.sent
    terminal.press("q")
    terminal.child.expect(pexpect.EOF)


def test_it_costs_few_bytes_and_none_at_rest(start: Callable[..., Terminal], path: Path) -> None:
    terminal = start("--plant", str(path))
    terminal.until("least cost, proven")
    rest(terminal)
    assert len(terminal.sent) < 8000
    before = len(terminal.sent)
    terminal.press("\x1b[B")
    terminal.until(lambda text: "row 2 of" in text)
    rest(terminal)
    assert 0 < len(terminal.sent) - before <= 400
    before = len(terminal.sent)
    end = time.monotonic() + 3.0  # longer than the look for another person's change
    while time.monotonic() < end:
        terminal.read()
    assert len(terminal.sent) == before


def rest(terminal: Terminal) -> None:
    """Read until a while passes without a byte."""
    quiet = time.monotonic()
    while time.monotonic() - quiet < 0.5:
        before = len(terminal.sent)
        terminal.read()
        if len(terminal.sent) != before:
            quiet = time.monotonic()


def test_keys_inside_a_paste_are_text(start: Callable[..., Terminal], path: Path) -> None:
    terminal = start("--plant", str(path))
    terminal.until("least cost, proven")
    terminal.press("\x1b[200~\x1bq\rq\x1b[B3\x1b[201~")
    terminal.until("nothing is being typed here")
    terminal.press("\x1b[C\r")
    terminal.until("name ▸")
    terminal.press("\x1b[200~tank\x1b[B\rq\x1b[201~\r")
    terminal.until("tank [B q")
    terminal.press("q")
    terminal.child.expect(pexpect.EOF)
    with open_plant(path) as plant:
        assert plant.stock("LIGHT").name == "tank [B q"


def test_a_terminal_that_closes_loses_no_edit(start: Callable[..., Terminal], path: Path) -> None:
    terminal = start("--plant", str(path))
    terminal.until("least cost, proven")
    terminal.press("\x1b[C" * 7 + "\r")
    terminal.until("price, /t ▸")
    terminal.press("815\r")
    terminal.until("price 800 → 815")
    terminal.child.kill(signal.SIGHUP)
    terminal.child.expect(pexpect.EOF)
    terminal.child.close()
    assert terminal.child.exitstatus == 129
    with open_plant(path) as plant:
        assert plant.stock("LIGHT").price_per_t == 815.0
        assert plant.verify() is None


def test_an_end_from_outside_gives_the_screen_back_and_keeps_typed_shares(start: Callable[..., Terminal],
                                                                         path: Path) -> None:
    terminal = start("--plant", str(path))
    terminal.until("least cost, proven")
    terminal.press("3\r")
    terminal.until("share, % (or kg) ▸")
    terminal.press("40\r")
    terminal.until("by hand, shares sum to")
    terminal.child.kill(signal.SIGTERM)
    while terminal.child.isalive():
        terminal.read()
    assert terminal.child.exitstatus == 143
    with open_plant(path) as plant:
        assert plant.trials("H46")[0].name.startswith("unfinished ")
