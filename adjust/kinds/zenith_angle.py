"""Zenith angle in space, bent by refraction: z = atan2(H, u) - k theta/2, H = sqrt(e^2 + n^2), up is 0.

The ray is an arc that leaves the chord by half its own turning k theta, theta being the angle between the verticals of
both ends and k the coefficient of refraction (radius of the Earth over that of the ray), so the target seems higher.
Curvature is in the sight itself: its fourth component w = h2 - h1 exceeds up by it, and theta/2 = atan2(w - u, H) (see
adjust.frames). Together they are the usual (1 - k) D/2R on a zenith angle.

    dz/dH = u/S^2 + k b/(H^2 + b^2)      dz/du = -H/S^2 + k H/(H^2 + b^2)      dz/dw = -k H/(H^2 + b^2)
    dz/dk = -theta/2                     S^2 = H^2 + u^2,  b = w - u
"""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import ABOVE, GroupUnknown, Kind
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Zenith angles (m, 1) of sights (m, 1, 4) and coefficients k (m,), radians; partials (m, 1, 1, 4) and (m, 1)."""
    east, north, up, rise = sights[:, 0].T
    h, b = np.hypot(east, north), rise - up
    s2, chord2 = h**2 + up**2, h**2 + b**2
    half = np.arctan2(b, h)
    by_h = up / s2 + group * b / chord2
    by_rise = -group * h / chord2
    by_sight = np.stack([by_h * east / h, by_h * north / h, -h / s2 - by_rise, by_rise], axis=1)
    return (np.arctan2(h, up) - group * half)[:, None], by_sight[:, None, None], -half[:, None]


KIND = Kind(
    name="zenith_angle",
    table="zenith_angles",
    order=45,
    dimension="angle",
    stations=("from", "to"),
    sights=((0, 1),),
    touches=("both",),
    says="zenith",
    fixes=frozenset(),
    geometry=geometry,
    columns=(
        Field("zenith_angle", "zenith", "zenith angle of the sight, both faces meaned: 0 is up, a quarter turn level"),
        Field("elevation", "elevation", "the same as an elevation angle: 0 is level, up is positive"),
        *ABOVE,
    ),
    value=("zenith_angle", "elevation"),
    surface="slope",
    instrument=Field("zenith", "precision", "standard deviation of one zenith angle, both faces meaned",
                     dimension="angle"),
    group=GroupUnknown("refraction", by=(), shared=True, absorbs=frozenset(), setting="refraction"),
    wraps=True,
    meaning="zenith or elevation angles from instrument to target",
)  # fmt: skip
