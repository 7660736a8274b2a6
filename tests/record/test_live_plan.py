"""The live plan read back from its markup: everything of the record once, nothing of a name as markup."""

from __future__ import annotations

import copy
import math
import os
import re
import subprocess
import sys
import xml.etree.ElementTree as ET
from collections import Counter
from importlib.resources import files
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from adjust.record.live_labels import MOST, text_width
from adjust.record.live_plan import plan_svg
from adjust.record.live_scene import WIDTH, scene_of
from adjust.record.live_texts import Texts, catalogue, number
from adjust.record.net import line_looks
from tests.helpers import close
from tests.record.samples import HOSTILE, bare_record, grid_record, hostile_record, level_record, plane_record, station

SVG = "{http://www.w3.org/2000/svg}"
BEYOND = (
    '"><img src=x onerror=alert(1)>',
    "</title></svg><script>alert(1)</script>",
    "]]><!--",
    "&lt;b&gt;",
    "\u202eesrever\u2066",
    "👷🏽‍♀️ site",
    "N" * 10_000,
    "=cmd|' /C calc'!A0",
    "{name}",
    "\x00\x07\x1b[31m",
)


def tree(record: dict[str, Any], texts: dict[str, Any] | None = None) -> ET.Element:
    """The plan and its legend as one element; that it is well formed at all is half of the matter."""
    return ET.fromstring(f'<figure xmlns="http://www.w3.org/2000/svg">{plan_svg(record, texts or {})}</figure>')


def place(one: ET.Element) -> tuple[float, float]:
    found = re.search(r"translate\(([-\d.]+) ([-\d.]+)\)", one.get("transform", ""))
    assert found
    return float(found[1]), float(found[2])


def stations(root: ET.Element) -> dict[int, ET.Element]:
    made = [one for one in root.iter() if "station" in one.get("class", "").split() and one.get("data-station")]
    assert len({one.get("data-station") for one in made}) == len(made), "a station is drawn twice"
    return {int(one.get("data-station", "")): one for one in made}


def lines(root: ET.Element) -> Counter[str]:
    return Counter(
        one.get("data-ends", "")
        for one in root.iter(f"{SVG}path")
        if one.get("class") == "line" and one.get("data-ends")
    )


def wanted_lines(record: dict[str, Any]) -> Counter[str]:
    index = {one["station"]: i for i, one in enumerate(record["stations"])}
    return Counter("{}-{}".format(*sorted(index[name] for name in line)) for line in line_looks(record["observations"]))


@pytest.mark.parametrize("make", [plane_record, bare_record, lambda: grid_record(9), level_record])
def test_every_station_and_line_is_drawn_once(make: Any) -> None:
    record = make()
    root = tree(record)
    assert set(stations(root)) == set(range(len(record["stations"])))
    assert lines(root) == wanted_lines(record)


def test_a_line_that_is_missing_would_be_noticed() -> None:
    record = plane_record()
    fewer = copy.deepcopy(record)
    del fewer["observations"][0]  # M1 - P1 by distance: its direction still draws it
    assert lines(tree(fewer)) == wanted_lines(record)
    fewer["observations"] = [
        one for one in fewer["observations"] if {one["from"], one["to"], one["at"]} - {None} != {"M1", "P1"}
    ]
    assert lines(tree(fewer)) != wanted_lines(record)


def test_the_plan_is_to_scale_and_north_is_up() -> None:
    record = plane_record()
    root = tree(record)
    plan = root.find(f"{SVG}svg")
    assert plan is not None
    metres = float(plan.get("data-metres", ""))
    found = stations(root)
    first, origin = record["stations"][0], place(found[0])
    for i, one in enumerate(record["stations"]):
        x, y = place(found[i])
        close(
            [(x - origin[0]) * metres, -(y - origin[1]) * metres],
            [one["east"] - first["east"], one["north"] - first["north"]],
            atol=0.02 * metres,
        )
    width, height = (float(v) for v in plan.get("viewBox", "").split()[2:])
    assert all(0 < x < width and 0 < y < height for x, y in map(place, found.values()))
    bar = next(one for one in root.iter() if one.get("id") == "plan-scale")
    shown = float(re.match(r"[\d.]+", "".join(bar.itertext()))[0])  # type: ignore[index]
    end = float(re.search(r"H([\d.]+)", bar.find(f"{SVG}path").get("d", ""))[1])  # type: ignore[union-attr,index]
    close(end * metres, shown, atol=0.01 * shown)


def test_ellipses_have_the_axes_of_the_record_at_the_stated_size() -> None:
    record = plane_record()
    root = tree(record)
    plan = root.find(f"{SVG}svg")
    assert plan is not None
    k = float(plan.get("data-magnification", "")) / float(plan.get("data-metres", ""))
    drawn = [one for one in root.iter(f"{SVG}ellipse") if one.get("class") == "ellipse" and one.get("rx") != "15"]
    wanted = sorted(
        (one["ellipse_confidence"] for one in record["stations"] if one["ellipse_confidence"]["semi_major"]),
        key=lambda e: -e["semi_major"],
    )
    assert len(drawn) == len(wanted) == 7
    close([float(one.get("rx", "")) for one in drawn], [e["semi_major"] * k for e in wanted], atol=0.006)
    close([float(one.get("ry", "")) for one in drawn], [e["semi_minor"] * k for e in wanted], atol=0.006)
    around = {child: parent for parent in root.iter() for child in parent}
    turns = [
        math.radians(float(re.search(r"rotate\(([-\d.]+)\)", around[one].get("transform", ""))[1])) for one in drawn
    ]  # type: ignore[index]
    close(
        [
            abs(math.cos(t) * math.sin(e["azimuth"]) - math.sin(t) * math.cos(e["azimuth"]))
            for t, e in zip(turns, wanted, strict=True)
        ],
        np.ones(7),
        atol=1e-5,
    )  # x to the right is east, y down is south: long axes coincide
    words = next("".join(one.itertext()) for one in root.iter() if one.get("id") == "plan-ellipse-words")
    assert f"95 %, drawn {float(plan.get('data-magnification', '')):g} times" in words


def test_symbols_marks_and_layers_say_what_the_record_says() -> None:
    record = plane_record()
    record["closures"] = [
        {"kind": "triangle", "stations": ["P1", "C9", "P4", "P1"], "verdict": "not met"},
        {"kind": "triangle", "stations": ["P2", "C9", "P3", "P2"], "verdict": "met"},
        {"kind": "link traverse", "stations": ["M1", "P1", "P2"], "verdict": "cannot be tested"},
    ]
    root = tree(record)
    symbol = {i: one.find(f"{SVG}use").get("href") for i, one in stations(root).items()}  # type: ignore[union-attr]
    names = [one["station"] for one in record["stations"]]
    assert symbol[names.index("M1")] == "#p-held"
    assert symbol[names.index("M2")] == "#p-weighted"
    assert symbol[names.index("C9")] == "#p-check"
    assert symbol[names.index("P1")] == "#p-new"
    assert symbol[names.index("P7")] == "#p-unchecked"
    layers = {one.get("data-layer"): one for one in root.iter() if one.get("data-layer")}
    assert {"control", "stations", "unchecked", "suspects", "left-out", "closures", "ellipses", "names"} <= set(layers)
    blamed = [one.get("data-observation") for one in layers["suspects"]]
    ids = [one["id"] for one in record["observations"]]
    assert [ids[int(i or 0)] for i in blamed] == [one["observation"] for one in record["suspects"]]
    marks = [one.get("class", "").split()[-1] for one in layers["closures"] if one.get("data-closure")]
    assert marks == ["not-met", "met", "untested"]
    assert len(layers["left-out"]) == 1
    record["suspects"], record["left_out"], record["closures"], record["unchecked"] = [], [], [], []
    bare = {one.get("data-layer") for one in tree(record).iter()}
    assert not bare & {"suspects", "left-out", "closures", "unchecked"}, "a layer without anything in it"


def hostile(names: tuple[str, ...]) -> dict[str, Any]:
    made = plane_record()
    new = dict(zip([one["station"] for one in made["stations"]], names, strict=False))
    for one in made["stations"]:
        one["station"] = new.get(one["station"], one["station"])
    for one in made["observations"]:
        for key in ("at", "from", "to", "first", "second"):
            one[key] = new.get(one[key], one[key])
    made["left_out"][0]["stations"] = [new.get(name, name) for name in made["left_out"][0]["stations"]]
    made["unchecked"][0]["why"] = names[1] + " is held by one distance only"
    return made


@pytest.mark.parametrize("names", [HOSTILE, BEYOND[:8], BEYOND[2:]])
def test_names_never_become_markup(names: tuple[str, ...]) -> None:
    text = plan_svg(hostile(names), {})
    root = ET.fromstring(f'<figure xmlns="http://www.w3.org/2000/svg">{text.replace(chr(0), "")}</figure>')
    assert "\x00" not in text
    tags = {one.tag.removeprefix(SVG) for one in root.iter()}
    assert tags <= {
        "figure",
        "svg",
        "defs",
        "g",
        "path",
        "circle",
        "ellipse",
        "use",
        "text",
        "title",
        "ul",
        "li",
        "span",
    }
    assert not any(key.lower().startswith("on") or key == "style" for one in root.iter() for key in one.attrib)
    assert len(text) < 40_000, "a name of 10,000 characters is cut"
    plain = {one.tag for one in tree(plane_record()).iter()}
    assert {one.tag for one in root.iter()} == plain
    assert not re.search(r"[\u202a-\u202e\u2066-\u2069]", text), "a name may not turn the page's direction"


def test_texts_of_a_catalogue_are_escaped_too() -> None:
    texts = {"plan": {"held": "<b>held</b> & kept"}}
    root = tree(plane_record(), texts)
    assert "<b>held</b> & kept" in ["".join(one.itertext()) for one in root.iter(f"{SVG}span")]
    assert Texts({"plan.held": "one"})("plan.held") == Texts({"plan": {"held": "one"}})("plan.held") == "one"


def test_same_bytes_with_another_hash_seed() -> None:
    code = (
        "import sys; from tests.record.samples import plane_record, level_record; "
        "from adjust.record.live_plan import plan_svg; "
        "sys.stdout.buffer.write((plan_svg(plane_record(), {}) + plan_svg(level_record(), {})).encode())"
    )
    done = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        check=True,
        cwd=Path(__file__).parents[2],
        env=os.environ | {"PYTHONHASHSEED": "77"},
    )
    assert done.stdout.decode() == plan_svg(plane_record(), {}) + plan_svg(level_record(), {})
    assert plan_svg(plane_record(), {}) != plan_svg(hostile_record(), {})


def label_boxes(root: ET.Element) -> list[tuple[float, float, float, float]]:
    found = []
    for one in root.iter():
        if one.get("class") == "label":
            (x, y), text = place(one), one[0]
            left, base = x + float(text.get("x", "")), y + float(text.get("y", ""))
            found.append((left, base - 13, left + text_width(text.text or "", 15), base + 3))
    return found


@pytest.mark.parametrize("make", [plane_record, lambda: grid_record(6), lambda: grid_record(14), level_record])
def test_names_do_not_cover_each_other(make: Any) -> None:
    boxes = label_boxes(tree(make()))
    assert len(boxes) > 5
    over = [
        (a, b)
        for i, a in enumerate(boxes)
        for b in boxes[:i]
        if a[0] < b[2] and b[0] < a[2] and a[1] < b[3] and b[1] < a[3]
    ]
    assert not over
    assert any(a[0] < b[2] + 60 and b[0] < a[2] + 60 for a in boxes for b in boxes if a is not b), (
        "nothing near: no test"
    )


def test_a_large_network_has_fewer_names_and_stays_small() -> None:
    record = grid_record(46)
    text = plan_svg(record, {})
    names = text.count('class="label"')
    assert len(record["stations"]) > MOST
    assert 20 < names < 400
    assert text.count('data-station="') == len(record["stations"])
    assert len(text.encode()) / len(record["stations"]) < 400, "4 MB at 10,000 stations"
    assert f"Names without room at this size: {len(record['stations']) - names}" in text


def test_without_coordinates_there_is_no_plan() -> None:
    record = bare_record()
    record["stations"] = [station("A", None), station("B", None)]
    assert plan_svg(record, {}) == ""
    assert scene_of(record) is None


def test_heights_of_a_schematic_are_to_scale() -> None:
    record = level_record()
    scene = scene_of(record)
    assert scene is not None
    assert scene.per_height
    low = min(one["height"] for one in record["stations"])
    ground = max(y for _, y in scene.at.values())
    close(
        [(ground - scene.at[one["station"]][1]) / scene.per_height for one in record["stations"]],
        [one["height"] - low for one in record["stations"]],
        atol=1e-6,
    )
    assert all(0 < x < WIDTH for x, _ in scene.at.values())


def test_numbers_are_short() -> None:
    assert [number(v) for v in (1.0, -0.001, 12.345678, -3.5, 100.0, 0.0)] == ["1", "0", "12.35", "-3.5", "100", "0"]


def test_every_text_is_used_and_every_text_used_is_there() -> None:
    """Keys of the catalogue against those that code and scripts ask for."""
    root = files("adjust.record")
    code = "".join(
        one.read_text(encoding="utf-8")
        for folder in (root, root / "page")
        for one in folder.iterdir()
        if (one.name.startswith(("live_", "picture")) and one.name.endswith(".py")) or one.name.endswith(".js")
    )
    asked = set(re.findall(r'["`]((?:plan|tables|pictures)\.\w+)["`]', code))
    made = set(re.findall(r'["`]((?:plan|pictures)\.\w+_)[{$]', code)) | {"pictures.kind_", "plan.layer_"}
    known = {key for key in catalogue() if key.startswith(("plan.", "tables.", "pictures."))}
    known -= {"plan.title", "plan.words"}  # said above the plan, by the page
    assert asked - {"plan.js", "plan.css"} <= known
    roles = {
        "plan.held",
        "plan.weighted",
        "plan.check",
        "plan.new",
        "plan.unchecked",
        "plan.met",
        "plan.not_met",
        "plan.untested",
    }
    unused = {key for key in known - asked - roles if not key.startswith(tuple(made)) and not key.endswith("_title")}
    assert unused <= {key for key in known if re.match(r"plan\.(lines|schematic)_", key)}, unused
