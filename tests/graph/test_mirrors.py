"""Two solutions that fit equally well are said, never chosen in silence; a reading or a `stations` row decides."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from adjust.graph.starts import find_start
from adjust.network import Network
from tests.graph.sketch import Sketch
from tests.helpers import close

PLACES = {
    "A": (1000.0, 2000.0), "B": (1210.0, 2035.0), "C": (1105.0, 2190.0), "D": (1290.0, 2240.0), "E": (1050.0, 2130.0),
}  # fmt: skip


def sketch() -> Sketch:
    return Sketch(**PLACES)


def hinge() -> Sketch:
    """C hangs on A and B by two distances."""
    return Sketch(**{k: PLACES[k] for k in "ABC"}).distances("A-C", "B-C")


def mirrored(one: Sketch, name: str) -> np.ndarray:
    """The place of a station beyond the line A-B."""
    a, b, x = (complex(*one.truth[one.number(k), :2]) for k in ("A", "B", name))
    z = a + (b - a) * ((x - a) / (b - a)).conjugate()
    return np.array([z.real, z.imag])


def test_two_distances_leave_two_places_and_both_are_printed() -> None:
    one = hinge()
    start = find_start(one.network("A B"))
    (sentence,) = start.failures
    other = mirrored(one, "C")
    assert sentence.startswith("C and its mirror image fit all readings equally well: C can stand at ")
    assert "1105.000, 2190.000" in sentence
    assert f"{other[0]:.3f}, {other[1]:.3f}" in sentence
    assert "a row for C in stations.csv" in sentence
    both = np.sort([start.positions[2, 0], start.mirrors[0][2, 0]])
    close(both, np.sort([1105.0, other[0]]), atol=1e-6)


def test_a_rough_row_decides() -> None:
    one = hinge()
    for shift, wanted in (
        ((25.0, 15.0), one.truth[2, :2]),
        (mirrored(one, "C") - one.truth[2, :2], mirrored(one, "C")),
    ):
        start = find_start(one.network("A B", rows="C", shift={"C": tuple(shift)}))
        assert start.failures == ()
        close(start.positions[2, :2], wanted, atol=20.0)


def test_a_very_rough_row_decides_and_the_readings_place() -> None:
    one = hinge()
    start = find_start(one.network("A B", rows="C", shift={"C": (60.0, 40.0)}))
    assert start.failures == ()
    close(start.positions[2, :2], one.truth[2, :2], atol=1e-6)


@pytest.mark.parametrize("add", ["sight", "angle", "azimuth"])
def test_one_more_reading_decides(add: str) -> None:
    one = hinge()
    {
        "sight": lambda: one.sets("C: A B"),
        "angle": lambda: one.angles("A: B C"),
        "azimuth": lambda: one.azimuths("C-A"),
    }[add]()
    start = find_start(one.network("A B"))
    assert start.failures == ()
    close(start.positions[2, :2], one.truth[2, :2], atol=1e-6)


def test_a_distance_further_on_unfolds_a_chain() -> None:
    """Nine lengths leave no fold inside, but nothing tells on which side of A-B all of it lies."""
    one = sketch().distances("A-C", "B-C", "C-D", "B-D", "C-E", "A-E", "D-E", "A-D", "B-E")
    start = find_start(one.network("A B"))
    (sentence,) = start.failures
    assert "their mirror images fit all readings equally well" in sentence
    assert all(name in sentence.split(" and their")[0] for name in "CDE")
    # the right one and its image beyond A-B, nothing folded
    for xy in (start.positions[:, :2], start.mirrors[0]):
        sides = np.array([mirrored(one, n) for n in "CDE"]), one.truth[2:, :2]
        assert min(np.abs(xy[2:] - side).max() for side in sides) < 1e-6


def test_a_free_network_of_distances_has_a_mirror_image() -> None:
    one = sketch().distances("A-C", "B-C", "A-B", "C-D", "B-D", "A-D", "C-E", "A-E", "D-E", "B-E")
    (sentence,) = find_start(one.network()).failures
    assert "mirror images fit all readings equally well" in sentence
    assert find_start(one.angles("A: B C").network()).failures == ()


def test_three_rows_decide_the_image_of_a_free_network() -> None:
    one = sketch().distances("A-C", "B-C", "A-B", "C-D", "B-D", "A-D", "C-E", "A-E", "D-E", "B-E")
    shift = {"A": (30.0, 10.0), "B": (-20.0, 15.0), "D": (8.0, -30.0)}
    start = find_start(one.network(rows="A B D", shift=shift))
    assert start.failures == ()
    z = start.positions[:, 0] + 1j * start.positions[:, 1]
    w = one.truth[:, 0] + 1j * one.truth[:, 1]
    ratio = (z[1:] - z[0]) / (w[1:] - w[0])
    close(ratio.real - ratio.real[0], np.zeros(4), atol=1e-6)
    close(ratio.imag - ratio.imag[0], np.zeros(4), atol=1e-6)


def test_a_third_mark_decides_unless_it_lies_on_the_line() -> None:
    one = Sketch(A=(0.0, 0.0), B=(100.0, 0.0), M=(240.0, 0.0), N=(240.0, 50.0), C=(60.0, 80.0))
    one.distances("A-C", "B-C", "M-C")
    assert "equally well" in find_start(one.network("A B M")).failures[0]
    other: Network = replace(one.distances("N-C").network("A B M N"))
    start = find_start(other)
    assert start.failures == ()
    close(start.positions[4, :2], [60.0, 80.0], atol=1e-6)
