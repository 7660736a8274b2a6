"""Simple balances: sums, closed forms, and how they stand beside least squares. Printed values are in tests/cases."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge.balances import (
    BY_LENGTH,
    BY_LINES,
    BY_SETUPS,
    COMPASS,
    TRANSIT,
    area,
    balances,
    compass,
    equal,
    shared_out,
    summed_up,
    transit,
)
from tests.helpers import close

ROOT = Path(__file__).resolve().parents[2]
STEPS = np.array([[30.0, 40.0], [60.0, -80.0], [-90.2, 40.1]])


def test_corrections_take_the_whole_misclosure_away() -> None:
    w = tuple(STEPS.sum(axis=0).tolist())
    for correction in (compass(np.array([50.0, 100.0, 98.0]), w), transit(STEPS, w)):
        close((STEPS + correction).sum(axis=0), [0.0, 0.0], atol=1e-12)
        assert np.abs(correction).min() > 0
    close(shared_out(np.array([1.0, 3.0]), 0.8), [-0.2, -0.6], atol=1e-12)


def test_compass_goes_by_length_and_transit_by_component() -> None:
    close(compass(np.array([1.0, 3.0]), (0.4, -0.8)), [[-0.1, 0.2], [-0.3, 0.6]], atol=1e-12)
    close(transit(np.array([[1.0, 0.0], [-3.0, 0.0]]), (0.4, 0.0)), [[-0.1, 0.0], [-0.3, 0.0]], atol=1e-12)


def test_equal_angles_coordinates_and_area() -> None:
    close(equal(np.array([1.0, 2.0, 3.0]), 0.3), [0.9, 1.9, 2.9], atol=1e-12)
    corners = summed_up(np.array([5.0, 6.0]), np.array([[4.0, 0.0], [0.0, 3.0]]))
    close(corners, [[5, 6], [9, 6], [9, 9]], atol=1e-12)
    close(area(corners), 6.0, atol=1e-12)
    close(area(corners[::-1]), 6.0, atol=1e-12)


def levels(folder: Path, header: str, *rows: str) -> adjust.Solution:
    (folder / "job.toml").write_text('[units]\nlength = "m"\nangle = "dms"\n')
    (folder / "control.csv").write_text("station,height\nA,10\nB,12\n")
    (folder / "levelled.csv").write_text("\n".join([header, *rows]) + "\n")
    return adjust.solve(adjust.read(folder))


@pytest.mark.parametrize(
    ("header", "sizes", "method", "height"),
    [
        ("from,to,rise,sd,length", (",100", ",300"), BY_LENGTH, 11 - 0.01 * 100 / 400),
        ("from,to,rise,sd,setups", (",1", ",4"), BY_SETUPS, 11 - 0.01 / 5),
        ("from,to,rise,sd", ("", ""), BY_LINES, 11 - 0.01 / 2),
    ],
)
def test_levels_by_length_setups_or_lines(
    header: str, sizes: tuple[str, str], method: str, height: float, tmp_path: Path
) -> None:
    solution = levels(tmp_path, header, f"A,P,1,0.001{sizes[0]}", f"P,B,1.01,0.001{sizes[1]}")
    (one,) = balances(solution)
    assert (one.method, one.kind, [solution.names[i] for i in one.stations]) == (method, "level run", ["A", "P", "B"])
    close(one.places[:, 0], [10.0, height, 12.0], atol=1e-12)
    # least squares with equal weights is the balance by lines
    close(one.largest, abs(height - 10.995), atol=1e-9)
    assert method == BY_LINES or solution.names[one.at] == "P"


def test_levels_weighted_by_length_are_the_balance_by_length(tmp_path: Path) -> None:
    rows = ("A,P,0.7,0.001,100", "P,Q,0.6,0.002,400", "Q,B,0.714,0.003,900")
    (one,) = balances(levels(tmp_path, "from,to,rise,sd,length", *rows))
    assert one.method == BY_LENGTH
    assert one.largest < 1e-9
    close(one.places[1, 0], 10.7 - 0.014 / 14, atol=1e-9)


@pytest.mark.parametrize("network", ["link-traverse", "loop-traverse-feet"])
def test_traverses_end_where_they_should_and_lie_near_least_squares(network: str) -> None:
    solution = adjust.solve(adjust.read(ROOT / "networks" / network))
    found = balances(solution)
    assert [one.method for one in found] == [COMPASS, TRANSIT]
    known = solution.network.stations.known
    for one in found:
        first, last = one.stations[0], one.stations[-1]
        close(one.places[0], known[first, :2], atol=1e-9)
        close(one.places[-1], known[last, :2], atol=1e-8)
        away = np.hypot(*(one.places - solution.positions[list(one.stations), :2]).T)
        close(one.largest, away.max(), atol=1e-12)
        assert 1e-5 < one.largest < 0.01
