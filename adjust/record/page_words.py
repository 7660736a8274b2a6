"""How the record's figures are written on the page: rounded by their own uncertainty, in the job's units."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from typing import Any

from adjust.record.page_blocks import NAME_MOST, Cell, Texts, number_cell
from adjust.record.shown import ANGLE_KINDS, NUMBER_KINDS, Entry, Shown, fixed, places_for, plain, two_figures
from adjust.units import ANGLES, format_angle

VERDICT_MARKS = {
    "met": "good", "agrees": "good", "as stated": "good", "none seen": "good", "better than stated": "open",
    "not met": "bad", "disagrees": "bad", "worse than stated": "bad", "significant": "bad",
}  # fmt: skip
"""Class of a verdict; any other is open."""


def verdict_cell(texts: Texts, verdict: object) -> Cell:
    """A verdict with its sign."""
    return Cell(texts.word("verdict", verdict), mark=VERDICT_MARKS.get(str(verdict), "open") if verdict else "")


def pure(shown: Shown, value: float | None, places: int = 2) -> Cell:
    """A pure number with fixed places."""
    return number_cell("" if value is None else shown.mark(fixed(value, places)), value)


def small(shown: Shown, metres: float | None) -> Cell:
    """A small length with two significant figures."""
    return number_cell(shown.small_sd(metres), metres)


def coordinate(shown: Shown, metres: float | None, sd: float | None) -> Cell:
    """A coordinate with the places that its standard deviation allows."""
    return number_cell("" if metres is None else shown.coordinate(metres, sd), metres)


def _angle_places(shown: Shown, sd: float | None) -> int:
    """Decimals of the last unit of an angle's notation: of a second, of 0.1 mgon, of 0.001 mil, of 0.0001 degrees."""
    last = {"gon": ANGLES["gon"] / 1e4, "mil": ANGLES["mil"] / 1e3, "deg": ANGLES["deg"] / 1e4}
    step = last.get(shown.angle, ANGLES["deg"] / 3600)
    return min(3, places_for(None if sd is None else sd / step, 1))


def reading_cell(shown: Shown, kind: str, value: float | None, sd: float | None) -> Cell:
    """A reading in the job's main unit, rounded by its standard deviation."""
    if value is None:
        return number_cell("")
    if kind in NUMBER_KINDS:
        return number_cell(shown.mark(fixed(value, places_for(sd, 3))), value)
    if kind not in ANGLE_KINDS:
        return coordinate(shown, value, sd)
    places = _angle_places(shown, sd)
    if kind == "zenith_angle":
        return number_cell(shown.mark(format_angle(value, shown.angle, places)), value)
    if kind == "azimuth":
        return number_cell(shown.bearing(value, places), value)
    return number_cell(shown.circle(value, places), value)


def amount_cell(shown: Shown, kind: str, value: float | None, sd: float | None) -> Cell:
    """A signed amount of a reading with its unit, rounded by its standard deviation."""
    return number_cell("" if value is None else shown.amount(value, sd, kind), value)


def sd_cell(shown: Shown, kind: str, sd: float | None) -> Cell:
    """A standard deviation of a reading with its unit."""
    if sd is None:
        return number_cell("")
    if kind in NUMBER_KINDS:
        return number_cell(shown.mark(two_figures(sd)), sd)
    if kind in ANGLE_KINDS:
        return number_cell(f"{shown.mark(two_figures(shown.in_small_angle(sd)))} {shown.small_angle}", sd)
    return number_cell(f"{shown.small_sd(sd)} {shown.small}", sd)


_ANGULAR = ("angle", "direction")


def closure_sizes(texts: Texts, shown: Shown, sizes: Mapping[str, float | None], sds: Mapping[str, Any]) -> str:
    """'height -0.3 mm; angle +4.3 sec' from the parts of a misclosure or of what is allowed."""
    out = []
    for key, value in sizes.items():
        if value is None:
            continue
        if key == "direction":
            size = shown.rough_bearing(value)
        else:
            size = shown.amount(value, sds.get(key), "angle" if key in _ANGULAR else "distance")
        out.append(f"{texts.word('misclosure', key)} {size}")
    return "; ".join(out)


def way(names: Iterable[str], most: int = 9) -> str:
    """Stations walked, the middle of a long way counted."""
    names = [plain(name, NAME_MOST // 2) for name in names]
    if len(names) <= most:
        return " – ".join(names)
    return " – ".join([*names[: most - 2], f"(+{len(names) - most + 1})", names[-1]])


def some(names: Iterable[object], most: int = 8) -> str:
    """A list of names that stays short."""
    listed = [plain(name, NAME_MOST // 2) for name in names]
    rest = len(listed) - most
    return ", ".join(listed[:most]) + (f" (+{rest})" if rest > 0 else "")


def place_of(observation: Entry) -> str:
    """File and line of a reading."""
    return f"{plain(observation['file'], NAME_MOST)}:{observation['line']}"


def glossary(texts: Texts, body: str) -> list[tuple[str, str]]:
    """The terms that the page uses, with their meanings, by the alphabet."""
    lowered = re.sub(
        r"<tbody>.*?</tbody>", "", body, flags=re.S
    ).lower()  # heads and captions say what a table is about
    terms = sorted(texts.branch("glossary").items())
    return [(term, meaning) for term, meaning in terms if re.search(rf"\b{re.escape(term)}", lowered)]
