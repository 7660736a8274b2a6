"""What is supported is stated alike everywhere: pyproject.toml, the sets of versions under .ci, and the CI matrix."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))
WORKFLOW = (ROOT / ".github" / "workflows" / "tests.yml").read_text("utf-8")


def name_of(text: str) -> str:
    return re.sub(r"[-_.]+", "-", text).lower()


def bounds(*extras: str) -> dict[str, str]:
    """Lower bounds of the run-time dependencies, the build and some extras."""
    project = PROJECT["project"]
    texts = [*project["dependencies"], *PROJECT["build-system"]["requires"]]
    for extra in extras:
        texts += project["optional-dependencies"][extra]
    found: dict[str, str] = {}
    for text in texts:
        match = re.fullmatch(r"([\w.-]+)>=([\d.]+)", text)
        assert match is not None, f"{text}: a name and its lower bound"
        assert found.setdefault(name_of(match[1]), match[2]) == match[2], f"{match[1]} has two bounds"
    return found


def pins(file: str) -> dict[str, str]:
    lines = [line for line in (ROOT / ".ci" / file).read_text("utf-8").splitlines() if not line.startswith("#")]
    assert [line for line in lines if not re.fullmatch(r"[\w.-]+==[\w.]+", line)] == []
    return {name_of(line.partition("==")[0]): line.partition("==")[2] for line in lines}


def numbers(version: str) -> list[int]:
    """The version as numbers, without trailing zeros: 6.100 and 6.100.0 are one."""
    found = [int(part) for part in version.split(".") if part.isdigit()]
    while found and not found[-1]:
        found.pop()
    return found


def test_the_oldest_set_is_the_lower_bounds() -> None:
    wanted = {name: numbers(version) for name, version in bounds("frames", "test").items()}
    found = {name: numbers(version) for name, version in pins("oldest.txt").items()}
    assert {name: found.get(name) for name in wanted} == wanted
    assert set(found) - set(wanted) == {"pyparsing"}, "what is not ours needs its reason in the file"


def test_the_pinned_set_has_every_dependency_at_or_above_its_bound() -> None:
    found = pins("constraints.txt")
    for name, version in bounds("frames", "test", "lint").items():
        assert name in found, f"{name} is not pinned in .ci/constraints.txt"
        assert numbers(found[name]) >= numbers(version), name


def matrix() -> set[str]:
    return set(re.findall(r'"(3\.\d+)"', WORKFLOW))


def test_the_matrix_runs_the_oldest_and_the_newest_python_of_pyproject() -> None:
    stated = [re.search(r"Python :: (3\.\d+)$", text) for text in PROJECT["project"]["classifiers"]]
    supported = sorted((m[1] for m in stated if m), key=numbers)
    assert PROJECT["project"]["requires-python"] == f">={supported[0]}"
    assert matrix() == {supported[0], supported[-1]}


@pytest.mark.parametrize("command", [".ci/with_versions ${{ matrix.versions }}", ".ci/run"])
def test_the_matrix_runs_scripts_that_are_there_and_can_run(command: str) -> None:
    assert f"- run: {command}\n" in WORKFLOW
    script = ROOT / command.split()[0]
    assert script.stat().st_mode & 0o111
    assert script.read_text("utf-8").startswith("#!/usr/bin/env bash\n")


def test_the_sets_of_the_matrix_are_those_of_the_script() -> None:
    sets = set(re.findall(r"^ +versions: (\w+)$", WORKFLOW, re.M))
    script = (ROOT / ".ci" / "with_versions").read_text("utf-8")
    assert sets == set(re.findall(r"^  (\w+)\)", script, re.M)) == {"oldest", "newest"}


def test_the_workflow_is_laid_out_as_yaml_wants_it() -> None:
    """No parser of YAML is among our dependencies; indentation by twos without tabs is where such files go wrong."""
    lines = [line for line in WORKFLOW.splitlines() if line.strip() and not line.lstrip().startswith("#")]
    depth = 0
    for line in lines:
        indent = len(line) - len(line.lstrip(" "))
        assert "\t" not in line
        assert indent % 2 == 0, line
        assert indent <= depth + (4 if line.lstrip().startswith("- ") else 2), line
        assert re.fullmatch(r" *(- )?[\w-]+:( .+)?| *- .+", line), line
        depth = indent + (2 if line.lstrip().startswith("- ") else 0)
    assert [line.rstrip(":") for line in lines if not line.startswith(" ")][-1] == "jobs"
