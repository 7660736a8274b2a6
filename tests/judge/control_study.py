"""How often the right mark is named, and how often none is on clean control: adjustments of random networks.

    PYTHONPATH=. OPENBLAS_NUM_THREADS=1 python -m tests.judge.control_study [COUNT] [WHAT ...]

draws COUNT (480) networks for each of WHAT (clean, one, two, scale, drawn; default all): 8 to 40 stations on a grid,
along a road, around a ring or strewn about, tied to their nearest by distances and directions, some with levelling; 4
to 8 of them marks, held or weighted. One mark or two are then moved by MOVED standard deviations of their own misfit,
plane ones in a random direction in the metric of their covariance, or all distances get a scale. Every case is
adjusted and judged as ``brasscap adjust`` does; `drawn` draws the shifts themselves, 20 times a network.
"""

from __future__ import annotations

import math
import sys
import tempfile
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

import adjust
from adjust.errors import BrasscapError
from adjust.judge import consistent, control
from adjust.judge.control_words import SCALE, unit_name
from adjust.judge.held_marks import judge_held_marks
from adjust.judge.shifts import Shifts, parts_of
from tests.networks import SEC, Array, Row, Table, write_job

SHAPES = ("grid", "road", "ring", "strewn")
MOVED = 5.0
SD_M, PPM, SD_SEC, SD_KM = 0.0015, 2e-6, 2.0, 0.0012
SEED = 20
SCALES = {1 - 2e-6: "foot-and-us-foot", 1 + 80e-6: "ground-and-grid", 1 - 80e-6: "ground-and-grid",
          0.3048: "feet-and-metres", 1 / 0.3048: "feet-and-metres"}  # fmt: skip
"""Measured lengths by true ones, and what that is to be recognised as."""
DEFAULT = ["clean", "one", "two", "scale", "drawn"]


@dataclass(frozen=True)
class Net:
    """A network with its readings drawn: places (n, 3), lines, marks with what they are known by."""

    name: str
    truth: Array
    lines: list[tuple[int, int]]
    marks: list[int]
    weighted: bool
    levelled: bool
    known: Array
    """(n, 3)."""
    sd: Array
    noise: tuple[Array, Array, Array]
    """Standard normal draws for distances, directions both ways and rises, (lines,) (2 lines,) (lines,)."""
    scale: float = 1.0
    ppm: float = PPM

    def write(self, folder: Path) -> adjust.Job:
        """The job, read again."""
        names = [f"S{i}" for i in range(len(self.truth))]
        control: list[Row] = []
        for i in self.marks:
            row: Row = {"station": names[i], "role": "weighted" if self.weighted else "held"}
            for part, p in enumerate(["east", "north", "height"][: 3 if self.levelled else 2]):
                row |= {p: float(self.known[i, part])} | ({f"sd_{p}": float(self.sd[i, part])} if self.weighted else {})
            control.append(row)
        tables = [Table("control.csv", "control", control), *self._readings(names)]
        return adjust.read(write_job(folder, tables))

    def _readings(self, names: list[str]) -> Iterator[Table]:
        distances: list[Row] = []
        directions: list[Row] = []
        rises: list[Row] = []
        for k, (i, j) in enumerate(self.lines):
            d = math.dist(self.truth[i, :2], self.truth[j, :2])
            sd = SD_M + self.ppm * d
            ends: Row = {"from": names[i], "to": names[j]}
            distances.append(ends | {"distance": float(d * self.scale + sd * self.noise[0][k]), "sd": sd})
            rise_sd = SD_KM * math.sqrt(d / 1000)
            rise = self.truth[j, 2] - self.truth[i, 2] + rise_sd * self.noise[2][k]
            rises.append(ends | {"rise": float(rise), "sd": rise_sd})
            for at, to, e in ((i, j, self.noise[1][2 * k]), (j, i, self.noise[1][2 * k + 1])):
                way = self.truth[to] - self.truth[at]
                reading = (math.atan2(way[0], way[1]) + SD_SEC * SEC * e) % (2 * math.pi)
                directions.append({"at": names[at], "to": names[to], "direction": float(reading), "sd": SD_SEC})
        yield Table("distances.csv", "distances", distances)
        yield Table("directions.csv", "directions", sorted(directions, key=lambda r: str(r["at"])))
        if self.levelled:
            yield Table("levelled.csv", "levelled", rises)


def places(rng: np.random.Generator, shape: str, n: int) -> Array:
    """(n, 2) places some 120 m apart."""
    if shape == "road":
        return np.column_stack([np.arange(n) // 2 * 110.0, np.arange(n) % 2 * 90.0]) + rng.uniform(-20, 20, (n, 2))
    if shape == "ring":
        turn, radius = 2 * np.pi * np.arange(n) / n, 90.0 * n / (2 * np.pi)
        return np.column_stack([np.sin(turn), np.cos(turn)]) * radius + rng.uniform(-15, 15, (n, 2))
    side = math.ceil(math.sqrt(n))
    grid = np.array([(i % side, i // side) for i in range(n)]) * 120.0
    return grid + rng.uniform(-30, 30, (n, 2)) if shape == "grid" else grid + rng.uniform(-55, 55, (n, 2))


def network(rng: np.random.Generator, size: float = 1.0) -> Net:
    """A random network with clean control."""
    shape = str(rng.choice(SHAPES))
    n = int(rng.integers(8, 41))
    plane = places(rng, shape, n) * size + [3000.0, 5000.0]
    truth = np.column_stack([plane, rng.uniform(40, 60, n)])
    east, north = truth[:, None, 0] - truth[:, 0], truth[:, None, 1] - truth[:, 1]
    d = np.hypot(east, north)
    nearest = np.argsort(d, axis=1)[:, 1:5]
    lines = sorted({(min(i, j), max(i, j)) for i in range(n) for j in nearest[i].tolist()}
                   | {(i, i + 1) for i in range(n - 1) if shape in ("ring", "road")})  # fmt: skip
    marks = sorted(rng.choice(n, int(rng.integers(4, 9)), replace=False).tolist())
    weighted, levelled = bool(rng.random() < 0.4), bool(rng.random() < 0.4)
    sd = rng.uniform(0.001, 0.003, (n, 3))
    known = truth + (rng.normal(0, sd) if weighted else 0.0)
    noise = tuple(rng.standard_normal(len(lines) * k) for k in (1, 2, 1))
    return Net(shape, truth, lines, marks, weighted, levelled, known, sd, noise)  # type: ignore[arg-type]  # of three


def moved(net: Net, solution: adjust.Solution, rng: np.random.Generator, count: int) -> tuple[Net, list[str]] | None:
    """The network with ``count`` units moved by MOVED of their own misfit, and their names; None where none can be."""
    marks = judge_held_marks(solution)
    units = [(s, u) for s in parts_of(marks) for u in range(len(s.units)) if s.shift(u, s.basis(()))]
    if len(units) < count:
        return None
    known, names = net.known.copy(), []
    for k in rng.choice(len(units), count, replace=False).tolist():
        shifts, unit = units[k]
        told = shifts.shift(unit, shifts.basis(()))
        assert told is not None
        u = rng.standard_normal(len(told[0]))
        b = MOVED * np.linalg.cholesky(told[1]) @ (u / np.linalg.norm(u))
        where = shifts.units[unit]
        name = solution.names[marks.station[where[0]]]
        known[int(name[1:]), marks.part[where]] += b
        names.append(unit_name(solution, marks, shifts, unit))
    return replace(net, known=known), names


def judged(net: Net) -> adjust.Judgement:
    """As adjusted and judged."""
    with tempfile.TemporaryDirectory() as folder:
        return adjust.assess(adjust.solve(net.write(Path(folder))))


def outcome(judgement: adjust.Judgement, wrong: list[str]) -> str:
    """In a word, what was made of marks that were moved."""
    report = judgement.control_report
    doubtful = {name for group in report.cannot_tell for name in group}
    others = set(report.released) - set(wrong)
    if others:
        return "another blamed" if set(wrong) <= {*report.released, *doubtful} else "another instead"
    if set(wrong) <= set(report.released):
        return "named alone" if not doubtful else "named, others doubtful"
    if set(wrong) <= {*report.released, *doubtful}:
        return "named among doubtful"
    if report.scale:
        return "taken for a scale"
    return "only some named" if {*report.released, *doubtful} & set(wrong) else (
        "others doubtful" if doubtful else "not seen")  # fmt: skip


def one_case(seed: int, count: int) -> str | None:
    """Outcome of a network with ``count`` marks moved."""
    rng = np.random.default_rng([SEED, seed])
    net = network(rng)
    with tempfile.TemporaryDirectory() as folder:
        made = moved(net, adjust.solve(net.write(Path(folder))), rng, count)
    return None if made is None else outcome(judged(made[0]), made[1])


def clean_case(seed: int) -> str:
    """Outcome of clean control."""
    report = judged(network(np.random.default_rng([SEED, seed]))).control_report
    if report.released:
        return "blamed"
    return "scale" if report.scale else "doubtful" if report.cannot_tell else "quiet"


def scale_case(seed: int, ratio: float, cause: str) -> str | None:
    """Outcome of a scale of measured lengths; at 2 ppm in a wide network with a sharp distance meter."""
    rng = np.random.default_rng([SEED, seed])
    small = abs(ratio - 1) < 1e-5
    net = network(rng, 20.0 if small else 1.0)
    net = replace(net, scale=ratio, ppm=2e-7 if small else PPM)
    if small:
        net = replace(net, weighted=False, known=net.truth)
    try:
        judgement = judged(net)
    except BrasscapError as refused:
        return (
            "recognised in the refusal" if any("feet" in s for s in refused.sentences) else "refused for another reason"
        )
    report, fit = judgement.control_report, judgement.similarity
    if small and (fit is None or fit.sd_scale_ppm is None or fit.sd_scale_ppm > 0.35):
        return None
    if report.scale is None:
        return "scale among doubtful" if any(SCALE in g for g in report.cannot_tell) else "no scale"
    if report.released:
        return "scale and a mark"
    return "recognised" if report.scale.cause == cause else f"scale of {report.scale.ppm:.1f} ppm, not recognised"


def prepared(seed: int) -> list[Shifts]:
    """The parts of the control of a network, to be drawn again and again at one linearisation."""
    with tempfile.TemporaryDirectory() as folder:
        solution = adjust.solve(network(np.random.default_rng([SEED, seed])).write(Path(folder)))
    return control._parts(solution, judge_held_marks(solution))


def drawn(parts: list[Shifts], rng: np.random.Generator, size: float, sigma: float = 1.0) -> str:
    """One draw of the shifts themselves: z ~ N(A'D^1/2 b, I) with a unit moved by ``size`` of its standard deviations.

    ``sigma`` is by how much larger the errors are than stated.
    """
    can = [
        (s, u)
        for s in range(len(parts))
        for u in range(len(parts[s].units))
        if parts[s].shift(u, NOTHING[: parts[s].rank])
    ]
    where, unit = can[rng.integers(len(can))]
    z = [sigma * rng.standard_normal(s.rank) for s in parts]
    rows = parts[where].rows[unit]
    b = rng.standard_normal(len(rows))
    z[where] += size * np.linalg.cholesky(np.linalg.inv(rows @ rows.T)) @ (b / np.linalg.norm(b)) @ rows
    levels = consistent.Levels(1.0, None, False, 0.05, *control._count(parts))
    found = [consistent.find_consistent(replace(s, z=one), levels) for s, one in zip(parts, z, strict=True)]
    blamed = {(k, u) for k, f in enumerate(found) for u in f.blamed}
    doubtful = {(k, u) for k, f in enumerate(found) for u in f.doubtful}
    if not size:
        return "quiet" if not blamed | doubtful else "not quiet"
    others = any(u < len(parts[k].units) and (k, u) != (where, unit) for k, u in blamed)
    said = (
        "named alone"
        if (where, unit) in blamed
        else "named among doubtful"
        if (where, unit) in doubtful
        else "not named"
    )
    return said + (", another blamed" if others else "")


NOTHING = np.zeros((1000, 0))
"""The basis of nothing released."""


def table(title: str, words: list[str | None]) -> None:
    """Shares, the largest first."""
    counted = [w for w in words if w]
    print(f"{title}: {len(counted)} cases")
    for word, k in Counter(counted).most_common():
        p = k / len(counted)
        print(f"  {word}: {k} ({100 * p:.1f} % +- {100 * math.sqrt(p * (1 - p) / len(counted)):.1f})")


def main(count: int, what: list[str]) -> None:
    """Print the tables."""
    print("seed", SEED)
    if "clean" in what:
        table("clean control", [clean_case(s) for s in range(count)])
    for k, word in ((1, "one"), (2, "two")):
        if word in what:
            table(f"{word} moved", [one_case(1000 * k + s, k) for s in range(count)])
    if "drawn" in what:
        rng, some = np.random.default_rng(SEED), [prepared(s) for s in range(count)]
        for size in (0.0, 4.0, MOVED, 6.0, 8.0):
            table(
                f"drawn at one linearisation, moved by {size:g}", [drawn(p, rng, size) for p in some for _ in range(20)]
            )
    if "scale" in what:
        for ratio, cause in SCALES.items():
            table(
                f"measured lengths times {ratio:.6g}", [scale_case(5000 + s, ratio, cause) for s in range(count // 4)]
            )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 480, sys.argv[2:] or DEFAULT)
