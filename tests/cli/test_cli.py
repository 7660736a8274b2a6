"""The command: what it prints, where, with which exit code, and what it leaves on the disk."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

import adjust
from adjust import cli
from adjust.caution import CAUTION, CAUTION_SHORT

CONTROL = "station,height\nM1,10.000\nM2,12.000\n"
LEVELLED = """from,to,rise,length
M1,P1,1.0004,200
P1,P2,0.5001,200
P2,M2,0.4998,200
M1,P2,1.5003,300
P1,M2,0.9997,300
"""
TOML = """title = "Levels"
[units]
length = "m"
angle = "dms"
[instruments.level-1]
levelling = "1.2 mm*sqrt(km)"
"""
FILES = {"record.json", "record.html", "stations.csv", "observations.csv", "drawing.svg", "drawing.png", "drawing.pdf"}
Captured = pytest.CaptureFixture[str]


def put(folder: Path, levelled: str = LEVELLED, control: str = CONTROL, toml: str = TOML) -> Path:
    folder.mkdir(exist_ok=True)
    (folder / "job.toml").write_text(toml, "utf-8")
    (folder / "control.csv").write_text(control, "utf-8")
    (folder / "levelled.csv").write_text(levelled, "utf-8")
    return folder


@pytest.fixture
def job(tmp_path: Path) -> Path:
    """A sound levelling job."""
    return put(tmp_path / "job")


@pytest.fixture
def blunder(tmp_path: Path) -> Path:
    """The same with 20 mm misread in one line."""
    return put(tmp_path / "blunder", LEVELLED.replace("1.5003", "1.5203"))


def tree(folder: Path) -> dict[str, tuple[int, bytes]]:
    return {
        path.relative_to(folder).as_posix(): (path.lstat().st_mtime_ns, path.read_bytes() if path.is_file() else b"")
        for path in [folder, *sorted(folder.rglob("*"))]
    }


def run(*arguments: str) -> subprocess.CompletedProcess[str]:
    """The installed command in a process of its own."""
    command = Path(sys.executable).with_name("brasscap")
    return subprocess.run([str(command), *arguments], capture_output=True, text=True, encoding="utf-8", check=False)


# ---- version, help, usage


def test_version(capsys: Captured) -> None:
    assert cli.main(["--version"]) == 0
    assert capsys.readouterr() == (f"brasscap {adjust.__version__}\n", "")


@pytest.mark.parametrize("arguments", [["--help"], ["start", "--help"], ["check", "--help"], ["adjust", "--help"]])
def test_help(arguments: list[str], capsys: Captured) -> None:
    assert cli.main(arguments) == 0
    out, err = capsys.readouterr()
    assert out.startswith("usage: brasscap")
    assert err == ""


def test_help_names_every_command_and_only_those_that_work(capsys: Captured) -> None:
    cli.main(["--help"])
    out = capsys.readouterr().out
    assert set(re.findall(r"^    (\w+) ", out, re.MULTILINE)) == {"start", "check", "adjust"}
    assert CAUTION_SHORT in " ".join(out.split())


@pytest.mark.parametrize("arguments", [[], ["frobnicate"], ["adjust"], ["adjust", "a", "b"], ["check", "a", "--json"]])
def test_wrong_usage_is_refused(arguments: list[str], capsys: Captured) -> None:
    assert cli.main(arguments) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.startswith("usage: brasscap")


# ---- start


def test_start_writes_a_job_that_adjusts(tmp_path: Path, capsys: Captured) -> None:
    new = tmp_path / "a" / "new"
    assert cli.main(["start", str(new)]) == 0
    out = capsys.readouterr().out
    written = {path.name for path in new.iterdir()}
    assert {"job.toml", "control.csv"} <= written
    assert all(name in out for name in written)
    assert CAUTION_SHORT in out
    assert cli.main(["check", str(new)]) == 0
    assert cli.main(["adjust", str(new)]) == 0
    assert {path.name for path in (new / "record").iterdir()} == FILES


def test_start_refuses_what_is_there(job: Path, tmp_path: Path, capsys: Captured) -> None:
    (tmp_path / "empty").mkdir()
    (tmp_path / "file").write_text("mine")
    for target in (job, tmp_path / "empty", tmp_path / "file", tmp_path / "file" / "below"):
        before = tree(tmp_path)
        assert cli.main(["start", str(target)]) == 2
        out, err = capsys.readouterr()
        assert out == ""
        assert err.count("\n") == 1
        assert str(target) in err
        assert tree(tmp_path) == before


# ---- check


def test_check_says_what_hangs_together_and_writes_nothing(job: Path, capsys: Captured) -> None:
    before = tree(job)
    assert cli.main(["check", str(job)]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert "4 stations, 2 of them control" in out
    assert "5 levelled" in out
    assert out.rstrip().endswith(CAUTION_SHORT)
    assert tree(job) == before


def test_check_quiet(job: Path, capsys: Captured) -> None:
    assert cli.main(["check", "--quiet", str(job)]) == 0
    assert capsys.readouterr() == ("", "")


# ---- adjust


def test_adjust_writes_the_record_beside_the_job(job: Path, capsys: Captured) -> None:
    before = tree(job)
    assert cli.main(["adjust", str(job)]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert CAUTION_SHORT in " ".join(out.split()) or CAUTION in " ".join(out.split())
    assert f"The record is in {job / 'record'}" in out
    assert {path.name for path in (job / "record").iterdir()} == FILES
    after = tree(job)
    assert {name: after[name] for name in before if name != "."} == {n: v for n, v in before.items() if n != "."}


def test_adjust_takes_the_file_too_and_replaces_its_own_record(job: Path, capsys: Captured) -> None:
    assert cli.main(["adjust", str(job)]) == 0
    first = {name: content for name, (_, content) in tree(job / "record").items()}
    assert cli.main(["adjust", str(job / "job.toml")]) == 0
    assert {name: content for name, (_, content) in tree(job / "record").items()} == first


def test_json_prints_the_record_and_writes_nothing(job: Path, capsys: Captured) -> None:
    before = tree(job)
    assert cli.main(["adjust", "--json", str(job)]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert tree(job) == before
    record = json.loads(out, parse_constant=lambda constant: pytest.fail(f"{constant} in JSON"))
    assert record["caution"]
    assert [station["station"] for station in record["stations"]] == ["M1", "M2", "P1", "P2"]
    assert cli.main(["adjust", "--quiet", str(job)]) == 0
    assert (job / "record" / "record.json").read_text("utf-8") == out


def test_json_with_out_does_both(job: Path, tmp_path: Path, capsys: Captured) -> None:
    before = tree(job)
    out_folder = tmp_path / "else" / "where"
    assert cli.main(["adjust", "--json", "--out", str(out_folder), str(job)]) == 0
    assert (out_folder / "record.json").read_text("utf-8") == capsys.readouterr().out
    assert {path.name for path in out_folder.iterdir()} == FILES
    assert tree(job) == before


def test_quiet_prints_nothing_but_faults(job: Path, blunder: Path, capsys: Captured) -> None:
    assert cli.main(["adjust", "--quiet", str(job)]) == 0
    assert cli.main(["adjust", "--quiet", str(blunder)]) == 1
    assert capsys.readouterr() == ("", "")
    assert cli.main(["adjust", "--quiet", str(put(job, "from,to,rise\nM1,P1,x\n"))]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "levelled.csv:2: column rise" in err


@pytest.mark.parametrize(("command", "phases"), [("check", ["read", "check"]), ("adjust", ["read", "adjust", "write"])])
def test_verbose_prints_times_to_standard_error(command: str, phases: list[str], job: Path, capsys: Captured) -> None:
    assert cli.main([command, str(job)]) == 0
    plain = capsys.readouterr()
    assert cli.main([command, "--verbose", str(job)]) == 0
    out, err = capsys.readouterr()
    assert out == plain.out
    times = dict(re.findall(r"^(\w+) +(\d+\.\d+) s$", err, re.MULTILINE))
    assert len(times) == err.count("\n")
    assert set(phases) <= set(times)


# ---- exit codes


def test_exit_1_for_a_blunder_and_the_record_is_written(blunder: Path, job: Path, capsys: Captured) -> None:
    assert cli.main(["adjust", str(blunder)]) == 1
    out, err = capsys.readouterr()
    assert err == ""
    assert "levelled.csv:5" in out
    record = json.loads((blunder / "record" / "record.json").read_text("utf-8"))
    assert record["suspects"][0]["observation"] == "levelled.csv:5"
    assert abs(record["suspects"][0]["estimated_blunder"] - 0.02) < 0.002
    assert cli.main(["adjust", "--json", str(blunder)]) == 1
    assert cli.main(["adjust", str(job)]) == 0, "without the blunder"


@pytest.mark.parametrize("started", [False, True])
def test_exit_2_for_an_unsolvable_job_in_words(started: bool, tmp_path: Path, capsys: Captured) -> None:
    """P1 is held by one distance only: nothing fixes it sideways, whether or not it has starting coordinates."""
    toml = TOML + '[instruments.a]\ndistance = "2 mm"\n'
    home = put(tmp_path / "job", toml=toml, control="station,east,north\nM1,0,0\nM2,100,0\n")
    (home / "levelled.csv").unlink()
    (home / "distances.csv").write_text("from,to,distance\nM1,P1,50\nM1,M2,100\n")
    if started:
        (home / "stations.csv").write_text("station,east,north\nP1,30,40\n")
    before = tree(home)
    for command in (["check"], ["adjust"], ["adjust", "--json"]):
        assert cli.main([*command, str(home)]) == 2
        out, err = capsys.readouterr()
        assert out == ""
        assert "P1" in err
        assert "Traceback" not in err
        assert "singular" not in err.lower()
        if started:
            assert "P1 is held by one distance only: nothing fixes it sideways" in err
    assert tree(home) == before


def test_exit_2_for_a_foreign_file_in_the_record_folder(job: Path, capsys: Captured) -> None:
    (job / "record").mkdir()
    (job / "record" / "notes.txt").write_text("mine")
    before = tree(job)
    assert cli.main(["adjust", str(job)]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    assert "notes.txt" in err
    assert tree(job) == before


@pytest.mark.parametrize("out", ["", "job.toml", "levelled.csv/record"])
def test_exit_2_for_a_record_over_the_job_itself(out: str, job: Path, capsys: Captured) -> None:
    before = tree(job)
    assert cli.main(["adjust", "--out", str(job / out), str(job)]) == 2
    assert capsys.readouterr().err.count("\n") == 1
    assert tree(job) == before


def test_exit_70_names_the_file_with_the_trace(job: Path, capsys: Captured, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(_: object) -> None:
        raise RuntimeError("a bolt is\nloose")

    monkeypatch.setenv("TMPDIR", str(job.parent))
    monkeypatch.setattr("tempfile.tempdir", None)
    monkeypatch.setattr("adjust.solve", fail)
    before = tree(job)
    assert cli.main(["adjust", str(job)]) == 70
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    found = re.fullmatch(r"internal error \(RuntimeError\); the trace lies in (.+)\n", err)
    assert found
    trace = Path(found[1]).read_text("utf-8")
    assert "a bolt is\nloose" in trace
    assert "Traceback" in trace
    assert tree(job) == before


def test_exit_130_when_interrupted(job: Path, capsys: Captured, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupt(_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("adjust.solve", interrupt)
    before = tree(job)
    assert cli.main(["adjust", str(job)]) == 130
    out, err = capsys.readouterr()
    assert out == ""
    assert err == "interrupted; nothing was written\n"
    assert tree(job) == before


# ---- as a process


def test_the_command_and_the_module_are_the_same(blunder: Path) -> None:
    for arguments in (["--version"], ["adjust", "--json", str(blunder)], ["adjust", "nowhere"]):
        command = run(*arguments)
        module = subprocess.run(
            [sys.executable, "-m", "adjust", *arguments], capture_output=True, text=True, encoding="utf-8", check=False
        )
        assert (module.returncode, module.stdout, module.stderr) == (
            command.returncode,
            command.stdout,
            command.stderr,
        )
    assert command.returncode == 2


@pytest.mark.parametrize("command", [["adjust", "--json"], ["adjust"], ["check"]], ids=" ".join)
def test_a_reader_that_closes_its_end_is_no_error(command: list[str], job: Path) -> None:
    """As in: brasscap adjust --json JOB | head -1. The output is buffered, as it is for everybody by default."""
    process = subprocess.Popen(
        [sys.executable, "-m", "adjust", *command, str(job)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        env={name: value for name, value in os.environ.items() if name != "PYTHONUNBUFFERED"},
    )
    assert process.stdout is not None
    process.stdout.close()
    process.stdout = None
    err = process.communicate()[1]
    assert err == b""
    assert process.returncode == 0


def test_any_name_can_be_printed_anywhere(tmp_path: Path) -> None:
    """A terminal that only knows ASCII gets the whole output too."""
    home = put(tmp_path / "Pfähle", LEVELLED.replace("P1", "Süd°"))
    done = subprocess.run(
        [sys.executable, "-m", "adjust", "adjust", str(home)],
        capture_output=True,
        check=False,
        env={**os.environ, "LC_ALL": "C", "PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"},
    )
    assert done.returncode == 0, done.stderr
    assert "Süd°" in done.stdout.decode()


def test_no_colour_and_no_control_codes_when_not_a_terminal(blunder: Path) -> None:
    done = run("adjust", str(blunder))
    assert done.returncode == 1
    assert "\x1b" not in done.stdout + done.stderr
