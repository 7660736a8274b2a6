"""Elements: the unit of assembly. Rows, unknowns, local unknowns and a factor of the covariance.

With the covariance C = L L' of an element's rows, whitening gives A~ = L^-1 A, B~ = L^-1 B (local unknowns) and
l~ = L^-1 l. With an orthonormal basis Q of the columns of B~ the local unknowns t are eliminated by projection:

    A* = A~ - Q Q' A~,   l* = l~ - Q Q' l~,   N = sum A*' A*,   t = R^-1 Q' (l~ - A~ dx),   B~ = Q R

so a set-up with its orientation is one element with centred rows. Elements of the same shape are kept together in a
batch of arrays (b, k rows, c columns, g local unknowns) and handled at once.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from adjust.network import Array, Ints
from adjust.solver.design import Design, Linearised


@dataclass(frozen=True)
class Batch:
    """The pattern of b elements of one shape."""

    rows: Ints
    """(b, k) scalar rows."""
    columns: Ints
    """(b, c) unknowns, -1 for none."""
    slots: Ints
    """(b, k, e) place of each row's slot among the element's columns, c for none."""
    locals: Ints
    """(b, g) local groups."""
    factor: Array
    """(b, k, k) lower triangular L with L L' the covariance; (b, k, 1) standard deviations where k = 1."""


@dataclass(frozen=True)
class Whitened:
    """A batch filled with numbers: whitened rows before and after the elimination of the local unknowns."""

    batch: Batch
    a: Array
    """(b, k, c) A~."""
    l: Array
    """(b, k) l~."""
    q: Array
    """(b, k, g) Q."""
    r: Array
    """(b, g, g) R."""
    reduced: Array
    """(b, k, c) A*."""

    @property
    def reduced_l(self) -> Array:
        """(b, k) l*."""
        return self.l - (self.q @ (self.q.transpose(0, 2, 1) @ self.l[:, :, None]))[:, :, 0]

    def local_step(self, dx: Array) -> Array:
        """Steps (b, g) of the local unknowns for a step (u,) of the others."""
        rest = self.l - (self.a @ gather(dx, self.batch.columns)[:, :, None])[:, :, 0]
        rhs = self.q.transpose(0, 2, 1) @ rest[:, :, None]
        return solved(self.r, rhs)[:, :, 0] if self.q.shape[2] else rhs[:, :, 0]


def gather(x: Array, columns: Ints) -> Array:
    """Entries of x (u,) at columns, zero where -1."""
    return np.append(x, 0.0)[columns]


def solved(matrix: Array, rhs: Array) -> Array:
    """matrix^-1 rhs for stacks (b, k, k) and (b, k, r)."""
    return np.asarray(np.linalg.solve(matrix, rhs), dtype=np.float64)


def make_batches(design: Design, sd: Array) -> list[Batch]:
    """Join rows into elements and elements of one shape into batches; ``sd`` (R,) of all rows."""
    rows_of = _elements(design)
    shapes: dict[tuple[int, int, int], list[int]] = {}
    columns: list[Ints] = []
    locals_: list[Ints] = []
    for e, rows in enumerate(rows_of):
        if len(rows) == 1 and design.local[rows[0]] < 0:
            columns.append(design.columns[rows[0]])
            locals_.append(rows[:0])
        else:
            used = np.unique(design.columns[rows])
            columns.append(used[used >= 0])
            groups = np.unique(design.local[rows])
            locals_.append(groups[groups >= 0])
        shapes.setdefault((len(rows), len(columns[e]), len(locals_[e])), []).append(e)
    covariance = _Covariances(design, sd)
    batches = []
    for (k, c, g), chosen in sorted(shapes.items()):
        rows = np.array([rows_of[e] for e in chosen], dtype=np.int64).reshape(len(chosen), k)
        used = np.array([columns[e] for e in chosen], dtype=np.int64).reshape(len(chosen), c)
        groups = np.array([locals_[e] for e in chosen], dtype=np.int64).reshape(len(chosen), g)
        batches.append(Batch(rows, used, _slots(design, rows, used), groups, covariance.factor(rows)))
    return batches


def _elements(design: Design) -> list[Ints]:
    """Scalar rows joined by local unknowns or by a common covariance, in the order of their first rows."""
    count = len(design.network.rows)
    grouped = np.flatnonzero(design.local >= 0)
    groups = len(design.network.groups)
    i = [grouped, *(c.rows for c in design.network.clusters)]
    j = [count + design.local[grouped]]
    j += [np.full(len(c.rows), count + groups + k) for k, c in enumerate(design.network.clusters)]
    size = count + groups + len(design.network.clusters)
    ii, jj = np.concatenate(i), np.concatenate(j)
    _, label = connected_components(coo_array((np.ones(len(ii)), (ii, jj)), shape=(size, size)), directed=False)
    order = np.argsort(label[:count], kind="stable")
    if not count:
        return []
    starts = np.flatnonzero(np.diff(label[order], prepend=-1))
    found = np.split(order, starts[1:])
    return sorted(found, key=lambda rows: int(rows[0]))


def _slots(design: Design, rows: Ints, used: Ints) -> Ints:
    """Place of each slot's unknown in the element's columns (b, k, e); c where the slot is empty."""
    c = used.shape[1]
    if rows.shape[1] == 1 and c == design.columns.shape[1]:
        place = np.broadcast_to(np.arange(c), design.columns[rows].shape).copy()
    else:
        place = (
            (design.columns[rows][..., None] == used[:, None, None, :]).argmax(axis=3)
            if c
            else np.zeros(design.columns[rows].shape, dtype=np.int64)
        )
    place[design.columns[rows] < 0] = c
    return place


class _Covariances:
    """Factors of the elements' covariance matrices."""

    def __init__(self, design: Design, sd: Array) -> None:
        self.sd = sd
        self.cluster = np.full(len(sd), -1, dtype=np.int64)
        self.place = np.zeros(len(sd), dtype=np.int64)
        self.matrices = [c.covariance for c in design.network.clusters]
        for i, c in enumerate(design.network.clusters):
            self.cluster[c.rows] = i
            self.place[c.rows] = np.arange(len(c.rows))

    def factor(self, rows: Ints) -> Array:
        """Lower factors (b, k, k) of the covariances of the rows (b, k)."""
        b, k = rows.shape
        if k == 1:
            return self.sd[rows][:, :, None]
        full = np.zeros((b, k, k))
        full[:, np.arange(k), np.arange(k)] = self.sd[rows] ** 2
        for e in np.flatnonzero((self.cluster[rows] >= 0).any(axis=1)):
            for i in range(k):
                for j in range(k):
                    c, d = self.cluster[rows[e, i]], self.cluster[rows[e, j]]
                    if c >= 0 and c == d:
                        full[e, i, j] = self.matrices[c][self.place[rows[e, i]], self.place[rows[e, j]]]
        return np.asarray(np.linalg.cholesky(full), dtype=np.float64)


def whiten(batch: Batch, numbers: Linearised) -> Whitened:
    """Fill a batch from one linearisation."""
    b, k = batch.rows.shape
    c, g = batch.columns.shape[1], batch.locals.shape[1]
    a = np.zeros((b, k, c + 1))
    bi, ki = np.arange(b)[:, None, None], np.arange(k)[None, :, None]
    np.add.at(a, (bi, ki, batch.slots), numbers.coefficients[batch.rows])
    by_local = np.zeros((b, k, g))
    if g:
        has = numbers.local[batch.rows][:, :, None] == batch.locals[:, None, :]
        by_local = np.where(has, numbers.by_local[batch.rows][:, :, None], 0.0)
    l = numbers.misclosure[batch.rows]
    if k == 1:
        wa, wb, wl = a[:, :, :c] / batch.factor, by_local / batch.factor, l / batch.factor[:, :, 0]
    else:
        wa = solved(batch.factor, a[:, :, :c])
        wb = solved(batch.factor, by_local)
        wl = solved(batch.factor, l[:, :, None])[:, :, 0]
    q, r = np.linalg.qr(wb) if g else (wb, np.zeros((b, 0, 0)))
    return Whitened(batch, wa, wl, q, r, wa - q @ (q.transpose(0, 2, 1) @ wa))
