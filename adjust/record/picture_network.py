"""Pictures on the ground: how well each line is checked, and a traverse with its misclosure enlarged.

The checked share of a reading is M_ii / P_ii (adjust.judge): the part of an error in it that the others can see.
"""

from __future__ import annotations

import math
from dataclasses import replace

from adjust.record.live_labels import place_names
from adjust.record.live_marks import path_of
from adjust.record.live_scene import WIDTH as PLAN_WIDTH
from adjust.record.live_scene import Scene
from adjust.record.live_texts import Texts, number
from adjust.record.net import Names, ordered, pointed_lines
from adjust.record.paper import Point
from adjust.record.picture_svg import WIDTH, Canvas, place
from adjust.record.sheet import nearest_step
from adjust.record.shown import Entry, Shown, plain

SHARES = ((0.6, "well"), (0.3, "fairly"), (0.1, "weakly"), (1e-6, "hardly"))
"""Lower bounds of the checked share and the look of it; below the last, as in the record, nothing checks the line. At
0.6, 0.3 and 0.1 the smallest error that is found is 5.3, 7.5 and 13 standard deviations: 4.13 / sqrt(share)."""
NAMED = 40


def shares_by_line(record: Entry, scene: Scene) -> dict[Names, float]:
    """Each drawn line with the share of its least checked reading."""
    found: dict[Names, float] = {}
    for one in scene.record["observations"]:
        if one["checked_share"] is not None:
            for line in pointed_lines(one):
                key = ordered(line)
                found[key] = min(found.get(key, 1.0), max(float(one["checked_share"]), 0.0))
    return {line: share for line, share in found.items() if scene.at.keys() >= set(line)}


def look_of(share: float) -> str:
    """The class of a checked share."""
    return next((look for least, look in SHARES if share >= least), "never")


def redundancy_picture(record: Entry, scene: Scene, texts: Texts) -> tuple[str, str] | None:
    """The map of the checked shares; None where no line has one."""
    shares = shares_by_line(record, scene)
    if not shares:
        return None
    k = WIDTH / PLAN_WIDTH
    tall, looks = scene.height * k, [look for _, look in SHARES] + ["never"]
    canvas = Canvas(tall + 24.0 * math.ceil(len(looks) / 2) + 14)
    canvas.parts.append(f'<g transform="scale({number(k, 4)})">')
    for look in looks:
        canvas.path(
            "".join(path_of(scene, _drawn(scene, line)) for line, share in shares.items() if look_of(share) == look),
            f"share {look}",
        )
    canvas.dots(scene.at.values(), "dots" if scene.many <= 300 else "dots small")
    canvas.parts.append("</g>")
    if scene.many <= NAMED:
        _names(canvas, scene, k)
    for i, look in enumerate(looks):
        x, y = 10 + (i % 2) * 0.57 * WIDTH, tall + 24 * (i // 2) + 18
        canvas.line([(x, y - 5), (x + 44, y - 5)], f"share {look}")
        canvas.text((x + 52, y), texts(f"pictures.share_{look}"))
    weak = sum(1 for share in shares.values() if share < SHARES[2][0])
    never = sum(1 for share in shares.values() if look_of(share) == "never")
    return (
        canvas.svg(texts("pictures.redundancy_title"), "redundancy"),
        texts("pictures.redundancy_words", count=len(shares), weak=weak, never=never),
    )


def _drawn(scene: Scene, line: Names) -> Names:
    """The line in the sense in which its curve was found."""
    return line if line in scene.bends or not scene.bends else (line[1], line[0])


def _names(canvas: Canvas, scene: Scene, k: float) -> None:
    placed = place_names(replace(scene, ellipses=[], relative=[], bars={}), [], [])
    for one, other in placed.leaders:
        canvas.line([(one[0] * k, one[1] * k), (other[0] * k, other[1] * k)], "leader")
    for name, at in placed.starts.items():
        canvas.text((at[0] * k, at[1] * k), plain(name, 18), "name")


def worst_traverse(record: Entry) -> Entry | None:
    """The traverse whose linear misclosure is largest against what is allowed, or against its standard deviation."""
    found = [
        one
        for one in record["closures"]
        if one["misclosure"].get("linear") is not None and one["misclosure"].get("east") is not None
    ]
    places = {one["station"] for one in record["stations"] if one["east"] is not None and one["north"] is not None}
    found = [one for one in found if places.issuperset(one["stations"])]

    def size(one: Entry) -> float:
        limit = one["allowable"].get("linear") or one["sd"].get("linear") or 1.0
        return float(one["misclosure"]["linear"]) / float(limit)

    return max(found, key=size, default=None)


def traverse_picture(record: Entry, texts: Texts) -> tuple[str, str] | None:
    """The walk with the vector from the known end to where the traverse came out, enlarged; None without a traverse."""
    one = worst_traverse(record)
    if one is None:
        return None
    at, tall = _walk_places(record, one)
    canvas, shown = Canvas(tall + 32), Shown.of(record)
    walk = [at[name] for name in one["stations"]]
    canvas.line(walk, "walk")
    canvas.dots(walk, "dots")
    for name, spot in at.items():
        canvas.text((min(spot[0] + 9, WIDTH - 9.5 * len(plain(name, 14))), spot[1] - 9), plain(name, 14), "name")
    end, miss = walk[-1], one["misclosure"]
    linear = float(miss["linear"])
    times = nearest_step(70.0 / max(linear * _per_metre(record, one), 1e-12))
    k = times * _per_metre(record, one)
    tip = (end[0] + float(miss["east"]) * k, end[1] - float(miss["north"]) * k)
    canvas.line([end, tip], "vector")
    canvas.path(_head(end, tip), "vector-head")
    amount = f"{shown.small_sd(linear)} {shown.small}"
    canvas.text((10, tall + 22), texts("pictures.traverse_scale", amount=amount, times=f"{times:.0f}"))
    return canvas.svg(texts("pictures.traverse_title"), "traverse"), _traverse_words(one, amount, texts)


def _traverse_words(one: Entry, amount: str, texts: Texts) -> str:
    ratio = texts("pictures.traverse_ratio", ratio=f"{float(one['ratio']):.0f}") if one["ratio"] else ""
    verdict = {"met": "met", "not met": "not_met"}.get(one["verdicts"].get("linear", one["verdict"]), "untested")
    return texts(
        "pictures.traverse_words",
        kind=one["kind"],
        first=plain(one["stations"][0]),
        last=plain(one["stations"][-1]),
        amount=amount,
        ratio=ratio,
        verdict=texts(f"plan.{verdict}"),
    )


def _box(record: Entry, one: Entry) -> tuple[dict[str, Point], tuple[float, float, float, float]]:
    every = {
        s["station"]: (float(s["east"]), float(s["north"]))
        for s in record["stations"]
        if s["station"] in set(one["stations"])
    }
    east, north = [p[0] for p in every.values()], [p[1] for p in every.values()]
    return every, (min(east), min(north), max(east), max(north))


def _per_metre(record: Entry, one: Entry) -> float:
    _, (west, south, east, north) = _box(record, one)
    return min((WIDTH - 200) / max(east - west, 1e-3), 300.0 / max(north - south, 1e-3))


def _walk_places(record: Entry, one: Entry) -> tuple[dict[str, Point], float]:
    """Places of its stations in the picture and the height that they need, with room for the vector around."""
    every, (west, south, east, north) = _box(record, one)
    k = _per_metre(record, one)
    tall = (north - south) * k + 190
    left = (WIDTH - (east - west) * k) / 2
    order = dict.fromkeys(one["stations"])
    return {name: (left + (every[name][0] - west) * k, 95 + (north - every[name][1]) * k) for name in order}, tall


def _head(start: Point, tip: Point) -> str:
    """The head of an arrow."""
    turn = math.atan2(tip[1] - start[1], tip[0] - start[0])
    wings = [(tip[0] - 13 * math.cos(turn + side), tip[1] - 13 * math.sin(turn + side)) for side in (0.42, -0.42)]
    return f"M{place(tip)} {place(wings[0])} {place(wings[1])}Z"
