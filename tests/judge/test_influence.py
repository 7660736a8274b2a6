"""Columns of M against the one-reading figures, and extra unknowns against an adjustment that has them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge.influence import Influence
from adjust.judge.reliability import reliability
from tests.helpers import close
from tests.solver.test_leave_one_out import CASES, linear


@pytest.mark.parametrize(("seed", "kinds", "control", "correlated"), CASES)
def test_columns_are_those_of_the_dense_matrix(
    seed: int, kinds: tuple[str, ...], control: str, correlated: bool, tmp_path: Path
) -> None:
    p = linear(seed, kinds, control, correlated, tmp_path)
    W = np.linalg.inv(p.C)
    _, Q = p.fit(p.J, p.l, p.C, p.D)
    M = W - W @ p.J @ Q @ p.J.T @ W
    rows = np.arange(len(p.l))
    got = Influence.of(p.judgement.solution).columns(rows)
    scale = np.sqrt(np.diagonal(W))
    close(got / scale[:, None] / scale, M / scale[:, None] / scale, atol=1e-9)
    figures = p.judgement.reliability
    close(np.diagonal(got) / scale**2, figures.m / scale**2, atol=1e-9)
    close(figures.pv / scale, -(M @ p.l) / scale, atol=1e-6)


def test_three_errors_at_once_are_those_of_the_dense_fit(tmp_path: Path) -> None:
    p = linear(0, ("distances", "directions", "angles"), "held", False, tmp_path)
    rows = np.flatnonzero(p.judgement.reliability.tested)[[1, 5, 9]]
    E = np.eye(len(p.l))[:, rows]
    x, Q = p.fit(np.column_stack([p.J, E]), p.l, p.C, np.zeros((p.J.shape[1] + 3, 0)))
    solution = p.judgement.solution
    K = Influence.of(solution).columns(rows)[rows]
    b = -np.linalg.solve(K, reliability(solution).pv[rows])
    sd = np.sqrt(np.diagonal(Q)[-3:])
    close(b / sd, x[-3:] / sd, atol=1e-6)
    close(np.linalg.inv(K) / np.outer(sd, sd), Q[-3:, -3:] / np.outer(sd, sd), atol=1e-8)


def test_conditions_have_no_influence() -> None:
    solution = adjust.solve(adjust.read(Path(__file__).parents[2] / "networks" / "loop-traverse-feet"))
    held = np.flatnonzero(solution.design.held)
    assert len(held)
    columns = Influence.of(solution).columns(np.arange(len(solution.residuals)))
    assert not columns[held].any()
    assert not columns[:, held].any()
