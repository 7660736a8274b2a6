"""The careful start of one part: which known places to build from, and which readings disagree in the end."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from adjust.graph.agreement import AGREES
from adjust.graph.clues import Clues
from adjust.graph.grow import Group
from adjust.graph.join import best_move
from adjust.graph.misfit import Misfits
from adjust.graph.plane import Built, build
from adjust.network import Ints, Network


@dataclass(frozen=True)
class Found:
    """A built part, whether it hangs in a frame of its own, and the readings that disagree with it (source, size)."""

    built: Built
    free: bool
    doubtful: list[tuple[int, float]]


def place_part(network: Network, clues: Clues, stations: Ints, control: dict[int, complex],
               rows: dict[int, complex]) -> Found:  # fmt: skip
    """Build a part from control, else from the readings alone; `stations` rows help where that does not lead."""
    inside = set(stations.tolist())
    control = {i: z for i, z in control.items() if i in inside}
    rows = {i: z for i, z in rows.items() if i in inside}
    built = build(clues, stations, control, rows)
    free = not control
    if free and rows:
        built, free = _fitted(built, rows)
    if _missing(built, stations) and rows:
        other = build(clues, stations, control | rows, {})
        if _missing(other, stations) < _missing(built, stations):
            built, free = other, False
    if _missing(built, stations) and len(control | rows) == 1 and len(stations) > 2:
        # one known station and nothing that turns the rest to north: the turn is the program's choice
        other = build(clues, stations, {}, {})
        ((station, place),) = (control | rows).items()
        if not _missing(other, stations):
            built, free = replace(other, z=other.z + (place - other.z[station])), False
    return Found(built, free, _doubtful(clues, built))


def _missing(built: Built, stations: Ints) -> int:
    return int(np.isnan(built.z[stations]).sum())


def _fitted(built: Built, rows: dict[int, complex]) -> tuple[Built, bool]:
    """Places brought onto the `stations` rows by a similarity that most of them agree on; (places, still free)."""
    placed = {i: complex(built.z[i]) for i in rows if np.isfinite(built.z[i])}
    if not placed:
        return built, True
    if len(placed) == 1:
        ((i, z),) = placed.items()
        return replace(built, z=built.z + (rows[i] - z)), False
    move = best_move(Group(dict(rows)), Group(placed, scaled=built.scaled), list(placed))
    if move is None:
        return built, True
    m, c = move
    if built.oriented:
        m = complex(abs(m))
        c = complex(np.mean([rows[i] - m * z for i, z in placed.items()]))
    moved = [replace(one, here=tuple(m * z + c for z in one.here), there=tuple(m * z + c for z in one.there))
             for one in built.mirrors]  # fmt: skip
    return replace(built, z=m * built.z + c, mirrors=tuple(moved)), False


def _doubtful(clues: Clues, built: Built) -> list[tuple[int, float]]:
    """Readings that misfit grossly, with the misfit in metres or radians."""
    misfits = Misfits(clues)
    with np.errstate(invalid="ignore"):
        m = misfits.all(built.z)
        lengths = np.abs(built.z[misfits.j] - built.z[misfits.i]) - misfits.metres
    size = np.concatenate([lengths, m[len(lengths) :]])
    bad = np.flatnonzero(np.isfinite(m) & (np.abs(m) > AGREES))
    found: dict[int, float] = {}
    for k in bad.tolist():
        source = int(misfits.source[k])
        if abs(size[k]) > abs(found.get(source, 0.0)):
            found[source] = float(size[k])
    return list(found.items())
