"""One description for every key of job.toml, every column of a table and every key of the record.

Reader, JSON Schema and docs/formats.md are all made from these rows, so they cannot disagree. The types are:

text, station, choice, flag, integer      what they say
number                                    a pure number
length, angle                             a value with the job's unit, or with its own unit in the cell
circle                                    an angle from zero to below a full circle
bearing                                   a quadrant bearing (N 45 30 15 E)
course                                    a quadrant bearing or an azimuth
zenith, elevation                         a zenith angle from 0 to half a circle; an elevation angle with its sign
lengths                                   a length, or a table of lengths by page
estimate                                  a pure number, or one with its standard deviation: "0.13 +- 0.05"
ratio, times                              a scale "1:500"; how many times larger, "x 2000"
sd                                        a standard deviation in the small unit of the column it belongs to
precision                                 an error model such as "1.5 mm + 2 ppm" or ["1.5 mm", "2 ppm"]
allowance                                 how large a misclosure may be, see adjust/allowances.py: "1:10000", or a list
rules                                     "NAME: CLASS" of a rule, or a list of such
temperature, pressure, humidity, ppm      degrees Celsius, hPa, per cent, parts per million, or with their own unit
wavelength                                a length, written with its unit: "658 nm"
air                                       a table of temperature, pressure, humidity or ppm
date, list                                TOML date, TOML list of text, of the choices where there are some
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Field:
    """One key or column: its name, type, meaning, and what may stand in it."""

    name: str
    type: str
    meaning: str
    required: bool = False
    default: Any = None
    choices: tuple[str, ...] = ()
    least: float | None = None
    """Smallest value allowed (in SI units)."""
    above: float | None = None
    """Value that must be exceeded (in SI units)."""
    dimension: str = ""
    """For ``precision``: length, angle or rise; for ``allowance``: length or angle."""
