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
    covariance: Array
    """(b, k, k) covariance of the rows without centring."""
    vectors: Ints
    """(b, v) centring vectors."""
    seats: Ints
    """(b, k, w) place of each row's vectors among the element's, v for none."""
    vector_sd: Array
    """(b, v, 3) their standard deviations."""


@dataclass(frozen=True)
class Whitened:
    """A batch filled with numbers: whitened rows before and after the elimination of the local unknowns."""

    batch: Batch
    factor: Array
    """(b, k, k) lower triangular L with L L' the covariance of the rows, centring included."""
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
    shapes: dict[tuple[int, ...], list[int]] = {}
    members: list[tuple[Ints, ...]] = []
    for e, rows in enumerate(rows_of):
        vectors = _used(design.vectors.of_row[rows]) if design.vectors.any else rows[:0]
        groups = _used(design.local[rows])
        alone = len(rows) == 1 and not len(groups)
        columns = design.columns[rows[0]] if alone else _used(design.columns[rows])
        members.append((rows, columns, groups, vectors))
        shapes.setdefault(tuple(len(m) for m in members[e]), []).append(e)
    covariance = _Covariances(design, sd)
    batches = []
    for shape, chosen in sorted(shapes.items()):
        rows, columns, groups, vectors = (
            np.array([members[e][i] for e in chosen], dtype=np.int64).reshape(len(chosen), size)
            for i, size in enumerate(shape)
        )
        slots = _places(design.columns[rows], columns)
        seats = _places(design.vectors.of_row[rows], vectors) if shape[3] else np.empty((len(chosen), shape[0], 0), int)
        batches.append(
            Batch(rows, columns, slots, groups, covariance.of(rows), vectors, seats, design.vectors.sd[vectors])
        )
    return batches


def _used(numbers: Ints) -> Ints:
    """The numbers that occur, ascending, without -1."""
    found = np.unique(numbers)
    return found[found >= 0]


def _elements(design: Design) -> list[Ints]:
    """Scalar rows joined by local unknowns, centring vectors or a common covariance, in the order of first rows."""
    count = len(design.network.rows)
    if not count:
        return []
    grouped = np.flatnonzero(design.local >= 0)
    groups, clusters, vectors = len(design.network.groups), design.network.clusters, len(design.vectors.sd)
    through, slot = np.nonzero(design.vectors.of_row >= 0)
    i = [grouped, through, *(c.rows for c in clusters)]
    j = [count + design.local[grouped], count + groups + design.vectors.of_row[through, slot]]
    j += [np.full(len(c.rows), count + groups + vectors + k) for k, c in enumerate(clusters)]
    size = count + groups + vectors + len(clusters)
    ii, jj = np.concatenate(i), np.concatenate(j)
    _, label = connected_components(coo_array((np.ones(len(ii)), (ii, jj)), shape=(size, size)), directed=False)
    order = np.argsort(label[:count], kind="stable")
    starts = np.flatnonzero(np.diff(label[order], prepend=-1))
    found = np.split(order, starts[1:])
    return sorted(found, key=lambda rows: int(rows[0]))


def _places(numbers: Ints, listed: Ints) -> Ints:
    """Place of each of ``numbers`` (b, k, e) in its element's list (b, c); c where the number is -1."""
    c = listed.shape[1]
    if numbers.shape[1] == 1 and np.array_equal(numbers[:, 0], listed):
        place = np.broadcast_to(np.arange(c), numbers.shape).copy()
    elif c:
        place = (numbers[..., None] == listed[:, None, None, :]).argmax(axis=3)
    else:
        place = np.zeros(numbers.shape, dtype=np.int64)
    place[numbers < 0] = c
    return place


class _Covariances:
    """Covariance matrices of the elements' rows without centring."""

    def __init__(self, design: Design, sd: Array) -> None:
        self.sd = sd
        self.cluster = np.full(len(sd), -1, dtype=np.int64)
        self.place = np.zeros(len(sd), dtype=np.int64)
        self.matrices = [c.covariance for c in design.network.clusters]
        for i, c in enumerate(design.network.clusters):
            self.cluster[c.rows] = i
            self.place[c.rows] = np.arange(len(c.rows))

    def of(self, rows: Ints) -> Array:
        """Covariances (b, k, k) of the rows (b, k)."""
        b, k = rows.shape
        full = np.zeros((b, k, k))
        full[:, np.arange(k), np.arange(k)] = self.sd[rows] ** 2
        for e in np.flatnonzero((self.cluster[rows] >= 0).any(axis=1)):
            for i in range(k):
                for j in range(k):
                    c, d = self.cluster[rows[e, i]], self.cluster[rows[e, j]]
                    if c >= 0 and c == d:
                        full[e, i, j] = self.matrices[c][self.place[rows[e, i]], self.place[rows[e, j]]]
        return full


def whiten(batch: Batch, numbers: Linearised) -> Whitened:
    """Fill a batch from one linearisation."""
    c, g = batch.columns.shape[1], batch.locals.shape[1]
    a = _scattered(numbers.coefficients[batch.rows], batch.slots, c)
    factor = _factor(batch, numbers)
    by_local = np.zeros((*batch.rows.shape, g))
    if g:
        has = numbers.local[batch.rows][:, :, None] == batch.locals[:, None, :]
        by_local = np.where(has, numbers.by_local[batch.rows][:, :, None], 0.0)
    l = numbers.misclosure[batch.rows]
    if batch.rows.shape[1] == 1:
        wa, wb, wl = a / factor, by_local / factor, l / factor[:, :, 0]
    else:
        wa, wb, wl = solved(factor, a), solved(factor, by_local), solved(factor, l[:, :, None])[:, :, 0]
    q, r = np.linalg.qr(wb) if g else (wb, np.zeros((len(wb), 0, 0)))
    return Whitened(batch, factor, wa, wl, q, r, wa - q @ (q.transpose(0, 2, 1) @ wa))


def _scattered(values: Array, places: Ints, c: int) -> Array:
    """Sum values (b, k, e) at their places among c columns: (b, k, c)."""
    b, k, _ = values.shape
    out = np.zeros((b, k, c + 1))
    np.add.at(out, (np.arange(b)[:, None, None], np.arange(k)[None, :, None], places), values)
    return out[:, :, :c]


def _factor(batch: Batch, numbers: Linearised) -> Array:
    """Lower factors (b, k, k) of the covariances, centring included at this geometry."""
    full = batch.covariance
    v = batch.vectors.shape[1]
    if v:
        for component in range(3):
            j = _scattered(numbers.by_vector[batch.rows, :, component], batch.seats, v)
            j = j * batch.vector_sd[:, None, :, component]
            full = full + j @ j.transpose(0, 2, 1)
    if full.shape[1] == 1:
        return np.sqrt(full)
    return np.asarray(np.linalg.cholesky(full), dtype=np.float64)
