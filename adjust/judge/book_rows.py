"""Rows of a raw level book behind the lines of a closure: what an exchange of the two sights of a row would leave.

At a change point a row holds the fore sight f of one set-up and the back sight b of the next. Walked as booked the two
rises r1 = .. - f and r2 = b - .. hold b - f; with the two in each other's column they hold f - b instead, so the sum is
wrong by twice the b - f that stands there now; by b - f where only one of the set-ups is walked. Walked against the
book the sign turns.
"""

from __future__ import annotations

import math
from collections import defaultdict

from adjust.book.job import Job
from adjust.network import Array

SET_UP = "set-up"


def changes(job: Job, rows: tuple[int, ...], rises: Array) -> list[tuple[str, float]]:
    """Rows with both sights along a loop or run: place, and what their exchange would add to its misclosure in metres.

    ``rows`` are scalar rows of the legs, ``rises`` (k,) their values as walked.
    """
    if not any(block.booked_at is not None for block in job.network.blocks):
        return []
    sights = _both_sights(job)
    number = job.network.rows
    ways: dict[tuple[str, int], float] = defaultdict(float)
    for row, rise in zip(rows, rises.tolist(), strict=True):
        block, k = job.network.blocks[number.block[row]], int(number.row[row])
        if block.booked_at is not None:
            for line in block.booked_at[k, [0, -1]].tolist():
                ways[block.file, line] += math.copysign(1.0, rise) * math.copysign(1.0, block.values[k, 0])
    return [
        (f"{file}:{line}", way * (sights[file, line][0] - sights[file, line][1]))
        for (file, line), way in ways.items()
        if way and (file, line) in sights
    ]


def _both_sights(job: Job) -> dict[tuple[str, int], tuple[float, float]]:
    """Back and fore sight of the rows that hold both, by file and line."""
    back: dict[tuple[str, int], float] = {}
    fore: dict[tuple[str, int], float] = {}
    for one in job.reductions:
        if one.what == SET_UP:
            back[one.file, one.lines[0]] = one.values["back"] or 0.0
            fore[one.file, one.lines[-1]] = one.values["fore"] or 0.0
    return {place: (back[place], fore[place]) for place in back if place in fore}
