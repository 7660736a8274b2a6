"""What a drawing shows of a record, before any paper: lines and what was read along them, marks, ellipses."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from adjust.record.shown import Entry

Names = tuple[str, str]

BOTH, DISTANCE, POINTING, HEIGHT = "both", "distance", "pointing", "levelled"
LOOK_ORDER = (BOTH, DISTANCE, POINTING, HEIGHT)
"""What was read along a line, in the order of the legend."""
_SAYS = {"distance": "length", "vector": "length", "levelled": "height", "zenith_angle": "height"}
"""What a kind says of its line; all others are pointings."""
ALONG = ("distance", "levelled", "vector")
"""Kinds read along the whole line; all others are pointings taken at its start."""
HEIGHT_KINDS = ("levelled", "zenith_angle", "vector")
ROLES = ("held", "weighted", "check", "new", "unchecked")
"""Symbols in the order of the legend."""


def pointed_lines(observation: Entry) -> list[Names]:
    """The lines a reading runs along, from its standpoint: two for an angle, none for a reading of one station."""
    start = observation["at"] or observation["from"]
    ends = [observation[key] for key in ("to", "first", "second")]
    return [(start, end) for end in ends if start and end and start != end]


def ordered(line: Names) -> Names:
    """The line without its sense."""
    return line if line[0] < line[1] else (line[1], line[0])


def line_looks(observations: Iterable[Entry]) -> dict[Names, str]:
    """Each line with what was read along it: 'both' a length and a pointing, 'distance', 'pointing', 'levelled'."""
    said: dict[Names, set[str]] = {}
    for one in observations:
        for line in pointed_lines(one):
            said.setdefault(ordered(line), set()).add(_SAYS.get(one["kind"], "pointing"))
    return {line: _look(what) for line, what in said.items()}


def _look(said: set[str]) -> str:
    if "length" in said:
        return BOTH if "pointing" in said else DISTANCE
    return POINTING if "pointing" in said else HEIGHT


def unchecked_stations(record: Entry) -> set[str]:
    """Stations to which an unchecked reading points: its new stations, those aimed at before the standpoint."""
    new = {one["station"] for one in record["stations"] if one["role"] == "new"}
    by_id = {one["id"]: one for one in record["observations"]}
    found: set[str] = set()
    for entry in record["unchecked"]:
        one = by_id.get(entry["observation"])
        aimed = {one[key] for key in ("to", "first", "second")} & new if one else set()
        found |= aimed or ({one[key] for key in ("at", "from")} & new if one else set())
    return found


def suspect_readings(record: Entry) -> list[Entry]:
    """The observations blamed, in order of blame, as far as the record lists them."""
    by_id = {one["id"]: one for one in record["observations"]}
    return [by_id[one["observation"]] for one in record["suspects"] if one["observation"] in by_id]


def left_out_lines(record: Entry) -> list[Names]:
    """Lines of the readings that were left out, from their standpoint, each once."""
    lines: dict[Names, None] = {}
    for one in record["left_out"]:
        start, *ends = [name for name in one["stations"] if name] or [""]
        for end in ends:
            if start != end and ordered((start, end)) not in {ordered(line) for line in lines}:
                lines[start, end] = None
    return list(lines)


@dataclass(frozen=True)
class Relative:
    """A relative ellipse (metres, radians from north) of a line, observed or asked for as a pair."""

    ends: Names
    semi_major: float
    semi_minor: float
    azimuth: float
    pair: bool


def relative_ellipses(record: Entry) -> list[Relative]:
    """Relative confidence ellipses, the largest first.

    A line to a station without an error of its own is left out: there the relative ellipse is the other end's own. A
    pair stays, because it was asked for.
    """
    moving = {one["station"] for one in record["stations"] if one["ellipse"] and one["ellipse"]["semi_major"]}
    observed = {ordered(line) for one in record["observations"] for line in pointed_lines(one)}
    found: dict[Names, Relative] = {}
    for line in record["lines"]:
        e, ends = line["ellipse_confidence"], (line["from"], line["to"])
        pair = ordered(ends) not in observed
        if e and e["semi_major"] and (pair or moving.issuperset(ends)):
            one = Relative(ends, e["semi_major"], e["semi_minor"] or 0.0, e["azimuth"], pair)
            found.setdefault(ordered(ends), one)
    return sorted(found.values(), key=lambda one: -one.semi_major)


def station_ellipses(record: Entry) -> list[Entry]:
    """Stations with a confidence ellipse, the largest first."""
    found = [one for one in record["stations"] if one["ellipse_confidence"] and one["ellipse_confidence"]["semi_major"]]
    return sorted(found, key=lambda one: -float(one["ellipse_confidence"]["semi_major"]))
