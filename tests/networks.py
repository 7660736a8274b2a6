"""Seeded random jobs written as folders, with the readings beside them as plain arrays.

Nothing of ``adjust`` is used here, so that an oracle can be written against these arrays alone. Inside are metres and
radians; angles run clockwise from north. The readings are invented: truth plus a normal error of the stated size.

Row order of ``Readings`` is that of the job: the weighted parts of control.csv first, then every table in turn.
Equations: distance = |d|; direction = azimuth - o of its set; angle = azimuth(second) - azimuth(first);
azimuth = azimuth - t of its set, or without t where ``group`` is -1; levelled = height(to) - height(from).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

SPACING = 120.0
JITTER = 30.0
"""Stations stand on a jittered grid: none nearer than 60 m, neighbours and diagonals within 260 m."""
REACH = 260.0
SD_DISTANCE, PPM = 0.0015, 2e-6
SD_POINTING_SEC = 2.0
SD_AZIMUTH_SEC = 4.0
SD_PER_ROOT_KM = 0.0012
SD_PER_ROOT_SETUP = 0.0004
SEC = math.pi / 648000
START_ERROR = 0.3
"""Metres by which starting coordinates are off, at most, in each part."""

LENGTHS = {"m": 1.0, "ft": 0.3048, "us-ft": 1200 / 3937}
ANGLES = {"deg": math.pi / 180, "gon": math.pi / 200, "mil": math.pi / 3200}
_LENGTH_COLUMNS = {"east", "north", "height", "distance", "rise", "length", "sd_east", "sd_north", "sd_height"}
_ANGLE_COLUMNS = {"direction", "angle", "azimuth"}
STATION_COLUMNS = ("station", "at", "from", "to", "first", "second")
PLANE_KINDS = ("distances", "directions", "angles", "azimuths")
LEVELLED_KINDS = ("levelled_lengths", "levelled_setups")
KINDS = (*PLANE_KINDS, *LEVELLED_KINDS)

Row = dict[str, object]


@dataclass(frozen=True)
class Table:
    """One table: lengths in metres and angles in radians as floats, everything else as text."""

    file: str
    kind: str
    rows: list[Row]
    instrument: str = ""
    units: dict[str, str] = field(default_factory=dict)


@dataclass(frozen=True)
class Readings:
    """Scalar readings (R,): kind (singular), station numbers (R, 3) padded by -1, value, sd, group and part."""

    kind: NDArray[np.str_]
    stations: Ints
    value: Array
    sd: Array
    group: Ints
    part: Ints

    def __len__(self) -> int:
        return len(self.kind)


@dataclass(frozen=True)
class Made:
    """A job as made: stations (n, 3) of truth, start and known, roles (n, 2) [plane, height], and its readings."""

    folder: Path
    names: list[str]
    truth: Array
    start: Array
    role: NDArray[np.str_]
    readings: Readings
    groups: int
    """Number of group unknowns: orientations and turns."""
    clusters: list[tuple[Ints, Array]]
    """Rows (k,) and covariance (k, k) of correlated readings; files cannot say them, so a test puts them in."""
    tables: list[Table]
    free: bool
    settings: str


def random_job(
    rng: np.random.Generator,
    folder: Path,
    n_stations: int = 8,
    kinds: Sequence[str] = ("distances", "directions", "angles"),
    control: str = "held",
    correlated: bool = False,
    unit: str = "deg",
    spur: bool = False,
    settings: str = "",
    origin: tuple[float, float] = (1000.0, 2000.0),
) -> Made:
    """Write a random job of ``kinds`` into ``folder`` (made if absent) and return it with its truth and readings.

    ``control`` is held, weighted or free; ``spur`` adds a last station that each kind of table reaches only just;
    ``settings`` is more text for job.toml. Angles are written in ``unit``, deg or gon. ``origin`` is the east and north
    of the south-west corner: large coordinates are rounded, which near zero they are less.
    """
    assert set(kinds) <= set(KINDS), f"kinds are {KINDS}"
    maker = _Maker(rng, n_stations, kinds, spur, origin)
    maker.control(control)
    for kind in kinds:
        maker.observe(kind)
    made = maker.finish(folder, control == "free", correlated, unit, settings)
    write_job(made.folder, made.tables, free=made.free, angle=unit, settings=settings)
    return made


class _Maker:
    """A job in the making: stations, lines of sight, and rows with their truth."""

    def __init__(self, rng: np.random.Generator, n: int, kinds: Sequence[str], spur: bool,
                 origin: tuple[float, float]) -> None:  # fmt: skip
        self.rng, self.kinds, self.spur = rng, kinds, spur
        self.truth = _stations(rng, n) + np.array([*origin, 0.0])
        self.names = _names(rng, n)
        self.lines = [
            (i, j) for i in range(n) for j in range(i + 1, n) if math.dist(self.truth[i, :2], self.truth[j, :2]) < REACH
        ]
        if spur:
            self._add_spur()
        self.start = self.truth + rng.uniform(-START_ERROR, START_ERROR, self.truth.shape)
        self.role = np.full((len(self.truth), 2), "new", dtype="<U8")
        self.tables: list[Table] = []
        self.found: list[tuple[str, tuple[int, ...], float, float, int, int]] = []
        self.groups = 0
        self.plane = any(k in PLANE_KINDS for k in kinds)
        self.heights = any(k in LEVELLED_KINDS for k in kinds)

    def _add_spur(self) -> None:
        self.truth = np.vstack([self.truth, self.truth[0] + [-90.0, -70.0, 1.5]])
        self.names.append("spur")

    def control(self, kind: str) -> None:
        """Choose marks; weighted ones enter with an error of their standard deviation."""
        rows: list[Row] = []
        n = len(self.truth) - self.spur
        if kind != "free":
            for i in sorted(self.rng.choice(n, size=min(n, 2 if kind == "held" else 3), replace=False).tolist()):
                rows.append(self._mark(i, kind))
            self.tables.append(Table("control.csv", "control", rows))
        stations: list[Row] = []
        for i in range(len(self.truth)):
            if self.role[i, 0] == "new" and self.role[i, 1] == "new":
                stations.append({"station": self.names[i], **self._parts(self.start[i])})
        self.tables.append(Table("stations.csv", "stations", stations))

    def _parts(self, xyz: Array) -> Row:
        plane: Row = {"east": float(xyz[0]), "north": float(xyz[1])} if self.plane else {}
        return plane | ({"height": float(xyz[2])} if self.heights else {})

    def _mark(self, i: int, kind: str) -> Row:
        xyz = self.truth[i].copy()
        row: Row = {"station": self.names[i], "role": kind}
        if kind == "weighted":
            sd = self.rng.uniform(0.002, 0.005, 3)
            xyz = xyz + self.rng.normal(0.0, sd)
            for p, name in enumerate(("east", "north", "height")):
                if (self.plane, self.plane, self.heights)[p]:
                    row[f"sd_{name}"] = float(sd[p])
                    self.found.append(("control", (i,), float(xyz[p]), float(sd[p]), -1, p))
        self.start[i] = xyz
        self.role[i] = kind
        return row | self._parts(xyz)

    def observe(self, kind: str) -> None:
        """Add the table of a kind."""
        getattr(self, f"_{kind}")()

    def azimuth(self, i: int, j: int) -> float:
        """True azimuth of a line, radians."""
        d = self.truth[j] - self.truth[i]
        return math.atan2(d[0], d[1])

    def _sd(self, row: Row, stated: float, column_unit: float) -> float:
        """The instrument's figure, or for a third of the rows one of their own in the column sd."""
        if self.rng.random() > 1 / 3:
            return stated
        own = float(stated / column_unit * self.rng.uniform(0.7, 1.6))
        row["sd"] = own
        return own * column_unit

    def _put(self, kind: str, table: list[Row], row: Row, ends: tuple[int, ...], true: float, sd: float,
             column: str, group: int = -1) -> None:  # fmt: skip
        """Draw one reading; ``sd`` is the instrument's before an own figure replaces it."""
        angular = column in _ANGLE_COLUMNS
        sd = self._sd(row, sd, SEC if angular else 1.0)
        value = float(true + self.rng.normal(0.0, sd))
        value = value % (2 * math.pi) if angular else value
        row[column] = value
        table.append(row)
        self.found.append((kind, ends, value, sd, group, 0))

    def _distances(self) -> None:
        rows: list[Row] = []
        alone = "directions" not in self.kinds and "angles" not in self.kinds
        for i, j in self.lines:
            if alone or self.rng.random() < 0.8 or not rows:
                self._distance(rows, i, j)
        if self.spur:
            self._distance(rows, 0, len(self.truth) - 1)
        self.tables.append(Table("distances.csv", "distances", rows, "station"))

    def _distance(self, rows: list[Row], i: int, j: int) -> None:
        if self.rng.random() < 0.5:
            i, j = j, i
        d = math.dist(self.truth[i, :2], self.truth[j, :2])
        # the instrument's figure grows with the reading, so the reading is drawn first
        value = d + self.rng.normal(0.0, SD_DISTANCE + PPM * d)
        row: Row = {"from": self.names[i], "to": self.names[j], "distance": float(value)}
        sd = self._sd(row, SD_DISTANCE + PPM * value, 1.0)
        rows.append(row)
        self.found.append(("distance", (i, j), float(value), sd, -1, 0))

    def _neighbours(self, i: int) -> list[int]:
        return [b if a == i else a for a, b in self.lines if i in (a, b)]

    def _directions(self) -> None:
        rows: list[Row] = []
        for i in range(len(self.truth) - self.spur):
            targets = self._neighbours(i)
            self._set(rows, i, [*targets, len(self.truth) - 1] if self.spur and i == 0 else targets, "1")
            if self.rng.random() < 0.3 and len(targets) > 2:
                self._set(rows, i, self.rng.permutation(targets)[:3].tolist(), "2")
        self.tables.append(Table("directions.csv", "directions", rows, "station"))

    def _set(self, rows: list[Row], i: int, targets: list[int], name: str) -> None:
        zero = self.rng.uniform(0.0, 2 * math.pi)
        for j in targets:
            row: Row = {"at": self.names[i], "to": self.names[j], "set": name}
            self._put("direction", rows, row, (i, j), self.azimuth(i, j) - zero, SD_POINTING_SEC * SEC, "direction",
                      self.groups)  # fmt: skip
        self.groups += 1

    def _angles(self) -> None:
        rows: list[Row] = []
        alone = "directions" not in self.kinds
        for i in range(len(self.truth) - self.spur):
            targets = self.rng.permutation(self._neighbours(i)).tolist()
            for j, k in list(pairwise(targets))[: None if alone else 2]:
                self._angle(rows, i, j, k)
        if self.spur and alone:
            self._angle(rows, 0, self._neighbours(0)[0], len(self.truth) - 1)
        self.tables.append(Table("angles.csv", "angles", rows, "station"))

    def _angle(self, rows: list[Row], i: int, j: int, k: int) -> None:
        row: Row = {"at": self.names[i], "first": self.names[j], "second": self.names[k]}
        true = self.azimuth(i, k) - self.azimuth(i, j)
        self._put("angle", rows, row, (i, j, k), true, math.sqrt(2.0) * SD_POINTING_SEC * SEC, "angle")

    def _azimuths(self) -> None:
        """A quarter of the lines true to north, another quarter in a set with a common turn."""
        rows: list[Row] = []
        turn, group = self.rng.uniform(-0.1, 0.1), self.groups
        self.groups += 1
        for number, (i, j) in enumerate(self.lines):
            if number % 4 > 1:
                continue
            in_set = number % 4 == 1
            row: Row = {"from": self.names[i], "to": self.names[j], "set": "needle" if in_set else ""}
            true = self.azimuth(i, j) - (turn if in_set else 0.0)
            self._put("azimuth", rows, row, (i, j), true, SD_AZIMUTH_SEC * SEC, "azimuth", group if in_set else -1)
        self.tables.append(Table("azimuths.csv", "azimuths", rows, "gyro"))

    def _levelled_lengths(self) -> None:
        self._levelled("length", SD_PER_ROOT_KM, "level-km")

    def _levelled_setups(self) -> None:
        self._levelled("setups", SD_PER_ROOT_SETUP, "level-setup")

    def _levelled(self, column: str, figure: float, instrument: str) -> None:
        rows: list[Row] = []
        lines = [line for line in self.lines if self.rng.random() < 0.9 or abs(line[0] - line[1]) == 1]
        for i, j in [*lines, *([(0, len(self.truth) - 1)] if self.spur and self._first_levelled(column) else [])]:
            long = float(np.round(math.dist(self.truth[i, :2], self.truth[j, :2]) * self.rng.uniform(1.0, 1.4), 1))
            count = int(self.rng.integers(2, 9))
            row: Row = {"from": self.names[i], "to": self.names[j]}
            row[column] = long if column == "length" else str(count)
            sd = figure * math.sqrt(long / 1000 if column == "length" else count)
            self._put("levelled", rows, row, (i, j), float(self.truth[j, 2] - self.truth[i, 2]), sd, "rise")
        self.tables.append(Table(f"{column}_levelled.csv", "levelled", rows, instrument))

    def _first_levelled(self, column: str) -> bool:
        return column == "length" or "levelled_lengths" not in self.kinds

    def finish(self, folder: Path, free: bool, correlated: bool, unit: str, settings: str) -> Made:
        """The job with its readings as arrays, exactly as its cells will be read again."""
        kind = np.array([f[0] for f in self.found])
        stations = np.array([(*f[1], -1, -1)[:3] for f in self.found], dtype=np.int64)
        value = np.array([f[2] for f in self.found])
        angular = np.isin(kind, ["direction", "angle", "azimuth"])
        value[angular] = [float(repr(v / ANGLES[unit])) * ANGLES[unit] for v in value[angular].tolist()]
        readings = Readings(
            kind, stations, value, np.array([f[3] for f in self.found]),
            np.array([f[4] for f in self.found], dtype=np.int64), np.array([f[5] for f in self.found], dtype=np.int64),
        )  # fmt: skip
        clusters = _clusters(self.rng, readings) if correlated else []
        return Made(folder, self.names, self.truth, self.start, self.role, readings, self.groups, clusters,
                    self.tables, free, settings)  # fmt: skip


def _stations(rng: np.random.Generator, n: int) -> Array:
    side = math.ceil(math.sqrt(n))
    cells = np.array([(i % side, i // side) for i in range(n)], dtype=float)
    plane = cells * SPACING + rng.uniform(-JITTER, JITTER, (n, 2))
    return np.column_stack([plane, rng.uniform(40.0, 60.0, n)])


def _names(rng: np.random.Generator, n: int) -> list[str]:
    """Distinct names in no particular order; no two look alike."""
    return [f"{chr(65 + i % 26)}{chr(97 + i // 26)}" for i in rng.permutation(n).tolist()]


def _clusters(rng: np.random.Generator, readings: Readings) -> list[tuple[Ints, Array]]:
    """Up to three covariance matrices of four readings each, with the standard deviations of the readings."""
    chosen = rng.permutation(len(readings))[: min(12, len(readings) // 4 * 4)].reshape(-1, 4)
    out = []
    for rows in chosen:
        factor = np.eye(4) + rng.uniform(-0.4, 0.4, (4, 4))
        full = factor @ factor.T
        d = readings.sd[rows] / np.sqrt(np.diagonal(full))
        out.append((np.sort(rows), (full * d[:, None] * d)[np.ix_(np.argsort(rows), np.argsort(rows))]))
    return out


def write_job(folder: Path, tables: Sequence[Table], *, free: bool = False, length: str = "m", angle: str = "deg",
              settings: str = "") -> Path:  # fmt: skip
    """Write job.toml and the tables; a table's own ``units`` win over ``length`` and ``angle``."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "job.toml").write_text(_job_text(tables, free, length, angle, settings), "utf-8")
    for table in tables:
        units = {"length": length, "angle": angle} | table.units
        (folder / table.file).write_text(_table_text(table, units), "utf-8")
    return folder


def _job_text(tables: Sequence[Table], free: bool, length: str, angle: str, settings: str) -> str:
    lines = ['title = "random"', settings, "[units]", f'length = "{length}"', f'angle = "{angle}"']
    if "[datum]" not in settings:
        lines += ["[datum]", 'kind = "free"' if free else 'kind = "control"']
    lines += [
        "[instruments.station]", f'distance = "{SD_DISTANCE * 1000!r} mm + {PPM * 1e6!r} ppm"',
        f'direction = "{SD_POINTING_SEC!r} sec"',
        "[instruments.gyro]", f'azimuth = "{SD_AZIMUTH_SEC!r} sec"',
        "[instruments.level-km]", f'levelling = "{SD_PER_ROOT_KM * 1000!r} mm*sqrt(km)"',
        "[instruments.level-setup]", f'levelling = "{SD_PER_ROOT_SETUP * 1000!r} mm*sqrt(setup)"',
    ]  # fmt: skip
    for table in tables:
        lines += ["[[book]]", f'file = "{table.file}"', f'kind = "{table.kind}"']
        lines += [f'instrument = "{table.instrument}"'] if table.instrument else []
        own = ", ".join(f'{key} = "{unit}"' for key, unit in table.units.items())
        lines += [f"units = {{ {own} }}"] if own else []
    return "\n".join(lines) + "\n"


def _table_text(table: Table, units: dict[str, str]) -> str:
    header = list(dict.fromkeys(name for row in table.rows for name in row))
    angular = table.kind in ("directions", "angles", "azimuths")
    lines = [",".join(header)]
    for row in table.rows:
        lines.append(",".join(cell(name, row.get(name, ""), units, angular) for name in header))
    return "\n".join(lines) + "\n"


def cell(name: str, value: object, units: dict[str, str], angular: bool = False) -> str:
    """A cell as text with all its digits; ``sd`` of an angular table in seconds, or milligon where angles are gon."""
    if not isinstance(value, float):
        return str(value)
    if name == "sd" and angular:
        return repr(value * SEC / (math.pi / 200000)) if units["angle"] == "gon" else repr(value)
    if name in _LENGTH_COLUMNS or name == "sd":
        return repr(value / LENGTHS[units["length"]])
    if name in _ANGLE_COLUMNS:
        return angle_text(value, units["angle"])
    return repr(value)


def angle_text(radians: float, notation: str) -> str:
    """An angle in a notation of the job; dms and packed carry eleven decimals of a second, 5e-17 rad."""
    if notation in ANGLES:
        return repr(radians / ANGLES[notation])
    units = round(radians * 648000 / math.pi * 10**11) % (1296000 * 10**11)
    minutes, rest = divmod(units, 60 * 10**11)
    seconds = f"{rest // 10**11:02d}.{rest % 10**11:011d}"
    d, m = divmod(minutes, 60)
    return f"{d} {m:02d} {seconds}" if notation == "dms" else f"{d}.{m:02d}{seconds.replace('.', '')}"


def renamed(made: Made, new: dict[str, str]) -> list[Table]:
    """The tables of a job with other station names."""

    def change(row: Row) -> Row:
        return {k: new[str(v)] if k in STATION_COLUMNS else v for k, v in row.items()}

    return [replace(t, rows=[change(row) for row in t.rows]) for t in made.tables]
