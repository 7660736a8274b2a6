"""Horizontal distance: D = sqrt(E^2 + N^2), dD/dE = E/D, dD/dN = N/D."""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import Kind
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Distances (m, 1) of sights (m, 1, 4), metres, with partials (m, 1, 1, 4) and (m, 1)."""
    east, north = sights[:, 0, 0], sights[:, 0, 1]
    d = np.hypot(east, north)
    zero = np.zeros_like(d)
    return d[:, None], np.stack([east / d, north / d, zero, zero], axis=1)[:, None, None], np.zeros((len(d), 1))


KIND = Kind(
    name="distance",
    table="distances",
    order=10,
    dimension="length",
    stations=("from", "to"),
    sights=((0, 1),),
    touches=("plane",),
    says="length",
    fixes=frozenset({"scale"}),
    geometry=geometry,
    columns=(Field("distance", "length", "horizontal distance between the marks", above=0.0),),
    value=("distance",),
    instrument=Field("distance", "precision", "standard deviation of one distance", dimension="length"),
    meaning="horizontal distances",
)
