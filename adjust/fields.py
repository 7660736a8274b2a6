"""One description for every key of job.toml, every column of a table and every key of the record.

Reader, JSON Schema and docs/formats.md are all made from these rows, so they cannot disagree. The types are:

text, station, choice, flag, integer      what they say
number                                    a pure number
length, angle                             a value with the job's unit, or with its own unit in the cell
circle                                    an angle from zero to below a full circle
bearing                                   a quadrant bearing (N 45 30 15 E)
course                                    a quadrant bearing or an azimuth
zenith, elevation                         a zenith angle from 0 to half a circle; an elevation angle with its sign
estimate                                  a pure number, or one with its standard deviation: "0.13 +- 0.05"
ratio, times                              a scale "1:500"; how many times larger, "x 2000"
sd                                        a standard deviation in the small unit of the column it belongs to
precision                                 an error model such as "1.5 mm + 2 ppm" or ["1.5 mm", "2 ppm"]
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
    """For ``precision``: length, angle or rise."""
