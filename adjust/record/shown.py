"""How the record's metres and radians are shown in the job's own units: shared by tables, summary and drawing.

The rule of rounding is the trade's: two significant figures of a standard deviation decide the places of the figure
it belongs to, so that no place is printed that says nothing (2.3 mm: 104.2037 m; 12 mm: 104.204 m).
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from adjust.errors import one_line
from adjust.units import ANGLES, LENGTHS, SMALL_LENGTH, TURN, format_angle, format_bearing, small_angle_unit

Entry = Mapping[str, Any]
"""One object of the record, as read from or written to record.json."""

ANGLE_KINDS = frozenset({"direction", "angle", "azimuth", "zenith_angle"})
"""Kinds of observations in radians; all others are lengths."""

NUMBER_KINDS = frozenset({"refraction"})
"""Kinds whose readings are pure numbers."""

FIXED_PLACES = 4
"""Decimals of a coordinate without a standard deviation: 0.1 mm in metres, 0.03 mm in feet."""


def fixed(value: float, places: int) -> str:
    """The number with ``places`` decimals, never as minus zero."""
    text = f"{value:.{max(places, 0)}f}"
    return text.removeprefix("-") if not text.strip("-0.") else text


def places_for(sd: float | None, fallback: int = FIXED_PLACES) -> int:
    """Decimals that two significant figures of ``sd`` leave; ``fallback`` where there is none."""
    if sd is None or not sd > 0 or not math.isfinite(sd):
        return fallback
    leading = int(f"{sd:.1e}".split("e")[1])  # after rounding: 0.0996 has its first figure where 0.10 has it
    return min(max(1 - leading, 0), 8)


def two_figures(sd: float) -> str:
    """A standard deviation with two significant figures: 0.85, 2.3, 12, 130."""
    return fixed(sd, places_for(sd, 1))


_SEPARATED = re.compile(r"\s+")


def plain(name: object, most: int = 24) -> str:
    """A name or text safe to print: one line, no control or direction marks, at most ``most`` characters."""
    text = _SEPARATED.sub(" ", one_line("" if name is None else str(name)))
    return text if len(text) <= most else text[: most - 1] + "…"


def count(n: int, one: str, many: str = "") -> str:
    """A number with its noun: '1 reading', '3 readings'."""
    return f"{n} {one if n == 1 else many or one + 's'}"


@dataclass(frozen=True)
class Shown:
    """The job's units, as ``record["units"]`` says them."""

    length: str
    angle: str
    decimal: str
    north_first: bool
    quadrant: bool

    @classmethod
    def of(cls, record: Entry) -> Shown:
        """The units of a record."""
        units = record["units"]
        north_first = units["axis_order"].startswith("north")
        return cls(units["length"], units["angle"], units["decimal"], north_first, units["bearings"] == "quadrant")

    @property
    def axes(self) -> tuple[str, str]:
        """The plane's axes in printed order."""
        return ("north", "east") if self.north_first else ("east", "north")

    @property
    def small(self) -> str:
        """Unit of small lengths: mm, ft or us-ft."""
        return SMALL_LENGTH[self.length][0]

    @property
    def small_angle(self) -> str:
        """Unit of small angles: sec or mgon."""
        return small_angle_unit(self.angle)

    @property
    def small_length_places(self) -> int:
        """Decimals of a small length in a table: 0.01 mm or 0.00001 ft."""
        return 2 if self.small == "mm" else 5

    def mark(self, number: str) -> str:
        """The text of a number with the job's decimal mark."""
        return number.replace(".", self.decimal)

    def in_length(self, metres: float) -> float:
        """Metres to the job's unit of length."""
        return metres / LENGTHS[self.length]

    def in_small(self, metres: float) -> float:
        """Metres to mm, or to the job's feet."""
        return metres * SMALL_LENGTH[self.length][1]

    def in_small_angle(self, radians: float) -> float:
        """Radians to seconds, or to milligon where the job's angles are gon."""
        return radians / ANGLES[self.small_angle]

    def coordinate(self, metres: float, sd: float | None) -> str:
        """A coordinate in the job's unit with the places its standard deviation (metres) allows, four at the most."""
        places = min(4, places_for(None if sd is None else self.in_length(sd)))
        return self.mark(fixed(self.in_length(metres), places))

    def small_sd(self, metres: float | None) -> str:
        """A standard deviation in mm or feet with two significant figures; '' for none."""
        return "" if metres is None else self.mark(two_figures(self.in_small(metres)))

    def circle(self, radians: float, places: int = 1) -> str:
        """An angle of the circle in [0, full circle) in the job's notation."""
        text = format_angle(radians % TURN, self.angle, places)
        again = format_angle(TURN, self.angle, places)
        return self.mark(format_angle(0.0, self.angle, places) if text == again else text)

    def bearing(self, radians: float, places: int = 1) -> str:
        """A direction of a line as the job prints it: azimuth or quadrant bearing."""
        if self.quadrant:
            return self.mark(format_bearing(radians % TURN, self.angle, places))
        return self.circle(radians, places)

    def rough_bearing(self, radians: float) -> str:
        """A direction to the nearest degree (gon, 10 mil), for the long axis of an ellipse."""
        unit = self.angle if self.angle in ("gon", "mil") else "deg"
        step = 10 if unit == "mil" else 1
        whole = round(radians / ANGLES[unit] / step) * step
        half = round(TURN / 2 / ANGLES[unit])
        whole %= half
        if not self.quadrant:
            return f"{whole} {unit}"
        return f"N {whole} E ({unit})" if whole <= half // 2 else f"N {half - whole} W ({unit})"

    def amount(self, value: float, sd: float | None, kind: str) -> str:
        """A signed amount of a reading (a blunder, a misfit) with its unit, rounded by its standard deviation.

        ``value`` and ``sd`` are metres or radians as the kind says; large amounts are shown in the job's main unit.
        """
        if kind in ANGLE_KINDS:
            return self._angle_amount(value, sd)
        if kind in NUMBER_KINDS:
            return self._signed(value, sd, 3)
        if self.small == "mm" and abs(value) < 1.0:
            return self._signed(self.in_small(value), None if sd is None else self.in_small(sd), 1) + " mm"
        return self._signed(self.in_length(value), None if sd is None else self.in_length(sd), 4) + f" {self.length}"

    def too_much(self, value: float | None, sd: float | None, kind: str) -> str:
        """'reads 180 mm too much': an estimated blunder is the reading minus its estimate from all others."""
        if value is None:
            return "amount not known"
        size = self.amount(abs(value), sd, kind).removeprefix("+")
        return f"reads {size} too {'much' if value > 0 else 'little'}"

    def uncertainty(self, sd: float, kind: str) -> str:
        """'standard deviation 2.4 mm': of a blunder, metres or radians as the kind says."""
        if kind in ANGLE_KINDS:
            return f"standard deviation {self.mark(two_figures(self.in_small_angle(sd)))} {self.small_angle}"
        if kind in NUMBER_KINDS:
            return f"standard deviation {self.mark(two_figures(sd))}"
        return f"standard deviation {self.small_sd(sd)} {self.small}"

    def _angle_amount(self, value: float, sd: float | None) -> str:
        small = self.in_small_angle(value)
        if abs(small) < 1000:
            return f"{self._signed(small, None if sd is None else self.in_small_angle(sd), 1)} {self.small_angle}"
        unit = "" if self.angle in ("dms", "packed") else f" {self.angle}"
        return self.mark(("+" if value > 0 else "") + format_angle(value, self.angle, 0)) + unit

    def _signed(self, value: float, sd: float | None, fallback: int) -> str:
        text = self.mark(fixed(value, places_for(sd, fallback)))
        return "+" + text if value > 0 else text


_BETWEEN = {"angle": "angle at {at} from {first} to {second}", "direction": "direction at {at} to {to}"}


def reading_in_words(observation: Entry, most: int = 16) -> str:
    """The reading by kind and stations, as in 'distance P1 to P2'; ``most`` characters a name."""
    kind = str(observation["kind"])
    names = {key: plain(observation[key], most) for key in ("at", "from", "to", "first", "second")}
    words = kind.replace("_", " ")
    if kind in _BETWEEN:
        text = _BETWEEN[kind].format(**names)
    elif kind in ("control", "position"):
        text = f"{words} {names['at'] or names['to'] or names['from']}"
    elif kind in NUMBER_KINDS:
        text = words
    elif kind == "levelled":
        text = f"levelled rise {names['from']} to {names['to']}"
    else:
        text = f"{words} {names['from'] or names['at']} to {names['to']}"
    part = observation["part"]
    return f"{text} ({part})" if part else text
