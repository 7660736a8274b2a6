"""Which readings are taken together where their standard deviations are judged: by instrument, day, crew, centring."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from adjust.network import Block, Ints
from adjust.solver.design import Design

INSTRUMENT, DAY, CREW, CENTRING = "instrument", "day", "crew", "centring"
PLURALS = {
    "levelled": "levelled lines",
    "control": "control coordinates",
    "refraction": "the coefficient of refraction",
}
"""Kinds whose plural is not their name with an s."""


@dataclass(frozen=True)
class Grouping:
    """Groups of readings: their names, and the group of every scalar row (R,), -1 for conditions."""

    by: str
    names: tuple[str, ...]
    of_row: Ints
    centring: bool = False
    """Whether all centring vectors are one more group, the last."""

    @property
    def count(self) -> int:
        """Number of groups, centring included."""
        return len(self.names) + self.centring

    @property
    def labels(self) -> tuple[str, ...]:
        """Names of all of them."""
        return (*self.names, CENTRING) if self.centring else self.names


def plural(kind: str) -> str:
    """'angles', 'levelled lines'."""
    return PLURALS.get(kind, kind.replace("_", " ") + "s")


def groupings(design: Design) -> tuple[Grouping, ...]:
    """Every grouping that the job tells: by instrument always, by day and crew where it has two names, centring."""
    blocks = design.network.blocks
    found = [by_instrument(design)]
    for of in (DAY, CREW):
        if len({name for b in blocks for name in b.labels.get(of, ()) if name}) > 1:
            found.append(_grouped(design, of, _when if of == DAY else _who))
    if design.vectors.any:
        found.append(Grouping(CENTRING, found[0].names, found[0].of_row, True))
    return tuple(found)


def by_instrument(design: Design) -> Grouping:
    """Kind and instrument; weighted coordinates of control marks are a group of their own."""
    return _grouped(design, INSTRUMENT, _with)


def _with(block: Block, i: int) -> str:
    name = block.label(INSTRUMENT, i)
    return f"{plural(block.kind)} of {name}" if name else plural(block.kind)


def _when(block: Block, i: int) -> str:
    name = block.label(DAY, i)
    return f"{plural(block.kind)} of the day {name}" if name else _plain(block, "day")


def _who(block: Block, i: int) -> str:
    name = block.label(CREW, i)
    return f"{plural(block.kind)} of the crew {name}" if name else _plain(block, "crew")


def _plain(block: Block, what: str) -> str:
    return f"{plural(block.kind)} without a {what}" if block.labels.get(what) else plural(block.kind)


def _grouped(design: Design, by: str, name: Callable[[Block, int], str]) -> Grouping:
    rows, blocks = design.network.rows, design.network.blocks
    numbers: dict[str, int] = {}
    of_row = np.full(len(rows), -1, dtype=np.int64)
    for r, (b, i) in enumerate(zip(rows.block.tolist(), rows.row.tolist(), strict=True)):
        if not design.held[r]:
            of_row[r] = numbers.setdefault(name(blocks[b], i), len(numbers))
    return Grouping(by, tuple(numbers), of_row)
