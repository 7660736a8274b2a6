"""Between the booked text and the readings: results of reducing a raw book, and corrections of distances."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Reduction:
    """One result of reducing a raw book, or one thing that was looked at there."""

    what: str
    """Face mean, set mean, collimation, index, horizon closure, set-up, page check, sections, two-peg test, ..."""
    of: str
    """Station, set, target, line in words: "S1 set 2 to P4"."""
    file: str
    lines: tuple[int, ...]
    """Physical lines it was made from."""
    values: dict[str, float | None]
    """Metres, radians or counts by name; the name says what: mean, two_c, index, spread, sd_instrument, ..."""
    dimension: str
    """Of the values: angle, length or number."""
    verdict: str = ""
    """'', met, not met, or cannot be tested."""
    sentence: str = ""
    """Trade words, only where there is something to say."""


@dataclass(frozen=True)
class LedgerLine:
    """One correction of one distance."""

    observation: str
    """Its identification."""
    name: str
    """Reflector constant, atmosphere, slope to horizontal at the instrument, ..."""
    amount: float
    """Metres added."""
    how: str
    """'here', 'applied in the instrument', or 'not applied, declared so'."""
    source: str
    """The figures it came from, in words: "22.5 C, 958 hPa, 60 %: 12.4 ppm"."""
