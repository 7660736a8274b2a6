"""Traverses and triangles: chains of measured legs that close, and the angles turned along them.

A *leg* is a line with a measured length. What hangs on one leg only is no part of a traverse unless it is known. A
traverse passes *through* a station with two neighbours where the angle between them was turned, or both legs have
bearings. Legs without such a station at either end are left out unless both ends are junctions of three of which two
lead on through such stations (a cross leg); so traverses with their junctions are found, and a braced network is judged
by its triangles. Among the rest

    loops  are a minimum cycle basis by length,
    links  are the same with all known stations made one: what passes through it leads from known to known.

At every station between two legs the angle must have been turned; one may be missing, else the legs must have bearings.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations, pairwise

import numpy as np

from adjust.graph.cycles import minimum_basis
from adjust.graph.runs import Run
from adjust.graph.sights import Pair, Sights, known_places, rows_of
from adjust.network import Bools, Ints, Network

LOOP, LINK, TRIANGLE = "loop traverse", "link traverse", "triangle"


@dataclass(frozen=True)
class Traverse:
    """A chain of legs that closes; ``stations`` (n + 1) as in Run."""

    kind: str
    stations: tuple[int, ...]
    missing: tuple[int, ...]
    """Stations whose angle between two legs was not turned."""
    by_bearings: bool
    """Every leg has a bearing of its own and angles are missing."""

    @property
    def closed(self) -> bool:
        """Whether it returns to its first station."""
        return self.kind == LOOP

    def run(self, sights: Sights) -> Run:
        """Its rows: of every leg, then of the angle between legs at every station (of a loop from the first one on)."""
        legs = [tuple(sights.legs[min(p), max(p)]) for p in pairwise(self.stations)]
        if self.by_bearings:
            return Run(self.kind, self.stations, (*legs, *(sights.line_rows(*p) for p in pairwise(self.stations))))
        return Run(self.kind, self.stations, (*legs, *(rows_of(sights.ways(*t)) for t in turns(self))))


def turns(traverse: Traverse) -> list[tuple[int, int, int]]:
    """(at, back, fore) of every station between two legs in order; of a loop the first station first."""
    s = traverse.stations
    inner = [(s[k], s[k - 1], s[k + 1]) for k in range(1, len(s) - 1)]
    return [(s[0], s[-2], s[1]), *inner] if traverse.closed else inner


def find_traverses(network: Network, sights: Sights, lengths: dict[Pair, float]) -> tuple[Traverse, ...]:
    """All traverses, loops before links, by length; ``lengths`` in metres by leg."""
    legs = _legs(network, sights)
    if not legs:
        return ()
    known = known_places(network)
    size = np.array([max(1, round(1000 * lengths[leg])) for leg in legs], dtype=np.int64)
    found = [*_loops(network, sights, legs, size, known), *_links(network, sights, legs, size, known)]
    return tuple(found)


def _legs(network: Network, sights: Sights) -> list[Pair]:
    """Legs that traverses run along."""
    known = known_places(network)
    near: dict[int, set[int]] = {}
    for i, j in sights.legs:
        near.setdefault(i, set()).add(j)
        near.setdefault(j, set()).add(i)
    ends = [i for i in near if len(near[i]) == 1 and not known[i]]
    while ends:
        i = ends.pop()
        for j in near.pop(i, set()):
            near[j].discard(i)
            if len(near[j]) == 1 and not known[j]:
                ends.append(j)
    through = {i for i, others in near.items() if len(others) == 2 and _passes(sights, i, *sorted(others))}
    beside = {i for i, others in near.items() if len(others) <= 3 and len(others & through) >= 2}
    return [
        (i, j)
        for i, j in sorted(sights.legs)
        if j in near.get(i, ()) and (i in through or j in through or (i in beside and j in beside))
    ]


def _passes(sights: Sights, at: int, one: int, other: int) -> bool:
    """Whether a bearing can be carried through a station."""
    if sights.ways(at, one, other):
        return True
    return bool(sights.line_rows(at, one) and sights.line_rows(at, other))


def _loops(network: Network, sights: Sights, legs: list[Pair], size: Ints, known: Bools) -> list[Traverse]:
    found = []
    for cycle in minimum_basis(np.array(legs), size):
        walk = _begun(sights, cycle.nodes[:-1], known)
        whole = Traverse(LOOP, walk, (), False)
        missing = [at for at, back, fore in turns(whole) if not sights.ways(at, back, fore)]
        if len(missing) == 1:
            place = walk.index(missing[0])
            walk = (*walk[place:-1], *walk[:place], walk[place])
        if (one := _checked(sights, LOOP, walk, missing)) is not None:
            found.append(one)
    return found


def _begun(sights: Sights, nodes: tuple[int, ...], known: Bools) -> tuple[int, ...]:
    """The loop from a known station, else from one with a bearing, else its lowest; as its first leg was booked."""
    bears = {i for pair in sights.bearings for i in pair}
    first = min(nodes, key=lambda i: (not known[i], i not in bears, i))
    place = nodes.index(first)
    walk = (*nodes[place:], *nodes[: place + 1])
    ahead, behind = (sights.legs[min(first, i), max(first, i)][0] for i in (walk[1], walk[-2]))
    return walk if ahead < behind else walk[::-1]


def _links(network: Network, sights: Sights, legs: list[Pair], size: Ints, known: Bools) -> list[Traverse]:
    hub = len(network.stations)
    ends = np.where(known[np.array(legs)], hub, np.array(legs))
    found = []
    for cycle in minimum_basis(ends, size):
        if hub not in cycle.nodes or len(cycle.edges) < 2:
            continue
        place = cycle.nodes.index(hub)
        inner = (*cycle.nodes[place + 1 : -1], *cycle.nodes[:place])
        edges = (*cycle.edges[place:], *cycle.edges[:place])
        first, last = (
            next(i for i in legs[e] if i != inner[k] and known[i]) for e, k in ((edges[0], 0), (edges[-1], -1))
        )
        ahead, behind = (sights.legs[legs[e]][0] for e in (edges[0], edges[-1]))
        walk = (first, *inner, last) if ahead < behind else (last, *inner[::-1], first)
        missing = [s for k, s in enumerate(walk[1:-1], 1) if not sights.ways(s, walk[k - 1], walk[k + 1])]
        if first != last and (one := _checked(sights, LINK, walk, missing)) is not None:
            found.append(one)
    return found


def _checked(sights: Sights, kind: str, walk: tuple[int, ...], missing: list[int]) -> Traverse | None:
    """The traverse, if enough of its angles were turned: all but one of a loop, all of a link, or by bearings."""
    if len(missing) > (kind == LOOP):
        if not all(sights.line_rows(*pair) for pair in pairwise(walk)):
            return None
        return Traverse(kind, walk, tuple(missing), True)
    return Traverse(kind, walk, tuple(missing), False)


def find_triangles(sights: Sights, without: set[frozenset[int]]) -> tuple[Run, ...]:
    """Triangles with all three angles, no one the sum of others; those of ``without`` (station sets) are left out.

    The three angles of a triangle are told by its three lines; triangles are taken in the order of their stations as
    long as their lines are no sum modulo two of those before.
    """
    sighted = {at: set(sights.targets(at)) for at in sorted({*sights.sets, *sights.angles})}
    lines: dict[Pair, int] = {}
    pivots: dict[int, int] = {}
    found = []
    for i in sighted:
        others = sorted(j for j in sighted[i] if j > i and i in sighted.get(j, ()))
        for j, k in combinations(others, 2):
            if k not in sighted[j] or j not in sighted[k]:
                continue
            ways = [sights.ways(*corner) for corner in ((i, j, k), (j, k, i), (k, i, j))]
            if not all(ways):
                continue
            mask = 0
            for pair in ((i, j), (j, k), (i, k)):
                mask ^= 1 << lines.setdefault(pair, len(lines))
            while mask and (pivot := pivots.get(mask.bit_length())):
                mask ^= pivot
            if mask:
                pivots[mask.bit_length()] = mask
                if frozenset((i, j, k)) not in without:
                    found.append(Run(TRIANGLE, (i, j, k, i), tuple(rows_of(w) for w in ways)))
    return tuple(found)
