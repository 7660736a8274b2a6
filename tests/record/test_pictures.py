"""The pictures read back: what is drawn comes from the record, and only what the record has is drawn."""

from __future__ import annotations

import copy
import math
import re
import xml.etree.ElementTree as ET
from importlib.resources import files
from pathlib import Path
from typing import Any

import pytest

import adjust
from adjust.record.build import build
from adjust.record.live_scene import scene_of
from adjust.record.live_texts import catalogue
from adjust.record.picture_closures import bars_of, longest_run
from adjust.record.picture_network import look_of, shares_by_line, worst_traverse
from adjust.record.picture_svg import TYPE, WIDTH
from adjust.record.pictures import Picture, pictures
from tests.helpers import close
from tests.record.samples import bare_record, grid_record, hostile_record, level_record, plane_record
from tests.record.test_live_plan import hostile

SVG = "{http://www.w3.org/2000/svg}"
DEMOS = Path(__file__).parents[2] / "networks"


def by_key(record: dict[str, Any]) -> dict[str, Picture]:
    return {one.key: one for one in pictures(record)}


def tree(one: Picture) -> ET.Element:
    return ET.fromstring(one.svg.replace("<svg", '<svg xmlns="http://www.w3.org/2000/svg"', 1))


def paths(one: Picture, look: str) -> list[str]:
    return [path.get("d", "") for path in tree(one).iter(f"{SVG}path") if path.get("class") == look]


def points(data: str) -> list[tuple[float, float]]:
    return [(float(x), float(y)) for x, y in re.findall(r"(-?[\d.]+) (-?[\d.]+)", data)]


@pytest.fixture(scope="module")
def traverse() -> dict[str, Any]:
    return build(adjust.assess(adjust.solve(adjust.read(DEMOS / "loop-traverse-feet"))))


@pytest.fixture(scope="module")
def levels() -> dict[str, Any]:
    return build(adjust.assess(adjust.solve(adjust.read(DEMOS / "weir-levels"))))


def test_only_pictures_with_data_are_there(traverse: dict[str, Any], levels: dict[str, Any]) -> None:
    assert set(by_key(traverse)) == {"closures", "traverse", "residuals", "order", "redundancy"}
    assert set(by_key(levels)) == {"closures", "residuals", "order", "redundancy", "profile"}
    bare = bare_record()
    bare["observations"][0]["checked_share"] = None
    assert pictures(bare) == ()
    assert set(by_key(plane_record())) == {"residuals", "order", "redundancy"}


def test_every_statistic_stands_at_its_place_in_the_book() -> None:
    record = plane_record()
    one = by_key(record)["order"]
    drawn = points(paths(one, "dots")[0])
    limit = sorted(y for data in paths(one, "limit") for _, y in points(data))
    zero, unit = (limit[0] + limit[-1]) / 2, (limit[-1] - limit[0]) / 2 / 3.29
    inside = [o for o in record["observations"] if abs(o["statistic"]) <= 8.0]
    assert len(record["observations"]) - len(inside) == len(paths(one, "beyond")) == 1
    close([(zero - y) / unit for _, y in drawn], [o["statistic"] for o in inside], atol=0.06 / unit)
    wrong = copy.deepcopy(record)
    wrong["observations"][3]["statistic"] = 2.0
    assert by_key(wrong)["order"].svg != one.svg
    places = [record["observations"].index(o) for o in inside]
    step = (drawn[-1][0] - drawn[0][0]) / (places[-1] - places[0])
    close([x - drawn[0][0] for x, _ in drawn], [(p - places[0]) * step for p in places], atol=0.11)


def test_very_many_readings_are_drawn_by_columns() -> None:
    record = grid_record(24)
    one = by_key(record)["order"]
    assert len(record["observations"]) > 1500
    assert paths(one, "columns")
    assert not paths(one, "dots small")
    assert len(one.svg) < 30_000


def test_histograms_count_every_reading_of_their_kind() -> None:
    record = plane_record()
    root = tree(by_key(record)["residuals"])
    counts = [int(title.text.rsplit(" ", 1)[-1]) for title in root.iter(f"{SVG}title") if title.text]
    assert sum(counts) == len(record["observations"])
    texts = [text.text or "" for text in root.iter(f"{SVG}text")]
    of_kind = [o["statistic"] for o in record["observations"] if o["kind"] == "direction"]
    rms = math.sqrt(sum(v * v for v in of_kind) / len(of_kind))
    assert any(text.startswith(f"directions: {len(of_kind)}, root mean square {rms:.2f}") for text in texts)
    fewer = copy.deepcopy(record)
    fewer["observations"][0]["statistic"] = None
    again = tree(by_key(fewer)["residuals"])
    assert sum(int((t.text or "0").rsplit(" ", 1)[-1]) for t in again.iter(f"{SVG}title")) == sum(counts) - 1


def test_a_line_is_as_well_checked_as_the_least_checked_of_its_readings() -> None:
    record = plane_record()
    for i, one in enumerate(record["observations"]):
        one["checked_share"] = 0.7
        if i == 0:
            one["checked_share"] = 0.05  # M1 - P1
    scene = scene_of(record)
    assert scene is not None
    shares = shares_by_line(record, scene)
    assert shares["M1", "P1"] == 0.05
    assert set(shares.values()) == {0.05, 0.7}
    one = by_key(record)["redundancy"]
    drawn = {
        look: sum(data.count("M") for data in paths(one, f"share {look}")) - 1 for look in ("well", "hardly", "never")
    }
    assert drawn == {"well": len(shares) - 1, "hardly": 1, "never": 0}  # one more of each in the legend
    assert [look_of(s) for s in (1.0, 0.6, 0.59, 0.2, 0.01, 0.0)] == [
        "well",
        "well",
        "fairly",
        "weakly",
        "hardly",
        "never",
    ]


def test_bars_are_as_long_as_misclosures_are_against_their_limit(levels: dict[str, Any]) -> None:
    rows = bars_of(levels)
    one = by_key(levels)["closures"]
    limit = points(paths(one, "limit-mark")[0])[0][0]
    ends = [
        (float(m[1]), float(m[2])) for m in (re.match(r"M([\d.]+) [\d.]+H([\d.]+)", d) for d in paths(one, "bar")) if m
    ]
    assert len(ends) == min(len(rows), 12)
    start = ends[0][0]
    close([(end - start) / (limit - start) for _, end in ends], [row[0] for row in rows[:12]], atol=0.004)
    worse = copy.deepcopy(levels)
    worse["closures"][0]["misclosure"]["height"] = -3 * worse["closures"][0]["allowable"]["height"]
    changed = by_key(worse)["closures"]
    assert len(paths(changed, "bar over")) == len(paths(changed, "beyond")) == 1
    assert not paths(one, "bar over")
    assert "Over the tolerance: 1" in changed.words


def test_the_arrow_is_the_misclosure_enlarged(traverse: dict[str, Any]) -> None:
    one, closure = by_key(traverse)["traverse"], worst_traverse(traverse)
    assert closure is not None
    (x1, y1), (x2, y2) = points(paths(one, "vector")[0])
    miss = closure["misclosure"]
    turn = math.atan2(x2 - x1, y1 - y2) % (2 * math.pi)
    close(turn, miss["direction"], atol=0.003)
    walk = points(paths(one, "walk")[0])
    place = {s["station"]: (s["east"], s["north"]) for s in traverse["stations"]}
    (e1, n1), (e2, n2) = place[closure["stations"][0]], place[closure["stations"][1]]
    k = math.dist(walk[0], walk[1]) / math.hypot(e2 - e1, n2 - n1)
    times = float(re.search(r"drawn (\d+) times", one.svg)[1])  # type: ignore[index]
    close(math.hypot(x2 - x1, y2 - y1), miss["linear"] * k * times, atol=0.3)
    assert len(walk) == len(closure["stations"])


def test_the_profile_is_to_scale_with_its_band(levels: dict[str, Any]) -> None:
    one, run = by_key(levels)["profile"], longest_run(levels)
    walk = points(paths(one, "walk")[0])
    heights = [s["height"] for s in run]
    k = (walk[0][1] - walk[1][1]) / (heights[1] - heights[0])
    close([(walk[0][1] - y) / k for _, y in walk], [h - heights[0] for h in heights], atol=0.15 / abs(k))
    band = points(paths(one, "band")[0])
    upper, lower = band[: len(run)], band[len(run) :][::-1]
    times = float(re.search(r"interval, ([\d.]+) times", one.svg)[1])  # type: ignore[index]
    close(
        [(low[1] - up[1]) / 2 for up, low in zip(upper, lower, strict=True)],
        [1.959964 * s["sd_height"] * k * times for s in run],
        atol=0.12,
    )


@pytest.mark.parametrize(
    "make",
    [
        plane_record,
        level_record,
        hostile_record,
        lambda: grid_record(12),
        lambda: hostile(("</text><script>", '"><img src=x onerror=alert(1)>', "N" * 10_000, "\u202ex")),
    ],
)
def test_markup_is_well_formed_and_plain(make: Any) -> None:
    made = pictures(make())
    assert made
    for one in made:
        root = tree(one)
        tags = {part.tag.removeprefix(SVG) for part in root.iter()}
        assert tags <= {"svg", "g", "path", "text", "title"}
        assert not any(key.startswith("on") or key in ("style", "href") for part in root.iter() for key in part.attrib)
        assert root.get("role") == "img"
        assert root.get("aria-label") == one.title
        assert one.words.endswith(".")
        assert "{" not in one.words
        assert "nan" not in one.svg.lower()
        assert not re.search(r"[\u202a-\u202e\u2066-\u2069]", one.svg + one.words)
        assert max(map(len, re.findall(r">([^<]*)</text>", one.svg)), default=0) < 120


def test_type_is_legible_on_a_narrow_screen() -> None:
    css = (files("adjust.record") / "page" / "pictures.css").read_text(encoding="utf-8")
    sizes = [float(size) for size in re.findall(r"font(?:-size)?:\s*(?:\d+ )?([\d.]+)px", css)]
    assert sizes == [TYPE]
    assert TYPE * 344 / WIDTH > 9.5, "pixels, on a screen of 360 with margins of 8"


def test_same_bytes_twice(traverse: dict[str, Any]) -> None:
    assert pictures(traverse) == pictures(copy.deepcopy(traverse))
    other = copy.deepcopy(traverse)
    other["closures"][0]["misclosure"]["linear"] *= 1.2
    assert pictures(other) != pictures(traverse)


def test_titles_come_from_the_catalogue() -> None:
    made = pictures(plane_record(), {"pictures": {"order_title": "Der Reihe nach <&>"}})
    titles = {one.key: one.title for one in made}
    assert titles["order"] == "Der Reihe nach <&>"
    assert titles["residuals"] == catalogue()["pictures.residuals_title"]
    assert 'aria-label="Der Reihe nach &lt;&amp;&gt;"' in next(one.svg for one in made if one.key == "order")
