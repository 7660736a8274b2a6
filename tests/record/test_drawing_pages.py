"""Papers, layers, insets, large networks and the further pages of the pdf."""

from __future__ import annotations

import copy
import math
import re
import zlib
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy import integrate

import adjust
from adjust.caution import CAUTION
from adjust.record.build import build
from adjust.record.charts import law_of, order_pages
from adjust.record.drawing import compose, drawing_pdf, pages
from adjust.record.lasting import between_marks
from adjust.record.paper import PAPERS, drawing_warnings, layout_of, lying, screen, standing
from adjust.record.plan_data import HUGE, MOST_ELLIPSES
from adjust.record.sheet import Sheet, drawable, spelled
from tests.helpers import close
from tests.record.samples import bare_record, grid_record, level_record, observation, plane_record, record, station
from tests.record.svg import Svg, label_boxes, overlaps

DEMOS = sorted(p.parent for p in (Path(__file__).parents[2] / "networks").glob("*/job.toml"))


def words(sheet: Sheet) -> str:
    """All text of a sheet in order, lines joined."""
    return " ".join(artist.get_text() for artist in sheet.axes.texts)


def asked(made: dict[str, Any], **wishes: Any) -> dict[str, Any]:
    made["settings"]["drawing"].update(wishes)
    return made


def distances(file: str, places: dict[str, tuple[float, float]], sides: list[tuple[str, str]]) -> list[dict[str, Any]]:
    return [observation(file, i + 2, "distance", math.dist(places[a], places[b]), 0.001, 0.002, from_=a, to=b)
            for i, (a, b) in enumerate(sides)]  # fmt: skip


def crowded_record() -> dict[str, Any]:
    """Four stations far apart and seven within 40 m of each other."""
    places = {"M1": (1000.0, 2000.0), "M2": (1600.0, 2100.0), "P1": (1200.0, 2300.0), "P2": (1450.0, 1850.0)}
    for i in range(7):
        r = 9.0 * (1 + i % 2)
        places[f"W{i}"] = (1300 + r * math.cos(0.9 * i), 2040 + r * math.sin(0.9 * i))
    stations = [station(name, at, role="held" if name[0] == "M" else "new",
                        sds_mm=None if name[0] == "M" else (1.2, 1.6, 0.3)) for name, at in places.items()]  # fmt: skip
    sides = [("M1", "P1"), ("P1", "M2"), ("M1", "P2"), ("P2", "M2"), ("P1", "W0"), ("P2", "W3"), ("M1", "W4"),
             *((f"W{i}", f"W{(i + 1) % 7}") for i in range(7))]  # fmt: skip
    rows = distances("distances.csv", places, sides)
    return record("Crowded", stations, rows, "plane")


@pytest.mark.parametrize("paper", sorted(PAPERS))
def test_papers_have_their_size_and_both_ways_round(paper: str) -> None:
    long, short = PAPERS[paper]
    for orientation, (width, height) in (("landscape", (long, short)), ("portrait", (short, long))):
        layout = layout_of(asked(plane_record(), paper=paper, orientation=orientation))
        assert (layout.name, layout.width, layout.height) == (paper, width, height)
        for box in (layout.frame, layout.caution, *layout.columns):
            assert 0 < box[0] < box[2] < width
            assert 0 < box[1] < box[3] < height


def test_a_page_of_letter_in_portrait_is_drawn_whole() -> None:
    svg = Svg(asked(plane_record(), paper="Letter", orientation="portrait"))
    close([float(svg.root.get(key, "").removesuffix("pt")) for key in ("width", "height")], [612.0, 792.0], atol=0.05)
    assert "on Letter" in svg.page
    assert CAUTION in svg.page
    assert "north" in svg.groups


def test_the_paper_turns_as_the_network_does() -> None:
    made = plane_record()
    assert layout_of(made).name == "A4"
    assert not layout_of(made).upright
    for one in made["stations"]:
        one["east"], one["north"] = one["north"], 4 * one["east"]
    assert layout_of(made).upright
    made["units"]["length"] = "ft"
    assert layout_of(made).name == "Letter"


def test_the_scale_asked_for_is_taken_or_refused_in_words() -> None:
    assert Svg(asked(plane_record(), scale=4000.0)).number(r"Scale 1:(\d+)") == 4000
    too_large = asked(plane_record(), scale=500.0)
    assert Svg(too_large).number(r"Scale 1:(\d+)") == 2500  # never clipped
    assert drawing_warnings(too_large) == [
        "drawing: at the scale asked for, 1:500, the stations need 825 x 599 mm and A4 has 200 x 178 mm for them; "
        "drawn at 1:2500. Ask for a larger paper or a smaller scale."
    ]
    assert drawing_warnings(asked(plane_record(), scale=4000.0)) == []


def test_the_enlargement_asked_for_is_taken_or_refused_in_words() -> None:
    assert Svg(asked(plane_record(), ellipses=3000.0)).number(r"Ellipses \(95 %\) drawn (\d+) times") == 3000
    svg = Svg(asked(plane_record(), ellipses=90000.0))
    assert svg.number(r"Ellipses \(95 %\) drawn (\d+) times") == 5000
    assert "Ellipses 90000 times larger would leave the frame: drawn smaller." in svg.page


@pytest.mark.parametrize(
    ("layer", "prefixes"),
    [("grid", ("grid",)), ("lines", ("lines-",)), ("ellipses", ("ellipse-",)), ("names", ("label-",)),
     ("suspects", ("suspect-",)), ("left-out", ("left-out-",))],
)  # fmt: skip
def test_layers_can_be_left_away(layer: str, prefixes: tuple[str, ...]) -> None:
    made = plane_record()
    layers = made["settings"]["drawing"]["layers"]
    assert all(Svg(made).many(prefix) for prefix in prefixes)
    svg = Svg(asked(made, layers=[one for one in layers if one != layer]))
    assert not [gid for prefix in prefixes for gid in svg.many(prefix)]


def test_a_crowd_is_enlarged_in_an_inset() -> None:
    """Its frame on the plan is the inset's own size at the ratio of both scales, around the same middle."""
    made = crowded_record()
    svg = Svg(made)
    scale, inset = svg.number(r"Scale 1:(\d+)"), svg.number(r"inset at 1:(\d+)")
    assert inset < scale / 2
    close(np.ptp(svg.points("inset-place"), axis=0), np.ptp(svg.points("inset"), axis=0) * inset / scale, atol=0.01)
    close((svg.centre("station-W1") - svg.centre("inset")) * inset / scale,
          svg.centre("crowded-W1") - svg.centre("inset-place"), atol=0.01)  # fmt: skip
    assert {f"label-W{i}" for i in range(7)} <= svg.groups.keys()
    times = svg.number(r"drawn (\d+) times") * inset / scale
    assert f"inset {times:g} times" in svg.page
    plain = Svg(asked(made, layers=[one for one in made["settings"]["drawing"]["layers"] if one != "inset"]))
    assert "inset" not in plain.groups
    assert "inset" not in Svg(plane_record()).groups


def test_a_crowd_without_a_free_corner_gets_a_strip() -> None:
    made = crowded_record()
    corners = {"K1": (1000.0, 2300.0), "K2": (1600.0, 2300.0), "K3": (1600.0, 1850.0), "K4": (1000.0, 1850.0)}
    made["stations"] += [station(name, at, sds_mm=(1.2, 1.6, 0.3)) for name, at in corners.items()]
    made["observations"] += distances("more.csv", corners, [("K1", "K2"), ("K2", "K3"), ("K3", "K4"), ("K4", "K1")])
    svg = Svg(made)
    left, right = svg.points("inset").min(axis=0)[0], max(svg.centre(f"station-{n}")[0] for n in corners)
    assert right < left


def test_a_large_network_says_what_it_does_not_draw() -> None:
    side = math.isqrt(HUGE) + 1
    svg = Svg(grid_record(side))
    assert f"Drawn: the {MOST_ELLIPSES} largest of {side * side - 1} ellipses." in svg.page
    assert len(svg.many("ellipse-G")) == MOST_ELLIPSES
    assert "Named: control, suspects, unchecked, the ten least certain, and a sample" in svg.page
    marks = svg.groups["stations-new"]
    assert len(list(marks.iter("{http://www.w3.org/2000/svg}use"))) == side * side - 1
    assert 40 < len(svg.many("label-")) < 150


@pytest.fixture(scope="module", params=DEMOS, ids=lambda p: p.name)
def demo(request: pytest.FixtureRequest) -> dict[str, Any]:
    made: dict[str, Any] = build(adjust.assess(adjust.solve(adjust.read(request.param))))
    return made


def test_no_name_covers_another_in_the_demos(demo: dict[str, Any]) -> None:
    for layout in (layout_of(demo), screen(demo), standing("Letter")):
        sheet = compose(demo, layout)
        stations = between_marks(demo)["stations"]
        assert len(label_boxes(sheet)) == len([one for one in stations if one["east"] is not None] or stations)
        assert not overlaps(sheet, [])


def test_the_overlap_check_can_fail() -> None:
    sheet = Sheet()
    for i in range(2):
        sheet.text((50 + 3 * i, 50), "NAME", 9, gid=f"label-{i}")
    assert overlaps(sheet, []) == [(0, 1)]


def test_every_page_has_job_and_caution(demo: dict[str, Any]) -> None:
    for sheet in pages(demo):
        said = words(sheet)
        assert CAUTION in said
        for word in demo["job"]["title"].split():
            assert word in said


def page_texts(pdf: bytes) -> list[str]:
    """The text of each page of a pdf: the strings of its content stream that are shown."""
    found = []
    for stream in re.findall(rb"stream\r?\n(.*?)\r?\nendstream", pdf, re.DOTALL):
        try:
            content = zlib.decompress(stream).decode("latin-1")
        except zlib.error:
            continue
        if " Tf" in content:
            runs = re.findall(r"(\[.*?\] TJ|\((?:\\.|[^\\)])*\) Tj)", content, re.DOTALL)
            found.append(" ".join("".join(re.findall(r"\(((?:\\.|[^\\)])*)\)", run)) for run in runs))
    return found


def _bare(text: str) -> str:
    """Without spaces, and without ff, which newer releases of matplotlib set as one sign of another font."""
    return re.sub(r"ff|\x00|\s", "", text)


def test_the_pdf_has_all_pages_with_the_caution_on_each() -> None:
    made = plane_record()
    pdf = drawing_pdf(made)
    assert pdf.startswith(b"%PDF")
    assert len(re.findall(rb"/Type /Page\b", pdf)) == len(pages(made)) == 3
    texts = page_texts(pdf)
    assert len(texts) == 3
    for text in texts:
        assert _bare(CAUTION) in _bare(text)
    assert b"CreationDate" not in pdf
    assert b"ModDate" not in pdf
    assert drawing_pdf(made) == pdf


def test_a_job_with_heights_and_plane_has_a_page_of_each() -> None:
    made = plane_record()
    for one in made["stations"]:
        one.update(height=200.0 + one["east"] / 100, sd_height=0.002, role_height="new")
    sheets = pages(made)
    assert len(sheets) == 4
    assert "Height, m" in words(sheets[1])
    assert len(pages(level_record())) == 3
    assert len(pages(bare_record())) == 1  # nothing tested: no pages of residuals


@pytest.mark.parametrize("r", [None, 2, 3, 8, 40])
def test_the_law_of_the_statistics(r: int | None) -> None:
    """Density and quantiles agree by quadrature; without r the normal one, 0.3989 at zero and 1.960 (from memory)."""
    made = plane_record()
    if r is not None:
        made["settings"]["variance_factor"] = "from-residuals"
        made["solution"]["degrees_of_freedom"] = r
    law = law_of(made)
    assert law is not None
    reach = 8.0 if r is None else math.sqrt(r)
    for p in (0.6, 0.9, 0.975):
        q = float(law.quantile(np.array(p)))
        assert 0 < q < reach
        share = integrate.quad(lambda t: float(law.density(np.array(t))), 0, q)[0]
        close(share, p - 0.5, atol=1e-6)
    if r is None:
        close([float(law.density(np.array(0.0))), float(law.quantile(np.array(0.975)))], [0.3989, 1.960], atol=5e-4)


def test_no_law_where_one_reading_is_to_spare() -> None:
    made = plane_record()
    made["settings"]["variance_factor"] = "from-residuals"
    made["solution"]["degrees_of_freedom"] = 1
    assert law_of(made) is None


def test_the_residual_page_counts_every_statistic() -> None:
    made = plane_record()
    made["observations"][0]["statistic"] = None
    sheet = pages(made)[1]
    tested = [one["statistic"] for one in made["observations"] if one["statistic"] is not None]
    bars = [np.ptp(patch.get_path().vertices[:4, 1]) for patch in sheet.axes.patches
            if str(patch.get_gid()).startswith("bin-")]  # fmt: skip
    counts = np.histogram(np.clip(tested, -4.4, 4.4), np.arange(-4.5, 4.6, 0.5))[0]
    close(np.array(bars) / max(bars), counts / counts.max(), atol=1e-6)
    said = words(sheet)
    assert f"Grey: {len(tested)} readings. Line: standard normal law." in said
    assert "1 reading without a statistic not shown: nothing checks them." in said


def test_the_order_page_has_files_critical_lines_and_suspects() -> None:
    made = plane_record()
    made["observations"][0]["statistic"] = None
    sheet = pages(made)[2]
    gids = {str(artist.get_gid()) for artist in sheet.axes.get_children()}
    assert {"critical-0-1", "critical-0--1", "file-10", "file-25", "order-suspect-1", "order-suspect-2"} <= gids
    said = words(sheet)
    for word in ("distances.csv", "directions.csv", "angles.csv", "3.29", "-14.2", "distances.csv:4"):
        assert word in said
    dots = [line for line in sheet.axes.lines if str(line.get_gid()).startswith("order-0-")]
    shown = sum(len(np.asarray(line.get_xdata())) for line in dots)
    assert shown == len(made["observations"]) - 2  # one without a statistic, one beyond the chart as an arrow


def test_long_books_take_more_charts_and_never_more_than_four_pages() -> None:
    made = grid_record(14)
    assert 450 < len(made["observations"]) < 900
    assert len(order_pages(made, layout_of(made))) == 2
    made["observations"] *= 10
    sheets = order_pages(made, layout_of(made))
    assert len(sheets) == 4
    last = [line for sheet in sheets for line in sheet.axes.lines if str(line.get_gid()).startswith("order-")]
    assert sum(len(np.asarray(line.get_xdata())) for line in last) == len(made["observations"])


def test_names_that_the_font_lacks_stand_by_their_row() -> None:
    assert drawable("Tarnel Weir Ø é 12")
    assert not drawable("測点")
    assert not drawable("עברית")  # would be set backwards where no shaping is installed
    assert spelled("a測b") == "a?b"
    made = bare_record()
    made["stations"][1]["station"] = "測点"
    made["observations"][0]["to"] = "測点"
    page = Svg(made).page
    assert "[2]" in page
    assert "Names in signs that this font lacks stand by their row in stations.csv: [2] is row 2." in page
    made = copy.deepcopy(bare_record())
    made["job"]["client"] = "測点"
    page = Svg(made).page
    assert "For ??" in page
    assert "A question mark may stand for a sign that this font lacks; record.json has it." in page
    assert "question mark" not in Svg(bare_record()).page


def test_the_screen_sheet_has_type_to_read_at_360_pixels() -> None:
    """108 mm on 360 pixels: the smallest type, the 5.2 points of a badge, has figures of 4.4 pixels."""
    sheet = compose(plane_record(), screen(plane_record()))
    per_mm = 360 / sheet.size[0]
    sizes = [artist.get_fontsize() for artist in sheet.axes.texts]
    capitals = np.array(sizes) * 0.729 * 25.4 / 72 * per_mm  # 0.729: height of capitals of DejaVu Sans over its size
    assert capitals.min() > 4.4
    assert min(sizes) < 9
    assert lying("A4").width == 297
