"""The coefficient of refraction of [frame] as an observation of its own: reading = k, with its standard deviation.

It has no stations and no table. It exists only where job.toml gives refraction with a standard deviation; then k is
one unknown of the whole job, shared by all zenith angles.
"""

from __future__ import annotations

import numpy as np

from adjust.kinds.base import GroupUnknown, Kind
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Coefficients (m, 1) of sights (m, 0, 4) and coefficients (m,); partials (m, 1, 0, 4) and (m, 1)."""
    return group[:, None], np.zeros((len(group), 1, 0, 4)), np.ones((len(group), 1))


KIND = Kind(
    name="refraction",
    table="",
    order=95,
    dimension="number",
    stations=(),
    sights=(),
    touches=("",),
    says="setting",
    fixes=frozenset(),
    geometry=geometry,
    columns=(),
    value=(),
    group=GroupUnknown("refraction", by=(), shared=True, absorbs=frozenset(), setting="refraction"),
    occupies=False,
    meaning="the coefficient of refraction as given in job.toml",
)
