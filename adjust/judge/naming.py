"""Readings called by their names, stations and booked values, and how far they are off, in the job's units."""

from __future__ import annotations

import math

from adjust.book.job import Job
from adjust.judge.readings import kind_word
from adjust.kinds import KINDS
from adjust.network import Block
from adjust.units import ANGLES, LENGTHS


def called(job: Job, block: Block, i: int) -> str:
    """'distances.csv:7 (distance A to B, 154.203 m)' of row ``i`` of a block."""
    names = [job.network.stations.names[s] for s in block.stations[i]]
    kind = KINDS[block.kind]
    ends = names[0] if len(names) == 1 else " to ".join(names) if len(names) == 2 else (
        f"{names[1]} to {names[2]} at {names[0]}")  # fmt: skip
    texts = job.booked(block.file).get(int(block.line[i]), ())
    booked = next((t for t in texts if t), "")
    units = next((t.units for t in job.tables if t.file == block.file), job.settings.units)
    unit = f" {units.length}" if kind.dimension == "length" and booked else ""
    return f"{block.name(i)} ({kind_word(block.kind)} {ends}{f', {booked}{unit}' if booked else ''})"


def amount(job: Job, block: Block, size: float) -> str:
    """A difference in metres or radians of a block's readings in the job's units, two figures, without its sign."""
    units, size = job.settings.units, abs(size)
    if KINDS[block.kind].dimension == "length":
        return f"{_two_figures(size / LENGTHS[units.length])} {units.length}"
    if units.angle in ("gon", "mil"):
        return f"{_two_figures(size / ANGLES[units.angle])} {units.angle}"
    degrees = math.degrees(size)
    if degrees >= 1:
        return f"{degrees:.0f} degrees"
    return f"{degrees * 60:.0f} minutes" if degrees * 60 >= 1 else f"{degrees * 3600:.0f} seconds"


def _two_figures(x: float) -> str:
    return f"{float(f'{x:.2g}'):g}"


def together(texts: list[str]) -> str:
    """'A, B and C'."""
    return " and ".join([", ".join(texts[:-1]), texts[-1]] if len(texts) > 1 else texts)
