"""Networks of the study of slope distances (tests/solver/any_slopes.py) in the default tests: one of every outcome."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from tests.solver.any_slopes import SEED, elsewhere, fitted, outcome, random_slopes


@pytest.mark.parametrize(
    ("number", "expected"),
    [
        (14, "agrees"),
        (23, "refused, two solutions"),  # two stations known in the plane: all the rest lies on either side of them
        (10, "refused, fixed only just"),  # from the bottom of the valley Gauss-Newton's steps grow 2.5 times each
    ],
)
def test_any_network_of_slope_distances(number: int, expected: str, tmp_path: Path) -> None:
    print("seed", SEED, number)
    what, off, text = outcome(number, tmp_path / "job")
    assert what == expected, f"{what}: {text} {off}"


def test_a_gross_slope_distance_settles(tmp_path: Path) -> None:
    assert outcome(8, tmp_path / "job", blunder=True)[0] == "settled at the least"


@pytest.mark.parametrize(("number", "twofold"), [(14, False), (23, True)])
def test_the_study_itself_notices_a_second_solution(number: int, twofold: bool) -> None:
    space = random_slopes(np.random.default_rng([SEED, number]))
    assert elsewhere(space, *fitted(space)) == twofold
