"""The project as a whole: what lies at the top, what is installed, what README prints, what the demos are made from."""

from __future__ import annotations

import importlib
import importlib.metadata
import json
import re
import subprocess
import tomllib
from pathlib import Path

import pytest

import adjust
from adjust.caution import CAUTION

ROOT = Path(__file__).resolve().parent.parent
TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "adjust", "tests", "networks", "docs"}


def project_files() -> list[Path]:
    """Files of the project: what git tracks or would track; without git (a source archive), all that is there."""
    command = ["git", "-C", str(ROOT), "ls-files", "-z", "--cached", "--others", "--exclude-standard"]
    try:
        out = subprocess.run(command, check=True, capture_output=True, text=True).stdout
        found = [Path(name) for name in out.split("\0") if name and (ROOT / name).is_file()]
    except (FileNotFoundError, subprocess.CalledProcessError):
        passing = re.compile(r"(^|/)(\.venv|\.git|__pycache__|\.[a-z]+_cache|record)(/|$)")
        found = [path.relative_to(ROOT) for path in ROOT.rglob("*") if path.is_file()]
        found = [path for path in found if not passing.search(path.as_posix())]
    assert len(found) > 30, "the list of project files is too short to be true"
    return found


def block(name: str, file: str) -> str:
    """Text of the fenced block behind the comment <!-- name -->; .ci/run finds it by the same marks."""
    found = re.findall(rf"^<!-- {name} -->\n```sh\n(.*?)\n```$", (ROOT / file).read_text("utf-8"), re.M | re.S)
    assert len(found) == 1, f"{file} has {len(found)} blocks marked {name}"
    return found[0]


def plain(text: str) -> str:
    """The text without line breaks and quotation marks of Markdown."""
    return re.sub(r"\s+", " ", re.sub(r"^> ?", "", text, flags=re.M))


def test_the_top_level_holds_what_it_should_and_nothing_else() -> None:
    assert {p.parts[0] for p in project_files() if not p.parts[0].startswith(".")} == TOP


def test_the_version_is_stated_alike_everywhere() -> None:
    stated = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]["version"]
    assert adjust.__version__ == stated
    assert importlib.metadata.version("brasscap") == stated


def installed_package() -> Path:
    """Folder of the package according to the installer: in the environment, or the checkout of an editable install."""
    distribution = importlib.metadata.distribution("brasscap")
    origin = json.loads(distribution.read_text("direct_url.json") or "{}")
    if origin.get("dir_info", {}).get("editable"):
        return ROOT / "adjust"
    folder = Path(str(distribution.locate_file("adjust"))).resolve()
    assert folder != ROOT / "adjust", "the installed package lies in the checkout"
    return folder


def test_the_tests_run_on_the_installed_package() -> None:
    """Else a file missing from the wheel would go unnoticed: run .venv/bin/pytest, not python -m pytest."""
    assert adjust.__file__ is not None
    assert Path(adjust.__file__).resolve().parent == installed_package()


def test_the_installed_package_is_the_one_of_this_checkout() -> None:
    """A stale installation would test yesterday's code; data files of the package must be there too."""
    installed = installed_package()
    ours = [p for p in project_files() if p.parts[0] == "adjust"]
    missing = [str(p) for p in ours if not (installed.parent / p).is_file()]
    assert not missing, "not installed; install the checkout again"
    stale = [str(p) for p in ours if (installed.parent / p).read_bytes() != (ROOT / p).read_bytes()]
    assert not stale, "older than the checkout; install it again"
    assert {"adjust/py.typed", "adjust/starter/job.toml"} <= {p.as_posix() for p in ours}


@pytest.mark.parametrize(("name", "file"), [("demo", "README.md"), ("tests", "README.md"), ("lint", "DEVELOPERS.md")])
def test_the_printed_commands_are_marked_for_the_check(name: str, file: str) -> None:
    text = block(name, file)
    assert text.startswith(".venv/bin/" if name == "lint" else "python3 -m venv .venv && .venv/bin/pip install")
    # PEP 668: a bare pip is refused on many machines, so every command comes from the virtual environment.
    assert not re.search(r"(^|&& *)(pip|python -m pip|pytest|brasscap)\b", text, re.M)
    assert f"<!-- {name} -->" not in text
    assert f"run_block {name} {file}" in (ROOT / ".ci" / "run").read_text("utf-8")


def test_the_readme_adjusts_a_demo_that_is_there() -> None:
    folder = re.search(r"brasscap adjust (\S+)", block("demo", "README.md"))
    assert folder is not None
    assert (ROOT / folder[1] / "job.toml").is_file()


def test_the_readme_carries_the_caution() -> None:
    assert CAUTION in plain((ROOT / "README.md").read_text("utf-8"))


def test_links_lead_somewhere() -> None:
    links = [
        (file, link)
        for file in ("README.md", "DEVELOPERS.md")
        for link in re.findall(r"\]\(([^)#:]+)\)", (ROOT / file).read_text("utf-8"))
    ]
    assert len(links) >= 7
    assert [pair for pair in links if not (ROOT / pair[1]).exists()] == []


def test_simulated_readings_come_again_byte_for_byte(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.syspath_prepend(str(ROOT / "networks"))
    for name in ("simulate", "simulate_books"):
        importlib.import_module(name).main(tmp_path)
    made = {p.relative_to(tmp_path) for p in tmp_path.rglob("*.csv")}
    kept = {p for p in project_files() if p.suffix == ".csv" and p.parts[0] in ("networks", "adjust")}
    assert made == kept
    assert [p for p in sorted(made) if (tmp_path / p).read_bytes() != (ROOT / p).read_bytes()] == []


def test_demo_jobs_say_that_their_readings_are_invented() -> None:
    jobs = [p for p in project_files() if p.name == "job.toml" and p.parts[0] in ("networks", "adjust")]
    assert len(jobs) >= 3
    assert [p for p in jobs if "readings are invented" not in (ROOT / p).read_text("utf-8")] == []


def places(text: str) -> list[str]:
    """Paths of somebody's machine in a text."""
    return re.findall(r"(?<![\w.$>}\"'*-])/(?:home|root|work|opt|mnt|srv|Users)/\w+|\bC:\\\\?\w+", text)


def test_no_file_names_a_place_on_a_machine() -> None:
    assert places("see " + "/".join(["", "home", "me", "x"]))
    assert places("see C:" + "\\" + "jobs")
    found = {}
    for path in project_files():
        content = (ROOT / path).read_bytes()
        if b"\0" not in content:
            found[str(path)] = places(content.decode("utf-8"))
    assert {path: what for path, what in found.items() if what} == {}
