"""Names, which tables are read and in which order, what takes no part, and what is known of the marks."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest

from adjust import read
from adjust.book.names import alike_key, near_duplicates
from adjust.book.schema import table_names
from adjust.cli import main
from adjust.kinds import TABLES
from adjust.network import CHECK, HELD, NEW, WEIGHTED
from tests.book.jobs import HEAD, PLAIN, ends, job
from tests.helpers import close

# ---- names


def test_booked_names_stand_for_stations_in_every_table(tmp_path: Path) -> None:
    found = job(
        tmp_path,
        booked_names="booked,station\nGATE PILLAR,G1\nold,M1\n",
        control="station,east,north\nold,10,20\n",
        distances="from,to,distance\nM1,GATE PILLAR,100\nG1,B,50\n",
        angles="at,first,second,angle\nGATE PILLAR,M1,B,10 00 00\n",
        pairs="from,to\nGATE PILLAR,old\n",
    )
    assert found.network.stations.names == ("M1", "G1", "B")
    assert ends(found) == [("M1", "G1"), ("G1", "B"), ("G1", "M1", "B")]
    assert found.network.pairs.tolist() == [[1, 0]]
    close(found.network.stations.known[0, :2], [10, 20], atol=1e-12)


def test_names_are_any_text_and_are_compared_exactly(tmp_path: Path) -> None:
    names = ["Punkt 7/ä", "P 7", "日本", "a,b", 'the "old" mark', "O'Hara", "p 7"]
    rows = "".join('"{}",Z,{}\n'.format(name.replace('"', '""'), 10 + i) for i, name in enumerate(names))
    found = job(tmp_path, distances="from,to,distance\n" + rows)
    assert [name for name in found.network.stations.names if name != "Z"] == names


@pytest.mark.parametrize(
    ("first", "second", "same"),
    [
        ("TP1", "TP01", True), ("O1", "01", True), ("l5", "15", True), ("P7", "p7", True), ("P 7", "P7", True),
        ("P-7", "P7", True), ("TP10", "TP1", False), ("TP1", "TP2", False), ("A1", "B1", False), ("P100", "P1", False),
    ],
)  # fmt: skip
def test_names_that_look_alike(first: str, second: str, same: bool) -> None:
    assert (alike_key(first) == alike_key(second)) is same
    assert near_duplicates([first, "Z9", second]) == ([(first, second)] if same else [])


def test_near_duplicates_are_warned_about_and_kept_apart(tmp_path: Path) -> None:
    tables = {"distances": "from,to,distance\nTP1,A,10\nTP01,A,20\n", "control": "station,east,north\nA,0,0\n"}
    found = job(tmp_path / "warned", **tables)
    assert found.warnings == ("TP1 and TP01 look alike: one station under two names? booked_names.csv can join them.",)
    assert len(found.network.stations) == 3
    assert job(tmp_path / "joined", **tables, booked_names="booked,station\nTP01,TP1\n").warnings == ()


def test_the_warning_is_shown_by_the_command(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    job(tmp_path, control="station,height\nM1,10\n", levelled="from,to,rise,length\nM1,TP1,1,100\nM1,TP01,1,100\n")
    assert main(["check", str(tmp_path)]) == 0
    assert "TP1 and TP01 look alike" in capsys.readouterr().out


# ---- which tables are read, and in which order


SAMPLES = {
    "control": "station,east,north,height\nA,0,0,0\n",
    "stations": "station,east,north\nB,1,1\n",
    "distances": "from,to,distance\nA,B,10\n",
    "angles": "at,first,second,angle\nA,B,C,10 00 00\n",
    "directions": "at,to,direction,set\nA,B,10 00 00,1\n",
    "azimuths": "from,to,azimuth\nA,B,10 00 00\n",
    "levelled": "from,to,rise,length\nA,B,1,100\n",
    "zenith_angles": "from,to,zenith_angle,instrument_height,target_height\nA,B,84 00 00,1.5,1.6\n",
    "traverse": "at,back,fore,angle,turn,bearing,distance,back_distance\nA,B,C,10 00 00,left,N 1 00 00 E,10,5\n",
    "rounds": (
        "at,to,set,face,horizontal_circle,zenith_circle\nA,B,1,1,10 00 00,84 00 00\nA,C,1,1,20 00 00,84 00 00\n"
        "A,C,1,2,200 00 00,276 00 00\nA,B,1,2,190 00 00,276 00 00\n"
    ),
    "staff": (  # of another level than the one tested, so that nothing needs to be declared
        "line,station,back,fore,fore_length,sd,instrument\nL1,A,1.5,,,,level-2\nL1,B,,1.2,31,0.001,level-2\n"
    ),
    "peg_test": "level,near_a,near_b,far_a,far_b,length\nlevel-1,1.5,1.4,1.704,1.6,60\n",
    "booked_names": "booked,station\nX,A\n",
    "pairs": "from,to\nA,B\n",
}
"""A table of every kind that exists."""


def test_there_is_a_sample_of_every_kind() -> None:
    assert set(SAMPLES) == set(table_names())


def test_without_a_book_block_every_table_named_by_its_kind_is_read(tmp_path: Path) -> None:
    (tmp_path / "notes.csv").write_text("anything\n")
    (tmp_path / "Distances 2.csv").write_text("anything\n")
    found = job(tmp_path, **SAMPLES)
    assert [table.file for table in found.tables] == [f"{kind}.csv" for kind in table_names()]
    assert {block.kind for block in found.network.blocks} == {kind.name for kind in TABLES.values()}
    assert found.network.pairs.tolist() == [[0, 1]]
    assert found.warnings == ()


def test_the_order_of_observations_is_that_of_the_book_blocks_and_then_of_rows(tmp_path: Path) -> None:
    toml = (
        HEAD
        + """
[[book]]
kind = "levelled"
[[book]]
file = "tuesday.csv"
kind = "distances"
[[book]]
kind = "control"
[[book]]
file = "distances.csv"
"""
    )
    (tmp_path / "tuesday.csv").write_text("from,to,distance\nB,C,20\nA,B,10\n")
    found = job(
        tmp_path, toml, **{**SAMPLES, "control": "station,height,sd_height,role\nA,0,0.001,weighted\n"}
    )  # fmt: skip
    assert [(block.kind, block.file) for block in found.network.blocks] == [
        ("levelled", "levelled.csv"),
        ("distance", "tuesday.csv"),
        ("control", "control.csv"),
        ("distance", "distances.csv"),
    ]
    assert ends(found)[1:3] == [("B", "C"), ("A", "B")]


def test_a_table_that_no_block_names_is_warned_about(tmp_path: Path) -> None:
    found = job(tmp_path, HEAD + '[[book]]\nkind = "distances"\n', **SAMPLES)
    unread = [warning for warning in found.warnings if "was not read" in warning]
    assert len(unread) == len(SAMPLES) - 1
    assert "levelled.csv lies in the folder, but no [[book]] block names it: it was not read." in unread


def test_a_table_in_a_folder_of_its_own(tmp_path: Path) -> None:
    (tmp_path / "book").mkdir()
    (tmp_path / "book" / "distances.csv").write_text("from,to,distance\nA,B,10\n")
    found = job(tmp_path, HEAD + '[[book]]\nfile = "book/distances.csv"\n')
    assert found.network.blocks[0].name(0) == "book/distances.csv:2"


def test_the_job_may_be_named_by_its_folder_or_its_file(tmp_path: Path) -> None:
    job(tmp_path, distances=PLAIN)
    assert read(tmp_path).inputs == read(str(tmp_path / "job.toml")).inputs


# ---- what takes no part, and what is known of the marks


def test_left_out_and_planned_rows_are_set_aside_with_their_reasons(tmp_path: Path) -> None:
    text = """from,to,distance,use,reason,id
A,B,100,,,
A,C,200,no,tripod knocked,
A,D,,planned,,next
A,E,300,yes,,
A,F,400,NO,wrong prism,bad
"""
    found = job(tmp_path, distances=text)
    (block,) = found.network.blocks
    assert block.line.tolist() == [2, 5]
    assert [(a.observation, a.line, a.kind, a.reason) for a in found.left_out] == [
        ("distances.csv:3", 3, "distance", "tripod knocked"),
        ("bad", 6, "distance", "wrong prism"),
    ]
    assert [(a.observation, a.line, a.kind) for a in found.planned] == [("next", 4, "distance")]


def test_set_aside_rows_stand_in_the_record(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    job(
        tmp_path,
        control="station,height\nM,10\nN,11\n",
        levelled="from,to,rise,length,use,reason\nM,P,1,100,,\nP,N,0,100,,\n"
        "M,P,7,100,no,staff misread\nM,N,,100,planned,\n",
    )
    assert main(["adjust", "--json", str(tmp_path)]) == 0
    record = json.loads(capsys.readouterr().out)
    assert [entry["observation"] for entry in record["left_out"]] == ["levelled.csv:4"]
    assert "staff misread" in record["left_out"][0].values()
    assert [entry["observation"] for entry in record["not_measured"]] == ["levelled.csv:5"]
    assert [entry["id"] for entry in record["observations"]] == ["levelled.csv:2", "levelled.csv:3"]


def test_control_wins_over_starting_values(tmp_path: Path) -> None:
    found = job(
        tmp_path,
        control="station,east,north,height\nA,100,200,\nB,,,30\n",
        stations="station,east,north,height\nA,1,2,3\nB,4,5,6\nC,7,8,9\n",
        distances="from,to,distance\nA,B,10\nB,C,10\n",
    )
    close(found.network.stations.start, [[100, 200, 3], [4, 5, 30], [7, 8, 9]], atol=1e-12)


def test_roles_of_control(tmp_path: Path) -> None:
    found = job(
        tmp_path,
        control="""station,east,north,height,sd_east,sd_north,sd_height,role,role_height
A,1,2,3,,,,,
B,1,2,3,0.001,0.002,0.003,weighted,
C,1,2,3,0.001,0.002,,weighted,held
D,1,2,,,,,check,
E,,,3,,,0.004,held,weighted
F,1,2,3,,,0.003,held,check
""",
        distances="from,to,distance\nA,B,10\n",
    )
    n, held, weighted, check = NEW, HELD, WEIGHTED, CHECK
    assert found.network.stations.role.tolist() == [
        [held, held, held],
        [weighted, weighted, weighted],
        [weighted, weighted, held],
        [check, check, n],
        [n, n, weighted],
        [held, held, check],
    ]
    block = found.network.blocks[0]
    assert block.kind == "control"
    assert block.line.tolist() == [3, 4, 6]
    nan = math.nan
    np.testing.assert_array_equal(block.sd, [[0.001, 0.002, 0.003], [0.001, 0.002, nan], [nan, nan, 0.004]])


def test_a_set_has_one_orientation_per_station_and_file(tmp_path: Path) -> None:
    (tmp_path / "second.csv").write_text("at,to,direction,set\nA,B,10 00 00,1\n")
    toml = HEAD + '[[book]]\nkind = "directions"\n[[book]]\nfile = "second.csv"\nkind = "directions"\n'
    text = "at,to,direction,set\nA,B,10 00 00,1\nA,C,20 00 00,1\nA,B,11 00 00,2\nB,A,12 00 00,1\nA,D,30 00 00,1\n"
    found = job(tmp_path, toml, directions=text)
    assert [block.group.tolist() for block in found.network.blocks] == [[0, 0, 1, 2, 0], [3]]
    assert [group.of for group in found.network.groups] == ["A set 1", "A set 2", "B set 1", "A set 1"]


def test_settings_are_read_with_their_defaults(tmp_path: Path) -> None:
    plain = job(tmp_path / "plain", distances=PLAIN).settings
    assert (plain.units.decimal, plain.units.axis_order, plain.units.bearings) == (".", "east, north", "azimuth")
    tests = plain.tests
    assert (tests.confidence, tests.significance, tests.outlier, tests.power) == (0.95, 0.05, 0.001, 0.8)
    assert tests.variance_factor == "given"
    toml = 'title = "T"\nclient = "C"\nsurveyed = 2026-05-14\n' + HEAD + "[tests]\npower = 0.9\n"
    given = job(tmp_path / "given", toml, distances=PLAIN).settings
    assert (given.title, given.client, given.surveyed, given.tests.power) == ("T", "C", "2026-05-14", 0.9)


def test_a_crlf_job_with_a_byte_order_mark(tmp_path: Path) -> None:
    job(tmp_path, distances=PLAIN)
    (tmp_path / "job.toml").write_bytes(b"\xef\xbb\xbf" + HEAD.replace("\n", "\r\n").encode())
    close(read(tmp_path).network.blocks[0].values[:, 0], [100.5, 200.25], atol=1e-12)


def test_nothing_in_the_folder_is_touched(tmp_path: Path) -> None:
    job(tmp_path, **SAMPLES)
    before = {path.name: (path.stat().st_mtime_ns, path.read_bytes()) for path in tmp_path.iterdir()}
    read(tmp_path)
    assert {path.name: (path.stat().st_mtime_ns, path.read_bytes()) for path in tmp_path.iterdir()} == before


ODD = [
    "", "0", "-1", "1e300", "1e-300", "9" * 50, "9" * 5000, "9" * 5000 + " 00 00", "0." + "9" * 5000, "nan", "١٢", "½",
    "N 10 E", "due N", "#", "M1", "\t", "a\u0301", "\u00a0", "=1+1", "0 00 60", "1 km", "5 us-ft", "no", "planned",
    "held", "weighted", "359 59 59.99999999999999999", "-0", "1_000", "0x10", "1.2.3", "e5", "°", "12°30", "-0 00 00",
    "1000000 00 00", "1 e", "1e", "1e400", "1e308 km", "\x1b[2J", "\u202e", "\ud7ff",
]  # fmt: skip


@pytest.mark.parametrize("kind", list(SAMPLES))
def test_nothing_in_a_cell_is_an_internal_error(kind: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Whatever stands in a cell is read, refused with a fault, or unsolvable in words: never exit code 70."""
    raw = kind in ("rounds", "staff", "peg_test")  # many columns; a small job beside them keeps the test short
    job(tmp_path, **({name: SAMPLES[name] for name in ("control", "levelled", kind)} if raw else SAMPLES))
    header, *before, row = SAMPLES[kind].splitlines()
    above = "".join(f"{one}\n" for one in before)
    columns = range(len(row.split(",")) + 1)
    codes = set()
    for k, odd in enumerate(ODD):
        for column in columns[k % 9 :: 9]:  # every text in every ninth column, or the tests would take minutes
            cells = [*row.split(","), ""]
            cells[column] = f'"{odd}"'
            more = "" if "sd" in header else ",sd" if kind in TABLES else ",note"
            (tmp_path / f"{kind}.csv").write_text(f"{header}{more}\n{above}{','.join(cells)}\n", "utf-8")
            code = main(["check", str(tmp_path)])
            err = capsys.readouterr().err
            assert code in (0, 1, 2), f"{odd[:40]!r} in column {column} of {kind}: {err}"
            assert (code == 2) is bool(err)
            assert not any(c < " " for c in err.replace("\n", "")), "a control character reaches the terminal"
            codes.add(code)
    assert 2 in codes
