"""Horizontal angle clockwise from the first target to the second: azimuth(second) - azimuth(first)."""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import Kind, azimuth
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Angles (m, 1) of sights (m, 2, 4) to first and second, radians, with partials (m, 1, 2, 4) and (m, 1)."""
    a1, by1 = azimuth(sights[:, 0])
    a2, by2 = azimuth(sights[:, 1])
    return (a2 - a1)[:, None], np.stack([-by1, by2], axis=1)[:, None], np.zeros((len(a1), 1))


KIND = Kind(
    name="angle",
    table="angles",
    order=20,
    dimension="angle",
    stations=("at", "first", "second"),
    sights=((0, 1), (0, 2)),
    touches=("plane",),
    says="pointings",
    fixes=frozenset(),
    geometry=geometry,
    columns=(Field("angle", "circle", "angle turned clockwise from first to second"),),
    value=("angle",),
    instrument=Field(
        "direction", "precision", "standard deviation of one pointing, both faces meaned", dimension="angle"
    ),
    pointings=2.0,
    wraps=True,
    meaning="angles clockwise from `first` to `second`",
)
