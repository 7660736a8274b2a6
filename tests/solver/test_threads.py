"""The linear algebra runs on one thread while networks are solved, judged and recorded."""

from __future__ import annotations

from pathlib import Path

import pytest
from threadpoolctl import threadpool_info

import adjust
from adjust.network import Array
from adjust.record.build import build
from adjust.solver.engine import Factor
from adjust.solver.threads import one_thread

ROOT = Path(__file__).parents[2]


def threads() -> list[int]:
    return [library["num_threads"] for library in threadpool_info() if library["user_api"] == "blas"]


def test_one_thread_limits_every_library() -> None:
    with one_thread():
        assert threads()
        assert set(threads()) == {1}


def test_every_factor_is_solved_on_one_thread(monkeypatch: pytest.MonkeyPatch) -> None:
    """Solving, judging and recording all come through the factor; each time the limit must be in force."""
    seen: list[set[int]] = []
    solve = Factor.solve

    def watched(self: Factor, rhs: Array) -> Array:
        seen.append(set(threads()))
        return solve(self, rhs)

    monkeypatch.setattr(Factor, "solve", watched)
    build(adjust.assess(adjust.solve(adjust.read(ROOT / "networks" / "access-road"))))
    assert len(seen) > 3
    assert all(limits == {1} for limits in seen)
