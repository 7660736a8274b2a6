"""Second derivatives where they matter: readings with gross misclosures.

Gauss-Newton drops the curvature of the readings, which is right as long as a misclosure is small against the length of
its sight. A gross error is not: at 59 km too much over a sight of 100 m the dropped term is 590 times the kept one, and
no damping makes up for it in reasonable time. Newton's matrix for v'Pv / 2, with p = L^-T l* of the element's rows, is

    N - sum_i p_i H_i,     H_i = second partials of reading i by its coordinates,

formed here for the worst readings only, by central differences of their first partials. It may be indefinite; the
damping of adjust.solver.gauss grows until it is not (Nocedal and Wright 2006, section 10.3).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from scipy.sparse import coo_array, csc_array

from adjust.network import Array, Block, Ints
from adjust.solver.design import Design, State
from adjust.solver.elements import Whitened

GROSS = 30.0
"""Standard deviations of misclosure from which a reading's curvature is kept."""
MOST_ROWS = 300
STEP = 1e-5
"""Step of the differences as a share of the sight: the first partials then err by 1e-10 of themselves."""


def curvature(design: Design, state: State, whitened: list[Whitened], reduced: Ints, count: int) -> csc_array | None:
    """sum_i p_i H_i (count, count) of the gross readings in the engine's unknowns; None where there are none."""
    rows, load = _gross(whitened)
    if not len(rows):
        return None
    i, j, data = [], [], []
    for columns, second, p in _second(design, state, rows, load):
        at = np.append(reduced, -1)[columns]
        inside = (at[:, :, None] >= 0) & (at[:, None, :] >= 0)
        ii, jj = np.broadcast_to(at[:, :, None], second.shape), np.broadcast_to(at[:, None, :], second.shape)
        i.append(ii[inside])
        j.append(jj[inside])
        data.append((p[:, None, None] * second)[inside])
    parts = (np.concatenate(data), (np.concatenate(i), np.concatenate(j)))
    return coo_array(parts, shape=(count, count)).tocsc()


def is_gross(whitened: list[Whitened]) -> bool:
    """Whether any reading's curvature is to be kept."""
    return any(bool((np.abs(w.reduced_l) > GROSS).any()) for w in whitened)


def _gross(whitened: list[Whitened]) -> tuple[Ints, Array]:
    """Rows with gross misclosures, the worst first, and their p."""
    rows, size, load = [], [], []
    for w in whitened:
        rest = w.reduced_l
        k = rest.shape[1]
        up = (
            rest / w.factor[:, :, 0]
            if k == 1
            else np.linalg.solve(w.factor.transpose(0, 2, 1), rest[:, :, None])[:, :, 0]
        )
        far = np.abs(rest) > GROSS
        rows.append(w.batch.rows[far])
        size.append(np.abs(rest[far]))
        load.append(up[far])
    order = np.argsort(-np.concatenate(size), kind="stable")[:MOST_ROWS]
    return np.concatenate(rows)[order], np.concatenate(load)[order]


def _second(design: Design, state: State, rows: Ints, load: Array) -> Iterator[tuple[Ints, Array, Array]]:
    """By blocks: unknowns (m, c) of the rows, -1 for none, second partials (m, c, c) by them, and p (m,)."""
    numbering = design.network.rows
    positions = np.where(np.isnan(state.positions), design.unasked, state.positions)
    for b in np.unique(numbering.block[rows]):
        here = rows[numbering.block[rows] == b]
        places = design.places[here]
        slots = np.flatnonzero((places >= 0).all(axis=0))
        if len(slots):
            block = design.network.blocks[b].take(numbering.row[here])
            second = _differences(design, block, numbering.part[here], slots, places[:, slots], positions,
                                  state.groups)  # fmt: skip
            yield design.columns[here][:, slots], second, load[numbering.block[rows] == b]


def _differences(design: Design, block: Block, part: Ints, slots: Ints, places: Ints, positions: Array,
                 groups: Array) -> Array:  # fmt: skip
    """Second partials (m, c, c) of the block's rows by the coordinates at ``places`` (m, c), by central differences.

    Every row is taken once for each coordinate and sign, each time with stations of its own, of which one is moved:
    so one call serves all. A coordinate that stands in two sights of a row is moved in both, at its first place.
    """
    m, c = places.shape
    h = STEP * _lengths(block, positions)
    which, one = np.tile(np.arange(m), 2 * c), np.tile(np.repeat(np.arange(c), m), 2)
    sign = np.repeat([1.0, -1.0], m * c)
    stations = block.stations[which]
    own = np.arange(stations.size).reshape(stations.shape)
    moved = positions[stations.ravel()]
    place = places[which, one]
    copy, seat = np.nonzero(stations == place[:, None] // 3)
    moved[own[copy, seat], place[copy] % 3] += (sign * h[which])[copy]
    alone = replace(design, coupled=design.coupled[stations.ravel()])
    by = alone.partials(replace(block.take(which), stations=own), moved, groups)
    ends = by[np.arange(len(which)), part[which]][:, slots].reshape(2, c, m, c)
    second = ((ends[0] - ends[1]) / (2 * h[:, None])).transpose(1, 2, 0)  # (row, slot, coordinate moved)
    again = np.array([[p in row[:k] for k, p in enumerate(row)] for row in places.tolist()])
    second = np.where(again[:, None, :], 0.0, second)
    return np.asarray((second + second.transpose(0, 2, 1)) / 2)


def _lengths(block: Block, positions: Array) -> Array:
    """Length (m,) of the shortest sight of every row, at least a millimetre."""
    at = positions[block.stations, :2]
    if at.shape[1] < 2:
        return np.ones(len(block))
    return np.asarray(np.maximum(np.hypot(*(at[:, 1:] - at[:, :1]).transpose(2, 0, 1)).min(axis=1), 1e-3))
