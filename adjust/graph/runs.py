"""Loops and runs of heights: which lines close on themselves, and which lead from one known height to another.

Loops are a minimum cycle basis of the graph of levelled lines (adjust.graph.cycles): every other loop is a sum of
them. Runs are found in the same way after all known heights have become one node: what passes through it leads from
one known height to another (or is a loop of one mark, which the loops have already).

Where zenith angles give rises too, the levelled loops and runs stay what they are, and loops and runs of all lines
together follow that do not depend on them. Two loops with the same lines by zenith angles (modulo two) differ by
levelled loops only, so independence asks for these lines alone. A minimum basis of all loops spans, up to any size,
what there is up to that size; so going through it by size and keeping what does not depend on the levelled loops and
on what was kept gives loops of the smallest total size.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from adjust.graph.cycles import Cycle, minimum_basis
from adjust.kinds import KINDS
from adjust.network import Array, Bools, Ints, Network

HEIGHT = 2
LENGTH, SETUPS, VARIANCE = "length", "set-ups", "variance"
"""What the sizes of loops are, by what was booked for every line."""
LOOP, RUN = "level loop", "level run"
HEIGHT_LOOP, HEIGHT_RUN = "height loop", "height run"
"""Of levelled lines alone, and with lines by zenith angles."""


@dataclass(frozen=True)
class Run:
    """Lines or legs that close, in the order walked."""

    kind: str
    """level loop, level run, loop traverse, link traverse, triangle."""
    stations: tuple[int, ...]
    """In order; a loop repeats its first at the end; a run goes from a known station to a known one."""
    rows: tuple[tuple[int, ...], ...]
    """Scalar rows: of levels one a line; of traverses those of each leg, then those of each angle turned."""


@dataclass(frozen=True)
class Lines:
    """The levelled lines: stations (m, 2), scalar rows, rises and variances (m,), length and set-ups (m, 2)."""

    ends: Ints
    row: Ints
    walked: Array
    variance: Array
    rise: Array

    @classmethod
    def of(cls, network: Network) -> Lines:
        """Read the levelled lines off the blocks."""
        ends, row = [np.empty((0, 2), np.int64)], [np.empty(0, np.int64)]
        walked, variance, rise = [np.empty((0, 2))], [np.empty(0)], [np.empty(0)]
        for b, block in enumerate(network.blocks):
            if KINDS[block.kind].says != "rise":
                continue
            rows = network.rows.of_block(b, len(block))
            given = rows >= 0
            ends.append(block.stations[given])
            row.append(rows[given])
            walked.append(np.full((given.sum(), 2), np.nan) if block.walked is None else block.walked[given])
            variance.append(block.sd[given, 0] ** 2)
            rise.append(block.values[given, 0])
        return cls(np.concatenate(ends), np.concatenate(row), np.concatenate(walked), np.concatenate(variance),
                   np.concatenate(rise))  # fmt: skip

    @property
    def measure(self) -> str:
        """What sizes are measured by: lengths or set-ups where every line has them, else variances."""
        for column, what in enumerate((LENGTH, SETUPS)):
            if len(self.row) and not np.isnan(self.walked[:, column]).any():
                return what
        return VARIANCE

    @property
    def size(self) -> Ints:
        """Whole sizes (m,): millimetres, thousandths of a set-up, or shares of the mean variance in thousandths."""
        per = {LENGTH: self.walked[:, 0], SETUPS: self.walked[:, 1]}.get(self.measure, self.variance)
        return whole_sizes(per, self.measure != VARIANCE)


def whole_sizes(sizes: Array, absolute: bool = True) -> Ints:
    """Whole thousandths (m,) of some sizes, or of their shares of the mean; at least one."""
    mean = 1.0 if absolute or not len(sizes) else float(sizes.mean())
    return np.maximum(np.round(sizes / (mean or 1.0) * 1000), 1).astype(np.int64)


def known_heights(network: Network) -> Bools:
    """Stations (n,) with a known height: held, weighted or to be checked."""
    return ~np.isnan(network.stations.known[:, HEIGHT])


def level_loops(network: Network, lines: Lines | None = None) -> tuple[Run, ...]:
    """Loops of levelled lines, a basis of minimal total size, by size.

    A loop begins at a known height where it has one, else at its lowest station, and goes along its first line there.
    """
    lines = lines or Lines.of(network)
    known = known_heights(network)
    found = []
    for cycle in minimum_basis(lines.ends, lines.size):
        nodes = cycle.nodes[:-1]
        first = min(nodes, key=lambda i: (not known[i], i))
        found.append(_run(LOOP, _from(cycle, nodes.index(first)), lines))
    return tuple(found)


def level_runs(network: Network, lines: Lines | None = None) -> tuple[Run, ...]:
    """Runs between different known heights, by size: a basis of minimal total size of what the known heights close."""
    lines = lines or Lines.of(network)
    known = known_heights(network)
    if known[np.unique(lines.ends)].sum() < 2:
        return ()
    return tuple(_run(RUN, walk, lines) for walk in _between(lines.ends, lines.size, known))


class Walk(NamedTuple):
    """A height loop or run: stations (k + 1) in the order walked, and numbers of the lines (k) between them."""

    kind: str
    stations: tuple[int, ...]
    lines: tuple[int, ...]


def height_walks(network: Network, ends: Ints, size: Ints, levelled: int) -> tuple[Walk, ...]:
    """Loops, then runs between known heights, with lines by zenith angles in them.

    ``ends`` (m, 2) and whole ``size`` (m,) are those of all lines, the first ``levelled`` of them levelled.
    """
    if levelled == len(size):
        return ()
    known, apart, out = known_heights(network), _Apart(levelled), []
    for cycle in minimum_basis(ends, size):
        if apart.takes(cycle.edges):
            nodes = cycle.nodes[:-1]
            first = min(nodes, key=lambda i: (not known[i], i))
            out.append(Walk(HEIGHT_LOOP, *_from(cycle, nodes.index(first))))
    if known[np.unique(ends)].sum() >= 2:
        between = _between(ends, size, known)
        out += [Walk(HEIGHT_RUN, *walk) for walk in between if apart.takes(walk.edges)]
    return tuple(out)


@dataclass
class _Apart:
    """Walks that are independent modulo two in their lines by zenith angles, those from number ``first`` on."""

    first: int
    leading: dict[int, int] = field(default_factory=dict)

    def takes(self, edges: tuple[int, ...]) -> bool:
        """Whether a walk does not depend on those taken; it is taken then."""
        mask = 0
        for e in edges:
            mask ^= 1 << (e - self.first) if e >= self.first else 0
        while mask:
            known = self.leading.get(mask.bit_length())
            if known is None:
                self.leading[mask.bit_length()] = mask
                return True
            mask ^= known
        return False


def _between(lines: Ints, size: Ints, known: Bools) -> list[Cycle]:
    """Walks along ``lines`` (m, 2) between different known heights, by size, a basis of what these close."""
    hub = len(known)
    ends = np.where(known[lines], hub, lines)
    found = [
        (int(size[e]), _named(Cycle((hub, hub), (e,)), lines))
        for e in np.flatnonzero((ends == hub).all(axis=1)).tolist()
    ]
    for cycle in minimum_basis(ends, size):
        if hub in cycle.nodes:
            turned = _from(cycle, cycle.nodes.index(hub))
            found.append((int(size[list(cycle.edges)].sum()), _named(turned, lines)))
    return [walk for _, walk in sorted(found) if walk.nodes[0] != walk.nodes[-1]]


def _named(cycle: Cycle, lines: Ints) -> Cycle:
    """A walk from the hub to the hub with the known stations it really leaves and reaches, from the lower one."""
    i, j = lines[cycle.edges[0]].tolist()
    first = i if len(cycle.edges) == 1 or j == cycle.nodes[1] else j
    i, j = lines[cycle.edges[-1]].tolist()
    last = j if len(cycle.edges) == 1 or i == cycle.nodes[-2] else i
    walk = Cycle((first, *cycle.nodes[1:-1], last), cycle.edges)
    return walk if first <= last else Cycle(walk.nodes[::-1], walk.edges[::-1])


def _from(cycle: Cycle, place: int) -> Cycle:
    """The closed walk begun at another of its nodes, along the lower of the two edges there."""
    nodes, edges = cycle.nodes[:-1], cycle.edges
    nodes, edges = nodes[place:] + nodes[:place], edges[place:] + edges[:place]
    nodes = (*nodes, nodes[0])
    return Cycle(nodes, edges) if edges[0] <= edges[-1] else Cycle(nodes[::-1], edges[::-1])


def _run(kind: str, walk: Cycle, lines: Lines) -> Run:
    return Run(kind, walk.nodes, tuple((int(lines.row[e]),) for e in walk.edges))


def signs(network: Network, run: Run) -> Array:
    """(k,) +1 for every line walked as it was levelled, -1 against; for two lines between two stations as well."""
    rows = np.array([row for (row,) in run.rows])
    start = np.empty(len(rows), dtype=np.int64)
    blocks, lines = network.rows.block[rows], network.rows.row[rows]
    for b in np.unique(blocks):
        here = blocks == b
        start[here] = network.blocks[b].stations[lines[here], 0]
    return np.where(start == np.array(run.stations[:-1]), 1.0, -1.0)
