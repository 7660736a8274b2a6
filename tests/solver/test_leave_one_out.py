"""One-reading statistics by brute force: leave the reading out, refit, and see what it misses by.

At the solution the problem is linear: l = J x + e with covariance C. Uncorrelated, the fit without row i predicts l_i
with an error whose variance is sd_i^2 + J_i Q_(-i) J_i'; correlated, row i gets a shift parameter of its own and the
generalised fit gives the shift and its variance. Both are solved here with dense matrices and a hand-written Jacobian.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from scipy.linalg import block_diag, solve_triangular
from scipy.stats import norm

import adjust
from adjust.judge.assess import Judgement
from tests.helpers import close
from tests.networks import Array, Made, random_job
from tests.solver.oracle import Dense, order, positions, solved

KINDS = (
    ("distances", "directions", "angles"), ("distances", "angles"), ("levelled_lengths", "levelled_setups"),
    ("distances", "directions", "azimuths", "levelled_lengths"),
)  # fmt: skip
CONTROL = ("held", "weighted", "free")


@dataclass(frozen=True)
class Linear:
    """A linear problem (R, u) with l (R,), covariance C (R, R), constraint D (u, d) of a free datum."""

    made: Made
    dense: Dense
    judgement: Judgement
    J: Array
    l: Array
    C: Array
    D: Array

    def fit(self, J: Array, l: Array, C: Array, D: Array) -> tuple[Array, Array]:
        """Estimates and covariance: whitened rows, columns scaled, the constraint bordered where the datum is free."""
        L = np.linalg.cholesky(C)
        A, y = solve_triangular(L, J, lower=True), solve_triangular(L, l, lower=True)
        scale = np.linalg.norm(A, axis=0)
        if not D.shape[1]:
            Q, R = np.linalg.qr(A / scale)
            inverse = solve_triangular(R, np.eye(len(R))) / scale[:, None]
            return inverse @ (Q.T @ y), inverse @ inverse.T
        A, D = A / scale, D / scale[:, None]
        d = D.shape[1]
        D = D / np.linalg.norm(D, axis=0)
        full = np.block([[A.T @ A, D], [D.T, np.zeros((d, d))]])
        inverse = np.linalg.inv(full)[:-d, :-d] / scale[:, None] / scale
        return inverse @ ((A * scale).T @ y), inverse


def linear(seed: int, kinds: tuple[str, ...], control: str, correlated: bool, folder: Path) -> Linear:
    rng = np.random.default_rng([7, seed])
    print(f"seed [7, {seed}]")
    made = random_job(rng, folder, 6, kinds, control, correlated, spur=True, origin=(0.0, 0.0))
    solution = solved(made)
    dense, xyz = Dense.of(made), positions(made, solution)
    groups = np.array([solution.groups[g] for g in group_order(made, adjust.solve(adjust.read(folder)))])
    l = -dense.residuals(np.nan_to_num(xyz), groups)
    D = dense.free_movements(made.start, groups=False) if made.free else np.zeros((dense.count, 0))
    return Linear(made, dense, adjust.assess(solution), dense.jacobian(xyz), l, dense.covariance(), D)


def group_order(made: Made, solution: adjust.Solution) -> list[int]:
    """Group in the solution of every group of the made job, by the first row of each."""
    return [int(solution.design.group[np.flatnonzero(made.readings.group == g)[0]]) for g in range(made.groups)]


CASES = [
    pytest.param(
        seed, kinds, control, correlated, id=f"{'-'.join(kinds)}-{control}-{'correlated' if correlated else 'plain'}"
    )
    for seed, (kinds, control, correlated) in enumerate(
        (k, c, r) for k in KINDS for c in CONTROL for r in (False, True)
    )
]


def matches(got: Array, wanted: Array, size: Array) -> None:
    """Nine digits of the larger of the number and its ``size``."""
    size = np.maximum(np.abs(wanted), size)
    close(got / size, wanted / size, atol=1e-9)


@pytest.mark.parametrize(("seed", "kinds", "control", "correlated"), CASES)
def test_a_reading_left_out_gives_statistic_and_blunder(
    seed: int, kinds: tuple[str, ...], control: str, correlated: bool, tmp_path: Path
) -> None:
    p = linear(seed, kinds, control, correlated, tmp_path)
    figures, tested = p.judgement.reliability, p.judgement.reliability.tested
    error, sd = (by_shift if correlated else by_refit)(p, np.flatnonzero(tested))
    matches(figures.blunder[tested], error, sd)
    matches(figures.root[tested], sd, sd)
    matches(p.judgement.statistic[tested], -error / sd, np.ones(len(sd)))
    shift = norm.isf(0.001 / 2) + norm.ppf(0.80)
    matches(p.judgement.smallest_detectable[tested], shift * sd, shift * sd)


def by_refit(p: Linear, rows: Array) -> tuple[Array, Array]:
    """Prediction error and its standard deviation of each row, from the others."""
    error, sd = np.empty(len(rows)), np.empty(len(rows))
    for k, i in enumerate(rows):
        others = np.delete(np.arange(len(p.l)), i)
        x, Q = p.fit(p.J[others], p.l[others], p.C[np.ix_(others, others)], p.D)
        error[k] = p.l[i] - p.J[i] @ x
        sd[k] = np.sqrt(p.C[i, i] + p.J[i] @ Q @ p.J[i])
    return error, sd


def by_shift(p: Linear, rows: Array) -> tuple[Array, Array]:
    """The same with a shift parameter for each row in turn, all readings correlated."""
    error, sd = np.empty(len(rows)), np.empty(len(rows))
    D = block_diag(p.D, np.zeros((1, 0)))
    for k, i in enumerate(rows):
        x, Q = p.fit(np.column_stack([p.J, np.eye(len(p.l))[i]]), p.l, p.C, D)
        error[k], sd[k] = x[-1], np.sqrt(Q[-1, -1])
    return error, sd


@pytest.mark.parametrize(("seed", "kinds", "control", "correlated"), CASES)
def test_external_effect_is_the_largest_movement_of_a_coordinate(
    seed: int, kinds: tuple[str, ...], control: str, correlated: bool, tmp_path: Path
) -> None:
    p = linear(seed, kinds, control, correlated, tmp_path)
    j = p.judgement
    number = np.argsort(order(p.made, j.solution))
    rows = np.flatnonzero(j.reliability.tested)
    still = p.fit(p.J, p.l, p.C, p.D)[0]
    moved, largest = np.empty(len(rows)), np.empty(len(rows))
    for k, i in enumerate(rows):
        l = p.l.copy()
        l[i] += j.smallest_detectable[i]
        step = p.fit(p.J, l, p.C, p.D)[0] - still
        moved[k] = step[p.dense.coordinate[number[j.effect_station[i]], j.effect_part[i]]]
        largest[k] = np.abs(step[: p.dense.first_group]).max()
    size = np.full(len(rows), np.median(largest))  # a line between held marks moves nothing
    matches(j.effect[rows], moved, size)
    matches(np.abs(j.effect[rows]), largest, size)


@pytest.mark.parametrize(("seed", "kinds", "control", "correlated"), CASES)
def test_redundancy_adds_up_and_the_spur_is_unchecked(
    seed: int, kinds: tuple[str, ...], control: str, correlated: bool, tmp_path: Path
) -> None:
    p = linear(seed, kinds, control, correlated, tmp_path)
    figures, r = p.judgement.reliability, p.judgement.solution.total.degrees_of_freedom
    assert r == len(p.l) - p.dense.count + p.D.shape[1]
    close(figures.redundancy.sum(), r, atol=1e-9)
    for part in p.judgement.solution.parts:
        close(figures.redundancy[part.rows].sum(), part.degrees_of_freedom, atol=1e-9)
    assert ((figures.checked_share >= 0) & (figures.checked_share <= 1)).all()
    W = np.linalg.inv(p.C)
    _, Q = p.fit(p.J, p.l, p.C, p.D)
    M = W - W @ p.J @ Q @ p.J.T @ W
    close(figures.checked_share, np.clip(np.diagonal(M) / np.diagonal(W), 0, 1), atol=1e-9)
    close(figures.redundancy, np.diagonal(p.C @ M), atol=1e-9)
    spur = (p.made.readings.stations == len(p.made.names) - 1).any(axis=1)
    clustered = np.concatenate([rows for rows, _ in p.made.clusters]) if correlated else np.empty(0, dtype=int)
    alone = spur & ~np.isin(np.arange(len(p.l)), clustered)
    assert spur.any()
    assert not figures.tested[alone].any()
    for values in (p.judgement.statistic, p.judgement.smallest_detectable, p.judgement.effect, figures.blunder):
        assert np.isnan(values[~figures.tested]).all()
    assert figures.tested.sum() >= len(p.l) - spur.sum() - 1


def test_a_wrong_standard_deviation_would_be_seen(tmp_path: Path) -> None:
    """The brute-force comparison can fail: five per cent in one standard deviation."""
    p = linear(0, KINDS[0], "held", False, tmp_path)
    p.C[0, 0] *= 1.05**2
    _, sd = by_refit(p, np.array([0]))
    assert abs(p.judgement.reliability.root[0] / sd[0] - 1) > 1e-3
