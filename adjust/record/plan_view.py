"""The plan of a network: stations by shape, lines by kind of reading, ellipses with their own stated scales.

paper mm = (metre − centre) · 1000 / N            N the plan's scale number
ellipse half axis in mm = half axis in m · 1000 / N · magnification
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass, field

import numpy as np

from adjust.record.crowd import LARGER, crowd, free_place
from adjust.record.grid import draw_grid
from adjust.record.labels import Labels
from adjust.record.net import (
    HEIGHT,
    LOOK_ORDER,
    ROLES,
    Relative,
    left_out_lines,
    line_looks,
    ordered,
    pointed_lines,
    relative_ellipses,
    station_ellipses,
    suspect_readings,
    unchecked_stations,
)
from adjust.record.paper import SCREEN, Box, Layout, Point, Wanted, chosen_scale, extent, ratio_in_words, scale_number
from adjust.record.plan_marks import draw_left_out, draw_suspects, part_way
from adjust.record.sheet import (
    BLACK,
    BLUE,
    DARK,
    GREEN,
    VERMILLION,
    Sheet,
    draw_symbol,
    mark_id,
    nearest_step,
)
from adjust.record.shown import Entry, Shown, count
from adjust.record.writing import Writing

SOME, MANY, HUGE = 25, 300, 1000
"""Stations above which names are set smaller; above which only the telling ones are named; above which only the
largest ellipses are drawn."""
MOST_ELLIPSES, MOST_RELATIVE = 150, 40
CELLS = 9
"""Above MANY stations one name is taken from each cell of a grid with this many rows, so that every part is named."""

Dash = str | tuple[int, tuple[float, ...]]
LOOKS: dict[str, tuple[float, Dash, str]] = {
    "both": (0.9, "-", DARK),
    "distance": (0.9, (0, (9.0, 2.0, 1.5, 2.0)), DARK),
    "pointing": (0.9, (0, (6.0, 3.5)), BLUE),
    HEIGHT: (1.0, (0, (1.0, 1.8)), GREEN),
}
"""Line width in points, dash and colour of what was read along a line."""
RELATIVE_DASH: Dash = (0, (3.0, 1.4))
FILL = (0.0, 0.447, 0.698, 0.10)


@dataclass
class PlanView:
    """What was drawn, for the legend and the scales of the panel."""

    scale: float
    magnification: float | None = None
    relative: float | None = None
    """Magnification of the relative ellipses."""
    symbols: list[str] = field(default_factory=list)
    looks: list[str] = field(default_factory=list)
    pairs: bool = False
    """A pair that no reading joins has its line."""
    left_out: bool = False
    suspects: bool = False
    inset: float | None = None
    """Scale number of the inset."""
    notes: list[str] = field(default_factory=list)
    """What is not drawn, in words."""


@dataclass(frozen=True)
class Ground:
    """A piece of ground on the sheet: frame, scale number, and the metres in the frame's middle."""

    frame: Box
    scale: float
    centre: Point

    def place(self, one: Entry) -> Point:
        """Where a station with plane coordinates comes to lie."""
        k, (left, bottom, right, top) = 1000 / self.scale, self.frame
        return (left + right) / 2 + (one["east"] - self.centre[0]) * k, (bottom + top) / 2 + (
            one["north"] - self.centre[1]
        ) * k


class _Plan:
    """The data of one plan and its piece of ground; the inset is another one of the same data."""

    def __init__(self, sheet: Sheet, record: Entry, layout: Layout) -> None:
        self.sheet, self.record, self.layout, self.shown = sheet, record, layout, Shown.of(record)
        self.wanted, self.writing = Wanted.of(record), Writing.of(record)
        self.stations = [one for one in record["stations"] if one["east"] is not None and one["north"] is not None]
        names = {one["station"] for one in self.stations}
        self.looks = {line: look for line, look in line_looks(record["observations"]).items() if names >= set(line)}
        self.left_out = [line for line in left_out_lines(record) if names >= set(line)]
        self.ellipses = [one for one in station_ellipses(record) if one["station"] in names]
        self.relative = [one for one in relative_ellipses(record) if names >= set(one.ends)]
        self.unchecked = unchecked_stations(record)
        n = len(self.stations)
        self.size = (1.0 if n <= 80 else 0.7 if n <= MANY else 0.45 if n <= HUGE else 0.28) * self.small
        self.inset: tuple[Ground, set[str]] | None = None
        self.view = PlanView(self._ground(layout.frame).scale)
        self.hide()
        self.settle()

    @property
    def small(self) -> float:
        """Symbols on the sheet for screens are a little smaller, as its plan is."""
        return 0.8 if self.layout.name == SCREEN else 1.0

    def hide(self) -> None:
        """Keep what its layers ask for and a large network leaves room for; note what is not drawn."""
        notes, every = self.view.notes, len(self.ellipses)
        if "ellipses" not in self.wanted.layers:
            self.ellipses = []
        elif len(self.stations) > HUGE and every > MOST_ELLIPSES:
            self.ellipses = self.ellipses[:MOST_ELLIPSES]
            notes.append(f"Of {every} ellipses the {MOST_ELLIPSES} largest are drawn.")
        every = len(self.relative)
        if "relative" not in self.wanted.layers:
            self.relative = []
        elif every > MOST_RELATIVE:
            pairs = [one for one in self.relative if one.pair]
            self.relative = [*pairs, *(one for one in self.relative if not one.pair)][:MOST_RELATIVE]
            notes.append(f"Of {every} relative ellipses {MOST_RELATIVE} are drawn: pairs asked for, then the largest.")
        for layer, words, found in (("lines", "lines", self.looks), ("left-out", "readings left out", self.left_out),
                                    ("suspects", "suspects", self.record["suspects"])):  # fmt: skip
            if layer not in self.wanted.layers and found:
                notes.append(f"Not drawn, as asked: {words}.")
        if "lines" not in self.wanted.layers:
            self.looks = {}
        if "left-out" not in self.wanted.layers:
            self.left_out = []

    def _ground(self, frame: Box) -> Ground:
        low, high = extent(self.record)
        scale = chosen_scale(self.record, self.layout, frame)
        return Ground(frame, scale, ((low[0] + high[0]) / 2, (low[1] + high[1]) / 2))

    def settle(self) -> None:
        """Places on paper; an inset where stations crowd, in a free corner or else in a strip kept for it."""
        self.ground = self._ground(self.layout.frame)
        self._lay()
        if "inset" in self.wanted.layers and len(self.stations) <= MANY:
            frame = self.layout.frame
            self.inset = self._inset(frame) or self._inset_beside(frame)
        if self.inset is None:
            self.ground = self._ground(self.layout.frame)
            self._lay()
        self.view.scale = self.ground.scale

    def _lay(self) -> None:
        self.at = {one["station"]: self.ground.place(one) for one in self.stations}
        self.paper = np.array(list(self.at.values())).reshape(-1, 2)

    def _inset(self, frame: Box, box: Box | None = None) -> tuple[Ground, set[str]] | None:
        """An enlarged piece of ground and the stations that it alone names."""
        close = crowd(self.paper)
        lines = [[self.at[a], self.at[b]] for a, b in self.looks]
        place = box or (free_place(frame, self.paper, lines, 5.0) if close else None)
        if close is None or place is None:
            return None
        east, north = zip(*((self.stations[i]["east"], self.stations[i]["north"]) for i in close), strict=True)
        side = place[2] - place[0]
        scale = scale_number((max(east) - min(east), max(north) - min(north)), (side - 22, side - 22), self.shown)
        if scale * LARGER > self.ground.scale:
            return None
        ground = Ground(place, scale, ((max(east) + min(east)) / 2, (max(north) + min(north)) / 2))
        inside = {one["station"] for one in self.stations if _within(ground.place(one), place)}
        return ground, inside

    def _inset_beside(self, frame: Box) -> tuple[Ground, set[str]] | None:
        """The same where no corner is free: the plan gives up a strip of the frame."""
        if crowd(self.paper) is None:
            return None
        left, bottom, right, top = frame
        if right - left >= top - bottom:
            side = min(0.36 * (right - left), top - bottom - 4)
            rest, box = (left, bottom, right - side - 4, top), (right - side - 2, top - side - 2, right - 2, top - 2)
        else:
            side = min(0.36 * (top - bottom), right - left - 4)
            rest, box = (left, bottom, right, top - side - 4), (right - side - 2, top - side - 2, right - 2, top - 2)
        self.ground = self._ground(rest)
        self._lay()
        return self._inset(rest, box)

    def magnifications(self) -> None:
        """Magnify both families of ellipses as asked, or to be seen without covering each other."""
        k = 1000 / self.ground.scale
        for key, halves, share, wish in (
            ("magnification", [one["ellipse_confidence"]["semi_major"] for one in self.ellipses], 0.035,
             self.wanted.ellipses),
            ("relative", [one.semi_major for one in self.relative], 0.022, self.wanted.relative),
        ):  # fmt: skip
            if halves:
                places = [self.at[one["station"]] for one in self.ellipses]
                if key == "relative":
                    places = list(self.spots(self.at, self.relative))
                setattr(self.view, key, self._magnification([half * k for half in halves], places, share, wish))

    def spots(self, at: dict[str, Point], lines: list[Relative]) -> list[Point]:
        """Where on its line each relative ellipse lies: near the middle, off stations and off each other."""
        taken = np.array(list(at.values()))
        found: list[Point] = []
        for one in lines:
            a, b = at[one.ends[0]], at[one.ends[1]]
            places = [part_way(a, b, share) for share in (0.5, 0.43, 0.57, 0.36, 0.64)]
            free = [min(8.0, float(np.hypot(*(taken - place).T).min())) - 0.4 * i for i, place in enumerate(places)]
            found.append(places[int(np.argmax(free))])
            taken = np.vstack([taken, found[-1]])
        return found

    def _magnification(self, half: list[float], at: list[Point], share: float, wish: float | None) -> float:
        """1, 2 or 5 · 10^k that brings the median half axis near ``share`` of the frame's width and keeps all inside.

        One that was asked for is taken if no ellipse would leave the frame; else the drawing chooses, and says so.
        """
        left, bottom, right, top = self.ground.frame
        width = right - left
        most = min(min(0.15 * width, x - left, right - x, y - bottom, top - y) / one
                   for one, (x, y) in zip(half, at, strict=True))  # fmt: skip
        if wish:
            least_room = min(min(x - left, right - x, y - bottom, top - y) / one
                             for one, (x, y) in zip(half, at, strict=True))  # fmt: skip
            if wish <= least_room:
                return wish
            self.view.notes.append(f"Ellipses {wish:g} times larger would leave the frame: drawn smaller.")
        target = min(share * width, 13 * share * self._spacing())
        chosen = nearest_step(target / float(np.median(half)))
        while chosen > most:
            chosen = nearest_step(chosen / 2)
        return chosen

    def _spacing(self) -> float:
        """Median distance of a station to its nearest neighbour, mm of paper."""
        if len(self.paper) < 2:
            return math.inf
        from scipy.spatial import KDTree

        nearest = np.asarray(KDTree(self.paper).query(self.paper, k=2)[0])
        return max(float(np.median(nearest[:, 1])), 2.0)

    def symbol(self, one: Entry) -> str:
        """The symbol of a station."""
        return "unchecked" if one["station"] in self.unchecked and one["role"] == "new" else str(one["role"])

    def draw_lines(self, at: dict[str, Point], inside: Box | None, tag: str) -> None:
        """The lines by what was read along them; those of suspects once more, thick and in colour."""
        blamed = {ordered(line) for one in suspect_readings(self.record) if one["kind"] in ("distance", "levelled")
                  for line in pointed_lines(one)} if "suspects" in self.wanted.layers else set()  # fmt: skip
        thin = 1.0 if len(self.looks) < 400 else 0.55 if len(self.looks) < 3000 else 0.3
        for look, (width, dash, colour) in LOOKS.items():
            chosen = [line for line, what in self.looks.items() if what == look]
            segments = [[at[a], at[b]] for a, b in chosen]
            self.sheet.lines(segments, width * thin, f"lines-{look}{tag}", inside, linestyles=[dash], colors=colour,
                             zorder=1)  # fmt: skip
            hot = [[at[a], at[b]] for a, b in chosen if (a, b) in blamed]
            self.sheet.lines(hot, 2.0, f"lines-{look}-suspect{tag}", inside, colors=VERMILLION, zorder=2)
        self.view.looks = [look for look in LOOK_ORDER if look in self.looks.values()]

    def draw_ellipses(self, at: dict[str, Point], only: set[str], labels: Labels, inside: Box | None) -> None:
        """The confidence ellipses of the stations ``only``; on paper of one size in the plan and in its inset."""
        if self.view.magnification is None:
            return
        k = 1000 / self.ground.scale * self.view.magnification
        for one in self.ellipses:
            if (name := one["station"]) in only:
                e = one["ellipse_confidence"]
                half = (e["semi_major"] * k, (e["semi_minor"] or 0.0) * k)
                self.sheet.ellipse(at[name], half, e["azimuth"], mark_id("ellipse", name), inside, edgecolor=BLUE,
                                   linewidth=1.1 * max(self.size, 0.5), facecolor=FILL, zorder=3)  # fmt: skip
                labels.segments += outline(at[name], *half, e["azimuth"])

    def draw_relative(self, at: dict[str, Point], drawn: list[Relative], labels: Labels, inside: Box | None) -> None:
        """Relative ellipses in the middle of their lines, and the lines of pairs that no reading joins."""
        if self.view.relative is None:
            return
        k = 1000 / self.ground.scale * self.view.relative
        for one, spot in zip(drawn, self.spots(at, drawn), strict=True):
            a, b = at[one.ends[0]], at[one.ends[1]]
            if one.pair:
                self.view.pairs = True
                self.sheet.line([a, b], 0.7, mark_id("pair", " - ".join(one.ends)), inside, color=GREEN,
                                linestyle=(0, (1.0, 3.0)), zorder=1)  # fmt: skip
                labels.segments.append([a, b])
            half = (one.semi_major * k, one.semi_minor * k)
            self.sheet.ellipse(spot, half, one.azimuth, mark_id("relative", " - ".join(one.ends)), inside,
                               edgecolor=GREEN, linewidth=1.0, linestyle=RELATIVE_DASH, zorder=2.8)  # fmt: skip
            labels.segments += outline(spot, *half, one.azimuth)

    def draw_stations(self, at: dict[str, Point], only: set[str], labels: Labels, size: float) -> None:
        """The symbols of the stations ``only``."""
        for one in self.stations:
            if (name := one["station"]) in only:
                draw_symbol(self.sheet, self.symbol(one), at[name], size, mark_id("station", name))
                labels.keep_off(at[name], 1.7 * size)
        seen = {self.symbol(one) for one in self.stations}
        self.view.symbols = [symbol for symbol in ROLES if symbol in seen]

    def names(self, only: set[str]) -> list[str]:
        """Names in the order of labelling; of many: control, checks, unchecked, blamed, the worst ten and a sample."""
        if "names" not in self.wanted.layers:
            return []
        if len(self.stations) <= MANY:
            return [one["station"] for one in self.stations if one["station"] in only]
        blamed = {name for one in suspect_readings(self.record) for line in pointed_lines(one) for name in line}
        telling = {one["station"] for one in self.ellipses[:10]} | blamed | self.unchecked
        first = [one["station"] for one in self.stations if one["station"] in telling or one["role"] != "new"][:MANY]
        return list(dict.fromkeys([*first, *self._sample()]))

    def _sample(self) -> list[str]:
        """One station a cell: the one nearest to the cell's middle."""
        left, bottom, _, top = self.ground.frame
        side = (top - bottom) / CELLS
        best: dict[tuple[int, int], tuple[float, str]] = {}
        for name, (x, y) in self.at.items():
            cell = (int((x - left) // side), int((y - bottom) // side))
            off = math.dist((x, y), (left + (cell[0] + 0.5) * side, bottom + (cell[1] + 0.5) * side))
            best[cell] = min(best.get(cell, (off, name)), (off, name))
        return [name for _, name in (best[cell] for cell in sorted(best))]


def _within(at: Point, box: Box) -> bool:
    return box[0] < at[0] < box[2] and box[1] < at[1] < box[3]


def outline(at: Point, major: float, minor: float, azimuth: float) -> list[list[Point]]:
    """The ellipse as sixteen chords."""
    s, c = math.sin(azimuth), math.cos(azimuth)
    turns = [(major * math.cos(t), minor * math.sin(t)) for t in np.linspace(0, 2 * math.pi, 17).tolist()]
    points = [(at[0] + a * s + b * c, at[1] + a * c - b * s) for a, b in turns]
    return [[one, other] for one, other in itertools.pairwise(points)]


def draw_plan(sheet: Sheet, record: Entry, layout: Layout) -> PlanView:
    """Draw the plan into the layout's frame and say what it shows; at least one station has plane coordinates."""
    plan = _Plan(sheet, record, layout)
    view, frame = plan.view, layout.frame
    if "grid" in plan.wanted.layers:
        draw_grid(sheet, plan.shown, plan.ground, frame)
    plan.magnifications()
    own = plan.inset[1] if plan.inset else set()
    labels = Labels(sheet, (frame[0] + 4, frame[1] + 4, frame[2] - 1, frame[3] - 1), _type_size(plan))
    if plan.inset:
        _cover(labels, plan.inset[0].frame)
    _paint(plan, plan.at, set(plan.at) - own, labels, None)
    if plan.inset:
        for name in sorted(own):
            draw_symbol(sheet, "new", plan.at[name], 0.35, mark_id("crowded", name))
        _frame_of_inset(plan, labels)
    lost = labels.place([(plan.at[name], plan.writing.name(name), mark_id("label", name))
                         for name in plan.names(set(plan.at) - own)])  # fmt: skip
    if plan.inset:
        lost += _draw_inset(plan, *plan.inset)
    without = len(record["stations"]) - len(plan.stations)
    if without:
        view.notes.append(
            f"Not drawn: {without} {'station' if without == 1 else 'stations'} without plane coordinates."
        )
    if "names" not in plan.wanted.layers:
        view.notes.append("Not drawn, as asked: names.")
    elif len(plan.stations) > MANY:
        view.notes.append("Named: control, suspects, unchecked, the ten least certain, and a sample as room allows.")
    elif lost:
        view.notes.append(f"{count(lost, 'name')} left out for want of room; see stations.csv.")
    return view


def _type_size(plan: _Plan) -> float:
    n, small = len(plan.stations), plan.layout.name == SCREEN
    return (6.5 if n <= 80 else 5.0) if small else 9.0 if n <= SOME else 7.5 if n <= 80 else 5.5


def _cover(labels: Labels, box: Box) -> None:
    labels.boxes.append(box)


def _paint(plan: _Plan, at: dict[str, Point], only: set[str], labels: Labels, inside: Box | None) -> None:
    """Everything of the stations ``only`` at the places ``at``; ``inside`` a box where it is given."""
    tag = "-inset" if inside else ""
    plan.draw_lines(at, inside, tag)
    labels.segments += [[at[a], at[b]] for a, b in plan.looks]
    plan.draw_ellipses(at, only, labels, inside)
    own = plan.inset[1] if plan.inset else set()
    shown = [one for one in plan.relative if (set(one.ends) <= own) == bool(inside)]
    plan.draw_relative(at, shown, labels, inside)
    plan.draw_stations(at, only, labels, plan.size)
    lines = [line for line in plan.left_out if (set(line) <= own) == bool(inside)]
    draw_left_out(plan.sheet, at, lines, labels, inside)
    plan.view.left_out |= bool(lines)
    if "suspects" in plan.wanted.layers:
        plan.view.suspects |= draw_suspects(plan.sheet, plan.record, at, own, bool(inside), labels)


def _frame_of_inset(plan: _Plan, labels: Labels) -> None:
    """The inset's piece of ground on the plan, with its letter."""
    ground = plan.inset[0] if plan.inset else plan.ground
    share = ground.scale / plan.ground.scale
    half = (ground.frame[2] - ground.frame[0]) / 2 * share
    x, y = plan.ground.place({"east": ground.centre[0], "north": ground.centre[1]})
    plan.sheet.polygon([(x - half, y - half), (x + half, y - half), (x + half, y + half), (x - half, y + half)],
                       gid="inset-place", linewidth=0.8, edgecolor=BLACK, zorder=3.2)  # fmt: skip
    plan.sheet.text((x + half + 0.8, y + half - 2.2), "A", 8, bold=True, path_effects=plan.sheet.halo())
    labels.boxes += [(x - half, y - half, x + half + 3.2, y + half)]


def _draw_inset(plan: _Plan, ground: Ground, own: set[str]) -> int:
    """The crowded stations enlarged; how many names found no room there."""
    sheet, (left, bottom, right, top) = plan.sheet, ground.frame
    plan.view.inset = ground.scale
    corners = [(left, bottom), (right, bottom), (right, top), (left, top)]
    sheet.polygon(corners, "inset", facecolor="white", linewidth=0.8, zorder=0.9)
    at = {one["station"]: ground.place(one) for one in plan.stations}
    labels = Labels(sheet, (left + 1, bottom + 1, right - 1, top - 5), min(7.5, _type_size(plan)))
    title = f"Inset A, {ratio_in_words(ground.scale, plan.shown)}"
    width = sheet.width(title, 7, True)
    sheet.text((left + 1.2, top - 3.4), title, 7, bold=True, path_effects=sheet.halo(), gid="inset-title")
    _cover(labels, (left, top - 4.4, left + 1.6 + width, top))
    _paint(plan, at, own, labels, ground.frame)
    return labels.place([(at[name], plan.writing.name(name), mark_id("label", name)) for name in plan.names(own)])
