"""Variance components: published rounds and results, through the whole program."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.cases.worked import QUANTITIES, Case, Check, checks_of

PUBLISHED = (
    # Koch (1999), section 3.6.3, pp. 235-237; confidence: read
    "variance_components_two_groups",
    # Davies; results as in the documentation of general mixed-model software; confidence: read
    "variance_components_batches",
)


@pytest.mark.parametrize("check", checks_of(*PUBLISHED), ids=str)
def test_published_components_to_the_printed_digits(check: Check, tmp_path: Path) -> None:
    check.passes(QUANTITIES[check.what](Case(check.case).run(tmp_path), check.of))
