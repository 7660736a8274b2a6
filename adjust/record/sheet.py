"""A landscape A4 sheet in millimetres of paper: lines, patches, measured text, round scales, labels kept apart.

One axes covers the sheet and its data unit is 1 mm of paper, so a length on the drawing is known by construction: no
autoscaling, no aspect to correct. Colours are Okabe and Ito's palette (Color Universal Design, 2008); shape, dash or
number always says the same thing again, for a grey print.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any
from urllib.parse import quote

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:  # matplotlib is heavy and loaded only where a sheet is made
    from matplotlib.figure import Figure
    from matplotlib.font_manager import FontProperties

PAPER = (297.0, 210.0)
MM = 25.4
BLACK, GREY, PALE = "#000000", "#555555", "#b8b8b8"
BLUE, VERMILLION, GREEN = "#0072B2", "#D55E00", "#009E73"

Box = tuple[float, float, float, float]
"""left, bottom, right, top in mm."""
Point = tuple[float, float]


def mark_id(what: str, name: str) -> str:
    """An id for the drawing's file: plain names as they are, every other character percent-encoded."""
    return f"{what}-{quote(name, safe='')}"


def round_step(largest: float, steps: Sequence[float] = (1.0, 2.0, 5.0)) -> float:
    """The largest number of the form step · 10^k that does not exceed ``largest`` (above zero)."""
    power = 10.0 ** math.floor(math.log10(largest))
    fitting = [step * power for step in (*steps, 10.0) if step * power <= largest * (1 + 1e-9)]
    return max(fitting, default=power)


def nearest_step(wanted: float) -> float:
    """The number of the form 1, 2, 5 · 10^k nearest to ``wanted`` by ratio."""
    power = 10.0 ** math.floor(math.log10(wanted))
    return min((step * power for step in (1.0, 2.0, 5.0, 10.0)), key=lambda one: abs(math.log(one / wanted)))


def number(value: float) -> str:
    """A round number without exponent or trailing zeros: 500, 0.25."""
    return f"{value:.10f}".rstrip("0").rstrip(".") if value < 1e6 else f"{value:.0f}"


class Sheet:
    """The paper: everything is placed in mm from its lower left corner."""

    def __init__(self) -> None:
        from matplotlib import get_data_path
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        self.figure: Figure = Figure(figsize=(PAPER[0] / MM, PAPER[1] / MM), dpi=160, facecolor="white")
        self._renderer = FigureCanvasAgg(self.figure).get_renderer()  # type: ignore[no-untyped-call]  # so in its stubs
        self.axes = self.figure.add_axes((0.0, 0.0, 1.0, 1.0))
        self.axes.set(xlim=(0, PAPER[0]), ylim=(0, PAPER[1]))
        self.axes.set_axis_off()
        self._fonts = Path(get_data_path()) / "fonts" / "ttf"  # the bundled ones: same glyphs on every machine

    def font(self, size: float, bold: bool = False) -> FontProperties:
        """The bundled DejaVu Sans in ``size`` points."""
        from matplotlib.font_manager import FontProperties

        return FontProperties(fname=self._fonts / f"DejaVuSans{'-Bold' if bold else ''}.ttf", size=size)

    def width(self, text: str, size: float, bold: bool = False) -> float:
        """Width of a line of text in mm."""
        pixels = self._renderer.get_text_width_height_descent(text, self.font(size, bold), False)[0]
        return float(pixels) / self.figure.dpi * MM

    def text(self, at: Point, text: str, size: float, bold: bool = False, **more: Any) -> None:
        """One line of text; never read as mathematics, whatever signs a name holds."""
        options: dict[str, Any] = {"va": "baseline", "ha": "left", "color": BLACK, "zorder": 6} | more
        self.axes.text(*at, text, fontproperties=self.font(size, bold), parse_math=False, **options)

    def halo(self) -> list[Any]:
        """A white edge that keeps text readable over lines."""
        from matplotlib.patheffects import withStroke

        return [withStroke(linewidth=2.2, foreground="white")]

    def wrap(self, text: str, width: float, size: float, bold: bool = False, most: int = 4) -> list[str]:
        """The text in at most ``most`` lines of at most ``width`` mm, cut with an ellipsis."""
        lines = [""]
        for word in (piece for part in text.split() for piece in self._pieces(part, width, size, bold)):
            longer = f"{lines[-1]} {word}".strip()
            if self.width(longer, size, bold) <= width:
                lines[-1] = longer
            else:
                lines.append(word)
        return lines if len(lines) <= most else [*lines[: most - 1], self._cut(lines[most - 1], width, size, bold)]

    def _pieces(self, word: str, width: float, size: float, bold: bool) -> list[str]:
        """The word in pieces that fit a line."""
        pieces = []
        while len(word) > 1 and self.width(word, size, bold) > width:
            fits = next(n for n in range(len(word) - 1, 0, -1) if n == 1 or self.width(word[:n], size, bold) <= width)
            pieces.append(word[:fits])
            word = word[fits:]
        return [*pieces, word]

    def _cut(self, line: str, width: float, size: float, bold: bool) -> str:
        while len(line) > 1 and self.width(line + "…", size, bold) > width:
            line = line[:-1]
        return line.rstrip() + "…"

    def line(self, points: Sequence[Point], width: float, gid: str | None = None, **more: Any) -> None:
        """A line through the points, ``width`` in points."""
        from matplotlib.lines import Line2D

        options: dict[str, Any] = {"color": BLACK, "solid_capstyle": "butt", "clip_on": False} | more
        xs, ys = zip(*points, strict=True)
        self.axes.add_artist(Line2D(xs, ys, linewidth=width, gid=gid, **options))

    def lines(self, segments: Sequence[Sequence[Point]], width: float, gid: str, **more: Any) -> None:
        """Many lines of one look, as one group."""
        from matplotlib.collections import LineCollection

        if segments:
            self.axes.add_collection(LineCollection(segments, linewidths=width, gid=gid, **more), autolim=False)

    def polygon(self, points: Sequence[Point], gid: str | None = None, **more: Any) -> None:
        """A closed polygon."""
        from matplotlib.patches import Polygon

        options: dict[str, Any] = {"facecolor": "none", "edgecolor": BLACK, "linewidth": 0.8, "clip_on": False} | more
        self.axes.add_artist(Polygon(np.array(points), closed=True, gid=gid, **options))

    def ellipse(
        self, at: Point, half: tuple[float, float], azimuth: float, gid: str | None = None, **more: Any
    ) -> None:
        """An ellipse with half axes (major, minor) in mm, the major one ``azimuth`` radians clockwise from up."""
        from matplotlib.patches import Ellipse

        options: dict[str, Any] = {"facecolor": "none", "edgecolor": BLACK, "linewidth": 0.8, "clip_on": False} | more
        turn = 90.0 - math.degrees(azimuth)
        self.axes.add_artist(Ellipse(at, 2 * half[0], 2 * half[1], angle=turn, gid=gid, **options))

    def curve(self, one: Point, bend: Point, other: Point, width: float, **more: Any) -> None:
        """A curved line from ``one`` to ``other``, drawn towards ``bend``."""
        from matplotlib.patches import PathPatch
        from matplotlib.path import Path as Curve

        options: dict[str, Any] = {"facecolor": "none", "edgecolor": BLACK, "clip_on": False} | more
        shape = Curve([one, bend, other], [Curve.MOVETO, Curve.CURVE3, Curve.CURVE3])
        self.axes.add_artist(PathPatch(shape, linewidth=width, **options))


def draw_symbol(sheet: Sheet, symbol: str, at: Point, size: float = 1.0, gid: str | None = None) -> None:
    """A station: held, weighted (triangles), check (square), new (circle), unchecked (crossed circle)."""
    x, y = at
    look: dict[str, Any] = {"zorder": 4, "gid": gid, "linewidth": 0.9 * max(size, 0.6)}
    if symbol in ("held", "weighted"):
        r = 2.1 * size
        corners = [(x + r * math.sin(a), y + r * math.cos(a)) for a in (0.0, 2 * math.pi / 3, 4 * math.pi / 3)]
        sheet.polygon(corners, facecolor=BLACK if symbol == "held" else "#9a9a9a", **look)
    elif symbol == "check":
        r = 1.35 * size
        sheet.polygon([(x - r, y - r), (x + r, y - r), (x + r, y + r), (x - r, y + r)], facecolor=GREEN, **look)
    else:
        r = (1.6 if symbol == "unchecked" else 1.25) * size
        sheet.ellipse(at, (r, r), 0.0, facecolor="white", **look)
        if symbol == "unchecked":
            d = r / math.sqrt(2)
            for slope in (1, -1):
                sheet.line([(x - d, y - slope * d), (x + d, y + slope * d)], 0.9, zorder=4.1)


def draw_badge(sheet: Sheet, number: int, at: Point, size: float = 1.0, gid: str | None = None) -> None:
    """The numbered mark of a suspect reading."""
    r = 2.0 * size
    sheet.ellipse(at, (r, r), 0.0, gid=gid, facecolor="white", edgecolor=VERMILLION, linewidth=1.3, zorder=5)
    place = (at[0], at[1] - 0.15)
    sheet.text(place, str(number), 6.5 * size, bold=True, ha="center", va="center_baseline", color=VERMILLION)


class Labels:
    """Places labels greedily where they cover least: other labels and symbols first, then lines and ellipses."""

    def __init__(self, sheet: Sheet, frame: Box, size: float = 7.0) -> None:
        self.sheet, self.frame, self.size = sheet, frame, size
        self.boxes: list[Box] = []
        self.soft: list[Box] = []
        self.segments: list[Sequence[Point]] = []

    def keep_off(self, at: Point, radius: float) -> None:
        """Labels stay off this symbol."""
        self.boxes.append((at[0] - radius, at[1] - radius, at[0] + radius, at[1] + radius))

    def place(self, items: Sequence[tuple[Point, str, str]]) -> None:
        """Place labels in their order: each a point, the text, and the label's id."""
        boxes, soft = np.array(self.boxes).reshape(-1, 4), np.array(self.soft).reshape(-1, 4)
        segments = np.array([[*one, *other] for one, other in self.segments]).reshape(-1, 4)
        for at, text, gid in items:
            options = _around(at, self.sheet.width(text, self.size), self.size * 0.26)
            costs = [self._cost(option, boxes, soft, segments) + 0.02 * i for i, option in enumerate(options)]
            best = options[int(np.argmin(costs))]
            boxes = np.vstack([boxes, best])
            self.sheet.text((best[0], best[1]), text, self.size, path_effects=self.sheet.halo(), gid=gid)

    def _cost(
        self, box: Box, boxes: NDArray[np.float64], soft: NDArray[np.float64], segments: NDArray[np.float64]
    ) -> float:
        left, bottom, right, top = self.frame
        outside = (
            max(0.0, left - box[0]) + max(0.0, bottom - box[1]) + max(0.0, box[2] - right) + max(0.0, box[3] - top)
        )
        return 100 * outside + 10 * _overlap(box, boxes) + 0.3 * _overlap(box, soft) + _inside_length(box, segments)


def _around(at: Point, width: float, height: float) -> list[Box]:
    """Places for a label around a point: right first, then the other sides, near and farther."""
    x, y = at
    places: list[Box] = []
    for gap in (2.2, 3.6, 6.0):
        d = gap * 0.75
        mid, low, high = y - height / 2, y - d - height, y + d
        ahead = ((x + d, high), (x + gap, mid), (x + d, low))
        behind = ((x - d - width, high), (x - gap - width, mid), (x - d - width, low))
        centred = ((x - width / 2, y + gap), (x - width / 2, y - gap - height))
        places += [(left, bottom, left + width, bottom + height) for left, bottom in (*ahead, *behind, *centred)]
    return places


def _overlap(box: Box, boxes: NDArray[np.float64]) -> float:
    """Area in mm² that the box, with a margin of 0.4 mm, shares with the boxes (n, 4)."""
    wide = np.minimum(boxes[:, 2], box[2] + 0.4) - np.maximum(boxes[:, 0], box[0] - 0.4)
    high = np.minimum(boxes[:, 3], box[3] + 0.4) - np.maximum(boxes[:, 1], box[1] - 0.4)
    return float(np.sum(np.clip(wide, 0, None) * np.clip(high, 0, None)))


def _inside_length(box: Box, segments: NDArray[np.float64]) -> float:
    """Length in mm of the segments (n, 4: x1 y1 x2 y2) inside the box, by clipping their parameter to both slabs."""
    start, step = segments[:, :2], segments[:, 2:] - segments[:, :2]
    step = np.where(np.abs(step) < 1e-9, 1e-9, step)
    one, other = (np.array(box[:2]) - start) / step, (np.array(box[2:]) - start) / step
    enter, leave = np.minimum(one, other).max(axis=1), np.maximum(one, other).min(axis=1)
    share = np.clip(np.minimum(leave, 1) - np.maximum(enter, 0), 0, None)
    return float(np.sum(share * np.hypot(step[:, 0], step[:, 1])))
