"""Do normal equations with a sparse factor cost a surveyor any digit? Against orthogonal factorisation.

python docs/decisions/0003-normal-equations.py [NETWORKS]     from the folder of the checkout
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

import numpy as np

sys.path.append(str(Path(__file__).parents[2]))
import adjust
from adjust.solver.threads import one_thread
from tests.networks import random_job

KINDS = (("distances", "directions"), ("distances", "angles"), ("distances",), ("distances", "azimuths"))


def rows(solution: adjust.Solution) -> tuple[np.ndarray, np.ndarray]:
    """Whitened readings A* and misclosures l* at the answer, dense."""
    A = np.zeros((len(solution.network.rows), solution.design.unknowns.count + 1))
    misclosure = np.zeros(len(A))
    for w in solution.whitened:
        np.add.at(A, (w.batch.rows[:, :, None], w.batch.columns[:, None, :]), w.reduced)
        misclosure[w.batch.rows] = w.reduced_l
    return A[:, :-1], misclosure


count = int(sys.argv[1]) if len(sys.argv) > 1 else 50
condition, moved, spread = [], [], []
with tempfile.TemporaryDirectory() as folder, one_thread():
    for k in range(count):
        rng = np.random.default_rng([3, k])
        made = random_job(rng, Path(folder) / str(k), int(rng.integers(4, 41)), KINDS[k % len(KINDS)], "held")
        solution = adjust.solve(adjust.read(made.folder))
        A, misclosure = rows(solution)
        used = np.linalg.norm(A, axis=0) > 0
        size = np.linalg.norm(A[:, used], axis=0)
        q, r = np.linalg.qr(A[:, used] / size)
        condition.append(float(np.linalg.cond(r)))
        moved.append(float(np.abs(np.linalg.solve(r, q.T @ misclosure) / size).max()))
        inverse = np.linalg.inv(r) / size[:, None]
        ours = solution.cofactors.entries(np.flatnonzero(used), np.flatnonzero(used))
        spread.append(float(np.abs(ours / np.einsum("ij,ij->i", inverse, inverse) - 1).max()))
print(f"{count} networks of 4 to 40 stations on held control")
print(f"condition number of the scaled readings: median {np.median(condition):.0f}, largest {max(condition):.0f}")
print(f"one more step by orthogonal factorisation at the answer moves an unknown by at most {max(moved):.1e}")
print(f"variances from both differ by at most {max(spread):.1e} of themselves")
