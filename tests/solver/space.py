"""Random three-dimensional jobs, and the equations of them written once more, by trigonometry in the sphere.

Nothing of ``adjust`` is used here. A line with the distance D on the plane has the central angle theta = 2 asin(D/2R);
its slope follows from the cosine rule, its zenith angle from the sine and cosine rules in the same triangle, lengths at
ground level from the arc's chord at that height. The readings are invented: truth plus a normal error.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import least_squares

Array = NDArray[np.float64]
R = 6371008.8
SEC = math.pi / 648000
SD = {"direction": 2 * SEC, "zenith_angle": 3 * SEC, "slope": 0.002, "ground": 0.002, "ground-from": 0.002,
      "levelled": 0.0015}  # fmt: skip
PLANE = 200.0


@dataclass
class Rows:
    """Readings as growing lists: kind, ends, heights above the marks, value, group (set)."""

    kind: list[str] = field(default_factory=list)
    ends: list[tuple[int, int]] = field(default_factory=list)
    above: list[tuple[float, float]] = field(default_factory=list)
    value: list[float] = field(default_factory=list)
    group: list[int] = field(default_factory=list)

    def put(self, kind: str, ends: tuple[int, int], above: tuple[float, float], value: float, group: int = -1) -> None:
        """Add one."""
        for column, one in zip((self.kind, self.ends, self.above, self.value, self.group),
                               (kind, ends, above, value, group), strict=True):  # fmt: skip
            column.append(one)  # type: ignore[arg-type]  # one list a column


@dataclass
class Space:
    """A job: true and starting positions (n, 3), known coordinates (n, 3), readings, and k given with its sd."""

    names: list[str]
    truth: Array
    start: Array
    known: NDArray[np.bool_]
    rows: Rows
    sets: int
    k: tuple[float, float | None]


def model(kind: NDArray[np.str_], ends: NDArray[np.int64], above: Array, xyz: Array, k: float) -> Array:
    """Readings (R,) without orientations at positions (n, 3)."""
    a, b = xyz[ends[:, 0]], xyz[ends[:, 1]]
    east, north = (b - a)[:, 0], (b - a)[:, 1]
    theta = 2 * np.arcsin(np.hypot(east, north) / (2 * R))
    r1, r2 = R + a[:, 2] + above[:, 0] - PLANE, R + b[:, 2] + above[:, 1] - PLANE
    slope = np.sqrt((r2 - r1) ** 2 + 4 * r1 * r2 * np.sin(theta / 2) ** 2)
    # the angle at the instrument by the tangent formula for two sides and their angle; 1 - cos without cancellation
    nadir = np.arctan2(r2 * np.sin(theta), (r1 - r2) + 2 * r2 * np.sin(theta / 2) ** 2)
    return np.select(
        [kind == "direction", kind == "zenith_angle", kind == "slope", kind == "ground", kind == "ground-from"],
        [np.arctan2(east, north), math.pi - nadir - k * theta / 2, slope, (r1 + r2) * np.sin(theta / 2),
         2 * r1 * np.sin(theta / 2)],
        (b - a)[:, 2],
    )  # fmt: skip


def random_space(rng: np.random.Generator, free: bool = False, n: int = 0) -> Space:
    """Five to nine stations (or ``n``), 250 m apart within 300 m of height, read from nearly every station."""
    n = n or int(rng.integers(5, 10))
    side = max(4, math.ceil(math.sqrt(1.6 * n)))
    cells = rng.permutation(side * side)[:n]
    plane = np.stack([cells % side, cells // side], axis=1) * 250.0 + rng.uniform(-70, 70, (n, 2)) + [4000, 7000]
    truth = np.column_stack([plane, rng.uniform(150, 450, n)])
    known = np.zeros((n, 3), dtype=bool)
    if not free:
        known[rng.permutation(n)[:2], :2] = True
        known[rng.permutation(n)[: rng.integers(1, 3)], 2] = True
    start = np.where(known, truth, truth + rng.uniform(-0.5, 0.5, truth.shape))
    true_k = float(rng.uniform(0.05, 0.25))
    rows, sets = Rows(), 0
    for i in range(n):
        hi = round(float(rng.uniform(1.4, 1.7)), 3)
        for j in rng.permutation([j for j in range(n) if j != i])[:4].tolist():
            above = (hi, round(float(rng.uniform(1.3, 2.0)), 3))
            for kind in ("direction", "zenith_angle", "slope"):
                rows.put(kind, (i, j), above, 0.0, sets if kind == "direction" else -1)
            if rng.random() < 0.2:
                rows.put(str(rng.choice(["ground", "ground-from"])), (i, j), above, 0.0)
        if i:
            rows.put("levelled", (i - 1, i), (0.0, 0.0), 0.0)
        sets += 1
    kind, ends, above_all, _, group = arrays(rows)
    zero = rng.uniform(0, 2 * math.pi, sets)
    value = model(kind, ends, above_all, truth, true_k) - np.where(group >= 0, zero[group], 0.0)
    value = value + rng.normal(0, [SD[k] for k in kind])
    rows.value = np.where(kind == "direction", value % (2 * math.pi), value).tolist()
    return Space([f"P{i}" for i in range(n)], truth, start, known, rows, sets,
                 (0.13, 0.05) if rng.random() < 0.5 else (round(true_k, 3), None))  # fmt: skip


def arrays(rows: Rows) -> tuple[NDArray[np.str_], NDArray[np.int64], Array, Array, NDArray[np.int64]]:
    """The lists as arrays."""
    return (np.array(rows.kind), np.array(rows.ends), np.array(rows.above), np.array(rows.value),
            np.array(rows.group))  # fmt: skip


def reference(space: Space) -> tuple[Array, float, float]:
    """Positions (n, 3), k and v'Pv by scipy's least squares with numerical derivatives of the equations above."""
    kind, ends, above, value, group = arrays(space.rows)
    sd = np.array([SD[k] for k in kind])
    free = ~space.known
    count = int(free.sum())

    def unpack(x: Array) -> tuple[Array, Array, float]:
        xyz = space.start.copy()
        xyz[free] += x[:count] - 1.0
        return xyz, x[count : count + space.sets], x[-1] if space.k[1] else space.k[0]

    def residuals(x: Array) -> Array:
        xyz, zero, k = unpack(x)
        v = model(kind, ends, above, xyz, k) - np.where(group >= 0, np.append(zero, 0.0)[group], 0.0) - value
        v = np.where(kind == "direction", np.remainder(v + math.pi, 2 * math.pi) - math.pi, v) / sd
        return np.append(v, (k - space.k[0]) / space.k[1]) if space.k[1] else v

    first = model(kind, ends, above, space.start, 0.13) - value
    zero = [first[np.flatnonzero(group == g)[0]] for g in range(space.sets)]
    x0 = np.concatenate([np.ones(count), zero, [space.k[0]]])
    # coordinates are counted from 1, so that their steps are a millimetre: small against their lines, large against
    # the rounding of coordinates of some kilometres
    options: dict[str, Any] = {"jac": "3-point", "diff_step": 1e-3, "xtol": 1e-15, "ftol": 1e-15, "gtol": 1e-15}
    found = least_squares(residuals, x0, method="lm", **options)
    xyz, _, k = unpack(found.x)
    return xyz, k, 2 * float(found.cost)


def write(space: Space, folder: Path, head: str = "") -> Path:
    """The job as a folder, every number with all its digits."""
    folder.mkdir(parents=True, exist_ok=True)
    k, sd = space.k
    refraction = f"{k!r} +- {sd!r}" if sd else repr(k)
    text = f'{head}[units]\nlength = "m"\nangle = "deg"\n[frame]\nplane_height = {PLANE}\nrefraction = "{refraction}"\n'
    text += '[[book]]\nfile = "stations.csv"\n'
    if space.known.any():
        _table(folder, "control", "station,east,north,height", _marks(space, space.known, space.truth))
        text += '[[book]]\nfile = "control.csv"\n'
    _table(folder, "stations", "station,east,north,height", _marks(space, np.ones_like(space.known), space.start))
    for name in ("direction", "zenith_angle", "slope", "ground", "ground-from", "levelled"):
        rows = _readings(space, name)
        if not rows:
            continue
        columns = {"direction": "at,to,direction,set,sd", "levelled": "from,to,rise,sd"}.get(
            name,
            f"from,to,{'zenith_angle' if name == 'zenith_angle' else 'distance'},sd,instrument_height,target_height",
        )
        _table(folder, name, columns, rows)
        table = {"direction": "directions", "zenith_angle": "zenith_angles", "levelled": "levelled"}.get(
            name, "distances"
        )
        text += f'[[book]]\nfile = "{name}.csv"\nkind = "{table}"\n'
        text += f'surface = "{name}"\n' if table == "distances" else ""
    (folder / "job.toml").write_text(text, "utf-8")
    return folder


def _marks(space: Space, which: NDArray[np.bool_], xyz: Array) -> list[str]:
    return [
        ",".join([name, *(repr(float(x)) if w else "" for x, w in zip(row, use, strict=True))])
        for name, row, use in zip(space.names, xyz, which, strict=True)
        if use.any()
    ]


def _readings(space: Space, name: str) -> list[str]:
    out = []
    for kind, (i, j), (hi, ht), value, group in zip(
        space.rows.kind, space.rows.ends, space.rows.above, space.rows.value, space.rows.group, strict=True
    ):
        if kind == name:
            angular = kind in ("direction", "zenith_angle")
            number, sd = (math.degrees(value), SD[kind] / SEC) if angular else (value, SD[kind])
            cells = [
                space.names[i],
                space.names[j],
                repr(number),
                *([str(group)] if kind == "direction" else []),
                repr(sd),
            ]
            out.append(",".join(cells + ([repr(hi), repr(ht)] if kind not in ("direction", "levelled") else [])))
    return out


def _table(folder: Path, name: str, header: str, rows: list[str]) -> None:
    (folder / f"{name}.csv").write_text("\n".join([header, *rows]) + "\n", "utf-8")
