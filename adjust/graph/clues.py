"""What the readings of all kinds tell a starting computation: lengths, pointings, rises, zenith angles, positions.

Every clue remembers its *source*, the pair (block, row) it comes from, as one running number. A pointing belongs to a
*set*: the readings of a set and the azimuths of their lines differ by one orientation. The sets are the group unknowns
of the network, then north (azimuths without a turn: orientation 0), then one private set an angle, whose first sight
reads zero. Refraction is left out: 0.01 m at 1 km does not matter to a start.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from adjust.frames import RADIUS_M
from adjust.kinds import KINDS
from adjust.network import Array, Block, Network

Places = NDArray[np.complex128]
"""Places of all stations (n,) as east + i north, NaN where not known."""


class Length(NamedTuple):
    """A horizontal length ``i`` to ``j`` in metres; ``source`` numbers the reading."""

    i: int
    j: int
    metres: float
    source: int


class Pointing(NamedTuple):
    """A circle reading at ``at`` to ``to`` in radians, of a set."""

    at: int
    to: int
    reading: float
    set: int
    source: int


class Rise(NamedTuple):
    """Height of ``j`` minus height of ``i`` in metres; ``sure`` is False where an unreduced line went into it."""

    i: int
    j: int
    metres: float
    source: int
    sure: bool = True


@dataclass
class Clues:
    """All clues of a network, indexed by station, set and line."""

    network: Network
    lengths: list[Length] = field(default_factory=list)
    pointings: list[Pointing] = field(default_factory=list)
    rises: list[Rise] = field(default_factory=list)
    zeniths: list[tuple[int, int, float, float, int]] = field(default_factory=list)
    """(at, to, zenith angle, instrument minus target height, source)."""
    slopes: list[tuple[int, int, float, float, int]] = field(default_factory=list)
    """(at, to, slope distance, instrument minus target height, source)."""
    sources: list[tuple[int, int]] = field(default_factory=list)
    """(block, row) of every source."""
    sets: int = 0
    north: int = -1

    @classmethod
    def of(cls, network: Network) -> Clues:
        """Read the clues off the blocks, and reduce slope distances as far as heights are known."""
        clues = cls(network)
        clues.north = len(network.groups)
        clues.sets = clues.north + 1
        for b, block in enumerate(network.blocks):
            says = KINDS[block.kind].says
            first = len(clues.sources)
            clues.sources += [(b, row) for row in range(len(block))]
            if says == "pointings":
                clues._pointings(block, first)
            elif says in ("length", "rise", "zenith"):
                clues._lines(block, says, first)
        return clues

    def _pointings(self, block: Block, first: int) -> None:
        sights = KINDS[block.kind].sights
        constant = np.zeros(len(block)) if block.constant is None else block.constant
        for row, (stations, value, one, turn) in enumerate(
            zip(
                block.stations.tolist(),
                block.values[:, 0].tolist(),
                block.group.tolist(),
                constant.tolist(),
                strict=True,
            )
        ):
            if len(sights) == 1:
                i, j = sights[0]
                known = one < 0
                reading = value + turn if known else value
                self.pointings.append(
                    Pointing(stations[i], stations[j], reading, self.north if known else one, first + row)
                )
                continue
            for k, (i, j) in enumerate(sights):
                self.pointings.append(Pointing(stations[i], stations[j], value if k else 0.0, self.sets, first + row))
            self.sets += 1

    def _lines(self, block: Block, says: str, first: int) -> None:
        above = np.zeros((len(block), 2)) if block.above is None else np.nan_to_num(block.above)
        ends = block.stations[:, list(KINDS[block.kind].sights[0])].tolist()
        heights = (above[:, 0] - above[:, 1]).tolist()
        for row, ((i, j), value, up) in enumerate(zip(ends, block.values[:, 0].tolist(), heights, strict=True)):
            source = first + row
            if i == j or math.isnan(value):
                continue
            if says == "rise":
                self.rises.append(Rise(i, j, value, source))
            elif says == "zenith":
                self.zeniths.append((i, j, value, up, source))
            elif block.surface == "slope":
                self.slopes.append((i, j, value, up, source))
            else:
                self.lengths.append(Length(i, j, value, source))

    def reduce(self, height: Array, positions: Array | None = None) -> list[Rise]:
        """Reduce slope distances to ``lengths`` and zenith angles to rises, which are returned.

        A zenith angle on the line reduces a slope distance, else the heights (n,) of its ends, where they are known;
        else it stands as it is. A zenith angle needs a length on its line or ``positions`` (n, 3) of its ends.
        """
        of_line: dict[tuple[int, int], float] = {}
        for i, j, z, _, _ in self.zeniths:
            # seen from the instrument; from the other end the sign of the rise turns
            of_line[i, j] = z
            of_line.setdefault((j, i), math.pi - z)
        slope_lines: dict[tuple[int, int], float] = {}
        sources = {s[4] for s in self.slopes}
        self.lengths = [one for one in self.lengths if one.source not in sources]
        for i, j, slope, up, source in self.slopes:
            level = _level(slope, of_line.get((i, j)), float(height[j] - height[i]) - up)
            slope_lines[min(i, j), max(i, j)] = level
            self.lengths.append(Length(i, j, level, source))
        self.lengths.sort(key=lambda one: one.source)
        for one in self.lengths:
            slope_lines.setdefault((min(one.i, one.j), max(one.i, one.j)), one.metres)
        rises = []
        for i, j, z, up, source in self.zeniths:
            level = slope_lines.get((min(i, j), max(i, j)), math.nan)
            if math.isnan(level) and positions is not None:
                level = math.dist(positions[i, :2], positions[j, :2])
            if not math.isnan(level) and abs(math.sin(z)) > 1e-6:
                rises.append(Rise(i, j, level / math.tan(z) + level * level / (2 * RADIUS_M) + up, source))
        return rises


def _level(slope: float, zenith: float | None, rise: float) -> float:
    """Horizontal length of a slope distance by a zenith angle, else by the rise between its ends, else as it stands."""
    if zenith is not None:
        return abs(slope * math.sin(zenith))
    if math.isnan(rise) or abs(rise) >= slope:
        return slope
    return math.sqrt(slope * slope - rise * rise)


class Index:
    """The plane clues by station, line and set, without the sources in ``without``."""

    def __init__(self, clues: Clues, without: frozenset[int] = frozenset()) -> None:
        n = len(clues.network.stations)
        self.clues = clues
        self.lengths: list[list[tuple[int, float, int]]] = [[] for _ in range(n)]
        self.out: list[list[Pointing]] = [[] for _ in range(n)]
        self.into: list[list[Pointing]] = [[] for _ in range(n)]
        self.of_set: list[list[Pointing]] = [[] for _ in range(clues.sets)]
        self.of_line: dict[tuple[int, int], list[Pointing]] = {}
        self.near: list[dict[int, None]] = [{} for _ in range(n)]
        for one in clues.lengths:
            if one.source in without:
                continue
            self.lengths[one.i].append((one.j, one.metres, one.source))
            self.lengths[one.j].append((one.i, one.metres, one.source))
            self.near[one.i][one.j] = self.near[one.j][one.i] = None
        for p in clues.pointings:
            if p.source in without or p.at == p.to:
                continue
            self.out[p.at].append(p)
            self.into[p.to].append(p)
            self.of_set[p.set].append(p)
            self.of_line.setdefault((min(p.at, p.to), max(p.at, p.to)), []).append(p)
            self.near[p.at][p.to] = self.near[p.to][p.at] = None
        self.local = [len({p.at for p in members}) <= 1 for members in self.of_set]
        """Sets read at one station only."""
        self.local[clues.north] = False
        for s in range(len(clues.network.groups)):
            self.local[s] = self.local[s] and not clues.network.groups[s].shared

    def degree(self, station: int) -> int:
        """Number of plane clues that touch a station."""
        return len(self.lengths[station]) + len(self.out[station]) + len(self.into[station])
