"""A traverse as booked, one row a station, turned into angles, distances and held azimuths.

Angles are brought to "clockwise from the backsight to the foresight": with the booked angle b,

    right  b      left  -b      deflection-right  180 + b      deflection-left  180 - b      (modulo 360 degrees)

because a deflection counts from the backsight prolonged through the station. Every reading keeps the line of its row.
"""

from __future__ import annotations

import math
from functools import partial

import numpy as np

from adjust.book.cells import Cells
from adjust.book.observations import Observations
from adjust.book.sheet import Sheet
from adjust.kinds import KINDS
from adjust.network import Array
from adjust.units import TURN

_TURNS = {
    "right": (0.0, 1.0), "left": (0.0, -1.0), "deflection-right": (math.pi, 1.0), "deflection-left": (math.pi, -1.0),
}  # fmt: skip
"""Start and sense of each way to turn an angle."""
_READINGS = ("angle", "bearing", "distance", "back_distance")
_NEEDS = {"angle": ("back", "fore"), "distance": ("fore",), "back_distance": ("back",)}
_SHEETS = {
    "angle": Sheet(KINDS["angle"], ("at", "back", "fore"), ("angle",), "sd_angle", "angle"),
    "distance": Sheet(KINDS["distance"], ("at", "fore"), ("distance",), "sd_distance", "distance"),
    "back_distance": Sheet(KINDS["distance"], ("at", "back"), ("back_distance",), "sd_distance", "back distance"),
}
_BASIS = KINDS["azimuth"]


def add_traverse(observations: Observations, cells: Cells) -> None:
    """Take over one table of a traverse."""
    rows = observations.used("traverse", _READINGS, cells)
    _check(cells, rows)
    turn = cells.choices("turn", range(len(cells)))
    nothing_held = np.zeros(len(cells), dtype=bool)
    for column, sheet in _SHEETS.items():
        use = [i for i in rows if cells.text(column)[i]]
        if use:
            change = turn if column == "angle" else None
            observations.take(cells, sheet, use, partial(_values, observations, cells, sheet, change), nothing_held)
    for end in ("fore", "back"):
        use = [i for i in rows if cells.text("bearing")[i] and _basis_end(cells, i) == end]
        if use:
            sheet = Sheet(_BASIS, ("at", end), ("bearing",), "sd_angle", "bearing")
            observations.take(cells, sheet, use, partial(_values, observations, cells, sheet, None), ~nothing_held)


def _values(observations: Observations, cells: Cells, sheet: Sheet, turn: list[str] | None, use: list[int]) -> Array:
    booked = observations.values(cells, sheet, use)
    return booked if turn is None else clockwise(booked, turn)


def clockwise(booked: Array, turn: list[str]) -> Array:
    """Angles (n,) clockwise from backsight to foresight, radians, from the booked ones and how each was turned."""
    start, sense = np.array([_TURNS[t] for t in turn]).reshape(-1, 2).T
    return np.asarray((start + sense * booked) % TURN)


def _basis_end(cells: Cells, i: int) -> str:
    """A bearing belongs to the line ahead; where there is none, to the line back."""
    return "fore" if cells.text("fore")[i] else "back"


def _check(cells: Cells, rows: list[int]) -> None:
    """Every reading has its sights, and every row says something."""
    for i in rows:
        filled = [column for column in _READINGS if cells.text(column)[i]]
        if not filled and not cells.text("at")[i]:
            cells.fault(i, "at", "", "a station's name is missing")
        for column in filled:
            for need in _NEEDS.get(column, (_basis_end(cells, i),)):
                if not cells.text(need)[i]:
                    cells.fault(i, need, "", f"the {column.replace('_', ' ')} of this row needs its {need}sight")
    if rows and not any(cells.text(column)[i] for column in _READINGS for i in rows):
        cells.header_fault("angle", "", "a traverse without readings; fill angle, distance, back_distance or bearing")
