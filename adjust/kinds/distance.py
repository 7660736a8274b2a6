"""Distance: D = sqrt(E^2 + N^2) on the plane or at ground level, S = sqrt(E^2 + N^2 + U^2) on the slope.

dD/dE = E/D, dD/dN = N/D; dS/dE = E/S, dS/dN = N/S, dS/dU = U/S. Which of them is meant is the block's surface.
"""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import ABOVE, AIR, OFFSET, REFLECTOR, Kind
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Distances (m, 1) of sights (m, 1, 4), metres, with partials (m, 1, 1, 4) and (m, 1)."""
    east, north = sights[:, 0, 0], sights[:, 0, 1]
    d = np.hypot(east, north)
    zero = np.zeros_like(d)
    return d[:, None], np.stack([east / d, north / d, zero, zero], axis=1)[:, None, None], np.zeros((len(d), 1))


def in_space(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Slope distances (m, 1) of sights (m, 1, 4), metres, with partials (m, 1, 1, 4) and (m, 1)."""
    d = sights[:, 0, :3]
    s = np.sqrt((d**2).sum(axis=1))
    by_sight = np.concatenate([d / s[:, None], np.zeros((len(s), 1))], axis=1)
    return s[:, None], by_sight[:, None, None], np.zeros((len(s), 1))


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
    in_space=in_space,
    columns=(
        Field("distance", "length", "distance as the `surface` of its [[book]] block says; none: on the plane itself",
              above=0.0),
        *ABOVE,
        *OFFSET,
        REFLECTOR,
        *AIR,
        Field("zenith_angle", "zenith", "on the slope: reduces the distance of its row to the horizontal and is not "
              "adjusted itself; all rows of a table have one, or none"),
    ),
    value=("distance",),
    instrument=Field("distance", "precision", "standard deviation of one distance", dimension="length"),
    meaning="distances, horizontal or on the slope",
)  # fmt: skip
