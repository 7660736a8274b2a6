"""Weather, reflectors and distance meters as job.toml and the tables declare them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from adjust.atmosphere import Air
from adjust.units import BadValue, parse_length, parse_number, parse_pressure, parse_temperature

RANGES = {
    "temperature": (-60.0, 60.0, "degrees C"), "pressure": (400.0, 1100.0, "hPa"), "humidity": (0.0, 100.0, "per cent"),
    "ppm": (-1000.0, 1000.0, "ppm"),
}  # fmt: skip
"""Outside is a slip of the pen or of the unit; records of weather are near -89 and 57 degrees, 870 and 1085 hPa at the
sea, and surveyors do not work in them (common practice)."""
AIR_TYPES = tuple(RANGES)
SHORTEST_UM, LONGEST_UM = 0.3, 2.0
"""Carriers of distance meters lie between ultraviolet and infrared; the formula holds for them."""


@dataclass(frozen=True)
class Meter:
    """What an instrument says of its distances: constant (metres), scale (ppm), carrier, weather of zero correction."""

    constant: float = 0.0
    scale_ppm: float = 0.0
    wavelength_um: float | None = None
    zero_weather: Air | None = None


def parse_air(kind: str, text: str, decimal: str = ".") -> float:
    """A temperature (degrees C), pressure (hPa), humidity (per cent) or ppm; BadValue where it cannot be meant."""
    if kind == "temperature":
        value = parse_temperature(text, decimal)
    elif kind == "pressure":
        value = parse_pressure(text, decimal)
    else:
        value = parse_number(text.removesuffix("%" if kind == "humidity" else "ppm").strip(), decimal)
    low, high, unit = RANGES[kind]
    if not low <= value <= high:
        raise BadValue(f"{value:g} {unit} is outside {low:g} to {high:g}; look at the unit (72 F, 29.5 inHg)")
    return value


def parse_wavelength(text: str) -> float:
    """A carrier wavelength in micrometres, written with its unit."""
    number, _, unit = text.strip().rpartition(" ")
    if unit == "nm":
        value = parse_number(number) / 1000
    elif unit:
        value = parse_length(text, "m") * 1e6
    else:
        value = 0.0
    if not SHORTEST_UM <= value <= LONGEST_UM:
        raise BadValue('no wavelength of light; write it with its unit, as in "658 nm"')
    return value


Fault = Callable[[str, object, str], None]


def read_air(values: dict[str, Any], fault: Fault, path: str) -> Air:
    """The weather of a section whose texts have passed the schema."""
    found: dict[str, float] = {}
    for key, value in values.items():
        if value is None:
            continue
        try:
            found[key] = parse_air(key, str(value))
        except BadValue as bad:
            fault(f"{path}.{key}", value, str(bad))
    air = Air(**found)
    if air.ppm is not None and len(found) > 1:
        fault(f"{path}.ppm", values["ppm"], "give the weather or the ppm it comes to, not both")
    return air


def read_meter(values: dict[str, Any], zero: Air | None, fault: Fault, path: str) -> Meter:
    """The distance meter of an instrument; ``zero`` is its weather of zero correction."""
    constant, scale, wavelength = 0.0, 0.0, None
    for key in ("constant", "scale", "wavelength"):
        value = values.get(key)
        if value is None:
            continue
        try:
            if key == "constant":
                constant = read_constant(value)
            elif key == "scale":
                scale = parse_air("ppm", str(value))
            else:
                wavelength = parse_wavelength(str(value))
        except BadValue as bad:
            fault(f"{path}.{key}", value, str(bad))
    if zero and (zero.temperature is None or zero.pressure is None or zero.ppm is not None):
        fault(f"{path}.zero_weather", "", "needs temperature and pressure, from the instrument's manual")
        zero = None
    return Meter(constant, scale, wavelength, zero)


LONGEST_CONSTANT_M = 1.0
"""Constants of reflectors and instruments are millimetres to centimetres; a metre is a slip (common practice)."""


def read_constant(value: object) -> float:
    """A constant in metres; it must carry its unit, because millimetres and metres are both usual."""
    text = str(value).strip()
    if not text[-1:].isalpha():
        raise BadValue(f'in which unit? Write "{text} mm"')
    metres = parse_length(text, "m")
    if abs(metres) >= LONGEST_CONSTANT_M:
        raise BadValue("a metre or more; constants of reflectors and instruments are millimetres")
    return metres
