"""Units at the border: every notation read and printed, and never a sixty in print."""

from __future__ import annotations

import math
import re
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from adjust.units import (
    ANGLES,
    JOB_ANGLES,
    LENGTHS,
    TURN,
    BadValue,
    format_angle,
    format_bearing,
    parse_angle,
    parse_bearing,
    parse_circle,
    parse_length,
    parse_number,
    parse_sd,
    wrap,
)
from tests.helpers import close

SEC = math.pi / 648000
fixed = settings(derandomize=True, deadline=None, max_examples=200)  # the same examples on every run
angles = st.floats(0, TURN, exclude_max=True)
notations = st.sampled_from(JOB_ANGLES)


def dms(degrees: int, minutes: int = 0, seconds: float = 0.0) -> float:
    """Radians, worked out apart from the code under test."""
    return float((Fraction(degrees) + Fraction(minutes, 60) + Fraction(str(seconds)) / 3600) / 180) * math.pi


@pytest.mark.parametrize(
    "text",
    [
        "123 45 56.7", "123:45:56.7", "123°45'56.7\"", "123° 45' 56.7\"", "123-45-56.7", "123°45′56.7″", "123º45’56.7”",
        "123 45 56.7\"", "  123  45  56.7 ", "123\u00a045\u00a056.7", "123°45'56.7''", "+123 45 56.7",
    ],
)  # fmt: skip
def test_every_way_to_write_degrees_minutes_and_seconds(text: str) -> None:
    close(parse_angle(text, "dms"), dms(123, 45, 56.7), atol=1e-15)


@pytest.mark.parametrize(
    ("text", "notation", "wanted"),
    [
        ("123 45", "dms", dms(123, 45)),
        ("123", "dms", dms(123)),
        ("123°", "dms", dms(123)),
        ("123°45'", "dms", dms(123, 45)),
        ("-0 00 10", "dms", -dms(0, 0, 10)),
        ("123.7657500", "deg", dms(123, 45, 56.7)),
        ("200", "gon", math.pi),
        ("3200", "mil", math.pi),
        ("123.45567", "packed", dms(123, 45, 56.7)),
        ("123.4556", "packed", dms(123, 45, 56)),
        ("123.45", "packed", dms(123, 45)),
        ("123.4", "packed", dms(123, 40)),
        ("123", "packed", dms(123)),
        ("50 gon", "dms", math.pi / 4),
        ("45 deg", "gon", math.pi / 4),
        ("1600 mil", "packed", math.pi / 2),
        ("1.5 rad", "dms", 1.5),
        ("10 sec", "deg", 10 * SEC),
    ],
)
def test_every_notation(text: str, notation: str, wanted: float) -> None:
    close(parse_angle(text, notation), wanted, atol=1e-14)


def test_a_decimal_comma_in_every_notation() -> None:
    close(parse_angle("123 45 56,7", "dms", ","), dms(123, 45, 56.7), atol=1e-15)
    close(parse_angle("123,45567", "packed", ","), dms(123, 45, 56.7), atol=1e-15)
    close(parse_angle("12,5", "gon", ","), 12.5 * ANGLES["gon"], atol=1e-15)
    close(parse_bearing("S 10 20 30,5 W", "dms", ","), math.pi + dms(10, 20, 30.5), atol=1e-15)


def test_packed_digits_are_text_and_not_a_number() -> None:
    """0.30 is half a degree; as a binary number it would lie a hair below and read 29 minutes 99.99 seconds."""
    for minute in range(60):
        close(parse_angle(f"7.{minute:02d}", "packed"), dms(7, minute), atol=1e-15)


@fixed
@given(angles, notations, st.integers(0, 4), st.booleans())
def test_printed_and_read_again(angle: float, notation: str, places: int, comma: bool) -> None:
    """What is printed is read as the same angle, to half of the last digit printed."""
    text = format_angle(angle, notation, places)
    half = (
        0.5
        * 10.0**-places
        * {"deg": 1e-4 * ANGLES["deg"], "gon": 1e-4 * ANGLES["gon"], "mil": 1e-3 * ANGLES["mil"]}.get(notation, SEC)
    )
    shown = text.replace(".", ",") if comma else text
    back = parse_angle(shown, notation, "," if comma else ".")
    assert abs(wrap(back - angle)) <= half * (1 + 1e-6) + 1e-14
    assert format_angle(back, notation, places) == text


@fixed
@given(angles, st.integers(0, 3))
def test_no_sixty_is_ever_printed(angle: float, places: int) -> None:
    for value in (angle, math.nextafter(round(angle / SEC / 60) * 60 * SEC, 0)):
        d, m, s = format_angle(value, "dms", places).split()
        assert 0 <= int(d) < 360
        assert int(m) < 60
        assert float(s) < 60


def test_the_carry() -> None:
    assert format_angle(dms(12, 34, 59.96), "dms", 1) == "12 35 00.0"
    assert format_angle(dms(12, 34, 59.94), "dms", 1) == "12 34 59.9"
    assert format_angle(dms(12, 59, 59.96), "dms", 1) == "13 00 00.0"
    assert format_angle(dms(359, 59, 59.96), "dms", 1) == "0 00 00.0"
    assert format_angle(dms(12, 59, 59.6), "dms", 0) == "13 00 00"
    assert format_angle(dms(12, 59, 59.96), "packed", 1) == "13.00000"
    assert format_angle(dms(1, 2, 3.4), "packed", 1) == "1.02034"
    assert format_angle(-dms(0, 0, 5.04), "dms", 1) == "-0 00 05.0"
    assert format_angle(-dms(0, 0, 0.04), "dms", 1) == "0 00 00.0"


def test_the_other_notations_in_print() -> None:
    assert format_angle(math.pi / 4, "gon", 1) == "50.00000"
    assert format_angle(math.pi / 4, "deg", 1) == "45.00000"
    assert format_angle(math.pi / 4, "mil", 1) == "800.0000"


@pytest.mark.parametrize("notation", ["gon", "deg", "mil"])
def test_no_full_circle_is_ever_printed(notation: str) -> None:
    """What is printed for a direction just below the full circle must be readable again as a direction."""
    text = format_angle(math.nextafter(TURN, 0), notation, 1)
    assert parse_circle(text, notation) == 0


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ("N 45 30 15 E", dms(45, 30, 15)),
        ("N45°30'15\"E", dms(45, 30, 15)),
        ("n 45-30-15 e", dms(45, 30, 15)),
        ("S 45 30 15 E", math.pi - dms(45, 30, 15)),
        ("S 45 30 15 W", math.pi + dms(45, 30, 15)),
        ("N 45 30 15 W", TURN - dms(45, 30, 15)),
        ("N 0 00 00 E", 0.0),
        ("N 90 00 00 W", 1.5 * math.pi),
        ("S 90 E", 0.5 * math.pi),
        ("due N", 0.0),
        ("due E", 0.5 * math.pi),
        ("Due South", math.pi),
        ("W", 1.5 * math.pi),
    ],
)
def test_bearings(text: str, wanted: float) -> None:
    close(parse_bearing(text, "dms"), wanted, atol=1e-14)


@fixed
@given(angles, st.sampled_from(["dms", "packed", "deg", "gon"]))
def test_a_bearing_printed_and_read_again(angle: float, notation: str) -> None:
    text = format_bearing(angle, notation, 2)
    assert abs(wrap(parse_bearing(text, notation) - angle)) <= 0.005 * SEC * (1 + 1e-6)
    quadrant = re.sub(r"[^NSEW]", "", text)
    north, east = math.cos(angle), math.sin(angle)
    if min(abs(north), abs(east)) > 1e-6:
        assert quadrant == ("N" if north > 0 else "S") + ("E" if east > 0 else "W")


def test_bearings_never_pass_ninety_degrees_in_print() -> None:
    for turn in range(5):
        for away in (-0.04, 0.0, 0.04, -0.06, 0.06):
            text = format_bearing((turn * 90 * 3600 + away) * SEC, "dms", 1)
            d, m, s = text[1:-1].split()
            assert int(d) * 3600 + int(m) * 60 + float(s) <= 90 * 3600
    assert format_bearing(dms(45, 30, 15), "dms", 0) == "N 45 30 15 E"
    assert format_bearing(dms(134, 29, 45), "dms", 0) == "S 45 30 15 E"
    assert format_bearing(dms(225, 30, 15), "dms", 0) == "S 45 30 15 W"
    assert format_bearing(dms(314, 29, 45), "dms", 0) == "N 45 30 15 W"


@fixed
@given(st.floats(-1e4, 1e4))
def test_wrap(angle: float) -> None:
    got = wrap(angle)
    assert -math.pi < got <= math.pi
    turns = (angle - got) / TURN
    assert abs(turns - round(turns)) < 1e-9


def test_wrap_at_the_seam() -> None:
    assert wrap(math.pi) == math.pi
    assert wrap(-math.pi) == math.pi
    assert wrap(0.0) == 0.0


@pytest.mark.parametrize(
    ("text", "unit", "metres"),
    [
        ("12.5", "m", 12.5),
        ("12.5", "ft", 12.5 * 0.3048),
        ("3937", "us-ft", 1200.0),
        ("1.2 km", "ft", 1200.0),
        ("12.5 us-ft", "m", 12.5 * 1200 / 3937),
        ("12.5mm", "m", 0.0125),
        ("1e3", "m", 1000.0),
        ("-3.25", "m", -3.25),
        ("−3.25", "m", -3.25),
        ("1 mi", "m", 1609.344),
        ("1 us-mi", "m", 5280 * 1200 / 3937),
        (".5", "m", 0.5),
        ("5.", "m", 5.0),
    ],
)
def test_lengths(text: str, unit: str, metres: float) -> None:
    close(parse_length(text, unit), metres, atol=1e-12)


def test_the_two_feet_differ_by_two_parts_in_a_million() -> None:
    """The international foot (1959) is shorter than the US survey foot (1893) by two parts in a million."""
    close(parse_length("1000000", "us-ft") - parse_length("1000000", "ft"), 0.6096012, atol=1e-6)


@fixed
@given(st.floats(-1e5, 1e5, allow_subnormal=False), st.sampled_from(sorted(LENGTHS)), st.booleans())
def test_a_length_in_any_unit(value: float, unit: str, comma: bool) -> None:
    text = f"{value:.6f}"
    wanted = float(text) * LENGTHS[unit]
    shown = text.replace(".", ",") if comma else text
    for form in (f"{shown} {unit}", f"{shown}{unit}"):
        assert parse_length(form, "m", "," if comma else ".") == wanted


@pytest.mark.parametrize(
    ("text", "dimension", "unit", "wanted"),
    [
        ("0.002", "length", "m", 0.002),
        ("0.01", "length", "us-ft", 0.01 * 1200 / 3937),
        ("2 mm", "length", "ft", 0.002),
        ("2.5", "angle", "dms", 2.5 * SEC),
        ("2.5", "angle", "deg", 2.5 * SEC),
        ("2.5", "angle", "packed", 2.5 * SEC),
        ("2.5", "angle", "mil", 2.5 * SEC),
        ("2.5", "angle", "gon", 2.5e-3 * math.pi / 200),
        ("0.5 mgon", "angle", "dms", 0.5e-3 * math.pi / 200),
    ],
)
def test_standard_deviations(text: str, dimension: str, unit: str, wanted: float) -> None:
    close(parse_sd(text, dimension, unit), wanted, atol=wanted * 1e-12)


@pytest.mark.parametrize("text", ["1_000", "0x10", "1e", "e5", "1.2.3", "--1", "", "½", "1 2", "1e999", "nan", "inf"])
def test_what_is_no_number(text: str) -> None:
    with pytest.raises(BadValue):
        parse_number(text)


def test_a_number_takes_no_other_decimal_mark_than_the_declared_one() -> None:
    assert parse_number("1,5", ",") == 1.5
    for text, mark in (
        ("1,5", "."),
        ("1.5", ","),
        ("1.234,5", ","),
        ("1,234.5", "."),
        ("1'234.5", "."),
        ("1 234.5", "."),
    ):
        with pytest.raises(BadValue):
            parse_number(text, mark)


@pytest.mark.parametrize("text", ["360 00 00", "359 59 60", "359 60 00", "-1 00 00", "400", "720 00 00"])
def test_what_is_no_direction(text: str) -> None:
    with pytest.raises(BadValue):
        parse_circle(text, "dms")


def test_the_last_direction_below_the_full_circle() -> None:
    close(parse_circle("359 59 59.9", "dms"), TURN - 0.1 * SEC, atol=1e-12)
