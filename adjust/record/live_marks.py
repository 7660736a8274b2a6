"""Marks of the live plan over its lines: suspects, readings that nothing checks, closures, readings left out."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from adjust.record.live_scene import Scene, curve_point
from adjust.record.live_texts import Texts, number
from adjust.record.net import ALONG, Names, ordered, pointed_lines, suspect_readings
from adjust.record.paper import Point
from adjust.record.plan_marks import part_way
from adjust.record.shown import Entry, plain, reading_in_words

MOST_SUSPECTS, MOST_UNCHECKED, MOST_CLOSURES, ALL_CLOSURES = 60, 300, 120, 10
"""Marks drawn at the most; up to ALL_CLOSURES every closure has its mark, of more only those not met or not tested."""
ARC = 46.0
"""Radius in units of the arc that marks a suspect angle."""
APART = 17.0
"""Units that marks keep from each other and from stations, where that can be had."""


@dataclass
class Marks:
    """The layers of marks, and where names must not go."""

    suspects: str = ""
    unchecked: str = ""
    closures: str = ""
    left_out: str = ""
    unmarked: int = 0
    """Closures that are met and have no mark."""
    taken: list[tuple[Point, float]] = field(default_factory=list)


def point(at: Point) -> str:
    """'12.3 45.6'."""
    return f"{number(at[0])} {number(at[1])}"


def path_of(scene: Scene, line: Names) -> str:
    """The line as path data, curved in a schematic."""
    bend = scene.bends.get(line) or scene.bends.get((line[1], line[0]))
    one, other = scene.at[line[0]], scene.at[line[1]]
    return f"M{point(one)} {point(other)}" if bend is None else f"M{point(one)}Q{point(bend)} {point(other)}"


def along(scene: Scene, line: Names, share: float) -> Point:
    """A point of the line at ``share`` of it."""
    bend = scene.bends.get(ordered(line)) or scene.bends.get((ordered(line)[1], ordered(line)[0]))
    one, other = scene.at[line[0]], scene.at[line[1]]
    return part_way(one, other, share) if bend is None else curve_point(one, bend, other, share)


def marks_of(scene: Scene, record: Entry, texts: Texts) -> Marks:
    """All marks; ``record`` is the whole one, whose positions the page's rows have."""
    marks = Marks()
    place = {one["id"]: i for i, one in enumerate(record["observations"])}
    _suspects(scene, place, texts, marks)
    _unchecked(scene, record, place, texts, marks)
    _left_out(scene, texts, marks)
    _closures(scene, record, texts, marks)
    return marks


def _free(scene: Scene, marks: Marks, line: Names, share: float) -> Point:
    """A place on the line near ``share`` that is off stations of other marks, as well as it can be had."""
    spots = [along(scene, line, share + step) for step in (0.0, 0.1, -0.1, 0.2, -0.2, 0.3, -0.3)]
    return next((at for at in spots if _clear(scene, marks, at)), spots[0])


def _clear(scene: Scene, marks: Marks, at: Point) -> bool:
    if any(math.dist(at, other) < APART for other, _ in marks.taken):
        return False
    return scene.many > 300 or all(math.dist(at, other) > APART for other in scene.at.values())


def _suspects(scene: Scene, place: dict[str, int], texts: Texts, marks: Marks) -> None:
    """Numbered in order of blame: a distance along its line, a pointing at its standpoint, an angle by its arc."""
    rows = []
    for i, one in enumerate(suspect_readings(scene.record)[:MOST_SUSPECTS]):
        lines = [line for line in pointed_lines(one) if scene.at.keys() >= set(line)]
        if lines:
            shape, spot = _suspect(scene, one, lines, marks)
            marks.taken.append((spot, 13.0))
            title = texts.safe("plan.suspect_title", number=i + 1, reading=reading_in_words(one))
            rows.append(
                f'<g class="suspect" data-observation="{place[one["id"]]}" data-ends="{scene.ends(lines[-1])}">'
                f'<title>{title}</title><path d="{shape}"/>{_badge(spot, str(i + 1))}</g>'
            )
    marks.suspects = "".join(rows)


def _badge(at: Point, text: str) -> str:
    return f'<g class="badge" transform="translate({point(at)})"><g><circle r="11"/><text y="5">{text}</text></g></g>'


def _suspect(scene: Scene, one: Entry, lines: list[Names], marks: Marks) -> tuple[str, Point]:
    """Path data and the place of the number."""
    if one["kind"] in ALONG:
        return path_of(scene, lines[-1]), _free(scene, marks, lines[-1], 0.5)
    start = scene.at[lines[-1][0]]
    if one["kind"] == "angle" and len(lines) == 2:
        return _arc(start, scene.at[lines[0][1]], scene.at[lines[1][1]])
    tip = along(scene, lines[-1], 0.4)
    return f"M{point(start)} {point(tip)}", _free(scene, marks, lines[-1], 0.3)


def _arc(at: Point, first: Point, second: Point) -> tuple[str, Point]:
    """The angle's arc, clockwise from ``first`` to ``second``, and its middle."""
    begin, finish = (math.atan2(p[0] - at[0], at[1] - p[1]) for p in (first, second))
    turn = (finish - begin) % (2 * math.pi)
    spots = [(at[0] + ARC * math.sin(t), at[1] - ARC * math.cos(t)) for t in (begin, begin + turn / 2, begin + turn)]
    flags = f"{int(turn > math.pi)} 1"
    return f"M{point(spots[0])}A{number(ARC)} {number(ARC)} 0 {flags} {point(spots[2])}", spots[1]


def _unchecked(scene: Scene, record: Entry, place: dict[str, int], texts: Texts, marks: Marks) -> None:
    """An open diamond on the line of a reading that nothing checks."""
    rows, done = [], set[Names]()
    for entry in record["unchecked"]:
        k = place.get(entry["observation"])
        one = record["observations"][k] if k is not None else None
        lines = [ordered(line) for line in pointed_lines(one) if scene.at.keys() >= set(line)] if one else []
        if one is None or not lines or lines[-1] in done or len(done) >= MOST_UNCHECKED:
            continue
        done.add(lines[-1])
        spot = _free(scene, marks, lines[-1], 0.5)
        marks.taken.append((spot, 9.0))
        title = texts.safe("plan.unchecked_title", reading=reading_in_words(one), why=plain(entry["why"], 160))
        rows.append(
            f'<g class="mark" data-observation="{k}" transform="translate({point(spot)})"><title>{title}</title>'
            '<use href="#p-diamond"/></g>'
        )
    marks.unchecked = "".join(rows)


def _left_out(scene: Scene, texts: Texts, marks: Marks) -> None:
    """A dashed line with a cross for each line of a reading that was left out."""
    rows = []
    for line in scene.left_out:
        spot = _free(scene, marks, line, 0.62)
        marks.taken.append((spot, 8.0))
        title = texts.safe("plan.left_out_title", one=plain(line[0], 40), other=plain(line[1], 40))
        rows.append(
            f'<g data-ends="{scene.ends(line)}"><title>{title}</title><path d="{path_of(scene, line)}"/>'
            f'<g class="mark" transform="translate({point(spot)})"><use href="#p-cross"/></g></g>'
        )
    marks.left_out = "".join(rows)


def _closures(scene: Scene, record: Entry, texts: Texts, marks: Marks) -> None:
    """Loops and runs: those not met or not tested as a broad band, and a mark with its sign for each that is marked."""
    every = [(i, one) for i, one in enumerate(record["closures"])]
    grave = [row for row in every if row[1]["verdict"] != "met"]
    marks.unmarked = len(every) - len(grave) if len(every) > ALL_CLOSURES else 0
    bands, signs = [], []
    for i, one in (every if len(every) <= ALL_CLOSURES else grave)[:MOST_CLOSURES]:
        names = [name for name in one["stations"] if name in scene.at]
        if len(set(names)) < 2:
            continue
        kind = {"met": "met", "not met": "not-met"}.get(one["verdict"], "untested")
        route = " - ".join(plain(name, 14) for name in names[:8]) + (" …" if len(names) > 8 else "")
        title = texts.safe("plan.closure_title", kind=one["kind"], route=route, verdict=texts(f"plan.{_key(kind)}"))
        if kind != "met":
            bands.append(f'<path class="band {kind}" d="{_route(scene, names)}"/>')
        spot = _closure_spot(scene, names, marks)
        marks.taken.append((spot, 12.0))
        signs.append(
            f'<g class="mark closure {kind}" data-closure="{i}" transform="translate({point(spot)})">'
            f'<title>{title}</title><use href="#p-{kind}"/></g>'
        )
    marks.closures = "".join(bands + signs)


def _key(kind: str) -> str:
    return kind.replace("-", "_")


def _route(scene: Scene, names: list[str]) -> str:
    """The walk as path data; legs that are drawn curved are followed."""
    parts = ["M" + point(scene.at[names[0]])]
    for one, other in pairwise(names):
        bend = scene.bends.get((one, other)) or scene.bends.get((other, one))
        parts.append(f"L{point(scene.at[other])}" if bend is None else f"Q{point(bend)} {point(scene.at[other])}")
    return "".join(parts)


def _closure_spot(scene: Scene, names: list[str], marks: Marks) -> Point:
    """Inside a loop, beside the middle leg of a run; moved where another mark stands."""
    places = np.array([scene.at[name] for name in names])
    if names[0] == names[-1] and len(set(names)) > 2:
        x, y = places[:-1].mean(axis=0).tolist()
    else:
        k = (len(names) - 1) // 2
        (x1, y1), (x2, y2) = places[k].tolist(), places[k + 1].tolist()
        long = math.hypot(x2 - x1, y2 - y1) or 1.0
        x, y = (x1 + x2) / 2 + 16 * (y2 - y1) / long, (y1 + y2) / 2 - 16 * (x2 - x1) / long
    spots = [
        (x + r * math.cos(t), y + r * math.sin(t)) for r in (0.0, 22.0, 40.0) for t in np.linspace(0, 5.5, 8).tolist()
    ]
    return next((at for at in spots if _clear(scene, marks, at)), spots[0])
