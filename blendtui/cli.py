"""The headless commands, and the way into the console.

Exit 0 done, 2 bad input (one line on stderr, nothing on stdout), 3 no blend (the answer is still printed).
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Callable, Sequence
from importlib import import_module
from typing import Any, NoReturn

from blendtui.desk.errors import DeskError
from blendtui.headless.common import BAD_INPUT, DONE, BadInput, number, opened, path, say, shared, shares_of, show
from blendtui.store.errors import CatalogueError, PlantError
from solver.errors import SolverError
from solver.target import LAWS

HEADLESS = """blendtui opens its console on a terminal, and there is none here. Headless, for example:
  blendtui products
  blendtui design HYD-46
  blendtui design HYD-46 --json --ranges --blends 4
  blendtui viscosity --kv40 46 --kv100 6.8 --at 0 --at 60
  blendtui batch order HYD-46 15 t --vessel K1 --try
Without --plant PATH these use the example plant. blendtui --help lists every command."""
LONGEST = 1000  # characters of one message: what was typed may be a file


class _Parser(argparse.ArgumentParser):
    """argparse, with its complaint in one line, made by the command that was typed and not by the whole program."""

    def parse_known_args(self, args: Any = None, namespace: Any = None) -> tuple[Any, list[str]]:
        found, unknown = super().parse_known_args(args, namespace)
        if unknown:
            self.error(f"unrecognized arguments: {' '.join(unknown)}")
        return found, unknown

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
        return _refuse(*(map(str, error.faults) if every else [str(error)]))
    except (BadInput, SolverError, PlantError, DeskError) as error:
        return _refuse(str(error))
    except UnicodeEncodeError as error:
        # Bytes that are no text in this terminal's encoding; Python hands them on as halves of a pair.
        return _refuse(f"{error.object[:40]!r} is no text: it holds bytes that are not UTF-8; type it anew")
    except KeyboardInterrupt:
        return 130
    except BrokenPipeError:
        # The reader of a pipe has gone; nothing more can be said to it.
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
        return DONE
    except OSError as error:
        return _refuse(f"the answer could not be written: {(error.strerror or str(error)).lower()}; a step that was "
                       "asked for may be on record: look before it is repeated")
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


def _refuse(*messages: str) -> int:
    # A name in a catalogue or a typed text may hold anything; a message is one line whatever it holds.
    from blendtui.store.harmless import harmless

    print("\n".join(harmless(message, LONGEST) for message in messages), file=sys.stderr)
    return BAD_INPUT


def _parser() -> argparse.ArgumentParser:
    parser = _Parser(prog="blendtui", parents=[shared(plant=None, json=False)],
                     description="Least-cost lubricant blends from the stocks in the tanks. "
                                 "Without a command: the console.")
    parser.set_defaults(run=_console)
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", parser_class=_Parser)

    def add(name: str, run: Callable[[argparse.Namespace], int], words: str) -> argparse.ArgumentParser:
        command = commands.add_parser(name, parents=[shared()], help=words, description=words)
        command.set_defaults(run=run)
        return command

    command = add("viscosity", _viscosity, "VI, D341 line, grade and KV at any temperature of one oil")
    command.add_argument("--kv40", required=True, metavar="V", help="mm²/s")
    command.add_argument("--kv100", required=True, metavar="V", help="mm²/s")
    command.add_argument("--at", action="append", default=[], metavar="T", help="°C (or 110F); may be repeated")
    command = add("predict", _predict, "properties and cost of given shares")
    command.add_argument("shares", nargs="+", metavar="STOCK=PCT")
    command.add_argument("--law", help=", ".join(LAWS))
    command = add("import", _import, "make a plant file equal to a catalogue folder, all or nothing")
    command.add_argument("folder", type=path, metavar="FOLDER")
    command.set_defaults(every_fault=True)
    command = add("export", _export, "write the plant as a catalogue folder")
    command.add_argument("folder", type=path, metavar="FOLDER")
    for name in ("design", "why", "choices", "chance", "lab", "vessel", "batch", "record", "stock", "trace"):
        import_module(f"blendtui.headless.{name}").register(add)
    add("stocks", _stocks, "list the stocks")
    add("products", _products, "list the products")
    return parser


def _viscosity(options: argparse.Namespace) -> int:
    from blendtui import as_json, as_text
    from solver.grades import iso_vg
    from solver.viscosity_index import LOWEST_KV100, viscosity_index
    from solver.walther import line

    kv40, kv100 = (number(getattr(options, k), f"--{k}", "kv") for k in ("kv40", "kv100"))
    oil = line(kv40, kv100)
    temperatures = [number(t, "--at", "temperature") for t in options.at]
    for t in temperatures:
        if not -80.0 <= t <= 300.0:
            raise BadInput(f"--at {t:g} °C lies outside −80 to 300 °C, where the line may be read")
    vi = viscosity_index(kv40, kv100) if kv100 >= LOWEST_KV100 else None
    parts = (oil, vi, iso_vg(kv40), temperatures)
    show(options, as_json.viscosity(*parts), as_text.viscosity(*parts))
    return DONE


def _predict(options: argparse.Namespace) -> int:
    from dataclasses import replace

    from blendtui import as_json, as_text
    from solver.recipe import evaluate

    shares = shares_of(options.shares)
    with opened(options) as plant:
        recipe = evaluate(plant.stocks(), shares, law=options.law or "refutas")
    # The answer repeats the shares as they were given.
    recipe = replace(recipe, shares={code: share for code, share in shares.items() if share > 0.0})
    show(options, as_json.prediction(recipe), as_text.prediction(recipe))
    return DONE


def _import(options: argparse.Namespace) -> int:
    from blendtui.desk.plant import import_folder

    say(f"checking {options.folder} …")
    done = import_folder(options.folder, options.plant)
    answer = {"plant": str(done.plant), "stocks": done.stocks, "products": done.products,
              "changes": done.changes, "retired": list(done.retired), "notes": list(done.notes)}
    lines = [f"imported {done.stocks} stocks and {done.products} products into {done.plant} "
             f"({done.changes} changes)", *(f"retired: {x}" for x in done.retired), *done.notes]
    show(options, answer, "\n".join(lines))
    return DONE


def _export(options: argparse.Namespace) -> int:
    from blendtui.desk.plant import export_plant

    with opened(options) as plant:
        notes = export_plant(plant, options.folder)
        count = {"stocks": len(plant.stocks()), "products": len(plant.products())}
    words = f"exported {count['stocks']} stocks and {count['products']} products to {options.folder}"
    show(options, {"folder": str(options.folder), **count, "notes": list(notes)}, "\n".join([words, *notes]))
    return DONE


def _stocks(options: argparse.Namespace) -> int:
    from blendtui import as_json, as_text

    with opened(options) as plant:
        stocks = plant.stocks()
    show(options, {"stocks": [as_json.stock(s) for s in stocks]}, as_text.stocks(stocks))
    return DONE


def _products(options: argparse.Namespace) -> int:
    from blendtui import as_json, as_text

    with opened(options) as plant:
        products = plant.products()
    show(options, {"products": [as_json.product(p) for p in products]}, as_text.products(products))
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
