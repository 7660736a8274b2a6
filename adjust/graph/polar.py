"""The quick start: polar steps from what is known, first come first served, in the order of the book.

Most jobs need no more. It knows nothing of blunders: the caller looks at the misfits and, where they are large, builds
the start again with care (adjust.graph.plane).
"""

from __future__ import annotations

import math
from collections import deque

from adjust.graph.clues import Clues, Pointing


class Polar:
    """Places spread by polar steps: ``at`` (east, north) by station and ``turn``, the orientations of the sets."""

    def __init__(self, clues: Clues, known: dict[int, tuple[float, float]]) -> None:
        n = len(clues.network.stations)
        self.at = dict(known)
        self.turn = [math.nan] * clues.sets
        self.turn[clues.north] = 0.0
        self.lengths: dict[tuple[int, int], float] = {}
        for one in clues.lengths:
            self.lengths.setdefault((min(one.i, one.j), max(one.i, one.j)), one.metres)
        self.of_station: list[list[Pointing]] = [[] for _ in range(n)]
        self.of_set: list[list[Pointing]] = [[] for _ in range(clues.sets)]
        for p in clues.pointings:
            self.of_station[p.at].append(p)
            self.of_station[p.to].append(p)
            self.of_set[p.set].append(p)
        self.queue: deque[int] = deque(self.at)

    def spread(self) -> None:
        """Go on until nothing new is reached."""
        while self.queue:
            for p in self.of_station[self.queue.popleft()]:
                if math.isnan(self.turn[p.set]):
                    self._orient(p)
                self._place(p)

    def begin(self, station: int, north: bool) -> None:
        """Put a station at the origin; where ``north`` its first pointing runs north."""
        self.at[station] = (0.0, 0.0)
        self.queue.append(station)
        if north:
            for p in self.of_station[station]:
                if p.at == station and math.isnan(self.turn[p.set]):
                    self.orient(p.set, -p.reading)
                    break

    def orient(self, one: int, turn: float) -> None:
        """Give a set its orientation and use it."""
        self.turn[one] = turn
        for p in self.of_set[one]:
            self._place(p)

    def _orient(self, p: Pointing) -> None:
        if p.at in self.at and p.to in self.at:
            (e1, n1), (e2, n2) = self.at[p.at], self.at[p.to]
            self.orient(p.set, math.atan2(e2 - e1, n2 - n1) - p.reading)
            return
        for q in self.of_station[p.at]:
            # another set, oriented already, points along the line from either end
            if not math.isnan(self.turn[q.set]) and {q.at, q.to} == {p.at, p.to}:
                azimuth = self.turn[q.set] + q.reading + (0.0 if q.at == p.at else math.pi)
                self.orient(p.set, azimuth - p.reading)
                return

    def _place(self, p: Pointing) -> None:
        if (p.at in self.at) == (p.to in self.at):
            return
        metres = self.lengths.get((min(p.at, p.to), max(p.at, p.to)))
        azimuth = self.turn[p.set] + p.reading
        if metres is None or math.isnan(azimuth):
            return
        known, new, sense = (p.at, p.to, metres) if p.at in self.at else (p.to, p.at, -metres)
        east, north = self.at[known]
        self.at[new] = (east + sense * math.sin(azimuth), north + sense * math.cos(azimuth))
        self.queue.append(new)
