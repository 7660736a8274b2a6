"""Targets that stood off their marks: the marks are found where they are, and the partials are right."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.frames import beside
from adjust.solver.design import State
from tests.helpers import close

A, B = np.array([0.0, 0.0, 10.0]), np.array([100.0, -20.0, 12.0])
MARK = np.array([60.0, 80.0, 31.0])
TOML = """[units]
length = "m"
angle = "deg"
[frame]
refraction = "0"
[instruments.i]
distance = "2 mm"
direction = "3 sec"
zenith = "5 sec"
[[book]]
file = "control.csv"
[[book]]
file = "directions.csv"
[[book]]
file = "distances.csv"
{surface}
{zenith}
"""


def seen(station: np.ndarray, along: float, right: float) -> np.ndarray:
    """Where the target stood: beyond the mark and to the right of it as seen from the station."""
    d = MARK[:2] - station[:2]
    u = d / np.hypot(*d)
    return MARK + np.array([*(along * u + right * np.array([u[1], -u[0]])), 0.0])


def job(folder: Path, offsets: dict[str, tuple[float, float]], booked: bool = True, space: bool = False) -> adjust.Job:
    """Readings from A and B to targets off the mark; without ``booked`` the offsets are not told."""
    directions, distances, zeniths = ["at,to,direction"], ["from,to,distance"], ["from,to,zenith_angle"]
    head = ",offset_along,offset_right" if booked else ""
    for name, station, other, known in (("A", A, "B", B), ("B", B, "A", A)):
        along, right = offsets[name]
        target = seen(station, along, right)
        tail = f",{along},{right}" if booked else ""
        zero = ",," if booked else ""
        d = target - station
        directions.append(f"{name},{other},{float(np.degrees(np.arctan2(*(known - station)[:2])) % 360)!r}{zero}")
        directions.append(f"{name},P,{float(np.degrees(np.arctan2(d[0], d[1])) % 360)!r}{tail}")
        level = float(np.hypot(d[0], d[1]))
        if space:
            level *= 1 + (MARK[2] - 11.0) / 6371008.8  # the plane lies at the mean of the known heights, 11 m
        rise = d[2] - level**2 / 2 / 6371008.8
        distances.append(f"{name},P,{float(np.hypot(level, rise)) if space else level!r}{tail}")
        zeniths.append(f"{name},P,{float(np.degrees(np.arctan2(level, rise)))!r}{tail}")
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "control.csv").write_text(
        "station,east,north,height\n"
        + "".join(f"{n},{x[0]},{x[1]},{x[2] if space else ''}\n" for n, x in (("A", A), ("B", B)))
    )
    for name, rows in (("directions", directions), ("distances", distances), ("zenith_angles", zeniths)):
        if space or name != "zenith_angles":
            (folder / f"{name}.csv").write_text("\n".join([rows[0] + head, *rows[1:]]) + "\n")
    (folder / "job.toml").write_text(
        TOML.format(
            surface='surface = "slope"' if space else "", zenith='[[book]]\nfile = "zenith_angles.csv"' if space else ""
        )
    )
    return adjust.read(folder)


@pytest.mark.parametrize("space", [False, True])
@pytest.mark.parametrize("offsets", [{"A": (0.3, -0.25), "B": (-0.4, 1.2)}, {"A": (0.0, 2.0), "B": (5.0, 0.0)}])
def test_the_mark_is_found_where_it_is(tmp_path: Path, offsets: dict[str, tuple[float, float]], space: bool) -> None:
    solution = adjust.solve(job(tmp_path, offsets, space=space))
    at = solution.positions[solution.names.index("P")]
    close(at[:2], MARK[:2], atol=2e-5 if space else 1e-8)  # the readings take curvature by its first term
    if space:
        close(at[2], MARK[2], atol=1e-4)  # five metres beyond the mark curve by another 0.04 mm
    close(solution.residuals, np.zeros(len(solution.residuals)), atol=1e-5)


def test_without_the_offsets_the_readings_disagree(tmp_path: Path) -> None:
    """Negative control: the same readings with nothing said of the offsets."""
    judgement = adjust.assess(adjust.solve(job(tmp_path, {"A": (0.3, -0.25), "B": (-0.4, 1.2)}, booked=False)))
    assert judgement.failed


def test_partials_of_an_offset_sight_by_differences() -> None:
    rng = np.random.default_rng(3)
    sights, offset = rng.uniform(-80, 80, (20, 4)), rng.uniform(-2, 2, (20, 2))
    _, by = beside(sights, offset)
    h = 1e-4
    for k in range(4):
        step = np.zeros(4)
        step[k] = h
        slope = (beside(sights + step, offset)[0] - beside(sights - step, offset)[0]) / (2 * h)
        close(by[:, :, k], slope, atol=1e-7)


@pytest.mark.parametrize("space", [False, True])
def test_partials_by_the_coordinates_of_the_mark(tmp_path: Path, space: bool) -> None:
    solution = adjust.solve(job(tmp_path, {"A": (0.3, -1.25), "B": (-0.4, 1.2)}, space=space))
    design, h = solution.design, 1e-4
    p = solution.names.index("P")
    for part in range(3 if space else 2):
        ends = []
        for sign in (1, -1):
            xyz = solution.positions.copy()
            xyz[p, part] += sign * h
            ends.append(design.linearise(State(xyz, solution.groups)).computed)
        here = design.linearise(State(solution.positions, solution.groups))
        at = design.columns == design.unknowns.coordinate[p, part]
        close((here.coefficients * at).sum(axis=1), (ends[0] - ends[1]) / (2 * h), atol=1e-7)
