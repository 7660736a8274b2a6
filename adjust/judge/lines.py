"""Lines: distance, azimuth and relative precision of every observed pair and of the pairs asked for.

The covariance of a difference is S_ii + S_jj - S_ij - S_ji; the sign runs from `from` to `to`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.graph.parts import HEIGHT, PLANE
from adjust.kinds import KINDS
from adjust.network import Array, Ints
from adjust.solver.solution import Solution


@dataclass(frozen=True)
class Lines:
    """Lines (k,) between stations; NaN where a figure is not determined."""

    start: Ints
    end: Ints
    distance: Array
    azimuth: Array
    sd_distance: Array
    sd_azimuth: Array
    sd_height: Array
    covariance: Array
    """(k, 2, 2) of the difference of east and north."""


def find_lines(solution: Solution, scale: float) -> Lines:
    """Observed lines in the order of the book, then the pairs; both ends must belong to one part and one be unknown."""
    start, end = _pairs(solution)
    numbers = solution.design.unknowns.coordinate
    both = np.concatenate([numbers[start], numbers[end]], axis=1)
    q = solution.cofactors.blocks(both) * scale
    cov = q[:, :3, :3] + q[:, 3:, 3:] - q[:, :3, 3:] - q[:, 3:, :3]
    d = solution.positions[end] - solution.positions[start]
    plane = ~np.isnan(d[:, 0])
    length = np.hypot(d[:, 0], d[:, 1])
    with np.errstate(invalid="ignore", divide="ignore"):
        along = np.stack([d[:, 0] / length, d[:, 1] / length], axis=1)
        across = np.stack([d[:, 1], -d[:, 0]], axis=1) / (length**2)[:, None]
        sd_distance = np.sqrt(np.maximum(np.einsum("ki,kij,kj->k", along, cov[:, :2, :2], along), 0.0))
        sd_azimuth = np.sqrt(np.maximum(np.einsum("ki,kij,kj->k", across, cov[:, :2, :2], across), 0.0))
    cov2 = np.where(plane[:, None, None], cov[:, :2, :2], np.nan)
    sd_height = np.where(np.isnan(d[:, 2]), np.nan, np.sqrt(np.maximum(cov[:, 2, 2], 0.0)))
    azimuth = np.where(plane, np.arctan2(d[:, 0], d[:, 1]) % (2 * np.pi), np.nan)
    return Lines(start, end, length, azimuth, sd_distance, sd_azimuth, sd_height, cov2)


def _pairs(solution: Solution) -> tuple[Ints, Ints]:
    """Ends of the lines, each pair once."""
    network = solution.network
    seen: dict[tuple[int, int], tuple[int, int]] = {}
    for block in network.blocks:
        for i, j in KINDS[block.kind].sights:
            if i >= 0:
                for a, b in block.stations[:, [i, j]].tolist():
                    seen.setdefault((min(a, b), max(a, b)), (a, b))
    for a, b in network.pairs.tolist():
        seen.setdefault((min(a, b), max(a, b)), (a, b))
    known = np.all(solution.design.unknowns.coordinate < 0, axis=1).tolist()
    kept = [ab for ab in seen.values() if not (known[ab[0]] and known[ab[1]]) and _together(solution, *ab)]
    pairs = np.array(kept, dtype=np.int64).reshape(-1, 2)
    return pairs[:, 0], pairs[:, 1]


def _together(solution: Solution, a: int, b: int) -> bool:
    """Whether some part holds both stations in one component."""
    return any(
        part.datum is not None and (part.datum.part.nodes[a] & part.datum.part.nodes[b])[[PLANE, HEIGHT]].any()
        for part in solution.parts
    )
