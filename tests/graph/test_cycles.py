"""Loops are a basis of minimal total length: against networkx, and against what a basis must be."""

from __future__ import annotations

import networkx
import numpy as np
import pytest

from adjust.graph.cycles import Cycle, contracted, minimum_basis
from adjust.network import Ints


def random_graph(rng: np.random.Generator, nodes: int, extra: int) -> tuple[Ints, Ints]:
    """A connected graph with lines side by side now and then, and few different sizes, so that ties are common."""
    tree = [(int(rng.integers(0, k)), k) for k in range(1, nodes)]
    more = [tuple(int(i) for i in rng.integers(0, nodes, 2)) for _ in range(extra)]
    ends = np.array([*tree, *(pair for pair in more if pair[0] != pair[1])])
    return ends, rng.integers(1, int(rng.choice([3, 2000])), len(ends))


def total_by_networkx(ends: Ints, size: Ints) -> tuple[int, int]:
    """Number of loops and their total by networkx, which knows no edges side by side: each gets a node in it."""
    graph, n = networkx.Graph(), int(ends.max()) + 1
    for e, ((i, j), s) in enumerate(zip(ends.tolist(), size.tolist(), strict=True)):
        graph.add_edge(i, n + e, weight=s)
        graph.add_edge(n + e, j, weight=s)
    total, loops = 0, networkx.minimum_cycle_basis(graph, weight="weight")
    for loop in loops:
        inside = graph.subgraph(loop)
        total += sum(graph.edges[a, b]["weight"] for a, b in networkx.find_cycle(inside))
    return len(loops), total // 2


def total(cycles: list[Cycle], size: Ints) -> int:
    return int(sum(size[list(one.edges)].sum() for one in cycles))


def rank(cycles: list[Cycle], edges: int) -> int:
    pivots: dict[int, int] = {}
    for one in cycles:
        mask = sum(1 << e for e in one.edges)
        while mask and mask.bit_length() in pivots:
            mask ^= pivots[mask.bit_length()]
        if mask:
            pivots[mask.bit_length()] = mask
    assert edges >= len(pivots)
    return len(pivots)


@pytest.mark.parametrize("seed", range(12))
def test_total_length_is_that_of_networkx(seed: int) -> None:
    rng = np.random.default_rng(seed)
    ends, size = random_graph(rng, int(rng.integers(3, 25)), int(rng.integers(1, 12)))
    found = minimum_basis(ends, size)
    assert (len(found), total(found, size)) == total_by_networkx(ends, size)


@pytest.mark.study
@pytest.mark.parametrize("seed", range(40))
def test_total_length_is_that_of_networkx_up_to_60_stations(seed: int) -> None:
    rng = np.random.default_rng(1000 + seed)
    ends, size = random_graph(rng, int(rng.integers(30, 61)), int(rng.integers(10, 30)))
    found = minimum_basis(ends, size)
    assert (len(found), total(found, size)) == total_by_networkx(ends, size)


def test_a_worse_basis_would_be_noticed() -> None:
    """The total of any other basis of this graph is larger: what the comparison rests on."""
    ends, size = random_graph(np.random.default_rng(3), 12, 8)
    found = minimum_basis(ends, size)
    joined = sorted(set(found[0].edges) ^ set(found[-1].edges))
    assert size[joined].sum() > size[list(found[-1].edges)].sum()
    assert total(found, size) == total_by_networkx(ends, size)[1]


@pytest.mark.parametrize("seed", range(6))
def test_the_loops_are_a_basis_of_closed_walks(seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    ends, size = random_graph(rng, int(rng.integers(40, 200)), int(rng.integers(20, 120)))
    found = minimum_basis(ends, size)
    assert len(found) == rank(found, len(ends)) == len(ends) - ends.max()
    for one in found:
        assert one.nodes[0] == one.nodes[-1] == min(one.nodes)
        assert len(set(one.nodes)) == len(one.edges)
        for e, a, b in zip(one.edges, one.nodes, one.nodes[1:], strict=False):
            assert {a, b} == set(ends[e].tolist())


def test_the_order_of_the_book_does_not_change_the_total() -> None:
    ends, size = random_graph(np.random.default_rng(8), 40, 30)
    mixed = np.random.default_rng(9).permutation(len(ends))
    again = minimum_basis(ends[mixed][:, ::-1], size[mixed])
    assert total(minimum_basis(ends, size), size) == total(again, size[mixed])


def test_two_lines_between_two_stations_are_a_loop_of_two() -> None:
    assert minimum_basis(np.array([(0, 1), (1, 0), (1, 2)]), np.array([5, 6, 7])) == [Cycle((0, 1, 0), (0, 1))]


def test_a_ring_a_tree_and_a_loop_on_a_stalk() -> None:
    ring = np.array([(3, 4), (4, 5), (5, 3)])
    assert minimum_basis(ring, np.array([1, 1, 1])) == [Cycle((3, 4, 5, 3), (0, 1, 2))]
    assert minimum_basis(np.array([(0, 1), (1, 2), (1, 3)]), np.array([1, 1, 1])) == []
    assert minimum_basis(np.empty((0, 2), np.int64), np.empty(0, np.int64)) == []
    stalk = np.array([(0, 1), (1, 2), (2, 3), (3, 1)])
    assert [one.edges for one in minimum_basis(stalk, np.array([9, 1, 1, 1]))] == [(1, 2, 3)]


def test_chains_and_trees_are_taken_together() -> None:
    ends = np.array([(0, 1), (1, 2), (2, 3), (3, 0), (0, 2), (2, 7), (7, 8)])
    chains = contracted(ends, np.ones(7, np.int64))
    assert [(c.edges, c.size) for c in chains] == [((0, 1), 2), ((3, 2), 2), ((4,), 1)]
