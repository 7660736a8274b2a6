"""The booking of a level book by both ways, and the checks of its pages.

Rise and fall: each reading against the one before it in its set-up; heights are the running sum. Height of collimation:
the height of the line of sight is the height of the back sight's station plus that reading; every other reading of the
set-up hangs from it. Both are of the readings as booked, without corrections, and in every line

    sum of back sights - sum of fore sights = sum of rises - sum of falls = last height - first height
    sum of all heights but the first = sum of (height of collimation x readings taken from it, back sights aside)
                                       - sum of intermediate sights - sum of fore sights

Textbook practice of every country that books levels by hand. What can fail is a sum that was booked in the field: it is
compared page by page, and the slips that would explain the difference are looked for.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from adjust.book.level_lines import SIGHTS, StaffLine, StaffTable, total
from adjust.book.observations import Observations
from adjust.book.page_slips import explain
from adjust.book.reductions import Reduction
from adjust.book.toml_lines import line_of
from adjust.network import Array

SAME = 1e-6
"""Metres within which two sums of the same readings agree: far below the last digit of any level."""


@dataclass(frozen=True)
class Booked:
    """Columns (n,) of the booking of one line, metres, NaN where a row has none."""

    rise: Array
    fall: Array
    sight: Array
    """Height of the line of sight, in rows of back sights."""
    height: Array
    """By rise and fall."""
    by_sight: Array
    """By the height of collimation."""


def book_line(table: StaffTable, line: StaffLine, start: float = 0.0) -> Booked:
    """The booking of one line by both ways, from the height of its first station."""
    n = len(table.cells)
    rise, fall, sight, height, by_sight = np.full((5, n), np.nan)
    here = there = start
    shots = {shot.row: shot for shot in line.shots}
    before, level = math.nan, math.nan
    for i in line.rows:
        if i in shots:
            reading = float(table.reading[shots[i].sight][i])
            step = before - reading
            rise[i], fall[i] = max(step, 0.0), max(-step, 0.0)
            here, there = here + step, level - reading
            before = reading
        height[i], by_sight[i] = here, there
        if not np.isnan(table.reading["back"][i]):
            before = float(table.reading["back"][i])
            level = sight[i] = there + before
    return Booked(rise, fall, sight, height, by_sight)


def _start(table: StaffTable, line: StaffLine, names: tuple[str, ...], known: dict[str, float]) -> float:
    """Height of the first station by the first known height of the line; 0 where none is known."""
    zero = book_line(table, line)
    for i in line.rows:
        if not math.isnan(known.get(names[i], math.nan)):
            return known[names[i]] - float(zero.height[i])
    return 0.0


def booking(table: StaffTable, names: tuple[str, ...], known: dict[str, float]) -> list[Reduction]:
    """The booking of every row by both ways, and the checks of every line."""
    out: list[Reduction] = []
    file = table.cells.rows.file
    for line in table.lines:
        start = _start(table, line, names, known)
        book = book_line(table, line, start)
        for i in line.rows:
            columns = {
                "rise": book.rise, "fall": book.fall, "height_of_collimation": book.sight, "height": book.height,
            }  # fmt: skip
            values = {name: _filled(column[i]) for name, column in columns.items()}
            out.append(Reduction("booking", f"{line.name}: {names[i]}", file, (table.place(i),), values, "length"))
        out.append(_line_check(table, line, book))
    return out


def _line_check(table: StaffTable, line: StaffLine, book: Booked) -> Reduction:
    rows = np.array(line.rows)
    back, intermediate, fore = (total(table.reading[sight][rows]) for sight in SIGHTS)
    hanging = [float(book.by_sight[shot.row] + table.reading[shot.sight][shot.row]) for shot in line.shots]
    ends = [shot.row for shot in line.shots]
    values: dict[str, float | None] = {
        "sum_back": back, "sum_intermediate": intermediate, "sum_fore": fore,
        "sum_rise": total(book.rise[rows]), "sum_fall": total(book.fall[rows]),
        "back_minus_fore": back - fore, "rise_minus_fall": _rise_to_the_end(book, line),
        "last_minus_first": float(book.by_sight[rows[-1]] - book.by_sight[rows[0]]),
        "sum_heights": total(book.height[ends]), "sum_heights_by_collimation": math.fsum(hanging) - intermediate - fore,
    }  # fmt: skip
    return Reduction("line check", line.name, table.cells.rows.file, _places(table, line.rows), values, "length")


def _rise_to_the_end(book: Booked, line: StaffLine) -> float:
    rows = np.array(line.rows)
    return total(book.rise[rows]) - total(book.fall[rows])


def page_checks(table: StaffTable) -> list[Reduction]:
    """The sums of every page, compared with those in the book where the job gives them."""
    sums = _sums(table)
    booked = table.cells.table.level.sums
    pages = list(dict.fromkeys(table.pages))
    whole = any("" in given for given in booked.values())
    out = [_page(table, sums, page, booked) for page in pages if page]
    if whole or pages == [""]:
        out.append(_page(table, sums, "", booked))
    return out


def _sums(table: StaffTable) -> dict[str, Array]:
    """Columns (n,) by the key of their sum."""
    books = [book_line(table, line) for line in table.lines]
    columns = {f"sum_{sight}": table.reading[sight] for sight in SIGHTS}
    for name in ("rise", "fall"):
        columns[f"sum_{name}"] = np.fmax.reduce([getattr(book, name) for book in books])
    return columns


def _page(table: StaffTable, sums: dict[str, Array], page: str, booked: dict[str, dict[str, float]]) -> Reduction:
    rows = [i for i in range(len(table.cells)) if not page or table.pages[i] == page]
    values: dict[str, float | None] = {key: total(column[rows]) for key, column in sums.items()}
    given = {key: pages[page] for key, pages in booked.items() if page in pages}
    off = {key: total(sums[key][rows]) - sum_ for key, sum_ in given.items()}
    for key, sum_ in given.items():
        values[f"booked_{key}"], values[f"difference_{key}"] = sum_, off[key]
    off = {key: amount for key, amount in off.items() if abs(amount) > SAME}
    verdict = ("not met" if off else "met") if given else ""
    place = f"{table.cells.rows.file}{f', page {page}' if page else ''}"
    sentence = explain(table, rows, off, place) if off else ""
    of = f"page {page}" if page else "the whole table"
    return Reduction(
        "page check", of, table.cells.rows.file, _places(table, tuple(rows)), values, "length", verdict, sentence
    )


def check_pages(observations: Observations, table: StaffTable) -> None:
    """A booked sum belongs to a page of the table; else it is a fault."""
    block, pages = table.cells.table, list(dict.fromkeys(table.pages))
    for key, given in block.level.sums.items():
        for page in given:
            if page and page not in pages:
                known = ", ".join(p for p in pages if p) or "none; add a column page"
                where = line_of(observations.settings.lines, f"{block.path}.{key}")
                observations.faults.add("job.toml", where, f"book.{key}", page, f"no such page; pages here: {known}")


def _places(table: StaffTable, rows: tuple[int, ...]) -> tuple[int, ...]:
    return tuple(table.place(i) for i in rows)


def _filled(x: float) -> float | None:
    return None if np.isnan(x) else float(x)
