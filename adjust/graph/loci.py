"""Closed forms in the plane: where a station can be, and where two such lines meet.

Positions are complex numbers east + i north. The unit vector of azimuth a (clockwise from north) is
u(a) = sin a + i cos a = i exp(-i a). A station is sought on

    a ray       through P along u: an oriented pointing between P and the station
    a circle    about P: a length; or through P, Q: the angle c turned at the station from P to Q

For the latter X sees P at azimuth a and Q at a + c; the inscribed angle theorem gives a circle through P and Q with
centre M = (P + Q)/2 - i (Q - P)/2 cot c (derivation below at `seen_under`). Resection is two such circles with a
common station P: their second intersection. Every combination is thus the meeting of lines and circles:
intersection (ray, ray), polar step (ray, circle about the same P), distance and distance (circle, circle).
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass

FLAT = 1e-3
"""Sine of the angle under which two lines must cross at least to be taken as a start: a pointing of 2 seconds is then
1 % of the length away at the most."""


@dataclass(frozen=True)
class Ray:
    """The half line from ``start`` along the unit vector ``along``."""

    start: complex
    along: complex


@dataclass(frozen=True)
class Circle:
    """A circle; ``through`` is a known station on it that is not sought (or None)."""

    centre: complex
    radius: float
    through: tuple[complex, ...] = ()


Locus = Ray | Circle


def unit(azimuth: float) -> complex:
    """Unit vector of an azimuth in radians."""
    return complex(math.sin(azimuth), math.cos(azimuth))


def azimuth(vector: complex) -> float:
    """Azimuth of a vector in radians, (-pi, pi]."""
    return math.atan2(vector.real, vector.imag)


def seen_under(p: complex, q: complex, angle: float) -> Circle | None:
    """The circle from which the angle from ``p`` clockwise to ``q`` is seen; None if it is nearly straight.

    With w = (Q - P)/2 the centre lies on the chord's perpendicular, at -i w k from its middle. The angle at the centre
    is twice that at X, so k = cot(angle). (Check: P west, Q east, X far south sees P then Q under a small clockwise
    angle; the centre is far south. Angle 90 degrees: k = 0, the circle of Thales.)
    """
    sine = math.sin(angle)
    if p == q or abs(sine) < FLAT:
        return None
    half = (q - p) / 2
    offset = -1j * half * (math.cos(angle) / sine)
    centre = (p + q) / 2 + offset
    return Circle(centre, abs(p - centre), (p, q))


def meet(a: Locus, b: Locus) -> list[complex]:
    """Common points of two loci; known stations through which both run are no answer."""
    if isinstance(a, Ray):
        found = _rays(a, b) if isinstance(b, Ray) else _ray_circle(a, b)
    else:
        found = _ray_circle(b, a) if isinstance(b, Ray) else _circles(a, b)
    return [x for x in found if not _is_known(x, a) and not _is_known(x, b)]


def _is_known(x: complex, locus: Locus) -> bool:
    if isinstance(locus, Ray):
        return False
    return any(abs(x - p) <= 1e-6 * locus.radius for p in locus.through)


def _rays(a: Ray, b: Ray) -> list[complex]:
    """a + t u = b + s v: t = (b - a) x v / u x v; both t and s must be forward."""
    cross = (a.along.conjugate() * b.along).imag
    if abs(cross) < FLAT:
        return []
    gap = b.start - a.start
    t = (gap.conjugate() * b.along).imag / cross
    s = (gap.conjugate() * a.along).imag / cross
    return [a.start + t * a.along] if t > 0 and s > 0 else []


def _ray_circle(a: Ray, b: Circle) -> list[complex]:
    """Forward points of a ray on a circle: t = m +- sqrt(r^2 - h^2), m and h the middle's place along and across."""
    if a.start == b.centre:
        return [a.start + b.radius * a.along]
    w = (b.centre - a.start) * a.along.conjugate()
    square = b.radius * b.radius - w.imag * w.imag
    if square < 0:
        # a ray that just misses touches the circle
        return [a.start + w.real * a.along] if abs(w.imag) < 1.02 * b.radius and w.real > 0 else []
    root = math.sqrt(square)
    return [a.start + t * a.along for t in (w.real - root, w.real + root) if t > 1e-9 * b.radius]


def _circles(a: Circle, b: Circle) -> list[complex]:
    """Two circles: x = (d^2 + r^2 - s^2) / 2d along the line of centres, +- sqrt(r^2 - x^2) across."""
    gap = b.centre - a.centre
    d = abs(gap)
    if d <= 1e-6 * max(a.radius, b.radius):
        return []
    x = (d * d + a.radius * a.radius - b.radius * b.radius) / (2 * d)
    square = a.radius * a.radius - x * x
    along = gap / d
    if square <= 0:
        # circles that just miss touch
        return [a.centre + x * along] if abs(x) < 1.02 * a.radius else []
    y = math.sqrt(square)
    return [a.centre + complex(x, y) * along, a.centre + complex(x, -y) * along]


def crossing(a: Locus, b: Locus, x: complex) -> float:
    """|sine| of the angle at which two loci cross in ``x``: 1 is best, 0 is no crossing."""
    u, v = _tangent(a, x), _tangent(b, x)
    return abs((u.conjugate() * v).imag)


def _tangent(locus: Locus, x: complex) -> complex:
    if isinstance(locus, Ray):
        return locus.along
    r = x - locus.centre
    return 1j * r / abs(r) if r else 0j


def similarity(p: complex, q: complex, p_new: complex, q_new: complex, scaled: bool) -> tuple[complex, complex] | None:
    """(a, b) of z -> a z + b that brings p, q to p_new, q_new; with ``scaled`` |a| = 1 and the middles agree."""
    if p == q or p_new == q_new:
        return None
    a = (q_new - p_new) / (q - p)
    if scaled:
        a = cmath.rect(1.0, cmath.phase(a))
    return a, (p_new + q_new) / 2 - a * (p + q) / 2
