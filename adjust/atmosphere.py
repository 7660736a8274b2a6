"""Refractivity of air for light, and what weather does to a distance.

The group refractivity of standard air (0 degrees C, 1013.25 hPa, dry, 0.0375 % CO2) for a wavelength l in micrometres
follows from the phase refractivity N = A + B/l^2 + C/l^4 as N - l dN/dl, and that of air with the temperature T
(kelvin), pressure p and water vapour pressure e (hPa) from the equation of state:

    Ng = 287.6155 + 4.88660/l^2 + 0.06800/l^4        N(T, p, e) = (273.15/1013.25) Ng p/T - 11.27 e/T

(International Association of Geodesy, resolution 3, 1999; quoted from memory. That 4.88660 and 0.06800 are three and
five times the phase figures 1.62887 and 0.01360 is checked in the tests.) In parts per million; a distance meter that
is right in air of refractivity N0 reads too long by N - N0 ppm, so the first velocity correction is

    D' = D (n0 - n)/n,  n = 1 + N 1e-6.

The second velocity correction, (k - k^2) D^3/(12 R^2), is 0.03 mm at 5 km (k = 0.13) and left out. Saturated vapour
pressure: A. L. Buck, New equations for computing vapor pressure and enhancement factor, J. Appl. Meteorol. 20, 1981.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

KELVIN = 273.15
PRESSURE_HPA = 1013.25


@dataclass(frozen=True)
class Air:
    """Weather as given: temperature (degrees C), pressure (hPa), relative humidity (per cent), or the ppm itself."""

    temperature: float | None = None
    pressure: float | None = None
    humidity: float | None = None
    ppm: float | None = None

    @property
    def says(self) -> bool:
        """Whether anything is given."""
        return any(value is not None for value in (self.temperature, self.pressure, self.humidity, self.ppm))

    @property
    def words(self) -> str:
        """The figures with their units."""
        if self.ppm is not None:
            return f"{self.ppm:g} ppm as set"
        damp = "" if self.humidity is None else f", {self.humidity:g} %"
        return f"{self.temperature:g} C, {self.pressure:g} hPa{damp}"

    def over(self, wider: Air) -> Air:
        """This weather with what it leaves open taken from a ``wider`` one; a ppm on either side stands alone."""
        if self.ppm is not None or not self.says:
            return self if self.says else wider
        return Air(
            self.temperature if self.temperature is not None else wider.temperature,
            self.pressure if self.pressure is not None else wider.pressure,
            self.humidity if self.humidity is not None else wider.humidity,
        )


def group_refractivity(wavelength_um: float) -> float:
    """Group refractivity (ppm) of standard air for a carrier wavelength in micrometres."""
    return 287.6155 + 4.88660 / wavelength_um**2 + 0.06800 / wavelength_um**4


def vapour_pressure(temperature: float, pressure: float, humidity: float) -> float:
    """Water vapour pressure (hPa) over water at degrees C, hPa and per cent (Buck 1981)."""
    saturated = (1.0007 + 3.46e-6 * pressure) * 6.1121 * math.exp(17.502 * temperature / (240.97 + temperature))
    return saturated * humidity / 100


def refractivity(group: float, air: Air) -> float:
    """Refractivity (ppm) of air with a temperature and a pressure; without a humidity it counts as dry."""
    assert air.temperature is not None
    assert air.pressure is not None
    kelvin = KELVIN + air.temperature
    e = vapour_pressure(air.temperature, air.pressure, air.humidity or 0.0)
    return KELVIN / PRESSURE_HPA * group * air.pressure / kelvin - 11.27 * e / kelvin


def first_velocity(distance: float, reference: float, actual: float) -> float:
    """First velocity correction (metres) to a distance (metres); refractivities in ppm."""
    return distance * (reference - actual) * 1e-6 / (1 + actual * 1e-6)
