"""Readings no test can tell apart: the chance of the wrong one against draws, groups against the full matrix."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge.influence import Influence
from adjust.judge.separable import TOLD_APART, groups, wrong_of_many, wrong_of_two
from tests.helpers import close

NETWORKS = Path(__file__).parents[2] / "networks"
SHIFT = 4.13


@pytest.mark.parametrize("rho", [0.0, 0.5, 0.9, 0.99, -0.95])
def test_chance_of_the_wrong_one_of_two_is_that_of_draws(rho: float) -> None:
    rng = np.random.default_rng(17)
    a, b = rng.standard_normal((2, 400_000))
    one, other = a + 2.0, rho * a + np.sqrt(1 - rho**2) * b + 2.0 * rho
    close(wrong_of_two(rho, 2.0), (np.abs(other) > np.abs(one)).mean(), atol=0.003)


def test_chance_of_a_wrong_one_of_many() -> None:
    close(wrong_of_many(np.ones((6, 6)), SHIFT), 5 / 6, atol=1e-12)
    rho = np.array([[1.0, 0.95, 0.92], [0.95, 1.0, 0.97], [0.92, 0.97, 1.0]])
    rng = np.random.default_rng(3)
    draws = rng.multivariate_normal(np.zeros(3), rho, 300_000)
    worst = max(1 - (np.abs(draws + SHIFT * rho[i]).argmax(axis=1) == i).mean() for i in range(3))
    close(wrong_of_many(rho, SHIFT), worst, atol=0.01)
    # two statistics that are one and the same, and a third: the two share the blame
    pair = np.array([[1.0, 1.0, 0.95], [1.0, 1.0, 0.95], [0.95, 0.95, 1.0]])
    close(wrong_of_many(pair, SHIFT), 1 - (1 - wrong_of_two(0.95, SHIFT)) / 2, atol=0.01)


@pytest.mark.parametrize("demo", ["weir-levels", "link-traverse", "valley-side", "river-levels"])
def test_groups_are_complete_and_none_is_missed(demo: str) -> None:
    judgement = adjust.assess(adjust.solve(adjust.read(NETWORKS / demo)))
    figures, influence = judgement.reliability, Influence.of(judgement.solution)
    rows = np.flatnonzero(figures.tested)
    m = influence.columns(rows)[rows]
    rho = np.abs(m / np.sqrt(np.outer(np.diagonal(m), np.diagonal(m)))) - np.eye(len(rows))
    found = groups(influence, figures, SHIFT)
    place = {int(r): k for k, r in enumerate(rows)}
    grouped = {r for g in found for r in g.rows}
    for g in found:
        pairs = [rho[place[a], place[b]] for a in g.rows for b in g.rows if a < b]
        assert min(pairs) > TOLD_APART
        close(g.correlation, min(pairs), atol=1e-9)
    linked = {int(rows[i]) for i in np.flatnonzero((rho > TOLD_APART).any(axis=1))}
    assert grouped <= linked
    alone = linked - grouped  # complete linkage leaves a reading out only where its partners are in closer groups
    assert all(any(int(rows[k]) in grouped for k in np.flatnonzero(rho[place[r]] > TOLD_APART)) for r in alone)
    assert found


def test_a_level_loop_is_one_group(tmp_path: Path) -> None:
    (tmp_path / "job.toml").write_text(
        '[units]\nlength = "m"\nangle = "deg"\n[instruments.a]\nlevelling = "1 mm*sqrt(km)"\n'
    )
    (tmp_path / "control.csv").write_text("station,height\nA,100\n")
    (tmp_path / "levelled.csv").write_text(
        "from,to,rise,length\nA,B,1.000,400\nB,C,2.000,500\nC,D,-1.500,300\nD,A,-1.503,700\n"
    )
    judgement = adjust.assess(adjust.solve(adjust.read(tmp_path)))
    (group,) = judgement.separability
    assert group.rows == (0, 1, 2, 3)
    close(group.correlation, 1.0, atol=1e-9)
    close(group.wrong, 0.75, atol=1e-9)
