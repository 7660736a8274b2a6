"""Mirror images of places in space, as starts for the search of second solutions.

Slope distances keep their length when what hangs on three stations is reflected in their plane,

    x' = x - 2 n (n.(x - c)),    n the normal, c a point of the plane,

and heights too when the plane is vertical: what hangs on two stations, with known heights besides, has an image beyond
the vertical plane through both. Bodies that hang on three or two stations are found by taking these away and looking at
what falls off. Where all is nearly level, heights above and below the neighbours fit nearly as well.
"""

from __future__ import annotations

import itertools

import numpy as np

from adjust.graph.space import SLOPE, Space
from adjust.network import Array, Ints

CUTS_STATIONS_MOST = 40
"""Stations up to which bodies on two or three others are looked for: the triples of 40 are 9,880."""
BODIES_MOST = 40


def images(space: Space, stations: Ints, x: Array) -> list[Array]:
    """Places (n, 3) that may fit as well as ``x``; known components stay."""
    known = space.known[stations]
    new = stations[~known.all(axis=1)]
    full, plan = stations[known.all(axis=1)], stations[known[:, :2].all(axis=1)]
    out = []
    if len(new):
        level = x.copy()
        level[new, 2] = 2 * x[stations[known[:, 2]], 2].mean() - x[new, 2]
        out.append(level)
        if len(full) > 2:
            out.append(reflected(x, new, x[full]))
        if len(plan) > 1:
            out.append(upright(x, new, x[plan]))
    for body, hinge in bodies(space, stations):
        out.append(reflected(x, body, x[hinge]) if len(hinge) > 2 else upright(x, body, x[hinge]))
    for s in new.tolist():
        others = neighbours(space, s)
        if len(others) > 2:
            out.append(reflected(x, np.array([s]), x[others]))
        if len(others):
            level = x.copy()
            level[s, 2] = 2 * x[others, 2].mean() - x[s, 2]
            out.append(level)
    return [np.where(space.known, space.given, one) for one in out]


def neighbours(space: Space, s: int) -> Ints:
    """Stations at the other end of the slope distances of one."""
    rows = (space.sort == SLOPE) & ((space.i == s) | (space.j == s))
    return np.unique(space.i[rows] + space.j[rows] - s)


def reflected(x: Array, moved: Ints, plane: Array) -> Array:
    """Places with some of them beyond the plane that fits some points (k, 3)."""
    middle = plane.mean(axis=0)
    return _beyond(x, moved, middle, np.linalg.svd(plane - middle)[2][-1])


def upright(x: Array, moved: Ints, plane: Array) -> Array:
    """The same with the vertical plane that fits the points."""
    middle = plane.mean(axis=0)
    normal = np.append(np.linalg.svd(plane[:, :2] - middle[:2])[2][-1], 0.0)
    return _beyond(x, moved, middle, normal)


def _beyond(x: Array, moved: Ints, middle: Array, normal: Array) -> Array:
    out = x.copy()
    out[moved] -= 2 * np.outer((x[moved] - middle) @ normal, normal)
    return out


def bodies(space: Space, stations: Ints) -> list[tuple[Ints, Ints]]:
    """(stations of a body, the three or two it hangs on): what falls off the known stations when these are taken away.

    A body's known heights do not hold it in the plane; a station known in the plane does.
    """
    n = len(stations)
    if n > CUTS_STATIONS_MOST:
        return []
    number = {s: k for k, s in enumerate(stations.tolist())}
    near = [0] * n
    for i, j in zip(space.i.tolist(), space.j.tolist(), strict=True):
        near[number[i]] |= 1 << number[j]
        near[number[j]] |= 1 << number[i]
    fixed = [k for k, s in enumerate(stations.tolist()) if space.known[s, :2].any()]
    held = sum(1 << k for k in fixed)
    found: dict[int, tuple[int, ...]] = {}
    for size in (2, 3):
        for cut in itertools.combinations(range(n), size):
            off = ((1 << n) - 1) & ~_reached(near, held, sum(1 << k for k in cut))
            if off and off not in found and len(found) < BODIES_MOST:
                found[off] = cut
    # a single station on three is reflected anyway
    return [(stations[[k for k in range(n) if off >> k & 1]], stations[list(cut)]) for off, cut in found.items()
            if off & (off - 1) or len(cut) == 2]  # fmt: skip


def _reached(near: list[int], held: int, cut: int) -> int:
    """Bits of the stations cut away and of those that hang together with the held ones."""
    reached, front = held | cut, held & ~cut
    while front:
        k = front & -front
        front ^= k
        more = near[k.bit_length() - 1] & ~reached
        reached |= more
        front |= more
    return reached
