"""A level book as booked, taken apart: lines, set-ups, and the sights of each; every fault of its structure is said.

A row is one position of the staff. A back sight begins a set-up, intermediate sights are read from it, and the fore
sight ends it; the next set-up begins with a back sight on the same station, in the same row or in the next.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import PurePosixPath

import numpy as np

from adjust.book.cells import Cells
from adjust.book.level_wires import Wires, wires_of
from adjust.network import Array
from adjust.units import LENGTHS

SIGHTS = ("back", "intermediate", "fore")
LONGEST_STAFF = 20.0
"""Metres; a longer reading is in another unit (common practice: staves have 2 to 5 m, some up to 8 m)."""


@dataclass(frozen=True)
class Shot:
    """One height difference: rows of its back sight and of its fore or intermediate sight."""

    back: int
    row: int
    fore: bool

    @property
    def sight(self) -> str:
        """'fore' or 'intermediate'."""
        return "fore" if self.fore else "intermediate"


@dataclass(frozen=True)
class StaffLine:
    """One levelling line: its rows in the order of the book, and its height differences."""

    name: str
    rows: tuple[int, ...]
    shots: tuple[Shot, ...]


@dataclass(frozen=True)
class StaffTable:
    """One level book: readings and lengths of sights (n,) in metres by sight, stations and pages (n) by row."""

    cells: Cells
    reading: dict[str, Array]
    length: dict[str, Array]
    stations: tuple[str, ...]
    pages: tuple[str, ...]
    lines: tuple[StaffLine, ...]
    wires: tuple[Wires, ...]

    def place(self, i: int) -> int:
        """Physical line of row ``i``."""
        return self.cells.rows.lines[i]


def read_staff(cells: Cells, booked: dict[str, str], seen: dict[str, str]) -> StaffTable:
    """The table taken apart; ``seen`` holds the names of lines so far with their places."""
    use = range(len(cells))
    stations = tuple(cells.names("station", use, booked))
    reading = {sight: staff_readings(cells, sight) for sight in SIGHTS}
    wires = tuple(w for side in ("back", "fore") for w in wires_of(cells, side, reading[side]))
    lines = tuple(_walk(cells, stations, name, rows) for name, rows in _pieces(cells, seen))
    return StaffTable(cells, reading, _lengths(cells, wires), stations, _pages(cells), lines, wires)


def staff_readings(cells: Cells, column: str) -> Array:
    """Readings (n,) of a column in metres; what no staff can show is a fault."""
    values, texts = cells.values(column, range(len(cells))), cells.text(column)
    for i in np.flatnonzero(values < 0).tolist():
        cells.fault(i, column, texts[i], "below the foot of the staff; a reading has no sign")
    longest = max(LONGEST_STAFF, cells.table.level.staff_length)
    for i in np.flatnonzero(values > longest).tolist():
        unit = cells.table.units.length
        in_mm = values[i] / LENGTHS[unit] * LENGTHS["mm"] < longest
        hint = f'no staff is so long; if it is in millimetres write "{texts[i]} mm"' if in_mm else "no staff is so long"
        cells.fault(i, column, texts[i], hint)
    return values


def above_the_staff(cells: Cells, columns: tuple[str, ...]) -> list[str]:
    """A sentence for every reading above the declared length of the staff."""
    longest, unit = cells.table.level.staff_length, cells.table.units.length
    out = []
    for column in columns:
        values, texts = cells.values(column, range(len(cells))), cells.text(column)
        for i in np.flatnonzero(values > longest):
            out.append(
                f"{cells.rows.file}:{cells.rows.lines[i]}: the {column.replace('_', ' ')} {texts[i]} is above the "
                f"end of the staff ({longest / LENGTHS[unit]:g} {unit}): look at the book, or set staff_length."
            )
    return out


def _lengths(cells: Cells, wires: tuple[Wires, ...]) -> dict[str, Array]:
    """Lengths (n,) of sights in metres by sight, from their column or from the wires."""
    out = {}
    for sight in SIGHTS:
        column = f"{sight}_length"
        length = cells.values(column, range(len(cells)))
        texts, readings = cells.text(column), cells.text(sight)
        for i in range(len(cells)):
            if texts[i] and not readings[i]:
                cells.fault(i, sight, "", f"the length of a sight without its reading; fill it or remove {column}")
        for w in wires:
            if w.side == sight and texts[w.row]:
                cells.fault(w.row, column, texts[w.row], "the length stands here and in the wires; keep one of them")
            elif w.side == sight:
                length[w.row] = w.length
        out[sight] = length
    return out


def _pages(cells: Cells) -> tuple[str, ...]:
    """Page of every row; a blank one is that of the row above."""
    out, page = [], ""
    for text in cells.text("page"):
        page = text or page
        out.append(page)
    return tuple(out)


def _pieces(cells: Cells, seen: dict[str, str]) -> list[tuple[str, list[int]]]:
    """Names of the lines with their rows, in the order of the book."""
    pieces: list[tuple[str, list[int]]] = []
    for i, text in enumerate(cells.text("line")):
        name = text or ("" if pieces else PurePosixPath(cells.rows.file).stem)
        if name and not (pieces and name == pieces[-1][0]):
            if not text and cells.has("line"):
                cells.fault(i, "line", "", "the first row of a level book names its line")
            place = f"{cells.rows.file}:{cells.rows.lines[i]}"
            if name in seen:
                cells.fault(i, "line", name, f"a line of this name stands at {seen[name]} already; give it another")
            seen.setdefault(name, place)
            pieces.append((name, []))
        pieces[-1][1].append(i)
    return pieces


def _walk(cells: Cells, stations: tuple[str, ...], name: str, rows: list[int]) -> StaffLine:
    """The set-ups of one line, in the order of the book."""
    text = {sight: cells.text(sight) for sight in SIGHTS}
    opened: int | None = None
    ended: int | None = None
    shots: list[Shot] = []
    for i in rows:
        if not any(text[sight][i] for sight in SIGHTS) and cells.has("back") and cells.has("fore"):
            cells.fault(i, "back", "", "a row without a reading; fill back, intermediate or fore, or remove the row")
        if text["intermediate"][i]:
            shots += _intermediate(cells, i, opened, bool(text["back"][i] or text["fore"][i]))
        if text["fore"][i]:
            shots += _fore(cells, stations, i, opened)
            opened, ended = None, i
        if text["back"][i]:
            _check_back(cells, stations, i, opened, ended)
            opened = i
    if opened is not None:
        last = rows[-1]
        cells.fault(last, "fore", "", f"line {name} ends without a fore sight; the last reading of a line is one")
    _check_left_out(cells, rows, shots)
    return StaffLine(name, tuple(rows), tuple(shots))


def _intermediate(cells: Cells, i: int, opened: int | None, shared: bool) -> list[Shot]:
    if opened is not None and not shared:
        return [Shot(opened, i, False)]
    own = "another sight stands in this row; give the intermediate sight its own"
    hint = own if shared else "an intermediate sight before any back sight of its set-up"
    cells.fault(i, "intermediate", cells.text("intermediate")[i], hint)
    return []


def _fore(cells: Cells, stations: tuple[str, ...], i: int, opened: int | None) -> list[Shot]:
    if opened is None:
        cells.fault(
            i, "fore", cells.text("fore")[i], "a fore sight without a back sight before it; fill that back sight"
        )
        return []
    if stations[opened] and stations[opened] == stations[i]:
        hint = f"back and fore sight of one set-up stand on the same station; see line {cells.rows.lines[opened]}"
        cells.fault(i, "station", stations[i], hint)
        return []
    return [Shot(opened, i, True)]


def _check_back(cells: Cells, stations: tuple[str, ...], i: int, opened: int | None, ended: int | None) -> None:
    """A back sight stands where the fore sight before it stood, and only after one."""
    lines = cells.rows.lines
    if opened is not None:
        hint = (
            f"a back sight, but the set-up of line {lines[opened]} has no fore sight yet; fill it, or name a new line"
        )
        cells.fault(i, "back", cells.text("back")[i], hint)
    elif ended is not None and stations[i] and stations[ended] and stations[i] != stations[ended]:
        hint = (
            f"the fore sight before it stood on {stations[ended]} (line {lines[ended]}): the back sight stands there, "
            "too, or a new line begins"
        )
        cells.fault(i, "station", stations[i], hint)


def _check_left_out(cells: Cells, rows: list[int], shots: list[Shot]) -> None:
    """What is left out is a reading, and it stands in the row of its fore or intermediate sight."""
    ends = {shot.row for shot in shots}
    use = cells.text("use")
    for i in rows:
        if use[i].lower() == "no" and i not in ends and not cells.text("fore")[i] and not cells.text("intermediate")[i]:
            hint = "a reading is left out in the row of its fore or intermediate sight; say so there"
            cells.fault(i, "use", use[i], hint)


def total(values: Array) -> float:
    """The sum of what is there, exact to the last digit in any order."""
    return math.fsum(float(x) for x in values if not math.isnan(x))
