"""Chains of levelled lines that only one closure checks, and the one more line that would split each best.

If raising some stations U together changes two readings e and f only, then A'Pv = 0 in that direction gives
(Pv)_e = -+(Pv)_f for every set of readings: their statistics are correlated +-1 and no test tells a slip in e from one
in f. In the graph of rises, all known heights one node, such lines are the pairs of edges whose removal cuts the graph;
"cuts or equal" is an equivalence, and each of its classes lies on one ring of pieces. The classes are found by one
depth first search (cycle space sampling, Pritchard and Thurimella 2011): every edge beside the tree gets a random word
r, every tree edge the sum modulo 2 of the words of the edges that bridge it,

    word(t) = xor of r over the edges beside the tree from below t to above t;  0: a bridge;  equal words: one class.

With 128 bits two classes share a word with probability below 1e-30 for a million edges. One more line between two
pieces of a ring parts its lines in two: those on the one way round and those on the other.
"""

from __future__ import annotations

import random
from collections import defaultdict
from dataclasses import dataclass
from functools import cached_property
from itertools import accumulate, pairwise

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from adjust.graph.parts import HEIGHT, row_nodes
from adjust.graph.runs import Lines
from adjust.judge.unchecked import known_stations
from adjust.network import Array, Bools, Ints, Network
from adjust.solver.solution import Solution

BITS = 128
MOST_SHOWN = 12
"""Stations of a chain that are named; of longer ones the first and the last half of these."""


@dataclass(frozen=True)
class Chain:
    """Levelled lines that only one closure checks together."""

    stations: tuple[int, ...]
    """As walked, home to home; where a longer piece of the network lies between two lines, both its ends follow each
    other."""
    rows: tuple[int, ...]
    """Scalar rows of the lines, as walked."""
    tie: tuple[int, int] | None
    """The one more line that splits best; None where no lasting mark lies between its ends."""
    split: tuple[int, int]
    """Lines on both sides of it; (0, all) without one."""
    sentence: str
    walk: str
    """The lines in words: A-B-C-A."""


def chains(solution: Solution) -> tuple[Chain, ...]:
    """All chains of two or more levelled lines of a solution, in the order of their first lines.

    In linear time but for the nearest station in the plane, which is looked for among all.
    """
    lines = Lines.of(solution.network)
    if len(lines.row) < 2:
        return ()
    net = _Net.of(solution, lines)
    found = [_Ring.of(net, edges) for edges in net.search.classes()]
    told = _Told(solution, net, lines)
    return tuple(sorted((told.chain(ring) for ring in found), key=lambda c: min(c.rows)))


@dataclass(frozen=True)
class _Net:
    """The graph of rises: node (n + 1,) of every station and, last, of all known heights; ends (m, 2) of the lines."""

    node: Ints
    ends: Ints
    search: _Search

    @classmethod
    def of(cls, solution: Solution, lines: Lines) -> _Net:
        """Stations joined by anything but a levelled line with an error count as one node."""
        network, n = solution.network, len(solution.names)
        known = np.flatnonzero(known_stations(solution, HEIGHT))
        i, j = _other_ties(network, lines, solution.design.held)
        i, j = np.concatenate([i, known]), np.concatenate([j, np.full(len(known), n)])
        graph = coo_array((np.ones(len(i)), (i, j)), shape=(n + 1, n + 1))
        count, label = connected_components(graph, directed=False)
        node = np.asarray(label, dtype=np.int64)
        ends = node[lines.ends]
        ends[solution.design.held[lines.row]] = 0  # a loop at one node: no part of any ring
        return cls(node, lines.ends, _Search(count, ends, int(node[n])))

    @cached_property
    def place(self) -> Ints:
        """(n,) place of every station's node in the order of visit."""
        return np.array(self.search.place)[self.node[:-1]]


def _other_ties(network: Network, lines: Lines, held: Bools) -> tuple[Ints, Ints]:
    """Pairs of stations whose heights a reading ties that is no levelled line, or one without an error."""
    free = np.zeros(len(network.rows), dtype=bool)
    free[lines.row] = ~held[lines.row]
    rows, nodes = row_nodes(network)
    mine = (nodes % 2 == HEIGHT) & ~free[rows]
    rows, stations = rows[mine], nodes[mine] // 2
    order = np.argsort(rows, kind="stable")
    rows, stations = rows[order], stations[order]
    same = rows[1:] == rows[:-1]
    return stations[:-1][same], stations[1:][same]


class _Search:
    """Depth first search of the graph: order of visit, sizes of what lies behind, words of the edges."""

    def __init__(self, count: int, ends: Ints, root: int) -> None:
        self.at: list[list[tuple[int, int]]] = [[] for _ in range(count)]
        self.ends = ends.tolist()
        for e, (i, j) in enumerate(self.ends):
            if i != j:
                self.at[i].append((e, j))
                self.at[j].append((e, i))
        self.place, self.size = [-1] * count, [1] * count
        self.order: list[int] = []
        self.by, self.above, self.root = [-1] * count, [-1] * count, list(range(count))
        for one in [root, *range(count)]:
            if self.place[one] < 0:
                self._visit(one)
        self.word = self._words(count)

    def _visit(self, root: int) -> None:
        stack = [(root, iter(self.at[root]))]
        self.place[root] = len(self.order)
        self.order.append(root)
        while stack:
            node, rest = stack[-1]
            step = next(((e, j) for e, j in rest if self.place[j] < 0), None)
            if step is None:
                stack.pop()
                if stack:
                    self.size[stack[-1][0]] += self.size[node]
                continue
            e, j = step
            self.by[j], self.above[j], self.root[j] = e, node, root
            self.place[j] = len(self.order)
            self.order.append(j)
            stack.append((j, iter(self.at[j])))

    def _words(self, count: int) -> list[int]:
        draw = random.Random(1)  # any seed: equal words by chance are not to be met
        tree, word, behind = set(self.by), [0] * len(self.ends), [0] * count
        for e, (i, j) in enumerate(self.ends):
            if i != j and e not in tree:
                word[e] = draw.getrandbits(BITS)
                behind[i] ^= word[e]
                behind[j] ^= word[e]
        for node in reversed(self.order):
            if self.by[node] >= 0:
                word[self.by[node]] = behind[node]
                behind[self.above[node]] ^= behind[node]
        return word

    def classes(self) -> list[list[int]]:
        """Edges of every class of two or more, tree edges from the root outwards, then the one beside the tree."""
        found = defaultdict(list)
        for node in self.order:
            if self.by[node] >= 0 and self.word[self.by[node]]:
                found[self.word[self.by[node]]].append(self.by[node])
        tree = set(self.by)
        for e, word in enumerate(self.word):
            if word and e not in tree and word in found:
                found[word].append(e)
        return [edges for edges in found.values() if len(edges) > 1]

    def far(self, e: int) -> int:
        """The outer node of a tree edge, -1 of an edge beside the tree."""
        i, j = self.ends[e]
        return j if self.by[j] == e else i if self.by[i] == e else -1


@dataclass(frozen=True)
class _Ring:
    """A class as a ring from home to home: edges in order, pieces[k] between edges k - 1 and k, pieces[0] is home."""

    edges: list[int]
    pieces: list[list[tuple[int, int]]]
    """Runs [first, last) in the order of visit."""

    @classmethod
    def of(cls, net: _Net, edges: list[int]) -> _Ring:
        """Order a class; home is where the known heights are, else the largest piece."""
        s = net.search
        tops = [s.far(e) for e in edges if s.far(e) >= 0]
        root = s.root[tops[0]]
        spans = [(s.place[v], s.place[v] + s.size[v]) for v in (root, *tops)]
        nested = [[(a, c), (d, b)] for (a, b), (c, d) in pairwise(spans)]
        pieces = [*nested, [spans[-1]]]
        if len(tops) == len(edges):  # more than one edge leads back: the last piece hangs together with the first
            pieces = [[*pieces[0], *pieces[-1]], *pieces[1:-1]]
        sizes = [sum(b - a for a, b in piece) for piece in pieces]
        home = 0 if root == s.order[0] else int(np.argmax(sizes))  # the search began at the known heights
        edges, pieces = edges[home:] + edges[:home], pieces[home:] + pieces[:home]
        if edges[0] > edges[-1]:  # as booked, as far as it goes
            edges, pieces = edges[::-1], [pieces[0], *pieces[:0:-1]]
        return cls(edges, pieces)


@dataclass(frozen=True)
class _Told:
    """Rings of a solution as chains with their ties and words."""

    solution: Solution
    net: _Net
    lines: Lines

    def chain(self, ring: _Ring) -> Chain:
        """One ring."""
        walked = self._walked(ring)
        runs = _runs(walked)
        rows = tuple(int(self.lines.row[e]) for e in ring.edges)
        tie, split = self._tie(ring, walked)
        stations = tuple(i for run in runs for i in run)
        what = "levelled lines" if all(self._lasting[i] for i in stations) else "set-ups"
        walk = ", ".join(self._named(run) for run in runs)
        return Chain(stations, rows, tie, split, self._words(what, walk, tie, split), walk)

    def _walked(self, ring: _Ring) -> list[tuple[int, int]]:
        """Stations of every line in the direction walked."""
        out = []
        for piece, e in zip(ring.pieces, ring.edges, strict=True):
            i, j = self.net.ends[e].tolist()
            out.append((i, j) if self._inside(piece, i) else (j, i))
        return out

    def _inside(self, piece: list[tuple[int, int]], station: int) -> bool:
        place = self.net.place[station]
        return any(a <= place < b for a, b in piece)

    # ---- the tie

    def _tie(self, ring: _Ring, walked: list[tuple[int, int]]) -> tuple[tuple[int, int] | None, tuple[int, int]]:
        """The line from a lasting mark of the ring home that makes the larger variance least, then the number."""
        count = len(walked)
        before = list(accumulate(self.lines.variance[ring.edges].tolist()))
        best = min(
            ((round(max(v, before[-1] - v) / before[-1], 9), max(k, count - k), k)  # equal but for rounding is equal
             for k, v in enumerate(before[:-1], 1) if self._lasting[walked[k - 1][1]]), default=None,
        )  # fmt: skip
        if best is None:
            return None, (0, count)
        k = best[2]
        first, last = walked[0][0], walked[-1][1]
        ends = [first, last] if 2 * before[k - 1] <= before[-1] else [last, first]
        to = self._nearest(walked[k - 1][1], ring.pieces[0], ends)
        return (None, (0, count)) if to is None else ((walked[k - 1][1], to), (k, count - k))

    def _nearest(self, station: int, piece: list[tuple[int, int]], ends: list[int]) -> int | None:
        """The lasting mark of a piece that is nearest in the plane, else the first of its ends that lasts."""
        away = ((self._plane[self._placed] - self._plane[station]) ** 2).sum(axis=1)
        inside = np.any([(a <= self._placed_at) & (self._placed_at < b) for a, b in piece], axis=0)
        if np.isfinite(away[inside]).any():
            return int(self._placed[np.where(inside, away, np.inf).argmin()])
        return next((i for i in ends if self._lasting[i]), None)

    @cached_property
    def _lasting(self) -> list[bool]:
        """Stations that are no change points private to a line of a level book."""
        private = self.solution.job.private
        return [name not in private for name in self.solution.names]

    @cached_property
    def _plane(self) -> Array:
        """(n, 2) adjusted places, else those given, else NaN."""
        places, given = self.solution.positions, self.solution.network.stations.start
        return np.where(np.isnan(places), given, places)[:, :2]

    @cached_property
    def _placed(self) -> Ints:
        """Lasting stations that have a place."""
        return np.flatnonzero(np.isfinite(self._plane).all(axis=1) & np.array(self._lasting))

    @cached_property
    def _placed_at(self) -> Ints:
        """Their places in the order of visit."""
        return self.net.place[self._placed]

    # ---- in words

    def _words(self, what: str, walk: str, tie: tuple[int, int] | None, split: tuple[int, int]) -> str:
        """What cannot be told apart, and what would help."""
        count = sum(split)
        of = "either of the 2" if count == 2 else f"any of the {count}"
        same = f"A slip in {of} {what} {walk} looks the same: their one closure cannot tell which."
        if tie is None:
            return f"{same} No mark that lasts lies between: only levelling a part of it again can tell."
        i, j = (self.solution.names[k] for k in tie)
        return f"{same} One more line from {i} to {j} would split them best, {split[0]} and {split[1]}."

    def _named(self, run: list[int]) -> str:
        """A-B-C without the change points between marks, or both ends of a long one."""
        inner = [i for i in run[1:-1] if self._lasting[i]]
        names = [self.solution.names[i] for i in (run[0], *inner, run[-1])]
        if len(names) > MOST_SHOWN:
            names = [*names[: MOST_SHOWN // 2], "...", *names[-MOST_SHOWN // 2 :]]
        return "-".join(names)


def _runs(walked: list[tuple[int, int]]) -> list[list[int]]:
    """Lines as stations in runs without a gap."""
    runs: list[list[int]] = []
    for i, j in walked:
        if runs and runs[-1][-1] == i:
            runs[-1].append(j)
        else:
            runs.append([i, j])
    return runs
