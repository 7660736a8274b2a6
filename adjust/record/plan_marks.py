"""Marks of suspect and of left-out readings on a plan."""

from __future__ import annotations

import math

import numpy as np

from adjust.record.labels import Labels
from adjust.record.net import ALONG, Names, pointed_lines, suspect_readings
from adjust.record.paper import Box, Point
from adjust.record.sheet import GREY, VERMILLION, Sheet, draw_badge, draw_cross
from adjust.record.shown import Entry

BADGES = 9
ARC = 9.0
"""Radius in mm of the arc that marks a suspect angle."""


def draw_left_out(sheet: Sheet, at: dict[str, Point], lines: list[Names], labels: Labels, inside: Box | None) -> None:
    """A dashed line with a cross for each line of a reading that was left out."""
    for i, (a, b) in enumerate(lines):
        sheet.line([at[a], at[b]], 0.8, None, inside, color=GREY, linestyle=(0, (2.0, 2.0)), zorder=0.8)
        place = part_way(at[a], at[b], 0.62)
        draw_cross(sheet, place, gid=f"left-out-{i + 1}")
        labels.keep_off(place, 1.4)
        labels.segments.append([at[a], at[b]])


def draw_suspects(
    sheet: Sheet, record: Entry, at: dict[str, Point], own: set[str], enlarged: bool, labels: Labels
) -> bool:
    """Number the first suspects: a distance at its middle, a pointing near its standpoint, an angle on its arc.

    Those between stations of the inset alone (``own``) are drawn there, ``enlarged``. Whether any was drawn.
    """
    taken: list[Point] = []
    for i, one in enumerate(suspect_readings(record)[:BADGES]):
        ends = [line for line in pointed_lines(one) if line[0] in at and line[1] in at]
        if ends and ({name for line in ends for name in line} <= own) == enlarged:
            place = _suspect(sheet, one, [(at[a], at[b]) for a, b in ends], taken)
            taken.append(place)
            draw_badge(sheet, i + 1, place, gid=f"suspect-{i + 1}")
            labels.keep_off(place, 2.2)
    return bool(taken)


def _suspect(sheet: Sheet, one: Entry, ends: list[tuple[Point, Point]], taken: list[Point]) -> Point:
    """Mark the reading where it was taken; the place of its number."""
    start, end = ends[-1]
    if one["kind"] in ALONG:
        return _clear_of(taken, start, end, 0.5)
    if one["kind"] == "angle" and len(ends) == 2:
        return _arc(sheet, start, ends[0][1], end)
    tip = part_way(start, end, 0.4)
    sheet.line([start, tip], 1.8, color=VERMILLION, zorder=2)
    return _clear_of(taken, start, tip, 0.7)


def _arc(sheet: Sheet, at: Point, first: Point, second: Point) -> Point:
    """The angle's arc, clockwise from ``first`` to ``second``; its middle."""
    begin, finish = (math.atan2(p[0] - at[0], p[1] - at[1]) for p in (first, second))
    turns = np.linspace(begin, begin + (finish - begin) % (2 * math.pi), 41).tolist()
    arc = [(at[0] + ARC * math.sin(t), at[1] + ARC * math.cos(t)) for t in turns]
    sheet.line(arc, 1.8, color=VERMILLION, zorder=3.5)
    return arc[20]


def part_way(one: Point, other: Point, share: float) -> Point:
    """The point of a line at ``share`` of it."""
    return one[0] + share * (other[0] - one[0]), one[1] + share * (other[1] - one[1])


def _clear_of(taken: list[Point], one: Point, other: Point, share: float) -> Point:
    """A place on the line, at ``share`` of it or a little off, that keeps 5 mm from those taken."""
    places = [part_way(one, other, share + step) for step in (0.0, 0.1, -0.1, 0.2, -0.2, 0.3)]
    return next((place for place in places if all(math.dist(place, t) > 5 for t in taken)), places[-1])
