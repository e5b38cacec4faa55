"""What the laboratory teaches: headless."""

from __future__ import annotations

import argparse
from collections.abc import Callable
from typing import TYPE_CHECKING

from solver.target import LAWS

from .common import DONE, Add, BadInput, group, opened, shares_of, show
from .lab_fit import add_fit
from .lab_plan import add_plan

if TYPE_CHECKING:
    from blendtui.desk.plant import Plant

PLACES = {"--kv40": "KV at 40 °C, mm²/s", "--kv100": "KV at 100 °C, mm²/s"}


def register(add: Add) -> None:
    """Add `lab` with its own commands."""
    of_lab = group(add, "lab", "measured blends, and what they teach the laws",
                   "say what the laboratory is to do: record, list, confirm, drop, residuals, offer, take, withdraw, "
                   "lessons, plan or fit; blendtui lab --help tells of each")
    _add_record(of_lab)
    made = of_lab("list", _list, "list the measured blends, with what is doubtful of them")
    made.add_argument("--product", metavar="PRODUCT", help="only those made for it")
    made.add_argument("--law", default="refutas", help=f"with which they are compared: {', '.join(LAWS)}")
    for name, run, words in (("confirm", _confirm, "say that what is doubtful of a blend is so"),
                             ("drop", _drop, "take a blend off the record")):
        of_lab(name, run, words).add_argument("name", metavar="NAME")
    made = of_lab("residuals", _residuals, "measured against predicted, by law, product and stock, and its drift")
    for option, words in (("--law", ", ".join(LAWS)), ("--product", "only the blends made for it"),
                          ("--stock", "only the blends that hold it")):
        made.add_argument(option, metavar=option[2:].upper(), help=words)
    of_lab("offer", _offer, "what the measured blends could teach, with all figures").add_argument(
        "--law", default="refutas", help=", ".join(LAWS))
    made = of_lab("take", _take, "take the excess of a pair, or the blending value of a stock, into use")
    made.add_argument("first", metavar="FIRST", help="a stock or an oil")
    made.add_argument("second", metavar="SECOND", nargs="?", default="", help="of a pair")
    made.add_argument("--law", default="refutas", help=", ".join(LAWS))
    made = of_lab("withdraw", _withdraw, "take a lesson out of use")
    made.add_argument("version", metavar="VERSION", help="such as L1")
    made.add_argument("--reason", required=True, metavar="TEXT")
    of_lab("lessons", _lessons, "the lessons in use").add_argument(
        "--all", action="store_true", help="those that were withdrawn too")
    add_plan(of_lab)
    add_fit(of_lab)


def _add_record(add: Add) -> None:
    made = add("record", _record, "put a measured blend on record, with what its stocks are today")
    made.add_argument("name", metavar="NAME", help="of the blend")
    made.add_argument("product", metavar="PRODUCT", help="the product it was made for, or - for none")
    made.add_argument("shares", nargs="*", metavar="STOCK=PCT", help="what was charged, mass %%")
    made.add_argument("--trial", metavar="TRIAL", help="the kept trial it was made after, in place of shares")
    for option, words in PLACES.items():
        made.add_argument(option, metavar="V", default="", help=words)
    made.add_argument("--value", action="append", default=[], metavar="PROPERTY=V", help="a further result, such as "
                      "flash=221 or density15=878.4; may be repeated")
    made.add_argument("--on", metavar="DATE", default="", help="date of the results, such as 2026-03-01; else today")
    made.add_argument("--method", metavar="TEXT", default="")
    made.add_argument("--note", metavar="TEXT", default="")
    made.add_argument("--confirm", action="store_true", help="what is doubtful of it has been looked at and is so")


def _record(options: argparse.Namespace) -> int:
    from blendtui.desk import lab

    from . import lab_show

    results = {"kv40": options.kv40, "kv100": options.kv100}
    for each in options.value:
        prop, equals, value = each.partition("=")
        if not equals or not prop or not value:
            raise BadInput(f"--value {each}: write PROPERTY=V, for example flash=221")
        if results.get(prop):
            raise BadInput(f"--value {each}: {prop} is given twice")
        results[prop] = value
    if bool(options.shares) == bool(options.trial):
        raise BadInput("give what was charged either as STOCK=PCT arguments or with --trial, not both and not neither")
    product = "" if options.product == "-" else options.product
    said = {"on": options.on, "method": options.method, "note": options.note, "confirmed": options.confirm}
    with opened(options) as plant:
        if options.trial:
            done = lab.record_trial(plant, options.name, product, options.trial, results, **said)
        else:
            done = lab.record(plant, options.name, product, shares_of(options.shares), results, **said)
    answer = {"name": done.blend.name, "confirmed": done.blend.confirmed, "said": done.message,
              "questions": lab_show.questions_json(done.questions)}
    show(options, answer, "\n".join([lab_show.wrap(done.message, "  "), *lab_show.questions_text(done.questions)]))
    return DONE


def _list(options: argparse.Namespace) -> int:
    from blendtui.desk import lab
    from solver.laws import check_law

    from . import lab_show

    with opened(options) as plant:
        if options.product:
            plant.product(options.product)
        record = lab.read(plant)
    checked = lab.checked(record, check_law(options.law))
    blends = [b for b in record.blends if options.product in (None, b.product)]
    show(options, {"blends": [lab_show.blend_json(b, checked) for b in blends]}, lab_show.blends_text(blends, checked))
    return DONE


def _said(options: argparse.Namespace, work: Callable[[Plant], str]) -> int:
    from . import lab_show

    with opened(options) as plant:
        said = work(plant)
    show(options, {"said": said}, lab_show.wrap(said, "  "))
    return DONE


def _confirm(options: argparse.Namespace) -> int:
    from blendtui.desk import lab

    return _said(options, lambda plant: lab.confirm(plant, options.name))


def _drop(options: argparse.Namespace) -> int:
    from blendtui.desk import lab

    return _said(options, lambda plant: lab.drop(plant, options.name))


def _residuals(options: argparse.Namespace) -> int:
    from blendtui.desk import lab

    from . import lab_show

    with opened(options) as plant:
        record = lab.read(plant)
        if options.product:
            plant.product(options.product)
    if options.stock and not any(p.stock == options.stock for b in record.blends for p in b.parts):
        raise BadInput(f"no measured blend holds {options.stock}; blendtui lab list --json shows what each holds")
    report = lab.report(record, options.law, options.product, options.stock)
    show(options, lab_show.report_json(report), lab_show.report_text(report))
    return DONE


def _offer(options: argparse.Namespace) -> int:
    from blendtui.desk import lab, lessons

    from . import lab_show

    with opened(options) as plant:
        record = lab.read(plant)
    found = lessons.offers(record, options.law)
    in_question = lab.checked(record, options.law).in_question
    show(options, {"law": options.law, "in_question": list(in_question),
                   "offers": [lab_show.offer_json(o) for o in found]},
         lab_show.offers_text(options.law, found, in_question))
    return DONE


def _take(options: argparse.Namespace) -> int:
    from blendtui.desk import lessons

    return _said(options, lambda plant: lessons.take(plant, options.law, options.first, options.second))


def _withdraw(options: argparse.Namespace) -> int:
    from blendtui.desk import lessons

    return _said(options, lambda plant: lessons.withdraw(plant, options.version, options.reason))


def _lessons(options: argparse.Namespace) -> int:
    from . import lab_show

    with opened(options) as plant:
        found = plant.lessons(include_withdrawn=options.all)
    show(options, {"lessons": [lab_show.lesson_json(x) for x in found]}, lab_show.lessons_text(found))
    return DONE
