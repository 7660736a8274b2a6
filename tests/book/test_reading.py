"""What a table says, read into arrays: notations, units, forms of a file, standard deviations."""

from __future__ import annotations

import hashlib
import math
from pathlib import Path

import numpy as np
import pytest

from tests.book.jobs import HEAD, PLAIN, ends, job, one
from tests.helpers import close

SEC = math.pi / 648000
US_FOOT = 1200 / 3937


# ---- notations and units


@pytest.mark.parametrize(
    ("notation", "text", "wanted"),
    [
        ("dms", "123 45 56.7", 445556.7 * SEC),
        ("dms", "123:45:56.7", 445556.7 * SEC),
        ("dms", "123-45-56.7", 445556.7 * SEC),
        ("dms", "123°45'56.7\"", 445556.7 * SEC),
        ("dms", '"123°45\'56.7"""', 445556.7 * SEC),
        ("dms", "137.5 gon", 137.5 * math.pi / 200),
        ("deg", "123.75", 123.75 * math.pi / 180),
        ("gon", "137.5", 137.5 * math.pi / 200),
        ("mil", "2200", 2200 * math.pi / 3200),
        ("packed", "123.45567", 445556.7 * SEC),
    ],
)
def test_angles_in_every_notation(notation: str, text: str, wanted: float, tmp_path: Path) -> None:
    toml = HEAD.replace('"dms"', f'"{notation}"')
    for kind, header in (("angles", "at,first,second,angle\nA,B,C,"), ("azimuths", "from,to,azimuth\nA,B,")):
        block = one(tmp_path / f"{kind}", toml, **{kind: header + text + "\n"})
        close(block.values, [[wanted]], atol=1e-14)


@pytest.mark.parametrize(("unit", "metres"), [("m", 1.0), ("ft", 0.3048), ("us-ft", US_FOOT)])
def test_lengths_in_every_unit(unit: str, metres: float, tmp_path: Path) -> None:
    toml = HEAD.replace('length = "m"', f'length = "{unit}"')
    found = job(
        tmp_path, toml,
        control="station,east,north,height\nA,100,200,10\n",
        distances="from,to,distance,sd\nA,B,100,0.02\nA,C,0.1 km,2 mm\n",
        levelled="from,to,rise,length,sd\nA,B,-2.5,100,0.01\n",
    )  # fmt: skip
    distances, levelled = found.network.blocks
    close(distances.values[:, 0], [100 * metres, 100.0], atol=1e-10)
    close(distances.sd[:, 0], [0.02 * metres, 0.002], atol=1e-12)
    close(levelled.values, [[-2.5 * metres]], atol=1e-12)
    close(levelled.sd, [[0.01 * metres]], atol=1e-12)
    close(found.network.stations.known[0], [100 * metres, 200 * metres, 10 * metres], atol=1e-10)


def test_a_length_of_line_is_in_the_unit_of_the_job_unless_the_cell_has_one(tmp_path: Path) -> None:
    toml = HEAD.replace('length = "m"', 'length = "ft"')
    block = one(tmp_path, toml, levelled="from,to,rise,length\nA,B,1,1000\nA,C,1,0.25 km\nA,D,1,1 mi\n")
    km = np.array([0.3048, 0.25, 1.609344])
    close(block.sd[:, 0], 0.0012 * np.sqrt(km), atol=1e-12)


def test_units_of_one_table(tmp_path: Path) -> None:
    toml = (
        HEAD
        + """
[[book]]
kind = "distances"
units = { length = "us-ft", decimal = "," }
[[book]]
kind = "angles"
units = { angle = "gon" }
[[book]]
kind = "directions"
[[book]]
kind = "levelled"
[book.units]
length = "ft"
"""
    )
    found = job(
        tmp_path, toml,
        distances="from;to;distance;sd\nA;B;1000,5;0,01\n",
        angles="at,first,second,angle,sd\nA,B,C,50.5,1\n",
        directions="at,to,direction,sd\nA,B,10 20 30,1\n",
        levelled="from,to,rise,sd\nA,B,10,0.01\n",
    )  # fmt: skip
    distance, angle, direction, levelled = found.network.blocks
    close(distance.values, [[1000.5 * US_FOOT]], atol=1e-10)
    close(distance.sd, [[0.01 * US_FOOT]], atol=1e-12)
    close(angle.values, [[50.5 * math.pi / 200]], atol=1e-14)
    close(angle.sd, [[1e-3 * math.pi / 200]], atol=1e-14)
    close(direction.values, [[37230 * SEC]], atol=1e-14)
    close(direction.sd, [[SEC]], atol=1e-14)
    close(levelled.values, [[3.048]], atol=1e-12)


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ("N 45 30 15 E", 163815),
        ("S45°30'15\"E", 648000 - 163815),
        ("S 45-30-15 W", 648000 + 163815),
        ("n 45:30:15 w", 1296000 - 163815),
        ("due E", 324000),
        ("due S", 648000),
    ],
)
def test_quadrant_bearings(text: str, wanted: float, tmp_path: Path) -> None:
    block = one(tmp_path, azimuths=f"from,to,bearing\nA,B,{text}\n")
    close(block.values, [[wanted * SEC]], atol=1e-13)


def test_azimuths_and_bearings_in_one_table_their_sets_and_roles(tmp_path: Path) -> None:
    text = """from,to,azimuth,bearing,set,role
A,B,90 00 00,,,held
A,C,,S 10 00 00 E,,
B,C,200 00 00,,needle,observed
B,A,,due N,needle,
C,A,1 00 00,,other,
"""
    found = job(tmp_path, azimuths=text)
    (block,) = found.network.blocks
    close(block.values[:, 0], np.array([90, 170, 200, 0, 1]) * math.pi / 180, atol=1e-14)
    assert block.held.tolist() == [True, False, False, False, False]
    assert block.group.tolist() == [-1, -1, 0, 0, 1]
    assert [group.set for group in found.network.groups] == ["needle", "other"]
    close(block.sd[:, 0], [0, *[5 * SEC] * 4], atol=1e-14)


# ---- the form of a table


@pytest.mark.parametrize(
    "text",
    [
        PLAIN,
        PLAIN.replace(",", ";"),
        PLAIN.replace(",", "\t"),
        PLAIN.replace("\n", "\r\n"),
        PLAIN.removesuffix("\n"),
        "\ufeff" + PLAIN,
        "\ufeff# comment\r\n\r\n" + PLAIN.replace("\n", "\r\n"),
        "# a, b; c\n" + PLAIN.replace("B,C", "  # between, rows\n\nB,C"),
        "note,distance,to,from\nx,100.5,B,A\ny,200.25,C,B\n",
        "distance , to,from\n100.5 , B,A\n200.25,C  , B\n",
        '"from","to","distance"\n"A","B","100.5"\n"B","C",200.25\n',
        "from,to,distance,,\nA,B,100.5,,\nB,C,200.25\n",
    ],
    ids=["plain", "semicolon", "tab", "crlf", "no end of line", "bom", "bom comment crlf", "comments", "other order",
         "spaces", "quoted", "blank columns at the end"],
)  # fmt: skip
def test_the_same_table_in_many_forms(text: str, tmp_path: Path) -> None:
    found = job(tmp_path, distances=text)
    close(found.network.blocks[0].values[:, 0], [100.5, 200.25], atol=1e-12)
    assert ends(found) == [("A", "B"), ("B", "C")]


def test_a_decimal_comma_with_semicolons(tmp_path: Path) -> None:
    toml = HEAD.replace("[instruments.station-1]", 'decimal = ","\n[instruments.station-1]')
    found = job(
        tmp_path, toml,
        distances="from;to;distance;sd\nA;B;100,5;0,002\n",
        angles="at;first;second;angle;sd\nA;B;C;10 20 30,5;1,5\n",
    )  # fmt: skip
    distances, angles = found.network.blocks
    close(distances.values, [[100.5]], atol=1e-12)
    close(distances.sd, [[0.002]], atol=1e-12)
    close(angles.values, [[37230.5 * SEC]], atol=1e-14)
    close(angles.sd, [[1.5 * SEC]], atol=1e-14)


def test_rows_are_named_by_file_and_physical_line(tmp_path: Path) -> None:
    head = "\ufeff# comment\r\n\r\nfrom,to,distance,note,id\r\nA,B,1,,\r\n# comment\r\n"
    text = head + 'A,C,2,"two\r\nlines",own\r\n\r\nA,D,3,,\r\n'
    block = one(tmp_path, distances=text)
    assert block.line.tolist() == [4, 6, 9]
    assert [block.name(i) for i in range(3)] == ["distances.csv:4", "own", "distances.csv:9"]


def test_the_booked_text_can_be_read_again(tmp_path: Path) -> None:
    found = job(
        tmp_path, distances="# c\nfrom,to,distance\nA,B, 100.50 \n", angles="at,first,second,angle\nA,B,C,1°2'3\"\n"
    )
    assert found.booked("distances.csv") == {3: ("100.50",)}
    assert found.booked("angles.csv") == {2: ("1°2'3\"",)}


def test_inputs_carry_their_hashes(tmp_path: Path) -> None:
    found = job(tmp_path, distances=PLAIN, pairs="from,to\nA,C\n")
    assert [file for file, _ in found.inputs] == ["job.toml", "distances.csv", "pairs.csv"]
    for file, digest in found.inputs:
        assert digest == hashlib.sha256((tmp_path / file).read_bytes()).hexdigest()


# ---- standard deviations


def test_the_sd_of_a_row_is_final(tmp_path: Path) -> None:
    """Neither the instrument's figure nor the count changes it."""
    block = one(tmp_path, distances="from,to,distance,sd,count\nA,B,500,0.004,\nA,C,500,0.004,4\nA,D,500,,\n")
    close(block.sd[:, 0], [0.004, 0.004, 0.002 + 3e-6 * 500], atol=1e-12)
    assert block.precision == ("sd", "sd", "station-1")


def test_a_text_is_a_linear_sum_and_a_list_the_root_of_squares(tmp_path: Path) -> None:
    rows = "from,to,distance\nA,B,1000\nA,C,2000\n"
    close(one(tmp_path / "sum", distances=rows).sd[:, 0], [0.002 + 0.003, 0.002 + 0.006], atol=1e-12)
    squares = HEAD.replace('"2 mm + 3 ppm"', '["2 mm", "3 ppm"]')
    close(
        one(tmp_path / "squares", squares, distances=rows).sd[:, 0],
        [math.hypot(0.002, 0.003), math.hypot(0.002, 0.006)],
        atol=1e-12,
    )


@pytest.mark.parametrize(
    ("model", "column", "values", "wanted_mm"),
    [
        ("1.2 mm*sqrt(km)", "length", ["250", "1000", "4 km"], [0.6, 1.2, 2.4]),
        ("2 mm*sqrt(mi)", "length", ["1609.344", "4 mi", "0.25 mi"], [2.0, 4.0, 1.0]),
        ("0.4 mm*sqrt(setup)", "setups", ["1", "4", "9"], [0.4, 0.8, 1.2]),
        ("0.5 mm + 1 mm*sqrt(km)", "length", ["250", "1000", "4000"], [1.0, 1.5, 2.5]),
        ("0.01 ft*sqrt(mi)", "length", ["1 mi", "4 mi", "0.25 mi"], [3.048, 6.096, 1.524]),
    ],
)
def test_levelling_by_root_length_and_root_setups(
    model: str, column: str, values: list[str], wanted_mm: list[float], tmp_path: Path
) -> None:
    toml = HEAD.replace("1.2 mm*sqrt(km)", model)
    rows = "".join(f"A,P{i},1.0,{value}\n" for i, value in enumerate(values))
    block = one(tmp_path, toml, levelled=f"from,to,rise,{column}\n{rows}")
    close(block.sd[:, 0] * 1000, wanted_mm, atol=1e-9)


def test_an_angle_has_two_pointings_and_a_count_divides_by_its_root(tmp_path: Path) -> None:
    found = job(
        tmp_path,
        angles="at,first,second,angle,count\nA,B,C,10 00 00,\nA,B,C,10 00 00,4\n",
        directions="at,to,direction,count\nA,B,10 00 00,\nA,C,20 00 00,9\n",
    )
    angles, directions = found.network.blocks
    close(angles.sd[:, 0], np.array([math.sqrt(2), math.sqrt(2) / 2]) * 2 * SEC, atol=1e-14)
    close(directions.sd[:, 0], np.array([1, 1 / 3]) * 2 * SEC, atol=1e-14)


def test_sd_factor_multiplies_every_standard_deviation_of_its_table(tmp_path: Path) -> None:
    toml = HEAD + '[[book]]\nkind = "distances"\nsd_factor = 1.5\n[[book]]\nkind = "angles"\n'
    found = job(
        tmp_path, toml,
        distances="from,to,distance,sd\nA,B,1000,\nA,C,1000,0.004\n",
        angles="at,first,second,angle,sd\nA,B,C,10 00 00,4\n",
    )  # fmt: skip
    distances, angles = found.network.blocks
    close(distances.sd[:, 0], [0.0075, 0.006], atol=1e-12)
    close(angles.sd[:, 0], [4 * SEC], atol=1e-14)


def test_the_instrument_of_the_row_wins_over_that_of_the_table(tmp_path: Path) -> None:
    toml = HEAD + '[instruments.tape]\ndistance = "5 mm"\n[[book]]\nkind = "distances"\ninstrument = "station-1"\n'
    block = one(tmp_path, toml, distances="from,to,distance,instrument\nA,B,1000,\nA,C,1000,tape\n")
    close(block.sd[:, 0], [0.005, 0.005], atol=1e-12)
    assert block.precision == ("station-1", "tape")


def test_an_instrument_may_be_left_out_where_only_one_fits(tmp_path: Path) -> None:
    found = job(tmp_path, distances=PLAIN, levelled="from,to,rise,length\nA,B,1,1000\n")
    assert [block.precision[0] for block in found.network.blocks] == ["station-1", "level-1"]
