"""Every case says where it comes from and what it is worth, and none has a check that cannot fail."""

from __future__ import annotations

import pytest

from tests.cases.worked import FOLDER, Case, half_last_digit

NAMES = sorted(path.stem for path in FOLDER.glob("*.toml"))
CONFIDENCE = {"read": True, "memory": True, "read (inputs only)": False, "exact algebra": False, "computed": False}
"""Whether a case of this confidence may count as evidence from outside."""


def test_cases_are_there() -> None:
    assert len(NAMES) >= 22


@pytest.mark.parametrize("name", NAMES)
def test_a_case_names_source_and_confidence(name: str) -> None:
    data = Case(name).data
    assert data["title"]
    assert len(data["source"]) > 20
    assert data["outside"] == CONFIDENCE[data["confidence"]]


@pytest.mark.parametrize("name", NAMES)
def test_only_published_values_are_called_printed(name: str) -> None:
    data = Case(name).data
    keys = {key for group in data.get("check", []) for key in ("printed", "derived") if key in group}
    assert keys <= ({"printed"} if data["outside"] else {"derived"})


@pytest.mark.parametrize("name", NAMES)
def test_no_tolerance_would_accept_zero(name: str) -> None:
    """A wanted zero needs a tolerance that is small beside the other values of its job."""
    for check in Case(name).checks:
        assert check.tolerance < (abs(check.wanted) or 1e-9), str(check)


@pytest.mark.parametrize("name", NAMES)
def test_every_case_is_run_by_a_test_and_told_in_the_readme(name: str) -> None:
    tests = "".join(p.read_text("utf-8") for p in FOLDER.glob("test_*.py") if p.name != "test_sources.py")
    assert f'"{name}"' in tests or f'"{name.removeprefix("nist_")}"' in tests
    line = next(line for line in (FOLDER / "README.md").read_text("utf-8").split("\n") if f"`{name}`" in line)
    assert f"| {Case(name).data['confidence']} |" in line


@pytest.mark.parametrize(
    ("printed", "half"), [("11.9976", 0.00005), ("0.050", 0.0005), ("3", 0.5), ("-0.0311", 0.00005)]
)
def test_half_the_last_digit(printed: str, half: float) -> None:
    assert half_last_digit(printed) == pytest.approx(half, rel=1e-6)
