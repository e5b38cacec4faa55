"""What can be done with vessels: kettles and blending tanks, cell by cell."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from blendtui.store import cells as check
from blendtui.store import edits
from blendtui.store.batch_edits import added, changed
from blendtui.store.batch_records import OPEN, Vessel
from blendtui.store.catalogue_vessels import HOTTEST_MARGIN, LARGEST_L, vessel_faults
from blendtui.store.harmless import harmless
from blendtui.store.plant import Plant
from blendtui.store.records import Change, Step
from blendtui.store.state import change_of
from solver.errors import ScaleError

from .charge_lines import names_of, parted
from .errors import DeskError
from .stocks import Edit

CHARGE_ORDER = "charge_order"  # a column of vessels.csv: the plant's own order of charging (charge_lines.py)


@dataclass(frozen=True)
class VesselCell:
    """One cell of a vessel that can be edited."""

    code: str  # field of Vessel, or CHARGE_ORDER
    heading: str
    unit: str = ""


VESSEL_CELLS: tuple[VesselCell, ...] = (
    VesselCell("capacity_l", "capacity", "L"), VesselCell("least_fill_l", "least fill", "L"),
    VesselCell("division_kg", "scale division", "kg"), VesselCell("heel_kg", "heel", "kg"),
    VesselCell("heel_stock", "heel of"), VesselCell("flash_margin_c", "margin to flash", "°C"),
    VesselCell("flash_margin_on", "margin typed on"), VesselCell(CHARGE_ORDER, "order of charging"))
_BY_CODE = {c.code: c for c in VESSEL_CELLS}
CELLS = tuple(code for code in _BY_CODE if code != CHARGE_ORDER)  # those that are fields of Vessel


def vessel(plant: Plant, code: str) -> Vessel:
    """A vessel by its code, whatever the case; DeskError names those there are."""
    there = plant.vessels()
    found = next((v for v in there if v.vessel == code), None) or next(
        (v for v in there if v.vessel.casefold() == code.strip().casefold()), None)
    if found is None:
        have = ", ".join(harmless(v.vessel, 20) for v in there[:12])
        raise DeskError(f"no vessel {harmless(code, 40)!r}; " + (f"the plant has {have}" if have else
                        "the plant has none yet: blendtui vessel add NAME capacity_l=24000"))
    return found


def charge_order(plant: Plant, code: str) -> tuple[str, ...]:
    """The plant's own order of charging in this vessel, as names; empty: the usual one."""
    row = plant.row("extra", "vessel", edits.row_key((code,)), CHARGE_ORDER)
    return parted(str((row or {}).get("text") or ""))


def text_of(plant: Plant, of: Vessel, cell: str) -> str:
    """A cell as it is shown and as it may be typed back."""
    if cell == CHARGE_ORDER:
        return ", ".join(charge_order(plant, of.vessel))
    value = getattr(of, cell)
    return "" if value is None else value if isinstance(value, str) else f"{value:.12g}"


def set_cell(plant: Plant, code: str, cell: str, typed: str) -> Edit:
    """Give a vessel's cell what was typed, with its unit if it is another; empty: unknown.

    A margin to the flash point that is typed without its date gets today's. DeskError for what cannot be true.
    """
    return set_cells(plant, code, {cell: typed})


def set_cells(plant: Plant, code: str, typed: Mapping[str, str]) -> Edit:
    """Several cells in one step: all of them or none."""
    old = vessel(plant, code)
    new, changes = _typed(plant, old, typed)
    cells = {c: getattr(new, c) for c in _BY_CODE if c != CHARGE_ORDER and getattr(new, c) != getattr(old, c)}
    if cells:
        changes.append(changed(old, **cells))
    if not changes:
        return Edit("unchanged", f"{old.vessel}: unchanged")
    said = [f"{_BY_CODE[c].heading} {text_of(plant, old, c) or 'empty'} → {text_of(plant, new, c) or 'empty'}"
            + (f" {_BY_CODE[c].unit}" if cells[c] is not None and _BY_CODE[c].unit else "") for c in cells]
    if CHARGE_ORDER in typed and len(changes) > bool(cells):
        said.append(f"order of charging {typed[CHARGE_ORDER].strip() or 'the usual'}")
    words = f"{old.vessel} {', '.join(said)}"
    plant.change(changes, words)
    return Edit("saved", words)


def _typed(plant: Plant, old: Vessel, typed: Mapping[str, str]) -> tuple[Vessel, list[Change]]:
    """A vessel with what was typed, and the change of its own order of charging; DeskError for what cannot be true."""
    new, changes = old, list[Change]()
    for cell, text in typed.items():
        if cell not in _BY_CODE:
            raise DeskError(f"a vessel has no {harmless(cell, 40)!r}; it has {', '.join(_BY_CODE)}")
        if cell == CHARGE_ORDER:
            changes += _own_order(plant, old, text)
        else:
            new = _with(plant, new, cell, text.strip())
    _refuse(new)
    return new, changes


def _own_order(plant: Plant, of: Vessel, typed: str) -> list[Change]:
    names = names_of(typed, plant.stocks())
    before, after = ", ".join(charge_order(plant, of.vessel)), ", ".join(names)
    key = ("vessel", edits.row_key((of.vessel,)), CHARGE_ORDER)
    if before == after:
        return []
    return [change_of("extra", key, {"text": before} if before else None, {"text": after} if after else None)]


def _with(plant: Plant, old: Vessel, cell: str, typed: str) -> Vessel:
    """The vessel with what was typed in this cell."""
    try:
        if cell == "heel_stock":
            return replace(old, heel_stock=_heel_of(plant, typed))
        if cell == "flash_margin_on":
            return replace(old, flash_margin_on=check.iso_date(typed))
        value = _number(cell, typed, old)
    except (check.CellError, ScaleError) as error:
        raise DeskError(f"{harmless(old.vessel, 40)} {_BY_CODE[cell].heading}: {error}") from None
    if cell == "flash_margin_c":
        # A margin is a decision of a day: without a date nobody could tell whether it still stands.
        return replace(old, flash_margin_c=value, flash_margin_on="" if value is None else _today())
    return replace(old, **{cell: value})  # type: ignore[arg-type]


def _today() -> str:
    from datetime import datetime

    return datetime.now().date().isoformat()


def _heel_of(plant: Plant, typed: str) -> str:
    """A stock or a batch that the heel is of; DeskError where the plant has neither."""
    name = check.plain(typed)
    if name and name not in {s.code for s in plant.stocks(include_retired=True)} | {b.batch for b in plant.batches()}:
        raise DeskError(f"{harmless(name, 40)!r} is no stock and no batch of this plant; mend the name, or leave it "
                        "empty and type the heel's values with the order")
    return name


def _number(cell: str, typed: str, old: Vessel) -> float | None:
    from solver.scales import parse, split

    if not typed:
        return None
    if cell.endswith("_l"):
        number, unit = split(typed)
        value = number if unit in ("", "l") else parse(typed, "mass", 1000.0)  # 1 L of 1000 kg/m³ is 1 kg
        if unit in ("kg", "t", "lb", "lbs", "g"):
            raise DeskError(f"{harmless(typed, 40)!r} is a mass; a vessel's {_BY_CODE[cell].heading} is in litres")
        return check.number(repr(value), least=0.0, most=LARGEST_L) if cell == "least_fill_l" else check.positive(
            repr(value), LARGEST_L)
    if cell == "flash_margin_c":
        number, unit = split(typed)
        value = number / 1.8 if unit in ("f", "°f") else parse(typed, "temperature")  # a difference has no offset
        return check.number(repr(value), least=0.0, most=HOTTEST_MARGIN)
    value = parse(typed, "mass")
    if cell == "division_kg":
        return check.positive(repr(value), check.LARGEST_KG)
    return check.number(repr(value), least=0.0, most=check.LARGEST_KG)


def _refuse(of: Vessel) -> None:
    fault = next(vessel_faults(of), None)
    if fault is not None:
        raise DeskError(f"{harmless(of.vessel, 40)}: {fault[1]}; {fault[2]}")


def add_vessel(plant: Plant, code: str, typed: Mapping[str, str] | None = None) -> Vessel:
    """Add a vessel under a code with the cells that were typed, in one step: all of it or nothing.

    A retired one of that code comes back as it was, but for what was typed.
    """
    try:
        code = check.code(code.strip())
    except check.CellError as error:
        raise DeskError(str(error)) from None
    if any(v.vessel.casefold() == code.casefold() for v in plant.vessels()):
        raise DeskError(f"there is a vessel {code} already; give the new one another code")
    row = plant.row("vessel", code)
    if row is not None:
        old = Vessel(code, **{name: row[name] for name in CELLS})  # type: ignore[arg-type]
        new, more = _typed(plant, old, typed or {})
        cells = {name: getattr(new, name) for name in CELLS if getattr(new, name) != getattr(old, name)}
        before = {name: row[name] for name in cells}
        changes = [change_of("vessel", (code,), {"retired": 1, **before}, {"retired": 0, **cells}), *more]
    else:
        new, more = _typed(plant, Vessel(code), typed or {})
        first = added(new)[0]
        position = edits.next_position(plant, "vessel")
        changes = [replace(first, after={**(first.after or {}), "position": position, "retired": 0}), *more]
    plant.change(changes, f"vessel {code} added")
    return vessel(plant, code)


def retire_vessel(plant: Plant, code: str, *, why: str = "") -> str:
    """Take a vessel out of use; undo brings it back. DeskError while a batch is open in it."""
    old = vessel(plant, code)

    def make() -> Step:
        held = [b.batch for b in plant.batches(OPEN) if b.vessel == old.vessel]
        if held:
            raise DeskError(f"{old.vessel} holds {', '.join(held[:4])}, which "
                            f"{'is' if len(held) == 1 else 'are'} open; release or cancel first")
        return Step((edits.retired("vessel", old.vessel),), f"vessel {old.vessel} retired", why)

    plant.step(make)
    return f"vessel {old.vessel} retired"
