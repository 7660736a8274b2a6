"""The drawing, read back from its SVG: what is drawn must be what is stated."""

from __future__ import annotations

import io
import os
import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest

from adjust.caution import CAUTION
from adjust.record.drawing import draw, drawing_png
from adjust.record.labels import Labels
from adjust.record.level_view import multiplier, walk
from adjust.record.net import line_looks, unchecked_stations
from adjust.record.paper import lying, scale_in_words, scale_number
from adjust.record.sheet import Sheet, mark_id, nearest_step, round_step
from adjust.record.shown import Shown
from tests.helpers import close
from tests.record import svg as promises
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
from tests.record.svg import POINTS_PER_MM, Svg, overlaps


@pytest.fixture(scope="module")
def plan() -> Svg:
    return Svg(plane_record())


@pytest.fixture(scope="module")
def levels() -> Svg:
    return Svg(level_record())


def test_the_sheet_is_landscape_a4(plan: Svg) -> None:
    width, height = (float(plan.root.get(key, "").removesuffix("pt")) for key in ("width", "height"))
    close([width / POINTS_PER_MM, height / POINTS_PER_MM], [297.0, 210.0], atol=0.001)


PROMISES = (promises.north_is_up, promises.plan_is_to_scale, promises.bars_are_true, promises.ellipses_are_true,
            promises.symbols_are_complete, promises.caution_is_there)  # fmt: skip


def with_lines() -> dict[str, Any]:
    """The plane record with relative ellipses: of a line, and of a pair that was asked for."""
    record = plane_record()
    for ends, e in ((("P1", "P2"), (0.004, 0.002, 0.7)), (("P1", "P3"), (0.005, 0.003, 2.0))):
        ellipse = dict(zip(("semi_major", "semi_minor", "azimuth"), e, strict=True))
        record["lines"].append({"from": ends[0], "to": ends[1], "ellipse_confidence": ellipse})
    return record


@pytest.fixture(scope="module")
def lined() -> Svg:
    return Svg(with_lines())


@pytest.mark.parametrize("promise", PROMISES)
def test_what_is_drawn_is_what_is_stated(promise: Callable[[Svg, Any], None], lined: Svg) -> None:
    promise(lined, with_lines())


def _moved(axis: int, factor: float) -> Callable[[str], str]:
    """All paths stretched along an axis; a negative factor turns the sheet over."""

    def spoil(source: str) -> str:
        def path(match: re.Match[str]) -> str:
            numbers = iter(range(10**6))
            return re.sub(r"-?[\d.]+", lambda v: f"{float(v[0]) * (factor if next(numbers) % 2 == axis else 1):.6f}",
                          match[0])  # fmt: skip

        return re.sub(r'(?<= d=")[^"]*', path, source)

    return spoil


def _without(gid: str) -> Callable[[str], str]:
    return lambda source: source.replace(f'<g id="{gid}">', f'<g id="gone-{gid}">')


def _said(words: str, others: str) -> Callable[[str], str]:
    return lambda source: source.replace(f"<!-- {words} -->", f"<!-- {others} -->")


def _as(one: str, other: str) -> Callable[[str], str]:
    """A station drawn where and how another one is."""
    return lambda source: _without(f"station-{one}")(source).replace(f'"station-{other}"', f'"station-{one}"')


@pytest.mark.parametrize(
    ("promise", "spoil"),
    [
        (promises.north_is_up, _moved(1, -1.0)),
        (promises.plan_is_to_scale, _moved(1, 1.001)),
        (promises.plan_is_to_scale, _moved(0, 1.001)),
        (promises.bars_are_true, _moved(0, 1.002)),
        (promises.bars_are_true, _said("50 m", "60 m")),
        (promises.bars_are_true, _said("10 mm", "20 mm")),
        (promises.ellipses_are_true, _moved(1, 1.005)),
        (promises.ellipses_are_true, lambda s: re.sub(r"drawn (\d+) times", "drawn 1\\1 times", s)),
        (promises.symbols_are_complete, _as("M1", "P1")),
        (promises.symbols_are_complete, _as("M2", "M1")),
        (promises.symbols_are_complete, _without("cross-station-P7")),
        (promises.caution_is_there, lambda s: s.replace("sign-off", "sign")),
    ],
)  # fmt: skip
def test_the_promises_can_be_broken(
    promise: Callable[[Svg, Any], None], spoil: Callable[[str], str], lined: Svg
) -> None:
    """Each check fails on a drawing spoiled in its respect: turned over, stretched by 0.1 %, a mark taken away."""
    source = spoil(lined.bytes.decode())
    assert source != lined.bytes.decode()
    spoiled = Svg(source)
    with pytest.raises((AssertionError, KeyError)):
        promise(spoiled, with_lines())


def test_pairs_have_a_line_of_their_own(lined: Svg) -> None:
    assert lined.many("pair-") == ["pair-P1%20-%20P3"]
    assert len(lined.many("relative-P")) == 2
    assert "pair asked for, not measured" in lined.page


def test_left_out_readings_are_crossed_and_in_the_legend(plan: Svg) -> None:
    (x, y), (p2, c9) = plan.centre("left-out-1"), (plan.centre("station-P2"), plan.centre("station-C9"))
    close(np.cross([*(c9 - p2), 0.0], [x - p2[0], y - p2[1], 0.0])[2] / np.hypot(*(c9 - p2)), 0.0, atol=0.05)
    assert "reading left out" in plan.page
    record = plane_record()
    record["left_out"] = []
    assert "left out" not in Svg(record).page


def test_the_scale_bar_in_feet() -> None:
    record = plane_record()
    record["units"]["length"] = "ft"
    svg = Svg(record)
    feet, inch = svg.number(r"(?:^| )(\d+) ft "), svg.number(r"Scale 1 inch = (\d+) ft")
    close(np.ptp(svg.points("scale-bar")[:, 0]), feet / inch * 25.4, atol=1e-3)


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


@pytest.mark.parametrize("make", [level_record, bare_record, hostile_record])
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
    assert "distance only" in page
    for absent in ("new station", "check mark", "ellipse", "directions or angles only", "levelled", "left out"):
        assert absent not in page


def test_lines_are_told_apart_by_what_was_read() -> None:
    looks = line_looks(plane_record()["observations"])
    assert looks["M1", "P1"] == "both"  # a distance and a direction
    assert looks["P2", "P4"] == "pointing"
    assert line_looks(bare_record()["observations"])["A", "B"] == "distance"
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
    close(drawn, Sheet().width("$x_1^2$", 9.0), atol=1.2)  # set as mathematics it would be 2.7 mm
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
    assert labels[0] == 25
    assert 11 <= labels[1] < 100  # of many: the control, the ten least certain, and a sample
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

    with Image.open(io.BytesIO(drawing_png(plane_record()))) as image:
        assert image.size[0] == 1080
        pixels = np.asarray(image.convert("RGB")).astype(int)
        assert CAUTION in image.info["Description"]
    blue = (abs(pixels - [0x00, 0x72, 0xB2]).sum(axis=2) < 30).mean()
    assert blue > 0.0005


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
    assert scale_in_words(scale, shown, lying("Letter")) == "Scale 1 inch = 200 us-ft (1:2400) on Letter"


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
    sheet = Sheet()
    labels = Labels(sheet, (0, 0, 100, 100))
    places = [(50.0, 50.0), (58.0, 50.0), (50.0, 56.0)]
    for place in places:
        labels.keep_off(place, 1.5)
    assert labels.place([(place, f"NAME{i}", f"label-{i}") for i, place in enumerate(places)]) == 0
    assert not overlaps(sheet, [(x - 1.5, y - 1.5, x + 1.5, y + 1.5) for x, y in places])
    assert labels.place([((50.0, 50.0), "N" * 40, "label-3")]) == 0
    crowd = [((50.0 + i % 3, 50.0 + i // 3), f"NAME{i}", f"label-{i}") for i in range(60)]
    assert labels.place(crowd) > 0  # rather no label than one over another
    assert not overlaps(sheet, [])


def test_long_words_are_cut_to_the_width() -> None:
    sheet = Sheet()
    lines = sheet.wrap("N" * 200, 30.0, 8.0, most=2)
    assert len(lines) == 2
    assert lines[1].endswith("…")
    assert max(sheet.width(line, 8.0) for line in lines) <= 30.0


def test_the_sample_multiplier_is_that_of_two_degrees_of_freedom() -> None:
    close(MULTIPLIER_95, 2.448, atol=5e-4)  # 2.4477: printed in every table of error ellipses (from memory)
