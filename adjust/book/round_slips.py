"""Single readings of rounds that were misread, named by their line.

A circle reading of one face that is wrong by d moves 2C (for the zenith circle: twice the index) of its pointing by d,
and the pointing itself by half of d, with a sign that tells the face: with the direction m of the target from the other
sets and 2C from all pointings, a reading of face 1 should be m + c, one of face 2 half a circle on and m - c. The
reading farthest from that is named. Where no other set has the target three readings of its own tell as well; of one
reading in each face none can be told from the other, and both are named.

A slope distance is compared with the others to the same target at the same heights. Limits stand out from the spread of
the table's own figures, by their median size (1.4826 median deviations estimate a standard deviation).
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from statistics import median
from typing import TYPE_CHECKING

from adjust.book.sets import against_others
from adjust.units import RHO_SEC, TURN, wrap

if TYPE_CHECKING:
    from adjust.book.rounds import Pointing, Station

CLEAR = 8.0
"""Robust standard deviations that a slip must show. With six a sound book in twelve was blamed
(tests/book/book_errors_study.py): the spread of few figures is a rough one."""
LEAST_ANGLE = 10 / RHO_SEC
LEAST_LENGTH = 0.010
FEWEST = 5
"""Figures of a table from which a spread can be told."""
FEW_HERE = 3
"""Pointings of a station from whose middle one of them can be off."""
COLUMNS = {"direction": "horizontal circle", "zenith": "zenith circle", "distance": "slope distance"}


@dataclass(frozen=True)
class Raw:
    """One row: readings in radians and metres, None where not read."""

    set: str
    to: str
    row: int
    line: int
    face: int
    horizontal: float | None
    zenith: float | None
    slope: float | None
    texts: tuple[str, ...]
    """The same three as booked."""
    there: tuple[str, ...]
    """Heights, reflector and the like: what distances to one target must share to be compared."""


@dataclass(frozen=True)
class Slip:
    """A reading that was misread, or one of two."""

    key: tuple[str, str]
    """(set, target)."""
    what: str
    """direction, zenith or distance."""
    sentence: str


@dataclass(frozen=True)
class Limits:
    """What stands out in a table: angles in radians, lengths in metres, infinite where there is too little to tell."""

    by_what: dict[str, float]


def limits(stations: Sequence[tuple[Station, list[Raw]]]) -> Limits:
    """What stands out from the spread of 2C, index and distances over all stations of a table."""
    out = {}
    for what, least in (("direction", LEAST_ANGLE), ("zenith", LEAST_ANGLE), ("distance", LEAST_LENGTH)):
        off: list[float] = []
        for station, raw in stations:
            if what == "distance":
                off += [d for _, d, _ in _lengths(raw)]
            elif double := _doubles(station, what):
                middle = median(double.values())
                off += [x - middle for x in double.values()]
        out[what] = max(CLEAR * 1.4826 * median(map(abs, off)), least) if len(off) >= FEWEST else math.inf
    return Limits(out)


def slips(station: Station, raw: list[Raw], limit: Limits) -> list[Slip]:
    """What was misread at a station, in the order of circles and distances."""
    return [*_of_circle(station, raw, "direction", limit.by_what["direction"]),
            *_of_circle(station, raw, "zenith", limit.by_what["zenith"]),
            *_of_lengths(station, raw, limit.by_what["distance"])]  # fmt: skip


def _doubles(station: Station, what: str) -> dict[tuple[str, str], float]:
    return {(p.set, p.to): x for p in station.pointings if (x := _double(p, what)) is not None}


def _double(p: Pointing, what: str) -> float | None:
    """2C on the horizon (it grows with 1/sin z), or twice the index."""
    if what == "zenith":
        return None if p.index is None else 2 * p.index
    return None if p.two_c is None else p.two_c * _flat(p)


def _flat(p: Pointing) -> float:
    return 1.0 if p.zenith is None else math.sin(p.zenith)


def _of_circle(station: Station, raw: list[Raw], what: str, limit: float) -> list[Slip]:
    double = _doubles(station, what)
    if len(double) < FEW_HERE:
        return []
    middle = median(double.values())
    out = []
    for p in station.pointings:
        key = (p.set, p.to)
        own = [x for (s, t), x in double.items() if t == p.to and s != p.set]
        # a target that is off in every set has a fault of its own, not of a reading
        clear = key in double and all(abs(double[key] - x) > limit for x in [middle, *([median(own)] if own else [])])
        rows = [r for r in raw if (r.set, r.to) == key]
        # the difference of two readings of one face spreads as 2C does
        if key in double and (clear or _apart(rows, what) > limit):
            out.append(_named(station, rows, p, what, middle, limit))
    return out


def _circle(r: Raw, what: str) -> float | None:
    return r.horizontal if what == "direction" else r.zenith


def _apart(rows: list[Raw], what: str) -> float:
    """The largest difference of readings of one face."""
    by_face: dict[int, list[float]] = defaultdict(list)
    for r in rows:
        if (x := _circle(r, what)) is not None:
            by_face[r.face].append(x)
    return max((abs(wrap(x - found[0])) for found in by_face.values() for x in found), default=0.0)


def _named(station: Station, rows: list[Raw], p: Pointing, what: str, middle: float, limit: float) -> Slip:
    """The reading of a pointing that is off, or both faces where the other sets do not tell."""
    values = {(q.set, q.to): x for q in station.pointings if (x := getattr(q, what)) is not None}
    off = against_others(values, (p.set, p.to), what == "direction")
    where = f"{station.file}: {station.at}{f' set {p.set}' if p.set else ''} to {p.to}"
    k = 0 if what == "direction" else 1
    booked = [(r, x) for r in rows if (x := _circle(r, what)) is not None]
    half = middle / 2 / (_flat(p) if what == "direction" else 1.0)
    alone = [wrap(x - _due(what, r.face, 0.0, half)) * (-1 if what == "zenith" and r.face == 2 else 1)
             for r, x in booked]  # fmt: skip
    if off is None and len(booked) < 3:
        size = f'{max(abs((_double(p, what) or 0.0) - middle), _apart(rows, what)) * RHO_SEC:.0f}"'
        lines = " or ".join(f"{r.texts[k]} in line {r.line}" for r, _ in booked)
        return Slip((p.set, p.to), what, f"{where}: the readings of the {COLUMNS[what]} lie {size} further apart than "
                    f"elsewhere at the station: {lines} is misread?")  # fmt: skip
    mean = values[p.set, p.to] - off.off if off else alone[0] + median(wrap(x - alone[0]) for x in alone)
    residuals = [(wrap(x - _due(what, r.face, mean, half)), r) for r, x in booked]
    away, worst = max(residuals, key=lambda one: abs(one[0]))
    minutes = away * RHO_SEC / 60
    whole = round(abs(minutes)) >= 1 and abs(abs(minutes) - round(abs(minutes))) * 60 < limit * RHO_SEC / 2
    count = round(abs(minutes))
    words = f", which is {count} minute{'s' if count > 1 else ''}" if whole and count < 60 else ""
    return Slip((p.set, p.to), what, f"{where}: the {COLUMNS[what]} {worst.texts[k]} in line {worst.line} lies "
                f'{away * RHO_SEC:+.0f}" off the other face and the other sets{words}: misread?')  # fmt: skip


def _due(what: str, face: int, mean: float, half: float) -> float:
    """What a face should read."""
    if what == "zenith":
        return (mean if face == 1 else TURN - mean) + half
    return mean + half if face == 1 else mean + TURN / 2 - half


def _lengths(raw: list[Raw]) -> list[tuple[Raw, float, list[Raw]]]:
    """Distances of a station with what they differ by from the middle of all to the same target, and these."""
    groups: dict[tuple[str, ...], list[tuple[Raw, float]]] = defaultdict(list)
    for r in raw:
        if r.slope is not None:
            groups[r.to, *r.there].append((r, r.slope))
    return [(r, x - median(y for _, y in found), [q for q, _ in found]) for found in groups.values() if len(found) > 1
            for r, x in found]  # fmt: skip


def _of_lengths(station: Station, raw: list[Raw], limit: float) -> list[Slip]:
    """Distances that differ from the others to the same target."""
    out, told = [], set()
    for r, d, same in _lengths(raw):
        where = f"{station.file}: {station.at}{f' set {r.set}' if r.set else ''} to {r.to}"
        if len(same) == 2 and 2 * abs(d) > limit and same[0].row not in told:
            told.add(same[0].row)
            lines = " or ".join(f"{q.texts[2]} in line {q.line}" for q in same)
            out.append(Slip((r.set, r.to), "distance", f"{where}: two slope distances differ by {2 * abs(d):.3f} m: "
                            f"{lines} is misread?"))  # fmt: skip
        elif len(same) > 2 and abs(d) > limit:
            out.append(Slip((r.set, r.to), "distance", f"{where}: the slope distance {r.texts[2]} in line {r.line} is "
                            f"{abs(d):.3f} m {'longer' if d > 0 else 'shorter'} than the middle of all {len(same)} to "
                            "this target: misread?"))  # fmt: skip
    return out
