"""Random three-dimensional jobs, and the equations of them written once more, by trigonometry in the sphere.

Nothing of ``adjust`` is used here. A line with the distance D on the plane has the central angle theta = 2 asin(D/2R);
its slope follows from the cosine rule, its zenith angle from the sine and cosine rules in the same triangle, lengths at
ground level from the arc's chord at that height. The readings are invented: truth plus a normal error.
"""

from __future__ import annotations

import math
from collections.abc import Callable
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
MIXTURES = ("rich", "few slopes", "not levelled", "without zeniths", "ground")
CONTROL = ("held", "weighted", "free")


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
    given: Array
    """(n, 3) control as booked, where ``known`` or ``sd`` says so."""
    sd: Array
    """(n, 3) standard deviations of weighted control, 0 for none."""


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


def random_space(rng: np.random.Generator, free: bool = False, n: int = 0, control: str = "held",
                 mixture: str = "rich") -> Space:  # fmt: skip
    """Five to nine stations (or ``n``), 250 m apart within 300 m of height, read from nearly every station.

    Mixtures: "rich" has directions, zenith angles and slope distances to every target, some ground lengths and a
    levelled line through all; "few slopes" a slope distance to every fifth target, no ground lengths and every other
    time no levelling; "not levelled" is rich without it; "without zeniths" lacks the zenith angles of four set-ups in
    ten; "ground" has lengths at ground level in place of the slope distances.
    """
    n = n or int(rng.integers(5, 10))
    side = max(4, math.ceil(math.sqrt(1.6 * n)))
    cells = rng.permutation(side * side)[:n]
    plane = np.stack([cells % side, cells // side], axis=1) * 250.0 + rng.uniform(-70, 70, (n, 2)) + [4000, 7000]
    truth = np.column_stack([plane, rng.uniform(150, 450, n)])
    marks = np.zeros((n, 3), dtype=bool)
    if not free and control != "free":
        marks[rng.permutation(n)[: 3 if control == "weighted" else 2], :2] = True
        marks[rng.permutation(n)[: rng.integers(1, 3)], 2] = True
    start = np.where(marks, truth, truth + rng.uniform(-0.5, 0.5, truth.shape))
    true_k = float(rng.uniform(0.05, 0.25))
    rows, sets = _pattern(rng, n, mixture)
    kind, ends, above_all, _, group = arrays(rows)
    zero = rng.uniform(0, 2 * math.pi, sets)
    value = model(kind, ends, above_all, truth, true_k) - np.where(group >= 0, zero[group], 0.0)
    value = value + rng.normal(0, [SD[k] for k in kind])
    rows.value = np.where(kind == "direction", value % (2 * math.pi), value).tolist()
    k: tuple[float, float | None] = (0.13, 0.05) if rng.random() < 0.5 else (round(true_k, 3), None)
    weighted = marks & (control == "weighted")
    sd = np.where(weighted, rng.uniform(0.002, 0.005, truth.shape), 0.0) if weighted.any() else np.zeros(truth.shape)
    given = truth + rng.normal(0, 1, truth.shape) * sd if weighted.any() else truth
    return Space([f"P{i}" for i in range(n)], truth, start, marks & ~weighted, rows, sets, k, given, sd)


def _pattern(rng: np.random.Generator, n: int, mixture: str) -> tuple[Rows, int]:
    """The readings without values, and the number of sets."""
    rows, sets = Rows(), 0
    levelled = mixture != "not levelled" and not (mixture == "few slopes" and rng.random() < 0.5)
    for i in range(n):
        hi = round(float(rng.uniform(1.4, 1.7)), 3)
        zeniths = not (mixture == "without zeniths" and rng.random() < 0.4)
        for t, j in enumerate(rng.permutation([j for j in range(n) if j != i])[:4].tolist()):
            above = (hi, round(float(rng.uniform(1.3, 2.0)), 3))
            rows.put("direction", (i, j), above, 0.0, sets)
            if zeniths:
                rows.put("zenith_angle", (i, j), above, 0.0)
            if mixture == "ground":
                rows.put(str(rng.choice(["ground", "ground-from"])), (i, j), above, 0.0)
            elif mixture != "few slopes" or (i + t) % 5 == 0:
                rows.put("slope", (i, j), above, 0.0)
            if mixture not in ("ground", "few slopes") and rng.random() < 0.2:
                rows.put(str(rng.choice(["ground", "ground-from"])), (i, j), above, 0.0)
        if i and levelled:
            rows.put("levelled", (i - 1, i), (0.0, 0.0), 0.0)
        sets += 1
    return rows, sets


def arrays(rows: Rows) -> tuple[NDArray[np.str_], NDArray[np.int64], Array, Array, NDArray[np.int64]]:
    """The lists as arrays."""
    return (np.array(rows.kind), np.array(rows.ends), np.array(rows.above), np.array(rows.value),
            np.array(rows.group))  # fmt: skip


def reference(space: Space, datum: Array | None = None) -> tuple[Array, float, float]:
    """Positions (n, 3), k and v'Pv by scipy's least squares with numerical derivatives of the equations above.

    ``datum`` (n, 3): without control, positions from which the result is neither shifted nor turned nor raised.
    """
    found, unpack = _fit(space, datum)
    xyz, _, k = unpack(found.x)
    return xyz, k, 2 * float(found.cost)


def smallest(space: Space) -> float:
    """Smallest singular value of the scaled equations at the answer as a share of the largest."""
    jacobian = np.asarray(_fit(space, space.start if not (space.known.any() or space.sd.any()) else None)[0].jac)
    s = np.linalg.svd(jacobian / np.linalg.norm(jacobian, axis=0), compute_uv=False)
    return float(s[-1] / s[0])


def _fit(space: Space, datum: Array | None) -> tuple[Any, Callable[[Array], tuple[Array, Array, float]]]:
    kind, ends, above, value, group = arrays(space.rows)
    sd = np.array([SD[k] for k in kind])
    free, weighted = ~space.known, space.sd > 0
    count = int(free.sum())

    def unpack(x: Array) -> tuple[Array, Array, float]:
        xyz = space.start.copy()
        xyz[free] += x[:count] - 1.0
        return xyz, x[count : count + space.sets], x[-1] if space.k[1] else space.k[0]

    def residuals(x: Array) -> Array:
        xyz, zero, k = unpack(x)
        v = model(kind, ends, above, xyz, k) - np.where(group >= 0, np.append(zero, 0.0)[group], 0.0) - value
        v = np.where(kind == "direction", np.remainder(v + math.pi, 2 * math.pi) - math.pi, v) / sd
        v = np.concatenate([v, ((xyz - space.given)[weighted]) / space.sd[weighted]])
        if datum is not None:
            away, from_middle = xyz - datum, datum - datum.mean(axis=0)
            turned = away[:, 0] @ from_middle[:, 1] - away[:, 1] @ from_middle[:, 0]
            v = np.concatenate([v, [*away.sum(axis=0), turned / np.abs(from_middle).max()] / np.array(1e-3)])
        return np.append(v, (k - space.k[0]) / space.k[1]) if space.k[1] else v

    first = model(kind, ends, above, space.start, 0.13) - value
    zero = [first[np.flatnonzero(group == g)[0]] for g in range(space.sets)]
    x0 = np.concatenate([np.ones(count), zero, [space.k[0]] if space.k[1] else []])
    # coordinates are counted from 1, so that their steps are a millimetre: small against their lines, large against
    # the rounding of coordinates of some kilometres
    options: dict[str, Any] = {"jac": "3-point", "diff_step": 1e-3, "xtol": 1e-15, "ftol": 1e-15, "gtol": 1e-15}
    return least_squares(residuals, x0, method="lm", **options), unpack


def write(space: Space, folder: Path, head: str = "") -> Path:
    """The job as a folder, every number with all its digits."""
    folder.mkdir(parents=True, exist_ok=True)
    k, sd = space.k
    refraction = f"{k!r} +- {sd!r}" if sd else repr(k)
    text = f'{head}[units]\nlength = "m"\nangle = "deg"\n[frame]\nplane_height = {PLANE}\nrefraction = "{refraction}"\n'
    text += '[[book]]\nfile = "stations.csv"\n'
    if space.known.any() or space.sd.any():
        weighted = space.sd > 0
        if weighted.any():
            header = "station,role,east,north,height,sd_east,sd_north,sd_height"
            rows = [
                ",".join([name, "weighted", *(repr(float(x)) if s else "" for x, s in zip(at, sd, strict=True)),
                          *(repr(float(s)) if s else "" for s in sd)])
                for name, at, sd in zip(space.names, space.given, space.sd, strict=True) if sd.any()
            ]  # fmt: skip
            _table(folder, "control", header, rows)
        else:
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
