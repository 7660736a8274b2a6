"""Papers, the room on them, and round scales: everything about the drawing that needs no drawing yet.

1:N is true on the paper: mm of paper = metres of ground · 1000 / N.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from adjust.record.shown import Entry, Shown
from adjust.units import LENGTHS

Box = tuple[float, float, float, float]
"""left, bottom, right, top in mm."""
Point = tuple[float, float]

PAPERS = {"A4": (297.0, 210.0), "A3": (420.0, 297.0), "A2": (594.0, 420.0),
          "Letter": (279.4, 215.9), "Tabloid": (431.8, 279.4)}  # fmt: skip
"""Width and height in mm, lying on the long side: ISO 216; 8.5 x 11 and 11 x 17 inches."""
SCREEN = "screen"
EDGE, GAP, PANEL = 10.0, 3.0, 62.0
MARGIN = 17.0
"""Room in mm around the outermost stations of a plan."""

METRIC_SCALES = (1.0, 1.25, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 7.5)
FOOT_SCALES = (1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0)
"""Steps of 1:N, and of feet to the inch, that scale rules of the trade carry."""


@dataclass(frozen=True)
class Layout:
    """A sheet: its size, the frame of the view, the columns of the panel and the place of the caution, in mm."""

    name: str
    width: float
    height: float
    frame: Box
    columns: tuple[Box, ...]
    caution: Box
    margin: float = MARGIN

    @property
    def upright(self) -> bool:
        """Standing on the short side."""
        return self.height > self.width

    @property
    def in_words(self) -> str:
        """Where the stated scale is true: 'on A4'."""
        return f"at {self.width:g} mm width" if self.name == SCREEN else f"on {self.name}"


def lying(name: str) -> Layout:
    """The paper on its long side: the view left, one column right."""
    width, height = PAPERS[name]
    left, right, top = width - EDGE - PANEL, width - EDGE, height - EDGE
    frame = (EDGE, EDGE, left - GAP, top)
    return Layout(name, width, height, frame, ((left, EDGE + 17, right, top),), (left, EDGE, right, EDGE + 17))


def standing(name: str) -> Layout:
    """The paper on its short side: the view above, three columns below."""
    height, width = PAPERS[name]
    return _stacked(name, width, height, EDGE, 68.0, 3, 9.0, MARGIN)


def screen(record: Entry) -> Layout:
    """A narrow sheet for screens, as high as the network needs: its type is read where it is shown 360 pixels wide."""
    view = 84.0
    if is_plan(record):
        low, high = extent(record)
        width, height = high[0] - low[0], high[1] - low[1]
        view = min(max(82.0 * height / width + 22.0, 56.0), 112.0) if width > 0 else 104.0
    return _stacked(SCREEN, 108.0, view + 119.5, 2.0, 114.0, 2, 13.0, 11.0)


def _stacked(
    name: str, width: float, height: float, edge: float, panel: float, columns: int, foot: float, margin: float
) -> Layout:
    """The view above a panel of ``panel`` mm with ``columns`` columns, the caution in its lowest ``foot`` mm."""
    top, each = edge + panel, (width - 2 * edge) / columns
    boxes = tuple((edge + i * each, edge + foot, edge + (i + 1) * each, top) for i in range(columns))
    gap = 1.5 if edge < EDGE else GAP
    frame = (edge, top + gap, width - edge, height - edge)
    return Layout(name, width, height, frame, boxes, (edge, edge, width - edge, edge + foot), margin)


@dataclass(frozen=True)
class Wanted:
    """What [drawing] of the job asks for; None: the drawing chooses."""

    paper: str
    orientation: str
    scale: float | None
    ellipses: float | None
    relative: float | None
    layers: frozenset[str]

    @classmethod
    def of(cls, record: Entry) -> Wanted:
        """The wishes of a record."""
        one = record["settings"]["drawing"]
        paper = one["paper"] or ("A4" if record["units"]["length"] == "m" else "Letter")
        return cls(paper, one["orientation"], one["scale"], one["ellipses"], one["relative_ellipses"],
                   frozenset(one["layers"]))  # fmt: skip


def is_plan(record: Entry) -> bool:
    """Some station has plane coordinates."""
    return any(one["east"] is not None and one["north"] is not None for one in record["stations"])


def has_heights(record: Entry) -> bool:
    """Some station has a height that was adjusted."""
    return any(one["height"] is not None and one["sd_height"] for one in record["stations"])


def extent(record: Entry) -> tuple[Point, Point]:
    """Lowest and highest east and north (m) of the stations with plane coordinates."""
    east, north = zip(*((one["east"], one["north"]) for one in record["stations"]
                        if one["east"] is not None and one["north"] is not None), strict=True)  # fmt: skip
    return (min(east), min(north)), (max(east), max(north))


def room(frame: Box, margin: float) -> Point:
    """Width and height in mm for the stations themselves."""
    return frame[2] - frame[0] - 2 * margin, frame[3] - frame[1] - 2 * margin


def layout_of(record: Entry) -> Layout:
    """The paper asked for, lying or standing as the network is; upright only where that makes the plan larger."""
    wanted = Wanted.of(record)
    flat, upright = lying(wanted.paper), standing(wanted.paper)
    if wanted.orientation != "auto":
        return upright if wanted.orientation == "portrait" else flat
    if not is_plan(record):
        return flat
    low, high = extent(record)
    size = (high[0] - low[0], high[1] - low[1])
    least = [max(size[i] / room(one.frame, one.margin)[i] for i in (0, 1)) for one in (flat, upright)]
    return upright if least[1] < 0.95 * least[0] else flat


def scale_number(size: Point, space: Point, shown: Shown) -> float:
    """The rounded N of 1:N at which ``size`` (m, across and up) fits ``space`` (mm)."""
    least = max(size[0] / space[0], size[1] / space[1]) * 1000
    if shown.length == "m":
        return _round_up(max(least, 10.0), METRIC_SCALES)
    inch_rule = LENGTHS[shown.length] / LENGTHS["in"]
    return _round_up(max(least / inch_rule, 1.0), FOOT_SCALES) * inch_rule


def _round_up(least: float, steps: tuple[float, ...]) -> float:
    power = 10.0 ** math.floor(math.log10(least))
    return min(step * power for step in (*steps, 10.0) if step * power >= least * (1 - 1e-9))


def number(value: float) -> str:
    """A round number without exponent or trailing zeros: 500, 0.25."""
    return f"{value:.10f}".rstrip("0").rstrip(".") if value < 1e6 else f"{value:.0f}"


def ratio_in_words(scale: float, shown: Shown) -> str:
    """'1:2000', for feet with the engineer's form before it."""
    if shown.length == "m":
        return f"1:{shown.mark(number(round(scale, 6)))}"
    feet = number(round(scale * LENGTHS["in"] / LENGTHS[shown.length], 6))
    return f"1 inch = {shown.mark(feet)} {shown.length} (1:{scale:.0f})"


def scale_in_words(scale: float, shown: Shown, layout: Layout) -> str:
    """'Scale 1:2000 on A4'."""
    return f"Scale {ratio_in_words(scale, shown)} {layout.in_words}"


def chosen_scale(record: Entry, layout: Layout, frame: Box) -> float:
    """The scale asked for where the stations fit the frame at it, else the round scale that shows all of them."""
    low, high = extent(record)
    size, wanted = (high[0] - low[0], high[1] - low[1]), Wanted.of(record).scale
    if wanted and layout.name != SCREEN and _fits(size, wanted, frame):
        return wanted
    return scale_number(size, room(frame, layout.margin), Shown.of(record))


def _fits(size: Point, scale: float, frame: Box) -> bool:
    """At a scale asked for the stations may come nearer to the frame than the drawing would choose: 6 mm."""
    across, up = room(frame, 6.0)
    return size[0] * 1000 / scale <= across and size[1] * 1000 / scale <= up


def drawing_warnings(record: Entry) -> list[str]:
    """Sentences where [drawing] asks for what the paper cannot hold."""
    wanted = Wanted.of(record)
    if not wanted.scale or not is_plan(record):
        return []
    layout, (low, high) = layout_of(record), extent(record)
    size = (high[0] - low[0], high[1] - low[1])
    if _fits(size, wanted.scale, layout.frame):
        return []
    shown, space = Shown.of(record), room(layout.frame, 6.0)
    need = " x ".join(f"{one * 1000 / wanted.scale:.0f}" for one in size)
    have = " x ".join(f"{one:.0f}" for one in space)
    drawn = ratio_in_words(chosen_scale(record, layout, layout.frame), shown)
    asked = ratio_in_words(wanted.scale, shown)
    return [f"drawing: at the scale asked for, {asked}, the stations need {need} mm and {layout.name} has {have} mm "
            f"for them; drawn at {drawn}. Ask for a larger paper or a smaller scale."]  # fmt: skip
