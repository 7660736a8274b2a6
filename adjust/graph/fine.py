"""Two solutions compared by the standard deviations of the readings, each adjusted as far as it goes.

The Cauchy cost of starts counts a reading as foreign from 0.001 of its length on. Where a thin network has two places
that differ by less in every reading, the readings themselves still tell them apart: by v'Pv of two least-squares
solutions, of which the wrong one is many standard deviations off. Large misfits are damped, 9 log(1 + (r/3 sd)^2), so
that a gross error, which both solutions have, does not drown the rest.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array, csc_array, diags_array
from scipy.sparse.linalg import splu

from adjust.graph.clues import Places
from adjust.graph.misfit import Misfits
from adjust.network import Array, Ints

STEPS = 60
TIMES, MORE = 1.1, 20.0
"""A solution is worse than another when its cost is more than this many times the other's, and this much more. The
sum of squares of a right solution is its degrees of freedom, give or take; control that moves and centring, which are
left out here, make it larger in both solutions alike."""


def worse(cost: float, than: float) -> bool:
    """Whether one fine cost is clearly above another."""
    return cost > TIMES * than + MORE


class Fine:
    """Readings with their standard deviations, for adjusting places (n,) of which some are fixed."""

    def __init__(self, misfits: Misfits, fixed: frozenset[int], n: int) -> None:
        self.m = misfits
        blocks, sources = misfits.clues.network.blocks, misfits.clues.sources
        sd = [float(blocks[b].sd[row, 0]) for b, row in (sources[s] for s in misfits.source.tolist())]
        self.sd = np.maximum(np.nan_to_num(np.array(sd, dtype=float), nan=1e-3), 1e-7)
        self.start = np.concatenate([misfits.i, misfits.at])
        self.end = np.concatenate([misfits.j, misfits.to])
        self.free = np.array([i not in fixed for i in range(n)])
        self.sets: Ints = np.concatenate(
            [np.full(len(misfits.i), -1), np.where(misfits.set == misfits.clues.north, -1, misfits.set)]
        ).astype(np.int64)

    def residuals(self, z: Places, turn: Array) -> Array:
        """Computed minus observed in standard deviations, NaN where an end is not placed."""
        with np.errstate(invalid="ignore"):
            lengths = np.abs(z[self.m.j] - z[self.m.i]) - self.m.metres
            return np.asarray(np.concatenate([lengths, self.m.pointings(z, turn)]) / self.sd)

    @staticmethod
    def cost(r: Array) -> float:
        """Damped sum of squares."""
        return float(9 * np.log1p((r[np.isfinite(r)] / 3) ** 2).sum())

    def adjusted(self, z: Places) -> tuple[Places, float]:
        """Places of least cost from ``z`` by damped steps, and the cost."""
        z = z.copy()
        free = self.free & np.isfinite(z)
        number = np.full(len(z), -1, dtype=np.int64)
        number[free] = np.arange(free.sum())
        with np.errstate(invalid="ignore"):
            turn = self.m.orientations(z, robust=True)
        r, damping = self.residuals(z, turn), 1e-6
        cost = self.cost(r)
        for _ in range(STEPS):
            step = self._step(z, r, number, int(free.sum()), damping)
            if step is None:
                break
            tried, turned = z.copy(), turn + step[2 * int(free.sum()) :]
            tried[free] += step[0 : 2 * free.sum() : 2] + 1j * step[1 : 2 * free.sum() : 2]
            turned[self.m.clues.north] = 0.0
            r_tried = self.residuals(tried, turned)
            after = self.cost(r_tried)
            if after < cost:
                small = cost - after < 1e-6 * (1 + cost)
                z, turn, r, cost, damping = tried, turned, r_tried, after, max(damping / 10, 1e-10)
                if small:
                    break
            elif damping > 1e4:
                break
            else:
                damping *= 10
        return z, cost

    def _step(self, z: Places, r: Array, number: Ints, n: int, damping: float) -> Array | None:
        lengths = len(self.m.i)
        with np.errstate(invalid="ignore", divide="ignore"):
            d = z[self.end] - z[self.start]
            by = np.concatenate([
                d[:lengths] / np.abs(d[:lengths]),
                (d[lengths:].imag - 1j * d[lengths:].real) / np.abs(d[lengths:]) ** 2,
            ]) / self.sd  # fmt: skip
        ok = np.isfinite(r) & np.isfinite(by)
        if not ok.any() or not n:
            return None
        rows, columns, values = [], [], []
        for ends, sign in ((self.start, -1.0), (self.end, 1.0)):
            here = np.flatnonzero(ok & (number[ends] >= 0))
            for part, value in ((0, by.real), (1, by.imag)):
                rows.append(here)
                columns.append(2 * number[ends[here]] + part)
                values.append(sign * value[here])
        turned = np.flatnonzero(ok & (self.sets >= 0))
        rows.append(turned)
        columns.append(2 * n + self.sets[turned])
        values.append(-1.0 / self.sd[turned])
        shape = (len(r), 2 * n + self.m.clues.sets)
        a = coo_array((np.concatenate(values), (np.concatenate(rows), np.concatenate(columns))), shape=shape).tocsc()
        l = np.where(ok, r, 0.0)
        w = 1.0 / (1.0 + (l / 3) ** 2)
        normal = csc_array(a.T @ diags_array(w) @ a)
        diagonal = normal.diagonal()
        normal = csc_array(normal + diags_array(damping * diagonal + np.where(diagonal > 0, 0.0, 1.0)))
        try:
            step = np.asarray(splu(normal).solve(-(a.T @ (w * l))))
        except RuntimeError:  # exactly singular: nothing to gain
            return None
        return step if np.isfinite(step).all() else None
