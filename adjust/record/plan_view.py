"""The plan of a network: stations by shape, lines by kind of reading, ellipses with their own stated scale.

paper mm = (metre − centre) · 1000 / N            N the plan's scale number
ellipse half axis in mm = half axis in m · 1000 / N · magnification
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np

from adjust.record.sheet import (
    BLUE,
    GREY,
    PALE,
    VERMILLION,
    Box,
    Labels,
    Point,
    Sheet,
    draw_badge,
    draw_symbol,
    mark_id,
    nearest_step,
    number,
    round_step,
)
from adjust.record.shown import Entry, Shown, plain
from adjust.units import LENGTHS

METRIC_SCALES = (1.0, 1.25, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 7.5)
FOOT_SCALES = (1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0)
"""Steps of 1:N, and of feet to the inch, that scale rules of the trade carry."""

MARGIN = 17.0
MANY = 300
"""Stations above which only the telling ones are labelled."""
MOST_ELLIPSES = 1000
BADGES = 9
ALONG = ("distance", "levelled", "vector")
"""Kinds read along the whole line; all others are pointings taken at its start."""
ARC = 9.0
"""Radius in mm of the arc that marks a suspect angle."""
Names = tuple[str, str]


def pointed_lines(observation: Entry) -> list[Names]:
    """The lines a reading runs along, from its standpoint: two for an angle, none for a reading of one station."""
    start = observation["at"] or observation["from"]
    ends = [observation[key] for key in ("to", "first", "second")]
    return [(start, end) for end in ends if start and end and start != end]


def line_looks(observations: Iterable[Entry]) -> dict[Names, str]:
    """Each line with what was read along it: 'distance', 'pointing' or 'levelled', the first that holds."""
    rank = {"distance": 0, "pointing": 1, "levelled": 2}
    looks: dict[Names, str] = {}
    for one in observations:
        kind = one["kind"]
        look = {"vector": "distance"}.get(kind, kind if kind in rank else "pointing")
        for a, b in pointed_lines(one):
            key = (a, b) if a < b else (b, a)
            looks[key] = min(looks.get(key, look), look, key=rank.__getitem__)
    return looks


def unchecked_stations(record: Entry) -> set[str]:
    """Stations to which an unchecked reading points: its new stations, those aimed at before the standpoint."""
    new = {one["station"] for one in record["stations"] if one["role"] == "new"}
    by_id = {one["id"]: one for one in record["observations"]}
    found: set[str] = set()
    for entry in record["unchecked"]:
        one = by_id.get(entry["observation"])
        aimed = {one[key] for key in ("to", "first", "second")} & new if one else set()
        found |= aimed or ({one[key] for key in ("at", "from")} & new if one else set())
    return found


def suspect_readings(record: Entry) -> list[Entry]:
    """The observations blamed, in order of blame, as far as the record lists them."""
    by_id = {one["id"]: one for one in record["observations"]}
    return [by_id[one["observation"]] for one in record["suspects"] if one["observation"] in by_id]


def scale_number(extent: Point, room: Point, shown: Shown) -> float:
    """The rounded N of 1:N at which ``extent`` (m, across and up) fits ``room`` (mm)."""
    least = max(extent[0] / room[0], extent[1] / room[1]) * 1000
    if shown.length == "m":
        return _round_up(max(least, 10.0), METRIC_SCALES)
    inch_rule = LENGTHS[shown.length] / LENGTHS["in"]
    return _round_up(max(least / inch_rule, 1.0), FOOT_SCALES) * inch_rule


def _round_up(least: float, steps: tuple[float, ...]) -> float:
    power = 10.0 ** math.floor(math.log10(least))
    return min(step * power for step in (*steps, 10.0) if step * power >= least * (1 - 1e-9))


def scale_in_words(scale: float, shown: Shown) -> str:
    """'Scale 1:2000 on A4', for feet with the engineer's form before it."""
    if shown.length == "m":
        return f"Scale 1:{shown.mark(number(scale))} on A4"
    feet = number(round(scale * LENGTHS["in"] / LENGTHS[shown.length], 6))
    return f"Scale 1 inch = {shown.mark(feet)} {shown.length} (1:{scale:.0f}) on A4"


@dataclass
class PlanView:
    """What was drawn, for the legend and the scales of the panel."""

    scale: float
    magnification: float | None = None
    ellipses: int = 0
    symbols: list[str] = field(default_factory=list)
    looks: list[str] = field(default_factory=list)
    hidden: int = 0
    """Stations without plane coordinates, not drawn."""


class _Plan:
    def __init__(self, sheet: Sheet, record: Entry, frame: Box) -> None:
        self.sheet, self.record, self.frame = sheet, record, frame
        self.shown = Shown.of(record)
        self.stations = [one for one in record["stations"] if one["east"] is not None and one["north"] is not None]
        places = np.array([[one["east"], one["north"]] for one in self.stations])
        low, high = places.min(axis=0), places.max(axis=0)
        room = (frame[2] - frame[0] - 2 * MARGIN, frame[3] - frame[1] - 2 * MARGIN)
        self.scale = scale_number(tuple(high - low), room, self.shown)
        self.centre = (low + high) / 2
        middle = np.array([(frame[0] + frame[2]) / 2, (frame[1] + frame[3]) / 2])
        self.paper = (places - self.centre) * (1000 / self.scale) + middle
        self.at = {one["station"]: (float(x), float(y)) for one, (x, y) in zip(self.stations, self.paper, strict=True)}
        self.size = 1.0 if len(self.stations) <= 80 else 0.7 if len(self.stations) <= MANY else 0.45
        self.unchecked = unchecked_stations(record)

    def grid(self) -> None:
        """Small crosses and edge figures at round coordinates of the job's unit."""
        unit = LENGTHS[self.shown.length] * 1000 / self.scale  # mm of paper for one unit
        step = round_step(62.0 / unit)
        columns, rows = (self._round_lines(axis, step, unit) for axis in (0, 1))
        for x, _ in columns:
            for y, _ in rows:
                self.sheet.lines([[(x - 1.2, y), (x + 1.2, y)], [(x, y - 1.2), (x, y + 1.2)]], 0.5, "grid", colors=PALE)
        left, bottom, right, top = self.frame
        for x, value in columns:
            for y, up in ((bottom, 1), (top, -1)):
                self.sheet.line([(x, y), (x, y + 1.8 * up)], 0.5, color=GREY)
            text = f"{self._figure(value, step)} E"
            if x + 1.3 + self.sheet.width(text, 5.5) < right:
                self.sheet.text((x + 0.8, bottom + 1.0), text, 5.5, color=GREY)
        for y, value in rows:
            for x, inward in ((left, 1), (right, -1)):
                self.sheet.line([(x, y), (x + 1.8 * inward, y)], 0.5, color=GREY)
            text = f"{self._figure(value, step)} N"
            if y + 1.3 + self.sheet.width(text, 5.5) < top:
                self.sheet.text((left + 1.0, y + 0.8), text, 5.5, color=GREY, rotation=90, va="bottom")

    def _figure(self, value: float, step: float) -> str:
        places = max(0, -math.floor(math.log10(step)))
        return self.shown.mark(f"{value + 0.0:.{places}f}")

    def _round_lines(self, axis: int, step: float, unit: float) -> list[tuple[float, float]]:
        """Paper position (mm) and value of the round coordinates inside the frame."""
        low, high = self.frame[axis] + 6, self.frame[axis + 2] - 6
        middle, centre = (self.frame[axis] + self.frame[axis + 2]) / 2, self.centre[axis] / LENGTHS[self.shown.length]
        first, last = (
            math.ceil((centre + (low - middle) / unit) / step),
            math.floor((centre + (high - middle) / unit) / step),
        )
        return [(middle + (k * step - centre) * unit, k * step) for k in range(first, last + 1)]

    def lines(self) -> list[str]:
        """Draw the lines by what was read along them; the looks that occur."""
        looks = line_looks(self.record["observations"])
        blamed = {tuple(sorted(line)) for one in suspect_readings(self.record) if one["kind"] in ALONG
                  for line in pointed_lines(one)}  # fmt: skip
        drawn = [(a, b) for a, b in looks if a in self.at and b in self.at]
        thin = 1.0 if len(looks) < 400 else 0.5
        for look, (width, dash) in LOOKS.items():
            for suspect in (False, True):
                chosen = [line for line in drawn if looks[line] == look and (line in blamed) == suspect]
                gid = f"lines-{look}" + ("-suspect" if suspect else "")
                look_of = {"colors": VERMILLION, "zorder": 2} if suspect else {"colors": GREY, "zorder": 1}
                segments = [[self.at[a], self.at[b]] for a, b in chosen]
                self.sheet.lines(segments, width * (2.2 if suspect else thin), gid, linestyles=[dash], **look_of)
        seen = {looks[line] for line in drawn}
        return [look for look in LOOKS if look in seen]

    def _half_axes(self) -> list[tuple[Entry, Point, float, float, float]]:
        """Stations with a confidence ellipse: entry, place, half axes in mm of paper unmagnified, azimuth."""
        found = []
        for one in self.stations:
            e = one["ellipse_confidence"]
            if e and e["semi_major"]:
                k = 1000 / self.scale
                found.append(
                    (one, self.at[one["station"]], e["semi_major"] * k, (e["semi_minor"] or 0.0) * k, e["azimuth"])
                )
        return sorted(found, key=lambda item: -item[2])[:MOST_ELLIPSES]

    def magnification(self, half: list[float]) -> float:
        """1, 2 or 5 · 10^k that brings the median half axis near 3.5 % of the frame's width, the largest below 15 %."""
        width = self.frame[2] - self.frame[0]
        target = min(0.035 * width, 0.45 * self._spacing())
        chosen = nearest_step(target / float(np.median(half)))
        while max(half) * chosen > 0.15 * width:
            chosen = nearest_step(chosen / 2)
        return chosen

    def _spacing(self) -> float:
        """Median distance of a station to its nearest neighbour, mm of paper."""
        if len(self.paper) < 2:
            return math.inf
        from scipy.spatial import KDTree

        nearest = np.asarray(KDTree(self.paper).query(self.paper, k=2)[0])
        return max(float(np.median(nearest[:, 1])), 2.0)

    def ellipses(self, labels: Labels) -> tuple[float | None, int]:
        """Draw the confidence ellipses; their magnification and number."""
        found = self._half_axes()
        if not found:
            return None, 0
        m = self.magnification([item[2] for item in found])
        for one, at, major, minor, azimuth in found:
            gid = mark_id("ellipse", one["station"])
            self.sheet.ellipse(at, (major * m, minor * m), azimuth, gid=gid, edgecolor=BLUE, linewidth=1.1 * self.size,
                               facecolor=(0.0, 0.447, 0.698, 0.10), zorder=3)  # fmt: skip
            labels.segments += _outline(at, major * m, minor * m, azimuth)
        return m, len(found)

    def symbol(self, one: Entry) -> str:
        """The symbol of a station."""
        return "unchecked" if one["station"] in self.unchecked and one["role"] == "new" else str(one["role"])

    def badges(self, labels: Labels) -> None:
        """Number the first suspects: a distance at its middle, a pointing near its standpoint, an angle on its arc."""
        taken: list[Point] = []
        for i, one in enumerate(suspect_readings(self.record)[:BADGES]):
            ends = [line for line in pointed_lines(one) if line[0] in self.at and line[1] in self.at]
            if ends:
                at = self._suspect(one, [(self.at[a], self.at[b]) for a, b in ends], taken)
                taken.append(at)
                draw_badge(self.sheet, i + 1, at, gid=f"suspect-{i + 1}")
                labels.keep_off(at, 2.2)

    def _suspect(self, one: Entry, ends: list[tuple[Point, Point]], taken: list[Point]) -> Point:
        """Mark the reading where it was taken; the place of its number."""
        start, end = ends[-1]
        if one["kind"] in ALONG:
            return _clear_of(taken, start, end, 0.5)
        if one["kind"] == "angle" and len(ends) == 2:
            return self._arc(start, ends[0][1], end)
        tip = _part_way(start, end, 0.4)
        self.sheet.line([start, tip], 1.8, color=VERMILLION, zorder=2)
        return _clear_of(taken, start, tip, 0.7)

    def _arc(self, at: Point, first: Point, second: Point) -> Point:
        """The angle's arc, clockwise from ``first`` to ``second``; its middle."""
        begin, finish = (math.atan2(p[0] - at[0], p[1] - at[1]) for p in (first, second))
        turns = np.linspace(begin, begin + (finish - begin) % (2 * math.pi), 41).tolist()
        arc = [(at[0] + ARC * math.sin(t), at[1] + ARC * math.cos(t)) for t in turns]
        self.sheet.line(arc, 1.8, color=VERMILLION, zorder=3.5)
        return arc[20]

    def labelled(self) -> list[Entry]:
        """Stations in the order of labelling; of many only control, checks, unchecked, blamed and the worst ten."""
        blamed = {name for one in suspect_readings(self.record) for line in pointed_lines(one) for name in line}
        if len(self.stations) <= MANY:
            return self.stations
        worst = {item[0]["station"] for item in self._half_axes()[:10]}
        telling = worst | blamed | self.unchecked
        return [one for one in self.stations if one["station"] in telling or one["role"] != "new"][:MANY]


LOOKS: dict[str, tuple[float, str | tuple[int, tuple[float, ...]]]] = {
    "distance": (0.8, "-"),
    "pointing": (0.7, (0, (6.0, 3.5))),
    "levelled": (0.8, (0, (1.0, 2.0))),
}
"""Line width in points and dash of each look."""


def _outline(at: Point, major: float, minor: float, azimuth: float) -> list[list[Point]]:
    """The ellipse as sixteen chords."""
    s, c = math.sin(azimuth), math.cos(azimuth)
    turns = [(major * math.cos(t), minor * math.sin(t)) for t in np.linspace(0, 2 * math.pi, 17).tolist()]
    points = [(at[0] + a * s + b * c, at[1] + a * c - b * s) for a, b in turns]
    return [[one, other] for one, other in itertools.pairwise(points)]


def _part_way(one: Point, other: Point, share: float) -> Point:
    return one[0] + share * (other[0] - one[0]), one[1] + share * (other[1] - one[1])


def _clear_of(taken: list[Point], one: Point, other: Point, share: float) -> Point:
    """A place on the line, at ``share`` of it or a little off, that keeps 5 mm from those taken."""
    places = [_part_way(one, other, share + step) for step in (0.0, 0.1, -0.1, 0.2, -0.2, 0.3)]
    return next((place for place in places if all(math.dist(place, t) > 5 for t in taken)), places[-1])


def draw_plan(sheet: Sheet, record: Entry, frame: Box) -> PlanView:
    """Draw the plan into the frame (mm) and say what it shows; at least one station has plane coordinates."""
    plan = _Plan(sheet, record, frame)
    labels = Labels(sheet, (frame[0] + 4, frame[1] + 4, frame[2] - 1, frame[3] - 1), 7.5 if plan.size == 1 else 5.5)
    plan.grid()
    view = PlanView(plan.scale, looks=plan.lines(), hidden=len(record["stations"]) - len(plan.stations))
    labels.segments = [
        [plan.at[a], plan.at[b]] for a, b in line_looks(record["observations"]) if {a, b} <= plan.at.keys()
    ]
    view.magnification, view.ellipses = plan.ellipses(labels)
    for one in plan.stations:
        draw_symbol(sheet, plan.symbol(one), plan.at[one["station"]], plan.size, mark_id("station", one["station"]))
        labels.keep_off(plan.at[one["station"]], 1.6 * plan.size)
    seen = {plan.symbol(one) for one in plan.stations}
    view.symbols = [symbol for symbol in ("held", "weighted", "check", "new", "unchecked") if symbol in seen]
    plan.badges(labels)
    items = []
    for one in plan.labelled():
        name = one["station"]
        items.append((plan.at[name], plain(name, 18), mark_id("label", name)))
    labels.place(items)
    return view
