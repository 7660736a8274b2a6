"""Sights on every surface of the local plane: partials to both ends, the exact triangle, and the sizes that matter."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray

from adjust.frames import RADIUS_M, SURFACES, LocalPlane
from adjust.kinds import KINDS
from tests.helpers import close
from tests.kinds.test_kinds import compare, differences

Array = NDArray[np.float64]
M = 40
FRAME = LocalPlane(plane_height=-300.0)
START, END = np.arange(M), np.arange(M, 2 * M)
IN_SPACE = [pytest.param(kind, surface, id=f"{kind} {surface}") for surface in SURFACES
            for kind in ("distance", "zenith_angle", "levelled")]  # fmt: skip


def lines(seed: int) -> tuple[Array, Array]:
    """Ends (2M, 3) some hundred metres apart and up to 200 m in height, and heights (M, 2) above the marks."""
    rng = np.random.default_rng(seed)
    positions = rng.uniform(-100.0, 100.0, (2 * M, 3)) + np.array([500.0, 300.0, 60.0])
    positions[M:] += [400.0, -250.0, 120.0]
    return positions, rng.uniform(0.0, 2.0, (M, 2))


def partials(kind: str, surface: str, positions: Array, above: Array, k: Array) -> Array:
    """Partials (M, 2, 3) of a kind's value by both ends, as the solver forms them."""
    sights = FRAME.sights(positions, START, END, surface, above)[:, None]
    by_sight = KINDS[kind].on(surface)(sights, k)[1]
    return FRAME.carry(by_sight[:, :, 0], FRAME.jacobian(positions, START, END, surface, above))[:, 0]


@pytest.mark.parametrize(("kind", "surface"), IN_SPACE)
def test_partials_by_both_ends_on_every_surface(kind: str, surface: str) -> None:
    positions, above = lines(41)
    k = np.random.default_rng(42).uniform(-0.5, 0.5, M)

    def value(at: Array) -> Array:
        return KINDS[kind].on(surface)(FRAME.sights(at, START, END, surface, above)[:, None], k)[0][:, 0]

    total = partials(kind, surface, positions, above, k)
    for end, rows in enumerate((START, END)):
        for c in range(3):
            step = np.zeros_like(positions)
            step[rows, c] = 1.0
            compare(total[:, end, c], *differences(lambda h, d=step: value(positions + h * d), KINDS[kind], 1000.0))


@pytest.mark.parametrize("surface", SURFACES)
def test_every_component_of_a_sight_by_both_ends(surface: str) -> None:
    positions, above = lines(43)
    jacobian = FRAME.jacobian(positions, START, END, surface, above)
    assert jacobian is not None
    for end, rows in enumerate((START, END)):
        for c in range(3):
            step = np.zeros_like(positions)
            step[rows, c] = 1.0
            found = differences(
                lambda h, d=step: FRAME.sights(positions + h * d, START, END, surface, above), KINDS["distance"], 1000.0
            )
            compare(jacobian[:, end, :, c], *found)


def test_in_space_the_ends_are_not_exact_negatives_and_the_difference_is_seen() -> None:
    positions, above = lines(44)
    total = partials("distance", "slope", positions, above, np.zeros(M))
    gap = np.abs(total[:, 0, 2] + total[:, 1, 2])
    assert (gap > 1e-6).all()
    close(total[:, 0, :2], -total[:, 1, :2], atol=1e-12)


def test_in_space_a_distance_depends_on_heights_and_on_the_plane_it_does_not() -> None:
    kind = KINDS["distance"]
    assert kind.touched("slope") == ("both",)
    assert {kind.touched(surface) for surface in ("", "ground", "ground-from")} == {("plane",)}
    assert KINDS["zenith_angle"].touched("slope") == ("both",)


def vectors(positions: Array, above: Array) -> tuple[Array, Array]:
    """Instruments and targets as points in space, the line drawn along a great circle from (0, 0, 1), written anew."""
    d = positions[END, :2] - positions[START, :2]
    theta = 2 * np.arcsin(np.hypot(*d.T) / (2 * RADIUS_M))
    azimuth = np.arctan2(d[:, 0], d[:, 1])
    r1 = RADIUS_M + positions[START, 2] + above[:, 0] - FRAME.plane_height
    r2 = RADIUS_M + positions[END, 2] + above[:, 1] - FRAME.plane_height
    zero = np.zeros_like(r1)
    s = np.sin(theta)
    return (np.stack([zero, zero, r1], axis=1),
            np.stack([r2 * s * np.sin(azimuth), r2 * s * np.cos(azimuth), r2 * np.cos(theta)], axis=1))  # fmt: skip


def test_a_sight_in_space_is_the_difference_of_two_points_on_a_sphere() -> None:
    positions, above = lines(45)
    a, b = vectors(positions, above)
    close(FRAME.sights(positions, START, END, "slope", above)[:, :3], b - a, atol=4e-9)  # 2 ulp of the radius
    with pytest.raises(AssertionError):
        close(FRAME.sights(positions, START, END, "slope", above * 0.999)[:, :3], b - a, atol=4e-9)


def test_the_slope_fulfils_the_equation_of_the_local_plane_exactly() -> None:
    """S^2 = dh^2 + (1 + h1/R)(1 + h2/R) D^2 with heights of instrument and target above the plane."""
    positions, above = lines(46)
    slope = KINDS["distance"].on("slope")(FRAME.sights(positions, START, END, "slope", above)[:, None], np.zeros(M))[0]
    h1 = positions[START, 2] + above[:, 0] - FRAME.plane_height
    h2 = positions[END, 2] + above[:, 1] - FRAME.plane_height
    d2 = ((positions[END, :2] - positions[START, :2]) ** 2).sum(axis=1)
    wanted = np.sqrt((h2 - h1) ** 2 + (1 + h1 / RADIUS_M) * (1 + h2 / RADIUS_M) * d2)
    close(slope[:, 0], wanted, atol=1e-12)
    assert np.abs(np.sqrt((h2 - h1) ** 2 + d2) - wanted).min() > 1e-3


def two_marks(d: float, h1: float, h2: float) -> Array:
    return np.array([[0.0, 0.0, h1], [0.0, d, h2]])


def zenith(d: float, h1: float, h2: float, k: float) -> float:
    """Zenith angle from the first of two marks to the second, on a plane at height 0."""
    sights = LocalPlane().sights(two_marks(d, h1, h2), np.array([0]), np.array([1]), "slope")
    return float(KINDS["zenith_angle"].geometry(sights[:, None], np.array([k]))[0][0, 0])


def test_curvature_and_refraction_are_68_mm_at_one_kilometre() -> None:
    """(1 - k) D^2/2R = 0.87 * 10^6 / 12742018 = 0.06828 m: a level sight ends that far below the mark's own level."""
    lower = 1000.0 / math.tan(zenith(1000.0, 0.0, 0.0, 0.13))
    close(-lower, 0.068, atol=0.0005)
    close(-1000.0 / math.tan(zenith(1000.0, 0.0, 0.0, 0.0)), 0.0785, atol=0.00005)
    close(-1000.0 / math.tan(zenith(1000.0, 0.0, 0.0, 1.0)), 0.0, atol=1e-7)  # the ray follows the Earth


def test_13_7_mm_between_plane_formulas_and_the_exact_one() -> None:
    """It is D dh/R for 1 km and 87 m. A rise D cot z + (1 - k) D^2/2R at 1,000 m above the plane is that much short,
    because distances are D (1 + h/R) long there (and 1.1 mm more by the 87 m themselves); S sin z is that much longer
    than the distance at the instrument, because the verticals converge downwards."""
    z = zenith(1000.0, 1000.0, 1087.0, 0.13)
    plane_formula = 1000.0 / math.tan(z) + 0.87 * 1000.0**2 / (2 * RADIUS_M)
    assert 0.0137 < 87.0 - plane_formula < 0.0137 + 0.0012
    close(1000.0 * 87.0 / RADIUS_M, 0.0137, atol=0.00005)
    at_height = (1 + 1000.0 / RADIUS_M) * 1000.0 / math.tan(z) + 0.87 * 1000.0**2 / (2 * RADIUS_M)
    close(at_height - plane_formula, 0.0137, atol=0.0001)
    sights = LocalPlane().sights(two_marks(1000.0, 0.0, 87.0), np.array([0]), np.array([1]), "slope")[0]
    close(math.hypot(*sights[:2]) - 1000.0, 0.0137, atol=0.00005)
