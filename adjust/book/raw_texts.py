"""The texts of the book behind a reading, and by how much the reading changes with each of them.

A reading in a table of its own kind is one cell. A level's rise is its back sight minus its fore or intermediate sight;
a pointing of rounds is the mean of its faces (in the second face the zenith circle runs the other way); an angle of a
traverse turned to the left runs the other way too. So value = constant + sum of factor times parsed text.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

from adjust.book.cells import cell_parser
from adjust.book.schema import columns_of
from adjust.book.settings import Table, Units
from adjust.kinds import KINDS
from adjust.network import Block
from adjust.units import BadValue


class Tables(Protocol):
    """What is asked of a job: its tables and their cells by line (adjust.book.job.Job)."""

    @property
    def tables(self) -> tuple[Table, ...]:
        """Those of the job."""

    def booked(self, file: str, columns: tuple[str, ...] = ()) -> dict[int, tuple[str, ...]]:
        """The cells of a table by line."""


@dataclass(frozen=True)
class RawText:
    """One cell behind a reading."""

    text: str
    column: str
    line: int
    factor: float
    """Change of the reading for a change of the parsed text, both in SI units."""
    parse: Callable[[str], float]
    units: Units
    field_type: str
    """Type of its column: length, circle, bearing, course, zenith, elevation."""

    def change(self, other: str) -> float | None:
        """How much larger the reading is as booked than with ``other`` in this cell; None where that cannot be read."""
        try:
            return self.factor * (self.parse(self.text) - self.parse(other))
        except BadValue:
            return None


def raw_texts(job: Tables, block: Block, i: int) -> tuple[RawText, ...]:
    """The cells behind row ``i`` of a block; none for settings that are observations of their own."""
    table = next((t for t in job.tables if t.file == block.file), None)
    if table is None or not block.line[i]:
        return ()
    columns = block.booked or _values(table, block)
    if block.booked_at is None:
        texts = job.booked(block.file, columns)[int(block.line[i])]
        found = [(c, t, int(block.line[i])) for c, t in zip(columns, texts, strict=True) if t]
        factors = _turned(job, block, i) if table.kind == "traverse" and columns == ("angle",) else 1.0
        return tuple(_raw(table, c, t, line, factors) for c, t, line in found)
    by_line = job.booked(block.file, columns)
    at = [(k, int(line)) for k, line in enumerate(block.booked_at[i]) if line]
    found = [(columns[k], by_line[line][k], line) for k, line in at]
    factors_of = _sights if block.booked_join == " - " else _faces
    return tuple(
        _raw(table, c, t, line, f) for (c, t, line), f in zip(found, factors_of(job, block, found), strict=True)
    )


def _values(table: Table, block: Block) -> tuple[str, ...]:
    return KINDS[block.kind].value or ("east", "north", "height")


def _raw(table: Table, column: str, text: str, line: int, factor: float) -> RawText:
    field = next(f for f in columns_of(table.kind) if f.name == column)
    return RawText(text, column, line, factor, cell_parser(field, table.units), table.units, field.type)


def _turned(job: Tables, block: Block, i: int) -> float:
    """An angle turned to the left, or deflected to it, runs the other way."""
    (turn,) = job.booked(block.file, ("turn",))[int(block.line[i])]
    return -1.0 if turn.lower().endswith("left") else 1.0


def _sights(job: Tables, block: Block, found: list[tuple[str, str, int]]) -> list[float]:
    return [1.0 if column == "back" else -1.0 for column, _, _ in found]


def _faces(job: Tables, block: Block, found: list[tuple[str, str, int]]) -> list[float]:
    """A mean; the zenith circle of the second face runs the other way."""
    faces = job.booked(block.file, ("face",))
    turned = block.kind == "zenith_angle"
    second = [faces[line][0].lower() in ("2", "right") for _, _, line in found]
    return [(-1.0 if turned and two else 1.0) / len(found) for two in second]
