"""Networks of the study in space (tests/solver/any_space.py) in the default tests: each mixture with each control."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.solver.any_space import SEED, outcome
from tests.solver.space import CONTROL, MIXTURES


@pytest.mark.parametrize("number", range(len(MIXTURES) * len(CONTROL)))
def test_any_network_in_space_agrees_with_scipy(number: int, tmp_path: Path) -> None:
    print("seed", SEED, number)
    what, off, text = outcome(number, tmp_path / "job")
    assert what == "agrees", f"{what}: {text} {off}"


def test_newtons_steps_settle_where_a_gross_error_bends_the_figure(tmp_path: Path) -> None:
    """A free network and a direction 161 degrees off: the last steps shrink by a third, full ones not at all."""
    assert outcome(11, tmp_path / "job", blunder=True)[0] == "settled"


def test_a_station_pulled_under_another_is_refused_by_naming_the_reading(tmp_path: Path) -> None:
    """A ground length 5.5 km too long: v'Pv falls as long as a sighted station nears the plumb line of another."""
    what, _, text = outcome(17, tmp_path / "job", blunder=True)
    assert what == "refused, culprit named", text
