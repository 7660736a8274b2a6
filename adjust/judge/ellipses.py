"""Ellipses from 2 x 2 covariance blocks.

With the variances s_ee, s_nn and covariance s_en, d = sqrt(((s_nn - s_ee) / 2)^2 + s_en^2):

    semi-axes^2 = (s_ee + s_nn) / 2 +- d,     azimuth of the major axis = atan2(2 s_en, s_nn - s_ee) / 2

clockwise from north in [0, pi). Where the smaller value is rounding of a zero it is zero.
"""

from __future__ import annotations

import numpy as np

from adjust.network import Array


def ellipses(cov: Array) -> tuple[Array, Array, Array]:
    """Semi-major, semi-minor (n,) and azimuth (n,) in [0, pi) of covariances (n, 2, 2) over east, north."""
    ee, nn, en = cov[:, 0, 0], cov[:, 1, 1], cov[:, 0, 1]
    mean, d = (ee + nn) / 2, np.hypot((nn - ee) / 2, en)
    azimuth = np.arctan2(2 * en, nn - ee) / 2 % np.pi
    # a circle has no azimuth; rounding must not invent one
    azimuth = np.where((d <= 1e-12 * mean) | (azimuth >= np.pi), 0.0, azimuth)
    small = mean - d
    return np.sqrt(mean + d), np.sqrt(np.where(small <= 1e-14 * mean, 0.0, small)), azimuth
