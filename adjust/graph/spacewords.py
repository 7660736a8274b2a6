"""Sentences of the starting computation in space: other solutions, heights fixed only just."""

from __future__ import annotations

import numpy as np

from adjust.graph.parts import listed
from adjust.graph.space import Space
from adjust.graph.valley import BENT, BESIDE, STRAINED, Rest, away, bend, strain
from adjust.network import Array, Ints, Network

APART = 1e-4
"""Share of the extent by which a station is named as moving between two solutions."""


def mirror_words(network: Network, stations: Ints, x: Array, others: list[Array]) -> list[str]:
    """A sentence for every other solution."""
    out = []
    size = float(np.ptp(x[stations], axis=0).max())
    for y in others[:3]:
        moved = stations[np.abs(x[stations] - y[stations]).max(axis=1) > APART * size]
        s = int(moved[np.argmax(np.abs(x[moved] - y[moved]).max(axis=1))])
        name, who = network.stations.names[s], listed(network, moved, 8)
        a, b = (f"{z[s, 0]:.3f}, {z[s, 1]:.3f}, {z[s, 2]:.3f}" for z in (x, y))
        their = "its mirror image" if len(moved) == 1 else "their mirror images"
        out.append(
            f"{who} and {their} fit all readings equally well: {name} can stand at {a} or at {b} (metres east, north, "
            f"height); a row for {name} in stations.csv near the right place, or one more reading that tells them "
            "apart (a levelled line or a zenith angle), settles it"
        )
    return out


def flat_words(network: Network, space: Space, stations: Ints, free: Ints, rests: list[Rest]) -> list[str]:
    """Stations whose place the readings fix only just (adjust.graph.valley)."""
    first, n = rests[0], 3 * len(space.known)
    found: dict[int, float] = {}
    for s in stations.tolist():
        own = np.flatnonzero((free < n) & (free // 3 == s))
        bent, sd, _ = bend(space, first, free, own) if len(own) else (0.0, 0.0, 0.0)
        if bent > BENT:
            found[s] = sd
    share, move = strain(first)
    if share > STRAINED:
        found |= _most_moved(move, free, n, found)
    if not first.reached:
        found |= _most_moved(move, free, n, found)
    for other in rests[1:]:
        if away(first, other, free) < BESIDE:
            found |= _most_moved((other.x - first.x).ravel()[free[free < n]], free[free < n], n, found)
    out = []
    for s, sd in found.items():
        own = free[(free < n) & (free // 3 == s)]
        way = "up and down" if (own % 3 == 2).any() else "in one direction"
        out.append(
            f"{network.stations.names[s]} is fixed only just: it lies nearly in one plane with the stations that its "
            f"slope distances run to, which leave it {sd:.2f} m of play {way}; level to it or measure a zenith angle, "
            "or give its height"
        )
    return out


def _most_moved(move: Array, free: Ints, n: int, found: dict[int, float]) -> dict[int, float]:
    """The station that a movement (u,) of the free unknowns moves most, and how far; none if it is found already."""
    moved = np.zeros(n)
    moved[free[free < n]] = np.abs(move[free < n])
    s = int(np.argmax(moved)) // 3
    return {} if s in found else {s: float(moved.max())}
