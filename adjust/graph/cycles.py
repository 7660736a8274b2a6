"""Loops of lines: a basis of minimal total length of the cycle space of a graph, exact and with whole numbers.

The cycles of a graph with m edges, n nodes and c pieces are a space over GF(2) of mu = m - n + c dimensions, and the
independent sets of cycles form a matroid, so going through a set of *candidates* by size and taking what does not
depend on what was taken gives a basis of minimal total size, if for every L the candidates of size <= L span all
cycles of size <= L (Horton 1987, A polynomial-time algorithm to find the shortest cycle basis of a graph).

**Candidates.** For a root v take one tree of shortest paths, and for every other edge (x, y) whose ends lie on
different branches the cycle v..x-y..v, of size d(x) + size(x, y) + d(y). Then remove v and go on with the next root.
Proof, by the order of removal: let C be a cycle of size L whose first removed node is v, so that C lies in what is left
when v's turn comes. C is the sum over its edges of the cycles that they close with the tree; walking from v both ways
round C, no d is larger than the way along C, so each of these closed walks has size <= L. The walks whose ends share a
branch contain a cycle that avoids v, smaller than L, which later candidates span; the others are candidates of v.
Nothing was asked of ties: any tree of shortest paths will do. Lines side by side are edges of their own.

**Search in rounds.** With L given, only nodes within L/2 of a root matter. L starts at the mean loop and grows
by half until mu cycles are found; a round takes only what is longer than the last one's L. A cycle that is not spanned
yet has an edge outside the spanning forest whose own cycle with the forest is not spanned (the sum would be), so
after the first round one end of every such edge is enough as a root. So the work is that of small neighbourhoods where
loops are small, as they are in the field.

**Before that** stations that only one line leads to are stripped, and chains through stations with two lines become
one edge each; neither changes the cycle space. A chain that ends where it began is a cycle by itself.
"""

from __future__ import annotations

import heapq
from dataclasses import dataclass
from typing import NamedTuple

from adjust.network import Ints

METHOD = "shortest-path-tree candidates, reduced modulo two"
"""How the loops were found, for the record."""


class Cycle(NamedTuple):
    """A closed walk: ``nodes`` (k + 1) with the first again at the end, and ``edges`` (k) between them."""

    nodes: tuple[int, ...]
    edges: tuple[int, ...]


@dataclass(frozen=True)
class Chain:
    """Edges in a row through nodes with no other edge, from ``a`` to ``b``."""

    a: int
    b: int
    edges: tuple[int, ...]
    size: int


class _Found(NamedTuple):
    """A candidate; candidates are ordered by size, then by the number of chains, then by their numbers."""

    size: int
    length: int
    """Number of chains."""
    chains: tuple[int, ...]
    mask: int


def minimum_basis(ends: Ints, size: Ints) -> list[Cycle]:
    """A minimum cycle basis of the graph with edges ``ends`` (m, 2), whole ``size`` (m,) above zero.

    Edges from a node to itself take no part. The cycles come by size; each begins at its lowest node and goes on
    along its lowest edge there.
    """
    chains = contracted(ends, size)
    basis = [(c.size, c.edges) for c in chains if c.a == c.b]
    through = [c for c in chains if c.a != c.b]
    for one in _Reduction(through).basis():
        basis.append((one.size, tuple(e for i in one.chains for e in through[i].edges)))
    pairs = ends.tolist()
    return [walked(edges, pairs) for _, edges in sorted(basis)]


def contracted(ends: Ints, size: Ints) -> list[Chain]:
    """The graph without its trees, its chains as one edge each, in the order of their lowest edges."""
    pairs, sizes = ends.tolist(), size.tolist()
    at: dict[int, dict[int, int]] = {}
    for e, (i, j) in enumerate(pairs):
        if i != j:
            at.setdefault(i, {})[e] = j
            at.setdefault(j, {})[e] = i
    _strip(at, sorted(at))
    chains, used = [], set[int]()
    junctions = [i for i in sorted(at) if len(at[i]) > 2]
    for i in [*junctions, *sorted(at)]:  # what no junction reaches is a ring
        for e in at[i]:
            if e not in used:
                chains.append(_chain(at, i, e, sizes))
                used.update(chains[-1].edges)
    return sorted(chains, key=lambda c: min(c.edges))


def _strip(at: dict[int, dict[int, int]], nodes: list[int]) -> None:
    """Remove nodes with fewer than two edges, and what that leaves with fewer than two."""
    while nodes:
        i = nodes.pop()
        if i in at and len(at[i]) < 2:
            for e, j in at.pop(i).items():
                del at[j][e]
                nodes.append(j)


def _chain(at: dict[int, dict[int, int]], start: int, edge: int, sizes: list[int]) -> Chain:
    """Follow the edge through nodes with two edges to the next junction, or round to the start."""
    edges, here = [edge], at[start][edge]
    while here != start and len(at[here]) == 2:
        edge = next(e for e in at[here] if e != edge)
        edges.append(edge)
        here = at[here][edge]
    return Chain(start, here, tuple(edges), sum(sizes[e] for e in edges))


class _Reduction:
    """The greedy choice among the candidates of a graph of chains."""

    def __init__(self, chains: list[Chain]) -> None:
        self.chains = chains
        self.size = [c.size for c in chains]
        self.near: dict[int, dict[int, int]] = {}
        for k, c in enumerate(chains):
            self.near.setdefault(c.a, {})[k] = c.b
            self.near.setdefault(c.b, {})[k] = c.a
        self.bit = self._bits()
        self.rank = sum(b > 0 for b in self.bit)

    def _bits(self) -> list[int]:
        """A bit for every chain outside a spanning forest, 0 inside: they tell cycles apart, sums are exclusive ors."""
        bits, seen, count = [-1] * len(self.chains), set[int](), 0
        for root in self.near:
            if root in seen:
                continue
            seen.add(root)
            queue = [root]
            for i in queue:
                for k, j in self.near[i].items():
                    if j not in seen:
                        seen.add(j)
                        queue.append(j)
                        bits[k] = 0
                    elif bits[k] < 0:
                        bits[k] = 1 << count
                        count += 1
        return bits

    def basis(self) -> list[_Found]:
        """The chosen candidates by size."""
        taken: list[_Found] = []
        pivots: dict[int, int] = {}
        done, limit = 0, 2 * sum(self.size) // max(self.rank, 1)
        roots = set(self.near)
        while len(taken) < self.rank:
            for one in sorted(self._candidates(roots, done, limit)):
                if mask := _rest(one.mask, pivots):
                    pivots[mask.bit_length()] = mask
                    taken.append(one)
                    if len(taken) == self.rank:
                        break
            done, limit = limit, limit + limit // 2 + 1
            roots = self._roots(pivots)
        return taken

    def _roots(self, pivots: dict[int, int]) -> set[int]:
        """One end of every chain outside the forest whose own cycle with the forest is not spanned yet."""
        out: set[int] = set()
        for chain, bit in zip(self.chains, self.bit, strict=True):
            if bit and chain.a not in out and chain.b not in out and _rest(bit, pivots):
                out.add(chain.a)
        return out

    def _candidates(self, roots: set[int], above: int, limit: int) -> set[_Found]:
        """Candidates of a size in (above, limit]."""
        near = {i: dict(to) for i, to in self.near.items()}
        found: set[_Found] = set()
        for root in sorted(roots, key=lambda i: (-len(near[i]), i)):
            if root in near:
                found |= self._from(root, near, above, limit)
                after = list(near[root].values())
                for k, j in near.pop(root).items():
                    del near[j][k]
                _strip(near, after)
        return found

    def _from(self, root: int, near: dict[int, dict[int, int]], above: int, limit: int) -> set[_Found]:
        """Candidates of one root: a tree of shortest paths as far as half the limit, and the chains that close it."""
        size = self.size
        distance: dict[int, int] = {}
        tree: dict[int, tuple[int, int]] = {}  # chain towards the root, and the node it comes from
        branch: dict[int, int] = {}
        heap: list[tuple[int, int, int, int]] = [(0, root, -1, -1)]
        best = {root: 0}
        found = set()
        while heap:
            d, here, up, before = heapq.heappop(heap)
            if here in distance:
                continue
            distance[here], tree[here] = d, (up, before)
            mine = branch[here] = up if before in (root, -1) else branch[before]
            for k, there in near[here].items():
                along = d + size[k]
                if there in distance:  # the later end of a chain that is no branch of the tree sees it close
                    if k != up and branch[there] != mine and above < along + distance[there] <= limit:
                        path = (*_path(tree, here), k, *_path(tree, there))
                        found.add(self._found(along + distance[there], path))
                elif 2 * along <= limit and along < best.get(there, limit):
                    best[there] = along
                    heapq.heappush(heap, (along, there, k, here))
        return found

    def _found(self, size: int, chains: tuple[int, ...]) -> _Found:
        mask = 0
        for k in chains:
            mask ^= self.bit[k]
        return _Found(size, len(chains), tuple(sorted(chains)), mask)


def _rest(mask: int, pivots: dict[int, int]) -> int:
    """What is left of a cycle after the chosen ones: 0 if they span it."""
    while mask and (pivot := pivots.get(mask.bit_length())):
        mask ^= pivot
    return mask


def _path(tree: dict[int, tuple[int, int]], here: int) -> list[int]:
    """Chains from a node to the root."""
    out = []
    while (step := tree[here])[1] >= 0:
        out.append(step[0])
        here = step[1]
    return out


def walked(edges: tuple[int, ...], ends: list[list[int]]) -> Cycle:
    """The edges of a cycle in the order of a walk from its lowest node along its lowest edge there."""
    at: dict[int, list[int]] = {}
    for e in sorted(edges):
        for i in ends[e]:
            at.setdefault(i, []).append(e)
    here = min(at)
    nodes, order, e = [here], [at[here][0]], at[here][0]
    while True:
        here = sum(ends[e]) - here
        nodes.append(here)
        if here == nodes[0]:
            return Cycle(tuple(nodes), tuple(order))
        one, other = at[here]
        e = one if one != e else other
        order.append(e)
