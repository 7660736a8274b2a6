"""Stadia wires: the length of a sight is 100 times their difference, and their half-sum checks the middle reading."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.book.cells import Cells
from adjust.book.reductions import Reduction
from adjust.network import Array
from adjust.units import LENGTHS, small_length

STADIA = 100.0
"""Metres of distance a metre of staff between the wires; the additive constant of levels with inner focusing is zero
(common practice)."""


@dataclass(frozen=True)
class Wires:
    """Upper, middle and lower wire of one sight, metres."""

    row: int
    side: str
    upper: float
    middle: float
    lower: float

    @property
    def length(self) -> float:
        """Of the sight, metres."""
        return STADIA * (self.upper - self.lower)

    @property
    def difference(self) -> float:
        """Half-sum of the wires minus the middle reading."""
        return (self.upper + self.lower) / 2 - self.middle


def wires_of(cells: Cells, side: str, middle: Array) -> list[Wires]:
    """The wires of all sights of a ``side`` whose middle readings (n,) are given; faults where they cannot be meant."""
    use = range(len(cells))
    columns = (f"{side}_upper", f"{side}_lower")
    upper, lower = (cells.values(column, use) for column in columns)
    texts = [cells.text(column) for column in columns]
    reading = cells.text(side)
    out = []
    for i in use:
        filled = [bool(text[i]) for text in texts]
        if not any(filled):
            continue
        if not all(filled):
            cells.fault(i, columns[filled.index(False)], "", "one wire without the other; fill it or remove the other")
        elif not reading[i]:
            cells.fault(i, side, "", "the wires of a sight without its middle reading; fill it")
        elif upper[i] <= lower[i] or not lower[i] <= middle[i] <= upper[i]:
            hint = f"the wires read {texts[0][i]}, {reading[i]}, {texts[1][i]}: upper, middle, lower must fall in order"
            cells.fault(i, columns[0], texts[0][i], hint)
        elif np.isfinite([upper[i], middle[i], lower[i]]).all():
            out.append(Wires(i, side, float(upper[i]), float(middle[i]), float(lower[i])))
    return out


def wire_reductions(cells: Cells, wires: tuple[Wires, ...], stations: tuple[str, ...]) -> list[Reduction]:
    """What the wires of every sight say, in the order of rows."""
    limit, unit = cells.table.level.wire_limit, cells.table.units.length
    out = []
    for w in sorted(wires, key=lambda w: (w.row, w.side)):
        met = abs(w.difference) <= limit + 1e-9  # readings are whole tenths of a millimetre at best
        line = cells.rows.lines[w.row]
        sentence = "" if met else _sentence(w, f"{cells.rows.file}:{line}", limit, unit)
        values: dict[str, float | None] = {
            "middle": w.middle, "half_sum": (w.upper + w.lower) / 2, "difference": w.difference, "limit": limit,
            "length": w.length,
        }  # fmt: skip
        of = f"{w.side} sight on {stations[w.row]}"
        out.append(
            Reduction("wires", of, cells.rows.file, (line,), values, "length", "met" if met else "not met", sentence)
        )
    return out


def _sentence(w: Wires, place: str, limit: float, unit: str) -> str:
    """The middle is off by the difference, or one wire by twice as much (its half counts in the half-sum)."""
    amount, twice = (small_length(abs(x), unit).lstrip("+") for x in (w.difference, 2 * w.difference))
    return (
        f"{place}: the half-sum of the wires of the {w.side} sight leaves the middle reading by {amount} (limit "
        f"{limit / LENGTHS['mm']:g} mm): the middle is misread by that, or one wire by {twice}."
    )
