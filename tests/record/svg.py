"""A drawing as a reader of its file sees it, and the promises that a reader can check without the program."""

from __future__ import annotations

import math
import re
import xml.etree.ElementTree as ET
from typing import Any

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg

from adjust.caution import CAUTION
from adjust.record.drawing import drawing_svg
from adjust.record.sheet import Sheet, mark_id
from tests.helpers import close

POINTS_PER_MM = 72 / 25.4
"""The SVG's unit is the point."""
ROUND = "M" + "C" * 8
PATH = "{http://www.w3.org/2000/svg}path"


class Svg:
    """The drawing of a record, or a file's text: groups by id, points in mm with y upwards, texts in order."""

    def __init__(self, of: dict[str, Any] | str) -> None:
        source = of if isinstance(of, str) else drawing_svg(of).decode()
        self.bytes = source.encode()
        self.root = ET.fromstring(source)
        self.texts = [text.strip() for text in re.findall(r"<!--(.*?)-->", source, re.DOTALL)]
        self.page = " ".join(self.texts)
        self.groups = {g.get("id"): g for g in self.root.iter("{http://www.w3.org/2000/svg}g") if g.get("id")}

    def points(self, gid: str) -> np.ndarray:
        """On-curve points of the group's paths, (n, 2) in mm."""
        found = []
        for path in self.groups[gid].iter(PATH):
            for command, numbers in re.findall(r"([MLCQ])([^MLCQZz]*)", path.get("d", "")):
                values = [float(v) for v in numbers.split()]
                found.append(values[-2:] if command in "CQ" else values[:2])
        points = np.array(found) / POINTS_PER_MM
        height = float(self.root.get("height", "").removesuffix("pt")) / POINTS_PER_MM
        return np.column_stack([points[:, 0], height - points[:, 1]])

    def centre(self, gid: str) -> np.ndarray:
        points = self.points(gid)
        return (points.min(axis=0) + points.max(axis=0)) / 2

    def number(self, pattern: str) -> float:
        match = re.search(pattern, self.page)
        assert match, f"{pattern} is not in: {self.page}"
        return float(match[1])

    def text(self, gid: str) -> str:
        """The words of a text with an id: matplotlib writes them as a comment in the group."""
        match = re.search(rf'<g id="{re.escape(gid)}">\s*<!--(.*?)-->', self.bytes.decode(), re.DOTALL)
        assert match, f"no text {gid}"
        return match[1].strip()

    def many(self, prefix: str) -> list[str]:
        return [str(gid) for gid in self.groups if str(gid).startswith(prefix)]


def on_plan(record: dict[str, Any]) -> list[dict[str, Any]]:
    return [one for one in record["stations"] if one["east"] is not None and one["north"] is not None]


def north_is_up(svg: Svg, record: dict[str, Any]) -> None:
    """The arrow points up, and of two stations the one with the larger north stands higher."""
    (x1, y1), (x2, y2) = svg.points("north")
    assert y2 > y1 + 10
    close(x2, x1, atol=1e-3)
    north = np.array([one["north"] for one in on_plan(record)])
    height = np.array([svg.centre(f"station-{one['station']}")[1] for one in on_plan(record)])
    assert np.array_equal(np.argsort(north), np.argsort(height))


def plan_is_to_scale(svg: Svg, record: dict[str, Any]) -> None:
    """Differences on paper are those on the ground over the stated scale, the same across and up."""
    scale = svg.number(r"Scale 1:(\d+)")
    round_ones = [one for one in on_plan(record) if one["role"] in ("new", "check")]
    paper = np.array([svg.centre(f"station-{one['station']}") for one in round_ones])
    ground = np.array([[one["east"], one["north"]] for one in round_ones])
    close(paper - paper[0], (ground - ground[0]) * 1000 / scale, atol=2e-3)


def bars_are_true(svg: Svg, record: dict[str, Any]) -> None:
    """The scale bar and the ellipses' bar are as long as they say."""
    scale = svg.number(r"Scale 1:(\d+)")
    metres = float(svg.text("scale-bar-text").removesuffix(" m"))
    close(np.ptp(svg.points("scale-bar")[:, 0]), metres * 1000 / scale, atol=1e-3)
    for gid, words in (("ellipse-scale", r"Ellipses \(95 %\) drawn"), ("relative-scale", "Relative ellipses drawn")):
        if gid in svg.groups:
            mm = float(svg.text(f"{gid}-text").removesuffix(" mm"))
            close(np.ptp(svg.points(gid)[:, 0]), mm * svg.number(words + r" (\d+) times") / scale, atol=1e-3)


def ellipses_are_true(svg: Svg, record: dict[str, Any]) -> None:
    """Half axes and azimuths of all ellipses: the record's, at the stated scale and enlargement."""
    scale, times = svg.number(r"Scale 1:(\d+)"), svg.number(r"Ellipses \(95 %\) drawn (\d+) times")
    drawn = [(f"ellipse-{one['station']}", one["ellipse_confidence"], times) for one in record["stations"]
             if one["ellipse_confidence"] and one["ellipse_confidence"]["semi_major"]]  # fmt: skip
    if svg.many("relative-"):
        times = svg.number(r"Relative ellipses drawn (\d+) times")
        lines = {mark_id("relative", f"{one['from']} - {one['to']}"): one for one in record["lines"]}
        drawn += [(gid, lines[gid]["ellipse_confidence"], times) for gid in svg.many("relative-") if gid in lines]
    assert drawn
    for gid, e, enlarged in drawn:
        reach = svg.points(gid)[:-1] - svg.centre(gid)
        length = np.hypot(reach[:, 0], reach[:, 1])
        wanted = np.array([e["semi_major"], e["semi_minor"]]) * enlarged * 1000 / scale
        close([length.max(), length.min()], wanted, atol=2e-3)
        azimuth = math.atan2(*reach[length.argmax()]) % math.pi
        assert abs(math.remainder(azimuth - e["azimuth"], math.pi)) < 4e-3


def symbols_are_complete(svg: Svg, record: dict[str, Any]) -> None:
    """Every station has the shape of its role: triangles 3 corners, squares 4, circles curves, unchecked a cross."""
    unchecked = set()
    for one in on_plan(record):
        gid = mark_id("station", one["station"])
        paths = list(svg.groups[gid].iter(PATH))
        assert len(paths) == 1
        shape = re.sub(r"[^MLC]", "", paths[0].get("d", ""))
        filled = "fill: none" not in paths[0].get("style", "") and "fill: #ffffff" not in paths[0].get("style", "")
        wanted = {
            "held": ("MLL", True),
            "weighted": ("MLL", False),
            "check": ("MLLL", True),
            "new": ("M" + "C" * 8, False),
        }
        assert (shape, filled) == wanted[one["role"]], one["station"]
        unchecked |= {one["station"]} if f"cross-{gid}" in svg.groups else set()
    pointed = {"P7"} if record["unchecked"] else set()
    assert unchecked == pointed


def caution_is_there(svg: Svg, record: dict[str, Any]) -> None:
    assert CAUTION in svg.page


Boxes = list[tuple[float, float, float, float]]


def label_boxes(sheet: Sheet) -> Boxes:
    """Boxes of the names in mm as the renderer measures their ink, left, bottom, right, top."""
    renderer = FigureCanvasAgg(sheet.figure).get_renderer()
    found = []
    for artist in sheet.axes.texts:
        if str(artist.get_gid()).startswith("label-"):
            artist.set_path_effects([])  # the halo is no ink
            box = artist.get_window_extent(renderer)
            k = 25.4 / sheet.figure.dpi
            found.append((box.x0 * k, box.y0 * k, box.x1 * k, box.y1 * k))
    return found


def overlaps(sheet: Sheet, others: Boxes) -> list[tuple[int, int]]:
    """Pairs of names, or of a name and another box, that share more than 0.1 mm both ways."""
    names = label_boxes(sheet)
    every = [*names, *others]
    return [
        (i, j)
        for i, a in enumerate(names)
        for j, b in enumerate(every)
        if i < j and min(a[2], b[2]) - max(a[0], b[0]) > 0.1 and min(a[3], b[3]) - max(a[1], b[1]) > 0.1
    ]
