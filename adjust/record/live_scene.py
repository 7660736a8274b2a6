"""Where everything of the live plan lies, in units of its drawing (x to the right, y down).

    x = 6 · (mm of the sheet),  y = 6 · (height of the sheet - mm)       6 units to the millimetre

so that placing, magnifications and choices of the drawing on paper serve the screen too. A network of heights only is
a schematic: heights upwards, stations side by side as the level lines run.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any, cast

import numpy as np

from adjust.book.schema import LAYERS
from adjust.record.lasting import between_marks
from adjust.record.level_view import height_readings, multiplier, walk
from adjust.record.net import HEIGHT, Names, left_out_lines, ordered, pointed_lines, unchecked_stations
from adjust.record.paper import SCREEN, Box, Layout, Point, extent, is_plan, room
from adjust.record.plan_data import Ground, Plan
from adjust.record.sheet import Sheet, nearest_step, round_step
from adjust.record.shown import Entry
from adjust.units import LENGTHS

UNITS = 6.0
WIDTH = 640.0
"""Units to the mm, and width of the drawing: its type of 18 units is 10 pixels high on a screen of 360."""
LOW, HIGH = 56.0, 112.0
"""Least and greatest height in mm, as of the sheet for screens."""
MOST_BENT = 60
"""Stations of a schematic above which its lines stay straight."""


@dataclass(frozen=True)
class Oval:
    """An ellipse in drawing units, ``turn`` degrees clockwise of its long axis from the right."""

    at: Point
    half: Point
    turn: float
    names: tuple[str, ...]
    pair: bool = False


@dataclass
class Scene:
    """What the plan shows and where."""

    height: float
    at: dict[str, Point]
    index: dict[str, int]
    """Position of each name in the record's stations."""
    roles: dict[str, str]
    looks: dict[Names, str]
    left_out: list[Names]
    record: Entry
    metres: float | None = None
    """Metres of ground to one unit; None for a schematic."""
    bends: dict[Names, Point] = field(default_factory=dict)
    ellipses: list[Oval] = field(default_factory=list)
    relative: list[Oval] = field(default_factory=list)
    bars: dict[str, float] = field(default_factory=dict)
    """Half lengths of the bars of a schematic."""
    magnification: float | None = None
    relative_magnification: float | None = None
    per_height: float | None = None
    """Units to one metre of height, of a schematic."""
    levels: list[tuple[float, float]] = field(default_factory=list)
    """y and height (m) of the level lines of a schematic."""
    missing: int = 0
    ellipses_of: int = 0
    relative_of: int = 0
    """How many there are, of which the largest are drawn."""

    @property
    def many(self) -> int:
        """Number of stations drawn."""
        return len(self.at)

    def ends(self, line: Names) -> str:
        """Both ends of a line as positions, the smaller first: '12-17'."""
        a, b = sorted((self.index[line[0]], self.index[line[1]]))
        return f"{a}-{b}"


def scene_of(record: Entry) -> Scene | None:
    """The scene of a record; None where no station has coordinates."""
    if is_plan(record):
        return _plane(record)
    return _levels(record) if any(one["height"] is not None for one in record["stations"]) else None


def _positions(record: Entry) -> dict[str, int]:
    return {one["station"]: i for i, one in enumerate(record["stations"])}


def _layout(record: Entry) -> Layout:
    low, high = extent(record)
    wide, tall = high[0] - low[0], high[1] - low[1]
    width = WIDTH / UNITS
    height = min(max(82.0 * tall / wide + 22.0, LOW), HIGH) if wide > 0 else 100.0
    return Layout(SCREEN, width, height, (0.0, 5.0, width, height), (), (0, 0, 0, 0), 11.0)


def _whole(record: Entry) -> dict[str, Any]:
    """The record with every layer asked for: here they can be switched off. The inset is what zooming does."""
    settings = record["settings"]
    drawing = {**settings["drawing"], "layers": [one for one in LAYERS if one != "inset"], "scale": None}
    return {**record, "settings": {**settings, "drawing": drawing}}


class _Filled(Plan):
    """The plan's data at the scale that fills the frame: on a screen no ruler asks for a round one."""

    def _ground(self, frame: Box) -> Ground:
        low, high = extent(self.record)
        wide, tall = room(frame, self.layout.margin)
        scale = 1000 * max((high[0] - low[0]) / wide, (high[1] - low[1]) / tall, 0.001)
        return Ground(frame, scale, ((low[0] + high[0]) / 2, (low[1] + high[1]) / 2))


def _plane(record: Entry) -> Scene:
    layout = _layout(record)
    plan = _Filled(cast(Sheet, None), _whole(record), layout)  # its data alone: nothing is painted on a sheet
    every, pairs = len(plan.ellipses), len(plan.relative)
    plan.magnifications()
    scene = Scene(
        layout.height * UNITS,
        {name: _flip(at, layout) for name, at in plan.at.items()},
        _positions(record),
        {one["station"]: plan.symbol(one) for one in plan.stations},
        plan.looks,
        plan.left_out,
        record,
        plan.ground.scale / 1000 / UNITS,
        missing=len(record["stations"]) - len(plan.stations),
        ellipses_of=_with_ellipse(record, plan),
        relative_of=pairs,
    )
    scene.magnification, scene.relative_magnification = plan.view.magnification, plan.view.relative
    if scene.magnification and every:
        scene.ellipses = _ellipses(plan, scene, scene.magnification)
    if scene.relative_magnification:
        scene.relative = _relative(plan, scene, scene.relative_magnification, layout)
    return scene


def _with_ellipse(record: Entry, plan: Plan) -> int:
    return sum(1 for one in plan.stations if one["ellipse_confidence"] and one["ellipse_confidence"]["semi_major"])


def _flip(at: Point, layout: Layout) -> Point:
    return at[0] * UNITS, (layout.height - at[1]) * UNITS


def _turn(azimuth: float) -> float:
    """Degrees, clockwise on the screen, from the right to the long axis."""
    return math.degrees(azimuth) - 90.0


def _ellipses(plan: Plan, scene: Scene, magnification: float) -> list[Oval]:
    k = magnification / cast(float, scene.metres)
    made = []
    for one in plan.ellipses:
        e = one["ellipse_confidence"]
        half = (e["semi_major"] * k, (e["semi_minor"] or 0.0) * k)
        made.append(Oval(scene.at[one["station"]], half, _turn(e["azimuth"]), (one["station"],)))
    return made


def _relative(plan: Plan, scene: Scene, magnification: float, layout: Layout) -> list[Oval]:
    k = magnification / cast(float, scene.metres)
    spots = plan.spots(plan.at, plan.relative)
    return [
        Oval(_flip(spot, layout), (one.semi_major * k, one.semi_minor * k), _turn(one.azimuth), one.ends, one.pair)
        for one, spot in zip(plan.relative, spots, strict=True)
    ]


def _levels(whole: Entry) -> Scene:
    """The schematic: change points between the marks are drawn together, as on paper."""
    record = between_marks(whole)
    entries = {one["station"]: one for one in record["stations"]}
    names = walk(record)
    heights = np.array([entries[name]["height"] for name in names])
    low, span = float(heights.min()), max(float(np.ptp(heights)), 0.01)
    tall = min(max(30.0 + 1.2 * len(names), 66.0), 90.0) * UNITS
    k = (tall - 150) / span
    xs = np.linspace(110, WIDTH - 70, len(names)) if len(names) > 1 else np.array([WIDTH / 2])
    at = {name: (float(x), float(tall - 75 - (h - low) * k)) for name, x, h in zip(names, xs, heights, strict=True)}
    unchecked = unchecked_stations(record)
    roles = {
        name: "unchecked"
        if name in unchecked and entries[name]["role_height"] == "new"
        else str(entries[name]["role_height"])
        for name in names
    }
    lines = {ordered(line) for one in height_readings(record) for line in pointed_lines(one) if at.keys() >= set(line)}
    looks = dict.fromkeys(sorted(lines, key=lambda line: (names.index(line[0]), names.index(line[1]))), HEIGHT)
    left_out = [line for line in left_out_lines(record) if at.keys() >= set(line)]
    scene = Scene(
        tall,
        at,
        _positions(whole),
        roles,
        looks,
        left_out,
        record,
        per_height=k,
        missing=len(whole["stations"]) - len(names),
    )
    scene.levels = _level_lines(low, span, k, tall, whole)
    scene.bends = _bends(scene)
    half = {name: multiplier(record) * entries[name]["sd_height"] * k for name in names if entries[name]["sd_height"]}
    if half:
        scene.magnification = _bar_magnification(list(half.values()))
        scene.bars = {name: length * scene.magnification for name, length in half.items()}
    return scene


def _bar_magnification(half: list[float]) -> float:
    chosen = nearest_step(30.0 / float(np.median(half)))
    while max(half) * chosen > 60:
        chosen = nearest_step(chosen / 2)
    return chosen


def _level_lines(low: float, span: float, k: float, tall: float, record: Entry) -> list[tuple[float, float]]:
    unit = LENGTHS[record["units"]["length"]]
    step = round_step(max(span / unit, 0.01) / 4)
    first, last = math.ceil((low / unit) / step) - 1, math.floor((low + span) / unit / step) + 1
    made = [(tall - 75 - (i * step * unit - low) * k, i * step) for i in range(first, last + 1)]
    return [one for one in made if 14 < one[0] < tall - 12]


def _bends(scene: Scene) -> dict[Names, Point]:
    """Where each line of a schematic is drawn towards, so that it keeps off stations that are not its own."""
    if scene.many > MOST_BENT:
        return {}
    found: dict[Names, Point] = {}
    middles: list[Point] = []
    for line in scene.looks:
        bend = _bend(scene, line, middles)
        found[line] = bend
        middles.append(curve_point(scene.at[line[0]], bend, scene.at[line[1]], 0.5))
    return found


def _bend(scene: Scene, line: Names, middles: list[Point]) -> Point:
    (x1, y1), (x2, y2) = one, other = scene.at[line[0]], scene.at[line[1]]
    length = math.hypot(x2 - x1, y2 - y1) or 1.0
    across = (-(y2 - y1) / length, (x2 - x1) / length)
    strangers = [at for name, at in scene.at.items() if name not in line]
    best, least = one, math.inf
    for away in (0.0, 30.0, -30.0, 60.0, -60.0, 100.0, -100.0, 150.0, -150.0, 210.0, -210.0):
        bend = ((x1 + x2) / 2 + away * across[0], (y1 + y2) / 2 + away * across[1])
        points = [curve_point(one, bend, other, t / 12) for t in range(1, 12)]
        near = sum(max(0.0, 30.0 - min(math.dist(p, at) for p in points)) for at in strangers)
        near += sum(max(0.0, 14.0 - math.dist(points[5], middle)) for middle in middles)
        near += sum(max(0.0, y - scene.height + 30) + max(0.0, 14 - y) for _, y in points)
        if (cost := near + 0.04 * abs(away)) < least:
            best, least = bend, cost
    return best


def curve_point(one: Point, bend: Point, other: Point, t: float) -> Point:
    """(1 - t)² one + 2 t (1 - t) bend + t² other."""
    a, b, c = (1 - t) ** 2, 2 * t * (1 - t), t * t
    return a * one[0] + b * bend[0] + c * other[0], a * one[1] + b * bend[1] + c * other[1]
