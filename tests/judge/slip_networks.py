"""Seeded networks of several shapes with their books as booked, for the study of likely causes.

Nothing of ``adjust`` is used here. Angles are booked in degrees, minutes and tenths of a second, lengths to 0.1 mm.
The readings are invented: truth plus a normal error of the stated size.

traverse: a loop with every leg read from both ends, some angles twice, some ties across. braced: plane networks, some
with levelled lines. level: level nets. space: directions, zenith angles (or elevations), slopes or lengths at ground
level. rounds: the raw book of a total station, two sets in both faces. staff: the raw book of a level, back and fore
sights.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np

from tests.networks import random_job
from tests.solver.space import PLANE, Space, arrays, model, random_space, write

SEC = math.pi / 648000
TAU = 2 * math.pi
CONTROL = ("held", "weighted", "free")
PLANE_KINDS = (("distances", "directions"), ("distances", "angles"), ("distances", "directions", "angles"),
               ("distances", "directions", "levelled_lengths"))  # fmt: skip
ANGULAR = ("direction", "angle", "azimuth", "zenith_angle", "elevation", "horizontal_circle", "zenith_circle")


@dataclass
class Sheet:
    """A table of a job as rows of text."""

    path: Path
    header: list[str]
    rows: list[list[str]]

    @classmethod
    def of(cls, path: Path) -> Sheet:
        """Read a table."""
        rows = list(csv.reader(path.read_text("utf-8").splitlines()))
        return cls(path, rows[0], rows[1:])

    def get(self, i: int, column: str) -> str:
        """A cell; '' where there is no such column."""
        return self.rows[i][self.header.index(column)] if column in self.header else ""

    def put(self, i: int, column: str, text: str) -> None:
        """Change a cell and write the table."""
        self.rows[i][self.header.index(column)] = text
        self.save()

    def save(self) -> None:
        """Write the table."""
        with self.path.open("w", newline="", encoding="utf-8") as out:
            csv.writer(out).writerows([self.header, *self.rows])


def dms(radians: float, whole: bool = True) -> str:
    """As booked: 123 45 56.7; ``whole``: on one circle."""
    tenths = round(radians / SEC * 10)
    if whole:
        tenths %= 12960000
    sign, tenths = ("-" if tenths < 0 else ""), abs(tenths)
    return f"{sign}{tenths // 36000} {tenths // 600 % 60:02d} {tenths % 600 / 10:04.1f}"


def radians(text: str) -> float:
    """Of a booked angle."""
    d, m, s = text.lstrip("+-").split()
    value = (int(d) * 3600 + int(m) * 60 + float(s)) * SEC
    return -value if text.startswith("-") else value


def as_booked(folder: Path) -> None:
    """Cells as a book has them, in every table of a job written in degrees and with all digits."""
    toml = folder / "job.toml"
    toml.write_text(toml.read_text().replace('angle = "deg"', 'angle = "dms"'))
    for path in folder.glob("*.csv"):
        if path.stem in ("control", "stations"):
            continue
        sheet = Sheet.of(path)
        for column in sheet.header:
            at = sheet.header.index(column)
            for row in sheet.rows:
                if column in ANGULAR:
                    row[at] = dms(math.radians(float(row[at])), column != "elevation")
                elif column in ("distance", "rise"):
                    row[at] = f"{float(row[at]):.4f}"
        sheet.save()


def braced(rng: np.random.Generator, folder: Path, number: int) -> None:
    """A braced plane network; every fourth with levelled lines."""
    kinds = PLANE_KINDS[number % len(PLANE_KINDS)]
    random_job(rng, folder, int(rng.integers(8, 17)), kinds, CONTROL[number // len(PLANE_KINDS) % 3])
    as_booked(folder)


def level(rng: np.random.Generator, folder: Path, number: int) -> None:
    """A level net."""
    random_job(rng, folder, int(rng.integers(8, 21)), ("levelled_lengths",), CONTROL[number % 3])
    as_booked(folder)


def space(rng: np.random.Generator, folder: Path, number: int) -> None:
    """A network in space; every other one with elevations in place of zenith angles, every third with ground lengths
    in place of slopes."""
    mixture = ("rich", "ground", "not levelled")[number % 3]
    made = random_space(rng, n=int(rng.integers(5, 9)), mixture=mixture)
    write(made, folder)
    _displayed(made, folder)
    if number // 3 % 2:
        sheet = Sheet.of(folder / "zenith_angle.csv")
        at = sheet.header.index("zenith_angle")
        sheet.header[at] = "elevation"
        for row in sheet.rows:
            row[at] = repr(90.0 - float(row[at]))
        sheet.save()
    as_booked(folder)


def _displayed(made: Space, folder: Path) -> None:
    """What the display showed for every row of ground.csv before it was reduced: its slope, with the same error."""
    kind, ends, above, value, _ = arrays(made.rows)
    here = kind == "ground"
    true = {k: model(np.full(here.sum(), k), ends[here], above[here], made.truth, 0.13) for k in ("ground", "slope")}
    shown = true["slope"] + value[here] - true["ground"]
    (folder / "displayed.txt").write_text("\n".join(f"{x:.4f}" for x in shown), "utf-8")


def traverse(rng: np.random.Generator, folder: Path, number: int) -> None:
    """A loop of 7 to 14 stations from two known marks."""
    n = int(rng.integers(7, 15))
    turn = TAU * (np.arange(n) + rng.uniform(-0.25, 0.25, n)) / n
    radius = 24.0 * n * rng.uniform(0.8, 1.2, n)
    xy = np.column_stack([1000 + radius * np.sin(turn), 2000 + radius * np.cos(turn)])
    names = [f"T{k + 1}" for k in range(n)]

    def azimuth(a: int, b: int) -> float:
        return math.atan2(*(xy[b] - xy[a]))

    def angle(at: int, back: int, fore: int) -> str:
        return dms(azimuth(at, fore) - azimuth(at, back) + rng.normal(0, 2 * math.sqrt(2) * SEC))

    def length(a: int, b: int) -> str:
        d = math.dist(xy[a], xy[b])
        return f"{d + rng.normal(0, 0.0015 + 2e-6 * d):.4f}"

    rows = []
    for at in range(n):
        back, fore = (at - 1) % n, (at + 1) % n
        rows.append([names[at], names[back], names[fore], angle(at, back, fore), length(at, fore), length(at, back)])
        if rng.random() < 0.5:
            rows.append([names[at], names[back], names[fore], angle(at, back, fore), "", ""])
    for at in rng.choice(n, max(2, n // 3), replace=False).tolist():
        back, fore = (at - 1) % n, int((at + rng.integers(2, n - 1)) % n)
        rows.append([names[at], names[back], names[fore], angle(at, back, fore), length(at, fore), ""])
    _table(folder, "traverse", ["at", "back", "fore", "angle", "distance", "back_distance"], rows)
    _table(folder, "control", ["station", "east", "north"], [[names[k], *(f"{x:.4f}" for x in xy[k])] for k in (0, 1)])
    # coordinates as booked are the truth of the marks; they were rounded to 0.1 mm, far below the readings' errors
    toml = '[units]\nlength = "m"\nangle = "dms"\n[instruments.station]\ndistance = "1.5 mm + 2 ppm"\n'
    (folder / "job.toml").write_text(toml + 'direction = "2 sec"\n')


def rounds(rng: np.random.Generator, folder: Path, number: int) -> None:
    """Five to seven stations in space, four targets each, two sets in both faces, an instrument out of adjustment."""
    n, sets = int(rng.integers(5, 8)), 2
    side = 3
    cells = rng.permutation(side * side)[:n]
    plane = np.stack([cells % side, cells // side], axis=1) * 180.0 + rng.uniform(-50, 50, (n, 2)) + [4000, 7000]
    xyz = np.column_stack([plane, rng.uniform(180, 220, n)])
    two_c, index = rng.normal(0, 10 * SEC), rng.normal(0, 10 * SEC)
    rows = []
    for at in range(n):
        hi = round(float(rng.uniform(1.4, 1.7)), 3)
        targets = sorted(rng.permutation([j for j in range(n) if j != at])[:4].tolist(),
                         key=lambda j: math.atan2(*(xyz[j] - xyz[at])[:2]) % TAU)  # fmt: skip
        above = [(hi, round(float(rng.uniform(1.3, 2.0)), 3)) for _ in targets]
        ends = np.array([(at, j) for j in targets])
        true = {kind: model(np.full(len(targets), kind), ends, np.array(above), xyz, 0.13)
                for kind in ("direction", "zenith_angle", "slope")}  # fmt: skip
        for s in range(sets):
            zero = float(rng.uniform(0, TAU))
            for face in (1, 2):
                order = range(len(targets)) if face == 1 else range(len(targets) - 1, -1, -1)
                for k in order:
                    z = float(true["zenith_angle"][k])
                    c = two_c / 2 / math.sin(z)
                    h = true["direction"][k] + zero + (c if face == 1 else math.pi - c)
                    v = (z if face == 1 else TAU - z) + index
                    e = rng.normal(0, 1, 3)
                    circles = [dms(h + e[0] * 2 * math.sqrt(2) * SEC), dms(v + e[1] * 3 * math.sqrt(2) * SEC)]
                    slope = f"{true['slope'][k] + e[2] * 0.002:.4f}"
                    rows.append([f"P{at}", f"P{targets[k]}", str(s + 1), str(face), *circles, slope, f"{hi:.3f}",
                                 f"{above[k][1]:.3f}"])  # fmt: skip
    header = ["at", "to", "set", "face", "horizontal_circle", "zenith_circle", "slope_distance", "instrument_height",
              "target_height"]  # fmt: skip
    _table(folder, "rounds", header, rows)
    _table(folder, "control", ["station", "east", "north", "height"],
           [[f"P{k}", *map(repr, xyz[k].tolist())] for k in (0, 1)])  # fmt: skip
    (folder / "job.toml").write_text(
        f'[units]\nlength = "m"\nangle = "dms"\n[frame]\nplane_height = {PLANE}\nrefraction = 0.13\n'
        '[instruments.station]\ndistance = "2 mm"\ndirection = "2 sec"\nzenith = "3 sec"\n'
        '[[book]]\nfile = "control.csv"\n[[book]]\nfile = "rounds.csv"\n'
    )


def staff(rng: np.random.Generator, folder: Path, number: int) -> None:
    """Nine to fourteen marks on a grid, a line of one or two set-ups between neighbours, back and fore sights."""
    n = int(rng.integers(9, 15))
    side = 4
    marks = {(k % side, k // side): k for k in range(n)}
    height = 50.0 + rng.uniform(-0.9, 0.9, n)
    ties = [(k, marks[to]) for (x, y), k in marks.items() for to in ((x + 1, y), (x, y + 1), (x + 1, y + 1))
            if to in marks]  # fmt: skip
    rows, sd = [], 0.0003
    for number_of_line, (a, b) in enumerate(ties):
        names, levels = [f"B{a}", f"B{b}"], [height[a], height[b]]
        if rng.random() < 0.25:
            names.insert(1, "TP1")
            levels.insert(1, float(np.mean(levels)) + rng.uniform(-0.5, 0.5))
        pending = ""
        for k, (here, ahead) in enumerate(pairwise(levels)):
            sight = max(here, ahead) + float(rng.uniform(0.4, 1.5))
            back, fore = (f"{sight - h + rng.normal(0, sd):.4f}" for h in (here, ahead))
            rows.append([f"L{number_of_line + 1}", names[k], back, pending, repr(sd * math.sqrt(2)) if pending else ""])
            pending = fore
        rows.append([f"L{number_of_line + 1}", names[-1], "", pending, repr(sd * math.sqrt(2))])
    _table(folder, "staff", ["line", "station", "back", "fore", "sd"], rows)
    _table(folder, "stations", ["station"], [[f"B{k}"] for k in range(2, n)])
    _table(folder, "control", ["station", "height"], [[f"B{k}", repr(float(height[k]))] for k in (0, 1)])
    (folder / "job.toml").write_text('[units]\nlength = "m"\nangle = "dms"\n')


def _table(folder: Path, kind: str, header: list[str], rows: list[list[str]]) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    Sheet(folder / f"{kind}.csv", header, rows).save()


SHAPES: dict[str, Callable[[np.random.Generator, Path, int], None]] = {
    "traverse": traverse, "braced": braced, "level": level, "space": space, "rounds": rounds, "staff": staff,
}  # fmt: skip
