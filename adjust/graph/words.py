"""Sentences of the starting computation: frames of its choice, stations it cannot reach, mirror images."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from adjust.graph.clues import Clues, Places
from adjust.graph.heights import ORIGIN
from adjust.graph.parts import listed
from adjust.network import Ints, Network

if TYPE_CHECKING:
    from adjust.graph.plane import Mirror


def frame_words(network: Network, origin: int, north: int, oriented: bool, scaled: bool, place: complex) -> list[str]:
    """What was chosen for a part without coordinates."""
    names = network.stations.names
    turn = "north is that of the azimuths" if oriented else f"north runs from it to {names[north]}"
    size = (
        ""
        if scaled
        else f", and the line {names[origin]}-{names[north]} was taken as 100 m, since no length was measured"
    )
    return [f"no coordinates were given: {names[origin]} was placed at {place.real:.0f}, {place.imag:.0f} (metres "
            f"east, north) and {turn}{size}"]  # fmt: skip


def height_words(network: Network, origins: tuple[int, ...]) -> list[str]:
    """What was chosen for heights without a known one."""
    return [
        f"no height was given: {network.stations.names[i]} was taken at height {ORIGIN:.0f} (metres)" for i in origins
    ]


def missing_words(network: Network, clues: Clues, missing: Ints, z: Places) -> list[str]:
    """A sentence for every piece that no construction reaches: who, what holds it, and what is missing."""
    left = set(missing.tolist())
    ends = [(one.i, one.j, True, one.source) for one in clues.lengths]
    ends += [(p.at, p.to, False, p.source) for p in clues.pointings]
    sentences = []
    for piece in _pieces(left, ends):
        ties = [(length, source) for i, j, length, source in ends if (i in piece) != (j in piece)]
        sentences.append(_missing(network, clues, sorted(piece), ties))
    return sentences


def _pieces(left: set[int], ends: list[tuple[int, int, bool, int]]) -> list[set[int]]:
    """The missing stations in pieces that readings join, by their first stations."""
    piece = {i: {i} for i in left}
    for i, j, _, _ in ends:
        if i in left and j in left and piece[i] is not piece[j]:
            union = piece[i] | piece[j]
            for k in union:
                piece[k] = union
    return [piece[i] for i in sorted(left) if min(piece[i]) == i]


def _missing(network: Network, clues: Clues, piece: list[int], ties: list[tuple[bool, int]]) -> str:
    who = listed(network, np.array(piece, dtype=np.int64), 8)
    sources = list(dict.fromkeys(source for _, source in ties))
    by = ", ".join(_reading(network, clues, s) for s in sources[:3]) + (" and others" if len(sources) > 3 else "")
    cure = "or give a row in stations.csv" if len(piece) == 1 else "or give rows in stations.csv"
    if not sources:
        return f"{who}: no reading leads there from known stations; tie them to the rest, {cure}"
    if len(piece) == 1 and len(sources) == 1:
        free = "sideways" if ties[0][0] else "along the line of sight, or the sight has no orientation"
        return f"{who} is held by one reading only ({by}): nothing fixes it {free}; measure to it once more, {cure}"
    verb = "is" if len(piece) == 1 else "are"
    return (f"{who} {verb} held by {by}, from which no position follows: too few lengths and oriented pointings lead "
            f"there; measure one more, {cure}")  # fmt: skip


def _reading(network: Network, clues: Clues, source: int) -> str:
    b, row = clues.sources[source]
    block = network.blocks[b]
    return f"{block.kind.replace('_', ' ')} {block.name(row)}"


def mirror_words(network: Network, mirrors: Sequence[Mirror]) -> list[str]:
    """A sentence for every mirror image that the readings do not tell from the other."""
    sentences = []
    for one in mirrors:
        who = listed(network, np.array(one.stations, dtype=np.int64), 8)
        name = network.stations.names[one.stations[0]]
        a, b = (f"{z.real:.3f}, {z.imag:.3f}" for z in (one.here[0], one.there[0]))
        their = "its mirror image" if len(one.stations) == 1 else "their mirror images"
        sentences.append(
            f"{who} and {their} fit all readings equally well: {name} can stand at {a} or at {b} (metres east, north); "
            f"a row for {name} in stations.csv near the right place, or one more reading that tells them apart, "
            "settles it"
        )
    return sentences
