"""What the field book said, as arrays: stations, blocks of observations by table, groups of rows, clusters.

Everything is frozen and in metres and radians. One row is one observation of ``p`` parts (1 for a distance, 3 for a
weighted position); a part that was not given is NaN. A *scalar row* is one given part; scalar rows are numbered
through all blocks in the order of the book.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Bools = NDArray[np.bool_]

PARTS = ("east", "north", "height")
NEW, HELD, WEIGHTED, CHECK = 0, 1, 2, 3
ROLES = ("new", "held", "weighted", "check")


@dataclass(frozen=True)
class Stations:
    """The stations: names, known coordinates and their roles, and starting values.

    ``known``, ``known_sd`` and ``start`` are (n, 3) east, north, height with NaN where not given; ``role`` is (n, 3)
    of NEW, HELD, WEIGHTED, CHECK.
    """

    names: tuple[str, ...]
    known: Array
    known_sd: Array
    role: Ints
    start: Array

    def __len__(self) -> int:
        return len(self.names)

    @cached_property
    def index(self) -> dict[str, int]:
        """Number of each station by its name."""
        return {name: i for i, name in enumerate(self.names)}


@dataclass(frozen=True)
class Group:
    """An unknown shared by some rows: a set's orientation, the turn of a set of azimuths."""

    what: str
    of: str
    shared: bool
    """False: local, eliminated within its element. True: one bordered unknown of the whole network."""
    set: str = ""
    """The set's name as booked."""
    turns: bool = True
    """An angle that turning the network adds to; False: a pure number, such as a coefficient of refraction."""


@dataclass(frozen=True)
class Source:
    """One thing that the standard deviations of m rows are made of."""

    what: str
    sd: Array
    """(m,) its own, zero in rows without it."""
    linear: bool = False
    """Whether it adds to the other linear ones of its row before the squares are added."""
    counted: bool = False
    """Whether it becomes smaller with the number of readings meaned."""


@dataclass(frozen=True)
class Makeup:
    """What the standard deviations of m rows are made of: s^2 = (sum of the linear ones)^2 + squares of the others."""

    sources: tuple[Source, ...]
    count: Array
    """(m,) readings meaned, NaN where not told; the sources have it in them, as the following."""
    factor: float = 1.0
    """sd_factor of the table."""

    def cut(self, rows: Ints) -> Makeup:
        """That of ``rows`` alone."""
        return Makeup(tuple(replace(s, sd=s.sd[rows]) for s in self.sources), self.count[rows], self.factor)


@dataclass(frozen=True)
class Block:
    """The used rows of one table of one kind; m rows of p parts."""

    kind: str
    file: str
    stations: Ints
    """(m, c) station numbers in the order of the kind's station columns."""
    values: Array
    """(m, p) as reduced from the book; NaN where a part was not given or is not measured."""
    sd: Array
    """(m, p) standard deviations before adjustment."""
    group: Ints
    """(m,) number of the row's group unknown, -1 for none."""
    held: Bools
    """(m,) rows that are conditions without error."""
    line: Ints
    """(m,) physical line of the file where the row begins."""
    ids: tuple[str, ...] = ()
    """Given identifications, '' where none; empty when no row has one."""
    precision: tuple[str, ...] = ()
    """(m) label of the source of each row's standard deviation: an instrument's name or 'sd'."""
    setup: Ints = field(default_factory=lambda: np.empty(0, dtype=np.int64))
    """(m,) number of the set-up each row was read in, through the whole job."""
    eccentric: Array | None = None
    """(m, 3) standard deviations in metres of centring, of the target, and of heights; None: all zero."""
    surface: str = ""
    """Where lengths are reduced to: '' the plane itself, ground, ground-from, slope."""
    above: Array | None = None
    """(m, 2) heights of instrument and target above their marks, metres; None: all zero."""
    offset: Array | None = None
    """(m, 2) how far the target stood beyond its mark and to the right of it, seen from the instrument, metres."""
    constant: Array | None = None
    """(m,) value of the group unknown for rows without one (a fixed refraction coefficient); None: zero."""
    walked: Array | None = None
    """(m, 2) length in metres and number of set-ups of levelled lines, NaN where not booked; None: not of this kind."""
    corrections: tuple[tuple[str, Array], ...] = ()
    """Name and amount (m,) of every correction between the booked value and ``values``."""
    booked: tuple[str, ...] = ()
    """Columns of the file that hold the values as booked; empty: the kind's own."""
    booked_at: Ints | None = None
    """(m, k) lines of the texts in the k columns ``booked`` where a value is a difference of several rows, 0 where
    a column takes no part; None: all stand in the line of the row."""
    booked_join: str = " - "
    """Between these texts: a level's set-up is back - fore, a pointing is the readings of both faces."""
    makeup: Makeup | None = None
    """What ``sd`` is made of; None for coordinates and settings, which tell it themselves."""
    labels: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    """(m) names by what they are of: instrument, reflector, day, crew; '' where not told, no key where none is."""

    def __len__(self) -> int:
        return len(self.line)

    def label(self, of: str, i: int) -> str:
        """Name of the instrument, reflector, day or crew of row ``i``; '' where not told."""
        return self.labels[of][i] if of in self.labels else ""

    def take(self, rows: Ints) -> Block:
        """The block with ``rows`` alone, any number of times, for a closer look at their geometry."""

        def cut(values: Array | None) -> Array | None:
            return None if values is None else values[rows]

        return replace(
            self, stations=self.stations[rows], values=self.values[rows], sd=self.sd[rows], group=self.group[rows],
            held=self.held[rows], line=self.line[rows], above=cut(self.above), offset=cut(self.offset),
            constant=cut(self.constant), eccentric=None, walked=cut(self.walked),
            makeup=self.makeup.cut(rows) if self.makeup else None,
        )  # fmt: skip

    def kept(self, rows: Ints) -> Block:
        """The block with ``rows`` alone, everything they carry included."""

        def cut(values: Array | None) -> Array | None:
            return None if values is None else values[rows]

        return replace(
            self, stations=self.stations[rows], values=self.values[rows], sd=self.sd[rows], group=self.group[rows],
            held=self.held[rows], line=self.line[rows], ids=_taken(self.ids, rows),
            precision=_taken(self.precision, rows), setup=self.setup[rows] if len(self.setup) else self.setup,
            eccentric=cut(self.eccentric), above=cut(self.above), offset=cut(self.offset), constant=cut(self.constant),
            walked=cut(self.walked), corrections=tuple((name, amount[rows]) for name, amount in self.corrections),
            booked_at=None if self.booked_at is None else self.booked_at[rows],
            labels={of: _taken(names, rows) for of, names in self.labels.items()},
        )  # fmt: skip

    def name(self, i: int) -> str:
        """Identification of row ``i``: the given one, else FILE:LINE."""
        return (self.ids[i] if self.ids else "") or f"{self.file}:{self.line[i]}"


def _taken(names: tuple[str, ...], rows: Ints) -> tuple[str, ...]:
    return tuple(names[i] for i in rows.tolist()) if names else names


@dataclass(frozen=True)
class Cluster:
    """Scalar rows with a common full covariance: ``rows`` (k,) and ``covariance`` (k, k) in squared SI units."""

    rows: Ints
    covariance: Array


@dataclass(frozen=True)
class Network:
    """All of what was said, ready to be solved."""

    stations: Stations
    blocks: tuple[Block, ...]
    groups: tuple[Group, ...] = ()
    clusters: tuple[Cluster, ...] = ()
    pairs: Ints = field(default_factory=lambda: np.empty((0, 2), dtype=np.int64))
    """(k, 2) station pairs whose relative precision is wanted beside the observed lines."""

    @cached_property
    def rows(self) -> Rows:
        """The numbering of the scalar rows."""
        return Rows.of(self.blocks)


def renumbered(clusters: tuple[Cluster, ...], kept: Bools) -> tuple[Cluster, ...]:
    """Clusters on the numbers that the kept scalar rows have once the others are gone."""
    number = np.cumsum(kept) - 1
    out = []
    for cluster in clusters:
        here = kept[cluster.rows]
        if here.any():
            out.append(Cluster(number[cluster.rows[here]], cluster.covariance[np.ix_(here, here)]))
    return tuple(out)


@dataclass(frozen=True)
class Rows:
    """Scalar rows: block, row in the block and part of each, all (R,)."""

    block: Ints
    row: Ints
    part: Ints

    def of_block(self, b: int, m: int) -> Ints:
        """(m,) number of the first given part of every row of block ``b``, -1 where it has none."""
        out = np.full(m, -1, dtype=np.int64)
        here = np.flatnonzero(self.block == b)[::-1]
        out[self.row[here]] = here
        return out

    @classmethod
    def of(cls, blocks: tuple[Block, ...]) -> Rows:
        """Number every given part of every row, in the order of the book."""
        block, row, part = [np.empty(0, np.int64)], [np.empty(0, np.int64)], [np.empty(0, np.int64)]
        for b, one in enumerate(blocks):
            i, p = np.nonzero(~np.isnan(one.sd))
            block.append(np.full(len(i), b))
            row.append(i)
            part.append(p)
        return cls(np.concatenate(block), np.concatenate(row), np.concatenate(part))

    def __len__(self) -> int:
        return len(self.block)
