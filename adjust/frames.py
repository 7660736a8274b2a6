"""Frames turn positions into sights and carry partial derivatives back to both ends.

A *sight* is what a kind of observation sees: (m, 4) east, north, up and height difference from the standing station
to the target, in the frame of the standing station. A start of -1 is the frame's origin (absolute kinds: control,
positions). Which of its surfaces a sight belongs to is the block's:

    ''           the plane itself: plain coordinate differences, heights do not count
    slope        in space, from instrument to target, in the horizon of the instrument
    ground       horizontal at the mean height of both ends
    ground-from  horizontal at the height of the instrument

**The local plane with heights.** Verticals meet in the centre of a sphere of radius R whose surface lies at the
plane's height; h1 and h2 are heights above that, of instrument and target (each mark's height and what stands above
it along its own vertical), r1 = R + h1, r2 = R + h2, and D the distance on the plane. With theta the angle between the
two verticals, D = 2 R sin(theta/2), so D is the chord at the height of the plane. With E, N the coordinate differences
and c = cos(theta/2) = sqrt(1 - D^2/4R^2), target minus instrument is in the horizon of the instrument

    horizontal  r2 sin(theta)      = (r2/R) c D              e = E (r2/R) c,  n = N (r2/R) c
    up          r2 cos(theta) - r1 = h2 - h1 - r2 D^2/2R^2

and by the cosine rule in the triangle of both points and the centre

    e^2 + n^2 + u^2 = r1^2 + r2^2 - 2 r1 r2 cos(theta) = (h2 - h1)^2 + (1 + h1/R)(1 + h2/R) D^2        exactly.

The fourth component is h2 - h1, so that what it exceeds "up" by is the curvature, and since
(h2 - h1 - u) / horizontal = tan(theta/2), a kind can find theta without knowing the frame.

On the plane itself the partials at the two ends are exact negatives; in space they are not, which is why kinds never
carry them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.network import Array, Ints, Stations

RADIUS_M = 6371008.8
"""Mean radius (2a + b)/3 of the GRS 80 ellipsoid (Moritz 2000, Geodetic Reference System 1980; quoted from memory, to
the decimetre). The radius of curvature of the true figure differs from it by up to 0.6 per cent, which is 0.4 mm of
the 68 mm of curvature and refraction at 1 km."""


@dataclass(frozen=True)
class LocalPlane:
    """A plane with north up at ``plane_height`` (m), on a sphere of ``radius`` (m) where heights count."""

    name: str = "local plane"
    plane_height: float = 0.0
    radius: float = RADIUS_M

    @classmethod
    def of(cls, stations: Stations, plane_height: float | None) -> LocalPlane:
        """The plane at the stated height, else at the mean of the known heights, else of the starting ones, else 0."""
        for heights in (stations.known[:, 2], stations.start[:, 2]):
            given = heights[~np.isnan(heights)]
            if plane_height is None and len(given):
                plane_height = float(np.mean(given))
        return cls(plane_height=plane_height or 0.0)

    def sights(self, positions: Array, start: Ints, end: Ints, surface: str = "", above: Array | None = None) -> Array:
        """(m, 4) sights from ``start`` (m,) to ``end`` (m,) at ``positions`` (n, 3), metres.

        ``above`` (m, 2) are the heights of instrument and target above their marks; the plane itself has none.
        """
        if not surface:
            origin = np.where((start < 0)[:, None], 0.0, positions[start])
            d = positions[end] - origin
            return np.concatenate([d, d[:, 2:]], axis=1)
        line = _Line.of(self, positions, start, end, above)
        q, up = _FACTORS[surface](line)[:2]
        return np.stack([line.east * q, line.north * q, up, line.rise], axis=1)

    def jacobian(
        self, positions: Array, start: Ints, end: Ints, surface: str = "", above: Array | None = None
    ) -> Array | None:
        """Partials (m, 2, 4, 3) of the sights by the coordinates of start and end; None on the plane itself."""
        if not surface:
            return None
        line = _Line.of(self, positions, start, end, above)
        q, _, q_by_d2, q_by_h, up_by_d2, up_by_h = _FACTORS[surface](line)
        out = np.zeros((len(start), 2, 4, 3))
        xy = np.stack([line.east, line.north], axis=1)
        for end_of, sign in ((0, -1.0), (1, 1.0)):
            # d(D^2) = 2 E dE + 2 N dN
            out[:, end_of, :2, :2] = sign * (q[:, None, None] * np.eye(2) + 2 * _outer(xy, xy) * q_by_d2[:, None, None])
            out[:, end_of, 2, :2] = sign * 2 * xy * up_by_d2[:, None]
            out[:, end_of, :2, 2] = xy * q_by_h[:, end_of, None]
            out[:, end_of, 2, 2] = up_by_h[:, end_of]
            out[:, end_of, 3, 2] = sign
        return out

    def carry(self, partials: Array, jacobian: Array | None = None) -> Array:
        """Partials by the sight (m, p, 4) to partials by start and end coordinates (m, p, 2, 3).

        ``jacobian`` is that of the sights; None is the plane itself, where the ends are exact negatives.
        """
        if jacobian is not None:
            return np.asarray(np.einsum("mps,mesc->mpec", partials, jacobian))
        by_end = partials[..., :3].copy()
        by_end[..., 2] += partials[..., 3]
        return np.stack([-by_end, by_end], axis=2)


@dataclass(frozen=True)
class _Line:
    """Lines (m,) between heights h1 and h2 above the plane: differences and squares that all surfaces need."""

    east: Array
    north: Array
    h1: Array
    h2: Array
    radius: float

    @classmethod
    def of(cls, frame: LocalPlane, positions: Array, start: Ints, end: Ints, above: Array | None) -> _Line:
        d = positions[end] - positions[start]
        i, t = (0.0, 0.0) if above is None else above.T
        return cls(d[:, 0], d[:, 1], positions[start, 2] + i - frame.plane_height,
                   positions[end, 2] + t - frame.plane_height, frame.radius)  # fmt: skip

    @property
    def d2(self) -> Array:
        return self.east**2 + self.north**2

    @property
    def rise(self) -> Array:
        return self.h2 - self.h1


_Factors = tuple[Array, Array, Array, Array, Array, Array]
"""q (m,) by which E and N are multiplied, up (m,), q by D^2 (m,), q by h1 and h2 (m, 2), up by D^2, up by h1 and h2."""


def _slope(line: _Line) -> _Factors:
    """In the horizon of the instrument: q = (r2/R) c, up = h2 - h1 - r2 D^2/2R^2."""
    r, r2 = line.radius, line.radius + line.h2
    c = np.sqrt(1 - line.d2 / (4 * r * r))
    zero = np.zeros_like(c)
    up_by_h = np.stack([zero - 1.0, 1 - line.d2 / (2 * r * r)], axis=1)
    return (r2 / r * c, line.rise - r2 * line.d2 / (2 * r * r), -r2 / (8 * r**3 * c), np.stack([zero, c / r], axis=1),
            -r2 / (2 * r * r), up_by_h)  # fmt: skip


def _ground(line: _Line) -> _Factors:
    """Horizontal at the mean height of both ends: q = 1 + (h1 + h2)/2R."""
    return _level(line, 0.5, 0.5)


def _ground_from(line: _Line) -> _Factors:
    """Horizontal at the height of the instrument: q = 1 + h1/R."""
    return _level(line, 1.0, 0.0)


def _level(line: _Line, share1: float, share2: float) -> _Factors:
    zero, one = np.zeros_like(line.h1), np.ones_like(line.h1)
    q = 1 + (share1 * line.h1 + share2 * line.h2) / line.radius
    q_by_h = np.stack([share1 / line.radius * one, share2 / line.radius * one], axis=1)
    return q, line.rise, zero, q_by_h, zero, np.stack([-one, one], axis=1)


_FACTORS = {"slope": _slope, "ground": _ground, "ground-from": _ground_from}
SURFACES = tuple(_FACTORS)
"""Surfaces beside the plane itself."""


def _outer(a: Array, b: Array) -> Array:
    return np.asarray(a[:, :, None] * b[:, None, :])
