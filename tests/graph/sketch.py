"""Small networks drawn by hand: exact readings between true places, straight to a Network without files."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from adjust.frames import RADIUS_M
from adjust.kinds import KINDS
from adjust.network import CHECK, HELD, NEW, WEIGHTED, Array, Block, Group, Network, Stations

ROLE = {"held": HELD, "weighted": WEIGHTED, "check": CHECK}


class Sketch:
    """Stations at true places (east, north, height) and the readings between them, in the order they are said."""

    def __init__(self, **places: tuple[float, ...]) -> None:
        self.names = tuple(places)
        self.truth = np.array([(*p, 0.0)[:3] for p in places.values()], dtype=float)
        self.readings: dict[tuple[str, str], list[tuple[tuple[int, ...], float, int, tuple[float, float]]]] = {}
        self.groups: list[Group] = []

    def number(self, name: str) -> int:
        return self.names.index(name)

    def azimuth(self, i: str, j: str) -> float:
        d = self.truth[self.number(j)] - self.truth[self.number(i)]
        return math.atan2(d[0], d[1])

    def _say(self, kind: str, ends: Sequence[str], value: float, group: int = -1, surface: str = "",
             above: tuple[float, float] = (0.0, 0.0)) -> Sketch:  # fmt: skip
        row = (tuple(self.number(e) for e in ends), value, group, above)
        self.readings.setdefault((kind, surface), []).append(row)
        return self

    def distances(self, *lines: str, wrong: float = 0.0) -> Sketch:
        """Lines like "A-B"; ``wrong`` is added to each."""
        for line in lines:
            i, j = line.split("-")
            d = math.dist(self.truth[self.number(i), :2], self.truth[self.number(j), :2])
            self._say("distance", (i, j), d + wrong)
        return self

    def slope(self, i: str, j: str, above: tuple[float, float] = (0.0, 0.0)) -> Sketch:
        """A slope distance between points above the marks."""
        rise = self.truth[self.number(j), 2] + above[1] - self.truth[self.number(i), 2] - above[0]
        flat = math.dist(self.truth[self.number(i), :2], self.truth[self.number(j), :2])
        chord = math.hypot(flat, rise - flat**2 / (2 * RADIUS_M))
        return self._say("distance", (i, j), chord, surface="slope", above=above)

    def zenith(self, i: str, j: str, above: tuple[float, float] = (0.0, 0.0), kind: str = "zenith_sketch") -> Sketch:
        """A zenith angle between points above the marks."""
        rise = self.truth[self.number(j), 2] + above[1] - self.truth[self.number(i), 2] - above[0]
        flat = math.dist(self.truth[self.number(i), :2], self.truth[self.number(j), :2])
        return self._say(kind, (i, j), math.atan2(flat, rise - flat**2 / (2 * RADIUS_M)), above=above)

    def sets(self, *sets: str, wrong: dict[str, float] | None = None) -> Sketch:
        """Sets like "A: B C D", each with an orientation of its own; ``wrong`` is added to the readings to a target."""
        for one in sets:
            at, targets = one.split(":")
            zero = 0.7 + 1.3 * len(self.groups)
            self.groups.append(Group("orientation", at, False))
            for to in targets.split():
                value = self.azimuth(at, to) - zero + (wrong or {}).get(to, 0.0)
                self._say("direction", (at, to), value % (2 * math.pi), len(self.groups) - 1)
        return self

    def angles(self, *angles: str) -> Sketch:
        """Angles like "A: B C", clockwise from B to C."""
        for one in angles:
            at, targets = one.split(":")
            first, second = targets.split()
            value = (self.azimuth(at, second) - self.azimuth(at, first)) % (2 * math.pi)
            self._say("angle", (at, first, second), value)
        return self

    def azimuths(self, *lines: str, turn: float | None = None) -> Sketch:
        """Azimuths of lines like "A-B", true to north or, as one set, less a common ``turn``."""
        group = -1
        if turn is not None:
            group = len(self.groups)
            self.groups.append(Group("turn", "needle", True))
        for line in lines:
            i, j = line.split("-")
            self._say("azimuth", (i, j), (self.azimuth(i, j) - (turn or 0.0)) % (2 * math.pi), group)
        return self

    def rises(self, *lines: str, wrong: float = 0.0) -> Sketch:
        """Levelled lines like "A-B"."""
        for line in lines:
            i, j = line.split("-")
            self._say("levelled", (i, j), self.truth[self.number(j), 2] - self.truth[self.number(i), 2] + wrong)
        return self

    def network(self, known: str = "", rows: str = "", role: str = "held", heights: str = "",
                shift: dict[str, tuple[float, float]] | None = None) -> Network:  # fmt: skip
        """The network with ``known`` marks, `stations` ``rows``, known ``heights``; ``shift`` spoils given places."""
        n = len(self.names)
        start, roles = np.full((n, 3), np.nan), np.full((n, 3), NEW)
        for name in [*known.split(), *rows.split()]:
            i = self.number(name)
            start[i, :2] = self.truth[i, :2] + (shift or {}).get(name, (0.0, 0.0))
            roles[i, :2] = ROLE[role] if name in known.split() else NEW
        for name in heights.split():
            start[self.number(name), 2] = self.truth[self.number(name), 2]
            roles[self.number(name), 2] = HELD
        known_places = np.where(roles == NEW, np.nan, start)
        stations = Stations(self.names, known_places, np.full((n, 3), 0.01), roles, start)
        blocks = [_block(kind, surface, rows_) for (kind, surface), rows_ in self.readings.items()]
        return Network(stations, tuple(blocks), tuple(self.groups))


def _block(kind: str, surface: str, rows: list[tuple[tuple[int, ...], float, int, tuple[float, float]]]) -> Block:
    m = len(rows)
    assert kind in KINDS
    above: Array = np.array([r[3] for r in rows], dtype=float)
    return Block(
        kind, f"{kind}s.csv", np.array([r[0] for r in rows]), np.array([[r[1]] for r in rows]), np.full((m, 1), 1e-3),
        np.array([r[2] for r in rows]), np.zeros(m, dtype=bool), np.arange(2, m + 2), surface=surface, above=above,
    )  # fmt: skip
