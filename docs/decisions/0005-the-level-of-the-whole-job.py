"""How often would a job without any blunder end with exit code 1, if every reading's own test decided?

python docs/decisions/0005-the-level-of-the-whole-job.py [DRAWS]
"""

from __future__ import annotations

import sys

import numpy as np
from scipy.special import ndtri

OUTLIER, SIGNIFICANCE = 0.001, 0.05
draws = int(sys.argv[1]) if len(sys.argv) > 1 else 2000


def level_net(rows: int, columns: int) -> np.ndarray:
    """Readings of a levelled grid by heights (n, u); the first point is the bench mark."""
    number = np.arange(rows * columns).reshape(rows, columns)
    lines = [*zip(number[:, :-1].ravel(), number[:, 1:].ravel(), strict=True)]
    lines += [*zip(number[:-1].ravel(), number[1:].ravel(), strict=True)]
    A = np.zeros((len(lines), rows * columns))
    for i, (start, end) in enumerate(lines):
        A[i, start], A[i, end] = -1.0, 1.0
    return A[:, 1:]


print(f"{draws} draws of normal errors each; share of jobs with at least one suspect")
for shape in ((3, 4), (9, 10), (18, 15)):
    A = level_net(*shape)
    n = len(A)
    q, _ = np.linalg.qr(A)
    redundancy = 1 - np.einsum("ij,ij->i", q, q)
    errors = np.random.default_rng([5, n]).standard_normal((n, draws))
    largest = (np.abs(errors - q @ (q.T @ errors)) / np.sqrt(redundancy)[:, None]).max(axis=0)
    plain = -ndtri(OUTLIER / 2)
    job = -ndtri((1 - (1 - SIGNIFICANCE) ** (1 / n)) / 2)
    print(f"{n:4d} readings: beyond {plain:.2f} (plain) {100 * (largest > plain).mean():5.1f} %, "
          f"beyond {job:.2f} (job's level) {100 * (largest > job).mean():4.1f} %")  # fmt: skip
