"""Trilateration in space: one station after the other on its spheres and planes (adjust.graph.spheres).

From the stations that are known a station is placed on three of its spheres and planes; all its readings vote.
Of points that fit equally all are followed, up to BEAMS ways at a time.
"""

from __future__ import annotations

import numpy as np

from adjust.graph.space import POINTING, RISE, SLOPE, Space
from adjust.graph.spheres import Locus, Plane, Sphere, places
from adjust.network import Array, Ints

BEAMS = 8
Solutions = list[tuple[Array, float]]


def grown(space: Space, stations: Ints) -> list[Array]:
    """Places (n, 3), NaN where not reached, by trilateration from the known stations; all that fit equally."""
    full = {s: space.given[s] for s in stations.tolist() if space.known[s].all()}
    beams: list[tuple[dict[int, Array], float]] = [(full, 0.0)]
    near = ties(space)
    while True:
        after: list[tuple[dict[int, Array], float]] = []
        moved = False
        for placed, cost in beams:
            step = _next(space, near, placed, stations)
            if step is None:
                after.append((placed, cost))
                continue
            moved = True
            after += [({**placed, step[0]: x}, cost + c) for x, c in step[1]]
        beams = sorted(after, key=lambda b: (-len(b[0]), b[1]))[:BEAMS]
        if not moved:
            break
    most = len(beams[0][0])
    if most < len(stations):
        return []
    out = []
    for placed, _ in beams:
        if len(placed) == most:
            x = np.full(space.given.shape, np.nan)
            for s, place in placed.items():
                x[s] = place
            out.append(x)
    return out


def ties(space: Space) -> dict[int, list[int]]:
    """Rows that touch each station."""
    near: dict[int, list[int]] = {}
    for row, (i, j) in enumerate(zip(space.i.tolist(), space.j.tolist(), strict=True)):
        near.setdefault(i, []).append(row)
        near.setdefault(j, []).append(row)
    return near


def _next(space: Space, near: dict[int, list[int]], placed: dict[int, Array],
          stations: Ints) -> tuple[int, Solutions] | None:  # fmt: skip
    """The next station to place and its equal places: first one with a check, last one that forks."""
    turn = orientations(space, placed)
    left = [(s, loci_of(space, near.get(s, []), s, placed, turn)) for s in stations.tolist() if s not in placed]
    fork: tuple[int, Solutions] | None = None
    # those with most to check them first; the first that stands alone goes
    for s, loci in sorted(left, key=lambda one: -len(one[1])):
        found = places(loci) if len(loci) > 2 else []
        if len(found) == 1 and len(loci) > 3:
            return s, found
        if found and (fork is None or len(found) < len(fork[1])):
            fork = s, found
    return fork


def orientations(space: Space, placed: dict[int, Array]) -> dict[int, float]:
    """Orientations of the sets with a placed line; north is set -1."""
    turn = {-1: 0.0}
    for row in np.flatnonzero(space.sort == POINTING).tolist():
        i, j, one = int(space.i[row]), int(space.j[row]), int(space.of_set[row])
        if one not in turn and i in placed and j in placed:
            d = placed[j] - placed[i]
            turn[one] = float(np.arctan2(d[0], d[1]) - space.value[row])
    return turn


def loci_of(space: Space, rows: list[int], s: int, placed: dict[int, Array], turn: dict[int, float]) -> list[Locus]:
    """Spheres and planes on which a station lies."""
    out: list[Locus] = [Plane(np.eye(3)[c], float(space.given[s, c])) for c in range(3) if space.known[s, c]]
    for row in rows:
        i, j, value = int(space.i[row]), int(space.j[row]), float(space.value[row])
        other, sense = (i, 1.0) if j == s else (j, -1.0)
        if other not in placed:
            continue
        if space.sort[row] == SLOPE:
            out.append(Sphere(placed[other] + np.array([0, 0, sense * space.up[row]]), value))
        elif space.sort[row] == RISE:
            out.append(Plane(np.array([0.0, 0, 1]), float(placed[other][2]) + sense * value))
        elif space.sort[row] == POINTING and int(space.of_set[row]) in turn:
            a = turn[int(space.of_set[row])] + value
            normal = np.array([np.cos(a), -np.sin(a), 0.0])
            out.append(Plane(normal, float(normal @ placed[other])))
    return out
