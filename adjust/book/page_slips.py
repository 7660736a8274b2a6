"""Where a page sum can have gone wrong: the everyday slips that would explain the difference exactly.

The amount is the sum of the readings in the table minus the sum as booked. Tried are: a reading left out of the sum or
added twice, a reading in another column of the page, the two readings of a row in each other's column, two neighbouring
digits swapped in a reading, and a whole step of one digit (a slip of adding, or a digit misread). The list is common
practice; a hint is no proof.
"""

from __future__ import annotations

import math
import re
from itertools import pairwise

from adjust.book.level_lines import SIGHTS, StaffTable
from adjust.units import LENGTHS, BadValue, parse_length

SAME = 1e-6
_SUM = {
    "sum_back": "sum of back sights", "sum_intermediate": "sum of intermediate sights",
    "sum_fore": "sum of fore sights", "sum_rise": "sum of rises", "sum_fall": "sum of falls",
}  # fmt: skip
MOST = 3
"""Readings named for one sum."""


def explain(table: StaffTable, rows: list[int], off: dict[str, float], place: str) -> str:
    """One sentence on sums that differ, ``off`` by key in metres: table minus booked."""
    return f"{place} does not add up: " + "; ".join(
        f"the readings give {_amount(table, amount)} {'more' if amount > 0 else 'less'} than the booked "
        f"{_SUM[key]}{_where(table, rows, key, amount, off)}"
        for key, amount in off.items()
    ) + "."  # fmt: skip


def _amount(table: StaffTable, metres: float) -> str:
    unit = table.cells.table.units.length
    return f"{abs(metres) / LENGTHS[unit]:.{_places(table)}f} {unit}"


def _places(table: StaffTable) -> int:
    """Most decimals of any reading, three at least."""
    texts = (text for sight in SIGHTS for text in table.cells.text(sight))
    return max([3, *(len(re.sub(r"^[^.,]*[.,]?|[^\d.,].*$", "", text)) for text in texts)])


def _where(table: StaffTable, rows: list[int], key: str, amount: float, off: dict[str, float]) -> str:
    sight = key.removeprefix("sum_")
    if sight not in SIGHTS:
        return ""
    found = _moved(table, rows, sight, amount, off) or _readings(table, rows, sight, amount)
    if found:
        return f" (perhaps {' or '.join(found[:MOST])})"
    return " (a step of one digit: a slip of adding, or a digit misread)" if _round_step(table, amount) else ""


def _readings(table: StaffTable, rows: list[int], sight: str, amount: float) -> list[str]:
    """Readings of the column that explain the amount."""
    out = []
    for i in rows:
        text, value = table.cells.text(sight)[i], float(table.reading[sight][i])
        if math.isnan(value):
            continue
        where = f"{text} in line {table.place(i)}"
        if abs(value - amount) < SAME:
            out.append(f"{where} was not added")
        elif abs(value + amount) < SAME:
            out.append(f"{where} was added twice")
        for other in _swapped(text):
            if abs(value - _read(table, other) - amount) < SAME:
                out.append(f"{where} is {other} in the book")
    return out


def _moved(table: StaffTable, rows: list[int], sight: str, amount: float, off: dict[str, float]) -> list[str]:
    """A reading that stands in another column than in the book: as much is missing there as is too much here."""
    out = []
    for other in SIGHTS:
        opposite = off.get(f"sum_{other}", 0.0)
        if other == sight or abs(opposite + amount) > SAME:
            continue
        here, there = (sight, other) if amount > 0 else (other, sight)
        for i in rows:
            if abs(float(table.reading[here][i]) - abs(amount)) < SAME:
                where = f"{table.cells.text(here)[i]} in line {table.place(i)}"
                out.append(f"{where} stands under {there} in the book")
        out += _exchanged(table, rows, (sight, other), amount)
    return out


def _exchanged(table: StaffTable, rows: list[int], columns: tuple[str, str], amount: float) -> list[str]:
    """Two readings of one row that stand in each other's column."""
    out = []
    for i in rows:
        here, there = (float(table.reading[column][i]) for column in columns)
        if abs(here - there - amount) < SAME:
            texts = " and ".join(table.cells.text(column)[i] for column in columns)
            out.append(f"{texts} in line {table.place(i)} stand in each other's column")
    return out


def _swapped(text: str) -> list[str]:
    """The text with two neighbouring digits swapped, every way that changes it."""
    digits = [k for k, c in enumerate(text) if c.isdigit()]
    out = []
    for a, b in pairwise(digits):
        if text[a] != text[b]:
            out.append(text[:a] + text[b] + text[a + 1 : b] + text[a] + text[b + 1 :])
    return out


def _read(table: StaffTable, text: str) -> float:
    units = table.cells.table.units
    try:
        return parse_length(text, units.length, units.decimal)
    except BadValue:
        return math.nan


def _round_step(table: StaffTable, amount: float) -> bool:
    """Whether the amount is one digit at one decimal place, as in 0.300."""
    size = abs(amount) / LENGTHS[table.cells.table.units.length]
    return len(f"{size:.{_places(table)}f}".replace(".", "").strip("0")) == 1
