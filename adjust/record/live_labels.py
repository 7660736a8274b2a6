"""Names beside the stations of the live plan, by the placing that serves the drawing on paper."""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any, cast

from adjust.record.labels import Labels
from adjust.record.live_scene import UNITS, WIDTH, Scene, curve_point
from adjust.record.live_texts import NAME, name_of, number, text_width
from adjust.record.net import suspect_readings
from adjust.record.paper import Point
from adjust.record.sheet import Sheet
from adjust.record.shown import plain

SIZE, SMALLER = 18.0, 15.0
"""Size of type in units, and above SOME stations: 10 and 8 pixels where the drawing is 360 wide and no script helps."""
SOME = 60
LINES, MOST, SAMPLE = 300, 2000, 150
"""Stations above which names may cross lines; above which only the telling ones and a sample are tried; the sample."""
MM_A_POINT = 25.4 / 72


@dataclass
class _Pen:
    """Stands in for the sheet of paper: keeps what the placing wants to write."""

    size: float
    texts: dict[str, Point] = field(default_factory=dict)
    leaders: list[tuple[Point, Point]] = field(default_factory=list)

    def width(self, text: str, _size: float) -> float:
        return text_width(text, self.size) / UNITS

    def text(self, at: Point, _text: str, _size: float, gid: str, **_more: Any) -> None:
        self.texts[gid] = at

    def line(self, points: list[Point], *_more: Any, **_rest: Any) -> None:
        self.leaders.append((points[0], points[1]))

    def halo(self) -> None:
        return None


@dataclass(frozen=True)
class Placed:
    """Names by station: where their type begins (units), and the lines that lead to those standing away."""

    size: float
    starts: dict[str, Point]
    leaders: list[tuple[Point, Point]]
    tried: int


def place_names(
    scene: Scene, marks: list[tuple[Point, float]], boxes: list[tuple[float, float, float, float]]
) -> Placed:
    """Place names off symbols, ``marks`` (place and reach) and ``boxes``, and where there is room off lines."""
    size = SIZE if scene.many <= SOME else SMALLER
    pen = _Pen(size)
    tall = scene.height / UNITS
    labels = Labels(cast(Sheet, pen), (0.7, 0.7, WIDTH / UNITS - 0.7, tall - 0.7), size / UNITS / MM_A_POINT)
    labels.tight = scene.many > LINES

    def up(at: Point) -> Point:
        return at[0] / UNITS, tall - at[1] / UNITS

    for name, at in scene.at.items():
        if scene.many <= MOST or scene.roles[name] != "new":
            labels.keep_off(up(at), 1.6 if scene.many <= SOME else 0.7 if scene.many <= LINES else 0.4)
    for at, reach in marks:
        labels.keep_off(up(at), reach / UNITS)
    labels.boxes += [(*up((left, low)), *up((right, high))) for left, high, right, low in boxes]
    if scene.many <= LINES:
        labels.segments += [[up(one), up(other)] for one, other in _chords(scene)]
        for oval in (*scene.ellipses, *scene.relative):
            reach = 0.7 * max(oval.half) / UNITS
            x, y = up(oval.at)
            labels.soft.append((x - reach, y - reach, x + reach, y + reach))
        for name, half in scene.bars.items():
            x, y = up(scene.at[name])
            labels.segments.append([(x, y - half / UNITS), (x, y + half / UNITS)])
    names = wanted_names(scene)
    labels.place([(up(scene.at[name]), plain(name, NAME), name) for name in names])

    def down(at: Point) -> Point:
        return at[0] * UNITS, (tall - at[1]) * UNITS

    return Placed(
        size,
        {name: down(at) for name, at in pen.texts.items()},
        [(down(a), down(b)) for a, b in pen.leaders],
        len(names),
    )


def _chords(scene: Scene) -> list[tuple[Point, Point]]:
    """Lines as straight pieces; curved ones as eight."""
    made = []
    for line in scene.looks:
        a, b, bend = scene.at[line[0]], scene.at[line[1]], scene.bends.get(line)
        if bend is None:
            made.append((a, b))
        else:
            points = [curve_point(a, bend, b, t / 8) for t in range(9)]
            made += list(pairwise(points))
    return made


def wanted_names(scene: Scene) -> list[str]:
    """Names in the order of placing: control first; of very many the telling ones and an even sample."""
    first = [name for name, role in scene.roles.items() if role not in ("new", "unchecked")]
    if scene.many <= MOST:
        return list(dict.fromkeys([*first, *scene.at]))
    readings = suspect_readings(scene.record)[:20]
    blamed = [one[key] for one in readings for key in ("at", "from", "to", "first", "second") if one[key] in scene.at]
    worst = [oval.names[0] for oval in scene.ellipses[:10]]
    unchecked = [name for name, role in scene.roles.items() if role == "unchecked"]
    return list(dict.fromkeys([*first[:100], *blamed, *worst, *unchecked[:50], *_sample(scene)]))


def _sample(scene: Scene) -> list[str]:
    """One station of each cell of a grid, the first in the order of the book."""
    side = (WIDTH * scene.height / SAMPLE) ** 0.5
    cells: dict[tuple[int, int], str] = {}
    for name, (x, y) in scene.at.items():
        cells.setdefault((int(x // side), int(y // side)), name)
    return list(cells.values())


def draw_names(scene: Scene, placed: Placed) -> str:
    """The layer of names: each hangs on its station, to keep size and side when the plan is enlarged."""
    rows = []
    for name, (x, y) in placed.starts.items():
        at = scene.at[name]
        rows.append(
            f'<g class="label" data-of="{scene.index[name]}" transform="translate({number(at[0])} {number(at[1])})">'
            f'<text x="{number(x - at[0])}" y="{number(y - at[1])}">{name_of(name)}</text></g>'
        )
    lines = "".join(
        f'<path d="M{number(a[0])} {number(a[1])} {number(b[0])} {number(b[1])}"/>' for a, b in placed.leaders
    )
    leaders = f'<g class="leaders">{lines}</g>' if lines else ""
    small = " smaller" if placed.size < SIZE else ""
    return f'<g data-layer="names" class="names{small}">{leaders}{"".join(rows)}</g>'
