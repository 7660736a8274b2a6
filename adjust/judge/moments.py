"""Quadratic forms of the residuals by groups of readings, and what they come to on the average.

The covariance of the readings is C = V_0 + sum_g V_g, one V_g a group: the rows of an instrument, or all centring
vectors; V_0 is what is not asked about. With M = P - P A Q A'P (local unknowns are eliminated, conditions in Q)

    q_g = (Pv)' V_g (Pv)        t_g = tr(M V_g)        S_gh = tr(M V_g M V_h)

so E q_g = t_g and cov(q_g, q_h) = 2 S_gh if all is as stated (Koch 1999, section 3.6). The t_g are the redundancies of
the groups and with V_0 add up to all of it. V_g is made of blocks within elements. With L L' = C of an element,
G_g = L^-1 V_g L^-T, the projection R_0 = I - Q_B Q_B' on what the local unknowns leave, A* and v~ = A* dx - l*:

    q_g = v~'G_g v~        t_g = tr((R_0 - A* Q A*') G_g)        N_g = sum A*'G_g A*
    S_gh = sum tr(R_0 G_g R_0 G_h) - 2 sum tr(A* Q A*' G_g R_0 G_h) + tr(Q N_g Q N_h)

all exact. In large networks, where Q is too large to be formed, S_gh is the mean of (R G_g u)'(R G_h u) over u = R z
with seeded random signs z, R = I - A* Q A*' - Q_B Q_B', since E uu' = R R' = R (Hutchinson 1990).
A group's rows that share a covariance with rows of others have half of it: dC/d(log theta) where both are scaled.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.sparse import csc_array

from adjust.judge.groupings import Grouping
from adjust.network import Array, Ints
from adjust.solver.cofactors import Cofactors
from adjust.solver.design import Linearised, State
from adjust.solver.elements import Whitened, gather, whiten
from adjust.solver.engine import Pattern
from adjust.solver.gauss import GaussNewton, Linear
from adjust.solver.solution import Solution

DENSE_MOST = 3000
"""Unknowns up to which Q is formed, about 80 MB a matrix of which each group needs one. It is the faster way, too: one
evaluation took 1.1 s against 4.3 s at 1,496 unknowns, and a plain adjustment with its reading 3.7 s."""
PROBES = 32
"""Random vectors: S was off by 0.5 % with 596 and 1,496 unknowns (6,083 and 15,718 rows), its square root by half."""
SEED = 20260514


@dataclass(frozen=True)
class Moments:
    """q and t (G,) and S (G, G) for the covariance as it is."""

    q: Array
    t: Array
    s: Array


@dataclass(frozen=True)
class Problem:
    """A solution linearised once, and a grouping of its readings."""

    iteration: GaussNewton
    numbers: Linearised
    conditions: Array
    """K (h, u)."""
    grouping: Grouping
    dense_most: int = DENSE_MOST
    """Unknowns up to which S is exact."""

    @classmethod
    def of(cls, solution: Solution, grouping: Grouping) -> Problem:
        """At the solution."""
        iteration = solution.setting.iteration
        state = State(solution.positions, solution.groups)
        here = Linear(state, solution.design.linearise(state), [], 0.0)
        return cls(iteration, here.numbers, iteration.conditions(here), grouping)

    def whitened(self, theta: Array) -> list[Whitened]:
        """Elements with every group's variance theta (G,) times the stated one."""
        grouping = self.grouping
        root = np.sqrt(np.append(theta[: len(grouping.names)], 1.0))[grouping.of_row]
        by_centring = np.sqrt(theta[-1]) if grouping.centring else 1.0
        out = []
        for batch in self.iteration.batches:
            own = root[batch.rows]
            covariance = batch.covariance * own[:, :, None] * own[:, None, :]
            scaled = replace(batch, covariance=covariance, vector_sd=batch.vector_sd * by_centring)
            out.append(whiten(scaled, self.numbers))
        return out

    def moments(self, theta: Array) -> Moments:
        """The sums for variances theta (G,) times the stated ones, each V_g taken in its present size."""
        whitened = self.whitened(theta)
        cofactors = self.cofactors(whitened)
        dx = self._step(whitened, cofactors)
        q_of = _Inverse.of(cofactors, self.dense_most)
        count = self.grouping.count
        total = Moments(np.zeros(count), np.zeros(count), np.zeros((count, count)))
        parts = [group_parts(w, self.grouping) for w in whitened]
        for w, (present, g) in zip(whitened, parts, strict=True):
            if len(present):
                moved = w.reduced @ gather(dx, w.batch.columns)[:, :, None]
                _add(total, w, present, g, q_of.blocks(w.batch.columns), moved)
        if q_of.dense is None:
            return replace(total, s=_probed(whitened, parts, cofactors, count))
        inside = self.iteration.kept
        q = q_of.dense[np.ix_(inside, inside)]
        y = [n.T @ q for n in normals(self.iteration.pattern, whitened, parts, count)]  # N_g = N_g', faster by rows
        for i in range(count):
            turned = np.ascontiguousarray(y[i].T)
            for j in range(i + 1):
                both = float(np.vdot(turned, y[j]))
                total.s[i, j] += both
                total.s[j, i] += both if i != j else 0.0
        return total

    def cofactors(self, whitened: list[Whitened]) -> Cofactors:
        """Q on the minimal constraints with the conditions: M does not depend on the datum."""
        iteration = self.iteration
        factor = iteration.pattern.factor(whitened) if len(iteration.kept) else None
        none = np.zeros((len(iteration.reduced), 0))
        return Cofactors.of(factor, iteration.reduced, self.conditions, none, none)

    def _step(self, whitened: list[Whitened], cofactors: Cofactors) -> Array:
        """dx (u,) of all but the local unknowns; conditions are met exactly."""
        iteration = self.iteration
        rhs = np.zeros((len(iteration.reduced), 1))
        rhs[iteration.kept, 0] = iteration.pattern.right_side(whitened)
        dx = cofactors.times(rhs)[:, 0]
        if len(self.conditions):
            dx -= cofactors.f @ (cofactors.m @ self.numbers.misclosure[iteration.held])
        return dx


def normals(
    pattern: Pattern, whitened: list[Whitened], parts: list[tuple[Ints, Array]], count: int
) -> list[csc_array]:  # fmt: skip
    """N_g = sum A*'G_g A* of every group on the unknowns of a pattern."""
    out = []
    for group in range(count):
        products = [np.empty(0)]
        for w, (present, g) in zip(whitened, parts, strict=True):
            at = np.flatnonzero(present == group)
            size = len(w.l) * w.reduced.shape[2] ** 2
            products.append(
                (w.reduced.transpose(0, 2, 1) @ g[at[0]] @ w.reduced).ravel() if len(at) else np.zeros(size)
            )
        data = np.bincount(pattern.target, np.concatenate(products), minlength=len(pattern.indices) + 1)[:-1]
        filled = csc_array((data, pattern.indices.copy(), pattern.indptr.copy()), shape=(pattern.count, pattern.count))
        filled.eliminate_zeros()  # most of the pattern belongs to other groups
        out.append(filled)
    return out


@dataclass(frozen=True)
class _Inverse:
    """Q, in full where it is small enough."""

    cofactors: Cofactors
    dense: Array | None

    @classmethod
    def of(cls, cofactors: Cofactors, dense_most: int) -> _Inverse:
        count = len(cofactors.reduced)
        return cls(cofactors, cofactors.times(np.eye(count)) if count <= dense_most else None)

    def blocks(self, columns: Ints) -> Array:
        """Blocks (b, c, c), zero where -1."""
        if self.dense is None:
            return self.cofactors.blocks(columns)
        known = (columns >= 0).astype(float)
        found = self.dense[columns[:, :, None], columns[:, None, :]] if self.dense.size else np.zeros((1, 1, 1))
        return np.asarray(found * known[:, :, None] * known[:, None, :])


def group_parts(w: Whitened, grouping: Grouping) -> tuple[Ints, Array]:
    """The groups of a batch (p,) and their G_g (p, b, k, k)."""
    member = grouping.of_row[w.batch.rows]
    present = np.unique(member[member >= 0])
    b, k = member.shape
    vectors = w.batch.vectors.shape[1] > 0
    eye = np.eye(k)
    if not vectors and (member == member[:, :1]).all():
        return present, (member[:, 0] == present[:, None])[:, :, None, None] * eye
    inverse = np.linalg.solve(w.factor, np.broadcast_to(eye, (b, k, k)))
    up = inverse.transpose(0, 2, 1)
    inside = (member == present[:, None, None]).astype(float)
    half = (inside[:, :, :, None] + inside[:, :, None, :]) / 2
    g = inverse @ (w.batch.covariance * half) @ up
    if vectors and grouping.centring:
        g = np.concatenate([g, (eye - inverse @ w.batch.covariance @ up)[None]])
        present = np.append(present, len(grouping.names))
    return present, g


def _add(total: Moments, w: Whitened, present: Ints, g: Array, q: Array, moved: Array) -> None:
    """Add a batch with its G_g (p, b, k, k), blocks of Q (b, c, c) and A* dx (b, k, 1)."""
    v = moved - w.reduced_l[:, :, None]
    rest = np.eye(g.shape[2]) - w.q @ w.q.transpose(0, 2, 1)
    hat = w.reduced @ q @ w.reduced.transpose(0, 2, 1)
    total.q[present] += (v.transpose(0, 2, 1) @ g @ v).sum(axis=(1, 2, 3))
    f, e = rest @ g, hat @ g
    total.t[present] += np.einsum("gbii->g", f) - np.einsum("gbii->g", e)
    size = len(present)
    flat = f.transpose(0, 1, 3, 2).reshape(size, -1)
    total.s[np.ix_(present, present)] += f.reshape(size, -1) @ flat.T - _both(e, flat)


def _both(e: Array, flat: Array) -> Array:
    one = e.reshape(len(e), -1) @ flat.T
    return np.asarray(one + one.T)


def _probed(whitened: list[Whitened], parts: list[tuple[Ints, Array]], cofactors: Cofactors, count: int) -> Array:
    """S by random signs."""
    rng = np.random.default_rng(SEED)
    z = [rng.choice([-1.0, 1.0], size=(*w.l.shape, PROBES)) for w in whitened]
    u = _projected(whitened, cofactors, z)
    y = []
    for group in range(count):
        loads = []
        for one, (present, g) in zip(u, parts, strict=True):
            at = np.flatnonzero(present == group)
            loads.append(g[at[0]] @ one if len(at) else np.zeros_like(one))
        y.append(np.concatenate([p.ravel() for p in _projected(whitened, cofactors, loads)]))
    stacked = np.array(y)
    return np.asarray(stacked @ stacked.T / PROBES)


def _projected(whitened: list[Whitened], cofactors: Cofactors, values: list[Array]) -> list[Array]:
    """R times values (b, k, p) by batch."""
    left = [z - w.q @ (w.q.transpose(0, 2, 1) @ z) for w, z in zip(whitened, values, strict=True)]
    p = values[0].shape[2] if values else 0
    load = np.zeros((len(cofactors.reduced) + 1, p))
    for w, z in zip(whitened, left, strict=True):
        np.add.at(load, w.batch.columns, w.reduced.transpose(0, 2, 1) @ z)
    moved = np.concatenate([cofactors.times(load[:-1]), np.zeros((1, p))])
    return [z - w.reduced @ moved[w.batch.columns] for w, z in zip(whitened, left, strict=True)]
