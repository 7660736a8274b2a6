"""The drawing, read back from its SVG: what is drawn must be what is stated."""

from __future__ import annotations

import io
import math
import os
import re
import subprocess
import sys
import xml.etree.ElementTree as ET
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest

from adjust.caution import CAUTION
from adjust.record.drawing import draw
from adjust.record.level_view import multiplier, walk
from adjust.record.plan_view import line_looks, scale_in_words, scale_number, unchecked_stations
from adjust.record.sheet import Labels, Sheet, mark_id, nearest_step, round_step
from adjust.record.shown import Shown
from tests.helpers import close
from tests.record.samples import (
    HOSTILE,
    MULTIPLIER_95,
    bare_record,
    grid_record,
    hostile_record,
    level_record,
    plane_record,
    station,
)

POINTS_PER_MM = 72 / 25.4
"""The SVG's unit is the point."""


class Svg:
    """The drawing as a reader of the file sees it: groups by id, points in mm with y upwards, texts in order."""

    def __init__(self, record: dict[str, Any]) -> None:
        self.bytes = draw(record)["drawing.svg"]
        source = self.bytes.decode()
        self.root = ET.fromstring(source)
        self.texts = [text.strip() for text in re.findall(r"<!--(.*?)-->", source, re.DOTALL)]
        self.page = " ".join(self.texts)
        self.groups = {g.get("id"): g for g in self.root.iter("{http://www.w3.org/2000/svg}g") if g.get("id")}

    def points(self, gid: str) -> np.ndarray:
        """On-curve points of the group's paths, (n, 2) in mm."""
        found = []
        for path in self.groups[gid].iter("{http://www.w3.org/2000/svg}path"):
            for command, numbers in re.findall(r"([MLCQ])([^MLCQZz]*)", path.get("d", "")):
                values = [float(v) for v in numbers.split()]
                found.append(values[-2:] if command in "CQ" else values[:2])
        points = np.array(found) / POINTS_PER_MM
        return np.column_stack([points[:, 0], 210 - points[:, 1]])

    def centre(self, gid: str) -> np.ndarray:
        points = self.points(gid)
        return (points.min(axis=0) + points.max(axis=0)) / 2

    def number(self, pattern: str) -> float:
        match = re.search(pattern, self.page)
        assert match, f"{pattern} is not in: {self.page}"
        return float(match[1])


@pytest.fixture(scope="module")
def plan() -> Svg:
    return Svg(plane_record())


@pytest.fixture(scope="module")
def levels() -> Svg:
    return Svg(level_record())


def test_the_sheet_is_landscape_a4(plan: Svg) -> None:
    width, height = (float(plan.root.get(key, "").removesuffix("pt")) for key in ("width", "height"))
    close([width / POINTS_PER_MM, height / POINTS_PER_MM], [297.0, 210.0], atol=0.001)
    assert draw(plane_record())["drawing.png"].startswith(b"\x89PNG")


def test_north_points_up(plan: Svg) -> None:
    (x1, y1), (x2, y2) = plan.points("north")
    assert y2 > y1 + 10
    close(x2, x1, atol=1e-3)


def test_stations_stand_where_their_coordinates_say(plan: Svg) -> None:
    """Differences on paper are differences on the ground divided by the stated scale, east right and north up."""
    scale = plan.number(r"Scale 1:(\d+)")
    new = [one for one in plane_record()["stations"] if one["role"] in ("new", "check")]
    paper = np.array([plan.centre(f"station-{one['station']}") for one in new])
    ground = np.array([[one["east"], one["north"]] for one in new])
    close(paper - paper[0], (ground - ground[0]) * 1000 / scale, atol=2e-3)


def test_the_scale_bar_is_as_long_as_it_says(plan: Svg) -> None:
    stated = plan.number(r"(?:^| )(\d+) m ")
    drawn = np.ptp(plan.points("scale-bar")[:, 0])
    close(drawn, stated * 1000 / plan.number(r"Scale 1:(\d+)"), atol=1e-3)


def test_the_scale_bar_in_feet() -> None:
    record = plane_record()
    record["units"]["length"] = "ft"
    svg = Svg(record)
    feet, inch = svg.number(r"(?:^| )(\d+) ft "), svg.number(r"Scale 1 inch = (\d+) ft")
    close(np.ptp(svg.points("scale-bar")[:, 0]), feet / inch * 25.4, atol=1e-3)


def test_ellipse_axes_are_the_stated_times_larger(plan: Svg) -> None:
    scale, times = plan.number(r"Scale 1:(\d+)"), plan.number(r"Ellipses \(95 %\) drawn (\d+) times larger")
    for one in plane_record()["stations"]:
        if one["role"] == "held":
            assert f"ellipse-{one['station']}" not in plan.groups
            continue
        points = plan.points(f"ellipse-{one['station']}")
        reach = points[:-1] - plan.centre(f"ellipse-{one['station']}")
        length = np.hypot(reach[:, 0], reach[:, 1])
        e = one["ellipse_confidence"]
        wanted = np.array([e["semi_major"], e["semi_minor"]]) * times * 1000 / scale
        close([length.max(), length.min()], wanted, atol=2e-3)
        azimuth = math.atan2(*reach[length.argmax()]) % math.pi
        assert abs(math.remainder(azimuth - e["azimuth"], math.pi)) < 2e-3


def test_the_ellipse_scale_bar_is_as_long_as_it_says(plan: Svg) -> None:
    stated = plan.number(r"(?:^| )(\d+) mm(?: |$)(?!too)")
    times, scale = plan.number(r"drawn (\d+) times"), plan.number(r"Scale 1:(\d+)")
    close(np.ptp(plan.points("ellipse-scale")[:, 0]), stated * times / scale, atol=1e-3)


def test_half_axes_that_grow_do_not_change_the_statement_by_chance() -> None:
    """A net ten times less certain is drawn with a tenth of the magnification."""
    record = plane_record()
    for one in record["stations"]:
        for key in ("semi_major", "semi_minor"):
            one["ellipse_confidence"][key] *= 10
    assert Svg(record).number(r"drawn (\d+) times") * 10 == Svg(plane_record()).number(r"drawn (\d+) times")


def test_one_wild_ellipse_stays_on_the_sheet() -> None:
    record = plane_record()
    record["stations"][2]["ellipse_confidence"]["semi_major"] *= 1000
    svg = Svg(record)
    reach = svg.points("ellipse-P1") - svg.centre("ellipse-P1")
    assert np.hypot(*reach.T).max() < 35


def test_level_stations_stand_at_their_heights(levels: Svg) -> None:
    new = [one for one in level_record()["stations"] if one["role_height"] == "new"]
    heights = np.array([one["height"] for one in new])
    y = np.array([levels.centre(f"station-{one['station']}")[1] for one in new])
    ratio = np.diff(y) / np.diff(heights)
    close(ratio, np.full(len(ratio), ratio.mean()), atol=0.01 * ratio.mean())


def test_level_bars_are_the_stated_times_larger(levels: Svg) -> None:
    times = levels.number(r"Intervals \(95 %\) drawn (\d+) times larger")
    stations = {one["station"]: one for one in level_record()["stations"]}
    (y1, y2), (h1, h2) = zip(
        *((levels.centre(f"station-{n}")[1], stations[n]["height"]) for n in ("TP1", "TP5")), strict=True
    )
    mm_per_metre = (y2 - y1) / (h2 - h1)
    for name in ("TP1", "TP2", "TP5"):
        wanted = 2 * 1.959964 * stations[name]["sd_height"] * mm_per_metre * times
        close(np.ptp(levels.points(f"bar-{name}")[:, 1]), wanted, atol=0.005 * wanted)
    stated = levels.number(r"(?:^| )(\d+) mm")
    close(np.ptp(levels.points("bar-scale")[:, 1]), stated / 1000 * mm_per_metre * times, atol=0.05)


def test_level_lines_keep_off_other_stations() -> None:
    """All heights alike: a line past other stations is bent, one between neighbours of the row is straight."""
    record = level_record()
    for one in record["stations"]:
        one["height"] = 212.0
    svg, order = Svg(record), walk(record)
    for i, one in enumerate(record["observations"]):
        path = svg.groups[f"line-{i + 1}"].find(".//{http://www.w3.org/2000/svg}path")
        assert path is not None
        _, y1, _, bend, _, y2 = (float(v) for v in re.findall(r"[-\d.]+", path.get("d", "")))
        close(y1, y2, atol=1e-6)
        apart = abs(order.index(one["from"]) - order.index(one["to"]))
        assert (abs(bend - y1) > 5 * POINTS_PER_MM) == (apart > 1), f"line {i + 1} passes {apart - 1} stations"


def test_a_schematic_has_no_north_and_says_what_is_not_to_scale(levels: Svg) -> None:
    assert "north" not in levels.groups
    assert "nothing is to scale sideways" in levels.page


def test_the_walk_starts_at_control_and_reaches_every_piece() -> None:
    record = level_record()
    assert walk(record) == ["BM1", "TP1", "TP4", "TP2", "TP3", "BM2", "TP5"]
    record["stations"].append(station("LONE", None, 200.0, sd_height_mm=1.0))
    assert walk(record)[-1] == "LONE"


def test_interval_multipliers() -> None:
    """1.960 and, with 3 degrees of freedom, 3.182: standard normal and Student tables (from memory, well known)."""
    record = level_record()
    close(multiplier(record), 1.960, atol=5e-4)
    record["settings"]["variance_factor"] = "from-residuals"
    close(multiplier(record), 3.182, atol=5e-4)


def test_title_block(plan: Svg) -> None:
    for words in ("Tarnel Weir: access road", "For Tarnel Weir trustees", "Surveyed 2026-05-14", "Datum: held control",
                  "Overall test, plane: met", "confidence ellipse, 95 %", CAUTION):  # fmt: skip
        assert words in plan.page


@pytest.mark.parametrize("make", [plane_record, level_record, bare_record, hostile_record])
def test_every_drawing_carries_the_caution(make: Any) -> None:
    assert CAUTION in Svg(make()).page


def test_suspects_are_numbered_and_described(plan: Svg) -> None:
    assert {"suspect-1", "suspect-2"} <= plan.groups.keys()
    assert "distances.csv:4: distance P2 to P3, reads 38.2 mm too much" in plan.page
    middle = (plan.centre("station-P2") + plan.centre("station-P3")) / 2
    close(plan.centre("suspect-1"), middle, atol=0.01)


def test_no_suspects_no_marks() -> None:
    record = plane_record()
    record["suspects"] = []
    svg = Svg(record)
    assert not [gid for gid in svg.groups if str(gid).startswith("suspect-")]
    assert "suspect" not in svg.page


def test_only_what_occurs_stands_in_the_legend() -> None:
    page = Svg(bare_record()).page
    assert "control, held" in page
    assert "distance measured" in page
    for absent in ("new station", "check mark", "ellipse", "directions or angles only", "levelled"):
        assert absent not in page


def test_lines_are_told_apart_by_what_was_read() -> None:
    looks = line_looks(plane_record()["observations"])
    assert looks["M1", "P1"] == "distance"  # a distance and a direction
    assert looks["P2", "P4"] == "pointing"
    assert line_looks(level_record()["observations"])["BM1", "TP1"] == "levelled"


def test_unchecked_readings_mark_the_station_they_point_to() -> None:
    record = plane_record()
    assert unchecked_stations(record) == {"P7"}
    record["unchecked"] = [{"observation": "distances.csv:8", "why": ""}]  # P7 to M2, which is control
    assert unchecked_stations(record) == {"P7"}
    record["unchecked"] = [{"observation": "not there", "why": ""}]
    assert unchecked_stations(record) == set()


def test_hostile_names_are_harmless() -> None:
    svg = Svg(hostile_record())
    source = svg.bytes.decode()
    assert "<script" not in re.sub(r"<!--.*?-->", "", source, flags=re.DOTALL)
    assert not list(svg.root.iter("{http://www.w3.org/2000/svg}script"))
    drawn = np.ptp(svg.points(mark_id("label", "$x_1^2$"))[:, 0])
    close(drawn, Sheet().width("$x_1^2$", 7.5), atol=1.2)  # set as mathematics it would be 2.7 mm
    for name in HOSTILE[:8]:
        assert mark_id("station", name) in svg.groups
    assert all(re.fullmatch(r"[\w.%~-]+", str(gid)) for gid in svg.groups)


def test_a_script_the_font_lacks_does_not_warn() -> None:
    record = bare_record()
    record["stations"][0]["station"] = "測点"
    assert mark_id("station", "測点") in Svg(record).groups


def test_no_coordinates_at_all() -> None:
    record = bare_record()
    for one in record["stations"]:
        one.update(east=None, north=None, ellipse=None, ellipse_confidence=None)
    assert "No station has coordinates." in Svg(record).page


def test_a_single_station_and_stations_in_one_place() -> None:
    record = bare_record()
    record["stations"][1].update(east=0.0, north=0.0)
    assert "Scale 1:10 on A4" in Svg(record).page
    del record["stations"][1]
    assert "station-A" in Svg(record).groups


def test_many_stations_have_fewer_labels() -> None:
    few, many = Svg(grid_record(5)), Svg(grid_record(18))
    labels = [sum(str(gid).startswith("label-") for gid in svg.groups) for svg in (few, many)]
    assert labels == [25, 11]  # of many: the control and the ten least certain
    assert "station-G17.17" in many.groups


def test_the_users_settings_change_nothing_and_are_kept() -> None:
    wanted = draw(plane_record())
    with mpl.rc_context({"font.size": 30, "lines.linewidth": 9, "svg.fonttype": "none", "savefig.dpi": 40}):
        assert draw(plane_record()) == wanted
        assert mpl.rcParams["font.size"] == 30
        assert mpl.rcParams["svg.hashsalt"] is None


SCRIPT = """
import hashlib, sys
from adjust.record.drawing import draw
from tests.record.samples import plane_record, level_record
for make in (plane_record, level_record):
    for data in draw(make()).values():
        print(hashlib.sha256(data).hexdigest())
print("matplotlib.pyplot" in sys.modules)
"""


def test_same_bytes_in_another_process_hash_seed_place_and_time_zone(tmp_path: Path) -> None:
    root = Path(__file__).parents[2]
    outputs = set()
    for seed, zone in (("1", "UTC"), ("77", "Asia/Tokyo")):
        env = {**os.environ, "PYTHONPATH": str(root), "PYTHONHASHSEED": seed, "TZ": zone, "SOURCE_DATE_EPOCH": seed}
        done = subprocess.run([sys.executable, "-c", SCRIPT], env=env, cwd=tmp_path, capture_output=True, text=True)
        assert done.returncode == 0, done.stderr
        outputs.add(done.stdout)
    assert len(outputs) == 1
    assert outputs.pop().split()[-1] == "False"


def test_the_png_is_not_empty_paper() -> None:
    from PIL import Image

    with Image.open(io.BytesIO(draw(plane_record())["drawing.png"])) as image:
        pixels = np.asarray(image.convert("RGB")).astype(int)
        assert CAUTION in image.info["Description"]
    blue = (abs(pixels - [0x00, 0x72, 0xB2]).sum(axis=2) < 30).mean()
    assert blue > 0.0005
    assert pixels.shape[1] / pixels.shape[0] == pytest.approx(297 / 210, rel=1e-3)


@pytest.mark.parametrize(
    ("unit", "extent", "wanted"),
    [("m", 412.0, 3000.0), ("m", 150.0, 1000.0), ("m", 151.0, 1250.0), ("ft", 412.0, 3600.0), ("ft", 0.0, 12.0)],
)
def test_plan_scales_are_round(unit: str, extent: float, wanted: float) -> None:
    """``extent`` metres on 150 mm: the next scale that trade rules carry; for feet, whole feet to the inch times 12."""
    record = plane_record()
    record["units"]["length"] = unit
    close(scale_number((extent, 0.0), (150.0, 100.0), Shown.of(record)), wanted, atol=1e-6)


def test_scale_words_for_survey_feet() -> None:
    record = plane_record()
    record["units"]["length"] = "us-ft"
    shown = Shown.of(record)
    scale = scale_number((412.0, 0.0), (178.0, 100.0), shown)
    assert scale_in_words(scale, shown) == "Scale 1 inch = 200 us-ft (1:2400) on A4"


@pytest.mark.parametrize(
    ("largest", "step"), [(62.0, 50.0), (5.0, 5.0), (0.0199, 0.01), (1999.0, 1000.0), (10.0, 10.0)]
)
def test_round_step_does_not_exceed(largest: float, step: float) -> None:
    close(round_step(largest), step, atol=1e-9 * step)


@pytest.mark.parametrize(
    ("wanted", "step"), [(1.3, 1.0), (1.6, 2.0), (3.0, 2.0), (3.3, 5.0), (7.5, 10.0), (4200.0, 5000.0)]
)
def test_nearest_step_by_ratio(wanted: float, step: float) -> None:
    close(nearest_step(wanted), step, atol=1e-9 * step)


def test_labels_keep_off_symbols_and_each_other() -> None:
    labels = Labels(Sheet(), (0, 0, 100, 100))
    places = [(50.0, 50.0), (58.0, 50.0), (50.0, 56.0)]
    for place in places:
        labels.keep_off(place, 1.5)
    labels.place([(place, f"NAME{i}", f"label-{i}") for i, place in enumerate(places)])
    boxes = []
    for artist in labels.sheet.axes.texts:
        x, y = artist.get_position()
        boxes.append((x, y, x + labels.sheet.width(artist.get_text(), labels.size), y + 1.8))
    for i, one in enumerate(boxes):
        others = [*boxes[:i], *[(x - 1.5, y - 1.5, x + 1.5, y + 1.5) for x, y in places]]
        for other in others:
            apart = one[2] <= other[0] or other[2] <= one[0] or one[3] <= other[1] or other[3] <= one[1]
            assert apart, f"{one} covers {other}"


def test_long_words_are_cut_to_the_width() -> None:
    sheet = Sheet()
    lines = sheet.wrap("N" * 200, 30.0, 8.0, most=2)
    assert len(lines) == 2
    assert lines[1].endswith("…")
    assert max(sheet.width(line, 8.0) for line in lines) <= 30.0


def test_the_sample_multiplier_is_that_of_two_degrees_of_freedom() -> None:
    close(MULTIPLIER_95, 2.448, atol=5e-4)  # 2.4477: printed in every table of error ellipses (from memory)
