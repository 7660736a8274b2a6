"""Starting values from the readings: polar steps in the plane, chains of rises in height.

A kind says what it tells: a length, pointings (circle readings with a common orientation), a rise. From a known
station and an oriented set, a pointing with a length places the target; two known ends orient a set. Where nothing is
known of a connected piece, its first station stands at the origin with its first set (or first length) pointing north.
"""

from __future__ import annotations

import math
from collections import defaultdict, deque
from dataclasses import dataclass

import numpy as np

from adjust.frames import RADIUS_M
from adjust.graph.parts import HEIGHT, PLANE, find_parts, listed
from adjust.kinds import KINDS
from adjust.network import HELD, Array, Block, Network


@dataclass(frozen=True)
class Start:
    """Starting positions (n, 3), NaN where nothing is asked of a component; group values (g,); sentences of failure."""

    positions: Array
    groups: Array
    failures: tuple[str, ...]
    assumed: tuple[str, ...]
    """Stations set at an origin of the program's choice, for the record."""


class _Pointings:
    """Circle readings of all kinds alike: at, to, reading and the set that orients them."""

    def __init__(self, network: Network) -> None:
        self.at: list[int] = []
        self.to: list[int] = []
        self.reading: list[float] = []
        self.set: list[int] = []
        self.orientation: list[float] = [math.nan] * len(network.groups)
        self.lengths: dict[tuple[int, int], float] = {}
        zeniths = _sines(network)
        for block in network.blocks:
            says = KINDS[block.kind].says
            if says == "pointings":
                self._pointings(block)
            elif says == "length":
                for (i, j), d in zip(block.stations.tolist(), block.values[:, 0].tolist(), strict=True):
                    level = d * zeniths.get((min(i, j), max(i, j)), 1.0) if block.surface == "slope" else d
                    self.lengths.setdefault((min(i, j), max(i, j)), level)

    def _pointings(self, block: Block) -> None:
        sights = KINDS[block.kind].sights
        for stations, value, group in zip(
            block.stations.tolist(), block.values[:, 0].tolist(), block.group.tolist(), strict=True
        ):
            if group < 0:
                group = len(self.orientation)
                self.orientation.append(0.0 if len(sights) == 1 else math.nan)
            for k, (i, j) in enumerate(sights):
                self.at.append(stations[i])
                self.to.append(stations[j])
                self.reading.append(value if k == len(sights) - 1 else 0.0)
                self.set.append(group)


def _sines(network: Network) -> dict[tuple[int, int], float]:
    """Sine of the zenith angle of every line that has one: it brings a slope distance to level."""
    return {
        (min(i, j), max(i, j)): math.sin(z)
        for block in network.blocks
        if KINDS[block.kind].says == "zenith"
        for (i, j), z in zip(block.stations.tolist(), block.values[:, 0].tolist(), strict=True)
    }


class _Plane:
    """Spread known positions by polar steps, first come first served, in the order of the book."""

    def __init__(self, network: Network, positions: Array) -> None:
        self.p = _Pointings(network)
        self.xy: dict[int, tuple[float, float]] = {
            i: (e, n) for i, (e, n, _) in enumerate(positions.tolist()) if not (math.isnan(e) or math.isnan(n))
        }
        self.of_station: dict[int, list[int]] = defaultdict(list)
        self.of_set: dict[int, list[int]] = defaultdict(list)
        for k, (at, to, one) in enumerate(zip(self.p.at, self.p.to, self.p.set, strict=True)):
            self.of_station[at].append(k)
            self.of_station[to].append(k)
            self.of_set[one].append(k)
        self.neighbours: dict[int, list[int]] = defaultdict(list)
        for i, j in self.p.lengths:
            self.neighbours[i].append(j)
            self.neighbours[j].append(i)
        self.queue: deque[int] = deque(self.xy)

    def spread(self) -> None:
        """Go on until nothing new is reached."""
        while self.queue:
            station = self.queue.popleft()
            for k in self.of_station[station]:
                self._orient(k)
                self._place(k)

    def _orient(self, k: int) -> None:
        p = self.p
        at, to, one = p.at[k], p.to[k], p.set[k]
        if not math.isnan(p.orientation[one]):
            return
        if at in self.xy and to in self.xy:
            self.orient(one, self._azimuth(at, to) - p.reading[k])
            return
        azimuth = self._azimuth_of_line(at, to)
        if azimuth is not None:
            self.orient(one, azimuth - p.reading[k])

    def _azimuth_of_line(self, at: int, to: int) -> float | None:
        """Azimuth of a line that an oriented set points along, from either end."""
        p = self.p
        for k in self.of_station[at]:
            orientation = p.orientation[p.set[k]]
            if not math.isnan(orientation) and {p.at[k], p.to[k]} == {at, to}:
                return orientation + p.reading[k] + (0.0 if p.at[k] == at else math.pi)
        return None

    def orient(self, one: int, value: float) -> None:
        """Give a set its orientation and use it."""
        self.p.orientation[one] = value
        for k in self.of_set[one]:
            self._place(k)

    def _azimuth(self, i: int, j: int) -> float:
        (e1, n1), (e2, n2) = self.xy[i], self.xy[j]
        return math.atan2(e2 - e1, n2 - n1)

    def _place(self, k: int) -> None:
        p = self.p
        at, to = p.at[k], p.to[k]
        azimuth = p.orientation[p.set[k]] + p.reading[k]
        length = p.lengths.get((min(at, to), max(at, to)))
        if length is None or math.isnan(azimuth) or (at in self.xy) == (to in self.xy):
            return
        known, new, sense = (at, to, 1.0) if at in self.xy else (to, at, -1.0)
        e, n = self.xy[known]
        self.put(new, e + sense * length * math.sin(azimuth), n + sense * length * math.cos(azimuth))

    def put(self, station: int, east: float, north: float) -> None:
        """Make a station known."""
        self.xy[station] = (east, north)
        self.queue.append(station)

    def begin(self, stations: list[int]) -> int | None:
        """Choose an origin or an orientation where a piece has none; the station at the origin, if one was set."""
        known = [i for i in stations if i in self.xy]
        origin = None
        if not known:
            origin = max(stations, key=lambda i: (len(self.of_station[i]), -i))
            self.put(origin, 0.0, 0.0)
            known = [origin]
        if len(known) == 1:
            for k in self.of_station[known[0]]:
                if math.isnan(self.p.orientation[self.p.set[k]]):
                    self.orient(self.p.set[k], -self.p.reading[k])
                    break
            else:
                self._along_length(known[0])
        return origin

    def _along_length(self, station: int) -> None:
        """Without any pointing the first length from the station runs north."""
        for other in self.neighbours[station]:
            if other not in self.xy:
                e, n = self.xy[station]
                self.put(other, e, n + self.p.lengths[min(station, other), max(station, other)])
                break


def find_start(network: Network) -> Start:
    """Starting values for every component that a reading asks for, from control, `stations` and the readings."""
    parts = find_parts(network)
    asked = np.zeros((len(network.stations), 2), dtype=bool)
    for part in parts:
        asked |= part.nodes
    positions = network.stations.start.copy()
    failures: list[str] = []
    assumed: list[str] = []
    plane = _Plane(network, positions)
    plane.spread()
    for part in parts:
        stations = np.flatnonzero(part.nodes[:, PLANE]).tolist()
        if any(i not in plane.xy for i in stations):
            origin = plane.begin(stations)
            plane.spread()
            if origin is not None:
                assumed.append(network.stations.names[origin])
        missing = np.array([i for i in stations if i not in plane.xy], dtype=np.int64)
        if len(missing):
            failures.append(
                f"{listed(network, missing, 8)}: no chain of oriented pointings with distances leads there; "
                "give starting coordinates in stations.csv"
            )
    for i, (east, north) in plane.xy.items():
        positions[i, :2] = np.where(network.stations.role[i, :2] == HELD, positions[i, :2], (east, north))
    _heights(network, positions, asked[:, HEIGHT])
    positions[~asked[:, PLANE], :2] = np.nan
    positions[~asked[:, HEIGHT], 2] = np.nan
    return Start(positions, _orientations(network, plane), tuple(failures), tuple(assumed))


def _heights(network: Network, positions: Array, asked: np.ndarray) -> None:
    """Spread heights along rises; a piece without any known height starts at zero."""
    steps: dict[int, list[tuple[int, float]]] = defaultdict(list)
    for block in network.blocks:
        if KINDS[block.kind].says == "rise":
            for (i, j), rise in zip(block.stations.tolist(), block.values[:, 0].tolist(), strict=True):
                steps[i].append((j, rise))
                steps[j].append((i, -rise))
        elif KINDS[block.kind].says == "zenith":
            for i, j, rise in _rises(block, positions):
                steps[i].append((j, rise))
                steps[j].append((i, -rise))
    height = positions[:, 2]
    queue = deque(np.flatnonzero(~np.isnan(height)).tolist())
    for seed in [None, *np.flatnonzero(asked).tolist()]:
        if seed is not None and math.isnan(height[seed]):
            height[seed] = 0.0
            queue.append(seed)
        while queue:
            i = queue.popleft()
            for j, rise in steps[i]:
                if math.isnan(height[j]):
                    height[j] = height[i] + rise
                    queue.append(j)


def _rises(block: Block, positions: Array) -> list[tuple[int, int, float]]:
    """Height differences by zenith angles over the distances between starting positions: D cot z + D^2/2R."""
    above = np.zeros((len(block), 2)) if block.above is None else block.above
    start, end = block.stations.T
    d = np.hypot(*(positions[end, :2] - positions[start, :2]).T)
    rise = d / np.tan(block.values[:, 0]) + d**2 / (2 * RADIUS_M) + above[:, 0] - above[:, 1]
    return [(i, j, r) for i, j, r in zip(start.tolist(), end.tolist(), rise.tolist(), strict=True) if math.isfinite(r)]


def _orientations(network: Network, plane: _Plane) -> Array:
    values = plane.p.orientation[: len(network.groups)]
    return np.array([0.0 if math.isnan(v) else math.remainder(v, 2 * math.pi) for v in values], dtype=float)
