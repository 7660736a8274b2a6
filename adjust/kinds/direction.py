"""Circle reading of a set with one unknown orientation o: reading = azimuth - o (modulo a full circle)."""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import OFFSET, GroupUnknown, Kind, azimuth
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Readings (m, 1) of sights (m, 1, 4) and orientations (m,), radians, with partials (m, 1, 1, 4) and (m, 1)."""
    a, by_sight = azimuth(sights[:, 0])
    return (a - group)[:, None], by_sight[:, None, None], -np.ones((len(a), 1))


KIND = Kind(
    name="direction",
    table="directions",
    order=30,
    dimension="angle",
    stations=("at", "to"),
    sights=((0, 1),),
    touches=("plane",),
    says="pointings",
    fixes=frozenset(),
    geometry=geometry,
    columns=(
        Field("direction", "circle", "circle reading to the target"),
        Field("set", "text", "name of the set; each file, station and set has one unknown orientation"),
        *OFFSET,
    ),
    value=("direction",),
    instrument=Field(
        "direction", "precision", "standard deviation of one pointing, both faces meaned", dimension="angle"
    ),
    group=GroupUnknown("orientation", by=("at", "set"), shared=False),
    wraps=True,
    meaning="circle readings; each (file, at, set) has one unknown orientation",
)
