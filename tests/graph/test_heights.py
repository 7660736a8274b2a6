"""Starting heights: chains of rises, gross errors among them, slope distances and zenith angles."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from adjust.graph.starts import find_start
from adjust.kinds import KINDS
from adjust.network import Network
from tests.graph.sketch import Sketch
from tests.helpers import close

VALLEY = {
    "A": (1000.0, 2000.0, 50.0), "B": (1210.0, 2035.0, 61.0), "C": (1105.0, 2190.0, 112.0), "D": (1290.0, 2240.0, 95.0),
    "E": (1400.0, 2110.0, 137.0),
}  # fmt: skip
ROUND = ("A-B", "B-C", "C-D", "D-A", "B-D", "D-E", "E-B", "A-C", "E-A")


@pytest.fixture(autouse=True)
def zenith_kind(monkeypatch: pytest.MonkeyPatch) -> None:
    """A kind that says zenith; only what a start asks of it."""
    like = KINDS["distance"]
    kind = replace(like, name="zenith_sketch", table="", says="zenith", touches=("both",), fixes=frozenset())
    monkeypatch.setitem(KINDS, "zenith_sketch", kind)


def valley() -> Sketch:
    return Sketch(**VALLEY)


def test_levelled_chains_start_at_the_bench_mark() -> None:
    one = valley().rises(*ROUND)
    start = find_start(one.network(heights="C"))
    close(start.positions[:, 2], one.truth[:, 2], atol=1e-9)
    assert start.assumed == start.doubtful == ()


def test_levelling_without_a_height_starts_at_a_hundred_and_says_so() -> None:
    one = valley().rises(*ROUND)
    start = find_start(one.network())
    close(start.positions[:, 2], one.truth[:, 2] + 50.0, atol=1e-9)
    assert start.assumed == ("no height was given: A was taken at height 100 (metres)",)


@pytest.mark.parametrize("size", [0.5, -30.0, 1e6])
@pytest.mark.parametrize("row", range(len(ROUND)))
def test_a_gross_error_in_a_rise_is_named_and_outvoted(row: int, size: float) -> None:
    one = valley().rises(*ROUND)
    net = one.network(heights="C")
    values = net.blocks[0].values.copy()
    values[row] += size
    start = find_start(replace(net, blocks=(replace(net.blocks[0], values=values),)))
    close(start.positions[:, 2], one.truth[:, 2], atol=0.01)
    ((where, found),) = start.doubtful
    assert where == (0, row)
    assert abs(found + size) < 0.01


def slopes(one: Sketch, zenith: bool) -> Sketch:
    one.sets("A: B C D", "B: A C D E", "D: B E C A")
    for i, j in ("AC", "BD", "DE"):
        one.slope(i, j, (1.5, 1.7))
        if zenith:
            one.zenith(i, j, (1.5, 1.7))
    return one


def full(net: Network, one: Sketch) -> None:
    start = find_start(net)
    assert start.failures == start.doubtful == ()
    close(start.positions, one.truth, atol=1e-5)


def test_slope_distances_and_zenith_angles_give_places_and_heights() -> None:
    one = slopes(valley(), zenith=True)
    full(one.network("A B", heights="A B"), one)


def test_slope_distances_are_reduced_by_levelled_heights() -> None:
    one = slopes(valley(), zenith=False).rises(*ROUND)
    start = find_start(one.network("A B", heights="A"))
    assert start.failures == start.doubtful == ()
    # the curvature under a slope distance is left out: 1 mm for 60 m of rise at 200 m
    close(start.positions, one.truth, atol=2e-3)


def test_zenith_angles_from_intersected_places_give_heights() -> None:
    """No length at all: the zenith angles become rises when the places are there."""
    one = valley().sets("A: B C D", "B: A C D E", "D: B E C A")
    for i, j in ("AB", "AC", "AD", "BE"):
        one.zenith(i, j, (1.5, 0.3))
    full(one.network("A B", heights="A"), one)


def test_zenith_angles_over_horizontal_distances_give_rises_from_either_end() -> None:
    one = valley().sets("A: B C D", "B: A C D E").distances("A-C", "B-D", "B-E")
    one.zenith("C", "A", (1.5, 1.1)).zenith("B", "D").zenith("E", "B").zenith("A", "B", (0.0, 2.0))
    full(one.network("A B", heights="B"), one)


def test_plane_stations_without_heights_keep_no_height() -> None:
    one = valley().sets("A: B C").distances("A-C")
    assert np.isnan(find_start(one.network("A B")).positions[:, 2]).all()
