"""Closed forms in space: a station on spheres (slope distances) and planes (a known height, east or north, a sight).

The difference of two spheres |x - a|^2 = r^2 and |x - b|^2 = s^2 is linear, 2 (b - a) x = r^2 - s^2 + b^2 - a^2: their
radical plane. Three lines of sight are thus a sphere and two planes, which meet in two points (mirror images about the
plane of the three known stations), or three planes, which meet in one. All readings of the station vote on the points.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from adjust.graph.agreement import SPREAD
from adjust.network import Array

LOCI_MOST = 6
FLAT = 1e-6
EQUAL, AGREE = 3.0, 0.1
TRIPLES_MOST = 20


@dataclass(frozen=True)
class Sphere:
    """All points ``radius`` from a centre (3,)."""

    centre: Array
    radius: float


@dataclass(frozen=True)
class Plane:
    """All points x with normal x = offset, unit normal (3,)."""

    normal: Array
    offset: float


Locus = Sphere | Plane


def meet(loci: tuple[Locus, Locus, Locus]) -> list[Array]:
    """Common points of three loci: none, one or two."""
    spheres = [one for one in loci if isinstance(one, Sphere)]
    planes = [one for one in loci if isinstance(one, Plane)]
    for other in spheres[1:]:
        radical = _radical(spheres[0], other)
        if radical is None:
            return []
        planes.append(radical)
    a, b = planes[0], planes[1]
    along = _cross(a.normal, b.normal)
    square = float(along @ along)
    if square < FLAT:
        return []
    point = _cross(along, b.normal * a.offset - a.normal * b.offset) / square * -1.0
    along = along / np.sqrt(square)
    if not spheres:
        sine = float(along @ planes[2].normal)
        return [] if abs(sine) < 1e-3 else [point + along * (planes[2].offset - planes[2].normal @ point) / sine]
    middle = point + along * (along @ (spheres[0].centre - point))
    square = spheres[0].radius ** 2 - float(((middle - spheres[0].centre) ** 2).sum())
    if square < 0:
        # spheres that just miss touch
        return [middle] if square > -0.04 * spheres[0].radius ** 2 else []
    return [middle + t * along for t in (np.sqrt(square), -np.sqrt(square))]


def _cross(a: Array, b: Array) -> Array:
    """a x b; numpy's own takes ten times as long for a single pair."""
    return np.array([a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]])


def _radical(a: Sphere, b: Sphere) -> Plane | None:
    normal = 2 * (b.centre - a.centre)
    size = float(np.linalg.norm(normal))
    if size < 1e-9:
        return None
    offset = a.radius**2 - b.radius**2 + float(b.centre @ b.centre - a.centre @ a.centre)
    return Plane(normal / size, offset / size)


def costs(loci: list[Locus], x: Array) -> Array:
    """Cauchy costs (k,) of points (k, 3): misfits as shares of the distance, those of planes as shares of a length."""
    spheres = [one for one in loci if isinstance(one, Sphere)]
    planes = [one for one in loci if isinstance(one, Plane)]
    total, far = np.zeros(len(x)), np.ones(len(x))
    if spheres:
        radius = np.array([one.radius for one in spheres])
        d = np.linalg.norm(x[:, None] - np.array([one.centre for one in spheres]), axis=2)
        far = np.maximum(d, radius).max(axis=1)
        total += np.log1p(((d - radius) / np.maximum(d, radius) / SPREAD) ** 2).sum(axis=1)
    if planes:
        off = x @ np.array([one.normal for one in planes]).T - np.array([one.offset for one in planes])
        total += np.log1p((off / far[:, None] / SPREAD) ** 2).sum(axis=1)
    return total


def places(loci: list[Locus]) -> list[tuple[Array, float]]:
    """(point, cost) of the best place and of those that fit equally well.

    Triples are met until all loci agree on a point: any other place would lie on the same three.
    """
    planes = [one for one in loci if isinstance(one, Plane)]
    spheres = [one for one in loci if isinstance(one, Sphere)]
    some: list[Locus] = [*planes[:3], *spheres[:LOCI_MOST]]
    found: list[tuple[Array, float]] = []
    for three in itertools.islice(itertools.combinations(some, 3), TRIPLES_MOST):
        points = meet((three[0], three[1], three[2]))
        if not points:
            continue
        c = costs(loci, np.array(points))
        here = list(zip(points, c.tolist(), strict=True))
        found += here
        if len(loci) > 3 and c.min() < AGREE * len(loci):
            found = here
            break
    found.sort(key=lambda one: one[1])
    kept: list[tuple[Array, float]] = []
    size = min((one.radius for one in spheres), default=1.0)
    for x, one_cost in found:
        if one_cost < found[0][1] + EQUAL and all(np.linalg.norm(x - other) > 1e-3 * size for other, _ in kept):
            kept.append((x, one_cost))
    return kept[:4]
