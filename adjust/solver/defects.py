"""What the readings leave free, as arrays: null vectors of the design, and stations that are fixed only just.

With the whitened rows A* of adjust.solver.elements and a scaling S (one number a station, so that no direction is
favoured), a free movement is v = S y with A* S y = 0. y is sought among the right singular vectors of A* S: all of
them for small networks, and beyond that by inverse iteration with the regularised normal matrix S N S + e I on a
block of vectors (Golub and Van Loan, section 8.2), judged by the singular values of A* S Y, which keep twice the digits
that the eigenvalues of N have. The words for all this are in adjust.judge.unfixed.

A station can be fixed and yet hardly so: on the line between two distances, or on the circle through the three
targets of a resection. Then its own block of N has one small eigenvalue, and along that eigenvector u the readings
change by more in second order than in first within one standard deviation a:

    bend = |l(x + a u) + l(x - a u) - 2 l(x)| / 2 over |A* u a| = 1,

or a itself over the distance to the nearest station, if that is more (sights along a line do not bend).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse.linalg import splu

from adjust.errors import Unsolvable
from adjust.graph.parts import PLANE, listed
from adjust.network import Array, Ints, Network
from adjust.solver.datum import PartDatum
from adjust.solver.design import Design, State, Unknowns
from adjust.solver.elements import Batch, Whitened, whiten
from adjust.solver.engine import Pattern

if TYPE_CHECKING:
    from adjust.solver.solution import Solution

DENSE_MOST = 300
"""Unknowns up to which all singular vectors are formed."""
NULL_LEAST = 1e-9
"""A movement is free if it changes the scaled readings by less than this share. Measured by tests/judge/null_study.py:
free movements 7.1e-15 at the most (146 jobs with defects); what is fixed 1.9e-5 at the least there, 3.3e-2 in 200 sound
jobs, and 4.9e-7 in an open traverse of 1,500 stations (falling with the square of their number)."""
REGULAR = 1e-12
ROUNDS = 4
BLOCK_FIRST, MOST_NUMBERS = 8, 30_000_000
"""Vectors of the first block, and numbers in the largest one (240 MB): 300 movements of 100,000 unknowns."""
DOUBTFUL_PIVOT = 1e-6
"""Pivots of the factor below this are looked into: rounding can leave 2.6e-10 in place of zero (engine.PIVOT_LEAST)."""
THIN = 30.0
"""Long over short axis of a station's own ellipse (all others held) from which its bend is looked at."""
WARNED, REFUSED = 0.03, 1.0
"""Bend from which a station is warned about and refused; none of 300 sound networks had any. Above 1 the linear
standard deviation means nothing, because within one of them the readings change more by curvature than by the movement
itself."""
MOST_THIN = 40
"""Stations whose bend is looked at, the thinnest first; each costs two linearisations."""


@dataclass(frozen=True)
class Thin:
    """A station that its readings fix only just: direction (2,) east, north of the loose axis; bend, see above."""

    station: int
    direction: Array
    bend: float


@dataclass(frozen=True)
class Freedom:
    """Movements (n, 3, d) of all stations that no reading sees, at the positions (n, 3)."""

    network: Network
    positions: Array
    moves: Array
    parts: list[PartDatum]
    thin: tuple[Thin, ...] = ()
    partial: bool = False
    """There are more movements than were sought, so that these cannot be told apart."""

    @property
    def stations(self) -> Ints:
        """Stations that move."""
        moving = np.flatnonzero((np.abs(self.moves) > 1e-6).any(axis=(1, 2)))
        return np.unique(np.concatenate([moving, [t.station for t in self.thin]])).astype(np.int64)


class Loose(Unsolvable):
    """Unsolvable with the movements as arrays; its own sentence is bare, adjust.judge.unfixed words them."""

    def __init__(self, freedom: Freedom, others: tuple[str, ...] = ()) -> None:
        self.freedom, self.others = freedom, others
        who = listed(freedom.network, freedom.stations, 8)
        super().__init__([*others, *([f"nothing fixes {who}"] if who else [])])


def null_vectors(pattern: Pattern, unknowns: Unknowns, kept: Ints, whitened: list[Whitened]) -> Array:
    """Free movements (u, d) of the unknowns, those of the minimal constraints at rest; columns are orthogonal."""
    scale = _scale(pattern, unknowns, kept, whitened)
    basis = _dense(pattern, scale, whitened) if len(kept) <= DENSE_MOST else _iterated(pattern, scale, whitened)
    out = np.zeros((unknowns.count, basis.shape[1]))
    out[kept] = basis * scale[:, None]
    largest = np.abs(out).max(axis=0, initial=0.0)
    return np.asarray(out / np.where(largest > 0, largest, 1.0))


def _scale(pattern: Pattern, unknowns: Unknowns, kept: Ints, whitened: list[Whitened]) -> Array:
    """One over the size of the columns of A*, the same for east and north of a station."""
    diagonal = np.zeros(unknowns.count)
    diagonal[kept] = pattern.normal(whitened).diagonal()
    plane = unknowns.coordinate[:, :2]
    both = plane[(plane >= 0).all(axis=1)]
    diagonal[both] = diagonal[both].max(axis=1, initial=0.0, keepdims=True)
    least = 1e-18 * diagonal.max(initial=1.0)
    typical = np.median(diagonal[diagonal > least]) if (diagonal > least).any() else 1.0
    return np.asarray(1.0 / np.sqrt(np.where(diagonal > least, diagonal, typical))[kept])


def _rows(pattern: Pattern, scale: Array, whitened: list[Whitened], basis: Array) -> list[Array]:
    """A* S Y by batches, (rows, k) each."""
    scaled = np.vstack([basis * scale[:, None], np.zeros((1, basis.shape[1]))])
    return [
        (w.reduced @ scaled[columns]).reshape(w.l.size, basis.shape[1])
        for w, columns in zip(whitened, pattern.columns, strict=True)
    ]


def _judged(pattern: Pattern, scale: Array, whitened: list[Whitened], basis: Array) -> tuple[Array, Array]:
    """Singular values (k,) of A* S Y and Y turned to them, for orthonormal Y (u, k)."""
    k = basis.shape[1]
    triangle = np.zeros((0, k))
    for rows in _rows(pattern, scale, whitened, basis):
        triangle = np.asarray(np.linalg.qr(np.concatenate([triangle, rows]), mode="r"))
    full = np.concatenate([triangle, np.zeros((max(0, k - len(triangle)), k))])
    _, s, vt = np.linalg.svd(full)
    return s, basis @ vt.T


def _dense(pattern: Pattern, scale: Array, whitened: list[Whitened]) -> Array:
    s, turned = _judged(pattern, scale, whitened, np.eye(len(scale)))
    return np.asarray(turned[:, s < NULL_LEAST])


def _iterated(pattern: Pattern, scale: Array, whitened: list[Whitened]) -> Array:
    """The same by inverse iteration, with as many vectors as it takes to hold them all, ``most_moves`` at the most."""
    count = len(scale)
    shifted = pattern.normal(whitened)
    shifted.data *= scale[shifted.indices] * np.repeat(scale, np.diff(shifted.indptr))
    shifted.setdiag(shifted.diagonal() + REGULAR)
    lu = splu(shifted, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0,
              options={"SymmetricMode": True, "Equil": False})  # fmt: skip
    rng, k = np.random.default_rng(1), min(BLOCK_FIRST, most_moves(count))
    while True:
        y = np.linalg.qr(rng.standard_normal((count, k)))[0]
        for _ in range(ROUNDS):
            y = np.linalg.qr(lu.solve(np.asfortranarray(y)))[0]
        s, turned = _judged(pattern, scale, whitened, y)
        free = s < NULL_LEAST
        if free.sum() < k or k >= most_moves(count):
            return np.asarray(turned[:, free])
        k = min(4 * k, most_moves(count))


def most_moves(count: int) -> int:
    """Movements that are sought among ``count`` unknowns."""
    return max(1, min(count, MOST_NUMBERS // max(count, 1)))


def as_moves(unknowns: Unknowns, vectors: Array) -> Array:
    """Movements (n, 3, d) of the stations for vectors (u, d) of unknowns; known coordinates rest."""
    padded = np.vstack([vectors, np.zeros((1, vectors.shape[1]))])
    return np.asarray(padded[unknowns.coordinate])


def thin_of(solution: Solution) -> list[Thin]:
    """Stations of a solution that are fixed, but only just: bend from WARNED up."""
    state = State(solution.positions, solution.groups)
    parts = [p.datum for p in solution.parts if p.datum]
    return thin_stations(solution.design, parts, solution.whitened, state, WARNED)


def thin_stations(
    design: Design, parts: list[PartDatum], whitened: list[Whitened], state: State, least: float = WARNED
) -> list[Thin]:
    """Stations whose bend is ``least`` or more, the worst first.

    Two stations alone with a free datum are spared: what one may do while the other rests is the datum's turn.
    """
    values, vectors = np.linalg.eigh(_plane_blocks(design.unknowns, whitened))
    both = (design.unknowns.coordinate[:, :2] >= 0).all(axis=1)
    for one in parts:
        if one.free and one.part.nodes[:, PLANE].sum() == 2:
            both &= ~one.part.nodes[:, PLANE]
    ratio = np.where(both, values[:, 1] / np.maximum(values[:, 0], 1e-30 * values[:, 1] + 1e-300), 0.0)
    chosen = np.argsort(-ratio, kind="stable")[:MOST_THIN]
    out = []
    for i in chosen[ratio[chosen] > THIN**2].tolist():
        bend = _bend(design, whitened, state, i, vectors[i, :, 0], max(float(values[i, 0]), 0.0))
        if bend >= least:
            out.append(Thin(i, vectors[i, :, 0], bend))
    return sorted(out, key=lambda t: -t.bend)


def _plane_blocks(unknowns: Unknowns, whitened: list[Whitened]) -> Array:
    """Blocks (n, 2, 2) of N for every station's east and north."""
    n = len(unknowns.coordinate)
    station, part = np.full(unknowns.count + 1, n), np.zeros(unknowns.count + 1, np.int64)
    where = np.argwhere(unknowns.coordinate[:, :2] >= 0)
    number = unknowns.coordinate[:, :2][unknowns.coordinate[:, :2] >= 0]
    station[number], part[number] = where[:, 0], where[:, 1]
    blocks = np.zeros((n + 1, 2, 2))
    for w in whitened:
        gram = w.reduced.transpose(0, 2, 1) @ w.reduced
        s, p = station[w.batch.columns], part[w.batch.columns]
        b, i, j = np.nonzero((s[:, :, None] == s[:, None, :]) & (s[:, :, None] < n))
        np.add.at(blocks, (s[b, i], p[b, i], p[b, j]), gram[b, i, j])
    return blocks[:n]


def _bend(design: Design, whitened: list[Whitened], state: State, i: int, u: Array, value: float) -> float:
    """Second over first order of the readings' change when station i moves along u by one standard deviation."""
    others = np.delete(state.positions[:, :2], i, axis=0)
    near = float(np.nanmin(np.hypot(*(others - state.positions[i, :2]).T), initial=np.inf))
    sd = 1.0 / np.sqrt(value) if value > 0 else np.inf
    a = min(sd, 0.05 * near)
    if not np.isfinite(a) or a <= 0:
        return 0.0
    there, back = (_moved(design, whitened, state, i, sign * a * u) for sign in (1.0, -1.0))
    square = 0.0
    for w, plus, minus in zip(whitened, there, back, strict=True):
        curve = (plus + minus - 2 * w.l) / 2
        square += float(((curve - (w.q @ (w.q.transpose(0, 2, 1) @ curve[:, :, None]))[:, :, 0]) ** 2).sum())
    first = a * np.sqrt(value)
    return float(max(np.sqrt(square) / first, sd / near)) if first > 0 else np.inf


def _moved(design: Design, whitened: list[Whitened], state: State, i: int, step: Array) -> list[Array]:
    """Whitened misclosures of every batch with one station moved."""
    positions = state.positions.copy()
    positions[i, :2] += step
    numbers = design.linearise(State(positions, state.groups))
    batches: list[Batch] = [w.batch for w in whitened]
    return [whiten(b, numbers).l for b in batches]
