"""How the free network lies on its control: shift, turn and scale of the best fit, with a proper scale test.

The free stage is fitted to the marks by its datum. With d = free minus known coordinates of the marks (cofactors Q),
G the movements that the datum leaves open there and s the movement of a scale about their middle,

    d = G t + s k + e,   B'G = 0,   M = B'QB,   k = (s'B M^-1 B's)^-1 s'B M^-1 B'd,   var k = (s'B M^-1 B's)^-1

so k in parts per million is free of where the datum sits. Shift and turn are those of the plain least-squares
similarity (Helmert) fit, known = shift + (1 + scale) R(turn) free about the middle of the marks.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import null_space

from adjust.network import HELD, WEIGHTED, Array, Ints
from adjust.solver.solution import Solution

MARKS_MOST = 500
"""Marks up to which the scale's standard deviation is formed; it needs the full covariance of all of them."""


@dataclass(frozen=True)
class Similarity:
    """Fit of the free plane network on n marks."""

    marks: int
    shift_east: float
    shift_north: float
    turn: float
    scale_ppm: float
    sd_scale_ppm: float | None


def fit_control(free: Solution, scale: float) -> Similarity | None:
    """The similarity of the free solution to the marks with known east and north; None below two of them."""
    role = free.network.stations.role[:, :2]
    known = ((role == HELD) | (role == WEIGHTED)).all(axis=1) & ~np.isnan(free.positions[:, 0])
    marks = np.flatnonzero(known)
    if len(marks) < 2:
        return None
    got, wanted = free.positions[marks, :2], free.network.stations.known[marks, :2]
    middle = got.mean(axis=0)
    x = got - middle
    size = float((x**2).sum())
    if size == 0.0:
        return None
    y = wanted - wanted.mean(axis=0)
    a = float((x * y).sum()) / size
    b = float((x[:, 1] * y[:, 0] - x[:, 0] * y[:, 1]).sum()) / size
    shift = wanted.mean(axis=0) - middle
    ppm, sd = (math.hypot(a, b) - 1) * 1e6, None
    if len(marks) <= MARKS_MOST:
        weighted = _scale(free, marks, x, (got - wanted).ravel())
        if weighted:
            ppm, sd = -weighted[0] * 1e6, weighted[1] * math.sqrt(scale) * 1e6
    return Similarity(len(marks), float(shift[0]), float(shift[1]), math.atan2(b, a), ppm, sd)


def _scale(free: Solution, marks: Ints, x: Array, d: Array) -> tuple[float, float] | None:
    """k and its standard deviation; None where two marks leave nothing to compare or the readings have no scale."""
    columns = free.design.unknowns.coordinate[marks, :2].ravel()
    q = free.cofactors.blocks(columns[None])[0]
    ones = np.ones(len(marks))
    movements = [np.stack([ones, 0 * ones], 1), np.stack([0 * ones, ones], 1), np.stack([x[:, 1], -x[:, 0]], 1)]
    g = np.stack([m.ravel() for m in movements], axis=1)
    b = null_space((g / np.abs(g).max(axis=0)).T)
    s = b.T @ x.ravel()
    m = b.T @ q @ b
    if not len(m) or np.linalg.cond(m) > 1e12:
        return None
    half = np.linalg.solve(m, s)
    weight = float(s @ half)
    return float(half @ (b.T @ d)) / weight, 1 / math.sqrt(weight)
