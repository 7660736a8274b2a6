"""Which sights, legs and bearings there are in the plane, by station: scalar rows only, no values.

A *turned angle* at a station is known in *ways*. A way is a sum of signed terms, and a term is the mean of some rows:
an angle reading is one term; two readings of a set are the fore one less the back one.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import product

import numpy as np

from adjust.kinds import KINDS
from adjust.network import Block, Bools, Ints, Network

Term = tuple[tuple[int, ...], int]
"""Scalar rows of which the mean is taken, and the sign."""
Way = tuple[Term, ...]
Pair = tuple[int, int]


def known_places(network: Network) -> Bools:
    """Stations (n,) with a known east and north: held, weighted or to be checked."""
    return np.asarray(~np.isnan(network.stations.known[:, :2]).any(axis=1))


@dataclass
class Sights:
    """Legs, sets, angles and bearings of a network."""

    legs: dict[Pair, list[int]] = field(default_factory=dict)
    """Rows of the lengths between two stations, the lower one first."""
    sets: dict[int, dict[int, dict[int, list[int]]]] = field(default_factory=dict)
    """By station, by set (group unknown): rows of each target."""
    angles: dict[int, dict[Pair, list[int]]] = field(default_factory=dict)
    """By station: rows of each (first, second)."""
    bearings: dict[Pair, list[int]] = field(default_factory=dict)
    """Rows of the bearings from a station to another, true to the network's north."""

    @classmethod
    def of(cls, network: Network) -> Sights:
        """Read them off the blocks by what their kinds say."""
        out = cls()
        for b, block in enumerate(network.blocks):
            kind = KINDS[block.kind]
            if kind.says not in ("length", "pointings"):
                continue
            rows = network.rows.of_block(b, len(block))
            if kind.says == "length":
                for (i, j), row in zip(_ends(block, kind.sights[0]), rows.tolist(), strict=True):
                    out.legs.setdefault((min(i, j), max(i, j)), []).append(row)
            elif len(kind.sights) == 2:
                out._angles(block, kind.sights, rows)
            else:
                out._pointings(block, kind.sights[0], rows)
        return out

    def _angles(self, block: Block, sights: tuple[Pair, ...], rows: Ints) -> None:
        for (at, first), (_, second), row in zip(
            _ends(block, sights[0]), _ends(block, sights[1]), rows.tolist(), strict=True
        ):
            self.angles.setdefault(at, {}).setdefault((first, second), []).append(row)

    def _pointings(self, block: Block, sight: Pair, rows: Ints) -> None:
        for (at, to), group, row in zip(_ends(block, sight), block.group.tolist(), rows.tolist(), strict=True):
            if group < 0:
                self.bearings.setdefault((at, to), []).append(row)
            else:
                self.sets.setdefault(at, {}).setdefault(group, {}).setdefault(to, []).append(row)

    def targets(self, at: int) -> list[int]:
        """Stations sighted in a set or an angle at a station, in order."""
        found = {to for one in self.sets.get(at, {}).values() for to in one}
        return sorted(found | {i for pair in self.angles.get(at, {}) for i in pair})

    def ways(self, at: int, back: int, fore: int) -> tuple[Way, ...]:
        """Ways to the angle at a station clockwise from back to fore, through a third target if need be."""
        found = self._direct(at, back, fore)
        if found or back == fore:
            return found
        for third in self.targets(at):
            if third not in (back, fore):
                first, second = self._direct(at, back, third), self._direct(at, third, fore)
                if first and second:
                    return tuple((*a, *b) for a, b in product(first, second))
        return ()

    def _direct(self, at: int, back: int, fore: int) -> tuple[Way, ...]:
        found: list[Way] = [
            ((tuple(one[fore]), 1), (tuple(one[back]), -1))
            for one in self.sets.get(at, {}).values()
            if back in one and fore in one
        ]
        angles = self.angles.get(at, {})
        found += [(((row,), 1),) for row in angles.get((back, fore), ())]
        found += [(((row,), -1),) for row in angles.get((fore, back), ())]
        return tuple(found)

    def line_rows(self, i: int, j: int) -> tuple[int, ...]:
        """Rows of the bearings of a line, read at either end."""
        return (*self.bearings.get((i, j), ()), *self.bearings.get((j, i), ()))


def _ends(block: Block, sight: Pair) -> list[Pair]:
    return [(int(i), int(j)) for i, j in block.stations[:, list(sight)].tolist()]


def rows_of(ways: tuple[Way, ...]) -> tuple[int, ...]:
    """The scalar rows of some ways, ascending."""
    return tuple(sorted({row for way in ways for rows, _ in way for row in rows}))
