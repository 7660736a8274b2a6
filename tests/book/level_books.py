"""Level books with invented readings, from known heights, made without the program that reads them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

RADIUS = 6371008.8
HEAD = """
[units]
length = "m"
angle = "dms"
[instruments.level-1]
levelling = "1.2 mm*sqrt(km)"
"""


@dataclass(frozen=True)
class Truth:
    """A line over stations (n) with heights (n,) and for each set-up the lengths of both sights (n - 1, 2)."""

    names: list[str]
    heights: np.ndarray
    lengths: np.ndarray


def truth(rng: np.random.Generator, names: list[str], uneven: float = 0.0) -> Truth:
    """Rolling ground within reach of a 5 m staff; ``uneven``: back sights are that much longer on average."""
    steps = rng.uniform(-1.2, 1.2, len(names) - 1)
    lengths = rng.uniform(20.0, 45.0, (len(steps), 2)).round(1)
    lengths[:, 0] += uneven
    return Truth(names, 50.0 + np.concatenate([[0.0], np.cumsum(steps)]), lengths)


def readings(
    rng: np.random.Generator,
    line: Truth,
    tilt: float = 0.0,
    k: float | None = None,
    noise: float = 0.0,
    places: int = 4,
) -> list[list[str]]:
    """Rows station, back, fore, back_length, fore_length of a level that points up by ``tilt`` radians."""
    rows = [[name, "", "", "", ""] for name in line.names]
    for i, (back, fore) in enumerate(line.lengths):
        sight = max(line.heights[i], line.heights[i + 1]) + rng.uniform(0.4, 1.5)
        for row, column, length, height in ((i, 1, back, line.heights[i]), (i + 1, 2, fore, line.heights[i + 1])):
            bend = 0.0 if k is None else (1 - k) * length**2 / (2 * RADIUS)
            reading = sight + tilt * length + bend - height + rng.normal(0.0, noise) if noise else (
                sight + tilt * length + bend - height)  # fmt: skip
            rows[row][column] = f"{reading:.{places}f}"
            rows[row][column + 2] = f"{length:.1f}"
    return rows


def table(lines: dict[str, list[list[str]]]) -> str:
    """The text of staff.csv."""
    out = ["line,station,back,fore,back_length,fore_length"]
    for name, rows in lines.items():
        out += [",".join([name if i == 0 else "", *row]) for i, row in enumerate(rows)]
    return "\n".join(out) + "\n"


def sums(rows: list[list[str]], column: int) -> float:
    """Sum of a column as an office clerk would add it."""
    return round(sum(float(row[column]) for row in rows if row[column]), 4)
