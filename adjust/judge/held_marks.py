"""Held marks against the readings and the other marks, each left out in turn, from the held solution alone.

With A_k the partials by the held coordinates of a mark, whitened and free of local unknowns like A*, its shift b as an
extra unknown has (the leave-one-out of a parameter, exact at the linearisation)

    M = A_k*'(I - A* Q A*') A_k*        b = M^-1 A_k*' l*,  cov(b) = M^-1

because A*'l* = 0 at the solution (with conditions K: A*'l* = K'lambda and Q K' = 0). A mark that a condition itself
touches is not judged. b is where the readings and the other marks put the mark, less its known place. M is
not invertible where the others do not determine the mark: then nothing judges it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csc_array

from adjust.network import HELD, Array, Ints
from adjust.solver.elements import Whitened
from adjust.solver.solution import Solution

JUDGED_ABOVE = 1e-9
"""Share of a mark's own weight that must be left after the unknowns took theirs; rounding leaves about 1e-14."""


@dataclass(frozen=True)
class HeldMarks:
    """Held coordinates that readings touch: station and part (h,), shift and its sd (h,), NaN where not judged."""

    station: Ints
    part: Ints
    shift: Array
    sd: Array


def judge_held_marks(solution: Solution) -> HeldMarks:
    """Shift of every held mark as the readings and all other marks see it."""
    role = solution.network.stations.role
    places = np.flatnonzero((role == HELD).ravel() & (solution.design.unknowns.coordinate < 0).ravel())
    touched = np.isin(places, solution.design.places)
    places = places[touched]
    known = [_known(w, solution, places) for w in solution.whitened]
    size = (len(solution.residuals), len(places))
    a_k = _stacked([(w.batch.rows, k) for w, k in zip(solution.whitened, known, strict=True)], size)
    misclosure = np.zeros(size[0])
    load = np.zeros((solution.design.unknowns.count + 1, len(places)))
    for w, k in zip(solution.whitened, known, strict=True):
        misclosure[w.batch.rows] = w.reduced_l
        products = w.reduced.transpose(0, 2, 1) @ k
        np.add.at(load, w.batch.columns, products)
    load = load[:-1]
    own = (a_k.T @ a_k).toarray()
    in_condition = np.isin(places, solution.design.places[solution.design.held])
    m = own - load.T @ solution.cofactors.times(load)
    return _by_mark(places, m, np.where(in_condition, 0.0, np.diagonal(own)), a_k.T @ misclosure)


def _by_mark(places: Ints, m: Array, own: Array, g: Array) -> HeldMarks:
    """Solve mark by mark; coordinates that nothing else determines stay NaN."""
    shift, sd = np.full(len(places), np.nan), np.full(len(places), np.nan)
    for station in np.unique(places // 3):
        here = np.flatnonzero(places // 3 == station)
        here = here[own[here] > 0]
        scale = np.sqrt(own[here])
        block = m[np.ix_(here, here)] / scale[:, None] / scale
        if len(here) and np.linalg.eigvalsh(block)[0] > JUDGED_ABOVE:
            inverse = np.linalg.inv(block) / scale[:, None] / scale
            shift[here], sd[here] = inverse @ g[here], np.sqrt(np.diagonal(inverse))
    return HeldMarks(places // 3, places % 3, shift, sd)


def _known(w: Whitened, solution: Solution, places: Ints) -> Array:
    """A_k* (b, k, h) of a batch."""
    b, k = w.batch.rows.shape
    place = solution.design.places[w.batch.rows]
    seat = np.searchsorted(places, place)
    found = (seat < len(places)) & (np.append(places, -1)[np.minimum(seat, len(places))] == place) & (place >= 0)
    raw = np.zeros((b, k, len(places) + 1))
    at = np.where(found, seat, len(places))
    np.add.at(raw, (np.arange(b)[:, None, None], np.arange(k)[None, :, None], at), solution.coefficients[w.batch.rows])
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
