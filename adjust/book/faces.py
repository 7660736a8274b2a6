"""Both faces of a pointing: means on the circle, collimation and index.

With the circle readings H1, H2 and zenith circle readings V1, V2 of the two faces (V counted from the zenith on through
a full circle, so that V1 + V2 is a full circle for an instrument without index error):

    two_c = H1 - (H2 - 180)        direction = H1 - two_c/2            two_c = 2 c/sin z + 2 i cot z
    2 index = V1 + V2 - 360        zenith    = V1 - index = (V1 - V2 + 360)/2

with the collimation c and the tilt i of the horizontal axis (any textbook of surveying: common practice). Differences
are taken on the circle, so that 359 59 and 0 01 mean 0 00.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from adjust.units import TURN, wrap

HALF = TURN / 2


def circle_mean(readings: Sequence[float]) -> float:
    """Mean (radians, 0 to a full circle) of readings that lie near one another on the circle."""
    first = readings[0]
    return (first + math.fsum(wrap(r - first) for r in readings) / len(readings)) % TURN


def two_c(face_1: float, face_2: float) -> float:
    """Twice the collimation as seen on the horizontal circle, radians."""
    return wrap(face_1 - face_2 + HALF)


def direction(face_1: float, face_2: float) -> float:
    """Direction free of collimation, radians."""
    return (face_1 - two_c(face_1, face_2) / 2) % TURN


def index(face_1: float, face_2: float) -> float:
    """Index error of the vertical circle, radians."""
    return wrap(face_1 + face_2) / 2


def zenith(face_1: float, face_2: float) -> float:
    """Zenith angle free of index error, radians."""
    return face_1 - index(face_1, face_2)


def trend(values: Sequence[float]) -> tuple[float, float]:
    """Change per pointing of values in the order of the book, and its standard deviation (least squares line).

    Fewer than three values have none: (0, inf).
    """
    n = len(values)
    if n < 3:
        return 0.0, math.inf
    middle, mean = (n - 1) / 2, math.fsum(values) / n
    square = math.fsum((k - middle) ** 2 for k in range(n))
    slope = math.fsum((k - middle) * (v - mean) for k, v in enumerate(values)) / square
    rest = math.fsum((v - mean - slope * (k - middle)) ** 2 for k, v in enumerate(values))
    return slope, math.sqrt(rest / (n - 2) / square)


def spread(values: Sequence[float]) -> float | None:
    """Standard deviation of one of ``values``; None below two."""
    n = len(values)
    if n < 2:
        return None
    mean = math.fsum(values) / n
    return math.sqrt(math.fsum((v - mean) ** 2 for v in values) / (n - 1))
