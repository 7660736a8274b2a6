"""Second derivatives where they matter: readings with gross misclosures.

Gauss-Newton drops the curvature of the readings, which is right as long as a misclosure is small against the length of
its sight. A gross error is not: at 59 km too much over a sight of 100 m the dropped term is 590 times the kept one, and
no damping makes up for it in reasonable time. Newton's matrix for v'Pv / 2, with p = L^-T l* of the element's rows, is

    N - sum_i p_i H_i,     H_i = second partials of reading i by its coordinates,

formed here for the worst readings only, by central differences of their first partials. It may be indefinite; the
damping of adjust.solver.gauss grows until it is not (Nocedal and Wright 2006, section 10.3).
"""

from __future__ import annotations

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
    for r, p in zip(rows.tolist(), load.tolist(), strict=True):
        columns, second = _second(design, state, r)
        at = reduced[columns]
        inside = np.ix_(at >= 0, at >= 0)
        ii, jj = np.meshgrid(at, at, indexing="ij")
        i.append(ii[inside].ravel())
        j.append(jj[inside].ravel())
        data.append(p * second[inside].ravel())
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


def _second(design: Design, state: State, r: int) -> tuple[Ints, Array]:
    """Unknowns (c,) of a row and the second partials (c, c) of its computed value by them."""
    rows = design.network.rows
    i, part = int(rows.row[r]), int(rows.part[r])
    block = design.network.blocks[rows.block[r]].only(i)
    slots = np.flatnonzero((design.columns[r] >= 0) & (design.places[r] >= 0))
    places = design.places[r, slots]
    positions = np.where(np.isnan(state.positions), design.unasked, state.positions)
    h = STEP * _length(block, positions)
    second = np.empty((len(slots), len(slots)))
    for k, place in enumerate(places.tolist()):
        ends = []
        for sign in (1.0, -1.0):
            moved = positions.copy()
            moved.reshape(-1)[place] += sign * h
            ends.append(design.partials(block, moved, state.groups)[0, part, slots])
        second[:, k] = (ends[0] - ends[1]) / (2 * h)
    return design.columns[r, slots], (second + second.T) / 2


def _length(block: Block, positions: Array) -> float:
    """Length of the shortest sight of a row, at least a millimetre."""
    at = positions[block.stations[0], :2]
    others = np.hypot(*(at[1:] - at[0]).T) if len(at) > 1 else np.array([1.0])
    return max(float(others.min(initial=np.inf)), 1e-3)
