"""Stations that the readings fix only together: a ring of lengths, a chain that closes far away."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.errors import Unsolvable
from adjust.graph.starts import find_start
from tests.graph.sketch import Sketch
from tests.helpers import close
from tests.judge.unsettled_study import case

PLACES = {
    "A": (1000.0, 2000.0), "B": (1210.0, 2035.0), "C": (1105.0, 2190.0), "X": (1060.0, 2080.0),
    "Y": (1130.0, 2120.0), "Z": (1150.0, 2060.0),
}  # fmt: skip


def triangle() -> Sketch:
    """X, Y, Z in a triangle of lengths, each one length from a known station: no station can be placed alone."""
    return Sketch(**PLACES).distances("X-Y", "Y-Z", "Z-X", "A-X", "B-Z", "C-Y")


def test_three_stations_that_hang_together_are_said_to_have_several_solutions() -> None:
    """Six lengths, six coordinates: every solution named keeps all lengths, and the true one is among them."""
    one = triangle()
    start = find_start(one.network("A B C"))
    assert len(start.failures) == len(start.mirrors) > 0
    assert all("equally well" in sentence for sentence in start.failures)
    solutions = [start.positions[:, :2], *start.mirrors]
    for xy in solutions:
        for i, j in ("XY", "YZ", "ZX", "AX", "BZ", "CY"):
            a, b = one.number(i), one.number(j)
            close(np.linalg.norm(xy[a] - xy[b]), np.linalg.norm(one.truth[a, :2] - one.truth[b, :2]), atol=1e-5)
    assert min(np.abs(xy - one.truth[:, :2]).max() for xy in solutions) < 1e-5


def test_one_more_reading_tells_the_solutions_apart() -> None:
    one = triangle().angles("X: A Y")
    start = find_start(one.distances("B-X").network("A B C"))
    assert start.failures == start.doubtful == ()
    close(start.positions[:, :2], one.truth[:, :2], atol=1e-4)


def test_sights_to_north_close_a_figure_without_any_length() -> None:
    """Azimuths alone, no two of which cross in a placed station."""
    one = Sketch(**PLACES).azimuths("A-X", "B-Z", "X-Y", "Z-Y", "X-Z", "C-Y")
    start = find_start(one.network("A B C"))
    assert start.failures == start.doubtful == ()
    close(start.positions[:, :2], one.truth[:, :2], atol=1e-4)


def test_what_readings_do_not_fix_is_not_placed() -> None:
    one = Sketch(**PLACES).distances("X-Y", "Y-Z", "Z-X", "A-X", "B-Z")
    assert np.isnan(find_start(one.network("A B C")).positions[3:, :2]).all()


def test_a_knot_that_no_reading_closes_is_left_to_the_refusal(tmp_path: Path) -> None:
    """Number 37 of the study of jobs that do not settle: what holds the knot says nothing of its inside."""
    wrong = case(37, 1, tmp_path)
    with pytest.raises(Unsolvable, match="can flex between"):
        adjust.solve(wrong.job)
