"""Three small networks solved again with 50 digits.

An independent Gauss-Newton in mpmath: residuals and partials written by hand, orientations as unknowns, dense normal
equations, the datum of a free network bordered by  D'(x - x_ref) = 0  over the coordinates. With N = A'PA and

    [N D; D' 0]^-1 = [Q .; . .]       v = A x - l,  Q_vv = P^-1 - A Q A', r_i = (Q_vv P)_ii, w_i = v_i / (s_i sqrt r_i)

everything is rounded to double only at the end.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import mpmath
import numpy as np
import pytest

import adjust
from tests.helpers import close
from tests.networks import Array, Made, random_job
from tests.solver.oracle import Dense, order, positions, solved

DIGITS = 50
Point = list["mpmath.mpf"]


@dataclass(frozen=True)
class Exact:
    """The answer with 50 digits, rounded: positions, standard deviations, redundancy, statistics, square sum."""

    positions: Array
    sd: Array
    redundancy: Array
    statistic: Array
    square_sum: float
    last_step: float


def azimuth(p: list[Point], i: int, j: int) -> mpmath.mpf:
    return mpmath.atan2(p[j][0] - p[i][0], p[j][1] - p[i][1])


def by_azimuth(p: list[Point], i: int, j: int, sign: int) -> list[tuple[int, int, mpmath.mpf]]:
    e, n = p[j][0] - p[i][0], p[j][1] - p[i][1]
    d2 = e * e + n * n
    return [(j, 0, sign * n / d2), (j, 1, -sign * e / d2), (i, 0, -sign * n / d2), (i, 1, sign * e / d2)]


def row(kind: str, p: list[Point], s: list[int], part: int) -> tuple[mpmath.mpf, list[tuple[int, int, mpmath.mpf]]]:
    """Computed reading without its group, and partials by (station, component)."""
    if kind == "distance":
        e, n = p[s[1]][0] - p[s[0]][0], p[s[1]][1] - p[s[0]][1]
        d = mpmath.sqrt(e * e + n * n)
        return d, [(s[1], 0, e / d), (s[1], 1, n / d), (s[0], 0, -e / d), (s[0], 1, -n / d)]
    if kind == "direction":
        return azimuth(p, s[0], s[1]), by_azimuth(p, s[0], s[1], 1)
    if kind == "angle":
        turned = azimuth(p, s[0], s[2]) - azimuth(p, s[0], s[1])
        return turned, by_azimuth(p, s[0], s[2], 1) + by_azimuth(p, s[0], s[1], -1)
    if kind == "levelled":
        return p[s[1]][2] - p[s[0]][2], [(s[1], 2, mpmath.mpf(1)), (s[0], 2, mpmath.mpf(-1))]
    assert kind == "control"
    return p[s[0]][part], [(s[0], part, mpmath.mpf(1))]


def equations(dense: Dense, p: list[Point], groups: Point) -> tuple[mpmath.matrix, mpmath.matrix]:
    """Whitened A (R, u) and l = observed - computed (R, 1)."""
    r = dense.made.readings
    A, l = mpmath.zeros(len(r), dense.count), mpmath.zeros(len(r), 1)
    for i in range(len(r)):
        kind, g, sd = str(r.kind[i]), int(r.group[i]), mpmath.mpf(float(r.sd[i]))
        computed, partials = row(kind, p, r.stations[i].tolist(), int(r.part[i]))
        for station, component, d in partials:
            number = int(dense.coordinate[station, component])
            if number >= 0:
                A[i, number] += d / sd
        if g >= 0:
            computed -= groups[g]
            A[i, dense.first_group + g] = -1 / sd
        miss = mpmath.mpf(float(r.value[i])) - computed
        if kind in ("direction", "angle"):
            miss -= 2 * mpmath.pi * mpmath.nint(miss / (2 * mpmath.pi))
        l[i] = miss / sd
    return A, l


def adjust_exactly(made: Made) -> Exact:
    """Gauss-Newton with 50 digits from the starting values of the book."""
    dense = Dense.of(made)
    with mpmath.workdps(DIGITS):
        p = [[mpmath.mpf(float(x)) for x in xyz] for xyz in made.start]
        groups = [mpmath.mpf(float(g)) for g in dense.groups_at(made.start)]
        D = mpmath.matrix(exact_constraint(dense, p).tolist()) if made.free else mpmath.zeros(dense.count, 0)
        reference = unknowns(dense, p, groups)
        for _ in range(12):
            A, l = equations(dense, p, groups)
            Q, dx = bordered(A, l, D, reference - unknowns(dense, p, groups))
            shift(dense, p, groups, dx)
            if max(abs(x) for x in dx) < mpmath.mpf(10) ** -30:
                break
        A, l = equations(dense, p, groups)
        Q, _ = bordered(A, l, D, reference - unknowns(dense, p, groups))
        return rounded(dense, p, A, l, Q, float(max(abs(x) for x in dx)))


def exact_constraint(dense: Dense, p: list[Point]) -> np.ndarray:
    """Shift east, shift north and turn (u, 3) over the coordinates at the reference, or the height (u, 1)."""
    stations = [s for s in range(len(p)) if dense.coordinate[s, 0] >= 0]
    if not stations:
        return np.array([[mpmath.mpf(int(k in dense.coordinate[:, 2]))] for k in range(dense.count)])
    D = np.full((dense.count, 3), mpmath.mpf(0))
    for s in stations:
        e, n = dense.coordinate[s, :2]
        D[e, 0] = D[n, 1] = mpmath.mpf(1)
        D[e, 2], D[n, 2] = p[s][1] - p[0][1], -(p[s][0] - p[0][0])
    return D


def unknowns(dense: Dense, p: list[Point], groups: Point) -> mpmath.matrix:
    """The unknowns (u, 1) of a state."""
    x = mpmath.zeros(dense.count, 1)
    for (s, c), number in np.ndenumerate(dense.coordinate):
        if number >= 0:
            x[int(number)] = p[s][c]
    for g, value in enumerate(groups):
        x[dense.first_group + g] = value
    return x


def shift(dense: Dense, p: list[Point], groups: Point, dx: mpmath.matrix) -> None:
    """Add a step in place."""
    for (s, c), number in np.ndenumerate(dense.coordinate):
        if number >= 0:
            p[s][c] += dx[int(number)]
    for g in range(len(groups)):
        groups[g] += dx[dense.first_group + g]


def bordered(
    A: mpmath.matrix, l: mpmath.matrix, D: mpmath.matrix, back: mpmath.matrix
) -> tuple[mpmath.matrix, mpmath.matrix]:
    """Cofactors Q (u, u) and step with D'(x + dx - x_ref) = 0; ``back`` is x_ref - x."""
    u, d = A.cols, D.cols
    full, right = mpmath.zeros(u + d, u + d), mpmath.zeros(u + d, 1)
    full[:u, :u], right[:u, 0] = A.T * A, A.T * l
    if d:
        full[:u, u:], full[u:, :u] = D, D.T
        right[u:, 0] = D.T * back
    inverse = full**-1
    return inverse[:u, :u], (inverse * right)[:u, 0]


def rounded(dense: Dense, p: list[Point], A: mpmath.matrix, l: mpmath.matrix, Q: mpmath.matrix, step: float) -> Exact:
    """Everything as doubles."""
    sd = np.full(dense.coordinate.shape, np.nan)
    for (s, c), number in np.ndenumerate(dense.coordinate):
        if number >= 0:
            sd[s, c] = float(mpmath.sqrt(Q[int(number), int(number)]))
    hat = A * Q * A.T
    r = [1 - hat[i, i] for i in range(A.rows)]
    w = [float(-l[i] / mpmath.sqrt(r[i])) for i in range(A.rows)]
    return Exact(np.array([[float(x) for x in xyz] for xyz in p]), sd, np.array([float(x) for x in r]), np.array(w),
                 float((l.T * l)[0]), step)  # fmt: skip


NEAR = (0.0, 0.0)
"""Coordinates of some hundred metres: at 2,000 m their own last digit, 2e-13 m, shows in the statistics as 5e-10."""
NETS: dict[str, Callable[[Path], Made]] = {
    "levels": lambda folder: random_job(
        np.random.default_rng(501), folder, 7, ("levelled_lengths", "levelled_setups"), origin=NEAR
    ),
    "braced with weighted control": lambda folder: random_job(
        np.random.default_rng(502), folder, 5, ("distances", "directions"), "weighted", origin=NEAR
    ),
    "free": lambda folder: random_job(
        np.random.default_rng(503), folder, 5, ("distances", "angles"), "free", origin=NEAR
    ),
}


@pytest.mark.parametrize("net", NETS)
def test_fifty_digits_agree(net: str, tmp_path: Path) -> None:
    made = NETS[net](tmp_path)
    exact, solution = adjust_exactly(made), solved(made)
    assert exact.last_step < 1e-30
    judgement, ours = adjust.assess(solution), positions(made, solution)
    asked = ~np.isnan(ours)
    close(ours[asked], exact.positions[asked], atol=1e-11)
    sd, inside = solution.sd[order(made, solution)], ~np.isnan(exact.sd)
    close(sd[inside] / exact.sd[inside], np.ones(inside.sum()), atol=1e-10)
    close(judgement.reliability.redundancy, exact.redundancy, atol=1e-11)
    assert judgement.reliability.tested.all()
    close(judgement.statistic, exact.statistic, atol=1e-9)
    close(solution.total.square_sum / exact.square_sum, 1.0, atol=1e-9)
