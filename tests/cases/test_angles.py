"""Angles and directions: a triangle, a quadrilateral adjusted in two ways, a resection."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.network import Cluster
from adjust.solver.design import State
from adjust.solver.solve import prepare
from adjust.units import RHO_SEC
from tests.cases.worked import QUANTITIES, Case, Check, Result, checks_of, half_last_digit
from tests.helpers import close

INSIDE = (
    # inputs: Mikhail and Ackermann (1976), example 7.1, confidence: read; results: arithmetic, not outside evidence
    "triangle_of_three_angles",
    # inputs: Mikhail and Ackermann (1976), example 7.5, confidence: read; results: cross-check, not outside evidence
    "quadrilateral_directions_or_angles",
)
OUTSIDE = (
    # Ghilani (2010), example 15.5, page 277; confidence: memory
    "resection_four_points",
)
QUAD = Case("quadrilateral_directions_or_angles")
CORNER = np.array([[2.0, -1.0], [-1.0, 2.0]])
"""Covariance of two neighbouring differences of three directions of 1 second, square seconds."""


@pytest.mark.parametrize("check", checks_of(*INSIDE), ids=str)
def test_free_angles_agree_with_arithmetic_or_a_second_computation(check: Check, tmp_path: Path) -> None:
    check.passes(QUANTITIES[check.what](Case(check.case).run(tmp_path), check.of))


@pytest.mark.parametrize("check", checks_of(*OUTSIDE), ids=str)
def test_the_resection_gives_the_printed_digits(check: Check, tmp_path: Path) -> None:
    check.passes(QUANTITIES[check.what](Case(check.case).run(tmp_path), check.of))


def test_the_first_step_of_the_resection_is_the_remembered_one(tmp_path: Path) -> None:
    """Ghilani (2010), example 15.5; the corrections are from memory."""
    case = Case("resection_four_points")
    ready = prepare(adjust.read(case.write(tmp_path)))
    step = ready.iteration.step(ready.iteration.at(State(ready.start.positions, ready.start.groups)))
    here = ready.design.unknowns.coordinate[ready.network.stations.index["U"]]
    for number, part in zip(here, ("east", "north"), strict=False):
        printed = case.data["first_step"][part]
        close(step[number], float(printed), atol=half_last_digit(printed))


def angles_table() -> str:
    """The eight angles as differences of the readings of directions.csv."""
    rows = {}
    for line in QUAD.data["job"]["tables"]["directions"].split("\n")[1:]:
        if line:
            name, at, to, direction, _ = line.split(",")
            rows[name] = at, to, sum(float(x) / 60**i for i, x in enumerate(direction.split())) * 3600
    lines = ["id,at,first,second,angle"]
    for a, b in QUAD.data["angles"]["neighbours"]:
        (at, first, one), (_, second, two) = rows[a], rows[b]
        lines.append(f"{a}-{b},{at},{first},{second},{two - one:.2f} sec")
    return "\n".join(lines) + "\n"


def by_directions(folder: Path) -> tuple[np.ndarray, Result]:
    """Adjusted angles (8,) in radians from the adjustment of directions."""
    result = QUAD.run(folder)
    pairs = QUAD.data["angles"]["neighbours"]
    adjusted = result.solution.adjusted
    return np.array([adjusted[result.row(b)] - adjusted[result.row(a)] for a, b in pairs]), result


def by_angles(folder: Path, covariance: np.ndarray) -> tuple[np.ndarray, Result]:
    """Adjusted angles (8,) in radians, the two of each corner with this covariance in square seconds.

    No table says a covariance, so the clusters are put into the network that was read.
    """
    QUAD.write(folder)
    (folder / "directions.csv").unlink()
    (folder / "angles.csv").write_text(angles_table(), "utf-8")
    with (folder / "job.toml").open("a", encoding="utf-8") as toml:
        toml.write("instruments.theodolite.direction = '1 sec'\n")
    job = adjust.read(folder)
    clusters = tuple(Cluster(np.array([i, i + 1]), covariance / RHO_SEC**2) for i in range(0, 8, 2))
    result = Result.of(replace(job, network=replace(job.network, clusters=clusters)))
    return result.solution.adjusted, result


def test_directions_and_correlated_angles_are_one_adjustment(tmp_path: Path) -> None:
    """Identical angles, square sums and degrees of freedom. Cross-check of two ways, not outside evidence."""
    folders = [tmp_path / "directions", tmp_path / "angles"]
    for folder in folders:
        folder.mkdir()
    one, first = by_directions(folders[0])
    two, second = by_angles(folders[1], CORNER)
    close(two * RHO_SEC, one * RHO_SEC, atol=1e-6)
    close(second.solution.total.square_sum, first.solution.total.square_sum, atol=1e-8)
    assert first.solution.total.degrees_of_freedom == second.solution.total.degrees_of_freedom == 4
    wanted = QUAD.data["angles"]
    for angles in (one, two):
        close(np.degrees(angles), wanted["adjusted_degrees"], atol=wanted["tolerance_degrees"])


def test_angles_taken_as_uncorrelated_are_another_adjustment(tmp_path: Path) -> None:
    """The negative control: without the covariance of -1 the angles differ by far more than the tolerance above."""
    wanted = np.array(QUAD.data["angles"]["adjusted_degrees"])
    other, result = by_angles(tmp_path, np.diag([2.0, 2.0]))
    assert np.abs(np.degrees(other) - wanted).max() * 3600 > 0.05
    assert abs(result.solution.total.square_sum - 4.849322) > 0.1
