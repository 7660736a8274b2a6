"""Critical values, multipliers and radii, from scipy.special alone (scipy.stats takes too long to load).

One reading, scale given: w ~ N(0, 1). From residuals (Pope 1976): tau = w / s0 with r degrees of freedom, and
t = tau sqrt((r - 1) / (r - tau^2)) has Student's t distribution with r - 1, so the critical tau for a significance a is
t sqrt(r / (r - 1 + t^2)) with t the upper a/2 point.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np
from scipy import special

from adjust.network import Array

NODES = 192
"""Nodes of the quadrature of the circle; the largest error against adaptive quadrature is asserted in the tests."""


def normal_critical(significance: float) -> float:
    """Two-sided critical value of a standard normal statistic."""
    return float(special.ndtri(1 - significance / 2))


def student_critical(significance: float, r: float) -> float:
    """Two-sided critical value of Student's t with r degrees of freedom."""
    return float(special.stdtrit(r, 1 - significance / 2))


def tau_critical(significance: float, r: int) -> float | None:
    """Two-sided critical value of Pope's tau with r degrees of freedom; None for r <= 1, which cannot be tested."""
    if r <= 1:
        return None
    t = student_critical(significance, r - 1)
    return t * math.sqrt(r / (r - 1 + t * t))


def noncentrality(significance: float, power: float) -> float:
    """sqrt(lambda0): shift of a normal statistic found with this power; 4.13 for 0.001 and 0.80 (Baarda 1968).

    The far tail, below 1e-12 of probability for usual levels, is left out as in Baarda's tables.
    """
    return float(special.ndtri(1 - significance / 2) + special.ndtri(power))


def noncentrality_tau(significance: float, power: float, r: int) -> float | None:
    """Shift, in standard deviations, found by the tau test with this power: by the noncentral t with r - 1 degrees."""
    if r <= 1:
        return None
    t = student_critical(significance, r - 1)
    low, high = 0.0, 4.0 * t + 10.0
    for _ in range(200):
        middle = (low + high) / 2
        found = 1 - special.nctdtr(r - 1, middle, t)  # the far tail, below 1e-12, is left out
        low, high = (middle, high) if found < power else (low, middle)
        if high - low < 1e-13 * high:
            break
    return (low + high) / 2


def variance_factor_interval(significance: float, r: int) -> tuple[float, float] | None:
    """Two-sided interval of the variance factor under chi-square with r degrees of freedom; None for r = 0."""
    if r <= 0:
        return None
    return (
        float(special.gammaincinv(r / 2, significance / 2)) * 2 / r,
        float(special.gammainccinv(r / 2, significance / 2)) * 2 / r,
    )


def chi_square(probability: float, r: int) -> float:
    """Value that chi-square with r degrees of freedom stays below with a probability."""
    return float(special.gammaincinv(r / 2, probability)) * 2


def job_level(significance: float, n: int) -> float:
    """Significance of one of n tests that together give a false alarm with ``significance`` (Sidak 1967)."""
    return -math.expm1(math.log1p(-significance) / n) if n else significance


def ellipse_multiplier(confidence: float, r: int | None) -> float | None:
    """Multiplier of a standard ellipse: sqrt(chi-square 2), or sqrt(2 F(2, r)) where the scale is from residuals.

    For two degrees both have closed forms: chi-square = -2 ln(1 - p); 2 F = r ((1 - p)^(-2/r) - 1).
    """
    if r is None:
        return math.sqrt(-2 * math.log1p(-confidence))
    if r <= 0:
        return None
    return math.sqrt(r * math.expm1(-2 / r * math.log1p(-confidence)))


def line_multiplier(confidence: float, r: int | None) -> float | None:
    """Multiplier of a one-dimensional standard deviation: normal, or Student's t where the scale is from residuals."""
    if r is None:
        return normal_critical(1 - confidence)
    return student_critical(1 - confidence, r) if r > 0 else None


@cache
def _fejer(n: int) -> tuple[Array, Array]:
    """Nodes and weights (n,) of Fejer's first rule on [-1, 1] (Davis and Rabinowitz 1984, section 2.5.5), n even.

    In closed form, where the nodes of Gauss would need an eigenvalue problem and a package that is slow to load.
    """
    theta = (2 * np.arange(n) + 1) * (math.pi / (2 * n))
    j = np.arange(1, n // 2 + 1)
    weights = (2 / n) * (1 - 2 * (np.cos(2 * np.outer(theta, j)) / (4 * j**2 - 1)).sum(axis=1))
    return np.cos(theta), weights


def circle_radius(a: Array, b: Array, confidence: float, r: int | None) -> Array:
    """Radii (n,) of the circles of this confidence for standard ellipses with semi-axes a >= b (n,).

    With x = a s cos t, y = b s sin t and w(t) = a^2 cos^2 t + b^2 sin^2 t,

        P(radius <= c) = 1 - (2/pi) int_0^(pi/2) exp(-c^2 / (2 w)) dt      (scale given)
        P(radius <= c) = 1 - (2/pi) int_0^(pi/2) (1 + c^2 / (r w))^(-r/2) dt   (from residuals, over chi-square r)

    integrated by Fejer's first rule and solved by bisection; the largest error against adaptive quadrature at axis
    ratios 0 to 1 is tested. NaN where r = 0.
    """
    if r is not None and r <= 0:
        return np.full(len(a), np.nan)
    nodes, weights = _fejer(NODES)
    t = (nodes + 1) * (math.pi / 4)
    ratio = np.divide(b, a, out=np.zeros_like(b), where=a > 0)
    w = np.cos(t) ** 2 + (ratio[:, None] * np.sin(t)) ** 2
    low = np.full(len(a), 0.5 * (line_multiplier(confidence, r) or 0.0))
    high = np.full(len(a), (ellipse_multiplier(confidence, r) or 0.0) * 1.001)
    for _ in range(60):
        middle = (low + high) / 2
        c2 = middle[:, None] ** 2
        tail = np.exp(-c2 / (2 * w)) if r is None else (1 + c2 / (r * w)) ** (-r / 2)
        below = 1 - (tail * weights).sum(axis=1) / 2 < confidence
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    radius: Array = a * (low + high) / 2
    return radius
