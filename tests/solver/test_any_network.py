"""A hundred of the networks of the study (tests/solver/any_network.py) in the default tests."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.solver.any_network import SEED, outcome


@pytest.mark.parametrize("number", range(0, 1000, 10))
def test_any_network_is_solved_or_rightly_refused(number: int, tmp_path: Path) -> None:
    print("seed", SEED, number)
    what, found, text = outcome(number, tmp_path / "job")
    assert what in ("agrees", "refused rightly", "refused, two solutions"), f"{what}: {text} {found}"
