"""The Python interface: the public names, results as arrays, frames and notebook display."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import adjust
import adjust.errors
from adjust.caution import CAUTION_SHORT
from tests.helpers import close

ROOT = Path(__file__).parents[1]


@pytest.fixture(scope="module")
def solution():
    return adjust.solve(adjust.read(ROOT / "networks" / "access-road"))


def test_every_public_name_is_there_and_no_other():
    for name in adjust.__all__:
        assert getattr(adjust, name) is not None
    assert dir(adjust) == sorted(adjust.__all__)
    with pytest.raises(AttributeError, match="no attribute 'plot'"):
        _ = adjust.plot


def test_importing_the_command_loads_neither_numpy_nor_typing():
    code = (
        f"import sys; sys.path[:] = {sys.path!r}; import adjust.cli; "
        "print(sorted({'numpy', 'scipy', 'matplotlib', 'typing'} & set(sys.modules)))"
    )
    out = subprocess.run([sys.executable, "-I", "-S", "-c", code], capture_output=True, text=True, check=True)
    assert out.stdout.strip() == "[]"


def test_solve_still_works_after_its_package_was_imported():
    """A package adjust.solve once hid the function of the same name."""
    import adjust.judge.assess
    import adjust.solver.solution

    assert callable(adjust.solve)
    assert callable(adjust.assess)


def test_results_are_arrays(solution):
    n = len(solution.names)
    assert solution.positions.shape == (n, 3)
    assert solution.covariance.shape == (n, 3, 3)
    assert solution.residuals.shape == (len(solution.network.rows),)
    close(solution.sd[:, :2] ** 2, np.einsum("nii->ni", solution.covariance)[:, :2], atol=1e-18)
    assert np.isnan(solution.positions[:, 2]).all(), "a plane network has no heights"


def test_frames_carry_units_and_the_same_numbers(solution):
    stations = solution.frame()
    assert list(stations.columns) == ["east_m", "north_m", "height_m", "sd_east_m", "sd_north_m", "sd_height_m"]
    close(stations.loc["R3", "east_m"], solution.positions[solution.names.index("R3"), 0], atol=1e-12)
    judgement = adjust.assess(solution)
    readings = judgement.frame()
    assert list(readings.index) == judgement.ids
    close(readings["redundancy"].sum(), solution.total.degrees_of_freedom, atol=1e-9)


def test_notebook_display_shows_stations_and_the_caution(solution):
    html = solution._repr_html_()
    assert html.count("<tr>") == len(solution.names) + 1
    assert CAUTION_SHORT in html
    assert ">R3</th>" in html
    judged = adjust.assess(solution)._repr_html_()
    assert "statistic" in judged
    assert CAUTION_SHORT in judged


def test_hostile_names_are_harmless_in_a_notebook(tmp_path):
    (tmp_path / "job.toml").write_text('title = "<b>x"\n[units]\nlength = "m"\nangle = "dms"\n')
    (tmp_path / "control.csv").write_text("station,height\n<script>alert(1)</script>,1\n")
    (tmp_path / "levelled.csv").write_text("from,to,rise,sd\n<script>alert(1)</script>,B,1,1\n")
    html = adjust.solve(adjust.read(tmp_path))._repr_html_()
    assert "<script>" not in html
    assert "<b>" not in html


def test_check_says_what_hangs_together():
    lines = adjust.check(adjust.read(ROOT / "networks" / "access-road"))
    assert any(line.startswith("plane: M1, M2") and "41 to spare" in line for line in lines)
    assert any("left out" in line and "knocked off its mark" in line for line in lines)


def test_write_and_read_back(solution, tmp_path):
    out = adjust.write(adjust.assess(solution), tmp_path / "record")
    record = json.loads((out / "record.json").read_text("utf-8"))
    got = {s["station"]: s["east"] for s in record["stations"]}
    close(got["R3"], solution.positions[solution.names.index("R3"), 0], atol=6e-9)
    assert record["solution"]["degrees_of_freedom"] == 41


def test_a_table_changed_under_way_is_refused(tmp_path):
    """The booked text is read again from the file; it must still be the file that was adjusted."""
    (tmp_path / "job.toml").write_text('[units]\nlength = "m"\nangle = "dms"\n')
    (tmp_path / "control.csv").write_text("station,height\nA,1\n")
    table = tmp_path / "levelled.csv"
    table.write_text("from,to,rise,sd\nA,B,1,1\n")
    judgement = adjust.assess(adjust.solve(adjust.read(tmp_path)))
    table.write_text("from,to,rise,sd\nA,B,2,1\n")
    with pytest.raises(adjust.errors.InputError, match="changed while the job ran"):
        adjust.write(judgement, tmp_path / "record")
    assert not (tmp_path / "record").exists()
