"""The traverse as booked: one sheet gives what the same readings give as separate tables."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust import read
from adjust.book.traverse import clockwise
from adjust.record.build import build
from adjust.record.csv_tables import observations_csv, stations_csv
from tests.book.jobs import HEAD, ends, job
from tests.helpers import close

NETWORKS = Path(__file__).parents[2] / "networks"
SHEET = """at,back,fore,angle,turn,bearing,distance,back_distance,sd_angle,id,note
A,D,B,90 00 04,right,N 0 00 00 E,100.003,,,,start
B,A,C,270 00 02,left,,100.001,100.002,,,
C,B,D,90 00 03,deflection-left,,99.998,,4,corner,
D,C,A,90 00 01,deflection-left,,100.004,,,,
"""
CONTROL = "station,east,north\nA,1000,2000\n"
SEPARATE = {
    "angles": "at,first,second,angle,sd\nA,D,B,90 00 04,\nB,A,C,89 59 58,\nC,B,D,89 59 57,4\nD,C,A,89 59 59,\n",
    "distances": "from,to,distance\nA,B,100.003\nB,C,100.001\nC,D,99.998\nD,A,100.004\nB,A,100.002\n",
    "azimuths": "from,to,bearing,role\nA,B,N 0 00 00 E,held\n",
}


def outputs(folder: Path) -> tuple[dict[str, object], str]:
    """The record and the text of stations.csv."""
    record = build(adjust.assess(adjust.solve(read(folder))))
    return record, stations_csv(record)


def test_the_sheet_gives_the_bytes_of_the_separate_tables(tmp_path: Path) -> None:
    job(tmp_path / "sheet", traverse=SHEET, control=CONTROL)
    job(tmp_path / "separate", control=CONTROL, **SEPARATE)
    (one, text), (other, same) = outputs(tmp_path / "sheet"), outputs(tmp_path / "separate")
    assert text == same
    assert text.count("\r\n") == 6
    assert {**one["solution"]} == {**other["solution"]}  # type: ignore[dict-item]  # sections are dictionaries
    job(
        tmp_path / "changed",
        control=CONTROL,
        **{**SEPARATE, "distances": SEPARATE["distances"].replace("99.998", "99.999")},
    )
    assert outputs(tmp_path / "changed")[1] != text


@pytest.mark.parametrize("demo", ["loop-traverse-feet", "link-traverse"])
def test_the_demos_give_the_bytes_of_separate_tables(demo: str, tmp_path: Path) -> None:
    """The same sheet typed apart: the angles brought to clockwise by hand, here by exact seconds of arc."""
    source = NETWORKS / demo
    lines = [line for line in (source / "traverse.csv").read_text("utf-8").splitlines() if not line.startswith("#")]
    header, *rows = [line.split(",") for line in lines]
    tables = {
        "angles": ["at,first,second,angle"],
        "distances": ["from,to,distance"],
        "azimuths": ["from,to,bearing,role"],
    }
    behind = []
    for row in rows:
        cell = dict(zip(header, row, strict=True))
        d, m, s = cell["angle"].split()
        tenths = (int(d) * 60 + int(m)) * 600 + round(float(s) * 10)
        turned = {"right": tenths, "left": -tenths, "deflection-right": 6480000 + tenths}[
            cell.get("turn", "right")
        ] % 12960000
        angle = f"{turned // 36000} {turned // 600 % 60:02d} {turned % 600 / 10:04.1f}"
        tables["angles"].append(f"{cell['at']},{cell['back']},{cell['fore']},{angle}")
        if cell["distance"]:
            tables["distances"].append(f"{cell['at']},{cell['fore']},{cell['distance']}")
        if cell["back_distance"]:
            behind.append(f"{cell['at']},{cell['back']},{cell['back_distance']}")
        if cell.get("bearing"):
            tables["azimuths"].append(f"{cell['at']},{cell['fore']},{cell['bearing']},held")
    tables["distances"] += behind
    toml = (source / "job.toml").read_text("utf-8").partition("[[book]]")[0]
    texts = {name: "\n".join(text) + "\n" for name, text in tables.items() if len(text) > 1}
    job(tmp_path / "apart", toml, control=(source / "control.csv").read_bytes(), **texts)
    assert outputs(tmp_path / "apart")[1] == outputs(source)[1]


def test_every_reading_keeps_its_line_its_text_and_a_name_of_its_own(tmp_path: Path) -> None:
    found = job(tmp_path, traverse=SHEET, control=CONTROL)
    assert [(block.kind, block.line.tolist()) for block in found.network.blocks] == [
        ("angle", [2, 3, 4, 5]), ("distance", [2, 3, 4, 5]), ("distance", [3]), ("azimuth", [2]),
    ]  # fmt: skip
    assert [block.name(0) for block in found.network.blocks] == [
        "traverse.csv:2 angle", "traverse.csv:2 distance", "traverse.csv:3 back distance", "traverse.csv:2 bearing",
    ]  # fmt: skip
    assert found.network.blocks[0].name(2) == "corner angle"
    record = build(adjust.assess(adjust.solve(found)))
    by_id = {one["id"]: one for one in record["observations"]}
    assert len(by_id) == 10
    assert by_id["traverse.csv:3 angle"]["booked"] == "270 00 02"
    close(np.degrees(by_id["traverse.csv:3 angle"]["observed"]), 89 + 59 / 60 + 58 / 3600, atol=1e-9)
    assert by_id["traverse.csv:3 back distance"]["booked"] == "100.002"
    assert by_id["traverse.csv:2 bearing"]["booked"] == "N 0 00 00 E"
    assert by_id["traverse.csv:2 bearing"]["group"] == "held"
    assert "N 0 00 00 E" in observations_csv(record)


def test_ways_to_turn_an_angle() -> None:
    """Back is south, fore is east of the station: 270 to the right, 90 to the left, a deflection of 90 to the right."""
    booked = np.radians([270.0, 90.0, 90.0, 270.0])
    turns = ["right", "left", "deflection-right", "deflection-left"]
    close(np.degrees(clockwise(booked, turns)), [270.0, 270.0, 270.0, 270.0], atol=1e-12)
    close(np.degrees(clockwise(np.radians([0.0, 359.0]), ["left", "left"])), [0.0, 1.0], atol=1e-12)


def test_the_ends_of_an_open_traverse_have_blank_cells(tmp_path: Path) -> None:
    sheet = "at,back,fore,angle,bearing,distance\nA,,B,,90 00 00,50\nB,A,C,180 00 00,,60\nC,B,,,,\n"
    found = job(tmp_path, traverse=sheet, control="station,east,north\nA,0,0\n")
    assert ends(found) == [("B", "A", "C"), ("A", "B"), ("B", "C"), ("A", "B")]
    solution = adjust.solve(found)
    close(solution.positions[solution.names.index("C"), :2], [110.0, 0.0], atol=1e-9)


def test_without_a_foresight_the_bearing_is_that_of_the_line_back(tmp_path: Path) -> None:
    sheet = "at,back,fore,angle,bearing,distance,back_distance\nB,A,,,S 90 00 00 W,,50\n"
    found = job(tmp_path, traverse=sheet, control="station,east,north\nA,0,0\n")
    assert ends(found) == [("B", "A"), ("B", "A")]
    solution = adjust.solve(found)
    close(solution.positions[solution.names.index("B"), :2], [50.0, 0.0], atol=1e-9)


def test_lengths_of_a_traverse_lie_on_the_surface_of_its_block(tmp_path: Path) -> None:
    toml = HEAD + '[[book]]\nkind = "traverse"\nsurface = "ground"\n'
    found = job(tmp_path, toml, traverse=SHEET)
    assert [block.surface for block in found.network.blocks] == ["", "ground", "ground", ""]


def test_a_row_left_out_or_planned_takes_all_its_readings_along(tmp_path: Path) -> None:
    sheet = (
        SHEET.replace(",note\n", ",use,reason\n")
        .replace(",start\n", ",,\n")
        .replace(",4,corner,\n", ",4,corner,no,wind\n")
    )
    sheet = (
        "\n".join(row if row.count(",") == 11 else row + "," for row in sheet.splitlines()) + "\nE,,F,,,,,,,,planned,\n"
    )
    found = job(tmp_path, traverse=sheet, control=CONTROL)
    assert [(a.observation, a.kind, a.reason) for a in found.left_out] == [("corner", "traverse", "wind")]
    assert [a.observation for a in found.planned] == ["traverse.csv:6"]
    assert [len(block) for block in found.network.blocks] == [3, 3, 1, 1]
