"""Rigid pieces of a network that can move, and which of them moves alone.

In the complex plane z = east + i north a rigid body that shifts, turns and scales has velocities v = t + a z; the real
part of a is the scale, the imaginary part the turn (counter-clockwise), and its centre of rotation is -t / a. Two
stations determine (t, a), so every line that was measured along has its own, and lines with the same (t, a) in *every*
free movement are one rigid piece. Pieces with three stations or more are *bodies*; a moving station in no body is a
*point*.

Peeling names the movements one by one: a unit (a body or a point) that can move while all others rest is taken away
with its own movements; then the next. Where none can, a part of the figure that hangs on the rest by one unit flexes
as a whole (a quadrilateral, a chain between two fixed ends).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import qr

from adjust.network import Array, Bools, Ints

Complex = NDArray[np.complex128]

STILL = 1e-6
"""A station rests if its share of every unit movement is below this; rounding leaves 3e-15 at
the most before the movements are taken apart (tests/judge/null_study.py)."""
SAME = 1e-6
"""Relative difference of a up to which two lines move alike."""


MOST_CUT = 60
"""Units among which hanging figures are looked for by cutting each; more of them are said to flex as one."""


@dataclass(frozen=True)
class Move:
    """Units that can move with all the rest at rest: their own stations, their bodies and points, their movements."""

    own: tuple[int, ...]
    units: tuple[Unit, ...]
    moves: Array
    """(n, 2, r) movements of all stations, r independent ones."""
    before: frozenset[int] = frozenset()
    """Stations whose own movements were told before: these units only carry them."""

    @property
    def count(self) -> int:
        """Number of independent movements."""
        return int(self.moves.shape[2])


@dataclass(frozen=True)
class Unit:
    """A body (three stations or more) or a point (one)."""

    stations: frozenset[int]


def velocity(moves: Array) -> Complex:
    """Complex velocities (n, d) of movements (n, 2, d)."""
    return np.asarray(moves[:, 0] + 1j * moves[:, 1])


def independent(moves: Array, least: float = 1e-7) -> Array:
    """An orthonormal basis (n, 2, r) of the movements (n, 2, d)."""
    n, _, d = moves.shape
    if not d or not n:
        return np.zeros((n, 2, 0))
    u, s, _ = np.linalg.svd(moves.reshape(2 * n, d), full_matrices=False)
    return np.asarray(u[:, s > least * max(s[0], 1e-300)].reshape(n, 2, -1))


def similarity(z: Complex, v: Complex, stations: Ints) -> tuple[Complex, Complex]:
    """(a, t), both (d,), of a body from the two of its stations that lie farthest apart."""
    first = stations[np.argmax(np.abs(z[stations] - z[stations[0]]))]
    second = stations[np.argmax(np.abs(z[stations] - z[first]))]
    a = (v[second] - v[first]) / (z[second] - z[first])
    return a, v[first] - a * z[first]


def rigid_pieces(z: Complex, moves: Array, edges: Ints, still: Bools) -> list[frozenset[int]]:
    """Rigid pieces that move, by the stations of their lines; ``edges`` (m, 2) are the lines measured along."""
    weights = np.random.default_rng(3).uniform(0.5, 1.5, (moves.shape[2], 3))
    v = velocity(moves) @ weights
    moving = ~(still[edges].all(axis=1)) & (np.abs(z[edges[:, 0]] - z[edges[:, 1]]) > 0)
    edges = edges[moving]
    length = np.abs(z[edges[:, 1]] - z[edges[:, 0]])
    a = (v[edges[:, 1]] - v[edges[:, 0]]) / (z[edges[:, 1]] - z[edges[:, 0]])[:, None]
    loose = SAME * np.abs(a).max(axis=1, initial=0.0) + 1e-8 * np.abs(v).max(initial=0.0) / length
    label = _Joined(len(edges))
    at: dict[int, list[int]] = defaultdict(list)
    for e, (i, j) in enumerate(edges.tolist()):
        for s in (i, j):
            for other in at[s]:
                if np.abs(a[e] - a[other]).max() <= loose[e] + loose[other]:
                    label.join(e, other)
                    break
            else:
                at[s].append(e)
    found: dict[int, set[int]] = defaultdict(set)
    for e, ends in enumerate(edges.tolist()):
        found[label.of(e)] |= set(ends)
    return [frozenset(f) for f in found.values()]


class _Joined:
    """Union of items into sets."""

    def __init__(self, count: int) -> None:
        self.parent = list(range(count))

    def of(self, i: int) -> int:
        while self.parent[i] != i:
            self.parent[i] = self.parent[self.parent[i]]
            i = self.parent[i]
        return i

    def join(self, i: int, j: int) -> None:
        self.parent[max(self.of(i), self.of(j))] = min(self.of(i), self.of(j))


def separate(moves: Array) -> Iterator[Array]:
    """Split movements (n, 2, d) into sets that share no moving station: echelon form keeps disjoint supports apart."""
    n, _, d = moves.shape
    flat = moves.reshape(2 * n, d)
    pivots = qr(flat.T, mode="r", pivoting=True)[1][:d]
    echelon = np.linalg.solve(flat[pivots].T, flat.T).T
    support = (np.abs(echelon) > STILL).reshape(n, 2, d).any(axis=1)
    joined = _Joined(d)
    for columns in support:
        here = np.flatnonzero(columns).tolist()
        for j in here[1:]:
            joined.join(here[0], j)
    label = np.array([joined.of(j) for j in range(d)])
    for one in dict.fromkeys(label.tolist()):
        chosen = echelon[:, label == one]
        yield np.where(np.abs(chosen) > 1e-12, chosen, 0.0).reshape(n, 2, -1)


@dataclass
class Peeling:
    """The peeling of one set of movements that belong together; ``run`` gives them one by one."""

    z: Complex
    moves: Array
    edges: Ints
    units: list[Unit] = field(default_factory=list)
    neighbours: dict[int, set[int]] = field(default_factory=lambda: defaultdict(set))

    def __post_init__(self) -> None:
        still = self._still()
        self.alive = set(np.flatnonzero(~still).tolist())
        self.resting = set(np.flatnonzero(still).tolist())
        touching = self.edges[~still[self.edges].all(axis=1)]
        for i, j in touching.tolist():
            self.neighbours[i].add(j)
            self.neighbours[j].add(i)
        bodies = [p for p in rigid_pieces(self.z, self.moves, touching, still) if len(p) > 2]
        inside = set().union(*bodies) if bodies else set()
        self.units = [Unit(b) for b in bodies] + [Unit(frozenset((s,))) for s in sorted(self.alive - inside)]

    def _still(self) -> Bools:
        return np.asarray((np.abs(self.moves) < STILL).all(axis=(1, 2)))

    def run(self) -> list[Move]:
        """All movements, each with the stations that make it."""
        out: list[Move] = []
        gone: set[int] = set()
        while self.moves.shape[2] and self.alive:
            move = next((m for u in self.units if (m := self._alone((u,)))), None)
            move = move or next((m for u in self._hanging() if (m := self._alone(u))), None)
            move = move or Move(tuple(sorted(self.alive)), tuple(self.units), self.moves)
            out.append(replace(move, before=frozenset(gone)))
            gone |= set(move.own)
            self._take(move)
        return out

    def _own(self, units: Iterable[Unit]) -> set[int]:
        """Stations that belong to these units only and move."""
        chosen = set(units)
        own = set().union(*(u.stations for u in chosen)) & self.alive
        for other in self.units:
            if other not in chosen:
                own -= other.stations
        return own

    def _alone(self, units: tuple[Unit, ...]) -> Move | None:
        """The movements of these units with all other stations at rest, if there are any."""
        own = self._own(units)
        if not own:
            return None
        rest = np.array(sorted(self.alive - own), dtype=np.int64)
        d = self.moves.shape[2]
        if len(rest):
            _, s, vt = np.linalg.svd(self.moves[rest].reshape(-1, d))
            rank = int((s > STILL * max(s[0], STILL)).sum())
            combos = vt[rank:].T
        else:
            combos = np.eye(d)
        if not combos.shape[1]:
            return None
        return Move(tuple(sorted(own)), units, np.asarray(self.moves @ combos))

    def _take(self, move: Move) -> None:
        """Take a movement and its stations away."""
        self.alive -= set(move.own)
        left = self.moves.copy()
        left[list(move.own)] = 0.0
        self.moves = independent(left, 1e-6) if self.alive else left[:, :, :0]
        self.units = [u for u in self.units if u not in move.units]
        now_still = self.alive & set(np.flatnonzero(self._still()).tolist())
        self.alive -= now_still
        self.resting |= now_still

    def _hanging(self) -> list[tuple[Unit, ...]]:
        """Sets of units that hang on the rest by one unit, or on what rests alone, the smallest first."""
        links, grounded = self._adjacent()
        every = set(range(len(self.units)))
        cuts = range(-1, len(every) if len(every) <= MOST_CUT else 0)
        found = {self._reached(links, every - {cut}, part) for cut in cuts for part in every - {cut}}
        candidates = [one for one in found if len(one) > 1]
        whole = {self._reached(links, every, k) for k in every}
        hanging = [c for c in candidates if c in whole or not (c & grounded)]
        return [tuple(self.units[k] for k in sorted(c)) for c in sorted(hanging, key=lambda c: (len(c), sorted(c)))]

    def _adjacent(self) -> tuple[dict[int, set[int]], set[int]]:
        """Neighbours of each unit, and the units that touch a station at rest."""
        of: dict[int, set[int]] = defaultdict(set)
        for k, unit in enumerate(self.units):
            for s in unit.stations:
                of[s].add(k)
        links: dict[int, set[int]] = defaultdict(set)
        grounded = set()
        for k, unit in enumerate(self.units):
            near = unit.stations.union(*(self.neighbours[s] for s in unit.stations & self.alive))
            if near & self.resting:
                grounded.add(k)
            for s in near & self.alive:
                links[k] |= of[s] - {k}
        return links, grounded

    @staticmethod
    def _reached(links: dict[int, set[int]], allowed: set[int], start: int) -> frozenset[int]:
        seen, stack = {start}, [start]
        while stack:
            for other in links[stack.pop()] & allowed - seen:
                seen.add(other)
                stack.append(other)
        return frozenset(seen)
