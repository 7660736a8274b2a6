"""CSV files as rows of text with the physical line of each (RFC 4180, with `#` comment lines).

The delimiter is the one of comma, semicolon and tab that the header holds most of outside quotes.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator
from dataclasses import dataclass

from adjust.book.faults import Faults


@dataclass(frozen=True)
class Rows:
    """A table as text: header names, and for every row its cells (padded to the header) and its line."""

    file: str
    header: tuple[str, ...]
    header_line: int
    cells: list[list[str]]
    lines: list[int]

    def column(self, name: str) -> list[str]:
        """The texts of a column, '' where the column is absent."""
        if name not in self.header:
            return [""] * len(self.cells)
        i = self.header.index(name)
        return [row[i] for row in self.cells]


_OPEN = 'a cell opens a quote (") and does not close it; close it, or remove it where seconds are meant'
_CSV_HINTS = {
    "unexpected": _OPEN,
    "field": _OPEN,  # a cell beyond all limits has swallowed the rest of the file
    "','": 'text follows a closing quote; write quotes inside a quoted cell twice ("")',
}
"""What to do about the complaints of the standard CSV reader, by their first word."""


class _Lines:
    """Physical lines for csv.reader: counts them, and drops comments and blanks, but only between records."""

    def __init__(self, text: str) -> None:
        self.source = io.StringIO(text, newline="")
        self.count = 0
        self.record_start = 0
        self.between = True

    def __iter__(self) -> Iterator[str]:
        for line in self.source:
            self.count += 1
            if self.between:
                if not line.strip() or line.lstrip().startswith("#"):
                    continue
                self.record_start = self.count
                self.between = False
            yield line


def read_rows(data: bytes, file: str, faults: Faults) -> Rows | None:
    """Rows of a CSV file; None where nothing can be read (the fault is noted)."""
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        shown = data.split(b"\n")[line - 1].decode("latin-1").strip()
        faults.add(file, line, "", shown, "not UTF-8; save the table as CSV in UTF-8")
        return None
    if "\0" in text:
        faults.add(file, text[: text.index("\0")].count("\n") + 1, "", "NUL", "not a text file; save the table as CSV")
        return None
    lines = _Lines(text)
    records: list[list[str]] = []
    starts: list[int] = []
    try:
        for record in csv.reader(iter(lines), delimiter=_delimiter(text), strict=True):
            lines.between = True
            records.append([cell.strip() for cell in record])
            starts.append(lines.record_start)
    except csv.Error as error:
        hint = _CSV_HINTS.get(str(error).partition(" ")[0], f"not CSV: {error}")
        shown = text.split("\n")[lines.record_start - 1].strip()
        faults.add(file, lines.record_start, "", shown, hint)
        return None
    if not records:
        faults.add(file, 1, "", "", "an empty table; it needs a header row")
        return None
    return _shape(file, records, starts, faults)


def _delimiter(text: str) -> str:
    header = next((ln for ln in text.splitlines() if ln.strip() and not ln.lstrip().startswith("#")), "")
    bare = re.sub(r'"[^"]*"', "", header)
    return max(",;\t", key=bare.count)


def _shape(file: str, records: list[list[str]], starts: list[int], faults: Faults) -> Rows:
    """Pad short rows with blanks; a longer row is a fault unless the surplus is blank."""
    header = records[0]
    while header and not header[-1]:
        header = header[:-1]
    width = len(header)
    cells, lines = [], []
    for record, line in zip(records[1:], starts[1:], strict=True):
        if not any(record):
            continue
        if any(record[width:]):
            hint = (
                f"the row has {len(record)} cells, the header {width}; a decimal comma, or text with the delimiter "
                "in it? Put such a cell in quotes, or delimit with semicolons"
            )
            faults.add(file, line, "", ",".join(record), hint)
        cells.append(record[:width] + [""] * (width - len(record)))
        lines.append(line)
    return Rows(file, tuple(header), starts[0], cells, lines)
