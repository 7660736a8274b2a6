"""Which stations of a level book are marks of the job, and which change points are private to their line.

A name is lasting where another table says it, where it begins or ends a line, or where it is only an intermediate sight
of one line. Any other name belongs to its line alone, because change points are numbered anew in every line: TP1 of
line L1 is `L1/TP1`.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

from adjust.book.cells import Cells
from adjust.book.level_lines import StaffTable

_NUMBERED = re.compile(r"(?:tp|cp|t|c|turn|change)?[ ._-]*\d+[a-z]?", re.IGNORECASE)
"""Names that everyone gives to change points (common practice): a number with or without these letters."""
SHOWN = 6
"""Names listed in a sentence."""


def said_elsewhere(tables: Iterable[Cells], booked: dict[str, str]) -> set[str]:
    """Every station that a table other than a level book names; booked_names only renames."""
    names: set[str] = set()
    for cells in tables:
        if cells.table.kind in ("staff", "booked_names"):
            continue
        for field in cells.fields.values():
            if field.type == "station" and cells.has(field.name):
                names.update(booked.get(text, text) for text in cells.text(field.name))
    return names


def lasting_names(tables: Iterable[StaffTable], elsewhere: set[str]) -> tuple[set[str], list[str]]:
    """The lasting names of the level books, and sentences on names that stand in several lines and were kept apart."""
    ends: set[str] = set()
    inside: dict[str, list[str]] = {}
    changes: set[str] = set()
    for table in tables:
        for line in table.lines:
            ends |= {table.stations[line.rows[0]], table.stations[line.rows[-1]]}
            sides = {shot.row for shot in line.shots if not shot.fore}
            changes |= {table.stations[i] for i in line.rows if i not in sides}
            for name in dict.fromkeys(table.stations[i] for i in line.rows):
                inside.setdefault(name, []).append(line.name)
    kept = elsewhere | ends
    private = {n: lines for n, lines in inside.items() if n not in kept and (n in changes or len(lines) > 1)}
    shared = {n: lines for n, lines in private.items() if len(lines) > 1 and not _NUMBERED.fullmatch(n)}
    return (kept | set(inside)) - set(private), _warn(shared)


def _warn(shared: dict[str, list[str]]) -> list[str]:
    """What could be one mark and was taken as several."""
    if not shared:
        return []
    names = list(shared)
    more = f" and {len(names) - SHOWN} more" if len(names) > SHOWN else ""
    of = f"{', '.join(names[:SHOWN])}{more}"
    first = names[0]
    return [
        f"{of}: read in several lines ({first} in {' and '.join(shared[first])}), and taken as a change point of "
        "each line alone; if it is one mark, name it in stations.csv or control.csv."
    ]


def private(line: str, name: str) -> str:
    """The name through the job of a change point of one line."""
    return f"{line}/{name}"
