"""What every headless command shares: how it is added, read and printed, and how it refuses."""

from __future__ import annotations

import argparse
import json
import math
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

from solver.errors import SolverError

if TYPE_CHECKING:
    from blendtui.desk.plant import Plant

DONE, BAD_INPUT, NO_BLEND = 0, 2, 3
MOST_SHARE = 100.0  # mass fraction: no slip of the point, and none whose sum overflows
COLDEST, HOTTEST = -273.15, 1000.0  # °C: nothing beyond is a slip of the pen; closer bounds belong to what is asked
LONGEST_WHOLE = 9  # digits
Run = Callable[[argparse.Namespace], int]
Add = Callable[[str, Run, str], argparse.ArgumentParser]  # (name, run, one sentence) → the command's parser


class BadInput(Exception):
    """What was typed on the command line cannot be used; one line."""


def shared(**default: Any) -> argparse.ArgumentParser:
    """The options that every command takes, before its name or after it."""
    made = argparse.ArgumentParser(add_help=False)
    made.add_argument("--plant", type=path, metavar="PATH", default=default.get("plant", argparse.SUPPRESS),
                      help="a plant file, or a catalogue folder (opened without changing it)")
    made.add_argument("--json", action="store_true", default=default.get("json", argparse.SUPPRESS),
                      help="the answer as JSON, numbers unrounded")
    return made


def group(add: Add, name: str, words: str, nothing: str) -> Add:
    """A command with commands of its own; how to add one. `nothing`: what is said where none is named."""
    def refuse(options: argparse.Namespace) -> int:
        raise BadInput(nothing)

    command = add(name, refuse, words)
    commands = command.add_subparsers(title=f"commands of {name}", metavar="WHAT", parser_class=type(command))

    def of_group(name: str, run: Run, words: str) -> argparse.ArgumentParser:
        made = commands.add_parser(name, parents=[shared()], help=words, description=words)
        made.set_defaults(run=run)
        return made

    return of_group


def path(text: str) -> Path:
    """A path as typed on the command line."""
    if not text.strip():
        raise argparse.ArgumentTypeError("a path cannot be empty")
    if "\0" in text:
        raise argparse.ArgumentTypeError("a path cannot hold a null character")
    return Path(text)


def whole(text: str) -> int:
    """A whole number as typed on the command line: a line of a card, a sample."""
    plain = text.strip()
    if not (plain.removeprefix("-").isascii() and plain.removeprefix("-").isdigit() and len(plain) <= LONGEST_WHOLE):
        from blendtui.store.harmless import harmless

        raise argparse.ArgumentTypeError(f"{harmless(text, 40)!r} is no whole number")
    return int(plain)


def number(text: str, what: str, quantity: Any = "number") -> float:
    """An amount as typed (see solver.scales); BadInput names the option."""
    from solver.scales import parse

    try:
        value = parse(text, quantity)
    except SolverError as error:
        raise BadInput(f"{what}: {error}") from None
    if not math.isfinite(value):
        raise BadInput(f"{what}: {text} is not a finite number")
    if quantity == "temperature" and not COLDEST <= value <= HOTTEST:
        raise BadInput(f"{what}: {text} is no temperature of an oil; type °C, or °F such as 95F")
    return value


def show(options: argparse.Namespace, answer: Any, text: str) -> None:
    """Print the JSON or the text."""
    if options.json:
        # Unknown is null; a NaN would be no JSON at all, so it is refused rather than printed.
        print(json.dumps(answer, ensure_ascii=False, allow_nan=False, indent=1))
    else:
        print(text)


def told(record: Any, **cells: Any) -> dict[str, Any]:
    """A record of the plant for JSON: what was never typed is null, as everything unknown is."""
    from dataclasses import asdict

    return {name: None if value == "" else value for name, value in {**asdict(record), **cells}.items()}


def say(text: str) -> None:
    """Progress: to stderr, and only when a person is looking."""
    if sys.stderr.isatty():
        print(text, file=sys.stderr)


def opened(options: argparse.Namespace) -> Plant:
    """The plant of --plant; columns of a folder that nothing uses are told on stderr, never passed over."""
    from blendtui.desk.plant import open_plant
    from blendtui.store.harmless import harmless

    plant = open_plant(options.plant)
    for note in plant.notes:
        if "column" in note:
            print(f"note: {harmless(note)}", file=sys.stderr)
    return plant


def shares_of(typed: list[str]) -> dict[str, float]:
    """STOCK=PCT arguments as mass fractions; BadInput names the argument."""
    shares: dict[str, float] = {}
    for each in typed:
        code, equals, amount = each.rpartition("=")
        if not equals or not code:
            raise BadInput(f"{each!r} is not STOCK=PCT; write for example {each.strip('=') or 'S1'}=25")
        if code in shares:
            raise BadInput(f"{code} is given twice; give each stock one share")
        shares[code] = number(amount, each, "share")
        if abs(shares[code]) > MOST_SHARE:
            raise BadInput(f"{each}: a share lies within 0 to 100 %")
    return shares
