"""Weighted control: the coordinates of a mark themselves, observed with their standard deviations.

An absolute kind: its sight runs from the frame's origin to the mark.
"""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import Kind
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """East, north, height (m, 3) of sights (m, 1, 4), metres, with partials (m, 3, 1, 4) and (m, 3)."""
    m = len(sights)
    by_sight = np.zeros((m, 3, 1, 4))
    by_sight[:, 0, 0, 0] = by_sight[:, 1, 0, 1] = by_sight[:, 2, 0, 3] = 1.0
    return sights[:, 0, [0, 1, 3]], by_sight, np.zeros((m, 3))


KIND = Kind(
    name="control",
    table="",
    order=90,
    dimension="length",
    stations=("station",),
    sights=((-1, 0),),
    touches=("plane", "plane", "height"),
    says="position",
    fixes=frozenset({"turn", "scale"}),
    geometry=geometry,
    columns=(Field("east", "length", "east"), Field("north", "length", "north"), Field("height", "length", "height")),
    value=("east", "north", "height"),
    parts=("east", "north", "height"),
    from_control=True,
    occupies=False,
    meaning="weighted control coordinates",
)
