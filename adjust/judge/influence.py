"""How an error in the readings shows in the residuals, and extra unknowns tested without adjusting again.

With the projection R = I - A* Q A*' - Q_B Q_B' of the whitened rows (adjust.judge.reliability) and P = L^-T L^-1,

    P v = -M l        M = P Q_vv P = L^-T R L^-1        -P Q_vv e = M-column: what an error in one reading does to all.

Let the readings have the errors E b with known columns E (R, p), one a reading, a mark or a systematic effect. As p
more unknowns b of the same adjustment (mean shift; Baarda 1968, Cook and Weisberg 1982, section 2.2.2, Koch 1999,
section 4.5)

    K = E'M E        b = -K^-1 E'P v        cov b = K^-1        the weighted square sum falls by T = b'K b,

where T has the chi-square distribution with p degrees of freedom if there are no such errors; for p = 1 sqrt(T) is the
one-reading statistic. E'M F couples two sets of such unknowns: with b taken out, P v becomes P v + M E b and the M of
all others M - M E K^-1 E'M.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.network import Array, Bools, Ints
from adjust.solver.cofactors import Cofactors
from adjust.solver.elements import Whitened
from adjust.solver.solution import Solution


@dataclass(frozen=True)
class Influence:
    """M of elements as an operator; conditions (``held``, (R,)) count as readings without an error."""

    whitened: list[Whitened]
    cofactors: Cofactors
    held: Bools

    @classmethod
    def of(cls, solution: Solution) -> Influence:
        """That of a solution."""
        return cls(solution.whitened, solution.cofactors, solution.design.held)

    def times(self, errors: Array) -> Array:
        """M E (R, p) for errors E (R, p), each in its reading's metres or radians."""
        errors = np.where(self.held[:, None], 0.0, errors)
        p = errors.shape[1]
        load = np.zeros((len(self.cofactors.reduced) + 1, p))
        parts = []
        for w in self.whitened:
            z = _whitened(w, errors[w.batch.rows])
            z -= w.q @ (w.q.transpose(0, 2, 1) @ z)
            parts.append(z)
            if z.any():
                np.add.at(load, w.batch.columns, w.reduced.transpose(0, 2, 1) @ z)
        moved = np.concatenate([self.cofactors.times(load[:-1]), np.zeros((1, p))])
        out = np.zeros_like(errors)
        for w, z in zip(self.whitened, parts, strict=True):
            out[w.batch.rows] = _transposed(w, z - w.reduced @ moved[w.batch.columns])
        out[self.held] = 0.0
        return out

    def weights(self, errors: Array) -> Array:
        """E_j'P E_j (p,) of every column alone: what would be left in E_j'M E_j if no unknown took anything up."""
        errors = np.where(self.held[:, None], 0.0, errors)
        return np.asarray(sum(
            ((_whitened(w, errors[w.batch.rows]) ** 2).sum(axis=(0, 1)) for w in self.whitened),
            np.zeros(errors.shape[1]),
        ))  # fmt: skip

    def variances(self, values: Array) -> Array:
        """z_j'C z_j (p,) of every column (R, p); of M E it is E_j'M C M E_j, which must be E_j'M E_j again."""
        return np.asarray(sum(
            (((w.factor.transpose(0, 2, 1) @ values[w.batch.rows]) ** 2).sum(axis=(0, 1)) for w in self.whitened),
            np.zeros(values.shape[1]),
        ))  # fmt: skip

    def columns(self, rows: Ints) -> Array:
        """Columns of M (R, k) of the rows (k,)."""
        errors = np.zeros((len(self.held), len(rows)))
        errors[rows, np.arange(len(rows))] = 1.0
        return self.times(errors)


def _whitened(w: Whitened, values: Array) -> Array:
    """L^-1 values for (b, k, p)."""
    return np.asarray(values / w.factor if w.l.shape[1] == 1 else np.linalg.solve(w.factor, values))


def _transposed(w: Whitened, values: Array) -> Array:
    """L^-T values for (b, k, p)."""
    if w.l.shape[1] == 1:
        return np.asarray(values / w.factor)
    return np.asarray(np.linalg.solve(w.factor.transpose(0, 2, 1), values))
