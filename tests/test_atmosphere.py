"""Refractivity of air and the first velocity correction."""

from __future__ import annotations

import mpmath
import numpy as np

from adjust.atmosphere import Air, first_velocity, group_refractivity, refractivity, vapour_pressure
from tests.helpers import close

CARRIER_UM = 0.658


def test_group_refractivity_is_the_phase_refractivity_less_its_slope() -> None:
    """N - l dN/dl of N = 287.6155 + 1.62887/l^2 + 0.01360/l^4 (IAG resolution 3, 1999; the figures from memory)."""

    def phase(wavelength: mpmath.mpf) -> mpmath.mpf:
        return 287.6155 + mpmath.mpf("1.62887") / wavelength**2 + mpmath.mpf("0.01360") / wavelength**4

    for wavelength in (0.55, 0.6328, 0.85, 0.91):
        wanted = phase(wavelength) - wavelength * mpmath.diff(phase, wavelength)
        close(group_refractivity(wavelength), float(wanted), atol=5e-5)  # the printed digits of 4.88660


def test_standard_air_has_the_group_refractivity() -> None:
    group = group_refractivity(CARRIER_UM)
    close(refractivity(group, Air(0.0, 1013.25)), group, atol=1e-9)


def test_one_ppm_a_degree_and_3_6_hectopascal() -> None:
    """The rule of thumb of the trade: about 1 ppm per degree C and per 3.6 hPa (common practice)."""
    group = group_refractivity(CARRIER_UM)

    def ppm(temperature: float, pressure: float) -> float:
        here = refractivity(group, Air(temperature, pressure, 60.0))
        return first_velocity(1.0, refractivity(group, Air(15.0, 1013.25, 60.0)), here) * 1e6

    close(ppm(16.0, 1013.25), 1.0, atol=0.05)  # warmer air is thinner: the meter reads too short
    close(ppm(15.0, 1013.25 - 3.6), 1.0, atol=0.05)


def test_vapour_pressure_at_20_degrees() -> None:
    """Saturated over water at 20 degrees C: 23.4 hPa (steam tables; from memory), with Buck's enhancement 0.4 %."""
    close(vapour_pressure(20.0, 1013.25, 100.0), 23.4, atol=0.2)
    close(vapour_pressure(20.0, 1013.25, 50.0) * 2, vapour_pressure(20.0, 1013.25, 100.0), atol=1e-12)


def test_first_velocity_keeps_distance_times_index() -> None:
    """The time of flight is what is measured: D n0 = D' n with n0 the index that the meter assumes."""
    rng = np.random.default_rng(5)
    for reference, actual in rng.uniform(200, 320, (20, 2)).tolist():
        distance = float(rng.uniform(10, 5000))
        true = distance + first_velocity(distance, reference, actual)
        close(true * (1 + actual * 1e-6), distance * (1 + reference * 1e-6), atol=1e-9)


def test_weather_fills_what_is_left_open() -> None:
    job = Air(20.0, 950.0, 40.0)
    assert Air(temperature=25.0).over(job) == Air(25.0, 950.0, 40.0)
    assert Air().over(job) == job
    assert Air(ppm=12.0).over(job) == Air(ppm=12.0)
    assert Air(temperature=25.0).over(Air(ppm=3.0)) == Air(temperature=25.0)
