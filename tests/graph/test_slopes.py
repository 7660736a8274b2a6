"""Slope distances alone: places in space by trilateration, images above and below, heights fixed only just."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np
import pytest

from adjust.graph.clues import Clues
from adjust.graph.images import bodies, reflected, upright
from adjust.graph.lifted import lifted
from adjust.graph.space import Space
from adjust.graph.spheres import Plane, Sphere, meet, places
from adjust.graph.starts import find_start
from tests.graph.sketch import Sketch
from tests.helpers import close

HILLS = {
    "A": (1000.0, 2000.0, 50.0), "B": (1210.0, 2035.0, 61.0), "C": (1105.0, 2190.0, 112.0), "D": (1290.0, 2240.0, 95.0),
    "E": (1400.0, 2110.0, 137.0), "X": (1150.0, 2080.0, 85.0), "Y": (1260.0, 2120.0, 70.0),
}  # fmt: skip
CURVATURE_M = 0.01
"""The curvature that the sketch puts into a slope is 7 mm at 300 m, measured from the ground and not from the plane."""


def slopes(lines: str, **places_: tuple[float, float, float]) -> Sketch:
    one = Sketch(**(places_ or HILLS))
    for line in lines.split():
        one.slope(line[0], line[1], (1.5, 1.3))
    return one


@pytest.mark.parametrize("seed", range(5))
def test_three_spheres_meet_in_two_points_and_a_fourth_decides(seed: int) -> None:
    rng = np.random.default_rng(seed)
    x, centres = rng.normal(size=3) * 50, rng.normal(size=(4, 3)) * 100
    spheres = [Sphere(c, float(np.linalg.norm(x - c))) for c in centres]
    points = meet((spheres[0], spheres[1], spheres[2]))
    assert len(points) == 2
    for point in points:
        close(np.linalg.norm(point - centres[:3], axis=1), [one.radius for one in spheres[:3]], atol=1e-7)
    ((found, _),) = places(list(spheres))
    close(found, x, atol=1e-6)
    level = Plane(np.array([0.0, 0.0, 1.0]), float(x[2]))
    ((found, _),) = places([level, *spheres[:3]])
    close(found, x, atol=1e-6)


def test_four_known_stations_place_a_fifth() -> None:
    one = slopes("AX BX CX DX")
    start = find_start(one.network("A B C D", heights="A B C D"))
    assert start.failures == start.doubtful == ()
    close(start.positions[5], one.truth[5], atol=CURVATURE_M)


def test_three_known_stations_leave_an_image_beyond_their_plane() -> None:
    one = slopes("AX BX CX")
    start = find_start(one.network("A B C", heights="A B C"))
    (sentence,) = start.failures
    assert sentence.startswith("X and its mirror image fit all readings equally well: X can stand at ")
    assert "a row for X in stations.csv" in sentence
    both = [start.positions[5], start.images[0][5]]
    assert min(np.abs(x - one.truth[5]).max() for x in both) < CURVATURE_M
    normal = np.cross(one.truth[1] - one.truth[0], one.truth[2] - one.truth[0])
    across = np.array([(x - one.truth[0] - [0, 0, 0.2]) @ normal / np.linalg.norm(normal) for x in both])
    close(across.sum(), 0.0, atol=0.1)  # one above, one below
    assert np.abs(across).min() > 1.0


def test_a_row_decides_between_the_images() -> None:
    one = slopes("AX BX CX")
    start = find_start(one.network("A B C", rows="X", heights="A B C"))
    assert start.failures == ()
    close(start.positions[5], one.truth[5], atol=CURVATURE_M)


def test_two_stations_that_need_each_other() -> None:
    """X and Y have three known neighbours and each other: the images of one are told apart by the other."""
    one = slopes("AX BX CX XY AY BY DY")
    start = find_start(one.network("A B C D", heights="A B C D"))
    assert start.failures == start.doubtful == ()
    close(start.positions[5:], one.truth[5:], atol=CURVATURE_M)


@pytest.mark.parametrize("row", [0, 9, 17])
def test_one_gross_error_in_a_braced_figure_is_outvoted_and_named(row: int) -> None:
    one = slopes(" ".join(a + b for a, b in itertools.combinations("ABCDEXY", 2)))
    net = one.network("A B C D", heights="A B C D")
    values = net.blocks[0].values.copy()
    values[row] += 40.0
    start = find_start(replace(net, blocks=(replace(net.blocks[0], values=values),)))
    if row:  # the first is a line between two known stations, which no start needs
        assert start.failures == ()
    assert [where for where, _ in start.doubtful] == [(0, row)]
    close(start.positions[4:], one.truth[4:], atol=0.05)


def test_a_flat_network_is_refused_or_right_never_wrong() -> None:
    """Four known stations within a millimetre of a plane: what their slopes say of X's height is nothing."""
    flat = {k: (e, n, 50.0 + 0.001 * (k in "BX")) for k, (e, n, _) in HILLS.items()}
    one = slopes("AX BX CX DX", **flat)
    start = find_start(one.network("A B C D", heights="A B C D"))
    assert start.failures
    assert "X" in start.failures[0]
    assert "fixed only just" in start.failures[0] or "equally well" in start.failures[0]


def space_of(one: Sketch, known: str) -> tuple[Space, np.ndarray]:
    """The readings of a sketch as arrays, the stations."""
    net = one.network(known, heights=known)
    given = net.stations.start
    stations = np.arange(len(given))
    return Space.of(Clues.of(net), set(stations.tolist()), given, ~np.isnan(given), 50.0), stations


def test_partials_of_slopes_are_their_differences() -> None:
    """In a flat network the height at which a length is measured moves it by as much as the rise does."""
    space, stations = space_of(slopes("AX BX CX XY AY"), "A B C")
    x = np.random.default_rng(2).normal(size=(len(stations), 3)) * [200, 200, 1]
    turn = space.turns(x[None])
    a = space.partials(x[None])[0]
    for c in range(x.size):
        step = np.zeros(x.size)
        step[c] = 1e-3
        there, back = (space.misfits((x.ravel() + t * step).reshape(1, -1, 3), turn)[0] for t in (1.0, -1.0))
        close((there - back) / 2e-3, a[:, c], atol=1e-8)


def test_what_hangs_on_three_or_two_stations_is_found() -> None:
    """X and Y hang on B, C, D; Z hangs on X and Y besides, and so on both of them alone."""
    z = {k: HILLS[k] for k in "ABCDXY"} | {"Z": (1300.0, 2000.0, 80.0)}
    space, stations = space_of(slopes("AB AC AD BX CX DX BY CY DY XY XZ YZ", **z), "A B C D")
    names = list(z)
    found = {
        ("".join(names[s] for s in body), "".join(names[s] for s in hinge)) for body, hinge in bodies(space, stations)
    }
    assert ("XYZ", "BCD") in found
    assert ("Z", "XY") in found
    assert not any("A" in body for body, _ in found)


def test_images_keep_the_distances_to_their_hinge() -> None:
    x = np.array([HILLS[k] for k in "ABCX"])
    far = np.linalg.norm(x[3] - x[:3], axis=1)
    moved = np.array([3])
    close(np.linalg.norm(reflected(x, moved, x[:3])[3] - x[:3], axis=1), far, atol=1e-9)
    image = upright(x, moved, x[:2])
    close(np.linalg.norm(image[3] - x[:2], axis=1), far[:2], atol=1e-9)
    close(image[3, 2], x[3, 2], atol=1e-12)
    assert np.hypot(*(image[3] - x[3])[:2]) > 1.0


def test_two_stations_known_in_the_plane_leave_the_whole_network_its_image() -> None:
    """Heights do not tell the two sides of the vertical plane through A and E apart."""
    one = slopes(" ".join(a + b for a, b in itertools.combinations("ABCDEXY", 2)))
    start = find_start(one.network("A E", heights="A C E"))
    (sentence,) = start.failures
    assert "mirror images fit all readings equally well" in sentence
    close(start.images[0][:, 2], start.positions[:, 2], atol=1e-3)


def test_dimensions_to_spare_let_lots_find_the_figure() -> None:
    space, stations = space_of(slopes(" ".join(a + b for a, b in itertools.combinations("ABCDEXY", 2))), "A B C D")
    truth = np.array(list(HILLS.values()))
    fill = np.where(space.known, truth, truth[:4].mean(axis=0))
    off = [float(np.abs(x - truth).max()) for x in lifted(space, stations, fill)]
    assert min(off) < 0.5
    assert max(np.abs(fill - truth).max(), 1.0) > 50.0
