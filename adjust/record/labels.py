"""Names beside stations, kept off each other: a greedy choice among places around each point."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from adjust.record.paper import Box, Point
from adjust.record.sheet import Sheet

Array = NDArray[np.float64]

FORBIDDEN = 1e4
"""Cost of a place that covers another label or a symbol, or leaves the frame: such a label is not drawn."""
HIGH, BELOW = 0.35, 0.08
"""Height of a line of type, and its part below the baseline, in mm a point of size: measured on DejaVu Sans."""
FAR = 4.5
"""mm between a station and its label above which a thin line joins them."""


class Labels:
    """Places labels greedily where they cover least: other labels and symbols first, then lines and ellipses."""

    def __init__(self, sheet: Sheet, frame: Box, size: float = 7.0) -> None:
        self.sheet, self.frame, self.size = sheet, frame, size
        self.start, self.tight = 2.2, False
        self.boxes: list[Box] = []
        self.soft: list[Box] = []
        self.segments: list[Sequence[Point]] = []

    def keep_off(self, at: Point, radius: float) -> None:
        """Labels stay off this symbol."""
        self.boxes.append((at[0] - radius, at[1] - radius, at[0] + radius, at[1] + radius))

    def place(self, items: Sequence[tuple[Point, str, str]]) -> int:
        """Place labels in their order, each a point, the text and the label's id; how many found no free place."""
        boxes, soft = np.array(self.boxes).reshape(-1, 4), np.array(self.soft).reshape(-1, 4)
        segments = np.array([[*one, *other] for one, other in self.segments]).reshape(-1, 4)
        homeless = 0
        for at, text, gid in items:
            options = np.array(around(at, self.sheet.width(text, self.size), HIGH * self.size, self.start))
            options = options[:16] if self.tight else options
            costs = self._costs(options, _near(at, boxes), _near(at, soft), _crossing(at, segments))
            k = int(np.argmin(costs))
            best = (float(options[k, 0]), float(options[k, 1]), float(options[k, 2]), float(options[k, 3]))
            if costs[k] > FORBIDDEN:
                homeless += 1
                continue
            boxes = np.vstack([boxes, best])
            self._leader(at, best)
            self.sheet.text(
                (best[0], best[1] + BELOW * self.size), text, self.size, path_effects=self.sheet.halo(), gid=gid
            )
        self.boxes = [(float(a), float(b), float(c), float(d)) for a, b, c, d in boxes]
        return homeless

    def _leader(self, at: Point, box: Box) -> None:
        """A thin line to a label that stands well away from its station."""
        end = (min(max(at[0], box[0]), box[2]), min(max(at[1], box[1]), box[3]))
        away = math.dist(at, end)
        if away > FAR:
            begin = (at[0] + (end[0] - at[0]) * 1.6 / away, at[1] + (end[1] - at[1]) * 1.6 / away)
            self.sheet.line([begin, end], 0.4, zorder=5.5)

    def _costs(self, options: Array, boxes: Array, soft: Array, segments: Array) -> Array:
        """What each option (o, 4) covers; the earlier ones are liked a little better."""
        left, bottom, right, top = self.frame
        outside = (options[:, 0] < left) | (options[:, 1] < bottom) | (options[:, 2] > right) | (options[:, 3] > top)
        covered = _overlap(options, boxes)
        cost: Array = 10 * covered + 0.3 * _overlap(options, soft) + _inside_length(options, segments)
        cost += 0.02 * np.arange(len(options)) + np.where(outside | (covered > 0), FORBIDDEN, 0.0)
        return cost


def around(at: Point, width: float, height: float, start: float = 2.2) -> list[Box]:
    """Places for a label around a point: right first, then the other sides, near and farther."""
    x, y = at
    places: list[Box] = []
    for gap in (start, start + 1.4, start + 3.8, start + 6.8, start + 10.8):
        d = gap * 0.75
        mid, low, high = y - height / 2, y - d - height, y + d
        ahead = ((x + d, high), (x + gap, mid), (x + d, low))
        behind = ((x - d - width, high), (x - gap - width, mid), (x - d - width, low))
        centred = ((x - width / 2, y + gap), (x - width / 2, y - gap - height))
        places += [(left, bottom, left + width, bottom + height) for left, bottom in (*ahead, *behind, *centred)]
    return places


REACH = 60.0
"""mm beyond which nothing can meet a label of a station: names are cut to 18 characters."""


def _near(at: Point, boxes: Array) -> Array:
    """The boxes that a label of this point can meet."""
    return boxes[
        (boxes[:, 0] < at[0] + REACH) & (boxes[:, 2] > at[0] - REACH)
        & (boxes[:, 1] < at[1] + REACH) & (boxes[:, 3] > at[1] - REACH)
    ]  # fmt: skip


def _crossing(at: Point, segments: Array) -> Array:
    """The segments whose box comes near this point."""
    x, y = segments[:, 0::2], segments[:, 1::2]
    return segments[
        (x.min(axis=1) < at[0] + REACH) & (x.max(axis=1) > at[0] - REACH)
        & (y.min(axis=1) < at[1] + REACH) & (y.max(axis=1) > at[1] - REACH)
    ] if len(segments) else segments  # fmt: skip


def _overlap(options: Array, boxes: Array) -> Array:
    """(o,) area in mm² that each option, with a margin of 0.4 mm, shares with the boxes (n, 4)."""
    wide = np.minimum(boxes[:, 2], options[:, 2:3] + 0.4) - np.maximum(boxes[:, 0], options[:, 0:1] - 0.4)
    high = np.minimum(boxes[:, 3], options[:, 3:4] + 0.4) - np.maximum(boxes[:, 1], options[:, 1:2] - 0.4)
    area: Array = np.sum(np.clip(wide, 0, None) * np.clip(high, 0, None), axis=1)
    return area


def _inside_length(options: Array, segments: Array) -> Array:
    """(o,) length in mm of the segments (n, 4: x1 y1 x2 y2) inside each option, by clipping their parameter to both
    slabs."""
    start, step = segments[:, :2], segments[:, 2:] - segments[:, :2]
    step = np.where(np.abs(step) < 1e-9, 1e-9, step)
    one, other = (options[:, None, :2] - start) / step, (options[:, None, 2:] - start) / step
    enter, leave = np.minimum(one, other).max(axis=2), np.maximum(one, other).min(axis=2)
    share = np.clip(np.minimum(leave, 1) - np.maximum(enter, 0), 0, None)
    length: Array = np.sum(share * np.hypot(step[:, 0], step[:, 1]), axis=1)
    return length
