"""Jobs with everyday slips in the book, for the study of likely causes.

The slip is made in the text of the table, independently of how the program looks for it: the cell is changed as a tired
surveyor would change it, and the job is read anew. What was wrong by how much is told by the clean network alone.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from tests.judge.slip_networks import SEC, Sheet, as_booked, dms, radians
from tests.networks import random_job

Rng = np.random.Generator
LENGTHS = ("distance", "back_distance", "slope_distance", "rise", "back", "fore")
DISTANCES = ("distance", "back_distance", "slope_distance")
CIRCLES = ("direction", "angle", "horizontal_circle")
ANGLES = (*CIRCLES, "zenith_angle", "elevation", "zenith_circle")


def booked_job(rng: Rng, folder: Path, n: int, kinds: tuple[str, ...], control: str) -> Path:
    """A random job with cells as a book has them: dms to 0.1 second, lengths to 0.1 mm."""
    random_job(rng, folder, n, kinds, control)
    as_booked(folder)
    return folder


Change = Callable[[Rng, str, str], "str | None"]
"""The wrong text of a cell, from the column's name and the right text; None where it does not allow the slip."""


def _digits(rng: Rng, column: str, text: str) -> str | None:
    pairs = [m.start() for m in re.finditer(r"(?=\d\d)", text) if text[m.start()] != text[m.start() + 1]]
    if not pairs:
        return None
    k = int(rng.choice(pairs))
    return text[:k] + text[k + 1] + text[k] + text[k + 2 :]


def _moved(column: str, text: str, by: float) -> str:
    """The text with its value changed by radians or metres."""
    if column in ANGLES:
        return dms(radians(text) + by, column != "elevation")
    return f"{float(text) + by:.4f}"


def _angle(steps: tuple[float, ...]) -> Change:
    def change(rng: Rng, column: str, text: str) -> str | None:
        return _moved(column, text, float(rng.choice(steps)) * int(rng.choice([-1, 1])) * 3600 * SEC)

    return change


def _length(steps: tuple[float, ...]) -> Change:
    def change(rng: Rng, column: str, text: str) -> str | None:
        possible = steps if column in DISTANCES else [step for step in steps if step <= 10]
        return _moved(column, text, float(rng.choice(possible)) * int(rng.choice([-1, 1])))

    return change


def _sign(rng: Rng, column: str, text: str) -> str | None:
    return text[1:] if text.startswith("-") else "-" + text


def _other_way(rng: Rng, column: str, text: str) -> str | None:
    return dms(-radians(text))


def _half(rng: Rng, column: str, text: str) -> str | None:
    return dms(radians(text) + math.pi)


def _feet(rng: Rng, column: str, text: str) -> str | None:
    return f"{float(text) / 0.3048:.4f}"


@dataclass(frozen=True)
class Sort:
    """A slip: where it can happen and what it does to a cell; None where it is more than a cell."""

    slip: str
    columns: tuple[str, ...]
    change: Change | None
    shapes: tuple[str, ...]
    """Shapes of networks it is planted in."""


EVERYWHERE = ("traverse", "braced", "level", "space", "rounds", "staff")
WITH_ANGLES = ("traverse", "braced", "space", "rounds")
SORTS = (
    Sort("digits-swapped", (*LENGTHS, *ANGLES), _digits, EVERYWHERE),
    Sort("degree-slip", ANGLES, _angle((1.0, 10.0)), WITH_ANGLES),
    Sort("minute-slip", ANGLES, _angle((1 / 60, 10 / 60, 30 / 60)), WITH_ANGLES),
    Sort("round-step", LENGTHS, _length((0.1, 0.5, 1.0, 10.0, 100.0)), EVERYWHERE),
    Sort("sign", ("rise", "elevation"), _sign, ("level", "space")),
    Sort("other-way", ("angle",), _other_way, ("traverse", "braced")),
    Sort("half-circle", CIRCLES, _half, WITH_ANGLES),
    Sort("wrong-station", (*LENGTHS, *ANGLES), None, EVERYWHERE),
    Sort("reflector-constant", DISTANCES, _length((0.0175, 0.03, 0.0344)), WITH_ANGLES),
    Sort("feet-for-metres", DISTANCES, _feet, WITH_ANGLES),
    Sort("pointings-swapped", ("direction", "horizontal_circle"), None, ("braced", "space", "rounds")),
    Sort("height-forgotten", (), None, ("space", "rounds")),
    Sort("slope-for-horizontal", ("distance",), None, ("space",)),
)
SOME = Sort("some amount", (*LENGTHS, *ANGLES), None, EVERYWHERE)
UNKNOWN = Sort("a point not in the job", ("horizontal_circle",), None, ("rounds",))
"""A sight in both faces to a point that no table has: the slip is a wrong station."""


@dataclass(frozen=True)
class Planted:
    """One change of the book."""

    file: str
    row: int
    column: str
    right: str
    """The text that was there."""


def tables(folder: Path) -> list[Sheet]:
    """The tables with readings."""
    return [Sheet.of(path) for path in sorted(folder.glob("*.csv")) if path.stem not in ("control", "stations")]


def cells(folder: Path, columns: tuple[str, ...]) -> list[tuple[Sheet, str]]:
    """Columns of readings; ``back`` and ``fore`` are sights in a level book, elsewhere names."""
    return [
        (sheet, column)
        for sheet in tables(folder)
        for column in columns
        if column in sheet.header and (column not in ("back", "fore") or "line" in sheet.header)
    ]


def plant(rng: Rng, folder: Path, sort: Sort) -> Planted | None:
    """Make the slip in one random row; None where it does not allow the slip."""
    if sort.slip == "slope-for-horizontal":
        return _horizontal(rng, folder)
    if sort.slip == "height-forgotten":
        choices = [(s, "target_height") for s in tables(folder) if "target_height" in s.header]
    else:
        choices = cells(folder, sort.columns)
    if not choices:
        return None
    sheet, column = choices[int(rng.integers(len(choices)))]
    i = int(rng.integers(len(sheet.rows)))
    right = sheet.get(i, column)
    if not right:
        return None
    found = Planted(sheet.path.name, i, column, right)
    if sort.slip == "wrong-station":
        return found if _wrong_station(rng, folder, sheet, i) else None
    if sort is UNKNOWN:
        by = (rng.uniform(0.01, 6), rng.uniform(0.01, 0.2), rng.uniform(5, 100))
        for j in _pointing(sheet, i):
            down = by[1] if sheet.get(j, "face") == "1" else -by[1]
            for c, b in (("horizontal_circle", by[0]), ("zenith_circle", down), ("slope_distance", by[2])):
                sheet.put(j, c, _moved(c, sheet.get(j, c), float(b)))
        return found
    if sort.slip == "pointings-swapped":
        return found if _swapped(rng, sheet, i, column) else None
    if sort.slip == "height-forgotten":
        for j in _pointing(sheet, i):
            sheet.put(j, column, "0")
        return found
    assert sort.change is not None
    wrong = sort.change(rng, column, right)
    if wrong is None or wrong == right:
        return None
    sheet.put(i, column, wrong)
    if sort.slip == "reflector-constant":  # the same reflector in both faces
        for j in _pointing(sheet, i):
            if j != i:
                sheet.put(j, column, _moved(column, sheet.get(j, column), float(wrong) - float(right)))
    return found


def amount(rng: Rng, folder: Path) -> Planted | None:
    """A random cell for an error of any size; ``moved`` makes it."""
    choices = cells(folder, SOME.columns)
    sheet, column = choices[int(rng.integers(len(choices)))]
    i = int(rng.integers(len(sheet.rows)))
    return Planted(sheet.path.name, i, column, sheet.get(i, column)) if sheet.get(i, column) else None


def moved(folder: Path, at: Planted, by: float) -> None:
    """Make the text of a cell that of its right value changed by metres or radians."""
    Sheet.of(folder / at.file).put(at.row, at.column, _moved(at.column, at.right, by))


def _pointing(sheet: Sheet, i: int) -> list[int]:
    """Rows of one pointing: those of both faces in a raw book, else the row itself."""
    if "face" not in sheet.header:
        return [i]
    same = ("at", "to", "set")
    return [j for j in range(len(sheet.rows)) if all(sheet.get(j, c) == sheet.get(i, c) for c in same)]


def _wrong_station(rng: Rng, folder: Path, sheet: Sheet, i: int) -> bool:
    """Another name of the job at the far end; a mark's name at an end of a levelled line."""
    marks = [Sheet.of(path) for path in (folder / "stations.csv", folder / "control.csv") if path.exists()]
    names_in = marks if (folder / "stations.csv").exists() else [*marks, sheet]
    everyone = {row[0] for one in names_in for row in one.rows}
    columns = ("station",) if "line" in sheet.header else ("second", "to", "fore")
    column = next(c for c in columns if c in sheet.header)
    if column == "station" and sheet.get(i, "back") and sheet.get(i, "fore"):
        return False  # a change point: its name is the line's own
    set_of = [row for j, row in enumerate(sheet.rows) if "set" in sheet.header
              and all(sheet.get(j, c) == sheet.get(i, c) for c in ("at", "set"))]  # fmt: skip
    # the same target twice in a set would be seen while reading
    names = sorted(everyone - {name for row in [sheet.rows[i], *set_of] for name in row})
    if not names:
        return False
    other = str(rng.choice(names))
    for j in _pointing(sheet, i):
        sheet.put(j, column, other)
    return True


def _swapped(rng: Rng, sheet: Sheet, i: int, column: str) -> bool:
    """Two readings of a set in each other's row; in a raw book those of one face, or of both."""
    same = [j for j in range(len(sheet.rows)) if sheet.get(j, "to") != sheet.get(i, "to")
            and all(sheet.get(i, c) == sheet.get(j, c) for c in ("at", "set", "face"))]  # fmt: skip
    if not same:
        return False
    j = int(rng.choice(same))
    pairs = [(i, j)]
    if "face" in sheet.header and rng.random() < 0.5:
        pairs = [(a, b) for a in _pointing(sheet, i) for b in _pointing(sheet, j)
                 if sheet.get(a, "face") == sheet.get(b, "face")]  # fmt: skip
    for a, b in pairs:
        one, other = sheet.get(a, column), sheet.get(b, column)
        sheet.put(a, column, other)
        sheet.put(b, column, one)
    return True


def _horizontal(rng: Rng, folder: Path) -> Planted | None:
    """The display's slope distance booked as the horizontal one."""
    if not (folder / "ground.csv").exists():
        return None
    ground, shown = Sheet.of(folder / "ground.csv"), (folder / "displayed.txt").read_text("utf-8").split()
    i = int(rng.integers(len(ground.rows)))
    found = Planted("ground.csv", i, "distance", ground.get(i, "distance"))
    ground.put(i, "distance", shown[i])
    return found
