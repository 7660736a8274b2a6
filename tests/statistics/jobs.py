"""The networks of the calibration study: their truth, their readings without error, and errors drawn for these.

Truth and errors are the study's own. Readings follow from the coordinates by the equations below (in space by those of
tests.solver.space), and the vectors of centring are drawn as what they are: small movements of instrument and targets,
one a set-up and one a set-up and target. Only the job's folder and the errors reach the program.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import adjust
from adjust.book.job import Job
from adjust.network import Cluster
from tests.solver.space import PLANE, SEC
from tests.solver.space import model as model_in_space

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

SD = {"distance": 0.0015, "slope": 0.002, "direction": 2 * SEC, "angle": math.sqrt(2) * 2 * SEC, "azimuth": 4 * SEC,
      "zenith_angle": 3 * SEC}  # fmt: skip
"""Standard deviations of the instrument in metres and radians; an angle is two pointings."""
CENTRING, TARGET, HEIGHT = 0.0015, 0.001, 0.001
"""Standard deviations of the vectors, metres an axis."""
REFRACTION, REFRACTION_SD = 0.13, 0.05
TABLE = {"distance": "distances", "slope": "distances", "direction": "directions", "angle": "angles",
         "azimuth": "azimuths", "zenith_angle": "zenith_angles", "levelled": "levelled"}  # fmt: skip
COLUMNS = {"distance": ("from", "to", "distance"), "slope": ("from", "to", "distance"),
           "direction": ("at", "to", "direction"), "angle": ("at", "first", "second", "angle"),
           "azimuth": ("from", "to", "azimuth"), "zenith_angle": ("from", "to", "zenith_angle"),
           "levelled": ("from", "to", "rise")}  # fmt: skip
OCCUPIED = ("distance", "slope", "direction", "angle", "azimuth", "zenith_angle")
"""Kinds read by an instrument centred over its station."""
ANGULAR = ("direction", "angle", "azimuth", "zenith_angle")
STEP = 1e-3
"""Step of the differences that carry a vector into a reading, metres: the next term is 1e-9 of the first."""


@dataclass
class Sketch:
    """A network in the making: places (n, 3), what is known of them, and its readings by kind."""

    names: list[str]
    truth: Array
    rng: np.random.Generator
    centred: bool = False
    """Whether instrument and targets stand beside their marks; then the instrument's figures hold for every row."""
    readings: dict[str, list[tuple[int, ...]]] = field(default_factory=dict)
    sd: dict[str, list[float]] = field(default_factory=dict)
    control: list[tuple[int, str, str, float]] = field(default_factory=list)
    """Station, role, parts known ('e', 'n', 'h') and standard deviation (0: none)."""
    start_error: float = 0.0
    """By how much the reference coordinates are off, metres."""

    def put(self, kind: str, *ends: int) -> None:
        """Add a reading; without centring every one has a standard deviation of its own."""
        self.readings.setdefault(kind, []).append(ends)
        if kind == "levelled":
            length = math.dist(self.truth[ends[0], :2], self.truth[ends[1], :2])
            sd = 0.0012 * math.sqrt(length / 1000)
        else:
            sd = SD[kind] * (1.0 if self.centred else float(self.rng.uniform(0.7, 1.6)))
        self.sd.setdefault(kind, []).append(sd)

    def known(self, role: str, parts: str, *stations: int, sd: float = 0.0) -> None:
        """Make stations control marks."""
        self.control += [(i, role, parts, sd) for i in stations]

    def lines(self, reach: float) -> list[tuple[int, int]]:
        """Pairs of stations within reach."""
        n = len(self.names)
        plane = self.truth[:, :2]
        return [(i, j) for i in range(n) for j in range(i + 1, n) if math.dist(plane[i], plane[j]) < reach]


@dataclass(frozen=True)
class Clean:
    """A job whose readings have no error, and the law of their errors by scalar row (R,) in the program's order."""

    name: str
    job: Job
    sd: Array
    vectors: Array
    """(R, q) effect on the readings of a centring vector's components, each one standard deviation long."""
    clusters: tuple[tuple[Ints, Array], ...]
    """Rows (k,) and factor (k, k) of a given covariance, in place of their standard deviations."""

    def errors(self, rng: np.random.Generator, draws: int) -> Array:
        """Errors of the readings (draws, R), metres and radians."""
        out = rng.normal(size=(draws, len(self.sd))) * self.sd
        for rows, factor in self.clusters:
            out[:, rows] = rng.normal(size=(draws, len(rows))) @ factor.T
        return np.asarray(out + rng.normal(size=(draws, self.vectors.shape[1])) @ self.vectors.T)

    @property
    def covariance(self) -> Array:
        """(R, R) covariance of the errors."""
        full = np.diag(self.sd**2)
        for rows, factor in self.clusters:
            full[np.ix_(rows, rows)] = factor @ factor.T
        return np.asarray(full + self.vectors @ self.vectors.T)

    def with_errors(self, errors: Array) -> Job:
        """The job with errors (R,) in its readings."""
        network, blocks = self.job.network, []
        rows = network.rows
        for b, block in enumerate(network.blocks):
            here = rows.block == b
            values = block.values.copy()
            values[rows.row[here], rows.part[here]] += errors[here]
            blocks.append(replace(block, values=values))
        return replace(self.job, network=replace(network, blocks=tuple(blocks)))


def exact(kind: str, ends: Array, k: float = REFRACTION) -> Array:
    """Readings (m,) of one kind without orientation between places ``ends`` (m, e, 3)."""
    d = ends[:, 1:] - ends[:, :1]
    azimuth = np.arctan2(d[:, :, 0], d[:, :, 1])
    if kind == "levelled":
        return np.asarray(d[:, 0, 2])
    if kind == "distance":
        return np.asarray(np.hypot(d[:, 0, 0], d[:, 0, 1]))
    if kind == "angle":
        return np.asarray(azimuth[:, 1] - azimuth[:, 0])
    if kind in ("direction", "azimuth"):
        return np.asarray(azimuth[:, 0])
    m = len(ends)
    pairs = np.stack([np.arange(m), m + np.arange(m)], axis=1)
    return model_in_space(np.full(m, kind), pairs, np.zeros((m, 2)), np.concatenate([ends[:, 0], ends[:, 1]]), k)


def vectors_of(sketch: Sketch) -> dict[str, tuple[list[tuple[str, int, int]], Array]]:
    """Of each kind: (set-up, who) of its vectors and the readings' movements (m, vectors, 3) in standard deviations.

    A set-up is one table at one station; who is -1 for the instrument, else the target's station.
    """
    out = {}
    for kind, ends in sketch.readings.items():
        places = sketch.truth[np.array(ends)]
        keys = list(dict.fromkeys((kind, e[0], who) for e in ends for who in (-1, *e[1:])))
        effect = np.zeros((len(ends), len(keys), 3))
        size = np.array([[CENTRING if who < 0 else TARGET] * 2 + [HEIGHT] for _, _, who in keys])
        for slot in range(places.shape[1]):
            at = [keys.index((kind, e[0], -1 if slot == 0 else e[slot])) for e in ends]
            for part in range(3):
                moved = [places.copy(), places.copy()]
                moved[0][:, slot, part] += STEP
                moved[1][:, slot, part] -= STEP
                change = exact(kind, moved[0]) - exact(kind, moved[1])
                if kind in ANGULAR:
                    change = np.remainder(change + math.pi, 2 * math.pi) - math.pi
                effect[np.arange(len(ends)), at, part] += change / (2 * STEP)
        out[kind] = (keys, effect * size)
    return out


def clean(name: str, sketch: Sketch, folder: Path, correlated: bool = False) -> Clean:
    """Write the job, read it, and lay the law of the errors beside its rows; ``correlated``: with given covariances."""
    job = adjust.read(_write(name, sketch, folder))
    rows, network = job.network.rows, job.network
    kinds = {f"{kind}.csv": kind for kind in sketch.readings}
    control = [c for c in sketch.control if c[1] == "weighted"]
    moved = vectors_of(sketch) if sketch.centred else {}
    sd, columns = np.zeros(len(rows)), []
    for kind, (keys, effect) in moved.items():
        if kind in OCCUPIED:
            place = np.zeros((len(rows), len(keys), 3))
            for r in range(len(rows)):
                if kinds.get(network.blocks[rows.block[r]].file) == kind:
                    place[r] = effect[rows.row[r]]
            columns.append(place.reshape(len(rows), -1))
    for r in range(len(rows)):
        file, i = network.blocks[rows.block[r]].file, int(rows.row[r])
        sd[r] = (REFRACTION_SD if file == "job.toml" else control[i][3] if file == "control.csv"
                 else sketch.sd[kinds[file]][i])  # fmt: skip
    clusters = _clusters(sketch.rng, sd) if correlated else ()
    given = tuple(Cluster(at, factor @ factor.T) for at, factor in clusters)
    job = replace(job, network=replace(network, clusters=given))
    return Clean(name, job, sd, np.concatenate([np.zeros((len(rows), 0)), *columns], axis=1), clusters)


def _clusters(rng: np.random.Generator, sd: Array) -> tuple[tuple[Ints, Array], ...]:
    """Covariances of five readings each through half of all, with their standard deviations."""
    out = []
    for rows in rng.permutation(len(sd))[: len(sd) // 10 * 5].reshape(-1, 5):
        factor = np.eye(5) + rng.uniform(-0.6, 0.6, (5, 5))
        at = np.sort(rows)
        factor *= (sd[at] / np.sqrt((factor**2).sum(axis=1)))[:, None]
        # the lower factor of the same covariance, so that rows may be drawn in any order
        out.append((at, np.linalg.cholesky(factor @ factor.T)))
    return tuple(out)


def _write(name: str, sketch: Sketch, folder: Path) -> Path:
    folder.mkdir(parents=True, exist_ok=True)
    space = "zenith_angle" in sketch.readings
    toml = [f'title = "{name}: readings are invented"', "[units]", 'length = "m"', 'angle = "deg"', "[frame]",
            f"plane_height = {PLANE}", f'refraction = "{REFRACTION} +- {REFRACTION_SD}"' if space else "",
            "[instruments.i]", f'distance = "{SD["slope" if space else "distance"] * 1000!r} mm"',
            'direction = "2 sec"', 'azimuth = "4 sec"', 'zenith = "3 sec"']  # fmt: skip
    if sketch.centred:
        toml += [f'centring = "{CENTRING * 1000} mm"', f'target = "{TARGET * 1000} mm"']
        toml += [f'height = "{HEIGHT * 1000} mm"'] if space else []
    if not any(c[1] != "check" for c in sketch.control):
        toml += ["[datum]", 'kind = "free"']
    toml += _control(sketch, folder)
    plane, height = any(k != "levelled" for k in sketch.readings), space or "levelled" in sketch.readings
    off = sketch.rng.uniform(-sketch.start_error, sketch.start_error, sketch.truth.shape)
    held = {c[0] for c in sketch.control}
    rows = [
        (n, *(repr(float(x)) if p else "" for x, p in zip(xyz, (plane, plane, height), strict=True)))
        for i, (n, xyz) in enumerate(zip(sketch.names, sketch.truth + off, strict=True))
        if i not in held
    ]
    toml += _table(folder, "stations", "stations", ("station", "east", "north", "height"), rows)
    for kind, ends in sketch.readings.items():
        toml += _table(folder, kind, TABLE[kind], *_rows(sketch, kind, ends))
        toml += ['surface = "slope"'] if kind == "slope" else []
        toml += [] if kind == "levelled" else ['instrument = "i"']
    (folder / "job.toml").write_text("\n".join(toml) + "\n", "utf-8")
    return folder


def _control(sketch: Sketch, folder: Path) -> list[str]:
    rows = []
    for i, role, parts, sd in sketch.control:
        values = [repr(float(x)) if p in parts else "" for p, x in zip("enh", sketch.truth[i], strict=True)]
        rows.append((sketch.names[i], role, *values, *(repr(sd) if v and sd else "" for v in values)))
    head = ("station", "role", "east", "north", "height", "sd_east", "sd_north", "sd_height")
    return _table(folder, "control", "control", head, rows) if rows else []


def _rows(sketch: Sketch, kind: str, ends: list[tuple[int, ...]]) -> tuple[tuple[str, ...], list[tuple[str, ...]]]:
    """Header and rows of a kind's table; a set-up's circle has any zero."""
    value = exact(kind, sketch.truth[np.array(ends)])
    if kind == "direction":
        zero = sketch.rng.uniform(0, 2 * math.pi, len(sketch.names))
        value = value - zero[[e[0] for e in ends]]
    own = kind == "levelled" or not sketch.centred
    unit = SEC if kind in ANGULAR else 1.0
    cells = np.degrees(value) % 360 if kind in ANGULAR else value
    rows = [
        (*(sketch.names[j] for j in e), repr(float(x)), *([repr(sd / unit)] if own else []))
        for e, x, sd in zip(ends, cells, sketch.sd[kind], strict=True)
    ]
    return (*COLUMNS[kind], *(["sd"] if own else [])), rows


def _table(folder: Path, file: str, kind: str, head: tuple[str, ...], rows: list[tuple[str, ...]]) -> list[str]:
    lines = [",".join(head), *(",".join(row) for row in rows)]
    (folder / f"{file}.csv").write_text("\n".join(lines) + "\n", "utf-8")
    return ["[[book]]", f'file = "{file}.csv"', f'kind = "{kind}"']


def _grid(seed: int, columns: int, rows: int, spacing: float, **more: float | bool) -> Sketch:
    """Stations on a jittered grid at 120 to 280 m of height."""
    rng = np.random.default_rng(seed)
    cells = np.array([(i % columns, i // columns) for i in range(columns * rows)], dtype=float)
    plane = cells * spacing + rng.uniform(-spacing / 5, spacing / 5, cells.shape) + [1000, 2000]
    truth = np.column_stack([plane, PLANE + rng.uniform(-80, 80, len(plane))])
    return Sketch([f"P{i}" for i in range(len(plane))], truth, rng, **more)  # type: ignore[arg-type]  # its own fields


def _levels(sketch: Sketch, spacing: float) -> None:
    for line in sketch.lines(1.5 * spacing):
        sketch.put("levelled", *line)


def _braced(sketch: Sketch, spacing: float) -> None:
    """A pointing each way along every line, every length once, and an angle at every other station."""
    lines = sketch.lines(1.6 * spacing)
    for i in range(len(sketch.names)):
        near = [b if a == i else a for a, b in lines if i in (a, b)]
        for j in near:
            sketch.put("direction", i, j)
        if i % 2 == 0:
            sketch.put("angle", i, near[0], near[-1])
    for line in lines:
        sketch.put("distance", *line)


def _in_space(sketch: Sketch, spacing: float) -> None:
    """Pointing, zenith angle and slope each way along every line, and a few levelled lines."""
    for a, b in sketch.lines(1.6 * spacing):
        for i, j in ((a, b), (b, a)):
            for kind in ("direction", "zenith_angle", "slope"):
                sketch.put(kind, i, j)
    for i in range(0, len(sketch.names) - 1, 2):
        sketch.put("levelled", i, i + 1)


def levels(control: str) -> Sketch:
    """Nine points of height and the lines between them."""
    sketch = _grid(1, 3, 3, 300.0)
    _levels(sketch, 300.0)
    if control != "free":
        sketch.known(control, "h", 0, 4, 8, sd=0.0006 if control == "weighted" else 0.0)
    return sketch


def plane(control: str, centred: bool = False, rough: float = 0.0) -> Sketch:
    """Nine points in the plane: pointings, lengths, angles; ``rough``: error of the reference of a free one."""
    spacing = 60.0 if centred else 120.0
    sketch = _grid(2, 3, 3, spacing, centred=centred, start_error=rough)
    _braced(sketch, spacing)
    if control != "free":
        sketch.known(control, "en", 0, 2, 6, 8, sd=0.002 if control == "weighted" else 0.0)
    return sketch


def two_parts() -> Sketch:
    """Plane and heights that no reading ties together, with a check mark in each."""
    sketch = _grid(3, 3, 2, 150.0)
    _braced(sketch, 150.0)
    _levels(sketch, 150.0)
    sketch.known("held", "en", 0, 2)
    sketch.known("held", "h", 3)
    sketch.known("check", "enh", 5)
    return sketch


def few_spare() -> Sketch:
    """A quadrilateral on two marks with seven readings to spare."""
    sketch = _grid(4, 2, 2, 150.0)
    for line in sketch.lines(400.0):
        sketch.put("distance", *line)
    for at, first, second in ((0, 1, 2), (1, 3, 0), (2, 0, 3), (3, 2, 1), (0, 3, 2)):
        sketch.put("angle", at, first, second)
    sketch.known("held", "en", 0, 1)
    return sketch


def hinged() -> Sketch:
    """Two new points, each tied to marks of its own and one common mark: without control the two halves flex."""
    sketch = _grid(5, 4, 2, 150.0)
    for at, marks in ((1, (0, 4, 5, 6)), (2, (3, 7, 6))):
        for to in marks:
            sketch.put("direction", at, to)
            sketch.put("distance", at, to)
    sketch.known("held", "en", 0, 3, 4, 5, 6, 7)
    return sketch


def space(control: str, centred: bool = False) -> Sketch:
    """Six points in space with refraction as an unknown."""
    sketch = _grid(6, 3, 2, 220.0, centred=centred)
    _in_space(sketch, 220.0)
    if control != "free":
        sketch.known(control, "enh", 0, 2, 4)
    return sketch


NETWORKS: dict[str, tuple[Callable[[], Sketch], bool]] = {
    "levels, held": (lambda: levels("held"), False),
    "levels, free": (lambda: levels("free"), False),
    "levels, weighted": (lambda: levels("weighted"), False),
    "plane, held": (lambda: plane("held"), False),
    "plane, free, reference 0.3 m off": (lambda: plane("free", rough=0.3), False),
    "plane, weighted": (lambda: plane("weighted"), False),
    "plane, held, centring": (lambda: plane("held", centred=True), False),
    "plane, free, centring": (lambda: plane("free", centred=True), False),
    "plane, weighted, centring": (lambda: plane("weighted", centred=True), False),
    "plane, held, given covariances": (lambda: plane("held"), True),
    "plane and heights apart, check marks": (two_parts, False),
    "quadrilateral, few to spare": (few_spare, False),
    "two halves on one common mark": (hinged, False),
    "space, held, centring": (lambda: space("held", centred=True), False),
    "space, free": (lambda: space("free"), False),
}
"""Every network of the study: how it is sketched, and whether half of its readings have given covariances."""


def network(name: str, folder: Path) -> Clean:
    """The network of this name, written into a folder of its own."""
    sketch, correlated = NETWORKS[name]
    return clean(name, sketch(), folder / name.replace(", ", "-").replace(" ", "-"), correlated)
