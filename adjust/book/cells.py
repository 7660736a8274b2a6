"""Columns of text turned into arrays; every cell that cannot be meant becomes a fault and NaN."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from adjust.book import schema
from adjust.book.csv_rows import Rows
from adjust.book.faults import Faults
from adjust.book.settings import Table, Units
from adjust.book.weather import AIR_TYPES, parse_air
from adjust.errors import nearest
from adjust.fields import Field
from adjust.network import Array
from adjust.units import (
    BadValue,
    parse_bearing,
    parse_circle,
    parse_course,
    parse_elevation,
    parse_length,
    parse_number,
    parse_sd,
    parse_zenith,
)

_ANGULAR = {"course": parse_course, "zenith": parse_zenith, "elevation": parse_elevation}


class Cells:
    """One table's cells by column, held against the schema; ``known_units`` False leaves values unread."""

    def __init__(self, rows: Rows, table: Table, faults: Faults, known_units: bool) -> None:
        self.rows, self.table, self.faults, self.known_units = rows, table, faults, known_units
        self.fields = {f.name: f for f in schema.columns_of(table.kind)}
        self._check_header()

    def __len__(self) -> int:
        return len(self.rows.cells)

    def _check_header(self) -> None:
        seen: set[str] = set()
        for name in self.rows.header:
            if name in seen:
                self.header_fault(name, name, "the column stands twice")
            elif name not in self.fields:
                self.header_fault(name or "(blank)", name, f"an unknown column; {nearest(name, self.fields)}")
            seen.add(name)
        for field in self.fields.values():
            if field.required and field.name not in seen:
                self.header_fault(field.name, "", f"a missing column: {field.meaning}")

    def header_fault(self, column: str, found: str, hint: str) -> None:
        """Note a fault of the header row."""
        self.faults.add(self.rows.file, self.rows.header_line, column, found, hint)

    def fault(self, i: int, column: str, found: str, hint: str) -> None:
        """Note a fault of row ``i``."""
        self.faults.add(self.rows.file, self.rows.lines[i], column, found, hint)

    def text(self, name: str) -> list[str]:
        """The column's texts."""
        return self.rows.column(name)

    def has(self, name: str) -> bool:
        """Whether the column is there."""
        return name in self.rows.header

    def choices(self, name: str, use: Sequence[int]) -> list[str]:
        """The column's choices in lower case, the default where blank."""
        field = self.fields[name]
        out = [str(field.default or "")] * len(self)
        if not self.has(name):
            return out
        texts = self.text(name)
        for i in use:
            value = texts[i].lower()
            if value and value not in field.choices:
                self.fault(i, name, texts[i], "use one of " + ", ".join(field.choices))
            elif value:
                out[i] = value
        return out

    def names(self, name: str, use: Sequence[int], booked: dict[str, str]) -> list[str]:
        """Station names of the column, booked names replaced; blanks and control characters are faults."""
        texts = self.text(name)
        if not self.has(name):
            return texts
        for i in use:
            if not texts[i]:
                self.fault(i, name, "", "a station's name is missing")
            elif not all(c.isprintable() for c in texts[i]):
                self.fault(i, name, texts[i], "a control or invisible character in the name; write it anew without")
        return [booked.get(t, t) for t in texts] if booked else texts

    def values(self, name: str, use: Sequence[int]) -> Array:
        """Values (n,) of the column for the rows ``use`` in SI units; NaN where blank or faulty."""
        out = np.full(len(self), np.nan)
        if not self.has(name) or not self.known_units:
            return out
        parse = cell_parser(self.fields[name], self.table.units)
        texts = self.text(name)
        for i in use:
            if not texts[i]:
                continue
            try:
                out[i] = parse(texts[i])
            except BadValue as bad:
                self.fault(i, name, texts[i], str(bad))
        return out

    def sds(self, name: str, dimension: str, use: Sequence[int]) -> Array:
        """Standard deviations (n,) in metres or radians of the rows ``use``; NaN where blank or faulty."""
        out = np.full(len(self), np.nan)
        if not self.has(name) or not self.known_units:
            return out
        units, texts = self.table.units, self.text(name)
        for i in use:
            if texts[i]:
                try:
                    out[i] = parse_sd(texts[i], dimension, getattr(units, dimension), units.decimal)
                except BadValue as bad:
                    self.fault(i, name, texts[i], str(bad))
        return out


def cell_parser(field: Field, units: Units) -> Callable[[str], float]:
    """What turns a cell of a column into SI units; it raises BadValue."""
    if field.type == "length":
        return lambda text: _bounded(parse_length(text, units.length, units.decimal), field)
    if field.type == "circle":
        return lambda text: parse_circle(text, units.angle, units.decimal)
    if field.type == "bearing":
        return lambda text: parse_bearing(text, units.angle, units.decimal)
    if field.type in AIR_TYPES:
        return lambda text: parse_air(field.type, text, units.decimal)
    if field.type in _ANGULAR:
        return lambda text: _ANGULAR[field.type](text, units.angle, units.decimal)
    return lambda text: _bounded(parse_number(text, units.decimal), field)


def _bounded(value: float, field: Field) -> float:
    if field.above is not None and not value > field.above:
        raise BadValue(f"must be above {field.above:g}")
    return value
