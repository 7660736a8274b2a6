"""Error ellipses and circles: exact algebra, printed scalings, and the circle against adaptive quadrature."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from scipy import integrate, optimize, special

from adjust.judge.critical import circle_radius, ellipse_multiplier
from tests.cases.worked import QUANTITIES, Case, Check, checks_of
from tests.helpers import close

CIRCLE = Case("circular_95_percent_radius")
# exact algebra, not outside evidence
EXACT = ("exact_ellipse_from_two_directions", "exact_circle_from_three_distances")
RATIOS = (0.0, 1e-4, 3e-4, 1e-3, 3e-3, 0.01, 0.03, 0.1, 0.25, 0.5, 0.75, 1.0)
LARGEST_ERROR = 1e-8
"""Allowed error of the radius over itself; largest measured 4.3e-9, one degree of freedom at an axis ratio of 1e-4."""


def radius(ratio: float, confidence: float = 0.95, r: int | None = None) -> float:
    return float(circle_radius(np.array([1.0]), np.array([ratio]), confidence, r)[0])


@pytest.mark.parametrize("check", checks_of(*EXACT), ids=str)
def test_ellipses_agree_with_exact_algebra(check: Check, tmp_path: Path) -> None:
    check.passes(QUANTITIES[check.what](Case(check.case).run(tmp_path), check.of))


# Mahun, Open Access Surveying Library, solution to problem 4; confidence: read
@pytest.mark.parametrize("check", checks_of("error_ellipses_scaled_to_95_percent"), ids=str)
def test_scaled_ellipses_have_the_printed_axes(check: Check) -> None:
    data = Case(check.case).data
    multiplier = ellipse_multiplier(data["confidence_level"], data["degrees_of_freedom"])
    assert multiplier is not None
    check.passes(multiplier * data[check.what][check.of])


# FGDC-STD-007.2 (1998) and tables of the normal and chi-square distributions; confidence: memory
@pytest.mark.parametrize("check", CIRCLE.checks, ids=str)
def test_the_circle_has_the_tabled_radius_where_it_is_a_line_or_round(check: Check) -> None:
    check.passes(radius(float(check.of)))


@pytest.mark.parametrize("i", range(6))
def test_the_circle_agrees_with_the_polynomial_of_the_standards(i: int) -> None:
    """Leenhouts (1985) in FGDC-STD-007.2 (1998), ICSM SP1; confidence: memory; an approximation to 0.0045."""
    ratio = CIRCLE.data["ratio"][i]
    polynomial = sum(c * ratio**k for k, c in enumerate(CIRCLE.data["polynomial"]))
    close(radius(ratio), polynomial, atol=CIRCLE.data["polynomial_error"])


@pytest.mark.parametrize("i", range(6))
def test_the_circle_agrees_with_a_second_computation(i: int) -> None:
    """Values to six decimals, computed apart from this program. Cross-check, not outside evidence."""
    close(radius(CIRCLE.data["ratio"][i]), CIRCLE.data["exact"][i], atol=0.51e-6)


def inside(c: float, ratio: float, r: int | None) -> float:
    """P(x^2 + y^2 <= c^2) for the standard ellipse with semi-axes 1 and ``ratio``, by adaptive quadrature over x.

    Normal x and y | x, or the two-dimensional t with r degrees: x ~ t_r, y | x ~ t_(r+1) times sqrt((r + x^2)/(r + 1)).
    Another integral than the program's, which runs over the angle.
    """

    def density(x: float) -> float:
        y = math.sqrt(max(c * c - x * x, 0.0)) / ratio if ratio else math.inf
        if r is None:
            return math.exp(-x * x / 2) / math.sqrt(2 * math.pi) * math.erf(y / math.sqrt(2))
        front = math.exp(math.lgamma((r + 1) / 2) - math.lgamma(r / 2)) / math.sqrt(r * math.pi)
        across = 2 * special.stdtr(r + 1, y * math.sqrt((r + 1) / (r + x * x))) - 1 if ratio else 1.0
        return float(front * (1 + x * x / r) ** (-(r + 1) / 2) * across)

    # x = c sin u takes the root at the rim out of the integrand; a flat ellipse falls off within a few of its ratios
    rim = math.pi / 2 - min(0.7, 4 * ratio)
    pieces = [
        integrate.quad(
            lambda u: density(c * math.sin(u)) * c * math.cos(u), *ends, epsabs=1e-13, epsrel=1e-12, limit=500
        )
        for ends in ((0, rim), (rim, math.pi / 2))
    ]
    return 2 * float(sum(found for found, _ in pieces))


@pytest.mark.parametrize("r", [None, 1, 2, 5, 20], ids=lambda r: "given" if r is None else f"r={r}")
@pytest.mark.parametrize("confidence", [0.68, 0.95, 0.99])
def test_the_largest_error_of_the_circle_against_adaptive_quadrature(r: int | None, confidence: float) -> None:
    """Axis ratios 0 to 1, scale given and from residuals. Cross-check, not outside evidence."""
    errors = []
    for ratio in RATIOS:
        got = radius(ratio, confidence, r)
        wanted = optimize.brentq(lambda c, b=ratio: inside(c, b, r) - confidence, 0.5 * got, 2 * got, xtol=1e-13 * got)
        errors.append(abs(got / wanted - 1))
    print(f"r {r}, confidence {confidence}: largest error {max(errors):.2g} at ratio {RATIOS[int(np.argmax(errors))]}")
    assert max(errors) < LARGEST_ERROR


def test_the_circle_is_not_the_one_of_a_given_scale_when_the_scale_is_from_residuals() -> None:
    """The negative control of the comparison above."""
    assert abs(inside(radius(0.5), 0.5, 5) - 0.95) > 0.02
