"""Vessels: headless."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING, Any

from .common import DONE, Add, BadInput, group, opened, show

if TYPE_CHECKING:
    from blendtui.desk.plant import Plant
    from blendtui.store.batch_records import Vessel


def register(add: Add) -> None:
    """Add `vessel` with its own commands."""
    of_vessel = group(add, "vessel", "kettles and blending tanks: capacity, least fill, scale, heel, margin to flash",
                      "say what is to be done with vessels: list, add, set or retire; blendtui vessel --help tells of "
                      "each")
    of_vessel("list", _list, "the vessels in use")
    for name, run, words in (("add", _add, "add a vessel"), ("set", _set, "give cells of a vessel new values"),
                             ("retire", _retire, "take a vessel out of use")):
        made = of_vessel(name, run, words)
        made.add_argument("vessel", metavar="VESSEL")
        if name != "retire":
            made.add_argument("cells", metavar="CELL=VALUE", nargs="*" if name == "add" else "+",
                              help="capacity_l, least_fill_l, division_kg, heel_kg, heel_stock, flash_margin_c, "
                                   "flash_margin_on or charge_order; empty: unknown")


def _cells(typed: list[str]) -> dict[str, str]:
    found: dict[str, str] = {}
    for each in typed:
        cell, equals, value = each.partition("=")
        if not equals or not cell.strip():
            raise BadInput(f"{each}: write CELL=VALUE, for example capacity_l=24000")
        if cell.strip() in found:
            raise BadInput(f"{each}: {cell.strip()} is given twice")
        found[cell.strip()] = value
    return found


def _json(plant: Plant, of: Vessel) -> dict[str, Any]:
    from dataclasses import asdict

    from blendtui.desk.vessels import charge_order

    return {**{name: None if value == "" else value for name, value in asdict(of).items()},
            "charge_order": list(charge_order(plant, of.vessel))}


def _list(options: argparse.Namespace) -> int:
    from blendtui import as_text
    from blendtui.desk.vessels import VESSEL_CELLS, text_of
    from blendtui.store.harmless import harmless

    with opened(options) as plant:
        found = plant.vessels()
        rows = [[harmless(v.vessel, 10), *(harmless(text_of(plant, v, c.code), 12) for c in VESSEL_CELLS[:7])]
                for v in found]
        answer = {"vessels": [_json(plant, v) for v in found]}
        own = [f"{v.vessel}: charged in the order {order}" for v in found
               if (order := text_of(plant, v, "charge_order"))]
    heads = ["vessel", "L", "least L", "div kg", "heel kg", "heel of", "margin °C", "typed on"]
    text = as_text.table(heads, rows) if rows else "no vessel yet: blendtui vessel add NAME capacity_l=24000"
    show(options, answer, "\n".join([text, *(as_text.wrap(harmless(x), "  ") for x in own)]))
    return DONE


def _add(options: argparse.Namespace) -> int:
    from blendtui.desk import vessels

    cells = _cells(options.cells)
    with opened(options) as plant:
        made = vessels.add_vessel(plant, options.vessel, cells)
        said = [f"vessel {made.vessel} added"]
        said += [f"{name} {text}" for name in cells if (text := vessels.text_of(plant, made, name))]
        answer = _json(plant, made)
    show(options, answer, "\n".join(said))
    return DONE


def _set(options: argparse.Namespace) -> int:
    from blendtui.desk import vessels

    cells = _cells(options.cells)
    with opened(options) as plant:
        said = [vessels.set_cells(plant, options.vessel, cells).message]
        answer = _json(plant, vessels.vessel(plant, options.vessel))
    show(options, answer, "\n".join(said))
    return DONE


def _retire(options: argparse.Namespace) -> int:
    from blendtui.desk import vessels

    with opened(options) as plant:
        said = vessels.retire_vessel(plant, options.vessel)
    show(options, {"said": said}, said)
    return DONE
