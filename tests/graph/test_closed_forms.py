"""Closed forms against exact geometry at seeded random places."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest

from adjust.graph.agreement import agree, wrapped
from adjust.graph.loci import Circle, Ray, azimuth, crossing, meet, seen_under, similarity, unit
from adjust.graph.places import Fan, Ties, candidates, refined
from tests.helpers import close

SEEDS = range(20)


def places(seed: int, n: int) -> list[complex]:
    print(f"seed {seed}")
    rng = np.random.default_rng(seed)
    return [complex(*xy) for xy in rng.uniform(1000.0, 2000.0, (n, 2))]


def near(found: list[complex], wanted: complex, atol: float = 1e-6) -> None:
    assert min(abs(x - wanted) for x in found) < atol


def test_azimuths_run_clockwise_from_north() -> None:
    close(
        [azimuth(1j), azimuth(1 + 1j), azimuth(1 + 0j), azimuth(-1 + 0j)],
        [0, math.pi / 4, math.pi / 2, -math.pi / 2],
        atol=1e-15,
    )
    close([unit(math.pi / 6).real, unit(math.pi / 6).imag], [0.5, math.sqrt(3) / 2], atol=1e-15)
    close(wrapped(3 * math.pi / 2), -math.pi / 2, atol=1e-15)


@pytest.mark.parametrize("seed", SEEDS)
def test_two_loci_of_every_sort_meet_in_the_true_place(seed: int) -> None:
    p, q, r, x = places(seed, 4)
    rays = [Ray(s, (x - s) / abs(x - s)) for s in (p, q)]
    circles = [Circle(s, abs(x - s)) for s in (p, q)]
    arcs = [seen_under(a, b, azimuth(b - x) - azimuth(a - x)) for a, b in ((p, q), (q, r))]
    loci = [*rays, *circles, *[arc for arc in arcs if arc is not None]]
    for i, a in enumerate(loci):
        for b in loci[i + 1 :]:
            near(meet(a, b), x, 1e-5 / max(1e-3, crossing(a, b, x)))


def test_a_ray_has_no_back_side() -> None:
    assert meet(Ray(0j, 1j), Ray(10 + 5j, 1 + 0j)) == []
    assert meet(Ray(0j, 1j), Circle(-20j, 5.0)) == []
    near(meet(Ray(0j, 1j), Ray(10 + 5j, -1 + 0j)), 5j)


def test_a_right_angle_is_seen_from_the_circle_of_thales_and_a_straight_one_from_no_circle() -> None:
    circle = seen_under(-1 + 0j, 1 + 0j, math.pi / 2)
    assert circle is not None
    close([abs(circle.centre), circle.radius - 1.0], [0.0, 0.0], atol=1e-12)
    assert seen_under(-1 + 0j, 1 + 0j, math.pi) is None


@pytest.mark.parametrize("seed", SEEDS)
def test_resection_from_three_marks_has_one_answer(seed: int) -> None:
    p, q, r, x = places(seed, 4)
    zero = 1.234
    ties = Ties([], [], [Fan([(s, azimuth(s - x) - zero) for s in (p, q, r)], [0, 1, 2])])
    best = candidates(ties)[0]
    assert abs(best.point - x) < 1e-4
    assert best.agreeing == 2


def test_distances_leave_two_places_and_a_third_one_settles_it() -> None:
    p, q, x = 0j, 100 + 0j, 40 + 70j
    two = Ties([], [(Circle(p, abs(x - p)), 0), (Circle(q, abs(x - q)), 1)], [])
    found = candidates(two)
    close(sorted(abs(c.point.imag) for c in found), [70.0, 70.0], atol=1e-9)
    close([c.cost for c in found], [0.0, 0.0], atol=1e-9)
    r = 50 + 200j
    three = Ties([], [*two.circles, (Circle(r, abs(x - r)), 2)], [])
    assert abs(candidates(three)[0].point - x) < 1e-9


@pytest.mark.parametrize("size", [0.5, 30.0, 1e6])
def test_one_gross_error_among_four_distances_is_outvoted(size: float) -> None:
    marks, x = [0j, 100 + 0j, 50 + 200j, -80 + 90j], 40 + 70j
    circles = [(Circle(m, abs(x - m) + (size if k == 0 else 0.0)), k) for k, m in enumerate(marks)]
    assert abs(candidates(Ties([], circles, []))[0].point - x) < 0.5


def test_refinement_takes_the_middle_of_readings_that_nearly_agree() -> None:
    """Two rays along the axes and one that is off: least squares by hand of x = 0, y = 0, x = 0.02, all from 100 m."""
    rays = [Ray(-100j, 1j), Ray(-100 + 0j, 1 + 0j), Ray(0.02 + 100j, -1j)]
    point = refined(Ties([(ray, k) for k, ray in enumerate(rays)], [], []), 0j)
    # weights 1 and 1 / (1 + (0.0002 / 0.001)^2) from the point 0, 0
    weight = 1 / (1 + 0.2**2)
    close(point.real, 0.02 * weight / (1 + weight), atol=1e-5)


def test_most_pointings_agree_on_an_orientation() -> None:
    value, _, count = agree([0.5, 0.5001, 2.0, 0.4999 + 2 * math.pi])
    close(wrapped(value), 0.5, atol=2e-4)
    assert count == 3


@pytest.mark.parametrize("seed", SEEDS)
def test_similarity_turns_scales_and_never_mirrors(seed: int) -> None:
    p, q, r = places(seed, 3)
    factor, shift = cmath.rect(2.5, 0.8), 30 - 7j
    found = similarity(p, q, factor * p + shift, factor * q + shift, scaled=False)
    assert found is not None
    assert abs(found[0] * r + found[1] - (factor * r + shift)) < 1e-6
    rigid = similarity(p, q, 3 * p, 3 * q, scaled=True)
    assert rigid is not None
    close(abs(rigid[0]), 1.0, atol=1e-12)
    assert similarity(p, p, q, r, scaled=True) is None
