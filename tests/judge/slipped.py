"""Jobs with one everyday slip in the book, for the study of likely causes.

The slip is made in the text of the table, independently of how the program looks for it: the cell is changed as a tired
surveyor would change it, the job is read anew. Every planter returns the line it changed, or None where the row does
not allow the slip.
"""

from __future__ import annotations

import csv
import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from tests.networks import random_job

SEC = math.pi / 648000


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
        """A cell."""
        return self.rows[i][self.header.index(column)]

    def put(self, i: int, column: str, text: str) -> None:
        """Change a cell and write the table."""
        self.rows[i][self.header.index(column)] = text
        with self.path.open("w", newline="", encoding="utf-8") as out:
            csv.writer(out).writerows([self.header, *self.rows])


def dms(radians: float) -> str:
    """As booked: 123 45 56.7."""
    tenths = round(radians / SEC * 10) % 12960000
    return f"{tenths // 36000} {tenths // 600 % 60:02d} {tenths % 600 / 10:04.1f}"


def radians(text: str) -> float:
    """Of a booked angle."""
    d, m, s = text.split()
    return (int(d) * 3600 + int(m) * 60 + float(s)) * SEC


def booked_job(rng: np.random.Generator, folder: Path, n: int, kinds: tuple[str, ...], control: str) -> Path:
    """A random job with cells as a book has them: dms to 0.1 second, lengths to 0.1 mm."""
    random_job(rng, folder, n, kinds, control)
    text = (folder / "job.toml").read_text().replace('angle = "deg"', 'angle = "dms"')
    (folder / "job.toml").write_text(text)
    for column, name in (("direction", "directions"), ("angle", "angles"), ("azimuth", "azimuths")):
        if (folder / f"{name}.csv").exists():
            sheet = Sheet.of(folder / f"{name}.csv")
            for i in range(len(sheet.rows)):
                sheet.rows[i][sheet.header.index(column)] = dms(math.radians(float(sheet.get(i, column))))
            sheet.put(0, column, sheet.get(0, column))
    for path in folder.glob("*.csv"):
        sheet = Sheet.of(path)
        for column in ("distance", "rise"):
            if column in sheet.header:
                at = sheet.header.index(column)
                for row in sheet.rows:
                    row[at] = f"{float(row[at]):.4f}"
                sheet.put(0, column, sheet.get(0, column))
    return folder


Planter = Callable[[np.random.Generator, Sheet, int, str], "str | None"]
"""Gives the wrong text of a cell."""


def _digits(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
    text = sheet.get(i, column)
    pairs = [m.start() for m in re.finditer(r"(?=\d\d)", text) if text[m.start()] != text[m.start() + 1]]
    if not pairs:
        return None
    k = int(rng.choice(pairs))
    return text[:k] + text[k + 1] + text[k] + text[k + 2 :]


def _angle(steps: tuple[float, ...]) -> Planter:
    def plant(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
        return dms(radians(sheet.get(i, column)) + float(rng.choice(steps)) * int(rng.choice([-1, 1])) * 3600 * SEC)

    return plant


def _step(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
    return f"{float(sheet.get(i, column)) + float(rng.choice([0.1, 0.5, 1, 10])) * int(rng.choice([-1, 1])):.4f}"


def _sign(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
    text = sheet.get(i, column)
    return text[1:] if text.startswith("-") else "-" + text


def _other_way(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
    return dms(2 * math.pi - radians(sheet.get(i, column)))


def _half(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
    return dms(radians(sheet.get(i, column)) + math.pi)


def _constant(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
    return f"{float(sheet.get(i, column)) + float(rng.choice([0.0175, 0.03, 0.0344])) * int(rng.choice([-1, 1])):.4f}"


def _feet(rng: np.random.Generator, sheet: Sheet, i: int, column: str) -> str | None:
    return f"{float(sheet.get(i, column)) / 0.3048:.4f}"


@dataclass(frozen=True)
class Sort:
    """A slip: where it can happen and what it does."""

    slip: str
    columns: tuple[str, ...]
    plant: Planter | None


SORTS = (
    Sort("digits-swapped", ("distance", "direction", "angle", "rise"), _digits),
    Sort("degree-slip", ("direction", "angle"), _angle((1.0, 10.0))),
    Sort("minute-slip", ("direction", "angle"), _angle((1 / 60, 10 / 60, 30 / 60))),
    Sort("round-step", ("distance", "rise"), _step),
    Sort("sign", ("rise",), _sign),
    Sort("other-way", ("angle",), _other_way),
    Sort("half-circle", ("direction", "angle"), _half),
    Sort("wrong-station", ("distance", "direction", "angle", "rise"), None),
    Sort("reflector-constant", ("distance",), _constant),
    Sort("feet-for-metres", ("distance",), _feet),
    Sort("pointings-swapped", ("direction",), None),
    Sort("height-forgotten", ("zenith_angle",), None),
    Sort("slope-for-horizontal", ("distance",), None),
)
IN_SPACE = ("height-forgotten", "slope-for-horizontal")
TABLE = {"distance": "distances", "direction": "directions", "angle": "angles"}


def tables(folder: Path, column: str) -> list[Sheet]:
    """The tables that have a column of readings."""
    return [s for path in sorted(folder.glob("*.csv")) if column in (s := Sheet.of(path)).header]


def plant(rng: np.random.Generator, folder: Path, sort: Sort) -> list[tuple[str, int]] | None:
    """Make the slip in one random row; places of the rows that are wrong now."""
    if sort.slip in IN_SPACE:
        return _in_space(rng, folder, sort)
    choices = [(sheet, column) for column in sort.columns for sheet in tables(folder, column)]
    if not choices:
        return None
    sheet, column = choices[int(rng.integers(len(choices)))]
    i = int(rng.integers(len(sheet.rows)))
    name = sheet.path.name
    if sort.slip == "wrong-station":
        end = "to" if "to" in sheet.header else "second"
        names = sorted({row[sheet.header.index(end)] for row in sheet.rows} - set(sheet.rows[i]))
        if not names:
            return None
        sheet.put(i, end, str(rng.choice(names)))
        return [(name, i + 2)]
    if sort.slip == "pointings-swapped":
        same = [j for j in range(len(sheet.rows)) if j != i
                and all(sheet.get(i, c) == sheet.get(j, c) for c in ("at", "set") if c in sheet.header)]  # fmt: skip
        if not same:
            return None
        j = int(rng.choice(same))
        one, other = sheet.get(i, column), sheet.get(j, column)
        sheet.put(i, column, other)
        sheet.put(j, column, one)
        return [(name, i + 2), (name, j + 2)]
    assert sort.plant is not None
    wrong = sort.plant(rng, sheet, i, column)
    if wrong is None or wrong == sheet.get(i, column):
        return None
    sheet.put(i, column, wrong)
    return [(name, i + 2)]


def _in_space(rng: np.random.Generator, folder: Path, sort: Sort) -> list[tuple[str, int]] | None:
    """The target's height left out of a zenith angle; the display's slope distance booked as the horizontal one."""
    zeniths = Sheet.of(folder / "zenith_angle.csv")
    if sort.slip == "height-forgotten":
        i = int(rng.integers(len(zeniths.rows)))
        zeniths.put(i, "target_height", "0")
        return [("zenith_angle.csv", i + 2)]
    if not (folder / "ground.csv").exists():
        return None
    ground = Sheet.of(folder / "ground.csv")
    i = int(rng.integers(len(ground.rows)))
    angle = {(row[0], row[1]): float(row[zeniths.header.index("zenith_angle")]) for row in zeniths.rows}
    z = angle.get((ground.rows[i][0], ground.rows[i][1]))
    if z is None:
        return None
    ground.put(i, "distance", f"{float(ground.get(i, 'distance')) / math.sin(math.radians(z)):.4f}")
    return [("ground.csv", i + 2)]
