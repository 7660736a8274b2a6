"""[drawing] of job.toml: what it may say, and what is said of slips in it."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

import adjust
from adjust.book.schema import LAYERS
from adjust.book.settings import Drawing
from adjust.errors import InputError
from adjust.record.build import build

JOB = """title = "Drawn"
[units]
length = "m"
angle = "dms"
[instruments.level-1]
levelling = "1.2 mm*sqrt(km)"
"""
LEVELLED = "from,to,rise,length\nM1,P1,1.0004,200\nP1,M2,0.9996,200\nM1,M2,2.0003,300\n"


def put(folder: Path, drawing: str) -> Path:
    (folder / "job.toml").write_text(JOB + drawing, "utf-8")
    (folder / "control.csv").write_text("station,height\nM1,10.0\nM2,12.0\n", "utf-8")
    (folder / "levelled.csv").write_text(LEVELLED, "utf-8")
    return folder


def test_nothing_asked_for(tmp_path: Path) -> None:
    assert adjust.read(put(tmp_path, "")).settings.drawing == Drawing()
    assert Drawing().layers == LAYERS


def test_everything_asked_for_reaches_the_record(tmp_path: Path) -> None:
    text = """[drawing]
paper = "Letter"
orientation = "portrait"
scale = "1:500"
ellipses = "x 2000"
relative_ellipses = "x 0.5"
layers = ["lines", "names"]
"""
    job = adjust.read(put(tmp_path, text))
    assert job.settings.drawing == Drawing("Letter", "portrait", 500.0, 2000.0, 0.5, ("lines", "names"))
    record = build(adjust.assess(adjust.solve(job)))
    assert record["settings"]["drawing"] == {
        "paper": "Letter", "orientation": "portrait", "scale": 500.0, "ellipses": 2000.0, "relative_ellipses": 0.5,
        "layers": ["lines", "names"],
    }  # fmt: skip


@pytest.mark.parametrize(
    ("line", "fault"),
    [
        ('paper = "A5"', 'column drawing.paper: "A5": use one of "A4", "A3", "A2", "Letter", "Tabloid"'),
        ('papper = "A4"', 'column drawing.papper: "papper": an unknown key; did you mean paper?'),
        (
            'orientation = "upright"',
            'column drawing.orientation: "upright": use one of "auto", "landscape", "portrait"',
        ),
        ('scale = "500"', 'column drawing.scale: "500": a scale from 1:1 to 1:10000000; write it like "1:500"'),
        ('scale = "1:0"', 'column drawing.scale: "1:0": a scale from 1:1 to 1:10000000; write it like "1:500"'),
        ('scale = "1:1.2.3"', 'column drawing.scale: "1:1.2.3": '),
        ("scale = 500", 'column drawing.scale: "500": must be a text in quotes'),
        ('ellipses = "2000"', 'column drawing.ellipses: "2000": how many times larger; write it like "x 2000"'),
        ('relative_ellipses = "x 0"', 'column drawing.relative_ellipses: "x 0": how many times larger; '),
        ('layers = ["line"]', 'column drawing.layers: "line": an unknown word; did you mean lines?'),
        ('layers = "lines"', 'column drawing.layers: "lines": must be a list: ["grid", "lines"]'),
    ],
)
def test_slips_are_told(tmp_path: Path, line: str, fault: str) -> None:
    with pytest.raises(InputError) as stop:
        adjust.read(put(tmp_path, f"[drawing]\n{line}\n"))
    assert [sentence.startswith(f"job.toml:8: {fault}") for sentence in stop.value.sentences] == [True], stop.value


def test_a_scale_too_large_is_a_warning_of_the_record() -> None:
    demo = Path(__file__).parents[2] / "networks" / "access-road"
    job = adjust.read(demo)
    assert job.settings.drawing.scale is None
    object.__setattr__(job.settings, "drawing", Drawing(scale=500.0))  # the demo with a larger scale in its job.toml
    record = build(adjust.assess(adjust.solve(job)))
    assert "drawing: at the scale asked for, 1:500, the stations need" in record["warnings"][-1]


def test_stations_of_readings_left_out_are_in_the_record() -> None:
    demo = Path(__file__).parents[2] / "networks" / "access-road"
    record = build(adjust.assess(adjust.solve(adjust.read(demo))))
    assert record["left_out"]
    booked = {one["station"] for one in record["stations"]}
    for one in record["left_out"]:
        assert len(one["stations"]) == 2
        assert set(one["stations"]) <= booked


def test_json_alone_loads_no_matplotlib(tmp_path: Path) -> None:
    code = (
        "import sys; from adjust.cli import main; main(['adjust', sys.argv[1], '--json']); "
        "print('matplotlib' in sys.modules, file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", code, str(put(tmp_path, ""))], capture_output=True, text=True)
    assert done.stderr.strip() == "False"
    assert json.loads(done.stdout)["settings"]["drawing"]["paper"] is None
