"""Bridges of a graph: the edges that are the only way to somewhere (Tarjan 1974), in linear time.

Depth first from a root, low(v) is the earliest station that v or anything behind it reaches by another way; the edge
by which v was reached is a bridge if low(v) comes after its other end. What lies behind it is a run in the order of
visit, so the far side of every bridge is had for nothing.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from adjust.network import Ints


def bridges(count: int, start: Ints, end: Ints, roots: Iterable[int]) -> dict[int, Ints]:
    """Far side, seen from the root of its piece, of every bridge among the edges (start, end) of ``count`` nodes.

    ``roots`` come first, in their order, then whatever they do not reach.
    """
    at: list[list[tuple[int, int]]] = [[] for _ in range(count)]
    for e, (i, j) in enumerate(zip(start.tolist(), end.tolist(), strict=True)):
        at[i].append((e, j))
        at[j].append((e, i))
    order: list[int] = []
    place, low = [-1] * count, [0] * count
    found: dict[int, tuple[int, int]] = {}
    for root in [*roots, *range(count)]:
        if place[root] >= 0:
            continue
        place[root] = low[root] = len(order)
        order.append(root)
        stack = [(root, -1, iter(at[root]))]
        while stack:
            node, by, rest = stack[-1]
            step = next(((e, j) for e, j in rest if e != by), None)
            if step is None:
                stack.pop()
                if stack:
                    above = stack[-1][0]
                    low[above] = min(low[above], low[node])
                    if low[node] > place[above]:
                        found[by] = (place[node], len(order))
                continue
            e, j = step
            if place[j] >= 0:
                low[node] = min(low[node], place[j])
            else:
                place[j] = low[j] = len(order)
                order.append(j)
                stack.append((j, e, iter(at[j])))
    visited = np.array(order, dtype=np.int64)
    return {e: visited[first:last] for e, (first, last) in found.items()}  # views: a long chain has no long copies
