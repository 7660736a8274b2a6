"""The engine behind one small interface: analyse a pattern, factor, solve for many right-hand sides, cofactors.

    pattern = Pattern.of(columns, count)      once: where every product of two columns goes in the normal matrix
    factor  = pattern.factor(whitened)        N = sum A*'A*, scaled to a unit diagonal, sparse LDL' by SuperLU
    factor.solve(rhs)                         (u, r) -> (u, r)
    factor.entries(i, j)                      exact entries of N^-1

SuperLU is run in its symmetric mode without pivoting, which for a positive definite matrix is a Cholesky
factorisation in all but name; the pivots of the scaled matrix are the shares of each unknown that the unknowns
eliminated before it do not explain (1 - R^2), so a pivot near zero is an unknown that nothing fixes.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from scipy.sparse import csc_array
from scipy.sparse.linalg import splu

from adjust.network import Array, Ints
from adjust.solver.elements import Whitened, gather

PIVOT_LEAST = 1e-11
"""Smallest scaled pivot taken for a fixed unknown. Measured by tests/solver/pivot_study.py: solvable free networks of 4
to 60 stations 2.8e-2 and above (500 of them), 6.6e-6 with up to four fifths of the readings taken away (255), open
traverses of 60, 1,000 and 3,000 stations 1.1e-4, 1.8e-7 and 9.9e-8. In place of zero rounding left 2.4e-15 at the most
without a datum (500) and 4.4e-16 with a loose station (500), but 2.6e-10 in one of 245 thinned networks that do not
hold: a limit alone cannot tell such a pivot from that of a long traverse."""
PIVOT_DOUBTFUL = 1e-6
"""Pivots below this are checked against the rows themselves: where the network holds the two forms of x'Nx agreed to
1e-6 (open traverse of 3,000 stations), where it does not the rows gave 3e-9 and 9e-12 of it."""
CHUNK = 512
"""Columns of the inverse solved for at once."""
DENSE_MOST, BY_INVERSE = 2000, 64
"""Unknowns up to which the inverse is kept in full (32 MB), and right-hand sides from which it is used in place of the
factor: a network of 300 stations was judged in 2.4 times less time (tests/speed/judging.py)."""


class SingularPattern(Exception):
    """The normal matrix has no inverse; ``unknowns`` are those whose pivots vanished (may be empty)."""

    def __init__(self, unknowns: Ints) -> None:
        super().__init__("no inverse")
        self.unknowns = unknowns


@dataclass(frozen=True)
class Pattern:
    """Where the products of elements go in the normal matrix; ``columns`` are their unknowns (b, c), -1 for none."""

    columns: list[Ints]
    count: int
    indices: Ints
    indptr: Ints
    target: Ints
    """Place in the matrix's data of every product of two columns, one extra place for products without one."""

    @classmethod
    def of(cls, columns: list[Ints], count: int) -> Pattern:
        """Analyse the elements once."""
        keys = [np.arange(count, dtype=np.int64) * (count + 1)]
        for one in columns:
            i, j = one[:, :, None], one[:, None, :]
            keys.append(np.where((i >= 0) & (j >= 0), j * count + i, -1).ravel())
        flat = np.concatenate(keys)
        unique, inverse = np.unique(flat, return_inverse=True)
        skip = int(len(unique) > 0 and unique[0] < 0)
        stored = unique[skip:]
        target = np.where(flat < 0, len(stored), inverse - skip)[count:]
        indptr = np.searchsorted(stored, np.arange(count + 1) * count)
        return cls(columns, count, (stored % max(count, 1)).astype(np.int32), indptr.astype(np.int32), target)

    def normal(self, whitened: list[Whitened]) -> csc_array:
        """N (u, u) = sum of A*' A*."""
        products = [np.empty(0)]
        products += [(w.reduced.transpose(0, 2, 1) @ w.reduced).ravel() for w in whitened]
        data = np.bincount(self.target, np.concatenate(products), minlength=len(self.indices) + 1)[:-1]
        return csc_array((data, self.indices, self.indptr), shape=(self.count, self.count))

    def right_side(self, whitened: list[Whitened]) -> Array:
        """A*' l (u,)."""
        out = np.zeros(self.count + 1)
        for w, columns in zip(whitened, self.columns, strict=True):
            np.add.at(out, columns, (w.reduced.transpose(0, 2, 1) @ w.l[:, :, None])[:, :, 0])
        return out[:-1]

    def factor(self, whitened: list[Whitened]) -> Factor:
        """Factor N; raises SingularPattern naming the unknowns without a pivot."""
        factor = Factor.of(self.normal(whitened))
        if factor.pivot_least < PIVOT_DOUBTFUL:
            self._confirm(factor, whitened)
        return factor

    def _confirm(self, factor: Factor, whitened: list[Whitened]) -> None:
        """For x = N^-1 e at the least pivot x'Nx = e'x; formed from the rows, |A* x|^2 vanishes if it was rounding."""
        weakest = np.zeros(self.count)
        weakest[factor.weakest] = 1.0
        x = factor.solve(weakest)
        found = sum(
            float(((w.reduced @ gather(x, columns)[:, :, None]) ** 2).sum())
            for w, columns in zip(whitened, self.columns, strict=True)
        )
        if found < 0.5 * x[factor.weakest]:
            raise SingularPattern(np.array([factor.weakest]))


@dataclass(frozen=True)
class Factor:
    """A factored normal matrix with its scaling."""

    lu: Any
    scale: Array
    pivot_least: float
    weakest: int
    """The unknown with the least pivot."""

    @classmethod
    def of(cls, normal: csc_array) -> Factor:
        """Scale to a unit diagonal and factor."""
        diagonal = normal.diagonal()
        if not np.all(diagonal > 0):
            raise SingularPattern(np.flatnonzero(~(diagonal > 0)))
        scale = 1.0 / np.sqrt(diagonal)
        scaled = normal.copy()
        columns = np.repeat(np.arange(normal.shape[1]), np.diff(normal.indptr))
        scaled.data = normal.data * scale[normal.indices] * scale[columns]
        try:
            lu = splu(scaled, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0,
                      options={"SymmetricMode": True, "Equil": False})  # fmt: skip
        except RuntimeError:
            raise SingularPattern(np.empty(0, np.int64)) from None
        pivots = lu.U.diagonal()
        if not np.all(pivots > PIVOT_LEAST):
            unknown_at = np.argsort(lu.perm_c)
            raise SingularPattern(unknown_at[np.flatnonzero(~(pivots > PIVOT_LEAST))])
        weakest = int(np.argsort(lu.perm_c)[pivots.argmin()]) if len(pivots) else -1
        return cls(lu, scale, float(pivots.min(initial=1.0)), weakest)

    def solve(self, rhs: Array) -> Array:
        """N^-1 rhs for (u,) or (u, r)."""
        if rhs.ndim == 2 and rhs.shape[1] >= BY_INVERSE and len(self.scale) <= DENSE_MOST:
            return np.asarray(self.inverse @ rhs)
        return self._solve(rhs)

    def _solve(self, rhs: Array) -> Array:
        scale = self.scale if rhs.ndim == 1 else self.scale[:, None]
        solution: Array = self.lu.solve(np.asfortranarray(rhs * scale)) * scale
        return solution

    @cached_property
    def inverse(self) -> Array:
        """N^-1 (u, u) in full, for up to DENSE_MOST unknowns: asked for many times over, it is formed once."""
        return self._columns(np.arange(len(self.scale)))

    def _columns(self, columns: Ints) -> Array:
        """Columns (u, k) of N^-1."""
        out = np.empty((len(self.scale), len(columns)))
        for start in range(0, len(columns), CHUNK):
            some = columns[start : start + CHUNK]
            rhs = np.zeros((len(self.scale), len(some)))
            rhs[some, np.arange(len(some))] = 1.0
            out[:, start : start + CHUNK] = self._solve(rhs)
        return out

    def entries(self, i: Ints, j: Ints) -> Array:
        """Entries of N^-1 at (i, j), arrays of one shape; exact, by solving for the columns needed."""
        if len(self.scale) <= DENSE_MOST:
            return np.asarray(self.inverse[i, j])
        out = np.empty(i.shape)
        wanted, place = np.unique(j, return_inverse=True)
        place = place.reshape(j.shape)
        for start in range(0, len(wanted), CHUNK):
            inverse = self._columns(wanted[start : start + CHUNK])
            here = (place >= start) & (place < start + CHUNK)
            out[here] = inverse[i[here], place[here] - start]
        return out
