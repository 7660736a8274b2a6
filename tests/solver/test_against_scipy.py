"""Coordinates, square sum and degrees of freedom against scipy.optimize.least_squares on random networks.

The other side: residual equations written anew from the plain arrays, orientations as explicit unknowns, partials by
scipy's own three-point differences, trust-region steps. Nothing but the numbers of the book is shared.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import least_squares

from tests.helpers import close
from tests.solver.cases import SEEDS, random_case
from tests.solver.oracle import Dense, positions, solved


@pytest.mark.parametrize("seed", SEEDS)
def test_coordinates_and_square_sum_agree_with_scipy(seed: int, tmp_path: Path) -> None:
    made = random_case(seed, tmp_path)
    dense, solution = Dense.of(made), solved(made)

    def weighted(x: np.ndarray) -> np.ndarray:
        return dense.residuals(*dense.unpack(x)) / made.readings.sd

    start = np.zeros(dense.count)
    start[dense.first_group :] = dense.groups_at(made.start)
    found = least_squares(
        weighted, start, jac="3-point", x_scale="jac", method="trf", xtol=1e-15, ftol=1e-15, gtol=1e-15
    )
    xyz, _ = dense.unpack(found.x)
    ours = positions(made, solution)
    asked = ~np.isnan(ours)
    assert asked.any(axis=1).all()
    close(ours[asked], xyz[asked], atol=1e-7)
    assert np.abs(xyz - made.start)[dense.coordinate >= 0].max() > 1e-3, "the start was already the answer"
    close(solution.total.square_sum, 2 * found.cost, atol=1e-7 * found.cost)
    assert solution.total.degrees_of_freedom == len(made.readings) - dense.count
    assert solution.total.observations == len(made.readings)
    assert solution.total.unknowns == dense.count


def test_a_reading_wrong_by_a_millimetre_would_be_seen(tmp_path: Path) -> None:
    """The comparison can fail: 1 mm in one distance moves the other side by more than its tolerance."""
    made = random_case(0, tmp_path)
    dense, solution = Dense.of(made), solved(made)
    xyz = positions(made, solution)
    J = dense.jacobian(xyz) / made.readings.sd[:, None]
    row = int(np.flatnonzero(made.readings.kind == "distance")[0])
    moved = np.linalg.lstsq(J, np.eye(len(J))[row] * 1e-3 / made.readings.sd[row], rcond=None)[0]
    assert np.abs(moved[: dense.first_group]).max() > 1e-5
