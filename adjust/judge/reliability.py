"""Tests of single readings in the general, correlated form.

With P the inverse of the covariance C = L L' of an element's rows and R = I - H its whitened cofactors of the
residuals, H = A* Q A*' + Q_B Q_B' (Q_B: basis of the local unknowns):

    P v      = L^-T v~                      M = P Q_vv P = L^-T R L^-1
    w        = e'Pv / sqrt(e'Me)            statistic
    blunder  = -e'Pv / (e'Me)               reading minus its estimate from all others
    smallest = sqrt(lambda0) / sqrt(e'Me)   smallest detectable
    redundancy = (Q_vv P)_ii = (L R L^-1)_ii, sums to the degrees of freedom
    checked share = M_ii / P_ii in [0, 1]
    effect on the unknowns of a blunder b in reading i: Q A' P e_i b

(Baarda 1968; Koch 1999, section 4.5; correlated form: Wang and Chen 1994.) Uncorrelated, these are v/(s sqrt r),
-v/r, s sqrt(lambda0)/sqrt(r).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.network import Array, Bools, Ints
from adjust.solver.cofactors import Cofactors
from adjust.solver.elements import Whitened
from adjust.solver.solution import Solution

UNCHECKED_BELOW = 1e-6
"""Checked share below which a reading is unchecked: a blunder of 4000 standard deviations would be needed to see it.
In place of zero rounding leaves up to 2.1e-14 in 498 random networks of 4 to 60 stations, where the next larger share
of 161,076 readings was 3.9e-3; in open traverses of 60, 300 and 1,000 stations 1.7e-12, 1.4e-10 and 3.2e-9
(tests/solver/pivot_study.py)."""
EFFECT_CHUNK = 256


@dataclass(frozen=True)
class Reliability:
    """Per scalar row (R,): figures of the one-reading tests, NaN where they cannot be formed."""

    redundancy: Array
    checked_share: Array
    pv: Array
    """e'Pv."""
    m: Array
    """e'Me."""
    sd_adjusted: Array
    """Standard deviation of the adjusted reading, before scaling."""
    tested: Bools
    """Rows whose statistic can be formed."""

    @property
    def root(self) -> Array:
        """1 / sqrt(e'Me) (R,): the standard deviation of the estimated blunder; NaN where it cannot be formed."""
        return 1.0 / np.sqrt(np.where(self.tested, self.m, np.nan))

    @property
    def statistic(self) -> Array:
        """w (R,) for a given scale."""
        return self.pv * self.root

    @property
    def blunder(self) -> Array:
        """Estimated blunder (R,): reading minus its estimate from all others, metres or radians."""
        return -self.pv * self.root**2


def reliability(solution: Solution) -> Reliability:
    """The one-reading figures of a solution."""
    return figures(solution.whitened, solution.cofactors, solution.design.held)


def figures(whitened: list[Whitened], cofactors: Cofactors, held: Bools) -> Reliability:
    """The same for elements at rest, whose l~ are the residuals with changed sign; ``held`` (R,) are conditions."""
    out = {name: np.full(len(held), np.nan) for name in ("redundancy", "checked_share", "pv", "m", "sd_adjusted")}
    for w in whitened:
        blocks = cofactors.blocks(w.batch.columns)
        hat = w.reduced @ blocks @ w.reduced.transpose(0, 2, 1) + w.q @ w.q.transpose(0, 2, 1)
        for name, values in _element(w, hat).items():
            out[name][w.batch.rows] = values
    for values in out.values():
        values[held] = np.nan
    share = np.clip(out["checked_share"], 0.0, 1.0)
    tested = share >= UNCHECKED_BELOW
    return Reliability(out["redundancy"], share, out["pv"], out["m"], out["sd_adjusted"], tested)


def _element(w: Whitened, hat: Array) -> dict[str, Array]:
    """Figures (b, k) of the rows of a batch from the whitened hat matrices (b, k, k)."""
    k = w.l.shape[1]
    rest = np.eye(k) - hat
    v = -w.l
    factor = w.factor
    if k == 1:
        sd = factor[:, :, 0]
        r = rest[:, :, 0]
        return {"redundancy": r, "checked_share": r, "pv": v / sd, "m": r / sd**2,
                "sd_adjusted": sd * np.sqrt(np.maximum(hat[:, :, 0], 0.0))}  # fmt: skip
    inverse = np.linalg.solve(factor, np.broadcast_to(np.eye(k), hat.shape))
    up = inverse.transpose(0, 2, 1)
    m = np.einsum("bij,bjk,bki->bi", up, rest, inverse)
    p = np.einsum("bij,bji->bi", up, inverse)
    adjusted = np.einsum("bij,bjk,bik->bi", factor, hat, factor)
    return {"redundancy": np.einsum("bij,bjk,bki->bi", factor, rest, inverse), "checked_share": m / p,
            "pv": (up @ v[:, :, None])[:, :, 0], "m": m, "sd_adjusted": np.sqrt(np.maximum(adjusted, 0.0))}  # fmt: skip


def largest_effect(solution: Solution) -> tuple[Ints, Ints, Array]:
    """Station (R,), part (R,) and size (R,) of the coordinate that one unit of error in each reading moves most.

    Station -1 where it moves none.
    """
    numbers = solution.design.unknowns.coordinate
    station = np.full(solution.design.unknowns.count + 1, -1, dtype=np.int64)
    part = station.copy()
    where = np.argwhere(numbers >= 0)
    station[numbers[numbers >= 0]], part[numbers[numbers >= 0]] = where[:, 0], where[:, 1]
    count = len(solution.residuals)
    best, size = np.full(count, -1, dtype=np.int64), np.zeros(count)
    is_coordinate = station[:-1] >= 0
    for w in solution.whitened:
        for start in range(0, len(w.l), EFFECT_CHUNK):
            _effects(solution, w, slice(start, start + EFFECT_CHUNK), is_coordinate, best, size)
    return station[best], part[best], size


def _effects(solution: Solution, w: Whitened, chosen: slice, is_coordinate: Bools, best: Ints, size: Array) -> None:
    """Fill ``best`` and ``size`` for the elements ``chosen``: columns of Q A' P are solved for."""
    factor = w.factor[chosen]
    b, k, _ = factor.shape
    whitened_unit = 1.0 / factor if k == 1 else np.linalg.solve(factor, np.broadcast_to(np.eye(k), factor.shape))
    loads = w.reduced[chosen].transpose(0, 2, 1) @ whitened_unit  # (b, c, k): A*' L^-1
    rhs = np.zeros((solution.design.unknowns.count + 1, b * k))
    columns = w.batch.columns[chosen]
    np.add.at(rhs, (columns[:, :, None], (np.arange(b)[:, None] * k + np.arange(k))[:, None, :]), loads)
    if not is_coordinate.any():
        return
    moved = np.where(is_coordinate[:, None], solution.cofactors.times(rhs[:-1]), 0.0)
    rows = w.batch.rows[chosen].ravel()
    largest = np.abs(moved).argmax(axis=0)
    size[rows] = moved[largest, np.arange(len(rows))]
    best[rows] = np.where(size[rows] == 0.0, -1, largest)  # between two held marks nothing moves
