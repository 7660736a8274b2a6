"""What goes on a plan and where: the piece of ground, the inset, the magnifications, the names.

paper mm = (metre − centre) · 1000 / N            N the plan's scale number
ellipse half axis in mm = half axis in m · 1000 / N · magnification
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from adjust.record.crowd import LARGER, crowd, free_place
from adjust.record.net import (
    Relative,
    left_out_lines,
    line_looks,
    pointed_lines,
    relative_ellipses,
    station_ellipses,
    suspect_readings,
    unchecked_stations,
)
from adjust.record.paper import SCREEN, Box, Layout, Point, Wanted, chosen_scale, extent, scale_number
from adjust.record.plan_marks import part_way
from adjust.record.sheet import Sheet, nearest_step
from adjust.record.shown import Entry, Shown
from adjust.record.writing import Writing

SOME, MANY, HUGE = 25, 300, 1000
"""Stations above which names are set smaller; above which only the telling ones are named; above which only the
largest ellipses are drawn."""
MOST_ELLIPSES, MOST_RELATIVE = 150, 40
CELLS = 9
"""Above MANY stations one name is taken from each cell of a grid with this many rows, so that every part is named."""


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


class Plan:
    """The data of one plan and its piece of ground; the inset is another one of the same data."""

    def __init__(self, sheet: Sheet, record: Entry, layout: Layout) -> None:
        self.sheet, self.record, self.layout, self.shown = sheet, record, layout, Shown.of(record)
        self.wanted, self.writing = Wanted.of(record), Writing.of(record)
        self.stations = [one for one in record["stations"] if one["east"] is not None and one["north"] is not None]
        self.by_name = {one["station"]: one for one in self.stations}
        names = self.by_name.keys()
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
            notes.append(f"Drawn: the {MOST_ELLIPSES} largest of {every} ellipses.")
        every = len(self.relative)
        if "relative" not in self.wanted.layers:
            self.relative = []
        elif every > MOST_RELATIVE:
            pairs = [one for one in self.relative if one.pair]
            self.relative = [*pairs, *(one for one in self.relative if not one.pair)][:MOST_RELATIVE]
            notes.append(f"Drawn: {MOST_RELATIVE} of {every} relative ellipses, pairs asked for, then the largest.")
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
        if self.wanted.scale == self.view.scale != self.ground.scale:
            return None  # the scale that was asked for needs the whole frame
        self._lay()
        return self._inset(rest, box)

    def magnifications(self) -> None:
        """Magnify both families of ellipses as asked, or to be seen without covering each other."""
        k = 1000 / self.ground.scale
        half = [one["ellipse_confidence"]["semi_major"] * k for one in self.ellipses]
        if half:
            most = [self._room(one["station"]) for one in self.ellipses]
            self.view.magnification = self._magnification(half, most, 0.035, self.wanted.ellipses, "Ellipses")
        half = [one.semi_major * k for one in self.relative]
        if half:
            most = [min(self._room(name) for name in one.ends) for one in self.relative]
            wish = self.wanted.relative
            self.view.relative = self._magnification(half, most, 0.018, wish, "Relative ellipses")

    def _room(self, name: str) -> float:
        """mm from a station to the frame of the plan, or of the inset that shows it."""
        ground = self.inset[0] if self.inset and name in self.inset[1] else self.ground
        (x, y), (left, bottom, right, top) = ground.place(self.by_name[name]), ground.frame
        return max(min(x - left, right - x, y - bottom, top - y), 0.1)

    def _magnification(
        self, half: list[float], room: list[float], share: float, wish: float | None, words: str
    ) -> float:
        """1, 2 or 5 · 10^k that brings the median half axis near ``share`` of the frame's width and keeps all inside.

        One that was asked for is taken if no ellipse would leave the frame; else the drawing chooses, and says so.
        """
        width = self.ground.frame[2] - self.ground.frame[0]
        most = min(one / size for one, size in zip(room, half, strict=True))
        if wish and wish <= most:
            return wish
        if wish:
            self.view.notes.append(f"{words} {wish:g} times larger would leave the frame: drawn smaller.")
        most = min(most, 0.15 * width / max(half))
        target = min(share * width, 13 * share * self._spacing())
        chosen = nearest_step(target / float(np.median(half)))
        while chosen > most:
            chosen = nearest_step(chosen / 2)
        return chosen

    def _spacing(self) -> float:
        """Median distance of a station to its nearest neighbour, mm of paper; crowded ones as the inset has them."""
        from scipy.spatial import KDTree

        if len(self.stations) > HUGE:
            return 5.0  # the few that are drawn may cover stations that are not
        own = self.inset[1] if self.inset else set()
        places = [[at for name, at in self.at.items() if name not in own]]
        if self.inset:
            places.append([self.inset[0].place(self.by_name[name]) for name in sorted(own)])
        nearest = [
            np.asarray(KDTree(np.array(some)).query(np.array(some), k=2)[0])[:, 1] for some in places if len(some) > 1
        ]
        return max(float(np.median(np.concatenate(nearest))), 2.0) if nearest else math.inf

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

    def symbol(self, one: Entry) -> str:
        """The symbol of a station."""
        return "unchecked" if one["station"] in self.unchecked and one["role"] == "new" else str(one["role"])

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
