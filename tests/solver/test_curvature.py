"""Newton's matrix of gross readings against differences of the gradient of v'Pv / 2."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.network import Array
from adjust.solver.curvature import curvature
from adjust.solver.design import State
from adjust.solver.gauss import GaussNewton, Linear
from adjust.solver.solve import prepare
from tests.networks import random_job
from tests.solver.space import random_space, write

SEED = 20261204
STEP_M = 1e-4


def gradient_change(iteration: GaussNewton, at: Linear, d: Array) -> Array:
    """Difference of the gradients (k,) a little before and behind a state along d (u,), for a movement of d."""
    unknowns, found = iteration.design.unknowns, []
    for sign in (1.0, -1.0):
        positions, groups = at.state.positions.copy(), at.state.groups.copy()
        numbered, shared = unknowns.coordinate >= 0, unknowns.shared >= 0
        positions[numbered] += sign * STEP_M * d[unknowns.coordinate[numbered]]
        groups[shared] += sign * STEP_M * d[unknowns.shared[shared]]
        there = iteration.at(State(positions, groups))
        there = iteration.at(iteration.moved(there, np.zeros_like(d)))  # orientations at their best
        found.append(iteration.pattern.right_side(there.whitened))
    return np.asarray((found[1] - found[0]) / (2 * STEP_M))


@pytest.mark.parametrize("kinds", [("angles", "distances"), ("directions", "distances"), ("space",)])
def test_newtons_matrix_is_the_second_derivative(
    kinds: tuple[str, ...], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Angles see the standing station twice; heights, slopes and zenith angles have curvature in space."""
    monkeypatch.setattr("adjust.solver.curvature.GROSS", 0.0)
    rng = np.random.default_rng(SEED)
    folder = tmp_path / "job"
    if kinds == ("space",):
        write(replace(random_space(rng), k=(0.13, None)), folder)  # its cross partials are left out
    else:
        random_job(rng, folder, 6, kinds)
    ready = prepare(adjust.read(folder))
    iteration, begin = ready.iteration, ready.begin
    far = State(begin.positions + rng.uniform(-30, 30, begin.positions.shape), begin.groups)
    d = np.zeros(iteration.design.unknowns.count)
    d[iteration.kept] = rng.normal(size=len(iteration.kept))
    here = iteration.at(iteration.moved(iteration.at(far), np.zeros_like(d)))
    normal = iteration.pattern.normal(here.whitened)
    bent = curvature(iteration.design, here.state, here.whitened, iteration.reduced, len(iteration.kept))
    assert bent is not None
    true = gradient_change(iteration, here, d)
    scale = np.abs(true).max()
    assert np.abs(true - (normal - bent) @ d[iteration.kept]).max() < 1e-6 * scale
    assert np.abs(true - normal @ d[iteration.kept]).max() > 1e-4 * scale  # without the curvature it is not
