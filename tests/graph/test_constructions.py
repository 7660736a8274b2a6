"""Every construction by itself: exact readings must give the exact places, and nothing but these readings is there."""

from __future__ import annotations

import math

import numpy as np
import pytest

from adjust.graph.starts import Start, find_start
from adjust.network import Network
from tests.graph.sketch import Sketch
from tests.helpers import close

PLACES = {
    "A": (1000.0, 2000.0), "B": (1210.0, 2035.0), "C": (1105.0, 2190.0), "D": (1290.0, 2240.0),
    "E": (1400.0, 2110.0), "F": (1450.0, 2290.0), "G": (1210.0, 2400.0), "H": (1020.0, 2330.0),
}  # fmt: skip


def sketch(names: str = "A B C D E F G H") -> Sketch:
    return Sketch(**{name: PLACES[name] for name in names.split()})


def found(network: Network) -> Start:
    start = find_start(network)
    assert start.failures == ()
    assert start.doubtful == ()
    return start


def exact(one: Sketch, known: str, rows: str = "") -> None:
    """The start stands on the truth in the frame of the known stations."""
    start = found(one.network(known, rows))
    close(start.positions[:, :2], one.truth[:, :2], atol=1e-6)
    assert start.assumed == ()


CASES = {
    "polar steps along a traverse": (
        sketch("A B C D E").sets("B: A C", "C: B D", "D: C E").distances("B-C", "C-D", "D-E"), "A B"),
    "polar step by an angle": (sketch("A B C").angles("A: B C").distances("A-C"), "A B"),
    "intersection of two sets": (sketch("A B C").sets("A: B C", "B: A C"), "A B"),
    "intersection of two angles, one turned backwards": (sketch("A B C").angles("A: C B", "B: A C"), "A B"),
    "resection from a set": (sketch("A B D C").sets("C: A B D"), "A B D"),
    "resection from two angles": (sketch("A B D C").angles("C: A B", "C: B D"), "A B D"),
    "resection from two angles without a common mark": (
        sketch("A B D F C").angles("C: A B", "C: D F", "C: A F"), "A B D F"),
    "a chain of resections": (sketch("A B D C E H").sets("C: A B D", "E: A D C", "H: A C E"), "A B D"),
    "trilateration from three marks": (sketch("A B D C").distances("A-C", "B-C", "D-C"), "A B D"),
    "two distances and a pointing": (sketch("A B C").distances("A-C", "B-C").sets("A: B C"), "A B"),
    "distance from one mark, pointing from the other": (
        sketch("A E F").distances("A-F").sets("E: A F"), "A E"),
    "azimuths alone": (sketch("A B C D").azimuths("A-C", "B-C", "D-B", "C-D"), "A B"),
    "azimuths of a set with a turn": (sketch("A B C D").azimuths("A-B", "A-C", "B-C", "D-B", "C-D", turn=0.05), "A B"),
    "azimuth orients a traverse from one mark": (
        sketch("A B C D").azimuths("A-B").distances("A-B", "B-C", "C-D").sets("B: A C", "C: B D"), "A"),
    "resection with one angle and a distance": (
        sketch("A B C").angles("C: A B").distances("A-C").sets("B: A C"), "A B"),
    "two unknown set-ups see two marks and each other": (sketch("A F C D").sets("C: A D F", "D: A C F"), "A F"),
    "rounds with free orientation far from control, joined by two sights": (
        sketch("A B D E F G C").sets("D: E F G C", "E: D F C", "G: D F C A B", "C: D G A B E")
        .distances("D-E", "D-F", "D-G", "C-D", "C-A"), "A B"),
    "two groups joined by similarity": (
        sketch("A C D E F G H").sets("D: E F G", "E: D F", "F: D G E", "A: C H", "H: A C", "C: A H D F", "G: D F C")
        .distances("D-E", "A-H"), "A D"),
    "angles alone with one base line": (
        sketch("A B C D E F").angles("A: B C", "B: C A", "B: D C", "C: B D", "D: B C")
        .angles("D: E B", "B: E D", "E: F D", "D: F E"), "A B"),
    "three groups hinged in a triangle, turned the right way by a sight across": (
        sketch("A F C D G H").sets("C: A D H F", "D: A C", "H: A C", "G: D F")
        .distances("A-C", "C-H", "D-G", "F-G"), "A F"),
    "a link traverse with a knee where no angle was turned, and one sight across": (
        sketch("A B D F G").sets("B: A D", "F: D G B", "D: F").distances("A-B", "B-D", "D-F", "F-G"), "A G"),
    "trilateration chain, sorted out by a sight": (
        sketch("A B C D E").distances("A-C", "B-C", "B-D", "C-D", "D-E", "B-E").sets("C: A B D", "D: C B E"), "A B"),
}  # fmt: skip


@pytest.mark.parametrize("name", CASES)
def test_construction_gives_the_exact_places(name: str) -> None:
    exact(*CASES[name])


@pytest.mark.parametrize("name", CASES)
def test_construction_does_not_depend_on_the_order_of_rows(name: str) -> None:
    one, known = CASES[name]
    network = one.network(known)
    turned = []
    for b in network.blocks:
        back = np.arange(len(b))[::-1]
        turned.append(type(b)(b.kind, b.file, b.stations[back], b.values[back], b.sd[back], b.group[back], b.held[back],
                              b.line[back], surface=b.surface))  # fmt: skip
    start = found(Network(network.stations, tuple(turned[::-1]), network.groups))
    close(start.positions[:, :2], one.truth[:, :2], atol=1e-6)


def shape(network: Network, start: Start, one: Sketch) -> tuple[complex, float]:
    """Factor and largest misfit of the similarity that best brings the start onto the truth; no reflection."""
    z = start.positions[:, 0] + 1j * start.positions[:, 1]
    w = one.truth[:, 0] + 1j * one.truth[:, 1]
    z, w = z - z.mean(), w - w.mean()
    factor = complex(np.vdot(z, w) / np.vdot(z, z))
    return factor, float(np.abs(factor * z - w).max())


def test_free_network_stands_at_a_thousand_with_its_first_sight_north() -> None:
    one = sketch("A B C D").sets("A: B C D", "B: A C D", "C: D A").distances("A-B", "C-D")
    network = one.network()
    start = found(network)
    factor, misfit = shape(network, start, one)
    close(abs(factor), 1.0, atol=1e-9)
    assert misfit < 1e-6
    a, b = start.positions[0], start.positions[1]
    close(b[0], a[0], atol=1e-6)
    assert b[1] > a[1]
    assert start.positions[:, :2].min() > 0
    assert start.assumed == (
        f"no coordinates were given: A was placed at {a[0]:.0f}, {a[1]:.0f} (metres east, north) and north runs from "
        "it to B",
    )


def test_free_network_with_azimuths_is_turned_to_their_north() -> None:
    one = sketch("A B C D").azimuths("C-D").angles("A: B C", "B: C A", "B: D C", "C: B D").distances("B-D")
    network = one.network()
    start = found(network)
    factor, misfit = shape(network, start, one)
    close([factor.real, factor.imag], [1.0, 0.0], atol=1e-9)
    assert misfit < 1e-6
    assert "north is that of the azimuths" in start.assumed[0]


def test_free_network_without_a_length_says_which_line_it_took_as_a_hundred_metres() -> None:
    one = sketch("A B C D").angles("A: B C", "B: C A", "B: D C", "C: B D", "D: B C")
    start = found(one.network())
    assert shape(one.network(), start, one)[1] < 1e-6
    assert "taken as 100 m, since no length was measured" in start.assumed[0]
    b, c = start.positions[1, :2], start.positions[2, :2]
    close(math.dist(b, c), 100.0, atol=1e-6)


def test_one_known_mark_and_nothing_for_north_starts_in_a_frame_of_its_own_at_the_mark() -> None:
    one = sketch("A B C D").sets("B: A C", "C: B D", "D: C A").distances("A-B", "B-C", "C-D", "D-A")
    start = found(one.network("B"))
    close(start.positions[1, :2], one.truth[1, :2], atol=1e-9)
    factor, misfit = shape(one.network("B"), start, one)
    close(abs(factor), 1.0, atol=1e-9)
    assert misfit < 1e-6


def test_rough_station_rows_place_a_free_network_near_them_and_are_kept_as_reference() -> None:
    """Rows scaled off a map, one in the wrong square: the shape comes from the readings, the place from the rest."""
    one = sketch().sets("A: B C H", "B: A C E D", "C: A B D H G", "D: C B E F G", "E: B D F", "G: C D F H")
    one.distances("A-B", "C-D", "D-F", "G-H")
    names = "A B C D E F G H"
    network = one.network(rows=names, shift={"A": (12.0, -9.0), "D": (5.0, 8.0), "F": (100_000.0, 0.0)})
    start = found(network)
    factor, misfit = shape(network, start, one)
    assert misfit < 1e-6
    assert abs(factor - 1) < 0.1
    close(start.reference[:, :2], network.stations.start[:, :2], atol=1e-9)
    assert np.abs(start.positions[:, :2] - one.truth[:, :2]).max() < 30
