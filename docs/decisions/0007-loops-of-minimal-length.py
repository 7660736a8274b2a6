"""How long do the loops of minimal total length take, by this program and by networkx, on grids of junctions?

python docs/decisions/0007-loops-of-minimal-length.py [JUNCTIONS ...]

That both find the same total length is compared in tests/graph/test_cycles.py.
"""

from __future__ import annotations

import sys
import time

import networkx
import numpy as np

from adjust.graph.cycles import minimum_basis

shapes = {30: (5, 6), 60: (6, 10), 100: (10, 10)}
wanted = [int(text) for text in sys.argv[1:]] or list(shapes)
rng = np.random.default_rng(7)

print("a square grid of junctions, lines of 200 to 1500 m in whole millimetres; seconds")
for junctions in wanted:
    rows, columns = shapes.get(junctions, (3, junctions // 3))
    number = np.arange(rows * columns).reshape(rows, columns)
    ends = np.concatenate(
        [
            np.stack([number[:, :-1].ravel(), number[:, 1:].ravel()], axis=1),
            np.stack([number[:-1].ravel(), number[1:].ravel()], axis=1),
        ]
    )
    size = rng.integers(200_000, 1_500_000, len(ends))
    begin = time.perf_counter()
    own = minimum_basis(ends, size)
    middle = time.perf_counter()
    graph = networkx.Graph()
    for (a, b), s in zip(ends.tolist(), size.tolist(), strict=True):
        graph.add_edge(a, b, weight=s)
    networkx.minimum_cycle_basis(graph, weight="weight")
    end = time.perf_counter()
    here, there = middle - begin, end - middle
    print(f"{rows * columns:3d} junctions, {len(own):2d} loops: {here:.3f} here, {there:.2f} by networkx")
