"""Closure rules: those that come with the program, those of a job, and which one counts."""

from __future__ import annotations

import hashlib
from pathlib import Path

import pytest

import adjust
from adjust.book.rules import CONFIDENCES, SUBJECTS, BadRule, built_in, built_in_rule, parse_rule
from adjust.errors import InputError
from tests.helpers import close

HEAD = '[units]\nlength = "m"\nangle = "dms"\n'
OWN = """title = "Site rule"
body = "our office"
edition = "2"
[[limit]]
class = "site"
of = "level loops"
formula = "10 mm*sqrt(km)"
"""


def job(folder: Path, tolerance: str, **files: str) -> Path:
    (folder / "job.toml").write_text(HEAD + "[tolerance]\n" + tolerance, "utf-8")
    (folder / "levelled.csv").write_text("from,to,rise,sd\nA,B,1.0,0.001\n", "utf-8")
    for name, text in files.items():
        (folder / f"{name}.toml").write_text(text, "utf-8")
    return folder


def faults(folder: Path) -> list[str]:
    with pytest.raises(InputError) as stop:
        adjust.read(folder)
    return stop.value.sentences


def test_every_rule_of_the_program_reads_and_says_how_sure_it_is() -> None:
    """The figures and their confidence come from the collection of standards that the rule files name."""
    names = built_in()
    assert len(names) > 5
    for name in names:
        rule = built_in_rule(name)
        assert {limit.confidence for _, limit in rule.limits} <= {"read", "partly", "memory"}
        assert {limit.of for _, limit in rule.limits} <= set(SUBJECTS)
        for of_class, limit in rule.limits:
            assert rule.edition in limit.source
            assert of_class in limit.source
            assert (CONFIDENCES[limit.confidence] in limit.words) == (limit.confidence != "read")


def test_a_rule_by_its_class(tmp_path: Path) -> None:
    """FGCC 1984, section 3.5: third-order loops 12 mm per root kilometre (partly read); 3.3: 1:5000 or 0.8 m."""
    got = adjust.read(job(tmp_path, 'rule = ["usa-levelling-1984: third order", '
                                    '"usa-control-1984: third order class II"]\n')).tolerance  # fmt: skip
    close(got.limits["level loops"].allowance.allowable(length=4000.0) or 0.0, 0.024, atol=1e-12)
    close(got.limits["traverse position"].allowance.allowable(length=1000.0) or 0.0, 0.2, atol=1e-12)
    assert set(got.limits) == set(SUBJECTS) - {"height loops", "height runs"}  # of these the rules say nothing


def test_the_jobs_own_allowance_wins(tmp_path: Path) -> None:
    text = 'levelling = "8 mm*sqrt(km)"\nrule = "usa-levelling-1984: third order"\n'
    got = adjust.read(job(tmp_path, text)).tolerance
    close(got.limits["level loops"].allowance.allowable(length=1000.0) or 0.0, 0.008, atol=1e-12)
    assert got.limits["level loops"].confidence == "own"


def test_a_rule_file_of_the_job_is_an_input(tmp_path: Path) -> None:
    got = adjust.read(job(tmp_path, 'rule = "site"\n', site=OWN))
    close(got.tolerance.limits["level loops"].allowance.allowable(length=1000.0) or 0.0, 0.010, atol=1e-12)
    assert ("site.toml", hashlib.sha256(OWN.encode()).hexdigest()) in got.inputs


def test_no_tolerance_no_limits(tmp_path: Path) -> None:
    assert adjust.read(job(tmp_path, "")).tolerance.limits == {}


@pytest.mark.parametrize(
    ("tolerance", "words"),
    [
        ('levelling = "10 sec"\n', 'job.toml:5: column tolerance.levelling: "10 sec": sec is no unit of length'),
        ('traverse = 5\n', 'column tolerance.traverse: "5": not an allowance'),
        ('rule = 5\n', 'column tolerance.rule: "5": must name a rule and its class'),
        ('rule = "usa-levelling-1994: third order"\n', "usa-levelling-1984"),
        ('rule = "usa-levelling-1984: fourth order"\n', '"usa-levelling-1984: third order"'),
        ('rule = "usa-levelling-1984"\n', "name one of its classes"),
        ('rule = ["usa-levelling-1984: third order", "australia-levelling: LC"]\n', "have a limit by"),
        ('rule = "../elsewhere"\n', "no such rule"),
        ('levels = "8 mm"\n', "levelling"),
    ],
)  # fmt: skip
def test_faults_name_the_cure(tmp_path: Path, tolerance: str, words: str) -> None:
    assert words in "\n".join(faults(job(tmp_path, tolerance)))


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("title =", "titel =", "title is missing"),
        ('edition = "2"', 'edition = "2"\nyear = 2', "unknown key year"),
        ("[[limit]]", "[limit]", "no [[limit]] block"),
        ('class = "site"\n', "", "without class"),
        ("class", "klass", "unknown key klass"),
        ("level loops", "level rings", "did you mean level runs"),
        ("10 mm*sqrt(km)", "10 km*sqrt(mm", "formula"),
        ('formula = "10', 'confidence = "sure"\nformula = "10', "confidence"),
        ('"Site rule"', "Site rule", "not TOML"),
    ],
)
def test_a_bad_rule_file_says_what_is_wrong(tmp_path: Path, old: str, new: str, words: str) -> None:
    bad = OWN.replace(old, new, 1)
    with pytest.raises(BadRule):
        parse_rule(bad, "site")
    found = faults(job(tmp_path, 'rule = "site: site"\n', site=bad))
    assert found[0].startswith("site.toml")
    assert words in found[0]
