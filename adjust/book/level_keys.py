"""What a [[book]] block says of a level book: collimation, curvature, limits, and the page sums as booked.

The collimation c is the angle by which the line of sight points above level: a reading at the distance L is too high by
c L. It is declared, never guessed: from the two-peg test of the job, none, or a stated figure.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from adjust.units import ANGLES, BadValue, parse_angle, parse_length, parse_number, tidy

LEVEL_KINDS = ("staff", "peg_test")
SUMS = ("sum_back", "sum_intermediate", "sum_fore", "sum_rise", "sum_fall")
NONE, PEG_TEST = "none", "peg_test"
_STAFF_ONLY = ("collimation", "wire_limit", *SUMS)
LARGEST = 0.01
"""Radians, one metre in a hundred: no level that is in use points so far off."""


@dataclass(frozen=True)
class LevelBook:
    """Keys of one level book; lengths in metres."""

    collimation: str = ""
    """none, peg_test, the figure as written, or '' (nothing declared)."""
    tilt: float | None = None
    """The stated figure in radians; None where there is none."""
    curvature: bool = False
    """Whether sights are corrected for curvature and refraction."""
    wire_limit: float = 0.003
    staff_length: float = 5.0
    sums: dict[str, dict[str, float]] = field(default_factory=dict)
    """Booked sums in metres by key and page; the page '' is the whole table."""


Fault = Callable[[str, object, str], None]


def level_book(
    fault: Fault, path: str, given: dict[str, Any], values: dict[str, Any], kind: str, unit: str
) -> LevelBook:
    """The keys of the block ``given`` at ``path``, whose ``values`` have their defaults; faults go to ``fault``."""
    for key in (*_STAFF_ONLY, "curvature", "staff_length"):
        fitting = ("staff",) if key in _STAFF_ONLY else LEVEL_KINDS
        if key in given and kind not in fitting:
            fault(f"{path}.{key}", given[key], f"belongs to level books only ({', '.join(fitting)}); remove the key")
    if kind not in LEVEL_KINDS:
        return LevelBook()
    sums = {key: _sums(fault, f"{path}.{key}", given[key], unit) for key in SUMS if key in given}
    collimation = values["collimation"] or ""
    return LevelBook(
        collimation=collimation,
        tilt=_tilt(fault, f"{path}.collimation", collimation),
        curvature=values["curvature"] == "with-refraction",
        wire_limit=_length(fault, f"{path}.wire_limit", values["wire_limit"], unit, LevelBook.wire_limit),
        staff_length=_length(fault, f"{path}.staff_length", values["staff_length"], unit, LevelBook.staff_length),
        sums={key: pages for key, pages in sums.items() if pages},
    )


def _length(fault: Fault, path: str, text: str, unit: str, default: float) -> float:
    try:
        value = parse_length(text, unit)
        if value > 0:
            return value
        fault(path, text, "must be above 0")
    except BadValue as bad:
        fault(path, text, str(bad))
    return default


def _tilt(fault: Fault, path: str, text: str) -> float | None:
    if text in ("", NONE, PEG_TEST):
        return None
    try:
        return parse_tilt(text)
    except BadValue as bad:
        fault(path, text, str(bad))
        return 0.0


def parse_tilt(text: str) -> float:
    """A collimation in radians: "-8 sec", "2.5 mgon", "0.05 mm/m"; its unit must be written.

    Raises BadValue.
    """
    slope = re.fullmatch(r"(.*\d\.?)\s*mm/m", tidy(text))
    if slope:
        value = parse_number(slope[1]) / 1000.0
    elif re.search(r"[\d.]\s*[A-Za-z]+$", tidy(text)):
        value = parse_angle(text, "deg")
    else:
        units = ", ".join(ANGLES)
        raise BadValue(f'say "{PEG_TEST}", "{NONE}", or a figure with its unit ({units}, mm/m), as in "-8 sec"')
    if not abs(value) < LARGEST:
        raise BadValue("no level in use points so far off; upwards is positive, 10 sec are 0.05 mm/m")
    return value


def _sums(fault: Fault, path: str, given: object, unit: str) -> dict[str, float]:
    """Booked sums by page; one sum alone belongs to the whole table."""
    pages = given if isinstance(given, dict) else {"": given}
    out = {}
    for page, value in pages.items():
        where = f"{path}.{page}" if page else path
        text = repr(value) if isinstance(value, int | float) and not isinstance(value, bool) else value
        if not isinstance(text, str):
            fault(where, value, 'must be a length, or one a page: { "1" = 12.345 }')
            continue
        try:
            out[page] = parse_length(text, unit)
        except BadValue as bad:
            fault(where, text, str(bad))
    return out
