"""The plan of a network painted: stations by shape, lines by kind of reading, ellipses with their own stated scales."""

from __future__ import annotations

import itertools
import math

import numpy as np

from adjust.record.grid import draw_grid
from adjust.record.labels import Labels
from adjust.record.net import ALONG, HEIGHT, LOOK_ORDER, ROLES, Relative, ordered, pointed_lines, suspect_readings
from adjust.record.paper import SCREEN, Box, Layout, Point, ratio_in_words
from adjust.record.plan_data import HUGE, MANY, SOME, Ground, Plan, PlanView
from adjust.record.plan_marks import draw_left_out, draw_suspects
from adjust.record.sheet import (
    BLACK,
    BLUE,
    DARK,
    GREEN,
    VERMILLION,
    Sheet,
    draw_symbol,
    draw_symbols,
    mark_id,
)
from adjust.record.shown import Entry, count

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


class _Painted(Plan):
    """The plan with what paints its parts."""

    def draw_lines(self, at: dict[str, Point], inside: Box | None, tag: str) -> None:
        """The lines by what was read along them; those of suspects once more, thick and in colour."""
        blamed = {ordered(line) for one in suspect_readings(self.record) if one["kind"] in ALONG
                  for line in pointed_lines(one)} if "suspects" in self.wanted.layers else set()  # fmt: skip
        thin = 1.0 if len(self.looks) < 400 else 0.55 if len(self.looks) < 3000 else 0.3
        for look, (width, dash, colour) in LOOKS.items():
            chosen = [line for line, what in self.looks.items() if what == look]
            segments = [[at[a], at[b]] for a, b in chosen]
            self.sheet.lines(segments, width * thin, f"lines-{look}{tag}", inside, linestyle=dash, edgecolor=colour,
                             zorder=1)  # fmt: skip
            hot = [[at[a], at[b]] for a, b in chosen if (a, b) in blamed]
            self.sheet.lines(hot, 2.0, f"lines-{look}-suspect{tag}", inside, edgecolor=VERMILLION, zorder=2)
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
        if len(self.stations) > HUGE:
            self._draw_many(at, labels, size)
            only = set()
        for one in self.stations:
            if (name := one["station"]) in only:
                draw_symbol(self.sheet, self.symbol(one), at[name], size, mark_id("station", name))
                labels.keep_off(at[name], 1.7 * size)
        seen = {self.symbol(one) for one in self.stations}
        self.view.symbols = [symbol for symbol in ROLES if symbol in seen]

    def _draw_many(self, at: dict[str, Point], labels: Labels, size: float) -> None:
        """All symbols by kind; names may then cover new stations, but no control."""
        for symbol in ROLES:
            places = [at[one["station"]] for one in self.stations if self.symbol(one) == symbol]
            larger = 2.0 if symbol != "new" else 1.0
            draw_symbols(self.sheet, symbol, places, size * larger, f"stations-{symbol}")
            for place in places if symbol != "new" else []:
                labels.keep_off(place, 1.7 * size * larger)


def outline(at: Point, major: float, minor: float, azimuth: float) -> list[list[Point]]:
    """The ellipse as sixteen chords."""
    s, c = math.sin(azimuth), math.cos(azimuth)
    turns = [(major * math.cos(t), minor * math.sin(t)) for t in np.linspace(0, 2 * math.pi, 17).tolist()]
    points = [(at[0] + a * s + b * c, at[1] + a * c - b * s) for a, b in turns]
    return [[one, other] for one, other in itertools.pairwise(points)]


def draw_plan(sheet: Sheet, record: Entry, layout: Layout) -> PlanView:
    """Draw the plan into the layout's frame and say what it shows; at least one station has plane coordinates."""
    plan = _Painted(sheet, record, layout)
    view, frame = plan.view, layout.frame
    if "grid" in plan.wanted.layers:
        draw_grid(sheet, plan.shown, plan.ground, frame)
    plan.magnifications()
    own = plan.inset[1] if plan.inset else set()
    labels = Labels(sheet, (frame[0] + 4, frame[1] + 4, frame[2] - 1, frame[3] - 1), _type_size(plan))
    labels.tight = len(plan.stations) > MANY
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
        view.notes.append("Named: control, suspects, unchecked, the ten least certain, and a sample.")
    elif lost:
        view.notes.append(f"{count(lost, 'name')} left out for want of room; see stations.csv.")
    return view


def _type_size(plan: _Painted) -> float:
    n, small = len(plan.stations), plan.layout.name == SCREEN
    return (6.5 if n <= 80 else 5.0) if small else 9.0 if n <= SOME else 7.5 if n <= 80 else 5.5


def _cover(labels: Labels, box: Box) -> None:
    labels.boxes.append(box)


def _paint(plan: _Painted, at: dict[str, Point], only: set[str], labels: Labels, inside: Box | None) -> None:
    """Everything of the stations ``only`` at the places ``at``; ``inside`` a box where it is given."""
    tag = "-inset" if inside else ""
    plan.draw_lines(at, inside, tag)
    if len(plan.stations) <= HUGE:  # above, names lie over lines anyway
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


def _frame_of_inset(plan: _Painted, labels: Labels) -> None:
    """The inset's piece of ground on the plan, with its letter."""
    ground = plan.inset[0] if plan.inset else plan.ground
    share = ground.scale / plan.ground.scale
    half = (ground.frame[2] - ground.frame[0]) / 2 * share
    x, y = plan.ground.place({"east": ground.centre[0], "north": ground.centre[1]})
    plan.sheet.polygon([(x - half, y - half), (x + half, y - half), (x + half, y + half), (x - half, y + half)],
                       gid="inset-place", linewidth=0.8, edgecolor=BLACK, zorder=3.2)  # fmt: skip
    plan.sheet.text((x + half + 0.8, y + half - 2.2), "A", 8, bold=True, path_effects=plan.sheet.halo())
    labels.boxes += [(x - half, y - half, x + half + 3.2, y + half)]


def _draw_inset(plan: _Painted, ground: Ground, own: set[str]) -> int:
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
