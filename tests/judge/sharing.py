"""Small jobs in space whose readings share an effect of known size; all figures are invented.

Nine stations on a jittered grid, three of them held in the plane and in height. Two instruments (station-3 and
station-5) measured slopes to two reflectors (round and small) and zenith angles on two days, two levels ran lines of
their own through all stations, and a gyro gave azimuths. Equations and truth are those of tests.solver.space; an effect
is put into the readings themselves, in the words of its definition: so many metres, ppm, seconds too much.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

import adjust
from adjust.judge.assess import Judgement
from tests.solver.space import PLANE, SEC, Array, R, model

SD = {"slope": 0.002, "zenith_angle": 3 * SEC, "direction": 2 * SEC, "levelled": 0.001, "azimuth": 4 * SEC}
TABLE = {"slope": "distances", "zenith_angle": "zenith_angles", "direction": "directions", "levelled": "levelled",
         "azimuth": "azimuths"}  # fmt: skip
COLUMN = {"slope": "distance", "zenith_angle": "zenith_angle", "direction": "direction", "levelled": "rise",
          "azimuth": "azimuth"}  # fmt: skip
ANGULAR = ("zenith_angle", "direction", "azimuth")
DAYS = ("2026-05-14", "2026-05-15")
K = 0.13


@dataclass
class Reading:
    """One reading as it will be booked."""

    kind: str
    ends: tuple[int, int]
    value: float
    labels: dict[str, str] = field(default_factory=dict)


Wrong = Callable[[Reading, float], float]
"""What an effect adds to a reading: (reading, horizontal distance in metres) to metres or radians."""


def shared(kind: str, size: float, of: str, **labels: str) -> Wrong:
    """An error ``size`` times a unit column in the readings of a kind with these labels.

    ``of``: 'one' (metres or radians), 'reading' (size is a ratio), 'refraction' (size is added to k).
    """

    def wrong(r: Reading, d: float) -> float:
        if r.kind != kind or any(r.labels.get(key) != name for key, name in labels.items()):
            return 0.0
        return size * {"one": 1.0, "reading": r.value, "refraction": -math.asin(d / (2 * R))}[of]

    return wrong


EFFECTS: dict[str, tuple[tuple[str, str], str, str, dict[str, str]]] = {
    "constant of a reflector": (("constant", "reflector round"), "slope", "one", {"reflector": "round"}),
    "constant of an instrument": (("constant", "station-3"), "slope", "one", {"instrument": "station-3"}),
    "scale of an instrument": (("scale", "station-3"), "slope", "reading", {"instrument": "station-3"}),
    "scale of a day": (("scale", f"station-3 on {DAYS[1]}"), "slope", "reading",
                       {"instrument": "station-3", "day": DAYS[1]}),
    "refraction": (("refraction", "the whole job"), "zenith_angle", "refraction", {}),
    "refraction of a day": (("refraction", DAYS[0]), "zenith_angle", "refraction", {"day": DAYS[0]}),
    "index error": (("zenith index", "station-3"), "zenith_angle", "one", {"instrument": "station-3"}),
    "index error of a day": (("zenith index", f"station-5 on {DAYS[0]}"), "zenith_angle", "one",
                             {"instrument": "station-5", "day": DAYS[0]}),
    "staff scale": (("staff scale", "level-1"), "levelled", "reading", {"instrument": "level-1"}),
    "orientation of azimuths": (("orientation", "azimuth.csv"), "azimuth", "one", {}),
}  # fmt: skip
"""Of each planted effect: (what, of) as the program calls it, kind of the readings, column, labels."""


def planted(effect: str, size: float) -> Wrong:
    """One of ``EFFECTS`` with a size in metres, radians, as a ratio, or in k."""
    _, kind, of, labels = EFFECTS[effect]
    return shared(kind, size, of, **labels)


def places(rng: np.random.Generator) -> Array:
    """(9, 3) stations 600 m apart at 100 to 300 m of height."""
    grid = np.array([(i % 3, i // 3) for i in range(9)], dtype=float) * 600.0
    return np.column_stack([grid + rng.uniform(-120, 120, (9, 2)) + [2000, 5000], PLANE + rng.uniform(-100, 100, 9)])


def readings(rng: np.random.Generator, truth: Array) -> list[Reading]:
    """All readings of a job without errors; what was used when is drawn, and turns about."""
    out = []
    for i in range(9):
        near = [j for j in range(9) if j != i and math.dist(truth[i, :2], truth[j, :2]) < 1400]
        for j in near:
            labels = {"instrument": f"station-{rng.choice([3, 5])}", "day": str(rng.choice(DAYS))}
            prism = {"reflector": str(rng.choice(["round", "small"]))}
            out.append(Reading("slope", (i, j), 0.0, labels | prism))
            out.append(Reading("zenith_angle", (i, j), 0.0, labels))
            out.append(Reading("direction", (i, j), 0.0))
            if i < j:
                out.append(Reading("levelled", (i, j), 0.0, {"instrument": f"level-{rng.choice([1, 2])}"}))
                if rng.random() < 0.5:
                    out.append(Reading("azimuth", (i, j), 0.0))
    ends = np.array([r.ends for r in out])
    kinds = np.array(["direction" if r.kind == "azimuth" else r.kind for r in out])
    values = model(kinds, ends, np.zeros((len(out), 2)), truth, K)
    zero = rng.uniform(0, 2 * math.pi, 9)
    for r, value in zip(out, values.tolist(), strict=True):
        r.value = value - (zero[r.ends[0]] if r.kind == "direction" else 0.0)
    return out


def booked(seed: int) -> list[Reading]:
    """The readings of a job without errors, in the order of their numbers."""
    rng = np.random.default_rng([20261214, seed])
    return readings(rng, places(rng))


def job(folder: Path, seed: int, *wrong: Wrong, noise: float = 1.0, blunders: dict[int, float] | None = None,
        known: int = 3, head: str = "", applied: str = "", without: tuple[str, ...] = ()) -> Path:  # fmt: skip
    """Write a job; ``wrong`` are its effects, ``blunders`` errors of single readings by their number, ``known`` the
    number of held marks, ``head`` more of job.toml, ``applied`` more of the block of the slopes."""
    rng = np.random.default_rng([20261214, seed])
    print(f"seed [20261214, {seed}]")
    truth = places(rng)
    found = readings(rng, truth)
    errors = rng.normal(0, 1, len(found)) * noise
    for n, (r, e) in enumerate(zip(found, errors.tolist(), strict=True)):
        d = math.dist(truth[r.ends[0], :2], truth[r.ends[1], :2])
        r.value += sum(w(r, d) for w in wrong) + e * SD[r.kind] + (blunders or {}).get(n, 0.0)
    return write(folder, truth, [r for r in found if r.kind not in without], known, head, applied)


def write(folder: Path, truth: Array, found: list[Reading], known: int, head: str, applied: str) -> Path:
    """The tables and job.toml."""
    folder.mkdir(parents=True, exist_ok=True)
    text = ['title = "Readings are invented"', "[units]", 'length = "m"', 'angle = "deg"', "[frame]",
            f"plane_height = {PLANE}", f'refraction = "{K}"', head]  # fmt: skip
    marks = [0, 4, 8][:known]
    for name, rows in (("control", marks), ("stations", [i for i in range(9) if i not in marks])):
        if rows:
            lines = [f"P{i}," + ",".join(repr(float(x)) for x in truth[i]) for i in rows]
            (folder / f"{name}.csv").write_text("\n".join(["station,east,north,height", *lines]) + "\n", "utf-8")
            text += ["[[book]]", f'file = "{name}.csv"']
    for kind in dict.fromkeys(r.kind for r in found):
        own = [r for r in found if r.kind == kind]
        keys = [key for key in ("instrument", "reflector", "day") if any(r.labels.get(key) for r in own)]
        names = ["at" if kind == "direction" else "from", "to", COLUMN[kind], "sd", *keys]
        lines = [",".join(names)]
        for r in own:
            value = math.degrees(r.value) % 360 if kind in ANGULAR else r.value
            sd = SD[kind] / SEC if kind in ANGULAR else SD[kind]
            lines.append(",".join([f"P{r.ends[0]}", f"P{r.ends[1]}", repr(value), repr(sd),
                                   *(r.labels.get(key, "") for key in keys)]))  # fmt: skip
        (folder / f"{kind}.csv").write_text("\n".join(lines) + "\n", "utf-8")
        text += ["[[book]]", f'file = "{kind}.csv"', f'kind = "{TABLE[kind]}"']
        text += ['surface = "slope"', applied] if kind == "slope" else []
    text += ["[reflectors.round]", 'constant = "0 mm"', "[reflectors.small]", 'constant = "0 mm"'] if (
        "reflectors" not in head) else []  # fmt: skip
    text += [f'[instruments.{i}]\ndistance = "2 mm"\nzenith = "3 sec"' for i in ("station-3", "station-5")]
    text += [f'[instruments.{i}]\nlevelling = "1 mm*sqrt(km)"' for i in ("level-1", "level-2")]
    (folder / "job.toml").write_text("\n".join(text) + "\n", "utf-8")
    return folder


def judged(folder: Path) -> Judgement:
    """The job adjusted and judged."""
    return adjust.assess(adjust.solve(adjust.read(folder)))
