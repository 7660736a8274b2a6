"""A total station's raw book turned into directions, zenith angles and slope distances.

One row is one pointing in one face. The rows of a set to one target are meaned (adjust.book.faces): first each face,
then both; where a face is missing the reading is corrected with the collimation or index of the other pointings of its
station and counts half. Sets are compared (adjust.book.sets): what lies outside the limits that [rejection] declares is
left out and listed. Out come ordinary readings, one a set and target, each with the line of its first row.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass, replace

import numpy as np

from adjust.book import faces
from adjust.book.cells import Cells
from adjust.book.job import Aside
from adjust.book.mixed_faces import mixed_faces
from adjust.book.observations import Observations
from adjust.book.round_checks import findings
from adjust.book.round_slips import Raw, limits, slips
from adjust.book.round_words import reductions_of
from adjust.book.sets import Outside, SetMeans, outside, set_means
from adjust.book.sheet import Sheet
from adjust.kinds import KINDS
from adjust.network import Array, Block
from adjust.units import TURN, wrap

READINGS = ("horizontal_circle", "zenith_circle", "slope_distance")
SHEETS = {
    "direction": Sheet(KINDS["direction"], ("at", "to"), ("horizontal_circle",), "sd_direction", "direction"),
    "zenith": Sheet(KINDS["zenith_angle"], ("at", "to"), ("zenith_circle",), "sd_zenith", "zenith angle"),
    "distance": Sheet(KINDS["distance"], ("at", "to"), ("slope_distance",), "sd_distance", "distance"),
}


@dataclass(frozen=True)
class Pointing:
    """All rows of one set to one target, reduced; angles in radians, lengths in metres, None where not observed."""

    at: str
    set: str
    to: str
    rows: tuple[int, ...]
    lines: tuple[int, ...]
    circle: tuple[int, int]
    """Readings of the horizontal circle in face 1 and in face 2."""
    vertical: tuple[int, int]
    """Likewise of the vertical circle, which may be blank in a face where the other is not."""
    direction: float | None = None
    two_c: float | None = None
    zenith: float | None = None
    index: float | None = None
    distance: float | None = None
    lengths: int = 0
    """Slope distances behind the mean."""
    distance_spread: float | None = None
    closure: float | None = None
    """Last minus first reading of the target in one face of the set: the horizon closure."""

    @property
    def one_face(self) -> bool:
        """Whether a circle was read in one face only."""
        return any(max(counts) and not min(counts) for counts in (self.circle, self.vertical))

    def behind(self, key: str) -> float:
        """Readings behind a direction, zenith angle or distance: pairs of both faces, of which one face is a half."""
        if key == "distance":
            return float(self.lengths)
        low, high = sorted(self.circle if key == "direction" else self.vertical)
        return float(low) if low else high / 2


@dataclass(frozen=True)
class Station:
    """Everything read at one station in one table."""

    at: str
    file: str
    pointings: tuple[Pointing, ...]
    means: dict[str, SetMeans]
    """By direction, zenith and distance."""
    out: dict[str, list[Outside]]
    """What lies outside the declared limits."""


def add_rounds(observations: Observations, cells: Cells) -> None:
    """Take over one table of rounds."""
    rows = observations.used("rounds", READINGS, cells)
    table = _Table(observations, cells, rows)
    if observations.faults.all:
        return
    stations = [_station(observations, cells, at, found) for at, found in table.by_station().items()]
    raw = [table.raw(station) for station in stations]
    clear = limits(list(zip(stations, raw, strict=True)))
    for station, rows_there in zip(stations, raw, strict=True):
        observations.reductions += reductions_of(
            station, _instrument_sds(observations, cells, station), observations.settings.rejection
        )
        observations.warnings += findings(station, slips(station, rows_there, clear))
        _leave_out(observations, cells, station)
    for key, sheet in SHEETS.items():
        _take(observations, cells, sheet, key, stations)


class _Table:
    """The rows of a table with their values, checked."""

    def __init__(self, observations: Observations, cells: Cells, rows: list[int]) -> None:
        self.cells, self.rows = cells, rows
        self.at = cells.names("at", rows, observations.booked)
        self.to = cells.names("to", rows, observations.booked)
        self.set = cells.text("set")
        self.face = [{"1": 1, "left": 1, "2": 2, "right": 2}.get(f, 0) for f in cells.choices("face", rows)]
        self.value = {column: cells.values(column, rows) for column in READINGS}
        self._check()

    def _check(self) -> None:
        """Every row says something, in a face that its zenith circle can be in."""
        if self.rows and not any(self.cells.has(column) for column in READINGS):
            self.cells.header_fault(READINGS[0], "", "a book without readings: " + ", ".join(READINGS))
        for i in self.rows:
            if not any(self.cells.text(column)[i] for column in READINGS):
                self.cells.fault(i, READINGS[0], "", "a row without a reading; fill it, or set use = no with a reason")
            if not self.face[i] and not self.cells.text("face")[i]:
                self.cells.fault(i, "face", "", "which face? Write 1 or 2 (left or right)")
        told = {i for i in self.rows if self._wrong_by_zenith(i)}
        self._check_lone_targets()
        unsaid = {key: rows for key, rows in self._groups().items() if not told.intersection(rows)}
        for i, hint in mixed_faces(unsaid, self.face, self.value["horizontal_circle"], self.cells.rows.lines):
            self.cells.fault(i, "face", self.cells.text("face")[i], hint)

    def _check_lone_targets(self) -> None:
        """The circle stands anywhere, so a direction says something beside another of its set only."""
        sighted: dict[tuple[str, str], list[int]] = defaultdict(list)
        for i in self.rows:
            if self.cells.text("horizontal_circle")[i]:
                sighted[self.at[i], self.set[i]].append(i)
        for (at, in_set), rows in sighted.items():
            if len({self.to[i] for i in rows}) > 1 or not (at and self.to[rows[0]]):
                continue
            i = rows[0]
            which = f"of set {in_set} at {at}" if in_set else f"sighted at {at}"
            hint = (
                f"{self.to[i]} is the only target {which}, and the direction of a lone target tells nothing; sight "
                "another target in the set, give it the name of another set, or leave horizontal_circle blank"
            )
            self.cells.fault(i, "horizontal_circle", self.cells.text("horizontal_circle")[i], hint)

    def _wrong_by_zenith(self, i: int) -> bool:
        """Whether the zenith circle of a row is of the other face; a fault then."""
        v = self.value["zenith_circle"][i]
        if np.isnan(v) or not self.face[i] or (v < TURN / 2) == (self.face[i] == 1):
            return False
        shown = self.cells.text("zenith_circle")[i]
        other = 2 if self.face[i] == 1 else 1
        hint = f"a zenith circle of face {other} in a row of face {self.face[i]}: the face is mixed up; correct one"
        self.cells.fault(i, "face", shown, hint)
        return True

    def _groups(self) -> dict[tuple[str, str, str], list[int]]:
        """Rows by station, set and target."""
        groups: dict[tuple[str, str, str], list[int]] = defaultdict(list)
        for i in self.rows:
            groups[self.at[i], self.set[i], self.to[i]].append(i)
        return groups

    def raw(self, station: Station) -> list[Raw]:
        """The rows of a station one by one; distances are told apart by what they were measured to."""
        columns = ("instrument_height", "target_height", "reflector", "instrument", "offset_along", "offset_right")
        there = [self.cells.text(c) for c in columns if self.cells.has(c)]
        h, v, d = READINGS
        return [
            Raw(p.set, p.to, i, line, self.face[i], self._value(h, i), self._value(v, i), self._value(d, i),
                tuple(self.cells.text(c)[i] for c in READINGS),
                tuple(text[i] for text in there))
            for p in station.pointings for i, line in zip(p.rows, p.lines, strict=True)
        ]  # fmt: skip

    def by_station(self) -> dict[str, list[Pointing]]:
        """Reduced pointings by station, in the order of the book."""
        out: dict[str, list[Pointing]] = defaultdict(list)
        for (at, in_set, to), rows in self._groups().items():
            out[at].append(self._pointing(at, in_set, to, rows))
        return {at: _with_missing_faces(found) for at, found in out.items()}

    def _pointing(self, at: str, in_set: str, to: str, rows: list[int]) -> Pointing:
        h, v, d = ([[self._value(c, i) for i in rows if self.face[i] == f] for f in (1, 2)] for c in READINGS)
        h1, h2, v1, v2 = (_given(x) for x in (*h, *v))
        lengths = _given([*d[0], *d[1]])
        lines = tuple(self.cells.rows.lines[i] for i in rows)
        found = Pointing(at, in_set, to, tuple(rows), lines, (len(h1), len(h2)), (len(v1), len(v2)))
        if h1 and h2:
            one, two = faces.circle_mean(h1), faces.circle_mean(h2)
            found = replace(found, direction=faces.direction(one, two), two_c=faces.two_c(one, two))
        elif h1 or h2:
            found = replace(found, direction=(faces.circle_mean(h1 or h2) + (0 if h1 else TURN / 2)) % TURN)
        if v1 and v2:
            one, two = faces.circle_mean(v1), faces.circle_mean(v2)
            found = replace(found, zenith=faces.zenith(one, two), index=faces.index(one, two))
        elif v1 or v2:
            found = replace(found, zenith=faces.circle_mean(v1) if v1 else TURN - faces.circle_mean(v2))
        again = next((x for x in (h1, h2) if len(x) > 1), None)
        return replace(
            found,
            distance=float(np.mean(lengths)) if lengths else None,
            lengths=len(lengths),
            distance_spread=max(lengths) - min(lengths) if len(lengths) > 1 else None,
            closure=wrap(again[-1] - again[0]) if again else None,
        )

    def _value(self, column: str, i: int) -> float | None:
        x = float(self.value[column][i])
        return None if np.isnan(x) else x


def _given(values: list[float | None]) -> list[float]:
    return [v for v in values if v is not None]


def _with_missing_faces(pointings: list[Pointing]) -> list[Pointing]:
    """Single faces corrected with the mean collimation and index of the station's other pointings."""
    c = [p.two_c for p in pointings if p.two_c is not None]
    i = [p.index for p in pointings if p.index is not None]
    out = []
    for p in pointings:
        if p.two_c is None and p.direction is not None and c:
            p = replace(p, direction=(p.direction - (1 if p.circle[0] else -1) * sum(c) / len(c) / 2) % TURN)
        if p.index is None and p.zenith is not None and i:
            p = replace(p, zenith=p.zenith - (1 if p.vertical[0] else -1) * sum(i) / len(i))
        out.append(p)
    return out


def _station(observations: Observations, cells: Cells, at: str, pointings: list[Pointing]) -> Station:
    means: dict[str, SetMeans] = {}
    out: dict[str, list[Outside]] = {}
    for key in SHEETS:
        values = {(p.set, p.to): x for p in pointings if (x := getattr(p, key)) is not None}
        out[key] = []
        limit = observations.settings.rejection.get(key)
        if values and limit is not None:
            out[key] = outside(values, key == "direction", limit.allowable() or 0.0)
        kept = {k: x for k, x in values.items() if k not in {o.key for o in out[key] if o.sure}}
        if kept:
            means[key] = set_means(kept, key == "direction")
    return Station(at, cells.rows.file, tuple(pointings), means, out)


def _instrument_sds(observations: Observations, cells: Cells, station: Station) -> dict[str, float]:
    """The instrument's own figure for one direction, zenith angle and distance, where one instrument fits."""
    out = {}
    row = station.pointings[0].rows[0]
    name = cells.text("instrument")[row] or cells.table.instrument
    for key, sheet in SHEETS.items():
        assert sheet.kind.instrument is not None
        models = {n: keys[sheet.kind.instrument.name] for n, keys in observations.settings.instruments.items()
                  if sheet.kind.instrument.name in keys and (not name or n == name)}  # fmt: skip
        if len(models) == 1:
            lengths = [p.distance for p in station.pointings if p.distance is not None]
            typical = np.array([float(np.mean(lengths)) if lengths else 0.0])
            out[key] = float(next(iter(models.values())).sd(1, distance=typical)[0])
    return out


def _leave_out(observations: Observations, cells: Cells, station: Station) -> None:
    """List what the declared limits reject."""
    of, ids = {(p.set, p.to): p for p in station.pointings}, cells.text("id")
    for key, found in station.out.items():
        for one in found:
            if one.sure:
                p = of[one.key]
                what = SHEETS[key].what
                limit = observations.settings.rejection[key].text
                reason = f"outside the limit of {limit} declared in [rejection]"
                name = f"{ids[p.rows[0]] or f'{cells.rows.file}:{p.lines[0]}'} {what}"
                observations.left_out.append(
                    Aside(name, cells.rows.file, p.lines[0], SHEETS[key].kind.name, reason)
                )  # fmt: skip


def _take(observations: Observations, cells: Cells, sheet: Sheet, key: str, stations: list[Station]) -> None:
    """Hand the readings of one kind over, one a pointing, in the order of the book."""
    n = len(cells)
    values, count = np.full(n, np.nan), np.full(n, np.nan)
    for station in stations:
        rejected = {o.key for o in station.out[key] if o.sure}
        for p in station.pointings:
            x = getattr(p, key)
            if x is not None and (p.set, p.to) not in rejected:
                values[p.rows[0]] = x
                count[p.rows[0]] = p.behind(key)
    use = np.flatnonzero(~np.isnan(values)).tolist()
    if not use:
        return

    def given(rows: list[int]) -> Array:
        return values

    before = len(observations.blocks)
    observations.take(cells, replace(sheet, sizes={"count": count}), use, given, np.zeros(n, dtype=bool))
    if len(observations.blocks) > before:
        observations.blocks[-1] = _with_texts(observations.blocks[-1], cells, sheet, key, stations)


def _with_texts(block: Block, cells: Cells, sheet: Sheet, key: str, stations: list[Station]) -> Block:
    """The block with the lines of all texts behind each of its readings."""
    column = sheet.value[0]
    texts = cells.text(column)
    by_line = {p.lines[0]: [x for i, x in zip(p.rows, p.lines, strict=True) if texts[i]]
               for station in stations for p in station.pointings}  # fmt: skip
    most = max(len(by_line[int(line)]) for line in block.line)
    at = np.zeros((len(block), most), dtype=np.int64)
    for k, line in enumerate(block.line.tolist()):
        found = by_line[line]
        at[k, : len(found)] = found
    return replace(block, booked=(column,) * most, booked_at=at, booked_join=" / ")
