"""Cofactors of the unknowns: the inverse of the engine corrected for datum and conditions by a few solved columns.

With Q_m = N^-1 on the minimal constraints, conditions K dx = w without error are added exactly (Koch 1999, 3.2.7):

    Q_c = Q_m - U (K U)^-1 U',  U = Q_m K'           dx_c = dx - U (K U)^-1 (K dx - w)

and the free datum by the S-transformation of adjust.solver.datum with V = Q_c C, H = (C'G)^-1:

    Q = Q_c - G H V' - V H' G' + G H (C'V) H' G'

Both corrections are of the form Q = Q_m + F M F' with a few columns F, so every entry stays exact and cheap.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.network import Array, Ints
from adjust.solver.engine import Factor


@dataclass(frozen=True)
class Cofactors:
    """Q of the unknowns: base inverse of the reduced unknowns plus F M F'."""

    factor: Factor | None
    reduced: Ints
    """(u,) number of each unknown in the engine, -1 for those of the minimal constraints."""
    f: Array
    m: Array

    @classmethod
    def of(cls, factor: Factor | None, reduced: Ints, conditions: Array, null: Array, constraint: Array) -> Cofactors:
        """Cofactors for conditions K (h, u), null space G (u, d) and constraint C (u, d)."""
        base = cls(factor, reduced, np.zeros((len(reduced), 0)), np.zeros((0, 0)))
        if len(conditions):
            u = base.times(conditions.T)
            base = cls(factor, reduced, u, -np.asarray(np.linalg.inv(conditions @ u), dtype=np.float64))
        if null.shape[1]:
            v = base.times(constraint)
            h = np.linalg.inv(constraint.T @ null)
            gh = null @ h
            d = null.shape[1]
            m = np.block([[constraint.T @ v, -np.eye(d)], [-np.eye(d), np.zeros((d, d))]])
            k = base.f.shape[1]
            full = np.zeros((k + 2 * d, k + 2 * d))
            full[:k, :k], full[k:, k:] = base.m, m
            base = cls(factor, reduced, np.concatenate([base.f, gh, v], axis=1), full)
        return base

    def times(self, rhs: Array) -> Array:
        """Q rhs for rhs (u, r)."""
        out = np.zeros_like(rhs, dtype=float)
        inside = self.reduced >= 0
        if self.factor is not None:
            out[inside] = self.factor.solve(rhs[inside])
        return out + self.f @ (self.m @ (self.f.T @ rhs))

    def entries(self, i: Ints, j: Ints) -> Array:
        """Entries of Q at (i, j), arrays of one shape; zero where i or j is -1."""
        known = (i >= 0) & (j >= 0)
        reduced = np.append(self.reduced, -1)
        ri, rj = reduced[i], reduced[j]
        out = np.zeros(i.shape)
        here = (ri >= 0) & (rj >= 0)
        if self.factor is not None and here.any():
            out[here] = self.factor.entries(ri[here], rj[here])
        if self.f.shape[1]:
            out[known] += np.sum((self.f[i[known]] @ self.m) * self.f[j[known]], axis=1)
        return out

    def blocks(self, columns: Ints) -> Array:
        """Blocks (b, c, c) of Q for columns (b, c), zero where -1."""
        shape = (*columns.shape, columns.shape[1])
        i = np.broadcast_to(columns[:, :, None], shape)
        j = np.broadcast_to(columns[:, None, :], shape)
        return self.entries(i, j)
