"""What a network without a unique solution leaves free, in trade words, by station and movement."""

from __future__ import annotations

import numpy as np
from scipy.sparse import csc_array
from scipy.sparse.csgraph import connected_components

from adjust.graph.parts import listed, row_nodes
from adjust.network import Array, Bools, Ints, Network
from adjust.solver.design import Unknowns

DENSE_MOST = 3000
"""Unknowns up to which the free movements are found by a dense eigenvalue decomposition: 3.2 s at 3,000 on one thread
(tests/solver/pivot_study.py), growing with the cube."""
EIGEN_LEAST = 1e-11
MOVES = 1e-5
"""A station moves if its share of a unit movement is above this. In 100 networks with one loose station rounding left
4.7e-15 at the most to those that stand still, and the loose one moved by 0.65 at the least (pivot_study.py)."""


BASES_MOST = 300
"""Lines tried as the base that stands still; each costs one product of the movements."""
RANK_LEAST = 1e-8
"""Share of the largest singular value below which a base does not fix a movement of the whole: one station, no turn."""


def words(network: Network, unknowns: Unknowns, kept: Ints, normal: csc_array, pivots: Ints, whole: Array) -> list[str]:
    """A sentence for every independent free movement; ``kept`` are the unknowns of the normal matrix.

    ``whole`` (u, d) are the movements of the network as a whole that a free datum takes away.
    """
    owner = np.full((unknowns.count, 2), -1, dtype=np.int64)
    numbered = np.argwhere(unknowns.coordinate >= 0)
    owner[unknowns.coordinate[unknowns.coordinate >= 0]] = numbered
    if len(kept) > DENSE_MOST:
        of_pivots = owner[kept[pivots], 0]
        return [_one(network, np.unique(of_pivots[of_pivots >= 0]), None)]
    inner = _null(normal)
    null = np.zeros((unknowns.count, inner.shape[1]))
    null[kept] = inner
    if whole.shape[1]:
        null = _stilled(null, whole, _bases(network, unknowns))
    moving = np.abs(null).max(axis=1) > MOVES
    projection = np.abs(null @ null.T) > MOVES**2
    _, label = connected_components(csc_array(projection.astype(float)), directed=False)
    sentences = []
    for one in dict.fromkeys(label[moving].tolist()):
        here = (label == one) & moving & (owner[:, 0] >= 0)
        stations = np.unique(owner[here, 0])
        if len(stations):
            sentences.append(_one(network, stations, _movement(null, owner, here)))
    return sentences or [_one(network, np.unique(owner[owner[:, 0] >= 0, 0]), None)]


def _bases(network: Network, unknowns: Unknowns) -> list[Ints]:
    """Unknown coordinates of pairs of stations that a reading joins, BASES_MOST pairs at the most."""
    ends = [np.sort(b.stations[:, :2], axis=1) for b in network.blocks if b.stations.shape[1] > 1]
    pairs = np.unique(np.concatenate(ends), axis=0)
    columns = unknowns.coordinate[pairs[:: 1 + len(pairs) // BASES_MOST]].reshape(-1, 6)
    return [at[at >= 0] for at in columns]


def _stilled(null: Array, whole: Array, bases: list[Ints]) -> Array:
    """The movements less those of the whole that keep a base still, for the bases that leave the fewest others moving.

    Minimal constraints may sit on the very station that is loose; then everything else seems to move about it.
    """
    best = _moving(null)
    for at in bases:
        other = null - whole @ np.linalg.lstsq(whole[at], null[at], rcond=RANK_LEAST)[0]
        if _moving(other) < best:
            null, best = other, _moving(other)
    return np.linalg.qr(null)[0]  # orthonormal again, so that movements of different stations come apart


def _moving(null: Array) -> int:
    """Number of unknowns that take part in some movement."""
    return int((np.abs(null).max(axis=1) > MOVES).sum())


def _null(normal: csc_array) -> Array:
    """Orthonormal free movements of the scaled normal matrix (k, d)."""
    dense = normal.toarray()
    diagonal = np.diagonal(dense).copy()
    scale = np.where(diagonal > 0, 1.0 / np.sqrt(np.where(diagonal > 0, diagonal, 1.0)), 1.0)
    values, vectors = np.linalg.eigh(dense * scale[:, None] * scale)
    count = max(1, int((values < EIGEN_LEAST).sum()))
    return np.asarray(vectors[:, :count] * scale[:, None] / np.abs(scale).max())


def _movement(null: Array, owner: Ints, here: Bools) -> str:
    """'in height', or the azimuth along which a single station can move, or ''."""
    parts = set(owner[here, 1].tolist())
    if parts == {2}:
        return "in height"
    if len(np.unique(owner[here, 0])) > 1 or null.shape[1] > 1:
        return ""
    east = float(null[here & (owner[:, 1] == 0), 0].sum())
    north = float(null[here & (owner[:, 1] == 1), 0].sum())
    azimuth = np.degrees(np.arctan2(east, north)) % 180
    return f"along azimuth {azimuth:.0f} degrees (or back)"


def _one(network: Network, stations: Ints, movement: str | None) -> str:
    who = listed(network, stations, 8)
    along = f" {movement}" if movement else ""
    if len(stations) == 1:
        readings = _readings(network, int(stations[0]))
        held = f"station {who} is held by {_count(readings)} only: nothing fixes it{along}"
        return f"{held}; measure to it once more or give it as control"
    return f"nothing fixes {who}{along}: the readings let them move together; tie them to the rest by another reading"


def _readings(network: Network, station: int) -> list[str]:
    """Kinds of the scalar rows that touch a station."""
    rows, nodes = row_nodes(network)
    touched = np.unique(rows[nodes // 2 == station])
    return [network.blocks[b].kind for b in network.rows.block[touched]]


def _count(kinds: list[str]) -> str:
    """'one distance', 'two readings (angle, distance)'."""
    numbers = ("no", "one", "two", "three", "four", "five", "six")
    number = numbers[len(kinds)] if len(kinds) < len(numbers) else str(len(kinds))
    names = list(dict.fromkeys(kind.replace("_", " ") for kind in kinds))
    if len(names) == 1:
        noun = {"levelled": "levelled line"}.get(names[0], names[0])
        return f"{number} {noun}{'s' if len(kinds) > 1 else ''}"
    return f"{number} readings ({', '.join(names)})"
