"""The headless commands, and the way into the console.

Exit 0 done, 2 bad input (one line on stderr, nothing on stdout), 3 no blend (the answer is still printed).
"""

from __future__ import annotations

import argparse
import json
import math
import os
import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

from blendtui.desk.errors import DeskError
from blendtui.quiet import quiet
from blendtui.store.errors import CatalogueError, PlantError
from solver.errors import SolverError
from solver.target import LAWS

if TYPE_CHECKING:
    from blendtui.desk.plant import Plant

DONE, BAD_INPUT, NO_BLEND = 0, 2, 3
HEADLESS = """blendtui opens its console on a terminal, and there is none here. Headless, for example:
  blendtui products
  blendtui design HYD-46
  blendtui design HYD-46 --json --ranges --blends 4
  blendtui viscosity --kv40 46 --kv100 6.8 --at 0 --at 60
Without --plant PATH these use the example plant. blendtui --help lists every command."""


class BadInput(Exception):
    """What was typed on the command line cannot be used; one line."""


class _Parser(argparse.ArgumentParser):
    """argparse, with its complaint in one line."""

    def error(self, message: str) -> NoReturn:
        raise BadInput(f"{message}; {self.prog} --help shows what is taken")


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command; returns the exit code."""
    _steady_streams()
    try:
        options = _parser().parse_args(argv)
        code = int(options.run(options))
        sys.stdout.flush()
        return code
    except CatalogueError as error:
        every = getattr(options, "every_fault", False)
        return _refuse("\n".join(map(str, error.faults)) if every else str(error))
    except (BadInput, SolverError, PlantError, DeskError) as error:
        return _refuse(str(error))
    except KeyboardInterrupt:
        return 130
    except BrokenPipeError:
        # The reader of a pipe has gone; nothing more can be said to it.
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
        return DONE
    except OSError as error:
        return _refuse(f"the answer could not be written: {(error.strerror or str(error)).lower()}")
    except Exception as error:
        if os.environ.get("BLENDTUI_DEBUG"):
            raise
        return _refuse(f"an unexpected fault ({type(error).__name__}: {error}); nothing was changed. Run again "
                       "with BLENDTUI_DEBUG=1 and report what it prints")


def _steady_streams() -> None:
    """Streams that can always be written: a closed one goes nowhere, and what a terminal cannot show is "?"."""
    for name in ("stdin", "stdout", "stderr"):
        if getattr(sys, name) is None:
            setattr(sys, name, open(os.devnull, "r" if name == "stdin" else "w", encoding="utf-8"))  # noqa: SIM115
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")


def _refuse(text: str) -> int:
    # A name in a catalogue may hold anything; a message is one line whatever it holds.
    from blendtui.store.harmless import harmless

    print("\n".join(harmless(line) for line in text.split("\n")), file=sys.stderr)
    return BAD_INPUT


def _shared(**default: Any) -> argparse.ArgumentParser:
    """The options that every command takes, before its name or after it."""
    shared = argparse.ArgumentParser(add_help=False)
    shared.add_argument("--plant", type=_path, metavar="PATH", default=default.get("plant", argparse.SUPPRESS),
                        help="a plant file, or a catalogue folder (opened without changing it)")
    shared.add_argument("--json", action="store_true", default=default.get("json", argparse.SUPPRESS),
                        help="the answer as JSON, numbers unrounded")
    return shared


def _path(text: str) -> Path:
    if not text.strip():
        raise argparse.ArgumentTypeError("a path cannot be empty")
    return Path(text)


def _parser() -> argparse.ArgumentParser:
    parser = _Parser(prog="blendtui", parents=[_shared(plant=None, json=False)],
                     description="Least-cost lubricant blends from the stocks in the tanks. "
                                 "Without a command: the console.")
    parser.set_defaults(run=_console)
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", parser_class=_Parser)

    def add(name: str, run: Callable[[argparse.Namespace], int], words: str) -> argparse.ArgumentParser:
        command = commands.add_parser(name, parents=[_shared()], help=words, description=words)
        command.set_defaults(run=run)
        return command

    command = add("viscosity", _viscosity, "VI, D341 line, grade and KV at any temperature of one oil")
    command.add_argument("--kv40", required=True, metavar="V", help="mm²/s")
    command.add_argument("--kv100", required=True, metavar="V", help="mm²/s")
    command.add_argument("--at", action="append", default=[], metavar="T", help="°C (or 110F); may be repeated")
    command = add("predict", _predict, "properties and cost of given shares")
    command.add_argument("shares", nargs="+", metavar="STOCK=PCT")
    command.add_argument("--law", help=", ".join(LAWS))
    command = add("design", _design, "the least-cost recipe of a product")
    command.add_argument("product", metavar="PRODUCT")
    command.add_argument("--batch", metavar="KG", help="batch size, kg (or 12 t)")
    command.add_argument("--law", help=", ".join(LAWS))
    command.add_argument("--ranges", action="store_true", help="least and most share of every allowed stock")
    command.add_argument("--blends", metavar="N", help="up to N (at most 8) blends of other stocks")
    command = add("import", _import, "make a plant file equal to a catalogue folder, all or nothing")
    command.add_argument("folder", type=_path, metavar="FOLDER")
    command.set_defaults(every_fault=True)
    command = add("export", _export, "write the plant as a catalogue folder")
    command.add_argument("folder", type=_path, metavar="FOLDER")
    add("stocks", _stocks, "list the stocks")
    add("products", _products, "list the products")
    return parser


def _number(text: str, what: str, quantity: Any = "number") -> float:
    from solver.scales import parse

    try:
        value = parse(text, quantity)
    except SolverError as error:
        raise BadInput(f"{what}: {error}") from None
    if not math.isfinite(value):
        raise BadInput(f"{what}: {text} is not a finite number")
    return value


def _print(options: argparse.Namespace, answer: Any, text: str) -> None:
    if options.json:
        # Unknown is null; a NaN would be no JSON at all, so it is refused rather than printed.
        print(json.dumps(answer, ensure_ascii=False, allow_nan=False, indent=1))
    else:
        print(text)


def _say(text: str) -> None:
    """Progress: to stderr, and only when a person is looking."""
    if sys.stderr.isatty():
        print(text, file=sys.stderr)


def _opened(options: argparse.Namespace) -> Plant:
    """The plant of --plant; columns of a folder that nothing uses are told on stderr, never passed over."""
    from blendtui.desk.plant import open_plant
    from blendtui.store.harmless import harmless

    plant = open_plant(options.plant)
    for note in plant.notes:
        if "column" in note:
            print(f"note: {harmless(note)}", file=sys.stderr)
    return plant


def _viscosity(options: argparse.Namespace) -> int:
    from blendtui import as_json, as_text
    from solver.grades import iso_vg
    from solver.viscosity_index import LOWEST_KV100, viscosity_index
    from solver.walther import line

    kv40, kv100 = (_number(getattr(options, k), f"--{k}", "kv") for k in ("kv40", "kv100"))
    oil = line(kv40, kv100)
    temperatures = [_number(t, "--at", "temperature") for t in options.at]
    for t in temperatures:
        if not -80.0 <= t <= 300.0:
            raise BadInput(f"--at {t:g} °C lies outside −80 to 300 °C, where the line may be read")
    vi = viscosity_index(kv40, kv100) if kv100 >= LOWEST_KV100 else None
    parts = (oil, vi, iso_vg(kv40), temperatures)
    _print(options, as_json.viscosity(*parts), as_text.viscosity(*parts))
    return DONE


def _predict(options: argparse.Namespace) -> int:
    from dataclasses import replace

    from blendtui import as_json, as_text
    from solver.recipe import evaluate

    shares: dict[str, float] = {}
    for each in options.shares:
        code, equals, typed = each.rpartition("=")
        if not equals or not code:
            raise BadInput(f"{each!r} is not STOCK=PCT; write for example {each.strip('=') or 'S1'}=25")
        if code in shares:
            raise BadInput(f"{code} is given twice; give each stock one share")
        shares[code] = _number(typed, each, "share")
    with _opened(options) as plant:
        recipe = evaluate(plant.stocks(), shares, law=options.law or "refutas")
    # The answer repeats the shares as they were given.
    recipe = replace(recipe, shares={code: share for code, share in shares.items() if share > 0.0})
    _print(options, as_json.prediction(recipe), as_text.prediction(recipe))
    return DONE


def _design(options: argparse.Namespace) -> int:
    from blendtui import as_json, as_text
    from blendtui.desk import blends
    from blendtui.desk.targets import target_of

    wanted = _count(options.blends)
    batch = None if options.batch is None else _number(options.batch, "--batch", "mass")
    if batch is not None and batch <= 0.0:
        raise BadInput(f"--batch {options.batch}: a batch is more than 0 kg")
    with _opened(options) as plant:
        stocks = plant.stocks()
        target = target_of(plant, options.product, options.law, batch)
    _say(f"designing {options.product} …")
    with quiet():
        recipe = blends.best(stocks, target, time_limit=30.0)
        feasible = recipe.status != "infeasible"
        ranges = blends.all_ranges(stocks, target) if options.ranges and feasible else None
        others = blends.other_sets(stocks, target, wanted) if wanted and feasible else []
    answer = as_json.design(recipe)
    if options.ranges:
        answer["ranges_pct"] = None if ranges is None else {
            code: [100.0 * low, 100.0 * high] for code, (low, high) in ranges.items()}
    if wanted:
        answer["blends"] = [as_json.other_blend(b) for b in others]
    _print(options, answer, as_text.design(options.product, recipe, stocks, ranges, others))
    return DONE if feasible and recipe.shares is not None else NO_BLEND


def _count(text: str | None) -> int:
    if text is None:
        return 0
    if not (text.isascii() and text.isdigit() and 1 <= int(text) <= 8):
        raise BadInput(f"--blends {text}: give a whole number from 1 to 8")
    return int(text)


def _import(options: argparse.Namespace) -> int:
    from blendtui.desk.plant import import_folder

    _say(f"checking {options.folder} …")
    done = import_folder(options.folder, options.plant)
    answer = {"plant": str(done.plant), "stocks": done.stocks, "products": done.products,
              "changes": done.changes, "retired": list(done.retired), "notes": list(done.notes)}
    lines = [f"imported {done.stocks} stocks and {done.products} products into {done.plant} "
             f"({done.changes} changes)", *(f"retired: {x}" for x in done.retired), *done.notes]
    _print(options, answer, "\n".join(lines))
    return DONE


def _export(options: argparse.Namespace) -> int:
    from blendtui.desk.plant import export_plant

    with _opened(options) as plant:
        notes = export_plant(plant, options.folder)
        count = {"stocks": len(plant.stocks()), "products": len(plant.products())}
    words = f"exported {count['stocks']} stocks and {count['products']} products to {options.folder}"
    _print(options, {"folder": str(options.folder), **count, "notes": list(notes)}, "\n".join([words, *notes]))
    return DONE


def _stocks(options: argparse.Namespace) -> int:
    from blendtui import as_json, as_text

    with _opened(options) as plant:
        stocks = plant.stocks()
    _print(options, {"stocks": [as_json.stock(s) for s in stocks]}, as_text.stocks(stocks))
    return DONE


def _products(options: argparse.Namespace) -> int:
    from blendtui import as_json, as_text

    with _opened(options) as plant:
        products = plant.products()
    _print(options, {"products": [as_json.product(p) for p in products]}, as_text.products(products))
    return DONE


def _console(options: argparse.Namespace) -> int:
    if not (sys.stdin.isatty() and sys.stdout.isatty()):
        print(HEADLESS)
        return DONE
    if options.json:
        raise BadInput("--json goes with a command, such as blendtui products --json")
    from blendtui.app import run

    return run(options.plant)


if __name__ == "__main__":
    sys.exit(main())
