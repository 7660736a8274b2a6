"""Shifts of sets of marks as projections: K and g of the marks (adjust.judge.held_marks) in an orthonormal frame.

With D the own weights of the coordinates and D^-1/2 K D^-1/2 = A A', A of as many columns as K has rank,

    D^-1/2 g = A z        z ~ N(A'D^1/2 b, I)

for shifts b of the known coordinates. The shifts of a set S explain of the misfit what z has in the span of the rows of
S, with the orthonormal basis Q_S of that span:

    T_S = |Q_S'z|^2        chi-square with rank(S) degrees of freedom if the coordinates of S are right
    T - T_S = |z|^2 - T_S  what then still contradicts the other marks, chi-square with rank(all) - rank(S)

and with S released a mark j has N = A_j (I - Q_S Q_S') A_j', the shift N^-1 A_j (I - Q_S Q_S') z and
T_j|S = T_(S and j) - T_S.
A common scale k about the middle of the marks shifts them by s k: one more row a = A'D^1/2 s, treated like a mark.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from adjust.judge.held_marks import JUDGED_ABOVE, HeldMarks
from adjust.network import Array, Bools, Ints

COUPLED_ABOVE = 1e-12
"""Share of the own weights from which two marks hang together; rounding between plane and heights leaves 1e-16."""


@dataclass(frozen=True)
class Shifts:
    """One part of the control that hangs together: units that may be shifted, as rows in the frame of z."""

    units: tuple[Ints, ...]
    """Places in the marks of each unit's coordinates (p,)."""
    rows: tuple[Array, ...]
    """(p, rank) rows of A of each unit; the last one is that of a common scale if ``scaled``."""
    root: tuple[Array, ...]
    """(p,) square roots of the own weights."""
    z: Array
    """(rank,)."""
    scaled: bool = False

    @property
    def rank(self) -> int:
        """Degrees of freedom of all shifts."""
        return len(self.z)

    @cached_property
    def total(self) -> float:
        """T of all shifts."""
        return float(self.z @ self.z)

    def basis(self, released: tuple[int, ...]) -> Array:
        """Q_S (rank, s) of the units ``released``."""
        return _basis(np.concatenate([np.zeros((0, self.rank)), *(self.rows[u] for u in released)]))

    def explained(self, released: tuple[int, ...]) -> tuple[float, int]:
        """T_S and its degrees of freedom."""
        q = self.basis(released)
        return float(((self.z @ q) ** 2).sum()), q.shape[1]

    def beyond(self, unit: int, q: Array) -> tuple[float, int]:
        """T_j|S of a unit and its degrees of freedom, S with the basis ``q``."""
        own = _basis(self.rows[unit] - (self.rows[unit] @ q) @ q.T)
        return float(((self.z @ own) ** 2).sum()), own.shape[1]

    def seen(self, unit: int) -> bool:
        """Whether anything is said of a unit at all."""
        return bool((self.rows[unit] ** 2).sum() > JUDGED_ABOVE)

    def shift(self, unit: int, q: Array) -> tuple[Array, Array] | None:
        """Shift (p,) in metres (of a scale: as a ratio) and its covariance (p, p); None where not determined."""
        rest = self.rows[unit] - (self.rows[unit] @ q) @ q.T
        n = rest @ rest.T
        if not len(n) or np.linalg.eigvalsh(n)[0] <= JUDGED_ABOVE:
            return None
        inverse, root = np.linalg.inv(n), self.root[unit]
        return inverse @ (rest @ self.z) / root, inverse / root / root[:, None]


def _basis(rows: Array) -> Array:
    """Orthonormal basis (rank, s) of the span of rows; what is left of less than JUDGED_ABOVE of a weight is none."""
    if not len(rows):
        return np.zeros((rows.shape[1], 0))
    _, s, vt = np.linalg.svd(rows, full_matrices=False)
    return np.asarray(vt[s**2 > JUDGED_ABOVE].T)


def parts_of(marks: HeldMarks, movement: Array | None = None) -> list[Shifts]:
    """The parts that hang together; ``movement`` (h,) of a common scale of one about the middle, metres."""
    units = marks.units
    if not units:
        return []
    at = np.concatenate(units)
    root = np.sqrt(marks.own[at])
    k = marks.k[np.ix_(at, at)] / root / root[:, None]
    of = np.repeat(np.arange(len(units)), [len(u) for u in units])
    joined = np.zeros((len(units),) * 2)
    np.maximum.at(joined, (of[:, None], of[None, :]), np.abs(k))
    label = _labels(joined > COUPLED_ABOVE)
    out = []
    for one in np.unique(label):
        here = np.flatnonzero(label[of] == one)
        moved = None if movement is None else movement[at] * _scaled_here(marks.part[at], here)
        part = _part(units, of, here, k, root, marks.g[at] / root, moved)
        out += [part] if part.rank else []
    return out


def _scaled_here(part: Ints, here: Ints) -> Array:
    """1 where a common scale moves the coordinates ``here``: the plane, or heights where they are alone."""
    return np.where(part < 2, 1.0, 0.0) if (part[here] < 2).any() else np.ones(len(part))


def _labels(joined: Bools) -> Ints:
    """The smallest unit (u,) that each hangs together with."""
    label = np.arange(len(joined))
    while True:
        least = np.where(joined, label, len(joined)).min(axis=1)
        if np.array_equal(least, label):
            return label
        label = least


def _part(units: list[Ints], of: Ints, here: Ints, k: Array, root: Array, g: Array, movement: Array | None) -> Shifts:
    values, vectors = np.linalg.eigh(k[np.ix_(here, here)])
    good = values > JUDGED_ABOVE
    a = vectors[:, good] * np.sqrt(values[good])
    z = (vectors[:, good].T @ g[here]) / np.sqrt(values[good])
    chosen = np.unique(of[here])
    rows = [a[of[here] == u] for u in chosen]
    roots = [root[here][of[here] == u] for u in chosen]
    scaled = False
    if movement is not None and movement[here].any():
        moved = root[here] * movement[here]
        length = float(np.linalg.norm(moved))
        row = (moved / length) @ a
        if row @ row > JUDGED_ABOVE:
            rows.append(row[None])
            roots.append(np.array([length]))
            scaled = True
    return Shifts(tuple(units[u] for u in chosen), tuple(rows), tuple(roots), z, scaled)
