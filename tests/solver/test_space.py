"""Networks in space against scipy's least squares on equations written a second time (tests/solver/space.py)."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.record.build import build
from tests.helpers import close
from tests.solver.space import random_space, reference, write

NETWORKS = 35
"""Besides 15 more mixtures in test_any_space.py."""


@pytest.mark.parametrize("seed", range(NETWORKS))
def test_random_networks_agree_with_scipy(seed: int, tmp_path: Path) -> None:
    space = random_space(np.random.default_rng([20261201, seed]))
    xyz, k, square_sum = reference(space)
    solution = adjust.solve(adjust.read(write(space, tmp_path / "job")))
    got = solution.positions[[solution.network.stations.index[name] for name in space.names]]
    close(got - space.truth.mean(axis=0), xyz - space.truth.mean(axis=0), atol=1e-6)
    close(solution.total.square_sum, square_sum, atol=1e-6 * square_sum)
    shared = [i for i, group in enumerate(solution.network.groups) if group.what == "refraction"]
    assert bool(shared) == (space.k[1] is not None)
    if shared:
        close(solution.groups[shared], [k], atol=1e-5)


def test_a_radius_one_per_cent_off_is_seen_by_the_comparison(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    space = random_space(np.random.default_rng([20261201, 1]))
    solution = adjust.solve(adjust.read(write(space, tmp_path / "job")))
    got = solution.positions[[solution.network.stations.index[name] for name in space.names]]
    assert np.abs(got - reference(space)[0]).max() < 1e-6
    monkeypatch.setattr("tests.solver.space.R", 0.99 * 6371008.8)
    assert np.abs(got - reference(space)[0]).max() > 1e-5


@pytest.mark.parametrize("seed", range(6))
def test_free_networks_in_space_have_the_residuals_of_scipy(seed: int, tmp_path: Path) -> None:
    """Without control the least square sum is the same for every datum; the centre stays at that of the starts."""
    space = random_space(np.random.default_rng([20261202, seed]), free=True)
    solution = adjust.solve(adjust.read(write(space, tmp_path / "job")))
    part = solution.parts[0]
    assert len(solution.parts) == 1
    assert part.datum is not None
    assert part.datum.missing == ("shift east", "shift north", "turn", "height")
    order = [solution.network.stations.index[name] for name in space.names]
    close(solution.positions[order].mean(axis=0), space.start.mean(axis=0), atol=1e-7)
    redundancy = adjust.assess(solution).reliability.redundancy.sum()
    # raising the whole net by a metre makes lengths 1.6e-7 longer on the plane, so the height is not quite free
    close(redundancy, part.degrees_of_freedom, atol=2e-5)
    square_sum = reference(replace(space, start=solution.positions[order]))[2]
    close(solution.total.square_sum, square_sum, atol=1e-4 * square_sum)


def test_refraction_with_a_prior_recovers_the_coefficient_of_the_day(tmp_path: Path) -> None:
    """Many long sights and two known heights: the coefficient comes from the readings, not from its prior."""
    rng = np.random.default_rng(20261203)
    found, sds = [], []
    for trial in range(40):
        folder = tmp_path / str(trial)
        k = 0.20
        rows, names = ["from,to,zenith_angle"], [f"P{i}" for i in range(6)]
        heights = [100.0, 130.0, 160.0, 118.0, 145.0, 171.0]
        for i in range(6):
            for j in range(6):
                if i != j:
                    d = 800.0 * abs(i - j)
                    theta = 2 * math.asin(d / (2 * 6371008.8))
                    r1, r2 = 6371008.8 + heights[i] - 100, 6371008.8 + heights[j] - 100
                    z = math.atan2(r2 * math.sin(theta), r2 * math.cos(theta) - r1) - k * theta / 2
                    rows.append(f"{names[i]},{names[j]},{math.degrees(z + rng.normal(0, math.radians(2 / 3600)))!r}")
        control = [f"{name},{800.0 * i},0,{heights[i] if i in (0, 5) else ''}" for i, name in enumerate(names)]
        folder.mkdir()
        (folder / "job.toml").write_text(
            '[units]\nlength = "m"\nangle = "deg"\n[frame]\nplane_height = "100 m"\nrefraction = "0.13 +- 0.1"\n'
            '[instruments.t]\nzenith = "2 sec"\n'
        )
        (folder / "zenith_angles.csv").write_text("\n".join(rows) + "\n")
        (folder / "control.csv").write_text("\n".join(["station,east,north,height", *control]) + "\n")
        judgement = adjust.assess(adjust.solve(adjust.read(folder)))
        record = build(judgement)
        (parameter,) = record["parameters"]
        assert (parameter["what"], parameter["of"]) == ("refraction", "the job")
        assert record["observations"][0]["id"] == "job.toml:6"
        assert record["observations"][0]["booked"] == "0.13 +- 0.1"
        found.append(parameter["value"])
        sds.append(parameter["sd"])
    sd = float(np.mean(sds))
    print("k", np.mean(found), "spread", np.std(found), "stated", sd)
    assert sd < 0.02
    assert abs(np.mean(found) - 0.20) < 4 * sd / math.sqrt(40) + 0.07 * sd**2 / 0.1**2
    assert abs(np.mean(found) - 0.13) > 20 * sd / math.sqrt(40)
    assert 0.6 < np.std(found) / sd < 1.5
