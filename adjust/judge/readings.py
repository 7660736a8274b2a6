"""The readings at a station, counted and named as a surveyor would."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from adjust.graph.parts import row_nodes
from adjust.kinds import KINDS
from adjust.network import Ints, Network

NUMBERS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")
WORDS = {"direction": "pointing", "levelled": "levelled line"}


def number(n: int) -> str:
    """'three', or figures above ten."""
    return NUMBERS[n] if n < len(NUMBERS) else str(n)


def kind_word(kind: str) -> str:
    """Name of one reading of a kind."""
    return WORDS.get(kind, kind.replace("_", " "))


def counted(kinds: list[str]) -> str:
    """'one distance', 'two pointings and one distance'."""
    counts = Counter(kind_word(kind) for kind in kinds)
    parts = [f"{number(n)} {kind}{'s' if n > 1 else ''}" for kind, n in counts.items()]
    return "no reading" if not parts else parts[0] if len(parts) == 1 else ", ".join(parts[:-1]) + " and " + parts[-1]


@dataclass(frozen=True)
class Readings:
    """Which scalar rows touch which station."""

    network: Network

    @cached_property
    def _sorted(self) -> tuple[Ints, Ints]:
        rows, nodes = row_nodes(self.network)
        order = np.argsort(nodes, kind="stable")
        return nodes[order], rows[order]

    def at(self, station: int, component: int) -> list[int]:
        """Scalar rows that touch a station's plane (0) or height (1)."""
        nodes, rows = self._sorted
        first, last = np.searchsorted(nodes, [2 * station + component, 2 * station + component + 1])
        return list(dict.fromkeys(rows[first:last].tolist()))

    def kind(self, row: int) -> str:
        """Kind of a scalar row."""
        return str(self.network.blocks[self.network.rows.block[row]].kind)

    def stations(self, row: int) -> list[int]:
        """Stations of a scalar row in the order of the kind's columns."""
        block = self.network.blocks[self.network.rows.block[row]]
        return [int(i) for i in block.stations[self.network.rows.row[row]]]

    def group(self, row: int) -> int:
        """Group unknown of a scalar row, -1 for none."""
        block = self.network.blocks[self.network.rows.block[row]]
        return int(block.group[self.network.rows.row[row]])

    def name(self, row: int) -> str:
        """Identification of a scalar row."""
        block = self.network.blocks[self.network.rows.block[row]]
        return str(block.name(int(self.network.rows.row[row])))


def plane_edges(network: Network) -> Ints:
    """Pairs (m, 2) of stations that a reading in the plane joins, each once."""
    pairs = [np.empty((0, 2), np.int64)]
    for block in network.blocks:
        kind = KINDS[block.kind]
        if not any(t in ("plane", "both") for t in kind.touches):
            continue
        for i, j in kind.sights:
            if i >= 0:
                pairs.append(block.stations[:, [i, j]])
    both = np.sort(np.concatenate(pairs), axis=1)
    return np.unique(both[both[:, 0] != both[:, 1]], axis=0)
