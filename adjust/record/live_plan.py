"""The plan of the page: an inline drawing that is complete as it stands, and that plan.js can move and enlarge.

Every station and line carries its position in the record (``data-station``, ``data-ends``), and the layers are groups
with ``data-layer``. What keeps its size when the plan is enlarged (symbols, names, marks) is scaled by the custom
property ``--k`` of plan.css; lines have strokes that do not scale. No style comes from data.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from adjust.record.live_labels import Placed, draw_names, place_names
from adjust.record.live_marks import Marks, marks_of, path_of, point
from adjust.record.live_scene import WIDTH, Oval, Scene, scene_of
from adjust.record.live_texts import TITLE, Texts, name_of, number, safe
from adjust.record.net import LOOK_ORDER, ROLES
from adjust.record.sheet import round_step
from adjust.record.shown import Entry, Shown
from adjust.units import LENGTHS

TITLES, HUGE = 3000, 2000
"""Lines up to which each has a title of its own; stations above which symbols are smallest."""
BAR = 0.24
"""Length of the scale bar over the drawing's width, at the most."""

DEFS = (
    '<path id="p-held" d="M0-10.5 9.1 5.2H-9.1Z"/>'
    '<path id="p-weighted" d="M0-10.5 9.1 5.2H-9.1Z"/>'
    '<path id="p-check" d="M-6.5-6.5H6.5V6.5H-6.5Z"/>'
    '<circle id="p-new" r="6"/>'
    '<g id="p-unchecked"><circle r="7.5"/><path d="M-5.3-5.3 5.3 5.3M-5.3 5.3 5.3-5.3"/></g>'
    '<path id="p-diamond" d="M0-8 6.5 0 0 8-6.5 0Z"/>'
    '<path id="p-cross" d="M-6-6 6 6M-6 6 6-6"/>'
    '<g id="p-met"><circle r="9"/><path d="M-4.5 0-1 4 5-4"/></g>'
    '<g id="p-not-met"><path d="M-8.5-8.5H8.5V8.5H-8.5Z"/><path d="M-4-4 4 4M-4 4 4-4"/></g>'
    '<g id="p-untested"><circle r="9"/><path d="M-4.5 0H4.5"/></g>'
)
"""Symbols in units at --k = 1."""


def plan_svg(record: Entry, texts: Mapping[str, Any]) -> str:
    """The plan as an svg element, followed by its legend as a list; '' where no station has coordinates.

    ``texts`` are those of the page's catalogue, keys ``plan.*`` flat or by table; what is missing is taken in English.
    """
    words, scene = Texts(texts), scene_of(record)
    if scene is None:
        return ""
    marks = marks_of(scene, record, words)
    names = place_names(scene, marks.taken, _kept(scene))
    ground = "".join(
        [
            _levels(scene, record),
            _layer("left-out", "left-out", marks.left_out),
            _layer("closures", "closures", marks.closures),
            _lines(scene),
            _ovals(scene, words),
            _layer("suspects", "suspects", marks.suspects),
            _stations(scene, marks),
            draw_names(scene, names),
        ]
    )
    return (
        f"{_open(scene, record, words)}<defs>{DEFS}</defs>"
        f'<g id="plan-ground">{ground}</g>{_furniture(scene, record, words)}</svg>'
        f"{_legend(scene, record, words, marks, names)}"
    )


def _open(scene: Scene, record: Entry, words: Texts) -> str:
    size = "huge" if scene.many > HUGE else "many" if scene.many > 300 else "some" if scene.many > 60 else "few"
    unit = record["units"]["length"]
    what = "plan.label" if scene.metres else "plan.label_levels"
    data = f'data-unit="{unit}" data-unit-metres="{LENGTHS[unit]!r}" data-decimal="{safe(record["units"]["decimal"])}"'
    if scene.metres:
        data += f' data-metres="{scene.metres!r}"'
    if scene.magnification:
        data += f' data-magnification="{scene.magnification:g}"'
    if scene.relative_magnification:
        data += f' data-relative="{scene.relative_magnification:g}"'
    return (
        f'<svg id="plan" class="{size}" viewBox="0 0 {number(WIDTH)} {number(scene.height)}" tabindex="0" role="group" '
        f'aria-label="{words.safe(what, stations=scene.many, lines=len(scene.looks))}" {data}>'
    )


def _layer(key: str, look: str, inside: str) -> str:
    return f'<g data-layer="{key}" class="{look}">{inside}</g>' if inside else ""


def _lines(scene: Scene) -> str:
    """The lines by what was read along them, one path each."""
    titled = len(scene.looks) <= TITLES
    layers = []
    for look in LOOK_ORDER:
        rows = []
        for line, what in scene.looks.items():
            if what == look:
                start = f'<path class="line" data-ends="{scene.ends(line)}" d="{path_of(scene, line)}"'
                title = f"<title>{name_of(line[0], 40)} – {name_of(line[1], 40)}</title>"
                rows.append(f"{start}>{title}</path>" if titled else f"{start}/>")
        layers.append(_layer(f"lines-{look}", f"lines {look}", "".join(rows)))
    return "".join(layers)


def _ovals(scene: Scene, words: Texts) -> str:
    pairs = "".join(
        f'<path class="pair" d="{path_of(scene, (one.names[0], one.names[1]))}"/>' for one in scene.relative if one.pair
    )
    relative = pairs + "".join(_oval(one, "relative", scene) for one in scene.relative)
    own = "".join(_oval(one, "ellipse", scene) for one in scene.ellipses)
    bars = "".join(
        f'<g transform="translate({point(scene.at[name])})"><path class="ellipse bar" '
        f'd="M0 {number(-half)}V{number(half)}M-5 {number(-half)}H5M-5 {number(half)}H5"/></g>'
        for name, half in scene.bars.items()
    )
    return _layer("relative", "relatives", relative) + _layer("ellipses", "ellipses", own + bars)


def _oval(one: Oval, look: str, scene: Scene) -> str:
    return (
        f'<g transform="translate({point(one.at)})rotate({number(one.turn, 1)})">'
        f'<ellipse class="{look}" rx="{number(one.half[0])}" ry="{number(one.half[1])}"/></g>'
    )


def _stations(scene: Scene, marks: Marks) -> str:
    """New stations first, so that control lies on top."""
    rows: dict[str, list[str]] = {role: [] for role in ROLES}
    for name, role in scene.roles.items():
        kind = f"control {role}" if role in ("held", "weighted", "check") else role
        rows[role].append(
            f'<g class="station {kind}" data-station="{scene.index[name]}" '
            f'transform="translate({point(scene.at[name])})"><title>{name_of(name, TITLE)}</title>'
            f'<use href="#p-{role}"/></g>'
        )
    control = "".join("".join(rows[role]) for role in ("check", "weighted", "held"))
    return (
        _layer("stations", "stations", "".join(rows["new"]))
        + _layer("unchecked", "stations", "".join(rows["unchecked"]) + marks.unchecked)
        + _layer("control", "stations", control)
    )


def _levels(scene: Scene, record: Entry) -> str:
    """Level lines of a schematic with their heights."""
    if not scene.levels:
        return ""
    shown = Shown.of(record)
    step = scene.levels[1][1] - scene.levels[0][1] if len(scene.levels) > 1 else 1.0
    places = max(0, -math.floor(math.log10(step) + 1e-9))
    lines = "".join(f'<path d="M0 {number(y)}H{number(WIDTH)}"/>' for y, _ in scene.levels)
    texts = "".join(
        f'<g transform="translate(6 {number(y)})"><text y="-4">{shown.mark(f"{h:.{places}f}")}</text></g>'
        for y, h in scene.levels
    )
    return f'<g class="levels">{lines}{texts}</g>'


def _kept(scene: Scene) -> list[tuple[float, float, float, float]]:
    """Boxes (left, top, right, bottom) that names stay out of: the scale bars and the north point."""
    if scene.metres is None:
        return [(0.0, 0.0, 70.0, scene.height)]
    return [(0.0, scene.height - 62, 230.0, scene.height), (WIDTH - 44, 0.0, WIDTH, 62.0)]


def _furniture(scene: Scene, record: Entry, words: Texts) -> str:
    """Scale bars and north point: they stay where they are while the ground is moved."""
    if scene.metres is None:
        return (
            f'<g class="furniture"><g transform="translate(6 16)"><text>{_height_words(record, words)}</text></g></g>'
        )
    shown, y = Shown.of(record), scene.height
    unit = LENGTHS[shown.length]
    bars = _bar("plan-scale", y - 14, scene.metres / unit, shown.length, shown, 1.0, "")
    if scene.magnification:
        small = scene.metres / scene.magnification * shown.in_small(1.0)
        bars += _bar("plan-ellipses", y - 38, small, shown.small, shown, 0.5, " own")
    north = (
        f'<g class="north" transform="translate({number(WIDTH - 24)} 34)"><g><path d="M0-26 8 8 0 2-8 8Z"/>'
        f'<text y="24">{words.safe("plan.north")}</text></g></g>'
    )
    return f'<g class="furniture">{bars}{north}</g>'


def _height_words(record: Entry, words: Texts) -> str:
    return words.safe("plan.heights_in", unit=record["units"]["length"])


def _bar(key: str, y: float, per_unit: float, unit: str, shown: Shown, share: float, look: str) -> str:
    """A bar of round length: ``per_unit`` lengths to a unit of the drawing."""
    length = round_step(BAR * share * WIDTH * per_unit)
    end = number(length / per_unit)
    words = f"{shown.mark(f'{length:g}')} {unit}"
    return (
        f'<g id="{key}" class="bar{look}" data-per-unit="{per_unit!r}" data-share="{share:g}" data-of="{unit}" '
        f'transform="translate(12 {number(y)})"><path d="M0-5V5M0 0H{end}M{end}-5V5"/>'
        f'<g transform="translate({end} 0)"><text x="8" y="6">{safe(words)}</text></g></g>'
    )


def _legend(scene: Scene, record: Entry, words: Texts, marks: Marks, names: Placed) -> str:
    """What the shapes and dashes mean, each with its picture, and what is not drawn."""
    seen = {role: f'<use href="#p-{role}"/>' for role in ROLES if role in scene.roles.values()}
    rows = [
        _key(
            f"station {'control ' if role in ('held', 'weighted', 'check') else ''}{role}", shape, words(f"plan.{role}")
        )
        for role, shape in seen.items()
    ]
    drawn = set(scene.looks.values())
    look_word = "plan.lines_{}" if scene.metres else "plan.schematic_{}"
    rows += [
        _key(f"lines {look}", '<path class="line" d="M-17 0H17"/>', words(look_word.format(look)))
        for look in LOOK_ORDER
        if look in drawn
    ]
    percent = f"{100 * record['settings']['confidence']:g}"
    sized = (
        (scene.ellipses, "ellipse", '<ellipse class="ellipse" rx="15" ry="7"/>', "plan.ellipses", scene.magnification),
        (scene.bars, "ellipse", '<path class="ellipse bar" d="M0-8V8M-5-8H5M-5 8H5"/>', "plan.bars",
         scene.magnification),
        (scene.relative, "relative", '<ellipse class="relative" rx="15" ry="7"/>', "plan.relative",
         scene.relative_magnification),
    )  # fmt: skip
    for there, what, shape, text, magnification in sized:
        if there:
            said = words(text, percent=percent, times=_times(magnification))
            rows.append(_key(f"{what}s", shape, said, f"plan-{what}-words"))
    if any(one.pair for one in scene.relative):
        rows.append(_key("relatives", '<path class="pair" d="M-17 0H17"/>', words("plan.pair")))
    rows += _mark_keys(marks, words)
    notes = "".join(f'<li class="note">{safe(note)}</li>' for note in _notes(scene, words, marks))
    if len(names.starts) < scene.many:
        nameless = words.safe("plan.note_names", count=scene.many - len(names.starts))
        notes += f'<li class="note of-names">{nameless}</li>'
    return f'<ul id="plan-legend" aria-label="{words.safe("plan.legend")}">{"".join(rows)}{notes}</ul>'


def _mark_keys(marks: Marks, words: Texts) -> list[str]:
    rows = []
    if marks.suspects:
        badge = '<g class="badge"><g><circle r="9"/><text y="5">1</text></g></g>'
        shape = f'<g class="suspect"><path d="M-17 0H17"/>{badge}</g>'
        rows.append(_key("suspects", shape, words("plan.suspects")))
    if marks.unchecked:
        rows.append(_key("stations", '<g class="mark"><use href="#p-diamond"/></g>', words("plan.unchecked_reading")))
    for kind in ("met", "not-met", "untested"):
        if f"closure {kind}" in marks.closures:
            shape = f'<g class="mark closure {kind}"><use href="#p-{kind}"/></g>'
            rows.append(_key("closures", shape, words(f"plan.closure_{kind.replace('-', '_')}")))
    if marks.left_out:
        shape = '<path d="M-17 0H17"/><g class="mark"><use href="#p-cross"/></g>'
        rows.append(_key("left-out", shape, words("plan.left_out")))
    return rows


def _key(look: str, shape: str, text: str, mark: str = "") -> str:
    name = f' id="{mark}"' if mark else ""
    return (
        f'<li><svg viewBox="-20 -12 40 24" aria-hidden="true" class="key"><g class="{look}">{shape}</g></svg>'
        f"<span{name}>{safe(text)}</span></li>"
    )


def _times(magnification: float | None) -> str:
    return f"{magnification or 1:g}" if (magnification or 1) < 1e5 else f"{magnification:.0f}"


def _notes(scene: Scene, words: Texts, marks: Marks) -> list[str]:
    """What is not drawn, in words."""
    found = []
    if scene.metres is None:
        found.append(words("plan.note_schematic"))
    if scene.missing:
        found.append(words("plan.note_missing" if scene.metres else "plan.note_change_points", count=scene.missing))
    if scene.ellipses_of > len(scene.ellipses):
        found.append(words("plan.note_ellipses", drawn=len(scene.ellipses), all=scene.ellipses_of))
    if scene.relative_of > len(scene.relative):
        found.append(words("plan.note_relative", drawn=len(scene.relative), all=scene.relative_of))
    if marks.unmarked:
        found.append(words("plan.note_closures", count=marks.unmarked))
    if not scene.record.get("complete", True):
        found.append(words("plan.note_incomplete"))
    return found
