"""A network of heights only, as a schematic: heights upwards, stations side by side as the level lines run.

Sideways nothing is to scale. Confidence bars have their own stated magnification over the height axis:

    bar half length in mm = multiplier · sd · (mm of paper per metre of height) · magnification
"""

from __future__ import annotations

import itertools
import math
from collections import deque
from dataclasses import dataclass, field
from statistics import NormalDist

import numpy as np

from adjust.record.labels import Labels
from adjust.record.lasting import between_marks
from adjust.record.net import (
    HEIGHT_KINDS,
    ROLES,
    Names,
    left_out_lines,
    ordered,
    pointed_lines,
    suspect_readings,
    unchecked_stations,
)
from adjust.record.paper import SCREEN, Layout, Point, Wanted
from adjust.record.sheet import (
    BLUE,
    DARK,
    GREY,
    PALE,
    VERMILLION,
    Sheet,
    draw_badge,
    draw_cross,
    draw_symbol,
    mark_id,
    nearest_step,
    round_step,
)
from adjust.record.shown import Entry, Shown, count
from adjust.record.writing import Writing
from adjust.units import LENGTHS

MOST_LABELS = 60
MOST_BENT = 120
"""Stations above which lines stay straight: there is no room to bend them, and the search would take seconds."""
BADGES = 9


@dataclass
class LevelView:
    """What was drawn, for the legend and the scales of the panel."""

    mm_per_metre: float
    magnification: float | None = None
    symbols: list[str] = field(default_factory=list)
    looks: list[str] = field(default_factory=list)
    words: str = ""
    """What the lines are."""
    left_out: bool = False
    suspects: bool = False
    notes: list[str] = field(default_factory=list)
    """What is not drawn, in words."""


def height_readings(record: Entry) -> list[Entry]:
    """The observations that carry heights; all where none does."""
    return [one for one in record["observations"] if one["kind"] in HEIGHT_KINDS] or list(record["observations"])


def walk(record: Entry) -> list[str]:
    """Stations breadth first along the level lines from the first control; every other piece after it likewise."""
    neighbours: dict[str, list[str]] = {one["station"]: [] for one in record["stations"] if one["height"] is not None}
    for one in height_readings(record):
        for a, b in pointed_lines(one):
            if a in neighbours and b in neighbours:
                neighbours[a].append(b)
                neighbours[b].append(a)
    control = [one["station"] for one in record["stations"] if one["role_height"] in ("held", "weighted")]
    order: dict[str, None] = {}
    for start in [*(name for name in control if name in neighbours), *neighbours]:
        waiting = deque([start])
        while waiting:
            name = waiting.popleft()
            if name not in order:
                order[name] = None
                waiting.extend(neighbours[name])
    return list(order)


def multiplier(record: Entry) -> float:
    """Half width of the confidence interval over the standard deviation: normal, or Student from residuals."""
    settings = record["settings"]
    share = 0.5 + settings["confidence"] / 2
    if settings["variance_factor"] == "given":
        return NormalDist().inv_cdf(share)
    from scipy.special import stdtrit

    parts = [part for part in record["solution"]["parts"] if "heights" in str(part["what"])]
    freedom = (parts[0] if parts else record["solution"])["degrees_of_freedom"]
    return float(stdtrit(freedom, share)) if freedom > 0 else NormalDist().inv_cdf(share)


class _Schematic:
    def __init__(self, sheet: Sheet, record: Entry, layout: Layout) -> None:
        frame = layout.frame
        self.sheet, self.record, self.frame, self.shown = sheet, record, frame, Shown.of(record)
        self.wanted = Wanted.of(record)
        self.tight = 0.55 if layout.name == SCREEN else 1.0
        self.axis_mm = 14.0 if layout.name == SCREEN else 18.0
        entries = {one["station"]: one for one in record["stations"]}
        self.stations = [entries[name] for name in walk(record)]
        heights = np.array([one["height"] for one in self.stations])
        self.low, span = float(heights.min()), max(float(np.ptp(heights)), 0.01)
        left, bottom, right, top = frame
        self.mm_per_metre = (top - bottom - 56) / span
        xs = (
            np.linspace(left + self.axis_mm + 12, right - 20, len(self.stations))
            if len(self.stations) > 1
            else [(left + right) / 2]
        )
        ys = bottom + 28 + (heights - self.low) * self.mm_per_metre
        self.at = {one["station"]: (float(x), float(y)) for one, x, y in zip(self.stations, xs, ys, strict=True)}
        self.place = {name: i for i, name in enumerate(self.at)}
        self.size = (1.0 if len(self.stations) <= 40 else 0.6) * (0.8 if layout.name == SCREEN else 1.0)
        self.unchecked = unchecked_stations(record)
        self.middles: list[Point] = []

    def axis(self) -> None:
        """The height axis with round figures and thin level lines."""
        left, bottom, right, top = self.frame
        inner = left + self.axis_mm
        unit = LENGTHS[self.shown.length]
        step = round_step((top - bottom) / 6 / self.mm_per_metre / unit)
        first = math.ceil((self.low - 22 / self.mm_per_metre) / unit / step)
        last = math.floor((self.low + (top - bottom - 36) / self.mm_per_metre) / unit / step)
        places = max(0, -math.floor(math.log10(step)))
        for k in range(first, last + 1):
            y = bottom + 28 + (k * step * unit - self.low) * self.mm_per_metre
            self.sheet.line([(inner, y), (right, y)], 0.4, color=PALE, zorder=0)
            self.sheet.text((inner - 1.5, y), self.shown.mark(f"{k * step:.{places}f}"), 6.5, ha="right",
                            va="center_baseline", color=GREY)  # fmt: skip
        self.sheet.text((left + 3.5, (bottom + top) / 2), f"Height, {self.shown.length}", 7, rotation=90, va="center",
                        ha="center", color=GREY)  # fmt: skip
        note = "Stations in the order of the lines; nothing is to scale sideways."
        self.sheet.text((inner, bottom + 3), note, 6, color=GREY)

    def lines(self, labels: Labels) -> None:
        """The levelled lines: straight where nothing is in the way, bent around it otherwise."""
        blamed = {ordered(line): i for i, one in reversed(list(enumerate(suspect_readings(self.record))))
                  for line in pointed_lines(one)} if "suspects" in self.wanted.layers else {}  # fmt: skip
        done: dict[Names, int] = {}
        for one in height_readings(self.record) if "lines" in self.wanted.layers else []:
            for a, b in pointed_lines(one):
                key = (a, b) if self.place.get(a, -1) < self.place.get(b, -1) else (b, a)
                if a in self.at and b in self.at:
                    repeat = done[key] = done.get(key, -1) + 1
                    if repeat < 3:  # a line levelled again is drawn beside itself; more would be one blot
                        self._line(key, blamed.get(ordered(key)), repeat == 0, labels)

    def left_out(self, labels: Labels) -> bool:
        """The lines of readings left out, dashed and crossed; whether there are any."""
        lines = [line for line in left_out_lines(self.record) if self.at.keys() >= set(line)]
        if "left-out" not in self.wanted.layers:
            return False
        for i, (a, b) in enumerate(lines):
            key = (a, b) if self.place[a] < self.place[b] else (b, a)
            one, other, bend = self.at[key[0]], self.at[key[1]], self._bend(key)
            self.sheet.curve(one, bend, other, 0.8, edgecolor=GREY, linestyle=(0, (2.0, 2.0)), zorder=0.8)
            middle = _chords(one, bend, other)[9][0]
            self.middles.append(middle)
            draw_cross(self.sheet, middle, gid=f"left-out-{i + 1}")
            labels.keep_off(middle, 1.4)
        return bool(lines)

    def _line(self, ends: Names, suspect: int | None, badge: bool, labels: Labels) -> None:
        one, other = self.at[ends[0]], self.at[ends[1]]
        bend = self._bend(ends)
        look = {"edgecolor": DARK, "zorder": 1} if suspect is None else {"edgecolor": VERMILLION, "zorder": 2}
        gid = f"line-{len(self.middles) + 1}"
        self.sheet.curve(one, bend, other, 0.9 if suspect is None else 2.0, gid=gid, **look)
        chords = _chords(one, bend, other)
        labels.segments += chords if len(self.at) <= MOST_BENT else [[one, other]]
        middle = chords[8][0]
        self.middles.append(middle)
        if suspect is not None and suspect < BADGES and badge:
            draw_badge(self.sheet, suspect + 1, middle, gid=f"suspect-{suspect + 1}")
            labels.keep_off(middle, 2.2)

    def _bend(self, ends: Names) -> Point:
        """Where to draw the line towards: straight, or bent least so that it keeps off other stations and lines."""
        (x1, y1), (x2, y2) = one, other = self.at[ends[0]], self.at[ends[1]]
        if len(self.at) > MOST_BENT:
            return (x1 + x2) / 2, (y1 + y2) / 2
        length = math.hypot(x2 - x1, y2 - y1) or 1.0
        across = (-(y2 - y1) / length, (x2 - x1) / length)
        strangers = [at for name, at in self.at.items() if name not in ends and x1 - 6 < at[0] < x2 + 6]
        best, least = one, math.inf
        for away in (self.tight * k for k in (0.0, 6.0, -6.0, 12.0, -12.0, 20.0, -20.0, 30.0, -30.0, 42.0, -42.0)):
            bend = ((x1 + x2) / 2 + away * across[0], (y1 + y2) / 2 + away * across[1])
            points = [chord[0] for chord in _chords(one, bend, other)[1:]]
            near = sum(max(0.0, 7.0 * self.tight - min(math.dist(p, at) for p in points)) for at in strangers)
            near += sum(max(0.0, 3.0 * self.tight - math.dist(points[7], middle)) for middle in self.middles)
            outside = sum(max(0.0, self.frame[1] + 8 - y) + max(0.0, y - self.frame[3] + 4) for _, y in points)
            if (cost := near + outside + 0.04 * abs(away)) < least:
                best, least = bend, cost
        return best

    def bars(self, labels: Labels) -> float | None:
        """The confidence bars; their magnification over the height axis."""
        half = {one["station"]: multiplier(self.record) * one["sd_height"] * self.mm_per_metre
                for one in self.stations if one["sd_height"]}  # fmt: skip
        if not half or "ellipses" not in self.wanted.layers:
            return None
        m = nearest_step(6.0 / float(np.median(list(half.values()))))
        while max(half.values()) * m > 22:
            m = nearest_step(m / 2)
        if self.wanted.ellipses and max(half.values()) * self.wanted.ellipses <= 27:
            m = self.wanted.ellipses
        for name, length in half.items():
            x, y = self.at[name]
            draw_bar(self.sheet, (x, y), length * m, 1.1 * self.size, mark_id("bar", name))
            labels.soft.append((x - 1, y - length * m, x + 1, y + length * m))
        return m

    def symbol(self, one: Entry) -> str:
        """The symbol of a station, by its role in height."""
        unchecked = one["station"] in self.unchecked and one["role_height"] == "new"
        return "unchecked" if unchecked else str(one["role_height"])


def _chords(one: Point, bend: Point, other: Point) -> list[list[Point]]:
    """The curve as sixteen chords: (1 - t)² one + 2 t (1 - t) bend + t² other."""
    ts = [k / 16 for k in range(17)]
    points = [((1 - t) ** 2 * one[0] + 2 * t * (1 - t) * bend[0] + t * t * other[0],
               (1 - t) ** 2 * one[1] + 2 * t * (1 - t) * bend[1] + t * t * other[1]) for t in ts]  # fmt: skip
    return [[a, b] for a, b in itertools.pairwise(points)]


def draw_bar(sheet: Sheet, at: Point, half: float, reach: float, gid: str | None = None) -> None:
    """An upright bar of 2 · ``half`` mm with end strokes."""
    x, y = at
    sheet.line([(x, y - half), (x, y + half)], 1.3, gid=gid, color=BLUE, zorder=3)
    for end in (y - half, y + half):
        sheet.line([(x - reach, end), (x + reach, end)], 1.3, color=BLUE, zorder=3)


def draw_levels(sheet: Sheet, record: Entry, layout: Layout) -> LevelView:
    """Draw the schematic into the layout's frame and say what it shows; at least one station has a height."""
    whole, record = record, between_marks(record)
    s, frame, writing = _Schematic(sheet, record, layout), layout.frame, Writing.of(record)
    size = (7.5 if s.size == 1 else 5.5) if layout.name != SCREEN else 6.5 if len(s.stations) <= 40 else 5.0
    labels = Labels(sheet, (frame[0] + s.axis_mm, frame[1] + 7, frame[2] - 1, frame[3] - 1), size)
    s.axis()
    s.lines(labels)
    view = LevelView(s.mm_per_metre, looks=["both"] if s.middles else [])
    kinds = {one["kind"] for one in height_readings(record)} & {"levelled", "zenith_angle"}
    view.words = {("levelled",): "levelled line", ("zenith_angle",): "zenith angle", (): "line measured"}.get(
        tuple(sorted(kinds)), "levelled line or zenith angle"
    )
    view.left_out = s.left_out(labels)
    view.magnification = s.bars(labels)
    view.suspects = "suspects" in s.wanted.layers
    if without := len(record["stations"]) - len(s.stations):
        view.notes.append(f"Not drawn: {count(without, 'station')} without a height.")
    if hidden := len(whole["stations"]) - len(record["stations"]):
        view.notes.append(f"Not drawn: {count(hidden, 'change point')} between the marks.")
    for one in s.stations:
        draw_symbol(sheet, s.symbol(one), s.at[one["station"]], s.size, mark_id("station", one["station"]))
        labels.keep_off(s.at[one["station"]], 1.8 * s.size)
    seen = {s.symbol(one) for one in s.stations}
    view.symbols = [symbol for symbol in ROLES if symbol in seen]
    every = math.ceil(len(s.stations) / MOST_LABELS)
    named = [one for i, one in enumerate(s.stations) if i % every == 0 or one["role_height"] != "new"]
    names = [one["station"] for one in named] if "names" in s.wanted.layers else []
    lost = labels.place([(s.at[name], writing.name(name, 14), mark_id("label", name)) for name in names])
    if every > 1:
        view.notes.append(f"Named: control, and one station of {every} along the lines as room allows.")
    elif lost:
        view.notes.append(f"{count(lost, 'name')} left out for want of room; see stations.csv.")
    return view
