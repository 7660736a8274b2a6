"""Allowances of misclosures: how they are written, and what they come to."""

from __future__ import annotations

import math

import pytest

from adjust.allowances import parse_allowance
from adjust.units import ANGLES, BadValue
from tests.helpers import close

SEC = ANGLES["sec"]


def at(text: object, dimension: str, **known: float) -> float:
    found = parse_allowance(text, dimension).allowable(**known)  # type: ignore[arg-type]  # counts by name
    return math.nan if found is None else found


def test_terms_and_their_roots() -> None:
    close(at("12 mm*sqrt(km)", "length", length=2250.0), 0.018, atol=1e-12)
    close(at("0.05 ft*sqrt(mi)", "length", length=4 * 1609.344), 0.1 * 0.3048, atol=1e-12)
    close(at("5 mm*sqrt(setup)", "length", setups=16), 0.020, atol=1e-12)
    close(at("10 sec*sqrt(n)", "angle", n=9), 30 * SEC, atol=1e-15)
    close(at("1:10000", "length", length=1234.5), 0.12345, atol=1e-12)
    close(at("2 cm + 50 ppm", "length", length=1000.0), 0.07, atol=1e-12)
    close(at("3 sec", "angle"), 3 * SEC, atol=1e-15)


def test_of_a_list_the_smallest_counts() -> None:
    rule = ["0.04 m*sqrt(km)", "1:100000"]
    close(at(rule, "length", length=1000.0), 0.010, atol=1e-12)
    close(at(rule, "length", length=25e6), 0.04 * math.sqrt(25e3), atol=1e-9)


def test_what_is_not_known_is_not_guessed() -> None:
    assert math.isnan(at("5 mm*sqrt(setup)", "length", length=1000.0))
    assert math.isnan(at(["1:5000", "5 mm*sqrt(setup)"], "length", length=1000.0))


@pytest.mark.parametrize(
    ("text", "dimension", "words"),
    [
        (7, "length", "not an allowance"),
        ([], "length", "not an allowance"),
        ("twelve", "length", "no number with a unit"),
        ("12 sec*sqrt(km)", "length", "sec is no unit of length"),
        ("12 mm", "angle", "mm is no unit of angle"),
        ("1:5000", "angle", "a part of the length"),
        ("1:0", "length", "a part of the length"),
        ("-3 mm", "length", "below zero"),
        ("0 mm", "length", "an allowance of zero"),
        ("3 mm*sqrt(sec)", "length", "use sqrt(km)"),
    ],
)
def test_faults(text: object, dimension: str, words: str) -> None:
    with pytest.raises(BadValue, match=words.replace("(", r"\(").replace(")", r"\)")):
        parse_allowance(text, dimension)
