"""Declared limits applied to closures, and what check and the exit code make of them."""

from __future__ import annotations

from pathlib import Path

import pytest

import adjust
from adjust.cli import main
from adjust.judge.closures import closures
from adjust.judge.tolerances import declared_rule
from tests.helpers import close

HEAD = '[units]\nlength = "m"\nangle = "dms"\n[instruments.l]\nlevelling = "1.5 mm*sqrt(km)"\n'
LEVELS = "from,to,rise,length\nA,B,1.0000,1000\nB,C,-2.0000,1000\nC,A,1.0080,2000\n"


def job(folder: Path, tolerance: str, rows: str = LEVELS) -> Path:
    (folder / "job.toml").write_text(HEAD + tolerance, "utf-8")
    (folder / "levelled.csv").write_text(rows, "utf-8")
    return folder


def test_a_loop_by_its_length(tmp_path: Path) -> None:
    read = adjust.read(job(tmp_path, '[tolerance]\nlevelling = "12 mm*sqrt(km)"\n'))
    (one,) = closures(read, declared_rule(read))
    close(one.misclosure["height"], 0.008, atol=1e-12)
    close(one.allowable["height"], 0.024, atol=1e-12)
    assert one.verdict == "met"
    assert one.declared == ("height",)
    assert one.rule == "12 mm*sqrt(km), [tolerance] levelling of the job"


def test_without_a_declared_limit_its_own_standard_deviation_counts(tmp_path: Path) -> None:
    """4 km at 1.5 mm a root kilometre is 3 mm; one test at 5 % allows 1.96 of it, and 8 mm is more."""
    read = adjust.read(job(tmp_path, ""))
    assert declared_rule(read) is None
    (one,) = closures(read, declared_rule(read))
    close(one.sd["height"], 0.003, atol=1e-12)
    close(one.allowable["height"], 1.959964 * 0.003, atol=1e-8)
    assert one.verdict == "not met"
    assert one.declared == ()


def test_a_rule_that_asks_for_what_was_not_booked_cannot_be_tested(tmp_path: Path) -> None:
    read = adjust.read(job(tmp_path, '[tolerance]\nlevelling = "5 mm*sqrt(setup)"\n'))
    (one,) = closures(read, declared_rule(read))
    assert one.verdict == "cannot be tested"


def test_what_a_rule_does_not_say_is_judged_by_its_standard_deviation() -> None:
    root = Path(__file__).parents[2] / "networks" / "link-traverse"
    read = adjust.read(root)
    (one,) = closures(read, lambda _: ({"linear": 0.001}, "our rule"))
    assert one.declared == ("linear",)
    assert one.verdicts == {"angle": "met", "linear": "not met"}
    assert one.rule.startswith("our rule; its own standard deviation")
    assert one.allowable["linear"] == 0.001


@pytest.mark.parametrize(("tolerance", "code"), [("12 mm*sqrt(km)", 0), ("2 mm*sqrt(km)", 1)])
def test_a_declared_limit_that_is_not_met_fails(
    tmp_path: Path, tolerance: str, code: int, capsys: pytest.CaptureFixture[str]
) -> None:
    rows = LEVELS.replace("1.0080", "1.0050")
    folder = job(tmp_path, f'[tolerance]\nlevelling = "{tolerance}"\n', rows)
    assert main(["check", str(folder)]) == code
    seen = capsys.readouterr().out
    assert ("NOT MET" in seen) == bool(code)
    assert "level loop A-B-C-A, 4000 m: height +5.0 mm, allowed" in seen
    assert main(["adjust", str(folder), "--quiet"]) == code


def test_check_fails_where_something_does_not_close_by_its_own_standard_deviation(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["check", str(job(tmp_path, ""))]) == 1
    assert "NOT MET" in capsys.readouterr().out
