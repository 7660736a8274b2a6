"""A sheet in millimetres of paper: lines, patches, measured text, symbols.

One axes covers the sheet and its data unit is 1 mm of paper, so a length on the drawing is known by construction: no
autoscaling, no aspect to correct. Colours are Okabe and Ito's palette (Color Universal Design, 2008); shape, dash or
number always says the same thing again, for a grey print.
"""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Sequence
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any
from urllib.parse import quote

import numpy as np

from adjust.record.paper import Box, Point

if TYPE_CHECKING:  # matplotlib is heavy and loaded only where a sheet is made
    from matplotlib.figure import Figure
    from matplotlib.font_manager import FontProperties

MM = 25.4
BLACK, DARK, GREY, PALE = "#000000", "#333333", "#555555", "#b8b8b8"
BLUE, VERMILLION, GREEN = "#0072B2", "#D55E00", "#009E73"


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


@cache
def _glyphs() -> frozenset[int]:
    """Code points of the bundled font."""
    from matplotlib.ft2font import FT2Font

    return frozenset(FT2Font(str(_font_file())).get_charmap())


def _font_file(bold: bool = False) -> Path:
    from matplotlib import get_data_path

    return Path(get_data_path()) / "fonts" / "ttf" / f"DejaVuSans{'-Bold' if bold else ''}.ttf"


@cache
def _advance(sign: str, bold: bool) -> float:
    """Width of a sign over the size of its type; kerning, which would only make a line shorter, is left out."""
    from matplotlib import ft2font

    # the flag's name since matplotlib 3.10, else the older one
    flag = ft2font.LoadFlags.NO_SCALE if hasattr(ft2font, "LoadFlags") else getattr(ft2font, "LOAD_NO_SCALE")  # noqa: B009  # unknown to its stubs
    font = _font(bold)
    return float(font.load_char(ord(sign), flag).horiAdvance) / float(font.units_per_EM)


@cache
def _font(bold: bool) -> Any:
    from matplotlib.ft2font import FT2Font

    return FT2Font(str(_font_file(bold)))


def drawable(text: str) -> bool:
    """Whether the bundled font sets this text as it is written.

    Scripts that run from right to left and signs that combine need a shaping which not every installation has, so
    they count as not drawable: the drawing must come out the same everywhere.
    """
    return all(
        ord(c) in _glyphs() and unicodedata.bidirectional(c) not in ("R", "AL") and not unicodedata.combining(c)
        for c in text
    )


def spelled(text: str) -> str:
    """The text with a question mark for every sign that is not drawable."""
    return text if drawable(text) else "".join(c if drawable(c) else "?" for c in text)


class Sheet:
    """The paper: everything is placed in mm from its lower left corner."""

    def __init__(self, width: float = 297.0, height: float = 210.0) -> None:
        from matplotlib.figure import Figure

        self.size = (width, height)
        self.figure: Figure = Figure(figsize=(width / MM, height / MM), dpi=160, facecolor="white")
        self.axes = self.figure.add_axes((0.0, 0.0, 1.0, 1.0))
        self.axes.set(xlim=(0, width), ylim=(0, height))
        self.axes.set_axis_off()

    def font(self, size: float, bold: bool = False) -> FontProperties:
        """The bundled DejaVu Sans in ``size`` points: the same glyphs on every machine."""
        from matplotlib.font_manager import FontProperties

        return FontProperties(fname=_font_file(bold), size=size)

    def width(self, text: str, size: float, bold: bool = False) -> float:
        """Width of a line of text in mm."""
        ems = sum(_advance(sign, bold) for sign in spelled(text))
        return ems * size / 72 * MM

    def text(self, at: Point, text: str, size: float, bold: bool = False, **more: Any) -> None:
        """One line of text; never read as mathematics, whatever signs a name holds."""
        options: dict[str, Any] = {"va": "baseline", "ha": "left", "color": BLACK, "zorder": 6} | more
        self.axes.text(*at, spelled(text), fontproperties=self.font(size, bold), parse_math=False, **options)

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

    def line(
        self, points: Sequence[Point], width: float, gid: str | None = None, inside: Box | None = None, **more: Any
    ) -> None:
        """A line through the points, ``width`` in points."""
        from matplotlib.lines import Line2D

        options: dict[str, Any] = {"color": BLACK, "solid_capstyle": "butt", "clip_on": False} | more
        xs, ys = zip(*points, strict=True)
        self.clip(self.axes.add_artist(Line2D(xs, ys, linewidth=width, gid=gid, **options)), inside)

    def lines(
        self, segments: Sequence[Sequence[Point]], width: float, gid: str, inside: Box | None = None, **more: Any
    ) -> None:
        """Many separate lines of one look, as one path: small in a file, and quick."""
        from matplotlib.patches import PathPatch
        from matplotlib.path import Path as Outline

        if segments:
            places = [point for segment in segments for point in segment]
            codes = [code for s in segments for code in (Outline.MOVETO, *[Outline.LINETO] * (len(s) - 1))]
            options: dict[str, Any] = {"facecolor": "none", "edgecolor": BLACK, "clip_on": False} | more
            made = PathPatch(Outline(places, codes), linewidth=width, gid=gid, **options)
            self.clip(self.axes.add_artist(made), inside)

    def marks(self, at: Sequence[Point], marker: str, mm: float, gid: str, **more: Any) -> None:
        """Many marks of one look and size, as one group."""
        from matplotlib.lines import Line2D

        if at:
            xs, ys = zip(*at, strict=True)
            options: dict[str, Any] = {"linestyle": "none", "clip_on": False, "markeredgecolor": BLACK} | more
            self.axes.add_artist(Line2D(xs, ys, marker=marker, markersize=mm / MM * 72, gid=gid, **options))

    def polygon(self, points: Sequence[Point], gid: str | None = None, **more: Any) -> None:
        """A closed polygon."""
        from matplotlib.patches import Polygon

        options: dict[str, Any] = {"facecolor": "none", "edgecolor": BLACK, "linewidth": 0.8, "clip_on": False} | more
        self.axes.add_artist(Polygon(np.array(points), closed=True, gid=gid, **options))

    def ellipse(
        self,
        at: Point,
        half: tuple[float, float],
        azimuth: float,
        gid: str | None = None,
        inside: Box | None = None,
        **more: Any,
    ) -> None:
        """An ellipse with half axes (major, minor) in mm, the major one ``azimuth`` radians clockwise from up."""
        from matplotlib.patches import Ellipse

        options: dict[str, Any] = {"facecolor": "none", "edgecolor": BLACK, "linewidth": 0.8, "clip_on": False} | more
        turn = 90.0 - math.degrees(azimuth)
        self.clip(self.axes.add_artist(Ellipse(at, 2 * half[0], 2 * half[1], angle=turn, gid=gid, **options)), inside)

    def curve(self, one: Point, bend: Point, other: Point, width: float, **more: Any) -> None:
        """A curved line from ``one`` to ``other``, drawn towards ``bend``."""
        from matplotlib.patches import PathPatch
        from matplotlib.path import Path as Curve

        options: dict[str, Any] = {"facecolor": "none", "edgecolor": BLACK, "clip_on": False} | more
        shape = Curve([one, bend, other], [Curve.MOVETO, Curve.CURVE3, Curve.CURVE3])
        self.axes.add_artist(PathPatch(shape, linewidth=width, **options))

    def clip(self, artist: Any, box: Box | None) -> None:
        """Show the artist inside ``box`` (mm) only."""
        from matplotlib.patches import Rectangle

        if box:
            inside = Rectangle(box[:2], box[2] - box[0], box[3] - box[1], transform=self.axes.transData)
            artist.set_clip_path(inside)
            artist.set_clip_on(True)


def draw_symbol(sheet: Sheet, symbol: str, at: Point, size: float = 1.0, gid: str | None = None) -> None:
    """A station: held (filled triangle), weighted (open one), check (square), new (circle), unchecked (crossed one)."""
    x, y = at
    look: dict[str, Any] = {"zorder": 4, "gid": gid, "linewidth": 0.9 * max(size, 0.4)}
    if symbol in ("held", "weighted"):
        r = 2.1 * size
        corners = [(x + r * math.sin(a), y + r * math.cos(a)) for a in (0.0, 2 * math.pi / 3, 4 * math.pi / 3)]
        look["linewidth"] *= 1.0 if symbol == "held" else 1.5
        sheet.polygon(corners, facecolor=BLACK if symbol == "held" else "white", **look)
    elif symbol == "check":
        r = 1.35 * size
        sheet.polygon([(x - r, y - r), (x + r, y - r), (x + r, y + r), (x - r, y + r)], facecolor=GREEN, **look)
    else:
        r = (1.6 if symbol == "unchecked" else 1.25) * size
        sheet.ellipse(at, (r, r), 0.0, facecolor="white", **look)
        if symbol == "unchecked":
            d = r / math.sqrt(2)
            cross = f"cross-{gid}" if gid else None
            sheet.lines([[(x - d, y - d), (x + d, y + d)], [(x - d, y + d), (x + d, y - d)]], 0.9 * max(size, 0.4),
                        cross or "cross", zorder=4.1)  # fmt: skip


def draw_cross(sheet: Sheet, at: Point, size: float = 1.0, gid: str = "left-out") -> None:
    """The mark of a reading that was left out."""
    (x, y), d = at, 1.3 * size
    strokes: list[list[Point]] = [[(x - d, y - d), (x + d, y + d)], [(x - d, y + d), (x + d, y - d)]]
    sheet.lines(strokes, 2.6, f"{gid}-edge", edgecolor="white", zorder=2.4)
    sheet.lines(strokes, 1.2, gid, zorder=2.5)


MARKS = {"held": ("^", 3.6, BLACK), "weighted": ("^", 3.6, "white"), "check": ("s", 2.6, GREEN),
         "new": ("o", 2.4, "white"), "unchecked": ("o", 3.2, "white")}  # fmt: skip


def draw_symbols(sheet: Sheet, symbol: str, at: Sequence[Point], size: float, gid: str) -> None:
    """Many stations of one symbol as one group, for networks too large for an id a station."""
    marker, mm, fill = MARKS[symbol]
    width = 0.9 * max(size, 0.4)
    sheet.marks(at, marker, mm * size, gid, markerfacecolor=fill, markeredgewidth=width, zorder=4)
    if symbol == "unchecked":
        sheet.marks(at, "x", mm * size * 0.7, f"{gid}-cross", markeredgewidth=width, zorder=4.1)


def draw_badge(sheet: Sheet, number: int, at: Point, size: float = 1.0, gid: str | None = None) -> None:
    """The numbered mark of a suspect reading."""
    r = 2.0 * size
    sheet.ellipse(at, (r, r), 0.0, gid=gid, facecolor="white", edgecolor=VERMILLION, linewidth=1.3, zorder=5)
    place = (at[0], at[1] - 0.15)
    sheet.text(place, str(number), 6.5 * size, bold=True, ha="center", va="center_baseline", color=VERMILLION)
