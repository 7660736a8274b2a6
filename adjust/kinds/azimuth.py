"""Azimuth of a line clockwise from north, less the turn t of its set where it has one: reading = azimuth - t.

Rows without a set are true to the frame's north. A row with role held is a basis bearing: a condition without error.
"""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import GroupUnknown, Kind, azimuth
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Azimuths (m, 1) of sights (m, 1, 4) and turns (m,), radians, with partials (m, 1, 1, 4) and (m, 1)."""
    a, by_sight = azimuth(sights[:, 0])
    return (a - group)[:, None], by_sight[:, None, None], -np.ones((len(a), 1))


KIND = Kind(
    name="azimuth",
    table="azimuths",
    order=40,
    dimension="angle",
    stations=("from", "to"),
    sights=((0, 1),),
    touches=("plane",),
    says="pointings",
    fixes=frozenset({"turn"}),
    geometry=geometry,
    columns=(
        Field("azimuth", "circle", "azimuth of the line, clockwise from north"),
        Field("bearing", "bearing", "the same as a quadrant bearing: N 45 30 15 E, due N"),
        Field("set", "text", "rows of one set share an unknown turn; blank: no turn"),
        Field(
            "role",
            "choice",
            "held: a basis bearing, kept without error",
            default="observed",
            choices=("observed", "held"),
        ),
    ),
    value=("azimuth", "bearing"),
    instrument=Field("azimuth", "precision", "standard deviation of one azimuth", dimension="angle"),
    group=GroupUnknown("turn", by=("set",), shared=True, optional="set"),
    wraps=True,
    meaning="azimuths or bearings; rows of one `set` share an unknown turn; role `held` for a basis bearing",
)
