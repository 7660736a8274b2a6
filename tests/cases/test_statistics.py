"""Variance factor, Student's t, tau and its power: printed constants and a printed outlier test."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from scipy import integrate, special

from adjust.judge import critical
from tests.cases.worked import Case, Check, checks_of
from tests.helpers import close

FACTORS = Case("instrument_field_test_factors")
BLUNDER = Case("repeated_measurement_with_blunder")
POWER = Case("noncentrality_tau")


def upper_limit(r: int) -> float:
    """Root of the upper 95 % point of the variance factor: the two-sided interval of 10 %."""
    interval = critical.variance_factor_interval(0.10, r)
    assert interval is not None
    return math.sqrt(interval[1])


def double_run(folder: Path) -> float:
    """Standard deviation of a kilometre levelled twice over that of one line of 60 m, by the reader's error model."""
    sd = FACTORS.run(folder).solution.design.sd
    return float(sd[1] / sd[0])


# ISO 17123-2, -3, -4 (2001, 2012); confidence: memory
@pytest.mark.parametrize("check", FACTORS.checks, ids=str)
def test_constants_of_instrument_tests(check: Check, tmp_path: Path) -> None:
    r = FACTORS.data["degrees_of_freedom"][check.of]
    if check.what == "double run over one line":
        check.passes(double_run(tmp_path))
    elif check.what == "student":
        check.passes(critical.student_critical(0.05, r))
    else:
        check.passes(upper_limit(r))


# NIST/SEMATECH e-Handbook, section 1.3.5.17; confidence: read. tau = deviation / sqrt(7/8), an exact identity
@pytest.mark.parametrize("check", BLUNDER.checks, ids=str)
def test_tau_is_the_printed_deviation_test(check: Check, tmp_path: Path) -> None:
    root, level = math.sqrt(7 / 8), BLUNDER.data["level_of_one"]
    judgement = BLUNDER.run(tmp_path).judgement
    if check.what == "deviation":
        check.passes(abs(float(judgement.statistic[int(check.of) - 1])) * root)
    elif check.of == "two-sided":
        assert judgement.critical == critical.tau_critical(level, 7)
        check.passes(judgement.critical * root)
    else:
        # one side at the level of one measurement: both sides at twice the level
        tau = critical.tau_critical(2 * level, 7)
        assert tau is not None
        check.passes(tau * root)


def test_the_eighth_measurement_alone_is_suspect(tmp_path: Path) -> None:
    """NIST/SEMATECH e-Handbook, section 1.3.5.17; confidence: read."""
    judgement = BLUNDER.run(tmp_path).judgement
    assert judgement.blame.tolist() == [7]
    assert judgement.suspect.tolist() == [False] * 7 + [True]
    # its residual is adjusted minus observed: the mean lies far below the reading
    assert judgement.statistic[7] < 0


# computed for this project, not outside evidence; 4.13 is Baarda's (1968), from memory
@pytest.mark.parametrize("check", checks_of("noncentrality_tau"), ids=str)
def test_shift_found_with_power(check: Check) -> None:
    levels = POWER.data["significance"], POWER.data["power"]
    if check.of == "all":
        check.passes(critical.noncentrality(*levels))
    else:
        shift = critical.noncentrality_tau(*levels, int(check.of))
        assert shift is not None
        check.passes(shift)


def power_of_tau(shift: float, significance: float, r: int) -> float:
    """P(|tau| > critical) where the tested reading's w is N(shift, 1), by integrating over the other r - 1 degrees.

    tau^2 = w^2 r / (w^2 + q) with q ~ chi-square of r - 1, so |tau| > k means |w| > k sqrt(q / (r - k^2)).
    """
    k = critical.tau_critical(significance, r)
    assert k is not None
    log_norm = (r - 1) / 2 * math.log(2) + math.lgamma((r - 1) / 2)

    def density(q: float) -> float:
        limit = k * math.sqrt(q / (r - k * k))
        tails = special.ndtr(shift - limit) + special.ndtr(-shift - limit)
        return float(tails * math.exp(((r - 1) / 2 - 1) * math.log(q) - q / 2 - log_norm))

    return float(integrate.quad(density, 0, r + 60 * math.sqrt(r), epsabs=1e-12, epsrel=1e-10, limit=400)[0])


@pytest.mark.parametrize("r", [5, 10, 20, 50])
def test_the_shift_has_the_stated_power(r: int) -> None:
    """Brute force in place of the noncentral t. Cross-check, not outside evidence."""
    levels = POWER.data["significance"], POWER.data["power"]
    shift = critical.noncentrality_tau(*levels, r)
    assert shift is not None
    close(power_of_tau(shift, levels[0], r), levels[1], atol=1e-6)
    assert power_of_tau(0.95 * shift, levels[0], r) < levels[1] - 0.02
    close(np.array(power_of_tau(0.0, levels[0], r)), levels[0], atol=1e-7)
