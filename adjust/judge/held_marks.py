"""Control coordinates as unknowns: what the readings and the other marks say of each, from the held solution alone.

Let the known coordinates of the marks be off by b (true minus known). A held coordinate enters the readings through its
partials, a weighted one is itself a reading, so that b are extra unknowns with the columns A_k: the partials by the
held coordinates, and minus one in the row of a weighted one (adjust.judge.influence; Koch 1999, section 4.5). Whitened
and free of local unknowns like A*,

    K = A_k*'(I - A* Q A*') A_k*        g = A_k*'l*        K b = g

because A*'l* = 0 at the solution (with conditions C: A*'l* = C'lambda and Q C' = 0). A coordinate that a condition
itself touches is not judged. The block of one mark alone, b = K_kk^-1 g_k with cov(b) = K_kk^-1, leaves this mark out
and holds all others, exactly at the linearisation; K has no inverse for what the others do not determine, and for all
marks together it lacks the movements of the datum. Any set of marks is released by taking its rows and columns.

At a free stage, with d = free minus known coordinates of the marks, cofactors Q_d of d with those of the weighted
coordinates added, and G the movements that the datum leaves open,

    B'G = 0        K = B (B'Q_d B)^-1 B'        g = K d,

the same K at other places: those of the readings alone, which a control wrong by metres has not bent.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import null_space
from scipy.sparse import csc_array

from adjust.kinds import KINDS
from adjust.network import HELD, Array, Bools, Ints
from adjust.solver.datum import movements
from adjust.solver.elements import Whitened
from adjust.solver.solution import Solution

JUDGED_ABOVE = 1e-9
"""Share of a mark's own weight that must be left after the unknowns took theirs; rounding leaves about 1e-14."""
CONDITION_MOST = 1e13
"""Condition number of B'Q_d B above which a free stage says nothing reliable of the marks."""


@dataclass(frozen=True)
class HeldMarks:
    """Held and weighted coordinates that readings touch, h of them."""

    station: Ints
    """(h,)."""
    part: Ints
    """(h,) 0 east, 1 north, 2 height."""
    row: Ints
    """(h,) scalar row of a weighted coordinate, -1 for a held one."""
    k: Array
    """(h, h) K, 1/m^2."""
    own: Array
    """(h,) weight that the readings give each coordinate with all unknowns known; 0 where it is not judged."""
    g: Array
    """(h,) g, 1/m."""

    def take(self, some: Ints) -> HeldMarks:
        """Those of the coordinates ``some`` (s,), with all others held."""
        return HeldMarks(self.station[some], self.part[some], self.row[some], self.k[np.ix_(some, some)],
                         self.own[some], self.g[some])  # fmt: skip

    @property
    def units(self) -> list[Ints]:
        """Places of what is right or wrong together: the plane part of a mark, and its height."""
        unit = 2 * self.station + (self.part == 2)
        return [np.flatnonzero((unit == u) & (self.own > 0)) for u in np.unique(unit[self.own > 0])]


def control_places(solution: Solution) -> tuple[Ints, Ints, Ints]:
    """Station, part and row (-1: held) of all held and weighted coordinates that take part, (h,) each."""
    stations, network = solution.network.stations, solution.network
    held = np.flatnonzero((stations.role == HELD).ravel() & (solution.design.unknowns.coordinate < 0).ravel())
    held = held[np.isin(held, solution.design.places)]
    rows, found = network.rows, []
    for b, block in enumerate(network.blocks):
        if KINDS[block.kind].from_control:
            here = np.flatnonzero(rows.block == b)
            found.append(np.stack([3 * block.stations[rows.row[here], 0] + rows.part[here], here]))
    weighted = np.concatenate([np.empty((2, 0), np.int64), *found], axis=1)
    place = np.concatenate([held, weighted[0]])
    row = np.concatenate([np.full(len(held), -1), weighted[1]])
    order = np.argsort(place, kind="stable")
    return place[order] // 3, place[order] % 3, row[order]


def judge_held_marks(solution: Solution, some: Ints | None = None) -> HeldMarks:
    """K and g of the held and weighted coordinates, or of ``some`` of them (places in ``control_places``)."""
    station, part, row = control_places(solution)
    if some is not None:
        station, part, row = station[some], part[some], row[some]
    known = [_known(w, solution, 3 * station + part, row) for w in solution.whitened]
    size = (len(solution.residuals), len(station))
    a_k = _stacked([(w.batch.rows, k) for w, k in zip(solution.whitened, known, strict=True)], size)
    misclosure = np.zeros(size[0])
    load = np.zeros((solution.design.unknowns.count + 1, len(station)))
    for w, k in zip(solution.whitened, known, strict=True):
        misclosure[w.batch.rows] = w.reduced_l
        np.add.at(load, w.batch.columns, w.reduced.transpose(0, 2, 1) @ k)
    load = load[:-1]
    own = (a_k.T @ a_k).toarray()
    in_condition = (row < 0) & np.isin(3 * station + part, solution.design.places[solution.design.held])
    k_all = own - load.T @ solution.cofactors.times(load)
    judged = np.where(in_condition, 0.0, np.diagonal(own))
    return HeldMarks(station, part, row, k_all, judged, a_k.T @ misclosure)


def at_free_stage(marks: HeldMarks, free: Solution, kept: Ints) -> HeldMarks | None:
    """The same at the free stage, turned to fit the coordinates ``kept`` (places in ``marks``); None where it fails."""
    columns = free.design.unknowns.coordinate[marks.station, marks.part]
    use = np.flatnonzero((columns >= 0) & (marks.own > 0))
    if not len(use):
        return None
    q = free.cofactors.blocks(columns[use][None])[0]
    known, station, part = free.network.stations.known, marks.station[use], marks.part[use]
    positions, turned = free.positions.copy(), np.eye(len(use))
    for one in free.parts:
        if one.datum:
            _turn(positions, turned, one.datum.part.nodes[:, 0], known, (station, part), np.isin(use, kept))
    q = turned @ q @ turned.T + np.diag(np.where(marks.row[use] < 0, 0.0, known_variance(free, station, part)))
    moves = [movements(one.datum.part, positions) @ one.datum.null for one in free.parts if one.datum]
    g = np.concatenate([m[station, part] for m in moves], axis=1)
    b = null_space(g.T)
    if not b.shape[1]:
        return None
    m = b.T @ q @ b
    if np.linalg.cond(m) > CONDITION_MOST:
        return None
    k, gradient = np.zeros_like(marks.k), np.zeros_like(marks.g)
    k[np.ix_(use, use)] = b @ np.linalg.solve(m, b.T)
    gradient[use] = k[np.ix_(use, use)] @ (positions[station, part] - known[station, part])
    return replace(marks, k=k, own=np.diagonal(k).copy(), g=gradient)


def known_variance(solution: Solution, station: Ints, part: Ints) -> Array:
    """Variance of known coordinates as stated, 0 where none is."""
    return np.asarray(np.nan_to_num(solution.network.stations.known_sd[station, part]) ** 2)


def _turn(positions: Array, turned: Array, nodes: Bools, known: Array, where: tuple[Ints, Ints], kept: Bools) -> None:
    """Turn the plane of a part about its middle to the kept marks, and the matrix that does it to their coordinates."""
    station, part = where
    east = [i for i in np.flatnonzero((part == 0) & nodes[station]).tolist()
            if i + 1 < len(part) and station[i + 1] == station[i] and part[i + 1] == 1]  # fmt: skip
    fit = [i for i in east if kept[i]]
    if len(fit) < 2:
        return
    at = station[fit]
    x, y = positions[at, :2] @ [1, 1j], known[at, :2] @ [1, 1j]
    m = np.vdot(x - x.mean(), y - y.mean())
    if abs(m) == 0.0:
        return
    turn = m / abs(m)
    z = positions[nodes, :2] @ [1, 1j]
    z = (z - x.mean()) * turn + y.mean()
    positions[nodes, 0], positions[nodes, 1] = z.real, z.imag
    for i in east:
        turned[i : i + 2, i : i + 2] = [[turn.real, -turn.imag], [turn.imag, turn.real]]


def _known(w: Whitened, solution: Solution, places: Ints, weighted: Ints) -> Array:
    """A_k* (b, k, h) of a batch."""
    b, k = w.batch.rows.shape
    raw = np.zeros((b, k, len(places) + 1))
    held = np.where(weighted < 0)[0]
    if len(held):
        place, sought = solution.design.places[w.batch.rows], places[held]
        seat = np.minimum(np.searchsorted(sought, place), len(sought) - 1)
        at = np.where((sought[seat] == place) & (place >= 0), held[seat], len(places))
        values = solution.coefficients[w.batch.rows]
        np.add.at(raw, (np.arange(b)[:, None, None], np.arange(k)[None, :, None], at), values)
    for column in np.flatnonzero(weighted >= 0).tolist():
        raw[w.batch.rows == weighted[column], column] = -1.0
    whitened = raw[:, :, :-1] / w.factor if k == 1 else np.linalg.solve(w.factor, raw[:, :, :-1])
    return np.asarray(whitened - w.q @ (w.q.transpose(0, 2, 1) @ whitened))


def _stacked(parts: list[tuple[Ints, Array]], size: tuple[int, int]) -> csc_array:
    """The batches' rows as one sparse matrix (R, h)."""
    rows, columns, values = [], [], []
    for at, dense in parts:
        e, k, h = np.nonzero(dense)
        rows.append(at[e, k])
        columns.append(h)
        values.append(dense[e, k, h])
    return csc_array((np.concatenate(values), (np.concatenate(rows), np.concatenate(columns))), shape=size)
