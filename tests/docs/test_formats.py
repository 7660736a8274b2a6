"""The generated pages are current, and what they promise is what the program reads and writes."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import jsonschema
import pytest

import adjust
from adjust.record.build import build
from adjust.record.format_pages import pages
from adjust.record.schemas import job_schema, record_schema
from tests.docs.blocks import blocks

ROOT = Path(__file__).parents[2]
JOBS = [*sorted(p.parent for p in (ROOT / "networks").glob("*/job.toml")), ROOT / "adjust" / "starter"]


@pytest.mark.parametrize("file", sorted(pages()))
def test_generated_pages_are_current(file):
    assert (ROOT / "docs" / file).read_text("utf-8") == pages()[file], "run python -m adjust.record.format_pages docs"


def _validator(schema):
    jsonschema.Draft202012Validator.check_schema(schema)
    return jsonschema.Draft202012Validator(schema)


@pytest.mark.parametrize("folder", JOBS, ids=lambda p: p.name)
def test_demo_jobs_and_their_records_follow_the_schemas(folder):
    job = json.loads(json.dumps(tomllib.loads((folder / "job.toml").read_text("utf-8")), default=str))
    _validator(job_schema()).validate(job)
    record = build(adjust.assess(adjust.solve(adjust.read(folder))))
    _validator(record_schema()).validate(record)


@pytest.mark.parametrize("section", ["stations", "observations", "lines", "solution", ""])
def test_the_record_schema_refuses_a_missing_and_a_foreign_key(section):
    record = build(adjust.assess(adjust.solve(adjust.read(JOBS[0]))))
    validator = _validator(record_schema())
    place = record[section] if section else record
    place = place[0] if isinstance(place, list) and place else place
    first = next(iter(place))
    value = place.pop(first)
    assert not validator.is_valid(record)
    place[first] = value
    assert validator.is_valid(record)
    place["foreign"] = 1
    assert not validator.is_valid(record)


@pytest.mark.parametrize("change", [{"units": {"length": "m"}}, {"tests": {"outlier": 0}}, {"colour": "red"}])
def test_the_job_schema_refuses_what_the_reader_refuses(change):
    good = {"units": {"length": "m", "angle": "dms"}}
    validator = _validator(job_schema())
    assert validator.is_valid(good)
    assert not validator.is_valid(good | change)


def test_the_rule_of_ones_own_in_the_page_is_a_rule(tmp_path):
    page = (ROOT / "docs" / "rules.md").read_text("utf-8")
    (block,) = [b for b in blocks(page) if b.mark == "file our-office.toml"]
    (tmp_path / "our-office.toml").write_text(block.text + "\n", "utf-8")
    head = '[units]\nlength = "m"\nangle = "dms"\n[tolerance]\nrule = "our-office: site"\n'
    (tmp_path / "job.toml").write_text(head, "utf-8")
    (tmp_path / "levelled.csv").write_text("from,to,rise,sd\nA,B,1.0,0.001\n", "utf-8")
    limit = adjust.read(tmp_path).tolerance.limits["level loops"]
    assert limit.allowance.text == "10 mm*sqrt(km)"
    assert "Our office's rule for building sites" in limit.source
