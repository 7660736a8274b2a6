"""Malformed jobs through the real command: every fault is said at its place, all at once, and nothing is written."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import pytest

from adjust.cli import main
from adjust.errors import one_line

FOLDER = Path(__file__).parent / "malformed"


def text_of(raw: str) -> str:
    return raw.removeprefix("\n")


SOUND = {
    name: text_of(part["text"]) for name, part in tomllib.loads((FOLDER / "sound.toml").read_text("utf-8")).items()
}
JOBS: list[dict[str, Any]] = [
    {**job, "source": path.name}
    for path in sorted(FOLDER.glob("*.toml"))
    if path.name != "sound.toml"
    for job in tomllib.loads(path.read_text("utf-8"))["job"]
]


def put(folder: Path, job: dict[str, Any]) -> Path:
    """The files of a job in a new folder inside ``folder``."""
    home = folder / "job"
    home.mkdir()
    texts = {**SOUND, **{name: text_of(text) for name, text in job.get("files", {}).items()}}
    for name, text in texts.items():
        if name in job.get("without", ()):
            continue
        own = name in job.get("files", {})
        text = text.replace("\n", job["newline"]) if own and "newline" in job else text
        (home / name).write_bytes(text.encode(job.get("encoding", "utf-8") if own else "utf-8"))
    for name, target in job.get("links", {}).items():
        (folder / Path(target).name).write_text(SOUND[Path(target).name], "utf-8")
        (home / name).symlink_to(target)
    return home


def form(file: str, line: int, column: str, found: str, piece: str) -> tuple[str, str]:
    """The promised form, FILE:LINE: column NAME: "what was found": what to do, and a piece of what to do."""
    place = f"{file}:{line}:" if line else f"{file}:"
    return f'{place}{f" column {column}:" if column else ""} "{one_line(found)}": ', piece


def snapshot(folder: Path) -> dict[str, tuple[int, bytes]]:
    """Time and content of everything in the folder."""
    return {
        path.relative_to(folder).as_posix(): (path.lstat().st_mtime_ns, path.read_bytes() if path.is_file() else b"")
        for path in [folder, *sorted(folder.rglob("*"))]
    }


def test_there_are_at_least_sixty_jobs_with_names_of_their_own() -> None:
    assert len(JOBS) >= 60
    assert len({job["name"] for job in JOBS}) == len(JOBS)


def test_the_job_from_which_they_differ_is_sound(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    home = put(tmp_path, {})
    code = main(["adjust", str(home)])
    assert (code, capsys.readouterr().err) == (0, "")


@pytest.mark.parametrize("job", JOBS, ids=[f"{job['source'].removesuffix('.toml')}: {job['name']}" for job in JOBS])
def test_malformed(job: dict[str, Any], tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    home = put(tmp_path, job)
    before = snapshot(tmp_path)
    code = main(["adjust", str(home)])
    out, err = capsys.readouterr()
    assert snapshot(tmp_path) == before, "something was written"
    assert code == 2, err
    assert out == ""
    assert "Traceback" not in err
    assert err.endswith("\n")
    lines = err[:-1].split("\n")
    for fault in job["faults"]:
        start, piece = form(*fault)
        fitting = [line for line in lines if line.startswith(start) and piece in line[len(start) :]]
        assert fitting, f"{start}...{piece}... is not in\n{err}"
        lines.remove(fitting[0])
    assert lines == [], "faults beyond those expected"


@pytest.mark.parametrize("command", [["check"], ["adjust", "--json"], ["adjust", "--quiet"]], ids=" ".join)
def test_every_command_says_the_same(command: list[str], tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    job = next(job for job in JOBS if job["name"] == "several faults in different files, all at once")
    home = put(tmp_path, job)
    before = snapshot(tmp_path)
    assert main(["adjust", str(home)]) == 2
    wanted = capsys.readouterr()
    assert main([*command, str(home)]) == 2
    assert capsys.readouterr() == wanted
    assert wanted.err.count("\n") == len(job["faults"])
    assert snapshot(tmp_path) == before


def test_the_faults_come_in_the_order_of_files_and_lines(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Names and values are read in several rounds; a surveyor mends a file from top to bottom."""
    job = next(job for job in JOBS if job["name"] == "several faults in different files, all at once")
    main(["adjust", str(put(tmp_path, job))])
    places = [line.split(": ")[0] for line in capsys.readouterr().err.splitlines()]
    assert places == [f"{file}:{line}" for file, line, *_ in job["faults"]]


def test_a_table_full_of_faults_is_cut_short(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A table in the wrong unit would otherwise print one line a row."""
    rows = "".join("M1,P1,far\n" for _ in range(500))
    home = put(tmp_path, {"files": {"distances.csv": "from,to,distance\n" + rows}})
    assert main(["adjust", str(home)]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 201
    assert "300 more faults; mend these first" in lines[-1]


@pytest.mark.parametrize(
    ("name", "piece"),
    [
        ("nowhere", "no such folder; name a job folder or its job.toml"),
        ("file.txt", "not a job; name a job folder or its job.toml"),
        ("empty", "no job.toml in the folder; 'brasscap start DIR'"),
    ],
)
def test_not_a_job(name: str, piece: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "file.txt").write_text("x")
    (tmp_path / "empty").mkdir()
    before = snapshot(tmp_path)
    assert main(["adjust", str(tmp_path / name)]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    assert piece in err
    assert snapshot(tmp_path) == before
