"""Frames turn positions into sights and carry partial derivatives back to both ends.

A *sight* is what a kind of observation sees: (m, 4) east, north, up and height difference from the standing station
to the target, in the frame of the standing station. On the local plane these are plain coordinate differences, so the
partials at the two ends are exact negatives; on other frames they are not, which is why kinds never carry them.
A start of -1 is the frame's origin (absolute kinds: control, positions).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.network import Array, Ints


@dataclass(frozen=True)
class LocalPlane:
    """A plane with north up; heights are counted from its own zero and do not influence the plane."""

    name: str = "local plane"

    def sights(self, positions: Array, start: Ints, end: Ints) -> Array:
        """(m, 4) sights from ``start`` (m,) to ``end`` (m,) at ``positions`` (n, 3), metres."""
        origin = np.where((start < 0)[:, None], 0.0, positions[start])
        d = positions[end] - origin
        return np.concatenate([d, d[:, 2:]], axis=1)

    def carry(self, partials: Array) -> Array:
        """Partials by the sight (m, p, 4) to partials by start and end coordinates (m, p, 2, 3)."""
        by_end = partials[..., :3].copy()
        by_end[..., 2] += partials[..., 3]
        return np.stack([-by_end, by_end], axis=2)
