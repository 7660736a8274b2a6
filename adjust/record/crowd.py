"""Where a plan is crowded: the stations for an inset, and a free place for it on the sheet."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from adjust.record.paper import Box, Point

CLOSE = 7.0
"""mm between stations below which their names and ellipses have no room of their own."""
LEAST = 3
"""Stations that make a crowd: two close ones still have their outer sides for names."""
LARGER = 2.0
"""Enlargement below which an inset would show nothing new."""
SIDES = (0.46, 0.38, 0.30)
"""Sides of an inset over the shorter side of the frame: the largest that finds a free corner is taken."""

Array = NDArray[np.float64]


def crowd(paper: Array) -> list[int] | None:
    """Stations (their rows in ``paper``, (n, 2) in mm) of the largest chain of close neighbours; None without any."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import KDTree

    n = len(paper)
    pairs = KDTree(paper).query_pairs(CLOSE, output_type="ndarray")
    if len(pairs) < LEAST - 1:
        return None
    links = coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(n, n))
    label = connected_components(links, directed=False)[1]
    size = np.bincount(label)
    largest = int(np.argmax(size))
    return np.flatnonzero(label == largest).tolist() if LEAST <= size[largest] < n else None


def corner(frame: Box, side: float, gap: float = 2.0, foot: float = 5.0) -> list[Box]:
    """Squares of ``side`` mm in the corners of the frame, above the figures of the grid."""
    left, bottom, right, top = frame
    xs = (right - gap - side, left + foot)
    ys = (top - gap - side, bottom + foot)
    return [(x, y, x + side, y + side) for y in ys for x in xs]


def free_place(frame: Box, paper: Array, segments: Sequence[Sequence[Point]], reach: float) -> Box | None:
    """The first square in a corner that keeps ``reach`` mm from every station and lies on no line."""
    ends = np.array([[*one, *other] for one, other in segments]).reshape(-1, 4)
    for share in SIDES:
        side = share * min(frame[2] - frame[0], frame[3] - frame[1])
        for box in corner(frame, side):
            wide = (box[0] - reach, box[1] - reach, box[2] + reach, box[3] + reach)
            inside = np.all((paper > wide[:2]) & (paper < wide[2:]), axis=1)
            if not inside.any() and not _crossed(box, ends):
                return box
    return None


def _crossed(box: Box, ends: Array) -> bool:
    """Some segment (n, 4: x1 y1 x2 y2) enters the box: its parameters inside both slabs overlap."""
    start, step = ends[:, :2], ends[:, 2:] - ends[:, :2]
    step = np.where(np.abs(step) < 1e-9, 1e-9, step)
    one, other = (np.array(box[:2]) - start) / step, (np.array(box[2:]) - start) / step
    enter, leave = np.minimum(one, other).max(axis=1), np.maximum(one, other).min(axis=1)
    return bool(np.any(np.minimum(leave, 1) > np.maximum(enter, 0)))
