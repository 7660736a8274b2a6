"""Uncoupled parts of a network: readings that share no station component can be adjusted apart.

The nodes are (station, plane) and (station, height); a reading joins all nodes it depends on, a group unknown joins
its rows, a cluster joins its scalar rows. Held stations join too: two levelling lines from one bench mark are one part.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from adjust.kinds import KINDS
from adjust.network import Bools, Ints, Network

PLANE, HEIGHT = 0, 1


@dataclass(frozen=True)
class Part:
    """One uncoupled part: its name, its nodes (n, 2) [plane, height], its scalar rows (R,), its groups (g,)."""

    what: str
    nodes: Bools
    rows: Bools
    groups: Bools

    @property
    def stations(self) -> Ints:
        """Numbers of the stations that belong to the part."""
        return np.flatnonzero(self.nodes.any(axis=1))


def row_nodes(network: Network) -> tuple[Ints, Ints]:
    """The touched nodes of every scalar row as pairs (row, node) with node = 2 station + (0 plane, 1 height)."""
    rows, nodes = [np.empty(0, np.int64)], [np.empty(0, np.int64)]
    numbering = network.rows
    for b, block in enumerate(network.blocks):
        kind = KINDS[block.kind]
        touched = kind.touched(block.surface)
        here = np.flatnonzero(numbering.block == b)
        stations = block.stations[numbering.row[here]]
        for component, code in (("plane", PLANE), ("height", HEIGHT)):
            touching = np.array([t in (component, "both") for t in touched])[numbering.part[here]]
            chosen = stations[touching]
            rows.append(np.repeat(here[touching], chosen.shape[1]))
            nodes.append((2 * chosen + code).ravel())
    return np.concatenate(rows), np.concatenate(nodes)


def row_groups(network: Network) -> Ints:
    """Group number of every scalar row (R,), -1 for none."""
    out = np.full(len(network.rows), -1, dtype=np.int64)
    for b, block in enumerate(network.blocks):
        here = network.rows.block == b
        out[here] = block.group[network.rows.row[here]]
    return out


def find_parts(network: Network) -> list[Part]:
    """The uncoupled parts, plane before heights, then by the first station of each."""
    n, r, g = len(network.stations), len(network.rows), len(network.groups)
    rows, nodes = row_nodes(network)
    groups = row_groups(network)
    grouped = np.flatnonzero(groups >= 0)
    # vertices: rows, then nodes, then groups, then clusters
    start = [rows, grouped, *(c.rows for c in network.clusters)]
    end = [r + nodes, r + 2 * n + groups[grouped]]
    end += [np.full(len(c.rows), r + 2 * n + g + i) for i, c in enumerate(network.clusters)]
    i, j = np.concatenate(start), np.concatenate(end)
    size = r + 2 * n + g + len(network.clusters)
    _, label = connected_components(coo_array((np.ones(len(i)), (i, j)), shape=(size, size)), directed=False)
    found = []
    for one in dict.fromkeys(label[:r].tolist()):
        mask = label == one
        found.append((mask[r : r + 2 * n].reshape(n, 2), mask[:r], mask[r + 2 * n : r + 2 * n + g]))
    found.sort(key=lambda f: (not f[0][:, PLANE].any(), int(np.flatnonzero(f[0].any(axis=1))[0])))
    return _named(network, found)


def _named(network: Network, found: list[tuple[Bools, Bools, Bools]]) -> list[Part]:
    """Name the parts in trade words, with stations where several are of one sort."""
    sorts = [
        " and ".join(w for w, c in (("plane", PLANE), ("heights", HEIGHT)) if nodes[:, c].any())
        for nodes, _, _ in found
    ]
    parts = []
    for sort, (nodes, rows, groups) in zip(sorts, found, strict=True):
        what = sort if sorts.count(sort) == 1 else f"{sort} of {listed(network, np.flatnonzero(nodes.any(axis=1)))}"
        parts.append(Part(what, nodes, rows, groups))
    return parts


def listed(network: Network, stations: Ints, most: int = 5) -> str:
    """Names of the stations, the first few and the number of the rest."""
    names = [network.stations.names[i] for i in stations]
    more = f" and {len(names) - most} more" if len(names) > most else ""
    return ", ".join(names[:most]) + more
