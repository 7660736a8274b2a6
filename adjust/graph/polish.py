"""Robust polish of places: least squares with Cauchy weights, w = 1 / (1 + (r/s)^2), on relative misfits.

Gross errors pull less the farther they miss (Huber, Robust Statistics, section 7; from memory), so the places settle
where most readings agree. Lengths are taken as shares of themselves and pointings in radians, so the weights compare.
"""

from __future__ import annotations

import numpy as np

from adjust.graph.agreement import SPREAD
from adjust.graph.clues import Places
from adjust.graph.misfit import Misfits
from adjust.network import Ints

STEPS = 8
DAMPING = 1e-9
"""Share of the diagonal added to it: what nothing fixes stays where it is."""


def polished(misfits: Misfits, z: Places, known: frozenset[int]) -> Places:
    """Places (n,) complex after some reweighted steps; known and unplaced stations stay."""
    z = z.copy()
    free = np.array([i not in known for i in range(len(z))]) & np.isfinite(z)
    number = np.full(len(z), -1, dtype=np.int64)
    number[free] = np.arange(free.sum())
    spread = 0.03
    for _ in range(STEPS):
        step = _step(misfits, z, number, int(free.sum()), spread)
        if step is None:
            return z
        size = np.abs(step).max(initial=0.0)
        z[free] += step
        spread = max(SPREAD, spread / 2)
        if size < 1e-6:
            break
    return z


def _step(misfits: Misfits, z: Places, number: Ints, n: int, spread: float) -> Places | None:
    """One step (n,) complex of the free stations."""
    from scipy.sparse import coo_array, csc_array, diags_array  # only where a start is in doubt
    from scipy.sparse.linalg import splu

    g = misfits.clues.sets
    with np.errstate(invalid="ignore", divide="ignore"):
        turn = misfits.orientations(z, robust=True)
        d = z[misfits.j] - z[misfits.i]
        by_length = d / np.abs(d) / np.maximum(np.abs(d), misfits.metres)
        s = z[misfits.to] - z[misfits.at]
        by_pointing = (s.imag - 1j * s.real) / np.abs(s) ** 2
        r = np.concatenate([misfits.lengths(z), misfits.pointings(z, turn)])
    by = np.concatenate([by_length, by_pointing])
    start, end = np.concatenate([misfits.i, misfits.at]), np.concatenate([misfits.j, misfits.to])
    ok = np.isfinite(r) & np.isfinite(by)
    if not ok.any() or not n:
        return None
    w = 1.0 / (1.0 + (r[ok] / spread) ** 2)
    k = int(ok.sum())
    rows, columns, values = [], [], []
    for station, sign in ((start[ok], -1.0), (end[ok], 1.0)):
        here = number[station] >= 0
        for part, value in ((0, by[ok].real), (1, by[ok].imag)):
            rows.append(np.flatnonzero(here))
            columns.append(2 * number[station][here] + part)
            values.append(sign * value[here])
    sets = np.concatenate([np.full(len(misfits.i), -1), np.where(misfits.set == misfits.clues.north, -1, misfits.set)])[
        ok
    ]
    turned = np.flatnonzero(sets >= 0)
    rows.append(turned)
    columns.append(2 * n + sets[turned])
    values.append(-np.ones(len(turned)))
    a = coo_array(
        (np.concatenate(values), (np.concatenate(rows), np.concatenate(columns))), shape=(k, 2 * n + g)
    ).tocsc()
    normal = csc_array(a.T @ diags_array(w) @ a)
    diagonal = normal.diagonal()
    normal = csc_array(normal + diags_array(DAMPING * diagonal + np.where(diagonal > 0, 0.0, 1.0)))
    try:
        x = splu(normal).solve(-(a.T @ (w * r[ok])))
    except RuntimeError:  # exactly singular: nothing to gain
        return None
    return np.asarray(x[0 : 2 * n : 2] + 1j * x[1 : 2 * n : 2]) if np.isfinite(x).all() else None
