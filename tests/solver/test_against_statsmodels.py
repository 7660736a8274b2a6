"""Hat values, studentised residuals and covariance against statsmodels on random networks.

At the solution the linear model  l = J x + e  with a Jacobian written by hand is whitened by the covariance of the
readings and given to statsmodels: OLS of the whitened rows, and GLS with the covariance itself. Then

    redundancy              = 1 - hat diagonal                     (uncorrelated readings)
    statistic (given)       = -internally studentised residual times s
    statistic from residuals (tau) = -internally studentised residual      (residuals here are observed - computed)
    tau sqrt((r - 1) / (r - tau^2)) = -externally studentised residual     (Student's t with r - 1 degrees)
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from statsmodels.regression.linear_model import GLS, OLS
from statsmodels.stats.outliers_influence import OLSInfluence

import adjust
from adjust.judge.assess import Judgement
from adjust.solver.solution import Solution
from tests.helpers import close
from tests.networks import Array
from tests.solver.cases import SEEDS, random_case
from tests.solver.oracle import Dense, order, positions, solved


def from_residuals(solution: Solution) -> Judgement:
    """The judgement of the same solution when only the ratios of the standard deviations are trusted."""
    settings = solution.job.settings
    tests = replace(settings.tests, variance_factor="from-residuals")
    return adjust.assess(replace(solution, job=replace(solution.job, settings=replace(settings, tests=tests))))


def model(dense: Dense, solution: Solution) -> tuple[Array, Array]:
    """Jacobian (R, u) and reduced readings observed - computed (R,) at the solution."""
    xyz = positions(dense.made, solution)
    return dense.jacobian(xyz), -dense.residuals(np.nan_to_num(xyz), dense.groups_at(xyz))


@pytest.mark.parametrize("seed", SEEDS)
def test_influence_agrees_with_statsmodels(seed: int, tmp_path: Path) -> None:
    made = random_case(seed, tmp_path)
    dense, solution = Dense.of(made), solved(made)
    J, l = model(dense, solution)
    close(-solution.residuals, l, atol=1e-12)
    sd = made.readings.sd
    scale = np.linalg.norm(J / sd[:, None], axis=0)
    fit = OLS(l / sd, J / sd[:, None] / scale).fit()
    influence = OLSInfluence(fit)
    r, s = len(l) - dense.count, np.sqrt(fit.scale)
    given, tau = adjust.assess(solution), from_residuals(solution)
    close(given.reliability.redundancy, 1 - influence.hat_matrix_diag, atol=1e-11)
    assert given.reliability.tested.all(), "an unchecked reading has no studentised residual: choose another seed"
    internal = influence.resid_studentized_internal
    close(given.statistic, -internal * s, atol=1e-8)
    close(tau.statistic, -internal, atol=1e-8)
    t = tau.statistic * np.sqrt((r - 1) / (r - tau.statistic**2))
    external = influence.resid_studentized_external  # statsmodels refits without each row in turn
    size = np.maximum(1, np.abs(external))
    close(t / size, -external / size, atol=2e-8)
    close(fit.scale, solution.total.variance_factor, atol=1e-9 * fit.scale)


@pytest.mark.parametrize("seed", SEEDS)
def test_covariance_agrees_with_statsmodels_gls(seed: int, tmp_path: Path) -> None:
    """Correlated readings: every entry of the coordinates' covariance, and the variance factor."""
    made = random_case(seed, tmp_path, correlated=True)
    dense, solution = Dense.of(made), solved(made)
    J, l = model(dense, solution)
    scale = np.linalg.norm(J / made.readings.sd[:, None], axis=0)
    fit = GLS(l, J / scale, sigma=dense.covariance()).fit()
    Q = fit.normalized_cov_params / scale[:, None] / scale
    numbers = solution.design.unknowns.coordinate[order(made, solution)]
    inside = dense.coordinate >= 0
    assert (inside == (numbers >= 0)).all()
    c = numbers[inside]
    i, j = np.meshgrid(c, c, indexing="ij")
    d = dense.coordinate[inside]
    wanted = Q[np.ix_(d, d)]
    sizes = np.sqrt(np.diagonal(wanted))
    close(solution.cofactors.entries(i, j) / sizes[:, None] / sizes, wanted / sizes[:, None] / sizes, atol=1e-10)
    close(fit.scale, solution.total.variance_factor, atol=1e-9 * fit.scale)
