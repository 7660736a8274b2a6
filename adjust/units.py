"""Units at the border: metres and radians inside, the job's own notation outside.

Lengths: the international foot is 0.3048 m exactly (1959); the US survey foot is 1200/3937 m exactly (Mendenhall
order, 1893; retired 2022-12-31 but found in the coordinates of many jobs). Angles: 400 gon, 6400 mil, 360 degrees.
"""

from __future__ import annotations

import itertools
import math
import re

TURN = 2.0 * math.pi
RHO_SEC = 180.0 * 3600.0 / math.pi
"""Seconds of arc in one radian."""

US_FOOT = 1200.0 / 3937.0
LENGTHS = {
    "m": 1.0, "km": 1000.0, "dm": 0.1, "cm": 0.01, "mm": 0.001, "um": 1e-6,
    "ft": 0.3048, "us-ft": US_FOOT, "in": 0.0254, "mi": 1609.344, "us-mi": 5280.0 * US_FOOT,
}  # fmt: skip
ANGLES = {
    "rad": 1.0, "deg": math.pi / 180, "min": math.pi / 10800, "sec": math.pi / 648000,
    "gon": math.pi / 200, "mgon": math.pi / 200000, "mil": math.pi / 3200,
}  # fmt: skip
TEMPERATURES = {"C": (1.0, 0.0), "F": (5 / 9, -160 / 9), "K": (1.0, -273.15)}
"""Factor and shift to degrees Celsius."""
PRESSURES = {"hPa": 1.0, "mbar": 1.0, "kPa": 10.0, "mmHg": 1013.25 / 760, "inHg": 25.4 * 1013.25 / 760}
"""In hectopascal; a standard atmosphere of 1013.25 hPa is 760 mm of mercury."""
JOB_LENGTHS = ("m", "ft", "us-ft")
JOB_ANGLES = ("dms", "deg", "gon", "mil", "packed")

SMALL_LENGTH = {"m": ("mm", 1000.0), "ft": ("ft", 1 / 0.3048), "us-ft": ("us-ft", 1 / US_FOOT)}
"""Unit in which small lengths (residuals, standard deviations) are shown, and its number per metre."""


LONGEST_M = 1e9
"""No length or coordinate of a survey on the Earth reaches a million kilometres; beyond it stands a slip."""
SMALLEST_SD = 1e-12
"""In metres or radians: a picometre, far below any instrument; less would be no reading but a condition."""


class BadValue(ValueError):
    """A cell cannot be read; the text says what to do."""


_NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
_LATIN = str.maketrans(
    {"−": "-", "–": "-", "\u00a0": " ", "\u202f": " ", "′": "'", "’": "'", "″": '"', "”": '"', "º": "°"}
)


def tidy(text: str) -> str:
    """The cell with typographic minus signs, primes and spaces brought to the keyboard's ones."""
    return text.translate(_LATIN).strip()


def parse_number(text: str, decimal: str = ".") -> float:
    """A plain number; the decimal mark must be the declared one.

    Raises BadValue with the cure for a decimal comma, a thousands separator, or text.
    """
    raw = tidy(text)
    if decimal == ",":
        if "." in raw and "," not in raw:
            raise BadValue(f'a decimal point; write {raw.replace(".", ",")} or set [units] decimal = "."')
        if "." in raw:
            raise BadValue("a separator of thousands; write the number without it")
        raw = raw.replace(",", ".")
    elif "," in raw:
        if "." in raw or raw.count(",") > 1:
            raise BadValue("a separator of thousands; write the number without it")
        raise BadValue(f'a decimal comma; write {raw.replace(",", ".")} or set [units] decimal = ","')
    if re.search(r"\d[ '_]\d{3}", raw):
        raise BadValue("a separator of thousands; write the number without it")
    if not _NUMBER.fullmatch(raw):
        raise BadValue("not a number; write digits with at most one decimal mark")
    value = float(raw)
    if not math.isfinite(value):
        raise BadValue("too large for a number")
    return value


def _split_unit(text: str) -> tuple[str, str]:
    """Split '1.2 km' into '1.2' and 'km'; the unit is empty where none is written."""
    match = re.fullmatch(r"(.*?[\d.,])\s*([A-Za-z][A-Za-z-]*)", tidy(text))
    return (match[1], match[2]) if match else (text, "")


def parse_length(text: str, unit: str, decimal: str = ".") -> float:
    """A length in metres; ``unit`` is that of the table, a unit written in the cell wins."""
    number, own = _split_unit(text)
    if own and own not in LENGTHS:
        raise BadValue(f"{own} is no unit of length; use one of {', '.join(LENGTHS)}")
    value = parse_number(number, decimal) * LENGTHS[own or unit]
    if not abs(value) < LONGEST_M:
        raise BadValue("too large for a length")
    return value


def parse_temperature(text: str, decimal: str = ".") -> float:
    """A temperature in degrees Celsius; "72 F" and "295 K" say so."""
    number, own = _split_unit(text.replace("°", " "))
    if own and own not in TEMPERATURES:
        raise BadValue(f"{own} is no unit of temperature; use one of {', '.join(TEMPERATURES)}")
    factor, shift = TEMPERATURES[own or "C"]
    return parse_number(number, decimal) * factor + shift


def parse_pressure(text: str, decimal: str = ".") -> float:
    """An air pressure in hectopascal; "29.9 inHg" says so."""
    number, own = _split_unit(text)
    if own and own not in PRESSURES:
        raise BadValue(f"{own} is no unit of pressure; use one of {', '.join(PRESSURES)}")
    return parse_number(number, decimal) * PRESSURES[own or "hPa"]


def small_angle_unit(notation: str) -> str:
    """The unit in which standard deviations of angles are written: seconds, or milligon where angles are gon."""
    return "mgon" if notation == "gon" else "sec"


def parse_sd(text: str, dimension: str, unit: str, decimal: str = ".") -> float:
    """A standard deviation in metres or radians; must be above zero."""
    number, own = _split_unit(text)
    table = LENGTHS if dimension == "length" else ANGLES
    if own and own not in table:
        raise BadValue(f"{own} is no unit of {dimension}; use one of {', '.join(table)}")
    base = unit if dimension == "length" else small_angle_unit(unit)
    value = parse_number(number, decimal) * table[own or base]
    if not value > 0:
        raise BadValue("a standard deviation must be above zero; leave the cell empty if it is not known")
    if not SMALLEST_SD <= value < LONGEST_M:
        raise BadValue("too small or too large for a standard deviation")
    return value


_DMS = re.compile(
    r"""([+-]?)\s*(\d+)\s*(?:[°:\s-]\s*(\d+)\s*(?:[':\s-]\s*(\d+(?:\.\d*)?|\.\d+)\s*(?:"|'')?|'?)|°?)""", re.VERBOSE
)


def _sexagesimal(sign: str, degrees: str, minutes: str, seconds: str) -> float:
    if len(degrees + minutes + seconds) > 40:
        raise BadValue("too many digits for an angle")
    if int(minutes) >= 60:
        raise BadValue(f"{minutes} minutes: minutes stop at 59")
    if float(seconds) >= 60:
        raise BadValue(f"{seconds.rstrip('.')} seconds: seconds stop below 60")
    # whole seconds are exact; one rounding in the sum, one in the scaling
    total = (int(degrees) * 3600 + int(minutes) * 60 + float(seconds)) * ANGLES["sec"]
    return -total if sign == "-" else total


def _parse_dms(text: str, decimal: str) -> float:
    raw = tidy(text).replace(",", ".") if decimal == "," else tidy(text)
    if "," in raw:
        raise BadValue('a decimal comma; write a point or set [units] decimal = ","')
    match = _DMS.fullmatch(raw)
    if match:
        return _sexagesimal(match[1], match[2], match[3] or "0", match[4] or "0")
    if _NUMBER.fullmatch(raw):
        if not abs(float(raw)) < 360:
            raise BadValue("a full circle or more; write it like 123 45 56.7, below a full circle")
        raise BadValue(
            f'a lone decimal: {_two_readings(raw)}? Write three parts or set [units] angle = "deg" or "packed"'
        )
    raise BadValue("not degrees, minutes and seconds; write it like 123 45 56.7")


def _two_readings(raw: str) -> str:
    """The two angles a lone decimal could stand for, as in 45° 18' 05.4" or 45° 30' 15"."""
    as_degrees = format_angle(float(raw) * ANGLES["deg"], "dms", 1)
    try:
        return f"{_marked(as_degrees)} or {_marked(format_angle(_parse_packed(raw), 'dms', 1))}"
    except BadValue:
        return _marked(as_degrees)


def _marked(dms: str) -> str:
    d, m, s = dms.split()
    return f"{d}° {m}' {s.removesuffix('.0')}\""


def _parse_packed(text: str, decimal: str = ".") -> float:
    raw = tidy(text).replace(",", ".") if decimal == "," else tidy(text)
    match = re.fullmatch(r"([+-]?)(\d+)(?:\.(\d*))?", raw)
    if not match:
        raise BadValue("not a packed angle; write ddd.mmss, as in 123.45567 for 123 45 56.7")
    digits = (match[3] or "").ljust(4, "0")
    return _sexagesimal(match[1], match[2], digits[:2], digits[2:4] + "." + digits[4:])


def parse_angle(text: str, notation: str, decimal: str = ".") -> float:
    """An angle in radians from the job's notation: dms, deg, gon, mil or packed; its own unit in the cell wins."""
    number, own = _split_unit(text)
    if own:
        if own not in ANGLES:
            raise BadValue(f"{own} is no unit of angle; use one of {', '.join(ANGLES)}")
        return parse_number(number, decimal) * ANGLES[own]
    if notation == "dms":
        return _parse_dms(text, decimal)
    if notation == "packed":
        return _parse_packed(text, decimal)
    raw = tidy(text)
    if _DMS.fullmatch(raw) and not _NUMBER.fullmatch(raw):
        raise BadValue(f'degrees, minutes and seconds, but the angles here are {notation}; set [units] angle = "dms"')
    return parse_number(text, decimal) * ANGLES[notation]


def parse_circle(text: str, notation: str, decimal: str = ".") -> float:
    """An angle from zero to below a full circle, in radians."""
    if _QUADRANT.fullmatch(tidy(text)):
        raise BadValue(
            "a quadrant bearing; write one angle from 0 to a full circle, or use the column bearing of azimuths"
        )
    value = parse_angle(text, notation, decimal)
    if value < 0:
        raise BadValue("below zero; write it from 0 up to a full circle")
    if value >= TURN * (1 - 1e-15):
        raise BadValue("a full circle or more; write it below a full circle")
    return value


_QUADRANT = re.compile(r"([NS])\s*(\d.*?)\s*([EW])", re.IGNORECASE)
_CARDINAL = {"N": 0.0, "E": 90.0, "S": 180.0, "W": 270.0,
             "NORTH": 0.0, "EAST": 90.0, "SOUTH": 180.0, "WEST": 270.0}  # fmt: skip


def parse_bearing(text: str, notation: str, decimal: str = ".") -> float:
    """A quadrant bearing such as N 45 30 15 E, or due N, as an azimuth in radians clockwise from north."""
    raw = tidy(text)
    due = re.fullmatch(r"(?:due\s+)?([A-Za-z]+)", raw, re.IGNORECASE)
    if due and due[1].upper() in _CARDINAL:
        return _CARDINAL[due[1].upper()] * ANGLES["deg"]
    match = _QUADRANT.fullmatch(raw)
    if not match and raw[:1].isdigit() and raw[-1:].isdigit():
        raise BadValue("no quadrant letters; write it like N 45 30 15 E, or as an azimuth in the column azimuth")
    if not match:
        raise BadValue("not a quadrant bearing; write it like N 45 30 15 E or due N")
    value = parse_angle(match[2], notation, decimal)
    if not 0 <= value <= TURN / 4 * (1 + 1e-15):
        raise BadValue("a quadrant bearing runs from 0 to 90 degrees, counted from north or south")
    north, east = match[1].upper() == "N", match[3].upper() == "E"
    return ((value if east else -value) if north else TURN / 2 + (-value if east else value)) % TURN


def parse_course(text: str, notation: str, decimal: str = ".") -> float:
    """A quadrant bearing or an azimuth, as an azimuth in radians clockwise from north."""
    letters = re.search(r"[NSEWnsew]", _split_unit(text)[0])
    return (parse_bearing if letters else parse_circle)(text, notation, decimal)


def parse_zenith(text: str, notation: str, decimal: str = ".") -> float:
    """A zenith angle in radians, from 0 (up) to half a circle (down), both excluded."""
    value = parse_angle(text, notation, decimal)
    if value < 0:
        raise BadValue("below zero; a zenith angle counts from straight up; elevations have a column of their own")
    if value >= TURN / 2 * (1 - 1e-15):
        raise BadValue("half a circle or more; mean both faces to one zenith angle, a quarter circle where level")
    if value == 0:
        raise BadValue("straight up; level is a quarter circle; elevations have a column of their own")
    return value


def parse_elevation(text: str, notation: str, decimal: str = ".") -> float:
    """An elevation angle (0 level, up positive) as the zenith angle in radians that is meant."""
    value = parse_angle(text, notation, decimal)
    if not abs(value) < TURN / 4 * (1 - 1e-15):
        raise BadValue("a quarter circle or more; an elevation is counted from level; zenith angles have a column too")
    return TURN / 4 - value


_RATIO = re.compile(r"1\s*:\s*([\d.]+)")
_TIMES = re.compile(r"[x×]\s*([\d.]+)")


def parse_ratio(text: str) -> float:
    """N of a scale '1:N'."""
    match = _RATIO.fullmatch(tidy(text))
    number = parse_number(match[1]) if match else 0.0
    if not 1 <= number <= 1e7:
        raise BadValue('a scale from 1:1 to 1:10000000; write it like "1:500"')
    return number


def parse_times(text: str) -> float:
    """How many times larger: 'x 2000'."""
    match = _TIMES.fullmatch(tidy(text))
    number = parse_number(match[1]) if match else 0.0
    if not 1e-3 <= number <= 1e9:
        raise BadValue('how many times larger; write it like "x 2000"')
    return number


def parse_estimate(text: str) -> tuple[float, float | None]:
    """'0.13' or '0.13 +- 0.05': a pure number and its standard deviation, None where there is none."""
    value, *sd = re.split(r"\s*(?:\+-|\+/-|±)\s*", tidy(text))
    if len(sd) > 1:
        raise BadValue('more than one +-; write it like "0.13 +- 0.05"')
    spread = parse_number(sd[0]) if sd else None
    if spread is not None and not SMALLEST_SD <= spread < LONGEST_M:
        raise BadValue("a standard deviation must be above zero; leave it out where the value is to be kept")
    return parse_number(value), spread


def _carry(value: float, step: int, places: int) -> tuple[int, int, float]:
    """Degrees, minutes, seconds of a non-negative number of degrees, rounded without ever printing 60."""
    scale = 10**places
    units = round(value * 3600 * scale)
    seconds = (units % (60 * scale)) / scale
    minutes = units // (60 * scale) % 60
    return units // (3600 * scale) % (step or 10**9), minutes, seconds


def format_angle(radians: float, notation: str, places: int = 1) -> str:
    """The angle in the job's notation; ``places`` are decimals of a second (or of 0.1 mgon, 0.001 mil)."""
    text = _unsigned(abs(radians), notation, places)
    return f"-{text}" if radians < 0 and text.strip("0 .") else text


def _unsigned(size: float, notation: str, places: int) -> str:
    """The angle without its sign; what rounds to a full circle is printed as zero."""
    if notation in ("dms", "packed"):
        d, m, s = _carry(size / ANGLES["deg"], 360, places)
        width = places + 3 if places else 2
        if notation == "dms":
            return f"{d} {m:02d} {s:0{width}.{places}f}"
        return f"{d}.{m:02d}{f'{s:0{width}.{places}f}'.replace('.', '')}"
    digits = places + {"deg": 4, "gon": 4, "mil": 3}[notation]
    value = round(size / ANGLES[notation], digits)
    return f"{value % round(TURN / ANGLES[notation]):.{digits}f}"


def format_bearing(radians: float, notation: str, places: int = 1) -> str:
    """The azimuth as a quadrant bearing in the job's notation: N 45 30 15.0 E."""
    quarter, rest = divmod(radians % TURN, TURN / 4)
    ns = "N" if quarter in (0, 3, 4) else "S"
    ew = "E" if quarter in (0, 1, 4) else "W"
    inside = rest if quarter in (0, 2, 4) else TURN / 4 - rest
    return f"{ns} {format_angle(inside, notation, places)} {ew}"


def small_length(metres: float, unit: str) -> str:
    """A small length with its sign in millimetres, or in the job's feet: '+7.2 mm', '-0.024 ft'."""
    name, per_metre = SMALL_LENGTH[unit]
    places = 1 if name == "mm" else 3
    return f"{round(metres * per_metre, places) + 0.0:+.{places}f} {name}"  # no -0.0


def wrap(radians: float) -> float:
    """The angle brought to (-pi, pi]."""
    return -((math.pi - radians) % TURN - math.pi)


def rough(x: float) -> str:
    """The size of a number with two figures, without exponents: 0.14, 8.2, 130, 5.0."""
    size = abs(x)
    if not size > 0:
        return "0"
    places = 1 - math.floor(math.log10(float(f"{size:.1e}")))
    return f"{size:.{places}f}" if places > 0 else f"{round(size, places):.0f}"


SMALL_BELOW_M = 0.1
"""Lengths below this are told in millimetres where the job is in metres: 82 mm, but 0.14 m."""


def rough_length(metres: float, unit: str) -> str:
    """The size of a length with two figures: '8.2 mm', '0.14 m', '0.027 ft'."""
    size = abs(metres)
    if unit == "m" and float(f"{size:.1e}") < SMALL_BELOW_M:
        return f"{rough(size * 1000)} mm"
    return f"{rough(size / LENGTHS[unit])} {unit}"


def rough_angle(radians: float, notation: str) -> str:
    """The size of an angle with two figures, in the small unit of the notation or the next larger: '12 sec',
    '2.3 minutes', '1.4 degrees'; '3.7 mgon', '1.2 gon'."""
    size = abs(radians)
    if notation == "gon":
        steps = [("mgon", "mgon"), ("gon", "gon")]
    else:
        steps = [("sec", "sec"), ("min", "minutes"), ("deg", "degrees")]
    for (unit, name), (larger, _) in itertools.pairwise(steps):
        if float(f"{size / ANGLES[unit]:.1e}") < round(ANGLES[larger] / ANGLES[unit]):
            return f"{rough(size / ANGLES[unit])} {name}"
    unit, name = steps[-1]
    return f"{rough(size / ANGLES[unit])} {name}"
