"""Grades and the limits they bring: ISO 3448, SAE J300, SAE J306; and API base-stock groups.

"Below 9.3" in a standard is an exclusive bound; it is held at 0.01 less. A limit that cannot be predicted
from a stock's data (HTHS, pumping, low-temperature gear viscosity) is returned as "to be tested".
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from .errors import TargetError
from .target import Limit

# ISO 3448: number in the name → midpoint KV40 [mm²/s], ±10 %. 2200 and 3200 from memory.
ISO_VG: dict[int, float] = {
    2: 2.2, 3: 3.2, 5: 4.6, 7: 6.8, 10: 10.0, 15: 15.0, 22: 22.0, 32: 32.0, 46: 46.0, 68: 68.0, 100: 100.0,
    150: 150.0, 220: 220.0, 320: 320.0, 460: 460.0, 680: 680.0, 1000: 1000.0, 1500: 1500.0, 2200: 2200.0,
    3200: 3200.0}

# SAE J300: CCS most [mPa·s] at [°C]; MRV at [°C]; least KV100 [mm²/s].
_J300_WINTER: dict[str, tuple[float, int, int, float]] = {
    "0W": (6200, -35, -40, 3.8), "5W": (6600, -30, -35, 3.8), "10W": (7000, -25, -30, 4.1),
    "15W": (7000, -20, -25, 5.6), "20W": (9500, -15, -20, 5.6), "25W": (13000, -10, -15, 9.3)}
# SAE J300: KV100 from, below [mm²/s]; least HTHS [mPa·s].
_J300: dict[str, tuple[float, float, float]] = {
    "8": (4.0, 6.1, 1.7), "12": (5.0, 7.1, 2.0), "16": (6.1, 8.2, 2.3), "20": (6.9, 9.3, 2.6),
    "30": (9.3, 12.5, 2.9), "40": (12.5, 16.3, 3.7), "50": (16.3, 21.9, 3.7), "60": (21.9, 26.1, 3.7)}
_LIGHT_WINTERS = ("0W", "5W", "10W")  # with these, SAE 40 asks for HTHS 3.5 only

# SAE J306: temperature of 150,000 mPa·s [°C]; least KV100. Then KV100 from, below (None: open).
_J306_WINTER: dict[str, tuple[int, float]] = {"70W": (-55, 3.8), "75W": (-40, 3.8), "80W": (-26, 8.5),
                                              "85W": (-12, 11.0)}
_J306: dict[str, tuple[float, float | None]] = {
    "65": (3.8, 5.0), "70": (5.0, 6.5), "75": (6.5, 8.5), "80": (8.5, 11.0), "85": (11.0, 13.5),
    "90": (13.5, 18.5), "110": (18.5, 24.0), "140": (24.0, 32.5), "190": (32.5, 41.0), "250": (41.0, None)}
EXCLUSIVE = 0.01  # mm²/s held below an exclusive bound


@dataclass(frozen=True)
class Grade:
    """A grade by its full name, its limits, those it holds only where stocks have data, and what remains."""

    name: str
    limits: tuple[Limit, ...]
    if_known: tuple[Limit, ...] = ()  # held when every stock has the value, else to be tested
    to_be_tested: tuple[str, ...] = ()


def grade(name: str) -> Grade:
    """The grade of that name ("ISO VG 46", "SAE 30", "SAE 10W-40", "SAE 80W-90"); TargetError if unknown.

    Sources: ISO 3448; SAE J300 (2015 table, the same grades in 2021); SAE J306 (February 2019).

    >>> grade("iso vg 46").limits[0].low
    41.4
    """
    text = " ".join(name.upper().split())
    iso = re.fullmatch(r"(?:ISO )?VG ?(\d+)", text)
    if iso and int(iso[1]) in ISO_VG:
        number = int(iso[1])
        full, middle = f"ISO VG {number}", ISO_VG[number]
        limit = Limit("kv40", round(0.9 * middle, 6), round(1.1 * middle, 6), source=f"grade {full}")
        return Grade(full, (limit,))
    sae = re.fullmatch(r"SAE ?(\d+W)?[- /]?(\d+)?", text)
    if sae and (sae[1] or sae[2]):
        found = _j300(sae[1] or "", sae[2] or "") or _j306(sae[1] or "", sae[2] or "")
        if found:
            return found
    raise TargetError(f"unknown grade {name.strip()[:40]!r}; known are ISO VG {', '.join(map(str, ISO_VG))}; "
                      f"SAE {', '.join([*_J300_WINTER, *_J300])} (engine) and SAE "
                      f"{', '.join([*_J306_WINTER, *_J306])} (gear), also as SAE 10W-40 or SAE 80W-90",
                      where="grade")


def _sae_name(winter: str, summer: str) -> str:
    return "SAE " + "-".join(part for part in (winter, summer) if part)


def _kv100(low: float, below: float | None, source: str) -> Limit:
    return Limit("kv100", low, None if below is None else round(below - EXCLUSIVE, 6), source=source)


def _j300(winter: str, summer: str) -> Grade | None:
    if (winter and winter not in _J300_WINTER) or (summer and summer not in _J300):
        return None
    full = _sae_name(winter, summer)
    source = f"grade {full}"
    limits: list[Limit] = []
    if_known: list[Limit] = []
    tests: list[str] = []
    if winter:
        ccs, ccs_at, mrv_at, least = _J300_WINTER[winter]
        limits.append(_kv100(least, None, source))
        if_known.append(Limit(f"ccs{ccs_at}", None, ccs, source=source))
        tests.append(f"pumping viscosity (MRV) at {mrv_at} °C at most 60000 mPa·s, no yield stress")
    if summer:
        low, below, hths = _J300[summer]
        limits.append(_kv100(low, below, source))
        hths = 3.5 if summer == "40" and winter in _LIGHT_WINTERS else hths
        tests.append(f"HTHS at 150 °C at least {hths:g} mPa·s")
    return Grade(full, tuple(limits), tuple(if_known), tuple(tests))


def _j306(winter: str, summer: str) -> Grade | None:
    if (winter and winter not in _J306_WINTER) or (summer and summer not in _J306):
        return None
    full = _sae_name(winter, summer)
    source = f"grade {full}"
    limits: list[Limit] = []
    tests: list[str] = []
    if winter:
        at, least = _J306_WINTER[winter]
        limits.append(_kv100(least, None, source))
        tests.append(f"low-temperature viscosity at {at} °C at most 150000 mPa·s")
    if summer:
        low, below = _J306[summer]
        limits.append(_kv100(low, below, source))
    tests.append("KV100 after shear within the grade")
    return Grade(full, tuple(limits), (), tuple(tests))


def iso_vg(kv40: float) -> int | None:
    """The number in the name of the ISO viscosity grade that holds this KV40 [mm²/s], or None between grades.

    >>> iso_vg(4.6), iso_vg(38.0)
    (5, None)
    """
    for number, middle in ISO_VG.items():
        if round(0.9 * middle, 6) <= kv40 <= round(1.1 * middle, 6):
            return number
    return None


def api_group(saturates: float | None, sulfur: float | None, vi: float | None) -> str | None:
    """API group of a mineral base stock from saturates [mass %], sulphur [mass %] and VI; None if unsettled.

    I: saturates < 90 or sulphur > 0.03, VI 80–<120; II: ≥ 90 and ≤ 0.03, VI 80–<120; III: same, VI ≥ 120.
    IV (PAO) and V (the rest) are told by what they are, not by these figures. Source: API 1509.
    """
    if vi is None or vi < 80.0:
        return None
    if (saturates is not None and saturates < 90.0) or (sulfur is not None and sulfur > 0.03):
        return "I" if vi < 120.0 else None
    if saturates is None or sulfur is None:
        return None
    return "II" if vi < 120.0 else "III"
