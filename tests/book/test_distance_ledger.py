"""The ledger of distances: every correction one line, done here or declared as done; never guessed."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.atmosphere import Air, first_velocity, group_refractivity, refractivity
from adjust.book.job import Job
from adjust.errors import InputError
from tests.helpers import close

HEAD = '[units]\nlength = "m"\nangle = "deg"\n'
METER = """[instruments.s]
distance = "2 mm"
constant = "0.8 mm"
scale = 1.5
wavelength = "658 nm"
zero_weather = { temperature = "12 C", pressure = "1013.25 hPa", humidity = 60 }
"""
ROUND = '[reflectors.round]\nconstant = "-30 mm"\n'
BOOK = '[[book]]\nkind = "distances"\n'
ROWS = "from,to,distance,temperature,pressure,humidity\nA,B,800.000,25,950,50\nB,C,500.000,,,\n"


def job(folder: Path, toml: str, rows: str = ROWS) -> Path:
    (folder / "job.toml").write_text(HEAD + toml, "utf-8")
    (folder / "distances.csv").write_text(rows, "utf-8")
    return folder


def read(folder: Path, toml: str, rows: str = ROWS) -> Job:
    return adjust.read(job(folder, toml, rows))


def faults(folder: Path, toml: str, rows: str = ROWS) -> str:
    with pytest.raises(InputError) as stop:
        read(folder, toml, rows)
    return "\n".join(stop.value.sentences)


def test_every_correction_is_a_line_and_they_add_up(tmp_path: Path) -> None:
    weather = '[weather]\ntemperature = "68 F"\npressure = 960\n'
    got = read(tmp_path, METER + ROUND + weather + BOOK + "applied = []\n")
    lines = [line for line in got.ledger if line.observation == "distances.csv:2"]
    assert [line.name for line in lines] == [
        "reflector constant", "instrument constant", "calibrated scale", "atmosphere"
    ]  # fmt: skip
    assert {line.how for line in lines} == {"here"}
    d1 = 800.0 - 0.030 + 0.0008
    d2 = d1 * (1 + 1.5e-6)
    group = group_refractivity(0.658)
    zero = refractivity(group, Air(12.0, 1013.25, 60.0))
    wanted = d2 + first_velocity(d2, zero, refractivity(group, Air(25.0, 950.0, 50.0)))
    block = got.network.blocks[0]
    close(block.values[0, 0], wanted, atol=1e-9)
    close(sum(line.amount for line in lines), wanted - 800.0, atol=1e-9)
    close(sum(float(amount[0]) for _, amount in block.corrections), wanted - 800.0, atol=1e-9)
    assert lines[-1].source == "25 C, 950 hPa, 50 %"
    # the second row has the weather of the job, 68 F being 20 degrees C
    assert next(x.source for x in got.ledger if x.observation == "distances.csv:3" and x.name == "atmosphere") == (
        "20 C, 960 hPa")  # fmt: skip


def test_what_the_instrument_has_done_is_listed_and_not_done_again(tmp_path: Path) -> None:
    toml = METER + ROUND + BOOK + 'applied = ["reflector", "atmosphere", "constant", "scale"]\n'
    got = read(tmp_path, toml)
    close(got.network.blocks[0].values[:, 0], [800.0, 500.0], atol=1e-12)
    assert {(line.amount, line.how) for line in got.ledger} == {(0.0, "applied in the instrument")}
    assert len(got.ledger) == 8


def test_ppm_as_set_and_a_reflector_by_row(tmp_path: Path) -> None:
    toml = ROUND + '[reflectors.mini]\nconstant = "17.5 mm"\n' + BOOK + "applied = []\n"
    rows = "from,to,distance,sd,ppm,reflector\nA,B,1000,0.002,12,mini\nB,C,1000,0.002,-3 ppm,round\n"
    got = read(tmp_path, toml, rows)
    close(got.network.blocks[0].values[:, 0], [1000.0175 * (1 + 12e-6), 999.97 * (1 - 3e-6)], atol=1e-9)


def test_slope_to_level_is_the_last_line(tmp_path: Path) -> None:
    toml = ROUND + BOOK + 'applied = []\nsurface = "slope"\n'
    rows = "from,to,distance,sd,zenith_angle,instrument_height,target_height\nA,B,400,0.002,85,1.5,1.6\n"
    got = read(tmp_path, toml, rows)
    assert [line.name for line in got.ledger] == ["reflector constant", "slope to horizontal at the instrument"]
    close(sum(line.amount for line in got.ledger), float(got.network.blocks[0].values[0, 0]) - 400.0, atol=1e-9)
    assert abs(got.ledger[1].amount - 399.97 * (np.sin(np.deg2rad(85)) - 1)) < 0.005


def test_without_anything_declared_nothing_is_done(tmp_path: Path) -> None:
    got = read(tmp_path, '[instruments.s]\ndistance = "2 mm"\n', "from,to,distance\nA,B,800\n")
    assert got.ledger == ()
    close(got.network.blocks[0].values[0, 0], 800.0, atol=1e-12)


@pytest.mark.parametrize(
    ("toml", "words"),
    [
        (METER + BOOK, "distances.csv:1: column temperature"),
        (METER + BOOK, "which corrections has the instrument made already?"),
        (METER + BOOK + 'applied = ["weather"]\n', "an unknown word; known here: reflector, constant"),
        (METER + BOOK + 'applied = []\nreflector = "rund"\n' + ROUND, "did you mean round?"),
        (METER + BOOK + "applied = []\n" + ROUND + '[reflectors.mini]\nconstant = "2 mm"\n', "which reflector?"),
        (METER + ROUND.replace(" mm", "") + BOOK + "applied = []\n", 'in which unit? Write "-30 mm"'),
        (METER + ROUND.replace("-30 mm", "-30 m") + BOOK + "applied = []\n", "a metre or more"),
        (METER.replace("658 nm", "658") + BOOK + "applied = []\n", 'write it with its unit, as in "658 nm"'),
        (METER.replace("658 nm", "658 m") + BOOK + "applied = []\n", "no wavelength of light"),
        ('[instruments.s]\ndistance = "2 mm"\n' + BOOK + "applied = []\n", "the weather tells the correction only"),
        (METER + '[weather]\ntemperature = "90 C"\n' + BOOK + "applied = []\n", "outside -60 to 60"),
        (METER + '[weather]\nppm = 3\npressure = 950\n' + BOOK + "applied = []\n", "not both"),
        (METER.replace(", humidity", ", ppm") + BOOK + "applied = []\n", "needs temperature and pressure"),
        (METER + '[weather]\npressure = "29.5 Hg"\n' + BOOK + "applied = []\n", "no unit of pressure"),
        (METER + BOOK + "applied = []\nweather = { temp = 20 }\n", "temperature"),
        (METER + BOOK + "applied = []\nweather = 20\n", "must be a table"),
    ],
)  # fmt: skip
def test_faults_name_the_cure(tmp_path: Path, toml: str, words: str) -> None:
    assert words in faults(tmp_path, toml)


@pytest.mark.parametrize(
    ("row", "words"),
    [
        ("A,B,800,25,,,", "weather without pressure"),
        ("A,B,800,25,950,50,12", "not both"),
        ("A,B,800,25,29 Hg,50,", "no unit of pressure"),
        ("A,B,800,25 R,950,50,", "no unit of temperature"),
        ("A,B,800,25,950,120,", "outside 0 to 100"),
    ],
)
def test_bad_weather_in_a_row(tmp_path: Path, row: str, words: str) -> None:
    rows = f"from,to,distance,temperature,pressure,humidity,ppm\n{row}\n"
    found = faults(tmp_path, METER + BOOK + "applied = []\n", rows)
    assert words in found
    assert "distances.csv:2" in found
